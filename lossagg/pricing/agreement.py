"""Exact against simulated figures of an option: both from the same terms, by routes that share no arithmetic.

The mean and the share of simulated years beyond each exact quantile must agree within four standard errors,
or the figures of that option are withheld.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from lossagg.pricing.common_years import Tally
from lossagg.pricing.evaluate import Exact
from lossagg.pricing.figure import Figure

STANDARD_ERRORS = 4.0


def thresholds(exact: Exact) -> list[float]:
    """Retained amounts just outside the ends of every bracket, to count the simulated years above."""
    found: list[float] = []
    for var, _ in exact.levels.values():
        if var.low is not None and var.high is not None:
            found += _around(var.low, var.high)
    return found


def _around(low: float, high: float) -> tuple[float, float]:
    """Moved by less than a rounding of a sum could be off."""
    return low - 1e-9 * max(low, 1.0), high + 1e-9 * max(high, 1.0)


def agreement(exact: Exact, tally: Tally) -> dict[str, Any]:
    """Exact against simulated figures of one option: the verdict and every comparison.

    A quantile is right when no more than 1 - level of the years lie above the upper end of its bracket and
    no fewer above the lower end, within four standard errors.
    """
    comparisons = []
    if exact.mean is not None and exact.mean.value is not None:
        comparisons.append(_mean_compared(exact.mean, tally))
    for level, (var, _) in exact.levels.items():
        if var.low is None or var.high is None:
            continue
        below, above = (tally.above[amount] for amount in _around(var.low, var.high))
        error = float(np.sqrt(level * (1.0 - level) / tally.years))
        slack, tail = STANDARD_ERRORS * error, 1.0 - level
        comparisons.append(
            {
                "measure": "years above the worst year",
                "level": level,
                "exact": [tail, tail],
                "simulated": [above, below],
                "standard_error": error,
                "agrees": bool(above <= tail + slack and below >= tail - slack),
            }
        )
    return {"agrees": all(row["agrees"] for row in comparisons), "comparisons": comparisons}


def _mean_compared(mean: Figure, tally: Tally) -> dict[str, Any]:
    value, error = float(mean.value or 0.0), tally.retained_sd / float(np.sqrt(tally.years))
    low = value if mean.low is None else min(mean.low, value)
    high = value if mean.high is None else max(mean.high, value)
    slack = STANDARD_ERRORS * error + 1e-9 * max(abs(value), 1.0)
    return {
        "measure": "expected retained",
        "level": None,
        "exact": [low, high],
        "simulated": [tally.retained, tally.retained],
        "standard_error": error,
        "agrees": bool(low - slack <= tally.retained <= high + slack),
    }
