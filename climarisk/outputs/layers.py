"""The fields as a map layer, GeoPackage and GeoJSON: one point each with its headline figures.

Every column has a title, a unit and a description in the files themselves.

References
----------
OGC 12-128r17, GeoPackage Encoding Standard 1.3: clauses 2.1.5 (geometry columns) and 1.1.3
(contents), annex F.8 (metadata extension), annex F.9 (schema extension).
RFC 7946, The GeoJSON Format: section 4 (coordinates are WGS 84, no ``crs`` member) and
section 6.1 (foreign members).
"""

from __future__ import annotations

import json
import math
import sqlite3
from collections import Counter
from contextlib import closing
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pandas as pd

from climarisk.fields import STEEP_SLOPE_PCT, Field
from climarisk.outputs.texts import CAUTIONS, window_text
from climarisk.results import StudyResult

LAYER = "fields"
#: Written into the GeoPackage in place of the clock, so that the same input gives the same bytes.
_FIXED_DATE = "2000-01-01T00:00:00.000Z"
#: A newer GDAL would write 1.4 by itself, which older programs warn of.
_GEOPACKAGE_VERSION = "1.3"
_SCHEMA_DEFINITION = "http://www.geopackage.org/spec130/#extension_schema"


@dataclass(frozen=True)
class LayerColumn:
    """A column of the layer, in words.

    Parameters
    ----------
    name : str
        As in the files.
    kind : str
        Its pandas type, which holds missing values.
    title : str
        A few words with the unit, for the head of a table.
    unit : str
        Empty for text.
    description : str
    """

    name: str
    kind: str
    title: str
    unit: str
    description: str


_WORST = "Of the worst month of the worst aircraft"
#: The columns in their order.  Every figure is over the hours window of the study.
COLUMNS = tuple(
    LayerColumn(*row)
    for row in (
        ("id", "string", "Field id", "", "Identifier of the field in the study."),
        ("name", "string", "Field name", "", "Name of the field."),
        ("elevation_m", "Float64", "Elevation, m", "m", "Above mean sea level."),
        (
            "da_p90_month",
            "Int64",
            "Month of highest P90 density altitude",
            "month 1-12",
            "Month with the highest 90th percentile of the density altitude.",
        ),
        (
            "da_p90_ft",
            "Int64",
            "P90 density altitude of that month, ft",
            "ft",
            "Density altitude not exceeded in 90 % of the hours of that month.",
        ),
        (
            "rh_p50_pct",
            "Float64",
            "Relative humidity, %",
            "%",
            "Mean over the months of the median relative humidity.",
        ),
        (
            "worst_aircraft",
            "string",
            "Worst aircraft",
            "",
            "Identifier of the aircraft with the largest shortfall share in any month here.",
        ),
        (
            "worst_month",
            "Int64",
            "Worst month",
            "month 1-12",
            "Month with the largest shortfall share of that aircraft, the first of equal ones: "
            "worst_months says how many there are.",
        ),
        (
            "worst_shortfall",
            "Float64",
            "Largest shortfall share, 0-1",
            "share 0-1",
            f"{_WORST}: share of hours in which some check fails, a limit is passed or the air "
            "is outside the table.",
        ),
        (
            "transfer_error_ft",
            "Int64",
            "Error of estimated air, ft",
            "ft",
            "One standard deviation of the density altitude in hours estimated from stations "
            "nearby, rounded up; 0 where all are measured on the spot, empty without data.",
        ),
        (
            "pressure_error_ft",
            "Int64",
            "Error of the pressure, ft",
            "ft",
            "One standard deviation of the pressure, as density altitude, rounded up; empty "
            "without data.",
        ),
        (
            "cautions",
            "Int64",
            "Cautions and rejections",
            "count",
            "Findings about this field that are more than a note; their text is in study.json.",
        ),
        (
            "da_p50_ft",
            "Int64",
            "Median density altitude of that month, ft",
            "ft",
            "Median density altitude of the month with the highest 90th percentile.",
        ),
        (
            "near_saturation_pct",
            "Float64",
            "Near saturation, %",
            "%",
            "Hours of the dampest month in which the temperature is at most 2.5 K above the dew "
            "point.",
        ),
        (
            "usable_hours",
            "Float64",
            "Usable hours of the worst month",
            "h a month",
            f"{_WORST}: hours that do not fall short, at the share of the known hours.",
        ),
        (
            "usable_hours_min",
            "Float64",
            "Fewest usable hours a month",
            "h a month",
            "The same in the month in which the worst aircraft has fewest; a daylight window has "
            "fewer hours in winter.",
        ),
        (
            "limiting",
            "string",
            "Limiting check",
            "",
            f"{_WORST}: the check that has the smallest margin in most of the hours that fall "
            "short; empty where none does, and without data.",
        ),
        (
            "ci_low",
            "Float64",
            "Shortfall interval, low end, 0-1",
            "share 0-1",
            f"{_WORST}: low end of the interval at the study's confidence; empty from too few "
            "years.",
        ),
        (
            "ci_high",
            "Float64",
            "Shortfall interval, high end, 0-1",
            "share 0-1",
            f"{_WORST}: high end of the interval.",
        ),
        (
            "months_known",
            "Int64",
            "Months with figures, of 12",
            "count 0-12",
            "Months in which every aircraft has a shortfall share; the others have no data and "
            "could be worse.",
        ),
        (
            "steep",
            "boolean",
            "Steep runway",
            "true or false",
            f"A runway slopes more than {STEEP_SLOPE_PCT:g} %: published factors do not hold, it "
            "needs a site-specific procedure. Empty where the study names no runway.",
        ),
        (
            "own_station",
            "Float64",
            "Hours measured on the spot, 0-1",
            "share 0-1",
            "Share of the field's hours from a station on the spot; the others are estimated "
            "from stations nearby. Empty without data.",
        ),
        (
            "worst_months",
            "Int64",
            "Months as bad as the worst",
            "count 1-12",
            "Months in which that aircraft has the share of its worst one; above 1 that month "
            "is only the first of them.",
        ),
        (
            "fleet_hours",
            "Float64",
            "Usable hours of the fleet",
            "h a month",
            "Hours of the window in which the aeroplanes of the fleet do not fall short, mean over "
            "the year; empty where a month has no data. A steep field is counted as any other.",
        ),
        (
            "base_rank",
            "Int64",
            "Rank as a base of the fleet",
            "place 1-n",
            "Place of the field by these hours, 1 the best; empty where a month has no data.",
        ),
    )
)


