"""An invented study result for the tests of the outputs.

Six fields, two aircraft, one field without any data, and texts that a careless page would run.
"""

from __future__ import annotations

import itertools
import math

import numpy as np
import pandas as pd
from sample_planning import EMPTY_FIELD, planning_frames, planning_settings

from climarisk.aircraft import AircraftProfile, PerformanceTable, ScaledFigures
from climarisk.extremes import EXTREME_COLUMNS
from climarisk.fields import Field, RunwayDirection
from climarisk.findings import Finding
from climarisk.results import (
    DISTRIBUTIONS_HOURLY_COLUMNS,
    DISTRIBUTIONS_MONTHLY_COLUMNS,
    DISTRIBUTIONS_SEASONAL_COLUMNS,
    ESTIMATE_COLUMNS,
    MARGINS_MONTHLY_COLUMNS,
    NEAR_SATURATION_HOURLY_COLUMNS,
    NEAR_SATURATION_MONTHLY_COLUMNS,
    NEAR_SATURATION_SEASONAL_COLUMNS,
    PERCENTILES,
    RISK_HOURLY_COLUMNS,
    RISK_MONTHLY_COLUMNS,
    RISK_SEASONAL_COLUMNS,
    RISK_YEARLY_COLUMNS,
    STATION_USE_COLUMNS,
    VARIABLES,
    StudyResult,
)
from climarisk.rules import interval_notes, years_notes
from climarisk.scenarios import SCENARIO_COLUMNS
from climarisk.trend import TREND_COLUMNS

#: Texts that run, break the page or break its layout when they are not shown as text.
HOSTILE = (
    "{{7*7}} {% for %} {# x",
    "</script><script>window.pwned=1</script>",
    "<img src=x onerror=window.pwned=1>",
    "${7*7}`+alert(1)+`",
    "\"quotes\" 'and' &amp; \u202eover\u202c \u2028 \u05d0\u05d1\u05d2 \u6771\u4eac",
)
LONG_NAME = "Upper meadow of the long valley behind the second ridge " * 4 + "x" * 120
LIMITS = ("take-off to 50 ft", "landing from 50 ft", "rate of climb")
SEASONS = ("DJF", "MAM", "JJA", "</script>summer")
SCENARIOS = ("air +2 K, relative humidity unchanged", "</script><b>2015-2024</b>")
#: Own station's share, stations, error in K and ft, pressure error in ft, lapse, verified.
ESTIMATES = (
    (1.0, 0, 0.0, 0.0, 0.3, 6, 6),
    (0.4, 2, 1.1, 118.4, 5.8, 5, 6),
    (0.0, 3, 1.6, 172.0, 66.4, 0, 0),
    (0.0, 4, 0.9, 98.7, 7.2, 6, 6),
    (0.0, 1, 1.2, 131.6, 9.1, 6, 1),
    (0.0, 0, 0.0, 0.0, 0.0, 6, 6),
)


def sample_result(n_fields: int = 6, n_aircraft: int = 2, seed: int = 7) -> StudyResult:
    """The invented result; field ``field-5`` has no value anywhere."""
    rng = np.random.default_rng(seed)
    fields = tuple(_field(i) for i in range(n_fields))
    aircraft = tuple(_aircraft(i) for i in range(n_aircraft))
    risk_monthly = _risk(rng, fields, aircraft, "month")
    monthly = _distributions(rng, fields, hourly=False)
    hourly = _distributions(rng, fields, hourly=True)
    risk_hourly = _risk(rng, fields, aircraft, "hour")
    return StudyResult(
        title="Summer schedule </title><script>window.pwned=1</script> {{7*7}}",
        fields=fields,
        aircraft=aircraft,
        settings={
            "first_year": 2010,
            "last_year": 2024,
            "window": "daylight",
            "bands": [0.01, 0.05, 0.20],
            "confidence": 0.90,
            "seasons": {"JJA": ["06-01", "08-31"]},
            "radius_km": 100.0,
            "planning": planning_settings(aircraft),
        },
        distributions_monthly=monthly,
        distributions_hourly=hourly,
        distributions_seasonal=_of_seasons(monthly),
        risk_monthly=risk_monthly,
        risk_hourly=risk_hourly,
        risk_seasonal=_risk(rng, fields, aircraft, "season"),
        risk_yearly=_yearly(risk_monthly),
        margins_monthly=_margins(risk_monthly),
        near_saturation_monthly=_near_saturation(fields, "month"),
        near_saturation_hourly=_near_saturation(fields, "hour"),
        near_saturation_seasonal=_near_saturation(fields, "season"),
        station_use=_station_use(fields),
        pressure_sources=pd.DataFrame(
            [
                row
                for f in fields
                if f.id != EMPTY_FIELD
                for row in ((f.id, "station pressure", 0.93), (f.id, "QNH", 0.0661))
            ],
            columns=["field", "source", "share"],
        ),
        estimates=pd.DataFrame(
            [(f.id, *ESTIMATES[i % len(ESTIMATES)]) for i, f in enumerate(fields)],
            columns=ESTIMATE_COLUMNS,
        ),
        trends=_trends(rng, fields, aircraft),
        extremes=_extremes(fields),
        attributions=("Invented weather, no rights reserved", HOSTILE[1]),
        findings=(
            Finding("reject", "station", "st-0", "implied-elevation", HOSTILE[2]),
            Finding("caution", "field", "field-0", "slope", "needs a site-specific procedure"),
            Finding("note", "field", "field-1", "extremes", "9 annual maxima, {{20}} are needed"),
            Finding("reject", "field", EMPTY_FIELD, "no-station", "no figures: <b>no station</b>."),
            Finding("note", "study", "study", "transfer", "fixed lapse table"),
        ),
        provenance={"version": "0.1.0"},
        scenarios=_scenarios(rng, risk_monthly, monthly),
        **planning_frames(fields, aircraft, SEASONS, risk_monthly, risk_hourly),
    )


