"""When a field works for an aircraft: hours of the day, usable daylight, days with a run."""

from __future__ import annotations

import calendar
import datetime as dt
from collections.abc import Sequence
from functools import lru_cache

import numpy as np
import pandas as pd

from climarisk.climatology import window_cells, window_coverage
from climarisk.clock import LocalClock
from climarisk.localtime import standard_offset_s, zone_info
from climarisk.risk import Hours, complete_hours, shortfall_by_cell
from climarisk.scene import Scene
from climarisk.study import Planning

_HOUR_S = 3600
_HALF_DAY_MIN = 12 * 60


def window_table(
    scene: Scene, hours: Hours, hourly: pd.DataFrame, planning: Planning
) -> pd.DataFrame:
    """When a field works for an aircraft, month by month.

    Parameters
    ----------
    scene : Scene
    hours : Hours
        Of the aircraft at the scene's field.
    hourly : DataFrame, shape (288, ...)
        Of the same hours, as `climarisk.risk.risk_tables` returns it.
    planning : Planning

    Returns
    -------
    DataFrame, shape (12, 19)
        ``month`` and the columns of `climarisk.results.WINDOWS_MONTHLY_COLUMNS` after it.

    Notes
    -----
    An hour of the day is usable where its shortfall share is below the target; hours are those of
    the hours window, in the order of a day that begins after the hours the window holds least
    often, so that a window across midnight stays whole.  Clock times are those of the planning
    year; where the clocks change within the month both are told, earlier days first.

    Daylight hours and the usable ones among them are those of civil daylight, whatever the hours
    window; hours without a value are taken to fall short as often as those with one.
    """
    start = day_start(scene.inside, scene.clock)
    table = _hours_of_day(hourly, start, planning.target)
    for name in ("first", "last"):
        table[f"clock_{name}"] = [
            "" if pd.isna(hour) else clock_text(scene.field.timezone, planning.year, month, hour)
            for month, hour in zip(table["month"], table[f"{name}_hour"], strict=True)
        ]
    table["clock_hours"] = [
        clock_ranges(scene.field.timezone, planning.year, month, text)
        for month, text in zip(table["month"], table["hours"], strict=True)
    ]
    table["target"] = planning.target
    table["run_hours"] = planning.consecutive_hours
    table["days_with_run"] = days_with_run(hours, planning.consecutive_hours)
    return table.join(_daylight(scene, hours))


def day_start(inside: np.ndarray, clock: LocalClock) -> int:
    """The hour of local standard time at which a day of the hours window begins.

    Parameters
    ----------
    inside : ndarray of bool, shape (n_hours,)
        The hours window.
    clock : LocalClock

    Returns
    -------
    int
        The hour after the longest spell of the hours that the window holds least often in the
        period: 20 for a window from 20 to 4, the early morning for daylight; 0 where the window
        holds every hour equally often.
    """
    held = np.bincount(clock.hour[inside & clock.in_period], minlength=24)
    least = held == held.min()
    if least.all():
        return 0
    spell = [_spell_before(least, hour) for hour in range(24)]
    return int(np.argmax(spell))


def _spell_before(least: np.ndarray, hour: int) -> int:
    """How many hours of the day just before an hour are among the least held; 0 at one of them."""
    if least[hour]:
        return 0
    return int(np.argmin(least[(hour - 1 - np.arange(24)) % 24]))


# Hours of the day


def _hours_of_day(hourly: pd.DataFrame, start: int, target: float) -> pd.DataFrame:
    """The usable hours of the day of each month, from the month x hour shares."""
    order = (start + np.arange(24)) % 24
    share = hourly["shortfall"].to_numpy().reshape(12, 24)[:, order]
    inside = hourly["in_window"].to_numpy().reshape(12, 24)[:, order] > 0.0
    known = inside & np.isfinite(share)
    usable = known & (np.where(known, share, 1.0) < target)
    rows = []
    for month in range(12):
        found = order[usable[month]].tolist()
        any_known = bool(known[month].any())
        rows.append(
            {
                "month": month + 1,
                "hours": hour_ranges(found),
                "n_clock_hours": len(found) if any_known else pd.NA,
                "first_hour": found[0] if found else pd.NA,
                "last_hour": found[-1] if found else pd.NA,
                "hours_without_figures": int((inside[month] & ~known[month]).sum()),
            }
        )
    whole = dict.fromkeys(("n_clock_hours", "first_hour", "last_hour"), "Int64")
    return pd.DataFrame(rows).astype(whole)


