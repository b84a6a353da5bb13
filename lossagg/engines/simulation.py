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

from lossagg.arrays import FloatArray, IntArray
from lossagg.cover import Cover
from lossagg.engines.book import Book, Line, PlacedCover, Subject
from lossagg.engines.joint import ALONE, JointBlock, joint_block
from lossagg.engines.quantile_table import QuantileTable, quantile_table
from lossagg.engines.result import BookResult
from lossagg.engines.sampled import SimulatedAnnualLoss
from lossagg.engines.search_table import CountSampler, count_sampler
from lossagg.engines.streams import BLOCK_YEARS, block_state, line_key
from lossagg.engines.yearly import LOSS, LineColumns, annual_amounts, growth, line_columns
from lossagg.errors import EngineError, InputError
from lossagg.families.base import CountLaw, SizeLaw
from lossagg.kernels.compile import awaits_compilation
from lossagg.kernels.simulation import TILE, Kept, Notes, Sums, add_events, add_years

MOST_YEARS = 10**10
MOST_LOSSES = 1e13
NOTES = 2**16
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


@dataclass(frozen=True, eq=False)
class PreparedLine:
    """A line as the kernels take it: key of its streams, samplers, columns to add up."""

    name: str
    key: tuple[int, int]
    counts: CountSampler
    sizes: QuantileTable
    columns: LineColumns


def prepare_line(line: Line, book: Book, subjects: tuple[Subject, ...]) -> PreparedLine:
    """Tables and columns of a line of a book."""
    return PreparedLine(
        line.name,
        line_key(line.name),
        count_sampler(line.frequency, f"line {line.name!r}"),
        quantile_table(line.severity),
        line_columns(book, line.name, subjects),
    )


def run_block(
    book: Book,
    subjects: tuple[Subject, ...],
    lines: tuple[PreparedLine, ...],
    *,
    seed: int,
    block: int,
    years: int,
) -> dict[Subject, FloatArray]:
    """Simulate one block of years: the annual amount of every subject, shape (years,)."""
    joint = joint_block(book.lines, book.dependences, seed=seed, block=block)
    sums = {}
    for line in lines:
        annual = line_sums(line, joint, seed=seed, block=block, years=years)
        if line.name in joint.ranks:
            annual = annual[:, joint.source(line.name, annual[line.columns.column[LOSS]])]
        sums[line.name] = {key: annual[column] for key, column in line.columns.column.items()}
    return annual_amounts(book, subjects, sums)


def line_sums(
    line: PreparedLine, joint: JointBlock = ALONE, *, seed: int, block: int, years: int
) -> FloatArray:
    """Annual sums of a line's columns in one block, shape (columns, years), before a copula moves years."""
    nothing = np.empty(0)
    kept = Kept(0, 0, np.empty(0, dtype=np.int64), nothing)
    annual = np.zeros((line.columns.count, whole_tiles(years)))
    if line.columns.count:
        state = block_state(seed, line.key, block)
        counts = _counts(line, joint, state)
        sums = Sums(line.columns.ramps, -1, joint.scale.get(line.name, nothing), annual)
        _simulate_years(line, state, sums, counts[: annual.shape[1]], years, kept)
    return annual[:, :years]


def block_events(
    line: PreparedLine, joint: JointBlock = ALONE, *, seed: int, block: int, first: int, last: int
) -> tuple[IntArray, FloatArray]:
    """The very losses that `line_sums` adds up, for a replay of single years.

    Args:
        line: the line.
        joint: what the dependences of the book say of the block.
        seed: the seed of the run.
        block: number of the block.
        first: first year asked for, counted from the start of the block.
        last: the year after the last.

    Returns:
        Counts per year, shape (last - first,), and sizes in the order of the years, as `line_sums` has them.
    """
    state = block_state(seed, line.key, block)
    counts = _counts(line, joint, state)
    own = counts[first:last]
    place = np.cumsum(own) - own
    kept = Kept(first, last, place, np.empty(int(own.sum())))
    sums = Sums(np.empty((0, 5)), -1, np.empty(0), np.empty((0, whole_tiles(last))))
    years, sizes = _simulate_years(line, state, sums, counts[: whole_tiles(last)], last, kept)
    inside = (years >= first) & (years < last)
    by_year = np.argsort(years[inside], kind="stable")
    kept.sizes[np.isnan(kept.sizes)] = sizes[inside][by_year]
    scale = joint.scale.get(line.name)
    return own, kept.sizes if scale is None else kept.sizes * np.repeat(scale[first:last], own)


def _counts(line: PreparedLine, joint: JointBlock, state: np.ndarray) -> IntArray:
    """Losses of each year of a block: those the dependences say, or the line's own."""
    given = joint.counts.get(line.name)
    return line.counts.draw(state, BLOCK_YEARS) if given is None else given


def _simulate_years(
    line: PreparedLine, state: np.ndarray, sums: Sums, counts: IntArray, years: int, kept: Kept
) -> tuple[IntArray, FloatArray]:
    """Run the loops over a block; (year, size) of the losses that the law itself had to answer."""
    notes = Notes(np.empty(NOTES, dtype=np.int64), np.empty(NOTES))
    cursor = np.zeros(3, dtype=np.int64)
    answered = [(np.empty(0, dtype=np.int64), np.empty(0))]
    while cursor[0] < years:
        found = add_years(state, line.sizes.arrays, sums, counts, years, cursor, notes, kept)
        if found:
            answered.append((notes.year[:found].copy(), line.sizes.exact(notes.probability[:found])))
            add_events(*answered[-1], sums)
    return np.concatenate([year for year, _ in answered]), np.concatenate([size for _, size in answered])


def whole_tiles(years: int) -> int:
    """Years up to the end of the tile that the last of them belongs to."""
    return min(-(-years // TILE) * TILE, BLOCK_YEARS)


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
