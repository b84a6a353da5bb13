"""A splice: one law below a threshold, another above, each where it has evidence.

With q the tail probability and u the threshold, the law is the body given a loss up to u (probability 1 - q)
or the tail given a loss above u (probability q). Limited moments follow from those of the parts:
E[min(B, l); B <= u] = E[min(B, l)] - l S_B(u) for l <= u, and the layers of the tail above u.

Source: Klugman, Panjer and Willmot, Loss Models, section 5.2 (spliced distributions).
"""

from __future__ import annotations

from dataclasses import dataclass
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

    @property
    def parameters(self) -> dict[str, float]:
        """body.*, tail.*, threshold and tail_probability."""
        return {
            **{f"body.{name}": value for name, value in self.body.parameters.items()},
            **{f"tail.{name}": value for name, value in self.tail.parameters.items()},
            "threshold": self.threshold,
            "tail_probability": self.tail_probability,
        }

    @property
    def _body_weight(self) -> float:
        return float(self.body.cdf(self.threshold))

    @property
    def _tail_weight(self) -> float:
        return float(self.tail.sf(self.threshold))

    @property
    def _body_factor(self) -> float:
        return (1.0 - self.tail_probability) / self._body_weight

    @property
    def _tail_factor(self) -> float:
        return self.tail_probability / self._tail_weight

    def mean(self) -> float:
        """The mean, `inf` where the tail's is."""
        u, q = self.threshold, self.tail_probability
        below = float(self.body.limited_mean(u)) - u * float(self.body.sf(u))
        return self._body_factor * below + q * (u + float(self.tail.mean_excess(u)))

    def variance(self) -> float:
        """The variance, `inf` where the tail's is."""
        return self.second_moment() - self.mean() ** 2 if self.tail_index > 2 else np.inf

    def second_moment(self) -> float:
        """The second moment, `inf` where the tail's is."""
        u, tail = self.threshold, self.tail
        above = tail.second_moment() - float(tail.limited_second_moment(u)) + u * u * self._tail_weight
        return self._body_factor * float(self._body_second(np.array(u))) + self._tail_factor * above

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
        by_survival = survival - float(self.body.sf(self.threshold))
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
        high = self.tail.isf(np.minimum(survival / self._tail_factor, 1.0))
        # The larger half of the body by its survival function, whose values are the small ones there.
        within = np.minimum(cdf / self._body_factor, self._body_weight)
        rest = np.minimum(float(self.body.sf(self.threshold)) + (self._body_weight - within), 1.0)
        low = np.where(within < 0.5, np.asarray(self.body.ppf(within)), np.asarray(self.body.isf(rest)))
        return np.where(above, np.maximum(high, self.threshold), np.minimum(low, self.threshold))

    def _limited_mean(self, limit: FloatArray) -> FloatArray:
        low, high, _ = self._split(limit)
        body = np.asarray(self.body.limited_mean(low)) - low * float(self.body.sf(self.threshold))
        layer = self._tail_factor * np.asarray(self.tail.layer_mean(self.threshold, high))
        return self._body_factor * body + self.tail_probability * low + layer

    def _body_second(self, low: FloatArray) -> FloatArray:
        """E[min(B, low)**2; B <= u] for low <= u."""
        moment = np.asarray(self.body.limited_second_moment(low))
        return moment - low * low * float(self.body.sf(self.threshold))

    def _limited_second_moment(self, limit: FloatArray) -> FloatArray:
        low, high, _ = self._split(limit)
        moments = self.tail.limited_second_moment(high), self.tail.limited_second_moment(self.threshold)
        above = self._tail_factor * np.maximum(np.asarray(moments[0]) - float(moments[1]), 0.0)
        return self._body_factor * self._body_second(low) + self.tail_probability * low * low + above

    def _expected_excess(self, x: FloatArray) -> FloatArray:
        low, high, _ = self._split(x)
        body = np.asarray(self.body.layer_mean(low, self.threshold))
        body = body - (self.threshold - low) * float(self.body.sf(self.threshold))
        tail = self._tail_factor * np.asarray(self.tail.expected_excess(high))
        return self._body_factor * body + self.tail_probability * (self.threshold - low) + tail
