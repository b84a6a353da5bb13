"""The contract of every count law: probabilities, tails, generating functions, thinning, recursion."""

from __future__ import annotations

import math
import pickle

import mpmath as mp
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from law_cases import COUNTS, name

from lossagg.errors import InputError
from lossagg.families import (
    Binomial,
    CountLaw,
    CountTable,
    NegativeBinomial,
    Poisson,
    ZeroInflated,
    ZeroModified,
)

every_law = pytest.mark.parametrize("law", COUNTS, ids=name)
IN_PANJERS_CLASS = [law for law in COUNTS if law.recursion is not None]


def support(law: CountLaw) -> np.ndarray:
    """Counts that carry all but some 1e-16 of the probability."""
    if isinstance(law, ZeroModified | ZeroInflated):
        return np.arange(support(law.base)[-1] + 1)
    if isinstance(law, NegativeBinomial) and law.dispersion > 0.1:
        reach = law.mean() + 40 * law.dispersion * law.mean() + 60
    else:
        reach = law.mean() + 10 * law.sd() + 30
    return np.arange(max(0.0, np.floor(law.mean() - 12 * law.sd())), np.ceil(reach) + 1)


def exact_pmf(law: CountLaw, n: int) -> mp.mpf:
    """The textbook form with factorials, in 60 digits."""
    with mp.workdps(60):
        if isinstance(law, Binomial):
            p = mp.mpf(law.probability)
            return mp.binomial(law.trials, n) * p**n * (1 - p) ** (law.trials - n)
        m = mp.mpf(law.mean())
        if isinstance(law, Poisson) or law.dispersion == 0:
            return mp.exp(-m + n * mp.log(m) - mp.loggamma(n + 1))
        r, beta = 1 / mp.mpf(law.dispersion), m * mp.mpf(law.dispersion)
        return mp.exp(
            mp.loggamma(n + r)
            - mp.loggamma(r)
            - mp.loggamma(n + 1)
            - r * mp.log(1 + beta)
            + n * mp.log(beta / (1 + beta))
        )


def exact_tail(law: CountLaw, n: int, step: int) -> mp.mpf:
    """P(N > n) (step 1) or P(N <= n) (step -1), added term by term outward."""
    total, k = mp.mpf(0), n + 1 if step > 0 else n
    while k >= 0:
        term = exact_pmf(law, k)
        total += term
        if term < total * mp.mpf(10) ** -15:
            break
        k += step
    return total


@every_law
def test_probabilities_sum_to_one_and_give_the_moments(law):
    n = support(law)
    p = law.pmf(n)
    assert math.fsum(p) == pytest.approx(1.0, abs=3e-13)
    assert math.fsum(n * p) == pytest.approx(law.mean(), rel=1e-9)
    assert math.fsum((n - law.mean()) ** 2 * p) == pytest.approx(law.variance(), rel=1e-7, abs=1e-12)
    assert law.sd() == math.sqrt(law.variance())


@every_law
def test_tails_are_sums_of_the_probabilities(law):
    n = support(law)
    p = law.pmf(n)
    below = float(law.cdf(n[0] - 1)) + np.cumsum(p)
    np.testing.assert_allclose(law.cdf(n), below, atol=1e-12)
    np.testing.assert_allclose(law.sf(n) + law.cdf(n), 1.0, atol=1e-14)
    assert (np.diff(law.sf(n)) <= 0).all()


@pytest.mark.parametrize("law", [law for law in COUNTS if 0 < law.mean() and law.recursion], ids=name)
def test_digits_of_the_textbook_probabilities_from_tail_to_tail(law):
    # Loader's form against factorials in 60 digits; the plain form loses nine digits at a million.
    for z in (-20, -8, -3, -1, 0, 1, 3, 8, 20, 35):
        n = round(law.mean() + z * law.sd())
        if n < 0 or (isinstance(law, Binomial) and n > law.trials):
            continue
        exact = exact_pmf(law, n)
        if exact > mp.mpf(10) ** -300:
            assert float(abs(law.pmf(n) - exact) / exact) < 2e-12, n


@pytest.mark.parametrize(
    ("law", "z"),
    [
        (Poisson(mean=4.2), 20),
        (Poisson(mean=2000), 8),
        (Poisson(mean=2000), -8),
        (Poisson(mean=1e6), 5),
        (Poisson(mean=1e6), -5),
        (Poisson(mean=1e6), 30),
        (NegativeBinomial(mean=4.2, dispersion=0.5), 12),
        (NegativeBinomial(mean=4.2, dispersion=1e-6), 20),
        (NegativeBinomial(mean=0.01, dispersion=100), 20),
        (NegativeBinomial(mean=1e6, dispersion=1e-8), 20),
        (NegativeBinomial(mean=3, dispersion=1e-17), 20),
        (Binomial(trials=100_000, probability=0.3), 20),
        (Binomial(trials=100_000, probability=0.3), -20),
    ],
    ids=str,
)
def test_far_tails_keep_ten_digits(law, z):
    # Poisson(1e6) five deviations out is where scipy.special.gammainc has kept five digits only.
    n = round(law.mean() + z * law.sd())
    exact = exact_tail(law, n, 1 if z > 0 else -1)
    value = law.sf(n) if z > 0 else law.cdf(n)
    assert float(abs(value - exact) / exact) < 1e-10


