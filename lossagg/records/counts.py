"""Counts by year beside a list of claims: two tellings of one history, which must agree.

Whoever hands in both means the same claims. Where they differ one of them is incomplete, and a frequency
fitted to either would be anyone's guess; so the difference stops the run and both are shown.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

from lossagg.arrays import IntArray
from lossagg.errors import InputError, place
from lossagg.records.amounts import NumberStyle
from lossagg.records.check import USED, CheckedLosses
from lossagg.records.controls import standing_claims
from lossagg.records.findings import Finding, counted, raise_stops
from lossagg.records.headings import Wanted, nearest
from lossagg.records.raw import Layout
from lossagg.records.small_table import EPOCH, SmallTable, read_small_table

_WANTED = Wanted({"year": "number", "count": "number", "line": "word"}, ("year", "count"))
_REMEDY = "Give the number of claims of each year (and line) once, as a whole number."


@dataclass(frozen=True)
class CountTable:
    """Claims by year, of one line or of several; arrays of shape (rows,). Get one from `read_counts`.

    Args:
        file: name of the file.
        sha256: its digest.
        heading: heading of the counts.
        row: row of the file.
        year: calendar years.
        count: claims whose loss is of the year.
        line: line of each row as the file names it; "" when the file has no such column.
        findings: what was noticed in reading.
    """

    file: str
    sha256: str
    heading: str
    row: IntArray
    year: IntArray
    count: IntArray
    line: tuple[str, ...]
    findings: tuple[Finding, ...]

    @property
    def rows(self) -> int:
        """Number of rows read."""
        return len(self.year)

    def for_line(self, name: str) -> CountTable:
        """The counts of one line; the whole table when the file does not tell lines apart.

        Raises:
            InputError: the file tells lines apart but does not have this one.
        """
        if set(self.line) <= {""}:
            return self
        at = np.flatnonzero([line.casefold() == name.strip().casefold() for line in self.line])
        if not at.size:
            raise InputError(
                "the counts have no rows for a line",
                where=place(file=self.file),
                value=name,
                remedy=nearest(name, sorted(set(self.line))),
            )
        parts = {part: getattr(self, part)[at] for part in ("row", "year", "count")}
        return replace(self, line=tuple(self.line[k] for k in at), **parts)


def read_counts(path: str | Path, *, columns: Mapping[str, str] | None = None) -> CountTable:
    """Read claims by year, and by line where the file has a `line` column.

    Args:
        path: a CSV, TSV, XLSX or Parquet file with the columns `year` and `count`.
        columns: {canonical name: heading} where the file uses other headings.

    Raises:
        InputError: the file cannot be read, a year is none or repeated, a count is no whole number.
        EnvironmentFault: the file cannot be opened.
    """
    table = read_small_table(Path(path), _WANTED, columns or {}, Layout(), NumberStyle("."))
    year, count = table.years(), table.number("count")
    lines = tuple(table.word("line")) if "line" in table.headings else ("",) * len(year)
    for at in np.flatnonzero(~((count >= 0) & (count == np.floor(count)) & (count < 2.0**53))).tolist():
        table.refuse(at, "count", "the count is missing, negative or no whole number", _REMEDY)
    _require_once(table, year, lines)
    return CountTable(
        table.file,
        table.sha256,
        table.headings["count"],
        table.row,
        year,
        count.astype(np.int64),
        lines,
        table.findings,
    )


def _require_once(table: SmallTable, year: IntArray, lines: tuple[str, ...]) -> None:
    seen = set()
    for at, key in enumerate(zip(year.tolist(), map(str.casefold, lines), strict=True)):
        if key in seen:
            table.refuse(at, "year", "the year stands in more than one row", _REMEDY)
        seen.add(key)


def check_counts(checked: CheckedLosses, counts: CountTable) -> None:
    """Compare counts with the claims of a line, year by year.

    Claims are counted as control totals count them: rows set aside for a fault stand for theirs, copies and
    earlier valuations do not. Years before the observation window are not compared.

    Args:
        checked: the records of the line.
        counts: the counts of the line.

    Raises:
        RecordsError: a year in which they differ, with both numbers.
    """
    claims = standing_claims(checked) & ~np.isnat(checked.table.date)
    year = checked.table.date[claims].astype("datetime64[Y]").astype(np.int64) + EPOCH
    used = year[checked.reason[claims] == USED]
    begins = checked.terms.first_year_of(checked.line) or 0
    pairs = zip(counts.count.tolist(), counts.row.tolist(), strict=True)
    stated = dict(zip(counts.year.tolist(), pairs, strict=True))
    last = checked.terms.valuation_date.year
    listed = {at for at in np.unique(year).tolist() if at <= last}
    stops = []
    for at in sorted(at for at in listed | set(stated) if at >= begins):
        count, row = stated.get(at, (None, None))
        total, kept = int(np.count_nonzero(year == at)), int(np.count_nonzero(used == at))
        if count == total:
            continue
        says = f"{counted(count, 'claim')} of {at}" if count is not None else f"nothing of {at}"
        stops.append(
            Finding(
                "counts-disagree",
                "stop",
                counts.file,
                row,
                counts.heading,
                None if count is None else str(count),
                f"the counts say {says}, the list of claims in {checked.table.file} holds {total} ({kept} "
                f"used, {total - kept} set aside)",
                "Find which of the two is incomplete; leave the counts out if the list is right.",
                line=checked.line,
                count=abs(total - (count or 0)),
            )
        )
    raise_stops(stops)
