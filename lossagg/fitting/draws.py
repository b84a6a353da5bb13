"""Parameters drawn from the uncertainty of a fit.

The estimates are taken as jointly normal with the fit's covariance, on the scale of each parameter's range
(its logarithm where positive, its log-odds for a probability), which is large-sample theory (Klugman,
Panjer & Willmot, Loss Models, ch. on variance of maximum likelihood). Complete lognormal losses need none:
there n times the estimated variance of the logarithms over the true one is chi-square, and the laws drawn,
mixed, are exceeded exactly as often as they say (Gerrard & Tsanakas 2011, Risk Analysis 31).
"""

from __future__ import annotations

from typing import Protocol

import numpy as np
from scipy import special

from lossagg.arrays import FloatArray
from lossagg.fitting.results import Fit, SeverityFit

_FARTHEST = 30.0


class Normals(Protocol):
    """Where standard normal numbers come from."""

    def standard_normal(self, size: int) -> FloatArray:
        """The next `size` of them."""
        ...


class Stratified:
    """Standard normal numbers for a given number of draws, each place of a draw stratified over the draws.

    Of the numbers that stand at one place of the draws, one falls into each of equally probable strata
    (Latin hypercube: McKay, Beckman & Conover 1979, Technometrics 21), so averages over the draws scatter
    less. A place beyond those foreseen is filled from the generator.

    Args:
        random: the generator.
        draws: how many draws.
        places: how many numbers a draw takes at most.
    """

    def __init__(self, random: np.random.Generator, draws: int, places: int) -> None:
        ranks = random.permuted(np.tile(np.arange(draws), (places, 1)), axis=1)
        self._table = special.ndtri((ranks + random.random((places, draws))) / draws)
        self._random, self._draw, self._place = random, -1, 0

    def next_draw(self) -> None:
        """Go on to the next draw."""
        self._draw, self._place = self._draw + 1, 0

    def standard_normal(self, size: int) -> FloatArray:
        """The next `size` numbers of this draw."""
        start, self._place = self._place, self._place + size
        if self._place > len(self._table):
            return self._random.standard_normal(size)
        return np.asarray(self._table[start : self._place, self._draw])


def moved(fit: Fit, random: Normals) -> dict[str, float]:
    """Parameters drawn around the estimates; those held fixed stay."""
    if isinstance(fit, SeverityFit) and fit.complete_lognormal:
        return _moved_lognormal(fit, random)
    names = [name for name in fit.parameters if name not in fit.fixed]
    index = [list(fit.parameters).index(name) for name in names]
    estimates = np.array([fit.parameters[name] for name in names])
    slopes = np.array([_slope(fit.ranges.get(n, "real"), v) for n, v in zip(names, estimates, strict=True)])
    covariance = fit.covariance[np.ix_(index, index)] * np.outer(slopes, slopes)
    steps = np.clip(_root(covariance) @ random.standard_normal(len(names)), -_FARTHEST, _FARTHEST)
    return {
        name: _step(fit.ranges.get(name, "real"), value, step)
        for name, value, step in zip(names, estimates.tolist(), steps.tolist(), strict=True)
    }


def _moved_lognormal(fit: SeverityFit, random: Normals) -> dict[str, float]:
    n, (centre, spread) = fit.observations, random.standard_normal(2)
    squares = float(special.chdtri(n - 1.0, special.ndtr(np.clip(spread, -8.0, 8.0))))
    sigma = fit.parameters["sigma"] * float(np.sqrt(n / squares))
    return {"mu": fit.parameters["mu"] + sigma * float(centre) / float(np.sqrt(n)), "sigma": sigma}


def _root(covariance: FloatArray) -> FloatArray:
    """A square root of a covariance, also where it has no full rank."""
    values, vectors = np.linalg.eigh((covariance + covariance.T) / 2.0)
    return np.asarray(vectors * np.sqrt(np.maximum(values, 0.0)))


def _slope(kind: str, value: float) -> float:
    if kind == "positive":
        return 1.0 / value
    return 1.0 / (value * (1.0 - value)) if kind == "probability" else 1.0


def _step(kind: str, value: float, step: float) -> float:
    if kind == "positive":
        return value * float(np.exp(step))
    return float(special.expit(special.logit(value) + step)) if kind == "probability" else value + step
