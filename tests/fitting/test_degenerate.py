"""Every family on losses that hardly say anything: refused with the reason, or certified and sound.

Warnings are errors in these tests. A fit that is returned has a finite law whose own likelihood, written from
its density and survival function, is the log-likelihood it states and falls to both sides of every parameter:
it did not stop at the edge of its family.
"""

import numpy as np
import pytest

from lossagg.errors import FitError
from lossagg.families import make_size_law, with_parameters
from lossagg.fitting import fit_frequency, fit_severity, fit_spliced
from lossagg.fitting.frequency import FAMILIES as COUNT_FAMILIES
from lossagg.fitting.severity import FAMILIES
from lossagg.fitting.spliced import BODIES

SPREAD = np.array([1.1, 1.3, 1.9, 2.4, 3.5, 5.2, 8.1, 14.0, 29.0, 75.0])
STATES = {  # losses, reporting threshold, which are censored
    "one loss": ([500.0], 0.0, None),
    "one loss above a threshold": ([500.0], 100.0, None),
    "one loss at its threshold": ([500.0], 500.0, None),
    "all equal": ([500.0] * 12, 0.0, None),
    "all equal above a threshold": ([500.0] * 12, 100.0, None),
    "all at the limit": ([1_000.0] * 9, 0.0, [True] * 9),
    "all but one at the limit": ([1_000.0] * 9 + [400.0], 0.0, [True] * 9 + [False]),
    "all but two at the limit": ([1_000.0] * 9 + [400.0, 700.0], 100.0, [True] * 9 + [False] * 2),
    "two losses": ([300.0, 700.0], 0.0, None),
    "two amounts": ([300.0] * 7 + [700.0] * 5, 0.0, None),
    "equal but for one": ([500.0] * 19 + [501.0], 0.0, None),
    "equal to a hair": (500.0 + 1e-9 * np.arange(12), 0.0, None),
    "heaped": (np.round(1_000 * SPREAD, -4) + 1_000, 0.0, None),
    "every loss at its own threshold": (1_000 * SPREAD, 1_000 * SPREAD, None),
    "all but one at its own threshold": (1_000 * SPREAD, np.append(1_000 * SPREAD[:-1], 0.0), None),
    "one loss is everything": (np.append(1_000 * SPREAD, 1e9), 0.0, None),
    "huge": (1e15 * SPREAD, 0.0, None),
    "huge above a threshold": (1e15 * SPREAD, 1e15, None),
    "tiny": (1e-9 * SPREAD, 0.0, None),
    "tiny above a threshold": (1e-9 * SPREAD, 1e-9, [False] * 9 + [True]),
    "from tiny to huge": (np.geomspace(1e-9, 1e15, 12), 0.0, None),
    "reciprocal spread": (1_000 / SPREAD, 0.0, None),
    "threshold next to nothing": (1_000 * SPREAD, 1e-9, None),
}
FOR_SPLICES = ("all equal", "two amounts", "heaped", "one loss is everything", "from tiny to huge", "huge")
COUNTS = {
    "one year": [7],
    "one year without a loss": [0],
    "no losses": [0] * 6,
    "one loss": [0, 0, 1, 0],
    "all ones": [1] * 8,
    "all equal": [4] * 8,
    "variance below mean": [3, 4, 5, 4, 3, 4],
    "two values": [0] * 5 + [6] * 5,
    "one year is everything": [0, 0, 0, 0, 50_000],
    "huge": [100_000, 101_000, 99_800],
    "huge and equal": [100_000] * 3,
}


def attempt(fit):
    """The fit, or None where it is refused with a way out."""
    try:
        return fit()
    except FitError as refusal:
        told = refusal
    assert told.remedy
    assert len(str(told)) > 40
    return None


def held(family, losses):
    return {"minimum": 0.5 * float(np.min(losses))} if family == "log-gamma" else None


def law_log_likelihood(law, losses, thresholds, stopped):
    with np.errstate(all="ignore"):
        each = np.where(stopped, np.log(law.sf(losses)), np.log(law.pdf(losses)))
        # A loss equal to its threshold counts as recorded; these laws give a point no probability.
        return float(np.sum(each) - np.sum(np.log(law.sf(thresholds))))


def check_certified(fit, losses, thresholds, stopped):
    values = np.array([*fit.parameters.values(), *fit.standard_errors.values(), fit.log_likelihood, fit.aic])
    assert np.isfinite(values).all()
    assert fit.gradient_norm < 1e-5
    here = law_log_likelihood(fit.model, losses, thresholds, stopped)
    assert here == pytest.approx(fit.log_likelihood, rel=1e-6, abs=1e-5)
    for name in fit.ranges:  # lower on both sides, a standard error (or the parameter's size) away
        value, error = fit.parameters[name], fit.standard_errors[name]
        assert error > 0
        sides = (value - 0.5 * error, value + 0.5 * error)
        if fit.ranges[name] == "positive":
            factor = np.exp(min(0.5 * error / value, 1.0))
            sides = (value / factor, value * factor)
        for side in sides:
            law = make_size_law(**with_parameters(fit.model.to_dict(), {name: side}))
            assert not law_log_likelihood(law, losses, thresholds, stopped) > here + 1e-7 * abs(here)


