"""The tables of the file contract: CSV, GeoPackage, GeoJSON and the provenance JSON."""

from __future__ import annotations

import json
from pathlib import Path

import pandas as pd

from climarisk.outputs.layers import write_layers
from climarisk.outputs.map import render_map
from climarisk.outputs.report.document import render_report
from climarisk.outputs.workbook.book import write_workbook
from climarisk.outputs.writing import write_files, write_texts
from climarisk.results import StudyResult

#: Decimals written to the CSV files.  Feet, kelvins, per cent and hectopascals are finer than
#: any source; shares keep ten, so that they can be held against a count.
_DECIMALS = {
    "mean": 3,
    "transfer_error": 3,
    "transfer_error_ft": 1,
    "slope_per_decade": 4,
    "hours_offered": 4,
    "usable_hours": 4,
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
    "share_1k",
    "share_2_5k",
    "in_window",
)
#: Frames of the result that are written as CSV, each where it is there.
TABLES = (
    "distributions_monthly",
    "distributions_hourly",
    "distributions_seasonal",
    "risk_monthly",
    "risk_hourly",
    "risk_seasonal",
    "risk_yearly",
    "margins_monthly",
    "near_saturation_monthly",
    "near_saturation_hourly",
    "near_saturation_seasonal",
    "trends",
    "extremes",
    "scenarios",
)
#: Every file that a run may write.
OUTPUT_FILES = (
    "map.html",
    "report.html",
    "tables.xlsx",
    *(f"{name}.csv" for name in TABLES),
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
        "report.html": render_report(result),
        "study.json": json.dumps(result.provenance, indent=1, ensure_ascii=False) + "\n",
    }
    for name in TABLES:
        frame = getattr(result, name)
        if frame is not None:
            texts[f"{name}.csv"] = csv_text(frame)
    names = write_texts(folder, texts)
    write_workbook(result, folder / "tables.xlsx")
    return [*names, "tables.xlsx", *write_layers(result, folder)]


def csv_text(table: pd.DataFrame) -> str:
    """A table as CSV text; an empty cell where there is no value."""
    decimals = {c: d for c, d in _DECIMALS.items() if c in table}
    decimals |= {c: _SHARE_DECIMALS for c in _SHARES if c in table}
    # Adding zero turns a negative zero into a plain one.
    rounded = table.round(decimals)
    numbers = rounded.select_dtypes("float").columns
    rounded[numbers] = rounded[numbers] + 0.0
    return rounded.to_csv(index=False, lineterminator="\n")
