"""Where the figures come from: everything a reviewer needs to repeat a run, as plain values."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from importlib.metadata import PackageNotFoundError, version
from typing import Any

import numpy as np
import pandas as pd

from climarisk.findings import Finding
from climarisk.inputs import read_bytes, sha256
from climarisk.rules import rules
from climarisk.study import Study
from climarisk.transfer import StationAir
from climarisk.weather import StationHours, Weather, relative_name

#: Statement of the method in the provenance and the page.
METHOD = (
    "Density altitude is the exact inverse of the ISA density profile at the density of moist "
    "ideal-gas air. Performance tables are entered with pressure altitude and temperature and "
    "read by multilinear interpolation; nothing is calculated beyond a table. Month and hour "
    "are local standard time. Percentiles are Hyndman-Fan type 8 of hourly values. A year "
    "counts for a month and hour when at least 80 % of the month's days have a value at that "
    "hour. Intervals resample whole years."
)


def program_version() -> str:
    """Version of the installed program."""
    try:
        return version("climarisk")
    except PackageNotFoundError:
        return "not installed"


def provenance(
    study: Study,
    weather: Weather,
    airs: Sequence[StationAir],
    frames: Mapping[str, pd.DataFrame],
    findings: Sequence[Finding],
) -> dict[str, Any]:
    """The content of ``study.json``: JSON-ready, with no clock and no absolute path.

    Parameters
    ----------
    study : Study
    weather : Weather
    airs : sequence of StationAir
        The stations on the study's hours.
    frames : mapping of str to DataFrame
        ``stations`` used at each field, ``pressure_sources`` and ``estimate``, as in the result.
    findings : sequence of Finding
    """
    return {
        "program": "climarisk",
        "version": program_version(),
        "title": study.title,
        "settings": study.settings(),
        "method": METHOD,
        "rules": rules(),
        "inputs": [
            {"file": relative_name(path, study), "sha256": sha256(read_bytes(path))}
            for path in study.inputs
        ],
        "fields": [
            {
                "id": field.id,
                "name": field.name,
                "latitude": field.latitude,
                "longitude": field.longitude,
                "elevation_m": round(field.elevation_m, 2),
                "timezone": field.timezone,
                "stations": _of_field(frames["stations"], field.id),
                "pressure_sources": {
                    row["source"]: row["share"]
                    for row in _of_field(frames["pressure_sources"], field.id)
                },
                "estimate": _of_field(frames["estimate"], field.id)[0],
            }
            for field in study.fields
        ],
        "stations": [
            {**_station(s, study), "sea_level_calibration": _calibration(air)}
            for s, air in zip(weather.stations, airs, strict=True)
        ],
        "findings": [f.as_dict() for f in findings],
    }


def _of_field(frame: pd.DataFrame, field: str) -> list[dict[str, Any]]:
    rows = frame[frame["field"] == field].drop(columns="field")
    return [
        {k: round(v, 6) if isinstance(v, float) else v for k, v in row.items()}
        for row in rows.to_dict("records")
    ]


def _calibration(air: StationAir) -> dict[str, Any] | None:
    """The fitted inverse of a station's sea-level pressure and what it leaves, if there is one."""
    if air.calibration is None:
        return None
    residual = air.calibration.residual_sd_hpa(
        air.pressure_hpa[np.isfinite(air.pressure_hpa)].mean()
    )
    return {
        "overlap_hours": int(air.calibration.n_hours[-1]),
        "residual_sd_hpa": [
            round(float(sd), 3) if np.isfinite(sd) else None for sd in np.atleast_1d(residual)
        ],
    }


def _station(item: StationHours, study: Study) -> dict[str, Any]:
    s, hours = item.station, item.hours
    year = hours.index.year
    inside = (year >= study.first_year) & (year <= study.last_year)
    known = hours.index[inside & hours["temperature_c"].notna().to_numpy()]
    return {
        "id": s.id,
        "name": s.name,
        "archive": s.archive,
        "latitude": s.latitude,
        "longitude": s.longitude,
        "elevation_m": round(s.elevation_m, 2),
        "elevation_trusted": item.elevation_trusted,
        "pressure_implied_elevation_m": (
            None if item.elevation is None else round(item.elevation.implied_m, 1)
        ),
        "hours_with_temperature": len(known),
        "first": str(known[0].date()) if len(known) else None,
        "last": str(known[-1].date()) if len(known) else None,
        "sources": list(item.sources),
        "files": [{"file": name, "sha256": digest} for name, digest in item.hashes],
    }
