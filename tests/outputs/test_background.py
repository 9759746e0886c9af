"""Coast and borders behind the fields: cut where they should be, nothing else, small, credited.

Places on land, at sea and on coasts are read from any atlas (common knowledge, no source); the
outline of the countries against which the land is compared as a whole is the 1:110 million one
that pyogrio brings for its tests.
"""

from __future__ import annotations

import base64
import gzip
import json
import re
import subprocess
import sys
from dataclasses import dataclass, replace
from functools import cache, cached_property
from importlib.resources import files
from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest
import shapely
from hypothesis import given, settings
from hypothesis import strategies as st
from sample_result import sample_result

from climarisk.outputs import background
from climarisk.outputs.background import image_sources, outlines_for
from climarisk.outputs.map import render_map
from climarisk.results import Tiles

FIELD = sample_result(1, 1).fields[0]
FOLDER = files("climarisk.outputs") / "background"
KM_PER_DEGREE = 40_007.863 / 360.0  # meridian of the WGS 84 ellipsoid, 40 007.863 km around

BOXES = {
    "Alps": [(45.8, 6.5), (47.3, 11.5)],
    "Europe": [(36.0, -9.0), (60.0, 30.0)],
    "North America": [(30.0, -122.0), (47.0, -75.0)],
    "Rocky Mountains": [(37.0, -108.0), (40.0, -105.0)],
    "Fiji": [(-17.7, 177.4), (-16.7, -179.9)],
    "Aleutians": [(52.0, 173.0), (54.0, -166.0)],
    "Norway": [(58.0, 5.0), (71.0, 30.0)],
    "Indonesia": [(-9.0, 96.0), (5.0, 130.0)],
    "Aegean": [(36.0, 23.0), (39.0, 28.0)],
    "Lisbon": [(38.7, -9.4)],
    "world": [(-45.0, 170.0), (60.0, -170.0), (46.0, 8.0), (-30.0, -65.0)],
}


@dataclass
class Outlines:
    """Outlines as the page reads them, in degrees of longitude and latitude."""

    land: list[np.ndarray]
    border: list[np.ndarray]
    state: list[np.ndarray]
    seams: dict[str, list[float]]

    def coast(self) -> shapely.MultiLineString:
        """Edges of the land that are no cuts."""
        edges = []
        for ring in self.land:
            for a, b in pairwise([*ring.tolist(), ring[0].tolist()]):
                cut = (a[0] == b[0] and a[0] in self.seams["longitudes"]) or (
                    a[1] == b[1] and a[1] in self.seams["latitudes"]
                )
                if not cut:
                    edges.append([a, b])
        return shapely.MultiLineString(edges)

    @cached_property
    def areas(self) -> np.ndarray:
        areas = shapely.polygons([shapely.linearrings(ring) for ring in self.land])
        shapely.prepare(areas)
        return areas

    def is_land(self, latitude: float, longitude: float) -> bool:
        """Inside an odd number of rings."""
        return bool(shapely.contains_xy(self.areas, longitude, latitude).sum() % 2)


def fields_at(places):
    return [replace(FIELD, latitude=lat, longitude=lon) for lat, lon in places]


def numbers_of(text: str) -> list[int]:
    numbers, number, shift = [], 0, 0
    for byte in base64.b64decode(text):
        number |= (byte & 127) << shift
        shift += 7
        if byte < 128:
            numbers.append(number)
            number, shift = 0, 0
    assert shift == 0, "the last number is whole"
    return numbers


