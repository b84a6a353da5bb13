"""Counts with more, or fewer, years without a loss than a Poisson or negative binomial law has.

P(N = n) = c p(n) for n above 0, with p the base law at the exposure of the year; a year without a loss has
what is left, 1 - c (1 - p(0)). The weight c is the same in every year. Below 1 it is the share of years in
which anything can happen, and the law is zero-inflated (Lambert 1992, Technometrics 34); the zero-modified
law lets it exceed 1 (Klugman, Panjer & Willmot, Loss Models, the class (a, b, 1)). The two have the same
maximum wherever the zero-inflated law has one.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.errors import FitError
from lossagg.families import NegativeBinomial, Poisson, ZeroInflated, ZeroModified
from lossagg.families.base import CountLaw
from lossagg.fitting.count_solution import CountSolution
from lossagg.fitting.counts import Counts
from lossagg.fitting.jet_functions import log_excess, log_one_minus_exp
from lossagg.fitting.jets import Jet, exp, variables
from lossagg.fitting.likelihood import Range
from lossagg.fitting.maximise import Maximum, evaluate, maximise
from lossagg.fitting.negative_binomial import JUST_EQUAL, negative_binomial_jet
from lossagg.fitting.results import FrequencyFit

BASES = ("poisson", "negative-binomial")
_MOST = 4  # starts that climb


@dataclass(frozen=True, eq=False)
class _Likelihood:
    """Coordinates: log mean of the base, log dispersion where it has one, log c."""

    zeros: Counts
    others: Counts
    dispersed: bool

    def none(self, point: tuple[Jet, ...], exposures: FloatArray) -> Jet:
        """log p(0) of the base at each exposure."""
        log_means = point[0] + np.log(exposures)
        return -(log_excess(exp(point[1]), log_means) if self.dispersed else exp(log_means))

    def __call__(self, point: tuple[Jet, ...]) -> Jet:
        seen = self.others
        if self.dispersed:
            total = negative_binomial_jet(point, seen)
        else:
            log_means = point[0] + np.log(seen.exposures)
            total = (log_means * seen.numbers - exp(log_means)).total(seen.weights)
        total = total + point[-1] * float(np.sum(seen.weights))
        some = point[-1] + log_one_minus_exp(self.none(point, self.zeros.exposures))
        if (some.value >= 0).any():  # c so large that a year without a loss could not be
            return total * np.nan
        return total + log_one_minus_exp(some).total(self.zeros.weights)

    def natural(self, point: tuple[Jet, ...], inflated: bool) -> tuple[Jet, ...]:
        """Parameters of the law in the order it names them."""
        some = exp(point[-1])
        if not inflated:
            some = exp(point[-1] + log_one_minus_exp(self.none(point, np.ones(1))))
        return (*(exp(part) for part in point[:-1]), 1.0 - some)

    def starts(self) -> list[FloatArray]:
        """From the mean of the years with a loss, for several dispersions."""
        seen = self.others
        average = float(np.sum(seen.numbers * seen.weights)) / float(np.sum(seen.exposures * seen.weights))
        share = float(np.sum(seen.weights)) / float(np.sum(seen.weights) + np.sum(self.zeros.weights))
        points = []
        for dispersion in (0.1, 0.5, 2.0, 0.01) if self.dispersed else (0.0,):
            for factor in (0.9, 0.5, 0.2):
                base: CountLaw = Poisson(mean=average * factor)
                if self.dispersed:
                    base = NegativeBinomial(mean=average * factor, dispersion=dispersion)
                most = float(base.with_exposure(float(self.zeros.exposures.max())).sf(0))
                c = min(share / float(base.sf(0)), 0.95 / most)
                shape = [np.log(dispersion)] if self.dispersed else []
                points.append(np.array([np.log(average * factor), *shape, np.log(c)]))
        return points


def fit_zero_modified(sample: Counts, base: str, *, inflated: bool) -> FrequencyFit:
    """Fit a base law with a probability of no loss of its own; see `fit_frequency`.

    Args:
        sample: the counts.
        base: "poisson" or "negative-binomial".
        inflated: whether the law is that of a share of years in which nothing can happen.
    """
    family = f"zero-{'inflated' if inflated else 'modified'}-{base}"
    likelihood = _likelihood(sample, family, dispersed=base == "negative-binomial")
    maximum = _maximum(likelihood, family, sample, base)
    point = variables(maximum.point)
    jets = likelihood.natural(point, inflated)
    values = [float(jet.value[0]) for jet in jets]
    if not 0 < values[-1] < 1:
        what = "are no more frequent than" if inflated else "could not be at exposure 1 under"
        raise FitError(
            f"the years without a loss {what} the base law",
            value=f"{values[-1]:.4g} as the {'share of extra zeros' if inflated else 'probability of none'}",
            remedy=f'Fit "{base}" alone, or "zero-modified-{base}".' if inflated else f'Fit "{base}" alone.',
        )
    slopes = np.stack([jet.gradient[:, 0] for jet in jets])
    own = "extra_zeros" if inflated else "zero_probability"
    names = ("base.mean", "base.dispersion", own) if likelihood.dispersed else ("base.mean", own)
    ranges: dict[str, Range] = {n: "probability" if n == own else "positive" for n in names}
    law: CountLaw = Poisson(mean=values[0])
    if likelihood.dispersed:
        law = NegativeBinomial(mean=values[0], dispersion=values[1])
    model = (
        ZeroInflated(base=law, extra_zeros=values[-1])
        if inflated
        else ZeroModified(base=law, zero_probability=values[-1])
    )
    along = np.zeros(len(point))
    along[[0, -1]] = 1.0  # log mean of the law = log c + log mean of the base
    return FrequencyFit(
        family=family,
        model=model,
        parameters=dict(zip(names, values, strict=True)),
        covariance=slopes @ maximum.covariance @ slopes.T,
        log_likelihood=maximum.value - sample.log_factorials(),
        estimated=len(names),
        observations=sample.years,
        gradient_norm=maximum.distance,
        ranges=ranges,
        losses=sample.losses,
        exposure=sample.exposure,
        maximum_likelihood_mean=model.mean(),
        log_mean_error=float(np.sqrt(along @ maximum.covariance @ along)),
        solution=CountSolution(likelihood, maximum, lambda at: likelihood.natural(at, inflated), ranges),
    )


def _likelihood(sample: Counts, family: str, *, dispersed: bool) -> _Likelihood:
    none = sample.numbers == 0
    most = int(sample.numbers.max())
    if none.all() or not none.any() or most < 2:
        reason = "there is no year without a loss" if not none.any() else "no year has two losses"
        raise FitError(
            f"{reason}, so the {family} fit ends at the edge of its family",
            value=f"{sample.losses} losses in {sample.years} years",
            remedy='Fit "poisson".',
        )
    return _Likelihood(
        Counts(sample.numbers[none], sample.exposures[none], sample.weights[none]),
        Counts(sample.numbers[~none], sample.exposures[~none], sample.weights[~none]),
        dispersed,
    )


def _maximum(likelihood: _Likelihood, family: str, sample: Counts, base: str) -> Maximum:
    ranked = sorted(likelihood.starts(), key=lambda start: -evaluate(likelihood, start))[:_MOST]
    ends = [maximise(likelihood, start) for start in ranked]
    best = max(ends, key=lambda end: (not end.failure, end.value))
    seen = f"{sample.losses} losses in {sample.years} years"
    tried = tuple(f"from {np.round(s, 3).tolist()}: {e.failure}" for s, e in zip(ranked, ends, strict=True))
    if best.failure:
        raise FitError(
            f"the {family} likelihood has no certified maximum: {best.failure}",
            value=seen,
            remedy=f'Fit "{base}" or "poisson", or pool with similar lines.',
            tried=tried,
        )
    if likelihood.dispersed:
        simple = _Likelihood(likelihood.zeros, likelihood.others, False)
        alone = max((maximise(simple, start) for start in simple.starts()), key=lambda end: end.value)
        if best.value < alone.value + JUST_EQUAL:
            raise FitError(
                f"beside their zeros the counts vary no more than Poisson counts, so the {family} fit ends "
                "at dispersion 0",
                value=seen,
                remedy=f'Fit "{family.replace("negative-binomial", "poisson")}".',
            )
    return best
