"""More of the exact engines against published values: counts and moments with deductibles, rounding, tilting.

"Value from memory, recomputed" marks a published figure quoted from memory and confirmed by an independent
computation.
"""

import numpy as np
import pytest
from scipy import special, stats
from test_exact_many import script

from lossagg.cover import Cover, Schedule
from lossagg.engines.approximations import single_loss
from lossagg.engines.book import Line
from lossagg.engines.compound import CompoundSum
from lossagg.engines.fourier import Fourier
from lossagg.engines.panjer import Panjer
from lossagg.engines.recursive import Lines
from lossagg.engines.transform import LatticeTransform
from lossagg.families import (
    Binomial,
    CountTable,
    Exponential,
    GeneralizedPareto,
    Lognormal,
    Lomax,
    NegativeBinomial,
    Poisson,
    SizeTable,
    ZeroModified,
)

engines = pytest.mark.parametrize("engine", [Fourier(), Panjer()], ids=lambda engine: engine.name)


def sum_of(count, size):
    return CompoundSum.of((Line(name="x", frequency=count, severity=size),), {"x": Schedule.identity()})


@pytest.mark.parametrize(
    ("engine", "rel"), [(Fourier(points=2**18), 1e-7), (Panjer(), 2e-3)], ids=["fourier", "panjer"]
)
def test_c47_a_hundred_losses_without_a_mean(engine, rel):
    """Model and method of Luo and Shevchenko (2009): Poisson(100), generalized Pareto(1, 1). Computed here,
    two routes: the digits, and a contour around the transform 1 - z exp(z) E1(z) in this test."""
    model = Poisson(mean=100), GeneralizedPareto(shape=1, scale=1)
    loss = engine.annual_loss(*model)
    module = script()
    whole = module.annual(model[0], lambda z: -z * np.exp(z) * special.exp1(z))
    for level, digits in ((0.99, 10817.2616859), (0.995, 20887.9441525), (0.999, 101050.006513)):
        assert module.contour(whole, digits) == pytest.approx(1 - level, rel=1e-9)
        assert loss.value_at_risk(level) == pytest.approx(digits, rel=rel)
        low, high = loss.accuracy("value_at_risk", level)
        assert low <= digits <= high
    assert loss.tail_value_at_risk(0.99) == np.inf


def test_c12_means_kept():
    """Loss Models, chapter 9 (value from memory, recomputed): exponential mean 10, span 2: first-moment
    matching puts .09365 at zero; the rest by limited means written out. Panjer's own masses."""
    (masses,) = Lines(sum_of(CountTable(probabilities=[0, 1]), Exponential(mean=10)), 2.0, 32).masses
    digits = [0.0936537653899, 0.164292699398, 0.134511485504, 0.110128689824, 0.0901657451551]
    limited = 10.0 * -np.expm1(-2.0 * np.arange(0.0, 7.0) / 10.0)
    by_hand = np.append(1.0 - limited[1] / 2.0, -np.diff(limited, 2)[:4] / 2.0)
    assert masses.kept[:5] == pytest.approx(digits, abs=1e-12)
    assert by_hand == pytest.approx(digits, abs=1e-12)


@engines
def test_c14_compound_poisson_for_the_individual_model(engine):
    """Gerber (1979), portfolio of 31 policies: its compound Poisson approximation, rate 1.4; computed here,
    two routes (the digits, and the recursion of Panjer written out)."""
    numbers = {0.03: [2, 3, 1, 2, 0], 0.04: [0, 1, 2, 2, 1], 0.05: [0, 2, 4, 2, 2], 0.06: [0, 2, 2, 2, 1]}
    rates = [sum(q * row[amount] for q, row in numbers.items()) for amount in range(5)]
    assert sum(rates) == pytest.approx(1.4, rel=1e-12)
    size = SizeTable(sizes=[1, 2, 3, 4, 5], probabilities=[rate / sum(rates) for rate in rates])
    digits = [
        0.246596963942,
        0.0147958178365,
        0.0867528119147,
        0.111224108228,
        0.11039666198,
        0.0928589488949,
    ]
    by_hand = [np.exp(-1.4)]
    for n in range(1, 6):
        by_hand.append(sum(k * rates[k - 1] * by_hand[n - k] for k in range(1, n + 1)) / n)
    loss = engine.annual_loss(Poisson(mean=sum(rates)), size)
    seen = [loss.sf(k - 0.5) - loss.sf(k + 0.5) for k in range(6)]
    assert seen == pytest.approx(digits, abs=1e-12)
    assert by_hand == pytest.approx(digits, abs=1e-12)


@pytest.mark.parametrize(
    ("mean", "size", "single", "whole"),
    [
        (10, Lognormal(mu=0, sigma=2), 1699.40415392, 1773.29471491),
        (100, Lognormal(mu=0, sigma=2), 5063.33981908, 5802.24542898),
        (10, GeneralizedPareto(shape=1, scale=1), 9999.0, 9999.0),
        (50, Lomax(alpha=1.5, scale=1), 1356.2088083, 1456.2088083),
        (20, GeneralizedPareto(shape=0.7, scale=2), 2925.69494316, 3059.02827649),
    ],
)
def test_c50_single_loss_approximation(mean, size, single, whole):
    """Böcker and Klüppelberg (2005) without, Degen (2010) with the mean of the others, at 99.9 %; computed
    here, two routes (the digits, and the law's inverse and mean)."""
    assert size.isf(0.001 / mean) == pytest.approx(single, rel=1e-10)
    others = mean * size.mean() if size.mean() < np.inf else 0.0
    assert single + others == pytest.approx(whole, rel=1e-10)
    assert single_loss(sum_of(Poisson(mean=mean), size), 0.999) == pytest.approx(whole, rel=1e-6)


