"""Station pressure of every hour from the best kind there is, and how sure it is.

Order: station pressure; QNH by the exact standard-atmosphere inverse; sea-level pressure by
an inverse fitted to the station's own record; sea-level pressure by the formula; and, where a
station gives none, the region's QNH.  Each comes with a one-sigma error in hPa.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from climarisk.atmosphere import (
    DENSITY_EXPONENT,
    LAPSE_K_PER_M,
    P0_HPA,
    PRESSURE_EXPONENT,
    VAPOUR_K_PER_HPA,
    density_altitude_ft,
    hypsometric_pressure_hpa,
    isa_temperature_k,
    moist_density,
    qnh_from_station_pressure_hpa,
    station_pressure_from_qnh_hpa,
    station_pressure_from_sea_level_hpa,
    vapour_pressure_hpa,
    virtual_temperature_k,
)
from climarisk.reduction import (
    MINIMUM_OVERLAP_HOURS,
    Calibration,
    calibrate,
    column_sensitivity_hpa_per_k,
    recovered_hpa,
)
from climarisk.stations import Station
from climarisk.units import HPA_PER_INHG, METRES_PER_FOOT

#: Where an hour's pressure comes from, in order of preference.
SOURCES = (
    "station pressure",
    "QNH",
    "sea-level pressure, calibrated",
    "sea-level pressure",
    "climatological QNH with neighbours' anomalies",
    "climatological",
)
NO_PRESSURE = 255
_STATION, _ANOMALIES, _CLIMATOLOGICAL = 0, 4, 5

#: Below the first elevation, m, the formula serves sea-level pressure plainly; above the
#: second it is not used, since each kelvin of the unknown reduction costs 19 ft there.
SEA_LEVEL_PLAIN_M, SEA_LEVEL_LIMIT_M = 500.0, 1500.0
#: Above 1000 ft the US practice corrects the reduction towards the annual mean (Mohr 2004).
PLATEAU_M = 1000.0 * METRES_PER_FOOT
#: A barometer is good to this, hPa (WMO-No. 8, operational uncertainty; from memory).
BAROMETER_HPA = 0.15
#: The US altimeter formula subtracts this from the pressure (Smithsonian Tables, 1951, p. 269).
US_ALTIMETER_OFFSET_HPA = 0.3
#: Steps in which pressure is reported, hPa: whole hPa, 0.01 inHg, 0.1 hPa; else taken as 0.01.
_STEPS_HPA = (1.0, 0.01 * HPA_PER_INHG, 0.1)
_FINEST_STEP_HPA = 0.01
#: A pressure recovered from sea-level pressure is used only if its QNH is inside these, hPa.
_SANE_QNH_HPA = (940.0, 1060.0)
#: Spread of QNH from day to day, hPa, where nothing is known: upper end of 3-5 (from memory).
SYNOPTIC_SD_HPA = 5.0
#: Hours of a calendar month from which a mean or an error is taken at least.
_MINIMUM_ERROR_HOURS = 120


@dataclass(frozen=True)
class StationPressure:
    """Pressure at one place, hour by hour.

    Parameters
    ----------
    pressure_hpa : ndarray, shape (n_hours,)
        NaN where unknown.
    source : ndarray of uint8, shape (n_hours,)
        Index into `SOURCES`; `NO_PRESSURE` where there is none.
    error_hpa : ndarray, shape (n_hours,)
        One-sigma error of the pressure; NaN where unknown.
    calibration : Calibration or None
        The fitted inverse, if there is one.
    """

    pressure_hpa: np.ndarray
    source: np.ndarray
    error_hpa: np.ndarray
    calibration: Calibration | None = None


@dataclass(frozen=True)
class RegionalQnh:
    """QNH of a region, hour by hour, never unknown.

    Parameters
    ----------
    qnh_hpa, error_hpa : ndarray, shape (n_hours,)
    source : ndarray of uint8, shape (n_hours,)
        Index into `SOURCES`: with the neighbours' anomalies of that hour, or without.
    """

    qnh_hpa: np.ndarray
    error_hpa: np.ndarray
    source: np.ndarray


def station_pressure(
    station: Station,
    hours: Mapping[str, np.ndarray],
    month: np.ndarray,
    minimum_overlap: int = MINIMUM_OVERLAP_HOURS,
    derived: np.ndarray | None = None,
) -> StationPressure:
    """The pressure at a station from the best kind each hour has, with its error.

    Parameters
    ----------
    station : Station
    hours : mapping of str to array, or DataFrame; each of shape (n_hours,)
        ``temperature_c``, ``dew_point_c`` and the three pressures, on consecutive hours.
    month : ndarray of int, shape (n_hours,)
        Calendar month, 0-11.
    minimum_overlap : int
        Hours with sea-level pressure and a measured pressure that calibrate a month.
    derived : ndarray of bool, shape (n_hours,), optional
        Hours whose station pressure is known to have been made from sea-level pressure and
        the present temperature (`climarisk.pressure_kind.derived_hours`): their error includes
        that of the temperature, and they calibrate nothing.

    Returns
    -------
    StationPressure

    Notes
    -----
    A month that is not calibrated takes the common fit of all months if at least three are,
    else the formula (WMO-No. 8, with the mean temperature of now and 12 h ago), which
    is not used above 1500 m.  Errors: see `_measured_error_hpa`, `qnh_error_hpa`, `_formula` and
    `climarisk.reduction.recovered_hpa`; a calibrated pressure also has that of its target.
    """
    z = station.elevation_m
    names = ("temperature_c", "dew_point_c", "station_pressure_hpa", "qnh_hpa")
    temperature, dew_point, measured, qnh = (np.asarray(hours[n], float) for n in names)
    sea_level = np.asarray(hours["sea_level_pressure_hpa"], float)
    t12 = (temperature + _hours_ago(temperature, 12)) / 2
    made = np.zeros(len(measured), bool) if derived is None else derived
    derived_error = made * _derived_error_hpa(measured, temperature, t12, z)
    error = np.hypot(_measured_error_hpa(measured), derived_error)
    found = [(measured, error), (station_pressure_from_qnh_hpa(qnh, z), qnh_error_hpa(qnh, z))]
    best, source, error = _first_of(found)
    target = np.where(made & (source == _STATION), np.nan, best)
    fit = calibrate(sea_level, target, temperature, t12, month, minimum_overlap)
    if fit is None:
        found.append((np.full(len(best), np.nan), np.full(len(best), np.nan)))
    else:
        recovered, left = recovered_hpa(fit, sea_level, temperature, t12, month, z)
        of_target = np.sqrt(np.mean(error[np.isfinite(sea_level) & np.isfinite(target)] ** 2))
        found.append((_sane(recovered, z), np.hypot(left, of_target)))
    if z <= SEA_LEVEL_LIMIT_M:
        found.append(_formula(sea_level, temperature, t12, vapour_pressure_hpa(dew_point), z))
    best, source, error = _first_of(found)
    return StationPressure(best, source, error, fit)


def _first_of(
    kinds: list[tuple[np.ndarray, np.ndarray]],
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Value, kind and error of the first kind that has the hour."""
    n = len(kinds[0][0])
    best, error = np.full(n, np.nan), np.full(n, np.nan)
    source = np.full(n, NO_PRESSURE, np.uint8)
    for kind, (values, errors) in enumerate(kinds):
        take = np.isnan(best) & np.isfinite(values)
        best[take], error[take], source[take] = values[take], errors[take], kind
    return best, source, error


