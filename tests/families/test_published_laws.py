"""Published values for the laws, one test per source.

"Value from memory, recomputed" marks a figure recalled from the source without the page at hand; each
was confirmed by an independent calculation in high precision. "Formula" marks our own numbers put
through a published formula.
"""

from __future__ import annotations

import numpy as np
import pytest

from lossagg.families import (
    Binomial,
    Burr,
    Exponential,
    Gamma,
    GeneralizedPareto,
    InverseGaussian,
    LogLogistic,
    Lognormal,
    Lomax,
    Mixture,
    NegativeBinomial,
    Pareto,
    Poisson,
    SizeLaw,
    SizeTable,
    Spliced,
    Weibull,
    ZeroModified,
)

LOMAX = Lomax(alpha=3, scale=2000)


def tail_value_at_risk(law: SizeLaw, level: float) -> float:
    """The mean of the worst 1 - level of one loss, for a law without atoms."""
    value_at_risk = law.ppf(level)
    return value_at_risk + law.expected_excess(value_at_risk) / (1 - level)


def franchise_cost(law: SizeLaw, deductible: float) -> float:
    return law.expected_excess(deductible) + deductible * law.sf(deductible)


def test_loss_models_ordinary_and_franchise_deductible():
    # Klugman, Panjer and Willmot, Loss Models, ch. 8, ordinary and franchise deductible of 500 and the
    # loss elimination ratio (examples 8.1 to 8.3 of the 3rd and 4th ed.; values from memory, recomputed).
    assert LOMAX.limited_mean(500) == pytest.approx(360, rel=1e-12)
    assert LOMAX.expected_excess(500) == pytest.approx(640, rel=1e-12)
    assert LOMAX.mean_excess(500) == pytest.approx(1250, rel=1e-12)
    assert franchise_cost(LOMAX, 500) == pytest.approx(896, rel=1e-12)
    assert franchise_cost(LOMAX, 500) / LOMAX.sf(500) == pytest.approx(1750, rel=1e-12)
    assert LOMAX.loss_elimination_ratio(500) == pytest.approx(0.36, rel=1e-12)


def test_loss_models_inflation_above_a_deductible():
    # Loss Models, ch. 8, 10 % inflation with the deductible of 500 unchanged (example 8.4; values from
    # memory, recomputed).
    inflated = LOMAX.scaled(1.1)
    assert inflated.expected_excess(500) == pytest.approx(730.315500686, rel=1e-11)
    assert round(inflated.expected_excess(500), 2) == 730.32
    assert inflated.mean_excess(500) == pytest.approx(1350, rel=1e-12)
    assert round(100 * (inflated.expected_excess(500) / LOMAX.expected_excess(500) - 1), 1) == 14.1
    assert round(100 * (inflated.mean_excess(500) / LOMAX.mean_excess(500) - 1), 1) == 8.0


def test_the_leveraged_effect_of_inflation():
    # Loss Models, ch. 8 (formula): +10 % raises the cost above 500 by 14.11 %, the retained cost by
    # 2.69 % and the frequency of payments by 5.66 %.
    inflated = LOMAX.scaled(1.1)
    rises = [
        inflated.expected_excess(500) / LOMAX.expected_excess(500),
        inflated.limited_mean(500) / LOMAX.limited_mean(500),
        inflated.sf(500) / LOMAX.sf(500),
    ]
    assert [round(100 * (rise - 1), 2) for rise in rises] == [14.11, 2.69, 5.66]


def test_loss_models_policy_limit():
    # Loss Models, ch. 8, policy limit of 3000 before and after 10 % inflation (example 8.5; values from
    # memory, recomputed).
    assert LOMAX.limited_mean(3000) == pytest.approx(840, rel=1e-12)
    inflated = LOMAX.scaled(1.1).limited_mean(3000)
    assert inflated == pytest.approx(903.106508876, rel=1e-11)
    assert round(100 * (inflated / 840 - 1), 1) == 7.5


def test_loss_models_mean_and_sd_of_a_layer():
    # Loss Models, ch. 8, deductible of 500 and largest covered loss of 3000 (example 8.7; values from
    # memory, recomputed).
    assert LOMAX.layer_mean(500, 3000) == pytest.approx(480, rel=1e-12)
    assert LOMAX.layer_second_moment(500, 3000) == pytest.approx(800_000, rel=1e-12)
    sd = np.sqrt(LOMAX.layer_second_moment(500, 3000) - LOMAX.layer_mean(500, 3000) ** 2)
    assert sd == pytest.approx(754.718490565, rel=1e-11)


