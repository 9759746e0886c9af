"""From a study to its results: one pure function per field, mapped over the fields."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pandas as pd

from climarisk.aircraft import AircraftProfile
from climarisk.bases import UsableYears, base_tables, usable_years
from climarisk.climatology import (
    hourly_distribution,
    monthly_distribution,
    seasonal_distribution,
)
from climarisk.engine_power import EngineAir, power_tables
from climarisk.errors import InputError
from climarisk.extremes import extreme_rows
from climarisk.fields import Field
from climarisk.findings import Finding, sort_findings
from climarisk.icing import icing_tables
from climarisk.near_saturation import near_saturation
from climarisk.performance import checks_of
from climarisk.progress import Progress, quiet
from climarisk.provenance import provenance
from climarisk.region import Region, region_of
from climarisk.reporting import (
    FieldError,
    aircraft_findings,
    estimate,
    evidence_findings,
    field_findings,
    pressure_shares,
    station_use,
)
from climarisk.results import (
    FIELD_FRAMES,
    VARIABLES,
    StudyResult,
)
from climarisk.risk import margins_by_check, risk_tables, yearly_counts
from climarisk.scene import Scene, scene_of, scored
from climarisk.schedule import schedule_frames, score_flights
from climarisk.schedule_sums import FlightScores
from climarisk.store import Store
from climarisk.study import Study, read_study
from climarisk.trend import TrendInput, trend_rows
from climarisk.weather import Weather, load_weather
from climarisk.weights import weighed, weight_tables
from climarisk.windows import window_table


@dataclass(frozen=True)
class FieldTables:
    """What one field contributes to the results.

    Parameters
    ----------
    frames : dict of str to DataFrame
        By the names they have in `StudyResult`.
    findings : tuple of Finding
    usable : dict of (str, str) to UsableYears
        By ids of field and aircraft.
    flights : FlightScores or None
        What the schedule's flights at this field come to.
    """

    frames: dict[str, pd.DataFrame]
    findings: tuple[Finding, ...]
    usable: dict[tuple[str, str], UsableYears]
    flights: FlightScores | None = None


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
    region = region_of(study, weather, progress)
    parts = []
    for done, field in enumerate(study.fields):
        progress("scoring fields", done, len(study.fields))
        parts.append(field_tables(study, field, region))
    progress("scoring fields", len(study.fields), len(study.fields))
    findings = sort_findings(
        [
            *weather.findings,
            *region.findings,
            *(f for part in parts for f in part.findings),
            *aircraft_findings(study.aircraft),
        ]
    )
    frames = {name: _stacked([p.frames[name] for p in parts]) for name in parts[0].frames}
    use = frames["station_use"]
    _refuse_without_station(study, use, findings)
    told = {
        "stations": use,
        "pressure_sources": frames["pressure_sources"],
        "estimate": frames["estimates"],
    }
    usable = {key: counts for part in parts for key, counts in part.usable.items()}
    bases, base_differences = base_tables(study, frames, usable)
    return StudyResult(
        title=study.title,
        fields=study.fields,
        aircraft=study.aircraft,
        settings=study.settings(),
        **frames,
        attributions=tuple(dict.fromkeys(a for s in weather.stations for a in s.sources)),
        findings=findings,
        provenance=provenance(study, weather, region.stations, told, findings),
        bases=bases,
        base_differences=base_differences,
        tiles=study.tiles,
        **_schedule(study, [part.flights for part in parts]),
    )


def evaluate_schedule(
    study: Study, weather: Weather, progress: Progress = quiet
) -> tuple[dict[str, pd.DataFrame], tuple[Finding, ...]]:
    """The schedule alone, of the fields that have flights.

    Parameters
    ----------
    study : Study
        With flights.
    weather : Weather
    progress : callable

    Returns
    -------
    frames : dict of str to DataFrame
        By their names in `StudyResult`.
    findings : tuple of Finding
        Of the weather and of these fields.
    """
    region = region_of(study, weather, progress)
    flown = {flight.field for flight in study.flights}
    chosen = [field for field in study.fields if field.id in flown]
    scores, findings = [], [*weather.findings, *region.findings]
    for done, field in enumerate(chosen):
        progress("scoring flights", done, len(chosen))
        scene = scene_of(study, field, region)
        scores.append(score_flights(scene, study.flights))
        findings += field_findings(
            field, scene.chosen, region.stations, scene.air, scene.clock, study
        )
    progress("scoring flights", len(chosen), len(chosen))
    return _schedule(study, scores), sort_findings(findings)


def _schedule(study: Study, scores: Sequence[FlightScores | None]) -> dict[str, pd.DataFrame]:
    """The frames of the schedule; none without flights."""
    found = [s for s in scores if s is not None]
    return schedule_frames(study, found) if found else {}


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


def field_tables(study: Study, field: Field, region: Region) -> FieldTables:
    """Every table of one field: a pure function of the study and the stations' air.

    Parameters
    ----------
    study : Study
    field : Field
    region : Region
    """
    scene = scene_of(study, field, region)
    clock, air = scene.clock, scene.air
    risk = [_risk(scene, profile) for profile in study.aircraft]
    error_ft = scene.sds["density_altitude"]
    field_error = FieldError(scene.sd_k, error_ft, scene.lapse_stations, region.error.stations)
    trends = trend_rows(_trend_input(scene, risk))
    central_ft = scene.central["density_altitude"]
    extremes, no_extremes = extreme_rows(field.id, central_ft, clock, study.confidence)
    findings = field_findings(field, scene.chosen, region.stations, air, clock, study)
    findings += evidence_findings(field, trends, no_extremes, study.confidence)
    frames = {
        **_distributions(scene),
        **{name: _stacked([s.frames[name] for s in risk]) for name in risk[0].frames},
        **_near_saturation(scene),
        **_icing(scene),
        "power_monthly": _power(scene),
        "station_use": station_use(field, scene.chosen, air, clock),
        "pressure_sources": pressure_shares(field, air, clock),
        "estimates": estimate(field, scene.chosen, air, field_error, clock),
    }
    for name, columns in FIELD_FRAMES.items():
        table = frames.get(name, pd.DataFrame(columns=columns))
        frames[name] = table.assign(field=field.id)[columns]
    usable = {(field.id, scored.aircraft): scored.usable for scored in risk}
    frames |= {"trends": trends, "extremes": extremes}
    flights = score_flights(scene, study.flights) if study.flights else None
    return FieldTables(frames, tuple(findings), usable, flights)


def _distributions(scene: Scene) -> dict[str, pd.DataFrame]:
    """Distributions of every variable by month, by month x hour and by season."""
    clock, inside = scene.clock, scene.inside
    made: dict[str, list[pd.DataFrame]] = {"monthly": [], "hourly": [], "seasonal": []}
    for variable, unit in VARIABLES.items():
        of, sd = scene.levels[variable], scene.sds[variable]
        tables = {
            "monthly": monthly_distribution(of, clock, inside, sd),
            "hourly": hourly_distribution(of, clock, sd),
            "seasonal": seasonal_distribution(of, clock, inside, scene.study.seasons, sd),
        }
        for kind, table in tables.items():
            made[kind].append(table.assign(variable=variable, unit=unit))
    return {f"distributions_{kind}": _stacked(tables) for kind, tables in made.items()}


def _near_saturation(scene: Scene) -> dict[str, pd.DataFrame]:
    """Shares of hours near saturation; air that the error would supersaturate is at saturation."""
    values = scene.levels
    spread = np.maximum(values["temperature"] - values["dew_point"], 0.0)
    monthly, hourly, seasonal = near_saturation(
        spread, scene.clock, scene.inside, scene.study.seasons
    )
    return {
        "near_saturation_monthly": monthly,
        "near_saturation_hourly": hourly,
        "near_saturation_seasonal": seasonal,
    }


def _icing(scene: Scene) -> dict[str, pd.DataFrame]:
    """Exposure to carburettor icing; nothing where no aircraft has a carburettor."""
    if not any(profile.carburettor for profile in scene.study.aircraft):
        return {}
    monthly, hourly = icing_tables(
        scene.levels["temperature"],
        scene.levels["dew_point"],
        scene.air.pressure_hpa,
        scene.clock,
        scene.daylight,
        scene.study.planning.carburettor_icing,
    )
    return {"icing_monthly": monthly, "icing_hourly": hourly}


def _power(scene: Scene) -> pd.DataFrame:
    """Engine power of every aircraft by month."""
    air = scene.air
    return power_tables(
        EngineAir(
            air.pressure_hpa,
            air.vapour_pressure_hpa,
            air.temperature_c,
            scene.levels["temperature"],
        ),
        scene.clock,
        scene.inside,
        scene.study.aircraft,
    )


@dataclass(frozen=True)
class _Scored:
    """One aircraft at one field: its tables, and its hours for the trends."""

    aircraft: str
    frames: dict[str, pd.DataFrame]
    shortfall: np.ndarray
    usable: UsableYears


def _trend_input(scene: Scene, risk: Sequence[_Scored]) -> TrendInput:
    return TrendInput(
        field=scene.field.id,
        density_altitude_ft=scene.central["density_altitude"],
        clock=scene.clock,
        inside=scene.inside,
        known=scene.known,
        shortfall={scored.aircraft: scored.shortfall for scored in risk},
        seasons=scene.study.seasons,
        confidence=scene.study.confidence,
    )


def _risk(scene: Scene, profile: AircraftProfile) -> _Scored:
    hours = scored(scene, profile)
    monthly, hourly, seasonal = risk_tables(hours, scene.study.seasons)
    frames = {
        "risk_monthly": monthly,
        "risk_hourly": hourly,
        "risk_seasonal": seasonal,
        "risk_yearly": yearly_counts(hours),
        "margins_monthly": margins_by_check(hours, checks_of(profile)),
        **_weights(scene, profile),
        "windows_monthly": window_table(scene, hours, hourly, scene.study.planning),
    }
    named = {name: table.assign(aircraft=profile.id) for name, table in frames.items()}
    return _Scored(profile.id, named, hours.central.shortfall, usable_years(hours))


def _weights(scene: Scene, profile: AircraftProfile) -> dict[str, pd.DataFrame]:
    """The mass that holds, by month, month x hour and season."""
    study = scene.study
    tables = weight_tables(weighed(scene, profile), profile, study.seasons, study.planning.holds_in)
    kinds = ("monthly", "hourly", "seasonal")
    return {f"weights_{kind}": table for kind, table in zip(kinds, tables, strict=True)}
