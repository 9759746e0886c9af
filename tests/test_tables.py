"""The files a run writes: the contract, empty cells, equal bytes, and a failure half way."""

from __future__ import annotations

import csv
import json
import os
import subprocess
import sys
from pathlib import Path

import geopandas
import numpy as np
import pandas as pd
import pytest
from study_maker import ONLY_WHERE_ASKED, StudyFolder, asos_text, make_study

from climarisk.errors import OutputError
from climarisk.outputs import tables
from climarisk.outputs.tables import csv_text, write_outputs
from climarisk.pipeline import run_study
from climarisk.results import StudyResult

# The file contract, transcribed, not taken from the program; the columns added to it come last.
STATISTICS = (
    "n_hours,n_years,coverage,mean,p01,p05,p10,p25,p50,p75,p90,p95,p99,transfer_error,years_note"
)
RISK = (
    "n_hours,n_years,shortfall,ci_low,ci_high,outside_table,limiting,margin_p10,margin_p50,"
    "days_affected,shortfall_central,transfer_error_ft,interval_note,coverage,"
    "hours_offered,usable_hours"
)
NEAR_SATURATION = "n_hours,n_years,coverage,share_1k,share_2_5k"
WEIGHTS = "n_hours,n_years,coverage,holds_in,mass_kg,useful_load_kg,outcome,never_met"
ICING = "n_hours,n_years,coverage,method,verified,band,share"
COLUMNS = {
    "distributions_monthly.csv": f"field,variable,unit,month,{STATISTICS}",
    "distributions_hourly.csv": f"field,variable,unit,month,hour,{STATISTICS}",
    "distributions_seasonal.csv": f"field,variable,unit,season,{STATISTICS}",
    "risk_monthly.csv": f"field,aircraft,month,{RISK}",
    "risk_hourly.csv": f"field,aircraft,month,hour,{RISK},in_window",
    "risk_seasonal.csv": f"field,aircraft,season,{RISK}",
    "risk_yearly.csv": "field,aircraft,month,year,n_hours,shortfall_hours",
    "margins_monthly.csv": "field,aircraft,month,check,n_hours,shortfall,margin_p10,margin_p50",
    "near_saturation_monthly.csv": f"field,month,{NEAR_SATURATION}",
    "near_saturation_hourly.csv": f"field,month,hour,{NEAR_SATURATION}",
    "near_saturation_seasonal.csv": f"field,season,{NEAR_SATURATION}",
    "weights_monthly.csv": f"field,aircraft,month,{WEIGHTS},ci_low_kg,ci_high_kg,interval_note",
    "weights_hourly.csv": f"field,aircraft,month,hour,{WEIGHTS}",
    "weights_seasonal.csv": f"field,aircraft,season,{WEIGHTS},ci_low_kg,ci_high_kg,interval_note",
    "windows_monthly.csv": "field,aircraft,month,target,hours,n_clock_hours,first_hour,last_hour,"
    "clock_first,clock_last,clock_hours,hours_without_figures,daylight_hours,usable_hours,"
    "usable_low,usable_high,run_hours,days_with_run,n_years,coverage,interval_note",
    "icing_monthly.csv": f"field,month,{ICING}",
    "icing_hourly.csv": f"field,month,hour,{ICING}",
    "power_monthly.csv": "field,aircraft,month,n_hours,n_years,coverage,method,power_p10,power_p50,"
    "power_p90,optimistic_p50,humidity_power_pct_p50,humidity_power_pct_p90,humidity_ft_p50,"
    "humidity_ft_p90",
    "bases.csv": "rank,field,aircraft,usable_hours_month,ci_low,ci_high,year_p10,year_p90,"
    "worst_season,worst_season_hours_month,days_with_run,share_1k,share_2_5k,icing_serious,n_years,"
    "interval_note,steep",
    "base_differences.csv": "first,second,aircraft,difference_hours_month,ci_low,ci_high,"
    "interval_note",
    "trends.csv": "field,aircraft,season,statistic,unit,n_years,first_year,last_year,"
    "slope_per_decade,ci_low,ci_high,p_value,significant,break_year,break_p_value",
    "extremes.csv": "field,n_years,return_period_years,density_altitude_ft,ci_low,ci_high",
}
CONTRACT = {*COLUMNS, "map.html", "fields.gpkg", "fields.geojson", "study.json"}
#: What a run without scenarios writes: the contract, which is named here, and all that came since.
FILES = set(tables.OUTPUT_FILES) - ONLY_WHERE_ASKED
UNITS = {
    "density_altitude": "ft",
    "pressure_altitude": "ft",
    "temperature": "degC",
    "dew_point": "degC",
    "relative_humidity": "%",
    "vapour_pressure": "hPa",
}
SHARES = ("shortfall", "ci_low", "ci_high", "outside_table", "days_affected")
SEASONS = ("flying summer", "deep winter")
# The spoilt cells of the study: March at 05 UTC is 06 h local standard time (Europe/Rome).
EMPTY_MONTH, EMPTY_HOUR = 3, 6


