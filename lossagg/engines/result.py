"""The annual loss: a distribution with its measures and the accuracy of each.

An engine writes four primitives (`sf`, `value_at_risk`, `layer_mean`, `layer_second_moment`) and
`accuracy`; the measures follow. All of them pass through a non-decreasing payment function, so
annual terms need no new distribution: see `TransformedAnnualLoss`.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Protocol

import numpy as np

from lossagg.arrays import FloatArray, Floats, elementwise, require_probability
from lossagg.cover import Cover, Schedule
from lossagg.engines.book import Book, Subject
from lossagg.engines.largest import LargestYearsKept
from lossagg.errors import DoesNotExistError, EngineError, InputError
from lossagg.families.base import CountLaw, SizeLaw

if TYPE_CHECKING:
    import pandas as pd
    from matplotlib.axes import Axes

MEASURES = ("mean", "sd", "value_at_risk", "tail_value_at_risk")
USUAL_LEVELS = (0.5, 0.75, 0.9, 0.95, 0.99, 0.995, 0.999)


class AnnualLoss(ABC):
    """The loss of one year.

    Attributes:
        engine: name of the engine that computed it.
    """

    engine: str

    @abstractmethod
    def sf(self, x: Floats) -> FloatArray | float:
        """P(S > x)."""

    @abstractmethod
    def value_at_risk(self, level: float) -> float:
        """The smallest x with P(S <= x) >= level, for a level in (0, 1)."""

    @abstractmethod
    def layer_mean(self, low: float, high: float = np.inf) -> float:
        """E[min((S - low)+, high - low)], the integral of P(S > z) over (low, high).

        Finite whenever `high` is; with `high` infinite it is the stop-loss cost, `inf` where the mean is.
        """

    @abstractmethod
    def layer_second_moment(self, low: float, high: float = np.inf) -> float:
        """E[min((S - low)+, high - low)**2], the integral of 2 (z - low) P(S > z) over (low, high)."""

    @abstractmethod
    def accuracy(self, measure: str, level: float | None = None) -> tuple[float, float]:
        """(low, high) around a measure: a guaranteed bracket from the exact engines, a 95 % interval
        from the simulation.

        Args:
            measure: "mean", "sd", "value_at_risk" or "tail_value_at_risk".
            level: the level in (0, 1), for the last two.

        Raises:
            InputError: an unknown measure, a missing level.
            DoesNotExistError: a simulated measure whose standard error does not exist, because the
                variance is infinite.
        """

    def cdf(self, x: Floats) -> FloatArray | float:
        """P(S <= x)."""
        return elementwise(lambda values: 1.0 - np.asarray(self.sf(values)), x, "x")

    def expected_excess(self, x: Floats) -> FloatArray | float:
        """E[(S - x)+], the stop-loss cost; `inf` where the mean does not exist."""
        return elementwise(lambda values: np.array([self.layer_mean(value) for value in values]), x, "x")

    def mean(self) -> float:
        """The expected annual loss; `inf` where it does not exist."""
        return self.layer_mean(0.0)

    def sd(self) -> float:
        """The standard deviation; `inf` where it does not exist."""
        second = self.layer_second_moment(0.0)
        return float(np.sqrt(max(second - self.mean() ** 2, 0.0))) if np.isfinite(second) else np.inf

    def tail_value_at_risk(self, level: float) -> float:
        """Mean of the worst 1 - level of years, the atom at the quantile split in proportion
        (Acerbi and Tasche 2002): VaR + E[(S - VaR)+] / (1 - level); `inf` where the mean is."""
        value = self.value_at_risk(level)
        return value + self.layer_mean(value) / (1.0 - level)

    def measure(self, name: str, level: float | None = None) -> float:
        """A measure by name, the names of `accuracy`."""
        require_measure(name, level)
        return float(getattr(self, name)() if level is None else getattr(self, name)(level))

    def to_frame(self, levels: Sequence[float] = USUAL_LEVELS) -> pd.DataFrame:
        """VaR and TVaR with their accuracy, one row per level; NaN where no accuracy exists."""
        import pandas as pd

        rows = []
        for level in levels:
            row: dict[str, float] = {"level": level}
            for name in ("value_at_risk", "tail_value_at_risk"):
                try:
                    low, high = self.accuracy(name, level)
                except DoesNotExistError:
                    low, high = np.nan, np.nan
                row |= {name: self.measure(name, level), f"{name}_low": low, f"{name}_high": high}
            rows.append(row)
        return pd.DataFrame(rows).set_index("level")

    def plot(self, axes: Axes | None = None) -> Axes:
        """The exceedance curve P(S > x) on a logarithmic scale; returns the matplotlib axes."""
        import matplotlib.pyplot as plt

        axes = axes if axes is not None else plt.subplots()[1]
        exceedance = np.geomspace(0.9, 1e-4, 200)
        values = np.array([self.value_at_risk(1.0 - p) for p in exceedance])
        axes.plot(values, exceedance)
        axes.set(yscale="log", xlabel="annual loss", ylabel="probability of exceeding it")
        return axes


class BracketedAnnualLoss(AnnualLoss):
    """An annual loss from an exact engine: it carries two distributions that enclose the true one."""

    @abstractmethod
    def bounds(self) -> tuple[AnnualLoss, AnnualLoss]:
        """Lower and upper distributions in stochastic order: P(low > x) <= P(S > x) <= P(high > x)."""

    def layer_bracket(self, low: float, high: float = np.inf) -> tuple[float, float]:
        """Guaranteed bounds of `layer_mean`."""
        first, second = self.bounds()
        return first.layer_mean(low, high), second.layer_mean(low, high)

    def accuracy(self, measure: str, level: float | None = None) -> tuple[float, float]:
        """The guaranteed bracket: the measure of the lower and of the upper distribution, a mean within
        the bracket of its layer."""
        require_measure(measure, level)
        low, high = self.bounds()
        if measure != "sd":
            least, most = low.measure(measure, level), high.measure(measure, level)
            if measure == "mean":
                below, above = self.layer_bracket(0.0)
                least, most = max(least, below), min(most, above)
            elif level is not None and measure == "tail_value_at_risk":
                below, above = self._tail_bracket(level, low, high)
                least, most = max(least, below), min(most, above)
            return least, most
        seconds = low.layer_second_moment(0.0), high.layer_second_moment(0.0)
        if not np.isfinite(seconds[1]):
            return float(np.sqrt(max(seconds[0] - high.mean() ** 2, 0.0))) if np.isfinite(
                high.mean()
            ) else 0.0, np.inf
        return (
            float(np.sqrt(max(seconds[0] - high.mean() ** 2, 0.0))),
            float(np.sqrt(max(seconds[1] - low.mean() ** 2, 0.0))),
        )

    def _tail_bracket(self, level: float, low: AnnualLoss, high: AnnualLoss) -> tuple[float, float]:
        """Bounds of the TVaR from the brackets of the quantile and of layers.

        v + E[(S - v)+] / (1 - level) is convex in v, least at the quantile, and has the slope
        1 - P(S > v) / (1 - level).
        """
        share = 1.0 - level
        ends = low.value_at_risk(level), high.value_at_risk(level)
        if not np.isfinite(ends[1]):
            return -np.inf, np.inf
        slopes = float(high.sf(ends[0])) / share - 1.0, 1.0 - float(low.sf(ends[1])) / share
        costs = [self.layer_bracket(end) for end in ends]
        falls = [(ends[1] - ends[0]) * max(slope, 0.0) for slope in slopes]
        return (
            max(end + cost[0] / share - fall for end, cost, fall in zip(ends, costs, falls, strict=True)),
            min(end + cost[1] / share for end, cost in zip(ends, costs, strict=True)),
        )


@dataclass(frozen=True)
class BookResult:
    """What an engine made of a book.

    Attributes:
        losses: the annual amount of every subject the engine can compute.
        refused: why not, for every other subject, with the engine that can.
        details: from the simulation, per line the part ceded, the part retained and the largest loss of
            the year, and the largest of all lines; empty from other engines.
        largest_years: from the simulation, the largest years by gross and by net.
    """

    losses: dict[Subject, AnnualLoss]
    refused: dict[Subject, str] = field(default_factory=dict)
    details: dict[Subject, AnnualLoss] = field(default_factory=dict)
    largest_years: dict[Subject, LargestYearsKept] = field(default_factory=dict)


class Engine(Protocol):
    """A method of computing annual losses; its settings are the fields of the object."""

    @property
    def name(self) -> str:
        """The engine's name, as users write it."""

    def annual_loss(self, frequency: CountLaw, severity: SizeLaw, cover: Cover | None = None) -> AnnualLoss:
        """The annual loss of one line, or what a cover pays of it."""

    def book(self, book: Book) -> BookResult:
        """Every subject of a book."""


