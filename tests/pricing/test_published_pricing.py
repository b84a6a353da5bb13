"""Published and textbook values of pricing: curves, factors, lists of losses, each with its source."""

from __future__ import annotations

import numpy as np
import pytest

import lossagg
from lossagg.cover import Cover, Schedule
from lossagg.engines.book import Line
from lossagg.portfolio.pricing_sections import PricingSection, RiskLoad
from lossagg.pricing.curves import CappedCost, curves_of, exposure_curve, increased_limits, loss_elimination
from lossagg.pricing.grid import Grid
from lossagg.pricing.money import costs_of, premium_of, risk_load_of
from lossagg.pricing.option import Option

ONE = lossagg.Poisson(mean=1.0)


def cost_of(severity: lossagg.families.SizeLaw, count: float = 1.0) -> CappedCost:
    return CappedCost((Line(name="x", frequency=lossagg.Poisson(mean=count), severity=severity),))


def listed(losses: list[float]) -> lossagg.SizeTable:
    values, counts = np.unique(losses, return_counts=True)
    return lossagg.SizeTable(sizes=values.tolist(), probabilities=(counts / counts.sum()).tolist())


def test_increased_limits_of_lognormal_and_pareto() -> None:
    """Miccolis (1977), On the theory of increased limits and excess of loss pricing, PCAS 64, 27-59:
    I(k) = E[min(X, k)] / E[min(X, b)]; published formula, digits recomputed outside lossagg."""
    limits = np.array([250_000.0, 500_000.0, 1_000_000.0, 2_000_000.0])
    lognormal = increased_limits(cost_of(lossagg.Lognormal(mu=9.0, sigma=2.0)), limits, 100_000.0, 0.0)
    assert lognormal == pytest.approx([1.40940567091, 1.70796898632, 1.96570480324, 2.16564370076], rel=1e-9)
    pareto = increased_limits(cost_of(lossagg.Lomax(alpha=1.5, scale=30_000.0)), limits, 100_000.0, 0.0)
    assert pareto == pytest.approx([1.29455937072, 1.46663151445, 1.59605689442, 1.69054579781], rel=1e-9)


def test_increased_limits_published_example() -> None:
    """A published seminar deck: losses 50, 75, 150, 250, 1250 thousand; capped at 100 thousand 425 thousand,
    at 1 million 1,525 thousand, factor 3.588."""
    cost = cost_of(listed([50e3, 75e3, 150e3, 250e3, 1250e3]), count=5.0)
    assert cost(np.array([100e3, 1e6])) == pytest.approx([425e3, 1525e3])
    assert increased_limits(cost, np.array([1e6]), 100e3, 0.0)[0] == pytest.approx(3.588, abs=5e-4)


@pytest.mark.parametrize(
    ("c", "b", "g", "values"),
    [
        (1.5, 12.6480113844, 4.220695817, [0.119475628506, 0.209297327783, 0.403820231277, 0.634936774667]),
        (2.0, 9.02501349943, 7.69060919888, [0.162437192079, 0.266660419255, 0.467233255731, 0.682791734217]),
        (3.0, 3.66929666762, 30.5694150211, [0.282670389358, 0.405559503978, 0.600178936015, 0.776880905373]),
    ],
)
def test_exposure_curves_of_swiss_re(c: float, b: float, g: float, values: list[float]) -> None:
    """Bernegger (1997), The Swiss Re exposure curves and the MBBEFD distribution class, ASTIN Bulletin
    27(1), 99-111: the law whose survival function is (1 - b) / ((g - 1) b**(1 - x) + 1 - g b), put
    on 40,000 points; its exposure curve at 5, 10, 25 and 50 % of the largest loss."""
    assert np.exp(3.1 - 0.15 * (1 + c) * c) == pytest.approx(b)
    assert np.exp((0.78 + 0.12 * c) * c) == pytest.approx(g)
    cells = 40_000
    edges = np.linspace(0.0, 1.0, cells + 1)
    survival = (1 - b) / ((g - 1) * b ** (1 - edges) + 1 - g * b)
    chances = np.append(-np.diff(survival), survival[-1])
    law = lossagg.SizeTable(sizes=[*((edges[1:] + edges[:-1]) / 2), 1.0], probabilities=chances)
    found = exposure_curve(cost_of(law), np.array([0.05, 0.1, 0.25, 0.5]), 1.0)
    assert found == pytest.approx(values, abs=2e-6)


