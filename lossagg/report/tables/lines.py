"""Tables of the lines: their laws, expected annual loss and measures by level."""

from __future__ import annotations

from lossagg.report import digits
from lossagg.report.cells import Absent, Cell, Column, Estimated, Ranged, Table, clean
from lossagg.report.reading import Assessment, Entry, doubts, marked, moment, reasons
from lossagg.report.tables.totals import level_row

GIVEN = "given, not estimated"


def law_text(law: Entry) -> str:
    """A law with its parameters and their standard errors in one short text."""
    if law["parameters"] is None:
        return clean(law["family"])
    errors = law["standard_errors"] or {}
    parts = [
        f"{name} {digits.with_error(value, errors.get(name))}" for name, value in law["parameters"].items()
    ]
    return clean(f"{law['family']}: {', '.join(parts)}")


def overview(assessment: Assessment) -> Table:
    """Every line with its laws, expected number of losses, expected annual loss and spread."""
    currency = assessment["portfolio"]["currency"]
    rows: list[tuple[Cell, ...]] = []
    for line in assessment["lines"]:
        count, size = line["frequency"], line["severity"]
        engine, subject = line["levels"][0]["var"]["engine"], f"line {line['name']}"
        rows.append(
            (
                line["name"],
                law_text(count),
                law_text(size),
                Estimated(count["mean"], (count["standard_errors"] or {}).get("mean")),
                _mean_loss(assessment, line),
                moment(assessment, subject, "mean", line["mean"], engine),
                moment(assessment, subject, "sd", line["sd"], engine),
                _tail(size),
            )
        )
    columns = (
        Column("Line"),
        Column("Frequency"),
        Column("Severity"),
        Column("Losses a year", "number"),
        Column("Mean loss", "money"),
        Column("Expected annual loss", "money", ranged=True),
        Column("Standard deviation", "money", ranged=True),
        Column("Tail index", "number"),
    )
    notes = (
        f"Amounts in {currency}, gross, at the exposure of the forecast period. ± is one standard error.",
        "Tail index: moments of this order and above do not exist.",
        *doubts(assessment, [f"line {line['name']}" for line in assessment["lines"]]),
        *_expenses(assessment["lines"]),
    )
    return Table("Lines", f"Lines, {currency}", columns, tuple(rows), notes)


def _mean_loss(assessment: Assessment, line: Entry) -> Cell:
    if line["severity"]["mean"] is None:
        return Absent("does not exist")
    return marked(Ranged(line["severity"]["mean"], None, None), assessment, f"line {line['name']}")


def _expenses(entries: list[Entry]) -> tuple[str, ...]:
    """Which annual amounts include adjustment expense."""
    return tuple(
        f"{clean(line['name'])}: annual amounts include adjustment expense of {100 * line['expense']:.4g} % "
        "of every loss; the mean loss does not."
        for line in entries
        if line.get("expense")
    )


def _tail(size: Entry) -> Cell:
    value = size["tail_index"]
    if value is None:
        return Absent("all moments exist")
    errors = size["standard_errors"] or {}
    return Estimated(value, errors.get("alpha") or errors.get("shape"))


def levels(assessment: Assessment) -> Table:
    """Value at risk and tail value at risk of each line by itself, gross."""
    currency = assessment["portfolio"]["currency"]
    rows = tuple(
        (line["name"], *level_row(row, assessment, f"line {line['name']}"))
        for line in assessment["lines"]
        for row in line["levels"]
    )
    columns = (
        Column("Line"),
        Column("Level", "level"),
        Column("Return period", "period"),
        Column("VaR", "money", ranged=True),
        Column("TVaR", "money", ranged=True),
    )
    notes = (
        *reasons([cell for row in rows for cell in row]),
        *doubts(assessment, [f"line {line['name']}" for line in assessment["lines"]]),
        "Lines stand alone here; they do not add up.",
    )
    return Table("Line levels", f"Lines by level, gross, {currency}", columns, rows, notes)
