"""The gate: what it lets pass, what it stops, and what it says."""

from collections.abc import Mapping

import numpy as np
import pytest

import lossagg
from lossagg.cover import Cover
from lossagg.engines.book import GROSS, Book, Line, PlacedCover, Subject
from lossagg.engines.crosscheck import Comparison, Crosscheck, crosscheck
from lossagg.engines.result import BookResult
from lossagg.engines.sampled import SimulatedAnnualLoss

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


def test_every_comparison_states_its_tolerance_and_how_much_of_it_was_used() -> None:
    result = check(one_line(lossagg.Poisson(mean=3), lossagg.Exponential(mean=10)))
    for comparison in result.comparisons:
        assert comparison.tests
        for test in comparison.tests:
            assert 0 <= test.used <= 1
            assert test.used == pytest.approx(test.difference / test.allowed)
    units = {test.unit for test in find(result, "value_at_risk", 0.99).tests}
    assert units == {"of the way from the figure to the end of its bracket", "years beyond"}
    (allowed,) = {test.allowed for test in find(result, "mean").tests if test.engine == "simulation"}
    assert allowed == 4.0
    beyond = next(test for test in find(result, "value_at_risk", 0.99).tests if test.engine == "simulation")
    assert beyond.allowed == pytest.approx(4 * np.sqrt(20_000 * 0.99 * 0.01) + 1)


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
    assert max(test.used for test in find(result, "value_at_risk", 0.99).tests) > 1


def test_engines_that_differ_on_whether_a_mean_exists_are_stopped() -> None:
    book = one_line(lossagg.Poisson(mean=3), lossagg.Pareto(alpha=0.9, minimum=1))
    capped = one_line(lossagg.Poisson(mean=3), lossagg.Pareto(alpha=1.5, minimum=1))
    result = crosscheck(
        book,
        {"fourier": lossagg.Fourier().book(book), "simulation": lossagg.Simulation(years=2000).book(capped)},
        LEVELS,
    )
    assert "differ on whether it exists" in (find(result, "mean").note or "")


def _tilted_back_by_less(monkeypatch: pytest.MonkeyPatch) -> None:
    """The sequence is not tilted back by as much as it was tilted."""
    from lossagg.engines.transform import LatticeTransform

    right = LatticeTransform._back

    def wrong(self: LatticeTransform, product: np.ndarray, **options: bool) -> object:
        kept, self._weights = self._weights, self._weights**0.9
        result = right(self, product, **options)
        self._weights = kept
        return result

    monkeypatch.setattr(LatticeTransform, "_back", wrong)


def _moved_lattice(monkeypatch: pytest.MonkeyPatch) -> None:
    """Every payment is put one lattice point too high, in whole numbers, as an integer-typed grid does."""
    from lossagg.engines.sampling import Masses

    right = Masses._padded

    def wrong(self: Masses, masses: np.ndarray) -> np.ndarray:
        return np.insert(right(self, masses)[:-1], 0, 0.0)

    monkeypatch.setattr(Masses, "_padded", wrong)


def _slipped_kernel(monkeypatch: pytest.MonkeyPatch) -> None:
    """The recursion divides by the wrong index."""
    from lossagg.kernels import recursion

    right = recursion.panjer_recursion

    def wrong(a: float, b: float, remainder: float, masses: np.ndarray, points: int) -> object:
        return right(a, b * 1.01, remainder, masses, points)

    monkeypatch.setattr(recursion, "panjer_recursion", wrong)


def _lost_line(monkeypatch: pytest.MonkeyPatch) -> None:
    """Adding up the lines leaves a tenth of the last one's losses out."""
    from lossagg.engines.transform import LatticeTransform

    right = LatticeTransform.__init__

    def wrong(self: LatticeTransform, *given: object) -> None:
        right(self, *given)  # type: ignore[arg-type]
        last = self.lines[-1]
        if len(self.lines) > 1:
            self.lines[-1] = last._replace(frequency=last.frequency.with_exposure(0.9))

    monkeypatch.setattr(LatticeTransform, "__init__", wrong)


