"""One field's air, hour by hour, with the error of carried air: ready to be scored."""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np

from climarisk.aircraft import AircraftProfile
from climarisk.atmosphere import (
    density_altitude_ft,
    dew_point_c,
    isa_pressure_hpa,
    pressure_altitude_ft,
    relative_humidity_pct,
    vapour_pressure_hpa,
    virtual_temperature_c,
)
from climarisk.clock import LocalClock, in_window, local_clock
from climarisk.fields import Field
from climarisk.performance import Margins, TableAir, density_ratio, margins
from climarisk.region import Region
from climarisk.results import VARIABLES
from climarisk.risk import Hours
from climarisk.study import Study
from climarisk.transfer import Candidate, FieldAir, air_at_field, candidates, warmed
from climarisk.transfer_error import TransferError
from climarisk.verify import lapse_for


@dataclass(frozen=True)
class Scene:
    """One field with its air on the study's hours.

    Parameters
    ----------
    study : Study
    field : Field
    chosen : tuple of Candidate
        Stations its air comes from, the best first.
    lapse_stations : int
        Stations the lapse was fitted from; 0: the day/night table.
    air : FieldAir
        As estimated, hour by hour.
    clock : LocalClock
    inside : ndarray of bool, shape (n_hours,)
        The hours window.
    daylight : ndarray of bool, shape (n_hours,)
        Between the beginning of morning and the end of evening civil twilight.
    error : TransferError
    """

    study: Study
    field: Field
    chosen: tuple[Candidate, ...]
    lapse_stations: int
    air: FieldAir
    clock: LocalClock
    inside: np.ndarray
    daylight: np.ndarray
    error: TransferError

    @cached_property
    def sd_k(self) -> np.ndarray:
        """Standard deviation of the carried temperature, K; 0 where it was measured here."""
        clock = self.clock
        return self.error.sd_k(self.air.carried_m, clock.month, clock.hour, self.air.carried_km)

    @cached_property
    def central(self) -> dict[str, np.ndarray]:
        """The six variables with the air as estimated, each of shape (n_hours,)."""
        return variables(self.field, self.air)

    @cached_property
    def levels(self) -> dict[str, np.ndarray]:
        """The six variables at each level of the error of an hour, shape (n_levels, n_hours).

        One level where the error moves none.
        """
        return _levels_of_variables(
            self.field, self.air, self.error.hour_levels[:, None] * self.sd_k
        )

    @cached_property
    def sds(self) -> dict[str, np.ndarray]:
        """What one standard deviation of the temperature is worth in each variable."""
        return errors_of_variables(self.field, self.air, self.sd_k)

    @cached_property
    def known(self) -> np.ndarray:
        """Places on the grid of the hours of the period with temperature, humidity, pressure."""
        air = self.air
        whole = np.isfinite(air.temperature_c) & np.isfinite(air.vapour_pressure_hpa)
        return np.flatnonzero(whole & np.isfinite(air.pressure_hpa) & self.clock.in_period)

    @cached_property
    def shifts(self) -> np.ndarray:
        """What each level of a place's error adds to the temperature, K; (n_levels, n_hours).

        No row where every hour was measured here.
        """
        shifts = self.error.place_levels[:, None] * self.sd_k
        return shifts if (shifts != 0.0).any() else shifts[:0]

    def table_air(self, places: np.ndarray, shift_k: np.ndarray | float = 0.0) -> TableAir:
        """The air that enters the performance tables at some hours, the temperature moved.

        Parameters
        ----------
        places : ndarray of int, shape (n,)
            On the grid; hours with all values known.
        shift_k : ndarray, shape (n,), or float
            Added to the temperature; the vapour pressure stays, up to saturation.
        """
        chosen = replace(
            self.air,
            temperature_c=self.air.temperature_c[places],
            vapour_pressure_hpa=self.air.vapour_pressure_hpa[places],
            pressure_hpa=self.air.pressure_hpa[places],
        )
        pressure = chosen.pressure_hpa
        temperature, vapour = shifted(self.field, chosen, shift_k)
        return TableAir(
            pressure_altitude_ft(pressure),
            virtual_temperature_c(temperature, vapour, pressure)
            if self.study.humidity_in_tables
            else temperature,
            temperature,
            density_altitude_ft(pressure, temperature, vapour),
            density_ratio(pressure, temperature, vapour),
        )

    @cached_property
    def carried(self) -> np.ndarray:
        """Which of the `known` hours were carried from stations elsewhere, as their places."""
        return np.flatnonzero(np.isfinite(self.air.carried_m[self.known]))

    @cached_property
    def central_air(self) -> TableAir:
        """The air of the `known` hours as estimated."""
        return self.table_air(self.known)

    @cached_property
    def level_airs(self) -> tuple[TableAir, ...]:
        """The air of the `carried` hours at each level of a place's error; none without error."""
        where = self.known[self.carried]
        return tuple(self.table_air(where, shift[where]) for shift in self.shifts)


