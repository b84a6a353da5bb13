"""The assessment as data: what `assessment.json` carries and every report reads.

A figure that does not exist, or is withheld, is None with its reason beside it; nothing in here depends
on the clock, the machine or the number of workers.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from lossagg.engines.book import Book, PlacedCover, Subject
from lossagg.engines.crosscheck import TOLERANCE, Comparison, Crosscheck
from lossagg.engines.result import AnnualLoss
from lossagg.engines.tied import annual_sum
from lossagg.errors import DoesNotExistError, EngineError, InputError
from lossagg.portfolio.cover_data import reinstatement_of, terms_of

FORMAT = "lossagg.assessment/1"
WITHHELD = "withheld: the engines disagree"
NO_MEAN = "does not exist: the mean is infinite"
NO_OWN_DATA = "no own data"
NO_VARIANCE = "does not exist: the variance is infinite"
CURVE = np.concatenate([np.geomspace(0.9, 5e-4, 60)])

Data = dict[str, Any]
Writer = Callable[[Data, Path], object]


@dataclass(frozen=True)
class Assessment:
    """A portfolio assessed: every figure with its accuracy, and the evidence.

    Attributes:
        data: the content of `assessment.json`.
        writer: what `write` calls; given by whoever read the portfolio.
    """

    data: Data
    writer: Writer | None = None

    @property
    def withheld(self) -> bool:
        """Whether the headline is withheld: engines, or records and control totals, disagree."""
        return bool(self.data["headline"]["withheld"])

    def to_dict(self) -> Data:
        """Every figure as plain numbers, text, lists and dictionaries (`assessment.json`)."""
        return self.data

    def write(self, out: str | Path) -> None:
        """Write `assessment.json`, `report.html`, `tables.xlsx` and `manifest.json` into a folder.

        Raises:
            EnvironmentFault: the folder cannot be written.
        """
        if self.writer is None:
            raise InputError(
                "this assessment has no writer", remedy="Read the portfolio with lossagg.read_portfolio."
            )
        self.writer(self.data, Path(out))

    def __repr__(self) -> str:
        headline = self.data["headline"]
        value = "withheld" if self.withheld else f"{headline['value']:,.0f}"
        label = f", {headline['label']}" if headline["label"] else ""
        return f"<Assessment of {self.data['portfolio']['name']!r}: {value} at {headline['level']:g}{label}>"


def number(value: float) -> float | None:
    """A figure for the file: None where it is infinite or undefined."""
    return float(value) if np.isfinite(value) else None


def figure(loss: AnnualLoss, measure: str, level: float | None, *, withheld: str) -> Data:
    """{value, low, high, engine, reason} of one measure; `withheld` says why it is, "" where it is not."""
    if withheld:
        return {"value": None, "low": None, "high": None, "engine": loss.engine, "reason": withheld}
    value = number(loss.measure(measure, level))
    if value is None:
        reason = NO_VARIANCE if measure == "sd" else NO_MEAN
        return {"value": None, "low": None, "high": None, "engine": loss.engine, "reason": reason}
    try:
        low, high = loss.accuracy(measure, level)
    except DoesNotExistError as error:
        return {"value": value, "low": None, "high": None, "engine": loss.engine, "reason": error.what}
    return {"value": value, "low": number(low), "high": number(high), "engine": loss.engine, "reason": None}


def levels_of(loss: AnnualLoss, levels: Sequence[float], *, withheld: str) -> list[Data]:
    """VaR and TVaR at each level."""
    return [
        {
            "level": level,
            "return_period": round(1.0 / (1.0 - level), 9),
            "var": figure(loss, "value_at_risk", level, withheld=withheld),
            "tvar": figure(loss, "tail_value_at_risk", level, withheld=withheld),
        }
        for level in levels
    ]


def subject_of(
    loss: AnnualLoss, levels: Sequence[float], *, exact: bool, withheld: str, note: str | None
) -> Data:
    """Gross or net: mean, sd, levels and the exceedance curve."""
    curve = []
    for exceedance in () if withheld else CURVE:
        var = figure(loss, "value_at_risk", 1.0 - float(exceedance), withheld="")
        curve.append(
            {"exceedance": float(exceedance), "value": var["value"], "low": var["low"], "high": var["high"]}
        )
    return {
        "mean": None if withheld else number(loss.mean()),
        "sd": None if withheld else number(loss.sd()),
        "engine": loss.engine,
        "exact": exact,
        "note": note,
        "levels": levels_of(loss, levels, withheld=withheld),
        "curve": curve,
    }


def cover_of(
    book: Book, cover: PlacedCover, loss: AnnualLoss, levels: Sequence[float], *, withheld: str
) -> Data:
    """One cover: its terms, its expected cost, and how often it attaches and exhausts."""
    terms = cover.terms
    exhaustion = _exhaustion(book, cover, loss)
    return {
        "name": cover.name,
        "terms": terms_of(terms),
        "description": cover.describe(),
        "lines": [line.name for line in book.lines if book.covers_line(cover, line.name)],
        "after": list(cover.after),
        "order": terms.order_of_operations,
        "reinstatement": None if withheld else reinstatement_of(terms, loss),
        "expected": None if withheld else number(loss.mean()),
        "sd": None if withheld else number(loss.sd()),
        "attachment_probability": None if withheld else float(loss.sf(0.0)),
        "exhaustion_probability": None if withheld or exhaustion is None else exhaustion,
        "engine": loss.engine,
        "levels": levels_of(loss, levels, withheld=withheld),
    }


def _exhaustion(book: Book, cover: PlacedCover, loss: AnnualLoss) -> float | None:
    """Probability that the year's limit is used up; without one, that some event uses up its limit.

    None where neither is limited, or where lines are tied in a way that only the simulation follows.
    """
    most = cover.terms.most_per_year
    if np.isfinite(most):
        return float(loss.sf(most * (1.0 - 1e-9)))
    if not np.isfinite(cover.terms.limit):
        return None
    events = {}
    for line in book.lines:
        paid = book.event_payment(cover, line.name)
        if paid is not None and not np.isfinite(paid.most):
            return None
        if paid is not None and paid.most > 0:
            events[line.name] = paid.scaled(1.0 / paid.most)
    try:
        compound = annual_sum(book, events)
    except EngineError:
        return None
    return float(compound.largest_sf(np.array([1.0 - 1e-12]))[0])


def crosscheck_of(check: Crosscheck) -> Data:
    """The gate's evidence."""
    return {
        "verdict": "agree" if check.agrees else "disagree",
        "summary": check.summary,
        "comparisons": [_comparison(comparison) for comparison in check.comparisons],
        "refused": [
            {"engine": engine, "subject": str(subject), "reason": reason}
            for engine, subjects in check.refused.items()
            for subject, reason in subjects.items()
        ],
    }


