"""The year's sum of payments of one or more lines, before anything is discretised.

What is known without a lattice: the exact moments, the law of the largest payment, and how far out the
distribution must be followed.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property
from typing import NamedTuple, Self

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.cover import Schedule
from lossagg.engines.clusters import Alone, Cluster
from lossagg.engines.payment import Payment, PaymentLaw
from lossagg.engines.placed import Line
from lossagg.families.base import CountLaw

# Squares of amounts must not overflow.
_LARGEST = 1e150


class Part(NamedTuple):
    """One line of a compound sum: its count per year and the payment for each loss."""

    frequency: CountLaw
    payment: Payment


@dataclass(frozen=True)
class CompoundSum:
    """Lines added up, independent of each other; see `tied` for those that are not.

    Args:
        parts: the lines that can have a payment above zero.
    """

    parts: tuple[Part, ...]

    @cached_property
    def clusters(self) -> tuple[Cluster, ...]:
        """The lines that depend on each other, together; every line is in one of them."""
        return tuple(Alone((k,)) for k in range(len(self.parts)))

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
        """Var[S], added up over the clusters; `inf` where it does not exist."""
        total = 0.0
        for cluster in self.clusters:
            counts, payments = self._of(cluster)
            means = np.array([payment.mean for payment in payments])
            seconds = np.array([payment.second_moment for payment in payments])
            total += cluster.variance(counts, means, seconds)
        return total

    def _of(self, cluster: Cluster) -> tuple[list[CountLaw], list[Payment]]:
        own = [self.parts[place] for place in cluster.members]
        return [part.frequency for part in own], [part.payment for part in own]

    def slack(self, step: float, points: int) -> FloatArray | float:
        """How far P(S > kh) may be off before anything is discretised, shape (points,) or one for all."""
        return 0.0

    @property
    def load(self) -> int:
        """How many times the work and memory of its lines a lattice of this sum takes."""
        return 1

    def settled(self, survive: Callable[[CompoundSum, float, int], FloatArray]) -> CompoundSum:
        """The sum ready to be computed: itself, where nothing is integrated numerically; see `TiedSum`."""
        return self

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
        log_none = 0.0
        for cluster in self.clusters:
            counts, payments = self._of(cluster)
            log_none += float(cluster.log_pgf(counts, [1.0 - payment.paying for payment in payments]))
        return float(np.exp(log_none))

    def largest_sf(self, x: FloatArray) -> FloatArray:
        """P(some payment of the year exceeds x), for increasing x: at most P(S > x)."""
        log_none = np.zeros(x.shape)
        with np.errstate(divide="ignore"):
            for cluster in self.clusters:
                counts, payments = self._of(cluster)
                below = [np.maximum(1.0 - payment.sf(x), 0.0) for payment in payments]
                log_none += cluster.log_pgf(counts, below)
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
        total = 0.0
        for cluster in self.clusters:
            counts, payments = self._of(cluster)
            expected = np.array([count.mean() for count in counts])
            if pull > 0.0:
                means = np.array([payment.mean for payment in payments])
                expected = expected + pull * cluster.covariances(counts, means)
            total += float(expected @ np.array([off_lattice[place] for place in cluster.members]))
        return total
