"""The options of one portfolio, from its folder to their table."""

from __future__ import annotations

import warnings
from collections.abc import Sequence
from datetime import UTC, datetime
from pathlib import Path
from typing import TYPE_CHECKING, Any

from lossagg.batch.single import Outcome, Progress, silent
from lossagg.errors import InputError, LossaggWarning

if TYPE_CHECKING:
    from lossagg.portfolio.pricing_sections import OptionGrid

NO_LIMIT = ("none", "inf", "unlimited")


def price_folder(
    portfolio: str | Path,
    out: str | Path,
    *,
    grid: OptionGrid | None = None,
    lines: Sequence[str] | None = None,
    base: str | None = None,
    years: int | None = None,
    seed: int = 1,
    workers: int | None = None,
    annual: Path | None = None,
    command: tuple[str, ...] = (),
    progress: Progress = silent,
) -> Outcome:
    """Read a portfolio, price its options and write their table.

    Args:
        portfolio: the folder of the portfolio, or its portfolio file.
        out: the folder for the results; absent, empty or holding an earlier table of options.
        grid: options in place of those of the file.
        lines: lines in place of those of the file.
        base: base option in place of that of the file.
        years: simulated years; the default when `None`.
        seed: seed of simulation and parameter draws.
        workers: most processors used; all when `None`. The figures do not depend on it.
        annual: a Parquet file to receive what every option keeps and cedes in the simulated years.
        command: the command line, for the manifest.
        progress: called with the stage and the fraction done, 0 to 1.

    Raises:
        InputError: something in the portfolio cannot be used, or the output folder is taken.
        FitError: the records support none of the laws asked for.
        EngineError: the portfolio is beyond the engines.
        EnvironmentFault: the results cannot be written.
    """
    from lossagg.portfolio import read_portfolio
    from lossagg.pricing import price_options
    from lossagg.report import RunFacts, check_destination, write_options
    from lossagg.report.folder import OPTION_FILES

    started = datetime.now(UTC)
    check_destination(Path(out), OPTION_FILES)
    asked: dict[str, Any] = {} if years is None else {"years": years}
    with warnings.catch_warnings(record=True) as caught:
        warnings.simplefilter("always", LossaggWarning)
        progress("reading", 0.0)
        table = price_options(
            read_portfolio(portfolio),
            grid=grid,
            lines=lines,
            base=base,
            seed=seed,
            workers=workers,
            annual=annual,
            progress=progress,
            **asked,
        )
    texts = tuple(f"{entry.category.__name__}: {entry.message}" for entry in caught)
    facts = RunFacts(started=started, command=command, warnings=texts, workers=workers)
    document = {**table, "headline": {"withheld": not table["agrees"]}}
    return Outcome(document, write_options(table, out, facts=facts), texts)


def grid_of(
    deductibles: str | None,
    limits: str | None,
    annual_retentions: str | None,
    annual_limits: str | None,
    retained_caps: str | None,
) -> OptionGrid | None:
    """A grid from lists of amounts as written on a command line; None where no list is given.

    Raises:
        InputError: a list without deductibles, or an amount that cannot be read.
    """
    texts = {
        "deductibles": deductibles,
        "limits": limits,
        "annual-retentions": annual_retentions,
        "annual-limits": annual_limits,
        "retained-caps": retained_caps,
    }
    given = {key: _amounts(text, f"--{key}") for key, text in texts.items() if text is not None}
    if not given:
        return None
    if "deductibles" not in given:
        raise InputError(
            "a grid of options needs its deductibles",
            where=f"argument --{next(iter(given))}",
            remedy="Add --deductibles, with 0 for none.",
        )
    from pydantic import ValidationError

    from lossagg.portfolio.pricing_sections import OptionGrid

    try:
        return OptionGrid.model_validate(given)
    except ValidationError as error:
        fault = error.errors()[0]
        raise InputError(
            fault["msg"][0].lower() + fault["msg"][1:],
            where=f"argument --{fault['loc'][0]}",
            value=fault["input"],
            remedy="Give amounts at or above 0; limits above 0.",
        ) from error


def _amounts(text: str, where: str) -> tuple[float, ...]:
    amounts = []
    for part in text.split(","):
        word = part.strip().lower()
        try:
            amounts.append(float("inf") if word in NO_LIMIT else float(word.replace("_", "")))
        except ValueError as error:
            raise InputError(
                "an amount cannot be read",
                where=f"argument {where}",
                value=part,
                remedy="Write amounts without thousands separators, between commas: 10000,25000.",
            ) from error
    return tuple(amounts)
