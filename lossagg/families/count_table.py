"""A count given by its probabilities."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import ClassVar

import numpy as np

from lossagg.arrays import FloatArray, require_probability
from lossagg.errors import InputError
from lossagg.families.base import ComplexArray, CountLaw
from lossagg.families.tables import checked_probabilities, normalised, running_sums


@dataclass(frozen=True, kw_only=True, repr=False)
class CountTable(CountLaw):
    """P(N=0), P(N=1), ... as given; nothing beyond the last entry.

    Args:
        probabilities: P(N = 0), P(N = 1), ..., each in [0, 1], together 1 within 1e-9.

    Raises:
        InputError: an empty table, an entry outside [0, 1], a sum other than 1 (with the sum).
    """

    family: ClassVar[str] = "count-table"
    probabilities: Sequence[float]

    def __post_init__(self) -> None:
        self._settle(probabilities=checked_probabilities(self.probabilities, "probabilities"))

    @cached_property
    def _weights(self) -> FloatArray:
        return normalised(self.probabilities)

    @cached_property
    def _below(self) -> FloatArray:
        return np.minimum(running_sums(self._weights), 1.0)

    @cached_property
    def _above(self) -> FloatArray:
        return np.append(running_sums(self._weights[:0:-1])[::-1], 0.0)

    def mean(self) -> float:
        """The mean."""
        return float(self._weights @ np.arange(len(self._weights)))

    def variance(self) -> float:
        """The variance."""
        return float(self._weights @ (np.arange(len(self._weights)) - self.mean()) ** 2)

    def thinned(self, probability: float) -> CountTable:
        """The table of the count that passes: the polynomial P(1 - p + p z), by Horner's rule."""
        share = require_probability(probability, "probability")
        passed = np.zeros(len(self._weights))
        for weight in self._weights[::-1]:
            passed[1:] = (1 - share) * passed[1:] + share * passed[:-1]
            passed[0] = (1 - share) * passed[0] + weight
        return CountTable(probabilities=np.minimum(passed, 1.0).tolist())

    def with_exposure(self, factor: float) -> CountTable:
        """A table does not say how it changes with exposure.

        Raises:
            InputError: unless the factor is 1.
        """
        if factor == 1:
            return self
        raise InputError(
            "a count table does not say how the count changes with exposure",
            value=factor,
            remedy="State the table of the new exposure, or use a Poisson or negative binomial count.",
        )

    def _pmf(self, n: FloatArray) -> FloatArray:
        place, inside = self._places(n)
        return np.where(inside, self._weights[place], 0.0)

    def _cdf(self, n: FloatArray) -> FloatArray:
        place, inside = self._places(n)
        return np.where(inside, self._below[place], 1.0)

    def _sf(self, n: FloatArray) -> FloatArray:
        place, inside = self._places(n)
        return np.where(inside, self._above[place], 0.0)

    def _places(self, n: FloatArray) -> tuple[np.ndarray, np.ndarray]:
        last = len(self._weights) - 1
        return np.minimum(n, last).astype(np.int64), n <= last

    def _pgf(self, z: ComplexArray) -> ComplexArray:
        total = np.zeros_like(z)
        for weight in self._weights[::-1]:
            total = total * z + weight
        return total

    def _log_pgf(self, z: ComplexArray) -> ComplexArray:
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.asarray(np.log(self._pgf(z)))
