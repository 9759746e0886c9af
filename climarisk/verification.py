"""The verification report's numbers: every station hidden in turn, and what that says of fields.

Differences are estimated minus measured throughout: a negative bias is air estimated too
cold, or a density altitude too low, which is the unsafe side.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd

from climarisk.atmosphere import (
    HIGHEST_M,
    LOWEST_M,
)
from climarisk.clock import hour_grid, local_clock
from climarisk.errors import InputError
from climarisk.fields import Field
from climarisk.progress import Progress, quiet
from climarisk.region import MOST_HIDDEN, serving, stations_on_grid
from climarisk.reporting import FieldError, estimate, field_findings
from climarisk.scene import errors_of_variables
from climarisk.study import Study
from climarisk.timing import Misdating
from climarisk.transfer import (
    StationAir,
    air_at_field,
    candidates,
)
from climarisk.transfer_error import TransferError, learn_error
from climarisk.units import METRES_PER_FOOT
from climarisk.verification_scores import MEASURES, Shown, group_table, mean_of, measures_of
from climarisk.verify import as_field, errors, hide, lapse_for
from climarisk.weather import Weather

#: A station whose mean absolute error is above this many times the median of the others', of
#: which there must be at least two, is singled out.
SINGLED_OUT_FACTOR, _OTHERS = 2.0, 2
SCORE_COLUMNS = ["station", "group_kind", "group", *MEASURES]
TOTAL_COLUMNS = ["over", "n_stations", "group_kind", "group", *MEASURES]
STATION_COLUMNS = [
    "station",
    "name",
    "elevation_m",
    "verified",
    "singled_out",
    "reason",  # why it is singled out, or why it cannot be verified
    "nearest_km",  # its best candidate
    "nearest_m",
    "carried_m",  # mean over its hours
]
FIELD_COLUMNS = [
    "field",
    "name",
    "own_station",
    "stations",
    "transfer_error_k",
    "transfer_error_ft",
    "lapse_stations",
    "verified_stations",
    "caution",  # why it has no figures, why its confidence is low, stations singled out
    "has_air",
]


@dataclass(frozen=True)
class VerificationReport:
    """What hiding every station of a study in turn showed.

    Parameters
    ----------
    title : str
    first_year, last_year : int
    limit_ft : float or None
        The density-altitude limit; None: each station's own 90th percentile.
    stations : DataFrame
        Columns `STATION_COLUMNS`; every station of the study, in its order.
    scores : DataFrame
        Columns `SCORE_COLUMNS`; every verified station and every group that has hours.
    totals : DataFrame
        Columns `TOTAL_COLUMNS`; means over stations, each weighing the same: ``over`` is
        ``"kept"`` (those singled out left aside) or ``"all"``.  Skills are those of the mean
        errors; hours and cells are summed.
    fields : DataFrame
        Columns `FIELD_COLUMNS`; every field, how sure its air is.

    Notes
    -----
    Measures end in their unit: K of temperature, ft of density altitude.  ``mae_fixed_k`` is
    the error of the same stations with the same weights carried at 6.5 K/km,
    ``mae_nearest_k`` that of the nearest station that reports, taken as it is; a skill is
    1 minus the ratio of the errors.  ``hit_rate`` is hits / (hits + misses) of density
    altitude above ``limit_ft``, ``false_alarm_rate`` is false alarms / (hits + false alarms).
    ``cell_`` columns, in the group of all hours, are errors of the median and the 90th
    percentile of temperature in the month x hour cells with at least 20 common hours, with
    the error distribution applied and (``_central``) without.
    """

    title: str
    first_year: int
    last_year: int
    limit_ft: float | None
    stations: pd.DataFrame
    scores: pd.DataFrame
    totals: pd.DataFrame
    fields: pd.DataFrame

    @property
    def period(self) -> str:
        """The years, as text."""
        first, last = self.first_year, self.last_year
        return f"{first}" if first == last else f"{first}-{last}"


def verify_study(
    study: Study, weather: Weather, progress: Progress = quiet, limit_ft: float | None = None
) -> VerificationReport:
    """Hide every station of a study in turn and tell how far the estimates were off.

    Parameters
    ----------
    study : Study
    weather : Weather
    progress : callable
    limit_ft : float or None
        Density altitude whose exceedance is to be hit; None: each station's own 90th
        percentile.

    Returns
    -------
    VerificationReport

    Raises
    ------
    InputError
        The limit is no density altitude.

    Notes
    -----
    Both density altitudes of an hour, from estimated and from measured temperature and
    vapour pressure, use the same pressure: the station's own, else the standard one of its
    elevation.  The 80 % interval of a station comes from the errors of the other stations
    whose dates are trusted; those were themselves estimated with this station's help.
    """
    check_limit(limit_ft)
    grid = hour_grid(study.first_year, study.last_year)
    stations, wrong = stations_on_grid(weather, grid)
    shown = _hide_all(study, stations, grid, progress)
    measures = []
    for done, one in enumerate(shown):
        progress("comparing stations", done, len(shown))
        others = [s.error for s in shown if s is not one and s.hidden.air.serves_others]
        nested = learn_error(others[:MOST_HIDDEN])
        measures.append(measures_of(one, stations, study.radius_km, nested, limit_ft))
    progress("comparing stations", len(shown), len(shown))
    mae_k = {s.id: float(m["mae_k"][0]) for s, m in zip(shown, measures, strict=True)}
    reasons = singled_out(mae_k, wrong)
    return VerificationReport(
        study.title,
        study.first_year,
        study.last_year,
        limit_ft,
        _station_table(study, stations, shown, reasons, grid),
        _score_table(shown, measures),
        _total_table(shown, measures, reasons),
        _field_table(study, stations, _run_error(study, stations, shown), reasons, progress),
    )


def check_limit(limit_ft: float | None) -> None:
    """Refuse a limit that is no density altitude, before any weather is read.

    Parameters
    ----------
    limit_ft : float or None

    Raises
    ------
    InputError
        It lies outside the standard atmosphere's layers used here, or is no number.
    """
    lowest, highest = LOWEST_M / METRES_PER_FOOT, HIGHEST_M / METRES_PER_FOOT
    if limit_ft is not None and not lowest <= limit_ft <= highest:
        raise InputError(
            f"the density-altitude limit is {limit_ft:g} ft; allowed are {lowest:.0f} to "
            f"{highest:.0f} ft. Give another, or leave it out for each station's own 90th "
            "percentile."
        )


def _hide_all(
    study: Study, stations: Sequence[StationAir], grid: np.ndarray, progress: Progress
) -> list[Shown]:
    """Every station that another can stand in for, hidden; those without common hours left out."""
    shown = []
    for i in range(len(stations)):
        progress("hiding stations", i, len(stations))
        hidden = hide(i, stations, grid, study.first_year, study.last_year, study.radius_km)
        if hidden is not None:
            shown.append(Shown(hidden, errors(hidden)))
    progress("hiding stations", len(stations), len(stations))
    return [s for s in shown if len(s.known)]


def singled_out(mae_k: Mapping[str, float], wrong: Mapping[str, Misdating]) -> dict[str, str]:
    """Stations that are no measure of the method, and why.

    Parameters
    ----------
    mae_k : mapping of str to float
        Mean absolute error of each hidden station, K.
    wrong : mapping of str to Misdating
    """
    reasons = {}
    for station, mae in mae_k.items():
        told = []
        if station in wrong:
            m = wrong[station]
            told.append(
                f"its dates look wrong: its hours run about {abs(m.lag_h)} h "
                f"{'late' if m.lag_h > 0 else 'early'} against its neighbours' (correlation "
                f"{m.correlation_moved:.2f} instead of {m.correlation_as_dated:.2f} when moved)"
            )
        others = [x for other, x in mae_k.items() if other != station]
        if len(others) >= _OTHERS and mae > SINGLED_OUT_FACTOR * np.median(others):
            told.append(
                f"its mean absolute error of {mae:.2f} K is more than {SINGLED_OUT_FACTOR:g} times "
                f"the median of the others, {np.median(others):.2f} K: look at its place, its "
                "elevation, its dates and its instrument"
            )
        if told:
            reasons[station] = "; ".join(told)
    return reasons


def _score_table(shown: Sequence[Shown], measures: Sequence[dict[str, np.ndarray]]) -> pd.DataFrame:
    parts = []
    for one, found in zip(shown, measures, strict=True):
        table = group_table(found)
        table.insert(0, "station", one.id)
        parts.append(table)
    return pd.concat(parts, ignore_index=True) if parts else pd.DataFrame(columns=SCORE_COLUMNS)


def _total_table(
    shown: Sequence[Shown],
    measures: Sequence[dict[str, np.ndarray]],
    reasons: Mapping[str, str],
) -> pd.DataFrame:
    """Means over the stations, without those singled out and over all."""
    parts = []
    for over, kept in (
        ("kept", [m for s, m in zip(shown, measures, strict=True) if s.id not in reasons]),
        ("all", list(measures)),
    ):
        if kept:
            mean = mean_of(kept)
            n_stations = np.sum([m["n_hours"] > 0 for m in kept], axis=0)
            table = group_table(mean)
            table.insert(0, "over", over)
            table.insert(1, "n_stations", n_stations[table.index])
            parts.append(table)
    return pd.concat(parts, ignore_index=True) if parts else pd.DataFrame(columns=TOTAL_COLUMNS)


def _station_table(
    study: Study,
    stations: Sequence[StationAir],
    shown: Sequence[Shown],
    reasons: Mapping[str, str],
    grid: np.ndarray,
) -> pd.DataFrame:
    hidden = {s.id: s for s in shown}
    rows = []
    for i, air in enumerate(stations):
        s = air.station
        one = hidden.get(s.id)
        place = (s.id, s.name, s.elevation_m)
        if one is None:
            why = _unverified_reason(study, i, stations, grid)
            rows.append((*place, False, False, why, np.nan, np.nan, np.nan))
            continue
        carried_m = float(np.mean(one.error.carried_m[one.known]))
        nearest = (one.hidden.nearest_km, one.hidden.nearest_m, carried_m)
        rows.append((*place, True, s.id in reasons, reasons.get(s.id, ""), *nearest))
    return pd.DataFrame(rows, columns=STATION_COLUMNS)


def _unverified_reason(
    study: Study, index: int, stations: Sequence[StationAir], grid: np.ndarray
) -> str:
    """Why a station could not be hidden, as a clause."""
    air = stations[index]
    clock = local_clock(as_field(air), grid, study.first_year, study.last_year)
    if len(stations) == 1:
        return "it is the study's only station, and hiding it leaves nothing to estimate it from"
    if not np.isfinite(air.temperature_c[clock.in_period]).any():
        return "it has no usable air temperature in the period"
    if not air.elevation_trusted:
        return "its elevation is contradicted by its pressure"
    others = [s for i, s in enumerate(stations) if i != index]
    if all(c.on_spot for c in candidates(as_field(air), others, study.radius_km)):
        return (
            f"no other station within {study.radius_km:g} km and the permitted height can stand "
            "in for it"
        )
    return "it has no hour in common with the stations that could stand in for it"


def _run_error(
    study: Study, stations: Sequence[StationAir], shown: Sequence[Shown]
) -> TransferError:
    """The error distribution that a run gives the fields: of the stations that serve them."""
    ids = serving(study, stations)
    places = [a.station.id for a in stations if a.station.id in ids][:MOST_HIDDEN]
    return learn_error([s.error for s in shown if s.id in places])


def _field_table(
    study: Study,
    stations: Sequence[StationAir],
    error: TransferError,
    reasons: Mapping[str, str],
    progress: Progress,
) -> pd.DataFrame:
    """How sure each field's air is."""
    rows = []
    for done, field in enumerate(study.fields):
        progress("judging fields", done, len(study.fields))
        rows.append(_field_row(study, field, stations, error, reasons))
    progress("judging fields", len(study.fields), len(study.fields))
    return pd.DataFrame(rows, columns=FIELD_COLUMNS)


