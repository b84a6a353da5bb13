"""Splices whose density does not jump: the law, a naive likelihood of body and tail, recovery, refusals."""

import numpy as np
import pytest
from scipy import optimize, special, stats

import lossagg
from lossagg.errors import InputError
from lossagg.fitting import compare_severities, fit_spliced
from lossagg.fitting.bootstrap import replicates

U = 50_000.0
BODIES = {
    "lognormal": lossagg.Lognormal(mu=10.0, sigma=1.1),
    "gamma": lossagg.Gamma(shape=0.8, scale=30_000.0),
    "weibull": lossagg.Weibull(shape=0.8, scale=30_000.0),
}
TAILS = {
    "generalized-pareto": lossagg.GeneralizedPareto(shape=0.4, scale=35_000.0, threshold=U),
    "pareto": lossagg.Pareto(alpha=1.6, minimum=U),
}
CASES = [(body, tail) for body in BODIES for tail in TAILS]
by_parts = pytest.mark.parametrize(("body", "tail"), CASES)


def model(body, tail="generalized-pareto"):
    return lossagg.Spliced.continuous(body=BODIES[body], tail=TAILS[tail], threshold=U)


def draw(law, count, seed):
    """Losses seen above 3,000 or 8,000 and stopped at 30,000, 300,000 or nowhere."""
    random = np.random.default_rng(seed)
    losses = np.asarray(law.ppf(random.random(count)))
    thresholds = random.choice([3_000.0, 8_000.0], count)
    limits = random.choice([30_000.0, 300_000.0, np.inf], count, p=[0.1, 0.3, 0.6])
    seen = losses >= thresholds
    return np.minimum(losses, limits)[seen], thresholds[seen], (losses > limits)[seen]


@by_parts
def test_the_density_does_not_jump(body, tail):
    """On both sides of the threshold, and the tail probability in closed form for the lognormal body."""
    law = model(body, tail)
    below, above = law.pdf([U * (1 - 1e-9), U * (1 + 1e-9)])
    assert below == pytest.approx(above, rel=1e-7)
    assert law.jump == pytest.approx(1.0, rel=1e-12)
    rate = 1 / 35_000 if tail == "generalized-pareto" else 1.6 / U
    if body == "lognormal":
        z = (np.log(U) - 10) / 1.1
        odds = stats.norm.pdf(z) / (1.1 * U * stats.norm.cdf(z)) / rate
        assert law.tail_probability == pytest.approx(odds / (1 + odds), rel=1e-12)
    apart = lossagg.Spliced(body=law.body, tail=law.tail, threshold=U, tail_probability=0.5)
    assert apart.jump == pytest.approx(float(apart.pdf(U * (1 + 1e-9)) / apart.pdf(U)), rel=1e-6)


def test_parts_without_a_density_at_the_threshold_are_refused():
    far = lossagg.Pareto(alpha=2.0, minimum=2 * U)
    with pytest.raises(InputError, match="needs a density of both parts at the threshold"):
        lossagg.Spliced.continuous(body=BODIES["gamma"], tail=far, threshold=U)


@by_parts
def test_known_parameters_come_back(body, tail):
    law = model(body, tail)
    fit = fit_spliced(*_arguments(draw(law, 20_000, 3), body), tail, continuous=True)
    for name, value in law.parameters.items():
        error = fit.standard_errors[name]
        if name in fit.fixed:
            assert fit.parameters[name] == value
            assert error == 0
            continue
        assert abs(fit.parameters[name] - value) < 4 * error
        assert error < 0.25 * abs(value)
    assert fit.model.jump == pytest.approx(1.0, rel=1e-9)
    assert fit.gradient_norm < 1e-5
    assert not any(note.code == "density-jump" for note in fit.notes)


def _arguments(sample, body):
    losses, thresholds, stopped = sample
    return losses, body, U, thresholds, stopped


def naive(point, losses, thresholds, stopped):
    """Lognormal body and generalized Pareto tail from scipy.stats, q from the two densities at U."""
    body = stats.lognorm(s=np.exp(point[1]), scale=np.exp(point[0]))
    tail = stats.genpareto(point[2], loc=U, scale=np.exp(point[3]))
    odds = body.pdf(U) / body.cdf(U) / tail.pdf(U)
    q = odds / (1 + odds)

    def density(x):
        return np.where(x <= U, (1 - q) * body.pdf(x) / body.cdf(U), q * tail.pdf(x))

    def survival(x):
        return np.where(x < U, q + (1 - q) * (body.cdf(U) - body.cdf(x)) / body.cdf(U), q * tail.sf(x))

    with np.errstate(all="ignore"):
        total = np.log(density(losses[~stopped])).sum() + np.log(survival(losses[stopped])).sum()
        total -= np.log(survival(thresholds)).sum()
    return total if np.isfinite(total) else -1e300


