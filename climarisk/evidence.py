"""What a reviewer asks of the data: what was read, and how much of each station's record counts."""

from __future__ import annotations

import hashlib
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path, PurePosixPath

import numpy as np
import pandas as pd

from climarisk.climatology import completeness
from climarisk.clock import LocalClock, hour_grid, local_clock
from climarisk.inputs import read_bytes, sha256
from climarisk.observations import COLUMNS
from climarisk.pressure import NO_PRESSURE, SOURCES
from climarisk.region import stations_on_grid
from climarisk.rules import patchy_months
from climarisk.study import Study
from climarisk.transfer import StationAir
from climarisk.verify import as_field
from climarisk.weather import StationHours, Weather, relative_name

#: Columns of ``inputs.csv``.
INPUT_COLUMNS = [
    "file",  # relative to the study; of a station without files, what its hours are
    "sha256",
    "bytes",
    "copied",  # yes: it stands under inputs/
    "what",
]
#: Columns of ``coverage.csv``: one row per station.
COVERAGE_COLUMNS = [
    "station",
    "name",
    "archive",
    "elevation_m",
    "elevation_trusted",  # no: its pressure and its elevation are not used
    "dates_trusted",  # no: nothing is carried from it to other places
    "first",  # first and last date with an air temperature, local standard time
    "last",
    "hours",  # of the period
    "with_temperature",
    "with_humidity",
    "with_pressure",
    "coverage",  # hours with an air temperature / hours of the period
    "counting_cells",  # of year, month and hour, by the completeness rule
    "cells",
    "full_months",  # months of years all of whose hours count
    "patchy_months",  # months of years that miss too many days
    "months",
    "pressure_kind",
    "pressure_error_hpa",  # one standard deviation, root mean square of its hours
    "fields",  # fields that take hours from it
    "nearest_field",
    "nearest_km",
    "nearest_m",  # field minus station
]


#: What ``inputs.csv`` calls the study's own files.
_STUDY_FILE, _OWN_FILE = "study file", "file of the study"


@dataclass(frozen=True)
class StudyInput:
    """Something that was read for a study.

    Parameters
    ----------
    name : str
        Relative to the study, with ``/``.
    sha256 : str
    n_bytes : int
    what : str
    data : bytes or None
        What to copy; None where it is not copied.
    """

    name: str
    sha256: str
    n_bytes: int
    what: str
    data: bytes | None = None


def study_inputs(study: Study, weather: Weather) -> list[StudyInput]:
    """Everything that was read for a study: its own files, then the weather of each station.

    A file that lies outside the study's folder is not copied.  A station without archive files
    (online, invented) is told by a digest of its checked hours: `hours_digest`.

    Parameters
    ----------
    study : Study
    weather : Weather

    Raises
    ------
    InputError
        A file can no longer be read.
    """
    found = []
    for path in dict.fromkeys(study.inputs):
        data, name = read_bytes(path), relative_name(path, study)
        what = _STUDY_FILE if path == study.path else _OWN_FILE
        kept = data if is_inside(name) else None
        found.append(StudyInput(name, sha256(data), len(data), what, kept))
    for item in weather.stations:
        found += _weather_inputs(item, study)
    return found


def is_inside(name: str) -> bool:
    """Whether a relative name with ``/`` stays in the folder it is relative to."""
    parts = name.split("/")
    plain = not any(part in ("", ".", "..") for part in parts)
    odd = any(c in "\\:" or not c.isprintable() for c in name)
    return plain and not odd and not PurePosixPath(name).is_absolute()


def _weather_inputs(item: StationHours, study: Study) -> list[StudyInput]:
    if item.hashes:
        files = zip(item.station.files, item.hashes, strict=True)
        what = f"archive of station {item.station.id}"
        return [StudyInput(name, digest, _size(path), what) for path, (name, digest) in files]
    kind = {"synthetic": "invented"}.get(study.source, "online")
    digest, n_bytes = hours_digest(item.hours)
    what = f"checked hours of station {item.station.id}, {kind}"
    return [StudyInput(f"hours of {item.station.id}", digest, n_bytes, what)]


def _size(path: Path) -> int:
    try:
        return path.stat().st_size
    except OSError:  # gone since it was read: its digest stands
        return 0


