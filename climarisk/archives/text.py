"""What the text archives share: unpacking, damaged lines, numbers, dates, the way to hours."""

from __future__ import annotations

import csv
import re
import zlib
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from datetime import datetime
from operator import itemgetter
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from climarisk.errors import ArchiveError
from climarisk.findings import Severity
from climarisk.observations import ArchiveFile, assign_to_hours
from climarisk.units import METRES_PER_FOOT, METRES_PER_NAUTICAL_MILE, MS_PER_KT

#: A compressed file that unpacks to more than this is refused.
MAX_BYTES = 512 * 2**20
#: Words that stand for "no value" in every archive.
MISSING_WORDS = frozenset({"", "NA", "N/A", "NaN", "nan", "NULL", "null", "None", "M", "-", "--"})

KT_PER_MS = 1.0 / MS_PER_KT
FEET_PER_STATUTE_MILE = 5280.0
KT_PER_MPH = FEET_PER_STATUTE_MILE * METRES_PER_FOOT / METRES_PER_NAUTICAL_MILE

_NUMBER = re.compile(r"[+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]{1,2})?")
_LARGEST_NUMBER = 1e12
_EPOCH = datetime(1970, 1, 1)
_FIRST_YEAR, _LAST_YEAR = 1750, 2200
_ISO = re.compile(
    r"([0-9]{4})[-/]([0-9]{1,2})[-/]([0-9]{1,2})[T ]([0-9]{1,2}):([0-9]{2})"
    r"(?::([0-9]{2})(?:\.[0-9]+)?)?(?:Z|\+00:?00)?"
)

Note = tuple[Severity, str, str]
FloatArray = NDArray[np.float64]


def read_bytes(path: Path) -> bytes:
    """The bytes of an archive file.

    Raises
    ------
    ArchiveError
        The file is absent or cannot be read.
    """
    try:
        return path.read_bytes()
    except (OSError, ValueError) as error:
        raise ArchiveError(
            f"{path}: the archive file cannot be read ({error}); check the name and the folder."
        ) from None


def _unpacked(data: bytes, name: str, max_bytes: int) -> bytes:
    """`data`, unpacked if its first bytes say gzip; several members are joined."""
    parts: list[bytes] = []
    size = 0
    while data[:2] == b"\x1f\x8b":
        member = zlib.decompressobj(wbits=31)
        try:
            part = member.decompress(data, max_bytes - size + 1)
        except zlib.error as error:
            raise ArchiveError(
                f"{name}: the gzip data are damaged ({error}); fetch the file again."
            ) from None
        size += len(part)
        if size > max_bytes:
            raise ArchiveError(
                f"{name}: the file unpacks to more than {max_bytes:,} bytes, the most that is "
                "read; split it by year."
            )
        if not member.eof:
            raise ArchiveError(f"{name}: the gzip data end too early; fetch the file again.")
        parts.append(part)
        data = member.unused_data
    return b"".join(parts) if parts else data


def text_lines(
    data: bytes, name: str, encoding: str | None = None, max_bytes: int = MAX_BYTES
) -> list[str]:
    """The lines of a text file, unpacked and decoded, without their line ends.

    Parameters
    ----------
    data : bytes
        Plain or gzip, told by content.
    name : str
        For messages.
    encoding : str, optional
        Default: UTF-8 (byte-order mark removed), else Latin-1.
    max_bytes : int
        Most bytes a gzip file may unpack to.

    Raises
    ------
    ArchiveError
        The file is empty, damaged gzip, too large, binary, or not in `encoding`.
    """
    data = _unpacked(data, name, max_bytes)
    try:
        text = data.decode(encoding or "utf-8-sig")
    except (UnicodeError, LookupError) as error:
        if encoding is not None:
            raise ArchiveError(
                f"{name}: the text is not {encoding!r} ({error}); correct the mapping's 'encoding'."
            ) from None
        text = data.decode("latin-1")
    text = text.removeprefix("\ufeff")
    if not text.strip():
        raise ArchiveError(f"{name}: the file is empty; fetch it again or take it out.")
    if "\x00" in text:
        raise ArchiveError(f"{name}: the file is binary; a text file (plain or .gz) is needed.")
    # str.splitlines would also split at NEL, which Latin-1 files may hold inside a word.
    return text.replace("\r\n", "\n").replace("\r", "\n").split("\n")


def not_this_format(name: str, form: str, expected: str, came: str = "") -> ArchiveError:
    """The error for a file of another format."""
    seen = f", but found {came[:60]!r}" if came.strip() else ""
    return ArchiveError(
        f"{name}: this is not a file of the format {form!r}: expected {expected}{seen}; correct "
        "the archive column of stations.csv."
    )


