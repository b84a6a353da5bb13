"""Dependent lines solved exactly: against closed forms, naive twins that share no code, the simulation."""

import numpy as np
import pytest
from scipy import fft, stats

from lossagg.cover import Cover
from lossagg.engines import clusters
from lossagg.engines.book import GROSS, NET, Book, Line, PlacedCover, Subject
from lossagg.engines.crosscheck import crosscheck
from lossagg.engines.dependence import CommonShock, Copula, SharedFactor
from lossagg.engines.factor_rule import factor_rule
from lossagg.engines.fourier import Fourier
from lossagg.engines.panjer import Panjer
from lossagg.engines.simulation import Simulation
from lossagg.engines.tied import annual_sum
from lossagg.families import (
    CountTable,
    Exponential,
    Gamma,
    Lognormal,
    NegativeBinomial,
    Poisson,
    SizeTable,
    ZeroInflated,
)

LEVELS = (0.9, 0.99, 0.995)


def geometric(mean, most=400):
    p = 1 / mean
    masses = p * (1 - p) ** np.arange(most)
    return masses / masses.sum()


def table(mean, most=400):
    return SizeTable(sizes=range(1, most + 1), probabilities=geometric(mean, most))


def factor(on="frequency", law="gamma", variance=0.4, lines=("a", "b"), name="climate"):
    return SharedFactor(name=name, lines=tuple(lines), on=on, variance=variance, law=law)


def gross(book):
    """The annual loss of all lines alone, without solving each of them."""
    return Fourier().solve(annual_sum(book, book.plan(GROSS).events))


TWO = (
    Line(name="a", frequency=Poisson(mean=3.0), severity=table(10 / 3)),
    Line(name="b", frequency=Poisson(mean=2.0), severity=table(10.0)),
)


def closed(points=4096):
    """P(S = k) of `TWO` under a gamma factor of variance 0.4: (1 - 0.4 (3 (g1 - 1) + 2 (g2 - 1)))**-2.5."""
    first, second = (fft.rfft(np.append(0.0, geometric(mean)), points) for mean in (10 / 3, 10.0))
    return fft.irfft((1 - 0.4 * (3 * (first - 1) + 2 * (second - 1))) ** -2.5, points)


@pytest.mark.parametrize(("values", "error"), [(8, 1.1e-4), (16, 1.4e-8), (32, 1e-15)])
def test_the_gauss_rule_reaches_the_closed_form(values, error):
    """Poisson 3 and 2, geometric sizes of mean 10/3 and 10 under a gamma factor of variance 0.4 (Wang 1998,
    PCAS 85; Meyers 2007, Variance 1): the mean over 8, 16 and 32 values of the factor of the product of the
    lines' own generating functions, inverted, against the closed form. Errors computed here, two routes."""
    nodes, weights = factor_rule(factor(), values)
    states = tuple(
        clusters.State(weight, ((0, node), (1, node))) for node, weight in zip(nodes, weights, strict=True)
    )
    mixed = clusters.Mixed((0, 1), states)
    transforms = [fft.rfft(np.append(0.0, geometric(mean)), 4096) for mean in (10 / 3, 10.0)]
    seen = fft.irfft(mixed.pgf([line.frequency for line in TWO], transforms), 4096)
    assert np.max(np.abs(seen - closed())) <= 1.1 * error
    assert error < 1e-14 or np.max(np.abs(seen - closed())) >= 0.5 * error


def test_a_shared_gamma_factor_by_both_engines():
    """VaR 99.5 % is 142, against 128 for independent lines; the covariance 0.4 * 10 * 20 = 80 adds 160 to the
    variance (computed here, two routes: the closed transform, and the moments)."""
    book = Book(lines=TWO, dependences=(factor(),))
    apart = Fourier().book(book.independent()).losses[GROSS]
    below = np.cumsum(closed())
    for engine in (Fourier(), Panjer()):
        result = engine.book(book)
        assert not result.refused
        total = result.losses[GROSS]
        assert total.value_at_risk(0.995) == 142.0 == np.searchsorted(below, 0.995)
        assert total.accuracy("value_at_risk", 0.995) == (142.0, 142.0)
        x = np.arange(250.0)
        np.testing.assert_allclose(total.sf(x), 1 - below[:250], rtol=1e-9, atol=1e-13)
        assert total.sd() ** 2 - apart.sd() ** 2 == pytest.approx(160.0, rel=1e-5)
        assert total.mean() == pytest.approx(30.0, rel=1e-5)
    assert apart.value_at_risk(0.995) == 128.0