def _hours_ago(values: np.ndarray, hours: int) -> np.ndarray:
    earlier = np.full(len(values), np.nan)
    earlier[hours:] = values[:-hours]
    return earlier


def reporting_step_hpa(pressure_hpa: np.ndarray) -> float:
    """The step in which a pressure column is reported, hPa: 1, 0.339 (0.01 inHg), 0.1 or 0.01."""
    known = pressure_hpa[np.isfinite(pressure_hpa)]
    for step in _STEPS_HPA:
        off = np.abs(known / step - np.round(known / step)) * step
        if len(known) and np.mean(off < _FINEST_STEP_HPA / 2) > 0.99:
            return step
    return _FINEST_STEP_HPA


def _measured_error_hpa(pressure_hpa: np.ndarray) -> np.ndarray:
    """Error of a reported station pressure: rounding (step / sqrt 12) and the barometer."""
    step = reporting_step_hpa(pressure_hpa)
    return np.full(len(pressure_hpa), np.hypot(step / np.sqrt(12.0), BAROMETER_HPA))


def _derived_error_hpa(
    pressure: np.ndarray, temperature: np.ndarray, t12: np.ndarray, elevation_m: float
) -> np.ndarray:
    """What the present temperature in place of T12 does to a derived pressure, hPa."""
    spread = np.abs(temperature - t12)
    usual = float(np.sqrt(np.nanmean(spread**2))) if np.isfinite(spread).any() else 0.0
    sensitivity = column_sensitivity_hpa_per_k(pressure, elevation_m, temperature)
    return np.nan_to_num(sensitivity) * np.where(np.isfinite(spread), spread, usual)


