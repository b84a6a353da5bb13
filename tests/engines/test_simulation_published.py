"""The simulation against closed forms and published values, each within four of its own errors."""

import numpy as np
import pytest

from lossagg.cover import Cover
from lossagg.engines.simulation import Simulation
from lossagg.families import Exponential, Lognormal, Lomax, NegativeBinomial, Poisson, SizeTable

ENGINE = Simulation(years=400_000, seed=20)


def agree(loss, expected):
    """Every value within four standard errors; probabilities by the binomial error."""
    for key, value in expected.items():
        measure, argument = key
        if measure == "sf":
            ours, error = loss.sf(argument), np.sqrt(value * (1 - value) / loss.years)
        elif measure == "stop loss":
            excess = np.maximum(loss.annual - argument, 0.0)
            ours, error = loss.expected_excess(argument), excess.std() / np.sqrt(loss.years)
        else:
            ours, error = loss.measure(measure, argument), loss.standard_error(measure, argument)
        assert abs(ours - value) <= 4 * error + 1e-12, key


def test_compound_poisson_exponential():
    """Klugman, Panjer and Willmot, Loss Models, compound Poisson-exponential (Bessel
    form); own numbers from the published formula."""
    agree(
        ENGINE.annual_loss(Poisson(mean=3.0), Exponential(mean=1.0)),
        {
            ("sf", 1.0): 0.77501529121,
            ("stop loss", 1.0): 2.13398697009,
            ("sf", 5.0): 0.185061227513,
            ("stop loss", 5.0): 0.378085256071,
            ("sf", 10.0): 0.014852747578,
            ("stop loss", 10.0): 0.0257101955432,
            ("value_at_risk", 0.9): 6.33356031058,
            ("tail_value_at_risk", 0.9): 8.26370996567,
            ("value_at_risk", 0.99): 10.7063757046,
            ("tail_value_at_risk", 0.99): 12.4103389145,
            ("value_at_risk", 0.999): 14.6011683003,
            ("tail_value_at_risk", 0.999): 16.1921078339,
            ("mean", None): 3.0,
            ("sd", None): np.sqrt(6.0),
        },
    )


def test_geometric_exponential():
    """Loss Models chapter 9, geometric(4)-exponential(1000)."""
    agree(
        ENGINE.annual_loss(NegativeBinomial(mean=4.0, dispersion=1.0), Exponential(mean=1000.0)),
        {
            ("sf", 0.0): 0.8,
            ("sf", 1000.0): 0.654984602462,
            ("stop loss", 10_000.0): 541.341132946,
            ("sf", 30_000.0): 0.00198300174133,
            ("value_at_risk", 0.9): 10397.2077084,
            ("tail_value_at_risk", 0.9): 15397.2077084,
            ("value_at_risk", 0.99): 21910.1331734,
            ("tail_value_at_risk", 0.99): 26910.1331734,
            ("value_at_risk", 0.999): 33423.0586383,
            ("tail_value_at_risk", 0.999): 38423.0586383,
        },
    )


def test_negative_binomial_exponential():
    """Loss Models chapter 9, negative binomial(2, 2)-exponential(100)."""
    agree(
        ENGINE.annual_loss(NegativeBinomial(mean=4.0, dispersion=0.5), Exponential(mean=100.0)),
        {
            ("sf", 0.0): 1 - 0.111111111111,
            ("sf", 200.0): 0.608494363298,
            ("stop loss", 1000.0): 30.1247054932,
            ("sf", 2000.0): 0.00490199686442,
            ("value_at_risk", 0.9): 937.792733917,
            ("tail_value_at_risk", 0.9): 1296.31817627,
            ("value_at_risk", 0.99): 1756.63415029,
            ("tail_value_at_risk", 0.99): 2094.82421046,
            ("value_at_risk", 0.999): 2532.8193667,
            ("tail_value_at_risk", 0.999): 2861.54748329,
        },
    )


def test_compound_poisson_on_three_points():
    """Computed here, two routes: Poisson(2) on {1, 2, 3}; exact P(S = 5), quantiles, TVaR, stop loss at 5."""
    loss = ENGINE.annual_loss(
        Poisson(mean=2.0), SizeTable(sizes=[1.0, 2.0, 3.0], probabilities=[0.5, 0.3, 0.2])
    )
    at_five = np.mean(loss.annual == 5.0)
    exact = 437 / 600 * np.exp(-2.0)
    assert abs(at_five - exact) < 4 * np.sqrt(exact * (1 - exact) / loss.years)
    levels = (0.9, 0.95, 0.99, 0.995, 0.999)
    assert [loss.value_at_risk(level) for level in levels] == [7, 8, 11, 12, 15]
    agree(
        loss,
        {
            ("stop loss", 5.0): 0.5051403307,
            **{
                ("tail_value_at_risk", level): value
                for level, value in zip(
                    levels, (8.79561, 10.03901, 12.57169, 13.60006, 15.92147), strict=True
                )
            },
        },
    )


