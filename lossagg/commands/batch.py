"""`lossagg batch`: every portfolio of a folder."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

from lossagg.commands.boundary import guarded
from lossagg.commands.options import Out, Seed, Workers, Years


@guarded
def batch(
    folder: Annotated[
        Path, typer.Argument(metavar="FOLDER", help="Folder that holds one folder per portfolio.")
    ],
    out: Out,
    years: Years = None,
    seed: Seed = 1,
    workers: Workers = None,
) -> int:
    """Assess every portfolio of a folder, each in its own process.

    One that fails does not stop the others. Writes a folder per portfolio, index.html and batch.json
    into DIR.
    """
    from lossagg.batch import run_batch
    from lossagg.commands.terminal import print_batch, progress_bar

    with progress_bar() as progress:
        outcome = run_batch(folder, out, years=years, seed=seed, workers=workers, progress=progress)
    print_batch(outcome)
    return outcome.exit_code
