"""Checking one portfolio, or every portfolio of a folder in one loop; nothing is modelled."""

from __future__ import annotations

from datetime import UTC, datetime
from pathlib import Path
from typing import TYPE_CHECKING, Any

from lossagg.batch.failure import explain
from lossagg.batch.run import PORTFOLIO_FILE, find_portfolios
from lossagg.batch.single import Progress, silent
from lossagg.batch.twins import twins_of
from lossagg.version import __version__

if TYPE_CHECKING:
    from lossagg.portfolio.schema import PortfolioFile


def check_folder(
    folder: str | Path,
    out: str | Path | None = None,
    *,
    command: tuple[str, ...] = (),
    progress: Progress = silent,
) -> tuple[dict[str, Any], Path | None]:
    """Check a portfolio, or all portfolios of a folder, and write the report if a folder is given for it.

    Args:
        folder: a portfolio, its portfolio file, or a folder that holds one folder per portfolio.
        out: the folder for the results; absent, empty or holding an earlier check.
        command: the command line, for the manifest.
        progress: called with what is done and the fraction, 0 to 1.

    Returns:
        The dictionary of format "lossagg.check/1", or "lossagg.check-folder/1" for several; and the folder
        written.

    Raises:
        InputError: there is no portfolio, or the output folder is taken.
        EnvironmentFault: a portfolio checked alone cannot be opened, or the results cannot be written.
    """
    from lossagg.portfolio.checking import check_portfolio
    from lossagg.records.trail import TEXTS
    from lossagg.report.checking import write_check
    from lossagg.report.folder import CHECK_FILES, check_destination
    from lossagg.report.manifest import RunFacts
    from lossagg.report.trail import trail_csv

    started, source = datetime.now(UTC), Path(folder)
    if out is not None:
        check_destination(Path(out), CHECK_FILES)
    facts = RunFacts(started=started, command=command)
    if not (source.is_file() or (source / PORTFOLIO_FILE).is_file()):
        check = _check_all(source, progress)
        return check, None if out is None else write_check(check, out, facts=facts)
    if out is None:
        return check_portfolio(source, further=_check_options), None
    trail: list[Any] = []
    check = check_portfolio(source, further=_check_options, trail=trail)
    return check, write_check(check, out, trail=trail_csv(trail, TEXTS) or None, facts=facts)


def exit_code(check: dict[str, Any]) -> int:
    """0 when all can be assessed; 2 for one that cannot, 1 for a folder that holds such or for control
    totals that are not met."""
    if check["status"] == "usable":
        return 0
    return 2 if check["status"] == "stopped" and "portfolios" not in check else 1


def _check_options(file: PortfolioFile) -> None:
    """Check the options of a portfolio file; one without any loads nothing of the engines."""
    if file.option or file.option_grid is not None or file.pricing.lines is not None:
        from lossagg.pricing.checking import check_options

        check_options(file)


def _check_all(folder: Path, progress: Progress) -> dict[str, Any]:
    names = find_portfolios(folder)
    parts = []
    for place, name in enumerate(names):
        progress(f"{place} of {len(names)} portfolios", place / len(names))
        parts.append({"folder": name, **_checked(folder / name)})
    _stop_twins(folder, parts)
    statuses = [part["status"] for part in parts]
    return {
        "format": "lossagg.check-folder/1",
        "status": next((status for status in ("stopped", "withheld") if status in statuses), "usable"),
        "counts": {status: statuses.count(status) for status in ("usable", "withheld", "stopped")},
        "run": {"version": __version__},
        "portfolios": parts,
    }


def _stop_twins(folder: Path, parts: list[dict[str, Any]]) -> None:
    """Stop portfolios that bear one name: a batch would not begin."""
    from lossagg.records import Finding

    twins = twins_of(folder, [part["folder"] for part in parts], PORTFOLIO_FILE)
    for part in parts:
        others = [f"{name}/{PORTFOLIO_FILE}" for name in twins.get(part["folder"], ())]
        if others:
            found = Finding(
                "same-name",
                "stop",
                PORTFOLIO_FILE,
                None,
                None,
                part["portfolio"]["name"],
                f"the portfolio bears the name of that in {' and '.join(others)}",
                "Give each its own name; if one is a copy, take it out of the folder.",
                count=0,
            )
            part["findings"].insert(part["counts"]["stop"], found.to_dict())
            part["counts"]["stop"] += 1
            part["status"] = "stopped"


def _checked(path: Path) -> dict[str, Any]:
    """The check of one portfolio of several; whatever stops it does not stop the others."""
    from lossagg.portfolio.checking import check_portfolio, stopped_check

    try:
        return check_portfolio(path, further=_check_options)
    # The outermost boundary of one portfolio: the others must be checked whatever it is.
    except Exception as error:  # noqa: BLE001
        failure = explain(error)
        return stopped_check(path, failure.what, failure.where, failure.remedy)
