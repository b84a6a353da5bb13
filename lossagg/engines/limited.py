"""A tighter bracket for many losses: payments kept in the mean instead of rounded one way.

Rounding every payment down or up moves a year of n losses by up to n steps. Move each payment to its two
neighbouring points instead, with its mean kept: D = sum D_i with E[D_i | X_i] = X_i (Gerber 1982). Then,
for every x, with Jensen's inequality once in each direction,

    E[min(D, x)] <= E[min(S, x)] <= E[min(E[S | D], x)] <= E[min(D, x)] + E[(E[S | D] - D) 1{D <= x}].

The last term adds up over the payments: a payment in the cell from kh on at position u (0 to 1) moves to
kh with 1 - u and to (k + 1)h with u, and contributes u (1 - u) h exactly where the others together with kh
make x. It is one more transform (see `LatticeTransform.limited`) and of order n h**2. Nothing beyond x
enters, so means need not exist.

Between these bounds E[min(S, x)] is concave, so its slope P(S > x) lies between chords: from the upper
bound at x back to the lower bound at x - d, and forward to x + d. With the best d a quantile is known to
about sqrt(2 n) steps.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.engines.bound import MOMENTS


@dataclass(frozen=True, eq=False)
class LimitedMeans:
    """Bounds of E[min(S, x)] for 0 <= x <= top.

    Args:
        step: distance of the lattice points.
        least: bound of E[min(S, kh)] from below, shape (n,); a straight line between the points.
        most: the same from above, shape (n,); between the points, `gap` of the point before above a line.
        line: the line that `most` is above, shape (n,).
    """

    step: float
    least: FloatArray
    most: FloatArray
    line: FloatArray

    @classmethod
    def of(cls, step: float, least: FloatArray, most: FloatArray, gap: FloatArray) -> LimitedMeans:
        """From bounds of P(D > kh) and a bound of the last term above at each point, in steps."""
        from lossagg.kernels.bounds import limited_means

        low, high, line = (np.empty(len(gap)) for _ in range(3))
        limited_means((least, most), gap, step, MOMENTS, (low, high, line))
        return cls(step, low, high, line)

    @property
    def top(self) -> float:
        """The last lattice point."""
        return self.step * (len(self.least) - 1)

    def bounds(self, x: float) -> tuple[float, float]:
        """E[min(S, x)] from below and from above, 0 <= x <= top."""
        k = min(int(x / self.step), len(self.least) - 2)
        u = min(max(x / self.step - k, 0.0), 1.0)
        low = (1.0 - u) * self.least[k] + u * self.least[k + 1]
        line = (1.0 - u) * self.line[k] + u * self.line[k + 1]
        gap = max(self.most[k] - self.line[k], self.most[k + 1] - self.line[k + 1] if u > 1.0 - 1e-9 else 0.0)
        return float(low), float(line + gap)

    def layer(self, low: float, high: float) -> tuple[float, float]:
        """E[min((S - low)+, high - low)] from below and from above, 0 <= low <= high <= top."""
        first, second = self.bounds(low), self.bounds(high)
        return max(second[0] - first[1], 0.0), second[1] - first[0]

    def tail(self, level: float, first: float, last: float, mean: tuple[float, float]) -> tuple[float, float]:
        """Bounds of the tail value at risk: the least of v + E[(S - v)+] / (1 - level) over all v, which is
        taken at the quantile (Rockafellar and Uryasev 2002).

        Args:
            level: the level.
            first: lower bound of the quantile.
            last: upper bound of the quantile, at most `top`.
            mean: bounds of the mean, finite.
        """
        share = 1.0 - level
        k = min(int(first / self.step), len(self.least) - 2)
        end = min(max(int(np.ceil(last / self.step)), k + 1), len(self.least) - 1)
        part = slice(k, end + 1)
        values = self.step * np.arange(float(k), float(end + 1))
        high = values + (mean[1] - self.least[part]) / share
        low = values + (mean[0] - self.line[part]) / share
        gap = (self.most[part] - self.line[part]) / share
        return float((np.minimum(low[:-1], low[1:]) - gap[:-1]).min()), float(high.min())

    def survival(self, rounded: float) -> tuple[FloatArray, FloatArray]:
        """P(S > x) from below for x in [kh, (k + 1)h), and from above, shape (n,) each: see the module.

        Args:
            rounded: about the number of payments a year that do not lie on the lattice.
        """
        from lossagg.kernels.bounds import chord_slopes, chord_steps

        points = len(self.least)
        middle = int(np.clip(np.sqrt(rounded), 1, max(points // 64, 1)))
        reach, low, high = (np.empty(points) for _ in range(3))
        chord_steps(self.least, self.most, self.line, self.step, middle, reach)
        chord_slopes(self.least, self.most, self.step, reach, low, high)
        return low, high
