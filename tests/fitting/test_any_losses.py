"""Whatever the losses, a fit is certified or refused in words: no other error, no warning, no NaN.

Amounts from a thousandth to a million million, few or many, tied, censored, above thresholds of their own.
"""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from lossagg.errors import FitError
from lossagg.fitting import fit_frequency, fit_severity, fit_spliced
from lossagg.fitting.frequency import FAMILIES as COUNT_FAMILIES
from lossagg.fitting.mixtures import MIXTURES
from lossagg.fitting.severity import FAMILIES
from lossagg.fitting.spliced import BODIES

settings.register_profile("fitting", derandomize=True, deadline=None, database=None)
amounts = st.one_of(
    st.floats(1e-3, 1e12),
    st.sampled_from([1_000.0, 1_000.0, 2_500.0, 10_000.0]),
    st.floats(5_000, 50_000),
)


@st.composite
def samples(draw):
    """Losses, thresholds below them (some none, some equal to the loss) and censoring marks."""
    losses = np.array(draw(st.lists(amounts, min_size=1, max_size=40)))
    shares = draw(st.lists(st.sampled_from([0.0, 0.5, 0.9, 1.0]), min_size=losses.size, max_size=losses.size))
    marks = draw(st.lists(st.booleans(), min_size=losses.size, max_size=losses.size))
    kind = draw(st.sampled_from(["complete", "one threshold", "own thresholds"]))
    thresholds = {
        "complete": None,
        "one threshold": losses.min() * draw(st.sampled_from([0.1, 0.99, 1.0])),
        "own thresholds": losses * np.array(shares),
    }[kind]
    return losses, thresholds, np.array(marks) if draw(st.booleans()) else None


def check(fit):
    values = np.array([*fit.parameters.values(), *fit.standard_errors.values(), fit.log_likelihood])
    assert np.isfinite(values).all()
    assert fit.gradient_norm < 1e-5
    assert (np.diag(fit.covariance) >= 0).all()
    for name in fit.parameters:
        low, high = fit.interval(name)
        assert low <= fit.parameters[name] <= high
    own = fit.model.parameters
    assert {name: own[name] for name in fit.parameters} == pytest.approx(dict(fit.parameters))
    assert set(own) - set(fit.parameters) <= {"weight.2"}  # what the first leaves


@pytest.mark.parametrize("family", MIXTURES)
@settings(settings.get_profile("fitting"), max_examples=8)
@given(sample=samples())
def test_mixtures(family, sample):
    losses, thresholds, marks = sample
    try:
        fit = fit_severity(losses, family, thresholds, marks)
    except FitError:
        return
    check(fit)


@pytest.mark.parametrize("family", [name for name in FAMILIES if name not in MIXTURES])
@settings(settings.get_profile("fitting"), max_examples=25)
@given(sample=samples())
def test_sizes(family, sample):
    losses, thresholds, marks = sample
    try:
        fit = fit_severity(losses, family, thresholds, marks)
    except FitError:
        return
    check(fit)


@pytest.mark.parametrize("body", BODIES)
@settings(settings.get_profile("fitting"), max_examples=12)
@given(sample=samples(), place=st.floats(0.2, 0.9))
def test_splices(body, sample, place):
    losses, thresholds, marks = sample
    try:
        fit = fit_spliced(losses, body, float(np.quantile(losses, place)), thresholds, marks)
    except FitError:
        return
    check(fit)


@pytest.mark.parametrize("family", COUNT_FAMILIES)
@settings(settings.get_profile("fitting"), max_examples=30)
@given(
    counts=st.lists(st.one_of(st.integers(0, 12), st.integers(0, 40_000)), min_size=1, max_size=15),
    exposed=st.booleans(),
)
def test_counts(family, counts, exposed):
    exposure = np.linspace(0.5, 3.0, len(counts)) if exposed else None
    try:
        fit = fit_frequency(counts, family, exposure)
    except FitError:
        return
    check(fit)
    assert fit.model.mean() > 0
    assert fit.upper_rate() > fit.maximum_likelihood_mean
