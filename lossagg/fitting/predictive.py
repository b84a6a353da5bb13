"""Quantiles of one loss with the uncertainty of the parameters counted as risk.

The quantile as fitted takes estimates for the truth and is exceeded more often than its level says. A
predictive quantile is exceeded as often as it says, over losses and samples together. For complete
lognormal losses it is exact: with the mean m of n logarithms and their standard deviation s of maximum
likelihood, a further logarithm Y has (Y - m) / (s sqrt((n + 1) / (n - 1))) of Student's law with n - 1
degrees of freedom, so the quantile is exp(m + s t sqrt((n + 1) / (n - 1))) (Gerrard & Tsanakas 2011, Risk
Analysis 31; Geisser 1993, Predictive Inference). Otherwise the exceedance probabilities of laws drawn by
`draws` are averaged and inverted, which is as good as large-sample theory.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import special

from lossagg.arrays import require_probability
from lossagg.errors import InputError, LossaggError
from lossagg.families import make_size_law, with_parameters
from lossagg.families.base import SizeLaw
from lossagg.fitting.draws import Stratified, moved
from lossagg.fitting.results import SeverityFit

_HALVINGS = 60
_TRIES = 20
_TINY = float(np.finfo(float).tiny)


@dataclass(frozen=True)
class PredictiveQuantile:
    """A quantile of one loss as fitted, and with the parameters uncertain.

    Attributes:
        level: probability that a loss is at or below it.
        fitted: that of the fitted law.
        predictive: that of a further loss, the parameters unknown.
        exact: whether the predictive quantile is exact; otherwise it is averaged over `draws`.
        draws: laws drawn; 0 where none is needed.
    """

    level: float
    fitted: float
    predictive: float
    exact: bool
    draws: int


def predictive_quantile(
    fit: SeverityFit, level: float, *, above: float = 0.0, draws: int = 200, seed: int = 0
) -> PredictiveQuantile:
    """The size a further loss exceeds with probability 1 - level, the parameters uncertain.

    Args:
        fit: of the losses.
        level: inside (0, 1).
        above: among losses above this amount, such as the reporting threshold.
        draws: laws to average over where there is no closed form, at least 20.
        seed: 0 or above; the same seed gives the same figure.

    Raises:
        InputError: a level outside (0, 1), or too few draws.
    """
    require_probability(level, "level", open_low=True, open_high=True)
    if draws < _TRIES:
        raise InputError("too few draws", value=draws, remedy=f"Draw {_TRIES} times or more.")
    fitted = _isf(fit.model, 1.0 - level, above)
    n = fit.observations
    if fit.complete_lognormal and above <= 0:
        student = float(special.stdtrit(n - 1.0, level))
        width = fit.parameters["sigma"] * student * np.sqrt((n + 1.0) / (n - 1.0))
        return PredictiveQuantile(level, fitted, float(np.exp(fit.parameters["mu"] + width)), True, 0)
    seen = [(law, share) for law in drawn_laws(fit, draws, seed) if (share := float(law.sf(above))) > 0]
    ends = np.log([max(_isf(law, 1.0 - level, above), _TINY) for law, _ in seen])
    low, high = float(ends.min()), float(ends.max())
    for _ in range(_HALVINGS):
        middle = 0.5 * (low + high)
        chance = np.mean([float(law.sf(np.exp(middle))) / share for law, share in seen])
        low, high = (middle, high) if chance > 1.0 - level else (low, middle)
    return PredictiveQuantile(level, fitted, float(np.exp(high)), False, draws)


def _isf(law: SizeLaw, chance: float, above: float) -> float:
    """The size exceeded with this chance by a loss above an amount."""
    return float(law.isf(chance * float(law.sf(above))))


def drawn_laws(fit: SeverityFit, draws: int, seed: int) -> list[SizeLaw]:
    """Laws of the family of a fit under other parameters that the losses allow, spread evenly.

    A draw that is no law is drawn again; where twenty in a row are none, the fitted law stands for it.
    """
    random = np.random.default_rng(np.random.SeedSequence(seed))
    numbers = Stratified(random, draws, len(fit.parameters) - len(fit.fixed))
    given, laws = fit.model.to_dict(), []
    for _ in range(draws):
        numbers.next_draw()
        laws.append(_law(fit, given, numbers))
    return laws


def _law(fit: SeverityFit, given: dict[str, object], numbers: Stratified) -> SizeLaw:
    for _ in range(_TRIES):
        try:
            return make_size_law(**with_parameters(given, moved(fit, numbers)))
        except LossaggError:
            continue
    return fit.model
