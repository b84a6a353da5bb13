"""The coverage study of the validation folder, in its quick form."""

import importlib.util
import sys
from pathlib import Path

import numpy as np
import pytest

import lossagg

SCRIPT = Path(__file__).parents[2] / "validation" / "interval_coverage.py"


@pytest.fixture(scope="module")
def coverage():
    spec = importlib.util.spec_from_file_location("coverage_study", SCRIPT)
    module = importlib.util.module_from_spec(spec)
    sys.modules[spec.name] = module
    spec.loader.exec_module(module)
    return module


def test_the_quick_study_prints_its_table(coverage, capsys):
    assert coverage.main(["--quick"]) == 0
    lines = capsys.readouterr().out.splitlines()
    assert len(lines) == 1 + 2 * 2 + 2
    assert lines[1].startswith("lognormal")


def test_intervals_cover_as_often_as_they_say(coverage):
    """Weibull, 100 losses: 95 % within four standard errors; at a level of 50 % they would not."""
    rows = coverage.study(lossagg.Weibull(shape=0.7, scale=1000), None, 100, 150)
    assert {row.parameter for row in rows} == {"shape", "scale"}
    for row in rows:
        assert abs(row.by_profile - 0.95) < 4 * np.sqrt(0.95 * 0.05 / row.fitted)


def test_the_study_can_fail(coverage, monkeypatch, capsys):
    monkeypatch.setattr(coverage, "LEVEL", 0.5)
    monkeypatch.setattr(coverage, "LAWS", coverage.LAWS[:1])
    assert coverage.main(["--samples", "40"]) == 1
    assert "exponential" in capsys.readouterr().out


def test_plug_in_quantiles_fail_more_often_than_they_say():
    """A lognormal 99.5 % quantile from the estimates of 20 losses fails with probability 1.2072 %, of 50 with
    .7432 %, at 100 .6149 %; the predictive multiplier at 20 is 3.00774, not 2.57583 (closed form: Student's t
    with n - 1 degrees times sqrt((n + 1) / (n - 1)); own numbers on the textbook formula)."""
    from scipy import stats

    z = stats.norm.ppf(0.995)
    for n, failing in ((10, 0.022376), (20, 0.012072), (50, 0.007432), (100, 0.006149)):
        exact = stats.t.sf(z * np.sqrt((n - 1) / (n + 1)), n - 1)
        assert exact == pytest.approx(failing, abs=5e-7)
    assert stats.t.ppf(0.995, 19) * np.sqrt(21 / 19) == pytest.approx(3.00774, abs=5e-6)
    rng = np.random.default_rng(8)
    failed = []
    for _ in range(400):
        fit = lossagg.fit_severity(np.exp(9 + 1.3 * rng.standard_normal(20)), "lognormal")
        law = lossagg.Lognormal(mu=9, sigma=1.3)
        failed.append(float(law.sf(fit.model.isf(0.005))))
    error = np.std(failed) / np.sqrt(len(failed))
    assert abs(np.mean(failed) - 0.012072) < 4 * error
