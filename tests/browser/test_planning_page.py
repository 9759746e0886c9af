"""The planning answers on the page: weights, windows, icing, power, and the two overviews."""

from __future__ import annotations

import math
from dataclasses import replace

import pandas as pd
import pytest
from chromium import VIEWS, OpenPage
from sample_planning import EMPTY_KG, MAXIMUM_KG, ranges
from sample_result import EMPTY_FIELD, SEASONS, sample_result
from test_map_page import interval_text, listed, markers, share_text

from climarisk.outputs.map import render_map

#: Step of the useful load that the page tells for 240 kg of it in a small study.
STEP_KG = 1
OPERATIONS = {"takeoff": "take-off", "landing": "landing", "both": "take-off and landing"}


def load_text(row, step: int) -> str:
    """The useful load as whole steps below it."""
    if row.outcome == "":
        return "no data"
    if row.outcome == "cannot be met":
        return "cannot be met"
    if row.outcome == "maximum mass":
        return f"{MAXIMUM_KG - EMPTY_KG:.0f} kg"
    return f"{math.floor(row.useful_load_kg / step) * step:,} kg"


def loads(frame, step: int) -> dict[str, str]:
    return {row.field: load_text(row, step) for row in frame.itertuples()}


def cells(page, rows: str) -> list[list[str]]:
    return page.eval_on_selector_all(
        rows, "(all) => all.map((row) => [...row.cells].map((cell) => cell.innerText.trim()))"
    )


@pytest.fixture
def other_page(opened, tmp_path):
    """A function from another result and a fragment to its page."""

    def show(result, fragment: str = ""):
        path = tmp_path / "map.html"
        path.write_text(render_map(result), encoding="utf-8")
        return OpenPage(opened().page, path.as_uri()).open(fragment)

    return show


# Weight that holds


@pytest.mark.parametrize("aircraft", ["aircraft-0", "aircraft-1"])
def test_loads_are_those_of_the_frames_rounded_down(opened, result, aircraft):
    page = opened().open(f"#measure=weight&month=7&aircraft={aircraft}")
    rows = result.weights_monthly.query(f"aircraft == '{aircraft}' and month == 7")
    assert markers(page) == loads(rows, STEP_KG)
    page.select_option("#hour", "14")
    rows = result.weights_hourly.query(f"aircraft == '{aircraft}' and month == 7 and hour == 14")
    assert "cannot be met" in set(rows["outcome"])
    assert {f: v.split("mass")[0].strip() for f, v in listed(page).items()} == loads(rows, STEP_KG)
    page.select_option("#period", "s2")
    rows = result.weights_seasonal.query(f"aircraft == '{aircraft}'")
    assert markers(page) == loads(rows[rows["season"] == SEASONS[2]], STEP_KG)


def test_list_shows_mass_beside_load_and_begins_with_the_lightest(opened, result):
    page = opened().open("#measure=weight&month=7&hour=14&aircraft=aircraft-1")
    rows = result.weights_hourly.query("aircraft == 'aircraft-1' and month == 7 and hour == 14")
    order = list(listed(page))
    unmet = [r.field for r in rows.itertuples() if r.outcome == "cannot be met"]
    assert set(order[: len(unmet)]) == set(unmet)
    assert order[-1] == EMPTY_FIELD
    for row in rows[rows["outcome"] == "mass"].itertuples():
        load = math.floor(row.useful_load_kg / STEP_KG) * STEP_KG
        assert listed(page)[row.field].endswith(f"mass {EMPTY_KG + load:.0f}")


def test_what_cannot_be_met_is_a_class_of_its_own_and_the_worst(opened, result):
    page = opened().open("#measure=weight&month=7&hour=14&aircraft=aircraft-1")
    classes = page.evaluate(
        """() => Object.fromEntries([...document.querySelectorAll("#fields tbody tr")].map((row) =>
            [row.querySelector("[data-field]").dataset.field,
             row.querySelector(".symbol").getAttribute("class").match(/class-(\\w+)/)[1]]))"""
    )
    labels = page.locator("#legend li").all_inner_texts()
    worst = labels.index("cannot be met")
    assert labels[worst + 1] == "no data"
    rows = result.weights_hourly.query("aircraft == 'aircraft-1' and month == 7 and hour == 14")
    for row in rows.itertuples():
        number = classes[row.field]
        assert (number == str(worst)) == (row.outcome == "cannot be met")
        assert (number == "none") == (row.outcome == "")
        assert (number == "0") == (row.outcome == "maximum mass")


