"""Dates: ISO 8601 calendar dates, or one declared format for the whole file.

Nothing is asked of the locale or the time zone: dates are days, computed from year, month and day alone.
A date-time keeps its day; one that carries a zone does not say on which day it falls here and is set aside.
"""

from __future__ import annotations

import datetime as dt
import re
from dataclasses import dataclass, fields
from typing import Any
from zoneinfo import ZoneInfo, ZoneInfoNotFoundError

import numpy as np
import numpy.typing as npt

from lossagg.arrays import BoolArray, IntArray
from lossagg.errors import InputError
from lossagg.records.amounts import as_mask, is_missing
from lossagg.records.raw import Column
from lossagg.records.words import WordArray

DateArray = npt.NDArray[np.datetime64]

_TIME = r"(?P<time>[T ]\d{2}:\d{2}(?::\d{2}(?:[.,]\d+)?)?)?(?P<zone> ?(?:Z|[+-]\d{2}:?\d{2}))?"
_ISO = r"^(?P<year>\d{4})-(?P<month>\d{2})-(?P<day>\d{2})" + _TIME + "$"
_NO_TIME = r"^.(2[4-9]|[3-9]\d):|:[6-9]\d"  # 24:00 too: it may be either of two days
_MONTHS = ("jan", "feb", "mar", "apr", "may", "jun", "jul", "aug", "sep", "oct", "nov", "dec")
_PARTS = {
    "%Y": r"(?P<year>\d{4})",
    "%m": r"(?P<month>\d{1,2})",
    "%b": "(?P<name>[A-Za-z]{3})",
    "%d": r"(?P<day>\d{1,2})",
}


@dataclass(frozen=True)
class Dates:
    """A column of dates with what could not be read, cell by cell; all of shape (rows,).

    Args:
        values: days; NaT where there is no date.
        missing: True where the cell is empty or carries a marker for "not known".
        impossible: True where year, month and day are given but there is no such day, or no such time of it.
        zoned: True where the cell is a date-time with a zone, and none is declared.
        moved: True where the day is that of the declared zone.
        timed: True where the cell had a time of day, which is let go.
        wrong: True where the cell is something else, which must stop the run.
    """

    values: DateArray
    missing: BoolArray
    impossible: BoolArray
    zoned: BoolArray
    moved: BoolArray
    timed: BoolArray
    wrong: BoolArray


def parse_dates(column: Column, date_format: str | None, time_zone: str | None = None) -> Dates:
    """Read a column of dates; cells that held dates already need no format.

    Args:
        column: the cells.
        date_format: the format of the file, made of %Y, %m (or %b, English abbreviation) and %d;
            None for ISO dates.
        time_zone: zone in which the day of a date-time with a zone is wanted, by its name in the IANA
            time zone database; None: such cells have no day here.

    Returns:
        The dates, and the cells that are missing, impossible, zoned or wrong.

    Raises:
        InputError: a format that does not give year, month and day once each; a zone that is not known.
    """
    zone = None if time_zone is None else _zone(time_zone)
    pattern = _pattern(date_format) if date_format is not None else None
    if not column.is_text and _is_days(column.cells):
        return _native_days(column.cells)
    # Files have few different days and many rows: each different cell is read once.
    cells = WordArray.of(column.as_text())
    native = column.native if column.is_text else ~np.zeros(len(cells), dtype=np.bool_)
    as_iso = _parse_texts(cells.names, None, zone)
    if pattern is None or native.all():
        return _spread(as_iso, cells.codes)
    declared = _spread(_parse_texts(cells.names, pattern, zone), cells.codes)
    if not native.any():
        return declared
    iso = _spread(as_iso, cells.codes)
    names = (field.name for field in fields(Dates))
    return Dates(**{name: np.where(native, getattr(iso, name), getattr(declared, name)) for name in names})


def _is_days(cells: Any) -> bool:
    import pyarrow as pa

    return bool(pa.types.is_date32(cells.type))


def _native_days(cells: Any) -> Dates:
    none = np.zeros(len(cells), dtype=np.bool_)
    days = cells.to_numpy(zero_copy_only=False).astype("datetime64[D]")
    return Dates(days, np.isnat(days), none, none, none, none, none)


def _spread(dates: Dates, codes: npt.NDArray[np.int32]) -> Dates:
    """The dates of every row from those of the different cells."""
    return Dates(**{field.name: getattr(dates, field.name)[codes] for field in fields(Dates)})


