"""Fit the same law again to other losses: the step every bootstrap repeats, started at the first fit."""

from __future__ import annotations

import numpy as np

from lossagg.arrays import BoolArray, FloatArray
from lossagg.errors import FitError
from lossagg.families import SizeTable, Spliced
from lossagg.families.base import SizeLaw
from lossagg.fitting.continuous import fit_continuous
from lossagg.fitting.empirical import empirical_body
from lossagg.fitting.jets import Jet, variables
from lossagg.fitting.likelihood import SizeLikelihood, log_likelihood
from lossagg.fitting.results import SeverityFit
from lossagg.fitting.sample import sample_of
from lossagg.fitting.severity import climb, require_support
from lossagg.fitting.solution import Solution, TiedSolution
from lossagg.fitting.splice_parts import body_and_share, losses_above


def refit(fit: SeverityFit, amounts: FloatArray, thresholds: FloatArray, censored: BoolArray) -> SizeLaw:
    """The law of the family of a fit, fitted to other losses of the same kind.

    A minimum or threshold that the first fit held fixed stays. The climb starts at the first maximum, so
    it takes a few steps only.

    Args:
        fit: the first fit.
        amounts, thresholds, censored: the other losses, as `checked_losses` gives them.

    Raises:
        FitError: the likelihood of these losses has no maximum.
    """
    if not isinstance(fit.model, Spliced):
        return _refitted(fit.solution, amounts, thresholds, censored)
    threshold = fit.model.threshold
    if isinstance(fit.solution, TiedSolution):
        names = fit.model.body.family, fit.model.tail.family
        return fit_continuous(amounts, thresholds, censored, threshold, *names, most=1).model
    above, entered = losses_above(amounts, thresholds, censored, threshold)
    tail = _refitted(fit.solution, amounts[above], entered, censored[above])
    if isinstance(fit.model.body, SizeTable):
        table, beyond, _ = empirical_body(amounts, thresholds, censored, threshold)
        return Spliced(body=table, tail=tail, threshold=threshold, tail_probability=beyond)
    body, share, _ = body_and_share(amounts, thresholds, censored, threshold, fit.model.body.family, most=1)
    return Spliced(body=body, tail=tail, threshold=threshold, tail_probability=share)


def _refitted(
    solution: Solution, amounts: FloatArray, thresholds: FloatArray, censored: BoolArray
) -> SizeLaw:
    likelihood = solution.likelihood
    sample = sample_of(amounts, thresholds, censored, solution.sample.scale)
    family, count = likelihood.law.family, sample.observations
    require_support(sample, family, len(likelihood.ranges))

    def objective(point: tuple[Jet, ...]) -> Jet:
        return log_likelihood(likelihood, sample, point)

    try:
        maximum = climb(objective, [solution.maximum.point], count, family, likelihood)
    except FitError:
        maximum = climb(objective, likelihood.starts(sample), count, family, likelihood, most=1)
    return law_at(likelihood, likelihood.ordered(maximum).point, sample.scale)


def law_at(likelihood: SizeLikelihood, point: FloatArray, scale: float) -> SizeLaw:
    """The law of a family at coordinates of its likelihood."""
    free = likelihood.natural(likelihood.inner(variables(np.asarray(point))), scale)
    values = {name: float(jet.value[0]) for name, jet in zip(likelihood.ranges, free, strict=True)}
    return likelihood.model({**values, **likelihood.fixed(scale)})
