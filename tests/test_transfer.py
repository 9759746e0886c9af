"""Air at the field: which stations serve it, and how temperature, humidity and pressure move."""

import math
from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from climarisk import transfer
from climarisk.atmosphere import (
    dew_point_c,
    isa_pressure_hpa,
    qnh_from_station_pressure_hpa,
    relative_humidity_pct,
    vapour_pressure_hpa,
)
from climarisk.clock import hour_grid, local_clock
from climarisk.fields import Field
from climarisk.lapse import Lapse, table_lapse
from climarisk.observations import COLUMNS
from climarisk.pressure import NO_PRESSURE, SOURCES
from climarisk.stations import Station

# ISO 2533 / ICAO Doc 7488/3.
G, R = 9.80665, 287.05287
GRID = hour_grid(2019, 2019)
KM_PER_DEGREE = 111.19  # a degree of a great circle, to 0.5 %


def field(elevation_m=1000.0, latitude=46.0, longitude=11.0, **changes):
    return Field("F", "Field", latitude, longitude, elevation_m, "Etc/GMT", **changes)


CLOCK = local_clock(field(), GRID, 2019, 2019)
SOUTH = field(latitude=-33.0)
ANOMALIES = "climatological QNH with neighbours' anomalies"
JULY_NOON = int(np.flatnonzero((CLOCK.month == 6) & (CLOCK.hour == 12))[0])


def table(latitude=46.0):
    """Return the day/night table as a lapse."""
    return Lapse(table_lapse(latitude < 0), np.full((12, 24), 1.5), 0)


def station(identifier="S", elevation_m=1000.0, latitude=46.0, longitude=11.0):
    return Station(identifier, identifier, latitude, longitude, elevation_m, "synthetic")


def hours(**columns):
    """Return a table on the whole grid; a column that is not given is empty."""
    index = pd.DatetimeIndex(pd.to_datetime(GRID * 3600, unit="s", utc=True), name="time")
    table = pd.DataFrame(np.nan, index=index, columns=list(COLUMNS))
    for name, values in columns.items():
        table[name] = values
    return table


def on_grid(one=None, trusted=True, **columns):
    columns = {"temperature_c": 20.0, "dew_point_c": 8.0} | columns
    return transfer.on_grid(one or station(), hours(**columns), GRID, trusted)


def at_field(where, *airs, region=None, radius_km=100.0, lapse=None):
    chosen = transfer.candidates(where, airs, radius_km)
    return transfer.air_at_field(
        where, chosen, airs if region is None else region, CLOCK, lapse or table(where.latitude)
    )


def waves(seed):
    """Return temperature, dew point and pressure that change from hour to hour."""
    draw, n = np.random.default_rng(seed), len(GRID)
    temperature = 12 + 8 * np.sin(np.arange(n) * 2 * np.pi / 24) + draw.normal(0, 1, n)
    dew_point = temperature - draw.uniform(1, 15, n)
    return temperature, dew_point, 900 + draw.normal(0, 3, n)


def measured(one, seed=1, gaps=0.0):
    temperature, dew_point, pressure = waves(seed)
    pressure = pressure * isa_pressure_hpa(one.elevation_m) / 900.0
    lost = np.random.default_rng(seed + 100).random(len(GRID)) < gaps
    temperature[lost] = np.nan
    return on_grid(
        one, temperature_c=temperature, dew_point_c=dew_point, station_pressure_hpa=pressure
    )


# ---- the field on its station ----------------------------------------------------------------


def test_field_on_its_station_has_the_stations_air_exactly():
    air = measured(station(), gaps=0.1)
    got = at_field(field(), air)
    np.testing.assert_array_equal(got.temperature_c, air.temperature_c)
    known = np.isfinite(air.temperature_c)
    np.testing.assert_array_equal(got.vapour_pressure_hpa[known], air.vapour_pressure_hpa[known])
    np.testing.assert_array_equal(got.pressure_hpa, air.pressure_hpa)
    np.testing.assert_array_equal(got.pressure_error_hpa, air.pressure_error_hpa)
    np.testing.assert_array_equal(got.share, known[None, :].astype(float))
    assert np.isnan(got.carried_m).all()
    assert (got.pressure_source == SOURCES.index("station pressure")).all()


def test_missing_hours_stay_missing():
    temperature, dew_point, pressure = waves(5)
    temperature[100:110], dew_point[200:210], pressure[300:310] = np.nan, np.nan, np.nan
    got = at_field(
        field(1200.0),
        on_grid(temperature_c=temperature, dew_point_c=dew_point, station_pressure_hpa=pressure),
    )
    assert np.flatnonzero(np.isnan(got.temperature_c)).tolist() == list(range(100, 110))
    assert np.isnan(got.vapour_pressure_hpa[200:210]).all()
    assert np.isnan(got.pressure_hpa[300:310]).all()
    assert (got.pressure_source[300:310] == NO_PRESSURE).all()


