"""Small tables beside the records (indices, rates of exchange): read like them, blank rows left out."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from lossagg.arrays import FloatArray, IntArray
from lossagg.records.amounts import NumberStyle
from lossagg.records.dates import DateArray
from lossagg.records.faults import Rows, list_faults, show
from lossagg.records.findings import Finding
from lossagg.records.headings import Wanted
from lossagg.records.money import Money
from lossagg.records.raw import Layout, cell_text
from lossagg.records.sources import read_source
from lossagg.records.table import chooser
from lossagg.records.typed import TypedColumns, type_columns
from lossagg.records.words import WordArray


@dataclass(frozen=True)
class SmallTable:
    """A table as read, without its blank rows; columns of shape (rows,).

    Args:
        file: name of the file.
        sheet: sheet read, None outside workbooks.
        sha256: digest of the file.
        row: row of the file; shape (rows,).
        headings: {canonical name: heading in the file}.
        all_headings: every heading of the file.
        positions: {canonical name: position of its column}.
        findings: what was noticed in reading.
        stops: faults of cells, all of which stop.
    """

    file: str
    sheet: str | None
    sha256: str
    row: IntArray
    headings: Mapping[str, str]
    all_headings: tuple[str, ...]
    positions: Mapping[str, int]
    findings: tuple[Finding, ...]
    stops: tuple[Finding, ...]
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

    def cell(self, name: str, at: int) -> str:
        """A cell as it is shown in a message."""
        return show(cell_text(self._cells[name][int(self._live[at])].as_py()))


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
        EnvironmentFault: the file cannot be opened.
    """
    source = read_source(path, layout, chooser(path.name, wanted, columns))
    raw = source.table
    typed = type_columns(raw, wanted.kinds, style, date_format, raw.empty)
    headings = {name: raw.headings[position] for name, position in raw.positions.items()}
    cells = {name: column.cells for name, column in raw.columns.items()}
    places = Rows(source.file, raw.sheet, raw.row, headings, cells, Money.zeros(len(raw.row)))
    stops = list_faults([fault for fault in typed.faults if fault.action == "stop"], places)
    live = np.flatnonzero(~raw.empty).astype(np.int64)
    return SmallTable(
        source.file,
        raw.sheet,
        source.sha256,
        raw.row[live],
        headings,
        raw.headings,
        raw.positions,
        raw.findings,
        tuple(stops),
        typed,
        live,
        cells,
    )
