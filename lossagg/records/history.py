"""Triangles from records with several valuations: what was known of each year, at each age.

The diagonals are the valuation date of the portfolio and the same day of every year before it, back to the
first valuation in the records. On each of them a claim stands at its latest valuation until then. Events
are counted when they are at or above their reporting threshold as it stood, so the triangle of counts
develops what the frequency is fitted to. Where the valuation date is not the end of a year, the year of it is
seen in part at its first age; its first factor is then that of the losses that had occurred by that day, so
that the rest of the year does not pass for development.
"""

from __future__ import annotations

import datetime as dt
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from lossagg.arrays import BoolArray, FloatArray, IntArray
from lossagg.errors import InputError, place
from lossagg.records.check import USED, CheckedLosses
from lossagg.records.events import group_events, is_open
from lossagg.records.revisions import SUPERSEDED, claim_codes, has_history
from lossagg.records.years import Window

_KNOWN = ("nil-claim", "below-threshold", SUPERSEDED)


@dataclass(frozen=True)
class History:
    """What the valuations of the records show; ages in whole years back from the valuation date.

    Args:
        counts: events by origin year and age, NaN where not known; shape (years, years).
        amounts: their amounts.
        first_counts: events of each year a year after its first age, of those that had occurred by its first
            age; NaN where not known; shape (years,).
        first_amounts: their amounts.
        open_before: amount of claims open at each age, over all years seen a year later; shape (years - 1,).
        open_closed: amount a year later of those then closed.
        open_still: amount a year later of those then still open.
        dates: valuation dates used, latest first.
        dropped: claims left out because a row of theirs is set aside for a fault.
    """

    counts: FloatArray
    amounts: FloatArray
    first_counts: FloatArray
    first_amounts: FloatArray
    open_before: FloatArray
    open_closed: FloatArray
    open_still: FloatArray
    dates: tuple[dt.date, ...]
    dropped: int


def read_history(
    checked: CheckedLosses,
    window: Window,
    *,
    default_threshold: float,
    hours_window: int | None = None,
    amount: FloatArray | None = None,
) -> History:
    """Build the triangles of one line.

    Args:
        checked: the records of the line.
        window: its observation window; the origin years.
        default_threshold: reporting threshold of the rows that carry none.
        hours_window: see `group_events`.
        amount: amount of each row where it is not the one recorded; shape (rows,).

    Raises:
        InputError: records without valuations, or with less than two a year apart.
    """
    table = checked.table
    if not has_history(table):
        raise InputError(
            "factors are to be estimated from the records, which have no valuation history",
            where=place(file=table.file),
            remedy="Give a row per claim and valuation with the columns claim and valuation, or give "
            "factors by age.",
        )
    pool, dropped = _pool(checked)
    rows = np.flatnonzero(pool)
    dates = _diagonals(checked, rows, window)
    standing = [_standing(checked, rows, date) for date in dates]
    size = len(window.years)
    counts, amounts = np.full((size, size), np.nan), np.full((size, size), np.nan)
    first = np.full((2, size), np.nan)
    value = table.amount if amount is None else amount
    terms = _Terms(window, default_threshold, hours_window, value)
    for back, at in enumerate(standing):
        number, total = _by_year(checked, at[at >= 0], terms)
        for origin in range(size - back):
            age = size - 1 - origin - back
            counts[origin, age], amounts[origin, age] = number[origin], total[origin]
        young = size - 2 - back
        if back + 1 < len(standing) and young >= 0:
            occurred = _by_year(checked, at[at >= 0], terms, until=dates[back + 1])
            first[:, young] = occurred[0][young], occurred[1][young]
    before, closed, still = _open_claims(checked, standing, window, value)
    return History(counts, amounts, first[0], first[1], before, closed, still, dates, dropped)


@dataclass(frozen=True)
class _Terms:
    window: Window
    default_threshold: float
    hours_window: int | None
    value: FloatArray


def _pool(checked: CheckedLosses) -> tuple[BoolArray, int]:
    """Rows of claims none of whose rows is set aside for a fault; and how many claims are left out."""
    table = checked.table
    known = [number for number, fault in enumerate(checked.faults) if fault.code in _KNOWN]
    placed = checked.member & ~table.blank & (table.words["claim"] != "")
    placed &= ~np.isnat(table.dates["valuation"])
    placed &= table.dates["valuation"] <= np.datetime64(checked.terms.valuation_date)
    good = placed & np.isin(checked.reason, [USED, *known])
    rows = np.flatnonzero(placed)
    codes = claim_codes(table, rows)
    faulty = np.zeros(int(codes.max()) + 1 if len(codes) else 0, dtype=np.bool_)
    faulty[codes[~good[rows]]] = True
    pool = np.zeros(len(table), dtype=np.bool_)
    pool[rows[~faulty[codes]]] = True
    return pool, int(np.count_nonzero(faulty))


