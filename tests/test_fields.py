"""Fields and runways: the contract of fields.csv, its layers, and runways.csv."""

from __future__ import annotations

import json
from pathlib import Path

import geopandas
import pytest
from shapely.geometry import LineString, Point
from study_maker import FIELDS, RUNWAYS

from climarisk.errors import InputError
from climarisk.fields import SURFACES, Field, read_fields, read_runways

ROWS = [
    {"id": "LOW", "name": "Low meadow", "elevation_m": 500.0, "timezone": "Europe/Rome"},
    {"id": "MID", "name": "Middle strip", "elevation_m": 1100.0, "stations": "VALE PASS"},
]
PLACES = [(46.5, 11.0), (46.55, 11.1)]
RUNWAY_HEADER = "field,runway,heading_deg,surface,takeoff,landing"


def fields_csv(tmp_path: Path, content: str):
    path = tmp_path / "fields.csv"
    path.write_text(content, encoding="utf-8", newline="")
    return read_fields(path)


def one_field(tmp_path: Path, latitude="46.5", longitude="11.0", elevation="500", **more: str):
    header = ["id", "name", "latitude", "longitude", "elevation_m", *more]
    cells = ["A", "a", latitude, longitude, elevation, *more.values()]
    return fields_csv(tmp_path, f"{','.join(header)}\n{','.join(cells)}\n")


def layer(tmp_path: Path, suffix: str, rows=ROWS, geometry=None, crs="EPSG:4326") -> Path:
    points = geometry or [Point(lon, lat) for lat, lon in PLACES]
    table = geopandas.GeoDataFrame(rows, geometry=points, crs=crs)
    path = tmp_path / f"fields{suffix}"
    driver = {".gpkg": "GPKG", ".geojson": "GeoJSON", ".json": "GeoJSON"}[suffix]
    table.to_file(path, driver=driver)
    return path


def geojson(tmp_path: Path, properties: list[dict], geometries: list[dict | None]) -> Path:
    features = [
        {"type": "Feature", "properties": p, "geometry": g}
        for p, g in zip(properties, geometries, strict=True)
    ]
    path = tmp_path / "fields.geojson"
    path.write_text(json.dumps({"type": "FeatureCollection", "features": features}))
    return path


def test_the_fields_of_a_csv_have_the_values_of_its_cells(tmp_path):
    fields, problems = fields_csv(tmp_path, FIELDS)
    assert problems == []
    assert [f.id for f in fields] == ["LOW", "MID", "TOP"]
    assert fields[0] == Field(
        "LOW", "Low meadow (invented)", 46.5, 11.0, 500.0, "Europe/Rome", ("VALE",)
    )
    assert fields[1].stations == ()


def test_an_elevation_in_feet_is_read_as_metres(tmp_path):
    metric, _ = fields_csv(tmp_path, FIELDS)
    # International foot 0.3048 m (1959 agreement): 1000 ft is 304.8 m.
    feet, problems = fields_csv(
        tmp_path, FIELDS.replace("elevation_m", "elevation_ft").replace(",500,", ",1000,")
    )
    assert problems == []
    assert feet[0].elevation_m == pytest.approx(304.8, abs=1e-9)
    assert metric[0].elevation_m == 500.0


@pytest.mark.parametrize(
    ("header", "came"),
    [("elevation_m,elevation_ft", "elevation_m and elevation_ft are there"), ("timezone", "none")],
)
def test_exactly_one_elevation_column_is_needed(tmp_path, header, came):
    cells = ",".join("" for _ in header.split(","))
    _, problems = fields_csv(tmp_path, f"id,name,latitude,longitude,{header}\nA,a,1,1,{cells}\n")
    assert len(problems) == 1
    assert "exactly one of elevation_m and elevation_ft" in problems[0]
    assert came in problems[0]


