"""The size laws as textbooks write them, for 120-digit arithmetic: the measure of lossagg's accuracy.

Plain formulas with all their cancellations, which 120 digits absorb; nothing here is shared with the
package. Formulas: Klugman, Panjer and Willmot, Loss Models, appendix A (from memory); the generalised
Pareto: McNeil, Frey and Embrechts, Quantitative Risk Management, ch. 5 (from memory). That they are
right is not taken on trust: test_size_laws.py also integrates the survival functions numerically.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import mpmath as mp


@dataclass(frozen=True)
class Textbook:
    """sf(x), pdf(x), partial(k, x) = E[X**k; X <= x], upper(k, x) = E[X**k; X > x] for k = 1, 2."""

    sf: Callable
    pdf: Callable
    partial: Callable
    upper: Callable

    def limited(self, k, x):
        """E[min(X, x)**k]."""
        return self.partial(k, x) + x**k * self.sf(x)

    def excess(self, x):
        """E[(X - x)+]."""
        return self.upper(1, x) - x * self.sf(x)

    def second_excess(self, x):
        """E[((X - x)+)**2]."""
        return self.upper(2, x) - 2 * x * self.upper(1, x) + x * x * self.sf(x)


def normal_cdf(z):
    return mp.erfc(-z / mp.sqrt(2)) / 2


def gamma(shape, scale):
    a, s = mp.mpf(shape), mp.mpf(scale)
    return Textbook(
        sf=lambda x: mp.gammainc(a, x / s) / mp.gamma(a),
        pdf=lambda x: (x / s) ** (a - 1) * mp.exp(-x / s) / s / mp.gamma(a),
        partial=lambda k, x: s**k * mp.gammainc(a + k, 0, x / s) / mp.gamma(a),
        upper=lambda k, x: s**k * mp.gammainc(a + k, x / s) / mp.gamma(a),
    )


def exponential(mean):
    return gamma(1, mean)


def weibull(shape, scale):
    k_, s = mp.mpf(shape), mp.mpf(scale)

    def t(x):
        return (x / s) ** k_

    return Textbook(
        sf=lambda x: mp.exp(-t(x)),
        pdf=lambda x: k_ / x * t(x) * mp.exp(-t(x)),
        partial=lambda k, x: s**k * mp.gammainc(1 + k / k_, 0, t(x)),
        upper=lambda k, x: s**k * mp.gammainc(1 + k / k_, t(x)),
    )


def lognormal(mu, sigma):
    m, s = mp.mpf(mu), mp.mpf(sigma)

    def z(x):
        return (mp.log(x) - m) / s

    def moment(k):
        return mp.exp(k * m + k * k * s * s / 2)

    return Textbook(
        sf=lambda x: normal_cdf(-z(x)),
        pdf=lambda x: mp.npdf(z(x)) / s / x,
        partial=lambda k, x: moment(k) * normal_cdf(z(x) - k * s),
        upper=lambda k, x: moment(k) * normal_cdf(k * s - z(x)),
    )


def pareto(alpha, minimum):
    a, m = mp.mpf(alpha), mp.mpf(minimum)

    def partial(k, x):
        if x <= m:
            return mp.mpf(0)
        if k == a:
            return a * m**a * mp.log(x / m)
        return a * m**a / (k - a) * (x ** (k - a) - m ** (k - a))

    return Textbook(
        sf=lambda x: (m / max(x, m)) ** a,
        pdf=lambda x: a / x * (m / x) ** a if x >= m else mp.mpf(0),
        partial=partial,
        upper=lambda k, x: a / (a - k) * max(x, m) ** k * (m / max(x, m)) ** a,
    )


def generalized_pareto(shape, scale, threshold=0.0):
    c, b, u = mp.mpf(shape), mp.mpf(scale), mp.mpf(threshold)

    def base(x):
        return max(1 + c * max(x - u, 0) / b, mp.mpf(0))

    def sf(x):
        if c == 0:
            return mp.exp(-max(x - u, 0) / b)
        return base(x) ** (-1 / c) if base(x) > 0 else mp.mpf(0)

    def excess_moments(x, above, orders):
        """E[Y**j; Y > y] or E[Y**j; Y <= y] for the orders j, of the excess Y = X - threshold."""
        y = max(x - u, 0)
        if c == 0:
            return [
                b**j * (mp.gammainc(j + 1, y / b) if above else mp.gammainc(j + 1, 0, y / b)) for j in orders
            ]
        # Y = (b / c) (W - 1) with W of density w**(-1/c - 1) / c.
        w = base(x)
        powers = []
        for j in orders:
            rate = j - 1 / c
            if above:
                powers.append(w**rate / -rate / c if w > 0 else mp.mpf(0))
            else:
                powers.append((mp.log(w) if rate == 0 else (w**rate - 1) / rate if w > 0 else -1 / rate) / c)
        return [
            (b / c) ** j * sum(mp.binomial(j, i) * (-1) ** (j - i) * powers[i] for i in range(j + 1))
            for j in orders
        ]

    def moment(k, x, above):
        moments = excess_moments(x, above, range(k + 1))
        return sum(mp.binomial(k, j) * u ** (k - j) * moments[j] for j in range(k + 1))

    def pdf(x):
        if x < u:
            return mp.mpf(0)
        return sf(x) / b if c == 0 else (base(x) ** (-1 / c - 1) / b if base(x) > 0 else mp.mpf(0))

    return Textbook(
        sf=sf,
        pdf=pdf,
        partial=lambda k, x: moment(k, x, above=False),
        upper=lambda k, x: moment(k, x, above=True),
    )


def lomax(alpha, scale):
    return generalized_pareto(1 / mp.mpf(alpha), mp.mpf(scale) / mp.mpf(alpha))


def burr(alpha, gamma, scale):
    a, g, s = mp.mpf(alpha), mp.mpf(gamma), mp.mpf(scale)

    def inside(x):
        return 1 / (1 + (x / s) ** -g)

    def outside(x):
        return 1 / (1 + (x / s) ** g)

    def below(k, x):
        # The incomplete beta function; past the middle from its complement, continued to negative arguments.
        if x < s:
            return mp.betainc(1 + k / g, a - k / g, 0, inside(x))
        rest, w = a - k / g, outside(x)
        return mp.beta(1 + k / g, rest) - w**rest / rest * mp.hyp2f1(rest, -k / g, rest + 1, w)

    return Textbook(
        sf=lambda x: outside(x) ** a,
        pdf=lambda x: a * g / x * (x / s) ** g * outside(x) ** (a + 1),
        partial=lambda k, x: s**k * a * below(k, x),
        upper=lambda k, x: s**k * a * mp.betainc(a - k / g, 1 + k / g, 0, outside(x)),
    )


def log_logistic(gamma, scale):
    return burr(1, gamma, scale)


def log_gamma(shape, rate, minimum):
    a, r, m = mp.mpf(shape), mp.mpf(rate), mp.mpf(minimum)

    def depth(x):
        return mp.log(max(x, m) / m)

    def partial(k, x):
        # The integral of y**(a - 1) exp((k - r) y), below and at the rate by Kummer's function.
        y = depth(x)
        return m**k * (r * y) ** a / mp.gamma(a + 1) * mp.hyp1f1(a, a + 1, (k - r) * y)

    return Textbook(
        sf=lambda x: mp.gammainc(a, r * depth(x)) / mp.gamma(a),
        pdf=lambda x: (r**a * depth(x) ** (a - 1) * (x / m) ** -r / mp.gamma(a) / x) if x >= m else mp.mpf(0),
        partial=partial,
        upper=lambda k, x: m**k * (1 - k / r) ** -a * mp.gammainc(a, (r - k) * depth(x)) / mp.gamma(a),
    )


def inverse_gaussian(mean, shape):
    m, s = mp.mpf(mean), mp.mpf(shape)

    def ends(x):
        return mp.sqrt(s / x) * (x / m - 1), mp.sqrt(s / x) * (x / m + 1)

    def sf(x):
        a, b = ends(x)
        return normal_cdf(-a) - mp.exp(2 * s / m) * normal_cdf(-b)

    def upper_mean(x):
        a, b = ends(x)
        return m * (normal_cdf(-a) + mp.exp(2 * s / m) * normal_cdf(-b))

    def partial_mean(x):
        a, b = ends(x)
        return m * (normal_cdf(a) - mp.exp(2 * s / m) * normal_cdf(-b))

    def root(x):
        return 2 * m * m * mp.sqrt(x / s) * mp.npdf(ends(x)[0])

    return Textbook(
        sf=sf,
        pdf=lambda x: mp.sqrt(s / (2 * mp.pi * x**3)) * mp.exp(-s * (x - m) ** 2 / (2 * m * m * x)),
        partial=lambda k, x: (
            partial_mean(x) if k == 1 else m * m * (1 - sf(x) + partial_mean(x) / s) - root(x)
        ),
        upper=lambda k, x: upper_mean(x) if k == 1 else m * m * (sf(x) + upper_mean(x) / s) + root(x),
    )


BY_FAMILY = {
    "exponential": exponential,
    "gamma": gamma,
    "weibull": weibull,
    "lognormal": lognormal,
    "pareto": pareto,
    "lomax": lomax,
    "generalized-pareto": generalized_pareto,
    "burr": burr,
    "inverse-gaussian": inverse_gaussian,
    "log-logistic": log_logistic,
    "log-gamma": log_gamma,
}
