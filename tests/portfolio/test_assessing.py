"""From a folder to an assessment: the figures, the gate, and what is not printed."""

import importlib
import json
import math
from pathlib import Path

import numpy as np
import pytest
from folders import GIVEN, RECORDS, given_portfolio, recorded_portfolio

import lossagg
from lossagg.errors import InputError
from lossagg.portfolio import Assessment, read_portfolio

YEARS = 40_000


def assess(folder: Path, *, seed: int = 1, workers: int | None = None) -> Assessment:
    return read_portfolio(folder).assess(years=YEARS, seed=seed, workers=workers)


@pytest.fixture(scope="module")
def given(tmp_path_factory: pytest.TempPathFactory) -> dict:
    return assess(given_portfolio(tmp_path_factory.mktemp("given"))).to_dict()


@pytest.fixture(scope="module")
def recorded(tmp_path_factory: pytest.TempPathFactory) -> dict:
    return assess(recorded_portfolio(tmp_path_factory.mktemp("recorded"))).to_dict()


def test_engines_agree_on_every_subject(given: dict) -> None:
    check = given["crosscheck"]
    assert check["verdict"] == "agree", check["summary"]
    assert {c["subject"] for c in check["comparisons"]} == {
        "line Fire", "line Theft", "gross", "cover Layer", "cover Stop loss", "net",
    }  # fmt: skip
    for comparison in check["comparisons"]:
        assert all(value is not None for value in comparison["values"].values()), comparison


def test_gross_is_the_sum_of_what_is_paid_and_what_is_left(given: dict) -> None:
    """E[gross] = E[layer] + E[stop loss] + E[net], and the closed-form means of the lines."""
    means = [cover["expected"] for cover in given["covers"]]
    assert given["gross"]["mean"] == pytest.approx(sum(means) + given["net"]["mean"], rel=1e-6)
    fire, theft = 4 * math.exp(9 + 1.2**2 / 2), 6 * 5000.0
    assert given["lines"][0]["mean"] == pytest.approx(fire, rel=1e-8)
    assert given["gross"]["mean"] == pytest.approx(fire + theft, rel=1e-8)


def test_layer_cost_by_the_closed_form(given: dict) -> None:
    """Expected cost = sum over lines of E[N] (L(d + l) - L(d)), with L the limited mean."""
    fire = lossagg.Lognormal(mu=9, sigma=1.2)
    cost = 4 * (fire.limited_mean(60_000) - fire.limited_mean(10_000))
    cost += 6 * 5000 * (math.exp(-2) - math.exp(-12))
    assert given["covers"][0]["expected"] == pytest.approx(cost, rel=1e-8)
    attaching = 4 * fire.sf(10_000)
    none = math.exp(-attaching) * (1 + 0.3 * 6 * math.exp(-2)) ** (-1 / 0.3)
    assert given["covers"][0]["attachment_probability"] == pytest.approx(1 - none, rel=1e-6)


def test_exhaustion_of_an_event_limit_by_the_closed_form(given: dict) -> None:
    fire = lossagg.Lognormal(mu=9, sigma=1.2)
    none = math.exp(-4 * fire.sf(60_000)) * (1 + 0.3 * 6 * math.exp(-12)) ** (-1 / 0.3)
    assert given["covers"][0]["exhaustion_probability"] == pytest.approx(1 - none, rel=1e-6)


def test_the_headline_is_the_net_capital_figure(given: dict) -> None:
    headline = given["headline"]
    level = next(entry for entry in given["net"]["levels"] if entry["level"] == 0.995)
    assert headline["value"] == level["var"]["value"]
    assert headline["low"] <= headline["value"] <= headline["high"]
    assert headline["less_mean"] == pytest.approx(headline["value"] - given["net"]["mean"])


def test_the_same_bytes_for_any_number_of_workers(tmp_path: Path, given: dict) -> None:
    folder = given_portfolio(tmp_path)
    texts = {json.dumps(assess(folder, workers=workers).to_dict()) for workers in (1, 2, 7)}
    assert texts == {json.dumps(given)}


def test_another_seed_moves_the_simulation_only(tmp_path: Path, given: dict) -> None:
    other = assess(given_portfolio(tmp_path), seed=2).to_dict()
    assert other["net"] == given["net"]
    assert other["crosscheck"]["comparisons"] != given["crosscheck"]["comparisons"]


def test_everything_is_json_without_nan_or_infinity(given: dict, recorded: dict) -> None:
    for data in (given, recorded):
        json.dumps(data, allow_nan=False)


def test_records_reconcile_and_reach_the_fit(recorded: dict) -> None:
    line = recorded["lines"][0]
    assert line["records"]["read"] == 61
    assert line["records"]["used"] == 60
    assert line["records"]["excluded"] == 1
    assert sum(year["losses"] for year in line["by_year"]) == 60
    assert line["severity"]["observations"] == 60
    assert [f["code"] for f in recorded["findings"] if f["severity"] == "set aside"] == ["missing-amount"]
    assert {i["path"] for i in recorded["run"]["inputs"]} == {"portfolio.toml", "losses.csv", "exposure.csv"}


def test_ground_up_rate_is_the_observed_rate_over_the_survival_at_the_threshold(tmp_path: Path) -> None:
    """60 losses over 550 units of exposure, forecast for the 120 units of the last year."""
    model = read_portfolio(recorded_portfolio(tmp_path)).models()[0]
    assert model.prepared is not None
    seen = model.severity.sf(model.prepared.years.threshold) * model.prepared.years.exposure
    assert model.frequency.mean() == pytest.approx(120 * 60 / seen.sum(), rel=1e-9)


