"""`lossagg check`: finds what is planted, reconciles, never stops at the first fault, models nothing."""

from __future__ import annotations

import json
import shutil
import subprocess
import sys
import time
from pathlib import Path

import pytest
from folders import GIVEN, RECORDS, given_portfolio, recorded_portfolio
from typer.testing import CliRunner

from lossagg.commands.app import build_app
from lossagg.errors import InputError, place
from lossagg.portfolio.checking import _stop

ROOT = Path(__file__).resolve().parents[2]
DEMOS = ROOT / "portfolios"


def run(*arguments: object):
    return CliRunner().invoke(build_app(), [str(argument) for argument in arguments], prog_name="lossagg")


def checked(folder: Path) -> dict:
    return json.loads(run("check", folder, "--json").output)


def codes(check: dict, severity: str) -> list[str]:
    return [found["code"] for found in check["findings"] if found["severity"] == severity]


def test_the_planted_faults_of_the_pool_are_explained_with_place_value_and_remedy() -> None:
    check = checked(DEMOS / "harbour-pool")
    assert check["format"] == "lossagg.check/1"
    assert check["status"] == "usable"
    aside = {
        (f["file"], f["row"], f["code"], f["value"])
        for f in check["findings"]
        if f["severity"] == "set aside"
    }
    assert {
        ("hull.xlsx", 636, "totals-row", "28292537.69"),
        ("crew.csv", 211, "negative-amount", "-44987.28"),
        ("crew.csv", 423, "duplicate-row", "C2020-0082"),
        ("quay.csv", 173, "future-date", "2026-02-21"),
        ("liability.csv", 633, "missing-amount", "n/a"),
    } <= aside
    assert all(found["message"] and found["remedy"] for found in check["findings"])
    order = ["stop", "set aside", "warning", "normalised"]
    places = [order.index(found["severity"]) for found in check["findings"]]
    assert places == sorted(places)
    for line in check["lines"]:
        counts = line["records"]
        assert counts["read"] == counts["used"] + counts["excluded"]
        assert counts["amount_read"] == pytest.approx(counts["amount_used"] + counts["amount_excluded"])
        # Ten years support nine in ten: 1 - 1/10.
        assert line["window"]["supported_level"] == pytest.approx(0.9)
    liability = check["lines"][3]
    assert liability["development"]
    assert liability["by_year"][-1]["ultimate_losses"] == pytest.approx(213 * 1.046)


def test_the_bank_is_explained_on_the_console() -> None:
    result = run("check", DEMOS / "regional-bank")
    assert result.exit_code == 0, result.output
    for text in (
        "5 set aside",
        "losses.csv, row 1883, column Gross loss",
        "-12600",
        "Give recoveries in their own column",
        "Reconciliation of the records, EUR",
        "Losses by year, EUR",
        "Level supported",
        "no records: laws given",
    ):
        assert text in result.output


def test_files_and_json_are_the_same_twice_and_an_earlier_check_is_replaced(tmp_path: Path) -> None:
    folder, out = recorded_portfolio(tmp_path / "one"), tmp_path / "out"
    assert run("check", folder, "--out", out).exit_code == 0
    first = {path.name: path.read_bytes() for path in out.iterdir()}
    assert set(first) == {"check.json", "check.html", "trail.csv", "manifest.json"}
    assert run("check", folder, "--out", out).exit_code == 0
    for name in ("check.json", "check.html"):
        assert (out / name).read_bytes() == first[name]
    assert json.loads(first["check.json"]) == checked(folder)
    page = first["check.html"].decode()
    assert "missing-amount" in page
    assert "Losses by year" in page
    assert "<script" not in page


