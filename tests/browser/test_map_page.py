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
    # 0.045 is a little below 9/200 as a float; the share it stands for is not.
    return f"{math.floor(Fraction(round(share * 10**8), 10**6) + Fraction(1, 2))} %"


def altitude_text(feet: float) -> str:
    """METHODS 12: density altitude to the nearest 100 ft."""
    if math.isnan(feet):
        return "no data"
    return f"{math.floor(Fraction(feet) / 100 + Fraction(1, 2)) * 100:,} ft".replace("-", "\u2212")


def interval_text(low: float, high: float) -> str:
    if math.isnan(low):
        return "none"
    if share_text(low) == share_text(high):
        return share_text(low)
    return f"{share_text(low)}-{share_text(high)}".replace(" %-", "-").replace("< ", "<")


def rounded(value: float, unit: Fraction) -> Fraction:
    """To the nearest multiple of the unit, halves up."""
    return math.floor(Fraction(value) / unit + Fraction(1, 2)) * unit


def signed_text(value: float, unit: Fraction, digits: int) -> str:
    if math.isnan(value):
        return "no data"
    number = rounded(value, unit)
    return f"{float(number):{'+' if number else ''},.{digits}f}".replace("-", "\u2212")


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
@pytest.mark.parametrize(
    "fragment", ["", "#field=field-3", "#field=field-1", "#field=field-0&measure=p90"]
)
def test_page_has_no_sideways_scroll(opened, view, fragment):
    page = opened(view).open(fragment)
    page.eval_on_selector_all("details", "(all) => all.forEach((one) => { one.open = true; })")
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
    assert page.title() == f"{names[2]}: {result.title}"
    shown = page.locator(".marker-box .label bdi").all_text_contents()
    assert shown == names
    assert page.locator("#field-heading").text_content() == names[2]
    stations = page.locator("#field-part .card h4 bdi:first-child").all_text_contents()
    assert "<img src=x onerror=window.pwned=1>" in stations
    assert "<img src=x onerror=window.pwned=1>" in page.inner_text("#field-part .findings")
    assert result.attributions[1] in page.inner_text("#method-part")
    page.click("#all-fields")
    assert set(page.locator("#fields tbody button > bdi").all_text_contents()) == set(names)
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


def test_season_shows_the_seasonal_figures_over_the_whole_window(opened, result):
    page = opened().open("#hour=14&measure=p90")
    page.select_option("#period", "s3")
    frame = result.distributions_seasonal
    rows = frame[frame["variable"] == "density_altitude"]
    rows = rows[rows["season"] == "</script>summer"]
    assert markers(page) == {r.field: altitude_text(r.p90) for r in rows.itertuples()}
    page.select_option("#measure", "shortfall")
    frame = result.risk_seasonal
    rows = frame[(frame["aircraft"] == "aircraft-0") & (frame["season"] == "</script>summer")]
    assert markers(page) == {r.field: share_text(r.shortfall) for r in rows.itertuples()}
    assert page.is_disabled("#hour")
    assert page.input_value("#hour") == "-1"
    assert "\u2068</script>summer\u2069, whole window" in page.inner_text("#caption")


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
    assert page.get_attribute(none, "aria-label") == (
        "February, 02:00: no data, outside the window"
    )
    image = "(node) => getComputedStyle(node).backgroundImage"
    assert "gradient" in page.eval_on_selector(none, image)
    assert page.eval_on_selector(zero, image) == "none"


def test_field_without_any_figure_says_so_once_and_why(opened):
    page = opened().open(f"#field={EMPTY_FIELD}")
    text = page.inner_text(".headline")
    assert "no month, no hour, no aircraft" in text
    assert "That does not mean no risk." in text
    assert "no figures: <b>no station</b>." in text  # the finding, as text
    assert page.inner_text(".air") == "Air: no data, no station could be used."
    assert page.locator(".grid, .band-chart, table.months").count() == 0
    assert page.locator("#field-part details").count() == 0
    assert page.locator("#field-part .card").count() == 2  # its runways


