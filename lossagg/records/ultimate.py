"""The years of a line developed to ultimate, beside what is reported."""

from __future__ import annotations

import datetime as dt
from dataclasses import dataclass
from typing import Any

import numpy as np

from lossagg.arrays import FloatArray, IntArray
from lossagg.errors import InputError
from lossagg.records.development import (
    Development,
    bornhuetter_ferguson,
    by_age,
    chain_ladder,
    link_factors,
    open_claim_factors,
    to_ultimate,
)
from lossagg.records.history import History


@dataclass(frozen=True)
class Factors:
    """Factors to ultimate of each year of the window, and where they come from; arrays of shape (years,).

    Args:
        count: of the number of events.
        amount: of the amount of all events.
        open: of the amount of open claims; None where they are not developed.
        source: "given", "history", or both.
        history: the triangles they were estimated from, None where all are given.
    """

    count: FloatArray
    amount: FloatArray
    open: FloatArray | None
    source: str
    history: History | None


@dataclass(frozen=True)
class Developed:
    """Reported and ultimate, year by year; arrays of shape (years,).

    Args:
        year: calendar years.
        factors: factors to ultimate.
        method: "chain-ladder" or "bornhuetter-ferguson", which stands for the developed year.
        count: events reported.
        count_chain_ladder: their ultimate by the chain ladder, or by the given factors.
        count_bornhuetter_ferguson: their ultimate with the a-priori; None without one.
        amount: amount reported, as recorded.
        amount_chain_ladder: its ultimate.
        amount_bornhuetter_ferguson: its ultimate with the a-priori; None without one.
    """

    year: IntArray
    factors: Factors
    method: str
    count: FloatArray
    count_chain_ladder: FloatArray
    count_bornhuetter_ferguson: FloatArray | None
    amount: FloatArray
    amount_chain_ladder: FloatArray
    amount_bornhuetter_ferguson: FloatArray | None

    @property
    def ultimate_count(self) -> FloatArray:
        """Events at ultimate by the chosen method; shape (years,)."""
        return self._chosen(self.count_chain_ladder, self.count_bornhuetter_ferguson)

    @property
    def ultimate_amount(self) -> FloatArray:
        """Amount at ultimate by the chosen method; shape (years,)."""
        return self._chosen(self.amount_chain_ladder, self.amount_bornhuetter_ferguson)

    def _chosen(self, ladder: FloatArray, ferguson: FloatArray | None) -> FloatArray:
        return ferguson if self.method == "bornhuetter-ferguson" and ferguson is not None else ladder

    def to_dict(self) -> dict[str, Any]:
        """The developed years and the triangles as plain values, as an assessment carries them."""
        columns = {
            "year": self.year,
            "count": self.count,
            "count_factor": self.factors.count,
            "count_chain_ladder": self.count_chain_ladder,
            "count_bornhuetter_ferguson": self.count_bornhuetter_ferguson,
            "amount": self.amount,
            "amount_factor": self.factors.amount,
            "amount_chain_ladder": self.amount_chain_ladder,
            "amount_bornhuetter_ferguson": self.amount_bornhuetter_ferguson,
            "open_factor": self.factors.open,
        }
        lists = {
            name: [None] * len(self.year) if values is None else values.tolist()
            for name, values in columns.items()
        }
        rows = [dict(zip(lists, row, strict=True)) for row in zip(*lists.values(), strict=True)]
        history = self.factors.history
        return {
            "method": self.method,
            "source": self.factors.source,
            "years": rows,
            "valuations": [] if history is None else [_text(date) for date in history.dates],
            "counts": None if history is None else _plain(history.counts),
            "amounts": None if history is None else _plain(history.amounts),
        }


def find_factors(development: Development, years: int, history: History | None) -> Factors:
    """Factors of every year, given or estimated.

    Args:
        development: what is asked for.
        years: number of years of the window.
        history: the triangles, where factors are to be estimated.

    Raises:
        InputError: a history too thin for the factors asked of it.
    """

    def of(name: str, triangle: FloatArray | None, first: FloatArray | None) -> FloatArray:
        given, tail = getattr(development, f"{name}_factors"), getattr(development, f"{name}_tail")
        if given is not None:
            return by_age(given, years)
        if tail is None or triangle is None:
            return np.ones(years)
        return to_ultimate(link_factors(triangle, first), tail)[::-1]

    given = any(getattr(development, f"{name}_factors") is not None for name in ("count", "amount", "open"))
    source = " and ".join(
        word for word, used in (("given", given), ("history", development.from_history)) if used
    )
    counts, amounts = (None, None) if history is None else (history.counts, history.amounts)
    first_counts, first_amounts = (
        (None, None) if history is None else (history.first_counts, history.first_amounts)
    )
    return Factors(
        count=of("count", counts, first_counts),
        amount=of("amount", amounts, first_amounts),
        open=_open(development, years, history),
        source=source,
        history=history,
    )


def _open(development: Development, years: int, history: History | None) -> FloatArray | None:
    if development.open_factors is not None:
        return by_age(development.open_factors, years)
    if development.open_tail is None or history is None:
        return None
    parts = (history.open_before, history.open_closed, history.open_still)
    factors = open_claim_factors(*parts, development.open_tail)[::-1]
    if not (factors > 0).all():
        raise InputError(
            "open claims of the history came to nothing, which gives no factor",
            value=factors.tolist(),
            remedy="Give open-factors by age.",
        )
    return factors


def develop_years(
    development: Development,
    factors: Factors,
    year: IntArray,
    exposure: FloatArray,
    count: FloatArray,
    amount: FloatArray,
) -> Developed:
    """Develop the reported years by every method that has what it needs.

    Args:
        development: what is asked for.
        factors: factors of the years.
        year: calendar years; shape (years,).
        exposure: exposure observed of each; shape (years,).
        count: events reported; shape (years,).
        amount: amount reported; shape (years,).
    """

    def ferguson(prior: float | None, reported: FloatArray, factor: FloatArray) -> FloatArray | None:
        return None if prior is None else bornhuetter_ferguson(reported, prior * exposure, factor)

    return Developed(
        year=year,
        factors=factors,
        method=development.method,
        count=count,
        count_chain_ladder=chain_ladder(count, factors.count),
        count_bornhuetter_ferguson=ferguson(development.a_priori_count, count, factors.count),
        amount=amount,
        amount_chain_ladder=chain_ladder(amount, factors.amount),
        amount_bornhuetter_ferguson=ferguson(development.a_priori_amount, amount, factors.amount),
    )


def _plain(triangle: FloatArray) -> list[list[float | None]]:
    return [[None if np.isnan(value) else value for value in row] for row in triangle.tolist()]


def _text(date: dt.date) -> str:
    return date.isoformat()
