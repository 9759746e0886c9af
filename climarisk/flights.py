"""Flights of a schedule as a file gives them."""

from __future__ import annotations

import datetime as dt
import math
import re
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Literal, cast, get_args

from climarisk.aircraft import AircraftProfile
from climarisk.fields import Field
from climarisk.inputs import Label, Row, nearest, read_table, repeated, validate
from climarisk.seasons import Season

Operation = Literal["takeoff", "landing", "both"]
WEEKDAYS = ("Mon", "Tue", "Wed", "Thu", "Fri", "Sat", "Sun")
#: Flights on one date that a row may hold.
MOST_REPEATS = 1000
#: Rows of a file, dates of a row, and dates of all rows together that are read at most.
MOST_ROWS, MOST_DATES, MOST_DATES_OF_ALL = 100_000, 5000, 2_000_000
#: Years whose calendar and time zones are known well enough to plan in.
_YEARS = range(1800, 2201)
#: Problems told one by one; of the rest the number is told.
_MOST_TOLD = 200

#: Words of one cell that are quoted in a problem; of the rest the number is told.
_MOST_QUOTED = 3

_ISO = re.compile(r"[0-9]{4}-[0-9]{2}-[0-9]{2}")
_SLASHED = re.compile(r"[0-9]{1,4}/[0-9]{1,2}(/[0-9]{1,4})?")
_CLOCK = re.compile(r"([0-9]{1,2}):([0-9]{2})")
#: A whole number, also as spreadsheets write it with a decimal point.
_WHOLE = re.compile(r"([0-9]{1,9})(\.0*)?")


@dataclass(frozen=True)
class Flight:
    """One row of a schedule: the same operation at the same clock time on some dates.

    Parameters
    ----------
    id : str
    field, aircraft : str
        Ids of the study.
    operation : {"takeoff", "landing", "both"}
    dates : tuple of date
        In order, each once.
    time : time
        Legal local clock time at the field.
    mass_kg : float or None
        None: the planning mass of the profile.
    repeats : int
        Flights on each date, 1 or more.
    when : str
        The dates as the file gives them.
    """

    id: str
    field: str
    aircraft: str
    operation: Operation
    dates: tuple[dt.date, ...]
    time: dt.time
    mass_kg: float | None
    repeats: int
    when: str


class _Named(Row):
    """The cell that stands in the tables as it is; all the others are read word by word."""

    flight: Label


_REQUIRED = ("flight", "field", "aircraft", "operation", "time")
_OPTIONAL = ("dates", "season", "weekdays", "mass_kg", "repeats")


def read_flights(
    path: Path,
    fields: Sequence[Field],
    aircraft: Mapping[str, AircraftProfile],
    seasons: Mapping[str, Season],
    year: int,
) -> tuple[list[Flight], list[str]]:
    """The flights of a schedule file, in its order, and the problems found.

    Parameters
    ----------
    path : Path
        A CSV file with the columns ``flight``, ``field``, ``aircraft``, ``operation``,
        ``time`` and, as needed, ``dates``, ``season``, ``weekdays``, ``mass_kg``, ``repeats``.
    fields : sequence of Field
    aircraft : mapping of str to AircraftProfile
        By id.
    seasons : mapping of str to Season
        By name.
    year : int
        The planning year: a season means its days in this calendar year.  A season that runs
        over New Year means both its ends in this one year, January to its last day and its
        first day to December.

    Raises
    ------
    InputError
        The file is absent or not text.
    """
    rows, problems = read_table(path, _REQUIRED, _OPTIONAL)
    if len(rows) > MOST_ROWS:
        return [], [
            f"{path}: the schedule has {len(rows):,} rows; at most {MOST_ROWS:,} are read. "
            "Split it, or give repeated flights as one row."
        ]
    book = _Book({f.id: f for f in fields}, aircraft, seasons, year)
    flights: list[Flight] = []
    lines: dict[str, int] = {}
    n_dates = 0
    for number, row in rows:
        where = f"{path}, line {number}"
        cells = {name: cell for name, cell in row.items() if cell is not None}
        before, name = len(problems), cells.get("flight", "")
        named = {"flight": name} if name else {}
        if validate(_Named, named, where, problems) is not None and name in lines:
            problems.append(
                f"{where}: the flight {name!r} stands in line {lines[name]} too; give each row "
                "its own."
            )
        lines.setdefault(name, number)
        flight, told = _flight(cells, book)
        problems += [f"{where}: {problem}" for problem in told]
        if flight is not None and len(problems) == before:
            flights.append(flight)
            n_dates += len(flight.dates)
    if n_dates > MOST_DATES_OF_ALL:
        problems.append(
            f"{path}: the rows have {n_dates:,} dates together; at most {MOST_DATES_OF_ALL:,} "
            "are read. Split the schedule, or use repeats."
        )
    return flights, _shortened(problems, path)


