"""When a field works: hours of the day, civil clock, usable daylight, days with a run."""

from __future__ import annotations

import datetime as dt
from calendar import monthrange
from dataclasses import replace
from itertools import pairwise
from types import SimpleNamespace
from zoneinfo import ZoneInfo

import numpy as np
import pytest

from climarisk.clock import hour_grid, in_window, local_clock
from climarisk.fields import Field
from climarisk.performance import CHECKS, Margins
from climarisk.results import WINDOWS_MONTHLY_COLUMNS
from climarisk.risk import Hours, risk_tables
from climarisk.seasons import Season
from climarisk.study import Planning
from climarisk.windows import (
    clock_ranges,
    clock_text,
    day_start,
    days_with_run,
    hour_ranges,
    window_table,
)

YEAR = frozenset((m, d) for m in range(1, 13) for d in range(1, monthrange(2020, m)[1] + 1))
ALL_YEAR = Season("year", YEAR)
LEVELS = (-0.15, -0.04, 0.04, 0.15)


def place(latitude=46.5, longitude=7.5, zone="Europe/Zurich"):
    return Field("F", "Field", latitude, longitude, 500.0, zone)


def margins_of(margin):
    checks = np.full((len(CHECKS), len(margin)), np.inf, np.float32)
    checks[0] = margin
    return Margins(margin, margin < 0, margin < -9, np.zeros(len(margin), np.int8), checks)


def case(window, margin, years=(2018, 2020), field=None, levels=()):
    """Return a scene and its hours; `margin` tells the margins on the grid of a clock."""
    field = field or place()
    grid = hour_grid(*years)
    clock = local_clock(field, grid, *years)
    values = margin(clock)
    known = np.flatnonzero(np.isfinite(values) & clock.in_period)
    inside = in_window(window, field, grid, clock)
    light = in_window("daylight", field, grid, clock)
    moved = [margins_of(values[known] + level) for level in levels]
    hours = Hours(clock, known, margins_of(values[known]), inside, 0.9, moved, 0.4)
    return SimpleNamespace(field=field, clock=clock, inside=inside, daylight=light), hours


def table_of(scene, hours, planning=None):
    monthly, hourly, _ = risk_tables(hours, [ALL_YEAR])
    return window_table(scene, hours, hourly, planning or Planning(target=0.2)), monthly, hourly


def weather(clock):
    """Return margins, short on warm afternoons, with gaps, an hour never reported, a cut July."""
    draw = np.random.default_rng(3)
    heat = np.cos((clock.hour - 15) / 24 * 2 * np.pi) - np.cos((clock.month - 0.5) / 6 * np.pi)
    margin = 0.5 - 0.35 * heat + draw.normal(0, 0.2, len(heat))
    margin[draw.random(len(margin)) < 0.03] = np.nan
    margin[clock.hour == 9] = np.nan
    margin[(clock.year == 1) & (clock.month == 6) & (clock.day_of_month > 15)] = np.nan
    return margin


def nothing(clock):
    return np.full(len(clock.hour), np.nan)


WINDOWS = {"daylight": 0, "all": 0, (6, 20): 6, (20, 4): 20, (9, 9): 9}


# ---- hours of the day ------------------------------------------------------------------------


@pytest.mark.parametrize("window", WINDOWS)
def test_hours_of_the_day_are_those_below_the_target_in_the_order_of_the_window(window):
    table, _, hourly = table_of(*case(window, weather))
    shares = {(r.month, r.hour): r for r in hourly.itertuples()}
    some = set()
    for row in table.itertuples():
        found, silent, known = [], 0, 0
        for step in range(24):
            hour = (WINDOWS[window] + step) % 24
            cell = shares[row.month, hour]
            if cell.in_window == 0.0:
                continue
            if np.isnan(cell.shortfall):
                silent += 1
                continue
            known += 1
            if cell.shortfall < 0.2:
                found.append(hour)
        assert row.hours == hour_ranges(found)
        assert row.hours_without_figures == silent
        if not known:
            assert row.n_clock_hours is table["n_clock_hours"].dtype.na_value
        else:
            assert row.n_clock_hours == len(found)
        ends = [row.first_hour, row.last_hour]
        assert ends == [found[0], found[-1]] if found else all(map(table_na(table), ends))
        some.add(row.hours)
    assert len(some) > 1 or window == (9, 9)  # the hour never reported


def table_na(table):
    missing = table["first_hour"].dtype.na_value
    return lambda value: value is missing


