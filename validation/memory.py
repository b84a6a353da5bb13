"""Peak memory of long simulations of a book with four lines and two covers: it must not grow with the years.

Each number of years runs in a process of its own, whose peak the operating system reports.

    python validation/memory.py [--workers 2] [--years 10000000 100000000]

Leaves with exit code 1 when 10 million years take more than 1.2 GB, or another number of years more than
1.1 times what the first takes. A hundred million years take a minute or two on two processors.
"""

from __future__ import annotations

import argparse
import resource
import subprocess
import sys

import lossagg
from lossagg.engines.book import NET, Book, Line, PlacedCover
from lossagg.engines.simulation import Simulation

LINES = (("cargo", 1.0, 9.0), ("hull", 0.5, 10.0), ("crew", 2.0, 8.0), ("quay", 0.2, 11.0))
COVERS = (
    PlacedCover(name="layer", terms=lossagg.Cover(deductible=50_000.0, limit=500_000.0)),
    PlacedCover(
        name="stop", terms=lossagg.Cover(annual_retention=200_000.0, annual_limit=1e6), after=("layer",)
    ),
)
MOST_GIGABYTES, MOST_GROWTH = 1.2, 1.1


def run(years: int, workers: int) -> float:
    """Simulate in this process; its peak memory in gigabytes."""
    lines = tuple(
        Line(name=name, frequency=lossagg.Poisson(mean=mean), severity=lossagg.Lognormal(mu=mu, sigma=1.5))
        for name, mean, mu in LINES
    )
    result = Simulation(years=years, workers=workers).book(Book(lines=lines, covers=COVERS))
    for level in (0.5, 0.995):
        result.losses[NET].accuracy("tail_value_at_risk", level)
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    return peak / (1e9 if sys.platform == "darwin" else 1e6)


def main() -> int:
    """Print the peak of each number of years."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawTextHelpFormatter)
    parser.add_argument("--workers", type=int, default=2)
    parser.add_argument("--years", type=int, nargs="+", default=[10_000_000, 100_000_000])
    parser.add_argument("--here", action="store_true", help=argparse.SUPPRESS)
    given = parser.parse_args()
    if given.here:
        print(run(given.years[0], given.workers))
        return 0
    peaks = []
    for years in given.years:
        command = [sys.executable, __file__, "--here", "--years", str(years), "--workers", str(given.workers)]
        done = subprocess.run(command, capture_output=True, text=True, check=True)
        peaks.append(float(done.stdout))
        print(
            f"{years:>15,} years: {peaks[-1]:.3f} GB, {peaks[-1] / peaks[0]:.3f} times the first", flush=True
        )
    return int(peaks[0] > MOST_GIGABYTES or max(peaks) > MOST_GROWTH * peaks[0])


if __name__ == "__main__":
    sys.exit(main())
