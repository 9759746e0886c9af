"""The tables of the file contract: CSV, GeoPackage, GeoJSON and the provenance JSON."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pandas as pd

from climarisk.outputs.map import render_map
from climarisk.outputs.writing import write_files, write_texts
from climarisk.results import StudyResult

#: Decimals written to the CSV files.  Feet, kelvins, per cent and hectopascals are finer than
#: any source; shares keep ten, so that they can be held against a count.
_DECIMALS = {
    "mean": 3,
    "transfer_error": 3,
    "transfer_error_ft": 1,
    "slope_per_decade": 4,
    "density_altitude_ft": 1,
    **{f"density_altitude_{p}_ft": 3 for p in ("p50", "p90")},
    **{f"density_altitude_{p}_change_ft": 3 for p in ("p50", "p90")},
    **{f"p{p:02d}": 3 for p in (1, 5, 10, 25, 50, 75, 90, 95, 99)},
}
_SHARE_DECIMALS = 10
_SHARES = (
    "coverage",
    "shortfall",
    "ci_low",
    "ci_high",
    "outside_table",
    "margin_p10",
    "margin_p50",
    "days_affected",
    "shortfall_central",
    "shortfall_change",
    "change_ci_low",
    "change_ci_high",
    "shortfall_hours",
)
#: Written into the GeoPackage in place of the clock, so that the same input gives the same bytes.
_FIXED_DATE = "2000-01-01T00:00:00.000Z"


#: Every file that a run may write.
OUTPUT_FILES = (
    "map.html",
    "distributions_monthly.csv",
    "distributions_hourly.csv",
    "risk_monthly.csv",
    "risk_hourly.csv",
    "risk_seasonal.csv",
    "risk_yearly.csv",
    "trends.csv",
    "extremes.csv",
    "scenarios.csv",
    "study.json",
    "fields.gpkg",
    "fields.geojson",
)


def write_outputs(result: StudyResult, folder: Path) -> list[Path]:
    """Write every file of the contract; the folder is made, other files in it stay.

    All files are written beside the folder first and moved into place when the last one is
    complete, so that a failure leaves the earlier results as they were.

    Parameters
    ----------
    result : StudyResult
    folder : Path

    Returns
    -------
    list of Path
        The files written.

    Raises
    ------
    OutputError
        The folder cannot be written.
    """
    return write_files(folder, lambda staging: _write_all(result, staging))


def _write_all(result: StudyResult, folder: Path) -> list[str]:
    texts = {
        "map.html": render_map(result),
        "distributions_monthly.csv": csv_text(result.distributions_monthly),
        "distributions_hourly.csv": csv_text(result.distributions_hourly),
        "risk_monthly.csv": csv_text(result.risk_monthly),
        "risk_hourly.csv": csv_text(result.risk_hourly),
        "risk_seasonal.csv": csv_text(result.risk_seasonal),
        "study.json": json.dumps(result.provenance, indent=1, ensure_ascii=False) + "\n",
    }
    texts["risk_yearly.csv"] = csv_text(result.risk_yearly)
    texts["trends.csv"] = csv_text(result.trends)
    texts["extremes.csv"] = csv_text(result.extremes)
    if result.scenarios is not None:
        texts["scenarios.csv"] = csv_text(result.scenarios)
    names = write_texts(folder, texts)
    _write_layers(result, folder)
    return [*names, "fields.gpkg", "fields.geojson"]


def csv_text(table: pd.DataFrame) -> str:
    """A table as CSV text; an empty cell where there is no value."""
    decimals = {c: d for c, d in _DECIMALS.items() if c in table}
    decimals |= {c: _SHARE_DECIMALS for c in _SHARES if c in table}
    # Adding zero turns a negative zero into a plain one.
    rounded = table.round(decimals)
    numbers = rounded.select_dtypes("float").columns
    rounded[numbers] = rounded[numbers] + 0.0
    return rounded.to_csv(index=False, lineterminator="\n")


def headline(result: StudyResult) -> list[dict[str, Any]]:
    """Headline figures of each field: the worst month of density altitude and of shortfall.

    Keys: ``id, name, elevation_m, da_p90_month, da_p90_ft, rh_p50_pct, worst_aircraft,
    worst_month, worst_shortfall, transfer_error_ft, pressure_error_ft, cautions``; None where
    there are no data.
    """
    rows = []
    distributions = result.distributions_monthly
    for field in result.fields:
        own = distributions[distributions["field"] == field.id]
        sure = result.estimates[result.estimates["field"] == field.id].iloc[0]
        hottest = _worst(own[own["variable"] == "density_altitude"], "p90")
        risk = _worst(result.risk_monthly[result.risk_monthly["field"] == field.id], "shortfall")
        humidity = own[own["variable"] == "relative_humidity"]["p50"].mean()
        rows.append(
            {
                "id": field.id,
                "name": field.name,
                "elevation_m": round(field.elevation_m, 1),
                "da_p90_month": None if hottest is None else int(hottest["month"]),
                "da_p90_ft": None if hottest is None else round(float(hottest["p90"])),
                "rh_p50_pct": None if pd.isna(humidity) else round(float(humidity), 1),
                "worst_aircraft": None if risk is None else str(risk["aircraft"]),
                "worst_month": None if risk is None else int(risk["month"]),
                "worst_shortfall": None if risk is None else round(float(risk["shortfall"]), 6),
                "transfer_error_ft": round(float(sure["transfer_error_ft"])),
                "pressure_error_ft": round(float(sure["pressure_error_ft"])),
                "cautions": sum(
                    f.severity != "note" and f.subject == "field" and f.id == field.id
                    for f in result.findings
                ),
            }
        )
    return rows


def _worst(table: pd.DataFrame, column: str) -> pd.Series | None:
    known = table[table[column].notna()]
    return None if known.empty else known.loc[known[column].idxmax()]


def _write_layers(result: StudyResult, folder: Path) -> None:
    import geopandas
    import pyogrio

    rows = headline(result)
    layer = geopandas.GeoDataFrame(
        pd.DataFrame(rows).convert_dtypes(),
        geometry=geopandas.points_from_xy(
            [f.longitude for f in result.fields], [f.latitude for f in result.fields]
        ),
        crs="EPSG:4326",
    )
    pyogrio.set_gdal_config_options({"OGR_CURRENT_DATE": _FIXED_DATE})
    try:
        layer.to_file(folder / "fields.gpkg", layer="fields", driver="GPKG")
    except (pyogrio.errors.DataSourceError, pyogrio.errors.DataLayerError) as error:
        raise OSError(f"fields.gpkg: {error}") from None
    finally:
        pyogrio.set_gdal_config_options({"OGR_CURRENT_DATE": None})
    features = [
        {
            "type": "Feature",
            "properties": row,
            "geometry": {"type": "Point", "coordinates": [f.longitude, f.latitude]},
        }
        for row, f in zip(rows, result.fields, strict=True)
    ]
    collection = {"type": "FeatureCollection", "name": "fields", "features": features}
    text = json.dumps(collection, indent=1, ensure_ascii=False) + "\n"
    (folder / "fields.geojson").write_text(text, encoding="utf-8", newline="\n")
