"""Annual losses by simulation: every year its losses, every loss its covers.

Years come in blocks; a block of a line draws its counts, then its sizes, from a stream of its own
(`streams`), so results depend on the seed, the names of the lines and the number of years alone, not
on workers or order. The loops are compiled and run outside the interpreter lock, one block per thread.
"""

from __future__ import annotations

import itertools
import logging
import os
import time
from collections import deque
from collections.abc import Callable
from concurrent.futures import Executor, Future, ThreadPoolExecutor
from dataclasses import dataclass, field
from functools import partial
from typing import TypeVar

import numpy as np

from lossagg.arrays import FloatArray, require_positive, require_probability
from lossagg.cover import Cover
from lossagg.engines.blocks import (
    PreparedLine,
    block_events,
    line_sums,
    numbered_block,
    prepare_line,
    run_block,
    scatter_alone,
    scatters_alone,
)
from lossagg.engines.book import GROSS, NET, Book, Subject, single_line
from lossagg.engines.by_line import detail_subjects
from lossagg.engines.collected import MOST_WHOLE, MOST_WHOLE_BYTES, Amounts, Collected, bytes_needed
from lossagg.engines.executors import on_executor
from lossagg.engines.result import AnnualLoss, BookResult
from lossagg.engines.sampled import SampledAnnualLoss
from lossagg.engines.stopping import (
    FIRST_PILOT_BLOCK,
    PILOT_BLOCKS,
    miss_at,
    relative_width,
    years_at,
    years_for,
)
from lossagg.engines.streams import BLOCK_YEARS
from lossagg.engines.yearly import growth
from lossagg.errors import EngineError, InputError
from lossagg.families.base import CountLaw, SizeLaw
from lossagg.kernels.compile import awaits_compilation
from lossagg.kernels.simulation import add_years, begin_strips, scatter_blocks

__all__ = ["PreparedLine", "Simulation", "block_events", "line_sums", "prepare_line", "run_block"]

MOST_YEARS = 10**10
MOST_LOSSES = 1e13
TIMED_FROM = 10_000_000  # years from which on a pilot block says how long the run will take
MOST_IN_A_CALL = 32  # blocks of scattered losses that take one call
MOST_TOGETHER = 8  # blocks that a thread takes at once: waking it costs as much as a short one
T = TypeVar("T")
log = logging.getLogger(__name__)


@dataclass(frozen=True, kw_only=True)
class Simulation:
    """The simulation engine: exact about its own error, the same on any number of workers.

    Up to 2,097,152 years, and beyond while they are few subjects, all annual amounts are kept; else the
    largest years, cells of the body and moments, in memory that does not grow with the years (see
    `reduction`).

    Args:
        years: years to simulate, 1 to 10**10; with `until` the run decides.
        seed: 0 to 2**64 - 1; the same seed gives the same bytes.
        workers: threads; by default one for each core this process may use.
        memory: bytes that the annual amounts may take.
        until: run until the interval of the capital figure reaches no further than this part of the figure
            to either side, 0.005 for 0.5 %; see `stopping` for why the interval stays valid.
        level: level of the value at risk that `until` is about: of the net loss of a book with covers, of
            the gross loss of one without, of the loss or payment asked for from `annual_loss`.
        seconds: longest time a run may be expected to take; a pilot says how long it will.
        executor: where the blocks of years are computed instead of in threads of this process: any executor
            of `concurrent.futures`, a pool of processes or a cluster's (see `executors`). It changes no byte.

    Raises:
        InputError: a setting outside its range.
    """

    years: int = 100_000
    seed: int = 1
    workers: int | None = None
    memory: int = 4 * 10**9
    until: float | None = None
    level: float = 0.995
    seconds: float = 86_400.0
    executor: Executor | None = field(default=None, repr=False, compare=False)

    def __post_init__(self) -> None:
        _require_whole(self.years, "years", 1, MOST_YEARS)
        _require_whole(self.seed, "seed", 0, 2**64 - 1)
        _require_whole(self.memory, "memory", 1, 2**63)
        if self.workers is not None:
            _require_whole(self.workers, "workers", 1, 4096)
        if self.until is not None:
            require_probability(self.until, "until", open_low=True, open_high=True)
        require_probability(self.level, "level", open_low=True, open_high=True)
        require_positive(self.seconds, "seconds")
        if self.executor is not None and not isinstance(self.executor, Executor):
            raise InputError(
                "executor must be an executor of concurrent.futures",
                value=self.executor,
                remedy="Give ProcessPoolExecutor(), say, or leave it out for threads of this process.",
            )

    @property
    def name(self) -> str:
        """The engine's name."""
        return "simulation"

    def annual_loss(
        self, frequency: CountLaw, severity: SizeLaw, cover: Cover | None = None
    ) -> SampledAnnualLoss:
        """The annual loss of one line, or what a cover pays of it; the same losses for every cover.

        Raises:
            EngineError: more years, losses or time than the machine can give.
        """
        book, subject = single_line(frequency, severity, cover)
        collected, miss = Run(self, book, (subject,), subject).simulate(())
        return collected.loss(subject, miss)

    def book(
        self,
        book: Book,
        progress: Callable[[float], None] | None = None,
        every_year: Callable[[int, Amounts], None] | None = None,
    ) -> BookResult:
        """Every subject of a book, the parts of single lines, and the largest years.

        Args:
            book: lines and covers.
            progress: called with the part done, 0 to 1, as blocks of years are finished.
            every_year: called with the number of the first year of each block, in order, and the annual
                amounts of every subject in it.

        Raises:
            InputError: a cover whose place among the others has no meaning, see `yearly`.
            EngineError: more years, losses or time than the machine can give.
        """
        details = detail_subjects(book)
        capital = NET if book.covers else GROSS
        run = Run(self, book, (*book.subjects, *details), capital, progress, every_year)
        collected, miss = run.simulate((GROSS, NET) if book.covers else (GROSS,))
        losses: dict[Subject, AnnualLoss] = dict(collected.losses(miss))
        return BookResult(
            {subject: losses[subject] for subject in book.subjects},
            details={subject: losses[subject] for subject in details},
            largest_years=collected.largest_years(),
        )


