"""The key `counts`: claims by year beside the records, from the portfolio file to the check and the run."""

from pathlib import Path

import pytest
from folders import GIVEN, RECORDS, recorded_portfolio

from lossagg.errors import InputError
from lossagg.portfolio import read_portfolio
from lossagg.portfolio.checking import check_portfolio
from lossagg.records import RecordsError

KEY = 'counts = "n.csv"\ncounts-columns = { count = "claims" }\nfrequency'
AGREE = "year,claims\n2020,12\n2021,12\n2022,12\n2023,12\n2024,13\n"


def counted(folder: Path, counts: str, text: str = RECORDS.replace("frequency", KEY, 1)) -> Path:
    recorded_portfolio(folder, text)
    (folder / "n.csv").write_text(counts)
    return folder


def test_agreeing_counts_are_an_input_like_others(tmp_path: Path) -> None:
    folder = counted(tmp_path, AGREE)
    check = check_portfolio(folder)
    assert check["status"] == "usable"
    assert {"path": "n.csv", "rows": 5}.items() <= check["run"]["inputs"][-1].items()
    assert len(read_portfolio(folder).prepare()["Fire"]) == 60


def test_disagreeing_counts_stop_check_and_run_and_leave_the_reconciliation(tmp_path: Path) -> None:
    folder = counted(tmp_path, AGREE.replace("2022,12", "2022,20"))
    check = check_portfolio(folder)
    assert check["status"] == "stopped"
    (stop,) = (found for found in check["findings"] if found["severity"] == "stop")
    assert (stop["code"], stop["file"], stop["row"], stop["value"]) == ("counts-disagree", "n.csv", 4, "20")
    assert check["lines"][0]["records"]["read"] == 61
    with pytest.raises(RecordsError, match=r"the counts say 20 claims of 2022, .* holds 12"):
        read_portfolio(folder).prepare()


@pytest.mark.parametrize(
    ("text", "message"),
    [
        (GIVEN.replace("frequency", 'counts = "n.csv"\nfrequency', 1), "a file of counts needs records"),
        (RECORDS.replace("frequency", 'counts-columns = { count = "n" }\nfrequency', 1), "needs counts"),
        (RECORDS.replace("frequency", 'counts = "absent.csv"\nfrequency', 1), "no such file.*key 'counts'"),
    ],
)
def test_keys_that_cannot_be_used(tmp_path: Path, text: str, message: str) -> None:
    with pytest.raises(InputError, match=message):
        read_portfolio(counted(tmp_path, AGREE, text))
