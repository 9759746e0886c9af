"""The planning tables of an evidence held against one another, and against what they rest on."""

from __future__ import annotations

import math
from collections.abc import Iterator

from climarisk.outputs.evidence.tables import (
    HOURS_TOLERANCE,
    MASS_TOLERANCE,
    SHARE_TOLERANCE,
    Key,
    Row,
    Tables,
    differ,
    disorder,
    interval,
    keyed,
    number,
    or_zero,
    place,
    told,
)

_TABLES = (
    *(f"weights_{kind}" for kind in ("monthly", "hourly", "seasonal")),
    *("windows_monthly", "icing_monthly", "icing_hourly", "power_monthly"),
    *("bases", "base_differences"),
)
#: Hours of the longest month.
_MOST_HOURS = 744.0


def _planning_tables(tables: Tables) -> Iterator[str]:
    """A study with settings of planning has every table of them."""
    if tables.planning():
        yield from (f"{name}.csv is missing." for name in _TABLES if not tables.has(name))


def outcome_problem(row: Row, column: str, known: bool) -> str:
    """What in a row's outcome does not fit its mass; empty where all fits.

    Parameters
    ----------
    row : dict
    column : str
        The mass.
    known : bool
        The row has figures.
    """
    outcome, mass = row["outcome"], number(row, column)
    if outcome not in ("", "mass", "maximum mass", "cannot be met"):
        return told(row, "outcome")
    if math.isnan(mass) != (outcome in ("", "cannot be met")):
        return f"{told(row, 'outcome')}, {told(row, column)}"
    if math.isnan(mass) != math.isnan(number(row, "useful_load_kg")):
        return f"{told(row, column)}, {told(row, 'useful_load_kg')}"
    return "" if known == bool(outcome) else f"figures and outcome: {told(row, 'outcome')}"


def mass_problem(row: Row, column: str, limits: tuple[float, float] | None) -> str:
    """What in a mass does not fit the aircraft; empty where all fits.

    Parameters
    ----------
    row : dict
    column : str
        The mass.
    limits : tuple of float or None
        Empty and maximum mass of the aircraft, where its file is copied.
    """
    mass, load = number(row, column), number(row, "useful_load_kg")
    if load < -MASS_TOLERANCE:
        return told(row, "useful_load_kg")
    if limits is None or math.isnan(mass):
        return ""
    empty, maximum = limits
    if mass > maximum + MASS_TOLERANCE:
        return f"{told(row, column)}, above the maximum of {maximum:g}"
    if row["outcome"] == "maximum mass" and abs(mass - maximum) > MASS_TOLERANCE:
        return f"{told(row, column)}, called the maximum mass of {maximum:g}"
    if abs(mass - load - empty) > MASS_TOLERANCE:
        return f"{told(row, 'useful_load_kg')}, mass less empty mass is {mass - empty:.3f}"
    return ""


def _weights(tables: Tables) -> Iterator[str]:
    """Masses fit the aircraft, the words and the hours in which none would do."""
    limits, holds_in = tables.aircraft(), tables.planning().get("holds_in")
    for name in _TABLES[:3]:
        for row in tables.rows(name) if tables.has(name) else ():
            where = f"{name}.csv, {place(row)}"
            known = number(row, "n_hours") > 0
            yield from (
                f"{where}: {wrong}."
                for wrong in (
                    outcome_problem(row, "mass_kg", known),
                    mass_problem(row, "mass_kg", limits.get(row["aircraft"])),
                    _never_met(row, known),
                    _mass_interval(row, limits.get(row["aircraft"])),
                )
                if wrong
            )
            if holds_in is not None and differ(number(row, "holds_in"), holds_in, SHARE_TOLERANCE):
                yield f"{where}: {told(row, 'holds_in')}, the study asks for {holds_in:g}."


