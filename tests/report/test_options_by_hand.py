"""Every column of the table of options, computed again from what `lossagg price` writes and nothing else.

The reader has options.csv, curves.csv, draws.csv, the premium parts of options.xlsx, the file of simulated
years and the loads stated in the portfolio file. What is a formula must agree to rounding; what the exact
engine computed must agree with the years within four standard errors.
"""

from __future__ import annotations

import csv
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
from openpyxl import load_workbook
from pool_with_options import folder_with
from typer.testing import CliRunner

from lossagg.commands.app import build_app

YEARS = 60_000
NAMES = ("5k, limit 20k", "5k, cap 40k", "reinstated", "quoted", "nothing bought")
LEVELS = {"90%": 0.9, "95%": 0.95, "99%": 0.99}
PERIODS = {"1-in-10": "90%", "1-in-20": "95%", "1-in-100": "99%"}
DEDUCTIBLE, LIMIT = 5_000.0, 20_000.0  # of the option whose limit factor is computed


class Written:
    """What the reader has."""

    def __init__(self, out: Path, years: Path) -> None:
        self.options = pd.read_csv(out / "options.csv", index_col="Option")
        self.draws = pd.read_csv(out / "draws.csv")
        self.years = pd.read_parquet(years)
        text = (out / "curves.csv").read_text(encoding="utf-8")
        blocks = {block.splitlines()[0]: block.splitlines()[1:] for block in text.split("\n\n")}
        layers = next(lines for title, lines in blocks.items() if "Expected cost of layers" in title)
        self.layers = [{k: float(v) for k, v in row.items()} for row in csv.DictReader(layers)]
        rows = list(load_workbook(out / "options.xlsx")["Premium parts"].iter_rows(values_only=True))
        headings = rows[1]
        self.parts = {str(r[0]): dict(zip(headings, r, strict=True)) for r in rows[2:] if r[0] is not None}

    def layer(self, low: float, high: float) -> float:
        """Expected cost of a layer, added up from those of the table."""
        return sum(row["Expected cost"] for row in self.layers if row["From"] >= low and row["To"] <= high)


@pytest.fixture(scope="module")
def written(tmp_path_factory: pytest.TempPathFactory) -> Written:
    folder = folder_with(tmp_path_factory.mktemp("by-hand"))
    years, out = folder / "years.parquet", folder / "out"
    settings = ["--out", str(out), "--years", str(YEARS), "--seed", "4", "--annual", str(years)]
    result = CliRunner().invoke(build_app(), ["price", str(folder), *settings])
    assert result.exit_code == 0, result.output
    return Written(out, years)


def test_a_file_of_years_that_cannot_be_is_refused_first(tmp_path: Path) -> None:
    folder = folder_with(tmp_path)
    settings = ["--out", str(tmp_path / "out"), "--annual", str(tmp_path / "years.csv")]
    result = CliRunner().invoke(build_app(), ["price", str(folder), *settings])
    assert result.exit_code == 2
    assert "must end in .parquet" in result.stderr
    assert not (tmp_path / "out").exists()


def near_mean(found: float, sample: np.ndarray) -> None:
    """A mean within four standard errors of that of the years."""
    assert abs(found - sample.mean()) <= 4 * sample.std() / np.sqrt(sample.size) + 1e-9 * abs(found)


def test_the_years_add_up(written: Written) -> None:
    """What an option keeps and cedes makes the loss of the year, in every year."""
    years = written.years
    assert years["year"].tolist() == list(range(YEARS))
    for name in written.options.index:
        whole = years[f"retained {name}"] + years[f"ceded {name}"]
        np.testing.assert_allclose(whole, years["loss"], rtol=1e-9, atol=1e-6)


