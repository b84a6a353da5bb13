"""The likelihood of the lognormal law, safe on the ridge that leads from it to the Pareto law.

Above a threshold the lognormal family has the Pareto law as its limit: mu to minus infinity with
(mu - log t) / sigma**2 held. Losses as heavy as that have no lognormal maximum (Castillo 1994, Ann. Inst.
Statist. Math. 46, for the truncated normal law: one exists when the excesses of the logarithms have a
coefficient of variation below 1). Near the ridge z = (log t - mu) / sigma is in the thousands and the density
and the survival function are both exp(-z**2 / 2): their ratio is formed about a reference point, with
Mills' ratio, so that the z**2 never appears.
"""

# ruff: noqa: D102 - the methods are documented where SizeLikelihood declares them

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.families import Lognormal
from lossagg.families.base import SizeLaw
from lossagg.fitting.jet_functions import log_normal_survival, mills_parts
from lossagg.fitting.jets import Jet, compose, exp, log
from lossagg.fitting.likelihood import BLOCK, NEGLIGIBLE, PartLikelihood, Range
from lossagg.fitting.sample import Sample, Weighted

_HALF_LOG_TWO_PI = float(0.5 * np.log(2 * np.pi))


@dataclass(frozen=True)
class LognormalLikelihood(PartLikelihood):
    """log X is normal. Inner parameters: slope (mu - reference) / sigma**2 and precision 1 / sigma**2, the
    natural ones of the exponential family. Coordinates: slope and log precision in units of the spread.

    Attributes:
        reference: log of the smallest threshold, or the mean logarithm where a loss has none.
        spread: standard deviation of the logarithms.
    """

    law: ClassVar[type[SizeLaw]] = Lognormal
    ranges: ClassVar[dict[str, Range]] = {"mu": "real", "sigma": "positive"}
    nearest: ClassVar[str] = "pareto, lomax or generalized-pareto"

    reference: float
    spread: float

    @classmethod
    def about(cls, sample: Sample) -> LognormalLikelihood:
        """The likelihood with the reference point and spread of a sample."""
        centre = sample.log_sum / sample.count
        spread = float(np.sqrt(sample.log_squares / sample.count)) or 1.0
        return cls(float(np.log(sample.floor)) if sample.floor > 0 else centre, spread)

    def inner(self, point: tuple[Jet, ...]) -> tuple[Jet, ...]:
        return point[0] * (1 / self.spread), exp(point[1]) * self.spread**-2

    def natural(self, inner: tuple[Jet, ...], scale: float) -> tuple[Jet, ...]:
        slope, precision = inner
        return slope / precision + (self.reference + float(np.log(scale))), exp(-0.5 * log(precision))

    def log_density(self, inner: tuple[Jet, ...], sample: Sample) -> Jet:
        return self._density(inner, sample) - sample.count * self._depth(inner)

    def log_density_at(self, inner: tuple[Jet, ...], points: FloatArray) -> Jet:
        logs = np.log(points)
        z = self._standardised(inner, logs)
        return 0.5 * log(inner[1]) - 0.5 * (z * z) - logs - _HALF_LOG_TWO_PI

    def log_survival(self, inner: tuple[Jet, ...], points: FloatArray) -> Jet:
        return log_normal_survival(self._standardised(inner, np.log(points)))

    def total(self, inner: tuple[Jet, ...], sample: Sample) -> Jet:
        total = self._density(inner, sample) - sample.untied * self._depth(inner)
        slope, precision = inner
        for group, sign in ((sample.stopped, 1.0), (sample.thresholds, -1.0)):
            if len(group.points):
                logs = Weighted(np.log(group.points), group.weights)
                apart, weight = logs.points - self.reference, float(np.sum(logs.weights))
                one, two = (float(np.sum(logs.weights * apart**k)) for k in (1, 2))
                bend = slope * one - precision * (0.5 * two) - weight * _HALF_LOG_TWO_PI
                total = total + sign * (bend + self._mills(inner, apart, logs.weights))
        return total

    def runaway(self, inner: tuple[Jet, ...]) -> str:
        if inner[1].value[0] * self.spread**2 > NEGLIGIBLE:
            return ""
        return "above the threshold the losses follow a power law, and sigma grows without bound"

    def starts(self, sample: Sample) -> list[FloatArray]:
        offset = (sample.log_sum / sample.count - self.reference) / self.spread
        points = [np.array([offset, 0.0])]
        if sample.censored or len(sample.thresholds.points):
            for wider in (1.2, 1.6, 2.5, 4.0):
                for shift in (-2.0, -0.7, 0.0, 0.5):  # of the median, in units of the wider sigma
                    points.append(np.array([(offset + shift * wider) / wider**2, -2 * np.log(wider)]))
        return points

    def _depth(self, inner: tuple[Jet, ...]) -> Jet:
        """z**2 / 2 at the reference point: part of log f and log S that their ratio does not hold."""
        return inner[0] * inner[0] / (2 * inner[1])

    def _density(self, inner: tuple[Jet, ...], sample: Sample) -> Jet:
        slope, precision = inner
        apart = sample.log_sum / sample.count - self.reference
        squares = sample.log_squares + sample.count * apart**2
        constant = sample.log_sum + sample.count * _HALF_LOG_TWO_PI
        bend = slope * (sample.count * apart) - precision * (0.5 * squares)
        return 0.5 * sample.count * log(precision) + bend - constant

    def _mills(self, inner: tuple[Jet, ...], apart: FloatArray, weights: FloatArray) -> Jet:
        """Weighted sum of the log of Mills' ratio at root * apart - shift, in blocks: derivatives in root and
        shift are sums, so that no point needs a gradient of its own."""
        root = exp(0.5 * log(inner[1]))
        shift = inner[0] / root
        sums = np.zeros(6)
        for start in range(0, len(apart), BLOCK):
            a, w = apart[start : start + BLOCK], weights[start : start + BLOCK]
            value, first, second = mills_parts(root.value * a - shift.value)
            slope, bend = w * first, w * second
            parts = (w * value, slope * a, slope, bend * a**2, bend * a, bend)
            sums += [float(np.sum(part)) for part in parts]
        return compose(
            (root, shift),
            float(sums[0]),
            np.array([sums[1], -sums[2]]),
            np.array([[sums[3], -sums[4]], [-sums[4], sums[5]]]),
        )

    def _standardised(self, inner: tuple[Jet, ...], logs: FloatArray) -> Jet:
        root = exp(0.5 * log(inner[1]))
        return root * (logs - self.reference) - inner[0] / root
