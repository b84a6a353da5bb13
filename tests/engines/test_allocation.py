"""Capital divided among lines: worked figures, brute-force convolution, the simulation, its laws."""

import itertools

import numpy as np
import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st

import lossagg
from lossagg.engines.allocation import exact_allocation, simulated_allocation
from lossagg.engines.book import Book, Line
from lossagg.engines.clusters import others
from lossagg.engines.dependence import CommonShock, Copula, SharedFactor
from lossagg.engines.fourier import Fourier
from lossagg.engines.simulation import Simulation
from lossagg.errors import DoesNotExistError, EngineError, InputError


def one_of(amounts, probabilities, none):
    return (
        lossagg.CountTable(probabilities=[none, 1 - none]),
        lossagg.SizeTable(sizes=amounts, probabilities=probabilities),
    )


def test_two_lines_by_hand():
    """A 0 (0.9) or 10 (0.1), B 0 (0.8), 5 (0.15) or 20 (0.05), independent, 90 %: VaR 10, TVaR 16.25 = 5.50 +
    10.75, the years at 10 taken in part (computed here, two routes: listing all cases, and the transform)."""
    a, b = {0: 0.9, 10: 0.1}, {0: 0.8, 5: 0.15, 20: 0.05}
    cases = sorted(
        ((x + y, x, y, p * q) for (x, p), (y, q) in itertools.product(a.items(), b.items())), reverse=True
    )
    left, twin = 0.1, np.zeros(2)
    for _, x, y, chance in cases:
        taken = min(left, chance)
        twin += np.array([x, y]) * taken / 0.1
        left -= taken
    assert twin == pytest.approx([5.5, 10.75])
    found = lossagg.allocate(
        {"A": one_of([10.0], [1.0], 0.9), "B": one_of([5.0, 20.0], [0.75, 0.25], 0.8)}, level=0.9
    )
    assert [line.value for line in found.lines] == pytest.approx([5.5, 10.75], abs=1e-11)
    assert found.total == pytest.approx(16.25, abs=1e-11)
    assert [line.alone for line in found.lines] == pytest.approx([10.0, 12.5])
    assert found.diversification == pytest.approx(6.25)
    frame = found.to_frame()
    assert frame["share"].sum() == pytest.approx(1.0, abs=1e-12)


@settings(max_examples=15, deadline=None, derandomize=True)
@example(chances=[[1.0, 1.0, 0.5, 0.5], [1.0, 1.0, 0.5, 0.25]], level=0.3125)
@given(
    chances=st.lists(st.lists(st.floats(0.05, 1.0), min_size=2, max_size=5), min_size=2, max_size=3),
    level=st.floats(0.3, 0.99),
)
def test_against_brute_force_convolution(chances, level):
    """Annual totals on 0, 1, 2, ... at random: E[X_l; S = k] = sum of j f_l(j) P(others = k - j), added up by
    hand over the tail. The parts add up to the total to 1e-9, and none is above what it needs alone."""
    laws = [np.array(row) / sum(row) for row in chances]
    lines = {
        f"line {k}": one_of(range(1, len(law)), (law[1:] / law[1:].sum()).tolist(), law[0])
        for k, law in enumerate(laws)
    }
    found = lossagg.allocate(lines, level=level)
    whole = np.array([1.0])
    for law in laws:
        whole = np.convolve(whole, law)
    above = np.cumsum(whole[::-1])[::-1]
    taken = np.clip((1 - level - np.append(above[1:], 0.0)) / whole, 0.0, 1.0)
    for k, (own, law) in enumerate(zip(found.lines, laws, strict=True)):
        rest = np.array([1.0])
        for j, other in enumerate(laws):
            if j != k:
                rest = np.convolve(rest, other)
        brought = np.convolve(np.arange(len(law)) * law, rest)
        assert own.value == pytest.approx(brought @ taken / (1 - level), rel=1e-7, abs=1e-9)
        assert own.value <= own.alone * (1 + 1e-9) + 1e-9
    assert sum(line.value for line in found.lines) == pytest.approx(found.total, rel=1e-9)


