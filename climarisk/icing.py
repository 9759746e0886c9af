"""Carburettor-icing exposure: how often the surface air lies in each icing band.

Two methods: ``"chart"``, zones of temperature and dew point from a data file that says
whether its vertices were verified, and ``"physical"``, a screening by the vapour that would
freeze out in a chilled throat (an engineering assumption, not a published chart).
"""

from __future__ import annotations

import json
from dataclasses import dataclass
from functools import lru_cache
from importlib.resources import files

import numpy as np
import pandas as pd
import shapely

from climarisk.atmosphere import mixing_ratio, vapour_pressure_hpa
from climarisk.climatology import completeness, window_cells
from climarisk.clock import LocalClock

#: Band of a point in none of the zones, and of a point that is not known.
NONE, UNKNOWN = -1, -2

#: What people read for each band of either method.
LABELS = {
    "serious_any_power": "serious even in cruise",
    "moderate_cruise_serious_descent": "moderate in cruise, serious in descent",
    "serious_descent": "serious in descent",
    "light_cruise_or_descent": "light in cruise or descent",
    "serious_cruise": "serious even in cruise",
    "possible_cruise_serious_descent": "possible in cruise, serious in descent",
    "serious_descent_only": "serious in descent only",
    "possible_cruise": "possible in cruise and descent",
    "possible_descent_only": "possible in descent only",
}
#: Bands in which ice is serious at some power; every flight ends with a descent at low power.
_SERIOUS = (
    "serious_any_power",
    "moderate_cruise_serious_descent",
    "serious_descent",
    "serious_cruise",
    "possible_cruise_serious_descent",
    "serious_descent_only",
)
_SERIOUS_IN_CRUISE = ("serious_any_power", "serious_cruise")

#: Bands of the physical screening, exclusive, the most serious first.
_PHYSICAL = (
    "serious_cruise",
    "possible_cruise_serious_descent",
    "serious_descent_only",
    "possible_cruise",
    "possible_descent_only",
)
#: Drop of temperature in the throat, K, and the vapour beyond saturation over ice there, kg/kg,
#: from which ice is possible and serious (engineering assumptions; leaflets and advisories put
#: the drop at 20-30 K and up to 70 degF).
_CRUISE_DROP_K, _DESCENT_DROP_K = 27.0, 38.0
_POSSIBLE, _SERIOUS_EXCESS = 1.5e-3, 4.0e-3
#: Saturation vapour pressure over ice as a * exp(b * t / (c + t)), hPa, K: WMO-No. 8, annex 4.B.
_ICE = 6.112, 22.46, 272.62


@dataclass(frozen=True)
class _Chart:
    """The zones of the data file, in the order in which they are tried."""

    verified: bool
    source: str
    zones: dict[str, shapely.Polygon]


@lru_cache(maxsize=1)
def _chart() -> _Chart:
    text = (files("climarisk") / "icing_zones.json").read_text(encoding="utf-8")
    data = json.loads(text)
    zones = {name: shapely.Polygon(data["zones"][name]) for name in data["order"]}
    for polygon in zones.values():
        shapely.prepare(polygon)
    return _Chart(data["verified"], data["source"], zones)


def bands(method: str) -> tuple[str, ...]:
    """Names of the exposure bands of a method, the most serious first; see `LABELS`.

    Parameters
    ----------
    method : {"chart", "physical"}

    Raises
    ------
    ValueError
        An unknown method.
    """
    if method == "chart":
        return tuple(_chart().zones)
    if method == "physical":
        return _PHYSICAL
    raise ValueError(f"method: {method!r} is unknown; allowed are chart, physical")


def serious(method: str) -> tuple[str, ...]:
    """Names of the bands in which ice is serious at some power, a descent included.

    Parameters
    ----------
    method : {"chart", "physical"}
    """
    return tuple(band for band in bands(method) if band in _SERIOUS)


def serious_in_cruise(method: str) -> tuple[str, ...]:
    """Names of the bands in which ice is serious even in cruise.

    Most damp hours are serious in a descent at low power, so that these tell places apart.

    Parameters
    ----------
    method : {"chart", "physical"}
    """
    return tuple(band for band in bands(method) if band in _SERIOUS_IN_CRUISE)


