"""Panjer's recursion, from a starting value that may lie far below the smallest double.

For a count with p(n) = (a + b/n) p(n-1) and payments with masses f on 0, h, 2h, ... (Panjer 1981),

    g(n) = sum_{j=1..n} (a + b j/n) f(j) g(n-j) / (1 - a f(0)).

A year with 100,000 expected losses starts at exp(-100,000). So the recursion starts at 1 and is scaled
down whenever it grows large; the logarithm of the scale is handed back (Panjer and Willmot 1986). Values
that then underflow at the start are smaller than the largest by more than a hundred digits.

The masses are laid out backwards, so that each value is a scalar product of two stretches of memory; it is
added up in 32 sums side by side, in an order that is always the same.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
from numba.extending import overload

from lossagg.kernels.compile import Vectors, compiled, instructions, whole

_LARGE = 1e200
SUMS = 32


def add_products(left: np.ndarray, right: np.ndarray, number: int, sums: np.ndarray) -> None:
    """Add the products of the first `number` pairs, a multiple of SUMS, to as many sums in turn."""
    for i in range(number):
        sums[i % SUMS] += left[i] * right[i]


def _write_products(builder: Any, left: Any, right: Any, number: Any, sums: Any) -> None:
    """The instructions of `add_products`: the sums stay in registers."""
    v = Vectors(builder, SUMS)
    total = v.variable(v.load(sums, whole(0), v.reals))
    with v.loop(whole(0), number, whole(SUMS)) as place:
        product = builder.fmul(v.load(left, place, v.reals), v.load(right, place, v.reals))
        builder.store(builder.fadd(builder.load(total), product), total)
    v.store(builder.load(total), sums, whole(0))


_products = instructions(_write_products)


@overload(add_products, strict=False)
def _compiled_products(left: Any, right: Any, number: Any, sums: Any) -> Callable[..., None]:
    return lambda left, right, number, sums: _products((left, right, number, sums))


@compiled
def scalar_product(left: np.ndarray, right: np.ndarray, sums: np.ndarray) -> float:
    """The sum of left(i) right(i); `sums`, shape (SUMS,), is work space."""
    together = left.shape[0] // SUMS * SUMS
    sums[:] = 0.0
    add_products(left, right, together, sums)
    total = 0.0
    for i in range(together, left.shape[0]):
        total += left[i] * right[i]
    for lane in range(SUMS):
        total += sums[lane]
    return total


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
    backwards, levers = np.empty(size), np.empty(size)
    for j in range(size):
        backwards[size - 1 - j] = masses[j]
        levers[size - 1 - j] = j * masses[j]
    result, sums = np.zeros(points), np.empty(SUMS)
    scale = 0.0
    for n in range(points):
        reach = min(size - 1, n)
        before = result[n - reach : n]
        part = slice(size - 1 - reach, size - 1)
        value = 1.0
        if n > 0:
            value = (b / n) * scalar_product(levers[part], before, sums)
            if a != 0.0:
                value += a * scalar_product(backwards[part], before, sums)
            value /= remainder
        if value > _LARGE:
            for k in range(n):
                result[k] /= _LARGE
            value /= _LARGE
            scale += np.log(_LARGE)
        result[n] = value
    return result, scale
