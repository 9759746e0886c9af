"""Air at the field: temperature, vapour pressure and pressure, hour by hour, from stations."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
import pandas as pd

from climarisk.atmosphere import (
    G0,
    R_DRY,
    T0_K,
    hypsometric_pressure_hpa,
    isa_pressure_hpa,
    vapour_pressure_hpa,
    virtual_temperature_k,
)
from climarisk.clock import LocalClock
from climarisk.fields import Field
from climarisk.lapse import Lapse
from climarisk.pressure import (
    NO_PRESSURE,
    SOURCES,
    RegionalQnh,
    StationPressure,
    climatological_pressure,
    climatological_qnh,
    qnh_at_height_hpa,
    station_pressure,
)
from climarisk.reduction import Calibration
from climarisk.stations import Station, distance_km
from climarisk.transfer_error import planning_sd_k
from climarisk.units import KELVIN_AT_0C

#: Kinds of pressure below this index into `SOURCES` rest on the station's own barometer.
_INVERTED = SOURCES.index("sea-level pressure")
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
#: A station at any height counts a little for the QNH of the region.
_LEAST_WEIGHT = 1e-6
_COLUMNS = (
    "temperature_c",
    "dew_point_c",
    "station_pressure_hpa",
    "qnh_hpa",
    "sea_level_pressure_hpa",
)


@dataclass(frozen=True)
class StationAir:
    """A station's hours on the study's grid.

    Parameters
    ----------
    station : Station
    temperature_c, vapour_pressure_hpa, pressure_hpa : ndarray, shape (n_hours,)
        NaN where unknown; ``pressure_hpa`` is the pressure at the station.
    pressure_source : ndarray of uint8, shape (n_hours,)
        Index into `climarisk.pressure.SOURCES`; `NO_PRESSURE` where there is none.
    pressure_error_hpa : ndarray, shape (n_hours,)
        One standard deviation of ``pressure_hpa``.
    calibration : Calibration or None
        The inverse fitted to the station's sea-level pressure, if there is one.
    elevation_trusted : bool
        False: nothing may be carried from it to another elevation.
    serves_others : bool
        False: its dates or its temperature look wrong, so it serves only fields pinned to it.
    """

    station: Station
    temperature_c: np.ndarray
    vapour_pressure_hpa: np.ndarray
    pressure_hpa: np.ndarray
    pressure_source: np.ndarray
    pressure_error_hpa: np.ndarray
    calibration: Calibration | None = None
    elevation_trusted: bool = True
    serves_others: bool = True


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
    carried_km : ndarray, shape (n_hours,)
        Weighted distance over which it was carried; NaN likewise.
    pressure_source : ndarray of uint8, shape (n_hours,)
        Index into `climarisk.pressure.SOURCES`; `NO_PRESSURE` where there is none.
    pressure_error_hpa : ndarray, shape (n_hours,)
        One standard deviation of ``pressure_hpa``.
    """

    temperature_c: np.ndarray
    vapour_pressure_hpa: np.ndarray
    pressure_hpa: np.ndarray
    share: np.ndarray
    carried_m: np.ndarray
    carried_km: np.ndarray
    pressure_source: np.ndarray
    pressure_error_hpa: np.ndarray


