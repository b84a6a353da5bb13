"""The options under other parameters: ranges of their figures, and whether dominance survives them.

Every drawn set of laws goes through the exact engine on a coarse lattice: means are formulas and exact, a
quantile is off by half a step, at most one part in two thousand of the reach.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.engines.book import Line
from lossagg.engines.result import TransformedAnnualLoss
from lossagg.portfolio.assessment import number
from lossagg.pricing.grid import Grid
from lossagg.pricing.option import Events, Option
from lossagg.pricing.rows import WORST_LEVELS

DRAW_POINTS = 2**13
DRAW_RATIO = 8.0
Data = dict[str, Any]


@dataclass(frozen=True)
class Draws:
    """Per option and parameter draw: expected retained, expected ceded, worst years by level, and their tail.

    Premium and costs stay as in the table: they are agreed before anybody knows the parameters.
    """

    values: FloatArray
    levels: tuple[float, ...]

    @property
    def count(self) -> int:
        """Number of draws."""
        return int(self.values.shape[1])

    def costs(self, k: int, fixed: float | None) -> FloatArray | None:
        """Expected and worst total cost per draw; None where the draws cannot be computed."""
        own = self.values[k][:, [0, *range(2, 3 + len(self.levels))]]
        return None if fixed is None or np.isnan(own).all() else own + fixed

    def ranges(self, k: int, fixed: float | None, level: float) -> Data:
        """95 % of the draws; of the worst years the one at `level`."""
        retained, ceded = self.values[k][:, 0], self.values[k][:, 1]
        worst = self.values[k][:, 2 + self.levels.index(level)]
        return {
            "draws": self.count,
            "retained": _range(retained),
            "ceded": _range(ceded),
            "worst_year": _range(worst),
            "total": None if fixed is None else _range(retained + fixed),
        }


def _range(values: FloatArray) -> list[float | None] | None:
    """The 2.5 % and 97.5 % quantile of the draws; an end that does not exist is None."""
    if np.isnan(values).any():
        return None
    ordered = np.sort(values)
    low = ordered[int(np.floor(0.025 * (len(ordered) - 1)))]
    high = ordered[int(np.ceil(0.975 * (len(ordered) - 1)))]
    return [number(low), number(high)]


def under_other_laws(lines: Sequence[Line], options: Sequence[Option], levels: Sequence[float]) -> FloatArray:
    """Expected retained, expected ceded, worst years by level and the tail value at risk at 99 % under
    other laws, shape (options, 3 + levels)."""
    grid = Grid(lines, DRAW_POINTS, workers=1, ratio=DRAW_RATIO, bracketed=False)
    whole = grid.moments([options[0].scope])[0].mean
    result = np.full((len(options), 3 + len(levels)), np.nan)
    years = dict(grid.years(_sums(options)))
    for k, option in enumerate(options):
        retained, ceded = option.retained_plan, option.ceded_plan
        if retained is not None:
            year = years[retained.events]
            loss = year if retained.annual.is_identity else TransformedAnnualLoss(year, retained.annual)
            result[k, 0] = loss.mean()
            result[k, 2:-1] = [loss.value_at_risk(level) for level in levels]
            result[k, -1] = loss.tail_value_at_risk(WORST_LEVELS[-1])
        if np.isfinite(result[k, 0]) and np.isfinite(whole):
            result[k, 1] = whole - result[k, 0]
        elif ceded is not None and ceded.annual.is_identity:
            result[k, 1] = grid.moments([ceded.events])[0].mean
        elif ceded is not None and ceded.events in years:
            result[k, 1] = TransformedAnnualLoss(years[ceded.events], ceded.annual).mean()
        if np.isnan(result[k, 0]) and np.isfinite(whole):
            result[k, 0] = whole - result[k, 1]
    return result


def _sums(options: Sequence[Option]) -> Iterable[Events]:
    """The annual sums whose distribution a parameter draw needs."""
    for option in options:
        if option.retained_plan is not None:
            yield option.retained_plan.events
        elif option.ceded_plan is not None and not option.ceded_plan.annual.is_identity:
            yield option.ceded_plan.events
