"""Fits of simulated losses: known parameters come back, and a brute-force maximum agrees.

The losses are drawn with scipy.stats, seeded, from laws of known parameters, cut by reporting thresholds
that differ between losses and stopped at limits that differ. The brute-force likelihood is written here
from scipy.stats and climbed by Nelder-Mead; it shares no code with lossagg.
"""

from dataclasses import dataclass

import numpy as np
import pytest
from scipy import optimize, stats

from lossagg.fitting import fit_severity
from lossagg.fitting.mixtures import MIXTURES
from lossagg.fitting.severity import FAMILIES


@dataclass(frozen=True)
class LogGammaTwin:
    """exp of a gamma variable, times the minimum, from scipy's gamma law."""

    shape: float
    rate: float
    minimum: float

    def _logs(self):
        return stats.gamma(self.shape, scale=1 / self.rate)

    def ppf(self, q):
        return self.minimum * np.exp(self._logs().ppf(q))

    def logpdf(self, x):
        return self._logs().logpdf(np.log(x / self.minimum)) - np.log(x)

    def logsf(self, x):
        return self._logs().logsf(np.log(x / self.minimum))


@dataclass(frozen=True)
class MixtureTwin:
    """Two laws of scipy with a weight; quantiles by halving in the logarithm."""

    weight: float
    first: object
    second: object

    def ppf(self, q):
        low, high = np.full(q.shape, -20.0), np.full(q.shape, 40.0)
        for _ in range(60):
            middle = (low + high) / 2
            sf = np.exp(self.logsf(np.exp(middle)))
            low, high = np.where(sf > 1 - q, middle, low), np.where(sf > 1 - q, high, middle)
        return np.exp(high)

    def _both(self, one, two):
        if not 0 < self.weight < 1:
            return np.full(np.shape(one), np.nan)
        return np.logaddexp(np.log(self.weight) + one, np.log1p(-self.weight) + two)

    def logpdf(self, x):
        return self._both(self.first.logpdf(x), self.second.logpdf(x))

    def logsf(self, x):
        return self._both(self.first.logsf(x), self.second.logsf(x))


def lognorm(mu, sigma):
    return stats.lognorm(s=sigma, scale=np.exp(mu))


@dataclass(frozen=True)
class Case:
    family: str
    parameters: dict
    frozen: object  # the scipy law from the parameters, in the order of the dict
    positive: tuple
    held: dict | None = None

    def fit(self, losses, thresholds, stopped, unit=1.0):
        held = None if self.held is None else {name: value * unit for name, value in self.held.items()}
        return fit_severity(losses, self.family, thresholds, stopped, fixed=held)


CASES = [
    Case("exponential", {"mean": 40_000.0}, lambda m: stats.expon(scale=m), (0,)),
    Case(
        "lognormal",
        {"mu": 9.5, "sigma": 1.4},
        lambda mu, sigma: stats.lognorm(s=sigma, scale=np.exp(mu)),
        (1,),
    ),
    Case("lomax", {"alpha": 2.2, "scale": 50_000.0}, lambda a, s: stats.lomax(c=a, scale=s), (0, 1)),
    Case("gamma", {"shape": 0.8, "scale": 50_000.0}, lambda a, s: stats.gamma(a, scale=s), (0, 1)),
    Case("weibull", {"shape": 0.7, "scale": 30_000.0}, lambda k, s: stats.weibull_min(k, scale=s), (0, 1)),
    Case(
        "inverse-gaussian",
        {"mean": 40_000.0, "shape": 20_000.0},
        lambda m, s: stats.invgauss(m / s, scale=s),
        (0, 1),
    ),
    Case(
        "burr",
        {"alpha": 1.3, "gamma": 1.5, "scale": 30_000.0},
        lambda a, g, s: stats.burr12(c=g, d=a, scale=s),
        (0, 1, 2),
    ),
    Case(
        "generalized-pareto",
        {"shape": 0.4, "scale": 30_000.0},
        lambda xi, s: stats.genpareto(xi, loc=2_000, scale=s),
        (1,),
    ),
    Case("pareto", {"alpha": 1.3}, lambda a: stats.pareto(a, scale=2_000), (0,)),
    Case(
        "log-logistic",
        {"gamma": 1.6, "scale": 20_000.0},
        lambda g, s: stats.fisk(c=g, scale=s),
        (0, 1),
    ),
    Case(
        "log-gamma",
        {"shape": 2.5, "rate": 1.8},
        lambda a, r: LogGammaTwin(a, r, 1_000.0),
        (0, 1),
        {"minimum": 1_000.0},
    ),
    Case(
        "exponential-mixture",
        {"weight.1": 0.7, "part.1.mean": 5_000.0, "part.2.mean": 60_000.0},
        lambda w, a, b: MixtureTwin(w, stats.expon(scale=a), stats.expon(scale=b)),
        (1, 2),
    ),
    Case(
        "lognormal-mixture",
        {"weight.1": 0.7, "part.1.mu": 8.0, "part.1.sigma": 0.8, "part.2.mu": 11.0, "part.2.sigma": 1.2},
        lambda w, m, s, n, t: MixtureTwin(w, lognorm(m, s), lognorm(n, t)),
        (2, 4),
    ),
    Case(
        "gamma-mixture",
        {
            "weight.1": 0.6,
            "part.1.shape": 3.0,
            "part.1.scale": 2_000.0,
            "part.2.shape": 2.0,
            "part.2.scale": 4e4,
        },
        lambda w, a, s, b, t: MixtureTwin(w, stats.gamma(a, scale=s), stats.gamma(b, scale=t)),
        (1, 2, 3, 4),
    ),
    Case(
        "weibull-mixture",
        {
            "weight.1": 0.6,
            "part.1.shape": 1.5,
            "part.1.scale": 5_000.0,
            "part.2.shape": 0.9,
            "part.2.scale": 6e4,
        },
        lambda w, a, s, b, t: MixtureTwin(w, stats.weibull_min(a, scale=s), stats.weibull_min(b, scale=t)),
        (1, 2, 3, 4),
    ),
    Case(
        "gamma-lognormal-mixture",
        {
            "weight.1": 0.6,
            "part.1.shape": 3.0,
            "part.1.scale": 2_000.0,
            "part.2.mu": 10.5,
            "part.2.sigma": 1.2,
        },
        lambda w, a, s, m, t: MixtureTwin(w, stats.gamma(a, scale=s), lognorm(m, t)),
        (1, 2, 4),
    ),
]
by_family = pytest.mark.parametrize("case", CASES, ids=lambda case: case.family)


