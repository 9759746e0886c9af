"""Full-record local climatological data (``lcd``): CSV, several report types, local time.

The time column is LOCAL STANDARD TIME.  Two editions differ in their units: degF, inches of
mercury and miles per hour, or degC, hPa and m/s; the size of the pressures tells which.

References
----------
NOAA National Centers for Environmental Information, *Local Climatological Data (LCD)
Dataset Documentation*: times in local standard time; whole degF; miles per hour; inches of
mercury; ``s`` suspect value, ``V`` variable, ``*`` missing or ambiguous, ``T`` trace.
The units of the newer edition (degC, hPa, m/s) are common practice, no source at hand.
"""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import numpy as np

from climarisk.archives.text import (
    KT_PER_MPH,
    KT_PER_MS,
    MISSING_WORDS,
    About,
    FloatArray,
    Rows,
    each,
    iso_seconds,
    metadata_number,
    not_this_format,
    read_bytes,
    split_line,
    text_lines,
)
from climarisk.errors import ArchiveError, InputError
from climarisk.localtime import standard_offset_s, timezone_at
from climarisk.observations import ArchiveFile
from climarisk.units import HPA_PER_INHG, fahrenheit_to_celsius

FORM = "lcd"
VERSION = 1
SOURCE = "NOAA NCEI, Local Climatological Data"

#: Names of each wanted column, lower case; the second is that of the oldest files.
_NAMES = {
    "time": ("date", "datetime"),
    "temperature_c": ("hourlydrybulbtemperature", "hourlydrybulbtempf"),
    "dew_point_c": ("hourlydewpointtemperature", "hourlydewpointtempf"),
    "relative_humidity_pct": ("hourlyrelativehumidity",),
    "station_pressure_hpa": ("hourlystationpressure",),
    "qnh_hpa": ("hourlyaltimetersetting",),
    "sea_level_pressure_hpa": ("hourlysealevelpressure",),
    "wind_direction_deg": ("hourlywinddirection",),
    "wind_speed_kt": ("hourlywindspeed",),
    "type": ("report_type", "reporttype"),
    "station": ("station",),
    "station_name": ("name", "station_name"),
    "latitude": ("latitude",),
    "longitude": ("longitude",),
    "elevation": ("elevation",),
}
_VALUES = tuple(key for key in _NAMES if key.endswith(("_c", "_pct", "_hpa", "_deg", "_kt")))
_PRESSURES = tuple(key for key in _VALUES if key.endswith("_hpa"))
#: Summaries of the day and month: no value of an hour.
_SUMMARIES = frozenset({"SOD", "SOM", "SOY"})
_MISSING = MISSING_WORDS | {"*", "T", "VRB", "V"}
#: Pressures found on land, 440 to 1100 hPa, in both units; the ranges do not touch.
_HPA_RANGE = (440.0, 1100.0)
_INHG_RANGE = (440.0 / HPA_PER_INHG, 1100.0 / HPA_PER_INHG)


def parse_lcd(
    data: bytes,
    name: str = "<bytes>",
    utc_offset_hours: float | None = None,
    zone: str | None = None,
) -> ArchiveFile:
    """The hours of a local climatological data file, all three kinds of pressure.

    Parameters
    ----------
    data : bytes
        Plain or gzip.
    name : str
        For messages.
    utc_offset_hours : float, optional
        Local standard time minus UTC; default: that of `zone`.
    zone : str, optional
        IANA name; default: the time zone at the file's coordinates.

    Raises
    ------
    ArchiveError
        The file is not of this format, holds several stations, leaves its units or its
        time zone undecided, or more than half of it is damaged.
    """
    lines = text_lines(data, name)
    header = [h.strip().lower() for h in split_line(lines[0], ",")]
    positions = {
        key: next(header.index(n) for n in names if n in header)
        for key, names in _NAMES.items()
        if any(n in header for n in names)
    }
    if not {"time", "temperature_c"} <= positions.keys():
        raise not_this_format(
            name, FORM, "a header with DATE and HourlyDryBulbTemperature", lines[0]
        )
    rows = Rows(name, FORM, lines, 1, ",", positions, width=len(header))
    station = rows.one_station("station")
    _leave_out_summaries(rows)
    values = _marked_values(rows)
    _convert_units(values, name)
    clock = each(iso_seconds, rows.text("time"))
    about = About(
        SOURCE,
        station_id=station,
        station_name=rows.last("station_name"),
        latitude=metadata_number(rows.last("latitude")),
        longitude=metadata_number(rows.last("longitude")),
        elevation_m=metadata_number(rows.last("elevation")),
    )
    if utc_offset_hours is not None:
        offset_s = np.full(len(clock), utc_offset_hours * 3600.0)
    else:
        offset_s = _offset_s(about, clock, name, zone)
    return rows.to_file(clock - offset_s, values, about)