def test_panel_shows_the_month_table_of_the_frame(opened, result):
    page = opened().open("#field=field-0&aircraft=aircraft-1")
    frame = result.risk_monthly
    rows = frame[(frame["field"] == "field-0") & (frame["aircraft"] == "aircraft-1")]
    table = page.locator("table.months").first
    notes = table.locator("xpath=following-sibling::ul[1]").inner_text()
    assert [line.split(" ", 1)[1] for line in notes.splitlines()] == [
        note for note in dict.fromkeys(rows["interval_note"]) if note
    ]
    letters = {line.split(" ", 1)[1]: line.split(" ", 1)[0] for line in notes.splitlines()}
    for row, line in zip(rows.itertuples(), table.locator("tbody tr").all(), strict=True):
        assert [cell.strip() for cell in line.locator("th, td").all_inner_texts()] == [
            MONTHS[row.month - 1],
            share_text(row.shortfall),
            interval_text(row.ci_low, row.ci_high) + letters.get(row.interval_note, ""),
            share_text(row.days_affected),
            share_text(row.outside_table),
            row.limiting or "none",
            f"{row.n_years}\n{share_text(row.coverage)}",
        ]


def test_panel_shows_density_altitude_and_humidity_of_the_frame(opened, result):
    page = opened().open("#field=field-0")
    frame = result.distributions_monthly
    frame = frame[frame["field"] == "field-0"].set_index("variable")
    altitude, humidity = frame.loc["density_altitude"], frame.loc["relative_humidity"]
    near = result.near_saturation_monthly
    near = near[near["field"] == "field-0"]
    _, high, wet = page.locator("table.months").all()
    for i, line in enumerate(high.locator("tbody tr").all()):
        columns = ["p10", "p25", "p50", "p75", "p90", "p95"]
        expected = [altitude_text(altitude.iloc[i][c]).removesuffix(" ft") for c in columns]
        assert line.locator("td").all_inner_texts() == [*expected, "14a"]
    note = altitude["years_note"].iloc[0]
    assert high.locator("xpath=following-sibling::ul[1]").inner_text() == f"a {note}"
    for i, line in enumerate(wet.locator("tbody tr").all()):
        expected = [share_text(humidity.iloc[i][c] / 100) for c in ("p10", "p50", "p90")]
        expected += [share_text(near.iloc[i][c]) for c in ("share_2_5k", "share_1k")]
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
    assert "5 findings" in method
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
    assert labels == ["< 0.5 %", "0.5-12.5 %", "12.5 % or more", "no data", "steep: own procedure"]
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


# How the air is known, change, extremes, variants


def test_panel_and_list_say_how_the_air_is_known(opened):
    page = opened().open()
    marks = dict(
        zip(
            listed(page),
            page.eval_on_selector_all(
                "#fields tbody tr",
                "(rows) => rows.map((r) => r.querySelector('.marks')?.innerText)",
            ),
            strict=True,
        )
    )
    steep = "steep: own procedure"
    assert marks == {
        "field-0": steep,
        "field-1": "partly estimated \u00b1120 ft",
        "field-2": "estimated \u00b1170 ft, pressure \u00b166 ft",
        "field-3": f"estimated \u00b199 ft \u00b7 {steep}",
        "field-4": "estimated \u00b1130 ft",
        EMPTY_FIELD: None,
    }
    texts = [
        "Air measured at its own station; pressure < 1 ft (1 sd).",
        "Air measured at its own station in 40 % of the hours, otherwise estimated from 2 "
        "stations, \u00b1120 ft of density altitude (1 sd), error learned by hiding 6 stations; "
        "pressure \u00b16 ft (1 sd).",
        "Air estimated from 3 stations, \u00b1170 ft of density altitude (1 sd), error from "
        "planning values, no station could be hidden; pressure \u00b166 ft (1 sd).",
        "Air estimated from 4 stations, \u00b199 ft of density altitude (1 sd), error learned by "
        "hiding 6 stations; pressure \u00b17 ft (1 sd).",
        "Air estimated from 1 station, \u00b1130 ft of density altitude (1 sd), error learned by "
        "hiding 1 station; pressure \u00b19 ft (1 sd).",
    ]
    for index, text in enumerate(texts):
        page.evaluate(f"location.hash = 'field=field-{index}'")
        page.wait_for_function(
            f"document.querySelector('.place')?.innerText.includes('field-{index}')"
        )
        assert page.inner_text(".air") == text


def test_steep_fields_are_marked_with_text_and_shape_wherever_they_are_shown(opened, result):
    # METHODS 6: above 2 % published factors do not hold, no automatic pass; 2 % is not above.
    page = opened().open("#month=1")
    steep = {f.id for f in result.fields if any(abs(d.slope_pct) > 2 for d in f.runways)}
    assert 0 < len(steep) < len(result.fields)
    found = page.evaluate(
        """() => [...document.querySelectorAll(".marker-box")].map((box) => [box.dataset.field,
            box.querySelector(".label em")?.textContent, Boolean(box.querySelector(".wedge")),
            box.getAttribute("aria-label").endsWith("steep: own procedure")])"""
    )
    for field, text, wedge, spoken in found:
        assert (text == "steep: own procedure") == wedge == spoken == (field in steep)
    # A pale marker without a mark would look like a pass.
    assert page.is_visible(".marker-box[data-field=field-0] .wedge")
    page.click(".marker-box[data-field=field-0]")
    assert "steeper than 2 %: no figure here is a pass" in page.inner_text(".headline")