@pytest.mark.parametrize(
    ("latitude", "longitude", "zone"),
    [
        # Places whose IANA zone is beyond doubt (IANA tz database; from memory).
        ("46.5", "11.0", "Europe/Rome"),
        ("39.74", "-104.99", "America/Denver"),
        ("-8.05", "-34.9", "America/Recife"),
        ("27.7", "85.3", "Asia/Kathmandu"),
    ],
)
def test_the_zone_comes_from_the_coordinates_where_none_is_given(
    tmp_path, latitude, longitude, zone
):
    fields, problems = one_field(tmp_path, latitude, longitude)
    assert problems == []
    assert fields[0].timezone == zone


def test_a_given_zone_wins_over_the_coordinates(tmp_path):
    fields, _ = one_field(tmp_path, timezone="America/Denver")
    assert fields[0].timezone == "America/Denver"


@pytest.mark.parametrize(
    ("latitude", "longitude"),
    [("90", "0"), ("-90", "0"), ("0", "180"), ("0", "-180"), ("89.999", "-179.999")],
)
def test_a_field_may_lie_at_a_pole_or_on_the_antimeridian(tmp_path, latitude, longitude):
    fields, problems = one_field(tmp_path, latitude, longitude)
    assert problems == []
    assert fields[0].timezone


@pytest.mark.parametrize(
    "zone", ["Europe/Roma", "../../etc/passwd", "Europe", ".", "/etc/passwd", "UTC+1", "x" * 3000]
)
def test_an_unknown_zone_is_told_with_the_line(tmp_path, zone):
    fields, problems = one_field(tmp_path, timezone=zone)
    assert fields == []
    assert len(problems) == 1
    assert "fields.csv, line 2: " in problems[0]
    assert "is not a time zone; give an IANA name" in problems[0]


@pytest.mark.parametrize(
    ("cells", "place"),
    [
        ({"latitude": "90.1"}, "'latitude' is '90.1'"),
        ({"latitude": "nan"}, "'latitude' is 'nan'"),
        ({"latitude": "N46"}, "'latitude' is 'N46'"),
        ({"latitude": ""}, "'latitude' is missing"),
        ({"longitude": "-180.5"}, "'longitude' is '-180.5'"),
        ({"longitude": "inf"}, "'longitude' is 'inf'"),
        ({"longitude": '"11,0"'}, "'longitude' is '11,0'"),
        ({"elevation": "9000"}, "'elevation_m' is '9000'"),
        ({"elevation": "-500"}, "'elevation_m' is '-500'"),
        ({"elevation": "1e400"}, "'elevation_m' is '1e400'"),
        ({"elevation": "500 m"}, "'elevation_m' is '500 m'"),
        ({"elevation": ""}, "the elevation of 'A' is empty"),
    ],
)
def test_a_cell_that_is_no_place_is_told_with_the_line(tmp_path, cells, place):
    fields, problems = one_field(tmp_path, **cells)
    assert fields == []
    assert len(problems) == 1
    assert f"fields.csv, line 2: {place}" in problems[0]


def test_the_dead_sea_shore_and_the_highest_fields_are_places(tmp_path):
    for elevation in ("-430", "4411", "6000"):
        assert one_field(tmp_path, elevation=elevation)[1] == []


def test_pins_are_read_once_each_in_their_order(tmp_path):
    fields, _ = one_field(tmp_path, stations='"B  A B"')
    assert fields[0].stations == ("B", "A")


def test_a_repeated_field_is_told(tmp_path):
    _, problems = fields_csv(tmp_path, FIELDS.replace("MID,", "LOW,"))
    assert len(problems) == 1
    assert "the field 'LOW' comes twice" in problems[0]


def test_every_bad_row_is_told(tmp_path):
    _, problems = fields_csv(tmp_path, FIELDS.replace("46.50", "146").replace("46.60", "246"))
    assert ["line 2" in problems[0], "line 4" in problems[1], len(problems)] == [True, True, 2]


@pytest.mark.parametrize("suffix", [".geojson", ".json", ".gpkg"])
def test_a_layer_gives_the_fields_of_the_csv(tmp_path, suffix):
    expected, _ = fields_csv(
        tmp_path,
        "id,name,latitude,longitude,elevation_m,timezone,stations\n"
        "LOW,Low meadow,46.5,11.0,500,Europe/Rome,\nMID,Middle strip,46.55,11.1,1100,,VALE PASS\n",
    )
    fields, problems = read_fields(layer(tmp_path, suffix))
    assert problems == []
    assert fields == expected


