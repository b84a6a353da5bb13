"""Options in the report of an assessment, and every column of one option computed from its workbook alone."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest
from openpyxl import load_workbook

import lossagg
from lossagg.pricing import price_options

TEXT = """
[portfolio]
name = "Pool"
currency = "EUR"
valuation-date = 2024-12-31

[[line]]
name = "Fire"
records = "losses.csv"
frequency = { fit = ["poisson"] }
severity = { fit = ["exponential"] }

[[cover]]
name = "Layer"
deductible = 20000

CONTROL

[pricing]
base = "full cover"
event-cap = 60000
loss-adjustment = 0.06
fixed-expense = 2000
variable-expense = 0.12
profit = 0.03
risk-load = { method = "cost-of-capital", factor = 0.08, level = 0.99 }
premium-tax = 0.05
collateral = { rate = 0.02, level = 0.9 }
claims-handling = { per-event = 100, share = 0.03 }
capital = { rate = 0.06, level = 0.99 }
basic-limit = 10000
basic-limit-expense = 50
appetite = { worst-year = 90000, level = 0.95 }
parameter-draws = 20

[[option]]
name = "full cover"

[[option]]
name = "5k, limit 20k"
deductible = 5000
limit = 20000

[[option]]
name = "5k, cap 40k"
deductible = 5000
retained-cap = 40000

