"""Quality control of a station's hours: what is not used, and why.

Each check returns the table with the rejected values set to NaN and says what it did as
findings.  Thresholds are gross: a check must not reject weather.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd

from climarisk.atmosphere import (
    G0,
    LAPSE_K_PER_M,
    P0_HPA,
    R_DRY,
    dew_point_from_rh_c,
    vapour_pressure_hpa,
    virtual_temperature_k,
)
from climarisk.findings import Finding
from climarisk.stations import Station, distance_km

#: Values outside are impossible.  Temperature, sea-level pressure: beyond the extremes in
#: WMO's World Weather and Climate Extremes Archive (-89.2 and 56.7 degC, 870 and 1085 hPa,
#: from memory) by a little; dew point: record 35 degC (from memory); station pressure: from
#: 6000 m to the Dead Sea shore by the standard atmosphere.
RANGES: dict[str, tuple[float, float]] = {
    "temperature_c": (-90.0, 60.0),
    "dew_point_c": (-95.0, 38.0),
    "relative_humidity_pct": (0.5, 105.0),
    "station_pressure_hpa": (450.0, 1100.0),
    "qnh_hpa": (860.0, 1090.0),
    "sea_level_pressure_hpa": (860.0, 1090.0),
    "wind_direction_deg": (0.0, 360.0),
    "wind_speed_kt": (0.0, 200.0),
}
_UNITS = {
    "temperature_c": "degC",
    "dew_point_c": "degC",
    "relative_humidity_pct": "%",
    "station_pressure_hpa": "hPa",
    "qnh_hpa": "hPa",
    "sea_level_pressure_hpa": "hPa",
    "wind_direction_deg": "deg",
    "wind_speed_kt": "kt",
}
_WORDS = {
    "temperature_c": "air temperature",
    "dew_point_c": "dew point",
    "relative_humidity_pct": "relative humidity",
    "station_pressure_hpa": "station pressure",
    "qnh_hpa": "altimeter setting (QNH)",
    "sea_level_pressure_hpa": "sea-level pressure",
    "wind_direction_deg": "wind direction",
    "wind_speed_kt": "wind speed",
}
#: A value that leaves both neighbouring hours by more than this in the same direction, while
#: they agree with each other to half of it, is a spike (engineering choice, no source).
SPIKES: dict[str, float] = {
    "temperature_c": 15.0,
    "dew_point_c": 20.0,
    "station_pressure_hpa": 15.0,
    "qnh_hpa": 15.0,
    "sea_level_pressure_hpa": 15.0,
}
#: The same value for more hours than this is a stuck sensor (engineering choice, no source).
STUCK_HOURS: dict[str, int] = {
    "temperature_c": 48,
    "dew_point_c": 72,
    "relative_humidity_pct": 48,
    "station_pressure_hpa": 72,
    "qnh_hpa": 72,
    "sea_level_pressure_hpa": 72,
}
#: Relative humidity stays at saturation for days in fog, so it is stuck only below this.
_SATURATED_PCT = 95.0
#: At saturation a sensor is stuck only after so many hours: fog of ten days is unheard of.
_SATURATED_HOURS = 240
#: A humidity sensor stuck for more than this share of its hours is not used at all.
_STUCK_SHARE = 0.2
#: Hours of a month that must share one pressure before it is taken for a default value.
_DEFAULT_MONTH_HOURS = 120
#: Dew point above air temperature by more than this is an error; by less, rounding.
_SUPERSATURATION_K = 0.5
#: Deviation of the pressure-implied elevation, m: caution above the first, reject above
#: the second.
ELEVATION_CAUTION_M, ELEVATION_REJECT_M = 50.0, 100.0
#: Mean sea-level pressure under the circumpolar troughs and cold highs strays further from
#: 1013.25 hPa than anywhere else, by up to some 30 hPa (from memory): a station without a
#: neighbour is given this allowance, m, growing from the first latitude to the second.
_LONE_ALLOWANCE_M, _LONE_LATITUDES = 250.0, (50.0, 60.0)
#: Stations this near share a mean sea-level pressure within a few hPa.
_NEIGHBOUR_KM = 500.0


def control(station: Station, hours: pd.DataFrame) -> tuple[pd.DataFrame, list[Finding]]:
    """A station's hours with the rejected values removed, and the findings.

    Parameters
    ----------
    station : Station
    hours : DataFrame
        The canonical table of `climarisk.observations`.

    Returns
    -------
    hours : DataFrame
        The same columns; dew point filled from relative humidity where it was missing.
    findings : list of Finding
    """
    hours = hours.copy()
    findings: list[Finding] = []
    _reject_ranges(station, hours, findings)
    _reject_implied_qnh(station, hours, findings)
    _reject_default_pressure(station, hours, findings)
    _reject_spikes(station, hours, findings)
    _reject_stuck(station, hours, findings)
    _reject_supersaturation(station, hours, findings)
    filled = hours["dew_point_c"].isna()
    from_rh = dew_point_from_rh_c(
        hours["temperature_c"].to_numpy(),
        np.minimum(hours["relative_humidity_pct"].to_numpy(), 100.0),
    )
    hours["dew_point_c"] = np.where(filled, from_rh, hours["dew_point_c"])
    return hours, findings


def _reject(
    station: Station,
    hours: pd.DataFrame,
    column: str,
    wrong: np.ndarray,
    check: str,
    reason: str,
    findings: list[Finding],
) -> None:
    """Set the wrong values to NaN and tell how many, with the first."""
    count = int(wrong.sum())
    if not count:
        return
    known = int(hours[column].notna().sum())
    first = int(np.flatnonzero(wrong)[0])
    value, when = hours[column].iloc[first], hours.index[first]
    hours.loc[wrong, column] = np.nan
    findings.append(
        Finding(
            "reject",
            "station",
            station.id,
            check,
            f"{count} of {known} hours of {_WORDS[column]} are not used: {reason}; the first is "
            f"{value:g} {_UNITS[column]} at {when:%Y-%m-%d %H:%M} UTC.",
        )
    )


def _reject_ranges(station: Station, hours: pd.DataFrame, findings: list[Finding]) -> None:
    for column, (low, high) in RANGES.items():
        values = hours[column].to_numpy()
        wrong = (values < low) | (values > high)
        reason = f"outside {low:g} to {high:g} {_UNITS[column]}"
        _reject(station, hours, column, wrong, "range", reason, findings)


def _reject_implied_qnh(station: Station, hours: pd.DataFrame, findings: list[Finding]) -> None:
    """Single station pressures far from the station's own median: wrong values, not weather."""
    values = hours["station_pressure_hpa"].to_numpy()
    if not np.isfinite(values).any():
        return
    ratio = values / np.nanmedian(values)
    low, high = RANGES["qnh_hpa"][0] / P0_HPA, RANGES["qnh_hpa"][1] / P0_HPA
    wrong = (ratio < low) | (ratio > high)
    reason = "too far from the station's median for any weather"
    _reject(station, hours, "station_pressure_hpa", wrong, "range", reason, findings)


