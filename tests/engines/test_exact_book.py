"""The exact engines on books, their refusals and warnings, and planted faults that must show."""

import numpy as np
import pytest

from lossagg.cover import Cover
from lossagg.engines.annual import annual_loss
from lossagg.engines.book import GROSS, NET, Book, Line, PlacedCover, Subject
from lossagg.engines.crosscheck import crosscheck
from lossagg.engines.fourier import Fourier
from lossagg.engines.panjer import Panjer
from lossagg.engines.recursive import severity_masses as panjer_masses
from lossagg.engines.result import TransformedAnnualLoss
from lossagg.engines.sampling import severity_masses as fourier_masses
from lossagg.errors import EngineError, InputError
from lossagg.families import CountTable, Exponential, Lognormal, NegativeBinomial, Pareto, Poisson, SizeTable

FIRE = Line(name="fire", frequency=Poisson(mean=2.0), severity=Pareto(alpha=2.2, minimum=500.0))
LIABILITY = Line(
    name="liability",
    frequency=NegativeBinomial(mean=3.0, dispersion=0.6),
    severity=Lognormal(mu=6.5, sigma=1.1),
)
THEFT = Line(name="theft", frequency=Poisson(mean=5.0), severity=Exponential(mean=300.0))
BOOK = Book(
    lines=(FIRE, LIABILITY, THEFT),
    covers=(
        PlacedCover(name="layer", terms=Cover(deductible=1000.0, limit=4000.0)),
        PlacedCover(name="fire quota", terms=Cover(share=0.25), lines=("fire",), after=("layer",)),
        PlacedCover(name="theft stop", terms=Cover(annual_retention=3000.0), lines=("theft",)),
    ),
)
engines = pytest.mark.parametrize("engine", [Fourier(), Panjer()], ids=lambda engine: engine.name)


@engines
def test_every_subject_or_a_reason(engine):
    """A stop loss on one line leaves a net that is no function of one annual sum: it is refused with the
    engine that can do it, everything else is there, and means add up."""
    result = engine.book(BOOK)
    assert set(result.losses) | set(result.refused) == set(BOOK.subjects)
    assert set(result.refused) == {NET}
    assert "simulation" in result.refused[NET]
    lines = [result.losses[Subject("line", line.name)].mean() for line in BOOK.lines]
    assert result.losses[GROSS].mean() == pytest.approx(sum(lines), rel=1e-12)
    assert lines[0] == pytest.approx(2.0 * 500.0 * 2.2 / 1.2, rel=1e-12)
    variance = sum(result.losses[Subject("line", line.name)].sd() ** 2 for line in BOOK.lines)
    assert result.losses[GROSS].sd() == pytest.approx(np.sqrt(variance), rel=1e-10)


@engines
def test_net_of_event_covers(engine):
    """Gross is what the covers pay and what they leave, in the mean; the quota sees what the layer leaves."""
    book = Book(lines=BOOK.lines, covers=BOOK.covers[:2])
    losses = engine.book(book).losses
    paid = sum(losses[Subject("cover", cover.name)].mean() for cover in book.covers)
    assert losses[NET].mean() + paid == pytest.approx(losses[GROSS].mean(), rel=1e-10)
    left = FIRE.severity.mean() - FIRE.severity.layer_mean(1000.0, 5000.0)
    assert losses[Subject("cover", "fire quota")].mean() == pytest.approx(0.25 * 2.0 * left, rel=1e-10)


def test_sums_are_shared_between_subjects():
    """A stop loss on everything, gross, and the net of it rest on one distribution, computed once."""
    book = Book(lines=(THEFT,), covers=(PlacedCover(name="stop", terms=Cover(annual_retention=2000.0)),))
    losses = Fourier().book(book).losses
    assert isinstance(losses[NET], TransformedAnnualLoss)
    assert losses[NET].base is losses[GROSS] is losses[Subject("line", "theft")]
    assert losses[Subject("cover", "stop")].base is losses[GROSS]
    both = losses[NET].mean() + losses[Subject("cover", "stop")].mean()
    assert both == pytest.approx(losses[GROSS].mean(), rel=1e-10)


