"""The Fourier engine: exact annual losses for any count law with a generating function.

It finds its own lattice. A coarse pass locates the quantiles. The step follows from the bracket asked
for: rounding moves each payment by less than a step, so the bracket of a quantile is about as wide as
the number of rounded payments times the step. The length follows from how far out the distribution is
wanted. The bracket reached is then measured, and the step refined where it falls short.
"""

from __future__ import annotations

import logging
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
from lossagg.engines.resources import BracketWarning, OutOfReachError, Resources, expected_width
from lossagg.engines.result import AnnualLoss
from lossagg.engines.running import running_sums
from lossagg.engines.span import arithmetic_span, fitting_step
from lossagg.engines.transform import LatticeSum, LatticeTransform, bounded_survivals
from lossagg.errors import EngineError, InputError

MOST_POINTS = 2**22
BYTES_PER_POINT = 300
_COARSE_POINTS = 2**13
_LEAST_POINTS = 2**15
_EASY_POINTS = 2**18
_PASSES = 4
_ACCURACY = 1e-3
# A bracket so many times as wide as asked is refused before the work: it would be narrower than expected, but
# not by that much.
_FORESEEN = 4.0
# Seconds for a point in one transform, its share of everything else included.
_TRANSFORM = 1.5e-7
_WORTH_A_NOTE = 5.0

log = logging.getLogger(__name__)


