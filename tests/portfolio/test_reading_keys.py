"""Keys of a line that say how its file is written, from the portfolio file to the records."""

from pathlib import Path

import pytest
from folders import RECORDS, recorded_portfolio

from lossagg.errors import InputError
from lossagg.portfolio import read_portfolio

ROWS = (
    'id,date,amount\n1,2024-03-01T23:30:00Z,"12,34,567.50"\n2,2024-05-01,"2,00,000"\n'
    '3,2024-06-01,"3,00,000"\n'
)


def folder(path: Path, keys: str) -> Path:
    made = recorded_portfolio(path, RECORDS.replace("trend = 0.03", f"trend = 0.03\n{keys}"))
    (made / "losses.csv").write_text(ROWS)
    return made


def test_grouping_and_time_zone_reach_the_records(tmp_path: Path) -> None:
    keys = 'thousands = ","\ngrouping = "indian"\ntime-zone = "Asia/Kathmandu"'
    records = read_portfolio(folder(tmp_path, keys)).records["Fire"].losses
    assert str(records.reconciliation) == "3 read = 3 used + 0 excluded; 1734567.50 = 1734567.50 + 0"
    assert str(records.table.date[0]) == "2024-03-02"


@pytest.mark.parametrize(
    ("keys", "message"),
    [
        ('grouping = "lakh"', r"key 'line\[1\]\.grouping'; seen: 'lakh'"),
        ('grouping = "indian"', "there is no mark between groups; seen: 'indian'"),
        ('thousands = ","\ngrouping = "indian"\ntime-zone = "Kathmandu"', "the time zone is not known"),
    ],
)
def test_keys_that_cannot_be_used(tmp_path: Path, keys: str, message: str) -> None:
    with pytest.raises(InputError, match=message):
        read_portfolio(folder(tmp_path, keys))


def test_the_reporting_threshold_of_the_line_stands_for_rows_without_one(tmp_path: Path) -> None:
    made = recorded_portfolio(tmp_path)
    (made / "losses.csv").write_text("date,amount,threshold\n2024-01-01,5000,2000\n2023-01-01,5000,\n")
    assert read_portfolio(made).records["Fire"].losses.reconciliation.used == 2
    text = RECORDS.replace("reporting-threshold = 1000\n", "")
    (made / "portfolio.toml").write_text(text)
    with pytest.raises(InputError, match="the reporting threshold is missing where other records have one"):
        read_portfolio(made)
