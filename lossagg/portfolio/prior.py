"""The rate of a line that its own counts do not give alone: weighed against a stated prior, or bounded.

Weighing knows two methods (`lossagg.fitting.credibility`): a prior worth so much exposure, weighed as
Buhlmann does; or a standard of full credibility, by limited fluctuation. Both give the own experience a
weight between 0 and 1, and the prior the rest. Without a single loss and without a prior the rate is the one
that would have shown none with a probability of only 5 %: an upper bound, never zero.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Annotated, Any, Final

import numpy as np
from pydantic import Field, model_validator

from lossagg.errors import InputError, place
from lossagg.families.base import CountLaw
from lossagg.fitting import FrequencyFit, full_credibility, limited_fluctuation
from lossagg.portfolio.sections import Positive, Probability, Section

FAMILIES = ("poisson", "negative-binomial")
UPPER_BOUND: Final = "upper-bound"
BOUND_LEVEL = 0.95


class FullCredibilitySection(Section):
    """`full-credibility`: the number of losses from which the own experience is believed alone.

    Stated as `losses`, or as the `probability` that the experience is within a `margin` of its mean.
    """

    losses: Positive | None = None
    probability: Probability | None = None
    margin: Annotated[float, Field(gt=0, lt=1)] | None = None

    @model_validator(mode="after")
    def _one_way(self) -> FullCredibilitySection:
        pair = (self.probability is not None, self.margin is not None)
        if (self.losses is not None) == all(pair) or any(pair) != all(pair):
            raise ValueError(
                "full-credibility is stated in one of two ways | Give losses, or probability and margin."
            )
        return self

    @property
    def standard(self) -> float:
        """Losses needed for full credibility."""
        if self.losses is not None:
            return self.losses
        assert self.probability is not None
        assert self.margin is not None
        return full_credibility(self.probability, self.margin)


class PriorSection(Section):
    """`prior` of a fitted frequency: what is known of the rate besides the line's own records.

    Attributes:
        rate: ground-up events of the forecast period per unit of exposure (a year, where the line has none).
        source: where it comes from; printed.
        worth: how much exposure the prior counts like.
        full_credibility: or the standard at which the own experience is believed alone.
    """

    rate: Positive
    source: Annotated[str, Field(min_length=1)]
    worth: Positive | None = None
    full_credibility: FullCredibilitySection | None = None

    @model_validator(mode="after")
    def _one_method(self) -> PriorSection:
        if (self.worth is None) == (self.full_credibility is None):
            raise ValueError(
                "a prior is weighed in one of two ways | Give worth, the exposure the prior counts like, or "
                "full-credibility, the losses from which the own experience is believed alone."
            )
        return self


@dataclass(frozen=True, kw_only=True)
class WeightedRate:
    """The rate of a line, from its own experience and a prior.

    Attributes:
        rate: weighted, per unit of exposure.
        standard_error: of the weighted rate; the prior worth exposure has an error of its own, that of a
            standard of full credibility is taken as known.
        weight: of the own experience.
        own: rate of the own experience.
        own_interval: its 95 % interval.
        losses: counted.
        seen: exposure of the forecast period that would show as many losses.
        prior: as stated.
    """

    rate: float
    standard_error: float
    weight: float
    own: float
    own_interval: tuple[float, float]
    losses: int
    seen: float
    prior: PriorSection

    @property
    def method(self) -> str:
        """The method in words, with what it was told."""
        if self.prior.worth is not None:
            return f"greatest accuracy (Buhlmann), the prior worth {self.prior.worth:.6g} of exposure"
        assert self.prior.full_credibility is not None
        standard = self.prior.full_credibility.standard
        return f"limited fluctuation, full credibility from {standard:,.0f} losses"

    @property
    def contradicted(self) -> bool:
        """Whether the prior lies outside the interval of the own experience."""
        low, high = self.own_interval
        return not low <= self.prior.rate <= high

    def law(self, fit: FrequencyFit, exposure: float) -> CountLaw:
        """The law of the fit at the weighted rate and an exposure."""
        return fit.model.with_exposure(exposure * self.rate / fit.model.mean())

    def redrawn(self, own: CountLaw, exposure: float) -> CountLaw:
        """Another law of the own rate at exposure 1, weighed the same, at an exposure."""
        mean = self.weight * own.mean() + (1.0 - self.weight) * self.prior.rate
        return own.with_exposure(exposure * mean / own.mean())

    def to_dict(self) -> dict[str, Any]:
        """As plain data, for assessment and report."""
        return {
            "method": self.method,
            "weight": self.weight,
            "own_rate": self.own,
            "own_low": self.own_interval[0],
            "own_high": self.own_interval[1],
            "losses": self.losses,
            "exposure": self.seen,
            "prior_rate": self.prior.rate,
            "source": self.prior.source,
            "rate": self.rate,
            "standard_error": self.standard_error,
        }


@dataclass(frozen=True, kw_only=True)
class BoundedRate:
    """The rate of a line in whose observed years there was no loss: an upper bound.

    Attributes:
        rate: the bound, per unit of exposure: -log(1 - level) / seen (Garwood 1936, Biometrika 28).
        seen: exposure of the forecast period that would have shown a loss.
        level: probability with which at least one loss would have been seen at that rate.
    """

    rate: float
    seen: float
    level: float = BOUND_LEVEL

    @property
    def method(self) -> str:
        """The bound in words."""
        return f"the one-sided {self.level:.0%} upper bound {self.rate:.5g} per unit of exposure"

    def to_dict(self) -> dict[str, Any]:
        """As plain data, for assessment and report."""
        return {"rate": self.rate, "level": self.level, "losses": 0, "exposure": self.seen}


def bounded_rate(fit: FrequencyFit) -> BoundedRate:
    """The upper bound of the rate of a line without a loss.

    Args:
        fit: the Poisson law of the line's counts, all zero.
    """
    return BoundedRate(rate=fit.upper_rate(BOUND_LEVEL), seen=fit.exposure)


def weighted_rate(prior: PriorSection, fit: FrequencyFit, key: str) -> WeightedRate:
    """Weigh a line's own experience against its prior.

    Args:
        prior: as stated in the portfolio file.
        fit: of the line's counts.
        key: the name of the table of the frequency in messages, `line[2].frequency`.

    Raises:
        InputError: a family whose mean does not follow its exposure freely.
    """
    if fit.family not in FAMILIES:
        raise InputError(
            "a prior rate needs a law whose mean may take any value",
            where=place(file="portfolio.toml", key=f"{key}.prior"),
            value=fit.family,
            remedy=f"Fit or choose one of {', '.join(FAMILIES)}.",
        )
    own, seen, losses = fit.maximum_likelihood_mean, fit.exposure, fit.losses
    low, high = (0.0, fit.upper_rate(0.975)) if losses == 0 else fit.interval("mean")
    if prior.worth is not None:
        weight = seen / (seen + prior.worth)
        # The prior is a gamma law of shape rate * worth; its share of the variance is that of the posterior.
        variance = (weight * fit.standard_errors["mean"]) ** 2 if losses else 0.0
        variance += prior.rate * prior.worth / (seen + prior.worth) ** 2
    else:
        assert prior.full_credibility is not None
        weight = limited_fluctuation(losses, prior.full_credibility.standard)
        variance = (weight * fit.standard_errors["mean"]) ** 2
    return WeightedRate(
        rate=weight * own + (1.0 - weight) * prior.rate,
        standard_error=float(np.sqrt(variance)),
        weight=weight,
        own=own,
        own_interval=(low, high),
        losses=losses,
        seen=seen,
        prior=prior,
    )
