"""Covers and towers of the portfolio file: every key reaches its term, every contradiction its key."""

from pathlib import Path

import numpy as np
import pytest

from lossagg.cover import Corridor, Cover, Reinstatements, Surplus
from lossagg.errors import InputError
from lossagg.portfolio import read_portfolio
from lossagg.portfolio.places import placed_covers, tower_cautions
from lossagg.portfolio.schema import PortfolioFile, read_portfolio_file
from lossagg.report.tables import covers, lines

HEAD = """
[portfolio]
name = "Terms"
currency = "EUR"
valuation-date = 2025-12-31
levels = [0.9, 0.99]
capital-level = 0.99

[[line]]
name = "Fire"
frequency = {{ family = "poisson", mean = 2 }}
severity = {{ family = "lognormal", mu = 9, sigma = 1.2 }}
{line}

"""


def write(folder: Path, body: str, line: str = "") -> Path:
    path = folder / "portfolio.toml"
    path.write_text(HEAD.format(line=line) + body, encoding="utf-8")
    return path


def read(folder: Path, body: str, line: str = "") -> PortfolioFile:
    return read_portfolio_file(write(folder, body, line))


def cover_of(folder: Path, keys: str) -> Cover:
    return placed_covers(read(folder, f'[[cover]]\nname = "C"\n{keys}'))[0].terms


@pytest.mark.parametrize(
    ("keys", "terms"),
    [
        ("deductible = 10\ndisappears-at = 20", Cover(deductible=10, disappears_at=20)),
        (
            "deductible = 10\nlimit = 30\nlimit-includes-deductible = true",
            Cover(deductible=10, limit=30, limit_includes_deductible=True),
        ),
        ("deductible = 10\nself-insured = true", Cover(deductible=10, self_insured=True)),
        ("surplus = { kept-line = 5, lines = 3 }", Cover(surplus=Surplus(kept_line=5, lines=3))),
        (
            "corridor = { low = 5, high = 9, share = 0.5 }",
            Cover(corridor=Corridor(low=5, high=9, share=0.5)),
        ),
        ("corridor = { low = 5 }", Cover(corridor=Corridor(low=5, high=np.inf))),
        (
            "stop-loss = { premium = 1000, retention = 1.1, limit = 0.8 }",
            Cover.stop_loss(premium=1000, retention_ratio=1.1, limit_ratio=0.8),
        ),
        (
            "limit = 10\nreinstatements = 2\nreinstatement-rate = 1",
            Cover(limit=10, reinstatements=Reinstatements(number=2, rates=1.0)),
        ),
        (
            "limit = 10\nreinstatements = 2\nreinstatement-rate = [0, 1.5]",
            Cover(limit=10, reinstatements=Reinstatements(number=2, rates=[0, 1.5])),
        ),
        ('expense-basis = "pro-rata"', Cover(expense_basis="pro-rata")),
        (
            'limit = 9\nshare = 0.5\norder = ["share", "limit"]',
            Cover(limit=9, share=0.5, order=["share", "limit"]),
        ),
        ("deductible = 10\nlimit = 30\nscale = 1.1", Cover(deductible=10, limit=30).scaled(1.1)),
    ],
)
def test_keys_reach_their_terms(tmp_path: Path, keys: str, terms: Cover) -> None:
    assert cover_of(tmp_path, keys) == terms


@pytest.mark.parametrize(
    ("keys", "key", "message"),
    [
        ("aad = 5", "cover[1]", "two opposite meanings in the trade"),
        ("deductible = 10\nlimit = 10\nlimit-includes-deductible = true", "cover[1]", "Raise limit above 10"),
        ("reinstatements = 1", "cover[1]", "Give limit"),
        ("limit = 9\nreinstatements = 1\nannual-limit = 9", "cover[1]", "make an annual limit of 18"),
        ("limit = 9\nreinstatement-rate = 1", "cover[1]", "reinstatement-rate needs reinstatements"),
        ("limit = 9\nreinstatements = 1\nreinstatement-rate = 100", "cover[1]", "Write 1 for 100 %"),
        ("corridor = { low = 5, share = 50 }", "cover[1].corridor.share", "Write 0.5 for 50 %"),
        ("corridor = { low = 5, hig = 9 }", "cover[1].corridor.hig", "Did you mean 'high'?"),
        ("stop-loss = { premium = 1000, retention = 110 }", "cover[1]", "Write 1.1 for 110 %"),
        (
            "annual-limit = 5\nstop-loss = { premium = 1000, retention = 1.1 }",
            "cover[1]",
            "states the annual retention and limit a second time",
        ),
        ('expense-basis = "in"', "cover[1].expense-basis", "'inside', 'outside' or 'pro-rata'"),
        ('deductible = 5\norder = ["limit"]', "cover[1]", "Add: deductible"),
        ("reinstatements = 1.5", "cover[1].reinstatements", "valid integer"),
    ],
)
def test_contradictions_name_their_key(tmp_path: Path, keys: str, key: str, message: str) -> None:
    with pytest.raises(InputError) as caught:
        cover_of(tmp_path, keys)
    assert f"key '{key}'" in str(caught.value)
    assert message in str(caught.value)


