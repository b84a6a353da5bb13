"""The report of the fits: sensitivity and influence against brute force, and the files it writes."""

import json
from pathlib import Path

import numpy as np
import pytest
from folders import RECORDS, recorded_portfolio

import lossagg
from lossagg.fitting import fit_frequency, fit_severity
from lossagg.portfolio import read_portfolio
from lossagg.portfolio.fit_report import fit_report
from lossagg.portfolio.parameter_error import parameter_error
from lossagg.report import write_fit
from lossagg.report.fitting import render_fit

TEXT = RECORDS.replace(
    'severity = { fit = ["lognormal", "exponential"] }', 'severity = { fit = ["lognormal", "lomax"] }'
)


def many_losses(folder: Path) -> Path:
    """Sixty heavy losses over five years, all above the threshold."""
    recorded_portfolio(folder, TEXT)
    rows = ["id,date,amount"]
    for k in range(60):
        amount = 1000 * (1 - (k + 0.5) / 60) ** (-1 / 1.8) + 40
        rows.append(f"{k},{2020 + k % 5}-{1 + (7 * k) % 12:02d}-15,{amount:.2f}")
    (folder / "losses.csv").write_text("\n".join(rows) + "\n", encoding="utf-8")
    return folder


@pytest.fixture(scope="module")
def portfolio(tmp_path_factory):
    return read_portfolio(many_losses(tmp_path_factory.mktemp("fit")))


@pytest.fixture(scope="module")
def report(portfolio):
    return fit_report(portfolio, draws=9)


def test_leaving_the_largest_out_agrees_with_fitting_the_rest_by_hand(portfolio, report):
    (model,) = portfolio.models()
    prepared, chosen = model.prepared, model.severities.chosen
    place = int(np.argmax(prepared.amount))
    kept = np.arange(len(prepared)) != place
    severity = fit_severity(
        prepared.amount[kept], chosen.family, prepared.threshold[kept], prepared.censored[kept]
    ).model
    counts = prepared.years.losses.astype(float)
    counts[prepared.year[place] - prepared.years.year[0]] -= 1
    seen = prepared.years.forecast_exposure * severity.sf(prepared.years.threshold)
    frequency = fit_frequency(counts, "poisson", seen).model_for(model.forecast_exposure)
    by_hand = lossagg.annual_loss(frequency, severity).value_at_risk(0.99)
    row = report["lines"][0]["influence"][1]
    assert row["change"] == "without the largest"
    assert row["amount"] == pytest.approx(prepared.amount.max())
    assert row["value_at_risk"] == pytest.approx(by_hand, rel=1e-6)


def test_influence_falls_with_the_rank_and_one_more_raises(report):
    rows = report["lines"][0]["influence"]
    changes = [row["relative"] for row in rows]
    assert len(rows) == 8
    assert all(change < 0 for change in changes[1:6])
    assert changes[1] == min(changes[1:6])
    assert changes[7] > 0
    # One more of median size: one loss in sixty more, of a size that makes the tail lighter. Nearly nothing.
    assert rows[6]["amount"] > 1000
    assert abs(changes[6]) < abs(changes[1]) / 2


@pytest.mark.parametrize("place", [1, 4])
def test_each_loss_left_out_agrees_with_a_portfolio_without_its_record(tmp_path, report, place):
    many_losses(tmp_path)
    toml, file = tmp_path / "portfolio.toml", tmp_path / "losses.csv"
    family = report["lines"][0]["severity"]["family"]
    text = toml.read_text(encoding="utf-8").replace('["lognormal", "lomax"]', f'["{family}"]')
    toml.write_text(text, encoding="utf-8")
    head, *rows = file.read_text(encoding="utf-8").splitlines()
    data = [row.split(",") for row in rows]
    trended = [float(amount) * 1.03 ** (2024 - int(date[:4])) for _, date, amount in data]
    left_out = int(np.argsort(trended)[-place])
    file.write_text("\n".join([head, *rows[:left_out], *rows[left_out + 1 :]]) + "\n", encoding="utf-8")
    (model,) = read_portfolio(tmp_path).models()
    by_hand = lossagg.annual_loss(model.frequency, model.severity).value_at_risk(0.99)
    assert report["lines"][0]["influence"][place]["value_at_risk"] == pytest.approx(by_hand, rel=1e-6)


