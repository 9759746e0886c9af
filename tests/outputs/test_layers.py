"""The layer files: the numbers of the frames, and what the two standards ask for."""

from __future__ import annotations

import hashlib
import json
import math
import os
import shutil
import sqlite3
import subprocess
import sys
from contextlib import closing
from dataclasses import replace
from pathlib import Path

import geopandas
import pandas as pd
import pyogrio
import pytest
from sample_result import EMPTY_FIELD, sample_result

from climarisk.outputs import layers
from climarisk.outputs.layers import COLUMNS, headline, write_layers

ROOT = Path(__file__).parents[2]
#: The columns before the schema was described; later ones come after them.
CONTRACT = [
    *("id", "name", "elevation_m", "da_p90_month", "da_p90_ft", "rh_p50_pct", "worst_aircraft"),
    *("worst_month", "worst_shortfall", "transfer_error_ft", "pressure_error_ft", "cautions"),
]


@pytest.fixture(scope="module")
def result():
    return sample_result()


@pytest.fixture(scope="module")
def folder(result, tmp_path_factory) -> Path:
    made = tmp_path_factory.mktemp("layers")
    assert write_layers(result, made) == ["fields.gpkg", "fields.geojson"]
    assert sorted(path.name for path in made.iterdir()) == ["fields.geojson", "fields.gpkg"]
    return made


@pytest.fixture(scope="module")
def geojson(folder) -> dict:
    return json.loads((folder / "fields.geojson").read_text(encoding="utf-8"))


@pytest.fixture
def database(folder):
    with closing(sqlite3.connect(f"{(folder / 'fields.gpkg').as_uri()}?mode=ro", uri=True)) as made:
        yield made


# ---------------------------------------------------------------- figures


def test_keys_keep_the_contract_and_are_the_described_columns(result):
    rows = headline(result)
    assert [row["id"] for row in rows] == [field.id for field in result.fields]
    for row in rows:
        assert list(row)[: len(CONTRACT)] == CONTRACT
        assert list(row) == [column.name for column in COLUMNS]


def test_worst_month_is_that_of_the_frame(result):
    for row in headline(result):
        cells = [
            cell
            for cell in result.risk_monthly.itertuples()
            if cell.field == row["id"] and not math.isnan(cell.shortfall)
        ]
        if row["id"] == EMPTY_FIELD:
            assert cells == []
            continue
        worst = cells[0]
        for cell in cells:
            worst = cell if cell.shortfall > worst.shortfall else worst
        assert (row["worst_aircraft"], row["worst_month"]) == (worst.aircraft, worst.month)
        assert row["worst_shortfall"] == round(worst.shortfall, 6)
        assert row["limiting"] == worst.limiting
        for key in ("ci_low", "ci_high"):
            value = getattr(worst, key)
            assert row[key] == (None if math.isnan(value) else round(value, 6))
        assert row["usable_hours"] == round(worst.usable_hours, 1)
        usable = [c.usable_hours for c in cells if c.aircraft == worst.aircraft]
        assert row["usable_hours_min"] == round(min(usable), 1)
        assert row["months_known"] == len({c.month for c in cells})


def test_air_is_that_of_the_frames(result):
    monthly = result.distributions_monthly
    for row in headline(result):
        own = monthly[monthly["field"] == row["id"]]
        density = own[own["variable"] == "density_altitude"].set_index("month")
        if row["id"] == EMPTY_FIELD:
            assert density["p90"].isna().all()
            continue
        assert row["da_p90_ft"] == round(density["p90"].max())
        assert density["p90"][row["da_p90_month"]] == density["p90"].max()
        assert row["da_p50_ft"] == round(density["p50"][row["da_p90_month"]])
        humidity = own[own["variable"] == "relative_humidity"]["p50"].dropna()
        assert row["rh_p50_pct"] == round(sum(humidity) / len(humidity), 1)
        damp = result.near_saturation_monthly
        share = damp[damp["field"] == row["id"]]["share_2_5k"].max()
        assert row["near_saturation_pct"] == pytest.approx(100 * share, abs=5e-4)


def test_field_without_data_has_no_figure_and_says_so(result):
    (row,) = [row for row in headline(result) if row["id"] == EMPTY_FIELD]
    always = {"id", "name", "elevation_m", "steep", "cautions", "months_known"}
    assert {key for key, value in row.items() if value is not None} == always
    assert row["months_known"] == 0
    assert row["cautions"] == 1  # its rejection