def test_expense_in_percent_is_refused(tmp_path: Path) -> None:
    with pytest.raises(InputError) as caught:
        read(tmp_path, "", line="expense = 8")
    assert "Write 0.08 for 8 %" in str(caught.value)


TOWER = """
[[cover]]
name = "Stop loss"
after = ["Programme"]
annual-retention = 60000

[[tower]]
name = "Programme"

[[tower.layer]]
name = "working"
deductible = 10000
limit = 20000
reinstatements = 2
reinstatement-rate = 1.0

[[tower.layer]]
deductible = {second}
limit = 70000
share = {share}
"""


def test_a_tower_stands_before_the_cover_that_comes_after_it(tmp_path: Path) -> None:
    placed = placed_covers(read(tmp_path, TOWER.format(second=30000, share=1.0)))
    assert [cover.name for cover in placed] == ["Programme, working", "Programme, layer 2", "Stop loss"]
    assert placed[2].after == ("Programme, working", "Programme, layer 2")


def test_gaps_and_parts_of_a_tower_are_cautions(tmp_path: Path) -> None:
    file = read(tmp_path, TOWER.format(second=40000, share=0.9))
    assert tower_cautions(file.tower) == [
        {
            "code": "tower-gap",
            "message": "Tower 'Programme': no layer pays the part of an event from 30,000 to 40,000.",
        },
        {
            "code": "tower-partly-placed",
            "message": "Tower 'Programme': the layers pay 0.9 of the part of an event from 40,000 to "
            "110,000, not the whole.",
        },
    ]


@pytest.mark.parametrize(
    ("body", "key", "message"),
    [
        (TOWER.format(second=20000, share=1.0), "tower[1]", "layers overlap: 200% of an event"),
        (TOWER.format(second=30000, share=80), "tower[1].layer[2].share", "Write 0.8 for 80 %"),
        (TOWER.format(second=30000, share=1.0).replace("Stop loss", "Programme"), "tower", "its own name"),
        ('[[tower]]\nname = "T"\nlayer = []', "tower[1].layer", "at least 1 item"),
        (
            '[[tower]]\nname = "T"\nlayer = [{ limit = 5 }, { name = "layer 1", deductible = 5 }]',
            "tower[1]",
            "two layers are called 'T, layer 1'",
        ),
    ],
)
def test_towers_that_cannot_be_meant_name_their_key(
    tmp_path: Path, body: str, key: str, message: str
) -> None:
    with pytest.raises(InputError) as caught:
        placed_covers(read(tmp_path, body))
    assert f"key '{key}'" in str(caught.value)
    assert message in str(caught.value)


@pytest.fixture(scope="module")
def assessed(tmp_path_factory: pytest.TempPathFactory) -> dict:
    folder = tmp_path_factory.mktemp("terms")
    body = """
[[cover]]
name = "Layer"
deductible = 10000
limit = 40000
reinstatements = 1
reinstatement-rate = 1.0
expense-basis = "inside"

[[cover]]
name = "Quota"
after = ["Layer"]
stop-loss = { premium = 30000, retention = 1.1, limit = 0.8 }
share = 0.8
order = ["annual-retention", "share", "annual-limit"]
expense-basis = "inside"
"""
    write(folder, body, line="expense = 0.1\nsum-insured = 90000")
    return read_portfolio(folder).assess(years=20_000, seed=1).to_dict()


def test_new_terms_reach_the_assessment(assessed: dict) -> None:
    assert assessed["crosscheck"]["verdict"] == "agree", assessed["crosscheck"]["summary"]
    line, (layer, quota) = assessed["lines"][0], assessed["covers"]
    assert line["expense"] == 0.1
    assert line["mean"] == pytest.approx(2 * 1.1 * np.exp(9 + 1.2**2 / 2), rel=1e-9)
    assert layer["terms"]["annual_limit"] == 80_000
    assert layer["terms"]["reinstatements"] == 1
    premium = layer["reinstatement"]
    assert premium["initial_premium"] + premium["reinstatement_premium"] == pytest.approx(layer["expected"])
    assert quota["reinstatement"] is None
    assert quota["order"] == "per year: annual retention, then share, then annual limit"
    assert "(80 % in excess of 110 % of a premium of 30,000)" in quota["description"]


def test_new_terms_reach_the_tables(assessed: dict) -> None:
    terms = covers.terms(assessed)
    assert any("Order of operations of Quota: per year: annual retention" in note for note in terms.notes)
    assert "expense inside deductible and limit" in str(terms.rows[0][-1])
    assert any("Layer: an initial premium of" in note for note in covers.results(assessed).notes)
    assert any("adjustment expense of 10 %" in note for note in lines.overview(assessed).notes)
