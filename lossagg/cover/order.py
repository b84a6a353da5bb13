"""In which order the terms of a cover act: a term of the contract like any other.

A loss of 100,000 under a deductible of 10,000, a share of 80 % and a limit of 60,000 pays 60,000,
48,000 or 40,000 depending on nothing but the order. The usual one is the default; another must be
stated, and must then name every term the cover has.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from lossagg.errors import InputError

PER_EVENT = ("deductible", "limit")
PER_YEAR = ("annual-retention", "corridor", "retained-cap", "annual-limit")
USUAL = (*PER_EVENT, *PER_YEAR, "share")

WORDS = {
    "surplus": "surplus share",
    "deductible": "deductible",
    "limit": "limit",
    "annual-retention": "annual retention",
    "corridor": "corridor",
    "retained-cap": "excess over the retained cap",
    "annual-limit": "annual limit",
    "share": "share",
}
ORDER_OF_OPERATIONS = (
    "per event: deductible, then limit; per year: annual retention, then corridor, then excess over the "
    "retained cap, then annual limit; then share"
)


def checked_order(order: Any, stated: Sequence[str], inclusive: bool) -> tuple[str, ...]:
    """The order in which a cover's terms act.

    Args:
        order: the operations as given, hyphens or underscores; empty for the usual order.
        stated: the operations the cover has terms for.
        inclusive: whether the limit includes the deductible, so that it acts first.

    Raises:
        InputError: an unknown, repeated or missing operation, an annual term before one of single
            events, or an order that contradicts a limit including the deductible.
    """
    if not order:
        return ("limit", "deductible", *USUAL[2:]) if inclusive else USUAL
    if isinstance(order, str) or not all(isinstance(name, str) for name in order):
        raise InputError("order must be a list of terms", value=order, remedy=f"Terms: {', '.join(USUAL)}.")
    names = tuple(name.replace("_", "-") for name in order)
    for name in names:
        if name not in USUAL:
            raise InputError("order names an unknown term", value=name, remedy=f"Terms: {', '.join(USUAL)}.")
        if names.count(name) > 1:
            raise InputError("order names a term twice", value=name, remedy="Name every term once.")
    missing = [name for name in stated if name not in names]
    if missing:
        raise InputError(
            "order must name every term the cover has",
            value=", ".join(names),
            remedy=f"Add: {', '.join(missing)}.",
        )
    _require_events_first(names)
    if inclusive and names.index("deductible") < names.index("limit"):
        raise InputError(
            "the limit includes the deductible, so it acts before it, but order says otherwise",
            value=", ".join(names),
            remedy="List limit before deductible, or state the limit on top of the deductible.",
        )
    return names


def _require_events_first(names: tuple[str, ...]) -> None:
    yearly = [name for name in names if name in PER_YEAR]
    for name in names:
        if name in PER_EVENT and yearly and names.index(name) > names.index(yearly[0]):
            raise InputError(
                "a term of single events cannot act after one of the year",
                value=", ".join(names),
                remedy=f"List {name} before {yearly[0]}.",
            )


def share_is_per_event(order: Sequence[str], stated: Sequence[str]) -> bool:
    """Whether the share acts on single events: something of the cover acts after it, nothing of the year
    before it. Last of all, it acts on the year's amount, which comes to the same for single events."""
    if "share" not in stated:
        return False
    acting = [name for name in order if name in stated]
    place = acting.index("share")
    return place < len(acting) - 1 and not any(name in PER_YEAR for name in acting[:place])


def in_words(order: Sequence[str], per_event_share: bool, surplus: bool) -> str:
    """The order as printed in reports."""
    if tuple(order) == USUAL and not surplus:
        return ORDER_OF_OPERATIONS
    events = [name for name in order if name in PER_EVENT or (name == "share" and per_event_share)]
    events = ["surplus", *events] if surplus else events
    years = [name for name in order if name not in events]
    parts = []
    if events:
        parts.append("per event: " + ", then ".join(WORDS[name] for name in events))
    if years[-1:] == ["share"] and tuple(order) != ("share",):
        years, last = years[:-1], ["then share"]
    else:
        last = []
    if years:
        parts.append("per year: " + ", then ".join(WORDS[name] for name in years))
    return "; ".join([*parts, *last])
