"""A study as its files describe it, read and checked as a whole."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Annotated, Any, Literal

from annotated_types import Ge, Gt, Le, Len, Lt, MinLen
from pydantic import field_validator, model_validator

from climarisk.aircraft import AircraftProfile, read_aircraft
from climarisk.errors import InputError
from climarisk.fields import Field, read_fields, read_runways
from climarisk.flights import Flight, read_flights
from climarisk.inputs import Label, Name, Strict, load_toml, matching, nearest, repeated, validate
from climarisk.results import Tiles
from climarisk.seasons import Season, read_seasons, same_season_names, season_text
from climarisk.stations import Station, read_stations

_FIRST_YEAR, _LAST_YEAR = 1800, 2200
_Year = Annotated[int, Ge(_FIRST_YEAR), Le(_LAST_YEAR)]
#: Of a band: one in ten thousand is less than any record can tell apart.
_Edge = Annotated[float, Ge(0.0001), Lt(1)]


class _Period(Strict):
    first_year: _Year
    last_year: _Year

    @model_validator(mode="after")
    def _ordered(self) -> _Period:
        if self.last_year < self.first_year:
            raise ValueError(
                f"last_year {self.last_year} is before first_year {self.first_year}; swap them"
            )
        return self


class _Weather(Strict):
    source: Literal["files", "meteostat", "synthetic"] = "files"
    stations: Name | None = None
    radius_km: Annotated[float, Gt(0), Le(1000)] = 100.0
    seed: Annotated[int, Ge(0)] = 0


class _Hours(Strict):
    window: Any = "daylight"

    @field_validator("window")
    @classmethod
    def _known(cls, window: Any) -> str | tuple[int, int]:
        if window in ("daylight", "all"):
            return str(window)
        if isinstance(window, list) and len(window) == 2:
            first, last = window
            if all(type(h) is int and 0 <= h <= 23 for h in (first, last)):
                return first, last
        raise ValueError('allowed are "daylight", "all" or two hours 0-23 such as [6, 20]')


class _Risk(Strict):
    bands: Annotated[list[_Edge], Len(1, 8)] = [0.01, 0.05, 0.20]
    confidence: Annotated[float, Ge(0.5), Lt(1)] = 0.90
    humidity_in_tables: bool = True

    @field_validator("bands")
    @classmethod
    def _rising(cls, bands: list[float]) -> list[float]:
        if any(b <= a for a, b in zip(bands, bands[1:], strict=False)):
            raise ValueError("the band edges must rise")
        return bands


_HOST_WORD = r"[a-z0-9](?:[a-z0-9-]*[a-z0-9])?"
#: An https address of a plain host name; nothing in it can end a word of a security policy.
_TILE_ADDRESS = re.compile(
    rf"https://{_HOST_WORD}(?:\.{_HOST_WORD})*(?::(?P<port>[0-9]{{1,5}}))?/[a-z0-9._~%+=&?@:/-]*",
    re.ASCII | re.IGNORECASE,
)


class _Map(Strict):
    tiles: Name | None = None
    tiles_attribution: Name | None = None

    @field_validator("tiles")
    @classmethod
    def _address(cls, tiles: str | None) -> str | None:
        if tiles is None:
            return None
        plain = tiles
        for place in ("{z}", "{x}", "{y}"):
            if tiles.count(place) != 1:
                raise ValueError("must hold each of {z}, {x} and {y} once")
            plain = plain.replace(place, "~")  # no character of a host
        found = _TILE_ADDRESS.fullmatch(plain)
        if found is None or not 1 <= int(found["port"] or 443) <= 65535:
            raise ValueError(
                "must be an https address of one plain host, such as "
                '"https://tiles.example.org/{z}/{x}/{y}.png"'
            )
        return tiles

    @model_validator(mode="after")
    def _together(self) -> _Map:
        if (self.tiles is None) != (self.tiles_attribution is None):
            raise ValueError(
                "tiles and tiles_attribution, what the source asks to be shown, are given "
                "together or not at all; add the other or leave both out"
            )
        return self

    def source(self) -> Tiles | None:
        if self.tiles is None or self.tiles_attribution is None:
            return None
        return Tiles(self.tiles, self.tiles_attribution)


#: The planning year of a study that names none: the year after its record, but no year before
#: this one, so that clock times follow the rules of today.
FIRST_PLANNING_YEAR = 2027


class _Planning(Strict):
    holds_in: Annotated[float, Ge(0.5), Le(1)] = 0.90
    target: Annotated[float, Gt(0), Lt(1)] = 0.05
    consecutive_hours: Annotated[int, Ge(1), Le(24)] = 4
    carburettor_icing: Literal["chart", "physical"] = "chart"
    year: _Year | None = None


class _StudyFile(Strict):
    title: Name
    fields: Name
    runways: Name
    aircraft: Annotated[list[Name], MinLen(1)]
    schedule: Name | None = None
    period: _Period
    weather: _Weather = _Weather()
    hours: _Hours = _Hours()
    seasons: dict[Label, Annotated[list[str], Len(2, 2)]] = {}
    risk: _Risk = _Risk()
    planning: _Planning = _Planning()
    fleet: dict[str, Annotated[float, Ge(0), Le(10_000)]] = {}
    map: _Map = _Map()


#: No air is carried further in height, even where a field is pinned to a station.
_MOST_PINNED_M = 2000.0


@dataclass(frozen=True)
class Planning:
    """What the planning answers ask for.

    Parameters
    ----------
    holds_in : float
        Share of the hours in which a mass must hold, 0.5-1.
    target : float
        Shortfall share below which an hour of the day is usable, 0-1.
    consecutive_hours : int
        Usable hours in a row that make a day worth while, 1-24.
    carburettor_icing : {"chart", "physical"}
        How exposure to carburettor icing is judged.
    year : int
        The year whose calendar and clock the answers are given in.
    fleet : dict of str to float
        How many there are of each aircraft of the study.
    """

    holds_in: float = 0.90
    target: float = 0.05
    consecutive_hours: int = 4
    carburettor_icing: str = "chart"
    year: int = FIRST_PLANNING_YEAR
    fleet: Mapping[str, float] = field(default_factory=dict)


@dataclass(frozen=True)
class Study:
    """A checked study.

    Parameters
    ----------
    path : Path
        The study file.
    title : str
    fields : tuple of Field
    aircraft : tuple of AircraftProfile
    stations : tuple of Station
        Empty for an online study that lists none.
    source : {"files", "meteostat", "synthetic"}
    first_year, last_year : int
        Inclusive, by local standard time.
    radius_km : float
    window : {"daylight", "all"} or (int, int)
        Hours window; a pair means full local standard hours, both ends included.
    seasons : tuple of Season
    bands : tuple of float
        Edges of the bands, rising, within 0-1.
    confidence : float
        Of the intervals, 0.5-1.
    humidity_in_tables : bool
        Tables are entered with the virtual temperature instead of the air temperature.
    seed : int
        Of the synthetic weather.
    inputs : tuple of Path
        Every file read for the study, archives apart.
    warmer_k : float
        Kelvins added to the air at every field.
    warmer_holds : {"relative humidity", "vapour pressure"}
        What stays unchanged when the air is warmer.
    tiles : Tiles or None
        Background images for the map; they shape no number.
    planning : Planning
    flights : tuple of Flight
        The schedule; empty without one.
    """

    path: Path
    title: str
    fields: tuple[Field, ...]
    aircraft: tuple[AircraftProfile, ...]
    stations: tuple[Station, ...]
    source: str
    first_year: int
    last_year: int
    radius_km: float
    window: str | tuple[int, int]
    seasons: tuple[Season, ...]
    bands: tuple[float, ...]
    confidence: float
    humidity_in_tables: bool
    seed: int = 0
    inputs: tuple[Path, ...] = field(default=())
    warmer_k: float = 0.0
    warmer_holds: str = "relative humidity"
    tiles: Tiles | None = None
    planning: Planning = Planning()
    flights: tuple[Flight, ...] = ()

    @property
    def name(self) -> str:
        """The name of the study's folder."""
        return self.path.resolve().parent.name

    def settings(self) -> dict[str, Any]:
        """The settings that shape the numbers, JSON-ready."""
        return {
            "first_year": self.first_year,
            "last_year": self.last_year,
            "source": self.source,
            "radius_km": self.radius_km,
            "window": self.window if isinstance(self.window, str) else list(self.window),
            "seasons": {s.name: season_text(s) for s in self.seasons},
            "bands": list(self.bands),
            "confidence": self.confidence,
            "humidity_in_tables": self.humidity_in_tables,
            "planning": vars(self.planning) | {"fleet": dict(self.planning.fleet)},
        }


