"""Right or refused, from a loss in a hundred years to a million a year: one engine against inversions.

Every pair of a count (Poisson means from 0.01 to 1,000,000; negative binomial at three of them) and a size
(lognormal with sigma from 0.1 to 3, Pareto with tail index from 0.8) is solved with the default settings, or
refused. The truth shares nothing with the engine: no lattice, no sum over payments. P(S > x) comes from the
Laplace transform of the annual loss, by

* the integral of Gil-Pelaez (1951) along the imaginary axis, by Gauss-Legendre panels of one oscillation
  each, for Poisson means from 100 (from 1,000 where sigma is 3);
* a cotangent contour (Talbot 1979, constants of Trefethen, Weideman and Schmelzer 2006) for the others;
* where the sizes vary so little, or begin so abruptly, that the contour does not converge: one loss exactly,
  two or more by Gil-Pelaez (lognormal) or two by quadrature (Pareto; three are rarer than 2e-7).

The transform of a Pareto law is its power series, that of a lognormal law the trapezoidal rule along a
direction in which it does not oscillate. A bracket holds when P(S > low) >= 1 - level >= P(S > high).

    python validation/many_losses.py [--write]

Prints a table; with --write keeps it as validation/many_losses.md. Leaves with exit code 1 when a bracket
misses.
"""

from __future__ import annotations

import argparse
import sys
import warnings
from collections.abc import Callable
from pathlib import Path

import numpy as np
import numpy.typing as npt
from scipy import integrate, special, stats

import lossagg
from lossagg.errors import EngineError, LossaggWarning
from lossagg.families.base import CountLaw, SizeLaw

LEVELS = (0.995, 0.999)
MEANS = (0.01, 1.0, 100.0, 1e4, 1e6)
SIZES: tuple[SizeLaw, ...] = (
    *(lossagg.Lognormal(mu=0.0, sigma=sigma) for sigma in (0.1, 1.0, 3.0)),
    *(lossagg.Pareto(alpha=alpha, minimum=1.0) for alpha in (0.8, 1.1, 1.5, 2.5)),
)
COUNTS: tuple[CountLaw, ...] = (
    *(lossagg.Poisson(mean=mean) for mean in MEANS),
    *(lossagg.NegativeBinomial(mean=mean, dispersion=0.5) for mean in (100.0, 1e4, 1e6)),
)
# Absolute error allowed for in the truth.
TRUTH = 1e-9
Complex = npt.NDArray[np.complex128]
Transform = Callable[[Complex], Complex]
Survival = Callable[[float], float]

_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(16)
_CONTOUR = 32


def lognormal(sigma: float) -> Transform:
    """E[exp(-z X)] - 1 of a lognormal law with mu = 0, for Re z >= 0 or, with sigma >= 0.7, anywhere but on
    the negative axis."""
    u = np.arange(-9.0, 9.0, 0.1)
    density = 0.1 * np.exp(-(u**2) / 2.0) / np.sqrt(2.0 * np.pi)

    def transform(z: Complex) -> Complex:
        if sigma < 0.7:
            return np.asarray(np.expm1(-np.multiply.outer(z, np.exp(sigma * u))) @ density)
        turn = (np.angle(z) / sigma)[:, None]
        weights = density * np.exp(turn**2 / 2.0 + 1j * turn * u)
        return np.asarray((weights * np.expm1(-np.abs(z)[:, None] * np.exp(sigma * u))).sum(axis=1))

    return transform


def pareto(alpha: float) -> Transform:
    """E[exp(-z X)] - 1 of a Pareto law from 1: the power series of the incomplete gamma function."""
    k = np.arange(1.0, 80.0)
    terms = -alpha * (-1.0) ** k / (special.gamma(k + 1.0) * (k - alpha))

    def transform(z: Complex) -> Complex:
        series = np.polynomial.polynomial.polyval(z, np.insert(terms, 0, 0.0))
        return np.asarray(series - special.gamma(1.0 - alpha) * z**alpha)

    return transform


def annual(count: CountLaw, one: Transform) -> Transform:
    """E[exp(-z S)] of the annual loss."""
    mean = count.mean()
    if isinstance(count, lossagg.NegativeBinomial):
        return lambda z: (1.0 - count.dispersion * mean * one(z)) ** (-1.0 / count.dispersion)
    return lambda z: np.exp(mean * one(z))


def gil_pelaez(transform: Transform, x: float, whole: float = 1.0) -> float:
    """P(S > x) of a law of total mass `whole` whose transform vanishes along the imaginary axis."""
    last = 1.0 / x
    while abs(transform(np.array([1j * last]))[0]) > 1e-16:
        last *= 1.5
    period = 2.0 * np.pi / x
    edges = np.concatenate((period * 2.0 ** np.arange(-56.0, 1.0), np.arange(2.0 * period, last, period)))
    half = np.diff(edges) / 2.0
    t = (edges[:-1] + half)[:, None] + half[:, None] * _NODES
    total = 0.0
    for part, width in zip(np.array_split(t, 32), np.array_split(half, 32), strict=True):
        values = transform(-1j * part.ravel()).reshape(part.shape)
        total += float((width[:, None] * _WEIGHTS * (np.exp(-1j * part * x) * values).imag / part).sum())
    return whole / 2.0 + total / np.pi


