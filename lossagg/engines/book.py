"""What every engine computes: lines and covers of one portfolio, and the subjects asked about.

A book turns the covers into two kinds of function that any engine can use: what each event pays
(a schedule per line) and what each year pays (the annual terms). Covers with `after` see only what
the covers named there leave of each event. How lines depend on each other is part of the book; an
engine computes a subject only if it can honour that.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, replace
from functools import cached_property

from lossagg.cover import Cover, Schedule
from lossagg.engines.dependence import (
    CommonShock,
    Dependence,
    check_dependences,
    independent,
    marginal_frequency,
    tied,
)
from lossagg.engines.placed import GROSS, NET, Line, PlacedCover, Subject, check_lines, check_places
from lossagg.errors import EngineError
from lossagg.families.base import CountLaw, SizeLaw

__all__ = ["GROSS", "NET", "Book", "Line", "PlacedCover", "Plan", "Subject", "single_line"]


@dataclass(frozen=True)
class Plan:
    """A subject as one annual sum and a function of it.

    Attributes:
        events: per line, what one event adds to the annual sum.
        annual: the subject's amount as a function of that sum.
    """

    events: dict[str, Schedule]
    annual: Schedule


@dataclass(frozen=True, kw_only=True)
class Book:
    """Lines, covers and dependences, checked against each other.

    Raises:
        InputError: repeated names, a cover of an unknown line, an `after` that names no earlier
            cover, or a cover with event terms after a cover with annual terms (whose payment
            belongs to the year, not to an event); a dependence that names no line, or contradicts another.
    """

    lines: tuple[Line, ...]
    covers: tuple[PlacedCover, ...] = ()
    dependences: tuple[Dependence, ...] = ()

    def __post_init__(self) -> None:
        check_lines(self.lines)
        check_places(self.lines, self.covers)
        check_dependences(self.lines, self.dependences)

    @cached_property
    def subjects(self) -> tuple[Subject, ...]:
        """Every line, gross, every cover, net, in this order."""
        lines = [Subject("line", line.name) for line in self.lines]
        covers = [Subject("cover", cover.name) for cover in self.covers]
        return (*lines, GROSS, *covers, NET)

    def cover(self, name: str) -> PlacedCover:
        """The cover of this name."""
        return next(cover for cover in self.covers if cover.name == name)

    def line(self, name: str) -> Line:
        """The line of this name."""
        return next(line for line in self.lines if line.name == name)

    def independent(self) -> Book:
        """The same lines, each as it is by itself, taken as independent of each other."""
        return replace(self, dependences=independent(self.dependences))

    def independent_lines(self, names: Iterable[str]) -> tuple[Line, ...]:
        """Lines for an engine that knows independent lines only, each with the law of its count by itself.

        Raises:
            EngineError: two of these lines depend on each other, or a factor leaves a line no closed law.
        """
        wanted = set(names)
        own = tuple(line for line in self.lines if line.name in wanted)
        dependence = tied(self.dependences, [line.name for line in own])
        if dependence is not None:
            both = [line.name for line in own if line.name in dependence.lines]
            raise _not_independent(f"{' and '.join(both[:2])} share {dependence.name!r}")
        lines = []
        for line in own:
            law = marginal_frequency(line, self.dependences)
            if law is None:
                raise _not_independent(f"{line.name} with its random factor has no law in closed form")
            lines.append(replace(line, frequency=law))
        return tuple(lines)

    def covers_line(self, cover: PlacedCover, line: str) -> bool:
        """Whether a cover covers a line."""
        return not cover.lines or line in cover.lines

    def event_payment(self, cover: PlacedCover, line: str) -> Schedule | None:
        """What one event of a line adds to the cover's year, as a function of the ground-up loss.

        Covers named in `after` that have event terms only are taken off the event first, with their
        share; those with annual terms are taken off the year (see `annual_covers_before`).
        None where the cover does not cover the line.
        """
        if not self.covers_line(cover, line):
            return None
        left, expense = self._left_by(cover.after, line)
        return cover.terms.event_schedule(expense, self.line(line).sum_insured).after(left)

    def event_retained(self, cover: PlacedCover, line: str) -> Schedule | None:
        """What one event adds to the amount kept under the cover's deductible; None as above."""
        if not self.covers_line(cover, line):
            return None
        left, expense = self._left_by(cover.after, line)
        return cover.terms.retained_schedule(expense, self.line(line).sum_insured).after(left)

    def annual_covers_before(self, cover: PlacedCover) -> tuple[PlacedCover, ...]:
        """Covers named in `after` whose payment is taken off the year, not off single events."""
        return tuple(self.cover(name) for name in cover.after if self.cover(name).terms.has_annual_terms)

    def shock_across(self, cover: PlacedCover) -> CommonShock | None:
        """The common shock of which a cover, or one before it, sees several lines' losses as one event.

        None too where it pays in proportion, so that the losses might as well come one by one.
        """
        for before in (self.cover(name) for name in cover.after):
            earlier = None if before.terms.has_annual_terms else self.shock_across(before)
            if earlier is not None and any(self.covers_line(cover, name) for name in earlier.lines):
                return earlier
        for shock in self.dependences:
            if isinstance(shock, CommonShock):
                own = [self.event_payment(cover, name) for name in shock.lines]
                paid = [schedule for schedule in own if schedule is not None]
                if len(paid) > 1 and not all(schedule.is_proportional for schedule in paid):
                    return shock
        return None

    def event_net(self, line: str) -> Schedule:
        """What all covers without annual terms leave of one event of a line and its expense."""
        left = self.line(line).cost
        for cover in self.covers:
            paid = None if cover.terms.has_annual_terms else self.event_payment(cover, line)
            if paid is not None:
                left = left - paid.scaled(cover.terms.year_share)
        return left

    def plan(self, subject: Subject) -> Plan:
        """How an exact engine computes a subject: event payments line by line, then one annual function.

        Raises:
            EngineError: the subject is no function of one annual sum; the simulation computes it.
        """
        if subject.kind == "line":
            return Plan({subject.name: self.line(subject.name).cost}, Schedule.identity())
        if subject == GROSS:
            return Plan({line.name: line.cost for line in self.lines}, Schedule.identity())
        if subject == NET:
            return self._net_plan()
        cover = self.cover(subject.name)
        self.require_single_events(subject, cover)
        if cover.terms.retained_cap < float("inf"):
            raise _simulated_only(subject, "a retained cap depends on two annual sums at once")
        events = {
            line.name: paid
            for line in self.lines
            if (paid := self.event_payment(cover, line.name)) is not None
        }
        seen = Schedule.identity()
        for before in self.annual_covers_before(cover):
            earlier = self.plan(Subject("cover", before.name))
            if not _same(earlier.events, events):
                raise _simulated_only(
                    subject, f"it comes after {before.name!r}, whose annual terms act on other amounts"
                )
            seen = seen - earlier.annual
        return Plan(events, cover.terms.annual_schedule().after(seen))

    def require_single_events(self, subject: Subject, *covers: PlacedCover) -> None:
        """Refuse covers that see the losses of several lines as one event: no schedule by line says that.

        Raises:
            EngineError: with the name of the shock.
        """
        for cover in covers:
            shock = self.shock_across(cover)
            if shock is not None:
                raise _simulated_only(
                    subject,
                    f"{cover.name!r} sees what {shock.name!r} costs several lines as one event",
                )

    def _net_plan(self) -> Plan:
        self.require_single_events(NET, *self.covers)
        events = {line.name: self.event_net(line.name) for line in self.lines}
        annual = Schedule.identity()
        for cover in self.covers:
            if cover.terms.has_annual_terms:
                paid = self.plan(Subject("cover", cover.name))
                if not _same(paid.events, events):
                    raise _simulated_only(
                        NET, f"cover {cover.name!r} has annual terms on a part of the losses"
                    )
                annual = annual - paid.annual
        return Plan(events, annual)

    def left_before(self, cover: PlacedCover, line: str) -> tuple[Schedule, float]:
        """What the covers before it leave of one event, and its expense as a ratio to what is left."""
        return self._left_by(cover.after, line)

    def _left_by(self, names: tuple[str, ...], line: str) -> tuple[Schedule, float]:
        """The loss that these covers leave of one event, and its expense as a ratio to what is left."""
        left, expense = Schedule.identity(), self.line(line).expense
        for name in names:
            cover = self.cover(name)
            paid = None if cover.terms.has_annual_terms else self._loss_paid(cover, line)
            if paid is not None:
                left = left - paid.scaled(cover.terms.year_share)
                expense = 0.0 if cover.terms.expense_basis == "outside" else expense
        return left, expense

    def _loss_paid(self, cover: PlacedCover, line: str) -> Schedule | None:
        """What a cover pays of one event's loss, without its expense."""
        if not self.covers_line(cover, line):
            return None
        left, expense = self._left_by(cover.after, line)
        sum_insured = self.line(line).sum_insured
        if expense == 0.0 or cover.terms.expense_basis == "outside":
            return replace(cover.terms, expense_basis=None).event_schedule(0.0, sum_insured).after(left)
        return cover.terms.event_schedule(expense, sum_insured).after(left).scaled(1.0 / (1.0 + expense))


def single_line(frequency: CountLaw, severity: SizeLaw, cover: Cover | None) -> tuple[Book, Subject]:
    """A book of one line and one cover or none, and the subject wanted of it: what `annual_loss` computes."""
    line = Line(name="loss", frequency=frequency, severity=severity)
    if cover is None:
        return Book(lines=(line,)), Subject("line", "loss")
    placed = PlacedCover(name="cover", terms=cover)
    return Book(lines=(line,), covers=(placed,)), Subject("cover", "cover")


def _not_independent(why: str) -> EngineError:
    return EngineError(
        f"this engine takes lines as independent, and {why}", remedy="The simulation computes it."
    )


def _same(first: dict[str, Schedule], second: dict[str, Schedule]) -> bool:
    """Whether two sums add up the same event amounts."""
    return first.keys() == second.keys() and all(first[name].is_near(second[name]) for name in first)


def _simulated_only(subject: Subject, why: str) -> EngineError:
    return EngineError(
        f"the exact engines cannot compute {subject}: {why}", remedy="The simulation computes it."
    )
