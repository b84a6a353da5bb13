"""The generalised Pareto size: what exceeds a high threshold, whatever the law below it.

Everything is a function of t = -log S(x) = log(1 + shape y / scale) / shape with y = x - threshold,
which passes smoothly through shape 0 (t = y / scale).

Source: Pickands (1975), Balkema and de Haan (1974) for the law; McNeil, Frey and Embrechts,
Quantitative Risk Management, ch. 5 for its use.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from lossagg.arrays import FloatArray, require_positive
from lossagg.errors import InputError
from lossagg.families.base import SizeLaw
from lossagg.families.power import excess_at, limited_excess, limited_excess_second_moment


@dataclass(frozen=True, kw_only=True, repr=False)
class GeneralizedPareto(SizeLaw):
    """S(x) = (1 + shape (x - threshold) / scale)**(-1 / shape) from the threshold on.

    Args:
        shape: above 0 a power tail of index 1 / shape, 0 the exponential tail, below 0 a largest
            loss at threshold - scale / shape; the mean exists below 1, the variance below 1/2.
        scale: in units of money, above 0.
        threshold: smallest loss, in units of money, at least 0.

    Raises:
        InputError: a shape that is not a finite number, a scale not above 0, a threshold below 0.
    """

    family: ClassVar[str] = "generalized-pareto"
    shape: float
    scale: float
    threshold: float = 0.0

    def __post_init__(self) -> None:
        try:
            shape = float(self.shape)
        except (TypeError, ValueError):
            shape = np.nan
        if isinstance(self.shape, bool) or not np.isfinite(shape):
            raise InputError(
                "shape must be a finite number",
                value=self.shape,
                remedy="Give the shape; 0 is the exponential tail.",
            )
        self._settle(
            shape=shape,
            scale=require_positive(self.scale, "scale"),
            threshold=require_positive(self.threshold, "threshold", zero=True),
        )

    def mean(self) -> float:
        """threshold + scale / (1 - shape), `inf` for a shape from 1 on."""
        return self.threshold + self.scale / (1 - self.shape) if self.shape < 1 else np.inf

    def variance(self) -> float:
        """The variance, `inf` for a shape from 1/2 on."""
        if self.shape >= 0.5:
            return np.inf
        return self.scale**2 / (1 - self.shape) ** 2 / (1 - 2 * self.shape)

    @property
    def tail_index(self) -> float:
        """1 / shape, `inf` for a shape up to 0."""
        return 1 / self.shape if self.shape > 0 else np.inf

    @property
    def support(self) -> tuple[float, float]:
        """(threshold, inf), or up to the largest loss where the shape is below 0."""
        end = self.threshold - self.scale / self.shape if self.shape < 0 else np.inf
        return (self.threshold, end)

    def scaled(self, factor: float) -> GeneralizedPareto:
        """Scale and threshold times the factor."""
        times = require_positive(factor, "factor")
        return GeneralizedPareto(shape=self.shape, scale=self.scale * times, threshold=self.threshold * times)

    def _t(self, x: FloatArray) -> FloatArray:
        """-log S(x): 0 up to the threshold, `inf` from the largest loss on."""
        unit = np.maximum(x - self.threshold, 0.0) / self.scale
        v = self.shape * unit
        near = np.maximum(v, -0.5)
        t = unit * np.where(near == 0, 1.0, np.log1p(near) / np.where(near == 0, 1.0, near))
        if self.shape < 0:  # the distance to the largest loss, exact where 1 + v is not
            room = np.maximum(self.support[1] - x, 0.0) * (-self.shape / self.scale)
            with np.errstate(divide="ignore"):
                t = np.where(v < -0.5, np.log(room) / self.shape, t)
        return t

    def _cdf(self, x: FloatArray) -> FloatArray:
        return -np.expm1(-self._t(x))

    def _sf(self, x: FloatArray) -> FloatArray:
        return np.asarray(np.exp(-self._t(x)))

    def _pdf(self, x: FloatArray) -> FloatArray:
        low, high = self.support
        inside = (x >= low) & (x <= high)
        t = np.where(inside, self._t(x), 0.0)
        with np.errstate(invalid="ignore", over="ignore"):
            density = np.exp(-(1 + self.shape) * t) / self.scale
        at_end = 1 / self.scale if self.shape == -1 else (0.0 if self.shape > -1 else np.inf)
        return np.where(inside, np.where(np.isinf(t), at_end, density), 0.0)

    def _ppf(self, q: FloatArray) -> FloatArray:
        return self.threshold + self.scale * excess_at(self.shape, -np.log1p(-q))

    def _isf(self, p: FloatArray) -> FloatArray:
        return self.threshold + self.scale * excess_at(self.shape, -np.log(p))

    def _limited_mean(self, limit: FloatArray) -> FloatArray:
        t = self._below_end(limit)
        return np.minimum(limit, self.threshold) + self.scale * limited_excess(self.shape, t)

    def _limited_second_moment(self, limit: FloatArray) -> FloatArray:
        t = self._below_end(limit)
        first = limited_excess(self.shape, t)
        second = limited_excess_second_moment(self.shape, t)
        return (
            np.minimum(limit, self.threshold) ** 2
            + 2.0 * self.threshold * self.scale * first
            + self.scale**2 * second
        )

    def _below_end(self, x: FloatArray) -> FloatArray:
        # Any t at which the survival has vanished stands for the end itself.
        return np.minimum(self._t(x), 1e4 * max(1.0, -1.0 / self.shape) if self.shape < 0 else np.inf)

    def _expected_excess(self, x: FloatArray) -> FloatArray:
        below = np.maximum(self.threshold - x, 0.0)
        tail = np.exp((self.shape - 1) * self._t(x)) * (self.scale / (1 - self.shape))
        return np.asarray(below + tail)

    def _second_excess(self, x: FloatArray) -> FloatArray:
        below = np.maximum(self.threshold - x, 0.0)
        first = self.scale / (1 - self.shape)
        tail = 2.0 * first * self.scale / (1 - 2 * self.shape) * np.exp((2 * self.shape - 1) * self._t(x))
        return np.asarray(below**2 + 2.0 * below * first + tail)
