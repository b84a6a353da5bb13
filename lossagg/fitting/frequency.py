"""Fit the number of losses per year by maximum likelihood, with the exposure of each year."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from lossagg.arrays import Floats
from lossagg.errors import InputError
from lossagg.families import Poisson
from lossagg.fitting.binomial import fit_binomial
from lossagg.fitting.count_solution import CountSolution
from lossagg.fitting.counts import Counts, counts_of, poisson_at_rate
from lossagg.fitting.jets import exp
from lossagg.fitting.maximise import Maximum
from lossagg.fitting.negative_binomial import fit_negative_binomial
from lossagg.fitting.notes import Note
from lossagg.fitting.results import FrequencyFit
from lossagg.fitting.zero_modified import fit_zero_modified

FAMILIES = (
    "poisson",
    "negative-binomial",
    "binomial",
    "zero-modified-poisson",
    "zero-modified-negative-binomial",
    "zero-inflated-poisson",
    "zero-inflated-negative-binomial",
)


def fit_frequency(
    counts: Floats,
    family: str,
    exposure: Floats | None = None,
    *,
    fixed: Mapping[str, float] | None = None,
) -> FrequencyFit:
    """Fit a count law to the losses counted per year.

    The law it hands back is for a year of exposure 1; `fit.model_for(exposure)` gives any other. A
    record without a single loss never gives rate 0: the Poisson fit then uses the mean of the
    posterior under Jeffreys' prior, (losses + 1/2) / exposure, says so, and `upper_rate()` bounds it.

    Args:
        counts: losses per year, whole numbers, shape (n,); 0 for a year without losses.
        family: "poisson", "negative-binomial", "binomial", or one of the first two with a probability of no
            loss of its own: "zero-modified-..." (years without a loss rarer or more frequent than the base
            law has them) or "zero-inflated-..." (a share of years in which nothing can happen).
        exposure: exposure of each year, above 0, shape (n,); None where all years are alike.
        fixed: {"trials": n} for "binomial", the trials at exposure 1; else they are estimated.

    Raises:
        InputError: counts or exposures that cannot be used, or an unknown family.
        FitError: the law is not supported by the counts; the message names one that is.
    """
    sample = counts_of(counts, exposure)
    held = dict(fixed or {})
    if family not in FAMILIES:
        raise InputError(
            "unknown frequency family", value=family, remedy=f"Choose one of {', '.join(FAMILIES)}."
        )
    if set(held) - ({"trials"} if family == "binomial" else set()):
        raise InputError(
            f"the {family} fit cannot hold this fixed",
            value=sorted(held),
            remedy='Only {"trials": n} of the binomial law can be held fixed.',
        )
    if family == "poisson":
        return _poisson(sample)
    if family == "negative-binomial":
        return fit_negative_binomial(sample)
    if family == "binomial":
        return fit_binomial(sample, held.get("trials"))
    base = family.removeprefix("zero-modified-").removeprefix("zero-inflated-")
    return fit_zero_modified(sample, base, inflated=family.startswith("zero-inflated-"))


def _poisson(sample: Counts) -> FrequencyFit:
    losses, exposure = sample.losses, sample.exposure
    notes: tuple[Note, ...] = ()
    rate, variance = sample.rate, losses / exposure**2
    if losses == 0:
        rate, variance = 0.5 / exposure, 0.5 / exposure**2  # Gamma(1/2) posterior: Jeffreys 1946
        upper = -np.log(0.05) / exposure
        text = (
            f"No loss in {sample.years} years: the estimate of maximum likelihood is 0 and is not used. "
            f"The model uses {rate:.4g}, the mean under Jeffreys' prior; the one-sided 95 % upper bound "
            f"is {upper:.5g}."
        )
        notes = (Note("no-losses", text),)
    elif losses < 10:
        text = f"Only {losses} losses: the rate is known to within a factor, see its interval."
        notes = (Note("few-losses", text),)
    return FrequencyFit(
        family="poisson",
        model=Poisson(mean=rate),
        parameters={"mean": rate},
        covariance=np.array([[variance]]),
        log_likelihood=poisson_at_rate(sample, rate) - sample.log_factorials(),
        estimated=1,
        observations=sample.years,
        gradient_norm=0.0,
        ranges={"mean": "positive"},
        notes=notes,
        losses=losses,
        exposure=exposure,
        maximum_likelihood_mean=sample.rate,
        solution=_solution(losses, exposure) if losses else None,
    )


def _solution(losses: float, exposure: float) -> CountSolution:
    """The likelihood of the rate by its logarithm; its maximum is closed."""
    rate = losses / exposure
    maximum = Maximum(
        point=np.array([np.log(rate)]),
        value=losses * float(np.log(rate)) - losses,
        covariance=np.array([[1 / losses]]),
        distance=0.0,
        failure="",
    )
    return CountSolution(
        lambda point: point[0] * losses - exp(point[0]) * exposure,
        maximum,
        lambda point: (exp(point[0]),),
        {"mean": "positive"},
    )
