"""Tables of dependence: what lines have in common, on what evidence, and the figures without it."""

from __future__ import annotations

from lossagg.report.cells import Absent, Cell, Column, Table
from lossagg.report.digits import percent
from lossagg.report.reading import Assessment, ranged, reasons, text_or

CASES = (
    ("Independent", "independent"),
    ("As assumed", "chosen"),
    ("Comonotonic: the sum of the lines' own figures", "comonotonic"),
    ("Worst case over all dependences", "worst"),
)
WORST = (
    "The worst case keeps every line as it is and chooses the dependence between them that makes the VaR of "
    "the total largest (rearrangement algorithm, Puccetti and Rüschendorf 2012; Embrechts, Puccetti and "
    "Rüschendorf 2013; an estimate, its range from the ends of the slices). It is no forecast: it says how "
    "much of the figure rests on the dependence assumed."
)
NOT_SUBADDITIVE = (
    "The total is above the sum of the lines' own figures. That is no error: value at risk is not "
    "subadditive, and where tails are very heavy, means infinite above all, putting lines together can cost "
    "capital instead of saving it (Embrechts, McNeil and Straumann 2002). The figure is shown as it is."
)


def assumptions(assessment: Assessment) -> Table:
    """Every dependence assumed, with its evidence."""
    rows: list[tuple[Cell, ...]] = [
        (
            entry["name"],
            entry["kind"],
            entry["description"] + (f"; {entry['change']}" if entry["change"] else ""),
            text_or(entry["evidence"], "none stated"),
        )
        for entry in assessment.get("dependence", ())
    ]
    columns = (Column("Dependence"), Column("Kind"), Column("What it says"), Column("Evidence"))
    return Table("Dependence", "Dependence between lines", columns, tuple(rows))


def correlations(assessment: Assessment) -> Table:
    """Every correlation of a copula, and the interval that the years behind it leave."""
    rows: list[tuple[Cell, ...]] = [
        (
            entry["name"],
            " and ".join(pair["lines"]),
            pair["value"],
            Absent("not stated") if entry["evidence_years"] is None else entry["evidence_years"],
            Absent("not stated") if pair["low"] is None else f"{pair['low']:.3f} to {pair['high']:.3f}",
        )
        for entry in assessment.get("dependence", ())
        for pair in entry.get("correlations", ())
    ]
    columns = (
        Column("Dependence"),
        Column("Lines"),
        Column("Correlation", "number"),
        Column("Years of data", "count"),
        Column("95% interval"),
    )
    note = (
        "The interval is what that many years of data can say of the correlation (Fisher's z). Where the "
        "years are not stated, read the correlation as a judgement: key evidence-years of the portfolio file."
    )
    return Table("Correlations", "Correlations and what is known of them", columns, tuple(rows), (note,))


def bounds(assessment: Assessment) -> Table:
    """Gross VaR at the capital level from independent lines to the worst dependence there is."""
    entry, currency = assessment.get("dependence_bounds"), assessment["portfolio"]["currency"]
    columns = (
        Column("Dependence between lines"),
        Column(f"Gross VaR, {currency}", "money", ranged=True),
        Column("against the sum of the lines", "probability"),
    )
    if not entry:
        return Table("Dependence bounds", "Dependence bounds", columns, ())
    whole = entry["comonotonic"]["value"]
    rows: list[tuple[Cell, ...]] = []
    for name, key in CASES:
        value = entry[key]["value"]
        part: Cell = Absent("n/a") if value is None or not whole else round(value / whole, 3)
        rows.append((name, ranged(entry[key]), part))
    title = f"Gross VaR at {percent(entry['level'])} from independent lines to the worst case, {currency}"
    notes = (*reasons([cell for row in rows for cell in row]), WORST)
    if entry["subadditive"] is False:
        notes = (*notes, NOT_SUBADDITIVE)
    return Table("Dependence bounds", title, columns, tuple(rows), notes)


def compared(assessment: Assessment) -> Table:
    """Value at risk with the dependence assumed, with independent lines, and without diversification."""
    currency, apart = assessment["portfolio"]["currency"], assessment.get("independent") or {}
    rows: list[tuple[Cell, ...]] = []
    for k, gross in enumerate(assessment["gross"]["levels"] if apart else ()):
        rows.append(
            (
                gross["level"],
                ranged(gross["var"]),
                ranged(apart["gross"]["levels"][k]["var"]),
                ranged(apart["sum_of_lines"][k]["var"]),
                ranged(assessment["net"]["levels"][k]["var"]),
                ranged(apart["net"]["levels"][k]["var"]),
            )
        )
    columns = (
        Column("Level", "level"),
        Column("Gross VaR as assumed", "money", ranged=True),
        Column("Gross VaR, lines independent", "money", ranged=True),
        Column("Sum of the lines' own VaR", "money", ranged=True),
        Column("Net VaR as assumed", "money", ranged=True),
        Column("Net VaR, lines independent", "money", ranged=True),
    )
    notes = (
        *reasons([cell for row in rows for cell in row]),
        "The sum of the lines' own figures gives no credit for diversification; where means are infinite it "
        "can be below the others.",
    )
    title = f"Value at risk with and without dependence, {currency}"
    return Table("Without dependence", title, columns, tuple(rows), notes if rows else ())
