"""The law of one payment: a size law through a schedule, against the loss-by-loss oracle and quadrature."""

import itertools
from fractions import Fraction

import numpy as np
import oracle
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from lossagg.cover import Cover, Schedule
from lossagg.engines.payment import PaymentLaw
from lossagg.errors import EngineError
from lossagg.families import (
    Exponential,
    GeneralizedPareto,
    Lognormal,
    Lomax,
    Mixture,
    Pareto,
    SizeTable,
    Spliced,
)

TERMS = (
    {},
    {"deductible": 2.5},
    {"limit": 4.0},
    {"deductible": 2.0, "limit": 3.0},
    {"deductible": 3.0, "franchise": True},
    {"deductible": 2.0, "franchise": True, "limit": 6.0},
)
NET_OF_TWO = Schedule.identity() - Cover(deductible=2.0, limit=3.0).event_schedule().scaled(0.5)
AFTER_FRANCHISE = Schedule.identity() - Cover(deductible=3.0, franchise=True).event_schedule()
FALLING = Schedule((0.0, 2.0), (0.0, 2.0), (1.0, -0.0)) - Schedule(
    (0.0, 2.0, 4.0), (0.0, 0.0, 1.0), (0.0, 0.5, 0.0)
)


@pytest.mark.parametrize("terms", TERMS, ids=str)
def test_a_table_through_terms_is_the_table_of_payments(terms):
    """Atoms are mapped one by one, a loss of exactly the deductible pays nothing."""
    sizes = {0: 0.1, 1: 0.2, 2: 0.15, 2.5: 0.1, 3: 0.2, 5: 0.15, 9: 0.1}
    law = PaymentLaw(
        SizeTable(sizes=list(sizes), probabilities=list(sizes.values())), Cover(**terms).event_schedule()
    )
    expected = oracle.mapped(sizes, lambda loss: oracle.event_payment(loss, **terms))
    amounts, chances = law.atoms
    assert dict(zip(amounts.tolist(), chances.tolist(), strict=True)) == pytest.approx(expected)
    assert law.continuous_mass == 0
    assert law.mean == pytest.approx(oracle.mean(expected), rel=1e-13)
    assert law.second_moment == pytest.approx(sum(x**2 * p for x, p in expected.items()), rel=1e-13)
    for y in (0.0, 0.5, 1.0, 2.9, 3.0, 6.5):
        assert law.sf(np.array([y]))[0] == pytest.approx(oracle.exceedance(expected, y), abs=1e-15)
        assert law.expected_excess(y) == pytest.approx(oracle.stop_loss(expected, y), abs=1e-13)


NODES, WEIGHTS = np.polynomial.legendre.leggauss(16)


def integral(function, left, right):
    """Gauss-Legendre panels, widening geometrically from the left end."""
    width = min(right, 1e16) - left
    cuts = left + np.concatenate(([0.0], np.geomspace(1e-6 * min(width, 1.0), width, 160)))
    half = np.diff(cuts)[:, None] / 2
    x = cuts[:-1, None] + half * (1 + NODES)
    return float((half * WEIGHTS * function(x.ravel()).reshape(x.shape)).sum())


def paying(severity, schedule, y):
    """P(payment > y) by quadrature of the density where the payment exceeds y."""
    knots = {0.0, *schedule.starts, *severity.breakpoints}
    for start, value, slope in zip(schedule.starts, schedule.values, schedule.slopes, strict=True):
        if slope != 0:
            knots.add(max(start + (y - value) / slope, 0.0))
    cuts = sorted(knots)
    total = 0.0
    for left, right in zip(cuts, [*cuts[1:], np.inf], strict=True):
        middle = left + 1.0 if right == np.inf else (left + right) / 2
        if schedule(np.array([middle]))[0] > y and right > left:
            total += integral(severity.pdf, left, right)
    return total


def knots_between(schedule, low, high):
    """Payments at which the law of the payment can have a kink or a jump."""
    losses = np.array([*schedule.starts, 3.0])
    values = {*schedule.values, *schedule(losses).tolist()}
    return sorted(value for value in values if low < value < high)


SCHEDULES = [Cover(**terms).event_schedule() for terms in TERMS] + [NET_OF_TWO, AFTER_FRANCHISE, FALLING]


@pytest.mark.parametrize("schedule", SCHEDULES, ids=range(len(SCHEDULES)))
@pytest.mark.parametrize(
    "severity",
    [
        Exponential(mean=3.0),
        Lognormal(mu=0.5, sigma=1.0),
        GeneralizedPareto(shape=0.4, scale=2.0),
        Spliced(
            body=Lognormal(mu=0.5, sigma=0.8),
            tail=Pareto(alpha=2.5, minimum=3.0),
            threshold=3.0,
            tail_probability=0.2,
        ),
    ],
    ids=lambda law: law.family,
)
def test_continuous_losses_through_any_schedule(severity, schedule):
    """Survival function, areas and moments agree with quadrature of the density, also for schedules
    that jump down or fall."""
    law = PaymentLaw(severity, schedule)
    grid = np.array([0.0, 0.7, 1.5, 2.0, 2.7, 3.0, 4.5, 8.0])
    assert law.sf(grid) == pytest.approx([paying(severity, schedule, y) for y in grid], abs=1e-8)
    areas = [
        sum(
            integral(law.continuous_sf, c, d)
            for c, d in itertools.pairwise([a, *knots_between(schedule, a, b), b])
        )
        for a, b in itertools.pairwise(grid)
    ]
    assert law.continuous_areas(grid) == pytest.approx(areas, abs=1e-7)
    cuts = sorted({0.0, *schedule.starts, *severity.breakpoints})
    for power, ours in ((1, law.mean), (2, law.second_moment)):
        expected = sum(
            integral(lambda x: schedule(x) ** power * severity.pdf(x), a, b)  # noqa: B023
            for a, b in itertools.pairwise([*cuts, np.inf])
        )
        assert ours == pytest.approx(expected, rel=1e-6)
    _amounts, chances = law.atoms
    assert law.continuous_mass + chances.sum() == pytest.approx(1.0, abs=1e-14)


