"""Warnings about the records of one line as a whole: what the rows do not show one by one.

The bounds are common practice of the trade, without a published source; nothing is changed by them.
"""

from __future__ import annotations

import numpy as np

from lossagg.arrays import BoolArray, FloatArray, IntArray
from lossagg.records.events import Events, group_events
from lossagg.records.findings import Finding, counted, rows_in_words
from lossagg.records.table import LossTable

DOMINANT = 0.95
HEAPED = 0.5
REPEATED = 0.2
FEW = 20
LONG_EVENT_DAYS = 366


def shape_findings(table: LossTable, used: BoolArray, line: str | None) -> list[Finding]:
    """Look at the used rows of one line together.

    Args:
        table: the records.
        used: True for the rows of the line that are used; shape (rows,).
        line: name of the line, None when the file is of one line.

    Returns:
        Warnings: one loss that is nearly everything, equal or heaped amounts, near duplicates, events
        that last longer than a year.
    """
    events = group_events(table, used)
    rows = table.row[used]
    amounts = table.amount[used]
    found = [
        *_dominant(events, rows),
        *_heaped(amounts),
        *_near_duplicates(table, used),
        *_long_events(events, rows),
    ]
    return [
        Finding(
            code,
            "warn",
            table.file,
            None,
            table.headings.get("amount"),
            None,
            f"line {line!r}: {message}" if line else message,
            remedy,
            sheet=table.sheet,
            line=line,
            count=count,
        )
        for code, message, remedy, count in found
    ]


def _dominant(events: Events, rows: IntArray) -> list[tuple[str, str, str, int]]:
    total = float(np.sum(np.sort(events.amount)))
    if len(events) < 2 or not events.amount.max() > DOMINANT * total:
        return []
    largest = int(np.argmax(events.amount))
    at = rows[events.index == largest]
    share = events.amount[largest] / total
    return [
        (
            "dominant-loss",
            f"one loss is {share:.1%} of the total ({rows_in_words([int(r) for r in at], len(at))})",
            "Check it, and compare the results with and without it.",
            len(at),
        )
    ]


def _heaped(amounts: FloatArray) -> list[tuple[str, str, str, int]]:
    count = len(amounts)
    if count < 2:
        return []
    values, times = np.unique(amounts, return_counts=True)
    if len(values) == 1:
        return [
            (
                "equal-amounts",
                f"all {count} amounts are equal to {values[0]:g}",
                "No size law can be fitted to them; are they limits, reserves by rule or averages?",
                count,
            )
        ]
    if count < FEW:
        return []
    found = []
    most = int(np.argmax(times))
    if times[most] > REPEATED * count:
        found.append(
            (
                "repeated-amount",
                f"{times[most]} of {count} amounts are equal to {values[most]:g}",
                "Give the policy limit if it is one, so that these losses count as censored.",
                int(times[most]),
            )
        )
    round_ones = int(np.count_nonzero(_is_round(amounts)))
    if round_ones > HEAPED * count:
        found.append(
            (
                "heaped-amounts",
                f"{round_ones} of {count} amounts have at most two significant digits",
                "Rounded estimates make a fit look better than it is; use settled amounts where there are.",
                round_ones,
            )
        )
    return found


def _is_round(amounts: FloatArray) -> BoolArray:
    """True for amounts of at least 100 with at most two significant digits, like 25000."""
    large = np.maximum(amounts, 100.0)
    unit = 10.0 ** (np.floor(np.log10(large)) - 1)
    result: BoolArray = (amounts >= 100.0) & (np.remainder(amounts, unit) == 0)
    return result


def _near_duplicates(table: LossTable, used: BoolArray) -> list[tuple[str, str, str, int]]:
    """Rows of one date and amount that are not the same row, whatever their event."""
    rows = table.alike[used[table.alike]]
    date, amount = table.date[rows].astype(np.int64), table.amount[rows]
    mark = table.fingerprint[rows]
    order = np.lexsort((rows, amount, date))
    date, amount, mark = date[order], amount[order], mark[order]
    twin = (date[1:] == date[:-1]) & (amount[1:] == amount[:-1]) & (mark[1:] != mark[:-1])
    if not twin.any():
        return []
    at = np.flatnonzero(twin)
    pairs = [f"{table.row[rows[order[i]]]} and {table.row[rows[order[i + 1]]]}" for i in at[:5]]
    more = f" and {len(at) - 5} more pairs" if len(at) > 5 else ""
    return [
        (
            "near-duplicate",
            f"rows agree in date and amount but not otherwise: {', '.join(pairs)}{more}",
            "Check that they are different claims; both are used.",
            len(at),
        )
    ]


def _long_events(events: Events, rows: IntArray) -> list[tuple[str, str, str, int]]:
    days = (events.last - events.date).astype(np.int64)
    long = np.flatnonzero(days > LONG_EVENT_DAYS)
    if not long.size:
        return []
    at = rows[np.isin(events.index, long)]
    return [
        (
            "long-event",
            f"{counted(len(long), 'event')} of more than a year "
            f"({rows_in_words(sorted(int(row) for row in at), len(at))})",
            "Is the event column a policy or a customer rather than an occurrence? Map another one.",
            len(at),
        )
    ]
