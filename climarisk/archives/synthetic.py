"""Invented hourly weather for the demo study: plausible, seeded, and never an observation.

The generator is pure: the same stations, years and seed give the same tables.  A
station's hours depend on the seed, the period and its own description, not on which
other stations are asked for or in which order.

Notes
-----
Every coefficient in this module is an invented setting, chosen so that the result looks
like a mid-latitude mountain region; none is a measured value.  The random bits come from
PCG64, whose bit stream numpy keeps stable between versions, and are turned into normal
deviates here because numpy does not promise that for its own distributions.
"""

from __future__ import annotations

import hashlib
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd

from climarisk.atmosphere import (
    dew_point_c,
    hypsometric_pressure_hpa,
    saturation_vapour_pressure_hpa,
    virtual_temperature_k,
)
from climarisk.errors import InputError
from climarisk.observations import COLUMNS, ArchiveFile, Note

SOURCE = "climarisk weather generator: invented weather, not observations"
SYNTHETIC_NOTE: Note = (
    "note",
    "invented-weather",
    "the hours of this station are invented by the weather generator, they are not observations.",
)

_EARTH_RADIUS_KM = 6371.0
_MODES = 96
_FIELD_SCALE_KM = 300.0
_SHARED_VARIANCE = 0.9
_DAILY_MEMORY = 0.7
_WARMEST_DAY = 201.0
_DAYS_PER_YEAR = 365.2425
_WARMEST_SOLAR_HOUR = 15.0
_MEAN_LAPSE_C_PER_KM = 5.6
_DIURNAL_LAPSE_C_PER_KM = 1.3
_VAPOUR_DECAY_PER_KM = 0.38
_LOWEST_RH, _HIGHEST_RH = 0.05, 1.0


@dataclass(frozen=True)
class SyntheticStation:
    """An invented weather station and the climate it stands in.

    Parameters
    ----------
    id, name : str
    latitude, longitude : float
        Degrees north (-90 to 90) and east (-180 to 180).
    elevation_m : float
        Metres above mean sea level, -500 to 6000.
    utc_offset_hours : float
        Local standard time minus UTC, -12 to 14.
    mean_temperature_sea_level_c : float
        Mean over the year of the air reduced to sea level, degC.
    seasonal_amplitude_c, diurnal_amplitude_c : float
        Half the range over the year and over a day of mean cloudiness, K.
    day_to_day_sd_c, year_to_year_sd_c : float
        Standard deviation of the daily and of the yearly anomaly, K.
    relative_humidity_pct : float
        Relative humidity at the day's mean temperature, 10 to 95 %.
    valley_inversion_c : float
        Extra cooling of a valley floor on a cloudless night, K; 0 on a slope or summit.
    """

    id: str
    name: str
    latitude: float
    longitude: float
    elevation_m: float
    utc_offset_hours: float
    mean_temperature_sea_level_c: float = 15.0
    seasonal_amplitude_c: float = 9.0
    diurnal_amplitude_c: float = 5.5
    day_to_day_sd_c: float = 2.8
    year_to_year_sd_c: float = 0.8
    relative_humidity_pct: float = 58.0
    valley_inversion_c: float = 0.0


@dataclass(frozen=True)
class _Clock:
    """The hours of one station: UTC, and the phases of the year and of the day (-1 to 1)."""

    utc: pd.DatetimeIndex
    days: np.ndarray
    year_index: np.ndarray
    summer: np.ndarray
    daypart: np.ndarray


def generate(
    stations: Sequence[SyntheticStation], first_year: int, last_year: int, seed: int
) -> dict[str, ArchiveFile]:
    """Return invented hours of every station for whole years of its local standard time.

    Parameters
    ----------
    stations : sequence of SyntheticStation
    first_year, last_year : int
        First and last year, both included.
    seed : int

    Returns
    -------
    dict of str to ArchiveFile
        By station id.  Temperature and dew point to 0.1 degC, station pressure to 0.1 hPa,
        wind to 10 degrees and 1 kt; about 1-2 % of the hours are missing.

    Raises
    ------
    InputError
        A station or the period is outside the allowed range, or an id comes twice.
    """
    problems = _problems(stations, first_year, last_year)
    if problems:
        raise InputError(problems)
    return {s.id: _station_file(s, first_year, last_year, seed) for s in stations}


