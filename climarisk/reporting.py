"""What is said of a field beside its figures: stations used, pressure sources, findings."""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd

from climarisk.aircraft import OPERATIONS, AircraftProfile, PerformanceTable
from climarisk.atmosphere import P0_HPA
from climarisk.clock import LocalClock
from climarisk.fields import STEEP_SLOPE_PCT, Field
from climarisk.findings import Finding
from climarisk.performance import read_off
from climarisk.pressure import (
    NO_PRESSURE,
    SEA_LEVEL_LIMIT_M,
    SEA_LEVEL_PLAIN_M,
    SOURCES,
    pressure_error_ft,
)
from climarisk.results import ESTIMATE_COLUMNS, STATION_USE_COLUMNS
from climarisk.rules import MONTH, YEARS, patchy_months
from climarisk.stations import Station, distance_km
from climarisk.study import Study
from climarisk.transfer import (
    MAXIMUM_HEIGHT_DIFFERENCE_M,
    ON_SPOT_KM,
    REGION_KM,
    Candidate,
    FieldAir,
    StationAir,
    measured_around,
)
from climarisk.trend import STATION_MOVE

#: Without a station this near in distance and height the field's air is of low confidence
#: (a judgement; the published errors of hourly transfer grow fast beyond).
_CONFIDENT_KM, _CONFIDENT_M = 50.0, 500.0
#: Share of a month's hours without humidity above which it is told.
_MISSING_HUMIDITY = 0.1
#: A station within 3 km of a field rarely stands higher or lower than this.
_SAME_PLACE_M = 300.0


@dataclass(frozen=True)
class FieldError:
    """The transfer error at a field.

    Parameters
    ----------
    sd_k, sd_ft : ndarray, shape (n_hours,)
        Standard deviation of the temperature and of the density altitude; 0 from the field's
        own station.
    lapse_stations, verified_stations : int
    """

    sd_k: np.ndarray
    sd_ft: np.ndarray
    lapse_stations: int
    verified_stations: int


def station_use(
    field: Field, chosen: Sequence[Candidate], air: FieldAir, clock: LocalClock
) -> pd.DataFrame:
    """One row per candidate station of a field; columns `STATION_USE_COLUMNS`."""
    share = air.share[:, clock.in_period]
    n_used = max(int((share.sum(axis=0) > 0).sum()), 1)
    first_day = np.datetime64(f"{clock.first_year}-01-01")
    day = clock.day[clock.in_period]
    rows = []
    for i, c in enumerate(chosen):
        known = np.isfinite(c.air.temperature_c[clock.in_period])
        span = first_day + day[known].astype("timedelta64[D]")
        rows.append(
            (
                field.id,
                c.air.station.id,
                c.air.station.name,
                c.air.station.archive,
                c.distance_km,
                c.height_difference_m,
                str(span[0]) if len(span) else "",
                str(span[-1]) if len(span) else "",
                float(known.mean()),
                float(share[i].sum()) / n_used,
                _main_pressure(c, clock),
            )
        )
    return pd.DataFrame(rows, columns=STATION_USE_COLUMNS)


def _main_pressure(c: Candidate, clock: LocalClock) -> str:
    kinds = c.air.pressure_source[clock.in_period]
    kinds = kinds[kinds != NO_PRESSURE]
    if not len(kinds):
        return "none"
    return SOURCES[int(np.bincount(kinds).argmax())]


def estimate(
    field: Field, chosen: Sequence[Candidate], air: FieldAir, error: FieldError, clock: LocalClock
) -> pd.DataFrame:
    """One row that says how sure a field's air is; columns `ESTIMATE_COLUMNS`."""
    known = np.isfinite(air.temperature_c) & clock.in_period
    own = known & np.isnan(air.carried_m)
    carried = known & ~own
    used = (air.share[:, carried] > 0).any(axis=1) if len(chosen) else np.zeros(0, bool)

    row = (
        field.id,
        float(own.sum() / max(known.sum(), 1)),
        int(used.sum()),
        _typical(error.sd_k[carried]),
        _typical(error.sd_ft[carried]),
        _typical(_pressure_error_ft(air, known)),
        error.lapse_stations,
        error.verified_stations,
    )
    return pd.DataFrame([row], columns=ESTIMATE_COLUMNS)


