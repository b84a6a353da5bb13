"""The worst dependence between lines: against formulas for two and for many lines."""

import numpy as np
import pytest
from scipy import optimize

import lossagg
from lossagg.engines.worst_case import worst_value_at_risk


def one_loss(severity):
    """One loss a year of this size."""
    return lossagg.annual_loss(lossagg.CountTable(probabilities=[0.0, 1.0]), severity, engine="fourier")


@pytest.mark.parametrize("level", [0.9, 0.99])
def test_two_exponential_lines(level):
    """The worst of two equal lines is twice the quantile halfway into the tail (Makarov 1981)."""
    loss = one_loss(lossagg.Exponential(mean=1.0))
    low, high = worst_value_at_risk([loss, loss], level)
    truth = 2 * -np.log((1 - level) / 2)
    assert low <= truth * (1 + 1e-6)
    assert truth <= high * (1 + 1e-6)
    assert high - low <= 2e-3 * truth


def dual_bound(lines, level):
    """Sharp for equal laws with a decreasing density (Embrechts and Puccetti 2006, "Bounds for functions of
    dependent risks", Finance and Stochastics 10): the s at which the least over a < s / d of
    d int_a^(s - (d - 1) a) P(X > x) dx / (s - d a) is 1 - level; X Pareto, P(X > x) = (1 + x)**-2."""

    def excess(s):
        def inner(a):
            b = s - (lines - 1) * a
            return lines * (1 / (1 + a) - 1 / (1 + b)) / (s - lines * a)

        return optimize.minimize_scalar(inner, bounds=(0, s / lines * (1 - 1e-9)), method="bounded").fun

    return optimize.brentq(lambda s: excess(s) - (1 - level), 1.0, 1e5)


@pytest.mark.parametrize(("lines", "level", "published"), [(8, 0.99, 141.67), (8, 0.999, 465.28)])
def test_equal_pareto_lines(lines, level, published):
    """Pareto alpha 2, eight lines: 141.67 and 465.28 (Embrechts, Puccetti and Rüschendorf 2013, table; value
    from memory, recomputed by the dual bound)."""

    class ParetoTwo:
        def value_at_risk(self, p):
            return (1 - p) ** -0.5 - 1

    truth = dual_bound(lines, level)
    assert truth == pytest.approx(published, rel=1e-4)
    low, high = worst_value_at_risk([ParetoTwo()] * lines, level)
    assert low <= truth <= high
    assert high - low <= 3e-3 * truth


def test_it_is_never_below_the_sum_of_the_lines():
    losses = [
        lossagg.annual_loss(lossagg.Poisson(mean=mean), lossagg.Exponential(mean=10.0), engine="panjer")
        for mean in (0.01, 2.0)
    ]
    low, high = worst_value_at_risk(losses, 0.95, slices=200)
    assert sum(loss.value_at_risk(0.95) for loss in losses) <= low <= high
