"""Light fixed-width hourly subset of the global surface archive (``isd-lite``).

Twelve whole numbers per line: year, month, day, hour (UTC), air temperature and dew point
in tenths of a degree Celsius, SEA-LEVEL pressure in tenths of a hectopascal, wind direction
in degrees, wind speed in tenths of a metre per second, sky cover, two precipitation depths.
Missing is -9999.

References
----------
NOAA National Centers for Environmental Information, *Integrated Surface Data Lite format*.
"""

from __future__ import annotations

import re
from pathlib import Path

from climarisk.archives.text import (
    KT_PER_MS,
    About,
    Rows,
    clock_seconds,
    each,
    not_this_format,
    read_bytes,
    text_lines,
)
from climarisk.observations import ArchiveFile

FORM = "isd-lite"
VERSION = 1
SOURCE = "NOAA NCEI, Integrated Surface Database, light hourly subset"

_KEYS = (
    *("year", "month", "day", "hour", "temperature", "dew_point", "pressure"),
    *("direction", "speed", "sky", "rain1", "rain6"),
)
_LINE = re.compile(r"\s*[0-9]{4}(\s+-?[0-9]+){3,}\s*")


def parse_isd_lite(data: bytes, name: str = "<bytes>") -> ArchiveFile:
    """The hours of a light fixed-width file; pressure is sea-level pressure.

    Parameters
    ----------
    data : bytes
        Plain or gzip.
    name : str
        For messages; six leading digits become the station identifier.

    Raises
    ------
    ArchiveError
        The file is not of this format, or more than half of it is damaged.
    """
    lines = text_lines(data, name)
    if not any(_LINE.fullmatch(line) for line in lines):
        came = next(line for line in lines if line.strip())
        raise not_this_format(name, FORM, "lines of twelve whole numbers", came)
    positions = {key: i for i, key in enumerate(_KEYS)}
    rows = Rows(name, FORM, lines, 0, None, positions, width=len(_KEYS))

    def tenths(key):
        return rows.numbers(key, codes=(-9999,), missing=frozenset()) / 10.0

    parts = [rows.numbers(key, missing=frozenset()) for key in _KEYS[:4]]
    utc = each(_seconds, *(part.tolist() for part in parts))
    values = {
        "temperature_c": tenths("temperature"),
        "dew_point_c": tenths("dew_point"),
        "sea_level_pressure_hpa": tenths("pressure"),
        "wind_direction_deg": rows.numbers("direction", codes=(-9999,)),
        "wind_speed_kt": tenths("speed") * KT_PER_MS,
    }
    station = re.match(r"([0-9]{6})", Path(name).name)
    return rows.to_file(utc, values, About(SOURCE, station_id=station and station.group(1)))


def _seconds(year: float, month: float, day: float, hour: float) -> float:
    parts = (year, month, day, hour)
    if not all(part == part and part.is_integer() for part in parts):
        return float("nan")
    # Hours are 0 to 23 here; 24 is damage.
    return clock_seconds(*(int(p) for p in parts)) if hour < 24 else float("nan")


def read_isd_lite(path: Path) -> ArchiveFile:
    """`parse_isd_lite` of a file."""
    return parse_isd_lite(read_bytes(path), path.name)
