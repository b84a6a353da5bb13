"""What the assessment says about one line: its records, its fits and how well they fit."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from itertools import zip_longest
from typing import Any

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.families import Mixture, SizeTable, Spliced
from lossagg.families.base import SizeLaw
from lossagg.fitting import Candidates, Fit, FrequencyFit, count_points, quantile_points, survival_points
from lossagg.portfolio.assessment import NO_OWN_DATA, Data, number
from lossagg.portfolio.fit_tests import DRAWS, THRESHOLDS, frequency_tests, severity_tests, tail_evidence
from lossagg.portfolio.history import development_data, history_data
from lossagg.portfolio.line import LineModel
from lossagg.records import PreparedLosses

_MEANS = ("mean", "base.mean")


def line_evidence(
    model: LineModel, draws: int = DRAWS, thresholds: int = THRESHOLDS, tail_draws: int = 0
) -> Data:
    """The line's entry in the assessment, less its annual figures.

    Args:
        model: the line.
        draws: most bootstrap draws behind a p-value.
        thresholds: how many tail thresholds are looked at.
        tail_draws: bootstrap draws at each of them, where losses above are stopped at policy limits.
    """
    prepared = model.prepared
    return {
        "name": model.name,
        "source": "given" if prepared is None else "records",
        "label": None if model.own_data else NO_OWN_DATA,
        **history_data(prepared),
        "exposure": None
        if prepared is None
        else {
            "forecast": model.forecast_exposure,
            "base": prepared.base,
            "last_year": float(prepared.years.exposure[-1]),
        },
        "development": development_data(prepared),
        "frequency": _frequency(model, draws),
        "severity": _severity(model, draws),
        "fit": None if prepared is None else _fit_points(model, prepared),
        "tail": None
        if prepared is None or model.severities is None
        else tail_evidence(prepared, model.severities, thresholds, tail_draws),
    }


def _frequency(model: LineModel, draws: int) -> Data:
    law, tried = model.frequency, model.frequencies
    entry: Data = {
        "family": law.family,
        "parameters": law.parameters,
        "standard_errors": None,
        "intervals": None,
        "source": "given" if tried is None else "fitted",
        "stated_source": model.sources.get("frequency"),
        "mean": law.mean(),
        "variance": law.variance(),
        "candidates": [],
        "choice": None,
        "credibility": None,
        "bound": None,
        "tests": None,
    }
    if tried is not None and model.prepared is not None:
        fit = tried.chosen
        at_forecast = _at_forecast(model, fit.standard_errors if model.count_estimated else {})
        if model.rate is not None:
            at_forecast["mean"] = model.rate.standard_error * model.forecast_exposure
        entry |= {
            "standard_errors": at_forecast,
            "intervals": _intervals(model, fit),
            "candidates": _candidates(tried),
            "choice": _choice(tried),
            "credibility": None if model.rate is None else model.rate.to_dict(),
            "bound": None if model.bound is None else model.bound.to_dict(),
            "tests": frequency_tests(model, model.prepared, draws),
            "notes": [str(note) for note in fit.notes if note in model.fit_notes],
        }
    return entry


def _severity(model: LineModel, draws: int) -> Data:
    law, tried, prepared = model.severity, model.severities, model.prepared
    entry: Data = {
        "family": law.family,
        "parameters": law.parameters,
        "standard_errors": None,
        "intervals": None,
        "source": "given" if tried is None else "fitted",
        "stated_source": model.sources.get("severity"),
        "mean": number(law.mean()),
        "sd": number(law.sd()),
        "tail_index": number(law.tail_index),
        "threshold": None,
        "observations": None,
        "censored": None,
        "observed": None,
        "density_jump": _jump(law),
        "candidates": [],
        "choice": None,
    }
    if tried is not None and prepared is not None:
        fit = tried.chosen
        entry |= {
            "standard_errors": _with_rest(fit.standard_errors, law, lambda error: error),
            "intervals": _with_rest(
                _intervals(model, fit), law, lambda ends: [1.0 - end for end in ends[::-1]]
            ),
            "threshold": float(prepared.threshold.min()) if prepared.threshold.size else None,
            "observations": fit.observations,
            "censored": fit.censored,
            "observed": observed(prepared.amount),
            "candidates": _candidates(tried, severity_tests(model, prepared, tried, draws)),
            "choice": _choice(tried),
            "notes": [str(note) for note in fit.notes],
        }
    return entry


def _with_rest(known: Data, law: SizeLaw, rest: Callable[[Any], Any]) -> Data:
    """What is known of the parameters, that of the second weight of a mixture of two from the first's."""
    if isinstance(law, Mixture) and len(law.weights) == 2 and "weight.1" in known:
        return {**known, "weight.2": rest(known["weight.1"])}
    return known


