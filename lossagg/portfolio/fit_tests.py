"""What speaks for and against the laws of one line, as data: tests of the fits, trend, and the tail."""

from __future__ import annotations

import zlib
from collections.abc import Callable, Mapping
from dataclasses import asdict
from typing import Any

import numpy as np

from lossagg.errors import FitError
from lossagg.fitting import (
    Candidates,
    GoodnessTest,
    SeverityFit,
    count_goodness,
    frequency_trend,
    goodness_test,
    overdispersion,
    size_count_test,
    threshold_choices,
)
from lossagg.portfolio.assessment import Data, number
from lossagg.portfolio.line import LineModel
from lossagg.records import PreparedLosses

DRAWS, THRESHOLDS = 19, 8  # a first look within an assessment; `lossagg fit` takes more of both
# The law in use is drawn from until its p-values are settled, at most so often and, for many losses, within a
# bound of losses drawn in all: a law that fits is done after ten or twenty draws.
_IN_USE, _LOSSES, _LEAST_IN_USE, _ENOUGH = 199, 60_000, 39, 5
_DIGITS = 6  # of a p-value: the last bits of an eigenvalue may differ between machines


def stream_of(name: str) -> int:
    """A seed that belongs to the name of a line, whatever its place in the file."""
    return zlib.crc32(name.encode("utf-8"))


def severity_tests(
    model: LineModel, prepared: PreparedLosses, tried: Candidates[SeverityFit], draws: int
) -> list[Data]:
    """Distances and p-values of every severity candidate, in the order of the candidates.

    The one in use gets draws enough to tell a p-value of 5 % from its neighbours: a caution hangs on it.
    """
    seed = stream_of(model.name)
    return [
        goodness_data(
            goodness_test(
                prepared.amount,
                fit,
                prepared.threshold,
                prepared.censored,
                draws=_draws(draws, len(prepared), in_use=fit is tried.chosen),
                enough=_ENOUGH if draws < _IN_USE else 2 * _ENOUGH,
                seed=seed,
            )
        )
        for fit in tried.fits
    ]


def _draws(asked: int, losses: int, *, in_use: bool) -> int:
    if in_use:
        return min(max(asked, _IN_USE), max(_LEAST_IN_USE, _LOSSES // losses))
    return min(asked, max(DRAWS, 40_000 // losses))


def goodness_data(test: GoodnessTest) -> Data:
    """Three statistics, each with its p-value."""
    names = ("kolmogorov_smirnov", "anderson_darling", "upper_tail")
    entry: Data = {
        name: {"statistic": number(getattr(test.goodness, name)), "p_value": getattr(test, name)}
        for name in names
    }
    return entry | {"draws": test.replicates, "refused": test.refused, "reason": test.reason or None}


def frequency_tests(model: LineModel, prepared: PreparedLosses, draws: int) -> Data:
    """Overdispersion, trend, independence of the sizes, and goodness of fit of the counts."""
    years, exposure, tried = prepared.years, model.seen, model.frequencies
    assert exposure is not None
    assert tried is not None
    counts, seed = years.losses, stream_of(model.name)
    some = counts > 0

    def fit_of_counts() -> Any:
        return count_goodness(counts, tried.chosen, exposure, draws=draws, seed=seed)

    def together() -> Any:
        sizes = years.trended_amount[some] / counts[some]
        return size_count_test(counts[some] / exposure[some], sizes, seed=seed)

    return {
        "overdispersion": _tested(lambda: overdispersion(counts, exposure)),
        "trend": _tested(lambda: frequency_trend(counts, years.year, exposure)),
        "size_and_number": _tested(together),
        "goodness": _tested(fit_of_counts),
    }


def _tested(test: Callable[[], Any]) -> Data:
    """The result of a test, or why it could not be made."""
    try:
        return {**_plain(asdict(test())), "reason": None}
    except FitError as refusal:
        return {"reason": refusal.what}


def tail_evidence(prepared: PreparedLosses, tried: Candidates[SeverityFit], most: int, draws: int) -> Data:
    """The chosen law's index, the tail at up to `most` thresholds, and what two rules choose."""
    points, choices = threshold_choices(
        prepared.amount, prepared.threshold, prepared.censored, most=most, draws=draws
    )
    shape = tried.chosen.tail_shape()
    return {
        "shape": None
        if shape is None
        else {"value": shape[0], "low": number(shape[1]), "high": number(shape[2])},
        "points": [_plain(asdict(point)) for point in points],
        "rules": [_plain(asdict(choice)) for choice in choices],
    }


def _plain(values: Mapping[str, Any]) -> Data:
    """Plain numbers, infinite ones as None, p-values to the digits every machine agrees on."""
    plain: Data = {}
    for name, value in values.items():
        if isinstance(value, float | np.floating):
            known = number(float(value))
            plain[name] = round(known, _DIGITS) if known is not None and "p_value" in name else known
        else:
            plain[name] = value.item() if isinstance(value, np.generic) else value
    return plain
