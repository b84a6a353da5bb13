"""What a dependence says of a block of years, and which dependences are refused.

Random checks: fixed seeds, four standard errors. Figures marked "published formula" follow from the formula
of the source named; those marked "value from memory, recomputed" were printed in the source as recalled.
"""

import itertools

import numpy as np
import pytest
from scipy import stats

from lossagg.engines.book import Book, Line
from lossagg.engines.correlation import factor_of, nearest_correlation
from lossagg.engines.dependence import CommonShock, Copula, SharedFactor, independent, marginal_frequency
from lossagg.engines.joint import joint_block
from lossagg.engines.streams import BLOCK_YEARS
from lossagg.errors import EngineError, InputError
from lossagg.families import Binomial, Exponential, NegativeBinomial, Poisson
from lossagg.kernels.counts import PART, poisson_counts


def line(name, frequency=None):
    return Line(name=name, frequency=frequency or Poisson(mean=3.0), severity=Exponential(mean=1.0))


LINES = tuple(line(name) for name in "abc")


def scores(correlation, degrees=None, blocks=4, lines="ab"):
    copula = Copula(name="tie", lines=tuple(lines), correlation=correlation, degrees_of_freedom=degrees)
    own = tuple(line(name) for name in lines)
    parts = [joint_block(own, (copula,), seed=7, block=block).ranks for block in range(blocks)]
    return np.array([np.concatenate([part[name] for part in parts]) for name in lines])


@pytest.mark.parametrize("degrees", [None, 4.0], ids=["gaussian", "t"])
@pytest.mark.parametrize("rho", [0.2, 0.5, 0.9])
def test_kendall_is_two_over_pi_arcsine(rho, degrees):
    """For both copulas (Kruskal 1958, JASA 53; McNeil, Frey and Embrechts, "Quantitative Risk Management",
    propositions 7.32 and 7.43): published formula. Standard error of tau at most 2/3 sqrt(1 / n) * 1.5."""
    first, second = scores(rho, degrees, blocks=1)
    tau = stats.kendalltau(first, second).statistic
    assert abs(tau - 2 / np.pi * np.arcsin(rho)) <= 4 / np.sqrt(BLOCK_YEARS)


@pytest.mark.parametrize(
    ("degrees", "level", "probability"),
    [
        (None, 0.95, 0.0121894287672),
        (None, 0.99, 0.00129392441826),
        (8.0, 0.99, 0.00129392441826 * 1.64681054691),
        (4.0, 0.95, 0.0121894287672 * 1.38947942912),
        (4.0, 0.99, 0.00129392441826 * 2.22330169205),
        (3.0, 0.995, 0.000496295841977 * 3.25538006715),
    ],
)
def test_both_beyond_a_level(degrees, level, probability):
    """Joint exceedance at correlation 0.5 (McNeil, Frey and Embrechts, "Quantitative Risk Management", table
    of joint quantile exceedance probabilities; values from memory, recomputed by quadrature)."""
    both = (stats.rankdata(scores(0.5, degrees, blocks=8), axis=1) > level * 8 * BLOCK_YEARS).all(axis=0)
    error = np.sqrt(probability / both.size)
    assert abs(both.mean() - probability) <= 4 * error


def test_tail_dependence_of_the_t_copula():
    """2 t_5(-sqrt(5 (1 - rho) / (1 + rho))) = 0.63 at 4 degrees of freedom and correlation 0.9 (Embrechts,
    McNeil and Straumann 2002, table; value from memory, recomputed): approached from above at 99.9 %."""
    ranks = stats.rankdata(scores(0.9, 4.0, blocks=16), axis=1) / (16 * BLOCK_YEARS)
    both = (ranks > 0.999).all(axis=0).mean() / 0.001
    limit = 2 * stats.t.cdf(-np.sqrt(5 * 0.1 / 1.9), 5)
    assert limit == pytest.approx(0.629811871192, abs=1e-11)
    assert limit - 4 * np.sqrt(limit / 524) <= both <= limit + 4 * np.sqrt(limit / 524) + 0.02


