"""The history of a line: its records made ready to be modelled, and what a report says of them."""

from __future__ import annotations

from dataclasses import replace

from lossagg.portfolio.assessment import Data
from lossagg.portfolio.files import LineRecords
from lossagg.portfolio.own_data import own_data_findings
from lossagg.portfolio.schema import LineSection, PortfolioFile
from lossagg.records import (
    Followed,
    PreparedLosses,
    Reconciliation,
    RecordsError,
    check_counts,
    follow_claims,
    midpoint,
    prepare_losses,
)

_BY_YEAR = (
    "year",
    "exposure",
    "fraction",
    "losses",
    "claims",
    "open",
    "amount",
    "trended_amount",
    "largest",
    "threshold",
    "frequency_trend",
    "reported",
    "ultimate_losses",
    "ultimate_amount",
)


def prepare_line(file: PortfolioFile, line: LineSection, records: LineRecords) -> PreparedLosses:
    """The losses of one line as they are modelled: events, trend, thresholds, exposure.

    Args:
        file: the portfolio file.
        line: the table of the line in it.
        records: what was read and checked for the line.

    Raises:
        InputError: records and keys that do not fit together, such as a year without exposure.
    """
    if records.counts is not None:
        check_counts(records.losses, records.counts)
    followed = follow(line, records)
    prepared = prepare_losses(
        records.losses,
        exposure=records.exposure,
        forecast_midpoint=midpoint(*file.portfolio.forecast),
        reporting_threshold=line.lowest_recorded,
        trend=records.index or line.trend,
        **line.preparation(),
    )
    own = own_data_findings(line, records.losses.table, prepared)
    if any(finding.action == "stop" for finding in own):
        raise RecordsError([*prepared.findings, *own])
    more = (*(records.counts.findings if records.counts else ()), *(followed.findings if followed else ()))
    return replace(prepared, findings=(*prepared.findings, *more, *own))


def follow(line: LineSection, records: LineRecords) -> Followed | None:
    """What became of the claims of the previous quarter, None where its records are not given.

    Args:
        line: the table of the line.
        records: what was read and checked for it.

    Raises:
        RecordsError: the same records again, or more of them gone or rewritten than is tolerated.
    """
    if line.previous is None or records.previous is None:
        return None
    return follow_claims(
        records.losses,
        records.previous,
        unchanged=line.previous.unchanged,
        tolerance=line.previous.tolerance,
        largest_fall=line.previous.largest_fall,
    )


def history_data(prepared: PreparedLosses | None) -> Data:
    """Reconciliation, years and steps as plain data; nothing where the line has no records.

    Args:
        prepared: the losses of the line.
    """
    if prepared is None:
        return {"records": None, "by_year": [], "steps": []}
    years = prepared.years
    return {
        **reconciliation_data(prepared.reconciliation),
        "by_year": [
            {column: getattr(years, column)[k].item() for column in _BY_YEAR} for k in range(len(years))
        ],
        "steps": [step.to_dict() for step in prepared.steps],
    }


def development_data(prepared: PreparedLosses | None) -> Data | None:
    """The years at ultimate as plain data; None where there is no history, or no development of it.

    Args:
        prepared: the losses of the line.
    """
    return None if prepared is None or prepared.developed is None else prepared.developed.to_dict()


def reconciliation_data(reconciliation: Reconciliation) -> Data:
    """Rows and money read, used and excluded as plain data, under the key of an assessment.

    Args:
        reconciliation: of one line.
    """
    reconciled = reconciliation.to_dict()
    keys = ("read", "used", "excluded", "amount_read", "amount_used", "amount_excluded")
    return {"records": {key: reconciled[key] for key in keys}}
