"""The keys of `lossagg price`: `[pricing]`, `[[option]]` and `[option-grid]`.

Nothing here has a default that costs or earns money: a load or cost that is not stated is zero, and the
table of options says which are stated.
"""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, model_validator

from lossagg.portfolio.sections import Amount, Name, Positive, Probability, Section, Terms

Rate = Annotated[float, Field(ge=0, lt=1)]
Limit = Annotated[float, Field(gt=0)]
Cap = Annotated[float, Field(ge=0)]
Amounts = Annotated[tuple[Amount, ...], Field(min_length=1, strict=False)]
Limits = Annotated[tuple[Limit, ...], Field(min_length=1, strict=False)]
Caps = Annotated[tuple[Cap, ...], Field(min_length=1, strict=False)]


class RiskLoad(Section):
    """`risk-load`: what the insurer asks for the uncertainty of what it pays.

    `method` "sd": factor times the standard deviation; "variance": factor times the variance (factor per
    unit of money); "cost-of-capital": factor times tail value at risk at `level` less the mean.
    """

    method: Literal["sd", "variance", "cost-of-capital"]
    factor: Annotated[float, Field(ge=0, allow_inf_nan=False)]
    level: Probability | None = None

    @model_validator(mode="after")
    def _level_where_needed(self) -> RiskLoad:
        if (self.method == "cost-of-capital") != (self.level is not None):
            raise ValueError(
                "level belongs to the method cost-of-capital, and to no other | "
                'Write { method = "cost-of-capital", factor = 0.06, level = 0.99 }, or leave level out.'
            )
        return self


class Collateral(Section):
    """`collateral`: security for what the insurer pays first; its yearly cost is `rate` times the worst
    year retained at `level`."""

    rate: Rate
    level: Probability


class ClaimsHandling(Section):
    """`claims-handling`: what the insured spends on its own claims, per event of which it keeps something
    and as a share of what it keeps."""

    per_event: Amount = 0.0
    share: Rate = 0.0


class Capital(Section):
    """`capital`: the yearly cost of capital for what is kept, `rate` times tail value at risk at `level`
    less the mean."""

    rate: Rate
    level: Probability


class Appetite(Section):
    """`appetite`: the most the insured is willing to keep in the worst year at `level`."""

    worst_year: Positive
    level: Probability


class PricingSection(Section):
    """`[pricing]`: what is priced, with which loads and costs, and for which appetite."""

    lines: Annotated[tuple[str, ...], Field(min_length=1, strict=False)] | None = None
    base: Name | None = None
    event_cap: Positive | None = None
    loss_adjustment: Rate = 0.0
    fixed_expense: Amount = 0.0
    variable_expense: Rate = 0.0
    profit: Rate = 0.0
    risk_load: RiskLoad | None = None
    premium_tax: Rate = 0.0
    collateral: Collateral | None = None
    claims_handling: ClaimsHandling | None = None
    capital: Capital | None = None
    basic_limit: Positive | None = None
    basic_limit_expense: Amount = 0.0
    appetite: Appetite | None = None
    parameter_draws: Annotated[int, Field(ge=0, le=10_000)] = 200

    @model_validator(mode="after")
    def _something_left_of_the_premium(self) -> PricingSection:
        spent = self.variable_expense + self.profit
        if spent >= 1:
            raise ValueError(
                f"variable-expense and profit take {spent:.0%} of the premium | Together they must stay "
                "below 1; write 0.22 for 22 %."
            )
        return self


class OptionSection(Terms):
    """`[[option]]`: one option, by its terms; quoted with a premium, or with `uninsured = true` without
    any cover."""

    name: Name
    premium: Amount | None = None
    uninsured: bool = False

    @model_validator(mode="after")
    def _no_cover_no_premium(self) -> OptionSection:
        stated = self.model_fields_set - {"name", "uninsured"}
        if self.uninsured and stated:
            raise ValueError(
                "an uninsured option has no terms and no premium | Leave out "
                f"{', '.join(sorted(name.replace('_', '-') for name in stated))}, or uninsured."
            )
        return self


class OptionGrid(Section):
    """`[option-grid]`: options by every combination of the amounts listed; `inf` for no limit or cap."""

    deductibles: Amounts
    limits: Limits = (float("inf"),)
    annual_retentions: Amounts = (0.0,)
    annual_limits: Limits = (float("inf"),)
    retained_caps: Caps = (float("inf"),)
    share: Annotated[float, Field(gt=0, le=1)] = 1.0