def test_a_matrix_gives_each_pair_its_own_correlation():
    matrix = [[1.0, 0.6, -0.3], [0.6, 1.0, 0.1], [-0.3, 0.1, 1.0]]
    seen = np.corrcoef(scores(matrix, blocks=2, lines="abc"))
    np.testing.assert_allclose(seen, matrix, atol=4 / np.sqrt(2 * BLOCK_YEARS))


def test_perfect_correlation_and_its_opposite_are_exact():
    assert np.argsort(scores(1.0)[0]).tolist() == np.argsort(scores(1.0)[1]).tolist()
    assert np.argsort(scores(-1.0)[0]).tolist() == np.argsort(-scores(-1.0)[1]).tolist()


def test_years_move_by_rank_and_none_is_lost():
    """The totals come out with the ranks of the scores; equal totals keep the order of their years."""
    drawn = joint_block(LINES, (Copula(name="tie", lines=("a", "b"), correlation=0.5),), seed=1, block=0)
    totals = np.random.default_rng(1).integers(0, 5, size=1000).astype(float)
    place = drawn.source("a", totals)
    assert sorted(place) == list(range(1000))
    order = np.argsort(drawn.ranks["a"][:1000])
    assert (np.diff(totals[place][order]) >= 0).all()
    for value in range(5):
        assert (np.diff(place[order][totals[place][order] == value]) > 0).all()
    assert drawn.source("c", totals).tolist() == list(range(1000))


@pytest.mark.parametrize("law", ["gamma", "lognormal"])
def test_factors_have_mean_one_and_the_variance_asked(law):
    factor = SharedFactor(name="climate", lines=("a", "b"), on="inflation", variance=0.16, law=law)
    parts = [joint_block(LINES, (factor,), seed=3, block=k) for k in range(8)]
    values = np.concatenate([part.factors["climate"] for part in parts])
    assert factor.factor.mean() == pytest.approx(1.0, rel=1e-12)
    assert factor.factor.variance() == pytest.approx(0.16, rel=1e-12)
    assert abs(values.mean() - 1.0) <= 4 * 0.4 / np.sqrt(values.size)
    assert stats.kstest(values, factor.factor.cdf).pvalue > 1e-4
    assert parts[0].scale["a"] is parts[0].scale["b"]
    assert "c" not in parts[0].scale
    assert not parts[0].counts


def test_counts_under_a_shared_gamma_factor_are_negative_binomial_and_correlated():
    """Cov(N1, N2) = m1 m2 variance; each count alone by the chi-squared test against its closed law."""
    lines = (line("a", Poisson(mean=3.0)), line("b", Poisson(mean=400.0)))
    factor = SharedFactor(name="climate", lines=("a", "b"), on="frequency", variance=0.4)
    parts = [joint_block(lines, (factor,), seed=5, block=k).counts for k in range(4)]
    a, b = (np.concatenate([part[name] for part in parts]) for name in "ab")
    for own, seen in zip(lines, (a, b), strict=True):
        law = marginal_frequency(own, (factor,))
        assert law == NegativeBinomial(mean=own.frequency.mean(), dispersion=0.4)
        edges = np.unique(np.quantile(seen, np.linspace(0.02, 0.98, 25)).astype(int))
        expected = np.diff(np.concatenate(([0.0], law.cdf(edges), [1.0]))) * seen.size
        observed = np.diff(np.concatenate(([0], np.searchsorted(np.sort(seen), edges, "right"), [seen.size])))
        assert stats.chisquare(observed, expected).pvalue > 1e-4
    products = (a - 3.0) * (b - 400.0)
    assert abs(products.mean() - 480.0) <= 4 * products.std() / np.sqrt(a.size)


