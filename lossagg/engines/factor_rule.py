"""Gauss rules for a random factor with mean 1: few values with weights that stand for its whole law.

A rule of n values integrates polynomials up to degree 2n - 1 exactly: in a gamma factor itself (generalised
Gauss-Laguerre), in the normal variable behind a lognormal factor (Gauss-Hermite). Values and weights are the
eigenvalues, and the squared first components of the eigenvectors, of the tridiagonal matrix of the recurrence
of the orthogonal polynomials (Golub and Welsch 1969, "Calculation of Gauss quadrature rules", Mathematics of
Computation 23), so no gamma function overflows, however small the variance.
"""

from __future__ import annotations

import numpy as np
from scipy.linalg import eigh_tridiagonal

from lossagg.arrays import FloatArray
from lossagg.engines.dependence import SharedFactor

NEGLIGIBLE = 1e-20
"""Values with less weight are left out; together they weigh less than the rounding of a probability."""


def factor_rule(factor: SharedFactor, size: int) -> tuple[FloatArray, FloatArray]:
    """Values and weights of a Gauss rule for a factor.

    Args:
        factor: its law and variance.
        size: number of values, at least 1, before those of negligible weight are left out.

    Returns:
        Values in increasing order, and their weights, shape (n,) each with n <= size.
    """
    order: FloatArray = np.arange(1, size, dtype=np.float64)
    if factor.law == "gamma":
        shape = 1.0 / factor.variance
        nodes, weights = _rule(
            2.0 * np.arange(size, dtype=np.float64) + shape, np.sqrt(order * (order + shape - 1.0))
        )
        values = nodes * factor.variance
    else:
        spread = float(np.log1p(factor.variance))
        nodes, weights = _rule(np.zeros(size), np.sqrt(order))
        values = np.exp(nodes * np.sqrt(spread) - spread / 2.0)
    kept = weights >= NEGLIGIBLE
    return values[kept], weights[kept]


def _rule(diagonal: FloatArray, beside: FloatArray) -> tuple[FloatArray, FloatArray]:
    nodes, vectors = eigh_tridiagonal(diagonal, beside)
    return np.asarray(nodes), np.asarray(vectors[0] ** 2)
