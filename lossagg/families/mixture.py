"""A mixture: each loss comes from one of several laws, with given weights."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import ClassVar

import numpy as np
import numpy.typing as npt

from lossagg.arrays import FloatArray, Floats, require_positive
from lossagg.errors import InputError
from lossagg.families.base import SizeLaw
from lossagg.families.inversion import invert_tail
from lossagg.families.tables import checked_probabilities, normalised


@dataclass(frozen=True, kw_only=True, repr=False)
class Mixture(SizeLaw):
    """Weighted laws: every probability and every limited moment is the weighted sum of the parts'.

    Args:
        weights: one for each part, above 0, together 1 within 1e-9.
        parts: the laws.

    Raises:
        InputError: no parts, lists of different lengths, weights not above 0 or with a sum other
            than 1 (with the sum).
    """

    family: ClassVar[str] = "mixture"
    weights: Sequence[float]
    parts: Sequence[SizeLaw]

    def __post_init__(self) -> None:
        weights = checked_probabilities(self.weights, "weights")
        parts = tuple(self.parts)
        for number, part in enumerate(parts, start=1):
            if not isinstance(part, SizeLaw):
                raise InputError(
                    "parts must be size laws",
                    where=f"part {number}",
                    value=part,
                    remedy="Give Lognormal(...), say.",
                )
        if len(weights) != len(parts):
            raise InputError(
                "weights and parts must have the same length",
                value=(len(weights), len(parts)),
                remedy="Give one weight for each part.",
            )
        if 0.0 in weights:
            raise InputError(
                "weights must be above 0",
                where=f"entry {weights.index(0.0) + 1}",
                value=0.0,
                remedy="Leave out the part.",
            )
        self._settle(weights=weights, parts=parts)

    @property
    def parameters(self) -> dict[str, float]:
        """weight.1, weight.2, ... and part.1.*, part.2.*, ..."""
        named = {f"weight.{k}": weight for k, weight in enumerate(self.weights, start=1)}
        for k, part in enumerate(self.parts, start=1):
            named |= {f"part.{k}.{name}": value for name, value in part.parameters.items()}
        return named

    def _sum(self, values: Sequence[Floats]) -> FloatArray:
        total = np.zeros(np.shape(values[0]))
        for weight, value in zip(normalised(self.weights), values, strict=True):
            total = total + weight * np.asarray(value)
        return total

    def mean(self) -> float:
        """The mean, `inf` where a part's is."""
        return float(self._sum([part.mean() for part in self.parts]))

    def variance(self) -> float:
        """The variance, `inf` where a part's is: within the parts and between them."""
        if self.tail_index <= 2:
            return np.inf
        mean = self.mean()
        return float(self._sum([part.variance() + (part.mean() - mean) ** 2 for part in self.parts]))

    @property
    def tail_index(self) -> float:
        """The smallest of the parts'."""
        return min(part.tail_index for part in self.parts)

    @property
    def support(self) -> tuple[float, float]:
        """From the smallest loss of any part to the largest."""
        lows, highs = zip(*(part.support for part in self.parts), strict=True)
        return (min(lows), max(highs))

    @property
    def breakpoints(self) -> tuple[float, ...]:
        """Every part's."""
        return tuple(sorted({point for part in self.parts for point in part.breakpoints}))

    @property
    def atoms(self) -> tuple[tuple[float, float], ...]:
        """Every part's, weighted; equal amounts added."""
        total: dict[float, float] = {}
        for weight, part in zip(normalised(self.weights), self.parts, strict=True):
            for amount, probability in part.atoms:
                total[amount] = total.get(amount, 0.0) + float(weight) * probability
        return tuple(sorted(total.items()))

    def scaled(self, factor: float) -> Mixture:
        """Every part scaled."""
        require_positive(factor, "factor")
        return Mixture(weights=self.weights, parts=[part.scaled(factor) for part in self.parts])

    def _cdf(self, x: FloatArray) -> FloatArray:
        return self._sum([part.cdf(x) for part in self.parts])

    def _sf(self, x: FloatArray) -> FloatArray:
        return self._sum([part.sf(x) for part in self.parts])

    def _pdf(self, x: FloatArray) -> FloatArray:
        return self._sum([part.pdf(x) for part in self.parts])

    def _ppf(self, q: FloatArray) -> FloatArray:
        return self._inverse(q, np.asarray([part.ppf(q) for part in self.parts]), 1.0)

    def _isf(self, p: FloatArray) -> FloatArray:
        return self._inverse(p, np.asarray([part.isf(p) for part in self.parts]), -1.0)

    def _limited_mean(self, limit: FloatArray) -> FloatArray:
        return self._sum([part.limited_mean(limit) for part in self.parts])

    def _limited_second_moment(self, limit: FloatArray) -> FloatArray:
        return self._sum([part.limited_second_moment(limit) for part in self.parts])

    def _expected_excess(self, x: FloatArray) -> FloatArray:
        return self._sum([part.expected_excess(x) for part in self.parts])

    def _inverse(self, p: FloatArray, of_parts: FloatArray, sign: float) -> FloatArray:
        """Quantiles: between the smallest and the largest quantile of the parts.

        Jumps and gaps sit at known points. The function is evaluated there, which either gives the
        answer (an atom) or a bracket without jumps.
        """
        points, at, before = self._steps(sign)
        last = points.size - 1
        first = _first_reached(at, p, sign)
        place = np.minimum(first, last)
        low = np.maximum(of_parts.min(axis=0), np.where(first > 0, points[np.maximum(first - 1, 0)], 0.0))
        high = np.minimum(of_parts.max(axis=0), np.where(first <= last, points[place], np.inf))
        # An atom is the answer where the tail just before it had not reached p.
        atom = (first <= last) & (sign * before[place] < sign * p)
        settled = atom | (high <= low)
        result = np.where(atom, points[place], high)
        tiny = np.finfo(float).tiny
        free = ~settled
        result[free] = self._solve(p[free], np.maximum(low[free], tiny), np.maximum(high[free], tiny), sign)
        return result

    def _steps(self, sign: float) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Where the law jumps, kinks or has gaps; its cdf (sign 1) or sf there, and just before."""
        jumps = dict(self.atoms)
        ends = {end for part in self.parts for end in part.support}
        points = np.array(sorted((ends | set(self.breakpoints) | set(jumps)) - {np.inf}))
        at = self._cdf(points) if sign > 0 else self._sf(points)
        return points, at, at - sign * np.array([jumps.get(float(point), 0.0) for point in points])

    def _solve(self, p: FloatArray, low: FloatArray, high: FloatArray, sign: float) -> FloatArray:
        result = np.empty(p.shape)
        own = p <= 0.5
        for chosen, target, slope in ((own, p[own], sign), (~own, 1.0 - p[~own], -sign)):
            tail = self._cdf if slope > 0 else self._sf
            result[chosen] = invert_tail(tail, self._pdf, target, low[chosen], high[chosen], slope)
        return result

    def _second_excess(self, x: FloatArray) -> FloatArray:
        return self._sum([part.second_excess(x) for part in self.parts])


def _first_reached(values: FloatArray, p: FloatArray, sign: float) -> npt.NDArray[np.int64]:
    """Index of the first point whose cdf is at least p (sign 1), or whose sf is at most p (sign -1)."""
    if sign > 0:
        return np.asarray(np.searchsorted(np.maximum.accumulate(values), p, side="left"))
    falling = np.minimum.accumulate(values)
    return np.asarray(values.size - np.searchsorted(falling[::-1], p, side="right"))
