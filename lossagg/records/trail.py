"""Row by row from the file to the model: what was read, what became of it, and in which loss it ended.

Every row read stands here once. The amounts are exact, as decimals: those used and those set aside add up to
what the reconciliation says; trended amounts add up to the losses that are modelled.
"""

from __future__ import annotations

from decimal import Decimal
from typing import TYPE_CHECKING, Any

import numpy as np

from lossagg.arrays import FloatArray, IntArray
from lossagg.records.check import USED, CheckedLosses
from lossagg.records.faults import CURRENCY_CODE, show
from lossagg.records.money import Money
from lossagg.records.prepared import PreparedLosses
from lossagg.records.table import LossTable

if TYPE_CHECKING:
    import pandas as pd

TEXTS = ("line", "file", "sheet", "date", "claim", "event", "currency", "treatment", "reason")
"""Columns of the trail that hold text; all others hold numbers, or nothing."""


def row_trail(checked: CheckedLosses, prepared: PreparedLosses | None) -> pd.DataFrame:
    """What became of every row of a line, or of a file.

    Args:
        checked: the records of the line.
        prepared: its losses; None where it came to none.

    Returns:
        One row for each row of the file that belongs to the line, in the order of the file:

        - where it stands: `line`, `file`, `sheet`, `row`; `date`, `claim`, `event`, described if they look
          like prose;
        - what was read: `amount_read` in `currency`; `converted` to that of the portfolio; the
          `deductible_added`; `amount`, which is what the reconciliation counts; `recoveries`;
        - `treatment`: "used" or "set aside", and the code of the `reason`;
        - of used rows: the number of the `loss` it is in, and how many `claims` that has; `modelled`, its
          amount net of recoveries and developed where that is asked for; the `trend` factor; `trended`, its
          share of the loss; `loss_amount` and `loss_threshold` in the money of the forecast period.
    """
    import pandas as pd

    table = checked.table
    at = np.flatnonzero(checked.member)
    loss, reason = _ends(checked, prepared)
    loss, used = loss[at], reason[at] == ""
    columns: dict[str, Any] = {
        "line": checked.line or "",
        "file": table.file,
        "sheet": table.sheet or "",
        "row": table.row[at],
        "date": np.where(np.isnat(table.date[at]), "", table.date[at].astype(str)),
        "claim": _shown(table, "claim", at),
        "event": _shown(table, "event", at),
        **_amounts(table, at),
        "treatment": np.where(used, "used", "set aside"),
        "reason": reason[at],
    }
    if prepared is not None:
        columns |= _modelled(table, prepared, at, loss)
    whole = {
        name: [value] * len(at) if isinstance(value, str | None) else value for name, value in columns.items()
    }
    return pd.DataFrame({name: pd.Series(list(value), dtype=object) for name, value in whole.items()})


def _ends(checked: CheckedLosses, prepared: PreparedLosses | None) -> tuple[Any, Any]:
    """Loss of each row, -1 where it is in none, and the code that set it aside, "" where none did."""
    codes = np.array([*(fault.code for fault in checked.faults), ""], dtype=np.object_)
    assert USED == -1  # The last code is that of no fault.
    reason = codes[checked.reason]
    if prepared is None:
        return np.full(len(checked.table), -1), reason
    for fault in prepared.small:
        reason[fault.mask] = fault.code
    return prepared.loss_of_row, reason


def _shown(table: LossTable, name: str, at: IntArray) -> Any:
    """Identifiers; what looks like prose is described, never repeated."""
    words = table.word(name)[at]
    names = np.array([show(name) if name else "" for name in words.names.to_pylist()], dtype=np.object_)
    return names[words.codes] if len(names) else ""


def _amounts(table: LossTable, at: IntArray) -> dict[str, Any]:
    """The amounts from what was read to what is counted, change by change."""
    states = [*(change.before for change in table.changes), table.exact]
    readable = ~table.unreadable[at]
    columns: dict[str, Any] = {"currency": "", "converted": None, "deductible_added": None}
    if "currency" in table.cells:
        cells = (str(cell or "").strip() for cell in table.cells["currency"].take(at).to_pylist())
        columns["currency"] = [cell if len(cell) <= CURRENCY_CODE else show(cell) for cell in cells]
    for number, change in enumerate(table.changes):
        after, rows = states[number + 1], change.rows[at]
        if change.step == "currency":
            columns["converted"] = _decimals(after[at], rows)
        else:
            raised = zip(after[at], change.before[at], rows.tolist(), strict=True)
            added = [a - b if changed else None for a, b, changed in raised]
            before = columns["deductible_added"] or [None] * len(at)
            columns["deductible_added"] = [b if a is None else a for a, b in zip(added, before, strict=True)]
    recoveries = table.number("recoveries")[at]
    return {
        "amount_read": _decimals(states[0][at], readable),
        **columns,
        "amount": _decimals(table.exact[at], readable),
        "recoveries": [None if np.isnan(value) else value for value in recoveries.tolist()],
    }


def _decimals(amounts: Money, rows: Any) -> list[Decimal | None]:
    """Exact amounts, None where there is none."""
    return [amount if there else None for amount, there in zip(amounts, rows.tolist(), strict=True)]


def _modelled(table: LossTable, prepared: PreparedLosses, at: IntArray, loss: Any) -> dict[str, Any]:
    """The way of the used rows into their losses; losses are numbered from 1, by date and amount."""
    inside = loss >= 0
    own = np.where(inside, loss, 0)
    amount = (table.amount if prepared.row_amount is None else prepared.row_amount)[at]

    def of(values: FloatArray | IntArray) -> list[Any]:
        if not len(values):
            return [None] * len(at)
        picked = zip(values[own].tolist(), inside.tolist(), strict=True)
        return [value if there else None for value, there in picked]

    modelled = [
        value if there else None for value, there in zip(amount.tolist(), inside.tolist(), strict=True)
    ]
    factor = of(prepared.trend_factor)
    trended = [None if a is None else a * f for a, f in zip(modelled, factor, strict=True)]
    return {
        "loss": of(np.arange(1, len(prepared) + 1)),
        "claims": of(prepared.claims),
        "modelled": modelled,
        "trend": factor,
        "trended": trended,
        "loss_amount": of(prepared.amount),
        "loss_threshold": of(prepared.threshold),
    }


def largest_losses(checked: CheckedLosses, prepared: PreparedLosses, number: int) -> list[dict[str, object]]:
    """The largest modelled losses with the rows they are made of.

    Args:
        checked: the records of the line.
        prepared: its losses.
        number: how many, fewer where there are fewer.

    Returns:
        Plain values: number of the `loss` in the trail, `date`, `file`, `sheet`, `rows` of the file,
        `recorded`, `modelled`, `trend`, `amount`.
    """
    order = np.argsort(-prepared.amount, kind="stable")[:number]
    table = checked.table
    return [
        {
            "loss": at + 1,
            "date": str(prepared.date[at]),
            "file": table.file,
            "sheet": table.sheet,
            "rows": table.row[prepared.loss_of_row == at].tolist(),
            "recorded": float(prepared.recorded[at]),
            "modelled": float(prepared.amount[at] / prepared.trend_factor[at]),
            "trend": float(prepared.trend_factor[at]),
            "amount": float(prepared.amount[at]),
        }
        for at in order.tolist()
    ]
