"""The demo portfolios: made by their scripts to the byte, and holding what their about.md says they hold.

The files are read here with pandas alone, so that a fault of the package's own reader cannot hide.
"""

from __future__ import annotations

import ast
import shutil
import subprocess
import sys
import tomllib
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

PORTFOLIOS = Path(__file__).resolve().parents[2] / "portfolios"
POOL, BANK = PORTFOLIOS / "harbour-pool", PORTFOLIOS / "regional-bank"
BOTH = pytest.mark.parametrize("folder", [POOL, BANK], ids=lambda folder: folder.name)


def portfolio_file(folder: Path) -> dict:
    return tomllib.loads((folder / "portfolio.toml").read_text(encoding="utf-8"))


def pool_line(section: dict) -> pd.DataFrame:
    """The records of a line of the pool under the words of the design, amounts as numbers where they are."""
    path = POOL / section["records"]
    if path.suffix == ".xlsx":
        table = pd.read_excel(path, sheet_name=section["sheet"])
    else:
        table = pd.read_csv(
            path, sep=section.get("delimiter", ","), decimal=section.get("decimal", "."), encoding="utf-8-sig"
        )
    table = table.rename(columns={heading: word for word, heading in section.get("columns", {}).items()})
    if table["amount"].dtype.kind not in "fi":  # a column with text in it is read as text throughout
        table["amount"] = pd.to_numeric(table["amount"].str.replace(",", "."), errors="coerce")
    table["date"] = pd.to_datetime(table["date"], format=section.get("date-format"))
    for word, default in {"event": None, "policy-limit": np.inf, "threshold": 0.0}.items():
        if word not in table:
            table[word] = section.get("reporting-threshold", default) if word == "threshold" else default
    table["threshold"] = table["threshold"].astype(float)
    return table


@pytest.fixture(scope="module")
def pool() -> dict[str, pd.DataFrame]:
    return {section["name"]: pool_line(section) for section in portfolio_file(POOL)["line"]}


@pytest.fixture(scope="module")
def bank() -> pd.DataFrame:
    names = {heading: word for word, heading in portfolio_file(BANK)["columns"].items()}
    table = pd.read_csv(BANK / "losses.csv", parse_dates=["Accounting date"]).rename(columns=names)
    thresholds = {line["name"]: line.get("reporting-threshold") for line in portfolio_file(BANK)["line"]}
    table["threshold"] = table["line"].map(thresholds).astype(float)
    return table


def faults_of(table: pd.DataFrame, valuation: str) -> dict[str, int]:
    """How many rows have each kind of fault, each row counted under the first that applies."""
    kinds = {
        "no date": table["date"].isna(),
        "no amount": table["amount"].isna(),
        "not positive": table["amount"] <= 0,
        "after valuation": table["date"] > valuation,
        "below threshold": table["amount"] < table["threshold"],
        "above limit": table["amount"] > table.get("policy-limit", np.inf),
        "twice": table.duplicated(),
    }
    counts, left = {}, pd.Series(True, index=table.index)
    for kind, found in kinds.items():
        if (found & left).any():
            counts[kind] = int((found & left).sum())
        left &= ~found
    return counts


@BOTH
def test_the_script_makes_the_committed_bytes(folder: Path, tmp_path: Path) -> None:
    """Nobody edits the data by hand, and anybody can make them again."""
    shutil.copy(folder / "make_data.py", tmp_path)
    subprocess.run([sys.executable, "make_data.py"], cwd=tmp_path, check=True)
    made = {path.name: path.read_bytes() for path in tmp_path.iterdir() if path.suffix in {".csv", ".xlsx"}}
    committed = {
        path.name: path.read_bytes() for path in folder.iterdir() if path.suffix in {".csv", ".xlsx"}
    }
    assert made.keys() == committed.keys()
    assert [name for name in made if made[name] != committed[name]] == []
    assert max(map(len, committed.values())) < 600_000


@BOTH
def test_the_script_stands_alone(folder: Path) -> None:
    """Data made with the package under test could share its faults."""
    tree = ast.parse((folder / "make_data.py").read_text(encoding="utf-8"))
    imported = {
        name.split(".")[0]
        for node in ast.walk(tree)
        for name in (
            [alias.name for alias in node.names]
            if isinstance(node, ast.Import)
            else [node.module or ""]
            if isinstance(node, ast.ImportFrom)
            else []
        )
    }
    assert imported - sys.stdlib_module_names <= {"numpy", "pandas", "openpyxl"}


@BOTH
def test_every_file_named_is_there_and_every_cover_names_lines(folder: Path) -> None:
    content = portfolio_file(folder)
    names = {line["name"] for line in content["line"]}
    for line in content["line"]:
        for key in ("records", "exposure"):
            assert key not in line or (folder / line[key]).is_file()
    for cover in content["cover"]:
        assert set(cover.get("lines", names)) <= names


