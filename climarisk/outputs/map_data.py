"""What the scripts of the map page read: texts as JSON, numbers as packed arrays.

A share is one byte, feet are two; the page shows from them what it would show from the exact
values.  Density altitude and humidity do not depend on the aircraft and stand once per field.
"""

from __future__ import annotations

import base64
import math
from collections.abc import Callable, Mapping, Sequence
from typing import Any

import numpy as np
import pandas as pd

from climarisk.fields import STEEP_SLOPE_PCT, Field, RunwayDirection
from climarisk.results import StudyResult
from climarisk.trend import STATION_MOVE, TREND_YEARS
from climarisk.units import METRES_PER_FOOT

#: What the page says about its own limits; the first one stands at its top.
CAUTIONS = (
    "Planning and comparison aid based on past weather. It is not a take-off or landing "
    "calculation and is not approved by any authority. The approved flight manual of the "
    "individual aeroplane, current weather and the judgement of the pilot in command always "
    "govern; local rules and licensed practice apply.",
    "Shares and percentiles describe the record used, not a forecast; a rare hot day can "
    "exceed every value shown. An hour without data is left out: it is never counted as "
    "an hour without risk.",
    "Distances come from the figures supplied with the study. Profiles without a table are "
    "scaled by generic rules and marked; nothing is calculated beyond the last row of a table.",
    "Weather at a field without a station of its own is estimated from stations nearby; the "
    "error may be larger in closed valleys and at night.",
    "Runway data may be incomplete or out of date; verify them in the current aeronautical "
    "publication and with the operator. Strips steeper than 2 % need a site-specific "
    "procedure and instruction.",
    "Commercial, instructional or insurance decisions should be reviewed by a suitably "
    "qualified person.",
)

#: Stand for "no value" in the packed arrays of bytes and of feet.
NO_BYTE = 255
NO_FEET = -32768
#: Band edges beyond this many are left out: the colour scheme has nine classes at most.
MOST_EDGES = 8

MONTHS = range(1, 13)
HOURS = range(24)

#: Percentiles of the monthly density altitude that the panel of a field shows.
_ALTITUDE_PERCENTILES = ("p10", "p25", "p50", "p75", "p90", "p95")
_HUMIDITY_PERCENTILES = ("p10", "p50", "p90")
_SHARE_COLUMNS = ("shortfall", "ci_low", "ci_high", "outside_table", "days_affected")
#: A share with the air as estimated stands beside the share from this difference on.
_CENTRAL_DIFFERENCE = 0.01

#: What the page says of a runway direction.
_RUNWAY: dict[str, Callable[[RunwayDirection], Any]] = {
    "runway": lambda way: way.runway,
    "heading": lambda way: way.heading_deg,
    "lengths": lambda way: [way.tora_m, way.toda_m, way.asda_m, way.lda_m],
    "slope": lambda way: way.slope_pct,
    "steep": lambda way: abs(way.slope_pct) > STEEP_SLOPE_PCT,
    "surface": lambda way: way.surface,
    "takeoff": lambda way: way.takeoff,
    "landing": lambda way: way.landing,
    "undeclared": lambda way: way.undeclared,
}


