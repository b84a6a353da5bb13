"""Intervals from the profile likelihood, and the alarm they raise about moments that may not exist.

The end of the interval is the point where the log-likelihood has fallen by half a chi-square quantile and
its slope is parallel to that of the quantity asked for: no other point of that height goes further. Newton's
method solves both conditions at once (Venzon & Moolgavkar 1988, Applied Statistics 37), led there in steps
from the maximum so that it does not lose its way. Where the likelihood never falls that far before a
parameter reaches the edge of its range, the interval is open on that side.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from scipy import special

from lossagg.arrays import FloatArray, require_probability
from lossagg.fitting.jets import Jet, variables
from lossagg.fitting.maximise import Maximum, Objective

_STAGES = 5
_NEWTON_STEPS = 30
_SETTLED = 1e-9

Quantity = Callable[[tuple[Jet, ...]], Jet]
"""A function of the coordinates whose interval is asked for."""


def profile_interval(
    objective: Objective, quantity: Quantity, maximum: Maximum, level: float = 0.95
) -> tuple[float, float]:
    """The likelihood-ratio interval of one quantity.

    Args:
        objective: the log-likelihood as a jet of its coordinates.
        quantity: what the interval is for, as a jet of one number of the same coordinates.
        maximum: the certified maximum of the objective.
        level: probability that the interval covers, such as 0.95.

    Returns:
        Low and high end; `-inf` or `inf` where the likelihood does not fall far enough on that side.

    Raises:
        InputError: a level outside (0, 1).
    """
    require_probability(level, "level", open_low=True, open_high=True)
    drop = 0.5 * float(special.chdtri(1, 1 - level))
    return (
        _end(objective, quantity, maximum, drop, -1.0),
        _end(objective, quantity, maximum, drop, 1.0),
    )


@np.errstate(all="ignore")  # outside the domain the likelihood is not finite: the step is refused
def _end(objective: Objective, quantity: Quantity, maximum: Maximum, drop: float, side: float) -> float:
    point = maximum.point
    slope = quantity(variables(point)).gradient[:, 0]
    direction = maximum.covariance @ slope
    length = float(np.sqrt(slope @ direction))
    if not length > 0:
        return float(quantity(variables(point)).value[0])
    multiplier = 0.0
    for stage in range(1, _STAGES + 1):
        fall = drop * (stage / _STAGES) ** 2
        step = side * np.sqrt(2 * drop) / _STAGES * direction / length
        if stage == 1:
            multiplier = -side * np.sqrt(2 * fall) / length
        found = _solve(objective, quantity, point + step, multiplier, maximum.value - fall)
        if found is None:  # once more, from where the last stage stood
            found = _solve(objective, quantity, point, multiplier, maximum.value - fall)
        # A quantity that left its range (an alpha beyond infinity) is no number, and its interval is open.
        if found is None or not side * (_value(quantity, found[0]) - _value(quantity, point)) >= 0:
            return side * np.inf
        point, multiplier = found
    return _value(quantity, point)


def _solve(
    objective: Objective, quantity: Quantity, point: FloatArray, multiplier: float, height: float
) -> tuple[FloatArray, float] | None:
    """Newton's method on (gradient of l - m h, l - height) in the coordinates and the multiplier m."""
    size = len(point)
    for _ in range(_NEWTON_STEPS):
        at = variables(point)
        likelihood, target = objective(at), quantity(at)
        gradient, slope = likelihood.gradient[:, 0], target.gradient[:, 0]
        miss = np.append(gradient - multiplier * slope, likelihood.value[0] - height)
        matrix = np.zeros((size + 1, size + 1))
        matrix[:size, :size] = likelihood.hessian[:, :, 0] - multiplier * target.hessian[:, :, 0]
        matrix[:size, size] = -slope
        matrix[size, :size] = gradient
        if not (np.isfinite(matrix).all() and np.isfinite(miss).all()):
            return None
        step = np.linalg.lstsq(matrix, -miss, rcond=None)[0]
        longest = float(np.max(np.abs(step[:size])))
        share = min(1.0, 1.0 / longest) if longest > 0 else 1.0
        point, multiplier = point + share * step[:size], multiplier + share * float(step[size])
        if np.max(np.abs(point)) > 200:
            return None
        if longest < _SETTLED and abs(miss[size]) < 1e-6:
            return point, multiplier
    return None


def _value(quantity: Quantity, point: FloatArray) -> float:
    return float(quantity(variables(point)).value[0])
