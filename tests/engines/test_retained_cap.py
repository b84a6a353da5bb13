"""A retained cap by conditioning on the large events: against direct two-dimensional convolution, the
simulation, and a table computed by two routes."""

import math

import numpy as np
import oracle
import pytest

from lossagg.cover import Cover
from lossagg.engines.book import NET, Book, Line, PlacedCover, Subject
from lossagg.engines.fourier import Fourier
from lossagg.engines.panjer import Panjer
from lossagg.engines.simulation import Simulation
from lossagg.errors import EngineError
from lossagg.families import (
    Binomial,
    CountTable,
    Exponential,
    Gamma,
    Lognormal,
    Lomax,
    NegativeBinomial,
    Pareto,
    Poisson,
    SizeTable,
)

COUNTS = {
    "poisson": (Poisson(mean=3.0), oracle.poisson(3.0, 40)),
    "negative binomial": (
        NegativeBinomial(mean=2.0, dispersion=0.7),
        oracle.negative_binomial(2.0, 0.7, 90),
    ),
    "binomial": (Binomial(trials=12, probability=0.3), oracle.binomial(12, 0.3)),
    "table": (CountTable(probabilities=[0.2, 0.3, 0.25, 0.15, 0.1]), [0.2, 0.3, 0.25, 0.15, 0.1]),
}
SIZES = {0: 0.1, 250: 0.3, 1000: 0.3, 1250: 0.2, 4000: 0.1}
COVERS = {
    "cap": Cover(deductible=1000, retained_cap=1500),
    "cap and limit": Cover(deductible=1000, limit=250, retained_cap=1750, annual_limit=2000, share=0.5),
    "cap and retention": Cover(deductible=250, annual_retention=1000, retained_cap=500),
    "franchise": Cover(deductible=1000, franchise=True, retained_cap=750),
    "cap first": Cover(
        deductible=500,
        annual_retention=750,
        retained_cap=1000,
        order=["deductible", "retained-cap", "annual-retention"],
    ),
    "cap of nothing": Cover(deductible=1000, retained_cap=0),
    "beyond the table": Cover(deductible=5000, retained_cap=3000),
}


def two_sums(counts: list[float], cover: Cover, unit: int) -> dict[float, float]:
    """The year's payment by direct convolution of the pair (payment, kept), in units; no transform."""
    pairs = {}
    for size, p in SIZES.items():
        kept = oracle.event_retained(size, cover.deductible, cover.franchise)
        paid = oracle.event_payment(size, cover.deductible, cover.limit, cover.franchise)
        key = round(paid / unit), round(kept / unit)
        pairs[key] = pairs.get(key, 0.0) + p
    most = [max(key[axis] for key in pairs) * (len(counts) - 1) + 1 for axis in (0, 1)]
    joint, power = np.zeros(most), np.zeros(most)
    power[0, 0] = 1.0
    for chance in counts:
        joint += chance * power
        following = np.zeros(most)
        for (z, r), p in pairs.items():
            following[z:, r:] += p * power[: most[0] - z or None, : most[1] - r or None]
        power = following
    result: dict[float, float] = {}
    for z, r in zip(*np.nonzero(joint), strict=True):
        total = float(unit * z)
        excess = max(unit * float(r) - cover.retained_cap, 0.0)
        if cover.order:
            total = max(total + excess - cover.annual_retention, 0.0)
        else:
            total = max(total - cover.annual_retention, 0.0) + excess
        total = cover.share * min(total, cover.annual_limit)
        result[total] = result.get(total, 0.0) + float(joint[z, r])
    return result


@pytest.mark.parametrize("cover", COVERS)
@pytest.mark.parametrize("count", COUNTS)
def test_against_convolution_in_two_dimensions(count: str, cover: str) -> None:
    """Tables lie on the lattice, so nothing is rounded: mean, sd, quantiles, tails to round-off."""
    law, probabilities = COUNTS[count]
    truth = two_sums(probabilities, COVERS[cover], 250)
    severity = SizeTable(sizes=list(SIZES), probabilities=list(SIZES.values()))
    loss = Fourier().annual_loss(law, severity, COVERS[cover])
    assert loss.mean() == pytest.approx(oracle.mean(truth), rel=1e-9, abs=1e-9)
    assert loss.sd() == pytest.approx(oracle.sd(truth), rel=1e-7, abs=1e-6)
    low, high = loss.accuracy("sd")
    assert low - 1e-6 * high <= oracle.sd(truth) <= high + 1e-6 * high
    for level in (0.3, 0.5, 0.9, 0.99, 0.995, 0.999):
        value = oracle.value_at_risk(truth, level)
        assert loss.value_at_risk(level) == pytest.approx(value, rel=1e-12, abs=1e-9)
        assert loss.accuracy("value_at_risk", level) == pytest.approx((value, value), rel=1e-12, abs=1e-9)
        tail = oracle.tail_value_at_risk(truth, level)
        assert loss.tail_value_at_risk(level) == pytest.approx(tail, rel=1e-7, abs=1e-7)
    for x in (0.0, 249.0, 1000.0, 2600.0):
        assert loss.sf(x) == pytest.approx(oracle.exceedance(truth, x), abs=1e-10)
        assert loss.expected_excess(x) == pytest.approx(oracle.stop_loss(truth, x), rel=1e-7, abs=1e-6)


