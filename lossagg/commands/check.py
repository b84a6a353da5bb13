"""`lossagg check`: what is in the records, what is wrong with them, and what they can support."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Annotated

import typer

from lossagg.commands.boundary import guarded


@guarded
def check(
    portfolio: Annotated[
        Path,
        typer.Argument(
            metavar="PORTFOLIO", help="Folder with a portfolio.toml, or folder that holds such folders."
        ),
    ],
    out: Annotated[
        Path | None,
        typer.Option(
            "--out",
            metavar="DIR",
            help="Folder for check.json, check.html, trail.csv: new, empty, or an earlier check.",
            show_default=False,
        ),
    ] = None,
    json: Annotated[bool, typer.Option("--json", help="Print check.json in place of the tables.")] = False,
) -> int:
    """Read and check everything, model nothing.

    Shows the findings by severity with their remedies, the reconciliation of what was read, the losses by
    year, the control totals, and the level the data can support. Leaves with 2 when the portfolio cannot be
    used; for a folder with 1 when one of its portfolios cannot.
    """
    from lossagg.batch.checks import check_folder, exit_code
    from lossagg.commands.terminal import print_tables, progress_bar
    from lossagg.report.canonical import canonical_json
    from lossagg.report.cells import clean
    from lossagg.report.checking import headings, printed_tables

    with progress_bar() as progress:
        found, written = check_folder(portfolio, out, command=("lossagg", *sys.argv[1:]), progress=progress)
    if json:
        typer.echo(canonical_json(found), nl=False)
        return exit_code(found)
    for text in (*headings(found), ""):
        typer.echo(clean(text))
    print_tables(printed_tables(found))
    if written is not None:
        typer.echo(str(written / "check.html"))
    return exit_code(found)
