"""Stations: their rows, the files their globs find, their mappings, and distances."""

from __future__ import annotations

from pathlib import Path

import pytest
from pyproj import Geod
from study_maker import MAPPING, SYNTHETIC_STATIONS

from climarisk.archives import FORMATS
from climarisk.errors import InputError
from climarisk.stations import distance_km, read_stations

HEADER = "id,name,latitude,longitude,elevation_m,archive,files"


def stations(tmp_path: Path, content: str, source: str = "files"):
    path = tmp_path / "stations.csv"
    path.write_text(content, encoding="utf-8")
    return read_stations(path, source)


def one(tmp_path: Path, archive: str, files: str, **more: str):
    """The station of a row with `archive` and `files`, quoted, and the problems."""
    header = ",".join([HEADER, *more])
    cells = ",".join(["S,Station,46.5,11,500", archive, f'"{files}"', *more.values()])
    read, problems = stations(tmp_path, f"{header}\n{cells}\n")
    return (read[0] if read else None), problems


def touch(tmp_path: Path, *names: str) -> None:
    for name in names:
        path = tmp_path / name
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_text("x")


def test_a_row_becomes_a_station_with_its_files_sorted(tmp_path):
    touch(tmp_path, "data/b_2021.csv", "data/b_2020.csv", "data/c.csv")
    (tmp_path / "data" / "b_folder.csv").mkdir()
    station, problems = one(tmp_path, "inmet", "data/b_*.csv")
    assert problems == []
    assert [p.name for p in station.files] == ["b_2020.csv", "b_2021.csv"]
    assert (station.archive, station.timezone, station.elevation_verified) == ("inmet", None, False)


def test_the_order_of_the_files_is_not_that_of_the_disk(tmp_path, monkeypatch):
    touch(tmp_path, "b_1.csv", "b_2.csv")
    glob = Path.glob
    monkeypatch.setattr(Path, "glob", lambda *a: sorted(glob(*a), reverse=True))
    station, _ = one(tmp_path, "inmet", "b_*.csv")
    assert [p.name for p in station.files] == ["b_1.csv", "b_2.csv"]


@pytest.mark.parametrize(
    "pattern",
    [
        "data/b 1.csv",
        "data/b 1.*",
        "data/b ?.csv",
        "data/b [0-9].csv",
        "data/../data/b 1.csv",
        "*/b 1.csv",
        "**/b 1.csv",
    ],
)
def test_globs_and_names_with_spaces_find_the_file(tmp_path, pattern):
    touch(tmp_path, "data/b 1.csv")
    station, problems = one(tmp_path, "asos", pattern)
    assert problems == []
    assert [p.name for p in station.files] == ["b 1.csv"]


def test_a_glob_may_climb_and_may_be_absolute(tmp_path):
    touch(tmp_path, "data/b.csv")
    folder = tmp_path / "study [1]"
    folder.mkdir()
    for pattern in ("../data/*.csv", str(tmp_path / "data" / "*.csv")):
        station, problems = one(folder, "asos", pattern)
        assert problems == []
        assert [p.name for p in station.files] == ["b.csv"]


def test_a_file_name_with_brackets_is_found_as_it_is_written(tmp_path):
    touch(tmp_path, "data/b [2021].csv")
    _, problems = one(tmp_path, "asos", "data/b [2021].csv")
    assert problems == []


@pytest.mark.parametrize("pattern", ["data/z*.csv", "data", ".", "/", "data/[", "no*/", "a\0b*"])
def test_a_pattern_that_finds_nothing_is_told_with_the_line(tmp_path, pattern):
    touch(tmp_path, "data/b.csv")
    _, problems = one(tmp_path, "asos", pattern)
    assert len(problems) == 1
    assert "stations.csv, line 2: no file fits" in problems[0]


@pytest.mark.parametrize("pattern", ["**b.csv", "x" * 5000])
def test_a_pattern_that_pathlib_refuses_is_told(tmp_path, pattern):
    _, problems = one(tmp_path, "asos", pattern)
    assert len(problems) == 1


def test_an_unknown_archive_names_the_nearest_format(tmp_path):
    touch(tmp_path, "b.csv")
    _, problems = one(tmp_path, "isd_lite", "b.csv")
    assert len(problems) == 1
    assert "the archive 'isd_lite' is not known; did you mean 'isd-lite'?" in problems[0]


def test_the_formats_are_those_of_the_work_order():
    assert set(FORMATS) >= {"inmet", "epw", "tmy3", "isd-lite", "lcd", "asos", "ghcnh"}


def test_a_mapping_is_read_from_its_path(tmp_path):
    touch(tmp_path, "b.txt")
    (tmp_path / "maps").mkdir()
    (tmp_path / "maps" / "m.toml").write_text(MAPPING)
    station, problems = one(tmp_path, "maps/m.toml", "b.txt")
    assert problems == []
    assert station.archive == "mapping"
    assert station.mapping.delimiter == ";"
    assert station.mapping_path == tmp_path / "maps" / "m.toml"


