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
Until = Annotated[
    str | None,
    typer.Option(
        "--until",
        metavar="PART",
        help="Simulate until the 95 % interval of the capital figure reaches no further than this to either "
        "side, such as 0.5%. A pilot says first how long it will take. Not together with --years.",
        show_default=False,
    ),
]
Annual = Annotated[
    Path | None,
    typer.Option(
        "--annual",
        metavar="FILE",
        help="Parquet file for every simulated year, by line and cover.",
        show_default=False,
    ),
]
Cluster = Annotated[
    str | None,
    typer.Option(
        "--cluster",
        metavar="ADDRESS",
        help="Simulate on a running cluster: the address of its scheduler, such as tcp://host:8786. The "
        "figures do not depend on it.",
        show_default=False,
    ),
]


def part_of(text: str) -> float:
    """A part given as "0.5%" or as "0.005".

    Raises:
        InputError: anything else, or a part that is not between 0 and 1.
    """
    from lossagg.errors import InputError

    number = text.strip().removesuffix("%")
    try:
        part = float(number) / (100.0 if text.strip().endswith("%") else 1.0)
    except ValueError:
        part = float("nan")
    if not 0.0 < part < 1.0:
        raise InputError(
            "--until must be a part between 0 and 100%", value=text, remedy="Write --until 0.5%, for example."
        )
    return part
