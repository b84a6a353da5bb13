"""Reading the files that a portfolio names: each lies in its folder, and is read in one way by all lines."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

from lossagg.errors import InputError, place
from lossagg.portfolio.schema import LineSection, PortfolioFile
from lossagg.records import (
    CountTable,
    ExposureTable,
    LossTable,
    RateTable,
    TrendIndex,
    read_counts,
    read_exposure,
    read_losses,
    read_rates,
    read_trend_index,
)

PORTFOLIO_FILE = "portfolio.toml"


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


def losses_of(
    folder: Path, name: str, line: LineSection, file: PortfolioFile, key: str = "records"
) -> LossTable:
    """The loss records of a file that lines share, read in the one way all of them declare."""
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
        may_be_empty=all(other.without_losses for other in file.line if other.records == name),
    )


def previous_of(folder: Path, line: LineSection, file: PortfolioFile) -> LossTable:
    """The records of the previous quarter, under the name by which the portfolio file calls them."""
    assert line.previous is not None
    table = losses_of(folder, line.previous.records, line, file, key="previous.records")
    return replace(table, file=line.previous.records)


def rates_of(folder: Path, file: PortfolioFile) -> RateTable | None:
    """The rates of exchange of the portfolio, None where there are none."""
    section = file.portfolio
    if section.rates is None:
        return None
    path = _inside(folder, section.rates, "portfolio.rates")
    return read_rates(path, currency=section.currency, columns=section.rates_columns)


def index_of(folder: Path, name: str, sharers: list[LineSection]) -> TrendIndex:
    """An index of trend that lines share."""
    columns = _same_columns(sharers, "trend_index")
    return read_trend_index(_inside(folder, name, "trend-index"), columns=columns)


def counts_of(folder: Path, name: str, sharers: list[LineSection]) -> CountTable:
    """Counts by year that lines share."""
    columns = _same_columns(sharers, "counts")
    table = read_counts(_inside(folder, name, "counts"), columns=columns)
    if len(sharers) > 1 and set(table.line) <= {""}:
        raise InputError(
            "lines share a file of counts that does not tell them apart",
            where=place(file=PORTFOLIO_FILE, key="counts"),
            value=", ".join(line.name for line in sharers),
            remedy="Add a column line, or give each line a file of its own.",
        )
    return table


def _same_columns(sharers: list[LineSection], kind: str) -> dict[str, str]:
    """The headings of a file that lines share, which they must all name alike."""
    columns: dict[str, str] = getattr(sharers[0], f"{kind}_columns")
    if any(getattr(line, f"{kind}_columns") != columns for line in sharers):
        raise InputError(
            "two lines read the same file in two ways",
            where=place(file=PORTFOLIO_FILE, key=f"{kind}-columns".replace("_", "-")),
            value=", ".join(line.name for line in sharers),
            remedy="Give all of them the same columns, or each a file of its own.",
        )
    return columns


def exposure_of(folder: Path, name: str, sharers: list[LineSection], file: PortfolioFile) -> ExposureTable:
    """Exposures that lines share."""
    columns = {**sharers[0].exposure_columns}
    if len(sharers) > 1 and "line" in file.columns:
        columns.setdefault("line", file.columns["line"])
    return read_exposure(
        _inside(folder, name, "exposure"),
        columns=columns,
        lines=[line.name for line in file.line] if len(sharers) > 1 else None,
    )
