"""The map page in Chromium: silent, safe, and showing the numbers of the frames."""

from __future__ import annotations

import math
import re
from dataclasses import replace
from fractions import Fraction

import pytest
from chromium import VIEWS
from sample_result import EMPTY_FIELD

from climarisk.outputs.map import render_map

MONTHS = ["Jan", "Feb", "Mar", "Apr", "May", "Jun", "Jul", "Aug", "Sep", "Oct", "Nov", "Dec"]


def share_text(share: float) -> str:
    """METHODS 12: whole per cent, "< 1 %" for anything between zero and one."""
    if math.isnan(share):
        return "no data"
    if 0.0 < share < 0.01:
        return "< 1 %"
    return f"{math.floor(Fraction(share) * 100 + Fraction(1, 2))} %"


def altitude_text(feet: float) -> str:
    """METHODS 12: density altitude to the nearest 100 ft."""
    if math.isnan(feet):
        return "no data"
    return f"{math.floor(Fraction(feet) / 100 + Fraction(1, 2)) * 100:,} ft".replace("-", "\u2212")


def markers(page) -> dict[str, str]:
    """Number beside each marker, by field id."""
    return page.evaluate(
        """() => Object.fromEntries([...document.querySelectorAll(".marker-box")].map(
            (box) => [box.dataset.field, box.querySelector(".label b").textContent]))"""
    )


def listed(page) -> dict[str, str]:
    """Value in each row of the list, by field id, in the order shown."""
    return page.evaluate(
        """() => Object.fromEntries([...document.querySelectorAll("#fields tbody tr")].map(
            (row) => [row.querySelector("button").dataset.field,
                      row.querySelector(".value").textContent]))"""
    )


def grid_cells(page) -> list[list[str]]:
    return page.evaluate(
        """() => [...document.querySelectorAll(".grid tbody tr")].map((row) =>
            [...row.querySelectorAll("td")].map((cell) => cell.textContent))"""
    )


def injected(page) -> object:
    return page.evaluate("window.pwned")


# Silence and safety


@pytest.mark.parametrize("view", VIEWS)
def test_page_from_disk_asks_for_nothing_and_complains_of_nothing(opened, view, result):
    opened_page = opened(view)
    page = opened_page.open()
    for index in range(len(result.fields)):
        page.locator("#fields tbody button").nth(index).click()
        page.wait_for_selector("#field-heading")
        page.click("#all-fields")
    for measure in ("median", "p90", "shortfall"):
        page.select_option("#measure", measure)
    page.hover(".marker-box >> nth=0")
    page.click(".leaflet-control-zoom-out")
    page.wait_for_timeout(400)
    assert opened_page.requests == [opened_page.url]
    assert opened_page.complaints == []
    assert injected(page) is None


@pytest.mark.parametrize("view", VIEWS)
@pytest.mark.parametrize("fragment", ["", "#field=field-3", "#field=field-0&measure=p90"])
def test_page_has_no_sideways_scroll(opened, view, fragment):
    page = opened(view).open(fragment)
    wide = page.evaluate("document.documentElement.scrollWidth")
    assert wide == VIEWS[view]["viewport"]["width"]
    # Nothing may stand outside the text column either (the map clips what it holds).
    assert page.evaluate(
        """() => [...document.querySelectorAll("main table, main p, main dl, header *, section *")]
            .filter((node) => !node.closest(".chart"))
            .filter((node) => node.getBoundingClientRect().right > innerWidth - 15)
            .map((node) => node.outerHTML.slice(0, 80))"""
    ) == []  # fmt: skip


def test_policy_blocks_what_a_page_would_load_or_run(opened):
    opened_page = opened()
    page = opened_page.open()
    failures = []
    page.on("requestfailed", lambda request: failures.append((request.url, request.failure)))
    page.evaluate(
        """() => document.body.insertAdjacentHTML("beforeend",
            '<img src="elsewhere.png" onerror="window.pwned=1">' +
            '<i onclick="window.pwned=1">x</i>')"""
    )
    page.evaluate("document.querySelector('body > i').click()")
    page.wait_for_timeout(100)
    assert injected(page) is None
    # The browser names the image it was about to ask for, and that the policy stopped it.
    assert [(url.rsplit("/", 1)[1], why) for url, why in failures] == [("elsewhere.png", "csp")]
    assert opened_page.requests[0] == opened_page.url
    assert len(opened_page.requests) == 2


