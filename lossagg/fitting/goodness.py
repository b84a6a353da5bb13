"""Distance of losses from a fitted law: Kolmogorov-Smirnov and Anderson-Darling statistics.

Given its threshold t, a loss of the fitted law has F*(x) = 1 - S(x)/S(t) uniform between 0 and 1, whatever
the threshold: the statistics are those of F*(x) against the uniform law. They carry no p-value: the
published tables do not hold when the parameters were estimated from the same losses.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import special

from lossagg.arrays import FloatArray, Floats
from lossagg.errors import InputError
from lossagg.families.base import SizeLaw
from lossagg.fitting.sample import checked_losses


@dataclass(frozen=True)
class Goodness:
    """Distances of losses from a law; smaller is closer.

    Attributes:
        kolmogorov_smirnov: largest gap between empirical and fitted distribution function.
        anderson_darling: gap squared and integrated, weighted towards both ends, times losses.
        observations: losses that entered.
    """

    kolmogorov_smirnov: float
    anderson_darling: float
    observations: int


def goodness(
    losses: Floats, model: SizeLaw, truncation: Floats | None = None, censored: object = None
) -> Goodness:
    """Kolmogorov-Smirnov and Anderson-Darling statistics of losses against a law.

    Args:
        losses, truncation, censored: as for `fit_severity`.
        model: the law, such as `fit.model`.

    Raises:
        InputError: unusable data, a loss outside the support of the law, or censored losses that do not
            all stop at one point: the statistics are defined for one common limit only.

    Source: Klugman, Panjer & Willmot, Loss Models, chapter on model selection, formulas for data
    truncated at t and censored at u.
    """
    amounts, thresholds, marks = checked_losses(losses, truncation, censored)
    uniform = 1 - np.asarray(model.sf(amounts)) / np.asarray(model.sf(thresholds))
    if not np.isfinite(uniform).all():
        raise InputError(
            "the law gives no probability to losses above a threshold",
            value=float(amounts[~np.isfinite(uniform)][0]),
            remedy="Test a law whose support holds all the losses.",
        )
    end = 1.0
    if marks.any():
        ends = uniform[marks]
        end = float(ends.max())
        if end - ends.min() > 1e-9 or uniform[~marks].max(initial=0.0) > end + 1e-9:
            raise InputError(
                "goodness of fit needs all censored losses to stop at one limit, above the others",
                value=f"{int(marks.sum())} censored losses",
                remedy="Compare the fit with the product-limit curve of survival_points instead.",
            )
    exact = np.sort(uniform[~marks])
    return Goodness(
        _kolmogorov_smirnov(exact, end, amounts.size),
        _anderson_darling(exact, end, amounts.size),
        amounts.size,
    )


def _kolmogorov_smirnov(uniform: FloatArray, end: float, observations: int) -> float:
    steps = np.arange(len(uniform) + 1) / observations
    gaps = [np.abs(steps[:-1] - uniform).max(initial=0.0), np.abs(steps[1:] - uniform).max(initial=0.0)]
    if len(uniform) < observations:
        gaps.append(abs(steps[-1] - end))
    return float(max(gaps))


def _anderson_darling(uniform: FloatArray, end: float, observations: int) -> float:
    empirical = np.arange(len(uniform) + 1) / observations
    places = np.concatenate([[0.0], uniform, [end]])
    below = np.sum(special.xlog1py((1 - empirical) ** 2, -places[:-1]))
    below -= np.sum(special.xlog1py((1 - empirical) ** 2, -places[1:]))  # 0 log 0 = 0 past the last loss
    above = np.sum(empirical[1:] ** 2 * np.log(places[2:] / places[1:-1]))
    return float(observations * (below + above - end))
