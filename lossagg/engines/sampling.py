"""One payment on the lattice of the Fourier engine: rounded down, its mean kept, rounded up."""

from __future__ import annotations

from functools import cached_property

import numpy as np

from lossagg.arrays import FloatArray, IntArray
from lossagg.engines.payment import Payment
from lossagg.engines.span import places

_NEVER = 1e-30
# Sixth differences, relative to the value, that leave an average exact to 1e-14.
_SMOOTH = 3e-12
_FEW_BLOCKS = 4
_FIRST = 64
_NODES, _SHARES = (part / 2.0 for part in np.polynomial.legendre.leggauss(12))
_NODES = _NODES + 0.5
_PANELS = 2.0 ** np.arange(-60.0, 1.0)


class Masses:
    """One payment above zero on the lattice, each way when first asked for, shape (n,) each; what lies beyond
    the lattice is left out.

    Args:
        payment: the law of the payment.
        step: distance of the lattice points.
        points: number of lattice points, from 0.
        share: what all probabilities are divided by.
    """

    def __init__(self, payment: Payment, step: float, points: int, share: float = 1.0) -> None:
        self._payment, self._step, self._points, self._share = payment, step, points, share
        reached = min(points, int(payment.upper(_NEVER) / step) + 2) if payment.stretches else 0
        self._edges = step * np.arange(reached + 1.0)

    @cached_property
    def down(self) -> FloatArray:
        """The continuous part rounded down; shifted by one step it is the part rounded up."""
        return self._padded(self._survival[:-1] - self._survival[1:])

    @cached_property
    def spread(self) -> FloatArray:
        """The continuous part with every cell's mean kept, nothing corrected."""
        if not self._payment.stretches:
            return np.zeros(self._points)
        return self._padded(-np.diff(self._averages, prepend=self._payment.continuous_mass / self._share))

    @cached_property
    def bulge(self) -> FloatArray:
        """By cell, a bound of what keeping the mean adds to E[max(Y - x, 0)] summed over x, in steps."""
        index, part, chances = self._atoms
        bulge = _bulges(self.down, self._averages - self._survival[1:])
        return bulge + self._gathered(index, chances * part * (1 - part))

    @property
    def even(self) -> FloatArray:
        """The continuous part with every cell's mean kept and the sampling corrected."""
        return self._sampled[0]

    @property
    def under(self) -> FloatArray:
        """What the correction puts at -h."""
        return self._sampled[1]

    @cached_property
    def atoms_down(self) -> FloatArray:
        """Atoms rounded down."""
        index, _, chances = self._atoms
        return self._gathered(index, chances)

    @cached_property
    def atoms_even(self) -> FloatArray:
        """Atoms split so that their mean is kept."""
        index, part, chances = self._atoms
        return self._gathered(index, chances * (1 - part)) + self._gathered(index + 1, chances * part)

    @cached_property
    def atoms_up(self) -> FloatArray:
        """Atoms rounded up."""
        index, part, chances = self._atoms
        return self._gathered(index + (part > 0), chances)

    @cached_property
    def _survival(self) -> FloatArray:
        return self._shared(self._payment.continuous_sf(self._edges))

    @cached_property
    def _averages(self) -> FloatArray:
        """The average of the survival function over each cell: from its values at the points where it is
        smooth, else the law's own integral, which loses digits where the cell is short against the amount."""
        from lossagg.kernels.cells import BLOCK, cell_averages

        survival = self._survival
        averages = np.empty(len(survival) - 1)
        bends = np.ones(-(-len(averages) // BLOCK), dtype=np.bool_)
        if len(bends) > _FEW_BLOCKS:
            cell_averages(survival, _SMOOTH, averages, bends)
        turns = np.flatnonzero(np.diff(bends, prepend=False, append=False)) * BLOCK
        for first, last in np.minimum(turns, len(averages)).reshape(-1, 2):
            areas = self._payment.continuous_areas(self._edges[first : last + 1])
            averages[first:last] = self._shared(areas) / self._step
        return averages

    @cached_property
    def _sampled(self) -> tuple[FloatArray, FloatArray]:
        if not self._payment.stretches:
            return np.zeros(self._points), np.zeros(1)
        return _sampled(self.spread, self._payment, self._step, self._share)

    @cached_property
    def _atoms(self) -> tuple[IntArray, FloatArray, FloatArray]:
        amounts, chances = self._payment.atoms
        index, part = places(amounts, self._step)
        inside = (amounts > 0) & (index < self._points)
        return index[inside], part[inside], self._shared(chances[inside])

    def _shared(self, chances: FloatArray) -> FloatArray:
        return chances if self._share == 1.0 else chances / self._share

    def _padded(self, masses: FloatArray) -> FloatArray:
        """Masses followed by zeros: what a payment reaches with no chance that any sum could show."""
        if len(masses) == self._points:
            return masses
        return np.concatenate((masses, np.zeros(self._points - len(masses))))

    def _gathered(self, index: IntArray, chances: FloatArray) -> FloatArray:
        """Probabilities added up by lattice index, those beyond the lattice left out."""
        found = np.bincount(index, chances, self._points)[: self._points]
        return np.asarray(found, dtype=np.float64)


def severity_masses(payment: Payment, step: float, points: int, share: float = 1.0) -> Masses:
    """One payment above zero on the lattice; the arguments are those of `Masses`."""
    return Masses(payment, step, points, share)


def _bulges(masses: FloatArray, levers: FloatArray) -> FloatArray:
    """E[u (1 - u)] over the position u of a payment in its cell, from above: by Jensen's inequality it is
    at most that of the mean position, which is the lever over the mass."""
    raised = np.zeros(len(masses))
    mass, lever = masses[: len(levers)], np.clip(levers, 0.0, masses[: len(levers)])
    np.divide(lever * (mass - lever), mass, out=raised[: len(levers)], where=mass > 0)
    return raised


def _sampled(
    weights: FloatArray, payment: Payment, step: float, share: float
) -> tuple[FloatArray, FloatArray]:
    """Mean-preserving weights with the second moment of the payment restored; a little goes just below zero.

    A payment at position u of its cell has gained the variance u (1 - u) h**2 by moving to the ends. Half of
    its mean over the cell, taken off as second differences at the two ends, takes it off again. Where the
    density is smooth that is a twelfth of the weight, and makes samples of a density of the weights; in the
    cells next to zero, where it may be steep, the mean is computed. In the first one, which holds nearly all
    payments where many small ones make a year, by ever shorter panels towards zero: among a million payments
    the variance of the sum hangs on its digits.
    """
    taken = weights / 12.0
    first = min(_FIRST, len(weights) - 1)
    places = step * (np.arange(float(first))[:, None] + _NODES[None, :])
    above = payment.continuous_sf(places.reshape(-1)).reshape(places.shape)
    gained = above @ (_SHARES * (1.0 - 2.0 * _NODES)) / share
    lengths = np.diff(np.append(0.0, _PANELS))
    inside = ((_PANELS - lengths)[:, None] + lengths[:, None] * _NODES).reshape(-1)
    weighed = (lengths[:, None] * _SHARES).reshape(-1) * (1.0 - 2.0 * inside)
    gained[:1] = payment.continuous_sf(step * inside) @ weighed / share
    taken[:first] = (gained + np.concatenate(([0.0], gained[:-1]))) / 4.0
    padded = np.concatenate(([0.0], taken, [taken[-1]]))
    return weights - np.diff(padded, 2), np.array([-taken[0]])