def test_a_layer_in_another_reference_system_is_turned_to_wgs84(tmp_path):
    points = geopandas.GeoSeries([Point(11.0, 46.5), Point(11.1, 46.55)], crs=4326).to_crs(32632)
    path = layer(tmp_path, ".gpkg", geometry=list(points), crs="EPSG:32632")
    fields, problems = read_fields(path)
    assert problems == []
    for field, (latitude, longitude) in zip(fields, PLACES, strict=True):
        # 1e-8 degree is a millimetre.
        assert (field.latitude, field.longitude) == pytest.approx((latitude, longitude), abs=1e-8)


def test_whole_number_ids_of_a_layer_are_words(tmp_path):
    fields, problems = read_fields(layer(tmp_path, ".gpkg", [{**r, "id": 7} for r in ROWS[:1]] * 2))
    assert [f.id for f in fields] == ["7", "7"]
    assert "the field '7' comes twice" in problems[0]


def test_an_unknown_attribute_of_a_layer_names_the_nearest_known_one(tmp_path):
    rows = [{"elev_m": 1.0, **r} for r in ROWS]
    _, problems = read_fields(layer(tmp_path, ".gpkg", rows))
    assert "the attribute 'elev_m' is not known; did you mean 'elevation_m'?" in problems[0]


def test_a_layer_without_points_is_refused(tmp_path):
    line = LineString([(0, 0), (1, 1)])
    _, problems = read_fields(layer(tmp_path, ".gpkg", geometry=[line, line]))
    assert "the layer must hold points" in problems[0]
    point = {"type": "Point", "coordinates": [11.0, 46.5]}
    _, problems = read_fields(geojson(tmp_path, ROWS, [point, None]))
    assert "the layer must hold points" in problems[0]
    _, problems = read_fields(geojson(tmp_path, [], []))
    assert "the layer must hold points" in problems[0]


@pytest.mark.filterwarnings("ignore:'crs' was not provided")  # it is what the test is about
def test_a_layer_without_a_reference_system_is_refused(tmp_path):
    _, problems = read_fields(layer(tmp_path, ".gpkg", crs=None))
    assert "no coordinate reference system" in problems[0]


@pytest.mark.parametrize("content", [b"", b"{", b"\xff\xfe\0", FIELDS.encode()])
def test_a_layer_that_is_none_is_refused_with_its_name(tmp_path, content):
    path = tmp_path / "fields.geojson"
    path.write_bytes(content)
    with pytest.raises(InputError, match=r"fields\.geojson: this is not a readable vector layer"):
        read_fields(path)


def test_an_absent_layer_and_a_folder_are_refused(tmp_path):
    with pytest.raises(InputError, match="there is no such file"):
        read_fields(tmp_path / "no.gpkg")
    (tmp_path / "folder.gpkg").mkdir()
    with pytest.raises(InputError, match="it is no regular file"):
        read_fields(tmp_path / "folder.gpkg")


def test_a_list_as_an_attribute_is_a_problem_not_a_crash(tmp_path):
    point = {"type": "Point", "coordinates": [11.0, 46.5]}
    rows = [{"id": "A", "name": "a", "elevation_m": 5.0, "stations": ["VALE", "PASS"]}]
    _, problems = read_fields(geojson(tmp_path, rows, [point]))
    assert len(problems) == 1


def test_a_file_that_points_at_other_sources_is_no_layer(tmp_path):
    (tmp_path / "secret.csv").write_text(FIELDS)
    path = tmp_path / "fields.gpkg"
    path.write_text(
        "<OGRVRTDataSource><OGRVRTLayer name='secret'>"
        f"<SrcDataSource>{tmp_path / 'secret.csv'}</SrcDataSource>"
        "<GeometryType>wkbPoint</GeometryType><LayerSRS>EPSG:4326</LayerSRS>"
        "<GeometryField encoding='PointFromColumns' x='longitude' y='latitude'/>"
        "</OGRVRTLayer></OGRVRTDataSource>"
    )
    with pytest.raises(InputError):
        read_fields(path)