def headline(result: StudyResult) -> list[dict[str, Any]]:
    """Headline figures of each field: the worst month of density altitude and of shortfall.

    Parameters
    ----------
    result : StudyResult

    Returns
    -------
    list of dict
        One for each field, in the study's order; keys and units as in `COLUMNS`, None where
        there are no data.
    """
    monthly = result.distributions_monthly
    density = monthly[monthly["variable"] == "density_altitude"]
    humidity = monthly[monthly["variable"] == "relative_humidity"]
    hottest = _worst(density, "p90")
    risk = result.risk_monthly
    worst = _worst(risk, "shortfall")
    usable = risk.groupby(["field", "aircraft"])["usable_hours"].min()
    known = risk.groupby(["field", "aircraft"])["shortfall"].count().groupby("field").min()
    damp = humidity.groupby("field")["p50"].mean()
    dampest = result.near_saturation_monthly.groupby("field")["share_2_5k"].max()
    equal = _equal_months(risk, worst)
    bases = result.bases[result.bases["aircraft"] == ""].set_index("field").to_dict("index")
    sure = result.estimates.set_index("field").to_dict("index")
    told = Counter(f.id for f in result.findings if f.subject == "field" and f.severity != "note")
    rows = []
    for field in result.fields:
        hot, bad, errors = hottest.get(field.id, {}), worst.get(field.id, {}), sure[field.id]
        base = bases.get(field.id, {})
        measured = errors["own_station"] > 0 or errors["stations"] > 0
        values = {
            "id": field.id,
            "name": field.name,
            "elevation_m": _rounded(field.elevation_m, 1),
            "da_p90_month": _whole(hot.get("month")),
            "da_p90_ft": _whole(hot.get("p90")),
            "rh_p50_pct": _rounded(damp.get(field.id), 1),
            "worst_aircraft": bad.get("aircraft"),
            "worst_month": _whole(bad.get("month")),
            "worst_shortfall": _rounded(bad.get("shortfall"), 6),
            "transfer_error_ft": _error(errors["transfer_error_ft"]) if measured else None,
            "pressure_error_ft": _error(errors["pressure_error_ft"]) if measured else None,
            "cautions": told[field.id],
            "da_p50_ft": _whole(hot.get("p50")),
            "near_saturation_pct": _rounded(dampest.get(field.id), 3, 100.0),
            "usable_hours": _rounded(bad.get("usable_hours"), 1),
            "usable_hours_min": _rounded(usable.get((field.id, bad.get("aircraft"))), 1),
            "limiting": bad.get("limiting") or None,
            "ci_low": _rounded(bad.get("ci_low"), 6),
            "ci_high": _rounded(bad.get("ci_high"), 6),
            "months_known": int(known.get(field.id, 0)),
            "steep": _steep(field),
            "own_station": _rounded(errors["own_station"], 4) if measured else None,
            "worst_months": equal.get(field.id),
            "fleet_hours": _rounded(base.get("usable_hours_month"), 1),
            "base_rank": _whole(base.get("rank")),
        }
        rows.append({column.name: values[column.name] for column in COLUMNS})
    return rows


