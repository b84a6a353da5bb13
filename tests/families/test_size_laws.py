"""The contract of every size law: digits against the textbook, integrals, inverses, ends, scaling."""

from __future__ import annotations

import itertools
import pickle

import mpmath as mp
import numpy as np
import pytest
import textbook
from hypothesis import given, settings
from hypothesis import strategies as st
from law_cases import CONTINUOUS, SIMPLE, SIZES, name
from scipy import integrate

from lossagg.errors import InputError
from lossagg.families import GeneralizedPareto, Lognormal, Lomax, Mixture, SizeLaw, SizeTable, Spliced

UPPER = (0.5, 0.1, 1e-3, 1e-8, 1e-30, 1e-100, 1e-300)
LOWER = (1e-300, 1e-30, 1e-6, 0.05)

every_law = pytest.mark.parametrize("law", SIZES, ids=name)


@pytest.fixture(autouse=True)
def digits():
    with mp.workdps(120):
        yield


def sample_points(law: SizeLaw) -> list[float]:
    """Amounts from the far lower to the far upper tail, strictly inside the support."""
    low, high = law.support
    points = [float(law.ppf(q)) for q in LOWER] + [float(law.isf(p)) for p in UPPER]
    # Beside a largest loss the survival depends on the last digit of the amount: stay off it.
    top = high if high == np.inf else low + 0.999 * (high - low)
    return sorted({x for x in points if max(low, 1e-90) < x < min(top, 1e140)})


def relative(value: float, reference: mp.mpf) -> float:
    return float(abs(mp.mpf(float(value)) - reference) / abs(reference))


@pytest.mark.parametrize("law", SIMPLE, ids=name)
def test_ten_digits_of_the_textbook_from_tail_to_tail(law):
    # The textbook formulas in 120 digits; measured errors are below 1e-11, mostly near 1e-14.
    book = textbook.BY_FAMILY[law.family](**law.parameters)
    for x in sample_points(law):
        exact = mp.mpf(x)
        pairs = {
            "sf": (law.sf(x), book.sf(exact)),
            "cdf": (law.cdf(x), 1 - book.sf(exact)),
            "pdf": (law.pdf(x), book.pdf(exact)),
            "limited_mean": (law.limited_mean(x), book.limited(1, exact)),
            "limited_second_moment": (law.limited_second_moment(x), book.limited(2, exact)),
        }
        if law.tail_index > 1:
            pairs["expected_excess"] = (law.expected_excess(x), book.excess(exact))
        for what, (value, reference) in pairs.items():
            if abs(reference) > mp.mpf(10) ** -300 and not (what == "cdf" and reference < 1e-100):
                assert relative(value, reference) < 1e-10, (what, x)
        if law.tail_index > 2 and mp.mpf(10) ** -280 < book.second_excess(exact) < mp.mpf(10) ** 300:
            assert relative(law.second_excess(x), book.second_excess(exact)) < 2e-6, x


@pytest.mark.parametrize("law", SIMPLE, ids=name)
def test_the_lower_tail_keeps_its_digits(law):
    book = textbook.BY_FAMILY[law.family](**law.parameters)
    for q in (1e-100, 1e-30, 1e-12, 1e-3):
        x = float(law.ppf(q))
        if x > max(1e-80, law.support[0] * (1 + 1e-9)):
            with mp.workdps(400):
                assert relative(law.cdf(x), 1 - book.sf(mp.mpf(x))) < 1e-10, q


@every_law
def test_sf_and_cdf_are_complements(law):
    x = np.concatenate([[0.0], sample_points(law), [a for a, _ in law.atoms], law.breakpoints])
    np.testing.assert_allclose(law.sf(x) + law.cdf(x), 1.0, rtol=0, atol=3e-15)


