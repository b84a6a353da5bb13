"""The gate: a figure is printed only where independent engines agree on it.

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

Four standard errors is a chance of 6e-5 per comparison, so a clean assessment with a hundred
comparisons is withheld by bad luck less than once in a hundred seeds.
"""

from __future__ import annotations

import itertools
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np

from lossagg.engines.book import Book, Subject
from lossagg.engines.result import AnnualLoss, BookResult, BracketedAnnualLoss
from lossagg.errors import DoesNotExistError

STANDARD_ERRORS = 4.0
YEARS_BEYOND = 20
ROUND_OFF = 1e-9
TOLERANCE = (
    "brackets of exact engines overlap, the better known value inside the wider bracket; simulation within "
    f"{STANDARD_ERRORS:g} standard errors, "
    f"its mean and TVaR up to the amount that {YEARS_BEYOND} simulated years are expected to exceed"
)

Bracket = tuple[float, float]


@dataclass(frozen=True, kw_only=True)
class Comparison:
    """One figure as each engine has it.

    Attributes:
        subject: whose figure.
        measure: "mean", "sd", "value_at_risk" or "tail_value_at_risk".
        level: level of the last two, else None.
        values: the figure by engine; engines that cannot compute the subject are absent.
        brackets: the bracket by exact engine.
        standard_error: of what was compared with the simulation, in money; None where it does not exist.
        agrees: whether all engines agree.
        note: what disagrees and by how much, or what could not be compared.
    """

    subject: Subject
    measure: str
    level: float | None
    values: Mapping[str, float]
    brackets: Mapping[str, Bracket]
    standard_error: float | None
    agrees: bool
    note: str | None = None


@dataclass(frozen=True, kw_only=True)
class Crosscheck:
    """Every comparison, and the verdict.

    Attributes:
        comparisons: in the order of the book's subjects.
        refused: by engine, why it left a subject out.
    """

    comparisons: tuple[Comparison, ...]
    refused: Mapping[str, Mapping[Subject, str]] = field(default_factory=dict)

    @property
    def agrees(self) -> bool:
        """Whether every comparison agrees."""
        return all(comparison.agrees for comparison in self.comparisons)

    @property
    def summary(self) -> str:
        """One sentence: how many comparisons agree, or the widest disagreement."""
        wrong = [comparison for comparison in self.comparisons if not comparison.agrees]
        if not wrong:
            return f"All {len(self.comparisons)} comparisons between the engines agree."
        worst = max(wrong, key=_relative_gap)
        at = "" if worst.level is None else f" at {worst.level:.4%}".rstrip("0").rstrip(".")
        return (
            f"{len(wrong)} of {len(self.comparisons)} comparisons disagree; the widest gap is the "
            f"{worst.measure.replace('_', ' ')}{at} of {worst.subject}: {worst.note}."
        )


def crosscheck(book: Book, results: Mapping[str, BookResult], levels: Sequence[float]) -> Crosscheck:
    """Compare the engines on every subject: mean, sd, and VaR and TVaR at each level.

    Args:
        book: the book all engines computed.
        results: what each engine made of it, by engine name.
        levels: levels of VaR and TVaR, in (0, 1).

    Returns:
        The comparisons and the verdict. A subject that only one engine can compute appears with its
        single value and a note; it cannot agree or disagree.
    """
    asked: list[tuple[str, float | None]] = [("mean", None), ("sd", None)]
    asked += [(measure, level) for level in levels for measure in ("value_at_risk", "tail_value_at_risk")]
    comparisons = []
    for subject in book.subjects:
        losses = {
            name: result.losses[subject] for name, result in results.items() if subject in result.losses
        }
        caps = _caps(losses)
        comparisons += [_compare(subject, measure, level, losses, caps) for measure, level in asked]
    return Crosscheck(
        comparisons=tuple(comparisons),
        refused={name: result.refused for name, result in results.items() if result.refused},
    )


def _caps(losses: Mapping[str, AnnualLoss]) -> dict[tuple[str, str], float]:
    """By simulation and exact engine, the amount that twenty simulated years are expected to exceed."""
    caps = {}
    for reference, known in losses.items():
        for name, loss in losses.items():
            if isinstance(known, BracketedAnnualLoss) and not isinstance(loss, BracketedAnnualLoss):
                years = loss.years  # type: ignore[attr-defined]
                if years >= 2 * YEARS_BEYOND:
                    caps[name, reference] = known.value_at_risk(1.0 - YEARS_BEYOND / years)
    return caps


