"""A study over the online archive, from the command line, against a stand-in on loopback.

The rows are made up; the archive's columns and addresses follow the meteostat package 2.1.
"""

import csv
import importlib.util
import json
import os
import subprocess
import sys
from pathlib import Path

import pytest
from study_maker import make_study

ROOT = Path(__file__).resolve().parent.parent
_spec = importlib.util.spec_from_file_location(
    "standin_server_for_studies", ROOT / "tests" / "archives" / "standin_server.py"
)
standin_server = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(standin_server)

STATION = "id,name,latitude,longitude,elevation_m,timezone\nGOOD1,Good place,46.0,10.0,300,\n"
FIELDS = "id,name,latitude,longitude,elevation_m,stations\nSTRP,Strip,46.01,10.01,310,GOOD1\n"
RUNWAYS = (
    "field,runway,heading_deg,length_m,slope_pct,surface,takeoff,landing\n"
    "STRP,09,90,900,0,paved,yes,yes\n"
)


@pytest.fixture
def online(tmp_path):
    study = make_study(tmp_path / "study", "synthetic")
    study.write("stations.csv", STATION)
    study.write("fields.csv", FIELDS)
    study.write("runways.csv", RUNWAYS)
    study.change("study.toml", 'source = "synthetic"', 'source = "meteostat"')
    text = study.file.read_text(encoding="utf-8")
    first = int(text.split("first_year = ")[1].split()[0])
    last = int(text.split("last_year = ")[1].split()[0])
    with standin_server.StandIn() as server:
        for year in range(first, last + 1):
            lines = standin_server.year_text(year, days=31).splitlines()
            # Values that stay the same for days would be taken for a stuck sensor or a default.
            text = "\n".join(
                x.replace("1013.2", f"{1010 + i % 9}.0").replace(",60,", f",{55 + i % 9},")
                for i, x in enumerate(lines)
            )
            whole = standin_server.packed(text + "\n")
            server.answers[f"/hourly/{year}/GOOD1.csv.gz"] = whole
        yield study, server, tmp_path, range(first, last + 1)


def command(tmp_path, server, *arguments):
    environment = {
        "HOME": str(tmp_path),
        "TMPDIR": str(tmp_path),
        "PATH": os.environ.get("PATH", ""),
        "PYTHONPATH": str(ROOT),
        "CLIMARISK_STORE": str(tmp_path / "store"),
        "MS_HOURLY_ENDPOINT": server.url + "/hourly/{year}/{station}.csv.gz",
        "MS_STATIONS_DB_ENDPOINTS": json.dumps([server.url + "/stations.db"]),
        "MS_NETWORK_MAX_RETRIES": "0",
        "no_proxy": "*",
    }
    return subprocess.run(
        [sys.executable, "-W", "error", "-m", "climarisk", *map(str, arguments)],
        env=environment,
        capture_output=True,
        text=True,
        timeout=120,
        cwd=tmp_path,
        check=False,
    )


def test_fetch_fills_the_store_and_a_run_needs_no_network_then(online):
    study, server, tmp_path, years = online
    done = command(tmp_path, server, "fetch", study.folder)
    assert done.returncode == 0, done.stderr
    assert f"GOOD1 Good place: {len(years)} years" in done.stdout
    asked = dict(server.requests)
    done = command(tmp_path, server, "run", study.folder, "--out", tmp_path / "out", "--offline")
    assert done.returncode == 0, done.stderr
    assert dict(server.requests) == asked
    table = (tmp_path / "out" / "distributions_hourly.csv").read_text(encoding="utf-8")
    rows = list(csv.DictReader(table.splitlines()))
    # The stand-in's temperature is the UTC hour: noon UTC is 13 h local standard time here.
    (noon,) = (
        r for r in rows if (r["variable"], r["month"], r["hour"]) == ("temperature", "1", "13")
    )
    assert float(noon["p50"]) == 12.0
    record = json.loads((tmp_path / "out" / "study.json").read_text(encoding="utf-8"))
    assert "Meteostat" in record["stations"][0]["sources"][0]
    assert record["fields"][0]["pressure_sources"] == {"sea-level pressure": 1.0}


def test_a_year_the_archive_lacks_is_told_and_the_rest_stands(online):
    study, server, tmp_path, years = online
    del server.answers[f"/hourly/{years[0]}/GOOD1.csv.gz"]
    done = command(tmp_path, server, "run", study.folder, "--out", tmp_path / "out")
    assert done.returncode == 0, done.stderr
    assert f"no observed hour in 1 of {len(years)} years asked for: {years[0]}" in done.stderr


def test_a_year_that_fails_stops_the_run_and_what_arrived_is_kept(online):
    study, server, tmp_path, years = online
    whole = server.answers[f"/hourly/{years[-1]}/GOOD1.csv.gz"]
    server.answers[f"/hourly/{years[-1]}/GOOD1.csv.gz"] = (500, b"out of order")
    done = command(tmp_path, server, "run", study.folder, "--out", tmp_path / "out")
    assert done.returncode == 1
    assert "1 station years could not be had" in done.stderr
    assert "Traceback" not in done.stderr
    assert not (tmp_path / "out").exists()
    server.answers[f"/hourly/{years[-1]}/GOOD1.csv.gz"] = whole
    before = server.requests[f"/hourly/{years[0]}/GOOD1.csv.gz"]
    done = command(tmp_path, server, "run", study.folder, "--out", tmp_path / "out")
    assert done.returncode == 0, done.stderr
    assert server.requests[f"/hourly/{years[0]}/GOOD1.csv.gz"] == before


def test_stations_are_found_around_a_field_where_the_study_lists_none(online):
    study, server, tmp_path, _ = online
    study.change("study.toml", 'stations = "stations.csv"\n', "")
    study.write("fields.csv", FIELDS.replace("GOOD1", ""))
    rows = [("GOOD1", "CH", None, 46.0, 10.0, 300, "Europe/Zurich", "Good place")]
    server.answers["/stations.db"] = standin_server.stations_database(tmp_path / "s.db", rows)
    done = command(tmp_path, server, "run", study.folder, "--out", tmp_path / "out")
    assert done.returncode == 0, done.stderr
    asked = dict(server.requests)
    done = command(tmp_path, server, "run", study.folder, "--out", tmp_path / "out", "--offline")
    assert done.returncode == 0, done.stderr
    assert dict(server.requests) == asked


def test_offline_without_a_store_is_one_sentence(online):
    study, server, tmp_path, _ = online
    done = command(tmp_path, server, "run", study.folder, "--out", tmp_path / "out", "--offline")
    assert done.returncode == 1
    assert "are not in the store; run climarisk fetch" in done.stderr
    assert not server.requests