def hour_ranges(hours: Sequence[int]) -> str:
    """Hours of the day in their order as ranges, across midnight too: ``06-10 18-20``, ``22-03``.

    Parameters
    ----------
    hours : sequence of int
        0-23, each once.
    """
    parts: list[list[int]] = []
    for hour in hours:
        if parts and hour == (parts[-1][-1] + 1) % 24:
            parts[-1].append(hour)
        else:
            parts.append([hour])
    return " ".join(f"{p[0]:02d}" if len(p) == 1 else f"{p[0]:02d}-{p[-1]:02d}" for p in parts)


@lru_cache(maxsize=4096)
def clock_text(zone: str, year: int, month: int, hour: int) -> str:
    """What the civil clock shows at a full hour of local standard time.

    Parameters
    ----------
    zone : str
        IANA name.
    year : int
    month : int
        1-12.
    hour : int
        0-23, local standard time.

    Returns
    -------
    str
        ``HH:MM``; where the days of the month differ each reading once, in the order in which
        they come: ``06:00 / 07:00``.

    Raises
    ------
    InputError
        There is no zone of this name.

    Examples
    --------
    >>> clock_text("Europe/Paris", 2027, 3, 6)
    '06:00 / 07:00'
    """
    first = dt.datetime(year, month, 1, hour, tzinfo=dt.UTC).timestamp()
    days = calendar.monthrange(year, month)[1]
    local_s = int(first) + 24 * _HOUR_S * np.arange(days)
    instants = local_s - standard_offset_s(zone, local_s)
    # Once more, by the offset of the day it is in Greenwich: it counts where the standard changes.
    instants = local_s - standard_offset_s(zone, instants)
    info = zone_info(zone)
    shown = (dt.datetime.fromtimestamp(int(t), info).strftime("%H:%M") for t in instants)
    return " / ".join(dict.fromkeys(shown))


def clock_ranges(zone: str, year: int, month: int, ranges: str) -> str:
    """Ranges of hours of local standard time by the civil clock.

    Parameters
    ----------
    zone : str
        IANA name.
    year, month : int
    ranges : str
        As `hour_ranges` gives them.

    Returns
    -------
    str
        Every range as ``HH:MM-HH:MM``; where the clocks change within the month, the ranges of
        the earlier days, a slash, and those of the later days.

    Examples
    --------
    >>> clock_ranges("Europe/Paris", 2027, 7, "04-12 18-20")
    '05:00-13:00 19:00-21:00'
    >>> clock_ranges("Europe/Paris", 2027, 3, "06-17")
    '06:00-17:00 / 07:00-18:00'
    """
    parts = [[int(hour) for hour in text.split("-")] for text in ranges.split()]
    # A change on the first or last day of the month is seen by some hours of the day only.
    ahead = sorted((_ahead_min(zone, year, month, h) for part in parts for h in part), key=len)
    shown = []
    for minutes in ahead[-1] if ahead else ():
        ends = ["-".join(_clock(hour * 60 + minutes) for hour in part) for part in parts]
        shown.append(" ".join(ends))
    return " / ".join(shown)


def _ahead_min(zone: str, year: int, month: int, hour: int) -> list[int]:
    """Minutes by which the civil clock is ahead at an hour of the day, earlier days first."""
    readings = (text.split(":") for text in clock_text(zone, year, month, hour).split(" / "))
    ahead = (int(h) * 60 + int(m) - hour * 60 for h, m in readings)
    return [(minutes + _HALF_DAY_MIN) % (2 * _HALF_DAY_MIN) - _HALF_DAY_MIN for minutes in ahead]


