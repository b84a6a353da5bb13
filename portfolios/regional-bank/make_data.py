"""Make the records and exposures of this portfolio: every run gives the same bytes.

Run it in this folder, or name another: `python make_data.py [FOLDER]`. Everything is invented. Each cell
draws from its own stream, so a change to one cell leaves the losses of the others as they are.

A root event is drawn at the prices of the middle of the year to be forecast (1 April 2027), taken back to
its accounting date with the trend of its cell, kept if it reaches the collection threshold, and sometimes
booked in several parts. Amounts are gross, in whole euro; what came back stands in a column of its own.
"""

from __future__ import annotations

import sys
from collections.abc import Callable
from dataclasses import dataclass, replace
from datetime import date, timedelta
from pathlib import Path

import numpy as np
from numpy.random import Generator

SEED = 20260930
FIRST, VALUATION = date(2016, 1, 1), date(2026, 9, 30)
PRICES_OF = date(2027, 4, 1)
YEARS = range(FIRST.year, VALUATION.year + 1)


@dataclass(frozen=True)
class Cell:
    """How one cell behaves in truth: what a fit should find again, within its standard errors."""

    stream: int
    name: str
    base: str  # what the exposure counts; empty where a year is a year
    exposure: list[float]  # per full year; of 2026 too
    rate: float  # root events per unit of exposure and year, however small
    dispersion: float  # variance of the count = mean + dispersion * mean**2
    size: Callable[[Generator], float]  # one root event at the prices of 1 April 2027
    trend: float
    threshold: float = 10_000.0
    several: float = 0.0  # part of the large enough events booked in several parts
    recovered: float = 0.0  # part of the losses of which something came back


@dataclass(frozen=True)
class Loss:
    """One row of the loss data collection."""

    reference: str
    cell: str
    day: date
    event: str
    amount: int | None
    recoveries: int


def lognormal(median: float, sigma: float) -> Callable[[Generator], float]:
    """A lognormal size."""
    return lambda rng: float(rng.lognormal(np.log(median), sigma))


def pareto(alpha: float, minimum: float) -> Callable[[Generator], float]:
    """A Pareto size of type I."""
    return lambda rng: float(minimum * (1 - rng.random()) ** (-1 / alpha))


def trading_error(rng: Generator) -> float:
    """A lognormal below 150,000; above it, one event in eight, a generalized Pareto tail of shape 0.55."""
    if rng.random() < 0.12:
        return float(150_000 + 120_000 / 0.55 * ((1 - rng.random()) ** -0.55 - 1))
    while True:
        size = float(rng.lognormal(np.log(30_000), 1.0))
        if size <= 150_000:
            return size


CELLS = [
    Cell(
        1, "External fraud, retail payments", "card transactions, millions",
        [118, 126, 135, 144, 151, 163, 176, 188, 199, 207, 216],
        1.19, 0.02, lognormal(14_000, 0.9), 0.03, several=0.02, recovered=0.35,
    ),
    Cell(
        2, "Processing errors, retail", "payment orders, millions",
        [61, 62, 64, 65, 63, 66, 68, 69, 71, 72, 74],
        1.25, 0.0, lambda rng: float(rng.gamma(1.3, 19_000)), 0.02, recovered=0.25,
    ),
    Cell(
        3, "Processing errors, trading", "trades, thousands",
        [402, 388, 415, 431, 520, 498, 476, 455, 449, 462, 470],
        0.1, 0.05, trading_error, 0.02, several=0.04, recovered=0.15,
    ),
    Cell(
        4, "Business practices, corporate lending", "loans outstanding, millions",
        [2_140, 2_205, 2_290, 2_380, 2_455, 2_520, 2_610, 2_740, 2_815, 2_870, 2_930],
        0.0055, 0.0, pareto(1.45, 20_000), 0.03, threshold=20_000.0, several=0.05,
    ),
    Cell(
        5, "Employment practices, whole bank", "staff",
        [1_912, 1_895, 1_880, 1_861, 1_822, 1_790, 1_784, 1_801, 1_815, 1_820, 1_826],
        0.0078, 0.0, lognormal(30_000, 1.0), 0.025,
    ),
    Cell(
        6, "Damage to premises, branches", "branches",
        [148, 144, 139, 133, 121, 112, 106, 101, 97, 95, 94],
        0.032, 0.0, lambda rng: float(45_000 * rng.weibull(0.75)), 0.03, recovered=0.6,
    ),
    Cell(
        7, "System failure, payment services", "",
        [1.0] * 11, 0.7, 0.0, lognormal(150_000, 1.1), 0.03,
    ),
    Cell(
        8, "Internal fraud, private clients", "client advisers",
        [212, 214, 211, 208, 203, 201, 198, 199, 202, 204, 205],
        0.024, 0.0, pareto(1.55, 10_000), 0.02, recovered=0.2,
    ),
]  # fmt: skip


