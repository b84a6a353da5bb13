"""Counts and sizes drawn by the simulation against the laws themselves."""

import numpy as np
import pytest
from scipy import stats

from lossagg.engines.quantile_table import DEPTH, TOLERANCE, quantile_table
from lossagg.engines.search_table import count_sampler
from lossagg.engines.streams import block_state
from lossagg.errors import EngineError
from lossagg.families import (
    COUNT_FAMILIES,
    SIZE_FAMILIES,
    Binomial,
    Burr,
    CountTable,
    Exponential,
    Gamma,
    GeneralizedPareto,
    InverseGaussian,
    LogGamma,
    LogLogistic,
    Lognormal,
    Lomax,
    Mixture,
    NegativeBinomial,
    Pareto,
    Poisson,
    SizeTable,
    Spliced,
    Weibull,
    ZeroInflated,
    ZeroModified,
)
from lossagg.kernels.simulation import draw_bits, draw_sizes, draw_uniforms

SPLICED = Spliced(
    body=Lognormal(mu=10.0, sigma=1.8),
    tail=GeneralizedPareto(shape=0.5, scale=150_000.0, threshold=200_000.0),
    threshold=200_000.0,
    tail_probability=0.05,
)
CONTINUOUS = {
    "exponential": Exponential(mean=1000.0),
    "lognormal": Lognormal(mu=10.0, sigma=1.8),
    "lognormal, wide": Lognormal(mu=5.0, sigma=4.0),
    "pareto": Pareto(alpha=1.5, minimum=10_000.0),
    "pareto, infinite mean": Pareto(alpha=0.5, minimum=1.0),
    "lomax": Lomax(alpha=3.0, scale=2000.0),
    "generalized pareto": GeneralizedPareto(shape=0.4, scale=50.0, threshold=100.0),
    "generalized pareto, bounded": GeneralizedPareto(shape=-0.3, scale=50.0),
    "gamma": Gamma(shape=2.3, scale=400.0),
    "gamma, small shape": Gamma(shape=0.2, scale=400.0),
    "weibull": Weibull(shape=0.7, scale=900.0),
    "inverse gaussian": InverseGaussian(mean=1000.0, shape=300.0),
    "burr": Burr(alpha=2.0, gamma=1.5, scale=800.0),
    "log-gamma": LogGamma(shape=2.5, rate=3.2, minimum=1000.0),
    "log-logistic": LogLogistic(gamma=1.3, scale=10.0),
    "spliced": SPLICED,
    "mixture": Mixture(weights=[0.7, 0.3], parts=[Exponential(mean=100.0), Pareto(alpha=2.0, minimum=500.0)]),
}
TABLES = {name: quantile_table(law) for name, law in CONTINUOUS.items()}


def drawn(table, number, seed=1):
    state = block_state(seed, (3, 4), 0)
    sizes, flagged, probability = np.empty(number), np.empty(number, np.int64), np.empty(number)
    found = draw_sizes(state, table.arrays, sizes, flagged, probability, 0)
    sizes[flagged[:found]] = table.exact(probability[:found])
    return sizes, found


def table_quantile(table, t, lower):
    """The table's answer at chosen probabilities, read by plain arithmetic; NaN where flagged."""
    arrays = table.arrays
    exponent = np.floor(np.log2(t))
    place = (t / 2.0**exponent - 1.0) * 2**arrays.sub_bits
    row = 1 + (exponent + 1 + DEPTH).astype(int) * 2**arrays.sub_bits + place.astype(int)
    row = np.where(exponent < -1 - DEPTH, 0, row) + lower * (1 + DEPTH * 2**arrays.sub_bits)
    f = place - np.floor(place)
    for _ in range(3):
        parts = arrays.cubics[row, 1]
        refined = np.isnan(arrays.cubics[row, 0]) & ~np.isnan(parts)
        row[refined] = parts[refined].astype(int) + (64 * f[refined]).astype(int)
        f[refined] = 64 * f[refined] - np.floor(64 * f[refined])
    c = arrays.cubics[row]
    return c[:, 0] + f * (c[:, 1] + f * (c[:, 2] + f * c[:, 3]))


