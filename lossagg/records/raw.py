"""A table as read: cells, row numbers and nothing interpreted. Every kind of file is brought to this form.

Only the chosen columns are kept; of the others a fingerprint per row remains, so that rows repeated in
every column can be told from rows that merely agree in the columns that are read.
"""

from __future__ import annotations

import datetime as dt
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from lossagg.arrays import BoolArray, IntArray
from lossagg.errors import InputError, place
from lossagg.records.findings import Action, Finding, counted
from lossagg.records.marks import as_marks, mark_column

Choose = Callable[[Sequence[str], "str | None"], Mapping[str, int]]
FIRST_ROW = 2
MOST_ROWS = 50_000_000


@dataclass(frozen=True, kw_only=True)
class Layout:
    """How a file is laid out, as far as the user declares it.

    Args:
        sheet: sheet of a workbook; None: its only visible sheet.
        encoding: encoding of a text file; None: by its byte order mark, else UTF-8.
        delimiter: delimiter of a text file; None: found if unambiguous.
        may_be_empty: whether headings without rows are an answer; else they stop the reading, because an
            export that failed looks the same.
    """

    sheet: str | None = None
    encoding: str | None = None
    delimiter: str | None = None
    may_be_empty: bool = False


@dataclass(frozen=True)
class Column:
    """One column as read.

    Args:
        cells: Arrow array, shape (rows,): of strings without nulls, or of numbers or dates where the
            file itself says that all cells are.
        native: True where a cell written as text held a number or a date in the file, written here with
            a decimal point or as an ISO date whatever formats are declared; shape (rows,).
    """

    cells: Any
    native: BoolArray

    @property
    def is_text(self) -> bool:
        """Whether the cells are strings."""
        import pyarrow as pa

        return bool(pa.types.is_string(self.cells.type))

    def as_text(self) -> Any:
        """The cells as an Arrow array of strings, "" for nulls."""
        import pyarrow as pa

        return self.cells if self.is_text else pa.array(map(cell_text, self.cells.to_pylist()), pa.string())


def cell_text(cell: Any) -> str:
    """Write a cell as text: numbers with a decimal point and the digits that identify them, dates as ISO."""
    if cell is None:
        return ""
    if isinstance(cell, bool):
        return "TRUE" if cell else "FALSE"
    if isinstance(cell, float):
        return repr(cell).removesuffix(".0")
    if isinstance(cell, dt.datetime):
        plain = cell.time() == dt.time() and cell.tzinfo is None
        return cell.date().isoformat() if plain else cell.isoformat()
    return str(cell)


@dataclass(frozen=True)
class RawTable:
    """The body of a table: chosen columns, with what the checks need to know of the rest.

    Args:
        headings: every heading, as it stands in the file.
        positions: {canonical name: position of its column from 0}.
        columns: {canonical name: column}.
        row: row of the file, headings being row 1; shape (rows,).
        empty: True for rows without any content; shape (rows,).
        fingerprint: equal for rows equal in every column of the file; shape (rows,).
        foot: cells of the last row with content, to recognise a row of totals.
        findings: what was noticed or repaired while reading.
        sheet: sheet read, None outside workbooks.
    """

    headings: tuple[str, ...]
    positions: Mapping[str, int]
    columns: Mapping[str, Column]
    row: IntArray
    empty: BoolArray
    fingerprint: IntArray
    foot: tuple[str, ...]
    findings: tuple[Finding, ...]
    sheet: str | None