def require_measure(name: str, level: float | None) -> None:
    """Check a measure's name and that it has a level exactly where it needs one.

    Raises:
        InputError: with the names allowed, or the level seen.
    """
    if name not in MEASURES:
        raise InputError("unknown measure", value=name, remedy=f"Use one of: {', '.join(MEASURES)}.")
    if name in ("mean", "sd"):
        if level is not None:
            raise InputError(f"{name} takes no level", value=level, remedy="Leave the level out.")
    elif level is None:
        raise InputError(f"{name} needs a level", remedy="Give a level between 0 and 1, such as 0.995.")
    else:
        require_probability(level, "level", open_low=True, open_high=True)


@dataclass(frozen=True, repr=False)
class TransformedAnnualLoss(BracketedAnnualLoss):
    """A non-decreasing payment function applied to an annual loss: annual terms, a net of a stop loss.

    Quantiles pass through the function; a layer's mean and second moment are sums over its pieces
    of those of the underlying loss, so nothing is discretised again.

    Args:
        base: the underlying annual loss.
        payment: the payment for each annual amount, continuous and non-decreasing.
    """

    base: AnnualLoss
    payment: Schedule

    @property
    def engine(self) -> str:  # type: ignore[override]
        """The engine of the underlying loss."""
        return self.base.engine

    def sf(self, x: Floats) -> FloatArray | float:
        """P(payment > x)."""
        return elementwise(lambda amounts: np.array([self._sf(amount) for amount in amounts]), x, "x")

    def value_at_risk(self, level: float) -> float:
        """The payment at the quantile of the underlying loss."""
        amount = self.base.value_at_risk(level)
        return float(self.payment(np.array([amount]))[0]) if amount < np.inf else self.payment.most

    def tail_value_at_risk(self, level: float) -> float:
        """Mean of the worst 1 - level of years, inside its bracket where there is one."""
        value = super().tail_value_at_risk(level)
        if not isinstance(self.base, BracketedAnnualLoss):
            return value
        low, high = self.accuracy("tail_value_at_risk", level)
        return min(max(value, low), high)

    def mean(self) -> float:
        """The expected payment; of a share of the loss, the share of its mean, exact where that is."""
        if self.payment.starts == (0.0,) and self.payment.values == (0.0,):
            return self.payment.slopes[0] * self.base.mean()
        return self.layer_mean(0.0)

    def layer_mean(self, low: float, high: float = np.inf) -> float:
        """E[min((payment - low)+, high - low)]."""
        return sum(slope * self.base.layer_mean(a, b) for a, b, _, slope in self._within(low, high))

    def layer_second_moment(self, low: float, high: float = np.inf) -> float:
        """E[min((payment - low)+, high - low)**2]."""
        total = 0.0
        for a, b, above, slope in self._within(low, high):
            total += slope**2 * self.base.layer_second_moment(a, b)
            if above > 0:
                total += 2.0 * above * slope * self.base.layer_mean(a, b)
        return total

    def bounds(self) -> tuple[AnnualLoss, AnnualLoss]:
        """Lower and upper distributions of the payment, in stochastic order."""
        if not isinstance(self.base, BracketedAnnualLoss):
            raise EngineError(
                "no bracket: the underlying loss is not from an exact engine", value=self.base.engine
            )
        low, high = self.base.bounds()
        return TransformedAnnualLoss(low, self.payment), TransformedAnnualLoss(high, self.payment)

    def layer_bracket(self, low: float, high: float = np.inf) -> tuple[float, float]:
        """Guaranteed bounds of `layer_mean`: its pieces are layers of the underlying loss."""
        if not isinstance(self.base, BracketedAnnualLoss):
            return super().layer_bracket(low, high)
        pieces = [(slope, *self.base.layer_bracket(a, b)) for a, b, _, slope in self._within(low, high)]
        return sum(slope * least for slope, least, _ in pieces), sum(
            slope * most for slope, _, most in pieces
        )

    def _pieces(self) -> list[tuple[float, float, float, float]]:
        """(start, end, value at start, slope) of every piece."""
        payment = self.payment
        ends = (*payment.starts[1:], np.inf)
        return list(zip(payment.starts, ends, payment.values, payment.slopes, strict=True))

    def _sf(self, amount: float) -> float:
        """P(payment > amount): the underlying loss exceeds the last point that pays no more."""
        if amount < 0:
            return 1.0
        for start, end, value, slope in self._pieces():
            if slope > 0 and (end == np.inf or value + slope * (end - start) > amount):
                return float(self.base.sf(start + max(amount - value, 0.0) / slope))
        return 0.0

    def _within(self, low: float, high: float) -> list[tuple[float, float, float, float]]:
        """Rising stretches (a, b) of the payment inside (low, high): with the height above `low`
        at a, and the slope."""
        stretches = []
        for start, end, value, slope in self._pieces():
            if slope <= 0:
                continue
            a = start + max(low - value, 0.0) / slope
            b = min(end, start + (high - value) / slope)
            if a < b:
                stretches.append((a, b, max(value - low, 0.0), slope))
        return stretches
