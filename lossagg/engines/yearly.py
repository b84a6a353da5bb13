"""From the events of a line to the annual amounts of every subject: what the simulation adds up.

Per line and event only what some subject needs is added up: the loss, what each cover's event terms
pay of it, and what a deductible with a retained cap keeps. Annual terms then act on whole arrays of
years. Sums over lines and covers run in the order of their names, so that the order in which a
portfolio lists them does not reach the last digit.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.cover import Schedule
from lossagg.engines.book import GROSS, NET, Book, PlacedCover, Subject
from lossagg.engines.by_line import LARGEST_GROSS, ceded_by_line
from lossagg.errors import InputError

LOSS = ("loss", "")
LARGEST = ("largest", "")


@dataclass(frozen=True, eq=False)
class LineColumns:
    """What is added up for one line.

    Attributes:
        column: for ("loss", ""), ("paid", cover), ("kept", cover) and ("largest", ""): the column that
            holds it.
        ramps: shape (R, 5), the rising pieces of all columns: column, start, end, slope, jump.
        count: number of columns.
        largest: the column that receives the largest loss of the year; -1 for none.
    """

    column: dict[tuple[str, str], int]
    ramps: FloatArray
    count: int
    largest: int = -1


def line_columns(book: Book, line: str, subjects: tuple[Subject, ...]) -> LineColumns:
    """The columns that these subjects need of a line; equal schedules share one.

    Raises:
        InputError: a cover after one whose annual terms also act on lines the later does not cover.
    """
    needed: dict[tuple[str, str], Schedule] = {}
    for cover in needed_covers(book, subjects):
        for before in book.annual_covers_before(cover):
            _require_same_ground(book, cover, before)
    if any(_needs_loss(subject, line) for subject in subjects):
        needed[LOSS] = book.line(line).cost
    for cover in needed_covers(book, subjects):
        paid, kept = book.event_payment(cover, line), book.event_retained(cover, line)
        if paid is None or kept is None:
            continue
        needed["paid", cover.name] = paid
        if cover.terms.retained_cap < np.inf:
            needed["kept", cover.name] = kept
    distinct: list[Schedule] = []
    for schedule in needed.values():
        if schedule not in distinct:
            distinct.append(schedule)
    rows = [row for k, schedule in enumerate(distinct) for row in ramps(schedule, k)]
    column = {key: distinct.index(schedule) for key, schedule in needed.items()}
    ramps_of_all = np.array(rows, dtype=np.float64).reshape(-1, 5)
    if not any(subject in (LARGEST_GROSS, Subject("largest", line)) for subject in subjects):
        return LineColumns(column, ramps_of_all, len(distinct))
    return LineColumns(
        {**column, LARGEST: len(distinct)}, ramps_of_all, len(distinct) + 1, largest=len(distinct)
    )


def _needs_loss(subject: Subject, line: str) -> bool:
    return subject in (GROSS, NET) or (subject.kind in ("line", "retained") and subject.name == line)


def ramps(schedule: Schedule, column: int) -> list[tuple[float, float, float, float, float]]:
    """A schedule as a sum of ramps (column, start, end, slope, jump)."""
    ends = (*schedule.starts[1:], np.inf)
    pieces = zip(schedule.starts, ends, schedule.values, schedule.slopes, strict=True)
    rows, reached = [], 0.0
    for start, end, value, slope in pieces:
        jump = 0.0 if np.isclose(value, reached, rtol=1e-12, atol=0.0) else value - reached
        if slope != 0.0 or jump != 0.0:
            rows.append((float(column), start, end, slope, jump))
        reached = value + slope * (end - start) if slope != 0.0 else value
    return rows


def needed_covers(book: Book, subjects: tuple[Subject, ...]) -> tuple[PlacedCover, ...]:
    """Covers whose yearly payment these subjects need, in the order in which they pay."""
    every = any(subject.kind in ("net", "ceded", "retained") for subject in subjects)
    names = {cover.name for cover in book.covers if every or Subject("cover", cover.name) in subjects}
    for cover in reversed(book.covers):
        if cover.name in names:
            names |= {before.name for before in book.annual_covers_before(cover)}
    return tuple(cover for cover in book.covers if cover.name in names)


def annual_amounts(
    book: Book,
    subjects: tuple[Subject, ...],
    sums: Mapping[str, Mapping[tuple[str, str], FloatArray]],
    together: Sequence[FloatArray] = (),
) -> dict[Subject, FloatArray]:
    """The annual amount of every subject.

    Args:
        book: lines and covers.
        subjects: the subjects asked for.
        sums: per line and column key, the year's sum over events, shape (years,).
        together: the largest cost of a year's events that hit several lines at once, shape (years,) each.
    """
    amounts: dict[Subject, FloatArray] = {
        Subject("line", line): own[LOSS] for line, own in sums.items() if LOSS in own
    }
    if GROSS in subjects or NET in subjects:
        amounts[GROSS] = _total([amounts[Subject("line", line)] for line in sorted(sums)])
    paid: dict[str, FloatArray] = {}
    for cover in needed_covers(book, subjects):
        seen = _over_lines(sums, ("paid", cover.name))
        for before in book.annual_covers_before(cover):
            seen = seen - paid[before.name]
        kept = _over_lines(sums, ("kept", cover.name)) if cover.terms.retained_cap < np.inf else None
        paid[cover.name] = _paid(cover, seen, kept)
        amounts[Subject("cover", cover.name)] = paid[cover.name]
    if NET in subjects:
        amounts[NET] = amounts[GROSS] - _total([np.zeros(1), *(paid[name] for name in sorted(paid))])
    if any(subject.kind in ("ceded", "retained") for subject in subjects):
        for line, ceded in ceded_by_line(book, sums, paid).items():
            amounts[Subject("ceded", line)] = ceded
            if LOSS in sums[line]:
                amounts[Subject("retained", line)] = sums[line][LOSS] - ceded
    largest = {line: book.line(line).cost(own[LARGEST]) for line, own in sums.items() if LARGEST in own}
    amounts |= {Subject("largest", line): own for line, own in largest.items()}
    if LARGEST_GROSS in subjects:
        amounts[LARGEST_GROSS] = np.maximum.reduce([*largest.values(), *together])
    return {subject: amounts[subject] for subject in subjects}


def growth(book: Book, subject: Subject, line: str) -> float:
    """By how much a subject's annual amount grows per unit of one huge loss of a line.

    Zero means that the subject is bounded in that loss, so its moments exist whatever the line's tail.
    """
    cost = book.line(line).cost.slopes[-1]
    if subject in (GROSS, LARGEST_GROSS):
        return cost
    if subject.kind not in ("cover", "net") and subject.name != line:
        return 0.0
    if subject.kind in ("line", "largest"):
        return cost
    slopes: dict[str, float] = {}
    for cover in book.covers:
        slopes[cover.name] = _cover_growth(book, cover, line, slopes)
    if subject.kind == "ceded":
        return sum(slopes.values())
    if subject.kind in ("net", "retained"):
        left = cost - sum(slopes.values())
        return left if left > 1e-12 else 0.0
    return slopes[subject.name]


def _cover_growth(book: Book, cover: PlacedCover, line: str, earlier: Mapping[str, float]) -> float:
    paid, kept = book.event_payment(cover, line), book.event_retained(cover, line)
    if paid is None or kept is None:
        return 0.0
    terms = cover.terms.year_terms
    slope = paid.slopes[-1] - sum(earlier[before.name] for before in book.annual_covers_before(cover))
    slope *= terms.payments.slopes[-1]
    if terms.kept is not None:
        slope += kept.slopes[-1]
    slope *= terms.beyond.slopes[-1]
    return slope if slope > 1e-12 else 0.0


def _require_same_ground(book: Book, cover: PlacedCover, before: PlacedCover) -> None:
    for line in book.lines:
        if book.covers_line(before, line.name) and not book.covers_line(cover, line.name):
            raise InputError(
                f"the cover comes after {before.name!r}, whose annual terms act on a line it does not cover",
                where=f"cover {cover.name!r}",
                value=line.name,
                remedy="The part of a year's payment that belongs to single lines is not defined: "
                "let both cover the same lines, or place one cover per line first.",
            )


def _paid(cover: PlacedCover, seen: FloatArray, kept: FloatArray | None) -> FloatArray:
    terms = cover.terms
    if terms.has_annual_terms or cover.after:
        return terms.annual_payment(seen, kept)
    return seen if terms.year_share == 1.0 else terms.year_share * seen


def _over_lines(sums: Mapping[str, Mapping[tuple[str, str], FloatArray]], key: tuple[str, str]) -> FloatArray:
    return _total([sums[line][key] for line in sorted(sums) if key in sums[line]])


def _total(parts: list[FloatArray]) -> FloatArray:
    total = parts[0]
    for part in parts[1:]:
        total = total + part
    return total
