"""A payment as a function of the loss: pieces of straight line, with jumps where the terms jump.

Every per-event term of a cover (deductible, limit, franchise, share) is such a function, and so is
what a cover leaves and what a second cover pays of that. The engines see only this: the simulation
evaluates it loss by loss, the exact engines push a size law through it piece by piece.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from lossagg.arrays import FloatArray


@dataclass(frozen=True)
class Schedule:
    """A piecewise linear function of the loss, continuous from the left.

    Piece k covers losses in (starts[k], starts[k + 1]] and pays
    values[k] + slopes[k] * (x - starts[k]); the last piece runs to infinity. A loss of zero pays
    zero. Left continuity is what a deductible says: a loss of exactly d does not exceed d.

    Args:
        starts: left ends of the pieces, increasing, the first 0.
        values: payment just above each left end.
        slopes: payment per unit of loss within each piece.
    """

    starts: tuple[float, ...]
    values: tuple[float, ...]
    slopes: tuple[float, ...]

    @classmethod
    def identity(cls) -> Schedule:
        """Everything is paid: the ground-up loss itself."""
        return cls((0.0,), (0.0,), (1.0,))

    @classmethod
    def proportional(cls, slope: float) -> Schedule:
        """`slope` times the loss."""
        return cls((0.0,), (0.0,), (slope,))

    @classmethod
    def excess(cls, amount: float) -> Schedule:
        """(x - amount)+: what exceeds an amount."""
        return cls((0.0, amount), (0.0, 0.0), (0.0, 1.0)) if amount > 0 else cls.identity()

    @classmethod
    def capped(cls, limit: float) -> Schedule:
        """min(x, limit): what is kept under a deductible, or paid under a first-euro limit."""
        if limit == np.inf:
            return cls.identity()
        if limit == 0.0:
            return cls((0.0,), (0.0,), (0.0,))
        return cls((0.0, limit), (0.0, limit), (1.0, 0.0))

    @property
    def is_identity(self) -> bool:
        """Whether every loss is paid in full."""
        return self.starts == (0.0,) and self.slopes == (1.0,) and self.values == (0.0,)

    @property
    def is_proportional(self) -> bool:
        """Whether every loss is paid in the same proportion."""
        return self.starts == (0.0,) and self.values == (0.0,)

    @property
    def most(self) -> float:
        """The largest payment possible, `inf` where it grows with the loss."""
        if self.slopes[-1] > 0:
            return np.inf
        ends = np.append(self.starts[1:], self.starts[-1])
        tops = np.asarray(self.values) + np.asarray(self.slopes) * (ends - np.asarray(self.starts))
        return float(max(tops.max(), max(self.values)))

    def __call__(self, losses: FloatArray) -> FloatArray:
        """The payment for each loss."""
        if self.is_proportional:
            return np.asarray(self.slopes[0] * np.maximum(losses, 0.0))
        starts, values, slopes = self.arrays()
        piece = np.maximum(np.searchsorted(starts, losses, side="left") - 1, 0)
        return np.where(losses > 0, values[piece] + slopes[piece] * (losses - starts[piece]), 0.0)

    def arrays(self) -> tuple[FloatArray, FloatArray, FloatArray]:
        """(starts, values, slopes) as float64 arrays, the form kernels take."""
        return np.asarray(self.starts), np.asarray(self.values), np.asarray(self.slopes)

    def scaled(self, share: float) -> Schedule:
        """`share` times this payment."""
        return Schedule(
            self.starts, tuple(share * v for v in self.values), tuple(share * s for s in self.slopes)
        )

    def __add__(self, other: Schedule) -> Schedule:
        return self._combined(other, 1.0)

    def __sub__(self, other: Schedule) -> Schedule:
        return self._combined(other, -1.0)

    def is_near(self, other: Schedule) -> bool:
        """Whether two schedules are the same but for round-off."""
        return len(self.starts) == len(other.starts) and all(
            np.allclose(mine, theirs, rtol=1e-12, atol=1e-12)
            for mine, theirs in zip(self.arrays(), other.arrays(), strict=True)
        )

    def _combined(self, other: Schedule, sign: float) -> Schedule:
        starts = tuple(sorted({*self.starts, *other.starts}))
        pairs = [(self._just_above(start), other._just_above(start)) for start in starts]
        return Schedule(
            starts,
            tuple(mine[0] + sign * theirs[0] for mine, theirs in pairs),
            tuple(mine[1] + sign * theirs[1] for mine, theirs in pairs),
        )._merged()

    def after(self, inner: Schedule) -> Schedule:
        """This payment applied to what `inner` gives: x -> self(inner(x)).

        Where `inner` falls (what a disappearing deductible leaves), amounts just below a knot of this
        payment belong to the piece that ends there.
        """
        starts: list[float] = []
        values: list[float] = []
        slopes: list[float] = []
        ends = [*inner.starts[1:], np.inf]
        for start, end, value, slope in zip(inner.starts, ends, inner.values, inner.slopes, strict=True):
            # The amount reached at a cut is the knot itself: computed back from the cut it may round to
            # just below the knot, and the piece that starts there (a limit, say) would be lost.
            cuts = [(start, value)]
            if slope > 0:
                cuts += [(start + (knot - value) / slope, knot) for knot in self.starts if knot > value]
            elif slope < 0:
                knots = [knot for knot in self.starts[::-1] if 0 < knot < value]
                cuts += [(start + (knot - value) / slope, knot) for knot in knots]
            for cut, reached in cuts:
                if not start <= cut < end:
                    continue
                outer_value, outer_slope = self._towards(reached, slope)
                starts.append(cut)
                values.append(outer_value)
                slopes.append(outer_slope * slope)
        return Schedule(tuple(starts), tuple(values), tuple(slopes))._merged()

    def _towards(self, amount: float, direction: float) -> tuple[float, float]:
        """Payment and slope at an amount, as seen going up, going down, or staying there."""
        if direction > 0:
            return self._just_above(amount)
        piece = max(int(np.searchsorted(np.asarray(self.starts), amount, side="left")) - 1, 0)
        value = self.values[piece] + self.slopes[piece] * (amount - self.starts[piece]) if amount > 0 else 0.0
        return value, self.slopes[piece] if direction < 0 else 0.0

    def _just_above(self, start: float) -> tuple[float, float]:
        """Payment and slope just to the right of an amount."""
        piece = int(np.searchsorted(np.asarray(self.starts), start, side="right")) - 1
        return self.values[piece] + self.slopes[piece] * (start - self.starts[piece]), self.slopes[piece]

    def _merged(self) -> Schedule:
        """The same function without pieces that only continue the one before."""
        kept = [0]
        for k in range(1, len(self.starts)):
            j = kept[-1]
            reached = self.values[j] + self.slopes[j] * (self.starts[k] - self.starts[j])
            if not (
                np.isclose(reached, self.values[k], rtol=1e-14, atol=0.0) and self.slopes[k] == self.slopes[j]
            ):
                kept.append(k)
        return Schedule(*(tuple(part[k] for k in kept) for part in (self.starts, self.values, self.slopes)))
