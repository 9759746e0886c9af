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

from climarisk.climatology import Completeness, completeness
from climarisk.clock import LocalClock, in_window, local_clock
from climarisk.fields import Field
from climarisk.localtime import standard_offset_s, zone_info

#: Days to either side of a date whose hours stand for it.
HALF_WINDOW_DAYS = 15
_DAY_S, _HOUR_S = 86_400, 3600
_EPOCH_CLOCK = dt.datetime(1970, 1, 1)


@lru_cache(maxsize=256)
def date_array(dates: tuple[dt.date, ...]) -> np.ndarray:
    """Dates as an array of datetime64[D], shape (n_dates,), not to be written to.

    Parameters
    ----------
    dates : tuple of date
    """
    array = np.array(dates, "datetime64[D]")
    array.flags.writeable = False
    return array


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
    offsets = _offsets_by_day_s(zone, clock_s)
    for i in np.flatnonzero(np.isnan(offsets)):
        offsets[i] = _offset_s(zone, int(clock_s[i]))
    return clock_s - np.rint(offsets).astype(np.int64)


def skipped_s(zone: str, clock_s: np.ndarray) -> np.ndarray:
    """What clocks jump at legal local readings that they skip or show twice.

    Parameters
    ----------
    zone, clock_s
        As for `instants_s`.

    Returns
    -------
    ndarray of int64, shape (n,)
        Of a reading that does not exist, by how many seconds clocks go forward over it; of one
        that comes twice, by how many they go back, as a negative number; else 0.
    """
    jumps = np.zeros(len(clock_s), np.int64)
    for i in np.flatnonzero(np.isnan(_offsets_by_day_s(zone, clock_s))):
        first, second = (_offset_s(zone, int(clock_s[i]), fold) for fold in (0, 1))
        jumps[i] = round(second - first)
    return jumps


def _offsets_by_day_s(zone: str, clock_s: np.ndarray) -> np.ndarray:
    """Offset of each reading's day from UTC; NaN near a change."""
    days = np.floor_divide(clock_s, _DAY_S).tolist()
    return np.array([_offset_of_day_s(zone, day) for day in days], float)


@lru_cache(maxsize=100_000)
def _offset_of_day_s(zone: str, day: int) -> float:
    """Offset of a day's clock from UTC; NaN near a change."""
    around = {_offset_s(zone, (day + n) * _DAY_S) for n in (-1, 0, 1, 2)}
    return around.pop() if len(around) == 1 else np.nan