def pressure_shares(field: Field, air: FieldAir, clock: LocalClock) -> pd.DataFrame:
    """Share of the field's hours with a pressure from each source; ``field, source, share``."""
    sources = air.pressure_source[clock.in_period]
    sources = sources[sources != NO_PRESSURE]
    share = np.bincount(sources, minlength=len(SOURCES)) / max(len(sources), 1)
    rows = [(field.id, s, float(x)) for s, x in zip(SOURCES, share, strict=True) if x > 0]
    return pd.DataFrame(rows, columns=["field", "source", "share"])


def field_findings(
    field: Field,
    chosen: Sequence[Candidate],
    stations: Sequence[StationAir],
    air: FieldAir,
    clock: LocalClock,
    study: Study,
) -> list[Finding]:
    """What there is to say of a field: its stations, its pressure, its coverage, its slopes."""

    def say(severity: str, check: str, message: str) -> Finding:
        return Finding(severity, "field", field.id, check, message)  # type: ignore[arg-type]

    findings = [say("caution", "slope", text) for text in _slope_texts(field)]
    if any(d.undeclared for d in field.runways):
        findings.append(
            say(
                "note",
                "undeclared-distances",
                "declared distances are missing and were filled from the runway's length.",
            )
        )
    if not chosen:
        why = _why_no_station(field, stations, study)
        message = f"{field.name} ({field.id}) has no figures: {why}."
        findings.append(say("reject", "no-station", message))
        return findings
    known = np.isfinite(air.temperature_c[clock.in_period])
    if not known.any():
        findings.append(
            say(
                "reject",
                "no-hours",
                f"{field.name} ({field.id}) has no figures: its stations have no hour in "
                f"{study.first_year}-{study.last_year}.",
            )
        )
        return findings
    findings += [say(*item) for item in _air_texts(field, chosen, air, clock)]
    findings += [
        say("caution", "pressure", t) for t in _pressure_texts(field, chosen, stations, air)
    ]
    return findings


def _why_no_station(field: Field, stations: Sequence[StationAir], study: Study) -> str:
    """Why no station serves a field, and what to do."""
    if field.stations:
        return "the stations it is pinned to cannot serve it: their elevation is not trusted"
    away = [
        (distance_km(field.latitude, field.longitude, s.latitude, s.longitude), a)
        for a in stations
        for s in [a.station]
    ]
    near = [
        a
        for d, a in away
        if d <= study.radius_km
        and abs(field.elevation_m - a.station.elevation_m) <= MAXIMUM_HEIGHT_DIFFERENCE_M
    ]
    if not near:
        distance, nearest = min(away, key=lambda item: item[0])
        return (
            f"no station lies within {study.radius_km:g} km and "
            f"{MAXIMUM_HEIGHT_DIFFERENCE_M:.0f} m of height; the nearest is "
            f"{nearest.station.id}, {distance:.0f} km off and "
            f"{field.elevation_m - nearest.station.elevation_m:+.0f} m. Check the coordinates of "
            "both, add a station, or widen radius_km"
        )
    if not any(np.isfinite(a.temperature_c).any() for a in near):
        return (
            f"the stations around it have no hour in {study.first_year}-{study.last_year}. Check "
            "the period against the archive files"
        )
    return "the dates, the temperature or the elevation of the stations around it look wrong"


def _slope_texts(field: Field) -> list[str]:
    return [
        f"runway direction {d.runway} slopes {abs(d.slope_pct):g} %: published factors do not "
        f"hold above {STEEP_SLOPE_PCT:g} %, it needs a site-specific procedure."
        for d in field.runways
        if d.is_steep
    ]


