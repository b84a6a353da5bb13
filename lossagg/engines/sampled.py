"""The annual loss as simulated: a sample of years, with the error of every measure.

Error of a quantile: two order statistics that enclose it with 95 % probability whatever the law
(David and Nagaraja 2003, "Order Statistics", section 7.1). Of a mean: s / sqrt(n). Of a tail value
at risk: the variance of its influence function (Manistre and Hancock 2005, "Variance of the CTE
estimator", North American Actuarial Journal 9(2)). Of a standard deviation: the delta method with the
fourth moment. The trap: each formula yields a finite number for any sample, also where the moment
behind it is infinite, so the result knows from the model which moments exist.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from scipy.special import betainc

from lossagg.arrays import FloatArray, Floats, elementwise, require_probability
from lossagg.engines.result import AnnualLoss, require_measure
from lossagg.errors import DoesNotExistError

NORMAL_975 = 1.959963984540054
EXACT_RANKS_BELOW = 1000.0


@dataclass(frozen=True, eq=False, repr=False)
class SimulatedAnnualLoss(AnnualLoss):
    """Annual amounts of simulated years.

    Attributes:
        annual: the amount of every year, in the order of the years, shape (years,).
        moment_order: the order from which on moments do not exist, by the model; `inf` where all do.
        most: the most a year can bring, `inf` where nothing limits it.
    """

    annual: FloatArray
    moment_order: float = np.inf
    most: float = np.inf
    engine: str = "simulation"

    def __repr__(self) -> str:
        return f"SimulatedAnnualLoss({self.years:,} years, mean {self.mean():.6g})"

    @property
    def years(self) -> int:
        """Number of simulated years."""
        return int(self.annual.size)

    @cached_property
    def ordered(self) -> FloatArray:
        """The annual amounts in increasing order."""
        return np.sort(self.annual)

    def sf(self, x: Floats) -> FloatArray | float:
        """The part of the years above x."""
        return elementwise(
            lambda values: (self.years - np.searchsorted(self.ordered, values, side="right")) / self.years,
            x,
            "x",
        )

    def value_at_risk(self, level: float) -> float:
        """The smallest simulated amount not exceeded in at least `level` of the years."""
        level = require_probability(level, "level", open_low=True, open_high=True)
        rank = int(np.ceil(level * self.years))
        if rank > 1 and (rank - 1) / self.years >= level:
            rank -= 1
        return float(self.ordered[rank - 1])

    def layer_mean(self, low: float, high: float = np.inf) -> float:
        """Mean of min((S - low)+, high - low); `inf` for an unlimited layer of an infinite mean."""
        if high == np.inf and self.moment_order <= 1:
            return np.inf
        return float(np.sum(self._layer(low, high)) / self.years)

    def layer_second_moment(self, low: float, high: float = np.inf) -> float:
        """Mean of min((S - low)+, high - low)**2; `inf` for an unlimited layer of an infinite variance."""
        if high == np.inf and self.moment_order <= 2:
            return np.inf
        with np.errstate(over="ignore"):
            return float(np.sum(self._layer(low, high) ** 2) / self.years)

    def mean(self) -> float:
        """The mean of the years; `inf` where the model has none."""
        return np.inf if self.moment_order <= 1 else float(np.sum(self.ordered) / self.years)

    def sd(self) -> float:
        """The standard deviation, by deviations from the mean; `inf` where the model has none."""
        if self.moment_order <= 2:
            return np.inf
        return _sd(self.ordered)

    def tail_value_at_risk(self, level: float) -> float:
        """Mean of the worst 1 - level of the years; `inf` where the model has no mean."""
        value = self.value_at_risk(level)
        return value + self.layer_mean(value) / (1.0 - level)

    def attachment_probability(self) -> float:
        """The part of the years with any amount at all: how often a cover pays."""
        return float(self.sf(0.0))

    def exhaustion_probability(self) -> float | None:
        """The part of the years that reach the most a year can bring; None where nothing limits it."""
        if self.most == np.inf:
            return None
        short = np.searchsorted(self.ordered, self.most * (1.0 - 1e-12), side="left")
        return float((self.years - short) / self.years)

    def accuracy(self, measure: str, level: float | None = None) -> tuple[float, float]:
        """The 95 % interval of a measure: order statistics for a value at risk, else 1.96 standard errors.

        An end of `inf` says that the sample cannot bound the quantile: too few years lie beyond it.

        Raises:
            InputError: an unknown measure, a missing level.
            DoesNotExistError: the variance (for the standard deviation, the fourth moment) is infinite,
                so that no standard error exists.
        """
        require_measure(measure, level)
        if measure == "value_at_risk" and level is not None:
            return self._quantile_interval(level)
        half = NORMAL_975 * self.standard_error(measure, level)
        centre = self.measure(measure, level)
        return centre - half, centre + half

    def standard_error(self, measure: str, level: float | None = None) -> float:
        """The standard error of a measure; of a value at risk, its interval's half width over 1.96.

        Raises:
            InputError: an unknown measure, a missing level.
            DoesNotExistError: as for `accuracy`.
        """
        require_measure(measure, level)
        if measure == "value_at_risk" and level is not None:
            low, high = self._quantile_interval(level)
            return (high - low) / (2.0 * NORMAL_975)
        self._require_moment(4.0 if measure == "sd" else 2.0, measure)
        root = float(np.sqrt(self.years))
        if measure == "mean":
            return self.sd() / root
        if level is not None:
            excess = np.maximum(self.ordered - self.value_at_risk(level), 0.0)
            return _sd(excess) / (1.0 - level) / root
        return self._spread_error() / root

    def _spread_error(self) -> float:
        """Asymptotic standard deviation of sqrt(n) times the sample's standard deviation."""
        scale = self.sd()
        if scale == 0.0 or not np.isfinite(scale):
            return scale
        fourth = float(np.mean(((self.ordered - self.mean()) / scale) ** 4))
        return scale * float(np.sqrt(max(fourth - 1.0, 0.0))) / 2.0

    def _require_moment(self, order: float, measure: str) -> None:
        if self.moment_order <= order:
            raise DoesNotExistError(
                f"no standard error of {measure}: moments from order {self.moment_order:g} on are infinite",
                value=self.moment_order,
                remedy="Use the interval of a value at risk, or limit the loss by a cover.",
            )

    def _quantile_interval(self, level: float) -> tuple[float, float]:
        low, high = quantile_ranks(self.years, level)
        below = min(0.0, float(self.ordered[0])) if low < 1 else float(self.ordered[low - 1])
        return below, self.most if high > self.years else float(self.ordered[high - 1])

    def _layer(self, low: float, high: float) -> FloatArray:
        """Amounts in the layer of the years that reach it."""
        above = self.ordered[np.searchsorted(self.ordered, low, side="right") :]
        return np.minimum(above, high) - low


