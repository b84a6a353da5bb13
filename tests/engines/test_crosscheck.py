"""The gate: what it lets pass, what it stops, and what it says."""

from collections.abc import Mapping

import numpy as np
import pytest

import lossagg
from lossagg.cover import Cover
from lossagg.engines.book import GROSS, Book, Line, PlacedCover, Subject
from lossagg.engines.crosscheck import Comparison, Crosscheck, crosscheck
from lossagg.engines.result import BookResult

LEVELS = (0.9, 0.99)


def one_line(frequency, severity, *covers: PlacedCover) -> Book:
    return Book(lines=(Line(name="A", frequency=frequency, severity=severity),), covers=covers)


def check(book: Book, seed: int = 1, years: int = 20_000) -> Crosscheck:
    engines = (lossagg.Fourier(), lossagg.Panjer(), lossagg.Simulation(years=years, seed=seed))
    return crosscheck(book, {engine.name: engine.book(book) for engine in engines}, LEVELS)


def find(
    result: Crosscheck, measure: str, level: float | None = None, subject: Subject = GROSS
) -> Comparison:
    return next(c for c in result.comparisons if (c.subject, c.measure, c.level) == (subject, measure, level))


@pytest.mark.parametrize(
    "book",
    [
        pytest.param(
            one_line(
                lossagg.Poisson(mean=2), lossagg.SizeTable(sizes=[0, 1, 2], probabilities=[0.2, 0.5, 0.3])
            ),
            id="atoms",
        ),
        pytest.param(one_line(lossagg.Poisson(mean=0.02), lossagg.Exponential(mean=10)), id="mostly zero"),
        pytest.param(
            one_line(lossagg.Poisson(mean=3), lossagg.Pareto(alpha=0.9, minimum=1)), id="infinite mean"
        ),
        pytest.param(
            one_line(lossagg.Poisson(mean=3), lossagg.Lomax(alpha=1.8, scale=10)), id="infinite variance"
        ),
        pytest.param(
            one_line(
                lossagg.NegativeBinomial(mean=5, dispersion=0.4),
                lossagg.Lognormal(mu=2, sigma=1),
                PlacedCover(name="Stop loss", terms=Cover(annual_retention=30, annual_limit=40)),
            ),
            id="stop loss",
        ),
    ],
)
def test_clean_models_agree(book: Book) -> None:
    result = check(book)
    assert result.agrees, result.summary
    assert result.summary == f"All {len(result.comparisons)} comparisons between the engines agree."


def test_false_alarms_are_rare() -> None:
    """60 seeds of a clean heavy-tailed model: at four standard errors 0.02 alarms are expected."""
    book = one_line(lossagg.Poisson(mean=3), lossagg.Lomax(alpha=2.2, scale=10))
    exact = {engine.name: engine.book(book) for engine in (lossagg.Fourier(), lossagg.Panjer())}
    stopped = 0
    for seed in range(60):
        simulated = lossagg.Simulation(years=5000, seed=seed).book(book)
        stopped += not crosscheck(book, {**exact, "simulation": simulated}, LEVELS).agrees
    assert stopped == 0


def test_standard_errors_of_the_mean_come_from_the_exact_moments() -> None:
    """Compound Poisson: variance = mean count times second moment of the size (closed form); the part
    beyond the cap, exceeded by 20 in 20,000 years, takes a little away."""
    result = check(one_line(lossagg.Poisson(mean=3), lossagg.Exponential(mean=10)))
    assert find(result, "mean").standard_error == pytest.approx(np.sqrt(3 * 200 / 20_000), rel=0.01)


def test_averages_are_compared_even_where_no_variance_exists() -> None:
    result = check(one_line(lossagg.Poisson(mean=3), lossagg.Lomax(alpha=1.8, scale=10)))
    assert (find(result, "mean").standard_error or 0) > 0
    assert (find(result, "tail_value_at_risk", 0.99).standard_error or 0) > 0


def test_too_few_years_beyond_a_level_are_not_compared_and_said() -> None:
    result = check(one_line(lossagg.Poisson(mean=3), lossagg.Exponential(mean=10)), years=2000)
    comparison = find(result, "tail_value_at_risk", 0.99)
    assert comparison.agrees
    assert comparison.note == "not compared with the simulation: it has only 20 years beyond the level"


def scaled(result: BookResult, factor: float) -> BookResult:
    from lossagg.engines.sampled import SimulatedAnnualLoss

    losses = {
        subject: SimulatedAnnualLoss(loss.ordered * factor, loss.moment_order, loss.most)
        for subject, loss in result.losses.items()
    }
    return BookResult(losses=losses)


@pytest.mark.parametrize("factor", [0.97, 1.03])
def test_a_simulation_off_by_three_per_cent_is_stopped_and_named(factor: float) -> None:
    book = one_line(lossagg.Poisson(mean=20), lossagg.Gamma(shape=2, scale=5))
    results: Mapping[str, BookResult] = {
        "fourier": lossagg.Fourier().book(book),
        "simulation": scaled(lossagg.Simulation(years=50_000).book(book), factor),
    }
    result = crosscheck(book, results, LEVELS)
    assert not result.agrees
    assert "standard errors from fourier, up to" in (find(result, "mean").note or "")
    assert "years" in (find(result, "value_at_risk", 0.9).note or "")
    assert "disagree; the widest gap is the" in result.summary


def test_exact_engines_outside_each_others_bracket_are_stopped_and_named() -> None:
    book = one_line(lossagg.Poisson(mean=4), lossagg.Exponential(mean=10))
    other = one_line(lossagg.Poisson(mean=4), lossagg.Exponential(mean=10.2))
    result = crosscheck(
        book, {"fourier": lossagg.Fourier().book(book), "panjer": lossagg.Panjer().book(other)}, LEVELS
    )
    assert not result.agrees
    assert "is outside panjer's bracket" in (find(result, "value_at_risk", 0.99).note or "")


def test_engines_that_differ_on_whether_a_mean_exists_are_stopped() -> None:
    book = one_line(lossagg.Poisson(mean=3), lossagg.Pareto(alpha=0.9, minimum=1))
    capped = one_line(lossagg.Poisson(mean=3), lossagg.Pareto(alpha=1.5, minimum=1))
    result = crosscheck(
        book,
        {"fourier": lossagg.Fourier().book(book), "simulation": lossagg.Simulation(years=2000).book(capped)},
        LEVELS,
    )
    assert "differ on whether it exists" in (find(result, "mean").note or "")
