"""How far one line's own experience can be believed, and what the rest must come from.

Limited fluctuation: full credibility when the experience is within a margin of its mean with a stated
probability; below that the square root of the share of losses (Mowbray 1914; Klugman, Panjer & Willmot, Loss
Models, limited fluctuation credibility). Greatest accuracy: the weight that makes the expected squared error
least, from the variation within and between lines (Buhlmann & Straub 1970; Buhlmann & Gisler, A Course in
Credibility Theory, 2005, ch. 4). Gamma prior: the Poisson rate given losses and a stated prior.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import special

from lossagg.arrays import FloatArray, Floats, as_floats, require_positive, require_probability
from lossagg.errors import InputError


def full_credibility(probability: float = 0.9, margin: float = 0.05, *, variation: float = 0.0) -> float:
    """Losses needed for full credibility of Poisson counts, or of their cost.

    Args:
        probability: that the experience is within the margin of its mean.
        margin: as a share of the mean.
        variation: coefficient of variation of the sizes; 0 for the number of losses alone.

    Raises:
        InputError: a probability outside (0, 1), or a margin not above 0.
    """
    require_probability(probability, "probability", open_low=True, open_high=True)
    require_positive(margin, "margin")
    require_positive(variation, "variation", zero=True)
    width = float(special.ndtri(0.5 + probability / 2))
    return (width / margin) ** 2 * (1 + variation**2)


def limited_fluctuation(losses: float, full: float) -> float:
    """Weight of the own experience, the square root of losses / full, at most 1.

    Args:
        losses: counted, at or above 0.
        full: losses needed for full credibility, see `full_credibility`.

    Raises:
        InputError: a number out of range.
    """
    require_positive(losses, "losses", zero=True)
    require_positive(full, "full")
    return min(float(np.sqrt(losses / full)), 1.0)


@dataclass(frozen=True, eq=False)
class Credibility:
    """Weighted means of several lines.

    Attributes:
        means: credibility estimates, shape (lines,).
        weights: credibility of each line's own mean, between 0 and 1, shape (lines,).
        own: each line's own mean.
        collective: what the rest of the weight falls on.
        within: expected variance within a line, for exposure 1.
        between: variance of the true means; 0 where the lines do not differ more than by chance.
    """

    means: FloatArray
    weights: FloatArray
    own: FloatArray
    collective: float
    within: float
    between: float


def buhlmann_straub(observed: Floats, exposure: Floats | None = None) -> Credibility:
    """Credibility estimates of several lines from their yearly rates.

    Args:
        observed: rate (losses or cost per exposure) of each line and year, shape (lines, years).
        exposure: of the same shape, above 0; None where all are alike (Buhlmann's model).

    Raises:
        InputError: fewer than two lines or years, shapes that differ, an exposure not above 0.
    """
    rates = as_floats(observed, "observed")
    if rates.ndim != 2 or min(rates.shape) < 2:
        raise InputError(
            "credibility needs two lines and two years",
            value=f"shape {rates.shape}",
            remedy="Give one row per line, one column per year; for a single line state a prior.",
        )
    weights = as_floats(1.0 if exposure is None else exposure, "exposure")
    if weights.shape not in ((), rates.shape) or not (weights > 0).all():
        raise InputError(
            "exposure must be above 0 and of the shape of the observations",
            value=f"shape {weights.shape}",
            remedy="Give one exposure per line and year.",
        )
    weights = np.broadcast_to(weights, rates.shape)
    lines, years = rates.shape
    by_line, total = weights.sum(axis=1), float(weights.sum())
    own = np.sum(weights * rates, axis=1) / by_line
    overall = float(np.sum(by_line * own)) / total
    within = float(np.sum(weights * (rates - own[:, None]) ** 2)) / (lines * (years - 1))
    spread = float(np.sum(by_line * (own - overall) ** 2)) - (lines - 1) * within
    between = max(spread / (total - float(np.sum(by_line**2)) / total), 0.0)
    credibility = by_line / (by_line + within / between) if between > 0 else np.zeros(lines)
    if within == 0 and between > 0:
        credibility = np.ones(lines)
    collective = float(np.sum(credibility * own) / np.sum(credibility)) if between > 0 else overall
    return Credibility(
        means=credibility * own + (1 - credibility) * collective,
        weights=credibility,
        own=own,
        collective=collective,
        within=within,
        between=between,
    )


@dataclass(frozen=True)
class PosteriorRate:
    """A Poisson rate after a stated prior and what was counted.

    Attributes:
        mean: of the rate, a weighted mean of own and prior rate.
        weight: of the own experience.
        low, high: central 95 % of the rate.
        upper: the amount the rate stays under with 95 % probability.
    """

    mean: float
    weight: float
    low: float
    high: float
    upper: float


def posterior_rate(
    losses: float, exposure: float, *, prior_rate: float, prior_exposure: float
) -> PosteriorRate:
    """The rate of losses given a prior stated as a rate and the exposure it is worth.

    The prior is a gamma law of mean `prior_rate` that counts like `prior_exposure` of experience; the
    weight of the own experience is exposure / (exposure + prior_exposure), which is Buhlmann's.

    Args:
        losses: counted, at or above 0.
        exposure: in which they were counted, above 0.
        prior_rate: expected losses per exposure before looking, above 0.
        prior_exposure: how much experience the prior is worth, above 0.

    Raises:
        InputError: a number out of range.

    Source: Klugman, Panjer & Willmot, Loss Models, Bayesian credibility, Poisson-gamma.
    """
    require_positive(losses, "losses", zero=True)
    require_positive(exposure, "exposure")
    require_positive(prior_rate, "prior_rate")
    require_positive(prior_exposure, "prior_exposure")
    shape, total = losses + prior_rate * prior_exposure, exposure + prior_exposure
    low, high, upper = (float(special.gammaincinv(shape, level)) / total for level in (0.025, 0.975, 0.95))
    return PosteriorRate(shape / total, exposure / total, low, high, upper)
