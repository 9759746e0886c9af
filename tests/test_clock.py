"""Local standard time on the grid, and the hours window."""

import datetime as dt
from collections import Counter
from zoneinfo import ZoneInfo

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from climarisk.clock import hour_grid, in_window, local_clock
from climarisk.fields import Field

EPOCH = dt.datetime(1970, 1, 1, tzinfo=dt.UTC)


def place(zone, latitude=0.0, longitude=0.0):
    return Field("F", "Field", latitude, longitude, 0.0, zone)


def clock_of(zone, first_year, last_year, **where):
    field = place(zone, **where)
    grid = hour_grid(first_year, last_year)
    return field, grid, local_clock(field, grid, first_year, last_year)


def local_of(clock, grid, year, month, day, hour):
    """Local date and hour of a UTC hour."""
    i = int((dt.datetime(year, month, day, hour, tzinfo=dt.UTC) - EPOCH).total_seconds())
    i = i // 3600 - grid[0]
    date = dt.date(clock.first_year, 1, 1) + dt.timedelta(days=int(clock.day[i]))
    assert (clock.year[i] + clock.first_year, clock.month[i] + 1, clock.day_of_month[i]) == (
        date.year,
        date.month,
        date.day,
    )
    return date, int(clock.hour[i])


def test_hour_grid_is_consecutive_and_covers_the_period_in_every_zone():
    grid = hour_grid(2019, 2020)
    assert (np.diff(grid) == 1).all()
    first = (dt.datetime(2019, 1, 1, tzinfo=dt.UTC) - EPOCH) // dt.timedelta(hours=1)
    last = (dt.datetime(2021, 1, 1, tzinfo=dt.UTC) - EPOCH) // dt.timedelta(hours=1)
    # Zones reach from UTC-12 to UTC+14 (IANA), and 12 h before the first hour are needed.
    assert grid[0] <= first - 14 - 12
    assert grid[-1] >= last + 12


@pytest.mark.parametrize(
    "zone",
    [
        "UTC",
        "America/Denver",
        "America/Recife",
        "Asia/Kolkata",
        "Asia/Kathmandu",
        "Australia/Adelaide",
        "Pacific/Kiritimati",
        "Etc/GMT+12",
    ],
)
def test_local_clock_has_every_local_hour_of_the_period_once(zone):
    _, _, clock = clock_of(zone, 2019, 2020)
    hours = Counter(zip(clock.day[clock.in_period], clock.hour[clock.in_period], strict=True))
    assert len(hours) == (365 + 366) * 24
    assert set(hours.values()) == {1}
    assert {d for d, _ in hours} == set(range(365 + 366))


def test_local_clock_does_not_know_daylight_saving():
    # Denver is UTC-7 by standard time; clocks show UTC-6 in July (IANA).
    _, grid, clock = clock_of("America/Denver", 2020, 2020)
    assert local_of(clock, grid, 2020, 7, 1, 12) == (dt.date(2020, 7, 1), 5)
    assert local_of(clock, grid, 2020, 1, 1, 12) == (dt.date(2020, 1, 1), 5)
    assert local_of(clock, grid, 2020, 7, 1, 6) == (dt.date(2020, 6, 30), 23)


def test_local_clock_half_hour_zone_takes_the_nearest_hour_and_half_past_the_next():
    # India is UTC+5:30 (IANA): 00 UTC is 05:30, which is hour 6.
    _, grid, clock = clock_of("Asia/Kolkata", 2020, 2020)
    assert local_of(clock, grid, 2020, 3, 1, 0) == (dt.date(2020, 3, 1), 6)
    assert local_of(clock, grid, 2020, 2, 29, 18) == (dt.date(2020, 3, 1), 0)
    # Nepal is UTC+5:45: 00 UTC is 05:45, nearest to 6; 18 UTC is 23:45, nearest to 24.
    _, grid, clock = clock_of("Asia/Kathmandu", 2020, 2020)
    assert local_of(clock, grid, 2020, 3, 1, 0) == (dt.date(2020, 3, 1), 6)
    assert local_of(clock, grid, 2020, 12, 30, 18) == (dt.date(2020, 12, 31), 0)


_GRIDS = {zone: clock_of(zone, 2018, 2021) for zone in ("America/St_Johns", "Australia/Sydney")}