def _offset_s(zone: str, clock_s: int, fold: int = 0) -> float:
    """Offset of a clock reading from UTC: of two the earlier, in a gap the one before it.

    With `fold` 1 of two the later, in a gap the one after it (Python's `datetime`, PEP 495).
    """
    reading = _EPOCH_CLOCK + dt.timedelta(seconds=clock_s)
    offset = reading.replace(tzinfo=zone_info(zone), fold=fold).utcoffset()
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
    reading = _readings_s(dates, time) + shift_h * _HOUR_S
    utc_s = instants_s(zone, reading)
    offset_s = standard_offset_s(zone, utc_s)
    hours = (utc_s + offset_s + _HOUR_S // 2) // _HOUR_S
    # The one UTC hour whose local standard time rounds to this hour.
    grid = -((offset_s + _HOUR_S // 2 - hours * _HOUR_S) // _HOUR_S)
    return StandardHours((hours // 24).astype("datetime64[D]"), hours % 24, grid)


def _readings_s(dates: np.ndarray, time: dt.time) -> np.ndarray:
    return dates.astype("int64") * _DAY_S + time.hour * _HOUR_S + time.minute * 60


def odd_readings(zone: str, dates: np.ndarray, time: dt.time) -> list[str]:
    """What to know of a clock time on the dates on which clocks skip it or show it twice.

    Parameters
    ----------
    zone : str
        IANA name.
    dates : ndarray of datetime64[D], shape (n_dates,)
    time : time
    """
    jumps = skipped_s(zone, _readings_s(dates, time))
    notes = []
    for jump in np.unique(jumps[jumps != 0]).tolist():
        on = f"on {', '.join(dates[jumps == jump].astype(str))}"
        if jump < 0:
            notes.append(f"{time:%H:%M} comes twice {on}; the first is taken")
        else:
            later = "an hour" if jump == _HOUR_S else f"{jump // 60} minutes"
            notes.append(f"{time:%H:%M} does not exist {on}; the reading {later} later is taken")
    return notes


def is_skipped(zone: str, dates: np.ndarray, time: dt.time, shift_h: int = 0) -> bool:
    """Whether clocks skip a time, or the reading so many hours later, on any of some dates."""
    readings = _readings_s(dates, time) + shift_h * _HOUR_S
    return bool((skipped_s(zone, readings) > 0).any())


def inside_window(window: str | tuple[int, int], field: Field, when: StandardHours) -> np.ndarray:
    """Which hours lie inside a study's hours window, shape (n_dates,), bool."""
    years = when.date.astype("datetime64[Y]").astype(int) + 1970
    clock = local_clock(field, when.grid, int(years.min()), int(years.max()))
    return in_window(window, field, when.grid, clock)


@dataclass(frozen=True)
class Record:
    """The hours of a field's record that enter figures, by hour of the day.

    Those that have a value and belong to a (year, month, hour) cell that counts
    (`climarisk.climatology.completeness`), as in the hourly tables.

    Parameters
    ----------
    clock : LocalClock
    known : ndarray of int, shape (n_known,)
        Hours that have a value: places on the grid, within the period, rising.
    """

    clock: LocalClock
    known: np.ndarray

    @cached_property
    def complete(self) -> Completeness:
        """Which cells count, and which hours enter."""
        on_grid = np.zeros(len(self.clock.hour), bool)
        on_grid[self.known] = True
        return completeness(on_grid, self.clock)

    @cached_property
    def by_hour(self) -> tuple[np.ndarray, ...]:
        """Places in `known` of the hours that enter, by hour of the day in order of time."""
        hour = np.where(self.complete.used[self.known], self.clock.hour[self.known], -1)
        return tuple(np.flatnonzero(hour == h) for h in range(24))

    @cached_property
    def day(self) -> np.ndarray:
        """Day of each known hour, counted from the first of the period."""
        return self.clock.day[self.known]

    @cached_property
    def before(self) -> np.ndarray:
        """Hours that enter, at each hour of the day, before each day; (24, n_days + 1)."""
        counts = np.zeros((24, self.n_days + 1), int)
        for h, places in enumerate(self.by_hour):
            counts[h, 1:] = np.cumsum(np.bincount(self.day[places], minlength=self.n_days))
        return counts

    @cached_property
    def counting_before(self) -> np.ndarray:
        """Days before each day whose cell counts, by hour of the day, shape (24, n_days + 1)."""
        months = self.complete.counts.reshape(-1, 24)
        days = np.repeat(months, self.clock.days_in_month.reshape(-1), axis=0)
        return np.concatenate([np.zeros((24, 1), int), np.cumsum(days.T, axis=1)], axis=1)

    def has_figures(self, date: np.ndarray, hour: np.ndarray) -> np.ndarray:
        """Whether the (month, hour) cells of some dates and hours have figures: a year counts."""
        month = date.astype("datetime64[M]").astype(int) % 12
        return self.complete.counts.max(axis=0)[month, hour]

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
        Each window as a range of `places`, the end not included; empty where no hour of the
        year enters, or the date has no figures.
    weight : ndarray, shape (n,)
        How much each hour counts when every date with figures counts the same.
    counting : ndarray, shape (n_dates, n_years)
        Share of the window's days within the period whose cell counts; 0 where the date has no
        figures.
    """

    places: np.ndarray
    first: np.ndarray
    last: np.ndarray
    weight: np.ndarray
    counting: np.ndarray

    @property
    def total(self) -> np.ndarray:
        """Hours of each date and year, shape (n_dates, n_years)."""
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
        the year of the day in its middle.

    Notes
    -----
    An hour enters when its own (year, month, hour) cell counts, and a year takes part with the
    hours it has, so that months known from different years serve the dates between them.  A
    date has figures when its own (month, hour) cell has: when some year counts for it.  At
    least 16 of a window's 31 days lie in the month of the date, and a month that counts misses
    at most 6 days.
    """
    centre = record.centres(when.date)
    ends = np.clip([centre - HALF_WINDOW_DAYS, centre + HALF_WINDOW_DAYS + 1], 0, record.n_days)
    hour, known = when.hour[:, None], record.has_figures(when.date, when.hour)[:, None]
    first, last = np.where(known, record.before[hour, ends], 0)
    counting = np.diff(record.counting_before[hour, ends], axis=0)[0] / np.diff(ends, axis=0)[0]
    places, weight = _compacted(record, when.hour, first, last)
    return Windows(places, first, last, weight, counting * known)


def _compacted(
    record: Record, hours: np.ndarray, first: np.ndarray, last: np.ndarray
) -> tuple[np.ndarray, np.ndarray]:
    """The hours in any window, each once, with their weight; the ranges made ranges of these.

    Parameters
    ----------
    record : Record
    hours : ndarray of int, shape (n_dates,)
    first, last : ndarray of int, shape (n_dates, n_years)
        Ranges of `Record.by_hour`; written over.
    """
    totals = (last - first).sum(axis=1)
    each = totals[totals > 0]
    # Whole numbers where all dates have as many hours, so that no rounding decides a tie.
    share = np.ones(len(totals)) if len(set(each.tolist())) <= 1 else 1.0 / np.maximum(totals, 1)
    parts, weights, offset = [], [], 0
    for h in np.unique(hours):
        at = hours == h
        kept = first[at] < last[at]
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
    return np.concatenate(parts), np.concatenate(weights)


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
