"""The table of options: computed and published values, and every column by hand from its own output."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import numpy as np
import pytest

import lossagg
from lossagg.pricing import price_options

TABLE = """
[portfolio]
name = "Option table"
currency = "EUR"
valuation-date = 2025-12-31

[[line]]
name = "Casualty"
frequency = { family = "poisson", mean = 12 }
severity = { family = "lognormal", mu = 9, sigma = 1.5 }

[pricing]
event-cap = 1000000
loss-adjustment = 0.08
fixed-expense = 15000
variable-expense = 0.17
profit = 0.05
capital = { rate = 0.08, level = 0.99 }

[[option]]
name = "none"

[[option]]
name = "10k"
deductible = 10000

[[option]]
name = "25k"
deductible = 25000

[[option]]
name = "25k, cap 250k"
deductible = 25000
retained-cap = 250000

[[option]]
name = "50k"
deductible = 50000

[[option]]
name = "100k"
deductible = 100000

[[option]]
name = "100k, cap 600k"
deductible = 100000
retained-cap = 600000
"""

# Poisson(12) x lognormal(9, 1.5), limit 1 million per occurrence inclusive. Computed here, two routes: a
# Fourier transform of step 50 with closed-form means and deviations, and four million simulated years.
# expected, sd, 90 %, 95 %, 99 %, TVaR 99 %, premium, credit, total, total with capital
EXPECTED = {
    "none": (0, 0, 0, 0, 0, 0, 426_871, 0, 426_871, 426_871),
    "10k": (79_352, 26_143, 113_800, 124_900, 146_650, 158_049, 316_999, 109_871, 396_351, 402_647),
    "25k": (135_866, 50_663, 203_000, 225_100, 268_900, 292_070, 238_749, 188_121, 374_615, 387_111),
    "25k, cap 250k": (
        135_354,
        49_256,
        203_000,
        225_100,
        250_000,
        250_000,
        239_458,
        187_413,
        374_812,
        383_983,
    ),
    "50k": (183_467, 77_453, 286_800, 321_900, 392_050, 429_517, 172_840, 254_031, 356_307, 375_991),
    "100k": (226_920, 110_466, 375_700, 428_650, 535_950, 594_014, 112_674, 314_197, 339_594, 368_961),
    "100k, cap 600k": (
        226_734,
        109_748,
        375_700,
        428_650,
        535_950,
        575_422,
        112_931,
        313_940,
        339_665,
        367_560,
    ),
}
CHARGES = {"25k, cap 250k": 511.6, "100k, cap 600k": 185.9}
GRID = 50.0  # the published values at risk stand on a lattice of this step

FULL = """
[portfolio]
name = "By hand"
currency = "EUR"
valuation-date = 2024-12-31

[[line]]
name = "Fire"
records = "losses.csv"
exposure = "exposure.csv"
reporting-threshold = 1000
trend = 0.03
frequency = { fit = ["poisson"] }
severity = { fit = ["lognormal"] }

[pricing]
base = "full cover"
event-cap = 40000
loss-adjustment = 0.06
fixed-expense = 2000
variable-expense = 0.12
profit = 0.03
risk-load = { method = "sd", factor = 0.1 }
premium-tax = 0.05
collateral = { rate = 0.02, level = 0.9 }
claims-handling = { per-event = 100, share = 0.03 }
capital = { rate = 0.06, level = 0.99 }
basic-limit = 10000
basic-limit-expense = 50
appetite = { worst-year = 60000, level = 0.95 }
parameter-draws = 12

[[option]]
name = "full cover"

[[option]]
name = "3k xs limit 12k"
deductible = 3000
limit = 12000

[[option]]
name = "3k, cap 20k"
deductible = 3000
retained-cap = 20000

[[option]]
name = "quoted"
deductible = 5000
premium = 45000

