"""Global hourly archive, pipe separated (``ghcnh``).

One station per file, UTC; each quantity has six columns, among them its quality code and
its source.  degC, hPa, m/s, %.

References
----------
NOAA National Centers for Environmental Information, *Global Historical Climatology Network
hourly (GHCNh), version 1, documentation*: columns, units, and the table of quality codes.
The codes were read in a public summary of that document.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np

from climarisk.archives.text import (
    KT_PER_MS,
    About,
    FloatArray,
    Rows,
    clock_seconds,
    each,
    iso_seconds,
    metadata_number,
    not_this_format,
    read_bytes,
    split_line,
    text_lines,
)
from climarisk.observations import PRESSURE_COLUMNS, ArchiveFile

FORM = "ghcnh"
VERSION = 1
SOURCE = "NOAA NCEI, Global Historical Climatology Network hourly (GHCNh)"

#: Column of the file for each column of the canonical table; units but wind are the same.
_VALUES = {
    "temperature_c": "temperature",
    "dew_point_c": "dew_point_temperature",
    "relative_humidity_pct": "relative_humidity",
    "station_pressure_hpa": "station_level_pressure",
    "qnh_hpa": "altimeter",
    "sea_level_pressure_hpa": "sea_level_pressure",
    "wind_direction_deg": "wind_direction",
    "wind_speed_kt": "wind_speed",
}
_TIME = ("year", "month", "day", "hour", "minute")
_STATION = {
    "station": ("station_id", "station"),
    "station_name": ("station_name", "name"),
    "latitude": ("latitude", "lat"),
    "longitude": ("longitude", "lon"),
    "elevation": ("elevation", "elev"),
}
#: Codes for "no value" of the older sources; 999 and 999.9 are possible pressures in hPa.
_MISSING_CODES = (-9999.0, -999.9, 9999.0, 9999.9, 99999.0)
_MISSING_CODES_BUT_PRESSURE = (*_MISSING_CODES, 999.0, 999.9)
#: Digits of the older sources: 2 and 6 suspect, 3 and 7 erroneous; the others passed.
_PASSED_DIGITS = frozenset({"", "0", "1", "4", "5", "9"})
#: Letters of the older sources that tell of an accepted or edited value.
_EDITED_LETTERS = frozenset("AUPIMRC")
#: Source numbers that use the older codes; elsewhere every letter is a failed check.
_OLDER_SOURCES = range(313, 349)


def parse_ghcnh(data: bytes, name: str = "<bytes>") -> ArchiveFile:
    """The hours of a file of the global hourly archive, all three kinds of pressure.

    Values with a quality code that means suspect or erroneous are not used: the digits 2, 3,
    6 and 7, and every letter except the editor's marks A, U, P, I, M, R and C of the older
    sources (313 to 348).

    Parameters
    ----------
    data : bytes
        Plain or gzip, with a DATE column or with Year, Month, Day, Hour and Minute.
    name : str
        For messages.

    Raises
    ------
    ArchiveError
        The file is not of this format, holds several stations, or more than half of it is
        damaged.
    """
    lines = text_lines(data, name)
    header = [h.strip().lower() for h in split_line(lines[0], "|")]
    positions = _positions(header)
    timed = "date" in positions or set(_TIME[:4]) <= positions.keys()
    if not timed or "temperature" not in positions:
        raise not_this_format(
            name, FORM, "a header with '|', a DATE or Year, and temperature", lines[0]
        )
    rows = Rows(name, FORM, lines, 1, "|", positions, width=len(header))
    station = rows.one_station("station")
    if "date" in positions:
        utc = each(iso_seconds, rows.text("date"))
    else:
        minutes = rows.text("minute") if "minute" in positions else ("0",) * len(rows)
        utc = each(_seconds, *(rows.text(k) for k in _TIME[:4]), minutes)
    values, flagged = {}, 0
    for ours, theirs in _VALUES.items():
        pressure = ours in PRESSURE_COLUMNS
        codes = _MISSING_CODES if pressure else _MISSING_CODES_BUT_PRESSURE
        values[ours] = rows.numbers(theirs, codes=codes)
        failed = _failed(rows, theirs) & np.isfinite(values[ours])
        values[ours][failed] = np.nan
        flagged += int(failed.sum())
    values["wind_speed_kt"] = values["wind_speed_kt"] * KT_PER_MS
    if flagged:
        rows.note(
            "note",
            "doubtful-values",
            f"{flagged} values that the source marks as suspect or erroneous were not used.",
        )
    about = About(
        SOURCE,
        station_id=station,
        station_name=rows.last("station_name"),
        latitude=metadata_number(rows.last("latitude")),
        longitude=metadata_number(rows.last("longitude")),
        elevation_m=metadata_number(rows.last("elevation")),
    )
    return rows.to_file(utc, values, about)


def read_ghcnh(path: Path) -> ArchiveFile:
    """`parse_ghcnh` of a file."""
    return parse_ghcnh(read_bytes(path), path.name)


def _positions(header: list[str]) -> dict[str, int]:
    wanted = {key: (key,) for key in ("date", *_TIME)} | _STATION
    for column in _VALUES.values():
        for part in (column, f"{column}_quality_code", f"{column}_source_code"):
            wanted[part] = (part,)
    return {
        key: next(header.index(n) for n in names if n in header)
        for key, names in wanted.items()
        if any(n in header for n in names)
    }


def _seconds(*texts: str) -> float:
    try:
        return clock_seconds(*(int(t) for t in texts))
    except ValueError:
        return float("nan")


def _failed(rows: Rows, column: str) -> np.ndarray:
    """Which values of a column the source holds to be suspect or erroneous."""
    codes, sources = rows.text(f"{column}_quality_code"), rows.text(f"{column}_source_code")
    failed: FloatArray = each(_is_failed, codes, sources)
    return failed.astype(bool)


def _is_failed(code: str, source: str) -> bool:
    code, source = code.strip(), source.strip()
    if code in _PASSED_DIGITS:
        return False
    older = source.isascii() and source.isdigit() and int(source) in _OLDER_SOURCES
    return not (older and code in _EDITED_LETTERS)
