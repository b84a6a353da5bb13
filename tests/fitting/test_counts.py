"""Frequency fits against statsmodels and scipy, with exposure, and what a fit of counts answers."""

import math

import numpy as np
import pytest
import statsmodels.api as sm
from scipy import optimize, stats

from lossagg import Binomial, NegativeBinomial, Poisson
from lossagg.fitting import compare_frequencies, count_points, fit_frequency, overdispersion
from lossagg.fitting.binomial import log_falling

COUNTS = np.array([12, 7, 19, 4, 15, 9, 28, 11, 6, 17])
EXPOSURE = np.array([90.0, 95.0, 100.0, 70.0, 110.0, 118.0, 125.0, 131.0, 50.0, 140.0])


def test_poisson_with_exposure_agrees_with_a_regression():
    """statsmodels: Poisson regression on an intercept with log exposure as offset."""
    reference = sm.GLM(COUNTS, np.ones((10, 1)), sm.families.Poisson(), exposure=EXPOSURE).fit()
    fit = fit_frequency(COUNTS, "poisson", EXPOSURE)
    assert np.log(fit.parameters["mean"]) == pytest.approx(reference.params[0], rel=1e-10)
    error = fit.standard_errors["mean"] / fit.parameters["mean"]
    assert error == pytest.approx(reference.bse[0], rel=1e-6)
    assert fit.log_likelihood == pytest.approx(reference.llf, abs=1e-8)


def test_negative_binomial_with_exposure_agrees_with_a_regression():
    """statsmodels: NB2 regression (variance mean + alpha mean**2) with log exposure as offset."""
    model = sm.NegativeBinomial(COUNTS, np.ones((10, 1)), loglike_method="nb2", exposure=EXPOSURE)
    reference = model.fit(method="newton", start_params=[-2.0, 0.1], maxiter=200, tol=1e-12, disp=0)
    fit = fit_frequency(COUNTS, "negative-binomial", EXPOSURE)
    assert np.log(fit.parameters["mean"]) == pytest.approx(reference.params[0], rel=1e-7)
    assert fit.parameters["dispersion"] == pytest.approx(reference.params[1], rel=1e-6)
    assert fit.log_likelihood == pytest.approx(reference.llf, abs=1e-7)
    assert fit.standard_errors["dispersion"] == pytest.approx(reference.bse[1], rel=1e-3)
    assert fit.gradient_norm < 1e-5


def naive_negative_binomial(point, counts, exposure):
    mean, dispersion = np.exp(point)
    size = 1 / dispersion
    return stats.nbinom(size, size / (size + mean * exposure)).logpmf(counts).sum()


@pytest.mark.parametrize("size", [1.0, 3e4])
def test_negative_binomial_against_brute_force(size):
    """Nelder-Mead on scipy.stats.nbinom; counts of tens and of hundreds of thousands a year."""
    rng = np.random.default_rng(6)
    counts = rng.poisson(rng.gamma(4.0, 0.25, 25) * 8 * size)
    exposure = np.ones(25)
    found = optimize.minimize(
        lambda point: -naive_negative_binomial(point, counts, exposure),
        [np.log(8 * size), -1.4],
        method="Nelder-Mead",
        options={"xatol": 1e-9, "fatol": 1e-9},
    )
    fit = fit_frequency(counts, "negative-binomial")
    assert fit.log_likelihood == pytest.approx(-found.fun, abs=1e-6)
    assert [fit.parameters["mean"], fit.parameters["dispersion"]] == pytest.approx(np.exp(found.x), rel=1e-5)


def test_known_dispersion_comes_back_with_exposure():
    """2,000 years of differing exposure: mean 0.02 per unit, dispersion 0.6, within four errors."""
    rng = np.random.default_rng(14)
    exposure = rng.uniform(50, 800, 2_000)
    counts = rng.poisson(0.02 * exposure * rng.gamma(1 / 0.6, 0.6, 2_000))
    fit = fit_frequency(counts, "negative-binomial", exposure)
    for name, value in (("mean", 0.02), ("dispersion", 0.6)):
        assert abs(fit.parameters[name] - value) < 4 * fit.standard_errors[name] < 0.3 * value


def test_exposure_in_other_units_changes_the_rate_alone():
    """Doubling every exposure halves the rate and leaves any forecast as it was."""
    for family in ("poisson", "negative-binomial"):
        fit = fit_frequency(COUNTS, family, EXPOSURE)
        other = fit_frequency(COUNTS, family, 2 * EXPOSURE)
        assert other.parameters["mean"] == pytest.approx(fit.parameters["mean"] / 2, rel=1e-9)
        assert other.model_for(300).mean() == pytest.approx(fit.model_for(150).mean(), rel=1e-9)
        assert other.model_for(300).variance() == pytest.approx(fit.model_for(150).variance(), rel=1e-7)
        assert other.log_likelihood == pytest.approx(fit.log_likelihood, rel=1e-10)
        order = np.random.default_rng(2).permutation(10)
        same = fit_frequency(COUNTS[order], family, EXPOSURE[order])
        assert same.parameters == fit.parameters