[[option]]
name = "reinstated"
deductible = 5000
limit = 20000
reinstatements = 1
reinstatement-rate = 1.0
"""


def folder_with(folder: Path, control: str = "") -> Path:
    rows = ["id,date,amount", *(f"{k},{2020 + k % 5}-05-05,{700 + 331 * k}" for k in range(60))]
    (folder / "losses.csv").write_text("\n".join(rows) + "\n", encoding="utf-8")
    (folder / "portfolio.toml").write_text(TEXT.replace("CONTROL", control), encoding="utf-8")
    return folder


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return folder_with(tmp_path_factory.mktemp("with-options"))


@pytest.fixture(scope="module")
def written(folder: Path) -> Path:
    out = folder / "out"
    lossagg.read_portfolio(folder).assess(years=20_000, seed=4).write(out)
    return out


def test_the_assessment_carries_the_options(folder: Path, written: Path) -> None:
    """The same figures as the table of options of the same seed and number of years."""
    assessment = json.loads((written / "assessment.json").read_text(encoding="utf-8"))
    options = assessment["options"]
    alone = price_options(lossagg.read_portfolio(folder), years=options["years"], seed=4)
    assert options["options"] == json.loads(json.dumps(alone["options"]))
    assert options["appetite"] == json.loads(json.dumps(alone["appetite"]))
    assert "options" in {entry["code"] for entry in assessment["cautions"]}


def test_the_page_shows_table_frontier_and_curves(written: Path) -> None:
    page = (written / "report.html").read_text(encoding="utf-8")
    assert '<h3 id="options">3.1 Options of cover</h3>' in page
    assert "Expected total cost against total cost in the worst year" in page
    assert "Loss elimination, increased limits, exposure curve and layer costs" in page
    assert "Total in a 1-in-20 year" in page
    assert "4 options for Fire" in page


def test_a_portfolio_without_options_says_nothing_of_them(tmp_path: Path) -> None:
    text = TEXT[: TEXT.index("[pricing]")]
    folder_with(tmp_path)
    (tmp_path / "portfolio.toml").write_text(text.replace("CONTROL", ""), encoding="utf-8")
    assessment = lossagg.read_portfolio(tmp_path).assess(years=5_000)
    assessment.write(tmp_path / "out")
    assert assessment.data["options"] is None
    assert "3.1 Options" not in (tmp_path / "out" / "report.html").read_text(encoding="utf-8")


def test_a_withheld_headline_withholds_the_options(tmp_path: Path) -> None:
    folder_with(tmp_path, "[[line.control-total]]\ncount = 99\n")
    assessment = lossagg.read_portfolio(tmp_path).assess(years=5_000)
    assessment.write(tmp_path / "out")
    assert assessment.data["options"]["options"] == []
    page = (tmp_path / "out" / "report.html").read_text(encoding="utf-8")
    assert "No option is priced" in page
    book = load_workbook(tmp_path / "out" / "tables.xlsx")
    assert "Option retained" not in book.sheetnames


def sheet(written: Path, name: str) -> dict[str, dict[str, Any]]:
    """First column -> heading -> value, as a reader of the workbook sees them."""
    rows = list(load_workbook(written / "tables.xlsx")[name].iter_rows(min_row=2, values_only=True))
    headings = [str(heading) for heading in rows[0] if heading is not None]
    found = {}
    for row in rows[1:]:
        if row[0] is None:
            break
        found[str(row[0])] = dict(zip(headings, row, strict=False))
    return found


@pytest.mark.parametrize("name", ["5k, limit 20k", "5k, cap 40k", "reinstated"])
def test_every_column_of_an_option_from_the_workbook(written: Path, name: str) -> None:
    """With the other cells of the sheets and the loads the file states: what a buyer would check by hand."""
    kept, bought, cost, years, parts = (
        sheet(written, key)[name]
        for key in ("Option retained", "Option premium", "Option cost", "Option years", "Premium parts")
    )
    base = sheet(written, "Option premium")["full cover"]
    base_parts = sheet(written, "Premium parts")["full cover"]
    mean, ceded = kept["Expected retained"], bought["Expected ceded"]
    whole = base["Expected ceded"]  # the full cover cedes everything
    assert kept["CV"] == pytest.approx(kept["Standard deviation"] / mean)
    assert mean + ceded == pytest.approx(whole)
    assert bought["Loss elimination ratio"] == pytest.approx(1 - ceded / whole)
    load = 0.08 * (parts["TVaR 99% of ceded"] - ceded)
    assert parts["Risk load"] == pytest.approx(load)
    assert parts["Loss adjustment"] == pytest.approx(0.06 * ceded)
    needed = (1.06 * ceded + 2000 + load) / 0.85
    assert parts["Variable expense and profit"] == pytest.approx(0.15 * needed)
    again = parts["Reinstatement premium, times the initial"] if name == "reinstated" else 0.0
    premium = needed / (1 + again)
    assert bought["Premium before tax"] == pytest.approx(premium)
    assert parts["Modelled premium"] == pytest.approx(premium)
    credit = base_parts["Modelled premium"] - needed
    assert bought["Premium credit"] == pytest.approx(credit)
    assert bought["Credit, part of base premium"] == pytest.approx(credit / base_parts["Modelled premium"])
    assert bought["Credit per unit of extra retained loss"] == pytest.approx(credit / mean)
    assert cost["Reinstatement premium"] == pytest.approx(again * premium)
    assert cost["Premium tax"] == pytest.approx(0.05 * needed)
    assert cost["Collateral"] == pytest.approx(0.02 * kept["Worst year at 90%"])
    handling = 100 * parts["Events a year of which something is kept"] + 0.03 * mean
    assert cost["Claims handling"] == pytest.approx(handling)
    paid = 1.05 * needed + cost["Collateral"] + handling
    assert cost["Expected total cost"] == pytest.approx(mean + paid)
    capital = 0.06 * (kept["TVaR 99%"] - mean)
    assert cost["Cost of capital"] == pytest.approx(capital)
    assert cost["Total with capital"] == pytest.approx(mean + paid + capital)
    for period, level in (("1-in-10", "90%"), ("1-in-20", "95%"), ("1-in-100", "99%")):
        total = years[f"Total in a {period} year"]
        if name != "reinstated":  # there the premium of that year's reinstatements comes on top
            assert total == pytest.approx(kept[f"Worst year at {level}"] + paid)
        else:
            certain = paid - 1.05 * again * premium
            worst = kept[f"Worst year at {level}"] + certain
            assert worst <= total <= worst + 1.05 * premium
    if name == "5k, cap 40k":
        assert kept["Most retained in a year"] == 40_000
        plain = sheet(written, "Layer costs")
        below = sum(row["Expected cost"] for row in plain.values() if row["To"] <= 5000)
        assert bought["Charge for the cap"] == pytest.approx(below - mean)
    if name == "5k, limit 20k":
        layers = sheet(written, "Layer costs").values()
        within = sum(row["Expected cost"] for row in layers if row["From"] >= 5000 and row["To"] <= 25000)
        basic = sum(row["Expected cost"] for row in layers if row["From"] >= 5000 and row["To"] <= 15000)
        events = sheet(written, "Layer costs")["0"]["Events, a year"]
        factor = (within / events + 50) / (basic / events + 50)
        assert within == pytest.approx(ceded)
        assert bought["Increased limit factor"] == pytest.approx(factor)


def test_every_line_shows_what_is_ceded_and_retained(written: Path) -> None:
    """Ceded and retained make the line's loss; with one line the cover's cost is what is ceded of it."""
    row = sheet(written, "Line costs")["Fire"]
    assert row["Expected ceded"] + row["Expected retained"] == pytest.approx(row["Expected loss"], rel=0.02)
    assert row["Part ceded"] == pytest.approx(row["Expected ceded"] / row["Expected loss"])
    cover = sheet(written, "Covers")["Layer"]
    assert row["Expected ceded"] == pytest.approx(cover["Expected annual cost"], rel=0.05)
    levels = sheet(written, "Line cessions")["Fire"]
    assert levels["VaR of ceded"] > 0
    assert levels["Largest loss of a year"] <= levels["VaR of ceded"] + levels["VaR of retained"]
    page = (written / "report.html").read_text(encoding="utf-8")
    assert "Lines: ceded and retained" in page
