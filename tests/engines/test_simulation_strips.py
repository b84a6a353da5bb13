"""Rare losses, scattered over strips of years: the same law as year by year, each loss in one year."""

import importlib.util

import numpy as np
import pytest
from scipy import stats

from lossagg.cover import Cover
from lossagg.engines.blocks import (
    MOST_SCATTERED,
    block_events,
    line_sums,
    prepare_line,
    run_block,
    scatters_alone,
)
from lossagg.engines.book import Book, Line, PlacedCover, Subject
from lossagg.engines.by_line import LARGEST_GROSS
from lossagg.engines.dependence import SharedFactor
from lossagg.engines.joint import joint_block
from lossagg.engines.search_table import count_guide
from lossagg.engines.simulation import Simulation
from lossagg.engines.streams import BLOCK_YEARS, block_entropy, block_state
from lossagg.engines.yearly import LARGEST, LOSS
from lossagg.families import Lognormal, Poisson, SizeTable
from lossagg.kernels import compile as compile_module
from lossagg.kernels import simulation as kernels

SIZE = Lognormal(mu=9.0, sigma=1.5)
RATES = [1e-4, 0.05, 0.5, MOST_SCATTERED]


def prepared(rate, size=SIZE, covers=(), subjects=None, dependences=()):
    line = Line(name="quay", frequency=Poisson(mean=rate), severity=size)
    book = Book(lines=(line,), covers=covers, dependences=dependences)
    return book, prepare_line(line, book, subjects or book.subjects)


def events(line, block, first=0, last=BLOCK_YEARS, seed=3):
    return block_events(line, seed=seed, block=block, first=first, last=last)


def test_only_rare_poisson_losses_are_scattered():
    assert prepared(MOST_SCATTERED)[1].strips is not None
    assert prepared(np.nextafter(MOST_SCATTERED, 2.0))[1].strips is None


