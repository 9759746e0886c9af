"""The planning answers for the scripts of the map page: weights, windows, bases, flights, ...

Everything is rounded so that it never looks better than it is: masses and usable hours down.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from typing import Any

import numpy as np
import pandas as pd

from climarisk.aircraft import AircraftProfile
from climarisk.bases import ALL_PAIRS
from climarisk.icing import LABELS, serious_in_cruise
from climarisk.outputs.map_arrays import (
    HOURS,
    MONTHS,
    SLACK,
    by_time,
    cells,
    good_share_codes,
)
from climarisk.outputs.map_overviews import (
    base_seasons,
    bases_arrays,
    difference_arrays,
    difference_pairs,
    field_ids,
    schedule_entry,
)
from climarisk.outputs.packing import NO_BYTE, counts, floats, packed, share_codes, words
from climarisk.results import StudyResult

#: Codes of a useful load beside the numbers of its steps.
MAXIMUM_MASS, CANNOT_BE_MET = 254, 253
#: Steps of a useful load in kg; the page uses the first that says it in so many of them.
_STEPS_KG = (1, 2, 5, 10, 20, 50, 100, 200, 500, 1000)
_FINE, _COARSE = 250, 40
#: From more fields times aircraft than this on the hours have the coarser steps.
LARGE = 500

_Arrays = dict[str, list[str]]
_Rows = Callable[[pd.DataFrame], list[list[Any]]]


def planning_arrays(result: StudyResult, levels: np.ndarray, notes: Sequence[str]) -> _Arrays:
    """Packed arrays of the planning answers by their names.

    Parameters
    ----------
    result : StudyResult
    levels : ndarray
        As for `climarisk.outputs.map_arrays.arrays`.
    notes : sequence of str
        Notes of the intervals, sent as their places in it.
    """
    note = {text: number for number, text in enumerate(notes)}
    made = _weight_arrays(result, levels, note) | _window_arrays(result, note)
    made |= _icing_arrays(result, levels) | _power_arrays(result)
    return made | bases_arrays(result, levels) | difference_arrays(result)


def planning_entries(result: StudyResult, rows: _Rows) -> dict[str, Any]:
    """What the page reads of the planning answers besides the arrays.

    Parameters
    ----------
    result : StudyResult
    rows : callable
        Makes the rows of a table, texts as their numbers.
    """
    asked = result.settings.get("planning", {})
    return {
        "target": float(asked.get("target", 0.05)),
        "holdsIn": float(asked.get("holds_in", 0.9)),
        "runHours": int(asked.get("consecutive_hours", 4)),
        "year": asked.get("year"),
        "fleet": [float(asked.get("fleet", {}).get(a.id, 1.0)) for a in result.aircraft],
        "hasWeights": not result.weights_monthly.empty,
        "windowHours": _window_words(result, "hours"),
        "windowClocks": _window_words(result, "clock_hours"),
        "icing": _icing_entry(result.icing_monthly),
        "engines": _engine_methods(result),
        "hasBases": not result.bases.empty,
        "baseSeasons": base_seasons(result.bases),
        "pairs": difference_pairs(result),
        "allPairs": ALL_PAIRS,
        "schedule": schedule_entry(result, rows),
    }


def aircraft_entry(result: StudyResult, profile: AircraftProfile) -> dict[str, Any]:
    """What the planning answers need to know of an aircraft."""
    fine, coarse = _steps_kg(result, profile)
    return {
        "carburettor": profile.carburettor,
        "emptyKg": profile.empty_kg,
        "maximumKg": profile.maximum_kg,
        "topLoad": _top_load(result, profile),
        "fineKg": fine,
        "coarseKg": coarse,
        "engine": _engines(result).index(_engine(profile)),
    }


# Weights


def load_steps_kg(profile: AircraftProfile, *, large: bool) -> tuple[int, int]:
    """Steps of the useful load for months and seasons, and for the hours; coarser in a large study.

    Parameters
    ----------
    profile : AircraftProfile
    large : bool
        Whether the study has so many fields and aircraft that the page would grow too large.
    """
    span = profile.maximum_kg - profile.empty_kg

    def smallest(most: int) -> int:
        return next((step for step in _STEPS_KG if span <= step * most), _STEPS_KG[-1])

    return smallest(_FINE), smallest(_COARSE if large else _FINE)


def _steps_kg(result: StudyResult, profile: AircraftProfile) -> tuple[int, int]:
    return load_steps_kg(profile, large=len(result.fields) * len(result.aircraft) > LARGE)


def load_codes(load_kg: pd.Series, outcome: pd.Series, step_kg: np.ndarray) -> np.ndarray:
    """Useful loads as whole steps, rounded down, or as what else came out.

    Parameters
    ----------
    load_kg : Series
    outcome : Series of str
    step_kg : ndarray
        The step of each row.
    """
    load = floats(load_kg).to_numpy()
    missing = np.isnan(load)
    steps = np.clip(np.floor(np.where(missing, 0.0, load) / step_kg), 0, CANNOT_BE_MET - 1)
    codes = np.where(missing, NO_BYTE, steps)
    codes = np.where((outcome == "maximum mass").to_numpy(), MAXIMUM_MASS, codes)
    return np.where((outcome == "cannot be met").to_numpy(), CANNOT_BE_MET, codes).astype("u1")


def _weight_frames(result: StudyResult) -> dict[str, pd.DataFrame]:
    return {
        "month": result.weights_monthly,
        "hour": result.weights_hourly,
        "season": result.weights_seasonal,
    }


def _weight_arrays(result: StudyResult, levels: np.ndarray, note: Mapping[str, int]) -> _Arrays:
    ids = [profile.id for profile in result.aircraft]
    steps = {a.id: _steps_kg(result, a) for a in result.aircraft}
    empty = {a.id: a.empty_kg for a in result.aircraft}
    tables = by_time(_weight_frames(result), {"field": field_ids(result), "aircraft": ids})
    made: _Arrays = {}
    for time, table in tables.items():
        of = table.index.get_level_values("aircraft")
        step = np.asarray(of.map({a: s[time == "hour"] for a, s in steps.items()}), float)
        made[f"load_{time}"] = packed(load_codes(table["useful_load_kg"], table["outcome"], step))
        if time == "hour":
            continue
        own_kg = np.asarray(of.map(empty), float)
        nothing = pd.Series("", index=table.index)
        for end in ("low", "high"):
            load = floats(table[f"ci_{end}_kg"]) - own_kg
            made[f"load_{time}_{end}"] = packed(load_codes(load, nothing, step))
        made[f"load_{time}_never"] = packed(share_codes(table["never_met"], levels))
        made[f"load_{time}_note"] = packed(counts(table["interval_note"].map(note)))
    return made


def _top_load(result: StudyResult, profile: AircraftProfile) -> float:
    """The useful load of a row that says the maximum mass holds."""
    for frame in _weight_frames(result).values():
        rows = frame[(frame["aircraft"] == profile.id) & (frame["outcome"] == "maximum mass")]
        if len(rows):
            return float(rows["useful_load_kg"].min())
    return profile.maximum_kg - profile.empty_kg


# Windows


def _window_words(result: StudyResult, column: str) -> list[str]:
    """The different texts of a column of the windows, told once; empty where no hour works."""
    return sorted({str(text) for text in result.windows_monthly[column].dropna()})


def _window_arrays(result: StudyResult, note: Mapping[str, int]) -> _Arrays:
    ids = [profile.id for profile in result.aircraft]
    axes = {"field": field_ids(result), "aircraft": ids, "month": MONTHS}
    table = cells(result.windows_monthly, axes)
    known = table["n_clock_hours"].notna()
    made = {
        "clock_unknown": packed(counts(table["hours_without_figures"])),
        "run_days": packed(good_share_codes(table["days_with_run"])),
        "daylight_note": packed(counts(table["interval_note"].map(note))),
    }
    for column in ("hours", "clock_hours"):
        place = {text: number for number, text in enumerate(_window_words(result, column))}
        made[f"window_{column}"] = packed(words(table[column].map(place).where(known)))
    for name in ("daylight_hours", "usable_hours", "usable_low"):
        made[f"daylight_{name}"] = packed(words(table[name]))
    made["daylight_usable_high"] = packed(words(np.ceil(floats(table["usable_high"]))))
    return made


# Icing and power


def _icing_entry(monthly: pd.DataFrame) -> dict[str, Any] | None:
    """How the exposure was judged; None where no aircraft of the study has a carburettor."""
    if monthly.empty:
        return None
    method = str(monthly["method"].iloc[0])
    bands = [str(band) for band in pd.unique(monthly["band"])]
    return {
        "method": method,
        "verified": str(monthly["verified"].iloc[0]),
        "bands": [LABELS.get(band, band) for band in bands],
    }


def _icing_arrays(result: StudyResult, levels: np.ndarray) -> _Arrays:
    if result.icing_monthly.empty:
        return {}
    bands = list(pd.unique(result.icing_monthly["band"]))
    fields = field_ids(result)
    monthly = cells(result.icing_monthly, {"field": fields, "band": bands, "month": MONTHS})
    worst = list(serious_in_cruise(str(result.icing_monthly["method"].iloc[0])))
    axes = {"field": fields, "month": MONTHS, "hour": HOURS, "band": worst}
    hourly = floats(cells(result.icing_hourly, axes)["share"]).to_numpy()
    together = hourly.reshape(-1, len(worst)).sum(axis=1)
    return {
        "icing_month": packed(share_codes(monthly["share"], levels)),
        "icing_hour": packed(share_codes(pd.Series(together), levels)),
    }


def _engine(profile: AircraftProfile) -> tuple[str, float | None]:
    return profile.aspiration, profile.critical_altitude_ft


def _engines(result: StudyResult) -> list[tuple[str, float | None]]:
    """Engines that the air treats differently, in the order of the aircraft."""
    return list(dict.fromkeys(_engine(profile) for profile in result.aircraft))


def _engine_aircraft(result: StudyResult) -> list[str]:
    """An aircraft with each of the engines."""
    first = {_engine(a): a.id for a in reversed(result.aircraft)}
    return [first[engine] for engine in _engines(result)]


def _engine_methods(result: StudyResult) -> list[str]:
    power = result.power_monthly.drop_duplicates("aircraft").set_index("aircraft")["method"]
    return [str(power.get(name, "")) for name in _engine_aircraft(result)]


def _power_arrays(result: StudyResult) -> _Arrays:
    """Power in whole per cent, rounded down; what humidity takes in tenths and tens, rounded up."""
    ids = _engine_aircraft(result)
    axes = {"field": field_ids(result), "aircraft": ids, "month": MONTHS}
    table = cells(result.power_monthly, axes)
    made = {}
    for name in ("power_p10", "power_p50", "power_p90", "optimistic_p50"):
        made[name] = packed(counts(np.floor(floats(table[name]) * 100.0 + SLACK)))
    for name in ("humidity_power_pct_p50", "humidity_power_pct_p90"):
        made[name] = packed(counts(np.ceil(floats(table[name]) * 10.0 - SLACK)))
    first = table.xs(ids[0], level="aircraft") if ids else table
    for name in ("humidity_ft_p50", "humidity_ft_p90"):
        made[name] = packed(counts(np.ceil(floats(first[name]) / 10.0 - SLACK)))
    return made
