"""From checked rows to the losses that are modelled, every step logged with counts and amounts.

The order is fixed: recoveries are taken off where that is asked for; claims of one event are summed; open
claims are developed or censored where that is asked for; events below their reporting threshold are set
aside; what remains is trended, amounts and thresholds by the same index; the years are developed to
ultimate. Without a request amounts stay gross of recoveries and as they are recorded.
"""

from __future__ import annotations

import datetime as dt
from dataclasses import fields, replace
from typing import TypeVar

import numpy as np
import numpy.typing as npt

from lossagg.arrays import BoolArray, IntArray, require_positive
from lossagg.errors import InputError, place
from lossagg.records.basis import net_amounts
from lossagg.records.check import CheckedLosses
from lossagg.records.dates import DateArray
from lossagg.records.development import Development, OpenClaims
from lossagg.records.events import Events, group_events
from lossagg.records.exposure import ExposureTable
from lossagg.records.findings import Finding
from lossagg.records.mixups import unit_findings
from lossagg.records.modelled import check_open_claims, factors_of, modelled_amounts
from lossagg.records.money import Reconciliation, reconcile
from lossagg.records.prepared import PreparedLosses
from lossagg.records.small_events import Kept, set_aside_small
from lossagg.records.steps import Trail, log_steps, open_claims_caution, window_caution
from lossagg.records.trend import Trend, TrendIndex, check_trend, trend_factor
from lossagg.records.ultimate import Developed, Factors, develop_years
from lossagg.records.years import Window, YearTable, complete_from, exposures_of, threshold_base, year_table

Scalar = TypeVar("Scalar", bound=np.generic)


def prepare_losses(
    checked: CheckedLosses,
    *,
    exposure: ExposureTable | None = None,
    forecast_midpoint: dt.date,
    reporting_threshold: float | None = None,
    trend: Trend = 0.0,
    frequency_trend: float = 0.0,
    hours_window: int | None = None,
    net_of_recoveries: bool = False,
    open_claims: OpenClaims = "as-recorded",
    development: Development | None = None,
) -> PreparedLosses:
    """Prepare the checked records of one line for modelling.

    Valuation date, observation window and tolerance are those of the check.

    Args:
        checked: the records of one line, from `check_losses`, or `for_line` where several share a file.
        exposure: exposure of the line; None: the same exposure, 1, every year.
        forecast_midpoint: midpoint of the period the losses are wanted for, see `midpoint`.
        reporting_threshold: amount below which losses were not recorded, in the money of the time, None
            if all were; rows that carry their own threshold keep it.
        trend: yearly rate at which losses grow, strictly between -0.5 and 1, or an index.
        frequency_trend: yearly rate at which events per unit of exposure grow, in the same range.
        hours_window: longest duration of one event in hours, see `events`; None: without end.
        net_of_recoveries: True to model losses net of recoveries; then an event whose net amount is
            below its threshold is left out as if it had not been recorded.
        open_claims: "as-recorded"; "develop": times the factor of open claims of its year's age;
            "censor": at least what is recorded.
        development: how the years are brought to ultimate; None: they are taken as complete.

    Returns:
        The losses, the history by year, the steps and the reconciliation.

    Raises:
        RecordsError: too much lies below the threshold.
        InputError: arguments out of range, no window because there is neither a loss, an exposure
            nor a first year, years without exposure, several lines at once, an index or a history that
            does not reach, events or recoveries that the records do not tell, open claims to be developed
            without factors.
    """
    _require_one_line(checked)
    trend, frequency_trend = check_trend(trend), _rate(frequency_trend)
    check_open_claims(checked, open_claims, development)
    default = require_positive(reporting_threshold or 0.0, "reporting_threshold", zero=True)
    table = checked.table
    if hours_window is not None and "event" not in table.words:
        raise InputError(
            "events are to be parted by hours, but the records do not say which claims are of one event",
            where=place(file=table.file, sheet=table.sheet),
            remedy="Map the column that names the event, or leave hours-window out.",
        )
    net = net_amounts(table) if net_of_recoveries else None
    window, found = _window(checked, exposure)
    factors = factors_of(checked, window, development, default, hours_window, net)
    modelled = modelled_amounts(checked, window, factors, open_claims, net)
    everything = group_events(table, checked.used, hours_window=hours_window, amount=modelled)
    kept = set_aside_small(checked, everything, default, modelled is not None, hours_window)
    events = _in_order(kept.events)
    own = np.where(np.isnan(events.threshold), default, events.threshold)
    factor = trend_factor(events.date, forecast_midpoint, trend)
    at = window.position(events.date)
    base = threshold_base(window, at + window.first_year, own, default)
    years = year_table(
        window,
        exposures_of(window, exposure),
        events,
        table.exact[kept.used].by_group(at[events.index], len(window.years)).to_floats(),
        events.amount * factor,
        base * trend_factor(window.middles(), forecast_midpoint, trend),
        trend_factor(window.middles(), forecast_midpoint, frequency_trend),
        own,
    )
    years, developed = _developed(development, factors, years)
    whole = _reconciled(checked, kept)
    trail = Trail(
        checked, kept.used, everything, events, net, trend, forecast_midpoint, hours_window, open_claims
    )
    return PreparedLosses(
        line=checked.line,
        amount=_frozen(events.amount * factor),
        threshold=_frozen(own * factor),
        censored=_frozen(events.censored | ((events.open > 0) & (open_claims == "censor"))),
        date=_frozen(events.date),
        year=_frozen(at + window.first_year),
        recorded=_frozen(events.recorded),
        claims=_frozen(events.claims),
        years=years,
        largest_threshold=complete_from(window, base, forecast_midpoint, trend),
        steps=log_steps(trail, whole, years, developed),
        findings=(
            *kept.findings,
            *(exposure.findings if exposure else ()),
            *(trend.findings if isinstance(trend, TrendIndex) else ()),
            *found,
            *unit_findings(checked, kept.used),
            *(open_claims_caution(checked, years) if open_claims == "as-recorded" else ()),
        ),
        reconciliation=whole,
        base=exposure.base if exposure else None,
        trend_factor=_frozen(factor),
        loss_of_row=_frozen(_losses_of_rows(kept.used, events)),
        row_amount=modelled,
        small=kept.faults,
        net=net_of_recoveries,
        open_claims=open_claims,
        developed=developed,
    )


