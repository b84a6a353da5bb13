"""The claims of a file by identifier: what each amounts to, whether it is open, and when its loss was."""

from __future__ import annotations

from typing import Any

import numpy as np

from lossagg.arrays import BoolArray, FloatArray, IntArray
from lossagg.records.check import CheckedLosses
from lossagg.records.controls import standing_claims
from lossagg.records.events import CLOSED_WORDS, is_open
from lossagg.records.words import WordArray, by_word

NEVER = np.iinfo(np.int64).max


class Claims:
    """The claims of a line in one file; rows set aside for a fault still stand for theirs.

    Args:
        checked: the records of the line.
        key: column of the identifier; None: every row is a claim. Rows without an identifier are left out.

    Attributes:
        names: the identifiers, an Arrow array of strings.
        row: position of the first row of each; shape (claims,), as all below.
        amount: what its rows amount to.
        open: True where a row says so.
        closed: True where all rows say so.
        day: earliest loss date, as days since 1970; `NEVER` where there is none.
    """

    def __init__(self, checked: CheckedLosses, key: str | None) -> None:
        table = self.table = checked.table
        self.line = checked.line
        rows = np.flatnonzero(standing_claims(checked))
        word = WordArray.of([str(row) for row in rows]) if key is None else table.words[key][rows]
        rows, word = rows[word != ""], word[word != ""]
        present, code = np.unique(word.codes, return_inverse=True)
        size = len(present)
        self.names: Any = word.names.take(present)
        self.row: IntArray = _first(rows, code, size)
        self.amount: FloatArray = table.exact[rows].by_group(code, size).to_floats()
        self.open: BoolArray = np.bincount(code, is_open(table)[rows], size) > 0
        closed = by_word(table.word("status"), lambda status: status.casefold() in CLOSED_WORDS)[rows]
        self.closed: BoolArray = np.bincount(code, ~closed, size) == 0
        # Days as they are, a missing one as the latest there is.
        days = np.where(np.isnat(table.date[rows]), NEVER, table.date[rows].astype(np.int64))
        self.day: IntArray = _first(days, code, size)

    def __len__(self) -> int:
        """Number of claims."""
        return len(self.row)


def _first(values: IntArray, code: IntArray, size: int) -> IntArray:
    """The smallest value of each group."""
    first = np.full(size, NEVER, dtype=np.int64)
    np.minimum.at(first, code, values)
    return first
