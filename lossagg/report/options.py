"""The report of the options: page, workbook, CSV for rating systems, JSON, in one folder.

Like the report of an assessment it reads and computes nothing; every figure is one of `options.json`.
"""

from __future__ import annotations

import csv
from collections.abc import Sequence
from io import StringIO
from pathlib import Path

from lossagg.report.cells import Absent, Cell, Estimated, Ranged, Table
from lossagg.report.documents import publish_document, require_format
from lossagg.report.folder import OPTION_FILES
from lossagg.report.manifest import RunFacts
from lossagg.report.option_parts import option_parts
from lossagg.report.page import environment
from lossagg.report.reading import Entry
from lossagg.report.tables import option_details as details
from lossagg.report.tables import options as tables
from lossagg.report.wording import STANDING_CAUTIONS
from lossagg.report.workbook import render_workbook, safe_text

FORMAT = "lossagg.options/1"


def write_options(options: Entry, out: str | Path, *, facts: RunFacts | None = None) -> Path:
    """Write the table of options into a folder: JSON, page, workbook, three CSV files and a manifest.

    All but the manifest depend on the table alone: the same table gives the same bytes. They appear
    together, or not at all.

    Args:
        options: the dictionary of format "lossagg.options/1".
        out: the folder; absent, empty, or holding an earlier table of options, which is replaced.
        facts: when and how the run was started, for the manifest.

    Returns:
        The folder written, as an absolute path.

    Raises:
        InputError: another format, or a folder with files of someone else.
        EnvironmentFault: no space or no permission; nothing is left half-written.
    """
    require_format(options, "a table of options", FORMAT)

    def build() -> dict[str, bytes]:
        sheets, valued = details.every_option_table(options), options["portfolio"]["valuation_date"]
        return {
            "options.html": render_options(options).encode(),
            "options.xlsx": render_workbook(sheets, valued),
            "options.csv": _csv([_joined(options)]).encode(),
            "curves.csv": _csv(details.curves(options)).encode(),
            "draws.csv": _csv([details.draws(options)]).encode(),
        }

    described = {**options, "headline": {"withheld": not options["agrees"]}}
    return publish_document(options, out, OPTION_FILES, build, facts, described=described)


def render_options(options: Entry) -> str:
    """The page of a table of options; the same table gives the same text."""
    found: dict[str, list[str]] = {}
    for entry in options["cautions"]:
        found.setdefault(entry["code"], []).append(entry["message"])
    for code, text in STANDING_CAUTIONS:
        found.setdefault(code, [text])
    context = {
        "portfolio": options["portfolio"],
        "run": options["run"],
        "options": option_parts(options),
        "cautions": list(found.items()),
    }
    return environment().get_template("options.html").render(context)


def _joined(options: Entry) -> Table:
    """All columns of all options in one table: terms, what is kept, what is bought, what it costs."""
    parts = [
        tables.retained(options),
        tables.ceded(options),
        tables.total(options),
        tables.bad_years(options),
    ]
    skipped = (0, 1, 3, 1)  # what an earlier part shows already: the option, what it keeps, its premium
    columns = tuple(c for part, first in zip(parts, skipped, strict=True) for c in part.columns[first:])
    rows = tuple(
        tuple(cell for row, first in zip(own, skipped, strict=True) for cell in row[first:])
        for own in zip(*(part.rows for part in parts), strict=True)
    )
    return Table("Options", "Options", columns, rows)


def _csv(parts: Sequence[Table]) -> str:
    """Tables as comma-separated text, full numbers, empty where there is none; a line between two tables.

    Text that a spreadsheet program could take for a formula begins with an apostrophe (see `workbook`).
    """
    stream = StringIO()
    writer = csv.writer(stream, lineterminator="\n")
    for number, table in enumerate(parts):
        if number:
            writer.writerow([])
        if len(parts) > 1:
            writer.writerow([safe_text(table.title)])
        headings = []
        for column in table.columns:
            heading = safe_text(column.heading)
            headings += [heading, f"{heading}, low", f"{heading}, high"] if column.ranged else [heading]
        writer.writerow(headings)
        for row in table.rows:
            cells: list[str] = []
            for column, cell in zip(table.columns, row, strict=True):
                own = _texts(cell)
                cells += own if column.ranged else own[:1]
            writer.writerow(cells)
    return stream.getvalue()


def _texts(cell: Cell) -> list[str]:
    """Value, low and high of a cell as text."""
    if isinstance(cell, Absent):
        return [safe_text(cell.words) if cell.words == "unlimited" else "", "", ""]
    if isinstance(cell, Ranged):
        return [repr(cell.value), *("" if end is None else repr(end) for end in (cell.low, cell.high))]
    if isinstance(cell, Estimated):
        return [repr(cell.value), "", ""]
    if isinstance(cell, str):
        return [safe_text(cell), "", ""]
    return [repr(cell)] * 3
