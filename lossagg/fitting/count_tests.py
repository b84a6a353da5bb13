"""What yearly counts say beyond their law: trend, independence of the sizes, and goodness of fit."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import special

from lossagg.arrays import FloatArray, Floats, IntArray, as_floats
from lossagg.errors import FitError, InputError
from lossagg.families import Binomial, NegativeBinomial, Poisson
from lossagg.families.base import CountLaw
from lossagg.fitting.counts import counts_of
from lossagg.fitting.frequency import fit_frequency
from lossagg.fitting.regression import poisson_regression
from lossagg.fitting.results import FrequencyFit

_FEWEST_YEARS = 4
_EXPECTED = 5.0  # least expected count of a cell: the usual rule, Cochran 1954, Biometrics 10


@dataclass(frozen=True)
class FrequencyTrend:
    """Yearly growth of the rate of losses per exposure.

    Attributes:
        growth: estimated growth per year, 0.05 for 5 %.
        low, high: its 95 % interval.
        p_value: probability of so steep a trend without one.
        dispersion: variance of the counts about the trend over that of Poisson counts, at least 1; the
            interval and the p-value allow for it.
        years: years that entered.
    """

    growth: float
    low: float
    high: float
    p_value: float
    dispersion: float
    years: int


def frequency_trend(counts: Floats, years: Floats, exposure: Floats | None = None) -> FrequencyTrend:
    """Does the rate of losses per exposure grow or fall with the years?

    Args:
        counts: losses per year, shape (n,).
        years: calendar year of each, shape (n,).
        exposure: exposure of each, above 0, shape (n,); None where all years are alike.

    Raises:
        InputError: counts, years or exposures that cannot be used.
        FitError: fewer than four years, or no loss.

    Source: quasi-Poisson regression on the year, F test (McCullagh & Nelder 1989, ch. 6 and 9).
    """
    sample = counts_of(counts, exposure)
    when = np.atleast_1d(as_floats(years, "years"))
    numbers = np.atleast_1d(as_floats(counts, "counts"))
    if when.shape != numbers.shape:
        raise InputError(
            "years must be as many as counts", value=len(when), remedy="Give the year of each count."
        )
    if len(np.unique(when)) < _FEWEST_YEARS or sample.losses == 0:
        raise FitError(
            "a trend in the counts needs four years and one loss",
            value=f"{sample.losses} losses in {len(when)} years",
            remedy="Leave the test out.",
        )
    ones = np.ones(len(when))
    sloped = poisson_regression(numbers, np.stack([ones, when - when.mean()], axis=1), exposure)
    level = poisson_regression(numbers, ones[:, None], exposure)
    dispersion = max(sloped.pearson / sloped.degrees, 1.0)
    ratio = max(level.deviance - sloped.deviance, 0.0) / dispersion
    slope = float(sloped.coefficients[1])
    error = float(sloped.standard_errors[1]) * np.sqrt(dispersion)
    width = float(special.stdtrit(sloped.degrees, 0.975)) * error
    return FrequencyTrend(
        growth=float(np.expm1(slope)),
        low=float(np.expm1(slope - width)),
        high=float(np.expm1(min(slope + width, 700.0))),
        p_value=float(special.fdtrc(1, sloped.degrees, ratio)),
        dispersion=float(dispersion),
        years=len(when),
    )


@dataclass(frozen=True)
class SizeCountTest:
    """Do years with many losses have larger ones?

    Attributes:
        correlation: Spearman's rank correlation of yearly rate and mean size.
        p_value: two-sided, by permutation.
        years: years with a loss.
    """

    correlation: float
    p_value: float
    years: int


def size_count_test(rates: Floats, mean_sizes: Floats, *, draws: int = 4000, seed: int = 0) -> SizeCountTest:
    """Rank test of the assumption that number and size of losses are independent.

    Args:
        rates: losses per exposure of each year with a loss, shape (n,).
        mean_sizes: mean loss of each of these years, shape (n,).
        draws: permutations drawn for the p-value.
        seed: of the permutations.

    Raises:
        InputError: lists of different lengths.
        FitError: fewer than four years.

    Source: Spearman 1904; permutation test.
    """
    first, second = as_floats(rates, "rates"), as_floats(mean_sizes, "mean_sizes")
    if first.shape != second.shape:
        raise InputError("rates and mean sizes must be as many", value=(len(first), len(second)))
    if len(first) < _FEWEST_YEARS:
        raise FitError("the rank test needs four years with losses", value=len(first))
    ranks, others = _ranks(first), _ranks(second)
    if not ranks.any() or not others.any():
        return SizeCountTest(0.0, 1.0, len(first))
    size = float(np.sqrt(np.sum(ranks**2) * np.sum(others**2)))
    found = float(np.sum(ranks * others)) / size
    random = np.random.default_rng(seed)
    permuted = random.permuted(np.tile(others, (draws, 1)), axis=1)
    drawn = np.sum(permuted * ranks, axis=1) / size
    further = int(np.sum(np.abs(drawn) >= abs(found) - 1e-12))
    return SizeCountTest(found, (1 + further) / (1 + draws), len(first))


def _ranks(values: FloatArray) -> FloatArray:
    """Mid-ranks about their mean."""
    ordered = np.sort(values)
    low, high = np.searchsorted(ordered, values, "left"), np.searchsorted(ordered, values, "right")
    return np.asarray((low + high + 1) / 2 - (len(values) + 1) / 2)


@dataclass(frozen=True)
class CountGoodness:
    """How far yearly counts are from their fitted law.

    Attributes:
        pearson: sum over the years of (count - mean)**2 / variance under the law.
        pearson_p_value: probability of a larger one, by a bootstrap that refits.
        chi_square: Pearson's statistic over cells of counts with at least 5 expected years.
        cells, degrees: number of cells, and cells less parameters less one; degrees of 0 mean that there
            are too few years for the test, and its p-value is None.
        chi_square_p_value: by the chi-square law.
        replicates: bootstrap draws that entered.
    """

    pearson: float
    pearson_p_value: float
    chi_square: float
    cells: int
    degrees: int
    chi_square_p_value: float | None
    replicates: int


def count_goodness(
    counts: Floats, fit: FrequencyFit, exposure: Floats | None = None, *, draws: int = 199, seed: int = 0
) -> CountGoodness:
    """Test yearly counts against the law fitted to them.

    Args:
        counts, exposure: as given to the fit.
        fit: the fit to test.
        draws: bootstrap draws.
        seed: of the draws; draw k depends on the seed and k only.

    Raises:
        InputError: counts or exposures that cannot be used.

    Source: chi-square with cells merged from the right until five are expected in each, Klugman, Panjer &
    Willmot, Loss Models, chapter on model selection.
    """
    counts_of(counts, exposure)
    numbers = np.atleast_1d(as_floats(counts, "counts"))
    exposures = np.broadcast_to(as_floats(1.0 if exposure is None else exposure, "exposure"), numbers.shape)
    laws = _Laws.of(fit, exposures)
    seen, further = laws.pearson(numbers), 0
    for k in range(draws):
        random = np.random.Generator(np.random.SFC64(np.random.SeedSequence([seed, k])))
        drawn = laws.draw(random)
        again = _Laws.of(_refitted(drawn, fit, exposures), exposures)
        further += again.pearson(drawn) >= seen * (1 - 1e-9)
    statistic, cells = chi_square_cells(numbers, laws)
    degrees = max(cells - fit.estimated - 1, 0)
    return CountGoodness(
        pearson=seen,
        pearson_p_value=(1 + further) / (1 + draws),
        chi_square=statistic,
        cells=cells,
        degrees=degrees,
        chi_square_p_value=float(special.gammaincc(degrees / 2, statistic / 2)) if degrees else None,
        replicates=draws,
    )


@dataclass(frozen=True, eq=False)
class _Laws:
    """The law of each year: distinct ones, and which of them each year has."""

    distinct: list[CountLaw]
    places: IntArray

    @classmethod
    def of(cls, fit: FrequencyFit, exposures: FloatArray) -> _Laws:
        values, places = np.unique(exposures, return_inverse=True)
        return cls([fit.model_for(float(each)) for each in values], places)

    def pearson(self, numbers: FloatArray) -> float:
        means = np.array([law.mean() for law in self.distinct])[self.places]
        variances = np.array([law.variance() for law in self.distinct])[self.places]
        return float(np.sum((numbers - means) ** 2 / np.maximum(variances, 1e-300)))

    def draw(self, random: np.random.Generator) -> FloatArray:
        drawn = np.empty(self.places.shape)
        for place, law in enumerate(self.distinct):
            chosen = self.places == place
            drawn[chosen] = draw_counts(law, int(chosen.sum()), random)
        return drawn


def chi_square_cells(numbers: FloatArray, laws: _Laws) -> tuple[float, int]:
    """Pearson's statistic over cells 0, 1, 2, ..., merged from the right until five are expected in each,
    and the number of cells."""
    most = int(numbers.max()) + 1
    values = np.arange(most)
    expected = np.zeros(most + 1)
    for law, years in zip(laws.distinct, np.bincount(laws.places), strict=True):
        expected[:most] += years * np.asarray(law.pmf(values))
        expected[most] += years * float(law.sf(most - 1))
    observed = np.append(np.bincount(numbers.astype(np.int64), minlength=most).astype(np.float64), 0.0)
    merged = [[0.0, 0.0]]
    for seen, wanted in zip(observed[::-1], expected[::-1], strict=True):
        if merged[-1][1] >= _EXPECTED:
            merged.append([0.0, 0.0])
        merged[-1][0] += seen
        merged[-1][1] += wanted
    if merged[-1][1] < _EXPECTED and len(merged) > 1:
        last = merged.pop()
        merged[-1] = [merged[-1][0] + last[0], merged[-1][1] + last[1]]
    statistic = sum((seen - wanted) ** 2 / wanted for seen, wanted in merged if wanted > 0)
    return float(statistic), len(merged)


def draw_counts(law: CountLaw, size: int, random: np.random.Generator) -> FloatArray:
    """Counts of a law with independent years, shape (size,)."""
    if isinstance(law, NegativeBinomial) and law.dispersion > 0:
        rates = random.gamma(1 / law.dispersion, law.dispersion * law.mean(), size)
        return random.poisson(rates).astype(np.float64)
    if isinstance(law, Binomial):
        return random.binomial(int(law.trials), law.probability, size).astype(np.float64)
    if isinstance(law, Poisson | NegativeBinomial):
        return random.poisson(law.mean(), size).astype(np.float64)
    most = 16
    while float(law.sf(most)) > 1e-17:
        most *= 2
    return np.searchsorted(np.asarray(law.cdf(np.arange(most))), random.random(size)).astype(np.float64)


def _refitted(drawn: FloatArray, fit: FrequencyFit, exposures: FloatArray) -> FrequencyFit:
    """The same family again; counts without overdispersion are Poisson, the edge of the other two."""
    try:
        held = {"trials": fit.parameters["trials"]} if fit.family == "binomial" else None
        return fit_frequency(drawn, fit.family, exposures, fixed=held)
    except FitError:
        return fit_frequency(drawn, "poisson", exposures)
