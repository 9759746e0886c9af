"""The atmosphere and the sun against independent libraries, each tolerance with its reason."""

# ruff: noqa: D103 - the name of a test is its sentence

import numpy as np
import pytest

from climarisk import atmosphere as atm
from climarisk import daylight
from climarisk.units import HPA_PER_INHG, KELVIN_AT_0C, METRES_PER_FOOT

CELSIUS_ABOVE_FREEZING = np.linspace(0.02, 50.0, 40)


# ambiance: the ICAO standard atmosphere of 1993.


@pytest.fixture
def ambiance():
    return pytest.importorskip("ambiance")


def test_standard_atmosphere_agrees_with_ambiance(ambiance):
    geometric = np.linspace(-4900.0, 19900.0, 125)
    theirs = ambiance.Atmosphere(geometric)
    height = atm.geopotential_height_m(geometric)
    assert height == pytest.approx(theirs.H, abs=1e-8)
    assert atm.isa_temperature_k(height) == pytest.approx(theirs.temperature, abs=1e-9)
    # It starts each layer from a pressure of six digits (22632.0 Pa at 11 km: 2.2e-6 of it,
    # 177687 Pa at -5 km: 2.8e-6); between 0 and 11 km it starts from the exact 101325 Pa.
    tolerance = np.where((height >= 0) & (height <= 11000), 1e-12, 3e-6)
    assert np.all(np.abs(100 * atm.isa_pressure_hpa(height) / theirs.pressure - 1) <= tolerance)
    # Its density starts from the same pressures through p / (R T).
    assert np.all(np.abs(atm.isa_density(height) / theirs.density - 1) <= tolerance)


def test_altitudes_agree_with_the_inverses_of_ambiance(ambiance):
    pressure = np.linspace(60.0, 1060.0, 101)
    theirs = ambiance.Atmosphere.from_pressure(100 * pressure).H
    # 2.2e-6 of the pressure is 0.014 m in a layer with a scale height of 6342 m.
    assert atm.pressure_altitude_m(pressure) == pytest.approx(theirs, abs=0.02)
    density = np.array([1.3, 1.1, 0.8, 0.4, 0.3, 0.15])
    theirs = ambiance.Atmosphere.from_density(density).H
    ours = atm.density_altitude_from_density_ft(density) * METRES_PER_FOOT
    # Its inverse is a bounded search, good to about 0.1 ft.
    assert ours == pytest.approx(theirs, abs=0.03)


# CoolProp: IAPWS-95 water and the real-gas humid air of ASHRAE RP-1485.


@pytest.fixture
def coolprop():
    return pytest.importorskip("CoolProp.CoolProp")


@pytest.mark.parametrize(
    ("method", "tolerance"),
    # The error of each formula against IAPWS-95 over 0.02 to 50 degC.
    [("buck1981", 1.5e-3), ("buck1996", 5e-4), ("bolton1980", 4.2e-3), ("wmo8", 3.2e-3)],
)
def test_saturation_vapour_pressure_agrees_with_iapws95(coolprop, method, tolerance):
    theirs = [
        coolprop.PropsSI("P", "T", t + KELVIN_AT_0C, "Q", 0, "Water") / 100
        for t in CELSIUS_ABOVE_FREEZING
    ]
    ours = atm.saturation_vapour_pressure_hpa(CELSIUS_ABOVE_FREEZING, method)
    assert ours == pytest.approx(theirs, rel=tolerance)


@pytest.mark.parametrize("pressure", [600.0, 800.0, 1050.0])
@pytest.mark.parametrize("temperature", [0.5, 15.0, 30.0, 45.0])
@pytest.mark.parametrize("humidity", [0.0, 0.3, 1.0])
def test_ideal_gas_density_is_up_to_8e_4_below_real_humid_air(
    coolprop, pressure, temperature, humidity
):
    volume = coolprop.HAPropsSI(
        "Vha", "T", temperature + KELVIN_AT_0C, "P", 100 * pressure, "R", humidity
    )
    e = humidity * atm.vapour_pressure_hpa(temperature, pressure)
    relative = atm.moist_density(pressure, temperature, e) * volume - 1
    # The ideal gas is 6.4e-4 below CIPM-2007 at worst, CoolProp within 1.7e-4 of CIPM-2007.
    assert -8e-4 <= relative <= 1.7e-4


@pytest.mark.parametrize("pressure", [600.0, 800.0, 1050.0])
@pytest.mark.parametrize("temperature", [0.5, 10.0, 20.0])
def test_enhancement_factor_agrees_with_real_saturated_air(coolprop, pressure, temperature):
    kelvin = temperature + KELVIN_AT_0C
    share = coolprop.HAPropsSI("psi_w", "T", kelvin, "P", 100 * pressure, "R", 1.0)
    theirs = share * 100 * pressure / coolprop.PropsSI("P", "T", kelvin, "Q", 0, "Water")
    # Buck's factor leaves out the temperature, which moves it by up to 2.4e-4 from 0 to 20 degC.
    assert atm.enhancement_factor(pressure) == pytest.approx(theirs, abs=2e-4)