def test_a_naive_likelihood_has_the_same_maximum_and_curvature():
    sample = draw(model("lognormal"), 900, 4)
    fit = fit_spliced(*_arguments(sample, "lognormal"), continuous=True)
    v = fit.parameters
    at = np.array([v["body.mu"], np.log(v["body.sigma"]), v["tail.shape"], np.log(v["tail.scale"])])
    assert naive(at, *sample) == pytest.approx(fit.log_likelihood, abs=1e-6)
    found = optimize.minimize(
        lambda point: -naive(point, *sample),
        [10.2, 0.2, 0.3, 10.2],
        method="Nelder-Mead",
        options={"xatol": 1e-8, "fatol": 1e-9, "maxiter": 4000, "maxfev": 4000},
    )
    assert -found.fun == pytest.approx(fit.log_likelihood, abs=1e-6)
    assert found.x == pytest.approx(at, abs=2e-4)

    steps = 1e-3 * np.eye(4)
    curve = [
        [
            naive(at + a - b, *sample)
            + naive(at - a + b, *sample)
            - naive(at + a + b, *sample)
            - naive(at - a - b, *sample)
            for b in steps
        ]
        for a in steps
    ]
    covariance = np.linalg.inv(np.array(curve) / 4e-6)
    errors = fit.standard_errors
    ours = (errors["body.mu"], errors["body.sigma"] / v["body.sigma"], errors["tail.shape"])
    assert np.sqrt(np.diag(covariance))[:3] == pytest.approx(ours, rel=2e-3)

    def share(point):  # the delta method by differences
        z = (np.log(U) - point[0]) / np.exp(point[1])
        return special.expit(stats.norm.logpdf(z) - point[1] - np.log(U) - stats.norm.logcdf(z) + point[3])

    slope = np.array([(share(at + s) - share(at - s)) / 2e-3 for s in steps])
    assert errors["tail_probability"] == pytest.approx(np.sqrt(slope @ covariance @ slope), rel=2e-3)


def test_continuity_costs_likelihood_and_saves_a_parameter():
    sample = draw(model("weibull"), 3_000, 5)
    free = fit_spliced(*_arguments(sample, "weibull"))
    tied = fit_spliced(*_arguments(sample, "weibull"), continuous=True)
    assert tied.log_likelihood <= free.log_likelihood
    assert tied.estimated == free.estimated - 1
    assert free.model.jump != pytest.approx(1.0, rel=1e-3)
    low, high = tied.profile_interval("tail.shape")
    assert low < tied.parameters["tail.shape"] < high
    assert tied.tail_shape() == pytest.approx((tied.parameters["tail.shape"], low, high), rel=1e-9)
    wide = free.profile_interval("tail.shape")
    assert high - low < 1.02 * (wide[1] - wide[0])


def test_losses_with_a_jump_say_so():
    jumping = lossagg.Spliced(
        body=BODIES["lognormal"], tail=TAILS["generalized-pareto"], threshold=U, tail_probability=0.28
    )
    fit = fit_spliced(*_arguments(draw(jumping, 4_000, 6), "lognormal"), continuous=True)
    assert any(note.code == "density-jump" and "speak against continuity" in note for note in fit.notes)


def test_replicates_stay_continuous():
    sample = draw(model("lognormal"), 700, 7)
    fit = fit_spliced(*_arguments(sample, "lognormal"), continuous=True)
    laws = [one.law for one in replicates(fit, *sample, count=3, seed=1)]
    for law in laws:
        assert law is not None
        assert law.jump == pytest.approx(1.0, rel=1e-9)
        assert law.tail.shape != fit.parameters["tail.shape"]


def test_another_currency():
    losses, thresholds, stopped = draw(model("gamma"), 800, 8)
    fit = fit_spliced(losses, "gamma", U, thresholds, stopped, continuous=True)
    other = fit_spliced(losses * 1e-6, "gamma", U * 1e-6, thresholds * 1e-6, stopped, continuous=True)
    for name, value in fit.parameters.items():
        money = name in ("body.scale", "tail.scale", "tail.threshold", "threshold")
        assert other.parameters[name] == pytest.approx(value * (1e-6 if money else 1), rel=1e-8)
    shift = (~stopped).sum() * np.log(1e6)
    assert other.log_likelihood == pytest.approx(fit.log_likelihood + shift, rel=1e-10)


def test_an_empirical_body_has_no_density():
    losses, thresholds, stopped = draw(model("gamma"), 500, 9)
    with pytest.raises(InputError, match="an empirical body has no density to be continuous with"):
        fit_spliced(losses, "empirical", U, thresholds, stopped, continuous=True)


def test_candidates_may_be_continuous():
    losses, thresholds, stopped = draw(model("lognormal"), 900, 10)
    tried = compare_severities(
        losses, ["lognormal", "gamma"], thresholds, stopped, tail_threshold=U, continuous=True
    )
    assert all(fit.model.jump == pytest.approx(1.0, rel=1e-9) for fit in tried.fits)
    assert tried.chosen.family == f"spliced {tried.families[0]} and generalized-pareto, continuous"
