"""Second computation of study numbers from raw files: plain loops, nothing of the package.

Formulas: METHODS 1, 2.2, 2.3, 2.6, 3.1-3.3, 5.1, 5.2, 8; counting rules: DESIGN 6. No quality
control beyond gross limits. Run as ``python tests/independent.py OUTPUT_FOLDER``; the raw files lie
in the folder ``shared`` beside the project.
"""

import csv
import gzip
import math
import sys
import tomllib
from calendar import monthrange
from collections import defaultdict
from datetime import datetime, timedelta
from pathlib import Path
from typing import NamedTuple

T0, P0, RHO0, G0, R, LAPSE, FT = 288.15, 1013.25, 1.225, 9.80665, 287.05287, 0.0065, 0.3048
INHG = 33.86389  # METHODS 12
EXPONENT = G0 / (R * LAPSE)
TOP_FT = T0 / LAPSE / FT  # height at which the ISA lapse would reach 0 K
PERCENTS = (1, 5, 10, 25, 50, 75, 90, 95, 99)
VARIABLES = ("density_altitude", "pressure_altitude", "temperature")
VARIABLES += ("dew_point", "relative_humidity", "vapour_pressure")
TAKEOFF_SURFACE = dict(paved=1, gravel=1.05, grass=1.2, soft=1.25, snow=1.25) | {"wet-grass": 1.3}
LANDING_SURFACE = dict(paved=1, gravel=1.08, grass=1.15, soft=1.25, snow=1.25) | {"wet-grass": 1.35}


class Row(NamedTuple):
    """One report: UTC time, degC, degC, %, then station pressure, altimeter setting, QFF in hPa."""

    when: datetime
    t: float | None = None
    td: float | None = None
    rh: float | None = None
    p: float | None = None
    altimeter: float | None = None
    slp: float | None = None


class Air(NamedTuple):
    """Air at the field in one hour; None where it cannot be known."""

    temperature: float | None
    dew_point: float | None
    relative_humidity: float | None
    vapour_pressure: float | None
    pressure: float | None
    pressure_altitude: float | None
    density_altitude: float | None
    virtual_c: float | None


# ---- raw readers: every report as written, exact time, in file order -------------------------


def number(text, scale=1.0):
    """Return the number times scale, or None for empty text, -9999 or anything else."""
    try:
        value = float(text.strip().replace(",", "."))
    except ValueError:
        return None  # empty, NA, or a doubtful value with its trailing letter
    return None if value == -9999 else value * scale


def read_inmet(path):
    """Return the rows of one INMET yearly file: 8 lines of station data, 1 of names, UTC hours."""
    rows = []
    for line in Path(path).read_text(encoding="latin-1").splitlines()[9:]:
        cell = line.split(";")
        when = datetime.strptime(cell[0] + cell[1][:4], "%Y/%m/%d%H%M")
        rows.append(Row(when, number(cell[7]), number(cell[8]), number(cell[15]), number(cell[3])))
    return rows


def read_isd_lite(path):
    """Return the rows of one light hourly file: fixed width, tenths, UTC, sea-level pressure."""
    rows = []
    with gzip.open(path, "rt") as lines:
        for line in lines:
            when = datetime(*(int(line[a:b]) for a, b in ((0, 4), (5, 7), (8, 10), (11, 13))))
            t, td, slp = (number(line[a : a + 6], 0.1) for a in (13, 19, 25))
            rows.append(Row(when, t, td, slp=slp))
    return rows


def read_lcd(path, utc_offset_h):
    """Return the rows of one full-record file: local standard time, degF, inHg; FM reports only."""
    rows = []
    with Path(path).open(newline="") as handle:
        for x in csv.DictReader(handle):
            if not x["REPORT_TYPE"].startswith("FM-"):
                continue
            when = datetime.fromisoformat(x["datetime"]) - timedelta(hours=utc_offset_h)
            f, fd = number(x["HourlyDryBulbTemperature"]), number(x["HourlyDewPointTemperature"])
            names = ("HourlyStationPressure", "HourlyAltimeterSetting", "HourlySeaLevelPressure")
            pressures = [number(x[name], INHG) for name in names]
            t, td = (None if v is None else (v - 32) / 1.8 for v in (f, fd))
            rows.append(Row(when, t, td, number(x["HourlyRelativeHumidity"]), *pressures))
    return rows


