"""Control totals from the portfolio file to the report: a break withholds every figure and says why."""

from pathlib import Path

import pytest
from folders import GIVEN, RECORDS, given_portfolio, recorded_portfolio

from lossagg.errors import InputError
from lossagg.portfolio import read_portfolio
from lossagg.report.page import render_report

MET = "control-total = [{ count = 61 }, { year = 2024, count = 13 }]\nfrequency"


def stated(text: str) -> str:
    return RECORDS.replace("frequency", text, 1)


@pytest.fixture(scope="module")
def broken(tmp_path_factory: pytest.TempPathFactory) -> dict:
    text = stated("control-total = [{ count = 61, amount = 190000.5, tolerance = 0.5 }]\nfrequency")
    folder = recorded_portfolio(tmp_path_factory.mktemp("broken"), text)
    return read_portfolio(folder).assess(years=10_000).to_dict()


def test_a_break_withholds_the_headline_and_every_figure(broken: dict) -> None:
    assert broken["reconciliation"]["verdict"] == "break"
    count, amount = broken["reconciliation"]["totals"]
    assert (count["line"], count["agrees"], count["used"], count["set_aside"]) == ("Fire", True, 60.0, 1.0)
    assert not amount["agrees"]
    assert amount["difference"] == amount["used"] + amount["set_aside"] - 190000.5
    headline = broken["headline"]
    assert headline["withheld"]
    assert headline["value"] is headline["mean"] is headline["less_mean"] is None
    assert headline["reason"].startswith(
        "withheld: the records do not agree with the control totals; line 'Fire', amount: difference "
    )
    assert broken["crosscheck"]["verdict"] == "agree"
    for part in (broken["gross"], broken["net"], *broken["lines"]):
        assert part["mean"] is None
        assert {level["var"]["value"] for level in part["levels"]} == {None}
    assert "control-total" in {finding["code"] for finding in broken["findings"]}


def test_the_report_shows_the_difference(broken: dict) -> None:
    page = render_report(broken)
    assert "1 OF 2 CONTROL TOTALS NOT MET" in page
    assert "the records do not agree with the control totals" in page
    assert "Control totals, EUR" in page


def test_totals_that_are_met_withhold_nothing(tmp_path: Path) -> None:
    data = read_portfolio(recorded_portfolio(tmp_path, stated(MET))).assess(years=10_000).to_dict()
    assert data["reconciliation"]["verdict"] == "agree"
    assert not data["headline"]["withheld"]
    assert "all 2 control totals met" in render_report(data)


def test_without_totals_the_report_says_that_completeness_is_not_checked(tmp_path: Path) -> None:
    data = read_portfolio(given_portfolio(tmp_path)).assess(years=10_000).to_dict()
    assert data["reconciliation"] == {"verdict": "none stated", "totals": []}
    assert "No control totals are stated" in render_report(data)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        (stated("control-total = [{ year = 2024 }]\nfrequency"), "a control total states nothing"),
        (stated("control-total = [{ counts = 61 }]\nfrequency"), "unknown key.*Did you mean 'count'"),
        (
            GIVEN.replace("frequency", "control-total = [{ count = 1 }]\nfrequency", 1),
            "needs records beside it",
        ),
    ],
)
def test_keys_that_cannot_be_used(tmp_path: Path, text: str, message: str) -> None:
    with pytest.raises(InputError, match=message):
        read_portfolio(recorded_portfolio(tmp_path, text))
