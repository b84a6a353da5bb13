"""One block of simulated years: the counts and sizes of each line, and what they come to.

A block of a line draws its counts, then its sizes, from a stream of its own (`streams`), so a block is a
function of the seed, the names of the lines and its number, wherever and whenever it is computed.

Where a line has a Poisson count of few losses a year, most of the work would be years without any. There
the number of losses of a whole strip of years is drawn, and each loss is put into one of its years: given
their number, Poisson losses are independent and spread evenly (Kingman 1993, "Poisson Processes", section
2.4), so the counts of single years are what they would have been.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from lossagg.arrays import FloatArray, IntArray
from lossagg.engines.book import Book, Line, Subject
from lossagg.engines.joint import ALONE, JointBlock, joint_block
from lossagg.engines.quantile_table import QuantileTable, quantile_table
from lossagg.engines.search_table import CountSampler, count_sampler
from lossagg.engines.shocks import ShockLosses, joint_payments, shock_losses
from lossagg.engines.streams import BLOCK_YEARS, block_entropy, block_state, line_key
from lossagg.engines.yearly import LARGEST, LOSS, LineColumns, annual_amounts, line_columns
from lossagg.families import Poisson
from lossagg.families.base import CountLaw
from lossagg.kernels.simulation import (
    GROUP,
    LANES,
    STRIP,
    TILE,
    U63,
    Kept,
    Notes,
    Sums,
    add_events,
    add_years,
    begin_strips,
    begin_years,
    draw_bits,
    half_probability,
    scatter_blocks,
    scatter_losses,
    sizes_of_bits,
    whole_lanes,
)

NOTES = 2**13
YearSums = dict[tuple[str, str], FloatArray]
MOST_SCATTERED = 1.0  # losses a year up to which scattering them is the faster way, with several covers too


@dataclass(frozen=True, eq=False)
class PreparedLine:
    """A line as the kernels take it: key of its streams, samplers, columns to add up.

    Attributes:
        name: the line's name.
        key: of its streams.
        counts: draws the losses of a year; None where they are scattered.
        strips: draws the losses of a whole strip of years where they are scattered; None elsewhere.
        sizes: draws sizes.
        columns: what is added up.
    """

    name: str
    key: tuple[int, int]
    counts: CountSampler | None
    strips: CountSampler | None
    sizes: QuantileTable
    columns: LineColumns


def prepare_line(line: Line, book: Book, subjects: tuple[Subject, ...]) -> PreparedLine:
    """Tables and columns of a line of a book."""
    return prepare_sums(line, line_columns(book, line.name, subjects))


def prepare_sums(line: Line, columns: LineColumns) -> PreparedLine:
    """Tables of a line, for whatever is to be added up of its losses."""
    strips = _strip_sampler(line.frequency)
    return PreparedLine(
        line.name,
        line_key(line.name),
        count_sampler(line.frequency, f"line {line.name!r}") if strips is None else None,
        strips,
        quantile_table(line.severity),
        columns,
    )


def _strip_sampler(law: CountLaw) -> CountSampler | None:
    if not isinstance(law, Poisson) or law.mean() > MOST_SCATTERED:
        return None
    return count_sampler(Poisson(mean=STRIP * law.mean()), "a strip of years")


def run_block(
    book: Book,
    subjects: tuple[Subject, ...],
    lines: tuple[PreparedLine, ...],
    *,
    seed: int,
    block: int,
    years: int,
    room: FloatArray | None = None,
) -> dict[Subject, FloatArray]:
    """Simulate one block of years: the annual amount of every subject, shape (years,).

    Args:
        book: lines and covers.
        subjects: whose annual amounts are computed.
        lines: the lines as the kernels take them.
        seed: the seed of the run.
        block: number of the block.
        years: how many of its years.
        room: zeros, shape (years,), that the sums of a single line's single column may be added up in.
    """
    joint = joint_block(book.lines, book.dependences, seed=seed, block=block)
    sums: dict[str, YearSums] = {}
    for line in lines:
        place = room if len(lines) == 1 else None
        annual = line_sums(line, joint, seed=seed, block=block, years=years, room=place)
        if line.name in joint.ranks:
            annual = annual[:, joint.source(line.name, annual[line.columns.column[LOSS]])]
        sums[line.name] = {key: annual[column] for key, column in line.columns.column.items()}
    if not joint.shocks:
        return annual_amounts(book, subjects, sums)
    tables = {line.name: line.sizes for line in lines}
    shocks = shock_losses(book, tables, joint, seed=seed, block=block)
    together = [_add_shocks(book, own.between(0, years), sums, years) for own in shocks]
    return annual_amounts(book, subjects, sums, together)


def scatters_alone(book: Book, lines: tuple[PreparedLine, ...]) -> bool:
    """Whether a book is one column of one line with few losses a year, and nothing else."""
    return (
        len(lines) == 1
        and lines[0].strips is not None
        and lines[0].columns.count == 1
        and not book.dependences
    )


def scatter_alone(
    book: Book,
    subjects: tuple[Subject, ...],
    line: PreparedLine,
    room: FloatArray,
    *,
    seed: int,
    blocks: range,
) -> dict[Subject, FloatArray]:
    """What `run_block` gives for some consecutive whole blocks, without the interpreter between them.

    Args:
        book: one line and covers, see `scatters_alone`.
        subjects: whose annual amounts are computed.
        line: the line as the kernels take it.
        room: zeros, shape (years of the blocks,), that the sums are added up in.
        seed: the seed of the run.
        blocks: numbers of the blocks.
    """
    strips = line.strips
    assert strips is not None
    annual = room.reshape(1, -1)
    sums = Sums(line.columns.ramps, line.columns.largest, np.empty(0), annual)
    entropies = np.array([block_entropy(seed, line.key, block) for block in blocks])
    state = np.empty((4, LANES), dtype=np.uint64)
    totals = np.empty(BLOCK_YEARS // STRIP, dtype=np.int64)
    notes, cursor = _notes(len(blocks)), np.zeros(4, dtype=np.int64)
    table = line.sizes.arrays
    while cursor[0] < len(blocks):
        found = scatter_blocks(
            entropies, state, strips.guide, strips.survival, table, sums, totals, cursor, notes
        )
        _answer(line, notes, found, sums)
    own = {key: annual[column] for key, column in line.columns.column.items()}
    return annual_amounts(book, subjects, {line.name: own})


def _add_shocks(book: Book, shock: ShockLosses, sums: dict[str, YearSums], years: int) -> FloatArray:
    """Add the events of a common shock to the sums of its lines; the largest cost of one in each year."""
    payments, costs = joint_payments(book, shock.losses), np.zeros(shock.year.size)
    for name in sorted(shock.losses):
        cost = book.line(name).cost(shock.losses[name])
        costs += cost
        for key, before in sums[name].items():
            kind, cover = key
            if key == LARGEST:
                largest = before.copy()
                np.maximum.at(largest, shock.year, shock.losses[name])
                sums[name][key] = largest
                continue
            own = cost if key == LOSS else getattr(payments[cover], kind)[name]
            sums[name][key] = before + np.bincount(shock.year, own, years)
    largest = np.zeros(years)
    np.maximum.at(largest, shock.year, costs)
    return largest


def numbered_block(
    book: Book,
    subjects: tuple[Subject, ...],
    lines: tuple[PreparedLine, ...],
    seed: int,
    years: int,
    block: int,
) -> dict[Subject, FloatArray]:
    """One block of a run of so many years, wherever it is computed: in a thread, a process, on a cluster.

    The tables of the lines come with the task, so every place draws from the same ones.
    """
    own = min(BLOCK_YEARS, years - block * BLOCK_YEARS)
    return run_block(book, subjects, lines, seed=seed, block=block, years=own)


def line_sums(
    line: PreparedLine,
    joint: JointBlock = ALONE,
    *,
    seed: int,
    block: int,
    years: int,
    room: FloatArray | None = None,
) -> FloatArray:
    """Annual sums of a line's columns in one block, shape (columns, years), before a copula moves years; in
    `room`, zeros of shape (years,), where that has the shape the kernels take."""
    nothing = np.empty(0)
    kept = Kept(0, 0, np.empty(0, dtype=np.int64), nothing)
    shape = line.columns.count, whole_tiles(years)
    annual = np.zeros(shape) if room is None or shape != (1, years) else room.reshape(shape)
    if not line.columns.count:
        return annual[:, :years]
    sums = Sums(line.columns.ramps, line.columns.largest, joint.scale.get(line.name, nothing), annual)
    if line.strips is not None and line.name not in joint.counts:
        _scatter(line, line.strips, sums, years, seed=seed, block=block)
    elif line.name not in joint.counts and line.counts is not None and line.counts.guide.size:
        _simulate_alone(line, line.counts, sums, years, kept, seed=seed, block=block)
    else:
        state = block_state(seed, line.key, block)
        _simulate_years(line, state, sums, _counts(line, joint, state)[: annual.shape[1]], years, kept)
    return annual[:, :years]


def block_events(
    line: PreparedLine, joint: JointBlock = ALONE, *, seed: int, block: int, first: int, last: int
) -> tuple[IntArray, FloatArray]:
    """The very losses that `line_sums` adds up, for a replay of single years; without common shocks.

    Args:
        line: the line.
        joint: what the dependences of the book say of the block.
        seed: the seed of the run.
        block: number of the block.
        first: first year asked for, counted from the start of the block.
        last: the year after the last.

    Returns:
        Counts per year, shape (last - first,), and sizes in the order of the years, as `line_sums` has them.
    """
    scale = joint.scale.get(line.name)
    if line.strips is not None and line.name not in joint.counts:
        years, sizes = _scattered(line, line.strips, first, last, seed=seed, block=block)
        own = np.bincount(years - first, minlength=last - first)
        return own, sizes if scale is None else sizes * scale[years]
    state = block_state(seed, line.key, block)
    counts = _counts(line, joint, state)
    own = counts[first:last]
    place = np.cumsum(own) - own
    kept = Kept(first, last, place, np.empty(int(own.sum())))
    sums = Sums(np.empty((0, 5)), -1, np.empty(0), np.empty((0, whole_tiles(last))))
    years, sizes = _simulate_years(line, state, sums, counts[: whole_tiles(last)], last, kept)
    inside = (years >= first) & (years < last)
    by_year = np.argsort(years[inside], kind="stable")
    kept.sizes[np.isnan(kept.sizes)] = sizes[inside][by_year]
    return own, kept.sizes if scale is None else kept.sizes * np.repeat(scale[first:last], own)


def _counts(line: PreparedLine, joint: JointBlock, state: np.ndarray) -> IntArray:
    """Losses of each year of a block: those the dependences say, or the line's own."""
    given = joint.counts.get(line.name)
    if given is None:
        assert line.counts is not None
        return line.counts.draw(state, BLOCK_YEARS)
    return given


