"""From the figures of the losses to the row of an option: premium, credit, costs, totals, break-even."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.engines.sampled import SimulatedAnnualLoss
from lossagg.portfolio.pricing_sections import PricingSection
from lossagg.pricing.common_years import Tally
from lossagg.pricing.evaluate import Exact
from lossagg.pricing.event_figures import retained_events
from lossagg.pricing.figure import FORMULA, Figure
from lossagg.pricing.money import Costs, Premium, added, costs_of, premium_of, risk_load_of
from lossagg.pricing.option import Option

WORST_LEVELS = (0.9, 0.95, 0.99)
WITHHELD = "withheld: exact and simulated figures disagree"
MISSING = Figure(None, None, None, "", "not computed")


@dataclass(frozen=True)
class Row:
    """An option with everything that is known of it before options are compared.

    Attributes:
        option: its terms.
        exact: figures of its losses.
        premium, modelled: the premium charged, and the modelled one where it was quoted.
        premium_range: the premium expected at the ends of the ranges of the figures it rests on.
        costs: yearly costs beside it.
        events: expected number of events of which something is retained.
        basis: loads and rates.
        varying: retained amount and reinstatement premium of the simulated years, where any is paid.
    """

    option: Option
    exact: Exact
    premium: Premium
    modelled: Premium
    premium_range: tuple[float | None, float | None]
    costs: Costs
    events: float
    basis: PricingSection
    varying: SimulatedAnnualLoss | None = None

    @property
    def fixed(self) -> float | None:
        """What is paid whatever happens: premium, tax, costs; of reinstatement premium nothing."""
        paid = added(self.premium.value, self.costs.total)
        return None if paid is None else paid - self.reinstatement_price * self.premium.reinstated

    @property
    def reinstatement_price(self) -> float:
        """What reinstating a whole limit at 100 % costs, tax included; 0 where nothing is paid for it."""
        if self.option.reinstated is None or self.premium.value is None:
            return 0.0
        return (1.0 + self.basis.premium_tax) * self.premium.value

    def reinstatement(self, ceded: FloatArray) -> FloatArray:
        """Reinstatement premium, tax included, of years in which the cover pays these amounts."""
        if self.option.reinstated is None:
            return np.zeros(ceded.shape)
        return self.reinstatement_price * self.option.reinstated(ceded)

    def paid(self) -> Figure:
        """What is expected to be paid beside losses, with the range that the premium and its tax bring."""
        paid = added(self.premium.value, self.costs.total)
        if paid is None or self.premium.expected is None:
            return Figure(None, None, None, "", self.premium.reason)
        taxed = 1.0 + self.basis.premium_tax
        low, high = (
            None if end is None else paid + taxed * (end - self.premium.expected)
            for end in self.premium_range
        )
        return Figure(paid, low, high, FORMULA)

    def tail(self) -> Figure:
        """Tail value at risk, at the farthest level of the table, of what the year costs beside `fixed`."""
        if self.varying is not None:
            return Figure.measured(self.varying, "tail_value_at_risk", WORST_LEVELS[-1])
        return self.exact.levels[WORST_LEVELS[-1]][1]

    def worst(self, level: float) -> Figure:
        """Worst year retained at a level."""
        return self.exact.levels[level][0]

    def worst_total(self, level: float) -> Figure:
        """Total cost of the worst year at a level."""
        if self.varying is not None:
            return Figure.measured(self.varying, "value_at_risk", level).plus(self.fixed, self.premium.reason)
        return self.worst(level).joined(self.paid())

    def total(self) -> Figure:
        """Expected total cost of risk."""
        return (self.exact.mean or MISSING).joined(self.paid())

    def capital_cost(self) -> Figure:
        """Cost of capital on tail value at risk less the mean retained."""
        capital = self.basis.capital
        if capital is None:
            return Figure.exact(0.0)
        tail, mean = self.exact.levels[capital.level][1], self.exact.mean or MISSING
        return tail.joined(mean.scaled(-1.0)).scaled(capital.rate)

    def total_with_capital(self) -> Figure:
        """Expected total cost of risk and cost of capital: (1 - rate) mean + rate tail + what is paid."""
        mean, capital = self.exact.mean or MISSING, self.basis.capital
        if capital is None:
            return self.total()
        rate, tail = capital.rate, self.exact.levels[capital.level][1]
        return mean.scaled(1.0 - rate).joined(tail.scaled(rate)).joined(self.paid())


def levels_needed(basis: PricingSection) -> tuple[float, ...]:
    """Every level at which a retained year is needed."""
    found = {*WORST_LEVELS, frontier_level(basis)}
    if basis.capital is not None:
        found.add(basis.capital.level)
    if basis.collateral is not None:
        found.add(basis.collateral.level)
    return tuple(sorted(found))


def frontier_level(basis: PricingSection) -> float:
    """The level of the worst year by which options are compared: that of the appetite, else 95 %."""
    return 0.95 if basis.appetite is None else basis.appetite.level


def row_of(option: Option, exact: Exact, basis: PricingSection) -> Row:
    """The row of an option from the figures of its losses."""
    bought, reinstated = option.terms is not None, value_of(exact.reinstated) or 0.0
    ceded = value_of(exact.ceded)
    load = risk_load_of(basis, ceded, value_of(exact.ceded_sd), value_of(exact.ceded_tail))
    premium, modelled = (
        premium_of(basis, ceded, load, quoted, bought=bought, reinstated=reinstated)
        for quoted in (option.quoted, None)
    )
    events = retained_events(option)
    secured = None if basis.collateral is None else exact.levels[basis.collateral.level][0].value
    costs = costs_of(basis, premium, value_of(exact.mean), events, secured, bought=bought)
    return Row(option, exact, premium, modelled, _ends(option, exact, basis), costs, events, basis)


def with_years(row: Row, tally: Tally) -> Row:
    """The row with the cost of every simulated year, where it depends on more than the retained amount."""
    if row.option.reinstated is None or tally.kept is None or tally.paid is None:
        return row
    varying = tally.kept.annual + row.reinstatement(tally.paid.annual)
    return replace(row, varying=SimulatedAnnualLoss(varying, tally.kept.moment_order))


def _ends(option: Option, exact: Exact, basis: PricingSection) -> tuple[float | None, float | None]:
    """The premium expected, at the lower and at the upper ends of ceded loss, its spread and its tail."""
    ends = []
    for end in ("low", "high"):
        ceded, spread, tail = (
            None if found is None else getattr(found, end)
            for found in (exact.ceded, exact.ceded_sd, exact.ceded_tail)
        )
        load = risk_load_of(basis, ceded, spread, tail)
        reinstated = 0.0
        if exact.reinstated is not None and option.quoted is not None:
            reinstated = getattr(exact.reinstated, end) or 0.0
        found = premium_of(
            basis,
            ceded,
            load,
            option.quoted,
            bought=option.terms is not None,
            reinstated=reinstated,
        )
        ends.append(found.expected)
    return ends[0], ends[1]


def value_of(figure: Figure | None) -> float | None:
    """The value of a figure; None where there is none."""
    return None if figure is None else figure.value
