"""Deductibles, limits and premiums in published examination questions and textbook formulas.

The questions are sample questions of the Society of Actuaries (courses 3, M, C, STAM, FAM-S) with published
solutions; every answer is recomputed beside the published digits by the arithmetic of the question itself.
"""

from __future__ import annotations

from math import exp, factorial, log2

import numpy as np
import pytest
from scipy.optimize import brentq
from scipy.stats import norm

import lossagg
from lossagg.cover import Schedule
from lossagg.engines.book import Line
from lossagg.engines.payment import PaymentLaw
from lossagg.pricing.curves import CappedCost, exposure_curve, increased_limits
from lossagg.pricing.grid import Grid, Moments
from lossagg.pricing.option import Option


def line(count: lossagg.families.CountLaw, size: lossagg.families.SizeLaw) -> Line:
    return Line(name="x", frequency=count, severity=size)


def ceded(own: Line, **terms: float) -> Moments:
    plan = Option("o", lossagg.Cover(**terms), (own,)).ceded_plan
    assert plan is not None
    return Grid([own], workers=1).moments([plan.events])[0]


def table(sizes: dict[float, float]) -> lossagg.SizeTable:
    return lossagg.SizeTable(sizes=list(sizes), probabilities=list(sizes.values()))


def test_variance_of_payments_above_a_deductible() -> None:
    """Poisson(10), losses uniform on (0, 10), deductible 4: variance 72 = 10 E[(X - 4)+ ** 2]."""
    uniform = lossagg.GeneralizedPareto(shape=-1.0, scale=10.0)
    found = ceded(line(lossagg.Poisson(mean=10), uniform), deductible=4)
    assert 10 * (6**3 / 30) == pytest.approx(72)
    assert found.mean == pytest.approx(18, rel=1e-10)
    assert found.variance == pytest.approx(72, rel=1e-10)


def test_expected_payments_after_a_change() -> None:
    """Fleet: 16 losses, exponential 200, deductible 100: 1,941 (1940.898 = 16 x 200 exp(-1/2)). Group dental:
    300 claims of 40, 80, 120 or 200 plus 50 %, deductible 100: 22,500 = 300 (20 + 80 + 200) / 4."""
    fleet = ceded(line(lossagg.Poisson(mean=16), lossagg.Exponential(mean=200)), deductible=100)
    assert fleet.mean == pytest.approx(3200 * exp(-0.5), rel=1e-10)
    assert fleet.mean == pytest.approx(1940.89811108, rel=1e-10)
    count = lossagg.NegativeBinomial(mean=300, dispersion=500 / 300**2)
    inflated = lossagg.SizeTable(sizes=[40, 80, 120, 200], probabilities=[0.25] * 4).scaled(1.5)
    assert ceded(line(count, inflated), deductible=100).mean == pytest.approx(22_500, rel=1e-12)


def test_variance_from_moments() -> None:
    """Poisson(20); E X = 70, E min(X, 30) = 25, P(X > 30) = .75, E[X**2 | X > 30] = 9000; deductible 30:
    variance 67,500 (answer from memory, recomputed), on losses that have these moments."""
    law = table({10: 0.25, 60: 0.375, 120: 0.375})
    assert (law.mean(), law.limited_mean(30), law.sf(30)) == (70, 25, 0.75)
    assert 20 * (0.75 * 9000 - 2 * 30 * (70 - 0.25 * 10) + 900 * 0.75) == pytest.approx(67_500)
    assert ceded(line(lossagg.Poisson(mean=20), law), deductible=30).variance == pytest.approx(67_500)


def test_three_persons_with_a_group_deductible() -> None:
    """Three persons, loss 0 to 3 with .4, .3, .2, .1 each, deductible 1 together: 2.064 = 3 - 1 + .4 ** 3."""
    own = line(lossagg.CountTable(probabilities=[0, 0, 0, 1]), table({0: 0.4, 1: 0.3, 2: 0.2, 3: 0.1}))
    year = dict(Grid([own], 2**8, workers=1).years([(Schedule.identity(),)]))[(Schedule.identity(),)]
    assert year.layer_mean(1.0) == pytest.approx(3 - 1 + 0.4**3, abs=1e-9)
    assert year.layer_mean(1.0) == pytest.approx(2.064, abs=1e-9)


