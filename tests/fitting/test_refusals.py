"""Data that cannot support a fit are refused with the reason, the value seen and a way out."""

import numpy as np
import pytest

from lossagg.errors import FitError, InputError
from lossagg.fitting import (
    compare_frequencies,
    compare_severities,
    fit_frequency,
    fit_severity,
    fit_spliced,
    goodness,
    overdispersion,
)
from lossagg.fitting.severity import FAMILIES

LOSSES = [1_200.0, 3_400.0, 2_200.0, 9_000.0, 700.0, 15_000.0]


@pytest.mark.parametrize(
    ("arguments", "text"),
    [
        ({"losses": []}, "Without losses there is no severity to fit"),
        ({"losses": [100.0, 0.0]}, "losses must be above 0 and finite, in loss 2; seen: 0.0"),
        ({"losses": [100.0, -5.0]}, "seen: -5.0. Set nil and negative amounts aside first"),
        ({"losses": [100.0, np.inf]}, "seen: inf"),
        ({"losses": [100.0, np.nan]}, "losses must not be NaN"),
        ({"losses": ["many"]}, "losses must be numbers"),
        ({"losses": [[1.0, 2.0]]}, "non-empty list of amounts"),
        ({"truncation": 1_000.0}, "1 of 6 losses lie below their reporting threshold, in loss 5; "),
        ({"truncation": [500.0, 500.0]}, "one threshold, or one per loss; seen: '2 thresholds for 6 losses'"),
        ({"truncation": -1.0}, "truncation must be 0 or above, and finite"),
        ({"censored": [True]}, "one mark per loss; seen: '1 marks for 6 losses'"),
        ({"censored": [0, 1, 2, 3, 4, 5]}, "censored must be True or False for each loss"),
        ({"family": "log-normal"}, "unknown severity family; seen: 'log-normal'. Choose one of exponential"),
        ({"fixed": {"mu": 7.0}}, "the lognormal fit holds none of its parameters fixed; seen: ['mu']"),
    ],
)
def test_unusable_losses(arguments, text):
    with pytest.raises(InputError) as refusal:
        fit_severity(**{"losses": LOSSES, "family": "lognormal"} | arguments)
    assert text in str(refusal.value)


@pytest.mark.parametrize("family", FAMILIES)
def test_all_losses_equal(family):
    with pytest.raises(FitError, match=r"distinct amount|all losses are equal|needs a minimum below"):
        fit_severity([500.0] * 8, family)


@pytest.mark.parametrize("family", FAMILIES)
def test_all_losses_censored(family):
    with pytest.raises(FitError, match=r"every loss is censored; seen: '6 censored losses'"):
        fit_severity(LOSSES, family, censored=[True] * 6)


@pytest.mark.parametrize("family", FAMILIES)
def test_all_losses_at_their_thresholds(family):
    told = r"every loss equals its reporting threshold|distinct amount|needs a minimum below"
    with pytest.raises(FitError, match=told):
        fit_severity([500.0, 700.0, 500.0, 900.0], family, [500.0, 700.0, 500.0, 900.0])


@pytest.mark.parametrize("family", [name for name in FAMILIES if name not in ("exponential", "pareto")])
def test_one_loss_supports_no_free_shape(family):
    with pytest.raises(FitError, match="free parameters and the uncensored losses have 1 distinct amount"):
        fit_severity([500.0], family, truncation=100.0)


def test_one_loss_supports_a_law_of_one_parameter_with_a_caution():
    fit = fit_severity([500.0], "exponential", 100)
    assert fit.parameters["mean"] == pytest.approx(400)
    assert fit.standard_errors["mean"] == pytest.approx(400)
    assert "Only 1 uncensored losses" in fit.notes[0]
    assert fit_severity([500.0], "pareto", 100).parameters["alpha"] == pytest.approx(1 / np.log(5))


def test_pareto_needs_a_minimum():
    with pytest.raises(FitError, match="every loss equals its reporting threshold or the smallest"):
        fit_severity([500.0], "pareto")
    with pytest.raises(
        InputError, match="the minimum of the pareto fit must be above 0, and no loss may lie"
    ):
        fit_severity(LOSSES, "pareto", fixed={"minimum": 1_000.0})
    with pytest.raises(InputError, match="holds only 'minimum' fixed"):
        fit_severity(LOSSES, "pareto", fixed={"alpha": 2.0})


