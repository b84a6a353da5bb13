"""Does the bracket hold the truth? A thousand random models, every bracket of two engines against the truth.

For each model a count law, a size law and a cover are drawn (seeded), means from 0.01 to 1,000 losses a year,
tails from light to infinite mean. The brackets come from coarse lattices (512 to 4,096 points for the Fourier
engine, 256 to 1,024 for Panjer's), where they have something to hold. The truth is

* a closed form, where sums of a given number of sizes have one (exponential, gamma, inverse Gaussian): the
  distributions of 0, 1, 2, ... losses mixed by the probabilities of the count, with scipy;
* otherwise the value on a lattice of 65,536 points, itself no better than its own bracket. Where that value
  is outside a bracket but the two brackets overlap, it is not known well enough to tell (sizes of a table
  that lie between lattice points are moved by up to a step, which narrow brackets feel): it is computed
  again on 16 and on 64 times as many points, until the bracket holds it or misses all that is known of it.

    python validation/brackets.py [--models 1000] [--seed 1] [--write]

Prints a table; with --write keeps it as validation/brackets.md. Leaves with exit code 1 unless every
bracket holds the truth.
"""

from __future__ import annotations

import argparse
import sys
import warnings
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from scipy import optimize, stats

import lossagg
from lossagg.engines.fourier import MOST_POINTS, BracketWarning
from lossagg.engines.result import BracketedAnnualLoss
from lossagg.families.base import CountLaw, SizeLaw

LEVELS = (0.5, 0.9, 0.99, 0.995, 0.999)
MEASURES = ("value_at_risk", "tail_value_at_risk")
ROUND_OFF = 1e-8
Random = np.random.Generator
Engines = dict[str, BracketedAnnualLoss]


@dataclass(frozen=True)
class Model:
    """One random model.

    Attributes:
        count: law of the count.
        size: law of the size.
        cover: terms, or None.
    """

    count: CountLaw
    size: SizeLaw
    cover: lossagg.Cover | None


@dataclass(frozen=True)
class Figure:
    """One bracket against the truth.

    Attributes:
        engine: whose bracket.
        count: family of the count.
        measure: what is bracketed.
        closed: whether the truth is a closed form.
        width: of the bracket, relative to the truth; NaN where that is zero or does not exist.
        inside: whether it holds the truth.
        missed: whether it misses all that is known of the truth.
    """

    engine: str
    count: str
    measure: str
    closed: bool
    width: float
    inside: bool
    missed: bool


def random_model(random: Random) -> Model:
    """Draw a model."""
    mean = float(np.exp(random.uniform(np.log(0.01), np.log(1000.0))))
    count = _counts(random, mean)[random.integers(6)]()
    size = _sizes(random)[random.integers(15)]()
    kind = random.integers(4)
    start = float(size.ppf(random.uniform(0.2, 0.9)))
    covers = (
        None,
        None,
        lossagg.Cover(deductible=start),
        lossagg.Cover(deductible=start, limit=random.uniform(1.0, 20.0) * start),
    )
    return Model(count, size, covers[kind])


def _counts(random: Random, mean: float) -> tuple[Callable[[], CountLaw], ...]:
    dispersion, share = random.uniform(0.05, 1.5), random.uniform(0.05, 0.6)
    trials = int(np.ceil(mean / random.uniform(0.05, 0.9)))
    table = random.dirichlet(np.ones(random.integers(2, 12))).tolist()
    negative = lossagg.NegativeBinomial(mean=mean, dispersion=dispersion)
    return (
        lambda: lossagg.Poisson(mean=mean),
        lambda: negative,
        lambda: lossagg.Binomial(trials=trials, probability=mean / trials),
        lambda: lossagg.CountTable(probabilities=table),
        lambda: lossagg.ZeroModified(base=negative, zero_probability=share),
        lambda: lossagg.ZeroInflated(base=lossagg.Poisson(mean=mean), extra_zeros=share),
    )


