"""A guaranteed bound of an annual loss: a step function on the lattice, and what is known beyond it.

Nothing here is an estimate. A lower bound of P(S > x) beyond the lattice is the probability that one
payment alone exceeds x; an upper bound follows from the expected excess over the last point by Markov's
inequality. Where the mean is infinite the upper bound of a quantile beyond the lattice is infinite.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from lossagg.arrays import FloatArray, Floats, elementwise, require_probability
from lossagg.engines.compound import CompoundSum
from lossagg.engines.result import AnnualLoss
from lossagg.engines.running import running_sums
from lossagg.engines.span import places

# The moments of the model are exact up to the round-off of the laws themselves.
MOMENTS = 1e-12
_PANELS = 256


@dataclass(frozen=True, repr=False, eq=False)
class LatticeBound(AnnualLoss):
    """One side of a bracket.

    Args:
        engine: name of the engine.
        compound: the model.
        upper: whether this is the upper bound.
        step: distance of the lattice points.
        survival: bound of P(S > x) for x in [kh, (k + 1)h), non-increasing, shape (n,).
        tail_mean: bound of E[(S - nh)+].
        tail_square: bound of E[(S - nh)+**2].
    """

    engine: str
    compound: CompoundSum
    upper: bool
    step: float
    survival: FloatArray
    tail_mean: float
    tail_square: float

    @property
    def top(self) -> float:
        """Where the step function ends."""
        return self.step * len(self.survival)

    def sf(self, x: Floats) -> FloatArray | float:
        """The bound of P(S > x)."""
        return elementwise(self._sf, x, "x")

    def value_at_risk(self, level: float) -> float:
        """The bound of the quantile; `inf` where nothing bounds it from above."""
        tail = 1.0 - require_probability(level, "level", open_low=True, open_high=True)
        if self.survival[-1] <= tail:
            first = len(self.survival) - int(np.searchsorted(self.survival[::-1], tail, side="right"))
            return first * self.step
        if self.upper:
            return self.top + self.tail_mean / tail
        low, high = self.top, 2.0 * self.top
        if self._largest(low) <= tail:
            return self.top
        while self._largest(high) > tail and high < 1e300:
            low, high = high, 2.0 * high
        for _ in range(60):
            middle = float(np.sqrt(low * high))
            low, high = (middle, high) if self._largest(middle) > tail else (low, middle)
        return low

    def mean(self) -> float:
        """The exact mean of the model, which needs no lattice, to the round-off of the laws."""
        return self.compound.mean * self._exact

    def layer_mean(self, low: float, high: float = np.inf) -> float:
        """The bound of E[min((S - low)+, high - low)].

        Always that of the step function, never the exact mean: the TVaR of the lower bound is the least
        over all amounts v of v + E[(S - v)+] / (1 - level), which holds within one distribution only.
        """
        inside = self._area(min(high, self.top)) - self._area(min(low, self.top))
        return inside + self._beyond(max(low, self.top), high)

    def layer_second_moment(self, low: float, high: float = np.inf) -> float:
        """The bound of E[min((S - low)+, high - low)**2]; of E[S**2] itself it is the exact one."""
        if low <= 0 and high == np.inf:
            return self.compound.second_moment * self._exact
        split = float(np.clip(self.top, low, high))
        inside = 0.0
        if low < split:
            inside = (
                self._moment(split) - self._moment(low) - 2.0 * low * (self._area(split) - self._area(low))
            )
        if high <= split:
            return inside
        across = 2.0 * (split - low) * self._beyond(split, high) if split > low else 0.0
        return inside + across + self._beyond_square(split, high)

    def accuracy(self, measure: str, level: float | None = None) -> tuple[float, float]:
        """The measure twice: a bound has no bracket of its own."""
        value = self.measure(measure, level)
        return value, value

    @property
    def _exact(self) -> float:
        return 1.0 + MOMENTS if self.upper else 1.0 - MOMENTS

    @cached_property
    def _areas(self) -> FloatArray:
        return self.step * np.insert(running_sums(self.survival), 0, 0.0)

    @cached_property
    def _moments(self) -> FloatArray:
        odd = 2.0 * np.arange(len(self.survival)) + 1.0
        return self.step**2 * np.insert(running_sums(odd * self.survival), 0, 0.0)

    def _area(self, x: float) -> float:
        """Integral of the step function from 0 to x <= top."""
        k = min(int(x / self.step), len(self.survival) - 1)
        return float(self._areas[k]) + max(x - k * self.step, 0.0) * float(self.survival[k])

    def _moment(self, x: float) -> float:
        """Integral of 2 z times the step function from 0 to x <= top."""
        k = min(int(x / self.step), len(self.survival) - 1)
        return float(self._moments[k]) + max(x**2 - (k * self.step) ** 2, 0.0) * float(self.survival[k])

    def _sf(self, x: FloatArray) -> FloatArray:
        cells, _ = places(np.clip(x, 0.0, self.top), self.step)
        inside = self.survival[np.minimum(cells, len(self.survival) - 1)]
        result = np.where(x < 0, 1.0, inside)
        for index in np.flatnonzero(x >= self.top):
            excess = float(x[index]) - self.top
            if self.upper:
                far = self.tail_mean / excess if excess > 0 else 1.0
            else:
                far = self._largest(float(x[index]))
            result[index] = min(result[index], far)
        return result

    def _largest(self, x: float) -> float:
        return float(self.compound.largest_sf(np.array([x]))[0])

    def _beyond(self, low: float, high: float) -> float:
        """The bound of the integral of P(S > z) over (low, high), low >= top."""
        if low >= high:
            return 0.0
        if self.upper:
            widest = (high - low) * float(self._sf(np.array([low]))[0]) if high < np.inf else np.inf
            return min(self.tail_mean, widest)
        edges = np.geomspace(low, min(high, 1e6 * low), _PANELS)
        panels = float(np.diff(edges) @ np.minimum(self.compound.largest_sf(edges[1:]), self.survival[-1]))
        return max(panels, self.tail_mean) if low == self.top and high == np.inf else panels

    def _beyond_square(self, low: float, high: float) -> float:
        """The bound of the integral of 2 (z - low) P(S > z) over (low, high), low >= top."""
        if self.upper:
            widest = (high - low) ** 2 * float(self._sf(np.array([low]))[0]) if high < np.inf else np.inf
            return min(self.tail_square, widest)
        edges = np.geomspace(low, min(high, 1e6 * low), _PANELS)
        squares = np.diff((edges - low) ** 2)
        panels = float(squares @ np.minimum(self.compound.largest_sf(edges[1:]), self.survival[-1]))
        return max(panels, self.tail_square) if low == self.top and high == np.inf else panels