def _scatter(
    line: PreparedLine, strips: CountSampler, sums: Sums, years: int, *, seed: int, block: int
) -> None:
    """A block of a line with few losses a year."""
    state = np.empty((4, LANES), dtype=np.uint64)
    totals = np.empty(BLOCK_YEARS // STRIP, dtype=np.int64)
    notes, cursor = _notes(), np.zeros(2, dtype=np.int64)
    wanted = -(-years // STRIP)
    entropy, table = block_entropy(seed, line.key, block), line.sizes.arrays
    found = begin_strips(
        entropy, state, strips.guide, strips.survival, table, sums, totals, wanted, cursor, notes
    )
    _answer(line, notes, found, sums)
    while cursor[0] < wanted:
        _answer(line, notes, scatter_losses(state, table, sums, totals[:wanted], cursor, notes), sums)


def _scattered(
    line: PreparedLine, strips: CountSampler, first: int, last: int, *, seed: int, block: int
) -> tuple[IntArray, FloatArray]:
    """(year, size) of the losses that `_scatter` adds to some years, in the order of the years."""
    state = block_state(seed, line.key, block)
    totals = strips.draw(state, BLOCK_YEARS // STRIP)
    years, sizes = [np.empty(0, dtype=np.int64)], [np.empty(0)]
    for strip in range(-(-last // STRIP)):
        bits = np.empty(whole_lanes(totals[strip]), dtype=np.uint64)
        draw_bits(state, bits)
        bits = bits[: totals[strip]]
        year = strip * STRIP + (bits & np.uint64(STRIP - 1)).astype(np.int64)
        bits, year = bits[(year >= first) & (year < last)], year[(year >= first) & (year < last)]
        size = np.empty(bits.size)
        sizes_of_bits(line.sizes.arrays, bits, size, np.empty(bits.size // GROUP, dtype=np.uint8))
        for k in np.flatnonzero(np.isnan(size)):
            t = half_probability(bits[k])
            size[k] = line.sizes.exact(np.array([-t if bits[k] >> U63 else t]))[0]
        years.append(year)
        sizes.append(size)
    by_year = np.argsort(found := np.concatenate(years), kind="stable")
    return found[by_year], np.concatenate(sizes)[by_year]


def _simulate_alone(
    line: PreparedLine, law: CountSampler, sums: Sums, years: int, kept: Kept, *, seed: int, block: int
) -> None:
    """A block of a line whose counts are its own and come from a table, begun by a single call."""
    state = np.empty((4, LANES), dtype=np.uint64)
    counts = np.empty(BLOCK_YEARS, dtype=np.int64)
    notes, cursor = _notes(), np.zeros(3, dtype=np.int64)
    entropy = block_entropy(seed, line.key, block)
    found = begin_years(
        entropy, state, law.guide, law.survival, line.sizes.arrays, sums, counts, years, cursor, notes, kept
    )
    _answer(line, notes, found, sums)
    _simulate_years(line, state, sums, counts[: sums.annual.shape[1]], years, kept, cursor)


def _simulate_years(
    line: PreparedLine,
    state: np.ndarray,
    sums: Sums,
    counts: IntArray,
    years: int,
    kept: Kept,
    cursor: IntArray | None = None,
) -> tuple[IntArray, FloatArray]:
    """Run the loops over a block; (year, size) of the losses that the law itself had to answer."""
    cursor = np.zeros(3, dtype=np.int64) if cursor is None else cursor
    answered = [(np.empty(0, dtype=np.int64), np.empty(0))]
    while cursor[0] < years:
        notes = _notes()
        found = add_years(state, line.sizes.arrays, sums, counts, years, cursor, notes, kept)
        answered.append(_answer(line, notes, found, sums))
    return np.concatenate([year for year, _ in answered]), np.concatenate([size for _, size in answered])


def _notes(blocks: int = 1) -> Notes:
    return Notes(np.empty(blocks * NOTES, dtype=np.int64), np.empty(blocks * NOTES))


def _answer(line: PreparedLine, notes: Notes, found: int, sums: Sums) -> tuple[IntArray, FloatArray]:
    """Ask the law for the losses in the notes, and add them; their (year, size)."""
    year, probability = notes.year[:found], notes.probability[:found]
    size = line.sizes.exact(probability)
    if found:
        add_events(year, size, sums)
    return year, size


def whole_tiles(years: int) -> int:
    """Years up to the end of the tile that the last of them belongs to."""
    return min(-(-years // TILE) * TILE, BLOCK_YEARS)