def lines_of(text: str, per_degree: int) -> list[np.ndarray]:
    numbers, lines, at, last = numbers_of(text), [], 0, np.zeros(2, dtype=int)
    while at < len(numbers):
        coded = np.array(numbers[at + 1 : at + 1 + 2 * numbers[at]])
        steps = np.where(coded % 2, -(coded + 1) // 2, coded // 2).reshape(-1, 2)
        points = last + np.cumsum(steps, axis=0)
        assert len(points) == numbers[at]
        at, last = at + 1 + 2 * numbers[at], points[-1]
        lines.append(points / per_degree)
    return lines


def read(outlines: dict) -> Outlines:
    per_degree = outlines["perDegree"]
    lines = {kind: lines_of(outlines[kind], per_degree) for kind in ("land", "border", "state")}
    seams = {k: [v / per_degree for v in edges] for k, edges in outlines["seams"].items()}
    return Outlines(**lines, seams=seams)


@cache
def around(*places) -> Outlines:
    return read(outlines_for(fields_at(places)))


def distance_km(shape, latitude: float, longitude: float) -> float:
    """Distance of a place to lines nearby, in a plane about the place."""
    shrunk = np.cos(np.radians(latitude))

    def plane(points):
        return (points - [longitude, latitude]) * [shrunk, 1.0] * KM_PER_DEGREE

    return shapely.distance(shapely.transform(shape, plane), shapely.Point(0.0, 0.0))


def within(lines, *box: float):
    return shapely.intersection(shapely.MultiLineString(lines), shapely.box(*box))


# ---------------------------------------------------------------- where lines are


@pytest.mark.parametrize(
    ("latitude", "longitude"),
    [
        (38.7, -9.4),  # Cascais near Lisbon
        (36.0, -5.6),  # Tarifa, on the strait
        (50.07, -5.71),  # Land's End
        (71.17, 25.78),  # North Cape
        (43.3, 5.37),  # Marseille
        (-34.36, 18.47),  # Cape of Good Hope
        (37.8, -122.51),  # the coast at San Francisco
    ],
)
def test_a_place_on_the_coast_lies_at_the_coast(latitude, longitude):
    # 15 km: what a line at 1:50 million may leave out of bays and headlands.
    coast = around((latitude, longitude)).coast()
    assert distance_km(coast, latitude, longitude) < 15.0


def test_the_inner_alps_have_borders_and_no_coast():
    alps = around(*BOXES["Alps"])
    assert within(alps.border, 7.0, 45.7, 11.0, 47.7).length > 5.0
    assert distance_km(alps.coast(), 46.6, 9.0) > 200.0
    assert distance_km(shapely.MultiLineString(alps.border), 45.87, 7.17) < 5.0  # Great St Bernard


def test_lines_between_states_stand_in_the_rocky_mountains():
    rockies = around(*BOXES["Rocky Mountains"])
    lines = shapely.MultiLineString(rockies.state)
    # Colorado lies between 37 and 41 degrees north (Colorado, Enabling Act of 1875, section 2).
    for latitude in (37.0, 41.0):
        assert distance_km(lines, latitude, -105.5) < 3.0
    assert distance_km(lines, 39.0, -105.5) > 100.0


LAND_AND_SEA = [
    *[(lat, lon, True) for lat, lon in ((40.4, -3.7), (47.4, 8.5), (50.1, 14.4), (39.0, 33.0))],
    *[(lat, lon, True) for lat, lon in ((39.7, -105.0), (-15.8, -47.9), (0.0, 25.0), (-25, 134))],
    *[(lat, lon, True) for lat, lon in ((62.0, 100.0), (72.0, -40.0), (-80.0, 20.0), (67.0, -179))],
    *[(lat, lon, False) for lat, lon in ((45.0, -5.0), (40.0, 12.0), (43.0, 34.0), (42.0, 50.5))],
    *[(lat, lon, False) for lat, lon in ((30.0, -40.0), (0.0, -150.0), (75.0, 0.0), (-60.0, 20.0))],
    *[(lat, lon, False) for lat, lon in ((54.0, -178.0), (84.0, 0.0), (21.0, 38.0), (60.0, -86.0))],
]


@pytest.mark.parametrize("box", BOXES)
def test_land_is_land_and_sea_is_sea_the_world_over(box):
    outlines = around(*BOXES[box])
    west = min(ring[:, 0].min() for ring in outlines.land)
    wrong = [
        (lat, lon)
        for lat, lon, land in LAND_AND_SEA
        # Off the tenths of a degree along which land is cut.
        if outlines.is_land(lat + 0.03, west + (lon + 0.03 - west) % 360.0) is not land
    ]
    assert wrong == []


@cache
def source_rings() -> tuple[np.ndarray, ...]:
    content = json.loads(gzip.decompress((FOLDER / "outlines.json.gz").read_bytes()))
    unit = 1.0 / content["per_degree"]
    return tuple(np.cumsum(np.reshape(r, (-1, 2)), axis=0) * unit for r in content["land"])


def in_odd_number(rings, box) -> shapely.Geometry:
    """What lies in a box and inside an odd number of rings."""
    inside = shapely.Polygon()
    for ring in rings:
        area = shapely.Polygon(ring)
        if shapely.intersects(shapely.envelope(area), box):
            part = shapely.intersection(shapely.make_valid(area), box)
            inside = shapely.symmetric_difference(inside, part)
    return inside


def test_the_land_around_the_fields_is_that_of_the_source_cut_by_shapely():
    box = shapely.box(-15.0, 34.0, 35.0, 62.0)
    expected = in_odd_number(source_rings(), box)
    drawn = in_odd_number(around(*BOXES["Europe"]).land, box)
    # Bends of 2 km are left out of a box 4000 km wide; their areas cancel in part.
    assert shapely.symmetric_difference(drawn, expected).area < 0.01 * expected.area


@pytest.mark.parametrize("box", ["Europe", "Fiji", "Rocky Mountains"])
def test_no_edge_of_a_cut_passes_for_a_coast(box):
    turns = ([-360.0, 0.0], [0.0, 0.0], [360.0, 0.0])
    source = shapely.MultiLineString([ring + turn for ring in source_rings() for turn in turns])
    shapely.prepare(source)
    points = shapely.get_coordinates(shapely.segmentize(around(*BOXES[box]).coast(), 0.5))
    # The widest square leaves out bends of 180/250 degrees of the Mercator plane.
    assert shapely.dwithin(source, shapely.points(points), 180.0 / 250.0 + 0.05).all()


def test_the_land_agrees_with_another_drawing_of_the_countries():
    fixture = pytest.importorskip("pyogrio").__file__
    path = Path(fixture).parent / "tests/fixtures/naturalearth_lowres/naturalearth_lowres.shp"
    if not path.exists():
        pytest.skip("pyogrio came without the outlines of its tests")
    import geopandas

    other = shapely.union_all(geopandas.read_file(path).geometry.values)
    shapely.prepare(other)
    lon, lat = np.meshgrid(np.arange(-9.72, 30.0, 1.3), np.arange(36.03, 60.0, 1.1))
    mine = [around(*BOXES["Europe"]).is_land(y, x) for x, y in zip(lon.flat, lat.flat, strict=True)]
    theirs = shapely.contains_xy(other, lon.ravel(), lat.ravel())
    # Common practice, no source: between the scales a few per cent of the points change sides.
    assert (np.array(mine) == theirs).mean() > 0.95


# ---------------------------------------------------------------- where the world is joined


def test_fiji_is_whole_about_the_180_degree_meridian():
    fiji = around(*BOXES["Fiji"])
    assert fiji.is_land(-17.8, 178.0)  # Viti Levu
    assert fiji.is_land(-16.6, 179.2)  # Vanua Levu
    assert not fiji.is_land(-17.5, 180.0)
    # Taveuni lies across the meridian at 16.85 S; nothing of it is drawn half a world away.
    assert distance_km(fiji.coast(), -16.85, 180.0) < 40.0
    near = [ring for ring in fiji.land if -20.0 < ring[0, 1] < -16.0 and 176 < ring[0, 0] < 183]
    assert len(near) >= 3
    assert max(np.ptp(ring[:, 0]) for ring in near) < 3.0


@pytest.mark.parametrize("places", [BOXES["Aleutians"], [(67.0, 179.9)], [(67.0, -179.9)]])
def test_chukotka_has_no_coast_along_the_180_degree_meridian(places):
    outlines = around(*places)
    turn = 180.0 if places[0][1] > 0 else -180.0
    assert outlines.is_land(67.0, turn - 2.0)
    assert outlines.is_land(67.0, turn + 2.0)
    # Kolyuchin Bay and Kresta Bay come within about 80 km.
    assert distance_km(outlines.coast(), 67.0, turn) > 60.0


def test_the_aleutians_are_drawn_where_their_fields_are():
    aleutians = around(*BOXES["Aleutians"])
    assert aleutians.is_land(54.75, 360.0 - 164.0)  # Unimak
    assert aleutians.is_land(56.0, 160.0)  # Kamchatka
    assert not aleutians.is_land(54.0, 182.0)


def test_a_box_of_nothing_but_ocean_has_no_line_near():
    ocean = around((-45.0, -120.0), (-43.0, -117.0))
    box = shapely.box(-122.0, -47.0, -115.0, -41.0)
    assert shapely.intersection(ocean.coast(), box).is_empty
    assert ocean.is_land(-30.0, -65.0), "the lands around stay"


@pytest.mark.parametrize(
    "places", [[], [(90.0, 0.0)], [(-90.0, 180.0)], [(89.0, 10.0), (-89.0, -170.0)]]
)
def test_poles_and_no_fields_give_the_world(places):
    outlines = around(*places)
    west = min(ring[:, 0].min() for ring in outlines.land)
    assert outlines.is_land(-80.0, west + (20.0 - west) % 360.0)
    assert max(abs(line[:, 1]).max() for line in outlines.land) <= 85.0


# ---------------------------------------------------------------- size and sameness


@pytest.mark.parametrize("box", BOXES)
def test_outlines_are_small(box):
    size = len(json.dumps(outlines_for(fields_at(BOXES[box]))))
    continental = ("Europe", "North America", "Indonesia", "Norway", "Aleutians")
    assert size < (100_000 if box == "world" else 60_000 if box in continental else 40_000)


def test_the_file_of_the_package_is_small():
    assert len((FOLDER / "outlines.json.gz").read_bytes()) <= 250_000


PLACES = st.lists(
    st.tuples(st.floats(-90.0, 90.0), st.floats(-180.0, 180.0)), min_size=1, max_size=4
)


@settings(max_examples=15, deadline=None)
@given(PLACES)
def test_outlines_of_any_fields_are_whole_and_within_one_turn(places):
    packed = outlines_for(fields_at(places))
    assert len(json.dumps(packed)) < 120_000
    outlines = read(packed)
    assert min(len(ring) for ring in outlines.land) >= 3
    assert min(len(line) for line in (*outlines.border, *outlines.state)) >= 2
    points = np.concatenate([*outlines.land, *outlines.border, *outlines.state])
    assert np.ptp(points[:, 0]) <= 360.2
    drawn = background.drawn_longitudes(fields_at(places))
    middle = (min(drawn) + max(drawn)) / 2.0
    assert np.abs(points[:, 0] - middle).max() <= 180.2


@pytest.mark.parametrize("box", ["Alps", "Fiji", "world"])
def test_the_same_fields_give_the_same_bytes(box):
    first = json.dumps(outlines_for(fields_at(BOXES[box])))
    background._source.cache_clear()
    assert json.dumps(outlines_for(fields_at(BOXES[box]))) == first


def test_outlines_do_not_depend_on_the_order_of_the_fields():
    fields = fields_at(BOXES["world"])
    assert outlines_for(fields) == outlines_for(fields[::-1])


# ---------------------------------------------------------------- licence and making


def test_source_version_and_licence_stand_beside_the_file():
    text = (FOLDER / "README.md").read_text(encoding="utf-8")
    for words in (
        "Natural Earth 4.1.0",
        "US Census Bureau",
        "world-atlas` 2.0.2",
        "us-atlas` 3.0.1",
        "public domain",
        "Permission to use, copy, modify, and/or distribute this software",
    ):
        assert words in text


def topology(areas: dict[str, list], arcs: list) -> dict:
    """A small TopoJSON text: names of collections, each with the arc numbers of its polygons."""
    return {
        "transform": {"scale": [0.5, 0.5], "translate": [0.0, 0.0]},
        "arcs": [np.diff(np.array(arc), axis=0, prepend=0).tolist() for arc in arcs],
        "objects": {
            name: {"geometries": [{"type": "Polygon", "arcs": rings} for rings in polygons]}
            for name, polygons in areas.items()
        },
    }


def test_the_recipe_makes_the_file_as_it_says(tmp_path):
    recipe = re.search(r"```python\n(.*?)```", (FOLDER / "README.md").read_text("utf-8"), re.S)
    # Two squares side by side, an island across the 180 degree meridian, a land about the pole.
    arcs = [
        [[2, 0], [2, 2]],
        [[2, 2], [0, 2], [0, 0], [2, 0]],
        [[2, 0], [4, 0], [4, 2], [2, 2]],
        [[358, 0], [-358, 0], [-358, 2], [358, 0]],
        [[-360, -170], [0, -160], [358, -168], [-360, -170]],
    ]
    land = [[[1, 2]], [[3]], [[4]]]
    world = topology({"countries": [[[0, 1]], [[~0, 2]], [[3]], [[4]]], "land": land}, arcs)
    for name, text in (("countries-50m", world), ("states-10m", topology({"states": []}, arcs))):
        (tmp_path / f"{name}.json").write_text(json.dumps(text))
    (tmp_path / "make.py").write_text(recipe[1])
    subprocess.run([sys.executable, "make.py"], cwd=tmp_path, check=True)
    made = json.loads(gzip.decompress((tmp_path / "outlines.json.gz").read_bytes()))
    points = {
        kind: [(np.cumsum(np.reshape(line, (-1, 2)), axis=0) / 500).tolist() for line in made[kind]]
        for kind in ("land", "border", "state")
    }
    assert points["border"] == [[[1, 0], [1, 1]]]
    assert points["state"] == []
    assert points["land"][0] == [[1, 1], [0, 1], [0, 0], [1, 0], [2, 0], [2, 1], [1, 1]]
    assert points["land"][1] == [[179, 0], [181, 0], [181, 1], [179, 0]]
    assert points["land"][2] == [
        *([-180, -85], [0, -80], [179, -84], [180, -85], [180, -90], [-180, -90], [-180, -85]),
    ]


# ---------------------------------------------------------------- the page


@pytest.mark.parametrize(
    ("tiles", "source"),
    [
        (None, "data:"),
        (Tiles("https://t.example.org/{z}/{x}/{y}.png", "T"), "data: https://t.example.org"),
        (Tiles("https://t.example.org:8443/{z}/{x}/{y}", "T"), "data: https://t.example.org:8443"),
    ],
)
def test_the_policy_of_the_page_lets_in_images_of_one_host(tiles, source):
    page = render_map(replace(sample_result(1, 1), tiles=tiles))
    policy = re.search(r'Content-Security-Policy" content="([^"]*)"', page)[1]
    directives = dict(part.split(" ", 1) for part in policy.split("; "))
    assert image_sources(tiles) == source == directives["img-src"]
    assert "https:" not in "".join(v for name, v in directives.items() if name != "img-src")
    assert directives["default-src"] == "'none'"