def contour(transform: Transform, x: float) -> float:
    """P(S > x) by a contour around the negative axis."""
    angle = (2.0 * np.arange(_CONTOUR // 2) + 1.0) * np.pi / _CONTOUR
    cot = 1.0 / np.tan(0.6407 * angle)
    z = _CONTOUR / x * (0.5017 * angle * cot - 0.6122 + 0.2645j * angle)
    slope = 0.5017 * (cot - 0.6407 * angle * (1.0 + cot**2)) + 0.2645j
    terms = np.exp(z * x) * (1.0 - transform(z)) / z * slope * _CONTOUR / x
    return float(2.0 * terms.imag.sum() / _CONTOUR)


def survival(count: CountLaw, size: SizeLaw) -> Survival:
    """P(S > x) of the annual loss, for x above zero."""
    one = lognormal(size.sigma) if isinstance(size, lossagg.Lognormal) else pareto(size.alpha)  # type: ignore[attr-defined]
    whole = annual(count, one)
    mean, poisson = count.mean(), isinstance(count, lossagg.Poisson)
    wide = isinstance(size, lossagg.Lognormal) and size.sigma > 2
    if poisson and mean >= (1000 if wide else 100):
        return lambda x: gil_pelaez(whole, x)
    if poisson and isinstance(size, lossagg.Lognormal) and size.sigma < 0.7:
        none, single = np.exp(-mean), mean * np.exp(-mean)

        def several(z: Complex) -> Complex:
            chances = np.append([0.0, 0.0], stats.poisson.pmf(np.arange(2, 30), mean))
            return np.asarray(np.polynomial.polynomial.polyval(1.0 + one(z), chances))

        law = stats.lognorm(size.sigma)
        return lambda x: single * float(law.sf(x)) + gil_pelaez(several, x, 1.0 - none - single)
    if isinstance(size, lossagg.Pareto) and mean < 1:
        return lambda x: _two_paretos(mean, size.alpha, x)
    return lambda x: contour(whole, x)


def _two_paretos(mean: float, alpha: float, x: float) -> float:
    """One loss exactly and two by quadrature; three are counted as above x."""
    one = min(x**-alpha, 1.0)
    two = 1.0
    if x > 2.0:
        inside, _ = integrate.quad(
            lambda y: alpha * y ** (-alpha - 1.0) * (x - y) ** -alpha, 1.0, x - 1.0, epsabs=1e-13, limit=200
        )
        two = inside + (x - 1.0) ** -alpha
    chances = stats.poisson(mean)
    return float(chances.pmf(1) * one + chances.pmf(2) * two + chances.sf(2))


def row(count: CountLaw, size: SizeLaw, engine: lossagg.Fourier) -> tuple[list[str], bool]:
    """A row of the table, and whether every bracket holds."""
    names = [
        f"{count.family} {count.mean():g}",
        f"{size.family} {getattr(size, 'sigma', None) or size.alpha:g}",
    ]  # type: ignore[attr-defined]
    try:
        loss = engine.annual_loss(count, size)
    except EngineError:
        return [*names, "refused", "", "", ""], True
    truth, cells, held = survival(count, size), [], True
    for level in LEVELS:
        tail, value = 1.0 - level, loss.value_at_risk(level)
        low, high = loss.accuracy("value_at_risk", level)
        cells += [f"{value:.8g}", f"{(high - low) / value:.2%}"] if value > 0 else ["0", ""]
        slack = TRUTH + (2e-7 if count.mean() < 1 else 0.0)
        above = 0.0 if not np.isfinite(high) else truth(high) if high > 0 else float(count.sf(0))
        held &= above <= tail + slack and (low <= 0 or truth(low * (1 - 1e-9)) >= tail - slack)
        cells.append(f"{truth(value) / tail - 1.0:.1e}" if value > 0 else "")
    return [*names, *cells], held


def main() -> int:
    """Print the table; 1 when a bracket misses."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])  # type: ignore[union-attr]
    parser.add_argument("--write", action="store_true")
    given = parser.parse_args()
    lines = [
        "# From a loss in a hundred years to a million a year",
        "",
        "Made by `validation/many_losses.py`, where the truth is explained. `off` is by how much, relative",
        "to 1 - level, the probability of exceeding the value differs from it by the independent inversion.",
        "",
        "| count, mean | size | VaR 99.5 % | bracket | off | VaR 99.9 % | bracket | off | held |",
        "|---|---|---|---|---|---|---|---|---|",
    ]
    missed = 0
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", LossaggWarning)
        for count in COUNTS:
            for size in SIZES:
                cells, held = row(count, size, lossagg.Fourier())
                missed += not held
                lines.append("| " + " | ".join([*cells, "yes" if held else "NO"]) + " |")
                print(lines[-1], flush=True)
    text = "\n".join(lines) + "\n"
    if given.write:
        Path(__file__).with_suffix(".md").write_text(text)
    return int(missed > 0)


if __name__ == "__main__":
    sys.exit(main())
