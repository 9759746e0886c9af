"""From a study to its results: one pure function per field, mapped over the fields."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
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
    vapour_pressure_hpa,
    virtual_temperature_c,
)
from climarisk.climatology import (
    hourly_distribution,
    monthly_distribution,
    seasonal_distribution,
)
from climarisk.clock import LocalClock, hour_grid, in_window, local_clock
from climarisk.errors import InputError
from climarisk.extremes import extreme_rows
from climarisk.fields import Field
from climarisk.findings import Finding, sort_findings
from climarisk.near_saturation import near_saturation
from climarisk.performance import Margins, TableAir, checks_of, density_ratio, margins
from climarisk.progress import Progress, quiet
from climarisk.provenance import provenance
from climarisk.reporting import (
    FieldError,
    aircraft_findings,
    estimate,
    evidence_findings,
    field_findings,
    pressure_shares,
    station_use,
    temperature_finding,
)
from climarisk.results import FIELD_FRAMES, VARIABLES, StudyResult
from climarisk.risk import Hours, margins_by_check, risk_tables, yearly_counts
from climarisk.rules import reporting_findings
from climarisk.store import Store
from climarisk.study import Study, read_study
from climarisk.timing import Misdating, misdated, timing_findings
from climarisk.transfer import (
    FieldAir,
    StationAir,
    air_at_field,
    candidates,
    on_grid,
    utc_month,
    warmed,
)
from climarisk.transfer_error import HiddenStation, TransferError, far_off, learn_error
from climarisk.trend import TrendInput, trend_rows
from climarisk.verify import as_field, errors, hide, lapse_for
from climarisk.weather import Weather, load_weather

#: Stations hidden to learn the transfer error, at most.
MOST_HIDDEN = 30


@dataclass(frozen=True)
class FieldTables:
    """What one field contributes to the results.

    Parameters
    ----------
    frames : dict of str to DataFrame
        By the names they have in `StudyResult`.
    findings : tuple of Finding
    """

    frames: dict[str, pd.DataFrame]
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
    stations, wrong = stations_on_grid(weather, grid)
    error, stations, off = _learned_error(study, stations, grid, progress)
    parts = []
    for done, field in enumerate(study.fields):
        progress("scoring fields", done, len(study.fields))
        parts.append(field_tables(study, field, stations, grid, error))
    progress("scoring fields", len(study.fields), len(study.fields))
    findings = sort_findings(
        [
            *weather.findings,
            *_record_findings(study, stations, wrong, grid),
            *off,
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
    return StudyResult(
        title=study.title,
        fields=study.fields,
        aircraft=study.aircraft,
        settings=study.settings(),
        **frames,
        attributions=tuple(dict.fromkeys(a for s in weather.stations for a in s.sources)),
        findings=findings,
        provenance=provenance(study, weather, stations, told, findings),
        tiles=study.tiles,
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


def stations_on_grid(
    weather: Weather, grid: np.ndarray
) -> tuple[list[StationAir], dict[str, Misdating]]:
    """Stations on the study's hours, those whose dates look wrong marked.

    Parameters
    ----------
    weather : Weather
    grid : ndarray of int64, shape (n_hours,)

    Returns
    -------
    stations : list of StationAir
    wrong : dict of str to Misdating
        By station id.
    """
    airs = [
        on_grid(s.station, s.hours, grid, s.elevation_trusted, s.derived) for s in weather.stations
    ]
    wrong = misdated(
        [a.station for a in airs],
        [a.temperature_c for a in airs],
        utc_month(grid) * 24 + grid % 24,
    )
    return [replace(a, serves_others=a.station.id not in wrong) for a in airs], wrong


def _record_findings(
    study: Study, stations: Sequence[StationAir], wrong: dict[str, Misdating], grid: np.ndarray
) -> list[Finding]:
    """What there is to say of the stations' dates and of the hours they never report."""
    findings = timing_findings(wrong)
    for air in stations:
        clock = local_clock(as_field(air), grid, study.first_year, study.last_year)
        findings += reporting_findings(air.station, np.isfinite(air.temperature_c), clock)
    return findings


