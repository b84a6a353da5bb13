"""A line without losses of its own: what it needs, and what must be said of it."""

from __future__ import annotations

from lossagg.portfolio.schema import LineSection
from lossagg.records import Action, Finding, LossTable, PreparedLosses, counted

PRIOR_SEVERITY = 'severity = { family = "lognormal", mu = ..., sigma = ..., source = "..." }'


def own_data_findings(line: LineSection, table: LossTable, prepared: PreparedLosses) -> list[Finding]:
    """What stops or must be told where a line had no loss, or has losses though it says it had none.

    Args:
        line: its table of the portfolio file.
        table: its records, as read.
        prepared: its losses.
    """

    def finding(code: str, action: Action, what: str, remedy: str) -> Finding:
        sheet, name = table.sheet, line.name
        return Finding(code, action, table.file, None, None, None, what, remedy, sheet, name, 0)

    if len(prepared):
        if not line.without_losses:
            return []
        what = f"the line is declared without-losses, but its records hold {counted(len(prepared), 'event')}"
        return [
            finding(
                "losses-after-all",
                "stop",
                what,
                "Take without-losses out and fit its laws, or correct the records.",
            )
        ]
    found = []
    if line.severity.fit is not None:
        found.append(
            finding(
                "no-losses",
                "stop",
                "no loss of the line is left, so there is no severity to fit: it must be given",
                f"In place of its fit write a prior law and where it comes from, such as {PRIOR_SEVERITY}; "
                "or put the line together with similar ones.",
            )
        )
    for name, law in (("severity", line.severity), ("frequency", line.frequency)):
        if law.fit is None and law.source is None:
            found.append(
                finding(
                    "no-losses",
                    "stop",
                    f"no loss of the line is left, and where its given {name} comes from is not stated",
                    f'Add source = "..." to its {name}: who gave the law, from what, and when.',
                )
            )
    if found:
        return found
    years = f"{float(prepared.years.fraction.sum()):.4g} years"
    what = f"no own data: there was no loss in {years}; the figures of the line are bounds and judgement"
    return [
        finding("no-own-data", "warn", what, "None needed if there truly was none; else supply the records.")
    ]