def _comparison(comparison: Comparison) -> Data:
    def by_engine(values: Mapping[str, Any], convert: Callable[[Any], Any]) -> Data:
        return {
            name: convert(values[name]) if name in values else None
            for name in ("fourier", "panjer", "simulation")
        }

    brackets = by_engine(comparison.brackets, lambda pair: [number(pair[0]), number(pair[1])])
    return {
        "subject": str(comparison.subject),
        "measure": comparison.measure,
        "level": comparison.level,
        "values": by_engine(comparison.values, number),
        "bracket": {name: brackets[name] for name in ("fourier", "panjer")},
        "standard_error": comparison.standard_error,
        "tolerance": TOLERANCE,
        "tests": [
            {
                "engine": test.engine,
                "reference": test.reference,
                "difference": number(test.difference),
                "allowed": number(test.allowed),
                "unit": test.unit,
                "used": number(test.used),
            }
            for test in comparison.tests
        ],
        "agrees": comparison.agrees,
        "note": comparison.note,
    }


def label_of(own_data: Mapping[str, bool]) -> str | None:
    """What a figure must be labelled with where lines it rests on had no loss of their own; None elsewhere.

    Args:
        own_data: by name of the line, False where it was observed and had no loss.
    """
    bare = [name for name, own in own_data.items() if not own]
    if not bare:
        return None
    return NO_OWN_DATA if len(bare) == len(own_data) else f"{NO_OWN_DATA} for {', '.join(bare)}"


def headline_of(
    subject: Subject,
    loss: AnnualLoss,
    level: float,
    check: Crosscheck,
    *,
    withheld: str = "",
    label: str | None = None,
) -> Data:
    """The capital figure: VaR at the capital level, and the same less the mean.

    Args:
        subject: gross or net.
        loss: its annual loss.
        level: the capital level.
        check: the crosscheck, which withholds it where the engines disagree.
        withheld: why else it is withheld, "" where nothing else does.
        label: what it must be labelled with, see `label_of`.
    """
    reason = withheld if check.agrees else check.summary
    withheld = withheld or ("" if check.agrees else WITHHELD)
    var = figure(loss, "value_at_risk", level, withheld=withheld)
    mean = None if withheld else number(loss.mean())
    return {
        "subject": subject.kind,
        "measure": "value_at_risk",
        "level": level,
        **{name: var[name] for name in ("value", "low", "high", "engine")},
        "mean": mean,
        "less_mean": None if mean is None or var["value"] is None else var["value"] - mean,
        "withheld": bool(withheld),
        "reason": reason or None,
        "label": label,
    }
