"""The loops of the simulation: random bits, counts, sizes, and what each loss adds to its year.

The generator is SFC64 (Doty-Humphrey 2010, PractRand), stepped here from a state that numpy seeded,
so that its bits are numpy's own. A draw uses the top bit to choose a half of the distribution and 52
more for a probability t in (0, 1/2): t is the probability of a larger value in the upper half, of a
smaller one in the lower half. Neither tail loses digits to 1 - t.

The quantile table is indexed by the floating-point bits of t: the exponent names an octave, the
leading bits of the mantissa a cell within it, the rest the position within the cell, where a cubic
is evaluated. A cell that one cubic cannot follow holds NaN and the row of its 64 parts, each with a
cubic of its own; what even these cannot follow is handed back for exact evaluation.

A payment schedule reaches the loops as ramps, its rising pieces: a ramp adds
slope * (min(x, end) - start) and a jump where x exceeds the start. Sizes pass through a buffer that
stays in the first-level cache; each ramp is one pass over it, so a second cover costs a pass, not a
second simulation.

One file on purpose: the cache on disk notices a change of this file, not of a file it calls.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from lossagg.arrays import FloatArray, IntArray
from lossagg.kernels.compile import compiled

U1, U3, U11, U24, U40, U63 = (np.uint64(k) for k in (1, 3, 11, 24, 40, 63))
MANTISSA = np.uint64(2**53 - 1)
REFINED = 64.0
BUFFER = 4096
SPARSE = 2  # losses a year up to which `add_sparse` is faster, as measured


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


@compiled
def next_bits(
    a: np.uint64, b: np.uint64, c: np.uint64, count: np.uint64
) -> tuple[np.uint64, np.uint64, np.uint64, np.uint64, np.uint64]:
    """64 random bits and the generator's next state."""
    bits = a + b + count
    return bits, b ^ (b >> U11), c + (c << U3), ((c << U24) | (c >> U40)) + bits, count + U1


@compiled
def draw_uniforms(state: np.ndarray, out: FloatArray) -> None:
    """Fill `out` with probabilities in (0, 1], resolution 2**-53, and advance the state (4 words)."""
    a, b, c, count = state[0], state[1], state[2], state[3]
    for i in range(out.shape[0]):
        bits, a, b, c, count = next_bits(a, b, c, count)
        out[i] = (np.float64(np.int64(bits >> U11)) + 0.5) * 2.0**-53
    state[0], state[1], state[2], state[3] = a, b, c, count


@compiled
def draw_discrete(
    state: np.ndarray, first: IntArray, survival: FloatArray, values: np.ndarray, out: np.ndarray
) -> None:
    """Fill `out` with exact draws of a discrete law: the smallest value with P(X > value) <= p.

    Args:
        state: the generator, 4 words, advanced.
        first: shape (G,): index of the value at the largest p of each of G equal cells.
        survival: P(X > values[k]), decreasing to 0.
        values: the values, increasing.
        out: receives the draws.
    """
    a, b, c, count = state[0], state[1], state[2], state[3]
    cells = first.shape[0]
    for i in range(out.shape[0]):
        bits, a, b, c, count = next_bits(a, b, c, count)
        p = (np.float64(np.int64(bits >> U11)) + 0.5) * 2.0**-53
        k = first[min(np.int64(p * cells), cells - 1)]
        while survival[k] > p:
            k += 1
        out[i] = values[k]
    state[0], state[1], state[2], state[3] = a, b, c, count


@compiled
def refined_size(cubics: FloatArray, row: np.int64, f: float) -> float:
    """The size at position f of a cell in parts; NaN where the part, or the cell, has no answer.

    Apart from the loop that calls it: within it, it made every draw three times slower.
    """
    first = cubics[row, 1]
    if not first >= 0.0:
        return np.nan
    place = f * REFINED
    part = np.int64(place)
    c = cubics[np.int64(first) + part]
    g = place - part
    return float(c[0] + g * (c[1] + g * (c[2] + g * c[3])))


@compiled
def draw_sizes(
    state: np.ndarray,
    table: SizeArrays,
    out: FloatArray,
    flagged: IntArray,
    probability: FloatArray,
    found: int,
) -> int:
    """Fill `out` with sizes; where the table has no answer put 0 and note the place and probability.

    Args:
        state: the generator, 4 words, advanced.
        table: the law.
        out: receives the sizes.
        flagged: receives the index in `out` of every draw to be evaluated exactly.
        probability: receives its t, positive in the upper half, negative in the lower.
        found: how many entries of the last two are in use already.

    Returns:
        How many are in use now.
    """
    if table.cubics.shape[0] == 0:
        draw_discrete(state, table.first, table.survival, table.values, out)
        return found
    a, b, c, count = state[0], state[1], state[2], state[3]
    cubics = table.cubics
    shift = np.uint64(52 - table.sub_bits)
    below = (U1 << shift) - U1
    unit = 1.0 / np.float64(np.int64(U1 << shift))
    lowest = (1022 - table.depth) << table.sub_bits
    rows = 1 + (table.depth << table.sub_bits)
    for i in range(out.shape[0]):
        bits, a, b, c, count = next_bits(a, b, c, count)
        lower = np.int64(bits >> U63)
        t = np.float64(np.int64(((bits >> U11 << U1) & MANTISSA) | U1)) * 2.0**-54
        pattern = np.float64(t).view(np.uint64)
        cell = np.int64(pattern >> shift) - lowest
        row = (cell if cell >= 0 else -1) + 1 + lower * rows
        f = np.float64(np.int64(pattern & below)) * unit
        x = cubics[row, 0] + f * (cubics[row, 1] + f * (cubics[row, 2] + f * cubics[row, 3]))
        if x != x:
            x = refined_size(cubics, row, f)
            if x != x:
                x = 0.0
                flagged[found] = i
                probability[found] = -t if lower else t
                found += 1
        out[i] = x
    state[0], state[1], state[2], state[3] = a, b, c, count
    return found