def _shortened(problems: list[str], path: Path) -> list[str]:
    more = len(problems) - _MOST_TOLD
    return problems if more <= 0 else [*problems[:_MOST_TOLD], f"{path}: {more:,} problems more."]


@dataclass
class _Book:
    """What a row is read against; dates and hints already worked out are kept."""

    fields: Mapping[str, Field]
    aircraft: Mapping[str, AircraftProfile]
    seasons: Mapping[str, Season]
    year: int
    known: dict[tuple[str | None, ...], tuple[tuple[dt.date, ...], list[str]]] = field(
        default_factory=dict
    )
    hints: dict[tuple[str, str], str] = field(default_factory=dict)

    def dates(self, cells: Mapping[str, str]) -> tuple[tuple[dt.date, ...], list[str]]:
        """The dates of a row, and every problem of them."""
        key = cells.get("dates"), cells.get("season"), cells.get("weekdays")
        if key not in self.known:
            told: list[str] = []
            self.known[key] = _dates(*key, self, told), told
        return self.known[key]

    def unknown(self, name: str, what: str, known: Iterable[str]) -> str:
        """What is wrong with a name that the study does not have."""
        if (name, what) not in self.hints:
            self.hints[name, what] = (
                f"{_quoted(name)} is no {what} of the study; {nearest(name[:80], known)}"
            )
        return self.hints[name, what]


def _quoted(text: str, most: int = 40) -> str:
    return repr(text if len(text) <= most else text[:most] + "...")


def _all_quoted(words: Sequence[str]) -> str:
    """Words of a cell in quotes, of many the first and how many more."""
    told = [_quoted(word) for word in words[:_MOST_QUOTED]]
    if len(words) > _MOST_QUOTED:
        told.append(f"{len(words) - _MOST_QUOTED:,} more")
    return " and ".join([", ".join(told[:-1]), told[-1]] if len(told) > 1 else told)


def _flight(cells: Mapping[str, str], book: _Book) -> tuple[Flight | None, list[str]]:
    """The flight of a row, or None, and every problem of its cells but the name."""
    # The name has its own check, by which a row without one is told and left out.
    told = [f"{name!r} is missing; add it." for name in _REQUIRED[1:] if name not in cells]
    if "field" in cells and cells["field"] not in book.fields:
        told.append(book.unknown(cells["field"], "field", book.fields))
    profile = book.aircraft.get(cells.get("aircraft", ""))
    if "aircraft" in cells and profile is None:
        told.append(book.unknown(cells["aircraft"], "aircraft", book.aircraft))
    if "operation" in cells and cells["operation"] not in get_args(Operation):
        told.append(f"'operation' is {_quoted(cells['operation'])}; give takeoff, landing or both.")
    time = _time(cells["time"], told) if "time" in cells else None
    dates, of_dates = book.dates(cells)
    told += of_dates
    mass_kg = _mass_kg(cells["mass_kg"], profile, told) if "mass_kg" in cells else None
    repeats = _repeats(cells["repeats"], told) if "repeats" in cells else 1
    if told or time is None:
        return None, told
    return Flight(
        cells.get("flight", ""),
        cells["field"],
        cells["aircraft"],
        cast(Operation, cells["operation"]),
        dates,
        time,
        mass_kg,
        repeats,
        _when(cells, book.year),
    ), told


