"""Notes on fits: alarms rest on the interval of the tail index, not only on its point."""

import numpy as np
import pytest

from lossagg.errors import FitError
from lossagg.fitting import compare_severities, fit_severity, fit_spliced
from lossagg.fitting.notes import tail_index_interval


def pareto_losses(alpha: float, count: int) -> np.ndarray:
    """Quantiles of a Pareto law with minimum 1 at the midpoints of equal probabilities."""
    return ((np.arange(count) + 0.5) / count) ** (-1 / alpha)


def codes(losses: np.ndarray, family: str) -> set[str]:
    return {note.code for note in fit_severity(losses, family, truncation=1.0).notes}


@pytest.mark.parametrize(
    ("alpha", "count", "expected"),
    [
        (0.9, 400, {"infinite-mean"}),
        (1.1, 100, {"infinite-mean-possible", "infinite-variance"}),
        (1.5, 2000, {"infinite-variance"}),
        (2.2, 100, {"infinite-variance-possible"}),
        (4.0, 2000, set()),
    ],
)
def test_alarms_of_the_tail(alpha: float, count: int, expected: set[str]) -> None:
    assert codes(pareto_losses(alpha, count), "pareto") == expected


def test_pareto_interval_by_the_closed_form() -> None:
    """The maximum likelihood alpha has relative standard error 1/sqrt(n)."""
    fit = fit_severity(pareto_losses(1.5, 100), "pareto", truncation=1.0)
    low, high = tail_index_interval("pareto", fit.parameters, fit.covariance)
    factor = np.exp(1.959963985 / 10)
    assert low == pytest.approx(fit.parameters["alpha"] / factor, rel=1e-8)
    assert high == pytest.approx(fit.parameters["alpha"] * factor, rel=1e-8)


def test_generalized_pareto_interval_comes_from_the_shape() -> None:
    fit = fit_severity(pareto_losses(1.5, 300), "generalized-pareto", truncation=1.0)
    shape, error = fit.parameters["shape"], fit.standard_errors["shape"]
    low, high = tail_index_interval("generalized-pareto", fit.parameters, fit.covariance)
    assert low == pytest.approx(1 / (shape + 1.959963985 * error), rel=1e-8)
    assert high == pytest.approx(1 / (shape - 1.959963985 * error), rel=1e-8)


def test_burr_interval_is_that_of_alpha_times_gamma() -> None:
    """Against the delta method written out for the logarithm of the product."""
    fit = fit_severity(np.random.default_rng(3).pareto(1.3, 3000) ** 0.9 + 1e-9, "burr")
    alpha, gamma = fit.parameters["alpha"], fit.parameters["gamma"]
    names = list(fit.parameters)
    c = fit.covariance
    a, g = names.index("alpha"), names.index("gamma")
    variance = c[a, a] / alpha**2 + c[g, g] / gamma**2 + 2 * c[a, g] / (alpha * gamma)
    low, _ = tail_index_interval("burr", fit.parameters, c)
    assert low == pytest.approx(alpha * gamma * np.exp(-1.959963985 * np.sqrt(variance)), rel=1e-8)


def test_light_tails_have_no_interval() -> None:
    fit = fit_severity(pareto_losses(3.0, 50), "exponential")
    assert tail_index_interval("exponential", fit.parameters, fit.covariance) == (np.inf, np.inf)


def test_a_splice_is_judged_by_its_tail() -> None:
    rng = np.random.default_rng(8)
    losses = np.concatenate([rng.uniform(0.1, 1.0, 500), pareto_losses(1.1, 60)])
    fit = fit_spliced(losses, "weibull", 1.0, tail="pareto")
    assert "infinite-mean-possible" in {note.code for note in fit.notes}


def test_a_fit_that_leaves_next_to_nothing_above_the_threshold_is_refused() -> None:
    """A heavy Pareto sample pushes the lognormal far below its threshold: no ground-up count from that."""
    losses = 1000 * pareto_losses(0.9, 300)
    seen = float(fit_severity(losses, "lognormal", truncation=1000.0).model.sf(1000.0))
    assert seen < 0.01
    tried = compare_severities(losses, ["lognormal", "pareto"], truncation=1000.0, least_seen=0.01)
    assert tried.chosen.family == "pareto"
    assert "of all losses above the reporting threshold" in tried.refused["lognormal"]
    with pytest.raises(FitError, match="none of the severity families"):
        compare_severities(losses, ["lognormal"], truncation=1000.0, least_seen=0.01)
