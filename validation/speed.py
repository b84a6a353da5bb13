"""Speed as ratios in one run: what lossagg takes against what it is compared with, on this machine.

Both sides of a row are timed in turns and the medians compared, so that a machine that slows down
slows both. Rows are built by the functions below; a row that cannot be measured says why.

    python validation/speed.py [--workers 2] [--repetitions 5] [--processor-time] [--growth] [--write]

On a machine busy with other work, --processor-time measures what each side uses of the processors instead
of what the clock says; a side that works on several threads is then credited with all of them being free.
Leaves with exit code 1 when a row misses the figure asked of it.
"""

from __future__ import annotations

import argparse
import contextlib
import io
import os
import platform
import statistics
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable, Iterator
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from datetime import date
from pathlib import Path

import numba
import numpy as np
import plain_fit
import plain_simulation as plain

import lossagg
from lossagg.engines.simulation import Simulation

ROOT = Path(__file__).resolve().parent.parent
CASES = ((1_000_000, 10.0), (200_000, 100.0), (5_000_000, 0.5))
LAYER = lossagg.Cover(deductible=plain.DEDUCTIBLE, limit=plain.LIMIT)
LOGNORMAL = lossagg.Lognormal(mu=plain.MU, sigma=plain.SIGMA)
LAWS = {
    "lognormal": (LOGNORMAL, plain.lognormal),
    "spliced": (
        lossagg.Spliced(
            body=LOGNORMAL,
            tail=lossagg.GeneralizedPareto(
                shape=plain.TAIL_SHAPE, scale=plain.TAIL_SCALE, threshold=plain.THRESHOLD
            ),
            threshold=plain.THRESHOLD,
            tail_probability=plain.TAIL_PROBABILITY,
        ),
        plain.spliced,
    ),
}
Work = Callable[[], object]


@dataclass(frozen=True)
class Row:
    """One comparison.

    Attributes:
        name: what is measured against what.
        ours: does the work of lossagg once.
        reference: does the work compared with once; None where the bound is in seconds.
        times: "faster": ours must be at least `bound` times faster; "slower": at most `bound` times
            slower; "seconds": ours must take at most `bound` seconds.
        bound: the figure asked; 0 where none is.
        repetitions: how often each side is timed; 0 leaves it to the command line.
        spare: seconds that ours may take on top of the bound, where that is "slower".
        threaded: whether the reference uses as many threads as lossagg.
        single: whether lossagg has one thread here, so that its processor time is not shared out.
    """

    name: str
    ours: Work
    reference: Work | None
    times: str
    bound: float
    repetitions: int = 0
    spare: float = 0.0
    threaded: bool = False
    single: bool = False


class CannotMeasureError(Exception):
    """Something a row needs is not there."""


def simulation_rows(workers: int) -> Iterator[Row]:
    """Simulated years of a layer per event, against the plain script."""
    for years, mean_count in CASES:
        for name, (law, draw) in LAWS.items():
            engine = Simulation(years=years, seed=1, workers=workers)
            frequency = lossagg.Poisson(mean=mean_count)
            random = np.random.default_rng(1)
            yield Row(
                f"simulation, {years:,} years x {mean_count:g}, {name}, against plain NumPy",
                lambda e=engine, f=frequency, s=law: e.annual_loss(f, s, LAYER),  # type: ignore[misc]
                lambda y=years, m=mean_count, d=draw, r=random: plain.annual_payments(y, m, d, r),  # type: ignore[misc]
                "faster",
                10.0,
            )