def _problems(stations: Sequence[SyntheticStation], first_year: int, last_year: int) -> list[str]:
    """Return what is wrong with the request, one sentence each."""
    problems = []
    if not 1900 <= first_year <= last_year <= 2200:
        problems.append(
            f"invented weather: the period {first_year}-{last_year} is not allowed; give a first "
            "year no later than the last, both between 1900 and 2200"
        )
    ranges = {
        "latitude": (-90.0, 90.0),
        "longitude": (-180.0, 180.0),
        "elevation_m": (-500.0, 6000.0),
        "utc_offset_hours": (-12.0, 14.0),
        "mean_temperature_sea_level_c": (-30.0, 35.0),
        "seasonal_amplitude_c": (0.0, 30.0),
        "diurnal_amplitude_c": (0.0, 15.0),
        "day_to_day_sd_c": (0.0, 8.0),
        "year_to_year_sd_c": (0.0, 4.0),
        "relative_humidity_pct": (10.0, 95.0),
        "valley_inversion_c": (0.0, 15.0),
    }
    for station in stations:
        for name, (low, high) in ranges.items():
            value = getattr(station, name)
            if not low <= value <= high:
                problems.append(
                    f"invented station {station.id}: {name} is {value}; "
                    f"allowed is {low:g} to {high:g}"
                )
    ids = [station.id for station in stations]
    for repeated in sorted({name for name in ids if ids.count(name) > 1}):
        problems.append(
            f"invented station {repeated}: the id comes more than once; give each its own"
        )
    return problems


def _station_file(
    station: SyntheticStation, first_year: int, last_year: int, seed: int
) -> ArchiveFile:
    """Return all hours of one station with its gaps taken out."""
    clock = _clock(station, first_year, last_year)
    hours = _hours(station, clock, seed)
    return ArchiveFile(
        hours=_with_gaps(hours, seed, station.id),
        source=SOURCE,
        station_id=station.id,
        station_name=station.name,
        latitude=station.latitude,
        longitude=station.longitude,
        elevation_m=station.elevation_m,
        notes=(SYNTHETIC_NOTE,),
    )


def _clock(station: SyntheticStation, first_year: int, last_year: int) -> _Clock:
    """Return the full UTC hours that cover the local years, and their phases."""
    offset = pd.Timedelta(hours=station.utc_offset_hours)
    start = pd.Timestamp(first_year, 1, 1, tz="UTC") - offset
    end = pd.Timestamp(last_year + 1, 1, 1, tz="UTC") - offset
    # One hour more on each side, so that zones off the full hour have their first and last.
    utc = pd.date_range(
        start.floor("h") - pd.Timedelta(hours=1), end.ceil("h"), freq="h", name="time", unit="s"
    )
    # Days since four days before the first year in UTC: every local zone falls inside.
    origin = pd.Timestamp(first_year, 1, 1, tz="UTC") - pd.Timedelta(days=4)
    days = (utc - origin) / pd.Timedelta(days=1)
    solar_hour = (utc.hour.to_numpy() + station.longitude / 15.0) % 24.0
    day_of_year = utc.day_of_year.to_numpy() + utc.hour.to_numpy() / 24.0
    summer = np.cos(2 * np.pi * (day_of_year - _WARMEST_DAY) / _DAYS_PER_YEAR)
    if station.latitude < 0:
        summer = -summer
    turn = 2 * np.pi * (solar_hour - _WARMEST_SOLAR_HOUR) / 24.0
    # The second harmonic makes the afternoon peak sharper and moves the minimum to dawn.
    daypart = (np.cos(turn) + 0.25 * np.cos(2 * turn + 0.6)) / 1.2
    local_year = (utc + offset).year.to_numpy()
    year_index = np.clip(local_year, first_year, last_year) - first_year
    return _Clock(utc, np.asarray(days, dtype=float), year_index, summer, daypart)