def test_retained_under_a_deductible_of_lomax_losses():
    """Computed here, closed form: Poisson(8), Lomax(3, 2000), d = 500: retained mean 2,880, sd 1,131.37."""
    loss = ENGINE.annual_loss(Poisson(mean=8.0), Lomax(alpha=3.0, scale=2000.0), Cover(limit=500.0))
    agree(loss, {("mean", None): 2880.0, ("sd", None): 1131.3708})


OPTIONS = {
    # deductible, cap: mean, sd, VaR 90, 95, 99, TVaR 99
    (10_000.0, np.inf): (79_351.59, 26_142.54, 113_800, 124_900, 146_650, 158_049),
    (25_000.0, np.inf): (135_865.53, 50_662.98, 203_000, 225_100, 268_900, 292_070),
    (25_000.0, 250_000.0): (135_354, 49_256, 203_000, 225_100, 250_000, 250_000),
    (50_000.0, np.inf): (183_466.55, 77_453.22, 286_800, 321_900, 392_050, 429_517),
    (100_000.0, np.inf): (226_920.16, 110_466.29, 375_700, 428_650, 535_950, 594_014),
    (100_000.0, 600_000.0): (226_734, 109_748, 375_700, 428_650, 535_950, 575_422),
}


@pytest.mark.parametrize(("deductible", "cap"), OPTIONS)
def test_table_of_deductible_options(deductible, cap):
    """Computed here, two routes: Poisson(12) x lognormal(9, 1.5): what the insured keeps per year
    by deductible and annual cap; mean and sd by closed form, the rest exact to a grid of 50."""
    law = Poisson(mean=12.0), Lognormal(mu=9.0, sigma=1.5)
    kept = ENGINE.annual_loss(*law, Cover(limit=deductible, annual_limit=cap))
    measures = [("mean", None), ("sd", None)]
    measures += [("value_at_risk", level) for level in (0.9, 0.95, 0.99)] + [("tail_value_at_risk", 0.99)]
    for (measure, level), value in zip(measures, OPTIONS[deductible, cap], strict=True):
        error = kept.standard_error(measure, level)
        grid = 50.0 if level else 0.5
        assert abs(kept.measure(measure, level) - value) <= 4 * error + grid, (measure, level)


@pytest.mark.parametrize(("deductible", "cap", "charge"), [(25e3, 250e3, 511.6), (100e3, 600e3, 185.9)])
def test_aggregate_stop_charge(deductible, cap, charge):
    """Computed here, two routes: cost of capping the retained amount, 511.6 and 185.9 a year: the part that a
    retained cap adds to what the cover pays, year by year on the same losses."""
    law = Poisson(mean=12.0), Lognormal(mu=9.0, sigma=1.5)
    terms = {"deductible": deductible, "limit": 1e6 - deductible}
    with_cap = ENGINE.annual_loss(*law, Cover(**terms, retained_cap=cap))
    without = ENGINE.annual_loss(*law, Cover(**terms))
    extra = with_cap.annual - without.annual
    assert abs(extra.mean() - charge) < 4 * extra.std() / np.sqrt(extra.size)


@pytest.mark.parametrize(
    ("deductible", "attaching", "layer"), [(1000.0, 0.296296, 362.8118), (2000.0, 0.125, None)]
)
def test_layer_of_lomax_losses(deductible, attaching, layer):
    """Computed here, two routes: layer 4000 xs 1000 costs 362.8118 per loss; with Poisson(8) a year the cover
    attaches with probability 1 - exp(-8 S(d))."""
    cover = Cover(deductible=deductible, limit=4000.0)
    loss = ENGINE.annual_loss(Poisson(mean=8.0), Lomax(alpha=3.0, scale=2000.0), cover)
    expected = 1.0 - np.exp(-8.0 * attaching)
    error = np.sqrt(expected * (1 - expected) / loss.years)
    assert abs(loss.attachment_probability() - expected) < 4 * error
    if layer is not None:
        agree(loss, {("mean", None): 8 * layer})


def test_far_tail_of_a_lognormal_portfolio():
    """Computed here, two routes: Poisson(12) x lognormal(9, 1.5), P(S > 1m) = 0.0195570 and P(S > 2m) =
    0.00236066 (grid and conditional Monte Carlo, computed for this project)."""
    loss = ENGINE.annual_loss(Poisson(mean=12.0), Lognormal(mu=9.0, sigma=1.5))
    agree(loss, {("sf", 1e6): 0.0195570, ("sf", 2e6): 0.00236066, ("sf", 5e6): 1.355302e-4})
