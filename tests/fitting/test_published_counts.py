"""Frequency fits against published counts, one test per source.

Fits and counts are quoted from memory and were recomputed with mpmath, unless a test says otherwise.
"""

import numpy as np
import pytest
from scipy import optimize

from lossagg import NegativeBinomial, Poisson
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


def test_data_set_a_with_an_open_last_cell():
    """Klugman, Panjer & Willmot, Loss Models, Data Set A: 94,935 drivers, 7 of them with 5 accidents or more.
    Maxima of the likelihood with that cell open, values computed here with mpmath: Poisson .16313471397 and
    -45297.7909, negative binomial r .897895, beta .181698 and -44763.3406."""
    table = np.array([81714, 11306, 1618, 250, 40])
    assert table.sum() + 7 == 94935

    def log_likelihood(law):
        return float(np.sum(table * np.log(law.pmf(np.arange(5.0)))) + 7 * np.log(law.sf(4)))

    assert log_likelihood(Poisson(mean=0.16313471397)) == pytest.approx(-45297.7909347, abs=1e-6)
    found = optimize.minimize_scalar(
        lambda mean: -log_likelihood(Poisson(mean=mean)),
        bounds=(0.1, 0.2),
        method="bounded",
        options={"xatol": 1e-10},
    )
    assert found.x == pytest.approx(0.16313471397, rel=1e-6)
    r, beta = 0.897895488898, 0.18169799647
    best = log_likelihood(NegativeBinomial(mean=r * beta, dispersion=1 / r))
    assert best == pytest.approx(-44763.3406219, abs=1e-6)
    for factor in (0.99, 1.01):
        assert log_likelihood(NegativeBinomial(mean=r * beta * factor, dispersion=1 / r)) < best
        assert log_likelihood(NegativeBinomial(mean=r * beta, dispersion=factor / r)) < best
    closed = fit_frequency(expanded([*table, 7]), "negative-binomial")
    assert closed.parameters["mean"] == pytest.approx(r * beta, rel=1e-4)


def test_moments_of_an_overdispersed_record():
    """Counts 3,5,4,9,2,7,12,4,6,8: variance 9.3333 gives r = 10.8 and beta = .5556 by moments, r beta = 6
    (closed forms; own numbers)."""
    counts = np.array([3, 5, 4, 9, 2, 7, 12, 4, 6, 8])
    mean, variance = counts.mean(), counts.var(ddof=1)
    r, beta = mean**2 / (variance - mean), (variance - mean) / mean
    assert (round(variance, 4), round(r, 1), round(beta, 4)) == (9.3333, 10.8, 0.5556)
    law = NegativeBinomial(mean=r * beta, dispersion=1 / r)
    assert (law.mean(), law.variance()) == (pytest.approx(mean), pytest.approx(variance))
