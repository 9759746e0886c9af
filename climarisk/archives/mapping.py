"""Any delimited text read through a column mapping: a TOML file that says what is where.

Example
-------
.. code-block:: toml

    source = "Provincial weather service, open data"  # attribution, shown in the outputs
    delimiter = ","          # one character, "tab" or "whitespace"
    decimal = "."            # or ","
    encoding = "utf-8"       # default: UTF-8, else Latin-1
    skip_rows = 0            # lines before the header (or before the first data line)
    header = true
    comment = "#"            # lines that begin so are not read
    missing = [-9999, "NA"]

    [time]
    columns = ["Date", "Time"]   # joined by one space; or year, month, day, hour, minute
    format = "%d/%m/%Y %H:%M"    # or "unix seconds"
    zone = "+01:00"              # "UTC", a fixed offset, or an IANA name (clock time)
    hour_label = "instant"       # "end" (24 allowed) or "start" (one hour is added)

    [columns.temperature]
    column = ["AirT", "Temp"]    # the first one that is there; or a position, 1 is the first
    unit = "degC"

Quantities: temperature, dew_point, relative_humidity, station_pressure, qnh,
sea_level_pressure, wind_direction, wind_speed.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping, Sequence
from pathlib import Path
from typing import Annotated, Any, Literal, Self

import numpy as np
from pydantic import AfterValidator, Field, StrictInt, StrictStr, model_validator

from climarisk.archives.text import (
    KT_PER_MPH,
    KT_PER_MS,
    MISSING_WORDS,
    About,
    FloatArray,
    Rows,
    clock_seconds,
    each,
    leave_out_unsure,
    split_line,
    text_lines,
    to_float,
)
from climarisk.archives.timeformat import clock_of_format, format_pattern
from climarisk.errors import ArchiveError, InputError
from climarisk.inputs import Strict, Text, load_toml, nearest, validate
from climarisk.localtime import clock_to_utc_s, zone_info
from climarisk.observations import ArchiveFile
from climarisk.units import (
    HPA_PER_INHG,
    KELVIN_AT_0C,
    METRES_PER_NAUTICAL_MILE,
    fahrenheit_to_celsius,
)

VERSION = 1

_MM_PER_INCH = 25.4
_KT_PER_KM_H = 1000.0 / METRES_PER_NAUTICAL_MILE
_TEMPERATURE: dict[str, Callable[[FloatArray], FloatArray]] = {
    "degC": lambda t: t,
    "degF": fahrenheit_to_celsius,
    "K": lambda t: t - KELVIN_AT_0C,
}
_PRESSURE: dict[str, Callable[[FloatArray], FloatArray]] = {
    "hPa": lambda p: p,
    "Pa": lambda p: p / 100.0,
    "kPa": lambda p: p * 10.0,
    "inHg": lambda p: p * HPA_PER_INHG,
    "mmHg": lambda p: p * (HPA_PER_INHG / _MM_PER_INCH),
}
_SPEED: dict[str, Callable[[FloatArray], FloatArray]] = {
    "m/s": lambda v: v * KT_PER_MS,
    "kt": lambda v: v,
    "km/h": lambda v: v * _KT_PER_KM_H,
    "mph": lambda v: v * KT_PER_MPH,
}
_HUMIDITY: dict[str, Callable[[FloatArray], FloatArray]] = {
    "%": lambda h: h,
    "fraction": lambda h: h * 100.0,
}
_DIRECTION: dict[str, Callable[[FloatArray], FloatArray]] = {"deg": lambda d: d}
#: Column of the canonical table and units of each quantity of a mapping.
_QUANTITIES = {
    "temperature": ("temperature_c", _TEMPERATURE),
    "dew_point": ("dew_point_c", _TEMPERATURE),
    "relative_humidity": ("relative_humidity_pct", _HUMIDITY),
    "station_pressure": ("station_pressure_hpa", _PRESSURE),
    "qnh": ("qnh_hpa", _PRESSURE),
    "sea_level_pressure": ("sea_level_pressure_hpa", _PRESSURE),
    "wind_direction": ("wind_direction_deg", _DIRECTION),
    "wind_speed": ("wind_speed_kt", _SPEED),
}

UNIX_SECONDS = "unix seconds"
_FIXED_OFFSET = re.compile(r"([+-])([0-9]{2}):([0-9]{2})")
_DELIMITERS = {"whitespace": None, "tab": "\t"}


def _delimiter(text: str) -> str:
    if text in _DELIMITERS:
        return text
    if len(text) != 1 or text.isalnum() or text in "\"'\n\r\0.+-":
        raise ValueError('give one character such as "," or ";", or "tab" or "whitespace"')
    return text


def _encoding(text: str) -> str:
    try:
        "".encode(text)
    except (LookupError, UnicodeError, ValueError):
        raise ValueError('give a text encoding such as "utf-8" or "latin-1"') from None
    return text


def _zone(text: str) -> str:
    if _fixed_offset_s(text) is None:
        try:
            zone_info(text)
        except InputError:
            raise ValueError(
                'give "UTC", a fixed offset such as "+01:00", or an IANA name such as '
                '"America/Denver"'
            ) from None
    return text


def _format(text: str) -> str:
    if text != UNIX_SECONDS:
        format_pattern(text)
    return text


_Position = Annotated[StrictInt, Field(ge=1, le=10_000)]
_Name = Annotated[StrictStr, Field(min_length=1, max_length=200)]
_Column = _Position | _Name
_Columns = _Column | Annotated[list[_Column], Field(min_length=1)]


class ValueColumn(Strict):
    """One quantity: its column, or alternatives of which the first present is used, and unit."""

    column: _Columns
    unit: str | None = None


class ValueColumns(Strict):
    """The quantities of a mapping; temperature is required."""

    temperature: ValueColumn
    dew_point: ValueColumn | None = None
    relative_humidity: ValueColumn | None = None
    station_pressure: ValueColumn | None = None
    qnh: ValueColumn | None = None
    sea_level_pressure: ValueColumn | None = None
    wind_direction: ValueColumn | None = None
    wind_speed: ValueColumn | None = None

    @model_validator(mode="after")
    def _units(self) -> Self:
        for name, (_, units) in _QUANTITIES.items():
            given = getattr(self, name)
            if given is None or given.unit in units or (given.unit is None and len(units) == 1):
                continue
            raise ValueError(f"{name}: unit is {given.unit!r}; allowed: {', '.join(units)}")
        return self


class TimeColumns(Strict):
    """Where the time is: columns with a format, or separate columns of its parts."""

    columns: Annotated[list[_Columns], Field(min_length=1, max_length=6)] | None = None
    format: Annotated[str, AfterValidator(_format)] | None = None
    year: _Columns | None = None
    month: _Columns | None = None
    day: _Columns | None = None
    hour: _Columns | None = None
    minute: _Columns | None = None
    zone: Annotated[str, AfterValidator(_zone)] | None = None
    hour_label: Literal["instant", "end", "start"] = "instant"

    @model_validator(mode="after")
    def _one_way(self) -> Self:
        parts = [self.year, self.month, self.day, self.hour]
        if self.columns is not None:
            if any(p is not None for p in [*parts, self.minute]):
                raise ValueError("give either 'columns' with 'format' or year, month, day, hour")
            if self.format is None:
                raise ValueError(f"'format' is missing: a time format or {UNIX_SECONDS!r}")
        elif any(p is None for p in parts):
            raise ValueError("give 'columns' with 'format', or all of year, month, day and hour")
        if self.format == UNIX_SECONDS:
            if self.zone not in (None, "UTC"):
                raise ValueError("unix seconds are UTC; take 'zone' out")
        elif self.zone is None:
            raise ValueError('\'zone\' is missing: "UTC", "+01:00", or an IANA name')
        return self


class ColumnMapping(Strict):
    """How to read one kind of delimited text; see the module's example."""

    source: Text = ""
    delimiter: Annotated[str, AfterValidator(_delimiter)] = ","
    decimal: Literal[".", ","] = "."
    encoding: Annotated[str, AfterValidator(_encoding)] | None = None
    skip_rows: Annotated[int, Field(ge=0, le=100_000)] = 0
    header: bool = True
    comment: Annotated[str, Field(min_length=1, max_length=10)] | None = None
    missing: list[int | float | str] = Field(default_factory=list)
    time: TimeColumns
    columns: ValueColumns

    @model_validator(mode="after")
    def _distinct_marks(self) -> Self:
        if self.delimiter == self.decimal:
            raise ValueError("delimiter and decimal are the same character")
        if not self.header:
            named = [c for group in self._all_columns().values() for c in group if type(c) is str]
            if named:
                raise ValueError(
                    f"there is no header, so columns must be positions, not {named[0]!r}"
                )
        return self

    def _all_columns(self) -> dict[str, list[int | str]]:
        """Alternatives of each column by the key used while reading."""
        wanted = {name: getattr(self.columns, name) for name in _QUANTITIES}
        given = {key: value.column for key, value in wanted.items() if value is not None}
        for i, column in enumerate(self.time.columns or ()):
            given[f"time {i}"] = column
        for part in ("year", "month", "day", "hour", "minute"):
            if getattr(self.time, part) is not None:
                given[part] = getattr(self.time, part)
        return {key: c if isinstance(c, list) else [c] for key, c in given.items()}


