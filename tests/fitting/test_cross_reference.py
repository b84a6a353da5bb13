"""Moments and percentiles beside maximum likelihood: textbook figures, recovery, and where they give nothing.

Klugman, Panjer & Willmot, Loss Models, chapter on frequentist estimation, Data Set B (twenty losses): moments
of the exponential 1424.4, gamma .18100 and 7869.61, Pareto 2.442 and 2053.985; exponential median 606.65.
Values from memory, recomputed in the tests from the losses.
"""

import numpy as np
import pytest

import lossagg
from lossagg.errors import InputError
from lossagg.fitting import cross_reference, fit_severity
from lossagg.fitting.cross_reference import smoothed_percentile

SET_B = np.array(
    [27, 82, 115, 126, 155, 161, 243, 294, 340, 384, 457, 680, 855, 877, 974, 1193, 1340, 1884, 2558, 15743]
)


def test_textbook_moments():
    first, second = sum(SET_B) / 20, sum(int(x) ** 2 for x in SET_B) / 20
    table = cross_reference(SET_B, fit_severity(SET_B, "exponential"))
    assert table.moments == pytest.approx({"mean": 1424.4})
    shape = first**2 / (second - first**2)
    found = cross_reference(SET_B, fit_severity(SET_B, "gamma")).moments
    assert found == pytest.approx({"shape": shape, "scale": first / shape}, rel=1e-10)
    assert (round(found["shape"], 5), round(found["scale"], 1)) == (0.181, 7869.6)
    found = cross_reference(SET_B, fit_severity(SET_B, "lomax")).moments
    alpha = 2 * (second - first**2) / (second - 2 * first**2)
    assert found == pytest.approx({"alpha": alpha, "scale": first * (alpha - 1)}, rel=1e-10)
    assert (round(found["alpha"], 3), round(found["scale"], 1)) == (2.442, 2054.0)


def test_textbook_percentiles():
    """The median of Data Set B is 420.5 and gives 606.65; ranks 6.3 and 16.8 give 185.6 and 1310.6."""
    table = cross_reference(SET_B, fit_severity(SET_B, "exponential"))
    assert smoothed_percentile(SET_B, 0.5) == 420.5
    assert round(table.percentiles["mean"], 2) == 606.65
    assert smoothed_percentile(SET_B, 0.3) == pytest.approx(185.6)
    assert smoothed_percentile(SET_B, 0.8) == pytest.approx(1310.6)
    table = cross_reference(SET_B, fit_severity(SET_B, "lomax"), levels=(0.3, 0.8))
    law = lossagg.Lomax(**table.percentiles)
    assert law.cdf([185.6, 1310.6]) == pytest.approx([0.3, 0.8], rel=1e-10)
    assert round(table.percentiles["alpha"], 4) == 1.5456


LAWS = [
    (lossagg.Exponential(mean=1000), None),
    (lossagg.Lognormal(mu=7, sigma=0.8), None),
    (lossagg.Pareto(alpha=4, minimum=1000), {"minimum": 1000}),
    (lossagg.Lomax(alpha=6, scale=1000), None),
    (lossagg.GeneralizedPareto(shape=0.1, scale=1000, threshold=500), {"threshold": 500}),
    (lossagg.Gamma(shape=0.7, scale=1000), None),
    (lossagg.Weibull(shape=0.7, scale=1000), None),
    (lossagg.InverseGaussian(mean=1000, shape=700), None),
    (lossagg.LogLogistic(gamma=6, scale=1000), None),
    (lossagg.LogGamma(shape=2, rate=5, minimum=1000), {"minimum": 1000}),
]


@pytest.mark.parametrize(("law", "fixed"), LAWS, ids=lambda value: getattr(value, "family", ""))
def test_the_methods_solve_their_equations_and_come_near_the_truth(law, fixed):
    """Fitted mean and variance are the sample's, fitted quantiles its percentiles; from 4,000 losses all
    three come within a quarter of every parameter."""
    losses = np.asarray(law.ppf(np.random.default_rng(7).random(4_000)))
    fit = fit_severity(losses, law.family, fixed=fixed)
    table = cross_reference(losses, fit)
    assert not table.reasons
    held = {name: fit.parameters[name] for name in fit.fixed}
    by_moments = type(law)(**table.moments, **held)
    by_percentiles = type(law)(**table.percentiles, **held)
    if law.family == "log-gamma":
        logs = np.log(losses / 1000)
        assert by_moments.shape / by_moments.rate == pytest.approx(logs.mean(), rel=1e-10)
        assert by_moments.shape / by_moments.rate**2 == pytest.approx(logs.var(), rel=1e-10)
    else:
        assert by_moments.mean() == pytest.approx(losses.mean(), rel=1e-9)
        if len(table.moments) == 2:
            assert by_moments.variance() == pytest.approx(losses.var(), rel=1e-8)
    if len(table.percentiles) == 2:
        expected = [smoothed_percentile(losses, level) for level in (0.25, 0.75)]
        assert by_percentiles.ppf([0.25, 0.75]) == pytest.approx(expected, rel=1e-9)
    else:
        assert by_percentiles.ppf(0.5) == pytest.approx(smoothed_percentile(losses, 0.5), rel=1e-9)
    for values in (table.moments, table.percentiles, table.likelihood):
        for name, value in values.items():
            assert value == pytest.approx(law.parameters[name], rel=0.25, abs=0.1)
    assert list(table.to_frame().columns) == ["likelihood", "moments", "percentiles"]


def test_where_a_method_gives_nothing_it_says_why():
    even = (np.arange(200) + 0.5) / 200
    heavy = np.asarray(lossagg.Burr(alpha=1.5, gamma=2, scale=100).isf(even))
    table = cross_reference(heavy, fit_severity(heavy, "burr"))
    assert "not for the burr law" in table.reasons["moments"]
    light = np.asarray(lossagg.Lomax(alpha=3, scale=100).isf((np.arange(40) + 0.5) / 40))
    table = cross_reference(light * 1.0, fit_severity(light, "lomax"))
    assert table.moments or "are not those of any lomax law" in table.reasons["moments"]
    stopped = np.append(light, 400.0)
    marks = np.append(np.zeros(40, dtype=bool), True)
    table = cross_reference(stopped, fit_severity(stopped, "lognormal", censored=marks), censored=marks)
    assert table.reasons == dict.fromkeys(
        ("moments", "percentiles"), "some losses are censored or have a reporting threshold"
    )
    assert table.to_frame()["moments"].isna().all()
    few = [1.0, 5.0]
    assert "percentiles" in cross_reference(few, fit_severity(few, "lognormal")).reasons
    with pytest.raises(InputError, match="levels must be two, ascending"):
        cross_reference(few, fit_severity(few, "lognormal"), levels=(0.7, 0.3))
