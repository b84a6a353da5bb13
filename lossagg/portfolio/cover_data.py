"""The terms of a cover as plain data, for `assessment.json`."""

from __future__ import annotations

from typing import Any

import numpy as np

from lossagg.cover import Cover
from lossagg.engines.reinstated import reinstated_premium
from lossagg.engines.result import AnnualLoss


def terms_of(terms: Cover) -> dict[str, Any]:
    """Every term by its name; None where it is not stated or without limit."""
    surplus, corridor, clause = terms.surplus, terms.corridor, terms.reinstatements
    return {
        "deductible": terms.deductible,
        "limit": _limit(terms.limit),
        "franchise": terms.franchise,
        "share": terms.share,
        "annual_retention": terms.annual_retention,
        "annual_limit": _limit(terms.year_limit),
        "retained_cap": _limit(terms.retained_cap),
        "disappears_at": _limit(terms.disappears_at),
        "limit_includes_deductible": terms.limit_includes_deductible,
        "self_insured": terms.self_insured,
        "surplus": None if surplus is None else {"kept_line": surplus.kept_line, "lines": surplus.lines},
        "corridor": None
        if corridor is None
        else {"low": corridor.low, "high": _limit(corridor.high), "share": corridor.share},
        "reinstatements": None if clause is None else clause.number,
        "reinstatement_rates": None if clause is None else list(clause.each),
        "expense_basis": terms.expense_basis,
        "order": list(terms.order),
    }


def reinstatement_of(terms: Cover, loss: AnnualLoss) -> dict[str, float] | None:
    """Pure initial and reinstatement premium; None without paid reinstatements or without a mean."""
    if terms.reinstatements is None or not terms.reinstatements.paid or not np.isfinite(loss.mean()):
        return None
    premium = reinstated_premium(loss, terms)
    return {
        "initial_premium": premium.initial,
        "reinstatement_premium": premium.reinstatement,
        "fraction": premium.fraction,
    }


def _limit(value: float) -> float | None:
    return float(value) if np.isfinite(value) else None
