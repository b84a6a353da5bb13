"""How an annual loss goes on beyond the last point of its lattice.

An estimate, with the exact mean beyond the point kept. Where single payments can exceed the point, a sum
beyond it is nearly always one large payment and what the others add to it: the survival function is the
expected number of payments above an amount less theirs, chosen so that it starts as it should. Where
payments are capped below it, the survival function falls exponentially.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from lossagg.engines.compound import CompoundSum


@dataclass(frozen=True, eq=False)
class Tail:
    """The part of an annual loss beyond a point.

    Args:
        compound: the model.
        start: the point.
        survival: P(S > start); 0 where it is below the round-off.
        rest: E[(S - start)+], possibly `inf`.
    """

    compound: CompoundSum
    start: float
    survival: float
    rest: float

    def sf(self, x: float) -> float:
        """P(S > x) for x >= start."""
        if self.survival == 0:
            return 0.0
        if self._follows_payments:
            return min(self._factor * self._expected(x - self._others), self.survival)
        return self.survival * float(np.exp(-self._rate * (x - self.start)))

    def quantile(self, tail: float) -> float:
        """The amount exceeded with probability `tail` <= survival."""
        if self.survival <= tail or self.survival == 0:
            return self.start
        if not self._follows_payments:
            return self.start + float(np.log(self.survival / tail)) / self._rate
        low, high = self.start, 2.0 * self.start
        while self.sf(high) > tail and high < 1e300:
            low, high = high, 2.0 * high
        for _ in range(80):
            middle = float(np.sqrt(low) * np.sqrt(high))
            if not low < middle < high:
                break
            low, high = (middle, high) if self.sf(middle) > tail else (low, middle)
        return high

    def layer_mean(self, low: float, high: float) -> float:
        """The integral of `sf` over (low, high), start <= low; for an infinite `high` a share of `rest`."""
        if self.survival == 0 or low >= high:
            return 0.0
        if not self._follows_payments:
            decay = np.exp(-self._rate * np.array([low - self.start, high - self.start]))
            return self.rest * float(decay[0] - decay[1])
        low, high = low - self._others, high - self._others
        if high < np.inf:
            return self._factor * self.compound.layer_cost(low, high)
        whole = self.compound.layer_cost(self.start - self._others, np.inf)
        return self.rest * self.compound.layer_cost(low, np.inf) / whole if whole < np.inf else np.inf

    def layer_second_moment(self, low: float, high: float) -> float:
        """The integral of 2 (z - low) `sf`(z) over (low, high), start <= low."""
        if self.survival == 0 or low >= high:
            return 0.0
        if self._follows_payments:
            return self._factor * self.compound.layer_square(low - self._others, high - self._others)
        width = self._rate * (high - low)
        part = 1.0 if width == np.inf else 1.0 - (1.0 + width) * float(np.exp(-width))
        return 2.0 * self.sf(low) / self._rate**2 * part

    def _expected(self, x: float) -> float:
        return float(self.compound.exceedances(np.array([x]))[0])

    @cached_property
    def _follows_payments(self) -> bool:
        return self._expected(self.start) > 1e-3 * self.survival or self.rest <= 0

    @cached_property
    def _others(self) -> float:
        """What the other payments of such a year add, at least nothing: by bisection."""
        low, high = 0.0, self.start
        if self._expected(self.start) >= self.survival:
            return 0.0
        for _ in range(60):
            middle = (low + high) / 2
            low, high = (
                (low, middle) if self._expected(self.start - middle) > self.survival else (middle, high)
            )
        return low

    @cached_property
    def _factor(self) -> float:
        expected = self._expected(self.start - self._others)
        return self.survival / expected if expected > 0 else 0.0

    @property
    def _rate(self) -> float:
        return self.survival / self.rest