def test_a_mixture_keeps_its_atoms_and_its_density_apart():
    """A table mixed with a continuous law: the atoms carry their probabilities, the rest the rest."""
    mixture = Mixture(
        weights=[0.4, 0.6], parts=[SizeTable(sizes=[0, 5], probabilities=[0.5, 0.5]), Exponential(mean=2.0)]
    )
    law = PaymentLaw(mixture, Schedule.capped(7.0))
    amounts, chances = law.atoms
    assert amounts.tolist() == [0.0, 5.0, 7.0]
    assert chances == pytest.approx([0.2, 0.2, 0.6 * np.exp(-3.5)], rel=1e-13)
    assert law.continuous_mass == pytest.approx(0.6 * (1 - np.exp(-3.5)), rel=1e-13)
    assert law.continuous_sf(np.array([1.0, 6.0])) == pytest.approx(
        0.6 * (np.exp([-0.5, -3.0]) - np.exp(-3.5)), rel=1e-12
    )


def test_layers_of_a_lomax_in_exact_fractions():
    """Klugman, Panjer and Willmot, Loss Models, chapter 8 (value from memory, recomputed): Lomax(3, 2000),
    deductible 500, most paid 2500: mean 480, second moment 800,000, sd 754.72."""
    law = PaymentLaw(Lomax(alpha=3.0, scale=2000.0), Cover(deductible=500.0, limit=2500.0).event_schedule())
    limited = [Fraction(1000) * (1 - Fraction(2000, 2000 + x) ** 2) for x in (500, 3000)]
    assert law.mean == pytest.approx(float(limited[1] - limited[0]), rel=1e-13)
    assert law.mean == pytest.approx(480.0, rel=1e-13)
    assert law.second_moment == pytest.approx(800_000.0, rel=1e-12)
    assert np.sqrt(law.second_moment - law.mean**2) == pytest.approx(754.72, abs=0.005)


def test_moments_that_do_not_exist_are_infinite_and_layers_are_not():
    """Infinite mean: inf, never a number that looks finite; every finite layer has a cost."""
    law = PaymentLaw(Pareto(alpha=0.9, minimum=10.0), Schedule.identity())
    assert law.mean == np.inf
    assert law.second_moment == np.inf
    assert law.limited_mean(1000.0) == pytest.approx(Pareto(alpha=0.9, minimum=10.0).limited_mean(1000.0))
    assert PaymentLaw(Pareto(alpha=1.5, minimum=1.0), Schedule.identity()).second_moment == np.inf
    assert PaymentLaw(Pareto(alpha=1.5, minimum=1.0), Schedule.capped(9.0)).second_moment < 81.0


def test_the_far_tail_keeps_its_digits():
    """A layer far out: its mean payment to twelve digits, where limited means differ in their last."""
    law = PaymentLaw(Exponential(mean=1.0), Cover(deductible=40.0, limit=5.0).event_schedule())
    assert law.mean == pytest.approx(np.exp(-40) * (1 - np.exp(-5)), rel=1e-12, abs=0)
    assert law.paying == pytest.approx(np.exp(-40), rel=1e-12, abs=0)


def test_paying_more_than_the_loss_is_refused():
    """Two overlapping covers with shares above one in total leave less than nothing."""
    layer = Cover(deductible=1.0, limit=5.0).event_schedule()
    with pytest.raises(EngineError, match="pay more than the loss"):
        PaymentLaw(Exponential(mean=1.0), Schedule.identity() - layer.scaled(0.7) - layer.scaled(0.7) - layer)


@given(st.floats(1e-3, 1e6), st.floats(1e-3, 1e6))
@settings(derandomize=True, deadline=None, max_examples=200)
def test_no_limit_is_lost_to_rounding(deductible, limit):
    """d + l is rounded, so where the limit starts to act may lie a digit off; it must still act. (With
    d = ln 2, l = 2 ln 2 it once vanished.)"""
    for d, most in ((deductible, limit), (np.log(2), 2 * np.log(2))):
        schedule = Cover(deductible=d, limit=most).event_schedule()
        assert schedule.most == pytest.approx(most, rel=1e-12, abs=1e-15 * d)
        again = Schedule.capped(most / 3).after(schedule.after(Schedule.identity()))
        assert again.most == pytest.approx(most / 3, rel=1e-12, abs=1e-15 * d)