def payload(result: StudyResult) -> dict[str, Any]:
    """What the page's scripts read: texts as JSON, numbers as packed arrays.

    Density altitude and humidity do not depend on the aircraft and stand once per field.
    """
    limits = _words(result.risk_monthly, result.risk_seasonal, column="limiting")
    notes = _words(result.risk_monthly, result.risk_seasonal, column="interval_note")
    notes += _words(result.distributions_monthly, column="years_note")
    seasons = _seasons(result.risk_seasonal)
    bands = [float(edge) for edge in result.settings["bands"]][:MOST_EDGES]
    levels = _share_levels(bands)
    return {
        "title": result.title,
        "version": str(result.provenance.get("version", "")),
        "settings": _plain(result.settings),
        "bands": bands,
        "levels": levels.tolist(),
        "seasons": seasons,
        "limits": limits,
        "notes": notes,
        "trendSeasons": _seasons(result.trends),
        "trendYears": TREND_YEARS,
        "stationMove": STATION_MOVE,
        "scenarios": _scenario_names(result),
        "steepPct": STEEP_SLOPE_PCT,
        "metresPerFoot": METRES_PER_FOOT,
        "columns": _row_columns(result),
        "fields": [
            _field_entry(field, drawn, result)
            for field, drawn in zip(result.fields, drawn_longitudes(result.fields), strict=True)
        ],
        "aircraft": [
            {"id": a.id, "name": a.name, "source": a.source, "scaled": a.is_scaled}
            for a in result.aircraft
        ],
        "findings": [finding.as_dict() for finding in result.findings],
        "attributions": list(result.attributions),
        "cautions": list(CAUTIONS),
        "arrays": _distribution_arrays(result, levels, notes)
        | _risk_arrays(result, levels, seasons, (limits, notes))
        | _trend_arrays(result)
        | _scenario_arrays(result, levels),
    }


def drawn_longitudes(fields: Sequence[Field]) -> list[float]:
    """Longitudes for the map, degrees: west ones shifted by 360 where that keeps fields together.

    Fields on both sides of the 180 degree meridian are drawn beside each other this way.
    """
    plain = [field.longitude for field in fields]
    shifted = [longitude % 360.0 for longitude in plain]
    if plain and max(shifted) - min(shifted) < max(plain) - min(plain):
        return shifted
    return plain


def _words(*frames: pd.DataFrame, column: str) -> list[str]:
    """The different texts of a column, empty ones left out."""
    return sorted({str(word) for f in frames for word in f[column].dropna() if str(word)})


def _numbered(words: Sequence[str]) -> dict[str, int]:
    return {word: number for number, word in enumerate(words)}


def _seasons(frame: pd.DataFrame) -> list[str]:
    return [str(season) for season in pd.unique(frame["season"])]


def _plain(value: Any) -> Any:
    """The value with NaN as null, NumPy scalars as Python's and tuples as lists."""
    if isinstance(value, Mapping):
        return {str(key): _plain(item) for key, item in value.items()}
    if isinstance(value, list | tuple | range):
        return [_plain(item) for item in value]
    if isinstance(value, np.generic):
        value = value.item()
    if value is None or isinstance(value, bool | int | str):
        return value
    if isinstance(value, float):
        return value if math.isfinite(value) else None
    return None if pd.isna(value) else str(value)


def _rows(table: pd.DataFrame) -> list[list[Any]]:
    return [[_plain(value) for value in row.values()] for row in table.to_dict("records")]


def _row_columns(result: StudyResult) -> dict[str, list[str]]:
    """Names of the columns of the rows that each field has, told once for all fields."""
    return {
        "runways": [*_RUNWAY],
        "stations": [name for name in result.station_use.columns if name != "field"],
        "estimate": [name for name in result.estimates.columns if name != "field"],
    }


def _field_entry(field: Field, drawn: float, result: StudyResult) -> dict[str, Any]:
    use = result.station_use
    pressure = result.pressure_sources
    stations = use[use["field"] == field.id].drop(columns="field")
    sources = pressure[pressure["field"] == field.id]
    estimates = result.estimates
    estimate = estimates[estimates["field"] == field.id].drop(columns="field")
    return {
        "id": field.id,
        "name": field.name,
        "latitude": field.latitude,
        "longitude": field.longitude,
        "drawn": drawn,
        "elevation": field.elevation_m,
        "timezone": field.timezone,
        "pinned": list(field.stations),
        "runways": [[read(way) for read in _RUNWAY.values()] for way in field.runways],
        "stations": _rows(stations),
        "pressure": [_plain(row) for row in sources[["source", "share"]].to_dict("records")],
        "estimate": _rows(estimate),
        "extremes": _extremes_entry(field, result.extremes),
    }


