"""The largest years, each with its number and the amounts of all lines and covers."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from threading import Lock

import numpy as np

from lossagg.arrays import FloatArray, IntArray
from lossagg.engines.placed import Subject

LARGEST_YEARS = 2**14


@dataclass(frozen=True, eq=False)
class LargestYearsKept:
    """The largest years of a subject, the largest first; of equal ones the earlier first.

    Attributes:
        years: their numbers, from 0, shape (n,).
        amounts: the amount of every subject in each of them, shape (n,).
    """

    years: IntArray
    amounts: dict[Subject, FloatArray]


class LargestYears:
    """Keeps the largest years of one subject out of blocks that come in any order, from any thread.

    Args:
        subjects: whose amounts are kept for each year.
        number: how many years.
    """

    def __init__(self, subjects: tuple[Subject, ...], number: int = LARGEST_YEARS) -> None:
        self._lock = Lock()
        self._subjects, self._number = subjects, number
        self._years = np.empty(0, dtype=np.int64)
        self._ranked = np.empty(0)
        self._rows = np.empty((len(subjects), 0))

    @staticmethod
    def bytes(subjects: int) -> int:
        """Memory needed, the candidates of a block included."""
        return 3 * 8 * (subjects + 2) * LARGEST_YEARS

    def add(self, first: int, ranked: FloatArray, amounts: Mapping[Subject, FloatArray]) -> None:
        """Take in consecutive years.

        Args:
            first: number of the first of them.
            ranked: the amounts they are ranked by, shape (years,).
            amounts: the amounts of every subject, shape (years,) each.
        """
        chosen = np.arange(ranked.size)
        if ranked.size > self._number:
            place = ranked.size - self._number
            least = np.partition(ranked, place)[place]
            above, equal = np.flatnonzero(ranked > least), np.flatnonzero(ranked == least)
            chosen = np.sort(np.concatenate((above, equal[: self._number - above.size])))
        with self._lock:
            if self._years.size == self._number:
                # Equal amounts may still win by an earlier year.
                chosen = chosen[ranked[chosen] >= self._ranked[-1]]
            if chosen.size:
                self._merge(first, chosen, ranked, amounts)

    def _merge(
        self, first: int, chosen: IntArray, ranked: FloatArray, amounts: Mapping[Subject, FloatArray]
    ) -> None:
        years = np.concatenate((self._years, first + chosen))
        by = np.concatenate((self._ranked, ranked[chosen]))
        best = np.lexsort((years, -by))[: self._number]
        new = np.stack([amounts[subject][chosen] for subject in self._subjects])
        self._years, self._ranked = years[best], by[best]
        self._rows = np.concatenate((self._rows, new), axis=1)[:, best]

    def result(self) -> LargestYearsKept:
        """The largest years of those taken in so far."""
        with self._lock:
            rows = dict(zip(self._subjects, self._rows, strict=True))
            return LargestYearsKept(self._years, rows)
