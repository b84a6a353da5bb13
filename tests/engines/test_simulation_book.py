"""The simulated book: the same bytes everywhere, covers against a loop over the very same events."""

import itertools

import numpy as np
import pytest

import lossagg.engines.simulation as simulation
from lossagg.cover import Cover
from lossagg.engines.book import GROSS, NET, Book, Line, PlacedCover, Subject
from lossagg.engines.simulation import Simulation, block_events, prepare_line
from lossagg.engines.streams import BLOCK_YEARS
from lossagg.errors import EngineError, InputError
from lossagg.families import (
    GeneralizedPareto,
    Lognormal,
    NegativeBinomial,
    Pareto,
    Poisson,
    SizeTable,
    Spliced,
)

FIRE = Line(
    name="fire",
    frequency=NegativeBinomial(mean=3.0, dispersion=0.4),
    severity=Spliced(
        body=Lognormal(mu=9.0, sigma=1.2),
        tail=GeneralizedPareto(shape=0.4, scale=30_000.0, threshold=40_000.0),
        threshold=40_000.0,
        tail_probability=0.1,
    ),
)
MOTOR = Line(name="motor", frequency=Poisson(mean=0.4), severity=Lognormal(mu=10.0, sigma=1.0))
NUISANCE = Line(
    name="nuisance",
    frequency=Poisson(mean=5.0),
    severity=SizeTable(sizes=[0.0, 20_000.0, 60_000.0], probabilities=[0.5, 0.4, 0.1]),
)
WORKING = PlacedCover(
    name="working",
    terms=Cover(deductible=20_000.0, limit=50_000.0, share=0.8, annual_retention=10_000.0),
    lines=("fire", "nuisance"),
)
PRIMARY = PlacedCover(name="primary", terms=Cover(deductible=5_000.0, limit=10_000.0, share=0.5))
AFTER_PRIMARY = PlacedCover(
    name="second",
    terms=Cover(deductible=15_000.0, limit=60_000.0, retained_cap=40_000.0, annual_limit=90_000.0, share=0.9),
    after=("primary",),
)
FRANCHISE = PlacedCover(
    name="franchise",
    terms=Cover(deductible=20_000.0, limit=60_000.0, franchise=True, retained_cap=50_000.0),
    lines=("motor", "fire"),
)
STOP = PlacedCover(
    name="stop",
    terms=Cover(annual_retention=60_000.0, annual_limit=100_000.0),
    after=("primary", "second"),
)
BOOK = Book(lines=(FIRE, MOTOR, NUISANCE), covers=(PRIMARY, AFTER_PRIMARY, STOP))
OTHER = Book(lines=(FIRE, MOTOR, NUISANCE), covers=(WORKING, FRANCHISE))


def amounts(book, **settings):
    result = Simulation(**settings).book(book)
    assert not result.refused
    return {subject: loss.annual for subject, loss in result.losses.items()}


@pytest.mark.parametrize("workers", [2, 7])
def test_workers_do_not_reach_the_bytes(workers):
    """Four blocks, the last one incomplete: one thread and several give the same bytes."""
    years = 3 * BLOCK_YEARS + 17
    one = amounts(BOOK, years=years, seed=4, workers=1)
    many = amounts(BOOK, years=years, seed=4, workers=workers)
    assert list(one) == list(BOOK.subjects)
    for subject in one:
        assert one[subject].tobytes() == many[subject].tobytes()


def test_order_of_lines_does_not_reach_the_bytes():
    forward = amounts(BOOK, years=2000)
    for lines in itertools.permutations(BOOK.lines):
        again = amounts(Book(lines=lines, covers=BOOK.covers), years=2000)
        for subject in forward:
            assert forward[subject].tobytes() == again[subject].tobytes()


def test_a_line_draws_the_same_losses_whatever_else_is_there():
    alone = amounts(Book(lines=(MOTOR,)), years=2000)
    np.testing.assert_array_equal(
        alone[Subject("line", "motor")], amounts(BOOK, years=2000)[Subject("line", "motor")]
    )


def test_more_years_keep_the_first_years():
    """A year is what it is, however many follow: it can be replayed from its number."""
    short = amounts(BOOK, years=500)
    long = amounts(BOOK, years=BLOCK_YEARS + 5)
    for subject in short:
        np.testing.assert_array_equal(short[subject], long[subject][:500])


def test_the_seed_and_the_name_change_the_losses():
    base = amounts(Book(lines=(MOTOR,)), years=500)[GROSS]
    renamed = Line(name="lorries", frequency=MOTOR.frequency, severity=MOTOR.severity)
    assert not np.array_equal(base, amounts(Book(lines=(MOTOR,)), years=500, seed=2)[GROSS])
    assert not np.array_equal(base, amounts(Book(lines=(renamed,)), years=500)[GROSS])


def events_by_year(book, line, years):
    prepared = prepare_line(line, book, book.subjects)
    counts, sizes = block_events(prepared, seed=1, block=0, first=0, last=years)
    return np.split(sizes, np.cumsum(counts)[:-1])


