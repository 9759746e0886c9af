"""What was read for a study, and how much of each station's record counts."""

import hashlib
import struct
from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from study_maker import make_study

from climarisk.evidence import (
    COVERAGE_COLUMNS,
    INPUT_COLUMNS,
    coverage_table,
    hours_digest,
    input_table,
    is_inside,
    is_runnable,
    study_inputs,
)
from climarisk.observations import COLUMNS
from climarisk.progress import quiet
from climarisk.results import STATION_USE_COLUMNS
from climarisk.study import read_study
from climarisk.weather import load_weather


@pytest.fixture(scope="module")
def files(tmp_path_factory):
    """A small study over archive files, with its weather."""
    made = make_study(tmp_path_factory.mktemp("evidence") / "study", "files")
    study = read_study(made.file)
    return made, study, load_weather(study, None, quiet)


@pytest.fixture(scope="module")
def invented(tmp_path_factory):
    """The same with invented weather."""
    made = make_study(tmp_path_factory.mktemp("evidence") / "study")
    study = read_study(made.file)
    return made, study, load_weather(study, None, quiet)


def use_of(*rows):
    """A table of stations used, of (field, station, km, height difference, share)."""
    table = pd.DataFrame(columns=STATION_USE_COLUMNS)
    for field, station, km, m, share in rows:
        table.loc[len(table)] = {
            **dict.fromkeys(STATION_USE_COLUMNS, ""),
            **{"field": field, "station": station, "distance_km": km},
            **{"height_difference_m": m, "share_of_hours": share},
        }
    return table


# ---- inputs ----------------------------------------------------------------------------------


def test_inputs_are_every_file_with_its_digest(files):
    made, study, weather = files
    inputs = study_inputs(study, weather)
    names = {
        *("study.toml", "fields.csv", "runways.csv", "aircraft/trainer.toml"),
        *("aircraft/tourer.toml", "stations.csv", "mapping.toml"),
        *("archive/vale_2021.csv", "archive/vale_2022.csv", "archive/pass.txt"),
    }
    assert {i.name for i in inputs} == names
    for item in inputs:
        data = (made.folder / item.name).read_bytes()
        assert item.sha256 == hashlib.sha256(data).hexdigest()
        assert item.n_bytes == len(data)
        assert item.data == (None if item.name.startswith("archive/") else data)


def test_input_table_says_what_is_copied(files):
    table = input_table(study_inputs(*files[1:]))
    assert list(table.columns) == INPUT_COLUMNS
    copied = table.set_index("file")["copied"]
    assert copied["study.toml"] == copied["mapping.toml"] == "yes"
    assert copied["archive/pass.txt"] == "no"
    what = table.set_index("file")["what"]
    assert what["archive/vale_2021.csv"] == "archive of station VALE"


def test_only_an_invented_study_runs_by_itself(files, invented):
    for (_, study, weather), runnable in ((files, False), (invented, True)):
        assert is_runnable(study, study_inputs(study, weather)) is runnable


def test_file_outside_the_study_is_told_and_not_copied(tmp_path):
    made = make_study(tmp_path / "study")
    made.write("../fields.csv", (made.folder / "fields.csv").read_bytes())
    made.change("study.toml", '"fields.csv"', '"../fields.csv"')
    study = read_study(made.file)
    inputs = study_inputs(study, load_weather(study, None, quiet))
    (outside,) = (i for i in inputs if i.name == "../fields.csv")
    assert outside.data is None
    assert outside.n_bytes == len((tmp_path / "fields.csv").read_bytes())
    assert not is_runnable(study, inputs)


def test_station_without_files_is_told_by_a_digest_of_its_hours(invented):
    _, study, weather = invented
    rows = {i.name: i for i in study_inputs(study, weather) if i.name.startswith("hours")}
    assert set(rows) == {"hours of VALE", "hours of PASS"}
    hours = weather.stations[0].hours
    # Eight bytes for the time and for each column of every hour.
    assert rows["hours of VALE"].n_bytes == 8 * len(hours) * (1 + len(COLUMNS))
    assert rows["hours of VALE"].sha256 == hours_digest(hours)[0]


