"""Fit the size of one loss by maximum likelihood, with truncation and censoring taken as they are."""

from __future__ import annotations

from collections.abc import Callable, Mapping

import numpy as np

from lossagg.arrays import FloatArray, Floats, require_positive
from lossagg.errors import FitError, InputError
from lossagg.fitting.classic_laws import (
    ExponentialLikelihood,
    GammaLikelihood,
    GammaOfShapeLikelihood,
    InverseGaussianLikelihood,
    ParetoLikelihood,
)
from lossagg.fitting.excess_laws import (
    BurrLikelihood,
    GeneralizedParetoLikelihood,
    LomaxLikelihood,
    WeibullLikelihood,
)
from lossagg.fitting.jets import Jet, variables
from lossagg.fitting.likelihood import SizeLikelihood, log_likelihood
from lossagg.fitting.log_laws import LogGammaLikelihood, LogLogisticLikelihood
from lossagg.fitting.lognormal import LognormalLikelihood
from lossagg.fitting.maximise import Maximum, Objective, evaluate, maximise
from lossagg.fitting.mixtures import MIXTURES, mixture_likelihood
from lossagg.fitting.notes import severity_notes, tail_index_interval
from lossagg.fitting.results import SeverityFit
from lossagg.fitting.sample import Sample, checked_losses, checked_weights, sample_of
from lossagg.fitting.solution import Solution

FAMILIES = (
    "exponential",
    "lognormal",
    "pareto",
    "lomax",
    "generalized-pareto",
    "gamma",
    "weibull",
    "inverse-gaussian",
    "burr",
    "log-logistic",
    "log-gamma",
    *MIXTURES,
)
_ORIGINS = {"pareto": "minimum", "generalized-pareto": "threshold", "log-gamma": "minimum"}
_HELD = {**_ORIGINS, "gamma": "shape"}
MOST_STARTS = 4
_EQUAL = 1e-9  # relative: amounts that differ by less do so by rounding
_SEVERAL_STARTS = 20_000  # losses above which only the best start climbs, unless it fails


def fit_severity(
    losses: Floats,
    family: str,
    truncation: Floats | None = None,
    censored: object = None,
    *,
    fixed: Mapping[str, float] | None = None,
    weights: Floats | None = None,
) -> SeverityFit:
    """Fit a size law to losses by maximum likelihood.

    Use it on ground-up amounts in the money of one date. The law it hands back is ground-up too:
    losses below the reporting threshold, which nobody recorded, are part of it. Standard errors come
    from the observed information at the maximum. A fit is returned only when its maximum is
    certified: information positive definite and gradient zero to rounding.

    Args:
        losses: amounts above 0, shape (n,); for a censored loss, the amount at which it stopped.
        family: "exponential", "lognormal", "pareto", "lomax", "generalized-pareto", "gamma",
            "weibull", "inverse-gaussian", "burr", "log-logistic" or "log-gamma"; or a mixture of two laws,
            "exponential-mixture", "lognormal-mixture", "gamma-mixture", "weibull-mixture" or
            "gamma-lognormal-mixture".
        truncation: the reporting threshold, one number or one per loss; None or 0 where every loss
            was recorded. A loss equal to its threshold counts as recorded.
        censored: one boolean per loss, True where the amount stopped at a policy limit.
        fixed: {"minimum": m} for "pareto" or {"threshold": u} for "generalized-pareto". Without it
            they are the smallest reporting threshold, or the smallest loss where there is none. For
            "log-gamma" {"minimum": m} is needed where a loss has no threshold, and every loss lies above
            it. For "gamma" {"shape": a} holds the shape; without it the shape is estimated.
        weights: how many losses each amount stands for, above 0; None where each stands for itself. A
            weight of k gives the fit of a record in which the loss stands k times, standard errors
            included: use it for tables of equal amounts. It is not a degree of trust.

    Raises:
        InputError: losses, thresholds or marks that cannot be used, or an unknown family.
        FitError: the likelihood has no maximum the data can support; `tried` tells what was tried.

    Source: Klugman, Panjer & Willmot, Loss Models, chapters on maximum likelihood with truncated and
    censored data.
    """
    amounts, thresholds, marks = checked_losses(losses, truncation, censored)
    each = checked_weights(weights, amounts.size)
    sample = sample_of(amounts, thresholds, marks, weights=each)
    likelihood, borrowed = likelihood_of(family, sample, fixed or {})
    held = likelihood.fixed(sample.scale)
    require_support(sample, family, len(likelihood.ranges))
    origin = held.get(_ORIGINS.get(family, ""), 0.0)
    _require_excess(amounts, np.maximum(thresholds, origin))
    highest = climb(
        lambda point: log_likelihood(likelihood, sample, point),
        _starts(likelihood, sample, family),
        sample.observations,
        family,
        likelihood,
    )
    maximum = likelihood.ordered(highest)
    inner = likelihood.inner(variables(maximum.point))
    parameters, covariance = natural_parameters(likelihood.natural(inner, sample.scale), maximum)
    names = [*likelihood.ranges, *held]
    complete = np.zeros((len(names), len(names)))
    complete[: len(covariance), : len(covariance)] = covariance
    values = dict(zip(names, [*parameters, *held.values()], strict=True))
    model = likelihood.model(values)
    solution = Solution(likelihood, sample, maximum)
    span = index_interval(solution, values, complete)
    return SeverityFit(
        family=family,
        model=model,
        parameters=values,
        covariance=complete,
        fixed=tuple(held),
        log_likelihood=maximum.value - sample.count * float(np.log(sample.scale)),
        estimated=len(likelihood.ranges) + borrowed,
        observations=sample.observations,
        gradient_norm=maximum.distance,
        ranges=likelihood.ranges,
        censored=sample.censored,
        truncation=threshold_range(sample),
        solution=solution,
        notes=severity_notes(model, sample, values, complete, _ORIGINS[family] if borrowed else "", span),
    )


