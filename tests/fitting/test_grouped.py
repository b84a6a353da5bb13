"""Grouped losses: published fits, and the limit of fine intervals."""

import numpy as np
import pytest
from scipy import optimize, stats

from lossagg import Pareto
from lossagg.errors import FitError, InputError
from lossagg.fitting import fit_grouped, fit_severity

# Klugman, Panjer & Willmot, Loss Models: Data Set C, grouped payments. Exponential mean 29,721 and -406.03 as
# printed; the others recomputed with mpmath.
EDGES = [0, 7500, 17500, 32500, 67500, 125000, 300000, np.inf]
COUNTS = [99, 42, 29, 28, 17, 9, 3]
SET_C = {
    "exponential": ({"mean": 29720.7708007}, -406.026733603, 1031.08160424),
    "gamma": ({"shape": 0.371385017294, "scale": 83019.9785294}, -360.496247864, 7.74663161445),
    "weibull": ({"scale": 19205.6683914, "shape": 0.565146202363}, -357.964838139, 1.23770351921),
    "lognormal": ({"mu": 9.21496671177, "sigma": 1.62973209427}, -358.280848475, 1.81732257454),
    "lomax": ({"alpha": 1.21954636415, "scale": 13643.80107}, -359.663345099, 4.55782482629),
}


@pytest.mark.parametrize("family", SET_C)
def test_data_set_c(family):
    parameters, log_likelihood, chi_square = SET_C[family]
    fit = fit_grouped(EDGES, COUNTS, family)
    for name, value in parameters.items():
        assert fit.parameters[name] == pytest.approx(value, rel=1e-5)
    assert fit.log_likelihood == pytest.approx(log_likelihood, abs=1e-6)
    assert fit.chi_square == pytest.approx(chi_square, rel=1e-4)
    assert fit.expected.sum() == pytest.approx(227)
    if family == "exponential":
        assert round(fit.parameters["mean"]) == 29721
        assert round(fit.log_likelihood, 2) == -406.03


def test_grouped_exponential_in_closed_form():
    """SOA Exam C / STAM sample question: 7, 6, 7 losses up to 1000, up to 2000 and beyond: mean 1996.90."""
    fit = fit_grouped([0, 1000, 2000, np.inf], [7, 6, 7], "exponential")
    assert fit.parameters["mean"] == pytest.approx(1996.90364948, rel=1e-9)
    assert round(fit.parameters["mean"], 2) == 1996.90


def test_grouped_single_parameter_pareto_in_closed_form():
    """SOA Exam C / STAM sample question: F(x) = 1 - theta / x, losses 9 up to 10, 6 up to 25, 5 beyond: 5.50.

    That is the Pareto law of alpha 1 with an unknown minimum; the likelihood is written from its survival
    function."""

    def log_likelihood(theta):
        survival = Pareto(alpha=1, minimum=theta).sf([10.0, 25.0])
        parts = -np.diff(np.concatenate([[1.0], survival, [0.0]]))
        return float(np.sum(np.array([9, 6, 5]) * np.log(parts)))

    found = optimize.minimize_scalar(
        lambda theta: -log_likelihood(theta), bounds=(1, 9.9), method="bounded", options={"xatol": 1e-9}
    )
    assert round(found.x, 2) == 5.50
    assert found.x == pytest.approx(10 * 11 / 20, rel=1e-6)


def test_fine_intervals_give_the_fit_of_the_losses_and_its_errors():
    rng = np.random.default_rng(2)
    losses = rng.lognormal(8, 1, 800)
    edges = np.append(np.geomspace(losses.min() * 0.99, losses.max() * 1.01, 4000), np.inf)
    counts, _ = np.histogram(losses, edges)
    exact = fit_severity(losses, "lognormal", truncation=float(edges[0]))
    grouped = fit_grouped(edges, counts, "lognormal")
    for name in ("mu", "sigma"):
        assert grouped.parameters[name] == pytest.approx(exact.parameters[name], abs=2e-3)
    assert np.sqrt(np.diag(grouped.covariance)) == pytest.approx(
        list(exact.standard_errors.values()), rel=2e-2
    )