def gappy_study(folder: Path) -> StudyFolder:
    """The small study from files: no March 05 UTC, and no July 2022, at the low station."""
    study = make_study(folder, "files")
    for year in (2021, 2022):
        lines = asos_text(year, year).splitlines()
        kept = [
            line
            for line in lines
            if not (f"{year}-03-" in line and " 05:00" in line) and "2022-07-" not in line
        ]
        study.write(f"archive/vale_{year}.csv", "\n".join(kept) + "\n")
    # Only the pinned low field has no other station to fall back on.
    return study


@pytest.fixture(scope="module")
def study(tmp_path_factory) -> StudyFolder:
    return gappy_study(tmp_path_factory.mktemp("tables") / "study")


@pytest.fixture(scope="module")
def result(study) -> StudyResult:
    return run_study(study.file)


@pytest.fixture(scope="module")
def written(result, tmp_path_factory) -> Path:
    folder = tmp_path_factory.mktemp("written") / "deep" / "out"
    assert {p.name for p in write_outputs(result, folder)} == FILES
    return folder


def contents(folder: Path) -> dict[str, bytes]:
    return {p.name: p.read_bytes() for p in folder.iterdir()}


def rows(written: Path, name: str) -> list[dict[str, str]]:
    with (written / name).open(encoding="utf-8", newline="") as stream:
        return list(csv.DictReader(stream))


# ---------------------------------------------------------------- contract


def test_every_file_of_the_contract_is_there_and_no_other(written):
    assert set(contents(written)) == FILES >= CONTRACT
    assert [p.name for p in written.parent.iterdir()] == ["out"], "no staging folder is left"


@pytest.mark.parametrize("name", COLUMNS)
def test_a_table_has_exactly_the_columns_of_the_contract_in_order(written, name):
    data = (written / name).read_bytes()
    assert data.decode("utf-8").split("\n", 1)[0] == COLUMNS[name]
    assert b"\r" not in data
    assert data.endswith(b"\n")


def test_distributions_have_a_row_for_every_cell_in_the_order_of_the_study(written):
    monthly = rows(written, "distributions_monthly.csv")
    assert [(r["field"], r["variable"], int(r["month"])) for r in monthly] == [
        (f, v, m) for f in ("LOW", "MID", "TOP") for v in UNITS for m in range(1, 13)
    ]
    assert all(r["unit"] == UNITS[r["variable"]] for r in monthly)
    hourly = rows(written, "distributions_hourly.csv")
    assert len(hourly) == 3 * 6 * 12 * 24
    assert {int(r["hour"]) for r in hourly} == set(range(24)), "all hours, no window"
    seasonal = rows(written, "distributions_seasonal.csv")
    assert [(r["field"], r["variable"], r["season"]) for r in seasonal] == [
        (f, v, s) for f in ("LOW", "MID", "TOP") for v in UNITS for s in SEASONS
    ]
    assert all(r["unit"] == UNITS[r["variable"]] for r in seasonal)


