"""The number of small events in a year, given the number of large ones.

Each event of a year is large with probability q, independently. The generating function of the small
ones given m large ones is the m-th derivative of the count's own at (1 - q) z, divided by its value at
z = 1. For the classic laws it is a law of the same family (Klugman, Panjer and Willmot, Loss Models,
ch. 6, thinning): independent of m for the Poisson, with m more for r in the negative binomial (a bad
year shows in both), with m trials less in the binomial. A table is split term by term.
"""

from __future__ import annotations

import itertools
from collections.abc import Iterator
from itertools import repeat

import numpy as np
import numpy.typing as npt
from scipy.special import gammaln

from lossagg.arrays import FloatArray
from lossagg.errors import EngineError
from lossagg.families import Binomial, NegativeBinomial, Poisson
from lossagg.families.base import CountLaw

ComplexArray = npt.NDArray[np.complex128]
_MOST_TERMS = 2_000


def small_given_large(count: CountLaw, large: float, z: ComplexArray) -> Iterator[ComplexArray]:
    """The generating function of the number of small events given 0, 1, 2, ... large ones.

    Args:
        count: law of all events of a year.
        large: probability that an event is large.
        z: where the function is wanted, |z| <= 1.

    Yields:
        Its values, of the shape of `z`; the same array again where they do not depend on the large ones.

    Raises:
        EngineError: a count given otherwise than by its family whose table would be too long.
    """
    if isinstance(count, Poisson) or (isinstance(count, NegativeBinomial) and count.dispersion < 1e-12):
        yield from repeat(np.asarray(np.exp(count.mean() * (1.0 - large) * (z - 1.0))))
    elif isinstance(count, NegativeBinomial):
        beta = count.dispersion * count.mean()
        logs = np.log1p(beta * (1.0 - large) / (1.0 + beta * large) * (1.0 - z))
        values, factor = np.exp(-logs / count.dispersion), np.exp(-logs)
        while True:
            yield np.asarray(values)
            values = values * factor
    elif isinstance(count, Binomial):
        chance = count.probability * (1.0 - large) / max(1.0 - count.probability * large, 1e-300)
        for m in itertools.count():
            yield np.asarray((1.0 + chance * (z - 1.0)) ** max(count.trials - m, 0))
    else:
        pmf = _table(count)
        for m in itertools.count():
            total = np.zeros(z.shape, dtype=np.complex128)
            for weight in _small_weights(pmf, m, large)[::-1]:
                total = total * z + weight
            yield total


def _table(count: CountLaw) -> FloatArray:
    if float(count.sf(float(_MOST_TERMS))) > 1e-15:
        raise EngineError(
            f"the exact engines split a count given by a table of up to {_MOST_TERMS:,} events",
            value=count.family,
            remedy="The simulation computes it.",
        )
    pmf = np.asarray(count.pmf(np.arange(_MOST_TERMS + 1.0)))
    return pmf[: int(np.flatnonzero(pmf)[-1]) + 1]


def _small_weights(pmf: FloatArray, m: int, large: float) -> FloatArray:
    """P(j small | m large), shape (len(pmf) - m,)."""
    if m >= len(pmf):
        return np.ones(1)
    small = np.arange(float(len(pmf) - m))
    with np.errstate(divide="ignore"):
        logs = gammaln(small + m + 1) - gammaln(small + 1) - gammaln(m + 1.0)
        logs += np.log(pmf[m:]) + np.where(small > 0, small * np.log(max(1.0 - large, 0.0)), 0.0)
    weights = np.exp(logs - logs.max()) if np.isfinite(logs.max()) else np.ones(1)
    return np.asarray(weights / weights.sum())