def read_epw(path):
    """Return the rows of one typical-year file: 8 header lines, hour label = END, LST, Pa."""
    lines = Path(path).read_text(encoding="latin-1").splitlines()
    utc_offset_h = float(lines[0].split(",")[8])
    rows = []
    for line in lines[8:]:
        c = line.split(",")
        day = datetime(int(c[0]), int(c[1]), int(c[2]))
        when = day + timedelta(hours=int(c[3]) - utc_offset_h)
        rows.append(Row(when, number(c[6]), number(c[7]), number(c[8]), number(c[9], 0.01)))
    return rows


def within(value, low, high):
    """Return the value, or None outside [low, high]."""
    return value if value is not None and low <= value <= high else None


def to_hours(rows):
    """Return {UTC full hour: Row}: gross limits, complete reports first, then the nearest to HH:00.

    A report at HH:30 belongs to the next hour; of two equally near the earlier one counts.
    """
    best = {}
    for row in rows:
        t, td = within(row.t, -80, 60), within(row.td, -80, 40)
        if t is not None and td is not None and td > t + 0.5:
            td = None
        rh = row.rh if row.rh is not None and 0 < row.rh <= 100 else None
        pressures = [within(row.p, 450, 1090)]
        pressures += [within(v, 850, 1100) for v in (row.altimeter, row.slp)]
        hour = (row.when + timedelta(minutes=30)).replace(minute=0, second=0)
        humid = td is not None or rh is not None
        complete = t is not None and humid and any(v is not None for v in pressures)
        rank = (not complete, abs((row.when - hour).total_seconds()), row.when)
        if hour not in best or rank < best[hour][0]:
            best[hour] = (rank, Row(hour, t, td, rh, *pressures))
    return {hour: best[hour][1] for hour in sorted(best)}


# ---- physics ---------------------------------------------------------------------------------


def saturation_hpa(t):
    """Return the Buck 1981 pure-phase value over water, METHODS 3.1."""
    return 6.1121 * math.exp(17.502 * t / (240.97 + t))


def dew_point_c(t, rh):
    """Return the dew point by inverting Buck 1981; the enhancement factor cancels, METHODS 3.2."""
    gamma = math.log(rh / 100 * saturation_hpa(t) / 6.1121)
    return 240.97 * gamma / (17.502 - gamma)


def vapour_hpa(td, p):
    """Return e = f es(Td), METHODS 3.1."""
    return (1.0007 + 3.46e-6 * p) * saturation_hpa(td)


def virtual_k(t, e, p):
    """Return the virtual temperature, METHODS 3.2."""
    return (t + 273.15) / (1 - 0.37802 * e / p)


def station_pressure(row, td, t_earlier, elevation_m):
    """Return station pressure: measured, else from altimeter (2.2), else from QFF (2.3)."""
    if row.p is not None:
        return row.p
    if row.altimeter is not None:
        ratio = (row.altimeter / P0) ** (1 / EXPONENT) - LAPSE * elevation_m / T0
        return P0 * ratio**EXPONENT
    if row.slp is None or row.t is None or td is None:
        return None
    t12 = row.t if t_earlier is None else (row.t + t_earlier) / 2
    p = row.slp
    for _ in range(4):  # e depends on p only through f
        column_k = t12 + 273.15 + LAPSE * elevation_m / 2 + 0.12 * vapour_hpa(td, p)
        p = row.slp * math.exp(-G0 * elevation_m / (R * column_k))
    return p


