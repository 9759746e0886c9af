"""The online archive, read for real through its package from a stand-in on the loopback address.

The package reads its addresses from the environment at import, so the fetching happens in
one separate process for all tests of this module; each test looks at a part of its answer.
Rows are made up; what columns and layers mean follows the package, version 2.1.5.
"""

from __future__ import annotations

import importlib.util
import json
import os
import subprocess
import sys
from pathlib import Path

import pytest

from climarisk.archives.meteostat import find_stations
from climarisk.errors import InputError

ROOT = Path(__file__).parents[2]
_spec = importlib.util.spec_from_file_location(
    "standin_server", Path(__file__).with_name("standin_server.py")
)
standin_server = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(standin_server)
HEADER, packed, year_text = (
    standin_server.HEADER,
    standin_server.packed,
    standin_server.year_text,
)

# A float does not go through JSON as NaN cleanly, hence the text of each table.
DRIVER = """
import glob, json, os, sys, tempfile
from climarisk.archives import meteostat
from climarisk.errors import ClimariskError

meteostat._BACKOFF_S = (0.01, 0.01)

def attempt(call):
    try:
        return call()
    except ClimariskError as error:
        return {"error": type(error).__name__, "text": str(error)}

def shown(file):
    if file is None or isinstance(file, dict):
        return file
    return {
        "hours": file.hours.reset_index().to_json(orient="split", date_format="iso"),
        "notes": [list(n) for n in file.notes],
        "source": file.source,
        "station": [file.station_id, file.station_name, file.elevation_m],
    }

out = {"years": {}, "stations": {}}
out["around"] = attempt(lambda: [vars(s) for s in meteostat.find_stations(46.0, 10.0, 60.0, 5)])
out["again"] = attempt(lambda: [s.id for s in meteostat.find_stations(46.0, 10.0, 60.0, 1)])
folder = meteostat._own_folder()
out["mode"] = oct(folder.stat().st_mode & 0o777)
out["folder"] = str(folder)
for year in json.loads(sys.argv[1]):
    wait = 0.5 if year == 2010 else 20.0
    out["years"][year] = shown(attempt(lambda: meteostat.fetch_year("YEARS", year, wait)))
for bad in ("../etc", "", "a/b", "{x}"):
    out["stations"][bad] = attempt(lambda: meteostat.fetch_year(bad, 2020))
seen = []
place = meteostat.OnlineStation("GOOD1", "Good place", 46.0, 10.0, 300.0, None)
got, missing, failed = meteostat.fetch_station(
    place, range(2016, 2024), on_year=lambda year, what, hours: seen.append([year, what])
)
out["station"] = {
    "got": {y: shown(f) for y, f in got.items()}, "missing": missing, "failed": failed, "seen": seen
}
down = meteostat.OnlineStation("DOWN1", "Out of order", 46.0, 10.0, 300.0, None)
got, missing, failed = meteostat.fetch_station(down, range(2001, 2007))
out["down"] = {"got": len(got), "missing": missing, "failed": failed}
out["left"] = [str(p) for p in folder.rglob("*")]
json.dump(out, sys.stdout)
"""

MIXED = """\
2009,7,1,0,10.0,isd_lite,60,isd_lite,270,isd_lite,10.0,isd_lite,1013.2,isd_lite,,
2009,7,1,1,11.0,metar,61,dwd_mosmix,280,metar,20.0,metar,1019.0,metar,,
2009,7,1,2,12.0,metno_forecast,62,metno_forecast,,,,,1012.0,metno_forecast,,
2009,7,1,3,13.0,somewhere_new,63,somewhere_new,,,,,1011.0,somewhere_new,,
2009,7,1,5,15.0,,65,,,,,,,,,
2009,7,1,4,14.0,dwd_hourly,64,isd_lite,,,,,,,,
"""
RAIN_ONLY = "year,month,day,hour,prcp,prcp_source\n2004,1,1,0,0.2,isd_lite\n"
DEW = (
    "year,month,day,hour,temp,temp_source,dwpt,dwpt_source\n2003,1,1,0,5.0,isd_lite,2.5,isd_lite\n"
)
TWICE = year_text(2002, days=1) + year_text(2002, days=1).split("\n", 1)[1]