@every_law
def test_quantiles_undo_the_tails(law):
    # Where the law has atoms or gaps, the quantile is the smallest amount that reaches the level.
    levels = np.array([1e-280, 1e-100, 1e-30, 1e-12, 1e-6, 1e-3, 0.05, 0.3, 0.5, 0.7, 0.95, 0.999])
    for tail, quantile, outward in ((law.sf, law.isf, 0.0), (law.cdf, law.ppf, np.inf)):
        x = np.asarray(quantile(levels))
        # Beside either end of the support the amount itself has too few digits left.
        low, high = law.support
        kept = np.isin(x, [amount for amount, _ in law.atoms])
        kept |= (x < min(high * (1 - 1e-3), 1e300)) & (x > max(low * (1 + 1e-9), 1e-290))
        p, x = levels[kept], x[kept]
        value = np.asarray(tail(x))
        steepness = x * np.asarray(law.pdf(x)) / np.maximum(value, 1e-307)
        slack = 1e-11 + 4e-16 * steepness
        just_below = np.where(x > 0, x * (1 - 1e-12), -1.0)
        if outward == 0.0:
            assert (value <= p * (1 + slack)).all()
            before = np.asarray(law.sf(just_below))
            assert (before >= p * (1 - slack - 2e-12 * steepness)).all()
        else:
            assert (value >= p * (1 - slack)).all()
            before = np.asarray(law.cdf(just_below))
            assert (before <= p * (1 + slack + 2e-12 * steepness)).all()
        if not law.atoms and law.family != "mixture":
            np.testing.assert_array_less(abs(value / p - 1), slack)


@pytest.mark.parametrize("law", SIMPLE, ids=name)
def test_isf_of_sf_is_the_amount_out_to_1e_300(law):
    for x in sample_points(law):
        p = law.sf(x)
        if 1e-305 < p < 0.9:
            assert law.isf(p) == pytest.approx(x, rel=1e-10)


@every_law
def test_levels_zero_and_one_give_the_ends(law):
    assert (law.ppf(0), law.ppf(1)) == law.support
    assert (law.isf(1), law.isf(0)) == law.support


def pieces(law: SizeLaw, low: float, high: float) -> list[float]:
    """Cut points for quadrature: jumps, and quantiles so that no piece hides a peak."""
    q = np.concatenate([np.logspace(-12, -0.5, 24), np.linspace(0.33, 0.67, 5)])
    cuts = {*law.breakpoints, *(a for a, _ in law.atoms), *np.asarray(law.ppf(q)), *np.asarray(law.isf(q))}
    return [low, *sorted(float(c) for c in cuts if low < c < high), high]


def quadrature(function, cuts: list[float]) -> float:
    """Gauss-Legendre on each piece, in the logarithm where a piece spans decades, as the tails do."""
    nodes, weights = np.polynomial.legendre.leggauss(40)
    total = 0.0
    for low, high in itertools.pairwise(cuts):
        if low > 0 and high > 4 * low:
            for a, b in itertools.pairwise(np.linspace(np.log(low), np.log(high), 9)):
                x = np.exp(0.5 * (b - a) * (nodes + 1) + a)
                total += 0.5 * (b - a) * weights @ (function(x) * x)
        else:
            x = 0.5 * (high - low) * (nodes + 1) + low
            total += 0.5 * (high - low) * weights @ function(x)
    return total


@every_law
def test_limited_moments_are_integrals_of_the_survival_function(law):
    for x in (float(law.ppf(0.3)), float(law.isf(0.1)), float(law.isf(1e-4))):
        if not 0 < x < 1e60:
            continue
        cuts = pieces(law, 0.0, x)
        assert law.limited_mean(x) == pytest.approx(quadrature(law.sf, cuts), rel=1e-9)
        second = quadrature(lambda y: 2 * y * law.sf(y), cuts)
        assert law.limited_second_moment(x) == pytest.approx(second, rel=1e-9)


