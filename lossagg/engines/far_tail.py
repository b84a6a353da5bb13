"""The far-tail engine: exceedance probabilities far beyond the reach of plain simulation.

Conditional Monte Carlo (Asmussen and Kroese 2006, "Improved algorithms for rare event simulation with
heavy tails", Advances in Applied Probability 38): some loss of the year is the largest, and any of the
N alike may be it, so with M the largest and R the sum of the others

    P(S > u) = E[ N P(X > max(M, u - R)) ],

where the probability on the right is known exactly. A year so contributes to every amount, however
rare, and the relative error stays bounded, where that of plain simulation grows without bound.
Integrated over u, the same holds for the stop-loss cost and the tail value at risk (Ghamami and Ross
2012, "Improving the Asmussen-Kroese-type simulation estimators", Journal of Applied Probability 49(4)).
With several lines the largest loss belongs to one of them: the sum over lines of the same expectation,
one loss of that line taken out.

Most of what variance is left comes from the number of losses, whose mean is known: the counts are
control variates. Quantiles are roots of the estimated curve, all points of it from the same years
(common random numbers), so it falls smoothly. The trap: where amounts have a probability of their own,
several losses may be the largest; each of the k + 1 that tie is counted with weight 1 / (k + 1).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from lossagg.arrays import FloatArray, IntArray
from lossagg.cover import Cover, Schedule
from lossagg.engines.book import Book, Line, Plan, Subject, single_line
from lossagg.engines.conditional import ConditionalAnnualLoss, LineOut, TransformedConditional
from lossagg.engines.quantile_table import QuantileTable, quantile_table
from lossagg.engines.result import AnnualLoss, BookResult
from lossagg.engines.search_table import count_sampler
from lossagg.engines.streams import BLOCK_YEARS, block_state, line_key
from lossagg.errors import EngineError, InputError
from lossagg.families.base import CountLaw, SizeLaw
from lossagg.kernels.far_tail import leave_last
from lossagg.kernels.simulation import draw_sizes

LEAST_SAMPLES = 1_000
MOST_SAMPLES = 10**7
MOST_LOSSES = 2e10
MOST_IN_ONE_YEAR = 1e8
CHUNK = 2**21


@dataclass(frozen=True, kw_only=True)
class FarTail:
    """The far-tail engine and its settings.

    Use it for levels such as 99.99 % and beyond, where plain simulation has too few years and an exact
    lattice would have to be very long. It computes lines, the gross total, and covers whose terms act on
    the year; event terms need another engine. It wants sizes with a heavy tail: where too few simulated
    years carry a figure for its error to be known, it raises EngineError rather than print it.

    Args:
        samples: simulated years, 1,000 to 10**7. 200,000 give 0.1 % of the exceedance probability for
            typical heavy tails.
        seed: 0 to 2**64 - 1; the same seed gives the same bytes. Its random numbers are other than those
            of the simulation of the same seed.

    Raises:
        InputError: a setting outside its range.
    """

    samples: int = 200_000
    seed: int = 1

    def __post_init__(self) -> None:
        for name, low, high in (("samples", LEAST_SAMPLES, MOST_SAMPLES), ("seed", 0, 2**64 - 1)):
            value = getattr(self, name)
            if isinstance(value, bool) or not isinstance(value, int) or not low <= value <= high:
                raise InputError(
                    f"{name} must be a whole number from {low:,} to {high:,}",
                    value=value,
                    remedy=f"Give {name} as a whole number in that range.",
                )

    @property
    def name(self) -> str:
        """The engine's name."""
        return "far-tail"

    def annual_loss(self, frequency: CountLaw, severity: SizeLaw, cover: Cover | None = None) -> AnnualLoss:
        """The annual loss of one line, or what a cover whose terms act on the year pays of it.

        Raises:
            EngineError: a cover with event terms or a retained cap; more losses than can be drawn.
        """
        book, subject = single_line(frequency, severity, cover)
        return self._solved(book, subject, _whole_losses(book, subject), {})

    def book(self, book: Book) -> BookResult:
        """Every subject of a book; the reason in place of the result where the engine cannot do it."""
        losses: dict[Subject, AnnualLoss] = {}
        refused: dict[Subject, str] = {}
        drawn: dict[str, _Years] = {}
        for subject in book.subjects:
            try:
                losses[subject] = self._solved(book, subject, _whole_losses(book, subject), drawn)
            except EngineError as error:
                refused[subject] = str(error)
        return BookResult(losses, refused)

    def _solved(self, book: Book, subject: Subject, plan: Plan, drawn: dict[str, _Years]) -> AnnualLoss:
        lines = book.independent_lines(plan.events)
        _require_resources(lines, self.samples)
        for line in lines:
            if line.name not in drawn:
                drawn[line.name] = _draw(line, self.samples, self.seed)
        base = ConditionalAnnualLoss(_one_taken_out(lines, [drawn[line.name] for line in lines]))
        return base if plan.annual.is_identity else TransformedConditional(base, plan.annual)


