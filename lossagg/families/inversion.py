"""Quantiles of laws without a closed form: Newton's method on the logarithm of the tail, kept in a bracket.

The unknown is log x and the function the logarithm of the survival function (of the distribution
function in the lower half): both are nearly straight for the laws in use, so a few steps suffice from
any start and a tail of 1e-300 is no harder than the median. Bisection takes over where Newton leaves
the bracket or the law has a gap.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from lossagg.arrays import FloatArray

_STEPS = 400
Function = Callable[[FloatArray], FloatArray]


def invert_tail(
    tail: Function, density: Function, target: FloatArray, low: FloatArray, high: FloatArray, sign: float
) -> FloatArray:
    """Solve tail(x) = target in a bracket.

    Args:
        tail: the survival function (sign -1) or the distribution function (sign +1).
        density: its derivative, up to the sign.
        target: probabilities in (0, 1), of one dimension.
        low: lower ends of the brackets, above 0.
        high: upper ends, at least `low`.
        sign: of the slope of `tail`.

    Returns:
        x for each target, to the last digits the function carries.
    """
    left, right, goal = np.log(low), np.log(high), np.log(target)
    y = 0.5 * (left + right)
    active = np.flatnonzero(right > left)
    for _ in range(_STEPS):
        if active.size == 0:
            break
        at = y[active]
        x = np.exp(at)
        value = tail(x)
        with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
            miss = sign * (np.log(value) - goal[active])
            step = -miss * value / (x * density(x))
        above = miss > 0
        right[active] = np.where(above, at, right[active])
        left[active] = np.where(above, left[active], at)
        candidate = at + step
        inside = (candidate > left[active]) & (candidate < right[active])
        middle = 0.5 * (left[active] + right[active])
        y[active] = np.where(miss == 0, at, np.where(inside, candidate, middle))
        close = 4e-16 * np.maximum(1.0, np.abs(at))
        settled = (miss == 0) | (inside & (np.abs(step) <= close)) | (right[active] - left[active] <= close)
        active = active[~settled]
    return np.exp(y)


def bracket(tail: Function, target: FloatArray, start: float, sign: float) -> tuple[FloatArray, FloatArray]:
    """Bounds (low, high) of the solutions of tail(x) = target, by steps of growing ratio from `start`."""
    low, high = np.full(target.shape, start), np.full(target.shape, start)
    ratio = 2.0
    for _ in range(12):
        short = sign * (tail(high) - target) < 0
        long = sign * (tail(low) - target) > 0
        if not (short.any() or long.any()):
            break
        high = np.where(short, high * ratio, high)
        low = np.where(long, low / ratio, low)
        ratio = ratio**2 if ratio < 1e70 else ratio
    return low, high
