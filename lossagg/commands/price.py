"""`lossagg price`: the table of deductible and limit options."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Annotated

import typer

from lossagg.commands.boundary import guarded
from lossagg.commands.options import Out, Seed, Workers


@guarded
def price(
    portfolio: Annotated[Path, typer.Argument(metavar="PORTFOLIO", help="Folder with a portfolio.toml.")],
    out: Out,
    deductibles: Annotated[
        str | None,
        typer.Option(
            "--deductibles",
            metavar="A,B,...",
            help="Deductibles of a grid that stands in place of the options of the file: 10000,25000.",
            show_default=False,
        ),
    ] = None,
    limits: Annotated[
        str | None,
        typer.Option(
            "--limits", metavar="A,B,...", help="Limits of the grid; none for no limit.", show_default=False
        ),
    ] = None,
    retained_caps: Annotated[
        str | None,
        typer.Option(
            "--retained-caps",
            metavar="A,B,...",
            help="Retained caps of the grid, or none.",
            show_default=False,
        ),
    ] = None,
    annual_retentions: Annotated[
        str | None,
        typer.Option(
            "--annual-retentions",
            metavar="A,B,...",
            help="Annual retentions of the grid.",
            show_default=False,
        ),
    ] = None,
    annual_limits: Annotated[
        str | None,
        typer.Option(
            "--annual-limits",
            metavar="A,B,...",
            help="Annual limits of the grid, or none.",
            show_default=False,
        ),
    ] = None,
    line: Annotated[
        list[str] | None,
        typer.Option("--line", metavar="NAME", help="A line to price; give it again for several together."),
    ] = None,
    base: Annotated[
        str | None,
        typer.Option(
            "--base",
            metavar="OPTION",
            help="The option the others are compared with; the first if not given.",
            show_default=False,
        ),
    ] = None,
    years: Annotated[
        int | None,
        typer.Option(
            "--years", metavar="N", min=1, help="Simulated years; 200,000 if not given.", show_default=False
        ),
    ] = None,
    seed: Seed = 1,
    workers: Workers = None,
    annual: Annotated[
        Path | None,
        typer.Option(
            "--annual",
            metavar="FILE",
            help="Parquet file for every simulated year: the loss, and what each option keeps and cedes.",
            show_default=False,
        ),
    ] = None,
) -> int:
    """Price options: what each deductible, limit or cap keeps, costs and risks.

    Takes the options of PORTFOLIO, or a grid from the arguments, and writes options.json, options.html,
    options.xlsx, options.csv, curves.csv, draws.csv and manifest.json into DIR.
    """
    from lossagg.batch.pricing import grid_of, price_folder
    from lossagg.commands.terminal import print_summary, progress_bar, warn
    from lossagg.report.option_summary import summarise_options

    grid = grid_of(deductibles, limits, annual_retentions, annual_limits, retained_caps)
    with progress_bar() as progress:
        outcome = price_folder(
            portfolio,
            out,
            grid=grid,
            lines=line,
            base=base,
            years=years,
            seed=seed,
            workers=workers,
            annual=annual,
            command=("lossagg", *sys.argv[1:]),
            progress=progress,
        )
    warn(outcome.warnings)
    print_summary(summarise_options(outcome.assessment, out))
    return 1 if outcome.withheld else 0
