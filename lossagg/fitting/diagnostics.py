"""The points of the plots that show a fit: survival, quantiles and yearly counts, fitted and observed.

The observed survival curve is the product-limit estimate of Kaplan & Meier (1958, J. Amer. Statist. Assoc.
53) with delayed entry: a loss is at risk from its reporting threshold on and leaves at its amount,
counted as an event unless censored. With thresholds it estimates S(x) / S(t) from the smallest
threshold t on, and the fitted curve is put on the same scale.
"""

from __future__ import annotations

from dataclasses import dataclass, fields
from typing import TYPE_CHECKING

import numpy as np
from scipy import special

from lossagg.arrays import BoolArray, FloatArray, Floats
from lossagg.families.base import CountLaw
from lossagg.fitting.counts import counts_of
from lossagg.fitting.results import FrequencyFit, SeverityFit
from lossagg.fitting.sample import checked_losses

if TYPE_CHECKING:
    import pandas as pd

_MOST_POINTS = 200


class _Table:
    def to_frame(self) -> pd.DataFrame:
        """One row per point, one column per attribute."""
        import pandas as pd

        return pd.DataFrame({field.name: getattr(self, field.name) for field in fields(self)})  # type: ignore[arg-type]


@dataclass(frozen=True, eq=False)
class SurvivalPoints(_Table):
    """Observed and fitted probability that a loss exceeds an amount, given it exceeds the threshold.

    Attributes:
        amount: amounts, ascending, shape (n,), n at most 200.
        empirical: product-limit estimate just after each amount.
        low, high: its 95 % interval, pointwise (Greenwood's variance on the log-log scale).
        fitted: the same probability under the fitted law.
    """

    amount: FloatArray
    empirical: FloatArray
    low: FloatArray
    high: FloatArray
    fitted: FloatArray


@dataclass(frozen=True, eq=False)
class QuantilePoints(_Table):
    """Uncensored losses beside the quantiles the fitted law expects in their place.

    Attributes:
        observed: losses, ascending, shape (n,), n at most 200, the largest included.
        fitted: quantile of the fitted law at the loss's place in the product-limit curve.
    """

    observed: FloatArray
    fitted: FloatArray


@dataclass(frozen=True, eq=False)
class CountPoints(_Table):
    """Yearly counts beside what the fitted law expects, in the order given.

    Attributes:
        observed: counts, shape (n,).
        fitted: mean of the fitted law at the year's exposure.
        low, high: 2.5 % and 97.5 % quantiles of the fitted law at the year's exposure.
    """

    observed: FloatArray
    fitted: FloatArray
    low: FloatArray
    high: FloatArray


@dataclass(frozen=True, eq=False)
class ProductLimit:
    """Steps of the product-limit curve at the distinct uncensored losses."""

    amounts: FloatArray  # distinct uncensored losses
    before: FloatArray  # survival just before each
    after: FloatArray
    variance: FloatArray  # Greenwood's sum, of log survival


def product_limit(amounts: FloatArray, thresholds: FloatArray, marks: BoolArray) -> ProductLimit:
    """The product-limit curve of checked losses with their thresholds and censoring marks."""
    points, events = np.unique(amounts[~marks], return_counts=True)
    # At risk at x: thresholds at or below x, amounts at or above; a loss equal to its threshold counts.
    entered = np.searchsorted(np.sort(thresholds), points, side="right")
    left = np.searchsorted(np.sort(amounts), points, side="left")
    at_risk = (entered - left).astype(np.float64)
    # Where all at risk end while others enter later, the curve would fall to 0 and stay there. Such
    # a step says nothing about the later losses: it is left out.
    early = (events == at_risk) & (points < points[-1])
    deaths = np.where(early, 0.0, events)
    after = np.cumprod(1 - deaths / at_risk, dtype=np.float64)
    before = np.concatenate([[1.0], after[:-1]])
    with np.errstate(divide="ignore"):
        variance = np.cumsum(deaths / (at_risk * (at_risk - deaths)))
    return ProductLimit(points, before, after, variance)


