"""One portfolio, from its folder to its report."""

from __future__ import annotations

import warnings
from collections.abc import Callable
from contextlib import nullcontext
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path
from threading import Thread
from typing import Any

from lossagg.errors import LossaggWarning

Progress = Callable[[str, float], None]


@dataclass(frozen=True)
class Outcome:
    """An assessment that was written.

    Attributes:
        assessment: the dictionary of format "lossagg.assessment/1".
        out: the folder written, as an absolute path.
        warnings: texts of the warnings given on the way.
    """

    assessment: dict[str, Any]
    out: Path
    warnings: tuple[str, ...] = ()

    @property
    def withheld(self) -> bool:
        """True when the headline is withheld."""
        return bool(self.assessment["headline"]["withheld"])


def silent(stage: str, done: float) -> None:
    """No progress shown."""


def assess_folder(
    portfolio: str | Path,
    out: str | Path,
    *,
    years: int | None = None,
    seed: int = 1,
    workers: int | None = None,
    until: float | None = None,
    annual: Path | None = None,
    cluster: str | None = None,
    command: tuple[str, ...] = (),
    progress: Progress = silent,
) -> Outcome:
    """Read a portfolio, assess it and write its report.

    The output folder is checked first, so that no time is spent on results that could not be kept.

    Args:
        portfolio: the folder of the portfolio, or its portfolio file.
        out: the folder for the results; absent, empty or holding an earlier result.
        years: simulated years; the default of the portfolio when `None`.
        seed: seed of the simulation.
        workers: most processors used; all when `None`. The figures do not depend on it.
        until: simulate until the interval of the capital figure reaches no further than this part of it
            to either side.
        annual: a Parquet file to receive every simulated year.
        cluster: address of the scheduler of a running cluster that is to simulate the years.
        command: the command line, for the manifest.
        progress: called with the stage and the fraction done, 0 to 1.

    Raises:
        InputError: something in the portfolio cannot be used, or the output folder is taken.
        FitError: the records support none of the laws asked for.
        EngineError: the portfolio is beyond the engines.
        EnvironmentFault: the results cannot be written, or the cluster cannot be used.
    """
    from lossagg.engines.executors import cluster as running
    from lossagg.portfolio import read_portfolio
    from lossagg.pricing import options_of_assessment
    from lossagg.report import RunFacts, check_destination, load_writing, write_assessment

    started = datetime.now(UTC)
    check_destination(Path(out))
    asked: dict[str, Any] = {} if years is None else {"years": years}
    with warnings.catch_warnings(record=True) as caught:
        warnings.simplefilter("always", LossaggWarning)
        progress("reading", 0.0)
        read = read_portfolio(portfolio, pricer=options_of_assessment)
        Thread(target=load_writing).start()
        with running(cluster) if cluster else nullcontext() as executor:
            document = read.assess(
                seed=seed,
                workers=workers,
                until=until,
                annual=annual,
                executor=executor,
                progress=progress,
                **asked,
            ).to_dict()
    texts = tuple(f"{entry.category.__name__}: {entry.message}" for entry in caught)
    progress("writing", 0.9)
    facts = RunFacts(started=started, command=command, warnings=texts, workers=workers)
    return Outcome(document, write_assessment(document, out, facts=facts), texts)
