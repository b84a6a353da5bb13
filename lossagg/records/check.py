"""Checking loss records: which rows are used, which are set aside and why, and the proof of the sums."""

from __future__ import annotations

import datetime as dt
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from lossagg.arrays import BoolArray, IntArray, require_probability
from lossagg.errors import InputError, place
from lossagg.records.faults import Fault, list_faults
from lossagg.records.findings import Finding, raise_stops
from lossagg.records.headings import nearest
from lossagg.records.money import Reconciliation, reconcile
from lossagg.records.rules import CheckTerms, below_threshold, row_faults
from lossagg.records.shape import shape_findings
from lossagg.records.table import LossTable
from lossagg.records.tolerance import check_tolerance
from lossagg.records.word_rules import canonical_lines, line_faults, pooled_lines
from lossagg.records.words import WordArray

if TYPE_CHECKING:
    import pandas as pd

USED = -1


@dataclass(frozen=True)
class CheckedLosses:
    """Loss records after every check, ready for `prepare_losses`, line by line.

    Args:
        table: the records.
        member: True for the rows that belong to this line, or to the file; shape (rows,).
        reason: position in `faults` of the fault that set the row aside, `USED` where none did;
            shape (rows,).
        faults: the faults of the rows, those that set aside first; each row is claimed by one of these.
        general: findings about the line or the file rather than about rows.
        terms: what the records were checked against.
        line: name of the line; None for the whole file.
        reconciliation: rows and money read, used and excluded.
    """

    table: LossTable
    member: BoolArray
    reason: IntArray
    faults: tuple[Fault, ...]
    general: tuple[Finding, ...]
    terms: CheckTerms
    line: str | None
    reconciliation: Reconciliation

    def __repr__(self) -> str:
        """One line: the file, the line and the reconciliation."""
        of = f", line={self.line!r}" if self.line is not None else ""
        return f"CheckedLosses({self.table.file!r}{of}, {self.reconciliation})"

    @property
    def used(self) -> BoolArray:
        """True for the rows that are used; shape (rows,)."""
        used: BoolArray = self.member & (self.reason == USED)
        return used

    @property
    def findings(self) -> tuple[Finding, ...]:
        """Everything found: rows set aside, warnings, repairs, then the file as a whole."""
        listed = list_faults(self.faults, self.table.places())
        if self.terms.lines is not None:
            listed = [replace(finding, line=self.line) for finding in listed]
        return (*listed, *self.general)

    def for_line(self, name: str | None) -> CheckedLosses:
        """The records of one line, reconciled on their own.

        Args:
            name: a line of the file; None for the rows that belong to no line (blank rows, totals).
                Lines and None together make up the file.

        Raises:
            InputError: the file was not checked for this line.
        """
        lines = self.terms.lines
        if name is not None and (lines is None or name not in lines):
            raise InputError(
                "the records were not checked for this line",
                where=place(file=self.table.file),
                value=name,
                remedy=nearest(name, lines or ()),
            )
        member = self.member & (self.table.word("line") == (name or ""))
        return replace(
            self,
            member=member,
            line=name,
            faults=tuple(replace(fault, mask=fault.mask & member) for fault in self.faults),
            general=tuple(found for found in self.general if found.line in (None, name)),
            reconciliation=self._reconcile(member),
        )

    def excluded_frame(self) -> pd.DataFrame:
        """Every row set aside: row of the file, reason, amount as written; for the audit trail."""
        import pandas as pd

        at = np.flatnonzero(self.member & (self.reason != USED))
        return pd.DataFrame(
            {
                "row": self.table.row[at],
                "code": [self.faults[reason].code for reason in self.reason[at].tolist()],
                "reason": [self.faults[reason].message for reason in self.reason[at].tolist()],
                "amount": self.table.exact[at].tolist(),
            }
        )

    def _reconcile(self, member: BoolArray) -> Reconciliation:
        table, used = self.table, self.reason[member] == USED
        return reconcile(table.exact[member], used, table.unreadable[member])


def check_losses(
    table: LossTable,
    *,
    valuation_date: dt.date,
    currency: str,
    lines: Sequence[str] | None = None,
    first_year: int | Mapping[str, int | None] | None = None,
    tolerance: float = 0.05,
    reporting_threshold: float | Mapping[str, float | None] | None = None,
) -> CheckedLosses:
    """Check every row of the records and set aside what cannot be used, counted and valued.

    Args:
        table: the records, from `read_losses`.
        valuation_date: last day the records describe.
        currency: currency of the portfolio.
        lines: names of the lines that share the file, told apart by its `line` column; None when all
            rows are of one line, whatever that column says.
        first_year: first year of the observation window, or {line: first year} where lines that share
            the file differ; earlier losses are set aside. None: undeclared.
        tolerance: largest share of rows, and of money, that may be set aside for faults. Claims at
            nil, totals and rows before the window are excluded by definition and do not count. One row may
            be set aside also in a file so small that one row is more, unless it is most of the money.
        reporting_threshold: threshold of the rows that carry none, or {line: threshold}; None: not declared,
            which stops where some rows carry a threshold and others none.

    Returns:
        The checked records: rows used, findings, reconciliation.

    Raises:
        RecordsError: rows in another currency or of an unknown line, or more set aside than tolerated.
        InputError: several lines but no column that tells them apart; a bad argument.
    """
    terms = _terms(valuation_date, currency, lines, first_year, tolerance)
    terms = replace(terms, thresholds=_thresholds(reporting_threshold, terms.lines))
    lines_at_fault = line_faults(table, terms.lines) if terms.lines is not None else []
    pooled = pooled_lines(table) if terms.lines is None else []
    table = _with_lines(table, terms)
    faults = [*lines_at_fault, *row_faults(table, terms)]
    places = table.places()
    raise_stops(list_faults([fault for fault in faults if fault.action == "stop"], places))
    aside = [fault for fault in faults if fault.action == "set aside"]
    reason = _reasons(aside, len(table))
    small = below_threshold(table, reason == USED)
    if small.mask.any():
        aside.append(small)
        reason[small.mask] = len(aside) - 1
    claimed = [replace(fault, mask=reason == number) for number, fault in enumerate(aside)]
    used = reason == USED
    warned = [replace(fault, mask=fault.mask & used) for fault in faults if fault.action == "warn"]
    repaired = [fault for fault in faults if fault.action == "normalise"]
    checked = CheckedLosses(
        table=table,
        member=np.ones(len(table), dtype=np.bool_),
        reason=reason,
        faults=(*claimed, _incomplete_events(table, used, claimed), *warned, *repaired),
        general=(*pooled, *_shapes(table, used, terms), *table.findings),
        terms=terms,
        line=None,
        reconciliation=reconcile(table.exact, used, table.unreadable),
    )
    check_tolerance(table, claimed, used, terms.tolerance, checked.findings)
    return checked