[[option]]
name = "nothing bought"
uninsured = true
"""


def priced(folder: Path, text: str, **settings: Any) -> dict[str, Any]:
    folder.mkdir(parents=True, exist_ok=True)
    (folder / "portfolio.toml").write_text(text, encoding="utf-8")
    return price_options(lossagg.read_portfolio(folder), **settings)


@pytest.fixture(scope="module")
def table(tmp_path_factory: pytest.TempPathFactory) -> dict[str, Any]:
    return priced(tmp_path_factory.mktemp("table"), TABLE, years=60_000, seed=3)


@pytest.fixture(scope="module")
def full(tmp_path_factory: pytest.TempPathFactory) -> dict[str, Any]:
    folder = tmp_path_factory.mktemp("full")
    rows = ["id,date,amount"]
    for k in range(60):
        amount = 1000 + 37 * ((k * 7919) % 101) + (9000 if k % 11 == 0 else 0)
        rows.append(f"{k},{2020 + k % 5}-{1 + (7 * k) % 12:02d}-15,{amount}")
    (folder / "losses.csv").write_text("\n".join(rows) + "\n", encoding="utf-8")
    exposure = ["year,exposure", *(f"{year},{100 + 5 * (year - 2020)}" for year in range(2020, 2025))]
    (folder / "exposure.csv").write_text("\n".join(exposure) + "\n", encoding="utf-8")
    return priced(folder, FULL, years=40_000)


def entry_of(data: dict[str, Any], name: str) -> dict[str, Any]:
    return next(entry for entry in data["options"] if entry["name"] == name)


def var_of(entry: dict[str, Any], level: float) -> dict[str, Any]:
    return next(row["var"] for row in entry["retained"]["levels"] if row["level"] == level)


def tvar_of(entry: dict[str, Any], level: float) -> dict[str, Any]:
    return next(row["tvar"] for row in entry["retained"]["levels"] if row["level"] == level)


@pytest.mark.parametrize("name", list(EXPECTED))
def test_the_computed_option_table_to_the_digits_given(table: dict[str, Any], name: str) -> None:
    """Every figure of the table computed by two routes outside lossagg."""
    entry, numbers = entry_of(table, name), EXPECTED[name]
    own = entry["retained"]
    assert own["expected"]["value"] == pytest.approx(numbers[0], abs=1.0)
    assert own["sd"]["value"] == pytest.approx(numbers[1], abs=1.0)
    for level, value in zip((0.9, 0.95, 0.99), numbers[2:5], strict=True):
        assert var_of(entry, level)["value"] == pytest.approx(value, abs=GRID)
    assert tvar_of(entry, 0.99)["value"] == pytest.approx(numbers[5], abs=1.0)
    assert entry["premium"]["value"] == pytest.approx(numbers[6], abs=1.0)
    assert entry["credit"]["amount"] == pytest.approx(numbers[7], abs=1.0)
    assert entry["total"]["expected"]["value"] == pytest.approx(numbers[8], abs=1.0)
    assert entry["total"]["with_capital"]["value"] == pytest.approx(numbers[9], abs=1.0)
    assert entry["check"]["agrees"]
    assert entry["check"]["comparisons"]


@pytest.mark.parametrize(("name", "charge"), CHARGES.items())
def test_the_charge_for_the_aggregate_stop(table: dict[str, Any], name: str, charge: float) -> None:
    """Computed here, two routes: E[(R - A)+] of the amount kept under the deductible."""
    found = entry_of(table, name)["aggregate_charge"]
    assert found["value"] == pytest.approx(charge, abs=0.05)
    assert found["low"] <= charge <= found["high"]


def test_subject_of_the_table(table: dict[str, Any]) -> None:
    """Total expected loss and deviation of the table, computed here, two routes: 294,406.6 and 222,094."""
    assert table["subject"]["expected"] == pytest.approx(294_406.6, abs=0.05)
    assert table["subject"]["sd"] == pytest.approx(222_094, abs=1.0)


def test_brackets_hold_the_figures_they_belong_to(table: dict[str, Any]) -> None:
    """Low, value, high in this order; the published values inside where theirs is finer than the bracket."""
    for entry in table["options"]:
        for row in entry["retained"]["levels"]:
            for figure in (row["var"], row["tvar"]):
                assert figure["low"] <= figure["value"] <= figure["high"]
                assert figure["high"] - figure["low"] <= 0.005 * max(figure["value"], 1.0)


def test_no_recommendation_without_an_appetite(table: dict[str, Any]) -> None:
    assert table["appetite"] is None


def test_credit_and_comparison_of_the_base_are_none(table: dict[str, Any]) -> None:
    """The base option gives no credit against itself and is not compared with itself."""
    base = next(entry for entry in table["options"] if entry["base"])
    assert base["name"] == "none"
    assert base["credit"]["amount"] == 0.0
    assert base["beats_base"] is None
    assert base["break_even"] is None


@pytest.mark.parametrize("name", ["3k xs limit 12k", "3k, cap 20k", "quoted", "nothing bought", "full cover"])
def test_every_column_can_be_computed_by_hand(full: dict[str, Any], name: str) -> None:
    """From the tool's own output: what the reader of options.json would do with a pocket calculator."""
    entry, base = entry_of(full, name), entry_of(full, "full cover")
    basis, subject = full["basis"], full["subject"]
    kept, ceded = entry["retained"], entry["ceded"]["expected"]["value"]
    mean, sd = kept["expected"]["value"], kept["sd"]["value"]
    assert kept["cv"] == (pytest.approx(sd / mean) if mean else None)
    assert mean + ceded == pytest.approx(subject["expected"])
    assert entry["loss_elimination_ratio"] == pytest.approx(1.0 - ceded / subject["expected"], abs=1e-12)
    bought = name != "nothing bought"
    load = basis["risk_load"]["factor"] * entry["ceded"]["sd"]["value"]
    modelled = (ceded * (1 + basis["loss_adjustment"]) + basis["fixed_expense"] + load) / (
        1 - basis["variable_expense"] - basis["profit"]
    )
    assert entry["premium"]["modelled"] == pytest.approx(modelled if bought else 0.0)
    assert entry["premium"]["source"] == {"quoted": "quoted", "nothing bought": "none"}.get(name, "modelled")
    premium = 45_000.0 if name == "quoted" else modelled if bought else 0.0
    assert entry["premium"]["value"] == pytest.approx(premium)
    if bought:
        parts = entry["premium"]["parts"]
        assert sum(parts.values()) == pytest.approx(modelled)
    credit = base["premium"]["value"] - premium
    assert entry["credit"]["amount"] == pytest.approx(credit, abs=1e-9)
    assert entry["credit"]["part"] == pytest.approx(credit / base["premium"]["value"], abs=1e-12)
    costs = entry["costs"]
    worst = {row["level"]: row["var"]["value"] for row in kept["levels"]}
    assert costs["collateral"] == pytest.approx(basis["collateral"]["rate"] * worst[0.9] if bought else 0.0)
    handling = basis["claims_handling"]
    assert costs["claims_handling"] == pytest.approx(
        handling["per_event"] * kept["events"] + handling["share"] * mean
    )
    assert costs["premium_tax"] == pytest.approx(basis["premium_tax"] * premium)
    fixed = premium + sum(costs.values())
    total = entry["total"]
    assert total["expected"]["value"] == pytest.approx(mean + fixed)
    capital = basis["capital"]["rate"] * (tvar_of(entry, 0.99)["value"] - mean)
    assert total["capital"]["value"] == pytest.approx(capital, abs=1e-9)
    assert total["with_capital"]["value"] == pytest.approx(mean + fixed + capital)
    for row in total["levels"]:
        assert row["total"]["value"] == pytest.approx(worst[row["level"]] + fixed)
    extra = mean - base["retained"]["expected"]["value"]
    assert entry["break_even"] == (pytest.approx(credit / extra) if extra > 0 else None)


