"""Flights of a schedule as a file gives them."""

from __future__ import annotations

import datetime as dt
import re
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Annotated, Literal

from annotated_types import Ge, Gt, Le
from pydantic import Field as Key

from climarisk.aircraft import AircraftProfile
from climarisk.fields import Field
from climarisk.inputs import Label, Row, Text, nearest, read_table, validate
from climarisk.seasons import Season

Operation = Literal["takeoff", "landing", "both"]
WEEKDAYS = ("Mon", "Tue", "Wed", "Thu", "Fri", "Sat", "Sun")
#: Rows of a file, dates of a row, and dates of all rows together that are read at most.
MOST_ROWS, MOST_DATES, MOST_DATES_OF_ALL = 100_000, 5000, 2_000_000
#: Years whose calendar and time zones are known well enough to plan in.
_YEARS = range(1800, 2201)
#: Problems told one by one; of the rest the number is told.
_MOST_TOLD = 200

_ISO = re.compile(r"[0-9]{4}-[0-9]{2}-[0-9]{2}")
_CLOCK = re.compile(r"([0-9]{1,2}):([0-9]{2})")


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


class _FlightRow(Row):
    flight: Label
    field: Text
    aircraft: Text
    operation: Operation
    time: Text
    dates: str | None = None
    season: Text | None = None
    weekdays: Text | None = None
    mass_kg: Annotated[float, Gt(0)] | None = None
    repeats: Annotated[int, Ge(1), Le(1000)] = Key(default=1)


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
    book = _Book(path, {f.id: f for f in fields}, aircraft, seasons, year)
    flights: list[Flight] = []
    lines: dict[str, int] = {}
    n_dates = 0
    for number, row in rows:
        where = f"{path}, line {number}"
        given = {name: cell for name, cell in row.items() if cell is not None}
        checked = validate(_FlightRow, given, where, problems)
        if checked is None:
            continue
        if checked.flight in lines:
            problems.append(
                f"{where}: the flight {checked.flight!r} stands in line {lines[checked.flight]} "
                "too; give each row its own."
            )
        lines.setdefault(checked.flight, number)
        flight = _flight(checked, book, where, problems)
        if flight is not None:
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
    """What a row is read against; dates already worked out are kept."""

    path: Path
    fields: Mapping[str, Field]
    aircraft: Mapping[str, AircraftProfile]
    seasons: Mapping[str, Season]
    year: int
    known: dict[tuple[str | None, ...], tuple[dt.date, ...] | str] = field(default_factory=dict)

    def dates(self, row: _FlightRow) -> tuple[dt.date, ...]:
        """The dates of a row.

        Raises
        ------
        ValueError
            They cannot be told; the reason is a sentence.
        """
        key = (row.dates, row.season, row.weekdays)
        if key not in self.known:
            try:
                self.known[key] = _dates(row, self.seasons, self.year)
            except ValueError as error:
                self.known[key] = str(error)
        found = self.known[key]
        if isinstance(found, str):
            raise ValueError(found)
        return found


def _flight(row: _FlightRow, book: _Book, where: str, problems: list[str]) -> Flight | None:
    """The flight of a row, or None with the problems appended."""
    before = len(problems)
    if row.field not in book.fields:
        problems.append(
            f"{where}: {row.field!r} is no field of the study; {nearest(row.field, book.fields)}"
        )
    profile = book.aircraft.get(row.aircraft)
    if profile is None:
        problems.append(
            f"{where}: {row.aircraft!r} is no aircraft of the study; "
            f"{nearest(row.aircraft, book.aircraft)}"
        )
    elif row.mass_kg is not None and not profile.empty_kg < row.mass_kg <= profile.maximum_kg:
        problems.append(
            f"{where}: 'mass_kg' is {row.mass_kg:g}; for {profile.id!r} it must be above the empty "
            f"mass of {profile.empty_kg:g} kg and at most {profile.maximum_kg:g} kg."
        )
    time: dt.time | None = None
    dates: tuple[dt.date, ...] = ()
    try:
        time = _time(row.time)
    except ValueError as error:
        problems.append(f"{where}: {error}")
    try:
        dates = book.dates(row)
    except ValueError as error:
        problems.append(f"{where}: {error}")
    if len(problems) > before or time is None:
        return None
    return Flight(
        row.flight,
        row.field,
        row.aircraft,
        row.operation,
        dates,
        time,
        row.mass_kg,
        row.repeats,
        _when(row, book.year),
    )


def _when(row: _FlightRow, year: int) -> str:
    """The dates as the file gives them, a season with its year."""
    days = " ".join((row.dates or "").split()) if row.dates else f"{row.season} {year}"
    return f"{days}, {' '.join(row.weekdays.split())}" if row.weekdays else days