def check_profiles(fit):
    for low, high in (fit.profile_interval(name) for name in fit.ranges):
        assert low < high
        assert not np.isnan([low, high]).any()


@pytest.mark.parametrize("state", STATES)
@pytest.mark.parametrize("family", FAMILIES)
def test_sizes(family, state):
    losses, threshold, marks = STATES[state]
    losses = np.asarray(losses, dtype=float)
    thresholds = np.broadcast_to(np.asarray(threshold, dtype=float), losses.shape)
    stopped = np.zeros(losses.shape, dtype=bool) if marks is None else np.array(marks)
    if family == "log-gamma":
        thresholds = np.maximum(thresholds, 0.5 * losses.min())
    fit = attempt(lambda: fit_severity(losses, family, thresholds, stopped, fixed=held(family, losses)))
    if fit is None:
        return
    check_certified(fit, losses, thresholds, stopped)
    if state in ("two amounts", "all but one at the limit", "huge"):
        check_profiles(fit)
    if len(np.unique(losses[~stopped])) == 1:
        assert len(fit.ranges) == 1
        assert any(note.code in ("few-losses", "repeated-amount") for note in fit.notes)


@pytest.mark.parametrize("state", FOR_SPLICES)
@pytest.mark.parametrize(
    ("body", "continuous"), [*((body, False) for body in BODIES), ("lognormal", True), ("weibull", True)]
)
def test_splices(body, state, continuous):
    losses, threshold, marks = STATES[state]
    losses = np.asarray(losses, dtype=float)
    place = float(np.median(losses))
    fit = attempt(lambda: fit_spliced(losses, body, place, threshold, marks, continuous=continuous))
    if fit is None:
        return
    values = np.array([*fit.parameters.values(), *fit.standard_errors.values(), fit.log_likelihood])
    assert np.isfinite(values).all()
    assert fit.gradient_norm < 1e-5


@pytest.mark.parametrize("state", COUNTS)
@pytest.mark.parametrize("family", COUNT_FAMILIES)
def test_counts(family, state):
    counts = COUNTS[state]
    fit = attempt(lambda: fit_frequency(counts, family))
    if fit is None:
        return
    values = np.array([*fit.parameters.values(), *fit.standard_errors.values(), fit.log_likelihood])
    assert np.isfinite(values).all()
    assert fit.model.mean() > 0
    if not sum(counts):
        assert family == "poisson"
        assert any(note.code == "no-losses" for note in fit.notes)
        return
    assert fit.model.mean() == pytest.approx(np.mean(counts), rel=1e-9)
    likelihoods = fit.model.pmf(np.array(counts, dtype=float))
    if (likelihoods > 0).all():  # one year is everything: below the smallest number for a Poisson law
        assert np.log(likelihoods).sum() == pytest.approx(fit.log_likelihood, rel=1e-6, abs=1e-6)
    for low, high in (fit.profile_interval(name) for name in fit.ranges):
        assert low < high


@pytest.mark.parametrize("family", FAMILIES)
@pytest.mark.parametrize("unit", [1e15, 1e-9])
def test_huge_and_tiny_amounts_give_the_fit_of_usual_ones(family, unit):
    """The unit of money changes no shape and no interval of a shape."""
    losses = 1_000 * SPREAD
    try:
        usual = fit_severity(losses, family, fixed=held(family, losses))
    except FitError:
        with pytest.raises(FitError):
            fit_severity(losses * unit, family, fixed=held(family, losses * unit))
        return
    other = fit_severity(losses * unit, family, fixed=held(family, losses * unit))
    for name in ("alpha", "gamma", "sigma", "rate") + (() if family == "inverse-gaussian" else ("shape",)):
        if name in usual.ranges:
            assert other.parameters[name] == pytest.approx(usual.parameters[name], rel=1e-8)


def test_an_amount_that_repeats_is_told():
    losses = np.concatenate([np.geomspace(100, 9_000, 30), [2_500.0] * 10])
    notes = {note.code: note for note in fit_severity(losses, "lognormal").notes}
    assert "10 of 40 uncensored losses are 2500" in notes["repeated-amount"]
    weighted = fit_severity(np.append(losses[:30], 2_500.0), "lognormal", weights=[1.0] * 30 + [10.0])
    assert "repeated-amount" in {note.code for note in weighted.notes}
    assert "repeated-amount" not in {note.code for note in fit_severity(losses[:33], "lognormal").notes}
