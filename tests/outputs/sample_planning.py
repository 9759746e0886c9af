"""The planning answers of the invented study result: weights, windows, bases, flights and so on.

Every frame is full of figures that hang together with the shares of the sample, but for the
field without any data and the two months that a second field lacks.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
import pandas as pd

from climarisk.results import (
    BASE_DIFFERENCES_COLUMNS,
    BASES_COLUMNS,
    ICING_HOURLY_COLUMNS,
    ICING_MONTHLY_COLUMNS,
    POWER_MONTHLY_COLUMNS,
    SCHEDULE_DAYS_COLUMNS,
    SCHEDULE_FLIGHTS_COLUMNS,
    SCHEDULE_SEASONS_COLUMNS,
    WEIGHTS_HOURLY_COLUMNS,
    WEIGHTS_MONTHLY_COLUMNS,
    WEIGHTS_SEASONAL_COLUMNS,
    WINDOWS_MONTHLY_COLUMNS,
)
from climarisk.rules import interval_notes

EMPTY_FIELD = "field-5"
HOLDS_IN = 0.90
TARGET = 0.05
RUN_HOURS = 4
#: Names of the bands as the icing frames have them, and how much of the exposure each takes.
ICING_BANDS = {
    "serious_any_power": 0.15,
    "moderate_cruise_serious_descent": 0.25,
    "serious_descent": 0.3,
    "light_cruise_or_descent": 0.203,
}
EMPTY_KG, MAXIMUM_KG = 520.0, 760.0
#: Below this none of the tabulated masses holds.
_LIGHTEST_KG = 560.0
#: A month of the sample, and its share in daylight.
_MONTH_H = 720.0
#: Differences are told between so many of the best fields.
_COMPARED = 12


def planning_settings(aircraft: Sequence) -> dict:
    """What the settings of the sample say of the planning answers."""
    return {
        "holds_in": HOLDS_IN,
        "target": TARGET,
        "consecutive_hours": RUN_HOURS,
        "carburettor_icing": "chart",
        "year": 2027,
        "fleet": {profile.id: float(1 + i % 2) for i, profile in enumerate(aircraft)},
    }


def planning_frames(fields, aircraft, seasons, risk_monthly, risk_hourly) -> dict:
    """Every frame of the planning answers by its name in a study result."""
    windows = _windows(fields, aircraft, risk_monthly, risk_hourly)
    bases = _bases(fields, aircraft, seasons, windows)
    flights = _flights(fields, aircraft)
    return {
        "weights_monthly": _weights(fields, aircraft, seasons, "month"),
        "weights_hourly": _weights(fields, aircraft, seasons, "hour"),
        "weights_seasonal": _weights(fields, aircraft, seasons, "season"),
        "windows_monthly": windows,
        "icing_monthly": _icing(fields, hourly=False),
        "icing_hourly": _icing(fields, hourly=True),
        "power_monthly": _power(fields, aircraft),
        "bases": bases,
        "base_differences": _differences(bases),
        "schedule_flights": flights,
        "schedule_seasons": _schedule_seasons(flights, seasons),
        "schedule_days": _schedule_days(),
    }


def _grid(axes: dict[str, Sequence]) -> pd.DataFrame:
    """One row for each combination of the axes, the last one fastest."""
    return pd.MultiIndex.from_product(axes.values(), names=list(axes)).to_frame(index=False)


def _axes(fields, aircraft=()) -> dict[str, Sequence]:
    axes: dict[str, Sequence] = {"field": [f.id for f in fields]}
    return axes | ({"aircraft": [a.id for a in aircraft]} if aircraft else {})


def _is_empty(table: pd.DataFrame) -> np.ndarray:
    empty = table["field"] == EMPTY_FIELD
    if "month" in table:
        empty |= (table["field"] == "field-1") & table["month"].isin([2, 4])
    return empty.to_numpy()


def _number(ids: pd.Series) -> np.ndarray:
    return ids.str.rpartition("-")[2].astype(int).to_numpy()


def _warmth(table: pd.DataFrame) -> np.ndarray:
    """0-1 through the year; the middle for a season."""
    if "month" not in table:
        return np.full(len(table), 0.5)
    return 0.5 - 0.5 * np.cos((table["month"].to_numpy() - 1) / 12 * 2 * np.pi)


def _sun(table: pd.DataFrame) -> np.ndarray:
    """0-1 through the day; a little above the middle for a whole month."""
    if "hour" not in table:
        return np.full(len(table), 0.6)
    return 0.5 - 0.5 * np.cos((table["hour"].to_numpy() - 3) / 24 * 2 * np.pi)


def _years(table: pd.DataFrame) -> np.ndarray:
    """Years that count: by month 14, 8 or 4 as in the shares of the sample."""
    years = np.full(len(table), 14)
    if "month" in table and "hour" not in table:
        place = (_number(table["field"]) + table["month"].to_numpy()) % 3
        years = np.array([14, 8, 4])[place]
    return np.where(_is_empty(table), 0, years)


def _weights(fields, aircraft, seasons, kind: str) -> pd.DataFrame:
    axes = _axes(fields, aircraft)
    axes |= {"season": seasons} if kind == "season" else {"month": range(1, 13)}
    axes |= {"hour": range(24)} if kind == "hour" else {}
    table = _grid(axes)
    number, years, empty = _number(table["field"]), _years(table), _is_empty(table)
    level = 1.35 * _warmth(table) * _sun(table) - 0.35 + 0.1 * (number % 6)
    level += 0.12 * (_number(table["aircraft"]) % 2)
    mass = MAXIMUM_KG - 230.0 * np.maximum(level, 0.0) + 0.013 * number
    unmet, all_of_it = mass < _LIGHTEST_KG, level <= 0.0
    mass = np.where(empty | unmet, np.nan, np.minimum(mass, MAXIMUM_KG))
    table["n_hours"], table["n_years"], table["coverage"] = 300 * years, years, years / 15
    table["holds_in"], table["mass_kg"], table["useful_load_kg"] = HOLDS_IN, mass, mass - EMPTY_KG
    outcome = np.select([empty, unmet, all_of_it], ["", "cannot be met", "maximum mass"], "mass")
    table["outcome"] = outcome.astype(object)
    never = np.clip(level - 0.6, 0.0, 1.0)
    table["never_met"] = np.where(empty, np.nan, never)
    if kind != "hour":
        none = years < 5
        table["ci_low_kg"] = np.where(none, np.nan, np.maximum(mass - 21.4, _LIGHTEST_KG))
        table["ci_high_kg"] = np.where(none, np.nan, np.minimum(mass + 16.2, MAXIMUM_KG))
        table["interval_note"] = interval_notes(years)
    columns = {
        "month": WEIGHTS_MONTHLY_COLUMNS,
        "hour": WEIGHTS_HOURLY_COLUMNS,
        "season": WEIGHTS_SEASONAL_COLUMNS,
    }[kind]
    return table[columns]


# Windows


def ranges(hours: Sequence[int]) -> str:
    """Hours that follow one another as ``06-10 18``."""
    runs: list[list[int]] = []
    for hour in hours:
        if runs and runs[-1][1] == hour - 1:
            runs[-1][1] = hour
        else:
            runs.append([hour, hour])
    return " ".join(f"{a:02d}" if a == b else f"{a:02d}-{b:02d}" for a, b in runs)


def civil(hour: int, month: int) -> str:
    """The clock in summer an hour ahead; both where the change falls into the month."""
    ahead = {3: (0, 1), 10: (1, 0)}.get(month, (1,) if 3 < month < 10 else (0,))
    return " / ".join(f"{(hour + one) % 24:02d}:00" for one in ahead)


def civil_ranges(text: str, month: int) -> str:
    """Ranges of hours by that clock."""
    if not text:
        return ""
    ahead = {3: (0, 1), 10: (1, 0)}.get(month, (1,) if 3 < month < 10 else (0,))
    shown = (
        " ".join(
            "-".join(f"{(int(hour) + one) % 24:02d}:00" for hour in part.split("-"))
            for part in text.split()
        )
        for one in ahead
    )
    return " / ".join(shown)


def _windows(fields, aircraft, monthly: pd.DataFrame, hourly: pd.DataFrame) -> pd.DataFrame:
    shape = (len(monthly), 24)
    shares = hourly["shortfall"].to_numpy().reshape(shape)
    inside = hourly["in_window"].to_numpy().reshape(shape) > 0
    table = _grid({**_axes(fields, aircraft), "month": range(1, 13)})
    empty, share = _is_empty(table), monthly["shortfall"].to_numpy()
    years, month = monthly["n_years"].to_numpy(), table["month"].to_numpy()
    good = inside & (shares < TARGET)
    found = [list(np.flatnonzero(row)) for row in good]
    table["target"] = TARGET
    table["hours"] = [ranges(hours) for hours in found]
    table["n_clock_hours"] = np.where(empty, np.nan, good.sum(axis=1))
    table["first_hour"] = [float(hours[0]) if hours else math.nan for hours in found]
    table["last_hour"] = [float(hours[-1]) if hours else math.nan for hours in found]
    pairs = list(zip(found, month, strict=True))
    table["clock_first"] = [civil(int(h[0]), m) if h else "" for h, m in pairs]
    table["clock_last"] = [civil(int(h[-1]), m) if h else "" for h, m in pairs]
    table["clock_hours"] = [civil_ranges(ranges(h), m) for h, m in pairs]
    table["hours_without_figures"] = (inside & np.isnan(shares)).sum(axis=1)
    daylight = _MONTH_H * (0.5 + 0.12 * _warmth(table) * 2 - 0.12)
    table["daylight_hours"] = daylight
    table["usable_hours"] = daylight * (1.0 - share)
    table["usable_low"] = daylight * (1.0 - monthly["ci_high"].to_numpy())
    table["usable_high"] = daylight * (1.0 - monthly["ci_low"].to_numpy())
    table["run_hours"] = RUN_HOURS
    table["days_with_run"] = np.where(empty, np.nan, 1.0 - share**2)
    table["n_years"], table["coverage"] = years, years / 15
    table["interval_note"] = monthly["interval_note"].to_numpy()
    return table[WINDOWS_MONTHLY_COLUMNS]


# Icing and power


def _icing(fields, *, hourly: bool) -> pd.DataFrame:
    axes = {**_axes(fields), "month": range(1, 13)}
    axes |= {"hour": range(24)} if hourly else {}
    table = _grid({**axes, "band": list(ICING_BANDS)})
    dark = ~table["hour"].between(6, 19).to_numpy() if hourly else np.zeros(len(table), bool)
    years = np.where(dark, 0, _years(table))
    cold = 0.9 - 0.7 * _warmth(table) - (0.3 * _sun(table) if hourly else 0.1)
    share = np.clip(cold, 0.0, 1.0) * table["band"].map(ICING_BANDS).to_numpy()
    table["n_hours"], table["n_years"], table["coverage"] = 300 * years, years, years / 15
    table["method"], table["verified"] = "chart", "no"
    table["share"] = np.where(years == 0, np.nan, share)
    return table[ICING_HOURLY_COLUMNS if hourly else ICING_MONTHLY_COLUMNS]


def _power(fields, aircraft) -> pd.DataFrame:
    table = _grid({**_axes(fields, aircraft), "month": range(1, 13)})
    number, years, warmth = _number(table["field"]), _years(table), _warmth(table)
    diesel = table["aircraft"].map({a.id: a.aspiration == "diesel" for a in aircraft}).to_numpy()
    known = np.where(_is_empty(table), np.nan, 1.0)
    power = 0.93 - 0.02 * (number % 9) - 0.05 * warmth
    vapour = 0.4 + 1.9 * warmth
    table["n_hours"], table["n_years"], table["coverage"] = 300 * years, years, years / 15
    full = "full throttle, by the density of the dry air (Gagg and Farrar)"
    none = "not computed: a diesel engine needs its maker's table"
    table["method"] = np.where(diesel, none, full)
    computed = np.where(diesel, np.nan, known)
    for name, step in (("power_p10", -0.021), ("power_p50", 0.0), ("power_p90", 0.024)):
        table[name] = (power + step) * computed
    table["optimistic_p50"] = (power + 0.026 * warmth) * computed
    table["humidity_power_pct_p50"] = vapour * computed
    table["humidity_power_pct_p90"] = vapour * 1.6 * computed
    table["humidity_ft_p50"] = vapour * 100.0 * known
    table["humidity_ft_p90"] = vapour * 160.0 * known
    return table[POWER_MONTHLY_COLUMNS]


# Bases


def _bases(fields, aircraft, seasons, windows: pd.DataFrame) -> pd.DataFrame:
    """Ranked by the mean over the aircraft, those without figures last and without a rank."""
    hours = windows.groupby(["field", "aircraft"], sort=False)["usable_hours"].mean()
    fleet = hours.groupby(level="field", sort=False).mean()
    order = fleet.sort_values(ascending=False, kind="stable", na_position="last").index
    steep = {field.id: "yes" if field.is_steep else "" for field in fields}
    rows = []
    for rank, field in enumerate(order, start=1):
        number = int(field.rpartition("-")[2])
        for who in ["", *(a.id for a in aircraft)]:
            mean = float(fleet[field] if who == "" else hours[field, who])
            if math.isnan(mean):
                rows.append(
                    [
                        math.nan,
                        field,
                        who,
                        *[math.nan] * 5,
                        "",
                        *[math.nan] * 5,
                        0,
                        "",
                        steep[field],
                    ]
                )
                continue
            share = mean / _MONTH_H
            spread = [mean - 14.2, mean + 11.7, mean - 38.5, mean + 29.9]
            worst = [seasons[number % len(seasons)], mean * 0.71]
            exposure = [0.02 + 0.01 * (number % 5), 0.06 + 0.03 * (number % 5), 0.183]
            rows.append(
                [rank, field, who, mean, *spread, *worst, share, *exposure, 14, "", steep[field]]
            )
    return pd.DataFrame(rows, columns=BASES_COLUMNS)


def _differences(bases: pd.DataFrame) -> pd.DataFrame:
    """Each pair of the best fields once, the better one for an aircraft first."""
    known = bases[bases["usable_hours_month"].notna()]
    fleet = known[known["aircraft"] == ""]["field"].tolist()[:_COMPARED]
    hours = known.set_index(["field", "aircraft"])["usable_hours_month"]
    rows = []
    for place, first in enumerate(fleet):
        for second in fleet[place + 1 :]:
            for who in hours[first].index:
                better = hours[first, who] >= hours[second, who]
                pair = (first, second) if better else (second, first)
                gap = float(hours[pair[0], who] - hours[pair[1], who])
                rows.append([*pair, who, gap, gap - 9.3, gap + 8.1, ""])
    return pd.DataFrame(rows, columns=BASE_DIFFERENCES_COLUMNS)


# Schedule


def _flights(fields, aircraft, n_flights: int = 14) -> pd.DataFrame:
    """Flights from never to always possible; some leave from the field without data."""
    rows = []
    for n in range(n_flights):
        field, profile = fields[n % len(fields)], aircraft[n % len(aircraft)]
        share = min(1.0, max(0.0, 0.013 * ((n * 37) % 97) - 0.1))
        never = n % 11 == 3
        share = 1.0 if never else share
        empty = field.id == EMPTY_FIELD
        count = 1 + n % 40
        outcome = "cannot be met" if never else ("maximum mass" if share == 0.0 else "mass")
        mass = {"cannot be met": math.nan, "maximum mass": MAXIMUM_KG}.get(
            outcome, 760 - 90 * share
        )
        when = f"2027-{1 + n % 12:02d}-{1 + n % 28:02d}" if n % 3 else "weekdays, <b>JJA</b>"
        name = f"FL {n}" if n else "</script><script>window.pwned=1</script>"
        nearest = ["", math.nan, math.nan] if never or share == 0.0 else ["07:30", -3.5, 0.031]
        head = [name, field.id, profile.id, ("takeoff", "landing", "both")[n % 3], when]
        head += [f"{8 + n % 11:02d}:30", f"{7 + n % 11:02d} {8 + n % 11:02d}", 720.0, count]
        marks = ["yes" if field.is_steep else "", "outside the hours window" if n % 5 == 4 else ""]
        if empty:
            tail = [0, 0, 0.0, *[math.nan] * 4, "", HOLDS_IN, *[math.nan] * 2, "", "", math.nan]
            marks[1] = "; ".join(filter(None, [marks[1], "the nearest time cannot be told"]))
            rows.append([*head, *tail, math.nan, "", "", *marks, count])
            continue
        unknown = count // 3 if n % 4 == 1 else 0
        few = n % 7 == 5
        ends = [math.nan] * 2 if few else [max(0.0, share - 0.06), min(1.0, share + 0.07)]
        limiting = "take-off to 50 ft" if share else ""
        tail = [420, 14, 14 / 15, share, *ends, share * (count - unknown), limiting, HOLDS_IN, mass]
        tail += [mass - EMPTY_KG, outcome, *nearest, "yes" if never else "no"]
        rows.append([*head, *tail, "no interval below 5 years" if few else "", *marks, unknown])
    return pd.DataFrame(rows, columns=SCHEDULE_FLIGHTS_COLUMNS)


def _schedule_seasons(flights: pd.DataFrame, seasons) -> pd.DataFrame:
    total, affected = int(flights["flights"].sum()), float(flights["affected"].sum())
    unknown = int(flights["unknown_flights"].sum())
    rows = []
    for name, part in (("", 1.0), *((s, 0.4 / (i + 1)) for i, s in enumerate(seasons))):
        hit = affected * part
        figures = [hit, hit * 0.7, hit * 1.4, hit * 0.45, hit * 1.9, 2022, 14, ""]
        rows.append([name, int(total * part), int(unknown * part), *figures])
    return pd.DataFrame(rows, columns=SCHEDULE_SEASONS_COLUMNS)


def _schedule_days() -> pd.DataFrame:
    days = pd.date_range("2027-06-01", periods=70, freq="D")
    rows = []
    for n, day in enumerate(days):
        share = ((n * 29) % 71) / 100.0
        rows.append([day.date().isoformat(), day.day_name(), 6, n % 2, 6 * share, share])
    return pd.DataFrame(rows, columns=SCHEDULE_DAYS_COLUMNS)