def _never_met(row: Row, known: bool) -> str:
    never, rest = number(row, "never_met"), 1.0 - number(row, "holds_in")
    if math.isnan(never) == known:
        return told(row, "never_met")
    if row["outcome"] == "cannot be met" and never < rest - SHARE_TOLERANCE:
        return f"cannot be met, though only {never:g} of the hours allow no mass"
    if row["outcome"] in ("mass", "maximum mass") and never > rest + SHARE_TOLERANCE:
        return f"{told(row, 'mass_kg')}, though {never:g} of the hours allow no mass"
    return ""


def _mass_interval(row: Row, limits: tuple[float, float] | None) -> str:
    if "ci_low_kg" not in row:
        return ""
    high = number(row, "ci_high_kg")
    if limits is not None and high > limits[1] + MASS_TOLERANCE:
        return f"{told(row, 'ci_high_kg')}, above the maximum of {limits[1]:g}"
    return disorder(row, ("ci_low_kg", "ci_high_kg"), 0.0)


def _masses_of_an_aircraft(tables: Tables) -> Iterator[str]:
    """Of an aircraft, mass less load is the same in every row and no mass is above the maximum."""
    columns = {**dict.fromkeys(_TABLES[:3], "mass_kg"), "schedule_flights": "mass_that_holds_kg"}
    empty: dict[str, float] = {}
    most: dict[str, tuple[float, str]] = {}
    maximum: dict[str, float] = {}
    for name, column in columns.items():
        for row in tables.rows(name) if tables.has(name) else ():
            mass = number(row, column)
            if math.isnan(mass):
                continue
            aircraft, where = row["aircraft"], f"{name}.csv, {place(row)}"
            rest = mass - number(row, "useful_load_kg")
            if differ(empty.setdefault(aircraft, rest), rest, MASS_TOLERANCE):
                yield f"{where}: mass less useful load is {rest:.3f}, elsewhere another."
            if mass > most.get(aircraft, (-math.inf, ""))[0]:
                most[aircraft] = mass, where
            if row["outcome"] == "maximum mass" and differ(
                maximum.setdefault(aircraft, mass), mass, MASS_TOLERANCE
            ):
                yield f"{where}: the maximum mass is {mass:g}, elsewhere another."
    for aircraft, (mass, where) in most.items():
        if mass > maximum.get(aircraft, math.inf) + MASS_TOLERANCE:
            yield f"{where}: {mass:g} kg are above the maximum mass of other rows."


def hours_of_text(text: str) -> list[int]:
    """The hours of ranges such as ``06-10 18`` in their order, across midnight too.

    Raises
    ------
    ValueError
        They are no such ranges.
    """
    found: list[int] = []
    for part in text.split():
        ends = [int(end) for end in part.split("-")]
        if len(ends) > 2 or any(not 0 <= end <= 23 for end in ends):
            raise ValueError(f"hours are {text!r}")
        n_hours = (ends[-1] - ends[0]) % 24 + 1
        found += [(ends[0] + i) % 24 for i in range(n_hours)]
    return found


def _windows(tables: Tables) -> Iterator[str]:
    """Usable daylight lies in its bounds and in the daylight; the hours are told alike."""
    if not tables.has("windows_monthly"):
        return
    sure, planning = tables.is_sure(), tables.planning()
    cells: dict[Key, list[Row]] = {}
    for row in tables.rows("risk_hourly"):
        cells.setdefault(keyed(row, "field", "aircraft", "month"), []).append(row)
    bounds = "usable_low", *(("usable_hours",) if sure else ()), "usable_high", "daylight_hours"
    for row in tables.rows("windows_monthly"):
        where = f"windows_monthly.csv, {place(row)}"
        wrong = disorder(row, bounds, HOURS_TOLERANCE) or disorder(
            row, ("usable_hours", "daylight_hours"), HOURS_TOLERANCE
        )
        if or_zero(row, "usable_low") < 0.0 or or_zero(row, "usable_hours") < 0.0:
            wrong = "usable hours below 0"
        if or_zero(row, "daylight_hours") > _MOST_HOURS:
            wrong = told(row, "daylight_hours")
        if wrong:
            yield f"{where}: {wrong}."
        for column, key in (("target", "target"), ("run_hours", "consecutive_hours")):
            if key in planning and differ(number(row, column), planning[key], SHARE_TOLERANCE):
                yield f"{where}: {told(row, column)}, the study asks for {planning[key]:g}."
        yield from _clock_hours(row, cells.get(keyed(row, "field", "aircraft", "month"), []), where)


