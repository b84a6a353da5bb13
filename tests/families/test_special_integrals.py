"""The numerical routines beneath the laws, each against 60-digit arithmetic."""

from __future__ import annotations

import mpmath as mp
import numpy as np
import pytest

from lossagg.families.inversion import bracket, invert_tail
from lossagg.families.mills import mills, mills_bend, mills_difference, mills_fall, mills_fall_difference
from lossagg.families.power import (
    excess_at,
    exponential_integral,
    limited_excess,
    limited_excess_second_moment,
)
from lossagg.families.quadrature import interval_integrals
from lossagg.families.saddle import deviance, lower_gamma, poisson_probability, stirling_error
from lossagg.families.tables import running_sums


@pytest.fixture(autouse=True)
def sixty_digits():
    with mp.workdps(60):
        yield


def worst(values, references) -> float:
    return max(
        float(abs(mp.mpf(float(v)) - r) / abs(r)) for v, r in zip(np.ravel(values), references, strict=True)
    )


def exact_mills(t):
    t = mp.mpf(t)
    return mp.sqrt(mp.pi / 2) * mp.exp(t * t / 2) * mp.erfc(t / mp.sqrt(2))


def test_the_mills_ratio_and_its_derivatives():
    # On both sides of the point where the continued fraction takes over.
    t = np.array([-8.0, -3.0, -0.5, 0.0, 0.7, 3.9, 4.0, 4.1, 10.0, 37.0, 200.0])
    ratio = [exact_mills(x) for x in t]
    assert worst(mills(t), ratio) < 1e-14
    assert worst(mills_fall(t), [1 - mp.mpf(x) * r for x, r in zip(t, ratio, strict=True)]) < 1e-13
    bend = [(1 + mp.mpf(x) ** 2) * r - mp.mpf(x) for x, r in zip(t, ratio, strict=True)]
    assert worst(mills_bend(t), bend) < 2e-12


@pytest.mark.parametrize("width", [1e-9, 1e-3, 0.3, 0.999, 1.0, 5.0, 40.0])
def test_differences_of_the_mills_ratio_keep_their_digits(width):
    low = np.array([-7.9, -1.0, 0.0, 2.0, 5.0, 36.0])
    widths = np.full(low.shape, width)
    ends = [(mp.mpf(x), mp.mpf(x) + mp.mpf(width)) for x in low]
    exact = [exact_mills(a) - exact_mills(b) for a, b in ends]
    assert worst(mills_difference(low, widths), exact) < 1e-12
    exact = [b * exact_mills(b) - a * exact_mills(a) for a, b in ends]
    assert worst(mills_fall_difference(low, widths), exact) < 1e-12


@pytest.mark.parametrize("shape", [-30.0, -1.0, -1e-9, 0.0, 1e-9, 0.3, 0.5, 0.9999999, 1.0, 1.5, 20.0])
def test_limited_moments_of_the_generalised_pareto_excess(shape):
    t = np.array([1e-12, 1e-3, 0.1, 1.0, 3.9, 4.1, 30.0])
    t = t[2 * shape * t < 300]
    c = mp.mpf(shape)

    def integral(rate, x):  # of exp(rate u) over (0, x)
        return mp.expm1(rate * x) / rate if rate else x

    def second(x):
        if c == 0:
            return 2 * (1 - (1 + x) * mp.exp(-x))
        return 2 / c * (integral(2 * c - 1, x) - integral(c - 1, x))

    points = [mp.mpf(x) for x in t]
    assert worst(limited_excess(shape, t), [integral(c - 1, x) for x in points]) < 1e-13
    assert worst(limited_excess_second_moment(shape, t), [second(x) for x in points]) < 2e-13


def test_the_exponential_integral_at_rate_zero():
    np.testing.assert_array_equal(exponential_integral(0.0, np.array([0.0, 2.0])), [0, 2])
    np.testing.assert_array_equal(excess_at(0.0, np.array([3.0])), [3])


