"""The weather of a study: every station's checked hours, from files, online or invented."""

from __future__ import annotations

import os
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pandas as pd

from climarisk.archives import FORMATS, parse_archive
from climarisk.archives.mapping import VERSION as MAPPING_VERSION
from climarisk.errors import ArchiveError, InputError
from climarisk.findings import Finding, Severity
from climarisk.inputs import sha256
from climarisk.localtime import standard_offset_s, timezone_at
from climarisk.observations import ArchiveFile, join_files
from climarisk.pressure_kind import derived_hours, kind_findings
from climarisk.progress import Progress
from climarisk.quality import ElevationCheck, check_elevations, control
from climarisk.stations import RawStation, Station, distance_km
from climarisk.store import Store, key_of
from climarisk.study import Study

#: A header that differs from stations.csv by more than this is told.
_HEADER_OFF_M, _HEADER_OFF_KM = 5.0, 10.0
#: An archive file larger than this is refused.
_MAX_ARCHIVE_BYTES = 1_000_000_000


@dataclass(frozen=True)
class StationHours:
    """A station with its hours after quality control.

    Parameters
    ----------
    station : Station
    hours : DataFrame
        The canonical table.
    elevation_trusted : bool
        False: its pressure and elevation are not used.
    elevation : ElevationCheck or None
    derived : ndarray of bool, shape (n_rows,)
        Hours whose station pressure was made from sea-level pressure.
    hashes : tuple of (str, str)
    sources : tuple of str
        Publisher, licence, attribution.
    """

    station: Station
    hours: pd.DataFrame
    elevation_trusted: bool
    elevation: ElevationCheck | None
    derived: np.ndarray
    hashes: tuple[tuple[str, str], ...]
    sources: tuple[str, ...]


@dataclass(frozen=True)
class Weather:
    """All stations of a study and what the quality control found."""

    stations: tuple[StationHours, ...]
    findings: tuple[Finding, ...]


def load_weather(
    study: Study, store: Store | None, progress: Progress, offline: bool = False
) -> Weather:
    """The checked hours of every station of a study.

    Parameters
    ----------
    study : Study
    store : Store or None
        None: nothing is kept and nothing is looked up.
    progress : callable
    offline : bool
        Never touch the network.

    Raises
    ------
    InputError
        No station gives any usable hour.
    ArchiveError, FetchError, StoreError
        A file or the online archive cannot be read, or the store not written.
    """
    raw = _raw(study, store, progress, offline)
    findings: list[Finding] = []
    tables = []
    for done, item in enumerate(raw):
        progress("checking stations", done, len(raw))
        table, repeated = join_files(list(item.files))
        findings += [*item.findings, *_file_findings(item, repeated)]
        table, found = control(item.station, table)
        findings += found
        tables.append(table)
    progress("checking stations", len(raw), len(raw))
    if not any(table["temperature_c"].notna().any() for table in tables):
        raise InputError(_no_station(study, findings))
    checks, found = check_elevations([item.station for item in raw], tables)
    findings += found
    rejected = {f.id for f in found if f.severity == "reject"}
    trusted = [
        (item.station, table)
        for item, table in zip(raw, tables, strict=True)
        if item.station.id not in rejected
    ]
    for station, table in trusted:
        findings += kind_findings(
            station, table, [pair for pair in trusted if pair[0] is not station]
        )
    return Weather(
        tuple(
            StationHours(
                item.station,
                table,
                item.station.id not in rejected,
                checks.get(item.station.id),
                derived_hours(item.station, table),
                item.hashes,
                tuple(dict.fromkeys(f.source for f in item.files)),
            )
            for item, table in zip(raw, tables, strict=True)
        ),
        tuple(findings),
    )


def _raw(study: Study, store: Store | None, progress: Progress, offline: bool) -> list[RawStation]:
    if study.source == "files":
        return _from_files(study, store, progress)
    if study.source == "synthetic":
        return _synthetic(study, progress)
    from climarisk.online import fetch_stations

    return fetch_stations(study, store, progress, offline)


def _no_station(study: Study, findings: list[Finding]) -> str:
    told = [f"{f.id}: {f.message}" for f in findings if f.severity == "reject"]
    return (
        f"{study.path}: no station of the study has a usable air temperature"
        + (f" ({' '.join(told)[:600]})" if told else "")
        + "; check the archive files, or add stations."
    )


def _from_files(study: Study, store: Store | None, progress: Progress) -> list[RawStation]:
    total = sum(len(s.files) for s in study.stations)
    done, raw, problems = 0, [], []
    for station in study.stations:
        files, hashes = [], []
        for path in station.files:
            progress("reading archives", done, total)
            done += 1
            try:
                data = _archive_bytes(path)
                hashes.append((relative_name(path, study), sha256(data)))
                files.append(_parsed(data, hashes[-1][1], path, station, store))
            except ArchiveError as error:
                problems.append(f"{path.parent / str(error)}")
        raw.append(RawStation(station, tuple(files), tuple(hashes)))
    progress("reading archives", total, total)
    if problems:
        raise ArchiveError("\n".join(problems))
    return raw


