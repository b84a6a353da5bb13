"""The annual loss of a subject that depends on two annual sums, with its bracket.

`pair` says which subjects these are, `pair_lattice` follows the two sums. Here: the lines pooled into one
stream of events, the lattice, and the result with its exact moments.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.cover import Schedule
from lossagg.engines.bound import LatticeBound
from lossagg.engines.compound import CompoundSum
from lossagg.engines.lattice import LatticeLoss
from lossagg.engines.pair import PairPlan, split
from lossagg.engines.pair_lattice import SplitSum, run_pass
from lossagg.engines.payment import PaymentLaw
from lossagg.engines.placed import Line
from lossagg.engines.result import AnnualLoss, TransformedAnnualLoss
from lossagg.engines.running import running_sums
from lossagg.engines.span import common_span
from lossagg.errors import EngineError
from lossagg.families import Poisson
from lossagg.families.base import CountLaw

MOST_POINTS = 2**17
_WORK = 2**25
_REACHES = (1e-7, 1e-6, 1e-5, 1e-4)
_MOST_LARGE = 4_000
_SAME = 1e-9

Solve = Callable[[CompoundSum], AnnualLoss]


@dataclass(frozen=True)
class PairMoments(CompoundSum):
    """The payments of a pair of sums, for the tail, and the moments of u(Z) + v(R).

    Args:
        parts: the lines with what they pay.
        u: what counts of the sum of payments.
        first: E[u(Z) + v(R)].
        second: E[(u(Z) + v(R))**2].
    """

    u: Schedule
    first: float
    second: float

    @cached_property
    def mean(self) -> float:
        """The mean; `inf` where it does not exist."""
        return self.first

    @cached_property
    def variance(self) -> float:
        """The variance; `inf` where it does not exist."""
        return self.second - self.first**2 if self.second < np.inf else np.inf

    def largest_sf(self, x: FloatArray) -> FloatArray:
        """P(some payment alone makes u exceed x): at most that of the two sums together."""
        return super().largest_sf(self._payment(x)) if self._slope > 0 else np.zeros(x.shape)

    def exceedances(self, x: FloatArray) -> FloatArray:
        """Expected number of payments that make u exceed x by themselves."""
        return super().exceedances(self._payment(x)) if self._slope > 0 else np.zeros(x.shape)

    def layer_cost(self, low: float, high: float) -> float:
        """Expected cost of the layer of single payments that lifts u from low to high."""
        ends = self._payment(np.array([low, high]))
        return self._slope * super().layer_cost(float(ends[0]), float(ends[1])) if self._slope > 0 else 0.0

    def layer_square(self, low: float, high: float) -> float:
        """The same of squares."""
        ends = self._payment(np.array([low, high]))
        return (
            self._slope**2 * super().layer_square(float(ends[0]), float(ends[1])) if self._slope > 0 else 0.0
        )

    @property
    def _slope(self) -> float:
        return self.u.slopes[-1]

    def _payment(self, x: FloatArray) -> FloatArray:
        start, value = self.u.starts[-1], self.u.values[-1]
        return np.asarray(np.maximum(start + (x - value) / self._slope, start))


def paired_loss(engine: str, solve: Solve, lines: tuple[Line, ...], plan: PairPlan) -> AnnualLoss:
    """The distribution of u(Z) + v(R); `plan.beyond` is still to be applied.

    Args:
        engine: name of the engine.
        solve: how it computes one annual sum.
        lines: the lines, with the law of their counts.
        plan: what the lines add to the two sums.

    Raises:
        EngineError: several lines of which one is not Poisson, lines whose deductible keeps different
            amounts, or more large events than can be followed.
    """
    total = _split_sum(lines, plan)
    paid, held = CompoundSum.of(lines, plan.paid), CompoundSum.of(lines, plan.held)
    held_loss = solve(held)
    kept = TransformedAnnualLoss(held_loss, plan.kept)
    if total is None:
        return kept
    both = {name: plan.paid[name] + plan.held[name] for name in plan.paid}
    reach = solve(CompoundSum.of(lines, both))
    step, points = _lattice(total, reach)
    counted = TransformedAnnualLoss(solve(paid), plan.payments)
    alone = _sides(counted, kept)
    down, even, up = (run_pass(total, step, points, side) for side in ("down", "even", "up"))
    moments = [
        PairMoments(
            paid.parts,
            plan.payments,
            first.layer_mean(0.0) + second.layer_mean(0.0),
            first.layer_second_moment(0.0) + second.layer_second_moment(0.0) + 2.0 * one.product,
        )
        for (first, second), one in zip(alone, (down, even, up), strict=True)
    ]
    assert isinstance(held_loss, LatticeLoss)
    wrapped = float(held_loss.high.sf(1.9 * step * points))
    least = 1.0 - running_sums(down.probabilities) - down.unseen - down.slack
    most = 1.0 - running_sums(up.probabilities) + up.slack + wrapped
    least = np.minimum.accumulate(np.clip(least, 0.0, 1.0))
    most = np.maximum.accumulate(np.clip(most, 0.0, 1.0)[::-1])[::-1]
    assert isinstance(reach, LatticeLoss)
    low, high = _bounds(engine, (moments[0], moments[2]), step, least, most, reach.high)
    return LatticeLoss(
        engine=engine,
        compound=moments[1],
        step=step,
        density=np.zeros(points),
        below=(0.0, 0.0, 0.0),
        atoms=np.maximum(even.probabilities, 0.0),
        continuous=0.0,
        tie=8.0 * float(even.slack[0]),
        low=low,
        high=high,
    )


def _sides(
    counted: TransformedAnnualLoss, kept: TransformedAnnualLoss
) -> list[tuple[AnnualLoss, AnnualLoss]]:
    """u(Z) and v(R) by themselves: from below, near, and from above."""
    first, second = counted.bounds(), kept.bounds()
    return [(first[0], second[0]), (counted, kept), (first[1], second[1])]


def _bounds(
    engine: str,
    moments: tuple[PairMoments, PairMoments],
    step: float,
    least: FloatArray,
    most: FloatArray,
    whole: LatticeBound,
) -> tuple[LatticeBound, LatticeBound]:
    """The two sides; what is left beyond the lattice is the mean less the integral on it, and from above
    at most what the two sums have there together."""
    top, odd = step * len(least), step**2 * (2.0 * np.arange(len(least)) + 1.0)
    sides = []
    for upper, own, other, model in ((False, least, most, moments[0]), (True, most, least, moments[1])):
        rest = max(model.first - step * float(other.sum()), 0.0)
        square = model.second
        if square < np.inf:
            square = max(square - float(odd @ other) - (0.0 if upper else 2.0 * top * rest), 0.0)
        if upper:
            rest, square = min(rest, whole.layer_mean(top)), min(square, whole.layer_second_moment(top))
        sides.append(LatticeBound(engine, model, upper, step, own, rest, square))
    return sides[0], sides[1]


def _split_sum(lines: tuple[Line, ...], plan: PairPlan) -> SplitSum | None:
    """The lines as one stream of large and small events; None where no event is large."""
    own = [line for line in lines if line.name in plan.paid and line.frequency.mean() > 0]
    splits = [split(plan.paid[line.name], plan.held[line.name]) for line in own]
    count = _pooled(own)
    paying = [PaymentLaw(line.severity, plan.paid[line.name]) for line in own]
    weights = [line.frequency.mean() / count.mean() for line in own] if own else []
    large = min(sum(weight * law.paying for weight, law in zip(weights, paying, strict=True)), 1.0)
    if large == 0.0:
        return None
    kept = {part.kept for part, law in zip(splits, paying, strict=True) if law.paying > 0}
    if max(kept) - min(kept) > _SAME * max(kept):
        raise _refused("the deductible keeps different amounts of the events of its lines", sorted(kept))
    small = [PaymentLaw(line.severity, part.small) for line, part in zip(own, splits, strict=True)]
    rest = 1.0 - large
    total = SplitSum(
        count,
        large,
        [(weight / large, law) for weight, law in zip(weights, paying, strict=True)],
        [(weight / rest, law) for weight, law in zip(weights, small, strict=True)] if rest > 0 else [],
        max(kept),
        plan.payments,
        plan.kept,
    )
    if total.most_large > _MOST_LARGE:
        raise _refused(f"it would follow {total.most_large:,} events above the deductible", _MOST_LARGE)
    return total


def _pooled(lines: list[Line]) -> CountLaw:
    """The number of events of all lines."""
    if len(lines) == 1:
        return lines[0].frequency
    for line in lines:
        if not isinstance(line.frequency, Poisson):
            raise _refused(
                "the counts of several lines are pooled only where all are Poisson", line.frequency.family
            )
    return Poisson(mean=sum(line.frequency.mean() for line in lines))


def _lattice(total: SplitSum, reach: AnnualLoss) -> tuple[float, int]:
    """Step and points: as fine as the engine's own lattice where that is affordable."""
    assert isinstance(reach, LatticeLoss)
    most = int(min(MOST_POINTS, max(_WORK // (total.most_large + 1), 2**13)))
    knots = [*total.u.starts[1:], *total.v.starts[1:]]
    length = reach.step
    for exceedance in _REACHES:
        length = max(reach.value_at_risk(1.0 - exceedance), 1.05 * max(knots, default=0.0), 2.0 * reach.step)
        if length / reach.step < most:
            break
    step = max(reach.step, length / (most - 2))
    span = common_span([amount for amount in (total.kept, *knots) if amount > 0])
    if span is not None and span >= step:
        step = span / max(round(span / step), 1)
    return float(step), int(np.ceil(length / step * (1.0 - _SAME))) + 2


def _refused(why: str, value: object) -> EngineError:
    return EngineError(
        f"the exact engines cannot compute a retained cap here: {why}",
        value=value,
        remedy="The simulation computes it.",
    )
