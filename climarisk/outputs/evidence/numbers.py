"""The tables of an evidence held against one another: plain loops over the CSV files.

The routine shares nothing with the ones that made the tables.

Notes
-----
CSV files hold shares to ten decimals and hours to four, so a relation between them holds to a
few halves of the last digit; every tolerance here is a sum of those.
"""

from __future__ import annotations

import csv
import json
import math
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

#: Of two shares with ten decimals, each off by half of the last one at most, or of a share
#: against a ratio of sums of such numbers.
SHARE_TOLERANCE = 1e-9
#: Of hours with four decimals, offered (up to 744) times a share.
HOURS_TOLERANCE = 2e-4
#: Of a difference of two altitudes with three decimals.
FEET_TOLERANCE = 2e-3
#: An interval of less confidence than this need not hold the share itself.
_SURE = 0.9
#: Problems of one kind that are told.
_MOST_TOLD = 5
#: Columns that are shares wherever they occur.
_SHARES = (
    "shortfall",
    "ci_low",
    "ci_high",
    "outside_table",
    "days_affected",
    "shortfall_central",
    "coverage",
    "share_1k",
    "share_2_5k",
    "in_window",
    "never_met",
    "days_with_run",
)
_SHARE_TABLES = (
    "risk_monthly",
    "risk_hourly",
    "risk_seasonal",
    "margins_monthly",
    "near_saturation_monthly",
    "near_saturation_hourly",
    "near_saturation_seasonal",
    "weights_monthly",
    "windows_monthly",
    "scenarios",
    "coverage",
)
_PERCENTILES = ("p01", "p05", "p10", "p25", "p50", "p75", "p90", "p95", "p99")

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


def number_problems(folder: Path) -> list[str]:
    """What does not fit in the tables of an evidence, as sentences; none where all fits.

    Parameters
    ----------
    folder : Path
    """
    tables = Tables(folder)
    problems: list[str] = []
    for check in _CHECKS:
        try:
            found = list(check(tables))
        except KeyError as error:
            found = [f"The check of {_subject(check)} needs {error}, which is missing."]
        except (ValueError, TypeError, AttributeError, ArithmeticError) as error:
            found = [f"The check of {_subject(check)} cannot be made: {error}."]
        problems += found[:_MOST_TOLD]
        if len(found) > _MOST_TOLD:
            problems.append(f"{len(found) - _MOST_TOLD} problems more of this kind.")
    return list(dict.fromkeys(problems))


def _subject(check: Callable[[Tables], Iterator[str]]) -> str:
    return check.__name__.strip("_").replace("_", " ")


def _number(row: Row, column: str) -> float:
    text = row[column]
    value = float(text) if text else math.nan
    if math.isinf(value):
        raise ValueError(f"{column} is {text}")
    return value


def _key(row: Row, *columns: str) -> Key:
    return tuple(row[c] for c in columns)


def _place(row: Row) -> str:
    return " ".join(row[c] for c in ("field", "aircraft", "month", "hour", "season") if c in row)


def _told(row: Row, column: str) -> str:
    return f"{column} is {row[column] or 'empty'}"


def _differ(first: float, second: float, tolerance: float) -> bool:
    """Whether two values differ; no value equals no value only."""
    if math.isnan(first) or math.isnan(second):
        return math.isnan(first) != math.isnan(second)
    return abs(first - second) > tolerance


def _months_from_years(tables: Tables) -> Iterator[str]:
    """Each monthly share is shortfall hours over hours, summed over the years."""
    sums: dict[Key, list[float]] = {}
    for row in tables.rows("risk_yearly"):
        total = sums.setdefault(_key(row, "field", "aircraft", "month"), [0.0, 0.0, 0.0])
        hours, fallen = _number(row, "n_hours"), _number(row, "shortfall_hours")
        if not 0.0 <= fallen <= hours:
            yield f"risk_yearly.csv, {_place(row)} {row['year']}: more shortfall hours than hours."
        total[0], total[1], total[2] = total[0] + hours, total[1] + fallen, total[2] + 1
    for row in tables.rows("risk_monthly"):
        hours, fallen, years = sums.pop(_key(row, "field", "aircraft", "month"), [0.0, 0.0, 0.0])
        share = fallen / hours if hours else math.nan
        where = f"risk_monthly.csv, {_place(row)}"
        if _differ(_number(row, "shortfall"), share, SHARE_TOLERANCE):
            yield f"{where}: {_told(row, 'shortfall')}, its years give {share:.10g}."
        for column, counted in (("n_hours", hours), ("n_years", years)):
            if _number(row, column) != counted:
                yield f"{where}: {_told(row, column)}, its years give {counted:g}."
    for key in sums:
        yield f"risk_yearly.csv has {' '.join(key)}, which risk_monthly.csv has not."


