"""Predictive quantiles: the exact lognormal form, and how often a further loss exceeds them.

The probabilities with which a plug-in quantile is exceeded are computed here by two routes, Student's law and
quadrature over the law of the sample variance (Gerrard & Tsanakas 2011, Failure probability under parameter
uncertainty, Risk Analysis 31, treat this case).
"""

import numpy as np
import pytest
from scipy import integrate, special, stats

from lossagg import fit_severity
from lossagg.errors import InputError
from lossagg.fitting import predictive_quantile
from lossagg.fitting.draws import Stratified
from lossagg.fitting.predictive import drawn_laws

LEVEL = 0.995
# Computed here, two routes: n, chance in per cent that a loss exceeds the plug-in quantile at 99.5 %.
FAILURES = {10: 2.2376, 20: 1.2072, 50: 0.7432, 100: 0.6149}


def failure_by_quadrature(n, multiple):
    """P(Y > m + multiple * s): Y - m is normal with variance 1 + 1/n, n s**2 is chi-square with n - 1."""

    def density(c):
        z = multiple * np.sqrt(c / n / (1 + 1 / n))
        return special.ndtr(-z) * stats.chi2(n - 1).pdf(c)

    return integrate.quad(density, 0, np.inf, epsabs=1e-14, epsrel=1e-12, limit=400)[0]


@pytest.mark.parametrize("n", FAILURES)
def test_a_plug_in_quantile_fails_more_often_than_it_says(n):
    z = float(stats.norm.ppf(LEVEL))
    by_student = stats.t(n - 1).sf(z * np.sqrt((n - 1) / (n + 1)))
    assert failure_by_quadrature(n, z) == pytest.approx(by_student, rel=1e-9)
    assert round(100 * by_student, 4) == FAILURES[n]


@pytest.mark.parametrize("n", FAILURES)
def test_the_exact_form_fails_as_often_as_it_says(n):
    losses = np.exp(9 + 1.5 * stats.norm.ppf((np.arange(n) + 0.5) / n))
    fit = fit_severity(losses, "lognormal")
    found = predictive_quantile(fit, LEVEL)
    assert found.exact
    logs = np.log(losses)
    multiple = (np.log(found.predictive) - logs.mean()) / logs.std()
    assert failure_by_quadrature(n, multiple) == pytest.approx(1 - LEVEL, rel=1e-8)
    if n == 20:
        assert round(multiple, 5) == 3.00774
        assert round((np.log(found.fitted) - logs.mean()) / logs.std(), 5) == 2.57583


def test_repeated_samples():
    """2,000 samples of 20: the chance that a further loss exceeds each quantile, averaged, within four
    standard errors of what it should be."""
    random = np.random.default_rng(2_011)
    misses = []
    for _ in range(2_000):
        losses = np.exp(8 + 2 * random.standard_normal(20))
        found = predictive_quantile(fit_severity(losses, "lognormal"), LEVEL)
        misses.append(special.ndtr(-(np.log([found.fitted, found.predictive]) - 8) / 2))
    means, errors = np.mean(misses, axis=0), np.std(misses, axis=0) / np.sqrt(len(misses))
    assert (np.abs(means - [0.012072, 0.005]) < 4 * errors).all()
    assert means[0] - 4 * errors[0] > 1 - LEVEL  # the plug-in quantile is seen to fail too often


def test_without_a_closed_form_the_chances_are_averaged():
    """Exponential losses, 20 of them: plug-in fails with (1 + log(200) / 20)**-20 = 0.92 % (the mean is gamma
    distributed). Averaged over the draws it fails nearly as often as the level says."""
    random = np.random.default_rng(5)
    misses = []
    for k in range(60):
        losses = 1_000 * random.exponential(size=20)
        found = predictive_quantile(fit_severity(losses, "exponential"), LEVEL, draws=100, seed=k)
        assert not found.exact
        misses.append(np.exp(-np.array([found.fitted, found.predictive]) / 1_000))
    means, errors = np.mean(misses, axis=0), np.std(misses, axis=0) / np.sqrt(len(misses))
    plug_in = (1 + np.log(200) / 20) ** -20
    assert abs(means[0] - plug_in) < 4 * errors[0]
    # The draws take log(mean) as normal with error 1 / sqrt(20): the chance by quadrature over both.
    assert abs(means[1] - _failure_of_draws()) < 4 * errors[1]
    assert means[1] < 0.75 * means[0]


def _failure_of_draws():
    nodes, weights = np.polynomial.hermite_e.hermegauss(60)
    scales = np.exp(nodes / np.sqrt(20))
    weights = weights / weights.sum()
    low, high = 0.0, 50.0
    for _ in range(80):
        middle = (low + high) / 2
        low, high = (middle, high) if weights @ np.exp(-middle / scales) > 0.005 else (low, middle)
    return (1 + high / 20) ** -20


def test_truncated_lognormal_losses_are_averaged_and_wider_than_as_fitted():
    losses = np.exp(9 + 1.5 * np.random.default_rng(3).standard_normal(60))
    losses = losses[losses > 4_000]
    fit = fit_severity(losses, "lognormal", 4_000)
    found = predictive_quantile(fit, LEVEL, seed=1)
    assert not found.exact
    assert found.predictive > found.fitted
    laws = drawn_laws(fit, 200, 1)
    assert np.mean([law.sf(found.predictive) for law in laws]) == pytest.approx(1 - LEVEL, rel=1e-9)
    assert predictive_quantile(fit, LEVEL, seed=1) == found
    seen = predictive_quantile(fit, LEVEL, above=4_000, seed=1)
    chances = [law.sf(seen.predictive) / law.sf(4_000) for law in laws]
    assert np.mean(chances) == pytest.approx(1 - LEVEL, rel=1e-9)
    assert float(fit.model.sf(seen.fitted) / fit.model.sf(4_000)) == pytest.approx(1 - LEVEL, rel=1e-9)


def test_drawn_laws_of_complete_lognormal_losses_mix_to_the_exact_quantile():
    """2,000 laws: mu and sigma from the normal and the chi-square law, mixed, are Student's law."""
    losses = np.exp(9 + 1.5 * np.random.default_rng(4).standard_normal(20))
    fit = fit_severity(losses, "lognormal")
    found = predictive_quantile(fit, LEVEL)
    laws = drawn_laws(fit, 2_000, 0)
    above = np.array([law.sf(found.predictive) for law in laws])
    assert abs(above.mean() - 0.005) < 4 * above.std() / np.sqrt(2_000)
    at_fitted = np.mean([law.sf(found.fitted) for law in laws])
    assert at_fitted == pytest.approx(0.012072, rel=0.05)


def test_stratified_numbers():
    """One number in each of the equally probable strata at every place; more places are filled too."""
    numbers = Stratified(np.random.default_rng(1), 50, 3)
    table = []
    for _ in range(50):
        numbers.next_draw()
        table.append(np.concatenate([numbers.standard_normal(2), numbers.standard_normal(1)]))
        assert numbers.standard_normal(4).shape == (4,)
    strata = np.floor(50 * special.ndtr(np.array(table))).astype(int)
    assert (np.sort(strata, axis=0) == np.arange(50)[:, None]).all()


def test_levels_and_draws_are_checked():
    fit = fit_severity(np.arange(1.0, 30.0), "gamma")
    with pytest.raises(InputError, match="level"):
        predictive_quantile(fit, 1.0)
    with pytest.raises(InputError, match="too few draws"):
        predictive_quantile(fit, 0.99, draws=5)