@pytest.mark.parametrize("law", ["gamma", "lognormal"])
@pytest.mark.parametrize("variance", [0.01, 0.3, 1.5])
def test_rules_integrate_what_they_promise(law, variance):
    """Moments of order 0 to 3, closed form: gamma prod (1 + k v), lognormal (1 + v)**(k (k - 1) / 2)."""
    values, weights = factor_rule(factor(law=law, variance=variance), 48)
    assert (np.diff(values) > 0).all()
    for order in range(4):
        steps = np.arange(order)
        truth = np.prod(1 + steps * variance) if law == "gamma" else (1 + variance) ** steps.sum()
        assert weights @ values**order == pytest.approx(truth, rel=1e-10)


def poisson_lognormal(mean, variance, most):
    """P(N = n), by the trapezoidal rule in the normal variable: a naive twin of the Gauss rule."""
    spread = np.log1p(variance)
    z = np.linspace(-10, 10, 4001)
    rates = mean * np.exp(np.sqrt(spread) * z - spread / 2)
    return stats.poisson.pmf(np.arange(most)[:, None], rates) @ stats.norm.pdf(z) * (z[1] - z[0])


def test_a_lognormal_factor_on_counts_against_the_trapezoidal_rule():
    """Sizes of 1, so the sum is the count of both lines: Poisson with a lognormal rate of mean 12."""
    one = SizeTable(sizes=[1.0], probabilities=[1.0])
    lines = tuple(
        Line(name=name, frequency=Poisson(mean=mean), severity=one) for name, mean in (("a", 4.0), ("b", 8.0))
    )
    loss = (
        Fourier().book(Book(lines=lines, dependences=(factor(law="lognormal", variance=0.25),))).losses[GROSS]
    )
    truth = 1 - np.cumsum(poisson_lognormal(12.0, 0.25, 200))
    seen = np.asarray(loss.sf(np.arange(60.0)))
    np.testing.assert_allclose(seen, truth[:60], atol=1e-9)
    low, high = (np.asarray(bound.sf(np.arange(60.0))) for bound in loss.bounds())
    assert ((low <= truth[:60] + 1e-13) & (truth[:60] - 1e-13 <= high)).all()


def test_negative_binomial_lines_keep_their_own_spread_beside_the_factor():
    """A line: m E[Y**2] + m**2 ((1 + d) (1 + v) - 1) E[Y]**2; between lines v times their means."""
    lines = (
        Line(name="a", frequency=NegativeBinomial(mean=5.0, dispersion=0.3), severity=Exponential(mean=2.0)),
        Line(name="b", frequency=Poisson(mean=3.0), severity=Gamma(shape=2.0, scale=1.0)),
    )
    book = Book(lines=lines, dependences=(factor(variance=0.2),))
    result = Fourier().book(book)
    own = (5 * 4 + 5 * 4 + 25 * (1.3 * 1.2 - 1) * 4, 3 * 2 + 3 * 4 + 9 * 0.2 * 4)
    assert result.losses[Subject("line", "a")].sd() ** 2 == pytest.approx(own[0], rel=1e-9)
    assert result.losses[GROSS].sd() ** 2 == pytest.approx(sum(own) + 2 * 0.2 * 10 * 6, rel=1e-9)
    assert "gamma factor on Poisson" in Panjer().book(book).refused[GROSS]


def test_common_shocks_against_the_published_formula():
    """N1 = A + C, N2 = B + C with rates 1, 2 and 0.5 (Lindskog and McNeil 2003, ASTIN Bulletin 33): the sum
    is compound Poisson with rate 3.5 and sizes mixed of the two lines' and their convolution."""
    sizes = (np.array([0, 0.5, 0.3, 0.2]), np.array([0, 0.6, 0.4]))
    lines = tuple(
        Line(
            name=name,
            frequency=Poisson(mean=mean),
            severity=SizeTable(sizes=range(1, len(masses)), probabilities=masses[1:]),
        )
        for name, mean, masses in zip("ab", (1.5, 2.5), sizes, strict=True)
    )
    book = Book(lines=lines, dependences=(CommonShock(name="storm", lines=("a", "b"), rate=0.5),))
    loss = gross(book)
    mixed = np.zeros(6)
    for rate, masses in ((1.0, sizes[0]), (2.0, sizes[1]), (0.5, np.convolve(*sizes))):
        mixed[: len(masses)] += rate / 3.5 * masses
    twin = np.zeros(40)
    twin[0] = np.exp(-3.5)
    for k in range(1, 40):  # Panjer's recursion, written out
        twin[k] = sum(3.5 * j / k * mixed[j] * twin[k - j] for j in range(1, min(k, 5) + 1))
    np.testing.assert_allclose(loss.sf(np.arange(25.0)), 1 - np.cumsum(twin)[:25], rtol=1e-11)
    assert loss.sd() ** 2 == pytest.approx(13.13, rel=1e-12)


