"""The tables of an assessment, each built once and shown in the page, the workbook and the console."""

from __future__ import annotations

from lossagg.report.cells import Table
from lossagg.report.reading import Assessment
from lossagg.report.tables import (
    controls,
    covers,
    dependence,
    evidence,
    fit_tests,
    fits,
    lines,
    records,
    totals,
    years,
)

__all__ = [
    "controls",
    "covers",
    "dependence",
    "every_table",
    "evidence",
    "fit_tests",
    "fits",
    "lines",
    "records",
    "totals",
    "years",
]


def every_table(assessment: Assessment) -> tuple[Table, ...]:
    """All tables of an assessment in the order of the report, for the workbook."""
    entries, currency = assessment["lines"], assessment["portfolio"]["currency"]
    return (
        totals.headline(assessment),
        totals.levels(assessment),
        totals.moments(assessment),
        totals.curves(assessment),
        lines.overview(assessment),
        lines.levels(assessment),
        *_if_any(dependence.assumptions(assessment)),
        *_if_any(dependence.compared(assessment)),
        covers.terms(assessment),
        covers.results(assessment),
        covers.levels(assessment),
        *_if_any(years.near_capital(assessment)),
        *_if_any(years.events_near_capital(assessment)),
        evidence.crosscheck(assessment),
        records.reconciliation(assessment),
        controls.control_totals(assessment),
        records.by_year(entries, currency),
        *_if_any(records.development(entries, currency)),
        records.steps(entries, currency),
        fits.parameters(entries),
        fits.candidates(entries),
        *_if_any(fit_tests.goodness(entries)),
        *_if_any(fit_tests.frequency(entries)),
        *_if_any(fit_tests.tail_rules(entries, currency)),
        *_if_any(fit_tests.tail_points(entries, currency)),
        fits.survival(entries, currency),
        fits.quantiles(entries, currency),
        fits.counts(entries),
        evidence.findings(assessment),
        evidence.cautions(assessment),
        evidence.run(assessment),
        evidence.inputs(assessment),
    )


def _if_any(table: Table) -> tuple[Table, ...]:
    return (table,) if table.rows else ()
