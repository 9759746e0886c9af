"""What the scripts of the map page read: texts as JSON, numbers as packed arrays."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from typing import Any

import numpy as np
import pandas as pd

from climarisk.aircraft import AircraftProfile
from climarisk.fields import STEEP_SLOPE_PCT, Field, RunwayDirection
from climarisk.outputs.background import drawn_longitudes, outlines_for
from climarisk.outputs.colours import MOST_EDGES, NO_DATA_SHAPE, SHAPES, YLORBR
from climarisk.outputs.map_arrays import arrays, axis_values, scenario_names
from climarisk.outputs.map_planning import aircraft_entry, planning_arrays, planning_entries
from climarisk.outputs.packing import feet, share_levels
from climarisk.outputs.texts import CAUTIONS, METHOD, MONTH_NAMES, PRESSURE_TOLD_FT
from climarisk.results import StudyResult
from climarisk.trend import STATION_MOVE, TREND_YEARS
from climarisk.units import METRES_PER_FOOT

#: Class edges of the measures that have none of their own: relative humidity, near saturation.
#: Round numbers of our choice, no source.
HUMIDITY_EDGES = (0.4, 0.6, 0.8, 0.9)
NEAR_SATURATION_EDGES = (0.01, 0.05, 0.1, 0.25, 0.5)

#: Significant digits of the numbers that travel as text: more than the page shows of any.
_DIGITS = 8

#: What the page says of a runway direction.
_RUNWAY: dict[str, Callable[[RunwayDirection], Any]] = {
    "runway": lambda way: way.runway,
    "heading": lambda way: way.heading_deg,
    "lengths": lambda way: [way.tora_m, way.toda_m, way.asda_m, way.lda_m],
    "slope": lambda way: way.slope_pct,
    "steep": lambda way: way.is_steep,
    "surface": lambda way: way.surface,
    "takeoff": lambda way: way.takeoff,
    "landing": lambda way: way.landing,
    "undeclared": lambda way: way.undeclared,
}


def payload(result: StudyResult) -> dict[str, Any]:
    """What the page's scripts read: texts as JSON, numbers as packed arrays.

    Parameters
    ----------
    result : StudyResult

    Returns
    -------
    dict
        JSON-ready, the same for the same result.
    """
    limits = _words(result.risk_monthly, result.risk_seasonal, column="limiting")
    notes = _words(result.risk_monthly, result.risk_seasonal, column="interval_note")
    notes += _words(result.distributions_monthly, column="years_note")
    others = (result.weights_monthly, result.weights_seasonal, result.windows_monthly)
    notes = list(dict.fromkeys([*notes, *_words(*others, column="interval_note")]))
    bands = [float(edge) for edge in result.settings["bands"]][:MOST_EDGES]
    days = _days_offered(result.risk_hourly)
    texts = _Texts()
    fields = _field_entries(result, texts)
    planning = planning_entries(result, texts.rows)
    edges = [*bands, *HUMIDITY_EDGES, *NEAR_SATURATION_EDGES, planning["target"]]
    levels = share_levels(edges, days)
    packed, base = arrays(result, levels, limits, notes)
    packed |= planning_arrays(result, levels, notes)
    return {
        "title": result.title,
        "version": str(result.provenance.get("version", "")),
        "settings": _plain(result.settings),
        "bands": bands,
        "levels": levels.tolist(),
        "daysOffered": days,
        "altitudeBase": base,
        "edges": {"humidity": HUMIDITY_EDGES, "nearSaturation": NEAR_SATURATION_EDGES},
        "planning": planning,
        "seasons": axis_values(result.risk_seasonal, "season"),
        "checks": axis_values(result.margins_monthly, "check"),
        "limits": limits,
        "notes": notes,
        "trendSeasons": axis_values(result.trends, "season"),
        "trendYears": TREND_YEARS,
        "stationMove": STATION_MOVE,
        "scenarios": scenario_names(result),
        "steepPct": STEEP_SLOPE_PCT,
        "pressureToldFt": PRESSURE_TOLD_FT,
        "metresPerFoot": METRES_PER_FOOT,
        "columns": {
            "runways": [[name, False] for name in _RUNWAY],
            **{name: _columns(frame) for name, frame in _row_frames(result).items()},
        },
        "texts": texts.all(),
        "fields": fields,
        "aircraft": [_aircraft_entry(a) | aircraft_entry(result, a) for a in result.aircraft],
        "findings": [finding.as_dict() for finding in result.findings],
        "attributions": list(result.attributions),
        "monthNames": list(MONTH_NAMES),
        "cautions": list(CAUTIONS),
        "method": list(METHOD),
        "palette": {"classes": YLORBR, "shapes": SHAPES, "noData": NO_DATA_SHAPE},
        "outlines": outlines_for(result.fields),
        "tiles": None if result.tiles is None else vars(result.tiles),
        "arrays": packed,
    }


def _aircraft_entry(profile: AircraftProfile) -> dict[str, Any]:
    return {
        "id": profile.id,
        "name": profile.name,
        "source": profile.source,
        "scaled": profile.is_scaled,
        "limitAltitude": profile.limit_density_altitude_ft,
    }


def _days_offered(hourly: pd.DataFrame) -> list[float]:
    """Days a year that an hour of the day has in each month; the calendar's, for every field."""
    first = hourly.drop_duplicates("month").set_index("month")["hours_offered"]
    return [float(days) for days in first.reindex(range(1, 13)).fillna(0.0)]