def scene_of(study: Study, field: Field, region: Region) -> Scene:
    """One field's air from the stations around it.

    Parameters
    ----------
    study : Study
    field : Field
    region : Region
    """
    clock = local_clock(field, region.grid, study.first_year, study.last_year)
    chosen = candidates(field, region.stations, study.radius_km)
    lapse = lapse_for(field, region.stations, clock, study.radius_km)
    air = air_at_field(field, chosen, region.stations, clock, lapse)
    return Scene(
        study,
        field,
        tuple(chosen),
        lapse.stations,
        warmed(air, study.warmer_k, study.warmer_holds, field.elevation_m),
        clock,
        in_window(study.window, field, region.grid, clock),
        in_window("daylight", field, region.grid, clock),
        region.error,
    )


def scored(scene: Scene, profile: AircraftProfile) -> Hours:
    """The hours of one aircraft at a field with their margins, at every level of the error.

    Parameters
    ----------
    scene : Scene
    profile : AircraftProfile
    """
    central = margins(profile, scene.field, scene.central_air)
    return Hours(
        scene.clock,
        scene.known,
        central,
        scene.inside,
        scene.study.confidence,
        [
            _moved(central, scene.carried, margins(profile, scene.field, air))
            for air in scene.level_airs
        ],
        scene.error.place_share,
        scene.sds["density_altitude"][scene.known],
    )


def _moved(central: Margins, places: np.ndarray, moved: Margins) -> Margins:
    """The central margins with those of some hours replaced."""
    parts = {}
    for name, values in vars(central).items():
        parts[name] = values.copy()
        parts[name][..., places] = getattr(moved, name)
    return Margins(**parts)


#: Variables that the transfer error of the temperature moves.
_MOVED = ("density_altitude", "temperature", "relative_humidity")


def _levels_of_variables(field: Field, air: FieldAir, shifts: np.ndarray) -> dict[str, np.ndarray]:
    """The six variables at each level of the transfer error; one level where it moves none."""
    central = variables(field, air)
    if not (shifts != 0.0).any():
        return {name: values[None, :] for name, values in central.items()}
    levels = [variables(field, air, shift) for shift in shifts]
    return {
        name: np.array([level[name] for level in levels])
        if name in _MOVED
        else central[name][None, :]
        for name in central
    }


def errors_of_variables(field: Field, air: FieldAir, sd_k: np.ndarray) -> dict[str, np.ndarray]:
    """What one standard deviation of the temperature is worth in each variable it moves.

    Parameters
    ----------
    field : Field
    air : FieldAir
    sd_k : ndarray, shape (n_hours,)

    Returns
    -------
    dict of str to ndarray, shape (n_hours,)
    """
    if not (sd_k > 0).any():
        return {name: np.zeros(len(sd_k)) for name in VARIABLES}
    colder, warmer = variables(field, air, -sd_k), variables(field, air, sd_k)
    return {
        name: np.abs(warmer[name] - colder[name]) / 2 if name in _MOVED else np.zeros(len(sd_k))
        for name in VARIABLES
    }


def variables(
    field: Field, air: FieldAir, shift_k: np.ndarray | float = 0.0
) -> dict[str, np.ndarray]:
    """The six variables of the distribution tables, hour by hour.

    Parameters
    ----------
    field : Field
    air : FieldAir
    shift_k : ndarray, shape (n_hours,), or float
        Added to the temperature; the vapour pressure stays, up to saturation.

    Returns
    -------
    dict of str to ndarray, shape (n_hours,)
        Keys and units of `climarisk.results.VARIABLES`; NaN where an ingredient is missing.
    """
    temperature, vapour = shifted(field, air, shift_k)
    dew_point = dew_point_c(vapour, _known_pressure(field, air))
    return {
        "density_altitude": density_altitude_ft(air.pressure_hpa, temperature, vapour),
        "pressure_altitude": pressure_altitude_ft(air.pressure_hpa),
        "temperature": temperature,
        "dew_point": dew_point,
        "relative_humidity": relative_humidity_pct(temperature, dew_point),
        "vapour_pressure": vapour,
    }


def _known_pressure(field: Field, air: FieldAir) -> np.ndarray:
    """The pressure at the field; the standard one where it is unknown, for humidity alone."""
    standard = isa_pressure_hpa(field.elevation_m)
    return np.where(np.isfinite(air.pressure_hpa), air.pressure_hpa, standard)


def shifted(
    field: Field, air: FieldAir, shift_k: np.ndarray | float
) -> tuple[np.ndarray, np.ndarray]:
    """Temperature and vapour pressure with the temperature moved and the vapour kept."""
    temperature = air.temperature_c + shift_k
    saturated = vapour_pressure_hpa(temperature, _known_pressure(field, air))
    vapour = air.vapour_pressure_hpa
    return temperature, np.where(np.equal(shift_k, 0.0), vapour, np.minimum(vapour, saturated))
