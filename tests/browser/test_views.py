"""Every measure, the parts of a field, the comparison, and the page on paper."""

from __future__ import annotations

import io
import math
from dataclasses import replace

import pytest
from chromium import VIEWS, OpenPage
from sample_result import EMPTY_FIELD, SEASONS
from test_map_page import MONTHS, altitude_text, interval_text, listed, markers, share_text

from climarisk.outputs.map import render_map
from climarisk.results import VARIABLES

DAYS = 30  # of every month in the sample


def hours_text(hours: float, unit: str = "h") -> str:
    return "no data" if math.isnan(hours) else f"{math.floor(hours):,} {unit}"


def shown(frame, column, text) -> dict[str, str]:
    return {row.field: text(getattr(row, column)) for row in frame.itertuples()}


def of_air(frame, variable: str):
    assert variable in VARIABLES
    return frame[frame["variable"] == variable]


def percent_of(value: float) -> str:
    return share_text(value / 100.0)


# Measures


@pytest.mark.parametrize("aircraft", [0, 1])
def test_usable_hours_are_those_of_the_frame_rounded_down(opened, result, aircraft):
    page = opened().open(f"#measure=usable&month=7&aircraft=aircraft-{aircraft}")
    rows = result.risk_monthly.query(f"aircraft == 'aircraft-{aircraft}' and month == 7")
    assert markers(page) == shown(rows, "usable_hours", hours_text)
    page.select_option("#hour", "13")
    rows = result.risk_hourly.query(f"aircraft == 'aircraft-{aircraft}'")
    rows = rows.query("month == 7 and hour == 13")
    assert listed(page) == shown(rows, "usable_hours", lambda v: hours_text(v, "days"))
    page.select_option("#period", "s2")
    rows = result.risk_seasonal.query(f"aircraft == 'aircraft-{aircraft}'")
    rows = rows[rows["season"] == SEASONS[2]]
    assert markers(page) == shown(rows, "usable_hours", hours_text)


def test_few_usable_hours_stand_out_as_much_as_a_high_share(opened):
    page = opened().open("#measure=usable&month=7&aircraft=aircraft-0")
    labels = page.locator("#legend li").all_inner_texts()
    assert labels[0].endswith("or more")
    assert labels[-3].startswith("< ")
    classes = page.evaluate(
        """() => Object.fromEntries([...document.querySelectorAll("#fields tbody tr")].map((row) =>
            [parseInt(row.querySelector(".value").textContent.replace(",", "")),
             row.querySelector(".symbol").getAttribute("class").match(/class-(\\w+)/)[1]]))"""
    )
    known = {int(hours): int(number) for hours, number in classes.items() if number != "none"}
    ordered = [known[hours] for hours in sorted(known)]
    assert ordered == sorted(ordered, reverse=True)
    assert len(set(ordered)) > 1


@pytest.mark.parametrize(("month", "hour"), [(1, None), (7, 5), (2, 12)])
def test_humidity_and_near_saturation_are_those_of_the_frames(opened, result, month, hour):
    fragment = f"&month={month}" + ("" if hour is None else f"&hour={hour}")
    page = opened().open("#measure=humidity" + fragment)
    where = f"month == {month}" + ("" if hour is None else f" and hour == {hour}")
    frame = result.distributions_monthly if hour is None else result.distributions_hourly
    rows = of_air(frame, "relative_humidity").query(where)
    assert markers(page) == shown(rows, "p50", percent_of)
    page.select_option("#measure", "near-saturation")
    frame = result.near_saturation_monthly if hour is None else result.near_saturation_hourly
    assert markers(page) == shown(frame.query(where), "share_2_5k", share_text)
    assert "2.5 K above the dew point" in page.inner_text("#caption")


def test_seasons_have_every_measure(opened, result):
    page = opened().open("#season=MAM&measure=median")
    air = result.distributions_seasonal.query("season == 'MAM'")
    assert markers(page) == shown(of_air(air, "density_altitude"), "p50", altitude_text)
    page.select_option("#measure", "humidity")
    assert markers(page) == shown(of_air(air, "relative_humidity"), "p50", percent_of)
    page.select_option("#measure", "near-saturation")
    rows = result.near_saturation_seasonal.query("season == 'MAM'")
    assert markers(page) == shown(rows, "share_2_5k", share_text)


