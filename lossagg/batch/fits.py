"""The fits of one portfolio, from its folder to their report."""

from __future__ import annotations

import warnings
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

from lossagg.batch.single import Progress, silent
from lossagg.errors import LossaggWarning


def fit_folder(
    portfolio: str | Path,
    out: str | Path,
    *,
    draws: int | None = None,
    command: tuple[str, ...] = (),
    progress: Progress = silent,
) -> tuple[dict[str, Any], Path, tuple[str, ...]]:
    """Read a portfolio, fit its lines with all evidence, and write the report of the fits.

    Args:
        portfolio: the folder of the portfolio, or its portfolio file.
        out: the folder for the results; absent, empty or holding earlier fits.
        draws: most bootstrap draws behind a p-value; 199 when `None`.
        command: the command line, for the manifest.
        progress: called with the stage and the fraction done, 0 to 1.

    Returns:
        The dictionary of format "lossagg.fit/1", the folder written, and texts of warnings.

    Raises:
        InputError: something in the portfolio cannot be used, or the output folder is taken.
        FitError: the records support none of the laws asked for.
        EngineError: a line beyond the exact engine.
        EnvironmentFault: the results cannot be written.
    """
    from lossagg.portfolio import read_portfolio
    from lossagg.portfolio.fit_report import fit_report
    from lossagg.report import RunFacts, check_destination, write_fit
    from lossagg.report.folder import FIT_FILES

    started = datetime.now(UTC)
    check_destination(Path(out), FIT_FILES)
    asked = {} if draws is None else {"draws": draws}
    with warnings.catch_warnings(record=True) as caught:
        warnings.simplefilter("always", LossaggWarning)
        progress("reading", 0.0)
        fits = fit_report(read_portfolio(portfolio), progress=progress, **asked)
    texts = tuple(f"{entry.category.__name__}: {entry.message}" for entry in caught)
    facts = RunFacts(started=started, command=command, warnings=texts)
    return fits, write_fit(fits, out, facts=facts), texts
