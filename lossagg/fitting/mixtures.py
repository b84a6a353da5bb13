"""Likelihoods of mixtures of two laws, each loss from one of them.

Coordinates: the log-odds of the first part's weight, then those of the parts. The likelihood has several
maxima, and for parts whose spread is free it is unbounded: a part that shrinks onto one amount has a density
without end there. So the climb starts from several splits of the losses, each improved by a few steps of the
EM algorithm (Dempster, Laird & Rubin 1977, J. R. Statist. Soc. B 39; thresholds and limits enter with the
climb itself), and a maximum with a part that holds hardly a loss or is far narrower than the other is refused
(Hathaway 1985, Annals of Statistics 13, bounds the ratio of the spreads; the bound is ours). The parts can
change places without a difference: of two parts of one family, the first is that of the smaller mean.
"""

# ruff: noqa: D102 - the methods are documented where SizeLikelihood declares them

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import ClassVar

import numpy as np
from scipy import special

from lossagg.arrays import FloatArray
from lossagg.families import Mixture
from lossagg.families.base import SizeLaw
from lossagg.fitting.classic_laws import ExponentialLikelihood, GammaLikelihood
from lossagg.fitting.excess_laws import WeibullLikelihood
from lossagg.fitting.jet_functions import log_shares, log_sum_exp
from lossagg.fitting.jets import Jet, compose, lift, variables
from lossagg.fitting.likelihood import BLOCK, PartLikelihood, Range, SizeLikelihood
from lossagg.fitting.lognormal import LognormalLikelihood
from lossagg.fitting.maximise import Maximum
from lossagg.fitting.sample import Sample, Weighted

FEWEST_IN_PART = 5  # losses; no published minimum, practice speaks of 5, 10 and 30
_NARROWEST = 0.02  # of the other part's standard deviation of the logarithms; our choice, no source
_SPLITS = (0.5, 0.8, 0.95, 0.25)  # share of the losses in the lower part at a start
_STEPS = 12  # of the EM algorithm from each split: it is only to find the right hill
_NONE = Weighted(np.zeros(0), np.zeros(0))


