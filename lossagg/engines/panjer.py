"""The Panjer engine: exact annual losses by recursion and direct convolution.

Independent of the Fourier engine in how it puts a payment on the lattice (differences of the survival
function at the middle of the cells, then the mean restored), and in how it adds payments up: Panjer's
recursion for Poisson and negative binomial counts, repeated convolution for binomial counts, where the
recursion is unstable (Panjer and Wang 1993), and for tables of counts, and direct convolution of the lines.
Poisson lines are first joined into one compound Poisson sum. The work grows with the square of the number
of points, so its lattice is coarser and its bracket wider than the Fourier engine's.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from lossagg.arrays import FloatArray, require_positive
from lossagg.engines.compound import CompoundSum
from lossagg.engines.counted import countable, sums_of
from lossagg.engines.exact import ExactEngine, Rounded, bracket
from lossagg.engines.lattice import LatticeLoss
from lossagg.engines.limited import LimitedMeans
from lossagg.engines.pooled import pooled
from lossagg.engines.quantiles import LEAST_REACH, REACHES, Quantiles
from lossagg.engines.recursive import Lines
from lossagg.engines.resources import Resources, expected_width
from lossagg.engines.running import running_sums
from lossagg.engines.span import arithmetic_span, fitting_step
from lossagg.errors import EngineError, InputError
from lossagg.families import Poisson

MOST_POINTS = 2**17
_COARSE_POINTS = 2**10
_LEAST_POINTS = 2**13
# Products in one recursion, a tenth of a second or two.
_WORK = 2.0**26
_ACCURACY = 0.005
_LEAST_EXCEEDANCE = 7e-4
_NEGLIGIBLE = 1e-17
# For the estimate of resources: recursions of one result, seconds for a product and for a point.
_RECURSIONS = 8.0
_PRODUCT = 3e-10
_POINT = 4e-7
_BYTES_PER_POINT = 200


@dataclass(frozen=True, kw_only=True)
class Panjer(ExactEngine):
    """The Panjer engine and its settings.

    Args:
        points: number of lattice points, 2 to 131,072; by default 8,192 or more, as far as a recursion
            stays within some tenths of a second.
        step: distance of the lattice points, in money; by default chosen so that the lattice reaches
            amounts exceeded once in 2,500 years or less.

    Raises:
        InputError: a setting outside its range.
    """

    points: int | None = None
    step: float | None = None

    def __post_init__(self) -> None:
        if self.points is not None and not (
            isinstance(self.points, int) and 2 <= self.points <= MOST_POINTS and self.points is not True
        ):
            raise InputError(
                f"points must be a whole number from 2 to {MOST_POINTS}",
                value=self.points,
                remedy="Leave it out to have it chosen.",
            )
        if self.step is not None:
            require_positive(self.step, "step")

    @property
    def name(self) -> str:
        """The engine's name."""
        return "panjer"

    def solve(self, compound: CompoundSum) -> LatticeLoss:
        """The distribution of an annual sum of payments.

        Raises:
            EngineError: a count law outside the class of the recursion, or a step so small that the
                lattice would not reach the quantiles.
        """
        compound = pooled(compound)
        _require_recursion(compound)
        step, points = self._lattice(compound) if compound.parts else (1.0, 2)
        lines = Lines(compound, step, points)
        nearest, slack = lines.nearest()
        atoms, continuous = (
            lines.atoms() if any(part.payment.stretches for part in compound.parts) else (nearest, 0.0)
        )
        down = _rounded(lines.down(), compound, step, [masses.down for masses in lines.masses])
        up = _rounded(lines.up(), compound, step, [masses.up for masses in lines.masses])
        limited = _limited(lines, step)
        low, high = bracket("panjer", compound, step, down, up, limited)
        return LatticeLoss(
            engine="panjer",
            compound=compound,
            step=step,
            density=nearest - atoms,
            below=(0.0, 0.0, 0.0),
            atoms=atoms,
            continuous=continuous,
            tie=slack / 64.0,
            low=low,
            high=high,
            limited=limited,
        )

    def expected(self, compound: CompoundSum) -> Resources:
        """What `solve` will take, see `ExactEngine.resources`."""
        compound = pooled(compound)
        _require_recursion(compound)
        if not compound.parts:
            return Resources(engine="panjer", points=2, step=1.0, width=0.0, memory=0.0, seconds=0.0)
        quantiles = Quantiles.located(compound, _COARSE_POINTS, _survival_of(compound))
        step, points = self._lattice(compound)
        products = _share(compound, step * points) * float(points) ** 2
        return Resources(
            engine="panjer",
            points=points,
            step=step,
            width=0.0 if step == arithmetic_span(compound) else expected_width(quantiles, step),
            memory=float(_BYTES_PER_POINT * points * len(compound.parts)),
            seconds=_RECURSIONS * (_PRODUCT * products + _POINT * points),
        )

    def _lattice(self, compound: CompoundSum) -> tuple[float, int]:
        """Step and points: as given, or chosen from where the quantiles lie."""
        if self.points is not None and self.step is not None:
            return self.step, self.points
        quantiles = Quantiles.located(compound, _COARSE_POINTS, _survival_of(compound))
        if self.step is not None:
            return self.step, _affordable(quantiles, self.step)
        reach = _reach(quantiles)
        if self.points is not None:
            return fitting_step(compound, reach / (self.points - 1), longer=True), self.points
        span = arithmetic_span(compound)
        if span is not None and reach / span + 2 <= _LEAST_POINTS:
            return span, int(max(quantiles.far_points(span, easy=_LEAST_POINTS, most=0), reach / span + 2))
        wanted = int(min(reach / quantiles.step_for(_ACCURACY), MOST_POINTS))
        points = min(max(_LEAST_POINTS, wanted), _most_points(compound, reach))
        step = fitting_step(compound, reach / points, longer=True)
        return step, int(reach / step) + 2


