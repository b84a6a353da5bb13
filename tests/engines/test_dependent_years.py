"""Simulated books whose lines depend on each other, against closed forms and published values.

Fixed seeds, four standard errors; what is "published formula" follows from the formula of its source.
"""

import itertools

import numpy as np
import pytest
from scipy import fft, stats

from lossagg.cover import Cover
from lossagg.engines.book import GROSS, Book, Line, PlacedCover, Subject
from lossagg.engines.dependence import CommonShock, Copula, SharedFactor
from lossagg.engines.fourier import Fourier
from lossagg.engines.panjer import Panjer
from lossagg.engines.simulation import Simulation
from lossagg.engines.streams import BLOCK_YEARS
from lossagg.families import CountTable, Exponential, Lognormal, Lomax, NegativeBinomial, Poisson, SizeTable

ONE = CountTable(probabilities=[0.0, 1.0])


def annual(book, years, seed=1, **settings):
    result = Simulation(years=years, seed=seed, **settings).book(book)
    return {subject: loss.annual for subject, loss in result.losses.items()}


def within(samples, truth):
    return abs(samples.mean() - truth) <= 4 * samples.std() / np.sqrt(samples.size)


def quantile_within(samples, level, truth):
    """As many years above the true quantile as chance allows."""
    above = (samples > truth).mean()
    return abs(above - (1 - level)) <= 4 * np.sqrt(level * (1 - level) / samples.size)


def geometric(mean, most):
    """P(X = 1), ..., P(X = most) of the geometric law on 1, 2, ... with this mean."""
    p = 1 / mean
    return p * (1 - p) ** np.arange(most)


def table(mean, most=400):
    masses = geometric(mean, most)
    return SizeTable(sizes=range(1, most + 1), probabilities=masses / masses.sum())


def test_a_shared_gamma_factor_against_the_closed_transform():
    """Poisson 3 and 2, geometric sizes of mean 10/3 and 10, gamma factor of variance 0.4: given the factor
    the lines are independent, so E[z**S] = (1 - 0.4 (3 (g1 - 1) + 2 (g2 - 1)))**-2.5 (Wang 1998). VaR 99.5 %
    is 142 against 128 for independent lines, and the covariance adds 160.0 to the variance (own numbers by
    published formula; made independently of this package)."""
    lines = (
        Line(name="a", frequency=Poisson(mean=3.0), severity=table(10 / 3)),
        Line(name="b", frequency=Poisson(mean=2.0), severity=table(10.0)),
    )
    factor = SharedFactor(name="climate", lines=("a", "b"), on="frequency", variance=0.4)
    book = Book(lines=lines, dependences=(factor,))
    years = annual(book, 400_000)
    a, b = (years[Subject("line", name)] for name in "ab")
    n = 4096
    transform = [fft.rfft(np.concatenate(([0.0], geometric(mean, 400))), n) for mean in (10 / 3, 10.0)]
    exponent = 3 * (transform[0] - 1) + 2 * (transform[1] - 1)
    below = np.cumsum(fft.irfft((1 - 0.4 * exponent) ** -2.5, n))
    assert np.searchsorted(below, 0.995) == 142
    for x in (0, 30, 100, 142, 200):
        p = 1 - below[x]
        assert abs((years[GROSS] > x).mean() - p) <= 4 * np.sqrt(p * (1 - p) / years[GROSS].size)
    assert within(2 * (a - 10.0) * (b - 20.0), 160.0)
    apart = Fourier().book(book.independent()).losses[GROSS]
    assert apart.value_at_risk(0.995) == 128.0
    assert apart.accuracy("value_at_risk", 0.995) == (128.0, 128.0)


def test_lines_alone_are_computed_exactly_and_agree():
    """Under a gamma factor a Poisson line is negative binomial: both exact engines check it."""
    lines = (
        Line(name="a", frequency=Poisson(mean=3.0), severity=Exponential(mean=10.0)),
        Line(name="b", frequency=Poisson(mean=1.0), severity=Exponential(mean=100.0)),
    )
    factor = SharedFactor(name="climate", lines=("a", "b"), on="frequency", variance=0.3)
    book = Book(lines=lines, dependences=(factor,))
    simulated = Simulation(years=100_000).book(book).losses[Subject("line", "a")]
    for engine in (Fourier(), Panjer()):
        result = engine.book(book)
        assert not result.refused
        exact = result.losses[Subject("line", "a")]
        assert exact.sd() == pytest.approx(np.sqrt(3 * 200 + 0.3 * 900), rel=1e-6)
        assert abs(simulated.sd() - exact.sd()) <= 4 * simulated.standard_error("sd")


