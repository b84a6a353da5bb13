"""The history by calendar year: exposure, part observed, events and their money."""

from __future__ import annotations

import calendar
import datetime as dt
from dataclasses import dataclass, fields, replace
from math import fsum
from typing import TypeVar

import numpy as np
import numpy.typing as npt

from lossagg.arrays import BoolArray, FloatArray, IntArray
from lossagg.errors import InputError, place
from lossagg.records.dates import DateArray
from lossagg.records.events import Events
from lossagg.records.exposure import ExposureTable
from lossagg.records.trend import Trend, trend_factor

Scalar = TypeVar("Scalar", bound=np.generic)
Moments = npt.NDArray[np.datetime64]


@dataclass(frozen=True)
class YearTable:
    """One element per calendar year of the observation window; arrays of shape (years,).

    Args:
        year: calendar years, without gaps; years without losses are there with zeros.
        exposure: exposure of the whole year.
        fraction: part of the year that was observed: 1, less in the year of the valuation date.
        losses: number of events used.
        claims: number of claims in them.
        open: number of claims that are open.
        amount: sum of the events as recorded.
        trended_amount: sum of the events in the money of the forecast period.
        largest: largest event as recorded, 0 without events.
        threshold: reporting threshold of the year (the largest of its events' where the records carry
            their own), trended from the middle of the part observed.
        mixed: True where events of the year have different thresholds of their own.
        frequency_trend: factor from the events of the year, at the middle of the part observed, to those
            of the forecast period, per unit of exposure.
        reported: part of the ultimate number of events that is reported; 1 without development.
        ultimate_losses: events of the part observed at ultimate.
        ultimate_amount: their amount at ultimate, as recorded.
    """

    year: IntArray
    exposure: FloatArray
    fraction: FloatArray
    losses: IntArray
    claims: IntArray
    open: IntArray
    amount: FloatArray
    trended_amount: FloatArray
    largest: FloatArray
    threshold: FloatArray
    mixed: BoolArray
    frequency_trend: FloatArray
    reported: FloatArray
    ultimate_losses: FloatArray
    ultimate_amount: FloatArray

    def __len__(self) -> int:
        """Number of years."""
        return len(self.year)

    @property
    def observed_exposure(self) -> FloatArray:
        """Exposure of the part of each year that was observed; shape (years,)."""
        return self.exposure * self.fraction

    @property
    def forecast_exposure(self) -> FloatArray:
        """Exposure of the forecast period that would report as many events; shape (years,).

        It is the exposure observed, times the part of the events that is reported, over the trend of the
        frequency: a rate per unit of it is the rate of the forecast period at ultimate, and no loss is
        invented to get there.
        """
        return self.observed_exposure * self.reported / self.frequency_trend

    def at_ultimate(self, factor: FloatArray, losses: FloatArray, amount: FloatArray) -> YearTable:
        """The same years with what they develop to.

        Args:
            factor: factors of the number of events to ultimate; shape (years,).
            losses: events at ultimate; shape (years,).
            amount: amount at ultimate; shape (years,).
        """
        return replace(
            self,
            reported=_frozen(1.0 / factor),
            ultimate_losses=_frozen(losses * 1.0),
            ultimate_amount=_frozen(amount * 1.0),
        )

    def to_dicts(self) -> list[dict[str, float | int]]:
        """One dictionary of plain numbers per year."""
        columns = {field.name: getattr(self, field.name).tolist() for field in fields(self)}
        return [dict(zip(columns, row, strict=True)) for row in zip(*columns.values(), strict=True)]


@dataclass(frozen=True)
class Window:
    """The years observed completely, and the day on which observation ends.

    Args:
        first_year: first year.
        valuation_date: last day.
    """

    first_year: int
    valuation_date: dt.date

    @property
    def years(self) -> IntArray:
        """Calendar years of the window."""
        return np.arange(self.first_year, self.valuation_date.year + 1, dtype=np.int64)

    def position(self, date: DateArray) -> IntArray:
        """Position in the window of the year of each date; shape (n,)."""
        position: IntArray = date.astype("datetime64[Y]").astype(np.int64) + 1970 - self.first_year
        return position

    def fractions(self) -> FloatArray:
        """Part of each year observed: days up to and with the valuation date over the days of its year."""
        last = self.valuation_date
        fraction = np.ones(len(self.years))
        fraction[-1] = last.timetuple().tm_yday / (366 if calendar.isleap(last.year) else 365)
        return fraction

    def bounds(self) -> tuple[Moments, Moments]:
        """First and last moment of the observed part of each year, to the second."""
        starts = (self.years - 1970).astype("datetime64[Y]").astype("datetime64[s]")
        last_day = np.datetime64(self.valuation_date).astype("datetime64[s]")
        return starts, np.append(starts[1:], last_day + np.timedelta64(1, "D"))

    def middles(self) -> Moments:
        """Middle of the observed part of each year, to the second."""
        starts, ends = self.bounds()
        return starts + (ends - starts) // 2


