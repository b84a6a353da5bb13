"""How numbers and dates are written in a file, as far as the file itself leaves no other reading.

A form is proposed only where every other form that reads the cells as well gives the same values. "1,234" in
every cell may be a thousand or one and some: then both are named, and none is chosen.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Generic, TypeVar

import numpy as np

from lossagg.records.amounts import NumberStyle, parse_numbers
from lossagg.records.dates import parse_dates
from lossagg.records.raw import Column

_MARKS = (None, ",", ".", " ", "'", "\u2019", "\u00a0", "\u202f")
STYLES = (
    *(NumberStyle(decimal, mark) for mark in _MARKS for decimal in (".", ",") if decimal != mark),
    NumberStyle(".", ",", "indian"),
)
DATE_FORMATS = (
    None,
    *("%d.%m.%Y", "%d/%m/%Y", "%m/%d/%Y", "%d-%m-%Y", "%m-%d-%Y", "%Y/%m/%d", "%Y.%m.%d", "%Y%m%d"),
    *("%d-%b-%Y", "%d %b %Y", "%b %d, %Y", "%d/%b/%Y", "%d.%b.%Y"),
)
WRONG = 0.05

Form = TypeVar("Form")


@dataclass(frozen=True)
class Forms(Generic[Form]):
    """The forms that read some columns best.

    Args:
        best: the form that reads them with the fewest cells left over, the plainest first.
        others: forms that read as many cells but as other values: which of them is right, the file does not
            say.
        wrong: share of the cells with content that the best form does not read.
    """

    best: Form
    others: tuple[Form, ...]
    wrong: float

    @property
    def fits(self) -> bool:
        """Whether the cells are of this kind at all."""
        return self.wrong <= WRONG


def number_forms(columns: Sequence[Column]) -> Forms[NumberStyle]:
    """How the numbers of some columns, taken together, may be written.

    Args:
        columns: the cells.
    """

    def read(column: Column, style: NumberStyle) -> tuple[np.ndarray, int, int]:
        numbers = parse_numbers(column, style)
        return numbers.values, int(numbers.wrong.sum()), int((~numbers.missing).sum())

    return _forms(columns, STYLES, read)


def date_forms(columns: Sequence[Column]) -> Forms[str | None]:
    """How the dates of some columns, taken together, may be written; None stands for ISO dates.

    Args:
        columns: the cells.
    """

    def read(column: Column, form: str | None) -> tuple[np.ndarray, int, int]:
        dates = parse_dates(column, form)
        bad = dates.wrong | dates.impossible
        return dates.values.astype(np.int64), int(bad.sum()), int((~dates.missing).sum())

    return _forms(columns, DATE_FORMATS, read)


def _forms(
    columns: Sequence[Column],
    candidates: Sequence[Form],
    read: Callable[[Column, Form], tuple[np.ndarray, int, int]],
) -> Forms[Form]:
    found: list[tuple[int, Form, list[np.ndarray]]] = []
    cells = 0
    for form in candidates:
        parts = [read(column, form) for column in columns]
        found.append((sum(wrong for _, wrong, _ in parts), form, [values for values, _, _ in parts]))
        cells = max(cells, sum(present for _, _, present in parts))
    fewest = min(wrong for wrong, _, _ in found)
    _, best, values = next(entry for entry in found if entry[0] == fewest)
    different, others = [values], []
    for wrong, form, other in found:
        if wrong == fewest and not any(all(map(_same, known, other)) for known in different):
            different.append(other)
            others.append(form)
    return Forms(best, tuple(others), fewest / max(cells, 1))


def _same(one: np.ndarray, other: np.ndarray) -> bool:
    return bool(np.array_equal(one, other, equal_nan=one.dtype.kind == "f"))
