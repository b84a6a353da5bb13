"""Two annual sums on one lattice, by conditioning on the number of events above the deductible.

For every number m of large events, their payments are an m-fold convolution, cut off at the end of the
lattice after every step so that nothing wraps around; what is kept is m deductibles and the small
events; given m the two are independent, so their functions are added by one more convolution. The
results are added up with the probability of m.

Each pass rounds one way: amounts down (what leaves the lattice is put on its last point), amounts up
(what leaves it is beyond it), or split so that their means are kept.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal, NamedTuple

import numpy as np
import numpy.typing as npt
from scipy import fft

from lossagg.arrays import FloatArray
from lossagg.cover import Schedule
from lossagg.engines.payment import PaymentLaw
from lossagg.engines.span import places
from lossagg.engines.split_count import small_given_large
from lossagg.families.base import CountLaw

ComplexArray = npt.NDArray[np.complex128]
Side = Literal["down", "even", "up"]
_EPSILON = float(np.finfo(float).eps)
_NEVER = 1e-13


@dataclass(frozen=True, eq=False)
class SplitSum:
    """Events of a year, large or small, and two functions of their sums.

    Args:
        count: law of all events.
        large: probability that an event is large.
        payments: per line, its part of the large events and the law of what it pays for any event.
        small: per line, its part of all events and the law of what is kept where it is small.
        kept: what is kept of every large event.
        u: what counts of the sum of payments.
        v: what counts of the sum kept.
    """

    count: CountLaw
    large: float
    payments: Sequence[tuple[float, PaymentLaw]]
    small: Sequence[tuple[float, PaymentLaw]]
    kept: float
    u: Schedule
    v: Schedule

    @property
    def most_large(self) -> int:
        """Number of large events that is next to never exceeded."""
        law, high = self.count.thinned(self.large), 1
        while float(law.sf(float(high))) > _NEVER:
            high *= 2
        low = high // 2
        while high - low > 1:
            middle = (low + high) // 2
            low, high = (middle, high) if float(law.sf(float(middle))) > _NEVER else (low, middle)
        return high


class PairPass(NamedTuple):
    """One pass.

    Attributes:
        probabilities: of u(Z) + v(R) on the lattice, shape (n,).
        product: E[u(Z) v(R)], the payments beyond the lattice with their mean.
        unseen: probability of more large events than were followed.
        slack: bound of the round-off in running sums, shape (n,).
    """

    probabilities: FloatArray
    product: float
    unseen: float
    slack: FloatArray


def run_pass(total: SplitSum, step: float, points: int, side: Side) -> PairPass:
    """Follow every number of large events on a lattice.

    Args:
        total: the events.
        step: distance of the lattice points.
        points: number of lattice points.
        side: how amounts are rounded.
    """
    length = int(fft.next_fast_len(2 * points, real=True))
    most, grid = total.most_large, step * np.arange(float(points))
    large_law = total.count.thinned(total.large)
    chances = np.asarray(large_law.pmf(np.arange(most + 1.0)))
    one = fft.rfft(_mixed(total.payments, step, points, side, rest=False), length)
    small = fft.rfft(_mixed(total.small, step, points, side, rest=True), length)
    law = _KeptLaw(total, step, points, length, side, small)
    counted_of = total.u(grid)
    added, product = np.zeros(length // 2 + 1, dtype=np.complex128), 0.0
    payments = np.zeros(points)
    payments[0] = 1.0
    for m in range(most + 1):
        transform = fft.rfft(payments, length)
        counted = transform
        if not total.u.is_identity:
            counted = fft.rfft(_moved(payments, counted_of, step, points, side), length)
        kept, kept_mean = law.following()
        added += chances[m] * counted * fft.rfft(kept, length)
        if kept_mean > 0 and m > 0:
            product += chances[m] * kept_mean * _counted_mean(total, payments, counted_of, m, step, side)
        payments = np.asarray(fft.irfft(transform * one, length)[:points])
        if side == "down":
            payments[-1] += max(1.0 - float(payments.sum()), 0.0)
    probabilities = np.asarray(fft.irfft(added, length)[:points])
    size = 4.0 * _EPSILON * np.log2(length) * (2.0 + large_law.mean() + total.count.mean())
    slack = size * np.sqrt(np.arange(1.0, points + 1.0))
    return PairPass(probabilities, product, max(1.0 - float(chances.sum()), 0.0) + _NEVER, slack)


def _counted_mean(
    total: SplitSum, payments: FloatArray, counted: FloatArray, m: int, step: float, side: Side
) -> float:
    """E[u(Z)] given m large events: from below, from above, or near.

    Beyond its last knot u is a straight line, so its mean is that of the line plus a bounded rest.
    """
    if side == "down":
        return _dot(counted, payments)
    last = total.u.slopes[-1]
    rest = counted - last * step * np.arange(float(len(counted)))
    mean = _dot(rest, payments) + max(1.0 - float(payments.sum()), 0.0) * float(rest[-1])
    mean += last * m * sum(weight * law.mean for weight, law in total.payments) if last > 0 else 0.0
    if side == "up":
        mean += max(abs(slope - last) for slope in total.u.slopes) * m * step
    return max(mean, 0.0)


class _KeptLaw:
    """The law of v(R) given the number of large events."""

    def __init__(
        self, total: SplitSum, step: float, points: int, length: int, side: Side, small: ComplexArray
    ) -> None:
        self.total, self.step, self.points, self.length, self.side = total, step, points, length, side
        self._transforms = small_given_large(total.count, total.large, small)
        self._m, self._last, self._sums = 0, small, np.zeros(points)

    def following(self) -> tuple[FloatArray, float]:
        """For 0, 1, 2, ... large events: probabilities on the lattice, shape (n,), and the mean, from above
        in a pass that rounds up."""
        transform = next(self._transforms)
        if transform is not self._last:
            self._last, self._sums = transform, self._small_sums(transform)
        amounts = self.total.v(self.step * np.arange(float(self.points)) + self._m * self.total.kept)
        self._m += 1
        mean = _dot(amounts, self._sums)
        if self.side == "up":
            mean += max(1.0 - float(self._sums.sum()), 0.0) * 2.0 * float(amounts[-1])
        return _moved(self._sums, amounts, self.step, self.points, self.side), mean

    def _small_sums(self, transform: ComplexArray) -> FloatArray:
        sums = np.asarray(fft.irfft(transform, self.length)[: self.points])
        if self.side == "down":
            sums[-1] += max(1.0 - float(sums.sum()), 0.0)
        return sums


def _dot(first: FloatArray, second: FloatArray) -> float:
    """A product that stays on this thread: for arrays of this size, BLAS starts others for nothing."""
    return float(np.sum(first * second))


def _moved(
    probabilities: FloatArray, amounts: FloatArray, step: float, points: int, side: Side
) -> FloatArray:
    """Probabilities moved to other amounts, rounded onto the lattice."""
    index, part = places(amounts, step)
    if side == "down":
        return _gathered(np.minimum(index, points - 1), probabilities, points)
    if side == "up":
        return _gathered(index + (part > 0), probabilities, points)
    low = _gathered(index, probabilities * (1.0 - part), points)
    return low + _gathered(index + 1, probabilities * part, points)


def _mixed(
    laws: Sequence[tuple[float, PaymentLaw]], step: float, points: int, side: Side, *, rest: bool
) -> FloatArray:
    """Payments above zero of several lines on the lattice, by weight; with `rest`, nothing else at 0."""
    total = np.zeros(points)
    for weight, law in laws:
        total += weight * _rounded(law, step, points, side)
    if rest:
        total[0] += max(1.0 - sum(weight * law.paying for weight, law in laws), 0.0)
    if side == "down":
        total[-1] += max(1.0 - float(total.sum()), 0.0)
    return total


def _rounded(law: PaymentLaw, step: float, points: int, side: Side) -> FloatArray:
    """One payment above zero on the lattice; beyond it, left out."""
    amounts, chances = law.atoms
    above = amounts > 0
    masses = _moved(chances[above], amounts[above], step, points, side)
    if not law.stretches:
        return masses
    edges = step * np.arange(points + 1.0)
    if side == "even":
        averages = law.continuous_areas(edges) / step
        return masses - np.diff(averages, prepend=law.continuous_mass)
    down = -np.diff(law.continuous_sf(edges))
    return masses + (down if side == "down" else np.insert(down[:-1], 0, 0.0))


def _gathered(index: npt.NDArray[np.int64], chances: FloatArray, points: int) -> FloatArray:
    inside = index < points
    return np.asarray(np.bincount(index[inside], chances[inside], points)[:points], dtype=np.float64)
