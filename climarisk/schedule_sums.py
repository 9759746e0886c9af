"""The flights of a field added up: date by date, year by year and resample by resample."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
import pandas as pd

from climarisk.flights import Flight
from climarisk.occasions import StandardHours, Windows, date_array
from climarisk.risk import RESAMPLES, expanded_tail, level_weights, year_weights
from climarisk.rules import YEARS
from climarisk.scene import Scene

#: Flights resampled at a time.
_BATCH = 128


@dataclass(frozen=True)
class FlightScores:
    """What the flights at one field come to.

    Parameters
    ----------
    field : str
    flights : DataFrame
        Columns `SCHEDULE_FLIGHTS_COLUMNS`, a row for each flight.
    planned, unknown : ndarray, shape (1 + n_seasons,)
        Flights planned, and those without figures: of the whole schedule, then of each season
        of the study.
    affected : ndarray, shape (1 + n_seasons,)
        Flights with figures that are expected to fall short.
    drawn : ndarray, shape (1 + n_seasons, RESAMPLES)
        The same in each resample of years and of the persistent transfer error.
    of_year, hours_of_year : ndarray, shape (1 + n_seasons, n_years)
        What each year of the record adds to `affected`, and to the flights with figures: every
        date's hours of all years together are one flight.
    with_year : ndarray, shape (1 + n_seasons, n_years)
        Flights with figures, each times the share of its window whose cells count in the year.
    days : DataFrame
        ``date`` (datetime64), ``flights``, ``unknown_flights``, ``affected``.
    """

    field: str
    flights: pd.DataFrame
    planned: np.ndarray
    unknown: np.ndarray
    affected: np.ndarray
    drawn: np.ndarray
    of_year: np.ndarray
    hours_of_year: np.ndarray
    with_year: np.ndarray
    days: pd.DataFrame


@dataclass(frozen=True)
class Occasion:
    """The same hours on some dates, with what stands for them.

    Parameters
    ----------
    when : StandardHours
    windows : Windows
    members : ndarray, shape (1 + n_seasons, n_dates)
        1 for the dates of the whole schedule (all) and of each season, else 0.
    """

    when: StandardHours
    windows: Windows
    members: np.ndarray

    @cached_property
    def known(self) -> np.ndarray:
        """Dates with figures, shape (n_dates,)."""
        return self.windows.of_date > 0

    @cached_property
    def scaled(self) -> np.ndarray:
        """Factors on the counts of each date by which all dates count the same."""
        return self.members * self.windows.per_hour

    @cached_property
    def total(self) -> np.ndarray:
        """Scaled hours by season and year."""
        return self.scaled @ self.windows.total

    @cached_property
    def n_years(self) -> int:
        """Years that take part in the figures of a date, on average, rounded down.

        In an archive whose months come from different years that is one or two, however many
        years the dates of a long season touch.
        """
        years = (self.windows.total > 0).sum(axis=1)[self.known]
        return int(years.sum()) // len(years) if len(years) else 0

    @cached_property
    def cache(self) -> dict:
        """Air, shortfalls and masses of these hours, made when they are asked for."""
        return {}


class Tally:
    """Adds up the flights of a field, resample by resample and year by year."""

    def __init__(self, scene: Scene) -> None:
        self.confidence = scene.study.confidence
        n_seasons, n_years = 1 + len(scene.study.seasons), scene.clock.n_years
        self.n_levels = max(len(scene.shifts), 1)
        self.years = year_weights(n_years)
        levels = level_weights(self.n_levels, scene.error.place_share)
        self.both = (self.years[:, :, None] * levels[:, None, :]).reshape(RESAMPLES, -1)
        self.planned, self.unknown, self.affected = np.zeros((3, n_seasons))
        self.drawn = np.zeros((n_seasons, RESAMPLES))
        self.of_year, self.hours_of_year, self.with_year = np.zeros((3, n_seasons, n_years))
        self._waiting: list[tuple] = []
        self._bounds: list[np.ndarray] = []
        self._days: list[tuple] = []

    def add(self, flight: Flight, occasion: Occasion, counts: np.ndarray) -> None:
        """Add a flight with its counts by date, year and level."""
        members, known = occasion.members, occasion.known
        self.planned += members.sum(axis=1) * flight.repeats
        self.unknown += members @ ~known * flight.repeats
        fallen = occasion.scaled @ counts.reshape(len(counts), -1)
        fallen = fallen.reshape(*occasion.total.shape, self.n_levels)
        flights = members @ known * float(flight.repeats)
        self.of_year += fallen.mean(axis=2) * flight.repeats
        self.hours_of_year += occasion.total * flight.repeats
        self.with_year += members @ occasion.windows.counting * flight.repeats
        self._waiting.append((fallen, occasion.total, flights, occasion.n_years))
        if len(self._waiting) >= _BATCH:
            self._draw()
        by_date = counts.sum(axis=(1, 2)) * occasion.windows.per_hour / self.n_levels
        dates = date_array(flight.dates)
        self._days.append((dates, np.full(len(dates), flight.repeats), known, by_date))

    def _draw(self) -> None:
        """Resample the flights that wait."""
        if not self._waiting:
            return
        fallen, total, flights = (np.array([w[i] for w in self._waiting]) for i in range(3))
        n_years = np.array([w[3] for w in self._waiting])
        # Where only their sum counts, flights of the same dates and hours are resampled as one.
        groups = {id(w[1]): place for place, w in reversed(list(enumerate(self._waiting)))}
        first, group = np.unique([groups[id(w[1])] for w in self._waiting], return_inverse=True)
        self._waiting = []
        some = total > 0
        for s in range(total.shape[1]):
            weighted = np.zeros((len(first), *fallen.shape[2:]))
            np.add.at(weighted, group, fallen[:, s] * flights[:, s, None, None])
            here = some[first, s].any(axis=1)
            drawn, pooled = self._shares(weighted[here], total[first[here], s])
            self.affected[s] += pooled.sum()
            # A resample that misses all the years of a flight says nothing of it.
            self.drawn[s] += np.where(np.isnan(drawn), pooled[:, None], drawn).sum(axis=0)
        bounds, here = np.full((2, len(total)), np.nan), some[:, 0].any(axis=1)
        drawn, _ = self._shares(fallen[here, 0], total[here, 0])
        bounds[:, here] = bounds_of(drawn, n_years[here], self.confidence)
        self._bounds.append(bounds)

    def _shares(self, fallen: np.ndarray, total: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Shares of some flights in each resample (NaN where it misses them), and pooled."""
        n = self.years @ total.T
        short = self.both @ fallen.reshape(len(fallen), self.both.shape[1]).T
        drawn = np.where(n > 0, short / np.where(n > 0, n, 1.0), np.nan).T.copy()
        return drawn, fallen.mean(axis=2).sum(axis=1) / total.sum(axis=1)

    def intervals(self) -> np.ndarray:
        """Bounds of each flight's share in the order they were added, shape (2, n_flights)."""
        self._draw()
        return np.concatenate([np.empty((2, 0)), *self._bounds], axis=1)

    def scores(self, field: str, flights: pd.DataFrame) -> FlightScores:
        """What the flights come to."""
        return FlightScores(
            field,
            flights,
            self.planned,
            self.unknown,
            self.affected,
            self.drawn,
            self.of_year,
            self.hours_of_year,
            self.with_year,
            self._by_date(),
        )

    def _by_date(self) -> pd.DataFrame:
        if not self._days:
            return summed(np.array([], "datetime64[D]"), *np.zeros((3, 0)))
        dates, repeats, known, share = (np.concatenate(part) for part in zip(*self._days))  # noqa: B905
        return summed(dates, repeats, repeats * ~known, repeats * share)