def test_log_gamma_needs_a_minimum_below_the_losses():
    with pytest.raises(FitError, match=r"needs a minimum below every uncensored loss.*seen: 700.0"):
        fit_severity(LOSSES, "log-gamma")
    with pytest.raises(InputError, match="the minimum of the log-gamma fit must be above 0, and no loss"):
        fit_severity(LOSSES, "log-gamma", fixed={"minimum": 1_000.0})
    given = fit_severity(LOSSES, "log-gamma", fixed={"minimum": 500.0})
    assert dict(fit_severity(LOSSES, "log-gamma", 500.0).parameters) == dict(given.parameters)
    assert given.estimated == 2


def test_a_minimum_read_off_the_losses_counts_as_a_parameter():
    fit = fit_severity(LOSSES, "pareto")
    given = fit_severity(LOSSES, "pareto", fixed={"minimum": 700.0})
    assert fit.parameters == given.parameters
    assert fit.aic == pytest.approx(given.aic + 2)
    assert any("read off the smallest loss" in note for note in fit.notes)


def test_lighter_than_exponential_has_no_lomax():
    losses = 1_000 * np.random.default_rng(3).weibull(2.0, 300)
    with pytest.raises(FitError, match="not heavier than exponential") as refusal:
        fit_severity(losses, "lomax")
    assert "Fit exponential, weibull or pareto instead" in str(refusal.value)
    assert refusal.value.tried
    with pytest.raises(FitError, match="not heavier than Weibull"):
        fit_severity(losses, "burr")


def power_law(seed):
    return 10_000 * (1 - np.random.default_rng(seed).random(150)) ** (-1 / 1.2)


def has_truncated_lognormal(losses):
    """Castillo 1994: the truncated normal law has a maximum when the excesses vary less than their mean."""
    excess = np.log(losses / 10_000)
    return excess.std() < excess.mean()


@pytest.mark.parametrize("family", ["lognormal", "weibull", "lomax", "gamma", "inverse-gaussian", "burr"])
def test_a_power_law_above_a_threshold_is_refused_or_beaten(family):
    """Pareto losses, the limit of these families above a threshold: the likelihood often rises for ever
    towards it. A fit is refused then; one that is returned has gained on the limit and has a finite error."""
    outcomes = {"refused": 0, "fitted": 0}
    for seed in range(12):
        limit = fit_severity(power_law(seed), "pareto", 10_000).log_likelihood
        try:
            fit = fit_severity(power_law(seed), family, 10_000)
        except FitError:
            outcomes["refused"] += 1
            continue
        outcomes["fitted"] += 1
        if family not in ("gamma", "inverse-gaussian"):
            assert fit.log_likelihood > limit
        assert all(0 < error < np.inf for error in fit.standard_errors.values())
    assert outcomes["refused"] >= 2


def test_a_truncated_lognormal_exists_exactly_where_theory_says():
    heavy = [seed for seed in range(40) if not has_truncated_lognormal(power_law(seed))]
    assert 10 < len(heavy) < 30
    for seed in heavy[:10]:
        with pytest.raises(FitError, match="Fit pareto, lomax or generalized-pareto instead"):
            fit_severity(power_law(seed), "lognormal", 10_000)
    for seed in set(range(20)) - set(heavy):
        assert fit_severity(power_law(seed), "lognormal", 10_000).gradient_norm < 1e-5


def test_a_lognormal_far_above_its_median_is_fitted():
    """Threshold three sigma above the median, 20,000 losses: the ridge is narrow, and climbed."""
    from scipy import stats

    rng = np.random.default_rng(12)
    losses = np.exp(10 + stats.norm.isf(stats.norm.sf(3.0) * rng.random(20_000)))
    fit = fit_severity(losses, "lognormal", np.exp(13.0))
    for name, value in (("mu", 10.0), ("sigma", 1.0)):
        assert abs(fit.parameters[name] - value) < 4 * fit.standard_errors[name]
    assert any("of all losses above the reporting threshold" in note for note in fit.notes)


def test_a_bounded_tail_has_irregular_standard_errors():
    losses = 1_000 + 500 * np.random.default_rng(4).beta(1, 1.4, 400)
    fit = fit_severity(losses, "generalized-pareto", 1_000)
    assert -1 < fit.parameters["shape"] <= -0.5
    assert any("maximum likelihood is not regular there" in note for note in fit.notes)


