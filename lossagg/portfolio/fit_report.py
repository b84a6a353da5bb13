"""Every fit of a portfolio with all its evidence, and no capital figure: what `lossagg fit` writes."""

from __future__ import annotations

from dataclasses import asdict

import numpy as np

from lossagg.fitting import predictive_quantile
from lossagg.portfolio.assess import Progress, silent
from lossagg.portfolio.assessment import Data
from lossagg.portfolio.cautions import cautions
from lossagg.portfolio.estimates import estimates
from lossagg.portfolio.evidence import line_evidence
from lossagg.portfolio.evidence_cautions import evidence_cautions, tail_cautions
from lossagg.portfolio.fit_tests import stream_of
from lossagg.portfolio.line import LineModel
from lossagg.portfolio.parameter_error import parameter_error
from lossagg.portfolio.portfolio import Portfolio
from lossagg.portfolio.what_if import influence, sensitivity
from lossagg.version import __version__

FIT_FORMAT = "lossagg.fit/1"
_DRAWS, _THRESHOLDS, _TAIL_DRAWS = 199, 20, 39
_SIZE_LEVELS, _SIZE_DRAWS = (0.9, 0.99), 100


def fit_report(portfolio: Portfolio, *, draws: int = _DRAWS, progress: Progress = silent) -> Data:
    """Fit every line and say which law, why this one, how sure, and what if the tail is wrong.

    Args:
        portfolio: read and checked.
        draws: most bootstrap draws behind a p-value.
        progress: called with the stage and the fraction done.

    Returns:
        Plain data: per line what an assessment says of its fits, and beside it the parameter
        error of the line's value at risk at the capital level, and its sensitivity to the tail threshold and
        to single losses.

    Raises:
        InputError: a value of the portfolio file that cannot be used.
        FitError: records that support none of the laws asked for.
        EngineError: a line beyond the Fourier engine.
    """
    progress("preparing and fitting", 0.0)
    models = portfolio.models()
    section = portfolio.file.portfolio
    lines = []
    for place, model in enumerate(models):
        progress(f"testing the fits of {model.name}", (1 + place) / (1 + len(models)))
        lines.append(_line(model, section.capital_level, draws))
    findings = [finding for model in models for finding in model.findings]
    return {
        "format": FIT_FORMAT,
        "portfolio": portfolio.description(),
        "run": {
            "version": __version__,
            "seed": 0,
            "years": 0,
            "draws": draws,
            "inputs": list(portfolio.inputs),
        },
        "lines": lines,
        "findings": [finding.to_dict() for finding in dict.fromkeys(findings)],
        "cautions": [
            *cautions(models, sorted({*section.levels, section.capital_level})),
            *evidence_cautions(lines),
            *tail_cautions(lines),
        ],
    }


def _size_quantiles(model: LineModel, level: float) -> list[Data]:
    """Quantiles of one loss above the reporting threshold, as fitted and with the parameters uncertain."""
    if model.severities is None or model.prepared is None:
        return []
    above = float(np.nextafter(model.prepared.threshold.min(), 0.0))
    fit, seed = model.severities.chosen, stream_of(model.name)
    levels = sorted({*_SIZE_LEVELS, level})
    return [
        asdict(predictive_quantile(fit, each, above=above, draws=_SIZE_DRAWS, seed=seed)) for each in levels
    ]


def _line(model: LineModel, level: float, draws: int) -> Data:
    entry = line_evidence(model, draws, _THRESHOLDS, min(draws, _TAIL_DRAWS))
    fitted = model.severities is not None and model.prepared is not None
    uncertain = fitted or model.count_estimated
    return {
        **entry,
        "level": level,
        "estimates": estimates(model, draws),
        "size_quantiles": _size_quantiles(model, level),
        "parameter_error": parameter_error(model, level) if uncertain else None,
        "sensitivity": sensitivity(model, entry["tail"], level) if fitted else [],
        "influence": influence(model, level) if fitted else [],
    }
