"""Long transforms, folded into a table, against numpy's of the whole length, and the sums made by them
against those made by plain ones."""

import math

import numpy as np
import pytest

from lossagg.cover import Schedule
from lossagg.engines import folded as module
from lossagg.engines.book import Line
from lossagg.engines.compound import CompoundSum
from lossagg.engines.folded import Folded, transforms_of
from lossagg.engines.running import product_sum
from lossagg.engines.transform import LatticeTransform
from lossagg.families import Lognormal, NegativeBinomial, Poisson, SizeTable
from lossagg.kernels.turns import turn_rows

SHAPES = [(64, 64), (12, 32), (20, 1024), (30, 1), (15, 1)]


@pytest.mark.parametrize(("rows", "columns"), SHAPES)
def test_a_folded_transform_against_the_definition(rows, columns):
    """Every frequency k1 + rows k2 in its place, the inverse in natural order; half the length is every other
    row; the transform of one step is the root of unity itself."""
    random = np.random.default_rng(rows)
    transforms, length = Folded(rows, columns), rows * columns
    frequency = (np.arange(rows // 2 + 1)[:, None] + rows * np.arange(columns)).reshape(-1)
    assert transforms.length == length
    assert transforms.frequencies == len(frequency)
    values = random.random(length // 2 - 3) - 0.3
    whole = np.zeros(length)
    whole[: len(values)] = values
    whole[-1] = 0.7
    found = transforms.forward(values, 0.7)
    exact = np.fft.fft(whole)[frequency]
    close = 20.0 * np.finfo(float).eps * np.linalg.norm(whole) * np.sqrt(length)
    assert np.abs(found - exact).max() < close
    assert np.abs(transforms.step() - np.exp(-2j * np.pi * frequency / length)).max() < 1e-14
    if transforms.halves:
        few = transforms.every_other(transforms.forward(values))
        assert np.abs(transforms.half().forward(values) - few).max() < close
    first, last, norm = transforms.inverse(found.copy(), len(values), 5)
    assert first == pytest.approx(values, abs=1e-14)
    assert last == pytest.approx(whole[-5:], abs=1e-14)
    assert norm == pytest.approx(np.linalg.norm(whole), rel=1e-13)


def test_which_transforms_are_folded():
    """Short ones are not; a long one is at most a few per cent longer than asked for."""
    assert transforms_of(module.FOLDED - 1).columns == 1
    for least in (module.FOLDED, 100_003, 2**21, 2**22 + 1):
        transforms = transforms_of(least)
        assert transforms.columns > 1
        assert least <= transforms.length <= 1.13 * least
        assert transforms.halves


@pytest.mark.parametrize("plain", [False, True], ids=["compiled", "plain"])
def test_the_turns_between_rows_and_columns(plain):
    """Entry a * m + b of a row is multiplied by far(a) near(b)."""
    random = np.random.default_rng(1)
    table, far, near = (random.random((3, n)) + 1j * random.random((3, n)) for n in (24, 4, 6))
    expected = table * np.einsum("ra,rb->rab", far, near).reshape(3, 24)
    (turn_rows.py_func if plain else turn_rows)(table, far, near)
    assert np.abs(table - expected).max() < 1e-14


MODELS = {
    "one line": ((Poisson(mean=12.0), Lognormal(mu=7.0, sigma=1.5)),),
    "layer": ((NegativeBinomial(mean=4.0, dispersion=0.5), Lognormal(mu=7.5, sigma=1.2)),),
    "two lines": (
        (Poisson(mean=3.0), Lognormal(mu=8.0, sigma=1.0)),
        (NegativeBinomial(mean=9.0, dispersion=0.2), Lognormal(mu=6.0, sigma=1.8)),
    ),
    "off the lattice": ((Poisson(mean=2.0), SizeTable(sizes=[31.0, 977.7], probabilities=[0.4, 0.6])),),
}


@pytest.mark.parametrize("name", MODELS)
def test_sums_by_folded_and_by_plain_transforms(monkeypatch, name):
    """The same lattice both ways: probabilities, bounds of limited means and what lies below zero agree to
    what either says of its round-off, and the gap of the limited means does not get narrower."""
    lines = tuple(
        Line(name=f"line {k}", frequency=count, severity=size) for k, (count, size) in enumerate(MODELS[name])
    )
    schedule = Schedule.capped(30_000.0) if name == "layer" else Schedule.identity()
    compound = CompoundSum.of(lines, {line.name: schedule for line in lines})
    step, points = 10.0, 33_000
    long = LatticeTransform(compound, step, points)
    monkeypatch.setattr(module, "FOLDED", 2**30)
    plain = LatticeTransform(compound, step, points)
    assert (long._transforms.columns, plain._transforms.columns) == (1024, 1)
    for ours, theirs in zip((*long.sides(), long.even()), (*plain.sides(), plain.even()), strict=True):
        apart = np.abs(np.cumsum(ours.probabilities) - np.cumsum(theirs.probabilities))
        assert (apart <= ours.slack + theirs.slack + long.wrapped + plain.wrapped + 1e-14).all()
        for order, pair in enumerate(zip(ours.below, theirs.below, strict=True)):
            assert abs(pair[0] - pair[1]) < np.finfo(float).eps * (points / 4) ** (order + 0.5)
    ours, theirs = long.limited(step), plain.limited(step)
    assert ours.least == pytest.approx(theirs.least, rel=1e-9, abs=1e-9)
    assert ours.most == pytest.approx(theirs.most, rel=1e-8, abs=1e-9)


def test_a_sum_of_products():
    """A hundred thousand products, in blocks: as exact as the sum of a list of them that is rounded once."""
    random = np.random.default_rng(2)
    left, right = random.random(100_001), random.random(100_001)
    assert product_sum(left, right) == pytest.approx(math.fsum((left * right).tolist()), rel=1e-14)
    assert product_sum(left[:5], right[:5]) == pytest.approx(float(left[:5] @ right[:5]), rel=1e-15)