def test_stirlings_error():
    n = np.array([1e-6, 0.5, 1.0, 7.3, 15.9, 16.0, 100.0, 1e8])
    with mp.workdps(40):
        exact = [
            mp.loggamma(mp.mpf(x) + 1) - (mp.mpf(x) + 0.5) * mp.log(x) + mp.mpf(x) - mp.log(2 * mp.pi) / 2
            for x in n
        ]
    # Small n: an absolute error of a few rounding units of terms near 30, harmless in an exponent.
    assert worst(stirling_error(n), exact) < 1e-11
    assert max(abs(float(v - e)) for v, e in zip(stirling_error(n), exact, strict=True)) < 3e-14


def test_the_deviance_near_and_far_from_the_mean():
    x = np.array([1e6, 1e6, 3.0, 3.0, 1e-3, 1e6])
    mean = np.array([1e6 + 1e-3, 1.1e6, 3.2, 300.0, 5.0, 2.0])
    with mp.workdps(40):
        exact = [
            mp.mpf(a) * mp.log(mp.mpf(a) / mp.mpf(m)) - (mp.mpf(a) - m) for a, m in zip(x, mean, strict=True)
        ]
    assert worst(deviance(x, mean, x - mean), exact) < 1e-13


def test_poisson_probabilities_of_real_counts():
    n = np.array([0.0, 0.25, 3.7, 100.5])
    with mp.workdps(40):
        exact = [mp.exp(-20 + mp.mpf(k) * mp.log(20) - mp.loggamma(mp.mpf(k) + 1)) for k in n]
    assert worst(poisson_probability(n, 20.0), exact) < 1e-11


def test_the_lower_gamma_function_where_scipy_stops_early():
    # The series of the Poisson tail, term by term in 40 digits.
    for mean, z in ((1e7, 5), (1e6, 8), (3e5, 15)):
        n = int(mean + z * mean**0.5)
        with mp.workdps(40):
            term = mp.exp(-mp.mpf(mean) + (n + 1) * mp.log(mp.mpf(mean)) - mp.loggamma(n + 2))
            total, k = term, n + 1
            while term > total * mp.mpf(10) ** -14:
                k += 1
                term *= mp.mpf(mean) / k
                total += term
        assert worst(lower_gamma(n + 1.0, mean), [total]) < 2e-11


def test_running_sums_are_rounded_once():
    assert running_sums([0.1] * 10)[[2, 7, 9]].tolist() == [0.1 + 0.2, 0.8, 1.0]
    assert running_sums([1.0, 1e-17, 1e-17, 1e-17])[-1] == 1.0
    assert running_sums([1e-17] * 20 + [1.0])[-1] == 1.0000000000000002
    assert running_sums([]).shape == (0,)


def test_inversion_of_a_step_and_of_a_smooth_tail():
    p = np.array([0.9, 0.5, 1e-200])
    low, high = bracket(lambda x: np.exp(-x), p, 1.0, -1.0)
    x = invert_tail(lambda x: np.exp(-x), lambda x: np.exp(-x), p, low, high, -1.0)
    np.testing.assert_allclose(x, -np.log(p), rtol=1e-13)
    # No density to follow: bisection finds the step.
    x = invert_tail(
        lambda x: np.where(x < 3.7, 1.0, 0.1),
        np.zeros_like,
        np.array([0.5]),
        np.array([1.0]),
        np.array([9.0]),
        -1.0,
    )
    assert x == pytest.approx(3.7, rel=1e-14)


def test_interval_integrals_do_not_depend_on_their_company():
    # More intervals than one block holds; each must come out as if it were alone, to the last bit.
    low = np.linspace(0.0, 3.0, 20_000)
    width = np.linspace(0.1, 1.0, 20_000)
    together = interval_integrals(lambda x, _: np.exp(-x), low, width, 20)
    np.testing.assert_allclose(together, np.exp(-low) - np.exp(-low - width), rtol=1e-13)
    for k in (0, 8191, 8192, 19_999):
        alone = interval_integrals(lambda x, _: np.exp(-x), low[k : k + 1], width[k : k + 1], 20)
        assert alone[0] == together[k]
    factors = np.arange(20_000.0)
    scaled = interval_integrals(lambda x, rows: factors[rows][:, None] * x, low, width, 2)
    np.testing.assert_allclose(scaled, factors * (low * width + width**2 / 2), rtol=1e-13)
