"""`price`: from a portfolio and its options to the table of options, as data."""

from __future__ import annotations

from collections.abc import Sequence
from contextlib import nullcontext
from pathlib import Path

from lossagg.portfolio import Portfolio
from lossagg.portfolio.annual_file import AnnualFile
from lossagg.portfolio.assess import silent
from lossagg.portfolio.cautions import cautions
from lossagg.portfolio.line import LineModel
from lossagg.portfolio.pricing_sections import OptionGrid
from lossagg.portfolio.reconciling import reconcile_portfolio
from lossagg.pricing.choices import base_of, lines_of, options_of
from lossagg.pricing.table import Data, OptionTable, Progress
from lossagg.version import __version__

FORMAT = "lossagg.options/1"
YEARS = 200_000
INDEPENDENT = (
    "Options are priced on ground-up losses of the lines named, as if no other cover were there. Premiums "
    "labelled modelled are formulas, not offers: an insurer may ask for more, for less, or decline."
)
CAUTION = {"code": "options", "message": INDEPENDENT}


def price_options(
    portfolio: Portfolio,
    *,
    grid: OptionGrid | None = None,
    lines: Sequence[str] | None = None,
    base: str | None = None,
    years: int = YEARS,
    seed: int = 1,
    workers: int | None = None,
    annual: Path | None = None,
    progress: Progress = silent,
) -> Data:
    """Price the options of a portfolio.

    Args:
        portfolio: the portfolio, read.
        grid: options in place of those of the portfolio file.
        lines: names of the lines priced together, in place of those of the file.
        base: name of the base option, in place of that of the file; with a grid the first by default.
        years: simulated years.
        seed: seed of simulation and parameter draws; the same seed gives the same figures.
        workers: threads; the figures do not depend on it.
        annual: a Parquet file to receive every simulated year: the loss, and what every option keeps and
            cedes of it.
        progress: called with the stage and the part done.

    Returns:
        The content of `options.json`, format "lossagg.options/1".

    Raises:
        InputError: no option, or options, lines, a base or a file of years that cannot be used.
        FitError: records that support none of the laws asked for.
        EngineError: a model beyond the engines.
    """
    file = AnnualFile(annual) if annual else None
    progress("preparing and fitting", 0.0)
    table = _table(
        portfolio,
        portfolio.models(),
        grid=grid,
        lines=lines,
        base=base,
        years=years,
        seed=seed,
        workers=workers,
        progress=progress,
        broken=reconcile_portfolio(portfolio.file, portfolio.records).withheld,
    )
    with file or nullcontext():
        table.every_year = file.add if file else None
        data = table.data()
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
        "cautions": [*cautions(table.models, table.levels), CAUTION],
    }


def options_of_assessment(
    portfolio: Portfolio,
    models: Sequence[LineModel],
    *,
    years: int,
    seed: int,
    workers: int | None,
    withheld: str,
    progress: Progress,
) -> Data | None:
    """The options of a portfolio file for its assessment; None where it has none.

    Args:
        portfolio: the portfolio.
        models: its lines with their laws.
        years: simulated years of the assessment; the options take no more than `YEARS` of them.
        seed, workers, progress: see `price_options`.
        withheld: why no figure may be printed; empty where all may.

    Returns:
        The table of options with the number of years it was simulated with, and its caution.
    """
    if not portfolio.file.option and portfolio.file.option_grid is None:
        return None
    years = min(years, YEARS)
    table = _table(
        portfolio, models, years=years, seed=seed, workers=workers, progress=progress, broken=withheld
    )
    data = table.data()
    del data["drawn"]  # the table of `price` has it
    return {"years": years, **data, "cautions": [CAUTION]}


def _table(
    portfolio: Portfolio,
    models: Sequence[LineModel],
    *,
    years: int,
    seed: int,
    workers: int | None,
    progress: Progress,
    broken: str,
    grid: OptionGrid | None = None,
    lines: Sequence[str] | None = None,
    base: str | None = None,
) -> OptionTable:
    basis = portfolio.file.pricing
    chosen = tuple(models[k] for k in lines_of([model.line for model in models], lines or basis.lines))
    options = options_of(portfolio.file, tuple(model.line for model in chosen), grid)
    start = base_of(options, base or (basis.base if grid is None else None))
    return OptionTable(basis, chosen, options, start, years, seed, workers, progress, broken)
