"""The history by calendar year: exposure, part observed, events and their money."""

from __future__ import annotations

import calendar
import datetime as dt
from dataclasses import dataclass, fields
from math import fsum

import numpy as np
import numpy.typing as npt

from lossagg.arrays import FloatArray, IntArray
from lossagg.errors import InputError, place
from lossagg.records.exposure import ExposureTable
from lossagg.records.money import Money
from lossagg.records.trend import trend_factor

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

    def __len__(self) -> int:
        """Number of years."""
        return len(self.year)

    @property
    def observed_exposure(self) -> FloatArray:
        """Exposure of the part of each year that was observed; shape (years,)."""
        return self.exposure * self.fraction

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


def sum_by_year(
    window: Window, year: IntArray, exact: Money, trended: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Sums of the events of each year: as recorded, exact and rounded once; and trended.

    Args:
        window: the years.
        year: year of each event; shape (events,).
        exact: events as recorded, exactly; shape (events,).
        trended: events trended; shape (events,).

    Returns:
        Recorded and trended sums, each of shape (years,).
    """
    parts = [np.flatnonzero(year == each) for each in window.years]
    recorded = exact.by_group(year - window.first_year, len(window.years)).to_floats()
    return recorded, np.array([fsum(trended[at].tolist()) for at in parts])


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


def complete_from(window: Window, base: FloatArray, midpoint: dt.date, trend: float) -> float:
    """Amount in the money of the forecast period above which every day of the window is complete.

    Args:
        window: the years.
        base: threshold of each year in its own money; shape (years,).
        midpoint: midpoint of the forecast period.
        trend: rate per year.

    Returns:
        The largest threshold over all days, which is that of the first or the last day of a year.
    """
    starts, ends = window.bounds()
    return max(float((base * trend_factor(days, midpoint, trend)).max()) for days in (starts, ends))
