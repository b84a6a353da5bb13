"""The special functions of the likelihoods with their derivatives, as functions of jets.

Every survival function is taken in logarithms: a threshold or a censoring point far in the tail
keeps its digits, and log F, log(F(b) - F(a)) follow from log S without cancellation.
"""

from __future__ import annotations

import numpy as np
from scipy import special

from lossagg.arrays import FloatArray
from lossagg.fitting.jets import Jet, lift, lift_pair

_HALF_LOG_TWO_PI = 0.5 * np.log(2 * np.pi)
_FRACTION_FROM, _FRACTION_TERMS = 3.0, 40
_SERIES_TERMS = 12
_SERIES_REACH = 0.05  # below: the power series; 0.05**12 is under rounding. Above: the closed form.
# Central differences of order eight at offsets 1..4 steps (Fornberg 1988, Math. Comp. 51, table 1).
_FIRST = np.array([4 / 5, -1 / 5, 4 / 105, -1 / 280])
_SECOND = np.array([8 / 5, -1 / 5, 8 / 315, -1 / 560])
_SECOND_CENTRE = -205 / 72


def log_normal_survival(z: Jet) -> Jet:
    """log P(Z > z) of the standard normal law."""
    excess, _ = _hazard_excess(z.value)
    hazard = z.value + excess
    return lift(z, special.log_ndtr(-z.value), -hazard, -hazard * excess)


def log_mills(z: Jet) -> Jet:
    """log of Mills' ratio P(Z > z) / phi(z) of the standard normal law."""
    return lift(z, *mills_parts(z.value))