def test_ranges_are_read_across_midnight_and_need_not_touch():
    assert hour_ranges([6, 7, 8, 9, 10, 18, 19, 20]) == "06-10 18-20"
    assert hour_ranges([20, 21, 22, 23, 0, 1, 4]) == "20-01 04"
    assert hour_ranges([]) == ""
    assert hour_ranges(range(24)) == "00-23"


def test_no_hour_below_the_target_is_not_the_same_as_no_figure():
    short, _, _ = table_of(*case((6, 20), lambda clock: np.full(len(clock.hour), -1.0)))
    empty, _, _ = table_of(*case((6, 20), nothing))
    for table, count in ((short, 0), (empty, None)):
        assert (table["hours"] == "").all()
        assert (table["clock_first"] == "").all()
        assert (table["clock_last"] == "").all()
        assert table["first_hour"].isna().all()
        if count is None:
            assert table["n_clock_hours"].isna().all()
        else:
            assert (table["n_clock_hours"] == count).all()
    assert (short["hours_without_figures"] == 0).all()
    assert (empty["hours_without_figures"] == 15).all()
    assert (short["usable_hours"] == 0.0).all()
    assert (short["days_with_run"] == 0.0).all()
    assert empty[["usable_hours", "usable_low", "usable_high", "days_with_run"]].isna().all().all()
    assert (empty["daylight_hours"] > 200).all()


def test_share_equal_to_the_target_is_not_below_it():
    # One of the two hours of each pair of days falls short: a share of one half wherever
    # the month has an even number of days.
    scene, hours = case((6, 20), lambda clock: np.where(clock.day_of_month % 2, 0.5, -0.5))
    at, _, _ = table_of(scene, hours, Planning(target=0.5))
    above, _, _ = table_of(scene, hours, Planning(target=0.5 + 1e-9))
    assert at["hours"][3] == ""  # April: 15 of 30 days
    assert above["hours"][3] == "06-20"


def test_higher_target_never_loses_an_hour():
    tables = [
        window_table(*DAYLIGHT, DAYLIGHT_HOURLY, Planning(target=target))
        for target in (0.01, 0.03, 0.05, 0.2, 0.5, 0.99)
    ]
    unmoved = ["daylight_hours", "usable_hours", "days_with_run", "coverage"]
    for low, high in pairwise(tables):
        assert (low["n_clock_hours"] <= high["n_clock_hours"]).all()
        assert (high["n_clock_hours"] + high["hours_without_figures"] <= 24).all()
        assert low[unmoved].equals(high[unmoved])
    assert (tables[0]["n_clock_hours"] < tables[-1]["n_clock_hours"]).any()


DAYLIGHT = case("daylight", weather)
DAYLIGHT_HOURLY = risk_tables(DAYLIGHT[1], [ALL_YEAR])[1]


def test_columns_are_those_of_the_file_contract():
    table, _, _ = table_of(*DAYLIGHT)
    assert set(table.columns) | {"field", "aircraft"} == set(WINDOWS_MONTHLY_COLUMNS)
    assert len(table.columns) == len(WINDOWS_MONTHLY_COLUMNS) - 2
    assert len(table) == 12
    assert set(table["target"]) == {0.2}
    assert set(table["run_hours"]) == {4}


@pytest.mark.parametrize(
    ("window", "field", "start"),
    [
        ((20, 4), None, 20),
        ((6, 20), None, 6),
        ((4, 4), None, 4),
        ((20, 19), None, 0),  # every hour
        ("all", None, 0),
    ],
)
def test_day_begins_with_the_window(window, field, start):
    scene, _ = case(window, nothing, (2020, 2020), field)
    assert day_start(scene.inside, scene.clock) == start


def test_daylight_stays_whole_where_the_clock_is_far_from_the_sun():
    # 150 degrees west by UTC: the sun is highest at about 22 h, the middle of the night is 10 h.
    scene, hours = case("daylight", weather, (2020, 2020), place(40.0, -150.0, "UTC"))
    start = day_start(scene.inside, scene.clock)
    assert 10 < start <= 16
    calm = case("daylight", lambda c: np.ones(len(c.hour)), (2020, 2020), scene.field)
    table, _, _ = table_of(*calm)
    assert all(" " not in text for text in table["hours"])
    december = table.iloc[11]
    # Civil twilight at 40 degrees north in December: about ten and a half hours around 22 h.
    assert december["first_hour"] in (16, 17, 18)
    assert december["last_hour"] in (2, 3, 4)
    assert (table["days_with_run"] == 1.0).all()
    assert hours.clock is scene.clock


# ---- civil clock -----------------------------------------------------------------------------


