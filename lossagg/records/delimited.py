"""Text tables: one record per line, fields divided by a delimiter and quoted where needed (RFC 4180).

The reader is strict. A ragged row, a quote left open, a byte that the encoding does not have: each would
shift or swallow records, so each stops with its line. Nothing is converted here; identifiers keep their
leading zeros because every cell stays text.
"""

from __future__ import annotations

import codecs
import csv
import io
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from itertools import islice
from typing import TYPE_CHECKING

from lossagg.errors import InputError, place
from lossagg.records.findings import counted
from lossagg.records.plain_text import parse_plain
from lossagg.records.raw import MOST_ROWS, Choose, Layout, RawTable, TableBuilder

if TYPE_CHECKING:
    from _csv import Reader

DELIMITERS = {",": "comma", ";": "semicolon", "\t": "tab", "|": "bar"}
MOST_BYTES = 2 * 1024**3
_CHUNK = 50_000
_SNIFFED = 200
_MARKS = (
    (codecs.BOM_UTF8, "utf-8-sig"),
    (codecs.BOM_UTF32_LE, "utf-32"),
    (codecs.BOM_UTF32_BE, "utf-32"),
    (codecs.BOM_UTF16_LE, "utf-16"),
    (codecs.BOM_UTF16_BE, "utf-16"),
)


@dataclass(frozen=True)
class _Coding:
    """Python's name of the encoding, and of the one a byte order mark says."""

    name: str
    mark: str | None


def read_delimited(data: bytes, file: str, layout: Layout, choose: Choose) -> RawTable:
    """Read a delimited text table.

    Args:
        data: the bytes of the file.
        file: its name, for messages.
        layout: encoding and delimiter, where declared.
        choose: says from the headings which columns to keep.

    Returns:
        The table as text.

    Raises:
        InputError: a file that is empty, of another kind, in another encoding, with NUL characters,
            an ambiguous delimiter, ragged rows or an open quote.
    """
    coding = _coding(data, file, layout.encoding)
    body = _as_utf8(data, coding, file)
    _refuse_nul(body, file)
    start = _beginning(body, file)
    delimiter = layout.delimiter or _sniff(start, file)
    _check_delimiter(delimiter, file)
    headings = _headings(_reader(start, delimiter), start, delimiter, file)
    builder = TableBuilder(file, None, headings, choose(headings, None), layout.may_be_empty)
    _note_layout(builder, coding, delimiter)
    if not body.endswith((b"\n", b"\r")):
        builder.note(
            "no-final-newline",
            "the last line has no end: the file may be cut off in it",
            "Compare the last row with its source, or state control totals.",
            warn=True,
        )
    _check_rows(body, file)
    batches = parse_plain(body, delimiter, len(headings))
    if batches is None:
        _fill_strictly(builder, _text(body, file), delimiter)
    else:
        for batch in batches:
            builder.add(batch.columns)
    return builder.finish()


def _check_rows(body: bytes, file: str) -> None:
    lines = body.count(b"\n") or body.count(b"\r")
    if lines > MOST_ROWS:
        raise InputError(
            f"the file has {lines} lines",
            where=place(file=file),
            remedy=f"Split it or sum small claims: at most {MOST_ROWS} rows are read.",
        )


def _note_layout(builder: TableBuilder, coding: _Coding, delimiter: str) -> None:
    if coding.mark:
        builder.note(
            "byte-order-mark",
            f"a byte order mark says {coding.mark.removesuffix('-sig')}; it is not data",
            "None needed.",
        )
    if delimiter != ",":
        name = DELIMITERS.get(delimiter, repr(delimiter))
        builder.note("delimiter", f"the fields are divided by a {name}", "None needed.")


def _fill_strictly(builder: TableBuilder, text: str, delimiter: str) -> None:
    reader = _reader(text, delimiter)
    next(reader)
    records = _fill(builder, reader, text, delimiter)
    if reader.line_num > records:
        breaks = counted(reader.line_num - records, "line break")
        builder.note(
            "line-breaks",
            f"{breaks} inside quoted cells; rows are counted by record",
            "Check that no quote swallows records.",
            warn=True,
        )


