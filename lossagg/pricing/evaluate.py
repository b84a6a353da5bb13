"""The figures of every option: exact where the year is a function of one sum, else simulated."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from lossagg.cover import Schedule
from lossagg.engines.result import AnnualLoss, TransformedAnnualLoss
from lossagg.engines.sampled import SimulatedAnnualLoss
from lossagg.pricing.common_years import Tally
from lossagg.pricing.event_figures import nothing_retained
from lossagg.pricing.figure import Figure
from lossagg.pricing.grid import Grid, Moments
from lossagg.pricing.lattice_year import LatticeYear
from lossagg.pricing.option import Events, OneSum, Option

FEW = 100
FINE, COARSE = 2**17, 2**16


@dataclass
class Exact:
    """What the exact engine says of an option; None where it cannot say it.

    Attributes:
        levels: per level, value at risk and tail value at risk of the retained year.
        mean, sd: of the retained year.
        no_loss: probability that nothing is retained.
        charge: expected amount kept under the deductible beyond the retained cap.
        ceded, ceded_sd, ceded_tail: expected ceded loss, its standard deviation and tail value at risk.
        reinstated: expected reinstatement premium as a multiple of the initial one, where any is paid.
    """

    levels: dict[float, tuple[Figure, Figure]] = field(default_factory=dict)
    mean: Figure | None = None
    sd: Figure | None = None
    no_loss: Figure | None = None
    charge: Figure | None = None
    ceded: Figure | None = None
    ceded_sd: Figure | None = None
    ceded_tail: Figure | None = None
    reinstated: Figure | None = None


def exact_figures(
    grid: Grid,
    options: Sequence[Option],
    levels: Sequence[float],
    *,
    tail_level: float | None,
    progress: Callable[[float], None] | None = None,
) -> list[Exact]:
    """Every figure of the exact engine, each distinct annual sum computed once.

    Args:
        grid: the exact engine on the lines priced.
        options: the options.
        levels: levels of the retained year.
        tail_level: level of the tail value at risk of the ceded year, where the risk load needs one.
        progress: called with the part done.
    """
    found = [Exact() for _ in options]
    readers: dict[Events, list[Callable[[LatticeYear], None]]] = {}
    for option, exact in zip(options, found, strict=True):
        for events, reader in _wanted(option, exact, levels, tail_level):
            readers.setdefault(events, []).append(reader)
    for events, year in grid.years(readers, progress, _farthest(options)):
        for reader in readers[events]:
            reader(year)
    _by_formula(grid, options, found)
    return found


def _wanted(
    option: Option, exact: Exact, levels: Sequence[float], tail_level: float | None
) -> list[tuple[Events, Callable[[LatticeYear], None]]]:
    """The annual sums an option needs a distribution of, and what is read from each."""
    wanted: list[tuple[Events, Callable[[LatticeYear], None]]] = []
    retained, ceded = option.retained_plan, option.ceded_plan
    if retained is not None:
        wanted.append((retained.events, lambda year: _read_retained(year, retained, exact, levels)))
    if ceded is not None and option.terms is not None:
        if not ceded.annual.is_identity:
            wanted.append((ceded.events, lambda year: _read_ceded(year, ceded, exact)))
        if tail_level is not None:
            wanted.append((ceded.events, lambda year: _read_tail(year, ceded, exact, tail_level)))
        part = option.reinstated
        if part is not None:
            wanted.append((ceded.events, lambda year: _read_reinstated(year, ceded, part, exact)))
    if option.terms is not None and option.terms.retained_cap < np.inf:
        cap = option.terms.retained_cap
        wanted.append((option.kept, lambda year: _read_charge(year, cap, exact)))
    return wanted


def _farthest(options: Sequence[Option]) -> dict[Events, float]:
    """The last amount at which annual terms act, per annual sum."""
    found: dict[Events, float] = {}
    for option in options:
        for plan in (option.retained_plan, option.ceded_plan):
            if plan is not None:
                found[plan.events] = max(found.get(plan.events, 0.0), plan.annual.starts[-1])
        if option.terms is not None and option.terms.retained_cap < np.inf:
            found[option.kept] = max(found.get(option.kept, 0.0), option.terms.retained_cap)
    return found


def _paid(year: LatticeYear, plan: OneSum) -> AnnualLoss:
    return year if plan.annual.is_identity else TransformedAnnualLoss(year, plan.annual)


def _read_retained(year: LatticeYear, plan: OneSum, exact: Exact, levels: Sequence[float]) -> None:
    loss = _paid(year, plan)
    exact.mean, exact.sd = Figure.measured(loss, "mean"), Figure.measured(loss, "sd")
    chance = 1.0 - float(loss.sf(0.0))
    exact.no_loss = Figure(chance, None, None, year.engine)
    for level in levels:
        var = Figure.measured(loss, "value_at_risk", level)
        exact.levels[level] = var, Figure.measured(loss, "tail_value_at_risk", level)


def _read_ceded(year: LatticeYear, plan: OneSum, exact: Exact) -> None:
    loss = _paid(year, plan)
    exact.ceded, exact.ceded_sd = Figure.measured(loss, "mean"), Figure.measured(loss, "sd")


def _read_tail(year: LatticeYear, plan: OneSum, exact: Exact, level: float) -> None:
    exact.ceded_tail = Figure.measured(_paid(year, plan), "tail_value_at_risk", level)


def _read_reinstated(year: LatticeYear, plan: OneSum, part: Schedule, exact: Exact) -> None:
    exact.reinstated = Figure.measured(TransformedAnnualLoss(year, part.after(plan.annual)), "mean")


def _read_charge(year: LatticeYear, cap: float, exact: Exact) -> None:
    low, high = (side.layer_mean(cap) for side in year.bounds())
    exact.charge = Figure(year.layer_mean(cap), low, high, year.engine)


def _by_formula(grid: Grid, options: Sequence[Option], found: Sequence[Exact]) -> None:
    """Moments that need no distribution: of ceded years without annual terms, and what follows."""
    plain = [k for k, o in enumerate(options) if o.ceded_plan is not None and o.ceded_plan.annual.is_identity]
    events = [plan.events for k in plain if (plan := options[k].ceded_plan) is not None]
    for k, moment in zip(plain, grid.moments(events), strict=True):
        found[k].ceded, found[k].ceded_sd = Figure.exact(moment.mean), Figure.exact(moment.sd)
    whole = gross_moments(grid, options[0]).mean
    for option, exact in zip(options, found, strict=True):
        chance = nothing_retained(option)
        if chance is not None:
            exact.no_loss = Figure.exact(chance)
        if exact.ceded is None and exact.mean is not None:
            exact.ceded = exact.mean.taken_from(whole)
        if exact.mean is None and exact.ceded is not None:
            exact.mean = exact.ceded.taken_from(whole)


def gross_moments(grid: Grid, option: Option) -> Moments:
    """Mean and second moment of the year's losses in scope."""
    return grid.moments([option.scope])[0]


