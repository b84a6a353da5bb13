"""Integrals of power tails that stay accurate where their textbook form divides zero by zero.

With t = -log S(x), a generalised Pareto excess is scale * (exp(shape t) - 1) / shape, and its limited
moments are integrals of exponentials over (0, t). At shape 0, 1/2 and 1 the usual closed forms have
removable poles, and at small t they cancel; the forms here do neither.
"""

from __future__ import annotations

import numpy as np
from scipy import special

from lossagg.arrays import FloatArray
from lossagg.families.quadrature import interval_integrals

_POINTS = 32


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

    def integrand(u: FloatArray, _: slice) -> FloatArray:
        return np.asarray(2.0 * excess_at(shape, u) * np.exp((shape - 1.0) * u))

    result[short] = interval_integrals(integrand, np.zeros(int(short.sum())), t[short], _POINTS)
    long = t[~short]
    with np.errstate(over="ignore"):
        if shape < 0.5:  # by parts
            ends = excess_at(shape, long) * np.exp((shape - 1.0) * long)
            result[~short] = 2.0 / (1.0 - shape) * (exponential_integral(2 * shape - 1, long) - ends)
        else:
            rise = exponential_integral(2 * shape - 1, long)
            result[~short] = 2.0 / shape * (rise - exponential_integral(shape - 1, long))
    return result
