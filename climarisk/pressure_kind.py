"""Whether a pressure column is what it claims to be, and where the barometer stands.

Sea-level pressure less QNH falls as the air warms, the more the higher the station; the
levels of station pressure and QNH differ by the elevation; and a station pressure that was
made from sea-level pressure with the present temperature rises with it within the day.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd

from climarisk.atmosphere import (
    G0,
    LAPSE_K_PER_M,
    P0_HPA,
    R_DRY,
    VAPOUR_K_PER_HPA,
    isa_pressure_hpa,
    pressure_altitude_m,
    qnh_from_station_pressure_hpa,
    vapour_pressure_hpa,
)
from climarisk.findings import Finding
from climarisk.pressure import (
    PLATEAU_M,
    SEA_LEVEL_PLAIN_M,
    US_ALTIMETER_OFFSET_HPA,
    pressure_error_ft,
    reporting_step_hpa,
)
from climarisk.reduction import column_sensitivity_hpa_per_k, sea_level_slope_hpa_per_k
from climarisk.stations import Station, distance_km
from climarisk.units import KELVIN_AT_0C

_WORDS = {
    "station_pressure_hpa": "station pressure",
    "qnh_hpa": "altimeter setting (QNH)",
    "sea_level_pressure_hpa": "sea-level pressure",
}
#: Monthly mean pressure stays this near its standard value; levels further apart than twice
#: this tell station pressure from QNH (engineering choice, no source).
_LEVEL_HPA = 15.0
#: Below this elevation, m, sea-level pressure and QNH move too alike to be told apart.
_SLOPE_FROM_M = 300.0
#: A neighbour is compared within this distance, on at least so many common days.
_NEIGHBOUR_KM, _COMMON_DAYS = 300.0, 60
#: ... and this share of the station's height above or below it: the air between two heights
#: does not follow the surface temperature from day to day (an honest QNH at 684 m changes by
#: -0.11 hPa/K against one at 11 m, where +0.28 would follow if it did).
_SIMILAR_HEIGHT = 0.25
#: A slope accuses if it is this near the other kind's, as a share of how far the kinds differ.
_NEAR_OTHER = 1.0 / 3.0
#: Reports that make a day's mean.
_DAY_HOURS = 8
_STANDARD_ERRORS = 3.0
#: Two columns that agree to this, hPa, in nearly all hours are one quantity.
_SAME_HPA, _SAME_SHARE = 0.05, 0.95
#: Hours with two pressures from which a barometer's elevation is judged.
_BAROMETER_HOURS = 240
#: Uncertainty of a mean column temperature, K, when sea-level pressure gives the elevation
#: (engineering choice, no source).
_COLUMN_K = 1.0
#: Elevations are stated to the metre.
_ELEVATION_M = 1.0
#: A month is judged on whole days, of this many hours, and so many of them.
_WHOLE_DAY_HOURS, _WHOLE_DAYS = 20, 15
#: Smallest pressure change, hPa/K, that matters: 1 hPa (34 ft) over a day's range of 10 K.
_MATTERS_HPA_PER_K = 0.1
#: Share of the change of a derived pressure above which a month is taken for derived.  Real
#: air gives at most 0.1 (the pressure falls in the afternoon), derived months at least 0.4 in
#: 205 station-months of typical-year and tropical stations; this is between.
_DERIVED_SHARE = 0.25
_AFTERNOON = (12, 17)
#: An afternoon that is less wrong than a reporting step of 1 hPa, ft, is not told.
_LEAST_FT = 30.0


def kind_findings(
    station: Station,
    hours: pd.DataFrame,
    neighbours: Sequence[tuple[Station, pd.DataFrame]] = (),
) -> list[Finding]:
    """What a station's pressure columns say of themselves.

    Parameters
    ----------
    station : Station
    hours : DataFrame
        The canonical table after quality control.
    neighbours : sequence of (Station, DataFrame)
        Trusted stations; the nearest that serves is compared.

    Returns
    -------
    list of Finding
        Cautions: ``pressure-kind``, ``barometer-elevation``, ``pressure-from-sea-level``.
    """
    found = [f for column in _WORDS if (f := _level_finding(station, hours, column)) is not None]
    if not found:
        found += [f for f in (_copy_finding(station, hours),) if f is not None]
    if not found:
        found += [
            f
            for column in ("qnh_hpa", "sea_level_pressure_hpa")
            if (f := _slope_finding(station, hours, column, neighbours)) is not None
        ]
    if not found:
        found += [f for f in (_barometer_finding(station, hours),) if f is not None]
    derived = _derived_finding(station, hours)
    return found if derived is None else [*found, derived]


def _caution(station: Station, check: str, message: str) -> Finding:
    return Finding("caution", "station", station.id, check, message)


def _level_finding(station: Station, hours: pd.DataFrame, column: str) -> Finding | None:
    """A column at the level of another kind."""
    values = hours[column].dropna()
    here = float(isa_pressure_hpa(station.elevation_m))
    if len(values) < _BAROMETER_HOURS or abs(P0_HPA - here) < 2 * _LEVEL_HPA:
        return None
    level = float(values.median())
    of_station = column == "station_pressure_hpa"
    other = P0_HPA if of_station else here
    if abs(level - other) > _LEVEL_HPA:
        return None
    really = "QNH or sea-level pressure" if of_station else "the pressure at the station"
    return _caution(
        station,
        "pressure-kind",
        f"its {_WORDS[column]} is about {level:.0f} hPa, which at {station.elevation_m:g} m is "
        f"{really}, or the stated elevation is wrong; correct the archive's mapping or the "
        "elevation.",
    )


def _copy_finding(station: Station, hours: pd.DataFrame) -> Finding | None:
    """Sea-level pressure that repeats the QNH, at a height where they must differ."""
    both = (hours["sea_level_pressure_hpa"] - hours["qnh_hpa"]).dropna()
    if station.elevation_m < _SLOPE_FROM_M or len(both) < _BAROMETER_HOURS:
        return None
    if (both.abs() <= _SAME_HPA).mean() < _SAME_SHARE:
        return None
    return _caution(
        station,
        "pressure-kind",
        f"its sea-level pressure and its QNH are the same at {station.elevation_m:g} m, where "
        "they differ with the temperature; one of the two is not what it claims to be.",
    )


@dataclass(frozen=True)
class _Reference:
    """A pressure that is trusted: as QNH or sea-level pressure, and its change per kelvin."""

    series: pd.Series
    per_k: float  # relative to sea-level pressure, hPa/K
    name: str


def _references(
    station: Station,
    hours: pd.DataFrame,
    column: str,
    neighbours: Sequence[tuple[Station, pd.DataFrame]],
) -> list[_Reference]:
    """What a column can be compared with: the record's own other pressures, then neighbours."""
    near = sorted(
        (distance_km(station.latitude, station.longitude, s.latitude, s.longitude), s.id, s, h)
        for s, h in neighbours
        if s.id != station.id
    )
    stations = [(station, hours, "its own ")]
    reach_m = _SIMILAR_HEIGHT * station.elevation_m
    stations += [
        (s, h, f"station {s.id}'s ")
        for d, _, s, h in near
        if d <= _NEIGHBOUR_KM and abs(s.elevation_m - station.elevation_m) <= reach_m
    ]
    found = []
    for s, table, whose in stations:
        qnh_per_k = -float(sea_level_slope_hpa_per_k(s.elevation_m))
        measured = table["station_pressure_hpa"].dropna()
        as_qnh = pd.Series(
            qnh_from_station_pressure_hpa(measured.to_numpy(), s.elevation_m), measured.index
        )
        found.append(_Reference(as_qnh, qnh_per_k, f"{whose}station pressure"))
        for name, per_k in (("qnh_hpa", qnh_per_k), ("sea_level_pressure_hpa", 0.0)):
            if s is not station or name != column:
                found.append(_Reference(table[name].dropna(), per_k, f"{whose}{_WORDS[name]}"))
    return found