def losses_of(cell: Cell) -> list[Loss]:
    """The rows of one cell, before references are given."""
    rng = np.random.default_rng([SEED, cell.stream])
    rows: list[Loss] = []
    for year, exposure in zip(YEARS, cell.exposure, strict=True):
        mean = cell.rate * exposure
        if cell.dispersion > 0:
            mean *= rng.gamma(1 / cell.dispersion, cell.dispersion)
        for _ in range(rng.poisson(mean)):
            day = date(year, 1, 1) + timedelta(days=int(rng.integers(365)))
            amount = cell.size(rng) / (1 + cell.trend) ** ((PRICES_OF - day).days / 365.25)
            if amount >= cell.threshold:
                rows += booked(cell, day, amount, rng)
    return [row for row in rows if row.day <= VALUATION]


def booked(cell: Cell, day: date, amount: float, rng: Generator) -> list[Loss]:
    """The rows of one root event: mostly one, else two to four in three months, none too small."""
    count = 2 + int(rng.integers(3))
    parts, days = [amount], [day]
    if rng.random() < cell.several and amount >= 2 * count * cell.threshold and day.month < 10:
        rest = amount - count * cell.threshold
        parts = list(cell.threshold + rest * rng.dirichlet(np.ones(count)))
        days = [day, *(day + timedelta(days=int(lag)) for lag in np.sort(rng.integers(1, 90, count - 1)))]
        days = [min(later, VALUATION) if day <= VALUATION else later for later in days]
    event = f"R{cell.stream}-{day:%y%m%d}-{int(amount) % 1000:03d}" if len(parts) > 1 else ""
    rows = []
    for when, part in zip(days, parts, strict=True):
        back = part * rng.beta(1.5, 2.5) if rng.random() < cell.recovered else 0.0
        rows.append(Loss("", cell.name, when, event, int(part), int(back)))
    return rows


def planted(rows: list[Loss]) -> list[Loss]:
    """The rows with the faults of a real collection among them."""
    of = {cell.stream: [i for i, row in enumerate(rows) if row.cell == cell.name] for cell in CELLS}
    missing, small, late, back = of[2][150], of[5][40], of[2][-1], of[1][900]
    rows[missing] = replace(rows[missing], amount=None, recoveries=0)
    rows[small] = replace(rows[small], amount=8_450)  # below the threshold of its cell
    rows[late] = replace(rows[late], day=date(2026, 10, 14))  # booked after the valuation date
    rows[back] = replace(rows[back], amount=-12_600, recoveries=0)  # a correction entered as a loss
    twice = next(i for i in of[3][200:] if rows[i].event)
    rows.insert(twice + 1, rows[twice])  # one part of a root event delivered twice
    return rows


def main(folder: Path) -> None:
    """Write every file of the portfolio but the portfolio file itself."""
    rows = sorted((row for cell in CELLS for row in losses_of(cell)), key=lambda row: (row.day, row.cell))
    rows = planted([replace(row, reference=f"OR{number:05d}") for number, row in enumerate(rows, start=1)])
    text = "Reference,Cell,Accounting date,Root event,Gross loss,Recoveries\n"
    for row in rows:
        amount = "" if row.amount is None else str(row.amount)
        text += f'{row.reference},"{row.cell}",{row.day},{row.event},{amount},{row.recoveries}\n'
    (folder / "losses.csv").write_bytes(text.encode())
    text = "Cell,Base,year,exposure\n"
    for cell in (cell for cell in CELLS if cell.base):
        for year, exposure in zip(YEARS, cell.exposure, strict=True):
            text += f'"{cell.name}","{cell.base}",{year},{exposure:.0f}\n'
    (folder / "exposure.csv").write_bytes(text.encode())


if __name__ == "__main__":
    main(Path(sys.argv[1]) if len(sys.argv) > 1 else Path(__file__).parent)
