"""Annual amounts of one subject reduced as they come, in memory that does not grow with the years.

Kept: the largest 524,288 amounts, exactly; every positive amount counted in cells of its floating-point
bits, 4,096 per octave, with the smallest and the largest of each cell (so that an amount many years share,
such as a limit, comes out exactly); the moments. A quantile of the body is thereby known to one part in
4,096, its cell, and interpolated within; whatever lies among the largest amounts is exact. Counts, minima
and maxima do not depend on the order of the blocks, the moments follow a fixed tree (`moments`): any
number of workers gives the same bits.
"""

from __future__ import annotations

from dataclasses import dataclass
from threading import Lock

import numpy as np

from lossagg.arrays import FloatArray, IntArray
from lossagg.engines.moments import Moments, MomentTree
from lossagg.kernels.reduction import CELLS_PER_OCTAVE, add_to_cells, cell_of

LARGEST = 2**19
RELATIVE_ERROR = 1.0 / CELLS_PER_OCTAVE
# Two buffers of the largest amounts and the cells of a hundred octaves.
BYTES_PER_SUBJECT = 4 * 8 * LARGEST + 100 * 24 * CELLS_PER_OCTAVE


@dataclass(frozen=True, eq=False)
class Reduced:
    """What is left of the annual amounts.

    Attributes:
        moments: number, mean and powers of the deviations.
        largest: the largest amounts in increasing order.
        count: number of the other, positive amounts by cell, cells in increasing order.
        low: the smallest amount of each cell.
        high: the largest amount of each cell.
        full: how many reach the most a year can bring.
    """

    moments: Moments
    largest: FloatArray
    count: IntArray
    low: FloatArray
    high: FloatArray
    full: int

    @property
    def empty(self) -> int:
        """Number of years without any amount that are not among the largest."""
        return int(self.moments.number - self.largest.size - self.count.sum())


class Reduction:
    """Takes in the annual amounts of one subject, block by block, from any thread.

    Args:
        most: the most a year can bring, `inf` where nothing limits it.
        largest: how many of the largest amounts are kept.
    """

    def __init__(self, most: float = np.inf, largest: int = LARGEST) -> None:
        self._lock = Lock()
        self._moments = MomentTree()
        self._kept = largest
        self._bound = -np.inf
        self._large = np.empty(2 * largest + 1)
        self._number = 0
        self._cells = _Cells(0, np.empty(0, dtype=np.int64), np.empty(0), np.empty(0))
        self._least_full = most * (1.0 - 1e-12)
        self._full = 0

    def add(self, block: int, amounts: FloatArray) -> None:
        """Take in one block; each block once, in any order."""
        moments = Moments.of(amounts)
        full = int(np.count_nonzero(amounts >= self._least_full)) if np.isfinite(self._least_full) else 0
        positive = amounts[amounts > 0.0]
        with self._lock:
            self._moments.add(block, moments)
            self._full += full
            if positive.size:
                self._cells = self._cells.reaching(float(positive.min()), float(positive.max()))
                self._cells.add(positive)
            large = amounts[amounts > self._bound]
            for start in range(0, large.size, self._kept):
                self._keep(large[start : start + self._kept])

    def _keep(self, large: FloatArray) -> None:
        if self._number + large.size > self._large.size:
            self._compact()
        self._large[self._number : self._number + large.size] = large
        self._number += large.size

    def _compact(self) -> None:
        if self._number > self._kept:
            part = self._large[: self._number]
            part.partition(self._number - self._kept)
            self._large[: self._kept] = part[self._number - self._kept :].copy()
            self._number = self._kept
            self._bound = float(self._large[: self._kept].min())

    def result(self) -> Reduced:
        """What is left of the amounts taken in so far."""
        with self._lock:
            self._compact()
            largest = np.sort(self._large[: self._number])
            cells = self._cells.without(largest)
            return Reduced(self._moments.total(), largest, *cells, self._full)


@dataclass(frozen=True, eq=False)
class _Cells:
    first: int
    count: IntArray
    low: FloatArray
    high: FloatArray

    def reaching(self, smallest: float, largest: float) -> _Cells:
        """These cells, more added where needed, so that both amounts have one."""
        size = CELLS_PER_OCTAVE
        first, last = cell_of(smallest) // size * size, (cell_of(largest) // size + 1) * size
        if self.count.size:
            first, last = min(first, self.first), max(last, self.first + self.count.size)
        if last - first == self.count.size:
            return self
        count = np.zeros(last - first, dtype=np.int64)
        low, high = np.full(last - first, np.inf), np.zeros(last - first)
        own = slice(self.first - first, self.first - first + self.count.size)
        if self.count.size:
            count[own], low[own], high[own] = self.count, self.low, self.high
        return _Cells(first, count, low, high)

    def add(self, positive: FloatArray) -> None:
        add_to_cells(positive, self.first, self.count, self.low, self.high)

    def without(self, largest: FloatArray) -> tuple[IntArray, FloatArray, FloatArray]:
        """(count, low, high) of the cells that hold more than these amounts."""
        taken = np.zeros_like(self.count)
        add_to_cells(largest, self.first, taken, np.full(taken.size, np.inf), np.zeros(taken.size))
        count = self.count - taken
        some = count > 0
        high = self.high[some]
        if largest.size:
            high = np.minimum(high, max(largest[0], 0.0))
        return count[some], self.low[some], high
