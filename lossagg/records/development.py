"""Development to ultimate: how much of a year's events and amounts is still to come.

Factors to ultimate by age are given, or estimated by the chain ladder: each factor from one age to the next
is the sum of the later values over the sum of the earlier ones (volume-weighted; Mack 1993, ASTIN Bulletin
23(2), section 2), their product with a tail factor leads to ultimate. Bornhuetter and Ferguson (1972, PCAS
59) add to what is reported the part of an a-priori ultimate that is not reported yet: R + U (1 - 1/f).
An age is counted in whole years back from the valuation date: the first factor is that of the year of the
valuation date, the second that of the year before. Years older than the factors reach are at ultimate.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np

from lossagg.arrays import FloatArray, as_floats, require_positive
from lossagg.errors import InputError

Method = Literal["chain-ladder", "bornhuetter-ferguson"]
METHODS: tuple[Method, ...] = ("chain-ladder", "bornhuetter-ferguson")
OpenClaims = Literal["as-recorded", "develop", "censor"]
OPEN_CLAIMS: tuple[OpenClaims, ...] = ("as-recorded", "develop", "censor")


@dataclass(frozen=True, kw_only=True)
class Development:
    """How the years of a line are developed.

    Args:
        count_factors: factors to ultimate of the number of events by age, youngest first; None: from the
            history where there is a tail, else 1.
        amount_factors: the same for the amount of all events.
        open_factors: the same for the amount of claims that are open.
        count_tail: factor of the number of events from the oldest age of the history to ultimate.
        amount_tail: the same for the amount of all events.
        open_tail: the same for the amount of claims that are open.
        method: which ultimate stands for the developed year.
        a_priori_count: expected ultimate events per unit of exposure.
        a_priori_amount: expected ultimate amount per unit of exposure.

    Raises:
        InputError: no factor and no tail, both for the same quantity, a value that is not above 0, or
            Bornhuetter-Ferguson without what it needs.
    """

    count_factors: tuple[float, ...] | None = None
    amount_factors: tuple[float, ...] | None = None
    open_factors: tuple[float, ...] | None = None
    count_tail: float | None = None
    amount_tail: float | None = None
    open_tail: float | None = None
    method: Method = "chain-ladder"
    a_priori_count: float | None = None
    a_priori_amount: float | None = None

    def __post_init__(self) -> None:
        for name in ("count", "amount", "open"):
            factors, tail = getattr(self, f"{name}_factors"), getattr(self, f"{name}_tail")
            if factors is not None and tail is not None:
                raise InputError(
                    f"{name} factors are given and a tail for factors from the history too",
                    value=tail,
                    remedy=f"Give {name}-factors, or {name}-tail to estimate them from the records.",
                )
            for factor in (*(factors or ()), *((tail,) if tail is not None else ())):
                require_positive(factor, f"a development factor ({name})")
        for name in ("a_priori_count", "a_priori_amount"):
            if getattr(self, name) is not None:
                require_positive(getattr(self, name), name.replace("_", "-"))
        self._check_use()

    def _check_use(self) -> None:
        if not any(self.develops(name) for name in ("count", "amount", "open")):
            raise InputError(
                "development has neither factors nor a tail",
                value="nothing",
                remedy="Give count-factors and amount-factors, or count-tail and amount-tail to estimate "
                "them from the valuations in the records.",
            )
        if self.method not in METHODS:
            raise InputError(
                "unknown method of development", value=self.method, remedy=f"Use {' or '.join(METHODS)}."
            )
        for name in ("count", "amount"):
            wanted = self.method == "bornhuetter-ferguson" and self.develops(name)
            if wanted and getattr(self, f"a_priori_{name}") is None:
                raise InputError(
                    f"Bornhuetter-Ferguson needs an a-priori {name}",
                    value="nothing",
                    remedy=f"Give a-priori-{name}, the expected ultimate {name} per unit of exposure.",
                )

    def develops(self, name: str) -> bool:
        """True when "count", "amount" or "open" is developed."""
        return getattr(self, f"{name}_factors") is not None or getattr(self, f"{name}_tail") is not None

    @property
    def from_history(self) -> bool:
        """True when some factors come from the valuation history of the records."""
        return any(getattr(self, f"{name}_tail") is not None for name in ("count", "amount", "open"))


def by_age(factors: tuple[float, ...], years: int) -> FloatArray:
    """Spread factors by age over years in calendar order; years older than the factors have 1.

    Args:
        factors: youngest first.
        years: number of years, the last being the youngest.

    Returns:
        Factors, shape (years,).
    """
    spread = np.ones(years)
    known = as_floats(factors[:years], "factors")
    spread[years - len(known) :] = known[::-1]
    return spread


def link_factors(triangle: FloatArray, first: FloatArray | None = None) -> FloatArray:
    """Volume-weighted factors from each age to the next.

    Args:
        triangle: cumulative values by origin year and age, NaN where not known; shape (years, ages).
        first: values of the second age to set against the first where those of the triangle are of more
            losses (a year seen in part at its first age); shape (years,).

    Returns:
        Factors, shape (ages - 1,).

    Raises:
        InputError: an age without any value in the years that show what became of it.
    """
    factors = np.ones(triangle.shape[1] - 1)
    for age in range(len(factors)):
        earlier = triangle[:, age]
        later = first if first is not None and age == 0 else triangle[:, age + 1]
        both = ~np.isnan(earlier) & ~np.isnan(later)
        before, after = float(earlier[both].sum()), float(later[both].sum())
        if not before > 0 or not after > 0:
            raise InputError(
                f"the chain ladder has no factor from age {age + 1} to {age + 2}: the years that show it "
                f"go from {before:g} to {after:g}",
                value=int(both.sum()),
                remedy="Give factors by age instead of a tail; the history is too thin for its own.",
            )
        factors[age] = after / before
    return factors


def to_ultimate(links: FloatArray, tail: float) -> FloatArray:
    """Factors to ultimate by age, youngest first: products of the links that remain, and the tail.

    Args:
        links: factors from each age to the next; shape (ages - 1,).
        tail: factor from the oldest age to ultimate.

    Returns:
        Factors, shape (ages,).
    """
    return np.asarray(np.append(np.cumprod(links[::-1])[::-1] * tail, tail), dtype=np.float64)


def chain_ladder(reported: FloatArray, factors: FloatArray) -> FloatArray:
    """Ultimates in proportion to what is reported; arrays of shape (years,)."""
    return np.asarray(reported * factors, dtype=np.float64)


def bornhuetter_ferguson(reported: FloatArray, a_priori: FloatArray, factors: FloatArray) -> FloatArray:
    """Ultimates as reported, and the unreported part of an a-priori ultimate; arrays of shape (years,)."""
    return np.asarray(reported + a_priori * (1.0 - 1.0 / factors), dtype=np.float64)


def open_claim_factors(
    before: FloatArray, closed: FloatArray, still_open: FloatArray, tail: float
) -> FloatArray:
    """Factors to ultimate of open claims by age, youngest first.

    Claims open at one age are followed to the next: what is closed there is final, what is still open
    develops on. So F(j) = (closed(j) + still_open(j) F(j + 1)) / before(j), from the tail backwards; an age
    without open claims in the history takes the factor of the next (common practice, no source).

    Args:
        before: amount of the claims open at each age; shape (ages - 1,).
        closed: amount of those of them that are closed a year later, at that later age.
        still_open: amount of those that are still open, at that later age.
        tail: factor from the oldest age to ultimate.

    Returns:
        Factors, shape (ages,).
    """
    factors = np.full(len(before) + 1, float(tail))
    for age in range(len(before) - 1, -1, -1):
        following = factors[age + 1]
        known = before[age] > 0
        factors[age] = (closed[age] + still_open[age] * following) / before[age] if known else following
    return factors
