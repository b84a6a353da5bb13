"""What each option would have cost in each past year, on trended losses: the as-if.

Every event of the records, in the money of the forecast period, runs through the terms. Exposure is not
adjusted: a year with half the exposure shows half the events. Losses below the reporting threshold are not
in the records and so not here.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from lossagg.arrays import FloatArray, IntArray
from lossagg.portfolio.line import LineModel
from lossagg.pricing.option import Events, Option
from lossagg.pricing.rows import Row

AS_IF = (
    "Every recorded event in the money of the forecast period, through the terms; at today's premium and "
    "costs. Exposure is not adjusted, losses below the reporting threshold are not there, and an amount "
    "that stopped at a policy limit counts as recorded."
)


@dataclass(frozen=True)
class PastYears:
    """Years that every line observed, and the trended events in them.

    Attributes:
        years: the calendar years, shape (years,).
        amounts: per line, the trended events.
        places: per line, the index of the year of each event.
        partial: whether the last year was observed in part.
    """

    years: IntArray
    amounts: tuple[FloatArray, ...]
    places: tuple[IntArray, ...]
    partial: bool

    @classmethod
    def of(cls, models: Sequence[LineModel]) -> PastYears | None:
        """The years that all lines have in common; None where a line has no records."""
        prepared = [model.prepared for model in models]
        known = [losses for losses in prepared if losses is not None]
        if len(known) < len(prepared) or not known:
            return None
        first = max(int(losses.years.year[0]) for losses in known)
        last = min(int(losses.years.year[-1]) for losses in known)
        if last < first:
            return None
        inside = [(losses.year >= first) & (losses.year <= last) for losses in known]
        return cls(
            np.arange(first, last + 1),
            tuple(losses.amount[mask] for losses, mask in zip(known, inside, strict=True)),
            tuple(losses.year[mask] - first for losses, mask in zip(known, inside, strict=True)),
            any(losses.years.fraction[losses.years.year == last].min() < 1.0 for losses in known),
        )

    def sums(self, events: Events) -> FloatArray:
        """The year's sum of event amounts, shape (years,)."""
        total = np.zeros(len(self.years))
        for amounts, places, own in zip(self.amounts, self.places, events, strict=True):
            np.add.at(total, places, own(amounts))
        return total

    def retained(self, option: Option) -> tuple[FloatArray, FloatArray]:
        """What the option would have kept and ceded in each year, shape (years,) each."""
        ceded = option.ceded(self.sums(option.paid), self.sums(option.kept))
        return np.maximum(self.sums(option.scope) - ceded, 0.0), ceded


def as_if(models: Sequence[LineModel], rows: Sequence[Row]) -> dict[str, Any] | None:
    """The as-if of every option as plain data; None where a line has no records."""
    past = PastYears.of(models)
    if past is None:
        return None
    gross = past.sums(rows[0].option.scope)
    entries = []
    for row in rows:
        retained, ceded = past.retained(row.option)
        total = None if row.fixed is None else retained + row.reinstatement(ceded) + row.fixed
        entries.append(
            {
                "option": row.option.name,
                "retained": retained.tolist(),
                "ceded": ceded.tolist(),
                "total": None if total is None else total.tolist(),
                "mean": None if total is None else float(np.mean(total)),
            }
        )
    return {
        "years": past.years.tolist(),
        "events": np.sum(
            [np.bincount(places, minlength=len(past.years)) for places in past.places], axis=0
        ).tolist(),
        "gross": gross.tolist(),
        "mean": float(np.mean(gross)),
        "options": entries,
        "partial": past.partial,
        "note": AS_IF,
    }
