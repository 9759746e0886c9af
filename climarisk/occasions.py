"""When flights happen: clock readings as hours of local standard time, and the record around them.

References
----------
Rules of daylight saving: IANA Time Zone Database, read through `zoneinfo`.
"""

from __future__ import annotations

import datetime as dt
from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property, lru_cache

import numpy as np

from climarisk.clock import LocalClock, in_window, local_clock
from climarisk.fields import Field
from climarisk.localtime import standard_offset_s, zone_info
from climarisk.rules import DAYS

#: Days to either side of a date whose hours stand for it.
HALF_WINDOW_DAYS = 15
_WINDOW_DAYS = 2 * HALF_WINDOW_DAYS + 1
_DAY_S, _HOUR_S = 86_400, 3600
_EPOCH_CLOCK = dt.datetime(1970, 1, 1)


def instants_s(zone: str, clock_s: np.ndarray) -> np.ndarray:
    """UTC instants of legal local clock readings, daylight saving included.

    Parameters
    ----------
    zone : str
        IANA name.
    clock_s : ndarray of int64, shape (n,)
        The readings as if they were UTC, seconds since 1970-01-01.

    Returns
    -------
    ndarray of int64, shape (n,)
        Seconds since 1970-01-01 UTC.  Of a reading that comes twice, when clocks go back, the
        first; one that does not exist, when they go forward, is read with the offset before
        the change: 02:30 is the instant that clocks call 03:30.
    """
    days = np.floor_divide(clock_s, _DAY_S)
    offsets = np.array([_offset_of_day_s(zone, int(day)) for day in days], float)
    for i in np.flatnonzero(np.isnan(offsets)):
        offsets[i] = _offset_s(zone, int(clock_s[i]))
    return clock_s - np.rint(offsets).astype(np.int64)


@lru_cache(maxsize=100_000)
def _offset_of_day_s(zone: str, day: int) -> float:
    """Offset of a day's clock from UTC; NaN near a change."""
    around = {_offset_s(zone, (day + n) * _DAY_S) for n in (-1, 0, 1, 2)}
    return around.pop() if len(around) == 1 else np.nan


def _offset_s(zone: str, clock_s: int) -> float:
    """Offset of a clock reading from UTC: of two the earlier, in a gap the one before it."""
    reading = _EPOCH_CLOCK + dt.timedelta(seconds=clock_s)
    offset = reading.replace(tzinfo=zone_info(zone), fold=0).utcoffset()
    assert offset is not None  # of an aware time
    return offset.total_seconds()


@dataclass(frozen=True)
class StandardHours:
    """Hours of local standard time that clock readings fall into; arrays of shape (n_dates,).

    Parameters
    ----------
    date : ndarray of datetime64[D]
        Of the hour: near midnight it may be the day before or after that of the reading.
    hour : ndarray of int
        0-23, the nearest full hour, half past rounded up as in `climarisk.clock`.
    grid : ndarray of int64
        The UTC hour since 1970 that the hour stands for on a study's grid.
    """

    date: np.ndarray
    hour: np.ndarray
    grid: np.ndarray


