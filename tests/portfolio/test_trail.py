"""The trail: every row once, from the file to its loss; its sums are those that are reported."""

import csv
import io
from collections import Counter
from decimal import Decimal
from math import fsum
from pathlib import Path

import pandas as pd
import pytest
from folders import RECORDS, recorded_portfolio
from test_preparing_keys import HISTORY, history_portfolio

from lossagg.portfolio import read_portfolio
from lossagg.portfolio.checking import check_portfolio
from lossagg.records.trail import TEXTS
from lossagg.report.trail import trail_csv

DEMOS = Path(__file__).resolve().parents[2] / "portfolios"


def trail_of(folder: Path) -> tuple[dict, list[dict[str, str]]]:
    """The check of a portfolio, and its trail read back from the text as anyone could."""
    parts: list[pd.DataFrame] = []
    check = check_portfolio(folder, trail=parts)
    return check, list(csv.DictReader(io.StringIO(trail_csv(parts, TEXTS).decode())))


def total(rows: list[dict[str, str]], column: str) -> Decimal:
    return sum((Decimal(row[column]) for row in rows if row[column]), Decimal(0))


@pytest.fixture(scope="module", params=["harbour-pool", "regional-bank", "history", "net"])
def both(request: pytest.FixtureRequest, tmp_path_factory: pytest.TempPathFactory) -> tuple[dict, list]:
    if request.param == "history":
        # Currencies, deductibles added back, an hours window, earlier valuations, open claims developed.
        return trail_of(history_portfolio(tmp_path_factory.mktemp("history")))
    if request.param == "net":
        folder = recorded_portfolio(
            tmp_path_factory.mktemp("net"),
            RECORDS.replace("frequency", "net-of-recoveries = true\nfrequency", 1),
        )
        rows = (folder / "losses.csv").read_text().splitlines()
        rows = [rows[0] + ",recoveries", *(f"{row},{100 * (k % 20)}" for k, row in enumerate(rows[1:]))]
        text = (
            (folder / "portfolio.toml").read_text().replace('name = "From', 'tolerance = 0.9\nname = "From')
        )
        (folder / "portfolio.toml").write_text(text)
        (folder / "losses.csv").write_text("\n".join(rows) + "\n")
        return trail_of(folder)
    return trail_of(DEMOS / request.param)


def test_every_row_read_stands_once(both: tuple[dict, list]) -> None:
    check, trail = both
    assert Counter((row["file"], row["row"]) for row in trail).most_common(1)[0][1] == 1
    read = {
        entry["path"]: entry["rows"]
        for entry in check["run"]["inputs"]
        if entry["path"] in {row["file"] for row in trail}
    }
    assert Counter(row["file"] for row in trail) == read
    assert all((row["treatment"] == "used") == (row["reason"] == "") for row in trail)


def test_used_and_set_aside_add_up_to_the_reconciliation_to_the_cent(both: tuple[dict, list]) -> None:
    check, trail = both
    for line in check["lines"]:
        if not line["records"]:
            continue
        own = [row for row in trail if row["line"] == line["name"]]
        used = [row for row in own if row["treatment"] == "used"]
        aside = [row for row in own if row["treatment"] == "set aside"]
        records = line["records"]
        assert (len(own), len(used), len(aside)) == tuple(
            records[key] for key in ("read", "used", "excluded")
        )
        for rows, key in ((own, "amount_read"), (used, "amount_used"), (aside, "amount_excluded")):
            assert float(total(rows, "amount")) == records[key]
        assert float(total(own, "amount_read")) == line["steps"][0]["amount_before"]


def test_shares_add_up_to_the_losses_and_years_that_are_modelled(both: tuple[dict, list]) -> None:
    check, trail = both
    for line in check["lines"]:
        used = [row for row in trail if row["line"] == line["name"] and row["treatment"] == "used"]
        whole = fsum(float(row["trended"]) for row in used)
        assert whole == pytest.approx(fsum(year["trended_amount"] for year in line["by_year"]), abs=0.005)
        shares: dict[str, list[dict[str, str]]] = {}
        for row in used:
            shares.setdefault(row["loss"], []).append(row)
        assert sorted(map(int, shares)) == list(range(1, sum(y["losses"] for y in line["by_year"]) + 1))
        for rows in shares.values():
            amount = float(rows[0]["loss_amount"])
            assert fsum(float(row["trended"]) for row in rows) == pytest.approx(amount, rel=1e-12)
            assert {int(row["claims"]) for row in rows} == {len(rows)}


def test_the_largest_losses_of_the_check_are_found_in_the_trail_and_the_file(both: tuple[dict, list]) -> None:
    check, trail = both
    for line in check["lines"]:
        for loss in line["largest_losses"]:
            own = [r for r in trail if r["line"] == line["name"] and r["loss"] == str(loss["loss"])]
            assert [int(row["row"]) for row in own] == loss["rows"]
            assert float(total(own, "amount")) == pytest.approx(loss["recorded"], abs=1e-9)
            assert float(own[0]["loss_amount"]) == loss["amount"]
            assert loss["modelled"] * loss["trend"] == pytest.approx(loss["amount"], rel=1e-12)
        if line["largest_losses"]:
            most = max(float(r["loss_amount"]) for r in trail if r["line"] == line["name"] and r["loss"])
            assert line["largest_losses"][0]["amount"] == most


def test_a_figure_of_the_pool_leads_back_to_the_rows_of_its_file() -> None:
    """The gale of November 2021: nine rows of the file, read here without lossagg, are one loss."""
    check, _ = trail_of(DEMOS / "harbour-pool")
    quay = check["lines"][2]
    (gale,) = (loss for loss in quay["largest_losses"] if len(loss["rows"]) == 9)
    source = pd.read_csv(DEMOS / "harbour-pool" / "quay.csv")
    # Row 1 of the file are the headings.
    assert gale["recorded"] == pytest.approx(source["amount"].iloc[[row - 2 for row in gale["rows"]]].sum())
    assert source["event"].iloc[[row - 2 for row in gale["rows"]]].nunique() == 1


def test_the_trail_shows_each_change_of_an_amount(tmp_path: Path) -> None:
    check, trail = trail_of(history_portfolio(tmp_path, HISTORY))
    assert check["status"] == "usable"
    foreign = next(row for row in trail if row["currency"] == "USD" and row["treatment"] == "used")
    assert float(foreign["converted"]) != float(foreign["amount_read"])
    assert Decimal(foreign["amount"]) == Decimal(foreign["converted"]) + Decimal(foreign["deductible_added"])
    assert {row["reason"] for row in trail} == {"", "superseded"}
    assert len(read_portfolio(tmp_path).prepare()["Liability"]) == max(int(r["loss"] or 0) for r in trail)


def test_text_is_neutralised_and_prose_is_not_repeated(tmp_path: Path) -> None:
    text = RECORDS.replace("frequency", 'columns = { event = "id" }\nfrequency', 1)
    folder = recorded_portfolio(tmp_path, text)
    rows = (folder / "losses.csv").read_text().splitlines()
    rows[1] = rows[1].replace("0,", "=1+1,", 1)
    rows[2] = rows[2].replace("1,", "Jane Miller,", 1)
    (folder / "losses.csv").write_text("\n".join(rows) + "\n")
    _, trail = trail_of(folder)
    assert trail[0]["event"] == "'=1+1"
    assert trail[1]["event"] == "<text of 11 characters>"
    assert "Miller" not in str(trail)
