"""A size given by amounts and their probabilities."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import ClassVar

import numpy as np

from lossagg.arrays import FloatArray, as_floats, require_positive
from lossagg.errors import InputError
from lossagg.families.base import SizeLaw
from lossagg.families.tables import checked_probabilities, normalised, running_sums


@dataclass(frozen=True, kw_only=True, repr=False)
class SizeTable(SizeLaw):
    """Losses of given sizes with given probabilities; zero is a size too.

    The law has atoms only: its `pdf` is zero everywhere, the probabilities are in `atoms`. Sizes may
    come in any order; they are kept in increasing order.

    Args:
        sizes: amounts at or above 0, finite, each once.
        probabilities: one for each size, in [0, 1], together 1 within 1e-9.

    Raises:
        InputError: lists of different lengths, a size below 0 or given twice, probabilities outside
            [0, 1] or with a sum other than 1 (with the sum).
    """

    family: ClassVar[str] = "size-table"
    sizes: Sequence[float]
    probabilities: Sequence[float]

    def __post_init__(self) -> None:
        sizes = as_floats(self.sizes, "sizes")
        if sizes.ndim != 1 or sizes.size == 0:
            raise InputError("sizes must be a list of numbers", value=self.sizes, remedy="Give at least one.")
        probabilities = checked_probabilities(self.probabilities, "probabilities")
        if len(probabilities) != sizes.size:
            raise InputError(
                "sizes and probabilities must have the same length",
                value=(sizes.size, len(probabilities)),
                remedy="Give one probability for each size.",
            )
        bad = (sizes < 0) | (sizes == np.inf)
        if bad.any():
            raise InputError(
                "sizes must be at least 0 and finite",
                where=f"entry {int(np.argmax(bad)) + 1}",
                value=float(sizes[bad][0]),
                remedy="Correct or leave out the entry.",
            )
        order = np.argsort(sizes, kind="stable")
        ordered = sizes[order]
        again = np.flatnonzero(np.diff(ordered) == 0)
        if again.size:
            raise InputError(
                "a size is given twice",
                value=float(ordered[again[0]]),
                remedy="Give each size once, with the sum of its probabilities.",
            )
        self._settle(
            sizes=tuple(float(size) for size in ordered),
            probabilities=tuple(probabilities[place] for place in order),
        )

    @cached_property
    def _atoms(self) -> tuple[FloatArray, FloatArray]:
        """Sizes with a positive probability, and their probabilities."""
        weights = normalised(self.probabilities)
        return np.asarray(self.sizes)[weights > 0], weights[weights > 0]

    @cached_property
    def _sums(self) -> tuple[FloatArray, FloatArray]:
        """cdf and sf at each atom."""
        _, weights = self._atoms
        below = running_sums(weights)
        below[-1] = 1.0
        return below, np.append(running_sums(weights[:0:-1])[::-1], 0.0)

    @cached_property
    def _partial_moments(self) -> tuple[FloatArray, FloatArray]:
        """E[X; X <= k-th atom] and E[X**2; X <= k-th atom], with 0 first."""
        sizes, weights = self._atoms
        return (
            np.append(0.0, running_sums(sizes * weights)),
            np.append(0.0, running_sums(sizes * sizes * weights)),
        )

    @cached_property
    def _excesses(self) -> FloatArray:
        """E[(X - k-th atom)+], summed from the top."""
        sizes, _ = self._atoms
        steps = (np.diff(sizes) * self._sums[1][:-1])[::-1]
        return np.append(running_sums(steps)[::-1], 0.0)

    @cached_property
    def _second_excesses(self) -> FloatArray:
        """E[((X - k-th atom)+)**2], summed from the top."""
        sizes, _ = self._atoms
        gaps = np.diff(sizes)
        steps = (2.0 * gaps * self._excesses[1:] + gaps**2 * self._sums[1][:-1])[::-1]
        return np.append(running_sums(steps)[::-1], 0.0)

    def mean(self) -> float:
        """The mean."""
        return float(self._partial_moments[0][-1])

    def variance(self) -> float:
        """The variance."""
        sizes, weights = self._atoms
        return float(weights @ (sizes - self.mean()) ** 2)

    @property
    def tail_index(self) -> float:
        """`inf`: all moments exist."""
        return np.inf

    @property
    def support(self) -> tuple[float, float]:
        """Smallest and largest size with a positive probability."""
        sizes, _ = self._atoms
        return (float(sizes[0]), float(sizes[-1]))

    @property
    def breakpoints(self) -> tuple[float, ...]:
        """None: the probabilities are in `atoms`."""
        return ()

    @property
    def atoms(self) -> tuple[tuple[float, float], ...]:
        """(size, probability) of every size with a positive probability."""
        return tuple(zip(*(part.tolist() for part in self._atoms), strict=True))

    def scaled(self, factor: float) -> SizeTable:
        """Every size times the factor."""
        times = require_positive(factor, "factor")
        return SizeTable(sizes=[size * times for size in self.sizes], probabilities=self.probabilities)

    def _count(self, x: FloatArray) -> np.ndarray:
        """Number of atoms at or below x."""
        return np.searchsorted(self._atoms[0], x, side="right")

    def _cdf(self, x: FloatArray) -> FloatArray:
        return np.append(0.0, self._sums[0]).take(self._count(x))

    def _sf(self, x: FloatArray) -> FloatArray:
        return np.append(1.0, self._sums[1]).take(self._count(x))

    def _pdf(self, x: FloatArray) -> FloatArray:
        return np.zeros(x.shape)

    def _ppf(self, q: FloatArray) -> FloatArray:
        return self._atoms[0].take(np.searchsorted(self._sums[0], q, side="left"))

    def _isf(self, p: FloatArray) -> FloatArray:
        place = len(self._atoms[0]) - np.searchsorted(self._sums[1][::-1], p, side="right")
        return self._atoms[0].take(place)

    def _limited_mean(self, limit: FloatArray) -> FloatArray:
        return self._partial_moments[0].take(self._count(limit)) + limit * self._sf(limit)

    def _limited_second_moment(self, limit: FloatArray) -> FloatArray:
        return self._partial_moments[1].take(self._count(limit)) + limit * limit * self._sf(limit)

    def _expected_excess(self, x: FloatArray) -> FloatArray:
        sizes, _ = self._atoms
        after = self._count(x)
        upper = np.minimum(after, len(sizes) - 1)
        cost = self._excesses[upper] + (sizes[upper] - x) * self._sf(x)
        return np.where(after < len(sizes), cost, 0.0)

    def _second_excess(self, x: FloatArray) -> FloatArray:
        sizes, _ = self._atoms
        after = self._count(x)
        upper = np.minimum(after, len(sizes) - 1)
        gap = sizes[upper] - x
        cost = self._second_excesses[upper] + 2.0 * gap * self._excesses[upper] + gap * gap * self._sf(x)
        return np.where(after < len(sizes), cost, 0.0)
