"""A size law as a table of cubics, so that every law draws at the same speed.

For each half of the distribution and each octave [2**-k-1, 2**-k) of the tail probability t, 64 cells
(or more) hold a cubic through four exact quantiles at the nodes 0, 1/4, 3/4, 1 of the cell
(Chebyshev's extreme points: the error is a quarter of that of a Hermite cubic, and no density is
needed). Since a quantile behaves like a power of t, the relative error is the same in every octave,
about 0.004 a (a + 1) (a + 2) (a + 3) (cells)**-4 for t**-a.

The error is measured at three points between the nodes of every cell. A cell fails where the size is
off by more than 1e-8 of it and the tail probability by more than 1e-8 of it, and wherever an atom, a
splice point or an end of the support falls. It is then split in 64; where few parts fail again, as
they do at a kink, these are split too, up to three times. What still fails is flagged, its draws
evaluated by the law itself. So is everything beyond the table, t < 2**-23, two losses in ten million.
The traps: a kink hides between points of measurement, hence the law's own breakpoints; atoms of a law
that is discrete throughout would flag everything, hence its exact search table; an atom must come out
as the very amount, since terms may jump there.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from lossagg.arrays import BoolArray, FloatArray, IntArray
from lossagg.engines.search_table import search_table
from lossagg.families.base import SizeLaw
from lossagg.kernels.simulation import REFINED, SizeArrays

DEPTH = 22
SUB_BITS = 6
PARTS = int(REFINED)
LEVELS = 3
MOST_REFINED = 64
TOLERANCE = 1e-8
LARGEST_SIZE = 1e300
NODES = np.array([0.0, 0.25, 0.75, 1.0])
BETWEEN = np.array([0.1, 0.5, 0.9])


@dataclass(frozen=True, eq=False, repr=False)
class QuantileTable:
    """What the simulation draws the sizes of one law from.

    Attributes:
        law: the law, for exact evaluation.
        arrays: the table as kernels take it.
        flagged: probability that a draw is evaluated by the law itself.
        error: largest measured error of the cells in use: of the size relative to the size, or of
            its tail probability relative to that, whichever is smaller; 0 for discrete laws.
    """

    law: SizeLaw
    arrays: SizeArrays
    flagged: float
    error: float

    def exact(self, probability: FloatArray) -> FloatArray:
        """The sizes of flagged draws, from the law itself.

        Args:
            probability: t of each draw: positive for P(X > size) = t, negative for P(X <= size) = -t.
        """
        sizes = np.empty(probability.shape)
        upper = probability > 0
        sizes[upper] = _quantile(self.law, probability[upper], upper=True)
        sizes[~upper] = _quantile(self.law, -probability[~upper], upper=False)
        return sizes


def quantile_table(law: SizeLaw) -> QuantileTable:
    """The table of a law: cubics, or an exact search where every size is an atom."""
    if law.atoms and np.isclose(sum(p for _, p in law.atoms), 1.0, rtol=0.0, atol=1e-12):
        values = np.array(sorted(amount for amount, _ in law.atoms))
        first, survival = search_table(np.asarray(law.sf(values)))
        return QuantileTable(law, SizeArrays(np.empty((0, 4)), 0, 0, first, survival, values), 0.0, 0.0)
    return _cubic_table(law)


def _quantile(law: SizeLaw, t: FloatArray, *, upper: bool) -> FloatArray:
    """Exact sizes, none above 1e300: sums of them must stay finite."""
    if t.size == 0:
        return np.empty(t.shape)
    with np.errstate(over="ignore", under="ignore", divide="ignore"):
        sizes = np.asarray(law.isf(t) if upper else law.ppf(t), dtype=np.float64)
    return np.minimum(sizes, LARGEST_SIZE)


def _cubic_table(law: SizeLaw) -> QuantileTable:
    cells = 2**SUB_BITS
    octaves = 2.0 ** np.arange(-1 - DEPTH, -1)
    left = (octaves[:, None] * (1.0 + np.arange(cells) / cells)).ravel()
    width = np.repeat(octaves / cells, cells)
    rows, flagged, error, used = [], 0.0, 0.0, 0
    failed: dict[bool, tuple[IntArray, FloatArray, FloatArray]] = {}
    for upper in (True, False):
        cubics, bad, worst = _checked_cubics(law, left, width, upper=upper)
        failed[upper] = (used + 1 + np.flatnonzero(bad), left[bad], width[bad])
        rows += [np.full((1, 4), np.nan), cubics]
        flagged, error, used = flagged + float(octaves[0]), max(error, worst), used + 1 + left.size
    table = np.concatenate(rows)
    for upper in (True, False):
        for level in range(LEVELS):
            row, left, width = failed[upper]
            if level > 0 and row.size > MOST_REFINED:
                break
            left = (left[:, None] + width[:, None] * np.arange(PARTS) / PARTS).ravel()
            width = np.repeat(width / PARTS, PARTS)
            cubics, bad, worst = _checked_cubics(law, left, width, upper=upper)
            table[row, 1] = table.shape[0] + PARTS * np.arange(row.size)
            failed[upper] = (table.shape[0] + np.flatnonzero(bad), left[bad], width[bad])
            table, error = np.concatenate((table, cubics)), max(error, worst)
        flagged += float(failed[upper][2].sum())
    none = np.empty(0)
    arrays = SizeArrays(table, SUB_BITS, DEPTH, np.empty(0, np.int64), none, none)
    return QuantileTable(law, arrays, flagged, error)


def _checked_cubics(
    law: SizeLaw, left: FloatArray, width: FloatArray, *, upper: bool
) -> tuple[FloatArray, BoolArray, float]:
    """(cubics with NaN where they fail, which fail, largest error of the others) of some cells."""
    if left.size == 0:
        return np.empty((0, 4)), np.empty(0, dtype=np.bool_), 0.0
    cubics = _cubics(law, left, width, upper=upper)
    errors = _errors(law, cubics, left, width, upper=upper)
    bad = ~(errors <= TOLERANCE) | _holds_a_break(law, left, width, upper=upper)
    cubics[bad] = np.nan
    return cubics, bad, float(errors[~bad].max(initial=0.0))


def _cubics(law: SizeLaw, left: FloatArray, width: FloatArray, *, upper: bool) -> FloatArray:
    """Coefficients by powers of the position in the cell, shape (cells, 4)."""
    t = left[:, None] + width[:, None] * NODES
    at_nodes = _quantile(law, t.ravel(), upper=upper).reshape(t.shape)
    with np.errstate(over="ignore", under="ignore", invalid="ignore"):
        cubics: FloatArray = np.ascontiguousarray(
            at_nodes @ np.linalg.inv(np.vander(NODES, increasing=True)).T
        )
    constant = (at_nodes == at_nodes[:, :1]).all(axis=1)
    cubics[constant] = 0.0
    cubics[constant, 0] = at_nodes[constant, 0]
    return cubics


def _errors(
    law: SizeLaw, cubics: FloatArray, left: FloatArray, width: FloatArray, *, upper: bool
) -> FloatArray:
    """Per cell the largest measured error, of the size or of its tail probability, both relative."""
    t = left[:, None] + width[:, None] * BETWEEN
    exact = _quantile(law, t.ravel(), upper=upper).reshape(t.shape)
    with np.errstate(all="ignore"):
        table = cubics @ np.vander(BETWEEN, 4, increasing=True).T
        errors = np.where(table == exact, 0.0, np.abs(table - exact) / exact)
        wrong = ~(errors <= TOLERANCE) & (table >= 0.0) & (exact < LARGEST_SIZE)
        if wrong.any():
            reached = np.asarray((law.sf if upper else law.cdf)(table[wrong]))
            aimed = np.asarray((law.sf if upper else law.cdf)(exact[wrong]))
            errors[wrong] = np.fmin(errors[wrong], np.abs(reached - aimed) / aimed)
    errors[exact >= LARGEST_SIZE] = np.inf
    worst: FloatArray = np.where(np.isnan(errors), np.inf, errors).max(axis=1)
    return worst


def _holds_a_break(law: SizeLaw, left: FloatArray, width: FloatArray, *, upper: bool) -> BoolArray:
    """Whether a breakpoint's or an atom's probability falls inside a cell."""
    amounts = np.array([*law.breakpoints, *(amount for amount, _ in law.atoms)])
    holds = np.zeros(left.shape, dtype=np.bool_)
    if amounts.size == 0:
        return holds
    below = np.nextafter(amounts, 0.0)
    for points in (amounts, below):
        t = np.asarray((law.sf if upper else law.cdf)(points))
        cell = np.searchsorted(left, t, side="left") - 1
        cell, t = cell[cell >= 0], t[cell >= 0]
        holds[cell[t < left[cell] + width[cell]]] = True
    return holds
