"""Tables of the evidence: crosscheck of the engines, findings, cautions, the run and its inputs."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

from lossagg.report.cells import Absent, Cell, Column, Estimated, Ranged, Table
from lossagg.report.reading import Assessment, Entry, text_or
from lossagg.report.wording import MEASURES, STANDING_CAUTIONS

ENGINES = ("fourier", "panjer", "simulation")


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


def crosscheck_rows(comparisons: Sequence[Entry], key: str, title: str) -> Table:
    """The same for some of the comparisons."""
    rows: list[tuple[Cell, ...]] = []
    for entry in comparisons:
        level = Absent("n/a") if entry["level"] is None else entry["level"]
        values = tuple(_engine_cell(entry, engine) for engine in ENGINES)
        verdict = "agree" if entry["agrees"] else "DISAGREE"
        rows.append(
            (entry["subject"], MEASURES[entry["measure"]], level, *values, verdict, entry["note"] or "")
        )
    columns = (
        Column("Subject"),
        Column("Measure"),
        Column("Level", "level"),
        Column("fourier", "money", ranged=True),
        Column("panjer", "money", ranged=True),
        Column("simulation", "money"),
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
    """What was found in the input, where, and what to do about it."""
    rows: tuple[tuple[Cell, ...], ...] = tuple(
        (
            entry["severity"],
            entry["code"],
            entry["file"] or "",
            "" if entry["row"] is None else str(entry["row"]),
            entry["column"] or "",
            "" if entry["value"] is None else str(entry["value"]),
            entry["message"],
            entry["remedy"] or "",
        )
        for entry in assessment["findings"]
    )
    headings = ("Severity", "Code", "File", "Row", "Column", "Value", "What", "Remedy")
    return Table("Findings", "Findings in the input", tuple(Column(text) for text in headings), rows)


def cautions(assessment: Assessment) -> Table:
    """The cautions of this assessment, then the standing ones that no setting removes."""
    own = tuple((entry["code"], entry["message"]) for entry in assessment["cautions"])
    return Table("Cautions", "Cautions", (Column("Code"), Column("Caution")), own + STANDING_CAUTIONS)


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