@pytest.mark.parametrize("measure", ["usable", "humidity", "near-saturation", "median"])
def test_grid_shows_the_measure_with_its_own_legend(opened, result, measure):
    page = opened().open(f"#field=field-2&measure={measure}&month=5")
    cell = page.inner_text("td[data-month='4'][data-hour='14']")
    if measure == "usable":
        row = result.risk_hourly.query("field == 'field-2' and aircraft == 'aircraft-0'")
        row = row.query("month == 5 and hour == 14").iloc[0]
        assert cell == str(math.floor(row.usable_hours))
    elif measure == "near-saturation":
        row = result.near_saturation_hourly.query(
            "field == 'field-2' and month == 5 and hour == 14"
        )
        assert cell == share_text(row.iloc[0].share_2_5k).removesuffix(" %").replace("< ", "<")
    else:
        variable = "relative_humidity" if measure == "humidity" else "density_altitude"
        rows = of_air(result.distributions_hourly, variable)
        value = rows.query("field == 'field-2' and month == 5 and hour == 14").iloc[0].p50
        exact = value if measure == "humidity" else value / 100
        assert cell == str(math.floor(exact + 0.5))
    numbers = page.evaluate(
        """() => [...document.querySelectorAll(".grid td, .own-scale.legend .symbol")].map((node) =>
            node.getAttribute("class").match(/class-(\\w+)/)[1])"""
    )
    legend = page.locator(".own-scale.legend li").count()
    assert all(n == "none" or int(n) < legend - 1 for n in numbers)


# One field


def test_panel_shows_the_margins_of_each_check(opened, result):
    page = opened().open("#field=field-3&aircraft=aircraft-0")
    frame = result.margins_monthly.query("field == 'field-3' and aircraft == 'aircraft-0'")
    groups = page.locator(".check-table tbody").all()
    assert [g.locator("tr.check th").inner_text() for g in groups] == list(frame["check"].unique())
    for group in groups:
        check = group.locator("tr.check th").inner_text()
        rows = frame[frame["check"] == check]
        lines = [
            line.locator("th, td").all_inner_texts()
            for line in group.locator("tr:not(.check)").all()
        ]
        shares = [share_text(v).removesuffix(" %").replace("< ", "<") for v in rows["shortfall"]]
        assert lines[-1] == ["fails", *shares]
        if rows["margin_p10"].notna().any():
            floors = [math.floor(v * 100) for v in rows["margin_p10"]]
            texts = [
                str(min(v, 154)) if v >= 100 else f"{v:+d}".replace("-", "\u2212") if v else "0"
                for v in floors
            ]
            assert lines[0] == ["margin", *texts]
        else:
            assert len(lines) == 1  # a limit has no margin


def test_chart_draws_the_limit_of_the_aircraft_that_has_one(opened):
    page = opened().open("#field=field-0&aircraft=aircraft-0")
    assert page.locator(".band-chart .limit").count() == 1
    assert "7,000 ft" in page.inner_text(".air-part >> nth=0")
    page.select_option("#aircraft", "1")
    assert page.locator(".band-chart .limit").count() == 0


def test_grid_sets_the_hours_outside_the_window_apart(opened):
    page = opened().open("#field=field-0")
    hours = page.eval_on_selector_all(
        ".grid td.outside", "(all) => all.map((td) => Number(td.dataset.hour))"
    )
    assert sorted(set(hours)) == [*range(6), *range(20, 24)]
    assert len(hours) == 12 * 10
    shadow = "(td) => getComputedStyle(td).boxShadow"
    assert page.eval_on_selector(".grid td.outside", shadow) != "none"
    assert page.eval_on_selector(".grid td:not(.outside)", shadow) == "none"
    cell = page.locator("td[data-month='0'][data-hour='2']")
    assert cell.get_attribute("aria-label").startswith("January, 02:00: ")


@pytest.mark.parametrize("view", ["desktop", "phone"])
def test_jump_leads_to_every_part_of_the_panel(opened, view):
    page = opened(view).open("#field=field-0")
    options = page.locator("#jump option").all_inner_texts()[1:]
    assert options == page.locator("#field-part .part h3").all_inner_texts()
    page.select_option("#jump", label="Stations used")
    assert page.evaluate("document.activeElement.textContent") == "Stations used"
    top = page.evaluate("document.activeElement.getBoundingClientRect().top")
    assert 0 <= top < VIEWS[view]["viewport"]["height"]


