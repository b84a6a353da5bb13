"""Yearly counts with their exposures: checked, and equal pairs counted once with a weight."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import special

from lossagg.arrays import FloatArray, Floats, as_floats
from lossagg.errors import InputError


@dataclass(frozen=True, eq=False)
class Counts:
    """Distinct (count, exposure) pairs and how many years share each.

    Attributes:
        numbers: counts, shape (k,).
        exposures: exposures, shape (k,).
        weights: years that share the pair, shape (k,).
    """

    numbers: FloatArray
    exposures: FloatArray
    weights: FloatArray

    @property
    def years(self) -> int:
        """Number of years."""
        return int(self.weights.sum())

    @property
    def losses(self) -> int:
        """Losses counted over all years."""
        return int(np.sum(self.numbers * self.weights))

    @property
    def exposure(self) -> float:
        """Total exposure over all years."""
        return float(np.sum(self.exposures * self.weights))

    @property
    def rate(self) -> float:
        """Losses per unit of exposure, the estimate of maximum likelihood of a Poisson mean."""
        return self.losses / self.exposure

    def log_factorials(self) -> float:
        """Sum of log n! over the years."""
        return float(np.sum(self.weights * special.gammaln(self.numbers + 1)))


def counts_of(counts: Floats, exposure: Floats | None) -> Counts:
    """Check counts and exposures and group equal pairs.

    Raises:
        InputError: no years, a count that is not a whole number at or above 0, an exposure that is
            not above 0, or lengths that differ.
    """
    numbers = np.atleast_1d(as_floats(counts, "counts"))
    if numbers.ndim != 1 or numbers.size == 0:
        raise InputError(
            "counts must be a non-empty list, one per year",
            value=f"shape {numbers.shape}",
            remedy="Give the number of losses of each year, 0 for a year without losses.",
        )
    _refuse(
        numbers,
        (numbers < 0) | (numbers != np.floor(numbers)) | np.isinf(numbers),
        "counts must be whole numbers at or above 0",
        "Count losses, not amounts; put the length of a part year into the exposure.",
    )
    exposures = np.atleast_1d(as_floats(1.0 if exposure is None else exposure, "exposure"))
    if exposures.shape not in ((1,), numbers.shape):
        raise InputError(
            "exposure must be one number per year",
            value=f"{exposures.size} exposures for {numbers.size} years",
            remedy="Give the exposure of every year, in the same order as the counts.",
        )
    _refuse(
        exposures,
        ~(exposures > 0) | np.isinf(exposures),
        "exposure must be above 0 and finite",
        "A year without exposure carries no information: leave it out, or give its exposure.",
    )
    pairs = np.column_stack([numbers, np.broadcast_to(exposures, numbers.shape)])
    distinct, weights = np.unique(pairs, axis=0, return_counts=True)
    return Counts(distinct[:, 0], distinct[:, 1], weights.astype(np.float64))


def poisson_at_rate(sample: Counts, rate: float) -> float:
    """The part of the Poisson log-likelihood that depends on the rate."""
    means = rate * sample.exposures
    return float(np.sum(sample.weights * (special.xlogy(sample.numbers, means) - means)))


def _refuse(values: FloatArray, bad: np.ndarray, what: str, remedy: str) -> None:
    if bad.any():
        first = int(np.argmax(bad))
        raise InputError(what, where=f"year {first + 1}", value=float(values[first]), remedy=remedy)
