"""The key `previous`: the records of the quarter before, from the portfolio file to the check and the run."""

from pathlib import Path

import pytest
from folders import GIVEN, RECORDS, recorded_portfolio

from lossagg.errors import InputError
from lossagg.portfolio import read_portfolio
from lossagg.portfolio.checking import check_portfolio
from lossagg.records import RecordsError
from lossagg.report.checking import printed_tables


def following(folder: Path, more: str = "") -> Path:
    """A portfolio with claims, and the file of the quarter before, which lacks the last ten of them."""
    key = f'columns = {{ claim = "id" }}\nprevious = {{ records = "q3/losses.csv"{more} }}\nfrequency'
    folder = recorded_portfolio(folder, RECORDS.replace("frequency", key, 1))
    rows = (folder / "losses.csv").read_text().splitlines()
    (folder / "q3").mkdir()
    (folder / "q3" / "losses.csv").write_text("\n".join(rows[:51]) + "\n")
    return folder


def test_records_that_continue_those_before_are_compared_and_used(tmp_path: Path) -> None:
    folder = following(tmp_path)
    check = check_portfolio(folder)
    assert check["status"] == "usable"
    previous = check["lines"][0]["previous"]
    assert (previous["earlier"], previous["claims"], previous["new"], previous["vanished"]) == (50, 61, 11, 0)
    assert "Since the previous quarter, EUR" in {table.title for table in printed_tables(check)}
    assert [entry["path"] for entry in check["run"]["inputs"]][:3] == [
        "portfolio.toml",
        "losses.csv",
        "q3/losses.csv",
    ]
    assert len(read_portfolio(folder).prepare()["Fire"]) == 60


def test_the_same_file_again_stops_check_and_run(tmp_path: Path) -> None:
    folder = following(tmp_path)
    (folder / "losses.csv").write_bytes((folder / "q3" / "losses.csv").read_bytes())
    (stop,) = (found for found in check_portfolio(folder)["findings"] if found["severity"] == "stop")
    assert stop["code"] == "same-records"
    assert "q3/losses.csv, handed in again" in stop["message"]
    with pytest.raises(RecordsError, match="handed in again"):
        read_portfolio(folder).prepare()
    confirmed = following(tmp_path / "confirmed", ", unchanged = true")
    (confirmed / "losses.csv").write_bytes((confirmed / "q3" / "losses.csv").read_bytes())
    assert check_portfolio(confirmed)["status"] == "usable"
    prepared = read_portfolio(confirmed).prepare()["Fire"]
    assert "same-records" in {found.code for found in prepared.findings}


def test_vanished_claims_stop_beyond_the_tolerance_of_the_portfolio_file(tmp_path: Path) -> None:
    for name, more, status in (("a", "", "stopped"), ("b", ", tolerance = 0.3", "usable")):
        folder = following(tmp_path / name, more)
        rows = (folder / "losses.csv").read_text().splitlines()
        (folder / "losses.csv").write_text("\n".join(rows[:1] + rows[9:]) + "\n")
        check = check_portfolio(folder)
        assert check["status"] == status
        assert [found["code"] for found in check["findings"]].count("vanished-claim") == 8
        assert check["lines"][0]["records"]["read"] == 53


@pytest.mark.parametrize(
    ("text", "message"),
    [
        (
            GIVEN.replace("frequency", 'previous = { records = "x.csv" }\nfrequency', 1),
            "the previous quarter needs records",
        ),
        (
            RECORDS.replace("frequency", 'previous = { records = "../x.csv" }\nfrequency', 1),
            "must lie in its folder.*previous.records",
        ),
        (
            RECORDS.replace("frequency", 'previous = { record = "x.csv" }\nfrequency', 1),
            "unknown key|missing key",
        ),
        (
            RECORDS.replace("frequency", 'previous = { records = "x", largest-fall = 90 }\nfrequency', 1),
            "largest-fall",
        ),
    ],
)
def test_keys_that_cannot_be_used(tmp_path: Path, text: str, message: str) -> None:
    with pytest.raises(InputError, match=message):
        read_portfolio(recorded_portfolio(tmp_path, text))
