"""Dependence in an assessment: what was assumed, on what evidence, and the figures without it.

Beside the figure stand two others: the lines independent of each other, and the sum of the lines' own
values at risk, which is the figure without any credit for diversification (comonotonic lines). The order of
the three is no law: where means are infinite the sum of the lines' own figures may be the smallest.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from lossagg.engines.book import GROSS, NET, Book, Subject
from lossagg.engines.correlation import correlation_interval
from lossagg.engines.dependence import Copula, Dependence
from lossagg.engines.result import AnnualLoss
from lossagg.engines.worst_case import worst_value_at_risk
from lossagg.errors import InputError, place
from lossagg.portfolio.assessment import Data, figure, levels_of, number
from lossagg.portfolio.dependence_sections import DependenceSection, given_dependence

GAUSSIAN = (
    "a Gaussian copula makes extreme years of different lines independent in the limit, however high the "
    "correlation: good practice does not rest tail figures on it (Delegated Regulation (EU) 2018/959, "
    "article 34). Compare with a t copula or a shared factor."
)
NO_EVIDENCE = (
    "no evidence is stated for it. Until there is, the figure without credit for diversification is the "
    "sum of the lines' own figures, printed beside."
)
DEPENDENT = (
    "How the lines depend on each other is an assumption, listed with its evidence; so is the independence "
    "of all that is not listed. Compare the figures without it: lines independent, and the sum of the lines' "
    "own figures."
)

# Of the tail of each line: within a thousandth of the worst case for tails as heavy as alpha 2.
SLICES = 1000


@dataclass(frozen=True)
class Assumed:
    """A dependence of the portfolio file: what it is, its kind, its evidence and how many years of it there
    are, what had to be changed."""

    dependence: Dependence
    kind: str
    evidence: str | None
    years: int | None
    change: str


def assumed(sections: Sequence[DependenceSection], names: Sequence[str]) -> tuple[Assumed, ...]:
    """The dependences of a portfolio file.

    Args:
        sections: its `[[dependence]]` tables.
        names: names of its lines.

    Raises:
        InputError: an unknown line or a correlation matrix that is none, with the key of the table.
    """
    found = []
    for k, section in enumerate(sections, start=1):
        for name in section.lines:
            if name not in names:
                raise InputError(
                    "the dependence names a line that does not exist",
                    where=place(file="portfolio.toml", key=f"dependence[{k}].lines"),
                    value=name,
                    remedy=f"Lines: {', '.join(names)}.",
                )
        dependence, change = given_dependence(section, f"dependence[{k}]")
        found.append(Assumed(dependence, section.kind, section.evidence, section.evidence_years, change))
    return tuple(found)


def dependence_cautions(found: Sequence[Assumed]) -> list[dict[str, str]]:
    """What a reader must know of the dependences assumed."""
    cautions = [{"code": "dependence", "message": DEPENDENT}] if found else []
    for own in found:
        copula = isinstance(own.dependence, Copula)
        notes = (
            ("gaussian-copula", GAUSSIAN, copula and own.kind == "gaussian-copula"),
            ("dependence-without-evidence", NO_EVIDENCE, not own.evidence),
            ("nearest-correlation", f"{own.change}.", bool(own.change)),
        )
        for code, message, applies in notes:
            if applies:
                text = f"Dependence {own.dependence.name!r}: {message}"
                cautions.append({"code": code, "message": text})
    return cautions


def dependence_data(found: Sequence[Assumed]) -> list[Data]:
    """`dependence` of the assessment: every assumption with its evidence."""
    return [
        {
            "name": own.dependence.name,
            "kind": own.kind,
            "lines": list(own.dependence.lines),
            "description": own.dependence.describe(),
            "evidence": own.evidence,
            "evidence_years": own.years,
            "correlations": _correlations(own),
            "change": own.change or None,
        }
        for own in found
    ]


def _correlations(own: Assumed) -> list[Data]:
    """Every pair of a copula with the interval that the years behind it leave; no interval without years."""
    copula = own.dependence
    if not isinstance(copula, Copula):
        return []
    pairs = []
    for i, first in enumerate(copula.lines):
        for j in range(i + 1, len(copula.lines)):
            value = float(copula.matrix[i, j])
            low, high = (None, None) if own.years is None else correlation_interval(value, own.years)
            pairs.append({"lines": [first, copula.lines[j]], "value": value, "low": low, "high": high})
    return pairs


def independent_losses(
    book: Book, *, years: int, seed: int, workers: int | None
) -> dict[Subject, AnnualLoss]:
    """Gross and net of the same lines taken as independent: exactly where possible, else simulated."""
    from lossagg.engines import Fourier, Simulation

    apart = book.independent()
    exact = Fourier().book(apart)
    wanted = (GROSS, NET)
    found: dict[Subject, AnnualLoss] = {s: exact.losses[s] for s in wanted if s in exact.losses}
    if len(found) < len(wanted):
        simulated = Simulation(years=years, seed=seed, workers=workers).book(apart)
        found |= {subject: simulated.losses[subject] for subject in wanted if subject not in found}
    return found


def independent_data(
    losses: Mapping[Subject, AnnualLoss],
    best: Mapping[Subject, AnnualLoss],
    book: Book,
    levels: Sequence[float],
    *,
    withheld: str,
) -> Data:
    """`independent` of the assessment: gross and net if the lines were independent, and the sum of the
    lines' own values at risk.

    Args:
        losses: gross and net of independent lines.
        best: the figure reported of every subject of the book.
        book: the book.
        levels: levels of the figures.
        withheld: why figures are withheld, "" where they are not.
    """
    own = [best[Subject("line", line.name)] for line in book.lines]
    data: Data = {}
    for subject in (GROSS, NET):
        loss = losses[subject]
        data[subject.kind] = {
            "mean": None if withheld else number(loss.mean()),
            "sd": None if withheld else number(loss.sd()),
            "engine": loss.engine,
            "levels": levels_of(loss, levels, withheld=withheld),
        }
    data["sum_of_lines"] = [
        {
            "level": level,
            "var": _sum([figure(loss, "value_at_risk", level, withheld=withheld) for loss in own]),
        }
        for level in levels
    ]
    return data


def bounds_data(
    book: Book,
    best: Mapping[Subject, AnnualLoss],
    apart: AnnualLoss | None,
    level: float,
    *,
    withheld: str,
) -> Data | None:
    """`dependence_bounds` of the assessment: gross VaR at the capital level if the lines were independent, as
    assumed, comonotonic, and in the worst dependence there is. None for a portfolio of one line.

    Args:
        book: the lines and how they depend on each other.
        best: the annual loss reported of gross and of every line.
        apart: gross of independent lines; None where the lines are taken as independent.
        level: the capital level.
        withheld: why figures are withheld, "" where they are not.
    """
    if len(book.lines) < 2:
        return None
    own = [best[Subject("line", line.name)] for line in book.lines]
    chosen = figure(best[GROSS], "value_at_risk", level, withheld=withheld)
    added = _sum([figure(loss, "value_at_risk", level, withheld=withheld) for loss in own])
    low, high = (None, None) if withheld else worst_value_at_risk(own, level, SLICES)
    return {
        "level": level,
        "independent": figure(apart or best[GROSS], "value_at_risk", level, withheld=withheld),
        "chosen": chosen,
        "comonotonic": added,
        "worst": {"value": high, "low": low, "high": high, "engine": None, "reason": withheld or None},
        "subadditive": None if withheld else chosen["value"] <= added["value"] * (1.0 + 1e-9),
    }


def _sum(figures: list[Data]) -> Data:
    """The sum of figures and of their ranges; None where one of them is."""

    def total(key: str) -> float | None:
        values = [entry[key] for entry in figures]
        return None if any(value is None for value in values) else float(np.sum(values))

    reasons = [entry["reason"] for entry in figures if entry["reason"]]
    return {
        **{key: total(key) for key in ("value", "low", "high")},
        "engine": figures[0]["engine"],
        "reason": reasons[0] if reasons else None,
    }
