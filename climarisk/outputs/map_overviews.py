"""The overviews of the map page: bases side by side with their differences, and the schedule."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
import pandas as pd

from climarisk.outputs.map_arrays import cells
from climarisk.outputs.packing import counts, feet, floats, packed, share_codes, words
from climarisk.results import StudyResult

#: The page draws so many of the flights and days, and differences between so many pairs of bases.
MOST_FLIGHTS, MOST_DAYS, MOST_PAIRS = 200, 12, 1000
#: Takes back the error of a product of floats: 0.29 * 100 is below 29.
SLACK = 1e-9

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
    for name in ("days_with_run", "share_1k", "share_2_5k", "icing_serious"):
        made[f"base_{name}"] = packed(share_codes(table[name], levels))
    made["base_n_years"] = packed(counts(table["n_years"]))
    return made


def difference_pairs(result: StudyResult) -> tuple[list[tuple[int, int]], int]:
    """Pairs of bases told apart on the page, the lower place first, and how many there are.

    Parameters
    ----------
    result : StudyResult

    Returns
    -------
    pairs : list of (int, int)
        Places of two fields; at most `MOST_PAIRS`, those of the best ranks.
    n_pairs : int
    """
    rank = _fleet_first(result.bases).drop_duplicates("field").set_index("field")["rank"]
    place = {name: n for n, name in enumerate(field_ids(result))}
    worst = floats(rank).fillna(np.inf).to_dict()
    ends = result.base_differences[["first", "second"]].itertuples(index=False)
    worse: dict[tuple[int, int], float] = {}
    for first, second in ends:
        one, other = sorted((place[first], place[second]))
        worse[one, other] = max(worst.get(first, np.inf), worst.get(second, np.inf))
    best = sorted(worse, key=lambda pair: (worse[pair], pair))
    return best[:MOST_PAIRS], len(best)


def difference_arrays(result: StudyResult) -> _Arrays:
    """Tenths of hours a month that the first field of each pair has more, ends outwards."""
    pairs = {pair: n for n, pair in enumerate(difference_pairs(result)[0])}
    place = {name: n for n, name in enumerate(field_ids(result))}
    who = {name: n for n, name in enumerate(["", *(a.id for a in result.aircraft)])}
    tenths = np.full((3, len(pairs), len(who)), np.nan)
    table = _fleet_first(result.base_differences)
    columns = ("first", "second", "aircraft", "difference_hours_month", "ci_low", "ci_high")
    for first, second, aircraft, *figures in zip(*(table[c] for c in columns), strict=True):
        one, other = place[first], place[second]
        pair = pairs.get((min(one, other), max(one, other)))
        if pair is None:
            continue
        mean, low, high = np.array(figures, float) * 10.0
        turned = one > other
        row = (-mean, -high, -low) if turned else (mean, low, high)
        tenths[:, pair, who[aircraft]] = row
    rounded = np.round(tenths[0]), np.floor(tenths[1] + SLACK), np.ceil(tenths[2] - SLACK)
    names = ("difference", "difference_low", "difference_high")
    parts = zip(names, rounded, strict=True)
    return {name: packed(feet(pd.Series(part.reshape(-1)))) for name, part in parts}


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
    tables = {
        "flights": worst.head(MOST_FLIGHTS),
        "seasons": seasons,
        "days": days.sort_values("affected", ascending=False, kind="stable").head(MOST_DAYS),
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
