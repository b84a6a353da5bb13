"""Columns of words: each different word is kept once, and every row holds its number.

Files have few lines, statuses and currencies and many rows; rules look at each different word once.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass
from typing import Any, overload

import numpy as np
import numpy.typing as npt

from lossagg.arrays import BoolArray, IntArray


@dataclass(frozen=True, eq=False)
class WordArray:
    """A column of words, "" where there is none.

    Compare it with a word (`column == "open"`), index it by position, mask or positions, or turn it into
    an array of objects with `numpy.asarray`.

    Args:
        codes: position of the word of each row in `names`; shape (rows,).
        names: the different words as an Arrow array of strings, each once.
    """

    codes: npt.NDArray[np.int32]
    names: Any

    @classmethod
    def of(cls, words: Any) -> WordArray:
        """A column made of an Arrow array of strings without nulls, or of a sequence of words."""
        import pyarrow as pa

        if not isinstance(words, pa.Array):
            words = pa.array(list(words), pa.string())
        encoded = words.dictionary_encode()
        return cls(encoded.indices.to_numpy(), encoded.dictionary)

    @classmethod
    def empty(cls, rows: int) -> WordArray:
        """A column without any word."""
        import pyarrow as pa

        return cls(np.zeros(rows, dtype=np.int32), pa.array([""], pa.string()))

    def __len__(self) -> int:
        """Number of rows."""
        return len(self.codes)

    @overload
    def __getitem__(self, at: int) -> str: ...
    @overload
    def __getitem__(self, at: IntArray | BoolArray | slice) -> WordArray: ...
    def __getitem__(self, at: int | IntArray | BoolArray | slice) -> str | WordArray:
        """One word, or the column at positions or under a mask."""
        if isinstance(at, int | np.integer):
            return str(self.names[int(self.codes[at])].as_py())
        return WordArray(self.codes[at], self.names)

    def __eq__(self, word: object) -> BoolArray:  # type: ignore[override]
        """True where the word of the row is this one; shape (rows,)."""
        return self.is_in([str(word)])

    def __ne__(self, word: object) -> BoolArray:  # type: ignore[override]
        """True where the word of the row is another one; shape (rows,)."""
        return ~self.is_in([str(word)])

    __hash__ = None  # type: ignore[assignment]

    def __array__(self, dtype: Any = None, copy: bool | None = None) -> npt.NDArray[np.object_]:
        """The words as an array of objects."""
        del copy
        names = np.array(self.names.to_pylist(), dtype=np.object_)
        words = names[self.codes] if len(names) else np.zeros(0, dtype=np.object_)
        return words if dtype is None else words.astype(dtype)

    def astype(self, kind: Any) -> Any:
        """The words as a NumPy array of a kind; shape (rows,)."""
        return self.__array__(kind)

    def __iter__(self) -> Iterator[str]:
        """The words, row by row."""
        return iter(self.tolist())

    def as_arrow(self) -> Any:
        """The column as an Arrow array of numbered words, of the same memory."""
        import pyarrow as pa

        return pa.DictionaryArray.from_arrays(pa.array(self.codes), self.names)

    def tolist(self) -> list[str]:
        """The words, row by row."""
        words: list[str] = self.__array__().tolist()
        return words

    def present(self) -> list[str]:
        """The different words that occur, in alphabetical order."""
        seen = np.unique(self.codes)
        return sorted(self.names[int(code)].as_py() for code in seen)

    def ranks(self) -> IntArray:
        """Numbers that order the rows as their words do, by code point; shape (rows,)."""
        import pyarrow.compute as pc

        order = pc.sort_indices(self.names).to_numpy()
        rank = np.empty(len(order), dtype=np.int64)
        rank[order] = np.arange(len(order))
        return rank[self.codes]

    def is_in(self, words: Iterable[str]) -> BoolArray:
        """True where the word of the row is one of some; shape (rows,)."""
        import pyarrow as pa
        import pyarrow.compute as pc

        answers = pc.is_in(self.names, value_set=pa.array(list(words), pa.string()))
        return self._spread(answers.to_numpy(zero_copy_only=False))

    def select(self, test: Callable[[str], bool]) -> BoolArray:
        """Apply a test once to each different word; shape (rows,)."""
        return self._spread(np.array([test(word) for word in self.names.to_pylist()], dtype=np.bool_))

    def rename(self, odd: BoolArray, words: list[str]) -> WordArray:
        """Rewrite some of the different words; words that become the same become one.

        Args:
            odd: True for the words of `names` to rewrite; shape (names,).
            words: what they become, in their order.
        """
        import pyarrow as pa
        import pyarrow.compute as pc

        if not words:
            return self
        renamed = pc.replace_with_mask(self.names, pa.array(odd), pa.array(words, pa.string()))
        again = WordArray.of(renamed)
        return WordArray(again.codes[self.codes], again.names)

    def without(self, rows: BoolArray) -> WordArray:
        """The column with some rows emptied."""
        import pyarrow as pa

        if not rows.any():
            return self
        names = pa.concat_arrays([self.names, pa.array([""], pa.string())])
        codes = np.where(rows, np.int32(len(self.names)), self.codes)
        again = WordArray.of(names)
        return WordArray(again.codes[codes], again.names)

    def _spread(self, answers: npt.NDArray[Any]) -> BoolArray:
        if not len(answers):
            return np.zeros(len(self), dtype=np.bool_)
        if not answers.any():
            return np.zeros(len(self), dtype=np.bool_)
        spread: BoolArray = answers.astype(np.bool_)[self.codes]
        return spread


def word_codes(words: WordArray) -> IntArray:
    """Number the different words of a column from 0, without gaps; shape (rows,)."""
    occurs = np.zeros(len(words.names), dtype=np.bool_)
    occurs[words.codes] = True
    if occurs.all():
        return words.codes.astype(np.int64)
    codes: IntArray = (np.cumsum(occurs) - 1)[words.codes]
    return codes


def by_word(words: WordArray, test: Callable[[str], bool]) -> BoolArray:
    """Apply a test to a column of words, once for each different word; shape (rows,)."""
    return words.select(test)
