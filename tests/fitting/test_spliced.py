"""Spliced fits: body, tail and tail probability together, against a naive joint likelihood and known laws."""

import numpy as np
import pytest
from scipy import optimize, stats

import lossagg
from lossagg.fitting import compare_severities, fit_severity, fit_spliced

MODEL = lossagg.Spliced(
    body=lossagg.Lognormal(mu=10.0, sigma=1.2),
    tail=lossagg.GeneralizedPareto(shape=0.4, scale=60_000.0, threshold=100_000.0),
    threshold=100_000.0,
    tail_probability=0.08,
)


def draw(count, seed, limits=(30_000.0, 400_000.0, np.inf)):
    """Losses of the model with thresholds of 5,000 or 12,000 (some above the splice) and limits."""
    rng = np.random.default_rng(seed)
    losses = np.asarray(MODEL.ppf(rng.random(count)))
    thresholds = rng.choice([5_000.0, 12_000.0, 150_000.0], count, p=[0.5, 0.4, 0.1])
    cap = np.maximum(rng.choice(limits, count), thresholds * 1.01)
    kept = losses >= thresholds
    return np.minimum(losses, cap)[kept], thresholds[kept], (losses > cap)[kept]


def test_known_parameters_come_back():
    losses, thresholds, stopped = draw(60_000, seed=8)
    fit = fit_spliced(losses, "lognormal", 100_000, thresholds, stopped)
    expected = {
        "body.mu": 10.0,
        "body.sigma": 1.2,
        "tail.shape": 0.4,
        "tail.scale": 60_000.0,
        "tail_probability": 0.08,
    }
    for name, value in expected.items():
        error = fit.standard_errors[name]
        assert abs(fit.parameters[name] - value) < 4 * error < 0.5 * value
    assert fit.parameters == fit.model.parameters
    assert fit.fixed == ("tail.threshold", "threshold")
    assert fit.estimated == 5
    assert fit.gradient_norm < 1e-5
    assert fit.family == "spliced lognormal and generalized-pareto"


def naive(point, losses, thresholds, stopped, u):
    """The joint log-likelihood, loss by loss from scipy.stats."""
    mu, log_sigma, odds, shape, log_scale = point
    body = stats.lognorm(s=np.exp(log_sigma), scale=np.exp(mu))
    tail = stats.genpareto(shape, loc=u, scale=np.exp(log_scale))
    q = 1 / (1 + np.exp(-odds))

    def density(x):
        return np.where(x <= u, (1 - q) * body.pdf(x) / body.cdf(u), q * tail.pdf(x))

    def survival(x):
        below = q + (1 - q) * (body.cdf(u) - body.cdf(np.minimum(x, u))) / body.cdf(u)
        return np.where(x < u, below, q * tail.sf(x))

    with np.errstate(all="ignore"):
        total = np.log(density(losses[~stopped])).sum() + np.log(survival(losses[stopped])).sum()
        total -= np.log(survival(thresholds)).sum()
    return total if np.isfinite(total) else -1e300


def test_a_naive_joint_likelihood_has_the_same_maximum():
    """Nelder-Mead on all five parameters finds nothing higher and ends at the same place."""
    losses, thresholds, stopped = draw(1_500, seed=21)
    fit = fit_spliced(losses, "lognormal", 100_000, thresholds, stopped)
    values = fit.parameters
    q = values["tail_probability"]
    at = np.array(
        [
            values["body.mu"],
            np.log(values["body.sigma"]),
            np.log(q / (1 - q)),
            values["tail.shape"],
            np.log(values["tail.scale"]),
        ]
    )
    assert naive(at, losses, thresholds, stopped, 1e5) == pytest.approx(fit.log_likelihood, abs=1e-7)
    found = optimize.minimize(
        lambda point: -naive(point, losses, thresholds, stopped, 1e5),
        [10.0, 0.2, -2.4, 0.4, 11.0],
        method="Nelder-Mead",
        options={"xatol": 1e-8, "fatol": 1e-9, "maxiter": 4000, "maxfev": 4000},
    )
    assert -found.fun == pytest.approx(fit.log_likelihood, abs=1e-5)
    assert found.x == pytest.approx(at, abs=5e-3)


