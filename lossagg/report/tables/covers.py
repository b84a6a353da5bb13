"""Tables of the covers: terms, expected cost, probabilities, measures by level."""

from __future__ import annotations

from typing import Any

from lossagg.report import digits
from lossagg.report.cells import Absent, Cell, Column, Table, clean
from lossagg.report.reading import Assessment, chance, doubts, missing, moment, reasons
from lossagg.report.tables.totals import level_row

CANNOT_EXHAUST = "cannot be exhausted"


def _limit(value: float | None) -> Cell:
    return Absent("no limit") if value is None else value


def _cap(value: float | None) -> Cell:
    return Absent("no cap") if value is None else value


def terms(assessment: Assessment) -> Table:
    """The terms of every cover in the order in which they act."""
    currency = assessment["portfolio"]["currency"]
    rows: list[tuple[Cell, ...]] = [
        (
            cover["name"],
            *_term_cells(cover["terms"]),
            ", ".join(cover["lines"]),
            _after(cover["after"]),
            cover["description"],
        )
        for cover in assessment["covers"]
    ]
    columns = (
        Column("Cover"),
        Column("Deductible per event", "number"),
        Column("Limit per event", "number"),
        Column("Annual retention", "number"),
        Column("Retained cap", "number"),
        Column("Annual limit", "number"),
        Column("Share", "level"),
        Column("Lines"),
        Column("Pays after"),
        Column("In words"),
    )
    notes = _orders(assessment["covers"])
    return Table("Cover terms", f"Covers: terms, {currency}", columns, tuple(rows), notes)


def _term_cells(given: dict[str, Any]) -> tuple[Cell, ...]:
    deductible: Cell = given["deductible"]
    kind = _deductible_kind(given)
    if kind:
        deductible = f"{digits.significant(given['deductible'], 15)} ({kind})"
    return (
        deductible,
        _limit(given["limit"]),
        given["annual_retention"],
        _cap(given["retained_cap"]),
        _limit(given["annual_limit"]),
        given["share"],
    )


def _deductible_kind(given: dict[str, Any]) -> str:
    """What makes a deductible other than an ordinary one; empty for that."""
    if given["franchise"]:
        return "franchise"
    if given.get("disappears_at") is not None:
        return f"disappears at {digits.significant(given['disappears_at'], 15)}"
    if given.get("limit_includes_deductible"):
        return "within the limit"
    return "self-insured" if given.get("self_insured") else ""


def _orders(covers: list[dict[str, Any]]) -> tuple[str, ...]:
    """In which order the terms act; with the names of the covers where they differ."""
    orders: dict[str, list[str]] = {}
    for cover in covers:
        orders.setdefault(cover["order"], []).append(clean(cover["name"]))
    if len(orders) == 1:
        return tuple(f"Order of operations: {order}." for order in orders)
    return tuple(f"Order of operations of {', '.join(names)}: {order}." for order, names in orders.items())


def _reinstatement_notes(covers: list[dict[str, Any]]) -> tuple[str, ...]:
    """Pure premiums of the covers whose reinstatements are paid."""
    paid = [(cover["name"], cover["reinstatement"]) for cover in covers if cover.get("reinstatement")]
    return tuple(
        f"{clean(name)}: an initial premium of {_money(premium['initial_premium'])} with an expected "
        f"reinstatement premium of {_money(premium['reinstatement_premium'])} ({premium['fraction']:.4f} of "
        "it) pays the expected annual cost; neither is counted in the net."
        for name, premium in paid
    )


def _money(value: float) -> str:
    return digits.significant(value, 6)


def _after(names: list[str]) -> str:
    return ", ".join(names) if names else "first"


def results(assessment: Assessment) -> Table:
    """Expected cost of every cover, its spread, and how often it attaches and is exhausted."""
    currency, years = assessment["portfolio"]["currency"], assessment["run"]["years"]
    gone, rows = missing(assessment), list[tuple[Cell, ...]]()
    unlimited = gone if assessment["headline"]["withheld"] else Absent(CANNOT_EXHAUST)
    for cover in assessment["covers"]:
        engine, subject = cover["engine"], f"cover {cover['name']}"
        rows.append(
            (
                cover["name"],
                moment(assessment, subject, "mean", cover["expected"], engine),
                moment(assessment, subject, "sd", cover["sd"], engine),
                chance(cover["attachment_probability"], engine, years, gone),
                chance(cover["exhaustion_probability"], engine, years, unlimited),
                engine,
            )
        )
    columns = (
        Column("Cover"),
        Column("Expected annual cost", "money", ranged=True),
        Column("Standard deviation", "money", ranged=True),
        Column("Attachment probability", "probability"),
        Column("Exhaustion probability", "probability"),
        Column("Engine"),
    )
    notes = (
        "Expected annual cost is what the cover pays on average in a year, without expenses or loadings. "
        "Attachment: the cover pays at all in a year. Exhaustion: it pays its annual limit in full; without "
        "one, some event uses up the limit per event.",
        *doubts(assessment, [f"cover {cover['name']}" for cover in assessment["covers"]]),
        *_reinstatement_notes(assessment["covers"]),
    )
    return Table("Covers", f"Covers: cost, {currency} a year", columns, tuple(rows), notes)


def levels(assessment: Assessment) -> Table:
    """What each cover pays in a bad year, by level."""
    currency = assessment["portfolio"]["currency"]
    rows = tuple(
        (cover["name"], *level_row(row, assessment, f"cover {cover['name']}"))
        for cover in assessment["covers"]
        for row in cover["levels"]
    )
    columns = (
        Column("Cover"),
        Column("Level", "level"),
        Column("Return period", "period"),
        Column("VaR of payments", "money", ranged=True),
        Column("TVaR of payments", "money", ranged=True),
    )
    subjects = [f"cover {cover['name']}" for cover in assessment["covers"]]
    notes = (*reasons([cell for row in rows for cell in row]), *doubts(assessment, subjects))
    return Table("Cover levels", f"Covers by level, {currency}", columns, rows, notes)
