"""Laws a portfolio file may ask for, and their parameters by other routes, from the file to the page."""

import numpy as np
import pytest
from folders import RECORDS, given_portfolio, recorded_portfolio
from scipy import stats

from lossagg.errors import InputError
from lossagg.portfolio import read_portfolio
from lossagg.portfolio.estimates import estimates
from lossagg.portfolio.evidence import line_evidence, observed
from lossagg.portfolio.what_if import refitted_severity
from lossagg.report.tables.fits import estimates as table

SIZES = 'severity = { fit = ["lognormal", "exponential"] }'
COUNTS = 'frequency = { fit = ["poisson", "negative-binomial"] }'
THRESHOLD = "reporting-threshold = 1000\n"


def without_threshold(folder):
    text = RECORDS.replace(SIZES, 'severity = { fit = ["lognormal"] }').replace(THRESHOLD, "")
    (model,) = read_portfolio(recorded_portfolio(folder, text)).models()
    return model


def test_moments_and_percentiles_stand_beside_maximum_likelihood(tmp_path):
    model = without_threshold(tmp_path)
    found = estimates(model, 20)["severity"]
    x = model.prepared.amount
    # Moments of the lognormal law by hand: E X = exp(mu + s^2 / 2), E X^2 = exp(2 mu + 2 s^2).
    variance = np.log(np.mean(x**2)) - 2 * np.log(np.mean(x))
    assert found["moments"]["sigma"] == pytest.approx(np.sqrt(variance), rel=1e-9)
    assert found["moments"]["mu"] == pytest.approx(np.log(np.mean(x)) - variance / 2, rel=1e-9)
    assert found["percentiles"]["sigma"] > 0
    low, high = found["intervals"]["mu"]
    assert low < model.severities.chosen.parameters["mu"] < high
    # The mean of 60 logarithms scatters by sigma / sqrt(60); 20 draws span about that many standard errors.
    error = model.severities.chosen.parameters["sigma"] / np.sqrt(60)
    assert 2 * error < high - low < 6 * error


def test_with_a_threshold_moments_say_why_they_are_missing(tmp_path):
    (model,) = read_portfolio(recorded_portfolio(tmp_path)).models()
    entry = line_evidence(model, draws=1, thresholds=1) | {"estimates": estimates(model, 20)}
    shown = table([entry])
    assert entry["estimates"]["severity"]["moments"] == {}
    assert any("reporting threshold" in note for note in shown.notes)
    assert {row[1] for row in shown.rows} == {"Frequency", "Severity"}


def test_given_laws_have_no_estimates(tmp_path):
    for model in read_portfolio(given_portfolio(tmp_path)).models():
        assert estimates(model, 20) == {"frequency": None, "severity": None}


def test_a_continuous_splice_is_asked_for_in_the_file_and_kept_in_a_refit(tmp_path):
    sizes = 'severity = { fit = ["lognormal"], tail-threshold = 3000, continuous = true }'
    recorded_portfolio(tmp_path, RECORDS.replace(SIZES, sizes).replace(THRESHOLD, ""))
    random = np.random.default_rng(3)
    amounts = np.where(
        random.random(300) < 0.9, random.lognormal(7.0, 0.8, 300), 3000 * random.pareto(2.0, 300)
    )
    rows = [f"{k},{2020 + k % 5}-06-15,{amount:.2f}" for k, amount in enumerate(amounts + 1)]
    (tmp_path / "losses.csv").write_text("\n".join(["id,date,amount", *rows]) + "\n", encoding="utf-8")
    (model,) = read_portfolio(tmp_path).models()
    for law in (model.severity, refitted_severity(model, *_losses(model)).model):
        below, above = law.pdf(law.threshold * (1 - 1e-9)), law.pdf(law.threshold * (1 + 1e-9))
        assert above == pytest.approx(below, rel=1e-5)


def _losses(model):
    prepared = model.prepared
    return prepared.amount[1:], prepared.threshold[1:], prepared.censored[1:]


def test_continuous_without_a_threshold_is_refused(tmp_path):
    sizes = 'severity = { fit = ["lognormal"], continuous = true }'
    with pytest.raises(InputError, match="continuous belongs to a tail-threshold"):
        read_portfolio(recorded_portfolio(tmp_path, RECORDS.replace(SIZES, sizes)))


def test_years_without_a_loss_may_have_a_probability_of_their_own(tmp_path):
    text = RECORDS.replace('exposure = "exposure.csv"\n', "").replace(THRESHOLD, "")
    text = text.replace(
        COUNTS, 'first-year = 2005\nfrequency = { fit = ["poisson", "zero-modified-poisson"] }'
    )
    (model,) = read_portfolio(recorded_portfolio(tmp_path, text)).models()
    # 15 years without a loss and five with 12 each: the share of years without is 3/4.
    assert model.frequency.family == "zero-modified"
    assert model.frequency.pmf(0) == pytest.approx(0.75, abs=1e-9)
    entry = line_evidence(model, draws=2, thresholds=1)
    assert entry["frequency"]["tests"]["goodness"]["pearson_p_value"] > 0
    assert entry["frequency"]["standard_errors"]["base.mean"] > 0


def test_losses_before_any_law_agree_with_scipy(tmp_path):
    x = without_threshold(tmp_path).prepared.amount
    found = observed(x)
    assert found["skewness"] == pytest.approx(stats.skew(x), rel=1e-9)
    assert found["kurtosis"] == pytest.approx(stats.kurtosis(x, fisher=False), rel=1e-9)
    assert found["sd"] == pytest.approx(np.std(x), rel=1e-12)
    assert found["largest_share"] == pytest.approx(x.max() / x.sum(), rel=1e-12)
    assert observed(np.full(5, 7e300))["kurtosis"] is None
    assert observed(np.array([1e300, 2e300, 9e300]))["mean"] == pytest.approx(4e300)
