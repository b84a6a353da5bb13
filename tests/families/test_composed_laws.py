"""Splices, mixtures and tables: what they owe to their parts, their atoms and gaps, their refusals."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest
from law_cases import MIXTURES, SPLICES, name
from scipy import stats

from lossagg.errors import InputError
from lossagg.families import (
    Burr,
    Exponential,
    Gamma,
    GeneralizedPareto,
    InverseGaussian,
    Lognormal,
    Lomax,
    Mixture,
    Pareto,
    SizeTable,
    Spliced,
    Weibull,
)


@pytest.mark.parametrize("law", SPLICES, ids=name)
def test_a_splice_is_its_conditional_parts(law):
    u, q = law.threshold, law.tail_probability
    below = np.array([0.01, 0.2, 0.9]) * u
    np.testing.assert_allclose(law.cdf(below), (1 - q) * law.body.cdf(below) / law.body.cdf(u), rtol=1e-13)
    assert law.sf(u) == pytest.approx(q, rel=1e-14)
    assert law.cdf(u) == pytest.approx(1 - q, rel=1e-14)
    above = np.array([1.01, 1.6, 3.0]) * u
    np.testing.assert_allclose(law.sf(above), q * law.tail.sf(above) / law.tail.sf(u), rtol=1e-13)
    assert law.tail_index == law.tail.tail_index
    assert u in law.breakpoints


def test_the_density_of_a_splice_jumps_at_the_threshold():
    law = SPLICES[1]
    u, q = law.threshold, law.tail_probability
    assert law.pdf(u) == pytest.approx((1 - q) * law.body.pdf(u) / law.body.cdf(u))
    assert law.pdf(np.nextafter(u, np.inf)) == pytest.approx(q / law.tail.scale)


def test_a_tail_deep_inside_its_law_keeps_its_moments():
    # P(tail law > threshold) = 1e-14: moments by subtraction from the whole law would have no digits.
    # Given X > u, the logarithm of a lognormal is a truncated normal: simulated here by inversion.
    law = SPLICES[2]
    u = law.threshold
    p = law.tail.sf(u) * (np.arange(200_000) + 0.5) / 200_000
    sample = np.exp(-stats.norm.ppf(p))
    q = law.tail_probability
    body = law.limited_mean(u) - q * u
    assert law.mean() == pytest.approx(body + q * sample.mean(), rel=1e-5)
    second = law.limited_second_moment(3000.0) - law.limited_second_moment(u)
    assert second == pytest.approx(q * (np.minimum(sample, 3000.0) ** 2 - u**2).mean(), rel=1e-4)
    assert law.second_excess(u) == pytest.approx(q * ((sample - u) ** 2).mean(), rel=1e-3)


def test_a_splice_of_a_law_with_itself_is_that_law():
    # One law of each family with a tail to splice: cut anywhere and joined again, nothing changes.
    for law in (
        Exponential(mean=900),
        Lognormal(mu=6, sigma=1.2),
        Pareto(alpha=2.6, minimum=200),
        Lomax(alpha=2.6, scale=800),
        GeneralizedPareto(shape=0.3, scale=700),
        Gamma(shape=0.7, scale=900),
        Weibull(shape=0.6, scale=500),
        InverseGaussian(mean=700, shape=300),
        Burr(alpha=2, gamma=1.4, scale=500),
    ):
        u = float(law.isf(0.2))
        again = Spliced(body=law, tail=law, threshold=u, tail_probability=float(law.sf(u)))
        x = np.asarray(law.ppf([0.05, 0.5, 0.79, 0.81, 0.95, 0.9999]))
        for method in (
            "cdf",
            "sf",
            "pdf",
            "limited_mean",
            "limited_second_moment",
            "expected_excess",
            "second_excess",
        ):
            np.testing.assert_allclose(
                getattr(again, method)(x), getattr(law, method)(x), rtol=1e-10, err_msg=f"{law} {method}"
            )
        q = np.array([1e-200, 0.1, 0.79, 0.8, 0.81, 0.9999])
        np.testing.assert_allclose(again.ppf(q), law.ppf(q), rtol=1e-10)
        np.testing.assert_allclose(again.isf(q), law.isf(q), rtol=1e-10)
        assert again.mean() == pytest.approx(law.mean(), rel=1e-12)
        assert again.variance() == pytest.approx(law.variance(), rel=1e-9)


def test_a_mixture_of_one_law_with_itself_is_that_law():
    law = Lognormal(mu=6, sigma=1.2)
    again = Mixture(weights=[0.3, 0.7], parts=[law, law])
    p = np.array([1e-300, 1e-30, 1e-3, 0.2, 0.5, 0.9, 1 - 1e-12])
    np.testing.assert_allclose(again.isf(p), law.isf(p), rtol=1e-12)
    np.testing.assert_allclose(again.ppf(p), law.ppf(p), rtol=1e-12)
    assert again.variance() == pytest.approx(law.variance())


@pytest.mark.parametrize("law", MIXTURES, ids=name)
def test_a_mixture_is_the_weighted_sum_of_its_parts(law):
    x = np.array([0.0, 3.0, 99.0, 100.0, 101.0, 1e4])
    for method in ("cdf", "sf", "pdf", "limited_mean", "limited_second_moment", "expected_excess"):
        parts = [w * getattr(part, method)(x) for w, part in zip(law.weights, law.parts, strict=True)]
        np.testing.assert_allclose(getattr(law, method)(x), np.sum(parts, axis=0), rtol=1e-14)
    assert law.tail_index == min(part.tail_index for part in law.parts)


def test_quantiles_of_a_mixture_at_atoms_and_across_gaps():
    law = Mixture(
        weights=[0.5, 0.25, 0.25],
        parts=[
            SizeTable(sizes=[0, 100], probabilities=[0.5, 0.5]),
            GeneralizedPareto(shape=-1, scale=10),  # uniform on (0, 10)
            Pareto(alpha=2, minimum=1000),
        ],
    )
    assert law.atoms == ((0.0, 0.25), (100.0, 0.25))
    assert law.breakpoints == (10.0, 1000.0)
    # P(0) = .25, (0, 10) carries .25, nothing to 100, P(100) = .25, nothing to 1000, then the Pareto.
    q = np.array([1e-9, 0.25, 0.3, 0.499, 0.51, 0.74, 0.75, 0.9375])
    expected = [0, 0, 2, 9.96, 100, 100, 100, 2000]
    np.testing.assert_allclose(law.ppf(q), expected, rtol=1e-12)
    np.testing.assert_allclose(law.isf(1 - q), expected, rtol=1e-9)
    assert law.isf(0.25) == 100
    assert law.isf(1e-12) == pytest.approx(1000 * np.sqrt(0.25e12))


def test_many_quantiles_of_a_mixture_with_a_large_table():
    # A table of thousands of sizes and a vector of thousands of levels must not meet in one matrix.
    rng = np.random.default_rng(7)
    sizes = np.sort(rng.choice(10**6, 5000, replace=False)).astype(float)
    law = Mixture(
        weights=[0.5, 0.5],
        parts=[SizeTable(sizes=sizes, probabilities=np.full(5000, 1 / 5000)), Exponential(mean=1e5)],
    )
    q = rng.random(5000)
    x = np.asarray(law.ppf(q))
    assert (law.cdf(x) >= q - 1e-12).all()
    assert (law.cdf(x * (1 - 1e-12)) <= q + 1e-12).all()
    assert np.isin(x, sizes).mean() == pytest.approx(0.5, abs=0.05)


def test_a_table_is_exact():
    # Against exact fractions; quantiles at the steps themselves.
    sizes = [0, 1, 5, 7, 30]
    weights = [Fraction(k, 10) for k in (1, 2, 3, 3, 1)]
    law = SizeTable(sizes=sizes, probabilities=[float(w) for w in weights])
    for limit in (0, 1, 4, 7, 29, 30, 100):
        for order, method in ((1, law.limited_mean), (2, law.limited_second_moment)):
            exact = sum(w * min(s, limit) ** order for s, w in zip(sizes, weights, strict=True))
            assert method(limit) == pytest.approx(float(exact), rel=1e-15)
        for order, method in ((1, law.expected_excess), (2, law.second_excess)):
            exact = sum(w * max(s - limit, 0) ** order for s, w in zip(sizes, weights, strict=True))
            assert method(limit) == pytest.approx(float(exact), rel=1e-14)
        assert law.cdf(limit) == pytest.approx(
            float(sum(w for s, w in zip(sizes, weights, strict=True) if s <= limit))
        )
    assert law.ppf([0.1, 0.3, 0.6, 0.9, 0.95]).tolist() == [0, 1, 5, 7, 30]
    assert law.isf([0.9, 0.7, 0.4, 0.1, 0.05]).tolist() == [0, 1, 5, 7, 30]
    assert law.pdf([0, 1, 2]).tolist() == [0, 0, 0]


def test_a_table_comes_sorted_and_forgets_impossible_sizes():
    law = SizeTable(sizes=[50, 0, 20, 90], probabilities=[0.25, 0.5, 0.25, 0.0])
    assert law.sizes == (0.0, 20.0, 50.0, 90.0)
    assert law.atoms == ((0.0, 0.5), (20.0, 0.25), (50.0, 0.25))
    assert law.support == (0.0, 50.0)
    assert law.ppf(1) == 50
    assert repr(law) == "SizeTable(sizes=(0.0, 20.0, 50.0, 90.0), probabilities=(0.5, 0.25, 0.25, 0.0))"


BODY, TAIL = Lognormal(mu=6, sigma=1), Pareto(alpha=2, minimum=1000)


@pytest.mark.parametrize(
    ("make", "text"),
    [
        (
            lambda: Spliced(body=TAIL, tail=TAIL, threshold=900, tail_probability=0.1),
            "the body has no losses up to the threshold; seen: 900.0. "
            "Its smallest loss is 1000; raise the threshold.",
        ),
        (
            lambda: Spliced(
                body=BODY,
                tail=GeneralizedPareto(shape=-1, scale=10),
                threshold=900,
                tail_probability=0.1,
            ),
            "the tail has no losses above the threshold; seen: 900.0. "
            "Its largest loss is 10; lower the threshold.",
        ),
        (
            lambda: Spliced(body=BODY, tail=TAIL, threshold=1000, tail_probability=5),
            "tail_probability must be a probability in (0, 1); seen: 5. Write 0.05 for 5 %.",
        ),
        (
            lambda: Spliced(body="lognormal", tail=TAIL, threshold=1000, tail_probability=0.5),
            "body must be a size law; seen: 'lognormal'. Give Lognormal(...), say.",
        ),
        (
            lambda: Mixture(weights=[0.5, 0.4], parts=[BODY, TAIL]),
            "weights must sum to 1; seen: 0.9. Correct them, or divide each by 0.9.",
        ),
        (
            lambda: Mixture(weights=[1], parts=[BODY, TAIL]),
            "weights and parts must have the same length; seen: (1, 2). Give one weight for each part.",
        ),
        (
            lambda: Mixture(weights=[1, 0], parts=[BODY, TAIL]),
            "weights must be above 0, in entry 2; seen: 0.0. Leave out the part.",
        ),
        (
            lambda: Mixture(weights=[1], parts=[3]),
            "parts must be size laws, in part 1; seen: 3. Give Lognormal(...), say.",
        ),
        (
            lambda: SizeTable(sizes=[1, 2, 1], probabilities=[0.5, 0.25, 0.25]),
            "a size is given twice; seen: 1.0. Give each size once, with the sum of its probabilities.",
        ),
        (
            lambda: SizeTable(sizes=[1, -2], probabilities=[0.5, 0.5]),
            "sizes must be at least 0 and finite, in entry 2; seen: -2.0. Correct or leave out the entry.",
        ),
        (
            lambda: SizeTable(sizes=[1, 2], probabilities=[1]),
            "sizes and probabilities must have the same length; seen: (2, 1). "
            "Give one probability for each size.",
        ),
        (
            lambda: SizeTable(sizes=[1, 2], probabilities=[0.5, 0.5 + 1e-8]),
            "probabilities must sum to 1; seen: 1.00000001. Correct them, or divide each by 1.00000001.",
        ),
        (
            lambda: Lognormal(mu=np.inf, sigma=1),
            "mu must be a finite number; seen: inf. Give the mean of the logarithm.",
        ),
        (
            lambda: GeneralizedPareto(shape="heavy", scale=1),
            "shape must be a finite number; seen: 'heavy'. Give the shape; 0 is the exponential tail.",
        ),
        (
            lambda: Lognormal(mu=1, sigma=0),
            "sigma must be above 0 and finite; seen: 0. Give sigma as a number above 0.",
        ),
        (
            lambda: Pareto(alpha=2, minimum=True),
            "minimum must be above 0 and finite; seen: True. Give minimum as a number above 0.",
        ),
        (
            lambda: Exponential(mean=5).scaled(0),
            "factor must be above 0 and finite; seen: 0. Give factor as a number above 0.",
        ),
    ],
)
def test_bad_laws_are_refused_with_a_remedy(make, text):
    with pytest.raises(InputError) as caught:
        make()
    assert str(caught.value) == text
