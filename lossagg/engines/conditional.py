"""The annual loss by conditional Monte Carlo: estimates along one set of simulated years, with errors.

Every estimate is the mean over years of a function of what is left when one loss is taken out (see
`far_tail`), corrected by regression on the numbers of losses, whose means are known (control variates:
Asmussen and Glynn 2007, "Stochastic Simulation", section V.2). Its standard error is that of the
regression's residuals. It exists also where the variance of the loss does not: given the others, what a
largest loss adds beyond an amount has a finite spread as soon as it has a mean.

The trap: where sizes have a light tail, a huge year is one of many losses rather than of one large loss.
Few simulated years then carry the whole estimate, and a standard error from few years is an illusion. How
many years carry it is measured, (sum z)**2 / (sum z**2) (Kish 1965, "Survey Sampling", section 8.2), and
too few are refused: with 20 to 200 of them, errors over seeds exceeded the stated ones by 10 to 40 %.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import NamedTuple

import numpy as np
from scipy.optimize import brentq

from lossagg.arrays import FloatArray, Floats, elementwise, require_probability
from lossagg.cover import Schedule
from lossagg.engines.result import AnnualLoss, TransformedAnnualLoss, require_measure
from lossagg.errors import DoesNotExistError, EngineError
from lossagg.families.base import SizeLaw

NORMAL_975 = 1.959963984540054
LEAST_CARRYING = 200.0
_LARGEST = 1e300


class Estimate(NamedTuple):
    """A value and its standard error."""

    value: float
    standard_error: float


@dataclass(frozen=True, eq=False)
class LineOut:
    """What is left of each year when one loss of a line is taken out, shape (n,) each.

    Attributes:
        law: law of the loss taken out.
        counts: losses of the line in the year.
        mean_count: their expected number.
        rest: sum of all other losses of the year, of every line.
        largest: the largest of them.
        tied: how many of them are the largest.
    """

    law: SizeLaw
    counts: FloatArray
    mean_count: float
    rest: FloatArray
    largest: FloatArray
    tied: FloatArray

    @cached_property
    def at_largest(self) -> FloatArray:
        """Probability that the loss taken out is the largest: above the others, or its share of a tie."""
        beyond = np.asarray(self.law.sf(self.largest))
        if not self.law.atoms:
            return beyond
        amounts, chances = (np.array(part) for part in zip(*sorted(self.law.atoms), strict=True))
        place = np.minimum(np.searchsorted(amounts, self.largest), amounts.size - 1)
        equal = np.where(amounts[place] == self.largest, chances[place], 0.0)
        return beyond + equal / (self.tied + 1.0)

    def exceeds(self, x: float) -> FloatArray:
        """N P(the loss is the largest and the year exceeds x, given the others)."""
        needed = x - self.rest
        beyond = np.asarray(self.law.sf(np.maximum(self.largest, needed)))
        if self.law.atoms:
            beyond = np.where(needed < self.largest, self.at_largest, beyond)
        return np.asarray(self.counts * beyond)

    def layer(self, low: float, high: float, order: int) -> FloatArray:
        """N E[min((S - low)+, high - low)**order; the loss is the largest, given the others]; order 1 or 2.

        The integral over z from `low` to `high` of P(S > z), times 2 (z - low) for order 2: up to
        largest + rest the year exceeds z whenever the loss is the largest at all.
        """
        bottom = np.maximum(self.largest, low - self.rest)
        top = np.maximum(self.largest, high - self.rest)
        certain = np.clip(self.largest + self.rest - low, 0.0, high - low)
        value = self.at_largest * certain**order
        width = np.asarray(
            self.law.expected_excess(bottom) if high == np.inf else self.law.layer_mean(bottom, top)
        )
        if order == 1:
            return np.asarray(self.counts * (value + width))
        square = np.asarray(
            self.law.second_excess(bottom) if high == np.inf else self.law.layer_second_moment(bottom, top)
        )
        return np.asarray(self.counts * (value + square + 2.0 * (bottom + self.rest - low) * width))


@dataclass(frozen=True, eq=False, repr=False)
class ConditionalAnnualLoss(AnnualLoss):
    """An annual sum by conditional Monte Carlo.

    Args:
        lines: per line, what is left of every year when one of its losses is taken out.
    """

    lines: tuple[LineOut, ...]
    engine: str = "far-tail"

    def __repr__(self) -> str:
        return f"ConditionalAnnualLoss({self.samples:,} samples, mean {self.mean():.6g})"

    @property
    def samples(self) -> int:
        """Number of simulated years."""
        return int(self.lines[0].counts.size)

    def exceedance(self, x: float) -> Estimate:
        """P(S > x) with its standard error.

        Raises:
            EngineError: too few simulated years carry the estimate.
        """
        return Estimate(1.0, 0.0) if x < 0 else self._certified(self._exceeding(x), f"P(S > {x:.6g})")

    def excess(self, low: float, high: float = np.inf) -> Estimate:
        """E[min((S - low)+, high - low)] with its standard error; `inf` where it does not exist.

        Raises:
            EngineError: too few simulated years carry the estimate.
        """
        return self.pieces([(low, high, 1.0)])

    def pieces(self, pieces: Sequence[tuple[float, float, float]]) -> Estimate:
        """The sum of slope * E[min((S - low)+, high - low)] over (low, high, slope), as one estimate.

        Raises:
            EngineError: too few simulated years carry the estimate.
        """
        if any(high == np.inf for _, high, _ in pieces) and not self._has_moment(1):
            return Estimate(np.inf, np.inf)
        values = np.zeros(self.samples)
        for low, high, slope in pieces:
            for line in self.lines:
                values += slope * line.layer(low, high, 1)
        return self._certified(values, "a layer of the annual loss")

    def sf(self, x: Floats) -> FloatArray | float:
        """P(S > x)."""
        return elementwise(lambda v: np.array([self.exceedance(amount).value for amount in v]), x, "x")

    def value_at_risk(self, level: float) -> float:
        """The smallest x with estimated P(S <= x) >= level."""
        return self._quantile(level, 0.0)

    def layer_mean(self, low: float, high: float = np.inf) -> float:
        """E[min((S - low)+, high - low)]."""
        return self.excess(low, high).value

    def layer_second_moment(self, low: float, high: float = np.inf) -> float:
        """E[min((S - low)+, high - low)**2]."""
        if high == np.inf and not self._has_moment(2):
            return np.inf
        return self._certified(self._squares(low, high), "a second moment").value

    def mean(self) -> float:
        """The expected annual loss, from the laws; `inf` where it does not exist."""
        return sum(line.mean_count * line.law.mean() for line in self.lines if line.mean_count > 0)

    def accuracy(self, measure: str, level: float | None = None) -> tuple[float, float]:
        """The 95 % interval of a measure; the mean comes from the laws and is exact.

        Raises:
            InputError: an unknown measure, a missing level.
            DoesNotExistError: a standard deviation or tail value at risk that is infinite, or a standard
                deviation without fourth moments.
        """
        require_measure(measure, level)
        if measure == "mean":
            return self.mean(), self.mean()
        if measure == "value_at_risk" and level is not None:
            return self._quantile(level, -NORMAL_975), self._quantile(level, NORMAL_975)
        half = NORMAL_975 * self.standard_error(measure, level)
        centre = self.measure(measure, level)
        return centre - half, centre + half

    def standard_error(self, measure: str, level: float | None = None) -> float:
        """The standard error of a measure; of a value at risk, its interval's half width over 1.96.

        Raises:
            InputError: an unknown measure, a missing level.
            DoesNotExistError: as `accuracy`.
        """
        require_measure(measure, level)
        if measure == "mean":
            return 0.0
        if level is None:
            return self._sd_error()
        if measure == "value_at_risk":
            low, high = self.accuracy(measure, level)
            return (high - low) / (2.0 * NORMAL_975)
        # The derivative by the quantile is zero at the quantile, so its own error does not enter.
        error = self.excess(self.value_at_risk(level)).standard_error
        if error == np.inf:
            raise _no_error("the tail value at risk", 1)
        return error / (1.0 - level)

    def _sd_error(self) -> float:
        if not self._has_moment(4):
            raise _no_error("the standard deviation", 4)
        square = self._certified(self._squares(0.0, np.inf), "a second moment")
        return square.standard_error / (2.0 * self.sd()) if self.sd() > 0 else 0.0

    def _exceeding(self, x: float) -> FloatArray:
        return np.asarray(np.sum([line.exceeds(x) for line in self.lines], axis=0))

    def _squares(self, low: float, high: float) -> FloatArray:
        return np.asarray(np.sum([line.layer(low, high, 2) for line in self.lines], axis=0))

    def _certified(self, values: FloatArray, what: str) -> Estimate:
        """The estimate, if enough years carry it; values that underflow to zero everywhere are zero."""
        highest = float(np.max(values))
        if highest == 0.0 and any(out.law.support[1] == np.inf and out.counts.any() for out in self.lines):
            return Estimate(0.0, 0.0)
        scaled = values / highest if highest > 0.0 else values
        carrying = float(np.sum(scaled)) ** 2 / float(scaled @ scaled) if highest > 0.0 else 0.0
        if carrying < LEAST_CARRYING:
            raise EngineError(
                f"only {carrying:.0f} of {self.samples:,} simulated years carry the estimate of {what}, too "
                "few for its error to be known: years this bad come from many losses, not from one",
                remedy="Take more samples, or the Fourier engine, which needs no large losses.",
            )
        return self._estimate(values)

    def _estimate(self, values: FloatArray) -> Estimate:
        """The mean of a function of the years, corrected by the known means of the counts."""
        scale = float(np.max(values))
        if scale == 0.0:
            return Estimate(0.0, 0.0)
        scaled = values / scale
        mean = float(np.mean(scaled))
        deviations, inverse, off = self._controls
        covariance = deviations @ scaled / self.samples
        slopes = inverse @ covariance
        rest = float(np.mean((scaled - mean) ** 2)) - float(slopes @ covariance)
        freedom = self.samples - 1 - len(slopes)
        return Estimate(
            scale * (mean - float(slopes @ off)), scale * float(np.sqrt(max(rest, 0.0) / freedom))
        )

    @cached_property
    def _quantiles(self) -> dict[tuple[float, float], float]:
        """Roots found so far, by level and number of standard errors."""
        return {}

    @cached_property
    def _controls(self) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Deviations of the counts, shape (lines, n), the inverse of their covariance, how far off."""
        counts = np.array([line.counts for line in self.lines])
        means = counts.mean(axis=1)
        deviations = counts - means[:, None]
        off = means - np.array([line.mean_count for line in self.lines])
        inverse = np.linalg.pinv(deviations @ deviations.T / self.samples, hermitian=True)
        return deviations, inverse, off

    def _has_moment(self, order: float) -> bool:
        return all(line.law.tail_index > order for line in self.lines)

    def _quantile(self, level: float, errors: float) -> float:
        """The smallest x with P(S > x) at most 1 - level, the curve moved by some standard errors."""
        level = require_probability(level, "level", open_low=True, open_high=True)
        if (level, errors) in self._quantiles:
            return self._quantiles[level, errors]
        target = 1.0 - level

        def short(x: float) -> float:
            value, error = self._estimate(self._exceeding(x))
            return value + errors * error - target

        discrete = all(sum(p for _, p in line.law.atoms) > 1.0 - 1e-12 for line in self.lines)
        root = smallest_root(short, self._first_guess(target), exact=discrete)
        losses = sum(line.mean_count * float(line.law.sf(0.0)) for line in self.lines)
        if root > 0.0 or losses > target:
            # Just below, since beyond a jump of the curve nothing may be left.
            self._certified(self._exceeding(root * (1.0 - 1e-12)), f"P(S > {root:.6g})")
        return self._quantiles.setdefault((level, errors), root)

    def _first_guess(self, target: float) -> float:
        """The largest single loss at this probability (Boecker and Klueppelberg 2005)."""
        guesses = [
            float(line.law.isf(min(target / line.mean_count, 1.0)))
            for line in self.lines
            if line.mean_count > 0
        ]
        return min(max([1e-6, *guesses]), _LARGEST)