def _reject_default_pressure(
    station: Station, hours: pd.DataFrame, findings: list[Finding]
) -> None:
    """A month with one single pressure holds a default value, not a measurement."""
    month = hours.index.year.to_numpy() * 12 + hours.index.month.to_numpy()
    for column in ("station_pressure_hpa", "qnh_hpa", "sea_level_pressure_hpa"):
        values = hours[column]
        by_month = values.groupby(month)
        counts = by_month.count()
        spread = by_month.max() - by_month.min()
        default = counts.index[(counts >= _DEFAULT_MONTH_HOURS) & (spread == 0)]
        if not len(default):
            continue
        wrong = _with_runs(values.to_numpy(), np.isin(month, default))
        whole = len(default) == int((counts >= _DEFAULT_MONTH_HOURS).sum())
        if whole:
            wrong = values.notna().to_numpy()
        reason = (
            "the pressure is constant all through the record, a default value and no measurement"
            if whole and values[wrong].nunique() == 1
            else f"the pressure is constant all through {len(default)} months, a default value "
            "and no measurement"
        )
        _reject(station, hours, column, wrong, "constant-pressure", reason, findings)


def _with_runs(values: np.ndarray, marked: np.ndarray) -> np.ndarray:
    """The marked values, and those equal to them that follow or precede without a break.

    A default month of local time reaches a few hours into the neighbouring month of UTC.
    """
    known = np.flatnonzero(np.isfinite(values))
    wrong = np.zeros(len(values), bool)
    if not len(known):
        return wrong
    run = np.cumsum(np.concatenate(([True], np.diff(values[known]) != 0)))
    hit = np.bincount(run, marked[known], minlength=run[-1] + 1) > 0
    wrong[known] = hit[run]
    return wrong