def relative_name(path: Path, study: Study) -> str:
    """A path as the study would write it: relative to its folder, with ``/``."""
    name = Path(os.path.relpath(path, study.path.parent)).as_posix()
    return name.encode("utf-8", "backslashreplace").decode("utf-8")


def _archive_bytes(path: Path) -> bytes:
    try:
        size = path.stat().st_size
        if size > _MAX_ARCHIVE_BYTES:
            raise ArchiveError(
                f"{path.name}: the file has {size:,} bytes; at most {_MAX_ARCHIVE_BYTES:,} are "
                "read. Split it by year."
            )
        return path.read_bytes()
    except OSError as error:
        raise ArchiveError(
            f"{path.name}: the archive file cannot be read ({error.strerror or error})."
        ) from None


def _parsed(
    data: bytes, digest: str, path: Path, station: Station, store: Store | None
) -> ArchiveFile:
    """An archive file's hours: from the store, else parsed and stored."""
    mapping = ""
    if station.mapping_path is not None:
        mapping = sha256(station.mapping_path.read_bytes())
    version = FORMATS[station.archive].version if station.mapping is None else MAPPING_VERSION
    zone = station.timezone or ""
    key = key_of(digest, station.archive, str(version), mapping, zone, path.name)
    entry = store.get(key) if store is not None else None
    if entry is None:
        entry = parse_archive(
            data, station.archive, path.name, mapping=station.mapping, zone=station.timezone
        )
        if store is not None:
            store.put(key, entry)
    return entry


def _synthetic(study: Study, progress: Progress) -> list[RawStation]:
    from climarisk.archives.synthetic import SyntheticStation, generate

    progress("inventing weather", 0, len(study.stations))
    invented = []
    for s in study.stations:
        zone = s.timezone or timezone_at(s.latitude, s.longitude)
        offset_h = float(standard_offset_s(zone, np.zeros(1))[0]) / 3600.0
        invented.append(
            SyntheticStation(s.id, s.name, s.latitude, s.longitude, s.elevation_m, offset_h)
        )
    files = generate(invented, study.first_year, study.last_year, study.seed)
    progress("inventing weather", len(study.stations), len(study.stations))
    return [RawStation(s, (files[s.id],)) for s in study.stations]


def _file_findings(item: RawStation, repeated: int) -> list[Finding]:
    """Notes of the readers, overlaps between files, and headers that contradict stations.csv."""
    s = item.station
    notes: dict[tuple[Severity, str, str], int] = {}
    for file in item.files:
        for note in file.notes:
            notes[note] = notes.get(note, 0) + 1
    findings = [
        Finding(severity, "station", s.id, check, message) for severity, check, message in notes
    ]
    if repeated:
        findings.append(
            Finding(
                "note",
                "station",
                s.id,
                "duplicate-hours",
                f"{repeated} hours come in more than one file; the first file's are used.",
            )
        )
    findings += _header_findings(item)
    if any(f.typical_year for f in item.files):
        findings.append(
            Finding(
                "note",
                "station",
                s.id,
                "typical-year",
                "its archive is a typical year: each month is one real month of a different "
                "year, so nothing can be said of the spread between years.",
            )
        )
    return findings


def _header_findings(item: RawStation) -> list[Finding]:
    s = item.station
    findings = []
    stated = sorted({f.elevation_m for f in item.files if f.elevation_m is not None})
    off = [z for z in stated if abs(z - s.elevation_m) > _HEADER_OFF_M]
    if off or (stated and stated[-1] - stated[0] > _HEADER_OFF_M):
        findings.append(
            Finding(
                "caution",
                "station",
                s.id,
                "elevation-header",
                f"the archive states an elevation of {' and '.join(f'{z:g}' for z in stated)} m, "
                f"stations.csv {s.elevation_m:g} m; stations.csv is used. Check whether the "
                "station moved.",
            )
        )
    places = sorted(
        {
            (f.latitude, f.longitude)
            for f in item.files
            if f.latitude is not None and f.longitude is not None
        }
    )
    for latitude, longitude in places:
        if distance_km(s.latitude, s.longitude, latitude, longitude) > _HEADER_OFF_KM:
            findings.append(
                Finding(
                    "caution",
                    "station",
                    s.id,
                    "place-header",
                    f"the archive places it at {latitude:.3f}, {longitude:.3f}, stations.csv at "
                    f"{s.latitude:.3f}, {s.longitude:.3f}; stations.csv is used. Check both.",
                )
            )
    return findings
