"""The largest value at risk that lines can have together, whatever their dependence.

The rearrangement algorithm (Puccetti and Rüschendorf 2012, "Computation of sharp bounds on the distribution
of a function of dependent risks", Journal of Computational and Applied Mathematics 236; Embrechts, Puccetti
and Rüschendorf 2013, "Model uncertainty and VaR aggregation", Journal of Banking and Finance 37): the worst
1 - level of each line is cut into slices of equal probability, and the slices are arranged so that the sums
are as equal as possible; the smallest sum is the value at risk. Slices at their lower and at their upper ends
give a figure below and one above.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from lossagg.arrays import FloatArray, require_probability
from lossagg.engines.result import AnnualLoss

SLICES = 2000
_PASSES = 200
_SETTLED = 1e-6


def worst_value_at_risk(
    losses: Sequence[AnnualLoss], level: float, slices: int = SLICES
) -> tuple[float, float]:
    """The largest value at risk of the sum over all dependences between these annual losses.

    Args:
        losses: the annual loss of each line.
        level: in (0, 1).
        slices: number of slices of the tail of each line.

    Returns:
        The figure with slices at their lower and at their upper ends. The arrangement found may fall a little
        short of the best there is, so both are estimates; never below the sum of the lines' own figures.
    """
    require_probability(level, "level", open_low=True, open_high=True)
    ends = level + (1.0 - level) * np.arange(slices + 1) / slices
    # The last upper end may be infinite; the middle of the last slice stands for it.
    ends[-1] = level + (1.0 - level) * (slices - 0.5) / slices
    values = np.array([[loss.value_at_risk(float(end)) for end in ends] for loss in losses])
    return _smallest_sum(values[:, :-1]), _smallest_sum(values[:, 1:])


def _smallest_sum(columns: FloatArray) -> float:
    """The smallest sum over the slices once each line is arranged against the sum of the others."""
    arranged = columns.copy()
    # From a fixed random arrangement: from sorted columns the algorithm may stop early.
    random = np.random.Generator(np.random.SFC64(1))
    for row in arranged:
        random.shuffle(row)
    best = -np.inf
    for _ in range(_PASSES):
        for k in range(len(arranged)):
            others = arranged.sum(axis=0) - arranged[k]
            place = np.argsort(others, kind="stable")
            arranged[k, place] = np.sort(columns[k])[::-1]
        least = float(arranged.sum(axis=0).min())
        if least - best <= _SETTLED * abs(least):
            break
        best = least
    return max(least, float(columns[:, 0].sum()))
