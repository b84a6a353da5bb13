"""Laws of the field that the simulated figures must obey, and the note about the first run."""

import importlib.util
import itertools
import logging
import sys

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import lossagg.engines.simulation as simulation
from lossagg.cover import Cover
from lossagg.engines.simulation import Simulation
from lossagg.families import GeneralizedPareto, Lognormal, Pareto, Poisson, Weibull
from lossagg.kernels.compile import awaits_compilation
from lossagg.kernels.simulation import add_years, begin_strips, scatter_blocks

ENGINE = Simulation(years=3000, workers=1)
SIZES = st.sampled_from(
    [
        Lognormal(mu=7.0, sigma=1.4),
        Pareto(alpha=1.6, minimum=800.0),
        Weibull(shape=0.6, scale=1500.0),
        GeneralizedPareto(shape=0.3, scale=900.0),
    ]
)
MEANS = st.floats(0.05, 30.0)
LEVELS = st.floats(0.5, 0.995)
repeated = settings(derandomize=True, deadline=None, max_examples=20)


@repeated
@given(MEANS, SIZES, st.floats(1e-3, 1e6), LEVELS)
def test_scaling_the_currency_scales_every_measure(mean, severity, factor, level):
    """The same seed draws the same losses in another currency, to rounding of the tables."""
    ours = ENGINE.annual_loss(Poisson(mean=mean), severity)
    scaled = ENGINE.annual_loss(Poisson(mean=mean), severity.scaled(factor))
    assert scaled.mean() == pytest.approx(factor * ours.mean(), rel=1e-7)
    assert scaled.value_at_risk(level) == pytest.approx(factor * ours.value_at_risk(level), rel=1e-7)
    assert scaled.tail_value_at_risk(level) == pytest.approx(
        factor * ours.tail_value_at_risk(level), rel=1e-7
    )


@repeated
@given(MEANS, SIZES, LEVELS)
def test_the_tail_value_at_risk_is_at_least_the_value_at_risk(mean, severity, level):
    loss = ENGINE.annual_loss(Poisson(mean=mean), severity)
    assert loss.tail_value_at_risk(level) >= loss.value_at_risk(level) * (1 - 1e-12)
    low, high = loss.accuracy("value_at_risk", level)
    assert low <= loss.value_at_risk(level) <= high


@repeated
@given(MEANS, SIZES, st.lists(st.floats(1.0, 1e5), min_size=1, max_size=4, unique=True))
def test_layers_stacked_end_to_end_add_to_the_ground_up_loss(mean, severity, cuts):
    """Year by year, since every cover sees the same losses."""
    cuts = [0.0, *sorted(cuts), np.inf]
    frequency = Poisson(mean=mean)
    total = sum(
        ENGINE.annual_loss(frequency, severity, Cover(deductible=low, limit=high - low)).annual
        for low, high in itertools.pairwise(cuts)
        if high > low
    )
    np.testing.assert_allclose(total, ENGINE.annual_loss(frequency, severity).annual, rtol=1e-9)


@repeated
@given(MEANS, SIZES, st.floats(10.0, 1e4))
def test_the_cost_falls_and_is_convex_in_the_deductible(mean, severity, step):
    frequency = Poisson(mean=mean)
    years = [ENGINE.annual_loss(frequency, severity, Cover(deductible=k * step)).annual for k in (1, 2, 3)]
    slack = 1e-9 * (1.0 + years[0])
    assert (years[0] - years[1] >= -slack).all()
    assert (years[0] + years[2] - 2.0 * years[1] >= -slack).all()


@repeated
@given(st.floats(0.05, 20.0), SIZES, LEVELS)
def test_more_risk_never_needs_less_capital(mean, severity, level):
    """Delegated Regulation (EU) 2018/959, Art. 32(g), monotone in risk: larger losses, one loss more."""
    base = ENGINE.annual_loss(Poisson(mean=mean), severity).value_at_risk(level)
    assert ENGINE.annual_loss(Poisson(mean=mean), severity.scaled(1.1)).value_at_risk(level) >= base
    more = ENGINE.annual_loss(Poisson(mean=mean + 1.0), severity)
    assert more.accuracy("value_at_risk", level)[1] >= base


@pytest.mark.parametrize(
    ("mean", "years", "first"), [(0.5, 10, begin_strips), (0.5, 40_000, scatter_blocks), (5.0, 10, add_years)]
)
def test_the_first_run_on_a_machine_says_that_it_compiles(mean, years, first, monkeypatch, caplog):
    monkeypatch.setattr(simulation, "awaits_compilation", lambda kernel: kernel is first)
    with caplog.at_level(logging.INFO, logger="lossagg"):
        Simulation(years=years).annual_loss(Poisson(mean=mean), Lognormal(mu=1.0, sigma=1.0))
    assert caplog.messages == ["compiling the simulation for this machine; later runs start at once"]


def test_it_is_known_whether_a_kernel_awaits_compilation(tmp_path):
    """Before its first call it does; after it no longer, nor in the next process, thanks to the cache."""
    path = tmp_path / "kernel_for_a_test.py"
    path.write_text(
        "from lossagg.kernels.compile import compiled\n\n@compiled\ndef double(x):\n    return 2.0 * x\n"
    )

    def load():
        spec = importlib.util.spec_from_file_location(path.stem, path)
        module = importlib.util.module_from_spec(spec)
        sys.modules[path.stem] = module
        spec.loader.exec_module(module)
        return module.double

    kernel = load()
    assert awaits_compilation(kernel)
    assert kernel(4.0) == 8.0
    assert not awaits_compilation(kernel)
    assert not awaits_compilation(load())
    del sys.modules[path.stem]
