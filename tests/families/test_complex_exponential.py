"""The fast complex exponential behind the generating functions: numpy's to a few roundings, everywhere."""

from __future__ import annotations

import numpy as np
import pytest

import lossagg
from lossagg.families.polar import MANY, exponential
from lossagg.kernels.circle import MOST_ANGLE, cosines_and_sines


@pytest.mark.parametrize("spread", [1e-3, 1.0, 50.0, MOST_ANGLE / 5])
def test_many_exponentials_are_those_of_numpy(spread: float) -> None:
    """Relative error below 4 units in the last place for angles of every size allowed."""
    random = np.random.default_rng(5)
    exponents = random.normal(size=3 * MANY) * 20 + 1j * random.normal(size=3 * MANY) * spread
    expected = np.exp(exponents)
    assert np.abs(exponential(exponents) / expected - 1.0).max() < 4 * np.finfo(float).eps


def test_huge_angles_and_short_or_real_arrays_take_the_other_way() -> None:
    huge = np.linspace(0.0, 1e9, MANY) * 1j
    assert np.array_equal(exponential(huge), np.exp(huge))
    assert np.array_equal(exponential(np.array([1.0, 2.0])), np.exp([1.0, 2.0]))


@pytest.mark.parametrize("run", [cosines_and_sines, cosines_and_sines.py_func], ids=["compiled", "plain"])
def test_quarter_turns_and_their_neighbours(run) -> None:
    """Where the quarter changes, and at multiples of a quarter turn, compiled and as plain Python."""
    angles = np.concatenate([k * np.pi / 4 + np.array([-1e-9, 0.0, 1e-9]) for k in range(-9, 10)])
    pairs = np.empty(2 * angles.size)
    run(angles, np.full(angles.size, 2.0), pairs)
    assert pairs[::2] == pytest.approx(2.0 * np.cos(angles), abs=5e-16)
    assert pairs[1::2] == pytest.approx(2.0 * np.sin(angles), abs=5e-16)


@pytest.mark.parametrize(
    "law", [lossagg.Poisson(mean=12.0), lossagg.NegativeBinomial(mean=30.0, dispersion=0.3)], ids=repr
)
def test_generating_functions_of_whole_transforms(law) -> None:
    """A long array gives what its points give one by one."""
    z = np.exp(2j * np.pi * np.arange(2 * MANY) / (2 * MANY)) * 0.9
    together = law.pgf(z)
    alone = np.array([law.pgf(complex(point)) for point in z[::97]])
    assert together[::97] == pytest.approx(alone, rel=1e-13)
