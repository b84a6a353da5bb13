"""What every law answers: the protocol of count laws and size laws.

A law is a frozen object. Its public methods take scalars or arrays and hand back the same kind; the
methods a law writes itself (`_sf`, `_isf`, ...) see float64 arrays only. Survival functions and
their inverses are primitives, never one minus something: a far tail of 1e-300 keeps its digits.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from dataclasses import fields
from typing import ClassVar, Self

import numpy as np

from lossagg.arrays import FloatArray, Floats, as_floats, elementwise
from lossagg.errors import InputError


class Law(ABC):
    """A law with named parameters and a family name."""

    family: ClassVar[str]

    @property
    def parameters(self) -> dict[str, float]:
        """Parameter values by name, as given to the constructor (scalars only)."""
        values = {field.name: getattr(self, field.name) for field in fields(self)}  # type: ignore[arg-type]
        return {name: float(value) for name, value in values.items() if isinstance(value, int | float)}

    @abstractmethod
    def mean(self) -> float:
        """The mean; `inf` where it does not exist."""

    @abstractmethod
    def variance(self) -> float:
        """The variance; `inf` where it does not exist."""

    def sd(self) -> float:
        """The standard deviation; `inf` where it does not exist."""
        return float(np.sqrt(self.variance()))


class CountLaw(Law):
    """The number of losses in a year."""

    @abstractmethod
    def _pmf(self, n: FloatArray) -> FloatArray: ...

    @abstractmethod
    def _cdf(self, n: FloatArray) -> FloatArray: ...

    @abstractmethod
    def _sf(self, n: FloatArray) -> FloatArray: ...

    @abstractmethod
    def pgf(self, z: Floats) -> np.ndarray:
        """Probability generating function E[z**N], for real or complex z with |z| <= 1 (and beyond
        1 as far as the law's moments allow), elementwise."""

    @abstractmethod
    def thinned(self, probability: float) -> CountLaw:
        """The law of how many of the losses pass an independent test of this probability.

        With the test "exceeds the threshold" it gives the count above a threshold from the
        ground-up count. The result is a law of the same family where the family is closed.
        """

    @property
    def recursion(self) -> tuple[float, float] | None:
        """(a, b) with p(n) = (a + b/n) p(n-1) for n >= 1 (Panjer 1981), or None outside that class."""
        return None

    def pmf(self, n: Floats) -> FloatArray | float:
        """P(N = n); zero where n is negative or not a whole number."""
        return elementwise(
            lambda x: np.where((x >= 0) & (x == np.floor(x)), self._pmf(np.maximum(np.floor(x), 0)), 0.0),
            n,
            "n",
        )

    def cdf(self, n: Floats) -> FloatArray | float:
        """P(N <= n)."""
        return elementwise(lambda x: np.where(x < 0, 0.0, self._cdf(np.maximum(np.floor(x), 0))), n, "n")

    def sf(self, n: Floats) -> FloatArray | float:
        """P(N > n), accurate in the far tail."""
        return elementwise(lambda x: np.where(x < 0, 1.0, self._sf(np.maximum(np.floor(x), 0))), n, "n")


class SizeLaw(Law):
    """The size of one loss: an amount at or above zero."""

    @abstractmethod
    def _cdf(self, x: FloatArray) -> FloatArray: ...

    @abstractmethod
    def _sf(self, x: FloatArray) -> FloatArray: ...

    @abstractmethod
    def _pdf(self, x: FloatArray) -> FloatArray: ...

    @abstractmethod
    def _ppf(self, q: FloatArray) -> FloatArray: ...

    @abstractmethod
    def _isf(self, p: FloatArray) -> FloatArray: ...

    @abstractmethod
    def _limited_mean(self, limit: FloatArray) -> FloatArray: ...

    @abstractmethod
    def _limited_second_moment(self, limit: FloatArray) -> FloatArray: ...

    @abstractmethod
    def _expected_excess(self, x: FloatArray) -> FloatArray: ...

    @abstractmethod
    def scaled(self, factor: float) -> Self:
        """The law of `factor` times the loss, factor > 0: a trend, or another currency."""

    @property
    @abstractmethod
    def tail_index(self) -> float:
        """The moment order at which moments stop existing: E[X**k] is finite for k below it.
        `inf` for laws with all moments."""

    @property
    def support(self) -> tuple[float, float]:
        """Smallest and largest possible loss."""
        return (0.0, np.inf)

    @property
    def breakpoints(self) -> tuple[float, ...]:
        """Amounts at which the density jumps or has a kink: splice points, ends of the support."""
        low, high = self.support
        return tuple(point for point in (low, high) if 0 < point < np.inf)

    @property
    def atoms(self) -> tuple[tuple[float, float], ...]:
        """(amount, probability) of every amount that has a probability of its own."""
        return ()

    def cdf(self, x: Floats) -> FloatArray | float:
        """P(X <= x)."""
        return elementwise(self._cdf, x, "x")

    def sf(self, x: Floats) -> FloatArray | float:
        """P(X > x), accurate in the far tail."""
        return elementwise(self._sf, x, "x")

    def pdf(self, x: Floats) -> FloatArray | float:
        """Density at x; zero outside the support."""
        return elementwise(self._pdf, x, "x")

    def ppf(self, q: Floats) -> FloatArray | float:
        """The smallest x with P(X <= x) >= q, for q in [0, 1]."""
        return elementwise(lambda p: self._ppf(_probabilities(p, "q")), q, "q")

    def isf(self, p: Floats) -> FloatArray | float:
        """The smallest x with P(X > x) <= p, for p in [0, 1], accurate for tiny p."""
        return elementwise(lambda q: self._isf(_probabilities(q, "p")), p, "p")

    def limited_mean(self, limit: Floats) -> FloatArray | float:
        """E[min(X, limit)], the limited expected value; exists for every law."""
        return elementwise(lambda x: self._limited_mean(np.maximum(x, 0.0)), limit, "limit")

    def limited_second_moment(self, limit: Floats) -> FloatArray | float:
        """E[min(X, limit)**2]."""
        return elementwise(lambda x: self._limited_second_moment(np.maximum(x, 0.0)), limit, "limit")

    def expected_excess(self, x: Floats) -> FloatArray | float:
        """E[(X - x)+], the stop-loss cost per loss, accurate in the far tail; `inf` where the mean is."""
        return elementwise(lambda d: self._expected_excess(np.maximum(d, 0.0)), x, "x")

    def mean_excess(self, deductible: Floats) -> FloatArray | float:
        """E[X - d | X > d]; NaN where no loss exceeds d."""

        def ratio(d: FloatArray) -> FloatArray:
            survival = self._sf(d)
            with np.errstate(divide="ignore", invalid="ignore"):
                return np.where(survival > 0, self._expected_excess(d) / survival, np.nan)

        return elementwise(ratio, deductible, "deductible")

    def loss_elimination_ratio(self, deductible: Floats) -> FloatArray | float:
        """E[min(X, d)] / E[X]: the share of the cost a deductible d removes; 0 where the mean is infinite."""
        return elementwise(
            lambda d: self._limited_mean(np.maximum(d, 0.0)) / self.mean(), deductible, "deductible"
        )


def _probabilities(values: FloatArray, name: str) -> FloatArray:
    if ((values < 0) | (values > 1)).any():
        outside = values[(values < 0) | (values > 1)]
        raise InputError(
            f"{name} must lie between 0 and 1",
            value=float(outside[0]),
            remedy="Levels are probabilities: write 0.995 for 99.5 %.",
        )
    return as_floats(values, name)
