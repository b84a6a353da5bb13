"""The kernels of the Panjer engine, compiled and as plain Python, against the definition."""

import numpy as np
import oracle
import pytest

from lossagg.engines.counted import log_start
from lossagg.engines.panjer import Panjer
from lossagg.families import Binomial, NegativeBinomial, Poisson, SizeTable
from lossagg.kernels.convolution import direct_convolution
from lossagg.kernels.recursion import panjer_recursion

SIZES = np.array([0.3, 0.25, 0.2, 0.15, 0.1])
both = pytest.mark.parametrize("plain", [False, True], ids=["compiled", "plain"])


def version(kernel, plain):
    return kernel.py_func if plain else kernel


def recursed(count, sizes, points, plain):
    a, b = count.recursion
    positive = 1 - sizes[0]
    relative, scale = version(panjer_recursion, plain)(a, b, 1 - a * sizes[0], sizes, points)
    return relative * np.exp(scale + log_start(a, b, positive))


@both
@pytest.mark.parametrize(
    ("count", "chances"),
    [
        (Poisson(mean=2.5), oracle.poisson(2.5, 60)),
        (NegativeBinomial(mean=2.4, dispersion=0.6), oracle.negative_binomial(2.4, 0.6, 200)),
        (NegativeBinomial(mean=2.4, dispersion=3.0), oracle.negative_binomial(2.4, 3.0, 800)),
    ],
    ids=["poisson", "negative binomial", "very dispersed"],
)
def test_the_recursion_against_direct_convolution(count, chances, plain):
    """Panjer (1981): the recursion gives what adding up the powers of the size law gives."""
    exact = np.zeros(25)
    power = np.ones(1)
    for probability in chances:
        head = power[:25]
        exact[: len(head)] += probability * head
        power = np.convolve(power, SIZES)[:40]
    assert recursed(count, SIZES, 25, plain) == pytest.approx(exact, rel=1e-11)


@both
def test_mass_left_out_beyond_the_lattice_changes_nothing_on_it(plain):
    """The recursion is an identity of power series: cutting the sizes off changes later values only."""
    count = Poisson(mean=2.5)
    whole = recursed(count, SIZES, 20, plain)
    cut = recursed(count, SIZES[:3], 20, plain)
    # P(S = 0) depends on the size zero alone; sums of 0, 1, 2 on sizes up to 2.
    assert cut[:3] == pytest.approx(whole[:3], rel=1e-14)
    assert (cut[3:] < whole[3:]).all()


@both
def test_a_start_far_below_the_smallest_double(plain):
    """exp(-100,000) is zero in double precision: the scaled recursion still gives a distribution, around
    its mean, with its variance (a plain recursion gives nothing but zeros)."""
    mean = 3_000.0 if plain else 100_000.0
    points = int(1.06 * mean) if plain else int(1.03 * mean)
    sizes = np.array([0.0, 1.0])
    for count in (Poisson(mean=mean), NegativeBinomial(mean=mean, dispersion=1e-7)):
        result = recursed(count, sizes, points, plain)
        index = np.arange(points)
        assert np.isfinite(result).all()
        assert result.sum() == pytest.approx(1.0, abs=1e-3 if plain else 1e-8)
        assert result[int(mean)] == pytest.approx(float(count.pmf(mean)), rel=1e-8)
        assert index @ result == pytest.approx(mean, rel=1e-3)


def test_the_start_without_underflow_or_cancellation():
    """log pgf(1 - p) from the class parameters equals the law's own, for rare and for certain payments."""
    laws = (
        Poisson(mean=1e5),
        NegativeBinomial(mean=1e5, dispersion=0.01),
        NegativeBinomial(mean=3, dispersion=1e-9),
        Binomial(trials=40, probability=0.2),
    )
    for law in laws:
        for positive in (1.0, 0.3):
            assert log_start(*law.recursion, positive) == pytest.approx(
                float(law.log_pgf(1 - positive)), rel=1e-11
            )
        assert log_start(*law.recursion, 1e-12) == pytest.approx(-law.mean() * 1e-12, rel=1e-6)


@both
def test_direct_convolution_against_the_double_loop(plain):
    """The kernel against the definition, cut to the points asked for."""
    left, right = [0.2, 0.0, 0.5, 0.3], [0.6, 0.1, 0.3]
    exact = oracle.convolve(left, right)
    convolve = version(direct_convolution, plain)
    assert convolve(np.array(left), np.array(right), 6) == pytest.approx(exact, abs=1e-16)
    assert convolve(np.array(left), np.array(right), 3) == pytest.approx(exact[:3], abs=1e-16)


def test_the_binomial_recursion_is_unstable_and_is_not_used():
    """Panjer and Wang (1993): with a < 0 terms change sign. On sizes 1 and 2 with 100 trials of .9 the
    recursion is off in the fourth digit; the engine's repeated convolution keeps every digit."""
    count = Binomial(trials=100, probability=0.9)
    a, b = count.recursion
    sizes = np.array([0.0, 0.5, 0.5])
    power = np.ones(1)
    for _ in range(100):
        power = np.convolve(power, [0.1, 0.45, 0.45])
    relative, scale = panjer_recursion.py_func(a, b, 1.0, sizes, 201)
    recursive = relative * np.exp(scale + log_start(a, b, 1.0))
    assert np.abs(recursive - power).max() > 1e-4
    table = SizeTable(sizes=[1, 2], probabilities=[0.5, 0.5])
    loss = Panjer(points=202, step=1.0).annual_loss(count, table)
    ours = np.array([loss.sf(n - 0.5) - loss.sf(n + 0.5) for n in range(201)])
    assert ours == pytest.approx(power, abs=1e-14)
