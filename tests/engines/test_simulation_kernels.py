"""The compiled loops of the simulation: numpy's bits, the plain Python twins, ramps against schedules."""

import ast
import importlib.util
from pathlib import Path

import numpy as np
import pytest
from numpy.random.bit_generator import ISeedSequence

from lossagg.cover import Cover, Schedule
from lossagg.engines.search_table import search_table
from lossagg.engines.streams import block_state
from lossagg.engines.yearly import ramps
from lossagg.kernels import compile as compile_module
from lossagg.kernels import simulation as kernels


def state(seed=7):
    return block_state(seed, (1, 2), 0)


class Words(ISeedSequence):
    """Hands numpy's generator the words of one lane."""

    def __init__(self, words):
        self.words = words

    def generate_state(self, n_words, dtype=np.uint32):
        assert (n_words, dtype) == (3, np.uint64)
        return self.words


def numpys_lanes(seed, key, block):
    """The lanes by numpy alone: one SeedSequence, three words for each SFC64."""
    words = np.random.SeedSequence(seed, spawn_key=(*key, block)).generate_state(96, np.uint64)
    return [np.random.SFC64(Words(words[3 * lane : 3 * lane + 3])) for lane in range(32)]


def numpys_bits(number, seed=7):
    """Words of all lanes in turn."""
    lanes = [generator.random_raw(-(-number // 32)) for generator in numpys_lanes(seed, (1, 2), 0)]
    return np.stack(lanes, axis=1).ravel()[:number]


def numpys_state(generators):
    return np.stack([generator.state["state"]["state"] for generator in generators], axis=1)


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
    """Doty-Humphrey's SFC64 as numpy implements it: same state, same 53-bit numbers, lane by lane."""
    ours = np.empty(1000)
    kernels.draw_uniforms(state(), ours)
    np.testing.assert_array_equal(ours, ((numpys_bits(1000) >> np.uint64(11)).astype(float) + 0.5) * 2.0**-53)


def test_the_state_moves_as_numpys_does():
    """A number that is no multiple of the lanes uses up the words of all lanes up to the next multiple."""
    ours, theirs = state(), numpys_lanes(7, (1, 2), 0)
    kernels.draw_uniforms(ours, np.empty(3 * 32 + 1))
    for generator in theirs:
        generator.random_raw(4)
    np.testing.assert_array_equal(ours, numpys_state(theirs))


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
    for i, bits in enumerate(numpys_bits(2000)):
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


NO_SCALE, NONE_KEPT = np.empty(0), kernels.Kept(0, 0, np.empty(0, np.int64), np.empty(0))


def simulated(module, counts, years, *, room=20_000, scale=NO_SCALE, largest=2, kept=NONE_KEPT):
    """(annual sums and largest losses, notes, generator) of the small table, by the loops of a module."""
    pieces = np.array([[0, 0.0, np.inf, 1.0, 0.0], [1, 9.0, 20.0, 0.5, 2.0]])
    own, cursor = state(), np.zeros(3, np.int64)
    sums = module.Sums(pieces, largest, scale, np.zeros((3, counts.size)))
    table = module.SizeArrays(*small_table())
    noted = []
    while cursor[0] < years:
        notes = module.Notes(np.empty(room, np.int64), np.empty(room))
        found = module.add_years(own, table, sums, counts, years, cursor, notes, module.Kept(*kept))
        noted += list(zip(notes.year[:found].tolist(), notes.probability[:found].tolist(), strict=True))
    return sums.annual[:, :years], noted, own


@pytest.mark.parametrize("mean", [0.3, 3.0, 40.0, 400.0])
def test_years_compiled_and_plain_are_the_same(plain, mean):
    """Years with no loss or few, rectangles of many years, years by themselves, years above LONG."""
    number = {0.3: 1000, 3.0: 300, 40.0: 60, 400.0: 12}[mean]
    counts = np.random.default_rng(3).negative_binomial(2.0, 2.0 / (2.0 + mean), number)
    scale = np.random.default_rng(4).uniform(0.5, 2.0, number)
    ours, noted, own = simulated(kernels, counts, number, scale=scale)
    theirs, noted_plainly, plain_state = simulated(plain, counts, number, scale=scale)
    np.testing.assert_array_equal(ours, theirs)
    np.testing.assert_array_equal(own, plain_state)
    assert noted == noted_plainly
    if mean == 400.0:
        assert counts.max() > kernels.LONG > counts.min()


@pytest.mark.parametrize("mean", [0.3, 3.0, 40.0, 400.0])
def test_the_rectangles_hold_every_loss_once(mean):
    """Annual sums against the losses kept one by one, added up year by year; notes belong to the
    losses that are missing there."""
    counts = np.random.default_rng(3).negative_binomial(2.0, 2.0 / (2.0 + mean), 2000)
    place = np.cumsum(counts) - counts
    kept = kernels.Kept(0, 2000, place, np.full(counts.sum(), -1.0))
    annual, noted, _ = simulated(kernels, counts, 2000, room=10_000_000, kept=kept)
    losses = np.split(kept.sizes, place[1:])
    assert [int(np.isnan(own).sum()) for own in losses] == np.bincount(
        [year for year, _ in noted], minlength=2000
    ).tolist()
    assert not (kept.sizes == -1.0).any()
    losses = [np.nan_to_num(own) for own in losses]
    np.testing.assert_allclose(annual[0], [own.sum() for own in losses], rtol=1e-12)
    paid = [sum(0.5 * (min(x, 20.0) - 9.0) + 2.0 for x in own if x > 9.0) for own in losses]
    np.testing.assert_allclose(annual[1], paid, rtol=1e-12)
    np.testing.assert_array_equal(annual[2], [own.max(initial=0.0) for own in losses])
    assert len(set(kept.sizes[~np.isnan(kept.sizes)])) > 0.99 * (~np.isnan(kept.sizes)).sum()


def test_events_are_added_to_their_years(plain):
    for module in (kernels, plain):
        pieces = np.array([[0, 0.0, np.inf, 1.0, 0.0], [1, 9.0, 20.0, 0.5, 2.0]])
        for scale, factor in ((NO_SCALE, 1.0), (np.full(2, 2.0), 2.0)):
            sums = module.Sums(pieces, 2, scale, np.zeros((3, 2)))
            module.add_events(np.array([1, 0]), np.array([5.0, 12.0]) / factor, sums)
            np.testing.assert_array_equal(sums.annual, [[12.0, 5.0], [3.5, 0.0], [12.0, 5.0]])


def test_years_are_sorted_by_count(plain):
    """Against numpy's stable sort, with empty years few or many, and years above LONG taken as one kind."""
    for mean in (0.2, 3.0, 500.0):
        counts = np.random.default_rng(5).negative_binomial(2.0, 2.0 / (2.0 + mean), 997)
        for module in (kernels, plain):
            order, ends, some = np.empty(997, np.int64), np.zeros(513, np.int64), np.empty(997, np.int64)
            number = module.sort_tile(counts, order, ends, some)
            expected = np.argsort(np.minimum(counts, 512), kind="stable")
            np.testing.assert_array_equal(order[:number], expected[997 - number :])
            sparse = (counts == 0).sum() * 4 > 997
            assert number == (counts > 0).sum() if sparse else number == 997
            for n in range(1, min(counts.max(), 511) + 1):
                assert ends[n] == (counts <= n).sum() - (997 - number)


def test_full_notes_interrupt_and_resume():
    """When the notes are full the loop stops between two buffers and goes on to the same end."""
    counts = np.full(8192, 2)
    counts[100:110] = 5000
    whole, all_noted, own = simulated(kernels, counts, 8192, room=1_000_000)
    parts, noted, after = simulated(kernels, counts, 8192, room=kernels.BUFFER + 100)
    np.testing.assert_array_equal(whole, parts)
    np.testing.assert_array_equal(own, after)
    assert all_noted == noted
    assert len(noted) > 10_000


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
    """Each loss, thresholds themselves included; the summation loop agrees with the single loss."""
    schedule = SCHEDULES[name]
    sizes = np.array([0.0, 1e-300, 9.999, 10.0, np.nextafter(10, 11), 17.0, 25.0, 30.0, 31.0, 1e300])
    pieces = np.array(ramps(schedule, 0)).reshape(-1, 5)
    single = [sum(kernel(size, piece) for piece in pieces) for size in sizes]
    np.testing.assert_allclose(single, schedule(sizes), rtol=1e-14)
    for width in (10, 4, 1):
        total, expected = np.zeros(width), np.zeros(width)
        for piece in pieces:
            kernels.add_rows(sizes, width, piece, total)
        np.add.at(expected, np.arange(10) % width, schedule(sizes))
        np.testing.assert_allclose(total, expected, rtol=1e-14, atol=1e-299)


@pytest.mark.parametrize("width", [1, 2, 3, 7, 8, 9, 15, 31, 32, 33, 100])
def test_columns_added_together_and_one_by_one_are_the_same(plain, width):
    """Eight columns at a time, then four, two and one: every bit as in the plain loop, and nothing else
    is written, whatever the number of columns and an incomplete last row."""
    random = np.random.default_rng(width)
    sizes = np.exp(random.normal(3.0, 4.0, 5 * width + width // 2))
    before = random.normal(size=width + 8)
    for ramp in ([0.0, 10.0, 60.0, 1.0, 0.0], [0.0, 0.0, np.inf, -0.3, 0.0], [0.0, 10.0, 40.0, 0.5, 10.0]):
        total, plain_total = before.copy(), before.copy()
        kernels.add_rows(sizes, width, np.array(ramp), total[:width])
        plain.add_rows(sizes, width, np.array(ramp), plain_total[:width])
        np.testing.assert_array_equal(total, plain_total)
        np.testing.assert_array_equal(total[width:], before[width:])


def test_streams_are_distinct_and_numpys():
    """Seed, line and block each change the stream, no two lanes are the same, and every lane is seeded
    as numpy seeds it, so that a change of the derivation, which changes every figure, cannot go unnoticed."""
    states = set()
    for seed in (0, 1, 2**32, 2**64 - 1):
        for key in ((1, 2), (2, 1)):
            for block in (0, 1, 300_000):
                lanes = block_state(seed, key, block)
                np.testing.assert_array_equal(lanes, numpys_state(numpys_lanes(seed, key, block)))
                states |= {tuple(lane) for lane in lanes.T}
    assert len(states) == 4 * 2 * 3 * 32
    sequence = np.random.SeedSequence(1, spawn_key=(1, 2, 0))
    np.testing.assert_array_equal(
        block_state(1, (1, 2), 0)[:, 0], np.random.SFC64(sequence).state["state"]["state"]
    )


def test_seeding_compiled_and_plain_are_the_same(plain):
    words = np.array([1, 2, 0, 0, 3, 4, 5], dtype=np.uint64)
    lanes, plain_lanes = np.empty((4, 32), np.uint64), np.empty((4, 32), np.uint64)
    kernels.seed_lanes(words, lanes)
    plain.seed_lanes(words, plain_lanes)
    np.testing.assert_array_equal(lanes, plain_lanes)
