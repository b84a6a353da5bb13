"""The option engine: against the Fourier engine, closed forms and convolution, and the laws of the field."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import lossagg
from lossagg.cover import Cover, Schedule
from lossagg.engines import Simulation
from lossagg.engines.book import GROSS, Book, Line
from lossagg.engines.payment import PaymentLaw
from lossagg.engines.result import TransformedAnnualLoss
from lossagg.kernels.pricing import survival_and_areas
from lossagg.pricing.common_years import simulate_options
from lossagg.pricing.grid import Grid, event_moments
from lossagg.pricing.lattice_year import LatticeYear
from lossagg.pricing.option import Option

CASUALTY = Line(
    name="casualty", frequency=lossagg.Poisson(mean=12.0), severity=lossagg.Lognormal(mu=9.0, sigma=1.5)
)
CLUSTERED = Line(
    name="clustered",
    frequency=lossagg.NegativeBinomial(mean=6.0, dispersion=0.4),
    severity=lossagg.Lomax(alpha=2.5, scale=20_000.0),
)
RARE = Line(
    name="rare", frequency=lossagg.Poisson(mean=0.02), severity=lossagg.Gamma(shape=2.0, scale=50_000.0)
)
TABLE = Line(
    name="table",
    frequency=lossagg.Binomial(trials=9, probability=0.3),
    severity=lossagg.SizeTable(sizes=[0, 1, 2, 5], probabilities=[0.1, 0.4, 0.3, 0.2]),
)
LEVELS = (0.9, 0.95, 0.99, 0.995)


def year_of(line: Line, schedule: Schedule, points: int = 2**16) -> LatticeYear:
    return dict(Grid([line], points, workers=1).years([(schedule,)]))[(schedule,)]


@pytest.mark.parametrize("line", [CASUALTY, CLUSTERED], ids=lambda line: line.name)
@pytest.mark.parametrize(
    "cover",
    [
        Cover(deductible=10_000.0),
        Cover(deductible=33_333.0),
        Cover(deductible=20_000.0, limit=60_000.0),
        Cover(deductible=20_000.0, franchise=True, limit=90_000.0),
        Cover(deductible=50_000.0, share=0.8, limit=100_000.0),
    ],
    ids=["deductible", "odd deductible", "layer", "franchise", "share"],
)
def test_quantiles_lie_in_the_brackets_of_the_fourier_engine(line: Line, cover: Cover) -> None:
    """Two engines that share no discretisation: brackets overlap, means and deviations agree.

    The Fourier engine rounds payments down and up; the option engine splits them with their mean kept.
    """
    plan = Option("o", cover, (line,)).retained_plan
    assert plan is not None
    schedule = plan.events[0]
    ours = year_of(line, schedule)
    exact = lossagg.Fourier().solve(_compound(line, schedule))
    assert ours.mean() == pytest.approx(exact.mean(), rel=1e-9)
    assert ours.sd() == pytest.approx(exact.sd(), rel=1e-6)
    for level in LEVELS:
        for measure in ("value_at_risk", "tail_value_at_risk"):
            low, high = ours.accuracy(measure, level)
            least, most = exact.accuracy(measure, level)
            assert low <= most
            assert least <= high
            assert ours.measure(measure, level) == pytest.approx(exact.measure(measure, level), rel=5e-4)


def _compound(line: Line, schedule: Schedule):
    from lossagg.engines.compound import CompoundSum

    return CompoundSum.of((line,), {line.name: schedule})


def test_an_arithmetic_severity_is_exact() -> None:
    """Sizes on the lattice are never split: no bracket, and the convolution to the last digits."""
    schedule = Schedule.capped(2.0)
    year = year_of(TABLE, schedule, points=2**10)
    per_event = np.array([0.1, 0.4, 0.5])  # min(X, 2)
    total = np.zeros(19)
    from math import comb

    for n in range(10):
        weight = comb(9, n) * 0.3**n * 0.7 ** (9 - n)
        power = np.array([1.0])
        for _ in range(n):
            power = np.convolve(power, per_event)
        total[: power.size] += weight * power
    survival = 1.0 - np.cumsum(total)
    assert np.asarray(year.sf(np.arange(19.0))) == pytest.approx(survival, abs=1e-9)
    assert year.accuracy("value_at_risk", 0.95) == (
        year.value_at_risk(0.95),
        year.value_at_risk(0.95),
    )


def test_rare_losses_have_quantiles_at_zero() -> None:
    """One loss in fifty years: the worst year at 95 % keeps nothing, the tail mean is the mean over 5 %."""
    year = year_of(RARE, Schedule.capped(40_000.0))
    assert year.value_at_risk(0.95) == 0.0
    assert year.tail_value_at_risk(0.95) == pytest.approx(year.mean() / 0.05)
    assert year.sf(0.0) == pytest.approx(-np.expm1(-0.02), rel=1e-5)


def test_two_lines_with_one_set_of_terms_match_the_simulation() -> None:
    """Quantiles over the events of two lines: the share of simulated years beyond, in standard errors."""
    lines, years = (CASUALTY, CLUSTERED), 60_000
    options = [Option("base", None, lines), Option("d", Cover(deductible=25_000.0), lines)]
    plan = options[1].retained_plan
    assert plan is not None
    year = dict(Grid(lines, workers=1).years([plan.events]))[plan.events]
    amounts = [year.value_at_risk(level) for level in LEVELS]
    tally = simulate_options(
        lines,
        options,
        base=0,
        paid=[None, None],
        thresholds={"d": amounts},
        keep=[False, True],
        years=years,
        seed=5,
    )[1]
    shares = list(tally.above.values())
    for level, share in zip(LEVELS, shares, strict=True):
        error = np.sqrt(level * (1 - level) / years)
        assert abs(share - (1 - level)) <= 4 * error + 1e-4
    assert tally.retained == pytest.approx(year.mean(), abs=4 * tally.retained_sd / np.sqrt(years))


def test_closed_form_of_retained_moments_under_a_deductible() -> None:
    """Poisson 8, Lomax 3, 2000, d = 500: mean 2,880, sd 1,131.3708 (computed here, closed form: lam L(d),
    sqrt(lam M2(d)))."""
    line = Line(name="x", frequency=lossagg.Poisson(mean=8), severity=lossagg.Lomax(alpha=3.0, scale=2000.0))
    moments = Grid([line]).moments([(Schedule.capped(500.0),)])[0]
    assert moments.mean == pytest.approx(2880.0, rel=1e-12)
    assert moments.sd == pytest.approx(1131.3708, abs=5e-5)


@given(
    deductible=st.floats(500.0, 400_000.0),
    cap=st.floats(1_000.0, 2_000_000.0),
    share=st.sampled_from([1.0, 0.5]),
)
@settings(derandomize=True, deadline=None, max_examples=12)
def test_retained_and_ceded_make_the_gross(deductible: float, cap: float, share: float) -> None:
    """The split of a year is a split: exact means of both sides add up to the expected loss."""
    option = Option("o", Cover(deductible=deductible, share=share), (CASUALTY,), None, max(cap, deductible))
    grid = Grid([CASUALTY], workers=1)
    plans = (option.retained_plan, option.ceded_plan)
    events = [plan.events for plan in plans if plan is not None]
    kept, paid = (moment.mean for moment in grid.moments(events))
    assert kept + paid == pytest.approx(grid.moments([option.scope])[0].mean, rel=1e-10)


@given(low=st.floats(1_000.0, 200_000.0), factor=st.floats(1.05, 3.0))
@settings(derandomize=True, deadline=None, max_examples=12)
def test_cost_falls_and_is_convex_in_the_deductible(low: float, factor: float) -> None:
    """The ceded cost of three deductibles in arithmetic progression: falling, and convex."""
    width = low * (factor - 1.0)
    grid = Grid([CLUSTERED], workers=1)
    plans = [Option("o", Cover(deductible=low + k * width), (CLUSTERED,)).ceded_plan for k in range(3)]
    costs = [moment.mean for moment in grid.moments([plan.events for plan in plans if plan])]
    assert costs[0] > costs[1] > costs[2]
    assert costs[0] - costs[1] >= (costs[1] - costs[2]) * (1 - 1e-9)


@given(deductibles=st.lists(st.floats(2_000.0, 300_000.0), min_size=2, max_size=4, unique=True))
@settings(derandomize=True, deadline=None, max_examples=8)
def test_worst_years_rise_with_the_deductible(deductibles: list[float]) -> None:
    """More kept of each event is more kept in every quantile, up to a step of the lattice."""
    grid = Grid([CASUALTY], 2**15, workers=1)
    schedules = [(Schedule.capped(d),) for d in sorted(deductibles)]
    years = dict(grid.years(schedules))
    for low, high in pairwise(schedules):
        for level in LEVELS:
            slack = years[low].step + years[high].step
            assert years[low].value_at_risk(level) <= years[high].value_at_risk(level) + slack


def test_the_figures_do_not_depend_on_company_or_workers() -> None:
    """A schedule among others on two threads gives what it gives among the same on one."""
    schedules = [(Schedule.capped(d),) for d in (5_000.0, 12_345.0, 80_000.0)]
    one = dict(Grid([CASUALTY], 2**14, workers=1).years(schedules))
    two = dict(Grid([CASUALTY], 2**14, workers=2).years(schedules))
    assert all(np.array_equal(one[s].survival, two[s].survival) for s in schedules)


def test_a_heavy_tail_without_a_mean_has_quantiles_and_says_no_mean() -> None:
    line = Line(
        name="heavy", frequency=lossagg.Poisson(mean=3.0), severity=lossagg.Pareto(alpha=0.9, minimum=1000.0)
    )
    year = year_of(line, Schedule.identity())
    assert year.mean() == np.inf
    assert year.tail_value_at_risk(0.99) == np.inf
    exact = lossagg.annual_loss(line.frequency, line.severity)
    low, high = year.accuracy("value_at_risk", 0.99)
    assert low <= exact.value_at_risk(0.99) <= high
    assert year.value_at_risk(0.99) == pytest.approx(exact.value_at_risk(0.99), rel=0.01)


@pytest.mark.parametrize("run", [survival_and_areas, survival_and_areas.py_func], ids=["compiled", "plain"])
def test_survival_and_areas_by_their_definition(run) -> None:
    """Compiled and as plain Python, against cumulative sums."""
    random = np.random.default_rng(1)
    masses = random.random(50)
    masses /= 1.2 * masses.sum()
    untilt = np.exp(0.01 * np.arange(50))
    survival, areas = np.empty(50), np.empty(50)
    run(masses / untilt, untilt, survival, areas)
    assert survival == pytest.approx(1.0 - np.cumsum(masses))
    assert areas == pytest.approx(np.concatenate(([0.0], np.cumsum(survival)[:-1])))


def test_annual_cap_is_a_function_of_the_retained_sum() -> None:
    """E[min(R, A)] + E[(R - A)+] = E[R], and no quantile above the cap."""
    option = Option("o", Cover(deductible=25_000.0, retained_cap=250_000.0), (CASUALTY,))
    plan = option.retained_plan
    assert plan is not None
    year = dict(Grid([CASUALTY], workers=1).years([plan.events]))[plan.events]
    capped = TransformedAnnualLoss(year, plan.annual)
    assert capped.mean() + year.layer_mean(250_000.0) == pytest.approx(year.mean(), rel=1e-12)
    assert capped.value_at_risk(0.999) == 250_000.0
    assert option.most_retained == 250_000.0


@pytest.mark.parametrize(
    "terms",
    [
        Cover(deductible=10_000.0, limit=50_000.0, retained_cap=60_000.0),
        Cover(deductible=10_000.0, annual_limit=200_000.0),
        Cover(deductible=10_000.0, retained_cap=60_000.0, share=0.9),
    ],
)
def test_two_sums_at_once_are_left_to_the_simulation(terms: Cover) -> None:
    assert Option("o", terms, (CASUALTY,)).retained_plan is None


LAWS = {
    "lognormal": lossagg.Lognormal(mu=9, sigma=1.5),
    "infinite variance": lossagg.Lomax(alpha=1.4, scale=2e4),
    "infinite mean": lossagg.Lomax(alpha=0.8, scale=2e4),
    "atoms": lossagg.SizeTable(sizes=[0, 1e4, 2e4, 5e4, 1e6], probabilities=[0.1, 0.3, 0.3, 0.2, 0.1]),
    "both": lossagg.Mixture(
        weights=[0.3, 0.7],
        parts=[lossagg.SizeTable(sizes=[0, 5e4], probabilities=[0.5, 0.5]), lossagg.Exponential(mean=1e4)],
    ),
}


@pytest.mark.parametrize("law", LAWS.values(), ids=LAWS)
def test_moments_of_all_schedules_at_once_are_those_of_each(law) -> None:
    """Layer by layer in one call, against the law of each payment by itself: jumps, falls and shares too."""
    line, capped = Line(name="x", frequency=lossagg.Poisson(mean=1.0), severity=law), Schedule.capped(1e6)
    schedules = [Schedule.identity(), capped, Schedule.capped(0.0)]
    for terms in (
        Cover(deductible=1e4, limit=5e4),
        Cover(deductible=1e4, franchise=True),
        Cover(deductible=1e4, disappears_at=3e4),
        Cover(deductible=1e4, limit=6e4, limit_includes_deductible=True),
        Cover(deductible=5e7, limit=1e8),
    ):
        paid, whole = terms.event_schedule(), terms.event_schedule().after(capped)
        schedules += [paid, Schedule.identity() - paid, whole, capped - whole, capped - whole.scaled(0.3)]
    first, second = event_moments(line, schedules)
    payments = [PaymentLaw(law, schedule) for schedule in schedules]
    assert first == pytest.approx([payment.mean for payment in payments], rel=1e-9)
    assert second == pytest.approx([payment.second_moment for payment in payments], rel=1e-8)


@pytest.mark.parametrize("mean", [0.3, 0.9, 12.0])
def test_options_meet_the_losses_of_the_simulation(mean: float) -> None:
    """Same seed, lines and years: the loss of every year is the engine's, however rare losses are."""
    lines = tuple(
        Line(name=name, frequency=lossagg.Poisson(mean=own), severity=lossagg.Lognormal(mu=9.0, sigma=1.5))
        for name, own in (("Fire", mean), ("Theft", 4.0))
    )
    ours: list[np.ndarray] = []
    simulate_options(
        lines,
        [Option("none", None, lines), Option("5k", Cover(deductible=5000.0), lines)],
        base=0,
        paid=[None, None],
        thresholds={},
        keep=[False, False],
        years=70_000,
        seed=5,
        every_year=lambda _, amounts: ours.append(amounts["loss"]),
    )
    theirs: list[np.ndarray] = []
    engine = Simulation(years=70_000, seed=5)
    engine.book(Book(lines=lines), every_year=lambda _, amounts: theirs.append(amounts[GROSS]))
    np.testing.assert_allclose(np.concatenate(ours), np.concatenate(theirs), rtol=1e-12)
