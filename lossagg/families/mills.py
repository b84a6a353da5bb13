"""The Mills ratio of the normal law and its first derivatives, as far tails need them.

R(t) = (1 - Phi(t)) / phi(t). Tails and stop-loss costs of the lognormal and inverse Gaussian laws are
phi(a) times a difference R(a) - R(b) of nearly equal ratios; taken as they stand, such differences
lose most digits exactly where capital is decided. Here the difference is the integral of the
derivative, and the derivatives come from Laplace's continued fraction, in which nothing cancels:

    R = 1 / (t + K),  K = 1 / (t + L),  L = 2 / (t + 3 / (t + 4 / ...))
    -R' = 1 - t R = R K,    R'' = (1 + t**2) R - t = R K L

Source: Abramowitz and Stegun (1964), 26.2.14 (the continued fraction).
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from scipy import special

from lossagg.arrays import FloatArray
from lossagg.families.quadrature import interval_integrals

_FRACTION_FROM = 4.0
_FRACTION_TERMS = 40  # 39 leave no digit to gain from t = 4 on
_POINTS = 20
_ROOT_TWO_PI = 2.5066282746310005024
_ROOT_HALF_PI = 1.2533141373155002512


def normal_density(z: FloatArray) -> FloatArray:
    """phi(z)."""
    with np.errstate(over="ignore"):
        return np.asarray(np.exp(-0.5 * z * z) / _ROOT_TWO_PI)


def mills(t: FloatArray) -> FloatArray:
    """R(t), for t above -37."""
    return np.asarray(_ROOT_HALF_PI * special.erfcx(t / np.sqrt(2.0)))


def mills_fall(t: FloatArray) -> FloatArray:
    """-R'(t) = 1 - t R(t), positive and falling."""
    ratio = mills(t)
    result, far = 1.0 - t * ratio, t >= _FRACTION_FROM
    k, _ = _fraction(t[far])
    result[far] = ratio[far] * k
    return result


def mills_bend(t: FloatArray) -> FloatArray:
    """R''(t) = (1 + t**2) R(t) - t, positive and falling."""
    ratio = mills(t)
    result, far = (1.0 + t * t) * ratio - t, t >= _FRACTION_FROM
    k, rest = _fraction(t[far])
    result[far] = ratio[far] * k * rest
    return result


def mills_difference(low: FloatArray, width: FloatArray) -> FloatArray:
    """R(low) - R(low + width) for width >= 0, to nearly full accuracy."""
    return _difference(mills, mills_fall, low, width)


def mills_fall_difference(low: FloatArray, width: FloatArray) -> FloatArray:
    """-R'(low) + R'(low + width) for width >= 0, to nearly full accuracy."""
    return _difference(mills_fall, mills_bend, low, width)


def _difference(
    function: Callable[[FloatArray], FloatArray],
    slope: Callable[[FloatArray], FloatArray],
    low: FloatArray,
    width: FloatArray,
) -> FloatArray:
    short = width < 1.0
    result = np.empty(np.shape(low))
    result[~short] = function(low[~short]) - function(low[~short] + width[~short])
    result[short] = interval_integrals(lambda t, _: slope(t), low[short], width[short], _POINTS)
    return result


def _fraction(t: FloatArray) -> tuple[FloatArray, FloatArray]:
    """(K, L) of the continued fraction, for t >= 4."""
    rest = np.zeros_like(t)
    for n in range(_FRACTION_TERMS, 1, -1):
        rest = n / (t + rest)
    return 1.0 / (t + rest), rest