def _extremes_entry(field: Field, extremes: pd.DataFrame) -> dict[str, Any]:
    """Years of the record, and return period with level and interval in whole feet each."""
    own = extremes[extremes["field"] == field.id]
    levels = np.column_stack(
        [own["return_period_years"]]
        + [_feet(own[name]) for name in ("density_altitude_ft", "ci_low", "ci_high")]
    )
    return {"years": _plain(own["n_years"].max()), "levels": levels.astype(int).tolist()}


def _distribution_arrays(
    result: StudyResult, levels: np.ndarray, notes: Sequence[str]
) -> dict[str, str]:
    fields = [field.id for field in result.fields]
    monthly, hourly = result.distributions_monthly, result.distributions_hourly
    month_axes = {"field": fields, "month": MONTHS}
    altitude = _cells(monthly[monthly["variable"] == "density_altitude"], month_axes)
    humidity = _cells(monthly[monthly["variable"] == "relative_humidity"], month_axes)
    altitude_hour = _cells(
        hourly[hourly["variable"] == "density_altitude"], month_axes | {"hour": HOURS}
    )
    arrays = {f"altitude_{p}": _packed(_feet(altitude[p])) for p in _ALTITUDE_PERCENTILES}
    arrays |= {
        f"humidity_{p}": _packed(_share_codes(humidity[p].astype(float) / 100.0, levels))
        for p in _HUMIDITY_PERCENTILES
    }
    arrays |= {f"altitude_hour_{p}": _packed(_feet(altitude_hour[p])) for p in ("p50", "p90")}
    arrays["altitude_years"] = _packed(_counts(altitude["n_years"]))
    arrays["altitude_note"] = _packed(_counts(altitude["years_note"].map(_numbered(notes))))
    return arrays


def _risk_arrays(
    result: StudyResult,
    levels: np.ndarray,
    seasons: Sequence[str],
    words: tuple[Sequence[str], Sequence[str]],
) -> dict[str, str]:
    axes = {"field": [f.id for f in result.fields], "aircraft": [a.id for a in result.aircraft]}
    tables = {
        "month": _cells(result.risk_monthly, axes | {"month": MONTHS}),
        "season": _cells(result.risk_seasonal, axes | {"season": seasons}),
    }
    limit, note = (_numbered(of_column) for of_column in words)
    arrays = {}
    for name, table in tables.items():
        for column in _SHARE_COLUMNS:
            arrays[f"{name}_{column}"] = _packed(_share_codes(table[column], levels))
        arrays[f"{name}_n_years"] = _packed(_counts(table["n_years"]))
        arrays[f"{name}_limiting"] = _packed(_counts(table["limiting"].map(limit)))
        arrays[f"{name}_note"] = _packed(_counts(table["interval_note"].map(note)))
        central = table["shortfall_central"].astype(float)
        apart = (table["shortfall"].astype(float) - central).abs() >= _CENTRAL_DIFFERENCE
        arrays[f"{name}_central"] = _packed(_share_codes(central.where(apart), levels))
    hourly = _cells(result.risk_hourly, axes | {"month": MONTHS, "hour": HOURS})
    arrays["hour_shortfall"] = _packed(_share_codes(hourly["shortfall"], levels))
    return arrays


def _trend_arrays(result: StudyResult) -> dict[str, str]:
    """Trends by field, aircraft (the first being the density altitude) and season.

    Slopes are whole feet or hundredths of a percentage point per decade; a break is given by
    its year, counted from the first of the study, where it is significant.
    """
    axes = {
        "field": [f.id for f in result.fields],
        "aircraft": ["", *(a.id for a in result.aircraft)],
        "season": _seasons(result.trends),
    }
    table = _cells(result.trends, axes)
    fine = np.where(table.index.get_level_values("aircraft") == "", 1.0, 100.0)
    arrays = {
        f"trend_{name}": _packed(_feet(_floats(table[name]) * fine))
        for name in ("slope_per_decade", "ci_low", "ci_high")
    }
    broken = _floats(table["break_p_value"]) < 1.0 - float(result.settings["confidence"])
    since = _floats(table["break_year"]) - float(result.settings["first_year"])
    arrays["trend_break"] = _packed(_counts(since.where(broken)))
    for name in ("n_years", "significant"):
        arrays[f"trend_{name}"] = _packed(_counts(table[name]))
    return arrays


