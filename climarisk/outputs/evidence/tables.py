"""The CSV files of an evidence, read as plain rows, and what their checks have in common.

Notes
-----
CSV files hold shares to ten decimals and hours to four, so a relation between them holds to a
few halves of the last digit; every tolerance here is a sum of those.
"""

from __future__ import annotations

import csv
import json
import math
import tomllib
from collections.abc import Sequence
from pathlib import Path
from typing import Any

#: Of two shares with ten decimals, each off by half of the last one at most, or of a share
#: against a ratio of sums of such numbers.
SHARE_TOLERANCE = 1e-9
#: Of hours with four decimals, offered (up to 744) times a share; of counts of flights alike.
HOURS_TOLERANCE = 2e-4
#: Of a difference of two altitudes with three decimals.
FEET_TOLERANCE = 2e-3
#: Of a difference of two masses with three decimals.
MASS_TOLERANCE = 2e-3
#: An interval of less confidence than this need not hold the figure itself.
_SURE = 0.9
#: A file of an aircraft that is larger is not read.
_MOST_AIRCRAFT_BYTES = 1_000_000

_PLACE = ("field", "aircraft", "month", "hour", "season")

Row = dict[str, str]
Key = tuple[str, ...]


class Tables:
    """The CSV files of a folder, read when first asked for.

    Parameters
    ----------
    folder : Path
    """

    def __init__(self, folder: Path) -> None:
        self.folder = folder
        self._read: dict[str, list[Row]] = {}

    def has(self, name: str) -> bool:
        """Whether there is such a table."""
        return (self.folder / f"{name}.csv").is_file()

    def rows(self, name: str) -> list[Row]:
        """The rows of a table.

        Raises
        ------
        ValueError
            It is absent, or no table.
        """
        if name not in self._read:
            try:
                with (self.folder / f"{name}.csv").open(encoding="utf-8", newline="") as file:
                    reader = csv.DictReader(file, strict=True)
                    self._read[name] = list(reader)
            except (OSError, UnicodeDecodeError, csv.Error) as error:
                why = getattr(error, "strerror", None) or error
                raise ValueError(f"{name}.csv cannot be read as a table ({why})") from None
            if any(None in row or None in row.values() for row in self._read[name]):
                raise ValueError(f"{name}.csv has rows of unequal length")
        return self._read[name]

    def json(self, name: str) -> Any:
        """The content of a JSON file.

        Raises
        ------
        ValueError
            It is absent, or no JSON.
        """
        try:
            return json.loads((self.folder / name).read_text(encoding="utf-8"))
        except (OSError, ValueError, RecursionError) as error:
            why = getattr(error, "strerror", None) or error
            raise ValueError(f"{name} cannot be read ({why})") from None

    def planning(self) -> dict[str, Any]:
        """The settings of planning; empty where the evidence is older than they are."""
        return dict(self.json("study.json")["settings"].get("planning", {}))

    def is_sure(self) -> bool:
        """Whether intervals have the confidence from which they hold the figure itself."""
        return float(self.json("study.json")["settings"]["confidence"]) >= _SURE

    def aircraft(self) -> dict[str, tuple[float, float]]:
        """Empty and maximum mass of the aircraft whose files are copied, by id."""
        found = {}
        for path in sorted((self.folder / "inputs").rglob("*.toml")):
            if path.is_symlink() or path.stat().st_size > _MOST_AIRCRAFT_BYTES:
                continue
            try:
                content = tomllib.loads(path.read_text(encoding="utf-8-sig"))
                mass = content["mass"]["empty_kg"], content["mass"]["maximum_kg"]
                found[str(content["id"])] = float(mass[0]), float(mass[1])
            except (OSError, ValueError, KeyError, TypeError, RecursionError):
                continue  # the study itself, or a mapping of an archive
        return found


def number(row: Row, column: str) -> float:
    """A value of a row; NaN where it is empty.

    Raises
    ------
    ValueError
        It is no finite number.
    """
    text = row[column]
    value = float(text) if text else math.nan
    if math.isinf(value):
        raise ValueError(f"{column} is {text}")
    return value


def keyed(row: Row, *columns: str) -> Key:
    """Some columns of a row, to find it by."""
    return tuple(row[c] for c in columns)


def place(row: Row) -> str:
    """What a row is of, in words."""
    columns = ("flight", "date", "first", "second", *_PLACE)
    return " ".join(row[c] for c in columns if row.get(c)) or "the whole"


def told(row: Row, column: str) -> str:
    """What a row says of itself in a column, in words."""
    return f"{column} is {row[column] or 'empty'}"


def differ(first: float, second: float, tolerance: float) -> bool:
    """Whether two values differ; no value equals no value only."""
    if math.isnan(first) or math.isnan(second):
        return math.isnan(first) != math.isnan(second)
    return abs(first - second) > tolerance


def or_zero(row: Row, column: str) -> float:
    """A value of a row; 0 where it is empty."""
    value = number(row, column)
    return 0.0 if math.isnan(value) else value


def disorder(row: Row, columns: Sequence[str], tolerance: float) -> str:
    """Which of some columns that must not fall falls, in words; empty where none does.

    Empty cells are passed over.
    """
    last, name = -math.inf, ""
    for column in columns:
        value = number(row, column)
        if math.isnan(value):
            continue
        if value < last - tolerance:
            return f"{name} {last:g} is above {column} {value:g}"
        last, name = value, column
    return ""


def interval(row: Row, column: str, sure: bool, tolerance: float) -> str:
    """What is wrong with ``ci_low`` and ``ci_high`` around a column; empty where nothing is."""
    low, high = number(row, "ci_low"), number(row, "ci_high")
    if math.isnan(low) != math.isnan(high):
        return "the interval has one bound"
    if math.isnan(number(row, column)) and not math.isnan(low):
        return f"an interval without {column}"
    if low > high:
        return f"ci_low {low:g} is above ci_high {high:g}"
    return disorder(row, ("ci_low", column, "ci_high"), tolerance) if sure else ""
