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
from lossagg.records.raw import Choose, Layout, RawTable, TableBuilder

if TYPE_CHECKING:
    from _csv import Reader

DELIMITERS = {",": "comma", ";": "semicolon", "\t": "tab", "|": "bar"}
MOST_BYTES = 4 * 1024**3
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
class _Decoded:
    text: str
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
    decoded = _decode(data, file, layout.encoding)
    _refuse_nul(decoded.text, file)
    delimiter = layout.delimiter or _sniff(decoded.text, file)
    _check_delimiter(delimiter, file)
    lines = _unquoted(decoded.text, delimiter)
    reader = _reader(decoded.text if lines is None else lines[0], delimiter)
    headings = _headings(reader, decoded.text, delimiter, file)
    builder = TableBuilder(file, None, headings, choose(headings, None))
    if decoded.mark:
        builder.note(
            "byte-order-mark",
            f"a byte order mark says {decoded.mark.removesuffix('-sig')}; it is not data",
            "None needed.",
        )
    if delimiter != ",":
        name = DELIMITERS.get(delimiter, repr(delimiter))
        builder.note("delimiter", f"the fields are divided by a {name}", "None needed.")
    if lines is not None:
        _fill_unquoted(builder, lines, delimiter)
        return builder.finish()
    records = _fill(builder, reader, decoded.text, delimiter)
    if reader.line_num > records:
        breaks = counted(reader.line_num - records, "line break")
        builder.note(
            "line-breaks",
            f"{breaks} inside quoted cells; rows are counted by record",
            "Check that no quote swallows records.",
            warn=True,
        )
    return builder.finish()


def _unquoted(text: str, delimiter: str) -> list[str] | None:
    """The lines of a text that has no quotes and the same number of fields in every line, else None.

    Such a text, as most are, can be split without looking at every character; all others go through the
    strict reader, which finds what is wrong with them.
    """
    if '"' in text:
        return None
    lines = text.replace("\r\n", "\n").replace("\r", "\n").split("\n")
    if not lines[-1]:
        lines.pop()
    even = len({line.count(delimiter) for line in lines}) == 1
    return lines if even and lines[0].strip() else None


def _fill_unquoted(builder: TableBuilder, lines: list[str], delimiter: str) -> None:
    width = len(builder.headings)
    for start in range(1, len(lines), _CHUNK):
        chunk = lines[start : start + _CHUNK]
        cells = delimiter.join(chunk).split(delimiter)
        builder.add([cells[column::width] for column in range(width)], rows=chunk)


def _fill(builder: TableBuilder, reader: Reader, text: str, delimiter: str) -> int:
    """Read the body; return how many records the file has, headings included."""
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
        builder.add(list(zip(*chunk, strict=True)))
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


def _decode(data: bytes, file: str, encoding: str | None) -> _Decoded:
    if not data.strip():
        raise InputError("the file is empty", where=place(file=file), remedy="Export the records again.")
    mark = next((name for bytes_, name in _MARKS if data.startswith(bytes_)), None)
    chosen = encoding or mark or "utf-8"
    marked = (mark or "").removesuffix("-sig")
    if mark and encoding and not codecs_name(encoding, file).startswith(marked):
        raise InputError(
            f"the file begins with the byte order mark of {marked}, another encoding is declared",
            where=place(file=file),
            value=encoding,
            remedy="Declare the encoding of the file, or none.",
        )
    try:
        codecs_name(chosen, file)
        return _Decoded(data.decode(mark or chosen), mark)
    except UnicodeDecodeError as error:
        line = data.count(b"\n", 0, error.start) + 1
        raise InputError(
            f"the bytes are not {chosen.removesuffix('-sig')}",
            where=f"{place(file=file)}, line {line}, byte {error.start}",
            value=data[error.start : error.start + 1],
            remedy='Declare the encoding the file was written in, for example encoding = "cp1252".',
        ) from error


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


def _refuse_nul(text: str, file: str) -> None:
    at = text.find("\0")
    if at >= 0:
        raise InputError(
            "the file contains a NUL character",
            where=f"{place(file=file)}, line {text.count(chr(10), 0, at) + 1}",
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
    text = _beginning(text)
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
        remedy=f"Declare the delimiter; lossagg looks for {', '.join(DELIMITERS.values())}.",
    )


def _beginning(text: str) -> str:
    """The first lines of a text, enough to tell its delimiter; whole when they are very long."""
    end = 0
    for _ in range(2 * _SNIFFED):
        end = text.find("\n", end) + 1
        if not end:
            return text
    return text[:end]


def _shape(text: str, delimiter: str, rows: int) -> set[int]:
    """The numbers of fields that the first rows have under a delimiter; blank rows do not count."""
    widths: Sequence[int] = []
    try:
        widths = [len(row) for row in islice(_reader(text, delimiter), rows) if row]
    except csv.Error:
        return {1, 0}
    return set(widths) or {1}