def answers(url, port):
    """Return what the stand-in says for each path."""
    good = packed(year_text(2020, days=300))
    years = {
        2021: packed(year_text(2021)),
        2017: (500, b"out of order"),
        2016: good[: len(good) // 2],
        2015: packed(year_text(2014)),
        2014: (302, f"http://localhost:{port}/elsewhere"),
        2013: [(503, b"busy"), (503, b"busy"), packed(year_text(2013))],
        2012: b"<html>log in first</html>",
        2011: ("cut", packed(year_text(2011))),
        2010: ("hang", b""),
        2009: packed(HEADER + "\n" + MIXED),
        2008: packed(HEADER + "\n"),
        2007: (403, b"not for you"),
        2006: packed("a,b\n1,2\n"),
        2005: packed(""),
        2004: packed(RAIN_ONLY),
        2003: packed(DEW),
        2002: packed(TWICE),
        2001: packed(year_text(2001, source="dwd_mosmix")),
    }
    paths = {f"/hourly/{year}/YEARS.csv.gz": answer for year, answer in years.items()}
    for year in (2019, 2020, 2021, 2022):
        paths[f"/hourly/{year}/GOOD1.csv.gz"] = packed(year_text(year))
    paths["/hourly/2017/GOOD1.csv.gz"] = (500, b"out of order")
    paths["/hourly/2023/GOOD1.csv.gz"] = good[:200]
    for year in range(2001, 2007):
        paths[f"/hourly/{year}/DOWN1.csv.gz"] = (500, b"out of order")
    return paths


YEARS = [2021, 2018, *range(2017, 2000, -1)]


def run(code, argument, server, folder):
    """Run code in a process whose only archive is the stand-in; return its result."""
    home, scratch = folder / "home", folder / "tmp"
    home.mkdir()
    scratch.mkdir()
    environment = {
        "HOME": str(home),
        "TMPDIR": str(scratch),
        "PATH": os.environ.get("PATH", ""),
        "PYTHONPATH": str(ROOT),
        "MS_HOURLY_ENDPOINT": server.url + "/hourly/{year}/{station}.csv.gz",
        "MS_STATIONS_DB_ENDPOINTS": json.dumps([server.url + "/stations.db"]),
        "MS_NETWORK_MAX_RETRIES": "0",
        "no_proxy": "*",
    }
    done = subprocess.run(
        [sys.executable, "-W", "error", "-c", code, argument],
        env=environment,
        capture_output=True,
        text=True,
        timeout=90,
        cwd=folder,
    )
    assert done.returncode == 0, done.stderr
    return json.loads(done.stdout)


@pytest.fixture(scope="module")
def fetched(tmp_path_factory):
    folder = tmp_path_factory.mktemp("online")
    rows = [
        ("NEAR1", "CH", None, 46.1, 10.0, 400, "Europe/Zurich", "Near"),
        ("NOELE", "CH", None, 46.0, 10.1, None, "Europe/Zurich", "No elevation"),
        ("AWAY1", "CH", None, 46.4, 10.0, 900, None, "Farther"),
        ("FAR01", "CH", None, 48.0, 10.0, 900, "Europe/Zurich", "Too far"),
    ]
    with standin_server.StandIn() as server:
        server.answers = answers(server.url, server.port)
        server.answers["/stations.db"] = standin_server.stations_database(folder / "s.db", rows)
        result = run(DRIVER, json.dumps(YEARS), server, folder)
        result["requests"] = dict(server.requests)
        result["hosts"] = set(server.hosts)
        result["own_host"] = f"127.0.0.1:{server.port}"
        result["left_behind"] = sorted(str(p.relative_to(folder)) for p in folder.rglob("*"))
        yield result


def hours(shown):
    """Return the rows of a table as dictionaries."""
    table = json.loads(shown["hours"])
    return [dict(zip(table["columns"], row, strict=True)) for row in table["data"]]


def requests_of(fetched, year, station="YEARS"):
    """Return how often the server was asked for a station-year."""
    return fetched["requests"].get(f"/hourly/{year}/{station}.csv.gz", 0)


def test_fetch_year_good_file_gives_the_canonical_hours(fetched):
    rows = hours(fetched["years"]["2021"])
    assert len(rows) == 48
    assert rows[5]["time"].startswith("2021-01-01T05:00:00") and rows[5]["time"].endswith("Z")
    assert rows[5]["temperature_c"] == 5.0
    assert rows[5]["relative_humidity_pct"] == 60.0
    assert rows[5]["wind_direction_deg"] == 270.0
    # 1 kt = 1.852 km/h exactly (nautical mile 1852 m).
    assert rows[5]["wind_speed_kt"] == pytest.approx(10.0, abs=1e-9)
    assert requests_of(fetched, 2021) == 1


def test_fetch_year_pressure_stays_sea_level_pressure(fetched):
    row = hours(fetched["years"]["2021"])[0]
    assert row["sea_level_pressure_hpa"] == 1013.2
    assert row["station_pressure_hpa"] is None and row["qnh_hpa"] is None
    assert "sea-level-pressure" in [note[1] for note in fetched["years"]["2021"]["notes"]]


def test_fetch_year_states_attribution_licence_and_original_source(fetched):
    source = fetched["years"]["2021"]["source"]
    assert "provided by Meteostat" in source and "CC BY 4.0" in source
    assert "NOAA ISD Lite" in source


def test_fetch_year_without_a_file_is_none_and_asked_once(fetched):
    assert fetched["years"]["2018"] is None
    assert requests_of(fetched, 2018) == 1


@pytest.mark.parametrize(
    ("year", "reason", "requests"),
    [
        (2017, "the server answered 500, attempt 3", 3),
        (2016, "EOFError", 3),
        (2015, "48 of 48 rows are of another year", 1),
        (2014, "sends on to another one, http://localhost", 1),
        (2012, "BadGzipFile", 3),
        (2011, "IncompleteRead", 3),
        (2010, "timed out", 3),
        (2008, "without a single value", 1),
        (2007, "the server answered 403, attempt 1", 1),
        (2006, "attempt 3", 3),
        (2005, "EmptyDataError", 3),
        (2002, "duplicate entries", 3),
    ],
)
def test_fetch_year_failure_is_an_error_never_an_empty_year(fetched, year, reason, requests):
    answer = fetched["years"][str(year)]
    assert answer["error"] == "FetchError"
    assert f"online station YEARS, {year}: the year was not received" in answer["text"]
    assert reason in answer["text"]
    assert requests_of(fetched, year) == requests


def test_fetch_year_recovers_when_a_later_attempt_succeeds(fetched):
    assert len(hours(fetched["years"]["2013"])) == 48
    assert requests_of(fetched, 2013) == 3


def test_fetch_year_leaves_out_model_and_unknown_values_and_says_so(fetched):
    answer = fetched["years"]["2009"]
    rows = {row["time"][11:13]: row for row in hours(answer)}
    assert sorted(rows) == ["00", "01", "04"]
    assert rows["01"]["relative_humidity_pct"] is None
    # Two observed sources in one hour: both kept.
    assert rows["04"]["temperature_c"] == 14.0 and rows["04"]["relative_humidity_pct"] == 64.0
    checks = {check: (severity, text) for severity, check, text in answer["notes"]}
    assert checks["model-values"][0] == "note"
    assert checks["model-values"][1].endswith("left out: 2.")
    assert checks["unknown-source"][0] == "caution"
    assert "(not stated, somewhere_new)" in checks["unknown-source"][1]
    assert checks["unknown-source"][1].endswith("left out: 2.")


def test_fetch_year_pressure_of_aerodrome_reports_is_the_altimeter_setting(fetched):
    # The package's reader of aerodrome reports puts the Q/A group into ``pres``
    # (meteostat/providers/noaa/metar.py, map_data): ICAO Annex 3 calls that group QNH.
    rows = {row["time"][11:13]: row for row in hours(fetched["years"]["2009"])}
    assert rows["01"]["qnh_hpa"] == 1019.0 and rows["01"]["sea_level_pressure_hpa"] is None
    assert rows["00"]["qnh_hpa"] is None and rows["00"]["sea_level_pressure_hpa"] == 1013.2


@pytest.mark.parametrize("year", ["2004", "2001"], ids=["rain only", "model only"])
def test_fetch_year_without_observed_temperature_is_empty_with_a_caution(fetched, year):
    answer = fetched["years"][year]
    assert hours(answer) == []
    assert ["caution", "no-temperature"] in [note[:2] for note in answer["notes"]]


def test_fetch_year_dew_point_is_taken_where_the_archive_gives_it(fetched):
    (row,) = hours(fetched["years"]["2003"])
    assert row["dew_point_c"] == 2.5 and row["relative_humidity_pct"] is None


def test_fetch_year_refuses_an_identifier_that_could_change_the_address(fetched):
    for answer in fetched["stations"].values():
        assert answer["error"] == "InputError"
        assert "letters and digits" in answer["text"]


def test_fetch_station_says_of_every_year_what_became_of_it(fetched):
    station = fetched["station"]
    assert sorted(station["got"]) == ["2019", "2020", "2021", "2022"]
    assert station["missing"] == [2016, 2018]
    assert [year for year, _ in station["failed"]] == [2017, 2023]
    assert all("was not received" in text for _, text in station["failed"])
    assert dict(map(tuple, station["seen"])) == {
        2016: "missing",
        2017: "failed",
        2018: "missing",
        2019: "received",
        2020: "received",
        2021: "received",
        2022: "received",
        2023: "failed",
    }
    assert station["got"]["2019"]["station"] == ["GOOD1", "Good place", 300.0]


def test_fetch_station_stops_asking_after_three_failures_in_a_row(fetched):
    down = fetched["down"]
    assert down["got"] == 0 and down["missing"] == []
    assert [year for year, _ in down["failed"]] == list(range(2001, 2007))
    assert "not asked for after 3 failures" in down["failed"][3][1]
    asked = [requests_of(fetched, year, "DOWN1") for year in range(2001, 2007)]
    assert asked == [3, 3, 3, 0, 0, 0]


def test_find_stations_gives_those_with_an_elevation_nearest_first(fetched):
    assert [s["id"] for s in fetched["around"]] == ["NEAR1", "AWAY1"]
    near = fetched["around"][0]
    assert near["name"] == "Near" and near["elevation_m"] == 400.0
    assert near["timezone"] == "Europe/Zurich" and fetched["around"][1]["timezone"] is None
    assert fetched["again"] == ["NEAR1"]
    # The list is downloaded once for a process.
    assert fetched["requests"]["/stations.db"] == 1


def test_nothing_is_left_on_disk_and_no_pickle_was_written(fetched):
    assert fetched["mode"] == "0o700"
    assert [Path(p).name for p in fetched["left"]] == ["stations.db"]
    assert not Path(fetched["folder"]).exists()
    # The stand-in's own file and the two empty folders given to the process.
    assert fetched["left_behind"] == ["home", "s.db", "tmp"]


def test_no_other_server_is_asked(fetched):
    assert fetched["hosts"] == {fetched["own_host"]}
    assert "/elsewhere" not in fetched["requests"]


LIST_DRIVER = """
import json, sys
from climarisk.archives import meteostat
from climarisk.errors import FetchError
texts = []
for _ in range(2):
    try:
        texts.append([s.id for s in meteostat.find_stations(46.0, 10.0, 50.0, 5)])
    except FetchError as error:
        texts.append(str(error))
json.dump(texts, sys.stdout)
"""


@pytest.mark.parametrize(
    ("fault", "reason"),
    [
        ((500, b"x"), "answered 500"),
        (b"not a database", "not a database"),
        (("cut", b"SQLite format 3"), "IncompleteRead"),
        ((302, "http://localhost:{port}/other.db"), "sends on to another server"),
    ],
    ids=["status", "garbage", "cut", "redirect"],
)
def test_find_stations_failure_is_an_error_and_a_bad_list_is_not_kept(tmp_path, fault, reason):
    rows = [("NEAR1", "CH", None, 46.1, 10.0, 400, "Europe/Zurich", "Near")]
    with standin_server.StandIn() as server:
        good = standin_server.stations_database(tmp_path / "s.db", rows)
        if isinstance(fault, tuple) and fault[0] == 302:
            fault = (302, fault[1].format(port=server.port))
        server.answers["/stations.db"] = [fault, good]
        server.answers["/other.db"] = good
        first, second = run(LIST_DRIVER, "", server, tmp_path)
    assert "list of stations could not be read" in first and reason in first
    assert second == ["NEAR1"]


def test_find_stations_refuses_a_place_off_the_globe():
    with pytest.raises(InputError, match="allowed are -90 to 90"):
        find_stations(91.0, 10.0, 50.0, 5)


def test_importing_the_module_does_not_import_the_package_or_touch_urllib():
    code = (
        "import sys, urllib.request; before = urllib.request._opener\n"
        "import climarisk.archives.meteostat\n"
        "assert 'meteostat' not in sys.modules and urllib.request._opener is before"
    )
    subprocess.run([sys.executable, "-c", code], cwd=ROOT, check=True, timeout=60)
