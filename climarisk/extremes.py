"""Annual maximum density altitude and the levels it reaches once in so many years."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pandas as pd

from climarisk.climatology import segment_quantiles
from climarisk.clock import LocalClock
from climarisk.rules import DAYS

#: A fit needs this many annual maxima (common practice, no source).
MINIMUM_MAXIMA = 20
#: Return periods offered, years; those beyond twice the record are left out.
RETURN_PERIODS = (2, 5, 10, 20, 30, 40, 50, 60, 80, 100)
#: Shape (xi) outside which a fit is refused.  Maxima that temperature drives have -0.3 to 0
#: (common practice, no source); 98 of 100 estimates from 20 of them stay inside.
SHAPE_BOUNDS = (-0.8, 0.4)
#: A year counts by the days of its hottest months, looked at around the hottest hour.
HOTTEST_MONTHS, HOTTEST_WITHIN_H, VALUES_A_DAY = 3, 3, 2
#: Simulated records behind the intervals, and the seed that makes them repeatable.
RESAMPLES, SEED = 1000, 19_850

EXTREME_COLUMNS = ["field", "n_years", "return_period_years", "density_altitude_ft"]
EXTREME_COLUMNS += ["ci_low", "ci_high"]


@dataclass(frozen=True)
class ReturnLevel:
    """The level that one year in `return_period_years` exceeds, and its interval."""

    return_period_years: int
    level: float
    low: float
    high: float


@dataclass(frozen=True)
class Extremes:
    """Generalised extreme-value distribution of annual maxima.

    Parameters
    ----------
    n_years : int
        Annual maxima.
    location, scale, shape : float
        Of the distribution, `shape` being xi (negative: bounded above); NaN without a fit.
    levels : tuple of ReturnLevel
        By rising return period; empty without a fit.
    reason : str
        Why there is no fit; empty with one.
    """

    n_years: int
    location: float
    scale: float
    shape: float
    levels: tuple[ReturnLevel, ...]
    reason: str


def annual_maxima(values: np.ndarray, clock: LocalClock) -> tuple[np.ndarray, np.ndarray]:
    """Highest value of each calendar year that counts.

    Parameters
    ----------
    values : ndarray, shape (n_hours,)
        On the grid; NaN where unknown.
    clock : LocalClock

    Returns
    -------
    years : ndarray of int, shape (n,)
    maxima : ndarray, shape (n,)

    Notes
    -----
    The hottest months are the three with the highest 95th percentile of all hours, the hottest
    hour that with the highest mean in them.  A day is present when two hours within 3 h of the
    hottest hour have a value, so that three-hourly reports suffice; a year counts when 80 % of
    the days of its hottest months are present.  Hourly maxima lie below those between the hours.
    """
    known = np.flatnonzero(np.isfinite(values) & clock.in_period)
    if not len(known):
        return np.array([], int), np.array([])
    p95 = segment_quantiles(values[known], clock.month[known], 12, np.array([0.95]))[:, 0]
    hottest = np.argsort(np.where(np.isnan(p95), -np.inf, p95))[-HOTTEST_MONTHS:]
    hot = known[np.isin(clock.month[known], hottest)]
    count = np.bincount(clock.hour[hot], minlength=24)
    mean = np.bincount(clock.hour[hot], values[hot], minlength=24) / np.maximum(count, 1)
    peak = int(np.where(count > 0, mean, -np.inf).argmax())
    near = hot[np.abs((clock.hour[hot] - peak + 12) % 24 - 12) <= HOTTEST_WITHIN_H]
    day, values_of_day = np.unique(clock.day[near], return_counts=True)
    present = day[values_of_day >= VALUES_A_DAY]
    first = np.datetime64(f"{clock.first_year}-01-01", "D")
    year = (first + present).astype("datetime64[Y]").astype(int) + 1970 - clock.first_year
    days = np.bincount(year, minlength=clock.n_years)
    counts = days >= DAYS.share_of_days * clock.days_in_month[:, hottest].sum(axis=1)
    highest = np.full(clock.n_years, -np.inf)
    np.maximum.at(highest, clock.year[known], values[known])
    return clock.first_year + np.flatnonzero(counts), highest[counts]


def gev_parameters(maxima: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Location, scale and shape xi of the extreme-value distribution, by L-moments.

    Parameters
    ----------
    maxima : ndarray, shape (..., n)
        No NaN, not all equal.

    Returns
    -------
    location, scale, shape : ndarray, shape (...)

    Notes
    -----
    Hosking, Wallis and Wood (1985), Technometrics 27, 251-261, who find this estimator better
    than maximum likelihood in records of 15 to 100 years.  With k = -xi the third L-moment
    ratio is ``2 (1 - 3**-k) / (1 - 2**-k) - 3``; it is inverted by interpolation in a table
    (to 1e-6) instead of by their approximation.
    """
    from scipy.special import gamma
    from scipy.stats import lmoment

    mean, spread, third = lmoment(maxima, order=[1, 2, 3], axis=-1, standardize=False)
    k = np.linspace(-0.9, 3.0, 7802)  # no step falls on 0, where the formula is 0 / 0
    ratio = 2.0 * np.expm1(-k * np.log(3.0)) / np.expm1(-k * np.log(2.0)) - 3.0
    k = np.interp(-third / spread, -ratio, k)
    k = np.where(np.abs(k) < 1e-9, 1e-9, k)
    scale = spread * k / (-np.expm1(-k * np.log(2.0)) * gamma(1.0 + k))
    return mean - scale * (1.0 - gamma(1.0 + k)) / k, scale, -k


