"""The tables of an assessment, each built once and shown in the page, the workbook and the console."""

from __future__ import annotations

from lossagg.report.cells import Table
from lossagg.report.reading import Assessment, Entry
from lossagg.report.tables import (
    allocation,
    by_line,
    controls,
    covers,
    dependence,
    evidence,
    fit_tests,
    fits,
    lines,
    option_details,
    predictive,
    records,
    sanity,
    totals,
    years,
)

__all__ = [
    "allocation",
    "by_line",
    "controls",
    "covers",
    "dependence",
    "every_table",
    "evidence",
    "fit_tests",
    "fits",
    "lines",
    "options_of",
    "predictive",
    "records",
    "sanity",
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
        *_if_any(predictive.predictive(assessment)),
        totals.curves(assessment),
        lines.overview(assessment),
        lines.levels(assessment),
        *_if_any(allocation.allocation(assessment)),
        *_if_any(dependence.assumptions(assessment)),
        *_if_any(dependence.correlations(assessment)),
        *_if_any(dependence.bounds(assessment)),
        *_if_any(dependence.compared(assessment)),
        covers.terms(assessment),
        covers.results(assessment),
        covers.levels(assessment),
        *_if_any(by_line.costs(assessment)),
        *_if_any(by_line.levels(assessment)),
        *_option_tables(assessment),
        *_if_any(years.near_capital(assessment)),
        *_if_any(years.events_near_capital(assessment)),
        evidence.crosscheck(assessment),
        *_if_any(sanity.sanity(assessment)),
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


def options_of(assessment: Assessment) -> Entry | None:
    """The options of an assessment with what their tables take from it; None where it has none."""
    options = assessment.get("options")
    return None if options is None else {**options, "portfolio": assessment["portfolio"]}


def _option_tables(assessment: Assessment) -> tuple[Table, ...]:
    options = options_of(assessment)
    if options is None or options["withheld"]:
        return ()
    return tuple(table for table in option_details.every_option_table(options) if table.rows)


def _if_any(table: Table) -> tuple[Table, ...]:
    return (table,) if table.rows else ()
