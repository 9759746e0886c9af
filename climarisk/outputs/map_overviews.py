"""The overviews of the map page: bases side by side with their differences, and the schedule."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

import numpy as np
import pandas as pd

from climarisk.outputs.map_arrays import cells, good_share_codes
from climarisk.outputs.packing import counts, feet, floats, packed, share_codes, words
from climarisk.outputs.texts import (
    NO_DATA,
    affected_text,
    flights_interval,
    flights_text,
    nearest,
    no_time_text,
    operation_text,
    outwards,
    told_apart,
)
from climarisk.results import StudyResult

#: The page draws so many of the flights and days.
MOST_FLIGHTS, MOST_DAYS = 200, 12
#: What a difference is besides its hours: told apart by its interval; next to nothing; fewer hours.
_APART, _TINY, _FEWER = 1, 2, 4

_Arrays = dict[str, list[str]]
_Rows = Callable[[pd.DataFrame], list[list[Any]]]


def field_ids(result: StudyResult) -> list[str]:
    """Ids of the fields in their order."""
    return [field.id for field in result.fields]


def _fleet_first(frame: pd.DataFrame) -> pd.DataFrame:
    """The frame with the fleet as an aircraft without a name."""
    return frame.assign(aircraft=frame["aircraft"].fillna("").astype(str))


def base_seasons(bases: pd.DataFrame) -> list[str]:
    """The different worst seasons of the bases."""
    return sorted({str(name) for name in bases["worst_season"].dropna()} - {""})


def bases_arrays(result: StudyResult, levels: np.ndarray) -> _Arrays:
    """The figures of each base for the fleet, the first aircraft, and for each aircraft.

    Parameters
    ----------
    result : StudyResult
    levels : ndarray
        As for `climarisk.outputs.map_arrays.arrays`.
    """
    if result.bases.empty:
        return {}
    who = ["", *(profile.id for profile in result.aircraft)]
    table = cells(_fleet_first(result.bases), {"field": field_ids(result), "aircraft": who})
    season = {name: number for number, name in enumerate(base_seasons(result.bases))}
    made = {"base_worst_season": packed(counts(table["worst_season"].map(season)))}
    made["base_rank"] = packed(words(table["rank"]))
    down = ("usable_hours_month", "ci_low", "year_p10", "year_p90", "worst_season_hours_month")
    for name in down:
        made[f"base_{name}"] = packed(words(table[name]))
    made["base_ci_high"] = packed(words(np.ceil(floats(table["ci_high"]))))
    made["base_days_with_run"] = packed(good_share_codes(table["days_with_run"]))
    for name in ("share_1k", "share_2_5k", "icing_serious"):
        made[f"base_{name}"] = packed(share_codes(table[name], levels))
    made["base_n_years"] = packed(counts(table["n_years"]))
    return made


def difference_pairs(result: StudyResult) -> list[tuple[int, int]]:
    """Pairs of bases whose difference was computed, as places of two fields, the lower one first.

    Parameters
    ----------
    result : StudyResult
    """
    place = {name: n for n, name in enumerate(field_ids(result))}
    ends = result.base_differences[["first", "second"]].itertuples(index=False)
    pairs = ((place[one], place[other]) for one, other in ends)
    return sorted({(min(pair), max(pair)) for pair in pairs})


def told_difference(hours: float, low: float, high: float) -> list[float]:
    """A difference and the ends of its interval as they are told, in tenths, and what it is.

    Parameters
    ----------
    hours, low, high : float

    Returns
    -------
    list of float
        Three numbers of tenths, NaN where there is none, and 1 where the interval before any
        rounding leaves zero out, plus 2 where a difference that is not nothing rounds to none.
    """
    told = [nearest(hours), np.nan, np.nan]
    apart = not np.isnan([low, high]).any() and told_apart(low, high)
    if not np.isnan([low, high]).any():
        told[1:] = outwards(low, high)
    tiny = hours != 0.0 and told[0] == 0.0
    return [*(round(value, 1) * 10.0 for value in told), _APART * apart + _TINY * tiny]


def difference_arrays(result: StudyResult) -> _Arrays:
    """What the first field of each pair has more for the fleet and for each aircraft."""
    pairs = {pair: n for n, pair in enumerate(difference_pairs(result))}
    place = {name: n for n, name in enumerate(field_ids(result))}
    who = {name: n for n, name in enumerate(["", *(a.id for a in result.aircraft)])}
    told = np.full((4, len(pairs), len(who)), np.nan)
    table = _fleet_first(result.base_differences)
    columns = ("first", "second", "aircraft", "difference_hours_month", "ci_low", "ci_high")
    for first, second, aircraft, *figures in zip(*(table[c] for c in columns), strict=True):
        one, other = place[first], place[second]
        mean, low, high, kind = told_difference(*(float(figure) for figure in figures))
        turned = one > other
        kind += _FEWER * ((figures[0] < 0.0) != turned)
        # Rounded as the frame has it, then turned: the same digits whichever comes first.
        row = (-mean, -high, -low, kind) if turned else (mean, low, high, kind)
        told[:, pairs[min(one, other), max(one, other)], who[aircraft]] = row
    *tenths, kinds = (pd.Series(part) for part in np.round(told).reshape(4, -1))
    names = ("difference", "difference_low", "difference_high")
    made = {name: packed(feet(part)) for name, part in zip(names, tenths, strict=True)}
    return made | {"difference_kind": packed(counts(kinds))}


# Schedule


def schedule_entry(result: StudyResult, rows: _Rows) -> dict[str, Any] | None:
    """The worst flights and days of the schedule, and its seasons; None without a schedule."""
    flights, seasons, days = (
        result.schedule_flights,
        result.schedule_seasons,
        result.schedule_days,
    )
    if flights is None or seasons is None or days is None:
        return None
    worst = flights.sort_values(["shortfall", "affected"], ascending=False, kind="stable")
    most_days = days.sort_values("affected", ascending=False, kind="stable").head(MOST_DAYS)
    tables = {
        "flights": _with_words(worst.head(MOST_FLIGHTS)).assign(
            operation=[operation_text(name) for name in worst["operation"].head(MOST_FLIGHTS)],
            told=[_affected(row) for row in worst.head(MOST_FLIGHTS).to_dict("records")],
            no_time=[no_time_text(note) for note in worst["note"].head(MOST_FLIGHTS)],
        ),
        "seasons": _with_words(seasons, told_ends="ci", told_years="year"),
        "days": _with_words(most_days),
    }
    return {
        "total": len(flights),
        "never": int((flights["never_met"] == "yes").sum()),
        "columns": {name: list(table.columns) for name, table in tables.items()},
        **{name: rows(table) for name, table in tables.items()},
        "textColumns": {
            name: [c for c in table if not pd.api.types.is_numeric_dtype(table[c])]
            for name, table in tables.items()
        },
    }


def _affected(row: Mapping[Any, Any]) -> str:
    return NO_DATA if pd.isna(row["affected"]) else affected_text(row)


def _with_words(table: pd.DataFrame, **ends: str) -> pd.DataFrame:
    """The table with its expected numbers of flights in words, as every output says them."""
    told = {"told": [flights_text(flights) for flights in table["affected"]]}
    for name, column in ends.items():
        pairs = zip(table[f"{column}_low"], table[f"{column}_high"], strict=True)
        told[name] = [flights_interval(low, high) for low, high in pairs]
    return table.assign(**told)