# ---------------------------------------------------------------- runways


def runways(tmp_path: Path, content: str):
    fields, problems = fields_csv(tmp_path, FIELDS)
    assert problems == []
    path = tmp_path / "runways.csv"
    path.write_text(content, encoding="utf-8")
    return read_runways(path, fields)


def directions(tmp_path: Path, header: str, cells: str):
    """The direction of LOW, given by `cells` of the columns `header`."""
    rows = "".join(f"{f},09,90,paved,yes,yes,{cells}\n" for f in ("LOW", "MID", "TOP"))
    fields, problems = runways(tmp_path, f"{RUNWAY_HEADER},{header}\n{rows}")
    return (fields[0].runways[0] if fields[0].runways else None), problems


def test_each_direction_has_its_own_row(tmp_path):
    fields, problems = runways(tmp_path, RUNWAYS)
    assert problems == []
    assert [[d.runway for d in f.runways] for f in fields] == [
        ["09", "27"],
        ["03", "21"],
        ["12", "30"],
    ]
    up, down = fields[2].runways
    assert (up.slope_pct, up.takeoff, up.landing) == (8.0, False, True)
    assert (down.slope_pct, down.takeoff, down.landing) == (-8.0, True, False)


def test_declared_distances_are_kept_and_not_tagged(tmp_path):
    fields, _ = runways(tmp_path, RUNWAYS)
    d = fields[0].runways[0]
    assert (d.tora_m, d.toda_m, d.asda_m, d.lda_m, d.undeclared) == (800, 850, 820, 780, False)


def test_a_length_alone_fills_the_declared_distances_and_is_tagged(tmp_path):
    fields, _ = runways(tmp_path, RUNWAYS)
    d = fields[1].runways[0]
    assert (d.tora_m, d.toda_m, d.asda_m, d.lda_m, d.undeclared) == (600, 600, 600, 600, True)


@pytest.mark.parametrize(
    ("header", "cells", "expected"),
    [
        ("tora_m,lda_m", "800,700", (800, 800, 800, 700)),
        ("tora_m,length_m", "800,900", (800, 800, 800, 900)),
        ("lda_m,length_m", "700,900", (900, 900, 900, 700)),
        ("tora_m,toda_m,length_m", "800,880,900", (800, 880, 800, 900)),
    ],
)
def test_gaps_in_the_declared_distances_are_filled_without_credit(
    tmp_path, header, cells, expected
):
    d, problems = directions(tmp_path, header, cells)
    assert problems == []
    assert (d.tora_m, d.toda_m, d.asda_m, d.lda_m) == expected
    assert d.undeclared


def test_lengths_in_feet_are_read_as_metres(tmp_path):
    d, problems = directions(tmp_path, "tora_ft,lda_m", "1000,250")
    assert problems == []
    # International foot 0.3048 m (1959 agreement).
    assert (d.tora_m, d.lda_m) == pytest.approx((304.8, 250.0), abs=1e-9)


def test_a_runway_of_13000_feet_is_allowed_like_its_metres(tmp_path):
    assert directions(tmp_path, "length_m", "3962.4")[1] == []
    d, problems = directions(tmp_path, "length_ft", "13000")
    assert problems == []
    assert d.tora_m == pytest.approx(3962.4)