def parse_mapping(content: Mapping[str, Any], where: str = "<mapping>") -> ColumnMapping:
    """A column mapping from the content of its TOML file.

    Raises
    ------
    InputError
        Every unknown key, missing key and value that is not allowed.
    """
    problems: list[str] = []
    mapping = validate(ColumnMapping, content, where, problems)
    if mapping is None:
        raise InputError(problems)
    return mapping


def read_mapping(path: Path) -> ColumnMapping:
    """`parse_mapping` of a TOML file.

    Raises
    ------
    InputError
        The file is absent, not TOML, or not a mapping.
    """
    return parse_mapping(load_toml(path), str(path))


def parse_mapped(data: bytes, mapping: ColumnMapping, name: str = "<bytes>") -> ArchiveFile:
    """The hours of a delimited text file read through a column mapping.

    Parameters
    ----------
    data : bytes
        Plain or gzip.
    mapping : ColumnMapping
    name : str
        For messages.

    Raises
    ------
    ArchiveError
        The file lacks a column of the mapping, or more than half of it is damaged.
    """
    lines = text_lines(data, name, mapping.encoding)
    if mapping.comment:
        # Emptied, not removed: the line numbers of messages stay those of the file.
        lines = ["" if line.startswith(mapping.comment) else line for line in lines]
    delimiter = _DELIMITERS.get(mapping.delimiter, mapping.delimiter)
    start = mapping.skip_rows
    header: list[str] | None = None
    if mapping.header:
        top = next((i for i, line in enumerate(lines[start:], start) if line.strip()), None)
        if top is None:
            raise ArchiveError(f"{name}: there is no header line after {start} skipped lines.")
        header = [field.strip() for field in split_line(lines[top], delimiter)]
        start = top + 1
    positions = _positions(mapping, header, name)
    width = len(header) if header else None
    rows = Rows(name, "column mapping", lines, start, delimiter, positions, width=width)
    codes = [
        v for v in (to_float(str(m), mapping.decimal) for m in mapping.missing) if np.isfinite(v)
    ]
    words = MISSING_WORDS | {str(m).strip() for m in mapping.missing}
    values: dict[str, FloatArray] = {}
    for quantity, (column, units) in _QUANTITIES.items():
        given = getattr(mapping.columns, quantity)
        if given is not None:
            raw = rows.numbers(quantity, codes=codes, decimal=mapping.decimal, missing=words)
            values[column] = units[given.unit or next(iter(units))](raw)
    utc = _utc_seconds(rows, mapping.time)
    return rows.to_file(utc, values, About(mapping.source or "delimited text, source not stated"))


