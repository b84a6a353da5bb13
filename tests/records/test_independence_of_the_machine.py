"""The same file gives the same bytes whatever the locale, the time zone and the hash seed of the process."""

import os
import shutil
import subprocess
import sys
from pathlib import Path

import pytest

SCRIPT = """
import datetime as dt, json, locale, sys, time
locale.setlocale(locale.LC_ALL, "")
conventions = locale.localeconv()
print(conventions["decimal_point"], time.strftime("%B", (2024, 5, *[1] * 7)),
      time.tzname[0], file=sys.stderr)
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


MACHINES = {
    "de_DE": ({"TZ": "Asia/Kathmandu", "PYTHONHASHSEED": "1"}, ", Mai +0545"),
    "hi_IN": ({"TZ": "Pacific/Apia", "PYTHONHASHSEED": "2"}, ". \u092e\u0908 +13"),
}


def run(path: Path, **environment: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [sys.executable, "-c", SCRIPT, str(path)],
        env={**os.environ, "PYTHONIOENCODING": "utf-8", **environment},
        capture_output=True,
        encoding="utf-8",
        check=True,
    )


def compiled_locale(name: str, folder: Path) -> dict[str, str]:
    """The variables that make a locale active, compiled here from the sources that the machine has."""
    if shutil.which("localedef") is None:
        pytest.skip("localedef is not installed: no locale but C can be made active here")
    made = folder / f"{name}.UTF-8"
    subprocess.run(["localedef", "-i", name, "-f", "UTF-8", str(made)], capture_output=True, check=False)
    if not made.exists():
        pytest.skip(f"the sources of the locale {name} are not installed (package locales)")
    return {"LOCPATH": str(folder), "LC_ALL": f"{name}.UTF-8"}


@pytest.fixture(scope="module")
def path(tmp_path_factory: pytest.TempPathFactory) -> Path:
    rows = [f"{k * 37.5 + 0.01:.2f},{k % 28 + 1:02d}-Oct-20{k % 9 + 16},E{k % 17}" for k in range(60)]
    rows += ["10.00,31-Dec-2024,X", "10.00,31-Dec-2024,Y", "10.00,31-Dec-2024,Z", "-1,01-Mar-2024,X"]
    path = tmp_path_factory.mktemp("machine") / "losses.csv"
    path.write_text("amount,date,event\n" + "\n".join(rows) + "\n")
    return path


@pytest.mark.parametrize("name", MACHINES)
def test_locale_and_time_zone_change_nothing(path: Path, tmp_path: Path, name: str) -> None:
    """The same bytes; what the process says of its locale and zone proves that they were in force."""
    environment, in_force = MACHINES[name]
    there = run(path, **environment, **compiled_locale(name, tmp_path))
    assert there.stderr.strip() == in_force
    assert there.stdout == run(path, TZ="UTC", LC_ALL="C", PYTHONHASHSEED="0").stdout
