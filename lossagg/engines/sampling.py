"""One payment on the lattice of the Fourier engine: rounded down, sampled with its mean kept, rounded up."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from lossagg.arrays import FloatArray, IntArray
from lossagg.engines.payment import Payment
from lossagg.engines.span import places

_NEVER = 1e-30
_FIRST = 64
_NODES, _SHARES = (part / 2.0 for part in np.polynomial.legendre.leggauss(12))
_NODES = _NODES + 0.5


class Masses(NamedTuple):
    """One payment on the lattice, shape (n,) each; what lies beyond the lattice is left out.

    Attributes:
        down: the continuous part rounded down; shifted by one step it is the part rounded up.
        even: the continuous part with every cell's mean kept and the sampling corrected.
        under: what the correction puts at -h.
        atoms_down: atoms rounded down.
        atoms_even: atoms split so that their mean is kept.
        atoms_up: atoms rounded up.
        spread: the continuous part with every cell's mean kept, nothing corrected.
        bulge: by cell, a bound of what keeping the mean adds to E[max(Y - x, 0)] summed over x, in steps.
    """

    down: FloatArray
    even: FloatArray
    under: FloatArray
    atoms_down: FloatArray
    atoms_even: FloatArray
    atoms_up: FloatArray
    spread: FloatArray
    bulge: FloatArray


def severity_masses(payment: Payment, step: float, points: int) -> Masses:
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
        spread = _padded(-np.diff(averages, prepend=payment.continuous_mass), points)
        even, under = _sampled(spread, payment, step)
        bulge = _bulges(down, averages - payment.continuous_sf(edges[1:]))
    else:
        down, even, under = np.zeros(points), np.zeros(points), np.zeros(1)
        spread, bulge = even, np.zeros(points)
    amounts, chances = payment.atoms
    index, part = places(amounts, step)
    inside = (amounts > 0) & (index < points)
    index, part, chances = index[inside], part[inside], chances[inside]
    up = index + (part > 0).astype(np.int64)
    atoms_down = _gathered(index, chances, points)
    atoms_up = _gathered(up, chances, points)
    atoms_even = _gathered(index, chances * (1 - part), points) + _gathered(index + 1, chances * part, points)
    bulge = bulge + _gathered(index, chances * part * (1 - part), points)
    return Masses(down, even, under, atoms_down, atoms_even, atoms_up, spread, bulge)


def _bulges(masses: FloatArray, levers: FloatArray) -> FloatArray:
    """E[u (1 - u)] over the position u of a payment in its cell, from above: by Jensen's inequality it is
    at most that of the mean position, which is the lever over the mass."""
    raised = np.zeros(len(masses))
    mass, lever = masses[: len(levers)], np.clip(levers, 0.0, masses[: len(levers)])
    np.divide(lever * (mass - lever), mass, out=raised[: len(levers)], where=mass > 0)
    return raised


def _padded(masses: FloatArray, points: int) -> FloatArray:
    """Masses followed by zeros: what a payment reaches with no chance that any sum could show."""
    return np.concatenate((masses, np.zeros(points - len(masses))))


def _gathered(index: IntArray, chances: FloatArray, points: int) -> FloatArray:
    """Probabilities added up by lattice index, those beyond the lattice left out."""
    return np.asarray(np.bincount(index, chances, points)[:points], dtype=np.float64)


def _sampled(weights: FloatArray, payment: Payment, step: float) -> tuple[FloatArray, FloatArray]:
    """Mean-preserving weights with the second moment of the payment restored; a little goes just below zero.

    A payment at position u of its cell has gained the variance u (1 - u) h**2 by moving to the ends. Half of
    its mean over the cell, taken off as second differences at the two ends, takes it off again. Where the
    density is smooth that is a twelfth of the weight, and makes samples of a density of the weights; in the
    cells next to zero, where it may be steep, the mean is computed.
    """
    taken = weights / 12.0
    first = min(_FIRST, len(weights) - 1)
    places = step * (np.arange(float(first))[:, None] + _NODES[None, :])
    above = payment.continuous_sf(places.reshape(-1)).reshape(places.shape)
    gained = above @ (_SHARES * (1.0 - 2.0 * _NODES))
    taken[:first] = (gained + np.concatenate(([0.0], gained[:-1]))) / 4.0
    padded = np.concatenate(([0.0], taken, [taken[-1]]))
    return weights - np.diff(padded, 2), np.array([-taken[0]])
