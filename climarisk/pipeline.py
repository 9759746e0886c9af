"""From a study to its results: one pure function per field, mapped over the fields."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pandas as pd

from climarisk.aircraft import AircraftProfile
from climarisk.atmosphere import (
    density_altitude_ft,
    dew_point_c,
    isa_pressure_hpa,
    pressure_altitude_ft,
    relative_humidity_pct,
    virtual_temperature_c,
)
from climarisk.climatology import hourly_distribution, monthly_distribution
from climarisk.clock import LocalClock, hour_grid, in_window, local_clock
from climarisk.errors import InputError
from climarisk.fields import Field
from climarisk.findings import Finding, sort_findings
from climarisk.performance import TableAir, density_ratio, margins
from climarisk.progress import Progress, quiet
from climarisk.provenance import provenance
from climarisk.reporting import aircraft_findings, field_findings, pressure_shares, station_use
from climarisk.results import (
    DISTRIBUTIONS_HOURLY_COLUMNS,
    DISTRIBUTIONS_MONTHLY_COLUMNS,
    RISK_HOURLY_COLUMNS,
    RISK_MONTHLY_COLUMNS,
    RISK_SEASONAL_COLUMNS,
    VARIABLES,
    StudyResult,
)
from climarisk.risk import Hours, risk_tables
from climarisk.store import Store
from climarisk.study import Study, read_study
from climarisk.transfer import (
    FieldAir,
    StationAir,
    air_at_field,
    candidates,
    on_grid,
)
from climarisk.weather import Weather, load_weather


@dataclass(frozen=True)
class FieldTables:
    """What one field contributes to the results; the frames lack no contract column."""

    distributions_monthly: pd.DataFrame
    distributions_hourly: pd.DataFrame
    risk_monthly: pd.DataFrame
    risk_hourly: pd.DataFrame
    risk_seasonal: pd.DataFrame
    station_use: pd.DataFrame
    pressure_sources: pd.DataFrame
    findings: tuple[Finding, ...]


def run_study(
    path: Path | str,
    store: Store | None = None,
    progress: Progress = quiet,
    offline: bool = False,
) -> StudyResult:
    """The results of a study.

    Parameters
    ----------
    path : Path or str
        The study TOML, or its folder.
    store : Store or None
        Where parsed hours are kept; None keeps nothing.
    progress : callable
        Called with what is being done, how many are done and how many there are.
    offline : bool
        Never touch the network.

    Returns
    -------
    StudyResult

    Raises
    ------
    InputError
        Anything is wrong in the study's files, or no station is usable.
    ArchiveError, FetchError, StoreError
        The weather cannot be read.
    """
    study = read_study(path)
    return evaluate(study, load_weather(study, store, progress, offline), progress)


def evaluate(study: Study, weather: Weather, progress: Progress = quiet) -> StudyResult:
    """The results of a study whose weather is at hand.

    Parameters
    ----------
    study : Study
    weather : Weather
    progress : callable

    Raises
    ------
    InputError
        No field has a usable station.
    """
    grid = hour_grid(study.first_year, study.last_year)
    stations = [on_grid(s.station, s.hours, grid, s.elevation_trusted) for s in weather.stations]
    parts = []
    for done, field in enumerate(study.fields):
        progress("scoring fields", done, len(study.fields))
        parts.append(field_tables(study, field, stations, grid))
    progress("scoring fields", len(study.fields), len(study.fields))
    findings = sort_findings(
        [
            *weather.findings,
            *(f for part in parts for f in part.findings),
            *aircraft_findings(study.aircraft),
        ]
    )
    use = _stacked([p.station_use for p in parts])
    pressure = _stacked([p.pressure_sources for p in parts])
    _refuse_without_station(study, use, findings)
    return StudyResult(
        title=study.title,
        fields=study.fields,
        aircraft=study.aircraft,
        settings=study.settings(),
        distributions_monthly=_stacked([p.distributions_monthly for p in parts]),
        distributions_hourly=_stacked([p.distributions_hourly for p in parts]),
        risk_monthly=_stacked([p.risk_monthly for p in parts]),
        risk_hourly=_stacked([p.risk_hourly for p in parts]),
        risk_seasonal=_stacked([p.risk_seasonal for p in parts]),
        station_use=use,
        pressure_sources=pressure,
        attributions=tuple(dict.fromkeys(a for s in weather.stations for a in s.sources)),
        findings=findings,
        provenance=provenance(study, weather, use, pressure, findings),
    )


def _stacked(frames: Sequence[pd.DataFrame]) -> pd.DataFrame:
    filled = [f for f in frames if len(f)]
    return pd.concat(filled, ignore_index=True) if filled else frames[0]


def _refuse_without_station(study: Study, use: pd.DataFrame, findings: Sequence[Finding]) -> None:
    if not (use["share_of_hours"] > 0).any():
        told = " ".join(f.message for f in findings if f.severity == "reject")
        raise InputError(
            f"{study.path}: no field of the study has a usable station in "
            f"{study.first_year}-{study.last_year}. {told[:600]}".rstrip()
        )


def field_tables(
    study: Study, field: Field, stations: Sequence[StationAir], grid: np.ndarray
) -> FieldTables:
    """Every table of one field: a pure function of the study and the stations' air.

    Parameters
    ----------
    study : Study
    field : Field
    stations : sequence of StationAir
    grid : ndarray of int64, shape (n_hours,)
        UTC hours since 1970.
    """
    clock = local_clock(field, grid, study.first_year, study.last_year)
    inside = in_window(study.window, field, grid, clock)
    chosen = candidates(field, stations, study.radius_km)
    air = air_at_field(field, chosen, stations, clock)
    values = variables(field, air)
    of_month, of_hour = _distributions(field, values, clock, inside)
    risk = [_risk(study, field, profile, air, values, clock, inside) for profile in study.aircraft]
    return FieldTables(
        of_month,
        of_hour,
        _stacked([monthly for monthly, _, _ in risk]),
        _stacked([hourly for _, hourly, _ in risk]),
        _stacked([seasonal for _, _, seasonal in risk]),
        station_use(field, chosen, air, clock, grid),
        pressure_shares(field, air, clock),
        tuple(field_findings(field, chosen, stations, air, clock, study)),
    )


def variables(field: Field, air: FieldAir) -> dict[str, np.ndarray]:
    """The six variables of the distribution tables, hour by hour.

    Parameters
    ----------
    field : Field
    air : FieldAir

    Returns
    -------
    dict of str to ndarray, shape (n_hours,)
        Keys and units of `climarisk.results.VARIABLES`; NaN where an ingredient is missing.
    """
    known_p = np.where(
        np.isfinite(air.pressure_hpa), air.pressure_hpa, isa_pressure_hpa(field.elevation_m)
    )
    dew_point = dew_point_c(air.vapour_pressure_hpa, known_p)
    return {
        "density_altitude": density_altitude_ft(
            air.pressure_hpa, air.temperature_c, air.vapour_pressure_hpa
        ),
        "pressure_altitude": pressure_altitude_ft(air.pressure_hpa),
        "temperature": air.temperature_c,
        "dew_point": dew_point,
        "relative_humidity": relative_humidity_pct(air.temperature_c, dew_point),
        "vapour_pressure": air.vapour_pressure_hpa,
    }


def _distributions(
    field: Field, values: dict[str, np.ndarray], clock: LocalClock, inside: np.ndarray
) -> tuple[pd.DataFrame, pd.DataFrame]:
    monthly: list[pd.DataFrame] = []
    hourly: list[pd.DataFrame] = []
    for variable, unit in VARIABLES.items():
        for table, into in (
            (monthly_distribution(values[variable], clock, inside), monthly),
            (hourly_distribution(values[variable], clock), hourly),
        ):
            into.append(table.assign(field=field.id, variable=variable, unit=unit))
    return (
        _stacked(monthly)[DISTRIBUTIONS_MONTHLY_COLUMNS],
        _stacked(hourly)[DISTRIBUTIONS_HOURLY_COLUMNS],
    )


def _risk(
    study: Study,
    field: Field,
    profile: AircraftProfile,
    air: FieldAir,
    values: dict[str, np.ndarray],
    clock: LocalClock,
    inside: np.ndarray,
) -> tuple[pd.DataFrame, pd.DataFrame, pd.DataFrame]:
    known = np.flatnonzero(np.isfinite(values["density_altitude"]) & clock.in_period)
    temperature, vapour = air.temperature_c[known], air.vapour_pressure_hpa[known]
    pressure = air.pressure_hpa[known]
    table_air = TableAir(
        values["pressure_altitude"][known],
        virtual_temperature_c(temperature, vapour, pressure)
        if study.humidity_in_tables
        else temperature,
        temperature,
        values["density_altitude"][known],
        density_ratio(pressure, temperature, vapour),
    )
    scored = Hours(clock, known, margins(profile, field, table_air), inside, study.confidence)
    tables = risk_tables(scored, study.seasons)
    columns = (RISK_MONTHLY_COLUMNS, RISK_HOURLY_COLUMNS, RISK_SEASONAL_COLUMNS)
    monthly, hourly, seasonal = (
        table.assign(field=field.id, aircraft=profile.id)[wanted]
        for table, wanted in zip(tables, columns, strict=True)
    )
    return monthly, hourly, seasonal