@pytest.mark.parametrize("seed", range(6))
def test_binomial_trials_against_a_full_scan(seed):
    """The trials of highest likelihood, against scipy.stats.binom over every whole number to 600."""
    rng = np.random.default_rng(seed)
    counts = rng.binomial(12, 0.4, 40)
    scan = {
        trials: stats.binom(trials, counts.mean() / trials).logpmf(counts).sum()
        for trials in range(counts.max(), 600)
    }
    best = max(scan, key=lambda trials: scan[trials])
    fit = fit_frequency(counts, "binomial")
    assert fit.parameters["trials"] == best
    assert fit.log_likelihood == pytest.approx(scan[best], abs=1e-8)
    assert fit.standard_errors["trials"] == 0.0
    assert fit.model == Binomial(trials=best, probability=fit.parameters["probability"])


def test_binomial_with_given_trials_and_exposure():
    """20 units at exposure 1: the probability is losses over units, with the binomial error."""
    fit = fit_frequency([3, 1, 5], "binomial", [1.0, 1.0, 2.0], fixed={"trials": 20})
    assert fit.parameters["probability"] == pytest.approx(9 / 80)
    assert fit.standard_errors["probability"] == pytest.approx(np.sqrt(9 / 80 * 71 / 80 / 80))
    expected = stats.binom([20, 20, 40], 9 / 80).logpmf([3, 1, 5]).sum()
    assert fit.log_likelihood == pytest.approx(expected, abs=1e-10)
    assert fit.model_for(2) == Binomial(trials=40, probability=fit.parameters["probability"])
    low, high = fit.interval("probability")
    assert 0 < low < 9 / 80 < high < 1


def test_upper_rate_is_the_exact_poisson_bound():
    """With 3 losses in 5 years, a rate at the bound gives 3 or fewer with probability 5 %."""
    fit = fit_frequency([0, 1, 0, 2, 0], "poisson")
    assert stats.poisson(5 * fit.upper_rate()).cdf(3) == pytest.approx(0.05, rel=1e-9)
    assert "Only 3 losses" in fit.notes[0]


def test_likelihood_ratio_at_the_edge_has_its_level():
    """Poisson counts: the p-value of the mixture is under 10 % about 10 % of the time, and the ratio is 0
    about half the time (a little more in short records)."""
    rng = np.random.default_rng(31)
    evidence = [overdispersion(rng.poisson(20.0, 200)) for _ in range(200)]
    rejected = np.mean([test.likelihood_ratio_p_value < 0.10 for test in evidence])
    nothing = np.mean([test.likelihood_ratio == 0 for test in evidence])
    assert abs(rejected - 0.10) < 4 * np.sqrt(0.1 * 0.9 / 200)
    assert 0.36 < nothing < 0.66


def test_comparison_prefers_what_the_counts_support():
    candidates = compare_frequencies(COUNTS, ["poisson", "negative-binomial", "binomial"], np.ones(10))
    assert candidates.chosen.family == "negative-binomial"
    assert isinstance(candidates.chosen.model, NegativeBinomial)
    assert "binomial" in candidates.refused
    calm = compare_frequencies([4, 5, 4, 6, 5, 4], ["negative-binomial", "poisson"])
    assert isinstance(calm.chosen.model, Poisson)
    assert "dispersion 0" in calm.refused["negative-binomial"]


def test_count_points_follow_the_exposure():
    fit = fit_frequency(COUNTS, "poisson", EXPOSURE)
    points = count_points(COUNTS, fit, EXPOSURE)
    expected = fit.parameters["mean"] * EXPOSURE
    assert points.fitted == pytest.approx(expected)
    assert points.low == pytest.approx(stats.poisson(expected).ppf(0.025))
    assert points.high == pytest.approx(stats.poisson(expected).ppf(0.975))
    assert points.to_frame().columns.tolist() == ["observed", "fitted", "low", "high"]


@pytest.mark.parametrize("trials", [5_000, 5_020, 5_060, 7_000, 99_999, 10**6, 10**9])
def test_falling_factorials_term_by_term(trials):
    """The closed sum against its terms, from as many trials as losses to next to endless."""
    terms = math.fsum(math.log1p(-k / trials) for k in range(5_000))
    assert float(log_falling(np.array([5_000.0]), trials)[0]) == pytest.approx(terms, rel=1e-11, abs=1e-12)


def test_binomial_fits_of_millions_of_losses():
    """Ten years of 4 million trials at 30 %, in which as many terms were added up for each trial before: the
    likelihood of scipy falls to both sides of the trials, and they come back within four standard errors."""
    truth, chance = 4_000_000, 0.3
    counts = np.random.default_rng(9).binomial(truth, chance, 4_000)
    fit = fit_frequency(counts, "binomial")
    trials = int(fit.parameters["trials"])

    def log_likelihood(at):
        return float(np.sum(stats.binom.logpmf(counts, at, counts.mean() / at)))

    here = log_likelihood(trials)
    assert here == pytest.approx(fit.log_likelihood, rel=1e-7)
    for step in (20_000, -20_000):
        assert log_likelihood(trials + step) < here
    # The variance n p (1 - p) has relative error sqrt(2 / 4000): dp is that times (1 - p), dn / n is dp / p.
    error = truth * (1 - chance) / chance * np.sqrt(2 / 4_000)
    assert abs(trials - truth) < 4 * error