def test_central_share_stands_beside_the_share_where_it_differs(opened, result):
    page = opened().open("#field=field-1&aircraft=aircraft-0&month=7")
    rows = result.risk_monthly.query("field == 'field-1' and aircraft == 'aircraft-0'")
    lines = page.locator("table.months").first.locator("tbody tr").all()
    differing = 0
    for row, line in zip(rows.itertuples(), lines, strict=True):
        small = line.locator("td").first.locator("small").all_inner_texts()
        if abs(row.shortfall - row.shortfall_central) >= 0.01:
            assert [text.replace("\u00a0", " ") for text in small] == [
                f"central {share_text(row.shortfall_central)}"
            ]
            differing += 1
        else:
            assert small == []
    assert 0 < differing < 12
    july = rows.query("month == 7").iloc[0]
    expected = f"{share_text(july.shortfall_central)} with the air as estimated"
    assert expected in page.inner_text(".headline")


@pytest.mark.parametrize("month", [1, 2, 3])
def test_headline_interval_carries_its_note(opened, result, month):
    page = opened().open(f"#field=field-0&aircraft=aircraft-0&month={month}")
    row = result.risk_monthly.query(
        f"field == 'field-0' and aircraft == 'aircraft-0' and month == {month}"
    ).iloc[0]
    text = page.inner_text(".headline dl div:has(dt:text('90 % interval')) dd")
    if math.isnan(row.ci_low):
        assert text == row.interval_note == "no interval below 5 years"
    else:
        note = f" ({row.interval_note})" if row.interval_note else ""
        assert text == interval_text(row.ci_low, row.ci_high) + note


@pytest.mark.parametrize("aircraft", [0, 1])
def test_trends_and_return_levels_are_those_of_the_frames(opened, result, aircraft):
    page = opened().open(f"#field=field-2&aircraft=aircraft-{aircraft}")
    part = page.locator("section.part:has(h3:text-is('Trends and extremes'))")
    assert not part.locator("table").first.is_visible()
    part.locator("summary").click()
    air, shares, levels = part.locator("table").all()
    own = result.trends[result.trends["field"] == "field-2"]
    for table, who, unit, digits in (
        (air, "", Fraction(10), 0),
        (shares, f"aircraft-{aircraft}", Fraction(1, 10), 1),
    ):
        rows = own[own["aircraft"] == who]
        for row, line in zip(rows.itertuples(), table.locator("tbody tr").all(), strict=True):
            slope, low, high = (
                signed_text(v, unit, digits)
                for v in (row.slope_per_decade, row.ci_low, row.ci_high)
            )
            missing = slope == "no data"
            verdict = "fewer than 15 years"
            if not missing:
                verdict = "significant" if row.significant else "not significant"
            if row.break_p_value < 0.1:
                verdict += "; may be a station move, step in 2017"
            assert line.locator("th, td").all_inner_texts() == [
                row.season,
                slope,
                "no data" if missing else f"{low} to {high}",
                str(row.n_years),
                verdict,
            ]
    rows = result.extremes[result.extremes["field"] == "field-2"]
    for row, line in zip(rows.itertuples(), levels.locator("tbody tr").all(), strict=True):
        low, level, high = map(altitude_text, (row.ci_low, row.density_altitude_ft, row.ci_high))
        assert line.locator("th, td").all_inner_texts() == [
            f"1 in {row.return_period_years}",
            level,
            f"{low.removesuffix(' ft')} to {high}",
        ]
    assert "22 annual maxima" in levels.locator("caption").inner_text()
    # What was opened stays open while the panel is drawn anew.
    page.select_option("#period", "m3")
    assert part.locator("table").first.is_visible()


def test_part_without_trends_and_extremes_says_why(opened):
    page = opened().open("#field=field-1")
    part = page.locator("section.part:has(h3:text-is('Trends and extremes'))")
    assert part.locator("p").all_inner_texts() == [
        "No trend: it needs 15 years of a season, at most 11 count.",
        "No return levels: 9 annual maxima, {{20}} are needed.",
    ]
    assert part.locator("table, details").count() == 0


