"""A first reading of a table of losses that nobody has described yet: what each column is likely to be.

Headings are looked up in a list of plain words, and the cells must bear them out: dates that read as dates,
amounts as numbers. Nothing is taken for certain; every choice is an assumption with its reason. Cells are
never shown, except names of lines and currencies, dates and amounts.
"""

from __future__ import annotations

import datetime as dt
import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from lossagg.errors import InputError, place
from lossagg.records.amounts import NumberStyle
from lossagg.records.forms import date_forms, number_forms
from lossagg.records.heading_words import rank
from lossagg.records.raw import Column, Layout, RawTable
from lossagg.records.sources import read_source
from lossagg.records.suggest import last_few, lines_seen, losses_of, main_span, suggested_threshold
from lossagg.records.table import COLUMNS, LossTable, read_losses

NO_CURRENCY = "XXX"
_CODE = re.compile(r"\b([A-Z]{3})\b")
_CODES = re.compile(
    "AUD|BRL|CAD|CHF|CNY|CZK|DKK|EUR|GBP|HKD|HUF|IDR|ILS|INR|JPY|KRW|MXN|MYR|NOK|NZD|PHP|PLN|RON|SEK|SGD|THB|"
    "TRY|TWD|USD|ZAR"
)
_LIKE_DATA = re.compile(r"^[+-]?\d[\d.,]*$|^\d{1,4}[-/.]\d{1,2}[-/.]\d{1,4}")


@dataclass(frozen=True, kw_only=True)
class ProposedLine:
    """A line as the table suggests it.

    Args:
        name: as the line column writes it; "All losses" without such a column.
        rows: rows of the line.
        threshold: suggested reporting threshold; None where none is to be seen.
        smallest: smallest loss above zero; None without losses.
    """

    name: str
    rows: int
    threshold: float | None
    smallest: float | None


@dataclass(frozen=True, kw_only=True)
class Proposal:
    """How a table of losses may be read.

    Args:
        file: its name.
        layout: sheet, encoding and delimiter as declared by the user.
        columns: {canonical name: heading}.
        passed_over: {canonical name: headings that would fit it too, or that its cells speak against}.
        unread: headings that are not mapped.
        decimal: decimal mark.
        thousands: mark between groups of digits; None: none.
        grouping: "three" or "indian".
        other_styles: other ways to read the numbers, where the file does not say which is right.
        date_format: format of the dates; None: ISO.
        other_dates: other ways to read the dates, where the file does not say which is right.
        lines: the lines seen, at least one.
        thresholds_recorded: whether a column carries the thresholds.
        first_year: calendar year of the earliest loss.
        latest: latest date in any column of dates that is read.
        last_few: losses dated in the calendar year of the latest date where those are next to none, so that
            they may be slips; else 0.
        latest_before: the latest loss of the years before.
        currency: the currency; "XXX" (ISO 4217: no currency) where no column says it.
        other_currencies: codes of further currencies in the rows.
    """

    file: str
    layout: Layout
    columns: Mapping[str, str]
    passed_over: Mapping[str, tuple[str, ...]]
    unread: tuple[str, ...]
    decimal: str
    thousands: str | None
    grouping: str
    other_styles: tuple[NumberStyle, ...]
    date_format: str | None
    other_dates: tuple[str, ...]
    lines: tuple[ProposedLine, ...]
    thresholds_recorded: bool
    first_year: int
    latest: dt.date
    last_few: int
    latest_before: dt.date
    currency: str
    other_currencies: tuple[str, ...]


def propose_reading(
    path: str | Path,
    *,
    sheet: str | None = None,
    encoding: str | None = None,
    delimiter: str | None = None,
) -> Proposal:
    """Look at a CSV, TSV, XLSX or Parquet file of losses and propose how to read it.

    Args:
        path: the file.
        sheet, encoding, delimiter: what the file does not show by itself, see `read_losses`.

    Returns:
        The proposal, for a person to confirm.

    Raises:
        InputError: a file that cannot be read, or no column that can be the amounts or the dates.
        RecordsError: single cells of those that are no numbers or dates.
        EnvironmentFault: the file cannot be opened.
    """
    path, layout = Path(path), Layout(sheet=sheet, encoding=encoding, delimiter=delimiter)
    raw = read_source(path, layout, _every_column).table
    mapped = _Mapping(raw, path.name)
    table = read_losses(
        path,
        columns=mapped.headings,
        sheet=sheet,
        encoding=encoding,
        delimiter=delimiter,
        decimal=mapped.numbers.best.decimal,
        thousands=mapped.numbers.best.thousands,
        grouping=mapped.numbers.best.grouping,
        date_format=mapped.dates.best,
    )
    days = [table.dates[name][~np.isnat(table.dates[name])] for name in table.dates]
    if not len(days[0]):
        raise InputError("no row has a date", where=place(file=path.name), remedy="Export the dates too.")
    span = main_span(table.date[~np.isnat(table.date)])
    latest = max(main_span(days_of)[1] for days_of in days if len(days_of))
    few, before = last_few(table.date[~np.isnat(table.date)], latest)
    currency, others = _currency(table)
    lines = lines_seen(table)
    columns = {name: heading for name, heading in mapped.headings.items() if name != "line" or lines}
    return Proposal(
        file=path.name,
        layout=layout,
        columns=columns,
        passed_over=mapped.passed_over,
        unread=tuple(heading for heading in raw.headings if heading not in columns.values()),
        decimal=mapped.numbers.best.decimal,
        thousands=mapped.numbers.best.thousands,
        grouping=mapped.numbers.best.grouping,
        other_styles=mapped.numbers.others,
        date_format=mapped.dates.best,
        other_dates=tuple(form or "%Y-%m-%d" for form in mapped.dates.others),
        lines=_lines(table, lines),
        thresholds_recorded="threshold" in columns,
        first_year=int(str(span[0])[:4]),
        latest=dt.date.fromisoformat(str(latest)),
        last_few=few,
        latest_before=dt.date.fromisoformat(str(before)),
        currency=currency,
        other_currencies=others,
    )