def test_soa_sample_loss_elimination_ratio():
    # Society of Actuaries, STAM sample questions with solutions: exponential, deductible doubled, 20 %
    # inflation; the ratio rises by 54 %.
    before = Exponential(mean=1).loss_elimination_ratio(0.25)
    after = Exponential(mean=1).scaled(1.2).loss_elimination_ratio(0.5)
    assert round(before, 4) == 0.2212
    assert round(after, 5) == 0.34076
    assert after / before == pytest.approx(1.54050893367, rel=1e-11)


@pytest.mark.parametrize(
    ("law", "figures"),
    [
        (
            Lomax(alpha=2.2, scale=120),
            {
                0.9: (221.764304212, 506.567891056),
                0.99: (853.356996948, 1664.48782774),
                0.999: (2652.1556401, 4962.28534018),
            },
        ),
        (
            Weibull(shape=0.5, scale=50),
            {
                0.9: (265.094905524, 595.353414823),
                0.99: (1060.3796221, 1620.89664069),
                0.999: (2385.85414972, 3176.62967761),
            },
        ),
    ],
    ids=["pareto", "weibull"],
)
def test_loss_models_risk_measures_of_laws_with_mean_100(law, figures):
    # Loss Models, ch. 3, comparison of VaR and TVaR for laws of mean 100 (inputs from memory, figures
    # recomputed).
    assert law.mean() == pytest.approx(100, rel=1e-12)
    for level, (value_at_risk, tail) in figures.items():
        assert law.ppf(level) == pytest.approx(value_at_risk, rel=1e-9)
        assert tail_value_at_risk(law, level) == pytest.approx(tail, rel=1e-9)


def test_soa_sample_variance_of_a_payment_per_loss():
    # SOA Course 3 / Exam C sample question: exponential of mean 1000, deductible 100 (value from memory,
    # recomputed).
    law = Exponential(mean=1000)
    variance = law.layer_second_moment(100) - law.layer_mean(100) ** 2
    assert law.layer_mean(100) == pytest.approx(904.837418036, rel=1e-11)
    assert variance == pytest.approx(990944.082994, rel=1e-11)
    assert int(variance) == 990944


def test_soa_sample_limited_mean_of_a_mixture():
    # SOA Course 3 / Exam C sample question: F(x) = 1 - .8 exp(-.02 x) - .2 exp(-.001 x), limit 1000
    # (value from memory, recomputed).
    law = Mixture(weights=[0.8, 0.2], parts=[Exponential(mean=50), Exponential(mean=1000)])
    assert round(law.limited_mean(1000), 1) == 166.4
    assert law.limited_mean(1000) == pytest.approx(166.424111683, rel=1e-11)


def test_soa_sample_mean_excess_from_tabulated_limited_means():
    # SOA Course 3 / Exam C sample question: F(100) = .2, E[X] = 331, E[min(X, 100)] = 91, mean excess
    # 300 (value from memory, recomputed). A table with these three figures must give it.
    law = SizeTable(sizes=[55, 100, 400], probabilities=[0.2, 0.0, 0.8])
    assert (law.cdf(100), law.mean(), law.limited_mean(100)) == pytest.approx((0.2, 331, 91))
    assert law.mean_excess(100) == pytest.approx(300, rel=1e-12)