def test_unusable_splices():
    losses = np.exp(8 + np.random.default_rng(1).standard_normal(200))
    with pytest.raises(FitError, match="uncensored losses above the threshold are too few for a tail"):
        fit_spliced(losses, "lognormal", np.sort(losses)[-3])
    with pytest.raises(FitError, match="no uncensored loss lies below the threshold"):
        fit_spliced(losses, "lognormal", losses.min() / 2)
    with pytest.raises(InputError, match="unknown body of a spliced law; seen: 'pareto'"):
        fit_spliced(losses, "pareto", 5_000)
    with pytest.raises(InputError, match="unknown tail"):
        fit_spliced(losses, "lognormal", 5_000, tail="lognormal")
    with pytest.raises(InputError, match="threshold must be above 0"):
        fit_spliced(losses, "lognormal", 0.0)


@pytest.mark.parametrize(
    ("arguments", "text"),
    [
        ({"counts": []}, "one per year"),
        ({"counts": [1, 2.5]}, "whole numbers at or above 0, in year 2; seen: 2.5"),
        ({"counts": [-1]}, "seen: -1.0"),
        ({"exposure": [1.0, 2.0]}, "one number per year; seen: '2 exposures for 4 years'"),
        ({"exposure": [1.0, 0.0, 1.0, 1.0]}, "exposure must be above 0 and finite, in year 2; seen: 0.0"),
        ({"family": "geometric"}, "unknown frequency family; seen: 'geometric'. Choose one of poisson"),
        ({"fixed": {"mean": 2.0}}, "cannot hold this fixed; seen: ['mean']"),
    ],
)
def test_unusable_counts(arguments, text):
    with pytest.raises(InputError) as refusal:
        fit_frequency(**{"counts": [3, 0, 2, 5], "family": "poisson"} | arguments)
    assert text in str(refusal.value)


def test_counts_without_overdispersion_have_no_negative_binomial():
    for counts in ([4] * 8, [3, 4, 5, 4], [0, 0, 0], [5]):
        with pytest.raises(FitError, match='Fit "poisson"'):
            fit_frequency(counts, "negative-binomial")


def test_counts_with_overdispersion_have_no_binomial():
    with pytest.raises(FitError, match='Fit "poisson" or "negative-binomial"'):
        fit_frequency([0, 9, 1, 14, 3], "binomial")
    with pytest.raises(FitError, match="every year has the same count"):
        fit_frequency([4] * 8, "binomial")
    with pytest.raises(FitError, match="with exposures other than 1"):
        fit_frequency([4, 5], "binomial", [1.0, 1.2])
    with pytest.raises(InputError, match="fixed trials must be a whole number"):
        fit_frequency([4, 5], "binomial", fixed={"trials": 4})


def test_dispersion_needs_years_and_losses():
    with pytest.raises(FitError, match="needs two years and one loss"):
        overdispersion([3])
    with pytest.raises(FitError, match="needs two years and one loss"):
        overdispersion([0, 0])


def test_comparisons_without_a_fit():
    with pytest.raises(FitError, match="none of the severity families can be fitted") as refusal:
        compare_severities([500.0] * 4, ["lognormal", "gamma"])
    assert [line.split(":")[0] for line in refusal.value.tried] == ["lognormal", "gamma"]
    with pytest.raises(InputError, match="a list of different names"):
        compare_frequencies([1, 2], ["poisson", "poisson"])


def test_goodness_of_losses_the_law_cannot_have_is_refused():
    law = fit_severity([120.0, 130.0, 180.0, 400.0], "generalized-pareto", fixed={"threshold": 100.0}).model
    short = type(law)(shape=-1.0, scale=50.0, threshold=100.0)
    with pytest.raises(InputError, match="no probability to losses above a threshold"):
        goodness([120.0, 220.0], short, truncation=[110.0, 200.0])


def test_asking_for_another_parameter():
    fit = fit_severity(LOSSES, "lognormal")
    with pytest.raises(
        InputError, match=r"no parameter of this name; seen: 'alpha'. Choose one of mu, sigma"
    ):
        fit.interval("alpha")
    with pytest.raises(InputError, match="level must be a probability"):
        fit.interval("mu", 95)
