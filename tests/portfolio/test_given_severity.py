"""A line counted in its records whose severity is given: it goes through to the page."""

from folders import RECORDS, recorded_portfolio

from lossagg.portfolio import read_portfolio
from lossagg.portfolio.evidence import line_evidence
from lossagg.report.page import line_section

FITTED = 'severity = { fit = ["lognormal", "exponential"] }'
GIVEN = 'severity = { family = "lognormal", mu = 8, sigma = 1 }'


def test_the_page_of_a_line_with_records_and_a_given_severity_tells_of_no_fitted_losses(tmp_path):
    assert FITTED in RECORDS
    (model,) = read_portfolio(recorded_portfolio(tmp_path, RECORDS.replace(FITTED, GIVEN))).models()
    assert model.prepared is not None
    section = line_section(line_evidence(model, draws=1, thresholds=2), 1, "EUR")
    facts = dict(section.facts)
    assert "Losses fitted" not in facts
    assert facts["Severity"].startswith("lognormal: mu 8")
    assert "Exposure of the forecast period" in facts