@engines
def test_d01_variance_with_a_deductible(engine):
    """SOA question with published solution: Poisson(10), uniform on (0, 10), deductible 4: variance 72. The
    uniform law is the generalized Pareto law of shape -1."""
    loss = engine.annual_loss(Poisson(mean=10), GeneralizedPareto(shape=-1, scale=10), Cover(deductible=4))
    assert loss.mean() == pytest.approx(18.0, rel=1e-11)
    assert loss.sd() ** 2 == pytest.approx(72.0, rel=1e-10)


@engines
def test_d09_variance_from_moments(engine):
    """SOA question (value from memory, recomputed): Poisson(20), E X = 70, E min(X, 30) = 25, P(X > 30) =
    .75, E[X**2 | X > 30] = 9000, deductible 30: variance 67,500. Three sizes have these moments."""
    size = SizeTable(sizes=[10, 60, 120], probabilities=[0.25, 0.375, 0.375])
    assert (size.mean(), size.limited_mean(30)) == pytest.approx((70, 25), rel=1e-12)
    assert (0.375 * 60**2 + 0.375 * 120**2) / 0.75 == 9000
    loss = engine.annual_loss(Poisson(mean=20), size, Cover(deductible=30))
    assert loss.sd() ** 2 == pytest.approx(67_500, rel=1e-10)


def test_d17_tyre_warranty():
    """SOA question (value from memory, recomputed): two million tyres, each replaced with probability .05,
    the total's mean ten million and sd 40,000: the sd of one replacement is 80.62."""
    own = np.sqrt(40_000**2 / 1e5 - 0.95 * 100**2)
    assert own == pytest.approx(80.622577483, rel=1e-11)
    size = SizeTable(sizes=[100 - own, 100 + own], probabilities=[0.5, 0.5])
    loss = Fourier(points=2**12).annual_loss(Binomial(trials=2_000_000, probability=0.05), size)
    assert loss.mean() == pytest.approx(1e7, rel=1e-11)
    assert loss.sd() == pytest.approx(40_000, rel=1e-9)


@engines
def test_d26_counts_thinned_by_a_deductible(engine):
    """Loss Models, chapter 8 (value from memory, recomputed): NB(r = 2, beta = 3), Pareto(3, 1000), excess of
    250: v = .512, beta = 1.536; with P(N = 0) modified to .4 the probability of no payment is .4595."""
    size, cover = Lomax(alpha=3, scale=1000), Cover(deductible=250)
    assert size.sf(250) == pytest.approx(0.512, rel=1e-12)
    count = NegativeBinomial(mean=6, dispersion=0.5)
    assert engine.annual_loss(count, size, cover).cdf(0) == pytest.approx((1 + 1.536) ** -2, rel=1e-10)
    modified = ZeroModified(base=count, zero_probability=0.4)
    assert engine.annual_loss(modified, size, cover).cdf(0) == pytest.approx(0.459513379574, rel=1e-10)


@engines
def test_e16_value_at_risk_is_not_subadditive(engine):
    """McNeil, Frey and Embrechts (2005), defaultable bonds (value from memory, recomputed): price 100, paid
    back as 105 or, with probability .02, not at all; VaR 95 % of a hundred of one is
    -500, of a hundred bonds 25."""
    one = engine.annual_loss(
        Binomial(trials=1, probability=0.02), SizeTable(sizes=[10_500], probabilities=[1])
    )
    many = engine.annual_loss(
        Binomial(trials=100, probability=0.02), SizeTable(sizes=[105], probabilities=[1])
    )
    assert one.value_at_risk(0.95) - 500 == -500
    assert many.value_at_risk(0.95) - 500 == 25
    assert stats.binom.ppf(0.95, 100, 0.02) == 5


def far_sum(transform, total, exact):
    """Largest error of what the cells from the far end add up to, against a recursion, which keeps digits."""
    transform._tilt = total / transform.length
    transform._weights = np.exp(-transform._tilt * np.arange(transform.points))
    down, _ = transform.sides()
    return np.abs(np.cumsum(down.probabilities[::-1]) - np.cumsum(exact[::-1])).max()


def test_too_much_tilt_is_as_bad_as_too_little():
    """Grübel and Hermesmeier (1999) on the choice of the tilt: aliasing against round-off. Poisson(12),
    lognormal(9, 1.5) where the lattice ends in the body, without tilt: sums wrap around. Where it reaches
    far, a tilt by exp(30): round-off of the body is magnified in the tail. The tilt chosen does neither."""
    model = sum_of(Poisson(mean=12), Lognormal(mu=9, sigma=1.5))
    errors = {}
    for reach, points in (("short", 300), ("far", 8192)):
        exact, _ = Lines(model, 2000.0, points).down()
        chosen = LatticeTransform(model, 2000.0, points)
        total = chosen._tilt * chosen.length
        errors[reach] = [
            far_sum(LatticeTransform(model, 2000.0, points), tilt, exact) for tilt in (0.0, total, 30.0)
        ]
    assert errors["short"][1] < 1e-11
    assert errors["short"][0] > 1e3 * errors["short"][1]
    assert errors["far"][1] < 1e-13
    assert errors["far"][2] > 1e3 * errors["far"][1]
