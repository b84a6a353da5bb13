"""The loops of the simulation: random bits, counts, sizes, and what each loss adds to its year.

The generator is SFC64 (Doty-Humphrey 2010, PractRand) in 32 lanes side by side, each seeded as numpy
seeds its own, so that the processor steps four or eight of them at once. A draw uses the top bit to
choose a half of the distribution and 52 more for a probability t in (0, 1/2): t is the probability of
a larger value in the upper half, of a smaller one in the lower half. Neither tail loses digits to 1 - t.

The quantile table is indexed by the floating-point bits of t: the exponent names an octave, the
leading bits of the mantissa a cell within it, the rest the position within the cell, where a cubic
is evaluated. A cell that one cubic cannot follow holds NaN and the row of its 64 parts, each with a
cubic of its own; what even these cannot follow is handed back for exact evaluation.

Years are sorted by their number of losses, tile by tile of 4,096 years: the losses of years with
equal counts form a rectangle, one row per loss, one column per year, that is added up row by row
without a branch that depends on a count (which a processor would guess wrong every year). Sizes pass
through a buffer that stays in the cache nearest the processor. A payment schedule reaches the loops as
ramps, its rising pieces: a ramp adds slope * (min(x, end) - start) and a jump where x exceeds the
start; each is one pass over the buffer, so a second cover costs a pass, not a second simulation.

Where losses are rare, sorting years costs more than the losses do. Poisson losses are then drawn strip by
strip of 2,048 years: their number first, and each one's year by the eleven low bits of its draw, which no
size uses.

In this order: bits, counts, sizes, what a ramp pays, years sorted into rectangles, strips, and the entry of
each. One file on purpose: the cache on disk notices a change of this file, not of a file it calls.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any, NamedTuple

import numpy as np
from numba.extending import overload

from lossagg.arrays import FloatArray, IntArray
from lossagg.kernels.compile import Vectors, compiled, instructions, whole

U1, U3, U4, U11, U16, U24, U32, U40, U63 = (np.uint64(k) for k in (1, 3, 4, 11, 16, 24, 32, 40, 63))
WORD = np.uint64(2**32 - 1)
MANTISSA = np.uint64(2**52 - 1)
ONE = np.uint64(0x3FF0000000000000)  # the bits of 1.0
LANES = 32
GROUP = 8  # draws and columns done at once
REFINED = 64.0
BUFFER = 2048  # draws between two visits of the annual sums; a multiple of LANES
TILE = 4096  # years sorted together by their counts
LONG = 512  # losses from which on a year is simulated by itself
NARROW = 8  # least number of years of one count that are simulated together
STRIP = 2048  # years among which losses are scattered: what the bits that no size uses can tell apart
COUNT_BITS = 10
COUNTS_PER_WORD = 6
GUIDES = 2**COUNT_BITS


class SizeArrays(NamedTuple):
    """What the kernels need of a size law.

    Attributes:
        cubics: shape (rows, 4): coefficients by cell, upper half first, 1 + depth * 2**sub_bits rows
            each, the first for everything beyond the table; then the parts of refined cells, whose
            own rows hold NaN and the row of the first part. Empty for a discrete law.
        sub_bits: cells per octave as a power of two.
        depth: octaves per half, from [1/4, 1/2) down.
        first: discrete law: start of the search by the leading bits of the probability.
        survival: discrete law: P(X > values[k]), the last 0.
        values: discrete law: the possible sizes, increasing.
    """

    cubics: FloatArray
    sub_bits: int
    depth: int
    first: IntArray
    survival: FloatArray
    values: FloatArray


class Sums(NamedTuple):
    """What is added up, and where.

    Attributes:
        ramps: shape (R, 5): column, start, end, slope, jump.
        largest: the column that receives the largest loss of each year; -1 for none.
        scale: shape (years,): factor on every loss of a year; shape (0,) for none.
        annual: shape (columns, years), added to.
    """

    ramps: FloatArray
    largest: int
    scale: FloatArray
    annual: FloatArray


class Notes(NamedTuple):
    """Losses to be evaluated exactly; until then they have added nothing.

    Attributes:
        year: the year of each.
        probability: its t, positive in the upper half, negative in the lower.
    """

    year: IntArray
    probability: FloatArray


class Kept(NamedTuple):
    """Which losses are kept one by one.

    Attributes:
        first: the first year of which they are.
        last: the year after the last.
        place: where the losses of each of these years begin in `sizes`.
        sizes: receives them, NaN for those in the notes.
    """

    first: int
    last: int
    place: IntArray
    sizes: FloatArray


@compiled
def seed_lanes(entropy: np.ndarray, lanes: np.ndarray) -> None:
    """Seed all lanes by the words that numpy's SeedSequence generates, three for each lane.

    O'Neill's seeding (2015, "Developing a seed_seq alternative") as numpy defines it, then numpy's
    twelve idle steps of SFC64. Lane 0 is numpy's own SFC64 of the same SeedSequence.

    Args:
        entropy: 32-bit words in uint64, at least 4: the seed padded to 4 words, then the spawn key.
        lanes: shape (4, LANES), uint64, overwritten.
    """
    pool = np.zeros(4, np.uint64)
    constant = np.uint64(0x43B0D7E5)
    for i in range(4):
        pool[i], constant = hash_word(entropy[i], constant, np.uint64(0x931E8875))
    for source in range(4):
        for target in range(4):
            if source != target:
                hashed, constant = hash_word(pool[source], constant, np.uint64(0x931E8875))
                pool[target] = mix_words(pool[target], hashed)
    for source in range(4, entropy.shape[0]):
        for target in range(4):
            hashed, constant = hash_word(entropy[source], constant, np.uint64(0x931E8875))
            pool[target] = mix_words(pool[target], hashed)
    constant = np.uint64(0x8B51F9DD)
    for lane in range(LANES):
        for k in range(3):
            low, constant = hash_word(pool[(6 * lane + 2 * k) % 4], constant, np.uint64(0x58F38DED))
            high, constant = hash_word(pool[(6 * lane + 2 * k + 1) % 4], constant, np.uint64(0x58F38DED))
            lanes[k, lane] = low | (high << U32)
        lanes[3, lane] = U1
    draw_bits(lanes, np.empty(12 * LANES, np.uint64))


@compiled
def hash_word(word: np.uint64, constant: np.uint64, factor: np.uint64) -> tuple[np.uint64, np.uint64]:
    """One 32-bit word hashed, and the next hash constant."""
    word = (word ^ constant) & WORD
    constant = (constant * factor) & WORD
    word = (word * constant) & WORD
    return word ^ (word >> U16), constant


@compiled
def mix_words(x: np.uint64, y: np.uint64) -> np.uint64:
    """Two 32-bit words mixed into one."""
    mixed = (np.uint64(0xCA01F9DD) * x - np.uint64(0x4973F715) * y) & WORD
    return mixed ^ (mixed >> U16)


@compiled
def draw_bits(lanes: np.ndarray, out: np.ndarray) -> None:
    """Fill `out` with random words, one of each lane in turn, and advance the lanes.

    Args:
        lanes: shape (4, LANES), uint64.
        out: uint64, a multiple of LANES long.
    """
    step_lanes(lanes, out, out.shape[0])


def step_lanes(lanes: np.ndarray, out: np.ndarray, number: int) -> None:
    """Fill the first `number` entries of `out` as `draw_bits` does."""
    a, b, c, count = lanes[0], lanes[1], lanes[2], lanes[3]
    for i in range(number // LANES):
        words = out[i * LANES : (i + 1) * LANES]
        for lane in range(LANES):
            word = a[lane] + b[lane] + count[lane]
            a[lane] = b[lane] ^ (b[lane] >> U11)
            b[lane] = c[lane] + (c[lane] << U3)
            c[lane] = ((c[lane] << U24) | (c[lane] >> U40)) + word
            count[lane] += U1
            words[lane] = word


def _write_steps(builder: Any, lanes: Any, out: Any, number: Any) -> None:
    """The instructions of `step_lanes`: the state of all lanes stays in registers."""
    v = Vectors(builder, LANES)
    state = [v.variable(v.load(lanes, whole(k * LANES), v.wholes)) for k in range(4)]
    with v.loop(whole(0), number, whole(LANES)) as place:
        a, b, c, count = (builder.load(word) for word in state)
        word = builder.add(builder.add(a, b), count)
        turned = builder.or_(builder.shl(c, v.all(24)), builder.lshr(c, v.all(40)))
        builder.store(builder.xor(b, builder.lshr(b, v.all(11))), state[0])
        builder.store(builder.add(c, builder.shl(c, v.all(3))), state[1])
        builder.store(builder.add(turned, word), state[2])
        builder.store(builder.add(count, v.all(1)), state[3])
        v.store(word, out, place)
    for k in range(4):
        v.store(builder.load(state[k]), lanes, whole(k * LANES))


_steps = instructions(_write_steps)


@overload(step_lanes, strict=False)
def _compiled_steps(lanes: Any, out: Any, number: Any) -> Callable[..., None]:
    return lambda lanes, out, number: _steps((lanes, out, number))


@compiled
def whole_lanes(number: int) -> int:
    """The number of words drawn where `number` are needed."""
    return (number + LANES - 1) // LANES * LANES


@compiled
def draw_uniforms(lanes: np.ndarray, out: FloatArray) -> None:
    """Fill `out` with probabilities in (0, 1], resolution 2**-53, and advance the lanes."""
    bits = np.empty(whole_lanes(out.shape[0]), np.uint64)
    draw_bits(lanes, bits)
    for i in range(out.shape[0]):
        out[i] = (np.float64(np.int64(bits[i] >> U11)) + 0.5) * 2.0**-53


@compiled
def draw_counts(lanes: np.ndarray, guide: IntArray, survival: FloatArray, out: IntArray) -> None:
    """Fill `out` with exact draws n of a count law: the smallest n with P(N > n) <= p.

    Ten bits choose one of 1,024 equal cells of p; nearly every cell belongs to one count. Where it
    does not, 53 more bits choose p within the cell, and bisection finds n.

    Args:
        lanes: the generator, advanced.
        guide: shape (GUIDES + 1,): the count at the lower end of each cell, and 0 at the end; negative,
            -1 - count, where the cell holds more than one.
        survival: P(N > n) for n = 0, 1, ..., the last 0.
        out: receives the counts.
    """
    number = out.shape[0]
    words = whole_lanes((number + COUNTS_PER_WORD - 1) // COUNTS_PER_WORD)
    bits = np.empty(words, np.uint64)
    draw_bits(lanes, bits)
    mixed = 0
    for k in range(COUNTS_PER_WORD):
        part = out[min(k * words, number) : min((k + 1) * words, number)]
        shift = np.uint64(k * COUNT_BITS)
        for i in range(part.shape[0]):
            n = guide[(bits[i] >> shift) & np.uint64(GUIDES - 1)]
            mixed += n < 0
            part[i] = n
    finer = np.empty(whole_lanes(mixed), np.uint64)
    draw_bits(lanes, finer)
    used = 0
    for start in range(0, number, 64):
        stop = min(start + 64, number)
        part = out[start:stop]
        missing = 0
        for i in range(part.shape[0]):
            missing += part[i] < 0
        if missing == 0:
            continue
        for i in range(start, stop):
            if out[i] >= 0:
                continue
            shift = np.uint64(i // words * COUNT_BITS)
            cell = np.int64((bits[i % words] >> shift) & np.uint64(GUIDES - 1))
            p = (cell + (np.float64(np.int64(finer[used] >> U11)) + 0.5) * 2.0**-53) / GUIDES
            used += 1
            high = -1 - out[i]
            low = guide[cell + 1]
            low = (low if low >= 0 else -1 - low) - 1
            while high - low > 1:
                middle = (low + high) // 2
                low, high = (middle, high) if survival[middle] > p else (low, middle)
            out[i] = high


@compiled
def half_probability(bits: np.uint64) -> float:
    """t of a draw, an odd multiple of 2**-54: bits placed behind the point of a number in [1, 2)."""
    return float((np.uint64(((bits >> U11) & MANTISSA) | ONE).view(np.float64) - (1.0 - 2.0**-53)) * 0.5)


@compiled
def cell_of(bits: np.uint64, sub_bits: int, depth: int) -> tuple[np.int64, float]:
    """The row of a draw in the table of cubics, and its position in the cell, 0 to 1."""
    shift = np.uint64(52 - sub_bits)
    pattern = np.float64(half_probability(bits)).view(np.uint64)
    cell = np.int64(pattern >> shift) - ((1022 - depth) << sub_bits)
    row = (cell if cell >= 0 else -1) + 1 + np.int64(bits >> U63) * (1 + (depth << sub_bits))
    part = (pattern & ((U1 << shift) - U1)) << np.uint64(sub_bits)
    return np.int64(row), float(np.uint64(part | ONE).view(np.float64) - 1.0)


@compiled
def size_of(cubics: FloatArray, bits: np.uint64, sub_bits: int, depth: int) -> float:
    """The size of one draw from the table, parts of cells included; NaN for no answer."""
    row, f = cell_of(bits, sub_bits, depth)
    while True:
        c = cubics[row]
        if c[0] == c[0]:
            return float(c[0] + f * (c[1] + f * (c[2] + f * c[3])))
        if not c[1] >= 0.0:
            return np.nan
        place = f * REFINED
        part = np.int64(place)
        row, f = np.int64(c[1]) + part, place - part


def look_up(
    cubics: FloatArray,
    bits: np.ndarray,
    out: FloatArray,
    missing: np.ndarray,
    number: int,
    sub_bits: int,
    depth: int,
) -> None:
    """The sizes of the first `number` draws from the cells themselves, NaN where these have parts or none.

    Args:
        cubics: the table.
        bits: the random words.
        out: receives the sizes.
        missing: receives a number for every GROUP of draws: 0 where none of their sizes is NaN.
        number: a multiple of GROUP.
        sub_bits: as in `SizeArrays`.
        depth: as in `SizeArrays`.
    """
    missing[: number // GROUP] = 0
    for i in range(number):
        row, f = cell_of(bits[i], sub_bits, depth)
        c = cubics[row]
        out[i] = c[0] + f * (c[1] + f * (c[2] + f * c[3]))
        missing[i // GROUP] |= out[i] != out[i]


def _write_look_up(
    builder: Any, cubics: Any, bits: Any, out: Any, missing: Any, number: Any, sub_bits: Any, depth: Any
) -> None:
    """The instructions of `look_up`: `cell_of`, the four coefficients and the cubic of a group at once."""
    v = Vectors(builder, GROUP)
    shift = builder.sub(whole(52), sub_bits)
    below = v.spread(builder.sub(builder.shl(whole(1), shift), whole(1)))
    lowest = v.spread(builder.shl(builder.sub(whole(1022), depth), sub_bits))
    rows = v.spread(builder.add(whole(1), builder.shl(depth, sub_bits)))
    sub, shift = v.spread(sub_bits), v.spread(shift)
    one = v.all(int(ONE))
    with v.loop(whole(0), number, whole(GROUP)) as place:
        word = v.load(bits, place, v.wholes)
        mantissa = builder.and_(builder.lshr(word, v.all(11)), v.all(int(MANTISSA)))
        t = builder.bitcast(builder.or_(mantissa, one), v.reals)
        t = builder.fmul(builder.fsub(t, v.all(1.0 - 2.0**-53)), v.all(0.5))
        pattern = builder.bitcast(t, v.wholes)
        cell = builder.sub(builder.lshr(pattern, shift), lowest)
        inside = builder.icmp_signed(">", cell, v.all(-1))
        cell = builder.add(builder.select(inside, cell, v.all(-1)), v.all(1))
        row = builder.add(cell, builder.and_(builder.ashr(word, v.all(63)), rows))
        part = builder.or_(builder.shl(builder.and_(pattern, below), sub), one)
        f = builder.fsub(builder.bitcast(part, v.reals), v.all(1.0))
        first = builder.shl(row, v.all(2))
        c = [v.gather(cubics, builder.add(first, v.all(k))) for k in range(4)]
        size = c[3]
        for k in (2, 1, 0):
            size = builder.fadd(c[k], builder.fmul(f, size))
        v.store(size, out, place)
        v.store_flags(builder.fcmp_unordered("uno", size, size), missing, builder.udiv(place, whole(GROUP)))


_look_up = instructions(_write_look_up)


@overload(look_up, strict=False)
def _compiled_look_up(
    cubics: Any, bits: Any, out: Any, missing: Any, number: Any, sub_bits: Any, depth: Any
) -> Callable[..., None]:
    return lambda cubics, bits, out, missing, number, sub_bits, depth: _look_up(
        (cubics, bits, out, missing, number, sub_bits, depth)
    )


@compiled
def sizes_of_bits(table: SizeArrays, bits: np.ndarray, out: FloatArray, missing: np.ndarray) -> int:
    """Turn random words into sizes; NaN where the table has no answer.

    Args:
        table: the law.
        bits: the words, at least as many as sizes.
        out: receives the sizes.
        missing: work space, uint8, a number for every GROUP of sizes.

    Returns:
        How many sizes are NaN.
    """
    number = out.shape[0]
    if table.cubics.shape[0] == 0:
        cells = table.first.shape[0]
        for i in range(number):
            p = (np.float64(np.int64(bits[i] >> U11)) + 0.5) * 2.0**-53
            k = table.first[min(np.int64(p * cells), cells - 1)]
            while table.survival[k] > p:
                k += 1
            out[i] = table.values[k]
        return 0
    together = number // GROUP * GROUP
    look_up(table.cubics, bits, out, missing, together, table.sub_bits, table.depth)
    unanswered = 0
    for i in range(together, number):
        out[i] = size_of(table.cubics, bits[i], table.sub_bits, table.depth)
        unanswered += out[i] != out[i]
    for k in range(together // GROUP):
        if missing[k] != 0:
            for i in range(k * GROUP, (k + 1) * GROUP):
                if out[i] != out[i]:
                    out[i] = size_of(table.cubics, bits[i], table.sub_bits, table.depth)
                    unanswered += out[i] != out[i]
    return unanswered


@compiled
def note_missing(
    out: FloatArray, bits: np.ndarray, flagged: IntArray, probability: FloatArray, found: int
) -> int:
    """Put 0 where a size is NaN and note the place and t; returns how many notes there are now."""
    for i in range(out.shape[0]):
        if out[i] != out[i]:
            t = half_probability(bits[i])
            out[i] = 0.0
            flagged[found] = i
            probability[found] = -t if bits[i] >> U63 else t
            found += 1
    return found


@compiled
def draw_sizes(
    lanes: np.ndarray,
    table: SizeArrays,
    out: FloatArray,
    flagged: IntArray,
    probability: FloatArray,
    found: int,
) -> int:
    """Fill `out` with sizes; where the table has no answer put 0 and note the place and probability.

    Args:
        lanes: the generator, advanced.
        table: the law.
        out: receives the sizes.
        flagged: receives the index in `out` of every draw to be evaluated exactly.
        probability: receives its t, positive in the upper half, negative in the lower.
        found: how many entries of the last two are in use already.

    Returns:
        How many are in use now.
    """
    bits, missing = np.empty(BUFFER, np.uint64), np.empty(BUFFER // GROUP, np.uint8)
    for start in range(0, out.shape[0], BUFFER):
        part = out[start : start + BUFFER]
        draw_bits(lanes, bits[: whole_lanes(part.shape[0])])
        if sizes_of_bits(table, bits, part, missing) > 0:
            before = found
            found = note_missing(part, bits, flagged, probability, found)
            for i in range(before, found):
                flagged[i] += start
    return found


@compiled
def paid_of(x: float, ramp: FloatArray) -> float:
    """What one ramp (column, start, end, slope, jump) pays of a loss."""
    start, end, slope, jump = ramp[1], ramp[2], ramp[3], ramp[4]
    if x <= start:
        return 0.0
    return float(slope * (min(x, end) - start) + jump)


@compiled
def add_events(years: IntArray, sizes: FloatArray, sums: Sums) -> None:
    """Add single losses, each with its year; a factor of the year is applied first."""
    for i in range(years.shape[0]):
        year = years[i]
        x = sizes[i] * sums.scale[year] if sums.scale.shape[0] > 0 else sizes[i]
        for r in range(sums.ramps.shape[0]):
            sums.annual[np.int64(sums.ramps[r, 0]), year] += paid_of(x, sums.ramps[r])
        if sums.largest >= 0:
            sums.annual[sums.largest, year] = max(sums.annual[sums.largest, year], x)


@compiled
def add_rows(sizes: FloatArray, width: int, ramp: FloatArray, total: FloatArray) -> None:
    """Add what a ramp pays of each size to its column: `sizes` row by row, `width` columns each.

    Args:
        sizes: the losses; the last row may be incomplete.
        width: number of columns.
        ramp: column, start, end, slope, jump.
        total: shape (width,), added to.
    """
    start, end, slope, jump = ramp[1], ramp[2], ramp[3], ramp[4]
    rows = sizes.shape[0] // width
    if jump != 0.0:
        for begin in range(0, rows * width, width):
            row = sizes[begin : begin + width]
            for j in range(width):
                total[j] += slope * (min(max(row[j], start), end) - start) + jump * (row[j] > start)
    else:
        add_columns(sizes, width, rows, start, end, slope, total)
    for j in range(sizes.shape[0] - rows * width):
        total[j] += paid_of(sizes[rows * width + j], ramp)


def add_columns(
    sizes: FloatArray, width: int, rows: int, start: float, end: float, slope: float, total: FloatArray
) -> None:
    """Add what a ramp without a jump pays of the whole rows, as `add_rows` does."""
    for i in range(rows * width):
        total[i % width] += slope * (min(max(sizes[i], start), end) - start)


def _write_columns(
    builder: Any, sizes: Any, width: Any, rows: Any, start: Any, end: Any, slope: Any, total: Any
) -> None:
    """The instructions of `add_columns`: the sums of eight columns, then 4, 2, 1, stay in a register."""
    begin = whole(0)
    for lanes in (GROUP, GROUP // 2, GROUP // 4, GROUP // 8):
        v = Vectors(builder, lanes)
        low, high, steep = v.spread(start), v.spread(end), v.spread(slope)
        stop = builder.and_(width, whole(-lanes))
        with v.loop(begin, stop, whole(lanes)) as column:
            paid = v.variable(v.load(total, column, v.reals))
            last = builder.add(column, builder.mul(rows, width))
            with v.loop(column, last, width) as place:
                size = v.load(sizes, place, v.reals)
                size = builder.select(builder.fcmp_ordered(">", size, low), size, low)
                size = builder.select(builder.fcmp_ordered("<", size, high), size, high)
                more = builder.fmul(steep, builder.fsub(size, low))
                builder.store(builder.fadd(builder.load(paid), more), paid)
            v.store(builder.load(paid), total, column)
        begin = stop


_columns = instructions(_write_columns)


@overload(add_columns, strict=False)
def _compiled_columns(
    sizes: Any, width: Any, rows: Any, start: Any, end: Any, slope: Any, total: Any
) -> Callable[..., None]:
    return lambda sizes, width, rows, start, end, slope, total: _columns(
        (sizes, width, rows, start, end, slope, total)
    )


@compiled
def largest_rows(sizes: FloatArray, width: int, largest: FloatArray) -> None:
    """Raise the maximum of each column to the largest of its sizes, laid out as for `add_rows`."""
    for begin in range(0, sizes.shape[0], width):
        row = sizes[begin : begin + width]
        for j in range(row.shape[0]):
            largest[j] = max(largest[j], row[j])


@compiled
def sort_tile(counts: IntArray, order: IntArray, ends: IntArray, some: IntArray) -> int:
    """Sort the years of a tile by count, those of equal count by year; LONG stands for all longer ones.

    Args:
        counts: losses of each year of the tile.
        order: receives the years, those without a loss left out where they are many.
        ends: shape (LONG + 1,): receives the place after the last year of each count up to the highest.
        some: work space as long as `counts`.

    Returns:
        How many years are in `order`.
    """
    # Unsigned indices spare a test for negative ones; four counters for each count need not wait for
    # each other's last step. Where many years are empty, those with one loss are most of the others.
    highest, empty = 0, 0
    for i in range(counts.shape[0]):
        highest = max(highest, counts[i])
        empty += counts[i] == 0
    highest = min(highest, LONG)
    single, number = 0, np.uint64(0)
    if 4 * empty > counts.shape[0]:
        for i in range(counts.shape[0]):
            order[np.uint64(single)] = i
            single += counts[i] == 1
            some[number] = i
            number += np.uint64(counts[i] > 1)
    else:
        number = np.uint64(counts.shape[0])
        for i in range(counts.shape[0]):
            some[i] = i
    quarter = number // U4
    place = np.zeros((4, highest + 1), np.int64)
    for i in range(quarter):
        for k in range(U4):
            year = some[k * quarter + i]
            place[k, np.uint64(min(counts[np.uint64(year)], highest))] += 1
    for i in range(quarter * U4, number):
        place[3, np.uint64(min(counts[np.uint64(some[i])], highest))] += 1
    total = 0
    for n in range(highest + 1):
        total += single if n == 1 else 0
        for k in range(4):
            years = place[k, n]
            place[k, n] = total
            total += years
        ends[n] = total
    for i in range(quarter):
        for k in range(U4):
            year = some[k * quarter + i]
            count = np.uint64(min(counts[np.uint64(year)], highest))
            order[np.uint64(place[k, count])] = year
            place[k, count] += 1
    for i in range(quarter * U4, number):
        count = np.uint64(min(counts[np.uint64(some[i])], highest))
        order[np.uint64(place[3, count])] = some[i]
        place[3, count] += 1
    return int(total)


@compiled
def keep_sizes(sizes: FloatArray, tile: int, owners: IntArray, done: int, kept: Kept) -> None:
    """Copy the losses of the years to be kept: row k of `sizes` is loss done + k of each year."""
    width = owners.shape[0]
    for j in range(width):
        year = tile + owners[j]
        if kept.first <= year < kept.last:
            place = kept.place[year - kept.first] + done
            for k in range(sizes.shape[0] // width):
                kept.sizes[place + k] = sizes[k * width + j]


@compiled
def add_buffer(sizes: FloatArray, tile: int, owners: IntArray, sums: Sums, total: FloatArray) -> None:
    """Add a rectangle of losses, one column for each of its years; `total` is work space.

    The losses of a single year are laid out in 32 columns, which are then added up: 32 sums do not wait
    for each other.
    """
    width = owners.shape[0]
    if sums.scale.shape[0] > 0:
        for begin in range(0, sizes.shape[0], width):
            for j in range(width):
                sizes[begin + j] *= sums.scale[tile + owners[j]]
    wide = width if width > 1 else min(LANES, sizes.shape[0])
    part = total[:wide]
    for r in range(sums.ramps.shape[0]):
        part[:] = 0.0
        add_rows(sizes, wide, sums.ramps[r], part)
        for j in range(width, wide):
            part[0] += part[j]
        annual = sums.annual[np.int64(sums.ramps[r, 0])]
        for j in range(width):
            annual[tile + owners[j]] += part[j]
    if sums.largest >= 0:
        part[:] = 0.0
        largest_rows(sizes, wide, part)
        for j in range(width, wide):
            part[0] = max(part[0], part[j])
        annual = sums.annual[sums.largest]
        for j in range(width):
            annual[tile + owners[j]] = max(annual[tile + owners[j]], part[j])


@compiled
def add_years(
    lanes: np.ndarray,
    table: SizeArrays,
    sums: Sums,
    counts: IntArray,
    years: int,
    cursor: IntArray,
    notes: Notes,
    kept: Kept,
) -> int:
    """Simulate the losses of a block's years, until they are done or the notes are nearly full.

    Args:
        lanes: the generator, advanced.
        table: the size law.
        sums: what is added up.
        counts: losses of each year, all years of the last tile included.
        years: years asked for; the others of the last tile are simulated only as far as the
            draws of these depend on it, and hold no complete sums.
        cursor: where to go on: first year of the tile, place in its order, losses done there. Zeros
            to begin with; the first entry is at least `years` at the end.
        notes: receives losses to be evaluated exactly.
        kept: receives losses one by one.

    Returns:
        How many losses are in the notes.
    """
    order, some, ends = np.empty(TILE, np.int64), np.empty(TILE, np.int64), np.zeros(LONG + 1, np.int64)
    bits, missing = np.empty(BUFFER, np.uint64), np.empty(BUFFER // GROUP, np.uint8)
    sizes, total = np.empty(BUFFER), np.empty(BUFFER)
    found = 0
    while cursor[0] < years:
        tile = cursor[0]
        number = min(TILE, counts.shape[0] - tile)
        busy = sort_tile(counts[tile : tile + number], order, ends, some)
        while cursor[1] < busy:
            if found + BUFFER > notes.year.shape[0]:
                return found
            place, done = cursor[1], cursor[2]
            n = counts[tile + order[place]]
            if n == 0:
                cursor[1] = ends[0]
                continue
            width = 1
            if n < LONG:
                width = min(ends[n] - place, max(BUFFER // n, NARROW))
                width = 1 if n > LANES * width else width
            elif tile + order[place] >= years:
                break
            lines = min(n - done, BUFFER // width)
            drawn = sizes[: lines * width]
            draw_bits(lanes, bits[: whole_lanes(drawn.shape[0])])
            unanswered = sizes_of_bits(table, bits, drawn, missing)
            owners = order[place : place + width]
            if kept.last > kept.first:
                keep_sizes(drawn, tile, owners, done, kept)
            if unanswered > 0:
                before = found
                found = note_missing(drawn, bits, notes.year, notes.probability, found)
                for i in range(before, found):
                    notes.year[i] = tile + owners[notes.year[i] % width]
            add_buffer(drawn, tile, owners, sums, total)
            cursor[2] += lines
            if cursor[2] == n:
                cursor[1], cursor[2] = place + width, 0
        cursor[0], cursor[1], cursor[2] = tile + number, 0, 0
    return found


@compiled
def scatter_buffer(sizes: FloatArray, bits: np.ndarray, first: int, sums: Sums) -> None:
    """Add losses, each to the year of its strip that the low bits of its draw say.

    Args:
        sizes: the losses; changed where years have factors.
        bits: the draws they come from, at least as many.
        first: first year of the strip.
        sums: what is added up.
    """
    own = np.uint64(STRIP - 1)
    if sums.scale.shape[0] > 0:
        scale = sums.scale[first : first + STRIP]
        for i in range(sizes.shape[0]):
            sizes[i] *= scale[bits[i] & own]
    for r in range(sums.ramps.shape[0]):
        start, end, slope, jump = sums.ramps[r, 1], sums.ramps[r, 2], sums.ramps[r, 3], sums.ramps[r, 4]
        annual = sums.annual[np.int64(sums.ramps[r, 0]), first : first + STRIP]
        if jump == 0.0:
            for i in range(sizes.shape[0]):
                annual[bits[i] & own] += slope * (min(max(sizes[i], start), end) - start)
        else:
            for i in range(sizes.shape[0]):
                annual[bits[i] & own] += paid_of(sizes[i], sums.ramps[r])
    if sums.largest >= 0:
        annual = sums.annual[sums.largest, first : first + STRIP]
        for i in range(sizes.shape[0]):
            annual[bits[i] & own] = max(annual[bits[i] & own], sizes[i])


@compiled
def scatter_losses(
    lanes: np.ndarray, table: SizeArrays, sums: Sums, totals: IntArray, cursor: IntArray, notes: Notes
) -> int:
    """Scatter the losses of strips of years, until they are done or the notes are nearly full.

    Given their number, Poisson losses fall on the years of a strip independently and evenly. The year is
    the low bits of a draw, the size the others.

    Args:
        lanes: the generator, advanced.
        table: the size law.
        sums: what is added up.
        totals: losses of each strip, those that are wanted only.
        cursor: where to go on: strip, losses done there. Zeros to begin with; the first entry is the
            number of strips at the end.
        notes: receives losses to be evaluated exactly.

    Returns:
        How many losses are in the notes.
    """
    bits, missing = np.empty(BUFFER, np.uint64), np.empty(BUFFER // GROUP, np.uint8)
    sizes = np.empty(BUFFER)
    found = 0
    while cursor[0] < totals.shape[0]:
        first = cursor[0] * STRIP
        while cursor[1] < totals[cursor[0]]:
            if found + BUFFER > notes.year.shape[0]:
                return found
            drawn = sizes[: min(BUFFER, totals[cursor[0]] - cursor[1])]
            draw_bits(lanes, bits[: whole_lanes(drawn.shape[0])])
            if sizes_of_bits(table, bits, drawn, missing) > 0:
                before = found
                found = note_missing(drawn, bits, notes.year, notes.probability, found)
                for i in range(before, found):
                    notes.year[i] = first + np.int64(bits[notes.year[i]] & np.uint64(STRIP - 1))
            scatter_buffer(drawn, bits, first, sums)
            cursor[1] += drawn.shape[0]
        cursor[0], cursor[1] = cursor[0] + 1, 0
    return found


@compiled
def begin_strips(
    entropy: np.ndarray,
    lanes: np.ndarray,
    guide: IntArray,
    survival: FloatArray,
    table: SizeArrays,
    sums: Sums,
    totals: IntArray,
    strips: int,
    cursor: IntArray,
    notes: Notes,
) -> int:
    """Seed the lanes, draw the losses of every strip of the block and begin to scatter them.

    Args:
        entropy: as for `seed_lanes`.
        lanes: shape (4, LANES), uint64, overwritten.
        guide: as for `draw_counts`, of the losses of a strip.
        survival: as for `draw_counts`.
        table: as for `scatter_losses`, like all that follow.
        sums: what is added up.
        totals: overwritten by the losses of every strip of the block.
        strips: strips wanted.
        cursor: where to go on.
        notes: receives losses to be evaluated exactly.

    Returns:
        How many losses are in the notes.
    """
    seed_lanes(entropy, lanes)
    draw_counts(lanes, guide, survival, totals)
    return scatter_losses(lanes, table, sums, totals[:strips], cursor, notes)


@compiled
def scatter_blocks(
    entropies: np.ndarray,
    lanes: np.ndarray,
    guide: IntArray,
    survival: FloatArray,
    table: SizeArrays,
    sums: Sums,
    totals: IntArray,
    cursor: IntArray,
    notes: Notes,
) -> int:
    """Scatter the losses of consecutive blocks, until they are done or the notes are nearly full: the same as
    `begin_strips` and `scatter_losses` for each, in one call.

    Args:
        entropies: as for `seed_lanes`, a row for each block.
        lanes: the generator, overwritten.
        guide: as for `draw_counts`, of the losses of a strip.
        survival: as for `draw_counts`.
        table: as for `scatter_losses`.
        sums: what is added up, for the years of all blocks; no factors on losses.
        totals: of the strips of the block under way.
        cursor: where to go on: block, strip, losses done there, and whether the block has begun. Zeros to
            begin with; the first entry is the number of blocks at the end.
        notes: receives losses to be evaluated exactly, as many of each block as when it is scattered alone.

    Returns:
        How many losses are in the notes.
    """
    found = 0
    years, each = totals.shape[0] * STRIP, notes.year.shape[0] // entropies.shape[0]
    while cursor[0] < entropies.shape[0]:
        if cursor[3] == 0:
            seed_lanes(entropies[cursor[0]], lanes)
            draw_counts(lanes, guide, survival, totals)
            cursor[1], cursor[2], cursor[3] = 0, 0, 1
        first = cursor[0] * years
        own = Sums(sums.ramps, sums.largest, sums.scale, sums.annual[:, first : first + years])
        room = Notes(notes.year[found : found + each], notes.probability[found : found + each])
        more = scatter_losses(lanes, table, own, totals, cursor[1:3], room)
        for i in range(more):
            room.year[i] += first
        found += more
        if cursor[1] < totals.shape[0]:
            return found
        cursor[0], cursor[3] = cursor[0] + 1, 0
    return found


@compiled
def begin_years(
    entropy: np.ndarray,
    lanes: np.ndarray,
    guide: IntArray,
    survival: FloatArray,
    table: SizeArrays,
    sums: Sums,
    counts: IntArray,
    years: int,
    cursor: IntArray,
    notes: Notes,
    kept: Kept,
) -> int:
    """Seed the lanes, draw the counts and begin with the years: one entry where three would each have to
    wait for the interpreter.

    Args:
        entropy: as for `seed_lanes`.
        lanes: shape (4, LANES), uint64, overwritten.
        guide: as for `draw_counts`.
        survival: as for `draw_counts`.
        table: as for `add_years`, like all that follow.
        sums: what is added up.
        counts: overwritten by the losses of every year of the block.
        years: years asked for.
        cursor: where to go on.
        notes: receives losses to be evaluated exactly.
        kept: receives losses one by one.

    Returns:
        How many losses are in the notes.
    """
    seed_lanes(entropy, lanes)
    draw_counts(lanes, guide, survival, counts)
    return add_years(lanes, table, sums, counts[: sums.annual.shape[1]], years, cursor, notes, kept)
