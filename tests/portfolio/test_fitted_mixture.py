"""A mixture among the candidates of a portfolio file: fitted, ranked, drawn from, shown with both weights."""

from pathlib import Path

import numpy as np
import pytest

import lossagg
from lossagg.errors import InputError
from lossagg.portfolio.evidence import line_evidence
from lossagg.portfolio.parameter_draws import drawn_lines
from lossagg.portfolio.parameter_error import parameter_error
from lossagg.report.tables.fits import parameters

LINE = """
[portfolio]
name = "Two kinds"
currency = "EUR"
valuation-date = 2025-12-31

[[line]]
name = "Both"
records = "losses.csv"
first-year = 2016
reporting-threshold = 1000
frequency = { fit = ["poisson"] }
severity = { fit = ["lognormal", "lognormal-mixture"]EXTRA }
"""


@pytest.fixture(scope="module")
def folder(tmp_path_factory) -> Path:
    random = np.random.default_rng(5)
    losses = np.concatenate([random.lognormal(8, 0.7, 260), random.lognormal(11, 1.0, 140)])
    kept = random.permutation(losses[losses > 1_000])
    rows = [f"{2016 + k % 10}-0{1 + k % 9}-15,{loss:.2f}" for k, loss in enumerate(kept)]
    folder = tmp_path_factory.mktemp("two-kinds")
    (folder / "losses.csv").write_text("date,amount\n" + "\n".join(rows) + "\n")
    (folder / "portfolio.toml").write_text(LINE.replace("EXTRA", ""))
    return folder


def test_a_mixture_is_fitted_ranked_and_shown(folder):
    (model,) = lossagg.read_portfolio(folder).models()
    assert model.severities.families[0] == "lognormal-mixture"
    entry = line_evidence(model)
    errors, ends = entry["severity"]["standard_errors"], entry["severity"]["intervals"]
    assert errors["weight.2"] == errors["weight.1"] > 0
    assert ends["weight.2"] == pytest.approx([1 - ends["weight.1"][1], 1 - ends["weight.1"][0]])
    table = parameters([entry])
    assert not any("fixed" in str(cell) for row in table.rows for cell in row)
    assert "mixture-parts" in {note.code for note in model.fit_notes}


def test_its_parameters_are_drawn_and_their_error_reaches_the_value_at_risk(folder):
    (model,) = lossagg.read_portfolio(folder).models()
    laws = [line.severity for (line,) in drawn_lines([model], 40, 3, stratified=True)]
    weights = np.array([law.weights[0] for law in laws])
    fit = model.severities.chosen
    assert weights.mean() == pytest.approx(fit.parameters["weight.1"], abs=fit.standard_errors["weight.1"])
    assert weights.std() == pytest.approx(fit.standard_errors["weight.1"], rel=0.3)
    found = parameter_error(model, 0.99)
    assert found["reason"] is None
    assert found["low"] < found["value_at_risk"] < found["high"]


def test_a_mixture_is_no_body_of_a_splice(folder, tmp_path):
    text = LINE.replace("EXTRA", ", tail-threshold = 50000")
    (tmp_path / "portfolio.toml").write_text(text)
    (tmp_path / "losses.csv").write_text((folder / "losses.csv").read_text())
    with pytest.raises(InputError, match="unknown body of a spliced law; seen: 'lognormal-mixture"):
        lossagg.read_portfolio(tmp_path).models()