def _compare(
    subject: Subject,
    measure: str,
    level: float | None,
    losses: Mapping[str, AnnualLoss],
    caps: Mapping[tuple[str, str], float],
) -> Comparison:
    exact = {name: loss for name, loss in losses.items() if isinstance(loss, BracketedAnnualLoss)}
    simulated = {name: loss for name, loss in losses.items() if name not in exact}
    values = {name: loss.measure(measure, level) for name, loss in losses.items()}
    brackets = {name: loss.accuracy(measure, level) for name, loss in exact.items()}
    faults = _exact_faults(values, brackets)
    notes = ["only one engine can compute this"] if len(losses) == 1 else []
    error = None
    for name, loss in simulated.items():
        error = _own_error(loss, measure, level)
        for reference, known in exact.items():
            if np.isfinite(values[name]) != np.isfinite(values[reference]):
                faults.append(f"{name} and {reference} differ on whether it exists")
            elif measure == "value_at_risk" and level is not None:
                faults += _quantile_faults(name, loss, reference, brackets[reference], level)
            elif measure == "sd":
                found = _sd_evidence((name, values[name]), (reference, values[reference]), error)
                (faults if error is not None else notes).extend(found)
            else:
                cap = caps.get((name, reference), 0.0)
                found, error = _average_evidence((name, loss), (reference, known), level, cap)
                (faults if error is not None else notes).extend(found)
    return Comparison(
        subject=subject,
        measure=measure,
        level=level,
        values=values,
        brackets=brackets,
        standard_error=error,
        agrees=not faults,
        note="; ".join(faults or dict.fromkeys(notes)) or None,
    )


def _exact_faults(values: Mapping[str, float], brackets: Mapping[str, Bracket]) -> list[str]:
    """Pairs of exact engines whose brackets do not overlap, or whose better known value lies outside the
    wider bracket."""
    faults = []
    in_order = sorted(brackets, key=lambda name: _width(brackets[name]))
    for better, wider in itertools.combinations(in_order, 2):
        low, high = brackets[wider]
        slack = ROUND_OFF * abs(high) if np.isfinite(high) else 0.0
        if not low - slack <= values[better] <= high + slack:
            faults.append(
                f"{better} {values[better]:.6g} is outside {wider}'s bracket [{low:.6g}, {high:.6g}]"
            )
        elif not (brackets[better][0] <= high + slack and low - slack <= brackets[better][1]):
            faults.append(f"the brackets of {better} and {wider} do not overlap")
    return faults


def _width(bracket: Bracket) -> float:
    return bracket[1] - bracket[0] if np.isfinite(bracket[1]) else np.inf


def _quantile_faults(
    name: str, loss: AnnualLoss, reference: str, bracket: Bracket, level: float
) -> list[str]:
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
    if above > expected + allowed:
        return [f"{name} has {above:.0f} years above {reference}'s {high:.6g}, {expected:.0f} expected"]
    if at_or_above < expected - allowed:
        return [
            f"{name} has {at_or_above:.0f} years from {reference}'s {low:.6g} up, {expected:.0f} expected"
        ]
    return []


def _average_evidence(
    simulated: tuple[str, AnnualLoss], exact: tuple[str, BracketedAnnualLoss], level: float | None, cap: float
) -> tuple[list[str], float | None]:
    """Faults of a simulated mean (level None) or TVaR up to `cap`, with the standard error they are
    measured in; or, with no standard error, why there is nothing to compare."""
    (name, loss), (reference, known) = simulated, exact
    years = loss.years  # type: ignore[attr-defined]
    start, share = (0.0, 1.0) if level is None else (known.value_at_risk(level), 1.0 - level)
    if years * share < 2 * YEARS_BEYOND:
        beyond = f"it has only {years * share:.3g} years beyond the level"
        return [f"not compared with the simulation: {beyond}"], None
    if cap <= start:
        return [], 0.0
    excess = known.layer_mean(start, cap)
    variance = max(known.layer_second_moment(start, cap) - excess**2, 0.0)
    error = float(np.sqrt(variance / years)) / share
    centre, value = excess / share, loss.layer_mean(start, cap) / share
    low, high = (bound.layer_mean(start, cap) / share for bound in known.bounds())
    gap = max(min(low, centre) - value, value - max(high, centre), 0.0)
    if gap <= STANDARD_ERRORS * error + ROUND_OFF * abs(centre + start):
        return [], error
    size = f"{gap / error:.1f} standard errors" if error > 0 else f"{gap:.6g}"
    figures = f"{value + start:.6g}, not {centre + start:.6g}"
    return [f"{name} is {size} from {reference}, up to {cap:.6g}: {figures}"], error


def _sd_evidence(simulated: tuple[str, float], exact: tuple[str, float], error: float | None) -> list[str]:
    """Faults of a simulated standard deviation, or why it cannot be compared; `error` is the sample's."""
    (name, value), (reference, centre) = simulated, exact
    if not np.isfinite(centre):
        return []
    if error is None:
        return ["not compared with the simulation: its standard error does not exist"]
    gap = abs(value - centre)
    if gap <= STANDARD_ERRORS * error + ROUND_OFF * abs(centre):
        return []
    size = f"{gap / error:.1f} standard errors" if error > 0 else f"{gap:.6g}"
    return [f"{name} {value:.6g} is {size} from {reference} {centre:.6g}"]


def _own_error(loss: AnnualLoss, measure: str, level: float | None) -> float | None:
    """The simulation's own standard error; None where the moments it needs do not exist."""
    try:
        return float(loss.standard_error(measure, level))  # type: ignore[attr-defined]
    except DoesNotExistError:
        return None


def _relative_gap(comparison: Comparison) -> float:
    finite = [value for value in comparison.values.values() if np.isfinite(value)]
    return (max(finite) - min(finite)) / max(max(finite), 1e-300) if finite else np.inf