def air_at_field(row, t_earlier, station_m, field_m):
    """Return the Air of one hour; T and dew point unchanged, pressure moved by METHODS 2.6."""
    t, td = row.t, row.td
    if td is None and t is not None and row.rh is not None:
        td = dew_point_c(t, row.rh)
    rh = None if t is None or td is None else 100 * saturation_hpa(td) / saturation_hpa(t)
    p = station_pressure(row, td, t_earlier, station_m)
    if p is None:
        return Air(t, td, rh, None, None, None, None, None)
    if field_m != station_m:
        if t is None or td is None:
            return Air(t, td, rh, None, None, None, None, None)
        p_s = p
        for _ in range(4):
            tv_s = virtual_k(t, vapour_hpa(td, p_s), p_s)
            mean_k = (tv_s + virtual_k(t, vapour_hpa(td, p), p)) / 2
            p = p_s * math.exp(-G0 * (field_m - station_m) / (R * mean_k))
    pa = TOP_FT * (1 - (p / P0) ** (1 / EXPONENT))
    e = None if td is None else vapour_hpa(td, p)
    if t is None or e is None:
        return Air(t, td, rh, e, p, pa, None, None)
    tv = virtual_k(t, e, p)
    density = 100 * p / (R * tv)
    da = TOP_FT * (1 - (density / RHO0) ** (1 / (EXPONENT - 1)))
    return Air(t, td, rh, e, p, pa, da, tv - 273.15)


def field_hours(reports, station_m, field_m, utc_offset_h, years):
    """Return [(local standard time, Air)] of the years first..last, in order of time."""
    hours, out = to_hours(reports), []
    for when, row in hours.items():
        local = when + timedelta(hours=utc_offset_h)
        earlier = hours.get(when - timedelta(hours=12))
        if years[0] <= local.year <= years[1]:
            t_earlier = None if earlier is None else earlier.t
            out.append((local, air_at_field(row, t_earlier, station_m, field_m)))
    return out


# ---- climatology -----------------------------------------------------------------------------


def type8(ordered, share):
    """Return the Hyndman-Fan type 8 quantile of a sorted list."""
    n = len(ordered)
    place = (n + 1 / 3) * share + 1 / 3  # 1-based
    j = math.floor(place)
    if j < 1:
        return ordered[0]
    if j >= n:
        return ordered[-1]
    return ordered[j - 1] + (place - j) * (ordered[j] - ordered[j - 1])


def counting_cells(pairs):
    """Return {(month, hour): {year: [values]}} of counting years from (local time, value or None).

    A year counts when at least 80 % of the days of that calendar month have a value at that hour.
    """
    cells = defaultdict(lambda: defaultdict(list))
    for local, value in pairs:
        if value is not None:
            cells[local.month, local.hour][local.year].append(value)
    kept = {}
    for month in range(1, 13):
        for hour in range(24):
            kept[month, hour] = {
                year: values
                for year, values in cells[month, hour].items()
                if 5 * len(values) >= 4 * monthrange(year, month)[1]
            }
    return kept


def distributions(hours, variable, years):
    """Return {(month, hour): (n_hours, n_years, coverage, mean, *percentiles)}; None if no year."""
    table = {}
    cells = counting_cells((local, getattr(air, variable)) for local, air in hours)
    for key, by_year in cells.items():
        pooled = sorted(v for values in by_year.values() for v in values)
        share = len(by_year) / (years[1] - years[0] + 1)
        figures = [None] * (1 + len(PERCENTS))
        if pooled:
            figures = [math.fsum(pooled) / len(pooled)] + [type8(pooled, q / 100) for q in PERCENTS]
        table[key] = (len(pooled), len(by_year), share, *figures)
    return table


# ---- performance -----------------------------------------------------------------------------


def place_on(axis, x):
    """Return (index, weight of the next point); first point below the axis, None above it."""
    if x > axis[-1]:
        return None
    if x <= axis[0]:
        return 0, 0.0
    i = 0
    while x > axis[i + 1]:
        i += 1
    return i, (x - axis[i]) / (axis[i + 1] - axis[i])


def read_table(blocks, name, mass, pa, tv):
    """Return the handbook figure, or None outside the table: trilinear, METHODS 5.1."""
    blocks = sorted(blocks, key=lambda b: b["mass_kg"])
    at_mass = place_on([b["mass_kg"] for b in blocks], mass)
    if at_mass is None:
        return None
    k, w = at_mass
    total = 0.0
    for block, share in ((blocks[k], 1 - w), (blocks[min(k + 1, len(blocks) - 1)], w)):
        at_pa = place_on(block["pressure_altitude_ft"], pa)
        at_t = place_on(block["temperature_c"], tv)
        if share == 0:
            continue
        if at_pa is None or at_t is None:
            return None
        for di, wi in ((0, 1 - at_pa[1]), (1, at_pa[1])):
            for dj, wj in ((0, 1 - at_t[1]), (1, at_t[1])):
                if wi * wj > 0:
                    total += share * wi * wj * block[name][at_pa[0] + di][at_t[0] + dj]
    return None if math.isnan(total) else total