def _hours(station: SyntheticStation, clock: _Clock, seed: int) -> pd.DataFrame:
    """Return the complete canonical table of one station."""
    n_days = int(clock.days[-1]) + 3
    n_years = int(clock.year_index[-1]) + 1

    def daily(label: str) -> np.ndarray:
        series = _anomaly(station, seed, label, n_days, _DAILY_MEMORY)
        return np.interp(clock.days, np.arange(n_days) + 0.5, series)

    clear = 0.5 * (1.0 - np.tanh(0.9 * daily("cloud")))
    yearly = _anomaly(station, seed, "year", n_years, 0.0)[clock.year_index]
    anomaly = station.day_to_day_sd_c * daily("temperature") + station.year_to_year_sd_c * yearly
    sea_level_c = (
        station.mean_temperature_sea_level_c + station.seasonal_amplitude_c * clock.summer + anomaly
    )
    kilometres = station.elevation_m / 1000.0
    slow_c = sea_level_c - _MEAN_LAPSE_C_PER_KM * kilometres
    temperature_c = slow_c + _diurnal_c(station, clock, clear)
    humidity = station.relative_humidity_pct / 100.0 * (1.15 - 0.3 * clear)
    sea_level_e = (
        humidity
        * np.exp(0.12 * daily("humidity"))
        * saturation_vapour_pressure_hpa(np.minimum(sea_level_c, 32.0))
    )
    vapour_hpa = _bounded_vapour_hpa(
        sea_level_e * np.exp(-_VAPOUR_DECAY_PER_KM * kilometres), temperature_c
    )
    sea_level_hpa = 1015.0 + 6.0 * daily("pressure") - 2.0 * clock.summer
    # Heating of the day and valley inversions are shallow: the column has the slow temperature.
    pressure_hpa = _station_pressure_hpa(station, sea_level_hpa, sea_level_c, slow_c, vapour_hpa)
    direction, speed = _wind(station, clock, seed, daily("wind"))
    values = {
        "temperature_c": np.round(temperature_c, 1),
        "dew_point_c": np.round(dew_point_c(vapour_hpa), 1),
        "station_pressure_hpa": np.round(pressure_hpa, 1),
        "wind_direction_deg": direction,
        "wind_speed_kt": speed,
    }
    return pd.DataFrame(values, index=clock.utc).reindex(columns=list(COLUMNS)).astype(float)


def _diurnal_c(station: SyntheticStation, clock: _Clock, clear: np.ndarray) -> np.ndarray:
    """Return the departure from the day's mean: sun, steeper lapse by day, cold valley floor."""
    amplitude = station.diurnal_amplitude_c * (1.0 + 0.25 * clock.summer) * (0.5 + clear)
    lapse = _DIURNAL_LAPSE_C_PER_KM * station.elevation_m / 1000.0
    night = np.clip(-clock.daypart, 0.0, 1.0)
    pool = station.valley_inversion_c * clear * night * (1.0 - 0.3 * clock.summer)
    return (amplitude - lapse) * clock.daypart - pool


def _bounded_vapour_hpa(vapour_hpa: np.ndarray, temperature_c: np.ndarray) -> np.ndarray:
    """Return the vapour pressure kept between 5 % and 100 % relative humidity."""
    saturated = saturation_vapour_pressure_hpa(temperature_c)
    return np.clip(vapour_hpa, _LOWEST_RH * saturated, _HIGHEST_RH * saturated)


def _station_pressure_hpa(
    station: SyntheticStation,
    sea_level_hpa: np.ndarray,
    sea_level_c: np.ndarray,
    station_c: np.ndarray,
    vapour_hpa: np.ndarray,
) -> np.ndarray:
    """Return the station pressure, from the sea-level pressure by the hypsometric equation."""
    sea_level_vapour = vapour_hpa * np.exp(_VAPOUR_DECAY_PER_KM * station.elevation_m / 1000.0)
    sea_level_k = virtual_temperature_k(sea_level_c, sea_level_vapour, sea_level_hpa)
    first = hypsometric_pressure_hpa(
        sea_level_hpa, 0.0, station.elevation_m, sea_level_k, sea_level_k
    )
    station_k = virtual_temperature_k(station_c, vapour_hpa, first)
    return hypsometric_pressure_hpa(sea_level_hpa, 0.0, station.elevation_m, sea_level_k, station_k)