class _Mapping:
    """Which heading means which column, and how numbers and dates are written."""

    def __init__(self, raw: RawTable, file: str) -> None:
        self.raw, self.where = raw, place(file=file, sheet=raw.sheet, row=1)
        self.headings: dict[str, str] = {}
        self.passed_over: dict[str, tuple[str, ...]] = {}
        for name in COLUMNS:
            self.choose(name)
        for name in ("amount", "date"):
            if name not in self.headings:
                raise self.missing(name)
        self.numbers = number_forms(self.of_kind("number"))
        self.dates = date_forms(self.of_kind("date"))

    def choose(self, name: str) -> None:
        """Map the heading that means a column most surely and whose cells bear it out."""
        ranked = [(rank(heading, name), heading) for heading in self.raw.headings]
        meant = [h for _, h in sorted((r, h) for r, h in ranked if r is not None)]
        fitting = [h for h in meant if h not in self.headings.values() and self.bears_out(h, COLUMNS[name])]
        if not fitting and name in ("amount", "date") and not meant:
            named = [h for h in self.raw.headings if not _LIKE_DATA.match(h)]
            alike = [h for h in named if self.only_kind(h, COLUMNS[name])]
            fitting = alike if len(alike) == 1 else []
        if fitting:
            self.headings[name] = fitting[0]
        over = tuple(h for h in meant if h not in self.headings.values())
        if over:
            self.passed_over[name] = over

    def column(self, heading: str) -> Column:
        """The cells under a heading."""
        return self.raw.columns[heading]

    def of_kind(self, kind: str) -> list[Column]:
        """The mapped columns of a kind."""
        return [self.column(heading) for name, heading in self.headings.items() if COLUMNS[name] == kind]

    def bears_out(self, heading: str, kind: str) -> bool:
        """Whether the cells under a heading can be numbers or dates; words can be anything."""
        if kind == "word":
            return True
        column = self.column(heading)
        return (number_forms([column]) if kind == "number" else date_forms([column])).fits

    def only_kind(self, heading: str, kind: str) -> bool:
        """Whether the cells under a heading can be of this kind and not of the other."""
        other = "date" if kind == "number" else "number"
        return self.bears_out(heading, kind) and not self.bears_out(heading, other)

    def missing(self, name: str) -> InputError:
        """The refusal where a column that is needed is not to be found."""
        if any(_LIKE_DATA.match(heading) for heading in self.raw.headings):
            return InputError(
                "the first row looks like data",
                where=self.where,
                remedy="Add a row of headings above it.",
            )
        spoken_against = self.passed_over.get(name, ())
        what = "amounts" if name == "amount" else "dates"
        if spoken_against:
            return InputError(
                f"the cells of the column that should hold the {what} are not {what}",
                where=self.where,
                value=spoken_against[0],
                remedy="Write numbers plainly and dates with a year of four digits, or rename the heading.",
            )
        return InputError(
            f"no heading says which column holds the {what} of the losses",
            where=self.where,
            # A first row without any heading known may be a note or a record, and personal.
            value=", ".join(heading[:40] for heading in self.raw.headings[:20]) if self.headings else None,
            remedy=f"Name that column {name!r}.",
        )


def _every_column(headings: Sequence[str], sheet: str | None) -> Mapping[str, int]:
    del sheet
    return {heading: position for position, heading in enumerate(headings)}


def _lines(table: LossTable, seen: Mapping[str, int]) -> tuple[ProposedLine, ...]:
    recorded = "threshold" in table.numbers
    found = []
    for name, rows in (seen or {"All losses": len(table)}).items():
        losses = losses_of(table, name if seen else None)
        found.append(
            ProposedLine(
                name=name,
                rows=rows,
                threshold=None if recorded else suggested_threshold(losses),
                smallest=float(losses.min()) if losses.size else None,
            )
        )
    return tuple(found)


def _currency(table: LossTable) -> tuple[str, tuple[str, ...]]:
    """The code of most rows, else one in the heading of the amounts; and the codes of other rows."""
    if "currency" in table.words:
        words = np.asarray(table.word("currency")[~table.blank]).tolist()
        codes = [word.upper() for word in words if re.fullmatch("[A-Za-z]{3}", word)]
        ordered = sorted(set(codes), key=lambda code: (-codes.count(code), code))
        if ordered:
            return ordered[0], tuple(ordered[1:])
    said = [code for code in _CODE.findall(table.headings["amount"]) if _CODES.fullmatch(code)]
    return (said[0] if said else NO_CURRENCY), ()