@compiled
def paid_of(x: float, ramp: FloatArray) -> float:
    """What one ramp (column, start, end, slope, jump) pays of a loss."""
    start, end, slope, jump = ramp[1], ramp[2], ramp[3], ramp[4]
    if x <= start:
        return 0.0
    return float(slope * (min(x, end) - start) + jump)


@compiled
def add_ramp(sizes: FloatArray, left: IntArray, year: int, ramp: FloatArray, annual: FloatArray) -> None:
    """Add what a ramp pays of each size to the size's year.

    Args:
        sizes: the losses, year after year.
        left: losses still to come in each year; the first of `sizes` belongs to `year`.
        year: the year of the first loss.
        ramp: column, start, end, slope, jump.
        annual: shape (columns, years), added to.
    """
    column = np.int64(ramp[0])
    start, end, slope, jump = ramp[1], ramp[2], ramp[3], ramp[4]
    done, total = 0, sizes.shape[0]
    while done < total:
        stop = min(done + left[year], total)
        within = 0.0
        above = 0
        if jump != 0.0:
            for i in range(done, stop):
                above += sizes[i] > start
        for i in range(done, stop):
            within += max(min(sizes[i], end) - start, 0.0)
        annual[column, year] += slope * within + jump * above
        done = stop
        year += 1


@compiled
def add_events(years: IntArray, sizes: FloatArray, ramps: FloatArray, annual: FloatArray) -> None:
    """Add what every ramp pays of single losses, each with its year, to `annual` (columns, years)."""
    for i in range(years.shape[0]):
        for r in range(ramps.shape[0]):
            annual[np.int64(ramps[r, 0]), years[i]] += paid_of(sizes[i], ramps[r])


@compiled
def years_of(left: IntArray, year: int, after: int, owner: IntArray) -> None:
    """Write the year of every loss of the years from `year` up to `after` into `owner`.

    No branch depends on a count: where many years have no loss or one, the processor would guess
    each of them wrong.
    """
    total = owner.shape[0]
    owner[:] = 0
    place = 0
    for y in range(year, after):
        if place < total:
            owner[place] = y
        place += left[y]
    reached = year
    for i in range(total):
        reached = max(reached, owner[i])
        owner[i] = reached


@compiled
def add_sparse(sizes: FloatArray, owner: IntArray, ramp: FloatArray, annual: FloatArray) -> None:
    """As `add_ramp`, for years with few losses: `owner` holds the year of each loss."""
    column = np.int64(ramp[0])
    start, end, slope, jump = ramp[1], ramp[2], ramp[3], ramp[4]
    for i in range(sizes.shape[0]):
        paid = slope * max(min(sizes[i], end) - start, 0.0)
        annual[column, owner[i]] += paid + jump * (sizes[i] > start)


@compiled
def add_years(
    state: np.ndarray,
    table: SizeArrays,
    ramps: FloatArray,
    left: IntArray,
    year: int,
    annual: FloatArray,
    flagged: IntArray,
    probability: FloatArray,
) -> tuple[int, int]:
    """Simulate the losses of years from `year` on, until they are done or the notes are nearly full.

    Args:
        state: the generator, 4 words, advanced.
        table: the size law.
        ramps: shape (R, 5): column, start, end, slope, jump.
        left: losses to come in each year; reduced where a year is left half done.
        year: the first year.
        annual: shape (columns, years), added to.
        flagged: receives the year of every loss to be evaluated exactly (it has added nothing yet).
        probability: receives its probability, as `draw_sizes` writes it.

    Returns:
        The next year, and how many losses are flagged.
    """
    sizes, owner = np.empty(BUFFER), np.empty(BUFFER, np.int64)
    found = 0
    while year < left.shape[0] and found + BUFFER <= flagged.shape[0]:
        total, after = 0, year
        while after < left.shape[0] and total + left[after] <= BUFFER:
            total += left[after]
            after += 1
        within_a_year = after == year
        if within_a_year:
            total = BUFFER
        before = found
        found = draw_sizes(state, table, sizes[:total], flagged, probability, found)
        sparse = total <= SPARSE * (after - year)
        if sparse or found > before:
            years_of(left, year, max(after, year + 1), owner[:total])
        for i in range(before, found):
            flagged[i] = owner[flagged[i]]
        for r in range(ramps.shape[0]):
            if sparse:
                add_sparse(sizes[:total], owner[:total], ramps[r], annual)
            else:
                add_ramp(sizes[:total], left, year, ramps[r], annual)
        if within_a_year:
            left[year] -= BUFFER
        year = after
    return year, found