def test_without_thresholds_the_share_is_counted():
    """Complete losses: tail probability k/n with binomial error, the tail as fitted alone."""
    losses = np.asarray(MODEL.ppf(np.random.default_rng(3).random(2_000)))
    fit = fit_spliced(losses, "lognormal", 100_000)
    share = np.mean(losses > 100_000)
    assert fit.parameters["tail_probability"] == pytest.approx(share, rel=1e-9)
    error = np.sqrt(share * (1 - share) / losses.size)
    assert fit.standard_errors["tail_probability"] == pytest.approx(error, rel=1e-7)
    alone = fit_severity(losses[losses > 100_000], "generalized-pareto", 100_000)
    assert fit.parameters["tail.shape"] == pytest.approx(alone.parameters["shape"], rel=1e-12)
    assert fit.log_likelihood == pytest.approx(np.log(fit.model.pdf(losses)).sum(), abs=1e-6)


def test_a_threshold_turns_the_observed_share_into_the_ground_up_share():
    """P(X > u | X > t) = q / (q + (1 - q) (F(u) - F(t)) / F(u)) equals the observed share above u."""
    rng = np.random.default_rng(5)
    losses = np.asarray(MODEL.ppf(rng.random(8_000)))
    losses = losses[losses >= 12_000]
    fit = fit_spliced(losses, "weibull", 100_000, 12_000)
    q, body = fit.parameters["tail_probability"], fit.model.body
    ratio = (body.cdf(100_000) - body.cdf(12_000)) / body.cdf(100_000)
    assert q / (q + (1 - q) * ratio) == pytest.approx(np.mean(losses > 100_000), rel=1e-8)
    assert float(fit.model.sf(100_000) / fit.model.sf(12_000)) == pytest.approx(
        np.mean(losses > 1e5), rel=1e-8
    )


def test_another_currency_and_another_order():
    losses, thresholds, stopped = draw(3_000, seed=30)
    fit = fit_spliced(losses, "gamma", 100_000, thresholds, stopped, tail="pareto")
    order = np.random.default_rng(1).permutation(losses.size)
    same = fit_spliced(losses[order], "gamma", 100_000, thresholds[order], stopped[order], tail="pareto")
    assert same.parameters == fit.parameters
    other = fit_spliced(losses * 1e-6, "gamma", 0.1, thresholds * 1e-6, stopped, tail="pareto")
    for name, value in fit.parameters.items():
        factor = 1e-6 if name in ("body.scale", "tail.minimum", "threshold") else 1
        assert other.parameters[name] == pytest.approx(value * factor, rel=1e-8)


@pytest.mark.parametrize("body", ["exponential", "lomax", "weibull", "gamma", "inverse-gaussian", "burr"])
def test_every_body_is_certified_or_refused(body):
    losses, thresholds, stopped = draw(4_000, seed=2)
    fit = fit_spliced(losses, body, 100_000, thresholds, stopped)
    assert fit.gradient_norm < 1e-5
    assert (np.linalg.eigvalsh(fit.covariance) > -1e-9 * fit.covariance.max()).all()


def test_candidates_with_a_tail_are_ranked_and_refusals_named():
    """The body that made the losses is chosen; a spliced candidate carries its name."""
    losses = np.asarray(MODEL.ppf(np.random.default_rng(3).random(4_000)))
    candidates = compare_severities(losses, ["gamma", "lognormal", "exponential"], tail_threshold=100_000)
    assert candidates.chosen.family == "spliced lognormal and generalized-pareto"
    assert [fit.aic for fit in candidates.fits] == sorted(fit.aic for fit in candidates.fits)
    light = 1_000 * np.random.default_rng(4).weibull(2.0, 300)
    candidates = compare_severities(light, ["lomax", "weibull", "gamma"])
    assert candidates.chosen.family == "weibull"
    assert list(candidates.refused) == ["lomax"]
    frame = candidates.to_frame()
    assert frame["chosen"].tolist() == [True, False, False]
    assert "not heavier than exponential" in frame.loc["lomax", "refused"]
