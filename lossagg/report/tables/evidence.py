"""Tables of the evidence: crosscheck of the engines, findings, cautions, the run and its inputs."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

from lossagg.report.cells import Absent, Cell, Column, Estimated, Ranged, Table
from lossagg.report.reading import Assessment, Entry, every_caution, text_or
from lossagg.report.wording import MEASURES

ENGINES = ("fourier", "panjer", "simulation")
TOTALS = ("gross", "net")

FURTHEST = (
    "Furthest apart: the two engines that came closest to disagreeing. Tolerance used: their difference as a "
    "part of what is allowed; below 100% they agree. A simulated value at risk is tested by how many of the "
    "simulated years lie above the exact figure, against how many should; an exact figure by how far it lies "
    "on the way from the other engine's figure to the end of its range."
)


def crosscheck(assessment: Assessment) -> Table:
    """What each engine says of each measure, and whether they agree."""
    currency = assessment["portfolio"]["currency"]
    check = assessment["crosscheck"]
    table = crosscheck_rows(check["comparisons"], "Crosscheck", f"Crosscheck of the engines, {currency}")
    return replace(table, notes=(*table.notes, *_refusals(check.get("refused", ()))))


def crosscheck_of_totals(assessment: Assessment) -> Table:
    """The same for gross and net only, and for whatever disagrees."""
    check, currency = assessment["crosscheck"], assessment["portfolio"]["currency"]
    shown = [row for row in check["comparisons"] if row["subject"] in TOTALS or not row["agrees"]]
    table = crosscheck_rows(shown, "Crosscheck", f"Crosscheck of the engines, {currency}")
    refused = [entry for entry in check.get("refused", ()) if entry["subject"] in TOTALS]
    return replace(table, notes=(*table.notes, *_refusals(refused)))


def _refusals(refused: Sequence[Entry]) -> tuple[str, ...]:
    """Why engines left subjects out, each reason once."""
    subjects: dict[tuple[str, str], list[str]] = {}
    for entry in refused:
        subjects.setdefault((entry["engine"], entry["reason"]), []).append(entry["subject"])
    return tuple(
        f"{engine} does not compute {', '.join(names)}: {reason.rstrip('.')}."
        for (engine, reason), names in subjects.items()
    )


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
                *_closest(entry),
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
        Column("Furthest apart"),
        Column("Tolerance used", "probability"),
        Column("Verdict"),
        Column("Note"),
    )
    tolerances = tuple(dict.fromkeys(entry["tolerance"] for entry in comparisons))
    notes = tuple(f"Tolerance: {tolerance}." for tolerance in tolerances)
    if any(entry.get("tests") for entry in comparisons):
        notes = (*notes, FURTHEST)
    return Table(key, title, columns, tuple(rows), notes)


def _closest(entry: Entry) -> tuple[Cell, Cell]:
    """The pair of engines that used most of its tolerance, and how much of it."""
    tests = entry.get("tests") or ()
    if not tests:
        return Absent("not tested"), Absent("n/a")
    worst = max(tests, key=lambda test: test["used"])
    pair = f"{worst['engine']} and {worst['reference']}"
    if worst["unit"] == "standard errors":
        words = f"{pair}: {worst['difference']:.1f} standard errors, {worst['allowed']:g} allowed"
    elif worst["unit"] == "years beyond":
        words = f"{pair}: {worst['difference']:,.0f} years off, {worst['allowed']:,.0f} allowed"
    else:
        side = "in" if worst["used"] < 1 else "OUTSIDE"
        words = f"{worst['engine']} {side} {worst['reference']}'s range"
    return words, worst["used"]


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