def _slope_finding(
    station: Station,
    hours: pd.DataFrame,
    column: str,
    neighbours: Sequence[tuple[Station, pd.DataFrame]],
) -> Finding | None:
    """A QNH that moves with the temperature as sea-level pressure does, or the reverse."""
    own = -float(sea_level_slope_hpa_per_k(station.elevation_m))
    if station.elevation_m < _SLOPE_FROM_M or not hours[column].notna().any():
        return None
    claims_qnh = column == "qnh_hpa"
    for reference in _references(station, hours, column, neighbours):
        fit = _daily_slope(hours[column] - reference.series, hours["temperature_c"])
        if fit is None:
            continue
        slope, error = fit
        claimed = (own if claims_qnh else 0.0) - reference.per_k
        other = (0.0 if claims_qnh else own) - reference.per_k
        like_other = abs(slope - other) < _NEAR_OTHER * own
        if not like_other or abs(slope - claimed) < _STANDARD_ERRORS * error:
            return None
        return _caution(
            station, "pressure-kind", _slope_message(station, column, reference, slope, claimed)
        )
    return None


def _slope_message(
    station: Station, column: str, reference: _Reference, slope: float, claimed: float
) -> str:
    really = "is sea-level pressure"
    if column == "sea_level_pressure_hpa":
        really = "is QNH"
        if station.elevation_m > PLATEAU_M:
            really += ", or reduced with the annual mean temperature"
    return (
        f"its {_WORDS[column]} less {reference.name} changes by {slope:+.2f} hPa per kelvin, "
        f"where {claimed:+.2f} is expected at {station.elevation_m:g} m: it behaves as if it "
        f"{really}; correct the archive's mapping, or do not rely on it."
    )


