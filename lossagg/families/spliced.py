"""A splice: one law below a threshold, another above, each where it has evidence.

With q the tail probability and u the threshold, the law is the body given a loss up to u (probability 1 - q)
or the tail given a loss above u (probability q). Limited moments follow from those of the parts:
E[min(B, l); B <= u] = E[min(B, l)] - l S_B(u) for l <= u, and the layers of the tail above u.

Source: Klugman, Panjer and Willmot, Loss Models, section 5.2 (spliced distributions).
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import ClassVar

import numpy as np

from lossagg.arrays import BoolArray, FloatArray, require_positive, require_probability
from lossagg.errors import InputError
from lossagg.families.base import SizeLaw


@dataclass(frozen=True, kw_only=True, repr=False)
class Spliced(SizeLaw):
    """`body` up to the threshold, `tail` above it.

    The density is (1 - tail_probability) f_body / F_body(threshold) below and
    tail_probability f_tail / S_tail(threshold) above; it may jump at the threshold.

    Args:
        body: the law below; needs losses up to the threshold.
        tail: the law above; needs losses above the threshold.
        threshold: the splice point, in units of money, above 0.
        tail_probability: probability of a loss above the threshold, in (0, 1).

    Raises:
        InputError: a body without losses up to the threshold, a tail without losses above it, a
            parameter outside its range.
    """

    family: ClassVar[str] = "spliced"
    body: SizeLaw
    tail: SizeLaw
    threshold: float
    tail_probability: float

    def __post_init__(self) -> None:
        for name, law in (("body", self.body), ("tail", self.tail)):
            if not isinstance(law, SizeLaw):
                raise InputError(f"{name} must be a size law", value=law, remedy="Give Lognormal(...), say.")
        self._settle(
            threshold=require_positive(self.threshold, "threshold"),
            tail_probability=require_probability(
                self.tail_probability, "tail_probability", open_low=True, open_high=True
            ),
        )
        if not self._body_weight > 0:
            raise InputError(
                "the body has no losses up to the threshold",
                value=self.threshold,
                remedy=f"Its smallest loss is {self.body.support[0]:g}; raise the threshold.",
            )
        if not self._tail_weight > 0:
            raise InputError(
                "the tail has no losses above the threshold",
                value=self.threshold,
                remedy=f"Its largest loss is {self.tail.support[1]:g}; lower the threshold.",
            )

    @classmethod
    def continuous(cls, *, body: SizeLaw, tail: SizeLaw, threshold: float) -> Spliced:
        """The splice whose density does not jump at the threshold.

        Body and tail leave one tail probability: its odds are f_body(u) / F_body(u) over
        f_tail(u) / S_tail(u).

        Args:
            body, tail, threshold: as for the law itself.

        Raises:
            InputError: a part without a density at the threshold, or what the law itself refuses.
        """
        made = cls(body=body, tail=tail, threshold=threshold, tail_probability=0.5)
        below, above = made._densities()
        if not (0 < below < np.inf and 0 < above < np.inf):
            raise InputError(
                "a continuous splice needs a density of both parts at the threshold",
                value=(below, above),
                remedy="Move the threshold, or give the tail_probability and accept a jump.",
            )
        return cls(body=body, tail=tail, threshold=threshold, tail_probability=below / (below + above))

    @property
    def jump(self) -> float:
        """The density just above the threshold over that at it: 1 where it is continuous."""
        below, above = self._densities()
        q = self.tail_probability
        with np.errstate(divide="ignore"):
            return float(np.float64(q * above) / ((1 - q) * below))

    def _densities(self) -> tuple[float, float]:
        """Of the body given a loss up to the threshold, of the tail given one above: at the threshold."""
        u = self.threshold
        return float(self.body.pdf(u)) / self._body_weight, float(self.tail.pdf(u)) / self._tail_weight

    @property
    def parameters(self) -> dict[str, float]:
        """body.*, tail.*, threshold and tail_probability."""
        return {
            **{f"body.{name}": value for name, value in self.body.parameters.items()},
            **{f"tail.{name}": value for name, value in self.tail.parameters.items()},
            "threshold": self.threshold,
            "tail_probability": self.tail_probability,
        }

    @cached_property
    def _body_weight(self) -> float:
        return float(self.body.cdf(self.threshold))

    @cached_property
    def _body_rest(self) -> float:
        return float(self.body.sf(self.threshold))

    @cached_property
    def _tail_weight(self) -> float:
        return float(self.tail.sf(self.threshold))

    @property
    def _body_factor(self) -> float:
        return (1.0 - self.tail_probability) / self._body_weight

    @property
    def _tail_factor(self) -> float:
        return self.tail_probability / self._tail_weight

    def _given_parts(self) -> tuple[float, float, float, float]:
        """Mean and variance of the body given a loss up to the threshold, of the tail given one above."""
        u = self.threshold
        weight, rest = self._body_weight, self._body_rest
        body_mean = (float(self.body.limited_mean(u)) - u * rest) / weight
        body_second = (float(self.body.limited_second_moment(u)) - u * u * rest) / weight
        excess = float(self.tail.mean_excess(u))
        spread = np.inf
        if self.tail_index > 2:
            spread = float(self.tail.second_excess(u)) / self._tail_weight - excess**2
        return body_mean, max(body_second - body_mean**2, 0.0), u + excess, max(spread, 0.0)

    def mean(self) -> float:
        """The mean, `inf` where the tail's is."""
        body_mean, _, tail_mean, _ = self._given_parts()
        return (1 - self.tail_probability) * body_mean + self.tail_probability * tail_mean

    def variance(self) -> float:
        """The variance, `inf` where the tail's is: within the parts and between them."""
        if self.tail_index <= 2:
            return np.inf
        body_mean, body_variance, tail_mean, tail_variance = self._given_parts()
        q = self.tail_probability
        return (1 - q) * body_variance + q * tail_variance + q * (1 - q) * (tail_mean - body_mean) ** 2

    @property
    def tail_index(self) -> float:
        """That of the tail."""
        return self.tail.tail_index

    @property
    def support(self) -> tuple[float, float]:
        """From the body's smallest loss to the tail's largest."""
        return (self.body.support[0], self.tail.support[1])

    @property
    def breakpoints(self) -> tuple[float, ...]:
        """The threshold, and the parts' own breakpoints on their side of it."""
        u = self.threshold
        below = {point for point in self.body.breakpoints if point < u}
        above = {point for point in (*self.tail.breakpoints, self.tail.support[0]) if u < point < np.inf}
        return tuple(sorted({*below, u, *above}))

    @property
    def atoms(self) -> tuple[tuple[float, float], ...]:
        """The parts' atoms on their side of the threshold."""
        u, down, up = self.threshold, self._body_factor, self._tail_factor
        return (
            *((amount, p * down) for amount, p in self.body.atoms if amount <= u),
            *((amount, p * up) for amount, p in self.tail.atoms if amount > u),
        )

    def scaled(self, factor: float) -> Spliced:
        """Both parts scaled, the threshold times the factor."""
        return Spliced(
            body=self.body.scaled(factor),
            tail=self.tail.scaled(factor),
            threshold=self.threshold * require_positive(factor, "factor"),
            tail_probability=self.tail_probability,
        )

    def _split(self, x: FloatArray) -> tuple[FloatArray, FloatArray, BoolArray]:
        """x capped at the threshold, x raised to it, and which lie above."""
        return np.minimum(x, self.threshold), np.maximum(x, self.threshold), x > self.threshold

    def _cdf(self, x: FloatArray) -> FloatArray:
        low, high, above = self._split(x)
        below = self._body_factor * np.asarray(self.body.cdf(low))
        return np.where(above, 1.0 - self._tail_factor * np.asarray(self.tail.sf(high)), below)

    def _sf(self, x: FloatArray) -> FloatArray:
        low, high, above = self._split(x)
        rest = self._body_factor * self._body_between(low)
        return np.where(
            above, self._tail_factor * np.asarray(self.tail.sf(high)), self.tail_probability + rest
        )

    def _body_between(self, low: FloatArray) -> FloatArray:
        """P(low < B <= u), from the side where the parts are small."""
        survival = np.asarray(self.body.sf(low))
        by_survival = survival - self._body_rest
        by_cdf = self._body_weight - np.asarray(self.body.cdf(low))
        return np.maximum(np.where(survival < 0.5, by_survival, by_cdf), 0.0)

    def _pdf(self, x: FloatArray) -> FloatArray:
        low, high, above = self._split(x)
        below = self._body_factor * np.asarray(self.body.pdf(low))
        return np.where(above, self._tail_factor * np.asarray(self.tail.pdf(high)), below)

    def _ppf(self, q: FloatArray) -> FloatArray:
        above = q > 1.0 - self.tail_probability
        return self._at(above, np.where(above, 1.0 - q, 0.0), np.where(above, 0.0, q))

    def _isf(self, p: FloatArray) -> FloatArray:
        above = p < self.tail_probability
        return self._at(above, np.where(above, p, 0.0), np.where(above, 0.0, 1.0 - p))

    def _at(self, above: BoolArray, survival: FloatArray, cdf: FloatArray) -> FloatArray:
        # Each point by the one part that answers for it: a table of quantiles asks for thousands.
        sizes = np.empty(above.shape)
        high = np.asarray(self.tail.isf(np.minimum(survival[above] / self._tail_factor, 1.0)))
        sizes[above] = np.maximum(high, self.threshold)
        weight = self._body_weight
        within = np.minimum(cdf[~above] / self._body_factor, weight)
        # The larger half of the body by its survival function, whose values are the small ones there.
        small = within < 0.5
        low = np.empty(within.shape)
        low[small] = self.body.ppf(within[small])
        rest = np.minimum(self._body_rest + (weight - within[~small]), 1.0)
        low[~small] = self.body.isf(rest)
        sizes[~above] = np.minimum(low, self.threshold)
        return sizes

    def _limited_mean(self, limit: FloatArray) -> FloatArray:
        low, high, _ = self._split(limit)
        body = np.asarray(self.body.limited_mean(low)) - low * self._body_rest
        layer = self._tail_factor * np.asarray(self.tail.layer_mean(self.threshold, high))
        return self._body_factor * body + self.tail_probability * low + layer

    def _limited_second_moment(self, limit: FloatArray) -> FloatArray:
        u, q = self.threshold, self.tail_probability
        low, high, _ = self._split(limit)
        body = np.asarray(self.body.limited_second_moment(low)) - low * low * self._body_rest
        above = np.asarray(self.tail.layer_second_moment(u, high)) + 2.0 * u * np.asarray(
            self.tail.layer_mean(u, high)
        )
        return self._body_factor * body + q * low * low + self._tail_factor * above

    def _expected_excess(self, x: FloatArray) -> FloatArray:
        low, high, _ = self._split(x)
        room = self.threshold - low
        body = np.asarray(self.body.layer_mean(low, self.threshold)) - room * float(
            self.body.sf(self.threshold)
        )
        tail = self._tail_factor * np.asarray(self.tail.expected_excess(high))
        return self._body_factor * np.maximum(body, 0.0) + self.tail_probability * room + tail

    def _second_excess(self, x: FloatArray) -> FloatArray:
        u, q = self.threshold, self.tail_probability
        low, high, _ = self._split(x)
        room = u - low
        body = np.asarray(self.body.layer_second_moment(low, u)) - room * room * self._body_rest
        tail = np.asarray(self.tail.second_excess(high)) + 2.0 * room * self.tail.expected_excess(high)
        rest = q * room * room + self._tail_factor * tail
        return np.asarray(self._body_factor * np.maximum(body, 0.0) + rest)
