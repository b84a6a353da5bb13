"""Records with a history: several rows per claim, each at its own valuation date.

The latest row of a claim, valued on or before the valuation date of the portfolio, is the claim. Earlier
rows are set aside, counted and valued, and are what development is measured from.
"""

from __future__ import annotations

import numpy as np

from lossagg.arrays import BoolArray, IntArray
from lossagg.records.faults import Fault
from lossagg.records.table import LossTable
from lossagg.records.words import word_codes

SUPERSEDED = "superseded"


def has_history(table: LossTable) -> bool:
    """True when the records carry the valuation date of each row, and the claim it is of."""
    return "valuation" in table.dates and "claim" in table.words


def valuation_faults(table: LossTable, valuation_date: np.datetime64, live: BoolArray) -> list[Fault]:
    """Find the rows that are not the latest of their claim, and those that cannot be placed in time.

    Args:
        table: the records; without a `valuation` column there is nothing to find.
        valuation_date: last day the records describe.
        live: True for rows that carry a record; shape (rows,).
    """
    if "valuation" not in table.dates:
        return _revised_claims(table, live)
    if "claim" not in table.words:
        return [
            Fault(
                "valuation-without-claim",
                "stop",
                "valuation",
                _first(live),
                "rows carry a valuation date but no claim, so it is not known which are of the same one",
                "Map the column that identifies the claim, or leave the valuation dates out.",
            )
        ]
    valuation = table.dates["valuation"]
    claim = table.words["claim"]
    later = live & (valuation > valuation_date)
    undated = live & np.isnat(valuation)
    nameless = live & (claim == "")
    placed = live & ~later & ~undated & ~nameless
    latest, twice = _latest(table, placed)
    return [
        Fault(
            "later-valuation",
            "set aside",
            "valuation",
            later,
            "the row is valued after the valuation date of the portfolio",
            "None needed if the portfolio is meant to be valued then.",
            tolerated=True,
        ),
        Fault(
            "missing-valuation",
            "set aside",
            "valuation",
            undated,
            "the valuation date is missing",
            "Supply it.",
        ),
        Fault(
            "missing-claim",
            "set aside",
            "claim",
            nameless,
            "the claim is not named, so its valuations cannot be told from those of others",
            "Supply it.",
        ),
        Fault(
            "repeated-valuation",
            "stop",
            "valuation",
            twice,
            "the claim stands twice at one valuation date with different content",
            "Keep one of the rows.",
        ),
        Fault(
            SUPERSEDED,
            "set aside",
            "valuation",
            placed & ~latest,
            "the claim has a later valuation, which is used; this one tells how it developed",
            "None needed.",
            tolerated=True,
        ),
    ]


def _revised_claims(table: LossTable, live: BoolArray) -> list[Fault]:
    """Claims that stand in several different rows, when nothing says which of them is the latest."""
    if "claim" not in table.words:
        return []
    rows = np.flatnonzero(live & (table.words["claim"] != ""))
    claim, mark = claim_codes(table, rows), table.fingerprint[rows]
    order = np.lexsort((mark, claim))
    claim, mark, rows = claim[order], mark[order], rows[order]
    differ = (claim[1:] == claim[:-1]) & (mark[1:] != mark[:-1])
    mask = np.zeros(len(table), dtype=np.bool_)
    mask[rows[np.isin(claim, claim[1:][differ])]] = True
    return [
        Fault(
            "revised-claim",
            "stop",
            "claim",
            mask,
            "the claim stands in several rows that differ, and no valuation date says which is the latest",
            "Map the column with the valuation date of each row, or keep the latest row of each claim; "
            "payments of one claim are summed if its column is mapped as the event.",
        )
    ]


def _latest(table: LossTable, placed: BoolArray) -> tuple[BoolArray, BoolArray]:
    """Rows that are the latest of their claim, and rows that contradict one of the same day."""
    rows = np.flatnonzero(placed)
    code = claim_codes(table, rows)
    day = table.dates["valuation"][rows].astype(np.int64)
    # Of rows that are the same the first is kept, as the rule on copies keeps it.
    order = np.lexsort((-rows, day, code))
    code, day, rows = code[order], day[order], rows[order]
    latest = np.zeros(len(table), dtype=np.bool_)
    twice = np.zeros(len(table), dtype=np.bool_)
    if len(rows):
        same_claim = code[1:] == code[:-1]
        latest[rows[np.append(~same_claim, True)]] = True
        same_day = same_claim & (day[1:] == day[:-1])
        differ = table.fingerprint[rows[1:]] != table.fingerprint[rows[:-1]]
        twice[np.maximum(rows[1:], rows[:-1])[same_day & differ]] = True
    return latest, twice


def claim_codes(table: LossTable, rows: IntArray) -> IntArray:
    """Number the claims of some rows from 0; a claim of two lines is two; shape (rows,)."""
    codes = word_codes(table.words["claim"][rows])
    if "line" in table.words and len(rows):
        lines = word_codes(table.words["line"][rows])
        codes = codes * (int(lines.max()) + 1) + lines
    return codes


def _first(live: BoolArray) -> BoolArray:
    mask = np.zeros(len(live), dtype=np.bool_)
    mask[np.flatnonzero(live)[:1]] = True
    return mask
