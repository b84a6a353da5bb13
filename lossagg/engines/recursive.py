"""Payments on a lattice and their sums, the Panjer way; nothing here is shared with the Fourier engine.

A payment is put on the lattice by differences of its survival function. Poisson and negative binomial
counts go through Panjer's recursion, started at the logarithm of its first value; a binomial count, for
which the recursion is unstable, through repeated squaring of one trial by direct convolution; lines are
added up by direct convolution, after Poisson lines have been joined into one compound Poisson sum.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.engines.compound import CompoundSum, Part
from lossagg.engines.payment import PaymentLaw

_NEGLIGIBLE = 1e-17
_EPSILON = float(np.finfo(float).eps)


class Masses(NamedTuple):
    """One payment on the lattice, shape (n,) each; what lies beyond the lattice is left out.

    Attributes:
        nearest: rounded to the nearest point, the mean restored.
        down: rounded down.
        up: rounded up.
        atoms: the part of `nearest` that are atoms, zero included.
    """

    nearest: FloatArray
    down: FloatArray
    up: FloatArray
    atoms: FloatArray


def severity_masses(payment: PaymentLaw, step: float, points: int) -> Masses:
    """Discretise one payment by differences of its survival function.

    Args:
        payment: the law of the payment.
        step: distance of the lattice points.
        points: number of lattice points, from 0.
    """
    grid = step * np.arange(points + 1.0)
    above = payment.continuous_sf(grid)
    down = above[:-1] - above[1:]
    up = np.concatenate(([0.0], down[:-1]))
    middle = payment.continuous_sf(grid[:-1] + step / 2)
    nearest = np.concatenate(([payment.continuous_mass], middle[:-1])) - middle
    target = float(payment.continuous_areas(np.array([0.0, grid[-1]]))[0]) / step
    nearest = _with_mean(nearest, target - points * float(middle[-1]))
    atoms = np.zeros(points)
    for amount, chance in zip(*(values.tolist() for values in payment.atoms), strict=True):
        place = amount / step
        below = int(place + 1e-9 * max(place, 1.0))
        part = place - below if place - below > 1e-9 * max(place, 1.0) else 0.0
        for target_masses, index, share in (
            (down, below, 1.0),
            (up, below + (part > 0), 1.0),
            (atoms, below, 1.0 - part),
            (atoms, below + 1, part),
        ):
            if share > 0 and index < points:
                target_masses[index] += chance * share
    return Masses(nearest + atoms, down, up, atoms)


def _with_mean(masses: FloatArray, mean: float) -> FloatArray:
    """Move an equal share of every mass to its neighbour, so that the mean index is as given."""
    lacking = mean - float(np.arange(len(masses)) @ masses)
    movable = float(masses.sum()) if lacking > 0 else float(masses[1:].sum())
    if movable <= 0:
        return masses
    share = min(abs(lacking) / movable, 1.0)
    moved = share * masses
    if lacking > 0:
        arrived = np.concatenate(([0.0], moved[:-1]))
    else:
        moved[0] = 0.0
        arrived = np.append(moved[1:], 0.0)
    return np.asarray(masses - moved + arrived)


class Lines:
    """All lines of a sum on one lattice.

    Args:
        compound: the sum; every count law has a recursion.
        step: distance of the lattice points.
        points: number of lattice points.
    """

    def __init__(self, compound: CompoundSum, step: float, points: int) -> None:
        self.points = points
        self.parts = compound.parts
        self.masses = [severity_masses(part.payment, step, points) for part in compound.parts]

    def nearest(self) -> tuple[FloatArray, float]:
        """The sum of payments rounded to the nearest point, and a bound of the round-off in it."""
        return self._total([masses.nearest for masses in self.masses])

    def down(self) -> tuple[FloatArray, float]:
        """The sum of payments rounded down."""
        return self._total([masses.down for masses in self.masses])

    def up(self) -> tuple[FloatArray, float]:
        """The sum of payments rounded up."""
        return self._total([masses.up for masses in self.masses])

    def atoms(self) -> tuple[FloatArray, float]:
        """Probabilities of sums made of atoms alone, and the probability of any other sum."""
        continuous = [part.payment.continuous_mass for part in self.parts]
        log_atoms = sum(
            log_start(*_class_of(part), mass) for part, mass in zip(self.parts, continuous, strict=True)
        )
        if any(masses.atoms[1:].any() for masses in self.masses):
            alone, _ = self._total([masses.atoms for masses in self.masses])
        else:
            alone = np.zeros(self.points)
            alone[0] = np.exp(sum(log_start(*_class_of(part), part.payment.paying) for part in self.parts))
        return alone, float(-np.expm1(log_atoms)) if sum(continuous) > 0 else 0.0

    def _total(self, masses: list[FloatArray]) -> tuple[FloatArray, float]:
        from lossagg.kernels.convolution import direct_convolution

        lines = list(zip(self.parts, masses, strict=True))
        poisson = [(part, one) for part, one in lines if _class_of(part)[0] == 0.0]
        sums = [_compound_poisson(poisson)] if poisson else []
        sums += [_compound(part, one) for part, one in lines if _class_of(part)[0] != 0.0]
        total, slack = np.zeros(self.points), 0.0
        total[0] = 1.0
        for index, (one, off) in enumerate(sums):
            total = one if index == 0 else direct_convolution(total, one, self.points)
            slack += off + (4.0 * self.points * _EPSILON if index else 0.0)
        return total, slack


def log_start(a: float, b: float, positive: float) -> float:
    """log pgf(1 - positive) of a count of the class (a, b), without cancellation and without underflow."""
    if a == 0.0:
        return -b * positive
    return -(a + b) / a * float(np.log1p(a * positive / (1.0 - a)))


def _class_of(part: Part) -> tuple[float, float]:
    return part.frequency.recursion or (0.0, 0.0)


def _compound_poisson(lines: list[tuple[Part, FloatArray]]) -> tuple[FloatArray, float]:
    """Poisson lines as one compound Poisson sum: rates add up, payments mix by rate (Bowers et al. 1997,
    theorem 12.4.1)."""
    rates = np.array([part.frequency.mean() for part, _ in lines])
    mixed = rates @ np.array([one for _, one in lines]) / rates.sum()
    positive = float(rates @ np.array([_positive(*line) for line in lines])) / float(rates.sum())
    return _recursive(0.0, float(rates.sum()), mixed, positive)


def _compound(part: Part, masses: FloatArray) -> tuple[FloatArray, float]:
    a, b = _class_of(part)
    method = _recursive if a > 0 else _power
    return method(a, b, masses, _positive(part, masses))


def _positive(part: Part, masses: FloatArray) -> float:
    """One less the mass at zero, without cancellation where hardly anything is paid."""
    paying = part.payment.paying
    return paying - (float(masses[0]) - (1.0 - paying))


def _recursive(a: float, b: float, masses: FloatArray, positive: float) -> tuple[FloatArray, float]:
    """Panjer's recursion, started at the logarithm of its first value.

    All its terms are positive, so relative errors add up and are never amplified (Panjer and Wang 1993).
    """
    from lossagg.kernels.recursion import panjer_recursion

    points, start = len(masses), log_start(a, b, positive)
    beyond = np.cumsum(masses[::-1])[::-1]
    used = max(int(np.sum(beyond > _NEGLIGIBLE / max(a + b, 1.0))), 1)
    relative, scale = panjer_recursion(a, b, (1.0 - a) + a * positive, masses[:used], points)
    with np.errstate(under="ignore"):
        return relative * np.exp(start + scale), 8.0 * _EPSILON * (points + abs(start))


def _power(a: float, b: float, masses: FloatArray, positive: float) -> tuple[FloatArray, float]:
    """A binomial count: the payment of one trial, convolved with itself by repeated squaring."""
    from lossagg.kernels.convolution import direct_convolution

    points, trials, chance = len(masses), round(-(a + b) / a), -a / (1.0 - a)
    square = chance * masses
    square[0] = 1.0 - chance * positive
    total = np.zeros(points)
    total[0] = 1.0
    slack = 4.0 * _EPSILON * (trials + points * trials.bit_length())
    while trials:
        if trials & 1:
            total = direct_convolution(total, square, points)
        trials >>= 1
        if trials:
            square = direct_convolution(square, square, points)
    return total, slack