def _daily_slope(difference: pd.Series, temperature: pd.Series) -> tuple[float, float] | None:
    """Slope on temperature of daily means less their month's, and its standard error.

    The error allows for the persistence from day to day (lag-1 correlation of the residual).
    """
    table = pd.DataFrame({"y": difference, "x": temperature}).dropna()
    if table.empty:
        return None
    days = table.groupby(table.index.floor("D")).agg(["mean", "count"])
    days = days[days["x"]["count"] >= _DAY_HOURS].xs("mean", axis=1, level=1)
    if len(days) < _COMMON_DAYS:
        return None
    month = days.index.year * 12 + days.index.month
    days = days - days.groupby(month).transform("mean")
    x, y = days["x"].to_numpy(), days["y"].to_numpy()
    power = float(x @ x)
    if power <= 0.0:
        return None
    slope = float(x @ y) / power
    rest = y - slope * x
    r1 = float(np.clip(rest[1:] @ rest[:-1] / max(float(rest @ rest), 1e-12), 0.0, 0.95))
    variance = float(rest @ rest) / (len(rest) - 2) / power
    return slope, float(np.sqrt(variance * (1 + r1) / (1 - r1)))


def barometer_elevation_m(station: Station, hours: pd.DataFrame) -> tuple[float, float] | None:
    """Lowest and highest elevation that two pressures of one record fit; None without them.

    From QNH: the standard inverse with the QNH as reported up to the US formula, whose 0.3 hPa
    lowers the pressure, with half a step added to the QNH, which is rounded down.  From
    sea-level pressure, below 500 m only: the formula without and with humidity, and 1 K.
    """
    p, t = hours["station_pressure_hpa"].to_numpy(), hours["temperature_c"].to_numpy()
    qnh, sea_level = hours["qnh_hpa"].to_numpy(), hours["sea_level_pressure_hpa"].to_numpy()
    both = np.isfinite(p) & np.isfinite(qnh)
    if both.sum() >= _BAROMETER_HOURS:
        half = reporting_step_hpa(qnh) / 2
        low = pressure_altitude_m(p[both]) - pressure_altitude_m(qnh[both])
        high = pressure_altitude_m(p[both] - US_ALTIMETER_OFFSET_HPA) - pressure_altitude_m(
            qnh[both] + half
        )
        return float(np.median(low)), float(np.median(high))
    vapour = vapour_pressure_hpa(hours["dew_point_c"].to_numpy())
    both = np.isfinite(p) & np.isfinite(sea_level) & np.isfinite(t) & np.isfinite(vapour)
    if both.sum() < _BAROMETER_HOURS or station.elevation_m > SEA_LEVEL_PLAIN_M:
        return None
    # H = x R/g0 (T + L H/2 + Ch e), solved for H, with x = ln(MSLP/p).
    scale = np.log(sea_level[both] / p[both]) * R_DRY / G0
    ends = []
    for k in (-_COLUMN_K, VAPOUR_K_PER_HPA * vapour[both] + _COLUMN_K):
        column_k = t[both] + KELVIN_AT_0C + k
        ends.append(float(np.median(scale * column_k / (1 - scale * LAPSE_K_PER_M / 2))))
    return min(ends), max(ends)


def _barometer_finding(station: Station, hours: pd.DataFrame) -> Finding | None:
    """A stated elevation that the record's two pressures contradict."""
    fits = barometer_elevation_m(station, hours)
    if fits is None:
        return None
    if fits[0] - _ELEVATION_M <= station.elevation_m <= fits[1] + _ELEVATION_M:
        return None
    middle = sum(fits) / 2
    return _caution(
        station,
        "barometer-elevation",
        f"its pressures agree with each other at {fits[0]:.1f} to {fits[1]:.1f} m, not at the "
        f"{station.elevation_m:g} m stated; an elevation of {middle:.0f} m would fit.",
    )


@dataclass(frozen=True)
class DerivedMonth:
    """A month whose station pressure was made from sea-level pressure and present temperature.

    Parameters
    ----------
    year, month : int
        Of local mean time; ``month`` 1-12.
    slope_hpa_per_k, expected_hpa_per_k : float
        Change in the month's mean daily cycle, as found, and of a pressure derived all day.
    afternoon_hpa, afternoon_ft : float
        How much too high the derived pressure is from 12 to 17 local mean time, and how much
        too low the density altitude therefore.
    """

    year: int
    month: int
    slope_hpa_per_k: float
    expected_hpa_per_k: float
    afternoon_hpa: float
    afternoon_ft: float