def test_every_family_is_among_the_cases():
    assert {case.family for case in CASES} == set(FAMILIES)


def draw(case, count, seed):
    """Losses with a threshold of 2,000 or 6,000 and a limit of 30,000, 200,000 or none."""
    rng = np.random.default_rng(seed)
    losses = case.frozen(*case.parameters.values()).ppf(rng.random(count))
    thresholds = rng.choice([2_000.0, 6_000.0], count)
    limits = rng.choice([30_000.0, 200_000.0, np.inf], count)
    kept = losses >= thresholds
    stopped = losses[kept] > limits[kept]
    return np.minimum(losses, limits)[kept], thresholds[kept], stopped


@by_family
def test_known_parameters_come_back(case):
    """Truncated and censored losses give every parameter back within four standard errors, and the
    errors are small enough for that to say something."""
    count = 40_000 if case.family not in MIXTURES else 10_000
    losses, thresholds, stopped = draw(case, count, seed=20_261)
    fit = case.fit(losses, thresholds, stopped)
    for name, value in case.parameters.items():
        error = fit.standard_errors[name]
        assert abs(fit.parameters[name] - value) < 4 * error
        assert error < 0.25 * abs(value)
    assert fit.gradient_norm < 1e-5
    assert fit.censored == stopped.sum()
    assert fit.truncation == (2_000.0, 6_000.0)


def brute_force(case, losses, thresholds, stopped):
    """Maximum of sum log f/S(t) and log S/S(t), by Nelder-Mead in logarithms of positive parameters."""
    positive = np.isin(np.arange(len(case.parameters)), case.positive)

    def parameters(point):
        return np.where(positive, np.exp(np.where(positive, point, 0.0)), point)

    def minus_log_likelihood(point):
        law = case.frozen(*parameters(point))
        total = law.logpdf(losses[~stopped]).sum() + law.logsf(losses[stopped]).sum()
        total -= law.logsf(thresholds).sum()
        return -total if np.isfinite(total) else 1e300

    values = np.array(list(case.parameters.values()))
    point = np.where(positive, np.log(np.where(positive, values, 1.0)), values)
    settings = {"xatol": 1e-10, "fatol": 1e-11, "maxiter": 8000, "maxfev": 8000}
    for _ in range(2):  # a restart frees a simplex that has collapsed
        found = optimize.minimize(minus_log_likelihood, point, method="Nelder-Mead", options=settings)
        point = found.x
    return parameters(point), -found.fun


