"""How far the estimates scatter: losses or counts drawn again from the fitted law, and the law fitted again.

The intervals are percentiles of the refitted parameters (Efron & Tibshirani, An Introduction to the
Bootstrap, 1993, chapter 13). They rest on no large-sample theory, but on the fitted law being the true one. A
draw whose likelihood has no maximum gives no parameters: such draws are counted and told, because the
intervals are then those of the others only.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from lossagg.arrays import FloatArray, Floats, require_probability
from lossagg.errors import FitError, InputError
from lossagg.fitting.bootstrap import replicates
from lossagg.fitting.counts import counts_of
from lossagg.fitting.frequency import fit_frequency
from lossagg.fitting.results import Fit, FrequencyFit, SeverityFit
from lossagg.fitting.sample import checked_losses

if TYPE_CHECKING:
    import pandas as pd

_LEAST_DRAWS = 20
_NEGLIGIBLE = 0.01  # share of draws without a fit of which the intervals say nothing


@dataclass(frozen=True, eq=False)
class ParameterBootstrap:
    """Parameters refitted to draws from a fitted law.

    Attributes:
        fit: the fit the draws come from.
        values: refitted parameters by name, each of shape (draws - refused,), in the order of the draws.
        draws: how often losses or counts were drawn.
        refused: how many of them had no fit of the family.
    """

    fit: Fit
    values: Mapping[str, FloatArray]
    draws: int
    refused: int

    def interval(self, name: str, level: float = 0.95) -> tuple[float, float]:
        """Percentile interval of one estimated parameter.

        Args:
            name: parameter name.
            level: probability that the interval covers the parameter.

        Raises:
            InputError: a name that was not estimated, or a level outside (0, 1).
        """
        if name not in self.values:
            raise InputError(
                f"the {self.fit.family} fit estimates no parameter of this name",
                value=name,
                remedy=f"Choose one of {', '.join(self.values)}.",
            )
        require_probability(level, "level", open_low=True, open_high=True)
        low, high = np.quantile(self.values[name], [0.5 - level / 2, 0.5 + level / 2])
        return float(low), float(high)

    @property
    def standard_errors(self) -> dict[str, float]:
        """Standard deviations of the refitted parameters."""
        return {name: float(np.std(values, ddof=1)) for name, values in self.values.items()}

    @property
    def caution(self) -> str:
        """What to hold against the intervals; empty where nothing."""
        if self.refused <= _NEGLIGIBLE * self.draws:
            return ""
        return (
            f"{self.refused} of {self.draws} draws have no {self.fit.family} fit: the intervals are those of "
            "the others, and the truth may lie nearer the edge of the family than they reach."
        )

    def to_frame(self, level: float = 0.95) -> pd.DataFrame:
        """One row per estimated parameter: estimate, standard error, interval, and the counts of draws."""
        import pandas as pd

        errors = self.standard_errors
        rows = [
            {
                "parameter": name,
                "estimate": self.fit.parameters[name],
                "standard_error": errors[name],
                "low": self.interval(name, level)[0],
                "high": self.interval(name, level)[1],
                "draws": self.draws,
                "refused": self.refused,
            }
            for name in self.values
        ]
        return pd.DataFrame(rows).set_index("parameter")


def bootstrap_severity(
    losses: Floats,
    fit: SeverityFit,
    truncation: Floats | None = None,
    censored: object = None,
    *,
    draws: int = 400,
    seed: int = 0,
) -> ParameterBootstrap:
    """Refit a size law to losses drawn from it, seen through the same thresholds and policy limits.

    Use it where there are few losses, and compare it with the profile intervals. Weighted losses must be
    written out, each as often as its weight says.

    Args:
        losses, truncation, censored: what the fit was made from, as for `fit_severity`.
        fit: of the losses.
        draws: how often to draw and fit, at least 20.
        seed: 0 or above; the same seed gives the same figures.

    Raises:
        InputError: losses that cannot be used or are not those of the fit, too few draws.
        FitError: fewer than 20 draws have a fit.
    """
    amounts, thresholds, marks = checked_losses(losses, truncation, censored)
    _require(amounts.size, fit, draws)
    made = [one.law for one in replicates(fit, amounts, thresholds, marks, count=draws, seed=seed)]
    return gathered(fit, [law.parameters for law in made if law is not None], draws)


def bootstrap_frequency(
    counts: Floats,
    fit: FrequencyFit,
    exposure: Floats | None = None,
    *,
    draws: int = 400,
    seed: int = 0,
) -> ParameterBootstrap:
    """Refit a count law to counts drawn from it, at the same exposures.

    Args:
        counts, exposure: what the fit was made from, as for `fit_frequency`.
        fit: of the counts.
        draws: how often to draw and fit, at least 20.
        seed: 0 or above; the same seed gives the same figures.

    Raises:
        InputError: counts that cannot be used or are not those of the fit, too few draws.
        FitError: fewer than 20 draws have a fit.
    """
    sample = counts_of(counts, exposure)
    _require(sample.years, fit, draws)
    held = {name: fit.parameters[name] for name in fit.fixed}
    years = np.repeat(sample.exposures, sample.weights.astype(np.int64))
    levels, place = np.unique(years, return_inverse=True)
    tables = [_table(fit, float(level)) for level in levels]
    found: list[Mapping[str, float]] = []
    for k in range(draws):
        random = np.random.Generator(np.random.SFC64(np.random.SeedSequence([seed, k])))
        uniform = random.random(years.size)
        drawn = np.empty(years.size)
        for level, table in enumerate(tables):
            drawn[place == level] = np.searchsorted(table, uniform[place == level])
        try:
            found.append(fit_frequency(drawn, fit.family, years, fixed=held or None).parameters)
        except FitError:
            continue
    return gathered(fit, found, draws)


def _table(fit: FrequencyFit, exposure: float) -> FloatArray:
    """The distribution function from 0 as far as a uniform number reaches."""
    law = fit.model_for(exposure)
    most = 16.0
    while float(law.sf(most)) > 1e-17:
        most *= 1.5
    return np.asarray(law.cdf(np.arange(np.ceil(most) + 1)))


def _require(observations: int, fit: Fit, draws: int) -> None:
    if observations != fit.observations:
        raise InputError(
            "the fit was made from another number of observations",
            value=f"{observations} for a fit of {fit.observations:g}",
            remedy="Pass what the fit was made from; write weighted losses out.",
        )
    if draws < _LEAST_DRAWS:
        raise InputError(
            "too few draws for an interval", value=draws, remedy=f"Draw {_LEAST_DRAWS} times or more."
        )


def gathered(fit: Fit, found: list[Mapping[str, float]], draws: int) -> ParameterBootstrap:
    """The refitted parameters of the draws that have a fit.

    Raises:
        FitError: too few of them.
    """
    if len(found) < _LEAST_DRAWS:
        raise FitError(
            f"only {len(found)} of {draws} draws from the {fit.family} fit have a fit themselves",
            value=f"{fit.observations:g} observations",
            remedy="Use a law with fewer parameters, or more losses.",
        )
    values = {name: np.array([one[name] for one in found]) for name in fit.ranges}
    return ParameterBootstrap(fit, values, draws, draws - len(found))
