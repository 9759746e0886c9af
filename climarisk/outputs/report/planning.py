"""The planning answers: pages of weights and working hours; tables of icing and engine power."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
import pandas as pd

from climarisk.icing import serious, serious_in_cruise
from climarisk.outputs.report.data import N_MONTHS, ranked
from climarisk.outputs.report.tables import (
    NO_CELL,
    Sheet,
    edge_class,
    gap_mark,
    period_tables,
)
from climarisk.outputs.report.words import Html, el, given, number, unbroken
from climarisk.outputs.texts import (
    ICING_SERIOUS,
    LOAD_LABELS,
    MONTHS,
    NO_DATA,
    engine_groups,
    grouped,
    hours_text,
    icing_basis,
    load_class,
    mass_text,
    share_text,
    short_months,
    whole_down,
    whole_up,
    worst_months,
)
from climarisk.rules import YEARS

NOT_MET = LOAD_LABELS[-1]
#: Begins the names of the pages of weights and working hours; the number of the aircraft follows.
PLANNING_ID = "works"
_Row = Mapping[Any, Any]
#: Rows of a frame by the ids of field and aircraft and by month.
_Rows = Mapping[tuple[str, str, int], _Row]


def planning_sections(sheet: Sheet) -> list[Html]:
    """A page for each aircraft with the weights that hold and the working hours."""
    made = []
    for aircraft, name in enumerate(sheet.aircraft):
        order = ranked(sheet.figures.shares[:, aircraft]).tolist()
        parts = [weight_part(sheet, aircraft, order), window_part(sheet, aircraft, order)]
        if not any(parts):
            continue
        section = el(
            "section",
            el("p", "Weights and working hours", class_="kicker"),
            el("h2", given(name)),
            parts,
            class_="sheet works",
            id=f"{PLANNING_ID}-{aircraft + 1}",
        )
        made.append(section)
    return made


# Weights


def weight_part(sheet: Sheet, aircraft: int, order: Sequence[int]) -> list[Html]:
    """The useful loads of an aircraft by field, month and season, with what the colours mean."""
    if sheet.result.weights_monthly.empty:
        return []
    profile = sheet.result.aircraft[aircraft]
    figures, often = sheet.figures, _often(sheet)
    full = profile.maximum_kg - profile.empty_kg
    load, mass = (figures.weights[n][:, aircraft] for n in ("useful_load_kg", "mass_kg"))
    outcome, never = figures.outcome[:, aircraft], figures.weights["never_met"][:, aircraft]

    def cell(field: int, period: int) -> Html:
        place = load_class(load[field, period] / full, str(outcome[field, period]))
        if place < 0:
            return NO_CELL
        edge = " first" if edge_class(period) else ""
        gap = gap_mark(figures, never[field], period)
        if place == len(LOAD_LABELS) - 1:
            return el("td", NOT_MET, gap, class_=f"l{place} unmet{edge}")
        text, below = (grouped(whole_down(v[field, period])) for v in (load, mass))
        return el("td", text, gap, " ", el("small", below), class_=f"l{place}{edge}")

    heads = (
        f"Weight that holds in {often} of the hours, kg: useful load, below it the mass",
        "Month: useful load; mass, landing at the same mass",
        "Season",
    )
    keys = [
        el("li", el("span", class_=f"swatch l{place}"), " ", label)
        for place, label in enumerate(LOAD_LABELS)
    ]
    return [
        el("h3", "Weight that holds"),
        el("ul", el("li", "Useful load, of that at maximum mass:"), keys, class_="key"),
        *period_tables(
            sheet, order, cell, heads, ("Least", lambda f: _least_cell(sheet, aircraft, f))
        ),
    ]


def _often(sheet: Sheet) -> str:
    return share_text(float(sheet.result.settings["planning"]["holds_in"]))


def least_months(load: np.ndarray, outcome: np.ndarray) -> list[int]:
    """Places of the months with the least weight, those that cannot be met before all others.

    Parameters
    ----------
    load : ndarray, shape (12,)
    outcome : ndarray of str, shape (12,)
    """
    unmet = np.flatnonzero(outcome == NOT_MET).tolist()
    return unmet or worst_months((-load).tolist())


def _least_cell(sheet: Sheet, aircraft: int, field: int) -> Html:
    at = {n: v[field, aircraft, :N_MONTHS] for n, v in sheet.figures.weights.items()}
    outcome = sheet.figures.outcome[field, aircraft, :N_MONTHS]
    months = least_months(at["useful_load_kg"], outcome)
    if not months:
        return el("td", NO_DATA, class_="none end")
    never = float(at["never_met"][months].max())
    small = [f"no mass in {share_text(never)} of hours"] if never > 0.0 else []
    when = short_months(months)
    if outcome[months[0]] == NOT_MET:
        first = f"{when} {NOT_MET} "
    elif outcome[months[0]] == "maximum mass":
        known = int((~np.isnan(at["useful_load_kg"])).sum())
        first = "maximum mass " if known == N_MONTHS else f"maximum mass in {known} known months "
    else:
        first = f"{when} {mass_text(float(at['useful_load_kg'][months[0]]))} "
        low, high = float(at["ci_low_kg"][months].min()), float(at["ci_high_kg"][months].max())
        small.insert(0, _mass_interval(low, high, float(at["n_years"][months].min())))
    return el(
        "td", first, [(el("small", text, class_="wrap"), " ") for text in small], class_="end"
    )


def _mass_interval(low: float, high: float, years: float) -> str:
    """The interval of a mass, outwards, and why an end of it is missing."""
    if years < YEARS.interval or math.isnan(high):
        return "too few years"
    ends = grouped(whole_up(high))
    star = "*" if years < YEARS.settled_interval else ""
    first = NOT_MET if math.isnan(low) else grouped(whole_down(low))
    return f"mass {first}{' to ' if math.isnan(low) else '-'}{ends}{star}"


# Working hours


def window_part(sheet: Sheet, aircraft: int, order: Sequence[int]) -> list[Html]:
    """The hours of the day at which the fields work for an aircraft, month by month."""
    frame, profile = sheet.result.windows_monthly, sheet.result.aircraft[aircraft]
    rows = _rows_of(frame[frame["aircraft"] == profile.id])
    if not rows:
        return []
    asked = sheet.result.settings["planning"]
    target = share_text(float(asked["target"]))

    def cell(field: int, period: int) -> Html:
        row = rows.get((sheet.result.fields[field].id, profile.id, period + 1))
        return NO_CELL if row is None else _hours_cell(row)

    heads = (
        f"Hours of the day with a shortfall below {target}, by local standard time and by the "
        f"civil clock of {asked['year']}",
        "Month: standard time; civil clock, before / after it changes; usable hours of daylight",
        "",
    )
    return [
        el("h3", "Working hours"),
        *period_tables(sheet, order, cell, heads, seasons=False),
    ]


def _hours_cell(row: _Row) -> Html:
    usable = [] if pd.isna(row["usable_hours"]) else [el("small", hours_text(row["usable_hours"]))]
    if pd.isna(row["n_clock_hours"]):
        return el("td", NO_DATA, " ", usable, class_="span") if usable else NO_CELL
    unknown = 0 if pd.isna(row["hours_without_figures"]) else int(row["hours_without_figures"])
    gone = [(el("small", f"{unknown} h {NO_DATA}"), " ")] if unknown else []
    if not row["n_clock_hours"]:
        return el("td", "none ", gone, usable, class_="span")
    clock = el("small", _clock_parts(str(row["clock_hours"])))
    return el("td", _ranges(str(row["hours"])), " ", (clock, " "), gone, usable, class_="span")


def _ranges(text: str) -> Sequence[object]:
    """Ranges of hours, none of which breaks."""
    return [part for hours in text.split() for part in (", ", unbroken(hours))][1:]


def _clock_parts(clock: str) -> Sequence[object]:
    """Hours by the civil clock without the minutes of full hours: ``05-13, 18-21 / 06-14``."""
    stretches = clock.replace(":00", "").split(" / ")
    parts = [part for text in stretches for part in ("\N{NO-BREAK SPACE}/ ", _ranges(text))]
    return parts[1:]


def _rows_of(frame: pd.DataFrame) -> _Rows:
    keys = zip(
        frame["field"].astype(str), frame["aircraft"].astype(str), frame["month"], strict=True
    )
    return dict(zip(keys, frame.to_dict("records"), strict=True))


# Carburettor icing


def icing_tables(sheet: Sheet, order: Sequence[int]) -> list[Html]:
    """Shares of daylight hours with carburettor icing; none without a carburettor."""
    frame = sheet.result.icing_monthly
    if frame.empty or not any(profile.carburettor for profile in sheet.result.aircraft):
        return []
    method = str(frame["method"].iloc[0])
    basis = icing_basis(method, str(frame["verified"].iloc[0]))
    ids = [field.id for field in sheet.result.fields]

    def summed(part: pd.DataFrame) -> np.ndarray:
        total = part.groupby(["field", "month"])["share"].sum(min_count=1)
        table = total.unstack("month").reindex(index=ids, columns=range(1, N_MONTHS + 1))
        return table.to_numpy(float)

    worst, descent = (
        summed(frame[frame["band"].isin(bands(method))]) for bands in (serious_in_cruise, serious)
    )

    def cell(field: int, period: int) -> Html:
        if math.isnan(worst[field, period]):
            return NO_CELL
        below = el("small", number(float(descent[field, period])))
        return el("td", number(float(worst[field, period])), " ", below)

    heads = (
        f"Carburettor icing, % of daylight hours ({basis}): {ICING_SERIOUS}, below it serious at "
        "least in descent",
        f"Month: {ICING_SERIOUS}; at least in descent; {basis}",
        "",
    )
    return period_tables(sheet, order, cell, heads, seasons=False)


# Engine power


def power_tables(sheet: Sheet, order: Sequence[int]) -> list[Html]:
    """Power that the air leaves, a table for each kind of engine it is computed for."""
    made = []
    for engine, profiles in engine_groups(sheet.result).items():
        frame = sheet.result.power_monthly
        frame = frame[frame["aircraft"] == profiles[0].id]
        if frame.empty:
            continue
        if frame["power_p50"].isna().all() and frame["humidity_ft_p50"].notna().any():
            words = f"Engine power, {engine}: {frame['method'].iloc[0]}."
            made.append(el("p", words, class_="quiet"))
            continue
        made += _power_table(sheet, order, engine, _rows_of(frame), profiles[0].id)
    return made


def _power_table(
    sheet: Sheet, order: Sequence[int], engine: str, rows: _Rows, aircraft: str
) -> list[Html]:
    names = [a.id for a in sheet.result.aircraft]
    of = [given(sheet.aircraft[names.index(p.id)]) for p in engine_groups(sheet.result)[engine]]
    parts: list[object] = [part for name in of for part in (", ", name)]
    who = parts[1:]

    def year(field: int) -> list[_Row]:
        key = sheet.result.fields[field].id
        found = [rows.get((key, aircraft, month)) for month in range(1, N_MONTHS + 1)]
        return [row for row in found if row is not None and not pd.isna(row["power_p50"])]

    def cell(field: int, period: int) -> Html:
        row = rows.get((sheet.result.fields[field].id, aircraft, period + 1))
        if row is None or pd.isna(row["power_p50"]):
            return NO_CELL
        ends = f"{_per_cent(row['power_p10'])}-{_per_cent(row['power_p90'])}"
        return el("td", _per_cent(row["power_p50"]), " ", el("small", ends))

    def last(field: int) -> Html:
        known = year(field)
        if not known:
            return el("td", NO_DATA, class_="none end")
        least = min(known, key=lambda row: row["power_p50"])
        damp = max(known, key=lambda row: row["humidity_ft_p50"])
        first = (
            f"{MONTHS[int(least['month']) - 1]} {_per_cent(least['power_p50'])} %, "
            f"at best {_per_cent(least['optimistic_p50'])} % "
        )
        feet = f"{grouped(_up(damp['humidity_ft_p50'], 10.0))} ft"
        lost = f"{_up(damp['humidity_power_pct_p50'] * 10.0, 1.0) / 10.0:g} %"
        took = f"humidity {MONTHS[int(damp['month']) - 1]}: {feet}, {lost} of power"
        return el("td", first, el("small", took, class_="wrap"), class_="end")

    heads = (
        [f"Engine power, {engine} (", *who, "), % of that in standard air at sea level: median, "
         "below it the 10th and 90th percentile"],
        "Month: median; 1 hour in 10 is below, 1 in 10 above",
        "",
    )  # fmt: skip
    return period_tables(
        sheet, order, cell, heads, ("Least; humidity’s part, median", last), seasons=False
    )


def _per_cent(share: float) -> str:
    """A share of power in whole per cent, rounded down, without the sign."""
    return str(whole_down(share * 100.0))


def _up(value: float, step: float) -> int:
    return whole_up(value / step) * int(step)
