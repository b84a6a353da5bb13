"""Table of the allocation: which lines the capital is for."""

from __future__ import annotations

from lossagg.report.cells import Cell, Column, Ranged, Table
from lossagg.report.digits import percent
from lossagg.report.reading import EXACT_ENGINES, Assessment, ranged

EXACT = (
    "Computed without simulation. The range of a part is that of the total, widened by how much the line's "
    "share moves when the lattice is twice as coarse."
)
SIMULATED = "From the simulated years, because no exact engine follows a copula; ranges are 95% intervals."
WHAT = (
    "A line is charged what it brings on average to the worst years of the total (Euler's principle). The "
    "parts add up to the total, and no line is charged more than it would need alone; what it saves by being "
    "together with the others is the last column."
)


def allocation(assessment: Assessment) -> Table:
    """What each line is charged of the gross tail value at risk at the capital level."""
    entry, currency = assessment.get("allocation"), assessment["portfolio"]["currency"]
    columns = (
        Column("Line"),
        Column("Part of the total", "money", ranged=True),
        Column("Share", "probability"),
        Column("TVaR alone", "money"),
        Column("Saved by diversification", "probability"),
    )
    if not entry:
        return Table("Allocation", "Allocation", columns, ())
    title = f"Allocation of the gross TVaR at {percent(entry['level'])} to lines, {currency}"
    if not entry["lines"]:
        return Table("Allocation", title, columns, ())
    rows: list[tuple[Cell, ...]] = [
        (
            line["name"],
            Ranged(line["value"], line["low"], line["high"]),
            line["share"],
            line["alone"],
            1.0 - line["value"] / line["alone"] if line["alone"] else 0.0,
        )
        for line in entry["lines"]
    ]
    alone = sum(line["alone"] for line in entry["lines"])
    saved = entry["diversification"] / alone if alone else 0.0
    rows.append(("All lines", ranged(entry["total"]), 1.0, alone, saved))
    notes = (WHAT, EXACT if entry["engine"] in EXACT_ENGINES else SIMULATED)
    return Table("Allocation", title, columns, tuple(rows), notes)
