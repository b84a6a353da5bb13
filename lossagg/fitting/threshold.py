"""Where does the tail begin? Two published rules that need no eye, and what each of them chose.

Sequential goodness of fit (Bader, Yan & Zhang 2018, Ann. Appl. Statist. 12): the thresholds are tested from
the lowest up, each for excesses that are generalized Pareto, by the Anderson-Darling distance; ForwardStop
(G'Sell, Wager, Chouldechova & Tibshirani 2016, J. R. Statist. Soc. B 78) rejects the first k of them with
the false discovery rate held at its level: the largest k whose mean of -log(1 - p) stays under it.

Minimum distance (Clauset, Shalizi & Newman 2009, SIAM Review 51): a power law with Hill's index is laid
through the losses above each threshold; the threshold with the smallest Kolmogorov-Smirnov distance wins.

They answer different questions (a generalized Pareto law begins earlier than its power law) and may be
far apart. That distance is itself a finding: see how the capital figure moves between the two.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from lossagg.arrays import FloatArray, Floats
from lossagg.errors import FitError
from lossagg.fitting.tail import (
    FEWEST,
    MOST_THRESHOLDS,
    Large,
    TailPoint,
    candidate_thresholds,
    hill,
    tail_points,
)

LEVEL = 0.05
_MOST_DISTANCES = 200


@dataclass(frozen=True)
class ThresholdChoice:
    """What a rule chose.

    Attributes:
        rule: its name.
        threshold: the amount it chose; None where it cannot.
        excesses: losses above it.
        reason: how it came to it, or why it could not.
    """

    rule: str
    threshold: float | None
    excesses: int
    reason: str


def forward_stop(p_values: Floats, level: float = LEVEL) -> int:
    """How many of the ordered hypotheses ForwardStop rejects.

    Args:
        p_values: in the order of testing, shape (m,).
        level: false discovery rate.
    """
    with np.errstate(divide="ignore"):
        running = np.cumsum(-np.log1p(-np.asarray(p_values, dtype=np.float64)))
    under = np.flatnonzero(running / np.arange(1, len(running) + 1) <= level)
    return int(under[-1]) + 1 if len(under) else 0


def sequential_rule(points: Sequence[TailPoint], level: float = LEVEL) -> ThresholdChoice:
    """The lowest threshold from which on the excesses pass for generalized Pareto.

    Args:
        points: from `tail_points`, thresholds ascending.
        level: false discovery rate of the rejections.
    """
    name = "sequential goodness of fit"
    p_values = [point.p_value for point in points]
    known = [p for p in p_values if p is not None]
    if len(known) < len(points) or not points:
        return ThresholdChoice(
            name, None, 0, "no p-values: losses stopped at policy limits lie above the thresholds"
        )
    rejected = forward_stop(known, level)
    if rejected == len(points):
        return ThresholdChoice(
            name, None, 0, f"all {rejected} thresholds are rejected at {level:g}: no generalized Pareto tail"
        )
    chosen = points[rejected]
    return ThresholdChoice(
        name,
        chosen.threshold,
        chosen.excesses,
        f"{rejected} of {len(points)} thresholds rejected from below at {level:g}; p-value "
        f"{chosen.p_value:.2g} here",
    )


def distance_rule(
    losses: Floats, truncation: Floats | None = None, censored: object = None
) -> ThresholdChoice:
    """The threshold above which the losses are closest to a power law.

    Args:
        losses, truncation, censored: as for `fit_severity`.

    Raises:
        InputError: losses that cannot be used.
    """
    name = "minimum distance"
    large = Large.of(losses, truncation, censored)
    try:
        wanted = candidate_thresholds(large, _MOST_DISTANCES)
    except FitError as refusal:
        return ThresholdChoice(name, None, 0, refusal.what)
    gaps = [_power_law_gap(large, float(point)) for point in wanted]
    best = int(np.argmin(gaps))
    excesses = len(large.above(float(wanted[best]))[0])
    return ThresholdChoice(
        name,
        float(wanted[best]),
        excesses,
        f"distance {gaps[best]:.3g} from a power law, the smallest of {len(wanted)} thresholds",
    )


def _power_law_gap(large: Large, threshold: float) -> float:
    amounts, censored = large.above(threshold)
    index = 1.0 / hill(amounts, censored, threshold)
    fitted = (threshold / amounts) ** index
    at_risk = np.arange(len(amounts), 0, -1, dtype=np.float64)
    survival: FloatArray = np.cumprod(np.where(censored, 1.0, 1 - 1 / at_risk), dtype=np.float64)
    before = np.concatenate([[1.0], survival[:-1]])
    return float(max(np.abs(before - fitted).max(), np.abs(survival - fitted).max()))


def threshold_choices(
    losses: Floats,
    truncation: Floats | None = None,
    censored: object = None,
    *,
    most: int = MOST_THRESHOLDS,
    draws: int = 39,
) -> tuple[list[TailPoint], list[ThresholdChoice]]:
    """The tail at each threshold, and what the two rules choose; both empty handed where losses are few.

    Args:
        losses, truncation, censored: as for `fit_severity`.
        most: how many thresholds are tried.
        draws: bootstrap draws for p-values where losses above a threshold are censored.

    Raises:
        InputError: losses that cannot be used.
    """
    try:
        points = tail_points(losses, truncation, censored, most=most, draws=draws)
    except FitError as refusal:
        few = f"{refusal.what}; {2 * FEWEST} uncensored ones are needed"
        return [], [
            ThresholdChoice(rule, None, 0, few) for rule in ("sequential goodness of fit", "minimum distance")
        ]
    return points, [sequential_rule(points), distance_rule(losses, truncation, censored)]
