"""Seasons: named parts of the year."""

from __future__ import annotations

import datetime as dt
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from climarisk.inputs import repeated

#: Meteorological seasons, used where a study names none: month numbers.
DEFAULT_SEASONS: dict[str, tuple[int, ...]] = {
    "DJF": (12, 1, 2),
    "MAM": (3, 4, 5),
    "JJA": (6, 7, 8),
    "SON": (9, 10, 11),
}


@dataclass(frozen=True)
class Season:
    """A named part of the year.

    Parameters
    ----------
    name : str
    days : frozenset of (int, int)
        Month and day of each day in it; 29 February included where its neighbours are.
    """

    name: str
    days: frozenset[tuple[int, int]]


def read_seasons(named: dict[str, list[str]], path: Path, problems: list[str]) -> list[Season]:
    """The seasons a study names, or the meteorological ones; what is wrong goes to `problems`."""
    if not named:
        year = _days_of_year()
        return [
            Season(name, frozenset(day for day in year if day[0] in months))
            for name, months in DEFAULT_SEASONS.items()
        ]
    seasons = []
    for name, (first, last) in named.items():
        try:
            seasons.append(Season(name, _days_between(_month_day(first), _month_day(last))))
        except ValueError as error:
            problems.append(f"{path}: [seasons] {name!r}: {error}")
    return seasons


def same_season_names(content: dict[str, Any], path: Path) -> list[str]:
    """Problems with season names that differ in the spaces around them only."""
    names = content.get("seasons", {})
    if not isinstance(names, dict):
        return []
    return [
        f"{path}: [seasons] the name {twice!r} comes twice; rename one."
        for twice in repeated(str(name).strip() for name in names)
    ]


def _month_day(text: str) -> tuple[int, int]:
    try:
        month, day = (int(part) for part in text.split("-"))
        dt.date(2000, month, day)
    except ValueError:
        raise ValueError(f'{text!r} is no date; give month and day as "06-15".') from None
    return month, day


def _days_of_year() -> list[tuple[int, int]]:
    first = dt.date(2000, 1, 1)  # a leap year, so that 29 February is among them
    days = (first + dt.timedelta(days=i) for i in range(366))
    return [(d.month, d.day) for d in days]


def _days_between(first: tuple[int, int], last: tuple[int, int]) -> frozenset[tuple[int, int]]:
    """Days from `first` to `last`, both included, across New Year if `last` is earlier."""
    if first <= last:
        return frozenset(day for day in _days_of_year() if first <= day <= last)
    return frozenset(day for day in _days_of_year() if day >= first or day <= last)


def season_text(season: Season) -> list[str]:
    """First and last day of a season, as ``MM-DD``."""
    year = _days_of_year()
    inside = [day in season.days for day in year]
    starts = [i for i in range(366) if inside[i] and not inside[i - 1]]
    ends = [i for i in range(366) if inside[i] and not inside[(i + 1) % 366]]
    first, last = (starts[0], ends[0]) if starts else (0, 365)
    return [f"{m:02d}-{d:02d}" for m, d in (year[first], year[last])]
