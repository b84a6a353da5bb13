"""Fit a body below a threshold and a tail above it, with the share of losses above."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from scipy import special

from lossagg.arrays import BoolArray, FloatArray, Floats, require_positive
from lossagg.errors import InputError
from lossagg.families import Spliced
from lossagg.fitting.continuous import fit_continuous
from lossagg.fitting.empirical import EMPIRICAL, empirical_body
from lossagg.fitting.likelihood import Range
from lossagg.fitting.notes import FEW, Note, tail_notes
from lossagg.fitting.results import SeverityFit
from lossagg.fitting.sample import checked_losses
from lossagg.fitting.severity import index_interval
from lossagg.fitting.splice_parts import body_and_share, fit_tail

BODIES = ("exponential", "lognormal", "lomax", "gamma", "weibull", "inverse-gaussian", "burr", "log-logistic")
TAILS = ("generalized-pareto", "pareto")


def fit_spliced(
    losses: Floats,
    body: str,
    threshold: float,
    truncation: Floats | None = None,
    censored: object = None,
    tail: str = "generalized-pareto",
    *,
    continuous: bool = False,
) -> SeverityFit:
    """Fit a spliced law: a body up to a threshold, a heavy tail above, and the share above.

    Use it where no single law follows both the many small and the few large losses. The threshold is
    the reader's choice; look at the fit for several. The density may jump at the threshold unless asked not
    to: then the share above follows from body and tail, which are fitted together, and one parameter less
    is estimated.

    Args:
        losses: amounts above 0, shape (n,), as for `fit_severity`.
        body: family below the threshold: "exponential", "lognormal", "lomax", "gamma", "weibull",
            "inverse-gaussian", "burr" or "log-logistic"; or "empirical", the losses up to the threshold
            themselves.
        threshold: the splice point; losses above it belong to the tail, one equal to it to the body.
        truncation: reporting threshold, one number or one per loss; None where all were recorded.
        censored: one boolean per loss, True where the amount stopped at a policy limit.
        tail: "generalized-pareto" or "pareto", starting at the threshold.
        continuous: whether the density must not jump at the threshold; not for an "empirical" body.

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
    if continuous:
        return _continuous(amounts, reported, marks, threshold, body, tail)
    tail_fit = fit_tail(amounts, reported, marks, threshold, tail)
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
        ranges=_ranges(likelihood.ranges, tail_fit),
        censored=int(marks.sum()),
        truncation=(float(reported.min()), float(reported.max())) if reported.any() else None,
        solution=tail_fit.solution,
        tail_prefix="tail.",
        notes=_notes(model, tail_fit, threshold),
    )


def _continuous(
    amounts: FloatArray, reported: FloatArray, marks: BoolArray, threshold: float, body: str, tail: str
) -> SeverityFit:
    if body == EMPIRICAL:
        raise InputError(
            "an empirical body has no density to be continuous with",
            value=body,
            remedy="Leave out continuous, or name a law for the body.",
        )
    made = fit_continuous(amounts, reported, marks, threshold, body, tail)
    parts, alone = len(made.model.body.parameters), made.alone
    free = len(made.solution.likelihood.ranges)
    size = len(made.model.parameters)
    places = [*range(parts + free), size - 1]
    covariance = np.zeros((size, size))
    covariance[np.ix_(places, places)] = made.covariance
    tail_size = len(alone.parameters)
    own = covariance[parts : parts + tail_size, parts : parts + tail_size]
    notes = _notes(
        made.model, alone, threshold, index_interval(made.solution, made.model.tail.parameters, own)
    )
    chance = float(special.chdtrc(1, 2 * max(made.gain, 0.0)))
    if chance < 0.05:
        text = (
            f"Where the density may jump at the threshold the log-likelihood is higher by {made.gain:.4g} "
            f"(p-value {chance:.2g}): the losses speak against continuity there."
        )
        notes = (*notes, Note("density-jump", text))
    return SeverityFit(
        family=f"spliced {body} and {tail}, continuous",
        model=made.model,
        parameters=made.model.parameters,
        covariance=covariance,
        fixed=(*(f"tail.{name}" for name in alone.fixed), "threshold"),
        log_likelihood=made.log_likelihood,
        estimated=parts + free,
        observations=amounts.size,
        gradient_norm=made.maximum.distance,
        ranges=_ranges(made.ranges, alone),
        censored=int(marks.sum()),
        truncation=(float(reported.min()), float(reported.max())) if reported.any() else None,
        solution=made.solution,
        tail_prefix="tail.",
        notes=notes,
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


def _ranges(body: Mapping[str, Range], tail_fit: SeverityFit) -> dict[str, Range]:
    ranges: dict[str, Range] = {f"body.{name}": kind for name, kind in body.items()}
    ranges |= {f"tail.{name}": kind for name, kind in tail_fit.ranges.items()}
    return ranges | {"tail_probability": "probability"}


def _joined(joint: FloatArray, tail: FloatArray, parts: int) -> FloatArray:
    """Covariance in the order body, tail, threshold, tail probability; the tail stands apart."""
    size = len(joint) + len(tail) + 1
    covariance = np.zeros((size, size))
    body = [*range(parts), size - 1]
    covariance[np.ix_(body, body)] = joint
    covariance[parts : size - 2, parts : size - 2] = tail
    return covariance


def _notes(
    model: Spliced, tail_fit: SeverityFit, threshold: float, span: tuple[float, float] | None = None
) -> tuple[Note, ...]:
    span = span or index_interval(tail_fit.solution, tail_fit.parameters, tail_fit.covariance)
    notes = tail_notes(model, tail_fit.family, model.tail.parameters, span)
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
