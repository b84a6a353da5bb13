"""The losses a severity is fitted to: checked, scaled to order one, sorted, and summed once.

A loss with reporting threshold t contributes f(x) / S(t); one stopped at a policy limit contributes
S(x) / S(t) (Klugman, Panjer & Willmot, Loss Models, maximum likelihood with truncated and censored
data). The pairing of a loss with its threshold does not matter, so equal thresholds and equal
censoring points are counted once with a weight. Amounts are divided by a power of two near their
median: the fit sees numbers of order one in any currency, and the division is exact.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from lossagg.arrays import BoolArray, FloatArray, Floats, as_floats
from lossagg.errors import FitError, InputError


@dataclass(frozen=True, eq=False)
class Weighted:
    """Distinct points with how many losses share each."""

    points: FloatArray
    weights: FloatArray

    @classmethod
    def of(cls, values: FloatArray) -> Weighted:
        """Count equal values once each."""
        points, counts = np.unique(values, return_counts=True)
        return cls(points, counts.astype(np.float64))


@dataclass(frozen=True, eq=False)
class Sample:
    """Losses in units of `scale`, ready for a likelihood.

    Attributes:
        exact: uncensored losses, sorted.
        stopped: censored amounts with their weights.
        thresholds: reporting thresholds above zero with their weights.
        scale: the unit, in money.
        observations: number of losses, censored ones included.
    """

    exact: FloatArray
    stopped: Weighted
    thresholds: Weighted
    scale: float
    observations: int

    @property
    def count(self) -> int:
        """Number of uncensored losses."""
        return len(self.exact)

    @property
    def censored(self) -> int:
        """Number of censored losses."""
        return self.observations - self.count

    @property
    def smallest(self) -> float:
        """Smallest loss, censored ones included."""
        return float(min(self.exact[0], self.stopped.points[0] if self.censored else np.inf))

    @property
    def floor(self) -> float:
        """Smallest reporting threshold over all losses; 0 where one loss has none."""
        if self.untied:
            return 0.0
        return float(self.thresholds.points[0])

    @property
    def untied(self) -> int:
        """Losses without a reporting threshold."""
        return self.observations - int(self.thresholds.weights.sum())

    @cached_property
    def logs(self) -> FloatArray:
        """Logarithms of the uncensored losses."""
        return np.log(self.exact)

    @cached_property
    def sum(self) -> float:
        """Sum of the uncensored losses."""
        return float(np.sum(self.exact))

    @cached_property
    def inverse_sum(self) -> float:
        """Sum of 1 / loss over the uncensored losses."""
        return float(np.sum(1.0 / self.exact))

    @cached_property
    def log_sum(self) -> float:
        """Sum of the logarithms of the uncensored losses."""
        return float(np.sum(self.logs))

    @cached_property
    def log_squares(self) -> float:
        """Sum of squared deviations of the logarithms from their mean."""
        return float(np.sum((self.logs - self.log_sum / self.count) ** 2))

    @cached_property
    def spread(self) -> float:
        """Standard deviation of the logarithms."""
        return float(np.sqrt(self.log_squares / self.count))

    @property
    def exposure_above(self) -> float:
        """Sum of all losses less all thresholds: the total time at risk of survival analysis."""
        return self.sum + _dot(self.stopped) - _dot(self.thresholds)


def _dot(group: Weighted) -> float:
    return float(np.sum(group.points * group.weights))


def checked_losses(
    losses: Floats, truncation: Floats | None, censored: object
) -> tuple[FloatArray, FloatArray, BoolArray]:
    """Check losses, thresholds and censoring marks, and give each loss its own threshold and mark.

    Args:
        losses: amounts above 0, shape (n,); for a censored loss, the amount where it stopped.
        truncation: None, one reporting threshold, or one per loss; 0 means none. A loss equal to
            its threshold counts as reported.
        censored: None, or one boolean per loss.

    Raises:
        InputError: no losses, a non-positive, infinite or missing amount, a loss below its
            threshold, or lengths that differ.
    """
    amounts = np.atleast_1d(as_floats(losses, "losses"))
    if amounts.ndim != 1 or amounts.size == 0:
        raise InputError(
            "losses must be a non-empty list of amounts",
            value=f"shape {amounts.shape}",
            remedy="Without losses there is no severity to fit: give the law, or pool with similar lines.",
        )
    _refuse(
        (amounts <= 0) | np.isinf(amounts),
        amounts,
        "losses must be above 0 and finite",
        "Set nil and negative amounts aside first, and count nil claims separately.",
    )
    marks = _marks(censored, amounts.size)
    thresholds = _thresholds(truncation, amounts.size)
    below = amounts < thresholds
    if below.any():
        first = int(np.argmax(below))
        raise InputError(
            f"{int(below.sum())} of {amounts.size} losses lie below their reporting threshold",
            where=f"loss {first + 1}",
            value=f"{amounts[first]:g} below {thresholds[first]:g}",
            remedy="A loss below the threshold contradicts it: lower the threshold or remove the loss.",
        )
    return amounts, thresholds, marks


def sample_of(
    amounts: FloatArray, thresholds: FloatArray, censored: BoolArray, scale: float | None = None
) -> Sample:
    """Scale, sort and sum checked losses.

    Args:
        amounts, thresholds, censored: as `checked_losses` gives them.
        scale: the unit, in money; without it a power of two near the median.

    Raises:
        FitError: every loss is censored.
    """
    if censored.all():
        raise FitError(
            "every loss is censored",
            value=f"{amounts.size} censored losses",
            remedy="A size shows only below its policy limit: add uncensored losses, or give the law.",
        )
    scale = scale or float(2.0 ** np.round(np.log2(np.median(amounts))))
    above_zero = thresholds[thresholds > 0]
    return Sample(
        exact=np.sort(amounts[~censored] / scale),
        stopped=Weighted.of(amounts[censored] / scale),
        thresholds=Weighted.of(above_zero / scale),
        scale=scale,
        observations=amounts.size,
    )


def _refuse(bad: BoolArray, values: FloatArray, what: str, remedy: str) -> None:
    if bad.any():
        first = int(np.argmax(bad))
        raise InputError(what, where=f"loss {first + 1}", value=float(values[first]), remedy=remedy)


def _marks(censored: object, count: int) -> BoolArray:
    if censored is None:
        return np.zeros(count, dtype=np.bool_)
    marks = np.atleast_1d(np.asarray(censored))
    if marks.shape != (count,):
        raise InputError(
            "censored must have one mark per loss",
            value=f"{marks.size} marks for {count} losses",
            remedy="Give True for each loss that stopped at its policy limit, False for the others.",
        )
    if marks.dtype != np.bool_:
        raise InputError(
            "censored must be True or False for each loss",
            value=str(marks.dtype),
            remedy="Compare the amounts with their limits to get the marks.",
        )
    return marks


def _thresholds(truncation: Floats | None, count: int) -> FloatArray:
    values = as_floats(0.0 if truncation is None else truncation, "truncation")
    if values.ndim > 1 or (values.ndim == 1 and values.shape != (count,)):
        raise InputError(
            "truncation must be one threshold, or one per loss",
            value=f"{values.size} thresholds for {count} losses",
            remedy="Give a single number, or a list as long as the losses.",
        )
    _refuse(
        np.atleast_1d((values < 0) | np.isinf(values)),
        np.atleast_1d(values),
        "truncation must be 0 or above, and finite",
        "Give the amount from which losses were recorded; 0 where all were.",
    )
    return np.broadcast_to(values, (count,))
