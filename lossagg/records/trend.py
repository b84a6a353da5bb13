"""Trend: amounts of the past in the money of the forecast period.

An amount of day d is worth amount * (1 + rate)**((m - d) / 365.25) at the midpoint m of the forecast
period, with days counted exactly (ASOP 13 section 3 asks for the periods and the index to be stated). The
same index carries reporting thresholds, or truncation would be misjudged in every year but the last.
"""

from __future__ import annotations

import datetime as dt

import numpy as np

from lossagg.arrays import FloatArray
from lossagg.errors import InputError
from lossagg.records.dates import DateArray

DAYS_PER_YEAR = 365.25
LOWEST, HIGHEST = -0.5, 1.0


def check_trend(trend: float) -> float:
    """Check a yearly rate of trend.

    Raises:
        InputError: not a number strictly between -50 % and +100 % a year.
    """
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


def trend_factor(date: DateArray, forecast_midpoint: dt.date, trend: float) -> FloatArray:
    """Factor from the money of each day to that of the forecast period.

    Args:
        date: days; shape (n,).
        forecast_midpoint: midpoint of the forecast period, a date (its first moment) or a date-time.
        trend: rate per year; 0 gives factors of exactly 1.

    Returns:
        Factors, shape (n,).
    """
    moment = np.datetime64(forecast_midpoint).astype("datetime64[s]")
    days = (moment - date.astype("datetime64[s]")).astype(np.float64) / 86_400.0
    return np.asarray(np.power(1.0 + trend, days / DAYS_PER_YEAR), dtype=np.float64)