# ---- temperature and humidity ----------------------------------------------------------------


@pytest.mark.parametrize("height_m", [300.0, -300.0])
def test_temperature_moves_along_the_lapse(height_m):
    got = at_field(field(1000.0 + height_m), on_grid())
    lapse = table_lapse(southern=False)[CLOCK.month, CLOCK.hour]
    np.testing.assert_allclose(got.temperature_c, 20.0 - lapse * height_m / 1000.0, rtol=1e-12)
    assert got.temperature_c[JULY_NOON] == pytest.approx(20.0 - 7.0 * height_m / 1000.0)
    assert (got.carried_m == 300.0).all()


def test_temperature_moves_along_the_lapse_of_its_own_month_and_hour():
    fitted = np.arange(288.0).reshape(12, 24) / 100.0
    got = at_field(field(1500.0), on_grid(), lapse=Lapse(fitted, np.ones((12, 24)), 5))
    for month, hour in ((0, 0), (6, 12), (11, 23)):
        cell = (CLOCK.month == month) & (CLOCK.hour == hour)
        expected = 20.0 - (month * 24 + hour) / 100.0 * 0.5
        np.testing.assert_allclose(got.temperature_c[cell], expected, rtol=1e-12)


def test_vapour_pressure_decays_with_the_months_coefficient():
    # Liston and Elder (2006) after Kunkel (1989), 1/km: January 0.41, July 0.33, December 0.40.
    got = at_field(field(1500.0), on_grid())
    e = vapour_pressure_hpa(8.0, isa_pressure_hpa(1000.0))
    for month, coefficient in ((0, 0.41), (6, 0.33), (11, 0.40)):
        chosen = (CLOCK.month == month) & CLOCK.in_period
        expected = e * math.exp(-coefficient * 0.5)
        np.testing.assert_allclose(got.vapour_pressure_hpa[chosen], expected, rtol=1e-12)


def test_vapour_decay_is_that_of_the_opposite_month_in_the_south():
    decay = transfer.vapour_decay_per_km(-33.0, CLOCK)
    assert decay[CLOCK.month == 0][0] == 0.33  # July's
    assert decay[CLOCK.month == 6][0] == 0.41  # January's


def test_vapour_pressure_is_capped_at_saturation_when_the_air_is_carried_up():
    foggy = on_grid(temperature_c=15.0, dew_point_c=15.0, station_pressure_hpa=900.0)
    got = at_field(field(1800.0), foggy, lapse=table())
    saturated = transfer.vapour_saturated_hpa(got.temperature_c, 1800.0)
    assert (got.vapour_pressure_hpa <= saturated).all()
    assert (got.vapour_pressure_hpa == saturated).any()


def test_several_stations_are_blended_by_their_weights():
    near, far = station("A", 800.0, 46.1), station("B", 1300.0, 46.0, 11.4)
    airs = (
        on_grid(near, temperature_c=20.0, dew_point_c=8.0),
        on_grid(far, temperature_c=25.0, dew_point_c=10.0),
    )
    got = at_field(field(), *airs)
    # By hand: 11.12 km and 200 m below, 31.0 km and 300 m above (WGS 84: a degree of latitude
    # is 111.15 km and one of longitude 77.47 km at 46 degrees); w = exp(-(dz/500)^2)/(d + 5).
    weight = [math.exp(-0.16) / (11.115 + 5), math.exp(-0.36) / (30.99 + 5)]
    share = weight[0] / sum(weight)
    i = JULY_NOON
    assert got.share[0, i] == pytest.approx(share, abs=2e-4)
    by_hand = share * (20.0 - 7.0 * 0.2) + (1 - share) * (25.0 + 7.0 * 0.3)
    assert got.temperature_c[i] == pytest.approx(by_hand, abs=2e-3)
    e = [vapour_pressure_hpa(d, isa_pressure_hpa(z)) for d, z in ((8.0, 800.0), (10.0, 1300.0))]
    carried = share * e[0] * math.exp(-0.33 * 0.2) + (1 - share) * e[1] * math.exp(0.33 * 0.3)
    assert got.vapour_pressure_hpa[i] == pytest.approx(carried, abs=2e-3)
    assert got.carried_m[i] == pytest.approx(share * 200 + (1 - share) * 300, abs=0.05)