@pytest.mark.parametrize("rate", RATES)
def test_counts_of_years_are_poisson_and_independent(rate):
    """Frequencies of the counts, the dispersion of sums of neighbours, of the halves of a strip and of
    whole strips, all against the Poisson law, in 20 blocks."""
    _, line = prepared(rate)
    counts = np.concatenate([events(line, block)[0] for block in range(20)])
    most = int(stats.poisson.isf(10.0 / counts.size, rate)) + 1
    seen = np.bincount(np.minimum(counts, most), minlength=most + 1)
    chances = stats.poisson.pmf(np.arange(most), rate)
    expected = counts.size * np.append(chances, 1.0 - chances.sum())
    assert (
        stats.chisquare(
            seen[expected > 5],
            expected[expected > 5] * seen[expected > 5].sum() / expected[expected > 5].sum(),
        ).pvalue
        > 1e-4
    )
    for together in (1, 2, kernels.STRIP // 2, kernels.STRIP, 2 * kernels.STRIP):
        sums = counts.reshape(-1, together).sum(axis=1)
        # A Poisson sample's dispersion statistic is chi-squared (Fisher 1950, Biometrics 6).
        statistic = ((sums - rate * together) ** 2 / (rate * together)).sum()
        spread = np.sqrt(sums.size * (2.0 + 1.0 / (rate * together)))
        assert abs(statistic - sums.size) < 4.5 * spread


def test_sizes_follow_the_law_and_not_the_year():
    """The bits that choose the year say nothing of the size: ranks uncorrelated, halves alike."""
    _, line = prepared(1.0)
    drawn = [events(line, block) for block in range(4)]
    sizes = np.concatenate([own for _, own in drawn])
    years = np.concatenate([np.repeat(np.arange(BLOCK_YEARS), own) for own, _ in drawn]) % kernels.STRIP
    assert stats.kstest(sizes, lambda x: np.asarray(SIZE.cdf(x))).pvalue > 1e-4
    for bit in range(11):
        chosen = (years >> bit & 1).astype(bool)
        assert stats.ks_2samp(sizes[chosen], sizes[~chosen]).pvalue > 1e-5
    score = np.asarray(SIZE.cdf(sizes)) - 0.5
    place = (years + 0.5) / kernels.STRIP - 0.5
    assert abs((score * place).mean()) * 12.0 * np.sqrt(score.size) < 4.5


@pytest.mark.parametrize("years", [BLOCK_YEARS, 20_000, 2048, 1])
def test_sums_are_those_of_the_events(years):
    """Every column of an incomplete block against a loop over the events, with a factor on the sizes, a
    payment that jumps, and the largest loss of the year."""
    covers = (
        PlacedCover(name="layer", terms=Cover(deductible=5e3, limit=1e5)),
        PlacedCover(name="jump", terms=Cover(deductible=1e4, franchise=True)),
    )
    factor = SharedFactor(name="prices", lines=("quay",), on="inflation", variance=0.1)
    wanted = (Subject("line", "quay"), Subject("cover", "layer"), Subject("cover", "jump"), LARGEST_GROSS)
    book, line = prepared(0.7, covers=covers, subjects=wanted, dependences=(factor,))
    joint = joint_block(book.lines, book.dependences, seed=3, block=2)
    sums = line_sums(line, joint, seed=3, block=2, years=years)
    counts, sizes = block_events(line, joint, seed=3, block=2, first=0, last=years)
    own = np.split(sizes, np.cumsum(counts)[:-1])
    assert len(own) == years
    column = {key: sums[place] for key, place in line.columns.column.items()}
    np.testing.assert_allclose(column[LOSS], [x.sum() for x in own], rtol=1e-12)
    np.testing.assert_array_equal(column[LARGEST], [x.max(initial=0.0) for x in own])
    layer = [np.minimum(np.maximum(x - 5e3, 0.0), 1e5).sum() for x in own]
    np.testing.assert_allclose(column["paid", "layer"], layer, rtol=1e-12)
    np.testing.assert_allclose(column["paid", "jump"], [x[x > 1e4].sum() for x in own], rtol=1e-12)


def test_any_years_are_replayed_alone():
    _, line = prepared(0.9)
    counts, sizes = events(line, 1)
    place = np.concatenate(([0], np.cumsum(counts)))
    for first, last in ((0, 1), (2047, 2049), (5000, 20_001), (BLOCK_YEARS - 1, BLOCK_YEARS)):
        own, found = events(line, 1, first, last)
        np.testing.assert_array_equal(own, counts[first:last])
        np.testing.assert_array_equal(found, sizes[place[first] : place[last]])


def flagging_table():
    """Two cells a half, one of them and everything beyond the table handed back for exact evaluation."""
    cubics = np.arange(10.0 * 4.0).reshape(10, 4) + 1.0
    cubics[[0, 2, 5, 9]] = np.nan
    none = np.empty(0)
    return kernels.SizeArrays(cubics, 1, 2, np.empty(0, np.int64), none, none)


def scattered(module, totals, room, scale):
    pieces = np.array([[0, 0.0, np.inf, 1.0, 0.0], [1, 9.0, 20.0, 0.5, 2.0]])
    lanes, cursor = block_state(7, (1, 2), 0), np.zeros(2, np.int64)
    sums = module.Sums(pieces, 2, scale, np.zeros((3, totals.size * kernels.STRIP)))
    noted = []
    while cursor[0] < totals.size:
        notes = module.Notes(np.empty(room, np.int64), np.empty(room))
        found = module.scatter_losses(
            lanes, module.SizeArrays(*flagging_table()), sums, totals, cursor, notes
        )
        noted += list(zip(notes.year[:found].tolist(), notes.probability[:found].tolist(), strict=True))
    return sums.annual, noted, lanes


def test_scattering_compiled_and_plain_are_the_same(monkeypatch):
    monkeypatch.setattr(compile_module, "compiled", lambda function: function)
    spec = importlib.util.spec_from_file_location("plain_kernels", kernels.__file__)
    plain = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(plain)
    totals = np.array([300, 0, 17])
    for scale in (np.empty(0), np.random.default_rng(4).uniform(0.5, 2.0, 3 * kernels.STRIP)):
        with np.errstate(over="ignore"):
            theirs = scattered(plain, totals, 20_000, scale)
        ours = scattered(kernels, totals, 20_000, scale)
        for one, other in zip(ours, theirs, strict=True):
            np.testing.assert_array_equal(one, other)
        assert len(ours[1]) > 20


def test_full_notes_interrupt_and_resume():
    totals = np.array([9000, 0, 2048, 2049])
    whole, parts = (scattered(kernels, totals, room, np.empty(0)) for room in (10**6, kernels.BUFFER + 9))
    for one, other in zip(whole, parts, strict=True):
        np.testing.assert_array_equal(one, other)


def test_losses_of_few_sizes():
    """A law that is discrete throughout, with a loss of nothing among them: Var of the annual sum is
    rate times the second moment, to within 4.5 standard errors."""
    law = SizeTable(sizes=[0.0, 2.0, 50.0], probabilities=[0.3, 0.5, 0.2])
    annual = Simulation(years=200_000, seed=2).annual_loss(Poisson(mean=0.8), law).annual
    second = 0.5 * 4.0 + 0.2 * 2500.0
    assert abs(annual.mean() - 0.8 * 11.0) < 4.5 * np.sqrt(0.8 * second / annual.size)
    squares = (annual - 8.8) ** 2
    assert abs(squares.mean() - 0.8 * second) < 4.5 * squares.std() / np.sqrt(annual.size)


@pytest.mark.parametrize("workers", [1, 2, 7])
@pytest.mark.parametrize("terms", [None, {"deductible": 5e3}, {"deductible": 5e3, "annual_limit": 4e4}])
def test_blocks_in_one_call_are_those_of_a_call_each(workers, terms):
    """Bit for bit, a last incomplete block and annual terms among them."""
    years = 5 * BLOCK_YEARS + 777
    cover = None if terms is None else Cover(**terms)
    together = Simulation(years=years, seed=6, workers=workers).annual_loss(Poisson(mean=0.6), SIZE, cover)
    line = Line(name="loss", frequency=Poisson(mean=0.6), severity=SIZE)
    covers = () if cover is None else (PlacedCover(name="cover", terms=cover),)
    book = Book(lines=(line,), covers=covers)
    subject = Subject("line", "loss") if cover is None else Subject("cover", "cover")
    own = prepare_line(line, book, (subject,))
    assert scatters_alone(book, (own,))
    one = [
        run_block(book, (subject,), (own,), seed=6, block=k, years=min(BLOCK_YEARS, years - k * BLOCK_YEARS))
        for k in range(6)
    ]
    np.testing.assert_array_equal(together.annual, np.concatenate([part[subject] for part in one]))


def in_blocks(module, blocks, capacity):
    """Sums and notes of consecutive blocks in one call, each with room for `capacity` notes."""
    guide, survival = count_guide(np.asarray(Poisson(mean=700.0).sf(np.arange(1200.0))))
    totals, cursor = np.empty(BLOCK_YEARS // kernels.STRIP, np.int64), np.zeros(4, np.int64)
    sums = module.Sums(
        np.array([[0, 0.0, np.inf, 1.0, 0.0]]), -1, np.empty(0), np.zeros((1, len(blocks) * BLOCK_YEARS))
    )
    entropies = np.array([block_entropy(7, (1, 2), block) for block in blocks])
    lanes, noted = np.empty((4, kernels.LANES), np.uint64), []
    while cursor[0] < len(blocks):
        room = len(blocks) * capacity
        notes = module.Notes(np.empty(room, np.int64), np.empty(room))
        table = module.SizeArrays(*flagging_table())
        found = module.scatter_blocks(entropies, lanes, guide, survival, table, sums, totals, cursor, notes)
        noted += list(zip(notes.year[:found].tolist(), notes.probability[:found].tolist(), strict=True))
    return sums.annual[0], noted


def test_blocks_in_one_call_with_full_notes():
    """A table that hands back most losses: each block alone, several together, and room for few notes."""
    whole, noted = in_blocks(kernels, range(3, 6), 2**15)
    assert len(noted) > 10_000
    few, noted_few = in_blocks(kernels, range(3, 6), kernels.BUFFER + 9)
    np.testing.assert_array_equal(whole, few)
    assert noted == noted_few
    for k, block in enumerate(range(3, 6)):
        alone, own = in_blocks(kernels, range(block, block + 1), 2**15)
        np.testing.assert_array_equal(alone, whole[k * BLOCK_YEARS : (k + 1) * BLOCK_YEARS])
        shifted = [(year + k * BLOCK_YEARS, p) for year, p in own]
        assert shifted == [n for n in noted if k * BLOCK_YEARS <= n[0] < (k + 1) * BLOCK_YEARS]