def qnh_error_hpa(qnh_hpa: np.ndarray, elevation_m: float) -> np.ndarray:
    """Error of the station pressure recovered from QNH, hPa, shape (n_hours,).

    QNH is rounded down, so the truth lies 0 to one step above it; the US formula puts it 0.3
    hPa above the standard inverse, and which formula was used is not known.  Both taken as
    uniform, neither corrected: the square root of the squared mean plus the variances, times
    ``dp/dQNH = (p/QNH)**(1 - R L/g0)``; and the barometer.
    """
    step, offset = reporting_step_hpa(qnh_hpa), US_ALTIMETER_OFFSET_HPA
    at_sea_level = np.sqrt(((step + offset) / 2) ** 2 + (step**2 + offset**2) / 12)
    return np.hypot(at_sea_level * _pressure_per_qnh(qnh_hpa, elevation_m), BAROMETER_HPA)


def _pressure_per_qnh(qnh_hpa: np.ndarray, elevation_m: float) -> np.ndarray:
    """Derivative of the station pressure by the QNH."""
    ratio = station_pressure_from_qnh_hpa(qnh_hpa, elevation_m) / qnh_hpa
    return ratio ** (1.0 - 1.0 / PRESSURE_EXPONENT)


def _formula(
    sea_level: np.ndarray,
    temperature: np.ndarray,
    t12: np.ndarray,
    vapour: np.ndarray,
    elevation_m: float,
) -> tuple[np.ndarray, np.ndarray]:
    """Pressure by the formula with T12 (the present T where that of 12 h ago is missing).

    Error: the services reduce with the present temperature, with T12, or above 1000 ft with
    T12 corrected towards the annual mean, and do or do not allow for humidity; each counted
    as equally likely, so that the column temperature has the root mean square of the
    differences from what is used here.  The reporting step adds ``step / sqrt 12``.
    """
    spread = temperature - t12
    usual = np.sqrt(np.nanmean(spread**2)) if np.isfinite(spread).any() else 0.0
    mean = np.where(np.isfinite(t12), t12, temperature)
    pressure = _sane(
        station_pressure_from_sea_level_hpa(sea_level, elevation_m, mean, vapour), elevation_m
    )
    practices = [np.zeros(len(mean)), np.where(np.isfinite(spread), spread, usual) ** 2]
    if elevation_m > PLATEAU_M and np.isfinite(mean).any():
        practices.append((mean - np.nanmean(mean)) ** 2)
    column_k = np.sqrt(np.mean(practices, axis=0) + (VAPOUR_K_PER_HPA * vapour) ** 2 / 2)
    error = column_k * column_sensitivity_hpa_per_k(pressure, elevation_m, mean, vapour)
    reported = reporting_step_hpa(sea_level) / np.sqrt(12.0) * pressure / sea_level
    return pressure, np.sqrt(error**2 + reported**2 + BAROMETER_HPA**2)


