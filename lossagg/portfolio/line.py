"""One line of a portfolio: its records prepared, its laws fitted or given.

Severity is fitted first, above the reporting threshold and below the policy limits; frequency second,
because the records count only losses above the threshold: each year's exposure is multiplied by the
survival of the fitted severity at that year's threshold, and the rate that results is ground-up.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from typing import TypeVar

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.engines.book import Line
from lossagg.errors import FitError, InputError, place
from lossagg.families import Poisson
from lossagg.families.base import CountLaw, SizeLaw
from lossagg.fitting import (
    Candidates,
    Fit,
    FrequencyFit,
    Note,
    SeverityFit,
    compare_frequencies,
    compare_severities,
)
from lossagg.portfolio.laws import given_frequency, given_severity
from lossagg.portfolio.prior import UPPER_BOUND, BoundedRate, WeightedRate, bounded_rate, weighted_rate
from lossagg.portfolio.schema import Law, LineSection
from lossagg.records import Finding, PreparedLosses

AnyFit = TypeVar("AnyFit", bound=Fit)

LEAST_SEEN = 0.01
"""Least share of all losses above the reporting threshold: a ground-up count beyond a hundred times the
observed one is extrapolation, not evidence (our choice, no source)."""


@dataclass(frozen=True, kw_only=True)
class LineModel:
    """A line with its laws for the forecast year, and the evidence for them.

    Attributes:
        name: its name.
        frequency: the count law of the forecast year, ground-up.
        severity: the size law, in money of the forecast year.
        prepared: the losses it was fitted to; None where both laws are given and no records exist.
        frequencies: the count laws tried; None where the law is given.
        severities: the size laws tried; None where the law is given.
        seen: per year, the exposure of the forecast period that would show as many losses: what was
            observed, for the part that is reported, at the frequency of the forecast period, times the
            probability that a loss exceeds the threshold.
        rate: the own rate weighed against a prior; None where none is stated.
        bound: the upper bound that is the rate where there was no loss; None where the rate is estimated.
        sources: where given laws come from, as far as it is stated, by "frequency" and "severity".
        forecast_exposure: exposure of the forecast year.
        expense: adjustment expense that comes with every loss, as a ratio to it.
        sum_insured: of every risk of the line, where a surplus needs it.
    """

    name: str
    frequency: CountLaw
    severity: SizeLaw
    prepared: PreparedLosses | None = None
    frequencies: Candidates[FrequencyFit] | None = None
    severities: Candidates[SeverityFit] | None = None
    seen: FloatArray | None = None
    rate: WeightedRate | None = None
    bound: BoundedRate | None = None
    sources: Mapping[str, str] = field(default_factory=dict)
    forecast_exposure: float = 1.0
    expense: float = 0.0
    sum_insured: float | None = None

    @property
    def line(self) -> Line:
        """What the engines need of it."""
        return Line(
            name=self.name,
            frequency=self.frequency,
            severity=self.severity,
            expense=self.expense,
            sum_insured=self.sum_insured,
        )

    @property
    def findings(self) -> tuple[Finding, ...]:
        """What reading, checking and preparing its records found; nothing where it has none."""
        return () if self.prepared is None else self.prepared.findings

    @property
    def own_data(self) -> bool:
        """Whether the line was observed and had losses; laws that were given without records have none to."""
        return self.prepared is None or len(self.prepared) > 0

    @property
    def count_estimated(self) -> bool:
        """Whether the frequency is an estimate with an error of its own: neither given nor a bound."""
        return self.frequencies is not None and self.bound is None

    @property
    def fit_notes(self) -> tuple[Note, ...]:
        """What the fits say about themselves."""
        fits = [c.chosen for c in (self.severities, self.frequencies) if c is not None]
        spoken_for = () if self.own_data else ("no-losses",)  # A caution of its own says more.
        return tuple(note for fit in fits for note in fit.notes if note.code not in spoken_for)


def build_line(section: LineSection, prepared: PreparedLosses | None, key: str) -> LineModel:
    """Fit or take over the laws of one line.

    Args:
        section: its table of the portfolio file.
        prepared: its losses, where it has records.
        key: the name of the table in messages, `line[2]`.

    Raises:
        FitError: no candidate could be fitted; carries why for each.
        InputError: given parameters out of range.
    """
    model = _modelled(section, prepared, key)
    laws = {"frequency": section.frequency, "severity": section.severity}
    sources = {name: law.source for name, law in laws.items() if law.source is not None}
    return replace(model, expense=section.expense, sum_insured=section.sum_insured, sources=sources)


def _modelled(section: LineSection, prepared: PreparedLosses | None, key: str) -> LineModel:
    severities = None
    if section.severity.fit is None:
        severity = given_severity(section.severity, f"{key}.severity")
    else:
        assert prepared is not None
        severities = compare_severities(
            prepared.amount,
            section.severity.fit,
            truncation=prepared.threshold,
            censored=prepared.censored,
            tail_threshold=section.severity.tail_threshold,
            continuous=section.severity.continuous,
            least_seen=LEAST_SEEN,
        )
        severities = _preferred(severities, section.severity, f"{key}.severity")
        severity = severities.chosen.model
    if section.frequency.fit is None or prepared is None:
        return LineModel(
            name=section.name,
            frequency=given_frequency(section.frequency, f"{key}.frequency"),
            severity=severity,
            prepared=prepared,
            severities=severities,
        )
    years = prepared.years
    seen = years.forecast_exposure * survival_by_year(prepared, severity)
    if not (seen > 0).all():
        raise InputError(
            "the severity has no loss above the reporting threshold, so no count says what its rate is",
            where=place(file="portfolio.toml", key=f"{key}.severity"),
            value=float(years.threshold.max()),
            remedy="Lower reporting-threshold, or give a severity that reaches beyond it.",
        )
    frequencies = compare_frequencies(years.losses, section.frequency.fit, exposure=seen)
    frequencies = _preferred(frequencies, section.frequency, f"{key}.frequency")
    exposure = section.forecast_exposure or _last_full_exposure(prepared)
    frequency, rate, bound = frequencies.chosen.model_for(exposure), None, None
    if section.frequency.prior is not None:
        rate = weighted_rate(section.frequency.prior, frequencies.chosen, f"{key}.frequency")
        frequency = rate.law(frequencies.chosen, exposure)
    elif not len(prepared) and section.frequency.rate_without_losses == UPPER_BOUND:
        bound = bounded_rate(frequencies.chosen)
        frequency = Poisson(mean=bound.rate * exposure)
    return LineModel(
        name=section.name,
        frequency=frequency,
        severity=severity,
        prepared=prepared,
        frequencies=frequencies,
        severities=severities,
        seen=seen,
        rate=rate,
        bound=bound,
        forecast_exposure=exposure,
    )


def survival_by_year(prepared: PreparedLosses, severity: SizeLaw) -> FloatArray:
    """Per year, the probability that a loss exceeds the threshold above which it was recorded.

    Where events of a year have thresholds of their own, each stands for the 1 / S(threshold) losses of
    which it was the one to be seen (Horvitz and Thompson 1952), so the year saw the ratio of the two.
    """
    years = prepared.years
    survival = np.array(severity.sf(years.threshold), dtype=np.float64)
    if years.mixed.any():
        at = prepared.year - int(years.year[0])
        stands_for = 1.0 / np.asarray(severity.sf(prepared.threshold), dtype=np.float64)
        losses = np.bincount(at, weights=stands_for, minlength=len(years))
        survival[years.mixed] = years.losses[years.mixed] / losses[years.mixed]
    return survival


def _preferred(tried: Candidates[AnyFit], law: Law, key: str) -> Candidates[AnyFit]:
    """The candidates with the one the portfolio file chooses."""
    if law.choose is None:
        return tried
    try:
        return tried.choosing(law.choose, law.reason or "")
    except FitError as error:
        raise InputError(
            error.what,
            where=place(file="portfolio.toml", key=f"{key}.choose"),
            value=error.value,
            remedy=error.remedy,
        ) from error


def _last_full_exposure(prepared: PreparedLosses) -> float:
    """Exposure of the last calendar year: that of the whole year, also where it was observed in part."""
    return float(prepared.years.exposure[-1])