def test_tip_of_a_marker_is_a_sentence(opened, result):
    page = opened().open("#measure=weight&month=7&aircraft=aircraft-0")
    row = result.weights_monthly.query(
        "field == 'field-0' and aircraft == 'aircraft-0' and month == 7"
    ).iloc[0]
    load = math.floor(row.useful_load_kg)
    page.focus(".marker-box[data-field=field-0]")
    told = (
        f"{EMPTY_KG + load:.0f} kg, a useful load of {load} kg, holds in 90 % of the hours, "
        "July, whole window (daylight)."
    )
    assert told in page.inner_text(".tip")
    assert told in page.get_attribute(".marker-box[data-field=field-0]", "aria-label")


def test_panel_tells_mass_load_interval_and_hours_in_which_none_holds(opened, result):
    page = opened().open("#field=field-3&aircraft=aircraft-1")
    frame = result.weights_monthly.query("field == 'field-3' and aircraft == 'aircraft-1'")
    lines = cells(page, ".weights tbody tr")
    for line, row in zip(lines[:12], frame.itertuples(), strict=True):
        ends = [row.ci_low_kg, row.ci_high_kg]
        text = "none" if math.isnan(row.ci_high_kg) else "-".join(f"{math.floor(e)}" for e in ends)
        assert line[3].removesuffix("a").removesuffix("b") == text
        assert line[4] == share_text(row.never_met)
        if row.outcome == "cannot be met":
            assert line[1:3] == ["cannot be met", "none"]
            continue
        assert line[1].split()[0] == str(math.floor(row.mass_kg))
        assert line[2] == str(math.floor(row.useful_load_kg))
    assert [line[0] for line in lines[12:]] == list(SEASONS)


def test_grid_tells_the_load_of_every_hour(opened, result):
    page = opened().open("#field=field-3&aircraft=aircraft-1&measure=weight")
    shown = page.evaluate(
        """() => [...document.querySelectorAll(".grid tbody tr")].map((row) =>
            [...row.querySelectorAll("td")].map((cell) => cell.textContent))"""
    )
    frame = result.weights_hourly.query("field == 'field-3' and aircraft == 'aircraft-1'")
    for row in frame.itertuples():
        text = load_text(row, STEP_KG).replace("cannot be met", "none").removesuffix(" kg")
        assert shown[row.hour][row.month - 1] == text
    assert any("none" in line for line in shown)


def test_comparison_has_the_loads(opened, result):
    page = opened().open("#measure=weight&compare=field-0+field-3&aircraft=aircraft-0")
    lines = cells(page, ".compared tbody tr")
    for field, place in (("field-0", 1), ("field-3", 2)):
        rows = result.weights_monthly.query(f"field == '{field}' and aircraft == 'aircraft-0'")
        texts = [load_text(row, STEP_KG) for row in rows.itertuples()]
        assert [line[place].split("\n")[0] for line in lines] == texts


def test_study_without_weights_does_not_offer_them(other_page, result):
    names = ("weights_monthly", "weights_hourly", "weights_seasonal")
    none = {name: getattr(result, name).iloc[:0] for name in names}
    page = other_page(replace(result, **none), "#measure=weight&field=field-0")
    assert page.locator("#measure option[value=weight]").count() == 0
    assert page.locator(".weights").count() == 0
    assert "measure=shortfall" in page.evaluate("location.hash")


def test_interval_whose_lower_end_no_mass_meets_says_so(other_page, result):
    weights = result.weights_monthly.copy()
    mine = (weights["field"] == "field-2") & (weights["month"] == 3)
    weights.loc[mine, "ci_low_kg"] = math.nan
    weights.loc[mine, "ci_high_kg"] = 731.9
    changed = replace(result, weights_monthly=weights)
    page = other_page(changed, "#field=field-2&measure=weight&month=3")
    assert cells(page, ".weights tbody tr")[2][3].startswith("up to 731")
    page.click("#all-fields")
    assert page.inner_text("tr:has([data-field=field-2]) .column-interval") == "up to 211"


def test_steps_above_one_kilogram_are_told_where_a_load_stands(other_page, result):
    heavy = tuple(replace(a, maximum_kg=a.empty_kg + 1000.0) for a in result.aircraft)
    page = other_page(replace(result, aircraft=heavy), "#measure=weight&month=2")
    step = "in steps of 5 kg"  # the first of 1, 2, 5, ... of which 250 are 1,000 kg
    assert step in page.inner_text("#caption")
    page.click("[data-field=field-2] >> nth=0")
    part = page.inner_text("#field-part")
    assert part.count(step) >= 3  # the figure, the facts, the table
    assert step in page.inner_text(".grid caption")
    page.select_option("#measure", "shortfall")
    assert step not in page.inner_text("#caption")


