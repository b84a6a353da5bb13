"""What every engine computes: lines and covers of one portfolio, and the subjects asked about.

A book turns the covers into two kinds of function that any engine can use: what each event pays
(a schedule per line) and what each year pays (the annual terms). Covers with `after` see only what
the covers named there leave of each event.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import NamedTuple

from lossagg.cover import Cover, Schedule
from lossagg.errors import EngineError, InputError
from lossagg.families.base import CountLaw, SizeLaw


class Subject(NamedTuple):
    """Whose annual amount a result is: kind "line", "gross", "cover" or "net", and its name."""

    kind: str
    name: str = ""

    def __str__(self) -> str:
        return f"{self.kind} {self.name}".strip()


GROSS = Subject("gross")
NET = Subject("net")


@dataclass(frozen=True, kw_only=True)
class Line:
    """One class of business: the law of its counts per year and of the size of one loss."""

    name: str
    frequency: CountLaw
    severity: SizeLaw


@dataclass(frozen=True, kw_only=True)
class PlacedCover:
    """A cover, the lines it covers, and the covers it comes after.

    Args:
        name: its name in reports.
        terms: its terms.
        lines: names of the lines it covers; empty means every line.
        after: names of covers that pay first; this one sees what they leave.
    """

    name: str
    terms: Cover
    lines: tuple[str, ...] = ()
    after: tuple[str, ...] = ()


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
    """Lines and covers, checked against each other.

    Raises:
        InputError: repeated names, a cover of an unknown line, an `after` that names no earlier
            cover, or a cover with event terms after a cover with annual terms (whose payment
            belongs to the year, not to an event).
    """

    lines: tuple[Line, ...]
    covers: tuple[PlacedCover, ...] = ()

    def __post_init__(self) -> None:
        if not self.lines:
            raise InputError("a book needs at least one line", remedy="Add a line.")
        for kind, names in (
            ("line", [line.name for line in self.lines]),
            ("cover", [cover.name for cover in self.covers]),
        ):
            for name in names:
                if names.count(name) > 1:
                    raise InputError(
                        f"two {kind}s have the same name",
                        value=name,
                        remedy=f"Give every {kind} its own name.",
                    )
        line_names = {line.name for line in self.lines}
        earlier: dict[str, PlacedCover] = {}
        for cover in self.covers:
            for name in cover.lines:
                if name not in line_names:
                    raise InputError(
                        "the cover names a line that does not exist",
                        where=f"cover {cover.name!r}",
                        value=name,
                        remedy=f"Lines: {', '.join(sorted(line_names))}.",
                    )
            for name in cover.after:
                if name not in earlier:
                    raise InputError(
                        "the cover comes after a cover that is not listed before it",
                        where=f"cover {cover.name!r}",
                        value=name,
                        remedy="List the covers in the order in which they pay.",
                    )
                if cover.terms.has_event_terms and earlier[name].terms.has_annual_terms:
                    raise InputError(
                        "event terms cannot follow a cover with annual terms: its payment belongs to the year",
                        where=f"cover {cover.name!r}",
                        value=name,
                        remedy="Use annual terms only (retention, limit, share) in the later cover.",
                    )
            earlier[cover.name] = cover

    @cached_property
    def subjects(self) -> tuple[Subject, ...]:
        """Every line, gross, every cover, net, in this order."""
        lines = [Subject("line", line.name) for line in self.lines]
        covers = [Subject("cover", cover.name) for cover in self.covers]
        return (*lines, GROSS, *covers, NET)

    def cover(self, name: str) -> PlacedCover:
        """The cover of this name."""
        return next(cover for cover in self.covers if cover.name == name)

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
        return cover.terms.event_schedule().after(self._left_by(cover.after, line))

    def event_retained(self, cover: PlacedCover, line: str) -> Schedule | None:
        """What one event adds to the amount kept under the cover's deductible; None as above."""
        if not self.covers_line(cover, line):
            return None
        return cover.terms.retained_schedule().after(self._left_by(cover.after, line))

    def annual_covers_before(self, cover: PlacedCover) -> tuple[PlacedCover, ...]:
        """Covers named in `after` whose payment is taken off the year, not off single events."""
        return tuple(self.cover(name) for name in cover.after if self.cover(name).terms.has_annual_terms)

    def event_net(self, line: str) -> Schedule:
        """What all covers without annual terms leave of one event of a line."""
        return self._left_by(tuple(c.name for c in self.covers if not c.terms.has_annual_terms), line)

    def plan(self, subject: Subject) -> Plan:
        """How an exact engine computes a subject: event payments line by line, then one annual function.

        Raises:
            EngineError: the subject is no function of one annual sum; the simulation computes it.
        """
        if subject.kind == "line":
            return Plan({subject.name: Schedule.identity()}, Schedule.identity())
        if subject == GROSS:
            return Plan({line.name: Schedule.identity() for line in self.lines}, Schedule.identity())
        if subject == NET:
            return self._net_plan()
        cover = self.cover(subject.name)
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
            if earlier.events != events:
                raise _simulated_only(
                    subject, f"it comes after {before.name!r}, whose annual terms act on other amounts"
                )
            seen = seen - earlier.annual
        return Plan(events, cover.terms.annual_schedule().after(seen))

    def _net_plan(self) -> Plan:
        events = {line.name: self.event_net(line.name) for line in self.lines}
        annual = Schedule.identity()
        for cover in self.covers:
            if cover.terms.has_annual_terms:
                paid = self.plan(Subject("cover", cover.name))
                if paid.events != events:
                    raise _simulated_only(
                        NET, f"cover {cover.name!r} has annual terms on a part of the losses"
                    )
                annual = annual - paid.annual
        return Plan(events, annual)

    def _left_by(self, names: tuple[str, ...], line: str) -> Schedule:
        left = Schedule.identity()
        for name in names:
            cover = self.cover(name)
            paid = None if cover.terms.has_annual_terms else self.event_payment(cover, line)
            if paid is not None:
                left = left - paid.scaled(cover.terms.share)
        return left


def _simulated_only(subject: Subject, why: str) -> EngineError:
    return EngineError(
        f"the exact engines cannot compute {subject}: {why}", remedy="The simulation computes it."
    )
