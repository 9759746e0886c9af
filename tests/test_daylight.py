"""Sunrise, sunset and civil twilight against the reference rows, and the laws of the sky."""

# ruff: noqa: D103 - the name of a test is its sentence

import csv
import re
from datetime import UTC, datetime
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from climarisk import daylight

REFERENCE = Path(__file__).parent / "reference" / "daylight_check_values.csv"
COMPILED = Path(__file__).parents[2] / "shared" / "methods" / "check_values.csv"
with REFERENCE.open(encoding="utf-8", newline="") as stream:
    ROWS = list(csv.DictReader(stream))

KINDS = {  # quantity: (elevation in degrees, which of the two crossings)
    "sunrise": (daylight.SUNRISE_DEG, 0),
    "sunset": (daylight.SUNRISE_DEG, 1),
    "civilrise": (daylight.CIVIL_TWILIGHT_DEG, 0),
    "civilset": (daylight.CIVIL_TWILIGHT_DEG, 1),
}
DAY = 86400.0


def midnight(text):
    """Return 00 UTC of an ISO date in seconds since 1970."""
    return datetime.fromisoformat(text).replace(tzinfo=UTC).timestamp()


def inputs_of(row):
    """Return latitude, longitude and 00 UTC of a row."""
    pattern = r"lat=(\S+); lon=(\S+); date=(\S+) UTC day"
    latitude, longitude, date = re.match(pattern, row["inputs"]).groups()
    return float(latitude), float(longitude), midnight(date)


@pytest.mark.parametrize("row", [pytest.param(row, id=row["id"]) for row in ROWS])
def test_crossing_agrees_with_the_reference_row(row):
    latitude, longitude, start = inputs_of(row)
    elevation, which = KINDS[row["quantity"]]
    crossing = daylight.sun_crossings(start, latitude, longitude, elevation)[which]
    minutes = (crossing - start) / 60
    assert minutes == pytest.approx(float(row["expected"]), abs=float(row["tolerance"]))


def test_every_reference_row_is_exercised():
    assert {row["quantity"] for row in ROWS} == set(KINDS)
    assert {row["unit"] for row in ROWS} == {"min after 00 UTC of date"}
    assert len({row["id"] for row in ROWS}) == len(ROWS)


def test_reference_rows_are_the_compiled_ones():
    if not COMPILED.exists():
        pytest.skip("the compiled table of check values is not beside this checkout")
    with COMPILED.open(encoding="utf-8", newline="") as stream:
        compiled = [row for row in csv.DictReader(stream) if row["quantity"] in KINDS]
    kept = ("id", "quantity", "inputs", "expected", "unit", "tolerance", "status")
    assert [[row[k] for k in kept] for row in ROWS] == [[row[k] for k in kept] for row in compiled]


@pytest.mark.parametrize(
    ("when", "latitude", "longitude", "expected"),
    [
        # Meeus (1998), example 25.a, recalled: 1992-10-13 0h TD, declination -7.78507 degrees; on
        # the meridian the elevation is 90 less the distance in latitude.
        ("1992-10-13", -7.78507, None, 90.0),
        ("1992-10-13", 52.21493, None, 30.0),
    ],
)
def test_declination_agrees_with_the_worked_example_of_meeus(when, latitude, longitude, expected):
    # 0h TD is 59 s before 0h UT in 1992, in which the declination moves 0.0003 degrees.
    longitudes = np.linspace(150.0, 200.0, 50001)
    highest = daylight.solar_elevation_deg(midnight(when), latitude, longitudes).max()
    assert highest == pytest.approx(expected, abs=0.001)


def test_equation_of_time_agrees_with_the_worked_example_of_meeus():
    # Meeus (1998), example 28.b, recalled: 1992-10-13 0h TD, equation of time +13 min 42.7 s by the
    # approximate formula, so the sun is on the meridian of 180 - 13.711 / 4 degrees.
    longitudes = np.linspace(170.0, 185.0, 150001)
    elevation = daylight.solar_elevation_deg(midnight("1992-10-13"), 40.0, longitudes)
    minutes = 4 * (180.0 - longitudes[elevation.argmax()])
    assert minutes == pytest.approx(13.711, abs=0.01)


