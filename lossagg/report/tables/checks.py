"""Tables of a check: the data window of each line, and one row for each portfolio of a folder."""

from __future__ import annotations

from collections.abc import Sequence

from lossagg.report.cells import Absent, Cell, Column, Table
from lossagg.report.reading import Entry

SEVERITIES = {"stop": "stop", "set aside": "set aside", "warning": "warnings", "normalised": "normalised"}


def windows(lines: Sequence[Entry], currency: str) -> Table:
    """The years of each line and the level that they support by themselves."""
    rows: list[tuple[Cell, ...]] = []
    for line in lines:
        window = line["window"]
        if window is None:
            words = "laws given" if line["source"] == "given" else "stopped"
            rows.append((line["name"], Absent(words), *[""] * 6))
            continue
        rows.append(
            (
                line["name"],
                str(window["first_year"]),
                window["until"],
                window["years"],
                window["events"],
                window["complete_above"] or Absent("none"),
                window["supported_level"],
                line["exposure"] or Absent("none"),
            )
        )
    columns = (
        Column("Line"),
        Column("First year"),
        Column("Observed until"),
        Column("Years", "number"),
        Column("Events", "count"),
        Column("Complete above, trended", "amount"),
        Column("Level supported", "level"),
        Column("Exposure"),
    )
    notes = (
        "Level supported: 1 - 1 / years. What is computed beyond it follows from the chosen law, not from "
        "experience.",
    )
    return Table("Data window", f"Data window, {currency}", columns, tuple(rows), notes)


def portfolios(entries: Sequence[Entry]) -> Table:
    """One row for each portfolio of a folder: whether it can be used, and how much was found."""
    rows = tuple(
        (
            entry["folder"],
            entry["portfolio"]["name"],
            entry["status"],
            *(entry["counts"][severity] for severity in SEVERITIES),
            sum(line["records"]["read"] for line in entry["lines"] if line["records"]),
            sum(line["records"]["used"] for line in entry["lines"] if line["records"]),
        )
        for entry in entries
    )
    columns = (
        Column("Folder"),
        Column("Portfolio"),
        Column("Status"),
        *(Column(heading.capitalize(), "count") for heading in SEVERITIES.values()),
        Column("Rows read", "count"),
        Column("Rows used", "count"),
    )
    return Table("Portfolios", "Portfolios checked", columns, rows)