def test_a_negative_binomial_count_keeps_its_own_spread_beside_the_shared_one():
    """Given the factor t, mean m t and variance m t + d (m t)**2: in all m + m**2 ((1 + d) (1 + v) - 1)."""
    lines = (line("a", NegativeBinomial(mean=5.0, dispersion=0.3)), line("b"))
    factor = SharedFactor(name="climate", lines=("a", "b"), on="frequency", variance=0.2)
    seen = np.concatenate([joint_block(lines, (factor,), seed=5, block=k).counts["a"] for k in range(8)])
    squares = (seen - 5.0) ** 2
    assert abs(seen.mean() - 5.0) <= 4 * seen.std() / np.sqrt(seen.size)
    truth = 5.0 + 25.0 * (1.3 * 1.2 - 1.0)
    assert abs(squares.mean() - truth) <= 4 * squares.std() / np.sqrt(seen.size)
    assert marginal_frequency(lines[0], (factor,)) is None


def test_common_shocks_are_part_of_the_counts():
    lines = (line("a", Poisson(mean=1.5)), line("b", Poisson(mean=2.5)), line("c"))
    shock = CommonShock(name="storm", lines=("a", "b"), rate=0.5)
    parts = [joint_block(lines, (shock,), seed=2, block=k) for k in range(4)]
    a, b, c, d = (
        np.concatenate([kind[name] for kind in kinds])
        for kinds, name in (
            ([part.counts for part in parts], "a"),
            ([part.counts for part in parts], "b"),
            ([part.shocks for part in parts], "a"),
            ([part.shocks for part in parts], "b"),
        )
    )
    assert (c == d).all()
    a, b = a + c, b + c
    for seen, mean in ((a, 1.5), (b, 2.5), (c, 0.5)):
        assert abs(seen.mean() - mean) <= 4 * np.sqrt(mean / seen.size)
        assert abs(seen.var() / mean - 1) <= 4 * np.sqrt((2 + 1 / mean) / seen.size)
    products = (a - 1.5) * (b - 2.5)
    assert abs(products.mean() - 0.5) <= 4 * products.std() / np.sqrt(a.size)
    assert "c" not in parts[0].counts


def test_what_a_line_draws_depends_on_its_own_dependence_only():
    """Other lines, other dependences and their order change nothing; another seed or block changes all."""
    factor = SharedFactor(name="climate", lines=("a", "b"), on="frequency", variance=0.2)
    prices = SharedFactor(name="prices", lines=("a", "c"), on="inflation", variance=0.1)
    both = joint_block(LINES, (factor, prices), seed=1, block=0)
    turned = joint_block(LINES[::-1], (prices, factor), seed=1, block=0)
    alone = joint_block(LINES[:2], (factor,), seed=1, block=0)
    assert both.counts["a"].tolist() == turned.counts["a"].tolist() == alone.counts["a"].tolist()
    assert both.scale["c"].tolist() == turned.scale["c"].tolist()
    for other in (
        joint_block(LINES, (factor,), seed=2, block=0),
        joint_block(LINES, (factor,), seed=1, block=1),
    ):
        assert alone.counts["a"].tolist() != other.counts["a"].tolist()


def test_independent_keeps_each_line_as_it_is_by_itself():
    given = (
        SharedFactor(name="climate", lines=("a", "b"), on="frequency", variance=0.2),
        CommonShock(name="storm", lines=("c", "d"), rate=0.5),
    )
    apart = independent(given)
    assert [factor.lines for factor in apart] == [("a",), ("b",)]
    assert {factor.variance for factor in apart} == {0.2}
    assert len({factor.name for factor in apart}) == 2