def mills_parts(z: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
    """log of Mills' ratio with its first and second derivative, each of z's shape."""
    excess, bend = _hazard_excess(z)
    value = special.log_ndtr(-z) + 0.5 * z**2 + _HALF_LOG_TWO_PI
    positive = z > 0  # there the two terms above cancel, and erfcx does not
    value[positive] = np.log(special.erfcx(z[positive] / np.sqrt(2))) + 0.5 * np.log(np.pi / 2)
    return value, -excess, bend


def log_one_minus_exp(a: Jet) -> Jet:
    """log(1 - exp(a)) for a < 0: log F from log S, log(1 - S(b)/S(a)) from their difference."""
    with np.errstate(over="ignore"):
        odds = -1.0 / np.expm1(-a.value)
    value = np.where(
        a.value > -np.log(2), np.log(-np.expm1(a.value)), np.log1p(-np.exp(np.minimum(a.value, 0)))
    )
    return lift(a, value, odds, odds * (1 - odds))


def log_sum_exp(a: Jet, b: Jet) -> Jet:
    """log(exp(a) + exp(b))."""
    share = special.expit(a.value - b.value)
    bend = share * (1 - share)
    return lift_pair(a, b, np.logaddexp(a.value, b.value), (share, 1 - share), (bend, -bend, bend))


def log_shares(odds: Jet) -> tuple[Jet, Jet]:
    """log q and log(1 - q) from the log-odds of q."""
    q = special.expit(odds.value)
    bend = -q * (1 - q)
    return lift(odds, special.log_expit(odds.value), 1 - q, bend), lift(
        odds, special.log_expit(-odds.value), -q, bend
    )


def log_gamma_function(a: Jet) -> Jet:
    """log Gamma(a)."""
    return lift(a, special.gammaln(a.value), special.digamma(a.value), special.polygamma(1, a.value))


def excess_partials(shape: float, w: FloatArray) -> tuple[FloatArray, ...]:
    """g(shape, w) = log(1 + shape * w) / shape and its partial derivatives, through shape = 0.

    -g is the log survival of the generalized Pareto law at a standardised excess w, and of the
    Burr, Lomax, Weibull and exponential laws at their own w. Derivatives in the second place are
    with respect to log w. Outside the support g is `inf`.

    Returns:
        g, g_shape, g_log, g_shape_shape, g_shape_log, g_log_log, each of w's shape.
    """
    v = shape * w
    outside = v <= -1
    with np.errstate(divide="ignore", over="ignore"):
        q = 1.0 / (1.0 / w + shape)
    g, g_s, g_ss = _excess_closed(shape, np.where(outside, 0.0, w), q)
    small = np.abs(v) < _SERIES_REACH
    if small.any():
        g[small], g_s[small], g_ss[small] = _excess_series(v[small], w[small])
    g[outside] = np.inf
    return g, g_s, q, g_ss, -(q**2), q * (1 - shape * q)


def _excess_closed(shape: float, w: FloatArray, q: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
    if shape == 0.0:
        return w.copy(), np.zeros_like(w), np.zeros_like(w)  # all of it goes to the series
    with np.errstate(invalid="ignore", over="ignore"):
        g = np.log1p(shape * w) / shape
        g_s = (q - g) / shape
        return g, g_s, (-(q**2) - 2 * g_s) / shape


def _excess_series(v: FloatArray, w: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
    value, first, second = np.zeros_like(v), np.zeros_like(v), np.zeros_like(v)
    for k in range(_SERIES_TERMS, -1, -1):  # Horner: g = w * sum of (-v)**k / (k + 1)
        value = value * -v + 1 / (k + 1)
        first = first * -v - (k + 1) / (k + 2)
        second = second * -v + (k + 1) * (k + 2) / (k + 3)
    return w * value, w**2 * first, w**3 * second


def log_excess(shape: Jet, log_w: Jet) -> Jet:
    """log(1 + shape * w) / shape as a jet in the shape and in log w."""
    with np.errstate(over="ignore"):
        w = np.exp(log_w.value)
    g, g_s, g_l, g_ss, g_sl, g_ll = excess_partials(float(shape.value[0]), w)
    return lift_pair(shape, log_w, g, (g_s, g_l), (g_ss, g_sl, g_ll))


def log_gamma_survival(shape: Jet, log_z: Jet) -> Jet:
    """log P(X > z) of the gamma law of scale 1.

    Derivatives in log z are closed; those in the shape, which have no closed form, are central
    differences of order eight with steps of 2 % of the shape's own scale (relative error about 1e-11).
    """
    a = float(shape.value[0])
    with np.errstate(over="ignore"):
        z = np.exp(log_z.value)
    step = 0.02 * a / np.sqrt(1 + a)
    value = _log_gamma_sf(a, z)
    first, second = np.zeros_like(z), _SECOND_CENTRE * value
    for offset, (one, two) in enumerate(zip(_FIRST, _SECOND, strict=True), start=1):
        up, down = _log_gamma_sf(a + offset * step, z), _log_gamma_sf(a - offset * step, z)
        first += one * (up - down)
        second += two * (up + down)
    first, second = first / step, second / step**2
    with np.errstate(over="ignore"):
        hazard = np.exp(a * log_z.value - z - special.gammaln(a) - value)  # z times the hazard rate
    cross = -hazard * (log_z.value - special.digamma(a) - first)
    bend = -hazard * (a - z + hazard)
    return lift_pair(shape, log_z, value, (first, -hazard), (second, cross, bend))


def _log_gamma_sf(a: float, z: FloatArray) -> FloatArray:
    upper = special.gammaincc(a, z)
    with np.errstate(divide="ignore"):
        value = np.where(upper > 0.5, np.log1p(-special.gammainc(a, z)), np.log(upper))
    far = (upper < 1e-250) & (z > a + 1)
    if far.any():
        value[far] = _log_gamma_sf_far(a, z[far])
    return value


def _log_gamma_sf_far(a: float, z: FloatArray) -> FloatArray:
    """Legendre's continued fraction (Abramowitz & Stegun 1964, 6.5.31), evaluated from the inside."""
    tail = z + 2 * 60 + 1 - a
    for k in range(60, 0, -1):
        tail = z + 2 * k - 1 - a - k * (k - a) / tail
    return np.asarray(a * np.log(z) - z - special.gammaln(a) - np.log(tail))


def _hazard_excess(z: FloatArray) -> tuple[FloatArray, FloatArray]:
    """h - z and 1 - h (h - z), with h the hazard rate phi(z) / P(Z > z) of the standard normal law.

    Far out h - z is about 1/z: there Laplace's continued fraction h = z + 1/(z + 2/(z + 3/(z + ...)))
    (Abramowitz & Stegun 1964, 26.2.14) gives both without cancellation.
    """
    hazard: FloatArray = np.exp(-0.5 * z**2 - _HALF_LOG_TWO_PI - special.log_ndtr(-z))
    excess = hazard - z
    bend = 1 - hazard * excess
    far = z > _FRACTION_FROM
    if far.any():
        inner = np.zeros_like(z[far])
        for k in range(_FRACTION_TERMS, 1, -1):
            inner = k / (z[far] + inner)
        excess[far] = 1 / (z[far] + inner)
        bend[far] = excess[far] * (inner - excess[far])
    return excess, bend