def survival_points(
    losses: Floats, fit: SeverityFit, truncation: Floats | None = None, censored: object = None
) -> SurvivalPoints:
    """Observed and fitted survival curve of losses above their thresholds.

    With thresholds that differ, the lowest amounts may be at risk in few records and the curve starts
    with wide steps; a step at which every loss at risk ends while others enter later is left out.

    Args:
        losses, truncation, censored: as given to the fit.
        fit: the fit to show.

    Raises:
        InputError: losses, thresholds or marks that cannot be used.
    """
    amounts, thresholds, marks = checked_losses(losses, truncation, censored)
    curve = product_limit(amounts, thresholds, marks)
    chosen = _thinned(len(curve.amounts))
    amount, survival = curve.amounts[chosen], curve.after[chosen]
    low, high = _survival_interval(survival, curve.variance[chosen])
    base = float(fit.model.sf(float(thresholds.min())))
    return SurvivalPoints(amount, survival, low, high, np.asarray(fit.model.sf(amount)) / base)


def quantile_points(
    losses: Floats, fit: SeverityFit, truncation: Floats | None = None, censored: object = None
) -> QuantilePoints:
    """Points of the quantile plot of the uncensored losses.

    The place of a loss is halfway down its step of the product-limit curve, so without thresholds and
    censoring the i-th of n losses sits at (i - 1/2) / n (Hazen 1914).

    Args:
        losses, truncation, censored: as given to the fit.
        fit: the fit to show.

    Raises:
        InputError: losses, thresholds or marks that cannot be used.
    """
    amounts, thresholds, marks = checked_losses(losses, truncation, censored)
    curve = product_limit(amounts, thresholds, marks)
    chosen = _thinned(len(curve.amounts))
    place = 0.5 * (curve.before[chosen] + curve.after[chosen])
    base = float(fit.model.sf(float(thresholds.min())))
    kept = place > 0
    return QuantilePoints(curve.amounts[chosen][kept], np.asarray(fit.model.isf(place[kept] * base)))


def count_points(counts: Floats, fit: FrequencyFit, exposure: Floats | None = None) -> CountPoints:
    """Yearly counts beside the mean and the central 95 % range of the fitted law.

    Args:
        counts, exposure: as given to the fit.
        fit: the fit to show.

    Raises:
        InputError: counts or exposures that cannot be used.
    """
    counts_of(counts, exposure)
    observed = np.atleast_1d(np.asarray(counts, dtype=np.float64))
    exposures = np.broadcast_to(np.asarray(1.0 if exposure is None else exposure), observed.shape)
    distinct, places = np.unique(exposures, return_inverse=True)
    laws = [fit.model.with_exposure(float(number)) for number in distinct]
    fitted = np.array([law.mean() for law in laws])[places]
    low, high = (np.array([_count_quantile(law, level) for law in laws])[places] for level in (0.025, 0.975))
    return CountPoints(observed, fitted, low, high)


def _count_quantile(law: CountLaw, level: float) -> float:
    """Smallest n with P(N <= n) >= level, by doubling and bisection."""
    low, high = -1, 0
    while law.cdf(high) < level:
        low, high = high, 2 * high + 1
    while high - low > 1:
        middle = (low + high) // 2
        low, high = (low, middle) if law.cdf(middle) >= level else (middle, high)
    return float(high)


def _thinned(count: int) -> np.ndarray:
    """At most 200 places, crowded at the large end: a tail is judged by its last losses."""
    if count <= _MOST_POINTS:
        return np.arange(count)
    from_top = np.unique(np.round(np.geomspace(1, count, _MOST_POINTS)).astype(np.int64))
    return np.asarray(count - from_top[::-1])


def _survival_interval(survival: FloatArray, variance: FloatArray) -> tuple[FloatArray, FloatArray]:
    inside = (survival > 0) & (survival < 1)
    low, high = survival.copy(), survival.copy()
    log_survival = np.log(survival[inside])
    width = special.ndtri(0.975) * np.sqrt(variance[inside]) / -log_survival
    low[inside] = np.exp(log_survival * np.exp(width))
    high[inside] = np.exp(log_survival * np.exp(-width))
    return low, high