def smallest_root(short: Callable[[float], float], guess: float, *, exact: bool) -> float:
    """The smallest x >= 0 with short(x) <= 0, for a falling function.

    Args:
        short: the function.
        guess: an amount above 0 of the right size.
        exact: whether the function may jump, and the very amount is wanted.
    """
    if short(0.0) <= 0.0:
        return 0.0
    low, high = 0.0, guess
    while short(high) > 0.0:
        if high >= _LARGEST:
            return np.inf
        low, high = high, min(2.0 * high, _LARGEST)
    while low == 0.0:
        if short(high / 2.0) > 0.0:
            low = high / 2.0
        elif high < np.finfo(float).tiny:
            return high
        else:
            high /= 2.0
    if not exact:
        return float(brentq(short, low, high, xtol=1e-14 * high, rtol=1e-13))
    while True:
        middle = low + (high - low) / 2.0
        if not low < middle < high:
            return high
        low, high = (middle, high) if short(middle) > 0.0 else (low, middle)


def _no_error(measure: str, order: int) -> DoesNotExistError:
    return DoesNotExistError(
        f"no standard error of {measure}: moments of order {order} are infinite",
        remedy="Use the interval of a value at risk, or limit the loss by a cover.",
    )


@dataclass(frozen=True, eq=False, repr=False)
class TransformedConditional(AnnualLoss):
    """Annual terms applied to an annual sum by conditional Monte Carlo.

    Args:
        base: the annual sum.
        payment: what is paid for each annual sum, continuous and non-decreasing.
    """

    base: ConditionalAnnualLoss
    payment: Schedule
    engine: str = "far-tail"

    @cached_property
    def _values(self) -> TransformedAnnualLoss:
        return TransformedAnnualLoss(self.base, self.payment)

    def sf(self, x: Floats) -> FloatArray | float:
        """P(payment > x)."""
        return self._values.sf(x)

    def value_at_risk(self, level: float) -> float:
        """The payment at the quantile of the annual sum."""
        return self._values.value_at_risk(level)

    def layer_mean(self, low: float, high: float = np.inf) -> float:
        """E[min((payment - low)+, high - low)]."""
        return self._values.layer_mean(low, high)

    def layer_second_moment(self, low: float, high: float = np.inf) -> float:
        """E[min((payment - low)+, high - low)**2]."""
        return self._values.layer_second_moment(low, high)

    def accuracy(self, measure: str, level: float | None = None) -> tuple[float, float]:
        """The 95 % interval of a mean, value at risk or tail value at risk.

        Raises:
            InputError: an unknown measure, a missing level.
            DoesNotExistError: the standard deviation, whose error is not estimated here.
        """
        require_measure(measure, level)
        if measure == "value_at_risk" and level is not None:
            low, high = self.base.accuracy(measure, level)
            paid = self.payment(np.array([low, high]))
            return float(paid[0]), float(paid[1])
        half = NORMAL_975 * self.standard_error(measure, level)
        centre = self.measure(measure, level)
        return centre - half, centre + half

    def standard_error(self, measure: str, level: float | None = None) -> float:
        """The standard error of a measure.

        Raises:
            InputError: an unknown measure, a missing level.
            DoesNotExistError: as `accuracy`.
        """
        require_measure(measure, level)
        if measure == "sd":
            raise DoesNotExistError(
                "no standard error of the standard deviation under annual terms by the far-tail engine",
                remedy="The Fourier engine gives its bracket.",
            )
        if measure == "value_at_risk":
            low, high = self.accuracy(measure, level)
            return (high - low) / (2.0 * NORMAL_975)
        from_amount = 0.0 if level is None else self.value_at_risk(level)
        error = self.base.pieces(self._rising(from_amount)).standard_error
        if error == np.inf:
            raise _no_error(measure.replace("_", " "), 1)
        return error if level is None else error / (1.0 - level)

    def _rising(self, low: float) -> list[tuple[float, float, float]]:
        """(start, end, slope) of the annual sums in which the payment rises above `low`."""
        payment, found = self.payment, []
        ends = (*payment.starts[1:], np.inf)
        for start, end, value, slope in zip(
            payment.starts, ends, payment.values, payment.slopes, strict=True
        ):
            first = start + max(low - value, 0.0) / slope if slope > 0 else end
            if first < end:
                found.append((first, end, slope))
        return found
