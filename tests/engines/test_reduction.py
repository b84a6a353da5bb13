"""Annual amounts reduced as they come, against the same amounts whole."""

import importlib.util
import itertools

import numpy as np
import pytest
from scipy import stats

from lossagg.engines.moments import Moments, MomentTree
from lossagg.engines.reduced import ReducedAnnualLoss
from lossagg.engines.reduction import RELATIVE_ERROR, Reduction
from lossagg.engines.sampled import SimulatedAnnualLoss
from lossagg.kernels import compile as compile_module
from lossagg.kernels import reduction as kernels

LEVELS = (0.01, 0.3, 0.5, 0.9, 0.99, 0.995, 0.9999)
RNG = np.random.default_rng(11)
LIMITED = np.minimum(np.maximum(RNG.lognormal(10.0, 2.0, 200_000) - 20_000.0, 0.0), 100_000.0)
SAMPLES = {
    "lognormal": RNG.lognormal(10.0, 2.0, 200_000),
    "a layer with years at zero and at its limit": LIMITED,
    "few distinct amounts": RNG.integers(0, 5, 200_000) * 1000.0,
    "tiny and huge amounts": 10.0 ** RNG.uniform(-200.0, 200.0, 200_000),
    "one amount": np.full(200_000, 12.5),
    "nothing": np.zeros(200_000),
}


def reduced(amounts, *, largest=5000, block=8192, order=None, most=np.inf):
    reduction = Reduction(most, largest)
    parts = np.split(amounts, np.arange(block, amounts.size, block))
    for number in order if order is not None else range(len(parts)):
        reduction.add(number, parts[number])
    return ReducedAnnualLoss(reduction.result(), most=most)


@pytest.mark.parametrize("name", SAMPLES)
def test_quantiles_are_within_the_stated_error(name):
    """One part in 4,096 in the body, exact among the largest; the bounds hold the exact amount."""
    whole, rest = SimulatedAnnualLoss(SAMPLES[name]), reduced(SAMPLES[name])
    for level in LEVELS:
        exact = whole.value_at_risk(level)
        assert rest.value_at_risk(level) == pytest.approx(exact, rel=RELATIVE_ERROR, abs=0.0)
        rank = int(np.ceil(level * whole.years))
        _, low, high = rest.amount_at(rank)
        assert low <= whole.ordered[rank - 1] <= high
        if level >= 0.99:
            assert rest.value_at_risk(level) == exact


@pytest.mark.parametrize("name", SAMPLES)
def test_exceedance_is_within_one_cell(name):
    whole, rest = SimulatedAnnualLoss(SAMPLES[name]), reduced(SAMPLES[name])
    x = np.quantile(SAMPLES[name], [0.0, 0.2, 0.5, 0.9, 0.999, 1.0])
    for amount in np.concatenate((x, 0.9 * x, 1.1 * x, [-1.0, 0.0])):
        cell = abs(amount) * RELATIVE_ERROR
        assert whole.sf(amount + cell) <= rest.sf(amount) <= whole.sf(amount - cell)


@pytest.mark.parametrize("name", ["lognormal", "a layer with years at zero and at its limit", "one amount"])
def test_means_and_errors_are_those_of_the_whole(name):
    most = 100_000.0 if name.startswith("a layer") else np.inf
    whole = SimulatedAnnualLoss(SAMPLES[name], most=most)
    rest = reduced(SAMPLES[name], most=most)
    assert rest.years == whole.years
    assert rest.mean() == pytest.approx(whole.mean(), rel=1e-13)
    assert rest.sd() == pytest.approx(whole.sd(), rel=1e-12, abs=1e-12)
    assert rest.standard_error("sd") == pytest.approx(whole.standard_error("sd"), rel=1e-9, abs=1e-12)
    assert rest.attachment_probability() == whole.attachment_probability()
    assert rest.exhaustion_probability() == whole.exhaustion_probability()
    for level in (0.5, 0.9, 0.995):
        assert rest.tail_value_at_risk(level) == pytest.approx(whole.tail_value_at_risk(level), rel=1e-5)
        assert rest.standard_error("tail_value_at_risk", level) == pytest.approx(
            whole.standard_error("tail_value_at_risk", level), rel=1e-3, abs=1e-9
        )
        low, high = rest.accuracy("value_at_risk", level)
        exact = whole.accuracy("value_at_risk", level)
        assert low <= exact[0] * (1 + 1e-12)
        assert high >= exact[1] * (1 - 1e-12)
        assert high - low <= exact[1] - exact[0] + 3 * RELATIVE_ERROR * exact[1]
    for low, high in ((0.0, 30_000.0), (5000.0, 1e5), (20_000.0, np.inf)):
        assert rest.layer_mean(low, high) == pytest.approx(whole.layer_mean(low, high), rel=1e-4)
        assert rest.layer_second_moment(low, high) == pytest.approx(
            whole.layer_second_moment(low, high), rel=3e-4
        )


