"""Where a fit of counts ended: its likelihood and maximum, for profile-likelihood intervals."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np

from lossagg.fitting.jets import Jet, log
from lossagg.fitting.likelihood import Range
from lossagg.fitting.maximise import Maximum, Objective
from lossagg.fitting.profile import profile_interval


@dataclass(frozen=True, eq=False, repr=False)
class CountSolution:
    """A likelihood of counts in its coordinates, its certified maximum and the parameters seen from them.

    Attributes:
        objective: the log-likelihood as a jet of the coordinates.
        maximum: where the climb ended.
        natural: coordinates to the estimated parameters, in the order of `ranges`.
        ranges: the estimated parameters with the range of each.
    """

    objective: Objective
    maximum: Maximum
    natural: Callable[[tuple[Jet, ...]], tuple[Jet, ...]]
    ranges: Mapping[str, Range]

    def interval(self, name: str, level: float) -> tuple[float, float]:
        """Profile-likelihood interval of one estimated parameter; a positive one by its logarithm."""
        place = list(self.ranges).index(name)
        positive = self.ranges[name] == "positive"

        def quantity(point: tuple[Jet, ...]) -> Jet:
            value = self.natural(point)[place]
            return log(value) if positive else value

        low, high = profile_interval(self.objective, quantity, self.maximum, level)
        if positive:
            return float(np.exp(low)), float(np.exp(high))
        return max(low, 0.0), min(high, 1.0)
