"""`lossagg assess`: one portfolio, from its records to its report."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Annotated

import typer

from lossagg.commands.boundary import guarded
from lossagg.commands.options import Out, Seed, Workers, Years


@guarded
def assess(
    portfolio: Annotated[Path, typer.Argument(metavar="PORTFOLIO", help="Folder with a portfolio.toml.")],
    out: Out,
    years: Years = None,
    seed: Seed = 1,
    workers: Workers = None,
) -> int:
    """Assess one portfolio: capital, cover costs and a report.

    Reads PORTFOLIO, checks and fits its records, computes the annual loss with independent engines
    that must agree, and writes assessment.json, report.html, tables.xlsx and manifest.json into DIR.
    """
    from lossagg.batch import assess_folder
    from lossagg.commands.terminal import print_summary, progress_bar, warn
    from lossagg.report.summary import summarise

    with progress_bar() as progress:
        outcome = assess_folder(
            portfolio,
            out,
            years=years,
            seed=seed,
            workers=workers,
            command=("lossagg", *sys.argv[1:]),
            progress=progress,
        )
    warn(outcome.warnings)
    print_summary(summarise(outcome.assessment, out))
    return 1 if outcome.withheld else 0