def verified(method: str) -> str:
    """Whether the bands were checked against a published chart, as the tables say it.

    Parameters
    ----------
    method : {"chart", "physical"}
    """
    if method == "physical":
        return "not a published chart"
    return "yes" if _chart().verified else "no"


def chart_source() -> str:
    """Where the zones of the chart come from, a statement of the data file."""
    return _chart().source


def zones(temperature_c: np.ndarray, dew_point_c: np.ndarray) -> np.ndarray:
    """Band of each point by the chart, an index into ``bands("chart")``.

    Parameters
    ----------
    temperature_c, dew_point_c : array_like
        Of the surface air, degC; a dew point above the temperature is taken as the temperature.

    Returns
    -------
    ndarray of int
        `NONE` outside all zones, `UNKNOWN` where either is NaN.

    Notes
    -----
    The first zone in the order of the file that holds the point; a boundary belongs to it.
    """
    temperature, dew_point = np.broadcast_arrays(
        np.asarray(temperature_c, float), np.asarray(dew_point_c, float)
    )
    x = temperature.ravel()
    y = np.minimum(dew_point.ravel(), x)
    known = np.isfinite(x) & np.isfinite(y)
    band = np.where(known, NONE, UNKNOWN)
    left = np.flatnonzero(known)
    for index, polygon in enumerate(_chart().zones.values()):
        band[left[shapely.intersects_xy(polygon, x[left], y[left])]] = index
        left = left[band[left] == NONE]
    return band.reshape(temperature.shape)


def throat_excess(
    temperature_c: np.ndarray, dew_point_c: np.ndarray, pressure_hpa: np.ndarray, drop_k: float
) -> np.ndarray:
    """Vapour beyond saturation over ice in a throat colder than the air, kg per kg of dry air.

    Parameters
    ----------
    temperature_c, dew_point_c : array_like
        degC; a dew point above the temperature is taken as the temperature.
    pressure_hpa : array_like
    drop_k : float
        How much colder the throat is.

    Returns
    -------
    ndarray
        ``w(Td) - w_ice(T - drop)`` at the pressure outside; minus infinity where the throat is
        above 0 degC, NaN where a value is missing.
    """
    temperature, dew_point, pressure = np.broadcast_arrays(
        np.asarray(temperature_c, float),
        np.asarray(dew_point_c, float),
        np.asarray(pressure_hpa, float),
    )
    throat = temperature - drop_k
    a, b, c = _ICE
    frozen = np.minimum(throat, 0.0)
    over_ice = a * np.exp(b * frozen / (c + frozen))
    vapour = vapour_pressure_hpa(np.minimum(dew_point, temperature))
    excess = mixing_ratio(vapour, pressure) - mixing_ratio(over_ice, pressure)
    return np.where(throat > 0.0, np.where(np.isnan(excess), np.nan, -np.inf), excess)


def screening(
    temperature_c: np.ndarray, dew_point_c: np.ndarray, pressure_hpa: np.ndarray
) -> np.ndarray:
    """Band of each point by the physical screening, an index into ``bands("physical")``.

    Parameters
    ----------
    temperature_c, dew_point_c : array_like
        Of the surface air, degC; a dew point above the temperature is taken as the temperature.
    pressure_hpa : array_like

    Returns
    -------
    ndarray of int
        `NONE` without a risk of ice, `UNKNOWN` where a value is NaN.

    Notes
    -----
    Ice is possible where the throat (27 K colder in cruise, 38 K in descent) is at or below
    0 degC and `throat_excess` is 1.5 g/kg or more, and serious from 4 g/kg.  The throat of a
    descent is colder, so ice that is possible or serious in cruise is so in descent too.
    It knows no relative humidity: above 27 degC it calls a descent serious in air drier than
    25 %, where advisories call ice rare.
    """
    cruise = throat_excess(temperature_c, dew_point_c, pressure_hpa, _CRUISE_DROP_K)
    descent = throat_excess(temperature_c, dew_point_c, pressure_hpa, _DESCENT_DROP_K)
    band = np.select(
        [
            np.isnan(descent),
            cruise >= _SERIOUS_EXCESS,
            (cruise >= _POSSIBLE) & (descent >= _SERIOUS_EXCESS),
            descent >= _SERIOUS_EXCESS,
            cruise >= _POSSIBLE,
            descent >= _POSSIBLE,
        ],
        [UNKNOWN, *range(len(_PHYSICAL))],
        NONE,
    )
    return np.asarray(band)