def test_parameter_error_of_a_scale_is_that_of_the_scale(tmp_path):
    # The value at risk is proportional to the mean of exponential sizes, which n losses tell to 1 in sqrt(n).
    text = RECORDS.replace('fit = ["poisson", "negative-binomial"]', 'family = "poisson", mean = 12')
    text = text.replace('["lognormal", "exponential"]', '["exponential"]')
    text = text.replace("reporting-threshold = 1000\n", "")
    (model,) = read_portfolio(recorded_portfolio(tmp_path, text)).models()
    found = parameter_error(model, 0.99)
    assert found["standard_error"] / found["value_at_risk"] == pytest.approx(1 / np.sqrt(60), rel=1e-4)
    assert np.log(found["high"] / found["low"]) == pytest.approx(2 * 1.959964 / np.sqrt(60), rel=1e-4)
    assert found["low"] < found["bracket"][0] <= found["value_at_risk"] <= found["bracket"][1] < found["high"]


def test_parameter_error_of_a_count_adds_its_own(tmp_path):
    # Poisson counts with given sizes: the slope in the mean by a difference taken here.
    text = RECORDS.replace('fit = ["lognormal", "exponential"]', 'family = "exponential", mean = 3000')
    text = text.replace('["poisson", "negative-binomial"]', '["poisson"]')
    (model,) = read_portfolio(recorded_portfolio(tmp_path, text)).models()
    mean = model.frequency.mean()
    laws = [lossagg.Poisson(mean=mean * factor) for factor in (0.98, 1.02)]
    ends = [lossagg.annual_loss(law, model.severity).value_at_risk(0.99) for law in laws]
    slope = (ends[1] - ends[0]) / 0.04  # by the logarithm of the mean, of which 60 losses tell 1 / sqrt(60)
    assert parameter_error(model, 0.99)["standard_error"] == pytest.approx(slope / np.sqrt(60), rel=0.01)


def test_every_rule_has_its_row_of_the_sensitivity_and_a_large_change_is_a_caution(report):
    line = report["lines"][0]
    thresholds = [row["threshold"] for row in line["sensitivity"]]
    for rule in line["tail"]["rules"]:
        assert rule["threshold"] is None or min(abs(t - rule["threshold"]) for t in thresholds[1:]) < 1e-6
    widest = max(abs(row["relative"]) for row in line["sensitivity"] if row["relative"] is not None)
    told = [caution for caution in report["cautions"] if caution["code"] == "tail-sensitive"]
    assert bool(told) == (widest >= 0.1)


def test_sensitivity_keeps_the_body_and_replaces_the_tail(portfolio, report):
    (model,) = portfolio.models()
    rows = report["lines"][0]["sensitivity"]
    base = lossagg.annual_loss(model.frequency, model.severity).value_at_risk(0.99)
    assert rows[0]["value_at_risk"] == pytest.approx(base, rel=1e-6)
    moved = [row for row in rows[1:] if row["value_at_risk"] is not None]
    assert len(moved) >= 3
    row = moved[0]
    above = model.prepared.amount[model.prepared.amount > row["threshold"]]
    tail = fit_severity(above, "generalized-pareto", row["threshold"], fixed={"threshold": row["threshold"]})
    floor = model.prepared.threshold.max()
    share = model.severity.sf(floor) * len(above) / np.sum(model.prepared.amount >= floor)
    law = lossagg.Spliced(
        body=model.severity, tail=tail.model, threshold=row["threshold"], tail_probability=share
    )
    by_hand = lossagg.annual_loss(model.frequency, law).value_at_risk(0.99)
    assert row["value_at_risk"] == pytest.approx(by_hand, rel=1e-6)
    assert row["shape"] == pytest.approx(tail.parameters["shape"])


def test_the_files_and_the_same_bytes(tmp_path, portfolio, report):
    out = write_fit(report, tmp_path / "out")
    assert sorted(path.name for path in out.iterdir()) == [
        "fit.html",
        "fit.json",
        "fit.xlsx",
        "manifest.json",
    ]
    assert json.loads((out / "fit.json").read_text(encoding="utf-8"))["format"] == "lossagg.fit/1"
    page = (out / "fit.html").read_text(encoding="utf-8")
    for text in (
        "Do the losses fit?",
        "Where the tail begins",
        "What single losses do",
        "without the largest",
    ):
        assert text in page
    assert render_fit(fit_report(portfolio, draws=9)) == page


def test_given_laws_have_nothing_to_test(tmp_path):
    from folders import given_portfolio

    report = fit_report(read_portfolio(given_portfolio(tmp_path)), draws=5)
    assert [line["tail"] for line in report["lines"]] == [None, None]
    assert "The laws of this line were given" in render_fit(report)
