"""The binomial fit: whole trials, given or by profile likelihood; the probability is closed."""

from __future__ import annotations

import numpy as np
from scipy import special

from lossagg.arrays import FloatArray
from lossagg.errors import FitError, InputError
from lossagg.families import Binomial
from lossagg.fitting.count_solution import CountSolution
from lossagg.fitting.counts import Counts
from lossagg.fitting.jet_functions import log_shares
from lossagg.fitting.jets import Jet, exp, variables
from lossagg.fitting.maximise import Maximum
from lossagg.fitting.negative_binomial import JUST_EQUAL, TABLE, rising_by_terms
from lossagg.fitting.notes import Note
from lossagg.fitting.results import FrequencyFit

_MOST_TRIALS = 2.0**40
_SLIM, _TERMS = 0.05, 14  # 0.05**14 is below rounding
_ROUNDING = 1e-15  # of a log-likelihood, per loss
_FEW_LEFT = 50  # from here on Stirling's series of three terms is exact to rounding


def fit_binomial(sample: Counts, held: float | None) -> FrequencyFit:
    """Fit the probability, and the trials unless held; see `fit_frequency`."""
    if sample.losses == 0:
        raise FitError(
            "a binomial law cannot be fitted to years without losses",
            value=f"0 losses in {sample.years} years",
            remedy='Fit "poisson", which gives a bound.',
        )
    trials = _estimated_trials(sample) if held is None else _held_trials(sample, held)
    probability = sample.losses / (trials * sample.exposure)
    notes: tuple[Note, ...] = ()
    if held is None:
        text = (
            f"Trials {trials} were chosen by the likelihood over whole numbers; the standard error of the "
            "probability takes them as known, and they count as one parameter in AIC and BIC."
        )
        notes = (Note("borrowed-parameter", text),)
    variance = probability * (1 - probability) / (trials * sample.exposure)
    return FrequencyFit(
        family="binomial",
        model=Binomial(trials=trials, probability=probability),
        parameters={"trials": float(trials), "probability": probability},
        covariance=np.diag([0.0, variance]),
        fixed=("trials",),
        log_likelihood=_binomial_profile(sample, float(trials)) - sample.log_factorials(),
        estimated=1 if held is not None else 2,
        observations=sample.years,
        gradient_norm=0.0,
        ranges={"probability": "probability"},
        notes=notes,
        losses=sample.losses,
        exposure=sample.exposure,
        maximum_likelihood_mean=trials * probability,
        solution=_solution(sample.losses, trials * sample.exposure) if probability < 1 else None,
    )


def _solution(losses: float, chances: float) -> CountSolution:
    """The likelihood of the probability by its log-odds, the trials as they are."""
    odds = float(special.logit(losses / chances))

    def objective(point: tuple[Jet, ...]) -> Jet:
        hit, miss = log_shares(point[0])
        return hit * losses + miss * (chances - losses)

    share = losses / chances
    maximum = Maximum(
        point=np.array([odds]),
        value=float(objective(variables(np.array([odds]))).value[0]),
        covariance=np.array([[1 / (chances * share * (1 - share))]]),
        distance=0.0,
        failure="",
    )
    return CountSolution(
        objective, maximum, lambda point: (exp(log_shares(point[0])[0]),), {"probability": "probability"}
    )


def _binomial_profile(sample: Counts, trials: float) -> float:
    """Log-likelihood plus log n! at these trials (at exposure 1) and the best probability."""
    each = trials * sample.exposures
    probability = sample.losses / (trials * sample.exposure)
    ways = special.gammaln(each + 1) - special.gammaln(each - sample.numbers + 1)
    chance = special.xlogy(sample.numbers, probability) + special.xlog1py(each - sample.numbers, -probability)
    return float(np.sum(sample.weights * (ways + chance)))


def _held_trials(sample: Counts, held: float) -> int:
    each = held * sample.exposures
    whole = np.abs(each - np.round(each)) <= 1e-9 * each
    if not (held == round(held) and held >= 1 and whole.all() and (sample.numbers <= each + 0.5).all()):
        raise InputError(
            "fixed trials must be a whole number, whole at every exposure and not below a count",
            value=held,
            remedy=f"The largest count is {sample.numbers.max():g}; with uneven exposures fit another law.",
        )
    return round(held)


