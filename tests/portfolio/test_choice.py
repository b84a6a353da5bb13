"""The choice of a law in the portfolio file: by rank, or against it with a reason."""

from pathlib import Path

import pytest
from folders import RECORDS, recorded_portfolio

from lossagg.errors import InputError
from lossagg.portfolio import read_portfolio

SEVERITY = 'severity = { fit = ["lognormal", "exponential"] }'


def chosen(folder: Path, keys: str):
    text = RECORDS.replace(SEVERITY, f'severity = {{ fit = ["lognormal", "exponential"], {keys} }}')
    (model,) = read_portfolio(recorded_portfolio(folder, text)).models()
    return model


def test_the_first_by_rank_needs_no_reason(tmp_path: Path) -> None:
    text = RECORDS
    (model,) = read_portfolio(recorded_portfolio(tmp_path, text)).models()
    first = model.severities.families[0]
    again = chosen(tmp_path / "again", f'choose = "{first}"')
    assert again.severities.reason == ""
    assert again.severity == model.severity


def test_another_without_a_reason_stops_and_with_one_is_used(tmp_path: Path) -> None:
    (model,) = read_portfolio(recorded_portfolio(tmp_path)).models()
    second = model.severities.families[1]
    with pytest.raises(InputError, match=r"ranks first: its AIC is lower by .*severity\.choose"):
        chosen(tmp_path / "without", f'choose = "{second}"')
    used = chosen(tmp_path / "with", f'choose = "{second}", reason = "as in the last three years"')
    assert used.severity.family == second
    assert used.severities.reason == "as in the last three years"


def test_choices_that_cannot_be_meant(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="'gamma', which is not in fit"):
        chosen(tmp_path / "a", 'choose = "gamma", reason = "x"')
    with pytest.raises(InputError, match="reason belongs to choose"):
        chosen(tmp_path / "b", 'reason = "x"')


def test_an_empirical_severity_needs_a_parametric_tail(tmp_path: Path) -> None:
    alone = RECORDS.replace(SEVERITY, 'severity = { fit = ["empirical"] }')
    with pytest.raises(InputError, match="says nothing beyond the largest loss"):
        read_portfolio(recorded_portfolio(tmp_path / "alone", alone)).models()
    spliced = RECORDS.replace(SEVERITY, 'severity = { fit = ["empirical"], tail-threshold = 4000 }')
    (model,) = read_portfolio(recorded_portfolio(tmp_path / "spliced", spliced)).models()
    assert model.severity.body.family == "size-table"
    assert model.severity.tail.family == "generalized-pareto"