@every_law
def test_excesses_are_integrals_of_the_survival_function(law):
    for p in (0.6, 1e-3):
        x = float(law.isf(p))
        far = float(law.isf(p * 1e-40))
        if law.tail_index <= 1 or not x < far < 1e100:
            continue
        rest = law.expected_excess(far)
        cuts = pieces(law, x, far)
        value = quadrature(law.sf, cuts) + rest
        assert law.expected_excess(x) == pytest.approx(value, rel=1e-9)
        if law.tail_index > 2:
            second = quadrature(lambda y, x=x: 2 * (y - x) * law.sf(y), cuts)
            second += law.second_excess(far) + 2 * (far - x) * rest
            assert law.second_excess(x) == pytest.approx(second, rel=1e-8)


@every_law
def test_the_density_and_the_atoms_add_up_to_the_distribution(law):
    low = float(law.ppf(0.05)) if not law.atoms else 0.0
    for p in (0.7, 0.2, 1e-3):
        x = float(law.isf(p))
        if x <= low:
            continue
        mass = quadrature(law.pdf, pieces(law, low, x)) if x > low else 0.0
        mass += law.cdf(low) if not law.atoms else sum(w for a, w in law.atoms if a <= x)
        assert mass == pytest.approx(law.cdf(x), rel=1e-7)


def test_the_density_agrees_with_adaptive_quadrature():
    # An independent integrator for one law with a jump in its density.
    law = Spliced(
        body=Lomax(alpha=3, scale=2000), tail=Lomax(alpha=2, scale=500), threshold=700, tail_probability=0.4
    )
    mass, _ = integrate.quad(law.pdf, 0, 5000, points=[700], limit=200)
    assert mass == pytest.approx(law.cdf(5000), rel=1e-10)


@every_law
def test_limited_and_excess_add_to_the_mean(law):
    if law.tail_index <= 1:
        assert law.mean() == np.inf
        assert law.expected_excess(5.0) == np.inf
        return
    for x in sample_points(law):
        assert law.limited_mean(x) + law.expected_excess(x) == pytest.approx(law.mean(), rel=1e-11)
    if law.tail_index > 2:
        second = law.second_excess(0)
        assert second == pytest.approx(law.second_moment(), rel=1e-12)
        assert second - law.mean() ** 2 == pytest.approx(law.variance(), rel=1e-9, abs=1e-13 * second)


@every_law
def test_moments_exist_exactly_below_the_tail_index(law):
    assert (law.mean() < np.inf) == (law.tail_index > 1)
    # One lognormal of the cases has a second moment of 1e347, beyond what a float holds.
    exists = law.tail_index > 2 and law != Lognormal(mu=0, sigma=20)
    assert (law.variance() < np.inf) == exists
    assert (law.sd() < np.inf) == exists
    assert law.limited_mean(np.inf) == law.mean()
    assert law.limited_second_moment(np.inf) == law.second_moment()
    assert np.isfinite(law.limited_mean(1e6))


@every_law
def test_the_ends_of_the_scale(law):
    x = np.array([-1.0, np.inf])
    np.testing.assert_array_equal(law.cdf(x), [0, 1])
    np.testing.assert_array_equal(law.sf(x), [1, 0])
    np.testing.assert_array_equal(law.pdf(x), [0, 0])
    np.testing.assert_array_equal(law.limited_mean([-1.0, 0.0]), [0, 0])
    assert law.expected_excess(-5.0) == law.mean()
    if law.mean() < np.inf:
        assert law.expected_excess(0) == pytest.approx(law.mean(), rel=1e-14)
        assert law.expected_excess(np.inf) == 0
        assert law.mean_excess(0) == pytest.approx(law.mean() / law.sf(0), rel=1e-14)
    assert np.isnan(law.mean_excess(np.inf)) or law.mean() == np.inf


@every_law
def test_scalars_arrays_and_nothing_at_all(law):
    for method in (law.cdf, law.sf, law.pdf, law.ppf, law.isf, law.limited_mean, law.limited_second_moment):
        assert type(method(0.5)) is float
        assert method([]).shape == (0,)
        grid = method(np.full((2, 3), 0.5))
        assert grid.shape == (2, 3)
        assert (grid == method(0.5)).all()
    for method in (law.expected_excess, law.second_excess, law.mean_excess, law.loss_elimination_ratio):
        assert type(method(0.5)) is float
        assert method(np.empty((0, 2))).shape == (0, 2)
    assert type(law.layer_mean(1, 2)) is float
    assert law.layer_mean([], 2.0).shape == (0,)


