"""What the simulated years add to an assessment: the file of every year, the parts of lines, stopping."""

from pathlib import Path

import numpy as np
import pyarrow.parquet as pq
import pytest
from folders import given_portfolio

from lossagg.engines.book import GROSS
from lossagg.errors import InputError
from lossagg.portfolio import read_portfolio
from lossagg.portfolio.annual_file import AnnualFile

YEARS = 40_000


@pytest.fixture(scope="module")
def assessed(tmp_path_factory):
    """(assessment, table of the years)."""
    folder = tmp_path_factory.mktemp("years")
    path = folder / "years.parquet"
    data = read_portfolio(given_portfolio(folder)).assess(years=YEARS, annual=path).to_dict()
    assert sorted(p.name for p in folder.glob("years*")) == ["years.parquet"]
    return data, pq.read_table(path).to_pandas()


def test_every_year_is_in_the_file(assessed) -> None:
    """Numbered, and adding up: lines to gross, covers and net to gross, parts of lines to lines."""
    _, years = assessed
    assert years["year"].tolist() == list(range(YEARS))
    assert years.columns.tolist() == [
        "year", "line Fire", "line Theft", "gross", "cover Layer", "cover Stop loss", "net",
        "ceded Fire", "ceded Theft", "retained Fire", "retained Theft", "largest Fire", "largest Theft",
        "largest",
    ]  # fmt: skip
    np.testing.assert_allclose(years["line Fire"] + years["line Theft"], years["gross"], rtol=1e-12)
    ceded = years["cover Layer"] + years["cover Stop loss"]
    np.testing.assert_allclose(ceded + years["net"], years["gross"], rtol=1e-12)
    np.testing.assert_allclose(years["ceded Fire"] + years["ceded Theft"], ceded, rtol=1e-9, atol=1e-6)
    np.testing.assert_allclose(
        years["retained Fire"] + years["retained Theft"], years["net"], rtol=1e-9, atol=1e-6
    )
    assert (years["largest"] == years[["largest Fire", "largest Theft"]].max(axis=1)).all()
    assert (years["largest Fire"] <= years["line Fire"] * (1 + 1e-12)).all()


def test_the_assessment_shows_what_the_file_holds(assessed) -> None:
    data, years = assessed
    parts = data["by_line"]["lines"]["Fire"]
    for kind in ("ceded", "retained", "largest"):
        annual = np.sort(years[f"{kind} Fire"])
        assert parts[kind]["mean"] == pytest.approx(annual.mean(), rel=1e-12)
        for level in parts[kind]["levels"]:
            rank = int(np.ceil(round(level["level"] * YEARS, 6)))
            assert level["var"]["value"] == annual[rank - 1]
            assert level["var"]["low"] <= level["var"]["value"] <= level["var"]["high"]
        assert parts[kind]["curve"]
    assert data["by_line"]["largest"]["mean"] == pytest.approx(years["largest"].mean(), rel=1e-12)


def test_the_run_says_how_many_years_it_took(tmp_path: Path) -> None:
    assessment = read_portfolio(given_portfolio(tmp_path)).assess(until=0.02)
    data = assessment.to_dict()
    assert data["run"]["years"] % 32_768 == 0
    assert not assessment.withheld


def test_a_failed_run_leaves_no_file(tmp_path: Path) -> None:
    def fail_halfway() -> None:
        with AnnualFile(tmp_path / "years.parquet") as file:
            file.add(0, {GROSS: np.ones(3)})
            assert [p.name for p in tmp_path.iterdir()] == ["years.parquet.partial"]
            raise RuntimeError("halfway")

    with pytest.raises(RuntimeError, match="halfway"):
        fail_halfway()
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize(
    ("name", "text"),
    [
        ("years.csv", r"must end in \.parquet"),
        ("nowhere/years.parquet", "folder for the annual results does not"),
    ],
)
def test_a_file_that_cannot_be_is_refused_first(tmp_path: Path, name: str, text: str) -> None:
    with pytest.raises(InputError, match=text):
        AnnualFile(tmp_path / name)
