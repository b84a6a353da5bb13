"""Small tables beside the records (indices, rates, counts): read like them, without blank rows."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any, NoReturn

import numpy as np

from lossagg.arrays import FloatArray, IntArray
from lossagg.errors import InputError, place
from lossagg.records.amounts import NumberStyle
from lossagg.records.dates import DateArray
from lossagg.records.faults import Rows, list_faults, show
from lossagg.records.findings import Finding, raise_stops
from lossagg.records.headings import Wanted, heading_findings
from lossagg.records.money import Money
from lossagg.records.raw import Layout, cell_text
from lossagg.records.sources import read_source
from lossagg.records.table import chooser
from lossagg.records.typed import TypedColumns, type_columns
from lossagg.records.words import WordArray

YEARS = (1900, 2200)
EPOCH = 1970


@dataclass(frozen=True)
class SmallTable:
    """A table as read, without its blank rows; columns of shape (rows,).

    Args:
        file: name of the file.
        sheet: sheet read, None outside workbooks.
        sha256: digest of the file.
        row: row of the file; shape (rows,).
        headings: {canonical name: heading in the file}.
        findings: what was noticed in reading.
    """

    file: str
    sheet: str | None
    sha256: str
    row: IntArray
    headings: Mapping[str, str]
    findings: tuple[Finding, ...]
    _typed: TypedColumns
    _live: IntArray
    _cells: Mapping[str, Any]

    def number(self, name: str) -> FloatArray:
        """A column of numbers, NaN where there is none."""
        return self._typed.numbers[name].values[self._live]

    def date(self, name: str) -> DateArray:
        """A column of dates, NaT where there is none."""
        return self._typed.dates[name][self._live]

    def word(self, name: str) -> WordArray:
        """A column of words, "" where there is none."""
        return self._typed.words[name][self._live]

    def years(self) -> IntArray:
        """The column `year` as calendar years.

        Raises:
            InputError: a year that is none.
        """
        year = self.number("year")
        low, high = YEARS
        for at in np.flatnonzero(~((year >= low) & (year <= high) & (year == np.floor(year)))).tolist():
            self.refuse(at, "year", f"the year is not a calendar year between {low} and {high}")
        return year.astype(np.int64)

    def refuse(self, at: int, column: str, what: str, remedy: str = "Correct it.") -> NoReturn:
        """Stop at a cell.

        Raises:
            InputError: always, with the place and the cell.
        """
        raise InputError(
            what,
            where=place(
                file=self.file, sheet=self.sheet, row=int(self.row[at]), column=self.headings[column]
            ),
            value=show(cell_text(self._cells[column][int(self._live[at])].as_py())),
            remedy=remedy,
        )


def read_small_table(
    path: Path,
    wanted: Wanted,
    columns: Mapping[str, str],
    layout: Layout,
    style: NumberStyle,
    date_format: str | None = None,
) -> SmallTable:
    """Read a table of a few columns; what its rows mean is for the caller to check.

    Raises:
        InputError: the file cannot be read as declared.
        RecordsError: cells that are no numbers or dates.
        EnvironmentFault: the file cannot be opened.
    """
    source = read_source(path, layout, chooser(path.name, wanted, columns))
    raw = source.table
    typed = type_columns(raw, wanted.kinds, style, date_format, raw.empty)
    headings = {name: raw.headings[position] for name, position in raw.positions.items()}
    cells = {name: column.cells for name, column in raw.columns.items()}
    places = Rows(source.file, raw.sheet, raw.row, headings, cells, Money.zeros(len(raw.row)))
    raise_stops(list_faults([fault for fault in typed.faults if fault.action == "stop"], places))
    unread = heading_findings(raw.headings, raw.positions, wanted, source.file, raw.sheet)
    live = np.flatnonzero(~raw.empty).astype(np.int64)
    return SmallTable(
        source.file,
        raw.sheet,
        source.sha256,
        raw.row[live],
        headings,
        (*raw.findings, *unread),
        typed,
        live,
        cells,
    )
