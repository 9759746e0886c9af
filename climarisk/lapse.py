"""Temperature lapse by month and hour, fitted from a study's own stations."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

#: Temperature lapse, K/km, by day (10-17 local standard hours) in the warm half of the year,
#: by day in the cold half, and by night: middles of the published ranges 6.5-7.5, 5 and 3-4
#: (Minder et al. 2010, Rolland 2003, Blandford et al. 2008; the middles are a judgement).
LAPSE_DAY_WARM, LAPSE_DAY_COLD, LAPSE_NIGHT = 7.0, 5.0, 3.5
DAY_HOURS = (10, 17)
#: A fit needs this many stations over this span of elevation.
MINIMUM_STATIONS, MINIMUM_SPAN_M = 3, 300.0
#: No lapse outside is believed: ten kelvins of inversion and the dry adiabat, K/km.
STEEPEST_INVERSION, DRY_ADIABAT = -10.0, 9.8

#: Spread of the true lapse around the table, and of a cell's around its neighbours', K/km:
#: published seasonal means differ by 3-5 K/km for the same season, a standard
#: deviation of about 1.5; neighbouring cells by about a third of that (a judgement).
_TABLE_SD, _NEIGHBOUR_SD = 1.5, 0.5
#: Siting effect of a station beside its elevation, K, and the weight of that expectation in
#: station equivalents, where few stations say little of their own scatter (a judgement).
_SITING_SD, _SITING_WEIGHT = 0.9, 3.0
#: Residuals beyond this many standard deviations lose weight (Huber's usual 1.345).
_HUBER = 1.345
#: Hours a cell needs before a station's mean in it counts.
_CELL_HOURS = 10


def table_lapse(southern: bool) -> np.ndarray:
    """The day/night table of each month and hour, K/km, shape (12, 24)."""
    month = np.arange(12)
    warm = (month >= 3) & (month <= 8)
    if southern:
        warm = ~warm
    hour = np.arange(24)
    day = (hour >= DAY_HOURS[0]) & (hour <= DAY_HOURS[1])
    by_day = np.where(warm, LAPSE_DAY_WARM, LAPSE_DAY_COLD)[:, None]
    return np.where(day[None, :], by_day, LAPSE_NIGHT)


@dataclass(frozen=True)
class Lapse:
    """Temperature lapse of each month and local standard hour.

    Parameters
    ----------
    k_per_km : ndarray, shape (12, 24)
        Positive: colder upwards.
    sd_k_per_km : ndarray, shape (12, 24)
        Standard deviation that the fit leaves.
    stations : int
        Stations fitted; 0: the table.
    """

    k_per_km: np.ndarray
    sd_k_per_km: np.ndarray
    stations: int


def fit_lapse(
    temperatures_c: Sequence[np.ndarray],
    elevations_m: Sequence[float],
    month_hour: np.ndarray,
    southern: bool,
) -> Lapse:
    """The lapse of each month and hour from simultaneous stations.

    Parameters
    ----------
    temperatures_c : sequence of ndarray, each of shape (n_hours,)
        One per station, NaN where unknown.
    elevations_m : sequence of float
    month_hour : ndarray of int, shape (n_hours,)
        Cell of each hour, month x 24 + hour.
    southern : bool
        The table's half-years are those of the southern hemisphere.

    Returns
    -------
    Lapse
        The table itself with fewer than 3 stations or less than 300 m between them.

    Notes
    -----
    Station and hour effects of each cell are separated by alternating means, so that gaps
    do not bias a station against another.  The station effects are regressed on elevation
    with Huber weights and an intercept for each station shared by all cells; the slopes are
    then pooled, by their precision, with those of the neighbouring hours and months and with
    the table, and kept within -10 to 9.8 K/km.
    """
    table = table_lapse(southern)
    plain = Lapse(table, np.full((12, 24), _TABLE_SD), 0)
    elevation_km = np.asarray(elevations_m, float) / 1000.0
    usable = [i for i, t in enumerate(temperatures_c) if np.isfinite(t).any()]
    span_m = np.ptp(elevation_km[usable]) * 1000.0 if usable else 0.0
    if len(usable) < MINIMUM_STATIONS or span_m < MINIMUM_SPAN_M:
        return plain
    effects = cell_effects([temperatures_c[i] for i in usable], month_hour)
    slope, sd = _regress(effects, elevation_km[usable])
    fitted, fitted_sd = _pooled(-slope.reshape(12, 24), sd.reshape(12, 24), table)
    return Lapse(np.clip(fitted, STEEPEST_INVERSION, DRY_ADIABAT), fitted_sd, len(usable))


def cell_effects(temperatures_c: Sequence[np.ndarray], month_hour: np.ndarray) -> np.ndarray:
    """Mean temperature of each station in each cell, freed of which hours it happens to have.

    Parameters
    ----------
    temperatures_c : sequence of ndarray, each of shape (n_hours,)
    month_hour : ndarray of int, shape (n_hours,)

    Returns
    -------
    ndarray, shape (n_stations, 288)
        NaN for a station with too few hours in a cell.
    """
    values = np.array(temperatures_c)
    known = np.isfinite(values)
    filled = np.where(known, values, 0.0)
    count = np.array([np.bincount(month_hour[k], minlength=288) for k in known])

    def cell_mean(x: np.ndarray) -> np.ndarray:
        total = [
            np.bincount(month_hour, np.where(k, r, 0.0), 288) for r, k in zip(x, known, strict=True)
        ]
        return np.array(total) / np.maximum(count, 1)

    effect = cell_mean(filled)
    reporting = np.maximum(known.sum(axis=0), 1)
    for _ in range(5):
        anomaly = np.where(known, filled - effect[:, month_hour], 0.0).sum(axis=0) / reporting
        effect = cell_mean(filled - anomaly)
    return np.where(count >= _CELL_HOURS, effect, np.nan)


def _regress(effects: np.ndarray, elevation_km: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Slope of the station effects on elevation in each cell, K/km, and its standard error."""
    known = np.isfinite(effects)
    y = np.where(known, effects, 0.0)
    intercept = np.zeros(len(effects))
    slope = sd = np.zeros(effects.shape[1])
    for _ in range(2):
        weight = known.astype(float)
        for _ in range(4):
            slope, level, spread = _weighted_line(y - intercept[:, None], elevation_km, weight)
            residual = y - intercept[:, None] - level - slope * elevation_km[:, None]
            scale = _scatter(residual, known)
            size = np.abs(residual) / scale
            weight = known * np.where(size > _HUBER, _HUBER / np.maximum(size, _HUBER), 1.0)
        sd = scale / np.sqrt(np.maximum(spread, 1e-9))
        cells = np.maximum(known.sum(axis=1), 1)
        left = y - level - slope * elevation_km[:, None]
        intercept = np.where(known, left, 0.0).sum(axis=1) / cells
    enough = known.sum(axis=0) >= MINIMUM_STATIONS
    return np.where(enough, slope, 0.0), np.where(enough, sd, np.inf)


