"""Options whose reinstatements are paid: premiums, costs of a year and ranges, against enumeration."""

from __future__ import annotations

from itertools import product
from math import exp, factorial
from pathlib import Path
from typing import Any

import numpy as np
import pytest

import lossagg
from lossagg.pricing import price_options

TEXT = """
[portfolio]
name = "Reinstated"
currency = "EUR"
valuation-date = 2025-12-31

[[line]]
name = "Wind"
frequency = { family = "poisson", mean = 2 }
severity = { family = "size-table", sizes = [1, 2, 3], probabilities = [0.5, 0.3, 0.2] }

[pricing]
premium-tax = 0.1
base = "none"
PRICING

[[option]]
name = "one at 100 %"
deductible = 1
limit = 2
reinstatements = 1
reinstatement-rate = 1.0

[[option]]
name = "one free"
deductible = 1
limit = 2
reinstatements = 1

[[option]]
name = "quoted, two rates, half"
deductible = 1
limit = 2
reinstatements = 2
reinstatement-rate = [1.0, 0.5]
share = 0.5
premium = 0.6

[[option]]
name = "none"
uninsured = true
"""

YEARS = 200_000
TAX = 1.1


@pytest.fixture(scope="module")
def table(tmp_path_factory: pytest.TempPathFactory) -> dict[str, Any]:
    folder = tmp_path_factory.mktemp("reinstated")
    (folder / "portfolio.toml").write_text(TEXT.replace("PRICING", ""), encoding="utf-8")
    return price_options(lossagg.read_portfolio(folder), years=YEARS, seed=7)


def entry_of(data: dict[str, Any], name: str) -> dict[str, Any]:
    return next(entry for entry in data["options"] if entry["name"] == name)


def every_year() -> list[tuple[float, float, float]]:
    """(probability, loss, layer loss) of every year, by the three independent counts of a Poisson(2)."""
    first, second, third = (
        [exp(-rate) * rate**n / factorial(n) for n in range(24)] for rate in (1.0, 0.6, 0.4)
    )
    return [
        (first[a] * second[b] * third[c], a + 2.0 * b + 3.0 * c, b + 2.0 * c)
        for a, b, c in product(range(24), repeat=3)
    ]


def mean(values: list[tuple[float, float]]) -> float:
    return sum(chance * value for chance, value in values)


def test_pure_premium_with_one_reinstatement(table: dict[str, Any]) -> None:
    """Sundt (1991), On excess of loss reinsurance with reinstatements: one limit l more, at 100 %, costs
    E[min(Z, 2l)] / (1 + E[min(Z, l)] / l).

    Layer 2 xs 1 of Poisson(2) losses on 1, 2, 3; digits computed here, two routes: the table and enumeration.
    """
    years = every_year()
    once = mean([(p, min(z, 2.0)) for p, _, z in years])
    twice = mean([(p, min(z, 4.0)) for p, _, z in years])
    assert once == pytest.approx(1.0435134530, abs=5e-11)
    assert twice == pytest.approx(1.3380243637, abs=5e-11)
    premium = entry_of(table, "one at 100 %")["premium"]
    assert premium["value"] == pytest.approx(0.8792629863, abs=5e-11)
    assert premium["value"] == pytest.approx(twice / (1 + once / 2), abs=1e-10)
    assert premium["low"] <= premium["value"] <= premium["high"]
    again = premium["reinstatement"]
    assert again["expected"] == pytest.approx(0.4587613774, abs=5e-11)
    assert again["fraction"]["value"] == pytest.approx(once / 2, abs=1e-10)
    assert again["fraction"]["low"] <= once / 2 <= again["fraction"]["high"]
    assert again["most"] == pytest.approx(premium["value"])
    free = entry_of(table, "one free")["premium"]
    assert free["reinstatement"] is None
    assert free["value"] == pytest.approx(premium["value"] + again["expected"], abs=1e-10)


def costs(table: dict[str, Any], name: str) -> list[tuple[float, float]]:
    """(probability, total cost) of every year under an option, by its terms written out."""
    premium = entry_of(table, name)["premium"]["value"]
    found = []
    for chance, loss, layer in every_year():
        if name == "one at 100 %":
            cost = loss - min(layer, 4.0) + TAX * premium * (1.0 + min(layer, 2.0) / 2.0)
        elif name == "quoted, two rates, half":
            again = min(layer, 2.0) / 2.0 + 0.5 * min(max(layer - 2.0, 0.0), 2.0) / 2.0
            cost = loss - 0.5 * min(layer, 6.0) + TAX * premium * (1.0 + again)
        else:
            cost = loss
        found.append((chance, cost))
    return found


@pytest.mark.parametrize("name", ["one at 100 %", "quoted, two rates, half"])
def test_total_cost_of_a_year_holds_the_reinstatement_premium(table: dict[str, Any], name: str) -> None:
    """Expected total exactly; bad years by the chance of more in the enumerated years, in standard errors."""
    entry, exact = entry_of(table, name), costs(table, name)
    assert entry["total"]["expected"]["value"] == pytest.approx(mean(exact), abs=1e-9)
    for row in entry["total"]["levels"]:
        level, value = row["level"], row["total"]["value"]
        error = 4.0 * np.sqrt(level * (1.0 - level) / YEARS)
        more = sum(chance for chance, cost in exact if cost > value + 1e-9)
        no_less = sum(chance for chance, cost in exact if cost > value - 1e-9)
        assert more <= 1.0 - level + error
        assert no_less >= 1.0 - level - error
        worst = next(own for own in entry["retained"]["levels"] if own["level"] == level)["var"]["value"]
        assert worst <= value


