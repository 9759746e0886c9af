"""Shortfall shares of one aircraft at one field, by month, month x hour and season."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd

from climarisk.climatology import (
    completeness,
    segment_quantiles,
    window_cells,
    window_coverage,
)
from climarisk.clock import LocalClock
from climarisk.performance import CHECKS, Margins
from climarisk.study import Season

#: Intervals need this many counting years.
MINIMUM_YEARS = 5
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
    margins : Margins
        Of those hours.
    inside : ndarray of bool, shape (n_hours,)
        The hours window on the grid.
    confidence : float
    """

    clock: LocalClock
    known: np.ndarray
    margins: Margins
    inside: np.ndarray
    confidence: float


def year_weights(n_years: int) -> np.ndarray:
    """How often each year is drawn in each resample; shape (`RESAMPLES`, n_years).

    The same for every field and aircraft of a study, so that differences are paired.
    """
    draws = np.random.default_rng(SEED).integers(0, n_years, size=(RESAMPLES, n_years))
    weights = np.zeros((RESAMPLES, n_years))
    np.add.at(weights, (np.arange(RESAMPLES)[:, None], draws), 1.0)
    return weights


def shares_by_cell(
    hours: Hours, pooled: np.ndarray, cells: np.ndarray, n_cells: int, n_years: np.ndarray
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
    n_years : ndarray of int, shape (n_cells,)
        Counting years, for the interval.

    Returns
    -------
    DataFrame, shape (n_cells, 9)
        NaN (``limiting`` empty) where no hour enters.
    """
    m, clock = hours.margins, hours.clock
    cell, year = cells[pooled], clock.year[hours.known[pooled]]
    short, outside = m.shortfall[pooled], m.outside_table[pooled]

    def count(mask: np.ndarray) -> np.ndarray:
        index = cell[mask] * clock.n_years + year[mask]
        return np.bincount(index, minlength=n_cells * clock.n_years).reshape(n_cells, -1)

    total, fallen = count(np.ones(len(cell), bool)), count(short)
    n_hours = total.sum(axis=1)
    some = np.where(n_hours > 0, n_hours, np.nan)
    low, high = _intervals(fallen, total, n_years, hours.confidence)
    quantiles = segment_quantiles(m.margin[pooled], cell, n_cells, np.array([0.1, 0.5]))
    return pd.DataFrame(
        {
            "n_hours": n_hours,
            "n_years": n_years,
            "shortfall": fallen.sum(axis=1) / some,
            "ci_low": low,
            "ci_high": high,
            "outside_table": count(outside).sum(axis=1) / some,
            "limiting": _limiting(cell[short], m.limiting[pooled][short], n_cells),
            "margin_p10": quantiles[:, 0],
            "margin_p50": quantiles[:, 1],
            "days_affected": _days_affected(cell, clock.day[hours.known[pooled]], short, n_cells),
        }
    )


def _intervals(
    fallen: np.ndarray, total: np.ndarray, n_years: np.ndarray, confidence: float
) -> tuple[np.ndarray, np.ndarray]:
    """Interval of each cell's share from resampling whole years; NaN below 5 years."""
    low, high = np.full(len(total), np.nan), np.full(len(total), np.nan)
    enough = n_years >= MINIMUM_YEARS
    if not enough.any():
        return low, high
    weights = year_weights(total.shape[1])
    drawn = weights @ total[enough].T
    share = np.where(
        drawn > 0, (weights @ fallen[enough].T) / np.where(drawn > 0, drawn, 1), np.nan
    )
    tail = (1.0 - confidence) / 2.0
    # The slow form only for cells whose counting years some resample misses altogether.
    gaps = np.isnan(share).any(axis=0)
    bounds = np.empty((2, share.shape[1]))
    for columns, quantile in ((~gaps, np.quantile), (gaps, np.nanquantile)):
        if columns.any():
            bounds[:, columns] = quantile(
                share[:, columns], [tail, 1.0 - tail], axis=0, method="median_unbiased"
            )
    low[enough], high[enough] = bounds
    return low, high


def _limiting(cell: np.ndarray, check: np.ndarray, n_cells: int) -> np.ndarray:
    """Name of the most frequent limiting check of each cell; empty without a shortfall."""
    votes = np.bincount(cell * len(CHECKS) + check, minlength=n_cells * len(CHECKS)).reshape(
        n_cells, -1
    )
    names = np.array(CHECKS, dtype=object)[votes.argmax(axis=1)]
    return np.where(votes.sum(axis=1) > 0, names, "")


def _days_affected(
    cell: np.ndarray, day: np.ndarray, short: np.ndarray, n_cells: int
) -> np.ndarray:
    """Share of the days with a known hour that have a shortfall hour, per cell."""
    n_days = int(day.max()) + 1 if len(day) else 1
    known = np.bincount(cell * n_days + day, minlength=n_cells * n_days) > 0
    affected = np.bincount((cell * n_days + day)[short], minlength=n_cells * n_days) > 0
    days = known.reshape(n_cells, -1).sum(axis=1)
    return affected.reshape(n_cells, -1).sum(axis=1) / np.where(days > 0, days, np.nan)


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
    on_grid = np.zeros(len(clock.hour), bool)
    on_grid[known] = True
    complete = completeness(on_grid, clock)
    used, inside = complete.used[known], hours.inside[known]
    hourly = shares_by_cell(
        hours, used, clock.month_hour[known], 288, complete.counts.sum(axis=0).reshape(-1)
    )
    hourly.insert(0, "month", np.repeat(np.arange(1, 13), 24))
    hourly.insert(1, "hour", np.tile(np.arange(24), 12))
    n_years, _ = window_coverage(complete.counts, window_cells(hours.inside, clock))
    monthly = shares_by_cell(hours, used & inside, clock.month[known], 12, n_years)
    monthly.insert(0, "month", np.arange(1, 13))
    return monthly, hourly, _seasonal(hours, used & inside, seasons)


def _seasonal(hours: Hours, pooled: np.ndarray, seasons: Sequence[Season]) -> pd.DataFrame:
    clock, known = hours.clock, hours.known
    month, day = clock.month[known] + 1, clock.day_of_month[known]
    tables = []
    for season in seasons:
        member = np.zeros((13, 32), bool)
        for m, d in season.days:
            member[m, d] = True
        chosen = pooled & member[month, day]
        years = np.array([len(np.unique(clock.year[known[chosen]]))])
        table = shares_by_cell(hours, chosen, np.zeros(len(known), int), 1, years)
        table.insert(0, "season", season.name)
        tables.append(table)
    return pd.concat(tables, ignore_index=True)