def _reject_spikes(station: Station, hours: pd.DataFrame, findings: list[Finding]) -> None:
    instants = hours.index.as_unit("s").asi8
    if len(instants) < 3:
        return
    neighbours = (np.diff(instants)[:-1] <= 3600) & (np.diff(instants)[1:] <= 3600)
    for column, limit in SPIKES.items():
        values = hours[column].to_numpy()
        rise, fall = values[1:-1] - values[:-2], values[1:-1] - values[2:]
        agree = np.abs(values[2:] - values[:-2]) < limit / 2
        spike = neighbours & agree & (rise * fall > 0)
        spike &= (np.abs(rise) > limit) & (np.abs(fall) > limit)
        wrong = np.zeros(len(values), bool)
        wrong[1:-1] = spike
        reason = f"single hours more than {limit:g} {_UNITS[column]} off both neighbours"
        _reject(station, hours, column, wrong, "step", reason, findings)


def _runs(values: np.ndarray, instants: np.ndarray) -> np.ndarray:
    """For each value the hours from the first to the last of its run of equal values.

    Missing hours do not break a run; a gap of more than a day does.
    """
    length = np.zeros(len(values))
    known = np.flatnonzero(np.isfinite(values))
    if not len(known):
        return length
    v, t = values[known], instants[known]
    new = np.r_[True, (v[1:] != v[:-1]) | (np.diff(t) > 86400)]
    start = np.flatnonzero(new)
    end = np.r_[start[1:], len(v)] - 1
    hours_long = (t[end] - t[start]) / 3600 + 1
    # A run needs reports in at least half of its hours.
    dense = (end - start + 1) >= hours_long / 2
    length[known] = np.repeat(np.where(dense, hours_long, 0), end - start + 1)
    return length


def _reject_stuck(station: Station, hours: pd.DataFrame, findings: list[Finding]) -> None:
    instants = hours.index.as_unit("s").asi8
    for column, limit in STUCK_HOURS.items():
        values = hours[column].to_numpy()
        runs = _runs(values, instants)
        wrong = runs > limit
        reason = f"the same value for more than {limit} hours on end"
        if column == "relative_humidity_pct":
            wrong &= (values < _SATURATED_PCT) | (runs > _SATURATED_HOURS)
            if wrong.sum() > _STUCK_SHARE * np.isfinite(values).sum():
                stuck = float(pd.Series(values[wrong]).mode().iloc[0])
                wrong = np.isfinite(values)
                reason = f"the sensor is stuck at {stuck:g} % for much of the record"
        _reject(station, hours, column, wrong, "stuck", reason, findings)


def _reject_supersaturation(station: Station, hours: pd.DataFrame, findings: list[Finding]) -> None:
    excess = (hours["dew_point_c"] - hours["temperature_c"]).to_numpy()
    wrong = excess > _SUPERSATURATION_K
    reason = f"above the air temperature by more than {_SUPERSATURATION_K:g} K"
    _reject(station, hours, "dew_point_c", wrong, "dew-point-above-temperature", reason, findings)
    hours["dew_point_c"] = np.minimum(hours["dew_point_c"], hours["temperature_c"]).where(
        hours["dew_point_c"].notna() & hours["temperature_c"].notna(), hours["dew_point_c"]
    )