@pytest.mark.parametrize(("field", "aircraft", "month"), [(0, 1, 7), (3, 0, 1), (1, 0, 2)])
def test_scenarios_are_those_of_the_frame(opened, result, field, aircraft, month):
    page = opened().open(f"#field=field-{field}&aircraft=aircraft-{aircraft}&month={month}")
    part = page.locator("section.part:has(h3:text-is('Scenarios'))")
    assert not part.locator("table").is_visible()
    part.locator("summary").click()
    base, *lines = part.locator("tbody tr").all()
    where = f"field == 'field-{field}' and aircraft == 'aircraft-{aircraft}' and month == {month}"
    share = result.risk_monthly.query(where).iloc[0].shortfall
    assert base.locator("td").first.inner_text() == share_text(share)
    for row, line in zip(result.scenarios.query(where).itertuples(), lines, strict=True):
        points = share_text(abs(row.shortfall_change)).removesuffix(" %")
        down = row.shortfall_change < 0
        change = ("\u2212" if down else "+") + points + (" point" if points == "1" else " points")
        if row.shortfall_change == 0:
            change = "no change"
        elif points == "< 1":
            change = f"< 1 point {'down' if down else 'up'}"
        air = []
        for p in ("p50", "p90"):
            moved = getattr(row, f"density_altitude_{p}_change_ft")
            air.append(altitude_text(getattr(row, f"density_altitude_{p}_ft")))
            if not math.isnan(moved):
                air[-1] += "\n" + signed_text(moved, Fraction(10), 0) + " ft"
        empty = math.isnan(row.shortfall)
        assert line.locator("th, td").all_inner_texts() == [
            row.scenario,
            "no data" if empty else f"{share_text(row.shortfall)}\n{change}",
            "no data" if empty else interval_text(row.ci_low, row.ci_high),
            *air,
        ]
    page.select_option("#period", "s1")
    assert "choose a month" in part.inner_text()


def test_study_without_scenarios_has_no_such_part(opened, result, tmp_path):
    path = tmp_path / "plain.html"
    path.write_text(render_map(replace(result, scenarios=None)), encoding="utf-8")
    opened_page = opened()
    opened_page.url = path.as_uri()
    page = opened_page.open("#field=field-0")
    assert page.locator("h3:text-is('Scenarios')").count() == 0
    assert opened_page.complaints == []


def test_fields_across_180_degrees_stand_together_with_true_longitudes(opened, result, tmp_path):
    fields = tuple(
        replace(f, longitude=longitude, latitude=-17.0 + i / 10)
        for i, (f, longitude) in enumerate(
            zip(result.fields, [179.2, 179.9, -179.6, -179.0, 178.5, -178.4], strict=True)
        )
    )
    path = tmp_path / "across.html"
    path.write_text(render_map(replace(result, fields=fields)), encoding="utf-8")
    opened_page = opened()
    opened_page.url = path.as_uri()
    page = opened_page.open()
    places = page.evaluate(
        """() => Object.fromEntries([...document.querySelectorAll(".marker-box")].map((box) =>
            [box.dataset.field, box.getBoundingClientRect().left]))"""
    )
    order = sorted(places, key=places.get)
    assert order == [f"field-{i}" for i in (4, 0, 1, 2, 3, 5)]
    assert max(places.values()) - min(places.values()) > 200  # zoomed to the three degrees
    labels = page.locator(".graticule-label.north span").all_inner_texts()
    assert {"179\u00b0 E", "180\u00b0", "179\u00b0 W"} <= set(labels)
    page.evaluate("location.hash = 'field=field-2'")
    page.wait_for_selector(".place")
    assert "179\u00b0 36\u2032 W" in page.inner_text(".place")


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
    assert "field=field-1" in page.evaluate("location.href")
    for _ in range(3):  # from the heading to the grid, its only tab stop
        page.keyboard.press("Tab")
        if page.evaluate("document.activeElement.tagName") == "TD":
            break
    assert page.evaluate("document.activeElement.dataset.hour") == "12"
    page.keyboard.press("ArrowRight")
    page.keyboard.press("ArrowDown")
    page.keyboard.press("ArrowDown")
    page.keyboard.press("Enter")
    assert "month=8&hour=14" in page.evaluate("location.href")
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
    fragment = "#" + page.evaluate("location.href").split("#")[1]
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
    assert len(shapes) == 6  # the last one is the wedge of the steep fields
    assert len(set(shapes)) == 6
    labels = page.locator("#legend li").all_inner_texts()
    assert labels == ["< 1 %", "1-5 %", "5-20 %", "20 % or more", "no data", "steep: own procedure"]


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
