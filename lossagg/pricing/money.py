"""From expected losses to premium, credit, costs and totals: plain arithmetic that can be done by hand.

premium = (ceded (1 + loss adjustment) + fixed expense + risk load) / (1 - variable expense - profit).
"""

from __future__ import annotations

from dataclasses import dataclass

from lossagg.portfolio.pricing_sections import PricingSection


@dataclass(frozen=True)
class Premium:
    """A premium and its parts; `value` None where it does not exist.

    Attributes:
        value: the premium, before tax.
        source: "modelled", "quoted", or "none" where nothing is bought.
        loss_adjustment, fixed_expense, risk_load: the parts beside the expected ceded loss.
        variable: variable expense and profit.
        reinstated: expected reinstatement premium as a multiple of the initial premium, which `value` is.
        reason: why there is none.
    """

    value: float | None
    source: str
    loss_adjustment: float | None = None
    fixed_expense: float | None = None
    risk_load: float | None = None
    variable: float | None = None
    reinstated: float = 0.0
    reason: str | None = None

    @property
    def reinstatement(self) -> float | None:
        """Expected reinstatement premium."""
        return None if self.value is None else self.value * self.reinstated

    @property
    def expected(self) -> float | None:
        """Initial and expected reinstatement premium."""
        return None if self.value is None else self.value * (1.0 + self.reinstated)


def premium_of(
    basis: PricingSection,
    ceded: float | None,
    risk_load: float | None,
    quoted: float | None,
    *,
    bought: bool,
    reinstated: float = 0.0,
) -> Premium:
    """The premium of an option.

    With paid reinstatements it is the initial premium that, with the reinstatement premium expected, brings
    what the option without them would cost (Sundt 1991, expenses and loads in proportion).

    Args:
        basis: loads and expenses.
        ceded: expected ceded loss; None where it does not exist.
        risk_load: see `risk_load_of`; None where it does not exist.
        quoted: a premium quoted, which is taken as it is.
        bought: whether there is a cover at all.
        reinstated: expected reinstatement premium as a multiple of the initial premium.
    """
    if not bought:
        return Premium(0.0, "none")
    if quoted is not None:
        return Premium(quoted, "quoted", reinstated=reinstated)
    if ceded is None or risk_load is None:
        what = "expected ceded loss" if ceded is None else "risk load"
        return Premium(None, "modelled", reason=f"does not exist: the {what} is infinite or undefined")
    adjustment = basis.loss_adjustment * ceded
    needed = (ceded + adjustment + basis.fixed_expense + risk_load) / (
        1.0 - basis.variable_expense - basis.profit
    )
    variable = (basis.variable_expense + basis.profit) * needed
    value = needed / (1.0 + reinstated)
    return Premium(value, "modelled", adjustment, basis.fixed_expense, risk_load, variable, reinstated)


def risk_load_of(
    basis: PricingSection, mean: float | None, sd: float | None, tail: float | None
) -> float | None:
    """The risk load from mean, standard deviation and tail value at risk of the ceded loss."""
    load = basis.risk_load
    if load is None or load.factor == 0:
        return 0.0
    if load.method == "cost-of-capital":
        return None if tail is None or mean is None else load.factor * (tail - mean)
    if sd is None:
        return None
    return load.factor * (sd if load.method == "sd" else sd**2)


@dataclass(frozen=True)
class Costs:
    """Expected yearly costs beside the initial premium; None where a figure they rest on does not exist."""

    collateral: float | None
    claims_handling: float | None
    premium_tax: float | None
    reinstatement: float | None = 0.0

    @property
    def total(self) -> float | None:
        """Their sum."""
        return added(self.collateral, self.claims_handling, self.premium_tax, self.reinstatement)


def costs_of(
    basis: PricingSection,
    premium: Premium,
    retained: float | None,
    retained_events: float,
    worst: float | None,
    *,
    bought: bool,
) -> Costs:
    """The costs of an option.

    Args:
        basis: the rates.
        premium: the premium.
        retained: expected retained loss.
        retained_events: expected number of events a year of which something is retained.
        worst: worst year retained at the level of the collateral, where there is one.
        bought: whether there is a cover; without one nobody asks for collateral.
    """
    collateral, handling = basis.collateral, basis.claims_handling
    posted = 0.0
    secured: float | None = posted
    if collateral is not None and bought:
        secured = None if worst is None else collateral.rate * worst
    handled: float | None = 0.0
    if handling is not None:
        handled = (
            None if retained is None else handling.per_event * retained_events + handling.share * retained
        )
    taxed = None if premium.expected is None else basis.premium_tax * premium.expected
    return Costs(secured, handled, taxed, premium.reinstatement)


def added(*parts: float | None) -> float | None:
    """The sum, or None where a part does not exist."""
    known = [part for part in parts if part is not None]
    return float(sum(known)) if len(known) == len(parts) else None
