"""What the large losses say about the tail, threshold by threshold.

Only amounts from which on every loss was recorded can be thresholds. At each the generalized Pareto law is
fitted to the excesses (McNeil 1997, ASTIN Bulletin 27); beside it stand the mean excess, whose slope
rises with the shape, and Hill's estimate (1975, Ann. Statist. 3) of 1 / tail index, with losses stopped at
a policy limit taken as what they are (Beirlant, Guillou, Dierckx & Fils-Villetard 2007, Extremes 10).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from lossagg.arrays import BoolArray, FloatArray, Floats, require_probability
from lossagg.errors import FitError, InputError
from lossagg.fitting.goodness import distances
from lossagg.fitting.goodness_test import goodness_test
from lossagg.fitting.quadratic_form import darling_p_value
from lossagg.fitting.results import SeverityFit
from lossagg.fitting.sample import checked_losses
from lossagg.fitting.severity import fit_severity

FEWEST = 15  # uncensored excesses below which no shape is estimated (our choice, no source)
MOST_THRESHOLDS = 20


@dataclass(frozen=True)
class TailPoint:
    """The tail above one threshold.

    Attributes:
        threshold: in money.
        excesses: losses above it, censored ones included.
        shape, low, high: generalized Pareto shape with its 95 % profile-likelihood interval.
        scale: its scale.
        mean_excess: mean of loss less threshold, up to the largest loss where some are censored.
        hill: Hill's estimate of 1 / tail index.
        anderson_darling: distance of the excesses from the fitted law.
        p_value: of that distance; by a bootstrap that refits where losses above are censored, for which
            the law of the distance is not known, and None where none was asked for.
    """

    threshold: float
    excesses: int
    shape: float
    low: float
    high: float
    scale: float
    mean_excess: float
    hill: float
    anderson_darling: float
    p_value: float | None


@dataclass(frozen=True, eq=False)
class Large:
    """The losses that can be used for the tail, ascending.

    Attributes:
        amounts: all losses at or above the largest reporting threshold of any of them.
        censored: which stopped at a policy limit.
        floor: that largest threshold.
    """

    amounts: FloatArray
    censored: BoolArray
    floor: float

    @classmethod
    def of(cls, losses: Floats, truncation: Floats | None, censored: object) -> Large:
        """From losses, thresholds and marks as given to a fit."""
        amounts, thresholds, marks = checked_losses(losses, truncation, censored)
        floor = float(thresholds.max())
        kept = amounts >= floor
        order = np.argsort(amounts[kept], kind="stable")
        return cls(amounts[kept][order], marks[kept][order], floor)

    def above(self, threshold: float) -> tuple[FloatArray, BoolArray]:
        """Losses above a threshold and their marks."""
        start = int(np.searchsorted(self.amounts, threshold, side="right"))
        return self.amounts[start:], self.censored[start:]


def candidate_thresholds(large: Large, most: int = MOST_THRESHOLDS) -> FloatArray:
    """Thresholds to try, ascending: observed losses, evenly spaced in the logarithm of how many exceed.

    Raises:
        FitError: too few losses for two of them.
    """
    exact = int((~large.censored).sum())
    if exact < 2 * FEWEST:
        raise FitError(
            "too few losses to look for a threshold",
            value=f"{exact} uncensored losses recorded above {large.floor:g}",
            remedy=f"{2 * FEWEST} are needed; state a tail from wider evidence.",
        )
    count = len(large.amounts)
    ranks = np.unique(np.round(np.geomspace(FEWEST, count - 1, most)).astype(np.int64))[::-1]
    points = np.unique(large.amounts[count - 1 - ranks])
    found = np.append(large.floor, points[1:]) if large.floor > 0 else points
    enough = [int((~large.above(point)[1]).sum()) >= FEWEST for point in found]
    return found[enough]


def tail_points(
    losses: Floats,
    truncation: Floats | None = None,
    censored: object = None,
    *,
    thresholds: Floats | None = None,
    most: int = MOST_THRESHOLDS,
    draws: int = 0,
) -> list[TailPoint]:
    """The tail above each of several thresholds: shape with interval, mean excess, Hill, distance.

    Args:
        losses, truncation, censored: as for `fit_severity`.
        thresholds: amounts, ascending; by default observed ones that leave 15 losses or more.
        most: how many of them by default.
        draws: bootstrap draws for the p-value where losses above a threshold are censored.

    Raises:
        InputError: losses that cannot be used, or a threshold below the largest reporting threshold.
        FitError: fewer than 30 losses from which to choose thresholds.
    """
    large = Large.of(losses, truncation, censored)
    if thresholds is None:
        wanted = candidate_thresholds(large, most)
    else:
        wanted = np.atleast_1d(np.asarray(thresholds, dtype=np.float64))
        if (wanted < large.floor).any():
            raise InputError(
                "a tail threshold lies below the largest reporting threshold",
                value=float(wanted.min()),
                remedy=f"Below {large.floor:g} the losses are not complete.",
            )
    points = (tail_point(large, float(threshold), draws) for threshold in wanted)
    return [point for point in points if point is not None]


def tail_point(large: Large, threshold: float, draws: int = 0) -> TailPoint | None:
    """The tail above one threshold; None where the excesses support no generalized Pareto law."""
    amounts, marks = large.above(threshold)
    try:
        fit = tail_fit(amounts, marks, threshold)
    except FitError:
        return None
    shape, low, high = _shape(fit)
    distance = distances(amounts, np.full(amounts.shape, threshold), marks, fit.model).anderson_darling
    p_value = None
    if not marks.any():
        p_value = darling_p_value(distance, shape)
    elif draws:
        p_value = goodness_test(amounts, fit, threshold, marks, draws=draws).anderson_darling
    return TailPoint(
        threshold=threshold,
        excesses=len(amounts),
        shape=shape,
        low=low,
        high=high,
        scale=fit.parameters["scale"],
        mean_excess=mean_excess(amounts, marks, threshold),
        hill=hill(amounts, marks, threshold),
        anderson_darling=distance,
        p_value=p_value,
    )


def tail_fit(amounts: FloatArray, censored: BoolArray, threshold: float) -> SeverityFit:
    """The generalized Pareto law of losses above a threshold.

    Raises:
        FitError: fewer than five uncensored losses, or no maximum.
    """
    if int((~censored).sum()) < 5:
        raise FitError(
            "too few uncensored losses above the threshold", value=threshold, remedy="Lower the threshold."
        )
    return fit_severity(amounts, "generalized-pareto", threshold, censored, fixed={"threshold": threshold})


def _shape(fit: SeverityFit) -> tuple[float, float, float]:
    found = fit.tail_shape()
    assert found is not None  # the generalized Pareto law always has one
    return found


def mean_excess(amounts: FloatArray, censored: BoolArray, threshold: float) -> float:
    """Mean of loss less threshold; under censoring the area beneath the product-limit curve up to the
    largest loss, which is less than the whole mean."""
    if not censored.any():
        return float(np.mean(amounts - threshold))
    order = np.lexsort((censored, amounts))
    points, stopped = amounts[order], censored[order]
    at_risk = np.arange(len(points), 0, -1, dtype=np.float64)
    survival = np.cumprod(np.where(stopped, 1.0, 1 - 1 / at_risk))
    return float(np.sum(np.diff(points, prepend=threshold) * np.concatenate([[1.0], survival[:-1]])))


def hill(amounts: FloatArray, censored: BoolArray, threshold: float) -> float:
    """Sum of log(loss / threshold) over the number of uncensored losses: 1 / tail index of a power law."""
    return float(np.sum(np.log(amounts / threshold)) / np.sum(~censored))


@dataclass(frozen=True)
class TailQuantile:
    """Value at risk and expected shortfall of one loss, from a tail above a threshold.

    Attributes:
        value_at_risk: amount that a loss exceeds with probability 1 - level.
        expected_shortfall: mean of the losses beyond it; `inf` for a shape of 1 or more.
    """

    value_at_risk: float
    expected_shortfall: float


def tail_quantile(
    level: float, *, threshold: float, shape: float, scale: float, exceeding: float
) -> TailQuantile:
    """Value at risk and expected shortfall of one loss by the peaks-over-threshold formulas.

    Args:
        level: probability, above 1 - exceeding: the threshold itself is the smallest quantile it has.
        threshold, shape, scale: of the generalized Pareto law of the excesses.
        exceeding: share of losses above the threshold, N_u / n.

    Raises:
        InputError: a level that lies below the threshold: there the losses themselves must be counted.

    Source: McNeil, Frey & Embrechts, Quantitative Risk Management, section on the tail of the excess
    distribution: VaR = u + (scale / shape) (((1 - level) / exceeding)**-shape - 1), ES = VaR / (1 - shape)
    + (scale - shape u) / (1 - shape).
    """
    require_probability(level, "level", open_low=True, open_high=True)
    require_probability(exceeding, "exceeding", open_low=True)
    ratio = (1.0 - level) / exceeding
    if ratio > 1.0:
        raise InputError(
            "the level lies below the tail's threshold",
            value=level,
            remedy=f"Ask for a level of {1 - exceeding:g} or more, or lower the threshold.",
        )
    depth = -float(np.log(ratio))
    growth = depth if shape == 0 else float(np.expm1(shape * depth)) / shape
    var = threshold + scale * growth
    beyond = np.inf if shape >= 1 else (var + scale - shape * threshold) / (1 - shape)
    return TailQuantile(var, float(beyond))
