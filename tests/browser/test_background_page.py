"""The ground of the map in Chromium: drawn without a request, images only where asked for."""

from __future__ import annotations

import base64
import re
from dataclasses import replace
from itertools import pairwise

import pytest
from chromium import OpenPage
from sample_result import sample_result

from climarisk.outputs.map import render_map
from climarisk.results import Tiles

HOST = "https://tiles.example.org:8443"
ATTRIBUTION = "\u00a9 Survey of <b>Example</b> {{7*7}}"
# A PNG of one pixel, made with zlib and struct by the PNG specification.
PIXEL = base64.b64decode(
    "iVBORw0KGgoAAAANSUhEUgAAAAEAAAABCAYAAAAfFcSJAAAADUlEQVR42mNkYPhfDwAChwGA60e6kgAAAABJRU5ErkJggg=="
)
FIJI = [(-17.7, 177.4), (-16.7, -179.9), (-18.0, 178.5), (-16.4, 179.3), (-17.2, -179.0)]


@pytest.fixture(scope="module")
def tiles_url(result, tmp_path_factory) -> str:
    path = tmp_path_factory.mktemp("tiles") / "map.html"
    tiles = Tiles(HOST + "/a/{z}/{x}/{y}.png", ATTRIBUTION)
    path.write_text(render_map(replace(result, tiles=tiles)), encoding="utf-8")
    return path.as_uri()


@pytest.fixture(scope="module")
def fiji_url(tmp_path_factory) -> str:
    sample = sample_result(len(FIJI), 1)
    fields = tuple(
        replace(field, latitude=latitude, longitude=longitude)
        for field, (latitude, longitude) in zip(sample.fields, FIJI, strict=True)
    )
    path = tmp_path_factory.mktemp("fiji") / "map.html"
    path.write_text(render_map(replace(sample, fields=fields)), encoding="utf-8")
    return path.as_uri()


def style(page, selector: str, name: str) -> str:
    return page.evaluate(
        "([s, n]) => getComputedStyle(document.querySelector(s))[n]", [selector, name]
    )


def subpaths(page, selector: str) -> list[list[tuple[float, float]]]:
    text = page.get_attribute(selector, "d")
    return [
        [tuple(map(float, pair)) for pair in re.findall(r"(-?[\d.]+)[ ,](-?[\d.]+)", part)]
        for part in text.split("M")[1:]
    ]


@pytest.mark.parametrize("view", ["desktop", "phone dark"])
def test_land_coast_and_borders_are_drawn_without_a_request(opened, view):
    page_opened = opened(view)
    page = page_opened.open()
    for kind in ("land", "coast", "border"):
        box = page.locator(f"path.{kind}").bounding_box()
        assert box["width"] > 100, kind
        assert box["height"] > 100, kind
    assert page_opened.requests == [page_opened.url]
    assert page_opened.complaints == []


def test_a_border_is_dashed_and_a_coast_is_not(opened):
    page = opened().open()
    assert style(page, "path.coast", "strokeDasharray") == "none"
    assert style(page, "path.border", "strokeDasharray") != "none"
    assert style(page, "path.coast", "fill") == "none"


def test_land_and_sea_differ_and_follow_the_colour_scheme(opened):
    seen = set()
    for view in ("desktop", "desktop dark"):
        page = opened(view).open()
        seen |= {
            style(page, "path.land", "fill"),
            style(page, "#map_fields", "backgroundColor"),
        }
    assert len(seen) == 4


def test_outlines_are_hidden_from_readers_and_lie_below_the_markers(opened):
    page = opened().open()
    pane = ".leaflet-outlines-pane"
    assert page.get_attribute(pane, "aria-hidden") == "true"
    assert style(page, pane, "pointerEvents") == "none"
    order = [
        int(style(page, f".leaflet-{name}-pane", "zIndex"))
        for name in ("outlines", "ground", "marker")
    ]
    assert order == sorted(order)


def test_the_ground_stays_filled_when_the_map_is_moved(opened):
    page = opened().open()
    page.evaluate("window.map_fields.panBy([1500, 900], {animate: false})")
    chart = page.locator("#map_fields").bounding_box()
    box = page.locator("path.land").bounding_box()
    assert box["x"] <= chart["x"]
    assert box["x"] + box["width"] >= chart["x"] + chart["width"]