def test_near_saturation_has_a_row_for_every_cell_in_the_order_of_the_study(written):
    fields, months = ("LOW", "MID", "TOP"), range(1, 13)
    monthly, hourly, seasonal = (
        rows(written, f"near_saturation_{kind}.csv") for kind in ("monthly", "hourly", "seasonal")
    )
    assert [(r["field"], int(r["month"])) for r in monthly] == [
        (f, m) for f in fields for m in months
    ]
    assert [(r["field"], int(r["month"]), int(r["hour"])) for r in hourly] == [
        (f, m, h) for f in fields for m in months for h in range(24)
    ]
    assert [(r["field"], r["season"]) for r in seasonal] == [
        (f, s) for f in fields for s in SEASONS
    ]
    for row in monthly + hourly + seasonal:
        if row["share_1k"]:
            assert 0.0 <= float(row["share_1k"]) <= float(row["share_2_5k"]) <= 1.0
        assert (row["share_1k"] == "") == (row["share_2_5k"] == "") == (row["n_hours"] == "0")


def test_margins_have_a_row_for_every_check_of_an_aircraft(written):
    always = ("take-off ground roll", "take-off to 50 ft", "landing from 50 ft")
    checks = {"tourer": always, "trainer": (*always, "rate of climb", "temperature limit")}
    margins = rows(written, "margins_monthly.csv")
    assert [(r["field"], r["aircraft"], int(r["month"]), r["check"]) for r in margins] == [
        (f, a, m, c)
        for f in ("LOW", "MID", "TOP")
        for a in ("tourer", "trainer")
        for m in range(1, 13)
        for c in checks[a]
    ]
    for row in margins:
        assert 0.0 <= float(row["shortfall"]) <= 1.0
        figures = (row["margin_p10"], row["margin_p50"])
        if row["check"] == "temperature limit":
            assert figures == ("", ""), "a limit has no margin"
        else:
            assert -1.0 <= float(figures[0]) <= float(figures[1])


def test_usable_hours_are_written_beside_the_hours_offered(written):
    for row in rows(written, "risk_monthly.csv"):
        # 15 full hours a day from 6 to 20, both included; no leap year in 2021-2022.
        days = (31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31)[int(row["month"]) - 1]
        assert float(row["hours_offered"]) == 15 * days
        usable = 15 * days * (1 - float(row["shortfall"]))
        assert float(row["usable_hours"]) == pytest.approx(usable, abs=5.1e-5)


def test_risk_has_a_row_for_every_cell(written):
    cells = [(f, a) for f in ("LOW", "MID", "TOP") for a in ("tourer", "trainer")]
    assert [(r["field"], r["aircraft"]) for r in rows(written, "risk_seasonal.csv")] == [
        c for c in cells for _ in range(2)
    ]
    assert {r["season"] for r in rows(written, "risk_seasonal.csv")} == set(SEASONS)
    assert len(rows(written, "risk_monthly.csv")) == 6 * 12
    assert len(rows(written, "risk_hourly.csv")) == 6 * 12 * 24


def test_shares_are_shares_and_percentiles_rise(written):
    for name in ("risk_monthly.csv", "risk_hourly.csv", "risk_seasonal.csv"):
        for row in rows(written, name):
            for column in SHARES:
                if row[column]:
                    assert 0.0 <= float(row[column]) <= 1.0, (name, row)
            assert (row["limiting"] == "") == (row["shortfall"] in ("", "0.0")), row
    for row in (
        *rows(written, "distributions_monthly.csv"),
        *rows(written, "distributions_seasonal.csv"),
    ):
        values = [float(row[c]) for c in STATISTICS.split(",")[4:13] if row[c]]
        assert values == sorted(values)
        assert 0.0 <= float(row["coverage"]) <= 1.0


# ---------------------------------------------------------------- empty, not zero