@pytest.mark.parametrize(
    ("law", "limited", "at", "ratio", "excess", "value_at_risk", "tail"),
    [
        (
            Exponential(mean=1000),
            {500: 393.469340287, 1000: 632.120558829, 5000: 993.262053001},
            500,
            0.393469340287,
            1000,
            4605.17018599,
            5605.17018599,
        ),
        (
            Lomax(alpha=2.5, scale=1500),
            {1000: 535.241998455, 5000: 889.142047366, 50000: 995.0292028},
            1000,
            0.535241998455,
            1666.66666667,
            7964.3601672,
            14273.933612,
        ),
        (
            Pareto(alpha=1.8, minimum=1000),
            {2000: 1532.06352813, 10000: 2051.88835094, 100000: 2218.60141961},
            2000,
            0.680917123612,
            2500,
            12915.4966501,
            29059.8674628,
        ),
        (
            Lognormal(mu=7, sigma=1.5),
            {1000: 724.499110439, 5000: 1835.35724799, 50000: 3151.09767851},
            1000,
            0.214484143576,
            5058.67931826,
            35936.9686149,
            69010.9875357,
        ),
        (
            Gamma(shape=0.6, scale=3000),
            {500: 385.066351866, 2000: 1049.7160678, 10000: 1762.58286572},
            500,
            0.213925751037,
            2208.2645005,
            10819.7678549,
            13606.1059287,
        ),
        (
            Weibull(shape=0.7, scale=1000),
            {500: 352.862863052, 2000: 846.378117592, 10000: 1245.36675603},
            500,
            0.278761502977,
            1689.6302196,
            8861.22644274,
            11841.401737,
        ),
        (
            GeneralizedPareto(shape=0.4, scale=1000),
            {1000: 660.530649133, 5000: 1345.91651712, 50000: 1649.34778649},
            1000,
            0.39631838948,
            2333.33333333,
            13273.933612,
            23789.8893533,
        ),
        (
            Burr(alpha=2, gamma=1.5, scale=1000),
            {500: 393.519558892, 2000: 717.891430264, 10000: 801.307940897},
            500,
            0.488157083394,
            755.951976481,
            4326.74871092,
            6693.94410465,
        ),
        (
            InverseGaussian(mean=1000, shape=500),
            {500: 381.867567534, 2000: 763.735135068, 10000: 990.864264253},
            500,
            0.381867567534,
            1212.35323401,
            7052.83324451,
            9704.52575118,
        ),
        (
            Burr(alpha=1, gamma=2.5, scale=1000),  # the loglogistic law
            {500: 477.064218746, 2000: 1099.72014662, 10000: 1300.24950007},
            500,
            0.361054952025,
            993.484523707,
            6284.25902968,
            10500.1525739,
        ),
    ],
    ids=lambda value: value.family if isinstance(value, SizeLaw) else "",
)
def test_loss_models_appendix_a(law, limited, at, ratio, excess, value_at_risk, tail):
    # Loss Models, appendix A: ten families, limited mean at three limits, loss elimination ratio, mean
    # excess, VaR and TVaR at 99 % (formula).
    for limit, value in limited.items():
        assert law.limited_mean(limit) == pytest.approx(value, rel=1e-9)
    assert law.loss_elimination_ratio(at) == pytest.approx(ratio, rel=1e-9)
    assert law.mean_excess(at) == pytest.approx(excess, rel=1e-9)
    assert law.ppf(0.99) == pytest.approx(value_at_risk, rel=1e-9)
    assert tail_value_at_risk(law, 0.99) == pytest.approx(tail, rel=1e-9)


def test_loss_models_spliced_law():
    # Loss Models, ch. 5 (splices) and ch. 3 (limited means): lognormal(6, 1) below 1000 with weight .7,
    # Pareto(2) above (formula).
    law = Spliced(
        body=Lognormal(mu=6, sigma=1),
        tail=Pareto(alpha=2, minimum=1000),
        threshold=1000,
        tail_probability=0.3,
    )
    assert law.mean() == pytest.approx(863.680483735, rel=1e-9)
    assert law.limited_mean([500, 2000, 10000]) == pytest.approx(
        [372.718577615, 713.680483735, 833.680483735], rel=1e-9
    )
    assert law.ppf(0.99) == pytest.approx(5477.22557505, rel=1e-9)
    assert tail_value_at_risk(law, 0.99) == pytest.approx(10954.4511501, rel=1e-9)