def length_m(runway, kind):
    """Return a declared distance in metres, from length when not declared."""
    for name in (kind, "length"):
        if runway.get(name + "_m"):
            return float(runway[name + "_m"])
        if runway.get(name + "_ft"):
            return float(runway[name + "_ft"]) * FT
    return None


def shortfall(air, aircraft, runways):
    """Return (falls short, outside table), or None for an unknown hour; DESIGN 6."""
    if air.density_altitude is None:
        return None
    mass, policy = aircraft["mass"]["planning_kg"], aircraft["margins"]
    limits = aircraft.get("limits", {})

    def figure(operation, name):
        blocks = aircraft[operation]
        return read_table(blocks, name, mass, air.pressure_altitude, air.virtual_c)

    roll, over50 = figure("takeoff", "ground_roll_m"), figure("takeoff", "distance_50ft_m")
    land, climb = figure("landing", "distance_50ft_m"), figure("climb", "rate_ft_min")
    if None in (roll, over50, land, climb):
        return True, True
    takeoffs, landings = [], []
    for runway in runways:
        slope, surface = float(runway["slope_pct"]), runway["surface"]
        if runway["takeoff"] == "yes":
            factor = TAKEOFF_SURFACE[surface] * (1 + 0.05 * max(slope, 0))
            factor *= policy["takeoff_factor"]
            ground = length_m(runway, "tora") / (roll * factor) - 1
            takeoffs.append(min(ground, length_m(runway, "toda") / (over50 * factor) - 1))
        if runway["landing"] == "yes":
            factor = LANDING_SURFACE[surface] * (1 + 0.05 * max(-slope, 0))
            factor *= policy["landing_factor"]
            landings.append(length_m(runway, "lda") / (land * factor) - 1)
    worst = min(max(takeoffs), max(landings), climb - policy["climb_rate_ft_min"])
    hot = air.temperature > limits.get("temperature_c", math.inf)
    high = air.density_altitude > limits.get("density_altitude_ft", math.inf)
    return worst < 0 or hot or high, False


def shortfall_cells(hours, aircraft, runways):
    """Return {(month, hour): (n_hours, n_years, shortfall share, outside-table share)}."""
    scored = [(local, shortfall(air, aircraft, runways)) for local, air in hours]
    table = {}
    for key, by_year in counting_cells(scored).items():
        known = [v for values in by_year.values() for v in values]
        shares = [sum(v[i] for v in known) / len(known) if known else None for i in (0, 1)]
        table[key] = (len(known), len(by_year), *shares)
    return table


# ---- months inside an hours window: near saturation, checks ----------------------------------

SPREADS_K = (1.0, 2.5)


def sun_elevation(utc, latitude, longitude):
    """Return the geometric elevation of the sun's centre in degrees.

    Low-precision position of Meeus, Astronomical Algorithms (1998), chapters 25 and 28, written
    down as in the NOAA solar calculator.
    """
    days = (utc - datetime(2000, 1, 1, 12)).total_seconds() / 86400
    t = days / 36525
    mean = 280.46646 + t * (36000.76983 + 0.0003032 * t)
    anomaly = math.radians(357.52911 + t * (35999.05029 - 0.0001537 * t))
    eccentric = 0.016708634 - t * (0.000042037 + 0.0000001267 * t)
    centre = (1.914602 - t * (0.004817 + 0.000014 * t)) * math.sin(anomaly)
    centre += (0.019993 - 0.000101 * t) * math.sin(2 * anomaly) + 0.000289 * math.sin(3 * anomaly)
    node = math.radians(125.04 - 1934.136 * t)
    true = math.radians(mean + centre - 0.00569 - 0.00478 * math.sin(node))
    tilt = 23 + (26 + (21.448 - t * (46.815 + t * (0.00059 - 0.001813 * t))) / 60) / 60
    tilt = math.radians(tilt + 0.00256 * math.cos(node))
    declination = math.asin(math.sin(tilt) * math.sin(true))
    y, twice = math.tan(tilt / 2) ** 2, 2 * math.radians(mean)
    equation = y * math.sin(twice) - 2 * eccentric * math.sin(anomaly)
    equation += 4 * eccentric * y * math.sin(anomaly) * math.cos(twice)
    equation -= y * y / 2 * math.sin(2 * twice) + 1.25 * eccentric**2 * math.sin(2 * anomaly)
    hour_angle = 15 * (utc.hour + utc.minute / 60 + utc.second / 3600) - 180 + longitude
    hour_angle = math.radians(hour_angle + math.degrees(equation))
    phi = math.radians(latitude)
    sine = math.sin(phi) * math.sin(declination)
    sine += math.cos(phi) * math.cos(declination) * math.cos(hour_angle)
    return math.degrees(math.asin(sine))


