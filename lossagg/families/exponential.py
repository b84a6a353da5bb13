"""The exponential size: no memory, the lightest tail in use."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np
from scipy import special

from lossagg.arrays import FloatArray, require_positive
from lossagg.families.base import SizeLaw


@dataclass(frozen=True, init=False, repr=False)
class Exponential(SizeLaw):
    """S(x) = exp(-x / mean).

    Args:
        mean: in units of money, above 0.

    Raises:
        InputError: a mean that is not above 0 and finite.
    """

    family: ClassVar[str] = "exponential"
    _mean: float

    def __init__(self, *, mean: float) -> None:
        self._settle(_mean=require_positive(mean, "mean"))

    def mean(self) -> float:
        """The mean."""
        return self._mean

    def variance(self) -> float:
        """The squared mean."""
        return self._mean**2

    @property
    def tail_index(self) -> float:
        """`inf`: all moments exist."""
        return np.inf

    def scaled(self, factor: float) -> Exponential:
        """The mean times the factor."""
        return Exponential(mean=self._mean * require_positive(factor, "factor"))

    def _cdf(self, x: FloatArray) -> FloatArray:
        return -np.expm1(-x / self._mean)

    def _sf(self, x: FloatArray) -> FloatArray:
        return np.asarray(np.exp(-x / self._mean))

    def _pdf(self, x: FloatArray) -> FloatArray:
        return self._sf(x) / self._mean

    def _ppf(self, q: FloatArray) -> FloatArray:
        return -self._mean * np.log1p(-q)

    def _isf(self, p: FloatArray) -> FloatArray:
        return -self._mean * np.log(p)

    def _limited_mean(self, limit: FloatArray) -> FloatArray:
        return self._mean * self._cdf(limit)

    def _limited_second_moment(self, limit: FloatArray) -> FloatArray:
        return np.asarray(2.0 * self._mean**2 * special.gammainc(2.0, limit / self._mean))

    def _expected_excess(self, x: FloatArray) -> FloatArray:
        return self._mean * self._sf(x)

    def _second_excess(self, x: FloatArray) -> FloatArray:
        return 2.0 * self._mean**2 * self._sf(x)
