"""Starting a portfolio from a table of losses."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Any

from lossagg.errors import InputError


@dataclass(frozen=True)
class Started:
    """A portfolio that was started.

    Attributes:
        folder: its folder, as an absolute path.
        assumptions: what it assumes, each with `key`, `assumed` and `why`.
        check: the check of it as it stands, format "lossagg.check/1".
    """

    folder: Path
    assumptions: tuple[Any, ...]
    check: dict[str, Any]


def start_portfolio(
    folder: str | Path,
    source: str | Path,
    *,
    sheet: str | None = None,
    encoding: str | None = None,
    delimiter: str | None = None,
) -> Started:
    """Propose how a table of losses may be read, and write a folder with a copy of it and a portfolio file.

    Args:
        folder: the new folder; absent or empty.
        source: the table, CSV, TSV, XLSX or Parquet.
        sheet, encoding, delimiter: what the table does not show by itself.

    Raises:
        InputError: the folder holds files, or the table cannot be read as one of losses.
        EnvironmentFault: the table cannot be read or the folder not written.
    """
    from lossagg.portfolio.checking import check_portfolio
    from lossagg.portfolio.files import PORTFOLIO_FILE
    from lossagg.portfolio.starting import assumptions, portfolio_text
    from lossagg.records.propose import propose_reading
    from lossagg.report.folder import check_destination, disk_errors, publish

    target, table = Path(folder), Path(source)
    _require_empty(target)
    check_destination(target, (PORTFOLIO_FILE, table.name))
    proposal = propose_reading(table, sheet=sheet, encoding=encoding, delimiter=delimiter)
    text = portfolio_text(proposal, target.resolve().name)
    with disk_errors(target):
        content = table.read_bytes()
    publish(target, {PORTFOLIO_FILE: text.encode(), table.name: content})
    return Started(target.resolve(), assumptions(proposal), check_portfolio(target))


def _require_empty(folder: Path) -> None:
    if folder.is_dir() and any(folder.iterdir()):
        raise InputError(
            "the folder of a new portfolio is not empty",
            where=f"folder {folder}",
            remedy="Name a folder that does not exist yet.",
        )
