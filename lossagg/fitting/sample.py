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

_GROUPS, _ENDS = 8192, 256  # of a coarse sample


@dataclass(frozen=True, eq=False)
class Weighted:
    """Distinct points with how many losses share each."""

    points: FloatArray
    weights: FloatArray

    @classmethod
    def of(cls, values: FloatArray, weights: FloatArray | None = None) -> Weighted:
        """Count equal values once each, by their weights where they have some."""
        if weights is None:
            points, counts = np.unique(values, return_counts=True)
            return cls(points, counts.astype(np.float64))
        points, place = np.unique(values, return_inverse=True)
        return cls(points, np.asarray(np.bincount(place, weights, len(points)), dtype=np.float64))

    def coarse(self) -> Weighted:
        """Equal shares of the points replaced by their means, the smallest and largest points kept."""
        inner = len(self.points) - 2 * _ENDS
        if inner <= 2 * _GROUPS:
            return self
        steps = _ENDS + np.arange(_GROUPS) * inner // _GROUPS
        first = np.concatenate([np.arange(_ENDS), steps, len(self.points) - _ENDS + np.arange(_ENDS)])
        weights = np.add.reduceat(self.weights, first)
        return Weighted(np.add.reduceat(self.points * self.weights, first) / weights, weights)


@dataclass(frozen=True, eq=False)
class Sample:
    """Losses in units of `scale`, ready for a likelihood.

    Attributes:
        exact: uncensored losses, sorted.
        weights: how many losses each of them stands for; None where each stands for itself.
        stopped: censored amounts with their weights.
        thresholds: reporting thresholds above zero with their weights.
        scale: the unit, in money.
        observations: number of losses, censored ones included; the sum of the weights where they have some.
    """

    exact: FloatArray
    weights: FloatArray | None
    stopped: Weighted
    thresholds: Weighted
    scale: float
    observations: float

    @cached_property
    def count(self) -> float:
        """Number of uncensored losses."""
        return len(self.exact) if self.weights is None else whole(np.sum(self.weights))

    @property
    def censored(self) -> float:
        """Number of censored losses."""
        return whole(np.sum(self.stopped.weights))

    def total(self, values: FloatArray) -> float:
        """Sum over the uncensored losses of a value for each, shape (len(exact),), in their order."""
        return float(np.sum(values if self.weights is None else values * self.weights))

    @property
    def smallest(self) -> float:
        """Smallest loss, censored ones included."""
        return float(min([self.exact[0], *self.stopped.points[:1]]))

    @property
    def floor(self) -> float:
        """Smallest reporting threshold over all losses; 0 where one loss has none."""
        if self.untied:
            return 0.0
        return float(self.thresholds.points[0])

    @property
    def untied(self) -> float:
        """Losses without a reporting threshold."""
        rest = self.observations - float(np.sum(self.thresholds.weights))
        return rest if rest > 1e-9 * self.observations else 0

    def coarse(self) -> Sample:
        """A few thousand weighted points in place of many, near enough to start a climb from."""
        weights = np.ones(len(self.exact)) if self.weights is None else self.weights
        exact = Weighted(self.exact, weights).coarse()
        return Sample(
            exact=exact.points,
            weights=exact.weights,
            stopped=self.stopped.coarse(),
            thresholds=self.thresholds.coarse(),
            scale=self.scale,
            observations=self.observations,
        )

    @cached_property
    def logs(self) -> FloatArray:
        """Logarithms of the uncensored losses."""
        return np.log(self.exact)

    @cached_property
    def sum(self) -> float:
        """Sum of the uncensored losses."""
        return self.total(self.exact)

    @cached_property
    def inverse_sum(self) -> float:
        """Sum of 1 / loss over the uncensored losses."""
        return self.total(1.0 / self.exact)

    @cached_property
    def log_sum(self) -> float:
        """Sum of the logarithms of the uncensored losses."""
        return self.total(self.logs)

    @cached_property
    def log_squares(self) -> float:
        """Sum of squared deviations of the logarithms from their mean."""
        return self.total((self.logs - self.log_sum / self.count) ** 2)

    @cached_property
    def spread(self) -> float:
        """Standard deviation of the logarithms."""
        return float(np.sqrt(self.log_squares / self.count))

    @property
    def commonest(self) -> tuple[float, float]:
        """The uncensored amount shared by most losses, and by how many."""
        first = np.flatnonzero(np.diff(self.exact, prepend=-1.0))
        weights = np.ones(len(self.exact)) if self.weights is None else self.weights
        times = np.add.reduceat(weights, first)
        place = int(np.argmax(times))
        return float(self.exact[first[place]]), float(times[place])

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
    amounts: FloatArray,
    thresholds: FloatArray,
    censored: BoolArray,
    scale: float | None = None,
    weights: FloatArray | None = None,
) -> Sample:
    """Scale, sort and sum checked losses.

    Args:
        amounts, thresholds, censored: as `checked_losses` gives them.
        scale: the unit, in money; without it a power of two near the median.
        weights: as `checked_weights` gives them.

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
    tied = thresholds > 0
    exact, each = amounts[~censored] / scale, None
    if weights is None:
        exact.sort()
    else:
        order = np.argsort(exact, kind="stable")
        exact, each = exact[order], weights[~censored][order]

    def of(values: FloatArray, chosen: BoolArray) -> Weighted:
        return Weighted.of(values[chosen] / scale, None if weights is None else weights[chosen])

    return Sample(
        exact=exact,
        weights=each,
        stopped=of(amounts, censored),
        thresholds=of(thresholds, tied),
        scale=scale,
        observations=amounts.size if weights is None else whole(np.sum(weights)),
    )


def checked_weights(weights: Floats | None, count: int) -> FloatArray | None:
    """Check how many losses each amount stands for.

    Args:
        weights: None, or one number above 0 per loss.
        count: number of losses.

    Raises:
        InputError: a weight that is not above 0 and finite, or another number of them than losses.
    """
    if weights is None:
        return None
    values = np.atleast_1d(as_floats(weights, "weights"))
    if values.shape != (count,):
        raise InputError(
            "weights must be one number per loss",
            value=f"{values.size} weights for {count} losses",
            remedy="Give how many losses each amount stands for, in the order of the losses.",
        )
    _refuse(
        ~(values > 0) | np.isinf(values),
        values,
        "weights must be above 0 and finite",
        "A weight is a number of losses; leave out a loss that is not to count.",
    )
    return values


def whole(number: float) -> float:
    """The number, as an integer where it is one."""
    number = float(number)
    return int(number) if number.is_integer() else number


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
