"""Tables of what speaks for and against the fits: goodness, counts, tail thresholds, influence.

Assessments written before these tests were made have no such entries; their tables are empty.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from typing import Any

from lossagg.report.cells import Absent, Cell, Column, Ranged, Table
from lossagg.report.reading import Entry, computed

NO_TEST = "not tested"
_STATISTICS = ("kolmogorov_smirnov", "anderson_darling", "upper_tail")


def goodness(lines: Sequence[Entry]) -> Table:
    """Distances of the losses from each severity candidate, with their p-values."""
    rows: list[tuple[Cell, ...]] = []
    for line in lines:
        for tried in line["severity"]["candidates"]:
            test = tried.get("goodness")
            if not test:
                continue
            cells: list[Cell] = []
            for name in _STATISTICS:
                cells += [computed(test[name]["statistic"]), _p_value(test[name], test["reason"])]
            mark = "chosen" if tried["chosen"] else ""
            rows.append((line["name"], tried["family"], *cells, test["draws"], mark))
    pairs = (("Kolmogorov-Smirnov", "p"), ("Anderson-Darling", "p"), ("Upper tail", "p"))
    columns = (
        Column("Line"),
        Column("Candidate"),
        *(Column(name, "statistic" if name != "p" else "probability") for pair in pairs for name in pair),
        Column("Draws", "count"),
        Column("Choice"),
    )
    notes = (
        "p: probability of so large a distance if the law were right, from draws of the fitted law that are "
        "fitted again; at least 1 / (draws + 1). A small p speaks against the law; a large one does not "
        "prove it.",
        "Upper tail: Anderson-Darling weighted towards the largest losses.",
    )
    return Table("Fit tests", "Do the losses fit?", columns, tuple(rows), notes)


def _p_value(test: Mapping[str, Any], reason: str | None) -> Cell:
    value = test.get("p_value")
    return Absent(NO_TEST, reason) if value is None else value


def frequency(lines: Sequence[Entry]) -> Table:
    """Overdispersion, trend, independence and goodness of the yearly counts."""
    rows: list[tuple[Cell, ...]] = []
    for line in lines:
        tests = line["frequency"].get("tests")
        if tests:
            rows += [(line["name"], *row) for row in _frequency_rows(tests)]
    columns = (Column("Line"), Column("Question"), Column("Evidence"), Column("p", "probability"))
    notes = ("A small p speaks against: Poisson variation; an unchanging rate; independence; the law.",)
    return Table("Count tests", "What the yearly counts say", columns, tuple(rows), notes)


def _frequency_rows(tests: Mapping[str, Any]) -> Iterable[tuple[Cell, ...]]:
    for name, question in (
        ("overdispersion", "More variable than Poisson?"),
        ("trend", "Does the rate per exposure change?"),
        ("size_and_number", "Do size and number move together?"),
        ("goodness", "Do the counts fit the chosen law?"),
    ):
        test = tests[name]
        if test["reason"]:
            yield question, test["reason"], Absent(NO_TEST)
        elif name == "overdispersion":
            text = f"index of dispersion {test['index']:.4g} on {test['degrees']} degrees of freedom"
            yield question, text, test["p_value"]
            text = f"likelihood ratio of the negative binomial law {test['likelihood_ratio']:.4g}"
            yield question, text, test["likelihood_ratio_p_value"]
        elif name == "trend":
            span = " to ".join(
                "unknown" if test[end] is None else f"{100 * test[end]:+.1f} %" for end in ("low", "high")
            )
            text = f"{100 * test['growth']:+.1f} % a year (95 % interval {span})"
            yield question, text.replace("-0.0 %", "0.0 %").replace("-", "−"), test["p_value"]
        elif name == "size_and_number":
            yield question, f"rank correlation {test['correlation']:+.2f}".replace("-", "−"), test["p_value"]
        else:
            yield question, f"Pearson statistic {test['pearson']:.4g}", test["pearson_p_value"]


def tail_rules(lines: Sequence[Entry], currency: str) -> Table:
    """The threshold each rule chooses, and the interval of the chosen law's tail."""
    rows: list[tuple[Cell, ...]] = []
    for line in lines:
        for rule in (line.get("tail") or {}).get("rules", ()):
            chosen = rule["threshold"]
            place: Cell = Absent("none") if chosen is None else chosen
            rows.append((line["name"], rule["rule"], place, rule["excesses"], rule["reason"]))
    columns = (
        Column("Line"),
        Column("Rule"),
        Column("Threshold", "money"),
        Column("Losses above", "count"),
        Column("How it came to it"),
    )
    notes = (
        "Sequential goodness of fit: Bader, Yan and Zhang 2018. Minimum distance: Clauset, Shalizi and "
        "Newman 2009. Two rules that disagree are a finding: see the sensitivity to the threshold.",
    )
    return Table("Tail rules", f"Where the tail begins, {currency}", columns, tuple(rows), notes)