def derived_months(station: Station, hours: pd.DataFrame) -> list[DerivedMonth]:
    """Months whose station pressure rises with the temperature of the hour.

    The pressure of real air falls as the day warms, by 0.0 to 0.3 hPa/K; one that was made
    from a sea-level pressure reduced with T12, using the present temperature, is too high by
    ``p g0 H / (R T^2) (T - T12)``.  Judged on the month's mean daily cycle of whole days, in
    which fronts cancel; not judged where a range of 10 K moves the pressure less than 1 hPa.
    """
    table = hours[["temperature_c", "station_pressure_hpa"]].dropna()
    if table.empty:
        return []
    t, p = table["temperature_c"], table["station_pressure_hpa"]
    expected = column_sensitivity_hpa_per_k(float(p.mean()), station.elevation_m, float(t.mean()))
    if expected < _MATTERS_HPA_PER_K:
        return []
    earlier = t.reindex(t.index - pd.Timedelta(hours=12)).to_numpy()
    local = table.index + pd.Timedelta(hours=station.longitude / 15.0)
    whole = _in_whole_days(local.as_unit("s").asi8 // 86400)
    month = (local.year.to_numpy() * 12 + local.month.to_numpy() - 1)[whole]
    columns = pd.DataFrame(
        {
            "day": local.day.to_numpy()[whole],
            "hour": local.hour.to_numpy()[whole],
            "t": t.to_numpy()[whole],
            "p": p.to_numpy()[whole],
            "off": (t.to_numpy() - earlier)[whole] / 2,
        }
    )
    edges = np.flatnonzero(np.diff(month)) + 1
    bounds = np.concatenate(([0], edges, [len(month)]))
    found = [
        _derived_month(int(month[a]), columns.iloc[a:b], station.elevation_m)
        for a, b in zip(bounds, bounds[1:], strict=False)
        if b > a
    ]
    return [m for m in found if m is not None]


def _in_whole_days(day: np.ndarray) -> np.ndarray:
    """Which hours belong to days with enough of them, given each hour's day number."""
    _, place, count = np.unique(day, return_inverse=True, return_counts=True)
    return count[place] >= _WHOLE_DAY_HOURS


def derived_hours(station: Station, hours: pd.DataFrame) -> np.ndarray:
    """Which hours of a table lie in a month of `derived_months`; bool, shape (n_hours,)."""
    local = hours.index + pd.Timedelta(hours=station.longitude / 15.0)
    months = [m.year * 12 + m.month for m in derived_months(station, hours)]
    return np.isin(local.year * 12 + local.month, months)


def _derived_month(key: int, table: pd.DataFrame, elevation_m: float) -> DerivedMonth | None:
    day, hour, t, p, off = (table[c].to_numpy() for c in ("day", "hour", "t", "p", "off"))
    if len(np.unique(day)) < _WHOLE_DAYS:
        return None
    count = np.bincount(hour, minlength=24)
    has = count > 0
    t_cycle, p_cycle = (np.bincount(hour, x, 24)[has] / count[has] for x in (t, p))
    t_cycle, p_cycle = t_cycle - t_cycle.mean(), p_cycle - p_cycle.mean()
    power = float((t_cycle**2).sum())
    if power <= 0.0:
        return None
    slope = float((t_cycle * p_cycle).sum()) / power
    pressure = float(p.mean())
    expected = float(column_sensitivity_hpa_per_k(pressure, elevation_m, float(t.mean())))
    if slope < _DERIVED_SHARE * expected:
        return None
    afternoon = (hour >= _AFTERNOON[0]) & (hour <= _AFTERNOON[1])
    too_high = expected * float(np.nanmean(off[afternoon]))
    feet = float(pressure_error_ft(abs(too_high), pressure, float(t[afternoon].mean())))
    if feet < _LEAST_FT:
        return None
    signed = float(np.copysign(feet, too_high))
    return DerivedMonth(key // 12, key % 12 + 1, slope, expected, too_high, signed)


def _derived_finding(station: Station, hours: pd.DataFrame) -> Finding | None:
    months = derived_months(station, hours)
    if not months:
        return None
    names = ", ".join(f"{m.year}-{m.month:02d}" for m in months)
    feet = [m.afternoon_ft for m in months]
    return _caution(
        station,
        "pressure-from-sea-level",
        f"the station pressure of {len(months)} month{'s' * (len(months) > 1)} ({names}) rises "
        "with the temperature within the day, so it was made from sea-level pressure and the "
        "temperature of the hour; it makes the density altitude of the afternoon about "
        f"{_range(feet)} ft too low on average.",
    )


def _range(feet: list[float]) -> str:
    low, high = f"{min(feet):.0f}", f"{max(feet):.0f}"
    return low if low == high else f"{low} to {high}"