def quantile_ranks(years: int, level: float) -> tuple[int, int]:
    """Ranks of two order statistics that enclose the quantile with 95 % probability.

    Ranks below 1 or above `years` mean that no year of the sample bounds it on that side. Normal
    approximation of the binomial, rounded outwards; exact where fewer than a thousand years are
    expected on either side.

    Args:
        years: size of the sample.
        level: level of the quantile, in (0, 1).
    """
    if years * min(level, 1.0 - level) >= EXACT_RANKS_BELOW:
        half = NORMAL_975 * np.sqrt(years * level * (1.0 - level))
        return int(np.floor(years * level - half)), int(np.ceil(years * level + half))
    return _binomial_quantile(0.025, years, level), _binomial_quantile(0.975, years, level) + 1


def _binomial_quantile(q: float, trials: int, p: float) -> int:
    """The smallest k with P(B <= k) >= q, by bisection."""
    low, high = -1, trials
    while high - low > 1:
        k = (low + high) // 2
        low, high = (low, k) if float(betainc(trials - k, k + 1.0, 1.0 - p)) >= q else (k, high)
    return high


def _sd(values: FloatArray) -> float:
    """Standard deviation by deviations from the mean, scaled so that squares do not overflow."""
    deviations = values - np.sum(values) / values.size
    scale = float(np.max(np.abs(deviations), initial=0.0))
    if scale == 0.0 or not np.isfinite(scale):
        return scale
    return scale * float(np.sqrt(np.sum((deviations / scale) ** 2) / values.size))
