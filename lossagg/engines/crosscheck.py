"""The gate: a figure is printed only where independent engines agree on it.

Every pair of engines is tested on every figure, see `agreement`, and the tolerance of each test is kept with
how much of it was used.

Four standard errors is a chance of 6e-5 per comparison, so a clean assessment with a hundred
comparisons is withheld by bad luck less than once in a hundred seeds.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np

from lossagg.engines.agreement import (
    STANDARD_ERRORS,
    YEARS_BEYOND,
    Bracket,
    Tested,
    average_test,
    exact_tests,
    own_error,
    quantile_test,
    sd_test,
)
from lossagg.engines.book import Book, Subject
from lossagg.engines.result import AnnualLoss, BookResult, BracketedAnnualLoss

# Relative width of a bracket up to which averages are compared.
TIGHT = 0.1
TOLERANCE = (
    "an exact engine gives each figure with a range that is certain to hold it; the ranges of two exact "
    "engines must overlap, and the figure with the narrower range must lie inside the wider. A simulation is "
    f"a sample of years: it must be within {STANDARD_ERRORS:g} standard errors, which chance exceeds about "
    "once in 16,000 comparisons. Its means, deviations and tail values at risk are compared up to the "
    f"amount that {YEARS_BEYOND} of its years are expected to exceed, or less far where the exact range is "
    f"wider than {TIGHT:.0%}: beyond that, single years decide"
)


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
        tests: every pair of engines that was tested, how far apart they are and how far they may be.
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
    tests: tuple[Tested, ...] = ()
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
    """By simulation and exact engine, the amount that twenty simulated years are expected to exceed, or the
    largest before it at which the engine's bracket is tight: beyond its lattice it knows little of them.
    """
    caps = {}
    for reference, known in losses.items():
        for name, loss in losses.items():
            if isinstance(known, BracketedAnnualLoss) and not isinstance(loss, BracketedAnnualLoss):
                years = loss.years  # type: ignore[attr-defined]
                exceedance = YEARS_BEYOND / years
                while exceedance < 0.5 and not _is_tight(known, 1.0 - exceedance):
                    exceedance *= 2.0
                if exceedance <= 0.5:
                    caps[name, reference] = known.value_at_risk(1.0 - exceedance)
    return caps


def _is_tight(known: BracketedAnnualLoss, level: float) -> bool:
    low, high = known.accuracy("value_at_risk", level)
    return high - low <= TIGHT * high


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
    tests = exact_tests(values, brackets)
    notes = ["only one engine can compute this"] if len(losses) == 1 else []
    faults, error = [], None
    for name, loss in simulated.items():
        error = own_error(loss, measure, level)
        for reference, known in exact.items():
            found: Tested | str | None = None
            if np.isfinite(values[name]) != np.isfinite(values[reference]):
                faults.append(f"{name} and {reference} differ on whether it exists")
            elif measure == "value_at_risk" and level is not None:
                found = quantile_test(name, loss, reference, brackets[reference], level)
            elif measure == "sd":
                cap = caps.get((name, reference), 0.0)
                found, error = sd_test((name, loss), (reference, known), cap)
            else:
                cap = caps.get((name, reference), 0.0)
                found, error = average_test((name, loss), (reference, known), level, cap)
            if isinstance(found, str):
                notes.append(found)
            elif found is not None:
                tests.append(found)
    faults = [test.fault for test in tests if test.fault] + faults
    return Comparison(
        subject=subject,
        measure=measure,
        level=level,
        values=values,
        brackets=brackets,
        standard_error=error,
        tests=tuple(tests),
        agrees=not faults,
        note="; ".join(faults or dict.fromkeys(notes)) or None,
    )


def _relative_gap(comparison: Comparison) -> float:
    finite = [value for value in comparison.values.values() if np.isfinite(value)]
    return (max(finite) - min(finite)) / max(max(finite), 1e-300) if finite else np.inf
