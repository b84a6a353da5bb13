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
            computed(row.get("ultimate_losses")),
            computed(row.get("ultimate_amount")),
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
        Column("Events at ultimate", "number"),
        Column("Amount at ultimate", "amount"),
    )
    notes = (
        "Exposure is that of the whole year; events and amounts are of the part observed. At ultimate: as "
        "developed, in money of the time; the same as recorded where no development is asked for.",
        "The rows behind each figure stand in trail.csv, which lossagg check PORTFOLIO --out DIR writes.",
    )
    return Table("By year", f"Losses by year, {currency}", columns, rows, notes)


def development(lines: Sequence[Entry], currency: str) -> Table:
    """Years at ultimate by every method that has what it needs, beside what is reported."""
    rows: list[tuple[Cell, ...]] = []
    for line in lines:
        developed = line.get("development")
        for row in developed["years"] if developed else ():
            rows.append(
                (
                    line["name"],
                    str(row["year"]),
                    row["count"],
                    row["count_factor"],
                    row["count_chain_ladder"],
                    _prior(row["count_bornhuetter_ferguson"]),
                    row["amount"],
                    row["amount_factor"],
                    row["amount_chain_ladder"],
                    _prior(row["amount_bornhuetter_ferguson"]),
                    Absent("not used") if row["open_factor"] is None else row["open_factor"],
                )
            )
    columns = (
        Column("Line"),
        Column("Year"),
        Column("Events reported", "number"),
        Column("Factor", "number"),
        Column("Chain ladder", "number"),
        Column("Bornhuetter-Ferguson", "number"),
        Column("Amount reported", "amount"),
        Column("Factor of amount", "number"),
        Column("Amount, chain ladder", "amount"),
        Column("Amount, Bornhuetter-Ferguson", "amount"),
        Column("Factor of open claims", "number"),
    )
    notes = tuple(_development_note(line) for line in lines if line.get("development"))
    return Table("Development", f"Development to ultimate, {currency}", columns, tuple(rows), notes)


def _prior(value: float | None) -> Cell:
    return Absent("no a-priori") if value is None else value


def _development_note(line: Entry) -> str:
    developed = line["development"]
    dates = developed["valuations"]
    seen = f", from valuations of {', '.join(reversed(dates))}" if dates else ""
    return (
        f"{line['name']}: factors {developed['source']}{seen}; the year at ultimate is that of "
        f"{developed['method']}."
    )


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
