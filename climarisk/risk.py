"""Shortfall shares of one aircraft at one field, by month, month x hour and season."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd

from climarisk.climatology import (
    Completeness,
    completeness,
    season_coverage,
    season_hours,
    segment_quantiles,
    window_cells,
    window_coverage,
)
from climarisk.clock import LocalClock
from climarisk.performance import CHECKS, N_MARGIN_CHECKS, Margins
from climarisk.rules import YEARS, interval_notes
from climarisk.seasons import Season

#: Resamples of whole years, and the seed that makes them repeatable.
RESAMPLES, SEED = 2000, 20_100


@dataclass(frozen=True)
class Hours:
    """The hours of one aircraft at one field that enter the shares.

    Parameters
    ----------
    clock : LocalClock
    known : ndarray of int, shape (n_known,)
        Places on the grid of the hours with a value.
    central : Margins
        Of those hours, with the air as estimated.
    inside : ndarray of bool, shape (n_hours,)
        The hours window on the grid.
    confidence : float
    levels : sequence of Margins
        Of those hours at each level of the transfer error, equally likely; empty where there
        is no error.
    persistence : float
        Share of the variance of the transfer error that stays with a place, 0-1.
    error_ft : ndarray, shape (n_known,), or float
        Standard deviation of the density altitude from the transfer, ft.
    """

    clock: LocalClock
    known: np.ndarray
    central: Margins
    inside: np.ndarray
    confidence: float
    levels: Sequence[Margins] = ()
    persistence: float = 0.0
    error_ft: np.ndarray | float = 0.0


def year_weights(n_years: int) -> np.ndarray:
    """How often each year is drawn in each resample; shape (`RESAMPLES`, n_years).

    The same for every field and aircraft of a study, so that differences are paired.
    """
    draws = np.random.default_rng(SEED).integers(0, n_years, size=(RESAMPLES, n_years))
    weights = np.zeros((RESAMPLES, n_years))
    np.add.at(weights, (np.arange(RESAMPLES)[:, None], draws), 1.0)
    return weights


def level_weights(n_levels: int, persistence: float) -> np.ndarray:
    """How much each level of the transfer error counts in each resample.

    The error of a place has a part that persists through the record and a part that averages
    out over days and hours.  Each resample draws the persistent part; the weights are the
    probabilities of the levels given it.

    Parameters
    ----------
    n_levels : int
        Equal shares of the error's distribution.
    persistence : float
        Share of the variance that persists, 0-1.

    Returns
    -------
    ndarray, shape (`RESAMPLES`, n_levels)
        Rows sum to 1.
    """
    if n_levels == 1:
        return np.ones((RESAMPLES, 1))
    from scipy.stats import norm

    drawn = np.random.default_rng(SEED + 1).standard_normal(RESAMPLES)[:, None]
    edges = norm.ppf(np.arange(n_levels + 1) / n_levels)[None, :]
    rest = np.sqrt(max(1.0 - persistence, 1e-9))  # all of it may persist
    passed = norm.cdf((edges - np.sqrt(persistence) * drawn) / rest)
    return np.diff(passed, axis=1)


def shares_by_cell(
    hours: Hours, pooled: np.ndarray, cells: np.ndarray, n_cells: int
) -> pd.DataFrame:
    """Shortfall share, its interval, the limiting check and the margins of each cell.

    Parameters
    ----------
    hours : Hours
    pooled : ndarray of bool, shape (n_known,)
        Which of the known hours enter.
    cells : ndarray of int, shape (n_known,)
        Their cell, 0 to `n_cells` - 1.
    n_cells : int

    Returns
    -------
    DataFrame, shape (n_cells, 13)
        NaN (``limiting`` empty) where no hour enters.
    """
    clock, levels = hours.clock, hours.levels or (hours.central,)
    error_ft = np.broadcast_to(hours.error_ft, len(hours.known))
    places = np.flatnonzero(pooled)
    cell, where = cells[places], hours.known[places]
    shares = shortfall_by_cell(hours, pooled, cells, n_cells)
    some = np.where(shares["n_hours"] > 0, shares["n_hours"], np.nan)

    by_year = cell * clock.n_years + clock.year[where]

    def count(weights: np.ndarray) -> np.ndarray:
        sums = np.bincount(by_year, weights, n_cells * clock.n_years)
        return sums.reshape(n_cells, -1).sum(axis=1)

    quantiles = segment_quantiles(
        np.concatenate([m.margin[places] for m in levels]),
        np.tile(cell, len(levels)),
        n_cells,
        np.array([0.1, 0.5]),
    )
    return pd.DataFrame(
        {
            **{name: shares[name] for name in _SHARE},
            "outside_table": sum(count(m.outside_table[places]) for m in levels)
            / len(levels)
            / some,
            "limiting": _limiting(
                cell,
                [m.limiting[places] for m in levels],
                [m.shortfall[places] for m in levels],
                n_cells,
            ),
            "margin_p10": quantiles[:, 0],
            "margin_p50": quantiles[:, 1],
            "days_affected": _days_affected(
                cell, clock.day[where], [m.shortfall[places] for m in levels], n_cells
            ),
            "shortfall_central": count(hours.central.shortfall[places]) / some,
            "transfer_error_ft": np.sqrt(count(error_ft[places] ** 2) / some),
            "interval_note": shares["interval_note"],
        }
    )


#: Columns of `shortfall_by_cell` that lead those of `shares_by_cell`.
_SHARE = ("n_hours", "n_years", "shortfall", "ci_low", "ci_high")


def shortfall_by_cell(
    hours: Hours, pooled: np.ndarray, cells: np.ndarray, n_cells: int
) -> pd.DataFrame:
    """Shortfall share of each cell with its interval.

    Parameters
    ----------
    hours, pooled, cells, n_cells
        As for `shares_by_cell`.

    Returns
    -------
    DataFrame, shape (n_cells, 6)
        ``n_hours``, ``n_years``, ``shortfall``, ``ci_low``, ``ci_high``, ``interval_note``; NaN
        where no hour enters.
    """
    total, fallen = _counts_by_year(hours, pooled, cells, n_cells)
    n_hours, n_years = total.sum(axis=1), (total > 0).sum(axis=1)
    some = np.where(n_hours > 0, n_hours, np.nan)
    low, high = _intervals(fallen, total, n_years, hours.confidence, hours.persistence)
    return pd.DataFrame(
        {
            "n_hours": n_hours,
            "n_years": n_years,
            "shortfall": fallen.sum(axis=(1, 2)) / fallen.shape[2] / some,
            "ci_low": low,
            "ci_high": high,
            "interval_note": interval_notes(n_years),
        }
    )


def _counts_by_year(
    hours: Hours, pooled: np.ndarray, cells: np.ndarray, n_cells: int
) -> tuple[np.ndarray, np.ndarray]:
    """Hours of each cell and year, and those that fall short at each level of the error.

    Shapes (n_cells, n_years) and (n_cells, n_years, n_levels).
    """
    clock = hours.clock
    places = np.flatnonzero(pooled)
    index = cells[places] * clock.n_years + clock.year[hours.known[places]]
    size = n_cells * clock.n_years
    total = np.bincount(index, minlength=size).reshape(n_cells, -1)
    short = [m.shortfall[places] for m in hours.levels or (hours.central,)]
    fallen = np.stack([np.bincount(index, s, size).reshape(n_cells, -1) for s in short], axis=-1)
    return total, fallen


def _intervals(
    fallen: np.ndarray,
    total: np.ndarray,
    n_years: np.ndarray,
    confidence: float,
    persistence: float = 0.0,
) -> tuple[np.ndarray, np.ndarray]:
    """Interval of each cell's share from resampling whole years; NaN below 5 years.

    Each resample also draws the persistent part of the transfer error.
    """
    low, high = np.full(len(total), np.nan), np.full(len(total), np.nan)
    enough = n_years >= YEARS.interval
    if not enough.any():
        return low, high
    fallen = fallen.reshape(*total.shape, -1)
    years = year_weights(total.shape[1])
    levels = level_weights(fallen.shape[2], persistence)
    both = (years[:, :, None] * levels[:, None, :]).reshape(RESAMPLES, -1)
    drawn = years @ total[enough].T
    share = both @ fallen[enough].reshape(int(enough.sum()), -1).T
    share = np.where(drawn > 0, share / np.where(drawn > 0, drawn, 1), np.nan)
    # The slow form only for cells whose counting years some resample misses altogether.
    gaps = np.isnan(share).any(axis=0)
    bounds = np.empty((2, share.shape[1]))
    for count in np.unique(n_years[enough]):
        tail = expanded_tail(int(count), confidence)
        for chosen, quantile in ((~gaps, np.quantile), (gaps, np.nanquantile)):
            columns = chosen & (n_years[enough] == count)
            if columns.any():
                bounds[:, columns] = quantile(
                    share[:, columns], [tail, 1.0 - tail], axis=0, method="median_unbiased"
                )
    low[enough], high[enough] = bounds
    return low, high


def expanded_tail(n_years: int, confidence: float) -> float:
    """Share of the resamples to cut at either end for an interval of the stated confidence.

    Parameters
    ----------
    n_years : int
        Resampled years, 2 or more.
    confidence : float

    Notes
    -----
    Resampled means vary by ``sqrt((n - 1) / n)`` too little and know nothing of the doubt about
    their own spread; the tail of the normal distribution beyond ``sqrt(n / (n - 1))`` times the
    t quantile with n - 1 degrees of freedom makes up for both (expanded percentile interval,
    Hesterberg 2015, The American Statistician 69, 371-386).
    """
    from scipy.special import ndtr, stdtrit

    tail = (1.0 - confidence) / 2.0
    return float(ndtr(np.sqrt(n_years / (n_years - 1)) * stdtrit(n_years - 1, tail)))


def _limiting(
    cell: np.ndarray,
    checks: Sequence[np.ndarray],
    short: Sequence[np.ndarray],
    n_cells: int,
) -> np.ndarray:
    """Name of the most frequent limiting check of each cell; empty without a shortfall."""
    size = n_cells * len(CHECKS)
    votes = sum(
        np.bincount(cell[s] * len(CHECKS) + c[s], minlength=size)
        for c, s in zip(checks, short, strict=True)
    )
    votes = np.asarray(votes).reshape(n_cells, -1)
    names = np.array(CHECKS, dtype=object)[votes.argmax(axis=1)]
    return np.where(votes.sum(axis=1) > 0, names, "")


def _days_affected(
    cell: np.ndarray, day: np.ndarray, short: Sequence[np.ndarray], n_cells: int
) -> np.ndarray:
    """Share of the days with a known hour that have a shortfall hour, per cell.

    The error of a day is taken as common to its hours.
    """
    n_days = int(day.max()) + 1 if len(day) else 1
    place = cell * n_days + day
    days = _days_with(place, n_cells, n_days)
    affected = [_days_with(place[s], n_cells, n_days) for s in short]
    return np.mean(affected, axis=0) / np.where(days > 0, days, np.nan)


def _days_with(place: np.ndarray, n_cells: int, n_days: int) -> np.ndarray:
    """How many days of each cell occur among the places."""
    seen = np.bincount(place, minlength=n_cells * n_days).reshape(n_cells, -1) > 0
    return seen.sum(axis=1)


def risk_tables(
    hours: Hours, seasons: Sequence[Season]
) -> tuple[pd.DataFrame, pd.DataFrame, pd.DataFrame]:
    """Shares by month (hours window), month x hour (all hours) and season (hours window).

    Parameters
    ----------
    hours : Hours
    seasons : sequence of Season

    Returns
    -------
    monthly, hourly, seasonal : DataFrame
        12, 288 and ``len(seasons)`` rows; the columns of the file contract without
        ``field`` and ``aircraft``.
    """
    clock, known = hours.clock, hours.known
    complete = complete_hours(hours)
    used, inside = complete.used[known], hours.inside[known]
    hourly = shares_by_cell(hours, used, clock.month_hour[known], 288)
    hourly.insert(0, "month", np.repeat(np.arange(1, 13), 24))
    hourly.insert(1, "hour", np.tile(np.arange(24), 12))
    hourly["coverage"] = hourly["n_years"] / clock.n_years
    monthly = shares_by_cell(hours, used & inside, clock.month[known], 12)
    monthly.insert(0, "month", np.arange(1, 13))
    monthly["coverage"] = window_coverage(complete.counts, window_cells(hours.inside, clock))
    days = np.bincount(clock.month_hour[clock.in_period], minlength=288)
    _add_usable(hourly, days, clock)
    offered = hours.inside & clock.in_period
    hourly["in_window"] = np.bincount(clock.month_hour[offered], minlength=288) / days
    _add_usable(monthly, np.bincount(clock.month[offered], minlength=12), clock)
    return monthly, hourly, _seasonal(hours, complete, seasons)


def _add_usable(table: pd.DataFrame, offered: np.ndarray | int, clock: LocalClock) -> None:
    """Add the hours a year that the calendar offers in each cell, and those that do not fall short.

    Hours without a value are taken to fall short as often as those with one.
    """
    table["hours_offered"] = offered / clock.n_years
    table["usable_hours"] = table["hours_offered"] * (1.0 - table["shortfall"])


def margins_by_check(hours: Hours, checks: Sequence[str]) -> pd.DataFrame:
    """Margins and shortfall share of each check by month, inside the hours window.

    Parameters
    ----------
    hours : Hours
    checks : sequence of str
        Those of `climarisk.performance.CHECKS` that the profile has.

    Returns
    -------
    DataFrame, shape (12 * len(checks), 6)
        ``month`` 1-12, ``check``, ``n_hours``, ``shortfall`` (share of the hours in which this
        check fails, an hour beyond its table among them), ``margin_p10``, ``margin_p50``; no
        margins for a limit, NaN in a month without an hour.
    """
    levels = hours.levels or (hours.central,)
    places = np.flatnonzero(complete_hours(hours).used[hours.known] & hours.inside[hours.known])
    month = hours.clock.month[hours.known[places]]
    n_hours = np.bincount(month, minlength=12)
    some = np.where(n_hours > 0, n_hours, np.nan)
    tables = []
    for number, check in ((CHECKS.index(name), name) for name in checks):
        values = np.array([m.checks[number, places] for m in levels])
        failed = sum(np.bincount(month, row < 0, 12) for row in values) / len(levels)
        quantiles = np.full((12, 2), np.nan)
        if number < N_MARGIN_CHECKS:
            quantiles = segment_quantiles(
                values.reshape(-1), np.tile(month, len(levels)), 12, np.array([0.1, 0.5])
            )
        tables.append(
            pd.DataFrame(
                {
                    "month": np.arange(1, 13),
                    "check": check,
                    "n_hours": n_hours,
                    "shortfall": failed / some,
                    "margin_p10": quantiles[:, 0],
                    "margin_p50": quantiles[:, 1],
                }
            )
        )
    return pd.concat(tables).sort_values("month", kind="stable", ignore_index=True)


def complete_hours(hours: Hours) -> Completeness:
    """The completeness rule applied to the hours with a value."""
    on_grid = np.zeros(len(hours.clock.hour), bool)
    on_grid[hours.known] = True
    return completeness(on_grid, hours.clock)


def window_counts(hours: Hours) -> tuple[np.ndarray, np.ndarray]:
    """Hours of each month of each year inside the hours window, and those that fall short.

    Parameters
    ----------
    hours : Hours

    Returns
    -------
    total : ndarray of int, shape (12, n_years)
    fallen : ndarray, shape (12, n_years, n_levels)
        At each level of the transfer error.
    """
    pooled = complete_hours(hours).used[hours.known] & hours.inside[hours.known]
    return _counts_by_year(hours, pooled, hours.clock.month[hours.known], 12)


def yearly_counts(hours: Hours) -> pd.DataFrame:
    """Hours and shortfall hours of each month of each year, inside the hours window.

    Parameters
    ----------
    hours : Hours

    Returns
    -------
    DataFrame
        ``month`` 1-12, ``year``, ``n_hours``, ``shortfall_hours`` (the mean over the levels of
        the transfer error, so not whole); months without an hour are absent.
    """
    total, fallen = window_counts(hours)
    month, year = np.nonzero(total)
    return pd.DataFrame(
        {
            "month": month + 1,
            "year": year + hours.clock.first_year,
            "n_hours": total[month, year],
            "shortfall_hours": (fallen.sum(axis=2) / fallen.shape[2])[month, year],
        }
    )


def paired_difference(
    first: pd.DataFrame, second: pd.DataFrame, years: range, confidence: float
) -> pd.DataFrame:
    """Difference of two shortfall shares by month, with an interval from the same resampled years.

    Parameters
    ----------
    first, second : DataFrame
        As `yearly_counts` returns them: two fields, two aircraft, or a field and its scenario.
    years : range
        The years of the study.
    confidence : float

    Returns
    -------
    DataFrame, shape (12, 4)
        ``month``, ``difference`` (first minus second), ``ci_low``, ``ci_high``; no interval
        below five years with hours in either.  The part of the transfer error that stays with
        a place is not in it.
    """
    weights = year_weights(len(years))
    counts = [_counts_of(table, years) for table in (first, second)]
    rows = []
    for month in range(12):
        share, drawn = [], []
        for total, fallen in counts:
            n, k = total[month], fallen[month]
            share.append(k.sum() / n.sum() if n.sum() else np.nan)
            with np.errstate(invalid="ignore"):
                drawn.append((weights @ k) / (weights @ n))
        some = int(min((total[month] > 0).sum() for total, _ in counts))
        low = high = np.nan
        if some >= YEARS.interval:
            tail = expanded_tail(some, confidence)
            low, high = np.nanquantile(
                drawn[0] - drawn[1], [tail, 1.0 - tail], method="median_unbiased"
            )
        rows.append((month + 1, share[0] - share[1], low, high))
    return pd.DataFrame(rows, columns=["month", "difference", "ci_low", "ci_high"])


def _counts_of(table: pd.DataFrame, years: range) -> tuple[np.ndarray, np.ndarray]:
    """Hours and shortfall hours by month and year, each of shape (12, n_years)."""
    total, fallen = np.zeros((12, len(years))), np.zeros((12, len(years)))
    place = (table["month"].to_numpy() - 1, table["year"].to_numpy() - years.start)
    total[place], fallen[place] = table["n_hours"], table["shortfall_hours"]
    return total, fallen


def _seasonal(hours: Hours, complete: Completeness, seasons: Sequence[Season]) -> pd.DataFrame:
    clock, known = hours.clock, hours.known
    counting = complete.counting(clock)
    tables = []
    for season in seasons:
        member = hours.inside & season_hours(clock, season)
        chosen = (complete.used & member)[known]
        table = shares_by_cell(hours, chosen, np.zeros(len(known), int), 1)
        table.insert(0, "season", season.name)
        table["coverage"] = season_coverage(counting, member, clock)
        _add_usable(table, int((member & clock.in_period).sum()), clock)
        tables.append(table)
    return pd.concat(tables, ignore_index=True)