def test_no_trend_and_no_threshold_leave_amounts_as_recorded(tmp_path: Path) -> None:
    text = RECORDS.replace("trend = 0.03\n", "").replace("reporting-threshold = 1000\n", "")
    prepared = read_portfolio(recorded_portfolio(tmp_path, text)).prepare()["Fire"]
    np.testing.assert_array_equal(prepared.amount, prepared.recorded)
    assert (prepared.threshold == 0).all()


def shifted(function):
    """A discretisation whose lattice is off by one step."""

    def planted(*given):
        masses = function(*given)
        if isinstance(masses, tuple):
            return type(masses)(*(np.roll(part, 1) for part in masses))
        for name in ("down", "spread", "bulge", "atoms_down", "atoms_even", "atoms_up"):
            setattr(masses, name, np.roll(getattr(masses, name), 1))
        return masses

    return planted


@pytest.mark.parametrize("module", ["transform", "recursive"])
def test_a_shifted_lattice_trips_the_gate(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, module: str
) -> None:
    target = importlib.import_module(f"lossagg.engines.{module}")
    monkeypatch.setattr(target, "severity_masses", shifted(target.severity_masses))
    assert_withheld(assess(given_portfolio(tmp_path)))


def test_a_scaled_kernel_trips_the_gate(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Losses 3 % too large in the simulation, at 40,000 years."""
    from lossagg.engines import blocks

    line_sums = blocks.line_sums
    monkeypatch.setattr(blocks, "line_sums", lambda *a, **k: 1.03 * line_sums(*a, **k))
    assert_withheld(assess(given_portfolio(tmp_path)))


def assert_withheld(assessment: Assessment) -> None:
    data = assessment.to_dict()
    assert assessment.withheld
    assert data["crosscheck"]["verdict"] == "disagree"
    assert data["headline"]["value"] is None
    assert "disagree; the widest gap is" in data["headline"]["reason"]
    for subject in ("gross", "net"):
        assert data[subject]["mean"] is None
        assert not data[subject]["curve"]
        for level in data[subject]["levels"]:
            assert level["var"]["value"] is None
            assert level["var"]["reason"] == "withheld: the engines disagree"
    assert any(not c["agrees"] and c["note"] for c in data["crosscheck"]["comparisons"])


def test_an_infinite_mean_prints_no_mean_no_tvar_and_no_uncapped_premium(tmp_path: Path) -> None:
    text = GIVEN.replace(
        '{ family = "lognormal", mu = 9, sigma = 1.2 }', '{ family = "pareto", alpha = 0.9, minimum = 1000 }'
    )
    data = assess(given_portfolio(tmp_path, text)).to_dict()
    assert data["crosscheck"]["verdict"] == "agree", data["crosscheck"]["summary"]
    assert data["gross"]["mean"] is None
    assert data["net"]["mean"] is None
    assert data["lines"][0]["severity"]["mean"] is None
    for level in data["gross"]["levels"]:
        assert level["var"]["value"] > 0
        assert level["tvar"]["value"] is None
        assert level["tvar"]["reason"] == "does not exist: the mean is infinite"
    assert data["covers"][0]["expected"] > 0
    assert data["covers"][1]["expected"] > 0
    assert "infinite-mean" in {caution["code"] for caution in data["cautions"]}


def test_a_retained_cap_is_left_to_the_simulation_and_says_so(tmp_path: Path) -> None:
    text = GIVEN.replace("limit = 50000", "limit = 50000\nretained-cap = 30000")
    data = assess(given_portfolio(tmp_path, text.replace('after = ["Layer"]\n', ""))).to_dict()
    assert data["crosscheck"]["verdict"] == "agree", data["crosscheck"]["summary"]
    assert data["covers"][0]["engine"] == "simulation"
    assert not data["net"]["exact"]
    assert "retained cap" in data["net"]["note"] or "annual terms" in data["net"]["note"]
    mean = next(
        c for c in data["crosscheck"]["comparisons"] if c["subject"] == "net" and c["measure"] == "mean"
    )
    assert mean["values"]["fourier"] is None
    assert mean["note"] == "only one engine can compute this"


@pytest.mark.parametrize(
    ("change", "message"),
    [
        (('records = "losses.csv"', 'records = "../losses.csv"'), "must lie in its folder"),
        (('records = "losses.csv"', 'records = "loses.csv"'), "there is no such file"),
        (('currency = "EUR"', 'currency = "euro"'), "portfolio.currency"),
        (('fit = ["lognormal", "exponential"]', 'fit = ["lognormall"]'), "lognormal"),
    ],
)
def test_bad_portfolios(tmp_path: Path, change: tuple[str, str], message: str) -> None:
    folder = recorded_portfolio(tmp_path, RECORDS.replace(*change))
    with pytest.raises(InputError, match=message):
        read_portfolio(folder).models()


def test_no_such_portfolio(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="there is no such portfolio"):
        read_portfolio(tmp_path / "nowhere")


def test_cautions_always_stand(given: dict) -> None:
    codes = [caution["code"] for caution in given["cautions"]]
    assert codes[:4] == ["not-an-opinion", "model-error", "parameter-error", "changed-world"]
    assert "given-parameters" in codes
    assert "independence" in codes


def test_extrapolation_is_counted(recorded: dict) -> None:
    message = next(c["message"] for c in recorded["cautions"] if c["code"] == "extrapolation")
    assert "5 years of records support levels up to 0.8" in message
    assert "extrapolate 20 times beyond the data" in message


def test_public_way_from_folder_to_files(tmp_path: Path) -> None:
    portfolio = lossagg.read_portfolio(given_portfolio(tmp_path / "in"))
    portfolio.assess(years=2000, seed=1).write(tmp_path / "out")
    assert {f.name for f in (tmp_path / "out").iterdir()} == {
        "assessment.json", "report.html", "tables.xlsx", "manifest.json",
    }  # fmt: skip