everywhere = settings(deadline=None, derandomize=True)
times = st.floats(midnight("1950-01-01"), midnight("2050-01-01"))
latitudes = st.floats(-90.0, 90.0)
longitudes_east = st.floats(-180.0, 180.0)


@everywhere
@given(times, latitudes, longitudes_east)
def test_elevation_at_the_antipode_is_the_opposite(time, latitude, longitude):
    here = daylight.solar_elevation_deg(time, latitude, longitude)
    there = daylight.solar_elevation_deg(time, -latitude, longitude + 180.0)
    assert there == pytest.approx(-here, abs=1e-5)


@everywhere
@given(times, st.floats(-60.0, 60.0), longitudes_east, st.sampled_from([-6.0, -50 / 60, 3.0]))
def test_crossings_stand_at_the_elevation_asked_for_around_noon(time, latitude, longitude, level):
    start = time - time % DAY
    rise, setting = daylight.sun_crossings(start, latitude, longitude, level)
    noon = start + DAY / 2 - longitude * DAY / 360
    assert rise < noon < setting
    for crossing in (rise, setting):
        stands = daylight.solar_elevation_deg(crossing, latitude, longitude)
        assert stands == pytest.approx(level, abs=1e-4)


def test_no_crossing_in_polar_summer_and_winter_is_nan():
    start = np.array([midnight("2024-06-21"), midnight("2024-12-21"), midnight("2024-03-20")])
    rise, setting = daylight.sun_crossings(start, 78.2, 15.6)
    assert np.isnan(rise).tolist() == [True, True, False]
    assert np.isnan(setting).tolist() == [True, True, False]


def test_civil_daylight_is_minus_six_degrees_or_higher():
    start = midnight("2024-03-20")
    rise, setting = daylight.sun_crossings(start, 46.5, 7.5)
    seconds = np.array([rise - 1, rise + 1, setting - 1, setting + 1])
    light = daylight.is_civil_daylight(seconds, 46.5, 7.5)
    assert light.dtype == bool
    assert light.tolist() == [False, True, True, False]


def test_scalar_gives_a_scalar_and_arrays_broadcast():
    single = daylight.solar_elevation_deg(1_700_000_000, 46.5, 7.5)
    assert isinstance(single, float)
    grid = daylight.solar_elevation_deg([[1_700_000_000], [0]], [46.5, 10.0], 7.5)
    assert grid.shape == (2, 2)
    assert grid[0, 0] == pytest.approx(single, abs=1e-9)
    rise, setting = daylight.sun_crossings(0, 46.5, 7.5)
    assert isinstance(rise, float)
    assert isinstance(setting, float)


@pytest.mark.parametrize("position", [0, 1, 2])
def test_nan_in_any_argument_gives_nan_and_no_daylight_there_only(position):
    arguments = [midnight("2024-06-21") + DAY / 2, 46.5, 7.5]
    arguments[position] = np.array([arguments[position], np.nan])
    assert np.isnan(daylight.solar_elevation_deg(*arguments)).tolist() == [False, True]
    assert daylight.is_civil_daylight(*arguments).tolist() == [True, False]
    for crossing in daylight.sun_crossings(*arguments):
        assert np.isnan(crossing).tolist() == [False, True]


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        ((np.inf, 0.0, 0.0), r"seconds: inf"),
        ((0.0, 90.5, 0.0), r"latitude_deg: 90\.5 .*-90 to 90"),
        ((0.0, [0.0, -91.0], 0.0), r"latitude_deg: -91 "),
        ((0.0, 0.0, -181.0), r"longitude_deg: -181 .*-180 to 360"),
    ],
)
def test_impossible_place_or_time_is_refused(arguments, message):
    for function in (
        daylight.solar_elevation_deg,
        daylight.is_civil_daylight,
        daylight.sun_crossings,
    ):
        with pytest.raises(ValueError, match=message):
            function(*arguments)