def test_inverse_transform_at_fixed_uniforms():
    # Exact inverse transforms at u = .5, .9, .999 and 1 - 1e-9 (formula). The last level is asked as its
    # complement: 1 - 1e-9 itself is off by 3e-17 as a float, which is 3e-8 of the tail.
    figures = {
        Lognormal(mu=7, sigma=2): [1096.63315843, 14229.9351114, 529911.140658, 177701197.149],
        GeneralizedPareto(shape=0.5, scale=1): [0.828427124746, 4.32455532034, 61.2455532034, 63243.5532034],
        Gamma(shape=0.6, scale=1): [0.315702017016, 1.56050341576, 5.75085190202, 19.124893801],
        Weibull(shape=0.7, scale=1): [0.592390112952, 3.29193297216, 15.8144020729, 75.9721765417],
        Burr(alpha=2, gamma=1.5, scale=1): [0.555669052456, 1.6721464362, 9.78805446774, 999.978918038],
    }
    for law, values in figures.items():
        assert law.isf([0.5, 0.1, 0.001, 1e-9]) == pytest.approx(values, rel=1e-10)
        assert law.ppf([0.5, 0.9, 0.999]) == pytest.approx(values[:3], rel=1e-10)


@pytest.mark.parametrize(
    ("deductible", "limited", "ratio", "survival", "franchise_ratio", "excess"),
    [
        (250, 209.8765, 0.209877, 0.702332, 0.034294, 1125),
        (500, 360.0000, 0.360000, 0.512000, 0.104000, 1250),
        (1000, 555.5556, 0.555556, 0.296296, 0.259259, 1500),
        (2000, 750.0000, 0.750000, 0.125000, 0.500000, 2000),
        (5000, 918.3673, 0.918367, 0.023324, 0.801749, 3500),
    ],
)
def test_deductible_table_of_a_lomax_law(deductible, limited, ratio, survival, franchise_ratio, excess):
    # Closed forms of Loss Models, ch. 8, for the Lomax(3, 2000) (formula).
    assert round(LOMAX.limited_mean(deductible), 4) == limited
    assert round(LOMAX.loss_elimination_ratio(deductible), 6) == ratio
    assert round(LOMAX.sf(deductible), 6) == survival
    assert round(1 - franchise_cost(LOMAX, deductible) / LOMAX.mean(), 6) == franchise_ratio
    assert LOMAX.mean_excess(deductible) == pytest.approx(excess, rel=1e-12)


def test_layers_and_increased_limit_factors_of_a_lomax_law():
    # Closed forms of Loss Models, ch. 8, and Miccolis (1977) for the factors (formula).
    assert round(LOMAX.layer_mean(1000, 5000), 4) == 362.8118
    assert round(LOMAX.limited_mean(1000) / LOMAX.limited_mean(500), 6) == 1.543210
    assert round(LOMAX.limited_mean(5000) / LOMAX.limited_mean(1000), 6) == 1.653061
    assert LOMAX.limited_second_moment(500) == pytest.approx(160_000, rel=1e-12)
    assert round(LOMAX.limited_second_moment(1000), 2) == 444_444.44
    retained = 8 * LOMAX.limited_mean(500), np.sqrt(8 * LOMAX.limited_second_moment(500))
    assert retained == pytest.approx((2880, 1131.3708), rel=1e-7)


def test_quantitative_risk_management_tail_estimator():
    # McNeil, Frey and Embrechts, Quantitative Risk Management, ch. 5, VaR and ES beyond a threshold
    # exceeded by 50 of 1000 losses (formula; published formula from memory, recomputed).
    law = Spliced(
        body=Exponential(mean=40),
        tail=GeneralizedPareto(shape=0.4, scale=50, threshold=100),
        threshold=100,
        tail_probability=50 / 1000,
    )
    figures = {0.99: (212.957, 371.595), 0.995: (288.986, 498.310), 0.999: (572.720, 971.201)}
    for level, (value_at_risk, shortfall) in figures.items():
        assert round(law.isf(1 - level), 3) == value_at_risk
        assert round(tail_value_at_risk(law, level), 3) == shortfall


def test_expected_shortfall_of_a_table_with_atoms():
    # Acerbi and Tasche (2002), J. Banking & Finance 26, 1487-1503: the quantile of a loss with atoms, and
    # the shortfall corrected for the atom (formula).
    law = SizeTable(sizes=[0, 10, 20, 50, 100, 500], probabilities=[0.8, 0.08, 0.05, 0.04, 0.02, 0.01])
    figures = {0.9: (20, 96), 0.95: (50, 160), 0.975: (100, 260), 0.985: (100, 366.666666667)}
    for level, (value_at_risk, shortfall) in figures.items():
        assert law.ppf(level) == value_at_risk
        assert tail_value_at_risk(law, level) == pytest.approx(shortfall, rel=1e-10)
    assert law.ppf(0.8) == 0  # the level is reached exactly: no step too far
    assert law.ppf(np.nextafter(0.8, 1)) == 10


