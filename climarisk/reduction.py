"""Sea-level pressure and the station: what a kelvin is worth, and a station's own reduction.

Services reduce pressure to sea level in different ways (present temperature, mean of now and
12 h ago, corrections at high stations).  Where a station has both pressures for a part of its
record its own reduction can be fitted and inverted for the rest.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from climarisk.atmosphere import (
    G0,
    LAPSE_K_PER_M,
    P0_HPA,
    R_DRY,
    VAPOUR_K_PER_HPA,
    isa_temperature_k,
)
from climarisk.units import KELVIN_AT_0C

#: A month is calibrated from at least this many hours, half a month of them (held-out hours of
#: the test station are no worse than with all; a third of a month is).
MINIMUM_OVERLAP_HOURS = 360
#: Months that must be calibrated before their common fit serves the other months.
_MINIMUM_MONTHS = 3
_FEWEST_HOURS = 48
#: Residuals beyond this many robust standard deviations are wrong reports, not scatter.
_OUTLIER_SD = 4.0
_SD_PER_MAD = 1.4826  # of a normal distribution


@dataclass(frozen=True)
class Calibration:
    """A station's own sea-level reduction, ``ln(MSLP/p) = a_m + b_m T12 + c T``.

    Parameters
    ----------
    intercept, slope_per_k : ndarray, shape (13,)
        January to December and the common fit of all months; NaN where not fitted.
    instant_slope_per_k : ndarray, shape (13,)
        The factor of the present temperature: one for the months, one for the common fit.
    lowest_c, highest_c : ndarray, shape (13,)
        1st and 99th percentile of T12 in the fit.
    residual_sd : ndarray, shape (13,)
        Standard deviation of ``ln(MSLP/p)``; of the common fit: in months left out of it.
    n_hours : ndarray of int, shape (13,)
        Hours with both pressures; of the common fit: their sum.
    """

    intercept: np.ndarray
    slope_per_k: np.ndarray
    instant_slope_per_k: np.ndarray
    lowest_c: np.ndarray
    highest_c: np.ndarray
    residual_sd: np.ndarray
    n_hours: np.ndarray

    def residual_sd_hpa(self, pressure_hpa: ArrayLike) -> np.ndarray:
        """The residual standard deviations in hPa at a station pressure, shape (13,)."""
        return self.residual_sd * np.asarray(pressure_hpa, float)


def column_sensitivity_hpa_per_k(
    pressure_hpa: ArrayLike,
    elevation_m: ArrayLike,
    temperature_c: ArrayLike,
    vapour_pressure_hpa: ArrayLike = 0.0,
) -> np.ndarray:
    """How far a station pressure recovered from sea-level pressure moves per kelvin.

    ``p g0 H / (R T^2)`` with T the mean temperature of the column down to sea level: the
    derivative of `climarisk.atmosphere.station_pressure_from_sea_level_hpa`.
    """
    elevation = np.asarray(elevation_m, float)
    column = np.asarray(temperature_c, float) + KELVIN_AT_0C + LAPSE_K_PER_M * elevation / 2
    column = column + VAPOUR_K_PER_HPA * np.asarray(vapour_pressure_hpa, float)
    return np.asarray(pressure_hpa, float) * (G0 / R_DRY) * elevation / column**2


def sea_level_slope_hpa_per_k(elevation_m: ArrayLike) -> np.ndarray:
    """Change of sea-level pressure less QNH per kelvin, in the standard atmosphere, hPa/K."""
    t = isa_temperature_k(elevation_m) - KELVIN_AT_0C
    return -column_sensitivity_hpa_per_k(P0_HPA, elevation_m, t)


def calibrate(
    sea_level_hpa: np.ndarray,
    pressure_hpa: np.ndarray,
    temperature_c: np.ndarray,
    t12_c: np.ndarray,
    month: np.ndarray,
    minimum_overlap: int = MINIMUM_OVERLAP_HOURS,
) -> Calibration | None:
    """A station's own reduction to sea level, from the hours that have both pressures.

    Parameters
    ----------
    sea_level_hpa, pressure_hpa, temperature_c, t12_c : ndarray, shape (n_hours,)
        ``t12_c`` is the mean of the temperature now and 12 h ago.
    month : ndarray of int, shape (n_hours,)
        0-11.
    minimum_overlap : int
        Hours below which a month is not fitted; at least two days are needed.

    Returns
    -------
    Calibration or None
        None if no month has enough hours.

    Notes
    -----
    Least absolute deviations, then least squares without residuals beyond four robust
    standard deviations.  The present temperature has one factor for all months: it costs
    nothing where the service uses T12, and carries the station where it does not.
    """
    with np.errstate(invalid="ignore", divide="ignore"):
        y = np.log(sea_level_hpa / pressure_hpa)
    known = np.isfinite(y) & np.isfinite(t12_c) & np.isfinite(temperature_c)
    count = np.bincount(month[known], minlength=12)
    months = np.flatnonzero(count >= max(minimum_overlap, _FEWEST_HOURS))
    if not len(months):
        return None
    known &= np.isin(month, months)
    y, m, t12, now = y[known], month[known], t12_c[known], temperature_c[known] - t12_c[known]
    by_month = (m[:, None] == months).astype(float)
    factors, kept = _robust_fit(np.column_stack([by_month, by_month * t12[:, None], now]), y)
    residual = y - np.column_stack([by_month, by_month * t12[:, None], now]) @ factors
    table = np.full((6, 13), np.nan)
    for i, k in enumerate(months):
        mine = (m == k) & kept
        low, high = np.percentile(t12[m == k], [1, 99])
        a, b, c = factors[i], factors[len(months) + i], factors[-1]
        table[:, k] = a, b - c, c, low, high, residual[mine].std(ddof=2)
    if len(months) >= _MINIMUM_MONTHS:
        table[:, 12] = _common_fit(y, m, t12, now, months)
    n_hours = np.where(np.isin(np.arange(12), months), count, 0)
    intercept, slope, instant, low, high, sd = table
    return Calibration(intercept, slope, instant, low, high, sd, np.append(n_hours, n_hours.sum()))


def _common_fit(
    y: np.ndarray, month: np.ndarray, t12: np.ndarray, now: np.ndarray, months: np.ndarray
) -> tuple[float, ...]:
    """One fit for all months; its residual is that of months left out in turn."""
    x = np.column_stack([np.ones(len(y)), t12, now])
    squares = []
    for k in months:
        factors, _ = _robust_fit(x[month != k], y[month != k])
        off = y[month == k] - x[month == k] @ factors
        squares.append(np.median(off) ** 2 + (_SD_PER_MAD * _mad(off)) ** 2)
    a, b, c = _robust_fit(x, y)[0]
    low, high = np.percentile(t12, [1, 99])
    return a, b - c, c, low, high, float(np.sqrt(np.mean(squares)))


def _mad(values: np.ndarray) -> float:
    return float(np.median(np.abs(values - np.median(values))))


def _robust_fit(x: np.ndarray, y: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Factors of a linear fit that a minority of wrong values does not move; which are kept."""
    weight = np.ones(len(y))
    for _ in range(20):  # reweighted least squares converge on least absolute deviations
        factors = _least_squares(x, y, weight)
        weight = 1.0 / np.maximum(np.abs(y - x @ factors), 1e-6)
    residual = y - x @ factors
    limit = _OUTLIER_SD * _SD_PER_MAD * np.median(np.abs(residual))
    kept = np.abs(residual) <= max(limit, 1e-9)
    return _least_squares(x, y, kept.astype(float)), kept