def test_a_cell_that_fails_the_completeness_rule_is_empty_not_zero(written):
    # DESIGN 6: no year has 80 % of March's days at this hour, so the cell has no figure.
    for name, columns in (
        ("distributions_hourly.csv", STATISTICS.split(",")[3:]),
        ("risk_hourly.csv", [*RISK.split(",")[2:-3], "usable_hours"]),
        ("near_saturation_hourly.csv", ["share_1k", "share_2_5k"]),
    ):
        cells = [
            r
            for r in rows(written, name)
            if r["field"] == "LOW"
            and (int(r["month"]), int(r["hour"])) == (EMPTY_MONTH, EMPTY_HOUR)
        ]
        assert cells
        for row in cells:
            assert {row[c] for c in columns} == {""}, row
            assert row["n_years"] == "0"
            assert row["coverage"] == "0.0"
            # The calendar offers the hours whether or not they were recorded.
            assert row.get("hours_offered") in (None, "31.0")
            assert row.get("in_window") in (None, "1.0")


def test_a_year_that_fails_the_rule_does_not_count(written):
    july = [
        r
        for r in rows(written, "distributions_hourly.csv")
        if r["field"] == "LOW" and r["month"] == "7" and r["variable"] == "temperature"
    ]
    # Only 2021 counts: 31 days at most, of the 2 year-months of the period.
    assert {r["n_years"] for r in july} == {"1"}
    assert {r["coverage"] for r in july} == {"0.5"}
    assert all(25 <= int(r["n_hours"]) <= 31 for r in july)


def test_intervals_are_empty_below_five_years(written):
    # METHODS D6 by the work order: intervals resample whole years, empty below 5 years.
    for row in rows(written, "risk_monthly.csv"):
        assert (row["ci_low"], row["ci_high"]) == ("", "")


def test_csv_text_promises_no_mass_that_was_not_found_to_hold():
    masses = [716.3, 1180.4284, 1104.32599, 790.0, np.nan]
    table = pd.DataFrame({"mass_kg": masses, "ci_low_kg": masses, "ci_high_kg": masses})
    lines = csv_text(table).splitlines()[1:]
    assert lines == [
        "716.3,716.3,716.3",
        "1180.428,1180.428,1180.429",
        "1104.325,1104.325,1104.326",
        "790.0,790.0,790.0",
        ",,",
    ]


def test_csv_text_writes_empty_for_nan_and_no_negative_zero():
    table = pd.DataFrame(
        {
            "field": ["a,b", 'q"', "=1+1"],
            "limiting": [None, "x", "y"],
            "shortfall": [np.nan, -0.0, -1e-12],
            "p50": [1234.56789, np.nan, -0.0001],
            "n_hours": [1, 2, 3],
        }
    )
    lines = csv_text(table).split("\n")
    assert lines[1] == '"a,b",,,1234.568,1'
    assert lines[2] == '"q""",x,0.0,,2'
    assert lines[3] == "=1+1,y,0.0,0.0,3"


# ---------------------------------------------------------------- layers and provenance


def test_the_geopackage_opens_with_one_point_per_field(written):
    layer = geopandas.read_file(written / "fields.gpkg")
    assert layer.crs.to_epsg() == 4326
    assert layer["id"].tolist() == ["LOW", "MID", "TOP"]
    assert (layer.geom_type == "Point").all()
    assert layer.geometry.x.tolist() == pytest.approx([11.0, 11.1, 11.2], abs=1e-12)
    assert layer.geometry.y.tolist() == pytest.approx([46.5, 46.55, 46.6], abs=1e-12)
    assert {"da_p90_ft", "worst_shortfall"} <= set(layer.columns)


def test_the_geojson_says_the_same_as_the_geopackage(written):
    # RFC 7946: longitude first, WGS 84 and no crs member.
    text = json.loads((written / "fields.geojson").read_text(encoding="utf-8"))
    assert text["type"] == "FeatureCollection"
    assert "crs" not in text
    layer = geopandas.read_file(written / "fields.gpkg")
    for feature, (_, row) in zip(text["features"], layer.iterrows(), strict=True):
        assert feature["geometry"]["coordinates"] == [row.geometry.x, row.geometry.y]
        for key, value in feature["properties"].items():
            assert value == row[key] or (value is None and pd.isna(row[key]))