@pytest.mark.parametrize(
    "case",
    [case for case in CASES if case.family not in MIXTURES or case.family == "lognormal-mixture"],
    ids=lambda case: case.family,
)
def test_brute_force_finds_the_same_maximum(case):
    """Log-likelihood to 1e-7 and parameters to 1e-3 of their standard errors, on 300 losses."""
    losses, thresholds, stopped = draw(case, 400, seed=7)
    fit = case.fit(losses, thresholds, stopped)
    values, log_likelihood = brute_force(case, losses, thresholds, stopped)
    assert fit.log_likelihood == pytest.approx(log_likelihood, abs=1e-7)
    assert fit.log_likelihood > log_likelihood - 1e-8
    ours = [fit.parameters[name] for name in case.parameters]
    errors = [fit.standard_errors[name] for name in case.parameters]
    assert (np.abs(values - ours) < 1e-3 * np.array(errors)).all()


@by_family
def test_observed_information_matches_differences(case):
    """Standard errors come from the curvature of the naive likelihood at the fit (central differences),
    compared as information, each parameter in units of its own error with the others known."""
    losses, thresholds, stopped = draw(case, 400, seed=7)
    fit = case.fit(losses, thresholds, stopped)
    names = list(case.parameters)
    at = np.array([fit.parameters[name] for name in names])
    information = np.linalg.inv(fit.covariance[: len(names), : len(names)])
    units = 1 / np.sqrt(np.diag(information))

    def log_likelihood(values):
        law = case.frozen(*values)
        total = law.logpdf(losses[~stopped]).sum() + law.logsf(losses[stopped]).sum()
        return total - law.logsf(thresholds).sum()

    assert log_likelihood(at) == pytest.approx(fit.log_likelihood, rel=1e-12)
    steps = 0.01 * np.diag(units)
    curvature = [
        [
            log_likelihood(at + a - b)
            + log_likelihood(at - a + b)
            - log_likelihood(at + a + b)
            - log_likelihood(at - a - b)
            for b in steps
        ]
        for a in steps
    ]
    scaled = np.array(curvature) / (4 * 0.01**2)
    assert scaled == pytest.approx(information * np.outer(units, units), abs=2e-4)


@by_family
def test_another_currency_scales_the_scales_alone(case):
    """Amounts in units of 1e-9: scale parameters follow, shapes stay, likelihood shifts by its units."""
    losses, thresholds, stopped = draw(case, 2_000, seed=11)
    fit = case.fit(losses, thresholds, stopped)
    other = case.fit(losses * 1e9, thresholds * 1e9, stopped, unit=1e9)
    money = {"mean", "scale", "minimum", "threshold"} | (
        {"shape"} if case.family == "inverse-gaussian" else set()
    )
    for name, value in fit.parameters.items():
        kind = name.rpartition(".")[2]
        expected = value + np.log(1e9) if kind == "mu" else value * (1e9 if kind in money else 1)
        assert other.parameters[name] == pytest.approx(expected, rel=1e-9)
    shift = (~stopped).sum() * np.log(1e9)
    assert other.log_likelihood + shift == pytest.approx(fit.log_likelihood, rel=1e-12)


@by_family
def test_the_order_of_the_losses_changes_nothing(case):
    """Losses in another order give the same bits."""
    losses, thresholds, stopped = draw(case, 2_000, seed=13)
    fit = case.fit(losses, thresholds, stopped)
    order = np.random.default_rng(5).permutation(len(losses))
    other = case.fit(losses[order], thresholds[order], stopped[order])
    assert dict(other.parameters) == dict(fit.parameters)
    assert other.log_likelihood == fit.log_likelihood
    assert (other.covariance == fit.covariance).all()


def test_a_million_losses_fit_from_sums():
    """Truncated, censored lognormal losses: a million enter through three sums, so the fit stays exact
    and quick; parameters within four standard errors."""
    rng = np.random.default_rng(99)
    losses = np.exp(9 + 2 * rng.standard_normal(1_000_000))
    losses = losses[losses >= 5_000]
    fit = fit_severity(np.minimum(losses, 1e6), "lognormal", 5_000, losses > 1e6)
    assert abs(fit.parameters["mu"] - 9) < 4 * fit.standard_errors["mu"] < 0.05
    assert abs(fit.parameters["sigma"] - 2) < 4 * fit.standard_errors["sigma"] < 0.05


def test_intervals_cover_as_often_as_they_say():
    """95 % intervals of a Weibull shape in 200 samples of 200: within four binomial errors."""
    rng = np.random.default_rng(17)
    covered = 0
    for _ in range(200):
        losses = 1_000 * rng.weibull(0.8, 200)
        low, high = fit_severity(losses, "weibull").interval("shape")
        covered += low < 0.8 < high
    assert abs(covered / 200 - 0.95) < 4 * np.sqrt(0.95 * 0.05 / 200)