@every_law
def test_another_currency_scales_every_amount(law):
    twice = law.scaled(1.5)
    x = np.array(sample_points(law)[:6])
    np.testing.assert_allclose(twice.sf(1.5 * x), law.sf(x), rtol=1e-8)
    np.testing.assert_allclose(twice.limited_mean(1.5 * x), 1.5 * law.limited_mean(x), rtol=1e-10)
    np.testing.assert_allclose(
        twice.limited_second_moment(1.5 * x), 2.25 * law.limited_second_moment(x), rtol=1e-9
    )
    np.testing.assert_allclose(twice.isf([0.5, 1e-3]), 1.5 * law.isf([0.5, 1e-3]), rtol=1e-12)
    assert twice.mean() == pytest.approx(1.5 * law.mean())
    assert twice.variance() == pytest.approx(2.25 * law.variance(), rel=1e-9)
    assert twice.tail_index == law.tail_index
    np.testing.assert_allclose(twice.support, 1.5 * np.asarray(law.support))
    np.testing.assert_allclose(twice.breakpoints, 1.5 * np.asarray(law.breakpoints))


@every_law
def test_a_law_is_a_value(law):
    assert pickle.loads(pickle.dumps(law)) == law
    assert hash(law) == hash(pickle.loads(pickle.dumps(law)))
    assert "\n" not in repr(law)
    assert all(type(value) is float for value in law.parameters.values())
    with pytest.raises(AttributeError):
        law.mean = 3.0


def quantile_of(law: SizeLaw, u: float) -> float:
    return float(law.ppf(u))


@settings(derandomize=True, deadline=None, max_examples=150)
@given(law=st.sampled_from(SIZES), u=st.floats(1e-6, 1 - 1e-9), v=st.floats(1e-6, 1 - 1e-9))
def test_tails_fall_and_costs_rise(law, u, v):
    low, high = sorted((quantile_of(law, u), quantile_of(law, v)))
    if high > 1e100:
        return
    assert law.sf(low) >= law.sf(high)
    assert law.cdf(low) <= law.cdf(high)
    assert law.limited_mean(low) <= law.limited_mean(high) * (1 + 1e-13)
    assert law.limited_second_moment(low) <= law.limited_second_moment(high) * (1 + 1e-12)
    assert law.expected_excess(low) >= law.expected_excess(high) * (1 - 1e-12)
    assert law.limited_mean(low) <= low
    assert law.limited_mean(low) ** 2 <= law.limited_second_moment(low) * (1 + 1e-12)


@settings(derandomize=True, deadline=None, max_examples=150)
@given(
    law=st.sampled_from(SIZES),
    u=st.floats(1e-6, 1 - 1e-9),
    v=st.floats(1e-6, 1 - 1e-9),
    split=st.floats(0, 1),
)
def test_layers_end_to_end_add_up(law, u, v, split):
    low, high = sorted((quantile_of(law, u), quantile_of(law, v)))
    if high > 1e60:
        return
    middle = low + split * (high - low)
    whole = law.layer_mean(low, high)
    assert law.layer_mean(low, middle) + law.layer_mean(middle, high) == pytest.approx(
        whole, rel=1e-9, abs=1e-12 * law.limited_mean(high)
    )
    assert (high - low) * law.sf(high) <= whole <= (high - low) * law.sf(low)
    assert law.layer_second_moment(low, high) >= whole**2 * (1 - 1e-9)


