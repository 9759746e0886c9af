"""The open online archive, read through the package ``meteostat``; the only module with HTTP.

One request fetches one station-year.  Four traits of the package (2.1) decide the design:

* It logs a failed download and carries on with what it has.  `fetch_year` therefore calls
  the package's own loader of a station-year without the layer that swallows its errors, so
  that "no such file" (HTTP 404) and a failure stay two different things.
* It mixes forecast and model values into the hours.  Here only values of sources that the
  package itself grades as observation or record are kept.
* ``pres`` is mean sea-level pressure, not pressure at the station; of aerodrome reports it
  is the altimeter setting, which the package's reader of them takes for it.
* Its cache is pickle files in the home folder.  The loader called here is below the cache;
  the list of stations goes to a private folder that is removed at exit.

References
----------
Meteostat, "Hourly data" and "Time series", https://dev.meteostat.net/data/timeseries: one
compressed CSV per station and year, times in UTC, HTTP 404 where there are no data.
"""

from __future__ import annotations

import atexit
import functools
import inspect
import re
import shutil
import tempfile
import threading
import time
import urllib.request
from collections.abc import Callable, Iterable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any
from urllib.error import HTTPError
from urllib.parse import urlsplit

import pandas as pd

from climarisk.errors import FetchError, InputError
from climarisk.observations import ArchiveFile, Note, assign_to_hours
from climarisk.units import METRES_PER_NAUTICAL_MILE

ATTRIBUTION = "Meteorological data provided by Meteostat (https://dev.meteostat.net)"
LICENCE = (
    "Creative Commons Attribution 4.0 International (CC BY 4.0), as stated by the archive; its "
    "sources have terms of their own, check before publishing"
)

_TIMEOUT_S = 30.0
#: Seconds to wait before each further attempt; their number is the cap on attempts.
_BACKOFF_S: tuple[float, ...] = (1.0, 4.0)
#: Years in a row that may fail before the rest of a station is not asked for any more.
_FAILURES_IN_A_ROW = 3
#: The most stations looked at around a place; the query is sorted by distance.
_MOST_STATIONS = 1000
_STATION_ID = re.compile(r"[A-Za-z0-9]{1,12}")
_METRES_PER_KM = 1000.0
_COLUMNS = {
    "temp": "temperature_c",
    "dwpt": "dew_point_c",
    "rhum": "relative_humidity_pct",
    "pres": "sea_level_pressure_hpa",
    "qnh": "qnh_hpa",
    "wdir": "wind_direction_deg",
    "wspd": "wind_speed_kt",
}
_PRESSURE_NOTE: Note = (
    "note",
    "sea-level-pressure",
    "the online archive gives pressure reduced to sea level only; pressure at the station is "
    "worked out from it.",
)
#: Sources whose ``pres`` is the altimeter setting.
_QNH_SOURCES = ("metar",)
# The opener of urllib and the settings of the package are global to the process.
_LOCK = threading.RLock()


@dataclass(frozen=True)
class OnlineStation:
    """A station of the online archive: degrees north and east, metres above mean sea level.

    `timezone` is an IANA name, None where the archive gives none.
    """

    id: str
    name: str
    latitude: float
    longitude: float
    elevation_m: float
    timezone: str | None


class _NoSuchFile(Exception):
    """Raised where the archive answers that it has no such file."""