def summed(
    dates: np.ndarray, flights: np.ndarray, unknown: np.ndarray, affected: np.ndarray
) -> pd.DataFrame:
    """Flights by date, each date once and in order."""
    date, index = np.unique(dates, return_inverse=True)
    sums = [np.bincount(index, part, len(date)) for part in (flights, unknown, affected)]
    return pd.DataFrame(
        {"date": date, "flights": sums[0], "unknown_flights": sums[1], "affected": sums[2]}
    )


def bounds_of(drawn: np.ndarray, n_years: np.ndarray, confidence: float) -> np.ndarray:
    """Intervals from resamples of whole years, as those of the shares of `climarisk.risk`.

    Parameters
    ----------
    drawn : ndarray, shape (n, RESAMPLES)
        NaN where a resample says nothing.
    n_years : ndarray of int, shape (n,)
    confidence : float

    Returns
    -------
    ndarray, shape (2, n)
        NaN below `rules.YEARS.interval` years.
    """
    bounds = np.full((2, len(drawn)), np.nan)
    for count in np.unique(n_years[n_years >= YEARS.interval]):
        tail = expanded_tail(int(count), confidence)
        at = n_years == count
        gaps = np.isnan(drawn).any(axis=1)
        # The slow form only where some resample misses all the years.
        for chosen, quantile in ((at & ~gaps, np.quantile), (at & gaps, np.nanquantile)):
            if chosen.any():
                bounds[:, chosen] = quantile(
                    drawn[chosen], [tail, 1.0 - tail], axis=1, method="median_unbiased"
                )
    return bounds
