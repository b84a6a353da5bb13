"""Numbers as people write them: read exactly when they are plain or declared, never guessed.

"1,234" is a thousand and some in one country and one and some in another, "(1,234)" is negative to an
accountant, "5k" is anything. Such a cell stops the run; a marker for "not known" does not become zero.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from decimal import Decimal
from typing import Any

import numpy as np

from lossagg.arrays import BoolArray, FloatArray
from lossagg.errors import InputError
from lossagg.records.money import DecimalArray
from lossagg.records.raw import TextColumn

MISSING = (
    *("", "-", "--", "\u2013", "\u2014", "nan", "n/a", "na", "n.a.", "null", "none", "nil", "?"),
    *("#ref!", "#n/a", "#value!", "#div/0!", "#name?", "#num!", "#null!", "#getting_data"),
)
MOST_CHARACTERS = 60
_DIGITS_KEPT = 15
_PLAIN = r"^[+-]?(\d+(\.\d*)?|\.\d+)([eE][+-]?\d{1,4})?$"
_INFINITE = r"^[+-]?inf(inity)?$"
_DECIMALS = (".", ",")
_THOUSANDS = (",", ".", " ", "'", "\u2019", "\u00a0", "\u202f")


@dataclass(frozen=True)
class NumberStyle:
    """How numbers are written in a file, as far as it is not plain.

    Args:
        decimal: the decimal mark, "." or ",".
        thousands: the mark between groups of three digits, if the file has any.

    Raises:
        InputError: another mark, or the same mark for both.
    """

    decimal: str = "."
    thousands: str | None = None

    def __post_init__(self) -> None:
        if self.decimal not in _DECIMALS:
            raise InputError(
                "the decimal mark must be a point or a comma",
                value=self.decimal,
                remedy='Declare decimal = "." or decimal = ",".',
            )
        if self.thousands is not None and (
            self.thousands not in _THOUSANDS or self.thousands == self.decimal
        ):
            raise InputError(
                "the thousands mark must be a comma, point, space or apostrophe, and not the decimal mark",
                value=self.thousands,
                remedy='Declare it as written in the file, for example thousands = ",".',
            )

    @property
    def plain(self) -> bool:
        """True when numbers are written with a decimal point and nothing else."""
        return self.decimal == "." and self.thousands is None

    @property
    def pattern(self) -> str:
        """The regular expression of a whole number cell in this style."""
        mark = re.escape(self.decimal)
        if self.thousands is None:
            return rf"^[+-]?(\d+({mark}\d*)?|{mark}\d+)([eE][+-]?\d{{1,4}})?$"
        # Groups must be of three and all present or all absent: "1,23" and "1234,567" are slips.
        group = re.escape(self.thousands)
        return rf"^[+-]?(\d{{1,3}}({group}\d{{3}})+|\d+)({mark}\d*)?$"


@dataclass(frozen=True)
class Numbers:
    """A column of numbers with what could not be read, cell by cell; all of shape (rows,).

    Args:
        values: the nearest float64; NaN where there is no number, infinite where the cell says so or
            the number is beyond float64.
        text: the number with a decimal point, empty where there is no finite number.
        lossy: True where float64 keeps fewer digits than were written.
        missing: True where the cell is empty or carries a marker for "not known".
        infinite: True where the number is not finite.
        wrong: True where the cell is something else, which must stop the run.
    """

    values: FloatArray
    text: list[str]
    lossy: BoolArray
    missing: BoolArray
    infinite: BoolArray
    wrong: BoolArray

    def exact(self) -> DecimalArray:
        """The numbers as written, as decimals; zero where there is no finite number."""
        exact = np.empty(len(self.text), dtype=np.object_)
        exact[:] = [Decimal(text or "0") for text in self.text]
        return exact


def parse_numbers(column: TextColumn, style: NumberStyle) -> Numbers:
    """Read a column of numbers in the declared style; cells that held numbers already need none.

    Args:
        column: the cells as text.
        style: how numbers are written in this file.

    Returns:
        The numbers, and the cells that are missing, infinite or wrong.
    """
    import pyarrow.compute as pc

    text = pc.utf8_trim_whitespace(column.text)
    lower = pc.utf8_lower(text)
    missing = is_missing(lower)
    infinite = _mask(pc.match_substring_regex(lower, pattern=_INFINITE))
    plain = text if style.plain else _to_plain(text, column.native, style)
    good = _mask(pc.match_substring_regex(plain, pattern=_PLAIN))
    good &= _mask(pc.less_equal(pc.utf8_length(plain), MOST_CHARACTERS))
    cells = np.where(good, plain.to_numpy(zero_copy_only=False), "").tolist()
    values = np.array([cell or "nan" for cell in cells], dtype=np.object_).astype(np.float64)
    beyond = np.isinf(values)
    for index in np.flatnonzero(beyond).tolist():
        cells[index] = ""
    lower_cells = lower.to_numpy(zero_copy_only=False)
    for index in np.flatnonzero(infinite).tolist():
        values[index] = float(lower_cells[index])
    infinite |= beyond
    long = _mask(pc.greater(pc.utf8_length(plain), _DIGITS_KEPT))
    return Numbers(values, cells, _lossy(cells, long), missing, infinite, ~(good | missing | infinite))


def _lossy(cells: list[str], long: BoolArray) -> BoolArray:
    """True where the nearest float64, written shortest, is not the number that was written."""
    lossy = np.zeros(len(cells), dtype=np.bool_)
    for index in np.flatnonzero(long).tolist():
        text = cells[index] or "0"
        lossy[index] = Decimal(repr(float(text))) != Decimal(text)
    return lossy


def is_missing(lower: Any) -> BoolArray:
    """True where trimmed lower-case text is empty or a marker for "not known"; shape (rows,)."""
    import pyarrow as pa
    import pyarrow.compute as pc

    return _mask(pc.is_in(lower, value_set=pa.array(MISSING)))


def _to_plain(text: Any, native: BoolArray, style: NumberStyle) -> Any:
    """Rewrite declared numbers with a decimal point; what is not in the style is marked as no number."""
    import pyarrow as pa
    import pyarrow.compute as pc

    fits = pc.match_substring_regex(text, pattern=style.pattern)
    plain = text
    if style.thousands is not None:
        plain = pc.replace_substring(plain, pattern=style.thousands, replacement="")
    plain = pc.replace_substring(plain, pattern=style.decimal, replacement=".")
    plain = pc.if_else(fits, plain, "x")
    return pc.if_else(pa.array(native), text, plain)


def _mask(values: Any) -> BoolArray:
    mask: BoolArray = np.array(values.to_numpy(zero_copy_only=False), dtype=np.bool_)
    return mask
