"""Terms that need more than one number: a corridor, a surplus."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from lossagg.arrays import require_positive, require_probability
from lossagg.cover.schedule import Schedule
from lossagg.errors import InputError


@dataclass(frozen=True, kw_only=True)
class Corridor:
    """A band of the year's payments of which the insured takes back a part.

    Args:
        low: where the band starts, at least 0.
        high: where it ends, above `low`, possibly infinite.
        share: the part of the band taken back, 0 < share <= 1.

    Raises:
        InputError: a band that is empty, a share outside (0, 1].
    """

    low: float
    high: float
    share: float = 1.0

    def __post_init__(self) -> None:
        object.__setattr__(self, "low", require_positive(self.low, "low", zero=True))
        object.__setattr__(self, "high", require_positive(self.high, "high", infinite=True))
        object.__setattr__(self, "share", require_probability(self.share, "share", open_low=True))
        if self.high <= self.low:
            raise InputError(
                "a corridor must end above where it starts",
                value=self.high,
                remedy=f"Give high above {self.low:g}; both count the year's payments from the first unit.",
            )

    def schedule(self) -> Schedule:
        """What remains payable of the year's payments."""
        kept = 1.0 - self.share
        pieces = [(0.0, 0.0, 1.0)] if self.low > 0 else []
        pieces.append((self.low, self.low, kept))
        if self.high < np.inf:
            pieces.append((self.high, self.low + kept * (self.high - self.low), 1.0))
        starts, values, slopes = zip(*pieces, strict=True)
        return Schedule(starts, values, slopes)

    def scaled(self, factor: float) -> Corridor:
        """The same corridor in other money."""
        return Corridor(low=factor * self.low, high=factor * self.high, share=self.share)


@dataclass(frozen=True, kw_only=True)
class Surplus:
    """A surplus treaty: of every risk the insurer keeps one line, and cedes up to so many lines above it.

    The ceded part of the sum insured is ceded of every loss of the risk, small or total.

    Args:
        kept_line: the sum insured kept of each risk, above 0.
        lines: how many times the kept line can be ceded, above 0.

    Raises:
        InputError: a number at or below 0.
    """

    kept_line: float
    lines: float

    def __post_init__(self) -> None:
        object.__setattr__(self, "kept_line", require_positive(self.kept_line, "kept_line"))
        object.__setattr__(self, "lines", require_positive(self.lines, "lines"))

    def ceded_share(self, sum_insured: float) -> float:
        """The part of a risk of this sum insured that is ceded; 0 where one line holds it all."""
        return min(max(sum_insured - self.kept_line, 0.0), self.lines * self.kept_line) / sum_insured

    def scaled(self, factor: float) -> Surplus:
        """The same treaty in other money."""
        return Surplus(kept_line=factor * self.kept_line, lines=self.lines)
