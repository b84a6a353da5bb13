"""The terms of one cover, in the order in which they act.

Per event: the deductible, then the limit. Per year: the annual retention, then the excess over the
retained cap joins what the cover pays, then the annual limit. Then the share. All amounts are on a
100 % basis; the share acts last, on everything.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from lossagg.arrays import FloatArray, require_positive, require_probability
from lossagg.cover.schedule import Schedule
from lossagg.errors import InputError

ORDER_OF_OPERATIONS = (
    "per event: deductible, then limit; per year: annual retention, then excess over the retained cap, "
    "then annual limit; then share"
)


@dataclass(frozen=True, kw_only=True)
class Cover:
    """Terms under which someone pays part of the losses; amounts in the currency of the losses.

    Args:
        deductible: kept of each event before the cover pays.
        limit: most paid per event, in excess of the deductible.
        franchise: with True an event above the deductible is paid from the first unit, up to `limit`.
        share: the part of every payment the cover bears, 0 < share <= 1.
        annual_retention: kept of the year's payments before the cover pays.
        annual_limit: most paid per year, before the share.
        retained_cap: most the insured keeps per year under the deductible; the cover pays what the
            deductible keeps beyond it, within the annual limit.

    Raises:
        InputError: an amount that is negative or not a number, a share outside (0, 1], a retained
            cap without a deductible.
    """

    deductible: float = 0.0
    limit: float = np.inf
    franchise: bool = False
    share: float = 1.0
    annual_retention: float = 0.0
    annual_limit: float = np.inf
    retained_cap: float = np.inf

    def __post_init__(self) -> None:
        checked = {
            "deductible": require_positive(self.deductible, "deductible", zero=True),
            "limit": require_positive(self.limit, "limit", infinite=True),
            "annual_retention": require_positive(self.annual_retention, "annual_retention", zero=True),
            "annual_limit": require_positive(self.annual_limit, "annual_limit", infinite=True),
            "retained_cap": require_positive(self.retained_cap, "retained_cap", zero=True, infinite=True),
            "share": require_probability(self.share, "share", open_low=True),
        }
        for name, value in checked.items():
            object.__setattr__(self, name, value)
        if not isinstance(self.franchise, bool):
            raise InputError(
                "franchise must be true or false",
                value=self.franchise,
                remedy="Give the franchise amount as the deductible.",
            )
        if self.franchise and self.limit <= self.deductible:
            raise InputError(
                "under a franchise the limit counts from the first unit, so it must exceed the deductible",
                value=self.limit,
                remedy=f"Raise limit above {self.deductible:g}, or drop the franchise.",
            )
        if self.retained_cap < np.inf and self.deductible == 0:
            raise InputError(
                "retained_cap limits what is kept under the deductible, and there is no deductible",
                value=self.retained_cap,
                remedy="Give a deductible, or use annual_retention to keep part of the year's payments.",
            )

    @property
    def has_annual_terms(self) -> bool:
        """Whether anything acts on the year rather than on single events."""
        return self.annual_retention > 0 or self.annual_limit < np.inf or self.retained_cap < np.inf

    @property
    def has_event_terms(self) -> bool:
        """Whether anything acts on single events before the share."""
        return not self.event_schedule().is_identity

    def event_schedule(self) -> Schedule:
        """What one event contributes to the year's payments, before annual terms and share."""
        d, limit = self.deductible, self.limit
        if self.franchise and d > 0:
            pieces = ((0.0, d), (0.0, d), (0.0, 1.0))
            return (
                Schedule(*pieces)
                if limit == np.inf
                else Schedule((0.0, d, limit), (0.0, d, limit), (0.0, 1.0, 0.0))
            )
        if d == 0:
            return Schedule.capped(limit)
        if limit == np.inf:
            return Schedule((0.0, d), (0.0, 0.0), (0.0, 1.0))
        return Schedule((0.0, d, d + limit), (0.0, 0.0, limit), (0.0, 1.0, 0.0))

    def retained_schedule(self) -> Schedule:
        """What one event adds to the amount kept under the deductible, the base of the retained cap."""
        if self.franchise:
            return Schedule((0.0, self.deductible), (0.0, 0.0), (1.0, 0.0))
        return Schedule.capped(self.deductible)

    def annual_payment(self, payments: FloatArray, retained: FloatArray | None = None) -> FloatArray:
        """What the cover pays for each year.

        Args:
            payments: per year, the sum of `event_schedule` over its events.
            retained: per year, the sum of `retained_schedule`; needed where a retained cap is set.

        Raises:
            InputError: a retained cap without `retained`.
        """
        total = np.maximum(payments - self.annual_retention, 0.0)
        if self.retained_cap < np.inf:
            if retained is None:
                raise InputError(
                    "a retained cap needs the amounts kept under the deductible", remedy="Give `retained`."
                )
            total = total + np.maximum(retained - self.retained_cap, 0.0)
        return self.share * np.minimum(total, self.annual_limit)

    def annual_schedule(self) -> Schedule:
        """The year's payment as a function of the year's sum of event payments, share included.

        Raises:
            InputError: a retained cap, which needs a second annual amount.
        """
        if self.retained_cap < np.inf:
            raise InputError(
                "a retained cap depends on more than the year's payments", value=self.retained_cap
            )
        keep, most, share = self.annual_retention, self.annual_limit, self.share
        starts, values, slopes = ([0.0], [0.0], [0.0]) if keep > 0 else ([], [], [])
        starts, values, slopes = [*starts, keep], [*values, 0.0], [*slopes, share]
        if most < np.inf:
            starts, values, slopes = [*starts, keep + most], [*values, share * most], [*slopes, 0.0]
        return Schedule(tuple(starts), tuple(values), tuple(slopes))

    @property
    def most_per_year(self) -> float:
        """The most the cover can pay in a year, `inf` where nothing limits it."""
        return self.share * self.annual_limit if self.annual_limit < np.inf else np.inf

    def describe(self) -> str:
        """The terms in one line, as printed in reports."""
        parts = []
        if self.limit < np.inf or self.deductible > 0:
            limit = "unlimited" if self.limit == np.inf else f"{self.limit:,.0f}"
            above = "above a franchise of" if self.franchise else "in excess of"
            parts.append(f"{limit} per event {above} {self.deductible:,.0f}")
        if self.annual_retention > 0:
            parts.append(f"annual retention {self.annual_retention:,.0f}")
        if self.retained_cap < np.inf:
            parts.append(f"retained cap {self.retained_cap:,.0f}")
        if self.annual_limit < np.inf:
            parts.append(f"annual limit {self.annual_limit:,.0f}")
        if self.share < 1:
            parts.append(f"share {self.share:.4g}")
        return ", ".join(parts) or "everything is paid"
