"""Shortfall shares worked out again by plain loops that share no code with the program."""

import calendar
import csv
import datetime as dt
import math
import random
import tomllib

import independent
import pytest
from study_maker import StudyFolder, make_study

from climarisk.archives.synthetic import SyntheticStation, generate
from climarisk.pipeline import run_study

# ---- an invented record on one strip ---------------------------------------------------------

STUDY = """\
title = "Worked by hand"
fields = "fields.csv"
runways = "runways.csv"
aircraft = ["aircraft.toml"]
[period]
first_year = 2018
last_year = 2020
[weather]
stations = "stations.csv"
[hours]
window = [9, 17]
[seasons]
"hot" = ["06-20", "07-10"]
"""
FIELDS = """\
id,name,latitude,longitude,elevation_m,timezone,stations
HAND,Hand strip,40,-105,1600,Etc/GMT+7,HAND
"""
STATIONS = """\
id,name,latitude,longitude,elevation_m,archive,files
HAND,Hand,40,-105,1600,mapping.toml,hours.txt
"""
RUNWAYS = """\
field,runway,heading_deg,tora_m,toda_m,asda_m,lda_m,slope_pct,surface,takeoff,landing
HAND,18,180,690,725,690,690,1,grass,yes,yes
HAND,36,360,690,690,690,660,-1,grass,yes,no
"""
MAPPING = """\
source = "invented"
delimiter = ";"
missing = [-999]
[time]
columns = ["time"]
format = "%Y-%m-%d %H"
zone = "UTC"
[columns.temperature]
column = "t"
unit = "degC"
[columns.dew_point]
column = "td"
unit = "degC"
[columns.station_pressure]
column = "p"
unit = "hPa"
"""
AIRCRAFT = """\
id = "hand"
name = "Hand (invented)"
source = "invented"
[engine]
aspiration = "natural"
carburettor = true
[mass]
maximum_kg = 800
planning_kg = 750
empty_kg = 500
[[takeoff]]
mass_kg = 700
pressure_altitude_ft = [4000, 7000]
temperature_c = [0, 20, 32]
ground_roll_m = [[180, 210, 235], [240, 280, 310]]
distance_50ft_m = [[330, 390, 430], [450, 530, 590]]
[[takeoff]]
mass_kg = 800
pressure_altitude_ft = [4000, 7000]
temperature_c = [0, 20, 32]
ground_roll_m = [[220, 255, 285], [290, 340, 380]]
distance_50ft_m = [[400, 470, 520], [540, 640, 715]]
[[landing]]
mass_kg = 800
pressure_altitude_ft = [4000, 7000]
temperature_c = [0, 20, 32]
distance_50ft_m = [[380, 405, 420], [420, 450, 470]]
[[climb]]
mass_kg = 800
pressure_altitude_ft = [4000, 7000]
temperature_c = [0, 20, 32]
rate_ft_min = [[620, 520, 460], [430, 330, 270]]
[limits]
density_altitude_ft = 8600
[margins]
takeoff_factor = 1.2
landing_factor = 1.3
climb_rate_ft_min = 350
"""
HAND = tomllib.loads(AIRCRAFT)


def invented_record():
    """Return [(UTC time, degC, degC, hPa)] of three summers with gaps, to a tenth."""
    draw = random.Random(17)
    rows = []
    for year in (2018, 2019, 2020):
        start = dt.datetime(year, 6, 1)
        for i in range(24 * 61):
            when = start + dt.timedelta(hours=i)
            if draw.random() < 0.06 or (year == 2019 and when.day > 20 and when.month == 7):
                continue
            sun = math.cos(2 * math.pi * ((when.hour - 7) % 24 - 15) / 24)
            t = round(19 + 9 * sun + draw.gauss(0, 3), 1)
            td = -999 if draw.random() < 0.02 else round(min(t, 6 + draw.gauss(0, 4)), 1)
            p = -999 if draw.random() < 0.02 else round(836 + draw.gauss(0, 3), 1)
            rows.append((when, t, td, p))
    return rows


