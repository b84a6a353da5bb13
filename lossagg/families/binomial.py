"""The binomial count: a fixed number of units, each with at most one loss a year."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np
from scipy import special

from lossagg.arrays import FloatArray, require_positive, require_probability
from lossagg.errors import InputError
from lossagg.families.base import ComplexArray, CountLaw
from lossagg.families.saddle import binomial_weight


@dataclass(frozen=True, kw_only=True, repr=False)
class Binomial(CountLaw):
    """Less variable than the Poisson: at most one loss for each of `trials` units.

    Args:
        trials: number of units, whole, at least 0.
        probability: of a loss of one unit in the year, in [0, 1].

    Raises:
        InputError: trials that are not a whole number, a probability outside [0, 1].
    """

    family: ClassVar[str] = "binomial"
    trials: int
    probability: float

    def __post_init__(self) -> None:
        trials = require_positive(self.trials, "trials", zero=True)
        if trials != int(trials):
            raise InputError(
                "trials must be a whole number", value=self.trials, remedy="Give the number of units."
            )
        self._settle(trials=int(trials), probability=require_probability(self.probability, "probability"))

    def mean(self) -> float:
        """trials * probability."""
        return self.trials * self.probability

    def variance(self) -> float:
        """trials * probability * (1 - probability)."""
        return self.trials * self.probability * (1 - self.probability)

    @property
    def recursion(self) -> tuple[float, float] | None:
        """(-odds, (trials + 1) * odds) with odds = probability / (1 - probability); None at probability 1."""
        if self.probability == 1:
            return None
        odds = self.probability / (1 - self.probability)
        return (-odds, (self.trials + 1) * odds)

    def thinned(self, probability: float) -> Binomial:
        """Binomial with the product of the probabilities."""
        share = require_probability(probability, "probability")
        return Binomial(trials=self.trials, probability=self.probability * share)

    def with_exposure(self, factor: float) -> Binomial:
        """Trials times the factor: more units of the same kind.

        Raises:
            InputError: the trials would not be a whole number.
        """
        trials = self.trials * require_positive(factor, "factor")
        if abs(trials - round(trials)) > 1e-9 * max(trials, 1.0):
            raise InputError(
                f"exposure times {factor:g} would make {trials:g} trials, which is not a whole number",
                value=factor,
                remedy="Use a Poisson or negative binomial count, or state the trials of the new exposure.",
            )
        return Binomial(trials=round(trials), probability=self.probability)

    def _pmf(self, n: FloatArray) -> FloatArray:
        p, trials = self.probability, float(self.trials)
        if p in (0.0, 1.0) or trials == 0:
            return np.where(n == trials * p, 1.0, 0.0)
        inner = (n > 0) & (n < trials)
        count = np.where(inner, n, 1.0)
        rest = np.where(inner, trials - n, 1.0)
        weight = binomial_weight(
            count,
            rest,
            np.full(n.shape, trials * p),
            np.full(n.shape, trials * (1 - p)),
            count - trials * p,
        )
        ends = np.where(
            n == 0, np.exp(trials * np.log1p(-p)), np.where(n == trials, np.exp(trials * np.log(p)), 0.0)
        )
        return np.where(inner, weight, ends)

    def _cdf(self, n: FloatArray) -> FloatArray:
        return self._tail(n, special.betaincc, 1.0)

    def _sf(self, n: FloatArray) -> FloatArray:
        return self._tail(n, special.betainc, 0.0)

    def _tail(self, n: FloatArray, beta_function: np.ufunc, beyond: float) -> FloatArray:
        rest = np.maximum(self.trials - n, 1.0)
        return np.where(n >= self.trials, beyond, beta_function(n + 1.0, rest, self.probability))

    def _pgf(self, z: ComplexArray) -> ComplexArray:
        return np.asarray((1.0 - self.probability + self.probability * z) ** self.trials)

    def _log_pgf(self, z: ComplexArray) -> ComplexArray:
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.asarray(self.trials * special.log1p(self.probability * (z - 1.0)))
