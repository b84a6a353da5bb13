"""What the dependences of a book do to one block of simulated years.

Each dependence draws from a stream of its own, derived from (seed, its name, block), once per block and
for all of its lines: the factor of each year, the shocks of each year, the ranks the annual totals are to
have. A copula then moves whole years of a line within the block, events and all, so that the ranks of its
totals become those drawn (in the manner of Iman and Conover 1982, "A distribution-free approach to inducing
rank correlation"): every line keeps exactly the years it had. Years with equal totals, those without a loss
above all, are exchangeable and keep their order.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
from scipy.special import gammainccinv, ndtri

from lossagg.arrays import FloatArray, IntArray
from lossagg.engines.correlation import factor_of
from lossagg.engines.dependence import CommonShock, Copula, Dependence, SharedFactor
from lossagg.engines.placed import Line
from lossagg.engines.streams import BLOCK_YEARS, line_key
from lossagg.families import NegativeBinomial, Poisson
from lossagg.kernels.counts import PART, poisson_counts

_YEARS_AT_ONCE = 2**10


@dataclass(frozen=True)
class JointBlock:
    """One block of years: what its dependences say of each line.

    Attributes:
        counts: per line whose count depends on others, its counts, shape (BLOCK_YEARS,), without the
            common shocks that hit it.
        shocks: per line hit by common shocks, their number in each year, shape (BLOCK_YEARS,).
        scale: per line under inflation, the factor on every loss of each year, shape (BLOCK_YEARS,).
        factors: per shared factor, its value in each year, shape (BLOCK_YEARS,).
        ranks: per line under a copula, its scores; the years of the block come in their order.
    """

    counts: dict[str, IntArray] = field(default_factory=dict)
    shocks: dict[str, IntArray] = field(default_factory=dict)
    scale: dict[str, FloatArray] = field(default_factory=dict)
    factors: dict[str, FloatArray] = field(default_factory=dict)
    ranks: dict[str, FloatArray] = field(default_factory=dict)

    def source(self, line: str, totals: FloatArray) -> IntArray:
        """Which simulated year of a line stands at each year of the block: not its own under a copula.

        Args:
            line: its name.
            totals: the line's annual totals as simulated, shape (years,); the block may be incomplete.
        """
        if line not in self.ranks:
            return np.arange(totals.size)
        scores = self.ranks[line][: totals.size]
        by_total = np.argsort(totals, kind="stable")
        place = np.empty(totals.size, dtype=np.int64)
        place[np.argsort(scores, kind="stable")] = by_total
        return place


ALONE = JointBlock()
"""A block of lines that depend on nothing."""


def joint_block(
    lines: Sequence[Line], dependences: Sequence[Dependence], *, seed: int, block: int
) -> JointBlock:
    """Draw what the dependences of a book say of one block.

    Args:
        lines: the lines of the book.
        dependences: as checked against them.
        seed: the seed of the run.
        block: number of the block.
    """
    drawn = JointBlock()
    laws = {line.name: line.frequency for line in lines}
    for dependence in dependences:
        stream = _Stream(seed, f"dependence\0{dependence.name}", block)
        if isinstance(dependence, Copula):
            drawn.ranks.update(zip(dependence.lines, copula_scores(dependence, stream), strict=True))
        elif isinstance(dependence, CommonShock):
            shocks = _poisson(np.full(BLOCK_YEARS, dependence.rate), stream)
            for name in dependence.lines:
                own = _Stream(seed, f"other losses\0{name}", block)
                others = _poisson(np.full(BLOCK_YEARS, max(laws[name].mean() - dependence.rate, 0.0)), own)
                drawn.counts[name], drawn.shocks[name] = others, shocks
        else:
            _share(dependence, laws, drawn, stream, seed=seed, block=block)
    return drawn


def _share(
    dependence: SharedFactor,
    laws: Mapping[str, object],
    drawn: JointBlock,
    stream: _Stream,
    *,
    seed: int,
    block: int,
) -> None:
    factor = np.asarray(dependence.factor.isf(stream.uniforms(BLOCK_YEARS)))
    drawn.factors[dependence.name] = factor
    for name in dependence.lines:
        if dependence.on == "inflation":
            drawn.scale[name] = factor
            continue
        law = laws[name]
        assert isinstance(law, Poisson | NegativeBinomial)
        own = _Stream(seed, f"losses given the factor\0{name}", block)
        means = law.mean() * factor
        if isinstance(law, NegativeBinomial):
            # Poisson with a gamma factor of its own, beside the one it shares.
            shape = 1.0 / law.dispersion
            means = means * law.dispersion * gammainccinv(shape, own.uniforms(BLOCK_YEARS))
        drawn.counts[name] = _poisson(means, own)


def copula_scores(copula: Copula, stream: _Stream) -> FloatArray:
    """Scores of each line whose ranks follow the copula, shape (lines, BLOCK_YEARS).

    Normal scores, and for the t copula divided by the root of a common chi-squared over its degrees of
    freedom (McNeil, Frey and Embrechts 2015, "Quantitative Risk Management", section 7.3).
    """
    number = len(copula.lines)
    normal = ndtri(stream.uniforms(number * BLOCK_YEARS)).reshape(number, BLOCK_YEARS)
    scores = factor_of(copula.matrix) @ normal
    if copula.degrees_of_freedom is None:
        return np.asarray(scores)
    half = copula.degrees_of_freedom / 2.0
    return np.asarray(scores / np.sqrt(gammainccinv(half, stream.uniforms(BLOCK_YEARS)) / half))


class _Stream:
    """Uniforms in (0, 1) from numpy's bit generator, whose words numpy promises not to change."""

    def __init__(self, seed: int, name: str, block: int) -> None:
        # No name a user gives holds a zero character, so these streams are nobody else's.
        self._bits = np.random.SFC64(np.random.SeedSequence(seed, spawn_key=(*line_key(name), block)))

    def uniforms(self, number: int) -> FloatArray:
        """The next uniforms, odd multiples of 2**-53, never 0 or 1, shape (number,)."""
        # One bit more would round the last of them to 1, whose normal score is infinite.
        words = self._bits.random_raw(number) >> np.uint64(12)
        return np.asarray((words.astype(np.float64) + 0.5) * 2.0**-52)


def _poisson(means: FloatArray, stream: _Stream) -> IntArray:
    counts = np.empty(means.size, dtype=np.int64)
    parts = np.maximum(np.ceil(means / PART), 1.0).astype(np.int64)
    for first in range(0, means.size, _YEARS_AT_ONCE):
        own = slice(first, first + _YEARS_AT_ONCE)
        poisson_counts(means[own], stream.uniforms(int(parts[own].sum())), counts[own])
    return counts