def _when(cells: Mapping[str, str], year: int) -> str:
    """The dates as the file gives them, a season with its year."""
    days = " ".join(cells["dates"].split()) if "dates" in cells else f"{cells['season']} {year}"
    return f"{days}, {' '.join(cells['weekdays'].split())}" if "weekdays" in cells else days


def _time(text: str, told: list[str]) -> dt.time | None:
    found = _CLOCK.fullmatch(text)
    if found is None or int(found[1]) > 23 or int(found[2]) > 59:
        told.append(
            f"'time' is {_quoted(text)}; give the local clock time as HH:MM, 00:00 to 23:59."
        )
        return None
    return dt.time(int(found[1]), int(found[2]))


def _mass_kg(text: str, profile: AircraftProfile | None, told: list[str]) -> float:
    """A mass that the aircraft can have; of an unknown aircraft any above 0."""
    try:
        mass = float(text) if text.isascii() and "_" not in text else math.nan
    except ValueError:
        mass = math.nan
    if not math.isfinite(mass) or (profile is None and mass <= 0.0):
        told.append(
            f"'mass_kg' is {_quoted(text)}; give a mass in kilograms above 0 as a plain number, "
            "such as 1050 or 612.5, or nothing for the planning mass."
        )
    elif profile is not None and not profile.empty_kg < mass <= profile.maximum_kg:
        told.append(
            f"'mass_kg' is {mass:g}; for {profile.id!r} it must be above the empty mass of "
            f"{profile.empty_kg:g} kg and at most {profile.maximum_kg:g} kg."
        )
    return mass


def _repeats(text: str, told: list[str]) -> int:
    found = _WHOLE.fullmatch(text)
    if found is None or not 1 <= int(found[1]) <= MOST_REPEATS:
        told.append(
            f"'repeats' is {_quoted(text)}; give a whole number of flights, 1 to "
            f"{MOST_REPEATS:,}, or nothing for one."
        )
        return 1
    return int(found[1])


def _dates(
    text: str | None, season: str | None, weekdays: str | None, book: _Book, told: list[str]
) -> tuple[dt.date, ...]:
    """The dates of a row, in order, each once; the problems of every cell are told."""
    before = len(told)
    if (text is None) == (season is None):
        came = "neither is there" if text is None else "both are there"
        told.append(f"exactly one of 'dates' and 'season' must be filled in; {came}.")
    span: Iterable[dt.date] = ()
    if text is not None:
        span = _interval(text, told) if "/" in text else _listed(text.split(), told)
    if season is not None:
        span = _season(season, book, told)
    if weekdays is None:
        return tuple(span)
    if text is not None and "/" not in text and season is None:
        told.append(
            "'weekdays' goes with a season or with an interval such as 2027-06-15/2027-09-15; "
            "leave it empty beside single dates."
        )
    days = _weekdays(weekdays, told)
    dates = tuple(date for date in span if date.weekday() in days)
    if not dates and len(told) == before:
        told.append(
            f"no date of {_quoted(str(text or season))} is a {weekdays[:40]}; correct the weekdays "
            "or the dates."
        )
    return dates


def _listed(words: Sequence[str], told: list[str]) -> list[dt.date]:
    if len(words) > MOST_DATES:
        told.append(f"'dates' holds {len(words):,} dates; at most {MOST_DATES:,} are read.")
        return []
    dates = _read_dates(words, told)
    twice = repeated(date.isoformat() for date in dates)
    if twice:
        more = f" and {len(twice) - 1:,} more" if len(twice) > 1 else ""
        told.append(
            f"'dates' holds {twice[0]}{more} twice; give each once, and the number of flights in "
            "'repeats'."
        )
    return sorted(dates)


