"""The sanity column: against worked figures and third moments summed by hand."""

import numpy as np
import pytest

import lossagg
from lossagg.engines.approximations import _third_cumulant, single_loss, translated_gamma
from lossagg.engines.book import Line
from lossagg.engines.compound import CompoundSum


def compound(frequency, severity):
    line = Line(name="x", frequency=frequency, severity=severity)
    return CompoundSum.of((line,), {"x": line.cost})


@pytest.mark.parametrize(
    ("level", "var", "ratio"),
    [
        (0.99, 1_248_750, 0.965),
        (0.995, 1_566_500, 0.968),
        (0.999, 2_642_750, 0.983),
        (0.9999, 5_497_500, 0.995),
    ],
)
def test_single_loss_of_a_lognormal(level, var, ratio):
    """Poisson 12, lognormal 9 and 1.5: F**-1(1 - (1 - level) / 12) + 12 E[X] (Böcker and Klüppelberg 2005;
    Degen 2010), beside the exact VaR on a lattice of 250; computed here, two routes."""
    frequency, severity = lossagg.Poisson(mean=12), lossagg.Lognormal(mu=9, sigma=1.5)
    seen = single_loss(compound(frequency, severity), level)
    assert seen == pytest.approx(severity.isf((1 - level) / 12) + 12 * severity.mean(), rel=1e-5)
    exact = lossagg.annual_loss(frequency, severity).value_at_risk(level)
    assert exact == pytest.approx(var, abs=250)
    assert seen / exact == pytest.approx(ratio, abs=5e-4)


@pytest.mark.parametrize(
    "count",
    [
        lossagg.Poisson(mean=3.0),
        lossagg.NegativeBinomial(mean=4.0, dispersion=0.3),
        lossagg.Binomial(trials=9, probability=0.3),
        lossagg.CountTable(probabilities=[0.4, 0.6]),
        lossagg.ZeroInflated(base=lossagg.Poisson(mean=3.0), extra_zeros=0.3),
    ],
    ids=lambda law: law.family,
)
def test_the_third_cumulant_against_the_distribution_summed_by_hand(count):
    sizes, whole, power = np.array([0.0, 0.6, 0.4]), np.zeros(241), np.array([1.0])
    for k in range(120):
        whole[: len(power)] += count.pmf(k) * power
        power = np.convolve(power, sizes)
    x = np.arange(241.0)
    truth = (x - x @ whole) ** 3 @ whole
    table = lossagg.SizeTable(sizes=[1.0, 2.0], probabilities=[0.6, 0.4])
    assert _third_cumulant(compound(count, table)) == pytest.approx(truth, rel=1e-9)


def test_the_third_moment_of_a_lognormal_is_its_closed_form():
    own = compound(lossagg.Poisson(mean=12), lossagg.Lognormal(mu=9, sigma=1.5))
    assert _third_cumulant(own) == pytest.approx(12 * np.exp(27 + 4.5 * 2.25), rel=1e-10)


def test_translated_gamma_is_exact_for_a_gamma_sum_and_close_for_many_losses():
    """One gamma loss a year is a gamma law: exact. 300 losses of gamma size: within 0.05 % at 99.9 %."""
    one = compound(lossagg.CountTable(probabilities=[0.0, 1.0]), lossagg.Gamma(shape=2.0, scale=3.0))
    assert translated_gamma(one, 0.99) == pytest.approx(
        lossagg.Gamma(shape=2.0, scale=3.0).isf(0.01), rel=1e-9
    )
    count, size = lossagg.Poisson(mean=300), lossagg.Gamma(shape=2.0, scale=3.0)
    exact = lossagg.annual_loss(count, size, engine="panjer").value_at_risk(0.999)
    assert translated_gamma(compound(count, size), 0.999) == pytest.approx(exact, rel=5e-4)


def test_what_a_formula_cannot_say_is_not_a_number():
    heavy = compound(lossagg.Poisson(mean=2), lossagg.Pareto(alpha=2.5, minimum=1.0))
    assert np.isnan(translated_gamma(heavy, 0.99))
    rare = compound(lossagg.Poisson(mean=0.001), lossagg.Exponential(mean=1.0))
    assert np.isnan(single_loss(rare, 0.9))
    infinite = compound(lossagg.Poisson(mean=2), lossagg.Pareto(alpha=0.8, minimum=1.0))
    assert single_loss(infinite, 0.99) == pytest.approx((2 / 0.01) ** 1.25, rel=1e-5)