def test_every_line_that_stops_is_named_at_once(tmp_path: Path) -> None:
    """A line that cannot be read hides neither the faults nor the figures of the next."""
    other = RECORDS[RECORDS.index("[[line]]") :]
    text = RECORDS + other.replace('"Fire"', '"Theft"').replace("losses.csv", "thefts.csv")
    text += other.replace('"Fire"', '"Flood"').replace("losses.csv", "floods.csv")
    folder = recorded_portfolio(tmp_path / "one", text)
    (folder / "thefts.csv").write_text("date,amount\n2024-01-02,abc\n2024-02-02,5000\n")
    result = run("check", folder)
    check = checked(folder)
    assert result.exit_code == 2
    assert check["status"] == "stopped"
    stops = {(f["code"], f["file"], f["row"]) for f in check["findings"] if f["severity"] == "stop"}
    assert ("number-form", "thefts.csv", 2) in stops
    assert len(stops) == 2
    assert "floods.csv" in result.output
    # The line that can be read is reconciled, though it shares its exposure with those that cannot.
    assert check["lines"][0]["records"]["read"] == 61
    assert "missing-amount" in codes(check, "set aside")
    assert "cannot be assessed" in result.output


def test_a_year_without_exposure_stops_but_the_records_stay_reconciled(tmp_path: Path) -> None:
    folder = recorded_portfolio(tmp_path / "one")
    (folder / "exposure.csv").write_text("year,exposure\n2020,100\n2021,100\n2023,100\n2024,100\n")
    check = checked(folder)
    assert check["status"] == "stopped"
    assert check["lines"][0]["records"]["read"] == 61
    assert "missing-amount" in codes(check, "set aside")
    (folder / "exposure.csv").unlink()
    check = checked(folder)
    assert codes(check, "stop") == ["file"]
    assert check["lines"][0]["records"]["read"] == 61


@pytest.mark.parametrize(
    ("wrong", "right", "said"),
    [
        ('family = "exponential"', 'family = "exponental"', "exponential"),
        ("mean = 4 }", "mean = -4 }", "frequency"),
        ("deductible = 10000", "deductibel = 10000", "deductible"),
        ('name = "Theft"', 'name = "Fire"', "same name"),
    ],
)
def test_faults_of_the_portfolio_file_stop(tmp_path: Path, wrong: str, right: str, said: str) -> None:
    assert wrong in GIVEN
    folder = given_portfolio(tmp_path / "one", GIVEN.replace(wrong, right))
    result = run("check", folder)
    assert result.exit_code == 2
    assert said in result.output


def test_a_family_that_cannot_be_fitted_stops_before_any_fit(tmp_path: Path) -> None:
    folder = recorded_portfolio(tmp_path / "one", RECORDS.replace('["lognormal"', '["lognormall"'))
    assert codes(checked(folder), "stop") == ["portfolio-file"]


def test_control_totals_that_are_not_met_are_told_apart(tmp_path: Path) -> None:
    met = RECORDS + "control-total = [{ count = 61 }]\n"
    folder = recorded_portfolio(tmp_path / "met", met)
    assert run("check", folder).exit_code == 0
    assert checked(folder)["reconciliation"]["verdict"] == "agree"
    folder = recorded_portfolio(tmp_path / "broken", met.replace("61", "64"))
    result = run("check", folder)
    assert result.exit_code == 1
    assert "no figure would be printed" in result.output
    assert checked(folder)["reconciliation"]["totals"][0]["difference"] == -3


def test_a_hundred_portfolios_one_bad_within_a_minute(tmp_path: Path) -> None:
    first = recorded_portfolio(tmp_path / "all" / "p000")
    for k in range(1, 100):
        copy = shutil.copytree(first, tmp_path / "all" / f"p{k:03}")
        (copy / "portfolio.toml").write_text(RECORDS.replace("From records", f"Portfolio {k}"))
    (tmp_path / "all" / "p000" / "portfolio.toml").write_text("not a portfolio")
    (tmp_path / "all" / "p050" / "losses.csv").unlink()
    began = time.process_time()
    result = run("check", tmp_path / "all", "--out", tmp_path / "out")
    assert time.process_time() - began < 60
    assert result.exit_code == 1
    assert "98 usable, 2 stopped" in result.output
    assert "p000: findings" in result.output
    assert "there is no such file" in result.output
    check = json.loads((tmp_path / "out" / "check.json").read_text())
    assert [part["folder"] for part in check["portfolios"]] == [f"p{k:03}" for k in range(100)]


