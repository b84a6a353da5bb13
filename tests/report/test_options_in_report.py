"""Options in the report of an assessment."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest
from openpyxl import load_workbook
from pool_with_options import TEXT, folder_with

import lossagg
from lossagg.pricing import price_options
from lossagg.report import write_options


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
    assert "6 options for Fire" in page


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


def test_the_workbook_has_the_sheets_of_the_option_table(folder: Path, written: Path) -> None:
    """Cell by cell what `price` writes for the same years and seed."""
    alone = price_options(lossagg.read_portfolio(folder), years=20_000, seed=4)
    write_options(alone, folder / "priced")
    whole, own = (load_workbook(f) for f in (written / "tables.xlsx", folder / "priced" / "options.xlsx"))
    assert len(own.sheetnames) > 10
    for name in own.sheetnames:
        cells = [[tuple(row) for row in book[name].iter_rows(values_only=True)] for book in (whole, own)]
        assert cells[0] == cells[1], name


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
