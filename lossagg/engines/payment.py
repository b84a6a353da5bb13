"""The law of one payment: a size law pushed through a schedule, piece by piece.

A flat piece of the schedule pays one amount with a probability of its own (an atom), a sloped piece
spreads the continuous losses over a range of payments (a stretch). The exact engines treat the two
differently, atoms being placed on the lattice and the rest rounded onto it, so they are kept apart.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.cover import Schedule
from lossagg.engines.stretch import ContinuousPart, Stretch
from lossagg.errors import EngineError
from lossagg.families.base import SizeLaw

_SAME = 1e-12


class Payment(ABC):
    """The law of one payment, as an engine sees it."""

    @property
    @abstractmethod
    def stretches(self) -> tuple[Stretch, ...]:
        """The sloped pieces that continuous losses reach."""

    @property
    @abstractmethod
    def atoms(self) -> tuple[FloatArray, FloatArray]:
        """Amounts with a probability of their own, increasing, and their probabilities; zero included."""

    @property
    @abstractmethod
    def continuous_mass(self) -> float:
        """Probability that the payment is none of the atoms."""

    @abstractmethod
    def continuous_sf(self, y: FloatArray) -> FloatArray:
        """P(Y > y and Y is no atom), for increasing y >= 0, shape (n,)."""

    @abstractmethod
    def continuous_areas(self, edges: FloatArray) -> FloatArray:
        """The integral of `continuous_sf` over each interval between increasing edges, shape (n - 1,)."""

    @abstractmethod
    def layer_second_moment(self, low: float, high: float) -> float:
        """E[min((Y - low)+, high - low)**2]; `inf` where it does not exist."""

    @abstractmethod
    def upper(self, probability: float) -> float:
        """An amount that a payment exceeds with at most this probability; the largest payment for 0."""

    @cached_property
    def paying(self) -> float:
        """Probability of a payment above zero."""
        amounts, chances = self.atoms
        return min(self.continuous_mass + float(chances[amounts > 0].sum()), 1.0)

    def sf(self, y: FloatArray) -> FloatArray:
        """P(Y > y), for increasing y >= 0, shape (n,)."""
        amounts, chances = self.atoms
        above = np.append(np.cumsum(chances[::-1])[::-1], 0.0)
        return np.asarray(self.continuous_sf(y) + above[np.searchsorted(amounts, y, side="right")])

    def expected_excess(self, y: float) -> float:
        """E[(Y - y)+]; `inf` where the mean is."""
        amounts, chances = self.atoms
        rest = float(self.continuous_areas(np.array([y, np.inf]))[0])
        return rest + float(np.maximum(amounts - y, 0.0) @ chances)

    def limited_mean(self, y: float) -> float:
        """E[min(Y, y)]; exists for every law."""
        amounts, chances = self.atoms
        rest = float(self.continuous_areas(np.array([0.0, y]))[0])
        return rest + float(np.minimum(amounts, y) @ chances)

    @cached_property
    def mean(self) -> float:
        """E[Y]; `inf` where it does not exist."""
        return self.expected_excess(0.0)

    @cached_property
    def second_moment(self) -> float:
        """E[Y**2]; `inf` where it does not exist."""
        return self.layer_second_moment(0.0, np.inf)


@dataclass(frozen=True)
class PaymentLaw(Payment):
    """The payment for one loss.

    Args:
        severity: the law of the loss.
        schedule: the payment as a function of the loss.

    Raises:
        EngineError: the schedule pays less than nothing for some losses.
    """

    severity: SizeLaw
    schedule: Schedule

    def __post_init__(self) -> None:
        for start, end, value, slope in self._pieces():
            reached = (
                value if slope == 0 else slope * np.inf if end == np.inf else value + slope * (end - start)
            )
            slack = 1e-9 * max(abs(value), start)
            if min(value, reached) < -slack:
                raise EngineError(
                    "the covers together pay more than the loss, so what is left is negative",
                    value=float(min(value, reached)),
                    remedy="Let covers of the same layer come after each other, or lower their shares.",
                )

    @cached_property
    def stretches(self) -> tuple[Stretch, ...]:
        """The sloped pieces that continuous losses reach."""
        stretches = [
            Stretch(self._losses, start, end, max(value, 0.0), slope)
            for start, end, value, slope in self._pieces()
            if slope != 0
        ]
        return tuple(stretch for stretch in stretches if stretch.mass > 0)

    @cached_property
    def atoms(self) -> tuple[FloatArray, FloatArray]:
        """Amounts with a probability of their own, increasing, and their probabilities; zero included."""
        sizes, chances = self._losses.atoms
        found = list(zip(self.schedule(sizes).tolist(), chances.tolist(), strict=True))
        for start, end, value, slope in self._pieces():
            if slope == 0:
                above = self._losses.sf(np.array([start, end]))
                found.append((max(value, 0.0), float(above[0] - above[1])))
        return merged(found)

    @cached_property
    def continuous_mass(self) -> float:
        """Probability that the payment is none of the atoms."""
        return sum(stretch.mass for stretch in self.stretches)

    def continuous_sf(self, y: FloatArray) -> FloatArray:
        """P(Y > y and Y is no atom), for increasing y >= 0, shape (n,)."""
        if len(self.stretches) == 1:
            return self.stretches[0].sf(y)
        return sum((stretch.sf(y) for stretch in self.stretches), start=np.zeros(y.shape))

    def continuous_areas(self, edges: FloatArray) -> FloatArray:
        """The integral of `continuous_sf` over each interval between increasing edges, shape (n - 1,)."""
        return sum((stretch.areas(edges) for stretch in self.stretches), start=np.zeros(len(edges) - 1))

    def layer_second_moment(self, low: float, high: float) -> float:
        """E[min((Y - low)+, high - low)**2]; `inf` where it does not exist."""
        amounts, chances = self.atoms
        total = float(np.clip(amounts - low, 0.0, high - low) ** 2 @ chances)
        for stretch in self.stretches:
            part = stretch.within(low, high)
            if part is not None:
                total += part.second_moment()
            if high < np.inf:
                total += (high - low) ** 2 * float(stretch.sf(np.array([high]))[0])
        return total

    def upper(self, probability: float) -> float:
        """An amount that a payment exceeds with at most this probability; the largest payment for 0."""
        loss = float(self.severity.isf(probability))
        most = 0.0
        for start, end, value, slope in self._pieces():
            if start < loss:
                most = max(most, value, value + slope * (min(end, loss) - start) if slope > 0 else 0.0)
        return most

    @cached_property
    def _losses(self) -> ContinuousPart:
        return ContinuousPart(self.severity)

    def _pieces(self) -> list[tuple[float, float, float, float]]:
        """(start, end, value, slope) of every piece of the schedule."""
        schedule = self.schedule
        ends = (*schedule.starts[1:], np.inf)
        return list(zip(schedule.starts, ends, schedule.values, schedule.slopes, strict=True))


def merged(found: list[tuple[float, float]]) -> tuple[FloatArray, FloatArray]:
    """Atoms in increasing order, equal amounts joined, impossible ones left out."""
    amounts: list[float] = []
    chances: list[float] = []
    for amount, chance in sorted(found):
        if chance <= 0:
            continue
        if amounts and amount - amounts[-1] <= _SAME * amount:
            chances[-1] += chance
        else:
            amounts.append(amount)
            chances.append(chance)
    return np.array(amounts), np.array(chances)