def serving(study: Study, stations: Sequence[StationAir]) -> set[str]:
    """Ids of the trusted stations that air is carried from to the study's fields."""
    found: set[str] = set()
    for field in study.fields:
        chosen = candidates(field, stations, study.radius_km)
        if not (field.stations and all(c.on_spot for c in chosen)):
            found |= {c.air.station.id for c in chosen if c.air.serves_others}
    return found


def _learned_error(
    study: Study, stations: list[StationAir], grid: np.ndarray, progress: Progress
) -> tuple[TransferError, list[StationAir], list[Finding]]:
    """The error of carried air, learned by hiding the stations that air is carried from.

    A station that is far off what the others say of it is taken out, the worst first, and the
    others are hidden anew without it.
    """
    findings: list[Finding] = []
    while True:
        wanted = serving(study, stations)
        places = [i for i, a in enumerate(stations) if a.station.id in wanted][:MOST_HIDDEN]
        shown: dict[int, HiddenStation] = {}
        for done, i in enumerate(places):
            progress("hiding stations", done, len(places))
            hidden = hide(i, stations, grid, study.first_year, study.last_year, study.radius_km)
            if hidden is not None:
                shown[i] = errors(hidden)
        if places:
            progress("hiding stations", len(places), len(places))
        wrong = far_off(shown)
        if wrong is None:
            return learn_error(list(shown.values())), stations, findings
        bias = float(np.nanmean(shown[wrong].error_k))
        findings.append(temperature_finding(stations[wrong].station, bias))
        stations = [
            replace(a, serves_others=False) if i == wrong else a for i, a in enumerate(stations)
        ]


def field_tables(
    study: Study,
    field: Field,
    stations: Sequence[StationAir],
    grid: np.ndarray,
    error: TransferError,
) -> FieldTables:
    """Every table of one field: a pure function of the study and the stations' air.

    Parameters
    ----------
    study : Study
    field : Field
    stations : sequence of StationAir
    grid : ndarray of int64, shape (n_hours,)
        UTC hours since 1970.
    error : TransferError
    """
    clock = local_clock(field, grid, study.first_year, study.last_year)
    inside = in_window(study.window, field, grid, clock)
    chosen = candidates(field, stations, study.radius_km)
    lapse = lapse_for(field, stations, clock, study.radius_km)
    air = air_at_field(field, chosen, stations, clock, lapse)
    air = warmed(air, study.warmer_k, study.warmer_holds, field.elevation_m)
    sd_k = error.sd_k(air.carried_m, clock.month, clock.hour, air.carried_km)
    values = _levels_of_variables(field, air, error.hour_levels[:, None] * sd_k)
    sds = errors_of_variables(field, air, sd_k)
    sd_ft = sds["density_altitude"]
    shifts = error.place_levels[:, None] * sd_k
    scene = _Scene(study, field, air, clock, inside, shifts, sd_ft, error.place_share)
    risk = [_risk(scene, profile) for profile in study.aircraft]
    field_error = FieldError(sd_k, sd_ft, lapse.stations, error.stations)
    central = variables(field, air)["density_altitude"]
    trends = trend_rows(_trend_input(scene, central, risk))
    extremes, no_extremes = extreme_rows(field.id, central, clock, study.confidence)
    findings = field_findings(field, chosen, stations, air, clock, study)
    findings += evidence_findings(field, trends, no_extremes, study.confidence)
    frames = {
        **_distributions(study, values, sds, clock, inside),
        **{name: _stacked([s.frames[name] for s in risk]) for name in risk[0].frames},
        **_near_saturation(study, values, clock, inside),
        "station_use": station_use(field, chosen, air, clock),
        "pressure_sources": pressure_shares(field, air, clock),
        "estimates": estimate(field, chosen, air, field_error, clock),
    }
    for name, columns in FIELD_FRAMES.items():
        frames[name] = frames[name].assign(field=field.id)[columns]
    return FieldTables(frames | {"trends": trends, "extremes": extremes}, tuple(findings))


#: Variables that the transfer error of the temperature moves.
_MOVED = ("density_altitude", "temperature", "relative_humidity")


