"""The annual sum of lines that depend on each other, for the exact engines.

Shared factors and common shocks are solved exactly: lines that have one in common form a cluster, clusters
are independent. A factor on the size of losses makes the payment of a line another one for each of its
values. A copula between annual totals has no such form; the simulation computes it.

The number of values of a factor is doubled until the distribution, on a coarse lattice, no longer moves. The
last change is the estimate of what the rule still lacks, amount by amount; twice that goes into the bracket.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from functools import cached_property
from itertools import product

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.cover import Schedule
from lossagg.engines.book import Book
from lossagg.engines.clusters import Alone, Cluster, GammaPoisson, Mixed, Shocked, State
from lossagg.engines.compound import CompoundSum, Part
from lossagg.engines.dependence import CommonShock, Copula, Dependence, SharedFactor
from lossagg.engines.factor_rule import factor_rule
from lossagg.engines.payment import PaymentLaw
from lossagg.engines.placed import Line
from lossagg.engines.quantiles import Quantiles
from lossagg.errors import EngineError
from lossagg.families import Poisson, ZeroInflated

FIRST_VALUES = 8
MOST_VALUES = 512
_MOST_INFLATED = 64
# Change of an exceedance probability, relative to it but at least to one in 1,000 years.
_SETTLED = 1e-5
_SETTLED_INFLATED = 1e-3
_UNSETTLED = 1e-2
_LEAST_EXCEEDANCE = 1e-3
# Values of a factor on size with less weight are left out: their years are rarer than a probability shows.
_RARE = 1e-15
_LOOK = 2**12

Named = tuple[str, Part]
Survive = Callable[[CompoundSum, float, int], FloatArray]


@dataclass(frozen=True)
class TiedSum(CompoundSum):
    """Lines added up that depend on each other.

    Args:
        parts: the lines that can have a payment above zero; under a factor on size, each once for every
            value of it, with the losses of the years in which the factor has that value.
        owners: name of the line of every part.
        tied: which of them depend on each other, and how.
        values: number of values of every factor that is integrated numerically.
        lacking: step and values of how far that leaves P(S > kh) off or any beyond it, non-increasing.
        build: makes the same sum with another number of values.
    """

    owners: tuple[str, ...]
    tied: tuple[Cluster, ...]
    values: int
    lacking: tuple[float, FloatArray]
    build: Callable[[int], TiedSum]

    @cached_property
    def clusters(self) -> tuple[Cluster, ...]:
        """The lines that depend on each other, together; every line is in one of them."""
        return self.tied

    def slack(self, step: float, points: int) -> FloatArray:
        """What the values of the factors leave P(S > kh) off."""
        own, values = self.lacking
        index = np.minimum(np.arange(points) * (step / own), len(values) - 1.0)
        return np.asarray(values[index.astype(np.int64)])

    @property
    def load(self) -> int:
        """Under a factor on size, every value of it is another law of payments."""
        return len(self.parts) if any(isinstance(own, Mixed) and own.inflated for own in self.tied) else 1

    def settled(self, survive: Survive) -> TiedSum:
        """The same sum with enough values of every factor, and with what they still lack.

        Args:
            survive: the engine's P(S > kh) of a sum, for a step h and a number of points.

        Raises:
            EngineError: no number of values allowed is enough.
        """
        if not any(isinstance(cluster, Mixed) for cluster in self.tied):
            return self
        step = Quantiles.located(self, _LOOK, lambda step, points: survive(self, step, points)).step
        most, enough = (MOST_VALUES, _SETTLED) if self.load == 1 else (_MOST_INFLATED, _SETTLED_INFLATED)
        current, before = self, survive(self, step, _LOOK)
        while True:
            finer = self.build(2 * current.values)
            after = survive(finer, step, _LOOK)
            change = np.maximum.accumulate(np.abs(after - before)[::-1])[::-1]
            worst = float(np.max(change / np.maximum(after, _LEAST_EXCEEDANCE)))
            if worst <= enough or 2 * finer.values > most:
                break
            current, before = finer, after
        if worst > _UNSETTLED:
            raise EngineError(
                f"{finer.values} values of each factor that the lines share leave probabilities off by up to "
                f"{worst:.1%} of themselves",
                remedy="The simulation computes it.",
            )
        # A change this small says that the fewer values are enough already.
        best = current if worst <= enough else finer
        return replace(best, lacking=(step, 2.0 * change + best.values * _RARE))


def annual_sum(book: Book, events: Mapping[str, Schedule]) -> CompoundSum:
    """The sum of what `events` pays for every loss of the lines it names, dependence between them included.

    Raises:
        EngineError: lines tied by a copula, or by a factor on size and a common shock at once.
    """
    names = [line.name for line in book.lines if line.name in events]
    if any(_between(own, names) for own in book.dependences):
        return tied_sum(book, events)
    return CompoundSum.of(tuple(line for line in book.lines if line.name in events), dict(events))


def tied_sum(book: Book, events: Mapping[str, Schedule]) -> TiedSum:
    """The same, with the line of every part."""
    lines = {line.name: line for line in book.lines if line.name in events}
    acting = [own for own in book.dependences if _between(own, lines)]
    groups = _connected(tuple(lines), acting)
    for own in acting:
        if isinstance(own, Copula):
            both = " and ".join(name for name in own.lines if name in lines)
            raise EngineError(
                f"{both} are tied by the copula {own.name!r}, which acts on annual totals",
                remedy="The simulation computes it.",
            )

    def build(values: int) -> TiedSum:
        parts: list[Part] = []
        owners: list[str] = []
        clusters: list[Cluster] = []
        for names, ties in groups:
            own = [lines[name] for name in names]
            new, cluster = _cluster(own, events, ties, values, len(parts))
            parts += [part for _, part in new]
            owners += [name for name, _ in new]
            clusters += [cluster] if new else []
        return TiedSum(tuple(parts), tuple(owners), tuple(clusters), values, (1.0, np.zeros(1)), build)

    return build(FIRST_VALUES)


def _between(own: Dependence, lines: Iterable[str]) -> bool:
    """Whether a dependence matters to these lines: a factor even for one alone."""
    shared = set(own.lines) & set(lines)
    return len(shared) >= (1 if isinstance(own, SharedFactor) else 2)


def _connected(
    names: Sequence[str], acting: Sequence[Dependence]
) -> list[tuple[list[str], list[Dependence]]]:
    """Lines in groups that have nothing in common with each other, in the order of the lines."""
    groups: list[set[str]] = [{name} for name in names]
    for own in acting:
        touched = [group for group in groups if group & set(own.lines)]
        groups = [group for group in groups if group not in touched] + [set().union(*touched)]
    groups.sort(key=lambda group: min(names.index(name) for name in group))
    return [
        (
            [name for name in names if name in group],
            [own for own in acting if group & set(own.lines)],
        )
        for group in groups
    ]


def _cluster(
    lines: Sequence[Line], events: Mapping[str, Schedule], ties: Sequence[Dependence], values: int, first: int
) -> tuple[list[Named], Cluster]:
    """The parts of lines that have something in common, placed from `first` on, and how they are tied."""
    plain = [Part(line.frequency, PaymentLaw(line.severity, events[line.name])) for line in lines]
    paying = [k for k, part in enumerate(plain) if part.frequency.mean() > 0 and part.payment.paying > 0]
    lines, parts = [lines[k] for k in paying], [plain[k] for k in paying]
    named = [(line.name, part) for line, part in zip(lines, parts, strict=True)]
    members = tuple(range(first, first + len(parts)))
    factors = [own for own in ties if isinstance(own, SharedFactor)]
    shocks = [own for own in ties if isinstance(own, CommonShock)]
    if shocks and (factors or len(shocks) > 1):
        raise EngineError(
            f"common shocks ({shocks[0].name!r}) and a factor on size act on the same lines",
            remedy="The simulation computes it.",
        )
    if shocks and len(parts) > 1:
        means = tuple(part.frequency.mean() for part in parts)
        return named, Shocked(members, shocks[0].rate, means)
    if not factors:
        return named, Alone(members)
    if [own.on for own in factors] == ["frequency"]:
        if factors[0].law == "gamma" and all(isinstance(part.frequency, Poisson) for part in parts):
            return named, GammaPoisson(members, factors[0].variance)
        states = tuple(
            State(float(weight), tuple((place, float(value)) for place in range(len(parts))))
            for value, weight in zip(*factor_rule(factors[0], values), strict=True)
        )
        return named, Mixed(members, states)
    return _inflated(lines, events, factors, values, first)


def _inflated(
    lines: Sequence[Line],
    events: Mapping[str, Schedule],
    factors: Sequence[SharedFactor],
    values: int,
    first: int,
) -> tuple[list[Named], Cluster]:
    """Lines of which some have a factor on size: a part for each line and value of it."""
    pairs = [zip(*(side.tolist() for side in factor_rule(own, values)), strict=True) for own in factors]
    rules = [[(value, weight) for value, weight in pair if weight > _RARE] for pair in pairs]
    frequency, size = (
        {line.name: _acting(factors, line.name, target) for line in lines}
        for target in ("frequency", "inflation")
    )
    parts: list[Named] = []
    places: dict[tuple[str, int], int] = {}
    for line in lines:
        acting = size[line.name]
        for value, (scale, weight) in enumerate([(1.0, 1.0)] if acting is None else rules[acting]):
            seen = events[line.name].after(Schedule.identity().scaled(scale))
            count = line.frequency
            if acting is not None:
                count = ZeroInflated(base=count, extra_zeros=1.0 - weight)
            payment = PaymentLaw(line.severity, seen)
            if payment.paying > 0:
                places[line.name, value] = len(parts)
                parts.append((line.name, Part(count, payment)))
    states = []
    for chosen in product(*(range(len(rule)) for rule in rules)):
        weight = float(np.prod([rule[k][1] for rule, k in zip(rules, chosen, strict=True)]))
        own = []
        for line in lines:
            on_size, on_count = size[line.name], frequency[line.name]
            place = places.get((line.name, 0 if on_size is None else chosen[on_size]))
            if place is not None:
                own.append((place, 1.0 if on_count is None else rules[on_count][chosen[on_count]][0]))
        states.append(State(weight, tuple(own)))
    inflated = frozenset(place for (name, _), place in places.items() if size[name] is not None)
    return parts, Mixed(tuple(range(first, first + len(parts))), tuple(states), inflated)


def _acting(factors: Sequence[SharedFactor], line: str, target: str) -> int | None:
    """Which of the factors acts on this of a line; None where none does."""
    return next((k for k, own in enumerate(factors) if own.on == target and line in own.lines), None)