@dataclass(frozen=True, eq=False)
class _Years:
    """The simulated years of one line, split into the last loss and the others, shape (n,) each."""

    counts: FloatArray
    rest: FloatArray
    largest: FloatArray
    tied: FloatArray
    last: FloatArray


def _whole_losses(book: Book, subject: Subject) -> Plan:
    """The plan of a subject, where every loss enters it whole.

    Raises:
        EngineError: event terms, which change what one loss can do.
    """
    plan = book.plan(subject)
    if all(schedule == Schedule.identity() for schedule in plan.events.values()):
        return plan
    raise EngineError(
        f"the far-tail engine cannot compute {subject}: terms act on single events",
        remedy="The Fourier engine computes it; layers with a limit have no far tail of single losses.",
    )


def _require_resources(lines: tuple[Line, ...], samples: int) -> None:
    mean = sum(line.frequency.mean() for line in lines)
    if mean > MOST_IN_ONE_YEAR or mean * samples > MOST_LOSSES:
        most = int(MOST_LOSSES / mean)
        raise EngineError(
            f"{mean * samples:.3g} losses would have to be drawn, above the bound of {MOST_LOSSES:.0e}",
            value=samples,
            remedy=f"Ask for at most {most:,} samples."
            if most >= LEAST_SAMPLES and mean <= MOST_IN_ONE_YEAR
            else "Use the Fourier engine: with so many losses the far tail is not that of a single loss.",
        )


def _draw(line: Line, samples: int, seed: int) -> _Years:
    """Simulate a line, in chunks of a bounded number of losses."""
    sampler, table = count_sampler(line.frequency, f"line {line.name!r}"), quantile_table(line.severity)
    counts = np.empty(samples, dtype=np.int64)
    rest, largest, tied, last = (np.empty(samples) for _ in range(4))
    # No line name holds a zero character, so these streams are nobody else's.
    key = line_key(f"far tail\0{line.name}")
    for block in range(-(-samples // BLOCK_YEARS)):
        state = block_state(seed, key, block)
        first = block * BLOCK_YEARS
        own = slice(first, min(first + BLOCK_YEARS, samples))
        counts[own] = sampler.draw(state, BLOCK_YEARS)[: own.stop - first]
        for part in _chunks(counts, own):
            sizes = _sizes(table, state, int(counts[part].sum()))
            leave_last(sizes, counts[part], rest[part], largest[part], tied[part], last[part])
    return _Years(counts.astype(np.float64), rest, largest, tied, last)


def _chunks(counts: IntArray, own: slice) -> list[slice]:
    """Consecutive years of a block with about `CHUNK` losses each, at least one year."""
    ends = np.cumsum(counts[own])
    parts, first = [], 0
    while first < ends.size:
        before = int(ends[first - 1]) if first else 0
        after = max(int(np.searchsorted(ends, before + CHUNK, side="right")), first + 1)
        parts.append(slice(own.start + first, own.start + after))
        first = after
    return parts


def _sizes(table: QuantileTable, state: np.ndarray, number: int) -> FloatArray:
    sizes = np.empty(number)
    flagged, probability = np.empty(number, dtype=np.int64), np.empty(number)
    found = draw_sizes(state, table.arrays, sizes, flagged, probability, 0)
    sizes[flagged[:found]] = table.exact(probability[:found])
    return sizes


def _one_taken_out(lines: tuple[Line, ...], years: list[_Years]) -> tuple[LineOut, ...]:
    """For each line: sum, largest and ties of all losses of the year but one of that line."""
    order = sorted(range(len(lines)), key=lambda k: lines[k].name)
    whole = [_all_losses(own) for own in years]
    out = []
    for k in order:
        parts = [(years[j].rest, years[j].largest, years[j].tied) if j == k else whole[j] for j in order]
        rest, largest, tied = parts[0]
        for more, high, ties in parts[1:]:
            rest = rest + more
            tied = np.where(high > largest, ties, np.where(high == largest, tied + ties, tied))
            largest = np.maximum(largest, high)
        law, frequency = lines[k].severity, lines[k].frequency
        out.append(LineOut(law, years[k].counts, frequency.mean(), rest, largest, tied))
    return tuple(out)


def _all_losses(own: _Years) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Sum, largest and ties of all losses of a line."""
    higher, equal = own.last > own.largest, (own.last == own.largest) & (own.counts > 0)
    tied = np.where(higher, 1.0, own.tied + equal)
    return own.rest + own.last, np.maximum(own.last, own.largest), tied