def test_hours_that_one_station_lacks_come_from_the_others_alone():
    near, far = station("A", latitude=46.1), station("B", latitude=46.3)
    airs = (
        on_grid(near, temperature_c=np.where(CLOCK.hour < 12, 20.0, np.nan)),
        on_grid(far, temperature_c=25.0),
    )
    got = at_field(field(), *airs)
    morning = CLOCK.hour < 12
    assert (got.temperature_c[~morning] == 25.0).all()
    blended = got.temperature_c[morning]
    assert (blended > 20.0).all() and (blended < 22.5).all()  # the nearer weighs more
    np.testing.assert_allclose(got.share.sum(axis=0), 1.0, rtol=1e-12)
    assert (got.share[0, ~morning] == 0).all()


def test_temperature_is_used_where_only_another_station_has_the_humidity():
    near, far = station("A", latitude=46.1), station("B", latitude=46.3)
    dew_point = np.where(CLOCK.hour < 12, 8.0, np.nan)
    airs = (
        on_grid(near, temperature_c=20.0, dew_point_c=dew_point),
        on_grid(far, temperature_c=20.0, dew_point_c=10.0),
    )
    got = at_field(field(), *airs)
    assert np.isfinite(got.vapour_pressure_hpa).all()
    low, high = (vapour_pressure_hpa(d, isa_pressure_hpa(1000.0)) for d in (8.0, 10.0))
    np.testing.assert_allclose(got.vapour_pressure_hpa[CLOCK.hour >= 12], high, rtol=1e-12)
    assert (got.vapour_pressure_hpa[CLOCK.hour < 12] < high).all()
    assert (got.vapour_pressure_hpa[CLOCK.hour < 12] > low).all()


# ---- a station on the spot -------------------------------------------------------------------


def test_fields_own_station_stands_alone_for_the_hours_it_has():
    own, other = station("S"), station("A", latitude=46.05)
    temperature = np.where(CLOCK.hour < 12, 20.0, np.nan)
    pressure = np.where(CLOCK.hour < 6, 900.0, np.nan)
    airs = (
        on_grid(own, temperature_c=temperature, station_pressure_hpa=pressure),
        on_grid(other, temperature_c=30.0, dew_point_c=8.0, station_pressure_hpa=910.0),
    )
    got = at_field(field(), *airs)
    assert (got.temperature_c == np.where(CLOCK.hour < 12, 20.0, 30.0)).all()
    np.testing.assert_array_equal(np.isnan(got.carried_m), CLOCK.hour < 12)
    assert (got.carried_m[CLOCK.hour >= 12] == 0.0).all()
    assert (got.pressure_hpa[CLOCK.hour < 6] == 900.0).all()
    np.testing.assert_allclose(got.pressure_hpa[CLOCK.hour >= 6], 910.0, rtol=1e-12)


@pytest.mark.parametrize(
    ("km", "height_m", "own"),
    [(2.9, 0.0, True), (3.1, 0.0, False), (0.0, 15.0, True), (0.0, 15.1, False)],
)
def test_station_is_the_fields_own_within_3_km_and_15_m(km, height_m, own):
    near = on_grid(station("S", 1000.0 + height_m, latitude=46.0 + km / KM_PER_DEGREE))
    (only,) = transfer.candidates(field(), [near], 100.0)
    assert only.on_spot == own
    assert np.isnan(at_field(field(), near).carried_m).all() == own


def test_own_station_comes_first_however_many_others_are_near():
    others = [on_grid(station(str(i), latitude=46.0 + 0.03 + i / 1000)) for i in range(9)]
    own = on_grid(station("Z", 1014.0, latitude=46.02))
    chosen = transfer.candidates(field(), [*others, own], 100.0)
    assert chosen[0].air.station.id == "Z"
    assert len(chosen) == transfer.MOST_STATIONS == 8


def test_temperature_alone_serves_where_no_station_has_humidity():
    got = at_field(field(), on_grid(dew_point_c=np.nan, station_pressure_hpa=900.0))
    assert (got.temperature_c == 20.0).all()
    assert np.isnan(got.vapour_pressure_hpa).all()


# ---- pressure --------------------------------------------------------------------------------


@pytest.mark.parametrize("height_m", [400.0, -400.0])
def test_pressure_moves_by_the_barometric_formula(height_m):
    dry = {"temperature_c": 20.0, "dew_point_c": -80.0, "station_pressure_hpa": 900.0}
    got = at_field(field(1000.0 + height_m), on_grid(**dry))
    i = JULY_NOON
    end_k = 293.15 - 7.0 * height_m / 1000.0
    # By hand: dp/p = -g dz / (R T) integrated along a constant lapse is a power law.
    lapse = 7.0 / 1000.0
    power_law = 900.0 * (end_k / 293.15) ** (G / (R * lapse))
    # The program takes the mean of the ends' temperatures: exact to 0.01 hPa over 1000 m.
    assert got.pressure_hpa[i] == pytest.approx(power_law, abs=0.01)
    mean_k = (293.15 + end_k) / 2
    by_mean = 900.0 * math.exp(-G * height_m / (R * mean_k))
    assert got.pressure_hpa[i] == pytest.approx(by_mean, abs=1e-4)