@pytest.mark.parametrize("name", ["one at 100 %", "quoted, two rates, half"])
def test_years_that_beat_the_base_count_the_reinstatement_premium(table: dict[str, Any], name: str) -> None:
    years = zip(costs(table, name), costs(table, "none"), strict=True)
    chance = sum(p for (p, own), (_, base) in years if own < base - 1e-9)
    beats = entry_of(table, name)["beats_base"]
    assert beats["value"] == pytest.approx(chance, abs=4.0 * np.sqrt(chance * (1.0 - chance) / YEARS))


def test_the_base_may_have_paid_reinstatements(tmp_path: Path) -> None:
    """Beating and being beaten are complements but for ties; credits are of premiums expected."""
    text = TEXT.replace("PRICING", "").replace('base = "none"', 'base = "one at 100 %"')
    (tmp_path / "portfolio.toml").write_text(text, encoding="utf-8")
    data = price_options(lossagg.read_portfolio(tmp_path), years=20_000, seed=7)
    years = zip(costs(data, "none"), costs(data, "one at 100 %"), strict=True)
    chance = sum(p for (p, own), (_, base) in years if own < base - 1e-9)
    beats = entry_of(data, "none")["beats_base"]["value"]
    assert beats == pytest.approx(chance, abs=4.0 * np.sqrt(chance * (1.0 - chance) / 20_000))
    base, free = entry_of(data, "one at 100 %")["premium"], entry_of(data, "one free")
    assert free["credit"]["amount"] == pytest.approx(
        base["value"] + base["reinstatement"]["expected"] - free["premium"]["value"], abs=1e-12
    )


RECORDS = """
[portfolio]
name = "Ranges"
currency = "EUR"
valuation-date = 2024-12-31

[[line]]
name = "Wind"
records = "losses.csv"
reporting-threshold = 1000
frequency = { fit = ["poisson"] }
severity = { fit = ["lognormal"] }

[pricing]
parameter-draws = 40

[[option]]
name = "reinstated"
deductible = 3000
limit = 6000
reinstatements = 1
reinstatement-rate = 1.0

[[option]]
name = "limit and cap"
deductible = 3000
limit = 6000
retained-cap = 25000

[[option]]
name = "plain"
deductible = 3000
limit = 6000
"""


def test_options_of_two_annual_sums_have_parameter_ranges(tmp_path: Path) -> None:
    """Their worst years are simulated in every draw: a range that holds the estimate, and no dominance.

    A layer whose annual limit is hardly ever reached keeps what it keeps without one, in every draw.
    """
    rows = ["id,date,amount"]
    rows += [f"{k},{2020 + k % 5}-06-15,{1000 + 41 * ((k * 7919) % 211)}" for k in range(45)]
    (tmp_path / "losses.csv").write_text("\n".join(rows) + "\n", encoding="utf-8")
    (tmp_path / "portfolio.toml").write_text(RECORDS, encoding="utf-8")
    data = price_options(lossagg.read_portfolio(tmp_path), years=40_000)
    plain = entry_of(data, "plain")
    assert plain["parameters"]["simulated"] is False
    for name in ("reinstated", "limit and cap"):
        entry = entry_of(data, name)
        drawn = entry["parameters"]
        assert drawn["simulated"] is True
        assert drawn["retained"][0] < entry["retained"]["expected"]["value"] < drawn["retained"][1]
        worst = next(row["var"]["value"] for row in entry["retained"]["levels"] if row["level"] == 0.95)
        assert drawn["worst_year"][0] < worst < drawn["worst_year"][1]
        assert drawn["total"][0] < entry["total"]["expected"]["value"] < drawn["total"][1]
        assert entry["dominated_by"] == []
    own = next(own for own in data["history"]["options"] if own["option"] == "reinstated")
    first = entry_of(data, "reinstated")["premium"]
    for total, kept, ceded in zip(own["total"], own["retained"], own["ceded"], strict=True):
        again = first["value"] * min(ceded, 6000.0) / 6000.0
        assert total == pytest.approx(kept + first["value"] + again)


@pytest.mark.parametrize(
    ("terms", "says"),
    [
        ("deductible = 1\nreinstatements = 1\nreinstatement-rate = 1.0\n", "limit"),
        ("deductible = 1\nlimit = 2\nreinstatements = 1\nreinstatement-rate = 100\n", "Write 1 for 100"),
        ("deductible = 1\nlimit = 2\nreinstatement-rate = 1.0\n", "reinstatement"),
        ("deductible = 1\nlimit = 2\nannual-limit = 9\nreinstatements = 1\n", "annual limit of 4"),
    ],
)
def test_reinstatements_without_a_meaning_are_refused(tmp_path: Path, terms: str, says: str) -> None:
    text = TEXT[: TEXT.index("[pricing]")] + f'[[option]]\nname = "x"\n{terms}'
    (tmp_path / "portfolio.toml").write_text(text, encoding="utf-8")
    with pytest.raises(lossagg.errors.InputError, match=says):
        price_options(lossagg.read_portfolio(tmp_path))
