"""The trail from rows to modelled losses: the steps with their counts and amounts, and the cautions."""

from __future__ import annotations

import datetime as dt
from dataclasses import dataclass
from math import fsum

import numpy as np

from lossagg.arrays import BoolArray, FloatArray
from lossagg.records.check import CheckedLosses
from lossagg.records.events import Events
from lossagg.records.findings import Finding, counted
from lossagg.records.money import Reconciliation, exact_sum
from lossagg.records.trend import Trend, describe_trend
from lossagg.records.ultimate import Developed
from lossagg.records.years import YearTable


@dataclass(frozen=True)
class Step:
    """One step from records to losses, with what stood before and after it.

    Args:
        step: name of the step.
        count_before: rows or events before.
        count_after: rows or events after.
        amount_before: money before.
        amount_after: money after.
        note: what the step did, in words.
    """

    step: str
    count_before: int
    count_after: int
    amount_before: float
    amount_after: float
    note: str

    def to_dict(self) -> dict[str, object]:
        """The step as plain values."""
        return dict(vars(self))


@dataclass(frozen=True)
class Trail:
    """What the steps are written from.

    Args:
        checked: the records of the line after the checks.
        used: True for the rows that reach the model; shape (rows,).
        everything: the events of all rows that passed the checks, as they are modelled.
        events: the events that reach the model.
        net: amounts net of recoveries, None where they are gross; shape (rows,).
        trend: rate per year, or index.
        midpoint: midpoint of the forecast period.
        hours_window: longest duration of one event, None without end.
        open_claims: what was done with open claims.
    """

    checked: CheckedLosses
    used: BoolArray
    everything: Events
    events: Events
    net: FloatArray | None
    trend: Trend
    midpoint: dt.date
    hours_window: int | None
    open_claims: str


def log_steps(
    trail: Trail, whole: Reconciliation, years: YearTable, developed: Developed | None
) -> tuple[Step, ...]:
    """Log the way from the rows of a line to its trended losses.

    Args:
        trail: what was done.
        whole: the reconciliation at the end.
        years: the history by year.
        developed: the years at ultimate, None without development.

    Returns:
        The steps in their order; each begins with what the one before left.
    """
    kept = float(trail.checked.reconciliation.amount_used)
    steps = [*_before_checks(trail.checked), _check_step(trail.checked)]
    if trail.net is not None:
        steps.append(_recoveries(trail, kept))
    steps.append(_events_step(trail, steps[-1].amount_after))
    if trail.open_claims != "as-recorded":
        steps.append(_open_step(trail, steps[-1].amount_after))
    as_recorded = trail.net is None and trail.open_claims != "develop"
    left = float(whole.amount_used) if as_recorded else fsum(trail.events.amount.tolist())
    steps.append(_threshold_step(trail, steps[-1].amount_after, left))
    count, trended = len(trail.events), fsum(years.trended_amount.tolist())
    steps.append(Step("trend", count, count, left, trended, describe_trend(trail.trend, trail.midpoint)))
    if developed is not None:
        steps.append(_development_step(count, trended, years, developed))
    return tuple(steps)


def _before_checks(checked: CheckedLosses) -> list[Step]:
    """Reading, and what changed the amounts of the table before the checks."""
    table, member, read = checked.table, checked.member, checked.reconciliation.read
    states = [*(change.before for change in table.changes), table.exact]
    sums = [float(exact_sum(state[member])) for state in states[:-1]]
    sums.append(float(checked.reconciliation.amount_read))
    recoveries = table.numbers.get("recoveries")
    recovered = 0.0 if recoveries is None else fsum(np.nan_to_num(recoveries[checked.used]).tolist())
    gross = f"; amounts are gross, recoveries of {recovered:,.2f} are kept apart" if recovered else ""
    rows_of = (
        f"rows of {table.file}" if table.headings else f"no records; {table.file} says there was no loss"
    )
    steps = [Step("read", read, read, sums[0], sums[0], f"{rows_of}{gross}")]
    for number, change in enumerate(table.changes):
        rows = int(np.count_nonzero(change.rows & member))
        if rows:
            note = f"{counted(rows, 'row')} {change.note}"
            steps.append(Step(change.step, read, read, sums[number], sums[number + 1], note))
    return steps