def test_field_without_figures_has_only_what_is_known(opened):
    page = opened().open(f"#field={EMPTY_FIELD}")
    assert page.locator(".works, .check-table, .grid").count() == 0
    assert "Runways" in page.locator("#jump option").all_inner_texts()


# History and links


def test_back_leads_from_a_field_to_the_list(opened, result):
    page = opened().open()
    page.select_option("#period", "m3")
    page.click("#fields button[data-field=field-2]")
    page.select_option("#hour", "9")
    page.go_back()
    page.wait_for_selector("#fields tbody button", state="visible")
    assert page.input_value("#period") == "m3"
    assert page.evaluate("document.activeElement !== document.body")
    page.go_forward()
    page.wait_for_selector("#field-heading")
    assert "field=field-2" in page.evaluate("location.href")
    assert page.title() == f"{result.fields[2].name}: {result.title}"


@pytest.mark.parametrize(
    ("fragment", "told"),
    [
        ("#aircraft=nobody", "an aircraft"),
        ("#field=nowhere", "a field"),
        ("#season=never", "a season"),
        ("#compare=field-0+nowhere", "a field to compare"),
        ("#month=7", None),
    ],
)
def test_link_to_what_the_study_does_not_have_says_so(opened, fragment, told):
    page = opened().open(fragment)
    notice = page.inner_text("#notice")
    assert told in notice if told else notice == ""


def test_escape_in_a_choice_does_not_close_the_field(opened):
    page = opened().open("#field=field-0")
    page.focus("#measure")
    page.keyboard.press("Escape")
    assert page.is_visible("#field-heading")


# Comparison


def _compare(page, fields):
    for field in fields:
        page.check(f"input[data-compare={field}]")
    page.click("#compare-open")
    page.wait_for_selector("#compare-heading")


def test_comparison_shows_the_figures_of_each_field(opened, result):
    page = opened().open("#aircraft=aircraft-1")
    assert page.is_disabled("#compare-open")
    _compare(page, ["field-0", "field-4", "field-2"])
    frame = result.risk_monthly.query("aircraft == 'aircraft-1'").set_index(["field", "month"])
    for month, line in enumerate(page.locator(".compared tbody tr").all(), start=1):
        texts = line.locator("th, td").all_inner_texts()
        assert texts[0] == MONTHS[month - 1]
        for field, text in zip(["field-0", "field-4", "field-2"], texts[1:], strict=True):
            row = frame.loc[field, month]
            assert text.split("\n") == [
                share_text(row.shortfall),
                interval_text(row.ci_low, row.ci_high),
            ]
    assert page.locator("#compare-part svg[role=img]").count() == 2
    assert page.locator("#compare-part svg[role=img] polyline.line-1").count() >= 2
    # Dashes and dots differ as the colours do.
    looks = page.evaluate(
        """() => [0, 1, 2].map((n) => [
            getComputedStyle(document.querySelector(".line.line-" + n)).strokeDasharray,
            document.querySelector(".line-dot.line-" + n).getAttribute("d")])"""
    )
    assert len({dash for dash, _ in looks}) == 3
    assert len({dot for _, dot in looks}) == 3


def test_comparison_follows_the_controls_and_the_address(opened, result):
    page = opened().open()
    _compare(page, ["field-2", "field-0"])
    page.select_option("#measure", "p90")
    air = of_air(result.distributions_monthly, "density_altitude").query("field == 'field-2'")
    cells = page.locator(".compared tbody td:nth-child(2)").all_inner_texts()
    assert cells == [altitude_text(v) for v in air["p90"]]
    other = opened("phone").open("#" + page.evaluate("location.href").split("#")[1])
    assert other.inner_text(".line-key") == page.inner_text(".line-key")
    assert other.locator(".compared tbody td:nth-child(2)").all_inner_texts() == cells
    page.keyboard.press("Escape")
    assert page.is_visible("#fields")
    assert page.locator("input[data-compare]:checked").count() == 2


def test_comparison_takes_four_fields_at_most(opened):
    page = opened().open()
    for field in ("field-0", "field-1", "field-2", "field-3"):
        page.check(f"input[data-compare={field}]")
    assert page.is_disabled("input[data-compare=field-4]")
    page.uncheck("input[data-compare=field-1]")
    assert page.is_enabled("input[data-compare=field-4]")
    ids = "+".join(f"field-{n}" for n in range(6))
    page = opened().open(f"#compare={ids}+nothing+field-0")
    assert page.locator(".line-key li").count() == 4