def _parse_texts(texts: Any, pattern: str | None, zone: ZoneInfo | None) -> Dates:
    import pyarrow.compute as pc

    text = pc.utf8_trim_whitespace(texts)
    missing = is_missing(pc.utf8_lower(text))
    parts = _extract(text, pattern or _ISO)
    matched = as_mask(pc.not_equal(parts["year"], ""))
    zoned = as_mask(pc.not_equal(parts["zone"], ""))
    year, month, day = (_integers(parts[name]) for name in ("year", "month", "day"))
    values, possible = _days(year, month, day)
    possible &= as_mask(pc.invert(pc.match_substring_regex(parts["time"], pattern=_NO_TIME)))
    good = matched & possible & ~zoned
    values[~good] = np.datetime64("NaT")
    moved = zoned & possible if zone is not None and pattern is None else np.zeros(len(values), np.bool_)
    for at in np.flatnonzero(moved).tolist():
        moment = _moment(text[at].as_py())
        moved[at] = moment is not None
        if moment is not None:
            values[at] = np.datetime64(moment.astimezone(zone).date())
    return Dates(
        values=values,
        missing=missing,
        impossible=matched & ~possible,
        zoned=zoned & possible & ~moved,
        moved=moved,
        timed=good & as_mask(pc.match_substring_regex(parts["time"], pattern="[1-9]")),
        wrong=~(matched | missing),
    )


def _zone(name: str) -> ZoneInfo:
    try:
        return ZoneInfo(name)
    except (ZoneInfoNotFoundError, ValueError) as error:
        raise InputError(
            "the time zone is not known",
            value=name,
            remedy='Give its name in the IANA time zone database, for example "Europe/Berlin" or "UTC".',
        ) from error


def _moment(text: str) -> dt.datetime | None:
    """A date-time with a zone; None where its hours or minutes do not exist."""
    try:
        moment = dt.datetime.fromisoformat(text.replace(" +", "+").replace(" -", "-").replace(" Z", "Z"))
    except ValueError:
        return None
    return moment if moment.tzinfo is not None else None


def _pattern(date_format: str) -> str:
    """Turn a declared format into a regular expression.

    Raises:
        InputError: see `parse_dates`.
    """
    pieces = re.split("(%.)", date_format)
    codes = [piece for piece in pieces if piece.startswith("%")]
    if sorted(codes) not in (["%Y", "%d", "%m"], ["%Y", "%b", "%d"]):
        year = " Two-digit years do not say the century." if "%y" in codes else ""
        raise InputError(
            "the date format must give year, month and day once each",
            value=date_format,
            remedy=f'Use %Y, %m (or %b for Jan, Feb, ...) and %d, for example "%d/%m/%Y".{year}',
        )
    body = "".join(_PARTS.get(piece) or re.escape(piece) for piece in pieces)
    # Without a mark between them only full digits tell the parts apart.
    separated = "" not in pieces[2:-1:2]
    return "^" + (body if separated else body.replace("{1,2}", "{2}")) + "$"


def _extract(text: Any, pattern: str) -> dict[str, Any]:
    """The parts of each date as Arrow arrays of digits, empty where the text is not of the pattern."""
    import pyarrow as pa
    import pyarrow.compute as pc

    found = pc.extract_regex(text, pattern=pattern)
    blank = pa.repeat("", len(text))
    parts = dict.fromkeys(("year", "month", "day", "time", "zone"), blank)
    for group in found.type:
        parts[group.name] = found.field(group.name)
    if "name" in parts:
        number = pc.add(pc.index_in(pc.utf8_lower(parts.pop("name")), value_set=pa.array(_MONTHS)), 1)
        parts["month"] = pc.cast(pc.fill_null(number, 0), pa.string())
        # A month that is no English abbreviation is of another format, not a day that does not exist.
        parts["year"] = pc.if_else(pc.is_null(number), "", parts["year"])
    return parts


def _integers(digits: Any) -> IntArray:
    import pyarrow as pa
    import pyarrow.compute as pc

    number = pc.cast(pc.if_else(pc.equal(digits, ""), "0", digits), pa.int64())
    return np.asarray(number.to_numpy(zero_copy_only=False), dtype=np.int64)


def _days(year: IntArray, month: IntArray, day: IntArray) -> tuple[DateArray, BoolArray]:
    """Days from year, month and day (proleptic Gregorian), and whether there is such a day."""
    within = (year >= 1) & (month >= 1) & (month <= 12) & (day >= 1)
    month_number = (year - 1970) * 12 + np.where(within, month, 1) - 1
    first = month_number.astype("datetime64[M]").astype("datetime64[D]").astype(np.int64)
    after = (month_number + 1).astype("datetime64[M]").astype("datetime64[D]").astype(np.int64)
    possible: BoolArray = within & (day <= after - first)
    return (first + day - 1).astype("datetime64[D]"), possible
