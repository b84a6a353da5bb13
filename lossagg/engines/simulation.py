"""Annual losses by simulation: every year its losses, every loss its covers.

Years come in blocks; a block of a line draws its counts, then its sizes, from a stream of its own
(`streams`), so results depend on the seed, the names of the lines and the number of years alone, not
on workers or order. The loops are compiled and run outside the interpreter lock, one block per thread.
"""

from __future__ import annotations

import logging
import os
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor, as_completed
from dataclasses import dataclass

import numpy as np

from lossagg.cover import Cover
from lossagg.engines.blocks import PreparedLine, block_events, line_sums, prepare_line, run_block
from lossagg.engines.book import Book, Line, PlacedCover, Subject
from lossagg.engines.result import BookResult
from lossagg.engines.sampled import SimulatedAnnualLoss
from lossagg.engines.streams import BLOCK_YEARS
from lossagg.engines.yearly import growth
from lossagg.errors import EngineError, InputError
from lossagg.families.base import CountLaw, SizeLaw
from lossagg.kernels.compile import awaits_compilation
from lossagg.kernels.simulation import add_years

__all__ = ["PreparedLine", "Simulation", "block_events", "line_sums", "prepare_line", "run_block"]

MOST_YEARS = 10**10
MOST_LOSSES = 1e13
log = logging.getLogger(__name__)


@dataclass(frozen=True, kw_only=True)
class Simulation:
    """The simulation engine: exact about its own error, the same on any number of workers.

    Args:
        years: years to simulate, 1 to 10**10.
        seed: 0 to 2**64 - 1; the same seed gives the same bytes.
        workers: threads; by default one for each core this process may use.
        memory: bytes that the annual amounts may take.

    Raises:
        InputError: a setting outside its range.
    """

    years: int = 100_000
    seed: int = 1
    workers: int | None = None
    memory: int = 4 * 10**9

    def __post_init__(self) -> None:
        _require_whole(self.years, "years", 1, MOST_YEARS)
        _require_whole(self.seed, "seed", 0, 2**64 - 1)
        _require_whole(self.memory, "memory", 1, 2**63)
        if self.workers is not None:
            _require_whole(self.workers, "workers", 1, 4096)

    @property
    def name(self) -> str:
        """The engine's name."""
        return "simulation"

    def annual_loss(
        self, frequency: CountLaw, severity: SizeLaw, cover: Cover | None = None
    ) -> SimulatedAnnualLoss:
        """The annual loss of one line, or what a cover pays of it; the same losses for every cover.

        Raises:
            EngineError: more years or losses than the machine can hold.
        """
        line = Line(name="loss", frequency=frequency, severity=severity)
        covers = () if cover is None else (PlacedCover(name="cover", terms=cover),)
        subject = Subject("line", "loss") if cover is None else Subject("cover", "cover")
        return self._simulate(Book(lines=(line,), covers=covers), (subject,), None)[subject]

    def book(self, book: Book, progress: Callable[[float], None] | None = None) -> BookResult:
        """Every subject of a book.

        Args:
            book: lines and covers.
            progress: called with the part done, 0 to 1, as blocks of years are finished.

        Raises:
            InputError: a cover whose place among the others has no meaning, see `yearly`.
            EngineError: more years or losses than the machine can hold.
        """
        return BookResult(dict(self._simulate(book, book.subjects, progress)))

    def _simulate(
        self, book: Book, subjects: tuple[Subject, ...], progress: Callable[[float], None] | None
    ) -> dict[Subject, SimulatedAnnualLoss]:
        require_resources(self.years, len(subjects), book, self.memory)
        if awaits_compilation(add_years):
            log.info("compiling the simulation for this machine; later runs start at once")
        lines = tuple(prepare_line(line, book, subjects) for line in book.lines)
        results = np.empty((len(subjects), self.years))

        def fill(block: int) -> None:
            first = block * BLOCK_YEARS
            last = min(first + BLOCK_YEARS, self.years)
            amounts = run_block(book, subjects, lines, seed=self.seed, block=block, years=last - first)
            for row, subject in enumerate(subjects):
                results[row, first:last] = amounts[subject]

        _for_every_block(fill, -(-self.years // BLOCK_YEARS), self.workers or available_cores(), progress)
        return {
            subject: SimulatedAnnualLoss(results[row], _moment_order(book, subject), _most(book, subject))
            for row, subject in enumerate(subjects)
        }


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


def _for_every_block(
    fill: Callable[[int], None], blocks: int, workers: int, progress: Callable[[float], None] | None
) -> None:
    if workers == 1 or blocks == 1:
        for block in range(blocks):
            fill(block)
            if progress:
                progress((block + 1) / blocks)
        return
    with ThreadPoolExecutor(min(workers, blocks)) as pool:
        futures = [pool.submit(fill, block) for block in range(blocks)]
        try:
            for done, future in enumerate(as_completed(futures), start=1):
                future.result()
                if progress:
                    progress(done / blocks)
        finally:
            pool.shutdown(wait=False, cancel_futures=True)


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