@dataclass(frozen=True)
class ElevationCheck:
    """What a station's barometer says of its elevation.

    Parameters
    ----------
    implied_m : float
        Elevation at which the mean station pressure fits, m.
    neighbours : int
        Stations whose mean sea-level pressure was the reference; 0: the standard 1013.25 hPa.
    """

    implied_m: float
    neighbours: int


def check_elevations(
    stations: Sequence[Station], tables: Sequence[pd.DataFrame]
) -> tuple[dict[str, ElevationCheck], list[Finding]]:
    """Pressure-implied elevation of each station with a measured station pressure.

    The mean pressure is carried by hypsometry, with the station's own mean virtual
    temperature and 6.5 K/km below it, to the level where it meets the mean sea-level
    pressure of the neighbours (those within 500 km, their median), or 1013.25 hPa where
    there are none.  The station that is furthest off is judged first and then no longer
    serves as a neighbour, so that one wrong station does not accuse the others.

    Parameters
    ----------
    stations : sequence of Station
    tables : sequence of DataFrame
        Their hours after `control`.

    Returns
    -------
    checks : dict of str to ElevationCheck
        By station id.
    findings : list of Finding
        ``reject`` above 100 m, ``caution`` above 50 m.
    """
    means = {
        s.id: mean
        for s, t in zip(stations, tables, strict=True)
        if (mean := _mean_air(t)) is not None
    }
    by_id = {s.id: s for s in stations if s.id in means}
    trusted = set(by_id)
    checks: dict[str, ElevationCheck] = {}
    while trusted:
        checks |= {i: _implied(by_id[i], means, by_id, trusted - {i}) for i in trusted}
        off = {i: abs(checks[i].implied_m - by_id[i].elevation_m) for i in trusted}
        suspects = [
            i for i in sorted(off) if off[i] > ELEVATION_REJECT_M + _allowance(by_id[i], checks[i])
        ]
        if not suspects:
            break
        # Of two that contradict each other the one further from the standard is at fault.
        worst = max(suspects, key=lambda i: off[i] + _standard_off_m(by_id[i], means))
        trusted.remove(worst)
    findings = [
        finding for i in by_id if (finding := _elevation_finding(by_id[i], checks[i])) is not None
    ]
    return checks, findings


@dataclass(frozen=True)
class _MeanAir:
    """Mean pressure (hPa) and virtual temperature (K) of the record, and of each calendar month."""

    pressure_hpa: float
    virtual_k: float
    monthly_pressure_hpa: np.ndarray
    monthly_virtual_k: np.ndarray


def _mean_air(hours: pd.DataFrame) -> _MeanAir | None:
    """Means of the hours with temperature and pressure; None with too few."""
    pressure = hours["station_pressure_hpa"].to_numpy()
    both = np.isfinite(pressure) & np.isfinite(hours["temperature_c"].to_numpy())
    if both.sum() < _DEFAULT_MONTH_HOURS:
        return None
    p = pressure[both]
    e = np.nan_to_num(vapour_pressure_hpa(hours["dew_point_c"].to_numpy()[both]))
    virtual = virtual_temperature_k(hours["temperature_c"].to_numpy()[both], e, p)
    month = hours.index.month.to_numpy()[both] - 1
    count = np.bincount(month, minlength=12)
    enough = np.where(count >= _DEFAULT_MONTH_HOURS, count, np.nan)
    by_month = [np.bincount(month, x, 12) / enough for x in (p, virtual)]
    return _MeanAir(float(p.mean()), float(virtual.mean()), *by_month)


