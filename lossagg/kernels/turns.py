"""The turns between the two steps of a folded transform: a row of a table by powers of one root of unity."""

from __future__ import annotations

import numpy as np

from lossagg.kernels.compile import compiled


@compiled
def turn_rows(table: np.ndarray, far: np.ndarray, near: np.ndarray) -> None:
    """Multiply the entries of every row in place, entry a * m + b by far(a) near(b).

    Args:
        table: complex, shape (rows, n * m).
        far: complex, shape (rows, n).
        near: complex, shape (rows, m).
    """
    width = near.shape[1]
    for row in range(table.shape[0]):
        factors = near[row]
        for a in range(far.shape[1]):
            own = table[row, a * width : (a + 1) * width]
            lead = far[row, a]
            for b in range(width):
                own[b] *= lead * factors[b]
