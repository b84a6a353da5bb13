"""Runs of the simulation: reduced and whole, parts of lines, every year in order, stopping, refusals."""

import logging

import numpy as np
import pytest
from scipy import stats

import lossagg.engines.simulation as simulation
from lossagg.cover import Cover
from lossagg.engines.blocks import block_events, prepare_line
from lossagg.engines.book import GROSS, NET, Book, Line, PlacedCover, Subject
from lossagg.engines.by_line import detail_subjects
from lossagg.engines.largest import LargestYears
from lossagg.engines.reduced import ReducedAnnualLoss
from lossagg.engines.sampled import SimulatedAnnualLoss
from lossagg.engines.simulation import Simulation
from lossagg.engines.stopping import miss_at, relative_width, years_at
from lossagg.engines.streams import BLOCK_YEARS
from lossagg.errors import EngineError, InputError
from lossagg.families import Exponential, Lognormal, Pareto, Poisson

FIRE = Line(name="fire", frequency=Poisson(mean=2.0), severity=Pareto(alpha=1.8, minimum=5000.0))
MOTOR = Line(name="motor", frequency=Poisson(mean=8.0), severity=Lognormal(mu=8.0, sigma=1.2))
LAYER = PlacedCover(name="layer", terms=Cover(deductible=10_000.0, limit=90_000.0, share=0.8))
STOP = PlacedCover(
    name="stop", terms=Cover(annual_retention=60_000.0, annual_limit=200_000.0), after=("layer",)
)
CAPPED = PlacedCover(name="capped", terms=Cover(deductible=3000.0, retained_cap=9000.0), lines=("motor",))
BOOK = Book(lines=(FIRE, MOTOR), covers=(LAYER, STOP))


@pytest.fixture
def reduce_early(monkeypatch):
    """Two blocks are too many to keep whole."""
    monkeypatch.setattr(simulation, "MOST_WHOLE", BLOCK_YEARS)
    monkeypatch.setattr(simulation, "MOST_WHOLE_BYTES", 0)


def test_reduced_and_whole_runs_agree(reduce_early, monkeypatch):
    """The same years, once reduced: figures within the stated error, largest years to the bit."""
    reduced = Simulation(years=2 * BLOCK_YEARS + 100).book(BOOK)
    monkeypatch.setattr(simulation, "MOST_WHOLE", 10 * BLOCK_YEARS)
    whole = Simulation(years=2 * BLOCK_YEARS + 100).book(BOOK)
    for subject in (*BOOK.subjects, *detail_subjects(BOOK)):
        ours = {**reduced.losses, **reduced.details}[subject]
        theirs = {**whole.losses, **whole.details}[subject]
        assert isinstance(ours, ReducedAnnualLoss)
        assert isinstance(theirs, SimulatedAnnualLoss)
        assert (ours.years, ours.moment_order, ours.most) == (
            theirs.years,
            theirs.moment_order,
            theirs.most,
        )
        assert ours.mean() == pytest.approx(theirs.mean(), rel=1e-12)
        for level in (0.5, 0.9, 0.995):
            assert ours.value_at_risk(level) == pytest.approx(theirs.value_at_risk(level), rel=3e-4)
    for subject in (GROSS, NET):
        ours, theirs = reduced.largest_years[subject], whole.largest_years[subject]
        np.testing.assert_array_equal(ours.years, theirs.years)
        np.testing.assert_array_equal(
            theirs.years, np.argsort(-whole.losses[subject].annual, kind="stable")[: theirs.years.size]
        )
        for other in (*BOOK.subjects, *detail_subjects(BOOK)):
            np.testing.assert_array_equal(ours.amounts[other], theirs.amounts[other])


def test_workers_do_not_reach_the_reduced_bytes(reduce_early):
    one, three = (Simulation(years=5 * BLOCK_YEARS, workers=workers).book(BOOK) for workers in (1, 3))
    for subject, loss in one.losses.items():
        ours, theirs = loss.reduced, three.losses[subject].reduced
        assert ours.moments == theirs.moments
        for name in ("largest", "count", "low", "high"):
            np.testing.assert_array_equal(getattr(ours, name), getattr(theirs, name))
    np.testing.assert_array_equal(one.largest_years[NET].years, three.largest_years[NET].years)