def read_study(path: Path | str, schedule: Path | None = None, year: int | None = None) -> Study:
    """The study of a study file.

    Parameters
    ----------
    path : Path or str
        The study TOML, or the folder that holds it as ``study.toml``.
    schedule : Path, optional
        A file of flights in place of the study's own.
    year : int, optional
        A planning year in place of the study's own.

    Raises
    ------
    InputError
        Anything is wrong in the study's files; every problem found is told.
    """
    path = Path(path)
    if path.is_dir():
        path = path / "study.toml"
    problems = _year_problems(year)
    content = load_toml(path)
    problems += same_season_names(content, path)
    checked = validate(_StudyFile, content, str(path), problems)
    if checked is None or problems:
        raise InputError(problems)
    folder = path.parent
    seasons = read_seasons(checked.seasons, path, problems)
    before = len(problems)
    fields = _collect(read_fields, problems, folder / checked.fields)
    whole = len(problems) == before
    if fields:
        fields = _collect(read_runways, problems, folder / checked.runways, fields, whole)
    aircraft, aircraft_paths = _aircraft(checked.aircraft, path, problems)
    before = len(problems)
    stations = _stations(checked.weather, path, problems)
    if fields and stations and len(problems) == before:
        problems += _pin_problems(fields, stations, folder / checked.fields)
    planning = _planning(checked, year, aircraft, path, problems)
    if schedule is None and checked.schedule is not None:
        schedule = folder / checked.schedule
    flights = []
    if schedule is not None and not problems:
        known = {p.id: p for p in aircraft}, {s.name: s for s in seasons}
        flights = _collect(read_flights, problems, schedule, fields, *known, planning.year)
    if problems:
        raise InputError(problems)
    inputs = [path, folder / checked.fields, folder / checked.runways, *aircraft_paths]
    if checked.weather.stations:
        inputs.append(folder / checked.weather.stations)
        inputs += sorted({s.mapping_path for s in stations if s.mapping_path is not None})
    if schedule is not None:
        inputs.append(schedule)
    return Study(
        path=path,
        title=checked.title,
        fields=tuple(fields),
        aircraft=tuple(aircraft),
        stations=tuple(stations),
        source=checked.weather.source,
        first_year=checked.period.first_year,
        last_year=checked.period.last_year,
        radius_km=checked.weather.radius_km,
        window=checked.hours.window,
        seasons=tuple(seasons),
        bands=tuple(checked.risk.bands),
        confidence=checked.risk.confidence,
        humidity_in_tables=checked.risk.humidity_in_tables,
        seed=checked.weather.seed,
        inputs=tuple(inputs),
        tiles=checked.map.source(),
        planning=planning,
        flights=tuple(flights),
    )


