"""Random draws: the generator, counts from a search table, sizes from a quantile table.

The generator is SFC64 (Doty-Humphrey 2010, "PractRand"), stepped here inside the loops from a state
that numpy seeded, so that its bits are numpy's own. A draw uses the top bit to choose a half of the
distribution and 52 more for a probability t in (0, 1/2): t is the probability of a larger value in
the upper half, of a smaller one in the lower half. Neither tail loses digits to 1 - t.

The quantile table is indexed by the floating-point bits of t: the exponent names an octave, the
leading bits of the mantissa a cell within it, the rest the position within the cell, where a cubic
is evaluated. A cell that cannot be trusted holds NaN; its draws are handed back for exact evaluation.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from lossagg.arrays import FloatArray, IntArray
from lossagg.kernels.compile import compiled

U1, U3, U11, U24, U40, U63 = (np.uint64(k) for k in (1, 3, 11, 24, 40, 63))
MANTISSA = np.uint64(2**53 - 1)


class SizeArrays(NamedTuple):
    """What the kernels need of a size law.

    Attributes:
        cubics: shape (2 * (1 + depth * 2**sub_bits), 4), coefficients by cell, upper half first; the
            first row of each half stands for everything beyond the table. Empty for a discrete law.
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
            x = 0.0
            flagged[found] = i
            probability[found] = -t if lower else t
            found += 1
        out[i] = x
    state[0], state[1], state[2], state[3] = a, b, c, count
    return found
