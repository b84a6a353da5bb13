"""Tables of dependence: what lines have in common, on what evidence, and the figures without it."""

from __future__ import annotations

from lossagg.report.cells import Cell, Column, Table
from lossagg.report.reading import Assessment, ranged, reasons, text_or


def assumptions(assessment: Assessment) -> Table:
    """Every dependence assumed, with its evidence."""
    rows: list[tuple[Cell, ...]] = [
        (
            entry["name"],
            entry["kind"],
            entry["description"] + (f"; {entry['change']}" if entry["change"] else ""),
            text_or(entry["evidence"], "none stated"),
        )
        for entry in assessment.get("dependence", ())
    ]
    columns = (Column("Dependence"), Column("Kind"), Column("What it says"), Column("Evidence"))
    return Table("Dependence", "Dependence between lines", columns, tuple(rows))


def compared(assessment: Assessment) -> Table:
    """Value at risk with the dependence assumed, with independent lines, and without diversification."""
    currency, apart = assessment["portfolio"]["currency"], assessment.get("independent") or {}
    rows: list[tuple[Cell, ...]] = []
    for k, gross in enumerate(assessment["gross"]["levels"] if apart else ()):
        rows.append(
            (
                gross["level"],
                ranged(gross["var"]),
                ranged(apart["gross"]["levels"][k]["var"]),
                ranged(apart["sum_of_lines"][k]["var"]),
                ranged(assessment["net"]["levels"][k]["var"]),
                ranged(apart["net"]["levels"][k]["var"]),
            )
        )
    columns = (
        Column("Level", "level"),
        Column("Gross VaR as assumed", "money", ranged=True),
        Column("Gross VaR, lines independent", "money", ranged=True),
        Column("Sum of the lines' own VaR", "money", ranged=True),
        Column("Net VaR as assumed", "money", ranged=True),
        Column("Net VaR, lines independent", "money", ranged=True),
    )
    notes = (
        *reasons([cell for row in rows for cell in row]),
        "The sum of the lines' own figures gives no credit for diversification; where means are infinite it "
        "can be below the others.",
    )
    title = f"Value at risk with and without dependence, {currency}"
    return Table("Without dependence", title, columns, tuple(rows), notes if rows else ())
