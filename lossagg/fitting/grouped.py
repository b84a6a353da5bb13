"""Fit sizes known only by the interval they fell into.

A loss in (a, b] contributes log(S(a) - S(b)) and one beyond the last edge log S(a); where the first edge is
above zero the losses below it were not recorded, and each term is divided by S at that edge (Klugman, Panjer
& Willmot, Loss Models, chapter on maximum likelihood, grouped data). Differences are formed from logarithms
of survival, so an interval far in the tail keeps its digits.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from lossagg.arrays import FloatArray, Floats, as_floats
from lossagg.errors import FitError, InputError
from lossagg.families.base import SizeLaw
from lossagg.fitting.jet_functions import log_one_minus_exp
from lossagg.fitting.jets import Jet, variables
from lossagg.fitting.likelihood import SizeLikelihood
from lossagg.fitting.mixtures import MIXTURES
from lossagg.fitting.refit import law_at
from lossagg.fitting.sample import sample_of
from lossagg.fitting.severity import climb, likelihood_of, natural_parameters

FAMILIES = (
    "exponential",
    "lognormal",
    "lomax",
    "gamma",
    "weibull",
    "inverse-gaussian",
    "burr",
    "log-logistic",
    "log-gamma",
    *MIXTURES,
)


@dataclass(frozen=True, eq=False)
class GroupedFit:
    """A size law fitted to counts by interval.

    Attributes:
        family: its name.
        model: the fitted law, ground-up.
        parameters: estimates by name, those held fixed last.
        covariance: inverse of the observed information, shape (k, k), of the k estimates in their order.
        log_likelihood: at the estimates, of the intervals.
        expected: expected number of losses in each interval, shape (m,).
        chi_square: sum of (count - expected)**2 / expected over the intervals.
        observations: losses that entered.
    """

    family: str
    model: SizeLaw
    parameters: dict[str, float]
    covariance: FloatArray
    log_likelihood: float
    expected: FloatArray
    chi_square: float
    observations: float


def fit_grouped(
    edges: Floats, counts: Floats, family: str, *, fixed: Mapping[str, float] | None = None
) -> GroupedFit:
    """Fit a size law to the number of losses in each interval.

    Args:
        edges: ends of the intervals, ascending, shape (m + 1,); the first may be 0, or a reporting threshold;
            the last may be `inf`.
        counts: losses in each interval, at or above 0, shape (m,). Weights need not be whole.
        family: "exponential", "lognormal", "lomax", "gamma", "weibull", "inverse-gaussian",
            "burr", "log-logistic" or "log-gamma"; or a mixture, see `fit_severity`.
        fixed: {"minimum": m} for "log-gamma", below the end of the first interval with losses; without it the
            first edge, where that is above 0.

    Raises:
        InputError: edges that do not ascend, counts that do not match them, an unknown family, a minimum
            above losses.
        FitError: fewer intervals with losses than parameters and one, or no maximum.
    """
    ends, weights = _checked(edges, counts)
    if family not in FAMILIES:
        raise InputError(
            "unknown family for grouped losses", value=family, remedy=f"Choose one of {', '.join(FAMILIES)}."
        )
    held = _held(ends, weights, family, fixed or {})
    stand_in = _stand_in(np.maximum(ends, held.get("minimum", 0.0)), weights)
    sample = sample_of(stand_in, np.zeros(stand_in.shape), np.zeros(stand_in.shape, dtype=np.bool_))
    likelihood, _ = likelihood_of(family, sample, held)
    filled = int((weights > 0).sum())
    if filled <= len(likelihood.ranges):
        raise FitError(
            f"{filled} intervals with losses cannot determine the {len(likelihood.ranges)} parameters of the "
            f"{family} law",
            value=filled,
            remedy="Use a law with fewer parameters, or finer intervals.",
        )
    total = float(weights.sum())
    scaled = ends / sample.scale

    def objective(point: tuple[Jet, ...]) -> Jet:
        return _log_likelihood(likelihood, point, scaled, weights)

    maximum = climb(objective, likelihood.starts(sample), int(total), family, likelihood)
    model = law_at(likelihood, maximum.point, sample.scale)
    inner = likelihood.inner(variables(maximum.point))
    values, covariance = natural_parameters(likelihood.natural(inner, sample.scale), maximum)
    survival = np.asarray(model.sf(ends))
    expected = total * -np.diff(survival) / survival[0]
    return GroupedFit(
        family=family,
        model=model,
        parameters={**dict(zip(likelihood.ranges, values, strict=True)), **likelihood.fixed(sample.scale)},
        covariance=covariance,
        log_likelihood=maximum.value,
        expected=expected,
        chi_square=float(np.sum((weights - expected) ** 2 / expected)),
        observations=total,
    )


def _checked(edges: Floats, counts: Floats) -> tuple[FloatArray, FloatArray]:
    ends, weights = as_floats(edges, "edges"), as_floats(counts, "counts")
    if ends.ndim != 1 or len(ends) < 3 or not (np.diff(ends) > 0).all() or ends[0] < 0:
        raise InputError(
            "edges must ascend from 0 or above and enclose two intervals",
            value=ends.tolist()[:6],
            remedy="Give the ends of the intervals, the last one inf where it is open.",
        )
    if weights.shape != (len(ends) - 1,) or not (weights >= 0).all() or not weights.sum() > 0:
        raise InputError(
            "counts must be at or above 0, one per interval, not all 0",
            value=weights.tolist()[:6],
            remedy=f"Give {len(ends) - 1} counts.",
        )
    return ends, weights


def _held(ends: FloatArray, weights: FloatArray, family: str, fixed: Mapping[str, float]) -> dict[str, float]:
    """The parameters held fixed: the minimum of the log-gamma law."""
    if family != "log-gamma":
        return dict(fixed)
    minimum = float(fixed.get("minimum", ends[0]))
    lowest = float(ends[1:][weights > 0][0])
    if not 0 < minimum < lowest:
        raise InputError(
            "the log-gamma law needs a minimum above 0 and below the end of the first interval with losses",
            value=minimum,
            remedy=f'Give fixed={{"minimum": m}} with m below {lowest:g}.',
        )
    return {**fixed, "minimum": minimum}


def _stand_in(ends: FloatArray, weights: FloatArray) -> FloatArray:
    """Losses inside the intervals, a few for each in proportion, from which to guess where to start."""
    low, high = ends[:-1], np.where(np.isfinite(ends[1:]), ends[1:], 2.5 * ends[:-1])
    share = np.maximum(np.round(200 * weights / weights.sum()), weights > 0).astype(np.int64)
    parts = [
        a + (b - a) * (np.arange(count) + 0.5) / count for a, b, count in zip(low, high, share, strict=True)
    ]
    return np.concatenate(parts)


def _log_likelihood(
    likelihood: SizeLikelihood, point: tuple[Jet, ...], ends: FloatArray, weights: FloatArray
) -> Jet:
    inner = likelihood.inner(point)
    if not likelihood.admissible(inner):
        return point[0] * np.nan
    used = weights > 0
    low, high, count = ends[:-1][used], ends[1:][used], weights[used]
    total = point[0] * 0.0
    begun = low > 0
    if begun.any():  # log S(low) of every interval that does not start at 0
        total = total + likelihood.log_survival(inner, low[begun]).total(count[begun])
    for place in np.flatnonzero(np.isfinite(high)):
        gap = likelihood.log_survival(inner, high[place : place + 1])
        if low[place] > 0:
            gap = gap - likelihood.log_survival(inner, low[place : place + 1])
        total = total + log_one_minus_exp(gap) * float(count[place])
    if ends[0] > 0:
        total = total - likelihood.log_survival(inner, ends[:1]) * float(weights.sum())
    return total
