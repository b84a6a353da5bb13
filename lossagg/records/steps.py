"""The trail from rows to modelled losses: the steps with their counts and amounts, and the cautions."""

from __future__ import annotations

from dataclasses import dataclass
from math import fsum

import numpy as np

from lossagg.arrays import BoolArray, FloatArray
from lossagg.records.check import CheckedLosses
from lossagg.records.events import Events, group_events
from lossagg.records.findings import Finding, counted
from lossagg.records.money import exact_sum
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


def log_steps(
    checked: CheckedLosses, used: BoolArray, events: Events, amount: FloatArray, trend: float
) -> tuple[Step, ...]:
    """Log the way from the rows of a line to its trended losses.

    Args:
        checked: the records of the line after the checks.
        used: True for the rows that reach the model; shape (rows,).
        events: the events made of them.
        amount: their amounts, trended; shape (events,).
        trend: rate per year.

    Returns:
        The steps in their order; each begins with what the one before left.
    """
    table, before = checked.table, checked.reconciliation
    all_events = len(group_events(table, checked.used)) if (checked.used & ~used).any() else len(events)
    read, kept = float(before.amount_read), float(before.amount_used)
    left = float(exact_sum(table.exact[used]))
    recovered = fsum(np.nan_to_num(table.number("recoveries")[used]).tolist())
    gross = f"; amounts are gross, recoveries of {recovered:,.2f} are kept apart" if recovered else ""
    apart = all_events - len(events)
    return (
        Step("read", before.read, before.read, read, read, f"rows of {table.file}{gross}"),
        Step(
            "check",
            before.read,
            before.used,
            read,
            kept,
            f"{counted(before.excluded, 'row')} set aside, see findings",
        ),
        Step("events", before.used, all_events, kept, kept, "claims of one event summed into one loss"),
        Step(
            "threshold",
            all_events,
            len(events),
            kept,
            left,
            f"{counted(apart, 'event')} below the reporting threshold set aside; it is compared with the sum "
            "of an event, so claims that were left out one by one are not seen",
        ),
        Step(
            "trend",
            len(events),
            len(events),
            left,
            fsum(amount.tolist()),
            f"{trend:+.2%} a year from each loss date to the midpoint of the forecast period",
        ),
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
    if "status" not in table.words:
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
