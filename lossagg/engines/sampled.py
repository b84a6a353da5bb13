"""The annual loss as simulated: a sample of years, with the error of every measure.

Error of a quantile: two order statistics that enclose it with 95 % probability whatever the law
(David and Nagaraja 2003, "Order Statistics", section 7.1). Of a mean: s / sqrt(n). Of a tail value
at risk: the variance of its influence function (Manistre and Hancock 2005, "Variance of the CTE
estimator", North American Actuarial Journal 9(2)). Of a standard deviation: the delta method with the
fourth moment. The trap: each formula yields a finite number for any sample, also where the moment
behind it is infinite, so the result knows from the model which moments exist.
"""

from __future__ import annotations

from abc import abstractmethod
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from scipy.special import betainc, ndtri

from lossagg.arrays import FloatArray, Floats, elementwise, require_probability
from lossagg.engines.result import AnnualLoss, require_measure
from lossagg.errors import DoesNotExistError

EXACT_RANKS_BELOW = 1000.0


class SampledAnnualLoss(AnnualLoss):
    """Annual amounts of simulated years, whole or reduced.

    Attributes:
        moment_order: the order from which on moments do not exist, by the model; `inf` where all do.
        most: the most a year can bring, `inf` where nothing limits it.
        miss: how often an interval may miss, 0.05; less where a run stopped at a look of its own choice,
            see `stopping`.
    """

    moment_order: float
    most: float
    miss: float

    @property
    @abstractmethod
    def years(self) -> int:
        """Number of simulated years."""

    @abstractmethod
    def amount_at(self, rank: int) -> tuple[float, float, float]:
        """The amount at a rank from 1 to `years`, and the bounds of the error of knowing it."""

    @abstractmethod
    def _layer_moments(self, low: float, high: float) -> tuple[float, float]:
        """Mean and mean square of min((S - low)+, high - low)."""

    @abstractmethod
    def _excess_sd(self, low: float) -> float:
        """Standard deviation of (S - low)+."""

    @abstractmethod
    def _central(self) -> tuple[float, float, float]:
        """Mean, standard deviation, and fourth moment about the mean over the squared variance."""

    def __repr__(self) -> str:
        return f"{type(self).__name__}({self.years:,} years, mean {self.mean():.6g})"

    def value_at_risk(self, level: float) -> float:
        """The smallest simulated amount not exceeded in at least `level` of the years."""
        level = require_probability(level, "level", open_low=True, open_high=True)
        rank = int(np.ceil(level * self.years))
        if rank > 1 and (rank - 1) / self.years >= level:
            rank -= 1
        return self.amount_at(rank)[0]

    def layer_mean(self, low: float, high: float = np.inf) -> float:
        """Mean of min((S - low)+, high - low); `inf` for an unlimited layer of an infinite mean."""
        if high == np.inf and self.moment_order <= 1:
            return np.inf
        return self._layer_moments(low, high)[0]

    def layer_second_moment(self, low: float, high: float = np.inf) -> float:
        """Mean of min((S - low)+, high - low)**2; `inf` for an unlimited layer of an infinite variance."""
        if high == np.inf and self.moment_order <= 2:
            return np.inf
        return self._layer_moments(low, high)[1]

    def mean(self) -> float:
        """The mean of the years; `inf` where the model has none."""
        return np.inf if self.moment_order <= 1 else self._central()[0]

    def sd(self) -> float:
        """The standard deviation, by deviations from the mean; `inf` where the model has none."""
        return np.inf if self.moment_order <= 2 else self._central()[1]

    def tail_value_at_risk(self, level: float) -> float:
        """Mean of the worst 1 - level of the years; `inf` where the model has no mean."""
        value = self.value_at_risk(level)
        return value + self.layer_mean(value) / (1.0 - level)

    def attachment_probability(self) -> float:
        """The part of the years with any amount at all: how often a cover pays."""
        return float(self.sf(0.0))

    @abstractmethod
    def exhaustion_probability(self) -> float | None:
        """The part of the years that reach the most a year can bring; None where nothing limits it."""

    @property
    def _half(self) -> float:
        """Standard errors on either side of an interval that misses as often as it may."""
        return float(ndtri(1.0 - self.miss / 2.0))

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
        half = self._half * self.standard_error(measure, level)
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
            return (high - low) / (2.0 * self._half)
        self._require_moment(4.0 if measure == "sd" else 2.0, measure)
        root = float(np.sqrt(self.years))
        if measure == "mean":
            return self.sd() / root
        if level is not None:
            return self._excess_sd(self.value_at_risk(level)) / (1.0 - level) / root
        _, scale, fourth = self._central()
        if scale == 0.0 or not np.isfinite(scale):
            return scale
        return scale * float(np.sqrt(max(fourth - 1.0, 0.0))) / 2.0 / root

    def _require_moment(self, order: float, measure: str) -> None:
        if self.moment_order <= order:
            raise DoesNotExistError(
                f"no standard error of the {measure.replace('_', ' ')}: "
                f"moments of order {self.moment_order:.3g} and above are infinite",
                value=self.moment_order,
                remedy="Use the interval of a value at risk, or limit the loss by a cover.",
            )

    def _quantile_interval(self, level: float) -> tuple[float, float]:
        low, high = quantile_ranks(self.years, level, self.miss)
        below = min(0.0, self.amount_at(1)[1]) if low < 1 else self.amount_at(low)[1]
        return below, self.most if high > self.years else self.amount_at(high)[2]