# When it works


def test_panel_says_when_the_field_works(opened, result):
    page = opened().open("#field=field-0&aircraft=aircraft-0")
    frame = result.windows_monthly.query("field == 'field-0' and aircraft == 'aircraft-0'")
    for line, row in zip(cells(page, ".works tbody tr"), frame.itertuples(), strict=True):
        told = line[1].split("\n")
        hours = [_hours(part) for part in told[0].split(", ")] if row.hours else []
        assert ranges(sorted(h for part in hours for h in part)) == row.hours
        clock = " / ".join(", ".join(days.split()) for days in row.clock_hours.split(" / "))
        assert told[1:] == ([f"clock {clock}"] if row.hours else [])
        usable = line[2].split("\n")
        whole = f"{math.floor(row.usable_hours)} of {math.floor(row.daylight_hours)}"
        assert usable[0] == whole
        if math.isnan(row.usable_low):
            assert usable[1].startswith("no interval")
        else:
            ends = f"{math.floor(row.usable_low)}-{math.ceil(row.usable_high)}"
            assert usable[1].rstrip("ab") == ends
        assert line[3] == good_share_text(row.days_with_run)


def _hours(text: str) -> range:
    first, _, last = text.partition("-")
    return range(int(first[:2]), int((last or first)[:2]) + 1)


def good_share_text(share: float) -> str:
    """Whole per cent, rounded down; only all of it is all."""
    return share_text(share if share < 0.01 else math.floor(share * 100 + 1e-9) / 100)


def test_civil_clock_tells_every_stretch_and_both_clocks(other_page, result):
    windows = result.windows_monthly.copy()
    july, march = (
        (windows["field"] == "field-0") & (windows["month"] == month) for month in (7, 3)
    )
    windows.loc[july | march, "hours"] = "04-12 17-20"
    windows.loc[july, "clock_hours"] = "05:00-13:00 18:00-21:00"
    windows.loc[march, "clock_hours"] = "06:00-17:00 / 07:00-18:00"
    late = (windows["field"] == "field-0") & (windows["month"] == 8)
    windows.loc[late, ["hours", "clock_hours"]] = ["22-03", "23:00-04:00"]
    page = other_page(replace(result, windows_monthly=windows), "#field=field-0")
    lines = [line[1] for line in cells(page, ".works tbody tr")]
    assert lines[6] == "04:00-12:00, 17:00-20:00\nclock 05:00-13:00, 18:00-21:00"
    assert lines[2] == "04:00-12:00, 17:00-20:00\nclock 06:00-17:00 / 07:00-18:00"
    assert lines[7] == "22:00-03:00\nclock 23:00-04:00"


def test_hours_without_figures_are_no_usable_hours(other_page, result):
    windows = result.windows_monthly.copy()
    mine = (windows["field"] == "field-0") & (windows["month"] == 3)
    windows.loc[mine, "hours_without_figures"] = 2
    page = other_page(replace(result, windows_monthly=windows), "#field=field-0")
    assert "2 hours without figures" in cells(page, ".works tbody tr")[2][1]


# Icing and power


def test_icing_is_that_of_the_frame_and_says_that_the_chart_is_not_verified(opened, result):
    page = opened().open("#field=field-0")
    frame = result.icing_monthly.query("field == 'field-0'")
    lines = cells(page, ".icing tbody tr")
    for month, line in enumerate(lines, start=1):
        rows = frame[frame["month"] == month]
        assert line[1:] == [share_text(share) for share in rows["share"]]
    assert "chart not verified" in page.inner_text(".icing caption")
    page.click("summary:has-text('Serious even in cruise')")
    assert "chart not verified" in page.inner_text(".icing-grid caption")
    noon = page.inner_text(".icing-grid tbody tr:has(th:text-is('12')) td >> nth=0")
    rows = result.icing_hourly.query("field == 'field-0' and month == 1 and hour == 12")
    serious = rows[rows["band"] == "serious_any_power"]["share"].sum()
    assert noon == share_text(serious).removesuffix(" %")


