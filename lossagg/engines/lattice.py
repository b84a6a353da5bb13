"""An annual loss from probabilities on a lattice: points 0, h, 2h, ...

The probabilities come in two parts. Atoms sit on lattice points exactly: no loss, multiples of a
limit, everything where the payments themselves are arithmetic. The rest is a density sampled at the
lattice points. The survival function and its integrals at the points are trapezoidal sums with the first
Euler-Maclaurin correction; between them it is joined by cubic Hermite polynomials (de Boor 1978, ch. IV),
kept monotone by limiting the slopes (Fritsch and Carlson 1980).
Quantiles and layers of a continuous loss are therefore accurate far beyond the lattice step.

Means are the exact mean less the integral below, so a tail beyond the lattice is never lost.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from lossagg.arrays import FloatArray, Floats, elementwise, require_probability
from lossagg.engines.bound import LatticeBound
from lossagg.engines.compound import CompoundSum
from lossagg.engines.limited import LimitedMeans
from lossagg.engines.result import AnnualLoss, BracketedAnnualLoss
from lossagg.engines.running import running_sums
from lossagg.engines.tail import Tail

_ON_POINT = 1e-9
_JUMP = 0.25


@dataclass(frozen=True, repr=False, eq=False)
class LatticeLoss(BracketedAnnualLoss):
    """The annual loss on a lattice, between two bounds.

    Args:
        engine: name of the engine.
        compound: the model, for its exact moments and its tail beyond the lattice.
        step: distance of the lattice points.
        density: probability of the continuous part by lattice point, shape (n,).
        below: moments of order 0, 1 and 2 of what the discretisation put below zero, in steps.
        atoms: probabilities that belong to the points themselves, shape (n,).
        continuous: total probability of the continuous part, beyond the lattice included.
        tie: probabilities closer than this are the same, the round-off of the engine.
        low: lower bound in stochastic order.
        high: upper bound in stochastic order.
        limited: tighter bounds of the limited means, where the engine has them.
    """

    engine: str
    compound: CompoundSum
    step: float
    density: FloatArray
    below: tuple[float, float, float]
    atoms: FloatArray
    continuous: float
    tie: float
    low: LatticeBound
    high: LatticeBound
    limited: LimitedMeans | None = None

    def __repr__(self) -> str:
        return f"LatticeLoss(engine={self.engine!r}, points={len(self.density)}, step={self.step:.6g})"

    @property
    def points(self) -> int:
        """Number of lattice points."""
        return len(self.density)

    @property
    def top(self) -> float:
        """The last lattice point."""
        return self.step * (self.points - 1)

    def bounds(self) -> tuple[AnnualLoss, AnnualLoss]:
        """Lower and upper distributions in stochastic order."""
        return self.low, self.high

    def sf(self, x: Floats) -> FloatArray | float:
        """P(S > x)."""
        return elementwise(self._sf, x, "x")

    def value_at_risk(self, level: float) -> float:
        """The smallest x with P(S <= x) >= level; beyond the lattice, see the module."""
        tail = 1.0 - require_probability(level, "level", open_low=True, open_high=True)
        if self._survival[-1] > tail + self.tie:
            return self._tail.quantile(tail)
        k = self.points - int(np.searchsorted(self._survival[::-1], tail + self.tie, side="right"))
        if k == 0 or self._survival[k] + self.atoms[k] > tail + self.tie:
            return k * self.step
        value = (k - 1 + self._crossing(k - 1, tail - float(self._atoms_above[k - 1]))) * self.step
        return min(max(value, self.low.value_at_risk(level)), self.high.value_at_risk(level))

    def mean(self) -> float:
        """The exact mean of the model; `inf` where it does not exist."""
        return self.compound.mean

    def tail_value_at_risk(self, level: float) -> float:
        """VaR + E[(S - VaR)+] / (1 - level), inside its bracket; `inf` where the mean is."""
        low, high = self._tail_range(level)
        return min(max(super().tail_value_at_risk(level), low), high)

    def layer_mean(self, low: float, high: float = np.inf) -> float:
        """E[min((S - low)+, high - low)]; with `high` infinite, the exact mean less the integral below."""
        least, most = self.layer_bracket(low, high)
        return min(max(self._layer_mean(low, high), least), most)

    def layer_bracket(self, low: float, high: float = np.inf) -> tuple[float, float]:
        """Guaranteed bounds of `layer_mean`."""
        least, most = self.low.layer_mean(low, high), self.high.layer_mean(low, high)
        limited = self.limited
        if limited is None or low >= limited.top:
            return least, most
        if high <= limited.top:
            below, above = limited.layer(low, high)
        elif high == np.inf and self.compound.mean < np.inf:
            first, second = limited.bounds(low)
            below, above = self.low.mean() - second, self.high.mean() - first
        else:
            below, above = limited.layer(low, limited.top)
            below += self.low.layer_mean(limited.top, high)
            above += self.high.layer_mean(limited.top, high)
        return max(least, below), min(most, above)

    def accuracy(self, measure: str, level: float | None = None) -> tuple[float, float]:
        """The guaranteed bracket."""
        if measure == "tail_value_at_risk" and level is not None:
            return self._tail_range(require_probability(level, "level", open_low=True, open_high=True))
        return super().accuracy(measure, level)

    def _tail_range(self, level: float) -> tuple[float, float]:
        low, high = self.low.tail_value_at_risk(level), self.high.tail_value_at_risk(level)
        last = self.high.value_at_risk(level)
        if self.limited is None or last > self.limited.top or self.compound.mean == np.inf:
            return low, high
        means = self.low.mean(), self.high.mean()
        below, above = self.limited.tail(level, self.low.value_at_risk(level), last, means)
        return max(low, below), min(high, above)

    def _layer_mean(self, low: float, high: float) -> float:
        if low >= self.top:
            return self._tail.layer_mean(low, high)
        if high <= self.top:
            return self._area(high) - self._area(low)
        if self.compound.mean == np.inf:
            if high == np.inf:
                return np.inf
            return self._area(self.top) - self._area(low) + self._tail.layer_mean(self.top, high)
        return self.compound.mean - self._area(low) - self._tail.layer_mean(high, np.inf)

    def layer_second_moment(self, low: float, high: float = np.inf) -> float:
        """E[min((S - low)+, high - low)**2]; with `high` infinite, from the exact second moment."""
        if low >= self.top:
            return self._tail.layer_second_moment(low, high)
        if high <= self.top:
            square = self._moment(high) - self._moment(low) - 2.0 * low * self.layer_mean(low, high)
            return max(square, 0.0)
        if self.compound.variance == np.inf:
            if high == np.inf:
                return np.inf
            across = 2.0 * (self.top - low) * self._tail.layer_mean(self.top, high)
            beyond = self._tail.layer_second_moment(self.top, high)
            return self.layer_second_moment(low, self.top) + across + beyond
        square = self.compound.second_moment - self._moment(low) - 2.0 * low * self.layer_mean(low)
        if high < np.inf:
            square -= self._tail.layer_second_moment(high, np.inf)
            square -= 2.0 * (high - low) * self._tail.layer_mean(high, np.inf)
        return max(square, 0.0)

    @cached_property
    def _atoms_above(self) -> FloatArray:
        """P(S > kh and S is an atom)."""
        on_lattice = float(self.atoms.sum())
        beyond = max(1.0 - self.continuous - on_lattice, 0.0) if on_lattice > 0 else 0.0
        return running_sums(self.atoms[::-1])[::-1] - self.atoms + beyond

    @cached_property
    def _density_above(self) -> FloatArray:
        """Sum of the density at the points above each point."""
        return self.continuous - self.below[0] - running_sums(self.density)

    @cached_property
    def _density_right(self) -> FloatArray:
        """The density just right of the points: at a point where it jumps, that of the next point."""
        after = np.append(self.density[1:], self.density[-1])
        jumps = np.abs(after - self.density) > _JUMP * np.abs(self.density)
        return np.where(jumps, np.maximum(after, 0.0), self.density)

    @cached_property
    def _rest_above(self) -> FloatArray:
        """P(S > kh and S is no atom), non-increasing."""
        density = self.density
        before = np.concatenate(([self.below[0]], density[:-1]))
        after = np.append(density[1:], density[-1])
        right = self._density_right
        slope = np.where(right == density, after - before, 0.0)
        above = self._density_above + right / 2 + slope / 24
        above[0] = self.continuous
        # Where the density is too steep for the step, the bracket still knows where the function runs.
        above = np.clip(above, self.low.survival - self._atoms_above, self.high.survival - self._atoms_above)
        return np.minimum.accumulate(np.clip(above, 0.0, self.continuous))

    @cached_property
    def _slopes(self) -> FloatArray:
        """The density times the step at the points, limited so that the cubics stay monotone."""
        drops = -np.diff(self._rest_above)
        most = 3.0 * np.minimum(np.append(drops, np.inf), np.insert(drops, 0, np.inf))
        slopes = self.density.copy()
        slopes[0] *= 2.0
        return np.clip(slopes, 0.0, most)

    @cached_property
    def _survival(self) -> FloatArray:
        return np.minimum.accumulate(self._rest_above + self._atoms_above)

    @cached_property
    def _areas(self) -> FloatArray:
        """E[min(S, kh)], the integral of the survival function from 0 to each point."""
        above = self._density_above + self._atoms_above
        areas = self.below[1] + running_sums(above) - above - self._density_right / 12
        areas[0] = 0.0
        return np.maximum(self.step * areas, 0.0)

    @cached_property
    def _moments(self) -> FloatArray:
        """E[min(S, kh)**2], the integral of 2 z P(S > z) from 0 to each point."""
        index = np.arange(float(self.points))
        odd = (2.0 * index + 1.0) * (self._density_above + self._atoms_above)
        moments = self.below[2] + running_sums(odd) - odd - index * self._density_right / 6
        moments[0] = 0.0
        return np.maximum(self.step**2 * moments, 0.0)

    @cached_property
    def _tail(self) -> Tail:
        last = float(self._survival[-1])
        rest = max(self.compound.mean - self._area(self.top), 0.0)
        return Tail(self.compound, self.top, last if last > self.tie else 0.0, rest)

    def _cell(self, x: float) -> tuple[int, float]:
        """Index of the last point at or below x <= top, and the position within the cell, 0 to 1."""
        place = x / self.step
        nearest = round(place)
        if abs(place - nearest) <= _ON_POINT * max(place, 1.0):
            return min(nearest, self.points - 1), 0.0
        return int(place), place - int(place)

    def _cubic(self, k: int) -> tuple[float, float, float, float]:
        """Coefficients of the survival function of the continuous part within cell k."""
        if k + 1 >= self.points:
            return float(self._rest_above[k]), 0.0, 0.0, 0.0
        y0, y1 = float(self._rest_above[k]), float(self._rest_above[k + 1])
        m0, m1 = -float(self._slopes[k]), -float(self._slopes[k + 1])
        return y0, m0, 3 * (y1 - y0) - 2 * m0 - m1, 2 * (y0 - y1) + m0 + m1

    def _crossing(self, k: int, level: float) -> float:
        """Where in cell k the continuous part falls to a level: bisection, then exact to round-off."""
        a, b, c, d = self._cubic(k)
        left, right = 0.0, 1.0
        for _ in range(60):
            middle = (left + right) / 2
            if a + middle * (b + middle * (c + middle * d)) > level:
                left = middle
            else:
                right = middle
        return right

    def _sf(self, x: FloatArray) -> FloatArray:
        result = np.empty(x.shape)
        for index, amount in enumerate(x):
            if amount < 0:
                result[index] = 1.0
            elif amount > self.top:
                result[index] = self._tail.sf(float(amount))
            else:
                k, u = self._cell(float(amount))
                a, b, c, d = self._cubic(k)
                result[index] = max(a + u * (b + u * (c + u * d)), 0.0) + self._atoms_above[k]
        return np.minimum(result, 1.0)

    def _area(self, x: float) -> float:
        """Integral of the survival function from 0 to x <= top."""
        k, u = self._cell(x)
        a, b, c, d = self._cubic(k)
        part = u * (a + float(self._atoms_above[k]) + u * (b / 2 + u * (c / 3 + u * d / 4)))
        return float(self._areas[k]) + self.step * part

    def _moment(self, x: float) -> float:
        """Integral of 2 z P(S > z) from 0 to x <= top."""
        k, u = self._cell(x)
        a, b, c, d = self._cubic(k)
        a += float(self._atoms_above[k])
        whole = u * (a + u * (b / 2 + u * (c / 3 + u * d / 4)))
        lever = u**2 * (a / 2 + u * (b / 3 + u * (c / 4 + u * d / 5)))
        return float(self._moments[k]) + 2.0 * self.step**2 * (k * whole + lever)
