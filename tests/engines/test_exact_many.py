"""Up to a million losses a year: the exact engine against inversions and closed forms of other kinds."""

import importlib.util
import sys
from pathlib import Path

import numpy as np
import pytest
from scipy import signal, special, stats

from lossagg.engines.fourier import Fourier
from lossagg.families import Exponential, Gamma, Lognormal, NegativeBinomial, Pareto, Poisson, SizeTable

SCRIPT = Path(__file__).resolve().parents[2] / "validation" / "many_losses.py"


def script():
    """The inversions of `validation/`: Gil-Pelaez (1951) and a contour after Talbot (1979)."""
    if "many_losses_table" not in sys.modules:
        spec = importlib.util.spec_from_file_location("many_losses_table", SCRIPT)
        sys.modules["many_losses_table"] = module = importlib.util.module_from_spec(spec)
        spec.loader.exec_module(module)
    return sys.modules["many_losses_table"]


@pytest.mark.parametrize(
    "size", [Lognormal(mu=0, sigma=1), Lognormal(mu=0, sigma=3), Pareto(alpha=0.8, minimum=1)]
)
def test_two_inversions_agree_with_each_other(size):
    """Where both converge, the integral along the imaginary axis and the contour agree to eight digits; for
    Poisson(1)-exponential the contour gives the Poisson mixture of Erlang laws (Loss Models, ch. 9)."""
    module = script()
    one = module.lognormal(size.sigma) if isinstance(size, Lognormal) else module.pareto(size.alpha)
    whole = module.annual(Poisson(mean=60), one)
    x = 60.0 * float(size.isf(0.05))
    assert module.contour(whole, x) == pytest.approx(module.gil_pelaez(whole, x), rel=1e-8, abs=1e-12)
    exponential = module.annual(Poisson(mean=1), lambda z: -z / (1 + z))
    chances = stats.poisson.pmf(np.arange(60), 1.0)
    assert module.contour(exponential, 6.0) == pytest.approx(
        float(chances[1:] @ special.gammaincc(np.arange(1.0, 60.0), 6.0)), rel=1e-9
    )


HEAVY = (Lognormal(mu=0, sigma=3), Pareto(alpha=0.8, minimum=1), Pareto(alpha=1.1, minimum=1))
LIGHT = (Lognormal(mu=0, sigma=1), Pareto(alpha=2.5, minimum=1))


@pytest.mark.parametrize("size", HEAVY + LIGHT, ids=lambda size: f"{size.family} {size.mean():.3g}")
@pytest.mark.parametrize(
    "count",
    [
        Poisson(mean=1.0),
        Poisson(mean=1e4),
        Poisson(mean=1e6),
        NegativeBinomial(mean=1e4, dispersion=0.5),
        NegativeBinomial(mean=1e6, dispersion=0.5),
    ],
    ids=lambda count: f"{count.family} {count.mean():g}",
)
def test_quantiles_against_inversions(count, size):
    """On 65,536 points, fewer than by default: every bracket holds. Up to 10,000 losses it is narrow; where
    single payments are far longer than a step the value has six digits even for a million."""
    truth = script().survival(count, size)
    loss = Fourier(points=2**16).annual_loss(count, size)
    for level in (0.995, 0.999):
        tail = 1.0 - level
        low, high = loss.accuracy("value_at_risk", level)
        assert truth(low * (1 - 1e-9)) >= tail - 1e-9
        assert high == np.inf or truth(high) <= tail + 1e-9
        if count.mean() <= 1e4:
            assert high - low <= 0.03 * low
        if isinstance(count, Poisson) and size in HEAVY:
            assert truth(loss.value_at_risk(level)) == pytest.approx(tail, rel=2e-6)


def test_a_tail_index_below_one_among_a_hundred_thousand_losses():
    """Pareto with tail index 0.8, quantiles only: the bracket is below 1 % wide at 99.5 %, the quantile
    close to the limit P(S > x) ~ mean P(X > x) of subexponential laws."""
    count, size = Poisson(mean=1e5), Pareto(alpha=0.8, minimum=1)
    loss = Fourier(points=2**18).annual_loss(count, size)
    truth = script().survival(count, size)
    for level, width in ((0.99, 0.02), (0.995, 0.01), (0.999, 0.01)):
        low, high = loss.accuracy("value_at_risk", level)
        value = loss.value_at_risk(level)
        assert high - low <= width * low
        assert truth(low) >= 1 - level >= truth(high)
        assert truth(value) == pytest.approx(1 - level, rel=1e-6)
        assert (1 - level) == pytest.approx(1e5 * value**-0.8, rel=0.05)
    assert loss.mean() == loss.tail_value_at_risk(0.99) == np.inf