def _fill(builder: TableBuilder, reader: Reader, text: str, delimiter: str) -> int:
    """Read the body; return how many records the file has, headings included."""
    import pyarrow as pa

    width = len(builder.headings)
    records = 1
    for chunk in _chunks(reader, text, delimiter, builder.file):
        if set(map(len, chunk)) != {width}:
            ragged = _fill_blank(chunk, width)
            if ragged is not None:
                line = _line_of(text, delimiter, records + ragged)
                raise InputError(
                    f"a row has {len(chunk[ragged])} fields where the headings have {width}",
                    where=f"{place(file=builder.file, row=records + ragged + 1)}, line {line}",
                    remedy="Quote fields that contain the delimiter, or repair the row.",
                )
        builder.add([pa.array(column, pa.string()) for column in zip(*chunk, strict=True)])
        records += len(chunk)
    return records


def _fill_blank(chunk: list[list[str]], width: int) -> int | None:
    """Give blank lines their empty cells; return the first row that is ragged, if any."""
    for index, record in enumerate(chunk):
        if len(record) != width:
            if len(record) > 1 or "".join(record).strip():
                return index
            chunk[index] = [""] * width
    return None


def _chunks(reader: Reader, text: str, delimiter: str, file: str) -> Iterator[list[list[str]]]:
    while True:
        try:
            chunk = list(islice(reader, _CHUNK))
        except csv.Error as error:
            raise _broken(error, text, delimiter, file) from error
        if not chunk:
            return
        yield chunk


def _reader(text: str, delimiter: str) -> Reader:
    return csv.reader(io.StringIO(text, newline=""), delimiter=delimiter, strict=True)


def _headings(reader: Reader, text: str, delimiter: str, file: str) -> tuple[str, ...]:
    try:
        headings = next(reader, None)
    except csv.Error as error:
        raise _broken(error, text, delimiter, file) from error
    if not headings:
        raise InputError(
            "the file is empty" if headings is None else "the first row is blank",
            where=place(file=file, row=None if headings is None else 1),
            remedy="The first row must hold the headings.",
        )
    if headings[0].lower().startswith("sep="):
        raise InputError(
            "the first line tells a spreadsheet the delimiter and holds no headings",
            where=place(file=file, row=1),
            value=f"sep={delimiter}",
            remedy="Delete that line: the first row must hold the headings.",
        )
    return tuple(heading.strip() for heading in headings)


def _broken(error: csv.Error, text: str, delimiter: str, file: str) -> InputError:
    """Find the line where the record that cannot be read begins; only then is a second pass worth it."""
    reader = _reader(text, delimiter)
    records, begins = 0, 1
    try:
        for _ in reader:
            records, begins = records + 1, reader.line_num + 1
    except csv.Error:
        pass
    reason = "a quote is opened and never closed" if "unexpected end" in str(error) else f"{error}"
    return InputError(
        f"a record cannot be read: {reason}",
        where=f"{place(file=file, row=records + 1)}, line {begins}",
        remedy="Close the quote, or double quotes that stand inside a quoted field.",
    )


def _line_of(text: str, delimiter: str, record: int) -> int:
    reader = _reader(text, delimiter)
    for _ in islice(reader, record):
        pass
    return reader.line_num + 1


def _coding(data: bytes, file: str, encoding: str | None) -> _Coding:
    """The encoding of the file: declared, or by its mark, else UTF-8."""
    if not data or data.isspace():
        raise InputError("the file is empty", where=place(file=file), remedy="Export the records again.")
    mark = next((name for bytes_, name in _MARKS if data.startswith(bytes_)), None)
    marked = (mark or "").removesuffix("-sig")
    if mark and encoding and not codecs_name(encoding, file).startswith(marked):
        raise InputError(
            f"the file begins with the byte order mark of {marked}, another encoding is declared",
            where=place(file=file),
            value=encoding,
            remedy="Declare the encoding of the file, or none.",
        )
    return _Coding(mark or codecs_name(encoding or "utf-8", file), mark)


