"""The portfolio file: what is refused, where, and with which remedy."""

from datetime import date
from pathlib import Path

import pytest

from lossagg.errors import InputError
from lossagg.portfolio.laws import given_frequency, given_severity, placed_cover
from lossagg.portfolio.schema import PortfolioFile, read_portfolio_file

FILE = """
[portfolio]
name = "Test"
currency = "EUR"
valuation-date = 2025-12-31
{portfolio}

[[line]]
name = "Fire"
frequency = {frequency}
severity = {severity}
{line}

[[cover]]
name = "Layer"
{cover}
"""


def write(folder: Path, **parts: str) -> Path:
    usual = {
        "portfolio": "",
        "frequency": '{ family = "poisson", mean = 3 }',
        "severity": '{ family = "lognormal", mu = 9, sigma = 1.5 }',
        "line": "",
        "cover": "",
    }
    path = folder / "portfolio.toml"
    path.write_text(FILE.format(**(usual | parts)), encoding="utf-8")
    return path


def read(folder: Path, **parts: str) -> PortfolioFile:
    return read_portfolio_file(write(folder, **parts))


def test_defaults(tmp_path: Path) -> None:
    file = read(tmp_path)
    assert file.portfolio.levels == (0.9, 0.95, 0.99, 0.995, 0.999)
    assert file.portfolio.capital_level == 0.995
    assert file.portfolio.forecast == (date(2026, 1, 1), date(2026, 12, 31))
    assert file.cover[0].limit is None


def test_forecast_year_from_a_leap_day(tmp_path: Path) -> None:
    file = read(tmp_path, portfolio="forecast-start = 2024-02-29")
    assert file.portfolio.forecast == (date(2024, 2, 29), date(2025, 2, 27))


@pytest.mark.parametrize(
    ("part", "text", "key", "message"),
    [
        ("portfolio", "levls = [0.9]", "portfolio.levls", "Did you mean 'levels'?"),
        ("portfolio", "capital-level = 99.5", "portfolio.capital-level", "Write 0.995 for 99.5 %."),
        ("portfolio", "levels = [0.9, 99]", "portfolio.levels[2]", "Write 0.99 for 99 %."),
        ("portfolio", "levels = [0.99, 0.9]", "portfolio.levels", "levels must increase"),
        ("portfolio", "levels = []", "portfolio.levels", "at least 1 item"),
        ("line", "trend = 5", "line[1].trend", "less than 1"),
        ("line", "treend = 0.05", "line[1].treend", "Did you mean 'trend'?"),
        ("line", 'exposure = "exposure.csv"', "line[1]", "Add records = ..."),
        ("cover", "share = 80", "cover[1].share", "Write 0.8 for 80 %."),
        ("cover", 'limit = "500"', "cover[1].limit", "without quotes: limit = 500"),
        ("cover", "limit = -1", "cover[1].limit", "greater than 0"),
        ("cover", "franchise = 1", "cover[1].franchise", "valid boolean"),
        ("cover", "annual-aggregate-deductible = 5", "cover[1]", "two opposite meanings in the trade"),
        ("cover", "aggregate-deductible = 5", "cover[1]", "retained-cap for the most the insured keeps"),
        (
            "frequency",
            '{ fit = ["poisson"] }',
            "line[1]",
            "frequency is to be fitted, but the line has no records",
        ),
        ("frequency", "{ mean = 3 }", "line[1].frequency", "needs either a family or a fit"),
        (
            "severity",
            '{ family = "lognormal", mu = 1, sigma = 1, tail-threshold = 5 }',
            "line[1].severity",
            "fit",
        ),
    ],
)
def test_faults_name_their_key_and_remedy(
    tmp_path: Path, part: str, text: str, key: str, message: str
) -> None:
    with pytest.raises(InputError) as caught:
        read(tmp_path, **{part: text})
    assert f"key '{key}'" in str(caught.value)
    assert message in str(caught.value)


def test_all_faults_are_listed_at_once(tmp_path: Path) -> None:
    with pytest.raises(InputError) as caught:
        read(tmp_path, portfolio="capital-level = 5", line="treend = 1", cover="share = 2")
    for key in ("portfolio.capital-level", "line[1].treend", "cover[1].share"):
        assert key in str(caught.value)
    assert "at least 1 item" not in str(caught.value)


@pytest.mark.parametrize(
    ("content", "message"),
    [
        (b"name = ", "not valid TOML"),
        (b"[portfolio]\nname = '\xff'", "not UTF-8 at byte 20"),
        (b"a = 1\na = 2", "not valid TOML"),
        (b"", "key 'portfolio'"),
    ],
)
def test_files_that_are_no_portfolio(tmp_path: Path, content: bytes, message: str) -> None:
    path = tmp_path / "portfolio.toml"
    path.write_bytes(content)
    with pytest.raises(InputError, match=message):
        read_portfolio_file(path)


def test_missing_file(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="there is no portfolio file"):
        read_portfolio_file(tmp_path / "portfolio.toml")


def test_laws_from_keys(tmp_path: Path) -> None:
    severity = """{ family = "spliced", threshold = 1000, tail-probability = 0.1,
        body = { family = "lognormal", mu = 5, sigma = 1 },
        tail = { family = "generalized-pareto", shape = 0.5, scale = 100, threshold = 1000 } }"""
    file = read(tmp_path, severity=severity.replace("\n", " "))
    law = given_severity(file.line[0].severity, "line[1].severity")
    assert law.sf(1000.0) == pytest.approx(0.1)
    assert given_frequency(file.line[0].frequency, "line[1].frequency").mean() == 3


@pytest.mark.parametrize(
    ("severity", "message"),
    [
        ('{ family = "lognormale", mu = 1, sigma = 1 }', "lognormal"),
        ('{ family = "lognormal", mu = 1, sigma = -1 }', "sigma must be above 0"),
        ('{ family = "lognormal", mu = 1, sigmaa = 1 }', "sigma"),
        ('{ family = "mixture", weights = [1.0], parts = [{ mu = 1 }] }', "severity.parts[1]"),
    ],
)
def test_laws_that_cannot_be_meant(tmp_path: Path, severity: str, message: str) -> None:
    file = read(tmp_path, severity=severity)
    with pytest.raises(InputError) as caught:
        given_severity(file.line[0].severity, "line[1].severity")
    assert "line[1].severity" in str(caught.value)
    assert message in str(caught.value)


def test_cover_terms_that_contradict_each_other_name_the_cover(tmp_path: Path) -> None:
    file = read(tmp_path, cover="retained-cap = 5")
    with pytest.raises(InputError, match=r"there is no deductible.*cover\[1\]"):
        placed_cover(file.cover[0], "cover[1]")
