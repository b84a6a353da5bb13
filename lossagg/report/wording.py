"""The fixed sentences of the report, so that page, workbook and console say the same."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

MEASURES = {
    "mean": "mean",
    "sd": "standard deviation",
    "value_at_risk": "value at risk",
    "tail_value_at_risk": "tail value at risk",
}

# Printed in every report. No setting removes them.
STANDING_CAUTIONS: tuple[tuple[str, str], ...] = (
    (
        "model-error",
        "Every figure is the figure of a model. The families of laws, the independence of lines and of "
        "frequency and severity, trends and thresholds are assumptions; if one is wrong, the figures are.",
    ),
    (
        "parameter-error",
        "The parameters were estimated from a limited number of losses. The ranges beside VaR and TVaR "
        "cover the arithmetic of the engines (bracket) or simulation (interval) only, not the error of "
        "the parameters, which can be many times larger.",
    ),
    (
        "extrapolation",
        "A level whose return period is longer than the records reaches beyond the data; the figure there "
        "follows from the chosen law, not from experience.",
    ),
    (
        "horizon",
        "The figures concern events of the forecast period, seen to their ultimate cost. They are not a "
        "view of how reserves for past events may run off.",
    ),
    (
        "not-an-opinion",
        "This report is not an actuarial opinion, a certification or a regulatory filing. Local rules, "
        "the wording of the contracts and licensed practice prevail over anything printed here.",
    ),
)


def headline_sentence(
    headline: Mapping[str, Any], currency: str, figure: str, period: str, level: str
) -> str:
    """What the headline means, in one sentence a committee can repeat."""
    subject = "after all covers" if headline["subject"] == "net" else "before any cover"
    chance = f"once{period.removeprefix('1')} on average"
    if headline["measure"] == "value_at_risk":
        return (
            f"In the forecast period the annual loss {subject} stays at or below {currency} {figure} with "
            f"probability {level}; it exceeds it {chance}, if the model holds."
        )
    return (
        f"In the worst years, those beyond probability {level} ({period}), the annual loss {subject} "
        f"averages {currency} {figure}, if the model holds."
    )
