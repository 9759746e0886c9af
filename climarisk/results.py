"""What a study gives back: typed results around the tables of the file contract."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import pandas as pd

from climarisk.aircraft import AircraftProfile
from climarisk.fields import Field
from climarisk.findings import Finding

#: Variables of the distribution tables and their units.
VARIABLES: dict[str, str] = {
    "density_altitude": "ft",
    "pressure_altitude": "ft",
    "temperature": "degC",
    "dew_point": "degC",
    "relative_humidity": "%",
    "vapour_pressure": "hPa",
}
PERCENTILES = (1, 5, 10, 25, 50, 75, 90, 95, 99)

_STATISTICS = [
    "n_hours",
    "n_years",
    "coverage",
    "mean",
    *(f"p{p:02d}" for p in PERCENTILES),
    "transfer_error",
    "years_note",
]
_RISK = [
    "n_hours",
    "n_years",
    "shortfall",
    "ci_low",
    "ci_high",
    "outside_table",
    "limiting",
    "margin_p10",
    "margin_p50",
    "days_affected",
    "shortfall_central",
    "transfer_error_ft",
    "interval_note",
    "coverage",
]
DISTRIBUTIONS_MONTHLY_COLUMNS = ["field", "variable", "unit", "month", *_STATISTICS]
DISTRIBUTIONS_HOURLY_COLUMNS = ["field", "variable", "unit", "month", "hour", *_STATISTICS]
RISK_MONTHLY_COLUMNS = ["field", "aircraft", "month", *_RISK]
RISK_HOURLY_COLUMNS = ["field", "aircraft", "month", "hour", *_RISK]
RISK_SEASONAL_COLUMNS = ["field", "aircraft", "season", *_RISK]

RISK_YEARLY_COLUMNS = ["field", "aircraft", "month", "year", "n_hours", "shortfall_hours"]

#: Columns of `StudyResult.station_use`: one row per field and station used at it.
STATION_USE_COLUMNS = [
    "field",
    "station",
    "name",
    "archive",
    "distance_km",
    "height_difference_m",  # field minus station
    "first",  # first and last date with an hour in the period, ISO
    "last",
    "coverage",  # hours with an air temperature / hours of the period
    "share_of_hours",  # weight of this station in the field's hours
    "pressure_kind",  # station pressure, QNH, sea-level pressure, none
]


#: Columns of `StudyResult.estimates`: one row per field, how sure its air is.
ESTIMATE_COLUMNS = [
    "field",
    "own_station",  # share of its hours from a station on the spot
    "stations",  # stations its other hours are estimated from
    "transfer_error_k",  # one standard deviation of the estimated temperature
    "transfer_error_ft",  # the same in density altitude
    "pressure_error_ft",  # one standard deviation of the pressure, in density altitude
    "lapse_stations",  # stations the lapse was fitted from; 0: the day/night table
    "verified_stations",  # stations hidden to learn the error; 0: planning values
]


@dataclass(frozen=True)
class StudyResult:
    """Everything one run of a study produced.

    Parameters
    ----------
    title : str
    fields : tuple of Field
        Runways inside.
    aircraft : tuple of AircraftProfile
    settings : dict
        The settings that shaped the numbers, as JSON-ready values: ``first_year``,
        ``last_year``, ``window``, ``seasons``, ``bands``, ``confidence``, ...
    distributions_monthly, distributions_hourly : DataFrame
        Columns `DISTRIBUTIONS_MONTHLY_COLUMNS`, `DISTRIBUTIONS_HOURLY_COLUMNS`; every
        field x variable x month (x hour), in the study's order; a cell that fails the
        completeness rule is NaN.
    risk_monthly, risk_hourly, risk_seasonal : DataFrame
        Columns `RISK_MONTHLY_COLUMNS` and so on; shares 0-1.
    risk_yearly : DataFrame
        Columns `RISK_YEARLY_COLUMNS`: each month of each year inside the hours window.
    station_use : DataFrame
        Columns `STATION_USE_COLUMNS`.
    pressure_sources : DataFrame
        Columns ``field, source, share``: which share of a field's hours has its pressure
        from what (see `climarisk.pressure.SOURCES`).
    estimates : DataFrame
        Columns `ESTIMATE_COLUMNS`.
    trends, extremes : DataFrame
        Columns `climarisk.trend.TREND_COLUMNS`, `climarisk.extremes.EXTREME_COLUMNS`.
    attributions : tuple of str
        Licence and attribution lines of the data used.
    findings : tuple of Finding
    provenance : dict
        JSON-ready: program version, hashes of the inputs, settings, stations.
    scenarios : DataFrame or None
        Columns `climarisk.scenarios.SCENARIO_COLUMNS`, where variants were asked for.
    """

    title: str
    fields: tuple[Field, ...]
    aircraft: tuple[AircraftProfile, ...]
    settings: dict[str, Any]
    distributions_monthly: pd.DataFrame
    distributions_hourly: pd.DataFrame
    risk_monthly: pd.DataFrame
    risk_hourly: pd.DataFrame
    risk_seasonal: pd.DataFrame
    risk_yearly: pd.DataFrame
    station_use: pd.DataFrame
    pressure_sources: pd.DataFrame
    estimates: pd.DataFrame
    trends: pd.DataFrame
    extremes: pd.DataFrame
    attributions: tuple[str, ...]
    findings: tuple[Finding, ...]
    provenance: dict[str, Any]
    scenarios: pd.DataFrame | None = None