def test_parts_of_lines_against_their_events():
    """Largest losses from the replayed events; ceded of a cover without annual terms loss by loss; parts
    add up line by line and over the lines."""
    years = 3000
    for book in (BOOK, Book(lines=(FIRE, MOTOR), covers=(LAYER, CAPPED))):
        result = Simulation(years=years).book(book)
        amounts = {s: loss.annual for s, loss in {**result.losses, **result.details}.items()}
        largest = []
        for line in book.lines:
            counts, sizes = block_events(
                prepare_line(line, book, book.subjects), seed=1, block=0, first=0, last=years
            )
            own = np.split(sizes, np.cumsum(counts)[:-1])
            largest.append([losses.max(initial=0.0) for losses in own])
            np.testing.assert_array_equal(amounts[Subject("largest", line.name)], largest[-1])
            parts = amounts[Subject("ceded", line.name)] + amounts[Subject("retained", line.name)]
            np.testing.assert_allclose(parts, amounts[Subject("line", line.name)], rtol=1e-12)
        np.testing.assert_array_equal(amounts[Subject("largest")], np.max(largest, axis=0))
        for kind, covers in (("ceded", [c.name for c in book.covers]), ("retained", None)):
            over_lines = sum(amounts[Subject(kind, line.name)] for line in book.lines)
            whole = sum(amounts[Subject("cover", c)] for c in covers) if covers else amounts[NET]
            np.testing.assert_allclose(over_lines, whole, rtol=1e-9, atol=1e-6)


def test_a_cover_per_event_pays_each_line_its_own():
    """Without annual terms the share of a line is what the cover pays of the line's losses."""
    book = Book(lines=(FIRE, MOTOR), covers=(LAYER,))
    ceded = Simulation(years=2000).book(book).details[Subject("ceded", "fire")].annual
    counts, sizes = block_events(prepare_line(FIRE, book, book.subjects), seed=1, block=0, first=0, last=2000)
    paid = 0.8 * np.clip(sizes - 10_000.0, 0.0, 90_000.0)
    expected = [part.sum() for part in np.split(paid, np.cumsum(counts)[:-1])]
    np.testing.assert_allclose(ceded, expected, rtol=1e-12)


@pytest.mark.parametrize("workers", [1, 3])
def test_every_year_is_handed_over_in_order(workers):
    seen = []
    result = Simulation(years=3 * BLOCK_YEARS + 7, workers=workers).book(
        BOOK, every_year=lambda first, amounts: seen.append((first, amounts))
    )
    assert [first for first, _ in seen] == [0, BLOCK_YEARS, 2 * BLOCK_YEARS, 3 * BLOCK_YEARS]
    for subject, loss in {**result.losses, **result.details}.items():
        np.testing.assert_array_equal(np.concatenate([part[subject] for _, part in seen]), loss.annual)


def test_largest_years_break_ties_by_year():
    subject = Subject("line", "x")
    amounts = np.random.default_rng(1).integers(0, 20, 5000).astype(float)
    expected = np.argsort(-amounts, kind="stable")[:300]
    for order in ([0, 1, 2, 3, 4], [4, 2, 0, 1, 3]):
        largest = LargestYears((subject,), 300)
        for part in order:
            own = amounts[part * 1000 : (part + 1) * 1000]
            largest.add(part * 1000, own, {subject: own})
        kept = largest.result()
        np.testing.assert_array_equal(kept.years, expected)
        np.testing.assert_array_equal(kept.amounts[subject], amounts[expected])


