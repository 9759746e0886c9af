"""A small, complete, invented study that a test writes to disk and spoils in one place."""

from __future__ import annotations

import datetime as dt
import math
from dataclasses import dataclass
from functools import lru_cache
from pathlib import Path

import numpy as np

FIRST_YEAR, LAST_YEAR = 2021, 2022

#: Files of a run that are there only where scenarios are asked for, or the study has a schedule.
ONLY_WHERE_ASKED = {
    "scenarios.csv",
    "schedule.html",
    "schedule_flights.csv",
    "schedule_seasons.csv",
    "schedule_days.csv",
}

FIELDS = """\
id,name,latitude,longitude,elevation_m,timezone,stations
LOW,Low meadow (invented),46.50,11.00,500,Europe/Rome,VALE
MID,Middle strip (invented),46.55,11.10,1100,,
TOP,Top strip (invented),46.60,11.20,1700,,
"""
RUNWAYS = """\
field,runway,heading_deg,tora_m,toda_m,asda_m,lda_m,length_m,slope_pct,surface,takeoff,landing
LOW,09,90,800,850,820,780,,0,paved,yes,yes
LOW,27,270,800,850,820,780,,0,paved,yes,yes
MID,03,30,,,,,600,1.5,grass,yes,yes
MID,21,210,,,,,600,-1.5,grass,yes,yes
TOP,12,120,,,,,420,8,gravel,no,yes
TOP,30,300,,,,,420,-8,gravel,yes,no
"""
SYNTHETIC_STATIONS = """\
id,name,latitude,longitude,elevation_m
VALE,Vale (invented),46.51,11.02,480
PASS,Pass (invented),46.58,11.18,1500
"""
FILE_STATIONS = """\
id,name,latitude,longitude,elevation_m,archive,files
VALE,Vale (invented),46.51,11.02,480,asos,archive/vale_*.csv
PASS,Pass (invented),46.58,11.18,1500,mapping.toml,archive/pass.txt
"""
MAPPING = """\
source = "invented weather"
delimiter = ";"
missing = [-9999]
[time]
columns = ["day", "clock"]
format = "%Y-%m-%d %H:%M"
zone = "UTC"
[columns.temperature]
column = "air"
unit = "degC"
[columns.dew_point]
column = "dew"
unit = "degC"
[columns.station_pressure]
column = "pressure"
unit = "hPa"
"""
TABLE_AIRCRAFT = """\
id = "trainer"
name = "Trainer (invented)"
source = "invented"
[engine]
aspiration = "natural"
carburettor = true
[mass]
maximum_kg = 760
planning_kg = 740
empty_kg = 520
[[takeoff]]
mass_kg = 680
pressure_altitude_ft = [0, 4000, 8000]
temperature_c = [-10, 15, 40]
ground_roll_m = [[160, 190, 235], [220, 270, 330], [310, 380, 465]]
distance_50ft_m = [[295, 375, 475], [440, 570, 720], [675, 865, 1095]]
[[takeoff]]
mass_kg = 760
pressure_altitude_ft = [0, 4000, 8000]
temperature_c = [-10, 15, 40]
ground_roll_m = [[195, 240, 295], [275, 335, 410], [390, 475, 580]]
distance_50ft_m = [[365, 470, 595], [550, 710, 895], [840, 1085, nan]]
[[landing]]
mass_kg = 760
pressure_altitude_ft = [0, 4000, 8000]
temperature_c = [-10, 15, 40]
distance_50ft_m = [[360, 410, 465], [450, 510, 580], [560, 640, 730]]
[[climb]]
mass_kg = 760
speed_kt = 66
pressure_altitude_ft = [0, 4000, 8000]
temperature_c = [-10, 15, 40]
rate_ft_min = [[880, 715, 560], [610, 455, 310], [350, 190, 50]]
[limits]
temperature_c = 45
[margins]
takeoff_factor = 1.33
landing_factor = 1.43
climb_rate_ft_min = 300
"""
SCALED_AIRCRAFT = """\
id = "tourer"
name = "Tourer without tables (invented)"
source = "invented"
[engine]
aspiration = "turbocharged"
carburettor = false
[mass]
maximum_kg = 1200
planning_kg = 1100
empty_kg = 750
[sea_level]
mass_kg = 1200
takeoff_ground_roll_m = 250
takeoff_distance_50ft_m = 420
landing_distance_50ft_m = 400
"""