def test_pressure_moves_with_the_virtual_temperature():
    moist = {"temperature_c": 30.0, "dew_point_c": 25.0, "station_pressure_hpa": 950.0}
    got = at_field(field(800.0), on_grid(station(elevation_m=500.0), **moist))
    i = JULY_NOON

    def virtual_k(t, e, p):
        return (t + 273.15) / (1 - 0.37802 * e / p)

    # Buck 1981 over water with its enhancement factor at 950 hPa.
    e = (1.0007 + 3.46e-6 * 950) * 6.1121 * math.exp(17.502 * 25 / (240.97 + 25))
    t_f, e_f = 30.0 - 7.0 * 0.3, e * math.exp(-0.33 * 0.3)
    p = 950.0
    for _ in range(5):
        mean_k = (virtual_k(30.0, e, 950.0) + virtual_k(t_f, e_f, p)) / 2
        p = 950.0 * math.exp(-G * 300.0 / (R * mean_k))
    # The field's end takes the station's pressure in place of the field's: 0.003 hPa here.
    assert got.pressure_hpa[i] == pytest.approx(p, abs=0.01)


def test_pressure_order_station_then_qnh_then_sea_level():
    n = np.arange(len(GRID)) % 4
    air = on_grid(
        station(elevation_m=300.0),
        station_pressure_hpa=np.where(n == 0, 980.0, np.nan),
        qnh_hpa=np.where(n <= 1, 1013.25, np.nan),
        sea_level_pressure_hpa=np.where(n == 2, 1012.0, np.nan),
    )
    kinds = ["station pressure", "QNH", "sea-level pressure"]
    for k, kind in enumerate(kinds):
        assert (air.pressure_source[n == k] == SOURCES.index(kind)).all()
    assert (air.pressure_source[n == 3] == NO_PRESSURE).all()
    assert (air.pressure_hpa[n == 0] == 980.0).all()
    # QNH 1013.25 at 300 m is the standard pressure of 300 m: 977.727 hPa (ICAO Doc 7488/3,
    # p0 (1 - L H / T0)^5.2558798).
    standard = 1013.25 * (1 - 0.0065 * 300 / 288.15) ** 5.2558798
    np.testing.assert_allclose(air.pressure_hpa[n == 1], standard, rtol=1e-8)
    assert np.isnan(air.pressure_hpa[n == 3]).all()


def test_sea_level_pressure_is_calibrated_where_the_station_has_both_for_a_while():
    temperature, _, pressure = waves(3)
    pressure = pressure * 966.0 / 900.0
    # A reduction of the station's own: ln(MSLP / p) = 0.05 - 0.0002 T, whatever the services do.
    sea_level = pressure * np.exp(0.05 - 0.0002 * temperature)
    shown = np.where(CLOCK.day_of_month <= 20, pressure, np.nan)
    air = on_grid(
        station(elevation_m=400.0),
        temperature_c=temperature,
        station_pressure_hpa=shown,
        sea_level_pressure_hpa=sea_level,
    )
    hidden = (CLOCK.day_of_month > 20) & (np.arange(len(GRID)) >= 12)
    calibrated = SOURCES.index("sea-level pressure, calibrated")
    assert (air.pressure_source[hidden] == calibrated).all()
    np.testing.assert_allclose(air.pressure_hpa[hidden], pressure[hidden], atol=1e-3)


def test_sea_level_pressure_takes_the_mean_temperature_of_now_and_12_hours_ago():
    temperature = np.where(CLOCK.hour < 12, 10.0, 20.0)
    air = on_grid(
        station(elevation_m=500.0),
        temperature_c=temperature,
        dew_point_c=-60.0,
        sea_level_pressure_hpa=1013.0,
    )
    # WMO-No. 8 reduction (DWD BUFR guide): exponent g/R H / (T + a H/2 + e Ch), e about 0.
    column_k = 273.15 + 15.0 + 0.0065 * 250
    expected = 1013.0 * math.exp(-G * 500 / (R * column_k))
    np.testing.assert_allclose(air.pressure_hpa[24:], expected, atol=0.01)


