"""The records of every line against the control totals stated for them."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from lossagg.portfolio.assessment import Data
from lossagg.portfolio.files import LineRecords
from lossagg.portfolio.schema import PortfolioFile
from lossagg.records import Finding, control_findings, reconcile_controls

BROKEN = "withheld: the records do not agree with the control totals"


@dataclass(frozen=True)
class Reconciled:
    """What the comparison came to.

    Attributes:
        data: the entry `reconciliation` of the assessment.
        findings: one for every total that is not met.
        withheld: why figures are withheld, "" where they are not.
    """

    data: Data
    findings: tuple[Finding, ...]
    withheld: str


def reconcile_portfolio(file: PortfolioFile, records: Mapping[str, LineRecords]) -> Reconciled:
    """Compare the control totals of every line with its records.

    Raises:
        RecordsError: a total that differs by a factor of a thousand.
        InputError: a total of a column that the records do not have.
    """
    totals: list[Data] = []
    findings: list[Finding] = []
    for line in file.line:
        if line.name not in records or not line.control_total:
            continue
        checked = records[line.name].losses
        results = reconcile_controls(checked, [section.control() for section in line.control_total])
        totals += [{"line": line.name, **result.to_dict()} for result in results]
        findings += control_findings(checked, results)
    broken = [total for total in totals if not total["agrees"]]
    verdict = "break" if broken else "agree" if totals else "none stated"
    withheld = BROKEN + "; " + "; ".join(map(_difference, broken)) if broken else ""
    return Reconciled({"verdict": verdict, "totals": totals}, tuple(findings), withheld)


def _difference(total: Data) -> str:
    of_year = f" of {total['year']}" if total["year"] is not None else ""
    return f"line {total['line']!r}, {total['measure']}{of_year}: difference {total['difference']:,.10g}"