def _sizes(random: Random) -> tuple[Callable[[], SizeLaw], ...]:
    scale = float(np.exp(random.uniform(0.0, 10.0)))
    shape, sigma, alpha = random.uniform(0.3, 4.0), random.uniform(0.1, 3.0), random.uniform(0.8, 4.0)
    minimum = random.uniform(0.1, 1.0) * scale
    body = lossagg.Lognormal(mu=float(np.log(scale)), sigma=sigma)
    points = np.unique(np.round(scale * random.uniform(0.1, 5.0, size=5), 2))
    chances = random.dirichlet(np.ones(len(points)))
    table = lossagg.SizeTable(sizes=points.tolist(), probabilities=chances.tolist())
    tail = lossagg.Pareto(alpha=alpha, minimum=2.0 * scale)
    return (
        lambda: lossagg.Exponential(mean=scale),
        lambda: lossagg.Exponential(mean=scale),
        lambda: lossagg.Gamma(shape=shape, scale=scale),
        lambda: lossagg.InverseGaussian(mean=scale, shape=shape * scale),
        lambda: body,
        lambda: lossagg.Pareto(alpha=alpha, minimum=minimum),
        lambda: lossagg.Lomax(alpha=alpha, scale=scale),
        lambda: lossagg.Weibull(shape=random.uniform(0.5, 3.0), scale=scale),
        lambda: lossagg.GeneralizedPareto(shape=random.uniform(-0.4, 1.2), scale=scale),
        lambda: lossagg.Burr(alpha=alpha, gamma=random.uniform(0.8, 3.0), scale=scale),
        lambda: lossagg.LogLogistic(gamma=random.uniform(0.9, 4.0), scale=scale),
        lambda: lossagg.LogGamma(shape=shape, rate=alpha + 0.3, minimum=minimum),
        lambda: table,
        lambda: lossagg.Spliced(body=body, tail=tail, threshold=2.0 * scale, tail_probability=0.15),
        lambda: lossagg.Mixture(weights=[0.3, 0.7], parts=[table, lossagg.Gamma(shape=shape, scale=scale)]),
    )


class ClosedForm:
    """The truth for sizes whose sums have a closed form: the count's probabilities mix them.

    Args:
        count: law of the count.
        size: exponential, gamma or inverse Gaussian.
    """

    def __init__(self, count: CountLaw, size: SizeLaw) -> None:
        most = 10
        while float(count.sf(most)) > 1e-17:
            most *= 2
        self.numbers = np.arange(1.0, most + 1.0)
        self.chances = np.asarray(count.pmf(self.numbers))
        kept = self.chances > 1e-20
        self.numbers, self.chances = self.numbers[kept], self.chances[kept]
        self.size = size
        self.mean = count.mean() * size.mean()

    def _sums(self, extra: float = 0.0) -> stats.rv_frozen:
        if isinstance(self.size, lossagg.InverseGaussian):
            mean, shape = self.numbers * self.size.mean(), self.numbers**2 * self.size.shape
            return stats.invgauss(mean / shape, scale=shape)
        shape = self.size.shape if isinstance(self.size, lossagg.Gamma) else 1.0
        scale = self.size.scale if isinstance(self.size, lossagg.Gamma) else self.size.mean()
        return stats.gamma(self.numbers * shape + extra, scale=scale)

    def sf(self, x: float) -> float:
        """P(S > x)."""
        return float(self.chances @ self._sums().sf(x))

    def value_at_risk(self, level: float) -> float:
        """The quantile, by bisection."""
        if self.sf(0.0) <= 1.0 - level:
            return 0.0
        high = max(self.mean, self.size.mean())
        while self.sf(high) > 1.0 - level:
            high *= 2.0
        return float(optimize.brentq(lambda x: self.sf(x) - (1.0 - level), 0.0, high, rtol=1e-14))

    def tail_value_at_risk(self, level: float) -> float | None:
        """The mean beyond the quantile; None for the inverse Gaussian, whose partial means are not used."""
        if isinstance(self.size, lossagg.InverseGaussian):
            return None
        value = self.value_at_risk(level)
        if isinstance(self.size, lossagg.Gamma):
            means = self.numbers * self.size.shape * self.size.scale
        else:
            means = self.numbers * self.size.mean()
        excess = self.chances @ (means * self._sums(1.0).sf(value) - value * self._sums().sf(value))
        return value + float(excess) / (1.0 - level)


def figures_of(model: Model, random: Random, finer: int = 2**16) -> list[Figure]:
    """Every bracket of a model against the truth."""
    points = int(2 ** random.integers(9, 13))
    engines: Engines = {}
    coarse = (lossagg.Fourier(points=points), lossagg.Panjer(points=int(2 ** random.integers(8, 11))))
    for engine in coarse:
        engines[engine.name] = engine.annual_loss(model.count, model.size, model.cover)  # type: ignore[assignment]
    simple = isinstance(model.size, (lossagg.Exponential, lossagg.Gamma, lossagg.InverseGaussian))
    closed = ClosedForm(model.count, model.size) if simple and model.cover is None else None
    fine = Finer(model, finer)
    return [
        figure
        for measure in MEASURES
        for level in LEVELS
        for name, loss in engines.items()
        for figure in _compared(model, (name, loss), closed or fine, measure, level)
    ]


