"""The Burr size (type XII): a power tail with a free shape near zero.

Limited moments are incomplete beta functions where the moment exists. Where it does not, the second
argument of the beta function is not positive; the integral is then taken as a series up to x = scale
and by Gauss-Legendre panels in log x above, where the integrand is an exponential times a factor that
settles quickly at 1.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np
from scipy import special

from lossagg.arrays import FloatArray, require_positive
from lossagg.families.base import SizeLaw
from lossagg.families.power import exponential_integral
from lossagg.families.quadrature import interval_integrals

_PANEL, _PANELS, _POINTS = 2.0, 20, 24


@dataclass(frozen=True, kw_only=True, repr=False)
class Burr(SizeLaw):
    """S(x) = (1 + (x / scale)**gamma)**-alpha.

    Args:
        alpha: above 0.
        gamma: above 0; the tail index is alpha * gamma.
        scale: in units of money, above 0.

    Raises:
        InputError: a parameter that is not above 0 and finite.
    """

    family: ClassVar[str] = "burr"
    alpha: float
    gamma: float
    scale: float

    def __post_init__(self) -> None:
        self._settle(
            alpha=require_positive(self.alpha, "alpha"),
            gamma=require_positive(self.gamma, "gamma"),
            scale=require_positive(self.scale, "scale"),
        )

    def mean(self) -> float:
        """The mean, `inf` for alpha * gamma up to 1."""
        return self._moment(1)

    def variance(self) -> float:
        """The variance, `inf` for alpha * gamma up to 2."""
        return self._moment(2) - self._moment(1) ** 2 if self.tail_index > 2 else np.inf

    def second_moment(self) -> float:
        """The second moment, `inf` for alpha * gamma up to 2."""
        return self._moment(2)

    def _moment(self, order: int) -> float:
        if self.tail_index <= order:
            return np.inf
        b = order / self.gamma
        return self.scale**order * self.alpha * float(special.beta(1 + b, self.alpha - b))

    @property
    def tail_index(self) -> float:
        """alpha * gamma."""
        return self.alpha * self.gamma

    def scaled(self, factor: float) -> Burr:
        """The scale times the factor."""
        times = require_positive(factor, "factor")
        return Burr(alpha=self.alpha, gamma=self.gamma, scale=self.scale * times)

    def _log(self, x: FloatArray) -> FloatArray:
        """log((x / scale)**gamma)."""
        with np.errstate(divide="ignore"):
            return self.gamma * np.log(x / self.scale)

    def _cdf(self, x: FloatArray) -> FloatArray:
        return -np.expm1(-self.alpha * np.logaddexp(0.0, self._log(x)))

    def _sf(self, x: FloatArray) -> FloatArray:
        return np.asarray(np.exp(-self.alpha * np.logaddexp(0.0, self._log(x))))

    def _pdf(self, x: FloatArray) -> FloatArray:
        y = self._log(np.where(x > 0, x, self.scale))
        level = self.alpha * self.gamma / self.scale
        density = level * np.exp((1 - 1 / self.gamma) * y - (self.alpha + 1) * np.logaddexp(0.0, y))
        at_zero = np.inf if self.gamma < 1 else (level if self.gamma == 1 else 0.0)
        return np.where(x > 0, density, at_zero)

    def _ppf(self, q: FloatArray) -> FloatArray:
        return self._at(-np.log1p(-q))

    def _isf(self, p: FloatArray) -> FloatArray:
        return self._at(-np.log(p))

    def _at(self, t: FloatArray) -> FloatArray:
        rise = t / self.alpha
        with np.errstate(over="ignore", divide="ignore"):
            return np.asarray(self.scale * np.exp((rise + np.log(-np.expm1(-rise))) / self.gamma))

    def _limited_mean(self, limit: FloatArray) -> FloatArray:
        return self.scale * self._limited(limit, 1)

    def _limited_second_moment(self, limit: FloatArray) -> FloatArray:
        return self.scale**2 * self._limited(limit, 2)

    def _limited(self, limit: FloatArray, order: int) -> FloatArray:
        """E[min(X, limit)**order] at scale 1: b times the integral of v**(b-1) (1+v)**-alpha."""
        b = order / self.gamma
        rest = self.alpha - b
        y = self._log(limit)
        if rest <= 0.1:
            return np.where(y <= 0, self._series(np.minimum(y, 0.0), b), self._panels(np.maximum(y, 0.0), b))
        upper = special.expit(-y)
        with np.errstate(under="ignore"):
            share = np.where(
                y <= 0, special.betainc(b, rest, special.expit(y)), special.betaincc(rest, b, upper)
            )
        return b * float(special.beta(b, rest)) * share

    def _series(self, y: FloatArray, b: float) -> FloatArray:
        # v**b S 2F1(alpha, 1; 1 + b; u) with u = v / (1 + v) <= 1/2: every term positive.
        u = special.expit(y)
        total = np.ones_like(u)
        term = np.ones_like(u)
        for k in range(200):
            term = term * u * ((self.alpha + k) / (1 + b + k))
            total = total + term
        return np.asarray(np.exp(b * y - self.alpha * np.logaddexp(0.0, y)) * total)

    def _panels(self, y: FloatArray, b: float) -> FloatArray:
        growth = b - self.alpha
        end = _PANEL * _PANELS

        def integrand(u: FloatArray, _: slice) -> FloatArray:
            return np.asarray(np.exp(growth * u - self.alpha * np.log1p(np.exp(-u))))

        knots = _PANEL * np.arange(_PANELS + 1.0)
        whole = np.concatenate(
            [[0.0], np.cumsum(interval_integrals(integrand, knots[:-1], np.diff(knots), _POINTS))]
        )
        reach = np.minimum(y, end)
        panel = np.minimum((reach / _PANEL).astype(np.int64), _PANELS - 1)
        start = knots[panel]
        part = whole[panel] + interval_integrals(integrand, start, reach - start, _POINTS)
        with np.errstate(over="ignore"):
            beyond = np.exp(growth * end) * exponential_integral(growth, np.maximum(y - end, 0.0))
        return np.asarray(self._series(np.zeros(1), b) + b * (part + beyond))

    def _expected_excess(self, x: FloatArray) -> FloatArray:
        return self.mean() * self._upper_share(x, 1)

    def _second_excess(self, x: FloatArray) -> FloatArray:
        above = self.second_moment() * self._upper_share(x, 2)
        return np.maximum(above - 2.0 * x * self._expected_excess(x), 0.0)

    def _upper_share(self, x: FloatArray, order: int) -> FloatArray:
        """The share of E[X**order] that `order` times the integral of y**(order-1) S(y) over (x, inf) is."""
        b = order / self.gamma
        rest = self.alpha - b
        y = self._log(x)
        low = special.betaincc(b, rest, special.expit(y))
        return np.where(y <= 0, low, special.betainc(rest, b, special.expit(-y)))