def _least_squares(x: np.ndarray, y: np.ndarray, weight: np.ndarray) -> np.ndarray:
    weighted = x * weight[:, None]
    return np.linalg.lstsq(weighted.T @ x, weighted.T @ y, rcond=None)[0]


def recovered_hpa(
    fit: Calibration,
    sea_level_hpa: np.ndarray,
    temperature_c: np.ndarray,
    t12_c: np.ndarray,
    month: np.ndarray,
    elevation_m: float,
) -> tuple[np.ndarray, np.ndarray]:
    """Station pressure by the station's own fit, and the error that the fit leaves, hPa.

    A month that is not fitted takes the common fit; NaN where there is none.  Error: the
    residual of the fit and, where T12 lies outside the fitted range, the sensitivity to the
    column temperature times how far.

    Parameters
    ----------
    fit : Calibration
    sea_level_hpa, temperature_c, t12_c : ndarray, shape (n_hours,)
    month : ndarray of int, shape (n_hours,)
        0-11.
    elevation_m : float
    """
    use = np.where(np.isfinite(fit.intercept[month]), month, 12)
    exponent = fit.intercept[use] + fit.slope_per_k[use] * t12_c
    exponent = exponent + fit.instant_slope_per_k[use] * temperature_c
    pressure = sea_level_hpa * np.exp(-exponent)
    outside = np.maximum(np.maximum(fit.lowest_c[use] - t12_c, t12_c - fit.highest_c[use]), 0.0)
    beyond = outside * column_sensitivity_hpa_per_k(pressure, elevation_m, t12_c)
    return pressure, np.hypot(pressure * fit.residual_sd[use], beyond)
