"""Reading a trend index: one value per year or per month, none missing, none made up."""

from __future__ import annotations

import re
from collections.abc import Mapping
from pathlib import Path

import numpy as np

from lossagg.arrays import FloatArray, IntArray
from lossagg.errors import InputError, place
from lossagg.records.amounts import NumberStyle
from lossagg.records.headings import Wanted
from lossagg.records.raw import Layout
from lossagg.records.small_table import EPOCH, SmallTable, read_small_table
from lossagg.records.trend import HIGHEST, LOWEST, MONTHS, TrendIndex

_WANTED = Wanted({"year": "number", "month": "word", "index": "number"}, ("index",))
_MONTH = re.compile(r"(\d{4})-(0[1-9]|1[0-2])(-01)?(T?[ 0:]*)")


def read_trend_index(
    path: str | Path,
    *,
    columns: Mapping[str, str] | None = None,
    sheet: str | None = None,
    encoding: str | None = None,
    delimiter: str | None = None,
    decimal: str = ".",
    thousands: str | None = None,
) -> TrendIndex:
    """Read an index of prices, wages or costs.

    Args:
        path: a CSV, TSV, XLSX or Parquet file with the columns `year` (or `month`, written YYYY-MM) and
            `index`.
        columns: {canonical name: heading} where the file uses other headings.
        sheet: sheet of a workbook with several.
        encoding: encoding of a text file that is neither UTF-8 nor marked.
        delimiter: delimiter of a text file where it is not clear.
        decimal: decimal mark.
        thousands: mark between groups of three digits, if any.

    Raises:
        InputError: the file cannot be read as declared, a period is missing or repeated, a value is
            missing, zero or negative, or changes from one period to the next as no index does.
        EnvironmentFault: the file cannot be opened.
    """
    layout = Layout(sheet=sheet, encoding=encoding, delimiter=delimiter)
    table = read_small_table(Path(path), _WANTED, columns or {}, layout, NumberStyle(decimal, thousands))
    if ("year" in table.headings) == ("month" in table.headings):
        raise InputError(
            "an index needs either a year or a month column",
            where=place(file=table.file, row=1),
            value=sorted(table.headings.values()),
            remedy="Give one value per year, or one per month.",
        )
    months = MONTHS if "year" in table.headings else 1
    period = table.years() - EPOCH if months == MONTHS else _months(table)
    first, values = _ordered(table, period, months)
    index = TrendIndex(
        table.file, table.sha256, table.headings["index"], months, first, values, table.findings
    )
    _check_changes(index)
    return index


def _months(table: SmallTable) -> IntArray:
    numbers = []
    for at, text in enumerate(table.word("month")):
        match = _MONTH.fullmatch(text)
        if match is None:
            table.refuse(at, "month", "the month is not written YYYY-MM")
        numbers.append((int(match[1]) - EPOCH) * MONTHS + int(match[2]) - 1)
    return np.array(numbers, dtype=np.int64)


def _ordered(table: SmallTable, period: IntArray, months: int) -> tuple[int, FloatArray]:
    """First period, and the values in order, once every period is there once with a value above zero."""
    value = table.number("index")
    column = "year" if months == MONTHS else "month"
    for at in np.flatnonzero(~(np.isfinite(value) & (value > 0))).tolist():
        table.refuse(at, "index", "the index is missing, zero, negative or infinite")
    order = np.argsort(period, kind="stable")
    step = np.diff(period[order])
    if (step == 0).any():
        at = int(order[int(np.argmax(step == 0)) + 1])
        table.refuse(at, column, f"the {column} stands in more than one row")
    if (step > 1).any():
        have = set(period.tolist())
        named = TrendIndex(table.file, "", "", months, 0, value)
        absent = [p for p in range(int(period.min()), int(period.max())) if p not in have]
        raise InputError(
            f"the index misses {len(absent)} {column}{'' if len(absent) == 1 else 's'} between its first "
            "and its last",
            where=place(file=table.file, column=table.headings[column]),
            value=[named.period(p) for p in absent[:10]],
            remedy="Add them; an index is not filled in.",
        )
    return int(period.min()), value[order]


def _check_changes(index: TrendIndex) -> None:
    """A change of a period is bounded like a yearly rate: beyond it stands a slip or another base."""
    change = index.values[1:] / index.values[:-1] - 1.0
    wild = np.flatnonzero(~((change > LOWEST) & (change < HIGHEST)))
    if wild.size:
        at = int(wild[0])
        raise InputError(
            f"the index changes by {change[at]:+.0%} from {index.period(index.first + at)} to "
            f"{index.period(index.first + at + 1)}",
            where=place(file=index.file, column=index.name),
            value=f"{index.values[at]:g} to {index.values[at + 1]:g}",
            remedy="Correct the value, or bring the index to one base throughout.",
        )