def test_comparison_with_a_field_without_data_says_so(opened):
    page = opened().open(f"#compare=field-0+{EMPTY_FIELD}")
    assert set(page.locator(".compared td:nth-child(3)").all_inner_texts()) == {"no data"}
    alone = opened().open(f"#compare={EMPTY_FIELD}+{EMPTY_FIELD}")
    assert alone.is_visible("#fields")  # one field is no comparison


def test_comparison_works_by_keyboard_alone(opened):
    page = opened().open()
    for field in ("field-3", "field-4"):
        page.focus(f"input[data-compare={field}]")
        page.keyboard.press("Space")
    page.focus("#compare-open")
    page.keyboard.press("Enter")
    assert page.evaluate("document.activeElement.id") == "compare-heading"
    page.keyboard.press("Escape")
    assert page.evaluate("document.activeElement.id") == "fields-heading"


@pytest.mark.parametrize("view", VIEWS)
def test_comparison_has_no_sideways_scroll(opened, view):
    page = opened(view).open("#compare=field-0+field-2+field-3+field-4")
    assert (
        page.evaluate("document.documentElement.scrollWidth") == (VIEWS[view]["viewport"]["width"])
    )


# Doubt


def test_doubtful_elevations_are_marked_wherever_the_field_is_shown(opened, result, tmp_path):
    doubt = replace(result.findings[1], id="field-2", check="station-elevation")
    path = tmp_path / "map.html"
    path.write_text(render_map(replace(result, findings=(doubt,))), encoding="utf-8")
    page = OpenPage(opened().page, path.as_uri()).open()
    text = "elevation in doubt"
    spoken = page.get_attribute(".marker-box[data-field=field-2]", "aria-label")
    assert text in spoken
    assert page.locator(".marker-box[data-field=field-2] .doubtful").count() == 1
    assert page.locator(".marker-box[data-field=field-4] .doubtful").count() == 0
    assert text in page.inner_text("#fields tr:has([data-field=field-2])")
    page.click("#fields button[data-field=field-2]")
    assert text in page.inner_text(".headline")


# Paper


def _pages(page) -> list[str]:
    pdfium = pytest.importorskip("pypdfium2", reason="pypdfium2 is not installed")
    document = pdfium.PdfDocument(io.BytesIO(page.pdf(prefer_css_page_size=True)))
    sizes = {document.get_page_size(i) for i in range(len(document))}
    assert {(round(w), round(h)) for w, h in sizes} == {(595, 842)}  # ISO 216 A4 in points
    return [part.get_textpage().get_text_bounded() for part in document]


@pytest.mark.parametrize("view", ["desktop", "desktop dark", "phone"])
def test_field_prints_to_one_sheet(opened, result, view):
    page = opened(view).open("#field=field-0")
    pages = _pages(page)
    assert len(pages) <= 2  # both sides of one sheet
    text = "\n".join(pages)
    for part in (
        "Quiet Plateau",
        "When it works",
        "Margins by check",
        "Stations used",
        "flight manual",
    ):
        assert part in text
    assert "Method and sources" not in text


def test_overview_prints_every_field_and_the_map_fitted_to_them(opened, result):
    page = opened("phone").open()
    page.evaluate("map_fields.setView([0, 0], 3, { animate: false })")
    before = page.evaluate("map_fields.getCenter().lat")
    page.evaluate("window.dispatchEvent(new Event('beforeprint'))")
    fitted = page.evaluate(
        """(places) => places.every((place) => map_fields.getBounds().contains(place))""",
        [[field.latitude, field.longitude] for field in result.fields],
    )
    assert fitted
    # 184 mm of the sheet at 96 CSS pixels an inch, less the border on both sides.
    assert page.evaluate("map_fields.getSize().x") == pytest.approx(184 / 25.4 * 96 - 2, abs=1)
    page.evaluate("window.dispatchEvent(new Event('afterprint'))")
    assert page.evaluate("map_fields.getCenter().lat") == pytest.approx(before, abs=1.0)
    text = "\n".join(_pages(page))
    assert "Meadow 5" in text
    assert "Quiet Plateau" in text
    assert "Method and sources" in text


def test_comparison_prints_to_one_page(opened):
    page = opened().open("#compare=field-0+field-2")
    assert len(_pages(page)) == 1
