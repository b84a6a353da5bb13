"""Tables of the evidence: crosscheck of the engines, findings, cautions, the run and its inputs."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

from lossagg.report.cells import Absent, Cell, Column, Estimated, Ranged, Table
from lossagg.report.reading import Assessment, Entry, every_caution, text_or
from lossagg.report.wording import MEASURES

ENGINES = ("fourier", "panjer", "simulation")
TOTALS = ("gross", "net")


def crosscheck(assessment: Assessment) -> Table:
    """What each engine says of each measure, and whether they agree."""
    currency = assessment["portfolio"]["currency"]
    check = assessment["crosscheck"]
    table = crosscheck_rows(check["comparisons"], "Crosscheck", f"Crosscheck of the engines, {currency}")
    outside = tuple(
        f"{entry['engine']} does not compute {entry['subject']}: {entry['reason']}."
        for entry in check.get("refused", ())
    )
    return replace(table, notes=(*table.notes, *outside))


def crosscheck_of_totals(assessment: Assessment) -> Table:
    """The same for gross and net only, and for whatever disagrees."""
    check, currency = assessment["crosscheck"], assessment["portfolio"]["currency"]
    shown = [row for row in check["comparisons"] if row["subject"] in TOTALS or not row["agrees"]]
    return crosscheck_rows(shown, "Crosscheck", f"Crosscheck of the engines, {currency}")


def crosscheck_rows(comparisons: Sequence[Entry], key: str, title: str) -> Table:
    """The same for some of the comparisons."""
    rows: list[tuple[Cell, ...]] = []
    for entry in comparisons:
        level = Absent("n/a") if entry["level"] is None else entry["level"]
        values = tuple(_engine_cell(entry, engine) for engine in ENGINES)
        error = entry["standard_error"]
        spread: Cell = Absent("n/a") if error is None else float(f"{error:.2g}")
        verdict = "agree" if entry["agrees"] else "DISAGREE"
        rows.append(
            (
                entry["subject"],
                MEASURES[entry["measure"]],
                level,
                *values,
                spread,
                verdict,
                entry["note"] or "",
            )
        )
    columns = (
        Column("Subject"),
        Column("Measure"),
        Column("Level", "level"),
        Column("fourier", "money", ranged=True),
        Column("panjer", "money", ranged=True),
        Column("simulation", "money"),
        Column("Standard error", "number"),
        Column("Verdict"),
        Column("Note"),
    )
    tolerances = tuple(dict.fromkeys(entry["tolerance"] for entry in comparisons))
    notes = tuple(f"Tolerance: {tolerance}." for tolerance in tolerances)
    return Table(key, title, columns, tuple(rows), notes)


def _engine_cell(entry: Entry, engine: str) -> Cell:
    value = entry["values"].get(engine)
    if value is None:
        return Absent("not computed")
    if engine == "simulation":
        return Estimated(value, entry["standard_error"])
    low, high = entry["bracket"].get(engine) or (None, None)
    return Ranged(value, low, high)


def findings(assessment: Assessment) -> Table:
    """What was found in the input, where, how much of it, and what to do about it."""
    rows = tuple(_finding_cells(entry) for entry in assessment["findings"])
    columns = (
        Column("Severity"),
        Column("Code"),
        Column("Where"),
        Column("Value"),
        Column("What"),
        Column("Remedy"),
        Column("Rows", "count"),
        Column(f"Amount, {assessment['portfolio']['currency']}", "amount"),
    )
    return Table("Findings", "Findings in the input", columns, rows)


def _finding_cells(entry: Entry) -> tuple[Cell, ...]:
    sheet = entry.get("sheet")
    parts = (
        entry["file"] or "",
        f"sheet {sheet}" if sheet else "",
        "" if entry["row"] is None else f"row {entry['row']}",
        f"column {entry['column']}" if entry["column"] else "",
        f"line {entry['line']}" if entry.get("line") else "",
    )
    seen = "" if entry["value"] is None else str(entry["value"])
    count, amount = entry.get("count"), entry.get("amount")
    return (
        entry["severity"],
        entry["code"],
        ", ".join(part for part in parts if part),
        seen,
        entry["message"],
        entry["remedy"] or "",
        "" if count is None else count,
        "" if amount is None else amount,
    )


def cautions(assessment: Assessment) -> Table:
    """The cautions of this assessment, then the standing ones; no setting removes them."""
    rows = tuple((code, text) for code, texts in every_caution(assessment) for text in texts)
    return Table("Cautions", "Cautions", (Column("Code"), Column("Caution")), rows)


def run(assessment: Assessment) -> Table:
    """What is needed to run the same again."""
    facts, portfolio = assessment["run"], assessment["portfolio"]
    rows: tuple[tuple[Cell, ...], ...] = (
        ("Portfolio", portfolio["name"]),
        ("Description", text_or(portfolio["description"], "not supplied")),
        ("Currency", portfolio["currency"]),
        ("Valuation date", portfolio["valuation_date"]),
        ("Forecast period", f"{portfolio['forecast']['start']} to {portfolio['forecast']['end']}"),
        ("lossagg version", facts["version"]),
        ("Simulated years", facts["years"]),
        ("Seed", str(facts["seed"])),
        ("Format", assessment["format"]),
    )
    return Table("Run", "Run", (Column("Fact"), Column("Value", "count")), rows)


def inputs(assessment: Assessment) -> Table:
    """The input files with rows and SHA-256."""
    rows = tuple(
        (entry["path"], Absent("n/a") if entry["rows"] is None else entry["rows"], entry["sha256"])
        for entry in assessment["run"]["inputs"]
    )
    columns = (Column("File"), Column("Rows", "count"), Column("SHA-256"))
    return Table("Inputs", "Input files", columns, rows)