def tail_points(lines: Sequence[Entry], currency: str) -> Table:
    """Shape, mean excess and Hill's estimate at each threshold."""
    rows: list[tuple[Cell, ...]] = []
    for line in lines:
        for point in (line.get("tail") or {}).get("points", ()):
            rows.append(
                (
                    line["name"],
                    point["threshold"],
                    point["excesses"],
                    Ranged(point["shape"], point["low"], point["high"]),
                    point["hill"],
                    point["mean_excess"],
                    Absent(NO_TEST) if point["p_value"] is None else point["p_value"],
                )
            )
    columns = (
        Column("Line"),
        Column("Threshold", "money"),
        Column("Losses above", "count"),
        Column("Shape", "statistic", ranged=True),
        Column("Hill", "statistic"),
        Column("Mean excess", "money"),
        Column("p", "probability"),
    )
    notes = (
        "Shape of the generalized Pareto law with its 95 % profile-likelihood interval: the variance is "
        "infinite from 1/2, the mean from 1 on.",
    )
    return Table("Tail", f"The tail by threshold, {currency}", columns, tuple(rows), notes)


def parameter_error(lines: Sequence[Entry], currency: str) -> Table:
    """The line's value at risk with the error of its parameters, and beside it that of its calculation."""
    rows: list[tuple[Cell, ...]] = []
    for line in lines:
        found = line.get("parameter_error")
        if not found:
            continue
        value, (low, high) = found["value_at_risk"], found["bracket"]
        sure = Ranged(value, found["low"], found["high"])
        error: Cell = Absent("not computed", found["reason"])
        if found["standard_error"] is not None:
            error = found["standard_error"]
        rows.append((line["name"], line["level"], sure, error, Ranged(value, low, high)))
    columns = (
        Column("Line"),
        Column("Level", "level"),
        Column("Value at risk, parameters uncertain", "money", ranged=True),
        Column("Standard error", "statistic"),
        Column("Value at risk, calculation uncertain", "money", ranged=True),
    )
    notes = (
        "Left: 95 % interval of the error of the parameters, by the delta method, given that the laws are "
        "right; above a third of the figure a standard error is beyond what the method can follow. Right: "
        "guaranteed bracket of the calculation with the parameters as fitted. More simulated "
        "years or a finer lattice narrow the second, only more records the first.",
        "The figure is that at the estimated parameters. That the next year also draws its parameters makes "
        "a year this bad more likely than the level says.",
    )
    return Table("Parameter error", f"How sure the value at risk is, {currency}", columns, tuple(rows), notes)


def size_quantiles(lines: Sequence[Entry], currency: str) -> Table:
    """The size of one loss by level, as fitted and with the parameters uncertain."""
    rows: list[tuple[Cell, ...]] = []
    for line in lines:
        for row in line.get("size_quantiles") or ():
            method = "exact" if row["exact"] else f"average over {row['draws']} laws"
            rows.append((line["name"], row["level"], row["fitted"], row["predictive"], method))
    columns = (
        Column("Line"),
        Column("Level", "level"),
        Column("Size as fitted", "money"),
        Column("Predictive size", "money"),
        Column("Predictive by"),
    )
    notes = (
        "Of the losses above the reporting threshold, where there is one. "
        "A further loss exceeds the size as fitted more often than its level says, because parameters are "
        "estimates; the predictive size allows for that (Gerrard & Tsanakas 2011, Risk Analysis 31). Exact "
        "for lognormal losses that are complete; otherwise as good as large-sample theory.",
    )
    return Table("Size by level", f"How large a loss may be, {currency}", columns, tuple(rows), notes)


def sensitivity(lines: Sequence[Entry], currency: str) -> Table:
    """The line's value at risk with the tail begun at neighbouring thresholds."""
    rows: list[tuple[Cell, ...]] = []
    for line in lines:
        for row in line.get("sensitivity") or ():
            name = row["basis"].replace("-", "−")
            amount: Cell = "" if row["threshold"] is None else row["threshold"]
            shape: Cell = "" if row["shape"] is None else row["shape"]
            rows.append((line["name"], name, amount, shape, *_moved(row)))
    columns = (
        Column("Line"),
        Column("Tail"),
        Column("Threshold", "money"),
        Column("Shape", "statistic"),
        Column("Value at risk", "money"),
        Column("Change", "text"),
    )
    notes = (
        "From the threshold on, the tail gives way to the generalized Pareto law fitted to the losses above "
        "it; below, the fitted law stays. From here: where the splice of the fit lies, else where the first "
        "rule that chose begins; the steps are those of the table of the tail.",
    )
    return Table("Sensitivity", f"What if the tail begins elsewhere, {currency}", columns, tuple(rows), notes)


def influence(lines: Sequence[Entry], currency: str) -> Table:
    """The line's value at risk without each of its largest losses, and with one more."""
    rows: list[tuple[Cell, ...]] = []
    for line in lines:
        for row in line.get("influence") or ():
            amount: Cell = "" if row["amount"] is None else row["amount"]
            rows.append((line["name"], row["change"], amount, *_moved(row)))
    columns = (
        Column("Line"),
        Column("Records"),
        Column("Loss", "money"),
        Column("Value at risk", "money"),
        Column("Change", "text"),
    )
    notes = (
        "Each row fits frequency and severity of the line again and computes its annual loss by the Fourier "
        "engine. A size yet to come: exceeded once in twice as many losses by the fitted law.",
    )
    return Table("Influence", f"What single losses do, {currency}", columns, tuple(rows), notes)


def _moved(row: Mapping[str, Any]) -> tuple[Cell, Cell]:
    if row["value_at_risk"] is None:
        return Absent("not computed", row["reason"]), ""
    relative = row["relative"]
    return row["value_at_risk"], "" if relative is None else f"{100 * relative:+.1f} %".replace("-", "−")