def _levels_of_variables(field: Field, air: FieldAir, shifts: np.ndarray) -> dict[str, np.ndarray]:
    """The six variables at each level of the transfer error; one level where it moves none."""
    central = variables(field, air)
    if not (shifts != 0.0).any():
        return {name: values[None, :] for name, values in central.items()}
    levels = [variables(field, air, shift) for shift in shifts]
    return {
        name: np.array([level[name] for level in levels])
        if name in _MOVED
        else central[name][None, :]
        for name in central
    }


def errors_of_variables(field: Field, air: FieldAir, sd_k: np.ndarray) -> dict[str, np.ndarray]:
    """What one standard deviation of the temperature is worth in each variable it moves.

    Parameters
    ----------
    field : Field
    air : FieldAir
    sd_k : ndarray, shape (n_hours,)

    Returns
    -------
    dict of str to ndarray, shape (n_hours,)
    """
    if not (sd_k > 0).any():
        return {name: np.zeros(len(sd_k)) for name in VARIABLES}
    colder, warmer = variables(field, air, -sd_k), variables(field, air, sd_k)
    return {
        name: np.abs(warmer[name] - colder[name]) / 2 if name in _MOVED else np.zeros(len(sd_k))
        for name in VARIABLES
    }


def variables(
    field: Field, air: FieldAir, shift_k: np.ndarray | float = 0.0
) -> dict[str, np.ndarray]:
    """The six variables of the distribution tables, hour by hour.

    Parameters
    ----------
    field : Field
    air : FieldAir
    shift_k : ndarray, shape (n_hours,), or float
        Added to the temperature; the vapour pressure stays, up to saturation.

    Returns
    -------
    dict of str to ndarray, shape (n_hours,)
        Keys and units of `climarisk.results.VARIABLES`; NaN where an ingredient is missing.
    """
    temperature, vapour = shifted(field, air, shift_k)
    dew_point = dew_point_c(vapour, _known_pressure(field, air))
    return {
        "density_altitude": density_altitude_ft(air.pressure_hpa, temperature, vapour),
        "pressure_altitude": pressure_altitude_ft(air.pressure_hpa),
        "temperature": temperature,
        "dew_point": dew_point,
        "relative_humidity": relative_humidity_pct(temperature, dew_point),
        "vapour_pressure": vapour,
    }


def _known_pressure(field: Field, air: FieldAir) -> np.ndarray:
    """The pressure at the field; the standard one where it is unknown, for humidity alone."""
    standard = isa_pressure_hpa(field.elevation_m)
    return np.where(np.isfinite(air.pressure_hpa), air.pressure_hpa, standard)


def shifted(
    field: Field, air: FieldAir, shift_k: np.ndarray | float
) -> tuple[np.ndarray, np.ndarray]:
    """Temperature and vapour pressure with the temperature moved and the vapour kept."""
    temperature = air.temperature_c + shift_k
    saturated = vapour_pressure_hpa(temperature, _known_pressure(field, air))
    vapour = air.vapour_pressure_hpa
    return temperature, np.where(np.equal(shift_k, 0.0), vapour, np.minimum(vapour, saturated))


def _distributions(
    study: Study,
    values: dict[str, np.ndarray],
    sds: dict[str, np.ndarray],
    clock: LocalClock,
    inside: np.ndarray,
) -> dict[str, pd.DataFrame]:
    """Distributions of every variable by month, by month x hour and by season."""
    made: dict[str, list[pd.DataFrame]] = {"monthly": [], "hourly": [], "seasonal": []}
    for variable, unit in VARIABLES.items():
        of, sd = values[variable], sds[variable]
        tables = {
            "monthly": monthly_distribution(of, clock, inside, sd),
            "hourly": hourly_distribution(of, clock, sd),
            "seasonal": seasonal_distribution(of, clock, inside, study.seasons, sd),
        }
        for kind, table in tables.items():
            made[kind].append(table.assign(variable=variable, unit=unit))
    return {f"distributions_{kind}": _stacked(tables) for kind, tables in made.items()}


