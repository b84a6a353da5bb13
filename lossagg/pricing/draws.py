"""The options under other parameters: ranges of their figures, and whether dominance survives them.

Every drawn set of laws goes through the exact engine on a coarse lattice: means are formulas and exact, a
quantile is off by half a step, at most one part in two thousand of the reach. Where a year takes two annual
sums, the laws are simulated: the same random numbers for every draw, so that what differs between draws is
the laws. Such worst years widen the range by the error of few years, and say nothing about dominance.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.engines.book import Line
from lossagg.engines.result import AnnualLoss, TransformedAnnualLoss
from lossagg.engines.sampled import SimulatedAnnualLoss
from lossagg.portfolio.assessment import number
from lossagg.pricing.common_years import simulate_options
from lossagg.pricing.grid import Grid
from lossagg.pricing.option import Events, Option
from lossagg.pricing.rows import WORST_LEVELS, Row

DRAW_POINTS = 2**13
DRAW_RATIO = 8.0
DRAW_YEARS = 10_000
Data = dict[str, Any]


@dataclass(frozen=True)
class Draws:
    """Per option and parameter draw: expected retained, expected ceded, worst years by level and their tail,
    expected reinstatement premium as a multiple of the initial one.

    Premium and costs stay as in the table: they are agreed before anybody knows the parameters.
    """

    values: FloatArray
    levels: tuple[float, ...]
    simulated: tuple[bool, ...]

    @classmethod
    def empty(cls, options: Sequence[Option], count: int, levels: tuple[float, ...]) -> Draws:
        """Room for the figures of every draw."""
        values = np.full((len(options), count, 4 + len(levels)), np.nan)
        return cls(values, levels, tuple(is_simulated(option) for option in options))

    @property
    def count(self) -> int:
        """Number of draws."""
        return int(self.values.shape[1])

    def costs(self, k: int, fixed: float | None) -> FloatArray | None:
        """Expected and worst total cost per draw; None where they are not exact, or cannot be computed."""
        own = self.values[k][:, [0, *range(2, 3 + len(self.levels))]]
        return None if fixed is None or self.simulated[k] or np.isnan(own).all() else own + fixed

    def ranges(self, k: int, row: Row, level: float) -> Data:
        """95 % of the draws; of the worst years the one at `level`."""
        retained, ceded, reinstated = self.values[k][:, 0], self.values[k][:, 1], self.values[k][:, -1]
        total = None
        if row.fixed is not None:
            total = retained + row.fixed + row.reinstatement_price * reinstated
        return {
            "draws": self.count,
            "simulated": self.simulated[k],
            "retained": _range(retained),
            "ceded": _range(ceded),
            "worst_year": _range(self.values[k][:, 2 + self.levels.index(level)]),
            "total": None if total is None else _range(total),
        }

    def data(self, options: Sequence[Option]) -> Data:
        """Every draw of every option: what the ranges and the dominated options are taken from."""
        return {
            "levels": list(self.levels),
            "tail_level": WORST_LEVELS[-1],
            "options": [
                {
                    "option": option.name,
                    "retained": _numbers(own[:, 0]),
                    "ceded": _numbers(own[:, 1]),
                    "worst_years": [_numbers(own[:, 2 + k]) for k in range(len(self.levels))],
                    "tail": _numbers(own[:, -2]),
                    "reinstatement": _numbers(own[:, -1]),
                }
                for option, own in zip(options, self.values, strict=True)
            ],
        }


def _numbers(values: FloatArray) -> list[float | None]:
    return [number(value) for value in values.tolist()]


def is_simulated(option: Option) -> bool:
    """Whether the worst year of an option takes a simulation."""
    return option.retained_plan is None or option.reinstated is not None


def _range(values: FloatArray) -> list[float | None] | None:
    """The 2.5 % and 97.5 % quantile of the draws; an end that does not exist is None."""
    if np.isnan(values).any():
        return None
    ordered = np.sort(values)
    low = ordered[int(np.floor(0.025 * (len(ordered) - 1)))]
    high = ordered[int(np.ceil(0.975 * (len(ordered) - 1)))]
    return [number(low), number(high)]


def under_other_laws(
    lines: Sequence[Line], options: Sequence[Option], levels: Sequence[float], seed: int
) -> FloatArray:
    """Figures of every option under other laws, shape (options, 4 + levels): see `Draws`."""
    grid = Grid(lines, DRAW_POINTS, workers=1, ratio=DRAW_RATIO, bracketed=False)
    whole = grid.moments([options[0].scope])[0].mean
    result = np.full((len(options), 4 + len(levels)), np.nan)
    result[:, -1] = 0.0
    years = dict(grid.years(_sums(options)))
    for k, option in enumerate(options):
        retained, ceded = option.retained_plan, option.ceded_plan
        if retained is not None:
            year = years[retained.events]
            loss = year if retained.annual.is_identity else TransformedAnnualLoss(year, retained.annual)
            result[k, 0] = loss.mean()
            result[k, 2:-2] = [loss.value_at_risk(level) for level in levels]
            # The value itself: the grid has no bracket here that it could be held in.
            result[k, -2] = AnnualLoss.tail_value_at_risk(loss, WORST_LEVELS[-1])
        if np.isfinite(result[k, 0]) and np.isfinite(whole):
            result[k, 1] = whole - result[k, 0]
        elif ceded is not None and ceded.annual.is_identity:
            result[k, 1] = grid.moments([ceded.events])[0].mean
        elif ceded is not None and ceded.events in years:
            result[k, 1] = TransformedAnnualLoss(years[ceded.events], ceded.annual).mean()
        if np.isnan(result[k, 0]) and np.isfinite(whole):
            result[k, 0] = whole - result[k, 1]
    _fill_simulated(lines, options, levels, seed, whole, result)
    return result


def _sums(options: Sequence[Option]) -> Iterable[Events]:
    """The annual sums whose distribution a parameter draw needs."""
    for option in options:
        if option.retained_plan is not None:
            yield option.retained_plan.events
        elif option.ceded_plan is not None and not option.ceded_plan.annual.is_identity:
            yield option.ceded_plan.events


def _fill_simulated(
    lines: Sequence[Line],
    options: Sequence[Option],
    levels: Sequence[float],
    seed: int,
    whole: float,
    result: FloatArray,
) -> None:
    """What takes two annual sums at once, by a few simulated years; means that are known stay."""
    places = [k for k, option in enumerate(options) if is_simulated(option)]
    if not places:
        return
    tallies = simulate_options(
        lines,
        [options[k] for k in places],
        base=0,
        paid=[None] * len(places),
        thresholds={},
        keep=[True] * len(places),
        years=DRAW_YEARS,
        seed=seed,
        workers=1,
    )
    for k, tally in zip(places, tallies, strict=True):
        kept, paid = tally.kept, tally.paid
        assert kept is not None
        assert paid is not None
        if np.isnan(result[k, 1]):
            result[k, 1] = paid.mean()
        if np.isnan(result[k, 0]):
            result[k, 0] = kept.mean() if not np.isfinite(whole) else whole - result[k, 1]
        result[k, 2:-2] = [kept.value_at_risk(level) for level in levels]
        result[k, -2] = kept.tail_value_at_risk(WORST_LEVELS[-1])
        part = options[k].reinstated
        if part is not None:
            result[k, -1] = SimulatedAnnualLoss(part(paid.annual), np.inf).mean()
