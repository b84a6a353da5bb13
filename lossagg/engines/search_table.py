"""Exact inversion of a discrete law: a search table, or bisection where that would be too long.

Sizes: a draw p looks up where to start (the first of the values that the largest p of its cell can
reach) and walks up while P(X > value) > p: with 2,048 cells about one step (the method of indexed
search, Chen and Asau 1974; Devroye 1986, section III.2.4). Counts: ten bits choose one of 1,024
cells, which nearly always decides; where not, 53 more bits do (Marsaglia 1963, "Generating discrete
random variables in a computer"). Both use survival probabilities, so the upper tail keeps its digits.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from lossagg.arrays import FloatArray, IntArray
from lossagg.errors import EngineError
from lossagg.families.base import CountLaw
from lossagg.kernels.simulation import GUIDES, draw_counts, draw_uniforms

CELLS = 2048
SMALLEST = 2.0**-54
LONGEST_TABLE = 2**18
MOST_IN_A_YEAR = 2.0**40
_USUAL, _AT_ONCE = 14, 66  # doublings, and counts between them, that are tried in one call


def search_table(survival: FloatArray) -> tuple[IntArray, FloatArray]:
    """(start of the search per cell, survival probabilities ending in 0), as `SizeArrays` holds them.

    Args:
        survival: P(X > values[k]) of every value, non-increasing; the last is taken as 0.
    """
    survival = np.append(survival[:-1], 0.0)
    largest = np.arange(1, CELLS + 1) / CELLS
    first = np.searchsorted(-survival, -largest, side="left")
    return first.astype(np.int64), survival


@dataclass(frozen=True, eq=False, repr=False)
class CountSampler:
    """Draws counts of any count law exactly.

    Attributes:
        law: the law.
        guide: the count of each cell, see `draw_counts`; empty where bisection draws instead.
        survival: P(N > n) for n = 0, 1, ..., the last 0.
    """

    law: CountLaw
    guide: np.ndarray
    survival: FloatArray

    def draw(self, state: np.ndarray, years: int) -> IntArray:
        """Counts of consecutive years, shape (years,); advances the generator."""
        if self.guide.size:
            counts = np.empty(years, dtype=np.int64)
            draw_counts(state, self.guide, self.survival, counts)
            return counts
        p = np.empty(years)
        draw_uniforms(state, p)
        return _smallest_not_exceeded(self.law, p)


def count_sampler(law: CountLaw, where: str) -> CountSampler:
    """The sampler of a count law.

    Raises:
        EngineError: a count that may exceed 10**12 a year.
    """
    highest = _highest_count(law, where)
    if highest >= LONGEST_TABLE:
        return CountSampler(law, np.empty(0, dtype=np.int32), np.empty(0))
    guide, survival = count_guide(np.asarray(law.sf(np.arange(highest + 1.0))))
    return CountSampler(law, guide, survival)


def count_guide(survival: FloatArray) -> tuple[np.ndarray, FloatArray]:
    """(count at the lower end of each cell, survival probabilities ending in 0), see `draw_counts`.

    Args:
        survival: P(N > n) for n = 0, 1, ...; the last is taken as 0.
    """
    survival = np.append(survival[:-1], 0.0)
    ends = np.arange(GUIDES + 1) / GUIDES
    count = np.searchsorted(-survival, -ends, side="left").astype(np.int64)
    mixed = np.append(count[:-1] != count[1:], False)
    return np.where(mixed, -1 - count, count).astype(np.int32), survival


def _highest_count(law: CountLaw, where: str) -> int:
    """A count that is not exceeded with a probability a 53-bit draw can see."""
    ends = 2.0 ** np.arange(np.log2(MOST_IN_A_YEAR) + 1.0)
    for part in (ends[:_USUAL], ends[_USUAL:]):
        enough = np.flatnonzero(np.asarray(law.sf(part)) <= SMALLEST)
        if enough.size:
            break
    else:
        raise EngineError(
            "the number of losses in a year may exceed 10**12",
            where=where,
            value=law.mean(),
            remedy="Simulate fewer, larger losses: raise the threshold from which losses are modelled.",
        )
    low, high = part[enough[0]] / 2.0, part[enough[0]]
    while high - low > 1.0:
        between = np.floor(np.linspace(low, high, _AT_ONCE))
        between = between[(between > low) & (between < high)]
        enough = np.flatnonzero(np.asarray(law.sf(between)) <= SMALLEST)
        first = enough[0] if enough.size else between.size
        low, high = np.concatenate(([low], between, [high]))[first : first + 2]
    return int(high)


def _smallest_not_exceeded(law: CountLaw, p: FloatArray) -> IntArray:
    """The smallest n with P(N > n) <= p, by bisection on all draws at once."""
    low = np.full(p.shape, -1.0)
    high = np.full(p.shape, MOST_IN_A_YEAR)
    while True:
        middle = np.floor((low + high) / 2.0)
        open_ = high - low > 1.0
        if not open_.any():
            return high.astype(np.int64)
        exceeded = np.zeros(p.shape, dtype=np.bool_)
        exceeded[open_] = np.asarray(law.sf(middle[open_])) > p[open_]
        low = np.where(open_ & exceeded, middle, low)
        high = np.where(open_ & ~exceeded, middle, high)