def _estimated_trials(sample: Counts) -> int:
    """The whole number of trials of highest likelihood, which has one peak in the trials."""
    if (sample.exposures != 1).any():
        raise FitError(
            "the trials of a binomial law cannot be estimated with exposures other than 1",
            value=f"exposures {sample.exposures.min():g} to {sample.exposures.max():g}",
            remedy='Give fixed={"trials": n}, or fit "poisson" or "negative-binomial".',
        )
    low = int(sample.numbers.max())
    if sample.rate == low:
        raise FitError(
            "every year has the same count, so the binomial probability is 1",
            value=low,
            remedy='Check the counts; fit "poisson" if they are right.',
        )
    step = 1
    rises = _rises_by_slope if low > TABLE else _rises
    while step < _MOST_TRIALS and rises(sample, low + step, low + 2 * step):
        step *= 2
    first, last = low + step // 2, low + 2 * step
    if not rises(sample, low, low + 1):
        first = last = low
    while first < last:
        middle = (first + last) // 2
        if rises(sample, middle, middle + 1):
            first = middle + 1
        else:
            last = middle
    if step >= _MOST_TRIALS or _gain(sample, first) <= JUST_EQUAL + _ROUNDING * sample.losses:
        raise FitError(
            "the counts vary at least as much as Poisson counts, so the binomial fit ends at endless trials",
            value=f"{sample.losses} losses in {sample.years} years",
            remedy='Fit "poisson" or "negative-binomial".',
            tried=(f"trials from {low} to {low + 2 * step}",),
        )
    return first


def _rises(sample: Counts, trials: int, more: int) -> bool:
    return _gain(sample, more) > _gain(sample, trials)


def _rises_by_slope(sample: Counts, trials: int, more: int) -> bool:
    """Whether the likelihood still rises halfway between the two, by its slope in the trials.

    Of millions of losses the likelihood itself has lost the digits in which neighbours differ.
    """
    at = 0.5 * (trials + more)
    ways = special.digamma(at + 1.0) - special.digamma(at - sample.numbers + 1.0)
    return bool(np.sum(sample.weights * ways) + sample.years * np.log1p(-sample.rate / at) > 0)


def log_falling(numbers: FloatArray, trials: float) -> FloatArray:
    """Sum of log(1 - k / trials), k = 0 .. n-1, for counts n of thousands or more, at or below the trials.

    By Stirling's series of both factorials (Abramowitz & Stegun 1964, 6.1.41), in which with u = n / trials
    what would cancel is trials * ((1 - u) log(1 - u) + u), a power series where u is small.
    """
    left = trials - numbers
    u = numbers / trials
    slim = np.where(u < _SLIM, u, 0.0)
    powers = sum(slim**k / (k * (k - 1)) for k in range(2, _TERMS))
    with np.errstate(divide="ignore", invalid="ignore"):
        logs = np.log1p(-u)
        bulk = np.where(u < _SLIM, powers, special.xlog1py(1.0 - u, -u) + u)
        far = -trials * bulk - 0.5 * logs + _stirling(trials) - _stirling(left)
    near = special.gammaln(trials + 1.0) - special.gammaln(left + 1.0) - numbers * np.log(trials)
    return np.asarray(np.where(left < _FEW_LEFT, near, far))


def _stirling(x: FloatArray | float) -> FloatArray | float:
    return 1 / (12 * x) - 1 / (360 * x**3) + 1 / (1260 * x**5)


def _gain(sample: Counts, trials: int) -> float:
    """Log-likelihood of binomial less Poisson counts of the same mean, all exposures 1.

    The factorials of the trials are taken as a sum of log(1 - k / trials), so that endless trials give 0
    and not the difference of two huge numbers.
    """
    mean = sample.rate
    chance = mean / trials
    small = sample.numbers <= TABLE
    ways = rising_by_terms(-1.0 / trials, sample.numbers[small], sample.weights[small])[0]
    ways += float(np.sum(sample.weights[~small] * log_falling(sample.numbers[~small], trials)))
    none = trials * (special.log1p(-chance) + chance)
    return float(ways + sample.years * none - sample.losses * special.log1p(-chance))
