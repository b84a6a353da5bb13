"""Estimates by moments and by percentiles, to hold beside those of maximum likelihood.

They are older and simpler, and use less of what the losses say: a reader who sees the three far apart knows
that the law does not fit, or that one loss decides. Nothing else in the package uses them (Klugman, Panjer &
Willmot, Loss Models, chapter on frequentist estimation: method of moments and percentile matching with the
smoothed empirical percentile).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy import optimize, special

from lossagg.arrays import FloatArray, Floats, require_probability
from lossagg.errors import InputError
from lossagg.families import Gamma, GeneralizedPareto, InverseGaussian, Lomax
from lossagg.families.base import SizeLaw
from lossagg.fitting.results import SeverityFit
from lossagg.fitting.sample import checked_losses

if TYPE_CHECKING:
    import pandas as pd

_Estimates = dict[str, float]
_NARROW, _WIDE = 0.02, 1e3  # shapes between which the ratio of percentiles is searched


@dataclass(frozen=True, eq=False)
class CrossReference:
    """Estimates of the same parameters by three methods.

    Attributes:
        likelihood: by maximum likelihood, those held fixed left out.
        moments: by as many sample moments; empty where they have no solution.
        percentiles: by as many sample percentiles; empty where they have no solution.
        reasons: method to why it gives nothing.
    """

    likelihood: _Estimates
    moments: _Estimates
    percentiles: _Estimates
    reasons: dict[str, str]

    def to_frame(self) -> pd.DataFrame:
        """One row per parameter, one column per method; NaN where a method gives nothing."""
        import pandas as pd

        methods = {"likelihood": self.likelihood, "moments": self.moments, "percentiles": self.percentiles}
        rows = [
            {"parameter": name} | {method: values.get(name, np.nan) for method, values in methods.items()}
            for name in self.likelihood
        ]
        return pd.DataFrame(rows).set_index("parameter")


def cross_reference(
    losses: Floats,
    fit: SeverityFit,
    truncation: Floats | None = None,
    censored: object = None,
    *,
    levels: tuple[float, float] = (0.25, 0.75),
) -> CrossReference:
    """The parameters of a fit by moments and by percentiles.

    Both methods take the losses as complete: where one was censored, or has a threshold above the law's own
    smallest amount, they give nothing and say so. A parameter held fixed stays.

    Args:
        losses, truncation, censored: what the fit was made from, as for `fit_severity`.
        fit: of the losses; a law of one or two free parameters.
        levels: the percentiles to match, as probabilities; a law of one parameter matches the median.

    Raises:
        InputError: losses that cannot be used, levels that do not ascend inside (0, 1).
    """
    amounts, thresholds, marks = checked_losses(losses, truncation, censored)
    for level in levels:
        require_probability(level, "levels", open_low=True, open_high=True)
    if len(levels) != 2 or not levels[0] < levels[1]:
        raise InputError("levels must be two, ascending", value=levels, remedy="Give (0.25, 0.75), say.")
    known = {name: fit.parameters[name] for name in fit.ranges}
    if marks.any() or (thresholds > fit.model.support[0]).any():
        why = "some losses are censored or have a reporting threshold"
        return CrossReference(known, {}, {}, {"moments": why, "percentiles": why})
    if fit.family not in _MOMENTS or fit.fixed not in ((), ("minimum",), ("threshold",)):
        why = f"not for the {fit.family} law with these parameters free"
        return CrossReference(known, {}, {}, {"moments": why, "percentiles": why})
    origin = fit.model.support[0]
    reasons: dict[str, str] = {}
    found: list[_Estimates] = []
    for method in ("moments", "percentiles"):
        try:
            if method == "moments":
                values = _MOMENTS[fit.family](amounts, origin)
            else:
                values = _by_percentiles(fit.family, amounts, origin, levels)
        except ValueError:
            values = {}
        if not values or not np.isfinite(list(values.values())).all():
            reasons[method] = f"the sample {method} are not those of any {fit.family} law"
            values = {}
        found.append(values)
    return CrossReference(known, found[0], found[1], reasons)


def smoothed_percentile(losses: FloatArray, level: float) -> float:
    """The smoothed empirical percentile: the loss of rank (n + 1) * level, between neighbours in proportion.

    Raises:
        ValueError: a rank below the first or above the last loss.
    """
    rank = (losses.size + 1) * level
    if not 1 <= rank <= losses.size:
        raise ValueError("too few losses for this percentile")
    return float(np.interp(rank, np.arange(1, losses.size + 1), np.sort(losses)))


def _by_percentiles(family: str, x: FloatArray, origin: float, levels: tuple[float, float]) -> _Estimates:
    if family == "exponential":
        return {"mean": smoothed_percentile(x, 0.5) / np.log(2)}
    if family == "pareto":
        return {"alpha": np.log(2) / np.log(smoothed_percentile(x, 0.5) / origin)}
    low, high = (smoothed_percentile(x, level) for level in levels)
    depth = -np.log1p(-np.array(levels))
    if family == "lognormal":
        z = special.ndtri(np.array(levels))
        sigma = np.log(high / low) / (z[1] - z[0])
        return {"mu": float(np.log(low) - sigma * z[0]), "sigma": float(sigma)}
    if family == "weibull":
        shape = np.log(depth[1] / depth[0]) / np.log(high / low)
        return {"shape": float(shape), "scale": float(low / depth[0] ** (1 / shape))}
    if family == "log-logistic":
        odds = special.logit(np.array(levels))
        gamma = (odds[1] - odds[0]) / np.log(high / low)
        return {"gamma": float(gamma), "scale": float(low / np.exp(odds[0] / gamma))}
    if family == "log-gamma":
        values = _by_ratio("gamma", np.log(low / origin), np.log(high / origin), levels)
        return {"shape": values["shape"], "rate": 1 / values["scale"]}
    if family == "generalized-pareto":
        low, high = low - origin, high - origin
    return _by_ratio(family, low, high, levels)


def _of_shape(family: str, shape: float) -> tuple[SizeLaw, dict[str, float], tuple[str, ...]]:
    """A law of scale 1 by one shape, its parameters, and which of them are amounts."""
    if family == "gamma":
        return Gamma(shape=shape, scale=1.0), {"shape": shape, "scale": 1.0}, ("scale",)
    if family == "lomax":
        return Lomax(alpha=shape, scale=1.0), {"alpha": shape, "scale": 1.0}, ("scale",)
    if family == "inverse-gaussian":
        values = {"mean": 1.0, "shape": shape}
        return InverseGaussian(**values), values, ("mean", "shape")
    shape = np.log(shape)  # a generalized Pareto shape may be below 0
    return GeneralizedPareto(shape=shape, scale=1.0), {"shape": shape, "scale": 1.0}, ("scale",)


def _by_ratio(family: str, low: float, high: float, levels: tuple[float, float]) -> _Estimates:
    """The shape at which two quantiles have the ratio of two percentiles; the scale follows."""

    def miss(log_shape: float) -> float:
        law = _of_shape(family, float(np.exp(log_shape)))[0]
        return float(np.log(law.ppf(levels[1]) / law.ppf(levels[0])) - np.log(high / low))

    least, most = (0.05, 20.0) if family == "generalized-pareto" else (_NARROW, _WIDE)
    at = float(np.exp(optimize.brentq(miss, float(np.log(least)), float(np.log(most)), xtol=1e-13)))
    law, values, amounts = _of_shape(family, at)
    unit = low / float(law.ppf(levels[0]))
    return {name: value * unit if name in amounts else float(value) for name, value in values.items()}


def _moments(x: FloatArray) -> tuple[float, float]:
    """Mean and second central moment, both over n."""
    return float(np.mean(x)), float(np.var(x))


def _lomax_moments(x: FloatArray, origin: float) -> _Estimates:
    mean, variance = _moments(x)
    if not variance > mean**2:
        return {}
    alpha = 2 * variance / (variance - mean**2)
    return {"alpha": alpha, "scale": mean * (alpha - 1)}


def _lognormal_moments(x: FloatArray, origin: float) -> _Estimates:
    mean, variance = _moments(x)
    square = float(np.log1p(variance / mean**2))
    return {"mu": float(np.log(mean) - square / 2), "sigma": float(np.sqrt(square))}


def _gamma_moments(x: FloatArray, origin: float) -> _Estimates:
    mean, variance = _moments(x)
    return {"shape": mean**2 / variance, "scale": variance / mean}


def _log_gamma_moments(x: FloatArray, origin: float) -> _Estimates:
    """Those of the logarithms."""
    values = _gamma_moments(np.log(x / origin), 0.0)
    return {"shape": values["shape"], "rate": 1 / values["scale"]}


def _inverse_gaussian_moments(x: FloatArray, origin: float) -> _Estimates:
    mean, variance = _moments(x)
    return {"mean": mean, "shape": mean**3 / variance}


def _excess_moments(x: FloatArray, origin: float) -> _Estimates:
    """Hosking & Wallis 1987, Technometrics 29, with the sign of the shape turned."""
    mean, variance = _moments(x - origin)
    ratio = mean**2 / variance
    return {"shape": 0.5 * (1 - ratio), "scale": 0.5 * mean * (1 + ratio)}


def _weibull_moments(x: FloatArray, origin: float) -> _Estimates:
    mean, variance = _moments(x)

    def miss(log_shape: float) -> float:
        inverse = np.exp(-log_shape)
        return float(
            special.gammaln(1 + 2 * inverse) - 2 * special.gammaln(1 + inverse) - np.log1p(variance / mean**2)
        )

    shape = float(np.exp(optimize.brentq(miss, np.log(0.05), np.log(500.0), xtol=1e-13)))
    return {"shape": shape, "scale": mean / float(special.gamma(1 + 1 / shape))}


def _log_logistic_moments(x: FloatArray, origin: float) -> _Estimates:
    """E[X] = scale b / sin b and E[X**2] = scale**2 2 b / sin 2b with b = pi / gamma."""
    mean, variance = _moments(x)

    def miss(b: float) -> float:
        return float(np.tan(b) / b - 1 - variance / mean**2)

    b = float(optimize.brentq(miss, 1e-6, np.pi / 2 - 1e-9, xtol=1e-13))
    return {"gamma": np.pi / b, "scale": mean * float(np.sin(b)) / b}


_MOMENTS: dict[str, Callable[[FloatArray, float], _Estimates]] = {
    "exponential": lambda x, origin: {"mean": float(np.mean(x))},
    "pareto": lambda x, origin: {"alpha": float(np.mean(x) / (np.mean(x) - origin))},
    "lognormal": _lognormal_moments,
    "lomax": _lomax_moments,
    "generalized-pareto": _excess_moments,
    "gamma": _gamma_moments,
    "weibull": _weibull_moments,
    "inverse-gaussian": _inverse_gaussian_moments,
    "log-logistic": _log_logistic_moments,
    "log-gamma": _log_gamma_moments,
}
