"""Keys of a line that say how its records become losses: basis, recoveries, events, trend, development."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import Field, model_validator

from lossagg.errors import InputError
from lossagg.portfolio.sections import Amount, Positive, Section
from lossagg.records import Development

Factors = Annotated[tuple[Positive, ...], Field(min_length=1, strict=False)]
Rate = Annotated[float, Field(gt=-0.5, lt=1.0)]

_NEED_RECORDS = (
    *("amount_basis", "deductible", "net_of_recoveries", "hours_window", "trend_index", "frequency_trend"),
    *("open_claims", "development"),
)


class DevelopmentSection(Section):
    """`[line.development]`: how the years of a line are brought to ultimate.

    Factors are by age, that of the year of the valuation date first; a tail in their place asks for
    factors from the valuations in the records, and carries on from the oldest age.
    """

    count_factors: Factors | None = None
    amount_factors: Factors | None = None
    open_factors: Factors | None = None
    count_tail: Positive | None = None
    amount_tail: Positive | None = None
    open_tail: Positive | None = None
    method: Literal["chain-ladder", "bornhuetter-ferguson"] = "chain-ladder"
    a_priori_count: Positive | None = None
    a_priori_amount: Positive | None = None

    @model_validator(mode="after")
    def _can_be_used(self) -> DevelopmentSection:
        self.settings()
        return self

    def settings(self) -> Development:
        """The development asked for.

        Raises:
            ValueError: keys that contradict each other, in the form of the schema.
        """
        try:
            return Development(**self.model_dump())
        except InputError as error:
            raise ValueError(f"{error.what} | {error.remedy}") from error


class PreparingKeys(Section):
    """The keys, shared by every line.

    Attributes:
        amount_basis: "ground-up", or "excess" where amounts are net of a deductible.
        deductible: that deductible, of the rows that carry none.
        net_of_recoveries: true to model losses net of recoveries.
        hours_window: longest duration of one event, in hours.
        trend_index: file of a yearly or monthly index, in place of `trend`.
        trend_index_columns: {canonical name: heading} of that file.
        frequency_trend: rate per year at which events per unit of exposure grow.
        open_claims: "as-recorded", "develop" or "censor".
        development: how the years are brought to ultimate.
    """

    amount_basis: Literal["ground-up", "excess"] | None = None
    deductible: Amount | None = None
    net_of_recoveries: bool = False
    hours_window: Annotated[int, Field(ge=24, le=8760, multiple_of=24)] | None = None
    trend_index: str | None = None
    trend_index_columns: dict[str, str] = Field(default_factory=dict)
    frequency_trend: Rate = 0.0
    open_claims: Literal["as-recorded", "develop", "censor"] = "as-recorded"
    development: DevelopmentSection | None = None

    @model_validator(mode="after")
    def _fit_together(self) -> PreparingKeys:
        given = self.model_fields_set
        if {"trend", "trend_index"} <= given:
            raise ValueError(
                "trend and trend-index would apply the trend twice | Give one of them; an index is a trend."
            )
        if self.deductible is not None and self.amount_basis != "excess":
            raise ValueError(
                "a deductible of a line says what its amounts are net of | "
                'Add amount-basis = "excess", or put the deductible of a policy under [[cover]].'
            )
        develops_open = self.development is not None and self.development.settings().develops("open")
        if self.open_claims == "develop" and not develops_open:
            raise ValueError(
                "open claims are to be developed without factors | Give open-factors or open-tail in the "
                "development table of the line."
            )
        if develops_open and self.open_claims != "develop":
            raise ValueError(
                'factors of open claims are given but not used | Add open-claims = "develop" to the line.'
            )
        if self.trend_index is None and "trend_index_columns" in given:
            raise ValueError("trend-index-columns needs a trend-index | Name the file of the index.")
        unused = [name for name in _NEED_RECORDS if name in given]
        if unused and getattr(self, "records", None) is None:
            raise ValueError(f"{unused[0].replace('_', '-')} needs records | Add records = ...")
        return self

    def preparation(self) -> dict[str, Any]:
        """What `prepare_losses` is to do, less the trend."""
        return {
            "frequency_trend": self.frequency_trend,
            "hours_window": self.hours_window,
            "net_of_recoveries": self.net_of_recoveries,
            "open_claims": self.open_claims,
            "development": None if self.development is None else self.development.settings(),
        }