def test_headline_figures_are_those_of_the_tables(written):
    layer = geopandas.read_file(written / "fields.gpkg").set_index("id")
    monthly = pd.read_csv(written / "distributions_monthly.csv")
    risk = pd.read_csv(written / "risk_monthly.csv")
    for field in ("LOW", "MID", "TOP"):
        own = monthly[(monthly.field == field) & (monthly.variable == "density_altitude")]
        assert layer.loc[field, "da_p90_ft"] == round(own.p90.max())
        worst = risk[risk.field == field].shortfall.max()
        assert layer.loc[field, "worst_shortfall"] == pytest.approx(worst, abs=5e-7)


def strict_json(path: Path):
    def refuse(word):
        raise AssertionError(f"{word} is not JSON")

    return json.loads(path.read_text(encoding="utf-8"), parse_constant=refuse)


def test_the_provenance_has_every_input_with_its_hash(written, study):
    import hashlib

    told = strict_json(written / "study.json")
    assert told["program"] == "climarisk"
    files = {i["file"]: i["sha256"] for i in told["inputs"]}
    assert set(files) >= {"study.toml", "fields.csv", "runways.csv", "stations.csv", "mapping.toml"}
    files |= {f["file"]: f["sha256"] for s in told["stations"] for f in s["files"]}
    assert {"archive/vale_2021.csv", "archive/vale_2022.csv", "archive/pass.txt"} <= set(files)
    for name, digest in files.items():
        assert hashlib.sha256((study.folder / name).read_bytes()).hexdigest() == digest


def test_the_provenance_has_settings_stations_and_findings(written):
    told = strict_json(written / "study.json")
    assert told["settings"]["window"] == [6, 20]
    low = next(f for f in told["fields"] if f["id"] == "LOW")
    assert [s["station"] for s in low["stations"]] == ["VALE"]
    (use,) = low["stations"]
    assert use["height_difference_m"] == 20.0
    assert use["pressure_kind"] == "QNH"
    assert 0.0 < use["coverage"] < 1.0
    assert told["findings"]
    for finding in told["findings"]:
        assert list(finding) == ["severity", "subject", "id", "check", "message"]
        assert finding["severity"] in ("note", "caution", "reject")
        assert finding["subject"] in ("station", "field", "aircraft", "study")


def test_no_absolute_path_and_no_clock_is_written(written, study):
    import datetime

    marks = (str(study.folder.parent).encode(), str(datetime.date.today()).encode())
    for name, data in contents(written).items():
        assert not any(mark in data for mark in marks), name


# ---------------------------------------------------------------- equal bytes


def test_a_second_run_in_another_process_and_folder_gives_the_same_bytes(
    written, study, tmp_path, store_folder
):
    import shutil

    shutil.copytree(study.folder, tmp_path / "study")
    for seed in ("1", "2"):
        subprocess.run(
            [
                *(sys.executable, "-m", "climarisk", "run"),
                *(str(tmp_path / "study" / "study.toml"), "--out", f"out{seed}"),
            ],
            cwd=tmp_path,
            env={
                **os.environ,
                "PYTHONHASHSEED": seed,
                "TZ": f"Etc/GMT+{seed}",
                "PYTHONPATH": str(Path(tables.__file__).parents[2]),
            },
            check=True,
            capture_output=True,
        )
        assert contents(tmp_path / f"out{seed}") == contents(written)


def test_writing_twice_into_the_same_folder_gives_the_same_bytes(result, written, tmp_path):
    folder = tmp_path / "out"
    folder.mkdir()
    (folder / "mine.txt").write_text("stays")
    write_outputs(result, folder)
    write_outputs(result, folder)
    assert contents(folder) == {**contents(written), "mine.txt": b"stays"}


# ---------------------------------------------------------------- failures


@pytest.fixture
def old_results(written, tmp_path) -> Path:
    """A folder of earlier results that differ from the new ones."""
    folder = tmp_path / "home" / "out"
    folder.mkdir(parents=True)
    for name in FILES:
        (folder / name).write_text(f"old {name}")
    return folder


def refuse(*_, **__):
    raise OSError(28, "No space left on device")


