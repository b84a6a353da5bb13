"""Distances of losses from a law: against the published computing formulas, quadrature, published critical
values, and the honesty of the bootstrap p-values."""

import numpy as np
import pytest
from scipy import integrate, stats

from lossagg import GeneralizedPareto, Lognormal, Pareto
from lossagg.errors import InputError
from lossagg.fitting import fit_severity, fit_spliced, goodness, goodness_test
from lossagg.fitting.bootstrap import Limits, replicates
from lossagg.fitting.goodness import distances

UNIT = GeneralizedPareto(shape=-1.0, scale=1.0)  # uniform between 0 and 1


def uniform_numbers(count, seed):
    return np.random.default_rng(seed).random(count)


def test_complete_losses_by_the_published_computing_formulas():
    """Anderson & Darling 1954, JASA 49; upper tail: Chernobai, Rachev & Fabozzi 2005, AD2up = 2 sum log(1 -
    z) + (1/n) sum (1 + 2 (n - j)) / (1 - z_j), both from memory, checked by quadrature below."""
    z = np.sort(uniform_numbers(37, 3))
    n, j = 37, np.arange(1, 38)
    found = goodness(z, UNIT)
    darling = -n - np.sum((2 * j - 1) / n * (np.log(z) + np.log1p(-z[::-1])))
    upper = 2 * np.sum(np.log1p(-z)) + np.sum((1 + 2 * (n - j)) / (1 - z)) / n
    assert found.anderson_darling == pytest.approx(darling, rel=1e-10)
    assert found.upper_tail == pytest.approx(upper, rel=1e-9)
    assert found.kolmogorov_smirnov == pytest.approx(stats.kstest(z, "uniform").statistic, rel=1e-12)


def naive_integral(z, stopped, power):
    """Gap squared over the weight, integrated numerically on the Kaplan-Meier curve."""
    order = np.lexsort((stopped, z))
    z, stopped = z[order], stopped[order]
    survival, knots, level = 1.0, [0.0], [0.0]
    for place, (x, censored) in enumerate(zip(z, stopped, strict=True)):
        if not censored:
            survival *= 1 - 1 / (len(z) - place)
            knots.append(x)
            level.append(1 - survival)
    end = z[-1] if stopped[-1] else 1.0
    knots.append(end)
    weight = (lambda u: u * (1 - u)) if power == 1 else (lambda u: (1 - u) ** 2)
    parts = [
        integrate.quad(lambda u, k=k: (k - u) ** 2 / weight(u), low, high, epsabs=1e-12)[0]
        for k, low, high in zip(level, knots[:-1], knots[1:], strict=True)
    ]
    gap = max(
        max(abs(k - low), abs(k - high)) for k, low, high in zip(level, knots[:-1], knots[1:], strict=True)
    )
    return len(z) * sum(parts), gap


@pytest.mark.parametrize("largest_stopped", [True, False])
def test_losses_stopped_at_many_limits_by_quadrature(largest_stopped):
    z = uniform_numbers(25, 11)
    stopped = uniform_numbers(25, 12) < 0.3
    stopped[np.argmax(z)] = largest_stopped
    found = goodness(z, UNIT, censored=stopped)
    darling, gap = naive_integral(z, stopped, 1)
    assert found.anderson_darling == pytest.approx(darling, rel=1e-8)
    assert found.upper_tail == pytest.approx(naive_integral(z, stopped, 2)[0], rel=1e-8)
    assert found.kolmogorov_smirnov == pytest.approx(gap, rel=1e-12)


def test_thresholds_of_their_own_turn_every_loss_uniform():
    """A Pareto loss above t has S(x) / S(t) = (t / x)**alpha: no other number may enter."""
    rng = np.random.default_rng(4)
    thresholds = rng.choice([10.0, 30.0, 100.0], 60)
    u = rng.random(60)
    losses = thresholds * (1 - u) ** (-1 / 1.7)
    by_threshold = goodness(losses, Pareto(alpha=1.7, minimum=10.0), truncation=thresholds)
    direct = goodness(u, UNIT)
    assert by_threshold.anderson_darling == pytest.approx(direct.anderson_darling, rel=1e-9)
    assert by_threshold.upper_tail == pytest.approx(direct.upper_tail, rel=1e-8)


