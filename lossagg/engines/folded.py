"""Real Fourier transforms of long sequences, folded into a table that is transformed by columns and by rows.

With x(n), n = n1 C + n2, and frequencies k = k1 + R k2 of the length R C (Gentleman and Sande 1966, "Fast
Fourier transforms: for fun and profit", AFIPS 29; Bailey 1990, "FFTs in external or hierarchical memory",
Journal of Supercomputing 4):

    X(k1 + R k2) = sum_n2 w_C^(n2 k2) [ w_RC^(n2 k1) sum_n1 w_R^(n1 k1) x(n1 C + n2) ]

Columns are real, so k1 runs to R / 2 only. Each short transform stays in the cache and needs no room of its
own, and the half of the sequence that is zero, or not wanted, is never written. The frequencies stay in the
order k1, k2: a generating function takes each by itself, and no step puts them in another.
"""

from __future__ import annotations

from functools import lru_cache
from typing import NamedTuple

import numpy as np
import numpy.typing as npt
from scipy import fft

from lossagg.arrays import FloatArray

ComplexArray = npt.NDArray[np.complex128]

# From this length on sequences are folded, into rows of so many columns.
FOLDED = 2**16
_COLUMNS = 1024
_NEAR = 32
# Columns, and rows, transformed together.
_SIDE_BY_SIDE = 32


class Inverse(NamedTuple):
    """What is wanted of a sequence: its first values, its last values, and its Euclidean norm."""

    first: FloatArray
    last: FloatArray
    norm: float


class Folded:
    """Real transforms of one length.

    Args:
        rows: number of rows; with more than one column a multiple of four.
        columns: number of columns, 1 for a plain transform, else a multiple of 32.
    """

    def __init__(self, rows: int, columns: int = 1) -> None:
        self.rows, self.columns = rows, columns
        self.length = rows * columns
        self.frequencies = (rows // 2 + 1) * columns
        own = np.arange(rows // 2 + 1 if columns > 1 else 0)[:, None]
        self._far = self._root(own * np.arange(0, columns, _NEAR))
        self._near = self._root(own * np.arange(min(_NEAR, columns)))

    @property
    def halves(self) -> bool:
        """Whether the length can be halved."""
        return self.rows % (4 if self.columns > 1 else 2) == 0

    def half(self) -> Folded:
        """Transforms of half the length: their frequencies are every other row of these."""
        return folded(self.rows // 2, self.columns)

    def every_other(self, values: ComplexArray) -> ComplexArray:
        """Of values at the frequencies of whole rows, from an even one on, those of half the length."""
        return values.reshape(-1, self.columns)[::2].reshape(-1)

    def step(self) -> ComplexArray:
        """The transform of a sequence that is 1 at index 1 and else 0."""
        rows = self._root(np.arange(self.rows // 2 + 1))
        return np.asarray((rows[:, None] * self._root(self.rows * np.arange(self.columns))).reshape(-1))

    def forward(self, values: FloatArray, last: float = 0.0) -> ComplexArray:
        """The transform of values followed by zeros.

        Args:
            values: at most as many as the length.
            last: the value at the last index, on top of that.
        """
        filled = -(-len(values) // self.columns)
        padded = values
        if len(values) < filled * self.columns:
            padded = np.concatenate((values, np.zeros(filled * self.columns - len(values))))
        given = padded.reshape(filled, self.columns)
        table = np.empty((self.rows // 2 + 1, self.columns), dtype=np.complex128)
        block = np.zeros((self.rows, min(_SIDE_BY_SIDE, self.columns)))
        for start in range(0, self.columns, _SIDE_BY_SIDE):
            piece = slice(start, start + _SIDE_BY_SIDE)
            block[:filled] = given[:, piece]
            if piece.stop >= self.columns:
                block[-1, -1] += last
            table[:, piece] = fft.rfft(block, axis=0)
        if self.columns > 1:
            from lossagg.kernels.turns import turn_rows

            for start in range(0, len(table), _SIDE_BY_SIDE):
                piece = slice(start, start + _SIDE_BY_SIDE)
                turn_rows(table[piece], self._far[piece], self._near[piece])
                table[piece] = fft.fft(table[piece], axis=1)
        return table.reshape(-1)

    def inverse(self, transform: ComplexArray, first: int, last: int = 0) -> Inverse:
        """The sequence of a transform, which is overwritten.

        Args:
            transform: shape (frequencies,).
            first: how many of its first values are wanted.
            last: how many of its last values are wanted.
        """
        table = transform.reshape(-1, self.columns)
        if self.columns > 1:
            from lossagg.kernels.turns import turn_rows

            for start in range(0, len(table), _SIDE_BY_SIDE):
                piece = slice(start, start + _SIDE_BY_SIDE)
                table[piece] = fft.ifft(table[piece], axis=1)
                turn_rows(table[piece], self._far[piece].conj(), self._near[piece].conj())
        head = np.empty((-(-first // self.columns), self.columns))
        tail = np.empty((-(-last // self.columns), self.columns))
        squares = 0.0
        for start in range(0, self.columns, _SIDE_BY_SIDE):
            piece = slice(start, start + _SIDE_BY_SIDE)
            block = fft.irfft(table[:, piece], self.rows, axis=0)
            head[:, piece], tail[:, piece] = block[: len(head)], block[self.rows - len(tail) :]
            squares += float(np.einsum("ij,ij", block, block))
        return Inverse(
            head.reshape(-1)[:first], tail.reshape(-1)[tail.size - last :], float(np.sqrt(squares))
        )

    def _root(self, powers: npt.NDArray[np.int64]) -> ComplexArray:
        """Powers of exp(-2 pi i / length)."""
        return np.asarray(np.exp(-2j * np.pi / self.length * (powers % self.length)))


@lru_cache(maxsize=8)
def folded(rows: int, columns: int) -> Folded:
    """The transforms of a length, with their tables of roots made once."""
    return Folded(rows, columns)


def transforms_of(least: int) -> Folded:
    """Transforms of at least a length that are quick to do."""
    if least < FOLDED:
        return Folded(int(fft.next_fast_len(least, real=True)))
    return folded(4 * int(fft.next_fast_len(-(-least // (4 * _COLUMNS)), real=True)), _COLUMNS)
