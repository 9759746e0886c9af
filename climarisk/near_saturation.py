"""Hours near saturation: how often temperature and dew point lie close together."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import pandas as pd

from climarisk.climatology import (
    completeness,
    season_coverage,
    season_hours,
    window_cells,
    window_coverage,
)
from climarisk.clock import LocalClock
from climarisk.seasons import Season

#: Spreads of temperature and dew point at or below which an hour is near saturation, kelvins:
#: fog and low stratus become likely (common practice, no source).
SPREADS_K = {"share_1k": 1.0, "share_2_5k": 2.5}


def near_saturation(
    spread_k: np.ndarray, clock: LocalClock, inside: np.ndarray, seasons: Sequence[Season]
) -> tuple[pd.DataFrame, pd.DataFrame, pd.DataFrame]:
    """Shares of hours near saturation by month, month x hour and season.

    Parameters
    ----------
    spread_k : ndarray, shape (n_levels, n_hours)
        Temperature minus dew point at each level of the transfer error, equally likely; NaN
        where unknown, in all levels alike.
    clock : LocalClock
    inside : ndarray of bool, shape (n_hours,)
        The hours window; months and seasons keep to it, month x hour cells do not.
    seasons : sequence of Season

    Returns
    -------
    monthly, hourly, seasonal : DataFrame
        ``n_hours``, ``n_years``, ``coverage`` and the shares named in `SPREADS_K`, 0-1; NaN
        where no year counts.
    """
    complete = completeness(np.isfinite(spread_k[0]), clock)
    monthly = _shares(spread_k, complete.used & inside, clock.month, 12, clock)
    monthly.insert(0, "month", np.arange(1, 13))
    monthly["coverage"] = window_coverage(complete.counts, window_cells(inside, clock))
    hourly = _shares(spread_k, complete.used, clock.month_hour, 288, clock)
    hourly.insert(0, "month", np.repeat(np.arange(1, 13), 24))
    hourly.insert(1, "hour", np.tile(np.arange(24), 12))
    hourly["coverage"] = hourly["n_years"] / clock.n_years
    counting, one_cell = complete.counting(clock), np.zeros(len(clock.month), int)
    seasonal = []
    for season in seasons:
        member = inside & season_hours(clock, season)
        table = _shares(spread_k, complete.used & member, one_cell, 1, clock)
        table.insert(0, "season", season.name)
        table["coverage"] = season_coverage(counting, member, clock)
        seasonal.append(table)
    return monthly, hourly, pd.concat(seasonal, ignore_index=True)


def _shares(
    spread_k: np.ndarray, used: np.ndarray, cells: np.ndarray, n_cells: int, clock: LocalClock
) -> pd.DataFrame:
    """Counts and shares of the used hours of each cell."""
    cell, year = cells[used], clock.year[used]
    by_year = np.bincount(cell * clock.n_years + year, minlength=n_cells * clock.n_years)
    by_year = by_year.reshape(n_cells, -1)
    n_hours = by_year.sum(axis=1)
    table = pd.DataFrame({"n_hours": n_hours, "n_years": (by_year > 0).sum(axis=1)})
    some = np.where(n_hours > 0, n_hours, np.nan) * len(spread_k)
    # Tenths as reported: the way through vapour pressure and back leaves 1e-4 K of noise.
    chosen = np.round(spread_k[:, used], 3)
    for name, limit in SPREADS_K.items():
        near = np.array([np.bincount(cell, row <= limit, n_cells) for row in chosen])
        table[name] = near.sum(axis=0) / some
    return table
