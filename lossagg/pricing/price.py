"""`price`: from a portfolio and its options to the table of options, as data.

The order of work: exact figures, premiums and costs; then one simulation of the same losses for all
options, which checks the exact figures and fills in what they cannot say; then the parameters drawn from
the fits; then what options are to each other.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from lossagg.portfolio import Portfolio
from lossagg.portfolio.assess import silent
from lossagg.portfolio.assessment import number
from lossagg.portfolio.cautions import cautions
from lossagg.portfolio.line import LineModel
from lossagg.portfolio.pricing_sections import OptionGrid, PricingSection, RiskLoad
from lossagg.pricing.choices import base_of, lines_of, options_of
from lossagg.pricing.common_years import Tally, simulate_options
from lossagg.pricing.curves import CappedCost, curves_of
from lossagg.pricing.draws import Draws, under_other_laws
from lossagg.pricing.evaluate import (
    COARSE,
    FEW,
    FINE,
    Exact,
    agreement,
    exact_figures,
    gross_moments,
    simulated_figures,
    thresholds,
)
from lossagg.pricing.figure import Figure
from lossagg.pricing.frontier import Position, choose, dominators
from lossagg.pricing.grid import Grid
from lossagg.pricing.history import PastYears
from lossagg.pricing.option import Option
from lossagg.pricing.parameters import drawn_lines, uncertain
from lossagg.pricing.rows import WITHHELD, WORST_LEVELS, Row, frontier_level, levels_needed, row_data, row_of
from lossagg.version import __version__

FORMAT = "lossagg.options/1"
YEARS = 200_000
MOST_DRAWN = 20_000
LEAST_DRAWS = 40
Progress = Callable[[str, float], None]
Data = dict[str, Any]

AS_IF = (
    "Every recorded event in the money of the forecast period, through the terms; at today's premium and "
    "costs. Exposure is not adjusted, losses below the reporting threshold are not there, and an amount "
    "that stopped at a policy limit counts as recorded."
)
INDEPENDENT = (
    "Options are priced on ground-up losses of the lines named, as if no other cover were there. Premiums "
    "labelled modelled are formulas, not offers: an insurer may ask for more, for less, or decline."
)


def price_options(
    portfolio: Portfolio,
    *,
    grid: OptionGrid | None = None,
    lines: Sequence[str] | None = None,
    base: str | None = None,
    years: int = YEARS,
    seed: int = 1,
    workers: int | None = None,
    progress: Progress = silent,
) -> Data:
    """Price the options of a portfolio.

    Args:
        portfolio: the portfolio, read.
        grid: options in place of those of the portfolio file.
        lines: names of the lines priced together, in place of those of the file.
        base: name of the base option, in place of that of the file.
        years: simulated years.
        seed: seed of simulation and parameter draws; the same seed gives the same figures.
        workers: threads; the figures do not depend on it.
        progress: called with the stage and the part done.

    Returns:
        The content of `options.json`, format "lossagg.options/1".

    Raises:
        InputError: no option, or options, lines or a base that cannot be used.
        FitError: records that support none of the laws asked for.
        EngineError: a model beyond the engines.
    """
    progress("preparing and fitting", 0.0)
    models = portfolio.models()
    basis = portfolio.file.pricing
    every = [model.line for model in models]
    chosen = tuple(models[k] for k in lines_of(every, lines or basis.lines))
    priced = tuple(model.line for model in chosen)
    options = options_of(portfolio.file, priced, grid)
    start = base_of(options, base or basis.base)
    work = _Work(basis, chosen, options, start, years, seed, workers, progress)
    data = work.table()
    section = portfolio.file.portfolio
    return {
        "format": FORMAT,
        "portfolio": {
            "name": section.name,
            "currency": section.currency,
            "valuation_date": section.valuation_date.isoformat(),
            "forecast": dict(zip(("start", "end"), (d.isoformat() for d in section.forecast), strict=True)),
        },
        "run": {"version": __version__, "seed": seed, "years": years, "inputs": list(portfolio.inputs)},
        **data,
        "cautions": [
            *cautions(chosen, work.levels),
            {"code": "options", "message": INDEPENDENT},
        ],
    }


@dataclass
class _Work:
    """One table of options under way."""

    basis: PricingSection
    models: tuple[LineModel, ...]
    options: tuple[Option, ...]
    base: int
    years: int
    seed: int
    workers: int | None
    progress: Progress

    def __post_init__(self) -> None:
        self.lines = tuple(model.line for model in self.models)
        self.levels = levels_needed(self.basis)
        self.compared = tuple(sorted({*WORST_LEVELS, frontier_level(self.basis)}))
        points = FINE if len(self.options) <= FEW else COARSE
        self.grid = Grid(self.lines, points, self.workers)
        self.gross = gross_moments(self.grid, self.options[0])

    def table(self) -> Data:
        """Everything but what describes the portfolio and the run."""
        rows, checks, tallies = self._rows()
        frontier = frontier_level(self.basis)
        draws = self._draws(rows)
        positions = [
            Position(
                row.option.name,
                row.total(self.basis).value,
                (
                    *(row.worst(level).plus(row.fixed).value for level in self.compared),
                    row.tail().plus(row.fixed).value,
                ),
                None if draws is None else draws.costs(k, row.fixed),
            )
            for k, row in enumerate(rows)
        ]
        dominated = dominators(positions, draws=0 if draws is None else draws.count)
        entries = []
        for k, row in enumerate(rows):
            entry = row_data(row, rows[self.base], self.basis, self.levels, self.gross.mean)
            entry["base"] = k == self.base
            entry["beats_base"] = self._beats(tallies[k], k)
            entry["parameters"] = None if draws is None else draws.ranges(k, row.fixed, frontier)
            entry["dominated_by"] = dominated[row.option.name]
            entry["check"] = checks[k]
            entries.append(entry)
        self.progress("done", 1.0)
        return {
            "basis": _basis(self.basis),
            "subject": {
                "lines": [line.name for line in self.lines],
                "event_cap": self.basis.event_cap,
                "events": sum(line.frequency.mean() for line in self.lines),
                "expected": number(self.gross.mean),
                "sd": number(self.gross.sd),
            },
            "levels": list(self.levels),
            "frontier_level": frontier,
            "options": entries,
            "agrees": all(check["agrees"] for check in checks),
            "draws": 0 if draws is None else draws.count,
            "appetite": self._appetite(rows, positions, dominated),
            "history": self._history(rows),
            "curves": self._curves(),
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
        keep = [not found.levels or _load_waits(found, load) for found in exact]
        keep[self.base] = keep[self.base] or any(keep)
        known = [
            None if kept and not found.levels else row_of(option, found, self.basis).fixed
            for option, found, kept in zip(self.options, exact, keep, strict=True)
        ]
        tallies = simulate_options(
            self.lines,
            self.options,
            base=self.base,
            fixed=known,
            thresholds={
                option.name: thresholds(found) for option, found in zip(self.options, exact, strict=True)
            },
            keep=keep,
            years=self.years,
            seed=self.seed,
            workers=self.workers,
            progress=lambda done: self.progress("simulation", 0.4 + 0.3 * done),
        )
        checks = [agreement(found, tally) for found, tally in zip(exact, tallies, strict=True)]
        rows = []
        for option, found, tally, check in zip(self.options, exact, tallies, checks, strict=True):
            filled = simulated_figures(found, tally, self.levels, self.gross.mean, tail_level)
            rows.append(row_of(option, filled if check["agrees"] else _withheld(self.levels), self.basis))
        self._beat_by_years(rows, tallies)
        return rows, checks, tallies

    def _beat_by_years(self, rows: Sequence[Row], tallies: Sequence[Tally]) -> None:
        """Years that beat the base, for options whose premium had to wait for the simulation."""
        base, theirs = tallies[self.base].kept, rows[self.base].fixed
        for row, tally in zip(rows, tallies, strict=True):
            if not np.isnan(tally.beats_base) or base is None or tally.kept is None:
                continue
            if row.fixed is not None and theirs is not None:
                less = tally.kept.annual + row.fixed < base.annual + theirs - 1e-9 * max(theirs, 1.0)
                tally.beats_base = float(np.mean(less))

    def _beats(self, tally: Tally, k: int) -> Data | None:
        if k == self.base or np.isnan(tally.beats_base):
            return None
        chance = tally.beats_base
        return {"value": chance, "standard_error": float(np.sqrt(chance * (1.0 - chance) / tally.years))}

    def _draws(self, rows: Sequence[Row]) -> Draws | None:
        if not uncertain(self.models) or self.basis.parameter_draws == 0:
            return None
        most = max(LEAST_DRAWS, MOST_DRAWN // len(self.options))
        count = min(self.basis.parameter_draws, most)
        found = Draws(np.full((len(rows), count, 3 + len(self.compared)), np.nan), self.compared)
        for number_, lines in enumerate(drawn_lines(self.models, count, self.seed)):
            found.values[:, number_] = under_other_laws(lines, self.options, self.compared)
            self.progress("parameters", 0.7 + 0.28 * (number_ + 1) / count)
        return found

    def _appetite(
        self, rows: Sequence[Row], positions: Sequence[Position], dominated: dict[str, list[str]]
    ) -> Data | None:
        appetite = self.basis.appetite
        if appetite is None:
            return None
        costs = [
            Position(p.name, row.total_with_capital(self.basis).value, p.worst)
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

    def _history(self, rows: Sequence[Row]) -> Data | None:
        past = PastYears.of(self.models)
        if past is None:
            return None
        gross = past.sums(self.options[0].scope)
        entries = []
        for row in rows:
            retained, ceded = past.retained(row.option)
            entries.append(
                {
                    "option": row.option.name,
                    "retained": retained.tolist(),
                    "ceded": ceded.tolist(),
                    "total": None if row.fixed is None else (retained + row.fixed).tolist(),
                    "mean": None if row.fixed is None else float(np.mean(retained) + row.fixed),
                }
            )
        return {
            "years": past.years.tolist(),
            "events": np.sum(
                [np.bincount(places, minlength=len(past.years)) for places in past.places], axis=0
            ).tolist(),
            "gross": gross.tolist(),
            "mean": float(np.mean(gross)),
            "options": entries,
            "partial": past.partial,
            "note": AS_IF,
        }

    def _curves(self) -> Data:
        own = sorted(set(_amounts(self.options)))
        largest = self.basis.event_cap or max((a for a in own), default=None)
        cost = CappedCost(self.lines, np.inf if self.basis.event_cap is None else self.basis.event_cap)
        return curves_of(
            cost,
            own,
            basic=self.basis.basic_limit,
            expense=self.basis.basic_limit_expense,
            largest=largest or None,
        )


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


def _amounts(options: Sequence[Option]) -> Iterable[float]:
    """Deductibles and tops of the options: where the curves should pass through."""
    for option in options:
        if option.terms is not None:
            for amount in (option.terms.deductible, option.terms.deductible + option.terms.limit):
                if 0 < amount < np.inf:
                    yield amount