@dataclass(frozen=True, kw_only=True)
class Fourier(ExactEngine):
    """The Fourier engine and its settings.

    Args:
        points: number of lattice points, 2 to 4,194,304; by default chosen from the accuracy.
        step: distance of the lattice points, in money; by default chosen from the accuracy, such that
            deductibles, limits and tabulated sizes fall on lattice points where they can.
        accuracy: width asked of the bracket of VaR 99.5 %, relative to it; VaR 99.9 % may take twice
            that. Where a quantile is below a 2,000th of the amount exceeded once in 10,000 years, the width
            is relative to a hundredth of that. What is asked for is kept or refused; by default 0.001 is
            aimed at, and a `BracketWarning` states the width where the points allowed do not give it.

    Raises:
        InputError: a setting outside its range.
    """

    points: int | None = None
    step: float | None = None
    accuracy: float | None = None

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
        if self.accuracy is not None and not 0 < require_positive(self.accuracy, "accuracy") < 1:
            raise InputError("accuracy must be below 1", value=self.accuracy, remedy="Write 0.001 for 0.1 %.")

    @property
    def name(self) -> str:
        """The engine's name."""
        return "fourier"

    def solve(self, compound: CompoundSum) -> LatticeLoss:
        """The distribution of an annual sum of payments.

        Warns:
            BracketWarning: the accuracy aimed at by default needs more points than allowed.

        Raises:
            OutOfReachError: the accuracy asked for cannot be had; before the work where that is foreseen.
            EngineError: a step so small that the lattice would not reach the quantiles.
        """
        if not compound.parts:
            return _Pass.over(compound, 1.0, 2).loss()
        compound = compound.settled(survival)
        if self.points and self.step and self.accuracy is None:
            return _Pass.over(compound, self.step, self.points, last=True).loss()
        coarse = Quantiles.located(compound, _COARSE_POINTS, _survival_of(compound))
        expected, exact = self._plan(compound, coarse)
        if expected.seconds > _WORTH_A_NOTE:
            log.info("the Fourier engine needs %s", expected)
        first = expected.step, expected.points
        if exact:
            return _Pass.over(compound, *first, last=True).loss()
        if self.points or self.step:
            best = _Pass.over(compound, *first, last=True)
        else:
            self._require_foreseeable(compound, coarse)
            best = self._refined(compound, coarse, first)
        self._judge(best, coarse)
        return best.loss()

    def expected(self, compound: CompoundSum) -> Resources:
        """What `solve` will take, see `ExactEngine.resources`."""
        if not compound.parts:
            return Resources(engine="fourier", points=2, step=1.0, width=0.0, memory=0.0, seconds=0.0)
        compound = compound.settled(survival)
        coarse = Quantiles.located(compound, _COARSE_POINTS, _survival_of(compound))
        return self._plan(compound, coarse)[0]

    def _plan(self, compound: CompoundSum, coarse: Quantiles) -> tuple[Resources, bool]:
        """The first pass, and whether its step is the span of all payments, so that nothing is rounded."""
        span = None if self.points or self.step else arithmetic_span(compound)
        exact = False
        if span is not None and coarse.points(span, LEAST_REACH) <= MOST_POINTS:
            step, points, exact = span, _far_points(coarse, span), True
        else:
            step, points = self._lattice(compound, coarse)
        load = float(points * compound.load)
        plan = Resources(
            engine="fourier",
            points=points,
            step=step,
            width=0.0 if exact else expected_width(coarse, step),
            memory=BYTES_PER_POINT * load,
            seconds=_TRANSFORM * (6 + 4 * len(compound.parts)) * load,
        )
        return plan, exact

    def solve_pair(self, lines: tuple[Line, ...], plan: PairPlan) -> AnnualLoss:
        """The distribution of a function of two annual sums, by conditioning on the large events.

        Raises:
            EngineError: lines or terms outside the domain of `pair_sum`.
        """
        return paired_loss(self.name, self.solve, lines, plan)

    @property
    def _aim(self) -> float:
        return _ACCURACY if self.accuracy is None else self.accuracy

    def _lattice(self, compound: CompoundSum, coarse: Quantiles) -> tuple[float, int]:
        """Step and points of the first pass: as given, or from the accuracy."""
        if self.points and self.step:
            return self.step, self.points
        if self.points:
            return fitting_step(
                compound, coarse.reach(LEAST_REACH) / (self.points - 1), longer=True
            ), self.points
        if self.step:
            return self.step, _affordable(coarse, self.step)
        reach = coarse.reach(LEAST_REACH)
        rounded, limited = (coarse.step_for(self._aim, limited=flag) for flag in (False, True))
        return _fitted(
            compound, coarse, min(max(rounded, min(limited, reach / _EASY_POINTS)), reach / _LEAST_POINTS)
        )

    def _refined(self, compound: CompoundSum, coarse: Quantiles, first: tuple[float, int]) -> _Pass:
        """The pass on the coarsest lattice that gives the accuracy aimed at, or the best allowed."""
        best, shortfall, lattice = None, np.inf, first
        for _ in range(_PASSES):
            current = _Pass.over(compound, *lattice)
            worst = max(width / (factor * self._aim) for _, width, factor in current.widths(coarse))
            if best is not None and worst > max(0.8 * shortfall, 1.0):
                return best if worst >= shortfall else current
            power = 1.0
            if best is not None and worst < shortfall:
                # The width falls with the step, but often more slowly: as fast as from pass to pass.
                power = np.log(best.step / current.step) / np.log(shortfall / worst)
            best, shortfall = current, worst
            if worst <= 1.0 or current.points > 0.9 * _most(compound):
                return current
            lattice = _fitted(
                compound, coarse, current.step * (0.9 / worst) ** float(np.clip(power, 1.0, 3.0))
            )
        return best if best is not None else current

    def _require_foreseeable(self, compound: CompoundSum, coarse: Quantiles) -> None:
        """Refuse an accuracy asked for that is out of reach by far, before the work."""
        if self.accuracy is None:
            return
        most, reach = _most(compound), coarse.reach(REACHES[-1])
        width = expected_width(coarse, reach / (most - 2))
        if width > _FORESEEN * self.accuracy:
            level, factor = LEVELS[0]
            needed = reach / coarse.step_for(self.accuracy, limited=True)
            raise OutOfReachError(
                level=level,
                asked=factor * self.accuracy,
                width=width,
                needed=needed,
                allowed=_allowed(most),
                foreseen=True,
            )

    def _judge(self, best: _Pass, coarse: Quantiles) -> None:
        """Refuse a bracket wider than asked for; say so where it is only wider than by default."""
        missed = [miss for miss in best.widths(coarse) if miss[1] > miss[2] * self._aim]
        if not missed or (self.accuracy is None and (self.points or self.step)):
            return
        level, width, factor = max(missed, key=lambda miss: miss[1] / miss[2])
        asked, most = factor * self._aim, _most(best.compound)
        if self.accuracy is None:
            warning = BracketWarning(level, asked, width, best.points, best.step, most)
            warnings.warn(warning, stacklevel=5)
            return
        given = f"the lattice given has {best.points:,}" if self.points or self.step else _allowed(most)
        needed = best.points * width / asked
        raise OutOfReachError(
            level=level, asked=asked, width=width, needed=needed, allowed=given, foreseen=False
        )