@pytest.mark.parametrize("law", CONTINUOUS, ids=name)
def test_a_thin_layer_in_the_far_tail_costs_its_width_times_the_survival(law):
    bottom = float(law.isf(1e-25))
    if not bottom < 1e140 or law.support[1] < np.inf:
        return
    top = bottom * (1 + 1e-9)
    assert law.layer_mean(bottom, top) == pytest.approx((top - bottom) * law.sf(bottom), rel=1e-3)
    square = (top - bottom) ** 2 * law.sf(bottom)
    assert law.layer_second_moment(bottom, top) == pytest.approx(square, rel=1e-3)


def test_layers_in_the_far_tail_against_the_textbook():
    # Limited means at these amounts agree in all their digits; the layer keeps ten of its own.
    for law in SIMPLE:
        if law.support[1] < np.inf or law.tail_index <= 2 or float(law.isf(1e-20)) > 1e60:
            continue
        bottom, top = float(law.isf(1e-20)), float(law.isf(1e-23))
        book = textbook.BY_FAMILY[law.family](**law.parameters)
        exact = [mp.mpf(bottom), mp.mpf(top)]
        mean = book.excess(exact[0]) - book.excess(exact[1])
        second = (
            book.second_excess(exact[0])
            - book.second_excess(exact[1])
            - 2 * (exact[1] - exact[0]) * book.excess(exact[1])
        )
        assert relative(law.layer_mean(bottom, top), mean) < 1e-10
        assert relative(law.layer_second_moment(bottom, top), second) < 1e-7


def test_layers_broadcast_and_have_no_negative_width():
    law = Lomax(alpha=3, scale=2000)
    costs = law.layer_mean([0, 1000, 4000], 5000)
    np.testing.assert_allclose(costs, law.limited_mean(5000.0) - law.limited_mean([0.0, 1000.0, 4000.0]))
    assert law.layer_mean(5000, 1000) == 0
    assert law.layer_second_moment(5000, 1000) == 0
    assert law.layer_mean(0) == pytest.approx(law.mean())
    assert law.layer_second_moment(0) == pytest.approx(law.second_moment())
    assert Lomax(alpha=1, scale=1).layer_mean(10) == np.inf
    assert Lomax(alpha=1.5, scale=1).layer_second_moment(10) == np.inf


def test_a_zero_shape_is_the_limit_of_small_shapes():
    x = np.array([0.1, 1, 5, 50, 400.0])
    exact = GeneralizedPareto(shape=0, scale=1.5)
    for shape in (1e-13, -1e-13):
        near = GeneralizedPareto(shape=shape, scale=1.5)
        for method in ("sf", "pdf", "limited_mean", "limited_second_moment", "expected_excess"):
            np.testing.assert_allclose(getattr(near, method)(x), getattr(exact, method)(x), rtol=1e-8)


def test_infinite_means_are_never_finite_looking():
    law = Mixture(weights=[0.99, 0.01], parts=[Lomax(alpha=3, scale=1), Lomax(alpha=0.9, scale=1)])
    assert law.mean() == law.variance() == law.sd() == law.second_moment() == np.inf
    assert law.expected_excess(10.0) == law.mean_excess(10.0) == np.inf
    assert law.loss_elimination_ratio(10.0) == 0
    assert np.isfinite(law.limited_mean(1e12))


def test_levels_in_percent_are_refused():
    with pytest.raises(InputError) as caught:
        Lomax(alpha=3, scale=1).ppf(99.5)
    assert str(caught.value) == (
        "q must lie between 0 and 1; seen: 99.5. Levels are probabilities: write 0.995 for 99.5 %."
    )
    with pytest.raises(InputError, match="x must not be NaN"):
        Lomax(alpha=3, scale=1).sf(np.nan)
    with pytest.raises(InputError, match="x must be numbers"):
        Lomax(alpha=3, scale=1).sf("ten")


def test_a_table_of_nothing_but_zero():
    law = SizeTable(sizes=[0], probabilities=[1])
    assert law.mean() == law.variance() == law.limited_mean(5.0) == 0
    assert np.isnan(law.loss_elimination_ratio(5.0))
    assert np.isnan(law.mean_excess(0.0))
    assert law.support == (0.0, 0.0)