def test_soa_sample_a_b_0_recursion():
    # SOA Exam C / STAM sample question: p0 = p1 = .25, p2 = .1875 in the (a, b, 0) class, so p3 = .125;
    # it is the negative binomial with r = 2, beta = 1.
    law = NegativeBinomial(mean=2, dispersion=0.5)
    assert law.pmf([0, 1, 2, 3]) == pytest.approx([0.25, 0.25, 0.1875, 0.125], rel=1e-13)
    a, b = law.recursion
    assert (a + b / 3) * 0.1875 == pytest.approx(0.125, rel=1e-13)


def test_poisson_cells_of_a_sampler_test():
    # Exact probabilities of the cells of a sampler test (Devroye 1986, formula).
    law = Poisson(mean=42.5)
    starts = np.array([0, 25, 30, 34, 37, 40, 42, 44, 46, 49, 53, 58])
    edges = np.append(law.cdf(starts - 1), 1.0)
    cells = [
        0.0014717107184,
        0.0170960636387,
        0.061073934598,
        0.0999025640096,
        0.150494980078,
        0.118932150494,
        0.121797682568,
        0.113708683987,
        0.138024603867,
        0.111170019665,
        0.0526556792567,
        0.013671927119,
    ]
    assert np.diff(edges) == pytest.approx(cells, rel=1e-10)


def test_geometric_law():
    # Loss Models, ch. 6: the geometric law is the negative binomial with r = 1; P(N > n) =
    # (beta / (1 + beta))**(n + 1) (formula).
    law = NegativeBinomial(mean=4, dispersion=1)
    n = np.array([0, 3, 50, 3000])
    assert law.pmf(n) == pytest.approx(0.2 * 0.8**n, rel=1e-11)
    assert law.sf(n) == pytest.approx(0.8 ** (n + 1.0), rel=1e-11)


def test_defaults_among_a_hundred_bonds():
    # McNeil, Frey and Embrechts, Quantitative Risk Management, defaultable bonds (from memory,
    # recomputed): of 100 bonds defaulting with .02 at most 5 default in 95 of 100 years.
    law = Binomial(trials=100, probability=0.02)
    assert law.cdf(4) < 0.95 <= law.cdf(5)


def test_zero_modified_counts_of_the_a_b_1_class():
    """SOA Exam C / STAM sample question: p6/p4 = .5 and p5/p4 = .8 give a = -.25, b = 5.25 (binomial,
    20 trials, q = .2), and with p0 set to .1 the mean is 3.64 (as printed)."""
    base = Binomial(trials=20, probability=0.2)
    assert base.pmf(5) / base.pmf(4) == pytest.approx(0.8)
    assert base.pmf(6) / base.pmf(4) == pytest.approx(0.5)
    law = ZeroModified(base=base, zero_probability=0.1)
    assert law.mean() == pytest.approx(3.64198927758, rel=1e-10)
    assert round(law.mean(), 2) == 3.64


def test_the_a_b_0_recursion_of_three_probabilities():
    """SOA Exam C / STAM sample question: p0 = p1 = .25, p2 = .1875 give p3 = .125: negative binomial, r = 2,
    beta = 1."""
    law = NegativeBinomial(mean=2.0, dispersion=0.5)
    assert law.pmf([0, 1, 2, 3]) == pytest.approx([0.25, 0.25, 0.1875, 0.125], rel=1e-13)


def test_log_logistic_by_the_appendix():
    """Klugman, Panjer & Willmot, Loss Models, appendix A: gamma 2.5, theta 1000; own numbers on the
    published formula."""
    law = LogLogistic(gamma=2.5, scale=1000)
    assert law.limited_mean([500, 2000, 10000]) == pytest.approx(
        [477.064218746, 1099.72014662, 1300.24950007], rel=1e-9
    )
    assert law.loss_elimination_ratio(500) == pytest.approx(0.361054952025, rel=1e-9)
    assert law.mean_excess(500) == pytest.approx(993.484523707, rel=1e-9)
    var = float(law.isf(0.01))
    assert var == pytest.approx(6284.25902968, rel=1e-9)
    assert var + law.mean_excess(var) == pytest.approx(10500.1525739, rel=1e-9)