@dataclass(frozen=True)
class MixtureLikelihood(SizeLikelihood):
    """f = w f_1 + (1 - w) f_2, and so S.

    Attributes:
        parts: the likelihoods of the two parts, about the same sample.
        floor: smallest reporting threshold, 0 where a loss has none, in units of the sample's scale.
        observations: number of losses.
    """

    law: ClassVar[type[SizeLaw]] = Mixture
    nearest: ClassVar[str] = "one law alone, such as that of a part, or a splice with tail-threshold"

    parts: tuple[PartLikelihood, PartLikelihood]
    floor: float
    observations: float

    def inner(self, point: tuple[Jet, ...]) -> tuple[Jet, ...]:
        first, second = self._own(point)
        return point[0], *self.parts[0].inner(first), *self.parts[1].inner(second)

    def natural(self, inner: tuple[Jet, ...], scale: float) -> tuple[Jet, ...]:
        weight = special.expit(inner[0].value)
        bend = weight * (1 - weight)
        free = [
            value
            for part, own in zip(self.parts, self._own(inner), strict=True)
            for value in part.natural(own, scale)
        ]
        return lift(inner[0], weight, bend, bend * (1 - 2 * weight)), *free

    def model(self, values: Mapping[str, float]) -> SizeLaw:
        weight = values["weight.1"]
        laws = [
            part.model({name: values[f"part.{place}.{name}"] for name in part.ranges})
            for place, part in enumerate(self.parts, start=1)
        ]
        return Mixture(weights=[weight, 1.0 - weight], parts=laws)

    def log_density(self, inner: tuple[Jet, ...], sample: Sample) -> Jet:
        weights = np.ones(len(sample.exact)) if sample.weights is None else sample.weights
        return self._summed(inner, Weighted(sample.exact, weights), density=True)

    def total(self, inner: tuple[Jet, ...], sample: Sample) -> Jet:
        total = self.log_density(inner, sample)
        for group, sign in ((sample.stopped, 1.0), (sample.thresholds, -1.0)):
            if len(group.points):
                total = total + sign * self._summed(inner, group, density=False)
        return total

    def log_survival(self, inner: tuple[Jet, ...], points: FloatArray) -> Jet:
        return log_sum_exp(*self._weighted(inner, points, density=False))

    def runaway(self, inner: tuple[Jet, ...]) -> str:
        for part, own in zip(self.parts, self._own(inner), strict=True):
            if reason := part.runaway(own):
                return f"one part: {reason}"
        share = self._seen(inner)
        if not min(share, 1 - share) * self.observations > 0.5:
            return "one part is left without a loss: one law of its family says as much"
        return self._narrow(inner)

    def objection(self, inner: tuple[Jet, ...]) -> str:
        if reason := self.runaway(inner):
            return reason
        share = self._seen(inner)
        if min(share, 1 - share) * self.observations < FEWEST_IN_PART:
            return f"one part would stand for fewer than {FEWEST_IN_PART} losses, too few to tell it apart"
        return ""

    def ordered(self, maximum: Maximum) -> Maximum:
        if self.parts[0].law is not self.parts[1].law:
            return maximum
        point = variables(maximum.point)
        means = [law.mean() for law in self._laws(self.inner(point))]
        if means[0] <= means[1]:
            return maximum
        count = len(self.parts[0].ranges)
        order = np.r_[0, 1 + count : 1 + 2 * count, 1 : 1 + count]
        sign = np.where(order == 0, -1.0, 1.0)
        covariance = maximum.covariance[np.ix_(order, order)] * np.outer(sign, sign)
        return replace(maximum, point=sign * maximum.point[order], covariance=covariance)

    def starts(self, sample: Sample) -> list[FloatArray]:
        few = replace(sample, stopped=_NONE, thresholds=_NONE).coarse()
        points = few.exact
        weights = np.ones(len(points)) if few.weights is None else few.weights
        place = np.cumsum(weights) / weights.sum()
        lower = [np.where(place <= split, 0.9, 0.1) for split in _SPLITS]
        lower.append(np.where(np.abs(place - 0.5) < 0.25, 0.9, 0.1))  # one centre, two spreads
        if self.parts[0].law is not self.parts[1].law:
            lower += [1.0 - first for first in lower]
        return [self._improved(first, points, weights, sample.scale) for first in lower]

    def _own(self, values: tuple[Jet, ...]) -> tuple[tuple[Jet, ...], tuple[Jet, ...]]:
        """Coordinates or inner parameters of each part; both are as many as its free parameters."""
        count = len(self.parts[0].ranges)
        return values[1 : 1 + count], values[1 + count :]

    def _weighted(self, inner: tuple[Jet, ...], points: FloatArray, *, density: bool) -> tuple[Jet, Jet]:
        shares = log_shares(inner[0])
        first, second = (
            (part.log_density_at if density else part.log_survival)(own, points) + share
            for part, own, share in zip(self.parts, self._own(inner), shares, strict=True)
        )
        return first, second

    def _summed(self, inner: tuple[Jet, ...], group: Weighted, *, density: bool) -> Jet:
        """Weighted sum of log f or log S over points, in blocks.

        Each part knows its own parameters only; with r the probability that a point is of the first part, the
        derivatives are r g_1' and r g_1'' + r (1 - r) g_1' g_1'T within it and -r (1 - r) g_1' g_2'T across.
        """
        odds = float(inner[0].value[0])
        weight, logs = special.expit(odds), special.log_expit(np.array([odds, -odds]))
        own = [variables(np.array([float(jet.value[0]) for jet in part])) for part in self._own(inner)]
        value, first, second = 0.0, np.zeros(len(inner)), np.zeros((len(inner), len(inner)))
        for start in range(0, len(group.points), BLOCK):
            points, each = group.points[start : start + BLOCK], group.weights[start : start + BLOCK]
            one, two = (
                (part.log_density_at if density else part.log_survival)(variables_, points)
                for part, variables_ in zip(self.parts, own, strict=True)
            )
            a, b = one.value + logs[0], two.value + logs[1]
            r = special.expit(a - b)
            bend = each * r * (1.0 - r)
            value += float(np.sum(each * np.logaddexp(a, b)))
            slopes = np.concatenate([np.ones((1, len(points))), one.gradient, -two.gradient])
            first += np.sum(
                each * np.concatenate([(r - weight)[None], r * one.gradient, (1.0 - r) * two.gradient]),
                axis=-1,
            )
            for row in range(len(inner)):
                second[row] += np.sum(bend * slopes[row] * slopes, axis=-1)
            second[0, 0] -= weight * (1.0 - weight) * float(np.sum(each))
            for place, (jet, chance) in ((1, (one, r)), (1 + len(own[0]), (two, 1.0 - r))):
                inside = slice(place, place + len(jet.gradient))
                second[inside, inside] += np.sum(each * chance * jet.hessian, axis=-1)
        return compose(inner, value, first, second)

    def _laws(self, inner: tuple[Jet, ...]) -> list[SizeLaw]:
        return [
            part.model(
                {
                    name: float(jet.value[0])
                    for name, jet in zip(part.ranges, part.natural(own, 1.0), strict=True)
                }
            )
            for part, own in zip(self.parts, self._own(inner), strict=True)
        ]

    def _seen(self, inner: tuple[Jet, ...]) -> float:
        """Share of the first part among the losses above the smallest threshold."""
        odds = float(inner[0].value[0])
        return float(special.expit(odds + self._tilt(inner)))

    def _tilt(self, inner: tuple[Jet, ...]) -> float:
        """log of the first part's survival at the smallest threshold over the second's."""
        if self.floor <= 0:
            return 0.0
        ends = np.array([self.floor])
        first, second = (
            float(part.log_survival(own, ends).value[0])
            for part, own in zip(self.parts, self._own(inner), strict=True)
        )
        return first - second if np.isfinite([first, second]).all() else 0.0

    def _narrow(self, inner: tuple[Jet, ...]) -> str:
        widths = [_spread(part, own) for part, own in zip(self.parts, self._own(inner), strict=True)]
        if min(widths) >= _NARROWEST * max(widths):
            return ""
        return "one part shrinks onto a single amount, where the likelihood has no bound"

    def _improved(
        self, first: FloatArray, points: FloatArray, weights: FloatArray, scale: float
    ) -> FloatArray:
        """Coordinates after a few EM steps from a probability of the first part for each point."""
        for _ in range(_STEPS):
            shares = [weights * first, weights * (1.0 - first)]
            own = [
                _closed(part, Sample(points, share, _NONE, _NONE, scale, float(share.sum())))
                for part, share in zip(self.parts, shares, strict=True)
            ]
            seen = float(shares[0].sum() / weights.sum())
            odds = float(special.logit(np.clip(seen, 1e-6, 1 - 1e-6)))
            coordinates = np.concatenate([[odds], *own])
            with np.errstate(all="ignore"):
                one, two = self._weighted(self.inner(variables(coordinates)), points, density=True)
                first = np.clip(special.expit(one.value - two.value), 1e-6, 1 - 1e-6)
            if not np.isfinite(first).all():
                break
        coordinates[0] -= self._tilt(self.inner(variables(coordinates)))
        return coordinates