def test_aircraft_without_a_carburettor_has_no_icing_and_a_diesel_no_power(other_page):
    page = other_page(sample_result(3, 3), "#field=field-0&aircraft=aircraft-2")
    heads = page.locator("#field-part .part h3").all_inner_texts()
    assert "Carburettor icing" not in heads
    part = page.inner_text(".part:has(.power)")
    assert "needs its maker's table" in part
    assert page.locator(".power thead th").count() == 2  # humidity's feet are of the air
    page.select_option("#aircraft", "0")
    assert page.locator(".power thead th").count() == 5
    assert page.locator(".icing").count() == 1


def test_power_is_that_of_the_frame_rounded_down(opened, result):
    page = opened().open("#field=field-2")
    frame = result.power_monthly.query("field == 'field-2' and aircraft == 'aircraft-0'")
    for line, row in zip(cells(page, ".power tbody tr"), frame.itertuples(), strict=True):
        low, middle, high, best = (
            math.floor(share * 100 + 1e-9)
            for share in (row.power_p10, row.power_p50, row.power_p90, row.optimistic_p50)
        )
        assert line[1].split("\n") == [f"{middle} %", f"{low}-{high}"]
        assert line[2] == f"{best} %"
        lost = math.ceil(row.humidity_power_pct_p50 * 10 - 1e-9) / 10
        assert line[3] == f"{lost:.1f} %"
        assert line[4].split("\n")[0] == str(math.ceil(row.humidity_ft_p50 / 10 - 1e-9) * 10)


# Bases


@pytest.mark.parametrize("who", ["", "aircraft-1"])
def test_bases_are_those_of_the_frame_in_their_rank(opened, result, who):
    page = opened().open("#view=bases" + (f"&of={who}" if who else ""))
    lines = cells(page, ".bases tbody tr")
    rows = result.bases[result.bases["aircraft"] == who]
    by = "usable_hours_month" if who else "rank"
    known = rows[rows["usable_hours_month"].notna()].sort_values(by, ascending=not who)
    names = {field.id: " ".join(field.name.split()) for field in result.fields}
    for line, row in zip(lines, known.itertuples(), strict=False):
        assert names[row.field][:12] in line[0]
        ends = f"{math.floor(row.ci_low)}-{math.ceil(row.ci_high)}"
        assert line[1] == f"{math.floor(row.usable_hours_month)} h {ends}"
        assert ("steep: own procedure" in line[0]) == (row.steep == "yes")
        assert line[2] == f"{math.floor(row.year_p10)}-{math.floor(row.year_p90)} h"
        assert line[3] == f"{math.floor(row.worst_season_hours_month)} h {row.worst_season}"
        assert line[4] == good_share_text(row.days_with_run)
        assert line[5] == f"{share_text(row.share_2_5k)} / {share_text(row.share_1k)}"
        assert line[6] == f"{share_text(row.icing_serious)} chart not verified"
    assert len(lines) == len(result.fields)
    assert lines[-1][1] == "no data"  # the field without data stands last
    assert {"yes", ""} <= set(known["steep"])


def test_bases_are_told_apart_by_paired_differences(opened, result):
    page = opened().open("#view=bases&base=field-3")
    rows = result.base_differences.query("aircraft == ''")
    other = rows.query("first == 'field-0' and second == 'field-3'").iloc[0]
    assert other.ci_low > 10  # whole hours
    low, high = math.floor(other.ci_low), math.ceil(other.ci_high)
    hours = math.floor(other.difference_hours_month + 0.5)
    told = {line[0]: line[-1] for line in cells(page, ".bases tbody tr")}
    assert f"{hours} h more ({low} to {high})" in told.values()
    page.select_option("#bases-against", label=page.inner_text("#bases-against option >> nth=0"))
    assert "base=field-0" in page.evaluate("location.hash")
    shown = [c[-1] for c in cells(page, ".bases tbody tr")]
    assert f"{hours} h fewer ({low} to {high})" in shown
    assert page.evaluate("document.activeElement.id") == "bases-against"