def test_sea_level_pressure_takes_the_present_temperature_where_the_earlier_is_missing():
    temperature = np.where(CLOCK.hour < 12, np.nan, 20.0)
    air = on_grid(
        station(elevation_m=500.0),
        temperature_c=temperature,
        dew_point_c=-60.0,
        sea_level_pressure_hpa=1013.0,
    )
    column_k = 273.15 + 20.0 + 0.0065 * 250
    expected = 1013.0 * math.exp(-G * 500 / (R * column_k))
    known = np.isfinite(air.pressure_hpa)
    np.testing.assert_array_equal(known, CLOCK.hour >= 12)
    np.testing.assert_allclose(air.pressure_hpa[known], expected, atol=0.01)


def test_sea_level_pressure_is_not_used_above_1500_m():
    for elevation_m, used in ((1500.0, True), (1500.1, False)):
        air = on_grid(station(elevation_m=elevation_m), sea_level_pressure_hpa=1013.0)
        assert np.isfinite(air.pressure_hpa).all() == used
        assert np.isfinite(air.pressure_hpa).any() == used


def test_measured_pressure_of_a_farther_station_goes_before_inverted_sea_level_pressure():
    near = on_grid(station("A"), sea_level_pressure_hpa=1013.0)
    far = on_grid(station("B", longitude=11.5), qnh_hpa=1020.0)
    got = at_field(field(), near, far)
    assert (got.share[0] == 1.0).all()
    assert (got.pressure_source == SOURCES.index("QNH")).all()
    np.testing.assert_allclose(qnh_from_station_pressure_hpa(got.pressure_hpa, 1000.0), 1020.0)


def test_pressures_of_several_stations_are_blended_in_the_logarithm():
    airs = (
        on_grid(station("A", latitude=46.2), station_pressure_hpa=900.0),
        on_grid(station("B", latitude=46.2, longitude=11.0), station_pressure_hpa=904.0),
    )
    got = at_field(field(), *airs)
    # Equal weights: the geometric mean.
    np.testing.assert_allclose(got.pressure_hpa, math.sqrt(900.0 * 904.0), rtol=1e-12)


@pytest.mark.parametrize(("height_m", "column_k"), [(500.0, 1.5 / 2), (-500.0, 1.5 / 2)])
def test_error_of_a_carried_pressure_is_that_of_the_barometer_and_the_column(height_m, column_k):
    air = on_grid(temperature_c=20.0, dew_point_c=-80.0, station_pressure_hpa=900.0)
    got = at_field(field(1000.0 + height_m), air)
    # The planning error at 500 m is 1.5 K (METHODS 2.7) at the carried end and none at the
    # other; dp = g z p / (R T^2) dT (METHODS 2.6) with the station's temperature.
    per_kelvin = G * 500.0 * got.pressure_hpa[JULY_NOON] / (R * 293.15**2)
    expected = math.hypot(air.pressure_error_hpa[JULY_NOON], per_kelvin * column_k)
    assert got.pressure_error_hpa[JULY_NOON] == pytest.approx(expected, rel=1e-9)
    assert got.pressure_error_hpa[JULY_NOON] > air.pressure_error_hpa[JULY_NOON]


def test_equal_stations_have_the_error_of_one():
    one = on_grid(station("A", 700.0, 46.1), station_pressure_hpa=930.0)
    two = on_grid(station("B", 700.0, 46.1), station_pressure_hpa=930.0)
    single, both = at_field(field(), one), at_field(field(), one, two)
    np.testing.assert_allclose(both.pressure_error_hpa, single.pressure_error_hpa, rtol=1e-12)
    np.testing.assert_allclose(both.pressure_hpa, single.pressure_hpa, rtol=1e-12)


# ---- climatological pressure -----------------------------------------------------------------


def qnh_by_hand(qnh, from_m, to_m, temperature_k):
    """Return the QNH at another height of the same dry air, with 6.5 K/km between (METHODS 2)."""
    exponent = G / (R * 0.0065)
    factor_from = 1 - 0.0065 * from_m / 288.15
    p = 1013.25 * ((qnh / 1013.25) ** (1 / exponent) - 0.0065 * from_m / 288.15) ** exponent
    assert 0 < factor_from <= 1
    mean_k = temperature_k - 0.0065 * (to_m - from_m) / 2
    moved = p * math.exp(-G * (to_m - from_m) / (R * mean_k))
    return 1013.25 * ((moved / 1013.25) ** (1 / exponent) + 0.0065 * to_m / 288.15) ** exponent


