"""How far carried air is from the truth, learned by hiding stations."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from climarisk.lapse import DAY_HOURS

#: Standard deviation of the air temperature carried to a place without a station, K: at the
#: same elevation, and what each kilometre of height adds (in quadrature).  They give the
#: planning values 0.9, 1.5 and 2.5 K at 0, 500 and 1000 m (METHODS 2.7, planning assumptions
#: informed by the published errors of METHODS 9), used until stations can be hidden.
BASE_SD_K, HEIGHT_SD_K_PER_KM = 0.9, 2.4
#: Station equivalents by which a study's own verification is drawn to the planning values,
#: and each month and half-day to the study's own mean (judgements).
_PLANNING_WEIGHT, _OVERALL_WEIGHT = 2.0, 3.0
#: Levels that stand for the distribution of the error: the means of equal shares of it.
LEVELS = 9
#: Fine probabilities at which the distribution is kept: the middles of 450 equal shares.
PROBABILITIES = (np.arange(450) + 0.5) / 450
#: Shape and persistence of the errors are taken from at least so many hidden stations.
_STATIONS_FOR_SHAPE = 5
#: Share of the error variance that stays with a place through a season: 0.5 until verified
#: (a judgement; siting and inversions persist, cloud and wind do not).
_PLANNING_PERSISTENCE = 0.5


def planning_sd_k(carried_m: np.ndarray) -> np.ndarray:
    """Standard deviation of carried temperature before any verification, K.

    Parameters
    ----------
    carried_m : ndarray
        Height over which it was carried; NaN for the field's own station gives 0.
    """
    sd = np.hypot(BASE_SD_K, HEIGHT_SD_K_PER_KM * carried_m / 1000.0)
    return np.where(np.isnan(carried_m), 0.0, sd)


def half_day(hour: np.ndarray) -> np.ndarray:
    """1 by day (10-17 local standard hours), else 0."""
    return ((hour >= DAY_HOURS[0]) & (hour <= DAY_HOURS[1])).astype(int)


@dataclass(frozen=True)
class HiddenStation:
    """What hiding one station showed, hour by hour.

    Parameters
    ----------
    error_k : ndarray, shape (n_hours,)
        Observed minus estimated temperature; NaN where either is missing.
    carried_m : ndarray, shape (n_hours,)
    month, hour, year : ndarray of int, shape (n_hours,)
        Local standard time at the station; month 0-11.
    """

    error_k: np.ndarray
    carried_m: np.ndarray
    month: np.ndarray
    hour: np.ndarray
    year: np.ndarray


@dataclass(frozen=True)
class TransferError:
    """Distribution of the error of carried temperature.

    Parameters
    ----------
    scale : ndarray, shape (12, 2)
        Factor on the planning standard deviation by month and half-day (night, day).
    quantiles : ndarray, shape (n_probabilities,)
        Of the standardised error, at `PROBABILITIES`; mean 0.
    persistence : float
        Share of the variance that stays with a place through a month of a year.
    stations : int
        Stations hidden; 0: planning values.
    """

    scale: np.ndarray
    quantiles: np.ndarray
    persistence: float
    stations: int

    @property
    def levels(self) -> np.ndarray:
        """Means of `LEVELS` equal shares of the distribution, shape (`LEVELS`,)."""
        return self.quantiles.reshape(LEVELS, -1).mean(axis=1)

    def quantile(self, probability: float) -> float:
        """Quantile of the standardised error."""
        return float(np.interp(probability, PROBABILITIES, self.quantiles))

    def sd_k(self, carried_m: np.ndarray, month: np.ndarray, hour: np.ndarray) -> np.ndarray:
        """Standard deviation of each hour's temperature, K; 0 from the field's own station."""
        return planning_sd_k(carried_m) * self.scale[month, half_day(hour)]


def planning_error() -> TransferError:
    """The error distribution before any station was hidden."""
    return TransferError(np.ones((12, 2)), normal_quantiles(), _PLANNING_PERSISTENCE, 0)


def normal_quantiles() -> np.ndarray:
    """Quantiles of the standard normal distribution at `PROBABILITIES`."""
    from scipy.stats import norm

    return norm.ppf(PROBABILITIES)


def learn_error(hidden: Sequence[HiddenStation]) -> TransferError:
    """The error distribution from the stations hidden, drawn to the planning values.

    Parameters
    ----------
    hidden : sequence of HiddenStation

    Notes
    -----
    Errors are standardised by the planning standard deviation of the height they were
    carried over.  Every station weighs the same, whatever the length of its record.
    """
    hidden = [h for h in hidden if np.isfinite(h.error_k).any()]
    if not hidden:
        return planning_error()
    squares = np.full((len(hidden), 12, 2), np.nan)
    persistent, standardised = [], []
    for i, h in enumerate(hidden):
        known = np.flatnonzero(np.isfinite(h.error_k) & (planning_sd_k(h.carried_m) > 0))
        u = h.error_k[known] / planning_sd_k(h.carried_m[known])
        cell = h.month[known] * 2 + half_day(h.hour[known])
        count = np.bincount(cell, minlength=24)
        mean_square = np.bincount(cell, u**2, 24) / np.where(count > 0, count, np.nan)
        squares[i] = mean_square.reshape(12, 2)
        persistent.append(_persistence(u, h.year[known] * 24 + cell))
        standardised.append((u, cell))
    scale = _scale(squares)
    if len(hidden) < _STATIONS_FOR_SHAPE:
        return TransferError(scale, normal_quantiles(), _PLANNING_PERSISTENCE, len(hidden))
    return TransferError(
        scale,
        _pooled_quantiles([u / scale.reshape(-1)[cell] for u, cell in standardised]),
        float(np.clip(np.mean(persistent), 0.1, 0.9)),
        len(hidden),
    )


def _scale(squares: np.ndarray) -> np.ndarray:
    """Root mean square of the standardised errors by month and half-day, pooled."""
    by_station = np.nanmean(squares.reshape(len(squares), -1), axis=1)
    known = by_station[np.isfinite(by_station)]
    overall = (known.sum() + _PLANNING_WEIGHT) / (len(known) + _PLANNING_WEIGHT)
    n = np.isfinite(squares).sum(axis=0)
    total = np.nansum(squares, axis=0)
    return np.sqrt((total + _OVERALL_WEIGHT * overall) / (n + _OVERALL_WEIGHT))


def _persistence(u: np.ndarray, season: np.ndarray) -> float:
    """Share of the mean square that the mean of each month and half-day of a year carries."""
    _, group = np.unique(season, return_inverse=True)
    count = np.bincount(group)
    mean = np.bincount(group, u) / count
    return float((count * mean**2).sum() / max((u**2).sum(), 1e-12))


def _pooled_quantiles(standardised: Sequence[np.ndarray]) -> np.ndarray:
    """Quantiles of the pooled errors, each station weighing the same, about a mean of zero."""
    pooled = np.concatenate([np.quantile(u, PROBABILITIES) for u in standardised if len(u)])
    quantiles = np.quantile(pooled, PROBABILITIES)
    return quantiles - quantiles.mean()
