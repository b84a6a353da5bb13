"""The gamma size.

Stop-loss costs in the tail: the mean excess over d is scale (1 + (shape - 1) U(2, b, t) / U(1, b, t))
with t = d / scale, b = shape + 1 and Tricomi's U, whose quotient is a continued fraction (DLMF 13.3.7);
the textbook difference of two incomplete gamma functions cancels there.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np
from scipy import special

from lossagg.arrays import BoolArray, FloatArray, require_positive
from lossagg.families.base import SizeLaw
from lossagg.families.saddle import lower_gamma, poisson_probability

_FRACTION_TERMS = 400


@dataclass(frozen=True, kw_only=True, repr=False)
class Gamma(SizeLaw):
    """Density proportional to x**(shape - 1) exp(-x / scale).

    Args:
        shape: above 0; 1 is the exponential law.
        scale: in units of money, above 0; the mean is shape * scale.

    Raises:
        InputError: a parameter that is not above 0 and finite.
    """

    family: ClassVar[str] = "gamma"
    shape: float
    scale: float

    def __post_init__(self) -> None:
        self._settle(shape=require_positive(self.shape, "shape"), scale=require_positive(self.scale, "scale"))

    def mean(self) -> float:
        """shape * scale."""
        return self.shape * self.scale

    def variance(self) -> float:
        """shape * scale**2."""
        return self.shape * self.scale**2

    @property
    def tail_index(self) -> float:
        """`inf`: all moments exist."""
        return np.inf

    def scaled(self, factor: float) -> Gamma:
        """The scale times the factor."""
        return Gamma(shape=self.shape, scale=self.scale * require_positive(factor, "factor"))

    def _cdf(self, x: FloatArray) -> FloatArray:
        return lower_gamma(self.shape, x / self.scale)

    def _sf(self, x: FloatArray) -> FloatArray:
        return np.asarray(special.gammaincc(self.shape, x / self.scale))

    def _pdf(self, x: FloatArray) -> FloatArray:
        t = x / self.scale
        positive = np.where(t > 0, t, 1.0)
        weight = poisson_probability(np.full(t.shape, self.shape), positive)
        at_zero = np.inf if self.shape < 1 else (1 / self.scale if self.shape == 1 else 0.0)
        return np.where(t > 0, weight * self.shape / (positive * self.scale), at_zero)

    def _ppf(self, q: FloatArray) -> FloatArray:
        return np.asarray(self.scale * special.gammaincinv(self.shape, q))

    def _isf(self, p: FloatArray) -> FloatArray:
        return np.asarray(self.scale * special.gammainccinv(self.shape, p))

    def _limited_mean(self, limit: FloatArray) -> FloatArray:
        below = self.mean() * lower_gamma(self.shape + 1, limit / self.scale)
        return np.asarray(below + limit * self._sf(limit))

    def _limited_second_moment(self, limit: FloatArray) -> FloatArray:
        below = lower_gamma(self.shape + 2, limit / self.scale) * (self.shape + 1) * self.shape
        return np.asarray(below * self.scale**2 + limit * (limit * self._sf(limit)))

    def _expected_excess(self, x: FloatArray) -> FloatArray:
        t = x / self.scale
        result = self.shape * np.asarray(special.gammaincc(self.shape + 1, t)) - t * self._sf(x)
        far = self._far(t)
        result[far] = self._sf(x[far]) * (1.0 + (self.shape - 1.0) * self._fraction(t[far]))
        return self.scale * np.maximum(result, 0.0)

    def _far(self, t: FloatArray) -> BoolArray:
        return np.asarray(t > self.shape + 2.0 * np.sqrt(self.shape) + 2.0)

    def _fraction(self, t: FloatArray) -> FloatArray:
        """U(2, shape + 1, t) / U(1, shape + 1, t)."""
        quotient = np.zeros_like(t)
        for k in range(_FRACTION_TERMS, 1, -1):
            quotient = 1.0 / (t + 2 * k - self.shape - 1 - k * (k - self.shape) * quotient)
        return quotient

    def _second_excess(self, x: FloatArray) -> FloatArray:
        a, t = self.shape, x / self.scale
        upper = [np.asarray(special.gammaincc(a + k, t)) for k in range(3)]
        result = a * (a + 1) * upper[2] - 2.0 * a * t * upper[1] + t * t * upper[0]
        far = self._far(t)
        at = t[far]
        result[far] = upper[0][far] * (1.0 + a - (at - 1.0 - a) * (a - 1.0) * self._fraction(at))
        return self.scale**2 * np.maximum(result, 0.0)
