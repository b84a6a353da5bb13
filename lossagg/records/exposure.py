"""Exposure by year: what the number of losses is proportional to (payroll, vehicles, sums insured, ...).

A year that is absent is an error and never a zero; a year without losses stays in the history.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from lossagg.arrays import BoolArray, FloatArray, IntArray
from lossagg.errors import InputError, place
from lossagg.records.amounts import NumberStyle
from lossagg.records.faults import Fault, Rows, list_faults
from lossagg.records.findings import Finding, raise_stops
from lossagg.records.headings import Wanted, heading_findings, nearest
from lossagg.records.money import Money
from lossagg.records.raw import Layout, RawTable
from lossagg.records.sources import read_source
from lossagg.records.table import chooser
from lossagg.records.typed import TypedColumns, type_columns
from lossagg.records.word_rules import canonical_lines
from lossagg.records.words import WordArray

JUMP = 10.0
YEARS = (1900, 2200)
_WANTED = Wanted({"year": "number", "exposure": "number", "line": "word"}, ("year", "exposure"))


@dataclass(frozen=True)
class ExposureTable:
    """Exposure of whole years, of one line or of several; arrays of shape (rows,), sorted by line and year.

    Args:
        file: name of the file.
        sha256: its digest.
        base: heading of the exposure column, which says what the exposure is.
        year: calendar years.
        exposure: exposure of the whole year, also of one that is observed in part.
        line: line of each row as the file names it; "" when the file has no such column.
        findings: what was noticed.
    """

    file: str
    sha256: str
    base: str
    year: IntArray
    exposure: FloatArray
    line: tuple[str, ...]
    findings: tuple[Finding, ...]

    def __repr__(self) -> str:
        """One line: the file, its years and lines."""
        lines = sorted(set(self.line) - {""})
        of = f", lines={lines}" if lines else ""
        return f"ExposureTable({self.file!r}, years={self.year.min()}-{self.year.max()}{of})"

    @property
    def rows(self) -> int:
        """Number of rows read."""
        return len(self.year)

    def for_line(self, name: str | None) -> ExposureTable:
        """The exposure of one line; the whole table when the file does not tell lines apart.

        Raises:
            InputError: the file tells lines apart but does not have this one.
        """
        if name is None or set(self.line) == {""}:
            return self
        mine = [line.casefold() == name.strip().casefold() for line in self.line]
        if not any(mine):
            raise InputError(
                "the exposure file has no rows for a line",
                where=place(file=self.file),
                value=name,
                remedy=nearest(name, sorted(set(self.line))),
            )
        at = np.flatnonzero(mine)
        return ExposureTable(
            self.file,
            self.sha256,
            self.base,
            self.year[at],
            self.exposure[at],
            tuple(self.line[index] for index in at),
            tuple(found for found in self.findings if found.line in (None, self.line[at[0]])),
        )

    def of_year(self, year: int) -> float | None:
        """Exposure of one whole year, None when the table does not have it.

        Raises:
            InputError: the table holds several lines; choose one first.
        """
        if len(set(self.line)) > 1:
            raise InputError(
                "the exposure is of several lines",
                where=place(file=self.file),
                remedy="Take one line with for_line first.",
            )
        at = np.flatnonzero(self.year == year)
        return float(self.exposure[at[0]]) if at.size else None


def read_exposure(
    path: str | Path,
    *,
    columns: Mapping[str, str] | None = None,
    lines: Sequence[str] | None = None,
    sheet: str | None = None,
    encoding: str | None = None,
    delimiter: str | None = None,
    decimal: str = ".",
    thousands: str | None = None,
) -> ExposureTable:
    """Read exposure by year, and by line where the file has a `line` column.

    Args:
        path: a CSV, TSV, XLSX or Parquet file with the columns `year` and `exposure`.
        columns: {canonical name: heading} where the file uses other headings.
        lines: names of the lines of the portfolio; other names in the file stop. None: not compared.
        sheet: sheet of a workbook with several.
        encoding: encoding of a text file that is neither UTF-8 nor marked.
        delimiter: delimiter of a text file where it is not clear.
        decimal: decimal mark.
        thousands: mark between groups of three digits, if any.

    Returns:
        The exposures.

    Raises:
        InputError: the file cannot be read as declared.
        RecordsError: a year that is none or is repeated, an exposure that is missing, zero or negative,
            an unknown line.
        EnvironmentFault: the file cannot be opened.
    """
    path = Path(path)
    style = NumberStyle(decimal, thousands)
    layout = Layout(sheet=sheet, encoding=encoding, delimiter=delimiter)
    source = read_source(path, layout, chooser(path.name, _WANTED, columns or {}))
    raw = source.table
    typed = type_columns(raw, _WANTED.kinds, style, None, raw.empty)
    places = _places(raw, source.file)
    raise_stops(list_faults(_faults(raw, typed, lines), places))
    live = np.flatnonzero(~raw.empty)
    year = typed.numbers["year"].values[live].astype(np.int64)
    words = np.asarray(typed.words.get("line", WordArray.empty(len(raw.row))))[live]
    order = np.lexsort((year, words.astype(str)))
    table = ExposureTable(
        source.file,
        source.sha256,
        raw.headings[raw.positions["exposure"]],
        year[order],
        typed.numbers["exposure"].values[live][order],
        tuple(str(word) for word in words[order]),
        (*raw.findings, *heading_findings(raw.headings, raw.positions, _WANTED, source.file, raw.sheet)),
    )
    return _with_jumps(table)


def _places(raw: RawTable, file: str) -> Rows:
    headings = {name: raw.headings[position] for name, position in raw.positions.items()}
    cells = {name: column.cells for name, column in raw.columns.items()}
    return Rows(file, raw.sheet, raw.row, headings, cells, Money.zeros(len(raw.row)))


def _faults(raw: RawTable, typed: TypedColumns, lines: Sequence[str] | None) -> list[Fault]:
    live = ~raw.empty
    year, exposure = typed.numbers["year"], typed.numbers["exposure"]
    low, high = YEARS
    inside = (year.values >= low) & (year.values <= high) & (year.values == np.floor(year.values))
    faults = [fault for fault in typed.faults if fault.action == "stop"]
    faults += [
        Fault(
            "exposure-year",
            "stop",
            "year",
            live & ~year.wrong & ~inside,
            f"the year is not a calendar year between {low} and {high}",
            "Write each year with four digits, one row per year.",
        ),
        Fault(
            "exposure-amount",
            "stop",
            "exposure",
            live & ~exposure.wrong & ~(np.isfinite(exposure.values) & (exposure.values > 0)),
            "the exposure is missing, zero, negative or infinite",
            "Supply it; a year without exposure cannot be part of the history.",
        ),
        Fault(
            "exposure-repeated",
            "stop",
            "year",
            live & _repeated(year.values, typed, live),
            "the year stands in more than one row",
            "Give one exposure for each year (and line).",
        ),
    ]
    if lines is not None and "line" in typed.words:
        known = canonical_lines(lines)
        for name in sorted(
            {word for word in typed.words["line"][live].present() if word.casefold() not in known}
        ):
            mask = live & (typed.words["line"] == name)
            message = "the line is not one of the portfolio" if name else "the line is missing"
            faults.append(Fault("unknown-line", "stop", "line", mask, message, nearest(name, lines)))
    return faults


def _repeated(year: FloatArray, typed: TypedColumns, live: BoolArray) -> BoolArray:
    words = typed.words.get("line", WordArray.empty(len(year))).tolist()
    seen: set[tuple[float, str]] = set()
    repeated = np.zeros(len(year), dtype=np.bool_)
    for index in np.flatnonzero(live).tolist():
        key = (float(year[index]), words[index].casefold())
        repeated[index] = key in seen
        seen.add(key)
    return repeated


def _with_jumps(table: ExposureTable) -> ExposureTable:
    """Warn where exposure changes tenfold from one row to the next of a line: a change of unit, perhaps."""
    found = []
    for at in range(1, len(table.year)):
        if table.line[at] != table.line[at - 1]:
            continue
        before, after = table.exposure[at - 1], table.exposure[at]
        if max(after / before, before / after) >= JUMP:
            found.append(
                Finding(
                    "exposure-jump",
                    "warn",
                    table.file,
                    None,
                    table.base,
                    f"{before:g} to {after:g}",
                    f"the exposure changes tenfold or more from {table.year[at - 1]} to {table.year[at]}",
                    "Check that every year is in the same unit.",
                    line=table.line[at] or None,
                )
            )
    fields = (table.file, table.sha256, table.base, table.year, table.exposure, table.line)
    return ExposureTable(*fields, (*table.findings, *found))
