"""Hiding stations: each is predicted from the others and held against what it measured."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from climarisk.clock import LocalClock, local_clock
from climarisk.fields import Field
from climarisk.lapse import Lapse, fit_lapse
from climarisk.localtime import timezone_at
from climarisk.transfer import (
    FieldAir,
    StationAir,
    air_at_field,
    candidates,
)
from climarisk.transfer_error import HiddenStation

#: Stations that a lapse is fitted from, at most: the nearest.
LAPSE_STATIONS = 20


@dataclass(frozen=True)
class Hidden:
    """One hidden station: what was estimated for it, and on what grounds.

    Parameters
    ----------
    air : StationAir
        The truth.
    clock : LocalClock
        Local standard time at the station.
    estimate : FieldAir
    nearest_m : float
        Height difference to its best candidate, field minus station, m.
    nearest_km : float
        Distance to its best candidate, km.
    """

    air: StationAir
    clock: LocalClock
    estimate: FieldAir
    nearest_m: float
    nearest_km: float


def as_field(air: StationAir) -> Field:
    """A station as if it were a field without a station of its own."""
    s = air.station
    zone = s.timezone or timezone_at(s.latitude, s.longitude)
    return Field(s.id, s.name, s.latitude, s.longitude, s.elevation_m, zone)


def lapse_for(
    field: Field, stations: Sequence[StationAir], clock: LocalClock, radius_km: float
) -> Lapse:
    """The lapse fitted from the trusted stations around a field; the table without enough.

    Parameters
    ----------
    field : Field
    stations : sequence of StationAir
    clock : LocalClock
    radius_km : float
    """
    from climarisk.stations import distance_km

    near = []
    for air in stations:
        s = air.station
        distance = distance_km(field.latitude, field.longitude, s.latitude, s.longitude)
        if distance <= radius_km and air.elevation_trusted and air.serves_others:
            near.append((distance, s.id, air))
    nearest = [air for _, _, air in sorted(near, key=lambda item: item[:2])[:LAPSE_STATIONS]]
    return fit_lapse(
        [np.where(clock.in_period, air.temperature_c, np.nan) for air in nearest],
        [air.station.elevation_m for air in nearest],
        clock.month_hour,
        field.latitude < 0,
    )


def hide(
    index: int,
    stations: Sequence[StationAir],
    grid: np.ndarray,
    first_year: int,
    last_year: int,
    radius_km: float,
) -> Hidden | None:
    """Estimate one station from the others; None if none can serve it.

    Parameters
    ----------
    index : int
        Of the station to hide.
    stations : sequence of StationAir
    grid : ndarray of int64, shape (n_hours,)
    first_year, last_year : int
    radius_km : float
    """
    air = stations[index]
    field = as_field(air)
    others = [s for i, s in enumerate(stations) if i != index]
    chosen = [c for c in candidates(field, others, radius_km) if not c.on_spot]
    if not chosen or not air.elevation_trusted:
        return None
    clock = local_clock(field, grid, first_year, last_year)
    lapse = lapse_for(field, others, clock, radius_km)
    estimate = air_at_field(field, chosen, others, clock, lapse)
    return Hidden(
        air,
        clock,
        estimate,
        chosen[0].height_difference_m,
        chosen[0].distance_km,
    )


def errors(hidden: Hidden) -> HiddenStation:
    """The temperature errors of a hidden station, hour by hour, within the period."""
    clock = hidden.clock
    measured = np.where(clock.in_period, hidden.air.temperature_c, np.nan)
    return HiddenStation(
        measured - hidden.estimate.temperature_c,
        hidden.estimate.carried_m,
        clock.month,
        clock.hour,
        clock.year,
        hidden.estimate.temperature_c,
        hidden.estimate.carried_km,
    )
