"""Two quantiles by a formula: a look whether a figure is of the right order, never the figure itself.

For heavy tails the worst year is one very large loss and an ordinary year besides: VaR is the size that one
of N losses a year exceeds with probability 1 - level, plus the mean (Böcker and Klüppelberg 2005,
"Operational VaR: a closed form approximation", Risk; with the mean Degen 2010, "The calculation of minimum
regulatory capital using single-loss approximations", Journal of Operational Risk 5). For many losses that are
not too large the sum is near a gamma law moved to its mean, standard deviation and skewness (Bowers, Gerber,
Hickman, Jones and Nesbitt 1997, "Actuarial Mathematics", section 12.5). Neither knows its own error.
"""

from __future__ import annotations

import numpy as np
from scipy.special import gammaincinv

from lossagg.engines.clusters import Alone, others
from lossagg.engines.compound import CompoundSum, Part
from lossagg.engines.payment import Payment, PaymentLaw
from lossagg.errors import EngineError

_PANELS = 600
_NEVER = 1e-40
_LEAST = 1e-16
_ORDER = 8
# Of a factor of four, to a few parts in a million: far closer than the formula is to the truth.
_HALVINGS = 20


def single_loss(compound: CompoundSum, level: float) -> float:
    """VaR by the single-loss approximation with the mean added; without it where the mean is infinite.

    Args:
        compound: the sum; what its lines share is not looked at.
        level: in (0, 1).

    Returns:
        An amount; `nan` where losses are too rare for a single one to reach the level.
    """
    tail = 1.0 - level
    if compound.mean_count <= tail or not compound.parts:
        return np.nan
    high = max(compound.reach(tail), 1e-280)
    while _expected(compound, high) > tail and high < 1e280:
        high *= 4.0
    low = high / 4.0
    while _expected(compound, low) <= tail and low > 1e-280:
        low /= 4.0
    for _ in range(_HALVINGS):
        middle = float(np.sqrt(low * high))
        low, high = (middle, high) if _expected(compound, middle) > tail else (low, middle)
    return high + (compound.mean if compound.mean < np.inf else 0.0)


def translated_gamma(compound: CompoundSum, level: float) -> float:
    """VaR by a gamma law with the mean, standard deviation and skewness of the sum.

    Args:
        compound: the sum, of lines that depend on nothing.
        level: in (0, 1).

    Returns:
        An amount; `nan` where the third moment does not exist, is not positive, or lines share something.
    """
    third = _third_cumulant(compound)
    if not (0.0 < third < np.inf):
        return np.nan
    skewness = third / compound.variance**1.5
    shape, scale = 4.0 / skewness**2, float(np.sqrt(compound.variance)) * skewness / 2.0
    return float(compound.mean - shape * scale + scale * gammaincinv(shape, level))


def _expected(compound: CompoundSum, amount: float) -> float:
    return float(compound.exceedances(np.array([amount]))[0])


def _third_cumulant(compound: CompoundSum) -> float:
    if compound.variance == np.inf or not all(isinstance(own, Alone) for own in compound.clusters):
        return np.nan
    return sum(_third_of(part) for part in compound.parts)


def _third_of(part: Part) -> float:
    """E[(S - E[S])**3] of one line, from the factorial moments of its count."""
    count, payment = part
    third = _third_moment(payment)
    if third == np.inf:
        return np.inf
    mean, second = payment.mean, payment.second_moment
    factorial = [count.mean(), 0.0, 0.0]
    try:
        for order in (1, 2):
            if factorial[order - 1] > 0.0:
                count = others(count)
                factorial[order] = factorial[order - 1] * count.mean()
    except EngineError:
        return np.nan
    first, pairs, triples = factorial
    # Cumulants of the count, then of the sum.
    k1, k2 = first, pairs + first - first**2
    k3 = triples + 3.0 * pairs + first - 3.0 * first * (pairs + first) + 2.0 * first**3
    own2, own3 = second - mean**2, third - 3.0 * mean * second + 2.0 * mean**3
    return float(k1 * own3 + 3.0 * k2 * mean * own2 + k3 * mean**3)


def _third_moment(payment: Payment) -> float:
    """E[Y**3] = 3 int y**2 P(Y > y) dy, by Gauss-Legendre panels on a logarithmic scale."""
    if (
        isinstance(payment, PaymentLaw)
        and payment.schedule.slopes[-1] > 0
        and payment.severity.tail_index <= 3.0
    ):
        return np.inf
    amounts, chances = payment.atoms
    total = float(amounts**3 @ chances)
    most = payment.upper(_NEVER)
    if not payment.stretches or most <= 0.0:
        return total
    nodes, weights = np.polynomial.legendre.leggauss(_ORDER)
    edges = np.linspace(np.log(_LEAST * most), np.log(most), _PANELS + 1)
    half = (edges[1] - edges[0]) / 2.0
    places = (edges[:-1, None] + half * (1.0 + nodes)).ravel()
    values = np.exp(3.0 * places) * payment.continuous_sf(np.exp(places))
    return float(total + 3.0 * half * (values @ np.tile(weights, _PANELS)))
