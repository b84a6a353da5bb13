"""Likelihoods of the generalized Pareto, Lomax, Weibull and Burr laws.

The four are one formula: S(x) = (1 + xi w)**(-1/xi) with log w = power * log(x - origin) + level,
xi = 0 for the Weibull law and power = 1 for the first two. In these coordinates the limit alpha -> inf
of the Lomax (Burr) law is the regular point xi = 0, the exponential (Weibull) law: losses with a lighter
tail than the family can have show as xi < 0, instead of a climb without end.
"""

# ruff: noqa: D102 - the methods are documented where SizeLikelihood declares them

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.families import Burr, GeneralizedPareto, Lomax, Weibull
from lossagg.families.base import SizeLaw
from lossagg.fitting.jet_functions import excess_partials, log_excess
from lossagg.fitting.jets import Jet, compose, exp, log
from lossagg.fitting.likelihood import Range, SizeLikelihood
from lossagg.fitting.sample import Sample

_SMALLEST_SHAPE = 1e-8  # of xi: under it the law cannot be told from its limit
_LIGHTEST_SHAPE = -0.25  # of xi for Lomax and Burr: far enough below 0 to know that the maximum is there


@dataclass(frozen=True)
class GeneralizedParetoLikelihood(SizeLikelihood):
    """S(x) = (1 + shape (x - threshold) / scale)**(-1/shape), the threshold fixed.

    Coordinates: shape and -log scale. Below shape -1 the likelihood is unbounded and stays out of bounds.
    """

    law: ClassVar[type[SizeLaw]] = GeneralizedPareto
    ranges: ClassVar[dict[str, Range]] = {"shape": "real", "scale": "positive"}
    nearest: ClassVar[str] = "exponential or weibull"

    origin: float

    def inner(self, point: tuple[Jet, ...]) -> tuple[Jet, ...]:
        return point

    def natural(self, inner: tuple[Jet, ...], scale: float) -> tuple[Jet, ...]:
        return inner[0], exp(-inner[1]) * scale

    def fixed(self, scale: float) -> dict[str, float]:
        return {"threshold": self.origin * scale}

    def admissible(self, inner: tuple[Jet, ...]) -> bool:
        return bool(inner[0].value[0] > -1)

    def log_density(self, inner: tuple[Jet, ...], sample: Sample) -> Jet:
        shape, level = inner
        w = (sample.exact - self.origin) * np.exp(level.value)
        g, g_s, g_l, g_ss, g_sl, g_ll = (
            float(np.sum(part)) for part in excess_partials(float(shape.value[0]), w)
        )
        first, second = np.array([g_s, g_l]), np.array([[g_ss, g_sl], [g_sl, g_ll]])
        return sample.count * level - (1.0 + shape) * compose((shape, level), g, first, second)

    def log_survival(self, inner: tuple[Jet, ...], points: FloatArray) -> Jet:
        beyond = np.maximum(points - self.origin, 0.0)
        with np.errstate(divide="ignore"):
            return -log_excess(inner[0], np.log(beyond) + inner[1])

    def starts(self, sample: Sample) -> list[FloatArray]:
        excess = sample.exact - self.origin
        middle = max(float(np.median(excess)), 1e-3 * float(np.mean(excess)))
        shapes = (0.3, 0.05, 0.8, 1.5, -0.2)
        # The median of the law at the median of the excesses: w = (2**xi - 1) / xi there.
        points = [np.array([xi, np.log((2**xi - 1) / xi / middle)]) for xi in shapes]
        highest = float(excess[-1])
        return [*points, np.array([-0.5, -np.log(0.55 * highest)])]


@dataclass(frozen=True)
class LomaxLikelihood(GeneralizedParetoLikelihood):
    """S(x) = (scale / (scale + x))**alpha: the generalized Pareto law from zero with shape 1/alpha > 0."""

    law: ClassVar[type[SizeLaw]] = Lomax
    ranges: ClassVar[dict[str, Range]] = {"alpha": "positive", "scale": "positive"}
    nearest: ClassVar[str] = "exponential, weibull or pareto"

    origin: float = 0.0

    def natural(self, inner: tuple[Jet, ...], scale: float) -> tuple[Jet, ...]:
        alpha = 1.0 / inner[0]
        return alpha, alpha * exp(-inner[1]) * scale

    def fixed(self, scale: float) -> dict[str, float]:
        return {}

    def admissible(self, inner: tuple[Jet, ...]) -> bool:
        return bool(inner[0].value[0] > _LIGHTEST_SHAPE)

    def objection(self, inner: tuple[Jet, ...]) -> str:
        if inner[0].value[0] > _SMALLEST_SHAPE:
            return ""
        return "the tail of the losses is not heavier than exponential, so alpha grows without bound"


