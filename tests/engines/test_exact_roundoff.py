"""Round-off within its bound: what the exact engines allow for it, against extended precision."""

import numpy as np
import pytest

from lossagg.cover import Schedule
from lossagg.engines.book import Line
from lossagg.engines.compound import CompoundSum
from lossagg.engines.recursive import Lines
from lossagg.engines.running import running_sums
from lossagg.engines.transform import LatticeTransform
from lossagg.families import Gamma, Lognormal, NegativeBinomial, Pareto, Poisson, SizeTable

pytestmark = pytest.mark.skipif(
    np.finfo(np.longdouble).eps > 1e-18, reason="long double is no longer than double here"
)


def extended(count, masses, points):
    """Panjer's recursion in extended precision, as the books write it."""
    return recursion(*(np.longdouble(value) for value in count.recursion), masses, points)


def recursion(a, b, masses, points):
    f = masses.astype(np.longdouble)
    result = np.zeros(points, dtype=np.longdouble)
    if a == 0:
        result[0] = np.exp(-b * (1 - f[0]))
    else:
        result[0] = ((1 - a) / (1 - a * f[0])) ** ((a + b) / a)
    j = np.arange(points, dtype=np.longdouble)
    for n in range(1, points):
        terms = (a + b * j[1 : n + 1] / n) * f[1 : n + 1] * result[n - 1 :: -1][:n]
        result[n] = terms.sum() / (1 - a * f[0])
    return result


def test_round_off_of_the_transform_stays_within_its_bound():
    """The bound of the round-off in running sums is an estimate by norms: against a recursion with 64-bit
    mantissa on random laws, counts from 0.1 to 2,000, the actual error never exceeds it."""
    random = np.random.default_rng(5)
    for _ in range(25):
        points = int(random.integers(60, 500))
        mean = float(np.exp(random.uniform(np.log(0.1), np.log(2000.0))))
        count = Poisson(mean=mean) if random.random() < 0.5 else NegativeBinomial(mean=mean, dispersion=0.3)
        places = np.arange(0.0, float(random.integers(2, 40)))
        chances = random.dirichlet(np.full(len(places), 0.3))
        size = SizeTable(sizes=places.tolist(), probabilities=chances.tolist())
        compound = CompoundSum.of(
            (Line(name="x", frequency=count, severity=size),), {"x": Schedule.identity()}
        )
        if not compound.parts:
            continue
        transform = LatticeTransform(compound, 1.0, points)
        masses = np.zeros(points)
        masses[: len(places)] = np.asarray(chances / chances.sum())[:points]
        exact = np.cumsum(extended(count, masses, points))
        total, _ = transform.sides()
        error = np.abs(running_sums(total.probabilities) - exact).astype(float)
        assert (error <= total.slack + transform.wrapped + 2e-16).all()


def sum_of(count, size):
    return CompoundSum.of((Line(name="x", frequency=count, severity=size),), {"x": Schedule.identity()})


def random_model(random):
    """Counts from 0.1 to 2,000; sizes off the lattice, from light to infinite mean; a lattice that may end
    far below the mean, where little but round-off is left, or go far beyond it."""
    mean = float(np.exp(random.uniform(np.log(0.1), np.log(2000.0))))
    count = Poisson(mean=mean) if random.random() < 0.5 else NegativeBinomial(mean=mean, dispersion=0.3)
    size = (
        Gamma(shape=float(random.uniform(0.3, 4.0)), scale=1.0),
        Lognormal(mu=0.0, sigma=float(random.uniform(0.3, 2.0))),
        Pareto(alpha=float(random.uniform(0.8, 3.0)), minimum=1.0),
        SizeTable(sizes=[0.37, 1.11, 2.93], probabilities=[0.5, 0.3, 0.2]),
    )[random.integers(4)]
    points = int(random.integers(60, 500))
    middle = mean * float(size.ppf(0.7))
    return count, size, points, float(random.uniform(0.3, 4.0)) * middle / points


def limited_mean(total):
    """E[min(D, k)] in steps at every point, and the survival it adds up."""
    survival = 1 - np.cumsum(total)
    return np.concatenate(([np.longdouble(0)], np.cumsum(survival)[:-1]))


def others(count, masses, points):
    """The sum of the other losses, seen from one: one loss more in the shape of the count's law."""
    a, b = (np.longdouble(value) for value in count.recursion)
    return recursion(a, b + a, masses, points)


def random_bounds(seed, models):
    """By random model: the engine's bounds of E[min(D, x)] and of the term above it, and both in extended
    precision, from the same payments on the lattice."""
    random = np.random.default_rng(seed)
    for _ in range(models):
        count, size, points, step = random_model(random)
        compound = sum_of(count, size)
        transform = LatticeTransform(compound, step, points)
        limited = transform.limited(step)
        if limited is None:  # nothing lies on this lattice that is moved
            continue
        (line,) = transform.lines
        masses = (line.masses.spread + line.masses.atoms_even).astype(np.longdouble)
        masses[0] += line.none
        exact = limited_mean(extended(line.frequency, masses, points))
        bulge = line.masses.bulge.astype(np.longdouble)
        above = count.mean() * np.convolve(bulge, others(line.frequency, masses, points))[:points]
        yield limited, step, exact, above


def held(limited, step, exact, above):
    """Whether the bounds hold, each to the round-off of a single number."""
    slack = 4e-16 * np.abs(exact)
    low = (limited.least / step <= exact + slack).all()
    high = (limited.line / step >= exact - slack).all()
    gap = (limited.most - limited.line) / step
    return low and high and (gap >= above - 4e-16 * (above + limited.most / step)).all()


def test_round_off_of_the_limited_means_stays_within_its_bound():
    """Sums with means kept and the term above them, 60 random models: the bounds of both hold, and are not
    bought with slack that would show in a figure."""
    for limited, step, exact, above in random_bounds(seed=11, models=60):
        assert held(limited, step, exact, above)
        width = (limited.line - limited.least) / step
        assert width[1] <= 1e-8
        assert np.median(width) <= 1e-6


def test_the_allowance_for_round_off_is_needed(monkeypatch):
    """With a hundred-thousandth of it the same bounds do not hold: the test above can fail."""
    right = LatticeTransform._relative
    monkeypatch.setattr(LatticeTransform, "_relative", lambda self, count: 1e-5 * right(self, count))
    monkeypatch.setattr("lossagg.engines.limited.MOMENTS", 0.0)
    assert not all(held(*model) for model in random_bounds(seed=11, models=60))


def test_round_off_of_the_recursion_stays_within_its_bound():
    """The same of the Panjer engine: its sum with means kept and the term above it."""
    random = np.random.default_rng(12)
    for _ in range(30):
        count, size, points, step = random_model(random)
        lines = Lines(sum_of(count, size), step, points)
        kept = lines.kept()
        if kept is None:
            continue
        total, slack, gap = kept
        (own,) = lines.masses
        masses = own.kept.astype(np.longdouble)
        exact = extended(count, masses, points)
        assert np.abs(running_sums(total) - np.cumsum(exact)).max() <= slack
        bulge = own.bulge.astype(np.longdouble)
        above = count.mean() * np.convolve(bulge, others(count, masses, points))[:points]
        assert (gap + 1e-290 >= above * (1 - 1e-14)).all()