def test_climatological_pressure_only_in_months_without_any():
    pressure = np.full(len(GRID), 900.0)
    pressure[(CLOCK.month == 2) | ((CLOCK.month == 4) & (CLOCK.day_of_month > 1))] = np.nan
    here = on_grid(station("A"), station_pressure_hpa=pressure)
    far = on_grid(station("B", 100.0, 49.0), dew_point_c=-80.0, qnh_hpa=1020.0)
    got = at_field(field(), here, far)
    stand_in = got.pressure_source == SOURCES.index(ANOMALIES)
    # March has no pressure at all; May has a single day and keeps its gaps.
    np.testing.assert_array_equal(stand_in, (CLOCK.month == 2) & CLOCK.in_period)
    assert np.isnan(got.pressure_hpa[(CLOCK.month == 4) & (CLOCK.day_of_month > 1)]).all()
    # QNH of the region's station in that month, carried to the field's elevation at 20 degC.
    own = qnh_from_station_pressure_hpa(got.pressure_hpa[stand_in], 1000.0)
    np.testing.assert_allclose(own, qnh_by_hand(1020.0, 100.0, 1000.0, 293.15), atol=0.01)


def test_climatological_pressure_needs_a_temperature():
    temperature = np.where(CLOCK.hour == 12, 20.0, np.nan)
    got = at_field(field(), on_grid(temperature_c=temperature))
    np.testing.assert_array_equal(
        np.isfinite(got.pressure_hpa), (CLOCK.hour == 12) & CLOCK.in_period
    )


def test_climatological_qnh_is_the_standard_one_where_the_region_has_none():
    beyond = on_grid(station("B", latitude=46.0 + 505 / KM_PER_DEGREE), qnh_hpa=1030.0)
    regional = transfer.regional_qnh(field(), [on_grid(), beyond], CLOCK)
    assert (regional.qnh_hpa == 1013.25).all()
    assert (regional.source == SOURCES.index("climatological")).all()
    within = on_grid(station("B", latitude=46.0 + 490 / KM_PER_DEGREE), qnh_hpa=1030.0)
    regional = transfer.regional_qnh(field(), [on_grid(), within], CLOCK)
    np.testing.assert_allclose(regional.qnh_hpa, np.where(CLOCK.in_period, 1030.0, 1030.0))
    assert (regional.source[CLOCK.in_period] == SOURCES.index(ANOMALIES)).all()


def test_climatological_qnh_weighs_near_stations_more_and_skips_sea_level_pressure():
    near = on_grid(station("A", latitude=46.1), qnh_hpa=1010.0)
    far = on_grid(station("B", latitude=47.0), qnh_hpa=1020.0)
    sea = on_grid(station("C", latitude=46.05, elevation_m=100.0), sea_level_pressure_hpa=980.0)
    regional = transfer.regional_qnh(field(), [near, far, sea], CLOCK)
    # Weights 1 / (d + 5 km) with d = 11.115 and 111.15 km on the ellipsoid.
    w = [1 / (11.115 + 5), 1 / (111.15 + 5)]
    by_hand = (w[0] * 1010.0 + w[1] * 1020.0) / sum(w)
    np.testing.assert_allclose(regional.qnh_hpa, by_hand, atol=0.01)


def test_climatological_qnh_follows_the_months_and_the_day():
    daily = 2.0 * np.sin(CLOCK.day)
    monthly = 1010.0 + CLOCK.month
    regional = transfer.regional_qnh(field(), [on_grid(qnh_hpa=monthly + daily)], CLOCK)
    inside = CLOCK.in_period
    np.testing.assert_allclose(regional.qnh_hpa[inside], (monthly + daily)[inside], rtol=1e-9)


def test_field_far_above_a_warm_valley_gets_the_valleys_air_and_not_its_altimeter_setting():
    # 35 degC at the valley: 20 K above standard lifts the QNH aloft by some 8 hPa per 1000 m.
    valley = on_grid(station("V", 200.0, 46.1), temperature_c=35.0, dew_point_c=-80.0, qnh_hpa=1013)
    regional = transfer.regional_qnh(field(1900.0), [valley], CLOCK)
    expected = qnh_by_hand(1013.0, 200.0, 1900.0, 308.15)
    assert expected > 1013.0 + 10.0
    np.testing.assert_allclose(regional.qnh_hpa[CLOCK.in_period], expected, atol=0.01)


# ---- candidates ------------------------------------------------------------------------------


def ids(where, *stations, radius_km=100.0, trusted=()):
    airs = [on_grid(s, trusted=s.id not in trusted) for s in stations]
    return [c.air.station.id for c in transfer.candidates(where, airs, radius_km)]


def test_candidates_within_the_radius_and_a_thousand_metres():
    near = station("A", latitude=46.0 + 99 / KM_PER_DEGREE)
    far = station("B", latitude=46.0 + 101 / KM_PER_DEGREE)
    high, too_high = station("C", 2000.0), station("D", 2000.5)
    assert ids(field(), near, far, high, too_high) == ["A", "C"]
    assert ids(field(), near, far, radius_km=110.0) == ["A", "B"]


