"""Which options are priced, what is refused, and what the uncertainty of the parameters does to them."""

from __future__ import annotations

from pathlib import Path
from types import SimpleNamespace
from typing import Any

import numpy as np
import pytest

import lossagg
from lossagg.batch.pricing import grid_of
from lossagg.errors import InputError
from lossagg.fitting.draws import moved
from lossagg.portfolio.parameter_draws import drawn_lines
from lossagg.pricing import price_options
from lossagg.pricing.frontier import Position, choose, dominators
from lossagg.pricing.table import LEAST_DRAWS

HEAD = """
[portfolio]
name = "Choices"
currency = "EUR"
valuation-date = 2025-12-31

[[line]]
name = "Fire"
frequency = { family = "negative-binomial", mean = 4, dispersion = 0.2 }
severity = { family = "lognormal", mu = 9, sigma = 1.2 }

[[line]]
name = "Theft"
frequency = { family = "poisson", mean = 6 }
severity = { family = "exponential", mean = 5000 }
"""


def portfolio(folder: Path, text: str) -> lossagg.portfolio.Portfolio:
    folder.mkdir(parents=True, exist_ok=True)
    (folder / "portfolio.toml").write_text(HEAD + text, encoding="utf-8")
    return lossagg.read_portfolio(folder)


def priced(folder: Path, text: str, **settings: Any) -> dict[str, Any]:
    return price_options(portfolio(folder, text), **{"years": 20_000, **settings})


GRID = """
[option-grid]
deductibles = [0, 5000, 20000]
limits = [100000, inf]
retained-caps = [40000, inf]
"""


def test_a_grid_is_every_combination_once(tmp_path: Path) -> None:
    """3 x 2 x 2, less the two caps that no deductible gives anything to cap: ten options, all checked."""
    data = priced(tmp_path, GRID)
    names = [entry["name"] for entry in data["options"]]
    assert len(names) == len(set(names)) == 10
    assert names[0] == "deductible 0, limit 100,000, cap none"
    assert all(entry["check"]["agrees"] for entry in data["options"])
    engines = {entry["name"]: entry["retained"]["levels"][0]["var"]["engine"] for entry in data["options"]}
    assert engines["deductible 5,000, limit 100,000, cap 40,000"] == "simulation"
    assert engines["deductible 5,000, limit none, cap 40,000"] == "grid transform"


def test_options_share_the_simulated_losses_with_the_simulation_engine(tmp_path: Path) -> None:
    """The simulated figures of an option are those of the simulation engine with the same seed."""
    data = priced(tmp_path, GRID, seed=11)
    name = "deductible 5,000, limit 100,000, cap 40,000"
    entry = next(entry for entry in data["options"] if entry["name"] == name)
    from lossagg.engines.book import GROSS, Book, PlacedCover, Subject

    models = portfolio(tmp_path, GRID).models()
    cover = lossagg.Cover(deductible=5000.0, limit=100_000.0, retained_cap=40_000.0)
    book = Book(lines=tuple(m.line for m in models), covers=(PlacedCover(name="c", terms=cover),))
    losses = lossagg.Simulation(years=20_000, seed=11).book(book).losses
    kept = losses[GROSS].annual - losses[Subject("cover", "c")].annual  # type: ignore[attr-defined]
    order = np.sort(kept)
    assert entry["retained"]["levels"][-1]["var"]["value"] == pytest.approx(order[19_799], rel=1e-12)


def test_one_line_alone_and_both_together(tmp_path: Path) -> None:
    """Naming lines prices their events only; together their expected losses add up."""
    text = '[[option]]\nname = "a"\ndeductible = 5000\n'
    whole = priced(tmp_path, text)["subject"]["expected"]
    parts = [priced(tmp_path, text, lines=[name])["subject"]["expected"] for name in ("Fire", "Theft")]
    assert sum(parts) == pytest.approx(whole, rel=1e-12)


