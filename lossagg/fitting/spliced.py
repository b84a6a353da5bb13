"""Fit a body below a threshold and a tail above it, with the share of losses above, in one likelihood.

Ground-up density: (1 - q) f_b(x) / F_b(u) up to the threshold u, q f_t(x) above. The tail enters only
through the losses above u and separates; body and tail probability q are tied by the reporting
thresholds (a loss reported above t < u lies above u with probability q / (q + (1 - q) r(t)), where
r(t) = (F_b(u) - F_b(t)) / F_b(u)) and by losses censored below u, so they are fitted jointly (Klugman,
Panjer & Willmot, Loss Models, spliced distributions; Aban, Meerschaert & Panorska 2006 on truncation).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import special

from lossagg.arrays import BoolArray, FloatArray, Floats, require_positive
from lossagg.errors import FitError, InputError
from lossagg.families import Spliced
from lossagg.families.base import SizeLaw
from lossagg.fitting.empirical import EMPIRICAL, empirical_body
from lossagg.fitting.jet_functions import log_one_minus_exp, log_shares, log_sum_exp
from lossagg.fitting.jets import Jet, lift, variables
from lossagg.fitting.likelihood import Range, SizeLikelihood
from lossagg.fitting.maximise import Maximum
from lossagg.fitting.notes import FEW, Note, tail_notes
from lossagg.fitting.results import SeverityFit
from lossagg.fitting.sample import Sample, Weighted, checked_losses, sample_of
from lossagg.fitting.severity import (
    MOST_STARTS,
    climb,
    fit_severity,
    index_interval,
    likelihood_of,
    natural_parameters,
    require_support,
)

BODIES = ("exponential", "lognormal", "lomax", "gamma", "weibull", "inverse-gaussian", "burr", "log-logistic")
TAILS = ("generalized-pareto", "pareto")
_FEWEST_IN_TAIL = 5  # uncensored losses; no published minimum, practice speaks of 5, 10 and 30


@dataclass(frozen=True, eq=False)
class _Body:
    """The joint likelihood of the body and the tail probability, amounts in units of the sample's scale.

    Attributes:
        below: losses up to the threshold; its `stopped` are censored below, its `thresholds` unused.
        reported: reporting thresholds below u, of losses on both sides.
        above: losses above u with a reporting threshold below it.
        threshold: the splice point u.
    """

    likelihood: SizeLikelihood
    below: Sample
    reported: Weighted
    above: int
    threshold: float

    def __call__(self, point: tuple[Jet, ...]) -> Jet:
        *coordinates, odds = point
        log_q, log_p = log_shares(odds)
        inner = self.likelihood.inner(tuple(coordinates))
        if not self.likelihood.admissible(inner):
            return odds * np.nan
        log_end = self.likelihood.log_survival(inner, np.array([self.threshold]))
        log_whole = log_one_minus_exp(log_end)  # log F_b(u)
        count = self.below.count
        total = self.likelihood.log_density(inner, self.below) + count * (log_p - log_whole)
        total = total + self.above * log_q
        for group, sign in ((self.below.stopped, 1.0), (self.reported, -1.0)):
            if len(group.points):
                log_start = self.likelihood.log_survival(inner, group.points)
                log_between = log_start + log_one_minus_exp(log_end - log_start)
                beyond = log_sum_exp(log_q, log_p + log_between - log_whole)
                total = total + beyond.total(sign * group.weights)
        return total


def fit_spliced(
    losses: Floats,
    body: str,
    threshold: float,
    truncation: Floats | None = None,
    censored: object = None,
    tail: str = "generalized-pareto",
) -> SeverityFit:
    """Fit a spliced law: a body up to a threshold, a heavy tail above, and the share above.

    Use it where no single law follows both the many small and the few large losses. The threshold is
    the reader's choice; look at the fit for several. The density may jump at the threshold.

    Args:
        losses: amounts above 0, shape (n,), as for `fit_severity`.
        body: family below the threshold: "exponential", "lognormal", "lomax", "gamma", "weibull",
            "inverse-gaussian", "burr" or "log-logistic"; or "empirical", the losses up to the threshold
            themselves.
        threshold: the splice point; losses above it belong to the tail, one equal to it to the body.
        truncation: reporting threshold, one number or one per loss; None where all were recorded.
        censored: one boolean per loss, True where the amount stopped at a policy limit.
        tail: "generalized-pareto" or "pareto", starting at the threshold.

    Returns:
        A fit whose parameters are named "body.mu", "tail.shape", "tail_probability" and so on.

    Raises:
        InputError: input that cannot be used, or an unknown body or tail.
        FitError: too few losses on a side of the threshold, or no maximum for a part.
    """
    _require_choice(body, (*BODIES, EMPIRICAL), "body")
    _require_choice(tail, TAILS, "tail")
    require_positive(threshold, "threshold")
    amounts, reported, marks = checked_losses(losses, truncation, censored)
    tail_fit = _fit_tail(amounts, reported, marks, threshold, tail)
    if body == EMPIRICAL:
        return _with_empirical_body(amounts, reported, marks, threshold, tail_fit)
    law, share, made = body_and_share(amounts, reported, marks, threshold, body)
    likelihood, maximum, sample = made.objective.likelihood, made.maximum, made.objective.below
    joint, parts = made.covariance, len(likelihood.ranges)
    model = Spliced(
        body=law,
        tail=tail_fit.model,
        threshold=float(threshold),
        tail_probability=share,
    )
    below_scale = sample.count * float(np.log(sample.scale))
    return SeverityFit(
        family=f"spliced {body} and {tail}",
        model=model,
        parameters=model.parameters,
        covariance=_joined(joint, tail_fit.covariance, parts),
        fixed=(*(f"tail.{name}" for name in tail_fit.fixed), "threshold"),
        log_likelihood=maximum.value - below_scale + tail_fit.log_likelihood,
        estimated=parts + 1 + tail_fit.estimated,
        observations=amounts.size,
        gradient_norm=float(np.hypot(maximum.distance, tail_fit.gradient_norm)),
        ranges=_ranges(likelihood, tail_fit),
        censored=int(marks.sum()),
        truncation=(float(reported.min()), float(reported.max())) if reported.any() else None,
        solution=tail_fit.solution,
        tail_prefix="tail.",
        notes=_notes(model, tail_fit, threshold),
    )


def _with_empirical_body(
    amounts: FloatArray, reported: FloatArray, marks: BoolArray, threshold: float, tail_fit: SeverityFit
) -> SeverityFit:
    """A splice whose body is a table. Its likelihood is that of the tail and of the share above only: it must
    not be compared with that of a law for the body."""
    table, share, variance = empirical_body(amounts, reported, marks, threshold)
    model = Spliced(body=table, tail=tail_fit.model, threshold=float(threshold), tail_probability=share)
    above = int((amounts > threshold).sum())
    binomial = special.xlogy(above, share) + special.xlog1py(amounts.size - above, -share)
    return SeverityFit(
        family=f"spliced {EMPIRICAL} and {tail_fit.family}",
        model=model,
        parameters=model.parameters,
        covariance=_joined(np.array([[variance]]), tail_fit.covariance, 0),
        fixed=(*(f"tail.{name}" for name in tail_fit.fixed), "threshold"),
        log_likelihood=tail_fit.log_likelihood + float(binomial),
        estimated=1 + tail_fit.estimated,
        observations=amounts.size,
        gradient_norm=tail_fit.gradient_norm,
        ranges={f"tail.{name}": kind for name, kind in tail_fit.ranges.items()}
        | {"tail_probability": "probability"},
        censored=int(marks.sum()),
        truncation=(float(reported.min()), float(reported.max())) if reported.any() else None,
        solution=tail_fit.solution,
        tail_prefix="tail.",
        notes=_notes(model, tail_fit, threshold),
    )


@dataclass(frozen=True, eq=False)
class _FittedBody:
    objective: _Body
    maximum: Maximum
    covariance: FloatArray  # of the body's parameters and the tail probability


def body_and_share(
    amounts: FloatArray,
    reported: FloatArray,
    marks: BoolArray,
    threshold: float,
    body: str,
    most: int = MOST_STARTS,
) -> tuple[SizeLaw, float, _FittedBody]:
    """Fit the body and the tail probability: the law, the probability, and how they were found.

    Args:
        amounts, reported, marks: checked losses, their thresholds and censoring marks.
        threshold: the splice point.
        body: family of the body.
        most: how many starts climb.

    Raises:
        FitError: no loss below the threshold, or no maximum.
    """
    objective, sample = _body_objective(amounts, reported, marks, threshold, body)
    likelihood = objective.likelihood
    starts = [np.append(start, _start_odds(amounts, threshold)) for start in likelihood.starts(sample)]
    maximum = climb(objective, starts, amounts.size, f"{body} body", likelihood, most)
    *coordinates, odds = variables(maximum.point)
    inner = likelihood.inner(tuple(coordinates))
    share = special.expit(odds.value)
    free = (*likelihood.natural(inner, sample.scale), lift(odds, share, share * (1 - share), np.zeros(1)))
    values, joint = natural_parameters(free, maximum)
    law = likelihood.law(**dict(zip(likelihood.ranges, values[:-1], strict=True)))
    return law, values[-1], _FittedBody(objective, maximum, joint)


def losses_above(
    amounts: FloatArray, reported: FloatArray, marks: BoolArray, threshold: float
) -> tuple[BoolArray, FloatArray]:
    """Which losses belong to the tail, and the threshold from which each of them is seen there.

    Raises:
        FitError: too few uncensored ones for a tail.
    """
    # A loss censored at the threshold itself says only that it lies above, which the share tells.
    above = amounts > threshold
    exact = int((above & ~marks).sum())
    if exact < _FEWEST_IN_TAIL:
        raise FitError(
            f"{exact} uncensored losses above the threshold are too few for a tail",
            value=float(threshold),
            remedy=f"Lower the threshold until {_FEWEST_IN_TAIL}, better {FEW}, lie above it.",
        )
    return above, np.maximum(reported[above], threshold)


def _fit_tail(
    amounts: FloatArray, reported: FloatArray, marks: BoolArray, threshold: float, tail: str
) -> SeverityFit:
    above, entered = losses_above(amounts, reported, marks, threshold)
    name = "minimum" if tail == "pareto" else "threshold"
    return fit_severity(
        amounts[above],
        tail,
        entered,
        marks[above],
        fixed={name: float(threshold)},
    )


def _body_objective(
    amounts: FloatArray, reported: FloatArray, marks: BoolArray, threshold: float, body: str
) -> tuple[_Body, Sample]:
    # A loss censored at u or beyond counts as above; P(X > u) is what it contributes to the share.
    lower = np.where(marks, amounts < threshold, amounts <= threshold)
    if not (lower & ~marks).any():
        raise FitError(
            "no uncensored loss lies below the threshold, so the body cannot be fitted",
            value=float(threshold),
            remedy='Raise the threshold, or fit "generalized-pareto" alone.',
        )
    below = sample_of(amounts[lower], np.zeros(int(lower.sum())), marks[lower])
    early = reported < threshold
    tied = reported[early & (reported > 0)] / below.scale
    likelihood, _ = likelihood_of(body, below, {})
    require_support(below, f"{body} body", len(likelihood.ranges))
    return (
        _Body(
            likelihood=likelihood,
            below=below,
            reported=Weighted.of(tied),
            above=int((~lower & early).sum()),
            threshold=threshold / below.scale,
        ),
        below,
    )


def _ranges(likelihood: SizeLikelihood, tail_fit: SeverityFit) -> dict[str, Range]:
    ranges: dict[str, Range] = {f"body.{name}": kind for name, kind in likelihood.ranges.items()}
    ranges |= {f"tail.{name}": kind for name, kind in tail_fit.ranges.items()}
    return ranges | {"tail_probability": "probability"}


def _start_odds(amounts: FloatArray, threshold: float) -> float:
    share = float(np.mean(amounts > threshold))
    return float(special.logit(min(max(share, 1e-6), 1 - 1e-6)))


def _joined(joint: FloatArray, tail: FloatArray, parts: int) -> FloatArray:
    """Covariance in the order body, tail, threshold, tail probability; the tail stands apart."""
    size = len(joint) + len(tail) + 1
    covariance = np.zeros((size, size))
    body = [*range(parts), size - 1]
    covariance[np.ix_(body, body)] = joint
    covariance[parts : size - 2, parts : size - 2] = tail
    return covariance


def _notes(model: Spliced, tail_fit: SeverityFit, threshold: float) -> tuple[Note, ...]:
    span = index_interval(tail_fit.solution, tail_fit.parameters, tail_fit.covariance)
    notes = tail_notes(model, tail_fit.family, tail_fit.parameters, span)
    exact = tail_fit.observations - tail_fit.censored
    if exact < FEW:
        text = (
            f"Only {exact} uncensored losses lie above the threshold {threshold:g}: the tail is uncertain; "
            "compare the fit with neighbouring thresholds."
        )
        notes.append(Note("few-losses", text))
    return tuple(notes)


def _require_choice(value: str, allowed: tuple[str, ...], what: str) -> None:
    if value not in allowed:
        raise InputError(
            f"unknown {what} of a spliced law", value=value, remedy=f"Choose one of {', '.join(allowed)}."
        )
