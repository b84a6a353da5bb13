"""What is refused of the terms of a cover, and with which remedy."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from lossagg.arrays import require_positive, require_probability
from lossagg.cover.wording import BASES
from lossagg.errors import InputError

if TYPE_CHECKING:
    from lossagg.cover.terms import Cover

_FLAGS = ("franchise", "limit_includes_deductible", "self_insured")


def check_amounts(cover: Cover) -> dict[str, float]:
    """Every number of a cover as a float within its range.

    Raises:
        InputError: with the name, the allowed range and the value seen.
    """
    for name in _FLAGS:
        if not isinstance(getattr(cover, name), bool):
            remedy = (
                "Give the franchise amount as the deductible."
                if name == "franchise"
                else "Write True or False."
            )
            raise InputError(f"{name} must be true or false", value=getattr(cover, name), remedy=remedy)
    if cover.expense_basis not in (None, *BASES):
        raise InputError(
            "unknown expense basis", value=cover.expense_basis, remedy=f"Use one of: {', '.join(BASES)}."
        )
    return {
        "deductible": require_positive(cover.deductible, "deductible", zero=True),
        "limit": require_positive(cover.limit, "limit", infinite=True),
        "annual_retention": require_positive(cover.annual_retention, "annual_retention", zero=True),
        "annual_limit": require_positive(cover.annual_limit, "annual_limit", infinite=True),
        "retained_cap": require_positive(cover.retained_cap, "retained_cap", zero=True, infinite=True),
        "disappears_at": require_positive(cover.disappears_at, "disappears_at", infinite=True),
        "share": require_probability(cover.share, "share", open_low=True),
    }


def stated_terms(cover: Cover) -> tuple[str, ...]:
    """The terms a cover has, by the names that its order uses."""
    stated = {
        "deductible": cover.deductible > 0,
        "limit": cover.limit < np.inf,
        "annual-retention": cover.annual_retention > 0,
        "corridor": cover.corridor is not None,
        "retained-cap": cover.retained_cap < np.inf,
        "annual-limit": cover.annual_limit < np.inf or cover.reinstatements is not None,
        "share": cover.share < 1,
    }
    return tuple(name for name, is_stated in stated.items() if is_stated)


def check_terms(cover: Cover) -> None:
    """Refuse terms that contradict each other.

    Raises:
        InputError: what contradicts what, and how to state what may have been meant.
    """
    _check_limit(cover)
    _check_deductible(cover)
    _check_reinstatements(cover)
    if cover.retained_cap < np.inf and cover.deductible == 0:
        raise InputError(
            "retained_cap limits what is kept under the deductible, and there is no deductible",
            value=cover.retained_cap,
            remedy="Give a deductible, or use annual_retention to keep part of the year's payments.",
        )


def _check_limit(cover: Cover) -> None:
    d, limit = cover.deductible, cover.limit
    if cover.franchise and limit <= d:
        raise InputError(
            "under a franchise the limit counts from the first unit, so it must exceed the deductible",
            value=limit,
            remedy=f"Raise limit above {d:g}, or drop the franchise.",
        )
    if cover.disappears_at < np.inf and limit <= d:
        raise InputError(
            "under a disappearing deductible the limit counts from the first unit, so it must exceed it",
            value=limit,
            remedy=f"Raise limit above {d:g}.",
        )
    if cover.limit_includes_deductible and (limit == np.inf or d == 0):
        raise InputError(
            "limit_includes_deductible needs both a limit and a deductible",
            value=limit if d == 0 else d,
            remedy="Give both, or leave it out.",
        )
    order = cover.event_order
    limit_first = (
        "limit" in order and "deductible" in order and order.index("limit") < order.index("deductible")
    )
    if (
        limit_first
        and d > 0
        and limit * (cover.share if "share" in order[: order.index("deductible")] else 1.0) <= d
    ):
        raise InputError(
            "the limit includes the deductible and does not exceed it, so the cover never pays",
            value=limit,
            remedy=f"Raise limit above {d:g}, or state it on top of the deductible.",
        )


def _check_deductible(cover: Cover) -> None:
    d, gone = cover.deductible, cover.disappears_at
    if gone < np.inf and cover.franchise:
        raise InputError(
            "a deductible is either a franchise or disappearing", value=gone, remedy="State one of the two."
        )
    if gone < np.inf and not 0 < d < gone:
        raise InputError(
            "disappears_at must exceed the deductible, and there must be one",
            value=gone,
            remedy=f"Give a deductible above 0 and disappears_at above it; the deductible is {d:g}.",
        )
    if not cover.self_insured:
        return
    if d == 0:
        raise InputError(
            "a self-insured retention needs its amount", value=d, remedy="Give the amount as the deductible."
        )
    if cover.franchise or gone < np.inf or cover.limit_includes_deductible:
        raise InputError(
            "a self-insured retention is kept of every event and never erodes the limit",
            value="franchise, disappears_at or limit_includes_deductible",
            remedy="Drop self_insured for a deductible of that kind.",
        )


def _check_reinstatements(cover: Cover) -> None:
    clause = cover.reinstatements
    if clause is None:
        return
    if cover.limit == np.inf:
        raise InputError(
            "reinstatements need a limit per event to reinstate",
            value=clause.number,
            remedy="Give limit; without one, state an annual_limit or leave the year unlimited.",
        )
    if cover.expense_basis in ("outside", "pro-rata"):
        raise InputError(
            "reinstatements count what is used of the limit, and expense paid beside the limit is not",
            value=cover.expense_basis,
            remedy='Use the expense basis "inside", or state an annual_limit instead of reinstatements.',
        )
    agreed = cover.year_limit
    if cover.annual_limit < np.inf and not np.isclose(cover.annual_limit, agreed, rtol=1e-9, atol=0.0):
        raise InputError(
            f"{clause.number} reinstatements of {cover.event_most:,.0f} make an annual limit of "
            f"{agreed:,.0f}, and another is given",
            value=cover.annual_limit,
            remedy="Leave annual_limit out, or change the number of reinstatements.",
        )
