"""Time zones.

Offsets: IANA Time Zone Database, read through zoneinfo, and the legal changes named beside
each test (as the database's own comments give them).
"""

from __future__ import annotations

from datetime import UTC, datetime
from zoneinfo import ZoneInfo

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from climarisk.errors import InputError
from climarisk.localtime import clock_to_utc_s, standard_offset_s, timezone_at, zone_info


def unix(*parts: int) -> int:
    """Seconds since 1970-01-01 UTC."""
    return int(datetime(*parts, tzinfo=UTC).timestamp())


def offset_hours(zone: str, *parts: int) -> float:
    """Standard offset at a UTC time, in hours."""
    return standard_offset_s(zone, [unix(*parts)])[0] / 3600.0


@pytest.mark.parametrize(
    ("latitude", "longitude", "zone"),
    [
        (-8.05928, -34.95924, "America/Recife"),
        (39.83, -104.65, "America/Denver"),
        (43.62707, -72.30537, "America/New_York"),
        (27.7, 85.36, "Asia/Kathmandu"),
        (53.42, -6.27, "Europe/Dublin"),
        (33.43, -112.01, "America/Phoenix"),
        (46.63, 10.77, "Europe/Rome"),
        (0.0, -30.0, "Etc/GMT+2"),
    ],
)
def test_timezone_at_known_places(latitude, longitude, zone):
    # The zone each place belongs to: IANA zone1970.tab and its notes; at sea the nautical zone.
    assert timezone_at(latitude, longitude) == zone


@pytest.mark.parametrize("place", [(91, 0), (0, 181), (float("nan"), 0), (0, float("inf"))])
def test_timezone_at_no_place_raises(place):
    with pytest.raises(InputError, match="is no place"):
        timezone_at(*place)


def test_standard_offset_has_no_daylight_saving():
    assert offset_hours("America/Denver", 2020, 1, 15) == -7.0
    assert offset_hours("America/Denver", 2020, 7, 15) == -7.0
    # Saving was in force in winter too from 6 January 1974.
    assert offset_hours("America/Denver", 1974, 1, 20) == -7.0


def test_standard_offset_negative_saving_counts_as_winter_time():
    # Irish standard time is UTC+1 in summer and the database books winter as saving of -1 h.
    assert offset_hours("Europe/Dublin", 2020, 1, 15) == 0.0
    assert offset_hours("Europe/Dublin", 2020, 7, 15) == 0.0
    # 27 October 1968 to 31 October 1971: UTC+1 all year.
    assert offset_hours("Europe/Dublin", 1970, 1, 15) == 1.0


def test_standard_offset_morocco_is_the_one_outside_ramadan():
    # UTC+1 since 28 October 2018, UTC in Ramadan (24 April to 23 May 2020).
    for month in (1, 5, 7):
        assert offset_hours("Africa/Casablanca", 2020, month, 10) == 1.0


def test_standard_offset_parts_of_an_hour():
    assert offset_hours("Asia/Kathmandu", 2020, 1, 1) == 5.75
    assert offset_hours("Australia/Lord_Howe", 2020, 1, 1) == 10.5


def test_standard_offset_change_of_the_zone_itself():
    # Venezuela: UTC-4 to UTC-4:30 on 9 December 2007, back on 1 May 2016.
    assert offset_hours("America/Caracas", 2007, 12, 8) == -4.0
    assert offset_hours("America/Caracas", 2007, 12, 10) == -4.5
    assert offset_hours("America/Caracas", 2016, 4, 30) == -4.5
    assert offset_hours("America/Caracas", 2016, 5, 2) == -4.0


def test_standard_offset_shape_is_kept():
    assert (
        standard_offset_s("America/Recife", np.zeros((2, 3), dtype=int)).tolist()
        == [[-10800] * 3] * 2
    )
    assert standard_offset_s("America/Recife", np.array([], dtype=int)).shape == (0,)


@pytest.mark.parametrize("zone", ["", "Mars/Base", "../etc/passwd", "/etc/passwd", "America", "\0"])
def test_unknown_zone_raises(zone):
    for call in (zone_info, lambda z: standard_offset_s(z, [0]), lambda z: clock_to_utc_s(z, [0])):
        with pytest.raises(InputError, match="is not a time zone"):
            call(zone)


@settings(max_examples=100, deadline=None)
@given(
    zone=st.sampled_from(["America/Denver", "America/Recife", "Asia/Kathmandu", "Europe/Rome"]),
    seconds=st.integers(unix(1975, 1, 1), unix(2030, 1, 1)),
)
def test_standard_offset_is_offset_less_saving(zone, seconds):
    noon = seconds - seconds % 86400 + 43200
    local = datetime.fromtimestamp(noon, ZoneInfo(zone))
    expected = (local.utcoffset() - local.dst()).total_seconds()
    assert standard_offset_s(zone, [seconds])[0] == expected


@settings(max_examples=200, deadline=None)
@given(
    zone=st.sampled_from(["America/Denver", "Australia/Lord_Howe", "Europe/Dublin"]),
    seconds=st.integers(unix(1975, 1, 1), unix(2030, 1, 1)),
)
def test_clock_to_utc_undoes_the_local_clock(zone, seconds):
    local = datetime.fromtimestamp(seconds, ZoneInfo(zone)).replace(tzinfo=None)
    clock = (local - datetime(1970, 1, 1)).total_seconds()
    utc = clock_to_utc_s(zone, [clock])[0]
    twice = len({local.replace(tzinfo=ZoneInfo(zone), fold=f).utcoffset() for f in (0, 1)}) == 2
    assert np.isnan(utc) if twice else utc == seconds


def test_clock_to_utc_on_the_days_of_change():
    # Denver 2024: 10 March 02:00 MST became 03:00 MDT, 3 November 02:00 MDT became 01:00 MST.
    readings = [(2024, 3, 10, 1, 59), (2024, 3, 10, 2, 30), (2024, 3, 10, 3, 0)]
    readings += [(2024, 11, 3, 0, 59), (2024, 11, 3, 1, 30), (2024, 11, 3, 2, 0)]
    utc = clock_to_utc_s("America/Denver", [*(unix(*r) for r in readings), np.nan])
    expected = [unix(2024, 3, 10, 8, 59), np.nan, unix(2024, 3, 10, 9, 0)]
    expected += [unix(2024, 11, 3, 6, 59), np.nan, unix(2024, 11, 3, 9, 0), np.nan]
    np.testing.assert_array_equal(utc, expected)