@pytest.mark.parametrize(
    ("options", "message"),
    [
        ('[pricing]\nlines = ["Fier"]\n', "options are for lines of the portfolio, each named once"),
        ('[pricing]\nbase = "none"\n[[option]]\nname = "A"\n', "the base is no option of the table"),
        ('[[option]]\nname = "A"\n[[option]]\nname = "A"\nlimit = 5\n', "two options have the same name"),
        ('[[option]]\nname = "A"\nretained-cap = 5\n', "retained"),
        ("[option-grid]\ndeductibles = [100]\nlimits = [50, 0]\n", "greater than 0"),
    ],
)
def test_options_are_checked_as_far_as_they_can_be_without_a_model(
    tmp_path: Path, options: str, message: str
) -> None:
    check = checked(recorded_portfolio(tmp_path, RECORDS + options))
    assert check["status"] == "stopped"
    (stop,) = (found for found in check["findings"] if found["severity"] == "stop")
    assert message in stop["message"]
    assert stop["remedy"]


def test_a_portfolio_that_breaks_the_check_itself_stops_no_other(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    from lossagg.portfolio import checking

    check = checking.check_portfolio

    def breaking(path: Path, **options: object) -> dict:
        if path.name == "a":
            raise IndexError("planted")
        return check(path, **options)

    monkeypatch.setattr(checking, "check_portfolio", breaking)
    for name in ("a", "b"):
        recorded_portfolio(tmp_path / name, RECORDS.replace("From records", name))
    result = run("check", tmp_path)
    assert result.exit_code == 1
    assert "1 usable, 1 stopped" in result.output
    assert "unexpected IndexError" in result.output


def test_another_kind_of_result_is_not_replaced(tmp_path: Path) -> None:
    folder, out = recorded_portfolio(tmp_path / "one"), tmp_path / "out"
    assert run("check", folder, "--out", out).exit_code == 0
    assert run("check", folder, "--out", folder).exit_code == 2
    (out / "mine.txt").write_text("mine")
    assert run("check", folder, "--out", out).exit_code == 2
    assert (out / "mine.txt").read_text() == "mine"


def test_where_there_is_no_portfolio_it_says_so(tmp_path: Path) -> None:
    (tmp_path / "empty").mkdir()
    assert run("check", tmp_path / "empty").exit_code == 2
    assert run("check", tmp_path / "nowhere").exit_code == 2


def test_checking_loads_no_engine(tmp_path: Path) -> None:
    folder = recorded_portfolio(tmp_path / "one")
    code = (
        "import sys, lossagg.commands as c\n"
        f"sys.argv = ['lossagg', 'check', {str(folder)!r}, '--out', {str(tmp_path / 'out')!r}]\n"
        "try:\n    c.main()\nexcept SystemExit:\n    pass\n"
        "print('LOADED', sorted({'numba', 'matplotlib', 'scipy.stats'} & set(sys.modules)))\n"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=False)
    assert "LOADED []" in done.stdout, done.stdout + done.stderr


@pytest.mark.parametrize(
    ("where", "file", "sheet", "row", "column"),
    [
        (place(file="a.csv", row=3, column="it's"), "a.csv", None, 3, "it's"),
        (place(file="a, row 7.xlsx", sheet="x, row 2", row=1), "a, row 7.xlsx", "x, row 2", 1, None),
        (place(file="a.csv", column="b\\n\"c'"), "a.csv", None, None, "b\\n\"c'"),
        (
            place(file="portfolio.toml", key="line[1].records"),
            "portfolio.toml, key 'line[1].records'",
            *[None] * 3,
        ),
        (place(file="a.csv", row=4) + ", line 9", "a.csv, row 4, line 9", *[None] * 3),
        (None, "portfolio.toml", *[None] * 3),
    ],
)
def test_what_stops_carries_file_sheet_row_and_column_apart(where, file, sheet, row, column) -> None:
    finding = _stop(InputError("wrong", where=where), "file", None)
    assert (finding.file, finding.sheet, finding.row, finding.column) == (file, sheet, row, column)
    assert where is None or finding.where == where
