"""Gauss-Legendre integrals of many intervals at once, in memory that does not grow with their number.

Weighted values are summed, not multiplied as a matrix: a matrix product may round differently with
the number of rows, and a law must give one amount one answer, alone or in a vector.
"""

from __future__ import annotations

from collections.abc import Callable
from functools import cache

import numpy as np

from lossagg.arrays import FloatArray

_ROWS = 8192


def interval_integrals(
    function: Callable[[FloatArray, slice], FloatArray], low: FloatArray, width: FloatArray, points: int
) -> FloatArray:
    """The integral of a smooth function over each interval (low, low + width).

    Args:
        function: of the points (one row for each interval) and the slice of intervals they belong to.
        low: left ends, of one dimension.
        width: widths, of the same shape.
        points: number of points in each interval; exact for polynomials of degree 2 points - 1.
    """
    nodes, weights = _rule(points)
    result = np.empty(low.shape)
    for start in range(0, low.size, _ROWS):
        rows = slice(start, start + _ROWS)
        half = 0.5 * width[rows]
        values = function(low[rows][:, None] + half[:, None] * nodes, rows)
        result[rows] = half * np.sum(values * weights, axis=-1)
    return result


@cache
def _rule(points: int) -> tuple[FloatArray, FloatArray]:
    nodes, weights = np.polynomial.legendre.leggauss(points)
    return 1.0 + nodes, weights
