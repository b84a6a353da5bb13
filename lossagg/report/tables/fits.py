"""Tables of the fits: parameters, candidates, and the numbers behind the fit figures."""

from __future__ import annotations

from collections.abc import Sequence

from lossagg.report.cells import Absent, Cell, Column, Estimated, Ranged, Table
from lossagg.report.reading import Entry, computed
from lossagg.report.tables.lines import GIVEN, law_text

LAWS = (("frequency", "Frequency"), ("severity", "Severity"))


def parameters(lines: Sequence[Entry]) -> Table:
    """Every parameter with its standard error, one row each."""
    rows: list[tuple[Cell, ...]] = []
    for line in lines:
        for key, title in LAWS:
            law = line[key]
            errors, intervals = law["standard_errors"] or {}, law.get("intervals") or {}
            for name, value in law["parameters"].items():
                error = errors.get(name)
                known = error if error else Absent(_no_error(law))
                low, high = intervals.get(name, (None, None))
                own: Cell = Estimated(value, error) if low is None else Ranged(value, low, high)
                rows.append((line["name"], title, law["family"], name, own, known, law["source"]))
    columns = (
        Column("Line"),
        Column("Law of"),
        Column("Family"),
        Column("Parameter"),
        Column("Value", "number", ranged=True),
        Column("Standard error", "statistic"),
        Column("Source"),
    )
    notes = (
        "Below a value: its 95 % interval from the standard error, on the logarithmic scale where only "
        "positive values make sense. It tells the error of the parameter, given that the law is right.",
        *(f"{line['name']}: {line['label']}." for line in lines if line.get("label")),
    )
    return Table("Parameters", "Parameters", columns, tuple(rows), notes if any(rows) else ())


def _no_error(law: Entry) -> str:
    if law.get("bound"):
        return f"{law['bound']['level']:.0%} upper bound, not estimated"
    return GIVEN if law["source"] == "given" else "fixed, not estimated"


def observed(lines: Sequence[Entry], currency: str) -> Table:
    """The recorded losses in figures, before any law."""
    rows = []
    for line in lines:
        found = line["severity"].get("observed")
        if found:
            shape = (computed(found[name]) for name in ("skewness", "kurtosis"))
            amounts = (found[name] for name in ("mean", "median", "sd"))
            rows.append(
                (line["name"], found["losses"], *amounts, *shape, found["largest"], found["largest_share"])
            )
    columns = (
        Column("Line"),
        Column("Losses", "count"),
        Column("Mean", "money"),
        Column("Median", "money"),
        Column("Standard deviation", "money"),
        Column("Skewness", "statistic"),
        Column("Kurtosis", "statistic"),
        Column("Largest", "money"),
        Column("Its share of all", "probability"),
    )
    notes = ("Events as prepared, trended; limits and thresholds not corrected for. Normal kurtosis: 3.",)
    return Table("Observed sizes", f"The losses before any law, {currency}", columns, tuple(rows), notes)


def estimates(lines: Sequence[Entry]) -> Table:
    """The parameters by a bootstrap that refits, by moments and by percentiles, beside those used."""
    rows: list[tuple[Cell, ...]] = []
    reasons: list[str] = []
    for line in lines:
        for key, title in LAWS:
            found = (line.get("estimates") or {}).get(key)
            if not found:
                continue
            used = next(tried for tried in line[key]["candidates"] if tried["chosen"])
            for name, value in used["parameters"].items():
                if name not in found["intervals"] and name not in found["moments"]:
                    continue
                low, high = found["intervals"].get(name, (None, None))
                others = (found["moments"].get(name), found["percentiles"].get(name))
                cells = tuple(Absent("none") if other is None else other for other in others)
                own: Cell = value if low is None else Ranged(value, low, high)
                rows.append((line["name"], title, name, own, found["draws"], *cells))
            told = [reason.rstrip(".") for reason in found["reasons"]]
            reasons += [f"{line['name']}, {title.lower()}: {reason}." for reason in told]
    columns = (
        Column("Line"),
        Column("Law of"),
        Column("Parameter"),
        Column("Maximum likelihood", "statistic", ranged=True),
        Column("Draws", "count"),
        Column("Moments", "statistic"),
        Column("Percentiles", "statistic"),
    )
    notes = (
        "Below the estimate: 95 % of the estimates from draws of the fitted law that are fitted again. "
        "Moments and percentiles are for comparison only: far apart, they tell of a law that does not fit or "
        "of one loss that decides. Frequency: per unit of exposure.",
        *dict.fromkeys(reasons),
    )
    return Table("Estimates", "The parameters by other routes", columns, tuple(rows), notes)


def candidates(lines: Sequence[Entry]) -> Table:
    """The families tried, with log-likelihood and information criteria; the chosen one is marked."""
    rows: list[tuple[Cell, ...]] = []
    for line in lines:
        for key, title in LAWS:
            for tried in line[key]["candidates"]:
                mark = "chosen" if tried["chosen"] else ""
                if tried.get("refused"):
                    mark = f"refused: {tried['refused']}"
                likelihood = (tried["log_likelihood"], tried["aic"], tried["bic"])
                cells = tuple(computed(value) for value in likelihood)
                rows.append((line["name"], title, law_text(tried), *cells, mark))
    columns = (
        Column("Line"),
        Column("Law of"),
        Column("Candidate"),
        Column("Log-likelihood", "amount"),
        Column("AIC", "amount"),
        Column("BIC", "amount"),
        Column("Choice"),
    )
    notes = (
        "AIC and BIC: lower is better. They compare candidates fitted to the same losses only.",
        "Frequency candidates as fitted: with an exposure, their mean is per unit of exposure.",
    )
    return Table("Candidates", "Candidates", columns, tuple(rows), notes)


def survival(lines: Sequence[Entry], currency: str) -> Table:
    """Observed and fitted probability that a loss exceeds an amount."""
    rows = tuple(
        (
            line["name"],
            point["amount"],
            point["empirical"],
            point["fitted"],
            computed(point.get("low")),
            computed(point.get("high")),
        )
        for line in lines
        if line["fit"]
        for point in line["fit"]["survival"]
    )
    columns = (
        Column("Line"),
        Column("Amount", "amount"),
        Column("Observed exceedance", "probability"),
        Column("Fitted exceedance", "probability"),
        Column("Low", "probability"),
        Column("High", "probability"),
    )
    return Table("Fit survival", f"Size of loss: observed and fitted exceedance, {currency}", columns, rows)


def quantiles(lines: Sequence[Entry], currency: str) -> Table:
    """Observed losses against the fitted quantiles of the same rank."""
    rows = tuple(
        (line["name"], point["observed"], point["fitted"])
        for line in lines
        if line["fit"]
        for point in line["fit"]["quantiles"]
    )
    columns = (Column("Line"), Column("Observed", "amount"), Column("Fitted", "amount"))
    return Table("Fit quantiles", f"Size of loss: observed and fitted quantiles, {currency}", columns, rows)


def counts(lines: Sequence[Entry]) -> Table:
    """Observed number of losses by year against the fitted law."""
    rows = tuple(
        (line["name"], str(point["year"]), point["observed"], point["fitted"], point["low"], point["high"])
        for line in lines
        if line["fit"]
        for point in line["fit"]["counts"]
    )
    columns = (
        Column("Line"),
        Column("Year"),
        Column("Observed", "count"),
        Column("Fitted", "number"),
        Column("Low", "number"),
        Column("High", "number"),
    )
    return Table("Fit counts", "Losses by year: observed and fitted", columns, rows)
