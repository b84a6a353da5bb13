"""What a severity fit answers, and the points behind its plots."""

import numpy as np
import pytest

from lossagg import Lognormal
from lossagg.errors import FitError
from lossagg.fitting import (
    compare_frequencies,
    compare_severities,
    fit_severity,
    quantile_points,
    survival_points,
)

LOSSES = np.exp(9 + 1.3 * np.random.default_rng(40).standard_normal(500))


def naive_product_limit(losses, thresholds, stopped):
    """Kaplan-Meier with delayed entry, step by step."""
    survival, curve = 1.0, {}
    for x in sorted(set(losses[~stopped])):
        at_risk = sum(1 for t, y in zip(thresholds, losses, strict=True) if t <= x <= y)
        ended = sum(1 for y, c in zip(losses, stopped, strict=True) if y == x and not c)
        survival *= 1 - ended / at_risk
        curve[x] = survival
    return curve


def test_complete_losses_give_the_empirical_curve():
    fit = fit_severity(LOSSES, "lognormal")
    points = survival_points(LOSSES, fit)
    assert len(points.amount) <= 200
    assert points.amount[-1] == LOSSES.max()
    empirical = [np.mean(LOSSES > x) for x in points.amount]
    assert points.empirical == pytest.approx(empirical, abs=1e-12)
    assert points.fitted == pytest.approx(fit.model.sf(points.amount))
    assert (points.low <= points.empirical).all()
    assert (points.empirical <= points.high).all()


def test_quantile_points_of_complete_losses():
    """The i-th of n losses stands at (i - 1/2) / n."""
    fit = fit_severity(LOSSES[:50], "lognormal")
    points = quantile_points(LOSSES[:50], fit)
    assert points.observed == pytest.approx(np.sort(LOSSES[:50]))
    assert points.fitted == pytest.approx(fit.model.ppf((np.arange(50) + 0.5) / 50), rel=1e-9)


def test_product_limit_with_thresholds_and_limits():
    rng = np.random.default_rng(41)
    thresholds = rng.choice([2_000.0, 5_000.0], 500)
    limits = rng.choice([20_000.0, np.inf], 500)
    kept = LOSSES >= thresholds
    losses, thresholds = np.minimum(LOSSES, limits)[kept], thresholds[kept]
    stopped = (LOSSES > limits)[kept]
    fit = fit_severity(losses, "lognormal", thresholds, stopped)
    points = survival_points(losses, fit, thresholds, stopped)
    curve = naive_product_limit(losses, thresholds, stopped)
    assert points.empirical == pytest.approx([curve[x] for x in points.amount], abs=1e-12)
    assert points.fitted == pytest.approx(fit.model.sf(points.amount) / fit.model.sf(2_000.0))
    inside = (points.fitted >= points.low) & (points.fitted <= points.high)
    assert inside.mean() > 0.8  # the law that made them lies in its own band
    quantiles = quantile_points(losses, fit, thresholds, stopped)
    assert (np.diff(quantiles.fitted) >= 0).all()
    assert len(quantiles.observed) <= 200


def test_a_lone_early_loss_does_not_end_the_curve():
    """One loss below the threshold of all others: its step would bring the curve to 0 for good."""
    losses = np.array([1_200.0, 6_000.0, 7_500.0, 9_000.0, 12_000.0])
    thresholds = np.array([1_000.0, 5_000.0, 5_000.0, 5_000.0, 5_000.0])
    fit = fit_severity(losses, "exponential", thresholds)
    points = survival_points(losses, fit, thresholds)
    assert points.empirical == pytest.approx([1.0, 0.75, 0.5, 0.25, 0.0])


def test_a_fit_shows_itself_on_one_line():
    fit = fit_severity(LOSSES, "lognormal", 0.0)
    assert repr(fit).startswith("SeverityFit(lognormal: mu 8.989 +- 0.061, sigma 1.354 +- 0.043; 500 losses")
    assert "\n" not in repr(fit)
    frame = fit.to_frame()
    assert frame.columns.tolist() == ["estimate", "standard_error", "low", "high", "fixed"]
    assert frame.loc["mu", "low"] < fit.parameters["mu"] < frame.loc["mu", "high"]
    assert fit.aic == pytest.approx(4 - 2 * fit.log_likelihood)
    assert fit.bic == pytest.approx(2 * np.log(500) - 2 * fit.log_likelihood)
    assert isinstance(fit.model, Lognormal)
    assert dict(fit.model.parameters) == dict(fit.parameters)


def test_intervals_stay_in_the_range_of_their_parameter():
    """sigma on the log scale: positive and symmetric as a ratio; mu symmetric as a difference."""
    fit = fit_severity(LOSSES[:20], "lognormal")
    low, high = fit.interval("sigma", 0.99)
    assert low * high == pytest.approx(fit.parameters["sigma"] ** 2)
    low, high = fit.interval("mu", 0.95)
    assert high - low == pytest.approx(2 * 1.959963984540054 * fit.standard_errors["mu"])


def test_a_fit_cannot_be_changed():
    fit = fit_severity(LOSSES, "lognormal")
    with pytest.raises(AttributeError):
        fit.log_likelihood = 0.0
    with pytest.raises(ValueError, match="read-only"):
        fit.covariance[0, 0] = 0.0


def test_another_than_the_first_needs_a_reason():
    tried = compare_severities(LOSSES, ["lomax", "lognormal", "gamma"])
    assert tried.families[0] == "lognormal"
    assert tried.choosing("lognormal").reason == ""
    with pytest.raises(FitError, match=r"gamma is chosen, but lognormal ranks first: its AIC is lower by \d"):
        tried.choosing("gamma", "  ")
    other = tried.choosing("gamma", "all lines of the pool use it")
    assert other.chosen.family == "gamma"
    assert other.reason == "all lines of the pool use it"
    assert other.to_frame()["chosen"].tolist() == [family == "gamma" for family in other.families]
    with pytest.raises(FitError, match="not among the candidates"):
        tried.choosing("weibull", "why not")


def test_a_refused_family_cannot_be_chosen():
    counts = [3, 3, 4, 3, 3, 4]
    tried = compare_frequencies(counts, ["poisson", "negative-binomial"])
    with pytest.raises(FitError, match="the chosen family has no fit: the counts vary no more than Poisson"):
        tried.choosing("negative-binomial", "habit")
