"""Fitted mixtures: another algorithm, labels in order, and parts that are none refused.

That known parameters come back, the naive likelihood and its curvature: test_recovery.py.
"""

import numpy as np
import pytest
from scipy import stats

from lossagg import Exponential, Lognormal, Mixture
from lossagg.errors import FitError, InputError
from lossagg.families import make_size_law, with_parameters
from lossagg.fitting import compare_severities, fit_grouped, fit_severity, fit_spliced
from lossagg.fitting.mixtures import MIXTURES
from lossagg.fitting.refit import refit

TWO = np.concatenate(
    [np.random.default_rng(5).lognormal(8, 0.7, 260), np.random.default_rng(6).lognormal(11, 1.0, 140)]
)


def em_of_lognormals(losses, steps=3_000):
    """The EM algorithm for two normal laws of the logarithms, complete losses, as in the textbooks."""
    y = np.log(losses)
    first = y < np.median(y)
    share, means, spreads = 0.5, [y[first].mean(), y[~first].mean()], [y[first].std(), y[~first].std()]
    for _ in range(steps):
        one = share * stats.norm.pdf(y, means[0], spreads[0])
        two = (1 - share) * stats.norm.pdf(y, means[1], spreads[1])
        r = one / (one + two)
        share = r.mean()
        means = [np.average(y, weights=r), np.average(y, weights=1 - r)]
        spreads = [
            np.sqrt(np.average((y - m) ** 2, weights=w)) for m, w in zip(means, (r, 1 - r), strict=True)
        ]
    return share, means[0], spreads[0], means[1], spreads[1], np.log(one + two).sum() - y.sum()


def test_the_em_algorithm_ends_at_the_same_place():
    fit = fit_severity(TWO, "lognormal-mixture")
    *values, log_likelihood = em_of_lognormals(TWO)
    assert list(fit.parameters) == ["weight.1", "part.1.mu", "part.1.sigma", "part.2.mu", "part.2.sigma"]
    assert list(fit.parameters.values()) == pytest.approx(values, rel=1e-7)
    assert fit.log_likelihood == pytest.approx(log_likelihood, abs=1e-8)
    assert fit.estimated == 5
    assert fit.model.parameters["weight.2"] == pytest.approx(1 - values[0], rel=1e-7)


def test_moments_of_a_maximum_of_exponentials():
    """At an interior maximum of a mixture of exponential laws the mixed mean is the sample mean: the
    equations of the two scales, weighted and added, say so. An identity the fit does not use."""
    losses = Mixture(weights=[0.6, 0.4], parts=[Exponential(mean=900), Exponential(mean=20_000)]).isf(
        1 - np.random.default_rng(3).random(500)
    )
    fit = fit_severity(losses, "exponential-mixture")
    assert fit.model.mean() == pytest.approx(losses.mean(), rel=1e-8)


@pytest.mark.parametrize("family", [name for name in MIXTURES if name != "gamma-lognormal-mixture"])
def test_the_first_part_has_the_smaller_mean(family):
    """Whatever the order in which the climb found them, also when a draw is fitted from the first fit."""
    fit = fit_severity(TWO, family)
    first, second = fit.model.parts
    assert first.mean() < second.mean()
    backwards = 1e9 / TWO  # now the many are the large ones
    zeros = np.zeros(TWO.size)
    other = refit(fit, backwards, zeros, zeros.astype(bool))
    assert other.parts[0].mean() < other.parts[1].mean()


def test_a_splice_of_thresholds_and_limits_is_respected():
    """Losses below a threshold that nobody recorded change the fit by no more than their standard errors."""
    law = Mixture(weights=[0.7, 0.3], parts=[Lognormal(mu=8, sigma=0.8), Lognormal(mu=11, sigma=1.2)])
    losses = law.isf(1 - np.random.default_rng(11).random(4_000))
    kept = losses >= 1_500
    whole = fit_severity(losses, "lognormal-mixture")
    seen = fit_severity(np.minimum(losses, 4e5)[kept], "lognormal-mixture", 1_500.0, losses[kept] > 4e5)
    for name, value in whole.parameters.items():
        assert abs(seen.parameters[name] - value) < 3 * seen.standard_errors[name]
    naive = fit_severity(np.minimum(losses, 4e5)[kept], "lognormal-mixture")
    assert naive.parameters["weight.1"] < whole.parameters["weight.1"] - 3 * whole.standard_errors["weight.1"]


def test_weights_count_as_losses():
    weights = np.where(TWO > 20_000, 3.0, 1.0)
    weighted = fit_severity(TWO, "lognormal-mixture", weights=weights)
    repeated = fit_severity(np.repeat(TWO, weights.astype(int)), "lognormal-mixture")
    assert dict(weighted.parameters) == pytest.approx(dict(repeated.parameters), rel=1e-8)
    assert weighted.covariance == pytest.approx(repeated.covariance, rel=1e-6)


