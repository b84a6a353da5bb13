"""What the terms of a cover do to a year: its sum of event payments, and what the deductible kept."""

from __future__ import annotations

from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.cover.schedule import Schedule
from lossagg.errors import InputError

if TYPE_CHECKING:
    from lossagg.cover.terms import Cover


class YearTerms(NamedTuple):
    """The year's payment as `beyond(payments(z) + kept(r))`.

    Attributes:
        payments: what counts of z, the year's sum of event payments.
        kept: what counts of r, the year's sum kept under the deductible; None without a retained cap.
        beyond: the payment as a function of the two together.
    """

    payments: Schedule
    kept: Schedule | None
    beyond: Schedule


def year_terms(cover: Cover) -> YearTerms:
    """The terms of the year as functions, in the order declared."""
    before, kept, beyond = Schedule.identity(), None, Schedule.identity()
    for operation in cover.year_order:
        if operation == "retained-cap":
            if cover.retained_cap < np.inf:
                kept = Schedule.excess(cover.retained_cap)
        elif kept is None:
            before = _term(cover, operation).after(before)
        else:
            beyond = _term(cover, operation).after(beyond)
    return YearTerms(before, kept, beyond)


def year_payment(cover: Cover, payments: FloatArray, retained: FloatArray | None) -> FloatArray:
    """What the cover pays for each year; see `Cover.annual_payment`."""
    total = payments
    for operation in cover.year_order:
        if operation == "annual-retention":
            total = np.maximum(total - cover.annual_retention, 0.0)
        elif operation == "corridor":
            total = total if cover.corridor is None else _corridor(cover, total)
        elif operation == "annual-limit":
            total = np.minimum(total, cover.year_limit)
        elif operation == "share":
            total = cover.share * total
        elif cover.retained_cap < np.inf:
            if retained is None:
                raise InputError(
                    "a retained cap needs the amounts kept under the deductible", remedy="Give `retained`."
                )
            total = total + np.maximum(retained - cover.retained_cap, 0.0)
    return total


def _corridor(cover: Cover, total: FloatArray) -> FloatArray:
    band = cover.corridor
    assert band is not None
    return total - band.share * np.clip(total - band.low, 0.0, band.high - band.low)


def _term(cover: Cover, operation: str) -> Schedule:
    if operation == "annual-retention":
        return Schedule.excess(cover.annual_retention)
    if operation == "corridor":
        return Schedule.identity() if cover.corridor is None else cover.corridor.schedule()
    if operation == "annual-limit":
        return Schedule.capped(cover.year_limit)
    return Schedule.proportional(cover.share)