def _clock_hours(row: Row, cells: list[Row], where: str) -> Iterator[str]:
    """The hours of the day below the target, against their text and ``risk_hourly.csv``."""
    listed = hours_of_text(row["hours"])
    n_hours = number(row, "n_clock_hours")
    if len(listed) != (0 if math.isnan(n_hours) else n_hours):
        yield f"{where}: {told(row, 'n_clock_hours')}, the text tells {len(listed)} hours."
    ends = (listed[0], listed[-1]) if listed else (math.nan, math.nan)
    for column, end in zip(("first_hour", "last_hour"), ends, strict=True):
        if differ(number(row, column), end, 0.0):
            yield f"{where}: {told(row, column)}, the text tells {row['hours'] or 'none'}."
    target, usable, unknown = number(row, "target"), set(listed), 0
    for cell in cells:
        hour, share = int(cell["hour"]), number(cell, "shortfall")
        inside = number(cell, "in_window") > 0.0
        unknown += inside and math.isnan(share)
        if math.isnan(share) or abs(share - target) <= SHARE_TOLERANCE:
            below = hour in usable and inside and not math.isnan(share)
        else:
            below = inside and share < target
        if below != (hour in usable):
            yield f"{where}: hour {hour} is {'not ' if below else ''}listed, against its share."
    if number(row, "hours_without_figures") != unknown:
        yield f"{where}: {told(row, 'hours_without_figures')}, of its cells {unknown}."


def _icing(tables: Tables) -> Iterator[str]:
    """Bands of a cell share no hour, and have the same hours."""
    for name, columns in (
        ("icing_monthly", ("field", "month")),
        ("icing_hourly", ("field", "month", "hour")),
    ):
        sums: dict[Key, list[float]] = {}
        for row in tables.rows(name) if tables.has(name) else ():
            sums.setdefault(keyed(row, *columns), []).append(number(row, "share"))
            if math.isnan(number(row, "share")) != (number(row, "n_hours") == 0):
                yield f"{name}.csv, {place(row)}: {told(row, 'share')}, {told(row, 'n_hours')}."
        for key, shares in sums.items():
            total = sum(s for s in shares if not math.isnan(s))
            if total > 1.0 + len(shares) * SHARE_TOLERANCE:
                yield f"{name}.csv, {' '.join(key)}: the bands share {total:.10g} of the hours."


def _power(tables: Tables) -> Iterator[str]:
    """Percentiles of power rise, and the optimistic figure is no smaller."""
    for row in tables.rows("power_monthly") if tables.has("power_monthly") else ():
        for columns in (
            ("power_p10", "power_p50", "power_p90"),
            ("power_p50", "optimistic_p50"),
            ("humidity_power_pct_p50", "humidity_power_pct_p90"),
            ("humidity_ft_p50", "humidity_ft_p90"),
        ):
            wrong = disorder(row, columns, SHARE_TOLERANCE)
            if wrong:
                yield f"power_monthly.csv, {place(row)}: {wrong}."
            if len({row[c] == "" for c in columns}) > 1:
                yield f"power_monthly.csv, {place(row)}: some of {', '.join(columns)} are empty."


