"""All options on the same simulated losses: the check of the exact figures, and what only it can tell.

The losses are those of the simulation engine (same seed, lines and years: same losses), so options differ
by their terms alone and the probability that one beats another is not drowned in noise.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass, field

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.engines.blocks import PreparedLine, line_sums, prepare_sums
from lossagg.engines.book import Book, Line
from lossagg.engines.executors import UNDER_WAY, on_executor
from lossagg.engines.sampled import SimulatedAnnualLoss
from lossagg.engines.simulation import available_cores, require_resources
from lossagg.engines.streams import BLOCK_YEARS
from lossagg.engines.yearly import LineColumns, ramps
from lossagg.pricing.option import Events, Option

MEMORY = 2 * 10**9
ROUNDING = 1e-9
Paid = Callable[[FloatArray], FloatArray]
EveryYear = Callable[[int, Mapping[str, FloatArray]], None]
"""Called with the number of the first of some simulated years and the amounts of every column in them."""


@dataclass(eq=False)
class Tally:
    """What the simulated years say of one option.

    Attributes:
        years: number of years.
        retained, ceded: mean of the years.
        retained_sd, ceded_sd: standard deviation of the years.
        no_loss: part of the years in which nothing is retained.
        above: per threshold asked for, the part of the years in which more is retained.
        beats_base: part of the years in which the option costs less than the base option.
        kept: the retained amounts year by year where they were asked for, else None.
        paid: the ceded amounts likewise.
    """

    years: int = 0
    retained: float = 0.0
    ceded: float = 0.0
    retained_sd: float = 0.0
    ceded_sd: float = 0.0
    no_loss: float = 0.0
    above: dict[float, float] = field(default_factory=dict)
    beats_base: float = 0.0
    kept: SimulatedAnnualLoss | None = None
    paid: SimulatedAnnualLoss | None = None


def simulate_options(
    lines: Sequence[Line],
    options: Sequence[Option],
    *,
    base: int,
    paid: Sequence[Paid | None],
    thresholds: Mapping[str, Sequence[float]],
    keep: Sequence[bool],
    years: int,
    seed: int,
    workers: int | None = None,
    progress: Callable[[float], None] | None = None,
    every_year: EveryYear | None = None,
) -> list[Tally]:
    """Simulate years once and apply every option to them.

    Args:
        lines: the lines the options are for.
        options: the options, all with the same event cap.
        base: index of the base option.
        paid: per option, what it costs beside retained losses as a function of what the cover pays for the
            years: premium and costs, and reinstatement premium; None where unknown.
        thresholds: per option name, retained amounts to count the years above.
        keep: per option, whether its yearly amounts are wanted.
        years: years to simulate.
        seed: seed of the simulation engine.
        workers: threads; the results do not depend on it.
        progress: called with the part done.
        every_year: receives the years in their order: columns "loss" (all lines, before any option),
            "retained NAME" and "ceded NAME" of every option.

    Raises:
        EngineError: more years than the machine can hold.
    """
    require_resources(years, 2 * sum(keep) + 1, Book(lines=tuple(lines)), MEMORY)
    columns = _Columns.of(options)
    by_name = sorted(enumerate(lines), key=lambda pair: pair[1].name)
    prepared = [columns.line(number, line) for number, line in by_name]
    room = _Room(options, base, paid, thresholds, keep, years)

    def block(number: int) -> dict[str, FloatArray]:
        first = number * BLOCK_YEARS
        size = min(BLOCK_YEARS, years - first)
        sums = sum(
            (line_sums(line, seed=seed, block=number, years=size) for line in prepared),
            start=np.zeros((columns.count, size)),
        )
        by_events = {events: sums[k] for events, k in columns.place.items()}
        return room.add(number, first, size, by_events, shown=every_year is not None)

    blocks = range(-(-years // BLOCK_YEARS))

    def finished(number: int, amounts: dict[str, FloatArray]) -> None:
        if every_year:
            every_year(number * BLOCK_YEARS, amounts)
        if progress:
            progress((number + 1) / len(blocks))

    with ThreadPoolExecutor(workers or available_cores()) as pool:
        under_way = _under_way(len(options)) if every_year else UNDER_WAY
        on_executor(pool, block, blocks, finished, under_way=under_way)
    return room.tallies(lines)


def _under_way(options: int) -> int:
    """Blocks computed ahead of the one written: as many as the memory holds the columns of."""
    return int(np.clip(MEMORY // (16 * options * BLOCK_YEARS), 2, UNDER_WAY))


def costs_less(own: FloatArray, other: FloatArray) -> FloatArray:
    """Where a cost is below another by more than rounding: by more than 1e-9 of it, or of 1 if it is less."""
    return np.asarray(own < other - ROUNDING * np.maximum(np.abs(other), 1.0))


@dataclass(frozen=True)
class _Columns:
    """The distinct annual sums of all options: what is added up over lines and events."""

    place: dict[Events, int]

    @classmethod
    def of(cls, options: Sequence[Option]) -> _Columns:
        needed = [s for option in options for s in (option.scope, option.paid)]
        needed += [o.kept for o in options if o.terms is not None and o.terms.retained_cap < np.inf]
        return cls({events: k for k, events in enumerate(dict.fromkeys(needed))})

    @property
    def count(self) -> int:
        return len(self.place)

    def line(self, number: int, line: Line) -> PreparedLine:
        rows = [row for events, k in self.place.items() for row in ramps(events[number], k)]
        columns = LineColumns({}, np.array(rows, dtype=np.float64).reshape(-1, 5), self.count)
        return prepare_sums(line, columns)


class _Room:
    """Running sums per option and block; added up in the order of the blocks at the end."""

    def __init__(
        self,
        options: Sequence[Option],
        base: int,
        paid: Sequence[Paid | None],
        thresholds: Mapping[str, Sequence[float]],
        keep: Sequence[bool],
        years: int,
    ) -> None:
        self.options, self.base, self.paid, self.thresholds = options, base, paid, thresholds
        self.years = years
        self.kept = {k: np.empty((2, years)) for k, wanted in enumerate(keep) if wanted}
        self.sums: dict[int, list[FloatArray]] = {}

    def add(
        self, number: int, first: int, size: int, sums: Mapping[Events, FloatArray], shown: bool
    ) -> dict[str, FloatArray]:
        """Apply every option to one block of years; returns what each keeps and cedes where it is shown."""
        columns = {"loss": sums[self.options[self.base].scope]} if shown else {}
        base_cost = self._cost(self.base, *self._parts(self.base, sums))
        found = []
        for k, option in enumerate(self.options):
            retained, ceded = self._parts(k, sums)
            if shown:
                columns |= {f"retained {option.name}": retained, f"ceded {option.name}": ceded}
            if k in self.kept:
                self.kept[k][:, first : first + size] = retained, ceded
            cost, beats = self._cost(k, retained, ceded), np.nan
            if cost is not None and base_cost is not None:
                beats = float(np.count_nonzero(costs_less(cost, base_cost)))
            above = [np.count_nonzero(retained > x) for x in self.thresholds.get(option.name, ())]
            found.append(
                np.array(
                    [
                        retained.sum(),
                        ceded.sum(),
                        retained @ retained,
                        ceded @ ceded,
                        np.count_nonzero(retained == 0.0),
                        beats,
                        *above,
                    ]
                )
            )
        self.sums[number] = found
        return columns

    def _parts(self, k: int, sums: Mapping[Events, FloatArray]) -> tuple[FloatArray, FloatArray]:
        """What an option keeps and cedes of every year; what rounding adds to it comes off."""
        option = self.options[k]
        whole = sums[option.scope]
        ceded = option.ceded(sums[option.paid], sums.get(option.kept))
        retained = np.clip(whole - ceded, 0.0, option.most_retained)
        retained[retained <= ROUNDING * np.maximum(whole, 1.0)] = 0.0
        return retained, ceded

    def _cost(self, k: int, retained: FloatArray, ceded: FloatArray) -> FloatArray | None:
        """What an option costs in every year; None where its premium is not known yet."""
        paid = self.paid[k]
        return None if paid is None else retained + paid(ceded)

    def tallies(self, lines: Sequence[Line]) -> list[Tally]:
        """The sums as means and shares."""
        order = min((line.severity.tail_index for line in lines), default=np.inf)
        results = []
        for k, option in enumerate(self.options):
            total = (
                sum((self.sums[number][k] for number in sorted(self.sums)), start=np.zeros(1)) / self.years
            )
            thresholds = self.thresholds.get(option.name, ())
            tally = Tally(
                years=self.years,
                retained=float(total[0]),
                ceded=float(total[1]),
                retained_sd=float(np.sqrt(max(total[2] - total[0] ** 2, 0.0))),
                ceded_sd=float(np.sqrt(max(total[3] - total[1] ** 2, 0.0))),
                no_loss=float(total[4]),
                beats_base=float(total[5]),
                above=dict(zip(thresholds, total[6:].tolist(), strict=True)),
            )
            if k in self.kept:
                kept, paid = self.kept[k]
                tally.kept = SimulatedAnnualLoss(kept, _order(option, order, retained=True))
                tally.paid = SimulatedAnnualLoss(paid, _order(option, order, retained=False))
            results.append(tally)
        return results


def _order(option: Option, order: float, *, retained: bool) -> float:
    """The order from which on moments do not exist: that of the heaviest line where one huge loss is felt."""
    if option.event_cap < np.inf or option.terms is None:
        return np.inf if option.event_cap < np.inf else order
    huge = np.array([1e200])
    for k in range(len(option.lines)):
        cost, paid, kept = option.scope[k](huge), option.paid[k](huge), option.kept[k](huge)
        ceded = float(option.ceded(paid, kept)[0])
        if (float(cost[0]) - ceded if retained else ceded) > 1e190:
            return order
    return np.inf
