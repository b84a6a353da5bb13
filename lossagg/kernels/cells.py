"""Averages of a survival function over the cells of a lattice, from its values at the points alone.

Lagrange's polynomial through the six points around a cell, integrated over it (Hildebrand 1974, Introduction
to Numerical Analysis, sec. 3.5), is off by 191 / 60480 of the sixth differences there. Where these are small,
the average is as good as the values; where they are not, the function bends within a few cells.
"""

from __future__ import annotations

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.kernels.compile import compiled

BLOCK = 256


@compiled
def cell_averages(survival: FloatArray, tolerance: float, averages: FloatArray, rough: np.ndarray) -> None:
    """Fill the averages between neighbouring points, and tell the blocks of cells where they are not good.

    Args:
        survival: non-increasing values at the points, shape (n + 1,).
        tolerance: the sixth differences allowed, relative to the value.
        averages: filled, shape (n,), within the values at the two ends of the cell.
        rough: filled, shape (number of blocks of `BLOCK` cells,): whether the block holds a cell whose sixth
            differences are larger, or one without six points around it.
    """
    cells = averages.shape[0]
    for block in range(rough.shape[0]):
        first, last = max(BLOCK * block, 3), min(BLOCK * (block + 1), cells - 3)
        bad = BLOCK * block < 3 or BLOCK * (block + 1) > cells - 3
        if first < last:
            a, b, c, d = survival[first - 3 :], survival[first - 2 :], survival[first - 1 :], survival[first:]
            e, f, g = survival[first + 1 :], survival[first + 2 :], survival[first + 3 :]
            own = averages[first:]
            bends = 0
            for k in range(last - first):
                near = 802.0 * (d[k] + e[k]) - 93.0 * (c[k] + f[k]) + 11.0 * (b[k] + g[k])
                own[k] = min(max(near / 1440.0, e[k]), d[k])
                sixth = a[k] + g[k] - 6.0 * (b[k] + f[k]) + 15.0 * (c[k] + e[k]) - 20.0 * d[k]
                bends += abs(sixth) > tolerance * d[k]
            bad = bad or bends > 0
        rough[block] = bad