@dataclass(frozen=True, eq=False, repr=False)
class SimulatedAnnualLoss(SampledAnnualLoss):
    """Annual amounts of simulated years.

    Attributes:
        annual: the amount of every year, in the order of the years, shape (years,).
        moment_order: the order from which on moments do not exist, by the model; `inf` where all do.
        most: the most a year can bring, `inf` where nothing limits it.
        miss: how often an interval may miss.
    """

    annual: FloatArray
    moment_order: float = np.inf
    most: float = np.inf
    engine: str = "simulation"
    miss: float = 0.05

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

    def amount_at(self, rank: int) -> tuple[float, float, float]:
        """The amount at a rank, exactly."""
        amount = float(self.ordered[rank - 1])
        return amount, amount, amount

    def exhaustion_probability(self) -> float | None:
        """The part of the years that reach the most a year can bring; None where nothing limits it."""
        if self.most == np.inf:
            return None
        short = np.searchsorted(self.ordered, self.most * (1.0 - 1e-12), side="left")
        return float((self.years - short) / self.years)

    def _layer_moments(self, low: float, high: float) -> tuple[float, float]:
        above = self.ordered[np.searchsorted(self.ordered, low, side="right") :]
        within = np.minimum(above, high) - low
        with np.errstate(over="ignore"):
            return float(np.sum(within) / self.years), float(np.sum(within**2) / self.years)

    def _excess_sd(self, low: float) -> float:
        excess = self.ordered[np.searchsorted(self.ordered, low, side="right") :] - low
        return _sd(excess, self.years)

    def _central(self) -> tuple[float, float, float]:
        return self._moments

    @cached_property
    def _moments(self) -> tuple[float, float, float]:
        mean, scale = float(np.sum(self.ordered) / self.years), _sd(self.ordered, self.years)
        if scale == 0.0 or not np.isfinite(scale):
            return mean, scale, 0.0
        squares = (self.ordered - mean) / scale
        squares *= squares
        squares *= squares
        return mean, scale, float(np.mean(squares))


def quantile_ranks(years: int, level: float, miss: float = 0.05) -> tuple[int, int]:
    """Ranks of two order statistics that enclose the quantile but for a probability `miss`.

    Ranks below 1 or above `years` mean that no year of the sample bounds it on that side. Normal
    approximation of the binomial, rounded outwards; exact where fewer than a thousand years are
    expected on either side.

    Args:
        years: size of the sample.
        level: level of the quantile, in (0, 1).
        miss: probability of missing it, half on either side.
    """
    if years * min(level, 1.0 - level) >= EXACT_RANKS_BELOW:
        half = ndtri(1.0 - miss / 2.0) * np.sqrt(years * level * (1.0 - level))
        return int(np.floor(years * level - half)), int(np.ceil(years * level + half))
    return (
        _binomial_quantile(miss / 2.0, years, level),
        _binomial_quantile(1.0 - miss / 2.0, years, level) + 1,
    )


def _binomial_quantile(q: float, trials: int, p: float) -> int:
    """The smallest k with P(B <= k) >= q, by bisection."""
    low, high = -1, trials
    while high - low > 1:
        k = (low + high) // 2
        low, high = (low, k) if float(betainc(trials - k, k + 1.0, 1.0 - p)) >= q else (k, high)
    return high


def _sd(values: FloatArray, years: int) -> float:
    """Standard deviation by deviations from the mean, scaled so that squares do not overflow.

    Args:
        values: amounts above zero, in increasing order.
        years: size of the sample; the amounts not given are zero.
    """
    mean, zeros = float(np.sum(values) / years), years - values.size
    deviations = values - mean
    ends = (abs(float(deviations[0])), abs(float(deviations[-1]))) if values.size else (0.0, 0.0)
    scale = max(*ends, mean if zeros else 0.0)
    if scale == 0.0 or not np.isfinite(scale):
        return scale
    deviations /= scale
    deviations *= deviations
    return scale * float(np.sqrt((np.sum(deviations) + zeros * (mean / scale) ** 2) / years))
