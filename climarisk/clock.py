"""Local standard time on the study's grid of UTC hours."""

from __future__ import annotations

import calendar
import datetime as dt
from dataclasses import dataclass

import numpy as np

from climarisk.daylight import is_civil_daylight
from climarisk.fields import Field
from climarisk.localtime import standard_offset_s

_HOUR_S = 3600
#: Hours kept before and after the period: any zone's offset, and 12 h for the mean temperature.
_MARGIN_H = 36


def hour_grid(first_year: int, last_year: int) -> np.ndarray:
    """UTC hours of a period with a margin, as hours since 1970.

    Parameters
    ----------
    first_year, last_year : int
        Inclusive.

    Returns
    -------
    ndarray of int64, shape (n_hours,)
        Consecutive full hours.
    """
    epoch = dt.date(1970, 1, 1)
    first = (dt.date(first_year, 1, 1) - epoch).days * 24 - _MARGIN_H
    last = (dt.date(last_year + 1, 1, 1) - epoch).days * 24 + _MARGIN_H
    return np.arange(first, last, dtype=np.int64)


@dataclass(frozen=True)
class LocalClock:
    """Local standard time of each hour of the grid at one field.

    Parameters
    ----------
    first_year, n_years : int
        The period.
    year, month, day, hour : ndarray of int, shape (n_hours,)
        ``year`` counts from 0 at `first_year`; ``month`` 0-11; ``day`` counts days from the
        first of the period; ``hour`` 0-23, the nearest full hour, half past rounded up.
    day_of_month : ndarray of int, shape (n_hours,)
    in_period : ndarray of bool, shape (n_hours,)
    """

    first_year: int
    n_years: int
    year: np.ndarray
    month: np.ndarray
    day: np.ndarray
    hour: np.ndarray
    day_of_month: np.ndarray
    in_period: np.ndarray

    @property
    def days_in_month(self) -> np.ndarray:
        """Days of each calendar month of the period, shape (n_years, 12)."""
        return np.array(
            [
                [calendar.monthrange(self.first_year + y, m)[1] for m in range(1, 13)]
                for y in range(self.n_years)
            ]
        )

    @property
    def year_month_hour(self) -> np.ndarray:
        """Running number of each hour's (year, month, hour) cell; meaningless outside."""
        return (self.year * 12 + self.month) * 24 + self.hour

    @property
    def month_hour(self) -> np.ndarray:
        """Running number of each hour's (month, hour) cell, 0-287."""
        return self.month * 24 + self.hour


def local_clock(field: Field, grid: np.ndarray, first_year: int, last_year: int) -> LocalClock:
    """Local standard time at a field.

    Parameters
    ----------
    field : Field
    grid : ndarray of int64, shape (n_hours,)
        UTC hours since 1970.
    first_year, last_year : int
        Inclusive.
    """
    offset_s = standard_offset_s(field.timezone, grid * _HOUR_S)
    local_hour = (grid * _HOUR_S + offset_s + _HOUR_S // 2) // _HOUR_S
    days = local_hour.astype("int64") // 24
    date = days.astype("datetime64[D]")
    months = date.astype("datetime64[M]").astype(np.int64)
    year = months // 12 + 1970 - first_year
    start = (dt.date(first_year, 1, 1) - dt.date(1970, 1, 1)).days
    n_years = last_year - first_year + 1
    return LocalClock(
        first_year,
        n_years,
        year,
        months % 12,
        days - start,
        local_hour % 24,
        (date - date.astype("datetime64[M]")).astype(np.int64) + 1,
        (year >= 0) & (year < n_years),
    )


def in_window(
    window: str | tuple[int, int], field: Field, grid: np.ndarray, clock: LocalClock
) -> np.ndarray:
    """Which hours are inside the hours window, as a boolean array of shape (n_hours,).

    ``"all"``; ``"daylight"``: the sun's centre is no more than 6 degrees below the horizon
    at that hour (civil twilight); a pair: full local standard hours, both ends included,
    across midnight if the second is smaller.
    """
    if window == "all":
        return np.ones(len(grid), bool)
    if window == "daylight":
        return is_civil_daylight(grid * _HOUR_S, field.latitude, field.longitude)
    first, last = (int(h) for h in window)
    if first <= last:
        return (clock.hour >= first) & (clock.hour <= last)
    return (clock.hour >= first) | (clock.hour <= last)
