"""The tables of a schedule in an evidence held against one another."""

from __future__ import annotations

import datetime as dt
import math
from collections.abc import Iterable, Iterator

from climarisk.outputs.evidence.planning import mass_problem, outcome_problem
from climarisk.outputs.evidence.tables import (
    HOURS_TOLERANCE,
    SHARE_TOLERANCE,
    Row,
    Tables,
    differ,
    disorder,
    interval,
    number,
    or_zero,
    place,
    told,
)

_TABLES = ("schedule_flights", "schedule_seasons", "schedule_days")
#: Half of the last of four decimals.
_HALF_DIGIT = 5e-5


def _schedule_tables(tables: Tables) -> Iterator[str]:
    """All tables of a schedule, or none."""
    there = [name for name in _TABLES if tables.has(name)]
    if there and len(there) < len(_TABLES):
        yield from (f"{name}.csv is missing." for name in _TABLES if name not in there)


def _rows(tables: Tables, name: str) -> list[Row]:
    return tables.rows(name) if all(tables.has(n) for n in _TABLES) else []


def _whole(rows: Iterable[Row], columns: tuple[str, ...]) -> list[float]:
    """Sums of columns, an empty cell as nothing."""
    sums = [0.0 for _ in columns]
    for row in rows:
        for i, column in enumerate(columns):
            sums[i] += or_zero(row, column)
    return sums


def _schedule_sums(tables: Tables) -> Iterator[str]:
    """Flights and days add up to the whole schedule and to each season."""
    flights, days = (_rows(tables, name) for name in ("schedule_flights", "schedule_days"))
    seasons = _rows(tables, "schedule_seasons")
    named = tables.json("study.json")["settings"]["seasons"]
    if seasons and [row["season"] for row in seasons] != ["", *named]:
        yield "schedule_seasons.csv does not hold the whole schedule and each season once."
        return
    for row in seasons:
        inside = [day for day in days if not row["season"] or _is_in(day, named[row["season"]])]
        sources: list[tuple[str, list[Row], tuple[str, ...]]] = [
            ("schedule_days.csv", inside, ("flights", "unknown_flights", "affected"))
        ]
        if not row["season"]:
            sources.append(
                ("schedule_flights.csv", flights, ("flights", "unknown_flights", "affected"))
            )
        for name, parts, columns in sources:
            for column, total in zip(columns, _whole(parts, columns), strict=True):
                tolerance = (len(parts) + 1) * _HALF_DIGIT if column == "affected" else 0.0
                if abs(or_zero(row, column) - total) > tolerance + 1e-9:
                    yield (
                        f"schedule_seasons.csv, {place(row)}: {told(row, column)}, "
                        f"{name} gives {total:.10g}."
                    )


def _is_in(day: Row, bounds: list[str]) -> bool:
    """Whether a date lies in a season, given by its first and last month and day."""
    first, last = bounds
    month_day = day["date"][5:]
    if first <= last:
        return first <= month_day <= last
    return month_day >= first or month_day <= last


def _schedule_seasons(tables: Tables) -> Iterator[str]:
    """Affected flights lie within the known ones, in their interval, and years are in order."""
    settings = tables.json("study.json")["settings"]
    sure = tables.is_sure()
    for row in _rows(tables, "schedule_seasons"):
        known = number(row, "flights") - number(row, "unknown_flights")
        where = f"schedule_seasons.csv, {place(row)}"
        wrong = [
            _counts(row, known, ("affected", "ci_low", "ci_high", "year_low", "year_high")),
            interval(row, "affected", sure, HOURS_TOLERANCE),
            disorder(row, ("year_low", "year_high"), 0.0),
        ]
        if len({row[c] == "" for c in ("year_low", "year_high")}) > 1:
            wrong.append("one of year_low and year_high is empty")
        year, n_years = number(row, "worst_year"), number(row, "n_years")
        if not math.isnan(year) and not settings["first_year"] <= year <= settings["last_year"]:
            wrong.append(f"{told(row, 'worst_year')}, outside the period")
        if not 0 <= n_years <= settings["last_year"] - settings["first_year"] + 1:
            wrong.append(told(row, "n_years"))
        yield from (f"{where}: {problem}." for problem in wrong if problem)


def _counts(row: Row, known: float, columns: tuple[str, ...]) -> str:
    """What in counts of flights is not between none and all; empty where nothing is."""
    if not 0 <= known <= number(row, "flights"):
        return f"{told(row, 'unknown_flights')}, {told(row, 'flights')}"
    if math.isnan(number(row, "affected")) != (known == 0):
        return f"{told(row, 'affected')} of {known:g} flights with figures"
    for column in columns:
        if not -HOURS_TOLERANCE <= or_zero(row, column) <= known + HOURS_TOLERANCE:
            return f"{told(row, column)} of {known:g} flights with figures"
    return ""


