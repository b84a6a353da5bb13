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
from lossagg.fitting.likelihood import NEGLIGIBLE, PartLikelihood, Range, SizeLikelihood
from lossagg.fitting.sample import Sample

_LARGEST_LOG = 500.0  # of a scale in units of order one: beyond, it leaves the range of float64
_POWER_LAW = "above the threshold the losses follow a power law, and the scale falls to 0"
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

    def tail_shape(self, inner: tuple[Jet, ...]) -> Jet | None:
        return inner[0]

    def log_density(self, inner: tuple[Jet, ...], sample: Sample) -> Jet:
        shape, level = inner
        w = (sample.exact - self.origin) * np.exp(level.value)
        g, g_s, g_l, g_ss, g_sl, g_ll = (
            sample.total(part) for part in excess_partials(float(shape.value[0]), w)
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

    def runaway(self, inner: tuple[Jet, ...]) -> str:
        return _POWER_LAW if inner[1].value[0] > -np.log(NEGLIGIBLE) else ""

    def objection(self, inner: tuple[Jet, ...]) -> str:
        if inner[0].value[0] <= NEGLIGIBLE:
            return "the tail of the losses is not heavier than exponential, so alpha grows without bound"
        return self.runaway(inner)


@dataclass(frozen=True)
class WeibullLikelihood(PartLikelihood):
    """S(x) = exp(-(x / scale)**shape). Coordinates: log shape and level, where log w = shape * (log x -
    reference) + level.

    Above a threshold shape to 0 is the Pareto law, with w without bound at the reference point; the
    ratio S(x) / S(t) is formed from w less its value there, so that w itself never appears.

    Attributes:
        reference: log of the smallest threshold, or the mean logarithm where a loss has none.
    """

    law: ClassVar[type[SizeLaw]] = Weibull
    ranges: ClassVar[dict[str, Range]] = {"shape": "positive", "scale": "positive"}
    nearest: ClassVar[str] = "pareto, lomax or lognormal"

    reference: float

    @classmethod
    def about(cls, sample: Sample) -> WeibullLikelihood:
        """The likelihood with the reference point of a sample."""
        centre = sample.log_sum / sample.count
        return cls(float(np.log(sample.floor)) if sample.floor > 0 else centre)

    def inner(self, point: tuple[Jet, ...]) -> tuple[Jet, ...]:
        return exp(point[0]), point[1]

    def natural(self, inner: tuple[Jet, ...], scale: float) -> tuple[Jet, ...]:
        power, level = inner
        return power, exp(-level / power) * (scale * float(np.exp(self.reference)))

    def log_density(self, inner: tuple[Jet, ...], sample: Sample) -> Jet:
        return self._density(inner, sample) - sample.count * exp(inner[1])

    def log_density_at(self, inner: tuple[Jet, ...], points: FloatArray) -> Jet:
        logs = np.log(points)
        log_w = (logs - self.reference) * inner[0] + inner[1]
        return log(inner[0]) + log_w - exp(log_w) - logs

    def log_survival(self, inner: tuple[Jet, ...], points: FloatArray) -> Jet:
        return -exp((np.log(points) - self.reference) * inner[0] + inner[1])

    def total(self, inner: tuple[Jet, ...], sample: Sample) -> Jet:
        total = self._density(inner, sample) - sample.untied * exp(inner[1])
        for group, sign in ((sample.stopped, 1.0), (sample.thresholds, -1.0)):
            if len(group.points):
                apart = np.log(group.points) - self.reference
                total = total - self._growth(inner, apart, sign * group.weights)
        return total

    def runaway(self, inner: tuple[Jet, ...]) -> str:
        power, level = (float(part.value[0]) for part in inner)
        if power > NEGLIGIBLE and abs(level) < _LARGEST_LOG * power:
            return ""
        return "above the threshold the losses follow a power law, and the shape falls to 0"

    def starts(self, sample: Sample) -> list[FloatArray]:
        spread = np.sqrt(sample.log_squares / sample.count)
        guesses = (1.2826 / spread, 1.0, 0.5, 0.25, 2.0)  # sd of the logs is pi / sqrt(6) / shape
        return [np.array([np.log(power), self._level(power, sample)]) for power in guesses]

    def _density(self, inner: tuple[Jet, ...], sample: Sample) -> Jet:
        """log f + w(reference), summed."""
        power, level = inner
        apart = sample.logs - self.reference
        log_slopes = sample.count * (log(power) + level) + power * sample.total(apart) - sample.log_sum
        weights = np.ones(1) if sample.weights is None else sample.weights
        return log_slopes - self._growth(inner, apart, weights)

    def _growth(self, inner: tuple[Jet, ...], apart: FloatArray, weights: FloatArray) -> Jet:
        """Weighted sum of w - w(reference) = exp(level) * (exp(power * apart) - 1)."""
        power, level = (float(part.value[0]) for part in inner)
        base = np.exp(level)
        growth = base * np.sum(weights * np.expm1(power * apart))
        w = weights * np.exp(power * apart + level)
        one, two = np.sum(w * apart), np.sum(w * apart**2)
        return compose(inner, float(growth), np.array([one, growth]), np.array([[two, one], [one, growth]]))

    def _level(self, power: float, sample: Sample) -> float:
        """The closed maximum in the level for a given power."""
        risk = sample.total(np.exp(power * (sample.logs - self.reference)))
        for group, sign in ((sample.stopped, 1.0), (sample.thresholds, -1.0)):
            apart = np.log(group.points) - self.reference
            risk += sign * float(np.sum(group.weights * np.exp(power * apart)))
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

    def runaway(self, inner: tuple[Jet, ...]) -> str:
        shape, power, level = (float(part.value[0]) for part in inner)
        if power < NEGLIGIBLE or abs(level) > _LARGEST_LOG * power:
            return "its gamma falls to 0"
        return _POWER_LAW if shape * np.exp(min(level, 700.0)) > 1 / NEGLIGIBLE else ""

    def objection(self, inner: tuple[Jet, ...]) -> str:
        if inner[0].value[0] <= NEGLIGIBLE:
            return "the tail of the losses is not heavier than Weibull, so alpha grows without bound"
        return self.runaway(inner)

    def tail_shape(self, inner: tuple[Jet, ...]) -> Jet | None:
        return inner[0] / inner[1]

    def log_density(self, inner: tuple[Jet, ...], sample: Sample) -> Jet:
        shape, power, level = inner
        y = sample.logs
        w = np.exp(power.value * y + level.value)
        g, g_s, g_l, g_ss, g_sl, g_ll = excess_partials(float(shape.value[0]), w)
        first = np.array([sample.total(part) for part in (g_s, g_l * y, g_l)])
        bend = [sample.total(g_ll * y**k) for k in (0, 1, 2)]
        cross = [sample.total(g_sl), sample.total(g_sl * y)]
        second = np.array(
            [
                [sample.total(g_ss), cross[1], cross[0]],
                [cross[1], bend[2], bend[1]],
                [cross[0], bend[1], bend[0]],
            ]
        )
        excess = compose(inner, sample.total(g), first, second)
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