def test_the_pool_has_the_faults_its_about_lists_and_no_others(pool: dict[str, pd.DataFrame]) -> None:
    found = {name: faults_of(table, "2025-12-31") for name, table in pool.items()}
    assert found == {
        "Hull and collision": {"no date": 1, "no amount": 1},
        "Crew injury": {"not positive": 1, "below threshold": 1, "twice": 1},
        "Quay and terminal property": {"after valuation": 1},
        "Passenger liability": {"no amount": 1, "not positive": 1, "twice": 1},
    }


def test_the_pool_has_more_than_three_thousand_records(pool: dict[str, pd.DataFrame]) -> None:
    assert sum(len(table) for table in pool.values()) > 3_000
    for table in pool.values():
        years = table.loc[table["date"] <= "2025-12-31", "date"].dt.year
        assert set(years) == set(range(2016, 2026))


def test_the_gale_is_one_event_with_nine_claims_and_one_at_its_limit(pool: dict[str, pd.DataFrame]) -> None:
    gale = pool["Quay and terminal property"].query("event == 'GALE-2021-11'")
    assert len(gale) == gale["member"].nunique() == 9
    assert (gale["amount"] == gale["policy-limit"]).sum() == 1
    assert gale["date"].max() - gale["date"].min() <= pd.Timedelta(days=3)


def test_events_with_several_claims_and_capped_amounts(pool: dict[str, pd.DataFrame]) -> None:
    for name in ("Hull and collision", "Passenger liability"):
        claims = (
            pool[name].drop_duplicates().groupby("event").agg(n=("amount", "size"), days=("date", "nunique"))
        )
        assert len(claims) > 10
        assert claims["n"].between(2, 12).all()
        assert (claims["days"] == 1).all()
        capped = pool[name]["amount"] == pool[name]["policy-limit"]
        assert 0.005 < capped.mean() < 0.05


def test_the_crew_threshold_was_raised_in_2021(pool: dict[str, pd.DataFrame]) -> None:
    crew = pool["Crew injury"]
    assert crew.groupby(crew["date"].dt.year >= 2021)["threshold"].unique().map(list).to_list() == [
        [1000],
        [2500],
    ]


def test_paid_and_outstanding_add_up_to_the_cent(pool: dict[str, pd.DataFrame]) -> None:
    for table in pool.values():
        known = table.dropna(subset=["amount", "date"])
        gap = known["paid"].astype(float) + known["outstanding"].astype(float) - known["amount"]
        assert gap.abs().max() < 0.005
        assert (known.loc[known["status"] == "closed", "outstanding"].astype(float) == 0).all()


def test_the_bank_has_the_faults_its_about_lists_and_no_others(bank: pd.DataFrame) -> None:
    assert faults_of(bank, "2026-09-30") == {
        "no amount": 1,
        "not positive": 1,
        "after valuation": 1,
        "below threshold": 1,
        "twice": 1,
    }


def test_the_cells_of_the_bank_differ_in_frequency_and_the_scenario_has_no_loss(bank: pd.DataFrame) -> None:
    lines = [line["name"] for line in portfolio_file(BANK)["line"]]
    rows = bank["line"].value_counts()
    assert set(rows.index) == set(lines) - {"Cyber extortion, whole bank"}
    assert rows.max() > 1_000
    assert rows.min() < 10
    assert bank["event"].value_counts().between(2, 4).all()


def test_recoveries_never_exceed_what_was_lost(bank: pd.DataFrame, pool: dict[str, pd.DataFrame]) -> None:
    tables = [bank, *(table for table in pool.values() if "recoveries" in table)]
    for table in tables:
        good = table[table["amount"] > 0]
        recovered = pd.to_numeric(good["recoveries"], errors="raise").fillna(0.0)
        assert (recovered <= good["amount"]).all()
        assert (recovered > 0).any()


@BOTH
def test_every_exposure_covers_every_year(folder: Path) -> None:
    """A year without exposure stops a run; a zero or a gap would be a fault of the demo."""
    years = list(range(2016, 2026 if folder == POOL else 2027))
    for line in portfolio_file(folder)["line"]:
        if "exposure" not in line:
            continue
        table = pd.read_csv(folder / line["exposure"], sep=line.get("delimiter", ","))
        if "Cell" in table:
            table = table[table["Cell"] == line["name"]]
        assert table["year"].to_list() == years
        assert (table.iloc[:, -1] > 0).all()


def test_the_control_totals_are_those_of_the_files(pool: dict[str, pd.DataFrame], bank: pd.DataFrame) -> None:
    """Of a line of each portfolio, all claims and by year; the last row of the workbook is its total."""
    hull, lending = "Hull and collision", "Business practices, corporate lending"
    for folder, name, table in (
        (POOL, hull, pool[hull].iloc[:-1]),
        (BANK, lending, bank[bank["line"] == lending]),
    ):
        (section,) = (line for line in portfolio_file(folder)["line"] if line["name"] == name)
        assert len(section["control-total"]) == table["date"].dt.year.nunique() + 1
        for total in section["control-total"]:
            own = table if "year" not in total else table[table["date"].dt.year == total["year"]]
            assert total["count"] == len(own)
            assert total["amount"] == pytest.approx(own["amount"].sum(), abs=0.005)
