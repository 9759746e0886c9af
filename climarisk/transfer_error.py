"""How far carried air is from the truth, learned by hiding stations."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from climarisk.climatology import segment_quantiles
from climarisk.lapse import DAY_HOURS

#: Standard deviation of the air temperature carried to a place without a station, K: at the
#: same elevation, and what each kilometre of height adds (in quadrature).  They give the
#: planning values 0.9, 1.5 and 2.5 K at 0, 500 and 1000 m (planning assumptions
#: informed by published errors of hourly transfer, 1.3-2.0 K mean absolute), used until
#: stations can be hidden.
BASE_SD_K, HEIGHT_SD_K_PER_KM = 0.9, 2.4
#: What distance adds, in quadrature: 0.9 K at 50 km.  Between the 0.6 K of a tropical upland
#: network and the 1.7 K of an alpine one, measured by predicting their stations from each other.
DISTANCE_SD_K_PER_KM = 0.9 / 50.0
#: Station equivalents by which a study's own verification is drawn to the planning values,
#: and each month and half-day to the study's own mean (judgements).
_PLANNING_WEIGHT, _OVERALL_WEIGHT = 2.0, 3.0
#: Levels that stand for the distribution of the error: the means of equal shares of it.
LEVELS = 9
#: Fine probabilities at which the distribution is kept: the middles of 450 equal shares.
PROBABILITIES = (np.arange(450) + 0.5) / 450
#: Shape and persistence of the errors are taken from at least so many hidden stations.
_STATIONS_FOR_SHAPE, _STATIONS_FOR_DISPERSION = 5, 2
#: Share of the error variance that stays with a place through a season: 0.5 until verified
#: (a judgement; siting and inversions persist, cloud and wind do not).
_PLANNING_PERSISTENCE = 0.5
#: The other half is taken as the hours' own until verified.
_PLANNING_DISPERSION = 0.5
_P90 = np.array([0.9])
#: A mean error of a hidden station beyond this is a fault, K: a unit, an elevation, a place.
_ABSURD_K = 6.0
#: Common hours that a month x hour cell of a hidden station needs.
CELL_HOURS = 20


def planning_sd_k(carried_m: np.ndarray, carried_km: np.ndarray | float = 0.0) -> np.ndarray:
    """Standard deviation of carried temperature before any verification, K.

    Parameters
    ----------
    carried_m : ndarray
        Height over which it was carried; NaN for the field's own station gives 0.
    carried_km : ndarray or float
        Distance over which it was carried.
    """
    sd = np.hypot(BASE_SD_K, HEIGHT_SD_K_PER_KM * carried_m / 1000.0)
    return np.where(np.isnan(carried_m), 0.0, np.hypot(sd, DISTANCE_SD_K_PER_KM * carried_km))


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
    estimated_c : ndarray, shape (n_hours,)
        Estimated temperature.
    carried_km : ndarray, shape (n_hours,), or float
    """

    error_k: np.ndarray
    carried_m: np.ndarray
    month: np.ndarray
    hour: np.ndarray
    year: np.ndarray
    estimated_c: np.ndarray
    carried_km: np.ndarray | float = 0.0

    @property
    def planning_sd_k(self) -> np.ndarray:
        """Standard deviation expected of each hour before any verification, K."""
        return planning_sd_k(self.carried_m, self.carried_km)


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
    dispersion : float
        Share of the variance by which the hours of a place vary more than their estimates,
        chosen so that the 90th percentile of hidden stations comes out without bias.
    stations : int
        Stations hidden; 0: planning values.
    """

    scale: np.ndarray
    quantiles: np.ndarray
    persistence: float
    dispersion: float
    stations: int

    @property
    def levels(self) -> np.ndarray:
        """Means of `LEVELS` equal shares of the distribution; they keep 95 % of its variance."""
        return self.quantiles.reshape(LEVELS, -1).mean(axis=1)

    @property
    def hour_levels(self) -> np.ndarray:
        """Levels by which the hours of a place vary around their estimates."""
        return self.levels * np.sqrt(self.dispersion)

    @property
    def place_levels(self) -> np.ndarray:
        """Levels of what is not known of an hour at a place: its hours' and the place's own."""
        return self.levels * np.sqrt(min(self.dispersion + self.persistence, 1.0))

    @property
    def place_share(self) -> float:
        """Share of the variance of `place_levels` that stays with the place."""
        return self.persistence / min(self.dispersion + self.persistence, 1.0)

    def quantile(self, probability: float) -> float:
        """Quantile of the standardised error."""
        return float(np.interp(probability, PROBABILITIES, self.quantiles))

    def sd_k(
        self,
        carried_m: np.ndarray,
        month: np.ndarray,
        hour: np.ndarray,
        carried_km: np.ndarray | float = 0.0,
    ) -> np.ndarray:
        """Standard deviation of each hour's temperature, K; 0 from the field's own station."""
        return planning_sd_k(carried_m, carried_km) * self.scale[month, half_day(hour)]


def planning_error() -> TransferError:
    """The error distribution before any station was hidden."""
    return TransferError(
        np.ones((12, 2)), normal_quantiles(), _PLANNING_PERSISTENCE, _PLANNING_DISPERSION, 0
    )


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
        expected = h.planning_sd_k
        known = np.flatnonzero(np.isfinite(h.error_k) & (expected > 0))
        u = h.error_k[known] / expected[known]
        cell = h.month[known] * 2 + half_day(h.hour[known])
        count = np.bincount(cell, minlength=24)
        mean_square = np.bincount(cell, u**2, 24) / np.where(count > 0, count, np.nan)
        squares[i] = mean_square.reshape(12, 2)
        persistent.append(_persistence(u, h.year[known] * 24 + cell))
        standardised.append((u, cell))
    scale = _scale(squares)
    quantiles, persistence = normal_quantiles(), _PLANNING_PERSISTENCE
    if len(hidden) >= _STATIONS_FOR_SHAPE:
        quantiles = _pooled_quantiles([u / scale.reshape(-1)[cell] for u, cell in standardised])
        persistence = float(np.clip(np.mean(persistent), 0.1, 0.9))
    error = TransferError(scale, quantiles, persistence, _PLANNING_DISPERSION, len(hidden))
    return replace(error, dispersion=_dispersion(hidden, error))


def _dispersion(hidden: Sequence[HiddenStation], error: TransferError) -> float:
    """Share of the error variance that, added to the hours, frees the mean P90 of bias.

    The 90th percentile is taken to rise in proportion to the share.
    """
    missing, rise = [], []
    for h in hidden:
        known = np.isfinite(h.error_k)
        cell = h.month[known] * 24 + h.hour[known]
        sd = h.planning_sd_k[known] * error.scale[h.month[known], half_day(h.hour[known])]
        estimated = h.estimated_c[known]
        spread = (estimated + error.levels[:, None] * sd).reshape(-1)
        plain = segment_quantiles(estimated, cell, 288, _P90)[:, 0]
        with_error = segment_quantiles(spread, np.tile(cell, LEVELS), 288, _P90)[:, 0]
        enough = np.bincount(cell, minlength=288) >= CELL_HOURS
        if enough.any():
            measured = segment_quantiles(estimated + h.error_k[known], cell, 288, _P90)[:, 0]
            missing.append(float((measured - plain)[enough].mean()))
            rise.append(float((with_error - plain)[enough].mean()))
    if len(missing) < _STATIONS_FOR_DISPERSION or np.mean(rise) <= 0.0:
        return _PLANNING_DISPERSION
    return float(np.clip(np.mean(missing) / np.mean(rise), 0.0, 1.0))


def far_off(shown: Mapping[int, HiddenStation]) -> int | None:
    """The hidden station whose temperature cannot be right, the worst first; None without one.

    Parameters
    ----------
    shown : mapping of int to HiddenStation

    Notes
    -----
    Far off is a mean error above 6 K, no valley or crest does that, that is also more than
    three times the median size of the others'.  Needs two others.
    """
    bias = {
        i: abs(float(np.nanmean(h.error_k)))
        for i, h in shown.items()
        if np.isfinite(h.error_k).any()
    }
    if len(bias) < 3:
        return None
    worst = max(sorted(bias), key=lambda i: bias[i])
    others = [b for i, b in bias.items() if i != worst]
    return worst if bias[worst] > _ABSURD_K and bias[worst] > 3 * np.median(others) else None


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
