"""Frequency fits against published counts, one test per source.

Fits and counts are quoted from memory and were recomputed with mpmath, unless a test says otherwise.
"""

import numpy as np
import pytest

from lossagg.fitting import fit_frequency, overdispersion


def expanded(table):
    """One count per policy from a table of how many policies had 0, 1, 2, ... claims."""
    return np.repeat(np.arange(len(table)), table)


def test_horse_kicks():
    """Bortkiewicz (1898), Das Gesetz der kleinen Zahlen: 200 corps-years, mean .61 and expected 108.67,
    66.29, 20.22, 4.11, 0.63."""
    fit = fit_frequency(expanded([109, 65, 22, 3, 1]), "poisson")
    assert fit.parameters["mean"] == pytest.approx(0.61, rel=1e-14)
    assert 200 * fit.model.pmf(np.arange(5)) == pytest.approx([108.67, 66.29, 20.22, 4.11, 0.63], abs=0.005)
    assert fit.log_likelihood == pytest.approx(-206.106721472, abs=1e-8)
    assert fit.standard_errors["mean"] == pytest.approx(np.sqrt(0.61 / 200), rel=1e-12)


def test_thyrion():
    """Thyrion (1960), ASTIN Bulletin 1, 142-162: Poisson .21435 (-5490.78), negative binomial r .7015,
    beta .3056 (-5348.04)."""
    counts = expanded([7840, 1317, 239, 42, 14, 4, 4, 1])
    poisson = fit_frequency(counts, "poisson")
    assert poisson.parameters["mean"] == pytest.approx(0.214353662404, rel=1e-10)
    assert poisson.log_likelihood == pytest.approx(-5490.78054465, abs=1e-6)
    fit = fit_frequency(counts, "negative-binomial")
    assert 1 / fit.parameters["dispersion"] == pytest.approx(0.701512190386, rel=1e-8)
    assert fit.parameters["mean"] * fit.parameters["dispersion"] == pytest.approx(0.305559426252, rel=1e-8)
    assert fit.log_likelihood == pytest.approx(-5348.03995956, abs=1e-6)


def test_buhlmann():
    """Buhlmann (1970), Mathematical Methods in Risk Theory: Swiss motor portfolio 1961, 119,853 policies,
    mean .1551, r 1.0327."""
    counts = expanded([103704, 14075, 1766, 255, 45, 6, 2])
    fit = fit_frequency(counts, "negative-binomial")
    assert fit.observations == 119853
    assert fit.parameters["mean"] == pytest.approx(0.155140046557, rel=1e-9)
    assert 1 / fit.parameters["dispersion"] == pytest.approx(1.03266835616, rel=1e-7)
    assert fit.log_likelihood == pytest.approx(-54615.31482, abs=1e-5)
    assert fit_frequency(counts, "poisson").log_likelihood == pytest.approx(-55108.4549136, abs=1e-5)


def test_index_of_dispersion():
    """Counts 3,5,4,9,2,7,12,4,6,8: mean 6, index 14.0, chi-square p-value 0.1223 (own numbers; formula of
    Fisher 1950, Biometrics 6)."""
    evidence = overdispersion([3, 5, 4, 9, 2, 7, 12, 4, 6, 8])
    assert (evidence.index, evidence.degrees) == (pytest.approx(14.0, rel=1e-12), 9)
    assert evidence.p_value == pytest.approx(0.1223, abs=5e-5)
    assert 0 < evidence.likelihood_ratio_p_value < 0.5


@pytest.mark.parametrize(("years", "upper", "mean"), [(5, 0.59915, 0.1), (10, 0.29957, 0.05)])
def test_no_losses_never_become_rate_zero(years, upper, mean):
    """-log(0.05) / years (Garwood 1936) and the mean under Jeffreys' prior, 0.5 / years: closed forms."""
    fit = fit_frequency([0] * years, "poisson")
    assert fit.upper_rate() == pytest.approx(upper, abs=5e-6)
    assert fit.model.mean() == fit.parameters["mean"] == pytest.approx(mean, rel=1e-12)
    assert fit.maximum_likelihood_mean == 0.0
    assert "the estimate of maximum likelihood is 0 and is not used" in fit.notes[0]
    assert f"{upper:.5g}" in fit.notes[0]
