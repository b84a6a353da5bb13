"""Counts whose probability of no loss is their own: zero-modified and zero-inflated laws.

The generating function is (1 - c) + c P(z) with P that of the base and c = (1 - p0) / (1 - P(0)): above 1
where years without a loss are rarer than the base has them, below 1 where they are more frequent. In that
form thinning and tails are those of the base times c (Klugman, Panjer & Willmot, Loss Models, the class
(a, b, 1)).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from lossagg.arrays import FloatArray, require_positive, require_probability
from lossagg.errors import InputError
from lossagg.families.base import ComplexArray, CountLaw


@dataclass(frozen=True, kw_only=True, repr=False)
class ZeroModified(CountLaw):
    """A base law with the probability of no loss set to a value; the other probabilities keep their ratios.

    A zero probability of 0 gives the zero-truncated law. For a share of years that cannot have a loss use
    `ZeroInflated`.

    Args:
        base: a count law that is not always 0.
        zero_probability: P(N = 0), at least 0 and below 1.

    Raises:
        InputError: a base that is no count law or always 0, a probability out of range.
    """

    family: ClassVar[str] = "zero-modified"
    base: CountLaw
    zero_probability: float

    def __post_init__(self) -> None:
        _require_base(self.base)
        self._settle(
            zero_probability=require_probability(self.zero_probability, "zero_probability", open_high=True)
        )

    @property
    def parameters(self) -> dict[str, float]:
        """base.* and zero_probability."""
        named = {f"base.{name}": value for name, value in self.base.parameters.items()}
        return {**named, "zero_probability": self.zero_probability}

    @property
    def _share(self) -> float:
        """c: the weight of the base."""
        return (1.0 - self.zero_probability) / float(self.base.sf(0))

    def mean(self) -> float:
        """c times the mean of the base."""
        return self._share * self.base.mean()

    def variance(self) -> float:
        """c times the second moment of the base, less the squared mean."""
        second = self.base.variance() + self.base.mean() ** 2
        return max(self._share * second - self.mean() ** 2, 0.0)

    def thinned(self, probability: float) -> CountLaw:
        """The base thinned, with the same weight."""
        share = require_probability(probability, "probability")
        return self._with_base(self.base.thinned(share))

    def with_exposure(self, factor: float) -> CountLaw:
        """The base at the exposure, with the same weight: the years set apart stay as many.

        Raises:
            InputError: a base that does not say, or a weight above 1 that would leave a negative
                probability of no loss.
        """
        return self._with_base(self.base.with_exposure(require_positive(factor, "factor")))

    def _with_base(self, base: CountLaw) -> CountLaw:
        if float(base.sf(0)) == 0.0:
            return base  # nothing is left to happen
        zero = 1.0 - self._share * float(base.sf(0))
        if zero < -1e-12:
            raise InputError(
                "the law does not exist at this exposure: the probability of no loss would be negative",
                value=zero,
                remedy="A law with fewer years without loss than its base cannot grow that far.",
            )
        return ZeroModified(base=base, zero_probability=min(max(zero, 0.0), 1.0 - 1e-16))

    def _pmf(self, n: FloatArray) -> FloatArray:
        return np.where(n == 0, self.zero_probability, self._share * np.asarray(self.base.pmf(n)))

    def _cdf(self, n: FloatArray) -> FloatArray:
        return np.asarray(np.minimum(self.zero_probability + self._share * self._positive(n), 1.0))

    def _positive(self, n: FloatArray) -> FloatArray:
        """P(1 <= base <= n), from the side where it is small."""
        upper = np.asarray(self.base.sf(0)) - np.asarray(self.base.sf(n))
        lower = np.asarray(self.base.cdf(n)) - np.asarray(self.base.pmf(0.0))
        return np.asarray(np.maximum(np.where(np.asarray(self.base.sf(n)) < 0.5, upper, lower), 0.0))

    def _sf(self, n: FloatArray) -> FloatArray:
        return np.asarray(np.minimum(self._share * np.asarray(self.base.sf(n)), 1.0))

    def _pgf(self, z: ComplexArray) -> ComplexArray:
        return np.asarray((1.0 - self._share) + self._share * np.asarray(self.base.pgf(z)))

    def _log_pgf(self, z: ComplexArray) -> ComplexArray:
        return _shared_log_pgf(self.base, self._share, z)


@dataclass(frozen=True, kw_only=True, repr=False)
class ZeroInflated(CountLaw):
    """A share of years in which nothing can happen, and the base law in the others.

    Args:
        base: a count law that is not always 0.
        extra_zeros: share of years set apart, at least 0 and below 1.

    Raises:
        InputError: a base that is no count law or always 0, a share out of range.
    """

    family: ClassVar[str] = "zero-inflated"
    base: CountLaw
    extra_zeros: float

    def __post_init__(self) -> None:
        _require_base(self.base)
        self._settle(extra_zeros=require_probability(self.extra_zeros, "extra_zeros", open_high=True))

    @property
    def parameters(self) -> dict[str, float]:
        """base.* and extra_zeros."""
        named = {f"base.{name}": value for name, value in self.base.parameters.items()}
        return {**named, "extra_zeros": self.extra_zeros}

    @property
    def _share(self) -> float:
        return 1.0 - self.extra_zeros

    def mean(self) -> float:
        """The mean of the base in the share of years that have it."""
        return self._share * self.base.mean()

    def variance(self) -> float:
        """Within the years that have the base, and between them and the others."""
        return self._share * (self.base.variance() + self.extra_zeros * self.base.mean() ** 2)

    def thinned(self, probability: float) -> ZeroInflated | CountLaw:
        """The base thinned, the same share of years apart."""
        base = self.base.thinned(require_probability(probability, "probability"))
        return base if float(base.sf(0)) == 0.0 else ZeroInflated(base=base, extra_zeros=self.extra_zeros)

    def with_exposure(self, factor: float) -> ZeroInflated:
        """The base at the exposure, the same share of years apart."""
        base = self.base.with_exposure(require_positive(factor, "factor"))
        return ZeroInflated(base=base, extra_zeros=self.extra_zeros)

    def _pmf(self, n: FloatArray) -> FloatArray:
        return np.where(n == 0, self.extra_zeros, 0.0) + self._share * np.asarray(self.base.pmf(n))

    def _cdf(self, n: FloatArray) -> FloatArray:
        return np.minimum(self.extra_zeros + self._share * np.asarray(self.base.cdf(n)), 1.0)

    def _sf(self, n: FloatArray) -> FloatArray:
        return np.asarray(self._share * np.asarray(self.base.sf(n)))

    def _pgf(self, z: ComplexArray) -> ComplexArray:
        return np.asarray(self.extra_zeros + self._share * np.asarray(self.base.pgf(z)))

    def _log_pgf(self, z: ComplexArray) -> ComplexArray:
        return _shared_log_pgf(self.base, self._share, z)


def _shared_log_pgf(base: CountLaw, share: float, z: ComplexArray) -> ComplexArray:
    """log of (1 - share) + share P(z), with its digits where P(z) is near 1."""
    own = np.asarray(base.log_pgf(z))
    if share == 1.0:
        return own
    with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
        return np.asarray(np.log1p(share * np.expm1(own)))


def _require_base(base: object) -> None:
    if not isinstance(base, CountLaw) or float(base.sf(0)) == 0.0:
        raise InputError(
            "base must be a count law that is not always 0",
            value=base,
            remedy="Give Poisson(mean=...), say.",
        )