def _read_dates(words: Sequence[str], told: list[str]) -> list[dt.date]:
    """The words that are dates; the others are told together."""
    dates: list[dt.date] = []
    far: list[dt.date] = []
    wrong: list[str] = []
    for word in words:
        try:
            if _ISO.fullmatch(word) is None:
                raise ValueError
            date = dt.date.fromisoformat(word)
        except ValueError:
            wrong.append(word)
            continue
        (dates if date.year in _YEARS else far).append(date)
    if wrong:
        are = "is no date" if len(wrong) == 1 else "are no dates"
        told.append(
            f"{_all_quoted(wrong)} {are}; give dates that exist as YYYY-MM-DD, separated by "
            "spaces, or an interval such as 2027-06-15/2027-09-15."
        )
    if far:
        told.append(
            f"{_all_quoted([str(date) for date in far])} in 'dates': outside the years "
            f"{_YEARS[0]} to {_YEARS[-1]}; correct this."
        )
    return dates


def _interval(text: str, told: list[str]) -> Iterable[dt.date]:
    if any(_SLASHED.fullmatch(word) for word in text.split()) or not _ISO.search(text):
        told.append(
            f"'dates' is {_quoted(text, 60)}; write the date as 2027-06-15, and an interval as "
            "2027-06-15/2027-09-15."
        )
        return ()
    ends = [part.strip() for part in text.split("/")]
    if len(ends) != 2 or not all(ends):
        told.append(
            f"'dates' is {_quoted(text, 60)}; an interval is two dates, such as "
            "2027-06-15/2027-09-15."
        )
        return ()
    dates = _read_dates(ends, told)
    if len(dates) != 2:
        return ()
    first, last = dates
    days = (last - first).days + 1
    if days < 1:
        told.append(f"the interval {_quoted(text)} ends before it begins; swap its dates.")
    if days > MOST_DATES:
        told.append(
            f"the interval {_quoted(text)} has {days:,} days; at most {MOST_DATES:,} are read."
        )
        return ()
    return (first + dt.timedelta(days=n) for n in range(days))


def _season(name: str, book: _Book, told: list[str]) -> Iterable[dt.date]:
    """The days of a season in the planning year, both ends of one that runs over New Year."""
    if name not in book.seasons:
        told.append(book.unknown(name, "season", book.seasons))
        return ()
    first = dt.date(book.year, 1, 1)
    whole = (dt.date(book.year, 12, 31) - first).days + 1
    dates = (first + dt.timedelta(days=n) for n in range(whole))
    return (date for date in dates if (date.month, date.day) in book.seasons[name].days)


def _weekdays(text: str, told: list[str]) -> frozenset[int]:
    """Weekdays of a text such as ``Mon Wed Fri`` or ``Fri-Mon``, Monday 0."""
    days: set[int] = set()
    numbers = {name.casefold(): number for number, name in enumerate(WEEKDAYS)}
    wrong: list[str] = []
    for word in text.replace(",", " ").split():
        parts = word.split("-")
        ends = [numbers[part.casefold()] for part in parts if part.casefold() in numbers]
        if len(parts) > 2:
            wrong.append(f"'weekdays' holds {_quoted(word)}; a range has two ends, as Mon-Fri.")
        elif len(ends) < len(parts):
            unknown = [part for part in parts if part.casefold() not in numbers]
            hints = (nearest(part[:80].title(), WEEKDAYS) for part in unknown)
            wrong += [
                f"'weekdays' holds {_quoted(part)}; {hint}"
                for part, hint in zip(unknown, hints, strict=True)
            ]
        else:
            days |= {(ends[0] + n) % 7 for n in range((ends[-1] - ends[0]) % 7 + 1)}
    told += wrong[:_MOST_QUOTED]
    if len(wrong) > _MOST_QUOTED:
        told.append(f"'weekdays' holds {len(wrong) - _MOST_QUOTED:,} wrong words more.")
    return frozenset(days)