COUNTS = (
    lossagg.Poisson(mean=3.0),
    lossagg.NegativeBinomial(mean=3.0, dispersion=0.5),
    lossagg.Binomial(trials=7, probability=0.3),
    lossagg.CountTable(probabilities=[0.5, 0.2, 0.1, 0.2]),
    lossagg.ZeroModified(base=lossagg.Poisson(mean=2.0), zero_probability=0.3),
    lossagg.ZeroInflated(base=lossagg.NegativeBinomial(mean=2.0, dispersion=0.4), extra_zeros=0.2),
)


@pytest.mark.parametrize("count", COUNTS, ids=lambda law: law.family)
def test_the_other_losses_of_a_year_are_the_derivative_of_the_generating_function(count):
    z, step = np.array([0.1, 0.5, 0.9]), 1e-5
    difference = (count.pgf(z + step) - count.pgf(z - step)) / (2 * step)
    np.testing.assert_allclose(count.mean() * others(count).pgf(z), difference, rtol=1e-8)


LINES = (
    Line(name="a", frequency=lossagg.Poisson(mean=8.0), severity=lossagg.Lognormal(mu=1.0, sigma=1.2)),
    Line(name="b", frequency=lossagg.Poisson(mean=3.0), severity=lossagg.Exponential(mean=10.0)),
    Line(name="c", frequency=lossagg.Poisson(mean=40.0), severity=lossagg.Gamma(shape=2.0, scale=0.5)),
)
TIES = {
    "independent": (),
    "gamma": (SharedFactor(name="f", lines=("a", "b", "c"), on="frequency", variance=0.1),),
    "lognormal": (SharedFactor(name="f", lines=("a", "c"), on="frequency", variance=0.1, law="lognormal"),),
    "shock": (CommonShock(name="s", lines=("a", "b"), rate=1.5),),
    "inflation": (SharedFactor(name="f", lines=("b",), on="inflation", variance=0.05),),
}


@pytest.mark.parametrize("tie", TIES)
def test_against_the_simulation(tie):
    """Within four standard errors of 100,000 simulated years, fixed seed; adds up to 1e-9."""
    book = Book(lines=LINES, dependences=TIES[tie])
    losses = Fourier().book(book).losses
    exact = exact_allocation(book, losses, 0.99)
    simulated = simulated_allocation(book, Simulation(years=100_000, seed=4).book(book).losses, 0.99)
    for own, seen in zip(exact.lines, simulated.lines, strict=True):
        assert abs(own.value - seen.value) <= 4 * (seen.high - seen.value) / 1.96
        assert own.low <= own.value <= own.high
        assert own.high - own.low <= 0.01 * own.value
        assert own.value <= own.alone
    assert sum(line.value for line in exact.lines) == pytest.approx(exact.total, rel=1e-9)


def test_what_has_no_allocation_says_why():
    pareto = (lossagg.Poisson(mean=1.0), lossagg.Pareto(alpha=0.9, minimum=1.0))
    with pytest.raises(DoesNotExistError, match="the mean is infinite"):
        lossagg.allocate({"a": pareto, "b": pareto}, level=0.9)
    plain = (lossagg.Poisson(mean=1.0), lossagg.Exponential(mean=1.0))
    copula = Copula(name="tie", lines=("a", "b"), correlation=0.5)
    with pytest.raises(EngineError, match="tied by the copula 'tie'"):
        lossagg.allocate({"a": plain, "b": plain}, level=0.9, dependences=(copula,))
    with pytest.raises(InputError, match="must be a pair of a count law and a size law"):
        lossagg.allocate({"a": plain[0]}, level=0.9)
    with pytest.raises(InputError, match="at least one line"):
        lossagg.allocate({}, level=0.9)


def test_a_quantile_of_zero():
    """Most years without a loss: all losses are in the worst tenth, so each part is its mean over 0.1."""
    rare = {
        "a": (lossagg.Poisson(mean=0.02), lossagg.Exponential(mean=10.0)),
        "b": (lossagg.Poisson(mean=0.01), lossagg.Exponential(mean=30.0)),
    }
    found = lossagg.allocate(rare, level=0.9)
    assert [line.value for line in found.lines] == pytest.approx([2.0, 3.0], rel=1e-6)
