"""What every size law answers.

Upper partial moments (`expected_excess`, `second_excess`) are primitives beside the limited ones: a
layer in the far tail is the difference of two small numbers, not of two nearly equal large ones.
"""

from __future__ import annotations

from abc import abstractmethod
from collections.abc import Callable
from typing import Self

import numpy as np

from lossagg.arrays import FloatArray, Floats, as_floats, elementwise
from lossagg.errors import InputError
from lossagg.families.law import Law, within


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
    def _second_excess(self, x: FloatArray) -> FloatArray: ...

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
        return elementwise(lambda v: within(self._cdf, v, below=0.0, above=1.0), x, "x")

    def sf(self, x: Floats) -> FloatArray | float:
        """P(X > x), accurate in the far tail."""
        return elementwise(lambda v: within(self._sf, v, below=1.0, above=0.0), x, "x")

    def pdf(self, x: Floats) -> FloatArray | float:
        """Density at x; zero outside the support, `inf` where the density has a pole.

        Where a law has atoms, the density is that of the rest: it integrates to one less their
        probabilities, and is zero for a table.
        """
        return elementwise(lambda v: within(self._pdf, v, below=0.0, above=0.0), x, "x")

    def ppf(self, q: Floats) -> FloatArray | float:
        """The smallest possible x with P(X <= x) >= q, for q in [0, 1]."""
        return elementwise(lambda v: _quantiles(self._ppf, v, "q", self.support), q, "q")

    def isf(self, p: Floats) -> FloatArray | float:
        """The smallest possible x with P(X > x) <= p, for p in [0, 1], accurate for tiny p."""
        return elementwise(lambda v: _quantiles(self._isf, v, "p", self.support[::-1]), p, "p")

    def limited_mean(self, limit: Floats) -> FloatArray | float:
        """E[min(X, limit)], the limited expected value; exists for every law. A limit below 0 counts as 0."""
        return elementwise(
            lambda v: within(self._limited_mean, v, below=0.0, above=self.mean()), limit, "limit"
        )

    def limited_second_moment(self, limit: Floats) -> FloatArray | float:
        """E[min(X, limit)**2]; a limit below 0 counts as 0."""
        return elementwise(
            lambda v: within(self._limited_second_moment, v, below=0.0, above=self.second_moment()),
            limit,
            "limit",
        )

    def expected_excess(self, x: Floats) -> FloatArray | float:
        """E[(X - x)+], the stop-loss cost per loss, accurate in the far tail; `inf` where the mean is.

        An x below 0 counts as 0.
        """
        return elementwise(lambda v: _upper(self._expected_excess, v, self.mean()), x, "x")

    def second_excess(self, x: Floats) -> FloatArray | float:
        """E[((X - x)+)**2], accurate in the far tail; `inf` where the variance is.

        An x below 0 counts as 0.
        """

        def bounded(v: FloatArray) -> FloatArray:
            # By Jensen's inequality never below (E[(X - x)+])**2 / P(X > x): rounding may say otherwise.
            survival, excess = self._sf(v), self._expected_excess(v)
            with np.errstate(divide="ignore", invalid="ignore"):
                least = np.where(survival > 0, excess * (excess / survival), 0.0)
            return np.maximum(self._second_excess(v), least)

        return elementwise(lambda v: _upper(bounded, v, self.second_moment()), x, "x")

    def layer_mean(self, low: Floats, high: Floats = np.inf) -> FloatArray | float:
        """E[min((X - low)+, high - low)], the cost per loss of the layer from `low` to `high`.

        Accurate for thin layers and for layers in the far tail, where limited means differ in their
        last digits only. `inf` where the layer has no top and the mean does not exist.

        Args:
            low: lower ends, scalar or array, at least 0.
            high: upper ends, of the same shape or broadcast; a layer with high <= low costs nothing.
        """

        def cost(lower: FloatArray, upper: FloatArray) -> FloatArray:
            below = np.asarray(self.limited_mean(upper))
            from_below = np.asarray(below - self.limited_mean(lower))
            if not np.isfinite(self.mean()):
                return from_below
            above = np.asarray(self.expected_excess(lower))
            return np.where(above < below, above - self.expected_excess(upper), from_below)

        return self._layer(cost, 1, low, high)

    def layer_second_moment(self, low: Floats, high: Floats = np.inf) -> FloatArray | float:
        """E[min((X - low)+, high - low)**2], with the arguments and the care of `layer_mean`."""

        def cost(lower: FloatArray, upper: FloatArray) -> FloatArray:
            below = np.asarray(self.limited_second_moment(upper))
            width = np.where(np.isfinite(upper), upper - lower, 0.0)
            slice_ = np.asarray(self.layer_mean(lower, upper))
            with np.errstate(invalid="ignore"):
                from_below = below - np.asarray(self.limited_second_moment(lower)) - 2.0 * lower * slice_
            from_below = np.where(np.isinf(below), np.inf, from_below)
            if not np.isfinite(self.variance()):
                return from_below
            above = np.asarray(self.second_excess(lower))
            rest = np.asarray(self.second_excess(upper)) + 2.0 * width * np.asarray(
                self.expected_excess(upper)
            )
            return np.where(above < below, above - rest, from_below)

        return self._layer(cost, 2, low, high)

    def _layer(
        self, cost: Callable[[FloatArray, FloatArray], FloatArray], order: int, low: Floats, high: Floats
    ) -> FloatArray | float:
        """A layer's cost, kept between what its top and its bottom survival allow."""
        lows, highs = np.broadcast_arrays(as_floats(low, "low"), as_floats(high, "high"))
        lower = np.atleast_1d(np.maximum(lows, 0.0))
        upper = np.maximum(np.atleast_1d(highs), lower)
        result = np.zeros(lower.shape)
        some = upper > lower
        bottom, top = lower[some], upper[some]
        with np.errstate(over="ignore", invalid="ignore"):
            width = (top - bottom) ** order
            least = np.where(np.isfinite(top), width * np.asarray(self.sf(top)), 0.0)
            most = np.where(np.isfinite(top), width * np.asarray(self.sf(bottom)), np.inf)
        result[some] = np.clip(cost(bottom, top), least, most)
        return float(result[0]) if lows.ndim == 0 else result.reshape(lows.shape)

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


def _upper(function: Callable[[FloatArray], FloatArray], x: FloatArray, whole: float) -> FloatArray:
    """Apply an upper partial moment to the amounts above 0; `whole` is its value at 0."""
    if whole == np.inf:
        return np.full(x.shape, np.inf)
    return within(function, x, below=whole, above=0.0)


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
