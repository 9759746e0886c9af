"""Typical-year files: EPW (``epw``) and the older CSV layout (``tmy3``).

In both the Year column is the real year of each month, and the hour label 1 to 24 is the
END of the hour in local standard time: 1 is 01:00, 24 is midnight at the end of the day.

References
----------
US DOE, *EnergyPlus Auxiliary Programs*, chapter "Weather Converter Program", EPW data
dictionary (fields, units, missing codes 99.9, 999, 999999).
NREL/TP-581-43156, Wilcox and Marion (2008), *Users Manual for TMY3 Data Sets*, tables 1-1
and 1-2 (fields, units, missing -9900).
"""

from __future__ import annotations

import re
from collections.abc import Sequence
from pathlib import Path

import numpy as np

from climarisk.archives.text import (
    KT_PER_MS,
    About,
    FloatArray,
    Rows,
    clock_seconds,
    each,
    metadata_number,
    not_this_format,
    read_bytes,
    split_line,
    text_lines,
)
from climarisk.errors import ArchiveError
from climarisk.observations import ArchiveFile

VERSION = 1
EPW_SOURCE = "typical-year file (EPW)"
TMY3_SOURCE = "NREL, TMY3 typical-year data"
_PA_PER_HPA = 100.0

#: 0-based positions in an EPW data line.
_EPW = {
    "year": 0,
    "month": 1,
    "day": 2,
    "hour": 3,
    "minute": 4,
    "temperature_c": 6,
    "dew_point_c": 7,
    "relative_humidity_pct": 8,
    "station_pressure_pa": 9,
    "wind_direction_deg": 20,
    "wind_speed_ms": 21,
}
_EPW_MISSING = {
    "temperature_c": 99.9,
    "dew_point_c": 99.9,
    "relative_humidity_pct": 999.0,
    "station_pressure_pa": 999999.0,
    "wind_direction_deg": 999.0,
    "wind_speed_ms": 999.0,
}
_EPW_LINE = re.compile(r"\s*[0-9]{4}\s*,\s*[0-9]{1,2}\s*,\s*[0-9]{1,2}\s*,\s*[0-9]{1,2}\s*,")

#: Beginning of each wanted column name of the CSV layout, lower case.
_TMY3 = {
    "date": "date",
    "time": "time",
    "temperature_c": "dry-bulb (",
    "dew_point_c": "dew-point (",
    "relative_humidity_pct": "rhum (",
    "station_pressure_hpa": "pressure (",
    "wind_direction_deg": "wdir (",
    "wind_speed_ms": "wspd (",
}
_TMY3_MISSING = -9900.0
_US_DATE = re.compile(r"([0-9]{1,2})/([0-9]{1,2})/([0-9]{4})")
_TIME = re.compile(r"([0-9]{1,2}):([0-9]{2})(?::00)?")


def parse_epw(data: bytes, name: str = "<bytes>") -> ArchiveFile:
    """The hours of an EPW file; pressure is station pressure.

    Parameters
    ----------
    data : bytes
        Plain or gzip.
    name : str
        For messages.

    Returns
    -------
    ArchiveFile
        ``typical_year`` is true unless the lines are of one calendar year and of fewer than
        twelve months: those are real months.

    Raises
    ------
    ArchiveError
        The file is not of this format, or more than half of it is damaged.
    """
    lines = text_lines(data, name)
    location = split_line(lines[0], ",")
    if location[0].strip().upper() != "LOCATION" or len(location) < 10:
        raise not_this_format(name, "epw", "a first line 'LOCATION,...'", lines[0])
    start = _first_epw_line(lines)
    rows = Rows(name, "epw", lines, start, ",", _EPW)
    offset_s = _utc_offset_s(location[8], name)
    clock = each(_end_of_hour, *(rows.text(k) for k in ("year", "month", "day", "hour", "minute")))
    values = {key: rows.numbers(key, codes=(code,)) for key, code in _EPW_MISSING.items()}
    values["station_pressure_hpa"] = values.pop("station_pressure_pa") / _PA_PER_HPA
    values["wind_speed_kt"] = values.pop("wind_speed_ms") * KT_PER_MS
    kind = location[4].strip()
    about = About(
        f"{EPW_SOURCE}, {kind}" if kind else EPW_SOURCE,
        station_id=location[5].strip() or None,
        station_name=location[1].strip() or None,
        latitude=metadata_number(location[6]),
        longitude=metadata_number(location[7]),
        elevation_m=metadata_number(location[9]),
        typical_year=_is_typical(clock),
    )
    return rows.to_file(clock - offset_s, values, about)