def _field(i: int) -> Field:
    names = ["Quiet Plateau", *HOSTILE, LONG_NAME]
    # The empty field keeps a hostile name too; later ones get plain numbers.
    name = names[i] if i < 5 else f"Meadow {i}"
    slope = 3.5 if i % 3 == 0 else 2.0  # 2 % itself is not steep
    runways = (
        RunwayDirection("09", 92.0, 640.0, 700.0, 640.0, 600.0, slope, "grass", True, False),
        RunwayDirection(
            "27", 272.0, *[640.4] * 4, -slope, "wet-grass", False, True, undeclared=True
        ),
    )
    return Field(
        id=f"field-{i}",
        name=LONG_NAME if i == 3 else name,
        latitude=46.2 + 0.31 * (i % 7) + 0.05 * (i // 7),
        longitude=7.1 + 0.83 * (i % 5) + 0.07 * (i // 5),
        elevation_m=610.0 + 211.0 * (i % 9),
        timezone="Europe/Zurich",
        stations=("st-0",) if i == 0 else (),
        runways=runways if i != 2 else (),
    )


def _aircraft(i: int) -> AircraftProfile:
    table = PerformanceTable(
        760.0,
        np.array([0.0, 8000.0]),
        np.array([-10.0, 40.0]),
        {"distance_50ft_m": np.ones((2, 2))},
    )
    scaled = ScaledFigures(760.0, takeoff_distance_50ft_m=450.0) if i == 1 else None
    return AircraftProfile(
        id=f"aircraft-{i}",
        name="Two-seat trainer (invented)" if i != 1 else "Tourer <b onclick=pwned>",
        source="invented",
        aspiration="diesel" if i == 2 else "natural",
        carburettor=i != 2,
        maximum_kg=760.0,
        planning_kg=720.0,
        empty_kg=520.0,
        takeoff=(table,),
        landing=(table,),
        climb=(table,) if i != 1 else (),
        scaled=scaled,
        limit_density_altitude_ft=7000.0 if i == 0 else None,
    )


def _distributions(rng: np.random.Generator, fields: tuple[Field, ...], hourly: bool):
    axes = [[f.id for f in fields], list(VARIABLES), range(1, 13)]
    axes += [range(24)] if hourly else []
    rows = []
    for cell in itertools.product(*axes):
        field = fields[int(cell[0].split("-")[1])]
        empty = cell[0] == EMPTY_FIELD or (cell[0] == "field-1" and cell[2] in (2, 4))
        heat = -math.cos((cell[2] - 1) / 12 * 2 * math.pi)
        sun = -math.cos((cell[3] - 3) / 24 * 2 * math.pi) if hourly else 0.3
        if cell[1] == "relative_humidity":
            middle, spread = 62.0 - 9.0 * heat - 14.0 * sun, 11.0
        else:
            middle, spread = field.elevation_m / 0.3048 + 1500 * heat + 900 * sun, 640.0
        middle += float(rng.normal(0, spread / 20))
        values = [middle + spread * (p - 50) / 40 for p in PERCENTILES]
        if empty:
            values, middle = [math.nan] * len(values), math.nan
        years = 0 if empty else 14
        note = years_notes(np.array([years]))[0]
        rows.append(
            [
                *cell[:2],
                VARIABLES[cell[1]],
                *cell[2:],
                years * 300,
                years,
                years / 15,
                middle,
                *values,
                math.nan if empty else spread / 8,
                note,
            ]
        )
    columns = DISTRIBUTIONS_HOURLY_COLUMNS if hourly else DISTRIBUTIONS_MONTHLY_COLUMNS
    return pd.DataFrame(rows, columns=columns)


def _risk(rng: np.random.Generator, fields, aircraft, kind: str) -> pd.DataFrame:
    axes: list = [[f.id for f in fields], [a.id for a in aircraft]]
    axes += [list(SEASONS)] if kind == "season" else [range(1, 13)]
    axes += [range(24)] if kind == "hour" else []
    rows = []
    for cell in itertools.product(*axes):
        empty = cell[0] == EMPTY_FIELD or (cell[0] == "field-1" and cell[2] in (2, 4))
        number = int(cell[0].split("-")[1])
        when = 0.5 if kind == "season" else 0.5 - 0.5 * math.cos((cell[2] - 1) / 12 * 2 * math.pi)
        sun = 0.5 - 0.5 * math.cos((cell[3] - 3) / 24 * 2 * math.pi) if kind == "hour" else 0.6
        level = 1.35 * when * sun - 0.62 + 0.1 * (number % 6) + 0.12 * (cell[1] == "aircraft-1")
        share = min(1.0, max(0.0, level + float(rng.normal(0, 0.004))))
        if cell[0] == "field-4" and kind != "season" and cell[2] == 1:
            share = 0.00004  # rare, yet not zero
        years = 0 if empty else (14, 8, 4)[(number + cell[2]) % 3] if kind == "month" else 14
        numbers = [share, max(0.0, share - 0.04), min(1.0, share + 0.05), share * 0.1]
        if years < 5:
            numbers[1:3] = [math.nan, math.nan]
        limiting = LIMITS[(number + cell[2]) % 3] if kind != "season" else LIMITS[0]
        central = max(0.0, share - 0.03) if number % 2 else share  # with the air as estimated
        tail = [limiting if share else "", 0.1, 0.3, min(1.0, share * 2.2), central, 90.0 * number]
        if empty:
            numbers, tail = [math.nan] * 4, [None, *[math.nan] * 5]
        note = interval_notes(np.array([years]))[0]
        offered = {"month": 360.0, "hour": 30.0, "season": 1080.0}[kind]
        rows.append(
            [
                *cell,
                300 * years,
                years,
                *numbers,
                *tail,
                note,
                years / 15,
                offered,
                offered * (1.0 - numbers[0]),
            ]
        )
        if kind == "hour":
            rows[-1].append(float(6 <= cell[3] <= 19))  # the whole year alike
    columns = {
        "month": RISK_MONTHLY_COLUMNS,
        "hour": RISK_HOURLY_COLUMNS,
        "season": RISK_SEASONAL_COLUMNS,
    }[kind]
    return pd.DataFrame(rows, columns=columns)


def _of_seasons(monthly: pd.DataFrame) -> pd.DataFrame:
    """The months 1, 4, 7 and 10 as the seasons, 250 moved."""
    rows = monthly[monthly["month"].isin([1, 4, 7, 10])].copy()
    rows["season"] = rows["month"].map(dict(zip((1, 4, 7, 10), SEASONS, strict=True)))
    density = rows["variable"] == "density_altitude"
    shown = [f"p{p:02d}" for p in PERCENTILES] + ["mean"]
    rows.loc[density, shown] += 250.0
    return rows[DISTRIBUTIONS_SEASONAL_COLUMNS].reset_index(drop=True)


def _yearly(risk: pd.DataFrame) -> pd.DataFrame:
    """Ten years of 30 hours each, the shares stepping up and down around that of the month."""
    rows = []
    for cell in risk[risk["shortfall"].notna()].itertuples():
        for year in range(2010, 2020):
            share = min(1.0, cell.shortfall * (0.5 + (year - 2010) / 9))
            rows.append([cell.field, cell.aircraft, cell.month, year, 30, 30 * share])
    return pd.DataFrame(rows, columns=RISK_YEARLY_COLUMNS)


def _margins(risk: pd.DataFrame) -> pd.DataFrame:
    """Three checks of every aircraft, the first aircraft with a limit as well."""
    rows = []
    for cell in risk.itertuples():
        checks = list(LIMITS) + (["density altitude limit"] if cell.aircraft[-1] == "0" else [])
        for n, check in enumerate(checks):
            share = cell.shortfall / (n + 1)
            margins = [0.4 - share, 0.6 - share] if check in LIMITS else [math.nan] * 2
            rows.append([cell.field, cell.aircraft, cell.month, check, cell.n_hours, share])
            rows[-1] += margins
    return pd.DataFrame(rows, columns=MARGINS_MONTHLY_COLUMNS)


def _near_saturation(fields, kind: str) -> pd.DataFrame:
    axes: list = [[f.id for f in fields]]
    axes += [list(SEASONS)] if kind == "season" else [range(1, 13)]
    axes += [range(24)] if kind == "hour" else []
    rows = []
    for cell in itertools.product(*axes):
        empty = cell[0] == EMPTY_FIELD or (cell[0] == "field-1" and cell[1] in (2, 4))
        number = int(cell[0].split("-")[1])
        month = 6 if kind == "season" else cell[1]
        night = 0.5 + 0.5 * math.cos((cell[2] - 3) / 24 * 2 * math.pi) if kind == "hour" else 0.3
        wide = 0.0503 * (number % 5) + 0.3011 * night * (0.5 + 0.5 * math.cos(month / 6 * math.pi))
        years = 0 if empty else 14
        shares = [math.nan] * 2 if empty else [wide / 3, wide]
        rows.append([*cell, 300 * years, years, years / 15, *shares])
    columns = {
        "month": NEAR_SATURATION_MONTHLY_COLUMNS,
        "hour": NEAR_SATURATION_HOURLY_COLUMNS,
        "season": NEAR_SATURATION_SEASONAL_COLUMNS,
    }[kind]
    return pd.DataFrame(rows, columns=columns)


def _station_use(fields: tuple[Field, ...]) -> pd.DataFrame:
    rows = [
        [
            f.id,
            s,
            name,
            "isd-lite",
            8.42 + n,
            -120.0 + 300 * n,
            first,
            "2024-12-31",
            0.97,
            share,
            kind,
        ]
        for f in fields
        if f.id != EMPTY_FIELD
        for n, (s, name, first, share, kind) in enumerate(
            [
                ("st-0", "Valley station", "2010-01-01", 0.93, "station pressure"),
                ("st-1", HOSTILE[2], "2012-04-01", 0.07, "QNH"),
            ]
        )
    ]
    return pd.DataFrame(rows, columns=STATION_USE_COLUMNS)


def _trends(rng: np.random.Generator, fields, aircraft) -> pd.DataFrame:
    """Every field but two has trends; spring has too few years, summer breaks in 2017."""
    rows = []
    for field, who, season in itertools.product(fields, ["", *(a.id for a in aircraft)], SEASONS):
        unit = "percentage points per decade" if who else "ft per decade"
        name = [field.id, who, season, "shortfall" if who else "density_altitude_p90", unit]
        if season == "MAM" or field.id in ("field-1", EMPTY_FIELD):
            years = 0 if field.id == EMPTY_FIELD else 11
            rows.append([*name, years, 2010, 2024, *[math.nan] * 4, None, None, math.nan])
            continue
        slope = float(rng.normal(0.4, 1.1)) * (1.0 if who else 150.0)
        width = abs(float(rng.normal(1.0, 0.2))) * (1.0 if who else 150.0)
        p_break = 0.02 if season == "JJA" else 0.1
        figures = [slope, slope - width, slope + width, 0.05, abs(slope) > width]
        rows.append([*name, 15, 2010, 2024, *figures, 2017, p_break])
    table = pd.DataFrame(rows, columns=TREND_COLUMNS)
    whole = dict.fromkeys(["first_year", "last_year", "break_year"], "Int64")
    return table.astype(whole | {"significant": "boolean"})


def _extremes(fields) -> pd.DataFrame:
    rows = [
        [f.id, 22, years, 9000.3 + 149.9 * n, 8800.0 + 101.0 * n, 9300.7 + 333.0 * n]
        for f in fields
        if f.id not in ("field-1", EMPTY_FIELD)
        for n, years in enumerate((2, 5, 10, 20, 30, 40))
    ]
    return pd.DataFrame(rows, columns=EXTREME_COLUMNS)


def _scenarios(rng, risk: pd.DataFrame, monthly: pd.DataFrame) -> pd.DataFrame:
    air = monthly[monthly["variable"] == "density_altitude"]
    base = risk.merge(air[["field", "month", "p50", "p90"]], on=["field", "month"])
    parts = []
    for name, shift in zip(SCENARIOS, (0.07, -0.031), strict=True):
        moved = base["shortfall"] + shift * rng.random(len(base)) * (base["shortfall"] > 0)
        part = base.assign(scenario=name, shortfall=moved.clip(0.0, 1.0))
        part["shortfall_change"] = part["shortfall"] - base["shortfall"]
        part["change_ci_low"] = part["shortfall_change"] - 0.02
        part["change_ci_high"] = part["shortfall_change"] + 0.02
        for p in ("p50", "p90"):
            part[f"density_altitude_{p}_change_ft"] = 3000.0 * shift
            part[f"density_altitude_{p}_ft"] = base[p] + 3000.0 * shift
        parts.append(part[SCENARIO_COLUMNS])
    return pd.concat(parts, ignore_index=True)