@pytest.mark.parametrize(("zoom_out", "longest_deg"), [(0, 2.0), (3, 12.0), (20, 30.0)])
def test_no_line_crosses_the_map_where_the_world_is_joined(
    contexts, fiji_url, zoom_out, longest_deg
):
    page = contexts["desktop"].new_page()
    try:
        OpenPage(page, fiji_url).open()
        page.evaluate(f"window.map_fields.zoomOut({zoom_out}, {{animate: false}})")
        parts = subpaths(page, "path.coast")
        assert len(parts) > 3
        # Straight pieces of coast are shorter, edges of what was cut out of the world longer.
        longest = page.evaluate("256 * 2 ** window.map_fields.getZoom()") * longest_deg / 360.0
        for part in parts:
            for (x0, y0), (x1, y1) in pairwise(part):
                assert max(abs(x1 - x0), abs(y1 - y0)) <= longest
    finally:
        page.close()


# ---------------------------------------------------------------- background images


@pytest.fixture
def with_tiles(contexts, tiles_url):
    """A function from a view, and whether the host answers, to an open page with its notes."""
    pages = []

    def new(view: str = "desktop", answers: bool = False) -> OpenPage:
        page = contexts[view].new_page()
        pages.append(page)
        noted = OpenPage(page, tiles_url)
        if answers:
            page.route(
                HOST + "/**", lambda route: route.fulfill(body=PIXEL, content_type="image/png")
            )
        page.on("request", lambda request: noted.requests.append(request.url))
        page.on("pageerror", lambda error: noted.complaints.append(str(error)))
        noted.open()
        return noted

    yield new
    for page in pages:
        page.close()


def test_a_page_without_a_source_has_no_switch(opened):
    assert opened().open().locator(".images").count() == 0


def test_nothing_is_asked_for_before_the_reader_switches_images_on(with_tiles):
    noted = with_tiles()
    page = noted.page
    page.evaluate("window.map_fields.panBy([300, 200], {animate: false})")
    assert noted.requests == [noted.url]
    switch = page.get_by_role("checkbox", name="Background images from tiles.example.org:8443")
    assert switch.count() == 1
    assert not switch.is_checked()
    assert not page.get_by_text("Survey of").is_visible()


def test_images_come_from_the_one_host_and_their_attribution_is_text(with_tiles):
    noted = with_tiles(answers=True)
    page = noted.page
    page.locator(".images input").check()
    page.wait_for_selector("#map_fields.with-images")
    assert len(noted.requests) > 1
    for url in noted.requests[1:]:
        assert re.fullmatch(re.escape(HOST) + r"/a/\d+/\d+/\d+\.png", url)
    assert page.get_by_text(ATTRIBUTION, exact=True).is_visible()
    assert page.locator(".images b").count() == 0
    assert style(page, "path.land", "display") == "none"
    assert page.locator("path.border").is_visible()
    page.locator(".images input").uncheck()
    assert page.locator(".leaflet-images-pane img").count() == 0
    assert page.locator("path.land").is_visible()
    assert noted.complaints == []


@pytest.mark.parametrize("view", ["desktop", "phone"])
def test_the_page_works_where_no_image_can_be_had(with_tiles, view):
    noted = with_tiles(view)
    page = noted.page
    page.locator(".images input").check()
    page.get_by_text("No image could be loaded.").wait_for()
    assert page.locator("path.land").is_visible(), "the land stays"
    page.locator(".marker-box").first.press("Enter")
    assert page.locator("#field-part").is_visible()
    assert noted.complaints == []


def test_the_switch_is_large_enough_and_works_from_the_keyboard(with_tiles):
    page = with_tiles("phone", answers=True).page
    box = page.locator(".images label").bounding_box()
    assert box["height"] >= 44  # WCAG 2.2, success criterion 2.5.5
    assert box["width"] >= 44
    page.locator(".images input").focus()
    page.keyboard.press("Space")
    page.wait_for_selector("#map_fields.with-images")


def test_the_policy_lets_no_other_host_in(with_tiles):
    page = with_tiles().page
    let_out = []

    def answer(route):
        let_out.append(route.request.url)
        route.fulfill(body=PIXEL, content_type="image/png")

    page.route(re.compile("^http"), answer)
    load = """(url) => new Promise((done) => {
        const image = new Image();
        image.onload = () => done("loaded");
        image.onerror = () => done("refused");
        image.src = url;
    })"""
    assert page.evaluate(load, HOST + "/a/1/1/1.png") == "loaded"
    for url in (
        "https://other.example/a.png",
        "https://tiles.example.org/a/1/1/1.png",
        "http://tiles.example.org:8443/a/1/1/1.png",
    ):
        assert page.evaluate(load, url) == "refused"
    assert let_out == [HOST + "/a/1/1/1.png"]