def test_a_first_edge_above_zero_is_a_threshold():
    """The exponential law has no memory: leaving out the first interval moves the origin only."""
    whole = fit_grouped([0, 1000, 3000, np.inf], [9, 6, 5], "exponential")
    shifted = fit_grouped([500, 1500, 3500, np.inf], [9, 6, 5], "exponential")
    assert shifted.parameters["mean"] == pytest.approx(whole.parameters["mean"], rel=1e-9)
    assert shifted.log_likelihood == pytest.approx(whole.log_likelihood, abs=1e-9)


def test_weights_count_as_losses():
    once, tenfold = (
        fit_grouped(EDGES, COUNTS, "weibull"),
        fit_grouped(EDGES, 10 * np.array(COUNTS), "weibull"),
    )
    assert tenfold.parameters == pytest.approx(once.parameters, rel=1e-8)
    assert tenfold.covariance * 10 == pytest.approx(once.covariance, rel=1e-6)


def test_groups_that_cannot_be_fitted():
    with pytest.raises(FitError, match="2 intervals with losses cannot determine the 2 parameters"):
        fit_grouped([0, 1, 2, 3], [3, 0, 4], "gamma")
    with pytest.raises(InputError, match="edges must ascend"):
        fit_grouped([0, 2, 1], [3, 4], "gamma")
    with pytest.raises(InputError, match="one per interval"):
        fit_grouped([0, 1, 2], [3, 4, 5], "gamma")
    with pytest.raises(InputError, match="unknown family for grouped losses"):
        fit_grouped([0, 1, 2], [3, 4], "pareto")


def test_log_gamma_against_a_naive_likelihood():
    """The minimum below the first edge, at it, and within the first interval: the parameters of a Nelder-Mead
    climb on a likelihood of the intervals written from scipy's gamma law, and its curvature."""
    losses = 800 * np.exp(stats.gamma(2.5, scale=1 / 2.2).ppf(np.random.default_rng(21).random(1_500)))
    for first, minimum in ((1_000.0, 800.0), (800.0, None), (0.0, 800.0)):
        edges = np.array([first, 1_500, 2_500, 4_000, 7_000, 15_000, 50_000, np.inf])
        counts, _ = np.histogram(losses, edges)
        held = None if minimum is None else {"minimum": minimum}
        fit = fit_grouped(edges, counts, "log-gamma", fixed=held)

        def log_likelihood(shape, rate, edges=edges, counts=counts):
            y = np.log(np.maximum(edges / 800.0, 1.0))
            survival = stats.gamma(shape, scale=1 / rate).sf(y)
            return float(np.sum(counts * np.log(-np.diff(survival) / survival[0])))

        found = optimize.minimize(
            lambda p, target=log_likelihood: -target(*np.exp(p)),
            np.log([2.0, 2.0]),
            method="Nelder-Mead",
            options={"xatol": 1e-9, "fatol": 1e-12},
        )
        assert [fit.parameters[name] for name in ("shape", "rate")] == pytest.approx(
            np.exp(found.x), rel=1e-6
        )
        assert fit.parameters["minimum"] == 800.0
        assert fit.log_likelihood == pytest.approx(-found.fun, abs=1e-9)
        at, errors = np.exp(found.x), np.sqrt(np.diag(fit.covariance))
        for name, truth, error in zip(("shape", "rate"), (2.5, 2.2), errors, strict=True):
            assert abs(fit.parameters[name] - truth) < 4 * error
        steps = 0.02 * np.diag(errors)
        curvature = [
            [
                log_likelihood(*(at + a - b))
                + log_likelihood(*(at - a + b))
                - log_likelihood(*(at + a + b))
                - log_likelihood(*(at - a - b))
                for b in steps
            ]
            for a in steps
        ]
        ours = np.linalg.inv(fit.covariance) * np.outer(errors, errors)
        assert np.array(curvature) / (4 * 0.02**2) == pytest.approx(ours, rel=1e-3)


def test_a_log_gamma_law_without_a_place_to_begin():
    with pytest.raises(InputError, match="needs a minimum above 0 and below the end of the first interval"):
        fit_grouped([0, 1_000, 3_000, np.inf], [9, 6, 5], "log-gamma")
    with pytest.raises(InputError, match="with m below 3000"):
        fit_grouped([500, 1_000, 3_000, 9_000, np.inf], [0, 6, 5, 4], "log-gamma", fixed={"minimum": 3_000})
    with pytest.raises(InputError, match="none of its parameters fixed"):
        fit_grouped(EDGES, COUNTS, "weibull", fixed={"minimum": 1.0})
