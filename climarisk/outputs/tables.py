"""The tables of the file contract: CSV, GeoPackage, GeoJSON and the provenance JSON."""

from __future__ import annotations

import json
from collections.abc import Mapping
from pathlib import Path

import numpy as np
import pandas as pd

from climarisk.outputs.bases_page import render_bases
from climarisk.outputs.layers import write_layers
from climarisk.outputs.map import render_map
from climarisk.outputs.report.document import render_report
from climarisk.outputs.schedule_page import render_schedule
from climarisk.outputs.workbook.book import write_workbook
from climarisk.outputs.writing import write_files, write_texts
from climarisk.results import StudyResult
from climarisk.study import Study

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
    **dict.fromkeys(("daylight_hours", "usable_low", "usable_high", "usable_hours_month"), 4),
    **dict.fromkeys(("year_p10", "year_p90", "worst_season_hours_month"), 4),
    **dict.fromkeys(("difference_hours_month", "affected", "year_low", "year_high"), 4),
    **{f"humidity_{what}_p{p}": 3 for what in ("power_pct", "ft") for p in (50, 90)},
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
    "share",
    "never_met",
    "days_with_run",
    "icing_serious",
    "nearest_shortfall",
    *(f"power_p{p}" for p in (10, 50, 90)),
    "optimistic_p50",
)
#: Masses, in grams of which none is promised that was not found to hold.
_MASSES_DOWN = ("mass_kg", "useful_load_kg", "mass_that_holds_kg", "ci_low_kg")
_MASSES_UP = ("ci_high_kg",)
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
    "weights_monthly",
    "weights_hourly",
    "weights_seasonal",
    "windows_monthly",
    "icing_monthly",
    "icing_hourly",
    "power_monthly",
    "bases",
    "base_differences",
    "schedule_flights",
    "schedule_seasons",
    "schedule_days",
    "trends",
    "extremes",
    "scenarios",
)
#: Tables of a schedule, where the study has one.
SCHEDULE_TABLES = ("schedule_flights", "schedule_seasons", "schedule_days")
#: Every file that a run may write.
OUTPUT_FILES = (
    "map.html",
    "report.html",
    "bases.html",
    "schedule.html",
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


def write_schedule(study: Study, frames: Mapping[str, pd.DataFrame], folder: Path) -> list[Path]:
    """Write the page and the tables of a schedule alone.

    Parameters
    ----------
    study : Study
    frames : mapping of str to DataFrame
        By the names of `SCHEDULE_TABLES`.
    folder : Path

    Raises
    ------
    OutputError
        The folder cannot be written.
    """
    page = render_schedule(study.title, study.fields, study.aircraft, study.settings(), frames)
    texts = {"schedule.html": page, **{f"{n}.csv": csv_text(frames[n]) for n in SCHEDULE_TABLES}}
    return write_files(folder, lambda staging: write_texts(staging, texts))


def write_bases(result: StudyResult, folder: Path) -> list[Path]:
    """Write the page and the tables of the bases alone.

    Parameters
    ----------
    result : StudyResult
    folder : Path

    Raises
    ------
    OutputError
        The folder cannot be written.
    """
    texts = {
        "bases.html": render_bases(result),
        "bases.csv": csv_text(result.bases),
        "base_differences.csv": csv_text(result.base_differences),
    }
    return write_files(folder, lambda staging: write_texts(staging, texts))


def _write_all(result: StudyResult, folder: Path) -> list[str]:
    texts = {
        "map.html": render_map(result),
        "report.html": render_report(result),
        "bases.html": render_bases(result),
        "study.json": json.dumps(result.provenance, indent=1, ensure_ascii=False) + "\n",
    }
    if result.schedule_flights is not None:
        frames = {name: getattr(result, name) for name in SCHEDULE_TABLES}
        texts["schedule.html"] = render_schedule(
            result.title, result.fields, result.aircraft, result.settings, frames
        )
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
    for names, toward in ((_MASSES_DOWN, np.floor), (_MASSES_UP, np.ceil)):
        for name in (n for n in names if n in rounded):
            # Millionths of a gram are round-off: 716.3 kg is 716,300 g.
            rounded[name] = toward((rounded[name].astype(float) * 1e3).round(6)) / 1e3
    numbers = rounded.select_dtypes("float").columns
    rounded[numbers] = rounded[numbers] + 0.0
    return rounded.to_csv(index=False, lineterminator="\n")
