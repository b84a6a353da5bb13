"""From lines and covers to an assessment: three engines, the crosscheck, and the figures."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence

from lossagg.arrays import FloatArray
from lossagg.engines import Fourier, Panjer, Simulation
from lossagg.engines.book import GROSS, NET, Book, Subject
from lossagg.engines.crosscheck import crosscheck
from lossagg.engines.result import AnnualLoss, BookResult
from lossagg.portfolio.alarms import alarms_data
from lossagg.portfolio.allocating import allocation_data
from lossagg.portfolio.assessment import (
    WITHHELD,
    Data,
    cover_of,
    crosscheck_of,
    headline_of,
    label_of,
    levels_of,
    number,
    subject_of,
)
from lossagg.portfolio.by_line import by_line_of
from lossagg.portfolio.dependences import bounds_data, independent_data
from lossagg.portfolio.evidence import line_evidence
from lossagg.portfolio.line import LineModel
from lossagg.portfolio.predictive import predictive_data
from lossagg.portfolio.sanity import sanity_data
from lossagg.portfolio.years import years_near

Progress = Callable[[str, float], None]
"""Called with what is being done and the fraction of the whole that is done."""
EveryYear = Callable[[int, Mapping[Subject, FloatArray]], None]
"""Called with the number of the first of some simulated years and the amounts of every subject in them."""


def silent(stage: str, done: float) -> None:
    """No progress shown."""


def compute(
    book: Book,
    simulation: Simulation,
    *,
    progress: Progress = silent,
    every_year: EveryYear | None = None,
) -> dict[str, BookResult]:
    """What each engine makes of the book, by engine name.

    Args:
        book: lines and covers.
        simulation: the simulation engine with its settings.
        progress: called with the stage and the fraction done.
        every_year: receives the simulated years, see `Simulation.book`.
    """
    results = {
        "simulation": simulation.book(book, lambda done: progress("simulation", 0.1 + 0.4 * done), every_year)
    }
    progress("Fourier transforms", 0.5)
    results["fourier"] = Fourier().book(book)
    progress("Panjer recursion", 0.75)
    results["panjer"] = Panjer().book(book)
    progress("crosscheck", 0.9)
    return {name: results[name] for name in ("fourier", "panjer", "simulation")}


def figures(
    book: Book,
    evidence: Sequence[Data],
    results: dict[str, BookResult],
    levels: Sequence[float],
    capital_level: float,
    broken: str = "",
    *,
    years: int,
    seed: int,
    apart: Mapping[Subject, AnnualLoss] | None = None,
    models: Sequence[LineModel] = (),
) -> Data:
    """Lines (with their `evidence_of`), gross, net, covers, crosscheck and headline of the assessment; the
    years nearest to it, and gross and net of independent lines (`apart`) where the book has dependences; the
    headline with the parameters drawn and the means that may not exist, where `models` gives the fits.
    """
    asked = tuple(sorted({*levels, capital_level}))
    check = crosscheck(book, results, asked)
    withheld = broken or ("" if check.agrees else WITHHELD)
    best = {subject: _best(results, subject) for subject in book.subjects}

    reported = {subject: loss for subject, (loss, _) in best.items()}

    def whole(subject: Subject) -> Data:
        loss, exact = best[subject]
        note = None if exact else results["fourier"].refused.get(subject)
        return subject_of(loss, levels, exact=exact, withheld=withheld, note=note)

    headline = NET if book.covers else GROSS
    return {
        "headline": headline_of(
            headline,
            best[headline][0],
            capital_level,
            check,
            withheld=broken,
            label=label_of({line["name"]: line["label"] is None for line in evidence}),
        ),
        "lines": [
            _line(entry, best[Subject("line", entry["name"])][0], levels, withheld=withheld)
            for entry in evidence
        ],
        "by_line": by_line_of(results["simulation"], levels, withheld=withheld),
        "gross": whole(GROSS),
        "net": whole(NET),
        "covers": [
            cover_of(book, cover, best[Subject("cover", cover.name)][0], levels, withheld=withheld)
            for cover in book.covers
        ],
        "allocation": allocation_data(
            book,
            reported,
            results["simulation"].losses,
            capital_level,
            withheld=withheld,
        ),
        "crosscheck": crosscheck_of(check),
        "sanity": sanity_data(book, reported, asked, withheld=withheld),
        "years_near_capital": None
        if withheld
        else years_near(
            book,
            headline,
            results["simulation"].losses[headline],
            best[headline][0].value_at_risk(capital_level),
            seed=seed,
            years=years,
        ),
        "alarms": alarms_data(book, models),
        "predictive": predictive_data(
            *(book, models, reported, asked),
            simulated=results["simulation"].losses,
            seed=seed,
            withheld=withheld,
        ),
        "dependence_bounds": bounds_data(
            book,
            reported,
            None if apart is None else apart[GROSS],
            capital_level,
            withheld=withheld,
        ),
        "independent": None
        if apart is None
        else independent_data(apart, reported, book, levels, withheld=withheld),
    }


def evidence_of(lines: Sequence[LineModel]) -> list[Data]:
    """What is known of every line without the engines: records, fits, tests, tail."""
    return [
        {**line_evidence(line), "expense": line.expense, "sum_insured": line.sum_insured} for line in lines
    ]


def _line(entry: Data, loss: AnnualLoss, levels: Sequence[float], *, withheld: str) -> Data:
    return {
        **entry,
        "mean": None if withheld else number(loss.mean()),
        "sd": None if withheld else number(loss.sd()),
        "levels": levels_of(loss, levels, withheld=withheld),
    }


def _best(results: dict[str, BookResult], subject: Subject) -> tuple[AnnualLoss, bool]:
    """The result reported for a subject, and whether it comes from an exact engine."""
    for name in ("fourier", "panjer"):
        if subject in results[name].losses:
            return results[name].losses[subject], True
    return results["simulation"].losses[subject], False
