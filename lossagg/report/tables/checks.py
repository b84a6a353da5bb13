"""Tables of a check: the data window of each line, and one row for each portfolio of a folder."""

from __future__ import annotations

from collections.abc import Sequence

from lossagg.report.cells import Absent, Cell, Column, Table
from lossagg.report.reading import Entry

_ROWS_NAMED = 12
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
                round(window["supported_level"], 4) if window["events"] else Absent("no own data"),
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


def since_previous(lines: Sequence[Entry], currency: str) -> Table:
    """What became of the claims of the previous quarter, by line."""
    kinds = ("new", "vanished", "reopened", "fallen", "rewritten", "moved")
    rows = tuple(
        (
            line["name"],
            followed["file"],
            *(followed[key] for key in ("earlier", "claims", "earlier_amount", "amount")),
            *(Absent("not followed") if followed[kind] is None else followed[kind] for kind in kinds),
        )
        for line in lines
        if (followed := line.get("previous"))
    )
    columns = (
        Column("Line"),
        Column("Previous records"),
        Column("Claims then", "count"),
        Column("Claims now", "count"),
        Column("Amount then", "amount"),
        Column("Amount now", "amount"),
        *(Column(kind.capitalize(), "count") for kind in kinds),
    )
    notes = (
        "Claims by identifier. Vanished: gone from the records. Reopened: closed then, open now. Fallen: by "
        "the largest fall or more. Rewritten: closed then and now at another amount. Moved: another date.",
    )
    return Table("Since previous", f"Since the previous quarter, {currency}", columns, rows, notes)


def largest_losses(lines: Sequence[Entry], currency: str) -> Table:
    """The largest losses of each line with the rows of the file that they are made of."""
    rows = tuple(
        (
            line["name"],
            loss["loss"],
            loss["date"],
            _origin(loss),
            *(loss[key] for key in ("recorded", "modelled", "trend", "amount")),
        )
        for line in lines
        for loss in line.get("largest_losses", ())
    )
    columns = (
        Column("Line"),
        Column("Loss", "count"),
        Column("Date"),
        Column("From"),
        Column("Recorded", "amount"),
        Column("Net and developed", "amount"),
        Column("Trend factor", "number"),
        Column("Modelled", "amount"),
    )
    notes = (
        "Recorded: the sum of these rows. Net and developed: the same unless recoveries are taken off or "
        "open claims developed. Modelled: times the trend factor. All rows and losses: trail.csv.",
    )
    return Table("Largest", f"Largest losses and their rows, {currency}", columns, rows, notes)


def _origin(loss: Entry) -> str:
    """File, sheet and rows of a loss in words."""
    sheet, rows = loss["sheet"], loss["rows"]
    named = ", ".join(map(str, rows[:_ROWS_NAMED]))
    more = f" and {len(rows) - _ROWS_NAMED} more" if len(rows) > _ROWS_NAMED else ""
    file = f"{loss['file']}, sheet {sheet}" if sheet else loss["file"]
    return f"{file}, row{'s' if len(rows) > 1 else ''} {named}{more}"


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
