"""Every term of cover as an option: its figures against years drawn here and terms written out by hand."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest

import lossagg
from lossagg.pricing import price_options

Array = np.ndarray
HEAD = """
[portfolio]
name = "Terms"
currency = "EUR"
valuation-date = 2025-12-31

[[line]]
name = "Fire"
frequency = { family = "poisson", mean = 3 }
severity = { family = "exponential", mean = 900 }
sum-insured = 4000
"""
WITH_EXPENSE = HEAD + "expense = 0.1\n"
YEARS = 60_000


def excess(x: Array, low: float, high: float = np.inf) -> Array:
    return np.minimum(np.maximum(x - low, 0.0), high)


def same(payments: Array, _: Array) -> Array:
    return payments


Event, Year = Callable[[Array], Array], Callable[[Array, Array], Array]
# name: (terms, what is paid of one event, what is paid of a year's payments z and amounts kept r)
TERMS: dict[str, tuple[str, Event, Year]] = {
    "nothing stated": ("", lambda x: x, same),
    "ordinary deductible": ("deductible = 300", lambda x: excess(x, 300), same),
    "franchise": ("deductible = 300\nfranchise = true", lambda x: np.where(x > 300, x, 0.0), same),
    "disappearing": (
        "deductible = 300\ndisappears-at = 900",
        lambda x: np.where(x >= 900, x, 1.5 * excess(x, 300)),
        same,
    ),
    "limit on top": ("deductible = 300\nlimit = 1000", lambda x: excess(x, 300, 1000), same),
    "limit inclusive": (
        "deductible = 300\nlimit = 1000\nlimit-includes-deductible = true",
        lambda x: np.minimum(x, 1000) - np.minimum(x, 300),
        same,
    ),
    "self-insured": (
        "deductible = 300\nlimit = 1000\nself-insured = true",
        lambda x: excess(x, 300, 1000),
        same,
    ),
    "coinsurance": ("deductible = 300\nshare = 0.8", lambda x: excess(x, 300), lambda z, _: 0.8 * z),
    "quota share": ("share = 0.4", lambda x: x, lambda z, _: 0.4 * z),
    "share before the limit": (
        'deductible = 300\nlimit = 600\nshare = 0.8\norder = ["deductible", "share", "limit"]',
        lambda x: np.minimum(0.8 * excess(x, 300), 600),
        same,
    ),
    "surplus": ("surplus = { kept-line = 1000, lines = 2 }", lambda x: 0.5 * x, same),
    "annual retention": ("annual-retention = 1500", lambda x: x, lambda z, _: excess(z, 1500)),
    "annual limit": (
        "deductible = 300\nannual-limit = 2500",
        lambda x: excess(x, 300),
        lambda z, _: np.minimum(z, 2500),
    ),
    "retained cap": (
        "deductible = 300\nretained-cap = 800",
        lambda x: excess(x, 300),
        lambda z, r: z + excess(r, 800),
    ),
    "cap beside a limit": (
        "deductible = 300\nlimit = 1000\nretained-cap = 800",
        lambda x: excess(x, 300, 1000),
        lambda z, r: z + excess(r, 800),
    ),
    "corridor": (
        "corridor = { low = 1000, high = 3000, share = 0.7 }",
        lambda x: x,
        lambda z, _: z - 0.7 * excess(z, 1000, 2000),
    ),
    "stop loss on ratios": (
        "stop-loss = { premium = 2000, retention = 1.1, limit = 0.8 }",
        lambda x: x,
        lambda z, _: excess(z, 2200, 1600),
    ),
    "free reinstatement": (
        "deductible = 300\nlimit = 1000\nreinstatements = 1",
        lambda x: excess(x, 300, 1000),
        lambda z, _: np.minimum(z, 2000),
    ),
    "paid reinstatement": (
        "deductible = 300\nlimit = 1000\nreinstatements = 1\nreinstatement-rate = 1.0",
        lambda x: excess(x, 300, 1000),
        lambda z, _: np.minimum(z, 2000),
    ),
    "twice the money": ("deductible = 150\nlimit = 500\nscale = 2", lambda x: excess(x, 300, 1000), same),
}
EXPENSES: dict[str, tuple[str, Event, Year]] = {
    "inside": (
        'deductible = 300\nlimit = 1000\nexpense-basis = "inside"',
        lambda x: excess(1.1 * x, 300, 1000),
        same,
    ),
    "outside": (
        'deductible = 300\nlimit = 1000\nexpense-basis = "outside"',
        lambda x: excess(x, 300, 1000) + 0.1 * x,
        same,
    ),
    "pro rata": (
        'deductible = 300\nlimit = 1000\nexpense-basis = "pro-rata"',
        lambda x: 1.1 * excess(x, 300, 1000),
        same,
    ),
}


def priced(folder: Path, head: str, terms: dict[str, tuple[str, Event, Year]]) -> dict[str, Any]:
    options = [f'[[option]]\nname = "{name}"\n{text}\n' for name, (text, _, _) in terms.items()]
    (folder / "portfolio.toml").write_text("\n".join([head, *options]), encoding="utf-8")
    data = price_options(lossagg.read_portfolio(folder), years=20_000, seed=2)
    return {entry["name"]: entry for entry in data["options"]}


@pytest.fixture(scope="module")
def table(tmp_path_factory: pytest.TempPathFactory) -> dict[str, Any]:
    return priced(tmp_path_factory.mktemp("terms"), HEAD, TERMS)


@pytest.fixture(scope="module")
def expenses(tmp_path_factory: pytest.TempPathFactory) -> dict[str, Any]:
    return priced(tmp_path_factory.mktemp("expense"), WITH_EXPENSE, EXPENSES)


@pytest.fixture(scope="module")
def years() -> tuple[Array, Array]:
    """The year of every event and its amount, drawn by numpy alone."""
    random = np.random.default_rng(20251201)
    counts = random.poisson(3.0, YEARS)
    return np.repeat(np.arange(YEARS), counts), random.exponential(900.0, counts.sum())


def yearly(places: Array, amounts: Array) -> Array:
    return np.bincount(places, weights=amounts, minlength=YEARS)


def check(entry: dict[str, Any], years: tuple[Array, Array], event: Event, year: Year, cost: float) -> None:
    """Expected and worst years of an option against the drawn years, within four standard errors."""
    places, amounts = years
    kept = np.minimum(amounts, 300.0)
    paid = year(yearly(places, event(amounts)), yearly(places, kept))
    retained = cost * yearly(places, amounts) - paid
    assert entry["check"]["agrees"]
    for found, drawn in ((entry["ceded"]["expected"], paid), (entry["retained"]["expected"], retained)):
        error = 4.0 * drawn.std() / np.sqrt(YEARS)
        slack = 4.0 * drawn.std() / np.sqrt(20_000) if found["engine"] == "simulation" else 0.0
        assert found["value"] == pytest.approx(drawn.mean(), abs=error + slack + 1e-6)
    both = entry["retained"]["expected"]["value"] + entry["ceded"]["expected"]["value"]
    assert both == pytest.approx(3 * 900 * cost, rel=1e-9)
    for row in entry["retained"]["levels"]:
        level, (low, high) = row["level"], (row["var"]["low"], row["var"]["high"])
        error = 4.0 * np.sqrt(level * (1.0 - level) / YEARS)
        assert np.mean(retained > high + 1e-6) <= 1.0 - level + error
        assert np.mean(retained > low - 1e-6) >= 1.0 - level - error


@pytest.mark.parametrize("name", TERMS)
def test_every_term_of_an_option(table: dict[str, Any], years: tuple[Array, Array], name: str) -> None:
    _, event, year = TERMS[name]
    check(table[name], years, event, year, 1.0)


@pytest.mark.parametrize("name", EXPENSES)
def test_every_basis_of_expense(expenses: dict[str, Any], years: tuple[Array, Array], name: str) -> None:
    _, event, year = EXPENSES[name]
    check(expenses[name], years, event, year, 1.1)


def test_both_engines_where_both_apply(table: dict[str, Any]) -> None:
    """One annual sum: exact figures, checked by the simulation. Two of them: the simulation alone."""
    engines = {name: entry["retained"]["levels"][0]["var"]["engine"] for name, entry in table.items()}
    simulated = {name for name, engine in engines.items() if engine == "simulation"}
    assert simulated == {
        "annual limit",
        "cap beside a limit",
        "free reinstatement",
        "paid reinstatement",
    }
    for name in set(table) - simulated:
        assert len(table[name]["check"]["comparisons"]) == 4
