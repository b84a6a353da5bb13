"""The log-gamma size: the logarithm above a minimum is gamma distributed, the tail nearly a power.

With y = log(x / minimum) and G(a, z) the upper tail of the gamma law, S(x) = G(shape, rate y). Moments below
x follow by tilting the gamma law, E[X**k; X <= x] = minimum**k (1 - k / rate)**-shape P(shape, (rate - k) y);
where k is at or above the rate the tilted law is no law, and Kummer's function takes over, all of whose terms
are positive (Abramowitz & Stegun 1964, 6.5.12).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np
from scipy import special

from lossagg.arrays import FloatArray, require_positive
from lossagg.families.base import SizeLaw
from lossagg.families.gamma import Gamma


@dataclass(frozen=True, kw_only=True, repr=False)
class LogGamma(SizeLaw):
    """log(X / minimum) is gamma distributed with a shape and a rate; with shape 1 the Pareto law.

    Args:
        shape: of the gamma law, above 0.
        rate: of the gamma law, above 0: the tail index.
        minimum: smallest loss, in units of money, above 0.

    Raises:
        InputError: a parameter that is not above 0 and finite.
    """

    family: ClassVar[str] = "log-gamma"
    shape: float
    rate: float
    minimum: float

    def __post_init__(self) -> None:
        self._settle(
            shape=require_positive(self.shape, "shape"),
            rate=require_positive(self.rate, "rate"),
            minimum=require_positive(self.minimum, "minimum"),
        )

    @property
    def _logs(self) -> Gamma:
        return Gamma(shape=self.shape, scale=1.0 / self.rate)

    def mean(self) -> float:
        """minimum (1 - 1 / rate)**-shape, `inf` for a rate up to 1."""
        return self._moment(1)

    def variance(self) -> float:
        """The variance, `inf` for a rate up to 2."""
        if self.rate <= 2:
            return np.inf
        # log of E[X**2] / E[X]**2, which is near 0 for a large rate.
        gap = self.shape * (2 * np.log1p(-1 / self.rate) - np.log1p(-2 / self.rate))
        return float(self._moment(1) ** 2 * np.expm1(gap))

    def second_moment(self) -> float:
        """The second moment, `inf` for a rate up to 2."""
        return self._moment(2)

    def _moment(self, order: int) -> float:
        if self.rate <= order:
            return np.inf
        return float(self.minimum**order * np.exp(-self.shape * np.log1p(-order / self.rate)))

    @property
    def tail_index(self) -> float:
        """The rate."""
        return self.rate

    @property
    def support(self) -> tuple[float, float]:
        """From the minimum on."""
        return (self.minimum, np.inf)

    def scaled(self, factor: float) -> LogGamma:
        """The minimum times the factor."""
        return LogGamma(
            shape=self.shape, rate=self.rate, minimum=self.minimum * require_positive(factor, "factor")
        )

    def _y(self, x: FloatArray) -> FloatArray:
        """log(x / minimum), 0 below the minimum; accurate just above it."""
        above = np.maximum(x, self.minimum)
        return np.asarray(np.log1p((above - self.minimum) / self.minimum))

    def _cdf(self, x: FloatArray) -> FloatArray:
        return np.asarray(self._logs.cdf(self._y(x)))

    def _sf(self, x: FloatArray) -> FloatArray:
        return np.asarray(self._logs.sf(self._y(x)))

    def _pdf(self, x: FloatArray) -> FloatArray:
        inside = x >= self.minimum
        return np.where(inside, np.asarray(self._logs.pdf(self._y(x))) / np.maximum(x, self.minimum), 0.0)

    def _ppf(self, q: FloatArray) -> FloatArray:
        return self._at(np.asarray(self._logs.ppf(q)))

    def _isf(self, p: FloatArray) -> FloatArray:
        return self._at(np.asarray(self._logs.isf(p)))

    def _at(self, y: FloatArray) -> FloatArray:
        with np.errstate(over="ignore"):
            return np.asarray(self.minimum * np.exp(y))

    def _limited_mean(self, limit: FloatArray) -> FloatArray:
        return self._below(limit, 1) + limit * self._sf(limit)

    def _limited_second_moment(self, limit: FloatArray) -> FloatArray:
        return self._below(limit, 2) + limit * (limit * self._sf(limit))

    def _below(self, x: FloatArray, order: int) -> FloatArray:
        """E[X**order; X <= x]."""
        y, left = self._y(x), self.rate - order
        if left > 1e-3 * order:
            return np.asarray(self._moment(order) * special.gammainc(self.shape, left * y), dtype=np.float64)
        with np.errstate(divide="ignore", over="ignore"):
            level = self.shape * np.log(self.rate * y) - special.gammaln(self.shape + 1)
            grown = special.hyp1f1(self.shape, self.shape + 1, -left * y)
            return np.asarray(self.minimum**order * np.exp(level) * grown)

    def _above(self, x: FloatArray, order: int) -> FloatArray:
        """E[X**order; X > x], for orders whose moment exists."""
        tilted = Gamma(shape=self.shape, scale=1.0 / (self.rate - order))
        return self._moment(order) * np.asarray(tilted.sf(self._y(x)))

    def _expected_excess(self, x: FloatArray) -> FloatArray:
        return np.maximum(self._above(x, 1) - x * self._sf(x), 0.0)

    def _second_excess(self, x: FloatArray) -> FloatArray:
        inner = self._above(x, 2) - 2.0 * x * self._above(x, 1)
        return np.maximum(inner + x * (x * self._sf(x)), 0.0)
