"""Engine power that the air leaves, and what humidity alone takes from it.

References
----------
.. [1] Gagg, R. F. and Ferrar, E. V. (1934), altitude performance of aircraft engines; the
   constant 7.55 is recalled, not read in the paper.
.. [2] Brooks, D. B. and Garlock, E. A., NACA TR-426: vapour is an inert diluent, indicated power
   goes with the mass of oxygen at any altitude; hence the density of the dry air in [1].
.. [3] SAE J1349 (June 1990), engine power test code, spark-ignition correction factor.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import ArrayLike

from climarisk.aircraft import AircraftProfile
from climarisk.atmosphere import (
    RHO0,
    density_altitude_ft,
    isa_density,
    isa_pressure_hpa,
    isa_temperature_k,
    moist_density,
    vapour_pressure_hpa,
)
from climarisk.climatology import completeness, segment_quantiles, window_cells, window_coverage
from climarisk.clock import LocalClock
from climarisk.units import KELVIN_AT_0C, METRES_PER_FOOT

#: Friction constant of [1]: a share of the lost density is lost again to friction.
_GAGG = 7.55
#: [3]: slope and friction of the factor; the dry pressure and the temperature at which it is 1
#: (990 hPa, 25 degC, written there as a difference of 273, kept as printed).
_J1349_SLOPE, _J1349_FRICTION = 1.180, 0.18
_J1349_HPA, _J1349_K, _J1349_ZERO = 990.0, 298.0, 273.0

_PERCENTILES = {"power_p10": 0.1, "power_p50": 0.5, "power_p90": 0.9}


def gagg_ferrar(density_ratio: ArrayLike) -> np.ndarray:
    """Full-throttle power of an engine without a charger, as a share of standard sea level.

    Parameters
    ----------
    density_ratio : array_like
        Of the dry air to the standard sea level; above 0.12, where the engine stops giving any.

    Notes
    -----
    ``sigma - (1 - sigma) / 7.55`` at a fixed speed of rotation [1].
    """
    sigma = np.asarray(density_ratio, float)
    return sigma - (1.0 - sigma) / _GAGG


def j1349_factor(
    pressure_hpa: ArrayLike, temperature_c: ArrayLike, vapour_pressure_hpa: ArrayLike = 0.0
) -> np.ndarray:
    """Correction factor of SAE J1349 [3]: power on its standard day over power in this air.

    Parameters
    ----------
    pressure_hpa, temperature_c, vapour_pressure_hpa : array_like
        Station pressure (above the vapour pressure), air temperature, vapour pressure.
    """
    dry = np.asarray(pressure_hpa, float) - vapour_pressure_hpa
    warmth = np.sqrt((np.asarray(temperature_c, float) + _J1349_ZERO) / _J1349_K)
    return _J1349_SLOPE * (_J1349_HPA / dry * warmth) - _J1349_FRICTION


def sae_j1349_share(
    pressure_hpa: ArrayLike,
    temperature_c: ArrayLike,
    vapour_pressure_hpa: ArrayLike = 0.0,
    standard_altitude_ft: float = 0.0,
) -> np.ndarray:
    """Power by SAE J1349 as a share of that in dry standard air.

    Parameters
    ----------
    pressure_hpa, temperature_c, vapour_pressure_hpa : array_like
        As for `j1349_factor`.
    standard_altitude_ft : float
        Where the share is 1 in dry standard air.

    Notes
    -----
    The factor in dry standard air over the factor in this air.  It is meant for small departures;
    its root of the temperature lets hot air cost less, and cold air yield less, than [1].
    """
    metres = standard_altitude_ft * METRES_PER_FOOT
    standard = j1349_factor(isa_pressure_hpa(metres), isa_temperature_k(metres) - KELVIN_AT_0C)
    return standard / j1349_factor(pressure_hpa, temperature_c, vapour_pressure_hpa)


def power_share(
    profile: AircraftProfile,
    pressure_hpa: ArrayLike,
    temperature_c: ArrayLike,
    vapour_pressure_hpa: ArrayLike = 0.0,
) -> np.ndarray:
    """Power available as a share of that at standard sea level, the careful figure.

    Parameters
    ----------
    profile : AircraftProfile
    pressure_hpa, temperature_c, vapour_pressure_hpa : array_like
        Broadcast against each other.

    Returns
    -------
    ndarray
        Natural aspiration: `gagg_ferrar` of the density of the dry air.  Turbocharged: the same
        of its ratio to the standard density at the critical altitude, at most 1.  Electric: 1.
        NaN for a diesel engine, and for a turbocharged one without a critical altitude.

    Notes
    -----
    Up to the critical altitude means: while the dry air is at least as dense as standard air is
    there.  On a hot day that ends below the pressure altitude of the same number.
    """
    # A partial pressure behaves as dry air of that pressure.
    dry = np.asarray(pressure_hpa, float) - vapour_pressure_hpa
    sigma = np.asarray(moist_density(dry, temperature_c) / RHO0)
    if profile.aspiration == "natural":
        return gagg_ferrar(sigma)
    if profile.aspiration == "electric":
        return np.where(np.isnan(sigma), np.nan, 1.0)
    if profile.aspiration == "turbocharged" and profile.critical_altitude_ft is not None:
        critical = isa_density(profile.critical_altitude_ft * METRES_PER_FOOT) / RHO0
        return np.minimum(gagg_ferrar(sigma / critical), 1.0)
    return np.full(sigma.shape, np.nan)


def optimistic_share(
    profile: AircraftProfile,
    pressure_hpa: ArrayLike,
    temperature_c: ArrayLike,
    vapour_pressure_hpa: ArrayLike = 0.0,
) -> np.ndarray:
    """Power available by the more favourable of `power_share` and SAE J1349.

    Parameters
    ----------
    profile, pressure_hpa, temperature_c, vapour_pressure_hpa
        As for `power_share`.

    Notes
    -----
    SAE J1349 gives more than Gagg and Ferrar in hot air alone: from about standard temperature
    at sea level, but only from 9 K above it at 1000 m and 18 K at 3000 m.  The bracket has no
    width in colder air.
    """
    careful = power_share(profile, pressure_hpa, temperature_c, vapour_pressure_hpa)
    if profile.aspiration not in ("natural", "turbocharged"):
        return careful
    reference_ft = profile.critical_altitude_ft or 0.0
    other = sae_j1349_share(pressure_hpa, temperature_c, vapour_pressure_hpa, reference_ft)
    if profile.aspiration == "turbocharged":
        other = np.minimum(other, 1.0)
    return np.where(np.isnan(careful), np.nan, np.maximum(careful, other))


def power_method(profile: AircraftProfile) -> str:
    """How the power of an aircraft was computed, or what is missing, for people.

    Parameters
    ----------
    profile : AircraftProfile
    """
    if profile.aspiration == "natural":
        return "full throttle, by the density of the dry air (Gagg and Ferrar)"
    if profile.aspiration == "electric":
        return "an electric motor loses no power to the air; its propeller still does"
    if profile.aspiration == "diesel":
        return "not computed: a diesel engine needs its maker's table"
    if profile.critical_altitude_ft is None:
        return "not computed: give critical_altitude_ft under [engine] of the aircraft"
    return (
        f"full power while the dry air is as dense as standard air at the critical altitude of "
        f"{profile.critical_altitude_ft:.0f} ft, less beyond it (Gagg and Ferrar)"
    )


def humidity_power_pct(
    profile: AircraftProfile,
    pressure_hpa: ArrayLike,
    temperature_c: ArrayLike,
    vapour_pressure_hpa: ArrayLike,
) -> np.ndarray:
    """Power that the vapour takes, % of the power in dry air of the same pressure and temperature.

    Parameters
    ----------
    profile, pressure_hpa, temperature_c, vapour_pressure_hpa
        As for `power_share`; NaN where that is.
    """
    moist = power_share(profile, pressure_hpa, temperature_c, vapour_pressure_hpa)
    return (1.0 - moist / power_share(profile, pressure_hpa, temperature_c)) * 100.0


def humidity_ft(
    pressure_hpa: ArrayLike, temperature_c: ArrayLike, vapour_pressure_hpa: ArrayLike
) -> np.ndarray:
    """Density altitude that the vapour adds at the same pressure and temperature, ft.

    Parameters
    ----------
    pressure_hpa, temperature_c, vapour_pressure_hpa : array_like
    """
    moist = density_altitude_ft(pressure_hpa, temperature_c, vapour_pressure_hpa)
    return np.asarray(moist - density_altitude_ft(pressure_hpa, temperature_c))


@dataclass(frozen=True)
class EngineAir:
    """The air that reaches an engine at a field, hour by hour; NaN where unknown.

    Parameters
    ----------
    pressure_hpa, vapour_pressure_hpa : ndarray, shape (n_hours,)
    temperature_c : ndarray, shape (n_hours,)
        As estimated.
    temperature_levels_c : ndarray, shape (n_levels, n_hours)
        At each level of the transfer error, equally likely; known where `temperature_c` is.
    """

    pressure_hpa: np.ndarray
    vapour_pressure_hpa: np.ndarray
    temperature_c: np.ndarray
    temperature_levels_c: np.ndarray

    def at(self, places: np.ndarray) -> EngineAir:
        """The same air at some hours."""
        return EngineAir(
            self.pressure_hpa[places],
            self.vapour_pressure_hpa[places],
            self.temperature_c[places],
            self.temperature_levels_c[:, places],
        )

    @property
    def known(self) -> np.ndarray:
        """Hours with all values, shape (n_hours,), bool."""
        humid = np.isfinite(self.temperature_c) & np.isfinite(self.vapour_pressure_hpa)
        return humid & np.isfinite(self.pressure_hpa)


def power_tables(
    air: EngineAir, clock: LocalClock, inside: np.ndarray, profiles: Sequence[AircraftProfile]
) -> pd.DataFrame:
    """Power available and the part of humidity, by month over the hours window.

    Parameters
    ----------
    air : EngineAir
    clock : LocalClock
    inside : ndarray of bool, shape (n_hours,)
        The hours window.
    profiles : sequence of AircraftProfile

    Returns
    -------
    DataFrame, shape (12 * len(profiles), 13)
        ``aircraft``, ``month``, ``n_hours``, ``n_years``, ``coverage``, ``method``;
        ``power_p10``, ``power_p50``, ``power_p90``, ``optimistic_p50`` over the levels of the
        transfer error; ``humidity_power_pct_p50``, ``_p90``, ``humidity_ft_p50``, ``_p90`` from
        the air as estimated.  NaN where no year counts or the power is not computed.
    """
    complete = completeness(air.known, clock)
    used = np.flatnonzero(complete.used & inside)
    chosen, month = air.at(used), clock.month[used]
    years = np.zeros((12, clock.n_years), bool)
    years[month, clock.year[used]] = True
    counts = pd.DataFrame(
        {
            "month": np.arange(1, 13),
            "n_hours": np.bincount(month, minlength=12),
            "n_years": years.sum(axis=1),
            "coverage": window_coverage(complete.counts, window_cells(inside, clock)),
        }
    )
    added = humidity_ft(chosen.pressure_hpa, chosen.temperature_c, chosen.vapour_pressure_hpa)
    feet = _quantiles(added, month, {"humidity_ft_p50": 0.5, "humidity_ft_p90": 0.9})
    powers: dict[tuple[str, float | None], pd.DataFrame] = {}  # one for engines that are alike
    tables = []
    for profile in profiles:
        engine = profile.aspiration, profile.critical_altitude_ft
        if engine not in powers:
            powers[engine] = _power_by_month(profile, chosen, month)
        table = pd.concat([counts, powers[engine], feet], axis=1)
        table.insert(0, "aircraft", profile.id)
        table.insert(table.columns.get_loc("coverage") + 1, "method", power_method(profile))
        tables.append(table)
    return pd.concat(tables, ignore_index=True)


def _power_by_month(profile: AircraftProfile, air: EngineAir, month: np.ndarray) -> pd.DataFrame:
    """Percentiles of the power and of what humidity takes; NaN where not computed."""
    levels, pressure = air.temperature_levels_c, air.pressure_hpa
    # A colder level keeps the vapour up to saturation.
    vapour = np.minimum(air.vapour_pressure_hpa, vapour_pressure_hpa(levels, pressure))
    power = power_share(profile, pressure, levels, vapour)
    central = pressure, air.temperature_c, air.vapour_pressure_hpa
    lost = humidity_power_pct(profile, *central)
    return pd.concat(
        [
            _quantiles(power, month, _PERCENTILES),
            _quantiles(
                optimistic_share(profile, pressure, levels, vapour), month, {"optimistic_p50": 0.5}
            ),
            _quantiles(lost, month, {"humidity_power_pct_p50": 0.5, "humidity_power_pct_p90": 0.9}),
        ],
        axis=1,
    )


def _quantiles(values: np.ndarray, month: np.ndarray, wanted: dict[str, float]) -> pd.DataFrame:
    """Type-8 quantiles of each month from one or several levels; NaN where not computed."""
    flat = values.reshape(-1)
    cells = np.tile(month, len(flat) // max(len(month), 1))
    quantiles = segment_quantiles(flat, cells, 12, np.array(list(wanted.values())))
    return pd.DataFrame(quantiles, columns=list(wanted))