def test_the_losses_behind_a_row_by_textbook_formulas(full: dict[str, Any]) -> None:
    """Expected retained, charge, chance of nothing retained and increased limit factor from the fitted laws
    in the run's own records, by the formulas of Klugman, Panjer and Willmot, Loss Models, ch. 8 and 9."""
    entry = entry_of(full, "3k xs limit 12k")
    layer = next(
        row for row in full["curves"]["layers"] if row["from"] <= 3000.0 < row["to"] or row["to"] == 3000.0
    )
    assert layer["events"] > 0
    below = sum(row["cost"] for row in full["curves"]["layers"] if row["to"] <= 3000.0)
    above = sum(row["cost"] for row in full["curves"]["layers"] if row["from"] >= 15000.0)
    assert entry["retained"]["expected"]["value"] == pytest.approx(below + above, rel=1e-9)
    within = sum(
        row["cost"] for row in full["curves"]["layers"] if 3000.0 <= row["from"] and row["to"] <= 15000.0
    )
    assert entry["ceded"]["expected"]["value"] == pytest.approx(within, rel=1e-9)
    capped, plain = entry_of(full, "3k, cap 20k"), below
    charge = capped["aggregate_charge"]["value"]
    assert capped["retained"]["expected"]["value"] == pytest.approx(plain - charge, abs=1.0)
    assert capped["retained"]["most"] == 20_000.0
    assert entry["retained"]["no_loss"]["value"] == pytest.approx(
        np.exp(-full["subject"]["events"]), rel=1e-9
    )


