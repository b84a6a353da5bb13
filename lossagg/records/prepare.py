"""From checked rows to the losses that are modelled, every step logged with counts and amounts.

The order is fixed: claims of one event are summed; events below their reporting threshold are set aside;
what remains is trended, amounts and thresholds by the same index. Amounts stay gross of recoveries.
"""

from __future__ import annotations

import datetime as dt
from dataclasses import dataclass, fields, replace
from typing import Any, TypeVar

import numpy as np
import numpy.typing as npt

from lossagg.arrays import BoolArray, FloatArray, IntArray, require_positive
from lossagg.errors import InputError, place
from lossagg.records.check import CheckedLosses
from lossagg.records.dates import DateArray
from lossagg.records.events import Events, group_events
from lossagg.records.exposure import ExposureTable
from lossagg.records.faults import list_fault
from lossagg.records.findings import Finding
from lossagg.records.money import Reconciliation, reconcile
from lossagg.records.rules import below_threshold
from lossagg.records.steps import Step, log_steps, open_claims_caution, window_caution
from lossagg.records.tolerance import check_tolerance
from lossagg.records.trend import check_trend, trend_factor
from lossagg.records.words import WordArray
from lossagg.records.years import (
    Window,
    YearTable,
    complete_from,
    exposures_of,
    sum_by_year,
    threshold_base,
)

Scalar = TypeVar("Scalar", bound=np.generic)


@dataclass(frozen=True)
class PreparedLosses:
    """The losses of one line as they are modelled; arrays of shape (events,), sorted by date and amount.

    Args:
        line: name of the line, None when the file is of one line.
        amount: amount of each event in the money of the forecast period.
        threshold: reporting threshold of each event in the same money.
        censored: True where the amount stopped at a policy limit.
        date: date of the earliest claim.
        year: its calendar year.
        recorded: amount as recorded.
        claims: number of claims of the event.
        years: the history by year.
        largest_threshold: lowest amount, in the money of the forecast period, above which the whole
            window is complete.
        steps: the steps from rows to losses.
        findings: everything found on the way, that of the checks included.
        reconciliation: rows and money read, used and excluded at the end.
        base: what the exposure is, None without exposure.
    """

    line: str | None
    amount: FloatArray
    threshold: FloatArray
    censored: BoolArray
    date: DateArray
    year: IntArray
    recorded: FloatArray
    claims: IntArray
    years: YearTable
    largest_threshold: float
    steps: tuple[Step, ...]
    findings: tuple[Finding, ...]
    reconciliation: Reconciliation
    base: str | None

    def __len__(self) -> int:
        """Number of events."""
        return len(self.amount)

    def __repr__(self) -> str:
        """One line: the line, its events and years."""
        years = f"{self.years.year[0]}-{self.years.year[-1]}"
        return f"PreparedLosses(line={self.line!r}, events={len(self)}, years={years})"

    @property
    def supported_level(self) -> float:
        """Level that the length of the history supports by itself: 1 - 1 / years."""
        return 1.0 - 1.0 / len(self.years)


def prepare_losses(
    checked: CheckedLosses,
    *,
    exposure: ExposureTable | None = None,
    forecast_midpoint: dt.date,
    reporting_threshold: float | None = None,
    trend: float = 0.0,
) -> PreparedLosses:
    """Prepare the checked records of one line for modelling.

    Valuation date, observation window and tolerance are those of the check.

    Args:
        checked: the records of one line, from `check_losses`, or `for_line` where several share a file.
        exposure: exposure of the line; None: the same exposure, 1, every year.
        forecast_midpoint: midpoint of the period the losses are wanted for, see `midpoint`.
        reporting_threshold: amount below which losses were not recorded, in the money of the time, None
            if all were; rows that carry their own threshold keep it.
        trend: yearly rate at which losses grow, strictly between -0.5 and 1.

    Returns:
        The losses, the history by year, the steps and the reconciliation.

    Raises:
        RecordsError: too much lies below the threshold.
        InputError: arguments out of range, no window because there is neither a loss, an exposure
            nor a first year, years without exposure, several lines at once.
    """
    _require_one_line(checked)
    trend = check_trend(trend)
    default = require_positive(reporting_threshold or 0.0, "reporting_threshold", zero=True)
    used, findings = _above_threshold(checked, default)
    events = _in_order(group_events(checked.table, used))
    window, found = _window(checked, events, exposure)
    own = np.where(np.isnan(events.threshold), default, events.threshold)
    factor = trend_factor(events.date, forecast_midpoint, trend)
    amount = events.amount * factor
    year = _year(events.date)
    base = threshold_base(window, year, own, default)
    middles = trend_factor(window.middles(), forecast_midpoint, trend)
    years = _years(window, exposures_of(window, exposure), events, amount, base * middles)
    table, member = checked.table, checked.member
    return PreparedLosses(
        line=checked.line,
        amount=_frozen(amount),
        threshold=_frozen(own * factor),
        censored=_frozen(events.censored),
        date=_frozen(events.date),
        year=_frozen(year),
        recorded=_frozen(events.amount),
        claims=_frozen(events.claims),
        years=years,
        largest_threshold=complete_from(window, base, forecast_midpoint, trend),
        steps=log_steps(checked, used, events, amount, trend),
        findings=(*findings, *found, *open_claims_caution(checked, years)),
        reconciliation=reconcile(table.exact[member], used[member], table.unreadable[member]),
        base=exposure.base if exposure else None,
    )


