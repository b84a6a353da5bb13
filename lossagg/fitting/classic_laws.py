"""Likelihoods of the exponential, Pareto, gamma and inverse Gaussian laws.

All four have sufficient statistics: the uncensored losses enter through two or three sums taken
once, so a step of the climb costs as much as there are distinct thresholds and censoring points.
"""

# ruff: noqa: D102 - the methods are documented where SizeLikelihood declares them

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.families import Exponential, Gamma, InverseGaussian, Pareto
from lossagg.families.base import SizeLaw
from lossagg.fitting.jet_functions import (
    log_gamma_function,
    log_gamma_survival,
    log_mills,
    log_normal_survival,
    log_one_minus_exp,
)
from lossagg.fitting.jets import Jet, exp, log
from lossagg.fitting.likelihood import NEGLIGIBLE, PartLikelihood, Range, SizeLikelihood
from lossagg.fitting.sample import Sample

_HALF_LOG_TWO_PI = float(0.5 * np.log(2 * np.pi))


class ExponentialLikelihood(PartLikelihood):
    """S(x) = exp(-x / mean). Coordinate: log mean; the maximum is closed."""

    law: ClassVar[type[SizeLaw]] = Exponential
    ranges: ClassVar[dict[str, Range]] = {"mean": "positive"}
    nearest: ClassVar[str] = "pareto"

    def inner(self, point: tuple[Jet, ...]) -> tuple[Jet, ...]:
        return (exp(point[0]),)

    def natural(self, inner: tuple[Jet, ...], scale: float) -> tuple[Jet, ...]:
        return (inner[0] * scale,)

    def log_density(self, inner: tuple[Jet, ...], sample: Sample) -> Jet:
        return -(sample.count * log(inner[0]) + sample.sum / inner[0])

    def log_density_at(self, inner: tuple[Jet, ...], points: FloatArray) -> Jet:
        return -(points / inner[0] + log(inner[0]))

    def log_survival(self, inner: tuple[Jet, ...], points: FloatArray) -> Jet:
        return -(points / inner[0])

    def starts(self, sample: Sample) -> list[FloatArray]:
        # Total time at risk per uncensored loss: the maximum itself.
        return [np.log([sample.exposure_above / sample.count])]


@dataclass(frozen=True)
class GammaSums:
    """What a gamma likelihood needs of the uncensored losses: their number, their sum and that of their
    logarithms, and what a change of variable adds to each log density."""

    count: float
    sum: float
    log_sum: float
    jacobian: float = 0.0


@dataclass(frozen=True)
class ParetoLikelihood(SizeLikelihood):
    """S(x) = (minimum / x)**alpha with the minimum fixed. Coordinate: log alpha; the maximum is closed."""

    law: ClassVar[type[SizeLaw]] = Pareto
    ranges: ClassVar[dict[str, Range]] = {"alpha": "positive"}
    nearest: ClassVar[str] = "exponential"

    minimum: float

    def inner(self, point: tuple[Jet, ...]) -> tuple[Jet, ...]:
        return (exp(point[0]),)

    def natural(self, inner: tuple[Jet, ...], scale: float) -> tuple[Jet, ...]:
        return inner

    def fixed(self, scale: float) -> dict[str, float]:
        return {"minimum": self.minimum * scale}

    def log_density(self, inner: tuple[Jet, ...], sample: Sample) -> Jet:
        beyond = sample.log_sum - sample.count * float(np.log(self.minimum))
        return sample.count * log(inner[0]) - inner[0] * beyond - sample.log_sum

    def log_survival(self, inner: tuple[Jet, ...], points: FloatArray) -> Jet:
        return -(inner[0] * np.log(np.maximum(points / self.minimum, 1.0)))

    def tail_shape(self, inner: tuple[Jet, ...]) -> Jet | None:
        return exp(-log(inner[0]))

    def starts(self, sample: Sample) -> list[FloatArray]:
        risk = sample.log_sum - sample.count * np.log(self.minimum)
        for group, sign in ((sample.stopped, 1.0), (sample.thresholds, -1.0)):
            beyond = np.log(np.maximum(group.points / self.minimum, 1.0))
            risk += sign * float(np.sum(group.weights * beyond))
        return [np.log([sample.count / risk])]


