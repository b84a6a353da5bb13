"""What a careful user would write with NumPy and SciPy alone: the yardstick for simulation speed.

One thread, whole-array operations in place, blocks that stay in the cache. It imports nothing of
lossagg, so it also serves as an independent simulation.

    python validation/plain_simulation.py 1000000 10
"""

from __future__ import annotations

import argparse
import time
from collections.abc import Callable

import numpy as np
from scipy.special import ndtr, ndtri

LOSSES_PER_BLOCK = 50_000

MU, SIGMA = 10.0, 1.8
THRESHOLD, TAIL_PROBABILITY = 200_000.0, 0.05
TAIL_SHAPE, TAIL_SCALE = 0.5, 150_000.0
DEDUCTIBLE, LIMIT = 10_000.0, 5_000_000.0

Draw = Callable[[np.random.Generator, int], np.ndarray]


def lognormal(random: np.random.Generator, number: int) -> np.ndarray:
    """Sizes of a lognormal law."""
    return random.lognormal(MU, SIGMA, number)


def spliced(random: np.random.Generator, number: int) -> np.ndarray:
    """Sizes of a lognormal law below a threshold with a generalized Pareto tail above, by inversion."""
    above = random.random(number)
    tail = np.flatnonzero(above < TAIL_PROBABILITY)
    body_mass = ndtr((np.log(THRESHOLD) - MU) / SIGMA)
    sizes = 1.0 - above
    sizes *= body_mass / (1.0 - TAIL_PROBABILITY)
    np.minimum(sizes, body_mass, out=sizes)
    ndtri(sizes, out=sizes)
    sizes *= SIGMA
    sizes += MU
    np.exp(sizes, out=sizes)
    excess = (above[tail] / TAIL_PROBABILITY) ** -TAIL_SHAPE - 1.0
    sizes[tail] = THRESHOLD + TAIL_SCALE / TAIL_SHAPE * excess
    return sizes


def annual_payments(years: int, mean_count: float, draw: Draw, random: np.random.Generator) -> np.ndarray:
    """Annual payments of a layer per event, shape (years,)."""
    annual = np.zeros(years)
    block = max(1, int(LOSSES_PER_BLOCK / mean_count))
    for first in range(0, years, block):
        counts = random.poisson(mean_count, min(block, years - first))
        payments = draw(random, int(counts.sum()))
        payments -= DEDUCTIBLE
        np.clip(payments, 0.0, LIMIT, out=payments)
        ends = np.cumsum(counts)
        with_losses = np.flatnonzero(counts)
        starts = (ends - counts)[with_losses]
        if starts.size:
            annual[first + with_losses] = np.add.reduceat(payments, starts)
    return annual


def main() -> None:
    """Time both laws and print what they give."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("years", type=int)
    parser.add_argument("mean_count", type=float)
    given = parser.parse_args()
    for draw in (lognormal, spliced):
        random = np.random.default_rng(1)
        annual_payments(1000, given.mean_count, draw, random)
        start = time.perf_counter()
        annual = annual_payments(given.years, given.mean_count, draw, random)
        seconds = time.perf_counter() - start
        speed = given.years * given.mean_count / seconds / 1e6
        print(
            f"{draw.__name__}: {speed:.1f} million losses a second, mean {annual.mean():.6g}, "
            f"VaR 99.5 % {np.quantile(annual, 0.995, method='inverted_cdf'):.6g}"
        )


if __name__ == "__main__":
    main()