def _year_problems(year: int | None) -> list[str]:
    if year is None or _FIRST_YEAR <= year <= _LAST_YEAR:
        return []
    return [f"planning year {year}: a year from {_FIRST_YEAR} to {_LAST_YEAR} is allowed."]


def _planning(
    checked: _StudyFile,
    year: int | None,
    aircraft: list[AircraftProfile],
    path: Path,
    problems: list[str],
) -> Planning:
    known = [profile.id for profile in aircraft]
    for name in checked.fleet:
        if aircraft and name not in known:
            problems.append(
                f"{path}: [fleet] has {name!r}, which is no aircraft of the study; "
                f"{nearest(name, known)}"
            )
    fleet = {name: checked.fleet.get(name, 0.0 if checked.fleet else 1.0) for name in known}
    if aircraft and not any(fleet.values()):
        problems.append(f"{path}: [fleet] holds no aircraft; give one number above zero.")
    asked = checked.planning
    return Planning(
        asked.holds_in,
        asked.target,
        asked.consecutive_hours,
        asked.carburettor_icing,
        year or asked.year or max(checked.period.last_year + 1, FIRST_PLANNING_YEAR),
        fleet,
    )


def _collect(read: Any, problems: list[str], *arguments: Any) -> Any:
    """What a reader returns, its problems and its refusal added to `problems`."""
    try:
        result, found = read(*arguments)
    except InputError as error:
        problems.extend(error.problems)
        return []
    problems.extend(found)
    return result


def _aircraft(
    patterns: list[str], path: Path, problems: list[str]
) -> tuple[list[AircraftProfile], list[Path]]:
    paths: list[Path] = []
    for pattern in patterns:
        if Path(pattern).is_absolute():
            problems.append(f"{path}: aircraft: {pattern!r} must be relative to the study folder.")
            continue
        try:
            found = matching(path.parent, pattern)
        except ValueError as error:
            problems.append(f"{path}: aircraft: {error}.")
            continue
        if not found:
            problems.append(f"{path}: aircraft: no file fits {pattern!r}.")
        paths += [p for p in found if p not in paths]
    read = [_collect(read_aircraft, problems, p) for p in paths]
    profiles = [p for p in read if p]
    for twice in repeated(p.id for p in profiles):
        problems.append(f"{path}: two aircraft profiles have the id {twice!r}; rename one.")
    return profiles, paths


def _stations(weather: _Weather, path: Path, problems: list[str]) -> list[Station]:
    if weather.stations is None:
        if weather.source != "meteostat":
            problems.append(
                f'{path}: [weather] source {weather.source!r} needs stations = "stations.csv".'
            )
        return []
    return _collect(read_stations, problems, path.parent / weather.stations, weather.source)


def _pin_problems(fields: list[Field], stations: list[Station], path: Path) -> list[str]:
    known = {s.id: s.elevation_m for s in stations}
    problems = []
    for f in fields:
        for s in f.stations:
            if s not in known:
                problems.append(
                    f"{path}: the field {f.id!r} is pinned to the station {s!r}, which is not in "
                    f"the stations file; {nearest(s, known)}"
                )
            elif abs(f.elevation_m - known[s]) > _MOST_PINNED_M:
                problems.append(
                    f"{path}: the field {f.id!r} at {f.elevation_m:g} m is pinned to the station "
                    f"{s!r} at {known[s]:g} m; at most {_MOST_PINNED_M:g} m between them make "
                    "sense. Check both elevations."
                )
    return problems
