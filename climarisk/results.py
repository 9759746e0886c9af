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
    "hours_offered",  # hours of the cell in a year by the calendar, mean over the period
    "usable_hours",  # of those, hours that do not fall short, at the share of the known hours
]
DISTRIBUTIONS_MONTHLY_COLUMNS = ["field", "variable", "unit", "month", *_STATISTICS]
DISTRIBUTIONS_HOURLY_COLUMNS = ["field", "variable", "unit", "month", "hour", *_STATISTICS]
DISTRIBUTIONS_SEASONAL_COLUMNS = ["field", "variable", "unit", "season", *_STATISTICS]
RISK_MONTHLY_COLUMNS = ["field", "aircraft", "month", *_RISK]
#: ``in_window``: share of the cell's days on which the hour lies inside the hours window.
RISK_HOURLY_COLUMNS = ["field", "aircraft", "month", "hour", *_RISK, "in_window"]
RISK_SEASONAL_COLUMNS = ["field", "aircraft", "season", *_RISK]

RISK_YEARLY_COLUMNS = ["field", "aircraft", "month", "year", "n_hours", "shortfall_hours"]

#: One row per check that the profile has, over the hours window: the share of hours in which
#: this check fails, and its margin; no margin for a limit.
MARGINS_MONTHLY_COLUMNS = [
    "field",
    "aircraft",
    "month",
    "check",
    "n_hours",
    "shortfall",
    "margin_p10",
    "margin_p50",
]

#: Shares of hours whose temperature is at most 1 K, 2.5 K above the dew point.
_NEAR_SATURATION = ["n_hours", "n_years", "coverage", "share_1k", "share_2_5k"]
NEAR_SATURATION_MONTHLY_COLUMNS = ["field", "month", *_NEAR_SATURATION]
NEAR_SATURATION_HOURLY_COLUMNS = ["field", "month", "hour", *_NEAR_SATURATION]
NEAR_SATURATION_SEASONAL_COLUMNS = ["field", "season", *_NEAR_SATURATION]

#: The largest mass that holds in a share of the hours, landing included.
_WEIGHTS = [
    "n_hours",
    "n_years",
    "coverage",
    "holds_in",  # the share of the hours asked for
    "mass_kg",
    "useful_load_kg",  # above the empty mass
    "outcome",  # mass, maximum mass, cannot be met; empty without data
    "never_met",  # share of the hours in which no tabulated mass would do
]
_WEIGHT_INTERVAL = ["ci_low_kg", "ci_high_kg", "interval_note"]
WEIGHTS_MONTHLY_COLUMNS = ["field", "aircraft", "month", *_WEIGHTS, *_WEIGHT_INTERVAL]
WEIGHTS_HOURLY_COLUMNS = ["field", "aircraft", "month", "hour", *_WEIGHTS]
WEIGHTS_SEASONAL_COLUMNS = ["field", "aircraft", "season", *_WEIGHTS, *_WEIGHT_INTERVAL]

#: When a field works for an aircraft: hours of the day below the target, and usable daylight.
WINDOWS_MONTHLY_COLUMNS = [
    "field",
    "aircraft",
    "month",
    "target",  # shortfall share below which an hour of the day counts
    "hours",  # those hours, local standard time, as ranges
    "n_clock_hours",  # how many they are
    "first_hour",
    "last_hour",
    "clock_first",  # the same by the civil clock of the planning year
    "clock_last",
    "clock_hours",  # every stretch of hours by the civil clock
    "hours_without_figures",
    "daylight_hours",  # hours of a year's month in daylight
    "usable_hours",  # of those, hours that do not fall short
    "usable_low",
    "usable_high",
    "run_hours",  # usable hours in a row asked of a day
    "days_with_run",  # share of days that have them
    "n_years",
    "coverage",
    "interval_note",
]

#: Exposure to carburettor icing in daylight, one row per band.
_ICING = ["n_hours", "n_years", "coverage", "method", "verified", "band", "share"]
ICING_MONTHLY_COLUMNS = ["field", "month", *_ICING]
ICING_HOURLY_COLUMNS = ["field", "month", "hour", *_ICING]

