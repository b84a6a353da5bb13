"""How far apart two engines may be on one figure.

Two kinds of evidence are compared, each on its own terms. The exact engines carry guaranteed
brackets: they must overlap, and the value known better must lie inside the wider bracket. (The value of
the coarser engine may well lie outside the narrower bracket: it is only as good as its own.) The simulation
carries chance: it must lie within four standard errors of the reference.

* A simulated VaR is judged in probability, not in money: the number of simulated years beyond the
  reference's bracket is binomial, whatever the tail, and atoms are no obstacle.
* A simulated mean or TVaR is judged up to the amount c that twenty simulated years are expected to
  exceed: E[min((S - v)+, c - v)], with v zero or the reference's VaR. It is estimated without bias, and
  its variance exists and follows from the reference's moments. Beyond c a single year can carry the
  whole average: under a heavy tail the full average says nothing, or raises false alarms.
* So is a simulated standard deviation: that of min(S, c), its error from the reference's fourth moment. The
  sample's own is far too small under a long tail: where the largest years are missing, so is their share.
"""

from __future__ import annotations

import itertools
from collections.abc import Mapping
from typing import NamedTuple

import numpy as np

from lossagg.engines.result import AnnualLoss, BracketedAnnualLoss
from lossagg.errors import DoesNotExistError

STANDARD_ERRORS = 4.0
YEARS_BEYOND = 20
ROUND_OFF = 1e-9
_CELLS = 4096

BRACKET = "of the way from the figure to the end of its bracket"

Bracket = tuple[float, float]


class Tested(NamedTuple):
    """One pair of engines on one figure.

    Attributes:
        engine: whose figure is tested.
        reference: against whose.
        difference: how far apart they are, in `unit`.
        allowed: how far they may be.
        unit: "of the way from the figure to the end of its bracket", "years beyond" or "standard errors".
        fault: what is wrong, where they are further apart.
    """

    engine: str
    reference: str
    difference: float
    allowed: float
    unit: str
    fault: str | None = None

    @property
    def used(self) -> float:
        """The part of the tolerance that is used; above 1 they disagree."""
        ratio = self.difference / self.allowed
        return ratio if self.fault is None else max(ratio, 1.0)


def exact_tests(values: Mapping[str, float], brackets: Mapping[str, Bracket]) -> list[Tested]:
    """Every pair of exact engines: the value of the better known against the wider bracket."""
    tests = []
    in_order = sorted(brackets, key=lambda name: _width(brackets[name]))
    for better, wider in itertools.combinations(in_order, 2):
        low, high = brackets[wider]
        slack = ROUND_OFF * abs(high) if np.isfinite(high) else 0.0
        fault = None
        if not low - slack <= values[better] <= high + slack:
            fault = f"{better} {values[better]:.6g} is outside {wider}'s bracket [{low:.6g}, {high:.6g}]"
        elif not (brackets[better][0] <= high + slack and low - slack <= brackets[better][1]):
            fault = f"the brackets of {better} and {wider} do not overlap"
        way = _way(values[better], values[wider], low - slack, high + slack)
        tests.append(Tested(better, wider, way, 1.0, BRACKET, fault))
    return tests


def _width(bracket: Bracket) -> float:
    return bracket[1] - bracket[0] if np.isfinite(bracket[1]) else np.inf


def _way(value: float, centre: float, low: float, high: float) -> float:
    """How far a value lies on the way from the centre of a bracket to its end."""
    if value == centre or not np.isfinite(value):
        return 0.0
    end = high if value > centre else low
    if not np.isfinite(end):
        return 0.0
    return abs(value - centre) / abs(end - centre) if end != centre else 0.0


def quantile_test(name: str, loss: AnnualLoss, reference: str, bracket: Bracket, level: float) -> Tested:
    """Whether the simulated years beyond the bracketed quantile are as many as chance allows.

    P(S > VaR) <= 1 - level <= P(S >= VaR), so too many years above the bracket, or too few at or
    above its lower end, is a fault.
    """
    years = loss.years  # type: ignore[attr-defined]
    expected = years * (1.0 - level)
    allowed = STANDARD_ERRORS * np.sqrt(years * level * (1.0 - level)) + 1.0
    low, high = bracket
    above = years * float(loss.sf(high * (1 + ROUND_OFF)))
    at_or_above = years * float(loss.sf(low * (1 - ROUND_OFF) - 1e-300)) if low > 0 else years
    fault = None
    if above > expected + allowed:
        fault = f"{name} has {above:.0f} years above {reference}'s {high:.6g}, {expected:.0f} expected"
    elif at_or_above < expected - allowed:
        fault = f"{name} has {at_or_above:.0f} years from {reference}'s {low:.6g} up, {expected:.0f} expected"
    off = max(above - expected, expected - at_or_above, 0.0)
    return Tested(name, reference, float(off), float(allowed), "years beyond", fault)


