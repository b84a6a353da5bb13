"""What the tests of the fits find reaches the reader as cautions; what they do not find does not."""

import numpy as np
import pytest
from folders import given_portfolio
from scipy import stats

from lossagg.portfolio import read_portfolio
from lossagg.portfolio.evidence import line_evidence
from lossagg.portfolio.evidence_cautions import evidence_cautions
from lossagg.report.page import render_report

TEXT = """
[portfolio]
name = "Planted"
currency = "EUR"
valuation-date = 2025-12-31
levels = [0.9]
capital-level = 0.9

[[line]]
name = "Fire"
records = "losses.csv"
frequency = { fit = ["poisson"] }
severity = { fit = ["lognormal"] }
"""
FIRST, YEARS = 2006, 20


def planted(folder, counts, scales, text=TEXT, seed=7):
    """A portfolio of lognormal losses, so many a year, of such a scale."""
    given_portfolio(folder, text)
    random, rows = np.random.default_rng(seed), ["id,date,amount"]
    for year, (count, scale) in enumerate(zip(counts, scales, strict=True)):
        sizes = 1000 * scale * random.lognormal(0.0, 0.5, int(count))
        rows += [f"{year}-{k},{FIRST + year}-06-15,{size:.2f}" for k, size in enumerate(sizes)]
    (folder / "losses.csv").write_text("\n".join(rows) + "\n", encoding="utf-8")
    return read_portfolio(folder)


def cautions(*args, **kwargs):
    """Codes and messages of what its tests find."""
    entries = [line_evidence(model, thresholds=1) for model in planted(*args, **kwargs).models()]
    return {caution["code"]: caution["message"] for caution in evidence_cautions(entries)}


def test_a_planted_trend_of_15_percent_a_year_is_flagged(tmp_path):
    counts = np.round(6 * 1.15 ** np.arange(YEARS))
    found = cautions(tmp_path, counts, np.ones(YEARS))
    assert "+15." in found["frequency-trend"] or "+14." in found["frequency-trend"]
    assert "overdispersion" in found  # taken as steady, the counts vary far more than Poisson


def test_what_is_flagged_is_in_the_assessment_and_on_its_page(tmp_path):
    data = (
        planted(tmp_path, np.round(6 * 1.15 ** np.arange(YEARS)), np.ones(YEARS)).assess(years=500).to_dict()
    )
    assert "frequency-trend" in [caution["code"] for caution in data["cautions"]]
    assert "changes by +1" in render_report(data)


def test_the_trend_stated_in_the_file_is_not_flagged_again(tmp_path):
    counts = np.round(6 * 1.15 ** np.arange(YEARS))
    text = TEXT.replace("frequency =", "frequency-trend = 0.15\nfrequency =")
    found = cautions(tmp_path, counts, np.ones(YEARS), text)
    assert "frequency-trend" not in found
    assert "overdispersion" not in found


def test_a_planted_correlation_of_number_and_size_is_flagged(tmp_path):
    counts = np.array([7, 12, 9, 15, 5, 11, 8, 14, 10, 6] * 2)
    scales = 1.0 + 0.25 * (counts + np.tile([3, -2, 0, 0, 2, -2, 0, 0, 0, 0], 2))
    assert stats.spearmanr(counts, scales).statistic == pytest.approx(0.8, abs=0.05)
    found = cautions(tmp_path, counts, scales)
    assert "larger ones" in found["size-and-number"]
    assert "understates" in found["size-and-number"]
    assert "frequency-trend" not in found


@pytest.mark.parametrize("seed", [1, 2])
def test_steady_independent_counts_raise_none_of_them(tmp_path, seed):
    counts = np.random.default_rng(11).poisson(10, YEARS)
    found = cautions(tmp_path, counts, np.ones(YEARS), seed=seed)
    assert not {"frequency-trend", "size-and-number", "overdispersion", "poor-fit"} & set(found)