def test_exact_engines_get_independent_lines_or_a_reason():
    factor = SharedFactor(name="climate", lines=("a", "b"), on="frequency", variance=0.2)
    book = Book(lines=LINES, dependences=(factor,))
    assert book.independent_lines(["a", "c"])[0].frequency == NegativeBinomial(mean=3.0, dispersion=0.2)
    assert book.independent_lines(["c"]) == (LINES[2],)
    assert len(book.independent_lines(name for name in "cb")) == 2
    with pytest.raises(EngineError, match=r"a and b share 'climate'.*The simulation computes it"):
        book.independent_lines(["c", "b", "a"])
    assert [own.frequency.dispersion for own in book.independent().independent_lines("ab")] == [0.2, 0.2]
    prices = Book(
        lines=LINES, dependences=(SharedFactor(name="p", lines="ab", on="inflation", variance=0.2),)
    )
    with pytest.raises(EngineError, match="a with its random factor has no law in closed form"):
        prices.independent_lines(["a"])


@pytest.mark.parametrize("kernel", [poisson_counts, poisson_counts.py_func], ids=["compiled", "plain"])
def test_counts_are_the_inverse_of_the_distribution(kernel):
    """One uniform per count below a mean of 256: the smallest n with P(N <= n) >= u, from scipy."""
    means = np.repeat([0.0, 0.01, 1.0, 30.0, 255.0], 200)
    uniforms = np.random.default_rng(3).random(means.size)
    uniforms[-1], uniforms[0] = 1 - 2.0**-53, 0.5
    counts = np.empty(means.size, dtype=np.int64)
    kernel(means, uniforms, counts)
    truth = stats.poisson.ppf(uniforms, means)
    truth[means == 0] = 0
    np.testing.assert_array_equal(counts[:-1], truth[:-1])
    # The sum of the probabilities is off by its round-off, below 1e-13.
    assert stats.poisson.isf(1e-13, 255.0) <= counts[-1] <= 400


def test_large_means_are_drawn_in_parts():
    means = np.full(4000, 3 * PART - 8.0)
    counts = np.empty(means.size, dtype=np.int64)
    poisson_counts(means, np.random.default_rng(4).random(3 * means.size), counts)
    mean = means[0]
    assert abs(counts.mean() - mean) <= 4 * np.sqrt(mean / counts.size)
    assert abs(counts.var() / mean - 1) <= 4 * np.sqrt(2 / counts.size)


CASES = [
    ({"correlation": [[1.0, 0.5], [0.4, 1.0]]}, "not symmetric, in dependence 'tie', row 1, column 2"),
    ({"correlation": [[1.0, 0.5], [0.5, 0.9]]}, "with itself is 1, in dependence 'tie', row 2, column 2"),
    ({"correlation": [[1.0, 30.0], [30.0, 1.0]]}, "between -1 and 1"),
    ({"correlation": [[1.0, 0.5, 0.1], [0.5, 1.0, 0.1]]}, "2 rows of 2, in the order of the lines"),
    ({"correlation": [[1.0]]}, "2 rows of 2"),
    ({"correlation": [[1.0, float("nan")], [float("nan"), 1.0]]}, "must not be NaN"),
    ({"correlation": 30.0}, "Write 0.3 for 30 %"),
    ({"correlation": -0.9, "lines": ("a", "b", "c")}, "must lie between -0.5 and 1"),
    (
        {"lines": ("a", "b", "c"), "correlation": [[1, 0.9, -0.9], [0.9, 1, 0.9], [-0.9, 0.9, 1]]},
        "negative eigenvalue.*-0.8",
    ),
    ({"lines": ("a",)}, "between two lines or more"),
    ({"lines": ("a", "a")}, "named twice"),
    ({"degrees_of_freedom": 0.0}, "degrees_of_freedom must be above 0"),
]


@pytest.mark.parametrize(("change", "text"), CASES, ids=[text[:30] for _, text in CASES])
def test_bad_copulas_are_refused(change, text):
    with pytest.raises(InputError, match=text):
        Copula(**({"name": "tie", "lines": ("a", "b"), "correlation": 0.5} | change))


