"""The annual loss of the option engine: probabilities on a lattice, with a guaranteed bracket.

Every payment is split between its two neighbours on the lattice so that its mean is kept (Gerber 1982).
Given the payments themselves the N errors are independent, have mean zero and range h, so Hoeffding's
inequality (1963) bounds their sum: with probability 1 - a it stays within h sqrt(N log(2 / a) / 2). That
is the bracket: quantiles at a level moved by a, and by that amount; it grows with the root of the count,
not with the count as rounding down and up does. The trap: only payments off the lattice are split, so an
arithmetic severity has no bracket at all.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from lossagg.arrays import FloatArray, Floats, elementwise, require_probability
from lossagg.engines.result import AnnualLoss, BracketedAnnualLoss
from lossagg.errors import EngineError

ENGINE = "grid transform"
_TIE = 1e-11


@dataclass(frozen=True, eq=False, repr=False)
class LatticeYear(BracketedAnnualLoss):
    """An annual sum on the points 0, h, 2h, ...

    Args:
        step: distance of the lattice points.
        survival: P(S > kh), shape (n,).
        areas: integral of the survival function from 0 to kh, in steps, shape (n,).
        exact_mean: the mean by the laws' own formulas, `inf` where it does not exist.
        exact_second: the second moment, likewise.
        shift: half width of the bracket in money.
        slack: probability that the bracket of amounts does not cover, round-off and wrap-around included.
    """

    step: float
    survival: FloatArray
    areas: FloatArray
    exact_mean: float
    exact_second: float
    shift: float
    slack: float
    engine: str = ENGINE

    def __repr__(self) -> str:
        return f"LatticeYear(points={len(self.survival)}, step={self.step:.6g})"

    @property
    def top(self) -> float:
        """The last lattice point."""
        return self.step * (len(self.survival) - 1)

    def bounds(self) -> tuple[AnnualLoss, AnnualLoss]:
        """Lower and upper distributions in stochastic order."""
        return ShiftedYear(self, -self.shift, -self.slack), ShiftedYear(self, self.shift, self.slack)

    def accuracy(self, measure: str, level: float | None = None) -> tuple[float, float]:
        """The guaranteed bracket; mean and standard deviation come from formulas and need none."""
        if measure in ("mean", "sd"):
            value = self.measure(measure, level)
            return value, value
        return super().accuracy(measure, level)

    def sf(self, x: Floats) -> FloatArray | float:
        """P(S > x)."""

        def above(amounts: FloatArray) -> FloatArray:
            place = np.floor(amounts / self.step * (1.0 + 1e-12) + 1e-9)
            index = np.clip(place, 0, len(self.survival) - 1).astype(np.int64)
            return np.where(amounts < 0, 1.0, np.clip(self.survival[index], 0.0, 1.0))

        return elementwise(above, x, "x")

    def value_at_risk(self, level: float) -> float:
        """The smallest lattice point with P(S <= x) >= level.

        Raises:
            EngineError: the lattice does not reach that far.
        """
        tail = 1.0 - require_probability(level, "level", open_low=True, open_high=True)
        above = len(self.survival) - int(np.searchsorted(self.survival[::-1], tail + _TIE, side="right"))
        if above >= len(self.survival):
            raise EngineError(
                "the lattice of the option engine does not reach this level",
                value=level,
                remedy="Ask for a lower level, or use Fourier for this one option.",
            )
        return above * self.step

    def layer_mean(self, low: float, high: float = np.inf) -> float:
        """E[min((S - low)+, high - low)]; with `high` infinite, the exact mean less the area below."""
        if high == np.inf:
            return max(self.exact_mean - self._area(low), 0.0)
        return max(self._area(high) - self._area(low), 0.0)

    def layer_second_moment(self, low: float, high: float = np.inf) -> float:
        """E[min((S - low)+, high - low)**2]; with `high` infinite, from the exact second moment."""
        if high == np.inf:
            if self.exact_second == np.inf:
                return np.inf
            return max(self.exact_second - self._moment(low) - 2.0 * low * self.layer_mean(low), 0.0)
        between = self._moment(high) - self._moment(low)
        return max(between - 2.0 * low * self.layer_mean(low, high), 0.0)

    @cached_property
    def _moments(self) -> FloatArray:
        odd = (2.0 * np.arange(len(self.survival)) + 1.0) * self.survival
        return np.concatenate(([0.0], np.cumsum(odd[:-1])))

    def _area(self, x: float) -> float:
        k, rest = self._cell(x)
        return self.step * (float(self.areas[k]) + rest * float(self.survival[k]))

    def _moment(self, x: float) -> float:
        k, rest = self._cell(x)
        within = ((k + rest) ** 2 - k**2) * float(self.survival[k])
        return self.step**2 * (float(self._moments[k]) + within)

    def _cell(self, x: float) -> tuple[int, float]:
        place = max(x / self.step, 0.0)
        k = min(int(place + 1e-9), len(self.survival) - 1)
        return k, max(place - k, 0.0)


@dataclass(frozen=True, eq=False, repr=False)
class ShiftedYear(AnnualLoss):
    """One side of the bracket: every year's amount moved by `shift`, every probability by `slack`."""

    base: LatticeYear
    shift: float
    slack: float
    engine: str = ENGINE

    def sf(self, x: Floats) -> FloatArray | float:
        """The bound of P(S > x)."""

        def above(amounts: FloatArray) -> FloatArray:
            moved = np.clip(np.asarray(self.base.sf(amounts - self.shift)) + self.slack, 0.0, 1.0)
            return np.where(amounts < 0, 1.0, moved)

        return elementwise(above, x, "x")

    def value_at_risk(self, level: float) -> float:
        """The bound of the quantile, never below zero."""
        return max(self.base.value_at_risk(min(level + self.slack, 1.0 - 1e-12)) + self.shift, 0.0)

    def layer_mean(self, low: float, high: float = np.inf) -> float:
        """The bound of the cost of a layer."""
        return self._layer(low, high, 1)

    def layer_second_moment(self, low: float, high: float = np.inf) -> float:
        """The bound of the second moment of a layer."""
        return self._layer(low, high, 2)

    def accuracy(self, measure: str, level: float | None = None) -> tuple[float, float]:
        """The measure twice: a bound has no bracket of its own."""
        value = self.measure(measure, level)
        return value, value

    def _layer(self, low: float, high: float, order: int) -> float:
        """The layer of the moved amount: what lies below the shift is there in every year."""
        sure = min(max(self.shift - low, 0.0), high - low)
        bottom, top = max(low - self.shift, 0.0), max(high - self.shift, 0.0)
        mean = self.base.layer_mean(bottom, top) if top > bottom else 0.0
        if order == 1:
            slack = self.slack * (high - low) if high < np.inf else 0.0
            return max(sure + mean + slack, 0.0)
        square = self.base.layer_second_moment(bottom, top) if top > bottom else 0.0
        slack = self.slack * (high - low) ** 2 if high < np.inf else 0.0
        return max(sure**2 + 2.0 * sure * mean + square + slack, 0.0)