def months(pairs, inside):
    """Return {month: [(local time, value)]} of the counting years' hours inside the window."""
    table = {month: [] for month in range(1, 13)}
    cells = counting_cells((local, None if v is None else (local, v)) for local, v in pairs)
    for (month, _), by_year in cells.items():
        for dated in by_year.values():
            table[month] += [(local, value) for local, value in dated if inside(local)]
    return table


def spread_k(air):
    """Return temperature minus dew point, free of binary noise in the tenths, or None."""
    if air.temperature is None or air.dew_point is None:
        return None
    return max(round(air.temperature - air.dew_point, 6), 0.0)


def near_saturation_months(hours, inside):
    """Return {month: (n_hours, n_years, share at or below 1 K, share at or below 2.5 K)}."""
    table = {}
    for month, dated in months([(local, spread_k(air)) for local, air in hours], inside).items():
        n = len(dated)
        shares = [sum(v <= k for _, v in dated) / n if n else None for k in SPREADS_K]
        table[month] = (n, len({local.year for local, _ in dated}), *shares)
    return table


def check_margins(air, aircraft, runways):
    """Return {check: margin} of an hour, or None if it is unknown; METHODS 5.1, DESIGN 6.

    Beyond a table the margin is -1; a limit has -1 where it is passed, else 0.
    """
    if air.density_altitude is None:
        return None
    mass, policy = aircraft["mass"]["planning_kg"], aircraft["margins"]

    def figure(operation, name):
        place = mass, air.pressure_altitude, air.virtual_c
        return read_table(aircraft[operation], name, *place)

    roll, over50 = figure("takeoff", "ground_roll_m"), figure("takeoff", "distance_50ft_m")
    land, climb = figure("landing", "distance_50ft_m"), figure("climb", "rate_ft_min")
    takeoffs, landings = [], []
    for runway in runways:
        slope, surface = float(runway["slope_pct"]), runway["surface"]
        up = TAKEOFF_SURFACE[surface] * (1 + 0.05 * max(slope, 0)) * policy["takeoff_factor"]
        down = LANDING_SURFACE[surface] * (1 + 0.05 * max(-slope, 0)) * policy["landing_factor"]
        if runway["takeoff"] == "yes":
            pair = (length_m(runway, "tora"), roll), (length_m(runway, "toda"), over50)
            takeoffs.append([-1 if need is None else has / (need * up) - 1 for has, need in pair])
        if runway["landing"] == "yes":
            landings.append(-1 if land is None else length_m(runway, "lda") / (land * down) - 1)
    best = max(takeoffs, key=min)
    out = {"take-off ground roll": best[0], "take-off to 50 ft": best[1]}
    out["landing from 50 ft"] = max(landings)
    out["rate of climb"] = -1 if climb is None else climb / policy["climb_rate_ft_min"] - 1
    limits = aircraft.get("limits", {})
    if "temperature_c" in limits:
        out["temperature limit"] = -1 if air.temperature > limits["temperature_c"] else 0
    if "density_altitude_ft" in limits:
        passed = air.density_altitude > limits["density_altitude_ft"]
        out["density altitude limit"] = -1 if passed else 0
    return out


