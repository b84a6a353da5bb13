"""The value at risk beside its predictive counterpart, in which the parameters are uncertain too."""

from __future__ import annotations

from collections.abc import Sequence

from lossagg.report import digits
from lossagg.report.cells import Absent, Cell, Column, Ranged, Table, show
from lossagg.report.reading import Assessment, Entry

_NOTES = (
    "The two intervals are different errors: ten times the simulated years narrow the first to about a third "
    "and leave the second, which only more records narrow.",
    "VaR as fitted takes the estimated parameters for the true ones. The records allow others: for the "
    "predictive VaR the parameters are drawn {draws} times from the uncertainty of their estimates, and the "
    "years of all draws count alike (Gerrard & Tsanakas 2011, Risk Analysis 31). The range below it is the "
    "95 % interval from the number of draws; as they are spread evenly, it is on the wide side.",
    "The last column says how often, on the same account, a year exceeds VaR as fitted. Both take the "
    "families of the laws, the trend, the development and the dependence for right; the uncertainty of the "
    "parameters rests on large-sample theory.",
)


def predictive(assessment: Assessment) -> Table:
    """VaR as fitted and predictive by level; no rows where there is none."""
    entry, currency = assessment.get("predictive"), assessment["portfolio"]["currency"]
    columns = (
        Column("Level", "level"),
        Column("Return period", "period"),
        Column("VaR as fitted", "money"),
        Column("95 % interval by simulation"),
        Column("95 % of the parameter draws"),
        Column("Predictive VaR", "money", ranged=True),
        Column("Chance of a year beyond VaR as fitted", "probability"),
    )
    title = "Value at risk with the parameters uncertain"
    if not entry or not entry["levels"]:
        return Table("Predictive", f"{title}, {currency}", columns, ())
    rows: list[tuple[Cell, ...]] = [
        (
            row["level"],
            1.0 / (1.0 - row["level"]),
            Absent("not computed") if row["fitted"] is None else row["fitted"],
            _span(row.get("simulation")),
            _span(row["parameters"]),
            _figure(row),
            row["exceedance_of_fitted"],
        )
        for row in entry["levels"]
    ]
    notes = tuple(note.format(draws=entry["draws"]) for note in _NOTES)
    if entry["reason"]:
        notes = (*notes, f"Of gross in place of net; {entry['reason']}.")
    return Table("Predictive", f"{title}, {entry['subject']}, {currency}", columns, tuple(rows), notes)


def _span(ends: Sequence[float | None] | None) -> Cell:
    """Two ends as text, an end that does not exist told."""
    if ends is None:
        return Absent("not computed")
    low, high = ("no end" if end is None else show(end, "money").text for end in ends)
    return f"{low} to {high}"


def _figure(row: Entry) -> Cell:
    if row["predictive"] is None:
        return Absent("not computed")
    return Ranged(row["predictive"], row["low"], row["high"])


def sentence(assessment: Assessment) -> str:
    """What the uncertainty of the parameters does to the capital figure; empty where nothing is known."""
    entry, level = assessment.get("predictive"), assessment["headline"]["level"]
    if not entry:
        return ""
    row = next((row for row in entry["levels"] if row["level"] == level), None)
    if row is None or row["predictive"] is None or not row["fitted"]:
        return f"not in the figure; {entry['reason']}" if entry["reason"] else ""
    currency, shown = assessment["portfolio"]["currency"], show(_figure(row), "money")
    more = digits.chance(abs(row["predictive"] / row["fitted"] - 1), 2)
    where = "above" if row["predictive"] >= row["fitted"] else "below"
    subject = "" if entry["subject"] == assessment["headline"]["subject"] else f" {entry['subject']}"
    return (
        f"with the parameters drawn from their uncertainty the predictive value at risk{subject} is "
        f"{currency} {shown.text} ({shown.range}), {more} {where} the figure as fitted, which a year then "
        f"exceeds with probability {digits.chance(row['exceedance_of_fitted'], 2)}, "
        f"not {digits.chance(1 - level, 2)}"
    )
