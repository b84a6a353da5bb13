"""A table as read: text, row numbers and nothing interpreted. Every kind of file is brought to this form.

Only the chosen columns are kept; of the others a fingerprint per row remains, so that rows repeated in
every column can be told from rows that merely agree in the columns that are read.
"""

from __future__ import annotations

from collections.abc import Callable, Hashable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from lossagg.arrays import BoolArray, IntArray
from lossagg.errors import InputError
from lossagg.records.findings import Finding, counted

Choose = Callable[[Sequence[str], "str | None"], Mapping[str, int]]
FIRST_ROW = 2


@dataclass(frozen=True, kw_only=True)
class Layout:
    """How a file is laid out, as far as the user declares it.

    Args:
        sheet: sheet of a workbook; None: its only visible sheet.
        encoding: encoding of a text file; None: by its byte order mark, else UTF-8.
        delimiter: delimiter of a text file; None: found if unambiguous.
    """

    sheet: str | None = None
    encoding: str | None = None
    delimiter: str | None = None


@dataclass(frozen=True)
class TextColumn:
    """One column as text.

    Args:
        text: Arrow array of strings, without nulls; shape (rows,).
        native: True where the file held a number or a date rather than text, written here with a
            decimal point or as an ISO date whatever formats are declared; shape (rows,).
    """

    text: Any
    native: BoolArray


@dataclass(frozen=True)
class RawTable:
    """The body of a table: chosen columns as text, with what the checks need to know of the rest.

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
    columns: Mapping[str, TextColumn]
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
    findings: list[Finding] = field(default_factory=list)
    _text: dict[str, list[Any]] = field(default_factory=dict)
    _native: dict[str, list[BoolArray]] = field(default_factory=dict)
    _empty: list[BoolArray] = field(default_factory=list)
    _fingerprint: list[IntArray] = field(default_factory=list)
    _foot: tuple[str, ...] = ()

    def add(
        self,
        columns: Sequence[Sequence[str]],
        native: Mapping[str, BoolArray] | None = None,
        rows: Sequence[Hashable] | None = None,
    ) -> None:
        """Add a chunk.

        Args:
            columns: every column of the file, as text.
            native: {canonical name: True where the file held a number or a date}; None: nowhere.
            rows: what identifies each row in all its columns; None: its cells.
        """
        import pyarrow as pa

        count = len(columns[0])
        empty = self._empty_rows(columns)
        for name, position in self.positions.items():
            self._text.setdefault(name, []).append(pa.array(columns[position], pa.string()))
            marks = native[name] if native else np.zeros(count, dtype=np.bool_)
            self._native.setdefault(name, []).append(marks)
        self._empty.append(empty)
        marked = map(hash, zip(*columns, strict=True) if rows is None else rows)
        self._fingerprint.append(np.fromiter(marked, dtype=np.int64, count=count))
        filled = np.flatnonzero(~empty)
        if filled.size:
            self._foot = tuple(column[int(filled[-1])] for column in columns)

    def finish(self) -> RawTable:
        """Close the table, without the blank rows at its foot.

        Raises:
            InputError: no row has any content.
        """
        import pyarrow as pa

        empty = np.concatenate(self._empty) if self._empty else np.zeros(0, dtype=np.bool_)
        filled = np.flatnonzero(~empty)
        if not filled.size:
            raise InputError(
                "the table has headings but no rows",
                where=f"file {self.file}" + (f", sheet {self.sheet!r}" if self.sheet else ""),
                remedy="Export the records again; a portfolio without any loss needs no records file.",
            )
        rows = int(filled[-1]) + 1
        if rows < len(empty):
            self.note(
                "blank-foot", f"{counted(len(empty) - rows, 'blank row')} at the foot ignored", "None needed."
            )
        columns = {
            name: TextColumn(pa.concat_arrays(chunks)[:rows], np.concatenate(self._native[name])[:rows])
            for name, chunks in self._text.items()
        }
        return RawTable(
            self.headings,
            self.positions,
            columns,
            np.arange(FIRST_ROW, FIRST_ROW + rows, dtype=np.int64),
            empty[:rows],
            np.concatenate(self._fingerprint)[:rows],
            self._foot,
            tuple(self.findings),
            self.sheet,
        )

    def note(self, code: str, message: str, remedy: str, warn: bool = False) -> None:
        """Keep a finding about the file as a whole."""
        action = "warn" if warn else "normalise"
        self.findings.append(
            Finding(code, action, self.file, None, None, None, message, remedy, sheet=self.sheet, count=0)  # type: ignore[arg-type]
        )

    def _empty_rows(self, columns: Sequence[Sequence[str]]) -> BoolArray:
        # Rows with a first chosen cell are not empty; only the others need a look at every cell.
        chosen = columns[next(iter(self.positions.values()))]
        empty = np.zeros(len(chosen), dtype=np.bool_)
        if all(map(str.strip, chosen)):
            return empty
        for index, cell in enumerate(chosen):
            if not cell.strip():
                empty[index] = not any(column[index].strip() for column in columns)
        return empty
