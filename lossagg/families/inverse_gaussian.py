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
from lossagg.families.quadrature import interval_integrals

# Below this a (or -a) the Mills ratio is large and Phi itself is the better form.
_EDGE = -5.0
# Below this c = sqrt(shape x) / mean the closed form of the second moment cancels.
_WIDE_BELOW = 0.5
_POINTS = 64


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
        """p = sqrt(shape / x) and c = sqrt(shape x) / mean: a = c - p, b = c + p."""
        floored = self._floored(x)
        return np.sqrt(self.shape / floored), np.sqrt(self.shape * floored) / self._mean

    def _a(self, x: FloatArray) -> FloatArray:
        floored = self._floored(x)
        return np.sqrt(self.shape / floored) * ((floored - self._mean) / self._mean)

    def _floored(self, x: FloatArray) -> FloatArray:
        # Far below this the density is exp(-5e7): no loss is that small, but its reciprocal overflows.
        return np.maximum(x, 1e-8 * self.shape)

    def _cdf(self, x: FloatArray) -> FloatArray:
        p, c = self._ends(x)
        a = self._a(x)
        return np.minimum(special.ndtr(a) + normal_density(a) * mills(c + p), 1.0)

    def _sf(self, x: FloatArray) -> FloatArray:
        p, _ = self._ends(x)
        return _upper(self._a(x), 2.0 * p)

    def _partial_mean(self, x: FloatArray) -> FloatArray:
        """E[X; X <= x] / mean."""
        _, c = self._ends(x)
        return _upper(-self._a(x), 2.0 * c)

    def _pdf(self, x: FloatArray) -> FloatArray:
        floored = self._floored(x)
        return normal_density(self._a(x)) * np.sqrt(self.shape / floored) / floored

    def _ppf(self, q: FloatArray) -> FloatArray:
        return self._inverse(q, 1.0)

    def _isf(self, p: FloatArray) -> FloatArray:
        return self._inverse(p, -1.0)

    def _inverse(self, p: FloatArray, sign: float) -> FloatArray:
        # The half in which the target is small; 1 - p is exact in the other.
        own = p <= 0.5
        result = np.empty(p.shape)
        for chosen, target, slope in ((own, p[own], sign), (~own, 1.0 - p[~own], -sign)):
            tail = self._cdf if slope > 0 else self._sf
            low, high = bracket(tail, target, self._mean, slope)
            result[chosen] = invert_tail(tail, self._pdf, target, low, high, slope)
        return result

    def _limited_mean(self, limit: FloatArray) -> FloatArray:
        return self._mean * self._partial_mean(limit) + limit * self._sf(limit)

    def _limited_second_moment(self, limit: FloatArray) -> FloatArray:
        p, c = self._ends(limit)
        density = normal_density(self._a(limit))
        below = self._cdf(limit) + self._mean / self.shape * self._partial_mean(limit) - 2.0 / p * density
        wide = c < _WIDE_BELOW
        below[wide] = density[wide] * _wide_second(p[wide], c[wide])
        return self._mean**2 * np.maximum(below, 0.0) + limit * (limit * self._sf(limit))

    def _expected_excess(self, x: FloatArray) -> FloatArray:
        p, _ = self._ends(x)
        a = self._a(x)
        low = a < _EDGE
        result = np.empty(x.shape)
        at = x[low]
        result[low] = self._mean - at + at * self._cdf(at) - self._mean * self._partial_mean(at)
        rise = mills_fall_difference(a[~low], 2.0 * p[~low]) / p[~low]
        result[~low] = self._mean * normal_density(a[~low]) * rise
        return result

    def _second_excess(self, x: FloatArray) -> FloatArray:
        p, _ = self._ends(x)
        survival, excess = self._sf(x), self._expected_excess(x)
        above = survival + (excess + x * survival) / self.shape + 2.0 / p * normal_density(self._a(x))
        return np.maximum(self._mean**2 * above - 2.0 * x * excess - x * (x * survival), 0.0)


def _upper(a: FloatArray, width: FloatArray) -> FloatArray:
    """Phi(-a) - phi(a) R(a + width), with a + width >= |a|."""
    low = a < _EDGE
    result = np.empty(a.shape)
    result[low] = special.ndtr(-a[low]) - normal_density(a[low]) * mills(a[low] + width[low])
    result[~low] = normal_density(a[~low]) * mills_difference(a[~low], width[~low])
    return result


def _wide_second(p: FloatArray, c: FloatArray) -> FloatArray:
    """R(p-c) + R(p+c) + (R(p-c) - R(p+c)) / (c p) - 2/p for small c, where it is of order c**2.

    With R(t) the integral of exp(-t u - u**2 / 2) over u > 0, two integrations by parts give
    (2/p) times the integral of exp(-p u - u**2 / 2) ((1 + c**2) sinh(c u) / c - u cosh(c u)), whose
    bracket is c**2 times a series in (c u)**2.
    """

    def integrand(u: FloatArray, rows: slice) -> FloatArray:
        square = (c[rows][:, None] * u) ** 2
        sinh, drop = np.zeros_like(u), np.zeros_like(u)
        for k in range(25, 0, -1):
            # sinh(y) / y - 1, and the sum of 2k / (2k+1)! y**(2k-2), nested, with y = c u
            sinh = (sinh + 1.0) * square / ((2 * k) * (2 * k + 1))
            drop = drop * square / ((2 * k + 2) * (2 * k + 3)) + 2.0 * k
        bracket = u * (1.0 + sinh) - u**3 * drop / 6.0
        return np.asarray(np.exp(-p[rows][:, None] * u - 0.5 * u * u) * bracket)

    reach = np.minimum(13.0, 45.0 / p)
    return 2.0 * c * c / p * interval_integrals(integrand, np.zeros(p.shape), reach, _POINTS)
