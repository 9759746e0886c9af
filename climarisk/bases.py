"""Fields side by side as bases for a fleet: usable hours a month, what else counts, differences."""

from __future__ import annotations

import calendar
import itertools
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property, lru_cache
from typing import Any

import numpy as np
import pandas as pd

from climarisk.icing import serious_in_cruise
from climarisk.results import BASE_DIFFERENCES_COLUMNS, BASES_COLUMNS
from climarisk.risk import (
    RESAMPLES,
    Hours,
    expanded_tail,
    level_weights,
    window_counts,
    year_weights,
)
from climarisk.rules import YEARS, interval_notes
from climarisk.study import Study

#: Up to so many ranked fields every pair is compared; beyond, each with the best and the next.
ALL_PAIRS = 20


@dataclass(frozen=True)
class UsableYears:
    """What the record of one aircraft at one field holds inside the hours window.

    Parameters
    ----------
    total : ndarray of int, shape (12, n_years)
        Hours of each month of each year that enter the figures.
    fallen : ndarray, shape (12, n_years, n_levels)
        Of those, hours that fall short at each level of the transfer error.
    persistence : float
        Share of the variance of the transfer error that stays with a place, 0-1.
    """

    total: np.ndarray
    fallen: np.ndarray
    persistence: float


def usable_years(hours: Hours) -> UsableYears:
    """What `base_tables` needs of one aircraft at one field.

    Parameters
    ----------
    hours : Hours
    """
    return UsableYears(*window_counts(hours), hours.persistence)


def base_tables(
    study: Study,
    frames: Mapping[str, pd.DataFrame],
    counts: Mapping[tuple[str, str], UsableYears],
) -> tuple[pd.DataFrame, pd.DataFrame]:
    """The fields of a study ranked for its fleet, and the differences between them.

    Parameters
    ----------
    study : Study
    frames : mapping of str to DataFrame
        ``risk_monthly``, ``risk_seasonal``, ``windows_monthly``, ``near_saturation_monthly`` and
        ``icing_monthly`` of `climarisk.results.StudyResult`, all fields and aircraft.
    counts : mapping of (str, str) to UsableYears
        By ids of field and aircraft.

    Returns
    -------
    bases : DataFrame
        Columns `climarisk.results.BASES_COLUMNS`: the fields by rank, those without a figure last
        and without a rank; of each field first the fleet (no aircraft), then every aircraft.
    differences : DataFrame
        Columns `climarisk.results.BASE_DIFFERENCES_COLUMNS`; ``first`` is the better one of the
        two for that aircraft or the fleet.  All pairs of at most `ALL_PAIRS` ranked fields, of
        more each field with the best and with the next in rank.

    Notes
    -----
    Usable hours a month: the mean over the twelve months of the hours that the hours window offers
    by the calendar times one less the shortfall share.  A field with a month whose offered hours
    have no figure has none itself; a month in which the window offers no hour has no usable one.
    The fleet's figure is the mean over its aeroplanes.

    Intervals come from resampling whole years, the same in every field and aircraft.  Those of a
    base contain the persistent part of the transfer error, those of a difference do not.  Each
    field is judged by its own years: where records differ, so does the weather compared.
    ``year_p10`` and ``year_p90`` are percentiles (Hyndman-Fan 8) over the single years that have
    figures in every month, at the mean calendar; empty below the years that an interval needs.

    ``worst_season`` has the fewest usable hours for its length, told for a twelfth of a year.
    ``days_with_run`` weights months by their days, the near-saturation shares by the offered
    hours, ``icing_serious`` by the daylight hours; each is empty where a month that weighs lacks.
    """
    sides = _Sides(study, frames, counts)
    return _bases(sides), _differences(sides)