def _sane(pressure: np.ndarray, elevation_m: float) -> np.ndarray:
    """NaN in place of a recovered pressure that no weather gives at this elevation."""
    qnh = qnh_from_station_pressure_hpa(pressure, elevation_m)
    return np.where((qnh >= _SANE_QNH_HPA[0]) & (qnh <= _SANE_QNH_HPA[1]), pressure, np.nan)


def qnh_at_height_hpa(
    pressure_hpa: ArrayLike,
    from_m: ArrayLike,
    to_m: ArrayLike,
    temperature_c: ArrayLike,
    vapour_pressure_hpa: ArrayLike = 0.0,
) -> np.ndarray:
    """The QNH that a place at another height has in the same air, hPa.

    QNH is the same at all heights in the standard atmosphere only: in air 20 K warmer it rises
    by 8 hPa over 1000 m.  By hypsometry with the standard lapse rate from the lower to the upper
    end; the temperature, degC, at `from_m` should be that of the column (the mean of now and
    12 h ago), which follows the surface less than hour by hour.
    """
    here = virtual_temperature_k(temperature_c, vapour_pressure_hpa, pressure_hpa)
    there = here - LAPSE_K_PER_M * (np.asarray(to_m, float) - np.asarray(from_m, float))
    moved = hypsometric_pressure_hpa(pressure_hpa, from_m, to_m, here, there)
    return qnh_from_station_pressure_hpa(moved, to_m)


def climatological_qnh(qnh_hpa: np.ndarray, weights: np.ndarray, month: np.ndarray) -> RegionalQnh:
    """QNH at a place without a pressure: monthly means of the region, with the day's anomaly.

    Parameters
    ----------
    qnh_hpa : ndarray, shape (n_stations, n_hours)
        QNH of the region's usable stations, carried to the height of the place first
        (`qnh_at_height_hpa`); NaN where unknown.  May have no rows.
    weights : ndarray, shape (n_stations,)
        Above 0; how much each station counts at the place.
    month : ndarray of int, shape (n_hours,)
        0-11.

    Returns
    -------
    RegionalQnh

    Notes
    -----
    The weighted mean of the monthly means plus the weighted mean of what each station has
    that hour above its own monthly mean.  Error with anomalies: each station predicted from
    the others, root mean square of the month; with one station only, its spread from day to
    day.  Without anomalies: that spread, and the spread of the monthly means.  A month
    without any station: 1013.25 hPa, give or take 5 hPa.
    """
    qnh = np.asarray(qnh_hpa, float).reshape(-1, len(month))
    weights = np.asarray(weights, float)
    known = np.isfinite(qnh)
    count = _by_month(known, month)
    known &= (count >= _MINIMUM_ERROR_HOURS)[:, month]  # fewer give no monthly mean
    count = _by_month(known, month)
    mean = _by_month(np.where(known, qnh, 0.0), month) / np.maximum(count, 1.0)
    share = weights[:, None] * (count > 0)
    base, off_means = _weighted(mean, share)
    anomaly, off_anomalies = _weighted(
        np.where(known, qnh - mean[:, month], 0.0), weights[:, None] * known
    )
    has_month, has_hour = share.sum(axis=0) > 0, known.any(axis=0)
    value = np.where(has_month, base, P0_HPA)[month] + np.where(has_hour, anomaly, 0.0)
    spread, n = _rms(np.where(known, qnh - mean[:, month], np.nan), weights, month)
    day_to_day = np.where(n >= _MINIMUM_ERROR_HOURS, spread, SYNOPTIC_SD_HPA)
    left_out, n = _rms(off_means[:, month] + off_anomalies, weights, month)
    with_anomalies = np.where(n >= _MINIMUM_ERROR_HOURS, left_out, day_to_day)
    between = np.sqrt(_weighted(np.nan_to_num(off_means) ** 2, share)[0])
    without = np.where(has_month, np.hypot(day_to_day, np.nan_to_num(between)), SYNOPTIC_SD_HPA)
    return RegionalQnh(
        value,
        np.where(has_hour, with_anomalies[month], without[month]),
        np.where(has_hour, _ANOMALIES, _CLIMATOLOGICAL).astype(np.uint8),
    )


