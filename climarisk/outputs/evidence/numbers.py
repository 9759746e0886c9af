"""The tables of an evidence held against one another: plain loops over the CSV files.

The routine shares nothing with the ones that made the tables.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator
from pathlib import Path

from climarisk.outputs.evidence.planning import PLANNING_CHECKS
from climarisk.outputs.evidence.tables import (
    FEET_TOLERANCE,
    HOURS_TOLERANCE,
    SHARE_TOLERANCE,
    Key,
    Tables,
    differ,
    interval,
    keyed,
    number,
    or_zero,
    place,
    told,
)
from climarisk.outputs.evidence.timetable import SCHEDULE_CHECKS

#: Problems of one kind that are told.
_MOST_TOLD = 5
#: Columns that are shares wherever they occur, but for `_NO_SHARES`.
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
    "holds_in",
    "target",
    "share",
    "icing_serious",
    "nearest_shortfall",
)
#: Tables with shares, and columns of such names that are none there.
_NO_SHARES: dict[str, tuple[str, ...]] = {
    **{f"risk_{kind}": () for kind in ("monthly", "hourly", "seasonal")},
    **{f"near_saturation_{kind}": () for kind in ("monthly", "hourly", "seasonal")},
    **{f"weights_{kind}": () for kind in ("monthly", "hourly", "seasonal")},
    **{f"icing_{kind}": () for kind in ("monthly", "hourly")},
    **dict.fromkeys(("margins_monthly", "windows_monthly", "power_monthly"), ()),
    **dict.fromkeys(("scenarios", "coverage", "schedule_days"), ()),
    "bases": ("ci_low", "ci_high"),  # hours
    "schedule_flights": ("never_met",),  # yes or no
}
_PERCENTILES = ("p01", "p05", "p10", "p25", "p50", "p75", "p90", "p95", "p99")


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
        except (ValueError, TypeError, AttributeError, ArithmeticError, OSError) as error:
            found = [f"The check of {_subject(check)} cannot be made: {error}."]
        problems += found[:_MOST_TOLD]
        if len(found) > _MOST_TOLD:
            problems.append(f"{len(found) - _MOST_TOLD} problems more of this kind.")
    return list(dict.fromkeys(problems))


def _subject(check: Callable[[Tables], Iterator[str]]) -> str:
    return check.__name__.strip("_").replace("_", " ")


def _months_from_years(tables: Tables) -> Iterator[str]:
    """Each monthly share is shortfall hours over hours, summed over the years."""
    sums: dict[Key, list[float]] = {}
    for row in tables.rows("risk_yearly"):
        total = sums.setdefault(keyed(row, "field", "aircraft", "month"), [0.0, 0.0, 0.0])
        hours, fallen = number(row, "n_hours"), number(row, "shortfall_hours")
        if not 0.0 <= fallen <= hours:
            yield f"risk_yearly.csv, {place(row)} {row['year']}: more shortfall hours than hours."
        total[0], total[1], total[2] = total[0] + hours, total[1] + fallen, total[2] + 1
    for row in tables.rows("risk_monthly"):
        hours, fallen, years = sums.pop(keyed(row, "field", "aircraft", "month"), [0.0, 0.0, 0.0])
        share = fallen / hours if hours else math.nan
        where = f"risk_monthly.csv, {place(row)}"
        if differ(number(row, "shortfall"), share, SHARE_TOLERANCE):
            yield f"{where}: {told(row, 'shortfall')}, its years give {share:.10g}."
        for column, counted in (("n_hours", hours), ("n_years", years)):
            if number(row, column) != counted:
                yield f"{where}: {told(row, column)}, its years give {counted:g}."
    for key in sums:
        yield f"risk_yearly.csv has {' '.join(key)}, which risk_monthly.csv has not."


def _usable_hours(tables: Tables) -> Iterator[str]:
    """Usable hours are hours offered times one less the shortfall share."""
    for name in ("risk_monthly", "risk_hourly", "risk_seasonal"):
        for row in tables.rows(name):
            offered = number(row, "hours_offered")
            usable = offered * (1.0 - number(row, "shortfall"))
            if differ(number(row, "usable_hours"), usable, HOURS_TOLERANCE):
                yield (
                    f"{name}.csv, {place(row)}: {told(row, 'usable_hours')}, "
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
            found.setdefault(keyed(row, "field", "aircraft"), []).append(keyed(row, *columns))
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
    for name, others in _NO_SHARES.items():
        rows = tables.rows(name) if tables.has(name) else []
        columns = [c for c in _SHARES if c not in others and rows and c in rows[0]]
        for row in rows:
            for column in columns:
                if not -1e-12 <= or_zero(row, column) <= 1.0 + 1e-12:
                    yield f"{name}.csv, {place(row)}: {column} is {row[column]}, no share of 0-1."


def _intervals(tables: Tables) -> Iterator[str]:
    """The bounds of an interval are in order and, at 90 % and more, around the share."""
    sure = tables.is_sure()
    for name in ("risk_monthly", "risk_hourly", "risk_seasonal"):
        for row in tables.rows(name):
            wrong = interval(row, "shortfall", sure, SHARE_TOLERANCE)
            if wrong:
                yield f"{name}.csv, {place(row)}: {wrong}."


def _margins_by_check(tables: Tables) -> Iterator[str]:
    """No check fails more often than all together, nor all together more than their sum."""
    whole = {keyed(r, "field", "aircraft", "month"): r for r in tables.rows("risk_monthly")}
    sums: dict[Key, float] = {}
    for row in tables.rows("margins_monthly"):
        key = keyed(row, "field", "aircraft", "month")
        share, total = number(row, "shortfall"), number(whole[key], "shortfall")
        sums[key] = sums.get(key, 0.0) + share
        where = f"margins_monthly.csv, {place(row)} {row['check']}"
        if row["n_hours"] != whole[key]["n_hours"]:
            other = whole[key]["n_hours"]
            yield f"{where}: {told(row, 'n_hours')}, in risk_monthly.csv {other}."
        if share > total + SHARE_TOLERANCE or math.isnan(share) != math.isnan(total):
            yield f"{where}: {told(row, 'shortfall')}, of all checks {total:g}."
    for key, row in whole.items():
        if key not in sums:
            yield f"margins_monthly.csv has no {' '.join(key)}."
        elif number(row, "shortfall") > sums[key] + len(_PERCENTILES) * SHARE_TOLERANCE:
            yield f"risk_monthly.csv, {place(row)}: shortfall is above the sum of its checks."


def _percentiles(tables: Tables) -> Iterator[str]:
    """Percentiles rise, and each variable has its months."""
    for name in ("distributions_monthly", "distributions_hourly", "distributions_seasonal"):
        cells: dict[Key, int] = {}
        for row in tables.rows(name):
            key = keyed(row, "field", "variable")
            cells[key] = cells.get(key, 0) + 1
            values = [number(row, p) for p in _PERCENTILES]
            blank = any(map(math.isnan, values))
            wrong = ""
            if blank != (number(row, "n_hours") == 0):
                wrong = "percentiles without hours, or hours without percentiles"
            elif not blank and sorted(values) != values:
                wrong = "the percentiles do not rise"
            if wrong:
                yield f"{name}.csv, {place(row)} {row['variable']}: {wrong}."
        for key, n in cells.items():
            expected = {"distributions_monthly": 12, "distributions_hourly": 288}.get(name, n)
            if n != expected:
                yield f"{name}.csv, {' '.join(key)}: {n} rows, not {expected}."


def _near_saturation(tables: Tables) -> Iterator[str]:
    """Hours within 1 K are among those within 2.5 K."""
    for kind in ("monthly", "hourly", "seasonal"):
        for row in tables.rows(f"near_saturation_{kind}"):
            near, wide = number(row, "share_1k"), number(row, "share_2_5k")
            if near > wide + SHARE_TOLERANCE or math.isnan(near) != math.isnan(wide):
                yield f"near_saturation_{kind}.csv, {place(row)}: share_1k is above share_2_5k."


def _scenarios(tables: Tables) -> Iterator[str]:
    """Each change is the scenario's figure less the study's."""
    base = {keyed(r, "field", "aircraft", "month"): r for r in tables.rows("risk_monthly")}
    altitude = {
        keyed(r, "field", "month"): r
        for r in tables.rows("distributions_monthly")
        if r["variable"] == "density_altitude"
    }
    months: dict[Key, int] = {}
    for row in tables.rows("scenarios"):
        key = keyed(row, "scenario", "field", "aircraft")
        months[key] = months.get(key, 0) + 1
        where = f"scenarios.csv, {row['scenario']}, {place(row)}"
        own = base[keyed(row, "field", "aircraft", "month")]
        change = number(row, "shortfall") - number(own, "shortfall")
        if differ(number(row, "shortfall_change"), change, SHARE_TOLERANCE):
            yield f"{where}: {told(row, 'shortfall_change')}, the shares give {change:.10g}."
        air = altitude[keyed(row, "field", "month")]
        for p in ("p50", "p90"):
            change = number(row, f"density_altitude_{p}_ft") - number(air, p)
            column = f"density_altitude_{p}_change_ft"
            if differ(number(row, column), change, FEET_TOLERANCE):
                yield f"{where}: {told(row, column)}, the altitudes give {change:.3f}."
    names = {key[0] for key in months}
    if len(months) != len(names) * len({k[:2] for k in base}) or set(months.values()) - {12}:
        yield "scenarios.csv does not hold every field, aircraft and month once in each scenario."


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
    read = {item["file"]: item["sha256"] for item in study["inputs"]}
    files = {item["file"]: item for item in manifest["files"]}
    listed = {row["file"]: row for row in tables.rows("inputs")}
    for name, digest in read.items():
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
    *PLANNING_CHECKS,
    *SCHEDULE_CHECKS,
)