def _schedule_days(tables: Tables) -> Iterator[str]:
    """Each date once, with its weekday; the share is affected by known flights."""
    seen = set()
    for row in _rows(tables, "schedule_days"):
        where = f"schedule_days.csv, {place(row)}"
        date = dt.date.fromisoformat(row["date"])
        if date in seen:
            yield f"{where}: the date comes twice."
        seen.add(date)
        if f"{date:%A}" != row["weekday"]:
            yield f"{where}: {told(row, 'weekday')}, it is a {date:%A}."
        known = number(row, "flights") - number(row, "unknown_flights")
        wrong = _counts(row, known, ("affected",))
        share = number(row, "affected") / known if known > 0 else math.nan
        if not wrong and differ(number(row, "share"), share, _HALF_DIGIT + SHARE_TOLERANCE):
            wrong = f"{told(row, 'share')}, the flights give {share:.6f}"
        if wrong:
            yield f"{where}: {wrong}."


def _schedule_flights(tables: Tables) -> Iterator[str]:
    """Each flight's share, expected number, mass and other clock time fit one another."""
    limits, planning, sure = tables.aircraft(), tables.planning(), tables.is_sure()
    seen = set()
    for row in _rows(tables, "schedule_flights"):
        where = f"schedule_flights.csv, {place(row)}"
        if row["flight"] in seen:
            yield f"{where}: the flight comes twice."
        seen.add(row["flight"])
        own = limits.get(row["aircraft"])
        known = row["shortfall"] != ""
        wrong = [
            _expected(row),
            interval(row, "shortfall", sure, SHARE_TOLERANCE),
            outcome_problem(row, "mass_that_holds_kg", known),
            mass_problem(row, "mass_that_holds_kg", own),
            _other_time(row, planning.get("target", math.nan)),
        ]
        if own is not None and not own[0] < number(row, "mass_kg") <= own[1]:
            wrong.append(f"{told(row, 'mass_kg')}, the aircraft has {own[0]:g}-{own[1]:g}")
        holds_in = planning.get("holds_in", number(row, "holds_in"))
        if differ(number(row, "holds_in"), holds_in, SHARE_TOLERANCE):
            wrong.append(f"{told(row, 'holds_in')}, the study asks for {holds_in:g}")
        yield from (f"{where}: {problem}." for problem in wrong if problem)


def _expected(row: Row) -> str:
    """Affected flights are the share of those with figures."""
    share, affected = number(row, "shortfall"), number(row, "affected")
    flights, unknown = number(row, "flights"), number(row, "unknown_flights")
    if not 0 <= unknown <= flights:
        return f"{told(row, 'unknown_flights')}, {told(row, 'flights')}"
    if math.isnan(share) or math.isnan(affected):
        if math.isnan(share) and math.isnan(affected) and flights == unknown:
            return ""
        return f"{told(row, 'shortfall')}, {told(row, 'affected')}"
    known = flights - unknown
    if differ(affected, share * known, HOURS_TOLERANCE):
        return f"{told(row, 'affected')} of {known:g} flights at a shortfall of {share:g}"
    never = row["never_met"]
    if never not in ("yes", "no") or (never == "yes" and share < 1.0 - SHARE_TOLERANCE):
        return f"{told(row, 'never_met')} at a shortfall of {share:g}"
    return ""


def _other_time(row: Row, target: float) -> str:
    """The nearest time is below the target: its own where the flight is, else another."""
    share, there = number(row, "shortfall"), number(row, "nearest_shortfall")
    shift = number(row, "nearest_shift_h")
    if len({row[c] == "" for c in ("nearest_time", "nearest_shift_h", "nearest_shortfall")}) > 1:
        return "the nearest time is told in part"
    if there > target + SHARE_TOLERANCE:
        return f"{told(row, 'nearest_shortfall')}, the target {target:g}"
    if share < target - SHARE_TOLERANCE and (shift != 0 or differ(there, share, SHARE_TOLERANCE)):
        return f"{told(row, 'nearest_shift_h')} at a shortfall of {share:g} below the target"
    if math.isnan(shift):
        return ""
    own, nearest = (
        60 * int(text[:2]) + int(text[3:]) for text in (row["clock_time"], row["nearest_time"])
    )
    if (own + 60 * shift - nearest) % (24 * 60):
        return f"{told(row, 'nearest_time')}, {told(row, 'nearest_shift_h')}"
    return (
        f"{told(row, 'nearest_shift_h')} at its own target" if share > target and not shift else ""
    )


SCHEDULE_CHECKS = (
    _schedule_tables,
    _schedule_sums,
    _schedule_seasons,
    _schedule_days,
    _schedule_flights,
)
