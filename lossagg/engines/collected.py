"""Where the annual amounts of the blocks go: whole while they are few, reduced beyond.

Whole amounts allow every question; they take eight bytes a year and subject, twice that sorted. Where
that is more than half a gigabyte at more than 2**21 years, or more than the memory allowed, each subject
is reduced as its blocks come, see `reduction`, and the largest years of the book are kept with the
amounts of all subjects.
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.engines.book import Subject
from lossagg.engines.largest import LargestYears, LargestYearsKept
from lossagg.engines.reduced import ReducedAnnualLoss
from lossagg.engines.reduction import BYTES_PER_SUBJECT, Reduction
from lossagg.engines.sampled import SampledAnnualLoss, SimulatedAnnualLoss
from lossagg.engines.streams import BLOCK_YEARS

MOST_WHOLE = 2**21
MOST_WHOLE_BYTES = 2**29

Amounts = Mapping[Subject, FloatArray]


def bytes_needed(years: int, subjects: int, ranked: int) -> tuple[float, float]:
    """Memory for whole amounts, sorted copies included, and for reduced ones."""
    return 16.0 * years * subjects, float(
        BYTES_PER_SUBJECT * subjects + LargestYears.bytes(subjects) * ranked
    )


class Collected:
    """Takes in blocks of annual amounts from any thread, in any order.

    Args:
        orders: per subject the order from which on its moments do not exist, and the most a year can bring.
        ranked: subjects whose largest years are kept with the amounts of all subjects.
        whole: whether the amounts are kept whole.
    """

    def __init__(
        self, orders: Mapping[Subject, tuple[float, float]], ranked: tuple[Subject, ...], *, whole: bool
    ) -> None:
        self.orders, self.ranked, self.whole = dict(orders), ranked, whole
        self._room = np.empty((len(self.orders), 0))
        self._years = 0
        self._reductions = {} if whole else {s: Reduction(most) for s, (_, most) in self.orders.items()}
        self._largest = {} if whole else {s: LargestYears(tuple(self.orders)) for s in ranked}

    def make_room(self, years: int) -> None:
        """Say how many years are to come in all, before their blocks do."""
        self._years = years
        if self.whole and years > self._room.shape[1]:
            grown = np.zeros((len(self.orders), years))
            grown[:, : self._room.shape[1]] = self._room
            self._room = grown

    def reduce(self) -> None:
        """Go over from whole amounts to reduced ones; all blocks made room for must have come."""
        years, room = self._years, self._room
        self.__init__(self.orders, self.ranked, whole=False)  # type: ignore[misc]
        for block in range(-(-years // BLOCK_YEARS)):
            part = room[:, block * BLOCK_YEARS : min((block + 1) * BLOCK_YEARS, years)]
            self.add(block, dict(zip(self.orders, part, strict=True)))

    def room(self, block: int, years: int) -> FloatArray | None:
        """Where the amounts of the only subject may be computed in place, zeros as yet; else None."""
        first = block * BLOCK_YEARS
        return self._room[0, first : first + years] if self.whole and len(self.orders) == 1 else None

    def add(self, block: int, amounts: Amounts) -> None:
        """Take in one block; each block once."""
        first = block * BLOCK_YEARS
        if self.whole:
            for row, subject in enumerate(self.orders):
                place = self._room[row, first : first + amounts[subject].size]
                if not np.shares_memory(place, amounts[subject]):
                    place[:] = amounts[subject]
            return
        for subject, reduction in self._reductions.items():
            reduction.add(block, amounts[subject])
        for subject, largest in self._largest.items():
            largest.add(first, amounts[subject], amounts)

    def loss(self, subject: Subject, miss: float = 0.05) -> SampledAnnualLoss:
        """The annual loss of a subject from the blocks so far."""
        order, most = self.orders[subject]
        if self.whole:
            row = list(self.orders).index(subject)
            return SimulatedAnnualLoss(self._room[row], order, most, miss=miss)
        return ReducedAnnualLoss(self._reductions[subject].result(), order, most, miss=miss)

    def losses(self, miss: float = 0.05) -> dict[Subject, SampledAnnualLoss]:
        """The annual loss of every subject from the blocks so far."""
        return {subject: self.loss(subject, miss) for subject in self.orders}

    def largest_years(self) -> dict[Subject, LargestYearsKept]:
        """The largest years by each ranked subject, largest first, with the amounts of all subjects."""
        if not self.whole:
            return {subject: largest.result() for subject, largest in self._largest.items()}
        rows = {subject: row for row, subject in enumerate(self.orders)}
        kept = {}
        for subject in self.ranked:
            largest = LargestYears(tuple(self.orders))
            largest.add(0, self._room[rows[subject]], {s: self._room[row] for s, row in rows.items()})
            kept[subject] = largest.result()
        return kept


__all__ = ["MOST_WHOLE", "MOST_WHOLE_BYTES", "Amounts", "Collected", "bytes_needed"]
