"""Changes made to a whole table before it is checked: what the amounts were, which rows, and why."""

from __future__ import annotations

from dataclasses import dataclass

from lossagg.arrays import BoolArray
from lossagg.records.money import Money


@dataclass(frozen=True)
class Change:
    """One change of the amounts of a table, kept so that the steps can show both sides of it.

    Args:
        step: name of the step, "currency" for example.
        before: amounts before it; shape (rows,).
        rows: True for the rows whose amount changed; shape (rows,).
        note: what was done, in words.
    """

    step: str
    before: Money
    rows: BoolArray
    note: str
