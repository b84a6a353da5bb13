"""Reading an assessment: from its entries to cells, with every missing number given its right words.

`null` in an assessment never means zero. It means that a number does not exist (an infinite mean),
was withheld (the engines disagree), was not computed (outside an engine's domain) or that a term is
not there (no limit). Which of these it is follows from the entry and from the reason beside it.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Any

from lossagg.report.cells import Absent, Cell, Estimated, Ranged, clean
from lossagg.report.wording import STANDING_CAUTIONS

Entry = Mapping[str, Any]
Assessment = Mapping[str, Any]

FORMAT = "lossagg.assessment/1"
EXACT_ENGINES = ("fourier", "panjer")
DOES_NOT_EXIST = "does not exist"
WITHHELD = "withheld"
NOT_COMPUTED = "not computed"
DOUBT = "†"
NO_INTERVAL = "the accuracy of this figure cannot be stated"


def absent(reason: str | None) -> Absent:
    """The words for a missing number, from the reason beside it."""
    if reason is None:
        return Absent(DOES_NOT_EXIST)
    for words in (WITHHELD, NOT_COMPUTED):
        if reason.startswith(words):
            return Absent(words, reason if reason != words else None)
    return Absent(DOES_NOT_EXIST, reason if reason != DOES_NOT_EXIST else None)


def missing(assessment: Assessment) -> Absent:
    """The words for a missing moment: withheld when the headline is, else it does not exist."""
    return Absent(WITHHELD if assessment["headline"]["withheld"] else DOES_NOT_EXIST)


def computed(value: float | None) -> Cell:
    """A number, or the words that it was not computed."""
    return Absent(NOT_COMPUTED) if value is None else value


def text_or(value: object, words: str) -> Cell:
    """A text, or `words` where there is none."""
    return Absent(words) if value in (None, "") else str(value)


def ranged(figure: Entry) -> Cell:
    """A figure of an assessment with its range, or why it is missing."""
    if figure.get("value") is None:
        return absent(figure.get("reason"))
    low, high = figure.get("low"), figure.get("high")
    if low is None or high is None:
        return Ranged(figure["value"], low, high, figure.get("reason") or NO_INTERVAL)
    return Ranged(figure["value"], low, high)


def doubted(assessment: Assessment, subject: str) -> tuple[str, ...]:
    """The lines whose losses do not rule out that the mean of a subject is infinite."""
    for entry in assessment.get("alarms") or ():
        if entry["subject"] == subject:
            return tuple(entry["lines"])
    return ()


def marked(cell: Cell, assessment: Assessment, subject: str) -> Cell:
    """A mean or tail value at risk with a mark where it may not exist."""
    if isinstance(cell, Ranged | Estimated) and doubted(assessment, subject):
        return replace(cell, mark=DOUBT)
    return cell


def doubts(assessment: Assessment, subjects: Sequence[str]) -> tuple[str, ...]:
    """What the mark stands for, at the foot of a table of these subjects; empty where nothing is marked."""
    lines = dict.fromkeys(line for subject in subjects for line in doubted(assessment, subject))
    if not lines:
        return ()
    return (
        f"{DOUBT} The losses of {', '.join(clean(line) for line in lines)} do not rule out an infinite mean: "
        "the 95 % interval of the tail index reaches 1. The figure is that of the fitted law; lean on it "
        "only under a limit.",
    )


def moment(assessment: Assessment, subject: str, measure: str, value: float | None, engine: str) -> Cell:
    """A mean or standard deviation with the accuracy that the crosscheck states for it.

    Args:
        assessment: the whole assessment.
        subject: "gross", "net", "line NAME" or "cover NAME", as in the crosscheck.
        measure: "mean" or "sd".
        value: the figure, `None` where there is none.
        engine: the engine it comes from.
    """
    return marked(_moment(assessment, subject, measure, value, engine), assessment, subject)


def _moment(assessment: Assessment, subject: str, measure: str, value: float | None, engine: str) -> Cell:
    if value is None:
        return missing(assessment)
    for row in assessment["crosscheck"]["comparisons"]:
        if row["subject"] != subject or row["measure"] != measure:
            continue
        low, high = row["bracket"].get(engine) or (None, None)
        if low is not None and high is not None and low <= value <= high:
            return Ranged(value, low, high)
        if engine not in EXACT_ENGINES and row["standard_error"] is not None:
            return Estimated(value, row["standard_error"])
        if engine not in EXACT_ENGINES:
            return Ranged(value, None, None, NO_INTERVAL)
    return Estimated(value, None)


def chance(value: float | None, engine: str, years: int, missing: Absent) -> Cell:
    """A probability of one simulated or computed year; none seen in a simulation is not zero."""
    if value is None:
        return missing
    if engine in EXACT_ENGINES or not years:
        return Estimated(value, None)
    if value == 0:
        return Absent(f"none in {years:,} years")
    return Estimated(value, (value * (1 - value) / years) ** 0.5)


def engine_range_name(engine: str) -> str:
    """What the range of an engine is: a guaranteed bracket or a statistical interval."""
    return "guaranteed bracket" if engine in EXACT_ENGINES else "95% interval"


def reasons(cells: Sequence[Cell]) -> tuple[str, ...]:
    """The reasons of absent cells and ranges, each once, in order: the foot of a table."""
    found = [_footnote(cell) for cell in cells if isinstance(cell, (Absent, Ranged)) and cell.reason]
    return tuple(dict.fromkeys(found))


def _footnote(cell: Absent | Ranged) -> str:
    return f"no interval: {cell.reason}" if isinstance(cell, Ranged) else str(cell.reason)


def years_observed(assessment: Assessment) -> float | None:
    """Years in the shortest record behind the total, or `None` when no line has losses of its own.

    The shortest record decides, because the total can be supported by data only where all its
    lines are. Years without a single loss support no size.
    """
    spans = [
        sum(row["fraction"] for row in line["by_year"])
        for line in assessment["lines"]
        if any(row["losses"] for row in line["by_year"])
    ]
    return min(spans) if spans else None


def every_caution(assessment: Assessment) -> list[tuple[str, tuple[str, ...]]]:
    """Code and texts of every caution: those of the assessment first, then the standing ones.

    A standing caution is left to the assessment where it brings its own under the same code.
    """
    found: dict[str, tuple[str, ...]] = {}
    for entry in assessment["cautions"]:
        found[entry["code"]] = (*found.get(entry["code"], ()), entry["message"])
    standing = dict(STANDING_CAUTIONS)
    own = [(code, texts) for code, texts in found.items() if code not in standing]
    return own + [(code, found.get(code, (text,))) for code, text in standing.items()]
