"""The frames of a result as packed arrays, one value per combination of their axes.

The page shows from the arrays what it would show from the exact values.  What does not depend
on the aircraft stands once per field.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
import pandas as pd

from climarisk.outputs.packing import (
    NO_BYTE,
    above,
    counts,
    feet,
    floats,
    hundreds,
    packed,
    share_codes,
    words,
)
from climarisk.results import StudyResult

MONTHS = range(1, 13)
HOURS = range(24)

#: Percentiles of the monthly density altitude that the panel of a field shows.
_ALTITUDE_PERCENTILES = ("p10", "p25", "p50", "p75", "p90", "p95")
_HUMIDITY_PERCENTILES = ("p10", "p50", "p90")
_SHARE_COLUMNS = ("shortfall", "ci_low", "ci_high", "outside_table", "days_affected", "coverage")
#: A share with the air as estimated stands beside the share from this difference on.
_CENTRAL_DIFFERENCE = 0.01
#: The lowest margin that is sent, per cent; the highest is 254 above it.
_LOWEST_MARGIN_PCT = -100
#: Stands for a share of something good that is above none and below 1 %.
BELOW_ONE = 101
#: Takes back the error of a product of floats: 0.29 * 100 is below 29.
SLACK = 1e-9

_Arrays = dict[str, list[str]]


def arrays(
    result: StudyResult, levels: np.ndarray, limits: Sequence[str], notes: Sequence[str]
) -> tuple[_Arrays, int]:
    """Every array of the page by its name, and the base of the altitudes in hundreds of feet.

    Parameters
    ----------
    result : StudyResult
    levels : ndarray
        The shares at which what the page shows changes, as from
        `climarisk.outputs.packing.share_levels`.
    limits, notes : sequence of str
        Names of the limiting checks and the notes, sent as their places in these.
    """
    altitudes, base = _altitude_arrays(result, notes)
    made = (
        altitudes | _humidity_arrays(result, levels) | _risk_arrays(result, levels, limits, notes)
    )
    made |= _margin_arrays(result, levels) | _trend_arrays(result)
    return made | _scenario_arrays(result, levels), base


def axis_values(frame: pd.DataFrame, column: str) -> list[str]:
    """The different values of a column in the order in which they come."""
    return [str(value) for value in pd.unique(frame[column])]


def scenario_names(result: StudyResult) -> list[str]:
    """Names of the variants, where there are any."""
    return [] if result.scenarios is None else axis_values(result.scenarios, "scenario")


def good_share_codes(values: pd.Series) -> np.ndarray:
    """Shares of something good in whole per cent, rounded down; only exactly all is 100.

    `BELOW_ONE` stands for a share above none and below 1 %, `NO_BYTE` for none known.

    Parameters
    ----------
    values : Series
        0-1.
    """
    share = floats(values).to_numpy()
    whole = np.floor(np.where(np.isnan(share), 0.0, share) * 100.0 + SLACK)
    whole = np.where(share < 1.0, np.minimum(whole, 99.0), whole)
    whole = np.where((share > 0.0) & (whole == 0.0), BELOW_ONE, whole)
    return np.where(np.isnan(share), NO_BYTE, whole).astype("u1")


def _field_ids(result: StudyResult) -> dict[str, Sequence[Any]]:
    return {"field": [field.id for field in result.fields]}


def _aircraft_ids(result: StudyResult) -> dict[str, Sequence[Any]]:
    return {"aircraft": [profile.id for profile in result.aircraft]}


def cells(frame: pd.DataFrame, axes: Mapping[str, Sequence[Any]]) -> pd.DataFrame:
    """The frame with exactly one row per combination of the axes, the last one fastest."""
    index = pd.MultiIndex.from_product([list(v) for v in axes.values()], names=list(axes))
    return frame.set_index(list(axes)).reindex(index)


def by_time(
    frames: Mapping[str, pd.DataFrame], axes: Mapping[str, Sequence[Any]]
) -> dict[str, pd.DataFrame]:
    """Frames by month, hour and season, each with one row per cell."""
    times: dict[str, dict[str, Sequence[Any]]] = {
        "month": {"month": MONTHS},
        "hour": {"month": MONTHS, "hour": HOURS},
        "season": {"season": axis_values(frames["season"], "season")},
    }
    return {name: cells(frame, {**axes, **times[name]}) for name, frame in frames.items()}


def _distributions(result: StudyResult, variable: str) -> dict[str, pd.DataFrame]:
    frames = {
        "month": result.distributions_monthly,
        "hour": result.distributions_hourly,
        "season": result.distributions_seasonal,
    }
    chosen = {name: frame[frame["variable"] == variable] for name, frame in frames.items()}
    return by_time(chosen, _field_ids(result))


def _altitude_arrays(result: StudyResult, notes: Sequence[str]) -> tuple[_Arrays, int]:
    """Density altitude to the nearest 100 ft, in steps above the lowest of the study.

    In bytes, or in words where the study spans more than bytes can say.
    """
    tables = _distributions(result, "density_altitude")
    wanted = {"month": _ALTITUDE_PERCENTILES, "hour": ("p50", "p90"), "season": ("p50", "p90")}
    values = {
        f"altitude_{time}_{p}": hundreds(tables[time][p]) for time in wanted for p in wanted[time]
    }
    known = [v[np.isfinite(v)].min() for v in values.values() if np.isfinite(v).any()]
    base = int(min(known, default=0))
    month, season = tables["month"], tables["season"]
    note = {text: number for number, text in enumerate(notes)}
    highest = max((np.nanmax(v) for v in values.values() if np.isfinite(v).any()), default=0.0)
    as_bytes = highest - base < NO_BYTE
    made = {
        name: packed(above(v, base) if as_bytes else words(pd.Series(v - base)))
        for name, v in values.items()
    }
    made["altitude_month_years"] = packed(counts(month["n_years"]))
    made["altitude_season_years"] = packed(counts(season["n_years"]))
    made["altitude_month_note"] = packed(counts(month["years_note"].map(note)))
    return made, base


def _humidity_arrays(result: StudyResult, levels: np.ndarray) -> _Arrays:
    def codes(values: pd.Series) -> list[str]:
        return packed(share_codes(values, levels))

    tables = _distributions(result, "relative_humidity")
    wanted = {"month": _HUMIDITY_PERCENTILES, "hour": ("p50",), "season": ("p50",)}
    made = {
        f"humidity_{time}_{p}": codes(floats(tables[time][p]) / 100.0)
        for time in wanted
        for p in wanted[time]
    }
    frames = {
        "month": result.near_saturation_monthly,
        "hour": result.near_saturation_hourly,
        "season": result.near_saturation_seasonal,
    }
    near = by_time(frames, _field_ids(result))
    made |= {f"near_{time}_2_5k": codes(near[time]["share_2_5k"]) for time in near}
    made["near_month_1k"] = codes(near["month"]["share_1k"])
    return made


def _risk_arrays(
    result: StudyResult, levels: np.ndarray, limits: Sequence[str], notes: Sequence[str]
) -> _Arrays:
    frames = {
        "month": result.risk_monthly,
        "hour": result.risk_hourly,
        "season": result.risk_seasonal,
    }
    tables = by_time(frames, {**_field_ids(result), **_aircraft_ids(result)})
    limit, note = ({w: n for n, w in enumerate(of)} for of in (limits, notes))
    made: _Arrays = {}
    for time in ("month", "season"):
        table = tables[time]
        for column in _SHARE_COLUMNS:
            made[f"{time}_{column}"] = packed(share_codes(table[column], levels))
        made[f"{time}_n_years"] = packed(counts(table["n_years"]))
        made[f"{time}_limiting"] = packed(counts(table["limiting"].map(limit)))
        made[f"{time}_note"] = packed(counts(table["interval_note"].map(note)))
        offered = words(table["hours_offered"])  # the same for every aircraft
        shape = (len(result.fields), len(result.aircraft), -1)
        made[f"{time}_offered"] = packed(offered.reshape(shape)[:, 0].copy())
        made[f"{time}_usable"] = packed(words(table["usable_hours"]))
        central = floats(table["shortfall_central"])
        apart = (floats(table["shortfall"]) - central).abs() >= _CENTRAL_DIFFERENCE
        made[f"{time}_central"] = packed(share_codes(central.where(apart), levels))
    hourly = tables["hour"]
    made["hour_shortfall"] = packed(share_codes(hourly["shortfall"], levels))
    inside = (floats(hourly["in_window"]).to_numpy() > 0.0).reshape(len(result.fields), -1)
    of_field = inside[:, : len(MONTHS) * len(HOURS)]  # the same for every aircraft
    made["window_bits"] = packed(np.packbits(of_field, axis=1))
    return made


def _margin_arrays(result: StudyResult, levels: np.ndarray) -> _Arrays:
    """Margins by check in whole per cent, rounded down, and shares of hours that fail it."""
    axes = {
        **_field_ids(result),
        **_aircraft_ids(result),
        "check": axis_values(result.margins_monthly, "check"),
        "month": MONTHS,
    }
    table = cells(result.margins_monthly, axes)
    margin = np.floor(floats(table["margin_p10"]).to_numpy() * 100.0)
    return {
        "check_margin_p10": packed(above(margin, _LOWEST_MARGIN_PCT)),
        "check_shortfall": packed(share_codes(table["shortfall"], levels)),
    }


def _trend_arrays(result: StudyResult) -> _Arrays:
    """Trends by field, aircraft (the first being the density altitude) and season.

    Slopes are whole feet or hundredths of a percentage point per decade; a break is given by
    its year, counted from the first of the study, where it is significant.
    """
    axes = {
        **_field_ids(result),
        "aircraft": ["", *(a.id for a in result.aircraft)],
        "season": axis_values(result.trends, "season"),
    }
    table = cells(result.trends, axes)
    fine = np.where(table.index.get_level_values("aircraft") == "", 1.0, 100.0)
    made = {
        f"trend_{name}": packed(feet(floats(table[name]) * fine))
        for name in ("slope_per_decade", "ci_low", "ci_high")
    }
    broken = floats(table["break_p_value"]) < 1.0 - float(result.settings["confidence"])
    since = floats(table["break_year"]) - float(result.settings["first_year"])
    made["trend_break"] = packed(counts(since.where(broken)))
    for name in ("n_years", "significant"):
        made[f"trend_{name}"] = packed(counts(table[name]))
    return made


def _scenario_arrays(result: StudyResult, levels: np.ndarray) -> _Arrays:
    """Shares by scenario, field, aircraft and month; density altitudes without the aircraft."""
    if result.scenarios is None:
        return {}
    axes: dict[str, Sequence[Any]] = {
        "scenario": scenario_names(result),
        **_field_ids(result),
        **_aircraft_ids(result),
        "month": MONTHS,
    }
    table = cells(result.scenarios, axes)
    made = {
        f"scenario_{name}": packed(share_codes(table[name], levels))
        for name in ("shortfall", "ci_low", "ci_high")
    }
    change = floats(table["shortfall_change"])
    made["scenario_rise"] = packed(share_codes(change.where(change >= 0.0), levels))
    made["scenario_fall"] = packed(share_codes(-change.where(change < 0.0), levels))
    first = table.xs(axes["aircraft"][0], level="aircraft")
    for p in ("p50", "p90"):
        made[f"scenario_altitude_{p}"] = packed(feet(first[f"density_altitude_{p}_ft"]))
        change_ft = first[f"density_altitude_{p}_change_ft"]
        made[f"scenario_altitude_{p}_change"] = packed(feet(change_ft))
    return made
