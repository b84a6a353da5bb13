"""Claims of one event are one loss: they are summed before any threshold, limit or deductible applies.

A treaty may end an occurrence after a number of consecutive hours (common practice: 72 for windstorm, 168
for flood and earthquake; no source). With such a window the claims of one event are divided: the first
period begins on the day of the earliest claim, the next on the day of the first claim after it, and so on
until none is left; periods never overlap. The insured may usually choose where a period begins; beginning
with the first claim is the choice that needs no knowledge of the cover. Dates are days, so hours come in
whole days.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import fsum

import numpy as np

from lossagg.arrays import BoolArray, FloatArray, IntArray
from lossagg.errors import InputError
from lossagg.records.dates import DateArray
from lossagg.records.table import LossTable
from lossagg.records.words import WordArray, by_word, word_codes

OPEN = ("open", "reopened", "re-opened")
CLOSED = ("closed", "settled", "final")
OPEN_WORDS = (*OPEN, "offen", "ouvert", "abierto", "aperto")
CLOSED_WORDS = (*CLOSED, "geschlossen", "clos", "cerrado", "chiuso")
"""What is understood of a status, in any case: the English words and their like in files from elsewhere."""
HOURS_PER_DAY = 24


@dataclass(frozen=True)
class Events:
    """Events made of the used rows of one table, in no particular order; arrays of shape (events,).

    Args:
        index: event of each used row; shape (used rows,).
        identifier: event as named in the file, "" for a row that is its own event.
        date: date of the earliest claim.
        last: date of the latest claim.
        recorded: the nearest float64 of the exact sum of the claims as recorded.
        amount: sum of the claims as they are modelled; `recorded` unless amounts were given.
        threshold: largest threshold recorded for a claim of the event, NaN where none is.
        censored: True where a claim of the event reached its policy limit.
        claims: number of claims.
        open: number of claims whose status is open.
    """

    index: IntArray
    identifier: WordArray
    date: DateArray
    last: DateArray
    recorded: FloatArray
    amount: FloatArray
    threshold: FloatArray
    censored: BoolArray
    claims: IntArray
    open: IntArray

    def __len__(self) -> int:
        """Number of events."""
        return len(self.amount)


def group_events(
    table: LossTable, used: BoolArray, *, hours_window: int | None = None, amount: FloatArray | None = None
) -> Events:
    """Sum the claims of each event over the rows that are used.

    Rows without an event identifier are their own event. Rows of different lines never share one:
    give the rows of one line, or rows whose `line` tells them apart.

    Args:
        table: the records.
        used: True for the rows to use; shape (rows,).
        hours_window: longest duration of one event in hours; None: without end.
        amount: amount of each row where it is not the one recorded (net of recoveries, developed);
            shape (rows,).

    Returns:
        The events. Sums do not depend on the order of the rows.

    Raises:
        InputError: a window that is no whole number of days.
    """
    rows = np.flatnonzero(used)
    date = table.date[rows].astype(np.int64)
    index, size = _number_events(table, rows)
    if hours_window is not None:
        index, size = _split(index, size, date, window_days(hours_window))
    first = np.zeros(size, dtype=np.int64)
    first[index[::-1]] = np.arange(len(rows) - 1, -1, -1, dtype=np.int64)
    claims = np.bincount(index, minlength=size).astype(np.int64)
    recorded = table.exact[rows].by_group(index, size).to_floats()
    threshold = np.full(size, np.nan)
    if "threshold" in table.numbers:
        np.fmax.at(threshold, index, table.number("threshold")[rows])
    reached = table.amount[rows] >= table.number("policy-limit")[rows]
    open_rows = is_open(table)[rows]
    return Events(
        index=index,
        identifier=table.word("event")[rows[first]],
        date=_extreme(np.minimum, date, index, size),
        last=_extreme(np.maximum, date, index, size),
        recorded=recorded,
        amount=recorded if amount is None else event_sums(amount[rows], index, claims),
        threshold=threshold,
        censored=np.bincount(index, weights=reached, minlength=size) > 0,
        claims=claims,
        open=np.bincount(index, weights=open_rows, minlength=size).astype(np.int64),
    )


def is_open(table: LossTable) -> BoolArray:
    """True for rows whose status says that the claim is open; shape (rows,)."""
    if "status" not in table.words:
        return np.zeros(len(table), dtype=np.bool_)
    return by_word(table.word("status"), lambda status: status.casefold() in OPEN_WORDS)


def event_sums(values: FloatArray, index: IntArray, claims: IntArray) -> FloatArray:
    """Sum values of rows by event, each sum rounded once, so that the order of the rows is no matter.

    Args:
        values: shape (used rows,).
        index: event of each; shape (used rows,).
        claims: number of rows of each event; shape (events,).

    Returns:
        Sums, shape (events,).
    """
    sums = np.zeros(len(claims))
    alone = claims[index] == 1
    sums[index[alone]] = values[alone]
    parts: dict[int, list[float]] = {}
    for event, value in zip(index[~alone].tolist(), values[~alone].tolist(), strict=True):
        parts.setdefault(event, []).append(value)
    for event, members in parts.items():
        sums[event] = fsum(members)
    return sums


def window_days(hours: int) -> int:
    """The days of an hours window.

    Raises:
        InputError: not a whole number of days above 0.
    """
    if isinstance(hours, bool) or not isinstance(hours, int) or hours < 1 or hours % HOURS_PER_DAY:
        raise InputError(
            "the hours window must be a whole number of days, in hours",
            value=hours,
            remedy="Write 72 for three days; records carry the day of a loss, not its hour.",
        )
    return hours // HOURS_PER_DAY


def _number_events(table: LossTable, rows: IntArray) -> tuple[IntArray, int]:
    """Number the events from 0; return the event of each row and their number."""
    if "event" not in table.words:
        return np.arange(len(rows), dtype=np.int64), len(rows)
    identifiers = table.words["event"][rows]
    codes = word_codes(identifiers)
    if "line" in table.words:
        lines = word_codes(table.words["line"][rows])
        if lines.any():
            codes = np.unique(codes * (lines.max() + 1) + lines, return_inverse=True)[1].astype(np.int64)
    nameless = identifiers == ""
    count = int(np.count_nonzero(nameless))
    if not count:
        return codes, int(codes.max()) + 1 if len(codes) else 0
    # The rows without a name share codes that are used no more: number everything again, densely.
    used_codes = np.zeros(int(codes.max()) + 1, dtype=np.bool_)
    used_codes[codes[~nameless]] = True
    dense = np.cumsum(used_codes) - 1
    named = int(np.count_nonzero(used_codes))
    index = np.where(nameless, named + np.cumsum(nameless) - 1, dense[codes]).astype(np.int64)
    return index, named + count


def _split(index: IntArray, size: int, date: IntArray, days: int) -> tuple[IntArray, int]:
    """Divide events whose claims lie further apart than a number of days, see the head of the module."""
    index = index.copy()
    late = np.arange(len(index), dtype=np.int64)
    while late.size:
        begins = np.full(size, np.iinfo(np.int64).max)
        np.minimum.at(begins, index[late], date[late])
        late = late[date[late] - begins[index[late]] >= days]
        names, part = np.unique(index[late], return_inverse=True)
        index[late] = size + part
        size += len(names)
    return index, size


def _extreme(function: np.ufunc, date: IntArray, index: IntArray, size: int) -> DateArray:
    far = np.iinfo(np.int64)
    result = np.full(size, far.max if function is np.minimum else far.min, dtype=np.int64)
    function.at(result, index, date)
    return result.astype("datetime64[D]")