@pytest.mark.parametrize("law", ["gamma", "lognormal"])
def test_inflation_of_one_sum_is_its_scale_mixture(law):
    """P(f T > x) = E[P(T > x / f)] by the trapezoidal rule, T by the engine for lines without the factor."""
    inflated = ZeroInflated(base=Poisson(mean=2.0), extra_zeros=0.2)
    lines = (
        Line(name="a", frequency=Poisson(mean=4.0), severity=Exponential(mean=1.0)),
        Line(name="b", frequency=inflated, severity=Exponential(mean=4.0)),
    )
    shared = factor("inflation", law, 0.04)
    loss, plain = (gross(Book(lines=lines, dependences=ties)) for ties in ((shared,), ()))
    scales = np.linspace(0.05, 3.0, 800)
    weights = shared.factor.pdf(scales) * (scales[1] - scales[0])
    for x in (5.0, 15.0, 30.0, 45.0):
        truth = float(weights @ np.asarray(plain.sf(x / scales)))
        assert loss.sf(x) == pytest.approx(truth, rel=2e-4)
        assert loss.low.sf(x) <= truth * (1 + 1e-6)
        assert truth * (1 - 1e-6) <= loss.high.sf(x)
    assert loss.mean() == pytest.approx(plain.mean(), rel=1e-9)
    assert loss.sd() ** 2 == pytest.approx(1.04 * (plain.sd() ** 2 + plain.mean() ** 2) - plain.mean() ** 2)


MANY = (
    Line(
        name="a", frequency=NegativeBinomial(mean=4.0, dispersion=0.3), severity=Lognormal(mu=1.0, sigma=1.0)
    ),
    Line(name="b", frequency=Poisson(mean=3.0), severity=Exponential(mean=5.0)),
    Line(name="c", frequency=Poisson(mean=1.0), severity=Exponential(mean=9.0)),
)
COVERS = (
    PlacedCover(name="layer", terms=Cover(deductible=4.0, limit=20.0), lines=("a", "b")),
    PlacedCover(name="stop", terms=Cover(annual_retention=40.0, annual_limit=60.0)),
)


@pytest.mark.parametrize(
    "dependences",
    [
        pytest.param(
            (factor(lines="ab"), factor("inflation", variance=0.02, lines="b", name="prices")), id="both"
        ),
        pytest.param((factor(law="lognormal", lines="abc"),), id="lognormal"),
        pytest.param((CommonShock(name="storm", lines=("b", "c"), rate=0.7),), id="shock"),
    ],
)
def test_covers_across_dependent_lines_agree_with_the_simulation(dependences):
    book = Book(lines=MANY, covers=COVERS, dependences=dependences)
    results = {engine.name: engine.book(book) for engine in (Fourier(), Simulation(years=50_000, seed=2))}
    assert set(results["fourier"].refused) <= {NET}
    check = crosscheck(book, results, LEVELS)
    assert check.agrees, check.summary


@pytest.mark.parametrize("fault", ["weights", "values", "joint"])
def test_a_fault_in_the_rule_or_in_how_lines_go_together_trips_the_gate(fault, monkeypatch):
    """Weights that add up but spread less, values 3 % off, lines put together as if independent."""
    from lossagg.engines import tied

    def narrowed(shared, size):
        values, weights = factor_rule(shared, size)
        return (1 + 0.7 * (values - 1), weights) if fault == "weights" else (1.03 * values, weights)

    if fault == "joint":
        monkeypatch.setattr(
            clusters.Mixed,
            "pgf",
            lambda self, counts, z: np.prod([n.pgf(a) for n, a in zip(counts, z, strict=True)], axis=0),
        )
    else:
        monkeypatch.setattr(tied, "factor_rule", narrowed)
    lines = tuple(
        Line(name=name, frequency=Poisson(mean=20.0), severity=Exponential(mean=5.0)) for name in "ab"
    )
    book = Book(lines=lines, dependences=(factor(law="lognormal", variance=0.2),))
    results = {engine.name: engine.book(book) for engine in (Fourier(), Simulation(years=50_000))}
    assert not crosscheck(book, results, LEVELS).agrees


def test_what_stays_with_the_simulation_says_so():
    copula = Copula(name="tie", lines=("a", "b"), correlation=0.5)
    refused = Fourier().book(Book(lines=TWO, dependences=(copula,))).refused
    assert "copula 'tie', which acts on annual totals" in refused[GROSS]
    both = (CommonShock(name="storm", lines=("a", "b"), rate=0.5), factor("inflation"))
    assert "act on the same lines" in Fourier().book(Book(lines=TWO, dependences=both)).refused[GROSS]
    # One loss a year of one amount: the sum has as many steps as the factor has values.
    one = Line(
        name="a",
        frequency=CountTable(probabilities=[0.0, 1.0]),
        severity=SizeTable(sizes=[1.0], probabilities=[1.0]),
    )
    text = Fourier().book(Book(lines=(one,), dependences=(factor("inflation", lines="a"),))).refused[GROSS]
    assert "64 values of each factor that the lines share leave probabilities off by up to" in text
