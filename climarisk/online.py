"""Stations of an online study: what the store holds, and the rest from the archive."""

from __future__ import annotations

import datetime as dt
from dataclasses import replace

from climarisk.archives.meteostat import OnlineStation, fetch_station, find_stations
from climarisk.errors import FetchError
from climarisk.findings import Finding
from climarisk.observations import ArchiveFile, empty_hours
from climarisk.progress import Progress
from climarisk.stations import RawStation, Station
from climarisk.store import Store, key_of
from climarisk.study import Study

#: Stations taken around each field where the study lists none.
STATIONS_PER_FIELD = 4
_MISSING = "missing-year"


def fetch_stations(
    study: Study, store: Store | None, progress: Progress, offline: bool
) -> list[RawStation]:
    """The stations of an online study with every year the archive has.

    Years that are complete are kept in the store; the current year is asked for anew.

    Parameters
    ----------
    study : Study
    store : Store or None
    progress : callable
    offline : bool
        Take what the store has and never touch the network.

    Raises
    ------
    FetchError
        A year could not be had, or, offline, is not in the store.  What arrived is kept.
    """
    stations = _stations(study, store, progress, offline)
    if not stations:
        raise FetchError(
            f"{study.path}: the online archive has no station within {study.radius_km:g} km of "
            "any field; widen radius_km under [weather]."
        )
    # Local years reach up to 14 hours into the neighbouring UTC years.
    years = list(range(study.first_year - 1, study.last_year + 2))
    this_year = dt.datetime.now(dt.UTC).year
    years = [y for y in years if y <= this_year]
    raw, failures = [], []
    for done, station in enumerate(stations):
        progress("fetching stations", done, len(stations))
        files, failed = _years(station, years, this_year, store, offline)
        failures += failed
        raw.append(_raw_station(station, files, study))
    progress("fetching stations", len(stations), len(stations))
    if failures:
        raise FetchError(_told(study, failures, offline))
    return raw


def _told(study: Study, failures: list[str], offline: bool) -> str:
    what = (
        "are not in the store; run climarisk fetch without --offline"
        if offline
        else "could not be had; run it again later: what arrived is kept"
    )
    shown = "\n".join(failures[:10])
    return f"{study.path}: {len(failures)} station years {what}.\n{shown}"


def _stations(
    study: Study, store: Store | None, progress: Progress, offline: bool
) -> list[OnlineStation]:
    """The listed stations, or those around each field, from the store where they are known."""
    if study.stations:
        return [
            OnlineStation(s.id, s.name, s.latitude, s.longitude, s.elevation_m, s.timezone)
            for s in study.stations
        ]
    found: dict[str, OnlineStation] = {}
    for done, field in enumerate(study.fields):
        progress("looking for stations", done, len(study.fields))
        place = (field.latitude, field.longitude, study.radius_km, STATIONS_PER_FIELD)
        key = key_of("stations around", *(repr(x) for x in place))
        known = store.get_list(key) if store is not None else None
        if known is not None:
            near = [OnlineStation(**item) for item in known]
        elif offline:
            raise FetchError(
                f"{study.path}: the stations around {field.id} are not in the store; "
                "run climarisk fetch without --offline."
            )
        else:
            near = find_stations(*place)
            if store is not None:
                store.put_list(key, [vars(s) for s in near])
        found |= {s.id: s for s in near}
    progress("looking for stations", len(study.fields), len(study.fields))
    return list(found.values())


def _years(
    station: OnlineStation, years: list[int], this_year: int, store: Store | None, offline: bool
) -> tuple[dict[int, ArchiveFile], list[str]]:
    """Years of a station from the store and, unless offline, the archive; and the failures."""

    def key(year: int) -> str:
        return key_of("online", station.id, str(year))

    files = {}
    for year in years:
        entry = store.get(key(year)) if store is not None else None
        if entry is not None:
            files[year] = entry
    wanted = [y for y in years if y not in files]
    if offline:
        return files, [f"{station.id} {year}" for year in wanted if year != this_year]

    def keep(year: int, outcome: str, hours: ArchiveFile | None) -> None:
        if outcome == "missing":
            note = f"{year}: the archive has no file of this year."
            hours = ArchiveFile(empty_hours(), "", notes=(("note", _MISSING, note),))
        if hours is None:
            return
        files[year] = hours
        # The present year is not complete, so it is never kept as whole.
        if store is not None and year < this_year:
            store.put(key(year), hours)

    _, _, failed = fetch_station(station, wanted, keep)
    return files, [sentence for _, sentence in failed]


def _raw_station(station: OnlineStation, files: dict[int, ArchiveFile], study: Study) -> RawStation:
    years = range(study.first_year, study.last_year + 1)
    missing = [y for y in years if y not in files or not len(files[y].hours)]
    findings = []
    if missing:
        findings.append(
            Finding(
                "caution",
                "station",
                station.id,
                _MISSING,
                f"the archive has no observed hour in {len(missing)} of {len(years)} years asked "
                f"for: {', '.join(str(y) for y in missing)}.",
            )
        )
    kept = [
        replace(f, notes=tuple(n for n in f.notes if n[1] != _MISSING))
        for _, f in sorted(files.items())
        if len(f.hours)
    ]
    return RawStation(
        Station(
            station.id,
            station.name,
            station.latitude,
            station.longitude,
            station.elevation_m,
            "meteostat",
            timezone=station.timezone,
        ),
        tuple(kept),
        findings=tuple(findings),
    )
