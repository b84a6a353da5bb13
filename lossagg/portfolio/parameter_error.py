"""How far the value at risk of a line may be off because its parameters are estimates.

The delta method (Klugman, Panjer & Willmot, Loss Models, variance of functions of maximum likelihood
estimators): the value at risk is computed again with each parameter moved by a quarter of its standard error
to either side, and the slopes are combined with the covariance of the estimates. Parameters of the severity
move the ground-up count too, because the records hold only losses above the threshold. The interval is
symmetric in the logarithm of the value at risk. It holds the law for right, and the parameters for near
enough to their estimates that slopes will do: a wide interval is wider still in truth.

The error of the calculation is another thing: it is in the bracket of the engine, and far smaller.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from scipy import special

from lossagg.engines import Fourier
from lossagg.errors import EngineError, LossaggError
from lossagg.families import make_count_law, make_size_law, with_parameters
from lossagg.families.base import CountLaw, SizeLaw
from lossagg.fitting import Fit
from lossagg.portfolio.assessment import Data, number
from lossagg.portfolio.line import LineModel, survival_by_year
from lossagg.portfolio.what_if import value_at_risk

_STEP = 0.25  # of a standard error: far above the round-off of the engine, and near enough for a slope
_WIDTH = float(special.ndtri(0.975))


def parameter_error(model: LineModel, level: float) -> Data:
    """The value at risk of a line with the interval of its parameters and the bracket of its calculation.

    Args:
        model: the line, at least one of its laws fitted.
        level: of the value at risk.

    Returns:
        Value, standard error, 95 % interval and bracket as plain data; the reason in place of what could not
        be computed.
    """
    loss = Fourier().annual_loss(model.frequency, model.severity)
    value = float(loss.value_at_risk(level))
    low, high = loss.accuracy("value_at_risk", level)
    entry: Data = {"value_at_risk": value, "bracket": [number(low), number(high)]}
    none = {"standard_error": None, "low": None, "high": None}
    if value <= 0:
        return {**entry, **none, "reason": "the value at risk is zero"}
    try:
        variance = _severity_variance(model, level) + _frequency_variance(model, level)
    except (LossaggError, EngineError) as refusal:
        return {**entry, **none, "reason": refusal.what}
    error = float(np.sqrt(variance))
    factor = float(np.exp(_WIDTH * error / value))
    return {**entry, "standard_error": error, "low": value / factor, "high": value * factor, "reason": None}


def _severity_variance(model: LineModel, level: float) -> float:
    if model.severities is None:
        return 0.0
    fit = model.severities.chosen

    def at(law: Data) -> float:
        severity = make_size_law(**law)
        return value_at_risk(_seen_through(model, severity), severity, level)

    return _variance(fit, fit.model.to_dict(), at)


def _frequency_variance(model: LineModel, level: float) -> float:
    if model.frequencies is None or not model.count_estimated:
        return 0.0
    fit = model.frequencies.chosen

    def at(law: Data) -> float:
        own = make_count_law(**law)
        exposure = model.forecast_exposure
        frequency = own.with_exposure(exposure) if model.rate is None else model.rate.redrawn(own, exposure)
        return value_at_risk(frequency, model.severity, level)

    return _variance(fit, fit.model.to_dict(), at)


def _seen_through(model: LineModel, severity: SizeLaw) -> CountLaw:
    """The frequency if as many losses were seen of another severity."""
    if model.frequencies is None or model.prepared is None or model.seen is None:
        return model.frequency
    years = model.prepared.years
    seen = float(np.sum(years.forecast_exposure * survival_by_year(model.prepared, severity)))
    return model.frequency.with_exposure(float(np.sum(model.seen)) / seen)


def _variance(fit: Fit, law: Data, at: Callable[[Data], float]) -> float:
    """g' C g with the slopes g of the value at risk in each parameter, by central differences."""
    slopes = np.zeros(len(fit.parameters))
    for place, (name, estimate) in enumerate(fit.parameters.items()):
        step = _STEP * fit.standard_errors[name]
        if step > 0:
            ends = [at(with_parameters(law, {name: estimate + sign * step})) for sign in (1.0, -1.0)]
            slopes[place] = (ends[0] - ends[1]) / (2.0 * step)
    return max(float(slopes @ fit.covariance @ slopes), 0.0)
