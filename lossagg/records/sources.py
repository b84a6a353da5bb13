"""Opening a file of records: told by its content and its suffix, which must agree."""

from __future__ import annotations

import hashlib
import io
import os
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path

from lossagg.errors import EnvironmentFault, InputError, place
from lossagg.records.delimited import MOST_BYTES, read_delimited
from lossagg.records.raw import Choose, Layout, RawTable

_TEXT = (".csv", ".tsv", ".txt")
_PARQUET = (".parquet", ".pq")
_CONTENT = (
    (b"PK\x03\x04", "a workbook or another zip package"),
    (b"PAR1", "a Parquet file"),
    (b"\xd0\xcf\x11\xe0\xa1\xb1\x1a\xe1", "an encrypted or an old binary workbook"),
    (b"%PDF", "a PDF document"),
    (b"\x1f\x8b", "a gzip archive"),
)


@dataclass(frozen=True)
class Source:
    """A table as read, with the name and the SHA-256 digest (FIPS 180-4) of the file it came from."""

    file: str
    sha256: str
    table: RawTable


def read_source(path: Path, layout: Layout, choose: Choose) -> Source:
    """Read a table from a CSV, TSV, XLSX or Parquet file.

    Args:
        path: the file; its suffix says what it should be, its first bytes what it is.
        layout: sheet, encoding and delimiter, where declared; those that do not apply are refused.
        choose: says from the headings which columns to keep.

    Returns:
        The table as text, the name of the file and its digest.

    Raises:
        InputError: no such file, another kind of file, or one that its reader refuses.
        EnvironmentFault: the file cannot be opened.
    """
    suffix = path.suffix.lower()
    kind = _kind(suffix, path.name)
    if kind == "text":
        return _read_text(path, layout, choose)
    head, digest, _ = _inspect(path)
    _check_content(head, kind, path.name)
    _check_layout(layout, kind, path.name)
    if kind == "workbook":
        from lossagg.records.workbook import read_workbook

        table = read_workbook(path, layout, choose)
    else:
        from lossagg.records.columnar import read_parquet

        table = read_parquet(path, layout, choose)
    if _inspect(path)[1] != digest:
        raise _unsettled(path.name)
    return Source(path.name, digest, table)


def _read_text(path: Path, layout: Layout, choose: Choose) -> Source:
    """Read a text file in one go: what is parsed is what the digest is of."""
    before = _status(path)
    _check_layout(layout, "text", path.name)
    if before.st_size > MOST_BYTES:
        raise InputError(
            f"the file has {before.st_size} bytes",
            where=place(file=path.name),
            remedy=f"Convert it to Parquet; text is read up to {MOST_BYTES} bytes.",
        )
    with _opened(path) as stream:
        data = stream.read()
    _check_content(data[:16], "text", path.name)
    table = read_delimited(data, path.name, layout, choose)
    after = _status(path)
    if (after.st_size, after.st_mtime_ns) != (before.st_size, before.st_mtime_ns) or len(
        data
    ) != after.st_size:
        raise _unsettled(path.name)
    return Source(path.name, hashlib.sha256(data).hexdigest(), table)


def _unsettled(file: str) -> InputError:
    return InputError(
        "the file changed while it was read",
        where=place(file=file),
        remedy="Wait until it is written completely, then run again.",
    )


def _kind(suffix: str, file: str) -> str:
    if suffix in _TEXT:
        return "text"
    if suffix == ".xlsx":
        return "workbook"
    if suffix in _PARQUET:
        return "parquet"
    if suffix in (".xlsm", ".xlsb", ".xls", ".xltm"):
        raise InputError(
            "this kind of workbook may carry macros and is not opened",
            where=place(file=file),
            value=suffix,
            remedy="Save it as .xlsx without macros, or as CSV.",
        )
    raise InputError(
        "the kind of file is not known by its suffix",
        where=place(file=file),
        value=suffix,
        remedy="Use .csv, .tsv, .txt, .xlsx, .parquet or .pq.",
    )


def _inspect(path: Path) -> tuple[bytes, str, int]:
    """The first bytes, the digest and the size of a file, read in blocks."""
    with _opened(path) as stream:
        head = stream.read(16)
        stream.seek(0)
        digest = hashlib.file_digest(stream, "sha256").hexdigest()
        return head, digest, stream.tell()


def _status(path: Path) -> os.stat_result:
    with _opened(path) as stream:
        return os.fstat(stream.fileno())


@contextmanager
def _opened(path: Path) -> Iterator[io.BufferedReader]:
    """Open a file for reading; what the system says against it becomes an error a reader can act on."""
    try:
        with path.open("rb") as stream:
            yield stream
    except (FileNotFoundError, IsADirectoryError, NotADirectoryError) as error:
        raise InputError(
            "there is no such file", where=place(file=path.name), remedy="Check its name and folder."
        ) from error
    except OSError as error:
        raise EnvironmentFault(
            "the file cannot be opened",
            where=place(file=path.name),
            value=error.strerror,
            remedy="Check the permissions, and that no other program holds it.",
        ) from error


def _check_content(head: bytes, kind: str, file: str) -> None:
    if not head:
        raise InputError("the file is empty", where=place(file=file), remedy="Export the records again.")
    expected = {"text": None, "workbook": b"PK\x03\x04", "parquet": b"PAR1"}[kind]
    seen = next((name for magic, name in _CONTENT if head.startswith(magic)), None)
    if (expected is None and seen is not None) or (expected is not None and not head.startswith(expected)):
        remedy = (
            "Remove the password and save it as .xlsx."
            if head.startswith(b"\xd0\xcf") and kind == "workbook"
            else "Give the file the suffix of what it is, or export it again."
        )
        raise InputError(
            f"the suffix says {kind} but the content is {seen or 'of another kind'}",
            where=place(file=file),
            remedy=remedy,
        )


def _check_layout(layout: Layout, kind: str, file: str) -> None:
    given = {"sheet": layout.sheet, "encoding": layout.encoding, "delimiter": layout.delimiter}
    fitting = {"text": ("encoding", "delimiter"), "workbook": ("sheet",), "parquet": ()}[kind]
    for name, value in given.items():
        if value is not None and name not in fitting:
            raise InputError(
                f"{name} does not apply to this kind of file ({kind})",
                where=place(file=file, key=name),
                value=value,
                remedy=f"Leave {name} out.",
            )
