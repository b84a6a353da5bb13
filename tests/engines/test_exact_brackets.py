"""Brackets that hold the truth and are narrow also for many losses."""

import importlib.util
import sys
import warnings
from pathlib import Path

import numpy as np
import pytest

from lossagg.cover import Cover
from lossagg.engines.far_tail import FarTail
from lossagg.engines.fourier import BracketWarning, Fourier
from lossagg.engines.panjer import Panjer
from lossagg.engines.pgf_slope import pgf_slope
from lossagg.engines.size_biased import size_biased
from lossagg.families import (
    Binomial,
    CountTable,
    Exponential,
    Gamma,
    InverseGaussian,
    Lognormal,
    NegativeBinomial,
    Pareto,
    Poisson,
    SizeTable,
    ZeroInflated,
    ZeroModified,
)

SCRIPT = Path(__file__).resolve().parents[2] / "validation" / "brackets.py"


def script():
    """The experiment of `validation/`, whose closed forms are used here too."""
    if "brackets_experiment" not in sys.modules:
        spec = importlib.util.spec_from_file_location("brackets_experiment", SCRIPT)
        sys.modules["brackets_experiment"] = module = importlib.util.module_from_spec(spec)
        spec.loader.exec_module(module)
    return sys.modules["brackets_experiment"]


def test_random_models_small():
    """Thirty of the random models of validation/brackets.py, counts, sizes and covers of all kinds, both
    engines: every bracket holds the truth."""
    found = script().experiment(30, seed=7, finer=2**13)
    assert len(found) > 500
    assert not [figure for figure in found if figure.missed or not figure.inside]


CLOSED = {
    "Poisson-exponential": (Poisson(mean=3), Exponential(mean=1000)),
    "rare": (Poisson(mean=0.01), Exponential(mean=1)),
    "geometric-exponential": (NegativeBinomial(mean=4, dispersion=1), Exponential(mean=1000)),
    "integer negative binomial-exponential": (
        NegativeBinomial(mean=9, dispersion=1 / 3),
        Exponential(mean=2),
    ),
    "Poisson-gamma": (Poisson(mean=25), Gamma(shape=2.5, scale=10)),
    "many": (Poisson(mean=100_000), Gamma(shape=2.0, scale=10)),
    "zero-modified": (ZeroModified(base=Poisson(mean=4), zero_probability=0.4), Exponential(mean=5)),
    "zero-inflated": (
        ZeroInflated(base=Binomial(trials=9, probability=0.3), extra_zeros=0.2),
        Gamma(shape=2, scale=1),
    ),
    "inverse Gaussian": (Poisson(mean=8), InverseGaussian(mean=10, shape=20)),
}


@pytest.mark.parametrize("name", CLOSED)
def test_closed_forms_to_eight_digits(name):
    """Klugman, Panjer and Willmot, Loss Models, ch. 9: sums of n sizes with a closed form, mixed by the
    probabilities of the count with scipy. VaR from 50 % to 99.99 %, TVaR; the bracket holds them."""
    truth = script().ClosedForm(*CLOSED[name])
    loss = Fourier().annual_loss(*CLOSED[name])
    for level in (0.5, 0.9, 0.99, 0.995, 0.999, 0.9999):
        value = truth.value_at_risk(level)
        low, high = loss.accuracy("value_at_risk", level)
        assert low <= value <= high
        assert loss.value_at_risk(level) == pytest.approx(value, rel=1e-8)
        tail = truth.tail_value_at_risk(level)
        if tail is not None:
            low, high = loss.accuracy("tail_value_at_risk", level)
            assert low * (1 - 1e-9) <= tail <= high * (1 + 1e-9)
            assert loss.tail_value_at_risk(level) == pytest.approx(tail, rel=1e-8)


@pytest.mark.parametrize(
    ("count", "size"),
    [
        (Poisson(mean=0.01), Lognormal(mu=0, sigma=3)),
        (Poisson(mean=1), Pareto(alpha=0.8, minimum=1)),
        (Poisson(mean=1000), Lognormal(mu=0, sigma=0.1)),
        (Poisson(mean=1000), Lognormal(mu=0, sigma=3)),
        (NegativeBinomial(mean=1000, dispersion=0.5), Pareto(alpha=1.5, minimum=1)),
    ],
)
def test_width_asked_for_up_to_a_thousand_losses(count, size):
    """0.1 % at 99.5 %, 0.2 % at 99.9 %, and no warning."""
    with warnings.catch_warnings():
        warnings.simplefilter("error", BracketWarning)
        loss = Fourier().annual_loss(count, size)
    for level, width in ((0.995, 1e-3), (0.999, 2e-3)):
        low, high = loss.accuracy("value_at_risk", level)
        assert high - low <= width * low
        assert low <= loss.value_at_risk(level) <= high