def read_epw(path: Path) -> ArchiveFile:
    """`parse_epw` of a file."""
    return parse_epw(read_bytes(path), path.name)


def parse_tmy3(data: bytes, name: str = "<bytes>") -> ArchiveFile:
    """The hours of a typical-year file in the CSV layout; pressure is station pressure.

    Parameters
    ----------
    data : bytes
        Plain or gzip.
    name : str
        For messages.

    Returns
    -------
    ArchiveFile
        ``typical_year`` as in `parse_epw`.

    Raises
    ------
    ArchiveError
        The file is not of this format, or more than half of it is damaged.
    """
    lines = text_lines(data, name)
    station = split_line(lines[0], ",")
    header = [h.strip().lower() for h in split_line(lines[1], ",")] if len(lines) > 1 else []
    positions = _tmy3_positions(header)
    if len(station) < 7 or not {"date", "time", "temperature_c"} <= positions.keys():
        raise not_this_format(
            name, "tmy3", "a line of station data and a header 'Date (MM/DD/YYYY),...'", lines[0]
        )
    rows = Rows(name, "tmy3", lines, 2, ",", positions, width=len(header))
    offset_s = _utc_offset_s(station[3], name)
    clock = each(_us_seconds, rows.text("date"), rows.text("time"))
    values = {
        key: rows.numbers(key, codes=(_TMY3_MISSING,))
        for key in _TMY3
        if key not in ("date", "time")
    }
    values["wind_speed_kt"] = values.pop("wind_speed_ms") * KT_PER_MS
    about = About(
        TMY3_SOURCE,
        station_id=station[0].strip() or None,
        station_name=station[1].strip() or None,
        latitude=metadata_number(station[4]),
        longitude=metadata_number(station[5]),
        elevation_m=metadata_number(station[6]),
        typical_year=_is_typical(clock),
    )
    return rows.to_file(clock - offset_s, values, about)


def read_tmy3(path: Path) -> ArchiveFile:
    """`parse_tmy3` of a file."""
    return parse_tmy3(read_bytes(path), path.name)


def _first_epw_line(lines: Sequence[str]) -> int:
    """Index of the line after ``DATA PERIODS``, else of the first that looks like data."""
    for i, line in enumerate(lines):
        if line.upper().startswith("DATA PERIODS"):
            return i + 1
        if _EPW_LINE.match(line):
            return i
    return len(lines)


def _tmy3_positions(header: Sequence[str]) -> dict[str, int]:
    found = {}
    for key, beginning in _TMY3.items():
        hits = [i for i, column in enumerate(header) if column.startswith(beginning)]
        if hits:
            found[key] = hits[0]
    return found


def _utc_offset_s(text: str, name: str) -> float:
    hours = metadata_number(text)
    # The offsets in use on Earth.
    if hours is None or not -12.0 <= hours <= 14.0:
        raise ArchiveError(
            f"{name}, line 1: the time zone is {text.strip()[:20]!r}; hours from UTC between -12 "
            "and 14 are needed: correct the header."
        )
    return hours * 3600.0


def _end_of_hour(year: str, month: str, day: str, hour: str, minute: str) -> float:
    try:
        parts = [int(t) for t in (year, month, day, hour)]
        minutes = int(minute)
    except ValueError:
        return float("nan")
    if not 1 <= parts[3] <= 24:
        return float("nan")
    # Minute 0 and 60 both mean the full hour; others are ends of parts of the hour.
    if minutes not in (0, 60):
        parts = [*parts[:3], parts[3] - 1, minutes]
    return clock_seconds(*parts)


def _us_seconds(date: str, time: str) -> float:
    day, clock = _US_DATE.fullmatch(date.strip()), _TIME.fullmatch(time.strip())
    if day is None or clock is None:
        return float("nan")
    return clock_seconds(int(day[3]), int(day[1]), int(day[2]), int(clock[1]), int(clock[2]))


def _is_typical(clock_end: FloatArray) -> bool:
    """Whether the months are of different years, or make a whole year."""
    # The label is the end of the hour: one second earlier lies inside its month.
    known = clock_end[np.isfinite(clock_end)] - 1.0
    months = np.unique(known.astype("datetime64[s]").astype("datetime64[M]").astype(int))
    return len(np.unique(months // 12)) > 1 or len(np.unique(months % 12)) >= 12