def find_stations(
    latitude: float, longitude: float, radius_km: float, limit: int
) -> list[OnlineStation]:
    """Return the stations around a place, nearest first.

    Stations without a stated elevation are left out: their air cannot be transferred.

    Parameters
    ----------
    latitude, longitude : float
        Degrees north and east.
    radius_km : float
    limit : int
        The most stations to return.

    Raises
    ------
    InputError
        The place is not on the globe.
    FetchError
        The list of stations could not be downloaded or read.
    """
    if not (-90.0 <= latitude <= 90.0 and -180.0 <= longitude <= 180.0):
        raise InputError(
            f"latitude {latitude}, longitude {longitude}: allowed are -90 to 90 and -180 to 180"
        )
    import meteostat
    from meteostat.core.network import network_service

    place = meteostat.Point(latitude, longitude)
    with _LOCK, _private_settings(), _watched(network_service) as outcomes:
        try:
            found = meteostat.stations.nearby(place, radius_km * _METRES_PER_KM, _MOST_STATIONS)
        # Whatever goes wrong inside the package is one thing to the user: no list.
        except Exception as error:
            (_own_folder() / "stations.db").unlink(missing_ok=True)
            raise FetchError(
                "the online archive's list of stations could not be read "
                f"({'; '.join(outcomes) or error}); try again later, or use "
                'source = "files" in [weather]'
            ) from error
    found = found[found["elevation"].notna()].head(limit)
    return [
        OnlineStation(
            id=str(row.Index),
            name=str(row.name),
            latitude=float(row.latitude),
            longitude=float(row.longitude),
            elevation_m=float(row.elevation),
            timezone=str(row.timezone) if pd.notna(row.timezone) else None,
        )
        for row in found.itertuples()
    ]


def fetch_year(station_id: str, year: int, timeout_s: float = _TIMEOUT_S) -> ArchiveFile | None:
    """Return the observed hours of one station in one calendar year of UTC.

    Parameters
    ----------
    station_id : str
        Identifier in the online archive, letters and digits.
    year : int
    timeout_s : float
        The longest wait for the server to connect or to send more, s.

    Returns
    -------
    ArchiveFile or None
        None if the archive answers that it has no such file.  A failure is never None.

    Raises
    ------
    InputError
        The identifier is not one of the archive's.
    FetchError
        The file could not be had in several attempts, is damaged, or holds another year.
    """
    if not _STATION_ID.fullmatch(station_id):
        raise InputError(
            f"online station {station_id!r}: an identifier is 1 to 12 letters and digits; "
            "take one from the archive's list of stations"
        )
    for attempt, wait_s in enumerate((*_BACKOFF_S, None), start=1):
        try:
            table = _load(station_id, year, timeout_s)
            break
        except _NoSuchFile:
            return None
        # The loader may raise anything: network, gzip and CSV errors all mean "not had".
        except Exception as error:
            if wait_s is None or _is_final(error):
                raise _failure(station_id, year, f"{_reason(error)}, attempt {attempt}") from error
            time.sleep(wait_s)
    try:
        return _as_archive_file(table, station_id, year)
    except (AttributeError, KeyError, TypeError, ValueError) as error:
        raise _failure(station_id, year, f"unexpected content: {error}") from error


def fetch_station(
    station: OnlineStation,
    years: Iterable[int],
    on_year: Callable[[int, str, ArchiveFile | None], None] | None = None,
) -> tuple[dict[int, ArchiveFile], list[int], list[tuple[int, str]]]:
    """Fetch some years of a station, and say of each what became of it.

    Parameters
    ----------
    station : OnlineStation
    years : iterable of int
    on_year : callable, optional
        Called after each year with the year, ``received``, ``missing`` or ``failed``, and
        the hours received.

    Returns
    -------
    received : dict of int to ArchiveFile
    missing : list of int
        Years of which the archive says that it has no file.
    failed : list of (int, str)
        Years that could not be had, each with a sentence.  After three failures in a row
        the years left are not asked for and are listed here too.
    """
    received: dict[int, ArchiveFile] = {}
    missing: list[int] = []
    failed: list[tuple[int, str]] = []
    in_a_row = 0
    for year in years:
        outcome = "received"
        try:
            if in_a_row >= _FAILURES_IN_A_ROW:
                reason = f"not asked for after {_FAILURES_IN_A_ROW} failures in a row"
                raise _failure(station.id, year, reason)
            file = fetch_year(station.id, year)
        except FetchError as error:
            outcome = "failed"
            failed.append((year, str(error)))
        else:
            if file is None:
                outcome = "missing"
                missing.append(year)
            else:
                received[year] = replace(
                    file,
                    station_name=station.name,
                    latitude=station.latitude,
                    longitude=station.longitude,
                    elevation_m=station.elevation_m,
                )
        in_a_row = in_a_row + 1 if outcome == "failed" else 0
        if on_year is not None:
            on_year(year, outcome, received.get(year))
    return received, missing, failed


