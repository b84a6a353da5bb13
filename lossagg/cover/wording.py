"""The terms of a cover in one line, as printed in reports."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from lossagg.cover.terms import Cover

BASES = {
    "inside": "expense inside deductible and limit",
    "outside": "expense paid in addition",
    "pro-rata": "expense in proportion to the loss paid",
}


def described(cover: Cover) -> str:
    """The terms in one line."""
    parts = [*_event_parts(cover), *_year_parts(cover)]
    if cover.share < 1:
        parts.append(f"share {cover.share:.4g}")
    if cover.order:
        parts.append("order " + ", ".join(cover.order))
    return ", ".join(parts) or "everything is paid"


def _event_parts(cover: Cover) -> list[str]:
    parts = []
    if cover.surplus is not None:
        surplus = cover.surplus
        parts.append(f"surplus of {surplus.lines:g} lines above a kept line of {surplus.kept_line:,.0f}")
    if cover.limit < np.inf or cover.deductible > 0:
        limit = "unlimited" if cover.limit == np.inf else f"{cover.limit:,.0f}"
        parts.append(f"{limit} per event {_deductible(cover)}")
    if cover.expense_basis is not None:
        parts.append(BASES[cover.expense_basis])
    return parts


def _deductible(cover: Cover) -> str:
    amount = f"{cover.deductible:,.0f}"
    if cover.franchise:
        return f"above a franchise of {amount}"
    if cover.disappears_at < np.inf:
        return f"above a deductible of {amount} that disappears at {cover.disappears_at:,.0f}"
    if cover.limit_includes_deductible:
        return f"including a deductible of {amount}"
    kind = "a self-insured retention of " if cover.self_insured else ""
    return f"in excess of {kind}{amount}"


def _year_parts(cover: Cover) -> list[str]:
    parts = []
    if cover.annual_retention > 0:
        parts.append(f"annual retention {cover.annual_retention:,.0f}")
    if cover.corridor is not None:
        band = cover.corridor
        end = "without end" if band.high == np.inf else f"to {band.high:,.0f}"
        parts.append(f"corridor {band.low:,.0f} {end}, {100 * band.share:.4g} % taken back")
    if cover.retained_cap < np.inf:
        parts.append(f"retained cap {cover.retained_cap:,.0f}")
    if cover.reinstatements is not None:
        parts.append(cover.reinstatements.describe())
    if cover.year_limit < np.inf:
        parts.append(f"annual limit {cover.year_limit:,.0f}")
    return parts
