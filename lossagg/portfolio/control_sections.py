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


class PreviousSection(Section):
    """`previous`: the records of the line as they were handed in for the previous quarter.

    Attributes:
        records: that file, in the folder, read like the records.
        unchanged: true confirms that nothing happened since and the records are the same.
        tolerance: largest share of the earlier claims, and of their money, that may be gone or rewritten.
        largest_fall: part of its amount that a claim must lose to be listed.
    """

    records: str
    unchanged: bool = False
    tolerance: Annotated[float, Field(ge=0, le=1)] = 0.05
    largest_fall: Annotated[float, Field(gt=0, le=1)] = 0.9


class ControlKeys(Section):
    """What the records of a line are held against.

    Attributes:
        control_total: totals that another source states.
        previous: the records of the previous quarter.
        counts: file of claims by year.
        counts_columns: {canonical name: heading} of that file.
    """

    control_total: Annotated[tuple[ControlTotalSection, ...], Field(strict=False)] = ()
    previous: PreviousSection | None = None
    counts: str | None = None
    counts_columns: dict[str, str] = Field(default_factory=dict)

    @model_validator(mode="after")
    def _control_needs_records(self) -> Self:
        if self.counts_columns and self.counts is None:
            raise ValueError("counts-columns needs counts | Name the file of the counts.")
        if getattr(self, "records", None) is not None:
            return self
        for key, what in (
            ("control_total", "a control total"),
            ("previous", "the previous quarter"),
            ("counts", "a file of counts"),
        ):
            if getattr(self, key):
                raise ValueError(f"{what} needs records beside it | Add records = ...")
        return self