def _failure(station_id: str, year: int, reason: str) -> FetchError:
    """Return the one sentence for a year that could not be had."""
    return FetchError(
        f"online station {station_id}, {year}: the year was not received ({reason}); try again "
        "later, the years already received are kept"
    )


def _reason(error: Exception) -> str:
    """Return what went wrong, short."""
    if isinstance(error, HTTPError):
        return f"the server answered {error.code}"
    if isinstance(error, FetchError):
        return str(error)
    return f"{type(error).__name__}: {error}" if str(error) else type(error).__name__


def _is_final(error: Exception) -> bool:
    """Tell whether asking again is pointless: refused, or a client error other than "later"."""
    if isinstance(error, HTTPError):
        return error.code < 500 and error.code not in (408, 425, 429)
    return isinstance(error, FetchError)


def _load(station_id: str, year: int, timeout_s: float) -> pd.DataFrame:
    """Return a station-year as the package reshapes it, or raise what went wrong."""
    from meteostat.providers.meteostat import hourly

    # get_df is wrapped twice: by the pickle cache and by the handler that swallows errors.
    loader = inspect.unwrap(hourly.get_df)
    endpoint = urlsplit(hourly.ENDPOINT)
    with _LOCK, _one_host(endpoint.scheme, endpoint.netloc, timeout_s):
        try:
            table = loader(station_id, year)
        except HTTPError as error:
            error.close()
            if error.code == 404:
                raise _NoSuchFile from error
            raise
    # None is what the swallowing layer gives; without a reason it must not pass for "no file".
    if table is None or table.empty:
        raise FetchError("the file came without a single value")
    return table


@contextmanager
def _one_host(scheme: str, netloc: str, timeout_s: float) -> Iterator[None]:
    """Let urllib reach one server only, redirects included, with a time limit."""
    if scheme not in ("http", "https") or not netloc:
        raise FetchError(f"the archive's address begins with {scheme!r}; allowed: http, https")
    opener = urllib.request.build_opener()
    unguarded = opener.open

    def guarded(request: Any, data: Any = None, timeout: Any = None) -> Any:
        address = request if isinstance(request, str) else request.full_url
        if urlsplit(address)[:2] != (scheme, netloc):
            raise FetchError(f"the server {netloc} sends on to another one, {address}: refused")
        return unguarded(request, data, timeout_s)

    opener.open = guarded  # type: ignore[method-assign,assignment]
    # pandas, which the package reads with, asks urllib without a time limit of its own.
    before = getattr(urllib.request, "_opener", None)
    urllib.request.install_opener(opener)
    try:
        yield
    finally:
        urllib.request.install_opener(before)


def _as_archive_file(table: pd.DataFrame, station_id: str, year: int) -> ArchiveFile:
    """Return the canonical hours of a station-year indexed by time and source."""
    times = pd.DatetimeIndex(table.index.get_level_values("time"))
    strangers = int((times.year != year).sum())
    if strangers:
        raise _failure(station_id, year, f"{strangers} of {len(times)} rows are of another year")
    observed, notes, credits = _observed(table, year)
    wanted = observed[[name for name in _COLUMNS if name in observed.columns]]
    reports = wanted.apply(pd.to_numeric).astype(float).rename(columns=_COLUMNS)
    if "wind_speed_kt" in reports:
        reports["wind_speed_kt"] *= _METRES_PER_KM / METRES_PER_NAUTICAL_MILE
    reports.index = pd.DatetimeIndex(reports.index).tz_localize("UTC")
    hours, _ = assign_to_hours(reports)
    if hours.empty:
        notes.append(("caution", "no-temperature", f"{year}: no hour has an observed temperature."))
    sources = f"; from {', '.join(credits)}" if credits else ""
    return ArchiveFile(
        hours=hours,
        source=f"{ATTRIBUTION}, {LICENCE}{sources}",
        station_id=station_id,
        notes=tuple(notes),
    )


