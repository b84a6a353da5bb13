"""The files of a portfolio folder: each is read once, also where several lines share it."""

from __future__ import annotations

import hashlib
from dataclasses import dataclass, replace
from pathlib import Path

from lossagg.errors import InputError, place
from lossagg.portfolio.assessment import Data
from lossagg.portfolio.schema import LineSection, PortfolioFile
from lossagg.records import (
    CheckedLosses,
    ExposureTable,
    LossTable,
    RateTable,
    TrendIndex,
    check_losses,
    convert_losses,
    ground_up_losses,
    line_rows,
    read_exposure,
    read_losses,
    read_rates,
    read_trend_index,
    undeclared_deductibles,
)

PORTFOLIO_FILE = "portfolio.toml"


@dataclass(frozen=True)
class LineRecords:
    """The checked records of one line, with what stands beside them: exposure, index of trend, the records
    of the previous quarter."""

    losses: CheckedLosses
    exposure: ExposureTable | None
    index: TrendIndex | None = None
    previous: CheckedLosses | None = None


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
    rates = _read_rates(folder, file)
    checked: dict[str, CheckedLosses] = {}
    previous: dict[str, CheckedLosses] = {}
    for name, sharers in _by_file(file.line, "records").items():
        table = _read_losses(folder, name, sharers[0], file)
        inputs.append({"path": name, "sha256": table.sha256, "rows": table.rows})
        checked |= _check(_as_modelled(table, sharers, file, rates), sharers, file)
        if sharers[0].previous is not None:
            table = _read_previous(folder, sharers[0], file)
            inputs.append({"path": table.file, "sha256": table.sha256, "rows": table.rows})
            # Its faults were those of the quarter before: it is not held to the tolerance again.
            previous |= _check(_as_modelled(table, sharers, file, rates), sharers, file, tolerance=1.0)
    exposures: dict[str, ExposureTable] = {}
    for name, sharers in _by_file(file.line, "exposure").items():
        exposure = _read_exposure(folder, name, sharers, file)
        inputs.append({"path": name, "sha256": exposure.sha256, "rows": exposure.rows})
        exposures |= {line.name: exposure.for_line(line.name) for line in sharers}
    indices: dict[str, TrendIndex] = {}
    for name, sharers in _by_file(file.line, "trend_index").items():
        index = _read_index(folder, name, sharers)
        inputs.append({"path": name, "sha256": index.sha256, "rows": index.rows})
        indices |= {line.name: index for line in sharers}
    if rates is not None:
        inputs.append({"path": file.portfolio.rates, "sha256": rates.sha256, "rows": rates.rows})
    records = {
        name: LineRecords(losses, exposures.get(name), indices.get(name), previous.get(name))
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


def _inside(folder: Path, name: str, key: str) -> Path:
    """The path of a file that must lie in the portfolio folder."""
    path = folder / name
    if not path.resolve().is_relative_to(folder.resolve()):
        raise InputError(
            "a file of the portfolio must lie in its folder",
            where=place(file=PORTFOLIO_FILE, key=key),
            value=name,
            remedy="Copy it there and give its name.",
        )
    if not path.is_file():
        raise InputError(
            "there is no such file",
            where=place(file=PORTFOLIO_FILE, key=key),
            value=name,
            remedy="Names are relative to the portfolio folder.",
        )
    return path


_READING = (
    *("columns", "sheet", "delimiter", "encoding", "decimal", "thousands", "grouping", "date_format"),
    *("time_zone", "previous"),
)


def _read_losses(
    folder: Path, name: str, line: LineSection, file: PortfolioFile, key: str = "records"
) -> LossTable:
    for other in file.line:
        if other.records == name and any(getattr(other, part) != getattr(line, part) for part in _READING):
            raise InputError(
                "two lines read the same file in two ways",
                where=place(file=PORTFOLIO_FILE, key="records"),
                value=f"{line.name}, {other.name}",
                remedy="Give both the same columns, sheet, delimiter, encoding, formats and previous.",
            )
    return read_losses(
        _inside(folder, name, key),
        columns={**file.columns, **line.columns},
        sheet=line.sheet,
        encoding=line.encoding,
        delimiter=line.delimiter,
        decimal=line.decimal,
        thousands=line.thousands,
        grouping=line.grouping,
        date_format=line.date_format,
        time_zone=line.time_zone,
    )


def _read_previous(folder: Path, line: LineSection, file: PortfolioFile) -> LossTable:
    """The records of the previous quarter, under the name by which the portfolio file calls them."""
    assert line.previous is not None
    table = _read_losses(folder, line.previous.records, line, file, key="previous.records")
    return replace(table, file=line.previous.records)


def _read_rates(folder: Path, file: PortfolioFile) -> RateTable | None:
    section = file.portfolio
    if section.rates is None:
        return None
    path = _inside(folder, section.rates, "portfolio.rates")
    return read_rates(path, currency=section.currency, columns=section.rates_columns)


def _read_index(folder: Path, name: str, sharers: list[LineSection]) -> TrendIndex:
    if any(line.trend_index_columns != sharers[0].trend_index_columns for line in sharers):
        raise InputError(
            "two lines read the same index in two ways",
            where=place(file=PORTFOLIO_FILE, key="trend-index-columns"),
            value=", ".join(line.name for line in sharers),
            remedy="Give all of them the same columns, or each a file of its own.",
        )
    return read_trend_index(_inside(folder, name, "trend-index"), columns=sharers[0].trend_index_columns)


def _as_modelled(
    table: LossTable, sharers: list[LineSection], file: PortfolioFile, rates: RateTable | None
) -> LossTable:
    """The table in the currency of the portfolio and from the ground up, before it is checked."""
    if rates is not None and "currency" in table.words:
        table = convert_losses(table, rates, file.portfolio.currency)
    for line in sharers:
        if line.amount_basis == "excess":
            rows = line_rows(table, line.name if len(sharers) > 1 else None)
            threshold = line.reporting_threshold or 0.0
            table = ground_up_losses(table, rows, deductible=line.deductible, reporting_threshold=threshold)
    if all(line.amount_basis is None for line in sharers):
        table = replace(table, findings=(*table.findings, *undeclared_deductibles(table)))
    return table


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


def _read_exposure(folder: Path, name: str, sharers: list[LineSection], file: PortfolioFile) -> ExposureTable:
    columns = {**sharers[0].exposure_columns}
    if len(sharers) > 1 and "line" in file.columns:
        columns.setdefault("line", file.columns["line"])
    return read_exposure(
        _inside(folder, name, "exposure"),
        columns=columns,
        lines=[line.name for line in file.line] if len(sharers) > 1 else None,
    )