@every_law
def test_the_generating_function_is_the_sum_of_its_powers(law):
    n = support(law)
    p = law.pmf(n)
    for z in (1.0, 0.9999, 0.5, 0.0, np.exp(0.3j), 0.8 * np.exp(2j), -1.0):
        power = z**n
        assert law.pgf(z) == pytest.approx(np.sum(p * power), abs=1e-10 * max(1.0, law.mean() * 1e-4))
    assert law.pgf(1) == pytest.approx(1.0)


@every_law
def test_the_logarithm_of_the_generating_function(law):
    z = np.exp(1j * np.linspace(0.1, 3.0, 7)) * 0.99
    np.testing.assert_allclose(np.exp(law.log_pgf(z)), law.pgf(z), rtol=1e-8, atol=1e-300)
    # Near 1 it is mean * (z - 1), where 1 minus the generating function would have no digits.
    tiny = 1e-13 / max(law.mean(), 1.0)
    near = 1.0 - tiny
    assert law.log_pgf(near) == pytest.approx(-law.mean() * (1.0 - near), rel=1e-2, abs=1e-15)
    assert type(law.pgf(0.5)) is float
    assert type(law.pgf(0.5 + 0j)) is complex
    assert law.pgf(np.full((2, 3), 0.5)).shape == (2, 3)
    assert law.pgf([]).shape == (0,)
    assert law.pgf([1, 0]).dtype == np.float64


def test_the_logarithm_survives_where_the_function_underflows():
    law = Poisson(mean=1e6)
    assert law.pgf(0.5) == 0
    assert law.log_pgf(0.5) == -5e5


def test_the_negative_binomial_branch_is_continuous_around_the_circle():
    # (1 + beta (1 - z))**(-1/dispersion): the argument must not jump while z goes round once.
    law = NegativeBinomial(mean=50, dispersion=0.01)
    angle = np.linspace(0, 2 * np.pi, 4001)
    phase = law.log_pgf(np.exp(1j * angle)).imag
    assert abs(np.diff(phase)).max() < 0.1
    assert phase[-1] == pytest.approx(0.0, abs=1e-9)


@pytest.mark.parametrize("law", IN_PANJERS_CLASS, ids=name)
def test_panjers_recursion_holds(law):
    # p(n) = (a + b/n) p(n-1), Panjer (1981), ASTIN Bulletin 12, 22-26.
    a, b = law.recursion
    n = support(law)[1:]
    left, right = law.pmf(n), (a + b / n) * law.pmf(n - 1)
    np.testing.assert_allclose(left, right, rtol=1e-8, atol=1e-300)


def test_laws_outside_panjers_class_say_so():
    assert Binomial(trials=5, probability=1).recursion is None
    assert CountTable(probabilities=[0.5, 0.5]).recursion is None


@every_law
def test_thinning_is_a_change_of_the_argument(law):
    # P_thinned(z) = P(1 - p + p z).
    z = np.array([0.0, 0.3, 0.9, 1.0, 0.5 + 0.5j, -0.8j])
    for p in (0.0, 1e-6, 0.2, 0.75, 1.0):
        thin = law.thinned(p)
        np.testing.assert_allclose(thin.pgf(z), law.pgf(1 - p + p * z), rtol=1e-9, atol=1e-12)
        assert thin.mean() == pytest.approx(p * law.mean(), rel=1e-12)
        assert thin.family == law.family or p == 0


@settings(derandomize=True, deadline=None, max_examples=60)
@given(p=st.floats(0, 1), q=st.floats(0, 1), law=st.sampled_from([law for law in COUNTS if law.mean() < 1e4]))
def test_thinning_twice_is_thinning_by_the_product(p, q, law):
    twice, once = law.thinned(p).thinned(q), law.thinned(p * q)
    np.testing.assert_allclose(twice.pmf(np.arange(8)), once.pmf(np.arange(8)), rtol=1e-9, atol=1e-13)


@every_law
def test_the_ends_of_the_scale(law):
    n = np.array([-1.0, 0.5, np.inf])
    np.testing.assert_array_equal(law.pmf(n), 0)
    assert law.cdf(-1) == law.sf(np.inf) == 0
    assert law.sf(-1) == law.cdf(np.inf) == 1
    assert law.cdf(2.7) == law.cdf(2)
    for method in (law.pmf, law.cdf, law.sf):
        assert type(method(1)) is float
        assert method([]).shape == (0,)
        assert method([[0, 1], [2, 3]]).shape == (2, 2)


@every_law
def test_a_law_is_a_value(law):
    again = pickle.loads(pickle.dumps(law))
    assert again == law
    assert hash(again) == hash(law)
    assert "\n" not in repr(law)


