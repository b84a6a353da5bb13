"""A body as the losses have it: no law, the product-limit estimate itself, below a parametric tail.

An empirical curve knows nothing beyond the largest loss and next to nothing near it, so it is allowed below
a threshold with a fitted tail above, and refused alone.
"""

from __future__ import annotations

import numpy as np

from lossagg.arrays import BoolArray, FloatArray
from lossagg.errors import FitError, InputError
from lossagg.families import SizeTable
from lossagg.fitting.diagnostics import product_limit

EMPIRICAL = "empirical"


def refuse_empirical_tail(largest: float) -> InputError:
    """The refusal of a severity that is empirical from end to end."""
    return InputError(
        "an empirical severity says nothing beyond the largest loss, and next to nothing near it",
        value=largest,
        remedy='Give tail-threshold beside fit = ["empirical"]: the body stays as recorded, and the losses '
        "above get a generalized Pareto tail.",
    )


def empirical_body(
    amounts: FloatArray, reported: FloatArray, marks: BoolArray, threshold: float
) -> tuple[SizeTable, float, float]:
    """Amounts up to a threshold with their product-limit probabilities, given a loss that was recorded.

    Args:
        amounts, reported, marks: checked losses, their thresholds and censoring marks.
        threshold: the splice point.

    Returns:
        The table of amounts up to the threshold, the probability of a loss above it, and the variance of
        that probability (Greenwood).

    Raises:
        FitError: no uncensored loss up to the threshold, or none above it.
    """
    curve = product_limit(amounts, reported, marks)
    below = curve.amounts <= threshold
    if not below.any() or below.all():
        raise FitError(
            "an empirical body needs uncensored losses on both sides of the threshold",
            value=float(threshold),
            remedy="Move the threshold between the losses.",
        )
    masses = (curve.before - curve.after)[below]
    kept = masses > 0
    last = int(np.flatnonzero(below)[-1])
    share = float(curve.after[last])
    table = SizeTable(
        sizes=curve.amounts[below][kept].tolist(), probabilities=(masses[kept] / masses.sum()).tolist()
    )
    return table, share, share**2 * float(curve.variance[last])
