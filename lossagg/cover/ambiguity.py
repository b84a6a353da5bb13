"""A phrase of the trade that means one thing to some and its opposite to others."""

from __future__ import annotations

from lossagg.errors import InputError

AMBIGUOUS = frozenset({"annual-aggregate-deductible", "aggregate-deductible", "annual-deductible", "aad"})
REMEDY = (
    "Write annual-retention for an amount kept of the year's payments before the cover pays, or "
    "retained-cap for the most the insured keeps per year under the deductible."
)


def is_ambiguous(name: str) -> bool:
    """Whether a term of this name could mean either."""
    return name.replace("_", "-").lower() in AMBIGUOUS


def two_meanings(name: str) -> InputError:
    """The refusal of such a name, with both meanings and the two names that say which is meant."""
    return InputError(
        f"{name!r} has two opposite meanings in the trade",
        remedy=REMEDY.replace("-", "_") if "_" in name else REMEDY,
    )
