"""The log-likelihood of losses under one family, seen by the maximiser.

Each family climbs in its own unconstrained coordinates, chosen so that the limit laws of the family
(the exponential law inside the Lomax, the Pareto law behind a truncated lognormal) lie at a place
one can recognise. `inner` turns coordinates into the parameters the formulas use, `natural` turns
these into the parameters of the law, in money; both are jets, so the covariance follows by the delta
method with exact derivatives.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Callable, Mapping
from functools import reduce
from operator import add
from typing import ClassVar, Literal

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.families.base import SizeLaw
from lossagg.fitting.jets import Jet
from lossagg.fitting.maximise import Maximum
from lossagg.fitting.sample import Sample, Weighted

BLOCK = 8192
NEGLIGIBLE = 1e-8  # a departure from a limit law this small, in units of order one, is none

Range = Literal["real", "positive", "probability"]


class SizeLikelihood(ABC):
    """The likelihood of one family of sizes.

    Attributes:
        law: the class of the law the fit hands back.
        ranges: free parameters of the law in its own order, with the range of each.
        nearest: families to try where this one has no maximum.
    """

    law: ClassVar[type[SizeLaw]]
    ranges: ClassVar[dict[str, Range]]
    nearest: ClassVar[str]

    @abstractmethod
    def inner(self, point: tuple[Jet, ...]) -> tuple[Jet, ...]:
        """Coordinates to the parameters the formulas use, in units of the sample's scale."""

    @abstractmethod
    def natural(self, inner: tuple[Jet, ...], scale: float) -> tuple[Jet, ...]:
        """The free parameters of the law in the order of `ranges`, in money."""

    @abstractmethod
    def log_density(self, inner: tuple[Jet, ...], sample: Sample) -> Jet:
        """Sum of log f over the uncensored losses, as one number."""

    @abstractmethod
    def log_survival(self, inner: tuple[Jet, ...], points: FloatArray) -> Jet:
        """log S at each point."""

    @abstractmethod
    def starts(self, sample: Sample) -> list[FloatArray]:
        """Starting points, best guesses first."""

    def total(self, inner: tuple[Jet, ...], sample: Sample) -> Jet:
        """Sum of log f(x)/S(t) over uncensored and log S(x)/S(t) over censored losses, as one number.

        A family overrides it where numerator and denominator are both tiny far below the threshold and
        their ratio must be formed without cancellation.
        """
        total = self.log_density(inner, sample)
        for group, sign in ((sample.stopped, 1.0), (sample.thresholds, -1.0)):
            if len(group.points):
                total = total + sign * summed(lambda points: self.log_survival(inner, points), group)
        return total

    def model(self, values: Mapping[str, float]) -> SizeLaw:
        """The law of parameters by name, those held fixed included."""
        return self.law(**values)

    def ordered(self, maximum: Maximum) -> Maximum:
        """The same maximum where parts that can change places have theirs."""
        return maximum

    def fixed(self, scale: float) -> dict[str, float]:
        """Parameters of the law that are not estimated, in money."""
        return {}

    def admissible(self, inner: tuple[Jet, ...]) -> bool:
        """Whether the formulas hold at these parameters; outside, the likelihood counts as zero."""
        return True

    def tail_shape(self, inner: tuple[Jet, ...]) -> Jet | None:
        """1 / tail index; None for a family whose moments all exist whatever its parameters."""
        return None

    def runaway(self, inner: tuple[Jet, ...]) -> str:
        """Why a climb that came this far is on its way to a limit law and may stop; empty while it is not."""
        return ""

    def objection(self, inner: tuple[Jet, ...]) -> str:
        """Why a maximum at these parameters is no law of the family; empty where it is one."""
        return self.runaway(inner)


class PartLikelihood(SizeLikelihood):
    """The likelihood of a family that may be part of a mixture."""

    @abstractmethod
    def log_density_at(self, inner: tuple[Jet, ...], points: FloatArray) -> Jet:
        """log f at each point."""


def summed(function: Callable[[FloatArray], Jet], group: Weighted) -> Jet:
    """Weighted sum of a function over the points of a group, in blocks that stay in the cache: a million
    thresholds must not cost a million Hessians at once."""
    parts = (
        function(group.points[start : start + BLOCK]).total(group.weights[start : start + BLOCK])
        for start in range(0, len(group.points), BLOCK)
    )
    return reduce(add, parts)


def log_likelihood(likelihood: SizeLikelihood, sample: Sample, point: tuple[Jet, ...]) -> Jet:
    """The log-likelihood at coordinates, `-inf` where the formulas do not hold; amounts in units of the
    sample's scale."""
    inner = likelihood.inner(point)
    total = likelihood.total(inner, sample)
    if not likelihood.admissible(inner):
        return Jet(np.array([-np.inf]), total.gradient, total.hessian)
    return total
