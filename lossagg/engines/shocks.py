"""Events that cost several lines a loss each: one event to every cover that has some of these lines.

A cover sees the sum of what such an event costs its lines: deductible and limit act once, on that sum. What
it pays belongs to the lines in proportion to what each brings into the sum (common practice, no source), and
a cover that comes after sees what is left of each line so. Expense and surplus stay those of each line. Of a
single line all of it is what `Book.event_payment` says.

The number of shocks of a year comes with the dependences, see `joint`; their sizes are drawn line by line,
from a stream that (seed, line, block) says, apart from that of the line's other losses.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from lossagg.arrays import FloatArray, IntArray
from lossagg.cover import Schedule
from lossagg.cover.event import deductible_schedule, surplus_share, through
from lossagg.engines.book import Book, PlacedCover
from lossagg.engines.dependence import CommonShock
from lossagg.engines.joint import JointBlock
from lossagg.engines.quantile_table import QuantileTable
from lossagg.engines.streams import block_state, line_key
from lossagg.kernels.simulation import draw_sizes


@dataclass(frozen=True, eq=False)
class ShockLosses:
    """The events of one common shock in a block of years, in the order of the years.

    Attributes:
        shock: the dependence.
        year: of each event, counted from the start of the block, shape (n,).
        losses: per line hit, what each event costs it, without expense, shape (n,).
    """

    shock: CommonShock
    year: IntArray
    losses: Mapping[str, FloatArray]

    def between(self, first: int, last: int) -> ShockLosses:
        """The events of some years."""
        low, high = np.searchsorted(self.year, (first, last)).tolist()
        cut = {name: own[low:high] for name, own in self.losses.items()}
        return ShockLosses(self.shock, self.year[low:high], cut)


@dataclass(frozen=True, eq=False)
class JointPayment:
    """What a cover pays of each event, by line, shape (n,) each.

    Attributes:
        seen: what the covers before it leave of each line's loss, without expense.
        brought: what each line brings into the sum on which the terms act.
        paid: what it adds to the cover's year.
        kept: what it adds to the amount kept under the cover's deductible.
        loss: of `paid`, the loss without its expense.
    """

    seen: Mapping[str, FloatArray]
    brought: Mapping[str, FloatArray]
    paid: Mapping[str, FloatArray]
    kept: Mapping[str, FloatArray]
    loss: Mapping[str, FloatArray]


def shock_losses(
    book: Book, tables: Mapping[str, QuantileTable], joint: JointBlock, *, seed: int, block: int
) -> tuple[ShockLosses, ...]:
    """Draw the events of every common shock in a block.

    Args:
        book: lines and dependences.
        tables: per line what its sizes are drawn from.
        joint: what the dependences say of the block.
        seed: the seed of the run.
        block: number of the block.
    """
    found = []
    for shock in book.dependences:
        if isinstance(shock, CommonShock):
            numbers = joint.shocks[shock.lines[0]]
            year = np.repeat(np.arange(numbers.size), numbers)
            losses = {}
            for name in shock.lines:
                state = block_state(seed, line_key(f"sizes of shocks\0{name}"), block)
                losses[name] = _sizes(tables[name], state, year.size)
                if name in joint.scale:
                    losses[name] *= joint.scale[name][year]
            found.append(ShockLosses(shock, year, losses))
    return tuple(found)


def _sizes(table: QuantileTable, state: np.ndarray, number: int) -> FloatArray:
    sizes, flagged, probability = np.empty(number), np.empty(number, dtype=np.int64), np.empty(number)
    found = draw_sizes(state, table.arrays, sizes, flagged, probability, 0)
    sizes[flagged[:found]] = table.exact(probability[:found])
    return sizes


def joint_payments(book: Book, losses: Mapping[str, FloatArray]) -> dict[str, JointPayment]:
    """What each cover pays of events that cost several lines at once, by its name.

    Args:
        book: lines and covers.
        losses: per line what each event costs it, without expense, shape (n,).
    """
    found: dict[str, JointPayment] = {}
    for cover in book.covers:
        own = {name: loss for name, loss in losses.items() if book.covers_line(cover, name)}
        if own:
            found[cover.name] = _payment(book, cover, own, found)
    return found


def _payment(
    book: Book, cover: PlacedCover, losses: Mapping[str, FloatArray], before: Mapping[str, JointPayment]
) -> JointPayment:
    terms, basis = cover.terms, cover.terms.expense_basis
    seen, expense = dict(losses), {name: book.line(name).expense for name in losses}
    for earlier in (book.cover(name) for name in cover.after if name in before):
        if earlier.terms.has_annual_terms:
            continue
        for name, loss in before[earlier.name].loss.items():
            if name in seen:
                seen[name] = np.maximum(seen[name] - earlier.terms.year_share * loss, 0.0)
                expense[name] = 0.0 if earlier.terms.expense_basis == "outside" else expense[name]
    ceded = {name: surplus_share(terms, book.line(name).sum_insured) for name in seen}
    inside = {name: 1.0 + expense[name] if basis == "inside" else 1.0 for name in seen}
    after = {name: 1.0 + expense[name] if basis == "pro-rata" else 1.0 for name in seen}
    brought = {name: ceded[name] * inside[name] * own for name, own in seen.items()}
    total = _total(brought)
    part = {name: _ratio(own, total) for name, own in brought.items()}
    paid_of_all = through(terms, Schedule.identity(), terms.event_order)(total)
    kept_of_all = _kept(cover)(total)
    paid = {name: paid_of_all * part[name] * after[name] for name in seen}
    if basis == "outside":
        whole = _total(seen)
        above = whole > terms.deductible if terms.self_insured else np.ones(whole.shape, dtype=np.bool_)
        share = terms.share if terms.share_is_per_event else 1.0
        for name, own in seen.items():
            paid[name] = paid[name] + expense[name] * ceded[name] * share * above * own
    return JointPayment(
        seen,
        brought,
        paid,
        {name: kept_of_all * part[name] * after[name] for name in seen},
        {name: paid_of_all * part[name] / inside[name] for name in seen},
    )


def _kept(cover: PlacedCover) -> Schedule:
    terms = cover.terms
    if "deductible" not in terms.event_order:
        return Schedule.proportional(0.0)
    reaching = through(terms, Schedule.identity(), terms.event_order[: terms.event_order.index("deductible")])
    return (Schedule.identity() - deductible_schedule(terms)).after(reaching)


def _total(parts: Mapping[str, FloatArray]) -> FloatArray:
    names = sorted(parts)
    total = parts[names[0]]
    for name in names[1:]:
        total = total + parts[name]
    return total


def _ratio(part: FloatArray, whole: FloatArray) -> FloatArray:
    return np.divide(part, whole, out=np.zeros(whole.shape), where=whole > 0.0)


__all__ = ["JointPayment", "ShockLosses", "joint_payments", "shock_losses"]