def _check_step(checked: CheckedLosses) -> Step:
    sums = checked.reconciliation
    note = f"{counted(sums.excluded, 'row')} set aside, see findings"
    return Step("check", sums.read, sums.used, float(sums.amount_read), float(sums.amount_used), note)


def _recoveries(trail: Trail, kept: float) -> Step:
    assert trail.net is not None
    count = int(np.count_nonzero(trail.checked.used))
    return Step(
        "recoveries",
        count,
        count,
        kept,
        fsum(trail.net[trail.checked.used].tolist()),
        "recoveries taken off, as asked for: the losses are net of them, and covers act on net losses",
    )


def _events_step(trail: Trail, before: float) -> Step:
    note = "claims of one event summed into one loss"
    if trail.hours_window is not None:
        named = trail.everything.identifier[trail.everything.identifier != ""]
        parts = len(named) - len(np.unique(named.codes))
        note += (
            f"; events longer than {trail.hours_window} hours divided from their first claim on: "
            f"{parts} more {'loss' if parts == 1 else 'losses'}"
        )
    rows = int(np.count_nonzero(trail.checked.used))
    return Step("events", rows, len(trail.everything), before, before, note)


def _open_step(trail: Trail, before: float) -> Step:
    everything = trail.everything
    count, size = int(everything.open.sum()), len(everything)
    if trail.open_claims == "censor":
        note = (
            f"{counted(count, 'open claim')} taken as at least what is recorded (right-censored); claims that"
            " stay open are often the large ones, which censoring does not know"
        )
        return Step("open claims", size, size, before, before, note)
    after = fsum(everything.amount.tolist())
    note = f"{counted(count, 'open claim')} brought to ultimate by the factor of the age of its year"
    return Step("open claims", size, size, before, after, note)


def _threshold_step(trail: Trail, before: float, after: float) -> Step:
    apart = len(trail.everything) - len(trail.events)
    return Step(
        "threshold",
        len(trail.everything),
        len(trail.events),
        before,
        after,
        f"{counted(apart, 'event')} below the reporting threshold set aside; it is compared with the sum "
        "of an event, so claims that were left out one by one are not seen",
    )


def _development_step(count: int, trended: float, years: YearTable, developed: Developed) -> Step:
    reported, ultimate = int(years.losses.sum()), fsum(years.ultimate_losses.tolist())
    money, whole = fsum(years.amount.tolist()), fsum(years.ultimate_amount.tolist())
    return Step(
        "development",
        count,
        count,
        trended,
        trended,
        f"factors {developed.factors.source}, {developed.method}: {counted(reported, 'event')} reported "
        f"stand for {ultimate:,.1f}, {money:,.2f} recorded for {whole:,.2f}; the exposure of each year "
        "counts for the part of its events that is reported, no loss is invented",
    )


def window_caution(checked: CheckedLosses, first: int) -> Finding:
    """Caution that the window begins with the first loss, which overstates the frequency."""
    return Finding(
        "window-from-first-loss",
        "warn",
        checked.table.file,
        None,
        checked.table.headings.get("date"),
        None,
        f"the observation window is taken to begin in {first}, the year of the first loss",
        "Declare the first year, or give exposures: earlier years without losses would lower the frequency.",
        sheet=checked.table.sheet,
        line=checked.line,
        count=0,
    )


def open_claims_caution(checked: CheckedLosses, years: YearTable) -> list[Finding]:
    """Caution that amounts of open claims are not final, or that it is not known which are."""
    table, count = checked.table, int(years.open.sum())
    if not years.claims.any():
        return []
    if not (table.word("status")[checked.used] != "").any():
        message = "the records do not say which claims are open; all amounts are taken as final"
        remedy = (
            "Give the status of each claim; open claims tend to grow, and late ones are not yet reported."
        )
    elif count:
        message = f"{counted(count, 'open claim')}, taken at the amounts as they stand, without development"
        remedy = "Expect recent years to grow; use developed amounts if you have them."
    else:
        return []
    return [
        Finding(
            "open-claims",
            "warn",
            table.file,
            None,
            table.headings.get("status"),
            None,
            message,
            remedy,
            sheet=table.sheet,
            line=checked.line,
            count=count,
        )
    ]
