"""Payments on a lattice and their sums over lines, the Panjer way; nothing here is shared with the Fourier
engine.

A payment is put on the lattice by differences of its survival function; the sum of a line's payments is
that of `counted`. Lines are added up by direct convolution, after Poisson lines have been joined into one
compound Poisson sum.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.engines.compound import CompoundSum
from lossagg.engines.counted import counted, log_none
from lossagg.engines.payment import Payment
from lossagg.engines.size_biased import size_biased
from lossagg.families import Poisson
from lossagg.families.base import CountLaw

_EPSILON = float(np.finfo(float).eps)


class Masses(NamedTuple):
    """One payment on the lattice, shape (n,) each; what lies beyond the lattice is left out.

    Attributes:
        nearest: rounded to the nearest point, the mean restored.
        down: rounded down.
        up: rounded up.
        atoms: the part of `nearest` that are atoms, zero included.
        kept: moved to the two nearest points with the mean kept.
        bulge: by cell, a bound of E[u (1 - u)] over the position u of a payment in its cell.
    """

    nearest: FloatArray
    down: FloatArray
    up: FloatArray
    atoms: FloatArray
    kept: FloatArray
    bulge: FloatArray


def severity_masses(payment: Payment, step: float, points: int) -> Masses:
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
    # The part of each cell's probability that belongs to its far end, if its mean is to be kept.
    far = np.clip(payment.continuous_areas(grid) / step - above[1:], 0.0, down)
    kept = down - far
    kept[1:] += far[:-1]
    with np.errstate(divide="ignore", invalid="ignore"):
        bulge = np.where(down > 0, far * (1.0 - far / down), 0.0)
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
        if below < points:
            bulge[below] += chance * part * (1.0 - part)
    return Masses(nearest + atoms, down, up, atoms, kept + atoms, bulge)


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


class Group(NamedTuple):
    """Lines whose payments are one compound sum: a single line, or all Poisson lines together.

    Attributes:
        frequency: law of the number of payments.
        masses: one payment on the lattice, shape (n,).
        positive: one less the mass at zero, without cancellation.
        bulge: that of the masses, see `Masses`.
    """

    frequency: CountLaw
    masses: FloatArray
    positive: float
    bulge: FloatArray


class Lines:
    """All lines of a sum on one lattice.

    Args:
        compound: the sum; every count law is `countable`.
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

    def kept(self) -> tuple[FloatArray, float, FloatArray] | None:
        """The sum of payments with their means kept, a bound of the round-off in it, and by point x a bound
        of E[min(S, x)] less that of this sum, in steps (see `limited`).

        None where no payment is moved, or a count law does not say how many other losses there are.
        """
        groups = self._groups([masses.kept for masses in self.masses])
        others = [size_biased(group.frequency) for group in groups]
        if not any(masses.bulge.any() for masses in self.masses):
            return None
        total, slack, gap = _nothing(self.points), 0.0, np.zeros(self.points)
        for index, (group, law) in enumerate(zip(groups, others, strict=True)):
            if law is None:
                return None
            one, off = counted(group.frequency, group.masses, group.positive)
            seen, far_off = (
                (one, off) if law == group.frequency else counted(law, group.masses, group.positive)
            )
            own = group.frequency.mean() * _sum_of_two(group.bulge, seen)
            gap = own if index == 0 else _sum_of_two(gap, one) + _sum_of_two(total, own)
            total = one if index == 0 else _sum_of_two(total, one)
            slack += off + far_off + (8.0 * self.points * _EPSILON)
        return total, slack, gap * (1.0 + slack)

    def atoms(self) -> tuple[FloatArray, float]:
        """Probabilities of sums made of atoms alone, and the probability of any other sum."""
        continuous = [part.payment.continuous_mass for part in self.parts]
        log_atoms = sum(
            log_none(part.frequency, mass) for part, mass in zip(self.parts, continuous, strict=True)
        )
        if any(masses.atoms[1:].any() for masses in self.masses):
            alone, _ = self._total([masses.atoms for masses in self.masses])
        else:
            alone = np.zeros(self.points)
            alone[0] = np.exp(sum(log_none(part.frequency, part.payment.paying) for part in self.parts))
        return alone, float(-np.expm1(log_atoms)) if sum(continuous) > 0 else 0.0

    def _total(self, masses: list[FloatArray]) -> tuple[FloatArray, float]:
        total, slack = _nothing(self.points), 0.0
        for index, group in enumerate(self._groups(masses)):
            one, off = counted(group.frequency, group.masses, group.positive)
            total = one if index == 0 else _sum_of_two(total, one)
            slack += off + (4.0 * self.points * _EPSILON if index else 0.0)
        return total, slack

    def _groups(self, masses: list[FloatArray]) -> list[Group]:
        """Poisson lines as one: rates add up, payments mix by rate (Bowers et al. 1997, theorem 12.4.1)."""
        lines = [
            Group(part.frequency, one, _positive(part.payment, one), own.bulge)
            for part, one, own in zip(self.parts, masses, self.masses, strict=True)
        ]
        poisson = [line for line in lines if isinstance(line.frequency, Poisson)]
        if len(poisson) > 1:
            rates = np.array([line.frequency.mean() for line in poisson])
            shares = rates / rates.sum()
            mixed = [
                sum(share * np.asarray(value) for share, value in zip(shares, values, strict=True))
                for values in list(zip(*poisson, strict=True))[1:]
            ]
            poisson = [Group(Poisson(mean=float(rates.sum())), mixed[0], float(mixed[1]), mixed[2])]
        return poisson + [line for line in lines if not isinstance(line.frequency, Poisson)]


def _nothing(points: int) -> FloatArray:
    """The law of an amount that is always zero."""
    total = np.zeros(points)
    total[0] = 1.0
    return total


def _sum_of_two(left: FloatArray, right: FloatArray) -> FloatArray:
    from lossagg.kernels.convolution import direct_convolution

    return direct_convolution(left, right, len(right))


def _positive(payment: Payment, masses: FloatArray) -> float:
    """One less the mass at zero, without cancellation where hardly anything is paid."""
    return payment.paying - (float(masses[0]) - (1.0 - payment.paying))