def index_interval(
    solution: Solution, values: Mapping[str, float], covariance: FloatArray
) -> tuple[float, float]:
    """95 % interval of the tail index: from the profile likelihood, and from the standard errors where there
    are so many losses that the two agree."""
    if solution.sample.observations > _SEVERAL_STARTS:
        return tail_index_interval(solution.likelihood.law.family, values, covariance)
    shape = solution.tail_shape(0.95)
    if shape is None:
        return np.inf, np.inf
    _, low, high = shape
    return (1 / high if high > 0 else np.inf), (1 / low if low > 0 else np.inf)


def _starts(likelihood: SizeLikelihood, sample: Sample, family: str) -> list[FloatArray]:
    """Starting points; for very many losses the maximum of the coarse sample, a hair from their own."""
    starts = likelihood.starts(sample)
    if sample.observations < _SEVERAL_STARTS or len(starts) == 1:
        return starts
    few = sample.coarse()
    try:
        found = climb(
            lambda point: log_likelihood(likelihood, few, point),
            likelihood.starts(few),
            few.observations,
            family,
            likelihood,
        )
    except FitError:  # say so of all the losses, not of a few
        return starts
    return [found.point]


def likelihood_of(family: str, sample: Sample, fixed: Mapping[str, float]) -> tuple[SizeLikelihood, bool]:
    """The likelihood of a family, and whether a fixed parameter was read off the smallest loss."""
    unknown = set(fixed) - {_HELD.get(family, "")}
    if unknown:
        allowed = f"only {_HELD[family]!r}" if family in _HELD else "none of its parameters"
        raise InputError(
            f"the {family} fit holds {allowed} fixed", value=sorted(unknown), remedy="Remove the others."
        )
    if family in _ORIGINS:
        return _with_origin(family, sample, fixed)
    if family == "gamma" and fixed:
        return GammaOfShapeLikelihood(require_positive(fixed["shape"], "shape")), False
    if family in MIXTURES:
        return mixture_likelihood(family, sample), False
    makers: dict[str, Callable[[], SizeLikelihood]] = {
        "exponential": ExponentialLikelihood,
        "lognormal": lambda: LognormalLikelihood.about(sample),
        "lomax": LomaxLikelihood,
        "gamma": GammaLikelihood,
        "weibull": lambda: WeibullLikelihood.about(sample),
        "inverse-gaussian": InverseGaussianLikelihood,
        "burr": BurrLikelihood,
        "log-logistic": LogLogisticLikelihood,
    }
    if family not in makers:
        raise InputError(
            "unknown severity family", value=family, remedy=f"Choose one of {', '.join(FAMILIES)}."
        )
    return makers[family](), False


