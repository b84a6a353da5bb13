"""The files of a portfolio folder: each is read once, also where several lines share it."""

from __future__ import annotations

import hashlib
from dataclasses import dataclass, replace
from pathlib import Path

from lossagg.errors import InputError
from lossagg.portfolio.assessment import Data
from lossagg.portfolio.file_readers import (
    PORTFOLIO_FILE,
    counts_of,
    exposure_of,
    index_of,
    losses_of,
    previous_of,
    rates_of,
)
from lossagg.portfolio.schema import LineSection, PortfolioFile
from lossagg.records import (
    CheckedLosses,
    CountTable,
    ExposureTable,
    Finding,
    LossTable,
    RateTable,
    TrendIndex,
    check_losses,
    convert_losses,
    ground_up_losses,
    line_rows,
    no_records,
    undeclared_deductibles,
)


@dataclass(frozen=True)
class LineRecords:
    """The checked records of one line, with what stands beside them: exposure, index of trend, the records
    of the previous quarter, counts by year."""

    losses: CheckedLosses
    exposure: ExposureTable | None
    index: TrendIndex | None = None
    previous: CheckedLosses | None = None
    counts: CountTable | None = None


def portfolio_file(path: Path) -> tuple[Path, Path]:
    """The folder and the portfolio file meant by a path to either.

    Raises:
        InputError: there is no such folder or file.
    """
    if path.is_dir():
        return path, path / PORTFOLIO_FILE
    if path.is_file():
        return path.parent, path
    raise InputError(
        "there is no such portfolio", value=str(path), remedy=f"Name a folder that holds {PORTFOLIO_FILE}."
    )


def read_records(folder: Path, file: PortfolioFile) -> tuple[dict[str, LineRecords], tuple[Data, ...]]:
    """Read and check the records and exposures of every line.

    Returns:
        The records by line, and path, SHA-256 and rows of every file read, the portfolio file first.

    Raises:
        InputError: a file outside the folder, missing, or read by two lines in two ways; anything the
            checks of the records stop at.
    """
    inputs = [_portfolio_input(folder)]
    rates = rates_of(folder, file)
    checked: dict[str, CheckedLosses] = {}
    previous: dict[str, CheckedLosses] = {}
    for name, sharers in _by_file(file.line, "records").items():
        table = losses_of(folder, name, sharers[0], file)
        inputs.append({"path": name, "sha256": table.sha256, "rows": table.rows})
        checked |= _check(_as_modelled(table, sharers, file, rates), sharers, file)
        if sharers[0].previous is not None:
            table = previous_of(folder, sharers[0], file)
            inputs.append({"path": table.file, "sha256": table.sha256, "rows": table.rows})
            # Its faults were those of the quarter before: it is not held to the tolerance again.
            previous |= _check(_as_modelled(table, sharers, file, rates), sharers, file, tolerance=1.0)
    for line in file.line:
        if line.records is None and line.without_losses:
            checked |= _check(no_records(PORTFOLIO_FILE), [line], file)
    exposures: dict[str, ExposureTable] = {}
    for name, sharers in _by_file(file.line, "exposure").items():
        exposure = exposure_of(folder, name, sharers, file)
        inputs.append({"path": name, "sha256": exposure.sha256, "rows": exposure.rows})
        exposures |= {line.name: exposure.for_line(line.name) for line in sharers}
    indices: dict[str, TrendIndex] = {}
    for name, sharers in _by_file(file.line, "trend_index").items():
        index = index_of(folder, name, sharers)
        inputs.append({"path": name, "sha256": index.sha256, "rows": index.rows})
        indices |= {line.name: index for line in sharers}
    counts: dict[str, CountTable] = {}
    for name, sharers in _by_file(file.line, "counts").items():
        stated = counts_of(folder, name, sharers)
        inputs.append({"path": name, "sha256": stated.sha256, "rows": stated.rows})
        counts |= {line.name: stated.for_line(line.name) for line in sharers}
    if rates is not None:
        inputs.append({"path": file.portfolio.rates, "sha256": rates.sha256, "rows": rates.rows})
    records = {
        name: LineRecords(
            losses, exposures.get(name), indices.get(name), previous.get(name), counts.get(name)
        )
        for name, losses in checked.items()
    }
    return records, tuple(inputs)


def _portfolio_input(folder: Path) -> Data:
    content = (folder / PORTFOLIO_FILE).read_bytes()
    return {
        "path": PORTFOLIO_FILE,
        "sha256": hashlib.sha256(content).hexdigest(),
        "rows": content.count(b"\n"),
    }


def _by_file(lines: tuple[LineSection, ...], kind: str) -> dict[str, list[LineSection]]:
    """The lines that share each file, in the order of the portfolio file."""
    sharers: dict[str, list[LineSection]] = {}
    for line in lines:
        name = getattr(line, kind)
        if name is not None:
            sharers.setdefault(name, []).append(line)
    return sharers


def _as_modelled(
    table: LossTable, sharers: list[LineSection], file: PortfolioFile, rates: RateTable | None
) -> LossTable:
    """The table in the currency of the portfolio and from the ground up, before it is checked."""
    if rates is not None and "currency" in table.words:
        table = convert_losses(table, rates, file.portfolio.currency)
    elif rates is not None:
        table = replace(table, findings=(*table.findings, _unconverted(table, file.portfolio.currency)))
    for line in sharers:
        if line.amount_basis == "excess":
            rows = line_rows(table, line.name if len(sharers) > 1 else None)
            threshold = line.reporting_threshold or 0.0
            table = ground_up_losses(table, rows, deductible=line.deductible, reporting_threshold=threshold)
    if all(line.amount_basis is None for line in sharers):
        table = replace(table, findings=(*table.findings, *undeclared_deductibles(table)))
    return table


def _unconverted(table: LossTable, currency: str) -> Finding:
    return Finding(
        "no-currency-column",
        "warn",
        table.file,
        None,
        None,
        None,
        f"the portfolio has rates, but these records name no currency: every amount is taken as {currency}",
        "None needed if that is so; else map the column that names the currency.",
        sheet=table.sheet,
        count=0,
    )


def _check(
    table: LossTable, sharers: list[LineSection], file: PortfolioFile, tolerance: float | None = None
) -> dict[str, CheckedLosses]:
    section = file.portfolio
    names = [line.name for line in sharers]
    checked = check_losses(
        table,
        valuation_date=section.valuation_date,
        currency=section.currency,
        lines=names if len(names) > 1 else None,
        first_year={line.name: line.first_year for line in sharers}
        if len(names) > 1
        else sharers[0].first_year,
        tolerance=section.tolerance if tolerance is None else tolerance,
        reporting_threshold={line.name: line.lowest_recorded for line in sharers}
        if len(names) > 1
        else sharers[0].lowest_recorded,
    )
    if len(names) == 1:
        return {names[0]: checked}
    return {name: checked.for_line(name) for name in names}


__all__ = ["PORTFOLIO_FILE", "LineRecords", "portfolio_file", "read_records"]
