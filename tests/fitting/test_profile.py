"""Profile-likelihood intervals against closed forms and against a profile maximised by brute force."""

import numpy as np
import pytest
from scipy import optimize, special, stats

from lossagg import Lomax
from lossagg.errors import InputError
from lossagg.fitting import fit_severity, fit_spliced

# Data Set B of Klugman, Estimation, Evaluation, and Selection of Actuarial Models (SOA/CAS study note).
SET_B = np.array(
    [27, 82, 115, 126, 155, 161, 243, 294, 340, 384, 457, 680, 855, 877, 974, 1193, 1340, 1884, 2558, 15743]
)
DROP = 0.5 * stats.chi2.ppf(0.95, 1)


def test_one_parameter_by_the_likelihood_written_out():
    """Exponential: l(m) = -n log m - sum / m; the ends solve l(m) = l(mean) - 1.92."""
    low, high = fit_severity(SET_B, "exponential").profile_interval("mean")
    n, mean = 20, SET_B.mean()

    def fall(m):
        return n * (np.log(m / mean) + mean / m - 1) - DROP

    assert low == pytest.approx(optimize.brentq(fall, 100, mean), rel=1e-8)
    assert high == pytest.approx(optimize.brentq(fall, mean, 1e5), rel=1e-8)


def test_normal_logarithms_by_the_likelihood_ratio():
    """mu of a lognormal law: n log(1 + (mu - m)**2 / s**2) = chi-square quantile, a textbook formula."""
    fit = fit_severity(SET_B, "lognormal")
    width = fit.parameters["sigma"] * np.sqrt(np.expm1(2 * DROP / 20))
    low, high = fit.profile_interval("mu")
    assert (low, high) == pytest.approx(
        (fit.parameters["mu"] - width, fit.parameters["mu"] + width), rel=1e-8
    )


@pytest.mark.parametrize("seed", [1, 2])
def test_generalized_pareto_shape_by_brute_force(seed):
    excess = stats.genpareto.rvs(0.4, scale=3.0, size=60, random_state=seed)
    fit = fit_severity(excess, "generalized-pareto", fixed={"threshold": 0.0})

    def profile(shape):
        worst = optimize.minimize_scalar(
            lambda level: -np.sum(stats.genpareto.logpdf(excess, shape, scale=np.exp(level))),
            bounds=(-3, 5),
            method="bounded",
            options={"xatol": 1e-10},
        )
        return -worst.fun

    best = fit.parameters["shape"]
    height = fit.log_likelihood - DROP
    low = optimize.brentq(lambda shape: profile(shape) - height, best - 0.45, best, xtol=1e-9)
    high = optimize.brentq(lambda shape: profile(shape) - height, best, best + 1.5, xtol=1e-9)
    assert fit.profile_interval("shape") == pytest.approx((low, high), abs=2e-6)
    assert fit.tail_shape() == pytest.approx((best, low, high), abs=2e-6)


def test_an_end_the_losses_do_not_bound_is_open():
    """Losses with an exponential tail: the alpha of a Lomax law has no upper bound."""
    losses = -(np.log1p(-(np.arange(200) + 0.5) / 200) ** 1.0) * 100
    losses[-3:] *= 1.15
    low, high = fit_severity(losses, "lomax").profile_interval("alpha")
    assert np.isfinite(low)
    assert high == np.inf


def test_a_scale_whose_interval_is_open_ends_at_infinity():
    """The limit of endless alpha takes the scale along: the profile never falls by 1.92 (seen at a million),
    and the end is `inf`, not missing."""
    law = Lomax(alpha=2, scale=1000)
    losses = np.asarray(law.isf(1 - np.random.default_rng([5, 20, 1]).random(20)))
    fit = fit_severity(losses, "lomax")

    def profile(scale):
        alpha = 20 / np.sum(np.log1p(losses / scale))
        return 20 * np.log(alpha / scale) - (alpha + 1) * np.sum(np.log1p(losses / scale))

    low, high = fit.profile_interval("scale")
    assert profile(1e6) > fit.log_likelihood - DROP
    assert high == np.inf
    assert profile(low) == pytest.approx(fit.log_likelihood - DROP, abs=1e-6)


def test_the_interval_of_an_index_from_few_losses_is_wider_upwards_than_the_standard_error_says():
    rng = np.random.default_rng(5)
    losses = stats.genpareto.rvs(0.5, size=40, random_state=rng) + 1
    fit = fit_severity(losses, "generalized-pareto", truncation=1.0)
    (_, by_error), (_, by_profile) = fit.interval("shape"), fit.profile_interval("shape")
    assert by_profile > by_error


def test_a_splice_answers_for_its_tail():
    rng = np.random.default_rng(8)
    losses = np.concatenate(
        [rng.uniform(0.1, 1.0, 500), 1 + stats.genpareto.rvs(0.3, size=80, random_state=rng)]
    )
    fit = fit_spliced(losses, "weibull", 1.0)
    low, high = fit.profile_interval("tail.shape")
    assert low < fit.parameters["tail.shape"] < high
    with pytest.raises(InputError, match="no profile interval"):
        fit.profile_interval("body.shape")


def test_the_level_widens_the_interval():
    fit = fit_severity(SET_B, "gamma")
    narrow, wide = fit.profile_interval("shape", 0.5), fit.profile_interval("shape", 0.99)
    assert wide[0] < narrow[0] < narrow[1] < wide[1]
    assert special.chdtri(1, 0.05) == pytest.approx(2 * DROP)
