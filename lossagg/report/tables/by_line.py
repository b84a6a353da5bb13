"""Tables of what the covers pay of each line and leave with it, and of the largest loss of a year."""

from __future__ import annotations

from lossagg.report.cells import Absent, Cell, Column, Estimated, Table
from lossagg.report.reading import Assessment, Entry, missing, ranged, reasons


def costs(assessment: Assessment) -> Table:
    """Expected loss of each line, what all covers together pay of it, and what they leave: its net."""
    currency, years = assessment["portfolio"]["currency"], assessment["run"]["years"]
    gone, rows = missing(assessment), list[tuple[Cell, ...]]()
    gross = {line["name"]: line["mean"] for line in assessment["lines"]}
    for name, own in _covered(assessment).items():
        ceded = own["ceded"]["mean"]
        part: Cell = gone
        if ceded is not None and gross[name]:
            part = Estimated(ceded / gross[name], None)
        rows.append(
            (
                name,
                gone if gross[name] is None else gross[name],
                _mean(own["ceded"], years, gone),
                _mean(own["retained"], years, gone),
                part,
            )
        )
    columns = (
        Column("Line"),
        Column("Expected loss", "money"),
        Column("Expected ceded", "money"),
        Column("Expected retained", "money"),
        Column("Part ceded", "probability"),
    )
    notes = (
        "Ceded: what all covers together pay of the line. Retained: what they leave, the net of the line. By "
        "line: " + _note(assessment) + ".",
    )
    return Table("Line costs", f"Lines: ceded and retained, {currency} a year", columns, tuple(rows), notes)


def levels(assessment: Assessment) -> Table:
    """What is ceded and retained of each line in its own bad years, and the largest loss of a year."""
    currency = assessment["portfolio"]["currency"]
    rows: list[tuple[Cell, ...]] = []
    for name, own in _covered(assessment).items():
        for ceded, retained, largest in zip(
            own["ceded"]["levels"], own["retained"]["levels"], own["largest"]["levels"], strict=True
        ):
            rows.append(
                (
                    name,
                    ceded["level"],
                    *(ranged(row[key]) for row in (ceded, retained) for key in ("var", "tvar")),
                    ranged(largest["var"]),
                )
            )
    columns = (
        Column("Line"),
        Column("Level", "level"),
        Column("VaR of ceded", "money", ranged=True),
        Column("TVaR of ceded", "money", ranged=True),
        Column("VaR of retained", "money", ranged=True),
        Column("TVaR of retained", "money", ranged=True),
        Column("Largest loss of a year", "money", ranged=True),
    )
    notes = (
        "Lines stand alone here: their bad years are not the same, and the figures do not add up.",
        *reasons([cell for row in rows for cell in row]),
    )
    return Table(
        "Line cessions", f"Lines by level, ceded and retained, {currency}", columns, tuple(rows), notes
    )


def _covered(assessment: Assessment) -> dict[str, Entry]:
    """The lines with what is ceded of them; none where there is no cover."""
    lines: dict[str, Entry] = (assessment.get("by_line") or {}).get("lines", {})
    return {name: own for name, own in lines.items() if "ceded" in own}


def _note(assessment: Assessment) -> str:
    return str(assessment["by_line"]["note"]) if assessment.get("by_line") else ""


def _mean(figures: Entry, years: int, gone: Absent) -> Cell:
    if figures["mean"] is None:
        return gone
    error = None if figures["sd"] is None or not years else figures["sd"] / years**0.5
    return Estimated(figures["mean"], error)
