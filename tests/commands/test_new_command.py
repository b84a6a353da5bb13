"""`lossagg new`: a folder that `lossagg check` takes as it is, and every assumption said."""

from __future__ import annotations

import tomllib
from pathlib import Path

import pytest
from typer.testing import CliRunner

from lossagg.commands.app import build_app

DEMOS = Path(__file__).resolve().parents[2] / "portfolios"


def run(*arguments: object):
    return CliRunner().invoke(build_app(), [str(argument) for argument in arguments], prog_name="lossagg")


@pytest.mark.parametrize(
    ("file", "more"),
    [
        ("harbour-pool/crew.csv", ()),
        ("harbour-pool/quay.csv", ()),
        ("harbour-pool/liability.csv", ()),
        ("harbour-pool/hull.xlsx", ("--sheet", "Hull claims")),
        ("regional-bank/losses.csv", ()),
    ],
)
def test_a_check_takes_what_was_started(tmp_path: Path, file: str, more: tuple[str, ...]) -> None:
    folder = tmp_path / "new pool"
    result = run("new", folder, "--from", DEMOS / file, *more)
    assert result.exit_code == 0, result.output
    assert "can be assessed" in result.output
    assert (folder / Path(file).name).read_bytes() == (DEMOS / file).read_bytes()
    text = (folder / "portfolio.toml").read_text()
    assert tomllib.loads(text)["portfolio"]["name"] == "new pool"
    assert text.count("CONFIRM") >= 5
    assert run("check", folder).exit_code == 0
    for key in ("currency", "valuation-date", "columns.amount", "first-year", "trend", "exposure"):
        assert key in result.output


def test_a_parquet_file_starts_one_too(tmp_path: Path) -> None:
    import pandas as pd

    days = pd.to_datetime(["2023-02-01", "2024-03-01", "2024-12-30"]).date
    pd.DataFrame({"Loss Date": days, "Loss Amount": [10.5, 20.0, 30.25]}).to_parquet(tmp_path / "t.parquet")
    assert run("new", tmp_path / "n", "--from", tmp_path / "t.parquet").exit_code == 0
    assert run("check", tmp_path / "n").exit_code == 0


def test_what_is_ambiguous_stands_commented_and_is_said(tmp_path: Path) -> None:
    (tmp_path / "t.csv").write_text("Amount;Date\n1,234;03/04/2024\n2,500;05/06/2024\n")
    result = run("new", tmp_path / "n", "--from", tmp_path / "t.csv")
    assert result.exit_code == 0
    assert result.output.count("AMBIGUOUS") == 2
    assert "cannot be assessed" in result.output
    path = tmp_path / "n" / "portfolio.toml"
    text = path.read_text()
    assert '# date-format = "%d/%m/%Y"' in text
    assert '# thousands = ","' in text
    assert "date_format" not in tomllib.loads(text)["line"][0]
    decided = text.replace('# date-format = "%d/%m/%Y"', 'date-format = "%d/%m/%Y"')
    path.write_text(decided.replace('# thousands = ","', 'thousands = ","'))
    assert run("check", tmp_path / "n").exit_code == 0


def test_a_folder_with_files_is_refused_and_a_refused_table_leaves_nothing(tmp_path: Path) -> None:
    (tmp_path / "full").mkdir()
    (tmp_path / "full" / "mine.txt").write_text("mine")
    result = run("new", tmp_path / "full", "--from", DEMOS / "harbour-pool" / "crew.csv")
    assert result.exit_code == 2
    assert "not empty" in result.output
    assert [path.name for path in (tmp_path / "full").iterdir()] == ["mine.txt"]
    (tmp_path / "t.csv").write_text("Name,Colour\nAnna Muster,red\n")
    result = run("new", tmp_path / "n", "--from", tmp_path / "t.csv")
    assert result.exit_code == 2
    assert "Muster" not in result.output
    assert not (tmp_path / "n").exists()
    assert run("new", tmp_path / "n", "--from", tmp_path / "nowhere.csv").exit_code == 2


def test_personal_columns_are_not_repeated(tmp_path: Path) -> None:
    rows = ["Date,Amount,Claimant,Handler,Line"]
    rows += [f"2024-0{1 + k % 9}-11,{1000 + k},Anna Muster {k},Bo Beispiel,Fire" for k in range(30)]
    (tmp_path / "t.csv").write_text("\n".join(rows) + "\n")
    result = run("new", tmp_path / "n", "--from", tmp_path / "t.csv")
    text = (tmp_path / "n" / "portfolio.toml").read_text()
    for said in (result.output, text):
        assert "Claimant" in said
        assert "Fire" in said
        assert "Muster" not in said
        assert "Beispiel" not in said


def test_headings_and_names_with_quotes_stay_what_they_are(tmp_path: Path) -> None:
    (tmp_path / "t.csv").write_text('Date,"Amount (EUR)","The ""line"""\n2024-01-11,5,a\n2024-02-11,6,a\n')
    folder = tmp_path / 'a "pool" \\ of ours'
    assert run("new", folder, "--from", tmp_path / "t.csv").exit_code == 0
    content = tomllib.loads((folder / "portfolio.toml").read_text())
    assert content["portfolio"]["name"] == folder.name
    assert content["portfolio"]["currency"] == "EUR"
    assert content["columns"]["amount"] == "Amount (EUR)"
