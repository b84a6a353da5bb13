"""The option engine: many options over the same lines, by one transform pair each.

An option keeps r(X) of an event. With rising pieces of slope 1 (deductibles, limits on top of them) the
law of r(X) on the lattice is the law of X cut, moved and joined: the integrals of its survival function
over the cells are those of X, so a severity is discretised once for all options of about the same reach,
and an option costs its forward transform, the generating function and one inverse. Other schedules
(a share, a franchise) are discretised by themselves.

The lattice length is the transform length: an exponential tilt makes what wraps around negligible (Grubel
and Hermesmeier 1999), and payments beyond the lattice are left out, which changes no probability on it.
"""

from __future__ import annotations

from collections import deque
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from concurrent.futures import Future, ThreadPoolExecutor
from dataclasses import dataclass
from typing import Any, TypeVar

import numpy as np
from scipy import fft

from lossagg.arrays import FloatArray
from lossagg.cover import Schedule
from lossagg.engines.book import Line
from lossagg.engines.simulation import available_cores
from lossagg.kernels.pricing import survival_and_areas
from lossagg.pricing.lattice_year import LatticeYear
from lossagg.pricing.option import Events
from lossagg.pricing.scale import UNSEEN_COUNT, Scale, cap_of

R = TypeVar("R")
POINTS = 2**16
MOST_POINTS = 2**19
TILT = 12.0
HALF_OCTAVE = float(np.sqrt(2.0))
_UNCOVERED = 1e-7
_ROUND_OFF = 1e-9
_SHORT = 1e-4
_SAME = 1e-12


@dataclass(frozen=True)
class Moments:
    """Mean and second moment of an annual sum, by the laws' own formulas; `inf` where they do not exist."""

    mean: float
    second: float

    @property
    def variance(self) -> float:
        """The variance; `inf` where it does not exist."""
        return max(self.second - self.mean**2, 0.0) if self.second < np.inf else np.inf

    @property
    def sd(self) -> float:
        """The standard deviation; `inf` where it does not exist."""
        return float(np.sqrt(self.variance))


def _in_order(work: Callable[..., R], jobs: Iterable[tuple[Any, ...]], workers: int) -> Iterator[R]:
    """Results in the order of the jobs, with no more than two per worker waiting to be read."""
    if workers == 1:
        for job in jobs:
            yield work(*job)
        return
    waiting: deque[Future[R]] = deque()
    with ThreadPoolExecutor(workers) as pool:
        for job in jobs:
            waiting.append(pool.submit(work, *job))
            if len(waiting) >= 2 * workers:
                yield waiting.popleft().result()
        while waiting:
            yield waiting.popleft().result()


class Grid:
    """Annual sums of event schedules over the same lines.

    Args:
        lines: the lines; a schedule for each of them makes one annual sum.
        points: length of lattice and transform; a power of two is fastest.
        workers: threads; by default one for each core. The figures do not depend on it.
        ratio: annual sums whose reaches differ by less than this factor share a lattice, which beyond the
            default ends where the farthest of them does.
        bracketed: whether a bracket is wanted; without one it is as wide as can be.
    """

    def __init__(
        self,
        lines: Sequence[Line],
        points: int = POINTS,
        workers: int | None = None,
        ratio: float = HALF_OCTAVE,
        bracketed: bool = True,
    ) -> None:
        self.lines = tuple(lines)
        self.points = points
        self.workers = workers or available_cores()
        self.ratio = ratio
        self.bracketed = bracketed
        self._tilt = TILT / points
        index = np.arange(points)
        self._weights = np.exp(-self._tilt * index)
        self._untilt = np.exp(self._tilt * index)

    def moments(self, schedules: Sequence[Events]) -> list[Moments]:
        """Mean and second moment of the annual sum of each schedule, without a lattice."""
        means, variances = np.zeros(len(schedules)), np.zeros(len(schedules))
        for k, line in enumerate(self.lines):
            first, second = event_moments(line, [events[k] for events in schedules])
            with np.errstate(invalid="ignore"):
                spread = np.where(np.isinf(second), np.inf, np.maximum(second - first**2, 0.0))
                means += line.frequency.mean() * first
                variances += line.frequency.mean() * spread + line.frequency.variance() * first**2
        with np.errstate(invalid="ignore"):
            seconds = np.where(np.isinf(variances), np.inf, variances + means**2)
        return [Moments(float(m), float(s)) for m, s in zip(means, seconds, strict=True)]

    def years(
        self,
        schedules: Iterable[Events],
        done: Callable[[float], None] | None = None,
        least: Mapping[Events, float] | None = None,
    ) -> Iterator[tuple[Events, LatticeYear]]:
        """The annual sum of every schedule, scale by scale; each distribution may be dropped when read.

        Args:
            schedules: what an event of each line adds, line by line.
            done: called with the part that is done.
            least: amounts that the lattice must reach, where annual terms act far out.
        """
        distinct = list(dict.fromkeys(schedules))
        moments = dict(zip(distinct, self.moments(distinct), strict=True))
        scales: dict[int, list[Events]] = {}
        reaches: dict[int, float] = {}
        for schedule in distinct:
            reach = max(self._reach(schedule, moments[schedule]), 1.01 * (least or {}).get(schedule, 0.0))
            scale = int(np.ceil(np.log(reach) / np.log(self.ratio)))
            scales.setdefault(scale, []).append(schedule)
            reaches[scale] = max(reach, reaches.get(scale, 0.0))
        finished = 0
        for scale, members in sorted(scales.items()):
            top, left = self.ratio**scale, members
            if self.ratio > HALF_OCTAVE:
                top = min(top, reaches[scale])
            while left:
                own = sorted({own for events in left for own in events}, key=_order)
                room = Scale(self.lines, own, top, self.points)
                jobs = ((room, schedule, moments[schedule]) for schedule in left)
                short = []
                for schedule, year in _in_order(self._year, jobs, min(self.workers, len(left))):
                    if year.survival[-1] > _SHORT:
                        short.append(schedule)
                        continue
                    finished += 1
                    yield schedule, year
                    if done:
                        done(finished / len(distinct))
                top, left = 2.0 * top, short

    def _year(self, room: Scale, schedule: Events, moment: Moments) -> tuple[Events, LatticeYear]:
        """One option: masses, transform, generating function, inverse; arrays that fit the cache."""
        masses = np.empty(self.points)
        product: Any = None
        for line, own in zip(self.lines, schedule, strict=True):
            room.fill(line, own, masses)
            masses *= self._weights
            generated = line.frequency.pgf(fft.rfft(masses))
            product = generated if product is None else np.multiply(product, generated, out=product)
        tilted = fft.irfft(product, self.points, overwrite_x=True)
        survival, areas = np.empty(self.points), masses
        survival_and_areas(tilted, self._untilt, survival, areas)
        shift, slack = np.inf, 1.0
        if self.bracketed:
            pairs = zip(self.lines, schedule, strict=True)
            shift, slack = _bracket([room.split_count(line, own) for line, own in pairs], room.step)
        return schedule, LatticeYear(room.step, survival, areas, moment.mean, moment.second, shift, slack)

    def _reach(self, events: Events, moment: Moments) -> float:
        """An amount the year hardly ever exceeds: Bernstein's inequality (1924) at 1e-7 where an event
        is bounded, else the largest event of 20,000 years on top of the bulk. Checked on the lattice."""
        most, log_odds = max(_most_of(schedule) for schedule in events), 16.0
        if most == 0.0:
            return 1.0
        if most < np.inf:
            spread = float(np.sqrt((most * log_odds / 3.0) ** 2 + 2.0 * moment.variance * log_odds))
            return moment.mean + most * log_odds / 3.0 + spread
        largest = max(
            float(own(np.array([line.severity.isf(min(5e-5 / line.frequency.mean(), 0.5))]))[0])
            for line, own in zip(self.lines, events, strict=True)
        )
        capped = tuple(Schedule.capped(largest).after(own) for own in events)
        bulk = self.moments([capped])[0]
        return largest + bulk.mean + 5.0 * bulk.sd


