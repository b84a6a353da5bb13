"""What the two tables share: the check of their probabilities, and running sums in full accuracy."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from itertools import accumulate

import numpy as np

from lossagg.arrays import FloatArray, as_floats
from lossagg.errors import InputError

SUM_TOLERANCE = 1e-9


def checked_probabilities(values: object, name: str) -> tuple[float, ...]:
    """Probabilities as a tuple of floats, each in [0, 1], together 1 within 1e-9.

    Raises:
        InputError: no entries, one outside [0, 1], or a sum other than 1 (with the sum).
    """
    array = as_floats(values, name)  # type: ignore[arg-type]
    if array.ndim != 1 or array.size == 0:
        raise InputError(f"{name} must be a list of numbers", value=values, remedy="Give at least one.")
    outside = (array < 0) | (array > 1)
    if outside.any():
        place = int(np.argmax(outside))
        raise InputError(
            f"{name} must lie between 0 and 1",
            where=f"entry {place + 1}",
            value=float(array[place]),
            remedy="Write 0.25 for 25 %.",
        )
    total = math.fsum(array)
    if abs(total - 1) > SUM_TOLERANCE:
        raise InputError(
            f"{name} must sum to 1",
            value=total,
            remedy=f"Correct them, or divide each by {total:.12g}.",
        )
    return tuple(float(value) for value in array)


def normalised(probabilities: Sequence[float]) -> FloatArray:
    """The probabilities divided by their sum, which the check allows to be off by 1e-9."""
    return np.asarray(probabilities) / math.fsum(probabilities)


def running_sums(values: Iterable[float]) -> FloatArray:
    """Running sums, each as good as if summed exactly and rounded once (Neumaier 1974).

    Ten times 0.1 must reach 0.8 at the eighth: a quantile at a level of exactly 0.8 depends on it.
    """

    def step(state: tuple[float, float], value: float) -> tuple[float, float]:
        total, lost = state
        reached = total + value
        bigger, smaller = (total, value) if abs(total) >= abs(value) else (value, total)
        return reached, lost + ((bigger - reached) + smaller)

    return np.array([total + lost for total, lost in accumulate(values, step, initial=(0.0, 0.0))][1:])
