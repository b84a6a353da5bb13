"""The parts of a splice: the body with the share of losses above it, and the tail.

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

from lossagg.arrays import BoolArray, FloatArray
from lossagg.errors import FitError
from lossagg.families.base import SizeLaw
from lossagg.fitting.jet_functions import log_one_minus_exp, log_shares, log_sum_exp
from lossagg.fitting.jets import Jet, lift, variables
from lossagg.fitting.likelihood import SizeLikelihood
from lossagg.fitting.maximise import Maximum
from lossagg.fitting.notes import FEW
from lossagg.fitting.results import SeverityFit
from lossagg.fitting.sample import Sample, Weighted, sample_of
from lossagg.fitting.severity import (
    MOST_STARTS,
    climb,
    fit_severity,
    likelihood_of,
    natural_parameters,
    require_support,
)

_FEWEST_IN_TAIL = 5  # uncensored losses; no published minimum, practice speaks of 5, 10 and 30


@dataclass(frozen=True, eq=False)
class Body:
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
        """The log-likelihood at the coordinates of the body and the log-odds of the share."""
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


@dataclass(frozen=True, eq=False)
class FittedBody:
    """A body with its share: the joint likelihood, where the climb ended, and their covariance."""

    objective: Body
    maximum: Maximum
    covariance: FloatArray  # of the body's parameters and the tail probability


def body_and_share(
    amounts: FloatArray,
    reported: FloatArray,
    marks: BoolArray,
    threshold: float,
    body: str,
    most: int = MOST_STARTS,
) -> tuple[SizeLaw, float, FittedBody]:
    """Fit the body and the tail probability: the law, the probability, and how they were found.

    Args:
        amounts, reported, marks: checked losses, their thresholds and censoring marks.
        threshold: the splice point.
        body: family of the body.
        most: how many starts climb.

    Raises:
        FitError: no loss below the threshold, or no maximum.
    """
    objective, sample = body_objective(amounts, reported, marks, threshold, body)
    likelihood = objective.likelihood
    starts = [np.append(start, start_odds(amounts, threshold)) for start in likelihood.starts(sample)]
    maximum = climb(objective, starts, amounts.size, f"{body} body", likelihood, most)
    *coordinates, odds = variables(maximum.point)
    inner = likelihood.inner(tuple(coordinates))
    share = special.expit(odds.value)
    free = (*likelihood.natural(inner, sample.scale), lift(odds, share, share * (1 - share), np.zeros(1)))
    values, joint = natural_parameters(free, maximum)
    law = likelihood.law(**dict(zip(likelihood.ranges, values[:-1], strict=True)))
    return law, values[-1], FittedBody(objective, maximum, joint)


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


def fit_tail(
    amounts: FloatArray, reported: FloatArray, marks: BoolArray, threshold: float, tail: str
) -> SeverityFit:
    """The tail law from the losses above the threshold alone."""
    above, entered = losses_above(amounts, reported, marks, threshold)
    name = "minimum" if tail == "pareto" else "threshold"
    return fit_severity(
        amounts[above],
        tail,
        entered,
        marks[above],
        fixed={name: float(threshold)},
    )


def body_objective(
    amounts: FloatArray, reported: FloatArray, marks: BoolArray, threshold: float, body: str
) -> tuple[Body, Sample]:
    """The likelihood of body and share, and the losses up to the threshold."""
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
        Body(
            likelihood=likelihood,
            below=below,
            reported=Weighted.of(tied),
            above=int((~lower & early).sum()),
            threshold=threshold / below.scale,
        ),
        below,
    )


def start_odds(amounts: FloatArray, threshold: float) -> float:
    """Log-odds of the share of losses above the threshold as counted."""
    share = float(np.mean(amounts > threshold))
    return float(special.logit(min(max(share, 1e-6), 1 - 1e-6)))
