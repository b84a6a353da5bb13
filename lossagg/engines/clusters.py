"""Lines of a sum that depend on each other, as the exact engines see them: a joint generating function.

E[prod z_l ** N_l] is all a transform needs. A line alone has that of its count. Lines with something in
common are independent given its value, so theirs is the mean, over a Gauss rule of the factor, of the product
of the lines' own (Wang 1998, "Aggregation of correlated risk portfolios", Proceedings of the Casualty
Actuarial Society 85; Meyers 2007, "The common shock model for correlated insurance losses", Variance 1). With
Poisson counts and a gamma factor it has a closed form, and so have common shocks (Lindskog and McNeil 2003).
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, NamedTuple

import numpy as np
from scipy.special import logsumexp

from lossagg.arrays import FloatArray
from lossagg.engines.pgf_slope import pgf_slope
from lossagg.engines.size_biased import size_biased
from lossagg.errors import EngineError
from lossagg.families import Poisson, ZeroInflated
from lossagg.families.base import CountLaw
from lossagg.families.polar import exponential

# Values of z taken together, so that what is computed for each value of a factor stays in the cache.
_AT_ONCE = 2**13
# Logarithm of what a probability generating function cannot show beside 1.
_NOTHING = -42.0


class Cluster(ABC):
    """Lines whose counts depend on each other, and on no other line.

    Attributes:
        members: their places among the parts of the sum.
    """

    members: tuple[int, ...]

    @abstractmethod
    def log_pgf(self, counts: Sequence[CountLaw], arguments: Sequence[Any]) -> Any:
        """log E[prod z_l ** N_l].

        Args:
            counts: the law of each member's count, thinned to what pays where the engine does that.
            arguments: z of each member: numbers, or arrays of one shape (n,).
        """

    def pgf(self, counts: Sequence[CountLaw], arguments: Sequence[Any]) -> Any:
        """E[prod z_l ** N_l] for arrays, arguments as `log_pgf`."""
        return exponential(self.log_pgf(counts, arguments))

    @abstractmethod
    def slope(
        self, counts: Sequence[CountLaw], arguments: Sequence[Any], member: int, pgf: Any = None
    ) -> Any:
        """The derivative of the joint generating function by the argument of one member, shape (n,).

        Args:
            counts: as for `log_pgf`.
            arguments: as for `log_pgf`.
            member: which one.
            pgf: the joint generating function there, where it is at hand.

        Raises:
            EngineError: a count law whose derivative is not known.
        """

    @abstractmethod
    def covariances(self, counts: Sequence[CountLaw], means: FloatArray) -> FloatArray:
        """Covariance of each member's count with the sum, shape (members,).

        Args:
            counts: the law of each member's count.
            means: expected payment of each member, shape (members,).
        """

    def variance(self, counts: Sequence[CountLaw], means: FloatArray, seconds: FloatArray) -> float:
        """Variance of the sum of the members, from the first two moments of one payment of each.

        The sum given the counts varies by E[N] Var[Y]; the expected sum given the counts by the rest.
        """
        if not np.isfinite(seconds).all():
            return np.inf
        own = np.array([count.mean() for count in counts])
        return float(own @ np.maximum(seconds - means**2, 0.0) + means @ self.covariances(counts, means))


@dataclass(frozen=True)
class Alone(Cluster):
    """One line that depends on no other."""

    members: tuple[int, ...]

    def log_pgf(self, counts: Sequence[CountLaw], arguments: Sequence[Any]) -> Any:
        """That of its count."""
        return counts[0].log_pgf(arguments[0])

    def pgf(self, counts: Sequence[CountLaw], arguments: Sequence[Any]) -> Any:
        """That of its count."""
        return counts[0].pgf(arguments[0])

    def slope(
        self, counts: Sequence[CountLaw], arguments: Sequence[Any], member: int, pgf: Any = None
    ) -> Any:
        """That of its count."""
        return pgf_slope(counts[0], arguments[0], pgf)

    def covariances(self, counts: Sequence[CountLaw], means: FloatArray) -> FloatArray:
        """Var[N] E[Y]."""
        return np.array([counts[0].variance()]) * means


@dataclass(frozen=True)
class GammaPoisson(Cluster):
    """Poisson lines under one gamma factor: (1 - v sum m_l (z_l - 1)) ** (-1 / v).

    Args:
        members: places of the lines.
        dispersion: the variance v of the factor.
    """

    members: tuple[int, ...]
    dispersion: float

    def log_pgf(self, counts: Sequence[CountLaw], arguments: Sequence[Any]) -> Any:
        """The closed form."""
        return -self._log_base(counts, arguments) / self.dispersion

    def slope(
        self, counts: Sequence[CountLaw], arguments: Sequence[Any], member: int, pgf: Any = None
    ) -> Any:
        """m_l (1 - v sum m (z - 1)) ** (-1 / v - 1)."""
        log_base = self._log_base(counts, arguments)
        pgf = exponential(-log_base / self.dispersion) if pgf is None else pgf
        return counts[member].mean() * pgf * exponential(-log_base)

    def _log_base(self, counts: Sequence[CountLaw], arguments: Sequence[Any]) -> Any:
        pairs = zip(counts, arguments, strict=True)
        return np.log1p(-self.dispersion * sum(count.mean() * (z - 1.0) for count, z in pairs))

    def covariances(self, counts: Sequence[CountLaw], means: FloatArray) -> FloatArray:
        """m (E[Y] + v sum m E[Y])."""
        own = np.array([count.mean() for count in counts])
        return np.asarray(own * (means + self.dispersion * float(own @ means)))


class State(NamedTuple):
    """A value of what the lines share.

    Attributes:
        weight: its probability in the Gauss rule.
        lines: (place among the members, factor on the mean count) of every line as it is in this state.
    """

    weight: float
    lines: tuple[tuple[int, float], ...]


@dataclass(frozen=True)
class Mixed(Cluster):
    """Lines that are independent given the state of the year: the mean of their product over the states.

    Args:
        members: places of the lines; under a factor on size, of each line once for every value of it.
        states: the states, their weights adding up to 1.
        inflated: places among the members that are a line as it is under one value of a factor on size: the
            count is the line's in the share of years with that value, see `ZeroInflated`.
    """

    members: tuple[int, ...]
    states: tuple[State, ...]
    inflated: frozenset[int] = frozenset()

    def log_pgf(self, counts: Sequence[CountLaw], arguments: Sequence[Any]) -> Any:
        """The mean over the states, by their logarithms."""
        logs = [np.log(state.weight) + self._given(state, counts, arguments) for state in self.states]
        return logsumexp(np.array(logs), axis=0)

    def pgf(self, counts: Sequence[CountLaw], arguments: Sequence[Any]) -> Any:
        """The mean over the states, in pieces."""
        if not self.inflated:
            counts, arguments, states = _poisson_joined(counts, arguments, self.states)
        else:
            states = self.states
        total = np.zeros(len(arguments[0]), dtype=np.result_type(*arguments))
        for first in range(0, len(total), _AT_ONCE):
            piece = slice(first, first + _AT_ONCE)
            own = [z[piece] for z in arguments]
            for state in states:
                given = self._given(state, counts, own) + np.log(state.weight)
                if given.real.max() > _NOTHING:
                    total[piece] += exponential(given)
        return total

    def slope(
        self, counts: Sequence[CountLaw], arguments: Sequence[Any], member: int, pgf: Any = None
    ) -> Any:
        """The mean over the states of the member, of the product with one of its losses set apart."""
        total = np.zeros(len(arguments[0]), dtype=np.result_type(*arguments))
        for weight, lines in self.states:
            laws = {place: self._law(counts, place, ratio) for place, ratio in lines}
            if member in laws:
                rate = weight * laws[member].mean()
                laws[member] = others(laws[member])
                logs = sum(law.log_pgf(arguments[place]) for place, law in laws.items())
                total += rate * exponential(logs)
        return total

    def covariances(self, counts: Sequence[CountLaw], means: FloatArray) -> FloatArray:
        """E[N S] - E[N] E[S] over the states."""
        products, expected, total = np.zeros(len(means)), np.zeros(len(means)), 0.0
        for weight, lines in self.states:
            laws = {place: self._law(counts, place, ratio) for place, ratio in lines}
            inside = sum(law.mean() * means[place] for place, law in laws.items())
            for place, law in laws.items():
                products[place] += weight * (law.mean() * inside + law.variance() * means[place])
                expected[place] += weight * law.mean()
            total += weight * inside
        return products - expected * total

    def _given(self, state: State, counts: Sequence[CountLaw], arguments: Sequence[Any]) -> Any:
        return sum(self._law(counts, place, ratio).log_pgf(arguments[place]) for place, ratio in state.lines)

    def _law(self, counts: Sequence[CountLaw], place: int, ratio: float) -> CountLaw:
        base = counts[place]
        if place in self.inflated and isinstance(base, ZeroInflated):
            base = base.base
        return base if ratio == 1.0 else base.with_exposure(ratio)


def _poisson_joined(
    counts: Sequence[CountLaw], arguments: Sequence[Any], states: Sequence[State]
) -> tuple[list[CountLaw], list[Any], tuple[State, ...]]:
    """The same with Poisson lines as one, for lines that all move with the same factor."""
    poisson = [k for k, count in enumerate(counts) if isinstance(count, Poisson)]
    others = [k for k in range(len(counts)) if k not in poisson]
    laws, points = [counts[k] for k in others], [arguments[k] for k in others]
    if poisson:
        total = sum(counts[k].mean() for k in poisson)
        laws.append(Poisson(mean=total))
        points.append(sum(counts[k].mean() / total * arguments[k] for k in poisson))
    moved = tuple(
        State(state.weight, tuple((place, state.lines[0][1]) for place in range(len(laws))))
        for state in states
    )
    return laws, points, moved


@dataclass(frozen=True)
class Shocked(Cluster):
    """Poisson lines of which events that cost each of them one loss are a part.

    exp(sum (m_l - r) (z_l - 1) + r (prod z_l - 1)).

    Args:
        members: places of the lines.
        rate: expected number r of shocks a year.
        means: expected number m_l of losses of each line, shocks included.
    """

    members: tuple[int, ...]
    rate: float
    means: tuple[float, ...]

    def log_pgf(self, counts: Sequence[CountLaw], arguments: Sequence[Any]) -> Any:
        """The closed form; of a thinned count z stands for losses that pay."""
        beyond = self._beyond(counts, arguments)
        alone = sum(max(mean - self.rate, 0.0) * own for mean, own in zip(self.means, beyond, strict=True))
        return alone + self.rate * _product_less_one(beyond)

    def slope(
        self, counts: Sequence[CountLaw], arguments: Sequence[Any], member: int, pgf: Any = None
    ) -> Any:
        """The loss set apart is its own, or part of a shock that costs the others one each."""
        beyond = self._beyond(counts, arguments)
        rest = _product_less_one([own for place, own in enumerate(beyond) if place != member])
        mean = self.means[member]
        rate = counts[member].mean() / mean * (max(mean - self.rate, 0.0) + self.rate * (1.0 + rest))
        return rate * (self.pgf(counts, arguments) if pgf is None else pgf)

    def _beyond(self, counts: Sequence[CountLaw], arguments: Sequence[Any]) -> list[Any]:
        """z - 1 of each member, thinning undone."""
        triples = zip(counts, self.means, arguments, strict=True)
        return [count.mean() / mean * (z - 1.0) for count, mean, z in triples]

    def covariances(self, counts: Sequence[CountLaw], means: FloatArray) -> FloatArray:
        """m E[Y] + r times the expected payments of the others."""
        own = np.array([count.mean() for count in counts])
        return np.asarray(own * means + self.rate * (float(means.sum()) - means))


def _product_less_one(beyond: Sequence[Any]) -> Any:
    """prod (1 + x) - 1 without cancellation."""
    total: Any = 0.0
    for own in beyond:
        total = total + own + total * own
    return total


def others(count: CountLaw) -> CountLaw:
    """The number of the other losses of the year, as one of its losses sees it: P'(z) is mean times its pgf.

    Raises:
        EngineError: a count law whose derivative is not known here.
    """
    law = size_biased(count)
    if law is not None:
        return law
    raise EngineError(
        "no law is known for the other losses of a year", value=count.family, remedy="Use another frequency."
    )