def _positions(mapping: ColumnMapping, header: list[str] | None, name: str) -> dict[str, int]:
    found: dict[str, int] = {}
    problems: list[str] = []
    for key, choices in mapping._all_columns().items():
        hits = [
            c - 1 if isinstance(c, int) else (header or []).index(c)
            for c in choices
            if isinstance(c, int) or c in (header or [])
        ]
        if hits:
            found[key] = hits[0]
        else:
            shown = " or ".join(repr(c) for c in choices)
            problems.append(
                f"{name}: the column {shown} of the mapping ({key}) is not in the header; "
                f"{nearest(str(choices[0]), header or [])}"
            )
    if problems:
        raise ArchiveError("\n".join(problems))
    return found


def _utc_seconds(rows: Rows, time: TimeColumns) -> FloatArray:
    """UTC seconds of each line; NaN where the time cannot be read."""
    clock = _clock(rows, time)
    added = 3600.0 if time.hour_label == "start" else 0.0
    offset_s = 0.0 if time.zone is None else _fixed_offset_s(time.zone)
    if offset_s is not None:
        return clock - offset_s + added
    utc = clock_to_utc_s(time.zone or "UTC", clock)
    leave_out_unsure(rows, clock, utc)
    return np.where(rows.left_out, 0.0, utc) + added


def _clock(rows: Rows, time: TimeColumns) -> FloatArray:
    last_hour = 24 if time.hour_label == "end" else 23
    if time.columns is None:
        parts = [rows.text(key) for key in ("year", "month", "day", "hour")]
        minutes = rows.text("minute") if time.minute is not None else ("0",) * len(rows)
        return each(lambda *texts: _from_parts(texts, last_hour), *parts, minutes)
    columns = [rows.text(f"time {i}") for i in range(len(time.columns))]
    if time.format == UNIX_SECONDS:
        return each(_unix_seconds, columns[0])
    pattern = format_pattern(time.format or "")
    return each(
        lambda *texts: clock_of_format(" ".join(t.strip() for t in texts), pattern, last_hour),
        *columns,
    )


def _unix_seconds(text: str) -> float:
    value = to_float(text)
    # Years 1901 to 2199: milliseconds or day numbers are no seconds.
    return float(np.floor(value)) if -2.2e9 < value < 7.3e9 and value != 0.0 else np.nan


def _from_parts(texts: Sequence[str], last_hour: int) -> float:
    numbers = [to_float(t, missing=frozenset()) for t in texts]
    if not all(np.isfinite(n) and n.is_integer() for n in numbers) or numbers[3] > last_hour:
        return np.nan
    return clock_seconds(*(int(n) for n in numbers))


def _fixed_offset_s(zone: str) -> float | None:
    """Seconds of ``UTC`` or a fixed offset; None for another zone."""
    if zone == "UTC":
        return 0.0
    match = _FIXED_OFFSET.fullmatch(zone)
    if match is None or int(match[2]) > 14 or int(match[3]) > 59:
        return None
    sign = -1.0 if match[1] == "-" else 1.0
    return sign * (int(match[2]) * 3600.0 + int(match[3]) * 60.0)
