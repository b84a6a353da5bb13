"""Workbooks (.xlsx): the values last stored in one sheet, and nothing that could run or reach outside.

Formulas are never computed: only the value stored beside a formula is read, and a formula without one
stops. Macros, links to other workbooks and encrypted files are refused before any cell is looked at, and
so are packages that unpack to far more than they weigh.
"""

from __future__ import annotations

import re
import warnings
import zipfile
import zlib
from collections.abc import Iterator, Sequence
from contextlib import closing, contextmanager
from itertools import islice
from pathlib import Path
from typing import Any, BinaryIO

import numpy as np

from lossagg.errors import InputError, place
from lossagg.records.findings import counted
from lossagg.records.headings import nearest
from lossagg.records.raw import FIRST_ROW, Choose, Layout, RawTable, TableBuilder, cell_text

MOST_BYTES = 4 * 1024**3
MOST_RATIO = 200
_CHUNK = 10_000
_OVERLAP = 4096
_FORMULA = re.compile(rb"<f[ >/]")
_MERGED = re.compile(rb"<mergeCell ")
_HIDDEN = re.compile(rb'<(?:row|col) [^>]*hidden="(?:1|true)"')


def read_workbook(path: Path, layout: Layout, choose: Choose) -> RawTable:
    """Read one sheet of a workbook.

    Args:
        path: the file.
        layout: the sheet, where declared.
        choose: says from the headings which columns to keep.

    Returns:
        The sheet as text; cells that hold numbers or dates are marked as such.

    Raises:
        InputError: macros, external links, encryption, an unclear choice of sheet, merged cells, a
            formula without a stored value, no rows.
    """
    _check_package(path)
    with _opened(path, data_only=True) as book:
        sheet = _choose_sheet(book, layout.sheet, path.name)
        marks = _marks(path, sheet)
        if marks["merged"]:
            raise InputError(
                "the sheet has merged cells",
                where=place(file=path.name, sheet=sheet.title),
                remedy="Unmerge them, so that each row stands on its own.",
            )
        with warnings.catch_warnings():
            # A day number beyond the calendar comes as an error value, which is reported as one.
            warnings.filterwarnings("ignore", message="Cell .* is marked as a date", category=UserWarning)
            return _read_sheet(path, sheet, marks, layout, choose)


def _read_sheet(path: Path, sheet: Any, marks: dict[str, bool], layout: Layout, choose: Choose) -> RawTable:
    import pyarrow as pa
    from openpyxl.utils.datetime import CALENDAR_MAC_1904

    rows = sheet.iter_rows(values_only=True)
    headings = _headings(next(rows, ()), path.name, sheet.title)
    positions = choose(headings, sheet.title)
    builder = TableBuilder(path.name, sheet.title, headings, positions, layout.may_be_empty)
    if marks["hidden"] or sheet.sheet_state != "visible":
        builder.note(
            "hidden-cells",
            "the sheet, or some of its rows or columns, are hidden; they are read like the others",
            "Unhide them and check that they belong to the records.",
            warn=True,
        )
    if marks["connected"]:
        builder.note(
            "data-connection",
            "the workbook fetches data from elsewhere; the values stored in it are read, whatever their age",
            "Refresh and save it, or paste the values.",
            warn=True,
        )
    if hidden := _hidden_sheets(sheet):
        builder.note(
            "hidden-sheets",
            f"the workbook has {counted(len(hidden), 'hidden sheet')}, not read",
            "Unhide them and check that no records are left out.",
            warn=True,
        )
    if sheet.parent.epoch == CALENDAR_MAC_1904:
        builder.note("dates-from-1904", "the workbook counts its days from 1904", "None needed.")
    if marks["formula"]:
        _refuse_unstored(path, sheet.title, positions)
    number = FIRST_ROW
    while chunk := list(islice(rows, _CHUNK)):
        table = [_fit(row, len(headings), number + i, path.name, sheet.title) for i, row in enumerate(chunk)]
        columns = [pa.array(map(cell_text, column), pa.string()) for column in zip(*table, strict=True)]
        native = {
            name: np.array([not isinstance(row[position], str) for row in table], dtype=np.bool_)
            for name, position in positions.items()
        }
        builder.add(columns, native)
        number += len(chunk)
    return builder.finish()


def _hidden_sheets(read: Any) -> list[str]:
    sheets = read.parent.worksheets
    return [each.title for each in sheets if each.sheet_state != "visible" and each.title != read.title]


def _headings(first: Sequence[Any], file: str, sheet: str) -> tuple[str, ...]:
    cells = [cell_text(cell).strip() for cell in first]
    while cells and not cells[-1]:
        cells.pop()
    if not cells:
        raise InputError(
            "the sheet is empty or its first row is blank",
            where=place(file=file, sheet=sheet, row=1),
            remedy="The first row must hold the headings, without notes above them.",
        )
    return tuple(cells)


def _fit(row: Sequence[Any], width: int, number: int, file: str, sheet: str) -> tuple[Any, ...]:
    """Cut or fill a row to the width of the headings; a value beyond them would be lost, so it stops."""
    if any(cell is not None and cell_text(cell).strip() for cell in row[width:]):
        raise InputError(
            f"a row has values to the right of the last of {width} headings",
            where=place(file=file, sheet=sheet, row=number),
            remedy="Give every column a heading, or clear the cells.",
        )
    return (*row[:width], *([None] * (width - len(row))))