def test_how_laws_show_themselves():
    assert repr(Poisson(mean=4)) == "Poisson(mean=4.0)"
    assert repr(NegativeBinomial(mean=4.2, dispersion=0.5)) == "NegativeBinomial(mean=4.2, dispersion=0.5)"
    assert repr(Binomial(trials=20, probability=0.1)) == "Binomial(trials=20, probability=0.1)"
    assert repr(CountTable(probabilities=np.full(8, 0.125))) == (
        "CountTable(probabilities=(0.125, 0.125, 0.125, ... 5 more))"
    )
    assert NegativeBinomial(mean=4, dispersion=1).parameters == {"mean": 4.0, "dispersion": 1.0}


def test_more_exposure():
    assert Poisson(mean=4).with_exposure(1.5) == Poisson(mean=6)
    assert NegativeBinomial(mean=4, dispersion=0.2).with_exposure(2) == NegativeBinomial(
        mean=8, dispersion=0.2
    )
    assert Binomial(trials=20, probability=0.1).with_exposure(1.5) == Binomial(trials=30, probability=0.1)
    table = CountTable(probabilities=[0.5, 0.5])
    assert table.with_exposure(1) is table
    inflated = ZeroInflated(base=Poisson(mean=4), extra_zeros=0.2)
    assert inflated.with_exposure(2) == ZeroInflated(base=Poisson(mean=8), extra_zeros=0.2)
    modified = ZeroModified(base=Poisson(mean=4), zero_probability=0.3)
    z = np.linspace(0, 1, 5)
    share = (1 - 0.3) / (1 - np.exp(-4))
    assert modified.with_exposure(2).pgf(z) == pytest.approx(1 - share + share * np.exp(8 * (z - 1)))


def test_exposure_a_law_cannot_follow():
    with pytest.raises(InputError) as caught:
        Binomial(trials=3, probability=0.1).with_exposure(1.5)
    assert str(caught.value) == (
        "exposure times 1.5 would make 4.5 trials, which is not a whole number; seen: 1.5. "
        "Use a Poisson or negative binomial count, or state the trials of the new exposure."
    )
    with pytest.raises(InputError, match="the probability of no loss would be negative"):
        ZeroModified(base=Poisson(mean=1), zero_probability=0).with_exposure(2)
    with pytest.raises(InputError) as caught:
        CountTable(probabilities=[0.5, 0.5]).with_exposure(2)
    assert str(caught.value) == (
        "a count table does not say how the count changes with exposure; seen: 2. "
        "State the table of the new exposure, or use a Poisson or negative binomial count."
    )


@pytest.mark.parametrize(
    ("make", "text"),
    [
        (
            lambda: Poisson(mean=-1),
            "mean must be at least 0 and finite; seen: -1. Give mean as a number at least 0.",
        ),
        (
            lambda: NegativeBinomial(mean=1, dispersion=np.inf),
            "dispersion must be at least 0 and finite; seen: inf. Give dispersion as a number at least 0.",
        ),
        (
            lambda: Binomial(trials=2.5, probability=0.1),
            "trials must be a whole number; seen: 2.5. Give the number of units.",
        ),
        (
            lambda: Binomial(trials=2, probability=10),
            "probability must be a probability in [0, 1]; seen: 10. Write 0.1 for 10 %.",
        ),
        (
            lambda: ZeroInflated(base=Poisson(mean=0), extra_zeros=0.1),
            "base must be a count law that is not always 0; seen: Poisson(mean=0.0). "
            "Give Poisson(mean=...), say.",
        ),
        (
            lambda: ZeroModified(base=Poisson(mean=1), zero_probability=1),
            "zero_probability must be a probability in [0, 1); seen: 1. Give a number in [0, 1).",
        ),
        (
            lambda: CountTable(probabilities=[0.5, 0.4]),
            "probabilities must sum to 1; seen: 0.9. Correct them, or divide each by 0.9.",
        ),
        (
            lambda: CountTable(probabilities=[1.5, -0.5]),
            "probabilities must lie between 0 and 1, in entry 1; seen: 1.5. Write 0.25 for 25 %.",
        ),
        (
            lambda: CountTable(probabilities=[]),
            "probabilities must be a list of numbers; seen: []. Give at least one.",
        ),
        (
            lambda: Poisson(mean=1).thinned(1.5),
            "probability must be a probability in [0, 1]; seen: 1.5. Write 0.015 for 1.5 %.",
        ),
    ],
)
def test_bad_counts_are_refused_with_a_remedy(make, text):
    with pytest.raises(InputError) as caught:
        make()
    assert str(caught.value) == text


def test_a_table_off_by_rounding_is_accepted():
    law = CountTable(probabilities=[0.3333333333, 0.3333333333, 0.3333333334])
    assert law.cdf(2) == 1
    assert law.pgf(1.0) == pytest.approx(1.0, abs=1e-15)