@pytest.mark.parametrize(
    ("text", "says"),
    [
        ("", "there is no option to price"),
        ('[[option]]\nname = "a"\n[[option]]\nname = "a"\n', "two options have the same name"),
        ('[pricing]\nbase = "b"\n[[option]]\nname = "a"\n', "the base is no option"),
        ('[pricing]\nlines = ["Flood"]\n[[option]]\nname = "a"\n', "lines of the portfolio"),
        ('[pricing]\nvariable-expense = 0.8\nprofit = 0.3\n[[option]]\nname = "a"\n', "110% of the premium"),
        ('[pricing]\nprofit = 5\n[[option]]\nname = "a"\n', "less than 1"),
        (
            '[pricing]\nrisk-load = { method = "sd", factor = 1, level = 0.9 }\n',
            "level belongs to the method",
        ),
        ('[[option]]\nname = "a"\nuninsured = true\ndeductible = 5\n', "an uninsured option has no terms"),
        ('[[option]]\nname = "a"\nretained-cap = 500\n', "deductible"),
        ('[[option]]\nname = "a"\nannual-aggregate-deductible = 500\n', "two opposite meanings"),
        ('[[option]]\nname = "a"\ndeductable = 5\n', "unknown key"),
        ('[pricing]\nappetite = { worst-year = 5, level = 95 }\n[[option]]\nname = "a"\n', "less than 1"),
    ],
)
def test_what_cannot_be_priced_is_refused_in_words(tmp_path: Path, text: str, says: str) -> None:
    with pytest.raises(InputError, match=says):
        priced(tmp_path, text)


def test_the_command_line_makes_a_grid() -> None:
    grid = grid_of("0,10000", "5e5,none", None, None, "none, 40_000")
    assert grid is not None
    assert grid.deductibles == (0.0, 10_000.0)
    assert grid.limits == (500_000.0, np.inf)
    assert grid.retained_caps == (np.inf, 40_000.0)
    assert grid_of(None, None, None, None, None) is None


@pytest.mark.parametrize(
    ("arguments", "says"),
    [
        (("10k", None, None, None, None), "cannot be read"),
        ((None, "5000", None, None, None), "needs its deductibles"),
        (("-5", None, None, None, None), "greater than or equal to 0"),
        (("5", "0", None, None, None), "greater than 0"),
    ],
)
def test_a_bad_list_on_the_command_line(arguments: Any, says: str) -> None:
    with pytest.raises(InputError, match=says):
        grid_of(*arguments)


def fit_like(
    parameters: dict[str, float], covariance: list[list[float]], ranges: dict[str, str], fixed=()
) -> Any:
    return SimpleNamespace(
        parameters=parameters, covariance=np.array(covariance), ranges=ranges, fixed=fixed, family="x"
    )


def test_drawn_parameters_have_the_covariance_of_the_fit() -> None:
    """20,000 draws: means and covariance on the scale of the ranges, within four standard errors."""
    covariance = [[0.04, 0.006], [0.006, 0.0025]]
    fit = fit_like({"mu": 9.0, "sigma": 1.5}, covariance, {"mu": "real", "sigma": "positive"})
    random = np.random.default_rng(7)
    drawn = np.array([list(moved(fit, random).values()) for _ in range(20_000)])
    steps = np.column_stack([drawn[:, 0] - 9.0, np.log(drawn[:, 1] / 1.5)])
    expected = np.array([[0.04, 0.006 / 1.5], [0.006 / 1.5, 0.0025 / 1.5**2]])
    assert np.abs(steps.mean(axis=0)) == pytest.approx(0.0, abs=4 * np.sqrt(0.04 / 20_000))
    error = np.sqrt((np.outer(np.diag(expected), np.diag(expected)) + expected**2) / 20_000)
    assert (np.abs(np.cov(steps.T) - expected) <= 4 * error).all()


