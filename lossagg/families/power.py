"""Integrals of power tails that stay accurate where their textbook form divides zero by zero.

With t = -log S(x), a generalised Pareto excess is scale * (exp(shape t) - 1) / shape, and its limited
moments are integrals of exponentials over (0, t). At shape 0, 1/2 and 1 the usual closed forms have
removable poles, and at small t they cancel; the forms here do neither.
"""

from __future__ import annotations

import numpy as np
from scipy import special

from lossagg.arrays import FloatArray

# Weighted values are summed, here and in the other laws, not multiplied as matrices: a matrix product
# may round differently with the number of rows, and a law must give one amount one answer.
_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(32)


def exponential_integral(rate: float, t: FloatArray) -> FloatArray:
    """The integral of exp(rate * u) over (0, t), continuous in rate."""
    with np.errstate(over="ignore"):
        return np.asarray(t * special.exprel(rate * t))


def excess_at(shape: float, t: FloatArray) -> FloatArray:
    """(exp(shape * t) - 1) / shape: the excess of scale 1 whose survival is exp(-t)."""
    return exponential_integral(shape, t)


def limited_excess(shape: float, t: FloatArray) -> FloatArray:
    """E[min(Y, y)] of the generalised Pareto excess Y of scale 1, at the y whose survival is exp(-t)."""
    return exponential_integral(shape - 1.0, t)


def limited_excess_second_moment(shape: float, t: FloatArray) -> FloatArray:
    """E[min(Y, y)**2], as `limited_excess`: the integral of 2 (exp(shape u) - 1) / shape
    * exp((shape - 1) u) over (0, t)."""
    short = t * (1.0 + abs(shape)) < 4.0
    result = np.empty(t.shape)
    nodes = 0.5 * t[short][:, None] * (1.0 + _NODES)
    values = excess_at(shape, nodes) * np.exp((shape - 1.0) * nodes)
    result[short] = t[short] * np.sum(values * _WEIGHTS, axis=-1)
    long = t[~short]
    with np.errstate(over="ignore"):
        if shape < 0.5:  # by parts
            ends = excess_at(shape, long) * np.exp((shape - 1.0) * long)
            result[~short] = 2.0 / (1.0 - shape) * (exponential_integral(2 * shape - 1, long) - ends)
        else:
            rise = exponential_integral(2 * shape - 1, long)
            result[~short] = 2.0 / shape * (rise - exponential_integral(shape - 1, long))
    return result
