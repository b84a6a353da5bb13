"""The derivatives the fits rest on, against mpmath to many digits.

Each function of jets is fed jets of two variables in a nonlinear way, so value, gradient and Hessian pass
through every rule; mpmath differentiates the same expression at 50 digits.
"""

import mpmath
import numpy as np
import pytest

from lossagg.fitting import jet_functions as functions
from lossagg.fitting.jets import compose, exp, log, variables

mpmath.mp.dps = 50


def check(jet, reference, point, tolerance=1e-10):
    """Compare a jet with a function of mpmath numbers at the point."""
    assert float(jet.value[0]) == pytest.approx(float(reference(*point)), rel=tolerance, abs=1e-300)
    count = len(point)
    for i in range(count):
        order = [int(i == k) for k in range(count)]
        expected = float(mpmath.diff(reference, tuple(point), tuple(order)))
        assert jet.gradient[i, 0] == pytest.approx(expected, rel=tolerance, abs=1e-14)
        for j in range(i, count):
            order = [int(i == k) + int(j == k) for k in range(count)]
            expected = float(mpmath.diff(reference, tuple(point), tuple(order)))
            assert jet.hessian[i, j, 0] == pytest.approx(expected, rel=tolerance, abs=1e-13)
            assert jet.hessian[j, i, 0] == pytest.approx(expected, rel=tolerance, abs=1e-13)


def test_arithmetic():
    a, b = variables(np.array([1.3, 0.7]))
    jet = 2.0 - (a * b + 3.0) / (exp(a) + log(b) * np.array([0.5])) + 1.0 / b

    def reference(x, y):
        return 2 - (x * y + 3) / (mpmath.exp(x) + mpmath.log(y) / 2) + 1 / y

    check(jet, reference, (1.3, 0.7))


def test_composition_of_a_known_function():
    a, b = variables(np.array([1.3, 0.7]))
    inner = (a * b, exp(b))
    u, v = (float(part.value[0]) for part in inner)
    jet = compose(inner, u**2 * v, np.array([2 * u * v, u**2]), np.array([[2 * v, 2 * u], [2 * u, 0.0]]))
    check(jet, lambda x, y: (x * y) ** 2 * mpmath.exp(y), (1.3, 0.7))


def log_normal_sf(z):
    return mpmath.log(mpmath.erfc(z / mpmath.sqrt(2)) / 2)


@pytest.mark.parametrize("z", [-6.0, -1.0, 0.3, 5.0, 30.0])
def test_normal_survival_and_mills_ratio(z):
    a, b = variables(np.array([z, 1.1]))
    check(functions.log_normal_survival(a * b), lambda x, y: log_normal_sf(x * y), (z, 1.1), 1e-9)

    def log_mills(x, y):
        return log_normal_sf(x * y) + (x * y) ** 2 / 2 + mpmath.log(2 * mpmath.pi) / 2

    check(functions.log_mills(a * b), log_mills, (z, 1.1), 1e-9)


@pytest.mark.parametrize("a", [-1e-4, -0.3, -2.0, -40.0])
def test_log_one_minus_exp(a):
    x, y = variables(np.array([a, 1.5]))
    jet = functions.log_one_minus_exp(x * y)
    check(jet, lambda u, v: mpmath.log(1 - mpmath.exp(u * v)), (a, 1.5))


def test_log_sum_exp():
    x, y = variables(np.array([0.4, 1.9]))
    jet = functions.log_sum_exp(x * y, x - y)
    check(jet, lambda u, v: mpmath.log(mpmath.exp(u * v) + mpmath.exp(u - v)), (0.4, 1.9))


@pytest.mark.parametrize("shape", [-0.4, -1e-7, 1e-12, 0.003, 0.049, 0.051, 0.7, 3.0])
@pytest.mark.parametrize("w", [1e-3, 0.9, 2.2])
def test_excess_through_shape_zero(shape, w):
    """The closed form and the series meet: shape 0 is a point like any other."""
    x, y = variables(np.array([shape, np.log(w)]))

    def reference(xi, level):
        return mpmath.log(1 + xi * mpmath.exp(level)) / xi

    check(functions.log_excess(x, y), reference, (shape, np.log(w)), 1e-10)


def test_excess_is_infinite_outside_the_support():
    assert functions.excess_partials(-0.5, np.array([1.0, 2.0, 3.0]))[0].tolist()[1:] == [np.inf, np.inf]


@pytest.mark.parametrize(
    ("shape", "z"), [(0.3, 0.01), (0.8, 1.0), (1.5, 20.0), (40.0, 30.0), (2.5, 900.0), (0.05, 3.0)]
)
def test_gamma_survival(shape, z):
    """Far in the tail too, where the upper incomplete gamma function underflows."""
    x, y = variables(np.array([shape, np.log(z)]))

    def reference(a, level):
        return mpmath.log(mpmath.gammainc(a, mpmath.exp(level), regularized=True))

    jet = functions.log_gamma_survival(x, y)
    point = (shape, float(np.log(z)))
    assert float(jet.value[0]) == pytest.approx(float(reference(*point)), rel=1e-12)
    for i, order in ((0, (1, 0)), (1, (0, 1))):
        assert jet.gradient[i, 0] == pytest.approx(float(mpmath.diff(reference, point, order)), rel=1e-9)
    for (i, j), order in (((0, 0), (2, 0)), ((0, 1), (1, 1)), ((1, 1), (0, 2))):
        expected = float(mpmath.diff(reference, point, order))
        assert jet.hessian[i, j, 0] == pytest.approx(expected, rel=1e-7)
