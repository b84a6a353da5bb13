"""The compiled loops of the simulation: numpy's bits, the plain Python twins, ramps against schedules."""

import ast
import importlib.util
from pathlib import Path

import numpy as np
import pytest

from lossagg.cover import Cover, Schedule
from lossagg.engines.search_table import search_table
from lossagg.engines.streams import block_state
from lossagg.engines.yearly import ramps
from lossagg.kernels import compile as compile_module
from lossagg.kernels import simulation as kernels


def state(seed=7):
    return np.random.SFC64(seed).state["state"]["state"].copy()


@pytest.fixture
def plain(monkeypatch):
    """The kernels' file as plain Python, down to the innermost call."""
    monkeypatch.setattr(compile_module, "compiled", lambda function: function)
    spec = importlib.util.spec_from_file_location("plain_kernels", kernels.__file__)
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    with np.errstate(over="ignore"):
        yield module


def small_table():
    """Two octaves of two cells; one cell of each half and everything beyond the table flagged; one
    cell of the lower half in 64 parts, the last of them flagged."""
    cubics = np.arange((10 + 64) * 4, dtype=float).reshape(74, 4) + 1.0
    cubics[[0, 2, 5, 9, 6, 73]] = np.nan
    cubics[6, 1] = 10
    none = np.empty(0)
    return kernels.SizeArrays(cubics, 1, 2, np.empty(0, np.int64), none, none)


def test_kernels_do_not_call_across_files():
    """numba's cache on disk notices a change of the kernel's own file only: a loop that calls a loop
    of another file would go on using the old one."""
    for path in Path(kernels.__file__).parent.glob("*.py"):
        tree = ast.parse(path.read_text(encoding="utf-8"))
        imported = {node.module for node in ast.walk(tree) if isinstance(node, ast.ImportFrom)}
        within = {name for name in imported if name and name.startswith("lossagg.kernels")}
        assert within <= {"lossagg.kernels.compile"}, path.name


def test_the_generator_gives_numpys_own_bits():
    """Doty-Humphrey's SFC64 as numpy implements it: same state, same 53-bit numbers."""
    ours = np.empty(1000)
    kernels.draw_uniforms(state(), ours)
    bits = np.random.SFC64(7).random_raw(1000)
    np.testing.assert_array_equal(ours, ((bits >> np.uint64(11)).astype(float) + 0.5) * 2.0**-53)


def test_the_state_moves_as_numpys_does():
    """A stream used partly by the loops and partly by numpy has no overlap and no gap."""
    generator = np.random.SFC64(7)
    generator.random_raw(17)
    ours = state()
    kernels.draw_uniforms(ours, np.empty(17))
    np.testing.assert_array_equal(ours, generator.state["state"]["state"])


def test_draws_compiled_and_plain_are_the_same(plain):
    first, survival = search_table(np.array([0.7, 0.4, 0.05, 0.0]))
    discrete = kernels.SizeArrays(np.empty((0, 4)), 0, 0, first, survival, np.array([0.0, 1.5, 2.0, 9.0]))
    for table in (small_table(), discrete):
        outcomes = []
        for kernel in (kernels.draw_sizes, plain.draw_sizes):
            sizes, flagged, probability = np.empty(500), np.empty(500, np.int64), np.empty(500)
            own = state()
            found = kernel(own, table, sizes, flagged, probability, 0)
            outcomes.append((sizes, flagged[:found], probability[:found], own))
        for compiled, interpreted in zip(*outcomes, strict=True):
            np.testing.assert_array_equal(compiled, interpreted)
        assert (outcomes[0][1].size > 0) == (table is not discrete)
    compiled, interpreted = np.empty(50), np.empty(50)
    kernels.draw_uniforms(state(), compiled)
    plain.draw_uniforms(state(), interpreted)
    np.testing.assert_array_equal(compiled, interpreted)


def test_a_draw_lands_in_the_cell_of_its_probability():
    """Cells, halves and positions by plain arithmetic on numpy's own bits, not by bit patterns."""
    table = small_table()
    sizes, flagged, probability = np.empty(2000), np.empty(2000, np.int64), np.empty(2000)
    found = kernels.draw_sizes(state(), table, sizes, flagged, probability, 0)
    expected, missing = [], []
    for i, bits in enumerate(np.random.SFC64(7).random_raw(2000)):
        bits = int(bits)
        lower, j = bits >> 63, (bits >> 11) & (2**52 - 1)
        t = (2 * j + 1) / 2**54
        row = 0
        position = 0.0
        for k, (left, width) in enumerate(
            ((1 / 8, 1 / 16), (3 / 16, 1 / 16), (1 / 4, 1 / 8), (3 / 8, 1 / 8))
        ):
            if left <= t < left + width:
                row, position = k + 1, (t - left) / width
        cubic = table.cubics[row + 5 * lower]
        if row + 5 * lower == 6:
            cubic = table.cubics[10 + int(64 * position)]
            position = 64 * position - int(64 * position)
        if np.isnan(cubic[0]):
            missing.append((i, -t if lower else t))
            expected.append(0.0)
        else:
            expected.append(float(np.polyval(cubic[::-1], position)))
    np.testing.assert_allclose(sizes, expected, rtol=1e-14)
    assert list(zip(flagged[:found].tolist(), probability[:found].tolist(), strict=True)) == missing


