"""The negative binomial count: a Poisson count whose rate varies from year to year.

With the rate gamma distributed (mean 1, variance `dispersion`), the count has the generating
function (1 + dispersion * mean * (1 - z))**(-1 / dispersion). Written with log1p, it passes
smoothly into the Poisson as the dispersion vanishes, and its logarithm stays on the principal
branch for |z| <= 1 because the real part inside is at least 1.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np
from scipy import special

from lossagg.arrays import FloatArray, require_positive, require_probability
from lossagg.families.base import ComplexArray, CountLaw
from lossagg.families.poisson import Poisson
from lossagg.families.polar import exponential
from lossagg.families.saddle import binomial_weight

# Below this dispersion per squared count the law and the Poisson agree to the last digit.
_POISSON_BELOW = 1e-18


@dataclass(frozen=True, init=False, repr=False)
class NegativeBinomial(CountLaw):
    """More variable than the Poisson: variance mean + dispersion * mean**2.

    In the notation of Klugman, Panjer and Willmot (Loss Models, ch. 6) r = 1 / dispersion and
    beta = dispersion * mean.

    Args:
        mean: expected number of losses per year, at least 0.
        dispersion: squared coefficient of variation of the yearly rate, at least 0 (0: Poisson).

    Raises:
        InputError: a parameter below 0, infinite or not a number.
    """

    family: ClassVar[str] = "negative-binomial"
    _mean: float
    dispersion: float

    def __init__(self, *, mean: float, dispersion: float) -> None:
        self._settle(
            _mean=require_positive(mean, "mean", zero=True),
            dispersion=require_positive(dispersion, "dispersion", zero=True),
        )

    def mean(self) -> float:
        """The mean."""
        return self._mean

    def variance(self) -> float:
        """mean + dispersion * mean**2."""
        return self._mean + self.dispersion * self._mean**2

    @property
    def recursion(self) -> tuple[float, float]:
        """(beta / (1 + beta), (r - 1) beta / (1 + beta)), in a form that survives dispersion 0."""
        beta = self._mean * self.dispersion
        return (beta / (1 + beta), self._mean * (1 - self.dispersion) / (1 + beta))

    def thinned(self, probability: float) -> NegativeBinomial:
        """The mean times the probability, with the same dispersion: the yearly rate is one for all sizes."""
        share = require_probability(probability, "probability")
        return NegativeBinomial(mean=self._mean * share, dispersion=self.dispersion)

    def with_exposure(self, factor: float) -> NegativeBinomial:
        """The mean times the factor, with the same dispersion.

        This assumes that a bad year is bad for the whole exposure (weather, economy, practice), so
        growth does not average it away. If the variation is each unit's own, the dispersion would
        fall as the exposure grows.
        """
        mean = self._mean * require_positive(factor, "factor")
        return NegativeBinomial(mean=mean, dispersion=self.dispersion)

    def _pmf(self, n: FloatArray) -> FloatArray:
        if self._near_poisson:
            return Poisson(mean=self._mean)._pmf(n)
        r, beta = 1.0 / self.dispersion, self._mean * self.dispersion
        count = np.where(n > 0, n, 1.0)
        total = count + r
        difference = (self._mean - count) / (1 + beta)
        weight = binomial_weight(
            np.full(n.shape, r), count, total / (1 + beta), total * (beta / (1 + beta)), difference
        )
        return np.where(n > 0, r / total * weight, np.exp(-np.log1p(beta) * r))

    def _cdf(self, n: FloatArray) -> FloatArray:
        if self._near_poisson:
            return Poisson(mean=self._mean)._cdf(n)
        r, beta = 1.0 / self.dispersion, self._mean * self.dispersion
        # The smaller of the two complementary arguments keeps its digits.
        if beta < 1:
            return np.asarray(special.betaincc(n + 1.0, r, beta / (1 + beta)))
        return np.asarray(special.betainc(r, n + 1.0, 1 / (1 + beta)))

    def _sf(self, n: FloatArray) -> FloatArray:
        if self._near_poisson:
            return Poisson(mean=self._mean)._sf(n)
        r, beta = 1.0 / self.dispersion, self._mean * self.dispersion
        if beta < 1:
            return np.asarray(special.betainc(n + 1.0, r, beta / (1 + beta)))
        return np.asarray(special.betaincc(r, n + 1.0, 1 / (1 + beta)))

    def _pgf(self, z: ComplexArray) -> ComplexArray:
        return np.asarray(exponential(self._log_pgf(z)))

    def _log_pgf(self, z: ComplexArray) -> ComplexArray:
        if self.dispersion == 0:
            return self._mean * (z - 1.0)
        # log(1 + w) in real arithmetic, twice as fast: |1 + w|**2 - 1 = u (2 + u) + v**2 has no
        # cancellation where u >= 0, that is where Re z <= 1.
        beta = self._mean * self.dispersion
        if not np.iscomplexobj(z) or (z.real > 1.0).any():
            return np.asarray(-special.log1p(beta * (1.0 - z)) / self.dispersion)
        u, v = beta * (1.0 - z.real), -beta * z.imag
        result = np.empty(z.shape, dtype=np.complex128)
        result.real = np.log1p(u * (2.0 + u) + v * v) * (-0.5 / self.dispersion)
        result.imag = np.arctan2(v, 1.0 + u) * (-1.0 / self.dispersion)
        return result

    @property
    def _near_poisson(self) -> bool:
        return self._mean == 0 or self.dispersion * max(self._mean, 1.0) ** 2 < _POISSON_BELOW