def study_toml(source: str, first_year: int = FIRST_YEAR, last_year: int = LAST_YEAR) -> str:
    """Text of the study file."""
    return f"""\
title = "Small study (invented)"
fields = "fields.csv"
runways = "runways.csv"
aircraft = ["aircraft/*.toml"]
[period]
first_year = {first_year}
last_year = {last_year}
[weather]
source = "{source}"
stations = "stations.csv"
radius_km = 60
[hours]
window = [6, 20]
[seasons]
"flying summer" = ["06-15", "09-15"]
"deep winter" = ["12-15", "02-10"]
[risk]
bands = [0.01, 0.05, 0.20]
confidence = 0.90
"""


@dataclass(frozen=True)
class StudyFolder:
    """A study on disk."""

    folder: Path

    @property
    def file(self) -> Path:
        """The study file."""
        return self.folder / "study.toml"

    def write(self, name: str, content: str | bytes) -> StudyFolder:
        """Write a file of the study anew."""
        path = self.folder / name
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_bytes(content.encode() if isinstance(content, str) else content)
        return self

    def change(self, name: str, old: str, new: str) -> StudyFolder:
        """Replace the first occurrence of a text that must be there."""
        text = (self.folder / name).read_bytes().decode()
        assert old in text, f"{old!r} is not in {name}"
        return self.write(name, text.replace(old, new, 1))


def make_study(folder: Path, source: str = "synthetic") -> StudyFolder:
    """Write a valid study: 2 years, 3 fields, 2 stations, 2 aircraft."""
    study = StudyFolder(folder)
    study.write("study.toml", study_toml(source))
    study.write("fields.csv", FIELDS).write("runways.csv", RUNWAYS)
    study.write("aircraft/trainer.toml", TABLE_AIRCRAFT)
    study.write("aircraft/tourer.toml", SCALED_AIRCRAFT)
    if source == "synthetic":
        return study.write("stations.csv", SYNTHETIC_STATIONS)
    study.write("stations.csv", FILE_STATIONS).write("mapping.toml", MAPPING)
    for year in range(FIRST_YEAR, LAST_YEAR + 1):
        study.write(f"archive/vale_{year}.csv", asos_text(year, year))
    return study.write("archive/pass.txt", mapped_text(FIRST_YEAR, LAST_YEAR))


@lru_cache(maxsize=8)
def _weather(first_year: int, last_year: int, elevation_m: float) -> list[tuple]:
    """Invented hours: (instant, air temperature, dew point, station pressure), a plain formula."""
    draw = np.random.default_rng(int(elevation_m) + first_year)
    start = dt.datetime(first_year, 1, 1)
    hours = (dt.datetime(last_year + 1, 1, 1) - start).days * 24
    noise = draw.normal(size=(3, hours))
    # Scale height of a 15 degC atmosphere: R T / g = 287.05 x 288.15 / 9.80665 = 8435 m.
    base_hpa = 1015.0 * math.exp(-elevation_m / 8435.0)
    rows = []
    for i in range(hours):
        season = math.cos(2 * math.pi * (i / 24 - 200) / 365.25)
        day = math.cos(2 * math.pi * (i % 24 - 14) / 24)
        t = 14 - 0.006 * elevation_m + 10 * season + 5 * day + 0.5 * noise[0, i]
        spread = 6 + 3 * day + abs(noise[1, i])
        pressure = base_hpa + 4 * math.sin(i / 60) + 0.2 * noise[2, i]
        rows.append((start + dt.timedelta(hours=i), t, t - spread, pressure))
    return rows


@lru_cache(maxsize=8)
def asos_text(first_year: int, last_year: int) -> str:
    """The low station's archive: airport reports with an altimeter setting, UTC."""
    lines = ["station,valid,tmpc,dwpc,alti"]
    for when, t, dew, pressure in _weather(first_year, last_year, 480.0):
        # Altimeter setting: the pressure raised by the factor of a 480 m ISA column, in inHg.
        qnh = pressure * (1 - 0.0065 * 480 / 288.15) ** -5.25588 / 33.8639
        lines.append(f"VALE,{when:%Y-%m-%d %H:%M},{t:.1f},{dew:.1f},{qnh:.3f}")
    return "\n".join(lines) + "\n"


@lru_cache(maxsize=8)
def mapped_text(first_year: int, last_year: int) -> str:
    """The high station's archive: delimited text that needs the column mapping."""
    lines = ["day;clock;air;dew;pressure"]
    for when, t, dew, pressure in _weather(first_year, last_year, 1500.0):
        lines.append(f"{when:%Y-%m-%d;%H:%M};{t:.1f};{dew:.1f};{pressure:.1f}")
    return "\n".join(lines) + "\n"
