"""Mix-ups of unit and currency: groups of amounts that are of another order than all the others.

Amounts in thousands among amounts in units, or in another currency than declared, show as a group (a year,
a currency) whose median is a hundred times that of the rest, or a hundredth. The bound is common practice
of the trade, without a published source; nothing is changed by it.
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from lossagg.arrays import BoolArray, FloatArray
from lossagg.records.check import CheckedLosses
from lossagg.records.findings import Finding

RATIO = 100.0
LEAST_GROUP, LEAST_REST = 5, 10


def unit_findings(checked: CheckedLosses, used: BoolArray) -> list[Finding]:
    """Warn of years and currencies whose amounts are of another order than the rest.

    Args:
        checked: the records of one line.
        used: True for the rows that are used; shape (rows,).
    """
    table = checked.table
    amount = table.amount[used]
    found = []
    for what, several, group in _groups(checked, used):
        for name, mine, rest in _medians(amount, group):
            ratio = mine / rest
            found.append(
                Finding(
                    "unit-mix-up",
                    "warn",
                    table.file,
                    None,
                    table.headings.get("amount"),
                    f"{mine:g} against {rest:g}",
                    f"the median amount of {what} {name} is "
                    + (f"{ratio:,.0f} times" if ratio > 1 else f"1/{1 / ratio:,.0f} of")
                    + f" that of all other {several}",
                    "Are all amounts in one unit and in the currency stated, and are rates the right way up?",
                    sheet=table.sheet,
                    line=checked.line,
                    count=int(np.count_nonzero(group == name)),
                )
            )
    return found


def _groups(checked: CheckedLosses, used: BoolArray) -> Iterator[tuple[str, str, np.ndarray]]:
    """What amounts are grouped by: the year of the loss, and the currency as it was written."""
    table = checked.table
    yield "year", "years", table.date[used].astype("datetime64[Y]").astype(np.int64) + 1970
    converted = [change.rows[used] for change in table.changes if change.step == "currency"]
    if converted:
        text = table.cells["currency"].to_pylist()
        yield "currency", "currencies", np.array([cell.strip().upper() for cell in text])[used]


def _numbered(group: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """The different groups in order, and the number of that of each amount; years without a sort."""
    if not len(group) or group.dtype.kind != "i":
        names, number = np.unique(group, return_inverse=True)
        return names, number
    offset = group - group.min()
    occurs = np.bincount(offset) > 0
    return np.flatnonzero(occurs) + group.min(), (np.cumsum(occurs) - 1)[offset]


def _medians(amount: FloatArray, group: np.ndarray) -> Iterator[tuple[object, float, float]]:
    """(group, its median, median of the rest) of each group that is of another order."""
    names, number = _numbered(group)
    sizes = np.bincount(number, minlength=len(names))
    if len(names) < 2:
        return
    order = np.argsort(number.astype(np.uint16) if len(names) < 2**16 else number, kind="stable")
    parts = np.split(amount[order], np.cumsum(sizes)[:-1])
    middles = np.array([float(np.median(part)) for part in parts])
    centre = float(np.median(amount))
    for at, name in enumerate(names.tolist()):
        if sizes[at] < LEAST_GROUP or len(amount) - sizes[at] < LEAST_REST:
            continue
        # Against the median of all first, which is fast; against that of the rest where it stands out.
        if 1 / np.sqrt(RATIO) < middles[at] / centre < np.sqrt(RATIO):
            continue
        rest = float(np.median(amount[number != at]))
        if not 1 / RATIO < middles[at] / rest < RATIO:
            yield name, middles[at], rest
