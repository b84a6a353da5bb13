"""The Pareto size, type I: a power tail from a minimum on."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from lossagg.arrays import FloatArray, require_positive
from lossagg.families.base import SizeLaw
from lossagg.families.power import exponential_integral


@dataclass(frozen=True, kw_only=True, repr=False)
class Pareto(SizeLaw):
    """S(x) = (minimum / x)**alpha from the minimum on (type I).

    Args:
        alpha: tail index, above 0; the mean exists above 1, the variance above 2.
        minimum: smallest loss, in units of money, above 0.

    Raises:
        InputError: a parameter that is not above 0 and finite.
    """

    family: ClassVar[str] = "pareto"
    alpha: float
    minimum: float

    def __post_init__(self) -> None:
        self._settle(
            alpha=require_positive(self.alpha, "alpha"), minimum=require_positive(self.minimum, "minimum")
        )

    def mean(self) -> float:
        """alpha minimum / (alpha - 1), `inf` for alpha up to 1."""
        return self.minimum + self.minimum / (self.alpha - 1) if self.alpha > 1 else np.inf

    def variance(self) -> float:
        """The variance, `inf` for alpha up to 2."""
        if self.alpha <= 2:
            return np.inf
        return self.minimum**2 * self.alpha / (self.alpha - 1) ** 2 / (self.alpha - 2)

    @property
    def tail_index(self) -> float:
        """alpha."""
        return self.alpha

    @property
    def support(self) -> tuple[float, float]:
        """(minimum, inf)."""
        return (self.minimum, np.inf)

    def scaled(self, factor: float) -> Pareto:
        """The minimum times the factor."""
        return Pareto(alpha=self.alpha, minimum=self.minimum * require_positive(factor, "factor"))

    def _log(self, x: FloatArray) -> FloatArray:
        """log(x / minimum), 0 below the minimum."""
        return np.asarray(np.log1p(np.maximum(x - self.minimum, 0.0) / self.minimum))

    def _cdf(self, x: FloatArray) -> FloatArray:
        return -np.expm1(-self.alpha * self._log(x))

    def _sf(self, x: FloatArray) -> FloatArray:
        return np.asarray(np.exp(-self.alpha * self._log(x)))

    def _pdf(self, x: FloatArray) -> FloatArray:
        inside = x >= self.minimum
        return np.where(inside, self.alpha * self._sf(x) / np.where(inside, x, 1.0), 0.0)

    def _ppf(self, q: FloatArray) -> FloatArray:
        return self._at(-np.log1p(-q))

    def _isf(self, p: FloatArray) -> FloatArray:
        return self._at(-np.log(p))

    def _at(self, t: FloatArray) -> FloatArray:
        with np.errstate(over="ignore"):
            return np.asarray(self.minimum * np.exp(t / self.alpha))

    def _limited_mean(self, limit: FloatArray) -> FloatArray:
        above = exponential_integral(1 - self.alpha, self._log(limit))
        return np.minimum(limit, self.minimum) + self.minimum * above

    def _limited_second_moment(self, limit: FloatArray) -> FloatArray:
        above = exponential_integral(2 - self.alpha, self._log(limit))
        return np.minimum(limit, self.minimum) ** 2 + 2.0 * self.minimum**2 * above

    def _expected_excess(self, x: FloatArray) -> FloatArray:
        tail = np.exp((1 - self.alpha) * self._log(x)) * self.minimum / (self.alpha - 1)
        return np.asarray(np.maximum(self.minimum - x, 0.0) + tail)

    def _second_excess(self, x: FloatArray) -> FloatArray:
        below = np.maximum(self.minimum - x, 0.0)
        first = self.minimum / (self.alpha - 1)
        tail = 2.0 * first * self.minimum / (self.alpha - 2) * np.exp((2 - self.alpha) * self._log(x))
        return np.asarray(below**2 + 2.0 * below * first + tail)
