"""The log-logistic size: the Burr law with alpha 1, a power tail on both ends."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import ClassVar

from lossagg.arrays import FloatArray, require_positive
from lossagg.families.base import SizeLaw
from lossagg.families.burr import Burr


@dataclass(frozen=True, kw_only=True, repr=False)
class LogLogistic(SizeLaw):
    """S(x) = 1 / (1 + (x / scale)**gamma); the scale is the median.

    Every answer is that of the Burr law with alpha 1.

    Args:
        gamma: tail index, above 0; the mean exists above 1, the variance above 2.
        scale: in units of money, above 0.

    Raises:
        InputError: a parameter that is not above 0 and finite.
    """

    family: ClassVar[str] = "log-logistic"
    gamma: float
    scale: float

    def __post_init__(self) -> None:
        self._settle(gamma=require_positive(self.gamma, "gamma"), scale=require_positive(self.scale, "scale"))

    @cached_property
    def _burr(self) -> Burr:
        return Burr(alpha=1.0, gamma=self.gamma, scale=self.scale)

    def mean(self) -> float:
        """The mean, `inf` for gamma up to 1."""
        return self._burr.mean()

    def variance(self) -> float:
        """The variance, `inf` for gamma up to 2."""
        return self._burr.variance()

    def second_moment(self) -> float:
        """The second moment, `inf` for gamma up to 2."""
        return self._burr.second_moment()

    @property
    def tail_index(self) -> float:
        """gamma."""
        return self.gamma

    def scaled(self, factor: float) -> LogLogistic:
        """The scale times the factor."""
        return LogLogistic(gamma=self.gamma, scale=self.scale * require_positive(factor, "factor"))

    def _cdf(self, x: FloatArray) -> FloatArray:
        return self._burr._cdf(x)

    def _sf(self, x: FloatArray) -> FloatArray:
        return self._burr._sf(x)

    def _pdf(self, x: FloatArray) -> FloatArray:
        return self._burr._pdf(x)

    def _ppf(self, q: FloatArray) -> FloatArray:
        return self._burr._ppf(q)

    def _isf(self, p: FloatArray) -> FloatArray:
        return self._burr._isf(p)

    def _limited_mean(self, limit: FloatArray) -> FloatArray:
        return self._burr._limited_mean(limit)

    def _limited_second_moment(self, limit: FloatArray) -> FloatArray:
        return self._burr._limited_second_moment(limit)

    def _expected_excess(self, x: FloatArray) -> FloatArray:
        return self._burr._expected_excess(x)

    def _second_excess(self, x: FloatArray) -> FloatArray:
        return self._burr._second_excess(x)
