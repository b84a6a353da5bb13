"""Distance of losses from a fitted law: Kolmogorov-Smirnov, Anderson-Darling, and Anderson-Darling for the
upper tail.

Given its threshold t, a loss of the fitted law has u = 1 - S(x) / S(t) uniform between 0 and 1, whatever
the threshold. Losses stopped at a policy limit are censored values of u, so the empirical side is the
product-limit estimate of Kaplan & Meier (1958), up to the largest u seen; without censoring it is the
empirical distribution function. Between two losses it is constant, which makes every integral closed. The
complements r = S(x) / S(t) are carried, not u: the upper tail divides by r squared.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import special

from lossagg.arrays import BoolArray, FloatArray, Floats
from lossagg.errors import InputError
from lossagg.families.base import SizeLaw
from lossagg.fitting.sample import checked_losses

# A loss equal to its threshold, or beyond what the law lets happen in double precision, would make the
# integrals infinite; it is moved by less than an amount is rounded.
_REACH = (1e-150, 1.0 - 1e-15)


@dataclass(frozen=True)
class Goodness:
    """Distances of losses from a law; smaller is closer.

    Attributes:
        kolmogorov_smirnov: largest gap between empirical and fitted distribution function.
        anderson_darling: gap squared over u (1 - u), integrated over u, times losses.
        upper_tail: gap squared over (1 - u)**2, integrated over u, times losses: the upper tail decides it.
        observations: losses that entered.
    """

    kolmogorov_smirnov: float
    anderson_darling: float
    upper_tail: float
    observations: int


def goodness(
    losses: Floats, model: SizeLaw, truncation: Floats | None = None, censored: object = None
) -> Goodness:
    """Three distances of losses from a law. For p-values see `goodness_test`.

    Args:
        losses, truncation, censored: as for `fit_severity`.
        model: the law, such as `fit.model`.

    Raises:
        InputError: unusable data, or a loss outside the support of the law.

    Source: Klugman, Panjer & Willmot, Loss Models, chapter on model selection, formulas for data
    truncated at t and censored at u; upper tail: Chernobai, Rachev & Fabozzi 2005, Composite goodness-of-fit
    tests for left-truncated loss samples, quadratic class.
    """
    return distances(*checked_losses(losses, truncation, censored), model)


def distances(amounts: FloatArray, thresholds: FloatArray, censored: BoolArray, model: SizeLaw) -> Goodness:
    """The distances of checked losses from a law; see `goodness`."""
    above = np.asarray(model.sf(amounts))
    if thresholds.any():
        with np.errstate(divide="ignore", invalid="ignore"):
            above = above / np.asarray(model.sf(thresholds))
    if not np.isfinite(above).all():
        raise InputError(
            "the law gives no probability to losses above a threshold",
            value=float(amounts[~np.isfinite(above)][0]),
            remedy="Test a law whose support holds all the losses.",
        )
    rest, level = _steps(np.clip(above, *_REACH), censored)
    count = len(amounts)
    return Goodness(
        _kolmogorov_smirnov(rest, level),
        count * _anderson_darling(rest, level),
        count * _upper_tail(rest, level),
        count,
    )


def _steps(above: FloatArray, censored: BoolArray) -> tuple[FloatArray, FloatArray]:
    """Fitted survival at 0, at each uncensored loss and at the end, falling; product-limit distribution
    function between each two of them."""
    order = np.lexsort((censored, -above))  # among equals the uncensored first: they were at risk together
    above, censored = above[order], censored[order]
    at_risk = np.arange(len(above), 0, -1, dtype=np.float64)
    survival = np.cumprod(np.where(censored, 1.0, 1 - 1 / at_risk))
    exact = above[~censored]
    end = float(above[-1]) if censored[-1] else 0.0
    return np.concatenate([[1.0], exact, [end]]), np.concatenate([[0.0], 1 - survival[~censored]])


def _kolmogorov_smirnov(rest: FloatArray, level: FloatArray) -> float:
    places = 1 - rest
    gaps = np.maximum(np.abs(level - places[:-1]), np.abs(level - places[1:]))
    return float(gaps.max())


def _anderson_darling(rest: FloatArray, level: FloatArray) -> float:
    """Sum over the steps of [k**2 log u - (1 - k)**2 log(1 - u) - u]; 0 log 0 is 0 at both ends.

    A loss recorded exactly at its threshold, where the fit has no mass below it, was rounded: it is placed
    half way to the next one. At the threshold itself the statistic would be infinite.
    """
    rounded = np.flatnonzero(rest[1:] == 1.0) + 1
    if rounded.size and (rest < 1.0).any():
        rest = rest.copy()
        rest[rounded] = (1.0 + rest[rest < 1.0].max()) / 2
    places, missing = 1 - rest, (1 - level) ** 2
    upper = special.xlogy(missing, rest[:-1]) - special.xlogy(missing, rest[1:])
    lower = special.xlogy(level**2, places[1:]) - special.xlogy(level**2, places[:-1])
    return float(np.sum(upper) + np.sum(lower) - places[-1])


def _upper_tail(rest: FloatArray, level: FloatArray) -> float:
    """Sum over the steps of (r - (1 - k))**2 / r**2, integrated in closed form over r."""
    start, stop, missing = rest[:-1], rest[1:], 1 - level
    full = missing > 0  # past the last loss the gap is r itself and the integrand is 1
    start, stop, missing = start[full], stop[full], missing[full]
    inside = (start - stop) - 2 * missing * np.log(start / stop) + missing**2 * (1 / stop - 1 / start)
    return float(np.sum(inside) + (0.0 if full.all() else rest[-2] - rest[-1]))