def test_many_losses_move_a_quantile_by_the_root_of_their_number():
    """10,000 losses rounded to one step each way differ by 10,000 steps; bounds of limited means leave about
    sqrt(20,000), and of the TVaR less than a hundred."""
    model = (Poisson(mean=10_000), Exponential(mean=10.0))
    truth = script().ClosedForm(*model)
    for engine in (Fourier(points=2**14, step=10.0), Panjer(points=2**14, step=10.0)):
        loss = engine.annual_loss(*model)
        low, high = loss.accuracy("value_at_risk", 0.995)
        assert low <= truth.value_at_risk(0.995) <= high
        assert high - low < 250 * 10.0
        low, high = loss.accuracy("tail_value_at_risk", 0.995)
        assert low <= truth.tail_value_at_risk(0.995) <= high
        assert high - low < 100 * 10.0


def test_infinite_means_against_conditional_simulation():
    """Pareto with tail index 0.8: quantiles only; the exceedance of the engine's VaR by conditional
    simulation lies within four standard errors of the level."""
    model = (Poisson(mean=100), Pareto(alpha=0.8, minimum=1))
    loss = Fourier(points=2**17).annual_loss(*model)
    assert loss.mean() == loss.tail_value_at_risk(0.9) == np.inf
    far = FarTail(samples=20_000, seed=3).annual_loss(*model)
    for level in (0.99, 0.999):
        value, error = far.exceedance(loss.value_at_risk(level))
        assert abs(value - (1 - level)) <= 4 * error


def test_far_beyond_the_lattice_against_conditional_simulation():
    """Once in a million years, beyond the default lattice: an estimate, one large payment and what the others
    add. It is within 1 % of the conditional simulation."""
    model = (Poisson(mean=90), Lognormal(mu=10.3, sigma=1.2))
    loss = Fourier(points=2**16, step=300.0).annual_loss(*model)
    level = 1 - 1e-6
    assert loss.value_at_risk(level) > loss.top
    low, high = FarTail(samples=20_000, seed=3).annual_loss(*model).accuracy("value_at_risk", level)
    assert 0.99 * low <= loss.value_at_risk(level) <= 1.01 * high


def test_a_line_whose_payments_all_lie_beyond_the_lattice():
    """Nothing of it is on the lattice; the year still counts it as one with a payment."""
    size = SizeTable(sizes=[1000.0], probabilities=[1.0])
    loss = Fourier(points=50, step=1.0).annual_loss(Poisson(mean=0.1), size)
    assert loss.sf(0.0) == pytest.approx(-np.expm1(-0.1), rel=1e-12)


def test_costs_of_annual_terms_are_bracketed_by_layers():
    """A stop loss on a coarse lattice: mean and TVaR from a fine one inside, the widths of second order."""
    model = (Poisson(mean=50), Lognormal(mu=0, sigma=1.5), Cover(annual_retention=200, annual_limit=300))
    truth = Fourier().annual_loss(*model)
    loss = Fourier(points=2**11).annual_loss(*model)
    for measure, level in (("mean", None), ("tail_value_at_risk", 0.9), ("tail_value_at_risk", 0.99)):
        low, high = loss.accuracy(measure, level)
        assert low <= truth.measure(measure, level) <= high
        assert high - low < 2e-2 * high
        assert low <= loss.measure(measure, level) <= high


@pytest.mark.parametrize(
    "count",
    [
        Poisson(mean=3),
        NegativeBinomial(mean=3, dispersion=0.6),
        Binomial(trials=7, probability=0.3),
        Binomial(trials=1, probability=0.3),
        CountTable(probabilities=[0.2, 0.5, 0.1, 0.2]),
        ZeroModified(base=Poisson(mean=3), zero_probability=0.2),
        ZeroInflated(base=NegativeBinomial(mean=3, dispersion=0.6), extra_zeros=0.2),
    ],
    ids=lambda count: count.family,
)
def test_the_count_seen_from_one_loss(count):
    """E[N z**(N - 1)] from the probabilities, as a derivative and as a law of the other losses."""
    numbers = np.arange(200.0)
    chances = np.asarray(count.pmf(numbers))
    for z in (0.3, 0.9, 0.5 + 0.6j):
        exact = np.sum(numbers[1:] * chances[1:] * z ** numbers[:-1])
        assert pgf_slope(count, np.array([z]))[0] == pytest.approx(exact, rel=1e-12)
        assert count.mean() * size_biased(count).pgf(z) == pytest.approx(exact, rel=1e-12)
