"""Air at the field: temperature, vapour pressure and pressure, hour by hour, from stations."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd

from climarisk.atmosphere import (
    P0_HPA,
    hypsometric_pressure_hpa,
    isa_pressure_hpa,
    qnh_from_station_pressure_hpa,
    station_pressure_from_qnh_hpa,
    station_pressure_from_sea_level_hpa,
    vapour_pressure_hpa,
    virtual_temperature_k,
)
from climarisk.clock import LocalClock
from climarisk.fields import Field
from climarisk.stations import Station, distance_km

#: Where an hour's pressure comes from, in order of preference (METHODS D2).
PRESSURE_SOURCES = ("station pressure", "QNH", "sea-level pressure", "climatological")
NO_PRESSURE = 255
_INVERTED = PRESSURE_SOURCES.index("sea-level pressure")

#: Sea-level pressure is inverted with a caution above the first elevation, m, and not used
#: above the second: the temperature that the reduction used is not known, and each kelvin
#: costs 6 ft of density altitude at 500 m and 19 ft at 1500 m.
SEA_LEVEL_CAUTION_M, SEA_LEVEL_LIMIT_M = 500.0, 1500.0
#: A station more than this above or below the field is not used for it.
MAXIMUM_HEIGHT_DIFFERENCE_M = 1000.0
#: Climatological QNH comes from stations within this distance of the field.
REGION_KM = 500.0

#: Temperature lapse, K/km, by day (10-17 local standard hours) in the warm half of the year,
#: by day in the cold half, and by night: middles of the published ranges 6.5-7.5, 5 and 3-4
#: (Minder et al. 2010, Rolland 2003, Blandford et al. 2008; the middles are a judgement).
LAPSE_DAY_WARM, LAPSE_DAY_COLD, LAPSE_NIGHT = 7.0, 5.0, 3.5
_DAY_HOURS = (10, 17)
#: Decay of vapour pressure with height, 1/km, January to December, northern hemisphere:
#: Liston and Elder (2006), after Kunkel (1989).
VAPOUR_DECAY_PER_KM = np.array(
    [0.41, 0.42, 0.40, 0.39, 0.38, 0.36, 0.33, 0.33, 0.36, 0.37, 0.40, 0.40]
)

_WEIGHT_HEIGHT_M = 500.0
_NEAREST_KM = 1.0


@dataclass(frozen=True)
class StationAir:
    """A station's hours on the study's grid.

    Parameters
    ----------
    station : Station
    temperature_c, vapour_pressure_hpa, pressure_hpa : ndarray, shape (n_hours,)
        NaN where unknown; ``pressure_hpa`` is the pressure at the station.
    pressure_source : ndarray of uint8, shape (n_hours,)
        Index into `PRESSURE_SOURCES`; `NO_PRESSURE` where there is none.
    elevation_trusted : bool
        False: nothing may be carried from it to another elevation.
    """

    station: Station
    temperature_c: np.ndarray
    vapour_pressure_hpa: np.ndarray
    pressure_hpa: np.ndarray
    pressure_source: np.ndarray
    elevation_trusted: bool = True


@dataclass(frozen=True)
class Candidate:
    """A station as seen from a field.

    Parameters
    ----------
    air : StationAir
    distance_km : float
    height_difference_m : float
        Field minus station.
    weight : float
        Grows with nearness, in distance and in height.
    """

    air: StationAir
    distance_km: float
    height_difference_m: float
    weight: float


@dataclass(frozen=True)
class FieldAir:
    """The air at a field on the study's grid.

    Parameters
    ----------
    temperature_c, vapour_pressure_hpa, pressure_hpa : ndarray, shape (n_hours,)
    station : ndarray of int16, shape (n_hours,)
        Index of the candidate that gave the temperature; -1 for none.
    pressure_source : ndarray of uint8, shape (n_hours,)
        Index into `PRESSURE_SOURCES`; `NO_PRESSURE` where there is none.
    """

    temperature_c: np.ndarray
    vapour_pressure_hpa: np.ndarray
    pressure_hpa: np.ndarray
    station: np.ndarray
    pressure_source: np.ndarray


def on_grid(
    station: Station, hours: pd.DataFrame, grid: np.ndarray, elevation_trusted: bool = True
) -> StationAir:
    """A station's checked hours on the grid, with its pressure from the best kind it has.

    Parameters
    ----------
    station : Station
    hours : DataFrame
        The canonical table after quality control.
    grid : ndarray of int64, shape (n_hours,)
        Consecutive UTC hours since 1970.
    elevation_trusted : bool
        False: the station's pressure is not used.
    """
    index = hours.index.as_unit("s").asi8 // 3600 - grid[0]
    inside = (index >= 0) & (index < len(grid))

    def column(name: str) -> np.ndarray:
        values = np.full(len(grid), np.nan)
        values[index[inside]] = hours[name].to_numpy()[inside]
        return values

    temperature, dew_point = column("temperature_c"), column("dew_point_c")
    pressure = np.full(len(grid), np.nan)
    source = np.full(len(grid), NO_PRESSURE, np.uint8)
    if elevation_trusted:
        z = station.elevation_m
        kinds = [
            column("station_pressure_hpa"),
            station_pressure_from_qnh_hpa(column("qnh_hpa"), z),
        ]
        if z <= SEA_LEVEL_LIMIT_M:
            kinds.append(
                _from_sea_level(column("sea_level_pressure_hpa"), z, temperature, dew_point)
            )
        for kind, values in enumerate(kinds):
            take = np.isnan(pressure) & np.isfinite(values)
            pressure[take], source[take] = values[take], kind
    known = np.where(np.isfinite(pressure), pressure, isa_pressure_hpa(station.elevation_m))
    return StationAir(
        station,
        temperature,
        vapour_pressure_hpa(dew_point, known),
        pressure,
        source,
        elevation_trusted,
    )


def _from_sea_level(
    sea_level_hpa: np.ndarray,
    elevation_m: float,
    temperature_c: np.ndarray,
    dew_point_c: np.ndarray,
) -> np.ndarray:
    """Station pressure from sea-level pressure with the mean temperature of now and 12 h ago.

    Where the temperature 12 h ago is missing the present one stands in; where the dew point
    is missing there is no value.
    """
    earlier = np.full(len(temperature_c), np.nan)
    earlier[12:] = temperature_c[:-12]
    mean = np.where(np.isfinite(earlier), (temperature_c + earlier) / 2, temperature_c)
    return station_pressure_from_sea_level_hpa(
        sea_level_hpa, elevation_m, mean, vapour_pressure_hpa(dew_point_c)
    )


def candidates(field: Field, stations: Sequence[StationAir], radius_km: float) -> list[Candidate]:
    """Stations that may serve a field, best first.

    A pinned field takes its stations only.  Otherwise: within the radius and within 1000 m
    of height.  A station whose elevation is not trusted serves only a field that states the
    same elevation.  Order: by weight d^-2 exp(-(dz / 500 m)^2), d at least 1 km.
    """
    chosen = []
    for air in stations:
        s = air.station
        distance = distance_km(field.latitude, field.longitude, s.latitude, s.longitude)
        dz = field.elevation_m - s.elevation_m
        pinned = s.id in field.stations
        if field.stations and not pinned:
            continue
        if not pinned and (distance > radius_km or abs(dz) > MAXIMUM_HEIGHT_DIFFERENCE_M):
            continue
        if not air.elevation_trusted and abs(dz) > 1.0:
            continue
        chosen.append(Candidate(air, distance, dz, _weight(distance, dz)))
    return sorted(chosen, key=lambda c: (-c.weight, c.air.station.id))


def _weight(distance: float, height_difference_m: float) -> float:
    return float(
        max(distance, _NEAREST_KM) ** -2 * np.exp(-((height_difference_m / _WEIGHT_HEIGHT_M) ** 2))
    )


def lapse_k_per_km(latitude: float, clock: LocalClock) -> np.ndarray:
    """Temperature lapse of each hour, K/km, from the day/night table; shape (n_hours,)."""
    warm_half = (clock.month >= 3) & (clock.month <= 8)
    if latitude < 0:
        warm_half = ~warm_half
    day = (clock.hour >= _DAY_HOURS[0]) & (clock.hour <= _DAY_HOURS[1])
    return np.where(day, np.where(warm_half, LAPSE_DAY_WARM, LAPSE_DAY_COLD), LAPSE_NIGHT)


def vapour_decay_per_km(latitude: float, clock: LocalClock) -> np.ndarray:
    """Decay of vapour pressure with height of each hour, 1/km; shape (n_hours,)."""
    return VAPOUR_DECAY_PER_KM[clock.month if latitude >= 0 else (clock.month + 6) % 12]


def air_at_field(
    field: Field,
    chosen: Sequence[Candidate],
    region: Sequence[StationAir],
    clock: LocalClock,
) -> FieldAir:
    """The air at a field, hour by hour, from its candidates.

    Temperature and humidity come together from the best candidate that has both at that
    hour (else temperature alone), pressure from the best candidate that has it, measured
    kinds before inverted sea-level pressure.  In a calendar month for which no candidate has
    any pressure the climatological QNH of the region's stations stands in; single missing
    hours are not filled.

    Parameters
    ----------
    field : Field
    chosen : sequence of Candidate
        Best first.
    region : sequence of StationAir
        Stations for the climatological QNH.
    clock : LocalClock

    Returns
    -------
    FieldAir
    """
    n = len(clock.hour)
    lapse, decay = lapse_k_per_km(field.latitude, clock), vapour_decay_per_km(field.latitude, clock)
    temperature, vapour = np.full(n, np.nan), np.full(n, np.nan)
    station = np.full(n, -1, np.int16)
    for need_humidity in (True, False):
        for i, c in enumerate(chosen):
            has = np.isfinite(c.air.temperature_c)
            if need_humidity:
                has &= np.isfinite(c.air.vapour_pressure_hpa)
            take = np.isnan(temperature) & has
            dz_km = c.height_difference_m / 1000.0
            temperature[take] = c.air.temperature_c[take] - lapse[take] * dz_km
            vapour[take] = c.air.vapour_pressure_hpa[take] * np.exp(-decay[take] * dz_km)
            station[take] = i
    moved = np.array([c.height_difference_m != 0.0 for c in chosen] + [False])[station]
    saturation = vapour_saturated_hpa(temperature, field.elevation_m)
    vapour = np.where(moved, np.minimum(vapour, saturation), vapour)
    pressure, source = _pressure(field, chosen, temperature, vapour)
    _fill_climatological(field, region, clock, temperature, pressure, source)
    return FieldAir(temperature, vapour, pressure, station, source)


def vapour_saturated_hpa(temperature_c: np.ndarray, elevation_m: float) -> np.ndarray:
    """Vapour pressure of saturated air at a temperature, at the ISA pressure of a height."""
    return vapour_pressure_hpa(temperature_c, isa_pressure_hpa(elevation_m))


def _pressure(
    field: Field, chosen: Sequence[Candidate], temperature: np.ndarray, vapour: np.ndarray
) -> tuple[np.ndarray, np.ndarray]:
    """Pressure at the field from its candidates by hypsometry, and the source of each hour."""
    pressure = np.full(len(temperature), np.nan)
    source = np.full(len(temperature), NO_PRESSURE, np.uint8)
    for from_sea_level in (False, True):
        for c in chosen:
            kind = c.air.pressure_source
            take = np.isnan(pressure) & np.isfinite(c.air.pressure_hpa)
            take &= (kind == _INVERTED) == from_sea_level
            if not take.any():
                continue
            pressure[take] = _carried(c, field.elevation_m, temperature, vapour, take)
            source[take] = np.where(np.isfinite(pressure[take]), kind[take], NO_PRESSURE)
    return pressure, source


def _carried(
    c: Candidate, to_m: float, temperature: np.ndarray, vapour: np.ndarray, take: np.ndarray
) -> np.ndarray:
    """A candidate's pressure at the field's elevation; both ends' virtual temperatures."""
    p_station = c.air.pressure_hpa[take]
    if c.height_difference_m == 0.0:
        return p_station
    below = virtual_temperature_k(
        c.air.temperature_c[take], np.nan_to_num(c.air.vapour_pressure_hpa[take]), p_station
    )
    above = virtual_temperature_k(temperature[take], np.nan_to_num(vapour[take]), p_station)
    # The field's own hour may come from another station; any end that is unknown takes the other.
    below = np.where(np.isnan(below), above, below)
    above = np.where(np.isnan(above), below, above)
    return hypsometric_pressure_hpa(p_station, c.air.station.elevation_m, to_m, below, above)