@pytest.fixture(scope="module")
def record():
    return invented_record()


@pytest.fixture(scope="module")
def result(tmp_path_factory, record):
    study = StudyFolder(tmp_path_factory.mktemp("hand"))
    for name, text in (
        ("study.toml", STUDY),
        ("fields.csv", FIELDS),
        ("stations.csv", STATIONS),
        ("runways.csv", RUNWAYS),
        ("mapping.toml", MAPPING),
        ("aircraft.toml", AIRCRAFT),
    ):
        study.write(name, text)
    lines = [f"{when:%Y-%m-%d %H};{t};{td};{p}" for when, t, td, p in record]
    study.write("hours.txt", "\n".join(["time;t;td;p", *lines]) + "\n")
    return run_study(study.file)


def between(x, x0, x1, y0, y1):
    return y0 + (x - x0) / (x1 - x0) * (y1 - y0)


def look_up(grid, pa, t):
    """Return a figure of a 2 x 3 table, or None beyond it; colder and lower get no credit."""
    if pa > 7000 or t > 32:
        return None
    pa, t = max(pa, 4000), max(t, 0)
    left, t0, t1 = (0, 0, 20) if t < 20 else (1, 20, 32)
    low = between(t, t0, t1, grid[0][left], grid[0][left + 1])
    high = between(t, t0, t1, grid[1][left], grid[1][left + 1])
    return between(pa, 4000, 7000, low, high)


def falls_short(t, td, p):
    """Return whether an hour falls short and whether it is outside the table."""
    # Buck 1981 with its enhancement factor; ISA of ICAO Doc 7488/3.
    e = (1.0007 + 3.46e-6 * p) * 6.1121 * math.exp(17.502 * td / (240.97 + td))
    virtual = (t + 273.15) / (1 - 0.37802 * e / p)
    pa = 288.15 / 0.0065 / 0.3048 * (1 - (p / 1013.25) ** (287.05287 * 0.0065 / 9.80665))
    sigma = (p / 1013.25) / (virtual / 288.15)
    exponent = 1 / (9.80665 / (287.05287 * 0.0065) - 1)
    da = 288.15 / 0.0065 / 0.3048 * (1 - sigma**exponent)
    figures = []
    for name in ("ground_roll_m", "distance_50ft_m"):
        light, heavy = (look_up(b[name], pa, virtual - 273.15) for b in HAND["takeoff"])
        figures.append(None if light is None else (light + heavy) / 2)  # 750 between 700 and 800
    figures.append(look_up(HAND["landing"][0]["distance_50ft_m"], pa, virtual - 273.15))
    figures.append(look_up(HAND["climb"][0]["rate_ft_min"], pa, virtual - 273.15))
    if None in figures:
        return True, True
    roll, over, land, climb = figures
    # Grass 1.20 and 1.15; uphill take-off and downhill landing 5 % per 1 %; policy 1.2 and 1.3.
    uphill = roll * 1.2 * 1.05 * 1.2 <= 690 and over * 1.2 * 1.05 * 1.2 <= 725
    downhill = roll * 1.2 * 1.2 <= 690 and over * 1.2 * 1.2 <= 690
    lands = land * 1.15 * 1.3 <= 690  # direction 18 lands uphill, 36 may not land
    return not ((uphill or downhill) and lands and climb >= 350 and da <= 8600), False


def scored_hours(record):
    """Return {(year, month, hour): [(day, short, outside)]} of the cells that count."""
    cells = {}
    for when, t, td, p in record:
        local = when - dt.timedelta(hours=7)
        if td != -999 and p != -999 and 2018 <= local.year <= 2020:
            cell = cells.setdefault((local.year, local.month, local.hour), [])
            cell.append((local.date(), *falls_short(t, td, p)))
    return {
        (y, m, h): hours
        for (y, m, h), hours in cells.items()
        if len(hours) >= 0.8 * calendar.monthrange(y, m)[1]
    }