@pytest.mark.parametrize("name", NAMES)
def test_every_column_of_an_option(written: Written, name: str) -> None:
    """Heading by heading; a heading nobody computes again fails the test."""
    row, parts = written.options.loc[name], written.parts[name]
    base, base_parts = written.options.loc["full cover"], written.parts["full cover"]
    left = {str(column) for column in written.options.columns}

    def cell(heading: str) -> Any:
        left.difference_update({heading, f"{heading}, low", f"{heading}, high"})
        return row[heading]

    def same(heading: str, value: float) -> None:
        assert cell(heading) == pytest.approx(value, rel=1e-9, abs=1e-6), heading

    def blank(heading: str) -> None:
        assert pd.isna(cell(heading)), heading

    bought = name != "nothing bought"
    quoted = name == "quoted"
    kept = written.years[f"retained {name}"].to_numpy()
    paid = written.years[f"ceded {name}"].to_numpy()

    # What is kept.
    mean, sd = cell("Expected retained"), cell("Standard deviation")
    near_mean(mean, kept)
    near_mean(sd**2, (kept - mean) ** 2)
    same("CV", sd / mean)
    near_mean(cell("Years with nothing retained"), (kept == 0.0).astype(float))
    worst = {text: cell(f"Worst year at {text}") for text in LEVELS}
    for text, level in LEVELS.items():
        error = 4 * np.sqrt(level * (1 - level) / YEARS)
        low, high = row[f"Worst year at {text}, low"], row[f"Worst year at {text}, high"]
        assert np.mean(kept > high) <= 1 - level + error
        assert np.mean(kept >= low) >= 1 - level - error
    tail = cell("TVaR 99%")
    excess = np.maximum(kept - worst["99%"], 0.0)
    near_mean((tail - worst["99%"]) * 0.01, excess)
    most = cell("Most retained in a year")
    if name == "5k, cap 40k":
        assert float(most) == kept.max() == 40_000.0
    else:
        assert most == "unlimited"

    # What is bought.
    ceded = cell("Expected ceded")
    near_mean(ceded, paid)
    whole = base["Expected ceded"]  # the full cover cedes everything
    assert mean + ceded == pytest.approx(whole)
    same("Loss elimination ratio", 1 - ceded / whole)
    if name == "5k, cap 40k":
        same("Charge for the cap", written.layer(0.0, DEDUCTIBLE) - mean)
    else:
        blank("Charge for the cap")
    if name == "5k, limit 20k":
        events = next(layer["Events, a year"] for layer in written.layers if layer["From"] == 0.0)
        limited, basic = (
            written.layer(DEDUCTIBLE, DEDUCTIBLE + limit) / events + 50 for limit in (LIMIT, 10_000.0)
        )
        same("Increased limit factor", limited / basic)
    elif name == "reinstated":
        assert (
            cell("Increased limit factor") == written.options.loc["5k, limit 20k", "Increased limit factor"]
        )
    else:
        blank("Increased limit factor")
    load = 0.08 * (parts["TVaR 99% of ceded"] - ceded) if bought else 0.0
    needed = (1.06 * ceded + 2000 + load) / 0.85 if bought else 0.0
    again = parts["Reinstatement premium, times the initial"] if name == "reinstated" else 0.0
    premium = 150_000.0 if quoted else needed / (1 + again)
    if bought:
        threshold = np.quantile(paid, 0.99, method="higher")
        near_mean((parts["TVaR 99% of ceded"] - threshold) * 0.01, np.maximum(paid - threshold, 0.0))
    same("Premium before tax", premium)
    assert cell("Premium is") == ("quoted" if quoted else "modelled" if bought else "none")
    in_all = premium * (1 + again)  # with the reinstatement premium expected
    credit = base_parts["Modelled premium"] - in_all
    same("Premium credit", credit)
    same("Credit, part of base premium", credit / base_parts["Modelled premium"])
    cell("Credit is")
    same("Credit per unit of extra retained loss", credit / mean)

    # What it costs.
    same("Reinstatement premium", again * premium)
    if name == "reinstated":
        limit = paid.max() / 2  # one reinstatement: the cover pays at most twice its limit
        assert limit == pytest.approx(LIMIT)
        near_mean(again, np.minimum(paid, limit) / limit)
    tax = 0.05 * in_all
    same("Premium tax", tax)
    collateral = 0.02 * worst["90%"] if bought else 0.0
    same("Collateral", collateral)
    handling = 100 * parts["Events a year of which something is kept"] + 0.03 * mean
    same("Claims handling", handling)
    total = cell("Expected total cost")
    assert total == pytest.approx(mean + in_all + tax + collateral + handling)
    capital = cell("Cost of capital")
    assert capital == pytest.approx(0.06 * (tail - mean))
    same("Total with capital", total + capital)
    year_costs = costs(written, name)
    near_mean(total, year_costs)
    for period, text in PERIODS.items():
        heading = f"Total in a {period} year"
        in_bad_year, error = cell(heading), 4 * np.sqrt(LEVELS[text] * (1 - LEVELS[text]) / YEARS)
        if name != "reinstated":
            assert in_bad_year == pytest.approx(worst[text] + total - mean)
        assert np.mean(year_costs > row[f"{heading}, high"]) <= 1 - LEVELS[text] + error
        assert np.mean(year_costs >= row[f"{heading}, low"]) >= 1 - LEVELS[text] - error
    theirs = costs(written, "full cover")
    assert cell("Years in which it costs less than the base") == np.mean(year_costs < theirs - 1e-9 * theirs)
    others = [other for other in written.options.index if dominates(written, other, name)]
    shown = cell("Dominated by")
    if others:
        assert shown == "; ".join(others)
    else:
        assert pd.isna(shown) or shown.startswith("not in every draw")
    assert not left


def costs(written: Written, name: str) -> np.ndarray:
    """What an option costs in each simulated year, as the note under the table says."""
    row = written.options.loc[name]
    fixed = row["Expected total cost"] - row["Expected retained"]
    kept, paid = (written.years[f"{kind} {name}"].to_numpy() for kind in ("retained", "ceded"))
    if name != "reinstated":
        return np.asarray(kept + fixed)
    certain = fixed - 1.05 * row["Reinstatement premium"]
    return np.asarray(kept + certain + 1.05 * row["Premium before tax"] * np.minimum(paid, LIMIT) / LIMIT)


def dominates(written: Written, other: str, name: str) -> bool:
    """Whether an option costs no more than another on average, in every bad year and in the mean of the
    worst hundredth, at the estimates and in every draw; one whose worst years are simulated takes no part."""
    return (
        other != name
        and "reinstated" not in (other, name)
        and all(
            (theirs <= own * (1 + 1e-9)).all() and (theirs < own * (1 - 1e-9)).any()
            for own, theirs in zip(positions(written, name), positions(written, other), strict=True)
        )
    )


def positions(written: Written, name: str) -> list[np.ndarray]:
    """What dominance compares: at the estimates first, then per draw."""
    row, draws = written.options.loc[name], written.draws[written.draws["Option"] == name]
    fixed = row["Expected total cost"] - row["Expected retained"]
    columns = ["Expected retained", *(f"Worst year at {text}" for text in LEVELS), "TVaR 99%"]
    return [fixed + part[columns].to_numpy(dtype=float) for part in (row, *(d for _, d in draws.iterrows()))]