def test_hostile_texts_are_shown_as_text(opened, result):
    page = opened().open("#field=field-2")
    names = [field.name for field in result.fields]
    assert page.inner_text("#study-title") == result.title
    assert page.title() == result.title
    shown = page.locator(".marker-box .label bdi").all_text_contents()
    assert shown == names
    assert page.locator("#field-heading").text_content() == names[2]
    stations = page.locator("#field-part .card h4 bdi:first-child").all_text_contents()
    assert "<img src=x onerror=window.pwned=1>" in stations
    assert "<img src=x onerror=window.pwned=1>" in page.inner_text("#field-part .findings")
    assert result.attributions[1] in page.inner_text("#method-part")
    page.click("#all-fields")
    assert set(page.locator("#fields tbody button").all_text_contents()) == set(names)
    assert page.locator("img, iframe, b[onclick]").count() == 0


# Numbers


@pytest.mark.parametrize(
    ("aircraft", "month", "hour"),
    [(0, 7, 14), (1, 7, 14), (0, 1, 13), (1, 4, 0), (0, 7, 23), (0, 7, None), (1, 2, None)],
)
def test_markers_and_list_show_the_shares_of_the_frames(opened, result, aircraft, month, hour):
    page = opened().open()
    page.select_option("#aircraft", str(aircraft))
    page.select_option("#period", f"m{month - 1}")
    page.select_option("#hour", "-1" if hour is None else str(hour))
    frame = result.risk_monthly if hour is None else result.risk_hourly
    rows = frame[(frame["aircraft"] == f"aircraft-{aircraft}") & (frame["month"] == month)]
    if hour is not None:
        rows = rows[rows["hour"] == hour]
    expected = {r.field: share_text(r.shortfall) for r in rows.itertuples()}
    assert len(expected) == len(result.fields)
    assert markers(page) == expected
    assert listed(page) == expected
    assert expected[EMPTY_FIELD] == "no data"


@pytest.mark.parametrize(("measure", "column"), [("median", "p50"), ("p90", "p90")])
@pytest.mark.parametrize(("month", "hour"), [(7, 15), (1, 5), (8, None)])
def test_markers_show_density_altitude_of_the_frames(opened, result, measure, column, month, hour):
    page = opened().open()
    page.select_option("#measure", measure)
    page.select_option("#period", f"m{month - 1}")
    page.select_option("#hour", "-1" if hour is None else str(hour))
    frame = result.distributions_monthly if hour is None else result.distributions_hourly
    rows = frame[(frame["variable"] == "density_altitude") & (frame["month"] == month)]
    if hour is not None:
        rows = rows[rows["hour"] == hour]
    expected = {r.field: altitude_text(getattr(r, column)) for r in rows.itertuples()}
    assert markers(page) == expected


def test_season_shows_the_seasonal_shares_over_the_whole_window(opened, result):
    page = opened().open("#hour=14&measure=p90")
    page.select_option("#period", "s3")
    frame = result.risk_seasonal
    rows = frame[(frame["aircraft"] == "aircraft-0") & (frame["season"] == "</script>summer")]
    assert markers(page) == {r.field: share_text(r.shortfall) for r in rows.itertuples()}
    assert page.is_disabled("#hour")
    assert page.input_value("#hour") == "-1"
    assert "</script>summer, whole window" in page.inner_text("#caption")


@pytest.mark.parametrize(("field", "aircraft"), [("field-0", 0), ("field-1", 1), ("field-4", 0)])
def test_grid_shows_every_share_of_the_frame(opened, result, field, aircraft):
    page = opened().open(f"#field={field}&aircraft=aircraft-{aircraft}")
    frame = result.risk_hourly
    rows = frame[(frame["field"] == field) & (frame["aircraft"] == f"aircraft-{aircraft}")]
    share = rows.set_index(["hour", "month"])["shortfall"].unstack()
    short = {"no data": "\u2013", "< 1 %": "<1"}
    expected = [
        [short.get(text, text.removesuffix(" %")) for text in map(share_text, share.loc[hour])]
        for hour in range(24)
    ]
    assert page.locator(".grid thead th").all_inner_texts()[1:] == MONTHS
    assert grid_cells(page) == expected
    assert any("<1" in row for row in expected) or field != "field-4"