@pytest.mark.parametrize(
    ("alpha", "first", "second", "above_ten"),
    [
        (0.8, 1.025817655, 1.94728646687, 0.158489319246),
        (1.0, 0.69314718056, 1.09861228867, 0.1),
        (1.5, 0.261971658966, 0.267307160364, 0.0316227766017),
        (2.5, 0.0385466283322, 0.0170246469381, 0.00316227766017),
    ],
)
def test_layer_costs_of_the_pareto_law(alpha: float, first: float, second: float, above_ten: float) -> None:
    """Schmutz and Doerr (1998), The Pareto model in property reinsurance, Swiss Re: 5 xs 5 and 20 xs 10
    per loss, minimum 1; published formula, digits recomputed outside lossagg."""
    cost = cost_of(lossagg.Pareto(alpha=alpha, minimum=1.0))
    found = cost.layer(np.array([5.0, 10.0]), np.array([10.0, 30.0]))
    assert found == pytest.approx([first, second], rel=1e-9)
    assert cost.frequency(np.array([10.0]))[0] == pytest.approx(above_ten, rel=1e-10)


@pytest.mark.parametrize(
    ("deductible", "limited", "ratio", "survival", "franchise"),
    [
        (250, 209.8765, 0.209877, 0.702332, 0.034294),
        (500, 360.0000, 0.360000, 0.512000, 0.104000),
        (1000, 555.5556, 0.555556, 0.296296, 0.259259),
        (2000, 750.0000, 0.750000, 0.125000, 0.500000),
        (5000, 918.3673, 0.918367, 0.023324, 0.801749),
    ],
)
def test_closed_form_table_of_the_lomax_law(
    deductible: float, limited: float, ratio: float, survival: float, franchise: float
) -> None:
    """Lomax alpha 3, theta 2000 (closed form): cost below d, loss elimination, and the ratio of a franchise,
    which the insured does not keep once the loss exceeds it."""
    law = lossagg.Lomax(alpha=3.0, scale=2000.0)
    cost, amounts = cost_of(law), np.array([float(deductible)])
    assert cost(amounts)[0] == pytest.approx(limited, abs=5e-5)
    assert loss_elimination(cost, amounts)[0] == pytest.approx(ratio, abs=5e-7)
    assert law.sf(deductible) == pytest.approx(survival, abs=5e-7)
    option = Option("f", Cover(deductible=float(deductible), franchise=True), cost.lines)
    plan = option.retained_plan
    assert plan is not None
    assert Grid(cost.lines).moments([plan.events])[0].mean / 1000.0 == pytest.approx(franchise, abs=5e-7)


def test_layer_and_factors_of_the_lomax_law() -> None:
    """Lomax alpha 3, theta 2000 (closed form): layer 4000 xs 1000 costs 362.8118 per loss; increased limit
    factors 1.543210 (1000 over 500) and 1.653061 (5000 over 1000)."""
    cost = cost_of(lossagg.Lomax(alpha=3.0, scale=2000.0))
    assert cost.layer(np.array([1000.0]), np.array([5000.0]))[0] == pytest.approx(362.8118, abs=5e-5)
    assert increased_limits(cost, np.array([1000.0]), 500.0, 0.0)[0] == pytest.approx(1.543210, abs=5e-7)
    assert increased_limits(cost, np.array([5000.0]), 1000.0, 0.0)[0] == pytest.approx(1.653061, abs=5e-7)


def test_loss_elimination_and_credit_factors_published_table() -> None:
    """A published exam-style table: 1,735 claims of 642,000 in all; eliminated at 100, 200 and 500: 153,500,
    261,250, 434,375, so ratios .2391, .4069, .6766; form credit factors (L (1 - LER) + F) / (1 - V) with
    L = .614, F = .133, V = .253: .8035, .6655, .4439."""
    eliminated = np.array([153_500.0, 261_250.0, 434_375.0])
    assert eliminated / 642_000.0 == pytest.approx([0.2391, 0.4069, 0.6766], abs=5e-5)
    basis = PricingSection.model_validate({"fixed-expense": 0.133, "variable-expense": 0.253})
    factors = [
        premium_of(basis, 0.614 * (1.0 - ratio), 0.0, None, bought=True).value
        for ratio in eliminated / 642_000.0
    ]
    assert factors == pytest.approx([0.8035, 0.6655, 0.4439], abs=5e-5)


FIVE_YEARS = {2021: [4, 12, 55], 2022: [8], 2023: [], 2024: [3, 27, 90, 15], 2025: [140, 6]}


