"""Fit a splice whose density has no jump at the threshold.

With h the hazard rate of the tail at the threshold u, the density is continuous where
(1 - q) f_b(u) / F_b(u) = q h: the share q above u is no parameter of its own but
q / (1 - q) = f_b(u) / (F_b(u) h), so body and tail are fitted in one likelihood of their parameters (Scollnik
2007, Scandinavian Actuarial Journal 2007(1), for a lognormal body and a Pareto tail). The error of q follows
from theirs by the delta method.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import special

from lossagg.arrays import BoolArray, FloatArray
from lossagg.errors import FitError
from lossagg.families import Spliced
from lossagg.fitting.jet_functions import log_one_minus_exp
from lossagg.fitting.jets import Jet, lift, variables
from lossagg.fitting.likelihood import Range, SizeLikelihood, log_likelihood
from lossagg.fitting.maximise import Maximum
from lossagg.fitting.results import SeverityFit
from lossagg.fitting.sample import Sample, sample_of
from lossagg.fitting.severity import MOST_STARTS, climb, natural_parameters
from lossagg.fitting.solution import TiedSolution
from lossagg.fitting.splice_parts import Body, body_and_share, body_objective, fit_tail


@dataclass(frozen=True, eq=False)
class _Joint:
    """Coordinates: those of the body, then those of the tail.

    Attributes:
        body: the likelihood of body and share.
        tail: the likelihood of the tail.
        above: the losses above the threshold.
        ends: the threshold as a sample of one loss, in the units of the body and of the tail.
    """

    body: Body
    tail: SizeLikelihood
    above: Sample
    ends: tuple[Sample, Sample]

    @property
    def parts(self) -> int:
        """Coordinates of the body."""
        return len(self.body.likelihood.ranges)

    def odds(self, point: tuple[Jet, ...]) -> Jet:
        """log of q / (1 - q)."""
        own, other = self.body.likelihood, self.tail
        inner, beyond = own.inner(point[: self.parts]), other.inner(point[self.parts :])
        low, high = self.ends
        log_whole = log_one_minus_exp(own.log_survival(inner, low.exact))
        rates = own.log_density(inner, low) - log_whole - other.log_density(beyond, high)
        return rates + float(np.log(high.scale) - np.log(low.scale))

    def __call__(self, point: tuple[Jet, ...]) -> Jet:
        total = self.body((*point[: self.parts], self.odds(point)))
        return total + log_likelihood(self.tail, self.above, point[self.parts :])


@dataclass(frozen=True, eq=False)
class ContinuousSplice:
    """A fitted continuous splice.

    Attributes:
        model: the law.
        covariance: of the body's and the tail's free parameters and the share above, in that order.
        maximum: where the climb ended.
        solution: for further questions about the tail.
        ranges: of the body's parameters.
        log_likelihood: in money.
        alone: the fit of the tail without the body.
        gain: what the log-likelihood gains where the density may jump; NaN where that has no fit.
    """

    model: Spliced
    covariance: FloatArray
    maximum: Maximum
    solution: TiedSolution
    ranges: dict[str, Range]
    log_likelihood: float
    alone: SeverityFit
    gain: float


def fit_continuous(
    amounts: FloatArray,
    reported: FloatArray,
    marks: BoolArray,
    threshold: float,
    body: str,
    tail: str,
    most: int = MOST_STARTS,
) -> ContinuousSplice:
    """Fit body and tail together with the density continuous at the threshold.

    Args:
        amounts, reported, marks: checked losses, their thresholds and censoring marks.
        threshold: the splice point.
        body, tail: their families.
        most: how many starts climb.

    Raises:
        FitError: too few losses on a side of the threshold, or no maximum.
    """
    alone = fit_tail(amounts, reported, marks, threshold, tail)
    part, below = body_objective(amounts, reported, marks, threshold, body)
    end, other = alone.solution, alone.solution.likelihood
    joint = _Joint(
        body=part,
        tail=other,
        above=end.sample,
        ends=(_lone(threshold, below.scale), _lone(threshold, end.sample.scale)),
    )
    starts = part.likelihood.starts(below)
    free = -np.inf
    try:
        _, _, found = body_and_share(amounts, reported, marks, threshold, body, most=1)
    except FitError:  # a body without a maximum of its own may have one beside the tail
        pass
    else:
        starts = [found.maximum.point[:-1], *starts]
        free = found.maximum.value + end.maximum.value
    maximum = climb(
        joint,
        [np.concatenate([start, end.maximum.point]) for start in starts],
        amounts.size,
        f"continuous {body} and {tail}",
        part.likelihood,
        most,
    )
    point = variables(maximum.point)
    own = part.likelihood.natural(part.likelihood.inner(point[: joint.parts]), below.scale)
    far = other.natural(other.inner(point[joint.parts :]), end.sample.scale)
    odds = joint.odds(point)
    share = special.expit(odds.value)
    bend = share * (1 - share)
    q = lift(odds, share, bend, bend * (1 - 2 * share))
    values, covariance = natural_parameters((*own, *far, q), maximum)
    count = joint.parts
    model = Spliced(
        body=part.likelihood.law(**dict(zip(part.likelihood.ranges, values[:count], strict=True))),
        tail=other.law(
            **dict(zip(other.ranges, values[count:-1], strict=True)), **other.fixed(end.sample.scale)
        ),
        threshold=float(threshold),
        tail_probability=values[-1],
    )
    units = below.count * np.log(below.scale) + end.sample.count * np.log(end.sample.scale)
    return ContinuousSplice(
        model=model,
        covariance=covariance,
        maximum=maximum,
        solution=TiedSolution(other, end.sample, maximum, joint=joint, first=count),
        ranges=part.likelihood.ranges,
        log_likelihood=maximum.value - float(units),
        alone=alone,
        gain=free - maximum.value if np.isfinite(free) else np.nan,
    )


def _lone(threshold: float, scale: float) -> Sample:
    return sample_of(np.array([threshold]), np.zeros(1), np.zeros(1, dtype=np.bool_), scale)
