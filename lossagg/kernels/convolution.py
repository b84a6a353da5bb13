"""The distribution of a sum of two independent amounts on one lattice, by the definition."""

from __future__ import annotations

import numpy as np

from lossagg.kernels.compile import compiled


@compiled
def direct_convolution(left: np.ndarray, right: np.ndarray, points: int) -> np.ndarray:
    """The first `points` values of the convolution of two sequences.

    Args:
        left: shape (n,).
        right: shape (m,).
        points: number of values wanted.

    Returns:
        sum_j left(j) right(k - j) at index k, shape (points,).
    """
    result = np.zeros(points)
    for k in range(min(len(left), points)):
        value = left[k]
        if value != 0.0:
            reach = min(len(right), points - k)
            for j in range(reach):
                result[k + j] += value * right[j]
    return result