def _reasons(aside: Sequence[Fault], rows: int) -> IntArray:
    """Give each row the first fault that claims it."""
    reason = np.full(rows, USED, dtype=np.int64)
    for number, fault in enumerate(aside):
        reason[fault.mask & (reason == USED)] = number
    return reason


def _incomplete_events(table: LossTable, used: BoolArray, claimed: Sequence[Fault]) -> Fault:
    """Find the used rows of events that have lost a claim to a fault, and with it part of their amount."""
    lost = np.zeros(len(table), dtype=np.bool_)
    for fault in claimed:
        if not fault.tolerated and fault.code != "duplicate-row":
            lost |= fault.mask
    event = table.word("event")
    names = set(event[lost].present()) - {""}
    return Fault(
        "incomplete-event",
        "warn",
        "event",
        used & event.is_in(names),
        "another claim of the event is set aside, so the event counts for less than it was",
        "Repair the claim that is set aside.",
    )


def _shapes(table: LossTable, used: BoolArray, terms: CheckTerms) -> list[Finding]:
    if terms.lines is None:
        return shape_findings(table, used, None)
    line = table.word("line")
    return [found for name in terms.lines for found in shape_findings(table, used & (line == name), name)]


def _with_lines(table: LossTable, terms: CheckTerms) -> LossTable:
    """Name each row's line as the portfolio does; without several lines the column says nothing."""
    words = {name: column for name, column in table.words.items() if name != "line"}
    if terms.lines is not None:
        words["line"] = _named_lines(table, terms.lines)
    return replace(table, words=words)


def _named_lines(table: LossTable, lines: tuple[str, ...]) -> WordArray:
    """The line of each row by its name in the portfolio, "" for rows that carry no record."""
    known = canonical_lines(lines)
    if "line" in table.words:
        written = table.words["line"]
        to_line = [known.get(word.casefold(), "") for word in written.names.to_pylist()]
    elif len(lines) == 1:
        written, to_line = WordArray.empty(len(table)), [lines[0]]
    else:
        raise InputError(
            "several lines share the file but no column tells them apart",
            where=place(file=table.file),
            value=list(lines),
            remedy="Map the column that names the line, or give each line its own file.",
        )
    named = written.rename(np.ones(len(to_line), dtype=np.bool_), to_line)
    return named.without(table.blank)


def _terms(
    valuation_date: dt.date,
    currency: str,
    lines: Sequence[str] | None,
    first_year: int | Mapping[str, int | None] | None,
    tolerance: float,
) -> CheckTerms:
    if not isinstance(valuation_date, dt.date) or isinstance(valuation_date, dt.datetime):
        raise InputError("the valuation date must be a date", value=valuation_date, remedy="Give YYYY-MM-DD.")
    names = None if lines is None else tuple(lines)
    if names is not None and (not names or len(canonical_lines(names)) < len(names)):
        raise InputError("lines must be named, each once", value=names, remedy="Rename one of them.")
    return CheckTerms(
        valuation_date=valuation_date,
        currency=currency,
        lines=names,
        first_years=_first_years(first_year, names, valuation_date),
        tolerance=require_probability(tolerance, "tolerance"),
    )


def _thresholds(
    declared: float | Mapping[str, float | None] | None, lines: tuple[str, ...] | None
) -> dict[str, float]:
    """The declared reporting threshold of each line that has one."""
    if not isinstance(declared, Mapping):
        declared = dict.fromkeys(lines or ("",), declared)
    return {line: threshold for line, threshold in declared.items() if threshold is not None}


def _first_years(
    first_year: int | Mapping[str, int | None] | None, lines: tuple[str, ...] | None, valuation_date: dt.date
) -> dict[str, int]:
    """The declared first year of each line that has one."""
    if not isinstance(first_year, Mapping):
        first_year = dict.fromkeys(lines or ("",), first_year)
    declared = {line: year for line, year in first_year.items() if year is not None}
    for line, year in declared.items():
        if line not in (lines or ("",)):
            raise InputError(
                "a first year is declared for a line that is not there",
                value=line,
                remedy=nearest(line, lines or ()),
            )
        if isinstance(year, bool) or not 1900 <= year <= valuation_date.year:
            raise InputError(
                "the first year must lie between 1900 and the valuation date",
                value=year,
                remedy="Give the first year in which losses were recorded completely.",
            )
    return declared
