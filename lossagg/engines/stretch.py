"""One sloped piece of a schedule, and the continuous losses that pass through it.

Where the payment is a straight line of the loss, its distribution is the size law's, moved and
stretched, and every integral of it is a difference of limited means or expected excesses of the size
law.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.families.base import SizeLaw

_ALL_ATOMS = 1e-12
_PARTS = 64
# Amounts taken together, so that the steps of a law's formula find them in the cache.
_AT_ONCE = 2**13


@dataclass(frozen=True)
class ContinuousPart:
    """What a size law leaves when the amounts with a probability of their own are taken out.

    Args:
        severity: the law of the loss.
    """

    severity: SizeLaw

    @cached_property
    def atoms(self) -> tuple[FloatArray, FloatArray]:
        """Amounts with a probability of their own, increasing, and their probabilities."""
        pairs = sorted(self.severity.atoms)
        return np.array([amount for amount, _ in pairs]), np.array([chance for _, chance in pairs])

    @cached_property
    def is_empty(self) -> bool:
        """Whether the atoms are everything."""
        return float(self.atoms[1].sum()) > 1.0 - _ALL_ATOMS

    def sf(self, x: FloatArray) -> FloatArray:
        """P(X > x and X is no atom)."""
        if self.is_empty:
            return np.zeros(x.shape)
        amounts, chances = self.atoms
        survival = np.asarray(self.severity.sf(x))
        if amounts.size == 0:
            return survival
        above = np.append(np.cumsum(chances[::-1])[::-1], 0.0)
        return np.asarray(np.maximum(survival - above[np.searchsorted(amounts, x, side="right")], 0.0))

    def areas(self, x: FloatArray) -> FloatArray:
        """The integral of `sf` over each interval between monotone amounts, shape (n - 1,).

        Differences of the limited mean where that is the smaller, of the expected excess beyond: each
        keeps the digits that the other would lose.
        """
        near = x <= self._half
        split = int(near.sum())
        if split in (0, len(x)):
            return np.abs(np.diff(self._limited_mean(x) if split else self._expected_excess(x)))
        if not near[0]:
            return self.areas(x[::-1])[::-1]
        below = np.diff(self._limited_mean(x[: split + 1]))
        return np.append(below, -np.diff(self._expected_excess(x[split:])))

    @cached_property
    def _half(self) -> float:
        """The amount up to which half the mean comes from, roughly; `inf` for an infinite mean."""
        mean = self.severity.mean()
        if mean == np.inf:
            return np.inf
        amounts = mean / _PARTS * np.arange(1.0, _PARTS + 1.0)
        reached = np.asarray(self.severity.limited_mean(amounts[:-1])) > mean / 2
        return float(amounts[int(np.argmax(reached)) if reached.any() else -1])

    def _limited_mean(self, x: FloatArray) -> FloatArray:
        limited = np.asarray(self.severity.limited_mean(x))
        for amount, chance in zip(*self.atoms, strict=True):
            limited = limited - chance * np.minimum(x, amount)
        return limited

    def _expected_excess(self, x: FloatArray) -> FloatArray:
        excess = np.asarray(self.severity.expected_excess(x))
        for amount, chance in zip(*self.atoms, strict=True):
            excess = excess - chance * np.maximum(amount - x, 0.0)
        return excess

    def limited_second_moment(self, x: float) -> float:
        """E[min(X, x)**2; X is no atom]; `inf` for an infinite x where the moment does not exist."""
        amounts, chances = self.atoms
        return float(self.severity.limited_second_moment(x)) - float(np.minimum(amounts, x) ** 2 @ chances)


@dataclass(frozen=True)
class Stretch:
    """Continuous losses in (start, end] that pay value + slope * (loss - start).

    Args:
        losses: the continuous part of the size law.
        start: left end of the piece.
        end: right end, possibly `inf`.
        value: payment just above the left end, at least 0.
        slope: payment per unit of loss, not 0.
    """

    losses: ContinuousPart
    start: float
    end: float
    value: float
    slope: float

    @cached_property
    def above_start(self) -> float:
        """P(X > start)."""
        return float(self.losses.sf(np.array([self.start]))[0])

    @cached_property
    def above_end(self) -> float:
        """P(X > end)."""
        return 0.0 if self.end == np.inf else float(self.losses.sf(np.array([self.end]))[0])

    @property
    def mass(self) -> float:
        """Probability of a loss in the piece."""
        return self.above_start - self.above_end

    @cached_property
    def range(self) -> tuple[float, float]:
        """Least and largest payment of the piece."""
        if self.end == np.inf:
            return self.value, np.inf
        ends = self.value, max(self.value + self.slope * (self.end - self.start), 0.0)
        return min(ends), max(ends)

    def sf(self, y: FloatArray) -> FloatArray:
        """P(the loss is in the piece and pays more than y), for increasing y, shape (n,)."""
        low, high = self.range
        first, last = np.searchsorted(y, [low, high])
        survival = np.empty(y.shape)
        survival[:first], survival[last:] = self.mass, 0.0
        for start in range(int(first), int(last), _AT_ONCE):
            piece = slice(start, min(start + _AT_ONCE, int(last)))
            beyond = self.losses.sf(self._loss_at(y[piece]))
            inside = beyond - self.above_end if self.slope > 0 else self.above_start - beyond
            survival[piece] = np.clip(inside, 0.0, self.mass)
        return survival

    def areas(self, edges: FloatArray) -> FloatArray:
        """The integral of `sf` over each interval between increasing edges, shape (n - 1,)."""
        low, high = self.range
        area = self.mass * np.diff(np.minimum(edges, low))
        first, last = np.searchsorted(edges, [low, high])
        first, last = max(int(first) - 1, 0), min(int(last) + 1, len(edges))
        if last - first < 2:
            return area
        payments = np.clip(edges[first:last], low, high)
        inside = abs(self.slope) * self.losses.areas(self._loss_at(payments))
        if self.slope < 0:
            inside = self.above_start * np.diff(payments) - inside
        elif self.above_end > 0:
            inside -= self.above_end * np.diff(payments)
        area[first : last - 1] += np.maximum(inside, 0.0)
        return area

    def second_moment(self) -> float:
        """E[payment**2; the loss is in the piece]; `inf` where it does not exist."""
        if self.end == np.inf and self.losses.severity.tail_index <= 2:
            return np.inf
        edges = np.array([self.start, self.end])
        first = float(self.losses.areas(edges)[0])
        squares = self.losses.limited_second_moment(self.end) - self.losses.limited_second_moment(self.start)
        if self.above_end > 0:
            first -= (self.end - self.start) * self.above_end
            squares -= (self.end**2 - self.start**2) * self.above_end
        second = squares - 2.0 * self.start * first
        return self.value**2 * self.mass + 2.0 * self.value * self.slope * first + self.slope**2 * second

    def within(self, low: float, high: float) -> Stretch | None:
        """The part that pays between two amounts, paid in excess of the lower; None where it is empty."""
        least, most = max(low, self.range[0]), min(high, self.range[1])
        if least >= most:
            return None
        ends = self._loss_at(np.array([least, most]))
        start, end = (ends[0], ends[1]) if self.slope > 0 else (ends[1], ends[0])
        value = (least if self.slope > 0 else most) - low
        return Stretch(self.losses, float(start), float(end), value, self.slope)

    def _loss_at(self, payments: FloatArray) -> FloatArray:
        """The loss that pays each amount, within the piece."""
        if self.slope == 1.0 and self.value == 0.0 and self.start == 0.0:
            return np.minimum(payments, self.end)
        return np.clip(self.start + (payments - self.value) / self.slope, self.start, self.end)