def _usable_hours(tables: Tables) -> Iterator[str]:
    """Usable hours are hours offered times one less the shortfall share."""
    for name in ("risk_monthly", "risk_hourly", "risk_seasonal"):
        for row in tables.rows(name):
            offered = _number(row, "hours_offered")
            usable = offered * (1.0 - _number(row, "shortfall"))
            if _differ(_number(row, "usable_hours"), usable, HOURS_TOLERANCE):
                yield (
                    f"{name}.csv, {_place(row)}: {_told(row, 'usable_hours')}, "
                    f"hours_offered and shortfall give {usable:.4f}."
                )


def _whole_years(tables: Tables) -> Iterator[str]:
    """Every field and aircraft has its twelve months, and twenty-four hours in each."""
    months = [str(m) for m in range(1, 13)]
    wanted: dict[str, list[Key]] = {
        "risk_monthly": [(m,) for m in months],
        "risk_hourly": [(m, str(h)) for m in months for h in range(24)],
    }
    pairs = {}
    for name, cells in wanted.items():
        found: dict[Key, list[Key]] = {}
        columns = ("month", "hour")[: len(cells[0])]
        for row in tables.rows(name):
            found.setdefault(_key(row, "field", "aircraft"), []).append(_key(row, *columns))
        for pair, have in found.items():
            if sorted(have) != sorted(cells):
                yield (
                    f"{name}.csv, {' '.join(pair)}: {len(have)} rows, not each of its "
                    f"{len(cells)} cells once."
                )
        pairs[name] = set(found)
    if pairs["risk_monthly"] != pairs["risk_hourly"]:
        yield "risk_monthly.csv and risk_hourly.csv hold other fields or aircraft."


def _shares(tables: Tables) -> Iterator[str]:
    """Every share lies within 0 and 1."""
    for name in _SHARE_TABLES:
        if not tables.has(name):
            continue
        for row in tables.rows(name):
            for column in _SHARES:
                if column in row and not -1e-12 <= _zero(row, column) <= 1.0 + 1e-12:
                    yield f"{name}.csv, {_place(row)}: {column} is {row[column]}, no share of 0-1."


def _zero(row: Row, column: str) -> float:
    value = _number(row, column)
    return 0.0 if math.isnan(value) else value


def _intervals(tables: Tables) -> Iterator[str]:
    """The bounds of an interval are in order and, at 90 % and more, around the share."""
    sure = float(tables.json("study.json")["settings"]["confidence"]) >= _SURE
    for name in ("risk_monthly", "risk_hourly", "risk_seasonal"):
        for row in tables.rows(name):
            low, high = _number(row, "ci_low"), _number(row, "ci_high")
            share = _number(row, "shortfall")
            where = f"{name}.csv, {_place(row)}"
            if math.isnan(low) != math.isnan(high):
                yield f"{where}: the interval has one bound."
            elif low > high:
                yield f"{where}: ci_low {low:g} is above ci_high {high:g}."
            elif sure and max(low - share, share - high) > SHARE_TOLERANCE:
                yield f"{where}: shortfall {share:g} is outside its interval {low:g}-{high:g}."


