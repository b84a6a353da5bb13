"""The row of an option as plain data: what `options.json` and the assessment carry."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np

from lossagg.portfolio.assessment import number
from lossagg.pricing.event_figures import increased_limit_factor
from lossagg.pricing.figure import Figure
from lossagg.pricing.option import Option
from lossagg.pricing.rows import MISSING, Row, value_of


def row_data(row: Row, base: Row, levels: Sequence[float], gross: float) -> dict[str, Any]:
    """The row as plain data, compared with the base option."""
    exact, option, basis = row.exact, row.option, row.basis
    mean, ceded = exact.mean or MISSING, exact.ceded or MISSING
    return {
        "name": option.name,
        "description": option.describe(),
        "terms": _terms(option),
        "bought": option.terms is not None,
        "retained": {
            "expected": mean.to_dict(),
            "sd": (exact.sd or MISSING).to_dict(),
            "cv": _ratio(value_of(exact.sd), mean.value),
            "cv_range": _ratio_range(exact.sd or MISSING, mean),
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
            "reinstatement": row.costs.reinstatement,
        },
        "total": {
            "expected": row.total().to_dict(),
            "capital": row.capital_cost().to_dict(),
            "with_capital": row.total_with_capital().to_dict(),
            "levels": [{"level": level, "total": row.worst_total(level).to_dict()} for level in levels],
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
        "reinstatements": None if terms.reinstatements is None else terms.reinstatements.number,
        "reinstatement_rates": None if terms.reinstatements is None else list(terms.reinstatements.each),
        "order": terms.order_of_operations,
    }


def _premium(row: Row) -> dict[str, Any]:
    premium, modelled, reinstated = row.premium, row.modelled, row.exact.reinstated
    low, high = row.premium_range
    if reinstated is not None:  # the initial premium is least where most is paid again
        low = None if low is None or reinstated.high is None else low / (1.0 + reinstated.high)
        high = None if high is None or reinstated.low is None else high / (1.0 + reinstated.low)
    return {
        "value": premium.value,
        "source": premium.source,
        "low": low if premium.source != "quoted" else premium.value,
        "high": high if premium.source != "quoted" else premium.value,
        "reason": premium.reason,
        "modelled": modelled.value,
        "reinstatement": None
        if reinstated is None
        else {
            "fraction": reinstated.to_dict(),
            "expected": premium.reinstatement,
            "most": None
            if premium.value is None or row.option.reinstated is None
            else premium.value * row.option.reinstated.most,
        },
        "parts": {
            "ceded": value_of(row.exact.ceded) if row.option.terms is not None else 0.0,
            "loss_adjustment": modelled.loss_adjustment,
            "fixed_expense": modelled.fixed_expense,
            "risk_load": modelled.risk_load,
            "variable": modelled.variable,
        },
    }


def _credit(row: Row, base: Row) -> dict[str, Any]:
    """What the option saves of the base premium, reinstatement premium expected included on both sides."""
    mine, theirs = row.premium.expected, base.premium.expected
    credit = None if mine is None or theirs is None else theirs - mine
    sources = {row.premium.source, base.premium.source}
    return {
        "amount": credit,
        "part": _ratio(credit, theirs),
        "source": next(iter(sources - {"none"}), "none") if len(sources - {"none"}) < 2 else "mixed",
    }


def _break_even(row: Row, base: Row) -> float | None:
    credit = _credit(row, base)["amount"]
    mine, theirs = value_of(row.exact.mean), value_of(base.exact.mean)
    if credit is None or mine is None or theirs is None or mine - theirs <= 1e-9 * max(mine, 1.0):
        return None
    return float(credit / (mine - theirs))


def _eliminated(ceded: float | None, gross: float) -> float | None:
    return None if ceded is None or not np.isfinite(gross) or gross <= 0 else max(1.0 - ceded / gross, 0.0)


def _ratio(part: float | None, whole: float | None) -> float | None:
    return None if part is None or not whole else part / whole


def _ratio_range(part: Figure, whole: Figure) -> list[float] | None:
    """The least and the largest ratio that the ranges allow."""
    if part.low is None or part.high is None or not whole.low or not whole.high:
        return None
    return [part.low / whole.high, part.high / whole.low]