def _diagonals(checked: CheckedLosses, rows: IntArray, window: Window) -> tuple[dt.date, ...]:
    """The valuation date and the same day of earlier years, as long as each year in between has valuations.

    A year without any valuation would repeat the diagonal before it and pretend that nothing developed.
    """
    valued = checked.table.dates["valuation"][rows]
    dates: list[dt.date] = []
    latest = checked.terms.valuation_date
    for back in range(len(window.years)):
        date, before = _years_before(latest, back), _years_before(latest, back + 1)
        if not ((valued <= np.datetime64(date)) & (valued > np.datetime64(before))).any():
            break
        dates.append(date)
    if len(dates) < 2:
        raise InputError(
            "factors are to be estimated from the records, which need valuations in the year up to the "
            "valuation date and in the year before it",
            where=place(file=checked.table.file, column=checked.table.headings["valuation"]),
            value=sorted({str(date) for date in valued.tolist()})[-5:],
            remedy="Add the rows of earlier valuations, or give factors by age.",
        )
    return tuple(dates)


def _years_before(date: dt.date, years: int) -> dt.date:
    try:
        return date.replace(year=date.year - years)
    except ValueError:  # 29 February
        return date.replace(year=date.year - years, day=28)


def _standing(checked: CheckedLosses, rows: IntArray, date: dt.date) -> IntArray:
    """Row at which each claim stands on a day, -1 where it is not known yet; shape (claims,)."""
    table = checked.table
    code = claim_codes(table, rows)
    valuation = table.dates["valuation"][rows]
    standing = np.full(int(code.max()) + 1 if len(code) else 0, -1, dtype=np.int64)
    known = valuation <= np.datetime64(date)
    order = np.lexsort((rows[known], valuation[known].astype(np.int64)))
    # The last assignment stands, which is that of the latest valuation.
    standing[code[known][order]] = rows[known][order]
    return standing


def _by_year(
    checked: CheckedLosses, rows: IntArray, terms: _Terms, until: dt.date | None = None
) -> tuple[FloatArray, FloatArray]:
    """Events at or above their threshold, and their amounts, by year; each of shape (years,)."""
    table, window = checked.table, terms.window
    mask = np.zeros(len(table), dtype=np.bool_)
    mask[rows] = table.amount[rows] > 0
    if until is not None:
        mask &= table.date <= np.datetime64(until)
    events = group_events(table, mask, hours_window=terms.hours_window, amount=terms.value)
    threshold = np.where(np.isnan(events.threshold), terms.default_threshold, events.threshold)
    year, size = window.position(events.date), len(window.years)
    counted = (events.amount >= threshold) & (events.amount > 0) & (year >= 0) & (year < size)
    at, amount = year[counted], events.amount[counted]
    order = np.lexsort((amount, at))
    number = np.bincount(at, minlength=size).astype(np.float64)
    total = np.bincount(at[order], weights=amount[order], minlength=size).astype(np.float64)
    return number, total


def _open_claims(
    checked: CheckedLosses, standing: Sequence[IntArray], window: Window, value: FloatArray
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Amounts of open claims at each age, and what became of them a year later."""
    table, size = checked.table, len(window.years)
    open_rows = is_open(table)
    before, closed, still = (np.zeros(max(size - 1, 0)) for _ in range(3))
    for back in range(len(standing) - 1):
        was, then = standing[back + 1], standing[back]
        claims = np.flatnonzero(was >= 0)
        claims = claims[open_rows[was[claims]] & (value[was[claims]] > 0)]
        age = size - 2 - back - window.position(table.date[was[claims]])
        inside = (age >= 0) & (age < size - 1)
        claims, age = claims[inside], age[inside]
        order = np.lexsort((value[then[claims]], value[was[claims]], age))
        claims, age = claims[order], age[order]
        later, open_then = value[then[claims]], open_rows[then[claims]]
        np.add.at(before, age, value[was[claims]])
        np.add.at(closed, age[~open_then], later[~open_then])
        np.add.at(still, age[open_then], later[open_then])
    return before, closed, still
