"""Single simulated years in the assessment: those nearest to the capital figure, and any on request."""

from __future__ import annotations

import json
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np

from lossagg.engines.book import Book, Subject
from lossagg.engines.replay import Event, Payment, Replay, ReplayedYear, nearest_years
from lossagg.engines.result import AnnualLoss
from lossagg.engines.sampled import SimulatedAnnualLoss
from lossagg.errors import InputError, place
from lossagg.portfolio.assessment import FORMAT
from lossagg.portfolio.model_data import book_of
from lossagg.version import __version__

Data = dict[str, Any]
YEARS_SHOWN = 3
EVENTS_SHOWN = 12
FIRST_YEARS = 2**19
CENT = 0.005
ASSESSMENT_FILE = "assessment.json"


def years_near(
    book: Book, subject: Subject, loss: AnnualLoss, value: float, *, seed: int, years: int
) -> Data:
    """The simulated years nearest to a figure, with their events: `years_near_capital` of the assessment.

    Args:
        book: lines, covers and dependences.
        subject: whose figure it is.
        loss: its annual loss as simulated; where its years were not all kept, the nearest of the first half
            a million are found by simulating these again.
        value: the figure.
        seed: the seed of the run.
        years: how many years it simulated.
    """
    replay = Replay(book, seed, years)
    if isinstance(loss, SimulatedAnnualLoss):
        amounts = loss.annual
    else:
        amounts = replay.first_years(subject, FIRST_YEARS)
    found = nearest_years(np.arange(1, amounts.size + 1), amounts, value, YEARS_SHOWN)
    return {
        "subject": str(subject),
        "value": value,
        "years": [year_data(replay.year(number), events=EVENTS_SHOWN) for number in found],
    }


def year_data(year: ReplayedYear, *, events: int | None = None) -> Data:
    """One replayed year as plain data.

    Args:
        year: the year.
        events: how many of its events to keep, the largest; all where None. The others are summed up.
    """
    kept = sorted(year.events, key=lambda event: -event.cost)[:events]
    shown = [event for event in year.events if any(event is other for other in kept)]
    return {
        "year": year.year,
        "amounts": [{"subject": str(subject), "amount": amount} for subject, amount in year.amounts.items()],
        "factors": dict(year.factors),
        "events": [_event(event) for event in shown],
        "smaller": {
            "events": len(year.events) - len(shown),
            "amount": sum(event.cost for event in year.events) - sum(event.cost for event in shown),
        },
        "covers": [_payment(payment) for payment in year.covers],
    }


def read_assessment(path: Path) -> Data:
    """Read an assessment from its file, or from the folder that holds it.

    Raises:
        InputError: no such file, or one that is no assessment.
    """
    file = path / ASSESSMENT_FILE if path.is_dir() else path
    try:
        content = json.loads(file.read_text(encoding="utf-8"))
    except FileNotFoundError as error:
        raise InputError(
            "there is no assessment",
            where=place(file=file),
            remedy="Name a folder written by `lossagg assess`, or its assessment.json.",
        ) from error
    except (UnicodeDecodeError, json.JSONDecodeError) as error:
        raise InputError(
            f"this is not the JSON of an assessment: {error}",
            where=place(file=file),
            remedy="Name the assessment.json that `lossagg assess` wrote.",
        ) from error
    seen = content.get("format") if isinstance(content, dict) else None
    if seen != FORMAT:
        raise InputError(
            "this is not an assessment that can be replayed",
            where=place(file=file, key="format"),
            value=seen,
            remedy=f"Give an assessment of format {FORMAT!r}.",
        )
    return dict(content)


def replay_assessment(assessment: Mapping[str, Any], number: int) -> ReplayedYear:
    """Reconstruct one simulated year from the assessment alone.

    The years that the assessment keeps with their amounts are reconstructed first: where these come out
    otherwise, the assessment was changed, or another version draws other losses, and nothing is shown.

    Args:
        assessment: the content of `assessment.json`.
        number: number of the year, from 1.

    Raises:
        InputError: a year that was not simulated, an assessment without its model, or one whose own years
            do not come out again.
    """
    if "model" not in assessment:
        raise InputError(
            "the assessment does not hold its model, so no year of it can be reconstructed",
            where=place(key="model"),
            value=assessment.get("run", {}).get("version"),
            remedy="Assess the portfolio again with this version of lossagg.",
        )
    run = assessment["run"]
    replay = Replay(book_of(assessment["model"]), run["seed"], run["years"])
    year = replay.year(number)
    for kept in (assessment.get("years_near_capital") or {}).get("years", ()):
        _require_same(replay.year(kept["year"]), kept, str(run["version"]))
    return year


def _require_same(year: ReplayedYear, kept: Mapping[str, Any], version: str) -> None:
    """Check that a reconstructed year is the one the assessment keeps, to the cent."""
    again = {str(subject): amount for subject, amount in year.amounts.items()}
    for entry in kept["amounts"]:
        subject, amount = entry["subject"], float(entry["amount"])
        if not abs(again.get(subject, np.inf) - amount) <= max(CENT, 1e-12 * abs(amount)):
            raise InputError(
                f"year {year.year} comes out otherwise than the assessment has it: {subject} is "
                f"{again.get(subject, np.nan):,.2f}, not {amount:,.2f}",
                value=version,
                remedy=f"The assessment was written by lossagg {version}, this is {__version__}: replay it "
                "with that version, and make sure that its file was not changed.",
            )


def _event(event: Event) -> Data:
    return {
        "line": event.line,
        "number": event.number,
        "size": event.size,
        "cost": event.cost,
        "shock": event.shock,
        "payments": [_payment(payment) for payment in event.payments],
        "parts": [{"line": part.line, "size": part.size, "cost": part.cost} for part in event.parts],
    }


def _payment(payment: Payment) -> Data:
    return {
        "cover": payment.cover,
        "steps": [{"operation": step.operation, "amount": step.amount} for step in payment.steps],
        "paid": payment.paid,
    }
