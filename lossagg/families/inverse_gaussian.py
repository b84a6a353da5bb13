"""The inverse Gaussian size.

With a = sqrt(shape / x) (x / mean - 1) and b = sqrt(shape / x) (x / mean + 1), exp(2 shape / mean) phi(b)
equals phi(a); so every textbook difference of Phi(-a) and exp(2 shape / mean) Phi(-b), which cancels in the
tail and overflows for narrow laws, is phi(a) times a difference of Mills ratios.

Source: Klugman, Panjer and Willmot, Loss Models, appendix A (the law and its limited mean); the
second moment and the stop-loss cost derived here by differentiation.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np
from scipy import special

from lossagg.arrays import FloatArray, require_positive
from lossagg.families.base import SizeLaw
from lossagg.families.inversion import bracket, invert_tail
from lossagg.families.mills import mills, mills_difference, mills_fall_difference, normal_density

# Below this a (or -a) the Mills ratio is large and Phi itself is the better form.
_EDGE = -5.0


@dataclass(frozen=True, init=False, repr=False)
class InverseGaussian(SizeLaw):
    """Density sqrt(shape / (2 pi x**3)) exp(-shape (x - mean)**2 / (2 mean**2 x)).

    Args:
        mean: in units of money, above 0.
        shape: in units of money, above 0; the variance is mean**3 / shape.

    Raises:
        InputError: a parameter that is not above 0 and finite.
    """

    family: ClassVar[str] = "inverse-gaussian"
    _mean: float
    shape: float

    def __init__(self, *, mean: float, shape: float) -> None:
        self._settle(_mean=require_positive(mean, "mean"), shape=require_positive(shape, "shape"))

    def mean(self) -> float:
        """The mean."""
        return self._mean

    def variance(self) -> float:
        """mean**3 / shape."""
        return self._mean**3 / self.shape

    @property
    def tail_index(self) -> float:
        """`inf`: all moments exist."""
        return np.inf

    def scaled(self, factor: float) -> InverseGaussian:
        """Mean and shape times the factor."""
        times = require_positive(factor, "factor")
        return InverseGaussian(mean=self._mean * times, shape=self.shape * times)

    def _ends(self, x: FloatArray) -> tuple[FloatArray, FloatArray]:
        root = np.sqrt(self.shape / self._floored(x))
        return root * (x / self._mean - 1.0), root * (x / self._mean + 1.0)

    def _floored(self, x: FloatArray) -> FloatArray:
        # Far below this the density is exp(-5e7): no loss is that small, but its reciprocal overflows.
        return np.maximum(x, 1e-8 * self.shape)

    def _cdf(self, x: FloatArray) -> FloatArray:
        a, b = self._ends(x)
        return np.minimum(special.ndtr(a) + normal_density(a) * mills(b), 1.0)

    def _sf(self, x: FloatArray) -> FloatArray:
        a, b = self._ends(x)
        return _upper(a, b)

    def _pdf(self, x: FloatArray) -> FloatArray:
        a, _ = self._ends(x)
        floored = self._floored(x)
        return normal_density(a) * np.sqrt(self.shape / floored) / floored

    def _ppf(self, q: FloatArray) -> FloatArray:
        return self._inverse(q, q <= 0.5, 1.0)

    def _isf(self, p: FloatArray) -> FloatArray:
        return self._inverse(p, p <= 0.5, -1.0)

    def _inverse(self, p: FloatArray, own: np.ndarray, sign: float) -> FloatArray:
        # The half in which the target is small; 1 - p is exact in the other.
        result = np.empty(p.shape)
        for chosen, target, slope in ((own, p[own], sign), (~own, 1.0 - p[~own], -sign)):
            tail = self._cdf if slope > 0 else self._sf
            low, high = bracket(tail, target, self._mean, slope)
            result[chosen] = invert_tail(tail, self._pdf, target, low, high, slope)
        return result

    def _limited_mean(self, limit: FloatArray) -> FloatArray:
        a, b = self._ends(limit)
        return self._mean * _upper(-a, b) + limit * _upper(a, b)

    def _limited_second_moment(self, limit: FloatArray) -> FloatArray:
        a, b = self._ends(limit)
        below = (
            self._cdf(limit)
            + self._mean / self.shape * _upper(-a, b)
            - 2.0 * np.sqrt(limit / self.shape) * normal_density(a)
        )
        return self._mean**2 * np.maximum(below, 0.0) + limit * (limit * _upper(a, b))

    def _expected_excess(self, x: FloatArray) -> FloatArray:
        a, b = self._ends(x)
        low = a < _EDGE
        result = np.empty(x.shape)
        at, al, bl = x[low], a[low], b[low]
        result[low] = self._mean - at + at * self._cdf(at) - self._mean * _upper(-al, bl)
        at, ah, bh = x[~low], a[~low], b[~low]
        rise = mills_fall_difference(ah, bh) * np.sqrt(at / self.shape)
        result[~low] = self._mean * normal_density(ah) * rise
        return result


def _upper(a: FloatArray, b: FloatArray) -> FloatArray:
    """Phi(-a) - phi(a) R(b) for |a| <= b."""
    low = a < _EDGE
    result = np.empty(a.shape)
    result[low] = special.ndtr(-a[low]) - normal_density(a[low]) * mills(b[low])
    result[~low] = normal_density(a[~low]) * mills_difference(a[~low], b[~low])
    return result