@pytest.mark.parametrize(
    ("exact", "told"),
    [
        ((3.824, -1.21, 8.9), "not told apart: 3.8 h fewer (−1.3 to 8.9)"),
        ((3.824, 0.004, 10.2), "3.8 h fewer (0 to 11)"),
        ((0.01, -0.2, 0.25), "not told apart: < 0.1 h fewer (−0.2 to 0.3)"),
        ((0.0, -0.2, 0.2), "not told apart: 0 h (−0.2 to 0.2)"),
        ((4.04, math.nan, math.nan), "4.0 h fewer, no interval"),
        (None, "not computed"),
    ],
)
def test_differences_are_told_by_their_interval_before_rounding(other_page, result, exact, told):
    table = result.base_differences
    mine = (table["first"] == "field-0") & (table["second"] == "field-1") & (table.aircraft == "")
    assert mine.sum() == 1
    changed = table.copy()
    if exact is None:
        changed = changed[~mine]
    else:
        changed.loc[mine, ["difference_hours_month", "ci_low", "ci_high"]] = exact
    page = other_page(replace(result, base_differences=changed), "#view=bases&base=field-0")
    name = next(" ".join(f.name.split()) for f in result.fields if f.id == "field-1")
    lines = cells(page, ".bases tbody tr")
    assert [line[-1] for line in lines if name[:12] in line[0]] == [told]
    assert "base_differences.csv" not in page.inner_text("#overview-part")


def test_strips_span_what_they_show_and_say_so(opened, result):
    page = opened().open("#view=bases")
    fleet = result.bases.query("aircraft == ''")
    low, high = math.floor(fleet["year_p10"].min()), math.floor(fleet["year_p90"].max())
    assert 0 < low < high
    assert f"strip {low} to {high} h" in page.inner_text(".bases thead")
    dots = page.eval_on_selector_all(
        ".strip .mean", "(all) => all.map((dot) => Number(dot.getAttribute('cx')))"
    )
    known = fleet["usable_hours_month"].dropna().sort_values(ascending=False)
    for dot, hours in zip(dots, known, strict=True):
        # 5 and 145 are the ends of the drawn line.
        assert dot == pytest.approx(5 + 140 * (math.floor(hours) - low) / (high - low), abs=0.06)


def test_fleet_is_told_whole(opened, result):
    page = opened().open("#view=bases")
    told = page.inner_text("#overview-part .key")
    for profile, count in zip(result.aircraft, (1, 2), strict=True):
        assert f"{count} × {' '.join(profile.name.split())}" in told


def test_overviews_by_keyboard_back_and_link(opened, result):
    page = opened().open()
    page.focus("#views [data-view=bases]")
    page.keyboard.press("Enter")
    assert page.evaluate("document.activeElement.id") == "overview-heading"
    assert not page.is_visible("#map_fields")
    assert page.get_attribute("#views [data-view=bases]", "aria-current") == "page"
    page.select_option("#bases-of", "2")
    again = opened().open(page.evaluate("location.hash"))
    assert again.input_value("#bases-of") == "2"
    page.locator(".bases .plain-button >> nth=1").click()
    assert page.evaluate("document.activeElement.id") == "field-heading"
    page.go_back()
    page.wait_for_selector("#overview-heading")
    page.keyboard.press("Escape")
    assert page.evaluate("document.activeElement.id") == "fields-heading"
    assert page.is_visible("#map_fields")
    assert page.evaluate("map_fields.getSize().x") > 300
    assert set(markers(page)) == {field.id for field in result.fields}


# Schedule


def test_schedule_tells_expected_flights_seasons_and_days(opened, result):
    page = opened().open("#view=schedule")
    whole = result.schedule_seasons.query("season == ''").iloc[0]
    head = page.inner_text("#overview-part .headline")
    known = whole.flights - whole.unknown_flights
    assert whole.affected > 10 and whole.ci_low > 10
    assert f"{math.floor(whole.affected + 0.5)} of the {known}\nflights with figures" in head
    assert f"{math.floor(whole.ci_low)}-{math.ceil(whole.ci_high)}" in head
    unknown = f"{whole.unknown_flights} of {whole.flights} flights: not counted"
    assert f"{unknown}; that does not mean no risk" in head
    lines = cells(page, ".seasons tbody tr")
    assert [line[0] for line in lines] == list(SEASONS)
    worst = result.schedule_days.sort_values("affected", ascending=False)
    days = [line[0].split()[0] for line in cells(page, ".days tbody tr")]
    assert days == list(worst["date"].head(len(days)))


def test_season_without_flights_is_left_out_and_few_flights_have_a_decimal(other_page, result):
    seasons = result.schedule_seasons.copy()
    figures = ["affected", "ci_low", "ci_high", "year_low", "year_high", "worst_year"]
    seasons.loc[1, ["flights", "unknown_flights"]] = 0
    seasons.loc[1, figures] = math.nan
    seasons.loc[2, figures] = [4.04, 1.21, 10.2, 0.0, 12.6, 2022]
    seasons.loc[3, "unknown_flights"] = seasons.loc[3, "flights"]
    seasons.loc[3, figures] = math.nan
    page = other_page(replace(result, schedule_seasons=seasons), "#view=schedule")
    lines = cells(page, ".seasons tbody tr")
    assert [line[0] for line in lines] == list(SEASONS)[1:]  # the row of the whole comes first
    assert lines[0][2:5] == ["4.0", "1.2-11", "0-13"]
    assert lines[1][2:5] == ["no data"] * 3


