"""One option: terms, and how what the insured keeps of a year follows from single events.

With s(x) the cost in scope of a loss x, capped at the event cap, the cover pays e(x) of it before its
annual terms, and the insured keeps the rest of the year. Where that rest is a function of one annual sum,
the exact engine computes it; where it takes two sums at once (a retained cap beside an upper limit, say)
only the simulation can.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import NamedTuple

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.cover import Cover, Schedule
from lossagg.engines.book import Line

NOTHING = Schedule.capped(0.0)
SAME = Schedule.identity()

Events = tuple[Schedule, ...]
"""What one event adds to an annual sum, line by line."""


class OneSum(NamedTuple):
    """An amount of a year as a function of one annual sum of event amounts."""

    events: Events
    annual: Schedule


@dataclass(frozen=True)
class Option:
    """One row of the table of options.

    Args:
        name: its name in the table.
        terms: terms of the cover; None where nothing is bought and everything is kept.
        lines: the lines it is for; one set of terms over the events of all of them.
        quoted: premium quoted by an insurer; None where it is to be modelled.
        event_cap: amount at which the loss of one event is capped; what lies above is nobody's here.
    """

    name: str
    terms: Cover | None
    lines: tuple[Line, ...]
    quoted: float | None = None
    event_cap: float = np.inf

    @property
    def scope(self) -> Events:
        """What one loss costs in all, up to the event cap, its adjustment expense included."""
        return tuple(line.cost.after(Schedule.capped(self.event_cap)) for line in self.lines)

    @cached_property
    def paid(self) -> Events:
        """What one event adds to the cover's year before annual terms and a share of the year."""
        capped, terms = Schedule.capped(self.event_cap), self.terms
        if terms is None:
            return tuple(NOTHING for _ in self.lines)
        return tuple(
            terms.event_schedule(line.expense, line.sum_insured).after(capped) for line in self.lines
        )

    @cached_property
    def kept(self) -> Events:
        """What one event adds to the amount kept under the deductible."""
        capped, terms = Schedule.capped(self.event_cap), self.terms
        if terms is None:
            return self.scope
        return tuple(
            terms.retained_schedule(line.expense, line.sum_insured).after(capped) for line in self.lines
        )

    @cached_property
    def left(self) -> Events:
        """What the cover leaves of one event, before annual terms and a share of the year."""
        return tuple(scope - paid for scope, paid in zip(self.scope, self.paid, strict=True))

    @cached_property
    def retained_plan(self) -> OneSum | None:
        """The year's retained amount as a function of one sum; None where it takes two."""
        terms = self.terms
        if terms is None:
            return OneSum(self.scope, SAME)
        if not terms.has_annual_terms:
            pairs = zip(self.scope, self.paid, strict=True)
            return OneSum(tuple(scope - paid.scaled(terms.year_share) for scope, paid in pairs), SAME)
        year = terms.year_terms
        if year.kept is not None:
            alone = year.payments.is_identity and year.beyond.is_identity
            return OneSum(self.kept, SAME - year.kept) if alone and self.kept == self.left else None
        return OneSum(self.scope, SAME - year.payments) if self.paid == self.scope else None

    @cached_property
    def ceded_plan(self) -> OneSum | None:
        """The year's ceded amount as a function of one sum; None where it takes two."""
        terms = self.terms
        if terms is None:
            return OneSum(self.paid, SAME)
        year = terms.year_terms
        if year.kept is not None:
            return None
        if not terms.has_annual_terms:
            return OneSum(tuple(paid.scaled(terms.year_share) for paid in self.paid), SAME)
        return OneSum(self.paid, year.payments)

    @cached_property
    def reinstated(self) -> Schedule | None:
        """Reinstatement premium of a year as a multiple of the initial one, a function of what the cover pays
        in it, pro rata to the amount (Sundt 1991); None where no reinstatement is paid."""
        terms = self.terms
        if terms is None or terms.reinstatements is None or not terms.reinstatements.paid:
            return None
        rates, limit = terms.reinstatements.each, terms.year_share * terms.event_most
        paid = np.concatenate(([0.0], np.cumsum(rates)))
        starts = tuple((limit * np.arange(len(paid))).tolist())
        return Schedule(starts, tuple(paid.tolist()), tuple(rate / limit for rate in (*rates, 0.0)))

    def ceded(self, paid: FloatArray, kept: FloatArray | None) -> FloatArray:
        """What the cover pays for each year, from the year's sums of `paid` and, for a cap, of `kept`."""
        return np.zeros(paid.shape) if self.terms is None else self.terms.annual_payment(paid, kept)

    @property
    def most_retained(self) -> float:
        """The most the insured can keep in a year; `inf` where nothing limits it."""
        if self.retained_plan is None:
            return np.inf
        events, annual = self.retained_plan
        return 0.0 if all(schedule.most == 0 for schedule in events) else annual.most

    def describe(self) -> str:
        """The terms in one line."""
        return "no cover: everything is kept" if self.terms is None else self.terms.describe()