def _most(compound: CompoundSum) -> int:
    """The most points of a lattice of this sum."""
    return MOST_POINTS // compound.load


def _allowed(most: int) -> str:
    return f"{most:,} ({most * BYTES_PER_POINT / 1e9:.1f} GB) are allowed"


def _affordable(coarse: Quantiles, step: float) -> int:
    """Points of a lattice of a given step."""
    points = coarse.points(step, LEAST_REACH)
    if points > MOST_POINTS:
        raise EngineError(
            f"a lattice of this step needs {points:,} points ({points * BYTES_PER_POINT / 1e9:.1f} GB) "
            f"to reach the amount exceeded once in 10,000 years; the most allowed is {MOST_POINTS:,}",
            value=step,
            remedy=f"Give a step of at least {step * points / MOST_POINTS:.6g}, or leave it out.",
        )
    return max(_far_points(coarse, step), 2)


def _fitted(compound: CompoundSum, coarse: Quantiles, step: float) -> tuple[float, int]:
    """The lattice of a step, or of one not much longer, that is as long as it should and may be."""
    most = _most(compound)
    step = max(step, coarse.reach(REACHES[-1]) / (most - 2))
    fitted = fitting_step(compound, step)
    if coarse.points(fitted, REACHES[-1]) > most:
        fitted = step
    return fitted, _far_points(coarse, fitted)


def _survival_of(compound: CompoundSum) -> Callable[[float, int], FloatArray]:
    return lambda step, points: survival(compound, step, points)


def survival(compound: CompoundSum, step: float, points: int) -> FloatArray:
    """P(S > kh) on a lattice as it comes, without bracket, shape (points,)."""
    return 1.0 - running_sums(LatticeTransform(compound, step, points).kept().probabilities)


def _far_points(quantiles: Quantiles, step: float) -> int:
    most = _most(quantiles.compound)
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
    even: LatticeSum | None

    @classmethod
    def over(cls, compound: CompoundSum, step: float, points: int, *, last: bool = False) -> _Pass:
        """Compute it on two threads.

        Args:
            compound: the sum.
            step: distance of the lattice points.
            points: their number.
            last: whether this is the pass that will be kept, so that the distribution itself is wanted.
        """
        transform = LatticeTransform(compound, step, points)
        with ThreadPoolExecutor(max_workers=1) as pool:
            beside = pool.submit(transform.limited, step)
            lowered, raised = transform.rounded()
            above = pool.submit(transform.sum_of, raised) if last else None
            below = transform.sum_of(lowered)
            even = transform.even() if last else None
            sums = (below, transform.sum_of(raised) if above is None else above.result())
            index = np.arange(float(points))
            rounded = []
            for total, upward in zip(sums, (False, True), strict=True):
                inside = sum(line.expected_rounded(index, upward) for line in transform.lines)
                rounded.append(Rounded(*bounded_survivals(total, transform.wrapped), step * inside))
            limited = beside.result()
        low, high = bracket("fourier", compound, step, rounded[0], rounded[1], limited)
        return cls(compound, step, points, transform, low, high, limited, even)

    def widths(self, coarse: Quantiles) -> Iterator[tuple[float, float, float]]:
        """(level, relative width of the bracket, how many times the accuracy it may be)."""
        for level, factor in LEVELS:
            low, high = self.low.value_at_risk(level), self.high.value_at_risk(level)
            yield level, (high - low) / coarse.scale(low), factor

    def loss(self) -> LatticeLoss:
        """The annual loss on this lattice."""
        even = self.even or self.transform.even()
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
