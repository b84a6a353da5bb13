"""One simulated year again: its events, what each cover paid of each and of the year, term by term.

The year is found by its number alone: its block and place, the streams of its lines, and what the
dependences say of it. Its losses are those the simulation drew, to the bit; what covers pay of them is
worked out here event by event, apart from the compiled loops, and adds up to the same annual figures.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from lossagg.arrays import FloatArray, IntArray
from lossagg.cover.checks import stated_terms
from lossagg.cover.event import surplus_share, through
from lossagg.cover.order import WORDS
from lossagg.cover.schedule import Schedule
from lossagg.engines.blocks import PreparedLine, block_events, line_sums, prepare_line, run_block
from lossagg.engines.book import Book, PlacedCover, Subject
from lossagg.engines.joint import JointBlock, joint_block
from lossagg.engines.shocks import JointPayment, ShockLosses, joint_payments, shock_losses
from lossagg.engines.streams import BLOCK_YEARS
from lossagg.engines.yearly import LOSS, annual_amounts
from lossagg.errors import InputError


@dataclass(frozen=True)
class Step:
    """One term acting: its name, and the amount that is left after it."""

    operation: str
    amount: float


@dataclass(frozen=True)
class Payment:
    """What one cover pays, of an event or of the year, and how it comes about.

    Attributes:
        cover: the cover's name.
        steps: the terms in the order in which they act.
        paid: of an event, what it adds to the cover's year; of the year, what the cover pays.
    """

    cover: str
    steps: tuple[Step, ...]
    paid: float


@dataclass(frozen=True)
class Part:
    """What an event that hit several lines cost one of them.

    Attributes:
        line: the line.
        size: its loss, without adjustment expense.
        cost: its loss with its adjustment expense.
        paid: by cover of the line, its part of what the event adds to the cover's year.
        kept: by cover of the line, its part of what the cover's deductible keeps of the event.
    """

    line: str
    size: float
    cost: float
    paid: Mapping[str, float]
    kept: Mapping[str, float]


@dataclass(frozen=True)
class Event:
    """One event of the year: a loss of a line, or of several lines at once.

    Attributes:
        line: its line; the names of all it hit, joined by " + ", where these are several.
        number: 1, 2, ... within `line` and the year, in the order in which they were drawn.
        size: the loss, without adjustment expense.
        cost: the loss with its adjustment expense.
        shock: whether it hit several lines at once.
        payments: by cover of any of its lines.
        parts: what it cost each line where it hit several.
    """

    line: str
    number: int
    size: float
    cost: float
    shock: bool
    payments: tuple[Payment, ...]
    parts: tuple[Part, ...] = ()

    def cost_of(self, line: str) -> float:
        """What it cost a line."""
        if not self.parts:
            return self.cost if self.line == line else 0.0
        return sum(part.cost for part in self.parts if part.line == line)


@dataclass(frozen=True)
class ReplayedYear:
    """One simulated year.

    Attributes:
        year: its number, from 1.
        events: line by line, then those that hit several lines.
        covers: what each cover paid of the year.
        amounts: the annual amount of every subject of the book.
        factors: the value of each shared factor.
    """

    year: int
    events: tuple[Event, ...]
    covers: tuple[Payment, ...]
    amounts: Mapping[Subject, float]
    factors: Mapping[str, float]


@dataclass(frozen=True, eq=False)
class Replay:
    """The simulated years of a run, any of them on request.

    Args:
        book: lines, covers and dependences of the run.
        seed: the seed of the run.
        years: how many years the run simulated; a copula orders the years of an incomplete last block.
    """

    book: Book
    seed: int
    years: int

    def year(self, number: int) -> ReplayedYear:
        """Reconstruct one simulated year.

        Args:
            number: its number, 1 to `years`.

        Raises:
            InputError: a year that the run did not simulate.
        """
        if isinstance(number, bool) or not isinstance(number, int) or not 1 <= number <= self.years:
            raise InputError(
                f"the run simulated years 1 to {self.years:,}",
                value=number,
                remedy="Ask for a year in that range.",
            )
        book, (block, place) = self.book, divmod(number - 1, BLOCK_YEARS)
        joint = self._joint(block)
        events: list[Event] = []
        for line in self._lines:
            source = int(self._sources(block, line)[place])
            _, sizes = block_events(line, joint, seed=self.seed, block=block, first=source, last=source + 1)
            terms, cost = _event_terms(book, line.name), book.line(line.name).cost
            events += [
                _event(cost, terms, line.name, k, float(size)) for k, size in enumerate(sizes, start=1)
            ]
        for shock in self._shocks(block):
            events += shocked_events(book, shock.between(place, place + 1))
        amounts = annual_amounts(book, book.subjects, _sums(book, events))
        return ReplayedYear(
            year=number,
            events=tuple(events),
            covers=tuple(_year_payment(book, cover, events, amounts) for cover in book.covers),
            amounts={subject: float(amount[0]) for subject, amount in amounts.items()},
            factors={name: float(values[place]) for name, values in joint.factors.items()},
        )

    def first_years(self, subject: Subject, number: int) -> FloatArray:
        """The annual amounts of a subject in the first years of the run, shape (at most `number`,)."""
        number = min(number, self.years)
        parts = []
        for block in range(-(-number // BLOCK_YEARS)):
            years = min(BLOCK_YEARS, self.years - block * BLOCK_YEARS)
            amounts = run_block(
                self.book, self.book.subjects, self._lines, seed=self.seed, block=block, years=years
            )
            parts.append(amounts[subject])
        return np.concatenate(parts)[:number]

    @cached_property
    def _lines(self) -> tuple[PreparedLine, ...]:
        return tuple(prepare_line(line, self.book, self.book.subjects) for line in self.book.lines)

    def _shocks(self, block: int) -> tuple[ShockLosses, ...]:
        if block not in self._drawn:
            tables = {line.name: line.sizes for line in self._lines}
            joint = self._joint(block)
            self._drawn[block] = shock_losses(self.book, tables, joint, seed=self.seed, block=block)
        return self._drawn[block]

    @cached_property
    def _drawn(self) -> dict[int, tuple[ShockLosses, ...]]:
        return {}

    @cached_property
    def _found(self) -> dict[tuple[int, str], IntArray]:
        return {}

    @cached_property
    def _joints(self) -> dict[int, JointBlock]:
        return {}

    def _joint(self, block: int) -> JointBlock:
        if block not in self._joints:
            drawn = joint_block(self.book.lines, self.book.dependences, seed=self.seed, block=block)
            self._joints[block] = drawn
        return self._joints[block]

    def _sources(self, block: int, line: PreparedLine) -> IntArray:
        """The simulated years of a line in the order in which a copula put them."""
        if (block, line.name) not in self._found:
            joint, years = self._joint(block), min(BLOCK_YEARS, self.years - block * BLOCK_YEARS)
            totals = np.empty(years)
            if line.name in joint.ranks:
                sums = line_sums(line, joint, seed=self.seed, block=block, years=years)
                totals = sums[line.columns.column[LOSS]]
            self._found[block, line.name] = joint.source(line.name, totals)
        return self._found[block, line.name]


def nearest_years(years: IntArray, amounts: FloatArray, value: float, number: int) -> list[int]:
    """The years whose amount is nearest to a value, by amount, the lower ones first.

    Args:
        years: numbers of years, shape (n,).
        amounts: their annual amounts, shape (n,).
        value: the amount looked for.
        number: how many years; of equally near ones those with the lowest numbers.
    """
    nearest = np.lexsort((years, np.abs(amounts - value)))[:number]
    return [int(years[k]) for k in nearest[np.lexsort((years[nearest], amounts[nearest]))]]


@dataclass(frozen=True)
class _EventTerms:
    """What a cover does to one event of a line, term by term, as functions of the ground-up loss."""

    cover: str
    steps: tuple[tuple[str, Schedule], ...]
    paid: Schedule

    def payment(self, size: float) -> Payment:
        steps = tuple(Step(words, _at(schedule, size)) for words, schedule in self.steps)
        return Payment(self.cover, steps, _at(self.paid, size))


def _event_terms(book: Book, line: str) -> tuple[_EventTerms, ...]:
    """The covers of a line, each worked out once for all its events."""
    return tuple(_terms_of(book, cover, line) for cover in book.covers if book.covers_line(cover, line))


def _event(cost: Schedule, terms: tuple[_EventTerms, ...], line: str, number: int, size: float) -> Event:
    payments = tuple(own.payment(size) for own in terms)
    return Event(line, number, size, _at(cost, size), False, payments)


def shocked_events(book: Book, shock: ShockLosses) -> list[Event]:
    """The events of a common shock: what each cost its lines, and what the covers paid of the whole of it."""
    payments = joint_payments(book, shock.losses)
    found = []
    for k in range(shock.year.size):
        parts = tuple(
            Part(
                name,
                float(own[k]),
                _at(book.line(name).cost, float(own[k])),
                {cover: float(paid.paid[name][k]) for cover, paid in payments.items() if name in paid.paid},
                {cover: float(paid.kept[name][k]) for cover, paid in payments.items() if name in paid.kept},
            )
            for name, own in shock.losses.items()
        )
        paid = tuple(_joint_payment(book, book.cover(name), own, k) for name, own in payments.items())
        size, cost = sum(part.size for part in parts), sum(part.cost for part in parts)
        found.append(Event(" + ".join(shock.shock.lines), k + 1, size, cost, True, paid, parts))
    return found


def _joint_payment(book: Book, cover: PlacedCover, payment: JointPayment, k: int) -> Payment:
    """What a cover paid of event k of a common shock, term by term."""
    terms = cover.terms
    seen, brought, paid = (
        sum(float(own[k]) for own in parts.values())
        for parts in (payment.seen, payment.brought, payment.paid)
    )
    lines = " + ".join(payment.seen)
    before = [name for name in cover.after if not book.cover(name).terms.has_annual_terms]
    steps = [Step(f"left by {', '.join(before)} of {lines}" if before else lines, seen)]
    if not np.isclose(brought, seen, rtol=1e-12):
        steps.append(Step(WORDS["surplus"] if terms.surplus is not None else "with expense", brought))
    stated = stated_terms(terms)
    for place, operation in enumerate(terms.event_order, start=1):
        if operation in stated:
            left = through(terms, Schedule.identity(), terms.event_order[:place])
            steps.append(Step(WORDS[operation], _at(left, brought)))
    if not np.isclose(paid, steps[-1].amount, rtol=1e-12):
        steps.append(Step("with expense", paid))
    return Payment(cover.name, tuple(steps), paid)


def _terms_of(book: Book, cover: PlacedCover, line: str) -> _EventTerms:
    terms, own = cover.terms, book.line(line)
    begin = Schedule.identity()
    steps = []
    left, expense = book.left_before(cover, line)
    if not left.is_identity:
        steps.append((f"left by {', '.join(cover.after)}", left))
    if expense > 0 and terms.expense_basis == "inside":
        begin = begin.scaled(1.0 + expense)
        steps.append(("with expense", begin.after(left)))
    if terms.surplus is not None:
        begin = begin.scaled(surplus_share(terms, own.sum_insured))
        steps.append((WORDS["surplus"], begin.after(left)))
    stated = stated_terms(terms)
    for k, operation in enumerate(terms.event_order, start=1):
        if operation in stated:
            steps.append((WORDS[operation], through(terms, begin, terms.event_order[:k]).after(left)))
    paid = book.event_payment(cover, line) or Schedule.capped(0.0)
    if expense > 0 and terms.expense_basis in ("outside", "pro-rata"):
        steps.append(("with expense", paid))
    return _EventTerms(cover.name, tuple(steps), paid)


def _year_payment(
    book: Book, cover: PlacedCover, events: list[Event], amounts: Mapping[Subject, FloatArray]
) -> Payment:
    terms = cover.terms
    total = _paid_by(cover.name, events)
    steps = [Step("paid of the events", total)]
    for before in book.annual_covers_before(cover):
        total -= float(amounts[Subject("cover", before.name)][0])
        steps.append(Step(f"less {before.name}", total))
    stated = stated_terms(terms)
    for operation in terms.year_order:
        if operation not in stated:
            continue
        if operation == "annual-retention":
            total = max(total - terms.annual_retention, 0.0)
        elif operation == "corridor" and terms.corridor is not None:
            total = _at(terms.corridor.schedule(), total)
        elif operation == "retained-cap":
            total += max(_kept_under(book, cover, events) - terms.retained_cap, 0.0)
        elif operation == "annual-limit":
            total = min(total, terms.year_limit)
        elif operation == "share":
            total *= terms.share
        steps.append(Step(WORDS[operation], total))
    return Payment(cover.name, tuple(steps), float(amounts[Subject("cover", cover.name)][0]))


def _paid_by(cover: str, events: list[Event]) -> float:
    return sum(payment.paid for event in events for payment in event.payments if payment.cover == cover)


def _kept_under(book: Book, cover: PlacedCover, events: list[Event]) -> float:
    single = [event for event in events if not event.parts]
    kept = {line: book.event_retained(cover, line) for line in {event.line for event in single}}
    under = ((kept[event.line], event.size) for event in single)
    together = sum(part.kept.get(cover.name, 0.0) for event in events for part in event.parts)
    return together + sum(0.0 if schedule is None else _at(schedule, size) for schedule, size in under)


def _sums(book: Book, events: list[Event]) -> dict[str, dict[tuple[str, str], FloatArray]]:
    """The year's sums by line, as the simulation adds them up for a whole block."""
    sums: dict[str, dict[tuple[str, str], FloatArray]] = {}
    for line in book.lines:
        own = [event for event in events if event.line == line.name and not event.parts]
        parts = [part for event in events for part in event.parts if part.line == line.name]
        sums[line.name] = {LOSS: np.array([sum(event.cost_of(line.name) for event in events)])}
        for cover in book.covers:
            if book.covers_line(cover, line.name):
                paid = _paid_by(cover.name, own) + sum(part.paid[cover.name] for part in parts)
                kept = _kept_under(book, cover, own) + sum(part.kept[cover.name] for part in parts)
                sums[line.name]["paid", cover.name] = np.array([paid])
                sums[line.name]["kept", cover.name] = np.array([kept])
    return sums


def _at(schedule: Schedule, amount: float) -> float:
    return float(schedule(np.array([amount]))[0])