def test_candidates_weight_by_distance_and_height():
    at_20_km = station("A", latitude=46.0 + 20 / KM_PER_DEGREE)
    higher = station("B", 1500.0, latitude=46.0 + 10 / KM_PER_DEGREE)
    airs = [on_grid(s) for s in (at_20_km, higher)]
    first, second = transfer.candidates(field(), airs, 100.0)
    # w = exp(-(dz / 500 m)^2) / (d + 5 km): 20 km and level against 10 km and 500 m.
    assert (first.air.station.id, second.air.station.id) == ("A", "B")
    assert second.weight / first.weight == pytest.approx(25 / 15 / math.e, rel=0.002)
    assert second.height_difference_m == -500.0
    assert first.distance_km == pytest.approx(20.0, rel=0.003)


def test_candidates_of_one_weight_go_by_id():
    twin, other = station("B", latitude=46.5), station("A", latitude=46.5)
    assert ids(field(), twin, other) == ["A", "B"]


def test_candidates_are_the_eight_best():
    many = [station(f"{i:02d}", latitude=46.0 + (12 - i) / 100) for i in range(12)]
    assert ids(field(), *many) == [f"{i:02d}" for i in range(11, 3, -1)]


def test_misdated_station_serves_only_fields_pinned_to_it():
    wrong = replace(on_grid(station("S")), serves_others=False)
    good = on_grid(station("A", latitude=46.5))
    free = transfer.candidates(field(), [wrong, good], 100.0)
    assert [c.air.station.id for c in free] == ["A"]
    pinned = transfer.candidates(field(stations=("S",)), [wrong, good], 100.0)
    assert [c.air.station.id for c in pinned] == ["S"]


def test_candidates_of_a_pinned_field_are_its_stations_however_far():
    far = station("P", 2500.0, latitude=50.0)
    assert ids(field(stations=("P",)), station("A"), far) == ["P"]
    assert ids(field(stations=("P",)), station("A")) == []


def test_candidates_across_the_date_line_are_near():
    east, west = station("E", longitude=179.9), station("W", longitude=-179.9)
    for longitude in (180.0, -180.0):
        assert ids(field(longitude=longitude), east, west) == ["E", "W"]
    assert ids(field(latitude=90.0), station("N", latitude=89.9, longitude=-60.0)) == ["N"]


def test_station_of_rejected_elevation_serves_its_own_elevation_only():
    doubtful = station("S")
    assert ids(field(1000.0), doubtful, trusted=("S",)) == ["S"]
    assert ids(field(1010.0), doubtful, trusted=("S",)) == []
    assert ids(field(1010.0, stations=("S",)), doubtful, trusted=("S",)) == []
    assert ids(field(1010.0), doubtful) == ["S"]


def test_station_of_rejected_elevation_gives_no_pressure_to_anyone():
    doubtful = on_grid(station("S"), trusted=False, station_pressure_hpa=850.0, qnh_hpa=1000.0)
    assert np.isnan(doubtful.pressure_hpa).all()
    got = at_field(field(), doubtful)
    assert (got.temperature_c == 20.0).all()
    inside = CLOCK.in_period
    assert (got.pressure_source[inside] == SOURCES.index("climatological")).all()
    np.testing.assert_allclose(got.pressure_hpa[inside], isa_pressure_hpa(1000.0), rtol=1e-9)


# ---- what must hold for any set of stations --------------------------------------------------

PLACES = {
    "A": station("A", 1000.0, 46.1, 11.0),
    "B": station("B", 1400.0, 46.0, 11.2),
    "C": station("C", 300.0, 45.8, 11.1),
    "D": station("D", 1000.0, 46.1, 10.9),
}
AIRS = {i: measured(s, seed, gaps=0.3) for seed, (i, s) in enumerate(PLACES.items())}
for _lost in ("A", "D"):  # two stations without a barometer, so that the months matter too
    _nothing = np.full(len(GRID), np.nan)
    AIRS[_lost] = replace(
        AIRS[_lost],
        pressure_hpa=_nothing,
        pressure_source=np.full(len(GRID), NO_PRESSURE, np.uint8),
        pressure_error_hpa=_nothing,
    )


def assert_same_air(got, expected):
    for name in (
        "temperature_c",
        "vapour_pressure_hpa",
        "pressure_hpa",
        "pressure_source",
        "pressure_error_hpa",
    ):
        np.testing.assert_array_equal(getattr(got, name), getattr(expected, name))


