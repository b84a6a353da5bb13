"""The Weibull size: heavier than exponential below shape 1, lighter above."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np
from scipy import special

from lossagg.arrays import FloatArray, require_positive
from lossagg.families.base import SizeLaw


@dataclass(frozen=True, kw_only=True, repr=False)
class Weibull(SizeLaw):
    """S(x) = exp(-(x / scale)**shape).

    Args:
        shape: above 0; below 1 the tail is heavier than exponential.
        scale: in units of money, above 0.

    Raises:
        InputError: a parameter that is not above 0 and finite.
    """

    family: ClassVar[str] = "weibull"
    shape: float
    scale: float

    def __post_init__(self) -> None:
        self._settle(shape=require_positive(self.shape, "shape"), scale=require_positive(self.scale, "scale"))

    def mean(self) -> float:
        """scale Gamma(1 + 1/shape)."""
        return self.scale * float(special.gamma(1 + 1 / self.shape))

    def variance(self) -> float:
        """scale**2 (Gamma(1 + 2/shape) - Gamma(1 + 1/shape)**2)."""
        return self.mean() ** 2 * _squared_variation(1 / self.shape)

    def second_moment(self) -> float:
        """scale**2 Gamma(1 + 2/shape)."""
        return self.scale**2 * float(special.gamma(1 + 2 / self.shape))

    @property
    def tail_index(self) -> float:
        """`inf`: all moments exist."""
        return np.inf

    def scaled(self, factor: float) -> Weibull:
        """The scale times the factor."""
        return Weibull(shape=self.shape, scale=self.scale * require_positive(factor, "factor"))

    def _t(self, x: FloatArray) -> FloatArray:
        with np.errstate(over="ignore"):
            return np.asarray((x / self.scale) ** self.shape)

    def _cdf(self, x: FloatArray) -> FloatArray:
        return -np.expm1(-self._t(x))

    def _sf(self, x: FloatArray) -> FloatArray:
        return np.asarray(np.exp(-self._t(x)))

    def _pdf(self, x: FloatArray) -> FloatArray:
        with np.errstate(divide="ignore", over="ignore", invalid="ignore"):
            slope = (x / self.scale) ** (self.shape - 1) * (self.shape / self.scale)
            survival = self._sf(x)
            return np.where(survival == 0, 0.0, slope * survival)

    def _ppf(self, q: FloatArray) -> FloatArray:
        return self._at(-np.log1p(-q))

    def _isf(self, p: FloatArray) -> FloatArray:
        return self._at(-np.log(p))

    def _at(self, t: FloatArray) -> FloatArray:
        with np.errstate(over="ignore"):
            return np.asarray(self.scale * t ** (1 / self.shape))

    def _limited_mean(self, limit: FloatArray) -> FloatArray:
        t = self._t(limit)
        below = self.mean() * special.gammainc(1 + 1 / self.shape, t)
        return np.asarray(below + limit * np.exp(-t))

    def _limited_second_moment(self, limit: FloatArray) -> FloatArray:
        t = self._t(limit)
        below = self.second_moment() * special.gammainc(1 + 2 / self.shape, t)
        return np.asarray(below + limit * (limit * np.exp(-t)))

    def _expected_excess(self, x: FloatArray) -> FloatArray:
        # The recurrence of the incomplete gamma function takes x S(x) out of the difference.
        return np.asarray(self.mean() * special.gammaincc(1 / self.shape, self._t(x)))

    def _second_excess(self, x: FloatArray) -> FloatArray:
        above = self.second_moment() * special.gammaincc(2 / self.shape, self._t(x))
        return np.maximum(above - 2.0 * x * self._expected_excess(x), 0.0)


def _squared_variation(inverse: float) -> float:
    """Gamma(1 + 2y) / Gamma(1 + y)**2 - 1; for small y from the series of log Gamma (zeta values),
    because the quotient is then 1 to many digits."""
    if inverse > 0.2:
        return float(
            np.expm1(min(special.gammaln(1 + 2 * inverse) - 2 * special.gammaln(1 + inverse), 700.0))
        )
    k = np.arange(2, 60)
    terms = special.zeta(k.astype(float)) * (-inverse) ** k * (2.0**k - 2) / k
    return float(np.expm1(terms.sum()))
