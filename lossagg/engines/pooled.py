"""Lines under one gamma factor as a single line: what makes Panjer's recursion possible for them.

Poisson lines whose rates all move with one gamma factor have, together, a negative binomial number of losses,
and each loss is of a line in proportion to the rates (Greenwood and Yule 1920; Bowers et al. 1997, theorem
12.4.1). Nothing is integrated numerically, so this is a check of what is.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.engines.clusters import Alone, GammaPoisson
from lossagg.engines.compound import CompoundSum, Part
from lossagg.engines.payment import Payment, merged
from lossagg.engines.stretch import Stretch
from lossagg.errors import EngineError
from lossagg.families import NegativeBinomial


@dataclass(frozen=True)
class PooledPayment(Payment):
    """The payment for a loss of one of several lines.

    Args:
        payments: the payment for a loss of each line.
        shares: how likely the loss is of each, adding up to 1.
    """

    payments: tuple[Payment, ...]
    shares: tuple[float, ...]

    @cached_property
    def stretches(self) -> tuple[Stretch, ...]:
        """The sloped pieces that continuous losses of any line reach."""
        return tuple(stretch for payment in self.payments for stretch in payment.stretches)

    @cached_property
    def atoms(self) -> tuple[FloatArray, FloatArray]:
        """Amounts with a probability of their own, increasing, and their probabilities; zero included."""
        return merged(
            [
                (amount, share * chance)
                for share, payment in zip(self.shares, self.payments, strict=True)
                for amount, chance in zip(*(side.tolist() for side in payment.atoms), strict=True)
            ]
        )

    @cached_property
    def continuous_mass(self) -> float:
        """Probability that the payment is none of the atoms."""
        return float(self._mixed([payment.continuous_mass for payment in self.payments]))

    def continuous_sf(self, y: FloatArray) -> FloatArray:
        """P(Y > y and Y is no atom), for increasing y >= 0, shape (n,)."""
        return self._mixed([payment.continuous_sf(y) for payment in self.payments])

    def continuous_areas(self, edges: FloatArray) -> FloatArray:
        """The integral of `continuous_sf` over each interval between increasing edges, shape (n - 1,)."""
        return self._mixed([payment.continuous_areas(edges) for payment in self.payments])

    def layer_second_moment(self, low: float, high: float) -> float:
        """E[min((Y - low)+, high - low)**2]; `inf` where it does not exist."""
        return float(self._mixed([payment.layer_second_moment(low, high) for payment in self.payments]))

    def upper(self, probability: float) -> float:
        """An amount that a payment exceeds with at most this probability; the largest payment for 0."""
        return max(payment.upper(probability) for payment in self.payments)

    def _mixed(self, values: Sequence[float] | Sequence[FloatArray]) -> FloatArray:
        return np.asarray(sum(share * np.asarray(v) for share, v in zip(self.shares, values, strict=True)))


def pooled(compound: CompoundSum) -> CompoundSum:
    """The same sum of independent lines, those under one gamma factor as a single one.

    Raises:
        EngineError: lines that depend on each other in another way.
    """
    if all(isinstance(cluster, Alone) for cluster in compound.clusters):
        return compound
    parts: list[Part] = []
    for cluster in compound.clusters:
        own = [compound.parts[place] for place in cluster.members]
        if isinstance(cluster, GammaPoisson):
            rates = np.array([part.frequency.mean() for part in own])
            total = float(rates.sum())
            payment = PooledPayment(tuple(part.payment for part in own), tuple((rates / total).tolist()))
            parts.append(Part(NegativeBinomial(mean=total, dispersion=cluster.dispersion), payment))
        elif isinstance(cluster, Alone):
            parts += own
        else:
            raise EngineError(
                "Panjer's recursion takes dependent lines only under a gamma factor on Poisson frequencies",
                remedy="The fourier engine and the simulation take other factors and common shocks.",
            )
    return CompoundSum(tuple(parts))