@dataclass(frozen=True)
class _Sides:
    """The figures as arrays by field and column: the aircraft, and last the fleet."""

    study: Study
    frames: Mapping[str, pd.DataFrame]
    counts: Mapping[tuple[str, str], UsableYears]

    @property
    def fields(self) -> list[str]:
        return [f.id for f in self.study.fields]

    @property
    def aircraft(self) -> list[str]:
        return [a.id for a in self.study.aircraft]

    @cached_property
    def weights(self) -> np.ndarray:
        """The aircraft's parts of the fleet, shape (n_aircraft,)."""
        return fleet_weights(self.study.planning.fleet, self.aircraft)

    @cached_property
    def flown(self) -> np.ndarray:
        return np.flatnonzero(self.weights)

    def cube(self, frame: str, column: str, *names: str) -> np.ndarray:
        """A column by field and other keys, NaN where there is no row."""
        keys: dict[str, Sequence[Any]] = {
            "field": self.fields,
            "aircraft": self.aircraft,
            "month": list(range(1, 13)),
            "season": [s.name for s in self.study.seasons],
        }
        return _cube(self.frames[frame], column, {n: keys[n] for n in ("field", *names)})

    def with_fleet(self, values: np.ndarray) -> np.ndarray:
        """Values by field and aircraft (and more axes) with the fleet's mean as the last column."""
        flown = np.moveaxis(values[:, self.flown], 1, -1)
        fleet = (flown * self.weights[self.flown]).sum(axis=-1)
        return np.concatenate([values, fleet[:, None]], axis=1)

    def fewest(self, values: np.ndarray) -> np.ndarray:
        """Whole numbers by field and aircraft with the fleet's smallest as the last column."""
        return np.concatenate([values, values[:, self.flown].min(axis=1, keepdims=True)], axis=1)

    @cached_property
    def offered(self) -> np.ndarray:
        """Hours that the window offers in a year's month, shape (n_fields, 12)."""
        return self.cube("risk_monthly", "hours_offered", "aircraft", "month")[:, 0]

    @cached_property
    def monthly(self) -> np.ndarray:
        """Usable hours of each month, shape (n_fields, n_aircraft + 1, 12)."""
        share = self.cube("risk_monthly", "shortfall", "aircraft", "month")
        return self.with_fleet(_or_nothing(self.offered[:, None], 1.0 - share))

    @cached_property
    def usable(self) -> np.ndarray:
        """Usable hours a month, shape (n_fields, n_aircraft + 1)."""
        return self.monthly.mean(axis=2)

    @cached_property
    def n_years(self) -> np.ndarray:
        """The fewest years that enter any month, shape (n_fields, n_aircraft + 1)."""
        return self.fewest(self._each(_fewest_years, int))

    @cached_property
    def drawn(self) -> np.ndarray:
        """Usable hours in each resample of years, shape (n_fields, n_aircraft + 1, RESAMPLES)."""
        return self.with_fleet(self._each(_drawn, float, RESAMPLES))

    @cached_property
    def yearly(self) -> np.ndarray:
        """Usable hours a month in each year, NaN where a month lacks."""
        return self.with_fleet(self._each(_yearly, float, self.study_years))

    @property
    def study_years(self) -> int:
        return self.study.last_year - self.study.first_year + 1

    def drawn_with_error(self) -> np.ndarray:
        """As `drawn`, the persistent part of the transfer error drawn too."""
        return self.with_fleet(self._each(_drawn_with_error, float, RESAMPLES))

    def _each(self, function: Any, kind: type, *shape: int) -> np.ndarray:
        values: np.ndarray = np.empty((len(self.fields), len(self.aircraft), *shape), kind)
        for (f, field), (a, aircraft) in itertools.product(
            enumerate(self.fields), enumerate(self.aircraft)
        ):
            values[f, a] = function(self.counts[field, aircraft], self.offered[f])
        return values

    @cached_property
    def ranks(self) -> np.ndarray:
        """Rank of each field by the fleet's figure, ties alike; 0 without a figure."""
        fleet = self.usable[:, -1]
        ahead = (fleet[None, :] > fleet[:, None]).sum(axis=1)
        return np.where(np.isfinite(fleet), ahead + 1, 0)

    @cached_property
    def order(self) -> list[int]:
        """Places of the fields by rank, those without a figure last."""
        last = len(self.ranks) + 1
        return np.argsort(np.where(self.ranks > 0, self.ranks, last), kind="stable").tolist()


def fleet_weights(fleet: Mapping[str, float], aircraft: Sequence[str]) -> np.ndarray:
    """The part that each aircraft has in the fleet, shape (n_aircraft,), summing to 1.

    Parameters
    ----------
    fleet : mapping of str to float
        How many there are of each; empty: one of each.
    aircraft : sequence of str
    """
    numbers = np.array([fleet.get(name, 0.0 if fleet else 1.0) for name in aircraft], float)
    return numbers / numbers.sum()


def _cube(frame: pd.DataFrame, column: str, axes: Mapping[str, Sequence[Any]]) -> np.ndarray:
    """A column of a frame on axes of its key columns, NaN where there is no row."""
    found = [pd.Index(list(keys)).get_indexer(frame[name]) for name, keys in axes.items()]
    known = np.all([place >= 0 for place in found], axis=0)
    values = np.full([len(keys) for keys in axes.values()], np.nan)
    filled = frame[column].to_numpy(dtype=float, na_value=np.nan)
    values[tuple(place[known] for place in found)] = filled[known]
    return values


# Years and resamples of one aircraft at one field


def _fewest_years(counts: UsableYears, offered: np.ndarray) -> int:
    years = (counts.total > 0).sum(axis=1)[offered > 0]
    return int(years.min()) if len(years) else 0