def _air_texts(
    field: Field, chosen: Sequence[Candidate], air: FieldAir, clock: LocalClock
) -> list[tuple[str, str, str]]:
    texts = []
    nearest = min(chosen, key=lambda c: c.distance_km)
    if not any(
        c.distance_km <= _CONFIDENT_KM and abs(c.height_difference_m) <= _CONFIDENT_M
        for c in chosen
    ):
        texts.append(
            (
                "caution",
                "far-station",
                f"low confidence: no station within {_CONFIDENT_KM:.0f} km and "
                f"{_CONFIDENT_M:.0f} m of height; the nearest is {nearest.air.station.id}, "
                f"{nearest.distance_km:.0f} km off and {nearest.height_difference_m:+.0f} m.",
            )
        )
    texts += [
        (
            "caution",
            "field-elevation",
            f"its {field.elevation_m:g} m are {c.height_difference_m:+.0f} m from those of station "
            f"{c.air.station.id}, {c.distance_km:.0f} km off; check both, feet in a metre column "
            "look like this.",
        )
        for c in chosen
        if c.distance_km <= ON_SPOT_KM and abs(c.height_difference_m) > _SAME_PLACE_M
    ]
    texts += _record_texts(air, clock)
    for i, c in enumerate(chosen):
        if not c.air.elevation_trusted and (air.share[i] > 0).any():
            texts.append(
                (
                    "caution",
                    "station-elevation",
                    f"the elevation of its station {c.air.station.id} is contradicted by its "
                    f"pressure; check the field's own elevation of {field.elevation_m:g} m too: "
                    "100 m too low reads about 400 ft of density altitude too low.",
                )
            )
    return texts


def _record_texts(air: FieldAir, clock: LocalClock) -> list[tuple[str, str, str]]:
    """What there is to say of the years, months and humidity of a field's record."""
    texts = []
    known = np.isfinite(air.temperature_c) & np.isfinite(air.vapour_pressure_hpa)
    known &= np.isfinite(air.pressure_hpa) & clock.in_period
    years = len(np.unique(clock.year[known]))
    if years < YEARS.percentiles:
        texts.append(
            (
                "caution",
                "few-years",
                f"{years} of {clock.n_years} years have hours with temperature, humidity and "
                f"pressure; percentiles need about {YEARS.percentiles} years to settle.",
            )
        )
    texts += _humidity_texts(air, clock)
    patchy, some = patchy_months(known, clock)
    if patchy:
        texts.append(
            (
                "note",
                "patchy-months",
                f"{patchy} of {some} months with data miss {MONTH.missing_days} days or more, or "
                f"{MONTH.consecutive_days} in a row.",
            )
        )
    return texts


def _humidity_texts(air: FieldAir, clock: LocalClock) -> list[tuple[str, str, str]]:
    """A caution where hours lack humidity alone: often the damp ones, so figures are biased."""
    has_air = np.isfinite(air.temperature_c) & np.isfinite(air.pressure_hpa) & clock.in_period
    lacking = has_air & np.isnan(air.vapour_pressure_hpa)
    total = np.bincount(clock.month[has_air], minlength=12)
    share = np.bincount(clock.month[lacking], minlength=12) / np.maximum(total, 1)
    worst = np.flatnonzero(share > _MISSING_HUMIDITY)
    if not len(worst):
        return []
    months = ", ".join(f"{m + 1} ({share[m]:.0%})" for m in worst)
    return [
        (
            "caution",
            "humidity-missing",
            f"hours with temperature and pressure lack humidity and have no figure, in months "
            f"{months}; sensors often fail in the dampest air, so the rest may not stand for all.",
        )
    ]


def _pressure_texts(
    field: Field, chosen: Sequence[Candidate], stations: Sequence[StationAir], air: FieldAir
) -> list[str]:
    texts = []
    inverted = SOURCES.index("sea-level pressure")
    if (air.pressure_source == inverted).any():
        texts += [
            f"the pressure of {c.air.station.id} ({c.air.station.elevation_m:.0f} m) is sea-level "
            f"pressure inverted with an assumed temperature, good to "
            f"{_typical(c.air.pressure_error_hpa):.1f} hPa; above {SEA_LEVEL_PLAIN_M:.0f} m that "
            "is a caution."
            for c in chosen
            if c.air.station.elevation_m > SEA_LEVEL_PLAIN_M
            and (c.air.pressure_source == inverted).any()
        ]
    stand_in = (air.pressure_source > inverted) & (air.pressure_source != NO_PRESSURE)
    if stand_in.any():
        measured = [s.station.id for s, _ in measured_around(field, stations)]
        what = (
            f"the QNH of {', '.join(measured)}: the mean of the month, with the day's anomaly "
            "where they report"
            if measured
            else f"the standard {P0_HPA} hPa, no station within {REGION_KM:.0f} km having any"
        )
        texts.append(
            f"some or all months have no pressure of the field's stations; in its place stands "
            f"{what}, good to {_typical(_pressure_error_ft(air, stand_in)):.0f} ft of density "
            f"altitude. Default values, uncalibrated sea-level pressure above "
            f"{SEA_LEVEL_LIMIT_M:.0f} m and stations of doubtful elevation are not used."
        )
    return texts