def test_steep_own_station_and_cautions(result):
    rows = headline(result)
    # The sample's fields 0 and 3 slope 3.5 %, field 1 exactly 2 %, field 2 has no runway.
    assert [row["steep"] for row in rows] == [True, False, None, True, False, False]
    assert [row["own_station"] for row in rows] == [1.0, 0.4, 0.0, 0.0, 0.0, None]
    assert [row["cautions"] for row in rows] == [1, 0, 0, 0, 0, 1]


def test_errors_are_rounded_up_and_empty_without_data(result):
    # The sample's last field has no own station and no other one; its zeros are no measurement.
    rows = headline(result)
    assert [row["transfer_error_ft"] for row in rows] == [0, 119, 172, 99, 132, None]
    assert [row["pressure_error_ft"] for row in rows] == [1, 6, 67, 8, 10, None]


def test_equal_worst_months_are_counted(result):
    risk = result.risk_monthly.copy()
    own = (risk["field"] == "field-0") & (risk["aircraft"] == "aircraft-1")
    risk.loc[own & (risk["month"] > 3), "shortfall"] = 1.0
    row = headline(replace(result, risk_monthly=risk))[0]
    assert (row["worst_aircraft"], row["worst_month"], row["worst_months"]) == ("aircraft-1", 4, 9)
    assert headline(result)[0]["worst_months"] == 1
    about = {column.name: column.description for column in COLUMNS}
    assert "first of equal ones" in about["worst_month"]


def test_result_without_any_figure_is_written_with_the_same_columns(result, folder, tmp_path):
    empty = replace(
        result,
        risk_monthly=result.risk_monthly.assign(
            shortfall=math.nan, usable_hours=math.nan, limiting=None
        ),
        distributions_monthly=result.distributions_monthly.assign(
            p50=math.nan, p90=math.nan, mean=math.nan
        ),
        near_saturation_monthly=result.near_saturation_monthly.assign(share_2_5k=math.nan),
    )
    write_layers(empty, tmp_path)
    full, none = (
        pyogrio.read_info(where / "fields.gpkg", layer="fields") for where in (folder, tmp_path)
    )
    # The type of a column does not depend on what is in it.
    assert list(full["fields"]) == list(none["fields"])
    assert list(full["dtypes"]) == list(none["dtypes"])
    layer = geopandas.read_file(tmp_path / "fields.gpkg")
    assert layer[["worst_aircraft", "worst_shortfall", "da_p90_ft", "limiting"]].isna().all().all()


def test_many_fields_are_told_apart():
    many = sample_result(60, 3)
    rows = headline(many)
    assert len(rows) == 60
    assert len({row["elevation_m"] for row in rows if row["id"] != EMPTY_FIELD}) == 9


# ---------------------------------------------------------------- GeoPackage


def test_geopackage_opens_as_a_layer_of_points_in_wgs_84(result, folder):
    assert [list(layer) for layer in pyogrio.list_layers(folder / "fields.gpkg")] == [
        ["fields", "Point"]
    ]
    layer = geopandas.read_file(folder / "fields.gpkg", layer="fields")
    assert layer.crs.to_epsg() == 4326
    assert list(layer.columns) == [*(column.name for column in COLUMNS), "geometry"]
    assert layer.geometry.x.tolist() == [field.longitude for field in result.fields]
    assert layer.geometry.y.tolist() == [field.latitude for field in result.fields]
    assert layer["name"].tolist() == [field.name for field in result.fields]
    told = pyogrio.read_info(folder / "fields.gpkg")["layer_metadata"]
    assert told["TITLE"] == result.title
    assert told["CAUTION"].startswith("Planning and comparison aid based on past weather.")
    assert told["SOURCE"].startswith("Invented weather, no rights reserved")
    assert told["PERIOD"] == "2010-2024"
    assert "An empty figure is no data" in told["DESCRIPTION"]


def test_geopackage_is_version_1_3_and_sound(database):
    # OGC 12-128r17, 1.1.1.1.1: application id "GPKG", user version 10300 for 1.3.0.
    assert database.execute("PRAGMA application_id").fetchone()[0].to_bytes(4, "big") == b"GPKG"
    assert database.execute("PRAGMA user_version").fetchone() == (10300,)
    assert database.execute("PRAGMA integrity_check").fetchall() == [("ok",)]  # Req 6
    assert database.execute("PRAGMA foreign_key_check").fetchall() == []  # Req 7
    contents = database.execute(
        "SELECT table_name, data_type, identifier, srs_id FROM gpkg_contents"
    ).fetchall()
    assert contents == [("fields", "features", "fields", 4326)]  # 1.1.3
    reference = "SELECT organization, organization_coordsys_id FROM gpkg_spatial_ref_sys"
    assert database.execute(f"{reference} WHERE srs_id = 4326").fetchone() == ("EPSG", 4326)
    geometry = database.execute("SELECT * FROM gpkg_geometry_columns").fetchall()
    assert geometry == [("fields", "geom", "POINT", 4326, 0, 0)]  # 2.1.5


