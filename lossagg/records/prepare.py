"""From checked rows to the losses that are modelled, every step logged with counts and amounts.

The order is fixed: recoveries are taken off where that is asked for; claims of one event are summed; open
claims are developed or censored where that is asked for; events below their reporting threshold are set
aside; what remains is trended, amounts and thresholds by the same index; the years are developed to
ultimate. Without a request amounts stay gross of recoveries and as they are recorded.
"""

from __future__ import annotations

import datetime as dt
from dataclasses import dataclass, fields, replace
from typing import TypeVar

import numpy as np
import numpy.typing as npt

from lossagg.arrays import BoolArray, FloatArray, IntArray, require_positive
from lossagg.errors import InputError, place
from lossagg.records.basis import net_amounts
from lossagg.records.check import CheckedLosses
from lossagg.records.dates import DateArray
from lossagg.records.development import OPEN_CLAIMS, Development, OpenClaims
from lossagg.records.events import Events, group_events, is_open
from lossagg.records.exposure import ExposureTable
from lossagg.records.findings import Finding
from lossagg.records.history import read_history
from lossagg.records.mixups import unit_findings
from lossagg.records.money import Reconciliation, reconcile
from lossagg.records.small_events import set_aside_small
from lossagg.records.steps import Step, Trail, log_steps, open_claims_caution, window_caution
from lossagg.records.trend import Trend, check_trend, trend_factor
from lossagg.records.ultimate import Developed, Factors, develop_years, find_factors
from lossagg.records.years import Window, YearTable, complete_from, exposures_of, threshold_base, year_table

Scalar = TypeVar("Scalar", bound=np.generic)


@dataclass(frozen=True)
class PreparedLosses:
    """The losses of one line as they are modelled; arrays of shape (events,), sorted by date and amount.

    Args:
        line: name of the line, None when the file is of one line.
        amount: amount of each event in the money of the forecast period.
        threshold: reporting threshold of each event in the same money.
        censored: True where the amount stopped at a policy limit, or is of a claim that is open and taken
            as at least what is recorded.
        date: date of the earliest claim.
        year: its calendar year.
        recorded: amount as recorded, gross of recoveries.
        claims: number of claims of the event.
        years: the history by year.
        largest_threshold: lowest amount, in the money of the forecast period, above which the whole
            window is complete.
        steps: the steps from rows to losses.
        findings: everything found on the way, that of the checks included.
        reconciliation: rows and money read, used and excluded at the end.
        base: what the exposure is, None without exposure.
        net: True when recoveries were taken off.
        open_claims: what was done with open claims.
        developed: the years at ultimate, None where development was not asked for.
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
    net: bool = False
    open_claims: OpenClaims = "as-recorded"
    developed: Developed | None = None

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
            does not reach, open claims to be developed without factors.
    """
    _require_one_line(checked)
    trend, frequency_trend = check_trend(trend), _rate(frequency_trend)
    _check_open(checked, open_claims, development)
    default = require_positive(reporting_threshold or 0.0, "reporting_threshold", zero=True)
    table = checked.table
    net = net_amounts(table) if net_of_recoveries else None
    window, found = _window(checked, exposure)
    factors = _factors(checked, window, development, default, hours_window, net)
    modelled = _modelled(checked, window, factors, open_claims, net)
    everything = group_events(table, checked.used, hours_window=hours_window, amount=modelled)
    kept = set_aside_small(checked, everything, default, modelled is not None, hours_window)
    events = _in_order(kept.events)
    own = np.where(np.isnan(events.threshold), default, events.threshold)
    factor = trend_factor(events.date, forecast_midpoint, trend)
    year = _year(events.date)
    base = threshold_base(window, year, own, default)
    at = window.position(events.date)
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
    developed = None
    if development is not None and factors is not None:
        developed = develop_years(
            development,
            factors,
            years.year,
            years.observed_exposure,
            years.losses.astype(np.float64),
            years.amount,
        )
        years = years.at_ultimate(factors.count, developed.ultimate_count, developed.ultimate_amount)
    whole = checked.reconciliation
    if kept.changed:
        whole = reconcile(
            table.exact[checked.member], kept.used[checked.member], table.unreadable[checked.member]
        )
    trail = Trail(
        checked, kept.used, everything, events, net, trend, forecast_midpoint, hours_window, open_claims
    )
    return PreparedLosses(
        line=checked.line,
        amount=_frozen(events.amount * factor),
        threshold=_frozen(own * factor),
        censored=_frozen(events.censored | ((events.open > 0) & (open_claims == "censor"))),
        date=_frozen(events.date),
        year=_frozen(year),
        recorded=_frozen(events.recorded),
        claims=_frozen(events.claims),
        years=years,
        largest_threshold=complete_from(window, base, forecast_midpoint, trend),
        steps=log_steps(trail, whole, years, developed),
        findings=(
            *kept.findings,
            *found,
            *unit_findings(checked, kept.used),
            *(open_claims_caution(checked, years) if open_claims == "as-recorded" else ()),
        ),
        reconciliation=whole,
        base=exposure.base if exposure else None,
        net=net_of_recoveries,
        open_claims=open_claims,
        developed=developed,
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


def _rate(frequency_trend: float) -> float:
    rate = check_trend(frequency_trend)
    if not isinstance(rate, float):
        raise InputError(
            "the trend of the frequency must be a rate per year",
            value=type(frequency_trend).__name__,
            remedy="Write 0.02 for 2 % a year.",
        )
    return rate


def _check_open(checked: CheckedLosses, open_claims: str, development: Development | None) -> None:
    if open_claims not in OPEN_CLAIMS:
        raise InputError(
            "unknown treatment of open claims", value=open_claims, remedy=f"Use {', '.join(OPEN_CLAIMS)}."
        )
    if open_claims == "as-recorded":
        return
    if "status" not in checked.table.words:
        raise InputError(
            f"open claims are to be treated ({open_claims}) but the records have no status",
            where=place(file=checked.table.file),
            remedy="Map the column that says which claims are open.",
        )
    if open_claims == "develop" and (development is None or not development.develops("open")):
        raise InputError(
            "open claims are to be developed but there are no factors for them",
            where=place(file=checked.table.file),
            remedy="Give open-factors by age, or open-tail to estimate them from the valuations in the "
            "records, under development.",
        )


def _factors(
    checked: CheckedLosses,
    window: Window,
    development: Development | None,
    default: float,
    hours_window: int | None,
    net: FloatArray | None,
) -> Factors | None:
    """Factors to ultimate of each year, None without development."""
    if development is None:
        return None
    history = None
    if development.from_history:
        history = read_history(
            checked, window, default_threshold=default, hours_window=hours_window, amount=net
        )
    return find_factors(development, len(window.years), history)


def _modelled(
    checked: CheckedLosses,
    window: Window,
    factors: Factors | None,
    open_claims: OpenClaims,
    net: FloatArray | None,
) -> FloatArray | None:
    """Amount of each row as it is modelled, None where that is the one recorded; shape (rows,)."""
    if open_claims != "develop" or factors is None or factors.open is None:
        return net
    table = checked.table
    value = table.amount.copy() if net is None else net.copy()
    rows = np.flatnonzero(checked.used & is_open(table))
    value[rows] *= factors.open[window.position(table.date[rows])]
    return value


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
