"""What each line brings to the worst years of a sum: E[X_l | S in the tail], without simulation noise.

E[X_l; S = k] on a lattice has the transform of k g(k), the size-biased payment, times the derivative of the
joint generating function: one loss of the year is looked at, and the others are as they are beside it (Denuit
2019, "Size-biased transform and conditional mean risk sharing", ASTIN Bulletin 49; Blier-Wong, Cossette and
Marceau 2022, "Generating function method for the efficient computation of expected allocations"). Over the
lines these add up to k P(S = k), so what is read off the tail adds up to its mean (Tasche 1999, "Risk
contributions and performance measurement": Euler's principle).
"""

from __future__ import annotations

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.engines.compound import CompoundSum
from lossagg.engines.folded import ComplexArray
from lossagg.engines.running import running_sums
from lossagg.engines.transform import LatticeTransform

_SAME = 1e-12


class TailShares(LatticeTransform):
    """The parts of a sum on a lattice that reaches its quantile."""

    def _product(self, parts: list[ComplexArray]) -> ComplexArray:
        total = np.ones(self._transforms.frequencies, dtype=np.complex128)
        for part in parts:
            total *= part
        return total

    def expected_in_tail(self, level: float, step: float) -> FloatArray:
        """E[X_l; S in the worst 1 - level of years] of every part, the atom at the quantile split fairly.

        The years at the quantile itself are taken in proportion (Acerbi and Tasche 2002). What lies below is
        subtracted from the exact mean, so nothing beyond the lattice is lost.

        Args:
            level: in (0, 1), its quantile on the lattice.
            step: distance of the lattice points.

        Returns:
            Amounts, shape (parts,).
        """
        clusters = self._compound.clusters
        counts = [[line.frequency for line in self._of(cluster)] for cluster in clusters]
        everywhere = slice(0, self._transforms.frequencies)
        arguments = [[self._even_of(line)(everywhere) for line in self._of(cluster)] for cluster in clusters]
        joint = [cluster.pgf(counts[k], arguments[k]) for k, cluster in enumerate(clusters)]
        total = self._back(self._product(joint), below=True)
        below = total.below[0] + running_sums(total.probabilities)
        place = int(np.searchsorted(below, level - _SAME))
        atom = total.probabilities[place]
        taken = min(max((below[place] - level) / atom, 0.0), 1.0) if atom > 0 else 0.0
        shares = np.empty(len(self.lines))
        index = np.arange(self.points, dtype=np.float64)
        for own, cluster in enumerate(clusters):
            lines = self._of(cluster)
            others = self._product([part for k, part in enumerate(joint) if k != own])
            for member, (line, part) in enumerate(zip(lines, cluster.members, strict=True)):
                masses = line.masses
                found = index * (masses.even + masses.atoms_even)
                biased = self._transform(found, below=-masses.under[0])
                biased = np.zeros_like(others) if biased is None else biased
                slope = cluster.slope(counts[own], arguments[own], member, joint[own])
                brought = self._back(others * biased * slope, below=True)
                inside = brought.below[0] + float(running_sums(brought.probabilities[: place + 1])[-1])
                mean = self._compound.parts[part].frequency.mean() * self._compound.parts[part].payment.mean
                shares[part] = mean - step * (inside - taken * float(brought.probabilities[place]))
        return shares


def tail_contributions(compound: CompoundSum, level: float, step: float, points: int) -> FloatArray:
    """Mean of every part of a sum in its worst 1 - level of years, on one lattice, shape (parts,).

    Args:
        compound: the sum, with a finite mean.
        level: in (0, 1).
        step: distance of the lattice points.
        points: their number; the last must lie beyond the quantile.
    """
    return TailShares(compound, step, points).expected_in_tail(level, step) / (1.0 - level)