class Run:
    """One run of the simulation over a book.

    Args:
        settings: years, seed, workers and bounds.
        book: lines and covers.
        subjects: whose annual amounts are computed.
        capital: the subject whose value at risk `until` is about.
        progress: as for `Simulation.book`.
        every_year: as for `Simulation.book`.
    """

    def __init__(
        self,
        settings: Simulation,
        book: Book,
        subjects: tuple[Subject, ...],
        capital: Subject,
        progress: Callable[[float], None] | None = None,
        every_year: Callable[[int, Amounts], None] | None = None,
    ) -> None:
        self.settings, self.book, self.subjects, self.capital = settings, book, subjects, capital
        self.progress, self.every_year = progress, every_year
        self.lines = tuple(prepare_line(line, book, subjects) for line in book.lines)
        whole = settings.years >= BLOCK_YEARS and scatters_alone(book, self.lines)
        rare = scatter_blocks if whole else begin_strips
        if any(awaits_compilation(add_years if line.strips is None else rare) for line in self.lines):
            log.info("compiling the simulation for this machine; later runs start at once")
        self.orders = {s: (_moment_order(book, s), _most(book, s)) for s in subjects}
        self.workers = settings.workers or available_cores()

    def simulate(self, ranked: tuple[Subject, ...]) -> tuple[Collected, float]:
        """The annual amounts, and how often their intervals may miss.

        Args:
            ranked: subjects whose largest years are kept.

        Raises:
            EngineError: beyond the bounds of the settings.
        """
        if self.settings.until is not None:
            return self._until(self.settings.until, ranked)
        years = self.settings.years
        collected = Collected(self.orders, ranked, whole=self._fits(years, ranked))
        if years >= TIMED_FROM:
            _, seconds = self._pilot(1)
            self._require_time(years, seconds)
        self._fill(collected, 0, years, years)
        return collected, 0.05

    def _until(self, width: float, ranked: tuple[Subject, ...]) -> tuple[Collected, float]:
        pilot, seconds = self._pilot(PILOT_BLOCKS)
        level = self.settings.level
        needed = years_for(width, pilot, level)
        if not needed <= MOST_YEARS:
            raise EngineError(
                f"an interval of {width:.3%} to either side of the value at risk at {level:g} is out of "
                f"reach of {MOST_YEARS:,} years",
                value=width,
                remedy="Ask for a wider interval or a lower level, or use the far-tail engine.",
            )
        self._fits(years_at(0, needed), ranked)
        self._require_time(years_at(0, needed), seconds)
        collected = Collected(self.orders, ranked, whole=self._whole(years_at(0, needed)))
        done = 0
        for look in itertools.count():
            years = years_at(look, needed)
            self._require_time(years, seconds)
            if collected.whole and not self._whole(years):
                collected.reduce()
            self._fill(collected, done, years, years)
            done = years
            reached = relative_width(collected.loss(self.capital, miss_at(look)), level)
            log.info("%s years: the interval reaches %.3g %% to either side", f"{years:,}", 100.0 * reached)
            if reached <= width:
                return collected, miss_at(look)
        raise AssertionError  # pragma: no cover

    def _pilot(self, blocks: int) -> tuple[SampledAnnualLoss, float]:
        """(capital figure of a pilot, seconds that a year takes)."""
        pilot = Collected({self.capital: self.orders[self.capital]}, (), whole=True)
        pilot.make_room(blocks * BLOCK_YEARS)
        start = time.perf_counter()

        def one(block: int) -> None:
            pilot.add(block, self._block(FIRST_PILOT_BLOCK + block, BLOCK_YEARS))

        for_every_block(one, range(blocks), self.workers)
        return pilot.loss(self.capital), (time.perf_counter() - start) / (blocks * BLOCK_YEARS)

    def _block(self, block: int, years: int, room: FloatArray | None = None) -> dict[Subject, FloatArray]:
        return run_block(
            self.book, self.subjects, self.lines, seed=self.settings.seed, block=block, years=years, room=room
        )

    def _fill(self, collected: Collected, done: int, years: int, goal: int) -> None:
        """Simulate the years from `done` (whole blocks) on; `goal` is what progress counts towards."""
        require_losses(years, self.book)
        collected.make_room(years)
        blocks = range(done // BLOCK_YEARS, -(-years // BLOCK_YEARS))
        if self.settings.executor is not None:
            self._fill_elsewhere(self.settings.executor, collected, blocks, years, goal)
            return

        if collected.whole and not self.every_year and scatters_alone(self.book, self.lines):
            blocks = self._fill_alone(collected, blocks, years, goal)

        def one(block: int) -> dict[Subject, FloatArray] | None:
            own = min(BLOCK_YEARS, years - block * BLOCK_YEARS)
            amounts = self._block(block, own, collected.room(block, own))
            collected.add(block, amounts)
            return amounts if self.every_year else None

        def after(block: int, amounts: dict[Subject, FloatArray] | None) -> None:
            if self.every_year and amounts is not None:
                self.every_year(block * BLOCK_YEARS, amounts)
            if self.progress:
                self.progress(min((block + 1) * BLOCK_YEARS / goal, 1.0))

        for_every_block(one, blocks, self.workers, after, together=1 if self.every_year else MOST_TOGETHER)

    def _fill_alone(self, collected: Collected, blocks: range, years: int, goal: int) -> range:
        """The whole blocks of a single line with few losses a year, several in one call; the blocks left."""
        whole = range(blocks.start, years // BLOCK_YEARS)
        size = min(max(len(whole) // (4 * self.workers), 1), MOST_IN_A_CALL)
        groups = range(-(-len(whole) // size))

        def one(group: int) -> None:
            own = whole[group * size : (group + 1) * size]
            room = collected.room(own.start, len(own) * BLOCK_YEARS)
            room = np.zeros(len(own) * BLOCK_YEARS) if room is None else room
            amounts = scatter_alone(
                self.book, self.subjects, self.lines[0], room, seed=self.settings.seed, blocks=own
            )
            collected.add(own.start, amounts)

        def after(group: int, _: None) -> None:
            if self.progress:
                done = whole.start + min((group + 1) * size, len(whole))
                self.progress(done * BLOCK_YEARS / goal)

        for_every_block(one, groups, self.workers, after)
        return range(whole.stop, blocks.stop)

    def _fill_elsewhere(
        self, executor: Executor, collected: Collected, blocks: range, years: int, goal: int
    ) -> None:
        """As `_fill`, with the blocks computed by an executor and taken in here."""

        def after(block: int, amounts: dict[Subject, FloatArray]) -> None:
            collected.add(block, amounts)
            if self.every_year:
                self.every_year(block * BLOCK_YEARS, amounts)
            if self.progress:
                self.progress(min((block + 1) * BLOCK_YEARS / goal, 1.0))

        on_executor(
            executor,
            partial(numbered_block, self.book, self.subjects, self.lines, self.settings.seed, years),
            blocks,
            after,
        )

    def _whole(self, years: int) -> bool:
        whole, _ = bytes_needed(years, len(self.subjects), 0)
        small = years <= MOST_WHOLE or whole <= MOST_WHOLE_BYTES
        return small and whole <= self.settings.memory

    def _fits(self, years: int, ranked: tuple[Subject, ...]) -> bool:
        """Whether the amounts can be kept whole; refuses where even reduced they do not fit."""
        require_losses(years, self.book)
        _, reduced = bytes_needed(years, len(self.subjects), len(ranked))
        if self._whole(years):
            return True
        if reduced > self.settings.memory:
            raise EngineError(
                f"{years:,} years of {len(self.subjects)} annual amounts need {reduced / 1e9:,.2f} GB of "
                f"memory, above the bound of {self.settings.memory / 1e9:,.2f} GB",
                value=years,
                remedy=f"Ask for at most {self.settings.memory // (16 * len(self.subjects)):,} years, "
                "or raise `memory`.",
            )
        return False

    def _require_time(self, years: int, seconds_a_year: float) -> None:
        whole, reduced = bytes_needed(years, len(self.subjects), 2)
        memory = whole if self._whole(years) else reduced
        log.info(
            "about %s years, %s and %.2f GB of memory for them expected",
            f"{years:,}",
            _duration(years * seconds_a_year),
            memory / 1e9,
        )
        if years * seconds_a_year > self.settings.seconds:
            raise EngineError(
                f"{years:,} years would take about {_duration(years * seconds_a_year)}, above the bound of "
                f"{_duration(self.settings.seconds)}",
                value=years,
                remedy="Ask for fewer years or a wider interval, or raise `seconds`.",
            )


def _duration(seconds: float) -> str:
    if seconds < 120.0:
        return f"{seconds:.0f} seconds"
    return f"{seconds / 60.0:.0f} minutes" if seconds < 7200.0 else f"{seconds / 3600.0:,.1f} hours"


def require_resources(years: int, subjects: int, book: Book, memory: int) -> None:
    """Refuse, before anything is simulated, what would not fit or never end.

    Raises:
        EngineError: with the estimate, the bound, and the years that would fit.
    """
    needed = 16.0 * years * subjects
    if needed > memory:
        raise EngineError(
            f"{years:,} years of {subjects} annual amounts need {needed / 1e9:,.1f} GB of memory, "
            f"above the bound of {memory / 1e9:,.1f} GB",
            value=years,
            remedy=f"Ask for at most {int(memory // (16 * subjects)):,} years, or raise `memory`.",
        )
    require_losses(years, book)


def require_losses(years: int, book: Book) -> None:
    """Refuse what would never end.

    Raises:
        EngineError: with the number of losses.
    """
    losses = float(years) * sum(line.frequency.mean() for line in book.lines)
    if not losses <= MOST_LOSSES:
        raise EngineError(
            f"{losses:.3g} losses would have to be simulated, above the bound of {MOST_LOSSES:.0e}",
            value=years,
            remedy="Ask for fewer years, or model only losses above a higher threshold.",
        )


def available_cores() -> int:
    """Cores that this process may use."""
    affinity = getattr(os, "sched_getaffinity", None)
    return len(affinity(0)) if affinity else os.cpu_count() or 1


def for_every_block(
    work: Callable[[int], T],
    blocks: range,
    workers: int,
    after: Callable[[int, T], None] | None = None,
    *,
    together: int = 1,
) -> None:
    """Do the work of every block, several at a time; `after` is called for each in order, in this thread.

    Only a few blocks are under way at once, so results that wait for their turn stay few.

    Args:
        work: computes a block.
        blocks: their numbers.
        workers: threads.
        after: receives the number of each block and its result.
        together: most blocks handed to a thread at once, where there are plenty.
    """
    if workers == 1 or len(blocks) <= 1:
        for block in blocks:
            result = work(block)
            if after:
                after(block, result)
        return
    size = min(max(len(blocks) // (16 * workers), 1), together)

    def some(part: range) -> list[T]:
        return [work(block) for block in part]

    with ThreadPoolExecutor(min(workers, len(blocks))) as pool:
        under_way: deque[tuple[range, Future[list[T]]]] = deque()
        try:
            for start in range(0, len(blocks), size):
                part = blocks[start : start + size]
                under_way.append((part, pool.submit(some, part)))
                if len(under_way) >= 8 * workers:
                    _finish(under_way, after)
            while under_way:
                _finish(under_way, after)
        finally:
            pool.shutdown(wait=False, cancel_futures=True)


def _finish(under_way: deque[tuple[range, Future[list[T]]]], after: Callable[[int, T], None] | None) -> None:
    part, future = under_way.popleft()
    for block, result in zip(part, future.result(), strict=True):
        if after:
            after(block, result)


def _moment_order(book: Book, subject: Subject) -> float:
    """The order from which on a subject's moments do not exist: of the heaviest line it grows with."""
    orders = [line.severity.tail_index for line in book.lines if growth(book, subject, line.name) > 0.0]
    return min(orders, default=np.inf)


def _most(book: Book, subject: Subject) -> float:
    return book.cover(subject.name).terms.most_per_year if subject.kind == "cover" else np.inf


def _require_whole(value: object, name: str, low: int, high: int) -> None:
    """Check a whole number within a range, booleans excluded."""
    whole = isinstance(value, int | np.integer) and not isinstance(value, bool)
    if not whole or not low <= int(value) <= high:  # type: ignore[call-overload]
        raise InputError(
            f"{name} must be a whole number from {low:,} to {high:,}",
            value=value,
            remedy=f"Give {name} as a whole number in that range.",
        )
