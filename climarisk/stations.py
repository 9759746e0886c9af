"""Stations of a study: where their hours come from and where they stand."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Annotated, Any, Literal

import numpy as np
from annotated_types import Ge, Le
from pyproj import Geod

from climarisk.archives import FORMATS
from climarisk.archives.mapping import ColumnMapping, read_mapping
from climarisk.errors import ClimariskError
from climarisk.findings import Finding
from climarisk.inputs import (
    Identifier,
    Row,
    Text,
    matching,
    metres,
    nearest,
    one_of_units,
    read_table,
    repeated,
    validate,
)
from climarisk.localtime import standard_offset_s
from climarisk.observations import ArchiveFile

_WGS84 = Geod(ellps="WGS84")


@dataclass(frozen=True)
class Station:
    """A weather station.

    Parameters
    ----------
    id, name : str
    latitude, longitude : float
        Degrees north and east (WGS 84).
    elevation_m : float
        Metres above mean sea level.
    archive : str
        A built-in format name, ``"mapping"``, ``"meteostat"`` or ``"synthetic"``.
    files : tuple of Path
        The archive files, sorted; empty for online and synthetic stations.
    timezone : str or None
        IANA name, where the user gives one; used by archives in local standard time.
    mapping : ColumnMapping or None
        How to read a delimited text that is no built-in format.
    mapping_path : Path or None
    elevation_verified : bool
        The user vouches for the elevation against the barometer's evidence.
    """

    id: str
    name: str
    latitude: float
    longitude: float
    elevation_m: float
    archive: str
    files: tuple[Path, ...] = ()
    timezone: str | None = None
    mapping: ColumnMapping | None = None
    mapping_path: Path | None = None
    elevation_verified: bool = False


@dataclass(frozen=True)
class RawStation:
    """A station with its archive files as read, before quality control.

    Parameters
    ----------
    station : Station
    files : tuple of ArchiveFile
    hashes : tuple of (str, str)
        Name and SHA-256 of each archive file, for the provenance.
    findings : tuple of Finding
        What fetching had to say.
    """

    station: Station
    files: tuple[ArchiveFile, ...]
    hashes: tuple[tuple[str, str], ...] = ()
    findings: tuple[Finding, ...] = ()


class _Row(Row):
    id: Identifier
    name: Text
    latitude: Annotated[float, Ge(-90), Le(90)]
    longitude: Annotated[float, Ge(-180), Le(180)]
    elevation_m: Annotated[float, Ge(-430), Le(6000)] | None = None
    elevation_ft: Annotated[float, Ge(-1411), Le(19685)] | None = None
    archive: Text | None = None
    files: str | None = None
    timezone: str | None = None
    elevation_verified: Literal["yes", "no"] = "no"


def read_stations(path: Path, source: str) -> tuple[list[Station], list[str]]:
    """Stations of a CSV file, and the problems found.

    Parameters
    ----------
    path : Path
    source : {"files", "meteostat", "synthetic"}
        With ``"files"`` each row needs ``archive`` and ``files``.

    Raises
    ------
    InputError
        The file is absent or not text.
    """
    archive = ["archive", "files"]
    rows, problems = read_table(
        path,
        ["id", "name", "latitude", "longitude", *(archive if source == "files" else [])],
        [
            "elevation_m",
            "elevation_ft",
            "timezone",
            "elevation_verified",
            *([] if source == "files" else archive),
        ],
    )
    if rows:
        problems += one_of_units(
            ("elevation_m", "elevation_ft"), rows[0][1], path, "elevation of the stations"
        )
    if problems:
        return [], problems
    stations = []
    for number, row in rows:
        station = _station(row, path, f"{path}, line {number}", source, problems)
        if station is not None:
            stations.append(station)
    for twice in repeated(s.id for s in stations):
        problems.append(f"{path}: the station {twice!r} comes twice; give each station its own id.")
    return stations, problems


def _station(
    row: dict[str, Any], path: Path, where: str, source: str, problems: list[str]
) -> Station | None:
    checked = validate(_Row, {k: v for k, v in row.items() if v is not None}, where, problems)
    if checked is None:
        return None
    elevation_m = metres(checked.model_dump(), "elevation")
    if elevation_m is None:
        problems.append(f"{where}: the elevation of {checked.id!r} is empty; fill it in.")
        return None
    archive: dict[str, Any] = {"archive": source}
    try:
        if checked.timezone is not None:
            standard_offset_s(checked.timezone, np.zeros(1))
        if source == "files":
            archive = _archive(checked, path, where, problems)
    except ClimariskError as error:
        problems.append(f"{where}: {error}")
        return None
    return Station(
        checked.id,
        checked.name or checked.id,
        checked.latitude,
        checked.longitude,
        elevation_m,
        timezone=checked.timezone,
        elevation_verified=checked.elevation_verified == "yes",
        **archive,
    )


def _archive(row: _Row, path: Path, where: str, problems: list[str]) -> dict[str, Any]:
    """The archive, its files and its mapping, of one row."""
    name = row.archive or ""
    mapping = mapping_path = None
    if name.endswith(".toml"):
        mapping_path = path.parent / name
        mapping, name = read_mapping(mapping_path), "mapping"
    elif name not in FORMATS:
        problems.append(
            f"{where}: the archive {name!r} is not known; {nearest(name, FORMATS)} "
            "Give a format name, or the path of a column-mapping TOML."
        )
    try:
        files = tuple(matching(path.parent, row.files or ""))
    except ValueError as error:
        problems.append(f"{where}: files: {error}; see the README.")
        files = ()
    else:
        if not files:
            problems.append(_no_file(where, row.files, path))
    return {
        "archive": name,
        "files": files,
        "mapping": mapping,
        "mapping_path": mapping_path,
    }


def _no_file(where: str, pattern: str | None, path: Path) -> str:
    return f"{where}: no file fits {pattern!r}, taken from the folder {path.parent}."


def distance_km(
    latitude_a: float, longitude_a: float, latitude_b: float, longitude_b: float
) -> float:
    """Distance between two points along the WGS 84 ellipsoid, km."""
    return _WGS84.inv(longitude_a, latitude_a, longitude_b, latitude_b)[2] / 1000.0