def test_the_nearest_correlation_matrix():
    """Higham 2002, section 4: [[1, 1, 0], [1, 1, 1], [0, 1, 1]] has the nearest matrix with 0.7607 beside the
    diagonal and 0.1573 in the corners (value from memory, recomputed: see the optimality below)."""
    given = np.array([[1.0, 1.0, 0.0], [1.0, 1.0, 1.0], [0.0, 1.0, 1.0]])
    nearest = nearest_correlation(given)
    assert nearest[0, 1] == pytest.approx(0.7607, abs=5e-5)
    assert nearest[0, 2] == pytest.approx(0.1573, abs=5e-5)
    assert np.linalg.eigvalsh(nearest)[0] > -1e-12
    distance = np.sum((nearest - given) ** 2)
    for x, y in itertools.product(np.linspace(0.6, 0.9, 61), np.linspace(0.0, 0.3, 61)):
        other = np.array([[1, x, y], [x, 1, x], [y, x, 1]])
        if np.linalg.eigvalsh(other)[0] >= 0:
            assert np.sum((other - given) ** 2) >= distance - 1e-9
    Copula(name="tie", lines=("a", "b", "c"), correlation=nearest.tolist())
    good = np.array([[1.0, 0.3], [0.3, 1.0]])
    np.testing.assert_allclose(nearest_correlation(good), good, atol=1e-12)
    np.testing.assert_allclose(factor_of(nearest) @ factor_of(nearest).T, nearest, atol=1e-12)


FACTOR = SharedFactor(name="climate", lines=("a", "b"), on="frequency", variance=0.2)
CONFLICTS = [
    ((FACTOR, FACTOR), "two dependences have the same name"),
    ((SharedFactor(name="x", lines=("a", "d"), on="inflation", variance=0.1),), "does not exist.*'d'"),
    ((FACTOR, CommonShock(name="s", lines=("b", "c"), rate=0.1)), "'climate' acts already"),
    ((Copula(name="tie", lines=("b", "c"), correlation=0.2), FACTOR), "'tie' acts already"),
    ((FACTOR, Copula(name="tie", lines=("b", "c"), correlation=0.2)), "'climate' acts already"),
    ((CommonShock(name="s", lines=("a", "b"), rate=3.1),), "at most 3"),
    ((CommonShock(name="s", lines=("a", "e"), rate=0.1),), "binomial, which has no rate"),
    ((SharedFactor(name="f", lines=("a", "e"), on="frequency", variance=1.0),), "no rate of events"),
]


@pytest.mark.parametrize(("dependences", "text"), CONFLICTS, ids=[text[:25] for _, text in CONFLICTS])
def test_contradictions_are_refused(dependences, text):
    lines = (*LINES, line("e", Binomial(trials=3, probability=0.5)))
    with pytest.raises(InputError, match=text):
        Book(lines=lines, dependences=dependences)


def test_frequency_and_inflation_may_both_act_on_a_line():
    prices = SharedFactor(name="prices", lines=("a", "c"), on="inflation", variance=0.1)
    assert Book(lines=LINES, dependences=(FACTOR, prices)).dependences == (FACTOR, prices)


@pytest.mark.parametrize(
    ("change", "text"),
    [
        ({"variance": 0.0}, "variance must be above 0"),
        ({"law": "weibull"}, "law must be one of gamma and lognormal"),
        ({"on": "severity"}, "on must be one of frequency and inflation"),
        ({"lines": ()}, "between lines"),
    ],
)
def test_bad_factors_are_refused(change, text):
    with pytest.raises(InputError, match=text):
        SharedFactor(**({"name": "x", "lines": ("a", "b"), "on": "frequency", "variance": 0.2} | change))


def test_descriptions_say_what_is_assumed():
    assert "multiplied by one gamma factor with mean 1 and variance 0.2" in FACTOR.describe()
    assert Copula(name="t", lines=("a", "b"), correlation=0.5, degrees_of_freedom=4).describe() == (
        "the annual totals of a, b are tied by a copula: t with 4 degrees of freedom, correlation 0.5"
    )
    assert (
        CommonShock(name="s", lines=("a", "b"), rate=0.5).describe()
        == "0.5 events a year cost a, b one loss each"
    )