def test_digest_of_hours_is_that_of_their_plain_numbers():
    index = pd.to_datetime(["2021-01-01 00:00", "2021-01-01 02:00"], utc=True).as_unit("s")
    table = pd.DataFrame({name: [1.5, np.nan] for name in COLUMNS}, index=index)
    seconds = 1_609_459_200  # 2021-01-01 00:00 UTC
    by_hand = struct.pack("<2q", seconds, seconds + 7200)
    by_hand += struct.pack("<2d", 1.5, float("nan")) * len(COLUMNS)
    assert hours_digest(table) == (hashlib.sha256(by_hand).hexdigest(), len(by_hand))


def test_digest_of_hours_sees_every_value_and_no_sign_of_a_gap(invented):
    hours = invented[2].stations[0].hours
    before = hours_digest(hours)
    for name in ("temperature_c", "wind_speed_kt"):
        other = hours.copy()
        other.iloc[5, other.columns.get_loc(name)] = 1.25
        assert hours_digest(other) != before
    assert hours_digest(hours.where(hours.notna(), -np.nan)) == before


@pytest.mark.parametrize("name", ["study.toml", "aircraft/a b.toml", "a/b/c.csv", "..a", "é.csv"])
def test_plain_names_stay_inside(name):
    assert is_inside(name)


@pytest.mark.parametrize(
    "name",
    *[
        ["", ".", "..", "../a", "a/../b", "a/..", "/a", "//a", "a//b", "a/", "./a", "a\\b"]
        + ["C:a", "..\\a", "a\0b", "a\nb"]
    ],
)
def test_names_that_leave_are_told(name):
    assert not is_inside(name)


# ---- coverage --------------------------------------------------------------------------------


def test_coverage_counts_the_hours_of_a_record(files):
    _, study, weather = files
    vale, other = weather.stations
    hours = vale.hours.copy()
    # February 2021 without an hour but its first, and July 2022 without its first six days: the
    # station's standard time is one hour ahead of UTC.
    hours.loc["2021-02", "temperature_c"] = np.nan
    hours.loc["2022-07-01":"2022-07-06", "temperature_c"] = np.nan
    broken = replace(weather, stations=(replace(vale, hours=hours), other))
    table = coverage_table(study, broken, use_of())
    assert list(table.columns) == COVERAGE_COLUMNS
    row = table.set_index("station").loc["VALE"]
    start = pd.Timestamp("2021-01-01", tz="UTC") - pd.Timedelta(hours=1)
    end = pd.Timestamp("2022-12-31 23:00", tz="UTC") - pd.Timedelta(hours=1)
    inside = hours.loc[start:end]
    assert row["hours"] == 2 * 365 * 24
    assert row["with_temperature"] == inside["temperature_c"].notna().sum()
    assert row["coverage"] == row["with_temperature"] / row["hours"]
    assert (row["first"], row["last"]) == ("2021-01-01", "2022-12-31")
    # The rule: 80 % of a month's days; 25 of 31 days are enough, for every hour of the day.
    assert row["months"] == 24
    assert row["cells"] == 24 * 24
    assert row["full_months"] == 23
    assert row["counting_cells"] == 23 * 24
    # WMO-No. 1203 (2017), from memory: eleven missing days, or five in a row.
    assert row["patchy_months"] == 2
    assert row["pressure_kind"] == "QNH"


def test_coverage_names_the_nearest_field(files):
    _, study, weather = files
    use = use_of(
        ("MID", "VALE", 7.5, 620.0, 0.4),
        ("LOW", "VALE", 1.2, 20.0, 1.0),
        ("TOP", "PASS", 3.0, 9, 0),
    )
    table = coverage_table(study, weather, use).set_index("station")
    vale = table.loc["VALE", ["fields", "nearest_field", "nearest_km", "nearest_m"]]
    assert list(vale) == [2, "LOW", 1.2, 20.0]
    assert list(table.loc["PASS", ["fields", "nearest_field"]]) == [0, "TOP"]
    nothing = coverage_table(study, weather, use_of()).set_index("station").loc["VALE"]
    assert (nothing["fields"], nothing["nearest_field"]) == (0, "")


def test_coverage_tells_a_station_whose_elevation_is_not_trusted(files):
    _, study, weather = files
    vale, other = weather.stations
    doubted = replace(weather, stations=(replace(vale, elevation_trusted=False), other))
    table = coverage_table(study, doubted, use_of()).set_index("station")
    assert list(table["elevation_trusted"]) == ["no", "yes"]
    assert table.loc["VALE", "pressure_kind"] == "none"
    assert table.loc["VALE", "with_pressure"] == 0