@pytest.mark.parametrize("name", CONTINUOUS)
def test_interpolation_error_is_below_what_the_table_claims(name):
    """At 20,000 probabilities other than the points the builder measures, over 24 octaves of both
    halves: relative error of the size, or of its tail probability, at most twice the tolerance."""
    law, table = CONTINUOUS[name], TABLES[name]
    assert table.error <= TOLERANCE
    rng = np.random.default_rng(11)
    t = 0.5 * 2.0 ** (-24 * rng.random(20_000))
    for lower in (0, 1):
        ours = table_quantile(table, t, lower)
        known = ~np.isnan(ours)
        exact = np.asarray(law.ppf(t[known]) if lower else law.isf(t[known]))
        error = np.abs(ours[known] - exact) / exact
        far = error > TOLERANCE
        reached = np.asarray((law.cdf if lower else law.sf)(ours[known][far]))
        error[far] = np.minimum(error[far], np.abs(reached / t[known][far] - 1.0))
        assert error.max() <= 2 * TOLERANCE


@pytest.mark.parametrize("name", CONTINUOUS)
def test_few_draws_need_the_law_itself(name):
    """No law falls back to a slow path unseen: the flagged probability is stated, small, and true."""
    table = TABLES[name]
    assert table.flagged < 5e-4
    _, found = drawn(table, 200_000)
    expected = 200_000 * table.flagged
    assert abs(found - expected) <= 5.0 * np.sqrt(expected) + 1.0


@pytest.mark.parametrize("name", CONTINUOUS)
def test_sizes_follow_the_law(name):
    """Kolmogorov-Smirnov at a fixed seed, and within the farthest 1/1000 of each tail (binomial)."""
    law = CONTINUOUS[name]
    sizes, _ = drawn(TABLES[name], 200_000, seed=5)
    assert stats.kstest(sizes, law.cdf).pvalue > 1e-4
    for beyond in (np.sum(sizes > law.isf(1e-3)), np.sum(sizes <= law.ppf(1e-3))):
        assert abs(beyond - 200) < 4.5 * np.sqrt(200)
    limit = float(law.isf(0.02))
    capped = np.minimum(sizes, limit)
    error = np.sqrt(law.limited_second_moment(limit) - law.limited_mean(limit) ** 2) / np.sqrt(sizes.size)
    assert abs(capped.mean() - law.limited_mean(limit)) < 4.5 * error


def test_a_table_of_sizes_is_drawn_exactly():
    """Atoms at zero included, by chi-square; no other amount occurs."""
    law = SizeTable(sizes=[0.0, 10.0, 20.0, 500.0], probabilities=[0.25, 0.5, 0.2, 0.05])
    sizes, found = drawn(quantile_table(law), 100_000)
    values, observed = np.unique(sizes, return_counts=True)
    np.testing.assert_array_equal(values, [0.0, 10.0, 20.0, 500.0])
    assert stats.chisquare(observed, 1e5 * np.array([0.25, 0.5, 0.2, 0.05])).pvalue > 1e-4
    assert found == 0


def test_an_atom_beside_a_density_keeps_its_probability():
    """A mixture of a point and a continuous law: the cells at the atom's ends go to the law itself."""
    law = Mixture(
        weights=[0.3, 0.7],
        parts=[SizeTable(sizes=[50.0], probabilities=[1.0]), Exponential(mean=100.0)],
    )
    sizes, _ = drawn(quantile_table(law), 200_000)
    hits = np.sum(sizes == 50.0)
    assert abs(hits - 60_000) < 4.5 * np.sqrt(200_000 * 0.3 * 0.7)
    others = sizes[sizes != 50.0]
    assert stats.kstest(others, Exponential(mean=100.0).cdf).pvalue > 1e-4


def test_beyond_the_table_the_law_itself_answers():
    """Probabilities the table does not reach, down to 2**-54, have the law's own quantiles."""
    table = TABLES["lognormal"]
    t = np.array([2.0**-54, 2.0**-40, 2.0**-24])
    np.testing.assert_array_equal(table.exact(t), CONTINUOUS["lognormal"].isf(t))
    np.testing.assert_array_equal(table.exact(-t), CONTINUOUS["lognormal"].ppf(t))
    assert np.isnan(table_quantile(table, t, 0)).all()


COUNTS = {
    "poisson, small": Poisson(mean=0.1),
    "poisson": Poisson(mean=3.7),
    "poisson, large": Poisson(mean=20_000.0),
    "poisson, beyond the table": Poisson(mean=400_000.0),
    "negative binomial": NegativeBinomial(mean=6.5, dispersion=0.3),
    "negative binomial, wide": NegativeBinomial(mean=3000.0, dispersion=2.0),
    "binomial": Binomial(trials=20, probability=0.1),
    "table": CountTable(probabilities=[0.1, 0.0, 0.6, 0.3]),
    "zero-modified": ZeroModified(base=Poisson(mean=2.0), zero_probability=0.5),
    "zero-inflated": ZeroInflated(base=NegativeBinomial(mean=4.0, dispersion=0.5), extra_zeros=0.2),
}