class WeibullLikelihood(SizeLikelihood):
    """S(x) = exp(-(x / scale)**shape). Coordinates: log shape and level = -shape * log scale."""

    law: ClassVar[type[SizeLaw]] = Weibull
    ranges: ClassVar[dict[str, Range]] = {"shape": "positive", "scale": "positive"}
    nearest: ClassVar[str] = "pareto, lomax or lognormal"

    def inner(self, point: tuple[Jet, ...]) -> tuple[Jet, ...]:
        return exp(point[0]), point[1]

    def natural(self, inner: tuple[Jet, ...], scale: float) -> tuple[Jet, ...]:
        power, level = inner
        return power, exp(-level / power) * scale

    def log_density(self, inner: tuple[Jet, ...], sample: Sample) -> Jet:
        power, level = inner
        w = np.exp(power.value * sample.logs + level.value)
        zero, one, two = (float(np.sum(w * sample.logs**k)) for k in range(3))
        first, second = np.array([one, zero]), np.array([[two, one], [one, zero]])
        log_slopes = sample.count * (log(power) + level) + (power - 1.0) * sample.log_sum
        return log_slopes - compose((power, level), zero, first, second)

    def log_survival(self, inner: tuple[Jet, ...], points: FloatArray) -> Jet:
        return -exp(np.log(points) * inner[0] + inner[1])

    def starts(self, sample: Sample) -> list[FloatArray]:
        spread = np.sqrt(sample.log_squares / sample.count)
        guesses = (1.2826 / spread, 1.0, 0.5, 0.25, 2.0)  # sd of the logs is pi / sqrt(6) / shape
        return [np.array([np.log(power), self._level(power, sample)]) for power in guesses]

    @staticmethod
    def _level(power: float, sample: Sample) -> float:
        """The closed maximum in the level for a given power."""
        risk = float(np.sum(np.exp(power * sample.logs)))
        for group, sign in ((sample.stopped, 1.0), (sample.thresholds, -1.0)):
            risk += sign * float(np.sum(group.weights * group.points**power))
        return float(np.log(sample.count / risk)) if risk > 0 else 0.0


class BurrLikelihood(SizeLikelihood):
    """S(x) = (1 + (x / scale)**gamma)**-alpha. Coordinates: xi = 1/alpha, log gamma, level."""

    law: ClassVar[type[SizeLaw]] = Burr
    ranges: ClassVar[dict[str, Range]] = {"alpha": "positive", "gamma": "positive", "scale": "positive"}
    nearest: ClassVar[str] = "weibull, lomax or lognormal"

    def inner(self, point: tuple[Jet, ...]) -> tuple[Jet, ...]:
        return point[0], exp(point[1]), point[2]

    def natural(self, inner: tuple[Jet, ...], scale: float) -> tuple[Jet, ...]:
        shape, power, level = inner
        return 1.0 / shape, power, exp(-(level + log(shape)) / power) * scale

    def admissible(self, inner: tuple[Jet, ...]) -> bool:
        return bool(inner[0].value[0] > _LIGHTEST_SHAPE)

    def objection(self, inner: tuple[Jet, ...]) -> str:
        if inner[0].value[0] > _SMALLEST_SHAPE:
            return ""
        return "the tail of the losses is not heavier than Weibull, so alpha grows without bound"

    def log_density(self, inner: tuple[Jet, ...], sample: Sample) -> Jet:
        shape, power, level = inner
        y = sample.logs
        w = np.exp(power.value * y + level.value)
        g, g_s, g_l, g_ss, g_sl, g_ll = excess_partials(float(shape.value[0]), w)
        first = np.array([np.sum(g_s), np.sum(g_l * y), np.sum(g_l)])
        bend = [np.sum(g_ll * y**k) for k in (0, 1, 2)]
        cross = [np.sum(g_sl), np.sum(g_sl * y)]
        second = np.array(
            [
                [np.sum(g_ss), cross[1], cross[0]],
                [cross[1], bend[2], bend[1]],
                [cross[0], bend[1], bend[0]],
            ]
        )
        excess = compose(inner, float(np.sum(g)), first, second)
        log_slopes = sample.count * (log(power) + level) + (power - 1.0) * sample.log_sum
        return log_slopes - (1.0 + shape) * excess

    def log_survival(self, inner: tuple[Jet, ...], points: FloatArray) -> Jet:
        return -log_excess(inner[0], np.log(points) * inner[1] + inner[2])

    def starts(self, sample: Sample) -> list[FloatArray]:
        spread = np.sqrt(sample.log_squares / sample.count)
        middle = sample.log_sum / sample.count
        points = []
        for xi in (0.5, 1.0, 2.0, 0.1):
            for power in (1.0, 1.2826 / spread, 2.0, 0.7):
                level = np.log((2**xi - 1) / xi) - power * middle
                points.append(np.array([xi, np.log(power), level]))
        return points