def _as_utf8(data: bytes, coding: _Coding, file: str) -> bytes:
    """The bytes of the text in UTF-8, without a byte order mark; those of UTF-8 are checked later."""
    if coding.name == "utf-8":
        return data
    if coding.name == "utf-8-sig":
        return data[len(codecs.BOM_UTF8) :]
    try:
        return data.decode(coding.name).encode()
    except UnicodeError as error:
        raise _undecodable(data, coding.name, file, getattr(error, "start", 0)) from error


def _text(body: bytes, file: str) -> str:
    try:
        return body.decode()
    except UnicodeDecodeError as error:
        raise _undecodable(body, "utf-8", file, error.start) from error


def _undecodable(data: bytes, encoding: str, file: str, at: int) -> InputError:
    line = data.count(b"\n", 0, at) + 1
    return InputError(
        f"the bytes are not {encoding}",
        where=f"{place(file=file)}, line {line}, byte {at}",
        value=data[at : at + 1],
        remedy='Declare the encoding the file was written in, for example encoding = "cp1252".',
    )


def codecs_name(encoding: str, file: str) -> str:
    """The name Python gives a text encoding.

    Raises:
        InputError: there is no such text encoding.
    """
    try:
        "".encode(encoding)
        return codecs.lookup(encoding).name
    except LookupError as error:
        raise InputError(
            "the declared encoding is unknown",
            where=place(file=file),
            value=encoding,
            remedy='Common ones are "utf-8", "utf-16", "cp1252" and "latin-1".',
        ) from error


def _refuse_nul(body: bytes, file: str) -> None:
    at = body.find(b"\0")
    if at >= 0:
        line = body.count(b"\n", 0, at) + 1
        raise InputError(
            "the file contains a NUL character",
            where=f"{place(file=file)}, line {line}, byte {at}",
            remedy="The file is damaged or no text; if it is UTF-16 without a byte order mark, declare that.",
        )


def _check_delimiter(delimiter: str, file: str) -> None:
    if len(delimiter) != 1 or delimiter in '"\r\n':
        raise InputError(
            "the delimiter must be one character",
            where=place(file=file),
            value=delimiter,
            remedy='Declare one of "," ";" "|" or a tab.',
        )


def _sniff(text: str, file: str) -> str:
    """Find the only delimiter that divides the headings and every one of the next rows alike."""
    candidates = [d for d in DELIMITERS if max(_shape(text, d, 1)) > 1]
    if len(candidates) > 1:
        candidates = [d for d in candidates if len(_shape(text, d, _SNIFFED)) == 1] or candidates
    if len(candidates) == 1:
        return candidates[0]
    names = [DELIMITERS[d] for d in candidates]
    raise InputError(
        f"the delimiter is ambiguous: {' and '.join(names)} both divide the rows alike"
        if names
        else "the first row has one column only",
        where=place(file=file, row=1),
        remedy=f"Declare the delimiter (lossagg looks for {', '.join(DELIMITERS.values())}), or remove notes "
        "above the headings.",
    )


def _beginning(body: bytes, file: str) -> str:
    """The first lines, enough to tell the delimiter and the headings; everything when they are very long."""
    end = 0
    for _ in range(2 * _SNIFFED):
        end = body.find(b"\n", end) + 1
        if not end:
            return _text(body, file)
    # Bytes are cut behind a line end, which is never part of another character in UTF-8.
    try:
        return body[:end].decode()
    except UnicodeDecodeError:
        return _text(body, file)


def _shape(text: str, delimiter: str, rows: int) -> set[int]:
    """The numbers of fields that the first rows have under a delimiter; blank rows do not count."""
    widths: Sequence[int] = []
    try:
        widths = [len(row) for row in islice(_reader(text, delimiter), rows) if row]
    except csv.Error:
        return {1, 0}
    return set(widths) or {1}
