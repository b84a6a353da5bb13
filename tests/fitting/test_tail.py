"""The tail: thresholds chosen by two published rules, points of the plots, quantiles beyond the losses."""

import importlib.util
from pathlib import Path

import numpy as np
import pytest
from scipy import optimize

from lossagg.errors import FitError, InputError
from lossagg.fitting import goodness, tail_points, tail_quantile, threshold_choices
from lossagg.fitting.quadratic_form import darling_p_value, darling_weights, estimation_loss, exceedance
from lossagg.fitting.tail import Large, TailPoint, hill, mean_excess, tail_fit
from lossagg.fitting.threshold import distance_rule, forward_stop, sequential_rule

NONE = np.zeros(0, dtype=bool)


@pytest.fixture(scope="module")
def danish():
    script = Path(__file__).parents[2] / "validation" / "danish.py"
    spec = importlib.util.spec_from_file_location("danish_losses_only", script)
    module = importlib.util.module_from_spec(spec)
    import sys

    sys.modules[spec.name] = module
    spec.loader.exec_module(module)
    return np.sort(module.danish_losses())


def power_losses(count, index, seed):
    return 1000 * np.random.default_rng(seed).random(count) ** (-1 / index)


# McNeil, Frey & Embrechts, Quantitative Risk Management: the peaks-over-threshold formulas at u = 100, shape
# .4, scale 50, 50 of 1000 above (own numbers on the published formula).
PEAKS = {0.99: (212.957, 371.595), 0.995: (288.986, 498.310), 0.999: (572.720, 971.201)}


@pytest.mark.parametrize("level", PEAKS)
def test_peaks_over_threshold_quantiles(level):
    found = tail_quantile(level, threshold=100, shape=0.4, scale=50, exceeding=50 / 1000)
    assert round(found.value_at_risk, 3) == PEAKS[level][0]
    assert round(found.expected_shortfall, 3) == PEAKS[level][1]


def test_peaks_over_threshold_at_the_edges():
    exponential = tail_quantile(0.99, threshold=100, shape=0.0, scale=50, exceeding=0.05)
    assert exponential.value_at_risk == pytest.approx(100 + 50 * np.log(5))
    assert exponential.expected_shortfall == pytest.approx(exponential.value_at_risk + 50)
    assert (
        tail_quantile(0.99, threshold=100, shape=1.0, scale=50, exceeding=0.05).expected_shortfall == np.inf
    )
    with pytest.raises(InputError, match=r"below the tail's threshold; seen: 0.9. Ask for a level of 0.95"):
        tail_quantile(0.9, threshold=100, shape=0.4, scale=50, exceeding=0.05)


# Danish fire losses, Hill's index with the next smaller loss as threshold (Hill 1975; Resnick 1997, ASTIN
# Bulletin 27, finds about 1.4 from the plot): own numbers on the published formula and data set.
HILL = {
    36: 1.81935600898,
    50: 1.97193357569,
    109: 1.61727466425,
    200: 1.36298378677,
    500: 1.42160515361,
    1000: 1.39392260187,
}
HILL_FROM_NEXT = {
    36: 1.72757291075,
    50: 1.86549472635,
    109: 1.58423857862,
    200: 1.36201551171,
    500: 1.42078489059,
    1000: 1.39392260187,
}


@pytest.mark.parametrize("count", HILL)
def test_hill_of_the_danish_losses(danish, count):
    largest = danish[-count:]
    marks = np.zeros(count, dtype=bool)
    next_smaller = float(danish[-count - 1])
    assert 1 / hill(largest, marks, next_smaller) == pytest.approx(HILL_FROM_NEXT[count], rel=1e-9)
    # The other convention, from the smallest of the losses themselves, has k - 1 excesses over k.
    from_itself = hill(largest[1:], marks[1:], float(largest[0])) * (count - 1) / count
    assert 1 / from_itself == pytest.approx(HILL[count], rel=1e-9)


def test_tail_of_the_danish_losses_over_ten(danish):
    """McNeil 1997: shape .50 (s.e. .14) over 10; the profile interval is not symmetric about it."""
    point = tail_points(danish, thresholds=[10.0])[0]
    assert point.excesses == 109
    assert point.shape == pytest.approx(0.496985802367, rel=1e-7)
    assert point.scale == pytest.approx(6.97546804808, rel=1e-7)
    assert point.high - point.shape > point.shape - point.low
    assert point.mean_excess == pytest.approx(np.mean(danish[danish > 10] - 10))


def test_rules_on_the_danish_losses(danish):
    """The whole sample is no generalized Pareto tail; both rules choose a threshold above its start, and the
    shapes from there on lie in each other's intervals."""
    points, choices = threshold_choices(danish)
    assert points[0].p_value < 0.01
    for choice in choices:
        assert 1.0 < choice.threshold < 10
        assert choice.excesses == np.sum(danish > choice.threshold)
    passed = [point for point in points if point.threshold >= choices[0].threshold]
    assert all(point.low < 0.67 < point.high for point in passed)


def test_anderson_darling_given_in_advance_has_the_published_points():
    """Anderson & Darling 1954; Marsaglia & Marsaglia 2004: 1.933, 2.492, 3.0775 and 3.878 (value from memory,
    recomputed); the weights are 1 / (j (j + 1))."""
    weights = darling_weights()
    assert weights[:4] == pytest.approx([1 / 2, 1 / 6, 1 / 12, 1 / 20], rel=3e-3)
    for point, level in (
        (1.93295783274, 0.1),
        (2.49236716005, 0.05),
        (3.07746417871, 0.025),
        (3.87812502161, 0.01),
    ):
        assert exceedance(point, weights) == pytest.approx(level, abs=1e-4)