#: Engine power as a share of that at ISA sea level, and what humidity takes.
POWER_MONTHLY_COLUMNS = [
    "field",
    "aircraft",
    "month",
    "n_hours",
    "n_years",
    "coverage",
    "method",
    "power_p10",
    "power_p50",
    "power_p90",
    "optimistic_p50",
    "humidity_power_pct_p50",
    "humidity_power_pct_p90",
    "humidity_ft_p50",
    "humidity_ft_p90",
]

#: Fields ranked for the fleet; a row for each aircraft, and one for the fleet with no aircraft.
BASES_COLUMNS = [
    "rank",
    "field",
    "aircraft",
    "usable_hours_month",  # usable hours of the window in a month, mean over the year
    "ci_low",
    "ci_high",
    "year_p10",  # the same of single years of the record
    "year_p90",
    "worst_season",
    "worst_season_hours_month",
    "days_with_run",
    "share_1k",
    "share_2_5k",
    "icing_serious",  # share of the daylight hours with carburettor icing serious even in cruise
    "n_years",
    "interval_note",
    "steep",  # yes: a strip of more than 2 % slope, where no figure is a pass
]
BASE_DIFFERENCES_COLUMNS = [
    "first",
    "second",
    "aircraft",
    "difference_hours_month",
    "ci_low",
    "ci_high",
    "interval_note",
]

#: A schedule flight by flight, by season, and by day.
SCHEDULE_FLIGHTS_COLUMNS = [
    "flight",
    "field",
    "aircraft",
    "operation",
    "when",
    "clock_time",
    "hours",  # local standard hours of the climatology it falls into
    "mass_kg",
    "flights",
    "n_hours",
    "n_years",  # that take part in the figures of a date, on average, rounded down
    "coverage",  # share of the days around its dates whose (year, month, hour) cell counts
    "shortfall",
    "ci_low",
    "ci_high",
    "affected",  # flights with figures expected to fall short: the share of these
    "limiting",
    "holds_in",
    "mass_that_holds_kg",
    "useful_load_kg",
    "outcome",
    "nearest_time",  # nearest clock time with a shortfall below the target, on the known dates
    "nearest_shift_h",
    "nearest_shortfall",
    "never_met",  # yes: it fell short in every hour of the record
    "interval_note",
    "steep",  # yes: a strip of more than 2 % slope, where no figure is a pass
    "note",  # of its time: outside the hours window, one that clocks skip, nearest not to be told
    "unknown_flights",  # of `flights`, those on dates without figures
]
SCHEDULE_SEASONS_COLUMNS = [
    "season",  # empty: the whole schedule
    "flights",
    "unknown_flights",  # flights without figures
    "affected",
    "ci_low",
    "ci_high",
    "year_low",  # the best and the worst year of the record; empty below 5 counting years
    "year_high",
    "worst_year",
    "n_years",
    "interval_note",
]
SCHEDULE_DAYS_COLUMNS = ["date", "weekday", "flights", "unknown_flights", "affected", "share"]

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


#: Frames of a field that, put below those of the other fields, are the study's.
FIELD_FRAMES: dict[str, list[str]] = {
    "distributions_monthly": DISTRIBUTIONS_MONTHLY_COLUMNS,
    "distributions_hourly": DISTRIBUTIONS_HOURLY_COLUMNS,
    "distributions_seasonal": DISTRIBUTIONS_SEASONAL_COLUMNS,
    "risk_monthly": RISK_MONTHLY_COLUMNS,
    "risk_hourly": RISK_HOURLY_COLUMNS,
    "risk_seasonal": RISK_SEASONAL_COLUMNS,
    "risk_yearly": RISK_YEARLY_COLUMNS,
    "margins_monthly": MARGINS_MONTHLY_COLUMNS,
    "near_saturation_monthly": NEAR_SATURATION_MONTHLY_COLUMNS,
    "near_saturation_hourly": NEAR_SATURATION_HOURLY_COLUMNS,
    "near_saturation_seasonal": NEAR_SATURATION_SEASONAL_COLUMNS,
    "weights_monthly": WEIGHTS_MONTHLY_COLUMNS,
    "weights_hourly": WEIGHTS_HOURLY_COLUMNS,
    "weights_seasonal": WEIGHTS_SEASONAL_COLUMNS,
    "windows_monthly": WINDOWS_MONTHLY_COLUMNS,
    "icing_monthly": ICING_MONTHLY_COLUMNS,
    "icing_hourly": ICING_HOURLY_COLUMNS,
    "power_monthly": POWER_MONTHLY_COLUMNS,
    "station_use": STATION_USE_COLUMNS,
    "pressure_sources": ["field", "source", "share"],
    "estimates": ESTIMATE_COLUMNS,
}