def hours_digest(hours: pd.DataFrame) -> tuple[str, int]:
    """SHA-256 of a table of hours and how many bytes went into it.

    Parameters
    ----------
    hours : DataFrame
        The canonical table.

    Notes
    -----
    The seconds since 1970 as little-endian 64-bit integers, then every column of
    `climarisk.observations.COLUMNS` as little-endian 64-bit floats, one NaN for all gaps.
    """
    parts = [hours.index.as_unit("s").asi8.astype("<i8").tobytes()]
    for name in COLUMNS:
        values = hours[name].to_numpy("<f8")
        parts.append(np.where(np.isnan(values), np.nan, values).astype("<f8").tobytes())
    data = b"".join(parts)
    return hashlib.sha256(data).hexdigest(), len(data)


def input_table(inputs: Sequence[StudyInput]) -> pd.DataFrame:
    """The inputs as a table; columns `INPUT_COLUMNS`."""
    rows = [
        (i.name, i.sha256, i.n_bytes, "no" if i.data is None else "yes", i.what) for i in inputs
    ]
    return pd.DataFrame(rows, columns=INPUT_COLUMNS)


def is_runnable(study: Study, inputs: Sequence[StudyInput]) -> bool:
    """Whether the copied files make a study that runs by itself: invented weather, all copied."""
    own = [i for i in inputs if i.what in (_STUDY_FILE, _OWN_FILE)]
    return study.source == "synthetic" and all(i.data is not None for i in own)


def coverage_table(study: Study, weather: Weather, station_use: pd.DataFrame) -> pd.DataFrame:
    """How much of every station's record there is and how much of it counts.

    Parameters
    ----------
    study : Study
    weather : Weather
    station_use : DataFrame
        As in the result.

    Returns
    -------
    DataFrame
        Columns `COVERAGE_COLUMNS`; a count of hours is of hours in the period, by the local
        standard time of the station.
    """
    grid = hour_grid(study.first_year, study.last_year)
    airs, wrong = stations_on_grid(weather, grid)
    rows = []
    for air in airs:
        clock = local_clock(as_field(air), grid, study.first_year, study.last_year)
        s = air.station
        trusted = ["yes" if good else "no" for good in (air.elevation_trusted, s.id not in wrong)]
        place = (s.id, s.name, s.archive, round(s.elevation_m, 2), *trusted)
        use = station_use[station_use["station"] == s.id]
        rows.append((*place, *_record(air, clock), *_pressure(air, clock), *_fields(use)))
    return pd.DataFrame(rows, columns=COVERAGE_COLUMNS)


def _record(air: StationAir, clock: LocalClock) -> tuple[object, ...]:
    """From ``first`` to ``months``."""
    inside = clock.in_period
    known = np.isfinite(air.temperature_c) & inside
    days = np.datetime64(f"{clock.first_year}-01-01") + clock.day[known].astype("timedelta64[D]")
    counts = completeness(known, clock).counts
    return (
        str(days[0]) if len(days) else "",
        str(days[-1]) if len(days) else "",
        int(inside.sum()),
        int(known.sum()),
        int((np.isfinite(air.vapour_pressure_hpa) & inside).sum()),
        int((np.isfinite(air.pressure_hpa) & inside).sum()),
        float(known.sum() / inside.sum()),
        int(counts.sum()),
        counts.size,
        int(counts.all(axis=2).sum()),
        patchy_months(known, clock)[0],
        counts.shape[0] * counts.shape[1],
    )


def _pressure(air: StationAir, clock: LocalClock) -> tuple[str, float]:
    """The kind that most hours have, and its error."""
    has = clock.in_period & (air.pressure_source != NO_PRESSURE)
    if not has.any():
        return "none", np.nan
    kinds = np.bincount(air.pressure_source[has], minlength=len(SOURCES))
    error = float(np.sqrt(np.mean(air.pressure_error_hpa[has] ** 2)))
    return SOURCES[int(kinds.argmax())], round(error, 3)


def _fields(use: pd.DataFrame) -> tuple[int, str, float, float]:
    """How many fields take hours from a station, and the nearest of those around it."""
    if not len(use):
        return 0, "", np.nan, np.nan
    nearest = use.loc[use["distance_km"].idxmin()]
    return (
        int((use["share_of_hours"] > 0).sum()),
        str(nearest["field"]),
        round(float(nearest["distance_km"]), 3),
        round(float(nearest["height_difference_m"]), 1),
    )
