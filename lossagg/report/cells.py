"""What one cell of a table holds, and how it is shown.

Every table of the report is built once, as cells with their kind, and shown three times: in the
page, in the workbook and on the console. A cell knows its full value and the accuracy that came
with it; how many digits are shown follows from the accuracy, by one rule (see `digits`).
"""

from __future__ import annotations

import re
from dataclasses import dataclass, replace
from typing import Literal

from lossagg.report import digits

Kind = Literal[
    "text", "count", "money", "amount", "probability", "level", "number", "ratio", "statistic", "period"
]
_UNPRINTABLE = re.compile(r"[\x00-\x08\x0b-\x1f\x7f-\x9f\u2028-\u202e\u2066-\u2069\ud800-\udfff\ufffe\uffff]")


def clean(text: object) -> str:
    """Text that is safe to show: control, surrogate and direction-changing characters become U+FFFD.

    Such characters could steer a terminal, reverse the reading order of a name, or make a page or
    workbook unreadable.
    """
    return _UNPRINTABLE.sub("�", str(text))


@dataclass(frozen=True)
class Absent:
    """No number here, and why: "does not exist", "withheld", "not computed", "no limit", ...

    Args:
        words: what stands in the cell.
        reason: a sentence for the foot of the table, if there is one.
    """

    words: str
    reason: str | None = None


@dataclass(frozen=True)
class Ranged:
    """A figure with the range that travels with it: a guaranteed bracket or a statistical interval.

    `reason` says why a figure that should have a range has none; `mark` stands beside the figure and is
    explained at the foot of the table.
    """

    value: float
    low: float | None
    high: float | None
    reason: str | None = None
    mark: str = ""


@dataclass(frozen=True)
class Estimated:
    """A figure with its standard error; an error of `None` means that none can be stated. `mark` as above."""

    value: float
    error: float | None
    mark: str = ""


Cell = str | int | float | Absent | Ranged | Estimated


@dataclass(frozen=True)
class Shown:
    """A cell as text: the figure, its range below it, and the full value for machines."""

    text: str
    range: str = ""
    full: str = ""
    numeric: bool = False


@dataclass(frozen=True)
class Column:
    """Heading and kind of a column; with `ranged` its cells carry a low and a high value."""

    heading: str
    kind: Kind = "text"
    ranged: bool = False


@dataclass(frozen=True)
class Table:
    """A table with its cells.

    Attributes:
        key: short name, unique over a report; the workbook names its sheet after it.
        title: what the table shows, units included.
        columns: the columns, in order.
        rows: the cells, one tuple per row, as long as `columns`.
        notes: sentences that belong below the table.
    """

    key: str
    title: str
    columns: tuple[Column, ...]
    rows: tuple[tuple[Cell, ...], ...]
    notes: tuple[str, ...] = ()


def show(cell: Cell, kind: Kind) -> Shown:
    """A cell as the text a reader sees, with no more digits than its accuracy supports."""
    if isinstance(cell, Absent):
        return Shown(clean(cell.words))
    if isinstance(cell, str):
        return Shown(clean(cell))
    if isinstance(cell, Ranged):
        return _marked(_show_ranged(cell), cell.mark)
    if isinstance(cell, Estimated):
        text = digits.estimated(cell.value, cell.error, probability=kind == "probability")
        return _marked(Shown(text, full=repr(float(cell.value)), numeric=True), cell.mark)
    return Shown(_show_number(cell, kind), full=repr(cell), numeric=True)


def _marked(shown: Shown, mark: str) -> Shown:
    return replace(shown, text=f"{shown.text} {mark}") if mark else shown


def _show_ranged(cell: Ranged) -> Shown:
    if cell.reason is not None:
        return Shown(digits.unsupported(cell.value), "no interval", repr(float(cell.value)), numeric=True)
    if (cell.low is None) != (cell.high is None):
        return _show_half_open(cell)
    unit = digits.supported_unit(cell.value, cell.low, cell.high)
    limits = "" if cell.low is None or cell.high is None else digits.enclosing(cell.low, cell.high, unit)
    return Shown(digits.rounded(cell.value, unit), limits, repr(float(cell.value)), numeric=True)


def _show_half_open(cell: Ranged) -> Shown:
    """A figure bounded on one side only: its digits follow from the side that is known."""
    known, words = (cell.low, "from") if cell.high is None else (cell.high, "up to")
    assert known is not None
    unit = digits.supported_unit(cell.value, min(known, cell.value), max(known, cell.value))
    limits = f"{words} {digits.rounded(known, unit)}"
    return Shown(digits.rounded(cell.value, unit), limits, repr(float(cell.value)), numeric=True)


def _show_number(value: float, kind: Kind) -> str:
    match kind:
        case "count":
            return f"{value:,}" if isinstance(value, int) else digits.significant(value, 6)
        case "amount":
            return f"{value:,.2f}"
        case "money":
            return digits.rounded(value, digits.supported_unit(value, None, None))
        case "statistic":
            return digits.significant(value, 3)
        case "level":
            return digits.percent(value)
        case "probability":
            return digits.chance(value)
        case "period":
            return digits.return_period(value)
        case "ratio":
            return digits.significant(value, 4)
        case _:
            return digits.significant(value, 6)
