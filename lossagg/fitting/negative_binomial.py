"""The negative binomial fit: variance = mean + dispersion * mean**2, the same dispersion in every year.

The log-likelihood is written in sums of log(1 + dispersion * k), which keep their digits as the
dispersion falls to 0, where the law becomes Poisson (Lawless 1987, Canad. J. Statist. 15). There the
maximum lies when the counts vary no more than Poisson counts (Levin & Reeds 1977, Ann. Statist. 5).
"""

from __future__ import annotations

import numpy as np
from scipy import special

from lossagg.arrays import FloatArray
from lossagg.errors import FitError
from lossagg.families import NegativeBinomial
from lossagg.fitting.count_solution import CountSolution
from lossagg.fitting.counts import Counts, poisson_at_rate
from lossagg.fitting.jet_functions import log_excess
from lossagg.fitting.jets import Jet, compose, exp
from lossagg.fitting.maximise import Maximum, evaluate, maximise
from lossagg.fitting.notes import Note
from lossagg.fitting.results import FrequencyFit

TABLE = 4096  # counts up to here sum log(1 + d k) term by term; above, gamma functions do
JUST_EQUAL = 1e-6  # a gain in log-likelihood below this cannot be told from none


def negative_binomial_maximum(sample: Counts) -> Maximum | None:
    """The maximum over (log mean, log dispersion); None where it lies at dispersion 0."""
    means = sample.rate * sample.exposures
    excess = float(np.sum(sample.weights * ((sample.numbers - means) ** 2 - sample.numbers)))
    moment = max(excess / float(np.sum(sample.weights * means**2)), 1e-3)
    grid = [moment, *np.logspace(-4, 3, 15)]
    centre = np.log(sample.rate)
    starts = [np.array([centre, np.log(dispersion)]) for dispersion in grid]

    def objective(point: tuple[Jet, ...]) -> Jet:
        return negative_binomial_jet(point, sample)

    best = max(starts, key=lambda start: evaluate(objective, start))
    at_zero = poisson_at_rate(sample, sample.rate)
    if excess <= 0 and evaluate(objective, best) <= at_zero:
        return None
    maximum = maximise(objective, best)
    return maximum if maximum.value > at_zero + JUST_EQUAL else None


def fit_negative_binomial(sample: Counts) -> FrequencyFit:
    """Fit mean and dispersion, or refuse and name the Poisson law; see `fit_frequency`."""
    if sample.losses == 0 or sample.years < 2:
        raise FitError(
            "the dispersion of a negative binomial law cannot be seen in these counts",
            value=f"{sample.losses} losses in {sample.years} years",
            remedy='Fit "poisson", which gives a bound where no loss was counted.',
        )
    maximum = negative_binomial_maximum(sample)
    if maximum is None:
        raise FitError(
            "the counts vary no more than Poisson counts, so the negative binomial fit ends at dispersion 0",
            value=f"{sample.losses} losses in {sample.years} years",
            remedy='Fit "poisson" (or "binomial" where the variance is well below the mean).',
            tried=("dispersion 0 and 16 starts from 1e-4 to 1e3",),
        )
    if maximum.failure:
        raise FitError(
            f"the negative binomial likelihood has no certified maximum: {maximum.failure}",
            value=f"{sample.losses} losses in {sample.years} years",
            remedy='Fit "poisson", or pool with similar lines.',
            tried=(f"ended at {np.round(maximum.point, 3).tolist()}",),
        )
    mean, dispersion = (float(value) for value in np.exp(maximum.point))
    slopes = np.array([mean, dispersion])
    covariance = maximum.covariance * np.outer(slopes, slopes)
    notes = []
    if np.sqrt(covariance[1, 1]) > dispersion:
        text = "The standard error of the dispersion exceeds its estimate: the counts hardly determine it."
        notes.append(Note("loose-parameter", text))
    return FrequencyFit(
        family="negative-binomial",
        model=NegativeBinomial(mean=mean, dispersion=dispersion),
        parameters={"mean": mean, "dispersion": dispersion},
        covariance=covariance,
        log_likelihood=maximum.value - sample.log_factorials(),
        estimated=2,
        observations=sample.years,
        gradient_norm=maximum.distance,
        ranges={"mean": "positive", "dispersion": "positive"},
        notes=tuple(notes),
        losses=sample.losses,
        exposure=sample.exposure,
        maximum_likelihood_mean=mean,
        solution=CountSolution(
            lambda point: negative_binomial_jet(point, sample),
            maximum,
            lambda point: (exp(point[0]), exp(point[1])),
            {"mean": "positive", "dispersion": "positive"},
        ),
    )


def negative_binomial_jet(point: tuple[Jet, ...], sample: Counts) -> Jet:
    """log p(n) + log n! = sum of log(1 + d k) for k < n, + n log m - (1/d + n) log(1 + d m)."""
    dispersion = exp(point[1])
    log_means = point[0] + np.log(sample.exposures)
    growth = log_excess(dispersion, log_means)  # log(1 + d m) / d
    linear = sample.numbers * log_means - growth * (sample.numbers * dispersion + 1.0)
    return _rising(dispersion, sample) + linear.total(sample.weights)


def _rising(dispersion: Jet, sample: Counts) -> Jet:
    """Weighted sum over the years of log(1 + d k), k = 0 .. n-1, without cancellation at small d."""
    d = float(dispersion.value[0])
    small = sample.numbers <= TABLE
    parts = rising_by_terms(d, sample.numbers[small], sample.weights[small])
    parts = parts + _rising_by_gamma(d, sample.numbers[~small], sample.weights[~small])
    return compose((dispersion,), float(parts[0]), parts[1:2], parts[2:3, None])


def rising_by_terms(d: float, numbers: FloatArray, weights: FloatArray) -> FloatArray:
    """Weighted sum over the years of log(1 + d k), k = 0 .. n-1, and its two derivatives in d."""
    if not len(numbers):
        return np.zeros(3)
    k = np.arange(int(numbers.max()), dtype=np.float64)
    order = np.argsort(numbers, kind="stable")
    behind = np.concatenate([np.cumsum(weights[order][::-1])[::-1], [0.0]])
    above = behind[np.searchsorted(numbers[order], k, side="right")]  # years with more than k losses
    ratio = k / (1 + d * k)
    return np.array([np.sum(above * np.log1p(d * k)), np.sum(above * ratio), -np.sum(above * ratio**2)])


def _rising_by_gamma(d: float, numbers: FloatArray, weights: FloatArray) -> FloatArray:
    """The same through gamma functions: log Gamma(n + r) - log Gamma(r) + n log d with r = 1/d."""
    if not len(numbers):
        return np.zeros(3)
    r = 1 / d
    value = special.gammaln(numbers + r) - special.gammaln(r) + numbers * np.log(d)
    slope = special.digamma(numbers + r) - special.digamma(r)
    bend = special.polygamma(1, numbers + r) - special.polygamma(1, r)
    first = numbers * r - slope * r**2
    second = -numbers * r**2 + 2 * slope * r**3 + bend * r**4
    return np.array([np.sum(weights * part) for part in (value, first, second)])