def _yearly(counts: UsableYears, offered: np.ndarray) -> np.ndarray:
    """Usable hours a month of each single year."""
    some = np.where(counts.total > 0, counts.total, np.nan)
    usable = offered[:, None] * (1.0 - counts.fallen.mean(axis=2) / some)
    return np.where(offered[:, None] > 0, usable, 0.0).mean(axis=0)


def _drawn(counts: UsableYears, offered: np.ndarray) -> np.ndarray:
    """Usable hours a month in each resample of whole years."""
    return _resampled(counts.total, counts.fallen.mean(axis=2, keepdims=True), 0.0, offered)


def _drawn_with_error(counts: UsableYears, offered: np.ndarray) -> np.ndarray:
    """Usable hours a month in each resample of whole years and of the persistent error."""
    return _resampled(counts.total, counts.fallen, counts.persistence, offered)


def _resampled(
    total: np.ndarray, fallen: np.ndarray, persistence: float, offered: np.ndarray
) -> np.ndarray:
    open_months = offered > 0
    years, both = _weights(total.shape[1], fallen.shape[2], persistence)
    hours = total[open_months] @ years.T
    short = fallen.reshape(len(fallen), -1)[open_months] @ both.T
    share = np.where(hours > 0, short / np.where(hours > 0, hours, 1.0), np.nan)
    return offered[open_months] @ (1.0 - share) / len(offered)


@lru_cache(maxsize=8)
def _weights(n_years: int, n_levels: int, persistence: float) -> tuple[np.ndarray, np.ndarray]:
    """How often each year, and each year at each level, counts in each resample."""
    years, levels = year_weights(n_years), level_weights(n_levels, persistence)
    return years, (years[:, :, None] * levels[:, None, :]).reshape(RESAMPLES, -1)


def _interval(drawn: np.ndarray, n_years: int, confidence: float) -> tuple[float, float]:
    """Interval of a figure from its resamples; NaN below the years that it needs."""
    if n_years < YEARS.interval:
        return np.nan, np.nan
    tail = expanded_tail(n_years, confidence)
    # Resamples without any of a month's counting years know nothing of it.
    known = drawn[np.isfinite(drawn)]
    low, high = np.quantile(known, [tail, 1.0 - tail], method="median_unbiased")
    return float(low), float(high)


# Ranking


def _bases(sides: _Sides) -> pd.DataFrame:
    confidence, drawn = sides.study.confidence, sides.drawn_with_error()
    seasons, worst = [s.name for s in sides.study.seasons], _by_season(sides)
    columns, rows = _shares(sides), []
    for f in sides.order:
        for a in (-1, *range(len(sides.aircraft))):
            row: dict[str, Any] = dict.fromkeys(BASES_COLUMNS, np.nan)
            row |= {name: values[f, a] for name, values in columns.items()}
            row |= {
                "rank": int(sides.ranks[f]) or pd.NA,
                "field": sides.fields[f],
                "aircraft": "" if a < 0 else sides.aircraft[a],
                "worst_season": "",
                "n_years": int(sides.n_years[f, a]),
                "interval_note": _note(sides, f, a),
                "steep": "yes" if sides.study.fields[f].is_steep else "",
            }
            if np.isfinite(sides.usable[f, a]):
                n_years = row["n_years"]
                row["usable_hours_month"] = sides.usable[f, a]
                row["ci_low"], row["ci_high"] = _interval(drawn[f, a], n_years, confidence)
                row["year_p10"], row["year_p90"] = _spread(sides.yearly[f, a])
                if np.isfinite(worst[f, a]).all():
                    place = int(worst[f, a].argmin())
                    row["worst_season"] = seasons[place]
                    row["worst_season_hours_month"] = worst[f, a, place]
            rows.append(row)
    table = pd.DataFrame(rows, columns=BASES_COLUMNS)
    return table.astype({"rank": "Int64"})


def _note(sides: _Sides, field: int, column: int) -> str:
    """What to know of a row: months without figures, or few years."""
    gone = np.flatnonzero(~np.isfinite(sides.monthly[field, column])) + 1
    if len(gone) == 12:
        return "no figures in any month"
    if len(gone):
        return f"no figures in {'month' if len(gone) == 1 else 'months'} " + ", ".join(
            str(month) for month in gone
        )
    if not (sides.offered[field] > 0).any():
        return "the hours window offers no hour"
    return str(interval_notes(sides.n_years[field, column]))


def _spread(yearly: np.ndarray) -> tuple[float, float]:
    """The 10th and 90th percentile of single years; NaN below the years an interval needs."""
    whole = yearly[np.isfinite(yearly)]
    if len(whole) < YEARS.interval:
        return np.nan, np.nan
    low, high = np.quantile(whole, [0.1, 0.9], method="median_unbiased")
    return float(low), float(high)