@settings(deadline=None)
@given(
    st.sampled_from(sorted(_GRIDS)),
    st.datetimes(dt.datetime(2018, 1, 2), dt.datetime(2021, 12, 30)),
)
def test_local_clock_agrees_with_the_time_zone_database(zone, when):
    _, grid, clock = _GRIDS[zone]
    when = when.replace(minute=0, second=0, microsecond=0, tzinfo=dt.UTC)
    local = when.astimezone(ZoneInfo(zone))
    standard = when + (local.utcoffset() - local.dst()) + dt.timedelta(minutes=30)
    expected = (standard.date(), standard.hour)
    assert local_of(clock, grid, when.year, when.month, when.day, when.hour) == expected


def test_days_in_month_knows_leap_years():
    # Gregorian calendar: 1900 and 2100 are common years, 2000 and 2020 leap years.
    for year, days in ((1900, 28), (2000, 29), (2019, 28), (2020, 29), (2100, 28)):
        _, _, clock = clock_of("UTC", year, year)
        assert clock.days_in_month[0].tolist() == [
            31, days, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31,
        ]  # fmt: skip


def test_cell_numbers_are_unique_and_in_order():
    _, _, clock = clock_of("UTC", 2019, 2020)
    inside = clock.in_period
    cells = clock.year_month_hour[inside]
    assert cells.min() == 0 and cells.max() == 2 * 288 - 1
    assert len(np.unique(cells)) == 2 * 288
    np.testing.assert_array_equal(clock.month_hour[inside], cells % 288)


def test_in_window_all_and_pairs_with_both_ends():
    field, grid, clock = clock_of("America/Denver", 2020, 2020)
    assert in_window("all", field, grid, clock).all()
    day = in_window((7, 19), field, grid, clock)
    assert set(clock.hour[day]) == set(range(7, 20))
    assert set(clock.hour[~day]) == {*range(7), *range(20, 24)}
    one = in_window((5, 5), field, grid, clock)
    assert set(clock.hour[one]) == {5}


def test_in_window_across_midnight():
    field, grid, clock = clock_of("America/Denver", 2020, 2020)
    night = in_window((22, 4), field, grid, clock)
    assert set(clock.hour[night]) == {22, 23, 0, 1, 2, 3, 4}
    assert set(clock.hour[~night]) == set(range(5, 22))


def daylight_per_day(zone, latitude, longitude):
    field, grid, clock = clock_of(zone, 2020, 2020, latitude=latitude, longitude=longitude)
    inside = in_window("daylight", field, grid, clock) & clock.in_period
    return np.bincount(clock.day[inside], minlength=366), clock, inside


def test_daylight_window_of_the_polar_night_and_the_polar_day():
    # Longyearbyen (78.2 N): the sun is more than 6 degrees down all December and up all June;
    # at 78.2 N noon elevation on 21 December is 90 - 78.2 - 23.4 = -11.6 degrees.
    hours, _, _ = daylight_per_day("Arctic/Longyearbyen", 78.2, 15.6)
    assert (hours[335:] == 0).all()  # December
    assert (hours[152:182] == 24).all()  # June


def test_daylight_window_at_the_equator_is_about_13_hours_all_year():
    # Half-day arc to 6 degrees below the horizon at latitude 0: acos(-sin 6 / cos decl), 6.4-6.5 h.
    hours, clock, inside = daylight_per_day("Etc/GMT", 0.0, 0.0)
    assert set(hours) <= {12, 13}
    assert set(clock.hour[inside]) <= set(range(5, 19))


def test_daylight_window_is_longest_in_the_summer_of_the_hemisphere():
    north, _, _ = daylight_per_day("Etc/GMT", 46.5, 0.0)
    south, _, _ = daylight_per_day("Etc/GMT", -46.5, 0.0)
    june, december = 172, 355
    assert north[june] > 16 > 10 > north[december]
    assert south[december] > 16 > 10 > south[june]


@pytest.mark.parametrize("longitude", [-180.0, 180.0])
def test_daylight_window_at_the_date_line_lies_about_local_noon(longitude):
    zone = "Etc/GMT+12" if longitude < 0 else "Etc/GMT-12"
    hours, clock, inside = daylight_per_day(zone, 0.0, longitude)
    assert set(hours) <= {12, 13}
    assert set(clock.hour[inside]) <= set(range(5, 19))


@pytest.mark.parametrize("latitude", [-90.0, 90.0])
def test_daylight_window_at_the_poles_is_one_day_and_one_night(latitude):
    hours, _, inside = daylight_per_day("Etc/GMT", latitude, 0.0)
    summer, winter = (172, 355) if latitude > 0 else (355, 172)
    assert hours[summer] == 24 and hours[winter] == 0
    # The sun crosses -6 degrees twice in a year.
    assert 2 <= np.count_nonzero(np.diff(inside.astype(int))) <= 4
