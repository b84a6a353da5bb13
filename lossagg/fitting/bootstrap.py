"""Losses drawn again from a fitted law, seen through the same thresholds and policy limits.

Each replicate draws every loss above its own threshold from the fitted law and stops it at its limit. The
limit of a censored loss is the amount at which it stopped; that of an uncensored loss is known only to lie
above it, and is drawn from the product-limit estimate of the limits, given that (the conditional bootstrap
of Davison & Hinkley, Bootstrap Methods and their Application, 1997, algorithm 3.2). Replicate k draws from
the stream of (seed, k) alone, so replicates can be computed in any order and anywhere.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from lossagg.arrays import BoolArray, FloatArray
from lossagg.errors import FitError
from lossagg.families.base import SizeLaw
from lossagg.fitting.refit import refit
from lossagg.fitting.results import SeverityFit


@dataclass(frozen=True, eq=False)
class Limits:
    """The product-limit estimate of the policy limits behind censored losses.

    Attributes:
        points: distinct limits, ascending, shape (m,).
        beyond: probability of a limit above each, shape (m,); what remains at the end has no limit.
    """

    points: FloatArray
    beyond: FloatArray

    @classmethod
    def of(cls, amounts: FloatArray, thresholds: FloatArray, censored: BoolArray) -> Limits:
        """From losses with their thresholds and marks: a limit is seen where a loss stopped at it."""
        points, stops = np.unique(amounts[censored], return_counts=True)
        entered = np.searchsorted(np.sort(thresholds), points, side="right")
        left = np.searchsorted(np.sort(amounts), points, side="left")
        # A loss equal to a limit and not stopped there ended just before it.
        ended = np.searchsorted(np.sort(amounts[~censored]), points, side="right") - np.searchsorted(
            np.sort(amounts[~censored]), points, side="left"
        )
        at_risk = (entered - left - ended).astype(np.float64)
        last = (stops == at_risk) & (points < amounts.max())
        steps = np.where(last, 1.0, 1 - stops / at_risk)  # a lone early stop must not end all limits
        return cls(points, np.cumprod(steps, dtype=np.float64))

    def above(self, amounts: FloatArray, uniform: FloatArray) -> FloatArray:
        """A limit above each amount for uniform numbers in (0, 1]; `inf` for none."""
        padded = np.concatenate([[1.0], self.beyond])
        start = padded[np.searchsorted(self.points, amounts, side="right")]
        place = np.searchsorted(-self.beyond, -(start * uniform), side="left")
        # Rounding must not put a limit at or below the amount.
        place = np.maximum(place, np.searchsorted(self.points, amounts, side="right"))
        return np.append(self.points, np.inf)[place]


@dataclass(frozen=True, eq=False)
class Replicate:
    """One bootstrap sample with the law fitted to it; `law` is None where that fit has no maximum."""

    amounts: FloatArray
    censored: BoolArray
    law: SizeLaw | None


def replicates(
    fit: SeverityFit,
    amounts: FloatArray,
    thresholds: FloatArray,
    censored: BoolArray,
    *,
    count: int,
    seed: int,
) -> Iterator[Replicate]:
    """Bootstrap samples of a fit, each refitted.

    Args:
        fit: the fit whose law the losses are drawn from.
        amounts, thresholds, censored: the losses it was fitted to, as `checked_losses` gives them.
        count: how many replicates.
        seed: 0 or above; replicate k depends on the seed and k only.
    """
    limits = Limits.of(amounts, thresholds, censored) if censored.any() else None
    start = np.asarray(fit.model.sf(thresholds)) if thresholds.any() else np.ones(amounts.shape)
    for k in range(count):
        random = np.random.Generator(np.random.SFC64(np.random.SeedSequence([seed, k])))
        drawn = np.maximum(fit.model.isf(start * (1.0 - random.random(amounts.size))), thresholds)
        stopped = np.zeros(amounts.shape, dtype=np.bool_)
        if limits is not None:
            ends = np.where(censored, amounts, limits.above(amounts, 1.0 - random.random(amounts.size)))
            stopped = drawn >= ends
            drawn = np.minimum(drawn, ends)
        try:
            law = refit(fit, drawn, thresholds, stopped)
        except FitError:
            law = None
        yield Replicate(drawn, stopped, law)
