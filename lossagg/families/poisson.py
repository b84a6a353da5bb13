"""The Poisson count: losses that know nothing of each other."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np
from scipy import special

from lossagg.arrays import FloatArray, require_positive, require_probability
from lossagg.families.base import ComplexArray, CountLaw
from lossagg.families.polar import exponential
from lossagg.families.saddle import lower_gamma, poisson_probability


@dataclass(frozen=True, init=False, repr=False)
class Poisson(CountLaw):
    """Losses at a constant rate: variance equal to the mean.

    Args:
        mean: expected number of losses per year, at least 0.

    Raises:
        InputError: a mean below 0, infinite or not a number.
    """

    family: ClassVar[str] = "poisson"
    _mean: float

    def __init__(self, *, mean: float) -> None:
        self._settle(_mean=require_positive(mean, "mean", zero=True))

    def mean(self) -> float:
        """The mean."""
        return self._mean

    def variance(self) -> float:
        """The variance, equal to the mean."""
        return self._mean

    @property
    def recursion(self) -> tuple[float, float]:
        """(0, mean)."""
        return (0.0, self._mean)

    def thinned(self, probability: float) -> Poisson:
        """Poisson with the mean times the probability."""
        return Poisson(mean=self._mean * require_probability(probability, "probability"))

    def with_exposure(self, factor: float) -> Poisson:
        """The mean times the factor: exposure adds independent losses."""
        return Poisson(mean=self._mean * require_positive(factor, "factor"))

    def _pmf(self, n: FloatArray) -> FloatArray:
        if self._mean == 0:
            return np.where(n == 0, 1.0, 0.0)
        return poisson_probability(n, self._mean)

    def _cdf(self, n: FloatArray) -> FloatArray:
        return np.asarray(special.gammaincc(n + 1.0, self._mean))

    def _sf(self, n: FloatArray) -> FloatArray:
        return lower_gamma(n + 1.0, self._mean)

    def _pgf(self, z: ComplexArray) -> ComplexArray:
        return np.asarray(exponential(self._log_pgf(z)))

    def _log_pgf(self, z: ComplexArray) -> ComplexArray:
        logarithm = z - 1.0
        logarithm *= self._mean
        return logarithm