def shown_by_plain_search(zone, year, month, hour, standard_h):
    """Return what the clock shows on the days of the month, by trying every half hour of UTC."""
    info, shown = ZoneInfo(zone), []
    at = dt.datetime(year, month, 1, tzinfo=dt.UTC) - dt.timedelta(days=2)
    while at < dt.datetime(year, month, 28, tzinfo=dt.UTC) + dt.timedelta(days=7):
        local = (at + dt.timedelta(hours=standard_h)).replace(tzinfo=None)
        if (local.year, local.month, local.hour, local.minute) == (year, month, hour, 0):
            text = at.astimezone(info).strftime("%H:%M")
            if text not in shown:
                shown.append(text)
        at += dt.timedelta(minutes=15)
    return " / ".join(shown)


@pytest.mark.parametrize(
    ("zone", "standard_h"),  # standard offsets: IANA Time Zone Database, from memory
    [
        ("Europe/Paris", 1.0),
        ("Europe/Dublin", 0.0),
        ("America/St_Johns", -3.5),
        ("Asia/Kolkata", 5.5),
        ("Asia/Kathmandu", 5.75),
        ("Australia/Lord_Howe", 10.5),
        ("Pacific/Kiritimati", 14.0),
        ("Africa/Casablanca", 1.0),
        ("Etc/UTC", 0.0),
    ],
)
def test_clock_times_equal_a_plain_search_through_the_zone(zone, standard_h):
    for month, hour in ((1, 6), (3, 0), (3, 2), (4, 20), (10, 23), (11, 7), (7, 13)):
        expected = shown_by_plain_search(zone, 2027, month, hour, standard_h)
        assert clock_text(zone, 2027, month, hour) == expected, (month, hour)


def test_clock_times_of_known_rules():
    # EU: summer time from the last Sunday of March to that of October (Directive 2000/84/EC).
    assert clock_text("Europe/Paris", 2027, 3, 6) == "06:00 / 07:00"
    assert clock_text("Europe/Paris", 2027, 7, 6) == "07:00"
    assert clock_text("Europe/Paris", 2027, 10, 6) == "07:00 / 06:00"
    assert clock_text("Europe/Paris", 2027, 7, 23) == "00:00"
    # Lord Howe Island saves half an hour, October to April (IANA Time Zone Database).
    assert clock_text("Australia/Lord_Howe", 2027, 1, 6) == "06:30"
    assert clock_text("Australia/Lord_Howe", 2027, 4, 6) == "06:30 / 06:00"
    # No saving in India: a full hour of local standard time is a full hour of the clock.
    assert clock_text("Asia/Kolkata", 2027, 7, 6) == "06:00"


def test_table_tells_the_clock_of_its_first_and_last_hour():
    table, _, _ = table_of(*case((6, 20), lambda c: np.ones(len(c.hour))), Planning(year=2027))
    assert set(table["hours"]) == {"06-20"}
    march, july = table.iloc[2], table.iloc[6]
    assert (march["clock_first"], march["clock_last"]) == ("06:00 / 07:00", "20:00 / 21:00")
    assert (july["clock_first"], july["clock_last"]) == ("07:00", "21:00")


# ---- usable daylight -------------------------------------------------------------------------


@pytest.mark.parametrize("levels", [(), LEVELS])
def test_usable_daylight_is_that_of_the_monthly_shares_where_the_window_is_daylight(levels):
    scene, hours = case("daylight", weather, (2012, 2017), levels=levels)
    table, monthly, _ = table_of(scene, hours)
    assert (table["daylight_hours"] == monthly["hours_offered"]).all()
    assert (table["usable_hours"] == monthly["usable_hours"]).all()
    for name in ("n_years", "coverage", "interval_note"):
        assert (table[name] == monthly[name]).all()
    offered = monthly["hours_offered"]
    assert (table["usable_low"] == offered * (1.0 - monthly["ci_high"])).all()
    assert (table["usable_high"] == offered * (1.0 - monthly["ci_low"])).all()
    assert (table["usable_low"] < table["usable_hours"]).any()


def test_usable_daylight_takes_no_notice_of_the_hours_window():
    wide, _, _ = table_of(*DAYLIGHT)
    night, monthly, _ = table_of(*case((21, 3), weather))
    for name in ("daylight_hours", "usable_hours", "n_years", "coverage"):
        assert (wide[name] == night[name]).all()
    assert (night["usable_hours"] != monthly["usable_hours"]).all()


