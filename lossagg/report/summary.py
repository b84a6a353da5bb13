"""What the console says of an assessment: short enough to read, complete enough not to mislead."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from pathlib import Path

from lossagg.report import front, tables
from lossagg.report.cells import Cell, Shown, Table, clean, show
from lossagg.report.folder import FILES
from lossagg.report.reading import Assessment, every_caution
from lossagg.report.wording import STANDING_CAUTIONS

MOST_CAUTIONS = 4


@dataclass(frozen=True)
class Summary:
    """The parts of a console summary, in the order in which they are printed.

    Attributes:
        title: name of the portfolio, date and currency.
        headline: the capital figure in a sentence or two, or why it is withheld.
        withheld: True when the headline is withheld.
        tables: gross and net by level, and the covers if there are any.
        remarks: verdict of the crosscheck and the main cautions.
        files: the files written, if any were.
    """

    title: str
    headline: tuple[str, ...]
    withheld: bool
    tables: tuple[Table, ...]
    remarks: tuple[str, ...]
    files: tuple[str, ...]


def summarise(assessment: Assessment, out: Path | None) -> Summary:
    """The console summary of an assessment.

    Args:
        assessment: the dictionary of format "lossagg.assessment/1".
        out: the folder its files were written to, as the reader should see it.
    """
    portfolio = assessment["portfolio"]
    shown = [replace(tables.totals.levels(assessment), notes=())]
    if assessment["covers"]:
        shown.append(replace(tables.covers.results(assessment), notes=()))
    return Summary(
        title=clean(
            f"{portfolio['name']}, valuation date {portfolio['valuation_date']}, amounts in "
            f"{portfolio['currency']}"
        ),
        headline=tuple(clean(text) for text in _headline(assessment)),
        withheld=bool(assessment["headline"]["withheld"]),
        tables=tuple(shown),
        remarks=tuple(clean(text) for text in _remarks(assessment)),
        files=() if out is None else tuple(clean(out / name) for name in FILES),
    )


def _headline(assessment: Assessment) -> list[str]:
    view, currency = front.headline(assessment), assessment["portfolio"]["currency"]
    subject = f"Capital figure, {view['measure']} at {view['level']} ({view['period']}), {view['subject']}"
    if view["label"]:
        subject += f" [{view['label']}]"
    if view["withheld"]:
        return [f"{subject}: WITHHELD", view["reason"], *front.crosscheck(assessment)["spreads"]]
    if not view["found"]:
        return [f"{subject}: {view['view'].text}", view["reason"]]
    figure = f"{subject}: {currency} {view['view'].text}"
    if view["view"].range:
        figure += f" ({view['range_name']} {view['view'].range})"
    return [figure, view["sentence"]]


def _remarks(assessment: Assessment) -> list[str]:
    texts = [f"{front.verdict(assessment)} {assessment['crosscheck']['summary']}"]
    texts += [f"{term}: {text}" for term, text, _ in front.status(assessment) if term != "Cautions"]
    texts += _main_cautions(assessment)
    texts.append(
        "The error of models and parameters is not in these ranges. This is not an actuarial opinion, "
        "a certification or a filing; local rules and licensed practice prevail."
    )
    return texts


def _main_cautions(assessment: Assessment) -> list[str]:
    """The first caution of each kind that is not a standing one."""
    standing = dict(STANDING_CAUTIONS)
    kinds = [(code, texts) for code, texts in every_caution(assessment) if code not in standing]
    shown = [
        f"Caution: {texts[0]}" + (f" ({len(texts) - 1} more like it)" if len(texts) > 1 else "")
        for _, texts in kinds[:MOST_CAUTIONS]
    ]
    hidden = len(kinds) - len(shown)
    return [*shown, f"More kinds of caution in the report: {hidden}."] if hidden else shown


def plain_table(table: Table) -> list[str]:
    """A table as lines of plain text, for pipes and files; ranges in brackets behind their figure."""
    headings = [clean(column.heading) for column in table.columns]
    grid = [headings]
    grid += [[cell_text(view.text, view.range) for view in _views(table, row)] for row in table.rows]
    widths = [max(len(texts[place]) for texts in grid) for place in range(len(headings))]
    lines = [clean(table.title)]
    for texts in grid:
        cells = [
            text.ljust(width) if column.kind == "text" else text.rjust(width)
            for text, width, column in zip(texts, widths, table.columns, strict=True)
        ]
        lines.append("  ".join(cells).rstrip())
    return lines


def cell_text(text: str, limits: str) -> str:
    """A figure with its range on one line."""
    return f"{text} [{limits}]" if limits else text


def _views(table: Table, row: Sequence[Cell]) -> list[Shown]:
    return [show(cell, column.kind) for cell, column in zip(row, table.columns, strict=True)]
