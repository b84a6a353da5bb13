"""One number per row that is equal for rows equal in every column, and differs otherwise but for chance.

A multiply-and-shift hash in 64 bits over whole columns at once: two different rows agree with a
probability of about 2**-64, and the rule on repeated rows compares date and amount besides. It depends on
nothing but the cells, so the same file gives the same marks in every process.
"""

from __future__ import annotations

import hashlib
from typing import Any

import numpy as np
import numpy.typing as npt

from lossagg.arrays import IntArray

Marks = npt.NDArray[np.uint64]

_PRIME = np.uint64(0x9E3779B97F4A7C15)
_OTHER = np.uint64(0xD6E8FEB86659FD93)
_SHIFT = np.uint64(32)
_WORD = 8
_LONGEST = 256


def mark_column(marks: Marks, column: Any) -> None:
    """Mix one column into the marks of the rows.

    Args:
        marks: one per row, changed in place; shape (rows,).
        column: Arrow array of strings, numbers or days.
    """
    import pyarrow as pa

    if pa.types.is_string(column.type):
        _mark_text(marks, column)
        return
    if pa.types.is_decimal(column.type):
        _mark_text(marks, pa.array(map(str, column.to_pylist()), pa.string()))
        return
    if column.null_count:
        _mix(marks, column.is_null().to_numpy(zero_copy_only=False).astype(np.uint64))
        column = column.fill_null(pa.scalar(0, pa.int32()).cast(column.type))
    values = column.to_numpy(zero_copy_only=False)
    if values.dtype.kind == "M":
        values = values.astype(np.int64)
    _mix(marks, values.view(f"u{values.dtype.itemsize}").astype(np.uint64))


def as_marks(marks: Marks) -> IntArray:
    """The marks as signed integers."""
    return marks.view(np.int64)


def _mix(marks: Marks, words: Marks) -> None:
    marks ^= words
    marks *= _PRIME
    marks ^= marks >> _SHIFT
    marks *= _OTHER
    marks ^= marks >> _SHIFT


def _mark_text(marks: Marks, column: Any) -> None:
    """Mix the length of each cell, then its bytes, eight at a time."""
    rows = len(column)
    _, offsets_buffer, data = column.buffers()
    offsets = np.frombuffer(offsets_buffer, dtype=np.int32)[column.offset : column.offset + rows + 1]
    starts, lengths = offsets[:-1].astype(np.int64), np.diff(offsets).astype(np.int64)
    _mix(marks, lengths.astype(np.uint64))
    first, last = int(offsets[0]), int(offsets[-1])
    if first == last:
        return
    content = np.zeros(last - first + _WORD, dtype=np.uint8)
    content[: last - first] = np.frombuffer(data, dtype=np.uint8)[first:last]
    words = np.ndarray((last - first,), dtype="<u8", buffer=content.data, strides=(1,))
    starts -= first
    long = np.flatnonzero(lengths > _LONGEST)
    for at in long.tolist():
        cell = content[starts[at] : starts[at] + lengths[at]].tobytes()
        digest = hashlib.blake2b(cell, digest_size=_WORD).digest()
        marks[at : at + 1] ^= np.frombuffer(digest, dtype="<u8")
    lengths[long] = 0
    _mark_words(marks, words, starts, lengths)


def _mark_words(marks: Marks, words: Marks, starts: IntArray, lengths: IntArray) -> None:
    shortest, done = int(lengths.min()), 0
    while shortest - done >= _WORD:
        _mix(marks, words[starts + done])
        done += _WORD
    rest = np.flatnonzero(lengths > done)
    while rest.size:
        kept = np.minimum(lengths[rest] - done, _WORD).astype(np.uint64)
        mask = np.uint64(2**64 - 1) >> ((np.uint64(_WORD) - kept) * np.uint64(8))
        mixed = marks[rest]
        _mix(mixed, words[starts[rest] + done] & mask)
        marks[rest] = mixed
        done += _WORD
        rest = rest[lengths[rest] > done]
