"""Counts with a probability of no loss of their own: recovery, a naive likelihood, closed forms, refusals."""

import numpy as np
import pytest
from scipy import optimize, stats

from lossagg.errors import FitError, InputError
from lossagg.fitting import compare_frequencies, fit_frequency
from lossagg.fitting.frequency import FAMILIES

ZEROS = [name for name in FAMILIES if name.startswith("zero-")]
TRUTH = {"mean": 3.0, "dispersion": 0.4, "share": 0.7}


def draw(dispersed, count, seed, exposures=(1.0,)):
    """Counts with c = 0.7: in three years of ten nothing can happen."""
    random = np.random.default_rng(seed)
    exposure = random.choice(exposures, count)
    mean, d = TRUTH["mean"] * exposure, TRUTH["dispersion"]
    base = (
        stats.nbinom.rvs(1 / d, 1 / (1 + d * mean), random_state=random)
        if dispersed
        else random.poisson(mean)
    )
    return np.where(random.random(count) < TRUTH["share"], base, 0), exposure


def log_probabilities(counts, exposure, mean, dispersion, c):
    """log p(n) written out from scipy.stats."""
    if dispersion is None:
        base = stats.poisson(mean * exposure)
    else:
        base = stats.nbinom(1 / dispersion, 1 / (1 + dispersion * mean * exposure))
    with np.errstate(invalid="ignore", divide="ignore"):
        none = np.log(1 - c * (1 - base.pmf(0)))
        return np.where(counts == 0, none, np.log(c) + base.logpmf(counts))


def share(fit):
    """c of a fit."""
    if "extra_zeros" in fit.parameters:
        return 1 - fit.parameters["extra_zeros"]
    return (1 - fit.parameters["zero_probability"]) / float(fit.model.base.sf(0))


@pytest.mark.parametrize("family", ZEROS)
def test_known_parameters_come_back(family):
    """20,000 years of three exposures: within four standard errors, which are small."""
    dispersed = family.endswith("negative-binomial")
    counts, exposure = draw(dispersed, 20_000, 5, (0.5, 1.0, 1.5))
    fit = fit_frequency(counts, family, exposure)
    expected = {"base.mean": TRUTH["mean"]}
    if dispersed:
        expected["base.dispersion"] = TRUTH["dispersion"]
    for name, value in expected.items():
        assert abs(fit.parameters[name] - value) < 4 * fit.standard_errors[name] < 0.4 * value
    if "inflated" in family:
        assert abs(fit.parameters["extra_zeros"] - 0.3) < 4 * fit.standard_errors["extra_zeros"] < 0.1
    else:
        none = 1 - 0.7 * (1 - np.exp(-3) if not dispersed else 1 - (1 + 1.2) ** -2.5)
        error = fit.standard_errors["zero_probability"]
        assert abs(fit.parameters["zero_probability"] - none) < 4 * error < 0.1
    assert fit.gradient_norm < 1e-5
    assert fit.upper_rate(0.5) == pytest.approx(fit.model.mean(), rel=1e-12)
    assert fit.model.mean() < fit.upper_rate() < 1.1 * fit.model.mean()


@pytest.mark.parametrize("family", ZEROS)
def test_brute_force_finds_the_same_maximum(family):
    dispersed = family.endswith("negative-binomial")
    counts, exposure = draw(dispersed, 400, 6, (0.7, 1.0, 1.6))
    fit = fit_frequency(counts, family, exposure)

    def minus(point):
        d = np.exp(point[1]) if dispersed else None
        total = log_probabilities(counts, exposure, np.exp(point[0]), d, np.exp(point[-1])).sum()
        return -total if np.isfinite(total) else 1e300

    start = np.log([2.5, 0.5, 0.6] if dispersed else [2.5, 0.6])
    settings = {"xatol": 1e-10, "fatol": 1e-11, "maxiter": 4000, "maxfev": 4000}
    for _ in range(2):
        found = optimize.minimize(minus, start, method="Nelder-Mead", options=settings)
        start = found.x
    assert fit.log_likelihood == pytest.approx(-found.fun, abs=1e-7)
    assert fit.parameters["base.mean"] == pytest.approx(np.exp(found.x[0]), rel=1e-4)
    assert share(fit) == pytest.approx(np.exp(found.x[-1]), rel=1e-4)
    law = fit.model_for(1.6)
    each = log_probabilities(
        np.arange(5), 1.6, fit.parameters["base.mean"], fit.parameters.get("base.dispersion"), share(fit)
    )
    assert law.pmf(np.arange(5)) == pytest.approx(np.exp(each), rel=1e-9)


