"""A figure that keeps its accuracy through sums: what the table of options is made of."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from lossagg.engines.result import AnnualLoss
from lossagg.portfolio.assessment import figure

FORMULA = "formula"


@dataclass(frozen=True)
class Figure:
    """A value with the range that travels with it.

    Attributes:
        value: None where it does not exist or is withheld; `reason` then says why.
        low, high: a guaranteed bracket or a 95 % interval; equal to the value where a formula gives it.
        engine: where it comes from.
        reason: why there is no value or no range.
    """

    value: float | None
    low: float | None
    high: float | None
    engine: str
    reason: str | None = None

    @classmethod
    def exact(cls, value: float | None, reason: str | None = None, engine: str = FORMULA) -> Figure:
        """A value that a formula gives; infinite values do not exist."""
        if value is None or not np.isfinite(value):
            return cls(None, None, None, engine, reason or "does not exist: it is infinite")
        return cls(float(value), float(value), float(value), engine)

    @classmethod
    def measured(cls, loss: AnnualLoss, measure: str, level: float | None = None) -> Figure:
        """A measure of an annual loss with its accuracy."""
        found = figure(loss, measure, level, withheld="")
        return cls(found["value"], found["low"], found["high"], found["engine"], found["reason"])

    @classmethod
    def withheld(cls, reason: str) -> Figure:
        """A figure that is not printed."""
        return cls(None, None, None, "", reason)

    def plus(self, other: float | None, reason: str | None = None) -> Figure:
        """This figure with a known amount added."""
        if self.value is None:
            return self
        if other is None:
            return Figure(None, None, None, self.engine, reason or "does not exist")
        return Figure(self.value + other, _moved(self.low, other), _moved(self.high, other), self.engine)

    def joined(self, other: Figure) -> Figure:
        """The sum of two figures, its range that of the sums of their ends."""
        if self.value is None or other.value is None:
            return self if self.value is None else other
        ends = [
            None if mine is None or theirs is None else mine + theirs
            for mine, theirs in ((self.low, other.low), (self.high, other.high))
        ]
        return Figure(self.value + other.value, ends[0], ends[1], self.engine)

    def taken_from(self, whole: float | None) -> Figure:
        """A known amount less this figure."""
        if self.value is None:
            return self
        if whole is None or not np.isfinite(whole):
            return Figure(None, None, None, self.engine, "does not exist: the expected loss is infinite")
        low, high = (
            _moved(None if self.high is None else -self.high, whole),
            _moved(None if self.low is None else -self.low, whole),
        )
        return Figure(max(whole - self.value, 0.0), low, high, self.engine)

    def scaled(self, factor: float) -> Figure:
        """This figure times a factor; a negative one turns the range round."""
        if self.value is None:
            return self
        ends = [None if end is None else factor * end for end in (self.low, self.high)]
        low, high = ends if factor >= 0 else ends[::-1]
        return Figure(factor * self.value, low, high, self.engine)

    def to_dict(self) -> dict[str, Any]:
        """The figure as plain data."""
        return {
            "value": self.value,
            "low": self.low,
            "high": self.high,
            "engine": self.engine,
            "reason": self.reason,
        }


def _moved(value: float | None, by: float) -> float | None:
    return None if value is None else value + by
