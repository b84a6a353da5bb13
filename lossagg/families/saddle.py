"""Probabilities of counts without loss of digits at large counts.

The textbook form of the Poisson, binomial and negative binomial probabilities subtracts logarithms
of factorials: at a mean of a million it has lost nine digits. Loader's saddle-point form writes them
as one deviance and small corrections to Stirling's formula, and keeps nearly all.

Source: Loader (2000), Fast and accurate computation of binomial probabilities, sections 2 and 3.
"""

from __future__ import annotations

import numpy as np
from scipy import special

from lossagg.arrays import FloatArray

_SERIES_FROM = 16.0
_BETA_FROM = 2e5
_HALF_LOG_TWO_PI = 0.9189385332046727418


def stirling_error(n: FloatArray) -> FloatArray:
    """log n! less Stirling's formula log(sqrt(2 pi n) (n/e)**n), for n > 0, whole or not."""
    large = np.maximum(n, _SERIES_FROM)
    square = large * large
    series = (
        1 / 12 - (1 / 360 - (1 / 1260 - (1 / 1680 - 1 / 1188 / square) / square) / square) / square
    ) / large
    small = np.clip(n, np.finfo(float).tiny, _SERIES_FROM)
    exact = special.gammaln(small + 1.0) - (small + 0.5) * np.log(small) + small - _HALF_LOG_TWO_PI
    return np.where(n >= _SERIES_FROM, series, exact)


def deviance(x: FloatArray, mean: FloatArray, difference: FloatArray) -> FloatArray:
    """x log(x / mean) - (x - mean), without cancellation where x is near the mean.

    Args:
        x: above 0.
        mean: above 0.
        difference: x - mean, given apart because the caller often knows it better.
    """
    total = x + mean
    ratio = difference / total
    near = np.abs(ratio) < 0.1
    small = np.where(near, ratio, 0.0)
    square = small * small
    # x log((1+v)/(1-v)) - difference, v = ratio, as a series in v**2.
    series = np.zeros_like(small)
    for k in range(10, 0, -1):
        series = (series + 2.0 / (2 * k + 1)) * square
    close = difference * small + x * small * series
    with np.errstate(over="ignore"):
        # Log of the quotient, not of its parts: they may differ by hundreds of orders of magnitude.
        far = x * (np.log(x) - np.log(mean)) - difference
    return np.where(near, close, far)


def poisson_probability(n: FloatArray, mean: FloatArray | float) -> FloatArray:
    """exp(-mean) mean**n / Gamma(n + 1) for n >= 0, whole or not, and mean > 0."""
    means = np.broadcast_to(np.asarray(mean, dtype=np.float64), n.shape)
    positive = np.where(n > 0, n, 1.0)
    exponent = -stirling_error(positive) - deviance(positive, means, positive - means)
    return np.where(n > 0, np.exp(exponent) / np.sqrt(2 * np.pi * positive), np.exp(-means))


def lower_gamma(a: FloatArray | float, x: FloatArray | float) -> FloatArray:
    """The regularised lower incomplete gamma function P(a, x), for a > 0 and x >= 0.

    scipy's gammainc stops its series early for a above some 5e5: at a = 1e7, five standard
    deviations out, it is 3 % off. There the limit of the incomplete beta function, whose second
    argument makes no difference any more, keeps eleven digits.
    """
    a, x = np.broadcast_arrays(np.asarray(a, dtype=np.float64), np.asarray(x, dtype=np.float64))
    large = a > _BETA_FROM
    result = np.asarray(special.gammainc(np.where(large, 1.0, a), x))
    second = 1e30 * np.maximum(a, x)
    return np.where(large, special.betainc(a, second, x / second), result) if large.any() else result


def binomial_weight(
    x: FloatArray, y: FloatArray, x_mean: FloatArray, y_mean: FloatArray, difference: FloatArray
) -> FloatArray:
    """Gamma(x+y+1) / (Gamma(x+1) Gamma(y+1)) p**x (1-p)**y for x, y > 0.

    Args:
        x: successes, whole or not.
        y: failures, whole or not.
        x_mean: (x + y) p.
        y_mean: (x + y) (1 - p).
        difference: x - (x + y) p, which is also y_mean - y.
    """
    total = x + y
    exponent = stirling_error(total) - stirling_error(x) - stirling_error(y)
    exponent = exponent - deviance(x, x_mean, difference) - deviance(y, y_mean, -difference)
    return np.exp(exponent) * np.sqrt(total / x / y / (2 * np.pi))
