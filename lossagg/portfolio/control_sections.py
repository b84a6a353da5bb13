"""Keys of a line that state control totals: what the ledger says the records should hold."""

from __future__ import annotations

from typing import Annotated, Self

from pydantic import Field, model_validator

from lossagg.portfolio.sections import Amount, Section
from lossagg.records import ControlTotal

_MEASURES = ("count", "amount", "paid", "outstanding", "recoveries")
Total = Annotated[float, Field(allow_inf_nan=False)]


class ControlTotalSection(Section):
    """`[[line.control-total]]`: totals of the line's records as another source states them.

    One or more of `count`, `amount`, `paid`, `outstanding` and `recoveries`; of all losses, or of those of
    a calendar `year`. Money may differ by `tolerance` (half a cent), the count not at all.
    """

    count: Annotated[int, Field(ge=0)] | None = None
    amount: Total | None = None
    paid: Total | None = None
    outstanding: Total | None = None
    recoveries: Total | None = None
    year: Annotated[int, Field(ge=1900, le=2200)] | None = None
    tolerance: Amount = 0.005

    @model_validator(mode="after")
    def _states_something(self) -> ControlTotalSection:
        if all(getattr(self, measure) is None for measure in _MEASURES):
            raise ValueError(f"a control total states nothing | Give one or more of {', '.join(_MEASURES)}.")
        return self

    def control(self) -> ControlTotal:
        """The control total as the records understand it."""
        totals = {measure: getattr(self, measure) for measure in _MEASURES}
        return ControlTotal(
            totals={measure: total for measure, total in totals.items() if total is not None},
            year=self.year,
            tolerance=self.tolerance,
        )


class ControlKeys(Section):
    """The keys, shared by every line."""

    control_total: Annotated[tuple[ControlTotalSection, ...], Field(strict=False)] = ()

    @model_validator(mode="after")
    def _control_needs_records(self) -> Self:
        if self.control_total and getattr(self, "records", None) is None:
            raise ValueError("a control total needs records beside it | Add records = ...")
        return self