@pytest.mark.parametrize(
    ("level", "point"), [(0.5, 0.397), (0.25, 0.569), (0.1, 0.796), (0.05, 0.974), (0.01, 1.409)]
)
def test_anderson_darling_of_a_fitted_generalized_pareto_law(level, point):
    """Choulakian & Stephens 2001, Technometrics 43, points for shape 0 (value from memory, recomputed, and
    simulated below)."""
    weights = darling_weights(estimation_loss(0.0))
    found = optimize.brentq(lambda x: exceedance(x, weights) - level, 0.1, 3)
    assert found == pytest.approx(point, abs=1.5e-3)


@pytest.mark.parametrize("shape", [0.5, -0.2])
def test_p_values_of_the_distance_are_uniform_on_simulated_tails(shape):
    rng = np.random.default_rng([5, int(10 * shape + 10)])
    p_values = []
    for _ in range(100):
        excess = (rng.random(100) ** -shape - 1) / shape
        fit = tail_fit(excess, np.zeros(100, dtype=bool), 0.0)
        distance = goodness(excess, fit.model).anderson_darling
        p_values.append(darling_p_value(distance, fit.parameters["shape"]))
    for level in (0.1, 0.5):
        share = np.mean(np.array(p_values) < level)
        assert abs(share - level) < 4 * np.sqrt(level * (1 - level) / 100)


def test_forward_stop_by_hand():
    """G'Sell et al. 2016: the running mean of -log(1 - p) may exceed the level and come back under it."""
    p_values = [0.001, 0.2, 0.01, 0.012, 0.9]
    means = np.cumsum(-np.log1p(-np.array(p_values))) / np.arange(1, 6)
    assert means[1] > 0.1 > means[3]
    assert forward_stop(p_values, 0.1) == 4
    assert forward_stop([0.5, 0.6], 0.1) == 0
    assert forward_stop([0.0, 1.0], 0.1) == 1


def test_the_sequential_rule_finds_a_tail_that_begins_late():
    """Uniform losses up to 1000 and a power tail above: thresholds in the body are rejected."""
    rng = np.random.default_rng(3)
    losses = np.concatenate([rng.uniform(600, 1000, 1500), power_losses(300, 1.5, 4)])
    choice = sequential_rule(tail_points(losses))
    assert choice.threshold > 950
    assert "rejected from below" in choice.reason


def test_minimum_distance_finds_where_the_power_law_begins():
    rng = np.random.default_rng(7)
    losses = np.concatenate([rng.uniform(100, 1000, 1200), power_losses(800, 1.5, 8)])
    choice = distance_rule(losses)
    assert 900 < choice.threshold < 2500


def test_rules_say_why_they_cannot_choose():
    points, choices = threshold_choices(power_losses(25, 2.0, 1))
    assert points == []
    assert all("too few losses" in choice.reason and choice.threshold is None for choice in choices)
    losses = power_losses(200, 1.2, 2)
    stopped = losses > 20_000
    points, (sequential, distance) = threshold_choices(np.minimum(losses, 20_000), None, stopped, draws=0)
    assert "policy limits" in sequential.reason
    points, (drawn, _) = threshold_choices(np.minimum(losses, 20_000), None, stopped, most=4, draws=19)
    assert all(0 < point.p_value <= 1 for point in points)
    assert drawn.threshold is not None
    assert distance.threshold is not None
    bad = [TailPoint(1.0, 50, 0.1, 0.0, 0.2, 1.0, 1.0, 1.0, 9.0, 1e-9)] * 3
    assert "all 3 thresholds are rejected" in sequential_rule(bad).reason


def test_thresholds_lie_where_every_loss_was_recorded():
    losses = power_losses(300, 1.5, 5)
    thresholds = np.where(np.arange(300) % 2, 1000.0, 1800.0)
    kept = losses >= thresholds
    large = Large.of(losses[kept], thresholds[kept], None)
    assert large.floor == 1800.0
    points = tail_points(losses[kept], thresholds[kept])
    assert min(point.threshold for point in points) >= 1800.0
    with pytest.raises(InputError, match="below the largest reporting threshold"):
        tail_points(losses[kept], thresholds[kept], thresholds=[1500.0])


def test_stopped_losses_count_as_larger():
    """Hill with censoring divides by uncensored losses; the mean excess is the area under Kaplan-Meier."""
    amounts = np.array([2.0, 3.0, 4.0, 4.0])
    marks = np.array([False, True, False, True])
    assert hill(amounts, marks, 1.0) == pytest.approx(np.log(amounts).sum() / 2)
    # Survival 1 to 2, 3/4 to 4 (the stop at 3 ends nothing).
    assert mean_excess(amounts, marks, 1.0) == pytest.approx(1 + 0.75 * 2)
    free = power_losses(400, 1.5, 9)
    stopped = np.minimum(free, 5000)
    shape = tail_points(stopped, None, free > 5000, thresholds=[1500.0])[0].shape
    assert shape == pytest.approx(tail_points(free, thresholds=[1500.0])[0].shape, abs=0.25)


def test_a_tail_of_four_losses_is_refused():
    with pytest.raises(FitError, match="too few uncensored losses"):
        tail_fit(np.array([11.0, 12, 15, 30]), np.zeros(4, dtype=bool), 10.0)