def test_the_upper_tail_sees_what_the_others_hardly_see():
    """One loss of a hundred moved tenfold outwards: its distance rises, that of the others hardly."""
    law = Lognormal(mu=0.0, sigma=1.0)
    losses = np.asarray(law.ppf((np.arange(100) + 0.5) / 100))
    moved = np.append(losses[:-1], 10 * losses[-1])
    before, after = goodness(losses, law), goodness(moved, law)
    assert after.kolmogorov_smirnov <= 0.01
    assert after.anderson_darling < before.anderson_darling + 0.1
    assert after.upper_tail > before.upper_tail + 100


def test_losses_at_their_threshold_and_beyond_the_law_leave_the_distances_finite():
    """Amounts are rounded: one may equal its threshold. And a law may be as wrong as it likes."""
    law = Lognormal(mu=0.0, sigma=1.0)
    at_threshold = goodness([1.0, 1.0, 1.5, 2.0, 4.0], law, truncation=1.0)
    assert 0 < at_threshold.anderson_darling < 50
    beyond = goodness([1.0, 1e40, 1e41], law)
    assert np.isfinite([beyond.anderson_darling, beyond.upper_tail]).all()
    assert beyond.upper_tail > 1e100


def test_critical_values_of_a_law_given_in_advance():
    """Anderson & Darling 1954: 2.492 at 5 %, 1.933 at 10 %; Kolmogorov: 1.358 / sqrt(n) (from memory,
    recomputed). Share of 4000 samples of 100 beyond them, within 4 standard errors."""
    rng = np.random.default_rng(9)
    found = [goodness(rng.random(100), UNIT) for _ in range(4000)]
    for values, critical, level in (
        ([g.anderson_darling for g in found], 2.492, 0.05),
        ([g.anderson_darling for g in found], 1.933, 0.10),
        ([g.kolmogorov_smirnov * (10 + 0.12 + 0.11 / 10) for g in found], 1.358, 0.05),
    ):
        share = np.mean(np.array(values) > critical)
        assert abs(share - level) < 4 * np.sqrt(level * (1 - level) / 4000)


def test_the_p_value_knows_that_the_parameters_were_estimated():
    """Exponential with estimated mean, Anderson-Darling: 1.321 is the 5 % point of Stephens 1974, JASA 69,
    (adjusted statistic A2 (1 + 0.6 / n); value from memory, confirmed by the bootstrap here), not 2.492."""
    rng = np.random.default_rng(21)
    losses = rng.exponential(100.0, 60)
    fit = fit_severity(losses, "exponential")
    one = [
        distances(r.amounts, np.zeros(60), r.censored, r.law).anderson_darling * 1.01
        for r in replicates(fit, losses, np.zeros(60), np.zeros(60, dtype=bool), count=800, seed=2)
        if r.law is not None
    ]
    share = np.mean(np.array(one) > 1.321)
    assert abs(share - 0.05) < 4 * np.sqrt(0.05 * 0.95 / len(one))


def test_p_values_are_honest_under_thresholds_and_limits():
    """Losses of the fitted family: p-values below 0.2 in a fifth of the samples; of another one: tiny."""
    low = []
    for seed in range(60):
        rng = np.random.default_rng([77, seed])
        ground = rng.exponential(2000.0, 100)
        thresholds, limits = rng.choice([500.0, 1000.0], 100), rng.choice([5e3, np.inf], 100)
        kept = ground > thresholds
        losses, stopped = np.minimum(ground, limits)[kept], (ground > limits)[kept]
        fit = fit_severity(losses, "exponential", thresholds[kept], stopped)
        test = goodness_test(losses, fit, thresholds[kept], stopped, draws=29, seed=seed)
        low.append([test.kolmogorov_smirnov <= 0.2, test.anderson_darling <= 0.2, test.upper_tail <= 0.2])
    shares = np.mean(low, axis=0)
    assert (np.abs(shares - 0.2) < 4 * np.sqrt(0.2 * 0.8 / 60)).all(), shares


def test_a_wrong_law_is_found_out_and_the_right_one_is_not():
    rng = np.random.default_rng(31)
    losses = rng.pareto(1.2, 300) * 1000 + 1000
    wrong = goodness_test(losses, fit_severity(losses, "exponential", 1000.0), 1000.0, draws=59)
    right = goodness_test(losses, fit_severity(losses, "pareto", 1000.0), 1000.0, draws=59)
    assert max(wrong.kolmogorov_smirnov, wrong.anderson_darling, wrong.upper_tail) <= 1 / 60
    assert min(right.kolmogorov_smirnov, right.anderson_darling, right.upper_tail) > 0.05
    assert right.replicates <= wrong.replicates == 59  # a settled p-value is not drawn longer