def average_test(
    simulated: tuple[str, AnnualLoss], exact: tuple[str, BracketedAnnualLoss], level: float | None, cap: float
) -> tuple[Tested | str | None, float | None]:
    """A simulated mean (level None) or TVaR up to `cap`, with the standard error it is measured in; or, with
    no standard error, why there is nothing to compare."""
    (name, loss), (reference, known) = simulated, exact
    years = loss.years  # type: ignore[attr-defined]
    start, share = (0.0, 1.0) if level is None else (known.value_at_risk(level), 1.0 - level)
    if years * share < 2 * YEARS_BEYOND:
        beyond = f"it has only {years * share:.3g} years beyond the level"
        return f"not compared with the simulation: {beyond}", None
    if cap <= start:
        return None, 0.0
    excess = known.layer_mean(start, cap)
    variance = max(known.layer_second_moment(start, cap) - excess**2, 0.0)
    error = float(np.sqrt(variance / years)) / share
    centre, value = excess / share, loss.layer_mean(start, cap) / share
    low, high = (bound.layer_mean(start, cap) / share for bound in known.bounds())
    gap = max(min(low, centre) - value, value - max(high, centre), 0.0)
    apart = _apart(name, reference, gap, error, ROUND_OFF * abs(centre + start))
    if apart.fault is not None:
        figures = f"{value + start:.6g}, not {centre + start:.6g}"
        apart = apart._replace(fault=f"{name} is {apart.fault} from {reference}, up to {cap:.6g}: {figures}")
    return apart, error


def sd_test(
    simulated: tuple[str, AnnualLoss], exact: tuple[str, BracketedAnnualLoss], cap: float
) -> tuple[Tested | str | None, float | None]:
    """A simulated standard deviation of min(S, cap), with the standard error it is measured in; or, with no
    standard error, why there is nothing to compare."""
    (name, loss), (reference, known) = simulated, exact
    years = loss.years  # type: ignore[attr-defined]
    if years < 2 * YEARS_BEYOND:
        return f"not compared with the simulation: it has only {years:.3g} years", None
    variance, error = _moments_up_to(known, cap, years)
    if cap <= 0 or variance <= 0:
        return None, 0.0
    value = loss.layer_second_moment(0.0, cap) - loss.layer_mean(0.0, cap) ** 2
    means, squares = zip(
        *((bound.layer_mean(0.0, cap), bound.layer_second_moment(0.0, cap)) for bound in known.bounds()),
        strict=True,
    )
    low = min(min(squares) - max(means) ** 2, variance)
    high = max(max(squares) - min(means) ** 2, variance)
    gap, sd = max(low - value, value - high, 0.0), float(np.sqrt(variance))
    apart = _apart(name, reference, gap, error, ROUND_OFF * variance)
    if apart.fault is not None:
        figures = f"{np.sqrt(max(value, 0.0)):.6g}, not {sd:.6g}"
        apart = apart._replace(fault=f"{name} is {apart.fault} from {reference}, up to {cap:.6g}: {figures}")
    return apart, error / (2.0 * sd)


def _moments_up_to(known: BracketedAnnualLoss, cap: float, years: int) -> tuple[float, float]:
    """Variance of min(S, cap), and the standard error of its estimate from so many years: from the fourth
    central moment (Kendall & Stuart, The Advanced Theory of Statistics, vol. 1, ch. 10), on a fine grid."""
    mean = known.layer_mean(0.0, cap)
    variance = max(known.layer_second_moment(0.0, cap) - mean**2, 0.0)
    edges = np.linspace(0.0, cap, _CELLS + 1)
    above = np.asarray(known.sf(edges), dtype=np.float64)
    middles = 0.5 * (edges[1:] + edges[:-1]) - mean
    fourth = float(
        (1.0 - above[0]) * mean**4 + (above[:-1] - above[1:]) @ middles**4 + above[-1] * (cap - mean) ** 4
    )
    return variance, float(np.sqrt(max(fourth - variance**2, 0.0) / years))


def _apart(name: str, reference: str, gap: float, error: float, slack: float) -> Tested:
    """A gap measured in standard errors, `fault` saying its size where it is too wide."""
    fault = None
    if gap > STANDARD_ERRORS * error + slack:
        fault = f"{gap / error:.1f} standard errors" if error > 0 else f"{gap:.6g}"
    seen = gap / error if error > 0 else 0.0
    return Tested(name, reference, seen, STANDARD_ERRORS, "standard errors", fault)


def own_error(loss: AnnualLoss, measure: str, level: float | None) -> float | None:
    """The simulation's own standard error; None where the moments it needs do not exist."""
    try:
        return float(loss.standard_error(measure, level))  # type: ignore[attr-defined]
    except DoesNotExistError:
        return None
