"""The Fourier engine: exact annual losses for any count law with a generating function.

It finds its own lattice. A coarse pass locates the quantiles. The step follows from the bracket asked
for: rounding moves each payment by less than a step, so the bracket of a quantile is about as wide as
the number of rounded payments times the step. The length follows from how far out the distribution is
wanted. The bracket reached is then measured, and the step refined where it falls short.
"""

from __future__ import annotations

import warnings
from collections.abc import Callable, Iterator
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass

import numpy as np

from lossagg.arrays import FloatArray, require_positive
from lossagg.engines.bound import LatticeBound
from lossagg.engines.compound import CompoundSum
from lossagg.engines.exact import ExactEngine, Rounded, bracket
from lossagg.engines.lattice import LatticeLoss
from lossagg.engines.limited import LimitedMeans
from lossagg.engines.pair import PairPlan
from lossagg.engines.pair_sum import paired_loss
from lossagg.engines.placed import Line
from lossagg.engines.quantiles import LEAST_REACH, LEVELS, REACHES, Quantiles
from lossagg.engines.result import AnnualLoss
from lossagg.engines.running import running_sums
from lossagg.engines.span import arithmetic_span, fitting_step
from lossagg.engines.transform import LatticeTransform, bounded_survivals
from lossagg.errors import EngineError, InputError, LossaggWarning

MOST_POINTS = 2**22
BYTES_PER_POINT = 250
_COARSE_POINTS = 2**13
_LEAST_POINTS = 2**15
_EASY_POINTS = 2**18
_PASSES = 4
_CLOSE = 1.0


class BracketWarning(LossaggWarning):
    """The bracket is wider than asked for, because the lattice may not grow further.

    Attributes:
        level: the level at which it is widest, against what was asked.
        asked: relative width asked for at this level.
        width: relative width reached.
        points: number of lattice points used.
        step: lattice step used.
    """

    def __init__(self, level: float, asked: float, width: float, points: int, step: float) -> None:
        self.level, self.asked, self.width, self.points, self.step = level, asked, width, points, step
        super().__init__(
            f"The bracket of the value at risk at {100 * level:g} % is {width:.2%} wide, {asked:.2%} was "
            f"asked for; the lattice has {points:,} points of step {step:.6g}, the most allowed is "
            f"{MOST_POINTS:,}. The value itself is far more accurate than its guaranteed bracket."
        )


@dataclass(frozen=True, kw_only=True)
class Fourier(ExactEngine):
    """The Fourier engine and its settings.

    Args:
        points: number of lattice points, 2 to 4,194,304; by default chosen from the accuracy.
        step: distance of the lattice points, in money; by default chosen from the accuracy, such that
            deductibles, limits and tabulated sizes fall on lattice points where they can.
        accuracy: width asked of the bracket of VaR 99.5 %, relative to it; VaR 99.9 % may take twice
            that. Not used when both `points` and `step` are given. Where a quantile is below a 2,000th
            of the amount exceeded once in 10,000 years, the width is relative to a hundredth of that.

    Raises:
        InputError: a setting outside its range.
    """

    points: int | None = None
    step: float | None = None
    accuracy: float = 1e-3

    def __post_init__(self) -> None:
        if self.points is not None and not (
            isinstance(self.points, int) and 2 <= self.points <= MOST_POINTS and self.points is not True
        ):
            raise InputError(
                f"points must be a whole number from 2 to {MOST_POINTS}",
                value=self.points,
                remedy="Leave it out to have it chosen from the accuracy.",
            )
        if self.step is not None:
            require_positive(self.step, "step")
        if not 0 < require_positive(self.accuracy, "accuracy") < 1:
            raise InputError("accuracy must be below 1", value=self.accuracy, remedy="Write 0.001 for 0.1 %.")

    @property
    def name(self) -> str:
        """The engine's name."""
        return "fourier"

    def solve(self, compound: CompoundSum) -> LatticeLoss:
        """The distribution of an annual sum of payments.

        Warns:
            BracketWarning: the accuracy asked for needs more points than allowed.

        Raises:
            EngineError: a step so small that the lattice would not reach the quantiles.
        """
        if not compound.parts:
            return _Pass.over(compound, 1.0, 2).loss()
        compound = compound.settled(survival)
        coarse = (
            None
            if self.points and self.step
            else Quantiles.located(compound, _COARSE_POINTS, _survival_of(compound))
        )
        if coarse is None or self.points or self.step:
            return _Pass.over(compound, *self._given(compound, coarse)).loss()
        span = arithmetic_span(compound)
        if span is not None and coarse.points(span, LEAST_REACH) <= MOST_POINTS:
            return _Pass.over(compound, span, _far_points(coarse, span)).loss()
        best = self._refined(compound, coarse)
        missed = [miss for miss in best.widths(coarse) if miss[1] > _CLOSE * miss[2] * self.accuracy]
        if missed:
            level, width, factor = max(missed, key=lambda miss: miss[1] / miss[2])
            warnings.warn(
                BracketWarning(level, factor * self.accuracy, width, best.points, best.step), stacklevel=4
            )
        return best.loss()

    def solve_pair(self, lines: tuple[Line, ...], plan: PairPlan) -> AnnualLoss:
        """The distribution of a function of two annual sums, by conditioning on the large events.

        Raises:
            EngineError: lines or terms outside the domain of `pair_sum`.
        """
        return paired_loss(self.name, self.solve, lines, plan)

    def _given(self, compound: CompoundSum, coarse: Quantiles | None) -> tuple[float, int]:
        """Step and points where at least one of them is given."""
        if coarse is None:
            return float(self.step or 0.0), int(self.points or 0)
        if self.step is None:
            points = int(self.points or 0)
            reach = coarse.reach(LEAST_REACH)
            return fitting_step(compound, reach / (points - 1), longer=True), points
        points = coarse.points(self.step, LEAST_REACH)
        if points > MOST_POINTS:
            raise EngineError(
                f"a lattice of this step needs {points:,} points ({points * BYTES_PER_POINT / 1e9:.1f} GB) "
                f"to reach the amount exceeded once in 10,000 years; the most allowed is {MOST_POINTS:,}",
                value=self.step,
                remedy=f"Give a step of at least {self.step * points / MOST_POINTS:.6g}, or leave it out.",
            )
        return self.step, max(_far_points(coarse, self.step), 2)

    def _refined(self, compound: CompoundSum, coarse: Quantiles) -> _Pass:
        """The pass on the coarsest lattice that gives the accuracy asked for, or the best allowed."""
        most = MOST_POINTS // compound.load
        reach = coarse.reach(LEAST_REACH)
        rounded, limited = (coarse.step_for(self.accuracy, limited=flag) for flag in (False, True))
        step = min(max(rounded, min(limited, reach / _EASY_POINTS)), reach / _LEAST_POINTS)
        best, shortfall = None, np.inf
        for _ in range(_PASSES):
            step = max(step, coarse.reach(REACHES[-1]) / (most - 2))
            fitted = fitting_step(compound, step)
            if coarse.points(fitted, REACHES[-1]) > most:
                fitted = step
            current = _Pass.over(compound, fitted, _far_points(coarse, fitted))
            worst = max(width / (factor * self.accuracy) for _, width, factor in current.widths(coarse))
            if best is not None and worst > max(0.8 * shortfall, _CLOSE):
                return best if worst >= shortfall else current
            power = 1.0
            if best is not None and worst < shortfall:
                # The width falls with the step, but often more slowly: as fast as from pass to pass.
                power = np.log(best.step / current.step) / np.log(shortfall / worst)
            best, shortfall = current, worst
            if worst <= _CLOSE or current.points > 0.9 * most:
                return current
            step = current.step * (0.9 / worst) ** float(np.clip(power, 1.0, 3.0))
        return best if best is not None else current


