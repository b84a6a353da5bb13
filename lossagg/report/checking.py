"""The report of a check: console tables, page and JSON. It reads and computes nothing."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import Any

from lossagg.report.cells import Table
from lossagg.report.documents import publish_document, require_format
from lossagg.report.folder import CHECK_FILES
from lossagg.report.manifest import RunFacts
from lossagg.report.reading import Entry
from lossagg.report.tables import checks, controls, evidence, records

FORMAT = "lossagg.check/1"
FOLDER_FORMAT = "lossagg.check-folder/1"
NOT_READ = "currency not read"
VERDICTS = {
    "usable": "can be assessed",
    "withheld": "can be assessed, but no figure would be printed: control totals are not met",
    "stopped": "cannot be assessed: see the findings that stop it",
}


def write_check(
    check: Entry, out: str | Path, *, trail: bytes | None = None, facts: RunFacts | None = None
) -> Path:
    """Write a check into a folder: check.json, check.html, trail.csv and a manifest, all or none.

    Args:
        check: the dictionary of format "lossagg.check/1", or "lossagg.check-folder/1" for several.
        out: the folder; absent, empty, or holding an earlier check, which is replaced.
        trail: content of trail.csv; None for several portfolios, of which none is written.
        facts: when and how the run was started, for the manifest.

    Returns:
        The folder written, as an absolute path.

    Raises:
        InputError: another format, or a folder with files of someone else.
        EnvironmentFault: no space or no permission; nothing is left half-written.
    """
    require_format(check, "a check", FORMAT, FOLDER_FORMAT)
    described = {
        **check,
        "portfolio": {"name": check["portfolio"]["name"] if "portfolio" in check else None},
        "run": {"version": check["run"]["version"], "seed": None, "years": None, "inputs": _inputs(check)},
        "headline": {"withheld": check["status"] == "withheld"},
        "cautions": [],
    }

    def build() -> dict[str, bytes]:
        page = {"check.html": render_check(check).encode()}
        return page if trail is None else {**page, "trail.csv": trail}

    return publish_document(check, out, CHECK_FILES, build, facts, described=described)


def _inputs(check: Entry) -> list[dict[str, Any]]:
    if check["format"] == FORMAT:
        return list(check["run"]["inputs"])
    return [
        {**entry, "path": f"{part['folder']}/{entry['path']}"}
        for part in check["portfolios"]
        for entry in part["run"]["inputs"]
    ]


def headings(check: Entry) -> tuple[str, ...]:
    """The lines above the tables: what was checked, whether it can be assessed, how much was found."""
    if check["format"] == FOLDER_FORMAT:
        counts = check["counts"]
        found = [f"{count} {status}" for status, count in counts.items() if count]
        return (f"{sum(counts.values())} portfolios checked: {', '.join(found)}",)
    portfolio, stated = check["portfolio"], ""
    if portfolio["currency"]:
        stated = f", valuation date {portfolio['valuation_date']}, amounts in {portfolio['currency']}"
    found = [f"{check['counts'][severity]} {words}" for severity, words in checks.SEVERITIES.items()]
    return (
        f"{portfolio['name']}{stated}: {VERDICTS[check['status']]}",
        f"Findings: {', '.join(found)}.",
    )


def printed_tables(check: Entry) -> tuple[Table, ...]:
    """The tables that a terminal shows: findings first; of a folder, its portfolios and their findings."""
    if check["format"] == FOLDER_FORMAT:
        parts = [
            replace(evidence.findings(_with_currency(part)), title=f"{part['folder']}: findings")
            for part in check["portfolios"]
        ]
        return (checks.portfolios(check["portfolios"]), *(table for table in parts if table.rows))
    shown = _with_currency(check)
    lines, currency = shown["lines"], shown["portfolio"]["currency"]
    reconciled = [line for line in lines if line["records"] or line["source"] == "given"]
    built = (
        evidence.findings(shown),
        records.reconciliation({**shown, "lines": reconciled}),
        controls.control_totals(shown),
        checks.since_previous(lines, currency),
        records.by_year(lines, currency),
        records.development(lines, currency),
        checks.windows(lines, currency),
        checks.largest_losses(lines, currency),
    )
    return tuple(table for table in built if table.rows)


def render_check(check: Entry) -> str:
    """The page of a check; the same check gives the same text."""
    from lossagg.report.page import environment

    title, trail = "Portfolios checked", []
    if check["format"] == FORMAT:
        shown = _with_currency(check)
        title = f"{shown['portfolio']['name']}: check"
        trail = [
            records.steps(shown["lines"], shown["portfolio"]["currency"]),
            evidence.inputs(shown),
        ]
    context = {
        "title": title,
        "lead": headings(check),
        "tables": [*printed_tables(check), *(table for table in trail if table.rows)],
        "version": check["run"]["version"],
    }
    return environment().get_template("check.html").render(context)


def _with_currency(check: Entry) -> dict[str, Any]:
    """The check with words where the currency could not be read."""
    portfolio = check["portfolio"]
    return {**check, "portfolio": {**portfolio, "currency": portfolio["currency"] or NOT_READ}}