@pytest.mark.parametrize("plant", [None, _tilted_back_by_less, _moved_lattice, _slipped_kernel, _lost_line])
def test_a_planted_fault_trips_the_gate(plant: object, monkeypatch: pytest.MonkeyPatch) -> None:
    """In the tilt, the lattice, the kernel and the combination of lines; without a fault nothing trips. The
    exact engines find it between themselves, with no simulation to help."""
    book = Book(
        lines=(
            Line(name="A", frequency=lossagg.Poisson(mean=4), severity=lossagg.Lomax(alpha=1.8, scale=10)),
            Line(
                name="B",
                frequency=lossagg.NegativeBinomial(mean=2, dispersion=0.5),
                severity=lossagg.Lognormal(mu=2, sigma=1),
            ),
        )
    )
    if plant is not None:
        plant(monkeypatch)  # type: ignore[operator]
    engines = (lossagg.Fourier(points=2**14, step=0.5), lossagg.Panjer(points=2**12, step=2.0))
    result = crosscheck(book, {engine.name: engine.book(book) for engine in engines}, LEVELS)
    assert result.agrees == (plant is None)
    gross = [c for c in result.comparisons if c.subject == GROSS]
    assert all(c.agrees for c in gross) == (plant is None)


def test_averages_are_compared_no_further_than_the_lattice_reaches() -> None:
    """A lattice that ends at the amount exceeded once in 100 years, and 20 of 10,000 years beyond the cap:
    what lies beyond the lattice is known by a wide bracket only, and is no ground for an alarm."""
    book = one_line(lossagg.Poisson(mean=20), lossagg.Lomax(alpha=2.3, scale=10))
    whole = lossagg.Fourier().book(book)
    top = whole.losses[GROSS].value_at_risk(0.99)
    short = lossagg.Fourier(points=4096, step=top / 4096).book(book)
    simulated = lossagg.Simulation(years=10_000, seed=3).book(book)
    result = crosscheck(book, {"fourier": short, "simulation": simulated}, LEVELS)
    assert result.agrees, result.summary


def test_a_long_tail_raises_no_alarm_on_the_deviation() -> None:
    """40 seeds of a clean model whose sample's own error of the deviation is far too small: with that error
    one seed in fifteen was stopped. At four standard errors 0.01 alarms are expected."""
    layer = PlacedCover(name="Layer", terms=Cover(deductible=1e5, limit=1e6))
    book = one_line(lossagg.Poisson(mean=0.5), lossagg.Lognormal(mu=11, sigma=1.5), layer)
    exact = lossagg.Fourier().book(book)
    apart = []
    for seed in range(40):
        simulated = lossagg.Simulation(years=40_000, seed=seed).book(book)
        found = crosscheck(book, {"fourier": exact, "simulation": simulated}, ())
        assert found.agrees, found.summary
        apart += [find(found, "sd", subject=subject).tests[0].difference for subject in book.subjects]
    assert 0.5 < np.sqrt(np.mean(np.square(apart))) < 1.3


def test_a_deviation_three_per_cent_too_large_is_stopped() -> None:
    """Years spread out about their mean, which stays: only the deviation and the quantiles tell."""
    book = one_line(lossagg.Poisson(mean=30), lossagg.Gamma(shape=2, scale=100))
    results = {"fourier": lossagg.Fourier().book(book)}
    honest = lossagg.Simulation(years=50_000, seed=1).book(book)
    for factor, agrees in ((1.0, True), (1.03, False)):
        losses = {
            subject: SimulatedAnnualLoss(loss.mean() + factor * (loss.annual - loss.mean()), np.inf)
            for subject, loss in honest.losses.items()
        }
        found = crosscheck(book, {**results, "simulation": BookResult(losses)}, ())
        assert find(found, "mean").agrees
        assert find(found, "sd").agrees == agrees