@dataclass
class TableBuilder:
    """Collects a table chunk by chunk, so that the columns that are not read are let go at once."""

    file: str
    sheet: str | None
    headings: tuple[str, ...]
    positions: Mapping[str, int]
    may_be_empty: bool = False
    findings: list[Finding] = field(default_factory=list)
    _cells: dict[str, list[Any]] = field(default_factory=dict)
    _native: dict[str, list[BoolArray]] = field(default_factory=dict)
    _empty: list[BoolArray] = field(default_factory=list)
    _fingerprint: list[IntArray] = field(default_factory=list)
    _foot: tuple[str, ...] = ()

    def add(self, columns: Sequence[Any], native: Mapping[str, BoolArray] | None = None) -> None:
        """Add a chunk.

        Args:
            columns: every column of the file, Arrow arrays of one length.
            native: {canonical name: True where a cell of text held a number or a date}; None: nowhere.
        """
        count = len(columns[0])
        marks = np.zeros(count, dtype=np.uint64)
        for column in columns:
            mark_column(marks, column)
        self._fingerprint.append(as_marks(marks))
        for name, position in self.positions.items():
            self._cells.setdefault(name, []).append(columns[position])
            if native is not None:
                self._native.setdefault(name, []).append(native[name])
        empty = self._empty_rows(columns)
        self._empty.append(empty)
        filled = np.flatnonzero(~empty)
        if filled.size:
            self._foot = tuple(cell_text(column[int(filled[-1])].as_py()) for column in columns)

    def finish(self) -> RawTable:
        """Close the table, without the blank rows at its foot.

        Raises:
            InputError: no row has any content, where the table may not be empty.
        """
        import pyarrow as pa

        empty = np.concatenate(self._empty) if self._empty else np.zeros(0, dtype=np.bool_)
        filled = np.flatnonzero(~empty)
        if not filled.size and not self.may_be_empty:
            raise InputError(
                "the table has headings but no rows",
                where=place(file=self.file, sheet=self.sheet),
                remedy="Export it again; only a line that says without-losses = true may have such records.",
            )
        rows = int(filled[-1]) + 1 if filled.size else 0
        if rows < len(empty):
            self.note(
                "blank-foot", f"{counted(len(empty) - rows, 'blank row')} at the foot ignored", "None needed."
            )
        columns = {}
        for name in self.positions:
            cells = pa.concat_arrays(self._cells.pop(name))[:rows] if rows else pa.array([], pa.string())
            columns[name] = Column(cells, self._natives(name, rows))
        return RawTable(
            self.headings,
            self.positions,
            columns,
            np.arange(FIRST_ROW, FIRST_ROW + rows, dtype=np.int64),
            empty[:rows],
            np.concatenate(self._fingerprint)[:rows] if rows else np.zeros(0, dtype=np.int64),
            self._foot,
            tuple(self.findings),
            self.sheet,
        )

    def _natives(self, name: str, rows: int) -> BoolArray:
        chunks = self._native.pop(name, None)
        # A view of one False, not a byte for each of what may be ten million rows.
        if chunks is None or not rows:
            return np.broadcast_to(np.False_, rows)
        return np.concatenate(chunks)[:rows]

    def note(self, code: str, message: str, remedy: str, warn: bool = False) -> None:
        """Keep a finding about the file as a whole."""
        action: Action = "warn" if warn else "normalise"
        self.findings.append(
            Finding(code, action, self.file, None, None, None, message, remedy, sheet=self.sheet, count=0)
        )

    def _empty_rows(self, columns: Sequence[Any]) -> BoolArray:
        # Rows with a first chosen cell are not empty; only the others need a look at every cell.
        first = columns[next(iter(self.positions.values()))]
        empty = _is_blank(first)
        for column in columns:
            at = np.flatnonzero(empty)
            if not at.size:
                break
            empty[at] = _is_blank(column.take(at))
        return empty


def _is_blank(column: Any) -> BoolArray:
    """True where a cell is null or has no visible character; shape (rows,)."""
    import pyarrow as pa
    import pyarrow.compute as pc

    if pa.types.is_string(column.type):
        blank = pc.equal(pc.binary_length(pc.utf8_trim_whitespace(column)), 0).fill_null(True)
    else:
        blank = column.is_null()
    mask: BoolArray = np.array(blank.to_numpy(zero_copy_only=False), dtype=np.bool_)
    return mask
