"""The lattice an exact engine works on: its step, and where amounts fall on it."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from math import lcm

import numpy as np

from lossagg.arrays import FloatArray, IntArray
from lossagg.engines.compound import CompoundSum

_LARGEST_DENOMINATOR = 10**6
_EQUAL = 1e-11
_MOST_MULTIPLE = 10**8


def common_span(amounts: Sequence[float]) -> float | None:
    """The largest step of which every amount is a multiple, or None where none is worth having.

    Args:
        amounts: amounts above zero.
    """
    if not amounts:
        return None
    least = min(amounts)
    ratios = [amount / least for amount in amounts]
    fractions = [Fraction(ratio).limit_denominator(_LARGEST_DENOMINATOR) for ratio in ratios]
    multiple = 1
    for ratio, fraction in zip(ratios, fractions, strict=True):
        multiple = lcm(multiple, fraction.denominator)
        if abs(float(fraction) - ratio) > _EQUAL * ratio or multiple > _MOST_MULTIPLE:
            return None
    return least / multiple


def fitting_step(compound: CompoundSum, step: float, *, longer: bool = False) -> float:
    """The step nearest below `step` (or above, if `longer`) that puts the payments' own amounts on
    lattice points.

    Limits and tables are met exactly where they have a common span at least as long as the step;
    otherwise the amount with most probability is met.
    """
    weights: dict[float, float] = {}
    for count, payment in compound.parts:
        for amount, chance in zip(*(part.tolist() for part in payment.atoms), strict=True):
            if amount > 0:
                weights[amount] = weights.get(amount, 0.0) + count.mean() * chance
    if not weights:
        return step
    span = common_span(list(weights))
    if span is None or span < step:
        span = max(weights, key=lambda amount: weights[amount])
    if span < step:
        return step
    ratio = span / step
    return span / int(np.floor(ratio * (1.0 + _EQUAL)) if longer else np.ceil(ratio * (1.0 - _EQUAL)))


def arithmetic_span(compound: CompoundSum) -> float | None:
    """The span on which all payments lie, where they have no continuous part; else None."""
    if not compound.parts or any(payment.stretches for _, payment in compound.parts):
        return None
    amounts = {amount for _, payment in compound.parts for amount in payment.atoms[0].tolist() if amount > 0}
    return common_span(sorted(amounts))


def places(amounts: FloatArray, step: float) -> tuple[IntArray, FloatArray]:
    """Lattice index at or below each amount, and how far into the cell it lies (0 on the point itself)."""
    place = amounts / step
    nearest = np.rint(place)
    on_point = np.abs(place - nearest) <= 1e-9 * np.maximum(place, 1.0)
    down = np.where(on_point, nearest, np.floor(place))
    down = np.minimum(down, 2.0**62)
    return down.astype(np.int64), np.where(on_point, 0.0, place - np.floor(place))