def split_line(line: str, delimiter: str | None) -> list[str]:
    """The fields of one line; a quoted field may hold the delimiter, never a line end.

    A ``delimiter`` of None means any white space.
    """
    if delimiter is None:
        return line.split()
    if '"' not in line:
        return line.split(delimiter)
    try:
        return next(csv.reader([line], delimiter=delimiter), [])
    except csv.Error:
        return []


def to_float(text: str, decimal: str = ".", missing: frozenset[str] = MISSING_WORDS) -> float:
    """A number; NaN for a word that means missing; infinity for a text that is no number."""
    text = text.strip()
    if text in missing:
        return np.nan
    if decimal != ".":
        text = text.replace(decimal, ".")
    if _NUMBER.fullmatch(text) is None:
        return np.inf
    value = float(text)
    return value if abs(value) < _LARGEST_NUMBER else np.inf


def metadata_number(text: str | None, decimal: str = ".") -> float | None:
    """A number of a file's header or metadata column; None if it is missing or unreadable."""
    value = to_float((text or "").replace(",", "."), decimal)
    # -999.9 and -9999 stand for an unknown elevation or coordinate.
    return value if np.isfinite(value) and abs(value) < 9999.0 and value > -999.0 else None


def clock_seconds(
    year: int, month: int, day: int, hour: int = 0, minute: int = 0, second: int = 0
) -> float:
    """Seconds from 1970-01-01 to a date and time; NaN if there is no such date or time.

    Hour 24 is allowed with minute and second 0: midnight at the end of the day.
    """
    if not (_FIRST_YEAR <= year <= _LAST_YEAR and 0 <= minute < 60 and 0 <= second <= 60):
        return np.nan
    if not (0 <= hour < 24 or (hour == 24 and minute == 0 and second == 0)):
        return np.nan
    try:
        days = (datetime(year, month, day) - _EPOCH).days
    except (ValueError, OverflowError):
        return np.nan
    return days * 86400.0 + hour * 3600.0 + minute * 60.0 + second


def iso_seconds(text: str) -> float:
    """Seconds from 1970-01-01 to ``YYYY-MM-DD HH:MM[:SS]`` (or with a T); NaN if unreadable."""
    match = _ISO.fullmatch(text.strip())
    return np.nan if match is None else clock_seconds(*(int(g or 0) for g in match.groups()))


def each(function: Callable[..., float], *columns: Sequence[Any]) -> FloatArray:
    """`function` of each row of `columns`, computed once per distinct row."""
    known: dict[Any, float] = {}
    result = np.empty(len(columns[0]))
    for i, row in enumerate(zip(*columns, strict=True)):
        value = known.get(row)
        if value is None:
            value = known[row] = function(*row)
        result[i] = value
    return result


@dataclass(frozen=True)
class About:
    """What a file says of itself and of its station; see `ArchiveFile`."""

    source: str
    station_id: str | None = None
    station_name: str | None = None
    latitude: float | None = None
    longitude: float | None = None
    elevation_m: float | None = None
    typical_year: bool = False


