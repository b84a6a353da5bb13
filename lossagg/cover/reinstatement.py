"""Reinstatements: how often the limit of a layer is available again, and what each time costs.

A layer with n reinstatements pays (n + 1) limits a year. What is used of the first n limits is
reinstated against a premium pro rata to the amount used: rate times the initial premium for a whole limit
(Sundt 1991, "On excess of loss reinsurance with reinstatements", Bulletin of the Swiss Association of
Actuaries). A rate of 0 is a free reinstatement, 1 is "at 100 %". Time does not enter: a limit used in
December costs what one used in January does.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from lossagg.arrays import FloatArray, require_positive
from lossagg.errors import InputError


@dataclass(frozen=True, kw_only=True)
class Reinstatements:
    """How many times the limit is reinstated, and at which rates.

    Args:
        number: how many times, a whole number, at least 0.
        rates: premium of each reinstatement of a whole limit as a multiple of the initial premium,
            at least 0; one number stands for all.

    Raises:
        InputError: a number that is not whole, a negative rate, a rate above 10, rates of another number.
    """

    number: int
    rates: Sequence[float] | float = 0.0

    def __post_init__(self) -> None:
        if isinstance(self.number, bool) or not isinstance(self.number, int | np.integer) or self.number < 0:
            raise InputError(
                "reinstatements must be a whole number of at least 0",
                value=self.number,
                remedy="Leave reinstatements out where the limit may be used any number of times.",
            )
        given = self.rates
        rates = [given] * int(self.number) if isinstance(given, int | float) else list(given)
        if isinstance(given, int | float):
            require_positive(given, "reinstatement rate", zero=True)
        if len(rates) != self.number:
            raise InputError(
                f"{self.number} reinstatements need {self.number} rates",
                value=list(rates),
                remedy="Give one rate for all, or one for each in the order of use.",
            )
        for rate in rates:
            if require_positive(rate, "reinstatement rate", zero=True) > 10:
                raise InputError(
                    "a reinstatement rate is a multiple of the initial premium",
                    value=rate,
                    remedy=f"Write {rate / 100:g} for {rate:g} %.",
                )
        object.__setattr__(self, "rates", tuple(float(rate) for rate in rates))

    @property
    def paid(self) -> bool:
        """Whether any reinstatement costs a premium."""
        return any(rate > 0 for rate in self.each)

    @property
    def each(self) -> tuple[float, ...]:
        """The rate of each reinstatement, in the order of use."""
        assert isinstance(self.rates, tuple)
        return self.rates

    def fraction(self, used: FloatArray, limit: float) -> FloatArray:
        """Reinstatement premium of each year as a multiple of the initial premium.

        Args:
            used: what the layer has paid in the year, before a share, shape (years,).
            limit: the limit of one event.
        """
        total = np.zeros(np.shape(used))
        for k, rate in enumerate(self.each):
            total = total + rate * np.clip(used - k * limit, 0.0, limit) / limit
        return total

    def describe(self) -> str:
        """The clause in words."""
        count = f"{self.number} reinstatement{'' if self.number == 1 else 's'}"
        if self.number == 0:
            return "no reinstatement"
        if not self.paid:
            return f"{count} free"
        if len(set(self.each)) == 1:
            return f"{count} at {100 * self.each[0]:.4g} %"
        return f"{count} at " + ", ".join(f"{100 * rate:.4g} %" for rate in self.each)
