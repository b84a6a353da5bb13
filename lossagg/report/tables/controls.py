"""The table of control totals: what a ledger states, what the records hold, and the difference."""

from __future__ import annotations

from lossagg.report.cells import Cell, Column, Table
from lossagg.report.reading import Assessment, Entry


def stated(assessment: Assessment) -> list[Entry]:
    """The control totals of an assessment; none in one from before there were any."""
    totals: list[Entry] = assessment.get("reconciliation", {}).get("totals", [])
    return totals


def control_totals(assessment: Assessment) -> Table:
    """Every control total beside the records used and set aside, the difference and the tolerance."""
    rows: list[tuple[Cell, ...]] = [
        (
            total["line"],
            total["measure"],
            "all" if total["year"] is None else str(total["year"]),
            total["stated"],
            total["used"],
            total["set_aside"],
            total["difference"],
            total["tolerance"],
            "yes" if total["agrees"] else "NO",
        )
        for total in stated(assessment)
    ]
    columns = (
        Column("Line"),
        Column("Measure"),
        Column("Year"),
        Column("Control total", "amount"),
        Column("Records used", "amount"),
        Column("Records set aside", "amount"),
        Column("Difference", "amount"),
        Column("Tolerance", "number"),
        Column("Agrees"),
    )
    currency = assessment["portfolio"]["currency"]
    return Table("Control totals", f"Control totals, {currency}, counts as numbers", columns, tuple(rows))


def status(assessment: Assessment) -> str:
    """Whether the records agree with the control totals, in a few words."""
    totals = stated(assessment)
    if not totals:
        return "no control totals stated"
    broken = sum(not total["agrees"] for total in totals)
    if broken:
        return f"{broken} OF {len(totals)} CONTROL TOTALS NOT MET"
    return "control total met" if len(totals) == 1 else f"all {len(totals)} control totals met"