class Rows:
    """The wanted columns of a text file, and which of its lines are damaged.

    Parameters
    ----------
    name, form : str
        Name of the file and of its format, for messages.
    lines : sequence of str
        All lines of the file.
    start : int
        Index of the first data line.
    delimiter : str or None
        None: white space.
    positions : mapping of str to int
        Index of the column of each key.
    width : int, optional
        Most columns a line may fill; a line that fills more is damaged.
    """

    def __init__(
        self,
        name: str,
        form: str,
        lines: Sequence[str],
        start: int,
        delimiter: str | None,
        positions: Mapping[str, int],
        width: int | None = None,
    ) -> None:
        self.name, self.form = name, form
        self.notes: list[Note] = []
        # itemgetter gives a tuple only for two keys or more.
        pick = itemgetter(*positions.values(), 0)
        needed = max(positions.values()) + 1
        numbers: list[int] = []
        kept: list[tuple[str, ...]] = []
        self._short: list[int] = []
        for number, line in enumerate(lines[start:], start + 1):
            if not line or line.isspace():
                continue
            fields = split_line(line, delimiter)
            if len(fields) < needed or (width and any(f.strip() for f in fields[width:])):
                self._short.append(number)
                continue
            numbers.append(number)
            kept.append(pick(fields))
        self.line_numbers = np.array(numbers, dtype=np.int64)
        columns = list(zip(*kept, strict=True)) if kept else [()] * (len(positions) + 1)
        self.columns: dict[str, tuple[str, ...]] = dict(zip(positions, columns, strict=False))
        self.bad = np.zeros(len(kept), dtype=bool)
        self.left_out = np.zeros(len(kept), dtype=bool)
        self._lines = lines
        if not kept:
            self._judge_damage()

    def __len__(self) -> int:
        """Lines read, the damaged ones with too few fields not counted."""
        return len(self.line_numbers)

    def text(self, key: str) -> tuple[str, ...]:
        """The texts of a column; empty texts if the file has no such column."""
        return self.columns.get(key, ("",) * len(self))

    def numbers(
        self,
        key: str,
        *,
        codes: Sequence[float] = (),
        decimal: str = ".",
        missing: frozenset[str] = MISSING_WORDS,
    ) -> FloatArray:
        """A column as numbers; NaN for missing words and `codes`.

        A text that is neither a number nor a missing word marks its line as damaged.
        """
        if key not in self.columns:
            return np.full(len(self), np.nan)
        values = each(lambda text: to_float(text, decimal, missing), self.columns[key])
        unreadable = np.isinf(values)
        self.bad |= unreadable
        values[unreadable | np.isin(values, codes)] = np.nan
        return values

    def last(self, key: str) -> str | None:
        """The last text of a column that is not empty."""
        texts = (t.strip() for t in reversed(self.columns.get(key, ())))
        return next((t for t in texts if t), None)

    def one_station(self, key: str) -> str | None:
        """The one station identifier of the file.

        Raises
        ------
        ArchiveError
            The file holds several stations.
        """
        stations = sorted({t.strip() for t in self.columns.get(key, ()) if t.strip()})
        if len(stations) > 1:
            shown = ", ".join(s[:20] for s in stations[:5])
            more = f" and {len(stations) - 5} more" if len(stations) > 5 else ""
            raise ArchiveError(
                f"{self.name}: the file holds {len(stations)} stations ({shown}{more}); one is "
                "allowed: make one file per station."
            )
        return stations[0] if stations else None

    def note(self, severity: Severity, check: str, message: str) -> None:
        """Add something the user should know, told with the file's name."""
        self.notes.append((severity, check, f"{self.name}: {message}"))

    def to_file(
        self, utc_seconds: FloatArray, values: Mapping[str, FloatArray], about: About
    ) -> ArchiveFile:
        """The canonical hours of the readable lines.

        Raises
        ------
        ArchiveError
            No line, or less than half of the lines, can be read.
        """
        self.bad |= ~np.isfinite(utc_seconds)
        self._judge_damage()
        use = ~(self.bad | self.left_out)
        index = pd.to_datetime(utc_seconds[use].astype(np.int64), unit="s", utc=True)
        table = {column: v[use] for column, v in values.items()}
        hours, repeated = assign_to_hours(pd.DataFrame(table, index=index))
        if repeated:
            self.note(
                "note",
                "repeated-reports",
                f"{repeated} reports were left out because another has the same time.",
            )
        if not len(hours):
            self.note("caution", "no-temperature", "no line has an air temperature.")
        return ArchiveFile(hours=hours, notes=tuple(self.notes), **vars(about))

    def _judge_damage(self) -> None:
        damaged = sorted([*self._short, *self.line_numbers[self.bad].tolist()])
        total = len(self) + len(self._short)
        if not total:
            raise ArchiveError(
                f"{self.name}: the file has no line of data; fetch it again or take it out."
            )
        if not damaged:
            return
        first = damaged[0]
        shown = self._lines[first - 1].strip()[:60]
        if 2 * len(damaged) > total:
            raise ArchiveError(
                f"{self.name}: {len(damaged)} of {total} lines cannot be read as {self.form!r}, "
                f"the first is line {first} ({shown!r}); at most half may be damaged: fetch the "
                "file again or correct the archive column of stations.csv."
            )
        # One line in a hundred: a cut or garbled line, not a trend of the whole file.
        severity: Severity = "caution" if 100 * len(damaged) > total else "note"
        self.note(
            severity,
            "damaged-lines",
            f"{len(damaged)} of {total} lines are damaged and were skipped, the first is line "
            f"{first}.",
        )


def leave_out_unsure(rows: Rows, clock: FloatArray, utc: FloatArray) -> None:
    """Leave out, and note, the lines whose clock time is ambiguous or does not exist."""
    unsure = np.isfinite(clock) & ~np.isfinite(utc)
    rows.left_out |= unsure
    if unsure.any():
        rows.note(
            "note",
            "clock-change",
            f"{int(unsure.sum())} lines were left out because their clock time comes twice or "
            "never on a day of clock change.",
        )
