"""Figures of single events under an option, by the laws' own formulas."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from lossagg.engines.payment import PaymentLaw
from lossagg.errors import InputError
from lossagg.pricing.option import Option


def retained_events(option: Option) -> float:
    """Expected number of events a year of which something stays with the insured before annual terms."""
    share = 1.0 if option.terms is None else option.terms.year_share
    total = 0.0
    for line, scope, paid in zip(option.lines, option.scope, option.paid, strict=True):
        left = scope if option.terms is None else scope - paid.scaled(share)
        total += line.frequency.mean() * PaymentLaw(line.severity, left).paying
    return total


def nothing_retained(option: Option) -> float | None:
    """P(nothing retained), exactly, where no annual term decides it."""
    plan = option.retained_plan
    if plan is None or not plan.annual.is_identity:
        return None
    chance = 1.0
    for line, events in zip(option.lines, plan.events, strict=True):
        chance *= float(line.frequency.pgf(1.0 - PaymentLaw(line.severity, events).paying))
    return chance


def increased_limit_factor(option: Option, basic: float | None, expense: float) -> float | None:
    """What the option's limit costs per event against the basic limit at the same deductible."""
    if basic is None or option.terms is None or option.terms.limit == np.inf:
        return None
    try:
        basis = replace(option, terms=replace(option.terms, limit=basic))
        own, other = _per_event(option), _per_event(basis)
    except InputError:
        return None
    return (own + expense) / (other + expense) if np.isfinite(own) and other + expense > 0 else None


def _per_event(option: Option) -> float:
    count = sum(line.frequency.mean() for line in option.lines)
    pairs = zip(option.lines, option.paid, strict=True)
    return sum(line.frequency.mean() * PaymentLaw(line.severity, paid).mean for line, paid in pairs) / count