def write_layers(result: StudyResult, folder: Path) -> list[str]:
    """Write ``fields.gpkg`` and ``fields.geojson``, the same bytes for the same result.

    Parameters
    ----------
    result : StudyResult
    folder : Path
        Must exist; files of these names in it are replaced.

    Returns
    -------
    list of str
        The names written.

    Raises
    ------
    OSError
        A file cannot be written.
    """
    rows = headline(result)
    _write_geopackage(result, rows, folder / "fields.gpkg")
    text = json.dumps(_collection(result, rows), indent=1, ensure_ascii=False, allow_nan=False)
    (folder / "fields.geojson").write_text(text + "\n", encoding="utf-8", newline="\n")
    return ["fields.gpkg", "fields.geojson"]


def _worst(table: pd.DataFrame, column: str) -> dict[str, dict[str, Any]]:
    """The row with the largest value of each field, the first of equal ones; by field."""
    known = table[table[column].notna()]
    largest = known.loc[known.groupby("field")[column].idxmax()]
    return largest.set_index("field").to_dict("index")


def _equal_months(risk: pd.DataFrame, worst: dict[str, dict[str, Any]]) -> dict[str, int]:
    """How many months of the worst aircraft have the share of its worst one; by field."""
    told = pd.DataFrame(
        [(field, bad["aircraft"], bad["shortfall"]) for field, bad in worst.items()],
        columns=["field", "aircraft", "most"],
    )
    both = risk.merge(told, on=["field", "aircraft"])
    count = both[both["shortfall"] == both["most"]].groupby("field").size()
    return {str(field): int(n) for field, n in count.items()}


def _steep(field: Field) -> bool | None:
    if not field.runways:
        return None
    return field.is_steep


def _error(feet: float) -> int | None:
    """Whole feet, rounded up: an error is never told as smaller, nor as none."""
    return None if pd.isna(feet) else math.ceil(round(float(feet), 6))


def _rounded(value: float | None, digits: int, factor: float = 1.0) -> float | None:
    return None if value is None or pd.isna(value) else round(float(value) * factor, digits)


def _whole(value: float | None) -> int | None:
    return None if value is None or pd.isna(value) else round(float(value))


def layer_metadata(result: StudyResult) -> dict[str, str]:
    """What both files say of the layer as a whole, by upper-case keys."""
    settings = result.settings
    return {
        "TITLE": result.title,
        "DESCRIPTION": "Airfields with their headline density altitude, humidity and shortfall "
        "shares from past weather. An empty figure is no data; it does not mean no risk.",
        "PERIOD": f"{settings['first_year']}-{settings['last_year']}",
        "HOURS_WINDOW": window_text(settings["window"]),
        "CAUTION": " ".join(CAUTIONS[:2]),
        "SOURCE": " ".join(result.attributions),
    }