def test_single_years_are_replayed_alone():
    """A year's losses, far into a later block, add up to its annual figure; what was passed over to
    reach them is passed over exactly."""
    years = amounts(OTHER, years=BLOCK_YEARS + 30_000)
    for line in OTHER.lines:
        prepared = prepare_line(line, OTHER, OTHER.subjects)
        counts, sizes = block_events(prepared, seed=1, block=1, first=29_000, last=29_400)
        own = [part.sum() for part in np.split(sizes, np.cumsum(counts)[:-1])]
        there = years[Subject("line", line.name)][BLOCK_YEARS + 29_000 : BLOCK_YEARS + 29_400]
        np.testing.assert_allclose(own, there, rtol=1e-12)


def cover_event(cover, x):
    """(paid, kept) of one event by the words of the terms."""
    if cover.franchise:
        return (min(x, cover.limit), 0.0) if x > cover.deductible else (0.0, x)
    return min(max(x - cover.deductible, 0.0), cover.limit), min(x, cover.deductible)


def cover_year(cover, paid, kept):
    total = max(paid - cover.annual_retention, 0.0) + max(kept - cover.retained_cap, 0.0)
    return cover.share * min(total, cover.annual_limit)


def test_covers_after_covers_against_a_loop_over_the_events():
    """Primary layer, a second layer on what it leaves with a retained cap, a stop loss on what both
    leave of the year: loss by loss in plain Python on the very same events, to 1e-9."""
    years = 3000
    events = {line.name: events_by_year(BOOK, line, years) for line in BOOK.lines}
    ours = amounts(BOOK, years=years)
    primary, second, stop = PRIMARY.terms, AFTER_PRIMARY.terms, STOP.terms
    for year in range(years):
        losses = [float(x) for line in BOOK.lines for x in events[line.name][year]]
        first = [primary.share * cover_event(primary, x)[0] for x in losses]
        left = [x - paid for x, paid in zip(losses, first, strict=True)]
        seen = [cover_event(second, x) for x in left]
        second_paid = cover_year(second, sum(p for p, _ in seen), sum(k for _, k in seen))
        stop_paid = cover_year(stop, sum(left) - second_paid, 0.0)
        expected = {
            GROSS: sum(losses),
            Subject("cover", "primary"): sum(first),
            Subject("cover", "second"): second_paid,
            Subject("cover", "stop"): stop_paid,
            NET: sum(losses) - sum(first) - second_paid - stop_paid,
        }
        for subject, value in expected.items():
            assert ours[subject][year] == pytest.approx(value, rel=1e-9, abs=1e-6), (subject, year)


def test_covers_side_by_side_against_a_loop_over_the_events():
    """Covers of some lines, an annual retention, a franchise with a retained cap."""
    years = 3000
    events = {line.name: events_by_year(OTHER, line, years) for line in OTHER.lines}
    ours = amounts(OTHER, years=years)
    for year in range(years):
        for placed in OTHER.covers:
            seen = [cover_event(placed.terms, x) for line in placed.lines for x in events[line][year]]
            expected = cover_year(placed.terms, sum(p for p, _ in seen), sum(k for _, k in seen))
            assert ours[Subject("cover", placed.name)][year] == pytest.approx(expected, rel=1e-9, abs=1e-6)


def test_retained_and_ceded_add_to_gross():
    for book in (BOOK, OTHER):
        ours = amounts(book, years=20_000)
        ceded = sum(ours[Subject("cover", cover.name)] for cover in book.covers)
        np.testing.assert_allclose(ours[NET] + ceded, ours[GROSS], rtol=1e-12, atol=1e-6)
        lines = sum(ours[Subject("line", line.name)] for line in book.lines)
        np.testing.assert_allclose(lines, ours[GROSS], rtol=1e-12)


def test_one_loss_for_every_cover():
    """`annual_loss` draws the same losses whatever the cover: options are compared year by year."""
    engine = Simulation(years=2000)
    gross = engine.annual_loss(FIRE.frequency, FIRE.severity)
    ceded = engine.annual_loss(FIRE.frequency, FIRE.severity, Cover(deductible=10_000.0))
    kept = engine.annual_loss(FIRE.frequency, FIRE.severity, Cover(limit=10_000.0))
    np.testing.assert_allclose(ceded.annual + kept.annual, gross.annual, rtol=1e-12)


def test_moments_exist_by_the_model_not_by_the_sample():
    """Infinite mean: gross, net and an unlimited cover have none; what is capped keeps its own."""
    heavy = Line(name="heavy", frequency=Poisson(mean=2.0), severity=Pareto(alpha=0.9, minimum=1000.0))
    layer = PlacedCover(name="layer", terms=Cover(deductible=5000.0, limit=50_000.0))
    rest = PlacedCover(name="rest", terms=Cover(annual_retention=90_000.0), after=("layer",))
    partial = PlacedCover(name="partial", terms=Cover(deductible=5000.0, share=0.5))
    orders = {}
    for covers in ((layer,), (layer, rest), (partial,)):
        book = Book(lines=(heavy, MOTOR), covers=covers)
        losses = Simulation(years=1000).book(book).losses
        orders[tuple(c.name for c in covers)] = {str(s): x.moment_order for s, x in losses.items()}
        assert losses[GROSS].mean() == np.inf
        assert losses[GROSS].tail_value_at_risk(0.9) == np.inf
        assert losses[GROSS].value_at_risk(0.9) < np.inf
        assert losses[GROSS].layer_mean(0.0, 1e6) < 1e6
    assert orders["layer",] == {
        "line heavy": 0.9,
        "line motor": np.inf,
        "gross": 0.9,
        "cover layer": np.inf,
        "net": 0.9,
    }
    assert orders["layer", "rest"]["cover rest"] == 0.9
    assert orders["layer", "rest"]["net"] == np.inf
    assert (orders["partial",]["cover partial"], orders["partial",]["net"]) == (0.9, 0.9)