def summed_up(groups):
    """Return {key: (hours, years, shortfall, outside, days affected)} of {key: [(year, hour)]}."""
    return {
        key: (
            len(hours),
            len({year for year, _ in hours}),
            sum(short for _, (_, short, _) in hours) / len(hours),
            sum(outside for _, (_, _, outside) in hours) / len(hours),
            len({day for _, (day, short, _) in hours if short})
            / len({day for _, (day, _, _) in hours}),
        )
        for key, hours in groups.items()
    }


def rows(table, *keys):
    columns = ["n_hours", "n_years", "shortfall", "outside_table", "days_affected"]
    return {
        tuple(r[k] for k in keys): tuple(r[c] for c in columns)
        for r in table[table["n_hours"] > 0].to_dict("records")
    }


def grouped(cells, key):
    groups = {}
    for (year, month, hour), hours in cells.items():
        for one in hours:
            name = key(month, hour, one[0])
            if name is not None:
                groups.setdefault(name, []).append((year, one))
    return groups


def test_hourly_shares_equal_the_plain_loop(result, record):
    expected = summed_up(grouped(scored_hours(record), lambda month, hour, day: (month, hour)))
    assert rows(result.risk_hourly, "month", "hour") == expected
    shares = [share for _, _, share, _, _ in expected.values()]
    outside = [share for _, _, _, share, _ in expected.values()]
    # The record is made to exercise every verdict.
    assert min(shares) < 0.1 and max(shares) > 0.9 and max(outside) > 0.1
    assert {years for _, years, *_ in expected.values()} == {1, 2, 3}


def test_monthly_shares_equal_the_plain_loop(result, record):
    cells = scored_hours(record)
    expected = summed_up(
        grouped(cells, lambda month, hour, day: (month,) if 9 <= hour <= 17 else None)
    )
    assert rows(result.risk_monthly, "month") == expected


def test_seasonal_shares_equal_the_plain_loop(result, record):
    def season(month, hour, day):
        inside = (6, 20) <= (day.month, day.day) <= (7, 10) and 9 <= hour <= 17
        return ("hot",) if inside else None

    expected = summed_up(grouped(scored_hours(record), season))
    assert rows(result.risk_seasonal, "season") == expected


# ---- the generator's weather, all year -------------------------------------------------------


def reports(hours):
    """Return a station's hours as the raw rows of the second computation."""

    def known(value):
        return None if math.isnan(value) else value

    return [
        independent.Row(
            when.to_pydatetime().replace(tzinfo=None),
            known(row.temperature_c),
            known(row.dew_point_c),
            None,
            known(row.station_pressure_hpa),
        )
        for when, row in zip(hours.index, hours.itertuples(), strict=True)
    ]


def test_shares_on_synthetic_weather_equal_the_second_computation(tmp_path):
    # Field LOW of the small study, put at its station's elevation and on UTC+1 all year.
    study = make_study(tmp_path / "study").change("fields.csv", "11.00,500", "11.00,480")
    result = run_study(study.file)
    vale = SyntheticStation("VALE", "Vale (invented)", 46.51, 11.02, 480.0, 1.0)
    hours = generate([vale], 2021, 2022, 0)["VALE"].hours
    aired = independent.field_hours(reports(hours), 480.0, 480.0, 1, (2021, 2022))
    with (study.folder / "runways.csv").open(newline="") as stream:
        runways = [r for r in csv.DictReader(stream) if r["field"] == "LOW"]
    trainer = tomllib.loads((study.folder / "aircraft" / "trainer.toml").read_text())
    expected = independent.shortfall_cells(aired, trainer, runways)
    own = result.risk_hourly
    own = own[(own["field"] == "LOW") & (own["aircraft"] == "trainer")]
    columns = ["n_hours", "n_years", "shortfall", "outside_table"]
    got = {(r["month"], r["hour"]): tuple(r[c] for c in columns) for r in own.to_dict("records")}
    assert got == expected
    assert len({share for _, _, share, _ in expected.values()}) > 10
