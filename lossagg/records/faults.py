"""Faults found in rows, as masks; and how they become findings a reader can act on."""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from lossagg.arrays import BoolArray, IntArray
from lossagg.records.amounts import MISSING
from lossagg.records.findings import Action, Finding, counted, rows_in_words
from lossagg.records.money import Money, exact_sum
from lossagg.records.raw import cell_text

LISTED = 20
_SHOWN = 40
CURRENCY_CODE = 3
_MONTHS = "january|february|march|april|june|july|august|sept|september|october|november|december"
_WORDS = re.compile(rf"\b(?!(?:{_MONTHS})\b)[^\W\d_]{{4,}}", re.IGNORECASE)
_INFINITE = re.compile(r"[+-]?inf(inity)?$", re.IGNORECASE)


@dataclass(frozen=True)
class Fault:
    """One rule applied to every row of a table.

    Args:
        code: the rule.
        action: what happens to the rows.
        column: canonical name of the column at fault; None when it is the row.
        mask: True for the rows at fault; shape (rows,).
        message: what is wrong, in one clause.
        remedy: what to do about it.
        tolerated: True for exclusions by definition (claims at nil, rows of totals, years outside the
            declared window), which say nothing about the quality of the file.
        shown: True where the cells may be shown whatever they look like.
    """

    code: str
    action: Action
    column: str | None
    mask: BoolArray
    message: str
    remedy: str
    tolerated: bool = False
    shown: bool = False


@dataclass(frozen=True)
class Rows:
    """What findings need to know of a table: its name, its row numbers, headings, cells and amounts."""

    file: str
    sheet: str | None
    row: IntArray
    headings: Mapping[str, str]
    cells: Mapping[str, Any]
    exact: Money


def list_fault(fault: Fault, rows: Rows) -> list[Finding]:
    """Turn a fault into findings: the first rows one by one, the others together.

    Returns:
        At most `LISTED` findings of one row, and one for all further rows; none if no row is at fault.
    """
    at = np.flatnonzero(fault.mask)
    findings = [_one_row(fault, rows, int(index)) for index in at[:LISTED]]
    rest = at[LISTED:]
    if rest.size:
        words = rows_in_words([int(row) for row in rows.row[rest[:LISTED]]], len(rest))
        findings.append(
            Finding(
                fault.code,
                fault.action,
                rows.file,
                None,
                rows.headings.get(fault.column or ""),
                None,
                f"{fault.message}: {counted(len(rest), 'further row')} ({words})",
                fault.remedy,
                sheet=rows.sheet,
                count=len(rest),
                amount=float(exact_sum(rows.exact[rest])),
            )
        )
    return findings


def list_faults(faults: Sequence[Fault], rows: Rows) -> list[Finding]:
    """Turn faults into findings, fault by fault in the order given."""
    return [finding for fault in faults for finding in list_fault(fault, rows)]


def show(text: str) -> str:
    """Show a cell of an amount, a date or an identifier; anything that looks like prose is described.

    A name in the amount column means that the mapping is wrong, and it must not reach a log.
    """
    clean = text.strip()
    prose = _WORDS.search(clean) or (clean[:1].isalpha() and not any(map(str.isdigit, clean)))
    known = clean.lower() in MISSING or _INFINITE.match(clean)
    if len(clean) > _SHOWN or (prose and not known):
        return f"<text of {len(clean)} characters>"
    return clean


def _is_harmless(fault: Fault, cell: str) -> bool:
    """Whether a cell that may look like prose can be shown: meant to be, a currency, a single letter."""
    return fault.shown or len(cell) <= (CURRENCY_CODE if fault.column == "currency" else 1)


def _one_row(fault: Fault, rows: Rows, index: int) -> Finding:
    value = None
    if fault.column is not None and fault.column in rows.cells:
        cell = cell_text(rows.cells[fault.column][index].as_py())
        value = cell.strip()[:_SHOWN] if _is_harmless(fault, cell.strip()) else show(cell)
    return Finding(
        fault.code,
        fault.action,
        rows.file,
        int(rows.row[index]),
        rows.headings.get(fault.column or ""),
        value,
        fault.message,
        fault.remedy,
        sheet=rows.sheet,
        amount=float(rows.exact[index]),
    )