def return_level(
    period_years: np.ndarray | float,
    location: np.ndarray | float,
    scale: np.ndarray | float,
    shape: np.ndarray | float,
) -> np.ndarray:
    """Level that one year in `period_years` exceeds, in units of `location`.

    Parameters
    ----------
    period_years : float or ndarray
        Above 1; broadcast with the parameters.
    location, scale, shape : float or ndarray
        `shape` is xi, the negative of the library's.
    """
    from scipy.stats import genextreme

    return genextreme.isf(1.0 / np.asarray(period_years), -np.asarray(shape), location, scale)


def extremes(maxima: np.ndarray, confidence: float) -> Extremes:
    """Return levels of annual maxima, up to twice the record, with intervals.

    Parameters
    ----------
    maxima : ndarray, shape (n_years,)
        No NaN.
    confidence : float
        Of the intervals, above 0 and below 1.

    Notes
    -----
    Intervals are percentiles of the levels refitted to records simulated from the fit; Kysely
    (2008), JAMC 47, 3236-3251, finds resampling of the years themselves too narrow in short
    records.  The maxima are taken as independent and without trend.
    """
    n = len(maxima)
    if n < MINIMUM_MAXIMA:
        return _without(n, f"{n} annual maxima, {MINIMUM_MAXIMA} are needed")
    if np.ptp(maxima) == 0.0:
        return _without(n, "all annual maxima are equal")
    location, scale, shape = (float(p) for p in gev_parameters(maxima))
    low, high = SHAPE_BOUNDS
    if not low <= shape <= high:
        return _without(n, f"the fitted shape {shape:.2f} is outside {low} to {high}")
    periods = np.array([t for t in RETURN_PERIODS if t <= 2 * n])
    levels = return_level(periods, location, scale, shape)
    bounds = _intervals(periods, n, (location, scale, shape), confidence)
    rows = zip(periods.tolist(), levels.tolist(), *bounds.tolist(), strict=True)
    return Extremes(n, location, scale, shape, tuple(ReturnLevel(*row) for row in rows), "")


def _without(n: int, reason: str) -> Extremes:
    return Extremes(n, np.nan, np.nan, np.nan, (), reason)


def _intervals(
    periods: np.ndarray, n: int, fitted: tuple[float, float, float], confidence: float
) -> np.ndarray:
    """Interval of each level, shape (2, n_periods)."""
    from scipy.stats import genextreme

    location, scale, shape = fitted
    draw = np.random.default_rng(SEED)
    records = genextreme.rvs(-shape, location, scale, size=(RESAMPLES, n), random_state=draw)
    refitted = [p[:, None] for p in gev_parameters(records)]
    tail = (1.0 - confidence) / 2.0
    levels = return_level(periods, *refitted)
    return np.quantile(levels, [tail, 1.0 - tail], axis=0, method="median_unbiased")


def extreme_rows(
    field: str, density_altitude_ft: np.ndarray, clock: LocalClock, confidence: float
) -> tuple[pd.DataFrame, str]:
    """One field's rows of ``extremes.csv`` and why there are none.

    Parameters
    ----------
    field : str
    density_altitude_ft : ndarray, shape (n_hours,)
        On the grid; NaN where unknown.
    clock : LocalClock
    confidence : float

    Returns
    -------
    rows : DataFrame
        Columns `EXTREME_COLUMNS`, one row per return period; empty without a fit.
    reason : str
        Empty with a fit.
    """
    _, maxima = annual_maxima(density_altitude_ft, clock)
    found = extremes(maxima, confidence)
    rows = [
        [field, found.n_years, r.return_period_years, r.level, r.low, r.high] for r in found.levels
    ]
    return pd.DataFrame(rows, columns=EXTREME_COLUMNS), found.reason