def _margins_by_check(tables: Tables) -> Iterator[str]:
    """No check fails more often than all together, nor all together more than their sum."""
    whole = {_key(r, "field", "aircraft", "month"): r for r in tables.rows("risk_monthly")}
    sums: dict[Key, float] = {}
    for row in tables.rows("margins_monthly"):
        key = _key(row, "field", "aircraft", "month")
        share, total = _number(row, "shortfall"), _number(whole[key], "shortfall")
        sums[key] = sums.get(key, 0.0) + share
        where = f"margins_monthly.csv, {_place(row)} {row['check']}"
        if row["n_hours"] != whole[key]["n_hours"]:
            other = whole[key]["n_hours"]
            yield f"{where}: {_told(row, 'n_hours')}, in risk_monthly.csv {other}."
        if share > total + SHARE_TOLERANCE or math.isnan(share) != math.isnan(total):
            yield f"{where}: {_told(row, 'shortfall')}, of all checks {total:g}."
    for key, row in whole.items():
        if key not in sums:
            yield f"margins_monthly.csv has no {' '.join(key)}."
        elif _number(row, "shortfall") > sums[key] + len(_PERCENTILES) * SHARE_TOLERANCE:
            yield f"risk_monthly.csv, {_place(row)}: shortfall is above the sum of its checks."


def _percentiles(tables: Tables) -> Iterator[str]:
    """Percentiles rise, and each variable has its months."""
    for name in ("distributions_monthly", "distributions_hourly", "distributions_seasonal"):
        cells: dict[Key, int] = {}
        for row in tables.rows(name):
            key = _key(row, "field", "variable")
            cells[key] = cells.get(key, 0) + 1
            values = [_number(row, p) for p in _PERCENTILES]
            where = f"{name}.csv, {_place(row)} {row['variable']}"
            if any(math.isnan(v) for v in values) != (_number(row, "n_hours") == 0):
                yield f"{where}: percentiles without hours, or hours without percentiles."
            elif any(b < a for a, b in zip(values, values[1:], strict=False)):
                yield f"{where}: the percentiles do not rise."
        for key, n in cells.items():
            expected = {"distributions_monthly": 12, "distributions_hourly": 288}.get(name, n)
            if n != expected:
                yield f"{name}.csv, {' '.join(key)}: {n} rows, not {expected}."


def _near_saturation(tables: Tables) -> Iterator[str]:
    """Hours within 1 K are among those within 2.5 K."""
    for kind in ("monthly", "hourly", "seasonal"):
        for row in tables.rows(f"near_saturation_{kind}"):
            near, wide = _number(row, "share_1k"), _number(row, "share_2_5k")
            if near > wide + SHARE_TOLERANCE or math.isnan(near) != math.isnan(wide):
                yield f"near_saturation_{kind}.csv, {_place(row)}: share_1k is above share_2_5k."


def _scenarios(tables: Tables) -> Iterator[str]:
    """Each change is the scenario's figure less the study's."""
    base = {_key(r, "field", "aircraft", "month"): r for r in tables.rows("risk_monthly")}
    altitude = {
        _key(r, "field", "month"): r
        for r in tables.rows("distributions_monthly")
        if r["variable"] == "density_altitude"
    }
    months: dict[Key, int] = {}
    for row in tables.rows("scenarios"):
        key = _key(row, "scenario", "field", "aircraft")
        months[key] = months.get(key, 0) + 1
        where = f"scenarios.csv, {row['scenario']}, {_place(row)}"
        own = base[_key(row, "field", "aircraft", "month")]
        change = _number(row, "shortfall") - _number(own, "shortfall")
        if _differ(_number(row, "shortfall_change"), change, SHARE_TOLERANCE):
            yield f"{where}: {_told(row, 'shortfall_change')}, the shares give {change:.10g}."
        air = altitude[_key(row, "field", "month")]
        for p in ("p50", "p90"):
            change = _number(row, f"density_altitude_{p}_ft") - _number(air, p)
            column = f"density_altitude_{p}_change_ft"
            if _differ(_number(row, column), change, FEET_TOLERANCE):
                yield f"{where}: {_told(row, column)}, the altitudes give {change:.3f}."
    names = {key[0] for key in months}
    if len(months) != len(names) * len({k[:2] for k in base}) or set(months.values()) - {12}:
        yield "scenarios.csv does not hold every field, aircraft and month once in each scenario."