def test_grid_shows_density_altitude_in_hundreds_of_feet(opened, result):
    page = opened().open("#field=field-2&measure=p90")
    frame = result.distributions_hourly
    rows = frame[(frame["field"] == "field-2") & (frame["variable"] == "density_altitude")]
    feet = rows.set_index(["hour", "month"])["p90"].unstack()
    expected = [
        [str(math.floor(v / 100 + 0.5)).replace("-", "\u2212") for v in feet.loc[h]]
        for h in range(24)
    ]
    assert grid_cells(page) == expected
    assert "hundreds of feet" in page.inner_text(".grid caption")


def test_no_data_looks_different_from_zero(opened):
    page = opened().open("#field=field-1&month=3&hour=2")
    zero, none = "td[data-month='2'][data-hour='2']", "td[data-month='1'][data-hour='2']"
    assert (page.inner_text(zero), page.inner_text(none)) == ("0", "\u2013")
    assert page.get_attribute(none, "aria-label") == "no data"
    image = "(node) => getComputedStyle(node).backgroundImage"
    assert "gradient" in page.eval_on_selector(none, image)
    assert page.eval_on_selector(zero, image) == "none"
    page.evaluate(f"location.hash = 'field={EMPTY_FIELD}'")
    page.wait_for_function("document.querySelector('.big b').textContent === 'no data'")
    assert set(sum(grid_cells(page), [])) == {"\u2013"}
    assert page.locator(".band-chart").count() == 0


def test_panel_shows_the_month_table_of_the_frame(opened, result):
    page = opened().open("#field=field-0&aircraft=aircraft-1")
    frame = result.risk_monthly
    rows = frame[(frame["field"] == "field-0") & (frame["aircraft"] == "aircraft-1")]
    table = page.locator("table.months").first
    for row, line in zip(rows.itertuples(), table.locator("tbody tr").all(), strict=True):
        interval = f"{share_text(row.ci_low)}-{share_text(row.ci_high)}"
        assert [cell.strip() for cell in line.locator("th, td").all_inner_texts()] == [
            MONTHS[row.month - 1],
            share_text(row.shortfall),
            interval.replace(" %-", "-").replace("< ", "<"),
            share_text(row.days_affected),
            share_text(row.outside_table),
            row.limiting or "none",
            str(row.n_years),
        ]


def test_panel_shows_density_altitude_and_humidity_of_the_frame(opened, result):
    page = opened().open("#field=field-0")
    frame = result.distributions_monthly
    frame = frame[frame["field"] == "field-0"].set_index("variable")
    altitude, humidity = frame.loc["density_altitude"], frame.loc["relative_humidity"]
    _, high, wet = page.locator("table.months").all()
    for i, line in enumerate(high.locator("tbody tr").all()):
        columns = ["p10", "p25", "p50", "p75", "p90", "p95"]
        expected = [altitude_text(altitude.iloc[i][c]).removesuffix(" ft") for c in columns]
        assert line.locator("td").all_inner_texts() == [*expected, "14"]
    for i, line in enumerate(wet.locator("tbody tr").all()):
        expected = [share_text(humidity.iloc[i][c] / 100) for c in ("p10", "p50", "p90")]
        assert line.locator("td").all_inner_texts() == expected
    assert page.locator("svg.band-chart").count() == 2


def test_panel_names_runways_stations_sources_findings_and_cautions(opened, result):
    page = opened().open("#field=field-0&aircraft=aircraft-1")
    text = page.inner_text("#field-part")
    cards = page.locator("#field-part .card").all_inner_texts()
    assert len(cards) == 4
    assert "640 m (2,099 ft)" in cards[0]
    assert "undeclared distances" not in cards[0]
    assert "undeclared distances" in cards[1]
    assert all("slope over 2 %" in card for card in cards[:2])
    assert "take-off only" in cards[0]
    assert "landing only" in cards[1]
    for part in ("8.4 km", "\u2212120 m", "2010-01-01 to 2024-12-31", "97 %", "93 %"):
        assert part in cards[2]
    assert "station pressure" in cards[2]
    assert "reject station st-0" in text
    assert "needs a site-specific procedure" in page.inner_text("#field-part .findings")
    assert "scaled, no table" in page.inner_text(".headline")
    assert "scaled, no table" in page.inner_text("#caption")
    assert "Two-seat" not in page.inner_text(".headline")
    assert "flight manual" in page.inner_text("header")
    assert "flight manual" in page.inner_text(".cautions")
    method = page.inner_text("#method-part")
    assert "study.json" in method
    assert "3 findings" in method
    assert "Invented weather, no rights reserved" in method
    assert "Leaflet 1.9.3" in method