@engines
def test_the_engines_are_deterministic(engine):
    """Twice the same book, twice the same bits."""
    first, second = (engine.book(Book(lines=(FIRE, LIABILITY))).losses[GROSS] for _ in range(2))
    assert first.density.tobytes() == second.density.tobytes()
    assert first.accuracy("value_at_risk", 0.995) == second.accuracy("value_at_risk", 0.995)


def test_counts_outside_the_recursion_are_refused_by_name():
    """Panjer's engine refuses a table of more counts than it can add up one by one and says who takes it;
    other lines are computed."""
    many = CountTable(probabilities=[0.5, *[0.0] * 1000, 0.5])
    odd = Line(name="odd", frequency=many, severity=Exponential(mean=10.0))
    result = Panjer().book(Book(lines=(odd, THEFT)))
    assert set(result.losses) == {Subject("line", "theft")}
    reason = result.refused[GROSS]
    assert reason == (
        "Panjer's recursion needs a Poisson, negative binomial or binomial count, one of these with its own "
        "probability of no loss, or a table of up to 1,000 counts; seen: 'count-table'. "
        "The fourier engine and the simulation take any count."
    )
    with pytest.raises(EngineError, match="simulation"):
        Panjer().annual_loss(odd.frequency, odd.severity)


def test_a_retained_cap_is_beyond_the_recursion():
    """It depends on two annual sums."""
    cover = Cover(deductible=100.0, retained_cap=300.0)
    with pytest.raises(EngineError, match="simulation compute"):
        Panjer().annual_loss(Poisson(mean=3), Exponential(mean=200), cover)


@engines
def test_nothing_can_happen(engine):
    """No losses, or none that pays: zero, not a crash."""
    for count, size, cover in (
        (Poisson(mean=0.0), Exponential(mean=1.0), None),
        (Poisson(mean=3.0), SizeTable(sizes=[0, 5], probabilities=[0.5, 0.5]), Cover(deductible=5.0)),
    ):
        loss = engine.annual_loss(count, size, cover)
        assert loss.mean() == loss.sd() == loss.value_at_risk(0.99) == loss.tail_value_at_risk(0.99) == 0
        assert loss.sf(0.0) == 0
        assert loss.accuracy("value_at_risk", 0.99) == (0, 0)


@engines
@pytest.mark.parametrize("unit", [1e-9, 1e12])
def test_tiny_and_huge_amounts(engine, unit):
    """The currency's unit does not matter, down to nanocents and up to trillions."""
    loss = engine.annual_loss(Poisson(mean=3), Exponential(mean=unit), Cover(limit=2 * unit))
    one = engine.annual_loss(Poisson(mean=3), Exponential(mean=1.0), Cover(limit=2.0))
    assert loss.value_at_risk(0.99) == pytest.approx(unit * one.value_at_risk(0.99), rel=1e-7)


def test_rare_payments_keep_their_digits():
    """One payment in a hundred million years: the attachment probability and the mean to ten digits."""
    loss = Fourier().annual_loss(Poisson(mean=3), Exponential(mean=1.0), Cover(deductible=20.0))
    rate = 3 * np.exp(-20.0)
    assert loss.sf(0.0) == pytest.approx(-np.expm1(-rate), rel=1e-10)
    assert loss.mean() == pytest.approx(rate, rel=1e-12)
    assert loss.tail_value_at_risk(0.5) == pytest.approx(2 * rate, rel=1e-9)


def test_the_bracket_asked_for_is_reached():
    """0.1 % at 99.5 % and 0.2 % at 99.9 % by default, with a thousand losses a year as well."""
    for count, size in (
        (Poisson(mean=4), Pareto(alpha=1.4, minimum=10.0)),
        (NegativeBinomial(mean=8, dispersion=1.0), Lognormal(mu=3, sigma=1.5)),
        (Poisson(mean=1000), Exponential(mean=1.0)),
    ):
        loss = Fourier().annual_loss(count, size)
        for level, width in ((0.995, 1.1e-3), (0.999, 2.2e-3)):
            low, high = loss.accuracy("value_at_risk", level)
            assert high - low <= width * loss.value_at_risk(level)


