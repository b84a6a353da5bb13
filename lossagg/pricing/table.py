"""The table of options of one portfolio, step by step.

The order of work: exact figures, premiums and costs; then one simulation of the same losses for all
options, which checks the exact figures and fills in what they cannot say; then the parameters drawn from
the fits; then what options are to each other.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

from lossagg.portfolio.assessment import label_of, number
from lossagg.portfolio.line import LineModel
from lossagg.portfolio.parameter_draws import drawn_lines, uncertain
from lossagg.portfolio.pricing_sections import PricingSection, RiskLoad
from lossagg.pricing.agreement import agreement, thresholds
from lossagg.pricing.beating import beat_by_years, beats_data, paid_of
from lossagg.pricing.common_years import EveryYear, Tally, simulate_options
from lossagg.pricing.curves import curves_of_options
from lossagg.pricing.draws import Draws, under_other_laws
from lossagg.pricing.evaluate import (
    COARSE,
    FEW,
    FINE,
    Exact,
    exact_figures,
    gross_moments,
    simulated_figures,
)
from lossagg.pricing.figure import Figure
from lossagg.pricing.frontier import Position, choose, dominators
from lossagg.pricing.grid import Grid
from lossagg.pricing.history import as_if
from lossagg.pricing.option import Option
from lossagg.pricing.row_data import row_data
from lossagg.pricing.rows import (
    WITHHELD,
    WORST_LEVELS,
    Row,
    frontier_level,
    levels_needed,
    row_of,
    with_years,
)

MOST_DRAWN = 20_000
LEAST_DRAWS = 40
Progress = Callable[[str, float], None]
Data = dict[str, Any]


@dataclass
class OptionTable:
    """One table of options under way.

    Args:
        basis: loads, rates and appetite.
        models: the lines priced together.
        options: the options.
        base: index of the option that the others are compared with.
        years: simulated years.
        seed: seed of simulation and parameter draws.
        workers: threads; the figures do not depend on it.
        progress: called with the stage and the part done.
        broken: why every figure is withheld; empty where none is.
        every_year: receives what every option keeps and cedes in the simulated years.
    """

    basis: PricingSection
    models: tuple[LineModel, ...]
    options: tuple[Option, ...]
    base: int
    years: int
    seed: int
    workers: int | None
    progress: Progress
    broken: str = ""
    every_year: EveryYear | None = None

    def __post_init__(self) -> None:
        self.lines = tuple(model.line for model in self.models)
        self.levels = levels_needed(self.basis)
        self.compared = tuple(sorted({*WORST_LEVELS, frontier_level(self.basis)}))
        points = FINE if len(self.options) <= FEW else COARSE
        self.grid = Grid(self.lines, points, self.workers)
        self.gross = gross_moments(self.grid, self.options[0])

    def data(self) -> Data:
        """Everything but what describes the portfolio and the run."""
        if self.broken:
            return self._nothing()
        rows, checks, tallies = self._rows()
        frontier = frontier_level(self.basis)
        draws = self._draws(rows)
        positions = [
            Position(
                row.option.name,
                row.total().value,
                (
                    *(row.worst_total(level).value for level in self.compared),
                    row.tail().plus(row.fixed).value,
                ),
                None if draws is None else draws.costs(k, row.fixed),
            )
            for k, row in enumerate(rows)
        ]
        dominated = dominators(positions, draws=0 if draws is None else draws.count)
        at_estimates = dominators(positions, draws=0)
        entries = []
        for k, row in enumerate(rows):
            entry = row_data(row, rows[self.base], self.levels, self.gross.mean)
            entry["base"] = k == self.base
            compared = k != self.base and checks[k]["agrees"]
            entry["beats_base"] = beats_data(tallies[k]) if compared else None
            entry["parameters"] = None if draws is None else draws.ranges(k, row, frontier)
            entry["dominated_by"] = dominated[row.option.name]
            entry["dominated_at_estimates"] = at_estimates[row.option.name]
            entry["check"] = checks[k]
            entries.append(entry)
        self.progress("done", 1.0)
        return {
            "basis": _basis(self.basis),
            "subject": {
                "lines": [line.name for line in self.lines],
                "label": self._label(),
                "event_cap": self.basis.event_cap,
                "events": sum(line.frequency.mean() for line in self.lines),
                "expected": number(self.gross.mean),
                "sd": number(self.gross.sd),
            },
            "levels": list(self.levels),
            "frontier_level": frontier,
            "options": entries,
            "agrees": all(check["agrees"] for check in checks),
            "withheld": None,
            "draws": 0 if draws is None else draws.count,
            "drawn": None if draws is None else draws.data(self.options),
            "appetite": self._appetite(rows, positions, dominated),
            "history": as_if(self.models, rows),
            "curves": curves_of_options(self.options, self.basis),
        }

    def _label(self) -> str | None:
        return label_of({model.name: model.own_data for model in self.models})

    def _nothing(self) -> Data:
        """The table without a figure."""
        return {
            "basis": _basis(self.basis),
            "subject": {
                "lines": [line.name for line in self.lines],
                "label": self._label(),
                "event_cap": self.basis.event_cap,
                "events": None,
                "expected": None,
                "sd": None,
            },
            "levels": list(self.levels),
            "frontier_level": frontier_level(self.basis),
            "options": [],
            "agrees": False,
            "withheld": self.broken,
            "draws": 0,
            "drawn": None,
            "appetite": None,
            "history": None,
            "curves": None,
        }

    def _rows(self) -> tuple[list[Row], list[Data], list[Tally]]:
        load = self.basis.risk_load
        tail_level = load.level if load is not None and load.method == "cost-of-capital" else None
        exact = exact_figures(
            self.grid,
            self.options,
            self.levels,
            tail_level=tail_level,
            progress=lambda done: self.progress("exact figures", 0.05 + 0.35 * done),
        )
        secured = self.basis.collateral is not None
        waits = [_load_waits(found, load) or (secured and not found.levels) for found in exact]
        keep = [
            waits[self.base] or wait or not found.levels or option.reinstated is not None
            for wait, found, option in zip(waits, exact, self.options, strict=True)
        ]
        keep[self.base] = keep[self.base] or any(waits)
        known = [
            None if wait else paid_of(row_of(option, found, self.basis))
            for option, found, wait in zip(self.options, exact, waits, strict=True)
        ]
        tallies = simulate_options(
            self.lines,
            self.options,
            base=self.base,
            paid=known,
            thresholds={
                option.name: thresholds(found) for option, found in zip(self.options, exact, strict=True)
            },
            keep=keep,
            years=self.years,
            seed=self.seed,
            workers=self.workers,
            progress=lambda done: self.progress("simulation", 0.4 + 0.3 * done),
            every_year=self.every_year,
        )
        checks = [agreement(found, tally) for found, tally in zip(exact, tallies, strict=True)]
        rows = []
        for option, found, tally, check in zip(self.options, exact, tallies, checks, strict=True):
            if not check["agrees"]:
                rows.append(row_of(option, _withheld(self.levels), self.basis))
                continue
            filled = simulated_figures(option, found, tally, self.levels, self.gross.mean, tail_level)
            rows.append(with_years(row_of(option, filled, self.basis), tally))
        beat_by_years(rows, tallies, self.base)
        return rows, checks, tallies

    def _draws(self, rows: Sequence[Row]) -> Draws | None:
        if not uncertain(self.models) or self.basis.parameter_draws == 0:
            return None
        most = max(LEAST_DRAWS, MOST_DRAWN // len(self.options))
        count = min(self.basis.parameter_draws, most)
        found = Draws.empty(self.options, count, self.compared)
        for number_, lines in enumerate(drawn_lines(self.models, count, self.seed)):
            found.values[:, number_] = under_other_laws(lines, self.options, self.compared, self.seed)
            self.progress("parameters", 0.7 + 0.28 * (number_ + 1) / count)
        return found

    def _appetite(
        self, rows: Sequence[Row], positions: Sequence[Position], dominated: dict[str, list[str]]
    ) -> Data | None:
        appetite = self.basis.appetite
        if appetite is None:
            return None
        costs = [
            Position(p.name, row.total_with_capital().value, p.worst)
            for p, row in zip(positions, rows, strict=True)
        ]
        retained = {row.option.name: row.worst(appetite.level).value for row in rows}
        choice = choose(costs, retained, dominated, limit=appetite.worst_year, level=appetite.level)
        return {
            "worst_year": appetite.worst_year,
            "level": appetite.level,
            "within": list(choice.within),
            "efficient": list(choice.efficient),
            "option": choice.option,
            "why": choice.why,
        }


def _load_waits(found: Exact, load: RiskLoad | None) -> bool:
    """Whether the risk load rests on a figure of the ceded year that only the simulation can give."""
    if load is None or load.factor == 0:
        return False
    return (found.ceded_tail if load.method == "cost-of-capital" else found.ceded_sd) is None


def _withheld(levels: Sequence[float]) -> Exact:
    none = Figure.withheld(WITHHELD)
    return Exact(dict.fromkeys(levels, (none, none)), none, none, none, None, none, none, none)


def _basis(basis: PricingSection) -> Data:
    """The keys of `[pricing]` as stated, with underscores."""
    return basis.model_dump(mode="json", exclude={"lines", "event_cap"})
