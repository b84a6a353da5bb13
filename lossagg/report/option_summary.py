"""What the console says of a table of options."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

from lossagg.report.cells import clean
from lossagg.report.folder import OPTION_FILES
from lossagg.report.reading import Entry
from lossagg.report.summary import Summary
from lossagg.report.tables import options as tables

MOST_ROWS = 20
_RETAINED = (0, 1, 5, 6, 7, -2, -1)
_COST = (0, 2, -3, -1)
_YEARS = (0, 1, 3, 4, 5)


def summarise_options(options: Entry, out: Path | None) -> Summary:
    """The console summary of a table of options.

    Args:
        options: the dictionary of format "lossagg.options/1".
        out: the folder its files were written to, as the reader should see it.
    """
    portfolio, shown = options["portfolio"], tables.shown_options(options)[:MOST_ROWS]
    kept, cost = tables.retained(options, shown), tables.total(options, shown)
    years = tables.bad_years(options, shown)
    return Summary(
        title=clean(
            f"{portfolio['name']}, valuation date {portfolio['valuation_date']}, amounts in "
            f"{portfolio['currency']}"
        ),
        headline=tuple(clean(text) for text in _headline(options)),
        withheld=not options["agrees"],
        tables=()
        if options["withheld"]
        else tuple(
            replace(
                table,
                columns=tuple(table.columns[k] for k in places),
                rows=tuple(tuple(row[k] for k in places) for row in table.rows),
                notes=(),
            )
            for table, places in ((kept, _RETAINED), (cost, _COST), (years, _YEARS))
        ),
        remarks=tuple(clean(text) for text in _remarks(options, len(shown))),
        files=() if out is None else tuple(clean(out / name) for name in OPTION_FILES),
    )


def _headline(options: Entry) -> list[str]:
    lines = ", ".join(options["subject"]["lines"])
    label = options["subject"].get("label")
    texts = [f"{len(options['options'])} options for {lines}" + (f" [{label}]" if label else "")]
    if options["withheld"]:
        return [f"Options for {lines}: WITHHELD", options["withheld"]]
    if not options["agrees"]:
        texts.append("WITHHELD for at least one option: exact and simulated figures disagree")
    appetite = options["appetite"]
    if appetite is None:
        return [*texts, "No appetite is stated, so nothing is recommended."]
    chosen = f"For the appetite stated: {appetite['option']}." if appetite["option"] else ""
    return [*texts, f"{chosen} {appetite['why']}".strip()]


def _remarks(options: Entry, shown: int) -> list[str]:
    if options["withheld"]:
        return []
    texts = []
    if shown < len(options["options"]):
        texts.append(f"{shown} of {len(options['options'])} options are shown; all stand in the files.")
    premiums = {entry["premium"]["source"] for entry in options["options"]} - {"none"}
    texts.append(f"Premiums are {' or '.join(sorted(premiums)) or 'not needed'}.")
    texts.append(
        "The ranges do not hold the error of models and parameters; see the page. This is not an actuarial "
        "opinion, an offer or advice; local rules and licensed practice prevail."
    )
    return texts