def test_fixed_parameters_stay_and_probabilities_stay_probabilities() -> None:
    fit = fit_like(
        {"q": 0.98, "threshold": 5.0}, [[0.01, 0.0], [0.0, 0.0]], {"q": "probability"}, fixed=("threshold",)
    )
    random = np.random.default_rng(1)
    drawn = [moved(fit, random) for _ in range(500)]
    assert all(0.0 < draw["q"] < 1.0 and set(draw) == {"q"} for draw in drawn)


RECORDS = """
[portfolio]
name = "From records"
currency = "EUR"
valuation-date = 2024-12-31

[[line]]
name = "Fire"
records = "losses.csv"
reporting-threshold = 2000
first-year = 2005
frequency = { fit = ["poisson"] }
severity = { fit = ["lognormal"] }
"""


def test_drawn_counts_follow_the_drawn_severity(tmp_path: Path) -> None:
    """Only losses above the threshold were counted: whatever the severity drawn, their expected number
    stays near what was seen, while the number below it moves freely."""
    random = np.random.default_rng(3)
    sizes = 2000.0 + 9000.0 * random.lognormal(0.0, 1.0, 200)
    rows = ["id,date,amount", *(f"{k},{2005 + k % 20}-06-15,{x:.2f}" for k, x in enumerate(sizes))]
    (tmp_path / "losses.csv").write_text("\n".join(rows) + "\n", encoding="utf-8")
    (tmp_path / "portfolio.toml").write_text(RECORDS, encoding="utf-8")
    model = lossagg.read_portfolio(tmp_path).models()[0]
    lines = [line[0] for line in drawn_lines([model], 300, seed=2)]
    above = np.array([line.frequency.mean() * line.severity.sf(2000.0) for line in lines])
    ground_up = np.array([line.frequency.mean() for line in lines])
    assert above.mean() == pytest.approx(10.0, abs=4 * 10.0 / np.sqrt(200))
    assert above.std() == pytest.approx(10.0 / np.sqrt(200), rel=0.2)
    assert len(set(ground_up.tolist())) == 300
    again = [line[0] for line in drawn_lines([model], 5, seed=2)]
    assert [line.severity for line in again] == [line.severity for line in lines[:5]]


def test_dominance_must_hold_under_every_draw() -> None:
    """A cheaper option that one draw makes dearer does not dominate."""
    draws = np.array([[100.0, 200.0], [110.0, 190.0]])
    worse = Position("worse", 100.0, (200.0,), draws)
    better = Position("better", 90.0, (200.0,), draws - 10.0)
    fickle = Position("fickle", 90.0, (200.0,), np.array([[90.0, 190.0], [115.0, 190.0]]))
    found = dominators([worse, better, fickle], draws=2)
    assert found["worse"] == ["better"]
    assert found["better"] == []
    assert dominators([worse, fickle], draws=0)["worse"] == ["fickle"]
    unknown = Position("unknown", 80.0, (150.0,), None)
    assert dominators([worse, unknown], draws=2)["worse"] == []
    missing = Position("missing", None, (None,), None)
    assert dominators([worse, missing], draws=0) == {"worse": [], "missing": []}


def test_the_choice_within_an_appetite_by_hand() -> None:
    """Only options within the appetite count, also as dominators; the cheapest of the rest is chosen."""
    positions = [Position("a", 100.0, (1.0,)), Position("b", 90.0, (1.0,)), Position("c", 80.0, (1.0,))]
    retained = {"a": 10.0, "b": 20.0, "c": 50.0}
    choice = choose(positions, retained, {"a": ["c"], "b": [], "c": []}, limit=30.0, level=0.95)
    assert choice.within == ("a", "b")
    assert choice.efficient == ("a", "b")
    assert choice.option == "b"
    assert choose(positions, retained, {"a": [], "b": [], "c": []}, limit=5.0, level=0.95).option is None


def test_large_tables_take_fewer_draws() -> None:
    """The bound that keeps a thousand options within minutes is stated, not hidden."""
    assert LEAST_DRAWS >= 40
