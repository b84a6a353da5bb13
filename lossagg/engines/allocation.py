"""The tail value at risk of all lines, divided among them by what each brings to the worst years.

Euler's principle (Tasche 1999, "Risk contributions and performance measurement"; Denault 2001, "Coherent
allocation of risk capital", Journal of Risk 4): a line is charged E[X_l | the worst 1 - level of years], the
years at the quantile itself taken in proportion. The charges add up to the total, and none is above the
line's own tail value at risk. They come from the size-biased transform where the lines have one, see
`tail_shares`, and from the simulated years where they are tied by a copula.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from lossagg.arrays import FloatArray, require_probability
from lossagg.engines.book import GROSS, Book, Line, Subject
from lossagg.engines.compound import CompoundSum
from lossagg.engines.dependence import Dependence
from lossagg.engines.fourier import Fourier, survival
from lossagg.engines.result import AnnualLoss, BracketedAnnualLoss
from lossagg.engines.sampled import SimulatedAnnualLoss
from lossagg.engines.span import arithmetic_span, fitting_step
from lossagg.engines.tail_shares import tail_contributions
from lossagg.engines.tied import TiedSum, tied_sum
from lossagg.errors import DoesNotExistError, EngineError, InputError
from lossagg.families.base import CountLaw, SizeLaw

if TYPE_CHECKING:
    import pandas as pd

_POINTS = 2**15
_MOST_EXACT = 2**18
# The lattice ends at this many times the quantile: what lies near twice its end would pass for what the
# mean-preserving masses put just below zero.
_BEYOND = 2.0
_LEAST_POINTS = 256
_NEAREST = 400
_WIDTH = 1.96


class Allocated(NamedTuple):
    """What one line is charged.

    Attributes:
        line: its name.
        value: its part of the total.
        low: what it is at least, by the accuracy stated.
        high: what it is at most.
        share: its part as a fraction of the total.
        alone: its own tail value at risk, never below its part.
    """

    line: str
    value: float
    low: float
    high: float
    share: float
    alone: float


@dataclass(frozen=True)
class Allocation:
    """A tail value at risk divided among lines.

    Attributes:
        level: its level.
        total: the tail value at risk of all lines, the sum of the parts.
        lines: the part of each line, in the order of the lines.
        engine: "fourier", with a bracket of the total and an estimate of the error of each share, or
            "simulation", with a 95 % interval.
    """

    level: float
    total: float
    lines: tuple[Allocated, ...]
    engine: str

    @property
    def diversification(self) -> float:
        """What the lines would need on their own beyond what they need together, at least 0."""
        return float(sum(line.alone for line in self.lines)) - self.total

    def to_frame(self) -> pd.DataFrame:
        """One row per line: value, low, high, share, alone."""
        import pandas as pd

        return pd.DataFrame(self.lines).set_index("line")


def allocate(
    lines: Mapping[str, tuple[CountLaw, SizeLaw]], *, level: float, dependences: Sequence[Dependence] = ()
) -> Allocation:
    """Divide the tail value at risk of several lines among them, without simulation noise.

    Use it to charge capital to lines, or to see which line the worst years come from.

    Args:
        lines: frequency and severity of each line by its name.
        level: level of the tail value at risk, in (0, 1), such as 0.99.
        dependences: what the lines share, `SharedFactor` or `CommonShock` of `lossagg.engines.dependence`.

    Returns:
        The part of each line; the parts add up to the total, see `Allocation`.

    Raises:
        InputError: no line, something that is no law, a level outside (0, 1).
        DoesNotExistError: a line without a mean.
        EngineError: lines tied by a copula, which only the simulation can follow.
    """
    require_probability(level, "level", open_low=True, open_high=True)
    if not lines:
        raise InputError(
            "lines must name at least one line", value=lines, remedy="Give frequency and severity."
        )
    own = []
    for name, laws in lines.items():
        if not (
            isinstance(laws, tuple | list)
            and len(laws) == 2
            and isinstance(laws[0], CountLaw)
            and isinstance(laws[1], SizeLaw)
        ):
            raise InputError(
                f"line {name!r} must be a pair of a count law and a size law",
                value=laws,
                remedy="Give (Poisson(mean=4.2), Lognormal(mu=9.0, sigma=1.5)), for example.",
            )
        own.append(Line(name=name, frequency=laws[0], severity=laws[1]))
    book = Book(lines=tuple(own), dependences=tuple(dependences))
    result = Fourier().book(book)
    for reason in result.refused.values():
        raise EngineError(reason)
    return exact_allocation(book, result.losses, level)


def exact_allocation(book: Book, losses: Mapping[Subject, AnnualLoss], level: float) -> Allocation:
    """The allocation of the gross tail value at risk by the size-biased transform.

    Args:
        book: the lines and what they share.
        losses: the exact annual loss of gross and of every line.
        level: in (0, 1).

    Raises:
        DoesNotExistError: the mean is infinite.
        EngineError: lines tied in a way that no transform follows.
    """
    total = losses[GROSS]
    figure = total.tail_value_at_risk(level)
    if not np.isfinite(figure):
        raise DoesNotExistError(
            "there is no tail value at risk to divide: the mean is infinite",
            remedy="Limit the loss by a policy limit or a cover.",
        )
    compound = tied_sum(book, book.plan(GROSS).events)
    settled = compound.settled(survival)
    amount = total.value_at_risk(level)
    fine = _shares(book, settled, level, _lattice(settled, amount, _POINTS))
    coarse = _shares(book, settled, level, _lattice(settled, amount, _POINTS // 2))
    low, high = (
        total.accuracy("tail_value_at_risk", level)
        if isinstance(total, BracketedAnnualLoss)
        else (figure, figure)
    )
    off = np.abs(fine - coarse)
    return _charged(book, losses, level, figure, fine, (fine - off) * low, (fine + off) * high, "fourier")


def simulated_allocation(book: Book, simulated: Mapping[Subject, AnnualLoss], level: float) -> Allocation:
    """The allocation by the simulated years, for lines that no transform follows.

    Args:
        book: the lines.
        simulated: gross and every line as simulated, all years kept.
        level: in (0, 1).

    Raises:
        DoesNotExistError: the mean is infinite.
        EngineError: more years than are kept line by line.
    """
    total = simulated[GROSS]
    figure = total.tail_value_at_risk(level)
    if not np.isfinite(figure):
        raise DoesNotExistError(
            "there is no tail value at risk to divide: the mean is infinite",
            remedy="Limit the loss by a policy limit or a cover.",
        )
    kept = [simulated[Subject("line", line.name)] for line in book.lines]
    if not isinstance(total, SimulatedAnnualLoss):
        raise EngineError(
            "the years are too many to keep line by line", remedy="Simulate at most 2,000,000 years."
        )
    years, tail = total.annual.size, 1.0 - level
    value = total.value_at_risk(level)
    above, at = total.annual > value, total.annual == value
    taken = np.where(above, 1.0, 0.0)
    taken[at] = np.clip((tail * years - above.sum()) / max(at.sum(), 1), 0.0, 1.0)
    nearest = np.argsort(np.abs(total.annual - value), kind="stable")[:_NEAREST]
    parts, errors = [], []
    for own in kept:
        assert isinstance(own, SimulatedAnnualLoss)
        parts.append(float(own.annual @ taken) / (tail * years))
        influence = (own.annual - own.annual[nearest].mean()) * taken
        errors.append(float(influence.std()) / np.sqrt(years) / tail)
    values, reach = np.array(parts), _WIDTH * np.array(errors)
    shares = values / values.sum()
    return _charged(book, simulated, level, figure, shares, values - reach, values + reach, "simulation")


def _charged(
    book: Book,
    losses: Mapping[Subject, AnnualLoss],
    level: float,
    total: float,
    shares: FloatArray,
    low: FloatArray,
    high: FloatArray,
    engine: str,
) -> Allocation:
    rows = []
    for k, line in enumerate(book.lines):
        alone = losses[Subject("line", line.name)].tail_value_at_risk(level)
        value = float(shares[k] * total)
        rows.append(Allocated(line.name, value, float(low[k]), float(high[k]), float(shares[k]), alone))
    return Allocation(level, total, tuple(rows), engine)


def _shares(book: Book, compound: TiedSum, level: float, lattice: tuple[float, int]) -> FloatArray:
    """What part of the worst years each line brings, on one lattice, shape (lines,)."""
    step, points = lattice
    if step > 0:
        parts = tail_contributions(compound, level, step, points)
    else:
        # The quantile is zero: all losses are in the worst years.
        parts = np.array([count.mean() * payment.mean for count, payment in compound.parts])
    shares = np.zeros(len(book.lines))
    for k, line in enumerate(book.lines):
        shares[k] = sum(
            part for part, owner in zip(parts, compound.owners, strict=True) if owner == line.name
        )
    return np.asarray(shares / shares.sum()) if shares.sum() > 0 else shares


def _lattice(compound: CompoundSum, amount: float, points: int) -> tuple[float, int]:
    """Step and points that reach the quantile; a step of 0 where the quantile is 0."""
    if amount <= 0:
        return 0.0, 2
    span = arithmetic_span(compound)
    if span is not None and _BEYOND * amount / span <= _MOST_EXACT:
        return span, max(int(_BEYOND * amount / span) + 3, _LEAST_POINTS)
    step = fitting_step(compound, _BEYOND * amount / points)
    if _BEYOND * amount / step > _MOST_EXACT:
        step = _BEYOND * amount / points
    return step, int(_BEYOND * amount / step) + 3