def icing_tables(
    temperature_c: np.ndarray,
    dew_point_c: np.ndarray,
    pressure_hpa: np.ndarray,
    clock: LocalClock,
    daylight: np.ndarray,
    method: str,
) -> tuple[pd.DataFrame, pd.DataFrame]:
    """Shares of the daylight hours in each band by month and by month x hour.

    Parameters
    ----------
    temperature_c, dew_point_c : ndarray, shape (n_levels, n_hours) or (1, n_hours)
        At each level of the transfer error, equally likely; NaN where unknown, in all levels
        alike.
    pressure_hpa : ndarray, shape (n_hours,)
        The chart does not ask for it; an hour without it is unknown to the screening alone.
    clock : LocalClock
    daylight : ndarray of bool, shape (n_hours,)
    method : {"chart", "physical"}

    Returns
    -------
    monthly, hourly : DataFrame
        A row for each band of each cell: ``month``, ``hour`` (hourly alone), ``n_hours``,
        ``n_years``, ``coverage``, ``method``, ``verified``, ``band``, ``share`` (0-1; NaN where
        no year counts).  A cell that never has daylight has no coverage either (NaN).
    """
    names = bands(method)
    known = np.isfinite(temperature_c[0]) & np.isfinite(dew_point_c[0])
    if method == "physical":
        known &= np.isfinite(pressure_hpa)
    complete = completeness(known, clock)
    used = complete.used & daylight
    air = temperature_c[:, used], dew_point_c[:, used]
    band = zones(*air) if method == "chart" else screening(*air, pressure_hpa[used])
    lit, year = window_cells(daylight, clock), clock.year[used]
    of_month = _coverage(complete.counts, lit, (0, 2))
    monthly = _shares(band, clock.month[used], year, of_month, names)
    monthly.insert(0, "month", np.repeat(np.arange(1, 13), len(names)))
    of_hour = _coverage(complete.counts, lit, (0,))
    hourly = _shares(band, clock.month_hour[used], year, of_hour, names)
    hourly.insert(0, "month", np.repeat(np.arange(1, 13), 24 * len(names)))
    hourly.insert(1, "hour", np.tile(np.repeat(np.arange(24), len(names)), 12))
    for table in (monthly, hourly):
        table.insert(table.columns.get_loc("band"), "method", method)
        table.insert(table.columns.get_loc("band"), "verified", verified(method))
    return monthly, hourly


def _coverage(counts: np.ndarray, lit: np.ndarray, axes: tuple[int, ...]) -> np.ndarray:
    """Share of the (year, month, hour) cells with daylight that count; NaN without any."""
    offered = lit.sum(axis=axes).reshape(-1)
    counting = (lit & counts).sum(axis=axes).reshape(-1)
    return np.asarray(counting / np.where(offered > 0, offered, np.nan))


def _shares(
    band: np.ndarray,
    cells: np.ndarray,
    year: np.ndarray,
    coverage: np.ndarray,
    names: tuple[str, ...],
) -> pd.DataFrame:
    """Counts and shares, a row for each band of each cell; bands of shape (n_levels, n)."""
    n_cells, n_kinds = len(coverage), len(names) + 1
    kinds = (cells * n_kinds + band - NONE).reshape(-1)
    counts = np.bincount(kinds, minlength=n_cells * n_kinds).reshape(n_cells, n_kinds)[:, 1:]
    n_hours = np.bincount(cells, minlength=n_cells)
    years = np.zeros((n_cells, int(year.max(initial=0)) + 1), bool)
    years[cells, year] = True
    some = np.where(n_hours > 0, n_hours, np.nan) * len(band)
    return pd.DataFrame(
        {
            "n_hours": np.repeat(n_hours, len(names)),
            "n_years": np.repeat(years.sum(axis=1), len(names)),
            "coverage": np.repeat(coverage, len(names)),
            "band": np.tile(np.array(names, dtype=object), n_cells),
            "share": (counts / some[:, None]).reshape(-1),
        }
    )