def _observed(table: pd.DataFrame, year: int) -> tuple[pd.DataFrame, list[Note], list[str]]:
    """Return one row per time of observed values only, notes, and whom to credit.

    Of two sources for one value the one that the package ranks higher is kept.
    """
    from meteostat.core.providers import provider_service
    from meteostat.enumerations import Grade

    grades = {str(spec.id): spec.grade for spec in provider_service.providers}
    stated = table.index.get_level_values("source")
    sources = pd.Index([str(name) if pd.notna(name) else "not stated" for name in stated])
    kind = {name: {grades.get(part) for part in name.split()} for name in set(sources)}
    kept = {n for n, g in kind.items() if g and g <= {Grade.RECORD, Grade.OBSERVATION}}
    model = {n for n, g in kind.items() if g & {Grade.FORECAST, Grade.ANALYSIS}}
    unknown = sorted(set(kind) - kept - model)
    notes: list[Note] = [_PRESSURE_NOTE]
    if model:
        text = f"{year}: hours in which forecast or model values were left out:"
        notes.append(("note", "model-values", f"{text} {sources.isin(sorted(model)).sum()}."))
    if unknown:
        text = f"{year}: hours in which values of unknown source ({', '.join(unknown)}) were left"
        notes.append(("caution", "unknown-source", f"{text} out: {sources.isin(unknown).sum()}."))
    observed = _with_qnh_apart(table[sources.isin(sorted(kept))])
    rank = observed.index.get_level_values("source").map(provider_service.get_source_priority)
    best_first = observed.iloc[(-rank.to_numpy(dtype=float)).argsort(kind="stable")]
    credits = sorted({_credit(part) for name in kept for part in name.split()})
    return best_first.groupby(level="time").first(), notes, credits


def _with_qnh_apart(table: pd.DataFrame) -> pd.DataFrame:
    """Return the table with altimeter settings in a column of their own."""
    if "pres" not in table.columns:
        return table
    is_qnh = table.index.get_level_values("source").isin(_QNH_SOURCES)
    return table.assign(qnh=table["pres"].where(is_qnh), pres=table["pres"].mask(is_qnh))


def _credit(source: str) -> str:
    """Return the name of a source of the archive with its attribution and licence."""
    from meteostat.core.providers import provider_service

    spec = provider_service.get_provider(source)
    if spec is None:
        return source
    terms = (spec.license.attribution, spec.license.name) if spec.license else ()
    stated = ", ".join(term for term in terms if term)
    return f"{spec.name} ({stated})" if stated else str(spec.name)


@functools.cache
def _own_folder() -> Path:
    """Return a folder of this process, readable by its user only and removed at exit."""
    folder = tempfile.mkdtemp(prefix="climarisk-")
    atexit.register(shutil.rmtree, folder, ignore_errors=True)
    return Path(folder)


@contextmanager
def _private_settings() -> Iterator[None]:
    """Keep the package's files in our own folder; it would make one in the home folder."""
    from meteostat import config

    ours = {
        "cache_directory": str(_own_folder()),
        "stations_db_file": str(_own_folder() / "stations.db"),
        "network_timeout": _TIMEOUT_S,
    }
    before = {name: getattr(config, name) for name in ours}
    try:
        for name, value in ours.items():
            setattr(config, name, value)
        yield
    finally:
        for name, value in before.items():
            setattr(config, name, value)


@contextmanager
def _watched(service: Any) -> Iterator[list[str]]:
    """Note what each request of the package's network layer came to; its errors hide it."""
    outcomes: list[str] = []
    plain = service.get

    def get(url: str, *args: Any, **kwargs: Any) -> Any:
        try:
            response = plain(url, *args, **kwargs)
        except Exception as error:
            outcomes.append(f"{url}: {_reason(error)}")
            raise
        if urlsplit(response.url)[:2] != urlsplit(url)[:2]:
            raise FetchError(f"{url} sends on to another server, {response.url}: refused")
        if response.status_code != 200:
            outcomes.append(f"{url} answered {response.status_code}")
        return response

    service.get = get
    try:
        yield outcomes
    finally:
        del service.get
