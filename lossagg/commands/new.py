"""`lossagg new`: a portfolio started from a table of losses."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

from lossagg.commands.boundary import guarded


@guarded
def new(
    folder: Annotated[Path, typer.Argument(metavar="FOLDER", help="The new folder; absent or empty.")],
    source: Annotated[
        Path,
        typer.Option("--from", metavar="FILE", help="Table of losses: CSV, TSV, XLSX or Parquet."),
    ],
    sheet: Annotated[
        str | None,
        typer.Option("--sheet", metavar="NAME", help="Sheet of a workbook with several.", show_default=False),
    ] = None,
    encoding: Annotated[
        str | None,
        typer.Option(
            "--encoding", metavar="NAME", help="Encoding of a text file, if not UTF-8.", show_default=False
        ),
    ] = None,
    delimiter: Annotated[
        str | None,
        typer.Option(
            "--delimiter",
            metavar="C",
            help="Delimiter of a text file where it is unclear.",
            show_default=False,
        ),
    ] = None,
) -> int:
    """Start a portfolio from a table of losses.

    Proposes which column is which, the lines, thresholds, first year and valuation date, copies the table
    into FOLDER and writes a commented portfolio.toml beside it. Prints every assumption, to be confirmed.
    """
    from lossagg.batch.starting import start_portfolio
    from lossagg.commands.terminal import print_tables
    from lossagg.report.cells import clean
    from lossagg.report.checking import headings
    from lossagg.report.starting import started_tables

    started = start_portfolio(folder, source, sheet=sheet, encoding=encoding, delimiter=delimiter)
    print_tables(started_tables(started.assumptions, started.check))
    for text in ("As it stands:", *headings(started.check), str(started.folder / "portfolio.toml")):
        typer.echo(clean(text))
    return 0
