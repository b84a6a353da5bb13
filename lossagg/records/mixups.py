"""Mix-ups of unit and currency: groups of amounts that are of another order than all the others.

Amounts in thousands among amounts in units, or in another currency than declared, show as a group (a year,
a currency) whose median is a hundred times that of the rest, or a hundredth. The bound is common practice
of the trade, without a published source. Where units are mixed row by row, the amounts of a line gather in
two heaps about a thousand apart: their logarithms are bimodal. Nothing is changed by either finding.
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from lossagg.arrays import BoolArray, FloatArray
from lossagg.records.check import CheckedLosses
from lossagg.records.findings import Finding

RATIO = 100.0
LEAST_GROUP, LEAST_REST = 5, 10
CHANCE = 1e-6
_PER_DECADE = 10
_APART = 3 * _PER_DECADE


def unit_findings(checked: CheckedLosses, used: BoolArray) -> list[Finding]:
    """Warn of years and currencies whose amounts are of another order than the rest.

    Args:
        checked: the records of one line.
        used: True for the rows that are used; shape (rows,).
    """
    table = checked.table
    amount = table.amount[used]
    found = _heap_findings(checked)
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


def _heap_findings(checked: CheckedLosses) -> list[Finding]:
    """Warn of amounts in two heaps; of all rows checked, for those in thousands may be below a threshold."""
    table = checked.table
    heaps = two_heaps(table.amount[checked.used])
    if heaps is None:
        return []
    low, between, high = heaps
    return [
        Finding(
            "two-heaps",
            "warn",
            table.file,
            None,
            table.headings.get("amount"),
            None,
            f"the amounts lie in two heaps a thousand apart: {_decade(*low)}, {_decade(*high)}, and "
            f"{between} in the decade halfway",
            "Are some rows in thousands and others in units?",
            sheet=table.sheet,
            line=checked.line,
            count=min(low[1], high[1]),
        )
    ]


def _decade(low: float, number: int) -> str:
    return f"{number} from {low:,.5g} to {10 * low:,.5g}"


def two_heaps(amount: FloatArray) -> tuple[tuple[float, int], int, tuple[float, int]] | None:
    """Find two heaps of amounts three decades apart.

    Three windows of one decade are laid over the logarithms, one and a half decades from each other. Under
    any law with one mode the middle window is to hold at least as many as the emptier of the outer two; the
    chance that it holds so many fewer is bounded by Hoeffding (1963, Probability inequalities for sums of
    bounded random variables, Journal of the American Statistical Association 58, theorem 1).

    Args:
        amount: amounts above zero; shape (rows,).

    Returns:
        (lower end of its decade, number) of the lower heap, number halfway, the same of the higher; None
        where there are no such heaps.
    """
    if not len(amount):
        return None
    place = np.floor(np.log10(amount) * _PER_DECADE).astype(np.int64)
    first = int(place.min())
    counts = np.bincount(place - first)
    if len(counts) < _APART:
        return None
    upto = np.concatenate([[0], np.cumsum(np.pad(counts, _PER_DECADE))])
    decade = upto[_PER_DECADE:] - upto[:-_PER_DECADE]
    low, middle, high = decade[:-_APART], decade[_APART // 2 : -_APART // 2], decade[_APART:]
    outer = np.minimum(low, high)
    gap = np.where(outer > middle, outer - middle, 0)
    exponent = gap.astype(np.float64) ** 2 / (2.0 * np.maximum(outer + middle, 1))
    best = int(np.argmax(exponent))
    if exponent[best] < -np.log(CHANCE):
        return None
    start = (first + best - _PER_DECADE) / _PER_DECADE
    return (10.0**start, int(low[best])), int(middle[best]), (10.0 ** (start + 3.0), int(high[best]))


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
