"""Tables of the records: reconciliation, losses by year, the steps that prepared them."""

from __future__ import annotations

from collections.abc import Sequence

from lossagg.report.cells import Absent, Cell, Column, Table
from lossagg.report.reading import Assessment, Entry, computed

CENT = 0.005


def reconciles(records: Entry) -> bool:
    """True when what was read equals what was used and what was excluded, in count and to the cent."""
    counts = records["read"] == records["used"] + records["excluded"]
    money = records["amount_read"] - records["amount_used"] - records["amount_excluded"]
    return bool(counts and abs(money) < max(CENT, 1e-12 * abs(records["amount_read"])))


def reconciliation(assessment: Assessment) -> Table:
    """Records read, used and excluded per line, in count and money."""
    currency = assessment["portfolio"]["currency"]
    rows: list[tuple[Cell, ...]] = []
    for line in assessment["lines"]:
        records = line["records"]
        if records is None:
            rows.append((line["name"], *[Absent("no records: laws given")] * 1, *[""] * 6))
            continue
        counted = (records["read"], records["used"], records["excluded"])
        money = (records["amount_read"], records["amount_used"], records["amount_excluded"])
        verdict = "yes" if reconciles(records) else "NO"
        rows.append((line["name"], *counted, *money, verdict))
    columns = (
        Column("Line"),
        Column("Read", "count"),
        Column("Used", "count"),
        Column("Excluded", "count"),
        Column("Amount read", "amount"),
        Column("Amount used", "amount"),
        Column("Amount excluded", "amount"),
        Column("Read = used + excluded"),
    )
    return Table("Reconciliation", f"Reconciliation of the records, {currency}", columns, tuple(rows))


def by_year(lines: Sequence[Entry], currency: str) -> Table:
    """Events used, amounts as recorded and trended, and thresholds, by line and year."""
    rows = tuple(
        (
            line["name"],
            str(row["year"]),
            _given(row["exposure"]),
            row["fraction"],
            row["losses"],
            computed(row.get("claims")),
            computed(row.get("open")),
            row["amount"],
            row["trended_amount"],
            row["largest"],
            row["threshold"] or Absent("none"),
        )
        for line in lines
        for row in line["by_year"]
    )
    columns = (
        Column("Line"),
        Column("Year"),
        Column("Exposure", "number"),
        Column("Part of year observed", "number"),
        Column("Events", "count"),
        Column("Claims", "count"),
        Column("Open claims", "count"),
        Column("Amount as recorded", "amount"),
        Column("Amount trended", "amount"),
        Column("Largest event", "amount"),
        Column("Threshold trended", "amount"),
    )
    return Table("By year", f"Losses by year, {currency}", columns, rows)


def _given(value: float | None) -> Cell:
    return Absent("none") if value is None else value


def steps(lines: Sequence[Entry], currency: str) -> Table:
    """What prepared the records, step by step, with count and amount before and after."""
    rows = tuple(
        (
            line["name"],
            row["step"],
            row["count_before"],
            row["count_after"],
            row["amount_before"],
            row["amount_after"],
            row["note"] or "",
        )
        for line in lines
        for row in line["steps"]
    )
    columns = (
        Column("Line"),
        Column("Step"),
        Column("Count before", "count"),
        Column("Count after", "count"),
        Column("Amount before", "amount"),
        Column("Amount after", "amount"),
        Column("Note"),
    )
    return Table("Steps", f"Preparing the records, {currency}", columns, rows)