def _jump(law: SizeLaw) -> float | None:
    """Density just above the threshold of a splice over that just below; None without two densities."""
    if not isinstance(law, Spliced) or isinstance(law.body, SizeTable):
        return None
    return number(law.jump)


def observed(amounts: FloatArray) -> Data:
    """The losses before any law: centre, spread, skewness, kurtosis and the largest, as they are recorded."""
    scale = float(amounts.max())
    parts = amounts / scale
    deviations = parts - parts.mean()
    sd = float(np.sqrt(np.mean(deviations**2)))
    steep = sd > 1e-12
    return {
        "losses": len(amounts),
        "mean": float(parts.mean()) * scale,
        "median": float(np.median(amounts)),
        "sd": sd * scale,
        "skewness": float(np.mean((deviations / sd) ** 3)) if steep else None,
        "kurtosis": float(np.mean((deviations / sd) ** 4)) if steep else None,
        "largest": scale,
        "largest_share": 1.0 / float(parts.sum()),
    }


def _intervals(model: LineModel, fit: Fit) -> Data:
    """95 % interval of every estimated parameter; that of a mean count at the forecast exposure."""
    ends = {name: fit.interval(name) for name in fit.parameters if name not in fit.fixed}
    known = {name: np.array(pair) for name, pair in ends.items() if np.isfinite(pair).all()}
    if isinstance(fit, FrequencyFit):
        known = _at_forecast(model, known)
        if model.rate is not None or model.bound is not None:
            known.pop("mean", None)
    return {name: pair.tolist() for name, pair in known.items()}


def _at_forecast(model: LineModel, values: Mapping[str, Any]) -> dict[str, Any]:
    """What is known of the parameters at exposure 1, for the forecast: means in proportion to exposure, those
    that exposure leaves alone as they are. Others, such as a probability of no loss, are left out."""
    assert model.frequencies is not None
    own, forecast = model.frequencies.chosen.parameters, model.frequency.parameters
    return {
        name: value * model.forecast_exposure if name in _MEANS else value
        for name, value in values.items()
        if name in _MEANS or forecast.get(name) == own[name]
    }


def _choice(tried: Candidates[Any]) -> Data:
    """Which candidate ranks first, which is used, and why where it is another."""
    return {
        "first": tried.fits[0].family,
        "chosen": tried.chosen.family,
        "reason": tried.reason or None,
    }


def _candidates(tried: Candidates[Any], tests: Sequence[Data] = ()) -> list[Data]:
    """Every family tried, best first, refused ones last with their reason."""
    fitted = [
        {**_candidate(fit, chosen=fit is tried.chosen), "goodness": test}
        for fit, test in zip_longest(tried.fits, tests)
    ]
    blank = dict.fromkeys(("parameters", "standard_errors", "log_likelihood", "aic", "bic", "goodness"))
    return fitted + [
        {"family": family, **blank, "chosen": False, "refused": reason}
        for family, reason in tried.refused.items()
    ]


def _candidate(fit: Fit, *, chosen: bool) -> Data:
    return {
        "family": fit.family,
        "parameters": dict(fit.parameters),
        "standard_errors": fit.standard_errors,
        "log_likelihood": fit.log_likelihood,
        "aic": fit.aic,
        "bic": fit.bic,
        "chosen": chosen,
        "refused": None,
    }


def _fit_points(model: LineModel, prepared: PreparedLosses) -> Data | None:
    """Points of the fit plots; None where neither law was fitted."""
    points: Data = {"survival": [], "quantiles": [], "counts": []}
    if model.severities is not None:
        fit = model.severities.chosen
        losses = (prepared.amount, fit, prepared.threshold, prepared.censored)
        points["survival"] = _rows(survival_points(*losses))
        points["quantiles"] = _rows(quantile_points(*losses))
    if model.frequencies is not None and model.seen is not None:
        counts = count_points(prepared.years.losses, model.frequencies.chosen, model.seen)
        years = prepared.years.year.tolist()
        points["counts"] = [{"year": year, **row} for year, row in zip(years, _rows(counts), strict=True)]
    return points if any(points.values()) else None


def _rows(table: Any) -> list[Data]:
    """A table of equal-length arrays as one dictionary per row."""
    columns = {name: np.asarray(values).tolist() for name, values in vars(table).items()}
    return [dict(zip(columns, row, strict=True)) for row in zip(*columns.values(), strict=True)]
