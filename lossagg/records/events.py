"""Claims of one event are one loss: they are summed before any threshold, limit or deductible applies."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from lossagg.arrays import BoolArray, FloatArray, IntArray
from lossagg.records.dates import DateArray
from lossagg.records.money import Money
from lossagg.records.table import LossTable
from lossagg.records.words import WordArray, by_word, word_codes

OPEN = ("open", "reopened", "re-opened")
CLOSED = ("closed", "settled", "final")
_DENSE = 8


@dataclass(frozen=True)
class Events:
    """Events made of the used rows of one table, in no particular order; arrays of shape (events,).

    Args:
        index: event of each used row; shape (used rows,).
        identifier: event as named in the file, "" for a row that is its own event.
        date: date of the earliest claim.
        last: date of the latest claim.
        amount: the nearest float64 of the exact sum of the claims.
        exact: exact sum of the claims.
        threshold: largest threshold recorded for a claim of the event, NaN where none is.
        censored: True where a claim of the event reached its policy limit.
        claims: number of claims.
        open: number of claims whose status is open.
    """

    index: IntArray
    identifier: WordArray
    date: DateArray
    last: DateArray
    amount: FloatArray
    exact: Money
    threshold: FloatArray
    censored: BoolArray
    claims: IntArray
    open: IntArray

    def __len__(self) -> int:
        """Number of events."""
        return len(self.amount)


def group_events(table: LossTable, used: BoolArray) -> Events:
    """Sum the claims of each event over the rows that are used.

    Rows without an event identifier are their own event. Rows of different lines never share one:
    give the rows of one line, or rows whose `line` tells them apart.

    Args:
        table: the records.
        used: True for the rows to use; shape (rows,).

    Returns:
        The events. Sums are exact, so they do not depend on the order of the rows.
    """
    rows = np.flatnonzero(used)
    index, first = _number_events(table, rows)
    size = len(first)
    claims = np.bincount(index, minlength=size).astype(np.int64)
    exact, amount = _sums(table, rows, index, first, claims)
    date = table.date[rows].astype(np.int64)
    threshold = np.full(size, -np.inf)
    np.maximum.at(threshold, index, _or(table.number("threshold")[rows], -np.inf))
    limit = table.number("policy-limit")[rows]
    reached = table.amount[rows] >= limit
    return Events(
        index=index,
        identifier=table.word("event")[rows[first]],
        date=_extreme(np.minimum, date, index, size),
        last=_extreme(np.maximum, date, index, size),
        amount=amount,
        exact=exact,
        threshold=np.where(np.isinf(threshold), np.nan, threshold),
        censored=np.bincount(index, weights=reached, minlength=size) > 0,
        claims=claims,
        open=np.bincount(index, weights=is_open(table)[rows], minlength=size).astype(np.int64),
    )


def is_open(table: LossTable) -> BoolArray:
    """True for rows whose status says that the claim is open; shape (rows,)."""
    if "status" not in table.words:
        return np.zeros(len(table), dtype=np.bool_)
    return by_word(table.word("status"), lambda status: status.casefold() in OPEN)


def _number_events(table: LossTable, rows: IntArray) -> tuple[IntArray, IntArray]:
    """Number the events; return the event of each row and the first row of each event."""
    alone = np.arange(len(rows), dtype=np.int64)
    if "event" not in table.words:
        return alone, alone
    identifiers, lines = table.words["event"][rows], table.word("line")[rows]
    key = word_codes(identifiers) * max(1, len(lines.names)) + word_codes(lines)
    keys = len(identifiers.names) * max(1, len(lines.names)) + 1
    nameless = identifiers == ""
    if nameless.any():
        key[nameless] = keys + alone[nameless]
        keys += len(rows)
    if keys > _DENSE * (len(rows) + 1):
        _, first, index = np.unique(key, return_index=True, return_inverse=True)
        return index.astype(np.int64), first.astype(np.int64)
    occurs = np.zeros(keys, dtype=np.bool_)
    occurs[key] = True
    index = (np.cumsum(occurs) - 1)[key]
    first = np.empty(int(np.count_nonzero(occurs)), dtype=np.int64)
    first[index[::-1]] = alone[::-1]
    return index, first


def _sums(
    table: LossTable, rows: IntArray, index: IntArray, first: IntArray, claims: IntArray
) -> tuple[Money, FloatArray]:
    """The exact sum of each event and its nearest float64; one claim alone is its own sum."""
    amounts = table.exact[rows]
    if len(first) == len(rows):
        return amounts[first], table.amount[rows][first]
    exact = amounts.by_group(index, len(first))
    return exact, np.where(claims > 1, exact.to_floats(), table.amount[rows][first])


def _extreme(function: np.ufunc, date: IntArray, index: IntArray, size: int) -> DateArray:
    far = np.iinfo(np.int64)
    result = np.full(size, far.max if function is np.minimum else far.min, dtype=np.int64)
    function.at(result, index, date)
    return result.astype("datetime64[D]")


def _or(values: FloatArray, other: float) -> FloatArray:
    return np.where(np.isnan(values), other, values)
