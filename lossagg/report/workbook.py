"""The tables as a workbook: full numbers with formats, ranges in columns of their own.

A workbook is a ZIP archive that carries clock times in several places; all of them are fixed, so
that the same assessment gives the same bytes. Text that a spreadsheet program could take for a
formula (CWE-1236; OWASP Application Security Verification Standard, section 1.2.10) is stored as
text and begins with an apostrophe, which also protects a later export to CSV.
"""

from __future__ import annotations

import re
import zipfile
from collections.abc import Sequence
from datetime import datetime
from io import BytesIO
from typing import TYPE_CHECKING, Any

from lossagg.report.cells import Absent, Cell, Column, Estimated, Ranged, Table, clean

if TYPE_CHECKING:
    from openpyxl.worksheet.worksheet import Worksheet

FORMATS = {
    "text": "@",
    "count": "#,##0",
    "money": "#,##0",
    "amount": "#,##0.00",
    "probability": "0.000%",
    "level": "0.0##%",
    "number": "#,##0.######",
    "ratio": "#,##0.0000",
    "statistic": "#,##0.######",
    "period": "#,##0",
}
RISKY_STARTS = ("=", "+", "-", "@", "\t", "\r", "\n", "\0")
LONGEST_TEXT = 32_000
WIDEST = 60
_ARCHIVE_TIME = (1980, 1, 1, 0, 0, 0)
_MODIFIED = re.compile(rb"(<dcterms:modified[^>]*>)[^<]*(</dcterms:modified>)")


def safe_text(text: str) -> str:
    """Text that no spreadsheet program runs as a formula."""
    start = text.startswith(RISKY_STARTS)
    cleaned = clean(text).replace("\t", " ")[:LONGEST_TEXT]
    return f"'{cleaned}" if start else cleaned


def render_workbook(tables: Sequence[Table], day: str) -> bytes:
    """The workbook, one sheet per table.

    Args:
        tables: the tables; their keys become the names of the sheets.
        day: the date written into the document as its creation, "YYYY-MM-DD": the valuation date.

    Returns:
        The XLSX file; the same tables give the same bytes.
    """
    from openpyxl import Workbook

    book = Workbook()
    book.remove(book.worksheets[0])
    for table in tables:
        _fill(book.create_sheet(table.key), table)
    moment = datetime.fromisoformat(day)
    book.properties.creator = "lossagg"
    book.properties.created = moment
    stream = BytesIO()
    book.save(stream)
    return _with_fixed_times(stream.getvalue(), moment)


def _fill(sheet: Worksheet, table: Table) -> None:
    from openpyxl.styles import Alignment, Font

    _write(sheet, 1, 1, table.title, "text")
    sheet["A1"].font = Font(bold=True)
    headings = [heading for column in table.columns for heading in _headings(column)]
    for place, heading in enumerate(headings, 1):
        _write(sheet, 2, place, heading, "text")
        sheet.cell(2, place).font = Font(bold=True)
        sheet.cell(2, place).alignment = Alignment(wrap_text=True, vertical="top")
    for row_number, row in enumerate(table.rows, 3):
        place = 1
        for column, cell in zip(table.columns, row, strict=True):
            for value in _values(cell, column):
                _write(sheet, row_number, place, value, column.kind)
                place += 1
    for offset, note in enumerate(table.notes, len(table.rows) + 4):
        _write(sheet, offset, 1, note, "text")
    sheet.freeze_panes = "A3"
    _set_widths(sheet, table, headings)


def _headings(column: Column) -> tuple[str, ...]:
    if not column.ranged:
        return (column.heading,)
    return column.heading, f"{column.heading}, low", f"{column.heading}, high"


def _values(cell: Cell, column: Column) -> tuple[str | int | float | None, ...]:
    """The values of a cell, as many as its column has headings."""
    if isinstance(cell, Absent):
        return (cell.words, None, None) if column.ranged else (cell.words,)
    if isinstance(cell, Ranged):
        return cell.value, cell.low, cell.high
    plain = cell.value if isinstance(cell, Estimated) else cell
    return (plain, None, None) if column.ranged else (plain,)


def _write(sheet: Worksheet, row: int, column: int, value: Any, kind: str) -> None:
    if value is None or value == "":
        return
    if isinstance(value, str):
        cell = sheet.cell(row, column)
        cell.value = safe_text(value)
        cell.data_type = "s"
        return
    cell = sheet.cell(row, column, value)
    small = kind == "money" and abs(value) < 1000
    cell.number_format = FORMATS["amount" if small else kind]


def _set_widths(sheet: Worksheet, table: Table, headings: Sequence[str]) -> None:
    from openpyxl.utils import get_column_letter

    for place, heading in enumerate(headings, 1):
        longest = max(len(word) for word in (*heading.split(), ""))
        for row in sheet.iter_rows(3, 2 + min(len(table.rows), 200), place, place, values_only=True):
            longest = max(
                longest, len(row[0]) if isinstance(row[0], str) else 14 if row[0] is not None else 0
            )
        sheet.column_dimensions[get_column_letter(place)].width = min(WIDEST, longest + 2)


def _with_fixed_times(data: bytes, moment: datetime) -> bytes:
    """The same archive with every clock time in it replaced."""
    stamp = moment.strftime("%Y-%m-%dT%H:%M:%SZ").encode()
    stream = BytesIO()
    with zipfile.ZipFile(BytesIO(data)) as source, zipfile.ZipFile(stream, "w") as target:
        for name in source.namelist():
            content = source.read(name)
            if name == "docProps/core.xml":
                content = _MODIFIED.sub(rb"\g<1>" + stamp + rb"\g<2>", content)
            entry = zipfile.ZipInfo(name, _ARCHIVE_TIME)
            entry.compress_type = zipfile.ZIP_DEFLATED
            entry.external_attr = 0o600 << 16
            target.writestr(entry, content)
    return stream.getvalue()
