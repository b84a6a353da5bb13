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
import numpy.typing as npt

from lossagg.arrays import BoolArray, FloatArray, IntArray
from lossagg.errors import InputError
from lossagg.records.money import Money
from lossagg.records.raw import Column

MISSING = (
    *("", "-", "--", "\u2013", "\u2014", "nan", "n/a", "na", "n.a.", "null", "none", "nil", "?"),
    *("#ref!", "#n/a", "#value!", "#div/0!", "#name?", "#num!", "#null!", "#getting_data"),
)
MOST_CHARACTERS = 60
_DIGITS_KEPT = 15
_CERTAIN = 1e15
_CHUNK = 1_000_000
_NUMBER_BYTES = np.isin(np.arange(256), list(b"0123456789.-"))
_PLAIN = r"^[+-]?(\d+(\.\d*)?|\.\d+)([eE][+-]?\d{1,4})?$"
_INFINITE = r"^[+-]?inf(inity)?$"
GROUPINGS = ("three", "indian")
_DECIMALS = (".", ",")
_THOUSANDS = (",", ".", " ", "'", "\u2019", "\u00a0", "\u202f")


@dataclass(frozen=True)
class NumberStyle:
    """How numbers are written in a file, as far as it is not plain.

    Args:
        decimal: the decimal mark, "." or ",".
        thousands: the mark between groups of digits, if the file has any.
        grouping: "three" for 1,234,567; "indian" for 12,34,567 (groups of two above the last three).

    Raises:
        InputError: another mark, the same mark for both, or another grouping.
    """

    decimal: str = "."
    thousands: str | None = None
    grouping: str = "three"

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

        if self.grouping not in GROUPINGS or (self.grouping == "indian" and self.thousands is None):
            raise InputError(
                "the grouping of digits is not known, or there is no mark between groups",
                value=self.grouping,
                remedy='Declare grouping = "indian" together with thousands = ",", or leave it out.',
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
        # Groups must be complete and all present or all absent: "1,23" and "1234,567" are slips.
        return rf"^[+-]?({self.grouped}|\d+)({mark}\d*)?$"

    @property
    def grouped(self) -> str:
        """The regular expression of the whole part of a number with at least one mark in it."""
        group = re.escape(self.thousands or "")
        if self.grouping == "indian":
            return rf"\d{{1,2}}({group}\d{{2}})*{group}\d{{3}}"
        return rf"\d{{1,3}}({group}\d{{3}})+"


@dataclass(frozen=True)
class Numbers:
    """A column of numbers with what could not be read, cell by cell; all of shape (rows,).

    Args:
        values: the nearest float64; NaN where there is no number, infinite where the cell says so or
            the number is beyond float64.
        text: the number with a decimal point; an Arrow array of strings, or of numbers where the file
            itself holds them as such. Only the finite cells count.
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

    def exact(self) -> Money:
        """The numbers as written; zero where there is no finite number."""
        return exact_amounts(self.text, self.values)


def parse_numbers(column: Column, style: NumberStyle) -> Numbers:
    """Read a column of numbers in the declared style; cells that held numbers already need none.

    Args:
        column: the cells.
        style: how numbers are written in this file.

    Returns:
        The numbers, and the cells that are missing, infinite or wrong.
    """
    import pyarrow.compute as pc

    if not column.is_text:
        return _native_numbers(column)
    text = column.cells if style.plain else _to_plain(column.cells, column.native, style)
    simple = _simple_cells(text)
    values = np.full(len(text), np.nan)
    if not _cast_simple(text, simple, values):
        simple &= as_mask(pc.match_substring_regex(text, pattern=_PLAIN))
        _cast_simple(text, simple, values)
    missing, infinite, wrong = (np.zeros(len(text), dtype=np.bool_) for _ in range(3))
    rest = np.flatnonzero(~simple)
    if rest.size:
        plain, good, kinds = _other_cells(text, column.cells, rest)
        values[rest] = good
        missing[rest], wrong[rest] = kinds["missing"], kinds["wrong"]
        text = plain
        infinite = np.isinf(values)
    return Numbers(values, text, _lossy(text, values), missing, infinite, wrong)


def ungrouped(column: Column, style: NumberStyle) -> BoolArray:
    """True for numbers of four digits and more without marks in a column where others have them."""
    import pyarrow.compute as pc

    none = np.zeros(len(column.cells), dtype=np.bool_)
    if style.thousands is None or not column.is_text:
        return none
    text = pc.utf8_trim_whitespace(column.cells)
    grouped = as_mask(pc.match_substring_regex(text, pattern=rf"^[+-]?{style.grouped}"))
    bare = as_mask(pc.match_substring_regex(text, pattern=r"^[+-]?\d{4,}")) & ~column.native
    return bare if grouped.any() else none


def _native_numbers(column: Column) -> Numbers:
    """Numbers that the file itself holds as such."""
    import pyarrow as pa
    import pyarrow.compute as pc

    cells, kind = column.cells, column.cells.type
    none = np.zeros(len(cells), dtype=np.bool_)
    missing = np.array(cells.is_null().to_numpy(zero_copy_only=False), dtype=np.bool_)
    if not (pa.types.is_integer(kind) or pa.types.is_floating(kind) or pa.types.is_decimal(kind)):
        return Numbers(np.full(len(cells), np.nan), cells, none, missing, none, ~missing)
    if pa.types.is_float64(kind) and not cells.null_count:
        values = cells.to_numpy()  # the memory of the cells, not a copy: read-only
    elif pa.types.is_decimal(kind):
        values = np.array([np.nan if cell is None else float(cell) for cell in cells.to_pylist()])
    else:
        values = np.array(pc.cast(cells, pa.float64(), safe=False).to_numpy(zero_copy_only=False))
    if pa.types.is_float32(kind):
        # A float32 means the shortest decimal that identifies it: 0.1, not 0.10000000149.
        values = cells.to_numpy(zero_copy_only=False).astype(str).astype(np.float64)
    missing |= np.isnan(values)
    lossy = _lossy_natives(cells, values) if not pa.types.is_floating(kind) else none
    return Numbers(values, cells, lossy, missing, np.isinf(values), none)


def _lossy_natives(cells: Any, values: FloatArray) -> BoolArray:
    lossy = np.zeros(len(cells), dtype=np.bool_)
    scale = max(getattr(cells.type, "scale", 0), 0)  # Digits behind the point count like those before it.
    for at in np.flatnonzero(np.abs(values) > _CERTAIN / 10.0**scale).tolist():
        lossy[at] = Decimal(repr(float(values[at]))) != Decimal(cells[at].as_py())
    return lossy


def _simple_cells(text: Any) -> BoolArray:
    """True for cells of digits, points and hyphens only, few enough to be a number; shape (rows,)."""
    rows = len(text)
    _, offsets_buffer, data = text.buffers()
    offsets = np.frombuffer(offsets_buffer, dtype=np.int32)[text.offset : text.offset + rows + 1]
    lengths = np.diff(offsets)
    simple: BoolArray = (lengths > 0) & (lengths <= MOST_CHARACTERS)
    if offsets[0] < offsets[-1]:
        content = np.frombuffer(data, dtype=np.uint8)[offsets[0] : offsets[-1]]
        odd = np.flatnonzero(~_NUMBER_BYTES[content]) + int(offsets[0])
        simple[np.searchsorted(offsets, odd, side="right") - 1] = False
    return simple


def _cast_simple(text: Any, simple: BoolArray, values: FloatArray) -> bool:
    """Convert the simple cells in place; False if one of them is no number after all, as 1-2 or 1.2.3."""
    import pyarrow as pa
    import pyarrow.compute as pc

    try:
        some = text if simple.all() else text.filter(pa.array(simple))
        values[simple] = pc.cast(some, pa.float64()).to_numpy(zero_copy_only=False)
    except pa.ArrowInvalid:
        return False
    return True


def _other_cells(text: Any, written: Any, rest: IntArray) -> tuple[Any, FloatArray, dict[str, BoolArray]]:
    """Read the cells that are not simple, one pattern after another.

    Returns:
        The whole column with these cells rewritten plainly, their values, and which are missing or wrong.
    """
    import pyarrow as pa
    import pyarrow.compute as pc

    some = pc.utf8_trim_whitespace(text.take(pa.array(rest)))
    lower = pc.utf8_lower(some)
    missing = is_missing(pc.utf8_lower(pc.utf8_trim_whitespace(written.take(pa.array(rest)))))
    infinite = as_mask(pc.match_substring_regex(lower, pattern=_INFINITE))
    good = as_mask(pc.match_substring_regex(some, pattern=_PLAIN))
    good &= as_mask(pc.less_equal(pc.utf8_length(some), MOST_CHARACTERS))
    plain = pc.if_else(pa.array(good), pc.ascii_ltrim(some, characters="+"), "nan")
    values = np.array(pc.cast(plain, pa.float64()).to_numpy(zero_copy_only=False))
    negative = as_mask(pc.starts_with(lower, "-"))
    values[infinite] = np.where(negative[infinite], -np.inf, np.inf)
    mask = np.zeros(len(text), dtype=np.bool_)
    mask[rest] = True
    whole = pc.replace_with_mask(text, pa.array(mask), plain)
    return whole, values, {"missing": missing, "wrong": ~(good | missing | infinite)}


def _lossy(text: Any, values: FloatArray) -> BoolArray:
    """True where the nearest float64, written shortest, is not the number that was written."""
    import pyarrow.compute as pc

    long = as_mask(pc.greater(pc.binary_length(text), _DIGITS_KEPT)) & np.isfinite(values)
    for index in np.flatnonzero(long).tolist():
        written = text[index].as_py()
        long[index] = Decimal(repr(float(written))) != Decimal(written)
    return long


def exact_amounts(text: Any, values: FloatArray) -> Money:
    """The amounts of a column exactly as written.

    A decimal number of at most 15 digits is the only one of so many digits near its float64 (IEEE 754
    double, 53 bits): the float64 times the power of ten is within a quarter of the integer looked for.
    Longer ones are converted digit by digit.

    Args:
        text: Arrow array of plain numbers as text, or of numbers.
        values: their nearest float64; cells that are not finite count as zero; shape (rows,).
    """
    money = Money.zeros(len(values))
    for start in range(0, len(values), _CHUNK):
        part = slice(start, start + _CHUNK)
        _put_amounts(money, start, text[part], values[part])
    return money


def _put_amounts(money: Money, start: int, text: Any, values: FloatArray) -> None:
    """Set a stretch of amounts that begins at a row."""
    import pyarrow as pa

    finite = np.isfinite(values)
    places = _places_of_text(text) if pa.types.is_string(text.type) else _places_of_floats(text, values)
    certain = finite & (places >= 0)
    places = np.where(certain, places, 0).astype(np.int8)
    scaled = np.rint(np.where(certain, values, 0.0) * np.power(10.0, np.arange(_DIGITS_KEPT + 1))[places])
    money.places[start : start + len(values)] = places
    money.units[start : start + len(values)] = scaled.astype(np.int64)
    rest = np.flatnonzero(finite & ~certain)
    if rest.size:
        _put_long(money, start, rest, text, values)


def _put_long(money: Money, start: int, at: IntArray, cells: Any, values: FloatArray) -> None:
    """Convert cells of up to 18 digits together, by their digits; longer ones and exponents one by one."""
    import pyarrow as pa
    import pyarrow.compute as pc

    if pa.types.is_floating(cells.type):
        text = pa.array(values[at].astype(str).tolist(), pa.string())
    elif pa.types.is_string(cells.type):
        text = cells.take(pa.array(at))
    else:
        text = pa.array(map(str, cells.take(pa.array(at)).to_pylist()), pa.string())
    digits = pc.replace_substring(text, pattern=".", replacement="")
    plain = as_mask(pc.match_substring_regex(digits, pattern=r"^-?\d{1,18}$"))
    units = pc.cast(pc.if_else(pa.array(plain), digits, "0"), pa.int64()).to_numpy(zero_copy_only=False)
    point = pc.find_substring(text, ".").to_numpy(zero_copy_only=False)
    length = pc.binary_length(text).to_numpy(zero_copy_only=False)
    money.units[start + at] = units
    money.places[start + at] = np.where(plain & (point >= 0), length - point - 1, 0)
    for index in np.flatnonzero(~plain).tolist():
        money.put(start + int(at[index]), Decimal(text[index].as_py()))


def _places_of_text(text: Any) -> npt.NDArray[np.int8]:
    """Decimal places of plain numbers of at most 15 digits, -1 where there are more or an exponent."""
    import pyarrow.compute as pc

    length = pc.binary_length(text).to_numpy(zero_copy_only=False)
    point = pc.find_substring(text, ".").to_numpy(zero_copy_only=False)
    places = np.where(point < 0, 0, length - point - 1)
    certain = (length <= _DIGITS_KEPT) & (places >= 0)
    for exponent in ("e", "E"):
        certain &= pc.find_substring(text, exponent).to_numpy(zero_copy_only=False) < 0
    return np.where(certain, places, -1).astype(np.int8)


def _places_of_floats(cells: Any, values: FloatArray) -> npt.NDArray[np.int8]:
    """Decimal places of numbers the file holds as such, -1 where they are not found among the first few."""
    import pyarrow as pa

    places = np.full(len(values), -1, dtype=np.int8)
    if pa.types.is_decimal(cells.type):
        return places
    magnitude = np.abs(np.where(np.isfinite(values), values, np.inf))
    for count in (4, 3, 2, 1, 0):
        scale = 10.0**count
        with np.errstate(invalid="ignore", over="ignore"):
            units = np.rint(values * scale)
            places[(magnitude * scale < _CERTAIN) & (units / scale == values)] = count
    return places


def is_missing(lower: Any) -> BoolArray:
    """True where trimmed lower-case text is empty or a marker for "not known"; shape (rows,)."""
    import pyarrow as pa
    import pyarrow.compute as pc

    return as_mask(pc.is_in(lower, value_set=pa.array(MISSING)))


def _to_plain(text: Any, native: BoolArray, style: NumberStyle) -> Any:
    """Rewrite declared numbers with a decimal point; what is not in the style is marked as no number."""
    import pyarrow as pa
    import pyarrow.compute as pc

    trimmed = pc.utf8_trim_whitespace(text)
    fits = pc.match_substring_regex(trimmed, pattern=style.pattern)
    plain = trimmed
    if style.thousands is not None:
        plain = pc.replace_substring(plain, pattern=style.thousands, replacement="")
    plain = pc.replace_substring(plain, pattern=style.decimal, replacement=".")
    # Markers for "not known" and "inf" have neither mark in them and stay what they are.
    other = pc.match_substring_regex(trimmed, pattern=r"\d")
    plain = pc.if_else(fits, plain, pc.if_else(other, "x", trimmed))
    return pc.if_else(pa.array(native), trimmed, plain)


def as_mask(values: Any) -> BoolArray:
    """An Arrow array of booleans as a writable array; shape (rows,)."""
    mask: BoolArray = np.array(values.to_numpy(zero_copy_only=False), dtype=np.bool_)
    return mask
