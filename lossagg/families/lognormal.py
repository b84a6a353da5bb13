"""The lognormal size: the logarithm of the loss is normal.

Stop-loss costs are written with the Mills ratio, d phi(z) (R(z - sigma) - R(z)), because the textbook
difference mean * Phi(sigma - z) - d * Phi(-z) cancels in the tail.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np
from scipy import special

from lossagg.arrays import FloatArray, require_positive
from lossagg.errors import InputError
from lossagg.families.base import SizeLaw
from lossagg.families.mills import mills_difference, normal_density


@dataclass(frozen=True, kw_only=True, repr=False)
class Lognormal(SizeLaw):
    """log X is normal with mean mu and standard deviation sigma.

    Args:
        mu: mean of log X, X in units of money; the median is exp(mu).
        sigma: standard deviation of log X, above 0.

    Raises:
        InputError: a mu that is not a finite number, a sigma that is not above 0.
    """

    family: ClassVar[str] = "lognormal"
    mu: float
    sigma: float

    def __post_init__(self) -> None:
        try:
            mu = float(self.mu)
        except (TypeError, ValueError):
            mu = np.nan
        if isinstance(self.mu, bool) or not np.isfinite(mu):
            raise InputError(
                "mu must be a finite number", value=self.mu, remedy="Give the mean of the logarithm."
            )
        self._settle(mu=mu, sigma=require_positive(self.sigma, "sigma"))

    def mean(self) -> float:
        """exp(mu + sigma**2 / 2)."""
        return _exp(self.mu + 0.5 * self.sigma**2)

    def variance(self) -> float:
        """(exp(sigma**2) - 1) mean**2."""
        return _expm1(self.sigma**2) * self.mean() ** 2

    def second_moment(self) -> float:
        """exp(2 mu + 2 sigma**2)."""
        return _exp(2 * self.mu + 2 * self.sigma**2)

    @property
    def tail_index(self) -> float:
        """`inf`: all moments exist."""
        return np.inf

    def scaled(self, factor: float) -> Lognormal:
        """mu moves by log(factor)."""
        return Lognormal(mu=self.mu + np.log(require_positive(factor, "factor")), sigma=self.sigma)

    def _z(self, x: FloatArray) -> FloatArray:
        with np.errstate(divide="ignore"):
            return (np.log(x) - self.mu) / self.sigma

    def _cdf(self, x: FloatArray) -> FloatArray:
        return np.asarray(special.ndtr(self._z(x)))

    def _sf(self, x: FloatArray) -> FloatArray:
        return np.asarray(special.ndtr(-self._z(x)))

    def _pdf(self, x: FloatArray) -> FloatArray:
        positive = np.where(x > 0, x, 1.0)
        return np.where(x > 0, normal_density(self._z(positive)) / self.sigma / positive, 0.0)

    def _ppf(self, q: FloatArray) -> FloatArray:
        return self._at(np.asarray(special.ndtri(q)))

    def _isf(self, p: FloatArray) -> FloatArray:
        return self._at(-np.asarray(special.ndtri(p)))

    def _at(self, z: FloatArray) -> FloatArray:
        with np.errstate(over="ignore"):
            return np.asarray(np.exp(self.mu + self.sigma * z))

    def _limited_mean(self, limit: FloatArray) -> FloatArray:
        z = self._z(limit)
        below = np.exp(self.mu + 0.5 * self.sigma**2 + special.log_ndtr(z - self.sigma))
        return np.asarray(below + limit * special.ndtr(-z))

    def _limited_second_moment(self, limit: FloatArray) -> FloatArray:
        z = self._z(limit)
        below = np.exp(2 * self.mu + 2 * self.sigma**2 + special.log_ndtr(z - 2 * self.sigma))
        # The limit twice, not squared: its square may overflow where the product does not.
        return np.asarray(below + limit * (limit * special.ndtr(-z)))

    def _expected_excess(self, x: FloatArray) -> FloatArray:
        z = self._z(x)
        result = np.zeros(x.shape)
        # Far below the median all of the loss exceeds x: mean - x, whose ratio to x is an exponential.
        low = z < -8.0
        exponent = 0.5 * self.sigma**2 - self.sigma * z[low]
        small = np.minimum(exponent, 1.0)
        result[low] = np.where(exponent < 1.0, x[low] * np.expm1(small), self.mean() - x[low])
        # Where the shifted point leaves the Mills ratio's domain, the mean dwarfs what is subtracted.
        wide = ~low & (z - self.sigma < -8.0)
        above = np.exp(self.mu + 0.5 * self.sigma**2 + special.log_ndtr(self.sigma - z[wide]))
        result[wide] = above - x[wide] * special.ndtr(-z[wide])
        rest = ~low & ~wide
        at = z[rest]
        result[rest] = (
            x[rest] * normal_density(at) * mills_difference(at - self.sigma, np.full(at.shape, self.sigma))
        )
        return result

    def _second_excess(self, x: FloatArray) -> FloatArray:
        s, z = self.sigma, self._z(x)
        result = self.variance() + (self.mean() - x) ** 2  # where all of the loss exceeds x
        wide = (z >= -8.0) & (z - 2 * s < -8.0)
        at, above = z[wide], x[wide]
        result[wide] = (
            np.exp(2 * self.mu + 2 * s * s + special.log_ndtr(2 * s - at))
            - 2.0 * above * np.exp(self.mu + 0.5 * s * s + special.log_ndtr(s - at))
            + above * (above * special.ndtr(-at))
        )
        rest = (z >= -8.0) & ~wide
        at, width = z[rest], np.full(int(rest.sum()), s)
        bend = mills_difference(at - 2 * s, width) - mills_difference(at - s, width)
        result[rest] = x[rest] * (x[rest] * normal_density(at) * bend)
        return result


def _exp(value: float) -> float:
    return float(np.exp(value)) if value < 709.0 else np.inf


def _expm1(value: float) -> float:
    return float(np.expm1(value)) if value < 709.0 else np.inf
