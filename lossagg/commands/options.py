"""Arguments that several commands share, each described once."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

Out = Annotated[
    Path,
    typer.Option(
        "--out",
        metavar="DIR",
        help="Folder for the results: new, empty, or holding earlier results of lossagg.",
    ),
]
Years = Annotated[
    int | None,
    typer.Option(
        "--years", metavar="N", min=1, help="Simulated years; 1,000,000 if not given.", show_default=False
    ),
]
Seed = Annotated[
    int, typer.Option("--seed", metavar="S", min=0, help="Seed of the simulation: same seed, same bytes.")
]
Workers = Annotated[
    int | None,
    typer.Option(
        "--workers",
        metavar="W",
        min=1,
        help="Most processors used; all if not given. The figures do not depend on it.",
        show_default=False,
    ),
]
