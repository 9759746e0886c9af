"""Where the sun stands, and whether it is day or civil twilight.

The low-precision solar position of J. Meeus, as the NOAA solar calculator uses it.
Terrain and refraction are left out: a strip in a valley loses time to ridge shadow.
Times are UTC seconds since 1970; everything takes scalars or arrays and broadcasts.

References
----------
.. [1] Meeus, J. (1998), Astronomical Algorithms, 2nd ed., chapters 25 and 28.
.. [2] ICAO Annex 1, definition of night: ends and begins with civil twilight, the centre
       of the sun's disc 6 degrees below the horizon.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import ArrayLike

CIVIL_TWILIGHT_DEG = -6.0  # [2]
SUNRISE_DEG = -50.0 / 60.0  # 34' of refraction and 16' of half disc [1] chapter 15

_SECONDS_PER_DAY = 86_400.0
_UNIX_DAYS_AT_J2000 = 10_957.5  # 2000-01-01 12:00
_DAYS_PER_CENTURY = 36_525.0
_DEG_PER_SECOND = 360.0 / _SECONDS_PER_DAY
_REFINEMENTS = 4  # leaves less than a microsecond at 60 degrees and 0.02 s at the polar circle


def solar_elevation_deg(
    unix_seconds: ArrayLike, latitude_deg: ArrayLike, longitude_deg: ArrayLike
) -> Any:
    """Return the geometric elevation of the sun's centre in degrees, without refraction.

    Parameters
    ----------
    unix_seconds : array_like
        UTC seconds since 1970-01-01; the algorithm serves 1950 to 2050.
    latitude_deg, longitude_deg : array_like
        Degrees north (-90 to 90) and east (-180 to 360).

    Returns
    -------
    float or ndarray
        NaN where any argument is NaN.

    Raises
    ------
    ValueError
        A latitude or longitude outside its range, or an infinite time.

    Notes
    -----
    Agrees with the NREL solar position algorithm to 0.02 degrees.
    """
    time = _checked(unix_seconds, "unix_seconds", -np.finfo(float).max, np.finfo(float).max)
    latitude, longitude = _place(latitude_deg, longitude_deg)
    sin_declination, equation_deg = _sun(time)
    hour_angle = _DEG_PER_SECOND * (time % _SECONDS_PER_DAY) - 180.0 + longitude + equation_deg
    sine = np.sin(latitude) * sin_declination + np.cos(latitude) * np.sqrt(
        1.0 - sin_declination**2
    ) * np.cos(np.radians(hour_angle))
    return np.degrees(np.arcsin(np.clip(sine, -1.0, 1.0)))


def is_civil_daylight(
    unix_seconds: ArrayLike, latitude_deg: ArrayLike, longitude_deg: ArrayLike
) -> Any:
    """Return whether it is day or civil twilight: the sun's centre at -6 degrees or higher [2].

    Arguments and errors as in `solar_elevation_deg`; where an argument is NaN the answer is
    False.
    """
    return solar_elevation_deg(unix_seconds, latitude_deg, longitude_deg) >= CIVIL_TWILIGHT_DEG


def sun_crossings(
    day_start_unix_seconds: ArrayLike,
    latitude_deg: ArrayLike,
    longitude_deg: ArrayLike,
    elevation_deg: float = CIVIL_TWILIGHT_DEG,
) -> tuple[Any, Any]:
    """Return when the sun rises through an elevation and when it sets through it.

    Parameters
    ----------
    day_start_unix_seconds : array_like
        00 UTC of the date, in seconds since 1970.
    latitude_deg, longitude_deg : array_like
        Degrees north (-90 to 90) and east (-180 to 360).
    elevation_deg : float
        Elevation of the sun's centre; `CIVIL_TWILIGHT_DEG` (default) or `SUNRISE_DEG`.

    Returns
    -------
    rise, set : float or ndarray
        UTC seconds since 1970, before and after the local solar noon of that date; west of
        Greenwich the setting may fall on the next UTC day.  NaN where the sun stays above
        or below the elevation.

    Raises
    ------
    ValueError
        A latitude or longitude outside its range, or an infinite time.
    """
    highest = np.finfo(float).max
    start = _checked(day_start_unix_seconds, "day_start_unix_seconds", -highest, highest)
    latitude, longitude = _place(latitude_deg, longitude_deg)
    mean_noon = start + (180.0 - longitude) / _DEG_PER_SECOND
    rise, setting = (
        _crossing(mean_noon, latitude, np.sin(np.radians(elevation_deg)), side)
        for side in (-1.0, 1.0)
    )
    return rise, setting


def _crossing(mean_noon: Any, latitude: Any, sin_elevation: float, side: float) -> Any:
    """Return the time of one crossing by fixed-point iteration from local mean noon."""
    time = mean_noon
    for _ in range(_REFINEMENTS):
        sin_declination, equation_deg = _sun(time)
        cos_hour_angle = (sin_elevation - np.sin(latitude) * sin_declination) / (
            np.cos(latitude) * np.sqrt(1.0 - sin_declination**2)
        )
        hour_angle = np.degrees(np.arccos(np.clip(cos_hour_angle, -1.0, 1.0)))
        time = mean_noon + (side * hour_angle - equation_deg) / _DEG_PER_SECOND
    return np.where(np.abs(cos_hour_angle) <= 1.0, time, np.nan)[()]


def _sun(unix_seconds: Any) -> tuple[Any, Any]:
    """Return the sine of the sun's declination and the equation of time in degrees [1]."""
    century = (unix_seconds / _SECONDS_PER_DAY - _UNIX_DAYS_AT_J2000) / _DAYS_PER_CENTURY
    mean_longitude = np.radians(280.46646 + century * (36000.76983 + century * 0.0003032))
    anomaly = np.radians(357.52911 + century * (35999.05029 - century * 0.0001537))
    eccentricity = 0.016708634 - century * (0.000042037 + century * 0.0000001267)
    node = np.radians(125.04 - 1934.136 * century)
    sin_anomaly, cos_anomaly = np.sin(anomaly), np.cos(anomaly)
    sin_2_anomaly = 2.0 * sin_anomaly * cos_anomaly
    centre = (
        (1.914602 - century * (0.004817 + century * 0.000014)) * sin_anomaly
        + (0.019993 - century * 0.000101) * sin_2_anomaly
        + 0.000289 * np.sin(3.0 * anomaly)
    )
    apparent = mean_longitude + np.radians(centre - 0.00569 - 0.00478 * np.sin(node))
    arcseconds = 21.448 - century * (46.815 + century * (0.00059 - century * 0.001813))
    obliquity = np.radians(23.0 + (26.0 + arcseconds / 60.0) / 60.0 + 0.00256 * np.cos(node))

    y = np.tan(obliquity / 2.0) ** 2
    sin_2_longitude, cos_2_longitude = np.sin(2.0 * mean_longitude), np.cos(2.0 * mean_longitude)
    equation = (
        y * sin_2_longitude
        - 2.0 * eccentricity * sin_anomaly
        + 4.0 * eccentricity * y * sin_anomaly * cos_2_longitude
        - y**2 * sin_2_longitude * cos_2_longitude
        - 1.25 * eccentricity**2 * sin_2_anomaly
    )
    return np.sin(obliquity) * np.sin(apparent), np.degrees(equation)


def _place(latitude_deg: ArrayLike, longitude_deg: ArrayLike) -> tuple[Any, Any]:
    """Return latitude in radians and longitude in degrees, checked."""
    latitude = np.radians(_checked(latitude_deg, "latitude_deg", -90.0, 90.0))
    return latitude, _checked(longitude_deg, "longitude_deg", -180.0, 360.0)


def _checked(values: ArrayLike, name: str, lowest: float, highest: float) -> Any:
    """Return the values as floats, or raise naming the parameter and the offender."""
    array = np.asarray(values, dtype=float)
    bad = (array < lowest) | (array > highest)  # NaN compares false and passes
    if bad.any():
        first = float(array[bad].flat[0])
        raise ValueError(f"{name}: {first:g} is impossible; allowed is {lowest:g} to {highest:g}")
    return array[()]