def _field_row(
    study: Study,
    field: Field,
    stations: Sequence[StationAir],
    error: TransferError,
    reasons: Mapping[str, str],
) -> tuple[object, ...]:
    grid = hour_grid(study.first_year, study.last_year)
    clock = local_clock(field, grid, study.first_year, study.last_year)
    chosen = candidates(field, stations, study.radius_km)
    lapse = lapse_for(field, stations, clock, study.radius_km)
    air = air_at_field(field, chosen, stations, clock, lapse)
    sd_k = error.sd_k(air.carried_m, clock.month, clock.hour, air.carried_km)
    spread = FieldError(
        sd_k,
        errors_of_variables(field, air, sd_k)["density_altitude"],
        lapse.stations,
        error.stations,
    )
    sure = estimate(field, chosen, air, spread, clock).iloc[0]
    findings = field_findings(field, chosen, stations, air, clock, study)
    wanted = ("no-station", "no-hours", "far-station")
    cautions = [f.message[0].upper() + f.message[1:] for f in findings if f.check in wanted]
    doubtful = [
        c.air.station.id
        for c, share in zip(chosen, air.share, strict=True)
        if c.air.station.id in reasons and (share[clock.in_period] > 0).any()
    ]
    if doubtful:
        cautions.append(f"Singled out among its stations: {', '.join(doubtful)} (see below).")
    known = bool((np.isfinite(air.temperature_c) & clock.in_period).any())
    numbers = [sure[name] for name in FIELD_COLUMNS[2:8]]
    return (field.id, field.name, *numbers, " ".join(cautions), known)


def unverifiable(report: VerificationReport) -> str:
    """Why nothing of a study could be verified, in plain words."""
    n = len(report.stations)
    why = (
        "it has one station, and hiding it leaves nothing to estimate it from"
        if n == 1
        else f"none of its {n} stations can be estimated from another"
    )
    return (
        f"This study cannot be verified: {why}. The errors stated for its fields are planning "
        "values, not measured ones. Add stations within the radius to verify it."
    )


def clean(text: object) -> str:
    """Text on one line without control characters or lone surrogates."""
    return "".join(c if c.isprintable() else "\N{REPLACEMENT CHARACTER}" for c in str(text))