def _scenario_names(result: StudyResult) -> list[str]:
    if result.scenarios is None:
        return []
    return [str(name) for name in pd.unique(result.scenarios["scenario"])]


def _scenario_arrays(result: StudyResult, levels: np.ndarray) -> dict[str, str]:
    """Shares by scenario, field, aircraft and month; density altitudes without the aircraft."""
    if result.scenarios is None:
        return {}
    axes: dict[str, Sequence[Any]] = {
        "scenario": _scenario_names(result),
        "field": [f.id for f in result.fields],
        "aircraft": [a.id for a in result.aircraft],
        "month": MONTHS,
    }
    table = _cells(result.scenarios, axes)
    arrays = {
        f"scenario_{name}": _packed(_share_codes(table[name], levels))
        for name in ("shortfall", "ci_low", "ci_high")
    }
    change = _floats(table["shortfall_change"])
    arrays["scenario_rise"] = _packed(_share_codes(change.where(change >= 0.0), levels))
    arrays["scenario_fall"] = _packed(_share_codes(-change.where(change < 0.0), levels))
    first = table.xs(axes["aircraft"][0], level="aircraft")
    for p in ("p50", "p90"):
        arrays[f"scenario_altitude_{p}"] = _packed(_feet(first[f"density_altitude_{p}_ft"]))
        change_ft = first[f"density_altitude_{p}_change_ft"]
        arrays[f"scenario_altitude_{p}_change"] = _packed(_feet(change_ft))
    return arrays


def _cells(frame: pd.DataFrame, axes: Mapping[str, Sequence[Any]]) -> pd.DataFrame:
    """The frame with exactly one row per combination of the axes, the last one fastest."""
    index = pd.MultiIndex.from_product([list(v) for v in axes.values()], names=list(axes))
    return frame.set_index(list(axes)).reindex(index)


def _share_levels(bands: Sequence[float]) -> np.ndarray:
    """The shares at which what the page shows of a share changes, rising from zero.

    These are the first share above zero, 1 %, the half per cents at which the whole per cent
    steps, and the band edges.  A share is sent as the number of the level it has reached,
    in one byte, and still lands in the band and at the whole per cent of its exact value.
    """
    halves = [(2 * percent + 1) / 200.0 for percent in range(1, 100)]
    return np.array(sorted({0.0, math.ulp(0.0), 0.01, *halves, *bands}))


def _floats(values: pd.Series) -> pd.Series:
    """The values as plain floats, NaN where one is missing, whichever type the column has."""
    return values.astype("Float64").astype("float64")


def _share_codes(values: pd.Series, levels: np.ndarray) -> np.ndarray:
    """The number of the last level that each share reaches; `NO_BYTE` without a share."""
    share = _floats(values).to_numpy()
    reached = np.searchsorted(levels, np.clip(share, 0.0, 1.0), side="right") - 1
    return np.where(np.isnan(share), NO_BYTE, reached).astype("u1")


def _feet(values: pd.Series) -> np.ndarray:
    """Whole feet, rounded down, so that the nearest 100 ft is that of the exact value."""
    feet = _floats(values).to_numpy()
    missing = np.isnan(feet)
    whole = np.clip(np.floor(np.where(missing, 0.0, feet)), NO_FEET + 1, -(NO_FEET + 1))
    return np.where(missing, NO_FEET, whole).astype("<i2")


def _counts(values: pd.Series) -> np.ndarray:
    counts = _floats(values).to_numpy()
    return np.where(np.isnan(counts), NO_BYTE, np.minimum(counts, NO_BYTE - 1)).astype("u1")


def _packed(values: np.ndarray) -> str:
    return base64.b64encode(values.tobytes()).decode("ascii")