def definition(database, table: str) -> dict[str, tuple[str, int, int]]:
    """Name, type, whether it may not be null and the place in the primary key, by column."""
    rows = database.execute(f"PRAGMA table_info({table})").fetchall()
    return {name: (kind, needed, key) for _, name, kind, needed, _, key in rows}


def test_geopackage_describes_its_columns_by_the_schema_extension(database):
    # OGC 12-128r17, annex F.9, Req 103 and 107: tables as defined there.
    assert definition(database, "gpkg_data_columns") == {
        "table_name": ("TEXT", 1, 1),
        "column_name": ("TEXT", 1, 2),
        "name": ("TEXT", 0, 0),
        "title": ("TEXT", 0, 0),
        "description": ("TEXT", 0, 0),
        "mime_type": ("TEXT", 0, 0),
        "constraint_name": ("TEXT", 0, 0),
    }
    assert definition(database, "gpkg_data_column_constraints") == {
        "constraint_name": ("TEXT", 1, 0),
        "constraint_type": ("TEXT", 1, 0),
        "value": ("TEXT", 0, 0),
        "min": ("NUMERIC", 0, 0),
        "min_is_inclusive": ("BOOLEAN", 0, 0),
        "max": ("NUMERIC", 0, 0),
        "max_is_inclusive": ("BOOLEAN", 0, 0),
        "description": ("TEXT", 0, 0),
    }
    # Req 141: exactly these two rows, read-write, no column.
    rows = database.execute(
        "SELECT table_name, column_name, scope, definition FROM gpkg_extensions "
        "WHERE extension_name = 'gpkg_schema' ORDER BY table_name"
    ).fetchall()
    link = "http://www.geopackage.org/spec130/#extension_schema"
    assert rows == [
        ("gpkg_data_column_constraints", None, "read-write", link),
        ("gpkg_data_columns", None, "read-write", link),
    ]
    # Req 104 to 106: a known table, columns that exist, no constraint.
    real = set(definition(database, "fields"))
    described = database.execute("SELECT * FROM gpkg_data_columns").fetchall()
    assert [row[1] for row in described] == [column.name for column in COLUMNS]
    for table, column, name, title, text, mime, constraint in described:
        assert table == "fields"
        assert column in real
        assert name == title != ""
        assert text.endswith(".")
        assert (mime, constraint) == (None, None)
    assert real == {row[1] for row in described} | {"fid", "geom"}
    assert len({row[2] for row in described}) == len(described)  # unique (table_name, name)


def test_every_figure_has_a_unit_in_both_files(database, geojson):
    texts = dict(
        database.execute("SELECT column_name, description FROM gpkg_data_columns").fetchall()
    )
    for column in geojson["columns"]:
        words = column["name"] in ("id", "name", "worst_aircraft", "limiting")
        assert (column["unit"] == "") == words, column["name"]
        assert words or texts[column["name"]].endswith(f" Unit: {column['unit']}.")
        for mark, unit in (("_ft", "ft"), ("_pct", "%"), ("_m", "m")):
            if column["name"].endswith(mark):
                assert column["unit"] == unit


def test_geopackage_holds_metadata_of_the_layer(database):
    # OGC 12-128r17, annex F.8, Req 93 to 101 and 140.
    rows = database.execute(
        "SELECT table_name, column_name, scope FROM gpkg_extensions "
        "WHERE extension_name = 'gpkg_metadata' ORDER BY table_name"
    ).fetchall()
    assert rows == [
        ("gpkg_metadata", None, "read-write"),
        ("gpkg_metadata_reference", None, "read-write"),
    ]
    ((scope, mime, text),) = database.execute(
        "SELECT md_scope, mime_type, metadata FROM gpkg_metadata"
    ).fetchall()
    assert (scope, mime) == ("dataset", "text/xml")
    assert "not approved by any authority" in text
    reference = database.execute("SELECT * FROM gpkg_metadata_reference").fetchall()
    assert reference == [("table", "fields", None, None, "2000-01-01T00:00:00.000Z", 1, None)]