def standard_hours(zone: str, dates: np.ndarray, time: dt.time, shift_h: int = 0) -> StandardHours:
    """The hours of local standard time of the same clock time on some dates.

    Parameters
    ----------
    zone : str
        IANA name.
    dates : ndarray of datetime64[D], shape (n_dates,)
    time : time
    shift_h : int
        Hours added to the clock reading, across midnight where it comes to that.
    """
    reading = dates.astype("int64") * _DAY_S + (time.hour + shift_h) * _HOUR_S + time.minute * 60
    utc_s = instants_s(zone, reading)
    offset_s = standard_offset_s(zone, utc_s)
    hours = (utc_s + offset_s + _HOUR_S // 2) // _HOUR_S
    # The one UTC hour whose local standard time rounds to this hour.
    grid = -((offset_s + _HOUR_S // 2 - hours * _HOUR_S) // _HOUR_S)
    return StandardHours((hours // 24).astype("datetime64[D]"), hours % 24, grid)


def inside_window(window: str | tuple[int, int], field: Field, when: StandardHours) -> np.ndarray:
    """Which hours lie inside a study's hours window, shape (n_dates,), bool."""
    years = when.date.astype("datetime64[Y]").astype(int) + 1970
    clock = local_clock(field, when.grid, int(years.min()), int(years.max()))
    return in_window(window, field, when.grid, clock)


@dataclass(frozen=True)
class Record:
    """The hours of a field's record that have a value, by hour of the day.

    Parameters
    ----------
    clock : LocalClock
    known : ndarray of int, shape (n_known,)
        Places on the grid, within the period, rising.
    """

    clock: LocalClock
    known: np.ndarray

    @cached_property
    def by_hour(self) -> tuple[np.ndarray, ...]:
        """Places in `known` of each local standard hour of the day, in order of time."""
        hour = self.clock.hour[self.known]
        return tuple(np.flatnonzero(hour == h) for h in range(24))

    @cached_property
    def day(self) -> np.ndarray:
        """Day of each known hour, counted from the first of the period."""
        return self.clock.day[self.known]

    @cached_property
    def before(self) -> np.ndarray:
        """Known hours at each hour of the day before each day, shape (24, n_days + 1)."""
        counts = np.zeros((24, self.n_days + 1), int)
        for h, places in enumerate(self.by_hour):
            counts[h, 1:] = np.cumsum(np.bincount(self.day[places], minlength=self.n_days))
        return counts

    @cached_property
    def n_days(self) -> int:
        """Days of the period."""
        return int(self._month_lengths.sum())

    @cached_property
    def _month_lengths(self) -> np.ndarray:
        """Days of each month of the period, shape (12, n_years)."""
        return self.clock.days_in_month.T

    @cached_property
    def _month_starts(self) -> np.ndarray:
        """Day on which each month of the period begins, shape (12, n_years)."""
        in_order = self._month_lengths.T.reshape(-1)
        return (np.cumsum(in_order) - in_order).reshape(-1, 12).T

    def centres(self, date: np.ndarray) -> np.ndarray:
        """The day of each date's month and day in every year of the record.

        29 February is 28 February in a year without one.

        Parameters
        ----------
        date : ndarray of datetime64[D], shape (n_dates,)

        Returns
        -------
        ndarray of int, shape (n_dates, n_years)
        """
        months = date.astype("datetime64[M]")
        month = months.astype(int) % 12
        day = (date - months).astype(int)[:, None]
        return self._month_starts[month] + np.minimum(day, self._month_lengths[month] - 1)


@dataclass(frozen=True)
class Windows:
    """The hours of the record that stand for some dates and hours of the day.

    Parameters
    ----------
    places : ndarray of int, shape (n,)
        Places in `Record.known` of the hours that enter any window, each once.
    first, last : ndarray of int, shape (n_dates, n_years)
        Each window as a range of `places`, the end not included; empty where the year does
        not count.
    weight : ndarray, shape (n,)
        How much each hour counts when every date with figures counts the same.
    """

    places: np.ndarray
    first: np.ndarray
    last: np.ndarray
    weight: np.ndarray

    @property
    def total(self) -> np.ndarray:
        """Hours of each date and year, shape (n_dates, n_years); 0 where it does not count."""
        return self.last - self.first

    @cached_property
    def of_date(self) -> np.ndarray:
        """Hours of each date in all years, shape (n_dates,); 0: the date has no figures."""
        return self.total.sum(axis=1)

    @cached_property
    def per_hour(self) -> np.ndarray:
        """One over `of_date`; 0 for a date without figures."""
        return np.where(self.of_date > 0, 1.0 / np.maximum(self.of_date, 1), 0.0)

    def sums(self, values: np.ndarray) -> np.ndarray:
        """Sums over each window.

        Parameters
        ----------
        values : ndarray, shape (n_levels, n)

        Returns
        -------
        ndarray of int, shape (n_dates, n_years, n_levels)
        """
        running = np.zeros((values.shape[1] + 1, len(values)), np.int32)
        np.cumsum(values.T, axis=0, out=running[1:])
        return running[self.last] - running[self.first]


def windows(record: Record, when: StandardHours) -> Windows:
    """The hours of the record that stand for some dates and hours of the day.

    Parameters
    ----------
    record : Record
    when : StandardHours

    Returns
    -------
    Windows
        Of each date, in each year of the record, the hours at its hour of the day on the 31
        days around its month and day, across the ends of months and years; a window belongs to
        the year of the day in its middle.  A year counts for a date when at least
        `rules.DAYS.share_of_days` of the window's hours have a value.
    """
    centre = record.centres(when.date)
    ends = np.clip([centre - HALF_WINDOW_DAYS, centre + HALF_WINDOW_DAYS + 1], 0, record.n_days)
    first, last = record.before[when.hour[:, None], ends]
    counts = last - first >= DAYS.share_of_days * _WINDOW_DAYS
    first, last = np.where(counts, first, 0), np.where(counts, last, 0)
    totals = (last - first).sum(axis=1)
    each = totals[totals > 0]
    # Whole numbers where all dates have as many hours, so that no rounding decides a tie.
    share = np.ones(len(totals)) if len(set(each.tolist())) <= 1 else 1.0 / np.maximum(totals, 1)
    parts, weights, offset = [], [], 0
    for h in np.unique(when.hour):
        at = when.hour == h
        kept = counts[at]
        n = len(record.by_hour[h])
        times = _times(first[at][kept], last[at][kept], n)
        used = times > 0
        parts.append(record.by_hour[h][used])
        by_date = np.broadcast_to(share[at][:, None], kept.shape)[kept]
        weights.append(_times(first[at][kept], last[at][kept], n, by_date)[used])
        position = np.concatenate(([0], np.cumsum(used))) + offset
        first[at] = np.where(kept, position[first[at]], 0)
        last[at] = np.where(kept, position[last[at]], 0)
        offset += int(used.sum())
    return Windows(np.concatenate(parts), first, last, np.concatenate(weights))


def _times(
    first: np.ndarray, last: np.ndarray, n: int, weight: np.ndarray | None = None
) -> np.ndarray:
    """How often, or with how much weight, each of n hours lies in some ranges."""
    steps = np.bincount(first, weight, n + 1) - np.bincount(last, weight, n + 1)
    return np.cumsum(steps)[:n]


def hours_text(hours: Sequence[int] | np.ndarray) -> str:
    """Hours of the day as ranges, such as ``06-10 18``."""
    wanted = sorted({int(h) for h in hours})
    starts = [h for h in wanted if h - 1 not in wanted]
    ends = [h for h in wanted if h + 1 not in wanted]
    return " ".join(
        f"{a:02d}" if a == b else f"{a:02d}-{b:02d}" for a, b in zip(starts, ends, strict=True)
    )