def _bases(tables: Tables) -> Iterator[str]:
    """A base's usable hours are the mean of its twelve months."""
    if not tables.has("bases"):
        return
    months: dict[Key, list[float]] = {}
    for row in tables.rows("risk_monthly"):
        months.setdefault(_key(row, "field", "aircraft"), []).append(_number(row, "usable_hours"))
    for row in tables.rows("bases"):
        if not row["aircraft"]:
            continue
        usable = months[_key(row, "field", "aircraft")]
        mean = sum(usable) / len(usable)
        given = _number(row, "usable_hours_month")
        if not math.isnan(mean) and _differ(given, mean, HOURS_TOLERANCE):
            told = _told(row, "usable_hours_month")
            yield f"bases.csv, {_place(row)}: {told}, its months give {mean:.4f}."


def _planning(tables: Tables) -> Iterator[str]:
    """Usable hours fit in the daylight, bounds are in order, bands share no hour."""
    for row in tables.rows("windows_monthly") if tables.has("windows_monthly") else ():
        usable, daylight = _number(row, "usable_hours"), _number(row, "daylight_hours")
        where = f"windows_monthly.csv, {_place(row)}"
        if usable > daylight + HOURS_TOLERANCE:
            yield f"{where}: {usable:g} usable hours in {daylight:g} of daylight."
        if _number(row, "usable_low") > _number(row, "usable_high"):
            yield f"{where}: usable_low is above usable_high."
    for name in ("weights_monthly", "weights_seasonal"):
        for row in tables.rows(name) if tables.has(name) else ():
            if _number(row, "ci_low_kg") > _number(row, "ci_high_kg"):
                yield f"{name}.csv, {_place(row)}: ci_low_kg is above ci_high_kg."
    sums: dict[Key, float] = {}
    for row in tables.rows("icing_monthly") if tables.has("icing_monthly") else ():
        key = _key(row, "field", "month")
        sums[key] = sums.get(key, 0.0) + _zero(row, "share")
    for key, total in sums.items():
        if total > 1.0 + len(_PERCENTILES) * SHARE_TOLERANCE:
            yield f"icing_monthly.csv, {' '.join(key)}: the bands share {total:.10g} of the hours."


def _provenance(tables: Tables) -> Iterator[str]:
    """Settings, years and inputs are told alike everywhere."""
    manifest, study = tables.json("manifest.json"), tables.json("study.json")
    for name in ("settings", "title", "version"):
        if manifest[name] != study[name]:
            yield f"study.json and manifest.json differ in {name}."
    first, last = (int(study["settings"][k]) for k in ("first_year", "last_year"))
    outside = {r["year"] for r in tables.rows("risk_yearly")}
    outside = {y for y in outside if not first <= int(y) <= last}
    if outside:
        yield f"risk_yearly.csv has the year {min(outside)}, outside {first}-{last}."
    told = {item["file"]: item["sha256"] for item in study["inputs"]}
    files = {item["file"]: item for item in manifest["files"]}
    listed = {row["file"]: row for row in tables.rows("inputs")}
    for name, digest in told.items():
        if name not in listed or listed[name]["sha256"] != digest:
            yield f"inputs.csv and study.json differ in {name}."
    for station in study["stations"]:
        for item in station["files"]:
            if listed.get(item["file"], {}).get("sha256") != item["sha256"]:
                yield f"inputs.csv and study.json differ in {item['file']}."
    for name, row in listed.items():
        copy = files.get(f"inputs/{name}")
        if row["copied"] == "yes" and (copy is None or copy["sha256"] != row["sha256"]):
            yield f"inputs/{name} is not the file that inputs.csv tells."
    if {r["station"] for r in tables.rows("coverage")} != {s["id"] for s in study["stations"]}:
        yield "coverage.csv and study.json hold other stations."


_CHECKS = (
    _provenance,
    _whole_years,
    _shares,
    _months_from_years,
    _usable_hours,
    _intervals,
    _margins_by_check,
    _percentiles,
    _near_saturation,
    _scenarios,
    _bases,
    _planning,
)