def _bases(tables: Tables) -> Iterator[str]:
    """A base's usable hours are the mean of its twelve months, the fleet's that of its aircraft."""
    if not tables.has("bases"):
        return
    months: dict[Key, list[float]] = {}
    for row in tables.rows("risk_monthly"):
        # Of no hour none is usable, whether its share is known or not.
        usable = 0.0 if number(row, "hours_offered") == 0.0 else number(row, "usable_hours")
        months.setdefault(keyed(row, "field", "aircraft"), []).append(usable)
    sure, rows = tables.is_sure(), tables.rows("bases")
    found = {keyed(row, "field", "aircraft"): row for row in rows}
    if len(found) != len(rows) or {k for k in found if k[1]} != set(months):
        yield "bases.csv does not hold each field and aircraft once."
    fleet = tables.planning().get("fleet") or {key[1]: 1.0 for key in months}
    for row in rows:
        if row["aircraft"]:
            hours = months[keyed(row, "field", "aircraft")]
            mean = sum(hours) / len(hours)
        else:
            mean = sum(
                number(found[row["field"], name], "usable_hours_month") * n
                for name, n in fleet.items()
                if n > 0
            ) / sum(fleet.values())
        where = f"bases.csv, {place(row)}"
        if differ(number(row, "usable_hours_month"), mean, HOURS_TOLERANCE):
            yield f"{where}: {told(row, 'usable_hours_month')}, reckoned again {mean:.4f}."
        for wrong in (
            interval(row, "usable_hours_month", sure, HOURS_TOLERANCE),
            disorder(row, ("year_p10", "year_p90"), 0.0),
            disorder(row, ("share_1k", "share_2_5k"), SHARE_TOLERANCE),
        ):
            if wrong:
                yield f"{where}: {wrong}."


def _ranks(tables: Tables) -> Iterator[str]:
    """Fields are ranked by the fleet's usable hours, from 1 on."""
    rows = tables.rows("bases") if tables.has("bases") else []
    fleet = {row["field"]: row for row in rows if not row["aircraft"]}
    for row in rows:
        if row["rank"] != fleet[row["field"]]["rank"]:
            yield f"bases.csv, {place(row)}: {told(row, 'rank')}, that of the fleet another."
    ranked = []
    for field, row in fleet.items():
        usable, rank = number(row, "usable_hours_month"), number(row, "rank")
        if math.isnan(usable) != math.isnan(rank):
            yield f"bases.csv, {field}: {told(row, 'rank')}, {told(row, 'usable_hours_month')}."
        elif not math.isnan(rank):
            ranked.append((rank, -usable, field))
    ranked.sort()
    for i, (rank, less, field) in enumerate(ranked):
        tied = i > 0 and rank == ranked[i - 1][0]
        if not tied and rank != i + 1:
            yield f"bases.csv, {field}: rank {rank:g} of the place {i + 1}."
        if i > 0 and less < ranked[i - 1][1] - HOURS_TOLERANCE:
            yield f"bases.csv, {field}: more usable hours than a field ranked before it."
        if tied and abs(less - ranked[i - 1][1]) > HOURS_TOLERANCE:
            yield f"bases.csv, {field}: one rank with {ranked[i - 1][2]}, other usable hours."


def _base_differences(tables: Tables) -> Iterator[str]:
    """A difference is that of two rows of ``bases.csv``, the better field first."""
    if not tables.has("base_differences"):
        return
    bases = {keyed(r, "field", "aircraft"): r for r in tables.rows("bases")}
    sure, seen = tables.is_sure(), set()
    for row in tables.rows("base_differences"):
        where = f"base_differences.csv, {place(row)}"
        pair = frozenset(keyed(row, "first", "second")), row["aircraft"]
        if len(pair[0]) < 2 or pair in seen:
            yield f"{where}: no two fields, or the same two twice."
        seen.add(pair)
        first, second = (
            number(bases[row[side], row["aircraft"]], "usable_hours_month")
            for side in ("first", "second")
        )
        given = number(row, "difference_hours_month")
        if differ(given, first - second, HOURS_TOLERANCE):
            yield (
                f"{where}: {told(row, 'difference_hours_month')}, "
                f"bases.csv gives {first - second:.4f}."
            )
        if given < 0.0:
            yield f"{where}: the first is not the better one."
        wrong = interval(row, "difference_hours_month", sure, HOURS_TOLERANCE)
        if wrong:
            yield f"{where}: {wrong}."


PLANNING_CHECKS = (
    _planning_tables,
    _weights,
    _masses_of_an_aircraft,
    _windows,
    _icing,
    _power,
    _bases,
    _ranks,
    _base_differences,
)