def _by_season(sides: _Sides) -> np.ndarray:
    """Usable hours of each season for a twelfth of a year, (n_fields, n_aircraft + 1, n_seasons).

    NaN without a figure.
    """
    years = range(sides.study.first_year, sides.study.last_year + 1)
    whole = 365.0 + sum(map(calendar.isleap, years)) / len(years)
    leap_days = whole - 365.0
    lengths = [len(s.days) - ((2, 29) in s.days) * (1.0 - leap_days) for s in sides.study.seasons]
    offered = sides.cube("risk_seasonal", "hours_offered", "aircraft", "season")
    usable = sides.cube("risk_seasonal", "usable_hours", "aircraft", "season")
    hours = sides.with_fleet(np.where(offered == 0, 0.0, usable))
    return hours / np.array(lengths) * (whole / 12.0)


def _shares(sides: _Sides) -> dict[str, np.ndarray]:
    """Yearly shares beside the usable hours, each of shape (n_fields, n_aircraft + 1)."""
    years = range(sides.study.first_year, sides.study.last_year + 1)
    days = np.array([[calendar.monthrange(y, m + 1)[1] for m in range(12)] for y in years])
    runs = sides.cube("windows_monthly", "days_with_run", "aircraft", "month")
    columns = {"days_with_run": sides.with_fleet(_annual(runs, days.mean(axis=0)))}
    wide = (1, len(sides.aircraft) + 1)
    for name in ("share_1k", "share_2_5k"):
        near = sides.cube("near_saturation_monthly", name, "month")
        columns[name] = np.tile(_annual(near, sides.offered)[:, None], wide)
    icing = np.tile(_icing(sides)[:, None], wide)
    burns = np.array([a.carburettor for a in sides.study.aircraft], bool)
    icing[:, ~np.append(burns, burns[sides.flown].any())] = np.nan
    return columns | {"icing_serious": icing}


def _icing(sides: _Sides) -> np.ndarray:
    """Share of the daylight hours with serious carburettor icing, shape (n_fields,)."""
    frame = sides.frames["icing_monthly"]
    chosen = frame[frame["band"].isin(serious_in_cruise(sides.study.planning.carburettor_icing))]
    summed = chosen.groupby(["field", "month"], sort=False)["share"].sum(min_count=1).reset_index()
    axes: dict[str, Sequence[Any]] = {"field": sides.fields, "month": list(range(1, 13))}
    light = sides.cube("windows_monthly", "daylight_hours", "aircraft", "month")[:, 0]
    return _annual(_cube(summed, "share", axes), light)


def _annual(share: np.ndarray, weight: np.ndarray) -> np.ndarray:
    """Mean over the twelve months by weight; NaN where a month that weighs has no share."""
    weight = np.broadcast_to(weight, share.shape)
    total = weight.sum(axis=-1)
    return _or_nothing(weight, share).sum(axis=-1) / np.where(total > 0, total, np.nan)


def _or_nothing(hours: np.ndarray, share: np.ndarray) -> np.ndarray:
    """A share of hours in hours; of no hour it is none, whether the share is known or not."""
    return np.where(hours == 0, 0.0, hours * share)


# Differences


def _differences(sides: _Sides) -> pd.DataFrame:
    ranked = [f for f in sides.order if sides.ranks[f] > 0]
    if len(ranked) <= ALL_PAIRS:
        pairs = list(itertools.combinations(ranked, 2))
    else:
        best = [(ranked[0], other) for other in ranked[1:]]
        pairs = sorted({*best, *itertools.pairwise(ranked)}, key=_place_in(ranked))
    rows = [
        _difference(sides, one, other, column)
        for column in (-1, *range(len(sides.aircraft)))
        for one, other in pairs
        if np.isfinite(sides.usable[[one, other], column]).all()
    ]
    return pd.DataFrame(rows, columns=BASE_DIFFERENCES_COLUMNS)


def _place_in(ranked: Sequence[int]) -> Any:
    place = {field: n for n, field in enumerate(ranked)}
    return lambda pair: (place[pair[0]], place[pair[1]])


def _difference(sides: _Sides, one: int, other: int, column: int) -> dict[str, Any]:
    """The better of two fields against the other one; the first in rank where they are alike."""
    usable = sides.usable[:, column]
    first, second = (other, one) if usable[other] > usable[one] else (one, other)
    n_years = sides.n_years[[first, second], column].min()
    drawn = sides.drawn[first, column] - sides.drawn[second, column]
    low, high = _interval(drawn, int(n_years), sides.study.confidence)
    return {
        "first": sides.fields[first],
        "second": sides.fields[second],
        "aircraft": "" if column < 0 else sides.aircraft[column],
        "difference_hours_month": usable[first] - usable[second],
        "ci_low": low,
        "ci_high": high,
        "interval_note": str(interval_notes(n_years)),
    }
