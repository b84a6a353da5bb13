"""Table of approximations beside the figures: a look at their order, never an answer."""

from __future__ import annotations

from dataclasses import replace

from lossagg.report.cells import Absent, Cell, Column, Table
from lossagg.report.reading import Assessment, Entry

NOTES = (
    "A sanity column, never the answer: two formulas that share nothing with the engines and do not know "
    "their own error. They take no part in the crosscheck.",
    "Single loss: the size that one of the year's losses exceeds with the probability of the level, plus the "
    "mean (Böcker and Klüppelberg 2005; Degen 2010). Close for heavy tails and high levels, too low where "
    "many losses make the year; dependence between lines is not in it.",
    "Translated gamma: a gamma law with the mean, standard deviation and skewness of the year (Bowers et al. "
    "1997, section 12.5). Close for many losses of moderate size, far off for heavy tails; not computed "
    "where the third moment does not exist or lines share something.",
)


def sanity(assessment: Assessment) -> Table:
    """VaR of gross and of every line, and what two formulas make of it."""
    currency = assessment["portfolio"]["currency"]
    rows = tuple(_row(entry) for entry in assessment.get("sanity", ()))
    columns = (
        Column("Subject"),
        Column("Level", "level"),
        Column("VaR reported", "money"),
        Column("Single loss", "money"),
        Column("as part of VaR", "probability"),
        Column("Translated gamma", "money"),
        Column("as part of VaR", "probability"),
    )
    title = f"Sanity column: approximations beside the value at risk, {currency}"
    return Table("Sanity column", title, columns, rows, NOTES)


def sanity_of_gross(assessment: Assessment) -> Table:
    """The same for gross only."""
    table = sanity(assessment)
    return replace(table, rows=tuple(row for row in table.rows if row[0] == "gross"))


def _row(entry: Entry) -> tuple[Cell, ...]:
    var = entry["var"]
    cells: list[Cell] = [entry["subject"], entry["level"], Absent("does not exist") if var is None else var]
    for key in ("single_loss", "translated_gamma"):
        value = entry[key]
        cells += [
            Absent("not computed") if value is None else value,
            Absent("n/a") if value is None or not var else round(value / var, 3),
        ]
    return tuple(cells)