def _losses_of_rows(used: BoolArray, events: Events) -> npt.NDArray[np.int32]:
    """Event of each row, -1 where it is in none; in four bytes, for there may be ten million rows."""
    losses = np.full(len(used), -1, dtype=np.int32)
    losses[used] = events.index
    return losses


def _require_one_line(checked: CheckedLosses) -> None:
    lines = checked.terms.lines
    if lines is not None and len(lines) > 1 and checked.line is None:
        raise InputError(
            "the records are of several lines",
            where=place(file=checked.table.file),
            value=list(lines),
            remedy="Prepare each line on its own: take it with for_line.",
        )


def _developed(
    development: Development | None, factors: Factors | None, years: YearTable
) -> tuple[YearTable, Developed | None]:
    """The years with what they develop to, and the development itself where it is asked for."""
    if development is None or factors is None:
        return years, None
    count = years.losses.astype(np.float64)
    developed = develop_years(development, factors, years.year, years.observed_exposure, count, years.amount)
    return years.at_ultimate(factors.count, developed.ultimate_count, developed.ultimate_amount), developed


def _reconciled(checked: CheckedLosses, kept: Kept) -> Reconciliation:
    """The reconciliation at the end, which is that of the check unless events were set aside since."""
    if not kept.changed:
        return checked.reconciliation
    table, member = checked.table, checked.member
    return reconcile(table.exact[member], kept.used[member], table.unreadable[member])


def _rate(frequency_trend: float) -> float:
    rate = check_trend(frequency_trend)
    if not isinstance(rate, float):
        raise InputError(
            "the trend of the frequency must be a rate per year",
            value=type(frequency_trend).__name__,
            remedy="Write 0.02 for 2 % a year.",
        )
    return rate


def _in_order(events: Events) -> Events:
    """Sort events by what they are, so that nothing later depends on the order of the rows.

    Date and amount nearly always decide; only events equal in both are told apart by the rest. Events equal
    in everything that is kept of them may stand in any order.
    """
    order = np.argsort(events.amount)
    # Days as small integers are sorted in linear time; 65,536 of them are 179 years.
    day = events.date.astype(np.int64)
    day = day - day.min() if len(day) else day
    day = day.astype(np.uint16) if not len(day) or day.max() < 2**16 else day
    order = order[np.argsort(day[order], kind="stable")]
    date, amount = events.date[order], events.amount[order]
    same = (date[1:] == date[:-1]) & (amount[1:] == amount[:-1])
    tied = np.flatnonzero(np.append(same, False) | np.append(False, same))
    keys = ("open", "claims", "censored", "threshold", "recorded", "amount", "date")
    among = order[tied]
    order[tied] = among[np.lexsort([getattr(events, key)[among] for key in keys])]
    place_of = np.empty(len(order), dtype=np.int64)
    place_of[order] = np.arange(len(order))
    columns = {
        field.name: getattr(events, field.name)[order] for field in fields(events) if field.name != "index"
    }
    return replace(events, index=place_of[events.index], **columns)


def _window(checked: CheckedLosses, exposure: ExposureTable | None) -> tuple[Window, list[Finding]]:
    """Find the years observed: declared, else those of the exposure, else from the first loss."""
    terms = checked.terms
    last = terms.valuation_date.year
    declared = terms.first_year_of(checked.line)
    starts = [] if declared is None else [declared]
    dates = checked.table.date[checked.used]
    first_loss = [int(_year(dates.min()[None])[0])] if len(dates) else []
    if not starts and exposure is not None:
        starts = [int(exposure.year.min())]
    found = []
    if not starts and first_loss:
        found = [window_caution(checked, first_loss[0])]
    if declared is None:
        starts += first_loss
    if not starts:
        raise InputError(
            "no loss is used and no observation window is known",
            where=place(file=checked.table.file),
            remedy="Give an exposure file or declare the first year; then a year without losses counts.",
        )
    return Window(min(*starts, last), terms.valuation_date), found


def _year(date: DateArray) -> IntArray:
    return date.astype("datetime64[Y]").astype(np.int64) + 1970


def _frozen(array: npt.NDArray[Scalar]) -> npt.NDArray[Scalar]:
    """Make an array read-only, since the result that holds it is frozen."""
    array.setflags(write=False)
    return array