def _fill_climatological(
    field: Field,
    region: Sequence[StationAir],
    clock: LocalClock,
    temperature: np.ndarray,
    pressure: np.ndarray,
    source: np.ndarray,
) -> None:
    """Fill, in place, the calendar months that have no pressure at all."""
    known = np.isfinite(pressure) & clock.in_period
    has_pressure = np.bincount(clock.month[known], minlength=12) > 0
    empty = ~has_pressure[clock.month] & np.isfinite(temperature) & clock.in_period
    if not empty.any():
        return
    qnh = climatological_qnh_hpa(field, region, clock)[clock.month[empty]]
    pressure[empty] = station_pressure_from_qnh_hpa(qnh, field.elevation_m)
    source[empty] = PRESSURE_SOURCES.index("climatological")


def measured_around(field: Field, region: Sequence[StationAir]) -> list[tuple[StationAir, float]]:
    """Stations within 500 km that have a measured station pressure or QNH, and how far, km."""
    found = []
    for air in region:
        s = air.station
        distance = distance_km(field.latitude, field.longitude, s.latitude, s.longitude)
        if distance <= REGION_KM and (air.pressure_source < _INVERTED).any():
            found.append((air, distance))
    return found


def climatological_qnh_hpa(
    field: Field, region: Sequence[StationAir], clock: LocalClock
) -> np.ndarray:
    """Monthly mean QNH around a field, hPa, shape (12,).

    The weighted mean (weights as for the candidates) of the monthly means of the stations
    within 500 km that have a measured pressure; 1013.25 hPa for a month without any.
    """
    total, weights = np.zeros(12), np.zeros(12)
    for air, distance in measured_around(field, region):
        s = air.station
        measured = (air.pressure_source < _INVERTED) & clock.in_period
        if not measured.any():
            continue
        qnh = qnh_from_station_pressure_hpa(air.pressure_hpa[measured], s.elevation_m)
        count = np.bincount(clock.month[measured], minlength=12)
        mean = np.bincount(clock.month[measured], qnh, minlength=12) / np.maximum(count, 1)
        weight = _weight(distance, field.elevation_m - s.elevation_m) * (count > 0)
        total += weight * mean
        weights += weight
    return np.where(weights > 0, total / np.where(weights > 0, weights, 1.0), P0_HPA)
