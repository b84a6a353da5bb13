"""Panjer's recursion, from a starting value that may lie far below the smallest double.

For a count with p(n) = (a + b/n) p(n-1) and payments with masses f on 0, h, 2h, ... (Panjer 1981),

    g(n) = sum_{j=1..n} (a + b j/n) f(j) g(n-j) / (1 - a f(0)).

A year with 100,000 expected losses starts at exp(-100,000). So the recursion starts at 1 and is scaled
down whenever it grows large; the logarithm of the scale is handed back (Panjer and Willmot 1986). Values
that then underflow at the start are smaller than the largest by more than a hundred digits.

Each new value is spread at once over all later sums, not gathered from all earlier ones: the inner loop
then has no carried sum and runs at the speed of memory, in an order that is always the same.
"""

from __future__ import annotations

import numpy as np

from lossagg.kernels.compile import compiled

_LARGE = 1e200


@compiled
def panjer_recursion(
    a: float, b: float, remainder: float, masses: np.ndarray, points: int
) -> tuple[np.ndarray, float]:
    """Probabilities of the compound sum relative to its starting value, and the logarithm of their scale.

    Args:
        a: first parameter of the count, 0 <= a < 1 (the recursion is unstable for a < 0).
        b: second parameter of the count.
        remainder: 1 - a f(0), above zero, computed without cancellation.
        masses: f(0), f(1), ..., f(m - 1), non-negative.
        points: number of lattice points wanted.

    Returns:
        g(0..points-1) / (g(0) exp(scale)), and scale.
    """
    size = len(masses)
    first = np.zeros(points)
    second = np.zeros(points)
    levers = np.empty(size)
    for j in range(size):
        levers[j] = j * masses[j]
    result = np.zeros(points)
    scale = 0.0
    for n in range(points):
        value = 1.0 if n == 0 else (a * first[n] + (b / n) * second[n]) / remainder
        if value > _LARGE:
            for k in range(n):
                result[k] /= _LARGE
            for k in range(n, points):
                first[k] /= _LARGE
                second[k] /= _LARGE
            value /= _LARGE
            scale += np.log(_LARGE)
        result[n] = value
        if value > 0.0:
            reach = min(size, points - n)
            for j in range(1, reach):
                first[n + j] += masses[j] * value
                second[n + j] += levers[j] * value
    return result, scale
