"""One payment on the lattice of the Fourier engine: rounded down, sampled with its mean kept, rounded up."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from lossagg.arrays import FloatArray, IntArray
from lossagg.engines.payment import PaymentLaw
from lossagg.engines.span import places

_NEVER = 1e-30
_STEEP = 0.1
_STEEP_CELLS = 4


class Masses(NamedTuple):
    """One payment on the lattice, shape (n,) each; what lies beyond the lattice is left out.

    Attributes:
        down: the continuous part rounded down; shifted by one step it is the part rounded up.
        even: the continuous part with every cell's mean kept and the sampling corrected.
        under: what the correction puts at -h.
        atoms_down: atoms rounded down.
        atoms_even: atoms split so that their mean is kept.
        atoms_up: atoms rounded up.
    """

    down: FloatArray
    even: FloatArray
    under: FloatArray
    atoms_down: FloatArray
    atoms_even: FloatArray
    atoms_up: FloatArray


def severity_masses(payment: PaymentLaw, step: float, points: int) -> Masses:
    """Discretise one payment above zero three ways: rounded down, mean-preserving, rounded up.

    Args:
        payment: the law of the payment.
        step: distance of the lattice points.
        points: number of lattice points, from 0.
    """
    if payment.stretches:
        reached = min(points, int(payment.upper(_NEVER) / step) + 2)
        edges = step * np.arange(reached + 1.0)
        down = _padded(-np.diff(payment.continuous_sf(edges)), points)
        averages = payment.continuous_areas(edges) / step
        even, under = _sampled(_padded(-np.diff(averages, prepend=payment.continuous_mass), points))
    else:
        down, even, under = np.zeros(points), np.zeros(points), np.zeros(1)
    amounts, chances = payment.atoms
    index, part = places(amounts, step)
    inside = (amounts > 0) & (index < points)
    index, part, chances = index[inside], part[inside], chances[inside]
    up = index + (part > 0).astype(np.int64)
    atoms_down = _gathered(index, chances, points)
    atoms_up = _gathered(up, chances, points)
    atoms_even = _gathered(index, chances * (1 - part), points) + _gathered(index + 1, chances * part, points)
    return Masses(down, even, under, atoms_down, atoms_even, atoms_up)


def _padded(masses: FloatArray, points: int) -> FloatArray:
    """Masses followed by zeros: what a payment reaches with no chance that any sum could show."""
    return np.concatenate((masses, np.zeros(points - len(masses))))


def _gathered(index: IntArray, chances: FloatArray, points: int) -> FloatArray:
    """Probabilities added up by lattice index, those beyond the lattice left out."""
    return np.asarray(np.bincount(index, chances, points)[:points], dtype=np.float64)


def _sampled(weights: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Mean-preserving weights turned into samples of a density: less a twelfth of their second
    difference, which also puts a little just below zero. Cells next to zero are left alone where the
    density is too steep there for its differences to mean anything.
    """
    smooth = weights.copy()
    jumps = abs(weights[0] - weights[1] / 2) <= _STEEP * weights[1]
    if not jumps and weights[0] > _STEEP * weights[1]:
        smooth[:_STEEP_CELLS] = 0.0
    padded = np.concatenate(([0.0], smooth, [smooth[-1]]))
    return weights - np.diff(padded, 2) / 12.0, np.array([-smooth[0] / 12.0])