def test_equal_years_separate_into_a_share_and_a_truncated_poisson_law():
    """The zero-modified Poisson law in closed form: p0 is the share of years without a loss, and the mean of
    the others is m / (1 - exp(-m)) (Klugman, Panjer & Willmot, Loss Models, class (a, b, 1))."""
    counts = np.repeat([0, 1, 2, 3, 4, 6], [30, 12, 17, 9, 5, 2])
    fit = fit_frequency(counts, "zero-modified-poisson")
    assert fit.parameters["zero_probability"] == pytest.approx(30 / 75, rel=1e-10)
    m, positive = fit.parameters["base.mean"], counts[counts > 0]
    assert m / -np.expm1(-m) == pytest.approx(positive.mean(), rel=1e-10)
    assert fit.standard_errors["zero_probability"] == pytest.approx(np.sqrt(0.4 * 0.6 / 75), rel=1e-9)
    assert fit.model.mean() == pytest.approx(counts.mean(), rel=1e-10)


def test_fewer_zeros_than_the_base_are_modified_but_not_inflated():
    counts = np.repeat([0, 1, 2, 3, 4, 5, 6, 8], [2, 20, 25, 22, 15, 10, 5, 2])
    fit = fit_frequency(counts, "zero-modified-poisson")
    assert share(fit) > 1
    with pytest.raises(FitError, match="no more frequent than the base law"):
        fit_frequency(counts, "zero-inflated-poisson")


@pytest.mark.parametrize("family", ZEROS)
@pytest.mark.parametrize(
    ("counts", "text"),
    [
        ([0, 0, 0], "no year has two losses"),
        ([0, 1, 1, 0], "no year has two losses"),
        ([2, 3, 4], "there is no year without a loss"),
    ],
)
def test_the_edge_of_the_family_is_refused(family, counts, text):
    with pytest.raises(FitError, match=text):
        fit_frequency(counts, family)


def test_dispersion_that_does_not_show_is_refused():
    counts = np.repeat([0, 1, 2, 3, 4], [400, 100, 400, 100, 20])
    with pytest.raises(
        FitError, match=r'ends at dispersion 0.*Fit "zero-modified-poisson"|no certified maximum'
    ):
        fit_frequency(counts, "zero-modified-negative-binomial")


def test_they_are_ranked_with_the_others():
    counts, exposure = draw(True, 2_000, 9, (0.5, 1.0, 1.5))
    tried = compare_frequencies(counts, FAMILIES, exposure)
    assert "negative-binomial" in tried.chosen.family
    assert tried.families[0].startswith("zero-")
    assert "binomial" in tried.refused


def test_profile_intervals_of_counts():
    """Poisson: n log(n / (E m)) + E m - n = 1.92 at both ends; the others bracket their estimates."""
    fit = fit_frequency([3, 5, 4, 9, 2], "poisson")
    for end in fit.profile_interval("mean"):
        assert 23 * np.log(23 / (5 * end)) + 5 * end - 23 == pytest.approx(stats.chi2.ppf(0.95, 1) / 2)
    fit = fit_frequency([3, 5, 4, 5, 2], "binomial", fixed={"trials": 10})
    for end in fit.profile_interval("probability"):
        ratio = stats.binom.logpmf(19, 50, 0.38) - stats.binom.logpmf(19, 50, end)
        assert ratio == pytest.approx(stats.chi2.ppf(0.95, 1) / 2)
    counts, exposure = draw(True, 500, 10, (0.5, 1.0, 1.5))
    for family in ("negative-binomial", *ZEROS):
        fit = fit_frequency(counts, family, exposure)
        for name in fit.ranges:
            low, high = fit.profile_interval(name)
            assert low < fit.parameters[name] < high
    with pytest.raises(
        InputError, match=r"no profile interval of this parameter; seen: 'mean'. Ask upper_rate"
    ):
        fit_frequency([0, 0], "poisson").profile_interval("mean")
