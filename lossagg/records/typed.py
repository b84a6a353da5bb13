"""From text to typed columns: numbers, dates and words, and the faults that show on the way.

The same typing serves loss records and exposures.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import numpy.typing as npt

from lossagg.arrays import BoolArray, FloatArray, IntArray
from lossagg.records.amounts import Numbers, NumberStyle, is_missing, parse_numbers
from lossagg.records.dates import DateArray, parse_dates
from lossagg.records.faults import Fault
from lossagg.records.raw import RawTable, TextColumn

WordArray = npt.NDArray[np.object_]

_NUMBER_REMEDY = (
    'Write plain numbers with a decimal point, or declare the marks of the file: decimal = "," or '
    'thousands = ",". Units, signs and brackets are not guessed.'
)
_DATE_REMEDY = 'Write dates as YYYY-MM-DD, or declare the format, for example date_format = "%d/%m/%Y".'


@dataclass
class TypedColumns:
    """Columns of a table by canonical name and kind, each of shape (rows,), and the faults in them."""

    numbers: dict[str, Numbers] = field(default_factory=dict)
    dates: dict[str, DateArray] = field(default_factory=dict)
    words: dict[str, WordArray] = field(default_factory=dict)
    faults: list[Fault] = field(default_factory=list)

    @property
    def values(self) -> dict[str, FloatArray]:
        """The numbers as float64, NaN where there is none."""
        return {name: numbers.values for name, numbers in self.numbers.items()}


def type_columns(
    raw: RawTable, kinds: Mapping[str, str], style: NumberStyle, date_format: str | None, skip: BoolArray
) -> TypedColumns:
    """Read every column of a table by its kind.

    Args:
        raw: the table as text.
        kinds: {canonical name: "number", "date" or "word"}.
        style: how numbers are written.
        date_format: how dates are written, None for ISO.
        skip: True for rows that carry no record (blank, totals), which have no faults; shape (rows,).

    Returns:
        The typed columns.

    Raises:
        InputError: a date format that cannot be used.
    """
    typed = TypedColumns()
    for name, column in raw.columns.items():
        if kinds[name] == "number":
            _number(typed, name, column, style, ~skip)
        elif kinds[name] == "date":
            _date(typed, name, column, date_format, ~skip)
        else:
            _word(typed, name, column, ~skip)
    return typed


def word_codes(words: WordArray) -> IntArray:
    """Number the different words of a column from 0, in the order in which they appear; shape (rows,)."""
    import pyarrow as pa

    codes: IntArray = pa.array(words, pa.string()).dictionary_encode().indices.to_numpy().astype(np.int64)
    return codes


def by_word(words: WordArray, test: Callable[[str], bool]) -> BoolArray:
    """Apply a test to a column of words, once for each different word; shape (rows,)."""
    import pyarrow as pa

    codes = pa.array(words, pa.string()).dictionary_encode()
    answers = np.array([test(word) for word in codes.dictionary.to_pylist()], dtype=np.bool_)
    return answers[codes.indices.to_numpy()] if len(words) else np.zeros(0, dtype=np.bool_)


def _number(typed: TypedColumns, name: str, column: TextColumn, style: NumberStyle, live: BoolArray) -> None:
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
    ]


def _date(
    typed: TypedColumns, name: str, column: TextColumn, date_format: str | None, live: BoolArray
) -> None:
    dates = parse_dates(column, date_format)
    typed.dates[name] = dates.values
    form = f"in the declared format {date_format!r}" if date_format else "a date written YYYY-MM-DD"
    typed.faults += [
        Fault("date-form", "stop", name, dates.wrong & live, f"the {name} is not {form}", _DATE_REMEDY),
        Fault(
            "impossible-date",
            "set aside",
            name,
            dates.impossible & live,
            f"the {name} names a day that does not exist",
            "Correct the date.",
        ),
        Fault(
            "date-zone",
            "set aside",
            name,
            dates.zoned & live,
            f"the {name} carries a time zone, so its day here is not known",
            "Export local dates without a zone.",
        ),
        Fault(
            "time-of-day",
            "normalise",
            name,
            dates.timed & live,
            f"the {name} has a time of day, which is let go",
            "None needed.",
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


def _word(typed: TypedColumns, name: str, column: TextColumn, live: BoolArray) -> None:
    import pyarrow as pa
    import pyarrow.compute as pc

    text = pc.utf8_trim_whitespace(pc.utf8_normalize(column.text, form="NFC"))
    visible = pc.replace_substring_regex(
        text, pattern="[\u200b\u200c\u200d\u2060\ufeff\u00ad]", replacement=""
    )
    marker = is_missing(pc.utf8_lower(visible))
    words: Any = pc.if_else(pa.array(marker), "", visible).to_numpy(zero_copy_only=False)
    typed.words[name] = words
    changed = np.asarray(pc.not_equal(column.text, visible).to_numpy(zero_copy_only=False), dtype=np.bool_)
    written = np.asarray(
        pc.greater(pc.utf8_length(visible), 0).to_numpy(zero_copy_only=False), dtype=np.bool_
    )
    typed.faults += [
        Fault(
            "word-form",
            "normalise",
            name,
            changed & ~marker & live,
            f"the {name} is compared without outer spaces and invisible characters",
            "None needed.",
        ),
        Fault(
            "marker",
            "normalise",
            name,
            marker & written & live,
            f"the {name} carries a marker for 'not known' and counts as empty",
            "None needed.",
        ),
    ]