@pytest.mark.parametrize(
    ("header", "cells", "sentence"),
    [
        ("length_m,length_ft", "600,2000", "length_m and length_ft are both given"),
        ("tora_m", "800", "LDA cannot be told"),
        ("length_m", "", "TORA and TODA and ASDA and LDA cannot be told"),
        ("length_m", "0", "'length_m' is '0'"),
        ("length_m", "-600", "'length_m' is '-600'"),
        ("length_m", "nan", "'length_m' is 'nan'"),
        ("length_m", "inf", "'length_m' is 'inf'"),
        ("length_m", "600 m", "'length_m' is '600 m'"),
        ("length_m,tora_m,toda_m", "600,600,500", "TODA is 500 m, shorter than TORA with 600 m"),
        ("length_m,tora_m,asda_m", "600,600,500", "ASDA is 500 m, shorter than TORA with 600 m"),
        ("length_m,slope_pct", "600,41", "'slope_pct' is '41'"),
        ("length_m,slope_pct", "600,nan", "'slope_pct' is 'nan'"),
    ],
)
def test_a_bad_length_or_slope_is_told_for_each_row(tmp_path, header, cells, sentence):
    _, problems = directions(tmp_path, header, cells)
    assert [p.split(": ")[0].rsplit(" ", 1)[1] for p in problems] == ["2", "3", "4"]
    assert all(f"runways.csv, line {i}: {sentence}" in p for i, p in enumerate(problems, 2))


def test_a_blank_slope_is_level(tmp_path):
    d, problems = directions(tmp_path, "length_m,slope_pct", "600,")
    assert (problems, d.slope_pct) == ([], 0.0)


@pytest.mark.parametrize("surface", SURFACES)
def test_every_surface_of_the_contract_is_read(tmp_path, surface):
    fields, problems = runways(tmp_path, RUNWAYS.replace("grass", surface))
    assert problems == []
    assert fields[1].runways[0].surface == surface


def test_the_surfaces_are_those_of_the_contract():
    assert set(SURFACES) == {"paved", "gravel", "grass", "wet-grass", "soft", "snow"}


@pytest.mark.parametrize(
    ("old", "new", "sentence"),
    [
        ("MID,03,30", "MID,03,361", "'heading_deg' is '361'"),
        ("MID,03,30", "MID,03,-1", "'heading_deg' is '-1'"),
        ("1.5,grass", "1.5,tarmac", "'surface' is 'tarmac'"),
        ("1.5,grass,yes", "1.5,grass,Yes", "'takeoff' is 'Yes'"),
        ("1.5,grass,yes,yes", "1.5,grass,yes,1", "'landing' is '1'"),
        ("MID,03,30", "MID,,30", "'runway' is missing"),
    ],
)
def test_a_bad_cell_is_one_sentence_with_the_line(tmp_path, old, new, sentence):
    _, problems = runways(tmp_path, RUNWAYS.replace(old, new, 1))
    assert len(problems) == 1
    assert f"runways.csv, line 4: {sentence}" in problems[0]


def test_an_unknown_field_names_the_nearest_known_one(tmp_path):
    _, problems = runways(tmp_path, RUNWAYS.replace("MID,03", "MDI,03"))
    assert len(problems) == 1
    assert "line 4: the field 'MDI' is not in the fields file; did you mean 'MID'?" in problems[0]


def test_one_misspelt_field_is_one_sentence_even_on_a_one_way_strip(tmp_path):
    _, problems = runways(tmp_path, RUNWAYS.replace("TOP,12", "TPO,12"))
    assert len(problems) == 1


def test_a_field_without_a_runway_is_told(tmp_path):
    _, problems = runways(tmp_path, RUNWAYS.split("TOP")[0])
    assert len(problems) == 1
    assert "the field 'TOP' has no runway direction" in problems[0]


@pytest.mark.parametrize(
    ("old", "new", "operation"),
    [("gravel,no,yes", "gravel,no,no", "landing"), ("gravel,yes,no", "gravel,no,no", "takeoff")],
)
def test_a_field_closed_for_an_operation_is_told(tmp_path, old, new, operation):
    _, problems = runways(tmp_path, RUNWAYS.replace(old, new))
    assert len(problems) == 1
    assert f"no runway direction of 'TOP' is open for {operation}" in problems[0]


def test_a_direction_given_twice_is_told(tmp_path):
    _, problems = runways(tmp_path, RUNWAYS.replace("MID,21", "MID,03"))
    assert len(problems) == 1
    assert "the direction '03' of 'MID' comes twice" in problems[0]


def test_the_same_designator_at_two_fields_is_fine(tmp_path):
    assert runways(tmp_path, RUNWAYS.replace("MID,03", "MID,09"))[1] == []