def _survival_of(compound: CompoundSum) -> Callable[[float, int], FloatArray]:
    return lambda step, points: survival(compound, step, points)


def survival(compound: CompoundSum, step: float, points: int) -> FloatArray:
    """P(S > kh) on a lattice as it comes, without bracket, shape (points,)."""
    return 1.0 - running_sums(LatticeTransform(compound, step, points).kept().probabilities)


def _far_points(quantiles: Quantiles, step: float) -> int:
    most = MOST_POINTS // quantiles.compound.load
    easy = max(min(_EASY_POINTS, most), int(1.25 * quantiles.points(step, LEAST_REACH)))
    return min(quantiles.far_points(step, easy=easy, most=most), most)


@dataclass(frozen=True)
class _Pass:
    """A pass on one lattice, with its bracket."""

    compound: CompoundSum
    step: float
    points: int
    transform: LatticeTransform
    low: LatticeBound
    high: LatticeBound
    limited: LimitedMeans | None

    @classmethod
    def over(cls, compound: CompoundSum, step: float, points: int) -> _Pass:
        transform = LatticeTransform(compound, step, points)
        with ThreadPoolExecutor(max_workers=1) as pool:
            beside = pool.submit(transform.limited, step)
            index = np.arange(float(points))
            rounded = []
            for total, upward in zip(transform.sides(), (False, True), strict=True):
                inside = sum(line.expected_rounded(index, upward) for line in transform.lines)
                least, most = bounded_survivals(total, transform.wrapped)
                rounded.append(Rounded(least, most, step * inside))
            limited = beside.result()
        low, high = bracket("fourier", compound, step, rounded[0], rounded[1], limited)
        return cls(compound, step, points, transform, low, high, limited)

    def widths(self, coarse: Quantiles) -> Iterator[tuple[float, float, float]]:
        """(level, relative width of the bracket, how many times the accuracy it may be)."""
        for level, factor in LEVELS:
            low, high = self.low.value_at_risk(level), self.high.value_at_risk(level)
            yield level, (high - low) / coarse.scale(low), factor

    def loss(self) -> LatticeLoss:
        """The annual loss on this lattice."""
        even = self.transform.even()
        atoms, continuous = self.transform.atoms()
        return LatticeLoss(
            engine="fourier",
            compound=self.compound,
            step=self.step,
            density=even.probabilities - atoms,
            below=even.below,
            atoms=atoms,
            continuous=continuous,
            tie=8.0 * float(even.slack[0]),
            low=self.low,
            high=self.high,
            limited=self.limited,
        )
