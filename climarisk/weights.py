"""The weight that holds: the largest mass at which every check holds in a share of the hours."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property

import numpy as np
import pandas as pd

from climarisk.aircraft import AircraftProfile
from climarisk.climatology import (
    completeness,
    season_coverage,
    season_hours,
    window_cells,
    window_coverage,
)
from climarisk.clock import LocalClock
from climarisk.largest_mass import Operation, largest_mass
from climarisk.risk import RESAMPLES, expanded_tail, level_weights, year_weights
from climarisk.rules import YEARS, interval_notes
from climarisk.scene import Scene
from climarisk.seasons import Season

#: Step of the masses from which intervals are drawn.
BIN_KG = 1.0


def mass_levels(
    scene: Scene, profile: AircraftProfile, operation: Operation = "both"
) -> np.ndarray:
    """The largest mass of each known hour at each level of the error, equally likely.

    Parameters
    ----------
    scene : Scene
    profile : AircraftProfile
    operation : {"both", "takeoff", "landing"}

    Returns
    -------
    ndarray, shape (n_levels, n_known)
        As `largest_mass`; one level where every hour was measured at the field.
    """
    central = largest_mass(profile, scene.field, scene.central_air, operation)
    levels = np.tile(central, (max(len(scene.level_airs), 1), 1))
    for level, air in zip(levels, scene.level_airs, strict=False):
        level[scene.carried] = largest_mass(profile, scene.field, air, operation)
    return levels


@dataclass(frozen=True)
class MassHours:
    """The largest masses of one aircraft at one field that enter the weight that holds.

    Parameters
    ----------
    clock : LocalClock
    known : ndarray of int, shape (n_known,)
        Places on the grid of the hours with a value.
    masses : ndarray, shape (n_levels, n_known)
        As `mass_levels` returns them.
    inside : ndarray of bool, shape (n_hours,)
        The hours window on the grid.
    confidence : float
    persistence : float
        Share of the variance of the transfer error that stays with a place, 0-1.
    """

    clock: LocalClock
    known: np.ndarray
    masses: np.ndarray
    inside: np.ndarray
    confidence: float
    persistence: float = 0.0


def weighed(scene: Scene, profile: AircraftProfile, operation: Operation = "both") -> MassHours:
    """The largest masses of one aircraft at a field, at every level of the error."""
    return MassHours(
        scene.clock,
        scene.known,
        mass_levels(scene, profile, operation),
        scene.inside,
        scene.study.confidence,
        scene.error.place_share,
    )


def holding_mass(masses: np.ndarray, holds_in: float) -> float:
    """The largest mass that holds in at least a share of the hours.

    Parameters
    ----------
    masses : ndarray
        Largest mass of each hour, -inf where none; any shape, no NaN.
    holds_in : float
        Above 0, up to 1.

    Returns
    -------
    float
        kg; the k-th largest of the N masses with k the least whole number not below
        ``holds_in * N``.  -inf if it cannot be met at any tabulated mass, NaN without hours.
    """
    values = masses.reshape(-1)
    if not len(values):
        return float("nan")
    # As the decimal fraction that was written, so that 0.07 of 100 hours are 7 and not 8.
    share = Fraction(holds_in).limit_denominator(1_000_000)
    k = max(-(-share.numerator * len(values) // share.denominator), 1)
    return float(np.partition(values, len(values) - k)[len(values) - k])


def weight_tables(
    hours: MassHours, profile: AircraftProfile, seasons: Sequence[Season], holds_in: float = 0.90
) -> tuple[pd.DataFrame, pd.DataFrame, pd.DataFrame]:
    """Weight that holds by month (hours window), month x hour (all hours), season (hours window).

    Parameters
    ----------
    hours : MassHours
    profile : AircraftProfile
    seasons : sequence of Season
    holds_in : float
        Share of the hours in which every check holds, above 0, up to 1.

    Returns
    -------
    monthly, hourly, seasonal : DataFrame
        12, 288 and ``len(seasons)`` rows; ``n_hours``, ``n_years``, ``coverage``, ``holds_in``,
        ``mass_kg``, ``useful_load_kg`` (mass less empty mass), ``outcome`` (``"mass"``,
        ``"maximum mass"``, ``"cannot be met"``, empty without data) and ``never_met`` (share of
        the hours in which no tabulated mass holds); monthly and seasonal also ``ci_low_kg``,
        ``ci_high_kg`` and ``interval_note``.

    Notes
    -----
    The mass is `holding_mass` of the hours at all levels of the transfer error.  The interval
    is that of `climarisk.risk`: whole years and the persistent part of the error resampled
    2,000 times, each resample's mass found to within a bin of 1 kg; the lower bound is the
    smallest mass that occurs in its bin and the upper one the largest, so the bins never make
    the interval narrower.  A bound that cannot be met at any tabulated mass is NaN.
    """
    clock, known, inside = hours.clock, hours.known, hours.inside
    on_grid = np.zeros(len(clock.hour), bool)
    on_grid[known] = True
    complete = completeness(on_grid, clock)
    cells = _Cells(hours, profile, holds_in)
    hourly = cells.table(complete.used, clock.month_hour, 288, with_interval=False)
    hourly.insert(0, "month", np.repeat(np.arange(1, 13), 24))
    hourly.insert(1, "hour", np.tile(np.arange(24), 12))
    hourly["coverage"] = hourly["n_years"] / clock.n_years
    monthly = cells.table(complete.used & inside, clock.month, 12)
    monthly.insert(0, "month", np.arange(1, 13))
    monthly["coverage"] = window_coverage(complete.counts, window_cells(inside, clock))
    counting, one_cell = complete.counting(clock), np.zeros(len(clock.hour), int)
    seasonal = []
    for season in seasons:
        member = inside & season_hours(clock, season)
        table = cells.table(complete.used & member, one_cell, 1)
        table.insert(0, "season", season.name)
        table["coverage"] = season_coverage(counting, member, clock)
        seasonal.append(table)
    return monthly, hourly, pd.concat(seasonal, ignore_index=True)


@dataclass(frozen=True)
class _Cells:
    """Makes the rows of the weight that holds from the masses of the hours."""

    hours: MassHours
    profile: AircraftProfile
    holds_in: float

    @cached_property
    def weights(self) -> np.ndarray:
        """How much each year and level counts in each resample, (`RESAMPLES`, years x levels)."""
        years = year_weights(self.hours.clock.n_years)
        levels = level_weights(len(self.hours.masses), self.hours.persistence)
        return (years[:, :, None] * levels[:, None, :]).reshape(RESAMPLES, -1)

    def table(
        self, used: np.ndarray, cells: np.ndarray, n_cells: int, with_interval: bool = True
    ) -> pd.DataFrame:
        """The rows of some cells; `used` and `cells` are on the grid."""
        hours, clock = self.hours, self.hours.clock
        places = np.flatnonzero(used[hours.known])
        cell = cells[hours.known[places]]
        places = places[np.argsort(cell.astype(np.int16), kind="stable")]
        masses, year = hours.masses[:, places], clock.year[hours.known[places]]
        n_hours = np.bincount(cell, minlength=n_cells)
        edges = np.concatenate(([0], np.cumsum(n_hours)))
        index = np.repeat(np.arange(n_cells), n_hours) * clock.n_years + year
        by_year = np.bincount(index, minlength=n_cells * clock.n_years).reshape(n_cells, -1)
        n_years = (by_year > 0).sum(axis=1)
        mass, never = np.full(n_cells, np.nan), np.full(n_cells, np.nan)
        bounds = np.full((n_cells, 2), np.nan)
        for i in np.flatnonzero(n_hours):
            part = slice(edges[i], edges[i + 1])
            mass[i] = holding_mass(masses[:, part], self.holds_in)
            never[i] = np.mean(masses[:, part] == -np.inf)
            if with_interval and n_years[i] >= YEARS.interval:
                bounds[i] = self._interval(masses[:, part], year[part], int(n_years[i]))
        table = pd.DataFrame({"n_hours": n_hours, "n_years": n_years, "coverage": np.nan})
        table["holds_in"] = self.holds_in
        table["mass_kg"] = np.where(np.isneginf(mass), np.nan, mass)
        table["useful_load_kg"] = table["mass_kg"] - self.profile.empty_kg
        table["outcome"] = _outcomes(mass, self.profile.maximum_kg)
        table["never_met"] = never
        if with_interval:
            table["ci_low_kg"], table["ci_high_kg"] = np.where(
                np.isneginf(bounds), np.nan, bounds
            ).T
            table["interval_note"] = _notes(n_years, bounds)
        return table

    def _interval(self, masses: np.ndarray, year: np.ndarray, n_years: int) -> tuple[float, float]:
        """Interval of one cell's mass; -inf for a bound that cannot be met."""
        n_levels, n_columns = len(masses), self.hours.clock.n_years * len(masses)
        met = masses > -np.inf
        if not met.any():
            return -np.inf, -np.inf
        first = np.floor(masses[met].min() / BIN_KG)
        # Bin 0 holds the hours in which no tabulated mass will do.
        bins = np.where(met, np.floor(masses / BIN_KG) - first + 1, 0).astype(int)
        column = year[None, :] * n_levels + np.arange(n_levels)[:, None]
        count = np.bincount(
            (bins * n_columns + column).reshape(-1), minlength=(bins.max() + 1) * n_columns
        ).reshape(-1, n_columns)
        at_least = np.cumsum(count[::-1], axis=0)[::-1].astype(float)
        drawn = np.sort(self._drawn(at_least))
        last, tail = len(drawn) - 1, expanded_tail(n_years, self.hours.confidence)
        low = drawn[int(np.floor(tail * last))]
        high = drawn[int(np.ceil((1.0 - tail) * last))]
        return float(masses[bins == low].min()), float(masses[bins == high].max())

    def _drawn(self, at_least: np.ndarray) -> np.ndarray:
        """The bin of each resample's mass; resamples that miss all the hours are left out.

        Parameters
        ----------
        at_least : ndarray, shape (n_bins, n_years * n_levels)
            Hours of each year and level whose mass lies in a bin or above it.
        """
        total = self.weights @ at_least[0]
        weights, total = self.weights[total > 0], total[total > 0]
        # The weights of the levels are no whole numbers: their sums may miss a tie by a hair.
        needed = self.holds_in * total * (1.0 - 1e-9)
        low = np.zeros(len(total), int)
        beyond = np.full(len(total), len(at_least))
        while (beyond - low > 1).any():
            middle = (low + beyond) // 2
            enough = np.einsum("ij,ij->i", weights, at_least[middle]) >= needed
            low, beyond = np.where(enough, middle, low), np.where(enough, beyond, middle)
        return low


def _outcomes(mass_kg: np.ndarray, maximum_kg: float) -> np.ndarray:
    """What the mass of each cell stands for; empty without data."""
    words = np.where(mass_kg == maximum_kg, "maximum mass", "mass")
    words = np.where(np.isneginf(mass_kg), "cannot be met", words)
    return np.where(np.isnan(mass_kg), "", words).astype(object)


def _notes(n_years: np.ndarray, bounds: np.ndarray) -> np.ndarray:
    """The notes of the intervals, and which bounds cannot be met."""
    never = np.isneginf(bounds)
    words = np.where(never[:, 0], "the lower end cannot be met at any tabulated mass", "")
    both = "both ends of the interval cannot be met at any tabulated mass"
    words = np.where(never.all(axis=1), both, words)
    notes = zip(interval_notes(n_years), words, strict=True)
    return np.array(["; ".join(filter(None, pair)) for pair in notes], dtype=object)
