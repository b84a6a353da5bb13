"""Likelihoods of the log-logistic and the log-gamma law: logarithms that are logistic or gamma distributed.

The log-logistic law is the Burr law with alpha held at 1. The log-gamma law is the gamma law of
log(x / minimum), with the minimum given: fitted, it would run to the smallest loss, where the likelihood has
no bound (Hogg & Klugman, Loss Distributions, 1984, take the unit of money for it).
"""

# ruff: noqa: D102 - the methods are documented where SizeLikelihood declares them

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.families import LogGamma, LogLogistic
from lossagg.families.base import SizeLaw
from lossagg.fitting.classic_laws import GammaLikelihood, GammaSums
from lossagg.fitting.excess_laws import BurrLikelihood
from lossagg.fitting.jet_functions import log_gamma_survival
from lossagg.fitting.jets import Jet, exp, log
from lossagg.fitting.likelihood import Range
from lossagg.fitting.sample import Sample


class LogLogisticLikelihood(BurrLikelihood):
    """S(x) = 1 / (1 + (x / scale)**gamma). Coordinates: log gamma and level."""

    law: ClassVar[type[SizeLaw]] = LogLogistic
    ranges: ClassVar[dict[str, Range]] = {"gamma": "positive", "scale": "positive"}
    nearest: ClassVar[str] = "lognormal, pareto or lomax"

    def inner(self, point: tuple[Jet, ...]) -> tuple[Jet, ...]:
        return point[0] * 0.0 + 1.0, exp(point[0]), point[1]

    def natural(self, inner: tuple[Jet, ...], scale: float) -> tuple[Jet, ...]:
        return super().natural(inner, scale)[1:]

    def starts(self, sample: Sample) -> list[FloatArray]:
        middle, slope = sample.log_sum / sample.count, np.pi / np.sqrt(3) / sample.spread
        points = []
        for power in (slope, 1.0, 2.0, 0.5 * slope):  # sd of the logs is pi / sqrt(3) / gamma
            for shift in (0.0, 1.5) if sample.censored or len(sample.thresholds.points) else (0.0,):
                points.append(np.array([np.log(power), shift - power * middle]))
        return points


@dataclass(frozen=True)
class LogGammaLikelihood(GammaLikelihood):
    """log(X / minimum) is gamma distributed, the minimum fixed. Coordinates: log shape and log of the mean
    of the logarithm.

    Attributes:
        minimum: smallest amount the law allows, in units of the sample's scale.
    """

    law: ClassVar[type[SizeLaw]] = LogGamma
    ranges: ClassVar[dict[str, Range]] = {"shape": "positive", "rate": "positive"}
    nearest: ClassVar[str] = "pareto, lomax or lognormal"
    limit: ClassVar[str] = "above the threshold the losses are heavier than any log-gamma law"

    minimum: float

    def natural(self, inner: tuple[Jet, ...], scale: float) -> tuple[Jet, ...]:
        return inner[0], 1.0 / inner[1]

    def fixed(self, scale: float) -> dict[str, float]:
        return {"minimum": self.minimum * scale}

    def tail_shape(self, inner: tuple[Jet, ...]) -> Jet | None:
        return inner[1]

    def above(self, points: FloatArray) -> FloatArray:
        """log(x / minimum), accurate just above the minimum; 0 below it."""
        return np.log1p(np.maximum(points - self.minimum, 0.0) / self.minimum)

    def sums(self, sample: Sample) -> GammaSums:
        logs = sample.total(self.above(sample.exact)), sample.total(np.log(self.above(sample.exact)))
        return GammaSums(sample.count, *logs, jacobian=sample.log_sum)

    def log_survival(self, inner: tuple[Jet, ...], points: FloatArray) -> Jet:
        y = self.above(points)
        inside = y > 0
        if not inside.any():
            return inner[0] * np.zeros(len(y))
        survival = log_gamma_survival(inner[0], np.log(np.where(inside, y, 1.0)) - log(inner[1]))
        return survival * inside.astype(np.float64)
