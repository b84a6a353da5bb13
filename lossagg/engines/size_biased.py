"""The number of other losses of a year, as seen from one of its losses.

Its generating function is P'(z) / E[N]: for the Poisson the law itself, for the negative binomial one more
for r, for the binomial one trial less, for a table n p(n) moved down by one; a probability of no loss of its
own makes no difference once there is a loss (Klugman, Panjer and Willmot, Loss Models, ch. 6).
"""

from __future__ import annotations

import numpy as np

from lossagg.families import Binomial, CountTable, NegativeBinomial, Poisson, ZeroInflated, ZeroModified
from lossagg.families.base import CountLaw


def size_biased(count: CountLaw) -> CountLaw | None:
    """The law of the other losses; None for a law that does not lead to another known law."""
    if isinstance(count, Poisson):
        return count
    if isinstance(count, NegativeBinomial):
        more = 1.0 + count.dispersion
        return NegativeBinomial(mean=count.mean() * more, dispersion=count.dispersion / more)
    if isinstance(count, Binomial) and count.trials > 1:
        return Binomial(trials=count.trials - 1, probability=count.probability)
    if isinstance(count, (Binomial, CountTable)):
        most = count.trials if isinstance(count, Binomial) else len(count.probabilities) - 1
        weights = np.arange(1.0, most + 1.0) * np.asarray(count.pmf(np.arange(1.0, most + 1.0)))
        return CountTable(probabilities=(weights / weights.sum()).tolist())
    if isinstance(count, (ZeroModified, ZeroInflated)):
        return size_biased(count.base)
    return None