# GeoPackage


def _write_geopackage(result: StudyResult, rows: list[dict[str, Any]], path: Path) -> None:
    import geopandas
    import pyogrio

    frame = pd.DataFrame(rows, columns=[column.name for column in COLUMNS])
    places = geopandas.points_from_xy(
        [f.longitude for f in result.fields], [f.latitude for f in result.fields]
    )
    layer = geopandas.GeoDataFrame(
        frame.astype({c.name: c.kind for c in COLUMNS}), geometry=places, crs="EPSG:4326"
    )
    told = layer_metadata(result)
    path.unlink(missing_ok=True)  # into a file that is there GDAL would add
    pyogrio.set_gdal_config_options({"OGR_CURRENT_DATE": _FIXED_DATE})
    try:
        layer.to_file(
            path,
            layer=LAYER,
            driver="GPKG",
            VERSION=_GEOPACKAGE_VERSION,
            DESCRIPTION=told.pop("DESCRIPTION"),
            layer_metadata=told,
        )
        _describe_columns(path)
    except (
        pyogrio.errors.DataSourceError,
        pyogrio.errors.DataLayerError,
        sqlite3.Error,
    ) as error:
        raise OSError(f"{path.name}: {error}") from None
    finally:
        pyogrio.set_gdal_config_options({"OGR_CURRENT_DATE": None})


#: The tables of the schema extension (annex F.9, Req 103 and 107) and their rows in
#: ``gpkg_extensions`` (Req 141); GDAL has already made that table for its spatial index.
_SCHEMA_TABLES = (
    "CREATE TABLE gpkg_data_columns (table_name TEXT NOT NULL, column_name TEXT NOT NULL, "
    "name TEXT, title TEXT, description TEXT, mime_type TEXT, constraint_name TEXT, "
    "CONSTRAINT pk_gdc PRIMARY KEY (table_name, column_name), "
    "CONSTRAINT gdc_tn UNIQUE (table_name, name))",
    "CREATE TABLE gpkg_data_column_constraints (constraint_name TEXT NOT NULL, "
    "constraint_type TEXT NOT NULL, value TEXT, min NUMERIC, min_is_inclusive BOOLEAN, "
    "max NUMERIC, max_is_inclusive BOOLEAN, description TEXT, "
    "CONSTRAINT gdcc_ntv UNIQUE (constraint_name, constraint_type, value))",
)


def _describe_columns(path: Path) -> None:
    """Add the schema extension, which says what each column is and in which unit."""
    with closing(sqlite3.connect(path)) as database, database:
        for statement in _SCHEMA_TABLES:
            database.execute(statement)
        database.executemany(
            "INSERT INTO gpkg_extensions VALUES (?, NULL, 'gpkg_schema', ?, 'read-write')",
            [
                (table, _SCHEMA_DEFINITION)
                for table in ("gpkg_data_columns", "gpkg_data_column_constraints")
            ],
        )
        database.executemany(
            "INSERT INTO gpkg_data_columns VALUES (?, ?, ?, ?, ?, NULL, NULL)",
            [(LAYER, c.name, c.title, c.title, _described(c)) for c in COLUMNS],
        )


def _described(column: LayerColumn) -> str:
    return f"{column.description} Unit: {column.unit}." if column.unit else column.description


# GeoJSON


def _collection(result: StudyResult, rows: list[dict[str, Any]]) -> dict[str, Any]:
    features = [
        {
            "type": "Feature",
            "id": field.id,
            "properties": row,
            "geometry": {"type": "Point", "coordinates": [field.longitude, field.latitude]},
        }
        for row, field in zip(rows, result.fields, strict=True)
    ]
    return {
        "type": "FeatureCollection",
        "name": LAYER,
        "metadata": {key.lower(): text for key, text in layer_metadata(result).items()},
        "columns": [
            {"name": c.name, "title": c.title, "unit": c.unit, "description": c.description}
            for c in COLUMNS
        ],
        "features": features,
    }
