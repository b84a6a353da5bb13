"""From text to typed columns: numbers, dates and words, and the faults that show on the way.

The same typing serves loss records and exposures.
"""

from __future__ import annotations

import unicodedata
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from lossagg.arrays import BoolArray, FloatArray
from lossagg.records.amounts import (
    MISSING,
    Numbers,
    NumberStyle,
    as_mask,
    is_missing,
    parse_numbers,
    ungrouped,
)
from lossagg.records.dates import DateArray, Dates, parse_dates
from lossagg.records.faults import Fault
from lossagg.records.headings import INVISIBLE
from lossagg.records.raw import Column, RawTable
from lossagg.records.words import WordArray

_NUMBER_REMEDY = (
    'Write plain numbers with a decimal point, or declare the marks of the file: decimal = "," or '
    'thousands = ",". Units, signs and brackets are not guessed.'
)
_DATE_REMEDY = 'Write dates as YYYY-MM-DD, or declare the format, for example date-format = "%d/%m/%Y".'


@dataclass
class TypedColumns:
    """Columns of a table by canonical name and kind, each of shape (rows,), and the faults in them.

    `cells` has the cells of every column as read, those of words by number, which takes less room.
    """

    numbers: dict[str, Numbers] = field(default_factory=dict)
    dates: dict[str, DateArray] = field(default_factory=dict)
    words: dict[str, WordArray] = field(default_factory=dict)
    faults: list[Fault] = field(default_factory=list)
    cells: dict[str, Any] = field(default_factory=dict)

    @property
    def values(self) -> dict[str, FloatArray]:
        """The numbers as float64, NaN where there is none."""
        return {name: numbers.values for name, numbers in self.numbers.items()}


def type_columns(
    raw: RawTable,
    kinds: Mapping[str, str],
    style: NumberStyle,
    date_format: str | None,
    skip: BoolArray,
    time_zone: str | None = None,
) -> TypedColumns:
    """Read every column of a table by its kind.

    Args:
        raw: the table as text.
        kinds: {canonical name: "number", "date" or "word"}.
        style: how numbers are written.
        date_format: how dates are written, None for ISO.
        time_zone: zone in which the day of a date-time with a zone is wanted; None: not declared.
        skip: True for rows that carry no record (blank, totals), which have no faults; shape (rows,).

    Returns:
        The typed columns.

    Raises:
        InputError: a date format that cannot be used.
    """
    typed = TypedColumns(cells={name: column.cells for name, column in raw.columns.items()})
    for name, column in raw.columns.items():
        if kinds[name] == "number":
            _number(typed, name, column, style, ~skip)
        elif kinds[name] == "date":
            _date(typed, name, column, (date_format, time_zone), ~skip)
        else:
            _word(typed, name, column, ~skip)
    return typed


def _number(typed: TypedColumns, name: str, column: Column, style: NumberStyle, live: BoolArray) -> None:
    numbers = parse_numbers(column, style)
    typed.numbers[name] = numbers
    typed.faults += [
        Fault(
            "number-form",
            "stop",
            name,
            numbers.wrong & live,
            f"the {name} is not a plain number",
            _NUMBER_REMEDY,
        ),
        Fault(
            "precision",
            "warn",
            name,
            numbers.lossy & live,
            f"the {name} has more digits than a float64 keeps",
            "The reconciliation counts every digit; the models use the nearest float64.",
        ),
        Fault(
            "mixed-grouping",
            "warn",
            name,
            ungrouped(column, style) & live & ~numbers.wrong,
            f"the {name} has no marks between its digits where others of the column have them",
            "Check that the file is one export: the mark may mean something else in some rows.",
        ),
    ]


def _date(
    typed: TypedColumns, name: str, column: Column, form: tuple[str | None, str | None], live: BoolArray
) -> None:
    dates = parse_dates(column, *form)
    date_format = form[0]
    typed.dates[name] = dates.values
    wanted = f"in the declared format {date_format!r}" if date_format else "a date written YYYY-MM-DD"
    typed.faults += [
        Fault("date-form", "stop", name, dates.wrong & live, f"the {name} is not {wanted}", _DATE_REMEDY),
        Fault(
            "impossible-date",
            "set aside",
            name,
            dates.impossible & live,
            f"the {name} names a day, or a time, that does not exist",
            "Correct the date.",
        ),
        Fault(
            "date-zone",
            "set aside",
            name,
            dates.zoned & live,
            f"the {name} carries a time zone, so its day here is not known",
            "Export local dates without a zone, or declare time-zone, the zone the days are meant in.",
        ),
        Fault(
            "time-of-day",
            "normalise",
            name,
            dates.timed & live,
            f"the {name} has a time of day, which is let go",
            "None needed.",
        ),
        Fault(
            "moved-to-zone",
            "normalise",
            name,
            dates.moved & live,
            f"the {name} carries a time zone; its day in {form[1]} is used",
            "None needed.",
        ),
        Fault(
            "text-date",
            "warn",
            name,
            _written_as_text(column, dates) & live,
            f"the {name} is written as text where others of the column are dates of the workbook",
            "Make all of them dates; a text may have escaped a conversion of day and month.",
        ),
    ]
    if name == "date":
        typed.faults.append(
            Fault(
                "missing-date",
                "set aside",
                name,
                dates.missing & live,
                "the date is missing",
                "Supply the date of the loss.",
            )
        )


def _written_as_text(column: Column, dates: Dates) -> BoolArray:
    """True for dates written as text in a column where the file itself holds others as dates."""
    dated = ~np.isnat(dates.values)
    if not column.is_text or not (column.native & dated).any():
        return np.zeros(len(dated), dtype=np.bool_)
    return dated & ~column.native


def _word(typed: TypedColumns, name: str, column: Column, live: BoolArray) -> None:
    written = WordArray.of(column.as_text())
    typed.cells[name] = written.as_arrow()
    odd = _odd_words(written.names)
    plain = {word: _plain_word(word) for word in written.names.filter(_arrow(odd)).to_pylist()}
    marker = {word: text.lower() in MISSING for word, text in plain.items()}
    typed.words[name] = written.rename(odd, ["" if marker[word] else text for word, text in plain.items()])
    for code, message, words in (
        (
            "word-form",
            f"the {name} is compared without outer spaces and invisible characters",
            {word for word, text in plain.items() if text != word and not marker[word]},
        ),
        (
            "marker",
            f"the {name} carries a marker for 'not known' and counts as empty",
            {word for word, text in plain.items() if marker[word] and text},
        ),
    ):
        mask = written.is_in(words) & live
        typed.faults.append(Fault(code, "normalise", name, mask, message, "None needed."))


def _plain_word(word: str) -> str:
    return INVISIBLE.sub("", unicodedata.normalize("NFC", word).strip())


def _odd_words(names: Any) -> BoolArray:
    """True for words that need a look: outer spaces, characters beyond ASCII, a marker for "not known"."""
    import pyarrow.compute as pc

    odd = ~as_mask(pc.string_is_ascii(names))
    odd |= as_mask(pc.not_equal(pc.utf8_trim_whitespace(names), names))
    odd |= is_missing(pc.utf8_lower(names))
    return odd


def _arrow(mask: BoolArray) -> Any:
    import pyarrow as pa

    return pa.array(mask)
