"""Rows of totals among the records, at the foot or between groups, which would count losses twice."""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import Any

import numpy as np

from lossagg.arrays import BoolArray
from lossagg.records.money import Money, exact_sum
from lossagg.records.raw import RawTable, cell_text
from lossagg.records.typed import TypedColumns

_TOTAL = re.compile(r"^(grand |sub ?-?)?(totals?|sum|somme|summe|gesamt|totale|total general)\b[ :.]*$", re.I)
_LEAST = 2
_SURE = 5
_MOST = 1000


@dataclass(frozen=True)
class Totals:
    """Rows that are totals of others; arrays of shape (rows,).

    Args:
        last: True for a total at the foot.
        between: True for totals of the rows above them since the total before.
    """

    last: BoolArray
    between: BoolArray

    @property
    def rows(self) -> BoolArray:
        """True for either."""
        rows: BoolArray = self.last | self.between
        return rows


def find_totals(raw: RawTable, typed: TypedColumns, exact: Money) -> Totals:
    """Recognise rows of totals.

    A row with no digit for a date is one if its amount equals the sum of at least two rows above it, back to
    the total before, exactly. The last row is one if it is labelled so and lacks a date or equals the sum, or
    if it equals the sum of all other amounts exactly and lacks a date or sums at least five.

    Args:
        raw: the table as read.
        typed: its columns.
        exact: its amounts; shape (rows,).
    """
    amount, undated = typed.numbers["amount"].values, np.isnat(typed.dates["date"])
    finite = np.isfinite(amount)
    between = _between(exact, finite, undated, raw.columns["date"].cells)
    last = np.zeros_like(between)
    end = len(last) - 1
    if end < 0:
        return Totals(last, between)
    losses = np.flatnonzero(finite[:end] & ~between[:end])
    is_sum = len(losses) >= _LEAST and exact[end] != 0 and exact[end] == exact_sum(exact[losses])
    labelled = any(_TOTAL.match(cell.strip()) for cell in raw.foot)
    bare = bool(undated[end])
    last[end] = (labelled and (bare or is_sum)) or (is_sum and (bare or len(losses) >= _SURE))
    return Totals(last, between & ~last)


def _between(exact: Money, finite: BoolArray, undated: BoolArray, cells: Any) -> BoolArray:
    """Rows with no digit for a date that are the total of the dated ones since the total before."""
    totals = np.zeros(len(finite), dtype=np.bool_)
    candidates = np.flatnonzero(undated & finite)
    if len(candidates) > _MOST:
        return totals  # Dates are missing for another reason.
    start = 0
    for at in candidates.tolist():
        rows = start + np.flatnonzero(finite[start:at] & ~undated[start:at])
        if any(map(str.isdigit, cell_text(cells[at].as_py()))):
            continue
        if len(rows) >= _LEAST and exact[at] != 0 and exact[at] == exact_sum(exact[rows]):
            totals[at], start = True, at + 1
    return totals