def _order(schedule: Schedule) -> tuple[tuple[float, ...], ...]:
    return schedule.starts, schedule.values, schedule.slopes


def _most_of(schedule: Schedule) -> float:
    cap = cap_of(schedule)
    return schedule.most if cap is None else cap


def event_moments(line: Line, schedules: Sequence[Schedule]) -> tuple[FloatArray, FloatArray]:
    """First and second moment of each schedule g of one loss of a line, shape (schedules,) each.

    E[g] is the sum of slope times layer over the pieces, and of jump times survival; E[g**2] likewise of the
    second moments of the layers: all pieces of all schedules in one call of the law.
    """
    law = line.severity
    owner, start, end, value, slope, before = _every_piece(schedules)
    rising, jumps = slope != 0.0, value != before
    layer, square, above = np.zeros(len(start)), np.zeros(len(start)), np.zeros(len(start))
    layer[rising] = law.layer_mean(start[rising], end[rising])
    square[rising] = law.layer_second_moment(start[rising], end[rising])
    above[jumps] = law.sf(start[jumps])
    at_start = np.zeros(len(start))
    raised = rising & (value != 0.0)
    at_start[raised] = 2.0 * value[raised] * slope[raised] * layer[raised]
    first = slope * np.where(rising, layer, 0.0) + (value - before) * above
    second = slope**2 * np.where(rising, square, 0.0) + at_start + (value**2 - before**2) * above
    whose, count = owner.astype(np.int64), len(schedules)
    return np.asarray(np.bincount(whose, first, count)), np.asarray(np.bincount(whose, second, count))


def _every_piece(schedules: Sequence[Schedule]) -> FloatArray:
    """Schedule, start, end, value, slope of every piece, and what the one before reaches: six rows."""
    rows = []
    for k, schedule in enumerate(schedules):
        reached = 0.0
        ends = (*schedule.starts[1:], np.inf)
        pieces = zip(schedule.starts, ends, schedule.values, schedule.slopes, strict=True)
        for start, end, value, slope in pieces:
            joined = abs(reached - value) <= _SAME * value
            rows.append((float(k), start, end, value, slope, value if joined else reached))
            reached = value + slope * (end - start) if slope and end < np.inf else value
    return np.array(rows).T


def _bracket(counts: list[float], step: float) -> tuple[float, float]:
    """Half width in money and uncovered probability, see `lattice_year`, from the most split payments of
    each line."""
    shift = step * float(np.sqrt(sum(counts) * np.log(2.0 / _UNCOVERED) / 2.0))
    slack = (_UNCOVERED + len(counts) * UNSEEN_COUNT) if shift else 0.0
    return shift, slack + float(np.exp(-TILT)) * _SHORT + _ROUND_OFF