def test_same_seed_same_p_value_and_a_replicate_needs_no_other():
    losses = np.random.default_rng(1).lognormal(5, 1, 80)
    fit = fit_severity(losses, "lognormal")
    assert goodness_test(losses, fit, seed=3) == goodness_test(losses, fit, seed=3)
    nothing = np.zeros(80), np.zeros(80, dtype=bool)
    few = list(replicates(fit, losses, *nothing, count=2, seed=3))
    many = list(replicates(fit, losses, *nothing, count=5, seed=3))
    assert (few[1].amounts == many[1].amounts).all()


def test_a_splice_is_tested_as_a_whole():
    rng = np.random.default_rng(14)
    losses = np.concatenate([rng.lognormal(5, 0.6, 200), 1000 + 500 * rng.pareto(2.5, 60)])
    fit = fit_spliced(losses, "lognormal", 1000.0)
    test = goodness_test(losses, fit, draws=39)
    assert test.reason == ""
    assert test.anderson_darling > 0.05


def test_limits_are_drawn_above_the_loss_and_as_often_as_they_were_seen():
    """A third of the policies each stop at 10, stop at 20, and do not stop."""
    rng = np.random.default_rng(6)
    limits = rng.choice([10.0, 20.0, np.inf], 6000)
    ground = rng.exponential(15.0, 6000)
    losses, stopped = np.minimum(ground, limits), ground > limits
    estimated = Limits.of(losses, np.zeros(6000), stopped)
    assert estimated.points.tolist() == [10.0, 20.0]
    assert estimated.beyond == pytest.approx([2 / 3, 1 / 3], abs=0.03)
    drawn = estimated.above(np.array([5.0, 12.0, 25.0] * 4000), 1 - rng.random(12000)).reshape(-1, 3)
    assert (drawn > [5, 12, 25]).all()
    assert np.mean(drawn[:, 0] == 10) == pytest.approx(1 / 3, abs=0.03)
    assert np.mean(drawn[:, 1] == 20) == pytest.approx(1 / 2, abs=0.04)
    assert np.isinf(drawn[:, 2]).all()


def test_a_family_that_cannot_be_fitted_to_its_own_draws_has_no_p_value():
    """Nearly exponential losses: half the draws of the Lomax fit end at the exponential law."""
    losses = 100 * -np.log((np.arange(60) + 0.5) / 60)
    losses = np.ceil(losses / 60) * 60  # heaped: far from any law, so no p-value settles early
    losses[:3] *= 1.8
    test = goodness_test(losses, fit_severity(losses, "lomax"), draws=19)
    assert "have no fit of the same family" in test.reason
    assert (test.kolmogorov_smirnov, test.anderson_darling, test.upper_tail) == (None, None, None)
    assert test.refused + test.replicates == 19


def test_draws_below_one_are_refused():
    losses = [1.0, 2.0, 4.0]
    with pytest.raises(InputError, match="draws must be at least 1"):
        goodness_test(losses, fit_severity(losses, "exponential"), draws=0)


def test_a_law_that_fits_is_drawn_from_no_longer_than_needed():
    """Drawing ends at the draw at which the last distance was reached `enough` times (Besag & Clifford 1991),
    and a law that does not fit is drawn from to the end."""
    losses = np.exp(8 + np.random.default_rng(21).standard_normal(80))
    fit = fit_severity(losses, "lognormal")
    few, more = (goodness_test(losses, fit, draws=199, enough=enough, seed=4) for enough in (5, 10))
    assert few.replicates < more.replicates < 199
    for test, enough in ((few, 5), (more, 10)):
        reached = [
            round(p * (1 + test.replicates)) - 1
            for p in (test.kolmogorov_smirnov, test.anderson_darling, test.upper_tail)
        ]
        assert min(reached) == enough
    wrong = fit_severity(losses**2, "exponential")
    assert goodness_test(losses**2, wrong, draws=60, enough=5).replicates == 60
    with pytest.raises(InputError, match="enough must be at least 1"):
        goodness_test(losses, fit, enough=0)