def _with_origin(family: str, sample: Sample, fixed: Mapping[str, float]) -> tuple[SizeLikelihood, bool]:
    name = _ORIGINS[family]
    borrowed = not fixed and sample.floor == 0
    given = float(fixed[name]) / sample.scale if fixed else sample.floor
    origin = sample.smallest if borrowed else given
    low_enough = origin >= 0 if family == "generalized-pareto" else origin > 0
    if not low_enough or not origin <= sample.smallest:
        bound = "0 or above" if family == "generalized-pareto" else "above 0"
        raise InputError(
            f"the {name} of the {family} fit must be {bound}, and no loss may lie below it",
            value=origin * sample.scale,
            remedy=f"Pass only losses above the {name}; the smallest is {sample.smallest * sample.scale:g}.",
        )
    if family == "log-gamma":
        if not origin < sample.exact[0]:
            raise FitError(
                "the log-gamma law needs a minimum below every uncensored loss: at the minimum its density "
                "is 0 or infinite",
                value=origin * sample.scale,
                remedy='Give fixed={"minimum": m} below the smallest loss, or fit another family.',
            )
        return LogGammaLikelihood(origin), False
    maker = ParetoLikelihood if family == "pareto" else GeneralizedParetoLikelihood
    return maker(origin), borrowed


def require_support(sample: Sample, family: str, parameters: int) -> None:
    """Refuse losses too few or too equal for the number of parameters.

    Raises:
        FitError: fewer distinct uncensored losses than parameters, or all losses equal.
    """
    distinct = len(np.unique(sample.exact))
    if distinct < parameters:
        raise FitError(
            f"the {family} law has {parameters} free parameters and the uncensored losses have "
            f"{distinct} distinct amount{'s' if distinct != 1 else ''}",
            value=f"{sample.count} uncensored losses",
            remedy="Use a law with fewer parameters, pool with similar lines, or give the law.",
        )
    if parameters > 1 and sample.exact[-1] - sample.exact[0] <= _EQUAL * sample.exact[0]:
        raise FitError(
            "the uncensored losses are equal to within one part in a thousand million, so no shape shows",
            value=float(sample.exact[0] * sample.scale),
            remedy="Check for a limit or a placeholder in the records; a fixed amount is a SizeTable.",
        )
    if distinct == 1 and sample.observations > 1 and not sample.censored:
        raise FitError(
            "all losses are equal",
            value=float(sample.exact[0] * sample.scale),
            remedy="Check for a limit or a placeholder in the records; a fixed amount is a SizeTable.",
        )


def _require_excess(amounts: FloatArray, floors: FloatArray) -> None:
    if not (amounts > floors).any():
        raise FitError(
            "every loss equals its reporting threshold or the smallest loss the law allows",
            value=float(amounts[0]),
            remedy="The size above the threshold does not show: check the amounts and the threshold.",
        )


def climb(
    objective: Objective,
    starts: list[np.ndarray],
    observations: float,
    family: str,
    likelihood: SizeLikelihood,
    most: int = MOST_STARTS,
) -> Maximum:
    """The highest certified maximum reached from the best `most` starts.

    Raises:
        FitError: no start led to one; `tried` names each start's end.
    """
    count = len(likelihood.ranges)  # a splice climbs in one coordinate more than its body has

    def inner(point: np.ndarray) -> tuple[Jet, ...]:
        return likelihood.inner(variables(point)[:count])

    ranked = starts
    if len(starts) > 1:
        ranked = sorted(starts, key=lambda start: -evaluate(objective, start))[:most]
    certified: list[Maximum] = []
    tried: list[str] = []
    for start in ranked:
        maximum = maximise(objective, start, lambda point: likelihood.runaway(inner(point)))
        failure = likelihood.objection(inner(maximum.point)) or maximum.failure
        tried.append(
            f"from {np.round(start, 3).tolist()}: {failure or f'log-likelihood {maximum.value:.6f}'}"
        )
        if not failure:
            certified.append(maximum)
            if observations > _SEVERAL_STARTS:
                break
    highest = max(certified, key=lambda maximum: maximum.value, default=None)
    if highest is None:
        reason = tried[0].split(": ", 1)[1]
        raise FitError(
            f"the {family} likelihood has no maximum on these losses: {reason}",
            value=f"{observations} losses",
            remedy=f"Fit {likelihood.nearest} instead, or use more losses or a lower threshold.",
            tried=tuple(tried),
        )
    return highest


def natural_parameters(parameters: tuple[Jet, ...], maximum: Maximum) -> tuple[list[float], np.ndarray]:
    """Estimates with their covariance by the delta method, from jets at the maximum."""
    slopes = np.stack([parameter.gradient[:, 0] for parameter in parameters])
    return [float(parameter.value[0]) for parameter in parameters], slopes @ maximum.covariance @ slopes.T


def threshold_range(sample: Sample) -> tuple[float, float] | None:
    """Smallest and largest reporting threshold in money; None where there is none."""
    if not len(sample.thresholds.points):
        return None
    return sample.floor * sample.scale, float(sample.thresholds.points[-1]) * sample.scale
