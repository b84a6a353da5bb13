"""The written table of options: same bytes, one folder, safe for spreadsheets, true to its data."""

from __future__ import annotations

import csv
import io
import json
from pathlib import Path
from typing import Any

import pytest
from openpyxl import load_workbook
from typer.testing import CliRunner

import lossagg
from lossagg.commands.app import build_app
from lossagg.errors import InputError
from lossagg.pricing import price_options
from lossagg.report import write_options
from lossagg.report.folder import OPTION_FILES
from lossagg.report.options import render_options
from lossagg.report.tables.options import MOST_ROWS, shown_options

TEXT = """
[portfolio]
name = "Pool"
currency = "EUR"
valuation-date = 2025-12-31

[[line]]
name = "Fire <b>"
frequency = { family = "poisson", mean = 4 }
severity = { family = "lognormal", mu = 9, sigma = 1.2 }

[pricing]
event-cap = 500000
variable-expense = 0.2
basic-limit = 50000

[[option]]
name = "=1+2"
deductible = 5000

[[option]]
name = "with cap"
deductible = 20000
retained-cap = 60000

[[option]]
name = "two sums"
deductible = 20000
limit = 80000
retained-cap = 60000
"""


@pytest.fixture(scope="module")
def data(tmp_path_factory: pytest.TempPathFactory) -> dict[str, Any]:
    folder = tmp_path_factory.mktemp("options")
    (folder / "portfolio.toml").write_text(TEXT, encoding="utf-8")
    return price_options(lossagg.read_portfolio(folder), years=20_000)


def test_all_files_and_the_same_bytes(data: dict[str, Any], tmp_path: Path) -> None:
    for name in ("one", "two"):
        write_options(data, tmp_path / name)
    assert sorted(path.name for path in (tmp_path / "one").iterdir()) == sorted(OPTION_FILES)
    for name in OPTION_FILES:
        same = (tmp_path / "one" / name).read_bytes() == (tmp_path / "two" / name).read_bytes()
        assert same or name == "manifest.json"
    written = json.loads((tmp_path / "one" / "options.json").read_text(encoding="utf-8"))
    assert written["options"][1]["retained"]["most"] == 60_000.0


def test_a_name_that_is_a_formula_stays_text(data: dict[str, Any], tmp_path: Path) -> None:
    """CSV and workbook: a name that begins with an equals sign must not run in a spreadsheet."""
    write_options(data, tmp_path / "out")
    rows = list(csv.reader(io.StringIO((tmp_path / "out" / "options.csv").read_text(encoding="utf-8"))))
    assert rows[1][0] == "'=1+2"
    book = load_workbook(tmp_path / "out" / "options.xlsx")
    assert book["Option retained"]["A3"].value == "'=1+2"
    assert all(not cell.startswith(("=", "+", "@")) for row in rows for cell in row)


def test_numbers_of_the_csv_are_those_of_the_json(data: dict[str, Any], tmp_path: Path) -> None:
    """Full numbers, every option, by column heading."""
    write_options(data, tmp_path / "out")
    rows = list(csv.DictReader(io.StringIO((tmp_path / "out" / "options.csv").read_text(encoding="utf-8"))))
    for row, entry in zip(rows, data["options"], strict=True):
        assert float(row["Expected retained"]) == entry["retained"]["expected"]["value"]
        assert float(row["Premium before tax"]) == entry["premium"]["value"]
        assert float(row["Total with capital"]) == entry["total"]["with_capital"]["value"]
        assert float(row["Total in a 1-in-100 year, high"]) == entry["total"]["levels"][2]["total"]["high"]


def test_the_page_escapes_names_and_says_what_is_missing(data: dict[str, Any]) -> None:
    page = render_options(data)
    assert "Fire &lt;b&gt;" in page
    assert "<b>" not in page
    assert "No appetite is stated, so nothing is recommended" in page
    assert "not an actuarial opinion" in page
    assert page.count("<svg") == 2