# MetPy: gas constant 287.0475, ratio of molar masses 0.621957, vapour pressure of Ambaum (2020).


@pytest.fixture
def metpy():
    return pytest.importorskip("metpy.calc")


@pytest.fixture
def units():
    return pytest.importorskip("metpy.units").units


def test_vapour_pressure_agrees_with_metpy_within_the_error_of_its_formula(metpy, units):
    celsius = np.linspace(-20.0, 50.0, 71)
    theirs = metpy.saturation_vapor_pressure(celsius * units.degC).to("hPa").magnitude
    relative = atm.saturation_vapour_pressure_hpa(celsius) / theirs - 1
    # Against IAPWS-95 Ambaum is 0.24 % low at 25 degC and 0.57 % at 50, Buck 0.15 % at worst.
    assert np.abs(relative[celsius <= 25]).max() <= 2.4e-3 + 1e-3
    assert np.abs(relative).max() <= 5.7e-3 + 1.5e-3


def test_humidity_conversions_agree_with_metpy(metpy, units):
    celsius, dew_point = np.array([5.0, 15.0, 25.0, 35.0]), np.array([-5.0, 10.0, 20.0, 22.0])
    theirs = metpy.relative_humidity_from_dewpoint(celsius * units.degC, dew_point * units.degC)
    # The ratio of two vapour pressures: the errors of the formulas partly cancel.
    ours = atm.relative_humidity_pct(celsius, dew_point)
    assert ours == pytest.approx(100 * theirs.magnitude, rel=3.4e-3)
    theirs = metpy.dewpoint_from_relative_humidity(celsius * units.degC, ours / 100)
    # 0.72 % of vapour pressure is 0.12 K of dew point at 25 degC.
    assert atm.dew_point_from_rh_c(celsius, ours) == pytest.approx(
        theirs.to("degC").magnitude, abs=0.12
    )


def test_moist_air_agrees_with_metpy_within_its_constants(metpy, units):
    e, pressure, celsius = 12.0, 850.0, 20.0
    theirs = metpy.mixing_ratio(e * units.hPa, pressure * units.hPa).magnitude
    ratio = atm.mixing_ratio(e, pressure)
    assert ratio == pytest.approx(theirs, rel=5e-5)  # 0.62198 / 0.621957 = 1 + 3.7e-5
    theirs = metpy.specific_humidity_from_mixing_ratio(ratio).magnitude
    assert atm.specific_humidity(e, pressure) == pytest.approx(theirs, rel=1e-12)
    theirs = metpy.vapor_pressure(pressure * units.hPa, ratio).to("hPa").magnitude
    assert atm.vapour_pressure_from_mixing_ratio_hpa(ratio, pressure) == pytest.approx(
        theirs, rel=5e-5
    )
    theirs = metpy.virtual_temperature(celsius * units.degC, ratio).to("kelvin").magnitude
    # 3.7e-5 of the 1.6 K the vapour adds.
    assert atm.virtual_temperature_k(celsius, e, pressure) == pytest.approx(theirs, abs=5e-4)
    theirs = metpy.density(pressure * units.hPa, celsius * units.degC, ratio).to("kg/m^3").magnitude
    # 287.05287 / 287.0475 = 1 + 1.9e-5.
    assert atm.moist_density(pressure, celsius, e) == pytest.approx(theirs, rel=3e-5)


@pytest.mark.parametrize("elevation", [0.0, 500.0, 1000.0, 2000.0, 3000.0])
@pytest.mark.parametrize("altimeter", [29.0, 30.0, 30.5])
def test_metpy_altimeter_inverse_is_8_ft_lower_or_less(metpy, units, elevation, altimeter):
    theirs = metpy.altimeter_to_station_pressure(altimeter * units.inHg, elevation * units.m)
    ours = atm.station_pressure_from_qnh_hpa(altimeter * HPA_PER_INHG, elevation)
    # The Smithsonian form adds 0.3 hPa for a barometer 10 ft up; its rounded constants
    # (288 K, 0.190284) take back half of that by 3000 m.
    assert 0.15 <= theirs.to("hPa").magnitude - ours <= 0.305
    lower = atm.pressure_altitude_ft(ours) - atm.pressure_altitude_ft(theirs.to("hPa").magnitude)
    assert 5.0 <= lower <= 8.5


# PsychroLib: the ASHRAE Handbook of Fundamentals (2017), gas constant 287.042.


