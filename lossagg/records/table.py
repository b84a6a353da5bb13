"""Loss records read from a file: typed columns beside the text they came from."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property
from pathlib import Path
from typing import Any

import numpy as np

from lossagg.arrays import BoolArray, FloatArray, IntArray
from lossagg.records.amounts import NumberStyle
from lossagg.records.changes import Change
from lossagg.records.dates import DateArray
from lossagg.records.faults import Fault, Rows, list_faults
from lossagg.records.findings import Finding, raise_stops
from lossagg.records.headings import Wanted, heading_findings, locate_columns
from lossagg.records.identifiers import identifier_faults
from lossagg.records.money import Money
from lossagg.records.raw import Choose, Layout, RawTable
from lossagg.records.sources import Source, read_source
from lossagg.records.totals import Totals, find_totals
from lossagg.records.typed import TypedColumns, type_columns
from lossagg.records.words import WordArray

COLUMNS: Mapping[str, str] = {
    "amount": "number",
    "date": "date",
    "event": "word",
    "status": "word",
    "paid": "number",
    "outstanding": "number",
    "recoveries": "number",
    "reported": "date",
    "threshold": "number",
    "policy-limit": "number",
    "line": "word",
    "currency": "word",
    "deductible": "number",
    "claim": "word",
    "valuation": "date",
    "payment-date": "date",
    "closed-date": "date",
}
_WANTED = Wanted(COLUMNS, ("amount", "date"))
_STRETCH = 1_000_000


@dataclass(frozen=True)
class LossTable:
    """Loss records as read: one element per row of the file in every array.

    Get one from `read_losses`; hand it to `check_losses`.

    Args:
        file: name of the file, without its folder.
        sheet: sheet of the workbook, None for other files.
        sha256: digest of the file.
        row: row of the file, headings being row 1; shape (rows,).
        headings: {canonical name: heading in the file}.
        cells: {canonical name: cells as read}, Arrow arrays of shape (rows,).
        numbers: {canonical name: float64}, NaN where there is no number; shape (rows,).
        dates: {canonical name: days}, NaT where there is no date; shape (rows,).
        words: {canonical name: text}, "" where there is none; shape (rows,).
        exact: the amounts exactly as written, zero where there is none; shape (rows,).
        unreadable: True where the amount is no number; shape (rows,).
        blank: True for rows that carry no record: blank rows and a row of totals; shape (rows,).
        fingerprint: equal for rows equal in every column of the file; shape (rows,).
        faults: faults found in reading the cells.
        findings: findings about the file as a whole.
        changes: what was done to the amounts since they were read, in order: conversion to the currency
            of the portfolio, deductibles added back.
    """

    file: str
    sheet: str | None
    sha256: str
    row: IntArray
    headings: Mapping[str, str]
    cells: Mapping[str, Any]
    numbers: Mapping[str, FloatArray]
    dates: Mapping[str, DateArray]
    words: Mapping[str, WordArray]
    exact: Money
    unreadable: BoolArray
    blank: BoolArray
    fingerprint: IntArray
    faults: tuple[Fault, ...]
    findings: tuple[Finding, ...]
    changes: tuple[Change, ...] = ()

    def __post_init__(self) -> None:
        # Words may come as arrays of objects from a step that rewrote them; they are kept as codes.
        words = {n: w if isinstance(w, WordArray) else WordArray.of(w) for n, w in self.words.items()}
        object.__setattr__(self, "words", words)

    def __len__(self) -> int:
        """Number of rows read."""
        return len(self.row)

    def __repr__(self) -> str:
        """One line: the file, its rows and the columns read."""
        return f"LossTable({self.file!r}, rows={len(self)}, columns={sorted(self.headings)})"

    @property
    def rows(self) -> int:
        """Number of rows read, without headings and without blank rows at the foot."""
        return len(self)

    @property
    def amount(self) -> FloatArray:
        """Amounts, gross of recoveries; NaN where missing; shape (rows,)."""
        return self.numbers["amount"]

    @property
    def date(self) -> DateArray:
        """Loss dates; NaT where missing; shape (rows,)."""
        return self.dates["date"]

    @cached_property
    def alike(self) -> IntArray:
        """Positions of the rows that share date and amount with another row, in their order."""
        # One number for both; 2**64 over the golden ratio spreads the days over all bits (Knuth 1998,
        # The Art of Computer Programming, vol. 3, 6.4).
        days = self.date.astype(np.int64).view(np.uint64) * np.uint64(0x9E3779B97F4A7C15)
        key = np.nan_to_num(self.amount, nan=-1.0).view(np.uint64) ^ days
        ordered = np.sort(key)
        again = np.unique(ordered[1:][ordered[1:] == ordered[:-1]])
        del ordered
        if not again.size:
            return np.zeros(0, dtype=np.int64)
        parts = []
        for start in range(0, len(key), _STRETCH):
            some = key[start : start + _STRETCH]
            near = np.minimum(np.searchsorted(again, some), len(again) - 1)
            parts.append(start + np.flatnonzero(again[near] == some))
        return np.concatenate(parts)

    def number(self, name: str) -> FloatArray:
        """A column of numbers, all NaN when the file does not have it; shape (rows,)."""
        return self.numbers.get(name, np.full(len(self), np.nan))

    def word(self, name: str) -> WordArray:
        """A column of words, all empty when the file does not have it; shape (rows,)."""
        return self.words[name] if name in self.words else WordArray.empty(len(self))

    def places(self) -> Rows:
        """What findings need to know of this table."""
        return Rows(self.file, self.sheet, self.row, self.headings, self.cells, self.exact)


def read_losses(
    path: str | Path,
    *,
    columns: Mapping[str, str] | None = None,
    sheet: str | None = None,
    encoding: str | None = None,
    delimiter: str | None = None,
    decimal: str = ".",
    thousands: str | None = None,
    grouping: str = "three",
    date_format: str | None = None,
    time_zone: str | None = None,
    may_be_empty: bool = False,
) -> LossTable:
    """Read loss records from a CSV, TSV, XLSX or Parquet file, one row per loss.

    `amount` and `date` are required; the other names of `COLUMNS` are understood. What is ambiguous is
    not guessed: declare it.

    Args:
        path: the file.
        columns: {canonical name: heading} where the file uses other headings.
        sheet: sheet of a workbook with several.
        encoding: encoding of a text file that is neither UTF-8 nor marked.
        delimiter: delimiter of a text file where it is not clear.
        decimal: decimal mark, "." or ",".
        thousands: mark between groups of digits, if any.
        grouping: "three" digits to a group, or "indian": 12,34,567.
        date_format: format of the dates unless ISO, made of %Y, %m (or %b) and %d.
        time_zone: zone in which the day of a date-time with a zone is wanted, for example "Europe/Berlin".
        may_be_empty: True where it is known that there was no loss: then headings without rows are read as
            none; else they stop, because an export that failed looks the same.

    Returns:
        The table with the faults seen so far; check it with `check_losses`.

    Raises:
        InputError: the file cannot be read as declared (see the readers of each kind).
        RecordsError: cells that are no numbers or dates in the declared form; names the first ones.
        EnvironmentFault: the file cannot be opened.
    """
    style = NumberStyle(decimal, thousands, grouping)
    path = Path(path)
    layout = Layout(sheet=sheet, encoding=encoding, delimiter=delimiter, may_be_empty=may_be_empty)
    source = read_source(path, layout, chooser(path.name, _WANTED, columns or {}))
    raw = source.table
    typed = type_columns(raw, COLUMNS, style, date_format, raw.empty, time_zone)
    exact = typed.numbers["amount"].exact()
    totals = find_totals(raw, typed, exact)
    if totals.rows.any():
        typed = type_columns(raw, COLUMNS, style, date_format, raw.empty | totals.rows, time_zone)
    return _assemble(source, typed, exact, totals)


def chooser(file: str, wanted: Wanted, mapping: Mapping[str, str]) -> Choose:
    """Make the function that tells a reader which columns to keep, see `locate_columns`."""

    def choose(headings: Sequence[str], sheet: str | None) -> Mapping[str, int]:
        return locate_columns(headings, wanted, mapping, file, sheet)

    return choose


def file_findings(source: Source, wanted: Wanted) -> list[Finding]:
    """Findings about the file as a whole: its repairs and the columns that are not read."""
    raw = source.table
    unread = heading_findings(raw.headings, raw.positions, wanted, source.file, raw.sheet)
    return [*raw.findings, *unread]


def _assemble(source: Source, typed: TypedColumns, exact: Money, totals: Totals) -> LossTable:
    raw = source.table
    amount = typed.numbers["amount"]
    unreadable = ~np.isfinite(amount.values)
    faults = [*_row_faults(raw, typed, totals), *typed.faults]
    table = LossTable(
        file=source.file,
        sheet=raw.sheet,
        sha256=source.sha256,
        row=raw.row,
        headings={name: raw.headings[position] for name, position in raw.positions.items()},
        cells=typed.cells,
        numbers=typed.values,
        dates=typed.dates,
        words=typed.words,
        exact=exact,
        unreadable=unreadable,
        blank=raw.empty | totals.rows,
        fingerprint=raw.fingerprint,
        faults=tuple(fault for fault in faults if fault.mask.any()),
        findings=tuple(file_findings(source, _WANTED)),
    )
    raise_stops(list_faults([fault for fault in table.faults if fault.action == "stop"], table.places()))
    return table


def _row_faults(raw: RawTable, typed: TypedColumns, totals: Totals) -> list[Fault]:
    amount = typed.numbers["amount"]
    live = ~(raw.empty | totals.rows)
    faults = [
        Fault("blank-row", "set aside", None, raw.empty, "the row is blank", "Delete it.", tolerated=True),
        Fault(
            "totals-row",
            "set aside",
            "amount",
            totals.last,
            "the last row is a total of the others and would count every loss twice",
            "Delete it.",
            tolerated=True,
        ),
        Fault(
            "subtotal-row",
            "set aside",
            "amount",
            totals.between,
            "the row is the total of the rows above it and would count their losses twice",
            "Delete it.",
            tolerated=True,
        ),
        Fault(
            "missing-amount",
            "set aside",
            "amount",
            amount.missing & live,
            "the amount is missing",
            "Supply it; a missing amount is not zero.",
        ),
        Fault(
            "infinite-amount",
            "set aside",
            "amount",
            amount.infinite & live,
            "the amount is not finite",
            "Correct it.",
        ),
    ]
    faults += identifier_faults(raw, typed, live)
    return faults