def test_a_disagreement_withholds_the_option(data: dict[str, Any], tmp_path: Path) -> None:
    """A planted fault: the exact engine's quantiles made 3 % too low must be seen and not printed."""
    from lossagg.pricing.lattice_year import LatticeYear

    folder = tmp_path / "fault"
    folder.mkdir()
    (folder / "portfolio.toml").write_text(TEXT, encoding="utf-8")
    honest = LatticeYear.value_at_risk
    patch = pytest.MonkeyPatch()
    patch.setattr(LatticeYear, "value_at_risk", lambda self, level: 0.97 * honest(self, level))
    try:
        found = price_options(lossagg.read_portfolio(folder), years=20_000)
    finally:
        patch.undo()
    assert data["agrees"]
    assert not found["agrees"]
    entry = found["options"][0]
    assert not entry["check"]["agrees"]
    assert entry["retained"]["expected"]["value"] is None
    assert entry["premium"]["value"] is None
    assert entry["retained"]["expected"]["reason"].startswith("withheld")
    assert found["options"][2]["check"]["agrees"]  # simulated itself: nothing exact to disagree with
    assert "EXACT AND SIMULATED FIGURES DISAGREE" in render_options(found)


def test_folders_of_another_kind_are_left_alone(data: dict[str, Any], tmp_path: Path) -> None:
    """An assessment in the folder would be lost: refused."""
    folder = tmp_path / "assessed"
    folder.mkdir()
    (folder / "assessment.json").write_text("{}")
    (folder / "manifest.json").write_text('{"format": "lossagg.manifest/1"}')
    with pytest.raises(InputError, match="another kind of result"):
        write_options(data, folder)
    with pytest.raises(InputError, match="table of options"):
        write_options({"format": "x"}, tmp_path / "other")


def test_long_tables_show_the_base_and_the_best(data: dict[str, Any]) -> None:
    """The page has room for so many; it says how many it left to the workbook."""
    many = [
        {**data["options"][0], "name": str(k), "base": k == 0, "dominated_by": ["0"] * (k % 2)}
        for k in range(3 * MOST_ROWS)
    ]
    page_data = {**data, "options": many}
    shown = shown_options(page_data)
    assert len(shown) == MOST_ROWS
    assert shown[0]["base"]
    assert all(entry["base"] or not entry["dominated_by"] for entry in shown)
    assert f"{MOST_ROWS} of {3 * MOST_ROWS} options are shown" in render_options(page_data)


def test_the_command_writes_and_summarises(tmp_path: Path) -> None:
    (tmp_path / "portfolio.toml").write_text(TEXT, encoding="utf-8")
    arguments = ["price", str(tmp_path), "--out", str(tmp_path / "out"), "--years", "20000"]
    grid = ["--deductibles", "0,5000,25000", "--limits", "100000,none"]
    result = CliRunner().invoke(build_app(), [*arguments, *grid], prog_name="lossagg")
    assert result.exit_code == 0, result.output
    assert "6 options for Fire <b>" in result.output
    assert "deductible 25,000, limit none" in result.output
    assert sorted(path.name for path in (tmp_path / "out").iterdir()) == sorted(OPTION_FILES)
    bad = CliRunner().invoke(build_app(), [*arguments, "--limits", "5"], prog_name="lossagg")
    assert bad.exit_code == 2


CONTROLLED = """
[portfolio]
name = "Pool"
currency = "EUR"
valuation-date = 2024-12-31

[[line]]
name = "Fire"
records = "losses.csv"
frequency = { fit = ["poisson"] }
severity = { fit = ["exponential"] }

[[line.control-total]]
count = 99

[[option]]
name = "a"
deductible = 5000
"""


def test_broken_control_totals_withhold_every_option(tmp_path: Path) -> None:
    """Records that the ledger contradicts price nothing: no figure, its reason, and exit code 1."""
    rows = ["id,date,amount", *(f"{k},{2020 + k % 5}-05-05,{1000 + 300 * k}" for k in range(30))]
    (tmp_path / "losses.csv").write_text("\n".join(rows) + "\n", encoding="utf-8")
    (tmp_path / "portfolio.toml").write_text(CONTROLLED, encoding="utf-8")
    arguments = ["price", str(tmp_path), "--out", str(tmp_path / "out")]
    result = CliRunner().invoke(build_app(), arguments, prog_name="lossagg")
    assert result.exit_code == 1
    assert "WITHHELD" in result.output
    assert "control totals" in result.output
    written = json.loads((tmp_path / "out" / "options.json").read_text(encoding="utf-8"))
    assert written["options"] == []
    assert written["curves"] is None
    page = (tmp_path / "out" / "options.html").read_text(encoding="utf-8")
    assert "No option is priced: the records do not agree with the control totals" in page