def exposures_of(window: Window, exposure: ExposureTable | None) -> FloatArray:
    """Exposure of each year of the window; 1 a year without a table.

    Raises:
        InputError: years of the window that the table does not have.
    """
    if exposure is None:
        return np.ones(len(window.years))
    found = {int(year): exposure.of_year(int(year)) for year in window.years}
    missing = [year for year, value in found.items() if value is None]
    if missing:
        raise InputError(
            f"the exposure file has no row for {len(missing)} of the years observed",
            where=place(file=exposure.file, column=exposure.base),
            value=missing[:10],
            remedy="Add the years, or declare a later first year of the observation window.",
        )
    return np.array([value for value in found.values() if value is not None], dtype=np.float64)


def year_table(
    window: Window,
    exposure: FloatArray,
    events: Events,
    recorded: FloatArray,
    trended: FloatArray,
    threshold: FloatArray,
    frequency_trend: FloatArray,
    own: FloatArray,
) -> YearTable:
    """The history by year, at what is reported.

    Args:
        window: the years.
        exposure: of the whole years; shape (years,).
        events: the events, in an order that does not depend on that of the rows.
        recorded: exact sums of what is recorded, rounded once; shape (years,).
        trended: amounts of the events in the money of the forecast period; shape (events,).
        threshold: thresholds of the years in the same money; shape (years,).
        frequency_trend: factors of the frequency; shape (years,).
        own: threshold of each event in its own money; shape (events,).
    """
    at, size = window.position(events.date), len(window.years)
    largest, least = np.zeros(size), np.full(size, np.inf)
    np.maximum.at(largest, at, events.recorded)
    np.minimum.at(least, at, own)
    most = np.full(size, -np.inf)
    np.maximum.at(most, at, own)
    losses = np.bincount(at, minlength=size).astype(np.int64)
    return YearTable(
        year=_frozen(window.years),
        exposure=_frozen(exposure),
        fraction=_frozen(window.fractions()),
        losses=_frozen(losses),
        claims=_frozen(np.bincount(at, weights=events.claims, minlength=size).astype(np.int64)),
        open=_frozen(np.bincount(at, weights=events.open, minlength=size).astype(np.int64)),
        amount=_frozen(recorded),
        trended_amount=_frozen(_sums(at, trended, size)),
        largest=_frozen(largest),
        threshold=_frozen(threshold),
        mixed=_frozen(most > least),
        frequency_trend=_frozen(frequency_trend),
        reported=_frozen(np.ones(size)),
        ultimate_losses=_frozen(losses.astype(np.float64)),
        ultimate_amount=_frozen(recorded.copy()),
    )


def _sums(at: IntArray, values: FloatArray, size: int) -> FloatArray:
    """Sums by year, each rounded once; values grouped by one sort of the years."""
    order = np.argsort(at.astype(np.int16), kind="stable")
    ends = np.cumsum(np.bincount(at, minlength=size))
    parts = np.split(values[order], ends[:-1])
    return np.array([fsum(part.tolist()) for part in parts])


def _frozen(array: npt.NDArray[Scalar]) -> npt.NDArray[Scalar]:
    array.setflags(write=False)
    return array


def threshold_base(window: Window, year: IntArray, own: FloatArray, default: float) -> FloatArray:
    """Threshold of each year in the money of that year: the largest of its events', else the default.

    Args:
        window: the years.
        year: year of each event; shape (events,).
        own: threshold of each event in its own money; shape (events,).
        default: threshold of years without events.

    Returns:
        Thresholds, shape (years,).
    """
    base = np.full(len(window.years), -np.inf)
    np.maximum.at(base, year - window.first_year, own)
    return np.where(np.isinf(base), default, base)


def complete_from(window: Window, base: FloatArray, midpoint: dt.date, trend: Trend) -> float:
    """Amount in the money of the forecast period above which every day of the window is complete.

    Args:
        window: the years.
        base: threshold of each year in its own money; shape (years,).
        midpoint: midpoint of the forecast period.
        trend: rate per year, or an index.

    Returns:
        The largest threshold over all days: by a rate that of the first or the last day of a year, by an
        index, which is constant within a month, that of the first day of some month.
    """
    _, ends = window.bounds()
    months = (window.years - 1970)[:, None] * 12 + np.arange(12)
    firsts = months.astype("datetime64[M]").astype("datetime64[s]")
    last = (ends - np.timedelta64(1, "s"))[:, None]
    days = np.minimum(np.column_stack([firsts, last]), last)
    factors = trend_factor(days.ravel(), midpoint, trend).reshape(days.shape)
    return float((base[:, None] * factors).max())
