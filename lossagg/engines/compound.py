"""The year's sum of payments of one or more independent lines, before anything is discretised.

What is known without a lattice: the exact moments, the law of the largest payment, and how far out the
distribution must be followed.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import NamedTuple, Self

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.cover import Schedule
from lossagg.engines.book import Line
from lossagg.engines.payment import PaymentLaw
from lossagg.families.base import CountLaw

# Squares of amounts must not overflow.
_LARGEST = 1e150


class Part(NamedTuple):
    """One line of a compound sum: its count per year and the payment for each loss."""

    frequency: CountLaw
    payment: PaymentLaw


@dataclass(frozen=True)
class CompoundSum:
    """Independent lines added up.

    Args:
        parts: the lines that can have a payment above zero.
    """

    parts: tuple[Part, ...]

    @classmethod
    def of(cls, lines: tuple[Line, ...], events: dict[str, Schedule]) -> Self:
        """The sum of what `events` pays for every loss of the lines it names.

        Raises:
            EngineError: a schedule that pays less than nothing.
        """
        parts = [
            Part(line.frequency, PaymentLaw(line.severity, events[line.name]))
            for line in lines
            if line.name in events
        ]
        return cls(tuple(part for part in parts if part.frequency.mean() > 0 and part.payment.paying > 0))

    @cached_property
    def mean(self) -> float:
        """E[S]; `inf` where it does not exist."""
        return sum(count.mean() * payment.mean for count, payment in self.parts)

    @cached_property
    def variance(self) -> float:
        """Var[S] = E[N] Var[Y] + Var[N] E[Y]**2 over the lines; `inf` where it does not exist."""
        total = 0.0
        for count, payment in self.parts:
            if payment.second_moment == np.inf:
                return np.inf
            spread = max(payment.second_moment - payment.mean**2, 0.0)
            total += count.mean() * spread + count.variance() * payment.mean**2
        return total

    @property
    def second_moment(self) -> float:
        """E[S**2]; `inf` where it does not exist."""
        return self.variance + self.mean**2 if self.variance < np.inf else np.inf

    @cached_property
    def mean_count(self) -> float:
        """Expected number of losses a year, paid or not."""
        return sum(count.mean() for count, _ in self.parts)

    @cached_property
    def no_payment(self) -> float:
        """P(S = 0)."""
        return float(np.prod([count.pgf(1.0 - payment.paying) for count, payment in self.parts]))

    def largest_sf(self, x: FloatArray) -> FloatArray:
        """P(some payment of the year exceeds x), for increasing x: at most P(S > x)."""
        log_none = np.zeros(x.shape)
        with np.errstate(divide="ignore"):
            for count, payment in self.parts:
                log_none += count.log_pgf(np.maximum(1.0 - payment.sf(x), 0.0))
        return -np.expm1(log_none)

    def exceedances(self, x: FloatArray) -> FloatArray:
        """Expected number of payments above x in a year, for increasing x."""
        return sum((count.mean() * payment.sf(x) for count, payment in self.parts), start=np.zeros(x.shape))

    def layer_cost(self, low: float, high: float) -> float:
        """Expected yearly cost of the layer between two amounts of single payments."""
        if high == np.inf:
            return sum(count.mean() * payment.expected_excess(low) for count, payment in self.parts)
        edges = np.array([low, high])
        total = 0.0
        for count, payment in self.parts:
            amounts, chances = payment.atoms
            atoms = float(np.clip(amounts - low, 0.0, high - low) @ chances)
            total += count.mean() * (atoms + float(payment.continuous_areas(edges)[0]))
        return total

    def layer_square(self, low: float, high: float) -> float:
        """Expected yearly sum of squared payments to the layer between two amounts."""
        return sum(count.mean() * payment.layer_second_moment(low, high) for count, payment in self.parts)

    def reach(self, probability: float) -> float:
        """A first guess of an amount the year exceeds with about this probability: the largest payment
        at that probability, the mean of payments up to it, and five standard deviations or more."""
        largest, mean, spread = 0.0, 0.0, 0.0
        for count, payment in self.parts:
            most = min(payment.upper(min(probability / count.mean(), 0.5)), _LARGEST)
            limited = payment.limited_mean(most)
            largest = max(largest, most)
            mean += count.mean() * limited
            spread += count.mean() * limited * most + max(count.variance() - count.mean(), 0.0) * limited**2
        return largest + mean + 5.0 * float(np.sqrt(spread))

    def rounded_events(self, x: float, off_lattice: tuple[float, ...]) -> float:
        """Expected number of payments that rounding moves, in a year whose sum is x.

        Args:
            x: the year's sum.
            off_lattice: per part, probability that a payment is not on the lattice.

        With the regression of the count on the sum: E[N | S = x] ~ E[N] + Cov[N, S] / Var[S] (x - E[S]).
        """
        pull = max(x - self.mean, 0.0) / self.variance if 0 < self.variance < np.inf else 0.0
        return sum(
            share * (count.mean() + (count.variance() * payment.mean * pull if pull > 0.0 else 0.0))
            for (count, payment), share in zip(self.parts, off_lattice, strict=True)
        )