def _wind(
    station: SyntheticStation, clock: _Clock, seed: int, driver: np.ndarray
) -> tuple[np.ndarray, np.ndarray]:
    """Return direction in tens of degrees (missing in calm) and speed in whole knots."""
    noise = _normals(seed, f"wind {station.id}", len(driver))
    speed = np.round(np.clip(5.0 + 2.5 * clock.daypart + 2.5 * driver + 1.5 * noise, 0.0, None))
    direction = np.round((250.0 + 70.0 * driver + 12.0 * noise) / 10.0) * 10.0 % 360.0
    direction = np.where(direction == 0.0, 360.0, direction)
    return np.where(speed > 0, direction, np.nan), speed


def _anomaly(
    station: SyntheticStation, seed: int, label: str, length: int, memory: float
) -> np.ndarray:
    """Return a standard normal AR(1) series, alike at near stations: shape (length,).

    Notes
    -----
    The shared part is a sum of plane waves over the sphere's chord coordinates with random
    wave numbers of standard deviation 1/L and AR(1) amplitudes, whose correlation between
    two places d apart tends to exp(-d^2 / 2 L^2) as the number of waves grows (spectral
    representation of a Gaussian field); the station's own part is independent.
    """
    waves = _normals(seed, f"waves {label}", 3 * _MODES).reshape(_MODES, 3) / _FIELD_SCALE_KM
    latitude, longitude = np.radians(station.latitude), np.radians(station.longitude)
    place = _EARTH_RADIUS_KM * np.array(
        [
            np.cos(latitude) * np.cos(longitude),
            np.cos(latitude) * np.sin(longitude),
            np.sin(latitude),
        ]
    )
    phase = (waves * place).sum(axis=1)
    weights = np.concatenate([np.cos(phase), np.sin(phase)]) / np.sqrt(_MODES)
    shocks = _normals(seed, f"shared {label}", length * 2 * _MODES).reshape(length, 2 * _MODES)
    shared = (shocks * weights).sum(axis=1)
    own = _normals(seed, f"own {label} {station.id}", length)
    shock = np.sqrt(_SHARED_VARIANCE) * shared + np.sqrt(1.0 - _SHARED_VARIANCE) * own
    series = np.empty(length)
    series[0] = shock[0]
    for day in range(1, length):
        series[day] = memory * series[day - 1] + np.sqrt(1.0 - memory**2) * shock[day]
    return series


def _with_gaps(hours: pd.DataFrame, seed: int, station_id: str) -> pd.DataFrame:
    """Return the table without the hours of outages, and with some single values missing."""
    length = len(hours)
    keep = _uniforms(seed, f"hours {station_id}", length) > 0.004
    years = length / (24.0 * _DAYS_PER_YEAR)
    outages = int(np.ceil(1.5 * years))
    draws = _uniforms(seed, f"outages {station_id}", 2 * outages).reshape(outages, 2)
    for position, size in draws:
        begin = int(position * length)
        keep[begin : begin + int(24 * (1.0 + 6.0 * size**2))] = False
    table = hours.copy()
    for column in ("dew_point_c", "station_pressure_hpa"):
        lost = _uniforms(seed, f"{column} {station_id}", length) < 0.003
        table.loc[lost, column] = np.nan
    return table[keep]


def _uniforms(seed: int, label: str, count: int) -> np.ndarray:
    """Return uniform deviates in (0, 1) from the seed and a label."""
    digest = hashlib.sha256(f"{seed}\n{label}".encode()).digest()
    bits = np.random.PCG64(int.from_bytes(digest, "big")).random_raw(count)
    # 53 bits fill a double; the half step keeps 0 out, of which a logarithm is taken.
    return ((bits >> np.uint64(11)).astype(float) + 0.5) * 2.0**-53


def _normals(seed: int, label: str, count: int) -> np.ndarray:
    """Return standard normal deviates from the seed and a label (Box-Muller transform)."""
    half = (count + 1) // 2
    radius = np.sqrt(-2.0 * np.log(_uniforms(seed, f"radius {label}", half)))
    angle = 2.0 * np.pi * _uniforms(seed, f"angle {label}", half)
    return np.concatenate([radius * np.cos(angle), radius * np.sin(angle)])[:count]
