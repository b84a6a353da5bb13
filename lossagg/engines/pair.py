"""Subjects that depend on two annual sums: what a cover with a retained cap pays, and what it leaves.

The cover pays `beyond(u(Z) + v(R))`, where Z adds up the payments for events above the deductible and R what
the deductible keeps of every event. Z and R are dependent, but only through the number of events above
the deductible: given it, Z is a sum of that many payments, and R that many deductibles and the small
events. That needs an event to be either: one that pays, of which always the same is kept, or one that
pays nothing.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np

from lossagg.cover import Schedule
from lossagg.engines.book import NET, Book, PlacedCover, Plan, Subject
from lossagg.errors import EngineError

_SAME = 1e-9


@dataclass(frozen=True)
class PairPlan:
    """A subject as `beyond(payments(Z) + kept(R))`.

    Attributes:
        paid: per line, what one event adds to Z.
        held: per line, what one event adds to R.
        payments: what counts of Z.
        kept: what counts of R.
        beyond: the subject's amount.
    """

    paid: dict[str, Schedule]
    held: dict[str, Schedule]
    payments: Schedule
    kept: Schedule
    beyond: Schedule

    @property
    def single(self) -> Plan | None:
        """The plan with one sum, where nothing counts of the payments; else None."""
        if self.payments.most > 0 or any(slope != 0 for slope in self.payments.slopes):
            return None
        return Plan(self.held, self.beyond.after(self.kept))


class Split(NamedTuple):
    """Events of a line by whether they pay.

    Attributes:
        above: an event pays where its loss exceeds this.
        kept: what is kept of every event that pays.
        small: what is kept of an event that does not pay, 0 for one that does.
    """

    above: float
    kept: float
    small: Schedule


def pair_plan(book: Book, subject: Subject) -> PairPlan | None:
    """How a subject with a retained cap is computed; None where the subject has none.

    Raises:
        EngineError: a retained cap among terms that leave more than two annual sums.
    """
    if subject == NET:
        book.require_single_events(NET, *book.covers)
        return _net(book)
    if subject.kind != "cover":
        return None
    cover = book.cover(subject.name)
    terms = cover.terms.year_terms
    if terms.kept is None:
        return None
    book.require_single_events(subject, cover)
    if book.annual_covers_before(cover):
        raise _too_many(subject, "it comes after a cover with annual terms")
    paid, held = _sums(book, cover)
    return PairPlan(paid, held, terms.payments, terms.kept, terms.beyond)


def _net(book: Book) -> PairPlan | None:
    annual = [cover for cover in book.covers if cover.terms.has_annual_terms]
    capped = [cover for cover in annual if cover.terms.year_terms.kept is not None]
    if not capped:
        return None
    cover, terms = capped[0], capped[0].terms.year_terms
    if len(annual) > 1 or terms.kept is None:
        raise _too_many(NET, "another cover has annual terms beside the retained cap")
    if terms.beyond.slopes != terms.beyond.slopes[:1]:
        raise _too_many(NET, f"the annual limit of {cover.name!r} acts on both sums together")
    paid, held = _sums(book, cover)
    for line in book.lines:
        if line.name not in paid:
            raise _too_many(NET, f"{cover.name!r} does not cover {line.name!r}")
        rest = book.event_net(line.name) - paid[line.name] - held[line.name]
        if any(abs(slope) > _SAME for slope in rest.slopes) or rest.most > _SAME * max(rest.starts[-1], 1.0):
            raise _too_many(NET, f"{cover.name!r} leaves a third part, beyond its limit, of each event")
    share = terms.beyond.slopes[0]
    same = Schedule.identity()
    payments, kept = same - terms.payments.scaled(share), same - terms.kept.scaled(share)
    return PairPlan(paid, held, payments, kept, same)


def _sums(book: Book, cover: PlacedCover) -> tuple[dict[str, Schedule], dict[str, Schedule]]:
    paid, held = {}, {}
    for line in book.lines:
        payment, kept = book.event_payment(cover, line.name), book.event_retained(cover, line.name)
        if payment is not None and kept is not None:
            paid[line.name], held[line.name] = payment, kept
    return paid, held


def split(paid: Schedule, held: Schedule) -> Split:
    """Tell events that pay from those that do not.

    Raises:
        EngineError: something is paid for events of which the amount kept differs.
    """
    paying = [
        k for k, (value, slope) in enumerate(zip(paid.values, paid.slopes, strict=True)) if value or slope
    ]
    above = paid.starts[paying[0]] if paying else np.inf
    pieces = list(zip(held.starts, held.values, held.slopes, strict=True))
    ends = [*held.starts[1:], np.inf]
    over = [piece for piece, end in zip(pieces, ends, strict=True) if end > above]
    amounts = {value for _, value, _ in over}
    if any(slope != 0 for *_, slope in over) or (over and max(amounts) - min(amounts) > _SAME * max(amounts)):
        raise EngineError(
            "the exact engines cannot compute a retained cap where the amount kept of an event that pays "
            "is not always the same",
            remedy="The simulation computes it.",
        )
    below = [piece for piece in pieces if piece[0] < above]
    if above < np.inf:
        below.append((above, 0.0, 0.0))
    starts, values, slopes = zip(*below, strict=True)
    return Split(above, max(amounts, default=0.0), Schedule(starts, values, slopes))


def _too_many(subject: Subject, why: str) -> EngineError:
    return EngineError(
        f"the exact engines cannot compute {subject} with a retained cap: {why}",
        remedy="The simulation computes it.",
    )
