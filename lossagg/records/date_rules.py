"""The rules on the order of dates: a loss occurs, is reported, paid and closed, by the valuation date."""

from __future__ import annotations

import numpy as np

from lossagg.arrays import BoolArray
from lossagg.records.faults import Fault
from lossagg.records.table import LossTable

_HAPPENS = {
    "reported": "the loss is reported",
    "payment-date": "a payment is made",
    "closed-date": "the claim is closed",
}
_CODES = {"reported": "reported", "payment-date": "paid", "closed-date": "closed"}
_BEFORE = {"reported": ("date",), "payment-date": ("date",), "closed-date": ("reported", "date")}
_VERB = {"date": "it occurred", "reported": "it was reported"}


def order_faults(table: LossTable, valuation: np.datetime64, live: BoolArray) -> list[Fault]:
    """Find dates that precede what must come before them, or follow the valuation date.

    Args:
        table: the records.
        valuation: last day the records describe.
        live: True for rows that carry a record; shape (rows,).
    """
    faults = []
    for name, happens in _HAPPENS.items():
        if name not in table.dates:
            continue
        day = table.dates[name]
        faults += [
            Fault(
                f"{_CODES[name]}-early",
                "set aside",
                name,
                live & (day < table.dates[before]),
                f"{happens} before {_VERB[before]}",
                "Correct one of the dates.",
            )
            for before in _BEFORE[name]
            if before in table.dates
        ]
        faults.append(
            Fault(
                f"{_CODES[name]}-late",
                "set aside",
                name,
                live & (day > valuation),
                f"{happens} after the valuation date {valuation}",
                "Correct it, or the valuation date.",
            )
        )
    return faults