def test_attachment_and_exhaustion_are_counted():
    loss = Simulation(years=5000).book(BOOK).losses[Subject("cover", "second")]
    assert loss.attachment_probability() == np.mean(loss.annual > 0)
    assert loss.exhaustion_probability() == np.mean(loss.annual >= 0.9 * 90_000.0 - 1e-6)
    assert 0 < loss.exhaustion_probability() < loss.attachment_probability() < 1
    assert Simulation(years=100).book(BOOK).losses[GROSS].exhaustion_probability() is None


def test_a_planted_fault_reaches_every_subject(monkeypatch):
    """The place where a test of the gate plants its fault is on the way of every figure."""
    honest = simulation.run_block
    before = amounts(BOOK, years=300)
    monkeypatch.setattr(
        simulation,
        "run_block",
        lambda *args, **options: {s: 1.01 * x for s, x in honest(*args, **options).items()},
    )
    after = amounts(BOOK, years=300)
    for subject in before:
        np.testing.assert_array_equal(after[subject], 1.01 * before[subject])


def test_progress_ends_at_one():
    for workers in (1, 2):
        seen = []
        Simulation(years=2 * BLOCK_YEARS, workers=workers).book(Book(lines=(MOTOR,)), seen.append)
        assert seen == [0.5, 1.0]


def test_extremes_do_not_break_it():
    """Losses once in a million years, sizes beyond 1e300, twenty thousand losses a year."""
    rare = Simulation(years=100_000).annual_loss(Poisson(mean=1e-6), MOTOR.severity)
    assert rare.value_at_risk(0.999) == 0.0
    huge = Line(name="huge", frequency=Poisson(mean=30.0), severity=Pareto(alpha=0.01, minimum=1.0))
    cover = PlacedCover(name="layer", terms=Cover(deductible=10.0, limit=5.0))
    losses = Simulation(years=2000).book(Book(lines=(huge,), covers=(cover,))).losses
    assert np.isfinite(losses[NET].annual).all()
    assert losses[GROSS].annual.max() > 1e299
    assert losses[Subject("cover", "layer")].mean() == pytest.approx(30 * 5 * 0.9738, rel=0.05)
    many = Simulation(years=200).annual_loss(Poisson(mean=20_000.0), MOTOR.severity)
    expected, error = 20_000 * MOTOR.severity.mean(), many.standard_error("mean")
    assert abs(many.mean() - expected) < 4 * error


@pytest.mark.parametrize(
    ("settings", "text"),
    [
        ({"years": 0}, "years must be a whole number from 1 to 10,000,000,000; seen: 0"),
        ({"years": 10.5}, "years must be a whole number"),
        ({"years": True}, "years must be a whole number"),
        ({"years": 10**11}, "years must be a whole number"),
        ({"seed": -1}, "seed must be a whole number from 0 to 18,446,744,073,709,551,615; seen: -1"),
        ({"seed": 2**64}, "seed must be a whole number"),
        ({"workers": 0}, "workers must be a whole number from 1"),
        ({"workers": "2"}, "workers must be a whole number"),
        ({"memory": 0}, "memory must be a whole number"),
    ],
)
def test_settings_out_of_range_are_refused(settings, text):
    with pytest.raises(InputError, match=text):
        Simulation(**settings)


def test_what_does_not_fit_is_refused_before_it_starts():
    with pytest.raises(EngineError) as raised:
        Simulation(years=10**9, memory=10**6).book(BOOK)
    assert str(raised.value) == (
        "1,000,000,000 years of 18 annual amounts need 0.49 GB of memory, above the bound of 0.00 GB; "
        "seen: 1000000000. Ask for at most 3,472 years, or raise `memory`."
    )
    with pytest.raises(EngineError, match="2e\\+14 losses would have to be simulated"):
        Simulation(years=10**8).annual_loss(Poisson(mean=2e6), MOTOR.severity)


def test_a_cover_after_one_on_other_lines_is_refused():
    """The part of a year's payment that belongs to one line is not defined; it is not guessed."""
    narrow = PlacedCover(name="narrow", terms=Cover(annual_retention=1.0), lines=("fire",), after=("wide",))
    wide = PlacedCover(name="wide", terms=Cover(annual_limit=1e5))
    with pytest.raises(InputError, match="comes after 'wide', whose annual terms act on a line it does not"):
        Simulation(years=10).book(Book(lines=(FIRE, MOTOR), covers=(wide, narrow)))
