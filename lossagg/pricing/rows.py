"""From the figures of the losses to the row of an option: premium, credit, costs, totals, break-even."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from lossagg.portfolio.assessment import number
from lossagg.portfolio.pricing_sections import PricingSection
from lossagg.pricing.evaluate import Exact, increased_limit_factor, retained_events
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
        premium_range: the premium at the ends of the ranges of the figures it rests on.
        costs: yearly costs beside it.
        events: expected number of events of which something is retained.
    """

    option: Option
    exact: Exact
    premium: Premium
    modelled: Premium
    premium_range: tuple[float | None, float | None]
    costs: Costs
    events: float

    @property
    def fixed(self) -> float | None:
        """What is paid whatever happens: premium, tax, costs."""
        return added(self.premium.value, self.costs.total)

    def paid(self, basis: PricingSection) -> Figure:
        """What is paid whatever happens, with the range that the premium and its tax bring."""
        if self.fixed is None or self.premium.value is None:
            return Figure(None, None, None, "", self.premium.reason)
        taxed = 1.0 + basis.premium_tax
        low, high = (
            None if end is None else self.fixed + taxed * (end - self.premium.value)
            for end in self.premium_range
        )
        return Figure(self.fixed, low, high, FORMULA)

    def tail(self) -> Figure:
        """Tail value at risk of the retained year at the farthest level of the table."""
        return self.exact.levels[WORST_LEVELS[-1]][1]

    def worst(self, level: float) -> Figure:
        """Worst year retained at a level."""
        return self.exact.levels[level][0]

    def total(self, basis: PricingSection) -> Figure:
        """Expected total cost of risk."""
        return (self.exact.mean or MISSING).joined(self.paid(basis))

    def capital_cost(self, basis: PricingSection) -> Figure:
        """Cost of capital on tail value at risk less the mean retained."""
        if basis.capital is None:
            return Figure.exact(0.0)
        tail, mean = self.exact.levels[basis.capital.level][1], self.exact.mean or MISSING
        return tail.joined(mean.scaled(-1.0)).scaled(basis.capital.rate)

    def total_with_capital(self, basis: PricingSection) -> Figure:
        """Expected total cost of risk and cost of capital: (1 - rate) mean + rate tail + what is fixed."""
        mean = self.exact.mean or MISSING
        if basis.capital is None:
            return self.total(basis)
        rate, tail = basis.capital.rate, self.exact.levels[basis.capital.level][1]
        kept = mean.scaled(1.0 - rate).joined(tail.scaled(rate))
        return kept.joined(self.paid(basis))


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
    bought = option.terms is not None
    ceded = _value(exact.ceded)
    load = risk_load_of(basis, ceded, _value(exact.ceded_sd), _value(exact.ceded_tail))
    premium = premium_of(basis, ceded, load, option.quoted, bought=bought)
    modelled = premium_of(basis, ceded, load, None, bought=bought)
    events = retained_events(option)
    secured = None if basis.collateral is None else exact.levels[basis.collateral.level][0].value
    costs = costs_of(basis, premium.value, _value(exact.mean), events, secured, bought=bought)
    return Row(option, exact, premium, modelled, _ends(option, exact, basis), costs, events)


def _ends(option: Option, exact: Exact, basis: PricingSection) -> tuple[float | None, float | None]:
    """The premium at the lower and at the upper ends of ceded loss, its spread and its tail."""
    ends = []
    for end in ("low", "high"):
        ceded, spread, tail = (
            None if found is None else getattr(found, end)
            for found in (exact.ceded, exact.ceded_sd, exact.ceded_tail)
        )
        load = risk_load_of(basis, ceded, spread, tail)
        ends.append(premium_of(basis, ceded, load, option.quoted, bought=option.terms is not None).value)
    return ends[0], ends[1]


def _value(figure: Figure | None) -> float | None:
    return None if figure is None else figure.value