def _words(*frames: pd.DataFrame, column: str) -> list[str]:
    """The different texts of a column, empty ones left out."""
    return sorted({str(word) for f in frames for word in f[column].dropna() if str(word)})


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
        return float(f"{value:.{_DIGITS}g}") if math.isfinite(value) else None
    return None if pd.isna(value) else str(value)


class _Texts:
    """Texts told once, and rows in which their numbers stand for them."""

    def __init__(self) -> None:
        self._numbers: dict[str, int] = {}

    def rows(self, table: pd.DataFrame) -> list[list[Any]]:
        """The rows of a table; a text as its number, a number as it is."""
        texts = _text_columns(table)
        return [
            [
                self._number(value) if name in texts and value is not None else value
                for name, value in ((name, _plain(value)) for name, value in row.items())
            ]
            for row in table.to_dict("records")
        ]

    def _number(self, text: str) -> int:
        return self._numbers.setdefault(text, len(self._numbers))

    def all(self) -> list[str]:
        """Every text in the order of its number."""
        return list(self._numbers)


def _text_columns(table: pd.DataFrame) -> set[str]:
    return {name for name in table if not pd.api.types.is_numeric_dtype(table[name])}


def _row_frames(result: StudyResult) -> dict[str, pd.DataFrame]:
    """The frames of which each field has its rows on the page."""
    return {
        "stations": result.station_use,
        "pressure": result.pressure_sources,
        "estimate": result.estimates,
    }


def _columns(frame: pd.DataFrame) -> list[list[Any]]:
    """Names of the columns of a field's rows, and whether they hold the numbers of texts."""
    texts = _text_columns(frame)
    return [[name, name in texts] for name in frame.columns if name != "field"]


def _field_entries(result: StudyResult, texts: _Texts) -> list[dict[str, Any]]:
    frames = {name: _by_field(frame) for name, frame in _row_frames(result).items()}
    extremes = _by_field(result.extremes)
    drawn = drawn_longitudes(result.fields)
    return [
        _field_entry(field, east)
        | {name: texts.rows(of(field.id)) for name, of in frames.items()}
        | {"extremes": _extremes_entry(extremes(field.id))}
        for field, east in zip(result.fields, drawn, strict=True)
    ]


def _by_field(frame: pd.DataFrame) -> Callable[[str], pd.DataFrame]:
    """A function from a field's id to its rows of a frame, without the field."""
    parts = dict(list(frame.groupby("field", sort=False)))
    empty = frame.iloc[:0]
    return lambda field: parts.get(field, empty).drop(columns="field")


def _field_entry(field: Field, drawn: float) -> dict[str, Any]:
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
    }


def _extremes_entry(own: pd.DataFrame) -> dict[str, Any]:
    """Years of the record, and return period with level and interval in whole feet each."""
    levels = np.column_stack(
        [own["return_period_years"]]
        + [feet(own[name]) for name in ("density_altitude_ft", "ci_low", "ci_high")]
    )
    return {"years": _plain(own["n_years"].max()), "levels": levels.astype(int).tolist()}
