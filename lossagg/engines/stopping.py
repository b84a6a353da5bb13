"""When a simulation may stop: looks planned beforehand, each with its share of the error.

An interval checked again and again until it is narrow misses the truth more often than it says. Here a
pilot, whose years are not used again, says how many years the asked width will take. The looks at the
main run, the first at that number and each further one at one and a half times the years before, are
thereby fixed before its first year is drawn, and their intervals are allowed to miss 3 %, 1 %, 0.5 %,
0.25 %, ... of the time: 5 % together (the union bound), so the interval of the look at which the run
stops misses at most 5 % of the time, whatever makes it stop. The first look, which usually suffices,
pays with an interval a tenth wider than one of a size fixed beforehand. (A confidence sequence as in
Howard and Ramdas 2022, "Sequential estimation of quantiles", Bernoulli 28(3), is valid at every year
without a plan; it pays with an interval about half as wide again.)
"""

from __future__ import annotations

import numpy as np
from scipy.special import ndtri

from lossagg.engines.sampled import SampledAnnualLoss
from lossagg.engines.streams import BLOCK_YEARS

PILOT_BLOCKS = 4
# Above every block of a main run, so that the pilot's streams are its own.
FIRST_PILOT_BLOCK = 2**31
FIRST_MISS = 0.03
FURTHER_MISS = 0.02
FACTOR = 1.5
WINDOW = 0.3  # part of the rarer side of the level over which the pilot takes the slope of the quantile
LEAST_IN_WINDOW = 5.0
RESERVE = 1.5  # standard errors of the two widths, the pilot's and the look's own


def miss_at(look: int) -> float:
    """How often the interval of a look, from 0, may miss; all looks together 5 % of the time."""
    return FIRST_MISS if look == 0 else FURTHER_MISS * 0.5**look


def relative_width(loss: SampledAnnualLoss, level: float) -> float:
    """Half the width of the interval of the value at risk, relative to it; `inf` where it is zero."""
    value = loss.value_at_risk(level)
    low, high = loss.accuracy("value_at_risk", level)
    return (high - low) / 2.0 / value if value > 0.0 else np.inf


def years_at(look: int, first: float) -> int:
    """Years at a look, whole blocks, where the first look is at about `first` years."""
    return int(np.ceil(first * FACTOR**look / BLOCK_YEARS)) * BLOCK_YEARS


def years_for(width: float, pilot: SampledAnnualLoss, level: float) -> float:
    """Years expected to give an interval of this relative half width, with a reserve; `inf` if none do.

    From the asymptotic half width z sqrt(level (1 - level) / n) times the slope of the quantile, which the
    pilot takes over a window about the level. Both this slope and the width found at the look vary by
    chance, as one over the root of the years they rest on.
    """
    z = float(ndtri(1.0 - miss_at(0) / 2.0))
    reach = WINDOW * min(level, 1.0 - level)
    value, in_window = pilot.value_at_risk(level), 2.0 * reach * pilot.years
    if value <= 0.0 or in_window < LEAST_IN_WINDOW:
        return float(np.inf)
    slope = (pilot.value_at_risk(level + reach) - pilot.value_at_risk(level - reach)) / (2.0 * reach)
    spread = level * (1.0 - level)
    plain = max((z * slope / (value * width)) ** 2 * spread, float(pilot.years))
    between = 2.0 * z * np.sqrt(plain * spread)
    return float(plain * (1.0 + RESERVE * np.sqrt(1.0 / in_window + 1.0 / between)) ** 2)