def fill_rows(workers: int) -> Iterator[Row]:
    """The same simulation against merely filling as many doubles with numpy's SFC64, on as many threads."""
    for years, mean_count in CASES[:2]:
        engine = Simulation(years=years, seed=1, workers=workers)
        frequency = lossagg.Poisson(mean=mean_count)

        def fill(number: int = int(years * mean_count)) -> None:
            def one(seed: int) -> None:
                random, out = np.random.Generator(np.random.SFC64(seed)), np.empty(2**16)
                for _ in range(number // workers // out.size):
                    random.random(out=out)

            with ThreadPoolExecutor(workers) as pool:
                list(pool.map(one, range(workers)))

        yield Row(
            f"simulation, {years:,} years x {mean_count:g}, lognormal, against filling uniforms",
            lambda e=engine, f=frequency: e.annual_loss(f, LOGNORMAL, LAYER),  # type: ignore[misc]
            fill,
            "slower",
            3.0,
            threaded=True,
        )


def far_tail_rows(workers: int) -> Iterator[Row]:
    """One in 72,000 years to a thousandth, against a million years of the simulation on all threads."""
    frequency, severity = lossagg.Poisson(mean=12.0), lossagg.Lognormal(mu=9.0, sigma=1.5)
    engine = Simulation(years=1_000_000, seed=1, workers=workers)

    def far() -> None:
        loss = lossagg.FarTail(samples=40_000, seed=1).annual_loss(frequency, severity)
        value, error = loss.exceedance(1e7)  # type: ignore[attr-defined]
        if error > 1e-3 * value:
            raise CannotMeasureError(f"far tail: the standard error is {error / value:.3%}, above 0.1 %")

    yield Row(
        "far tail, P(S > 10 million) = 1.39e-5 to 0.1 %, against 1,000,000 years",
        far,
        lambda: engine.annual_loss(frequency, severity),
        "slower",
        1.0,
        threaded=True,
    )


def assessment_rows(workers: int) -> Iterator[Row]:
    """The whole demo assessment at a million years, warm."""
    del workers
    portfolios = sorted(path.parent for path in (ROOT / "portfolios").glob("*/portfolio.toml"))
    if not portfolios:
        raise CannotMeasureError("demo assessment: there is no portfolio in portfolios/ yet")
    command = _command("assess")
    folder = tempfile.TemporaryDirectory()
    for portfolio in portfolios:
        out = Path(folder.name) / portfolio.name
        run = [*command, "assess", str(portfolio), "--out", str(out), "--years", "1000000"]
        yield Row(
            f"lossagg assess {portfolio.name}, 1,000,000 years",
            lambda r=run, keep=folder: _run(r),  # type: ignore[misc]
            None,
            "seconds",
            20.0,
            repetitions=1,
        )


def option_rows(workers: int) -> Iterator[Row]:
    """A thousand options of one line by the exact engine, against as many bare transform pairs.

    The cost of one option against one pair of its length: both sides do a thousand.
    """
    from scipy import fft

    from lossagg.cover import Schedule
    from lossagg.engines.book import Line
    from lossagg.pricing.grid import POINTS, Grid

    options = [(Schedule.capped(5000.0 + 250.0 * k),) for k in range(1000)]
    random = np.random.default_rng(1)
    for name, frequency in (
        ("Poisson", lossagg.Poisson(mean=12.0)),
        ("negative binomial", lossagg.NegativeBinomial(mean=12.0, dispersion=0.2)),
    ):
        grid = Grid([Line(name="x", frequency=frequency, severity=LOGNORMAL)], POINTS, workers)
        values = random.random(POINTS)

        def pairs(own: np.ndarray = values) -> None:
            for _ in range(1000):
                fft.irfft(fft.rfft(own), own.size)

        yield Row(
            f"1,000 options, {name}, against 1,000 transform pairs of {POINTS:,} points",
            lambda g=grid: sum(1 for _ in g.years(options)),  # type: ignore[misc]
            pairs,
            "slower",
            2.0,
            repetitions=3,
        )


def fit_rows(workers: int) -> Iterator[Row]:
    """A lognormal law fitted to a million truncated and censored losses, against Nelder-Mead on NumPy; and to
    ten million in bounded memory, which is measured in a process of its own."""
    del workers
    for name, own in (("thresholds of five levels", False), ("a threshold of its own each", True)):
        losses, thresholds, stopped = plain_fit.losses(1_000_000, own_thresholds=own)

        found: list[tuple[float, float]] = []

        def ours(parts: tuple = (losses, thresholds, stopped), keep: list = found) -> None:
            fit = lossagg.fit_severity(parts[0], "lognormal", parts[1], parts[2])
            keep.append((fit.parameters["mu"], fit.parameters["sigma"]))

        def reference(parts: tuple = (losses, thresholds, stopped), keep: list = found) -> None:
            mu, sigma = plain_fit.nelder_mead(*parts)
            if not np.allclose(keep[-1], (mu, sigma), rtol=1e-6):
                raise CannotMeasureError(f"fit: {keep[-1]} is not {(mu, sigma)} to six digits")

        yield Row(
            f"fit of 1,000,000 truncated and censored losses, {name}, against Nelder-Mead",
            ours,
            reference,
            "faster",
            20.0,
            repetitions=1,
        )
    script = ROOT / "validation" / "plain_fit.py"
    yield Row(
        "fit of 10,000,000 losses: seconds, with at most 8 times the memory of the losses",
        lambda: _run([sys.executable, str(script)]),
        None,
        "seconds",
        120.0,
        repetitions=1,
    )


def help_rows(workers: int) -> Iterator[Row]:
    """The command's help against starting Python with NumPy."""
    del workers
    run = [*_command("--help"), "--help"]
    start = [sys.executable, "-c", "import numpy"]
    yield Row(
        "lossagg --help, against python -c 'import numpy'",
        lambda: _run(run),
        lambda: _run(start),
        "slower",
        3.0,
    )


def records_rows(workers: int) -> Iterator[Row]:
    """Half a million rows of CSV read strictly, checked and prepared, against reading them with pandas."""
    import pandas as pd
    from large_records import VALUED, write_csv

    from lossagg.records import check_losses, midpoint, prepare_losses, read_losses

    del workers
    folder = tempfile.TemporaryDirectory()
    path = write_csv(Path(folder.name) / "losses.csv", 500_000)
    middle = midpoint(date(2026, 1, 1), date(2026, 12, 31))

    def check_and_prepare(keep: object = folder) -> object:
        checked = check_losses(read_losses(path), valuation_date=VALUED, currency="EUR")
        return prepare_losses(checked, forecast_midpoint=middle, trend=0.04)

    yield Row(
        "records, 500,000 rows of CSV checked and prepared less 1 s, against pandas",
        check_and_prepare,
        lambda: pd.read_csv(path),
        "slower",
        3.0,
        spare=1.0,
        single=True,
    )


def exact_rows(workers: int) -> Iterator[Row]:
    """One compound distribution by transform, against a bare pair of real transforms as long as it needs:
    twice the lattice, so that nothing wraps around. With its bracket, against three times as much."""
    from scipy import fft

    from lossagg.cover import Schedule
    from lossagg.engines.book import Line
    from lossagg.engines.compound import CompoundSum
    from lossagg.engines.transform import LatticeTransform

    del workers
    points, step = 2**20, 20.0
    frequency = lossagg.Poisson(mean=12.0)
    line = Line(name="x", frequency=frequency, severity=LOGNORMAL)
    compound = CompoundSum.of((line,), {"x": Schedule.identity()})
    values = np.random.default_rng(1).random(points)

    def pair() -> None:
        fft.irfft(fft.rfft(values, 2 * points), 2 * points)

    yield Row(
        f"one compound distribution of {points:,} points, against its bare transforms",
        lambda: LatticeTransform(compound, step, points).down(),
        pair,
        "slower",
        2.0,
        single=True,
    )
    yield Row(
        f"the same with its bracket, {points:,} points, against the bare transforms",
        lambda: lossagg.Fourier(points=points, step=step).annual_loss(frequency, LOGNORMAL),
        pair,
        "slower",
        6.0,
    )


def recursion_rows(workers: int) -> Iterator[Row]:
    """Panjer's recursion, against as many multiplications and additions by numpy.dot of growing length."""
    from lossagg.kernels.recursion import panjer_recursion

    del workers
    points = 2**16
    masses = np.random.default_rng(1).dirichlet(np.ones(points))

    def dots() -> None:
        reversed_masses = np.ascontiguousarray(masses[::-1])
        for n in range(1, points):
            np.dot(masses[:n], reversed_masses[points - n :])

    yield Row(
        f"Panjer's recursion on {points:,} points, against numpy.dot",
        lambda: panjer_recursion(0.0, 12.0, 1.0, masses, points),
        dots,
        "slower",
        3.0,
        repetitions=1,
        single=True,
    )


def growth() -> None:
    """Print how the cost of the exact engines grows with the number of points: n log n and n squared."""
    model = lossagg.Poisson(mean=12.0), LOGNORMAL
    for name, powers, rule in (
        ("Fourier", range(14, 23, 2), lambda n: n * np.log2(n)),
        ("Panjer", range(12, 18), lambda n: float(n) ** 2),
    ):
        print(f"\n{name + ', points':<20} {'seconds':>10} {'against the rule':>18}")
        first = None
        for power in powers:
            points = 2**power
            engine = getattr(lossagg, name)(points=points, step=2e7 / points)
            engine.annual_loss(*model) if power == powers[0] else None
            taken = min(seconds(lambda e=engine: e.annual_loss(*model), 1) for _ in range(2))  # type: ignore[misc]
            first = first or taken / rule(points)
            print(f"{points:<20,} {taken:>10.3f} {taken / rule(points) / first:>18.2f}")


def _command(needed: str) -> list[str]:
    command = Path(sys.executable).with_name("lossagg")
    if not command.exists():
        raise CannotMeasureError(f"lossagg {needed}: the command is not installed beside {sys.executable}")
    shown = subprocess.run([str(command), "--help"], capture_output=True, text=True, check=False)
    if shown.returncode != 0 or needed not in shown.stdout:
        raise CannotMeasureError(f"lossagg {needed}: the command does not work yet")
    return [str(command)]


def _run(command: list[str]) -> None:
    done = subprocess.run(command, capture_output=True, text=True, check=False)
    if done.returncode not in (0, 1):
        raise CannotMeasureError(
            f"{' '.join(command)} left with {done.returncode}: {done.stderr.strip()[-200:]}"
        )


def seconds(work: Work, threads: int = 0) -> float:
    """Time of doing the work once: by the clock, or its processor time shared among threads."""
    clock = time.process_time if threads else time.perf_counter
    start = clock()
    work()
    return (clock() - start) / max(threads, 1)


def measure(row: Row, repetitions: int, workers: int = 0) -> tuple[str, bool]:
    """The row as printed, and whether it meets its bound; `workers` other than 0 asks for processor time."""
    ours, reference = [], []
    row.ours()
    for _ in range(row.repetitions or repetitions):
        if row.reference is not None:
            reference.append(seconds(row.reference, (workers if row.threaded else 1) if workers else 0))
        ours.append(seconds(row.ours, (1 if row.single else workers) if workers else 0))
    mine, other = statistics.median(ours), statistics.median(reference) if reference else float("nan")
    figure = {"faster": other / mine, "slower": (mine - row.spare) / other, "seconds": mine}[row.times]
    met = not row.bound or (figure >= row.bound if row.times == "faster" else figure <= row.bound)
    unit = "s" if row.times == "seconds" else f"times {row.times}"
    asked = f"{'at least' if row.times == 'faster' else 'at most'} {row.bound:g}" if row.bound else "-"
    against = f"{other:9.3f}" if reference else f"{'-':>9}"
    verdict = "" if met else "  MISSED"
    return f"{row.name:<72} {mine:9.3f} {against} {figure:8.2f} {unit:<13} {asked}{verdict}", met


class Kept(io.StringIO):
    """What is printed, kept as well."""

    def write(self, text: str) -> int:
        """Print and keep."""
        assert sys.__stdout__ is not None
        sys.__stdout__.write(text)
        sys.__stdout__.flush()
        return super().write(text)


def main() -> int:
    """Measure every row and print the table."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawTextHelpFormatter)
    parser.add_argument("--workers", type=int, default=2)
    parser.add_argument("--repetitions", type=int, default=5)
    parser.add_argument("--processor-time", action="store_true")
    parser.add_argument("--growth", action="store_true", help="only how the cost grows with the points")
    parser.add_argument("--write", action="store_true", help="keep all of it in speed.txt beside this script")
    given = parser.parse_args()
    kept = Kept()
    with contextlib.redirect_stdout(kept):
        if given.write:
            print(
                f"{given.workers} threads on {os.cpu_count()} processors, medians of {given.repetitions}; ",
                end="",
            )
            print(f"Python {platform.python_version()}, numpy {np.__version__}, numba {numba.__version__}\n")
        met = given.growth or table(given.workers, given.repetitions, given.processor_time)
        if given.growth or given.write:
            growth()
    if given.write:
        Path(__file__).with_name("speed.txt").write_text(kept.getvalue(), encoding="utf-8")
    return 0 if met else 1


def table(workers: int, repetitions: int, processor_time: bool) -> bool:
    """Print every row; whether all bounds are met."""
    threads = workers if processor_time else 0
    in_process = (
        exact_rows,
        recursion_rows,
        simulation_rows,
        fill_rows,
        far_tail_rows,
        option_rows,
        records_rows,
        fit_rows,
    )
    print(f"{'':<72} {'lossagg s':>9} {'against s':>9} {'figure':>8} {'':<13} asked")
    all_met = True
    for rows in in_process if threads else (*in_process, help_rows, assessment_rows):
        try:
            for row in rows(workers):
                text, met = measure(row, repetitions, threads)
                all_met &= met
                print(text)
        except CannotMeasureError as error:
            print(f"not measured: {error}")
    return all_met


if __name__ == "__main__":
    sys.exit(main())
