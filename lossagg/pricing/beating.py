"""In how many simulated years an option costs less than the base option: the same years for both."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.pricing.common_years import Paid, Tally, costs_less
from lossagg.pricing.rows import Row


def paid_of(row: Row) -> Paid | None:
    """What an option costs beside retained losses, as a function of what the cover pays for the years."""
    fixed = row.fixed
    return None if fixed is None else lambda ceded: fixed + row.reinstatement(ceded)


def beat_by_years(rows: Sequence[Row], tallies: Sequence[Tally], base: int) -> None:
    """Count the years for options whose premium had to wait for the simulation."""
    theirs = _costs(rows[base], tallies[base])
    for row, tally in zip(rows, tallies, strict=True):
        own = _costs(row, tally)
        if np.isnan(tally.beats_base) and own is not None and theirs is not None:
            tally.beats_base = float(np.mean(costs_less(own, theirs)))


def beats_data(tally: Tally) -> dict[str, Any] | None:
    """The part of the years with its standard error; None where it is not known."""
    chance = tally.beats_base
    if np.isnan(chance):
        return None
    return {"value": chance, "standard_error": float(np.sqrt(chance * (1.0 - chance) / tally.years))}


def _costs(row: Row, tally: Tally) -> FloatArray | None:
    """Total cost of every simulated year, where the years were kept."""
    paid = paid_of(row)
    if paid is None or tally.kept is None or tally.paid is None:
        return None
    return tally.kept.annual + paid(tally.paid.annual)
