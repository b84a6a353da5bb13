"""`lossagg replay`: one simulated year, from its events to what each cover paid, and why."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

from lossagg.commands.boundary import guarded


@guarded
def replay(
    assessment: Annotated[
        Path, typer.Argument(metavar="ASSESSMENT", help="An assessment.json, or the folder that holds it.")
    ],
    year: Annotated[int, typer.Option("--year", metavar="N", help="Number of the simulated year, from 1.")],
    events: Annotated[
        int | None,
        typer.Option(
            "--events",
            metavar="K",
            min=1,
            help="Show the K largest events only, the others summed up; all if not given.",
            show_default=False,
        ),
    ] = None,
) -> int:
    """Reconstruct one simulated year from an assessment alone.

    Prints its events line by line, what each cover paid of each event and of the year, and how: term by
    term, in the order in which the terms act. The sums are the simulated annual figures, to the cent.
    """
    from lossagg.commands.terminal import print_tables
    from lossagg.portfolio.years import read_assessment, replay_assessment, year_data
    from lossagg.report.tables import years

    document = read_assessment(assessment)
    found = year_data(replay_assessment(document, year), events=events)
    print_tables(years.replayed(found, document["portfolio"]["currency"]))
    return 0