def _weighted_line(
    y: np.ndarray, x: np.ndarray, weight: np.ndarray
) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Slope, level at zero and weighted sum of squares of x of each column's line."""
    total = np.maximum(weight.sum(axis=0), 1e-9)
    x_mean = (weight * x[:, None]).sum(axis=0) / total
    y_mean = (weight * y).sum(axis=0) / total
    dx = x[:, None] - x_mean
    spread = (weight * dx**2).sum(axis=0)
    slope = (weight * dx * (y - y_mean)).sum(axis=0) / np.maximum(spread, 1e-9)
    return slope, y_mean - slope * x_mean, spread


def _scatter(residual: np.ndarray, known: np.ndarray) -> np.ndarray:
    """Standard deviation of the residuals of each column, drawn to the expected siting effect."""
    squares = np.where(known, residual**2, 0.0).sum(axis=0)
    freedom = np.maximum(known.sum(axis=0) - 2, 0)
    prior = _SITING_WEIGHT * _SITING_SD**2
    return np.sqrt((squares + prior) / (freedom + _SITING_WEIGHT))


def _pooled(fitted: np.ndarray, sd: np.ndarray, table: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Slopes pooled by precision with the neighbouring cells' and with the table's."""
    precision = np.where(np.isfinite(sd), 1.0 / np.maximum(sd, 1e-6) ** 2, 0.0)
    around = [(0, 1), (0, -1), (1, 0), (-1, 0)]
    p_around = sum(np.roll(precision, step, axis=(0, 1)) for step in around)
    s_around = sum(np.roll(precision * fitted, step, axis=(0, 1)) for step in around)
    mean_around = s_around / np.maximum(p_around, 1e-12)
    p_neighbour = 1.0 / (1.0 / np.maximum(p_around, 1e-12) + _NEIGHBOUR_SD**2)
    p_table = 1.0 / _TABLE_SD**2
    total = precision + p_neighbour + p_table
    mean = (precision * fitted + p_neighbour * mean_around + p_table * table) / total
    return mean, np.sqrt(1.0 / total)
