"""Do yearly counts vary more than Poisson counts? Two tests, both with the exposure of each year."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import special

from lossagg.arrays import Floats
from lossagg.errors import FitError
from lossagg.fitting.counts import counts_of, poisson_at_rate
from lossagg.fitting.negative_binomial import negative_binomial_maximum


@dataclass(frozen=True)
class Overdispersion:
    """Evidence that counts vary more than a Poisson law allows.

    Attributes:
        index: sum of (count - expected)**2 / expected; (n - 1) s**2 / mean for equal exposures.
        degrees: its degrees of freedom, years less one.
        p_value: probability of a larger index if the counts are Poisson (chi-square law).
        variance_to_mean: index / degrees; 1 for Poisson counts.
        likelihood_ratio: twice the log-likelihood the negative binomial law gains over the Poisson.
        likelihood_ratio_p_value: its p-value. The Poisson law is on the edge of the negative binomial
            family, so the statistic is half the time 0 and half the time chi-square with one degree.
    """

    index: float
    degrees: int
    p_value: float
    variance_to_mean: float
    likelihood_ratio: float
    likelihood_ratio_p_value: float


def overdispersion(counts: Floats, exposure: Floats | None = None) -> Overdispersion:
    """Test yearly counts against the Poisson law.

    Args:
        counts: losses per year, whole numbers, shape (n,).
        exposure: exposure of each year, above 0, shape (n,); None where all years are alike.

    Raises:
        InputError: counts or exposures that cannot be used.
        FitError: fewer than two years, or no loss at all.

    Source: index of dispersion, Fisher 1950, Biometrics 6; mixture at the edge, Self & Liang 1987, J.
    Amer. Statist. Assoc. 82, case 5.
    """
    sample = counts_of(counts, exposure)
    if sample.years < 2 or sample.losses == 0:
        raise FitError(
            "variation between years needs two years and one loss",
            value=f"{sample.losses} losses in {sample.years} years",
            remedy="Leave the test out, or pool with similar lines.",
        )
    expected = sample.rate * sample.exposures
    index = float(np.sum(sample.weights * (sample.numbers - expected) ** 2 / expected))
    degrees = sample.years - 1
    maximum = negative_binomial_maximum(sample)
    ratio = 0.0
    if maximum is not None:
        ratio = max(2 * (maximum.value - poisson_at_rate(sample, sample.rate)), 0.0)
    tail = float(special.gammaincc(0.5, ratio / 2))
    return Overdispersion(
        index=index,
        degrees=degrees,
        p_value=float(special.gammaincc(degrees / 2, index / 2)),
        variance_to_mean=index / degrees,
        likelihood_ratio=ratio,
        likelihood_ratio_p_value=0.5 * tail if ratio > 0 else 1.0,
    )