def test_bonus_below_a_loss_ratio() -> None:
    """Agent's bonus of a third of what the loss ratio stays below 70 %, premium 500,000, losses Pareto (alpha
    3, theta 600,000): 56,556 (answer from memory, recomputed: 56555.8633)."""
    law = lossagg.Lomax(alpha=3, scale=600_000)
    bonus = (350_000 - CappedCost((line(lossagg.Poisson(mean=1), law),))(np.array([350_000.0]))[0]) / 3
    assert bonus == pytest.approx(56555.8633426, rel=1e-10)
    assert bonus == pytest.approx((350_000 - 300_000 * (1 - (600 / 950) ** 2)) / 3, rel=1e-12)


def test_scale_for_which_a_bonus_pays_for_itself() -> None:
    """Hospital claims Pareto (alpha 2, theta K) with half of what they stay below 500 as a bonus cost what
    they did at theta 500 without: K = 354 (answer from memory, recomputed: sqrt(125,000))."""

    def extra(scale: float) -> float:
        law = lossagg.Lomax(alpha=2, scale=scale)
        return law.mean() + 0.5 * (500 - float(law.limited_mean(500.0))) - 500

    assert brentq(extra, 100, 900) == pytest.approx(np.sqrt(125_000), rel=1e-10)


def test_variance_per_payment() -> None:
    """Losses 100, 200, 300 with .2, .2, .6, deductible 150: variance of a payment made 1,875."""
    payment = PaymentLaw(table({100: 0.2, 200: 0.2, 300: 0.6}), Schedule.excess(150))
    mean, second = payment.mean / payment.paying, payment.second_moment / payment.paying
    assert mean == pytest.approx(125)
    assert second - mean**2 == pytest.approx(1875)


def test_deviation_of_a_cost_from_that_of_the_year() -> None:
    """Tire warranty: 2,000,000 tires, replacement cost mean 100; year mean 10 million, deviation 40,000:
    deviation of one cost 80.62 (answer from memory, recomputed: sqrt(6,500))."""
    spread = np.sqrt((40_000**2 / 2e6 - 0.05 * 0.95 * 100**2) / 0.05)
    assert spread == pytest.approx(80.622577483, rel=1e-10)
    law = table({100 - spread: 0.5, 100 + spread: 0.5})
    own = line(lossagg.Binomial(trials=2_000_000, probability=0.05), law)
    found = Grid([own], workers=1).moments([(Schedule.identity(),)])[0]
    assert (found.mean, found.sd) == pytest.approx((1e7, 40_000))


def test_coinsurance_that_costs_what_a_deductible_does() -> None:
    """Loss Poisson(3); a deductible of 2 is replaced by a share that costs the same: .42 (.416311780613)."""
    law = table({k: exp(-3) * 3**k / factorial(k) for k in range(60)})
    own = line(lossagg.CountTable(probabilities=[0, 1]), law)
    share = ceded(own, deductible=2).mean / 3
    assert share == pytest.approx((3 - 2 + 2 * exp(-3) + 3 * exp(-3)) / 3, rel=1e-10)
    assert share == pytest.approx(0.416311780613, rel=1e-10)
    assert ceded(own, share=share).mean == pytest.approx(ceded(own, deductible=2).mean, rel=1e-12)


def test_computers_needed_for_a_premium() -> None:
    """Maintenance: Poisson(3) repairs a computer, cost mean 80, deviation 200; above 120 % of the mean
    with less than 10 %, normal approximation (z = 1.282 of the tables): 99.3, so 100 computers."""
    law = table({0.0: 200**2 / (80**2 + 200**2), (80**2 + 200**2) / 80: 80**2 / (80**2 + 200**2)})
    assert law.sd() == pytest.approx(200)
    one = Grid([line(lossagg.Poisson(mean=3), law)], workers=1).moments([(Schedule.identity(),)])[0]
    assert (1.282 * one.sd / (0.2 * one.mean)) ** 2 == pytest.approx(99.2962416667, rel=1e-10)