def _near_saturation(
    study: Study, values: dict[str, np.ndarray], clock: LocalClock, inside: np.ndarray
) -> dict[str, pd.DataFrame]:
    """Shares of hours near saturation; air that the error would supersaturate is at saturation."""
    spread = np.maximum(values["temperature"] - values["dew_point"], 0.0)
    monthly, hourly, seasonal = near_saturation(spread, clock, inside, study.seasons)
    return {
        "near_saturation_monthly": monthly,
        "near_saturation_hourly": hourly,
        "near_saturation_seasonal": seasonal,
    }


@dataclass(frozen=True)
class _Scene:
    """Everything that scoring an aircraft at a field needs beside the aircraft."""

    study: Study
    field: Field
    air: FieldAir
    clock: LocalClock
    inside: np.ndarray
    shifts: np.ndarray
    sd_ft: np.ndarray
    persistence: float


@dataclass(frozen=True)
class _Scored:
    """One aircraft at one field: its tables, and its hours for the trends."""

    aircraft: str
    frames: dict[str, pd.DataFrame]
    known: np.ndarray
    shortfall: np.ndarray


def _trend_input(scene: _Scene, central: np.ndarray, risk: list[_Scored]) -> TrendInput:
    return TrendInput(
        field=scene.field.id,
        density_altitude_ft=central,
        clock=scene.clock,
        inside=scene.inside,
        known=risk[0].known,
        shortfall={scored.aircraft: scored.shortfall for scored in risk},
        seasons=scene.study.seasons,
        confidence=scene.study.confidence,
    )


def _risk(scene: _Scene, profile: AircraftProfile) -> _Scored:
    study, field, clock = scene.study, scene.field, scene.clock
    air = scene.air
    complete = np.isfinite(air.temperature_c) & np.isfinite(air.vapour_pressure_hpa)
    known = np.flatnonzero(complete & np.isfinite(air.pressure_hpa) & clock.in_period)
    central = margins(profile, field, _table_air(scene, known, np.zeros(len(known))))
    levels: list[Margins] = []
    if (scene.shifts != 0.0).any():
        carried = np.flatnonzero(np.isfinite(air.carried_m[known]))
        levels = [
            _moved(central, carried, margins(profile, field, _table_air(scene, where, s[where])))
            for where in [known[carried]]
            for s in scene.shifts
        ]
    scored = Hours(
        clock,
        known,
        central,
        scene.inside,
        study.confidence,
        levels,
        scene.persistence,
        scene.sd_ft[known],
    )
    monthly, hourly, seasonal = risk_tables(scored, study.seasons)
    frames = {
        "risk_monthly": monthly,
        "risk_hourly": hourly,
        "risk_seasonal": seasonal,
        "risk_yearly": yearly_counts(scored),
        "margins_monthly": margins_by_check(scored, checks_of(profile)),
    }
    named = {name: table.assign(aircraft=profile.id) for name, table in frames.items()}
    return _Scored(profile.id, named, known, central.shortfall)


def _moved(central: Margins, places: np.ndarray, moved: Margins) -> Margins:
    """The central margins with those of some hours replaced."""
    parts = {}
    for name, values in vars(central).items():
        parts[name] = values.copy()
        parts[name][..., places] = getattr(moved, name)
    return Margins(**parts)


def _table_air(scene: _Scene, known: np.ndarray, shift_k: np.ndarray) -> TableAir:
    """The air that enters the tables at the known hours, the temperature moved."""
    chosen = replace(
        scene.air,
        temperature_c=scene.air.temperature_c[known],
        vapour_pressure_hpa=scene.air.vapour_pressure_hpa[known],
        pressure_hpa=scene.air.pressure_hpa[known],
    )
    pressure = chosen.pressure_hpa
    temperature, vapour = shifted(scene.field, chosen, shift_k)
    return TableAir(
        pressure_altitude_ft(pressure),
        virtual_temperature_c(temperature, vapour, pressure)
        if scene.study.humidity_in_tables
        else temperature,
        temperature,
        density_altitude_ft(pressure, temperature, vapour),
        density_ratio(pressure, temperature, vapour),
    )
