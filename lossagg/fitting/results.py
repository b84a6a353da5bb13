"""What a fit hands back: the law, its parameters, how sure they are, and what to be careful of."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np
from scipy import special

from lossagg.arrays import FloatArray, require_probability
from lossagg.errors import InputError
from lossagg.families.base import CountLaw, Law, SizeLaw
from lossagg.fitting.count_solution import CountSolution
from lossagg.fitting.likelihood import Range
from lossagg.fitting.notes import Note
from lossagg.fitting.solution import Solution

if TYPE_CHECKING:
    import pandas as pd


@dataclass(frozen=True, eq=False, repr=False, kw_only=True)
class Fit:
    """A law fitted by maximum likelihood.

    Attributes:
        family: name of the family, such as "lognormal".
        model: the fitted law.
        parameters: estimates by name, in the order of the covariance.
        covariance: inverse of the observed information, shape (k, k); rows of parameters that
            were held fixed are zero.
        fixed: names of parameters that were held fixed rather than estimated.
        log_likelihood: natural logarithm of the likelihood at the estimates.
        estimated: how many parameters the data chose; what AIC and BIC count.
        observations: losses or years that entered; the sum of their weights where they have some.
        gradient_norm: distance left to the maximum, in standard errors: sqrt(g' C g) with the
            gradient g and the covariance C. A certified fit has it under 1e-5.
        ranges: the range of each estimated parameter, which decides the scale of its interval.
        notes: what a reader must know before using the fit.
    """

    family: str
    model: Law
    parameters: Mapping[str, float]
    covariance: FloatArray
    fixed: tuple[str, ...] = ()
    log_likelihood: float
    estimated: int
    observations: float
    gradient_norm: float
    ranges: Mapping[str, Range] = field(default_factory=dict)
    notes: tuple[Note, ...] = ()

    def __post_init__(self) -> None:
        self.covariance.setflags(write=False)

    @property
    def standard_errors(self) -> dict[str, float]:
        """Standard errors by parameter name; 0 for a parameter held fixed."""
        errors = np.sqrt(np.diag(self.covariance))
        return {name: float(error) for name, error in zip(self.parameters, errors, strict=True)}

    @property
    def aic(self) -> float:
        """Akaike's information criterion, 2 k - 2 log L (Akaike 1974); lower is better."""
        return 2.0 * self.estimated - 2.0 * self.log_likelihood

    @property
    def bic(self) -> float:
        """Schwarz's criterion, k log n - 2 log L (Schwarz 1978); lower is better."""
        return float(self.estimated * np.log(self.observations) - 2.0 * self.log_likelihood)

    def interval(self, name: str, level: float = 0.95) -> tuple[float, float]:
        """Confidence interval of one parameter from its standard error.

        Symmetric on the scale of the parameter's range: as it is for a real number, its logarithm
        for a positive one, its log-odds for a probability. It rests on large-sample theory.

        Args:
            name: parameter name, as in `parameters`.
            level: probability that the interval covers the parameter, such as 0.95.

        Raises:
            InputError: a name the fit does not have, or a level outside (0, 1).
        """
        if name not in self.parameters:
            raise InputError(
                f"the {self.family} fit has no parameter of this name",
                value=name,
                remedy=f"Choose one of {', '.join(self.parameters)}.",
            )
        require_probability(level, "level", open_low=True, open_high=True)
        value, error = self.parameters[name], self.standard_errors[name]
        if error == 0.0:
            return value, value
        width = float(special.ndtri(0.5 + level / 2)) * error
        kind = self.ranges.get(name, "real")
        if kind == "real":
            return value - width, value + width
        if kind == "positive":
            factor = float(np.exp(min(width / value, 700.0)))
            return value / factor, value * factor
        odds, width = float(special.logit(value)), width / (value * (1 - value))
        return float(special.expit(odds - width)), float(special.expit(odds + width))

    def to_frame(self) -> pd.DataFrame:
        """One row per parameter: estimate, standard error and 95 % interval."""
        import pandas as pd

        errors = self.standard_errors
        rows = [
            {
                "parameter": name,
                "estimate": value,
                "standard_error": errors[name],
                "low": self.interval(name)[0],
                "high": self.interval(name)[1],
                "fixed": name in self.fixed,
            }
            for name, value in self.parameters.items()
        ]
        return pd.DataFrame(rows).set_index("parameter")

    def _estimates(self) -> str:
        errors = self.standard_errors
        return ", ".join(
            f"{name} {value:.4g} fixed" if name in self.fixed else f"{name} {value:.4g} +- {errors[name]:.2g}"
            for name, value in self.parameters.items()
        )


@dataclass(frozen=True, eq=False, repr=False, kw_only=True)
class SeverityFit(Fit):
    """A size law fitted to losses; see `Fit` for what it carries.

    Attributes:
        model: the fitted size law, ground-up.
        censored: how many of the losses were censored at a policy limit.
        truncation: smallest and largest reporting threshold, or None where every loss was recorded.
        solution: the likelihood and its maximum, for further questions; that of the tail in a splice.
        tail_prefix: what the names of the solution's parameters begin with, "tail." in a splice.
    """

    model: SizeLaw
    censored: float
    truncation: tuple[float, float] | None
    solution: Solution
    tail_prefix: str = ""

    @property
    def complete_lognormal(self) -> bool:
        """Whether it is lognormal and every loss was recorded and uncensored: exact theory holds then."""
        complete = self.truncation is None and self.censored == 0 and not self.fixed
        return self.family == "lognormal" and complete and self.observations > 1

    def profile_interval(self, name: str, level: float = 0.95) -> tuple[float, float]:
        """Interval of one parameter from the profile likelihood; prefer it to `interval` for few losses.

        It is not symmetric, and it is open (`inf`) where the losses do not bound the parameter.

        Args:
            name: an estimated parameter; in a splice, one of the tail.
            level: probability that the interval covers the parameter.

        Raises:
            InputError: a parameter held fixed, unknown, or of the body of a splice; a bad level.

        Source: Venzon & Moolgavkar 1988, Applied Statistics 37.
        """
        known = [self.tail_prefix + parameter for parameter in self.solution.likelihood.ranges]
        if name not in known:
            raise InputError(
                f"the {self.family} fit has no profile interval of this parameter",
                value=name,
                remedy=f"Choose one of {', '.join(known)}.",
            )
        return self.solution.interval(name.removeprefix(self.tail_prefix), level)

    def tail_shape(self, level: float = 0.95) -> tuple[float, float, float] | None:
        """1 / tail index, with its profile-likelihood interval: at 1 the mean, at 1/2 the variance ends.

        None for a law whose moments all exist whatever its parameters.
        """
        return self.solution.tail_shape(level)

    def __repr__(self) -> str:
        text = f"SeverityFit({self.family}: {self._estimates()}; {self.observations} losses"
        text += f", {self.censored} censored" if self.censored else ""
        return text + f"; log-likelihood {self.log_likelihood:.2f})"


@dataclass(frozen=True, eq=False, repr=False, kw_only=True)
class FrequencyFit(Fit):
    """A count law fitted to yearly counts; see `Fit` for what it carries.

    Attributes:
        model: the fitted count law of a year with exposure 1.
        losses: number of losses counted over all years.
        exposure: total exposure over all years.
        maximum_likelihood_mean: the estimate of maximum likelihood for the mean at exposure 1; it
            differs from the mean of the model only where no loss was counted (it is 0 there).
        log_mean_error: standard error of the logarithm of the mean, where the mean is no parameter.
        solution: the likelihood and its maximum; None at the edge of the family, where it has no slope of 0.
    """

    model: CountLaw
    losses: int
    exposure: float
    maximum_likelihood_mean: float
    log_mean_error: float | None = None
    solution: CountSolution | None = None

    def profile_interval(self, name: str, level: float = 0.95) -> tuple[float, float]:
        """Interval of one parameter from the profile likelihood; prefer it to `interval` for few losses.

        Args:
            name: an estimated parameter.
            level: probability that the interval covers the parameter.

        Raises:
            InputError: a parameter held fixed or unknown, a bad level, or a fit at the edge of its family
                (no loss at all: `upper_rate` bounds it).

        Source: Venzon & Moolgavkar 1988, Applied Statistics 37.
        """
        if self.solution is None or name not in self.solution.ranges:
            known = [] if self.solution is None else list(self.solution.ranges)
            raise InputError(
                f"the {self.family} fit has no profile interval of this parameter",
                value=name,
                remedy=f"Choose one of {', '.join(known)}." if known else "Ask upper_rate for a bound.",
            )
        return self.solution.interval(name, level)

    def model_for(self, exposure: float) -> CountLaw:
        """The count law of a year with another exposure.

        The mean is proportional to exposure; the dispersion of the negative binomial law and the
        probability of the binomial law stay.

        Args:
            exposure: above 0, in the unit of the exposures of the fit.

        Raises:
            InputError: an exposure that is not above 0, or for the binomial law one that does not
                give a whole number of trials.
        """
        return self.model.with_exposure(exposure)

    def upper_rate(self, level: float = 0.95) -> float:
        """One-sided upper confidence bound of the mean at exposure 1.

        Exact for Poisson counts (Garwood 1936, Biometrika 28): the rate at which as few losses as
        counted would have probability 1 - level. For the other laws, from the standard error on the
        logarithmic scale.

        Args:
            level: probability that the bound covers the mean.

        Raises:
            InputError: a level outside (0, 1).
        """
        require_probability(level, "level", open_low=True, open_high=True)
        if self.family == "poisson":
            return float(special.gammaincinv(self.losses + 1, level)) / self.exposure
        mean = self.model.mean()
        if self.log_mean_error is not None:
            return float(mean * np.exp(special.ndtri(level) * self.log_mean_error))
        name = "probability" if self.family == "binomial" else "mean"
        relative = self.standard_errors[name] / self.parameters[name]
        return float(mean * np.exp(special.ndtri(level) * relative))

    def __repr__(self) -> str:
        return (
            f"FrequencyFit({self.family}: {self._estimates()}; {self.losses} losses in "
            f"{self.observations} years; log-likelihood {self.log_likelihood:.2f})"
        )
