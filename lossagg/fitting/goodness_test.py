"""How surprising are the distances of losses from a fitted law? P-values by a bootstrap that refits.

The published tables hold for a law given in advance. Here the parameters come from the same losses, which
brings the law closer to them; drawing losses from the fitted law and fitting each draw again shows how close
(parametric bootstrap: Stute, Gonzalez Manteiga & Presedo Quindimil 1993, Metrika 40; for truncated losses
Chernobai, Rachev & Fabozzi 2005). The p-value is (1 + draws at least as far away) / (1 + draws). A law
that fits is not drawn from longer than needed: drawing ends once each distance was reached by ten draws
(sequential p-values: Besag & Clifford 1991, Biometrika 78).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from lossagg.arrays import Floats
from lossagg.errors import InputError
from lossagg.fitting.bootstrap import replicates
from lossagg.fitting.goodness import Goodness, distances
from lossagg.fitting.results import SeverityFit
from lossagg.fitting.sample import checked_losses

_MOST, _FEWEST, _WORK = 199, 39, 60_000  # draws; and losses drawn in all before draws are saved
_ENOUGH = 10  # draws further away than the losses: the p-value is settled
_MOST_REFUSED = 0.2  # share of draws without a fit beyond which the p-values say nothing


@dataclass(frozen=True)
class GoodnessTest:
    """Distances with their p-values; a small p-value speaks against the law.

    Attributes:
        goodness: the distances of the losses.
        kolmogorov_smirnov, anderson_darling, upper_tail: p-values of the three; None where too many draws
            had no fit, see `reason`.
        replicates: draws that entered the p-values.
        refused: draws whose likelihood had no maximum; they are left out.
        reason: why there are no p-values; empty where there are.
    """

    goodness: Goodness
    kolmogorov_smirnov: float | None
    anderson_darling: float | None
    upper_tail: float | None
    replicates: int
    refused: int
    reason: str = ""


def goodness_test(
    losses: Floats,
    fit: SeverityFit,
    truncation: Floats | None = None,
    censored: object = None,
    *,
    draws: int | None = None,
    enough: int = _ENOUGH,
    seed: int = 0,
) -> GoodnessTest:
    """Distances of losses from the law fitted to them, with p-values.

    Args:
        losses, truncation, censored: as given to the fit.
        fit: the fit to test.
        draws: most bootstrap draws; by default 199, down to 39 for many losses so that time stays bounded.
        enough: drawing ends once each distance was reached by so many draws.
        seed: of the draws; the same seed gives the same p-values.

    Raises:
        InputError: unusable losses, fewer than one draw, or `enough` below 1.
    """
    amounts, thresholds, marks = checked_losses(losses, truncation, censored)
    count = draws if draws is not None else min(_MOST, max(_FEWEST, _WORK // amounts.size))
    if count < 1:
        raise InputError("draws must be at least 1", value=draws, remedy="Give 199 or more for a p-value.")
    if enough < 1:
        raise InputError("enough must be at least 1", value=enough, remedy="Give 10, say.")
    seen = distances(amounts, thresholds, marks, fit.model)
    further, entered, refused = np.zeros(3), 0, 0
    for one in replicates(fit, amounts, thresholds, marks, count=count, seed=seed):
        if one.law is None:
            refused += 1
            continue
        entered += 1
        drawn = distances(one.amounts, thresholds, one.censored, one.law)
        further += np.array(_values(drawn)) >= np.array(_values(seen))
        if further.min() >= enough:
            break
    if refused > _MOST_REFUSED * (entered + refused):
        reason = f"{refused} of {entered + refused} draws from the fitted law have no fit of the same family"
        return GoodnessTest(seen, None, None, None, entered, refused, reason)
    smirnov, darling, upper = ((1.0 + further) / (1.0 + entered)).tolist()
    return GoodnessTest(seen, smirnov, darling, upper, entered, refused)


def _values(goodness: Goodness) -> tuple[float, float, float]:
    return goodness.kolmogorov_smirnov, goodness.anderson_darling, goodness.upper_tail