@settings(deadline=None, max_examples=15)
@given(st.permutations(sorted(AIRS)))
def test_order_of_the_stations_does_not_matter(order):
    expected = at_field(field(), *AIRS.values())
    assert_same_air(at_field(field(), *(AIRS[i] for i in order)), expected)


@settings(deadline=None, max_examples=15)
@given(st.permutations(sorted(AIRS)))
def test_order_of_the_stations_does_not_matter_to_the_climatological_pressure(order):
    region = [measured(s, seed) for seed, s in enumerate(PLACES.values())]
    expected = transfer.regional_qnh(field(), region, CLOCK)
    shuffled = [region[sorted(AIRS).index(i)] for i in order]
    got = transfer.regional_qnh(field(), shuffled, CLOCK)
    np.testing.assert_allclose(got.qnh_hpa, expected.qnh_hpa, rtol=1e-14)
    np.testing.assert_allclose(got.error_hpa, expected.error_hpa, rtol=1e-12)
    np.testing.assert_array_equal(got.source, expected.source)


@pytest.mark.parametrize(
    "useless",
    [
        on_grid(station("0"), temperature_c=np.nan, dew_point_c=np.nan),
        replace(on_grid(station("0", latitude=46.01), dew_point_c=15.0), serves_others=False),
        on_grid(station("0", latitude=60.0), station_pressure_hpa=850.0),
        on_grid(station("0", elevation_m=2500.0)),
        on_grid(station("0", elevation_m=1020.0), trusted=False, station_pressure_hpa=850.0),
    ],
    ids=["empty", "misdated", "far", "high", "of rejected elevation"],
)
def test_unusable_station_changes_nothing(useless):
    expected = at_field(field(), *AIRS.values())
    assert_same_air(at_field(field(), useless, *AIRS.values()), expected)


def test_field_without_a_station_has_no_air():
    got = at_field(field(), on_grid(station(latitude=60.0)))
    assert np.isnan(got.temperature_c).all() and np.isnan(got.pressure_hpa).all()
    assert got.share.shape == (0, len(GRID))
    assert (got.pressure_source == NO_PRESSURE).all()


def test_hours_outside_the_grid_are_left_out():
    index = pd.date_range("2018-12-01", periods=24 * 500, freq="h", tz="UTC", name="time")
    table = pd.DataFrame(1.0, index=index, columns=list(COLUMNS))
    table["station_pressure_hpa"] = 900.0
    air = transfer.on_grid(station(), table, GRID)
    assert len(air.temperature_c) == len(GRID)
    assert np.isfinite(air.temperature_c).all()


def test_the_south_has_its_warm_half_in_january():
    got = at_field(
        replace(SOUTH, elevation_m=1500.0), on_grid(station(latitude=-33.0)), radius_km=50.0
    )
    noon = CLOCK.hour == 12
    january = got.temperature_c[noon & (CLOCK.month == 0)][0]
    july = got.temperature_c[noon & (CLOCK.month == 6)][0]
    assert (january, july) == (pytest.approx(20.0 - 3.5), pytest.approx(20.0 - 2.5))


# ---- never more than saturated ---------------------------------------------------------------


def relative_humidity(got, elevation_m):
    dew_point = dew_point_c(got.vapour_pressure_hpa, isa_pressure_hpa(elevation_m))
    return relative_humidity_pct(got.temperature_c, dew_point)


@pytest.mark.parametrize("to_m", [1000.0, 1014.0, 1400.0, 600.0])
def test_air_at_the_field_is_never_more_than_saturated(to_m):
    foggy = on_grid(temperature_c=15.0, dew_point_c=15.0)
    got = at_field(field(to_m), foggy)
    assert relative_humidity(got, to_m).max() <= 100.0 + 1e-6


def test_humidity_of_a_warm_neighbour_does_not_oversaturate_the_fields_own_cold_air():
    cold = on_grid(station("S"), temperature_c=5.0, dew_point_c=np.nan)
    warm = on_grid(station("A", latitude=46.2), temperature_c=20.0, dew_point_c=18.0)
    got = at_field(field(), cold, warm)
    assert (got.temperature_c == 5.0).all()
    assert relative_humidity(got, 1000.0).max() <= 100.0 + 1e-6


def test_empty_stations_take_no_place_from_stations_that_report():
    reporting = [
        on_grid(station(f"R{i}", latitude=46.1 + i / 100), temperature_c=10.0 + i) for i in range(8)
    ]
    empty = [
        on_grid(
            station(f"E{i}", latitude=46.05 + i / 100), temperature_c=np.nan, dew_point_c=np.nan
        )
        for i in range(4)
    ]
    assert_same_air(at_field(field(), *empty, *reporting), at_field(field(), *reporting))
