"""The parameters of a line by other routes: a bootstrap that refits, and moments and percentiles beside."""

from __future__ import annotations

from collections.abc import Callable

from lossagg.errors import FitError
from lossagg.fitting import ParameterBootstrap, bootstrap_frequency, bootstrap_severity, cross_reference
from lossagg.portfolio.assessment import Data
from lossagg.portfolio.fit_tests import stream_of
from lossagg.portfolio.line import LineModel

_LEAST, _LOSSES = 20, 100_000  # fewest draws; losses refitted in all, which bounds the time


def estimates(model: LineModel, draws: int) -> Data:
    """Bootstrap intervals of both laws, and moments and percentiles of the severity.

    Args:
        model: the line.
        draws: most bootstrap draws.

    Returns:
        By law, None where it was given: by parameter the interval and the other estimates, and the reasons
        for what is missing.
    """
    prepared, seed = model.prepared, stream_of(model.name)
    found: Data = {"frequency": None, "severity": None}
    if prepared is None:
        return found
    draws = max(_LEAST, draws)
    if model.frequencies is not None and model.seen is not None and model.own_data:
        counts, fit, seen = prepared.years.losses, model.frequencies.chosen, model.seen
        found["frequency"] = _bootstrapped(
            lambda: bootstrap_frequency(counts, fit, seen, draws=draws, seed=seed)
        )
    if model.severities is not None:
        losses, chosen = (prepared.amount, model.severities.chosen), model.severities.chosen
        some = max(_LEAST, min(draws, _LOSSES // len(prepared)))
        beside = prepared.threshold, prepared.censored
        entry = _bootstrapped(lambda: bootstrap_severity(*losses, *beside, draws=some, seed=seed))
        other = cross_reference(prepared.amount, chosen, *beside)
        entry |= {"moments": other.moments, "percentiles": other.percentiles}
        missing: dict[str, list[str]] = {}
        for method, why in other.reasons.items():
            missing.setdefault(why, []).append(method)
        none = [f"no {' or '.join(methods)}: {why}" for why, methods in missing.items()]
        found["severity"] = {**entry, "reasons": [*entry["reasons"], *none]}
    return found


def _bootstrapped(draw: Callable[[], ParameterBootstrap]) -> Data:
    entry: Data = {"intervals": {}, "draws": 0, "refused": 0, "moments": {}, "percentiles": {}, "reasons": []}
    try:
        made = draw()
    except FitError as refusal:
        return {**entry, "reasons": [refusal.what]}
    reasons = [made.caution] if made.caution else []
    intervals = {name: list(made.interval(name)) for name in made.values}
    return {**entry, "intervals": intervals, "draws": made.draws, "refused": made.refused, "reasons": reasons}
