"""Annual sums: draws sizes event by event and adds what each pays to its year.

A payment schedule reaches the loops as ramps, its rising pieces: a ramp adds
slope * min(max(x - start, 0), end - start), and a jump where x passes the start. Sizes pass through
a buffer that stays in the first-level cache; each ramp is one pass over it with the running sum in a
register, so a second cover costs a pass, not a second simulation.
"""

from __future__ import annotations

import numpy as np

from lossagg.arrays import FloatArray, IntArray
from lossagg.kernels.compile import compiled
from lossagg.kernels.draws import SizeArrays, draw_sizes

BUFFER = 4096
SPARSE = 2  # losses a year up to which `add_sparse` is faster, as measured


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
