"""What all tables of the portfolio file share: strict keys with hyphens, amounts, and terms of cover."""

from __future__ import annotations

from typing import Annotated, Any

from pydantic import BaseModel, ConfigDict, Field, model_validator

Amount = Annotated[float, Field(ge=0, allow_inf_nan=False)]
Positive = Annotated[float, Field(gt=0, allow_inf_nan=False)]
Probability = Annotated[float, Field(gt=0, lt=1)]
Name = Annotated[str, Field(min_length=1, max_length=120)]

AMBIGUOUS = {"annual-aggregate-deductible", "aggregate-deductible", "annual-deductible"}


def hyphenated(name: str) -> str:
    """The key of a field: words joined by hyphens."""
    return name.replace("_", "-")


class Section(BaseModel):
    """A table of the portfolio file: unknown keys are errors, text is not taken for numbers."""

    model_config = ConfigDict(
        alias_generator=hyphenated, extra="forbid", strict=True, frozen=True, populate_by_name=False
    )


class Terms(Section):
    """Terms of cover as keys: those of `[[cover]]` and of `[[option]]`."""

    deductible: Amount = 0.0
    limit: Positive | None = None
    franchise: bool = False
    share: Annotated[float, Field(gt=0, le=1)] = 1.0
    annual_retention: Amount = 0.0
    annual_limit: Positive | None = None
    retained_cap: Amount | None = None

    @model_validator(mode="before")
    @classmethod
    def _two_meanings(cls, values: Any) -> Any:
        for key in AMBIGUOUS & set(values if isinstance(values, dict) else ()):
            raise ValueError(
                f"{key!r} has two opposite meanings in the trade | Write annual-retention for an amount "
                "kept of the year's payments before the cover pays, or retained-cap for the most the "
                "insured keeps per year under the deductible."
            )
        return values