def test_usable_daylight_equals_a_plain_count():
    scene, hours = DAYLIGHT
    clock, table = scene.clock, table_of(scene, hours)[0]
    days, lit = {}, [0] * 12
    for i in hours.known:
        cell = int(clock.year[i]), int(clock.month[i]), int(clock.hour[i])
        days[cell] = days.get(cell, 0) + 1
    counted, short = [0] * 12, [0] * 12
    fell = dict(zip(hours.known.tolist(), hours.central.shortfall.tolist(), strict=True))
    for i in range(len(clock.hour)):
        if not (clock.in_period[i] and scene.daylight[i]):
            continue
        y, m, h = int(clock.year[i]), int(clock.month[i]), int(clock.hour[i])
        lit[m] += 1
        if i in fell and 5 * days[y, m, h] >= 4 * monthrange(2018 + y, m + 1)[1]:
            counted[m] += 1
            short[m] += fell[i]
    for m in range(12):
        assert table["daylight_hours"][m] == lit[m] / 3
        assert table["usable_hours"][m] == pytest.approx(lit[m] / 3 * (1 - short[m] / counted[m]))


def test_month_without_daylight_has_none_and_no_share_of_it():
    # 78 degrees north: in December the sun stays more than 6 degrees below the horizon.
    field = place(78.2, 15.6, "Arctic/Longyearbyen")
    table, _, _ = table_of(*case("daylight", lambda c: np.ones(len(c.hour)), field=field))
    december, june = table.iloc[11], table.iloc[5]
    assert december["daylight_hours"] == 0.0
    assert np.isnan(december["usable_hours"])
    assert (december["hours"], december["hours_without_figures"]) == ("", 0)
    assert december["days_with_run"] == 0.0  # no such day, whatever the air
    assert june["daylight_hours"] == june["usable_hours"] == 30 * 24
    assert (june["n_clock_hours"], june["days_with_run"]) == (24, 1.0)


# ---- days with a run -------------------------------------------------------------------------


def plain_days(scene, hours, run, start):
    """Return the share of days with a run by month, by plain loops."""
    clock = scene.clock
    days = {}
    for i in hours.known:
        cell = int(clock.year[i]), int(clock.month[i]), int(clock.hour[i])
        days[cell] = days.get(cell, 0) + 1
    n_days = int(clock.days_in_month.sum())
    place_of = {
        (int(d), int(h)): i
        for i, (d, h) in enumerate(zip(clock.day, clock.hour, strict=True))
        if clock.in_period[i]
    }
    known = set(hours.known.tolist())
    levels = [
        dict(zip(hours.known.tolist(), m.shortfall.tolist(), strict=True))
        for m in (hours.levels or (hours.central,))
    ]
    counted, found = [0] * 12, [0.0] * 12
    first = dt.date(clock.first_year, 1, 1)
    for day in range(n_days):
        month = (first + dt.timedelta(days=day)).month - 1
        window = []
        for step in range(24):
            later, hour = divmod(start + step, 24)
            i = place_of.get((day + later, hour))
            window.append(i if i is not None and scene.inside[i] else None)

        def usable(i):
            y, m, h = int(clock.year[i]), int(clock.month[i]), int(clock.hour[i])
            length = monthrange(clock.first_year + y, m + 1)[1]
            return i in known and 5 * days.get((y, m, h), 0) >= 4 * length

        offered = longest([i is not None for i in window])
        seen = longest([i is not None and usable(i) for i in window])
        if seen < min(offered, run):
            continue
        counted[month] += 1
        for fell in levels:
            good = [i is not None and usable(i) and not fell[i] for i in window]
            found[month] += (longest(good) >= run) / len(levels)
    return [f / n if n else np.nan for f, n in zip(found, counted, strict=True)]


def longest(flags):
    best = run = 0
    for flag in flags:
        run = run + 1 if flag else 0
        best = max(best, run)
    return best


@pytest.mark.parametrize(
    ("window", "start", "run", "levels"),
    [
        ("daylight", 4, 4, LEVELS),
        ("all", 0, 10, ()),
        ((6, 20), 6, 5, ()),
        ((20, 4), 20, 6, LEVELS),
        ((20, 22), 20, 4, ()),  # no day is long enough
        ((6, 20), 6, 1, ()),
    ],
)
def test_days_with_a_run_equal_plain_loops(window, start, run, levels):
    scene, hours = case(window, weather, (2019, 2020), levels=levels)
    assert day_start(scene.inside, scene.clock) == start
    got = days_with_run(hours, run)
    expected = plain_days(scene, hours, run, start)
    np.testing.assert_allclose(got, expected, rtol=1e-12)
    if window == (20, 22):
        assert (got == 0.0).all()
    elif run > 1:
        assert 0.0 < np.nanmin(got) + np.nanmax(got) < 2.0


