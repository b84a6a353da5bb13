"""The single passes of the exact engines over a lattice, compiled and as plain Python, against their
definitions step by step in numpy and against integrals in closed form."""

import mpmath
import numpy as np
import pytest

from lossagg.cover import Schedule
from lossagg.engines.payment import PaymentLaw
from lossagg.engines.sampling import Masses
from lossagg.families import (
    Exponential,
    Gamma,
    GeneralizedPareto,
    Lognormal,
    Lomax,
    Spliced,
    Weibull,
)
from lossagg.kernels.bounds import chord_slopes, chord_steps, limited_means, survival_bounds
from lossagg.kernels.cells import BLOCK, cell_averages

both = pytest.mark.parametrize("plain", [False, True], ids=["compiled", "plain"])
IDENTITY = Schedule.identity()


def version(kernel, plain):
    return kernel.py_func if plain else kernel


def averaged(survival, plain=False, tolerance=3e-12):
    averages = np.empty(len(survival) - 1)
    bends = np.zeros(-(-len(averages) // BLOCK), dtype=bool)
    version(cell_averages, plain)(survival, tolerance, averages, bends)
    return averages, np.repeat(bends, BLOCK)[: len(averages)]


@both
def test_cell_averages_of_an_exponential(plain):
    """exp(-x) over (x, x + h) averages exp(-x) (1 - exp(-h)) / h: exact to the last digits, ends left out."""
    step = 0.005
    x = step * np.arange(3001.0)
    averages, bends = averaged(np.exp(-x), plain)
    assert bends.sum() == 2 * BLOCK - (-len(averages)) % BLOCK
    exact = np.exp(-x[:-1]) * -np.expm1(-step) / step
    assert averages[~bends] == pytest.approx(exact[~bends], rel=1e-15, abs=0.0)


@both
def test_where_a_survival_function_bends_the_block_is_told(plain):
    """A jump, a kink and a steep fall in three places of a straight line: their blocks, and no other."""
    points = 20 * BLOCK
    survival = 1.0 - np.arange(points + 1.0) / (4.0 * points)
    survival[5 * BLOCK + 100 :] -= 1e-9
    kink = np.maximum(np.arange(points + 1.0) - (9 * BLOCK + 7.5), 0.0)
    survival -= 1e-9 * kink
    survival[14 * BLOCK + 50 :] *= np.exp(-np.minimum(np.arange(len(survival) - 14 * BLOCK - 50), 40.0))
    _, bends = averaged(survival, plain)
    assert np.flatnonzero(bends[::BLOCK]).tolist() == [0, 5, 9, 14, 19]


@pytest.mark.parametrize(
    "law",
    [
        Lognormal(mu=7.0, sigma=0.3),
        Lognormal(mu=7.0, sigma=2.5),
        Gamma(shape=0.4, scale=2000.0),
        Weibull(shape=0.6, scale=900.0),
        Lomax(alpha=1.4, scale=700.0),
        Exponential(mean=900.0),
        Spliced(
            body=Lognormal(mu=7.0, sigma=1.0),
            tail=GeneralizedPareto(shape=0.5, scale=2000.0, threshold=4001.3),
            threshold=4001.3,
            tail_probability=0.1,
        ),
    ],
    ids=lambda law: type(law).__name__,
)
@pytest.mark.parametrize("cover", ["all", "layer"])
def test_averages_against_the_integrals_of_the_law(law, cover):
    """Limited means and expected excesses of the law itself, differences over each cell: as near as digits
    lost allow. Added up, the averages are the cost of the whole range."""
    schedule = IDENTITY if cover == "all" else Schedule.capped(20_000.0)
    payment = PaymentLaw(law, schedule)
    step, points = 5.0, 10_000
    masses = Masses(payment, step, points)
    edges = step * np.arange(len(masses._averages) + 1.0)
    exact = payment.continuous_areas(edges) / step
    lost = 1e-15 * (edges[1:] / step) * payment.sf(edges[:-1]) + 1e-15
    assert (np.abs(masses._averages - exact) <= 50.0 * lost + 1e-14 * exact).all()
    whole = float(payment.continuous_areas(edges[[0, -1]])[0])
    assert step * masses._averages.sum() == pytest.approx(whole, rel=3e-13)


@both
def test_survival_bounds(plain):
    """1 - running sums, less and more what they may be off, made non-increasing, by the definition."""
    random = np.random.default_rng(3)
    chances = random.dirichlet(np.full(3000, 0.1)) * (1.0 - 1e-6)
    chances[5] -= 1e-9
    slack = 1e-9 * np.exp(np.linspace(0.0, 3.0, 3000))
    least, most = np.empty(3000), np.empty(3000)
    version(survival_bounds, plain)(chances, slack, 1e-8, least, most)
    above = 1.0 - np.cumsum(chances)
    low = np.minimum.accumulate(np.clip(above - slack, 0.0, 1.0))
    high = np.maximum.accumulate(np.clip(above + slack + 1e-8, 0.0, 1.0)[::-1])[::-1]
    assert least == pytest.approx(low, rel=1e-12, abs=1e-14)
    assert most == pytest.approx(high, rel=1e-12, abs=1e-14)


def chords(least, most, line, step, middle):
    """The chords of `engines.limited`, array by array."""
    points, index = len(least), np.arange(len(least))
    slope = np.diff(line, append=2.0 * line[-1] - line[-2]) / step
    padded = np.concatenate((np.full(middle, slope[0]), slope, np.full(middle, slope[-1])))
    density = (padded[: -2 * middle] - padded[2 * middle :]) / (2.0 * middle)
    steps = np.full(points, points / 4.0)
    np.sqrt(2.0 * (most - least) / step / np.maximum(density, 1e-300), out=steps, where=density > 0)
    reach = np.clip(steps, 1.0, max(points // 4, 1))
    back = np.minimum(reach.astype(int), index)
    ahead = np.minimum(reach.astype(int), points - 1 - index)
    high, low = np.ones(points), np.zeros(points)
    np.divide(most - least[index - back], step * back, out=high, where=back > 0)
    np.divide(least[index + ahead] - most, step * ahead, out=low, where=ahead > 0)
    low, high = np.append(np.clip(low[1:], 0.0, 1.0), 0.0), np.clip(high, 0.0, 1.0)
    return reach, np.maximum.accumulate(low[::-1])[::-1], np.minimum.accumulate(high)


@both
@pytest.mark.parametrize(("points", "middle"), [(2, 1), (3, 1), (2500, 1), (2500, 7), (2500, 39)])
def test_limited_means_and_their_chords(plain, points, middle):
    """Integrals of two survival functions, and the slopes between them, array by array."""
    step, shape = 12.5, np.exp(-4.0 * np.arange(points) / points)
    under, over = 0.7 * shape, np.minimum(0.7 * shape + 1e-5, 1.0)
    gap = 0.3 * shape**2 - 1e-3
    low, high, line = (np.empty(points) for _ in range(3))
    version(limited_means, plain)((under, over), gap, step, 1e-12, (low, high, line))
    exact = [step * np.concatenate(([0.0], np.cumsum(part)[:-1])) for part in (under, over)]
    assert low == pytest.approx(exact[0] * (1.0 - 1e-12), rel=1e-14)
    assert line == pytest.approx(exact[1] * (1.0 + 1e-12), rel=1e-14)
    assert high == pytest.approx(line + step * np.maximum(gap, 0.0), rel=1e-14)
    reach, least, most = (np.empty(points) for _ in range(3))
    version(chord_steps, plain)(low, high, line, step, middle, reach)
    known, lower, upper = chords(low, high, line, step, middle)
    assert np.abs(reach - known).max() < 1e-6 * points
    version(chord_slopes, plain)(low, high, step, known, least, most)
    assert least == pytest.approx(lower, rel=1e-12, abs=1e-14)
    assert most == pytest.approx(upper, rel=1e-12, abs=1e-14)


def test_averages_of_a_layer_in_forty_digits():
    """A layer of 20,000 on a lognormal(7, 2.5) law, cells of 5: the closed form of the limited mean with
    mpmath. Far out the averages keep 14 digits of the survival function of the whole loss."""
    masses = Masses(PaymentLaw(Lognormal(mu=7.0, sigma=2.5), Schedule.capped(20_000.0)), 5.0, 10_000)
    with mpmath.workdps(40):
        mu, sigma = mpmath.mpf(7), mpmath.mpf("2.5")

        def above(amount):
            return mpmath.ncdf((mu - mpmath.log(amount)) / sigma)

        def limited(amount):
            z = (mpmath.log(amount) - mu) / sigma
            whole = mpmath.exp(mu + sigma**2 / 2)
            return whole * mpmath.ncdf(z - sigma) + amount * above(amount)

        for cell in (300, 1500, 3000, 3700):
            low, high = mpmath.mpf(5 * cell), mpmath.mpf(5 * cell + 5)
            exact = (limited(high) - limited(low)) / 5 - above(mpmath.mpf(20_000))
            assert abs(masses._averages[cell] - exact) < 1e-14 * above(low)
