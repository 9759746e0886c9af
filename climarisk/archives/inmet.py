"""Hourly CSV files of the Brazilian national meteorological service (``inmet``).

Semicolons, decimal comma (numbers such as ``,5`` too), UTC hours.  Columns are found by
name, whatever the encoding did to the accents; where a name cannot be told the standard
order of the nineteen columns is used.

References
----------
Instituto Nacional de Meteorologia (INMET), *Dados historicos anuais*: yearly station files
with eight lines of metadata; the order of columns is that of their header.
"""

from __future__ import annotations

import re
import unicodedata
from pathlib import Path

from climarisk.archives.text import (
    KT_PER_MS,
    About,
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

FORM = "inmet"
VERSION = 1
SOURCE = "INMET, Instituto Nacional de Meteorologia (Brazil), open data"

#: Standard position of each wanted column among the nineteen.
_STANDARD = {
    "date": 0,
    "hour": 1,
    "station_pressure_hpa": 3,
    "temperature_c": 7,
    "dew_point_c": 8,
    "relative_humidity_pct": 15,
    "wind_direction_deg": 16,
    "wind_speed_kt": 18,
}
_STANDARD_WIDTH = 19
#: How each name looks once reduced to ASCII letters; accented letters may be lost.
_NAMES = {
    "date": re.compile(r"^DATA"),
    "hour": re.compile(r"^HORA"),
    "station_pressure_hpa": re.compile(r"PRESS.*(NIVEL|ESTA|HOR.?RI)"),
    "temperature_c": re.compile(r"BULBO|SECO"),
    "dew_point_c": re.compile(r"ORVALHO"),
    "relative_humidity_pct": re.compile(r"UMID"),
    "wind_direction_deg": re.compile(r"VENTO.*DIRE"),
    "wind_speed_kt": re.compile(r"VENTO.*VELOC"),
}
#: Extremes of the previous hour, never wanted: "... MAX. NA HORA ANT.".
_EXTREME = re.compile(r"HORAANT|MAX|MIN|M.?XIM|M.?NIM")
_MISSING_CODE = -9999.0

_YEAR_FIRST = re.compile(r"([0-9]{4})[-/]([0-9]{1,2})[-/]([0-9]{1,2})")
_DAY_FIRST = re.compile(r"([0-9]{1,2})[-/]([0-9]{1,2})[-/]([0-9]{4})")
_HOUR = re.compile(r"([0-9]{1,2}):([0-9]{2})(?::[0-9]{2})?|([0-9]{3,4})|([0-9]{1,2})")


def parse_inmet(data: bytes, name: str = "<bytes>") -> ArchiveFile:
    """The hours of a national-service hourly CSV; pressure is station pressure.

    Parameters
    ----------
    data : bytes
        Plain or gzip; Latin-1 or UTF-8; with the eight metadata lines or without, with a
        header line or without.
    name : str
        For messages.

    Raises
    ------
    ArchiveError
        The file is not of this format, has no temperature column, or more than half of it
        is damaged.
    """
    lines = text_lines(data, name)
    first = next((i for i, line in enumerate(lines) if _is_data(line)), None)
    if first is None:
        came = next(line for line in lines if line.strip())
        raise not_this_format(name, FORM, "lines that begin 'date;hour;'", came)
    top = _header_index(lines[:first])
    # Lines between the header and the first good one are damaged, not part of the header.
    start = first if top is None else top + 1
    header = None if top is None else lines[top]
    positions, by_position = _positions(header, lines[first], name)
    rows = Rows(name, FORM, lines, start, ";", positions)
    if by_position:
        rows.note(
            "note",
            "columns-by-position",
            f"the columns {', '.join(by_position)} were taken by their standard position because "
            "their names cannot be told.",
        )

    def numbers(key):
        return rows.numbers(key, codes=(_MISSING_CODE,), decimal=",")

    utc = each(_seconds, rows.text("date"), rows.text("hour"))
    values = {key: numbers(key) for key in _STANDARD if key not in ("date", "hour")}
    values["wind_speed_kt"] = values["wind_speed_kt"] * KT_PER_MS
    return rows.to_file(utc, values, _about(lines[:start]))


def read_inmet(path: Path) -> ArchiveFile:
    """`parse_inmet` of a file."""
    return parse_inmet(read_bytes(path), path.name)


def _is_data(line: str) -> bool:
    first, separator, _ = line.partition(";")
    return bool(separator) and bool(_YEAR_FIRST.match(first.strip()) or _DAY_FIRST.match(first))


def _header_index(lines: list[str]) -> int | None:
    """Index of the header among the lines before the data; None if there is none."""
    wide = [i for i, line in enumerate(lines) if line.count(";") >= 4]
    named = [i for i in wide if _NAMES["date"].search(_letters(lines[i].partition(";")[0]))]
    return next(reversed(named or wide), None)


def _letters(text: str) -> str:
    """Upper-case ASCII letters of a text, accents removed."""
    plain = unicodedata.normalize("NFKD", text).encode("ascii", "ignore").decode("ascii")
    return re.sub(r"[^A-Z]", "", plain.upper())


def _positions(header: str | None, first: str, name: str) -> tuple[dict[str, int], list[str]]:
    """Index of each wanted column, and the keys that were taken by standard position."""
    names = [_letters(f) for f in split_line(header, ";")] if header else []
    width = len(names) if header else len(split_line(first, ";"))
    found: dict[str, int] = {}
    by_position: list[str] = []
    for key, pattern in _NAMES.items():
        hits = [i for i, n in enumerate(names) if pattern.search(n) and not _EXTREME.search(n)]
        if len(hits) == 1:
            found[key] = hits[0]
        elif width >= _STANDARD_WIDTH:
            found[key] = _STANDARD[key]
            by_position.append(key)
    for key in ("date", "hour", "temperature_c"):
        if key not in found:
            raise ArchiveError(
                f"{name}: the column of the {key.removesuffix('_c')} cannot be found by its name, "
                f"and {width} columns came where the standard order has {_STANDARD_WIDTH}; "
                "use a column mapping."
            )
    return found, by_position


def _seconds(date: str, hour: str) -> float:
    date, hour = date.strip(), hour.upper().replace("UTC", "").strip()
    clock = _HOUR.fullmatch(hour)
    if clock is None:
        return float("nan")
    if clock[3]:
        hours, minutes = divmod(int(clock[3]), 100)
    else:
        hours, minutes = int(clock[1] or clock[4]), int(clock[2] or 0)
    if match := _YEAR_FIRST.fullmatch(date):
        year, month, day = (int(g) for g in match.groups())
    elif match := _DAY_FIRST.fullmatch(date):
        day, month, year = (int(g) for g in match.groups())
    else:
        return float("nan")
    return clock_seconds(year, month, day, hours, minutes)


def _about(lines: list[str]) -> About:
    """Station of the metadata lines ``KEY:;value`` or ``Key: value``."""
    values: dict[str, str] = {}
    for line in lines:
        match = re.fullmatch(r"\s*([^:;]+)[:;]+\s*([^;]*?)[;\s]*", line)
        if match:
            values.setdefault(_letters(match[1]), match[2].strip())

    def value(pattern: str) -> str | None:
        return next((v for k, v in values.items() if re.match(pattern, k) and v), None)

    return About(
        SOURCE,
        station_id=value("CO?D"),
        station_name=value("ESTA|NOME"),
        latitude=metadata_number(value("LAT")),
        longitude=metadata_number(value("LON")),
        elevation_m=metadata_number(value("ALT")),
    )