@pytest.mark.parametrize("law", ["gamma", "lognormal"])
def test_shared_inflation_scales_every_loss_of_a_year(law):
    """S = f T with T as without the factor: Var[S] = (1 + v) E[T**2] - E[T]**2, Cov = v E[T1] E[T2]. The
    covers see the inflated losses: with the whole loss in a layer it pays its excess."""
    lines = (
        Line(name="a", frequency=ONE, severity=SizeTable(sizes=[100.0], probabilities=[1.0])),
        Line(name="b", frequency=Poisson(mean=4.0), severity=Lognormal(mu=0.0, sigma=1.0)),
    )
    factor = SharedFactor(name="prices", lines=("a", "b"), on="inflation", variance=0.09, law=law)
    layer = PlacedCover(name="layer", terms=Cover(deductible=110.0), lines=("a",))
    years = annual(Book(lines=lines, covers=(layer,), dependences=(factor,)), 100_000)
    a, b = (years[Subject("line", name)] for name in "ab")
    assert stats.kstest(a / 100.0, factor.factor.cdf).pvalue > 1e-4
    np.testing.assert_allclose(years[Subject("cover", "layer")], np.maximum(a - 110.0, 0.0), atol=1e-9)
    mean, square = 4 * np.exp(0.5), 4 * np.exp(2.0) + 16 * np.exp(1.0)
    assert within(b, mean)
    assert within((b - mean) ** 2, 1.09 * square - mean**2)
    assert within((a - 100.0) * (b - mean), 0.09 * 100 * mean)


def test_common_shocks_against_the_compound_poisson_sum():
    """N1 = A + C, N2 = B + C, rates 1, 2, 0.5, sizes 0.5/0.3/0.2 on 1..3 and 0.6/0.4 on 1..2 (Lindskog and
    McNeil 2003): covariance 0.5 E[X1] E[X2] = 1.19, and the sum is compound Poisson (published formula)."""
    book = Book(
        lines=(
            Line(
                name="a",
                frequency=Poisson(mean=1.5),
                severity=SizeTable(sizes=[1, 2, 3], probabilities=[0.5, 0.3, 0.2]),
            ),
            Line(
                name="b",
                frequency=Poisson(mean=2.5),
                severity=SizeTable(sizes=[1, 2], probabilities=[0.6, 0.4]),
            ),
        ),
        dependences=(CommonShock(name="storm", lines=("a", "b"), rate=0.5),),
    )
    years = annual(book, 400_000)
    a, b, total = years[Subject("line", "a")], years[Subject("line", "b")], years[GROSS]
    assert within((a - a.mean()) * (b - b.mean()), 1.19)
    for samples, truth in ((a, 5.25), (b, 5.5), (total, 13.13)):
        assert within((samples - samples.mean()) ** 2, truth)
    published = [
        0.0301973834223, 0.0513355518179, 0.0813819483231, 0.100673043433, 0.112289096078, 0.113694298602,
        0.106853492366, 0.0945520537787, 0.0793659908133, 0.0637057763824, 0.049136923586,
    ]  # fmt: skip
    for amount, p in enumerate(published):
        assert abs((total == amount).mean() - p) <= 4 * np.sqrt(p * (1 - p) / total.size)
    assert abs((total <= 15).mean() - 0.985629702479) <= 4 * np.sqrt(0.0144 * 0.9856 / total.size)
    # Each line alone is what its frequency says.
    assert Fourier().book(book).losses[Subject("line", "a")].mean() == pytest.approx(1.5 * 1.7)


EXPONENTIALS = tuple(Line(name=name, frequency=ONE, severity=Exponential(mean=1.0)) for name in "ab")


@pytest.mark.parametrize(
    ("rho", "level", "value"),
    [
        (0.25, 0.95, 5.05071007389),
        (0.25, 0.99, 7.24992395715),
        (0.5, 0.95, 5.36125874879),
        (0.5, 0.99, 7.89215721604),
        (0.75, 0.95, 5.67539655433),
        (0.75, 0.99, 8.54880686736),
        (1.0, 0.95, 5.99146454711),
        (1.0, 0.99, 9.21034037198),
        (0.0, 0.95, 4.74386451839),
        (0.0, 0.99, 6.63835206799),
        (-1.0, 0.95, np.log(4 / (1 - 0.95**2))),
        (-1.0, 0.99, np.log(4 / (1 - 0.99**2))),
    ],
)
def test_the_sum_of_two_exponentials_under_a_gaussian_copula(rho, level, value):
    """By the conditional integral (McNeil, Frey and Embrechts; Denuit, Dhaene, Goovaerts and Kaas 2005:
    published formula); at 1, 0 and -1 comonotonic, independent and countermonotonic (Dhaene et al. 2002): the
    last with P(S <= s) = sqrt(1 - 4 exp(-s)), since S = -log(u (1 - u))."""
    book = Book(lines=EXPONENTIALS, dependences=(Copula(name="tie", lines=("a", "b"), correlation=rho),))
    total = annual(book, 4 * BLOCK_YEARS)[GROSS]
    assert quantile_within(total, level, value)


def test_comonotonic_lines_add_up_quantile_by_quantile():
    """Eight Pareto(2) lines at correlation 1: VaR 99 % = 8 * 9 = 72.0 (Embrechts, Puccetti and Rueschendorf
    2013; value from memory, recomputed)."""
    lines = tuple(Line(name=name, frequency=ONE, severity=Lomax(alpha=2.0, scale=1.0)) for name in "abcdefgh")
    book = Book(lines=lines, dependences=(Copula(name="tie", lines=tuple("abcdefgh"), correlation=1.0),))
    total = annual(book, 2 * BLOCK_YEARS)[GROSS]
    assert quantile_within(total, 0.99, 72.0)


