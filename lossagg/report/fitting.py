"""The report of the fits: page, workbook and JSON in one folder. It reads and computes nothing."""

from __future__ import annotations

from pathlib import Path

from lossagg.report import tables
from lossagg.report.cells import Table
from lossagg.report.documents import publish_document, require_format
from lossagg.report.folder import FIT_FILES
from lossagg.report.manifest import RunFacts
from lossagg.report.page import environment, line_section
from lossagg.report.reading import Entry
from lossagg.report.wording import STANDING_CAUTIONS
from lossagg.report.workbook import render_workbook

FORMAT = "lossagg.fit/1"


def write_fit(fits: Entry, out: str | Path, *, facts: RunFacts | None = None) -> Path:
    """Write the fits into a folder: fit.json, fit.html, fit.xlsx and a manifest, all or none.

    Args:
        fits: the dictionary of format "lossagg.fit/1".
        out: the folder; absent, empty, or holding earlier fits, which are replaced.
        facts: when and how the run was started, for the manifest.

    Returns:
        The folder written, as an absolute path.

    Raises:
        InputError: another format, or a folder with files of someone else.
        EnvironmentFault: no space or no permission; nothing is left half-written.
    """
    require_format(fits, "a document of fits", FORMAT)

    def build() -> dict[str, bytes]:
        valued = fits["portfolio"]["valuation_date"]
        return {
            "fit.html": render_fit(fits).encode(),
            "fit.xlsx": render_workbook(fit_tables(fits), valued),
        }

    described = {**fits, "headline": {"withheld": False}}
    return publish_document(fits, out, FIT_FILES, build, facts, described=described)


def fit_tables(fits: Entry) -> tuple[Table, ...]:
    """Every table of the fits, for workbook and terminal."""
    lines, currency = fits["lines"], fits["portfolio"]["currency"]
    built = (
        tables.fits.parameters(lines),
        tables.fits.observed(lines, currency),
        tables.fits.estimates(lines),
        tables.fits.candidates(lines),
        tables.fit_tests.goodness(lines),
        tables.fit_tests.frequency(lines),
        tables.fit_tests.tail_rules(lines, currency),
        tables.fit_tests.size_quantiles(lines, currency),
        tables.fit_tests.parameter_error(lines, currency),
        tables.fit_tests.sensitivity(lines, currency),
        tables.fit_tests.influence(lines, currency),
        tables.fit_tests.tail_points(lines, currency),
        tables.fits.survival(lines, currency),
        tables.fits.quantiles(lines, currency),
        tables.fits.counts(lines),
    )
    return tuple(table for table in built if table.rows)


def printed_tables(fits: Entry) -> tuple[Table, ...]:
    """The tables that a terminal shows."""
    return tuple(
        table for table in fit_tables(fits) if not table.key.startswith("Fit ") or table.key == "Fit tests"
    )


def render_fit(fits: Entry) -> str:
    """The page of the fits; the same fits give the same text."""
    found: dict[str, list[str]] = {}
    for entry in fits["cautions"]:
        found.setdefault(entry["code"], []).append(entry["message"])
    for code, text in STANDING_CAUTIONS:
        found.setdefault(code, [text])
    currency = fits["portfolio"]["currency"]
    context = {
        "portfolio": fits["portfolio"],
        "run": fits["run"],
        "parameters": tables.fits.parameters(fits["lines"]),
        "sections": [
            line_section(line, index, currency, extra=_extra(line, currency))
            for index, line in enumerate(fits["lines"], 1)
        ],
        "cautions": list(found.items()),
    }
    return environment().get_template("fit.html").render(context)


def _extra(line: Entry, currency: str) -> tuple[Table, ...]:
    return (
        tables.fits.estimates([line]),
        tables.fit_tests.size_quantiles([line], currency),
        tables.fit_tests.parameter_error([line], currency),
        tables.fit_tests.sensitivity([line], currency),
        tables.fit_tests.influence([line], currency),
        tables.fit_tests.tail_points([line], currency),
    )
