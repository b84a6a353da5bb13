"""What the checks say about a file: findings, and the error that carries those that stop it.

A finding names one fault and one place; nothing is dropped, repaired or ignored without one. Values of
amounts, dates and identifiers are shown as read; any other text is described, never repeated, because
loss files carry names of people.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Literal

from lossagg.errors import InputError, place

Action = Literal["stop", "set aside", "warn", "normalise"]

SEVERITY: dict[Action, str] = {
    "stop": "stop",
    "set aside": "set aside",
    "warn": "warning",
    "normalise": "normalised",
}
PLACES_NAMED = 5
FAULTS_NAMED = 5


@dataclass(frozen=True)
class Finding:
    """One thing the checks found, for the reader who must repair the file or accept it.

    Args:
        code: the rule, a stable word such as "negative-amount".
        action: "stop" (nothing is computed), "set aside" (the rows are counted, valued and not
            modelled), "warn" (used as they are) or "normalise" (a safe repair was made).
        file: name of the file, without its folder.
        row: row of the file, headings being row 1; None when the finding is about more than one row.
        column: heading as it stands in the file; None when it is about more than one column.
        value: the value seen, as text; None when it must not or cannot be shown.
        message: what is wrong, in one clause.
        remedy: what to do about it, in a sentence.
        sheet: sheet of the workbook, if the file is one.
        line: line the finding is about; None when it is about the file.
        count: number of rows it speaks for.
        amount: what those rows amount to; None where no amount is at stake.
    """

    code: str
    action: Action
    file: str
    row: int | None
    column: str | None
    value: str | None
    message: str
    remedy: str
    sheet: str | None = None
    line: str | None = None
    count: int = 1
    amount: float | None = None

    @property
    def where(self) -> str:
        """The place in words: file, sheet, row and column, as far as they are known."""
        return place(file=self.file, sheet=self.sheet, row=self.row, column=self.column)

    def __str__(self) -> str:
        """The finding as one paragraph: what, where, the value seen, the remedy."""
        seen = f"; seen: {self.value!r}" if self.value is not None else ""
        return f"{self.message}, in {self.where}{seen}. {self.remedy}"

    def to_dict(self) -> dict[str, object]:
        """The finding as plain values, under the keys an assessment uses."""
        return {
            "severity": SEVERITY[self.action],
            "code": self.code,
            "file": self.file,
            "sheet": self.sheet,
            "row": self.row,
            "column": self.column,
            "value": self.value,
            "message": self.message,
            "remedy": self.remedy,
            "line": self.line,
            "count": self.count,
            "amount": self.amount,
        }


class RecordsError(InputError):
    """Records that cannot be used; `findings` holds every finding that stops them, and the others.

    The message names the first few faults with their places and says how many there are.
    """

    def __init__(self, findings: Iterable[Finding]) -> None:
        self.findings = tuple(findings)
        stops = [finding for finding in self.findings if finding.action == "stop"]
        first = stops[0]
        others = _others(stops)
        parts: dict[str, object] = {"where": first.where}
        if first.value is not None:
            parts["value"] = first.value
        super().__init__(first.message, remedy=f"{first.remedy}{others}", **parts)  # type: ignore[arg-type]


def raise_stops(findings: Sequence[Finding]) -> None:
    """Raise one error for all findings that stop the run, if there are any.

    Raises:
        RecordsError: at least one finding has the action "stop".
    """
    if any(finding.action == "stop" for finding in findings):
        raise RecordsError(findings)


def counted(number: int, noun: str) -> str:
    """A number with its noun: "1 row", "3 rows"."""
    return f"{number} {noun}{'' if number == 1 else 's'}"


def rows_in_words(rows: Sequence[int], total: int) -> str:
    """Name a few rows and say how many there are in all: "rows 4, 9, 12 and 88 more"."""
    named = ", ".join(str(row) for row in rows[:PLACES_NAMED])
    more = total - min(len(rows), PLACES_NAMED)
    return f"row{'s' if total > 1 else ''} {named}" + (f" and {more} more" if more else "")


def _others(stops: Sequence[Finding]) -> str:
    """Say what else stops the run, fault by fault, so that one repair round is enough."""
    by_fault: dict[tuple[str, str | None], list[Finding]] = {}
    for finding in stops:
        by_fault.setdefault((finding.code, finding.column), []).append(finding)
    groups = list(by_fault.values())
    text = ""
    total = sum(finding.count for finding in groups[0])
    rows = [finding.row for finding in groups[0] if finding.row is not None]
    if rows and total > 1:
        text += f" {total} rows have this fault: {rows_in_words(rows, total)}."
    for group in groups[1:FAULTS_NAMED]:
        rows = [finding.row for finding in group if finding.row is not None]
        total = sum(finding.count for finding in group)
        at = f" ({rows_in_words(rows, total)})" if rows else ""
        text += f" Also: {group[0].message}{at}. {group[0].remedy}"
    if len(groups) > FAULTS_NAMED:
        text += f" And {len(groups) - FAULTS_NAMED} more kinds of fault."
    return text
