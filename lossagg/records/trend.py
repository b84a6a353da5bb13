"""Trend: amounts of the past in the money of the forecast period, by a yearly rate or by an index table.

By a rate r, an amount of day d is worth amount * (1 + r)**((m - d) / 365.25) at the midpoint m of the
forecast period, with days counted exactly (ASOP 13 section 3 asks for the periods and the index to be
stated). By an index, it is worth amount * index(m) / index(d), where index(d) is the value of the year or
month that holds the day: no value is made up between or beyond those given, so the table must reach the
midpoint of the forecast period. Reporting thresholds are carried by the same trend, or truncation would be
misjudged in every year but the last.
"""

from __future__ import annotations

import datetime as dt
from dataclasses import dataclass

import numpy as np

from lossagg.arrays import FloatArray, IntArray
from lossagg.errors import InputError, place
from lossagg.records.dates import DateArray
from lossagg.records.findings import Finding

DAYS_PER_YEAR = 365.25
LOWEST, HIGHEST = -0.5, 1.0
MONTHS = 12


@dataclass(frozen=True)
class TrendIndex:
    """An index by year or by month, without gaps; get one from `read_trend_index`.

    Args:
        file: name of the file.
        sha256: its digest.
        name: heading of the column of values.
        months: months each value stands for: 12 for a yearly index, 1 for a monthly one.
        first: number of the first period, counted from the one that begins in January 1970.
        values: one value per period; shape (periods,).
        findings: what was noticed in the file.
    """

    file: str
    sha256: str
    name: str
    months: int
    first: int
    values: FloatArray
    findings: tuple[Finding, ...] = ()

    def __repr__(self) -> str:
        """One line: the file and its periods."""
        last = self.first + len(self.values) - 1
        return f"TrendIndex({self.file!r}, {self.period(self.first)} to {self.period(last)})"

    @property
    def rows(self) -> int:
        """Number of periods."""
        return len(self.values)

    def period(self, number: int) -> str:
        """Name of a period: "2024" or "2024-07"."""
        start = np.datetime64(int(number) * self.months, "M")
        return str(start)[: 4 if self.months == MONTHS else 7]

    def at(self, moments: DateArray) -> FloatArray:
        """Values of the periods that hold some moments; shape as given.

        Raises:
            InputError: a moment outside the table.
        """
        number = moments.astype("datetime64[M]").astype(np.int64) // self.months - self.first
        outside = (number < 0) | (number >= len(self.values))
        if outside.any():
            raise InputError(
                f"the index has no value for {int(np.unique(number[outside]).size)} of the periods needed",
                where=place(file=self.file, column=self.name),
                value=self._named(number[outside] + self.first),
                remedy="Add them: from the first loss, or the first year of the window, to the midpoint of"
                " the forecast period; a value to come is an assumption and has to be stated.",
            )
        return self.values[number]

    def _named(self, numbers: IntArray) -> list[str]:
        return [self.period(number) for number in np.unique(numbers)[:10].tolist()]


Trend = float | TrendIndex


def check_trend(trend: Trend) -> Trend:
    """Check a yearly rate of trend; an index was checked when it was read.

    Raises:
        InputError: not a number strictly between -50 % and +100 % a year.
    """
    if isinstance(trend, TrendIndex):
        return trend
    number = isinstance(trend, int | float | np.number) and not isinstance(trend, bool)
    if not number or not LOWEST < trend < HIGHEST:
        raise InputError(
            "the trend must be a rate per year between -0.5 and 1",
            value=trend,
            remedy="Write 0.04 for 4 % a year.",
        )
    return float(trend)


def midpoint(start: dt.date, end: dt.date) -> dt.datetime:
    """Midpoint of a period of whole days, both ends included: 2 July at noon for a year of 365 days.

    Raises:
        InputError: the end is before the start.
    """
    if end < start:
        raise InputError(
            "the period ends before it starts", value=(str(start), str(end)), remedy="Exchange the dates."
        )
    begins = dt.datetime.combine(start, dt.time())
    return begins + (dt.datetime.combine(end, dt.time()) + dt.timedelta(days=1) - begins) / 2


def trend_factor(date: DateArray, forecast_midpoint: dt.date, trend: Trend) -> FloatArray:
    """Factor from the money of each day to that of the forecast period.

    Args:
        date: days; shape (n,).
        forecast_midpoint: midpoint of the forecast period, a date (its first moment) or a date-time.
        trend: rate per year, or an index; 0 gives factors of exactly 1.

    Returns:
        Factors, shape (n,).

    Raises:
        InputError: a day, or the midpoint, outside the index.
    """
    moment = np.datetime64(forecast_midpoint).astype("datetime64[s]")
    if isinstance(trend, TrendIndex):
        # Both ends in one look, so that one message names every period that is missing.
        values = trend.at(np.append(date.astype("datetime64[s]"), moment))
        return np.asarray(values[-1] / values[:-1], dtype=np.float64)
    if trend == 0.0:
        return np.ones(len(date))
    days = (moment - date.astype("datetime64[s]")).astype(np.float64) / 86_400.0
    return np.asarray(np.power(1.0 + trend, days / DAYS_PER_YEAR), dtype=np.float64)


def describe_trend(trend: Trend, forecast_midpoint: dt.date) -> str:
    """The trend in words, for the log of steps."""
    if isinstance(trend, TrendIndex):
        moment = np.array([np.datetime64(forecast_midpoint).astype("datetime64[s]")])
        number = int(moment.astype("datetime64[M]").astype(np.int64)[0]) // trend.months
        return (
            f"index {trend.name!r} of {trend.file}: {float(trend.at(moment)[0]):g} of "
            f"{trend.period(number)}, the {'year' if trend.months == MONTHS else 'month'} of the midpoint "
            "of the forecast period, over that of each loss date"
        )
    return f"{trend:+.2%} a year from each loss date to the midpoint of the forecast period"
