"""What belongs to single lines: their share of what covers pay, what they keep, their largest loss of a year.

A cover's payment for a year belongs to its lines in proportion to what its event terms pay of their
losses in that year, what its retained cap gives back included: without annual terms that is exactly what it
pays of each line's losses.
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.engines.book import Book, Subject

LARGEST_GROSS = Subject("largest")


def detail_subjects(book: Book) -> tuple[Subject, ...]:
    """Per line the part ceded, the part retained (where there are covers) and the largest loss of the
    year, and the largest of all lines."""
    names = [line.name for line in book.lines]
    kinds = ("ceded", "retained", "largest") if book.covers else ("largest",)
    return (*(Subject(kind, name) for kind in kinds for name in names), LARGEST_GROSS)


def ceded_by_line(
    book: Book,
    sums: Mapping[str, Mapping[tuple[str, str], FloatArray]],
    paid: Mapping[str, FloatArray],
) -> dict[str, FloatArray]:
    """What all covers together pay of each line in each year.

    Args:
        book: lines and covers.
        sums: per line and column key, the year's sum over events, shape (years,).
        paid: per cover what it pays in each year, shape (years,).
    """
    years = next(iter(next(iter(sums.values())).values())).size
    ceded = {name: np.zeros(years) for name in sums}
    for cover in sorted(paid):
        parts = {name: _claim(own, cover) for name, own in sums.items() if ("paid", cover) in own}
        whole = sum((parts[name] for name in sorted(parts)), start=np.zeros(years))
        share = np.divide(paid[cover], whole, out=np.zeros(years), where=whole > 0.0)
        for name, part in parts.items():
            ceded[name] += share * part
    return ceded


def _claim(own: Mapping[tuple[str, str], FloatArray], cover: str) -> FloatArray:
    kept = own.get(("kept", cover))
    return own["paid", cover] if kept is None else own["paid", cover] + kept