def _pressure_error_ft(air: FieldAir, hours: np.ndarray) -> np.ndarray:
    """What the pressure's error is worth in density altitude at some hours, ft."""
    complete = hours & np.isfinite(air.pressure_hpa) & np.isfinite(air.vapour_pressure_hpa)
    complete &= np.isfinite(air.temperature_c)
    return np.asarray(
        pressure_error_ft(
            air.pressure_error_hpa[complete],
            air.pressure_hpa[complete],
            air.temperature_c[complete],
            air.vapour_pressure_hpa[complete],
        )
    )


def _typical(values: np.ndarray) -> float:
    """Root mean square of the known values; 0 without any."""
    known = values[np.isfinite(values)]
    return float(np.sqrt((known**2).mean())) if len(known) else 0.0


def temperature_finding(station: Station, bias_k: float) -> Finding:
    """The rejection of a station that is far off what the others say of it."""
    return Finding(
        "reject",
        "station",
        station.id,
        "temperature-off",
        f"its temperature is on average {bias_k:+.1f} K off what the stations around it give for "
        f"its place and its {station.elevation_m:g} m; nothing is carried from it to other places. "
        "Check the unit of its temperature, its elevation (feet in a metre column?) and its "
        "coordinates.",
    )


def evidence_findings(
    field: Field, trends: pd.DataFrame, no_extremes: str | None, confidence: float
) -> list[Finding]:
    """What there is to say of a field's trends and extremes."""
    findings = []
    broken = trends[(trends["break_p_value"] < 1.0 - confidence) & (trends["aircraft"] == "")]
    for row in broken.itertuples():
        findings.append(
            Finding(
                "caution",
                "field",
                field.id,
                "break",
                f"the {row.season} density altitude steps in {int(row.break_year)}: a trend there "
                f"{STATION_MOVE}.",
            )
        )
    if no_extremes:
        findings.append(Finding("note", "field", field.id, "extremes", no_extremes))
    return findings


def aircraft_findings(aircraft: Sequence[AircraftProfile]) -> list[Finding]:
    """What there is to say of the profiles: scaled figures, masses beyond the tables."""
    findings = []
    for profile in aircraft:
        if profile.is_scaled:
            findings.append(
                Finding(
                    "caution",
                    "aircraft",
                    profile.id,
                    "scaled",
                    "some figures are scaled from a single sea-level value, no table: wide "
                    "uncertainty.",
                )
            )
        for operation in OPERATIONS:
            tables = getattr(profile, operation)
            if tables and profile.planning_kg > tables[-1].mass_kg:
                findings.append(
                    Finding(
                        "caution",
                        "aircraft",
                        profile.id,
                        "mass-beyond-table",
                        f"the planning mass of {profile.planning_kg:g} kg is above the heaviest "
                        f"{operation} table ({tables[-1].mass_kg:g} kg): every hour is outside "
                        "the table.",
                    )
                )
            if lighter_gaps(tables):
                findings.append(
                    Finding(
                        "caution",
                        "aircraft",
                        profile.id,
                        "lighter-blank",
                        f"a lighter {operation} table is blank, or ends, where a heavier one has "
                        "figures: between them no mass is shown to hold, so that a lighter mass "
                        "may fail where the mass that holds does not; check the figures against "
                        "the handbook.",
                    )
                )
    return findings


def lighter_gaps(tables: Sequence[PerformanceTable]) -> bool:
    """Whether a table says nothing at a point where one at a greater mass has a figure.

    Parameters
    ----------
    tables : sequence of PerformanceTable
        Of one operation, by mass.
    """
    for light, heavy in itertools.pairwise(tables):
        altitude, temperature = np.meshgrid(
            heavy.pressure_altitude_ft, heavy.temperature_c, indexing="ij"
        )
        for name in set(heavy.values) & set(light.values):
            below = read_off(light, name, altitude.ravel(), temperature.ravel())
            if (np.isnan(below) & np.isfinite(heavy.values[name].ravel())).any():
                return True
    return False
