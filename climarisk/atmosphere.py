"""Standard atmosphere, pressure kinds, moist air and density altitude.

Every function takes scalars or arrays, broadcasts them and returns a float for
scalars and a float array otherwise; NaN in any argument gives NaN in that place.
Input that no air can have (a pressure of zero or less, a temperature at or below
absolute zero, a negative vapour pressure or one that leaves no dry air, a height
outside the layers, an infinity) raises ``ValueError`` with the parameter, the first
offending value, how many offend, and what is allowed.  Heights are geopotential
metres, pressures hPa, temperatures degC unless the name says otherwise.

References
----------
.. [1] ISO 2533:1975 and ICAO Doc 7488/3 (1993), the standard atmosphere.
.. [2] Buck, A. L. (1981), J. Appl. Meteor. 20, 1527-1532; Buck (1996), CR-1A manual.
.. [3] Bolton, D. (1980), Mon. Wea. Rev. 108, 1046-1053, equation 10.
.. [4] WMO-No. 8, Guide to Instruments and Methods of Observation, annexes 4.A and 4.B.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from climarisk.units import KELVIN_AT_0C, METRES_PER_FOOT

Values = Any  # a float for scalar input, a float array otherwise; numpy types it as Any too

# The defining constants of the standard atmosphere [1].
T0_K = 288.15
P0_HPA = 1013.25
G0 = 9.80665  # m/s2
R_DRY = 287.05287  # J/(kg K)
LAPSE_K_PER_M = 0.0065  # per geopotential metre, below the tropopause
TROPOPAUSE_M = 11_000.0
EARTH_RADIUS_M = 6_356_766.0
LOWEST_M, HIGHEST_M = -5_000.0, 20_000.0  # the two layers implemented

# Ratio of the molar masses of water and dry air, as WMO-No. 8 (2008) annex 4.A prints it [4].
EPSILON = 0.62198

# Reduction to mean sea level as DWD prints the WMO-No. 8 formula in its BUFR guide.
VAPOUR_K_PER_HPA = 0.12  # Ch, the mean-column allowance for humidity

# Everything below is derived.
PA_PER_HPA = 100.0
RHO0 = P0_HPA * PA_PER_HPA / (R_DRY * T0_K)  # prints as 1.225 kg/m3
PRESSURE_EXPONENT = G0 / (R_DRY * LAPSE_K_PER_M)
DENSITY_EXPONENT = PRESSURE_EXPONENT - 1.0
TEMPERATURE_SCALE_M = T0_K / LAPSE_K_PER_M
TROPOPAUSE_K = T0_K - LAPSE_K_PER_M * TROPOPAUSE_M
_RATIO_11 = TROPOPAUSE_K / T0_K
_SIGMA_11 = _RATIO_11**DENSITY_EXPONENT
_DELTA_11 = _RATIO_11**PRESSURE_EXPONENT
_SCALE_HEIGHT_11_M = R_DRY * TROPOPAUSE_K / G0

_TINY = float(np.finfo(float).tiny)
_HUGE = float(np.finfo(float).max)
_ABOVE_ZERO_K_IN_C = float(np.nextafter(-KELVIN_AT_0C, 0.0))

# Saturation vapour pressure over water as a * exp((b - t / d) * t / (c + t)), t in degC.
_SATURATION = {  # name: (a in hPa, b, c in K, d in K)
    "buck1981": (6.1121, 17.502, 240.97, np.inf),  # [2]
    "buck1996": (6.1121, 18.678, 257.14, 234.5),  # [2]
    "bolton1980": (6.112, 17.67, 243.5, np.inf),  # [3]
    "wmo8": (6.112, 17.62, 243.12, np.inf),  # [4] annex 4.B
}
_ENHANCEMENT = {  # name: (constant, per hPa, hPa)
    "buck1981": (1.0007, 3.46e-6, 0.0),  # [2]
    "wmo8": (1.0016, 3.15e-6, -0.074),  # [4] annex 4.B
}


def _checked(
    values: ArrayLike, name: str, allowed: str, lowest: float = -_HUGE, highest: float = _HUGE
) -> Values:
    """Return the values as floats, or raise naming the parameter and the offender."""
    array = np.asarray(values, dtype=float)
    bad = (array < lowest) | (array > highest)  # NaN compares false and passes
    if bad.any():
        first = float(array[bad].flat[0])
        raise ValueError(
            f"{name}: {int(bad.sum())} of {array.size} values are impossible, "
            f"the first is {first:g}; allowed is {allowed}"
        )
    return array[()]


def _pressure(values: ArrayLike, name: str = "pressure_hpa") -> Values:
    return _checked(values, name, "a finite pressure above 0 hPa", lowest=_TINY)


def _kelvin(values: ArrayLike, name: str) -> Values:
    return _checked(values, name, "a finite temperature above 0 K", lowest=_TINY)


def _celsius_as_kelvin(values: ArrayLike, name: str = "temperature_c") -> Values:
    allowed = f"a finite temperature above {-KELVIN_AT_0C} degC"
    return _checked(values, name, allowed, lowest=_ABOVE_ZERO_K_IN_C) + KELVIN_AT_0C


def _height(values: ArrayLike, name: str, highest: float = HIGHEST_M) -> Values:
    allowed = f"{LOWEST_M:.0f} to {highest:.0f} m"
    return _checked(values, name, allowed, lowest=LOWEST_M, highest=highest)


def _vapour(values: ArrayLike, pressure: Values) -> Values:
    e = _checked(values, "vapour_pressure_hpa", "0 hPa or more, below the pressure", lowest=0.0)
    if np.any(e >= pressure):
        first = float(np.broadcast_to(e, np.broadcast(e, pressure).shape)[e >= pressure].flat[0])
        raise ValueError(
            f"vapour_pressure_hpa: {first:g} is not below pressure_hpa at the same place; "
            "allowed is 0 hPa or more, below the pressure"
        )
    return e


def isa_temperature_k(height_m: ArrayLike) -> Values:
    """Return the standard temperature in K at a geopotential height of -5000 to 20 000 m [1]."""
    height = _height(height_m, "height_m")
    return T0_K - LAPSE_K_PER_M * np.minimum(height, TROPOPAUSE_M)


def isa_pressure_hpa(height_m: ArrayLike) -> Values:
    """Return the standard pressure in hPa at a geopotential height of -5000 to 20 000 m [1]."""
    ratio = isa_temperature_k(height_m) / T0_K
    return P0_HPA * ratio**PRESSURE_EXPONENT * _isothermal_factor(height_m)


def isa_density(height_m: ArrayLike) -> Values:
    """Return the standard density in kg/m3 at a geopotential height of -5000 to 20 000 m [1]."""
    ratio = isa_temperature_k(height_m) / T0_K
    return RHO0 * ratio**DENSITY_EXPONENT * _isothermal_factor(height_m)


def _isothermal_factor(height_m: ArrayLike) -> Values:
    """Return the decay of pressure and density above the tropopause, 1 below it."""
    above = np.maximum(np.asarray(height_m, dtype=float) - TROPOPAUSE_M, 0.0)
    return np.exp(-above / _SCALE_HEIGHT_11_M)


def _height_of(ratio: Values, exponent: float, ratio_11: float) -> Values:
    """Return the height in m at which the standard pressure or density ratio is `ratio`."""
    height = TEMPERATURE_SCALE_M * (1.0 - ratio ** (1.0 / exponent))
    if np.any(ratio < ratio_11):
        isothermal = TROPOPAUSE_M - _SCALE_HEIGHT_11_M * np.log(ratio / ratio_11)
        height = np.where(ratio < ratio_11, isothermal, height)[()]
    return height


def pressure_altitude_m(pressure_hpa: ArrayLike) -> Values:
    """Return the standard height in geopotential m at which the pressure is the given one.

    Parameters
    ----------
    pressure_hpa : array_like
        Station pressure in hPa, above 0.  Below 54.7 hPa (20 000 m) the isothermal
        layer is continued, beyond the published layer.

    Returns
    -------
    float or ndarray

    Raises
    ------
    ValueError
        Zero, negative or infinite pressure.

    Notes
    -----
    The exact inverse of [1] in both layers: ``H = T0/L (1 - (p/p0)**(R L/g0))`` up to
    11 000 m, logarithmic above.

    Examples
    --------
    >>> float(pressure_altitude_m(1013.25))
    0.0
    """
    return _height_of(_pressure(pressure_hpa) / P0_HPA, PRESSURE_EXPONENT, _DELTA_11)


def pressure_altitude_ft(pressure_hpa: ArrayLike) -> Values:
    """Return the pressure altitude in ft; see `pressure_altitude_m`."""
    return pressure_altitude_m(pressure_hpa) / METRES_PER_FOOT


def moist_density(
    pressure_hpa: ArrayLike, temperature_c: ArrayLike, vapour_pressure_hpa: ArrayLike = 0.0
) -> Values:
    """Return the density of moist air in kg/m3 as an ideal gas.

    Parameters
    ----------
    pressure_hpa : array_like
        Station pressure in hPa, above 0.
    temperature_c : array_like
        Air temperature in degC, above absolute zero.
    vapour_pressure_hpa : array_like, optional
        0 hPa (dry air, the default) up to below the pressure.

    Returns
    -------
    float or ndarray

    Raises
    ------
    ValueError
        Impossible pressure, temperature or vapour pressure.

    Notes
    -----
    ``rho = p / (R Tv)``, which is ``(p - (1 - eps) e) / (R T)``.  The ideal gas is part of
    the definition of [1]; real air at 0 to 45 degC and 600 to 1050 hPa is up to 6.4e-4 denser.
    """
    return RHO0 * _density_ratio(pressure_hpa, temperature_c, vapour_pressure_hpa)


def _density_ratio(pressure_hpa: ArrayLike, temperature_c: ArrayLike, vapour: ArrayLike) -> Values:
    pressure = _pressure(pressure_hpa)
    kelvin = _celsius_as_kelvin(temperature_c)
    dry_equivalent = pressure - (1.0 - EPSILON) * _vapour(vapour, pressure)
    return dry_equivalent / kelvin * (T0_K / P0_HPA)


def density_altitude_ft(
    pressure_hpa: ArrayLike, temperature_c: ArrayLike, vapour_pressure_hpa: ArrayLike = 0.0
) -> Values:
    """Return the density altitude in ft: the standard height that has the density of this air.

    Parameters, errors and the definition of density are those of `moist_density`;
    leave the vapour pressure out for the dry density altitude.

    Notes
    -----
    ``DA = T0/L (1 - (rho/rho0)**(1 / (g0/(R L) - 1)))`` up to 11 000 m and the isothermal
    inverse above, both exact inverses of [1].

    Examples
    --------
    >>> round(float(density_altitude_ft(1013.25, 30.0)), 1)
    1723.9
    """
    ratio = _density_ratio(pressure_hpa, temperature_c, vapour_pressure_hpa)
    return _height_of(ratio, DENSITY_EXPONENT, _SIGMA_11) / METRES_PER_FOOT


def density_altitude_from_density_ft(density: ArrayLike) -> Values:
    """Return the density altitude in ft of air with this density in kg/m3 (above 0)."""
    checked = _checked(density, "density", "a finite density above 0 kg/m3", lowest=_TINY)
    return _height_of(checked / RHO0, DENSITY_EXPONENT, _SIGMA_11) / METRES_PER_FOOT


def geopotential_height_m(geometric_m: ArrayLike) -> Values:
    """Return the geopotential height in m of a geometric height, ``r z / (r + z)`` [1]."""
    allowed = f"above {-EARTH_RADIUS_M:.0f} m, the centre of the Earth"
    lowest = float(np.nextafter(-EARTH_RADIUS_M, 0.0))
    geometric = _checked(geometric_m, "geometric_m", allowed, lowest=lowest)
    return EARTH_RADIUS_M * (geometric / (EARTH_RADIUS_M + geometric))


def saturation_vapour_pressure_hpa(temperature_c: ArrayLike, method: str = "buck1981") -> Values:
    """Return the saturation vapour pressure over liquid water (also below 0 degC) in hPa.

    Parameters
    ----------
    temperature_c : array_like
        Temperature in degC, above the pole of the formula (-240.97 for the default).
    method : {"buck1981", "buck1996", "bolton1980", "wmo8"}
        The formula [2]_ [3]_ [4]_; Buck's of 1981 is fitted to -20 to 50 degC.  Over 0 to
        50 degC they differ from IAPWS-95 by at most 0.15, 0.05, 0.42 and 0.32 %.

    Returns
    -------
    float or ndarray

    Raises
    ------
    ValueError
        An unknown method, or a temperature at or below the pole of the formula.
    """
    if method not in _SATURATION:
        raise ValueError(f"method: {method!r} is unknown; allowed are {', '.join(_SATURATION)}")
    a, b, c, d = _SATURATION[method]
    lowest = float(np.nextafter(-c, 0.0))
    t = _checked(temperature_c, "temperature_c", f"a finite temperature above {-c} degC", lowest)
    return a * np.exp((b - t / d) * t / (c + t))


def enhancement_factor(pressure_hpa: ArrayLike, method: str = "buck1981") -> Values:
    """Return how much more vapour saturates moist air than the pure phase (about 1.004).

    Parameters
    ----------
    pressure_hpa : array_like
        Station pressure in hPa, above 0.
    method : {"buck1981", "wmo8"}
        Whose factor [2]_ [4]_.

    Returns
    -------
    float or ndarray

    Raises
    ------
    ValueError
        An unknown method, or an impossible pressure.
    """
    if method not in _ENHANCEMENT:
        raise ValueError(f"method: {method!r} is unknown; allowed are {', '.join(_ENHANCEMENT)}")
    constant, slope, inverse = _ENHANCEMENT[method]
    pressure = _pressure(pressure_hpa)
    return constant + slope * pressure + inverse / pressure


def vapour_pressure_hpa(dew_point_c: ArrayLike, pressure_hpa: ArrayLike | None = None) -> Values:
    """Return the vapour pressure in hPa of air with this dew point (over water) in degC.

    With a pressure, ``e = f(p) es(Td)``; without one the enhancement factor is left out.
    Raises ``ValueError`` as `saturation_vapour_pressure_hpa` and `enhancement_factor` do.
    """
    pure = saturation_vapour_pressure_hpa(dew_point_c)
    return pure if pressure_hpa is None else pure * enhancement_factor(pressure_hpa)


def dew_point_c(vapour_pressure_hpa: ArrayLike, pressure_hpa: ArrayLike | None = None) -> Values:
    """Return the dew point in degC, the exact inverse of `vapour_pressure_hpa`.

    A vapour pressure of 0 has no dew point and gives NaN; a negative one, or one that the
    formula reaches at no temperature, raises ``ValueError``.
    """
    a, b, c, _ = _SATURATION["buck1981"]
    highest = float(np.nextafter(a * np.exp(b), 0.0))
    e = _checked(vapour_pressure_hpa, "vapour_pressure_hpa", f"0 to {highest:g} hPa", 0.0, highest)
    pure = e if pressure_hpa is None else e / enhancement_factor(pressure_hpa)
    gamma = np.log(np.where(pure > 0.0, pure, np.nan) / a)
    return c * gamma / (b - gamma)


def relative_humidity_pct(temperature_c: ArrayLike, dew_point_c: ArrayLike) -> Values:
    """Return the relative humidity over water in %, ``100 es(Td) / es(T)``, not capped at 100.

    Both temperatures are in degC; ``ValueError`` as `saturation_vapour_pressure_hpa`.
    """
    actual = saturation_vapour_pressure_hpa(dew_point_c)
    return 100.0 * actual / saturation_vapour_pressure_hpa(temperature_c)


def dew_point_from_rh_c(temperature_c: ArrayLike, relative_humidity_pct: ArrayLike) -> Values:
    """Return the dew point in degC from temperature in degC and relative humidity in %.

    A humidity of 0 % has no dew point and gives NaN; a negative one raises ``ValueError``.
    """
    rh = _checked(relative_humidity_pct, "relative_humidity_pct", "0 % or more", lowest=0.0)
    return dew_point_c(rh / 100.0 * saturation_vapour_pressure_hpa(temperature_c))


def mixing_ratio(vapour_pressure_hpa: ArrayLike, pressure_hpa: ArrayLike) -> Values:
    """Return the mass of vapour per mass of dry air in kg/kg, ``eps e / (p - e)`` [4]."""
    pressure = _pressure(pressure_hpa)
    e = _vapour(vapour_pressure_hpa, pressure)
    return EPSILON * e / (pressure - e)


def vapour_pressure_from_mixing_ratio_hpa(ratio: ArrayLike, pressure_hpa: ArrayLike) -> Values:
    """Return the vapour pressure in hPa from a mixing ratio in kg/kg (0 or more)."""
    w = _checked(ratio, "ratio", "0 kg/kg or more", lowest=0.0)
    return _pressure(pressure_hpa) * (w / (EPSILON + w))


def specific_humidity(vapour_pressure_hpa: ArrayLike, pressure_hpa: ArrayLike) -> Values:
    """Return the mass of vapour per mass of moist air in kg/kg, ``eps e / (p - (1 - eps) e)``."""
    pressure = _pressure(pressure_hpa)
    e = _vapour(vapour_pressure_hpa, pressure)
    return EPSILON * e / (pressure - (1.0 - EPSILON) * e)


def virtual_temperature_k(
    temperature_c: ArrayLike, vapour_pressure_hpa: ArrayLike, pressure_hpa: ArrayLike
) -> Values:
    """Return the temperature in K at which dry air is as dense, ``T / (1 - (1 - eps) e / p)``.

    Air temperature in degC, vapour pressure (0 or more) and pressure (above it) in hPa;
    anything else raises ``ValueError``.
    """
    pressure = _pressure(pressure_hpa)
    e = _vapour(vapour_pressure_hpa, pressure)
    return _celsius_as_kelvin(temperature_c) / (1.0 - (1.0 - EPSILON) * e / pressure)


def virtual_temperature_c(
    temperature_c: ArrayLike, vapour_pressure_hpa: ArrayLike, pressure_hpa: ArrayLike
) -> Values:
    """Return the virtual temperature in degC; see `virtual_temperature_k`."""
    return virtual_temperature_k(temperature_c, vapour_pressure_hpa, pressure_hpa) - KELVIN_AT_0C


def qnh_from_station_pressure_hpa(pressure_hpa: ArrayLike, elevation_m: ArrayLike) -> Values:
    """Return the QNH in hPa: station pressure brought to sea level along the standard profile.

    Parameters
    ----------
    pressure_hpa : array_like
        Station pressure in hPa, above 0.
    elevation_m : array_like
        Elevation in m, -5000 to 11 000 (the layer of constant lapse rate).

    Returns
    -------
    float or ndarray

    Raises
    ------
    ValueError
        Impossible pressure or elevation.

    Notes
    -----
    ``QNH = p0 ((p/p0)**n + L H/T0)**(1/n)`` with ``n = R L/g0`` [1], so that the pressure
    altitude of the field is its elevation less the pressure altitude of the QNH.
    """
    return _along_standard_profile(_pressure(pressure_hpa), _elevation(elevation_m))


def station_pressure_from_qnh_hpa(qnh_hpa: ArrayLike, elevation_m: ArrayLike) -> Values:
    """Return the station pressure in hPa, the exact inverse of `qnh_from_station_pressure_hpa`."""
    return _along_standard_profile(_pressure(qnh_hpa, "qnh_hpa"), -_elevation(elevation_m))


def _elevation(values: ArrayLike) -> Values:
    return _height(values, "elevation_m", TROPOPAUSE_M)


def _along_standard_profile(pressure: Values, descent_m: Values) -> Values:
    base = (pressure / P0_HPA) ** (1.0 / PRESSURE_EXPONENT) + descent_m / TEMPERATURE_SCALE_M
    base = _checked(base, "pressure and elevation_m", "a pair that leaves some air", lowest=0.0)
    return P0_HPA * base**PRESSURE_EXPONENT


def sea_level_pressure_hpa(
    pressure_hpa: ArrayLike,
    elevation_m: ArrayLike,
    temperature_c: ArrayLike,
    vapour_pressure_hpa: ArrayLike,
) -> Values:
    """Return the pressure in hPa reduced to mean sea level with the actual air (QFF kind).

    Parameters
    ----------
    pressure_hpa : array_like
        Station pressure in hPa, above 0.
    elevation_m : array_like
        Elevation of the barometer in m, -5000 to 11 000.
    temperature_c, vapour_pressure_hpa : array_like
        Air temperature in degC and vapour pressure in hPa at the station.

    Returns
    -------
    float or ndarray

    Raises
    ------
    ValueError
        Impossible pressure, elevation, temperature or vapour pressure.

    Notes
    -----
    ``p exp(g0/R H / (T + L H/2 + Ch e))`` with ``Ch`` = 0.12 K/hPa: WMO-No. 8 practice as
    DWD prints it.  Other services differ above about 300 m.
    """
    return _pressure(pressure_hpa) * np.exp(
        _reduction_exponent(elevation_m, temperature_c, vapour_pressure_hpa)
    )


def station_pressure_from_sea_level_hpa(
    sea_level_pressure_hpa: ArrayLike,
    elevation_m: ArrayLike,
    temperature_c: ArrayLike,
    vapour_pressure_hpa: ArrayLike,
) -> Values:
    """Return the station pressure in hPa, the exact inverse of `sea_level_pressure_hpa`."""
    return _pressure(sea_level_pressure_hpa, "sea_level_pressure_hpa") * np.exp(
        -_reduction_exponent(elevation_m, temperature_c, vapour_pressure_hpa)
    )


def _reduction_exponent(
    elevation_m: ArrayLike, temperature_c: ArrayLike, vapour_pressure_hpa: ArrayLike
) -> Values:
    elevation = _elevation(elevation_m)
    e = _checked(vapour_pressure_hpa, "vapour_pressure_hpa", "0 hPa or more", lowest=0.0)
    column = _celsius_as_kelvin(temperature_c) + LAPSE_K_PER_M * elevation / 2.0
    column = _kelvin(column + VAPOUR_K_PER_HPA * e, "mean temperature down to sea level")
    return G0 / R_DRY * elevation / column


def hypsometric_pressure_hpa(
    pressure_hpa: ArrayLike,
    from_m: ArrayLike,
    to_m: ArrayLike,
    virtual_temperature_from_k: ArrayLike,
    virtual_temperature_to_k: ArrayLike,
) -> Values:
    """Return the pressure in hPa at one height from that at another.

    Parameters
    ----------
    pressure_hpa : array_like
        Pressure in hPa at `from_m`, above 0.
    from_m, to_m : array_like
        Heights in m, -5000 to 20 000.
    virtual_temperature_from_k, virtual_temperature_to_k : array_like
        Virtual temperatures in K at the two heights, above 0.

    Returns
    -------
    float or ndarray

    Raises
    ------
    ValueError
        Impossible pressure, height or virtual temperature.

    Notes
    -----
    ``p exp(-g0 (z2 - z1) / (R Tv))`` with the mean of the end values for ``Tv``, exact to
    0.01 hPa over 1000 m of constant lapse rate.
    """
    rise = _height(to_m, "to_m") - _height(from_m, "from_m")
    start = _kelvin(virtual_temperature_from_k, "virtual_temperature_from_k")
    end = _kelvin(virtual_temperature_to_k, "virtual_temperature_to_k")
    return _pressure(pressure_hpa) * np.exp(-G0 / R_DRY * rise / (0.5 * (start + end)))