CONTINUOUS = {
    "poisson, lognormal": (
        Poisson(mean=3.0),
        Lognormal(mu=6.0, sigma=1.3),
        Cover(deductible=500, limit=2000, retained_cap=1200),
    ),
    "negative binomial, lomax": (
        NegativeBinomial(mean=4.0, dispersion=0.7),
        Lomax(alpha=2.4, scale=1500.0),
        Cover(deductible=500, limit=3000, retained_cap=1500, annual_retention=1000, share=0.8),
    ),
    "binomial, gamma": (
        Binomial(trials=12, probability=0.3),
        Gamma(shape=0.6, scale=1500.0),
        Cover(deductible=800, franchise=True, retained_cap=900),
    ),
    "table, exponential": (
        CountTable(probabilities=[0.2, 0.3, 0.25, 0.15, 0.1]),
        Exponential(mean=1000.0),
        Cover(deductible=700, retained_cap=1100, annual_limit=4000),
    ),
}
YEARS = 40_000


@pytest.mark.parametrize("case", CONTINUOUS)
def test_against_the_simulation(case: str) -> None:
    """Four standard errors; quantiles by the number of years beyond the bracket, as the gate does."""
    exact = Fourier().annual_loss(*CONTINUOUS[case])
    simulated = Simulation(years=YEARS, seed=7).annual_loss(*CONTINUOUS[case])
    for measure in ("mean", "sd"):
        low, high = exact.accuracy(measure)
        assert low <= exact.measure(measure) <= high
        assert high - low < 5e-3 * high
        error = 4 * simulated.standard_error(measure)
        assert low - error <= simulated.measure(measure) <= high + error
    for level in (0.5, 0.9, 0.99, 0.995):
        low, high = exact.accuracy("value_at_risk", level)
        assert low <= exact.value_at_risk(level) <= high
        assert high - low <= 2e-3 * exact.value_at_risk(0.995)
        allowed = 4 * math.sqrt(level * (1 - level) / YEARS) + 1 / YEARS
        assert simulated.sf(high) <= 1 - level + allowed
        assert low == 0 or simulated.sf(low * (1 - 1e-9)) >= 1 - level - allowed


ABOVE = PlacedCover(name="above", terms=Cover(deductible=1e6))
LINE = Line(name="loss", frequency=Poisson(mean=12.0), severity=Lognormal(mu=9.0, sigma=1.5))


@pytest.mark.parametrize(
    ("deductible", "cap", "kept", "charge"),
    [
        (25e3, 250e3, [135_354, 49_256, 203_000, 225_100, 250_000, 250_000], 511.6),
        (100e3, 600e3, [226_734, 109_748, 375_700, 428_650, 535_950, 575_422], 185.9),
    ],
)
def test_options_with_a_cap_of_the_practice_note(deductible, cap, kept, charge) -> None:
    """Computed here, two routes: Poisson(12) x lognormal(9, 1.5), limit 1m an event inclusive."""
    option = PlacedCover(
        name="option", terms=Cover(deductible=deductible, retained_cap=cap), after=("above",)
    )
    result = Fourier().book(Book(lines=(LINE,), covers=(ABOVE, option)))
    assert not result.refused
    net, ceded = result.losses[NET], result.losses[Subject("cover", "option")]
    assert net.mean() == pytest.approx(kept[0], abs=0.5)
    assert net.sd() == pytest.approx(kept[1], abs=0.6)
    for level, value in zip((0.9, 0.95, 0.99), kept[2:5], strict=True):
        assert net.value_at_risk(level) == pytest.approx(value, abs=50)
    assert net.tail_value_at_risk(0.99) == pytest.approx(kept[5], abs=5)
    free = PlacedCover(name="free", terms=Cover(deductible=deductible), after=("above",))
    uncapped = Fourier().book(Book(lines=(LINE,), covers=(ABOVE, free))).losses[Subject("cover", "free")]
    assert ceded.mean() - uncapped.mean() == pytest.approx(charge, abs=0.1)
    assert net.mean() + ceded.mean() == pytest.approx(294_406.6, abs=0.5)