def check_months(hours, aircraft, runways, inside):
    """Return {(month, check): (n_hours, share that fails, P10 and P50 of the margin)}."""
    scored = [(local, check_margins(air, aircraft, runways)) for local, air in hours]
    checks = next(list(m) for _, m in scored if m is not None)
    table = {}
    for month, dated in months(scored, inside).items():
        for check in checks:
            ordered = sorted(margins[check] for _, margins in dated)
            share = sum(m < 0 for m in ordered) / len(ordered) if ordered else None
            points = [None, None]
            if ordered and not check.endswith("limit"):
                points = [type8(ordered, 0.1), type8(ordered, 0.5)]
            table[month, check] = (len(ordered), share, *points)
    return table


# ---- the study cases -------------------------------------------------------------------------

# field: study, reader, files, station elevation m, field elevation m, UTC offset h, years
CASES = {
    "PCAR": ("pernambuco", read_inmet, "inmet/dados_caruaru_*", 852, 852, -3, (2020, 2024)),
    "PGAR": ("pernambuco", read_inmet, "inmet/dados_garanhuns_*", 827.78, 827.78, -3, (2020, 2024)),
    "LORD": ("lakeside", read_isd_lite, "isd_lite/725300*.gz", 205, 673 * FT, -6, (2016, 2022)),
    "LLEB": ("lakeside", read_lcd, "lcd/*.csv", 168.9, 554 * FT, -5, (2016, 2022)),
    "HDEN": ("high_plains", read_epw, "epw/*.725650_*", 1650, 1650, -7, (1976, 2005)),
}


def case(field, shared):
    """Return (hours, years, runway rows, aircraft profiles) of one of CASES."""
    study, reader, files, station_m, field_m, offset, years = CASES[field]
    reports = []
    for path in sorted((shared / "stations").glob(files)):
        reports += reader(path, offset) if reader is read_lcd else reader(path)
    folder = shared / "studies" / study
    with (folder / "runways.csv").open(newline="") as handle:
        runways = [row for row in csv.DictReader(handle) if row["field"] == field]
    fleet = [tomllib.loads(p.read_text()) for p in sorted((folder / "aircraft").glob("*.toml"))]
    return field_hours(reports, station_m, field_m, offset, years), years, runways, fleet


def window(field, shared):
    """Return a function that tells of a local standard time whether its study's window has it."""
    study, *_, offset, _ = CASES[field]
    folder = shared / "studies" / study
    wanted = tomllib.loads((folder / "study.toml").read_text())["hours"]["window"]
    with (folder / "fields.csv").open(newline="") as handle:
        place = next(row for row in csv.DictReader(handle) if row["id"] == field)
    at = float(place["latitude"]), float(place["longitude"])

    def inside(local):
        if wanted == "daylight":
            return sun_elevation(local - timedelta(hours=offset), *at) >= -6
        return wanted == "all" or wanted[0] <= local.hour <= wanted[1]

    return inside


def main(output, shared):
    """Write distributions_FIELD.csv and shortfall_FIELD.csv for every case into a folder."""
    for field in CASES:
        hours, years, runways, fleet = case(field, shared)
        with (output / f"distributions_{field}.csv").open("w", newline="") as handle:
            out = csv.writer(handle)
            names = ("field", "variable", "month", "hour", "n_hours", "n_years", "coverage", "mean")
            out.writerow([*names, *(f"p{q:02d}" for q in PERCENTS)])
            for variable in VARIABLES:
                for (month, hour), figures in distributions(hours, variable, years).items():
                    out.writerow([field, variable, month, hour, *figures])
        with (output / f"shortfall_{field}.csv").open("w", newline="") as handle:
            out = csv.writer(handle)
            names = ("field", "aircraft", "month", "hour", "n_hours", "n_years", "shortfall")
            out.writerow([*names, "outside_table"])
            for aircraft in fleet:
                for key, figures in shortfall_cells(hours, aircraft, runways).items():
                    out.writerow([field, aircraft["id"], *key, *figures])


if __name__ == "__main__":
    main(Path(sys.argv[1]), Path(__file__).resolve().parents[2] / "shared")
