"""The annual loss as simulated over more years than are kept: its largest years, cells and moments.

Every measure is that of `SimulatedAnnualLoss`, the same years whole, up to the error stated there: none
for what lies among the largest amounts and for the moments, at most one part in 4,096 of the amount for
quantiles below; intervals are widened by that.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from lossagg.arrays import FloatArray, Floats, IntArray, elementwise
from lossagg.engines.reduction import Reduced
from lossagg.engines.sampled import SampledAnnualLoss


@dataclass(frozen=True, eq=False, repr=False)
class ReducedAnnualLoss(SampledAnnualLoss):
    """Annual amounts of simulated years, reduced.

    Attributes:
        reduced: what is left of them.
        moment_order: the order from which on moments do not exist, by the model; `inf` where all do.
        most: the most a year can bring, `inf` where nothing limits it.
        miss: how often an interval may miss.
    """

    reduced: Reduced
    moment_order: float = np.inf
    most: float = np.inf
    engine: str = "simulation"
    miss: float = 0.05

    @property
    def years(self) -> int:
        """Number of simulated years."""
        return self.reduced.moments.number

    @cached_property
    def _up_to(self) -> IntArray:
        """Number of years at or below each cell, cells in increasing order."""
        return self.reduced.empty + np.cumsum(self.reduced.count)

    @property
    def _below_largest(self) -> int:
        return self.years - self.reduced.largest.size

    def sf(self, x: Floats) -> FloatArray | float:
        """The part of the years above x, shared out evenly within a cell."""
        return elementwise(self._sf, x, "x")

    def _sf(self, x: FloatArray) -> FloatArray:
        kept = self.reduced
        above = kept.largest.size - np.searchsorted(kept.largest, x, side="right").astype(np.float64)
        above += np.where(x < 0.0, kept.empty, 0.0)
        if kept.count.size:
            cell = np.searchsorted(kept.high, x, side="right")
            inside = np.minimum(cell, kept.count.size - 1)
            up_to = np.where(cell > 0, self._up_to[np.maximum(cell, 1) - 1], kept.empty)
            low, high = kept.low[inside], kept.high[inside]
            width = np.where(high > low, high - low, 1.0)
            share = np.where(cell < kept.count.size, np.clip((x - low) / width, 0.0, 1.0), 0.0)
            above += self._below_largest - up_to - share * kept.count[inside]
        return np.asarray(above / self.years)

    def amount_at(self, rank: int) -> tuple[float, float, float]:
        """The amount at a rank and the ends of its cell; among the largest, exactly."""
        kept = self.reduced
        if rank > self._below_largest:
            amount = float(kept.largest[rank - self._below_largest - 1])
            return amount, amount, amount
        if rank <= kept.empty:
            return 0.0, 0.0, 0.0
        cell = int(np.searchsorted(self._up_to, rank, side="left"))
        low, high, count = float(kept.low[cell]), float(kept.high[cell]), int(kept.count[cell])
        step = (rank - (int(self._up_to[cell]) - count) - 1) / (count - 1) if count > 1 else 0.0
        return low + step * (high - low), low, high

    def exhaustion_probability(self) -> float | None:
        """The part of the years that reach the most a year can bring; None where nothing limits it."""
        return None if self.most == np.inf else self.reduced.full / self.years

    def _layer_moments(self, low: float, high: float) -> tuple[float, float]:
        kept = self.reduced
        middle, width = (kept.low + kept.high) / 2.0, kept.high - kept.low
        within = np.clip(middle - low, 0.0, high - low)
        inside = (kept.low >= low) & (kept.high <= high)
        largest = np.clip(kept.largest - low, 0.0, high - low)
        with np.errstate(over="ignore"):
            spread = np.where(inside, width**2 / 12.0, 0.0)
            first = np.sum(largest) + np.sum(kept.count * within)
            second = np.sum(largest**2) + np.sum(kept.count * (within**2 + spread))
        if low < 0.0:
            first, second = first - kept.empty * low, second + kept.empty * low**2
        return float(first / self.years), float(second / self.years)

    def _excess_sd(self, low: float) -> float:
        mean, square = self._layer_moments(low, np.inf)
        return float(np.sqrt(max(square - mean**2, 0.0)))

    def _central(self) -> tuple[float, float, float]:
        moments = self.reduced.moments
        variance = moments.second / moments.number
        if variance == 0.0 or not np.isfinite(variance):
            return moments.mean, float(np.sqrt(variance)), 0.0
        return moments.mean, float(np.sqrt(variance)), moments.fourth / moments.number / variance**2