def _require_one_line(checked: CheckedLosses) -> None:
    lines = checked.terms.lines
    if lines is not None and len(lines) > 1 and checked.line is None:
        raise InputError(
            "the records are of several lines",
            where=place(file=checked.table.file),
            value=list(lines),
            remedy="Prepare each line on its own: take it with for_line.",
        )


def _above_threshold(checked: CheckedLosses, default: float) -> tuple[BoolArray, list[Finding]]:
    """Set aside the events below their threshold, and measure again what is set aside in all."""
    table, line = checked.table, checked.line
    small = below_threshold(table, checked.used, default)
    used: BoolArray = checked.used & ~small.mask
    listed = list_fault(small, table.places())
    findings = [*checked.findings, *(replace(finding, line=line) for finding in listed)]
    aside = [fault for fault in checked.faults if fault.action == "set aside"]
    check_tolerance(table, [*aside, small], used, checked.terms.tolerance, findings, line)
    return used, findings


def _in_order(events: Events) -> Events:
    """Sort events by what they are, so that nothing later depends on the order of the rows."""
    keys = ("identifier", "claims", "censored", "threshold", "amount", "date")
    columns = [getattr(events, key) for key in keys]
    order = np.lexsort([_sortable(column) for column in columns])
    place_of = np.empty(len(order), dtype=np.int64)
    place_of[order] = np.arange(len(order))
    sorted_columns = {
        field.name: getattr(events, field.name)[order] for field in fields(events) if field.name != "index"
    }
    return Events(index=place_of[events.index], **sorted_columns)


def _sortable(column: WordArray | npt.NDArray[Any]) -> npt.NDArray[Any]:
    """Words in their alphabetical order, as numbers; anything else as it is."""
    return column.ranks() if isinstance(column, WordArray) else column


def _window(
    checked: CheckedLosses, events: Events, exposure: ExposureTable | None
) -> tuple[Window, list[Finding]]:
    """Find the years observed: declared, else those of the exposure, else from the first loss."""
    terms = checked.terms
    last = terms.valuation_date.year
    declared = terms.first_year_of(checked.line)
    starts = [] if declared is None else [declared]
    if not starts and exposure is not None:
        starts = [int(exposure.year.min())]
    found = []
    if not starts and len(events):
        found = [window_caution(checked, int(_year(events.date).min()))]
    if declared is None and len(events):
        starts.append(int(_year(events.date).min()))
    if not starts:
        raise InputError(
            "no loss is used and no observation window is known",
            where=place(file=checked.table.file),
            remedy="Give an exposure file or declare the first year; then a year without losses counts.",
        )
    return Window(min(*starts, last), terms.valuation_date), found


def _years(
    window: Window, exposure: FloatArray, events: Events, amount: FloatArray, threshold: FloatArray
) -> YearTable:
    year = _year(events.date)
    at = year - window.first_year
    size = len(window.years)
    recorded, trended = sum_by_year(window, year, events.exact, amount)
    largest = np.zeros(size)
    np.maximum.at(largest, at, events.amount)
    return YearTable(
        year=_frozen(window.years),
        exposure=_frozen(exposure),
        fraction=_frozen(window.fractions()),
        losses=_frozen(np.bincount(at, minlength=size).astype(np.int64)),
        claims=_frozen(np.bincount(at, weights=events.claims, minlength=size).astype(np.int64)),
        open=_frozen(np.bincount(at, weights=events.open, minlength=size).astype(np.int64)),
        amount=_frozen(recorded),
        trended_amount=_frozen(trended),
        largest=_frozen(largest),
        threshold=_frozen(threshold),
    )


def _year(date: DateArray) -> IntArray:
    return date.astype("datetime64[Y]").astype(np.int64) + 1970


def _frozen(array: npt.NDArray[Scalar]) -> npt.NDArray[Scalar]:
    """Make an array read-only, since the result that holds it is frozen."""
    array.setflags(write=False)
    return array
