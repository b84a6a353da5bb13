"""The rules on amounts beside the amount: thresholds, limits, recoveries, what is paid and outstanding."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from lossagg.arrays import BoolArray
from lossagg.records.faults import Fault
from lossagg.records.table import LossTable

CENT = 0.01


def money_faults(table: LossTable, live: BoolArray) -> list[Fault]:
    """Apply the rules whose columns the table has.

    Args:
        table: the records.
        live: True for rows that carry a record; shape (rows,).
    """
    faults = []
    if "threshold" in table.numbers:
        faults.append(_negative_threshold(table, live))
    if "policy-limit" in table.numbers:
        faults.append(_above_limit(table, live))
    if "recoveries" in table.numbers:
        faults += _recoveries(table, live)
    if {"paid", "outstanding"} <= set(table.numbers):
        faults.append(_parts_differ(table, live))
    return faults


def _negative_threshold(table: LossTable, live: BoolArray) -> Fault:
    return Fault(
        "negative-threshold",
        "set aside",
        "threshold",
        live & (table.number("threshold") < 0),
        "the threshold is negative",
        "Correct it.",
    )


def _above_limit(table: LossTable, live: BoolArray) -> Fault:
    return Fault(
        "above-limit",
        "set aside",
        "amount",
        live & (table.amount > table.number("policy-limit")),
        "the amount is above its policy limit",
        "Correct one of them; if amounts are before the limit, leave the limit out.",
    )


def _recoveries(table: LossTable, live: BoolArray) -> list[Fault]:
    recoveries = table.number("recoveries")
    return [
        Fault(
            "recoveries-above-gross",
            "set aside",
            "recoveries",
            live & (recoveries > table.amount),
            "the recoveries exceed the gross amount",
            "Give amounts gross of recoveries.",
        ),
        Fault(
            "negative-recoveries",
            "warn",
            "recoveries",
            live & (recoveries < 0),
            "the recoveries are negative",
            "Give recoveries as positive numbers; amounts are used gross of them in any case.",
        ),
    ]


def _parts_differ(table: LossTable, live: BoolArray) -> Fault:
    amount = table.amount
    # A float64 sum of two amounts is off by a few parts in 1e16, which is no difference in money.
    slack = CENT * (1 + 1e-6) + 1e-12 * np.abs(amount)
    differ = np.abs(table.number("paid") + table.number("outstanding") - amount) > slack
    return Fault(
        "parts-differ",
        "set aside",
        "amount",
        live & differ,
        f"paid and outstanding do not add to the amount within {CENT}",
        "Correct one of the three.",
    )


def missing_thresholds(table: LossTable, declared: Mapping[str, float], live: BoolArray) -> Fault:
    """Losses without a threshold in a file where others have one, and none is declared for their line.

    Args:
        table: the records, lines named as the portfolio names them.
        declared: {line, "" for all rows: reporting threshold}.
        live: True for rows that carry a record; shape (rows,).
    """
    mask = np.zeros(len(table), dtype=np.bool_)
    own = table.number("threshold")
    if "threshold" in table.numbers and "" not in declared and np.isfinite(own[live]).any():
        mask = live & np.isnan(own) & (table.amount > 0) & ~table.word("line").is_in(declared)
    return Fault(
        "missing-threshold",
        "stop",
        "threshold",
        mask,
        "the reporting threshold is missing where other records have one",
        "Fill it, 0 where all losses were recorded, or declare the reporting threshold of the line.",
    )