def test_general_tool_prints_the_layer_and_its_metadata(folder):
    program = shutil.which("ogrinfo")
    if program is None:
        pytest.skip("ogrinfo is not installed")
    for name in ("fields.gpkg", "fields.geojson"):
        done = subprocess.run(
            [program, "-ro", "-al", "-so", str(folder / name)],
            capture_output=True,
            text=True,
            encoding="utf-8",
            check=True,
        )
        assert done.stderr == ""
        assert "Layer name: fields" in done.stdout
        assert "Feature Count: 6" in done.stdout
        assert 'ID["EPSG",4326]' in done.stdout
        for column in COLUMNS:
            assert f"\n{column.name}: " in done.stdout
        if name == "fields.gpkg":
            assert "CAUTION=Planning and comparison aid" in done.stdout
            assert "DESCRIPTION=Airfields with their headline" in done.stdout


# ---------------------------------------------------------------- GeoJSON


def test_geojson_keeps_to_the_rfc(geojson, result):
    # RFC 7946: 3.3 and 3.2 members, 3.1.1 longitude first, 4 no crs, 6.1 foreign members, 7.1
    # foreign members do not take the name of a member that makes an object.
    assert geojson["type"] == "FeatureCollection"
    assert set(geojson) == {"type", "name", "metadata", "columns", "features"}
    for feature, field in zip(geojson["features"], result.fields, strict=True):
        assert set(feature) == {"type", "id", "properties", "geometry"}
        assert feature["type"] == "Feature"
        assert feature["id"] == field.id
        assert feature["geometry"] == {
            "type": "Point",
            "coordinates": [field.longitude, field.latitude],
        }
    assert not {"coordinates", "geometry", "geometries", "properties"} & set(geojson)
    assert geojson["metadata"]["caution"].startswith("Planning and comparison aid")
    assert geojson["metadata"]["title"] == result.title
    assert [column["name"] for column in geojson["columns"]] == list(
        geojson["features"][0]["properties"]
    )


def test_geojson_and_geopackage_hold_the_same(folder, geojson):
    one = geopandas.read_file(folder / "fields.gpkg")
    other = geopandas.read_file(folder / "fields.geojson")
    assert other.crs.to_epsg() == 4326
    assert list(one.columns) == list(other.columns)
    assert one.geometry.equals(other.geometry)
    for (_, row), feature in zip(one.iterrows(), geojson["features"], strict=True):
        for key, value in feature["properties"].items():
            assert pd.isna(row[key]) if value is None else row[key] == value, key


# ---------------------------------------------------------------- bytes and failures

CHILD = """
import hashlib, sys
from pathlib import Path
sys.path.insert(0, sys.argv[1])
from sample_result import sample_result
from climarisk.outputs.layers import write_layers
folder = Path(sys.argv[2])
folder.mkdir()
for name in write_layers(sample_result(), folder):
    print(name, hashlib.sha256((folder / name).read_bytes()).hexdigest())
"""


def test_another_process_writes_the_same_bytes(folder, tmp_path):
    done = subprocess.run(
        [sys.executable, "-c", CHILD, str(Path(__file__).parent), str(tmp_path / "out")],
        env={
            **os.environ,
            "PYTHONPATH": str(ROOT),
            "PYTHONHASHSEED": "3",
            "TZ": "Etc/GMT+7",
        },
        capture_output=True,
        text=True,
        check=True,
    )
    mine = [
        f"{name} {hashlib.sha256((folder / name).read_bytes()).hexdigest()}"
        for name in ("fields.gpkg", "fields.geojson")
    ]
    assert done.stdout.splitlines() == mine


def test_writing_again_over_other_files_gives_the_same_bytes(result, folder, tmp_path):
    write_layers(sample_result(4, 1), tmp_path)
    write_layers(result, tmp_path)
    for name in ("fields.gpkg", "fields.geojson"):
        assert (tmp_path / name).read_bytes() == (folder / name).read_bytes()


def test_clock_of_the_library_runs_again_afterwards(result, tmp_path):
    write_layers(result, tmp_path)
    assert pyogrio.get_gdal_config_option("OGR_CURRENT_DATE") is None


@pytest.mark.parametrize("error", [pyogrio.errors.DataSourceError, pyogrio.errors.DataLayerError])
def test_failure_of_the_vector_library_is_an_os_error(result, tmp_path, monkeypatch, error):
    def full(*_, **__):
        raise error("disk I/O error")

    monkeypatch.setattr(geopandas.GeoDataFrame, "to_file", full)
    with pytest.raises(OSError, match="fields.gpkg: disk I/O error"):
        write_layers(result, tmp_path)
    assert pyogrio.get_gdal_config_option("OGR_CURRENT_DATE") is None


def test_failure_of_the_database_is_an_os_error(result, tmp_path, monkeypatch):
    monkeypatch.setattr(layers, "_SCHEMA_TABLES", ("CREATE TABLE fields (a)",))
    with pytest.raises(OSError, match="fields.gpkg: table fields already exists"):
        write_layers(result, tmp_path)