def test_short_winter_days_count_as_days_without_the_run():
    # cos H = (sin -6 - sin 67 sin d) / (cos 67 cos d): 6.5 h of civil daylight on 1 December
    # (d = -21.8 degrees), 5.7 h on the 21st (d = -23.4 degrees): 9 h to 15 h, then 10 h to 15 h.
    field = place(67.0, 25.5, "Europe/Helsinki")
    scene, hours = case("daylight", lambda c: np.ones(len(c.hour)), (2020, 2020), field)
    got = days_with_run(hours, 7)
    start = day_start(scene.inside, scene.clock)
    np.testing.assert_allclose(got, plain_days(scene, hours, 7, start), rtol=1e-12)
    assert 0.0 < got[11] < 1.0
    assert (got[2:9] == 1.0).all()


def test_record_of_every_third_hour_knows_no_runs():
    def third(clock):
        return np.where(clock.hour % 3 == 0, 1.0, np.nan)

    _, hours = case((6, 20), third, (2020, 2020))
    assert np.isnan(days_with_run(hours, 4)).all()
    assert (days_with_run(hours, 1) == 1.0).all()


def test_run_goes_on_over_midnight_only_where_the_window_does():
    def late(clock):
        return np.where((clock.hour >= 22) | (clock.hour <= 1), 1.0, -1.0)

    across = case((20, 4), late, (2020, 2020))[1]
    every = case("all", late, (2020, 2020))[1]
    # The last night of the year leaves the record at midnight: its hours after it are unknown,
    # so that the day has four hours in a row that are known but only two that are usable.
    assert days_with_run(across, 4).tolist() == [1.0] * 11 + [30 / 31]
    assert days_with_run(every, 4).tolist() == [0.0] * 12
    assert days_with_run(every, 2).tolist() == [1.0] * 12


def test_unknown_hour_breaks_a_run_and_a_day_may_be_unknown():
    def gap(clock):
        margin = np.ones(len(clock.hour))
        hole = (clock.month == 6) & (clock.day_of_month <= 4)
        margin[hole & (clock.hour % 3 == 2)] = np.nan  # 6-20: two known hours at a time
        margin[(clock.month == 6) & (clock.day_of_month == 31)] = -1.0
        return margin

    _, hours = case((6, 20), gap, (2020, 2020))
    # Four days of July are unknown, one of the other 27 has no usable hour.
    assert days_with_run(hours, 4)[6] == pytest.approx(26 / 27)
    assert days_with_run(hours, 2)[6] == pytest.approx(30 / 31)


def test_more_hours_in_a_row_are_never_had_on_more_days():
    scene, hours = DAYLIGHT
    moved = replace(hours, levels=[margins_of(hours.central.margin + x) for x in LEVELS])
    # Without gaps all days count for every length.
    whole = case("daylight", lambda c: np.nan_to_num(weather(c), nan=0.3))[1]
    shares = np.array([days_with_run(whole, n) for n in (1, 3, 6, 9)])
    assert (np.diff(shares, axis=0) <= 0).all()
    assert (days_with_run(moved, 4) <= 1.0).all()
    assert scene.clock is hours.clock


def test_ranges_by_the_clock_leave_the_gaps_open():
    # European Union summer time: Directive 2000/84/EC, last Sundays of March and October.
    assert clock_ranges("Europe/Paris", 2027, 7, "04-12 18-20") == "05:00-13:00 19:00-21:00"
    assert clock_ranges("Europe/Paris", 2027, 1, "08 10-12") == "08:00 10:00-12:00"
    assert clock_ranges("Europe/Paris", 2027, 3, "06-17") == "06:00-17:00 / 07:00-18:00"
    assert clock_ranges("Australia/Lord_Howe", 2027, 1, "22-03") == "22:30-03:30"
    assert clock_ranges("Asia/Kathmandu", 2027, 1, "06-17") == "06:00-17:00"
    assert clock_ranges("Europe/Paris", 2027, 1, "") == ""


def test_ranges_by_the_clock_hold_where_the_clocks_change_on_the_first_of_the_month():
    # 1 November 2026 is the first Sunday (Energy Policy Act of 2005, section 110).
    shown = clock_ranges("America/Denver", 2026, 11, "00-05")
    assert shown == "01:00-06:00 / 00:00-05:00"


def test_clock_ranges_of_the_table_are_those_of_its_hours():
    scene, hours = case((6, 20), weather)
    table, _, _ = table_of(scene, hours)
    for row in table.itertuples():
        assert row.clock_hours == clock_ranges(scene.field.timezone, 2027, row.month, row.hours)
    assert (table["clock_hours"] != "").any()