def _clock(minutes: int) -> str:
    return f"{minutes // 60 % 24:02d}:{minutes % 60:02d}"


# Days with a run of usable hours


def days_with_run(hours: Hours, run_hours: int) -> np.ndarray:
    """Share of the days of each month that have enough usable hours in a row.

    Parameters
    ----------
    hours : Hours
    run_hours : int
        Hours in a row asked for, 1-24.

    Returns
    -------
    ndarray, shape (12,)
        0-1; NaN where no day counts, and where the window has hours but none with a value.

    Notes
    -----
    Hours in a row are consecutive hours of local standard time inside the hours window of one
    day; a day begins as `day_start` says and belongs to the month in which it begins.  An hour
    that falls short, or has no value by the completeness rule, breaks a run.

    A day counts when as many hours in a row as are asked for have a value; a day whose window
    is shorter than that counts when all of it has values, as a day without the run.  Every other
    day is unknown and counts neither way: a record of every third hour knows no runs.

    The share is the mean over the levels of the transfer error, which a day's hours have in common.
    """
    clock = hours.clock
    start = day_start(hours.inside, clock)
    within = clock.in_period & hours.inside
    day = clock.day - (clock.hour < start)
    n_days = int(clock.days_in_month.sum())
    within &= (day >= 0) & (day < n_days)
    place = day * 24 + (clock.hour - start) % 24

    def by_day(places: np.ndarray) -> np.ndarray:
        table = np.zeros(n_days * 24, bool)
        table[place[places]] = True
        return table.reshape(n_days, 24)

    used = complete_hours(hours).used & within
    offered, seen = longest_run(by_day(np.flatnonzero(within))), by_day(np.flatnonzero(used))
    counts = longest_run(seen) >= np.minimum(offered, run_hours)
    month = np.repeat(np.tile(np.arange(12), clock.n_years), clock.days_in_month.reshape(-1))
    pooled = used[hours.known]
    runs = [
        longest_run(by_day(hours.known[pooled & ~m.shortfall])) >= run_hours
        for m in hours.levels or (hours.central,)
    ]
    found = np.mean([np.bincount(month, counts & run, 12) for run in runs], axis=0)
    days = np.bincount(month, counts, 12)
    silent = (np.bincount(month, offered > 0, 12) > 0) & (
        np.bincount(month, seen.any(axis=1), 12) == 0
    )
    return found / np.where((days > 0) & ~silent, days, np.nan)


def longest_run(flags: np.ndarray) -> np.ndarray:
    """Length of the longest run of true values in each row.

    Parameters
    ----------
    flags : ndarray of bool, shape (n, width)

    Returns
    -------
    ndarray of int, shape (n,)
    """
    run, longest = np.zeros((2, len(flags)), np.int64)
    for column in flags.T:
        run = (run + 1) * column
        longest = np.maximum(longest, run)
    return longest


# Usable daylight


def _daylight(scene: Scene, hours: Hours) -> pd.DataFrame:
    """Daylight hours of each month and those of them that do not fall short."""
    clock, light, known = scene.clock, scene.daylight, hours.known
    complete = complete_hours(hours)
    shares = shortfall_by_cell(hours, (complete.used & light)[known], clock.month[known], 12)
    lit = np.bincount(clock.month[light & clock.in_period], minlength=12) / clock.n_years
    return pd.DataFrame(
        {
            "daylight_hours": lit,
            "usable_hours": lit * (1.0 - shares["shortfall"]),
            "usable_low": lit * (1.0 - shares["ci_high"]),
            "usable_high": lit * (1.0 - shares["ci_low"]),
            "n_years": shares["n_years"],
            "coverage": window_coverage(complete.counts, window_cells(light, clock)),
            "interval_note": shares["interval_note"],
        }
    )
