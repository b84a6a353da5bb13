"""The rules for rows: each names the rows at fault and what becomes of them.

The rules stand in the order in which they claim a row: a row is set aside once, for the first reason.
Bounds are common practice of the trade, without a source, unless one is named.
"""

from __future__ import annotations

import datetime as dt
from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np

from lossagg.arrays import BoolArray
from lossagg.records.date_rules import order_faults
from lossagg.records.events import group_events
from lossagg.records.faults import Fault
from lossagg.records.money_rules import missing_thresholds, money_faults
from lossagg.records.revisions import valuation_faults
from lossagg.records.table import LossTable
from lossagg.records.word_rules import repeated_faults, status_faults, word_faults

LARGEST = 1e18
EARLIEST = np.datetime64("1900-03-01")
"""Before it workbooks are a day off: they count a 29 February 1900, which there never was."""


@dataclass(frozen=True, kw_only=True)
class CheckTerms:
    """What the records are checked against.

    Args:
        valuation_date: last day the records describe.
        currency: currency of the portfolio.
        lines: names of the lines that share the file; None when all rows are of one line.
        first_years: {line: first year of its observation window}, where declared; the key is "" when
            all rows are of one line.
        tolerance: largest share of rows, and of money, that may be set aside for faults.
        thresholds: {line: reporting threshold of the rows that carry none}, where declared; keys as in
            `first_years`.
    """

    valuation_date: dt.date
    currency: str
    lines: tuple[str, ...] | None
    first_years: Mapping[str, int]
    tolerance: float
    thresholds: Mapping[str, float] = field(default_factory=dict)

    def first_year_of(self, line: str | None) -> int | None:
        """First year of the observation window of a line, None when it is not declared."""
        if line is None and self.lines is not None and len(self.lines) == 1:
            line = self.lines[0]
        return self.first_years.get(line or "")


def row_faults(table: LossTable, terms: CheckTerms) -> list[Fault]:
    """Apply every rule that looks at one row alone, and the rules on repeated rows.

    Returns:
        The faults, those of reading first; only those with rows at fault.
    """
    live = ~table.blank
    faults = [
        *table.faults,
        *word_faults(table, terms.currency, live),
        *_amounts(table, live),
        *_dates(table, terms, live),
        *money_faults(table, live),
        *status_faults(table, live),
        *repeated_faults(table, live),
        missing_thresholds(table, terms.thresholds, live),
        *valuation_faults(table, np.datetime64(terms.valuation_date), live),
    ]
    return [fault for fault in faults if fault.mask.any()]


def below_threshold(table: LossTable, used: BoolArray, default: float = 0.0) -> Fault:
    """Find the events that are smaller than their reporting threshold, which contradicts it.

    Args:
        table: the records.
        used: True for the rows used so far; shape (rows,).
        default: threshold of the rows that carry none.

    Returns:
        The fault; it takes all rows of such an event.
    """
    mask = np.zeros(len(table), dtype=np.bool_)
    if default > 0 or "threshold" in table.numbers:
        events = group_events(table, used)
        threshold = np.where(np.isnan(events.threshold), default, events.threshold)
        mask[used] = (events.amount < threshold)[events.index]
    return threshold_fault(mask)


def threshold_fault(mask: BoolArray) -> Fault:
    """The fault of rows whose event is below its reporting threshold; mask of shape (rows,)."""
    return Fault(
        "below-threshold",
        "set aside",
        "amount",
        mask,
        "the loss (all claims of its event) is below its reporting threshold",
        "Records below the threshold contradict it; lower the threshold if they are complete.",
    )


def _amounts(table: LossTable, live: BoolArray) -> list[Fault]:
    amount = table.amount
    finite = np.isfinite(amount) & live
    return [
        Fault(
            "negative-amount",
            "set aside",
            "amount",
            finite & (amount < 0),
            "the amount is negative",
            "Give recoveries in their own column and amounts gross of them.",
        ),
        Fault(
            "nil-claim",
            "set aside",
            "amount",
            finite & (amount == 0),
            "the amount is zero: closed without payment, counted apart and no loss",
            "None needed; frequency and severity are those of losses above zero.",
            tolerated=True,
        ),
        Fault(
            "large-amount",
            "set aside",
            "amount",
            finite & (amount > LARGEST),
            f"the amount is above {LARGEST:g}",
            "Correct it, or give amounts in a larger unit.",
        ),
    ]


def _dates(table: LossTable, terms: CheckTerms, live: BoolArray) -> list[Fault]:
    date = table.date
    valuation = np.datetime64(terms.valuation_date)
    faults = [
        Fault(
            "early-date",
            "set aside",
            "date",
            live & (date < EARLIEST),
            "the date is before March 1900",
            "Correct it; workbooks count a 29 February 1900 that never was, and show an empty date as 1900.",
        ),
        Fault(
            "future-date",
            "set aside",
            "date",
            live & (date > valuation),
            f"the date is after the valuation date {terms.valuation_date.isoformat()}",
            "Correct it, or the valuation date.",
        ),
    ]
    word = table.word("line")
    for first_year in sorted(set(terms.first_years.values())):
        lines = [line for line, year in terms.first_years.items() if year == first_year]
        mine = word.is_in(lines)
        begins = np.datetime64(f"{first_year:04d}-01-01")
        faults.append(
            Fault(
                "outside-window",
                "set aside",
                "date",
                live & mine & (date < begins),
                f"the date is before the observation window, which begins in {first_year}",
                "None needed if the window is meant so.",
                tolerated=True,
            )
        )
    return [*faults, *order_faults(table, valuation, live)]