def simulated_figures(
    option: Option,
    exact: Exact,
    tally: Tally,
    levels: Sequence[float],
    whole: float,
    tail_level: float | None,
) -> Exact:
    """What the exact engine could not say, from the simulated years; the rest stays."""
    kept, paid = tally.kept, tally.paid
    if kept is None or paid is None:
        return exact
    filled = replace(exact)
    if not filled.levels:
        filled.levels = {
            level: (
                Figure.measured(kept, "value_at_risk", level),
                Figure.measured(kept, "tail_value_at_risk", level),
            )
            for level in levels
        }
        half = 1.96 * float(np.sqrt(tally.no_loss * (1.0 - tally.no_loss) / tally.years))
        filled.no_loss = Figure(tally.no_loss, tally.no_loss - half, tally.no_loss + half, kept.engine)
    filled.mean = filled.mean or Figure.measured(kept, "mean")
    filled.sd = filled.sd or Figure.measured(kept, "sd")
    filled.ceded = filled.ceded or filled.mean.taken_from(whole)
    filled.ceded_sd = filled.ceded_sd or Figure.measured(paid, "sd")
    if tail_level is not None:
        filled.ceded_tail = filled.ceded_tail or Figure.measured(paid, "tail_value_at_risk", tail_level)
    if option.reinstated is not None and filled.reinstated is None:
        parts = SimulatedAnnualLoss(option.reinstated(paid.annual), np.inf)
        filled.reinstated = Figure.measured(parts, "mean")
    return filled
