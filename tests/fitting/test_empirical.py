"""An empirical body beneath a parametric tail, and the refusal of an empirical tail."""

import numpy as np
import pytest

from lossagg.errors import FitError, InputError
from lossagg.fitting import compare_severities, fit_severity, fit_spliced, goodness_test

LOSSES = np.concatenate([np.arange(1.0, 81.0), 100 * (1 - (np.arange(20) + 0.5) / 20) ** -0.5])


def test_the_body_is_the_losses_and_the_tail_is_fitted():
    fit = fit_spliced(LOSSES, "empirical", 99.0)
    assert fit.family == "spliced empirical and generalized-pareto"
    for x in (0.5, 10, 40.5, 80):
        assert fit.model.cdf(x) == pytest.approx(np.mean(LOSSES <= x), abs=1e-12)
    assert fit.parameters["tail_probability"] == pytest.approx(0.2)
    assert fit.standard_errors["tail_probability"] == pytest.approx(np.sqrt(0.2 * 0.8 / 100))
    tail = fit_severity(LOSSES[LOSSES > 99], "generalized-pareto", 99.0)
    assert fit.parameters["tail.shape"] == pytest.approx(tail.parameters["shape"])
    assert fit.profile_interval("tail.shape") == tail.profile_interval("shape")


def test_thresholds_and_limits_enter_by_the_product_limit():
    """Half the losses were recorded from 20 on only: the body weighs those below twenty twice."""
    reported = np.where(np.arange(100) % 2, 20.0, 0.0)
    seen = LOSSES >= reported
    fit = fit_spliced(LOSSES[seen], "empirical", 99.0, reported[seen])
    assert fit.model.cdf(19.5) == pytest.approx(np.mean(LOSSES <= 19.5), abs=0.03)


def test_a_purely_empirical_tail_is_refused_with_the_reason():
    with pytest.raises(InputError, match=r"says nothing beyond the largest loss.*tail-threshold"):
        compare_severities(LOSSES, ["empirical"])
    with pytest.raises(InputError, match="no likelihood to be ranked by"):
        compare_severities(LOSSES, ["empirical", "lognormal"], tail_threshold=99.0)
    chosen = compare_severities(LOSSES, ["empirical"], tail_threshold=99.0).chosen
    assert chosen.model.threshold == 99.0
    with pytest.raises(FitError, match="uncensored losses above the threshold are too few"):
        fit_spliced(LOSSES, "empirical", 600.0)
    with pytest.raises(InputError, match="unknown severity family"):
        fit_severity(LOSSES, "empirical")


def test_it_is_tested_like_any_other():
    test = goodness_test(LOSSES, fit_spliced(LOSSES, "empirical", 99.0), draws=19)
    assert test.reason == ""
    assert test.anderson_darling > 0.05