def read_lcd(
    path: Path, utc_offset_hours: float | None = None, zone: str | None = None
) -> ArchiveFile:
    """`parse_lcd` of a file."""
    return parse_lcd(read_bytes(path), path.name, utc_offset_hours, zone)


def _leave_out_summaries(rows: Rows) -> None:
    types: Sequence[str] = rows.text("type")
    rows.left_out |= np.array([t.strip().upper() in _SUMMARIES for t in types], dtype=bool)
    if rows.left_out.any():
        rows.note(
            "note",
            "summary-reports",
            f"{int(rows.left_out.sum())} daily and monthly summaries were left out.",
        )


def _marked_values(rows: Rows) -> dict[str, FloatArray]:
    """The values as written; those the source marks as doubtful are NaN and counted."""
    doubtful = 0
    values = {}
    for key in _VALUES:
        texts = rows.text(key)
        marked = np.array([t.rstrip().endswith("s") for t in texts], dtype=bool)
        if key in rows.columns:
            # The marks are letters after the number.
            rows.columns[key] = tuple(t.strip().rstrip("sV") for t in texts)
        values[key] = rows.numbers(key, missing=_MISSING)
        doubtful += int((marked & np.isfinite(values[key])).sum())
        values[key][marked] = np.nan
    if doubtful:
        rows.note(
            "note",
            "doubtful-values",
            f"{doubtful} values that the source marks as doubtful ('s') were not used.",
        )
    return values


def _convert_units(values: dict[str, FloatArray], name: str) -> None:
    """Convert `values` in place from the edition's units to degC, hPa and kt.

    Raises
    ------
    ArchiveError
        The pressures are missing, or of neither unit.
    """
    pressures = np.concatenate([values[key][np.isfinite(values[key])] for key in _PRESSURES])
    if not len(pressures):
        raise ArchiveError(
            f"{name}: the file has no pressure, so that it cannot be told whether it is in degF "
            "and inches of mercury or in degC and hPa; use a column mapping."
        )
    middle = float(np.median(pressures))
    if _INHG_RANGE[0] <= middle <= _INHG_RANGE[1]:
        for key in _PRESSURES:
            values[key] *= HPA_PER_INHG
        for key in ("temperature_c", "dew_point_c"):
            values[key] = fahrenheit_to_celsius(values[key])
        values["wind_speed_kt"] *= KT_PER_MPH
    elif _HPA_RANGE[0] <= middle <= _HPA_RANGE[1]:
        values["wind_speed_kt"] *= KT_PER_MS
    else:
        raise ArchiveError(
            f"{name}: the middle pressure is {middle:g}; "
            f"{_INHG_RANGE[0]:.0f}-{_INHG_RANGE[1]:.0f} inHg or "
            f"{_HPA_RANGE[0]:.0f}-{_HPA_RANGE[1]:.0f} hPa are possible: use a column mapping."
        )


def _offset_s(about: About, clock: FloatArray, name: str, zone: str | None) -> FloatArray:
    """Local standard time minus UTC for each line, in seconds."""
    offset = np.full(len(clock), np.nan)
    known = np.isfinite(clock)
    if not known.any():
        return offset
    try:
        if zone is None:
            zone = _zone_of(about, name)
        offset[known] = standard_offset_s(zone, clock[known].astype(np.int64))
    except InputError as error:
        raise ArchiveError(f"{name}: {error}") from None
    return offset


def _zone_of(about: About, name: str) -> str:
    """The time zone at the file's coordinates."""
    if about.latitude is None or about.longitude is None:
        raise ArchiveError(
            f"{name}: the times are local standard time and the file has no coordinates to tell "
            "its time zone; give the timezone in stations.csv, or use a column mapping."
        )
    return timezone_at(about.latitude, about.longitude)