def test_looks_may_miss_one_time_in_twenty_together():
    assert sum(miss_at(look) for look in range(60)) == pytest.approx(0.05)
    assert [years_at(look, 100_000) // BLOCK_YEARS for look in range(4)] == [4, 5, 7, 11]


@pytest.mark.parametrize("width", [0.02, 0.01])
def test_a_run_stops_when_its_interval_is_narrow(width, caplog):
    """It says what it expects, meets the width, and is the run of that many years, whatever the workers."""
    model = Poisson(mean=5.0), Lognormal(mu=9.0, sigma=1.0)
    with caplog.at_level(logging.INFO, logger="lossagg"):
        loss = Simulation(until=width, level=0.99, workers=2).annual_loss(*model)
    assert relative_width(loss, 0.99) <= width
    assert loss.miss in {miss_at(look) for look in range(2)}
    assert loss.years % BLOCK_YEARS == 0
    assert any("of memory for them expected" in message for message in caplog.messages)
    again = Simulation(until=width, level=0.99, workers=1).annual_loss(*model)
    assert (again.years, again.value_at_risk(0.99)) == (loss.years, loss.value_at_risk(0.99))
    fixed = Simulation(years=loss.years).annual_loss(*model)
    assert fixed.value_at_risk(0.99) == loss.value_at_risk(0.99)


def test_a_run_that_stops_may_go_over_to_reduced_amounts(reduce_early, monkeypatch):
    """Looks that find the interval too wide go on with the years there are."""
    monkeypatch.setattr(simulation, "years_for", lambda width, pilot, level: BLOCK_YEARS)
    loss = Simulation(until=0.01, level=0.99).annual_loss(Poisson(mean=1.0), Exponential(mean=1000.0))
    assert isinstance(loss, ReducedAnnualLoss)
    assert loss.years > 2 * BLOCK_YEARS
    assert loss.miss == miss_at(next(k for k in range(20) if years_at(k, BLOCK_YEARS) == loss.years))
    whole = Simulation(years=loss.years)
    monkeypatch.setattr(simulation, "MOST_WHOLE", 10**9)
    annual = whole.annual_loss(Poisson(mean=1.0), Exponential(mean=1000.0))
    assert loss.value_at_risk(0.99) == annual.value_at_risk(0.99)
    assert loss.mean() == pytest.approx(annual.mean(), rel=1e-13)


def test_intervals_of_runs_that_stop_cover_as_often_as_they_say():
    """1,000 runs of uniform years, one seed each, each stopped at the first look narrow enough: the
    interval holds the quantile in at least 95 % of them. As many as can stop early by chance: no pilot
    plans the looks, and the first comes far too soon."""
    level, width, hits, looks = 0.9, 0.012, 0, []
    for seed in range(1000):
        rng = np.random.default_rng(seed)
        annual = np.empty(0)
        for look in range(30):
            annual = np.append(annual, 1.0 + rng.random(int(400 * 1.5**look) - annual.size))
            loss = SimulatedAnnualLoss(annual, miss=miss_at(look))
            if relative_width(loss, level) <= width:
                break
        low, high = loss.accuracy("value_at_risk", level)
        hits += low <= 1.0 + level <= high
        looks.append(look)
    assert stats.binom.cdf(hits, 1000, 0.95) > 1e-3
    assert len(set(looks)) > 1


def test_runs_that_cannot_be_are_refused():
    model = Poisson(mean=0.001), Lognormal(mu=9.0, sigma=1.0)
    with pytest.raises(
        EngineError, match=r"an interval of 1\.000% to either side of the value at risk at 0.99 is"
    ):
        Simulation(until=0.01, level=0.99).annual_loss(*model)
    with pytest.raises(
        EngineError, match=r"10,000,000 years would take about .* above the bound of 0 seconds"
    ):
        Simulation(years=10**7, seconds=1e-6).annual_loss(Poisson(mean=1.0), model[1])
    with pytest.raises(EngineError, match="would take about"):
        Simulation(until=0.01, seconds=1e-6).annual_loss(Poisson(mean=1.0), model[1])
    for settings in ({"until": 0.0}, {"until": 1.5}, {"level": 1.0}, {"seconds": 0.0}):
        with pytest.raises(InputError):
            Simulation(**settings)


def test_a_fault_in_a_block_reaches_the_caller(monkeypatch):
    """An error in a thread is raised, not swallowed, and ends the run."""

    def broken(*args, block, **options):
        raise EngineError("broken", value=block)

    monkeypatch.setattr(simulation, "run_block", broken)
    with pytest.raises(EngineError, match="broken"):
        Simulation(years=100 * BLOCK_YEARS, workers=2).book(BOOK)