def test_appetite_and_efficient_set(full: dict[str, Any]) -> None:
    """Within the appetite: worst year retained not above it; recommended: least total with capital."""
    choice = full["appetite"]
    worst = {e["name"]: var_of(e, 0.95)["value"] for e in full["options"]}
    assert set(choice["within"]) == {name for name, value in worst.items() if value <= 60_000}
    costs = {e["name"]: e["total"]["with_capital"]["value"] for e in full["options"]}
    assert choice["option"] == min(choice["efficient"], key=costs.__getitem__)
    for name in choice["efficient"]:
        assert not set(entry_of(full, name)["dominated_by"]) & set(choice["within"])


def test_dominance_by_the_columns_of_the_table(full: dict[str, Any]) -> None:
    """Who is dominated costs no less on average and in each bad year, by the table's own figures."""
    for entry in full["options"]:
        for name in entry["dominated_by"]:
            other = entry_of(full, name)
            assert other["total"]["expected"]["value"] <= entry["total"]["expected"]["value"]
            for mine, theirs in zip(entry["total"]["levels"], other["total"]["levels"], strict=True):
                assert theirs["total"]["value"] <= mine["total"]["value"] * (1 + 1e-9)


def test_parameter_ranges_hold_the_estimates(full: dict[str, Any]) -> None:
    """Twelve draws: the range of the expected retained amount spans the estimate, and is a true range."""
    assert full["draws"] == 12
    low, high = entry_of(full, "quoted")["parameters"]["retained"]
    assert low < entry_of(full, "quoted")["retained"]["expected"]["value"] < high
    assert entry_of(full, "full cover")["parameters"]["retained"] == [0.0, 0.0]


def test_past_years_event_by_event(full: dict[str, Any]) -> None:
    """The as-if adds up: retained and ceded make the trended losses of the year, and terms are kept."""
    past = full["history"]
    assert past["years"] == [2020, 2021, 2022, 2023, 2024]
    for own in past["options"]:
        assert np.add(own["retained"], own["ceded"]) == pytest.approx(np.array(past["gross"]))
    capped = next(own for own in past["options"] if own["option"] == "3k, cap 20k")
    assert max(capped["retained"]) <= 20_000.0 * (1 + 1e-12)


def test_the_table_is_plain_data_and_the_same_on_any_number_of_workers(tmp_path: Path) -> None:
    one, two = (priced(tmp_path / str(n), TABLE, years=40_000, workers=n) for n in (1, 2))
    texts = [json.dumps(data, allow_nan=False) for data in (one, two)]
    assert texts[0] == texts[1]
