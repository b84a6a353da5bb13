"""The rules on words: currency, line, status; and on rows that repeat others."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np

from lossagg.arrays import BoolArray
from lossagg.records.events import CLOSED, CLOSED_WORDS, OPEN, OPEN_WORDS, is_open
from lossagg.records.faults import Fault
from lossagg.records.findings import Finding
from lossagg.records.headings import nearest
from lossagg.records.table import LossTable
from lossagg.records.words import by_word


def status_faults(table: LossTable, live: BoolArray) -> list[Fault]:
    """Find statuses that are not understood or contradict what is outstanding; all of them warn."""
    if "status" not in table.words:
        return []
    status = table.words["status"]
    known = by_word(status, lambda word: word.casefold() in (*OPEN_WORDS, *CLOSED_WORDS, ""))
    closed = by_word(status, lambda word: word.casefold() in CLOSED_WORDS)
    return [
        Fault(
            "unknown-status",
            "warn",
            "status",
            live & ~known,
            "the status is not understood and counts as not open",
            f"Use {', '.join((*OPEN, *CLOSED))}.",
        ),
        Fault(
            "missing-status",
            "warn",
            "status",
            live & (status == ""),
            "the status is missing and counts as not open",
            "Supply it: open claims are not final, and without it they pass for closed.",
        ),
        Fault(
            "closed-with-reserve",
            "warn",
            "outstanding",
            live & closed & (table.number("outstanding") > 0),
            "the claim is closed but has an outstanding amount",
            "Correct the status or the reserve.",
        ),
        Fault(
            "open-without-reserve",
            "warn",
            "outstanding",
            live & is_open(table) & (table.number("outstanding") == 0),
            "the claim is open but nothing is outstanding",
            "Check that the amount is not final only in appearance.",
        ),
    ]


def word_faults(table: LossTable, currency: str, live: BoolArray) -> list[Fault]:
    """Find rows in another currency, which stop, and rows that name none, which are set aside."""
    faults = []
    if "currency" in table.words:
        written = table.words["currency"]
        other = by_word(written, lambda word: word.upper() != currency.upper())
        empty = written == ""
        faults = [
            Fault(
                "other-currency",
                "stop",
                "currency",
                live & other & ~empty,
                f"the currency is not that of the portfolio, {currency}",
                "Name a file of dated rates under [portfolio], or split the file.",
            ),
            Fault(
                "missing-currency",
                "set aside",
                "currency",
                live & empty,
                "the currency is missing",
                "Supply it, or leave the column out if all amounts are in one currency.",
            ),
        ]
    return faults


def line_faults(table: LossTable, lines: tuple[str, ...]) -> list[Fault]:
    """Find the rows whose line is not one of the portfolio, name by name; all of them stop."""
    if "line" not in table.words:
        return []
    written, live = table.words["line"], ~table.blank
    known = canonical_lines(lines)
    unknown = by_word(written, lambda word: word.casefold() not in known)
    names = written[live & unknown].present()
    faults = []
    for name in names:
        mask = live & (written == name)
        message = "the line is not one of the portfolio" if name else "the line is missing"
        remedy = nearest(name, lines)
        # A name near that of a line is a slip of it; any other may be a person's, in a column mapped wrongly.
        near = remedy.startswith("Did you mean")
        faults.append(Fault("unknown-line", "stop", "line", mask, message, remedy, shown=near))
    return faults


def pooled_lines(table: LossTable) -> list[Finding]:
    """Warn when a file taken for one line names several."""
    names = table.word("line")[~table.blank].present()
    if len(names) < 2:
        return []
    return [
        Finding(
            "lines-pooled",
            "warn",
            table.file,
            None,
            table.headings["line"],
            None,
            f"the rows are taken for one line but name {len(names)}",
            "Let every line of the portfolio that it holds read this file, and its rows are told apart.",
            sheet=table.sheet,
            count=len(table),
        )
    ]


def canonical_lines(lines: Sequence[str]) -> Mapping[str, str]:
    """{line as compared: line as the portfolio names it}."""
    return {name.strip().casefold(): name for name in lines}


def repeated_faults(table: LossTable, live: BoolArray) -> list[Fault]:
    """Rows equal in every column: with an event identifier a copy, without one perhaps a twin."""
    rows = table.alike
    date, amount = table.date[rows].astype(np.int64), np.nan_to_num(table.amount[rows], nan=-1.0)
    marks = table.fingerprint[rows]
    order = np.lexsort((rows, marks))
    same = np.ones(max(len(rows) - 1, 0), dtype=np.bool_)
    # The date and the amount guard against two different rows whose fingerprints agree by chance.
    for cells in (marks, date, amount):
        same &= cells[order][1:] == cells[order][:-1]
    again = np.zeros(len(table), dtype=np.bool_)
    again[rows[order[1:][same]]] = True
    named = (table.word("event") != "") | (table.word("claim") != "")
    identifier = "claim" if "claim" in table.words else "event"
    return [
        Fault(
            "duplicate-row",
            "set aside",
            identifier if identifier in table.words else None,
            live & again & named,
            f"the row repeats an earlier one of the same {identifier} in every column",
            "If both are claims of their own, give them an identifier that tells them apart.",
        ),
        Fault(
            "twin-row",
            "warn",
            None,
            live & again & ~named,
            "the row repeats an earlier one in every column; without an event both are used",
            "Give events identifiers, or delete the copy.",
        ),
    ]
