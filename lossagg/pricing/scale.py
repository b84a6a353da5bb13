"""Severities on the lattice of one scale: discretised once, then cut, moved and joined option by option.

The integrals of the survival function over the cells carry everything: their differences are the law of a
payment split between the two lattice points beside it with its mean kept, and those of min(X, d) are those
of X below d. Integrals, not probabilities, so a cap need not be a lattice point.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.cover import Schedule
from lossagg.engines.book import Line
from lossagg.engines.payment import PaymentLaw
from lossagg.engines.span import common_span, places
from lossagg.families.base import CountLaw

UNSEEN_COUNT = 1e-8
_ALIGNED = 1e-9
_MOST_AMOUNTS = 2000
_SECTIONS = 64


class Scale:
    """The severities on the lattice of one scale, discretised once.

    Args:
        lines: the lines.
        schedules: the schedules that will be asked for; their own amounts should be lattice points.
        top: least reach of the lattice.
        points: number of lattice points.
    """

    def __init__(self, lines: Sequence[Line], schedules: Sequence[Schedule], top: float, points: int) -> None:
        self.points = points
        self.step = _fitted(schedules, top / (points - 1), lines)
        self._edges = self.step * np.arange(points + 1.0)
        self._caps = np.array(sorted({cap for s in schedules if (cap := cap_of(s)) is not None}))
        self._parts: dict[str, dict[float, float]] = {}
        self._areas: dict[tuple[str, int], FloatArray] = {}
        self._counts: dict[tuple[str, int], float] = {}
        for line in lines:  # before the threads start
            self._base(line)
            self._part_of_cell(line, None)

    def fill(self, line: Line, schedule: Schedule, masses: FloatArray) -> None:
        """The law of one payment, split between lattice points with its mean kept.

        Args:
            line: the line.
            schedule: what is paid of a loss.
            masses: filled, shape (points,); payments beyond the lattice are left out.
        """
        areas = masses  # integrals of the survival function over the cells, in steps, then differenced
        ends = self._fill_areas(line, schedule, areas)
        masses[1:] = areas[:-1] - areas[1:]
        masses[0] = 1.0 - ends

    def _fill_areas(self, line: Line, schedule: Schedule, areas: FloatArray) -> float:
        """Fill the cell areas of the payment and return that of the first cell."""
        cap = cap_of(schedule)
        pieces = None if cap is not None else self._moved(schedule)
        if cap is not None:
            self._cut(line, cap, areas)
        elif pieces is not None:
            self._joined(line, pieces, areas)
        else:
            areas[:] = _payment_areas(PaymentLaw(line.severity, schedule), self._edges) / self.step
        return float(areas[0])

    def _cut(self, line: Line, cap: float, areas: FloatArray) -> None:
        """min(X, cap): the cells below the cap, and the part of the cell it lies in."""
        whole, place = self._base(line), cap / self.step
        if place >= self.points:
            areas[:] = whole
            return
        k = _cell(place)
        areas[:k] = whole[:k]
        areas[k:] = 0.0
        areas[k] = self._part_of_cell(line, cap)

    def _part_of_cell(self, line: Line, cap: float | None) -> float:
        """What the cell a cap lies in still holds; for all caps of the scale at once."""
        if line.name not in self._parts:
            caps = self._caps[self._caps < self.step * self.points]
            starts = self.step * np.array([_cell(place) for place in caps / self.step])
            parts = np.asarray(line.severity.layer_mean(starts, caps)) / self.step
            self._parts[line.name] = dict(zip(caps.tolist(), parts.tolist(), strict=True))
        return 0.0 if cap is None else self._parts[line.name][cap]

    def _joined(self, line: Line, pieces: list[tuple[int, int, int]], areas: FloatArray) -> None:
        """Pieces (first cell, end cell, how far the loss is ahead) of a schedule of slopes 0 and 1."""
        whole = self._base(line, max(ahead for _, _, ahead in pieces))
        areas[:] = 0.0
        for first, end, ahead in pieces:
            end = min(end, self.points)
            if first < end:
                areas[first:end] = whole[first + ahead : end + ahead]

    def _moved(self, schedule: Schedule) -> list[tuple[int, int, int]] | None:
        """The rising pieces in cells, where every slope is 0 or 1, nothing jumps, and all ends are lattice
        points that are not too far out; else None."""
        ends = (*schedule.starts[1:], np.inf)
        pieces, reached = [], 0.0
        for start, end, value, slope in zip(
            schedule.starts, ends, schedule.values, schedule.slopes, strict=True
        ):
            if slope not in (0.0, 1.0) or abs(value - reached) > _ALIGNED * max(value, 1.0):
                return None
            reached = value if slope == 0.0 else value + (end - start)
            if slope == 0.0:
                continue
            cells = [amount / self.step for amount in (value, reached, start - value)]
            if any(c < np.inf and abs(c - round(c)) > 1e-6 for c in cells) or cells[2] > 3 * self.points:
                return None
            pieces.append((round(cells[0]), int(min(np.rint(cells[1]), self.points)), round(cells[2])))
        return pieces or None

    def _base(self, line: Line, ahead: int = 0) -> FloatArray:
        """Cell areas of the loss itself, in steps, as far as `points + ahead` cells."""
        blocks = 1 - (-ahead // self.points)
        key = (line.name, blocks)
        if key not in self._areas:
            edges = self._edges if blocks == 1 else self.step * np.arange(blocks * self.points + 1.0)
            # Differences of the limited mean are off by parts in 1e16 of a cell times its number: far below
            # the round-off of the transform, and far cheaper than what keeps every digit of a far cell.
            self._areas[key] = np.diff(np.asarray(line.severity.limited_mean(edges))) / self.step
        return self._areas[key]

    def split_count(self, line: Line, schedule: Schedule) -> float:
        """The most payments of a year that do not lie on a lattice point, at probability 1e-8.

        The part of losses that are split is rounded up to a twentieth, so that few quantiles are sought.
        """
        law = line.severity
        if law.atoms and np.isclose(sum(chance for _, chance in law.atoms), 1.0, rtol=0.0, atol=1e-12):
            sizes = np.array([amount for amount, _ in law.atoms])
            chances = np.array([chance for _, chance in law.atoms])
            share = float(chances[places(schedule(sizes), self.step)[1] > 0].sum())
        elif schedule.slopes[-1] == 0.0 and place_of(schedule.values[-1], self.step):
            share = 1.0 - float(law.sf(schedule.starts[-1]))
        else:
            share = 1.0
        twentieths = int(np.ceil(20.0 * share))
        key = (line.name, twentieths)
        if key not in self._counts:
            thinned = line.frequency if twentieths == 20 else line.frequency.thinned(twentieths / 20.0)
            self._counts[key] = _most_count(thinned) if twentieths else 0.0
        return self._counts[key]


def _cell(place: float) -> int:
    """The cell a place lies in, in steps; a place within rounding of a lattice point begins one."""
    near = round(place)
    return near if abs(place - near) <= _ALIGNED * max(near, 1.0) else int(place)


def place_of(amount: float, step: float) -> bool:
    """Whether an amount is a lattice point."""
    place = amount / step
    return bool(abs(place - np.rint(place)) <= _ALIGNED * max(place, 1.0))


def _payment_areas(payment: PaymentLaw, edges: FloatArray) -> FloatArray:
    """The integral of P(Y > y) over each cell, atoms included."""
    areas = np.asarray(payment.continuous_areas(edges))
    amounts, chances = payment.atoms
    for amount, chance in zip(amounts.tolist(), chances.tolist(), strict=True):
        if amount > 0:
            areas = areas + chance * (np.minimum(amount, edges[1:]) - np.minimum(amount, edges[:-1]))
    return areas


def _fitted(schedules: Sequence[Schedule], least: float, lines: Sequence[Line]) -> float:
    """The step at or above `least` of which the schedules' own amounts are multiples, if there is one; for
    severities made of atoms, the span of their amounts where it is long enough."""
    amounts = {amount for schedule in schedules for amount in _own_amounts(schedule)}
    for line in lines:
        amounts |= {amount for amount, _ in line.severity.atoms if amount > 0}
    span = common_span(sorted(amounts)) if 0 < len(amounts) <= _MOST_AMOUNTS else None
    if span is None and amounts:
        span = common_span(sorted({a for schedule in schedules for a in _own_amounts(schedule)}))
    if span is None or span < least:
        return least
    return span / int(np.floor(span / least * (1.0 + _ALIGNED)))


def _own_amounts(schedule: Schedule) -> set[float]:
    """Where the schedule bends, and what it pays there."""
    found = {start for start in schedule.starts if start > 0}
    return found | {value for value in schedule.values if value > 0}


def cap_of(schedule: Schedule) -> float | None:
    """d where the schedule is min(x, d), else None."""
    if schedule.is_identity:
        return np.inf
    if schedule.starts == (0.0,) and schedule.slopes == (0.0,):
        return 0.0 if schedule.values == (0.0,) else None
    if schedule.slopes == (1.0, 0.0) and schedule.values == (0.0, schedule.starts[1]):
        return schedule.starts[1]
    return None


def _most_count(count: CountLaw) -> float:
    """A number the count exceeds with probability at most 1e-8."""
    low, high = -1.0, float(np.ceil(count.mean() + 8.0 * float(np.sqrt(count.variance())) + 8.0))
    while float(count.sf(high)) > UNSEEN_COUNT:
        low, high = high, 2.0 * high
    while high - low > 1.0:
        between = np.unique(np.floor(np.linspace(low, high, _SECTIONS + 1)[1:]))
        enough = int(np.argmax(np.asarray(count.sf(between)) <= UNSEEN_COUNT))
        low, high = (low if enough == 0 else float(between[enough - 1])), float(between[enough])
    return high