def _to_sea_level(pressure: Any, virtual_k: Any, elevation_m: float) -> Any:
    """Pressure at sea level by hypsometry, with 6.5 K/km below the station, hPa."""
    column_k = virtual_k + 0.5 * LAPSE_K_PER_M * elevation_m
    return pressure * np.exp(G0 * elevation_m / (R_DRY * column_k))


def _sea_level(station: Station, means: dict[str, _MeanAir]) -> float:
    """Mean sea-level pressure from the stated elevation, hPa."""
    mean = means[station.id]
    return float(_to_sea_level(mean.pressure_hpa, mean.virtual_k, station.elevation_m))


def _neighbours_sea_level(station: Station, other: Station, means: dict[str, _MeanAir]) -> float:
    """A neighbour's sea-level pressure over the months that both stations have, hPa."""
    own, its = (
        _to_sea_level(m.monthly_pressure_hpa, m.monthly_virtual_k, s.elevation_m)
        for s in (station, other)
        for m in [means[s.id]]
    )
    both = np.isfinite(own) & np.isfinite(its)
    if not both.any():
        return _sea_level(other, means)
    return _sea_level(station, means) + float((its - own)[both].mean())


def _standard_off_m(station: Station, means: dict[str, _MeanAir]) -> float:
    """How far a station's sea-level pressure is from 1013.25 hPa, in metres of height."""
    scale_height_m = R_DRY * means[station.id].virtual_k / G0
    return abs(float(np.log(_sea_level(station, means) / P0_HPA))) * scale_height_m


def _implied(
    station: Station,
    means: dict[str, _MeanAir],
    by_id: dict[str, Station],
    others: set[str],
) -> ElevationCheck:
    near = [
        _neighbours_sea_level(station, by_id[i], means)
        for i in sorted(others)
        if distance_km(station.latitude, station.longitude, by_id[i].latitude, by_id[i].longitude)
        <= _NEIGHBOUR_KM
    ]
    reference = float(np.median(near)) if near else P0_HPA
    mean = means[station.id]
    ratio = R_DRY / G0 * np.log(reference / mean.pressure_hpa)
    # z = ratio * (Tv + L z / 2), solved for z.
    implied = ratio * mean.virtual_k / (1.0 - 0.5 * LAPSE_K_PER_M * ratio)
    return ElevationCheck(float(implied), len(near))


def _allowance(station: Station, check: ElevationCheck) -> float:
    """Metres by which a station without a neighbour may be further off, by latitude."""
    if check.neighbours:
        return 0.0
    return float(np.interp(abs(station.latitude), _LONE_LATITUDES, (0.0, _LONE_ALLOWANCE_M)))


def _elevation_finding(station: Station, check: ElevationCheck) -> Finding | None:
    off = check.implied_m - station.elevation_m
    allowance = _allowance(station, check)
    if abs(off) <= ELEVATION_CAUTION_M + allowance:
        return None
    against = (
        f"the mean sea-level pressure of {check.neighbours} neighbouring "
        f"station{'s' * (check.neighbours > 1)}"
        if check.neighbours
        else f"a sea-level pressure of {P0_HPA} hPa (no neighbour to compare with)"
    )
    fact = (
        f"its pressure fits an elevation of {check.implied_m:.0f} m against {against}, "
        f"{abs(off):.0f} m {'above' if off > 0 else 'below'} the {station.elevation_m:g} m stated"
    )
    if abs(off) <= ELEVATION_REJECT_M + allowance:
        return Finding("caution", "station", station.id, "elevation", f"{fact}; check it.")
    if station.elevation_verified:
        return Finding(
            "caution",
            "station",
            station.id,
            "elevation",
            f"{fact}; used all the same, since stations.csv says elevation_verified.",
        )
    return Finding(
        "reject",
        "station",
        station.id,
        "elevation",
        f"{fact}; its pressure and elevation are not used and nothing is carried from it to "
        "another elevation. Correct the elevation in stations.csv, or set elevation_verified "
        "to yes there.",
    )
