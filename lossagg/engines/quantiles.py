"""Where the quantiles of an annual sum lie, roughly: what a lattice is chosen from.

Only the choice of the lattice rests on this; the figures and their brackets come from the pass on the
lattice chosen.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.engines.compound import CompoundSum
from lossagg.errors import EngineError

# Amounts exceeded with these probabilities are candidates for the end of a lattice.
LEAST_REACH = 1e-4
REACHES = (1e-8, 1e-7, 1e-6, 1e-5, 3e-5, LEAST_REACH, 2e-4, 4e-4)
# Levels whose brackets are watched, and how many times the accuracy each may be wide.
LEVELS = ((0.995, 1.0), (0.999, 2.0))
_CLOSE_TO_ZERO, _LEAST_SCALE = 0.0005, 0.01
_TRIES = 60


@dataclass(frozen=True, eq=False)
class Quantiles:
    """The survival function of an annual sum on few points.

    Args:
        compound: the sum.
        step: distance of the points.
        survival: P(S > kh), non-increasing.
    """

    compound: CompoundSum
    step: float
    survival: FloatArray

    @classmethod
    def located(
        cls, compound: CompoundSum, points: int, survive: Callable[[float, int], FloatArray]
    ) -> Quantiles:
        """Look over longer or shorter ranges until the amount exceeded once in 10,000 years is well inside.

        Args:
            compound: the sum.
            points: number of points of each look.
            survive: the engine's survival function on a lattice of a step and a number of points.

        Raises:
            EngineError: the range was not found.
        """
        least = LEAST_REACH * _rarity(compound)
        reach = compound.reach(REACHES[0]) or compound.reach(REACHES[0] * _rarity(compound))
        for _ in range(_TRIES):
            step = reach / (points - 1)
            survival = np.minimum.accumulate(np.clip(survive(step, points), 0.0, 1.0))
            index = int(np.sum(survival > least))
            if index == points:
                reach *= 8.0
            elif index < points // 32 and 1.0 - compound.no_payment > least:
                reach = 4.0 * (index + 2) * step
            else:
                return cls(compound, step, survival)
        raise EngineError(
            "the quantiles of the annual loss could not be located",
            value=reach,
            remedy="Give points and step, or use the simulation.",
        )

    def amount(self, exceedance: float) -> float:
        """The amount exceeded with this probability, to the coarse step; at least one coarse step."""
        return self.step * max(int(np.sum(self.survival > exceedance)), 1)

    def reach(self, exceedance: float) -> float:
        """The same, further out where hardly any year has a payment: what a lattice should cover."""
        return self.amount(exceedance * _rarity(self.compound))

    def covers(self, exceedance: float) -> bool:
        """Whether `reach` is within the range looked at."""
        return bool(self.survival[-1] <= exceedance * _rarity(self.compound))

    def points(self, step: float, exceedance: float) -> int:
        """Points of a lattice of this step that reach the amount exceeded with this probability."""
        amount = self.reach(exceedance) + self.step
        return int(min(np.ceil(amount / step), 2.0**62)) + 2

    def far_points(self, step: float, *, easy: int, most: int) -> int:
        """Points that reach as far as is easy, and to once in 2,500 years at least, within the most."""
        for exceedance in REACHES:
            points = self.points(step, exceedance)
            if self.covers(exceedance) and points <= (easy if exceedance < LEAST_REACH else most):
                return points
        return most

    def scale(self, quantile: float) -> float:
        """The amount that the width of a quantile's bracket is judged against: the quantile, or where it is
        close to zero a part of the amount exceeded once in 10,000 years."""
        reach = self.reach(LEAST_REACH)
        return quantile if quantile > _CLOSE_TO_ZERO * reach else _LEAST_SCALE * reach

    def step_for(self, accuracy: float, *, limited: bool = False) -> float:
        """The step expected to give brackets of this accuracy; `inf` where nothing is rounded.

        Args:
            accuracy: relative width.
            limited: whether the bracket uses bounds of limited means, where n losses move a quantile by
                sqrt(2 n) steps, not by n.
        """
        off_lattice = tuple(payment.continuous_mass for _, payment in self.compound.parts)
        steps = [np.inf]
        for level, factor in LEVELS:
            events = self.compound.rounded_events(self.amount(1.0 - level), off_lattice)
            moved = max(min(events, np.sqrt(2.0 * events) + 1.0) if limited else events, 1.0)
            steps.append(0.9 * factor * accuracy * self.scale(self.amount(1.0 - level)) / moved)
        return float(min(steps))


def _rarity(compound: CompoundSum) -> float:
    """How much further out a lattice must reach where hardly any year has a payment."""
    payments = sum(count.mean() * payment.paying for count, payment in compound.parts)
    return float(np.clip(1e3 * payments, 1e-280, 1.0))
