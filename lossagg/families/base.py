"""What every law answers: the protocol of count laws and size laws.

A law is a frozen object. Its public methods take scalars or arrays and hand back the same kind; the
methods a law writes itself (`_sf`, `_isf`, ...) see float64 arrays only. Survival functions and
their inverses are primitives, never one minus something: a far tail of 1e-300 keeps its digits.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Callable
from dataclasses import fields
from typing import Any, ClassVar, Self

import numpy as np
import numpy.typing as npt

from lossagg.arrays import FloatArray, Floats, as_floats, elementwise
from lossagg.errors import InputError

ComplexArray = npt.NDArray[Any]
"""float64 or complex128."""


class Law(ABC):
    """A law with named parameters and a family name."""

    family: ClassVar[str]

    @property
    def parameters(self) -> dict[str, float]:
        """Parameter values by name, as given to the constructor.

        Scalars only: the entries of a table are not parameters. Laws made of laws give dotted names,
        `body.mu` or `part.2.mean`.
        """
        return {name: float(value) for name, value in self._given() if isinstance(value, int | float)}

    def _given(self) -> list[tuple[str, Any]]:
        # A parameter called as a method is (`mean`) is kept in a field with an underscore before it.
        return [(f.name.removeprefix("_"), getattr(self, f.name)) for f in fields(self)]  # type: ignore[arg-type]

    def _settle(self, **values: object) -> None:
        # The one way to write a field of a frozen law: once, while it is made.
        for name, value in values.items():
            object.__setattr__(self, name, value)

    def __repr__(self) -> str:
        shown = ", ".join(f"{name}={_shown(value)}" for name, value in self._given())
        return f"{type(self).__name__}({shown})"

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
    def _pgf(self, z: ComplexArray) -> ComplexArray: ...

    @abstractmethod
    def _log_pgf(self, z: ComplexArray) -> ComplexArray: ...

    @abstractmethod
    def thinned(self, probability: float) -> CountLaw:
        """The law of how many of the losses pass an independent test of this probability.

        With the test "exceeds the threshold" it gives the count above a threshold from the
        ground-up count. The result is a law of the same family where the family is closed.
        """

    @abstractmethod
    def with_exposure(self, factor: float) -> CountLaw:
        """The law of the count when the exposure is `factor` times as large, factor > 0.

        What that does beyond the mean is an assumption; each law states its own.

        Raises:
            InputError: the law does not say how it changes with exposure.
        """

    @property
    def recursion(self) -> tuple[float, float] | None:
        """(a, b) with p(n) = (a + b/n) p(n-1) for n >= 1 (Panjer 1981), or None outside that class."""
        return None

    def pgf(self, z: npt.ArrayLike) -> Any:
        """Probability generating function E[z**N].

        Args:
            z: real or complex, scalar or array, |z| <= 1; beyond 1 as far as the moments allow.

        Returns:
            Of the shape of `z`; real where `z` is real.
        """
        return _generating(self._pgf, z)

    def log_pgf(self, z: npt.ArrayLike) -> Any:
        """A logarithm of `pgf(z)`, accurate where the law has a huge mean and pgf(z) underflows.

        Only its exponential has a meaning: the imaginary part is not unwrapped. For real `z` the
        real logarithm, NaN where the pgf is negative.
        """
        return _generating(self._log_pgf, z)

    def pmf(self, n: Floats) -> FloatArray | float:
        """P(N = n); zero where n is negative or not a whole number."""
        return elementwise(
            lambda x: _within(
                lambda k: np.where(k == np.floor(k), self._pmf(np.floor(k)), 0.0), x, below=0.0, above=0.0
            ),
            n,
            "n",
        )

    def cdf(self, n: Floats) -> FloatArray | float:
        """P(N <= n)."""
        return elementwise(
            lambda x: _within(lambda k: self._cdf(np.floor(k)), x, below=0.0, above=1.0), n, "n"
        )

    def sf(self, n: Floats) -> FloatArray | float:
        """P(N > n), accurate in the far tail."""
        return elementwise(
            lambda x: _within(lambda k: self._sf(np.floor(k)), x, below=1.0, above=0.0), n, "n"
        )


class SizeLaw(Law):
    """The size of one loss: an amount at or above zero.

    The methods a law writes itself see amounts in [0, inf) and probabilities in (0, 1) only, as
    arrays of one dimension, possibly empty; the ends are settled here.
    """

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

    def second_moment(self) -> float:
        """E[X**2]; `inf` where it does not exist."""
        return self.variance() + self.mean() ** 2

    def cdf(self, x: Floats) -> FloatArray | float:
        """P(X <= x)."""
        return elementwise(lambda v: _within(self._cdf, v, below=0.0, above=1.0), x, "x")

    def sf(self, x: Floats) -> FloatArray | float:
        """P(X > x), accurate in the far tail."""
        return elementwise(lambda v: _within(self._sf, v, below=1.0, above=0.0), x, "x")

    def pdf(self, x: Floats) -> FloatArray | float:
        """Density at x; zero outside the support, `inf` where the density has a pole.

        Where a law has atoms, the density is that of the rest: it integrates to one less their
        probabilities, and is zero for a table.
        """
        return elementwise(lambda v: _within(self._pdf, v, below=0.0, above=0.0), x, "x")

    def ppf(self, q: Floats) -> FloatArray | float:
        """The smallest possible x with P(X <= x) >= q, for q in [0, 1]."""
        return elementwise(lambda v: _quantiles(self._ppf, v, "q", self.support), q, "q")

    def isf(self, p: Floats) -> FloatArray | float:
        """The smallest possible x with P(X > x) <= p, for p in [0, 1], accurate for tiny p."""
        return elementwise(lambda v: _quantiles(self._isf, v, "p", self.support[::-1]), p, "p")

    def limited_mean(self, limit: Floats) -> FloatArray | float:
        """E[min(X, limit)], the limited expected value; exists for every law. A limit below 0 counts as 0."""
        return elementwise(
            lambda v: _within(self._limited_mean, v, below=0.0, above=self.mean()), limit, "limit"
        )

    def limited_second_moment(self, limit: Floats) -> FloatArray | float:
        """E[min(X, limit)**2]; a limit below 0 counts as 0."""
        return elementwise(
            lambda v: _within(self._limited_second_moment, v, below=0.0, above=self.second_moment()),
            limit,
            "limit",
        )

    def expected_excess(self, x: Floats) -> FloatArray | float:
        """E[(X - x)+], the stop-loss cost per loss, accurate in the far tail; `inf` where the mean is.

        An x below 0 counts as 0.
        """
        return elementwise(lambda v: self._excess(v, self._expected_excess), x, "x")

    def layer_mean(self, low: Floats, high: Floats) -> FloatArray | float:
        """E[min((X - low)+, high - low)], the cost per loss of the layer from `low` to `high`.

        Accurate for a layer in the far tail, where limited means differ in their last digits only.

        Args:
            low: lower ends, scalar or array, at least 0.
            high: upper ends, of the same shape or broadcast; a layer with high <= low costs nothing.
        """
        lows, highs = np.broadcast_arrays(as_floats(low, "low"), as_floats(high, "high"))
        lower = np.maximum(lows, 0.0)
        upper = np.maximum(highs, lower)
        from_below = np.asarray(self.limited_mean(lower)), np.asarray(self.limited_mean(upper))
        cost = np.zeros(lower.shape)
        np.subtract(from_below[1], from_below[0], out=cost, where=np.isfinite(from_below[0]))
        if np.isfinite(self.mean()):
            from_above = np.asarray(self.expected_excess(lower)), np.asarray(self.expected_excess(upper))
            cost = np.where(from_above[0] < from_below[1], from_above[0] - from_above[1], cost)
        return float(cost) if cost.ndim == 0 else cost

    def mean_excess(self, deductible: Floats) -> FloatArray | float:
        """E[X - d | X > d]; NaN where no loss exceeds d. A deductible below 0 counts as 0."""

        def ratio(d: FloatArray) -> FloatArray:
            survival = np.asarray(self.sf(np.maximum(d, 0.0)))
            excess = np.asarray(self.expected_excess(d))
            out = np.full(d.shape, np.nan)
            np.divide(excess, survival, out=out, where=survival > 0)
            return out

        return elementwise(ratio, deductible, "deductible")

    def loss_elimination_ratio(self, deductible: Floats) -> FloatArray | float:
        """E[min(X, d)] / E[X]: the share of the cost a deductible d removes; 0 where the mean is
        infinite, NaN where it is zero."""
        mean = self.mean()

        def ratio(d: FloatArray) -> FloatArray:
            limited = np.asarray(self.limited_mean(d))
            if not 0 < mean < np.inf:
                return np.where(limited < np.inf, 0.0 if mean else np.nan, np.nan)
            return limited / mean

        return elementwise(ratio, deductible, "deductible")

    def _excess(self, x: FloatArray, function: Callable[[FloatArray], FloatArray]) -> FloatArray:
        mean = self.mean()
        if mean == np.inf:
            return np.full(x.shape, np.inf)
        return _within(function, x, below=mean, above=0.0)


def _within(
    function: Callable[[FloatArray], FloatArray], x: FloatArray, *, below: float, above: float
) -> FloatArray:
    """Apply a function to the amounts in [0, inf), and set the values below 0 and at infinity."""
    result = np.where(x < 0, below, above)
    inside = (x >= 0) & (x < np.inf)
    result[inside] = function(x[inside])
    return result


def _quantiles(
    function: Callable[[FloatArray], FloatArray], p: FloatArray, name: str, ends: tuple[float, float]
) -> FloatArray:
    """Apply a quantile function to the probabilities in (0, 1), and set the values at 0 and 1."""
    if ((p < 0) | (p > 1)).any():
        raise InputError(
            f"{name} must lie between 0 and 1",
            value=float(p[(p < 0) | (p > 1)][0]),
            remedy="Levels are probabilities: write 0.995 for 99.5 %.",
        )
    result = np.where(p == 0, *ends)
    inside = (p > 0) & (p < 1)
    result[inside] = function(p[inside])
    return result


def _generating(function: Callable[[ComplexArray], ComplexArray], z: npt.ArrayLike) -> Any:
    array = np.asarray(z)
    array = array.astype(np.complex128 if np.iscomplexobj(array) else np.float64)
    result = function(np.atleast_1d(array))
    return result[0].item() if array.ndim == 0 else result.reshape(array.shape)


def _shown(value: object) -> str:
    if isinstance(value, tuple) and len(value) > 6:
        return f"({', '.join(repr(entry) for entry in value[:3])}, ... {len(value) - 3} more)"
    return repr(value)
