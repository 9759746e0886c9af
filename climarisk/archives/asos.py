"""Delimited archive text of airport weather reports, METAR (``asos``).

A header line ``station,valid,...``, comma or tab, comment lines ``#`` before it.  Times are
UTC unless a comment or a column names another zone.  ``tmpf dwpf`` degF (or ``tmpc dwpc``
degC), ``relh`` %, ``drct`` degrees, ``sknt`` kt, ``alti`` altimeter setting in inches of
mercury, ``mslp`` sea-level pressure in hPa; missing is ``M``, ``null`` or empty.

References
----------
Column meanings and units as the archives print them above their data (common practice, no
standard); report contents: WMO-No. 306, FM 15 METAR.
"""

from __future__ import annotations

import re
from collections.abc import Sequence
from pathlib import Path

import numpy as np

from climarisk.archives.text import (
    MISSING_WORDS,
    About,
    FloatArray,
    Rows,
    each,
    iso_seconds,
    leave_out_unsure,
    metadata_number,
    not_this_format,
    read_bytes,
    split_line,
    text_lines,
)
from climarisk.errors import ArchiveError, InputError
from climarisk.localtime import clock_to_utc_s
from climarisk.observations import ArchiveFile
from climarisk.units import HPA_PER_INHG, fahrenheit_to_celsius

FORM = "asos"
VERSION = 1
SOURCE = "archive of airport weather reports (METAR)"

_COLUMNS = (
    *("station", "valid", "tmpf", "tmpc", "dwpf", "dwpc", "relh", "drct", "sknt", "alti", "mslp"),
    *("lat", "latitude", "lon", "longitude", "elevation", "elev", "tz", "timezone"),
)
_MISSING = MISSING_WORDS | {"T", "VRB", "Null"}
_UTC_NAMES = frozenset({"", "UTC", "GMT", "Z", "ETC/UTC", "ETC/GMT"})
_ZONE_COMMENT = re.compile(
    r"(?i)^[#\s]*(?:tz|time\s?zone)\b[^A-Za-z]*([A-Za-z_]+(?:/[A-Za-z_+0-9-]+)*)"
)


def parse_asos(data: bytes, name: str = "<bytes>") -> ArchiveFile:
    """The hours of an archive of airport reports, with QNH and sea-level pressure.

    Parameters
    ----------
    data : bytes
        Plain or gzip.
    name : str
        For messages.

    Raises
    ------
    ArchiveError
        The file is not of this format, holds several stations, names an unknown time zone,
        or more than half of it is damaged.
    """
    lines = text_lines(data, name)
    top = next((i for i, t in enumerate(lines) if t.strip() and not t.lstrip().startswith("#")), 0)
    delimiter = "\t" if "\t" in lines[top] else ","
    header = [h.strip().lower() for h in split_line(lines[top], delimiter)]
    zone = _zone_of_header(header, lines[:top])
    header = ["valid" if h.startswith("valid(") else h for h in header]
    positions = {key: header.index(key) for key in _COLUMNS if key in header}
    if "valid" not in positions or not {"tmpf", "tmpc"} & positions.keys():
        raise not_this_format(name, FORM, "a header 'station,valid,tmpf,...'", lines[top])
    # The text of a report may hold commas, so a long line is no damage.
    rows = Rows(name, FORM, lines, top + 1, delimiter, positions)
    station = rows.one_station("station")
    values = {
        "temperature_c": _temperature(rows, "tmp"),
        "dew_point_c": _temperature(rows, "dwp"),
        "relative_humidity_pct": rows.numbers("relh", missing=_MISSING),
        "qnh_hpa": rows.numbers("alti", missing=_MISSING) * HPA_PER_INHG,
        "sea_level_pressure_hpa": rows.numbers("mslp", missing=_MISSING),
        "wind_direction_deg": rows.numbers("drct", missing=_MISSING),
        "wind_speed_kt": rows.numbers("sknt", missing=_MISSING),
    }
    about = About(
        SOURCE,
        station_id=station,
        latitude=metadata_number(rows.last("lat") or rows.last("latitude")),
        longitude=metadata_number(rows.last("lon") or rows.last("longitude")),
        elevation_m=metadata_number(rows.last("elevation") or rows.last("elev")),
    )
    clock = each(iso_seconds, rows.text("valid"))
    return rows.to_file(_utc(rows, clock, zone), values, about)


def read_asos(path: Path) -> ArchiveFile:
    """`parse_asos` of a file."""
    return parse_asos(read_bytes(path), path.name)


def _temperature(rows: Rows, key: str) -> FloatArray:
    if f"{key}f" in rows.columns:
        return fahrenheit_to_celsius(rows.numbers(f"{key}f", missing=_MISSING))
    return rows.numbers(f"{key}c", missing=_MISSING)


def _zone_of_header(header: Sequence[str], comments: Sequence[str]) -> str:
    """Time zone named in ``valid(...)`` or in a comment; empty for none."""
    for column in header:
        if column.startswith("valid("):
            return column.removeprefix("valid(").rstrip(")").strip()
    for comment in comments:
        match = _ZONE_COMMENT.match(comment)
        if match:
            return match[1]
    return ""


def _utc(rows: Rows, clock: FloatArray, zone: str) -> FloatArray:
    """UTC seconds of the clock times; times a clock change makes unsure are left out."""
    key = "tz" if "tz" in rows.columns else "timezone"
    zones = {t.strip() for t in rows.text(key)} - {""}
    if len(zones) > 1:
        raise ArchiveError(
            f"{rows.name}: the column {key!r} names {len(zones)} time zones; one is allowed: "
            "make one file per station."
        )
    zone = zones.pop() if zones else zone
    if zone.upper() in _UTC_NAMES:
        return clock
    try:
        utc = clock_to_utc_s(_spelt(zone), clock)
    except InputError as error:
        raise ArchiveError(f"{rows.name}: {error}") from None
    leave_out_unsure(rows, clock, utc)
    return np.where(rows.left_out, 0.0, utc)


def _spelt(zone: str) -> str:
    """The IANA spelling of a zone whatever its case (a header is read in lower case)."""
    from zoneinfo import available_timezones

    return next((z for z in available_timezones() if z.lower() == zone.lower()), zone)
