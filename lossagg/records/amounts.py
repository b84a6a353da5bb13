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
        text: the number with a decimal point, "0" where there is no finite number; an Arrow array.
        lossy: True where float64 keeps fewer digits than were written.
        missing: True where the cell is empty or carries a marker for "not known".
        infinite: True where the number is not finite.
        wrong: True where the cell is something else, which must stop the run.
    """

    values: FloatArray
    text: Any
    lossy: BoolArray
    missing: BoolArray
    infinite: BoolArray
    wrong: BoolArray

    def exact(self) -> DecimalArray:
        """The numbers as written, as decimals; zero where there is no finite number."""
        exact = np.empty(len(self.text), dtype=np.object_)
        exact[:] = list(map(Decimal, self.text.to_pylist()))
        return exact


def parse_numbers(column: TextColumn, style: NumberStyle) -> Numbers:
    """Read a column of numbers in the declared style; cells that held numbers already need none.

    Args:
        column: the cells as text.
        style: how numbers are written in this file.

    Returns:
        The numbers, and the cells that are missing, infinite or wrong.
    """
    import pyarrow as pa
    import pyarrow.compute as pc

    text = pc.utf8_trim_whitespace(column.text)
    lower = pc.utf8_lower(text)
    missing = is_missing(lower)
    written = as_mask(pc.match_substring_regex(lower, pattern=_INFINITE))
    plain = text if style.plain else _to_plain(text, column.native, style)
    good = as_mask(pc.match_substring_regex(plain, pattern=_PLAIN))
    good &= as_mask(pc.less_equal(pc.utf8_length(plain), MOST_CHARACTERS))
    nearest = pc.cast(pc.if_else(pa.array(good), plain, "nan"), pa.float64())
    values = np.array(nearest.to_numpy(zero_copy_only=False))
    negative = as_mask(pc.starts_with(lower, "-"))
    values[written] = np.where(negative[written], -np.inf, np.inf)
    finite = np.isfinite(values)
    digits = pc.if_else(pa.array(finite), plain, "0")
    return Numbers(
        values=values,
        text=digits,
        lossy=_lossy(digits),
        missing=missing,
        infinite=np.isinf(values),
        wrong=~(good | missing | written),
    )


def _lossy(digits: Any) -> BoolArray:
    """True where the nearest float64, written shortest, is not the number that was written."""
    import pyarrow.compute as pc

    lossy = as_mask(pc.greater(pc.utf8_length(digits), _DIGITS_KEPT))
    for index in np.flatnonzero(lossy).tolist():
        text = digits[index].as_py()
        lossy[index] = Decimal(repr(float(text))) != Decimal(text)
    return lossy


def is_missing(lower: Any) -> BoolArray:
    """True where trimmed lower-case text is empty or a marker for "not known"; shape (rows,)."""
    import pyarrow as pa
    import pyarrow.compute as pc

    return as_mask(pc.is_in(lower, value_set=pa.array(MISSING)))


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


def as_mask(values: Any) -> BoolArray:
    """An Arrow array of booleans as a writable array; shape (rows,)."""
    mask: BoolArray = np.array(values.to_numpy(zero_copy_only=False), dtype=np.bool_)
    return mask