def test_what_a_cap_leaves_of_a_part() -> None:
    """A share of 40 %: the net counts six tenths of both sums and more; retained and ceded add to gross."""
    line = Line(name="loss", frequency=Poisson(mean=3.0), severity=Exponential(mean=1000.0))
    option = PlacedCover(name="option", terms=Cover(deductible=500, retained_cap=900, share=0.4))
    book = Book(lines=(line,), covers=(option,))
    exact, simulated = Fourier().book(book), Simulation(years=YEARS, seed=3).book(book)
    assert not exact.refused
    net, ceded = exact.losses[NET], exact.losses[Subject("cover", "option")]
    assert net.mean() + ceded.mean() == pytest.approx(3000.0, rel=1e-6)
    for measure, level in (("mean", None), ("sd", None), ("tail_value_at_risk", 0.99)):
        sample = simulated.losses[NET]
        error = 4 * sample.standard_error(measure, level)
        assert abs(sample.measure(measure, level) - net.measure(measure, level)) < error + 1e-3 * net.mean()


def test_poisson_lines_are_pooled_others_are_left_to_the_simulation() -> None:
    lines = [
        Line(name="a", frequency=Poisson(mean=1.0), severity=Exponential(mean=1000.0)),
        Line(name="b", frequency=Poisson(mean=2.0), severity=Gamma(shape=2.0, scale=300.0)),
    ]
    option = PlacedCover(name="option", terms=Cover(deductible=500, limit=800, retained_cap=900))
    exact = Fourier().book(Book(lines=tuple(lines), covers=(option,)))
    sample = Simulation(years=YEARS, seed=3).book(Book(lines=tuple(lines), covers=(option,)))
    subject = Subject("cover", "option")
    for measure, level in (("mean", None), ("sd", None), ("tail_value_at_risk", 0.99)):
        simulated = sample.losses[subject]
        gap = simulated.measure(measure, level) - exact.losses[subject].measure(measure, level)
        assert abs(gap) < 4 * simulated.standard_error(measure, level) + 1
    assert "leaves a third part" in exact.refused[NET]
    lines[1] = Line(name="b", frequency=Binomial(trials=4, probability=0.5), severity=lines[1].severity)
    refused = Fourier().book(Book(lines=tuple(lines), covers=(option,))).refused
    assert "pooled only where all are Poisson" in refused[subject]
    assert "The simulation computes it" in refused[subject]


def test_what_cannot_be_followed_says_so() -> None:
    with pytest.raises(EngineError, match="panjer engine cannot follow two annual sums"):
        Panjer().annual_loss(Poisson(mean=3.0), Exponential(mean=1.0), Cover(deductible=1, retained_cap=2))
    disappearing = Cover(deductible=1, disappears_at=3, retained_cap=2)
    with pytest.raises(EngineError, match="is not always the same"):
        Fourier().annual_loss(Poisson(mean=3.0), Exponential(mean=1.0), disappearing)
    many = Poisson(mean=1e4), Exponential(mean=1.0), Cover(deductible=0.1, retained_cap=2)
    with pytest.raises(EngineError, match="events above the deductible"):
        Fourier().annual_loss(*many)


def test_extremes() -> None:
    """No mean, and losses once in a million years."""
    heavy = Fourier().annual_loss(
        Poisson(mean=1.0), Pareto(alpha=0.9, minimum=100.0), Cover(deductible=500, retained_cap=600)
    )
    assert heavy.mean() == math.inf
    assert heavy.sd() == math.inf
    low, high = heavy.accuracy("value_at_risk", 0.99)
    assert low <= heavy.value_at_risk(0.99) <= high < math.inf
    rare = Fourier().annual_loss(
        Poisson(mean=1e-6), Exponential(mean=100.0), Cover(deductible=50, retained_cap=20)
    )
    assert rare.value_at_risk(0.999) == 0.0
    # One event a year at most: all beyond 20 is paid.
    assert rare.mean() == pytest.approx(1e-6 * 100 * math.exp(-0.2), rel=1e-3)
