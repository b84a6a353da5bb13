"""What the terms of a cover do to one event: schedules built term by term, in the order declared."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from lossagg.cover.schedule import Schedule
from lossagg.errors import InputError

if TYPE_CHECKING:
    from lossagg.cover.terms import Cover


def event_payment(cover: Cover, expense: float, sum_insured: float | None) -> Schedule:
    """What one event adds to the year's payments, as a function of the loss without its expense.

    Args:
        cover: the terms.
        expense: loss-adjustment expense as a part of the loss.
        sum_insured: of the risk that had the loss, for a surplus.

    Raises:
        InputError: an expense without a basis, a surplus without a sum insured.
    """
    require_basis(cover, expense)
    seen = Schedule.proportional(1.0 + expense) if expense > 0 and cover.expense_basis == "inside" else None
    paid = through(cover, _begin(cover, sum_insured, seen), cover.event_order)
    if expense == 0 or cover.expense_basis == "inside":
        return paid
    if cover.expense_basis == "pro-rata":
        return paid.scaled(1.0 + expense)
    part = expense * surplus_share(cover, sum_insured)
    part *= cover.share if cover.share_is_per_event else 1.0
    if cover.self_insured:
        above = Schedule((0.0, cover.deductible), (0.0, part * cover.deductible), (0.0, part))
        return paid + above
    return paid + Schedule.proportional(part)


def event_retained(cover: Cover, expense: float, sum_insured: float | None) -> Schedule:
    """What the deductible takes off one event, the base of a retained cap; arguments as above."""
    require_basis(cover, expense)
    seen = Schedule.proportional(1.0 + expense) if expense > 0 and cover.expense_basis == "inside" else None
    if "deductible" not in cover.event_order:
        return Schedule.proportional(0.0)
    place = cover.event_order.index("deductible")
    reaching = through(cover, _begin(cover, sum_insured, seen), cover.event_order[:place])
    kept = (Schedule.identity() - deductible_schedule(cover)).after(reaching)
    return kept.scaled(1.0 + expense) if cover.expense_basis == "pro-rata" else kept


def deductible_schedule(cover: Cover) -> Schedule:
    """What an ordinary, franchise or disappearing deductible leaves of a loss."""
    d, gone = cover.deductible, cover.disappears_at
    if d == 0:
        return Schedule.identity()
    if cover.franchise:
        return Schedule((0.0, d), (0.0, d), (0.0, 1.0))
    if gone < np.inf:
        return Schedule((0.0, d, gone), (0.0, 0.0, gone), (0.0, gone / (gone - d), 1.0))
    return Schedule.excess(d)


def surplus_share(cover: Cover, sum_insured: float | None) -> float:
    """The part of every loss of the risk that a surplus cedes; 1 without one.

    Raises:
        InputError: a surplus, and no sum insured.
    """
    if cover.surplus is None:
        return 1.0
    if sum_insured is None:
        raise InputError(
            "a surplus cedes by sum insured, and the line states none",
            remedy="Give the line its sum-insured; where risks differ, make one line of each band of sums.",
        )
    return cover.surplus.ceded_share(sum_insured)


def require_basis(cover: Cover, expense: float) -> None:
    """Check that an expense has a basis.

    Raises:
        InputError: with the three bases and what each means.
    """
    if expense > 0 and cover.expense_basis is None:
        raise InputError(
            "the losses carry an adjustment expense, and the cover does not say on which basis it pays it",
            value=expense,
            remedy='State expense-basis: "inside" (deductible and limit see loss and expense together), '
            '"pro-rata" (paid in the proportion of the loss paid) or "outside" (paid in addition, whole).',
        )


def _begin(cover: Cover, sum_insured: float | None, seen: Schedule | None) -> Schedule:
    start = Schedule.identity() if seen is None else seen
    return start if cover.surplus is None else start.scaled(surplus_share(cover, sum_insured))


def through(cover: Cover, reaching: Schedule, operations: tuple[str, ...]) -> Schedule:
    """What reaches the cover, after some of its terms in a given order."""
    for operation in operations:
        if operation == "share":
            reaching = reaching.scaled(cover.share)
        elif operation == "limit":
            reaching = Schedule.capped(cover.limit).after(reaching) if cover.limit < np.inf else reaching
        else:
            reaching = deductible_schedule(cover).after(reaching) if cover.deductible > 0 else reaching
    return reaching
