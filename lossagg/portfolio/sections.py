"""What all tables of the portfolio file share: strict keys with hyphens, amounts, and terms of cover."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import BaseModel, ConfigDict, Field, field_validator, model_validator

from lossagg.cover.ambiguity import REMEDY, is_ambiguous

Amount = Annotated[float, Field(ge=0, allow_inf_nan=False)]
Positive = Annotated[float, Field(gt=0, allow_inf_nan=False)]
Probability = Annotated[float, Field(gt=0, lt=1)]
Name = Annotated[str, Field(min_length=1, max_length=120)]


def hyphenated(name: str) -> str:
    """The key of a field: words joined by hyphens."""
    return name.replace("_", "-")


class Section(BaseModel):
    """A table of the portfolio file: unknown keys are errors, text is not taken for numbers."""

    model_config = ConfigDict(
        alias_generator=hyphenated, extra="forbid", strict=True, frozen=True, populate_by_name=False
    )


class CorridorSection(Section):
    """`corridor`: of the year's payments between `low` and `high` (absent: without end) the insured takes
    back `share`."""

    low: Amount
    high: Positive | None = None
    share: Annotated[float, Field(gt=0, le=1)] = 1.0


class SurplusSection(Section):
    """`surplus`: of every risk `kept-line` is kept and up to `lines` times as much ceded, in proportion."""

    kept_line: Positive
    lines: Positive


class StopLossSection(Section):
    """`stop-loss`: annual retention and annual limit as loss ratios of `premium`."""

    premium: Positive
    retention: Positive
    limit: Positive | None = None


class Terms(Section):
    """Terms of cover as keys: those of `[[cover]]`, of `[[option]]` and of `[[tower.layer]]`.

    The terms themselves are explained in `lossagg.Cover`, whose names they share. Besides: `stop-loss`
    states annual retention and limit as loss ratios, `reinstatement-rate` is the premium of one
    reinstatement as a multiple of the initial premium (a list: one for each), and `scale` multiplies every
    amount of the cover: a rate of exchange, an index, or the growth of the exposure.
    """

    deductible: Amount = 0.0
    limit: Positive | None = None
    franchise: bool = False
    share: Annotated[float, Field(gt=0, le=1)] = 1.0
    annual_retention: Amount = 0.0
    annual_limit: Positive | None = None
    retained_cap: Amount | None = None
    disappears_at: Positive | None = None
    limit_includes_deductible: bool = False
    self_insured: bool = False
    surplus: SurplusSection | None = None
    corridor: CorridorSection | None = None
    stop_loss: StopLossSection | None = None
    reinstatements: Annotated[int, Field(ge=0)] | None = None
    reinstatement_rate: Annotated[tuple[Amount, ...], Field(min_length=1, strict=False)] = (0.0,)
    expense_basis: Literal["inside", "outside", "pro-rata"] | None = None
    order: Annotated[tuple[str, ...], Field(strict=False)] = ()
    scale: Positive = 1.0

    @field_validator("reinstatement_rate", mode="before")
    @classmethod
    def _for_all(cls, value: Any) -> Any:
        return (value,) if isinstance(value, int | float) else value

    @model_validator(mode="after")
    def _once(self) -> Terms:
        if self.stop_loss is not None and (self.annual_retention > 0 or self.annual_limit is not None):
            raise ValueError(
                "a stop loss states the annual retention and limit a second time | State them once: as loss "
                "ratios in stop-loss, or as amounts."
            )
        if self.reinstatements is None and self.reinstatement_rate != (0.0,):
            raise ValueError("reinstatement-rate needs reinstatements | Give their number.")
        return self

    @model_validator(mode="before")
    @classmethod
    def _two_meanings(cls, values: Any) -> Any:
        for key in values if isinstance(values, dict) else ():
            if is_ambiguous(key):
                raise ValueError(f"{key!r} has two opposite meanings in the trade | {REMEDY}")
        return values
