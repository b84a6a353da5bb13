"""Single passes over a lattice that turn probabilities into bounds: what numpy would do in a dozen each."""

from __future__ import annotations

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.kernels.compile import compiled

_BLOCK = 1024


@compiled
def survival_bounds(
    probabilities: FloatArray, slack: FloatArray, wrapped: float, least: FloatArray, most: FloatArray
) -> None:
    """Fill bounds of P(S > kh), non-increasing and between 0 and 1.

    Sums are taken block by block: an error of a few thousand roundings at most, whatever the length.

    Args:
        probabilities: P(S = kh) as computed, shape (n,).
        slack: how far their running sums may be off, shape (n,).
        wrapped: probability that they may have too much, shape (n,).
        least: filled, shape (n,).
        most: filled, shape (n,).
    """
    points = probabilities.shape[0]
    before, low = 0.0, 1.0
    for start in range(0, points, _BLOCK):
        within = 0.0
        for k in range(start, min(start + _BLOCK, points)):
            within += probabilities[k]
            above = 1.0 - (before + within)
            low = max(min(low, above - slack[k]), 0.0)
            least[k] = low
            most[k] = above + slack[k] + wrapped
        before += within
    high = 0.0
    for k in range(points - 1, -1, -1):
        high = min(max(high, most[k]), 1.0)
        most[k] = high


@compiled
def limited_means(
    survivals: tuple[FloatArray, FloatArray],
    gap: FloatArray,
    step: float,
    moments: float,
    bounds: tuple[FloatArray, FloatArray, FloatArray],
) -> None:
    """Fill the integrals of two bounds of a survival function, and the upper one with a gap added.

    Args:
        survivals: bounds of P(D > kh) from below and from above, shape (n,) each.
        gap: added to the upper integral where above zero, in steps, shape (n,).
        step: distance of the points.
        moments: relative round-off allowed for.
        bounds: filled with the lower integral, the upper one with the gap, the upper one, shape (n,) each.
    """
    under, over = survivals
    least, most, line = bounds
    points = gap.shape[0]
    low, high = 0.0, 0.0
    for start in range(0, points, _BLOCK):
        below, above = 0.0, 0.0
        for k in range(start, min(start + _BLOCK, points)):
            least[k] = step * (low + below) * (1.0 - moments)
            line[k] = step * (high + above) * (1.0 + moments)
            most[k] = line[k] + step * max(gap[k], 0.0)
            below += under[k]
            above += over[k]
        low += below
        high += above


@compiled
def chord_steps(
    least: FloatArray, most: FloatArray, line: FloatArray, step: float, middle: int, reach: FloatArray
) -> None:
    """Fill the number d of steps of a chord that about balances 2 gap / d against the density times d.

    Args:
        least: lower bound of the limited means, shape (n,), at least 2.
        most: upper bound, shape (n,).
        line: the upper bound without its gap, shape (n,).
        step: distance of the points.
        middle: steps to each side over which the density is taken.
        reach: filled, from 1 to a quarter of the points, shape (n,).
    """
    points = least.shape[0]
    longest = max(points // 4, 1)
    last = points - 2
    for k in range(points):
        left, right = max(k - middle, 0), min(k + middle, last)
        left = min(left, last)
        fall = (line[left + 1] - line[left]) - (line[right + 1] - line[right])
        density = fall / (2.0 * middle)
        width = 2.0 * (most[k] - least[k]) / max(density, 1e-300)
        reach[k] = min(max(np.sqrt(width), 1.0), longest) if density > 0.0 else longest


@compiled
def chord_slopes(
    least: FloatArray, most: FloatArray, step: float, reach: FloatArray, low: FloatArray, high: FloatArray
) -> None:
    """Fill bounds of a survival function from chords between bounds of its integral, non-increasing.

    Args:
        least: lower bound of the integral, shape (n,).
        most: upper bound, shape (n,).
        step: distance of the points.
        reach: steps of the chord from each point, at least 1, shape (n,).
        low: filled, for amounts from a point to the next, shape (n,).
        high: filled, shape (n,).
    """
    points = least.shape[0]
    own = 1.0
    for k in range(points):
        back = min(int(reach[k]), k)
        if back > 0:
            own = max(min(own, (most[k] - least[k - back]) / (step * back)), 0.0)
        high[k] = own
    low[points - 1] = own = 0.0
    for k in range(points - 1, 0, -1):
        ahead = min(int(reach[k]), points - 1 - k)
        if ahead > 0:
            own = min(max(own, (least[k + ahead] - most[k]) / (step * ahead)), 1.0)
        low[k - 1] = own