def test_a_step_that_would_need_too_many_points():
    """The error names the points, the memory and a step that works."""
    with pytest.raises(EngineError, match=r"needs [\d,]+ points \([\d.]+ GB\).*Give a step of at least"):
        Fourier(step=1e-9).annual_loss(Poisson(mean=2), Exponential(mean=1.0))
    with pytest.raises(EngineError, match="fourier engine"):
        Panjer(step=1e-7).annual_loss(Poisson(mean=2), Exponential(mean=1.0))


@pytest.mark.parametrize(
    ("engine", "arguments"),
    [
        (Fourier, {"points": 1}),
        (Fourier, {"points": 2.5}),
        (Fourier, {"points": True}),
        (Fourier, {"points": 10**9}),
        (Fourier, {"step": 0.0}),
        (Fourier, {"step": np.nan}),
        (Fourier, {"accuracy": 1.5}),
        (Panjer, {"points": 0}),
        (Panjer, {"step": -1.0}),
    ],
)
def test_settings_outside_their_range(engine, arguments):
    """Each names the setting."""
    with pytest.raises(InputError, match=next(iter(arguments))):
        engine(**arguments)


def test_the_front_door():
    """Engines by name and by object; what is neither is refused with the names there are."""
    model = (Poisson(mean=2.0), Exponential(mean=100.0))
    named = annual_loss(*model, engine="panjer")
    assert named.engine == "panjer"
    assert annual_loss(*model).engine == "fourier"
    assert annual_loss(*model, engine=Fourier(points=500)).points == 500
    assert annual_loss(*model, Cover(share=0.5), engine="fourier").mean() == pytest.approx(100.0, rel=1e-12)
    low, high = annual_loss(*model, Cover(share=0.5)).accuracy("mean")
    assert high - low < 1e-9
    with pytest.raises(InputError, match="fourier, panjer, simulation"):
        annual_loss(*model, engine="furier")
    with pytest.raises(InputError, match="engine must be"):
        annual_loss(*model, engine=3)
    with pytest.raises(InputError, match="frequency must be"):
        annual_loss(4.2, model[1])
    with pytest.raises(InputError, match="severity must be"):
        annual_loss(model[0], 4.2)
    with pytest.raises(InputError, match="cover must be"):
        annual_loss(*model, cover=100.0)


def shifted(discretise):
    """A lattice off by one step: every payment one step too high."""

    def masses(*given):
        sound = discretise(*given)
        if isinstance(sound, tuple):
            return type(sound)(*(np.roll(part, 1) if len(part) > 1 else part for part in sound))
        for name in ("down", "spread", "bulge", "atoms_down", "atoms_even", "atoms_up"):
            setattr(sound, name, np.roll(getattr(sound, name), 1))
        return sound

    return masses


@pytest.mark.parametrize(
    ("place", "discretise"),
    [
        ("lossagg.engines.transform.severity_masses", fourier_masses),
        ("lossagg.engines.recursive.severity_masses", panjer_masses),
    ],
    ids=["fourier", "panjer"],
)
def test_a_planted_fault_opens_the_gate(monkeypatch, place, discretise):
    """A lattice shifted by one step in either engine: the engines no longer agree."""
    book = Book(lines=(LIABILITY,))
    engines = Fourier(), Panjer(points=4000)
    sound = {engine.name: engine.book(book) for engine in engines}
    assert crosscheck(book, sound, (0.95, 0.99, 0.995)).agrees
    monkeypatch.setattr(place, shifted(discretise))
    faulty = {engine.name: engine.book(book) for engine in engines}
    assert not crosscheck(book, faulty, (0.95, 0.99, 0.995)).agrees