def row_data(
    row: Row, base: Row, basis: PricingSection, levels: Sequence[float], gross: float
) -> dict[str, Any]:
    """The row as plain data, compared with the base option."""
    exact, option = row.exact, row.option
    mean, ceded = exact.mean or MISSING, exact.ceded or MISSING
    return {
        "name": option.name,
        "description": option.describe(),
        "terms": _terms(option),
        "bought": option.terms is not None,
        "retained": {
            "expected": mean.to_dict(),
            "sd": (exact.sd or MISSING).to_dict(),
            "cv": _ratio(_value(exact.sd), mean.value),
            "no_loss": (exact.no_loss or MISSING).to_dict(),
            "events": row.events,
            "most": number(option.most_retained),
            "levels": [
                {
                    "level": level,
                    "var": exact.levels[level][0].to_dict(),
                    "tvar": exact.levels[level][1].to_dict(),
                }
                for level in levels
            ],
        },
        "ceded": {
            "expected": ceded.to_dict(),
            "sd": (exact.ceded_sd or MISSING).to_dict(),
            "tail": None if exact.ceded_tail is None else exact.ceded_tail.to_dict(),
        },
        "loss_elimination_ratio": _eliminated(ceded.value, gross),
        "aggregate_charge": None if exact.charge is None else exact.charge.to_dict(),
        "increased_limit_factor": increased_limit_factor(
            option, basis.basic_limit, basis.basic_limit_expense
        ),
        "premium": _premium(row),
        "credit": _credit(row, base),
        "costs": {
            "collateral": row.costs.collateral,
            "claims_handling": row.costs.claims_handling,
            "premium_tax": row.costs.premium_tax,
        },
        "total": {
            "expected": row.total(basis).to_dict(),
            "capital": row.capital_cost(basis).to_dict(),
            "with_capital": row.total_with_capital(basis).to_dict(),
            "levels": [
                {"level": level, "total": row.worst(level).joined(row.paid(basis)).to_dict()}
                for level in levels
            ],
        },
        "break_even": _break_even(row, base),
    }


def _terms(option: Option) -> dict[str, Any] | None:
    terms = option.terms
    if terms is None:
        return None
    return {
        "deductible": terms.deductible,
        "limit": number(terms.limit),
        "franchise": terms.franchise,
        "share": terms.share,
        "annual_retention": terms.annual_retention,
        "annual_limit": number(terms.year_limit),
        "retained_cap": number(terms.retained_cap),
        "order": terms.order_of_operations,
    }


def _premium(row: Row) -> dict[str, Any]:
    premium, modelled = row.premium, row.modelled
    return {
        "value": premium.value,
        "source": premium.source,
        "low": row.premium_range[0],
        "high": row.premium_range[1],
        "reason": premium.reason,
        "modelled": modelled.value,
        "parts": {
            "ceded": _value(row.exact.ceded) if row.option.terms is not None else 0.0,
            "loss_adjustment": modelled.loss_adjustment,
            "fixed_expense": modelled.fixed_expense,
            "risk_load": modelled.risk_load,
            "variable": modelled.variable,
        },
    }


def _credit(row: Row, base: Row) -> dict[str, Any]:
    mine, theirs = row.premium.value, base.premium.value
    credit = None if mine is None or theirs is None else theirs - mine
    sources = {row.premium.source, base.premium.source}
    return {
        "amount": credit,
        "part": _ratio(credit, theirs),
        "source": next(iter(sources - {"none"}), "none") if len(sources - {"none"}) < 2 else "mixed",
    }


def _break_even(row: Row, base: Row) -> float | None:
    credit = _credit(row, base)["amount"]
    mine, theirs = _value(row.exact.mean), _value(base.exact.mean)
    if credit is None or mine is None or theirs is None or mine - theirs <= 1e-9 * max(mine, 1.0):
        return None
    return float(credit / (mine - theirs))


def _eliminated(ceded: float | None, gross: float) -> float | None:
    return None if ceded is None or not np.isfinite(gross) or gross <= 0 else max(1.0 - ceded / gross, 0.0)


def _ratio(part: float | None, whole: float | None) -> float | None:
    return None if part is None or not whole else part / whole
