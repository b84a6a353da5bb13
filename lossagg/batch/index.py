"""The index of a batch: one row per portfolio with a link to its report."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from lossagg.report import digits, front
from lossagg.report.cells import Column, Table, show
from lossagg.report.page import render_index
from lossagg.report.reading import ranged
from lossagg.report.wording import STANDING_CAUTIONS

if TYPE_CHECKING:
    from lossagg.batch.record import BatchRecord, Entry


def index_page(record: BatchRecord) -> str:
    """The page as HTML; the same record gives the same text."""
    document = record.to_dict()
    facts = {
        "version": document["version"],
        "summary": f"{record.summary()}. Seed {record.seed}.",
        "standing": STANDING_CAUTIONS,
    }
    return render_index(facts, [index_row(entry) for entry in record.entries])


def index_table(record: BatchRecord) -> Table:
    """The same rows as a table, for the console."""
    columns = ("Portfolio", "Status", "Capital figure", "Engines", "Cautions", "Message")
    keys = ("name", "status", "headline", "verdict", "cautions", "message")
    rows = tuple(tuple(index_row(entry)[key] for key in keys) for entry in record.entries)
    return Table("Batch", "Annual loss assessments", tuple(Column(text) for text in columns), rows)


def index_row(entry: Entry) -> dict[str, Any]:
    """What index and console show of one portfolio, every value as text."""
    row: dict[str, Any] = {
        "folder": entry.folder,
        "name": entry.folder,
        "status": entry.status,
        "message": entry.message or "",
        "link": "",
        **dict.fromkeys(("headline", "gross", "net", "verdict", "cautions"), ""),
    }
    found = entry.assessment
    if found is None:
        return row
    view, currency = front.headline(found), found["portfolio"]["currency"]
    figure = f"{currency} {view['view'].text}" if view["found"] else view["view"].text
    label = f" ({view['label']})" if view["label"] else ""
    return row | {
        "name": found["portfolio"]["name"],
        "link": f"{entry.slug}/report.html",
        "headline": f"{figure}, {view['measure']} at {view['level']}, {found['headline']['subject']}{label}",
        "gross": _at_capital_level(found, "gross"),
        "net": _at_capital_level(found, "net"),
        "verdict": _verdict(found),
        "cautions": str(len(found["cautions"])),
    }


def _verdict(assessment: dict[str, Any]) -> str:
    if assessment["crosscheck"]["verdict"] == "agree" and front.compared_engines(assessment) < 2:
        return "capital not crosschecked"
    return str(assessment["crosscheck"]["verdict"])


def _at_capital_level(assessment: dict[str, Any], subject: str) -> str:
    level = assessment["portfolio"]["capital_level"]
    for row in assessment[subject]["levels"]:
        if row["level"] == level:
            return show(ranged(row["var"]), "money").text
    return f"{digits.percent(level)} is not among the levels"