def test_schedule_without_any_figure_says_so(other_page, result):
    seasons = result.schedule_seasons.copy()
    seasons["unknown_flights"] = seasons["flights"]
    figures = ["affected", "ci_low", "ci_high", "year_low", "year_high", "worst_year"]
    seasons[figures] = math.nan
    page = other_page(replace(result, schedule_seasons=seasons), "#view=schedule")
    head = page.inner_text("#overview-part .headline")
    assert "no data" in head and "Best and worst" not in head
    assert "that does not mean no risk" in head


def test_flights_are_those_of_the_frame(opened, result):
    page = opened().open("#view=schedule&flights=flight")
    lines = {line[0]: line for line in cells(page, ".flights tbody tr")}
    assert len(lines) == len(result.schedule_flights)
    for row in result.schedule_flights.itertuples():
        line = lines[row.flight]
        assert ("steep: own procedure" in line[1]) == (row.steep == "yes")
        assert f", {OPERATIONS[row.operation]} at {row.mass_kg:.0f} kg" in line[1]
        assert line[2].endswith(row.note or "flights" * (row.flights > 1) or "flight")
        if math.isnan(row.shortfall):
            assert [line[3], line[6]] == ["no data", "no data"]
            continue
        assert share_text(row.shortfall) in line[3]
        if not math.isnan(row.ci_low):
            assert interval_text(row.ci_low, row.ci_high) in line[3]
        assert ("never met" in line[3]) == (row.never_met == "yes")
        if row.outcome == "cannot be met":
            assert line[6] == "cannot be met"
        else:
            assert line[6].startswith(f"{math.floor(row.mass_that_holds_kg)} kg")
        if row.nearest_time:
            assert (
                line[7] == f"{row.nearest_time} 3.5 h earlier, {share_text(row.nearest_shortfall)}"
            )
        else:
            assert line[7] == ("none within 12 h" if row.shortfall else "as planned")


def test_flights_are_ordered_as_asked(opened, result):
    page = opened().open("#view=schedule")

    def names() -> list[str]:
        return [line[0] for line in cells(page, ".flights tbody tr")]

    worst = result.schedule_flights.sort_values(
        ["shortfall", "affected"], ascending=False, kind="stable"
    )
    assert names() == list(worst["flight"])
    page.select_option("#flight-order", "affected")
    assert "flights=affected" in page.evaluate("location.hash")
    most = worst.sort_values("affected", ascending=False, kind="stable")
    assert names() == list(most["flight"])


def test_of_very_many_flights_the_worst_are_drawn(other_page, result):
    flights = pd.concat([result.schedule_flights] * 100, ignore_index=True)
    page = other_page(replace(result, schedule_flights=flights), "#view=schedule")
    assert page.locator(".flights tbody tr").count() == 200
    assert "of 1,400; all of them are in schedule_flights.csv" in page.inner_text("#overview-part")
    assert "no data" not in page.inner_text(".flights tbody")  # those with figures come first


def test_study_without_overviews_has_no_way_to_them(other_page, result):
    none = dict.fromkeys(["schedule_flights", "schedule_seasons", "schedule_days"])
    page = other_page(replace(result, bases=result.bases.iloc[:0], **none), "#view=schedule")
    assert page.locator("#views button").count() == 0
    assert page.is_visible("#fields")
    assert "an overview" in page.inner_text("#notice")


# Everywhere


@pytest.mark.parametrize("view", VIEWS)
@pytest.mark.parametrize("name", ["bases", "schedule"])
def test_overviews_are_silent_and_have_no_sideways_scroll(opened, view, name):
    opened_page = opened(view)
    page = opened_page.open(f"#view={name}")
    assert page.evaluate("document.documentElement.scrollWidth") == VIEWS[view]["viewport"]["width"]
    small = page.evaluate(
        """() => [...document.querySelectorAll("#views button, #overview-part select")]
            .filter((node) => node.getBoundingClientRect().height < 44)
            .map((node) => node.outerHTML.slice(0, 80))"""
    )
    assert small == []
    assert opened_page.requests == [opened_page.url]
    assert opened_page.complaints == []
    assert page.evaluate("window.pwned") is None