def assert_untouched(folder: Path) -> None:
    assert contents(folder) == {name: f"old {name}".encode() for name in FILES}
    assert [p.name for p in folder.parent.iterdir()] == ["out"], "no staging folder is left"


@pytest.mark.parametrize("broken", ["write_layers", "render_map", "csv_text"])
def test_a_failure_while_writing_leaves_the_old_results(result, old_results, monkeypatch, broken):
    monkeypatch.setattr(tables, broken, refuse)
    with pytest.raises(OutputError, match="cannot be written .No space left on device"):
        write_outputs(result, old_results)
    assert_untouched(old_results)


def failing_move(monkeypatch, after: int) -> None:
    """Let the moves into place fail once `after` of them are done."""
    done = []
    replace = os.replace

    def move(source, target, **more):
        if len(done) == after and Path(target).name in FILES:
            refuse()
        done.append(target)
        return replace(source, target, **more)

    monkeypatch.setattr(os, "replace", move)


def test_a_failure_of_the_first_move_leaves_the_old_results(result, old_results, monkeypatch):
    failing_move(monkeypatch, 0)
    with pytest.raises(OutputError):
        write_outputs(result, old_results)
    monkeypatch.undo()
    assert_untouched(old_results)


@pytest.mark.parametrize("after", [1, 4])
def test_a_failure_of_a_later_move_leaves_the_old_results(result, old_results, monkeypatch, after):
    failing_move(monkeypatch, after)
    with pytest.raises(OutputError):
        write_outputs(result, old_results)
    monkeypatch.undo()
    assert_untouched(old_results)


def test_a_table_that_cannot_be_replaced_leaves_the_others_old(result, old_results):
    (old_results / "risk_hourly.csv").unlink()
    (old_results / "risk_hourly.csv").mkdir()
    with pytest.raises(OutputError):
        write_outputs(result, old_results)
    assert (old_results / "map.html").read_text() == "old map.html"


def test_a_vector_library_that_fails_is_an_output_error(result, old_results, monkeypatch):
    from pyogrio.errors import DataSourceError

    def full(*_, **__):
        raise DataSourceError("disk I/O error")

    monkeypatch.setattr(geopandas.GeoDataFrame, "to_file", full)
    with pytest.raises(OutputError):
        write_outputs(result, old_results)


@pytest.mark.parametrize("target", ["file", "file/below"])
def test_a_file_in_place_of_the_folder_is_one_sentence_and_stays(result, tmp_path, target):
    (tmp_path / "file").write_text("mine")
    with pytest.raises(OutputError, match="cannot be written"):
        write_outputs(result, tmp_path / target)
    assert contents(tmp_path) == {"file": b"mine"}


# ---------------------------------------------------------------- hostile text


HOSTILE = ["{{7*7}}", "</script><b>", "Ä, \"q\" 'x'; $(id)", "=HYPERLINK(1)", "NA"]


@pytest.mark.parametrize("name", HOSTILE)
def test_names_of_any_kind_go_through_as_they_are(study_folder, tmp_path, name):
    quoted = '"' + name.replace('"', '""') + '"'
    study = study_folder().change("fields.csv", "Low meadow (invented)", quoted)
    write_outputs(run_study(study.file), tmp_path / "out")
    layer = geopandas.read_file(tmp_path / "out" / "fields.gpkg")
    assert layer["name"][0] == name
    assert strict_json(tmp_path / "out" / "study.json")["fields"][0]["name"] == name
    assert (
        strict_json(tmp_path / "out" / "fields.geojson")["features"][0]["properties"]["name"]
        == name
    )


@pytest.mark.skipif(sys.platform != "linux", reason="needs file names that are no UTF-8")
def test_an_archive_whose_name_is_no_utf8_is_written_or_refused(study_folder, tmp_path):
    study = study_folder("files")
    old = study.folder / "archive" / "vale_2021.csv"
    old.rename(os.fsdecode(os.fsencode(old).replace(b"2021", b"\xff")))
    write_outputs(run_study(study.file), tmp_path / "out")
