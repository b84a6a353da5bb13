"""What the losses of a table suggest about themselves: window, lines, reporting thresholds.

All of these are suggestions: a threshold in particular can be seen, where records end abruptly at a round
number, but not proved.
"""

from __future__ import annotations

import numpy as np

from lossagg.arrays import BoolArray, FloatArray
from lossagg.records.events import group_events
from lossagg.records.table import LossTable

MOST_LINES = 30
LEAST_ROWS = 3
LEAST_LOSSES = 20
_ROUND = np.array([1.0, 2.0, 2.5, 5.0])
_WIDTH = 1.25
_LEAST_ABOVE, _SHARE_BELOW, _CONTRAST = 5, 0.005, 10
_GAP_DAYS, _MOST_STRAY = 730, 0.01


def lines_seen(table: LossTable) -> dict[str, int]:
    """The lines that the line column names, as first written, with their rows; none where it names none.

    A column of more than 30 different words, or of fewer than three rows to a word, tells no lines apart.
    """
    if "line" not in table.words:
        return {}
    words = [word for word in np.asarray(table.word("line")[~table.blank]).tolist() if word]
    first: dict[str, str] = {}
    for word in words:
        first.setdefault(word.casefold(), word)
    counted = dict.fromkeys(first.values(), 0)
    for word in words:
        counted[first[word.casefold()]] += 1
    if len(counted) > MOST_LINES or len(words) < LEAST_ROWS * len(counted):
        return {}
    return counted


def main_span(days: np.ndarray) -> tuple[np.datetime64, np.datetime64]:
    """The first and the last day, without a few stray ones that lie years apart from all others.

    Args:
        days: days without NaT, at least one; shape (days,).
    """
    ordered = np.sort(days)
    cuts = np.flatnonzero(np.diff(ordered).astype(np.int64) > _GAP_DAYS) + 1
    largest = max(np.split(ordered, cuts), key=len)
    if len(largest) < (1 - _MOST_STRAY) * len(ordered):
        largest = ordered
    return largest[0], largest[-1]


def last_few(days: np.ndarray, latest: np.datetime64) -> tuple[int, np.datetime64]:
    """How many losses fall in the calendar year of the latest date, 0 unless next to none; the latest before.

    Args:
        days: dates of loss without NaT, at least one; shape (days,).
        latest: the latest date of the table.
    """
    begins = latest.astype("datetime64[Y]").astype("datetime64[D]")
    inside = int(np.count_nonzero((days >= begins) & (days <= latest)))
    earlier = days[days < begins]
    if not earlier.size or inside > max(1, _SHARE_BELOW * len(days)):
        return 0, latest
    return inside, earlier.max()


def suggested_threshold(amounts: FloatArray) -> float | None:
    """A round number just above which the records begin abruptly; None where there is none to be seen.

    At least five losses lie within a quarter above it, ten times as many as within the same ratio below, and
    at most one loss, or one in two hundred, lies below it at all.

    Args:
        amounts: losses, events summed up; shape (losses,).
    """
    losses = np.sort(amounts[amounts > 0])
    if len(losses) < LEAST_LOSSES:
        return None
    powers = 10.0 ** np.arange(0, 13)
    candidates = np.sort(np.outer(powers, _ROUND).ravel())[::-1]
    spared = max(1, int(_SHARE_BELOW * len(losses)))
    for candidate in candidates[candidates <= losses[spared]].tolist():
        below, at, above = np.searchsorted(losses, [candidate / _WIDTH, candidate, candidate * _WIDTH])
        if above - at >= max(_LEAST_ABOVE, _CONTRAST * (at - below)) and at <= spared:
            return float(candidate)
    return None


def losses_of(table: LossTable, line: str | None) -> FloatArray:
    """The amounts of a line, summed by event; shape (events,)."""
    rows: BoolArray = ~table.blank & np.isfinite(table.amount) & (table.amount > 0) & ~np.isnat(table.date)
    if line is not None:
        wanted = line.casefold()
        rows &= np.array([word.casefold() == wanted for word in np.asarray(table.word("line")).tolist()])
    return group_events(table, rows).amount if rows.any() else np.zeros(0)
