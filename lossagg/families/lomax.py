"""The Lomax size (Pareto type II): a power tail from zero on."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from lossagg.arrays import FloatArray, require_positive
from lossagg.families.base import SizeLaw
from lossagg.families.power import limited_excess, limited_excess_second_moment


@dataclass(frozen=True, kw_only=True, repr=False)
class Lomax(SizeLaw):
    """S(x) = (scale / (scale + x))**alpha (Pareto type II).

    Args:
        alpha: tail index, above 0; the mean exists above 1, the variance above 2.
        scale: in units of money, above 0.

    Raises:
        InputError: a parameter that is not above 0 and finite.
    """

    family: ClassVar[str] = "lomax"
    alpha: float
    scale: float

    def __post_init__(self) -> None:
        self._settle(alpha=require_positive(self.alpha, "alpha"), scale=require_positive(self.scale, "scale"))

    def mean(self) -> float:
        """scale / (alpha - 1), `inf` for alpha up to 1."""
        return self.scale / (self.alpha - 1) if self.alpha > 1 else np.inf

    def variance(self) -> float:
        """The variance, `inf` for alpha up to 2."""
        if self.alpha <= 2:
            return np.inf
        return self.scale**2 * self.alpha / (self.alpha - 1) ** 2 / (self.alpha - 2)

    @property
    def tail_index(self) -> float:
        """alpha."""
        return self.alpha

    def scaled(self, factor: float) -> Lomax:
        """The scale times the factor."""
        return Lomax(alpha=self.alpha, scale=self.scale * require_positive(factor, "factor"))

    def _log(self, x: FloatArray) -> FloatArray:
        return np.asarray(np.log1p(x / self.scale))

    def _cdf(self, x: FloatArray) -> FloatArray:
        return -np.expm1(-self.alpha * self._log(x))

    def _sf(self, x: FloatArray) -> FloatArray:
        return np.asarray(np.exp(-self.alpha * self._log(x)))

    def _pdf(self, x: FloatArray) -> FloatArray:
        return np.asarray(np.exp(-(self.alpha + 1) * self._log(x)) * (self.alpha / self.scale))

    def _ppf(self, q: FloatArray) -> FloatArray:
        return self._at(-np.log1p(-q))

    def _isf(self, p: FloatArray) -> FloatArray:
        return self._at(-np.log(p))

    def _at(self, t: FloatArray) -> FloatArray:
        with np.errstate(over="ignore"):
            return np.asarray(self.scale * np.expm1(t / self.alpha))

    # A Lomax loss is a generalised Pareto excess of shape 1 / alpha and scale `scale` / alpha.

    def _limited_mean(self, limit: FloatArray) -> FloatArray:
        return self.scale / self.alpha * limited_excess(1 / self.alpha, self.alpha * self._log(limit))

    def _limited_second_moment(self, limit: FloatArray) -> FloatArray:
        unit = limited_excess_second_moment(1 / self.alpha, self.alpha * self._log(limit))
        return (self.scale / self.alpha) ** 2 * unit

    def _expected_excess(self, x: FloatArray) -> FloatArray:
        return np.asarray(np.exp((1 - self.alpha) * self._log(x)) * (self.scale / (self.alpha - 1)))

    def _second_excess(self, x: FloatArray) -> FloatArray:
        level = 2.0 * self.scale**2 / ((self.alpha - 1) * (self.alpha - 2))
        return np.asarray(level * np.exp((2 - self.alpha) * self._log(x)))