def test_year_below_an_amount_by_the_normal_law() -> None:
    """Vandalism: count mean 110 and variance 750, size mean 1,101 and deviation 70: P(S < 100,000) = .24 by
    the normal approximation (answer from memory, recomputed: .241992)."""
    law = table({1101 - 70: 0.5, 1101 + 70: 0.5})
    count = lossagg.NegativeBinomial(mean=110, dispersion=640 / 110**2)
    year = Grid([line(count, law)], workers=1).moments([(Schedule.identity(),)])[0]
    assert (year.mean, year.variance) == pytest.approx((121_110, 909_689_750))
    assert norm.cdf((100_000 - year.mean) / year.sd) == pytest.approx(0.241992065921, rel=1e-8)


def test_counts_thinned_by_a_deductible() -> None:
    """Klugman, Panjer and Willmot, Loss Models, chapter 8, impact of deductibles on claim frequency: negative
    binomial r 2, beta 3, Pareto (alpha 3, theta 1000), deductible 250: v .512, beta 1.536; with .4 at zero
    instead, .4595 (from memory, recomputed)."""
    v = float(lossagg.Lomax(alpha=3, scale=1000).sf(250.0))
    assert v == pytest.approx(0.512, rel=1e-12)
    count = lossagg.NegativeBinomial(mean=6, dispersion=0.5)
    thinned = count.thinned(v)
    assert thinned.mean() * 0.5 == pytest.approx(1.536, rel=1e-12)
    assert thinned.variance() == pytest.approx(2 * 1.536 * 2.536, rel=1e-12)
    modified = lossagg.ZeroModified(base=count, zero_probability=0.4).thinned(v)
    by_hand = 0.4 + 0.6 * ((1 + 1.536) ** -2 - 4**-2) / (1 - 4**-2)
    assert modified.pmf(0) == pytest.approx(by_hand, rel=1e-12)
    assert modified.pmf(0) == pytest.approx(0.459513379574, rel=1e-10)


def test_curve_of_riebesell() -> None:
    """Mack and Fackler (2003), Exposure rating in liability reinsurance, Blaetter der DGVFM 26: doubling the
    limit raises the cost by z = 20 % exactly where the tail is a Pareto law of index 1 - log2(1.2) and the
    expense per event makes up for what lies below its start: 1.2, 1.44, 1.9225, a sixth for 500 xs 500."""
    power, start, basic = log2(1.2), 1000.0, 250_000.0
    alpha = 1.0 - power
    cost = CappedCost((line(lossagg.Poisson(mean=1), lossagg.Pareto(alpha=alpha, minimum=start)),))
    expense = start * alpha / power
    found = increased_limits(cost, np.array([500e3, 1e6, 3e6]), basic, expense)
    assert found == pytest.approx([1.2, 1.44, 1.92247985573], rel=1e-10)
    layer = cost.layer(np.array([500e3]), np.array([1e6]))[0]
    assert layer / (cost(np.array([1e6]))[0] + expense) == pytest.approx(1 / 6, rel=1e-10)


@pytest.mark.parametrize(
    ("c", "whole", "mean", "three_quarters"),
    [
        (1.5, 0.236927758682, 0.348547657256, 0.825478460898),
        (2.0, 0.130028710878, 0.22609085416, 0.850748227299),
        (3.0, 0.032712434939, 0.0871795676914, 0.899396095834),
    ],
)
def test_exposure_curves_by_their_law(c: float, whole: float, mean: float, three_quarters: float) -> None:
    """Bernegger (1997), ASTIN Bulletin 27(1), 99-111: chance of a total loss 1 / g, mean degree of damage,
    and the exposure curve at 75 %, the law put on 40,000 points."""
    b, g = exp(3.1 - 0.15 * (1 + c) * c), exp((0.78 + 0.12 * c) * c)
    edges = np.linspace(0.0, 1.0, 40_001)
    survival = (1 - b) / ((g - 1) * b ** (1 - edges) + 1 - g * b)
    sizes = [*((edges[1:] + edges[:-1]) / 2), 1.0]
    law = lossagg.SizeTable(sizes=sizes, probabilities=np.append(-np.diff(survival), survival[-1]))
    assert survival[-1] == pytest.approx(whole, rel=1e-9)
    assert 1 / g == pytest.approx(whole, rel=1e-9)
    assert law.mean() == pytest.approx(mean, abs=1e-8)
    cost = CappedCost((line(lossagg.Poisson(mean=1), law),))
    assert exposure_curve(cost, np.array([0.75]), 1.0)[0] == pytest.approx(three_quarters, abs=1e-8)
