"""Moments of a stream of blocks that do not depend on the order in which the blocks arrive.

Each block's moments about its own mean are combined pairwise along a binary tree over the block numbers
(Chan, Golub and LeVeque 1983, "Algorithms for computing the sample variance", The American
Statistician 37; fourth moments: Pebay 2008, Sandia report SAND2008-6212, formulas 2.1 and 3.1). The tree
fixes the order of every addition, so any number of workers gives the same bits, and round-off grows with
the logarithm of the number of blocks. Only subtrees whose other half is still to come are held.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import NamedTuple

import numpy as np

from lossagg.arrays import FloatArray


class Moments(NamedTuple):
    """Number, mean, and sums of the second, third and fourth powers of the deviations from the mean."""

    number: int
    mean: float
    second: float
    third: float
    fourth: float

    @classmethod
    def of(cls, values: FloatArray) -> Moments:
        """Those of an array, which must not be empty."""
        with np.errstate(over="ignore", invalid="ignore"):
            mean = float(np.sum(values) / values.size)
            deviations = values - mean
            squares = deviations * deviations
            second, third = float(np.sum(squares)), float(np.sum(squares * deviations))
            return cls(values.size, mean, second, third, float(np.sum(squares * squares)))

    def and_then(self, other: Moments) -> Moments:
        """Those of two samples together."""
        a, b = self.number, other.number
        n = a + b
        with np.errstate(over="ignore", invalid="ignore"):
            d = np.float64(other.mean) - self.mean
            second = self.second + other.second + d**2 * (a * (b / n))
            third = (
                self.third
                + other.third
                + d**3 * (a * (b / n) * ((a - b) / n))
                + 3.0 * d * (a * (other.second / n) - b * (self.second / n))
            )
            fourth = (
                self.fourth
                + other.fourth
                + d**4 * (a * (b / n) * ((a / n) * (a / n) - (a / n) * (b / n) + (b / n) * (b / n)))
                + 6.0 * d**2 * ((a / n) ** 2 * other.second + (b / n) ** 2 * self.second)
                + 4.0 * d * (a / n * other.third - b / n * self.third)
            )
            return Moments(n, float(self.mean + d * (b / n)), float(second), float(third), float(fourth))


@dataclass
class MomentTree:
    """Moments of the blocks so far.

    Attributes:
        waiting: moments of whole subtrees by (height, place), whose other half is still to come.
    """

    waiting: dict[tuple[int, int], Moments] = field(default_factory=dict)

    def add(self, block: int, moments: Moments) -> None:
        """Take in one block; each block once, in any order."""
        height, place = 0, block
        while (other := self.waiting.pop((height, place ^ 1), None)) is not None:
            moments = moments.and_then(other) if place % 2 == 0 else other.and_then(moments)
            height, place = height + 1, place // 2
        self.waiting[height, place] = moments

    def total(self) -> Moments:
        """Moments of all blocks: the subtrees that wait, in the order of their blocks."""
        in_order = sorted(self.waiting, key=lambda key: key[1] << key[0])
        total = self.waiting[in_order[0]]
        for key in in_order[1:]:
            total = total.and_then(self.waiting[key])
        return total
