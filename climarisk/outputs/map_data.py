"""What the scripts of the map page read: texts as JSON, numbers as packed arrays.

A share is one byte, feet are two; the page shows from them what it would show from the exact
values.  Density altitude and humidity do not depend on the aircraft and stand once per field.
"""

from __future__ import annotations

import base64
import math
from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
import pandas as pd

from climarisk.extremes import EXTREME_COLUMNS
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


def payload(result: StudyResult) -> dict[str, Any]:
    """What the page's scripts read: texts as JSON, numbers as packed arrays.

    Density altitude and humidity do not depend on the aircraft and stand once per field.
    """
    limits = sorted(
        {
            str(word)
            for frame in (result.risk_monthly, result.risk_seasonal)
            for word in frame["limiting"].dropna()
            if str(word)
        }
    )
    seasons = [str(season) for season in pd.unique(result.risk_seasonal["season"])]
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
        "metresPerFoot": METRES_PER_FOOT,
        "fields": [_field_entry(field, result) for field in result.fields],
        "aircraft": [
            {"id": a.id, "name": a.name, "source": a.source, "scaled": a.is_scaled}
            for a in result.aircraft
        ],
        "findings": [finding.as_dict() for finding in result.findings],
        "attributions": list(result.attributions),
        "cautions": list(CAUTIONS),
        "arrays": _distribution_arrays(result, levels)
        | _risk_arrays(result, levels, seasons, limits),
    }


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


def _field_entry(field: Field, result: StudyResult) -> dict[str, Any]:
    use = result.station_use
    pressure = result.pressure_sources
    stations = use[use["field"] == field.id].drop(columns="field")
    sources = pressure[pressure["field"] == field.id]
    return {
        "id": field.id,
        "name": field.name,
        "latitude": field.latitude,
        "longitude": field.longitude,
        "elevation": field.elevation_m,
        "timezone": field.timezone,
        "pinned": list(field.stations),
        "runways": [_runway_entry(direction) for direction in field.runways],
        "stations": [_plain(row) for row in stations.to_dict("records")],
        "pressure": [_plain(row) for row in sources[["source", "share"]].to_dict("records")],
    }


def _runway_entry(direction: RunwayDirection) -> dict[str, Any]:
    return {
        "runway": direction.runway,
        "heading": direction.heading_deg,
        "lengths": [direction.tora_m, direction.toda_m, direction.asda_m, direction.lda_m],
        "slope": direction.slope_pct,
        "surface": direction.surface,
        "takeoff": direction.takeoff,
        "landing": direction.landing,
        "undeclared": direction.undeclared,
    }


def _distribution_arrays(result: StudyResult, levels: np.ndarray) -> dict[str, str]:
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
    return arrays


def _risk_arrays(
    result: StudyResult, levels: np.ndarray, seasons: Sequence[str], limits: Sequence[str]
) -> dict[str, str]:
    axes = {"field": [f.id for f in result.fields], "aircraft": [a.id for a in result.aircraft]}
    tables = {
        "month": _cells(result.risk_monthly, axes | {"month": MONTHS}),
        "season": _cells(result.risk_seasonal, axes | {"season": seasons}),
    }
    number = {word: position for position, word in enumerate(limits)}
    arrays = {}
    for name, table in tables.items():
        for column in _SHARE_COLUMNS:
            arrays[f"{name}_{column}"] = _packed(_share_codes(table[column], levels))
        arrays[f"{name}_n_years"] = _packed(_counts(table["n_years"]))
        arrays[f"{name}_limiting"] = _packed(_counts(table["limiting"].map(number)))
    hourly = _cells(result.risk_hourly, axes | {"month": MONTHS, "hour": HOURS})
    arrays["hour_shortfall"] = _packed(_share_codes(hourly["shortfall"], levels))
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


def _share_codes(values: pd.Series, levels: np.ndarray) -> np.ndarray:
    """The number of the last level that each share reaches; `NO_BYTE` without a share."""
    share = values.to_numpy(dtype=float)
    reached = np.searchsorted(levels, np.clip(share, 0.0, 1.0), side="right") - 1
    return np.where(np.isnan(share), NO_BYTE, reached).astype("u1")


def _feet(values: pd.Series) -> np.ndarray:
    """Whole feet, rounded down, so that the nearest 100 ft is that of the exact value."""
    feet = values.to_numpy(dtype=float)
    missing = np.isnan(feet)
    whole = np.clip(np.floor(np.where(missing, 0.0, feet)), NO_FEET + 1, -(NO_FEET + 1))
    return np.where(missing, NO_FEET, whole).astype("<i2")


def _counts(values: pd.Series) -> np.ndarray:
    counts = values.to_numpy(dtype=float)
    return np.where(np.isnan(counts), NO_BYTE, np.minimum(counts, NO_BYTE - 1)).astype("u1")


def _packed(values: np.ndarray) -> str:
    return base64.b64encode(values.tobytes()).decode("ascii")
