"""The first page: the capital figure, what it means, and how far it can be trusted."""

from __future__ import annotations

from typing import Any

from lossagg.report import digits, tables
from lossagg.report.cells import Absent, show
from lossagg.report.reading import Assessment, Entry, doubts, engine_range_name, every_caution, years_observed
from lossagg.report.wording import MEASURES, headline_sentence

FINDING_ORDER = ("stop", "set aside", "warning", "normalised")


def headline(assessment: Assessment) -> dict[str, Any]:
    """The headline as the page shows it."""
    entry, currency = assessment["headline"], assessment["portfolio"]["currency"]
    figure = tables.totals.headline_figure(assessment)
    view = show(figure, "money")
    level, period = digits.percent(entry["level"]), digits.return_period(1 / (1 - entry["level"]))
    found = not isinstance(figure, Absent)
    return {
        "subject": "net of all covers" if entry["subject"] == "net" else "gross, before any cover",
        "measure": MEASURES[entry["measure"]],
        "level": level,
        "period": period,
        "view": view,
        "found": found,
        "withheld": entry["withheld"],
        "reason": (entry["reason"] or "").removeprefix("withheld: "),
        "range_name": engine_range_name(entry["engine"]),
        "engine": entry["engine"],
        "less_mean": show(tables.totals.less_mean(assessment), "money"),
        "sentence": headline_sentence(entry, currency, view.text, period, level) if found else "",
        "label": entry.get("label") or "",
    }


def crosscheck(assessment: Assessment) -> dict[str, Any]:
    """Verdict, comparisons and, where the engines disagree, by how much."""
    entry = assessment["crosscheck"]
    parted = [row for row in entry["comparisons"] if not row["agrees"]]
    return {
        "agrees": entry["verdict"] == "agree",
        "verdict": verdict(assessment),
        "summary": entry["summary"],
        "table": tables.evidence.crosscheck_of_totals(assessment),
        "disagreements": tables.evidence.crosscheck_rows(parted, "Disagreements", "What the engines say"),
        "spreads": [_spread(row) for row in parted],
    }


def verdict(assessment: Assessment) -> str:
    """The verdict of the crosscheck, and a warning where the capital figure took no part in it."""
    entry = assessment["crosscheck"]
    if entry["verdict"] != "agree":
        return "ENGINES DISAGREE."
    if compared_engines(assessment) >= 2:
        return "Engines agree."
    engine = assessment["headline"]["engine"]
    return (
        f"CAPITAL FIGURE NOT CROSSCHECKED: only the engine {engine} can compute it. "
        "On everything that more than one engine can compute, the engines agree."
    )


def compared_engines(assessment: Assessment) -> int:
    """How many engines computed the capital figure."""
    headline = assessment["headline"]
    for row in assessment["crosscheck"]["comparisons"]:
        if all(row[key] == headline[key] for key in ("subject", "measure", "level")):
            return sum(value is not None for value in row["values"].values())
    return 0


def _spread(row: Entry) -> str:
    """By how much the engines differ on one measure, in a sentence."""
    values = {name: value for name, value in row["values"].items() if value is not None}
    where = f"{row['subject']}, {MEASURES[row['measure']]}"
    if row["level"] is not None:
        where += f" at {digits.percent(row['level'])}"
    if len(values) < 2 or min(values.values()) <= 0:
        return f"{where}: {row['note'] or 'the engines cannot be compared'}"
    lowest, highest = min(values, key=lambda name: values[name]), max(values, key=lambda name: values[name])
    gap = digits.chance(values[highest] / values[lowest] - 1, 2)
    note = f" ({row['note']})" if row["note"] else ""
    return f"{where}: {highest} is {gap} above {lowest}{note}"


def status(assessment: Assessment) -> list[tuple[str, str, int]]:
    """How far the figure can be trusted: term, text and the section that shows more."""
    years, level = years_observed(assessment), assessment["headline"]["level"]
    return [
        ("Data", _data_status(assessment), 5),
        ("Findings", _finding_status(assessment), 6),
        ("Reach of the data", _reach(years, level), 1),
        *_doubt_status(assessment),
        *_predictive_status(assessment),
        *_option_status(assessment),
        ("Cautions", _caution_status(assessment), 7),
    ]


def _doubt_status(assessment: Assessment) -> list[tuple[str, str, int]]:
    """That means and tail values at risk may not exist; empty where nothing speaks for that."""
    text = doubts(assessment, [entry["subject"] for entry in assessment.get("alarms") or ()])
    return [("Means in doubt", text[0], 2)] if text else []


def _predictive_status(assessment: Assessment) -> list[tuple[str, str, int]]:
    """What the uncertainty of the parameters adds to the capital figure; empty where nothing is known."""
    text = tables.predictive.sentence(assessment)
    return [("Parameter uncertainty", text, 1)] if text else []


def _option_status(assessment: Assessment) -> list[tuple[str, str, int]]:
    """How many options are priced, and whether any is withheld; empty where the portfolio has none."""
    options = assessment.get("options")
    if options is None:
        return []
    if options["withheld"]:
        return [("Options", "WITHHELD with the capital figure", 3)]
    text = f"{_plural(len(options['options']), 'option')} for {', '.join(options['subject']['lines'])}"
    parted = sum(not entry["check"]["agrees"] for entry in options["options"])
    return [("Options", f"{text}; {parted} WITHHELD" if parted else text, 3)]


def _data_status(assessment: Assessment) -> str:
    recorded = [line for line in assessment["lines"] if line["records"] is not None]
    given = len(assessment["lines"]) - len(recorded)
    parts = []
    if recorded:
        kept = all(tables.records.reconciles(line["records"]) for line in recorded)
        verdict = "records reconcile" if kept else "RECORDS DO NOT RECONCILE"
        used = sum(line["records"]["used"] for line in recorded)
        parts.append(f"{verdict} for {_plural(len(recorded), 'line')}; {_plural(used, 'record')} used")
        parts.append(tables.controls.status(assessment))
    if given:
        parts.append(f"{_plural(given, 'line')} with laws given, not fitted")
    return "; ".join(parts)


def _finding_status(assessment: Assessment) -> str:
    seen = [entry["severity"] for entry in assessment["findings"]]
    counted = [f"{seen.count(kind)} {kind}" for kind in FINDING_ORDER if kind in seen]
    return ", ".join(counted) + "" if counted else "none"


def _reach(years: float | None, level: float) -> str:
    period = 1 / (1 - level)
    if years is None:
        return "no line has losses of its own"
    text = (
        f"the shortest record covers {digits.significant(years, 4)} years; "
        f"the capital level is {digits.return_period(period)}"
    )
    if period > years:
        return f"{text}, {digits.significant(period / years, 2)} times beyond the data"
    return text


def _caution_status(assessment: Assessment) -> str:
    """Each caution by name, with how many lines it concerns."""
    named = [(code.replace("-", " "), len(texts)) for code, texts in every_caution(assessment)]
    return ", ".join(name if count == 1 else f"{name} ({count})" for name, count in named)


def _plural(count: int, noun: str) -> str:
    return f"{count:,} {noun}" if count == 1 else f"{count:,} {noun}s"