def test_profile_intervals_hold_the_estimates():
    fit = fit_severity(TWO, "lognormal-mixture")
    for name, value in fit.parameters.items():
        low, high = fit.profile_interval(name)
        assert low < value < high
        assert fit.interval(name) == pytest.approx((low, high), rel=0.15)


def test_a_heap_is_no_part():
    """Sixty losses of one amount among 260: the likelihood is unbounded where a part shrinks onto them. The
    fit is refused or another maximum, never the spike."""
    losses = np.concatenate([TWO[:200], np.full(60, 3_000.0)])
    for family in ("lognormal-mixture", "gamma-mixture", "weibull-mixture", "gamma-lognormal-mixture"):
        try:
            fit = fit_severity(losses, family)
        except FitError as refusal:
            told = " ".join(refusal.tried)
            fit = None
        if fit is None:
            assert "shrinks onto a single amount" in told
        else:
            assert fit.model.pdf(3_000.0) < 0.01  # a spike of 0.1 % width holding a quarter has 0.08
            assert "repeated-amount" in {note.code for note in fit.notes}


def test_one_law_is_no_mixture():
    """Quantiles of one exponential law, without noise: no second part shows, whatever the climb tries."""
    losses = Exponential(mean=1_000).isf((np.arange(200) + 0.5) / 200)
    with pytest.raises(FitError, match="no maximum on these losses") as refusal:
        fit_severity(losses, "exponential-mixture")
    assert refusal.value.tried
    assert "one law alone" in refusal.value.remedy


def test_a_part_of_a_few_losses_is_refused():
    """Three losses far off the others are no part, though the likelihood would make them one."""
    losses = np.concatenate([np.random.default_rng(8).lognormal(8, 0.5, 300), [4.0e7, 4.1e7, 4.2e7]])
    try:
        fit = fit_severity(losses, "lognormal-mixture")
    except FitError:
        return
    assert min(fit.model.weights) * losses.size >= 5


def test_the_note_tells_how_small_a_part_is():
    notes = {note.code: note for note in fit_severity(TWO, "lognormal-mixture").notes}
    assert "stands for about 138 of the 400 losses" in notes["mixture-parts"]
    assert "use a single law unless" in notes["mixture-parts"]


def test_mixtures_among_the_candidates():
    tried = compare_severities(TWO, ["lognormal", "lognormal-mixture", "gamma"])
    assert tried.families[0] == "lognormal-mixture"
    assert tried.chosen.aic < tried.fits[1].aic - 20
    with pytest.raises(InputError, match="unknown body"):
        fit_spliced(TWO, "lognormal-mixture", 20_000.0)
    with pytest.raises(InputError, match="none of its parameters fixed"):
        fit_severity(TWO, "lognormal-mixture", fixed={"weight": 0.5})


def test_grouped_losses():
    """A naive likelihood of the intervals, written from scipy, has its slope of zero at the fit."""
    edges = np.array([0, 500, 1_000, 2_000, 4_000, 8_000, 2e4, 5e4, 1e5, 2e5, 1e6, np.inf])
    counts, _ = np.histogram(TWO, edges)
    fit = fit_grouped(edges, counts, "lognormal-mixture")

    def log_likelihood(w, m, s, n, t):
        cdf = w * stats.norm.cdf(np.log(np.maximum(edges, 1e-300)), m, s)
        cdf += (1 - w) * stats.norm.cdf(np.log(np.maximum(edges, 1e-300)), n, t)
        return float(np.sum(counts * np.log(np.diff(cdf))))

    at = np.array(list(fit.parameters.values()))
    assert log_likelihood(*at) == pytest.approx(fit.log_likelihood, rel=1e-12)
    errors = np.sqrt(np.diag(fit.covariance))
    for k, error in enumerate(errors):
        step = np.zeros(5)
        step[k] = 1e-3 * error
        slope = (log_likelihood(*(at + step)) - log_likelihood(*(at - step))) / 2e-3
        assert abs(slope) < 1e-4


def test_parameters_are_replaced_in_a_law_made_of_laws():
    law = Mixture(weights=[0.7, 0.2, 0.1], parts=[Exponential(mean=k) for k in (1, 2, 3)])
    moved = make_size_law(**with_parameters(law.to_dict(), {"weight.1": 0.4, "part.2.mean": 9.0}))
    assert moved.weights == pytest.approx((0.4, 0.4, 0.2))
    assert [part.mean() for part in moved.parts] == [1, 9, 3]
    assert with_parameters(law.to_dict(), {}) == law.to_dict()
