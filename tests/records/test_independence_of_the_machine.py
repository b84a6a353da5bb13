"""The same file gives the same bytes whatever the locale, the time zone and the hash seed of the process."""

import os
import subprocess
import sys
from pathlib import Path

import pytest

SCRIPT = """
import datetime as dt, json, locale, sys, time
try:
    locale.setlocale(locale.LC_ALL, "")
except locale.Error:
    pass  # the machine may lack the locale; the variable is set all the same
from lossagg.records import check_losses, prepare_losses, read_losses
table = read_losses(sys.argv[1], date_format="%d-%b-%Y")
checked = check_losses(table, valuation_date=dt.date(2025, 9, 30), currency="EUR", tolerance=0.5)
losses = prepare_losses(checked, forecast_midpoint=dt.datetime(2026, 7, 2, 12), trend=0.05)
print(json.dumps({
    "amount": losses.amount.tobytes().hex(),
    "date": [str(day) for day in losses.date],
    "years": losses.years.to_dicts(),
    "steps": [step.to_dict() for step in losses.steps],
    "findings": [finding.to_dict() for finding in losses.findings],
    "reconciliation": str(losses.reconciliation),
}))
"""


def run(path: Path, **environment: str) -> str:
    result = subprocess.run(
        [sys.executable, "-c", SCRIPT, str(path)],
        env={**os.environ, **environment},
        capture_output=True,
        text=True,
        check=True,
    )
    return result.stdout


@pytest.fixture(scope="module")
def path(tmp_path_factory: pytest.TempPathFactory) -> Path:
    rows = [f"{k * 37.5 + 0.01:.2f},{k % 28 + 1:02d}-Oct-20{k % 9 + 16},E{k % 17}" for k in range(60)]
    rows += ["10.00,31-Dec-2024,X", "10.00,31-Dec-2024,Y", "10.00,31-Dec-2024,Z", "-1,01-Mar-2024,X"]
    path = tmp_path_factory.mktemp("machine") / "losses.csv"
    path.write_text("amount,date,event\n" + "\n".join(rows) + "\n")
    return path


@pytest.mark.parametrize(
    "environment",
    [
        {"TZ": "Asia/Kathmandu", "LC_ALL": "de_DE.UTF-8", "PYTHONHASHSEED": "1"},
        {"TZ": "Pacific/Apia", "LC_ALL": "hi_IN.UTF-8", "PYTHONHASHSEED": "2"},
    ],
    ids=lambda environment: environment["LC_ALL"],
)
def test_locale_and_time_zone_change_nothing(path: Path, environment: dict[str, str]) -> None:
    assert run(path, **environment) == run(path, TZ="UTC", LC_ALL="C", PYTHONHASHSEED="0")