@dataclass(frozen=True)
class Tiles:
    """Where the map page may load background images from.

    Parameters
    ----------
    url : str
        An https address with ``{z}``, ``{x}`` and ``{y}``.
    attribution : str
        What the source asks to be shown.
    """

    url: str
    attribution: str


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
    distributions_monthly, distributions_hourly, distributions_seasonal : DataFrame
        Columns `DISTRIBUTIONS_MONTHLY_COLUMNS`, `DISTRIBUTIONS_HOURLY_COLUMNS`,
        `DISTRIBUTIONS_SEASONAL_COLUMNS`; every field x variable x month (x hour) or season, in
        the study's order; a cell that fails the completeness rule is NaN.
    risk_monthly, risk_hourly, risk_seasonal : DataFrame
        Columns `RISK_MONTHLY_COLUMNS` and so on; shares 0-1.
    risk_yearly : DataFrame
        Columns `RISK_YEARLY_COLUMNS`: each month of each year inside the hours window.
    margins_monthly : DataFrame
        Columns `MARGINS_MONTHLY_COLUMNS`.
    near_saturation_monthly, near_saturation_hourly, near_saturation_seasonal : DataFrame
        Columns `NEAR_SATURATION_MONTHLY_COLUMNS` and so on; months and seasons inside the
        hours window.
    weights_monthly, weights_hourly, weights_seasonal : DataFrame
        Columns `WEIGHTS_MONTHLY_COLUMNS` and so on; months and seasons inside the hours window.
    windows_monthly : DataFrame
        Columns `WINDOWS_MONTHLY_COLUMNS`.
    icing_monthly, icing_hourly : DataFrame
        Columns `ICING_MONTHLY_COLUMNS` and so on; without rows where no aircraft has a carburettor.
    power_monthly : DataFrame
        Columns `POWER_MONTHLY_COLUMNS`.
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
    bases, base_differences : DataFrame
        Columns `BASES_COLUMNS`, `BASE_DIFFERENCES_COLUMNS`.
    schedule_flights, schedule_seasons, schedule_days : DataFrame or None
        Columns `SCHEDULE_FLIGHTS_COLUMNS` and so on, where the study has a schedule.
    scenarios : DataFrame or None
        Columns `climarisk.scenarios.SCENARIO_COLUMNS`, where variants were asked for.
    tiles : Tiles or None
        Background images for the map, where the study names a source of them.
    """

    title: str
    fields: tuple[Field, ...]
    aircraft: tuple[AircraftProfile, ...]
    settings: dict[str, Any]
    distributions_monthly: pd.DataFrame
    distributions_hourly: pd.DataFrame
    distributions_seasonal: pd.DataFrame
    risk_monthly: pd.DataFrame
    risk_hourly: pd.DataFrame
    risk_seasonal: pd.DataFrame
    risk_yearly: pd.DataFrame
    margins_monthly: pd.DataFrame
    near_saturation_monthly: pd.DataFrame
    near_saturation_hourly: pd.DataFrame
    near_saturation_seasonal: pd.DataFrame
    weights_monthly: pd.DataFrame
    weights_hourly: pd.DataFrame
    weights_seasonal: pd.DataFrame
    windows_monthly: pd.DataFrame
    icing_monthly: pd.DataFrame
    icing_hourly: pd.DataFrame
    power_monthly: pd.DataFrame
    station_use: pd.DataFrame
    pressure_sources: pd.DataFrame
    estimates: pd.DataFrame
    trends: pd.DataFrame
    extremes: pd.DataFrame
    attributions: tuple[str, ...]
    findings: tuple[Finding, ...]
    provenance: dict[str, Any]
    bases: pd.DataFrame
    base_differences: pd.DataFrame
    schedule_flights: pd.DataFrame | None = None
    schedule_seasons: pd.DataFrame | None = None
    schedule_days: pd.DataFrame | None = None
    scenarios: pd.DataFrame | None = None
    tiles: Tiles | None = None