def _time(text: str) -> dt.time:
    found = _CLOCK.fullmatch(text)
    if found is None or int(found[1]) > 23 or int(found[2]) > 59:
        raise ValueError(
            f"'time' is {text[:40]!r}; give the local clock time as HH:MM, 00:00 to 23:59."
        )
    return dt.time(int(found[1]), int(found[2]))


def _dates(row: _FlightRow, seasons: Mapping[str, Season], year: int) -> tuple[dt.date, ...]:
    """The dates of a row, in order, each once."""
    if (row.dates is None) == (row.season is None):
        came = "neither is there" if row.dates is None else "both are there"
        raise ValueError(f"exactly one of 'dates' and 'season' must be filled in; {came}.")
    if row.dates is not None and "/" not in row.dates:
        if row.weekdays is not None:
            raise ValueError(
                "'weekdays' goes with a season or with an interval such as "
                "2027-06-15/2027-09-15; leave it empty beside single dates."
            )
        return _listed(row.dates.split())
    days = _weekdays(row.weekdays)
    span = (
        _interval(row.dates) if row.dates is not None else _season(str(row.season), seasons, year)
    )
    dates = tuple(date for date in span if date.weekday() in days)
    if not dates:
        raise ValueError(
            f"no date of {(row.dates or row.season)!r} is a {row.weekdays}; correct the weekdays "
            "or the dates."
        )
    return dates


def _listed(words: Sequence[str]) -> tuple[dt.date, ...]:
    if len(words) > MOST_DATES:
        raise ValueError(f"'dates' holds {len(words):,} dates; at most {MOST_DATES:,} are read.")
    dates = [_date(word) for word in words]
    for earlier, date in enumerate(dates):
        if date in dates[:earlier]:
            raise ValueError(
                f"'dates' holds {date} twice; give it once, and the number of flights in 'repeats'."
            )
    return tuple(sorted(dates))


def _date(word: str) -> dt.date:
    try:
        if _ISO.fullmatch(word) is None:
            raise ValueError
        date = dt.date.fromisoformat(word)
    except ValueError:
        raise ValueError(
            f"{word[:40]!r} is no date; give dates that exist as YYYY-MM-DD, separated by "
            "spaces, or an interval such as 2027-06-15/2027-09-15."
        ) from None
    if date.year not in _YEARS:
        raise ValueError(
            f"the date {word} is outside the years {_YEARS[0]} to {_YEARS[-1]}; correct it."
        )
    return date


def _interval(text: str) -> Iterable[dt.date]:
    ends = [part.strip() for part in text.split("/")]
    if len(ends) != 2:
        raise ValueError(
            f"'dates' is {text[:60]!r}; an interval is two dates, such as 2027-06-15/2027-09-15."
        )
    first, last = (_date(end) for end in ends)
    if last < first:
        raise ValueError(f"the interval {text[:60]!r} ends before it begins; swap its dates.")
    days = (last - first).days + 1
    if days > MOST_DATES:
        raise ValueError(
            f"the interval {text[:60]!r} has {days:,} days; at most {MOST_DATES:,} are read."
        )
    return (first + dt.timedelta(days=n) for n in range(days))


def _season(name: str, seasons: Mapping[str, Season], year: int) -> Iterable[dt.date]:
    """The days of a season in a calendar year, both ends of one that runs over New Year."""
    if name not in seasons:
        raise ValueError(f"{name!r} is no season of the study; {nearest(name, seasons)}")
    first = dt.date(year, 1, 1)
    whole = (dt.date(year, 12, 31) - first).days + 1
    dates = (first + dt.timedelta(days=n) for n in range(whole))
    return (date for date in dates if (date.month, date.day) in seasons[name].days)


def _weekdays(text: str | None) -> frozenset[int]:
    """Weekdays of a text such as ``Mon Wed Fri`` or ``Fri-Mon``, Monday 0; all of an empty one."""
    if text is None:
        return frozenset(range(7))
    days: set[int] = set()
    for word in text.replace(",", " ").split():
        first, *rest = (_weekday(part) for part in word.split("-"))
        if len(rest) > 1:
            raise ValueError(f"'weekdays' holds {word[:40]!r}; a range has two ends, as Mon-Fri.")
        last = rest[0] if rest else first
        days |= {(first + n) % 7 for n in range((last - first) % 7 + 1)}
    return frozenset(days)


def _weekday(word: str) -> int:
    for number, name in enumerate(WEEKDAYS):
        if word.casefold() == name.casefold():
            return number
    raise ValueError(f"'weekdays' holds {word[:40]!r}; {nearest(word.title(), WEEKDAYS)}")