def test_no_law_is_left_out_here():
    """Every law of the public surface is drawn in these tests; a new one must be added to them."""
    sizes = {law.family for law in CONTINUOUS.values()} | {SizeTable.family}
    assert sizes == set(SIZE_FAMILIES)
    assert {law.family for law in COUNTS.values()} == set(COUNT_FAMILIES)


@pytest.mark.parametrize("name", COUNTS)
def test_counts_follow_the_law(name):
    """Chi-square over cells of about equal probability, at a fixed seed, and mean within 4.5 errors."""
    law = COUNTS[name]
    counts = count_sampler(law, "line 'x'").draw(block_state(2, (5, 6), 0), 50_000)
    error = np.sqrt(law.variance() / counts.size)
    assert abs(counts.mean() - law.mean()) < 4.5 * error
    edges = np.unique(np.quantile(counts, np.linspace(0.0, 1.0, 15), method="inverted_cdf"))
    cells = np.searchsorted(edges, counts)
    below = np.append(np.asarray(law.cdf(edges[:-1].astype(float))), 1.0)
    expected = counts.size * np.diff(below, prepend=0.0)
    observed = np.bincount(np.minimum(cells, edges.size - 1), minlength=edges.size)
    kept = expected > 5
    # the edges come from the sample: a generous level, still blind to nothing that matters
    statistic = np.sum((observed[kept] - expected[kept]) ** 2 / expected[kept])
    assert stats.chi2.sf(statistic, max(kept.sum() - 1, 1)) > 1e-4


@pytest.mark.parametrize("mean", [0.1, 3.7, 42.5])
def test_poisson_cells(mean):
    """Cells of a sampler test (Hormann 1993; exact distribution): chi-square below its 1e-6 point."""
    starts = {
        0.1: [0, 1, 2, 3],
        3.7: list(range(11)),
        42.5: [0, 25, 30, 34, 37, 40, 42, 44, 46, 49, 53, 58],
    }[mean]
    counts = count_sampler(Poisson(mean=mean), "line 'x'").draw(block_state(9, (1, 1), 0), 1_000_000)
    observed = np.histogram(counts, bins=[*starts, 10**6])[0]
    below = np.append(stats.poisson.cdf(np.array(starts) - 1, mean), 1.0)
    statistic = np.sum((observed - 1e6 * np.diff(below)) ** 2 / (1e6 * np.diff(below)))
    assert statistic < stats.chi2.isf(1e-6, len(starts) - 1)


@pytest.mark.parametrize(
    "law", [Poisson(mean=0.5), Poisson(mean=40.0), NegativeBinomial(mean=300.0, dispersion=2.0)], ids=str
)
def test_guide_and_bisection_draw_the_same(law):
    """Counts from the very bits, by plain arithmetic: ten bits for the cell, 53 for the place in it
    where it holds more than one count; then the smallest n with P(N > n) <= p, by the law."""
    number = 20_000
    counts = count_sampler(law, "line 'x'").draw(block_state(1, (1, 1), 0), number)
    state = block_state(1, (1, 1), 0)
    bits, finer = np.empty(3360, np.uint64), np.empty(20_000, np.uint64)
    draw_bits(state, bits)
    draw_bits(state, finer)
    cells = [int(bits[i % 3360]) >> 10 * (i // 3360) & 1023 for i in range(number)]
    survival = np.append(law.sf(np.arange(counts.max() + 200.0)), 0.0)
    used = 0
    for i, cell in enumerate(cells):
        low, high = (np.searchsorted(-survival, -end / 1024) for end in (cell, cell + 1))
        if low != high:
            p = (cell + ((int(finer[used]) >> 11) + 0.5) * 2.0**-53) / 1024
            used += 1
            low = np.searchsorted(-survival, -p)
        assert counts[i] == low
    assert 0 < used < 20_000


def test_counts_too_wide_for_a_table_are_bisected():
    law = NegativeBinomial(mean=1e5, dispersion=0.5)
    sampler = count_sampler(law, "line 'x'")
    assert sampler.guide.size == 0
    counts = sampler.draw(block_state(1, (1, 1), 0), 2000)
    p = np.empty(2000)
    draw_uniforms(block_state(1, (1, 1), 0), p)
    assert (np.asarray(law.sf(counts)) <= p).all()
    assert (np.asarray(law.sf(counts - 1.0)) > p).all()


def test_a_year_of_a_trillion_losses_is_refused():
    with pytest.raises(EngineError, match=r"may exceed 10\*\*12, in line 'x'; seen: 2000000000000"):
        count_sampler(Poisson(mean=2e12), "line 'x'")
