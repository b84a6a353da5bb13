"""`lossagg assess`: one portfolio, from its records to its report."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Annotated

import typer

from lossagg.commands.boundary import guarded
from lossagg.commands.options import Annual, Cluster, Out, Seed, Until, Workers, Years, part_of


@guarded
def assess(
    portfolio: Annotated[Path, typer.Argument(metavar="PORTFOLIO", help="Folder with a portfolio.toml.")],
    out: Out,
    years: Years = None,
    seed: Seed = 1,
    workers: Workers = None,
    until: Until = None,
    annual: Annual = None,
    cluster: Cluster = None,
) -> int:
    """Assess one portfolio: capital, cover costs and a report.

    Reads PORTFOLIO, checks and fits its records, computes the annual loss with independent engines
    that must agree, and writes assessment.json, report.html, tables.xlsx and manifest.json into DIR.
    """
    from lossagg.batch import assess_folder
    from lossagg.commands.terminal import notes_shown, print_summary, progress_bar, warn
    from lossagg.errors import InputError
    from lossagg.report.summary import summarise

    if until is not None and years is not None:
        raise InputError(
            "--until decides how many years are simulated",
            value=f"--years {years}",
            remedy="Give one of the two.",
        )
    with notes_shown(always=until is not None), progress_bar() as progress:
        outcome = assess_folder(
            portfolio,
            out,
            years=years,
            seed=seed,
            workers=workers,
            until=None if until is None else part_of(until),
            annual=annual,
            cluster=cluster,
            command=("lossagg", *sys.argv[1:]),
            progress=progress,
        )
    warn(outcome.warnings)
    print_summary(summarise(outcome.assessment, out))
    return 1 if outcome.withheld else 0