def test_the_linear_correlation_of_lognormals_under_a_copula():
    """At copula correlation 0.5, sigma 1 and 1.5: 0.2925 (Embrechts, McNeil and Straumann 2002, published
    formula): (exp(0.5 * 1.5) - 1) / sqrt((e - 1) (exp(2.25) - 1))."""
    lines = tuple(
        Line(name=name, frequency=ONE, severity=Lognormal(mu=0.0, sigma=sigma))
        for name, sigma in (("a", 1.0), ("b", 1.5))
    )
    book = Book(lines=lines, dependences=(Copula(name="tie", lines=("a", "b"), correlation=0.5),))
    years = annual(book, 16 * BLOCK_YEARS)
    a, b = (years[Subject("line", name)] for name in "ab")
    assert within(a * b, np.exp((1 + 2.25) / 2 + 0.75))
    truth = np.expm1(0.75) / np.sqrt(np.expm1(1.0) * np.expm1(2.25))
    assert truth == pytest.approx(0.292489347507, rel=1e-11)


HULL = Line(
    name="hull", frequency=NegativeBinomial(mean=2.0, dispersion=0.5), severity=Lognormal(mu=9.0, sigma=1.2)
)
CREW = Line(name="crew", frequency=Poisson(mean=6.0), severity=Lognormal(mu=8.0, sigma=0.9))
QUAY = Line(name="quay", frequency=Poisson(mean=0.4), severity=Lognormal(mu=11.0, sigma=1.0))
CARGO = Line(name="cargo", frequency=Poisson(mean=1.0), severity=Lognormal(mu=9.5, sigma=1.0))
EXCESS = PlacedCover(
    name="excess",
    terms=Cover(deductible=20_000.0, limit=100_000.0, annual_limit=250_000.0),
    lines=("hull", "quay"),
)
MIXED = Book(
    lines=(HULL, CREW, QUAY, CARGO),
    covers=(EXCESS,),
    dependences=(
        SharedFactor(name="activity", lines=("hull", "crew"), on="frequency", variance=0.1, law="lognormal"),
        SharedFactor(name="prices", lines=("crew", "hull"), on="inflation", variance=0.01),
        Copula(name="harbour", lines=("quay", "cargo"), correlation=0.4, degrees_of_freedom=3.0),
    ),
)


def test_a_copula_leaves_every_line_its_years():
    """Marginals unchanged: the same years in another order, block by block, covers moving with them."""
    tied = annual(MIXED, BLOCK_YEARS + 1000)
    loose = annual(
        Book(lines=MIXED.lines, covers=MIXED.covers, dependences=MIXED.dependences[:2]), BLOCK_YEARS + 1000
    )
    for first, last in ((0, BLOCK_YEARS), (BLOCK_YEARS, BLOCK_YEARS + 1000)):
        for name in ("quay", "cargo"):
            own, before = tied[Subject("line", name)][first:last], loose[Subject("line", name)][first:last]
            assert not np.array_equal(own, before)
            np.testing.assert_array_equal(np.sort(own), np.sort(before))
    for name in ("hull", "crew"):
        np.testing.assert_array_equal(tied[Subject("line", name)], loose[Subject("line", name)])
    rank = stats.spearmanr(tied[Subject("line", "quay")], tied[Subject("line", "cargo")]).statistic
    assert rank > 0.15
    np.testing.assert_allclose(
        tied[GROSS], sum(tied[Subject("line", line.name)] for line in MIXED.lines), rtol=1e-12
    )


def test_dependent_years_are_the_same_bytes_everywhere():
    """One thread, two and seven; lines and dependences in any order."""
    years = 2 * BLOCK_YEARS + 17
    base = annual(MIXED, years, seed=3, workers=1)
    others = [annual(MIXED, years, seed=3, workers=workers) for workers in (2, 7)]
    turned = Book(lines=MIXED.lines[::-1], covers=MIXED.covers, dependences=MIXED.dependences[::-1])
    others.append(annual(turned, years, seed=3))
    for subject, other in itertools.product(base, others):
        assert base[subject].tobytes() == other[subject].tobytes(), subject


def test_dependence_raises_the_tail_and_not_the_mean():
    """The mean of the gross is that of the lines; at 99.5 % the dependent years are worse."""
    tied = Simulation(years=200_000).book(MIXED).losses[GROSS]
    loose = Simulation(years=200_000, seed=2).book(MIXED.independent()).losses[GROSS]
    truth = sum(line.frequency.mean() * line.severity.mean() for line in MIXED.lines)
    for loss in (tied, loose):
        assert abs(loss.mean() - truth) <= 4 * loss.standard_error("mean")
    assert tied.accuracy("value_at_risk", 0.9)[0] > loose.accuracy("value_at_risk", 0.9)[1]
