"""The numbers of the report, taken out of the frames once: arrays by field, aircraft, period.

A period is a month (the first twelve) or a named season (those after them).
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from climarisk.outputs.texts import MONTH_NAMES, MONTHS
from climarisk.results import StudyResult

N_MONTHS = len(MONTHS)
PERCENTILES = ("p10", "p50", "p90")
_WEIGHTS = ("mass_kg", "useful_load_kg", "ci_low_kg", "ci_high_kg", "never_met", "n_years")
_RISK = ("shortfall", "ci_low", "ci_high", "outside_table", "usable_hours", "n_years", "coverage")


@dataclass(frozen=True)
class Figures:
    """The frames of a study as arrays.

    Parameters
    ----------
    seasons : tuple of str
    season_months : tuple of tuple of int
        Places (0-11) of the months that each season touches; none where they are not told.
    risk : dict of str to ndarray, shape (n_fields, n_aircraft, 12 + n_seasons)
        ``shortfall, ci_low, ci_high, outside_table, coverage`` (0-1), ``usable_hours``,
        ``n_years``.
    limiting : ndarray of str, same shape
        Empty where nothing limits.
    altitude, humidity : dict of str to ndarray, shape (n_fields, 12 + n_seasons)
        ``p10, p50, p90`` in ft and in per cent.
    saturation : dict of str to ndarray, same shape
        ``share_1k, share_2_5k``, 0-1.
    weights : dict of str to ndarray, shape (n_fields, n_aircraft, 12 + n_seasons)
        ``mass_kg, useful_load_kg, ci_low_kg, ci_high_kg, never_met`` (0-1), ``n_years``.
    outcome : ndarray of str, same shape
        What a mass stands for, as in the frames of the weights; empty without data.
    order : ndarray of int, shape (n_fields,)
        Fields, the one with the highest monthly share of any aircraft first.
    numbers : ndarray of int, shape (n_fields,)
        The number that each field carries in the report: its place in that order, from 1.
    """

    seasons: tuple[str, ...]
    season_months: tuple[tuple[int, ...], ...]
    risk: dict[str, np.ndarray]
    limiting: np.ndarray
    altitude: dict[str, np.ndarray]
    humidity: dict[str, np.ndarray]
    saturation: dict[str, np.ndarray]
    weights: dict[str, np.ndarray]
    outcome: np.ndarray
    order: np.ndarray
    numbers: np.ndarray

    @property
    def shares(self) -> np.ndarray:
        """Shortfall shares of the months; shape (n_fields, n_aircraft, 12)."""
        return self.risk["shortfall"][:, :, :N_MONTHS]

    @property
    def names(self) -> tuple[str, ...]:
        """Full names of the periods."""
        return (*MONTH_NAMES, *self.seasons)

    def lacks_month(self, values: np.ndarray, period: int) -> bool:
        """Whether a season has a figure although one of its months has none.

        Parameters
        ----------
        values : ndarray, shape (12 + n_seasons,)
        period : int
        """
        if period < N_MONTHS or np.isnan(values[period]):
            return False
        return bool(np.isnan(values[list(self.season_months[period - N_MONTHS])]).any())


def figures(result: StudyResult) -> Figures:
    """The numbers of a study, NaN where there are none."""
    seasons = tuple(
        dict.fromkeys(str(s) for s in result.risk_seasonal["season"])
        | dict.fromkeys(str(s) for s in result.distributions_seasonal["season"])
    )
    fields = ("field", [f.id for f in result.fields])
    aircraft = ("aircraft", [a.id for a in result.aircraft])

    def cube(monthly: pd.DataFrame, seasonal: pd.DataFrame, *axes: Any) -> _Cube:
        return _Cube(
            (monthly, [*axes, ("month", range(1, N_MONTHS + 1))]),
            (seasonal, [*axes, ("season", seasons)]),
        )

    def air(variable: str) -> dict[str, np.ndarray]:
        frames = (result.distributions_monthly, result.distributions_seasonal)
        read = cube(*(frame[frame["variable"] == variable] for frame in frames), fields)
        return {p: read.floats(p) for p in PERCENTILES}

    risk = cube(result.risk_monthly, result.risk_seasonal, fields, aircraft)
    near = cube(result.near_saturation_monthly, result.near_saturation_seasonal, fields)
    weights = cube(result.weights_monthly, result.weights_seasonal, fields, aircraft)
    numbers = {name: risk.floats(name) for name in _RISK}
    order = ranked(numbers["shortfall"][:, :, :N_MONTHS])
    return Figures(
        seasons,
        tuple(_months_of(name, result.settings["seasons"]) for name in seasons),
        numbers,
        risk.texts("limiting"),
        air("density_altitude"),
        air("relative_humidity"),
        {name: near.floats(name) for name in ("share_1k", "share_2_5k")},
        {name: weights.floats(name) for name in _WEIGHTS},
        weights.texts("outcome"),
        order,
        np.argsort(order) + 1,
    )


def _months_of(season: str, told: Mapping[str, Sequence[str]]) -> tuple[int, ...]:
    """Places of the months between the first and the last day of a season, as ``MM-DD``."""
    if season not in told:
        return ()
    (first, start), (last, end) = (map(int, day.split("-")) for day in told[season])
    span = (last - first) % N_MONTHS + 1
    if last == first and end < start:
        span = N_MONTHS  # round the year, back into the month it began in
    return tuple((first - 1 + n) % N_MONTHS for n in range(span))


def ranked(values: np.ndarray) -> np.ndarray:
    """Order of the fields by their highest value, the mean deciding ties; those without go last.

    Parameters
    ----------
    values : ndarray, shape (n_fields, ...)
    """
    flat = values.reshape(len(values), int(np.prod(values.shape[1:])))
    known = ~np.isnan(flat)
    highest = np.where(known, flat, -np.inf).max(axis=1, initial=-np.inf)
    mean = np.where(known, flat, 0.0).sum(axis=1) / np.maximum(known.sum(axis=1), 1)
    return np.lexsort((-mean, -highest))


def worst(values: np.ndarray) -> int | None:
    """Place of the highest value, the first of equal ones; None without any.

    Parameters
    ----------
    values : ndarray, shape (n,)
    """
    return None if np.isnan(values).all() else int(np.nanargmax(values))


class _Cube:
    """Values of two frames on common axes, the months before the seasons."""

    def __init__(self, *parts: tuple[pd.DataFrame, list[tuple[str, Sequence[Any]]]]) -> None:
        self._parts = [(frame, *_places(frame, axes)) for frame, axes in parts]
        self._shapes = [tuple(len(keys) for _, keys in axes) for _, axes in parts]

    def floats(self, column: str) -> np.ndarray:
        return self._filled(column, np.nan)

    def texts(self, column: str) -> np.ndarray:
        return self._filled(column, "")

    def _filled(self, column: str, empty: Any) -> np.ndarray:
        kind: type = object if isinstance(empty, str) else float
        made = []
        for (frame, known, places), shape in zip(self._parts, self._shapes, strict=True):
            values: np.ndarray = np.full(shape, empty, dtype=kind)
            values[places] = frame[column].to_numpy(dtype=kind, na_value=empty)[known]
            made.append(values)
        return np.concatenate(made, axis=-1)


def _places(
    frame: pd.DataFrame, axes: list[tuple[str, Sequence[Any]]]
) -> tuple[np.ndarray, tuple[np.ndarray, ...]]:
    """Which rows lie on the axes, and where."""
    found = np.array([pd.Index(list(keys)).get_indexer(frame[name]) for name, keys in axes])
    known = np.asarray((found >= 0).all(axis=0))
    return known, tuple(found[:, known])
