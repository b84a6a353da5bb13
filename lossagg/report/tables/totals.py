"""Tables of the whole portfolio: headline, gross and net by level, moments, exceedance curves."""

from __future__ import annotations

from lossagg.report.cells import Absent, Cell, Column, Ranged, Table, show
from lossagg.report.reading import (
    NO_INTERVAL,
    Assessment,
    Entry,
    absent,
    doubts,
    engine_range_name,
    marked,
    moment,
    ranged,
    reasons,
)
from lossagg.report.wording import MEASURES

SUBJECTS = (("Gross", "gross"), ("Net", "net"))


def headline_figure(assessment: Assessment) -> Cell:
    """The capital figure with its range, or why there is none."""
    headline = assessment["headline"]
    if headline["withheld"]:
        return Absent("withheld", headline["reason"])
    if headline["measure"] == "value_at_risk":
        return ranged(headline)
    return marked(ranged(headline), assessment, headline["subject"])


def less_mean(assessment: Assessment) -> Cell:
    """The capital figure less the expected annual loss, with the range of the capital figure."""
    entry = assessment["headline"]
    if entry["less_mean"] is None:
        return absent(entry["reason"] if entry["withheld"] else None)
    if entry["low"] is None or entry["high"] is None:
        return Ranged(entry["less_mean"], None, None, NO_INTERVAL)
    found = Ranged(entry["less_mean"], entry["low"] - entry["mean"], entry["high"] - entry["mean"])
    return marked(found, assessment, entry["subject"])


def headline(assessment: Assessment) -> Table:
    """The capital figure and what it is measured on, one row."""
    entry, currency = assessment["headline"], assessment["portfolio"]["currency"]
    total = assessment[entry["subject"]]
    expected = moment(assessment, entry["subject"], "mean", entry["mean"], total["engine"])
    cells: tuple[Cell, ...] = (
        assessment["portfolio"]["name"],
        entry["subject"],
        MEASURES[entry["measure"]],
        entry["level"],
        headline_figure(assessment),
        expected,
        less_mean(assessment),
        entry["engine"],
        assessment["crosscheck"]["verdict"],
        entry.get("label") or "",
    )
    columns = (
        Column("Portfolio"),
        Column("Subject"),
        Column("Measure"),
        Column("Level", "level"),
        Column(f"Capital figure, {currency}", "money", ranged=True),
        Column(f"Expected annual loss, {currency}", "money", ranged=True),
        Column(f"Capital less expected, {currency}", "money", ranged=True),
        Column("Engine"),
        Column("Crosscheck"),
        Column("Label"),
    )
    return Table(
        "Headline",
        f"Headline, {currency}",
        columns,
        (cells,),
        (*reasons(cells), *doubts(assessment, (entry["subject"],))),
    )


def level_row(row: Entry, assessment: Assessment, subject: str) -> tuple[Cell, ...]:
    """Level, return period, value at risk and tail value at risk of one entry of a subject's `levels`."""
    tail = marked(ranged(row["tvar"]), assessment, subject)
    return (row["level"], row["return_period"], ranged(row["var"]), tail)


def levels(assessment: Assessment) -> Table:
    """Value at risk and tail value at risk, gross and net, at every level of the portfolio."""
    currency = assessment["portfolio"]["currency"]
    rows: list[tuple[Cell, ...]] = []
    for gross, net in zip(assessment["gross"]["levels"], assessment["net"]["levels"], strict=True):
        rows.append((*level_row(gross, assessment, "gross"), *level_row(net, assessment, "net")[2:]))
    columns = (
        Column("Level", "level"),
        Column("Return period", "period"),
        Column("Gross VaR", "money", ranged=True),
        Column("Gross TVaR", "money", ranged=True),
        Column("Net VaR", "money", ranged=True),
        Column("Net TVaR", "money", ranged=True),
    )
    doubtful = doubts(assessment, ("gross", "net"))
    notes = (*reasons([cell for row in rows for cell in row]), *doubtful, *_range_notes(assessment))
    return Table("Levels", f"Annual loss by level, {currency}", columns, tuple(rows), notes)


def _range_notes(assessment: Assessment) -> tuple[str, ...]:
    return tuple(
        f"{title}: engine {assessment[subject]['engine']}; the range below a figure is its "
        f"{engine_range_name(assessment[subject]['engine'])}."
        for title, subject in SUBJECTS
    )


def moments(assessment: Assessment) -> Table:
    """Expected annual loss and its standard deviation, gross and net."""
    currency, rows = assessment["portfolio"]["currency"], list[tuple[Cell, ...]]()
    for title, subject in SUBJECTS:
        entry = assessment[subject]
        rows.append(
            (
                title,
                moment(assessment, subject, "mean", entry["mean"], entry["engine"]),
                moment(assessment, subject, "sd", entry["sd"], entry["engine"]),
                entry["engine"],
                "exact" if entry["exact"] else "simulated",
                entry["note"] or "",
            )
        )
    columns = (
        Column("Annual loss"),
        Column(f"Expected, {currency}", "money", ranged=True),
        Column(f"Standard deviation, {currency}", "money", ranged=True),
        Column("Engine"),
        Column("Kind"),
        Column("Note"),
    )
    notes = (*reasons([cell for row in rows for cell in row]), *doubts(assessment, ("gross", "net")))
    return Table("Moments", f"Expected annual loss, {currency}", columns, tuple(rows), notes)


def curves(assessment: Assessment) -> Table:
    """The exceedance curves, gross and net: the numbers behind the figure."""
    currency = assessment["portfolio"]["currency"]
    rows: list[tuple[Cell, ...]] = [
        (title, point["exceedance"], 1 / point["exceedance"], _curve_value(assessment, point))
        for title, subject in SUBJECTS
        for point in assessment[subject]["curve"]
    ]
    columns = (
        Column("Annual loss"),
        Column("Exceedance probability", "probability"),
        Column("Return period", "period"),
        Column(f"Annual loss, {currency}", "money", ranged=True),
    )
    return Table("Curves", f"Exceedance curves, {currency}", columns, tuple(rows))


def _curve_value(assessment: Assessment, point: Entry) -> Cell:
    if point["value"] is None and assessment["headline"]["withheld"]:
        return Absent("withheld")
    return ranged(point)


def headline_text(assessment: Assessment) -> tuple[str, str]:
    """The capital figure and its range as text, without the currency."""
    shown = show(headline_figure(assessment), "money")
    return shown.text, shown.range