def test_the_order_of_the_blocks_does_not_reach_the_bytes():
    amounts = SAMPLES["lognormal"]
    blocks = -(-amounts.size // 8192)
    first = reduced(amounts).reduced
    for order in (range(blocks - 1, -1, -1), np.random.default_rng(1).permutation(blocks)):
        other = reduced(amounts, order=order).reduced
        assert other.moments == first.moments
        for name in ("largest", "count", "low", "high"):
            np.testing.assert_array_equal(getattr(other, name), getattr(first, name))


def test_fewer_years_than_are_kept_are_kept_whole():
    amounts = SAMPLES["a layer with years at zero and at its limit"][:3000]
    whole, rest = SimulatedAnnualLoss(amounts), reduced(amounts)
    np.testing.assert_array_equal(rest.reduced.largest, whole.ordered)
    assert [rest.value_at_risk(level) for level in LEVELS] == [whole.value_at_risk(level) for level in LEVELS]


def test_moments_against_scipy():
    """Combined along the tree, an odd number of unequal blocks, on top of a large constant."""
    values = 1e9 + np.random.default_rng(5).gamma(0.5, 100.0, 10_000)
    tree = MomentTree()
    for block, part in reversed(list(enumerate(np.split(values, [1, 3000, 3100, 7000, 9999])))):
        tree.add(block, Moments.of(part))
    total = tree.total()
    centred = values - values.mean()
    assert total.number == 10_000
    assert total.mean == pytest.approx(values.mean(), rel=1e-15)
    for power, found in ((2, total.second), (3, total.third), (4, total.fourth)):
        assert found / 10_000 == pytest.approx(stats.moment(centred, power), rel=1e-6)


def test_only_what_waits_is_held():
    """Blocks in order: at most one subtree of each height waits, however many blocks there are."""
    tree = MomentTree()
    for block in range(1023):
        tree.add(block, Moments(1, float(block), 0.0, 0.0, 0.0))
    assert len(tree.waiting) == 10
    assert tree.total().mean == pytest.approx(511.0)


def test_cells_compiled_and_plain_are_the_same(monkeypatch):
    monkeypatch.setattr(compile_module, "compiled", lambda function: function)
    spec = importlib.util.spec_from_file_location("plain_reduction", kernels.__file__)
    plain = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(plain)
    amounts = np.concatenate((RNG.uniform(0.9, 2.1, 500), [0.0, 1.0, np.nextafter(2.0, 0.0), 2.0]))
    outcomes = []
    for module in (kernels, plain):
        first = module.cell_of(0.5)
        count, low, high = np.zeros(3 * 4096, np.int64), np.full(3 * 4096, np.inf), np.zeros(3 * 4096)
        module.add_to_cells(amounts, first, count, low, high)
        outcomes.append((count, low, high))
        cells = np.flatnonzero(count) + first
        edges = [2.0 ** (cell // 4096 - 1023) * (1 + cell % 4096 / 4096) for cell in cells]
        assert all(low[c - first] >= edge for c, edge in zip(cells, edges, strict=True))
        assert all(high[c - first] < edge * (1 + 1 / 4096) for c, edge in zip(cells, edges, strict=True))
        assert count.sum() == np.count_nonzero(amounts)
    for compiled, interpreted in itertools.zip_longest(*outcomes):
        np.testing.assert_array_equal(compiled, interpreted)
