"""Curves that rating systems take: loss elimination, increased limits, exposure curve, cost of layers.

All follow from one function, the expected yearly cost of events capped at an amount, C(a) = sum of the
expected count times E[min(X, a)] over the lines (Miccolis 1977, Proceedings of the Casualty Actuarial
Society 64; Bernegger 1997, ASTIN Bulletin 27(1), for the exposure curve C(r M) / C(M)).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.engines.book import Line
from lossagg.portfolio.pricing_sections import PricingSection
from lossagg.pricing.option import Option

EXPOSURE_SHARES = (0.01, 0.02, 0.05, 0.1, 0.15, 0.2, 0.25, 0.3, 0.4, 0.5, 0.6, 0.7, 0.75, 0.8, 0.9, 1.0)
MOST_AMOUNTS = 60


@dataclass(frozen=True)
class CappedCost:
    """The expected yearly cost of events capped at an amount.

    Args:
        lines: the lines together.
        event_cap: the most one event counts for; `inf` for no cap.
    """

    lines: tuple[Line, ...]
    event_cap: float = np.inf

    def __call__(self, amounts: FloatArray) -> FloatArray:
        """C(a), shape of the amounts; the last may be infinite."""
        capped = np.minimum(amounts, self.event_cap)
        total = np.zeros(capped.shape)
        for line in self.lines:
            total += (
                line.frequency.mean() * (1.0 + line.expense) * np.asarray(line.severity.limited_mean(capped))
            )
        return total

    def frequency(self, amounts: FloatArray) -> FloatArray:
        """Expected yearly number of events above each amount."""
        return np.asarray(
            sum(line.frequency.mean() * np.asarray(line.severity.sf(amounts)) for line in self.lines)
        )

    def layer(self, low: FloatArray, high: FloatArray) -> FloatArray:
        """C(high) - C(low), accurate for thin layers and far out."""
        low, high = np.minimum(low, self.event_cap), np.minimum(high, self.event_cap)
        total = np.zeros(low.shape)
        for line in self.lines:
            cost = np.asarray(line.severity.layer_mean(low, high))
            total += line.frequency.mean() * (1.0 + line.expense) * cost
        return total


def loss_elimination(cost: CappedCost, amounts: FloatArray) -> FloatArray:
    """C(d) / C(all); NaN where the mean does not exist."""
    whole = float(cost(np.array([np.inf]))[0])
    return cost(amounts) / whole if np.isfinite(whole) and whole > 0 else np.full(amounts.shape, np.nan)


def increased_limits(cost: CappedCost, amounts: FloatArray, basic: float, expense: float) -> FloatArray:
    """(C(l) / n + expense) / (C(basic) / n + expense) with n the expected number of events.

    Args:
        cost: the capped cost.
        amounts: limits.
        basic: the basic limit, whose factor is 1.
        expense: expense per event outside the limit.
    """
    count = sum(line.frequency.mean() for line in cost.lines)
    return np.asarray((cost(amounts) + count * expense) / (cost(np.array([basic])) + count * expense))


def exposure_curve(cost: CappedCost, shares: FloatArray, largest: float) -> FloatArray:
    """C(r M) / C(M): the part of the cost below a part r of the largest possible loss M."""
    return np.asarray(cost(shares * largest) / cost(np.array([largest])))


def curves_of(
    cost: CappedCost, own: Sequence[float], *, basic: float | None, expense: float, largest: float | None
) -> dict[str, Any]:
    """All curves as plain data.

    Args:
        cost: the capped cost of the lines priced.
        own: amounts of the options, which the curves pass through.
        basic: the basic limit of the increased limits; None leaves them out.
        expense: see `increased_limits`.
        largest: the largest possible loss of the exposure curve; None leaves it out.
    """
    amounts = _amounts(cost, own)
    ratios, counts = loss_elimination(cost, amounts), cost.frequency(amounts)
    bottoms = np.concatenate(([0.0], amounts[:-1]))
    layers = cost.layer(bottoms, amounts)
    starts = cost.frequency(bottoms)
    data: dict[str, Any] = {
        "loss_elimination": [
            {"amount": a, "factor": r, "excess_factor": 1.0 - r, "events_above": n}
            for a, r, n in zip(amounts.tolist(), ratios.tolist(), counts.tolist(), strict=True)
            if np.isfinite(r)
        ],
        "increased_limits": [],
        "exposure": [],
        "layers": [
            {"from": low, "to": high, "events": n, "cost": c, "rate_on_line": c / (high - low)}
            for low, high, n, c in zip(
                bottoms.tolist(), amounts.tolist(), starts.tolist(), layers.tolist(), strict=True
            )
        ],
        "basic_limit": basic,
        "basic_limit_expense": expense,
        "largest_loss": largest,
    }
    if basic is not None:
        factors = increased_limits(cost, amounts, basic, expense)
        data["increased_limits"] = [
            {"amount": a, "factor": f} for a, f in zip(amounts.tolist(), factors.tolist(), strict=True)
        ]
    if largest is not None:
        shares = np.array(EXPOSURE_SHARES)
        data["exposure"] = [
            {"share": s, "amount": s * largest, "factor": f}
            for s, f in zip(shares.tolist(), exposure_curve(cost, shares, largest).tolist(), strict=True)
        ]
    return data


def curves_of_options(options: Sequence[Option], basis: PricingSection) -> dict[str, Any]:
    """The curves of the lines that options are for, through the options' own deductibles and tops."""
    own = sorted(
        {
            amount
            for option in options
            if option.terms is not None
            for amount in (option.terms.deductible, option.terms.deductible + option.terms.limit)
            if 0 < amount < np.inf
        }
    )
    cap = np.inf if basis.event_cap is None else basis.event_cap
    return curves_of(
        CappedCost(options[0].lines, cap),
        own,
        basic=basis.basic_limit,
        expense=basis.basic_limit_expense,
        largest=basis.event_cap or max(own, default=None),
    )


def _amounts(cost: CappedCost, own: Sequence[float]) -> FloatArray:
    """Round amounts (1, 1.5, 2, 3, 5, 7 and their tens) over the range that matters, and the options' own."""
    most = max(float(line.severity.isf(1e-4)) for line in cost.lines)
    least = min(float(line.severity.isf(0.9)) for line in cost.lines)
    most = min(max([most, *own]), cost.event_cap)
    least = max(min([least, *own]), most * 1e-4, 1e-300)
    tens = 10.0 ** np.arange(np.floor(np.log10(least)), np.ceil(np.log10(most)) + 1)
    rounds = (np.array([1.0, 1.5, 2.0, 3.0, 5.0, 7.0])[:, None] * tens).ravel()
    kept = rounds[(rounds >= least) & (rounds <= most)].tolist()
    listed = sorted({a for a in own if 0 < a <= most})
    thinned = listed[:: max(1, len(listed) // MOST_AMOUNTS)]
    return np.array(sorted({*kept, *thinned, *([cost.event_cap] if cost.event_cap < np.inf else [])}))