@pytest.mark.parametrize(
    ("mapping", "sentence"),
    [
        (None, "there is no such file"),
        ("", "'time' is missing"),
        ("delimiter =", "not valid TOML"),
        (MAPPING.replace("delimiter", "delimeter"), "did you mean 'delimiter'?"),
        (MAPPING.replace("degC", "degX", 1), "unit is 'degX'; allowed: degC, degF, K"),
        (MAPPING.replace('zone = "UTC"\n', ""), "'zone' is missing"),
    ],
)
def test_a_bad_mapping_is_told_with_its_name(tmp_path, mapping, sentence):
    touch(tmp_path, "b.txt")
    if mapping is not None:
        (tmp_path / "m.toml").write_text(mapping)
    _, problems = one(tmp_path, "m.toml", "b.txt")
    assert len(problems) == 1
    assert problems[0].startswith(f"{tmp_path / 'stations.csv'}, line 2: ")
    assert "m.toml" in problems[0]
    assert sentence in problems[0]


def test_the_archive_columns_are_needed_for_files_only(tmp_path):
    read, problems = stations(tmp_path, SYNTHETIC_STATIONS, "synthetic")
    assert problems == []
    assert [(s.id, s.archive, s.files) for s in read] == [
        ("VALE", "synthetic", ()),
        ("PASS", "synthetic", ()),
    ]
    _, problems = stations(tmp_path, SYNTHETIC_STATIONS, "files")
    assert [p.split(": ")[1] for p in problems] == [
        "the column 'archive' is missing; add it.",
        "the column 'files' is missing; add it.",
    ]


def test_an_elevation_in_feet_is_read_as_metres(tmp_path):
    text = SYNTHETIC_STATIONS.replace("elevation_m", "elevation_ft").replace(",480", ",1000")
    read, problems = stations(tmp_path, text, "synthetic")
    assert problems == []
    # International foot 0.3048 m (1959 agreement).
    assert read[0].elevation_m == pytest.approx(304.8, abs=1e-9)


@pytest.mark.parametrize(
    ("old", "new", "sentence"),
    [
        ("elevation_m", "elevation", "the column 'elevation' is not known"),
        ("PASS,", "VALE,", "the station 'VALE' comes twice"),
        ("46.51", "91", "line 2: 'latitude' is '91'"),
        (",480", ",", "line 2: the elevation of 'VALE' is empty"),
        (",480", ",nan", "line 2: 'elevation_m' is 'nan'"),
        ("VALE,", '"VA LE",', "line 2: 'id' is 'VA LE'"),
        ("VALE,", '"VA\nLE",', "'id' is 'VA\\nLE'"),
        ("VALE,", ",", "line 2: 'id' is missing"),
    ],
)
def test_a_bad_station_is_one_sentence(tmp_path, old, new, sentence):
    _, problems = stations(tmp_path, SYNTHETIC_STATIONS.replace(old, new, 1), "synthetic")
    assert len(problems) == 1
    assert sentence in problems[0]


def test_zone_and_verified_elevation_are_read_and_checked(tmp_path):
    touch(tmp_path, "b.csv")
    station, problems = one(
        tmp_path, "asos", "b.csv", timezone="America/Denver", elevation_verified="yes"
    )
    assert problems == []
    assert (station.timezone, station.elevation_verified) == ("America/Denver", True)
    _, problems = one(tmp_path, "asos", "b.csv", timezone="Denver")
    assert "line 2: 'Denver' is not a time zone" in problems[0]
    _, problems = one(tmp_path, "asos", "b.csv", elevation_verified="maybe")
    assert "line 2: 'elevation_verified' is 'maybe'" in problems[0]


def test_an_absent_file_is_refused(tmp_path):
    with pytest.raises(InputError, match="there is no such file"):
        read_stations(tmp_path / "none.csv", "files")


def test_the_distance_along_a_meridian_degree_is_that_of_the_ellipsoid():
    # WGS 84 (NGA.STND.0036): a = 6378.137 km, 1/f = 298.257223563, e2 = f (2 - f).  At the
    # equator a degree of longitude is a pi/180 = 111.3195 km, one of latitude
    # a (1 - e2) pi/180 = 110.5743 km.
    assert distance_km(0, 0, 0, 1) == pytest.approx(111.3195, abs=5e-5)
    assert distance_km(-0.5, 0, 0.5, 0) == pytest.approx(110.5743, abs=1e-4)


def test_distances_cross_the_antimeridian_and_the_poles():
    assert distance_km(0, 179.5, 0, -179.5) == pytest.approx(111.3195, abs=5e-5)
    assert distance_km(90, 0, 90, 137) == pytest.approx(0.0, abs=1e-9)
    assert distance_km(46, 11, 47, 12) == distance_km(47, 12, 46, 11)
    spherical = Geod(a=6371.0088e3, f=0.0).inv(11, 46, 12, 47)[2] / 1000
    # Ellipsoid and mean sphere differ by at most 0.6 % (flattening 1/298 twice over).
    assert distance_km(46, 11, 47, 12) == pytest.approx(spherical, rel=0.006)
