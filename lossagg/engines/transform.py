"""One pass of the Fourier method: severities on a lattice, through the pgf, back to probabilities.

The transform of a compound sum is the count's generating function at the transform of one payment, so
f = F^-1[ prod_l P_l( F[g_l] ) ] (Heckman and Meyers 1983; Grubel and Hermesmeier 1999); lines that depend on
each other have a joint generating function in place of the product, see `clusters`. Its traps and their cures
here:

* wrap-around: payments beyond the lattice are left out, which changes no probability on it; sums that
  still run over twice the lattice are bounded by Chernoff's inequality, and the sequence is tilted by
  exp(-theta k) just enough to bring them below the round-off. More tilt would amplify round-off instead:
  what it is about the mean, it is exp(theta) times as large a step further out. A tilt that makes it no more
  than e times as large on the way to the end is always taken, since it keeps round-off off the sums below.
* the density is sampled: mean-preserving weights (Gerber 1982) spread each payment over a triangle, in
  the frequency domain the factor (sin(wh/2) / (wh/2))**2; taking off a twelfth of the second difference
  undoes it to fourth order. It is done to the continuous part only; atoms stay where they are.
* rare payments: a count is thinned to losses that pay, so 1e-9 of them keep their digits.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import NamedTuple

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.engines.clusters import Cluster, Mixed
from lossagg.engines.compound import CompoundSum, Part
from lossagg.engines.folded import ComplexArray, Folded, transforms_of
from lossagg.engines.limited import LimitedMeans
from lossagg.engines.running import product_sum
from lossagg.engines.sampling import Masses, severity_masses
from lossagg.engines.size_biased import size_biased
from lossagg.families.base import CountLaw

_WRAPPED = 1e-15
_MOST_TILT = 34.0
_EPSILON = float(np.finfo(float).eps)
_BINS = 2048
# Frequencies taken together.
_AT_ONCE = 2**14
_NEAR = 256


@dataclass(frozen=True)
class LatticeSum:
    """Probabilities of the sum on the lattice, shape (n,), and how far they may be off.

    Attributes:
        probabilities: P(S = kh), wrapped mass included.
        below: moments of order 0, 1 and 2 of what the sampling correction puts below zero, in steps.
        slack: bound of the round-off in every running sum, shape (n,).
    """

    probabilities: FloatArray
    below: tuple[float, float, float]
    slack: FloatArray


class Spread(NamedTuple):
    """A line on the lattice: its count, one payment above zero, the probability of none, and of an atom."""

    frequency: CountLaw
    masses: Masses
    none: float
    atom: float

    def expected_rounded(self, index: FloatArray, upward: bool) -> float:
        """Expected yearly sum of the lattice indices of the payments on the lattice."""
        masses = self.masses
        if upward:
            total = product_sum(index[1:], masses.down[:-1]) + product_sum(index, masses.atoms_up)
        else:
            total = product_sum(index, masses.down) + product_sum(index, masses.atoms_down)
        return self.frequency.mean() * total


@dataclass(frozen=True)
class Argument:
    """The transform of one payment above zero, to be taken piece by piece.

    Attributes:
        none: probability of no payment.
        part: transform of masses on the lattice; None where there are none.
        moved: transform of others that may still be moved; None where there are none.
        shift: transform of how far they are moved; None where they stay.
    """

    none: float
    part: ComplexArray | None
    moved: ComplexArray | None = None
    shift: ComplexArray | None = None

    def __call__(self, piece: slice) -> ComplexArray:
        """Its values at some of the frequencies."""
        if self.part is not None:
            total = self.part[piece] + self.none
        else:
            total = np.full(piece.stop - piece.start, self.none, dtype=np.complex128)
        if self.moved is not None:
            total += self.moved[piece] if self.shift is None else self.moved[piece] * self.shift[piece]
        return total


class LatticeTransform:
    """The transforms of all lines of a sum on one lattice.

    Args:
        compound: the sum.
        step: distance of the lattice points.
        points: number of lattice points.

    Attributes:
        wrapped: bound of the probability that wraps around onto the lattice.
        lines: the lines as discretised.
    """

    def __init__(self, compound: CompoundSum, step: float, points: int) -> None:
        self.points = points
        self._compound = compound
        self._lacking = compound.slack(step, points)
        self.lines = [_spread(part, step, points) for part in compound.parts]
        self._transforms = transforms_of(2 * points)
        self.length = self._transforms.length
        binned = [_binned(line.masses) for line in self.lines]
        reachable, index = self._chernoff(binned), np.arange(float(points))
        means = [
            line.frequency.mean() * (tops @ chances)
            for line, (tops, chances) in zip(self.lines, binned, strict=True)
        ]
        harmless = self.length / max(points - sum(means), 1.0)
        total_tilt = min(max(float(np.log(max(reachable / _WRAPPED, 1.0))), harmless), _MOST_TILT)
        self.wrapped = float(np.exp(-total_tilt)) * reachable
        self._tilt = total_tilt / self.length
        self._weights = -self._tilt * index
        np.exp(self._weights, out=self._weights)

    @cached_property
    def _shift(self) -> ComplexArray:
        """The transform of one step."""
        return np.asarray(np.exp(-self._tilt) * self._transforms.step())

    def down(self) -> LatticeSum:
        """The sum of payments rounded down."""
        lines = [(line.none, line.masses) for line in self.lines]
        parts = [(none, self._transform(masses.down + masses.atoms_down)) for none, masses in lines]
        return self.sum_of([Argument(*part) for part in parts])

    def sides(self) -> tuple[LatticeSum, LatticeSum]:
        """The sums of payments rounded down and rounded up."""
        lowered, raised = self.rounded()
        return self.sum_of(lowered), self.sum_of(raised)

    def rounded(self) -> tuple[list[Argument], list[Argument]]:
        """The transforms of one payment of each line rounded down and rounded up."""
        lowered, raised = [], []
        for line in self.lines:
            masses = line.masses
            continuous, atoms = self._transform(masses.down), self._transform(masses.atoms_down)
            lowered.append(Argument(line.none, atoms, continuous))
            if not np.array_equal(masses.atoms_down, masses.atoms_up):
                atoms = self._transform(masses.atoms_up)
            raised.append(Argument(line.none, atoms, continuous, self._shift))
        return lowered, raised

    def sum_of(self, arguments: Sequence[Argument], *, below: bool = False) -> LatticeSum:
        """The sum of payments with these transforms.

        Args:
            arguments: one payment of each line.
            below: whether some of them are put below zero.
        """
        return self._back(self._joint(arguments), below=below)

    def kept(self) -> LatticeSum:
        """The sum of payments moved to the two nearest points with their means kept: never narrower than the
        truth, however long the step."""
        return self._back(self._joint([self._kept_of(line) for line in self.lines]))

    def even(self) -> LatticeSum:
        """The sum of payments with their means kept and the sampling corrected."""
        return self.sum_of([self._even_of(line) for line in self.lines], below=True)

    def limited(self, step: float) -> LimitedMeans | None:
        """Bounds of the limited means from payments moved to the two nearest points with their means kept.
        None where nothing is moved, where the derivative of a count's generating function is not known,
        and for factors that are integrated numerically, whose derivative would take too long.

        What is added to the upper bound may be too large but not too small, so that it may wrap around: half
        the length is enough, which is every other frequency.
        """
        if not any(line.masses.bulge.any() for line in self.lines):
            return None
        clusters = self._compound.clusters
        counts = [[line.frequency for line in self._of(cluster)] for cluster in clusters]
        if any(isinstance(cluster, Mixed) for cluster in clusters) or any(
            size_biased(count) is None for own in counts for count in own
        ):
            return None
        ones = [self._kept_of(line) for line in self.lines]
        whole = self._transforms
        few = whole.half() if whole.halves else whole
        bulges = [self._transform(line.masses.bulge, few) for line in self.lines]
        joint = np.ones(whole.frequencies, dtype=np.complex128)
        rising = np.zeros(few.frequencies, dtype=np.complex128)
        done = 0
        for piece in self._pieces():
            total = joint[piece]
            chosen = (lambda values: values) if few is whole else whole.every_other
            own = slice(done, done + len(chosen(total)))
            slope, done = rising[own], own.stop
            for cluster, laws in zip(clusters, counts, strict=True):
                arguments = [ones[place](piece) for place in cluster.members]
                pgf = cluster.pgf(laws, arguments)
                some, one = chosen(pgf), [chosen(argument) for argument in arguments]
                slope *= some
                for member, place in enumerate(cluster.members):
                    bulge = bulges[place]
                    if bulge is not None:
                        brought = cluster.slope(laws, one, member, some)
                        slope += bulge[own] * brought * chosen(total)
                total *= pgf
        tilted = few.inverse(rising, self.points)
        off = self._relative(sum(self._seen(cluster) for cluster in clusters)) * tilted.norm
        least, most = bounded_survivals(self._back(joint), self.wrapped)
        return LimitedMeans.of(step, least, most, (tilted.first + off) / self._weights)

    def _seen(self, cluster: Cluster) -> float:
        """Expected number of losses of a year, and of the others beside one of them."""
        counts = [line.frequency for line in self._of(cluster)]
        expected = sum(count.mean() for count in counts)
        return expected + float(cluster.covariances(counts, np.ones(len(counts))).sum()) / expected

    def atoms(self) -> tuple[FloatArray, float]:
        """Probabilities of sums made of atoms alone, shape (n,), and the probability of any other sum."""
        log_atoms = self._log_joint([line.none + line.atom for line in self.lines])
        if any(line.masses.atoms_even.any() for line in self.lines):
            parts = [Argument(line.none, self._transform(line.masses.atoms_even)) for line in self.lines]
            alone = self.sum_of(parts).probabilities
            alone = np.where(alone > _EPSILON, alone, 0.0)
        else:
            alone = np.zeros(self.points)
            alone[0] = np.exp(self._log_joint([line.none for line in self.lines]))
        continuous = any(line.masses.even.any() for line in self.lines)
        return alone, float(-np.expm1(log_atoms)) if continuous else 0.0

    def _pieces(self) -> Iterator[slice]:
        """Frequencies in pieces that stay in the cache from the transform of payments to that of the sum."""
        last = self._transforms.frequencies
        return (slice(first, min(first + _AT_ONCE, last)) for first in range(0, last, _AT_ONCE))

    def _joint(self, arguments: Sequence[Argument]) -> ComplexArray:
        """The transform of the sum, from that of one payment of each line."""
        joint = np.ones(self._transforms.frequencies, dtype=np.complex128)
        clusters = [(one, [line.frequency for line in self._of(one)]) for one in self._compound.clusters]
        for piece in self._pieces():
            for k, (cluster, counts) in enumerate(clusters):
                own = cluster.pgf(counts, [arguments[place](piece) for place in cluster.members])
                joint[piece] = joint[piece] * own if k > 0 else own
        return joint

    def _kept_of(self, line: Spread) -> Argument:
        return Argument(line.none, self._transform(line.masses.spread + line.masses.atoms_even))

    def _even_of(self, line: Spread) -> Argument:
        masses = line.masses
        return Argument(line.none, self._transform(masses.even + masses.atoms_even, below=masses.under[0]))

    def _of(self, cluster: Cluster) -> list[Spread]:
        return [self.lines[place] for place in cluster.members]

    def _log_joint(self, arguments: Sequence[float]) -> float:
        """The logarithm of the joint generating function of all lines at a number for each."""
        return sum(
            float(
                cluster.log_pgf(
                    [line.frequency for line in self._of(cluster)],
                    [arguments[place] for place in cluster.members],
                )
            )
            for cluster in self._compound.clusters
        )

    def _transform(
        self, masses: FloatArray, transforms: Folded | None = None, *, below: float = 0.0
    ) -> ComplexArray | None:
        """The transform of masses on the lattice, and of one a step below it; None where there are none."""
        if below == 0.0 and not masses.any():
            return None
        one_below = float(below * np.exp(self._tilt))
        return (transforms or self._transforms).forward(masses * self._weights, one_below)

    def _back(self, product: ComplexArray, *, below: bool = False) -> LatticeSum:
        tilted = self._transforms.inverse(product, self.points, self.points // 4 + 1 if below else 0)
        return LatticeSum(
            np.asarray(tilted.first / self._weights), self._below(tilted.last), self._slack(tilted.norm)
        )

    def _below(self, tilted: FloatArray) -> tuple[float, float, float]:
        """Moments of order 0, 1, 2 of what lies at negative indices, the far end of the transform."""
        index = np.arange(-float(len(tilted)), 0.0)
        negative = tilted * np.exp(self._tilt * index)
        return float(negative.sum()), product_sum(index, negative), product_sum(index**2, negative)

    def _slack(self, norm: float) -> FloatArray:
        """Round-off of the running sums: relative errors of the transform, by Cauchy and Schwarz; and what
        a rule for the factors that lines share may still lack.

        Each transform is off by a few log2(length) roundings, and the count multiplies a relative
        error of one payment's transform by at most its mean. An estimate by norms, not a proof; tested
        against recursions in extended precision.

        Args:
            norm: the norm of the tilted sequence.
        """
        count = sum(line.frequency.mean() for line in self.lines)
        slack = self._relative(count) * norm * self._growth
        return np.asarray(slack + self._lacking) if np.any(self._lacking) else slack

    def _relative(self, count: float) -> float:
        return 4.0 * _EPSILON * float(np.log2(self.length) + count)

    @cached_property
    def _growth(self) -> FloatArray:
        """How far errors of size one in the tilted sequence can add up in running sums, shape (n,)."""
        terms = np.arange(1.0, self.points + 1.0)
        if self._tilt > 0:
            np.minimum(terms, 1.0 / -np.expm1(-2.0 * self._tilt), out=terms)
        np.sqrt(terms, out=terms)
        terms /= self._weights
        return terms

    def _chernoff(self, binned: Sequence[tuple[FloatArray, FloatArray]]) -> float:
        """Bound of the probability that payments on the lattice add up to its transform length, from one
        payment of each line in bins."""
        bound = 0.0
        for scale in (1.0, 2.0, 4.0, 8.0, 16.0, 32.0, 64.0, 128.0):
            rate = scale / self.points
            exponent = -rate * self.length
            with np.errstate(over="ignore", invalid="ignore"):
                moments = [
                    line.none + float(chances @ np.exp(rate * tops))
                    for line, (tops, chances) in zip(self.lines, binned, strict=True)
                ]
                exponent += self._log_joint(moments)
            if not np.isfinite(exponent):
                break
            bound = min(bound, exponent)
        return float(np.exp(bound))


def bounded_survivals(total: LatticeSum, wrapped: float) -> tuple[FloatArray, FloatArray]:
    """Bounds of P(S > kh) from below and from above, non-increasing, shape (n,) each.

    Wrapped mass adds to the probabilities on the lattice, so it can only lower the survival function:
    an upper bound must allow for it.
    """
    from lossagg.kernels.bounds import survival_bounds

    least, most = np.empty(len(total.slack)), np.empty(len(total.slack))
    survival_bounds(total.probabilities, total.slack, wrapped, least, most)
    return least, most


def _spread(part: Part, step: float, points: int) -> Spread:
    """A line on the lattice, its count thinned to losses that pay where the family is closed under it."""
    count, payment = part
    amounts, chances = payment.atoms
    atom = float(chances[amounts > 0].sum())
    paying = payment.paying
    if paying == 1.0 or count.recursion is None:
        return Spread(count, severity_masses(payment, step, points), 1.0 - paying, atom)
    masses = severity_masses(payment, step, points, paying)
    return Spread(count.thinned(paying), masses, 0.0, atom / paying)


def _binned(masses: Masses) -> tuple[FloatArray, FloatArray]:
    """One payment rounded up, gathered in bins: their highest indices and probabilities.

    A bin is a 256th of its index wide, up to a 2,048th of the lattice: among many losses nearly all are far
    smaller than that, and each counted as so much would bound nothing.
    """
    points = len(masses.down)
    width = -(-points // _BINS)
    near = np.rint(np.geomspace(_NEAR, max(_NEAR * width, _NEAR), max(int(_NEAR * np.log(width)), 1) + 1))
    edges = np.concatenate((np.arange(_NEAR), near, np.arange(_NEAR * width, points, width)))
    starts = np.unique(edges[edges < points].astype(np.int64))
    last = np.append(starts[1:], points) - 1.0
    binned = [np.add.reduceat(part, starts) for part in (masses.down, masses.atoms_up)]
    return np.concatenate((last + 1.0, last)), np.concatenate(binned)