def test_other_bands_and_window_are_labelled_by_their_numbers(opened, result, tmp_path):
    settings = result.settings | {"bands": [0.005, 0.125], "window": [6, 20]}
    empty = result.risk_seasonal.iloc[:0]
    hourly = result.risk_hourly.copy()
    hourly.loc[hourly["field"] == "field-0", "shortfall"] = 0.007  # between the edge and 1 %
    path = tmp_path / "other.html"
    other = replace(result, settings=settings, risk_seasonal=empty, risk_hourly=hourly)
    path.write_text(render_map(other), encoding="utf-8")
    opened_page = opened()
    opened_page.url = path.as_uri()
    page = opened_page.open("#month=7&hour=9")
    assert opened_page.complaints == []
    labels = page.locator("#legend li").all_inner_texts()
    assert labels == ["< 0.5 %", "0.5-12.5 %", "12.5 % or more", "no data"]
    assert "06:00 to 20:00" in page.inner_text("#study-line")
    assert page.locator("#period optgroup").count() == 1
    classes = page.evaluate(
        """() => Object.fromEntries([...document.querySelectorAll(".marker-box")].map((box) =>
            [box.dataset.field, box.querySelector("svg").classList[1]]))"""
    )
    chosen = (hourly["aircraft"] == "aircraft-0") & (hourly["month"] == 7)
    rows = hourly[chosen & (hourly["hour"] == 9)]
    assert markers(page) == {r.field: share_text(r.shortfall) for r in rows.itertuples()}
    for row in rows.itertuples():
        number = sum(row.shortfall >= edge for edge in (0.005, 0.125))
        expected = "class-none" if math.isnan(row.shortfall) else f"class-{number}"
        assert classes[row.field] == expected


# Use


def test_list_sorts_by_value_with_no_data_last_both_ways(opened):
    page = opened().open("#month=7&hour=14")

    def number(text):
        return 0.5 if text == "< 1 %" else float(text.removesuffix(" %"))

    for direction in (-1, 1):
        values = list(listed(page).values())
        assert values[-1] == "no data"
        numbers = [number(v) for v in values[:-1]]
        assert len(set(numbers)) > 2
        assert numbers == sorted(numbers, reverse=direction < 0)
        page.click("#fields [data-sort=value]")
    page.click("#fields [data-sort=elevation]")
    assert list(listed(page))[0] == "field-5"
    heads = page.locator("#fields thead th")
    assert [h.get_attribute("aria-sort") for h in heads.all()] == ["none", "descending", "none"]


def test_page_works_by_keyboard_alone(opened):
    page = opened().open("#month=7")
    for key in ("Enter", " "):
        page.focus(".marker-box[data-field=field-1]")
        page.keyboard.press(key)
        assert page.evaluate("document.activeElement.id") == "field-heading"
        page.keyboard.press("Escape")
        assert page.evaluate("document.activeElement.dataset.field") == "field-1"
    page.keyboard.press("Enter")
    assert "field=field-1" in page.url
    for _ in range(3):  # from the heading to the grid, its only tab stop
        page.keyboard.press("Tab")
        if page.evaluate("document.activeElement.tagName") == "TD":
            break
    assert page.evaluate("document.activeElement.dataset.hour") == "12"
    page.keyboard.press("ArrowRight")
    page.keyboard.press("ArrowDown")
    page.keyboard.press("ArrowDown")
    page.keyboard.press("Enter")
    assert "month=8&hour=14" in page.url
    assert page.input_value("#hour") == "14"
    assert page.evaluate("document.activeElement.dataset.month") == "7"
    assert page.locator(".grid [tabindex='0']").count() == 1


def test_every_control_is_reached_by_tab_in_order(opened):
    page = opened().open()
    reached = []
    for _ in range(40):
        page.keyboard.press("Tab")
        reached.append(
            page.evaluate(
                """() => { const a = document.activeElement;
                return a.dataset.field || a.dataset.sort || a.id || a.className || a.tagName; }"""
            )
        )
    order = ["skip", "aircraft", "period", "hour", "measure", "field-0", "name", "value"]
    places = [reached.index(name) for name in order]
    assert places == sorted(places)
    outline = page.evaluate("getComputedStyle(document.activeElement).outlineStyle")
    assert outline != "none"


