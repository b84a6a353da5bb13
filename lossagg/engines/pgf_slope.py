"""The derivative of a count's generating function: E[N z**(N - 1)].

Its coefficients times one payment's masses are the distribution of the sum seen from one of its payments,
so it turns any expected total over the payments of a year into one product of transforms.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt

from lossagg.errors import EngineError
from lossagg.families import (
    Binomial,
    CountTable,
    NegativeBinomial,
    Poisson,
    ZeroInflated,
    ZeroModified,
)
from lossagg.families.base import CountLaw

Array = npt.NDArray[Any]


def pgf_slope(count: CountLaw, z: Array, pgf: Array | None = None) -> Array:
    """The derivative of `count.pgf` at z.

    Args:
        count: the law.
        z: real or complex, |z| <= 1.
        pgf: `count.pgf(z)` where it is at hand, which saves computing it again.

    Raises:
        EngineError: a law whose derivative is not known here.
    """
    if isinstance(count, Poisson):
        return np.asarray(count.mean() * (count.pgf(z) if pgf is None else pgf))
    if isinstance(count, NegativeBinomial):
        beta = count.mean() * count.dispersion
        return np.asarray(count.mean() * (count.pgf(z) if pgf is None else pgf) / (1.0 + beta * (1.0 - z)))
    if isinstance(count, Binomial):
        inside = 1.0 - count.probability + count.probability * z
        return np.asarray(count.mean() * inside ** (count.trials - 1))
    if isinstance(count, CountTable):
        weights = np.asarray(count.pmf(np.arange(float(len(count.probabilities)))))
        total = np.zeros_like(z)
        for n in range(len(weights) - 1, 0, -1):
            total = total * z + n * weights[n]
        return np.asarray(total)
    if isinstance(count, (ZeroModified, ZeroInflated)):
        return np.asarray(count.mean() / count.base.mean() * pgf_slope(count.base, z))
    raise EngineError(
        "the derivative of this count's generating function is not known",
        value=count.family,
        remedy="Use another frequency.",
    )