def _spread(part: PartLikelihood, own: tuple[Jet, ...]) -> float:
    """Standard deviation of the logarithm of a loss of a part."""
    if isinstance(part, LognormalLikelihood):
        return float(own[1].value[0] ** -0.5)
    if isinstance(part, GammaLikelihood):
        return float(np.sqrt(special.polygamma(1, own[0].value[0])))
    power = float(own[0].value[0]) if isinstance(part, WeibullLikelihood) else 1.0
    return float(np.pi / np.sqrt(6)) / power


def _closed(part: PartLikelihood, sample: Sample) -> FloatArray:
    """Coordinates of a part from a weighted, complete sample: its maximum, or nearly."""
    if not isinstance(part, LognormalLikelihood):
        return part.starts(sample)[0]
    variance = max(sample.log_squares / sample.count, 1e-12)
    slope = (sample.log_sum / sample.count - part.reference) / variance
    return np.array([slope * part.spread, np.log(part.spread**2 / variance)])


def _ranges(first: type[PartLikelihood], second: type[PartLikelihood]) -> dict[str, Range]:
    named: dict[str, Range] = {"weight.1": "probability"}
    for place, part in enumerate((first, second), start=1):
        named |= {f"part.{place}.{name}": kind for name, kind in part.ranges.items()}
    return named


class ExponentialMixtureLikelihood(MixtureLikelihood):
    """Two exponential laws."""

    ranges: ClassVar[dict[str, Range]] = _ranges(ExponentialLikelihood, ExponentialLikelihood)


class LognormalMixtureLikelihood(MixtureLikelihood):
    """Two lognormal laws."""

    ranges: ClassVar[dict[str, Range]] = _ranges(LognormalLikelihood, LognormalLikelihood)


class GammaMixtureLikelihood(MixtureLikelihood):
    """Two gamma laws."""

    ranges: ClassVar[dict[str, Range]] = _ranges(GammaLikelihood, GammaLikelihood)


class WeibullMixtureLikelihood(MixtureLikelihood):
    """Two Weibull laws."""

    ranges: ClassVar[dict[str, Range]] = _ranges(WeibullLikelihood, WeibullLikelihood)


class GammaLognormalMixtureLikelihood(MixtureLikelihood):
    """A gamma and a lognormal law, in this order whatever their means."""

    ranges: ClassVar[dict[str, Range]] = _ranges(GammaLikelihood, LognormalLikelihood)


_KINDS: dict[str, tuple[type[MixtureLikelihood], tuple[type[PartLikelihood], type[PartLikelihood]]]] = {
    "exponential-mixture": (ExponentialMixtureLikelihood, (ExponentialLikelihood, ExponentialLikelihood)),
    "lognormal-mixture": (LognormalMixtureLikelihood, (LognormalLikelihood, LognormalLikelihood)),
    "gamma-mixture": (GammaMixtureLikelihood, (GammaLikelihood, GammaLikelihood)),
    "weibull-mixture": (WeibullMixtureLikelihood, (WeibullLikelihood, WeibullLikelihood)),
    "gamma-lognormal-mixture": (GammaLognormalMixtureLikelihood, (GammaLikelihood, LognormalLikelihood)),
}
MIXTURES = tuple(_KINDS)


def mixture_likelihood(family: str, sample: Sample) -> MixtureLikelihood:
    """The likelihood of a mixture of `MIXTURES` about a sample."""
    kind, (first, second) = _KINDS[family]
    return kind((_about(first, sample), _about(second, sample)), sample.floor, sample.observations)


def _about(part: type[PartLikelihood], sample: Sample) -> PartLikelihood:
    return part.about(sample) if issubclass(part, LognormalLikelihood | WeibullLikelihood) else part()