def test_address_opens_the_same_view_again(opened):
    page = opened().open()
    page.select_option("#aircraft", "1")
    page.select_option("#period", "m5")
    page.select_option("#hour", "16")
    page.select_option("#measure", "median")
    page.click("#fields tbody button >> nth=2")
    fragment = "#" + page.url.split("#")[1]
    other = opened("phone").open(fragment)
    for target in ("#caption", "#field-heading", ".headline"):
        assert other.inner_text(target) == page.inner_text(target)
    assert markers(other) == markers(page)
    page.evaluate("location.hash = 'aircraft=aircraft-0&month=7'")
    page.wait_for_selector("#fields tbody button", state="visible")
    assert page.input_value("#aircraft") == "0"


@pytest.mark.parametrize(
    "fragment",
    ["#aircraft=nobody&month=13&hour=99&measure=constructor&field=x", "#%E0%A4%A", "#month=1.5"],
)
def test_address_with_nonsense_opens_the_default_view(opened, fragment):
    opened_page = opened()
    plain = opened().open()
    page = opened_page.open(fragment)
    assert page.inner_text("#caption") == plain.inner_text("#caption")
    assert opened_page.complaints == []


# Looks


def _luminance(colour: str) -> float:
    # WCAG 2.2, definition of relative luminance.
    parts = [int(p) / 255 for p in re.findall(r"\d+", colour)[:3]]
    linear = [p / 12.92 if p <= 0.04045 else ((p + 0.055) / 1.055) ** 2.4 for p in parts]
    return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]


@pytest.mark.parametrize("view", ["desktop", "desktop dark"])
@pytest.mark.parametrize("measure", ["shortfall", "p90"])
def test_grid_numbers_have_the_contrast_of_wcag_and_classes_run_one_way(opened, view, measure):
    page = opened(view).open(f"#field=field-2&measure={measure}")
    pairs = page.evaluate(
        """() => { const found = {};
        for (const cell of document.querySelectorAll(".grid td")) {
            const style = getComputedStyle(cell);
            const name = [...cell.classList].find((c) => c.startsWith("class-"));
            found[name] = [style.backgroundColor, style.color];
        } return found; }"""
    )
    assert len(pairs) >= 3
    for fill, ink in pairs.values():
        low, high = sorted((_luminance(fill), _luminance(ink)))
        assert (high + 0.05) / (low + 0.05) >= 4.5  # WCAG 2.2, 1.4.3, level AA
    light = [_luminance(pairs[name][0]) for name in sorted(pairs)]
    assert light == sorted(light, reverse=view == "desktop")
    assert len(set(light)) == len(light)


def test_classes_differ_in_shape_as_well_as_colour(opened):
    page = opened().open()
    shapes = page.eval_on_selector_all(
        "#legend path", "(paths) => paths.map((p) => p.getAttribute('d'))"
    )
    assert len(shapes) == 5
    assert len(set(shapes)) == 5
    labels = page.locator("#legend li").all_inner_texts()
    assert labels == ["< 1 %", "1-5 %", "5-20 %", "20 % or more", "no data"]


def test_touch_targets_are_44_px(opened):
    # WCAG 2.2, 2.5.5 (enhanced): 44 by 44 CSS pixels.
    page = opened("phone").open()
    small = page.evaluate(
        """() => [...document.querySelectorAll("select, button, .marker-box, .leaflet-bar a")]
            .map((node) => [node.outerHTML.slice(0, 60), node.getBoundingClientRect()])
            .filter(([, box]) => Math.min(box.width, box.height) < 43.9)
            .map(([text]) => text)"""
    )
    assert small == []


def test_print_hides_the_controls_and_keeps_the_colours(opened):
    page = opened("desktop dark").open("#field=field-0")
    page.emulate_media(media="print")
    assert not page.is_visible("#controls")
    assert not page.is_visible("#all-fields")
    assert page.is_visible(".grid")
    adjust = "(node) => getComputedStyle(node).printColorAdjust"
    assert page.eval_on_selector(".grid td", adjust) == "exact"
    background = "getComputedStyle(document.documentElement).getPropertyValue('--paper').trim()"
    assert page.evaluate(background) == "#fbfaf7"
