"""The sum of a counted number of payments on a lattice, the Panjer way, for every count law there is.

Poisson and negative binomial counts go through Panjer's recursion, started at the logarithm of its first
value; a binomial count, for which the recursion is unstable, through repeated squaring of one trial by
direct convolution; a table of counts through Horner's rule. A count whose probability of no loss is its own
(the class (a, b, 1) of Klugman, Panjer and Willmot, Loss Models, ch. 6) is its base, weighted, and the rest
at zero: (1 - c) + c P(z), with c above 1 where years without a loss are rarer than the base has them.
"""

from __future__ import annotations

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.families import Binomial, CountTable, ZeroInflated, ZeroModified
from lossagg.families.base import CountLaw

_NEGLIGIBLE = 1e-17
_EPSILON = float(np.finfo(float).eps)
_MOST_COUNTS = 1000


def base_of(count: CountLaw) -> tuple[float, CountLaw]:
    """c and the base of a count of the form (1 - c) + c P(z); 1 and the law itself for others."""
    if isinstance(count, (ZeroModified, ZeroInflated)):
        share, base = base_of(count.base)
        return share * (count.mean() / count.base.mean()), base
    return 1.0, count


def countable(count: CountLaw) -> bool:
    """Whether the sum of so many payments can be computed here."""
    base = base_of(count)[1]
    if isinstance(base, CountTable):
        return len(base.probabilities) <= _MOST_COUNTS
    return isinstance(base, Binomial) or (base.recursion or (-1.0, 0.0))[0] >= 0.0


def sums_of(count: CountLaw) -> float:
    """How many convolutions as long as the lattice the sum takes, roughly; 1 for a recursion."""
    base = base_of(count)[1]
    if isinstance(base, CountTable):
        return float(max(len(base.probabilities), 1))
    return 2.0 * base.trials.bit_length() if isinstance(base, Binomial) else 1.0


def log_none(count: CountLaw, positive: float) -> float:
    """log E[(1 - positive)**N], without cancellation where `positive` is small and without underflow."""
    share, base = base_of(count)
    own = _log_none(base, positive)
    return own if share == 1.0 else _log_shared(share, own)


def _log_none(count: CountLaw, positive: float) -> float:
    if isinstance(count, CountTable):
        number = np.arange(float(len(count.probabilities)))
        with np.errstate(divide="ignore", invalid="ignore"):
            lost = -np.expm1(np.where(number > 0, number * np.log1p(-min(positive, 1.0)), 0.0))
            return float(np.log1p(-min(float(np.asarray(count.pmf(number)) @ lost), 1.0)))
    if isinstance(count, Binomial):
        with np.errstate(divide="ignore"):
            return count.trials * float(np.log1p(-min(count.probability * positive, 1.0)))
    return log_start(*(count.recursion or (0.0, 0.0)), positive)


def _log_shared(share: float, own: float) -> float:
    """log of (1 - share) + share exp(own)."""
    with np.errstate(divide="ignore"):
        return float(np.log1p(max(share * float(np.expm1(own)), -1.0)))


def log_start(a: float, b: float, positive: float) -> float:
    """log pgf(1 - positive) of a count of the class (a, b), without cancellation and without underflow."""
    if a == 0.0:
        return -b * positive
    return -(a + b) / a * float(np.log1p(a * positive / (1.0 - a)))


def counted(count: CountLaw, masses: FloatArray, positive: float) -> tuple[FloatArray, float]:
    """The sum of so many payments, and a bound of the round-off in every running sum of it.

    Args:
        count: a law that is `countable`.
        masses: one payment on the lattice, shape (n,).
        positive: one less the mass at zero, without cancellation.
    """
    share, base = base_of(count)
    if isinstance(base, CountTable):
        total, slack = _table(base, masses)
    elif isinstance(base, Binomial):
        total, slack = _power(base.trials, base.probability, masses, positive)
    else:
        a, b = base.recursion or (0.0, 0.0)
        total, slack = _recursive(a, b, masses, positive)
    if share != 1.0:
        total = share * total
        total[0] = np.exp(log_none(count, positive))
        slack = max(share, 1.0) * slack + 8.0 * _EPSILON * share
    return total, slack


def _recursive(a: float, b: float, masses: FloatArray, positive: float) -> tuple[FloatArray, float]:
    """Panjer's recursion, started at the logarithm of its first value.

    All its terms are positive, so relative errors add up and are never amplified (Panjer and Wang 1993).
    """
    from lossagg.kernels.recursion import panjer_recursion

    points, start = len(masses), log_start(a, b, positive)
    beyond = np.cumsum(masses[::-1])[::-1]
    used = max(int(np.sum(beyond > _NEGLIGIBLE / max(a + b, 1.0))), 1)
    relative, scale = panjer_recursion(a, b, (1.0 - a) + a * positive, masses[:used], points)
    with np.errstate(under="ignore"):
        return relative * np.exp(start + scale), 8.0 * _EPSILON * (points + abs(start))


def _power(trials: int, chance: float, masses: FloatArray, positive: float) -> tuple[FloatArray, float]:
    """A binomial count: the payment of one trial, convolved with itself by repeated squaring."""
    from lossagg.kernels.convolution import direct_convolution

    points = len(masses)
    square = chance * masses
    square[0] = 1.0 - chance * positive
    total = np.zeros(points)
    total[0] = 1.0
    slack = 4.0 * _EPSILON * (trials + points * trials.bit_length())
    while trials:
        if trials & 1:
            total = direct_convolution(total, square, points)
        trials >>= 1
        if trials:
            square = direct_convolution(square, square, points)
    return total, slack


def _table(count: CountTable, masses: FloatArray) -> tuple[FloatArray, float]:
    """A table of counts: p0 + f (p1 + f (p2 + ...)) from the inside out."""
    from lossagg.kernels.convolution import direct_convolution

    points, number = len(masses), len(count.probabilities)
    total = np.zeros(points)
    for index, chance in enumerate(np.asarray(count.pmf(np.arange(number - 1.0, -1.0, -1.0))).tolist()):
        if index:
            total = direct_convolution(masses, total, points)
        total[0] += chance
    return total, 4.0 * _EPSILON * points * number
