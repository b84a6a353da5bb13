"""Weights say how many losses an amount stands for: a weight of k is the loss written k times."""

import numpy as np
import pytest

from lossagg import Burr
from lossagg.errors import InputError
from lossagg.fitting import fit_severity
from lossagg.fitting.mixtures import MIXTURES
from lossagg.fitting.severity import FAMILIES

RANDOM = np.random.default_rng(41)
LOSSES = np.asarray(Burr(alpha=2.5, gamma=1.2, scale=15_000).ppf(RANDOM.random(300)))
TIMES = RANDOM.integers(1, 6, LOSSES.size)
THRESHOLDS = RANDOM.choice([500.0, 900.0], LOSSES.size)
STOPPED = LOSSES > 15_000


@pytest.mark.parametrize("marked", [False, True], ids=["exact", "truncated and censored"])
@pytest.mark.parametrize("family", [name for name in FAMILIES if name not in MIXTURES])
def test_a_weight_is_the_loss_repeated(family, marked):
    thresholds = THRESHOLDS if marked else np.zeros(LOSSES.size)
    seen = LOSSES >= thresholds
    losses = np.minimum(LOSSES, 15_000) if marked else LOSSES
    losses, thresholds, stopped, times = losses[seen], thresholds[seen], (STOPPED & marked)[seen], TIMES[seen]
    held = {"minimum": 0.5 * losses.min()} if family == "log-gamma" else None
    weighted = fit_severity(losses, family, thresholds, stopped, fixed=held, weights=times)
    repeated = fit_severity(
        *(np.repeat(losses, times), family, np.repeat(thresholds, times), np.repeat(stopped, times)),
        fixed=held,
    )
    assert dict(weighted.parameters) == pytest.approx(dict(repeated.parameters), rel=1e-10)
    assert weighted.standard_errors == pytest.approx(repeated.standard_errors, rel=1e-8)
    assert weighted.log_likelihood == pytest.approx(repeated.log_likelihood, rel=1e-12)
    assert (weighted.observations, weighted.censored) == (repeated.observations, repeated.censored)
    assert (weighted.aic, weighted.bic) == pytest.approx((repeated.aic, repeated.bic), rel=1e-12)
    assert [note.code for note in weighted.notes] == [note.code for note in repeated.notes]
    name = next(iter(weighted.ranges))
    assert weighted.profile_interval(name) == pytest.approx(repeated.profile_interval(name), rel=1e-8)


def test_parts_of_a_loss_count_in_part():
    """Exponential: the weighted mean, 1,350 / 4.5, with its error over the square root of 4.5 losses."""
    fit = fit_severity([100.0, 400.0], "exponential", weights=[1.5, 3.0])
    assert fit.parameters["mean"] == pytest.approx(1_350 / 4.5, rel=1e-12)
    assert fit.standard_errors["mean"] == pytest.approx(300 / np.sqrt(4.5), rel=1e-10)
    assert fit.observations == 4.5


@pytest.mark.parametrize(
    ("weights", "text"),
    [
        ([1.0, 2.0], "weights must be one number per loss; seen: '2 weights for 3 losses'"),
        ([1.0, 0.0, 2.0], "weights must be above 0 and finite, in loss 2; seen: 0.0. A weight is a number"),
        ([1.0, -1.0, 2.0], "seen: -1.0"),
        ([1.0, np.inf, 2.0], "seen: inf"),
        ([1.0, np.nan, 2.0], "weights must not be NaN"),
        (["two", 1, 1], "weights must be numbers"),
    ],
)
def test_weights_that_mean_nothing(weights, text):
    with pytest.raises(InputError) as refusal:
        fit_severity([1.0, 2.0, 3.0], "exponential", weights=weights)
    assert text in str(refusal.value)