@pytest.mark.parametrize(
    ("terms", "retained", "mean", "ratio"),
    [
        (Cover(deductible=10e3), [24, 8, 0, 33, 16], 16_200, 0.225000),
        (Cover(deductible=25e3), [41, 8, 0, 68, 31], 29_600, 0.411111),
        (Cover(deductible=25e3, retained_cap=60e3), [41, 8, 0, 60, 31], 28_000, 0.388889),
        (Cover(deductible=50e3), [66, 8, 0, 95, 56], 45_000, 0.625000),
        (Cover(deductible=10e3, franchise=True), [4, 8, 0, 3, 6], 4_200, 0.058333),
    ],
    ids=["10k", "25k", "25k capped", "50k", "franchise 10k"],
)
def test_five_year_list(terms: Cover, retained: list[float], mean: float, ratio: float) -> None:
    """Five years of losses in thousands, worked by hand: retained by year, mean, loss elimination ratio.
    For the franchise the insurer pays 67, 0, 0, 132 and 140 thousand."""
    line = Line(name="x", frequency=ONE, severity=lossagg.Exponential(mean=1.0))
    option = Option("o", terms, (line,))
    kept = []
    for losses in FIVE_YEARS.values():
        amounts = 1000.0 * np.array(losses, dtype=np.float64)
        sums = [
            np.array([schedule[0](amounts).sum()]) for schedule in (option.scope, option.paid, option.kept)
        ]
        kept.append(float((sums[0] - option.ceded(sums[1], sums[2]))[0]))
    assert kept == pytest.approx([1000.0 * value for value in retained])
    assert np.mean(kept) == pytest.approx(mean)
    assert np.mean(kept) / 72_000.0 == pytest.approx(ratio, abs=5e-7)


def test_risk_loads_by_their_definitions() -> None:
    """Standard deviation, variance and cost of capital, by hand; no load stated is none."""
    for method, level, expected in (
        ("sd", None, 20.0),
        ("variance", None, 4000.0),
        ("cost-of-capital", 0.99, 30.0),
    ):
        load = {"method": method, "factor": 0.1, **({"level": level} if level else {})}
        basis = PricingSection(**{"risk-load": RiskLoad.model_validate(load)})  # type: ignore[arg-type]
        assert risk_load_of(basis, 100.0, 200.0, 400.0) == pytest.approx(expected)
    assert risk_load_of(PricingSection(), None, None, None) == 0.0


def test_what_does_not_exist_stays_away_from_the_premium() -> None:
    """An infinite expected ceded loss: no premium, and its reason; a quoted one is taken as it is."""
    basis = PricingSection.model_validate({"premium-tax": 0.1})
    missing = premium_of(basis, None, 0.0, None, bought=True)
    assert missing.value is None
    assert "infinite" in str(missing.reason)
    assert premium_of(basis, None, 0.0, 500.0, bought=True).value == 500.0
    assert costs_of(basis, missing, 1.0, 1.0, None, bought=True).premium_tax is None


def test_curves_hang_together() -> None:
    """Layers stacked end to end add to the capped cost; factors rise to 1; the basic limit has factor 1."""
    cost = CappedCost(
        (
            Line(
                name="a", frequency=lossagg.Poisson(mean=3.0), severity=lossagg.Lognormal(mu=9.0, sigma=1.5)
            ),
            Line(name="b", frequency=ONE, severity=lossagg.Lomax(alpha=2.5, scale=1e4)),
        ),
        event_cap=400_000.0,
    )
    data = curves_of(cost, [30_000.0, 75_000.0], basic=75_000.0, expense=200.0, largest=400_000.0)
    stacked = np.cumsum([row["cost"] for row in data["layers"]])
    amounts = np.array([row["to"] for row in data["layers"]])
    assert stacked == pytest.approx(cost(amounts), rel=1e-10)
    ratios = [row["factor"] for row in data["loss_elimination"]]
    assert ratios == sorted(ratios)
    assert ratios[-1] == pytest.approx(1.0)
    assert {row["amount"]: row["factor"] for row in data["increased_limits"]}[75_000.0] == pytest.approx(1.0)
    assert data["exposure"][-1]["factor"] == pytest.approx(1.0)
    assert {30_000.0, 75_000.0} <= {row["amount"] for row in data["loss_elimination"]}


def test_retained_sum_of_an_exam_question() -> None:
    """Poisson(2), losses 1, 2, 3 with a third each, aggregate deductible 2: cost 2.36 (a published exam
    question for which 2.3608 is the answer; 2.36089408863 recomputed)."""
    line = Line(
        name="x",
        frequency=lossagg.Poisson(mean=2.0),
        severity=lossagg.SizeTable(sizes=[1, 2, 3], probabilities=[1 / 3, 1 / 3, 1 / 3]),
    )
    option = Option("o", Cover(annual_retention=2.0), (line,))
    plan = option.ceded_plan
    assert plan is not None
    year = dict(Grid([line], 2**10, workers=1).years([plan.events]))[plan.events]
    assert year.layer_mean(2.0) == pytest.approx(2.36089408863, abs=1e-8)
    assert Schedule.identity() == plan.events[0]