def test_payments_smaller_than_a_step_keep_their_variance():
    """A million payments of about 1 on steps of 17: the sum keeps the variance it has, where moving each to
    the ends of its cell would add sixteen times as much."""
    count, size = Poisson(mean=1e6), Lognormal(mu=0, sigma=0.1)
    loss = Fourier(points=2**16).annual_loss(count, size)
    sd = 1000.0 * np.exp(0.01)
    low, high = loss.accuracy("value_at_risk", 0.995)
    normal = loss.mean() + sd * float(stats.norm.isf(0.005))
    assert low <= normal <= high
    assert loss.value_at_risk(0.995) == pytest.approx(normal, rel=2e-4)
    assert loss.value_at_risk(0.995) - loss.value_at_risk(0.5) == pytest.approx(2.576 * sd, rel=0.1)


def test_a_million_losses_in_closed_form():
    """Poisson sums of exponential and of gamma sizes as mixtures over the number of losses, with scipy; a
    negative binomial number with 1 / dispersion = 4 of exponential sizes as a binomial mixture of four Erlang
    laws (Klugman, Panjer and Willmot, Loss Models, ch. 9)."""
    number = np.arange(990_000.0, 1_010_001.0)
    chances = stats.poisson.pmf(number, 1e6)
    growth = 1e6 / 4.0
    erlang = stats.binom.pmf(np.arange(1, 5), 4, growth / (1.0 + growth))
    models = {
        (Poisson(mean=1e6), Exponential(mean=2.0)): lambda x: chances @ special.gammaincc(number, x / 2.0),
        (Poisson(mean=1e6), Gamma(shape=2.5, scale=3.0)): lambda x: (
            chances @ special.gammaincc(2.5 * number, x / 3.0)
        ),
        (NegativeBinomial(mean=1e6, dispersion=0.25), Exponential(mean=2.0)): lambda x: (
            erlang @ special.gammaincc(np.arange(1.0, 5.0), x / 2.0 / (1.0 + growth))
        ),
    }
    for model, truth in models.items():
        loss = Fourier(points=2**18).annual_loss(*model)
        for level in (0.5, 0.99, 0.995, 0.999):
            low, high = loss.accuracy("value_at_risk", level)
            assert truth(low * (1 - 1e-9)) >= 1 - level >= truth(high * (1 + 1e-9))
            assert high - low <= (2e-2 if isinstance(model[0], Poisson) else 0.1) * low
            assert truth(loss.value_at_risk(level)) == pytest.approx(1 - level, rel=1e-2)


def test_a_million_losses_of_three_sizes():
    """Sizes 1, 2 and 3: the numbers of each are independent Poisson, so the sum is the convolution of three
    scaled Poisson laws. On its span nothing is rounded and the quantile is exact."""
    rates, total = (5e5, 3e5, 2e5), np.ones(1)
    start = 0
    for size, rate in enumerate(rates, start=1):
        low, high = (int(rate + sign * 9 * np.sqrt(rate)) for sign in (-1, 1))
        own = np.zeros(size * (high - low) + 1)
        own[::size] = stats.poisson.pmf(np.arange(low, high + 1), rate)
        total = signal.fftconvolve(total, own)
        start += size * low
    above = np.cumsum(total[::-1])[::-1]
    sizes = SizeTable(sizes=[1, 2, 3], probabilities=[0.5, 0.3, 0.2])
    loss = Fourier().annual_loss(Poisson(mean=1e6), sizes)
    assert loss.step == 1.0
    for level in (0.5, 0.99, 0.995, 0.999, 0.9999):
        value = loss.value_at_risk(level)
        assert value == start + int(np.sum(above > 1 - level)) - 1
        assert loss.accuracy("value_at_risk", level) == pytest.approx((value, value), abs=1)