def _limited(lines: Lines, step: float) -> LimitedMeans | None:
    """Bounds of the limited means, from payments with their means kept."""
    kept = lines.kept()
    if kept is None:
        return None
    probabilities, slack, gap = kept
    survival = 1.0 - running_sums(probabilities)
    least, most = (np.minimum.accumulate(np.clip(survival + off, 0.0, 1.0)) for off in (-slack, slack))
    return LimitedMeans.of(step, least, most, gap)


def _rounded(
    total: tuple[FloatArray, float], compound: CompoundSum, step: float, masses: list[FloatArray]
) -> Rounded:
    """A sum of rounded payments with the bounds of its survival function."""
    probabilities, slack = total
    survival = 1.0 - running_sums(probabilities)
    index = np.arange(len(probabilities))
    inside = sum(
        part.frequency.mean() * float(index @ one) for part, one in zip(compound.parts, masses, strict=True)
    )
    least, most = (np.minimum.accumulate(np.clip(survival + off, 0.0, 1.0)) for off in (-slack, slack))
    return Rounded(least, most, step * inside)


def _reach(quantiles: Quantiles) -> float:
    """As far as is cheap, and beyond once in 1,000 years at least."""
    needed = quantiles.reach(_LEAST_EXCEEDANCE)
    for exceedance in REACHES:
        if quantiles.covers(exceedance) and quantiles.reach(exceedance) <= 1.5 * needed:
            return quantiles.reach(exceedance) + quantiles.step
    return needed + quantiles.step


def _affordable(quantiles: Quantiles, step: float) -> int:
    points = quantiles.points(step, LEAST_REACH)
    if points > MOST_POINTS:
        raise EngineError(
            f"a lattice of this step needs {points:,} points to reach the amount exceeded once in 10,000 "
            f"years; the most allowed is {MOST_POINTS:,}",
            value=step,
            remedy=f"Give a step of at least {step * points / MOST_POINTS:.6g}, or use the fourier engine.",
        )
    return points


def _most_points(compound: CompoundSum, reach: float) -> int:
    """Points at which one recursion or convolution stays within the work allowed."""
    return int(min(np.sqrt(_WORK / _share(compound, reach)), MOST_POINTS))


def _share(compound: CompoundSum, reach: float) -> float:
    """Products of one recursion or convolution over the square of its points: the part of the lattice that
    single payments cover."""
    share = 0.0
    for count, payment in compound.parts:
        width = min(payment.upper(min(_NEGLIGIBLE / count.mean(), 0.5)) / reach, 1.0)
        share = max(share, width * sums_of(count))
    others = sum(not isinstance(part.frequency, Poisson) for part in compound.parts)
    if len(compound.parts) > 1:
        share = max(share, 0.25 * min(others, 4))
    return max(share, 1e-6)


def _require_recursion(compound: CompoundSum) -> None:
    for count, _ in compound.parts:
        if not countable(count):
            raise EngineError(
                "Panjer's recursion needs a Poisson, negative binomial or binomial count, one of these with "
                "its own probability of no loss, or a table of up to 1,000 counts",
                value=count.family,
                remedy="The fourier engine and the simulation take any count.",
            )


def _survival_of(compound: CompoundSum) -> Callable[[float, int], FloatArray]:
    def survive(step: float, points: int) -> FloatArray:
        return 1.0 - running_sums(Lines(compound, step, points).nearest()[0])

    return survive
