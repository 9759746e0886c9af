"""Air at the field: temperature, vapour pressure and pressure, hour by hour, from stations."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

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
from climarisk.lapse import Lapse
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

#: Decay of vapour pressure with height, 1/km, January to December, northern hemisphere:
#: Liston and Elder (2006), after Kunkel (1989).
VAPOUR_DECAY_PER_KM = np.array(
    [0.41, 0.42, 0.40, 0.39, 0.38, 0.36, 0.33, 0.33, 0.36, 0.37, 0.40, 0.40]
)

#: A station this near the field in distance and height is its own: its air is taken as it is.
ON_SPOT_KM, ON_SPOT_M = 3.0, 15.0
#: Weights fall as 1 / (d + 5 km) and exp(-(dz / 500 m)^2); at most eight stations are used.
#: Chosen by hiding real mountain stations in turn: the optimum is flat (d^-2 costs 0.02 K).
_WEIGHT_KM, _WEIGHT_HEIGHT_M, MOST_STATIONS = 5.0, 500.0, 8


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
    timing_trusted : bool
        False: its dates look wrong, so it serves only fields pinned to it.
    """

    station: Station
    temperature_c: np.ndarray
    vapour_pressure_hpa: np.ndarray
    pressure_hpa: np.ndarray
    pressure_source: np.ndarray
    elevation_trusted: bool = True
    timing_trusted: bool = True


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
    on_spot : bool
        The field's own station.
    """

    air: StationAir
    distance_km: float
    height_difference_m: float
    weight: float
    on_spot: bool


@dataclass(frozen=True)
class FieldAir:
    """The air at a field on the study's grid.

    Parameters
    ----------
    temperature_c, vapour_pressure_hpa, pressure_hpa : ndarray, shape (n_hours,)
    share : ndarray, shape (n_candidates, n_hours)
        Weight of each candidate in the temperature of each hour; sums to 1, or to 0 where
        there is none.
    carried_m : ndarray, shape (n_hours,)
        Weighted height over which the temperature was carried; NaN where the field's own
        station gave it.
    pressure_source : ndarray of uint8, shape (n_hours,)
        Index into `PRESSURE_SOURCES`; `NO_PRESSURE` where there is none.
    """

    temperature_c: np.ndarray
    vapour_pressure_hpa: np.ndarray
    pressure_hpa: np.ndarray
    share: np.ndarray
    carried_m: np.ndarray
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
    """Stations that may serve a field, best first, at most eight.

    A pinned field takes its stations only.  Otherwise: within the radius and within 1000 m
    of height, with dates that fit the neighbours'.  A station whose elevation is not trusted
    serves only a field that states the same elevation.

    Parameters
    ----------
    field : Field
    stations : sequence of StationAir
    radius_km : float
    """
    chosen = []
    for air in stations:
        s = air.station
        distance = distance_km(field.latitude, field.longitude, s.latitude, s.longitude)
        dz = field.elevation_m - s.elevation_m
        pinned = s.id in field.stations
        if field.stations and not pinned:
            continue
        if not pinned and (
            distance > radius_km or abs(dz) > MAXIMUM_HEIGHT_DIFFERENCE_M or not air.timing_trusted
        ):
            continue
        if not air.elevation_trusted and abs(dz) > 1.0:
            continue
        on_spot = distance <= ON_SPOT_KM and abs(dz) <= ON_SPOT_M
        chosen.append(Candidate(air, distance, dz, _weight(distance, dz), on_spot))
    chosen.sort(key=lambda c: (not c.on_spot, -c.weight, c.air.station.id))
    return chosen[:MOST_STATIONS]


def _weight(distance: float, height_difference_m: float) -> float:
    return float(np.exp(-((height_difference_m / _WEIGHT_HEIGHT_M) ** 2)) / (distance + _WEIGHT_KM))


def vapour_decay_per_km(latitude: float, clock: LocalClock) -> np.ndarray:
    """Decay of vapour pressure with height of each hour, 1/km; shape (n_hours,)."""
    return VAPOUR_DECAY_PER_KM[clock.month if latitude >= 0 else (clock.month + 6) % 12]


def air_at_field(
    field: Field,
    chosen: Sequence[Candidate],
    region: Sequence[StationAir],
    clock: LocalClock,
    lapse: Lapse,
) -> FieldAir:
    """The air at a field, hour by hour, from its candidates.

    The field's own station is taken as it is for the hours it has.  Other hours are the
    weighted mean of the candidates that report: temperature along the lapse, vapour pressure
    along its decay, pressure by hypsometry, measured kinds before inverted sea-level
    pressure.  In a calendar month for which no candidate has any pressure the climatological
    QNH of the region's stations stands in; single missing hours are not filled.

    Parameters
    ----------
    field : Field
    chosen : sequence of Candidate
        Best first.
    region : sequence of StationAir
        Stations for the climatological QNH.
    clock : LocalClock
    lapse : Lapse

    Returns
    -------
    FieldAir
    """
    k_per_km = lapse.k_per_km.reshape(-1)[clock.month_hour]
    decay = vapour_decay_per_km(field.latitude, clock)
    n = len(clock.hour)
    carried_t, carried_e = np.full((len(chosen), n), np.nan), np.full((len(chosen), n), np.nan)
    for i, c in enumerate(chosen):
        dz_km = c.height_difference_m / 1000.0
        carried_t[i] = c.air.temperature_c - k_per_km * dz_km
        carried_e[i] = c.air.vapour_pressure_hpa * np.exp(-decay * dz_km)
    temperature, share = _blend(carried_t, chosen)
    vapour, _ = _blend(carried_e, chosen)
    own = np.array([c.on_spot for c in chosen], bool)
    from_own = share[own].sum(axis=0) > 0
    carried = (share.sum(axis=0) > 0) & ~from_own
    heights = np.array([abs(c.height_difference_m) for c in chosen])
    carried_m = np.where(carried, heights @ share, np.nan)
    saturation = vapour_saturated_hpa(temperature, field.elevation_m)
    vapour = np.where(from_own, vapour, np.minimum(vapour, saturation))
    pressure, source = _pressure(field, chosen, temperature, vapour)
    _fill_climatological(field, region, clock, temperature, pressure, source)
    return FieldAir(temperature, vapour, pressure, share, carried_m, source)


def warmed(air: FieldAir, warmer_k: float, holds: str, elevation_m: float) -> FieldAir:
    """The air some kelvins warmer, pressure unchanged.

    Parameters
    ----------
    air : FieldAir
    warmer_k : float
    holds : {"relative humidity", "vapour pressure"}
        What stays unchanged; vapour pressure at most up to saturation.
    elevation_m : float
        Of the field.
    """
    if warmer_k == 0.0:
        return air
    temperature = air.temperature_c + warmer_k
    saturated = vapour_saturated_hpa(temperature, elevation_m)
    if holds == "relative humidity":
        vapour = air.vapour_pressure_hpa * (
            saturated / vapour_saturated_hpa(air.temperature_c, elevation_m)
        )
    else:
        vapour = np.minimum(air.vapour_pressure_hpa, saturated)
    return replace(air, temperature_c=temperature, vapour_pressure_hpa=vapour)


def _blend(values: np.ndarray, chosen: Sequence[Candidate]) -> tuple[np.ndarray, np.ndarray]:
    """Weighted mean over the candidates that have a value, and the weight of each.

    Where the field's own station has a value it stands alone.

    Parameters
    ----------
    values : ndarray, shape (n_candidates, n_hours)
    chosen : sequence of Candidate
    """
    known = np.isfinite(values)
    weight = known * np.array([c.weight for c in chosen])[:, None]
    own = np.array([c.on_spot for c in chosen], bool)
    if own.any():
        weight[~own] *= ~known[own].any(axis=0)
    total = weight.sum(axis=0)
    share = weight / np.where(total > 0, total, 1.0)
    mean = (share * np.where(known, values, 0.0)).sum(axis=0)
    return np.where(total > 0, mean, np.nan), share


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
        carried = np.full((len(chosen), len(temperature)), np.nan)
        for i, c in enumerate(chosen):
            take = np.isfinite(c.air.pressure_hpa)
            take &= (c.air.pressure_source == _INVERTED) == from_sea_level
            if take.any():
                carried[i, take] = _carried(c, field.elevation_m, temperature, vapour, take)
        # The logarithm, since pressure falls exponentially with height.
        mean, share = _blend(np.log(carried), chosen)
        take = np.isnan(pressure) & np.isfinite(mean)
        pressure[take] = np.exp(mean[take])
        if take.any():
            leading = share[:, take].argmax(axis=0)
            kinds = np.array([c.air.pressure_source[take] for c in chosen])
            source[take] = kinds[leading, np.arange(leading.size)]
        _keep_own(chosen, carried, pressure, take)
    return pressure, source


def _keep_own(
    chosen: Sequence[Candidate], carried: np.ndarray, pressure: np.ndarray, take: np.ndarray
) -> None:
    """Put the field's own station's pressure in unrounded by logarithm and back."""
    for i, c in enumerate(chosen):
        if c.on_spot:
            exact = take & np.isfinite(carried[i])
            pressure[exact] = carried[i, exact]
            return


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
