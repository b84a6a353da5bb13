"""Annual amounts counted in cells by their floating-point bits: 4,096 cells of equal ratio per octave."""

from __future__ import annotations

import numpy as np

from lossagg.arrays import FloatArray, IntArray
from lossagg.kernels.compile import compiled

CELL_BITS = 12
CELLS_PER_OCTAVE = 2**CELL_BITS
SHIFT = np.uint64(52 - CELL_BITS)


@compiled
def cell_of(amount: float) -> int:
    """The number of the cell of a positive amount."""
    return int(np.int64(np.float64(amount).view(np.uint64) >> SHIFT))


@compiled
def add_to_cells(amounts: FloatArray, first: int, count: IntArray, low: FloatArray, high: FloatArray) -> None:
    """Count every positive amount in its cell and keep the cell's smallest and largest.

    Args:
        amounts: any number of them.
        first: number of the first cell of the arrays.
        count: amounts by cell, added to.
        low: smallest amount by cell, `inf` where there is none.
        high: largest amount by cell.
    """
    for i in range(amounts.shape[0]):
        amount = amounts[i]
        if amount > 0.0:
            cell = cell_of(amount) - first
            count[cell] += 1
            low[cell] = min(low[cell], amount)
            high[cell] = max(high[cell], amount)