def on_grid(
    station: Station,
    hours: pd.DataFrame,
    grid: np.ndarray,
    elevation_trusted: bool = True,
    derived: np.ndarray | None = None,
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
    derived : ndarray of bool, shape (n_rows,), optional
        Rows of `hours` whose station pressure was made from sea-level pressure.
    """
    index = hours.index.as_unit("s").asi8 // 3600 - grid[0]
    inside = (index >= 0) & (index < len(grid))

    def column(values: np.ndarray, empty: float = np.nan) -> np.ndarray:
        spread = np.full(len(grid), empty)
        spread[index[inside]] = values[inside]
        return spread

    columns = {name: column(hours[name].to_numpy()) for name in _COLUMNS}
    made = None if derived is None else column(derived.astype(float), 0.0) > 0
    nothing = np.full(len(grid), np.nan)
    pressure = StationPressure(nothing, np.full(len(grid), NO_PRESSURE, np.uint8), nothing)
    if elevation_trusted:
        pressure = station_pressure(station, columns, utc_month(grid), derived=made)
    known = np.where(
        np.isfinite(pressure.pressure_hpa),
        pressure.pressure_hpa,
        isa_pressure_hpa(station.elevation_m),
    )
    return StationAir(
        station,
        columns["temperature_c"],
        vapour_pressure_hpa(columns["dew_point_c"], known),
        pressure.pressure_hpa,
        pressure.source,
        pressure.error_hpa,
        pressure.calibration,
        elevation_trusted,
    )


def utc_month(grid: np.ndarray) -> np.ndarray:
    """Calendar month of each hour of the grid, 0-11, by UTC."""
    return (grid // 24).astype("datetime64[D]").astype("datetime64[M]").astype(int) % 12


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
            distance > radius_km or abs(dz) > MAXIMUM_HEIGHT_DIFFERENCE_M or not air.serves_others
        ):
            continue
        if not air.elevation_trusted and abs(dz) > 1.0:
            continue
        if not pinned and not np.isfinite(air.temperature_c).any():
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
        dz_km = 0.0 if c.on_spot else c.height_difference_m / 1000.0
        carried_t[i] = c.air.temperature_c - k_per_km * dz_km
        carried_e[i] = c.air.vapour_pressure_hpa * np.exp(-decay * dz_km)
    temperature, share = _blend(carried_t, chosen)
    vapour, vapour_share = _blend(carried_e, chosen)
    own = np.array([c.on_spot for c in chosen], bool)
    carried = (share.sum(axis=0) > 0) & ~(share[own].sum(axis=0) > 0)
    heights = np.array([abs(c.height_difference_m) for c in chosen])
    distances = np.array([c.distance_km for c in chosen])
    # Air as measured at this very height is left as it is; any other is at most saturated.
    here = own & (heights == 0.0)
    measured = (share[here].sum(axis=0) > 0) & (vapour_share[here].sum(axis=0) > 0)
    saturation = vapour_saturated_hpa(temperature, field.elevation_m)
    vapour = np.where(measured, vapour, np.minimum(vapour, saturation))
    pressure = _pressure(field, chosen, temperature, vapour)
    _fill_climatological(field, region, clock, temperature, pressure)
    return FieldAir(
        temperature,
        vapour,
        pressure.pressure_hpa,
        share,
        np.where(carried, heights @ share, np.nan),
        np.where(carried, distances @ share, np.nan),
        pressure.source,
        pressure.error_hpa,
    )


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
) -> StationPressure:
    """Pressure at the field from its candidates by hypsometry, with source and error."""
    n = len(temperature)
    pressure, error = np.full(n, np.nan), np.full(n, np.nan)
    source = np.full(n, NO_PRESSURE, np.uint8)
    for from_sea_level in (False, True):
        carried = np.full((len(chosen), n), np.nan)
        for i, c in enumerate(chosen):
            take = np.isfinite(c.air.pressure_hpa)
            take &= (c.air.pressure_source == _INVERTED) == from_sea_level
            if take.any():
                carried[i, take] = _carried(c, field.elevation_m, temperature, vapour, take)
        # The logarithm, since pressure falls exponentially with height.
        mean, share = _blend(np.log(carried), chosen)
        take = np.isnan(pressure) & np.isfinite(mean)
        if not take.any():
            continue
        pressure[take] = np.exp(mean[take])
        leading = share[:, take].argmax(axis=0)
        kinds = np.array([c.air.pressure_source[take] for c in chosen])
        source[take] = kinds[leading, np.arange(leading.size)]
        squares = [_carried_error_hpa(c, carried[i]) ** 2 for i, c in enumerate(chosen)]
        error[take] = np.sqrt((share * np.nan_to_num(np.array(squares))).sum(axis=0)[take])
        _keep_own(chosen, carried, pressure, take)
    return StationPressure(pressure, source, error)


def _carried_error_hpa(c: Candidate, carried_hpa: np.ndarray) -> np.ndarray:
    """Error of a candidate's carried pressure: its own, and that of the column's temperature.

    One end of the column is measured, the other carried: half the planning error of its mean.
    """
    dz = np.abs(c.height_difference_m)
    column_k = planning_sd_k(dz, c.distance_km) / 2 if not c.on_spot else 0.0
    kelvin = np.where(np.isfinite(c.air.temperature_c), c.air.temperature_c + KELVIN_AT_0C, T0_K)
    per_kelvin = G0 * dz * carried_hpa / (R_DRY * kelvin**2)
    return np.hypot(c.air.pressure_error_hpa, np.nan_to_num(per_kelvin) * column_k)


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
    pressure: StationPressure,
) -> None:
    """Fill, in place, the calendar months that have no pressure at all."""
    known = np.isfinite(pressure.pressure_hpa) & clock.in_period
    has_pressure = np.bincount(clock.month[known], minlength=12) > 0
    empty = ~has_pressure[clock.month] & np.isfinite(temperature) & clock.in_period
    if not empty.any():
        return
    stand_in = climatological_pressure(field.elevation_m, regional_qnh(field, region, clock))
    pressure.pressure_hpa[empty] = stand_in.pressure_hpa[empty]
    pressure.source[empty] = stand_in.source[empty]
    pressure.error_hpa[empty] = stand_in.error_hpa[empty]


def measured_around(field: Field, region: Sequence[StationAir]) -> list[tuple[StationAir, float]]:
    """Stations within 500 km that have a pressure of their own, and how far they are, km."""
    found = []
    for air in region:
        s = air.station
        distance = distance_km(field.latitude, field.longitude, s.latitude, s.longitude)
        if distance <= REGION_KM and (air.pressure_source < _INVERTED).any():
            found.append((air, distance))
    return found


def regional_qnh(field: Field, region: Sequence[StationAir], clock: LocalClock) -> RegionalQnh:
    """QNH at a field without a pressure: the region's monthly means and the day's anomalies.

    Each station's pressure is carried to the field's height first, with the mean of its
    temperatures now and 12 h ago.

    Parameters
    ----------
    field : Field
    region : sequence of StationAir
    clock : LocalClock
    """
    rows, weights = [], []
    for air, distance in measured_around(field, region):
        s = air.station
        own = np.where(
            (air.pressure_source < _INVERTED) & clock.in_period, air.pressure_hpa, np.nan
        )
        earlier = np.concatenate((np.full(12, np.nan), air.temperature_c[:-12]))
        column_c = np.where(
            np.isfinite(earlier), (air.temperature_c + earlier) / 2, air.temperature_c
        )
        rows.append(
            qnh_at_height_hpa(
                own, s.elevation_m, field.elevation_m, column_c, air.vapour_pressure_hpa
            )
        )
        weights.append(max(_weight(distance, field.elevation_m - s.elevation_m), _LEAST_WEIGHT))
    return climatological_qnh(
        np.array(rows).reshape(-1, len(clock.month)), np.array(weights), clock.month
    )
