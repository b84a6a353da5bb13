"""The terms of one cover.

Unless another order is declared: per event the deductible, then the limit; per year the annual
retention, then the corridor, then the excess over the retained cap joins what the cover pays, then the
annual limit; then the share. All amounts are on a 100 % basis; the share acts last, on everything.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np

from lossagg.arrays import FloatArray, require_positive
from lossagg.cover.ambiguity import is_ambiguous, two_meanings
from lossagg.cover.annual import YearTerms, year_payment, year_terms
from lossagg.cover.checks import check_amounts, check_terms, stated_terms
from lossagg.cover.clauses import Corridor, Surplus
from lossagg.cover.event import event_payment, event_retained, through
from lossagg.cover.order import ORDER_OF_OPERATIONS, PER_EVENT, checked_order, in_words, share_is_per_event
from lossagg.cover.reinstatement import Reinstatements
from lossagg.cover.schedule import Schedule
from lossagg.cover.wording import described
from lossagg.errors import InputError

__all__ = ["ORDER_OF_OPERATIONS", "Cover"]


@dataclass(frozen=True, kw_only=True)
class Cover:
    """Terms under which someone pays part of the losses; amounts in the currency of the losses.

    Args:
        deductible: kept of each event before the cover pays.
        limit: most paid per event, in excess of the deductible.
        franchise: with True an event above the deductible is paid from the first unit, up to `limit`.
        share: the part of every payment the cover bears, 0 < share <= 1.
        annual_retention: kept of the year's payments before the cover pays.
        annual_limit: most paid per year, before the share.
        retained_cap: most the insured keeps per year under the deductible; the cover pays what the
            deductible keeps beyond it, within the annual limit.
        disappears_at: the loss at which the deductible has disappeared: payments rise in a straight line
            from 0 at the deductible to the whole loss there. `limit` then counts from the first unit.
        limit_includes_deductible: with True the deductible erodes the limit: min(loss, limit) less the
            deductible is paid.
        self_insured: with True the deductible is a self-insured retention: the insured handles and pays
            first and bears the expense of events within it, and never erodes the limit; under a deductible
            the insurer pays first and bills the insured (`billed_back`).
        surplus: a surplus treaty on risks whose sum insured the line states; it acts first.
        corridor: a band of the year's payments of which the insured takes back a part.
        reinstatements: how often the limit is available again; the annual limit is then (number + 1)
            times the limit.
        expense_basis: how adjustment expense is paid, where the losses carry any: "inside" (deductible
            and limit see loss and expense together), "pro-rata" (in the proportion of the loss paid) or
            "outside" (whole, in addition to the limit per event; within annual terms and share).
        order: the order in which the terms act, if not the usual: "deductible", "limit",
            "annual-retention", "corridor", "retained-cap", "annual-limit", "share". It must name every
            term the cover has; a share before another term of single events acts on each event.

    Raises:
        InputError: an amount that is negative or not a number, a share outside (0, 1], terms that
            contradict each other, and the bare phrase "annual aggregate deductible".
    """

    deductible: float = 0.0
    limit: float = np.inf
    franchise: bool = False
    share: float = 1.0
    annual_retention: float = 0.0
    annual_limit: float = np.inf
    retained_cap: float = np.inf
    disappears_at: float = np.inf
    limit_includes_deductible: bool = False
    self_insured: bool = False
    surplus: Surplus | None = None
    corridor: Corridor | None = None
    reinstatements: Reinstatements | None = None
    expense_basis: str | None = None
    order: Sequence[str] = ()

    def __new__(cls, **terms: object) -> Cover:
        """Refuse a name with two opposite meanings before anything else reads the terms."""
        for name in terms:
            if is_ambiguous(name):
                raise two_meanings(name)
        return object.__new__(cls)

    def __post_init__(self) -> None:
        for name, value in check_amounts(self).items():
            object.__setattr__(self, name, value)
        object.__setattr__(
            self, "order", tuple(self.order) if not isinstance(self.order, str) else self.order
        )
        checked_order(self.order, self._stated, self.limit_includes_deductible)
        check_terms(self)

    @classmethod
    def stop_loss(
        cls, *, premium: float, retention_ratio: float, limit_ratio: float = np.inf, share: float = 1.0
    ) -> Cover:
        """A stop loss in loss ratios: the part of the year's losses in excess of a ratio of the premium.

        Args:
            premium: the premium that the ratios are taken of, above 0.
            retention_ratio: loss ratio from which the cover pays, 1.1 for 110 %.
            limit_ratio: most it pays, as a ratio of the premium.
            share: the part it bears.

        Raises:
            InputError: a ratio above 10, which is a percentage (110 for 1.1), or another value out of range.
        """
        premium = require_positive(premium, "premium")
        for name, ratio in (("retention_ratio", retention_ratio), ("limit_ratio", limit_ratio)):
            if 10 < require_positive(ratio, name, infinite=name == "limit_ratio") < np.inf:
                raise InputError(
                    f"{name} is a ratio to the premium",
                    value=ratio,
                    remedy=f"Write {ratio / 100:g} for {ratio:g} %.",
                )
        return cls(
            annual_retention=retention_ratio * premium, annual_limit=limit_ratio * premium, share=share
        )

    @cached_property
    def _stated(self) -> tuple[str, ...]:
        return stated_terms(self)

    @cached_property
    def _order(self) -> tuple[str, ...]:
        return checked_order(self.order, self._stated, self.limit_includes_deductible)

    @cached_property
    def share_is_per_event(self) -> bool:
        """Whether the order makes the share act on single events, before another term."""
        return share_is_per_event(self._order, self._stated)

    @property
    def event_order(self) -> tuple[str, ...]:
        """The terms that act on single events, in their order."""
        events = (*PER_EVENT, "share") if self.share_is_per_event else PER_EVENT
        return tuple(name for name in self._order if name in events)

    @property
    def year_order(self) -> tuple[str, ...]:
        """The terms that act on the year, in their order."""
        return tuple(name for name in self._order if name not in self.event_order)

    @property
    def order_of_operations(self) -> str:
        """The order in which the terms act, in words."""
        return in_words(self._order, self.share_is_per_event, self.surplus is not None)

    @property
    def year_share(self) -> float:
        """The share that acts on the year's amount: 1 where the order makes it act on single events."""
        return 1.0 if self.share_is_per_event else self.share

    @cached_property
    def event_most(self) -> float:
        """The most paid for one event without expense, before annual terms and a share of the year."""
        return through(self, Schedule.identity(), self.event_order).most

    @property
    def year_limit(self) -> float:
        """The annual limit: as given, or (n + 1) limits under n reinstatements."""
        if self.reinstatements is None:
            return self.annual_limit
        return (self.reinstatements.number + 1) * self.event_most

    @property
    def has_annual_terms(self) -> bool:
        """Whether anything acts on the year rather than on single events."""
        return any(
            name in self._stated for name in ("annual-retention", "corridor", "retained-cap", "annual-limit")
        )

    @property
    def has_event_terms(self) -> bool:
        """Whether anything acts on single events before the share."""
        return (
            self.surplus is not None
            or self.expense_basis == "outside"
            or not self.event_schedule().is_identity
        )

    def event_schedule(self, expense: float = 0.0, sum_insured: float | None = None) -> Schedule:
        """What one event contributes to the year's payments, before annual terms and share.

        Args:
            expense: loss-adjustment expense of the event, as a part of its loss.
            sum_insured: of the risk that had the loss, for a surplus.

        Raises:
            InputError: an expense without a basis, a surplus without a sum insured.
        """
        return event_payment(self, expense, sum_insured)

    def retained_schedule(self, expense: float = 0.0, sum_insured: float | None = None) -> Schedule:
        """What one event adds to the amount kept under the deductible, the base of the retained cap."""
        return event_retained(self, expense, sum_insured)

    def billed_back(self) -> Schedule:
        """What the insurer pays first of one event and bills the insured, whose credit it then bears.

        Nothing under a self-insured retention, a franchise or no deductible at all. Whether an insurer pays
        first under a deductible is for the policy to say (common practice, no source).
        """
        if self.self_insured or self.franchise or self.disappears_at < np.inf:
            return Schedule.proportional(0.0)
        return Schedule.proportional(0.0) if self.surplus is not None else self.retained_schedule()

    def annual_payment(self, payments: FloatArray, retained: FloatArray | None = None) -> FloatArray:
        """What the cover pays for each year.

        Args:
            payments: per year, the sum of `event_schedule` over its events.
            retained: per year, the sum of `retained_schedule`; needed where a retained cap is set.

        Raises:
            InputError: a retained cap without `retained`.
        """
        return year_payment(self, payments, retained)

    @cached_property
    def year_terms(self) -> YearTerms:
        """The year's payment as functions of the year's sums, share included."""
        return year_terms(self)

    def annual_schedule(self) -> Schedule:
        """The year's payment as a function of the year's sum of event payments, share included.

        Raises:
            InputError: a retained cap, which needs a second annual amount.
        """
        if self.retained_cap < np.inf:
            raise InputError(
                "a retained cap depends on more than the year's payments", value=self.retained_cap
            )
        return self.year_terms.payments

    @property
    def most_per_year(self) -> float:
        """The most the cover can pay in a year, `inf` where nothing limits it."""
        terms = self.year_terms
        return terms.payments.most if terms.kept is None else terms.beyond.most

    def reinstatement_premium(self, paid: FloatArray, premium: float) -> FloatArray:
        """What a year's reinstatements cost, pro rata to the amount used.

        Args:
            paid: what the cover pays in the year, share included, shape (years,).
            premium: the initial premium of the cover.

        Raises:
            InputError: a cover without reinstatements.
        """
        if self.reinstatements is None:
            raise InputError("the cover has no reinstatements", remedy="Give reinstatements.")
        return premium * self.reinstatements.fraction(np.asarray(paid) / self.year_share, self.event_most)

    def scaled(self, factor: float) -> Cover:
        """The same cover with every amount multiplied: in another currency, indexed, or for another exposure.

        Args:
            factor: rate of exchange, index or growth, above 0.
        """
        factor = require_positive(factor, "factor")
        names = (
            "deductible", "limit", "annual_retention", "annual_limit", "retained_cap", "disappears_at",
        )  # fmt: skip
        return replace(
            self,
            **{name: factor * getattr(self, name) for name in names},
            surplus=self.surplus and self.surplus.scaled(factor),
            corridor=self.corridor and self.corridor.scaled(factor),
        )

    def describe(self) -> str:
        """The terms in one line, as printed in reports."""
        return described(self)
