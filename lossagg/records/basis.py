"""The loss that is modelled: ground-up where amounts are net of a deductible, net only where it is asked for.

A claim recorded net of its deductible shows only when it is above it. Adding the deductible back gives the
loss from the ground up, and the same deductible is the threshold below which nothing was seen (left
truncation; Klugman, Panjer and Willmot, Loss Models, on truncated data).
"""

from __future__ import annotations

from dataclasses import replace
from decimal import Decimal

import numpy as np

from lossagg.arrays import BoolArray, FloatArray, require_positive
from lossagg.errors import InputError, place
from lossagg.records.changes import Change
from lossagg.records.findings import Finding, counted
from lossagg.records.money import Money, exact_sum
from lossagg.records.table import LossTable

_SHIFTED = ("paid", "policy-limit")


def ground_up_losses(
    table: LossTable, rows: BoolArray, *, deductible: float | None = None, reporting_threshold: float = 0.0
) -> LossTable:
    """Add deductibles back to amounts that are net of them, before the records are checked.

    Amounts above zero, what was paid of them and their policy limits rise by the deductible of the row; its
    threshold becomes the larger of its own and the deductible. A nil claim stays nil: how much of the
    deductible it used is not known.

    Args:
        table: the records.
        rows: True for the rows that are net of a deductible; shape (rows,).
        deductible: deductible of the rows that carry none in the column `deductible`.
        reporting_threshold: threshold, from the ground up, of the rows that carry none.

    Returns:
        The table from the ground up; `changes` keeps the amounts as they were.

    Raises:
        InputError: a deductible that is missing or negative.
    """
    added = table.number("deductible").copy()
    if deductible is not None:
        added[np.isnan(added)] = require_positive(deductible, "deductible", zero=True)
    above = rows & ~table.blank & ~table.unreadable & (table.amount > 0)
    wrong = np.flatnonzero(above & ~((added >= 0) & np.isfinite(added)))
    if wrong.size:
        raise InputError(
            f"amounts are declared net of a deductible, but {counted(len(wrong), 'row')} have no usable one",
            where=place(
                file=table.file,
                sheet=table.sheet,
                row=int(table.row[wrong[0]]),
                column=table.headings.get("deductible"),
            ),
            value=None if np.isnan(added[wrong[0]]) else float(added[wrong[0]]),
            remedy="Fill the deductible column, or give the line a deductible.",
        )
    exact = _raised(table.exact, above, added)
    numbers = {name: values.copy() for name, values in table.numbers.items()}
    numbers["amount"][above] = exact[above].to_floats()
    for name in set(_SHIFTED) & set(numbers):
        numbers[name][above] += added[above]
    own = table.number("threshold")
    threshold = np.where(np.isnan(own), reporting_threshold, own)
    numbers["threshold"] = np.where(above, np.maximum(threshold, added), own)
    changed = above & (added > 0)
    note = "net of their deductible raised by it, to be losses from the ground up; the deductible is their "
    note += "threshold where that was lower"
    return replace(
        table,
        numbers=numbers,
        exact=exact,
        changes=(*table.changes, Change("ground-up", table.exact, changed, note)),
    )


def line_rows(table: LossTable, line: str | None) -> BoolArray:
    """True for the rows of one line, whatever its case; all rows for None; shape (rows,)."""
    if line is None or "line" not in table.words:
        return np.ones(len(table), dtype=np.bool_)
    return table.words["line"].select(lambda word: word.casefold() == line.strip().casefold())


def undeclared_deductibles(table: LossTable) -> list[Finding]:
    """Warn that the records carry deductibles but nobody said what the amounts are net of."""
    carried = ~table.blank & (np.nan_to_num(table.number("deductible")) > 0)
    if not carried.any():
        return []
    return [
        Finding(
            "deductible-column",
            "warn",
            table.file,
            None,
            table.headings["deductible"],
            None,
            f"{counted(int(carried.sum()), 'row')} with a deductible; the amounts are taken as ground-up",
            'Declare amount-basis = "excess" if they are net of it, or amount-basis = "ground-up" if not.',
            sheet=table.sheet,
            count=int(carried.sum()),
        )
    ]


def net_amounts(table: LossTable) -> FloatArray:
    """Amounts less recoveries, never below zero; rows without a recovery as they are; shape (rows,).

    Raises:
        InputError: the records have no column of recoveries, so that nothing would be net.
    """
    if "recoveries" not in table.numbers:
        raise InputError(
            "losses are to be modelled net of recoveries, but the records have no recoveries",
            where=place(file=table.file, sheet=table.sheet),
            remedy="Map the column that holds them, or leave net-of-recoveries out.",
        )
    recovered = np.maximum(np.nan_to_num(table.number("recoveries")), 0.0)
    net = table.amount - recovered
    near = np.rint(net * 100.0) / 100.0
    # A difference of hundredths is off by rounding in the last digits of the larger of the two.
    return np.maximum(np.where(np.abs(near - net) <= 4e-16 * np.abs(table.amount), near, net), 0.0)


def _raised(exact: Money, rows: BoolArray, added: FloatArray) -> Money:
    """Amounts raised by other amounts, exactly: whole hundredths at once, all others one by one."""
    raised = exact.copy()
    cents = np.rint(np.where(rows, added, 0.0) * 100.0)
    lift = 2 - exact.places.astype(np.int64)
    plain = rows & (cents / 100.0 == added) & (lift >= 0) & (np.abs(exact.units) < 2**52) & (cents < 2**52)
    raised.units[plain] = exact.units[plain] * 10 ** lift[plain] + cents[plain].astype(np.int64)
    raised.places[plain] = 2
    for at in np.flatnonzero(rows & ~plain | rows & _odd(exact)).tolist():
        raised[at] = exact_sum([exact[at], Decimal(repr(float(added[at])))])
    return raised


def _odd(exact: Money) -> BoolArray:
    mask = np.zeros(len(exact), dtype=np.bool_)
    mask[list(exact.odd)] = True
    return mask