@pytest.fixture
def psychrolib():
    library = pytest.importorskip("psychrolib")
    library.SetUnitSystem(library.SI)
    return library


def test_vapour_pressure_agrees_with_psychrolib_above_freezing(psychrolib):
    # Below 0.01 degC it takes ice, the weather services water.
    theirs = [psychrolib.GetSatVapPres(float(t)) / 100 for t in CELSIUS_ABOVE_FREEZING]
    # Buck is within 1.5e-3 of IAPWS-95, the Hyland-Wexler form within 5e-4 (from memory).
    ours = atm.saturation_vapour_pressure_hpa(CELSIUS_ABOVE_FREEZING)
    assert ours == pytest.approx(theirs, rel=2e-3)


@pytest.mark.parametrize("temperature", [15.0, 25.0, 40.0])
@pytest.mark.parametrize("humidity", [50.0, 80.0, 100.0])
def test_dew_point_agrees_with_psychrolib(psychrolib, temperature, humidity):
    theirs = psychrolib.GetTDewPointFromRelHum(temperature, humidity / 100)
    # 2e-3 of vapour pressure is 0.03 K of dew point.
    assert atm.dew_point_from_rh_c(temperature, humidity) == pytest.approx(theirs, abs=0.03)


@pytest.mark.parametrize("pressure", [700.0, 1013.25])
@pytest.mark.parametrize("temperature", [0.0, 25.0, 40.0])
@pytest.mark.parametrize("e", [0.0, 5.0])
def test_moist_density_agrees_with_psychrolib(psychrolib, pressure, temperature, e):
    ratio = psychrolib.GetHumRatioFromVapPres(100 * e, 100 * pressure)
    theirs = psychrolib.GetMoistAirDensity(temperature, ratio, 100 * pressure)
    # 287.05287 / 287.042 = 1 + 3.8e-5.
    assert atm.moist_density(pressure, temperature, e) == pytest.approx(theirs, rel=4.5e-5)


@pytest.mark.parametrize("height", [0.0, 1000.0, 3000.0, 5000.0, 11000.0])
def test_standard_pressure_agrees_with_psychrolib(psychrolib, height):
    theirs = psychrolib.GetStandardAtmPressure(height) / 100
    # Its coefficients are rounded to six and five digits: 2.25577e-5 per m and 5.2559.
    assert atm.isa_pressure_hpa(height) == pytest.approx(theirs, rel=1e-5)


@pytest.mark.parametrize(("pressure", "height", "t"), [(900, 1000, 20.0), (800, 2000, 15.0)])
def test_reduction_of_dry_air_agrees_with_psychrolib(psychrolib, pressure, height, t):
    theirs = psychrolib.GetSeaLevelPressure(100 * pressure, height, t) / 100
    # The same mean column without vapour; its g 9.807 and R 287.055 are 3e-5 of 0.23 apart.
    assert atm.sea_level_pressure_hpa(pressure, height, t, 0.0) == pytest.approx(theirs, abs=0.01)


# pvlib: the NREL solar position algorithm, good to 0.0003 degrees (from memory).


@pytest.fixture
def spa():
    """Return a function of unix seconds and place that gives the elevation by NREL SPA."""
    pandas = pytest.importorskip("pandas")
    solarposition = pytest.importorskip("pvlib.solarposition")

    def elevation(seconds, latitude, longitude):
        times = pandas.to_datetime(np.asarray(seconds), unit="s", utc=True)
        table = solarposition.spa_python(times, latitude, longitude)
        return table["elevation"].to_numpy()

    return elevation


PLACES = [(46.5, 7.5), (-44.5, 169.0), (39.2, -106.9), (0.0, 37.0), (70.0, 20.0)]


@pytest.mark.parametrize(("latitude", "longitude"), PLACES)
def test_solar_elevation_agrees_with_spa_from_1950_to_2050(spa, latitude, longitude):
    seconds = np.linspace(-631152000, 2524608000, 2001).round()
    ours = daylight.solar_elevation_deg(seconds, latitude, longitude)
    # Meeus states 0.01 degrees for the low-precision longitude, the equation of time adds to it.
    assert np.abs(ours - spa(seconds, latitude, longitude)).max() <= 0.02


@pytest.mark.parametrize(("latitude", "longitude"), PLACES[:4])
@pytest.mark.parametrize("level", [daylight.CIVIL_TWILIGHT_DEG, daylight.SUNRISE_DEG])
def test_crossings_stand_at_the_elevation_by_spa(spa, latitude, longitude, level):
    starts = 1704067200.0 + 86400.0 * np.arange(0, 366, 5)
    for crossing in daylight.sun_crossings(starts, latitude, longitude, level):
        assert np.abs(spa(crossing.round(), latitude, longitude) - level).max() <= 0.02
