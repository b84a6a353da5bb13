"""What a fit was made from and where it ended: enough to ask the likelihood further questions."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import cast

import numpy as np

from lossagg.fitting.excess_laws import BurrLikelihood, LomaxLikelihood
from lossagg.fitting.jets import Jet, log, variables
from lossagg.fitting.likelihood import SizeLikelihood, log_likelihood
from lossagg.fitting.maximise import Maximum, Objective
from lossagg.fitting.profile import profile_interval
from lossagg.fitting.sample import Sample

_USUAL = 0.95


@dataclass(frozen=True, eq=False, repr=False)
class Solution:
    """A likelihood, the losses it was maximised on, and the certified maximum.

    Attributes:
        likelihood: of the family, in its own coordinates.
        sample: the losses, in units of the sample's scale.
        maximum: where the climb ended.
    """

    likelihood: SizeLikelihood
    sample: Sample
    maximum: Maximum

    def objective(self, point: tuple[Jet, ...]) -> Jet:
        """The log-likelihood as a jet of the coordinates."""
        return log_likelihood(self.likelihood, self.sample, point)

    def own(self, point: tuple[Jet, ...]) -> tuple[Jet, ...]:
        """The coordinates of the likelihood among those of the objective."""
        return point

    def interval(self, name: str, level: float) -> tuple[float, float]:
        """Profile-likelihood interval of one estimated parameter, in money where it is an amount.

        A parameter above zero is profiled by its logarithm, and the alpha of the Lomax and the Burr law by
        its inverse, whose zero is the limit of endless alpha: that end is `inf` then.
        """
        place = list(self.likelihood.ranges).index(name)
        kind = self.likelihood.ranges[name]
        inverse = name == "alpha" and isinstance(self.likelihood, LomaxLikelihood | BurrLikelihood)

        def quantity(point: tuple[Jet, ...]) -> Jet:
            inner = self.likelihood.inner(self.own(point))
            if inverse:
                return inner[0]
            value = self.likelihood.natural(inner, self.sample.scale)[place]
            return log(value) if kind == "positive" else value

        low, high = profile_interval(self.objective, quantity, self.maximum, level)
        if inverse:
            return 1.0 / high, (1.0 / low if low > 0 else np.inf)
        return (float(np.exp(low)), float(np.exp(high))) if kind == "positive" else (low, high)

    def tail_shape(self, level: float) -> tuple[float, float, float] | None:
        """The extreme value index of the law (1 / tail index) with its profile interval; None for families
        whose moments all exist whatever their parameters."""
        return self._usual_shape if level == _USUAL else self._tail_shape(level)

    @cached_property
    def _usual_shape(self) -> tuple[float, float, float] | None:
        return self._tail_shape(_USUAL)

    def _tail_shape(self, level: float) -> tuple[float, float, float] | None:
        here = self.likelihood.tail_shape(self.likelihood.inner(self.own(variables(self.maximum.point))))
        if here is None:
            return None

        def quantity(point: tuple[Jet, ...]) -> Jet:
            return cast(Jet, self.likelihood.tail_shape(self.likelihood.inner(self.own(point))))

        low, high = profile_interval(self.objective, quantity, self.maximum, level)
        return float(here.value[0]), low, high


@dataclass(frozen=True, eq=False, repr=False)
class TiedSolution(Solution):
    """A likelihood that was maximised together with others it shares parameters with.

    Attributes:
        joint: the whole log-likelihood; the maximum is its.
        first: place of the likelihood's own coordinates, which are the last.
    """

    joint: Objective
    first: int

    def objective(self, point: tuple[Jet, ...]) -> Jet:
        """The whole log-likelihood as a jet of all coordinates."""
        return self.joint(point)

    def own(self, point: tuple[Jet, ...]) -> tuple[Jet, ...]:
        """The last coordinates."""
        return point[self.first :]