def _check_package(path: Path) -> None:
    try:
        with zipfile.ZipFile(path) as package:
            members = package.infolist()
            declares = _declares_a_document_type(package)
    except zipfile.BadZipFile as error:
        raise InputError(
            "the workbook is damaged or only partly written",
            where=place(file=path.name),
            remedy="Save it again as .xlsx.",
        ) from error
    if declares:
        raise InputError(
            "a part of the workbook declares a document type, which could expand without end",
            where=place(file=path.name),
            value=declares,
            remedy="No spreadsheet program writes one: save the workbook again as .xlsx from a trusted copy.",
        )
    names = [member.filename.lower() for member in members]
    if "xl/workbook.xml" not in names:
        raise InputError(
            "the file is a zip package but no workbook",
            where=place(file=path.name),
            remedy="Save it as .xlsx.",
        )
    if any("vbaproject" in name or "macrosheets/" in name for name in names):
        raise InputError(
            "the workbook contains macros",
            where=place(file=path.name),
            remedy="Save it as .xlsx without macros, or as CSV.",
        )
    if any(name.startswith("xl/externallinks/") for name in names):
        raise InputError(
            "the workbook links to other workbooks",
            where=place(file=path.name),
            remedy="Break the links (paste the values) and save it again.",
        )
    size = sum(member.file_size for member in members)
    packed = max(1, sum(member.compress_size for member in members))
    if size > MOST_BYTES or (size > 10 * 1024**2 and size / packed > MOST_RATIO):
        raise InputError(
            f"the workbook unpacks to {size} bytes from {packed}",
            where=place(file=path.name),
            remedy="Export the records as CSV or Parquet.",
        )


def _declares_a_document_type(package: zipfile.ZipFile) -> str | None:
    """The first part that begins with a document type declaration, which XML entities need."""
    for name in package.namelist():
        if name.lower().endswith((".xml", ".rels")):
            with package.open(name) as part:
                if b"<!DOCTYPE" in part.read(_OVERLAP):
                    return name
    return None


@contextmanager
def _opened(path: Path, *, data_only: bool) -> Iterator[Any]:
    """Open a workbook for reading; the file is ours to close, whatever part of it was read."""
    with path.open("rb") as stream:
        try:
            with closing(_load(stream, path.name, data_only)) as book:
                yield book
        except (zipfile.BadZipFile, zlib.error, SyntaxError, EOFError) as error:
            # Sheets are parsed while they are read: damage shows only then, as broken XML or a bad checksum.
            raise _damaged(path.name) from error


def _load(stream: BinaryIO, file: str, data_only: bool) -> Any:
    import openpyxl

    try:
        return openpyxl.load_workbook(stream, read_only=True, data_only=data_only, keep_links=False)
    except (KeyError, ValueError, TypeError, AttributeError) as error:
        # What the library raises for parts that are missing; none of it names the file.
        raise _damaged(file) from error


def _damaged(file: str) -> InputError:
    return InputError("the workbook is damaged", where=place(file=file), remedy="Save it again as .xlsx.")


def _choose_sheet(book: Any, wanted: str | None, file: str) -> Any:
    names = list(book.sheetnames)
    if wanted is None:
        names = [sheet.title for sheet in book.worksheets if sheet.sheet_state == "visible"]
        if len(names) != 1:
            raise InputError(
                f"the workbook has {len(names)} visible sheets and none is chosen",
                where=place(file=file),
                value=names,
                remedy="Name the sheet that holds the records.",
            )
        wanted = names[0]
    if wanted not in names or not hasattr(book[wanted], "iter_rows"):
        raise InputError(
            "the sheet is not in the workbook",
            where=place(file=file),
            value=wanted,
            remedy=nearest(wanted, names),
        )
    return book[wanted]


def _marks(path: Path, sheet: Any) -> dict[str, bool]:
    """Look for what the fast reader hides: formulas, merged and hidden cells, connections."""
    found = {"formula": False, "merged": False, "hidden": False}
    patterns = {"formula": _FORMULA, "merged": _MERGED, "hidden": _HIDDEN}
    for window in _windows(path, sheet._worksheet_path):
        for name, pattern in patterns.items():
            found[name] = found[name] or pattern.search(window) is not None
    with zipfile.ZipFile(path) as package:
        found["connected"] = any(name.lower() == "xl/connections.xml" for name in package.namelist())
    return found


def _windows(path: Path, member: str) -> Iterator[bytes]:
    tail = b""
    with zipfile.ZipFile(path) as package, package.open(member) as stream:
        while block := stream.read(1 << 20):
            yield tail + block
            tail = block[-_OVERLAP:]


def _refuse_unstored(path: Path, title: str, positions: Any) -> None:
    """Stop at a formula whose value was never stored, in a column that is read."""
    with _opened(path, data_only=True) as stored, _opened(path, data_only=False) as written:
        pairs = zip(stored[title].iter_rows(values_only=True), written[title].iter_rows(), strict=True)
        for number, (values, cells) in enumerate(pairs, start=1):
            for name, position in positions.items():
                if position < len(values) and values[position] is None and cells[position].data_type == "f":
                    raise InputError(
                        "a formula has no stored value",
                        where=place(file=path.name, sheet=title, row=number, column=name),
                        remedy="Open the workbook, let it calculate, save it; or paste the values.",
                    )