class GammaLikelihood(PartLikelihood):
    """Coordinates: log shape and log mean, which are orthogonal for complete losses."""

    law: ClassVar[type[SizeLaw]] = Gamma
    ranges: ClassVar[dict[str, Range]] = {"shape": "positive", "scale": "positive"}
    nearest: ClassVar[str] = "lognormal, pareto or lomax"
    limit: ClassVar[str] = "above the threshold the losses are heavier than any gamma law"

    def sums(self, sample: Sample) -> GammaSums:
        """Of the uncensored losses."""
        return GammaSums(sample.count, sample.sum, sample.log_sum)

    def inner(self, point: tuple[Jet, ...]) -> tuple[Jet, ...]:
        shape = exp(point[0])
        return shape, exp(point[1]) / shape

    def natural(self, inner: tuple[Jet, ...], scale: float) -> tuple[Jet, ...]:
        return inner[0], inner[1] * scale

    def log_density(self, inner: tuple[Jet, ...], sample: Sample) -> Jet:
        shape, scale = inner
        known = self.sums(sample)
        per_loss = log_gamma_function(shape) + shape * log(scale)
        return (shape - 1.0) * known.log_sum - known.count * per_loss - known.sum / scale - known.jacobian

    def log_density_at(self, inner: tuple[Jet, ...], points: FloatArray) -> Jet:
        shape, scale = inner
        constant = log_gamma_function(shape) + shape * log(scale)
        return (shape - 1.0) * np.log(points) - points / scale - constant

    def log_survival(self, inner: tuple[Jet, ...], points: FloatArray) -> Jet:
        return log_gamma_survival(inner[0], np.log(points) - log(inner[1]))

    def runaway(self, inner: tuple[Jet, ...]) -> str:
        if inner[0].value[0] > NEGLIGIBLE:
            return ""
        return f"{self.limit}, and its shape falls to 0"

    def starts(self, sample: Sample) -> list[FloatArray]:
        known = self.sums(sample)
        mean = known.sum / known.count
        gap = max(np.log(mean) - known.log_sum / known.count, 1e-12)  # equal losses leave 0
        # Minka (2002), Estimating a gamma distribution: closed approximation of the maximum.
        shape = (3 - gap + np.sqrt((gap - 3) ** 2 + 24 * gap)) / (12 * gap)
        points = [np.log([shape, mean])]
        if sample.censored or len(sample.thresholds.points):
            for smaller in (1.0, 0.4, 0.1):
                for ratio in (0.3, 0.7, 1.5, 4.0):
                    points.append(np.log([shape * smaller, mean * ratio]))
        return points


@dataclass(frozen=True)
class GammaOfShapeLikelihood(GammaLikelihood):
    """The gamma law of a given shape. Coordinate: log mean."""

    ranges: ClassVar[dict[str, Range]] = {"scale": "positive"}

    shape: float

    def inner(self, point: tuple[Jet, ...]) -> tuple[Jet, ...]:
        return point[0] * 0.0 + self.shape, exp(point[0]) / self.shape

    def natural(self, inner: tuple[Jet, ...], scale: float) -> tuple[Jet, ...]:
        return (inner[1] * scale,)

    def fixed(self, scale: float) -> dict[str, float]:
        return {"shape": self.shape}

    def starts(self, sample: Sample) -> list[FloatArray]:
        risk = max(sample.exposure_above, 0.1 * sample.sum) / sample.count
        return [np.log([risk]), np.log([0.3 * risk])]


class InverseGaussianLikelihood(SizeLikelihood):
    """Coordinates: log mean and log shape, which are orthogonal for complete losses."""

    law: ClassVar[type[SizeLaw]] = InverseGaussian
    ranges: ClassVar[dict[str, Range]] = {"mean": "positive", "shape": "positive"}
    nearest: ClassVar[str] = "lognormal, lomax or pareto"

    def inner(self, point: tuple[Jet, ...]) -> tuple[Jet, ...]:
        return exp(point[0]), exp(point[1])

    def natural(self, inner: tuple[Jet, ...], scale: float) -> tuple[Jet, ...]:
        return inner[0] * scale, inner[1] * scale

    def log_density(self, inner: tuple[Jet, ...], sample: Sample) -> Jet:
        mean, shape = inner
        rate = 1.0 / mean
        average = sample.sum / sample.count
        apart = average * rate - 1.0  # sum of (x - m)**2 / (m**2 x), split so that nothing cancels
        squares = apart * apart * (sample.count / average) + (sample.inverse_sum - sample.count / average)
        constant = 1.5 * sample.log_sum + sample.count * _HALF_LOG_TWO_PI
        return 0.5 * sample.count * log(shape) - 0.5 * shape * squares - constant

    def log_survival(self, inner: tuple[Jet, ...], points: FloatArray) -> Jet:
        mean, shape = inner
        root = exp(0.5 * log(shape)) * (1 / np.sqrt(points))
        near, far = root * (points / mean - 1.0), root * (points / mean + 1.0)
        return log_normal_survival(near) + log_one_minus_exp(log_mills(far) - log_mills(near))

    def runaway(self, inner: tuple[Jet, ...]) -> str:
        if inner[0].value[0] < 1 / NEGLIGIBLE and inner[1].value[0] > NEGLIGIBLE:
            return ""
        return "its mean grows without bound or its shape falls to 0"

    def starts(self, sample: Sample) -> list[FloatArray]:
        mean = sample.sum / sample.count
        shape = sample.count / (sample.inverse_sum - sample.count / mean)
        points = [np.log([mean, shape])]
        if sample.censored or len(sample.thresholds.points):
            for ratio in (0.3, 0.7, 1.5, 5.0):
                for factor in (1.0, 0.4, 0.1):
                    points.append(np.log([mean * ratio, shape * factor]))
        return points