def _by_month(values: np.ndarray, month: np.ndarray) -> np.ndarray:
    """Sums by month, shape (n_stations, 12)."""
    sums = [np.bincount(month, row.astype(float), minlength=12) for row in values]
    return np.array(sums).reshape(-1, 12)


def _weighted(values: np.ndarray, weights: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Weighted mean over the stations, and each station less the mean of the others (else NaN)."""
    with np.errstate(invalid="ignore", divide="ignore"):
        total, weight = (values * weights).sum(axis=0), weights.sum(axis=0)
        others = (total - values * weights) / np.where(
            ((weights > 0).sum(axis=0) - (weights > 0)) > 0, weight - weights, np.nan
        )
        return total / weight, np.where(weights > 0, values - others, np.nan)


def _rms(
    residuals: np.ndarray, weights: np.ndarray, month: np.ndarray
) -> tuple[np.ndarray, np.ndarray]:
    """Weighted root mean square by month and the number of residuals, each shape (12,)."""
    known = np.isfinite(residuals)
    squares = weights @ _by_month(np.where(known, residuals, 0.0) ** 2, month)
    count = _by_month(known, month)
    weight = weights @ count
    return np.sqrt(squares / np.where(weight > 0, weight, 1.0)), count.sum(axis=0)


def climatological_pressure(elevation_m: float, regional: RegionalQnh) -> StationPressure:
    """The pressure at an elevation from a region's QNH, error included."""
    return StationPressure(
        station_pressure_from_qnh_hpa(regional.qnh_hpa, elevation_m),
        regional.source,
        regional.error_hpa * _pressure_per_qnh(regional.qnh_hpa, elevation_m),
    )


def pressure_error_ft(
    error_hpa: ArrayLike,
    pressure_hpa: ArrayLike,
    temperature_c: ArrayLike,
    vapour_pressure_hpa: ArrayLike = 0.0,
) -> np.ndarray:
    """What an error of the pressure is worth in ft of density altitude (0 or more).

    Parameters
    ----------
    error_hpa, pressure_hpa : array_like
        hPa; the error 0 or more.
    temperature_c, vapour_pressure_hpa : array_like
        Air temperature in degC and vapour pressure in hPa, both held.

    Raises
    ------
    ValueError
        Impossible pressure, temperature or vapour pressure.

    Notes
    -----
    ``dDA/dp = -T_isa(DA) / (L n) / (p - (1 - eps) e)`` with ``n = g0/(R L) - 1``, the exact
    derivative of `climarisk.atmosphere.density_altitude_ft` below 11 km.
    """
    p, e = np.asarray(pressure_hpa, float), np.asarray(vapour_pressure_hpa, float)
    altitude_m = density_altitude_ft(p, temperature_c, e) * METRES_PER_FOOT
    # rho is proportional to p - (1 - eps) e, so its share of a small error is error/that.
    share = moist_density(p, temperature_c, e) / moist_density(p, temperature_c) * p
    metres_per_hpa = isa_temperature_k(altitude_m) / (LAPSE_K_PER_M * DENSITY_EXPONENT) / share
    return np.asarray(error_hpa, float) * metres_per_hpa / METRES_PER_FOOT
