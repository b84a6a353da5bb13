"""`lossagg fit`: the fits and their evidence."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Annotated

import typer

from lossagg.commands.boundary import guarded
from lossagg.commands.options import Out


@guarded
def fit(
    portfolio: Annotated[Path, typer.Argument(metavar="PORTFOLIO", help="Folder with a portfolio.toml.")],
    out: Out,
    draws: Annotated[
        int | None,
        typer.Option(
            "--draws",
            metavar="N",
            min=1,
            help="Most bootstrap draws behind a p-value; 199 if not given.",
            show_default=False,
        ),
    ] = None,
) -> int:
    """Fit every line and show the evidence: which law, why, how sure, what if the tail is wrong.

    Computes no portfolio figure. Prints the tables and writes fit.json, fit.html, fit.xlsx and
    manifest.json into DIR.
    """
    from lossagg.batch.fits import fit_folder
    from lossagg.commands.terminal import progress_bar, warn
    from lossagg.report.fitting import printed_tables
    from lossagg.report.summary import plain_table

    with progress_bar() as progress:
        fits, folder, warnings = fit_folder(
            portfolio, out, draws=draws, command=("lossagg", *sys.argv[1:]), progress=progress
        )
    warn(warnings)
    for table in printed_tables(fits):
        for row in (*plain_table(table), ""):
            typer.echo(row)
    typer.echo(str(folder / "fit.html"))
    return 0