class Finer:
    """The value on a finer lattice, with its bracket; on a still finer one where that does not decide.

    Args:
        model: the model.
        points: of the first lattice.
    """

    def __init__(self, model: Model, points: int) -> None:
        self.model, self.points = model, points
        self._found: dict[int, BracketedAnnualLoss] = {}

    def on(self, times: int) -> BracketedAnnualLoss:
        """The annual loss on so many times the points, at most the most that the engine allows."""
        points, model = min(self.points * times, MOST_POINTS), self.model
        if points not in self._found:
            engine = lossagg.Fourier(points=points)
            self._found[points] = engine.annual_loss(model.count, model.size, model.cover)  # type: ignore[assignment]
        return self._found[points]


def _known(
    reference: ClosedForm | Finer, measure: str, level: float, bracket: tuple[float, float]
) -> tuple[float | None, tuple[float, float]]:
    """The truth and what is known of it: refined until the bracket holds it or misses all that is known."""
    if isinstance(reference, ClosedForm):
        truth = getattr(reference, measure)(level)
        return truth, (truth, truth)
    for times in (1, 16, 64):
        loss = reference.on(times)
        value, known = loss.measure(measure, level), loss.accuracy(measure, level)
        if _inside(bracket, value) or _missed(bracket, known):
            break
    return value, known


def _inside(bracket: tuple[float, float], value: float) -> bool:
    slack = ROUND_OFF * abs(value) if np.isfinite(value) else 0.0
    return bool(bracket[0] - slack <= value <= bracket[1] + slack)


def _missed(bracket: tuple[float, float], known: tuple[float, float]) -> bool:
    slack = ROUND_OFF * abs(known[0]) if np.isfinite(known[0]) else 0.0
    return bool(known[1] < bracket[0] - slack or known[0] > bracket[1] + slack)


def _compared(
    model: Model,
    engine: tuple[str, BracketedAnnualLoss],
    reference: ClosedForm | Finer,
    measure: str,
    level: float,
) -> list[Figure]:
    name, loss = engine
    low, high = loss.accuracy(measure, level)
    truth, known = _known(reference, measure, level, (low, high))
    if truth is None:
        return []
    inside, missed = _inside((low, high), truth), _missed((low, high), known)
    width = (high - low) / truth if 0 < truth < np.inf else np.nan
    closed = isinstance(reference, ClosedForm)
    return [Figure(name, model.count.family, measure, closed, width, inside, missed)]


def experiment(models: int, seed: int, finer: int = 2**16) -> list[Figure]:
    """All figures of so many random models, the truth on `finer` points where it has no closed form."""
    found: list[Figure] = []
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", BracketWarning)
        for stream in np.random.default_rng(seed).spawn(models):
            found += figures_of(random_model(stream), stream, finer)
    return found


def table(found: list[Figure], models: int, seed: int) -> str:
    """The result as a table in Markdown."""
    lines = [
        f"# Brackets against the truth, {models:,} random models, seed {seed}",
        "",
        "Made by `validation/brackets.py`: what the columns mean stands there.",
        "",
        "| engine | count | measure | brackets | closed form | held | not decided | missed | median width |",
        "|---|---|---|---|---|---|---|---|---|",
    ]
    keys = sorted({(f.engine, f.count, f.measure) for f in found})
    for key in keys:
        own = [f for f in found if (f.engine, f.count, f.measure) == key]
        lines.append(_row([key[0], key[1], key[2].replace("_", " ")], own))
    lines.append(_row(["all", "", ""], found))
    return "\n".join(lines) + "\n"


def _row(names: list[str], own: list[Figure]) -> str:
    widths = [f.width for f in own if np.isfinite(f.width)]
    cells = [
        f"{len(own):,}",
        f"{sum(f.closed for f in own):,}",
        f"{sum(f.inside for f in own):,}",
        f"{sum(not f.inside and not f.missed for f in own):,}",
        f"{sum(f.missed for f in own):,}",
        f"{100.0 * np.median(widths):.2g} %" if widths else "",
    ]
    return "| " + " | ".join([*names, *cells]) + " |"


def main() -> int:
    """Run the experiment; 1 unless every bracket holds the truth."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])  # type: ignore[union-attr]
    parser.add_argument("--models", type=int, default=1000)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--write", action="store_true")
    given = parser.parse_args()
    found = experiment(given.models, given.seed)
    text = table(found, given.models, given.seed)
    print(text)
    if given.write:
        Path(__file__).with_suffix(".md").write_text(text)
    return int(not all(figure.inside for figure in found))


if __name__ == "__main__":
    sys.exit(main())