@pytest.mark.parametrize("mean", [0.3, 3.0, 3000.0])
def test_years_compiled_and_plain_are_the_same(plain, mean):
    """Sparse years, ordinary years, and years longer than the buffer."""
    number = {0.3: 400, 3.0: 300, 3000.0: 3}[mean]
    counts = np.random.default_rng(3).poisson(mean, number)
    pieces = np.array([[0, 0.0, np.inf, 1.0, 0.0], [1, 9.0, 20.0, 0.5, 2.0]])
    outcomes = []
    for kernel in (kernels.add_years, plain.add_years):
        annual = np.zeros((2, number))
        flagged, probability = np.empty(20_000, np.int64), np.empty(20_000)
        own = state()
        after, found = kernel(own, small_table(), pieces, counts.copy(), 0, annual, flagged, probability)
        assert after == number
        outcomes.append((annual, flagged[:found].copy(), probability[:found].copy(), own))
    for compiled, interpreted in zip(*outcomes, strict=True):
        np.testing.assert_array_equal(compiled, interpreted)
    assert np.all(np.diff(outcomes[0][1]) >= 0)
    events = np.array([5.0, 12.0]), np.array([1, 0])
    sums = [np.zeros((2, 2)), np.zeros((2, 2))]
    kernels.add_events(events[1], events[0], pieces, sums[0])
    plain.add_events(events[1], events[0], pieces, sums[1])
    np.testing.assert_array_equal(*sums)
    np.testing.assert_array_equal(sums[0], [[12.0, 5.0], [3.5, 0.0]])


def test_full_notes_interrupt_and_resume():
    """When the notes are full the loop stops between two buffers and goes on to the same end."""
    counts = np.full(6000, 2)
    pieces = np.array([[0, 0.0, np.inf, 1.0, 0.0]])
    whole, parts = np.zeros((1, 6000)), np.zeros((1, 6000))
    years_noted = []
    for annual, room in ((whole, 50_000), (parts, 5000)):
        own, left, year, noted = state(), counts.copy(), 0, []
        while year < 6000:
            flagged, probability = np.empty(room, np.int64), np.empty(room)
            year, found = kernels.add_years(
                own, small_table(), pieces, left, year, annual, flagged, probability
            )
            noted += list(zip(flagged[:found], probability[:found], strict=True))
        years_noted.append(noted)
    np.testing.assert_array_equal(whole, parts)
    assert years_noted[0] == years_noted[1]
    assert len(years_noted[0]) > 5000


SCHEDULES = {
    "identity": Schedule.identity(),
    "layer": Cover(deductible=10.0, limit=15.0).event_schedule(),
    "franchise": Cover(deductible=10.0, limit=30.0, franchise=True).event_schedule(),
    "kept under a franchise": Cover(deductible=10.0, franchise=True).retained_schedule(),
    "left by a shared layer": Schedule.identity()
    - Cover(deductible=10.0, limit=15.0).event_schedule().scaled(0.4),
    "nothing": Schedule.capped(0.0),
}


@pytest.mark.parametrize("name", SCHEDULES)
@pytest.mark.parametrize("kernel", [kernels.paid_of, kernels.paid_of.py_func])
def test_ramps_pay_what_the_schedule_pays(name, kernel):
    """Each loss, thresholds themselves included; both summation loops agree with the single loss."""
    schedule = SCHEDULES[name]
    sizes = np.array([0.0, 1e-300, 9.999, 10.0, np.nextafter(10, 11), 17.0, 25.0, 30.0, 31.0, 1e300])
    pieces = np.array(ramps(schedule, 0)).reshape(-1, 5)
    single = [sum(kernel(size, piece) for piece in pieces) for size in sizes]
    np.testing.assert_allclose(single, schedule(sizes), rtol=1e-14)
    loops, sparse = np.zeros((1, 10)), np.zeros((1, 10))
    for piece in pieces:
        kernels.add_ramp(sizes, np.ones(10, np.int64), 0, piece, loops)
        kernels.add_sparse(sizes, np.arange(10), piece, sparse)
    np.testing.assert_allclose(loops[0], schedule(sizes), rtol=1e-14)
    np.testing.assert_allclose(sparse[0], schedule(sizes), rtol=1e-14)


def test_streams_are_distinct_and_stable():
    """Seed, line and block each change the stream; the state for one case is pinned, so that a
    change of the derivation, which changes every simulated figure, cannot go unnoticed."""
    states = [
        tuple(block_state(seed, key, block))
        for seed in (0, 1, 2**64 - 1)
        for key in ((1, 2), (2, 1))
        for block in (0, 1, 300_000)
    ]
    assert len(set(states)) == len(states)
    sequence = np.random.SeedSequence(1, spawn_key=(1, 2, 0))
    np.testing.assert_array_equal(
        block_state(1, (1, 2), 0), np.random.SFC64(sequence).state["state"]["state"]
    )
