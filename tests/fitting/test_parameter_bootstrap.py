"""Bootstrap intervals of parameters against laws of estimates that are known in closed form."""

import numpy as np
import pytest
from scipy import stats

import lossagg
from lossagg.errors import FitError, InputError
from lossagg.fitting import bootstrap_frequency, bootstrap_severity, fit_frequency, fit_severity, fit_spliced
from lossagg.fitting.parameter_bootstrap import gathered


def test_exponential_means_follow_their_gamma_law():
    """The mean of 12 exponential losses is gamma distributed: quantiles within four standard errors."""
    losses = np.geomspace(100, 5_000, 12)
    fit = fit_severity(losses, "exponential")
    made = bootstrap_severity(losses, fit, draws=600, seed=1)
    exact = stats.gamma(12, scale=losses.mean() / 12)
    for level, end in zip((0.05, 0.95), made.interval("mean", 0.9), strict=True):
        error = np.sqrt(level * (1 - level) / 600) / exact.pdf(exact.ppf(level))
        assert abs(end - exact.ppf(level)) < 4 * error
    assert made.standard_errors["mean"] == pytest.approx(
        losses.mean() / np.sqrt(12), rel=4 / np.sqrt(2 * 600)
    )
    assert (made.draws, made.refused, made.caution) == (600, 0, "")


def test_poisson_rates_follow_the_counts():
    """Total counts of a Poisson fit are Poisson: mean and variance within four standard errors."""
    counts, exposure = [3, 0, 5, 2, 4], [1.0, 0.5, 1.5, 1.0, 1.0]
    fit = fit_frequency(counts, "poisson", exposure)
    made = bootstrap_frequency(counts, fit, exposure, draws=500, seed=2)
    totals = made.values["mean"] * 5.0
    whole = totals[totals != 0.5]  # no loss at all gives the mean under Jeffreys' prior
    assert whole == pytest.approx(np.round(whole), abs=1e-9)
    assert abs(totals.mean() - 14) < 4 * np.sqrt(14 / 500)
    assert abs(totals.var() - 14) < 4 * 14 * np.sqrt(2 / 500)


def test_the_same_seed_gives_the_same_intervals_and_prefixes():
    losses = np.geomspace(100, 5_000, 25)
    fit = fit_severity(losses, "weibull", 90.0)
    first = bootstrap_severity(losses, fit, 90.0, draws=40, seed=3)
    again = bootstrap_severity(losses, fit, 90.0, draws=40, seed=3)
    fewer = bootstrap_severity(losses, fit, 90.0, draws=30, seed=3)
    other = bootstrap_severity(losses, fit, 90.0, draws=40, seed=4)
    assert (first.values["shape"] == again.values["shape"]).all()
    assert (first.values["shape"][: 30 - fewer.refused] == fewer.values["shape"]).all()
    assert first.interval("shape") != other.interval("shape")


def test_censored_intervals_agree_with_the_large_sample_ones():
    """800 lognormal losses, truncated and censored: standard errors as the information has them, to 15 %."""
    random = np.random.default_rng(4)
    losses = np.exp(8 + 1.2 * random.standard_normal(1_000))
    losses = losses[losses > 1_000]
    seen, stopped = np.minimum(losses, 20_000), losses > 20_000
    fit = fit_severity(seen, "lognormal", 1_000, stopped)
    made = bootstrap_severity(seen, fit, 1_000, stopped, draws=60, seed=5)
    for name, error in made.standard_errors.items():
        assert error == pytest.approx(fit.standard_errors[name], rel=4 / np.sqrt(2 * 60))


def test_draws_without_a_fit_are_counted_and_told():
    """A Lomax law of a nearly exponential tail: many draws of 30 losses have none."""
    losses = np.asarray(lossagg.Lomax(alpha=4, scale=3_000).isf((np.arange(30) + 0.5) / 30))
    fit = fit_severity(losses, "lomax")
    made = bootstrap_severity(losses, fit, draws=40, seed=6)
    assert made.refused > 5
    assert len(made.values["alpha"]) == 40 - made.refused
    assert f"{made.refused} of 40 draws have no lomax fit" in made.caution
    frame = made.to_frame()
    assert frame["refused"].tolist() == [made.refused] * 2
    assert frame.loc["alpha", "low"] < frame.loc["alpha", "estimate"]


def test_other_counts_and_splices():
    counts = np.repeat([0, 1, 2, 3, 4, 6], [30, 12, 17, 9, 5, 2])
    for family in ("negative-binomial", "zero-modified-poisson"):
        fit = fit_frequency(counts, family)
        made = bootstrap_frequency(counts, fit, draws=30, seed=7)
        for name in fit.ranges:
            low, high = made.interval(name, 0.99)
            assert low < fit.parameters[name] < high
    random = np.random.default_rng(8)
    losses = np.exp(8 + 1.2 * random.standard_normal(300))
    fit = fit_spliced(losses, "lognormal", 8_000.0)
    made = bootstrap_severity(losses, fit, draws=25, seed=9)
    assert set(made.values) == {"body.mu", "body.sigma", "tail.shape", "tail.scale", "tail_probability"}


def test_what_cannot_be_asked():
    fit = fit_severity([100.0, 300.0, 900.0], "exponential")
    with pytest.raises(
        InputError, match="made from another number of observations; seen: '2 for a fit of 3'"
    ):
        bootstrap_severity([100.0, 300.0], fit)
    with pytest.raises(InputError, match="too few draws for an interval; seen: 5"):
        bootstrap_severity([100.0, 300.0, 900.0], fit, draws=5)
    made = bootstrap_severity([100.0, 300.0, 900.0], fit, draws=20)
    with pytest.raises(InputError, match="estimates no parameter of this name; seen: 'sigma'"):
        made.interval("sigma")
    with pytest.raises(InputError, match="level must be a probability"):
        made.interval("mean", 95)
    with pytest.raises(FitError, match="only 0 of 20 draws from the exponential fit have a fit themselves"):
        gathered(fit, [], 20)
