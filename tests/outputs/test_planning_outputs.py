"""The planning answers in the workbook, the report, the summary and the layers."""

from __future__ import annotations

import html
import math
import re
from dataclasses import replace
from pathlib import Path

import numpy as np
import openpyxl
import pandas as pd
import pytest
from sample_result import EMPTY_FIELD, HOSTILE, SEASONS, sample_result

from climarisk.outputs.layers import headline
from climarisk.outputs.report.document import render_report
from climarisk.outputs.summary import columns, summary_lines
from climarisk.outputs.texts import (
    LOAD_LABELS,
    MONTHS,
    flights_interval,
    flights_text,
    gap_interval,
    gap_text,
    good_share_text,
    hours_interval,
    hours_text,
    load_class,
    mass_text,
    told_apart,
)
from climarisk.outputs.workbook.book import write_workbook

PLANES = {"aircraft-0": "Two-seat trainer (invented)", "aircraft-1": "Tourer <b onclick=pwned>"}
NOT_MET = "cannot be met"


@pytest.fixture(scope="module")
def result():
    return sample_result()


@pytest.fixture(scope="module")
def book(result, tmp_path_factory):
    return written(result, tmp_path_factory.mktemp("planning"))


@pytest.fixture(scope="module")
def report(result) -> str:
    return render_report(result)


def written(result, folder: Path):
    write_workbook(result, folder / "tables.xlsx")
    return openpyxl.load_workbook(folder / "tables.xlsx")


def table(sheet, *heads: str) -> list[dict]:
    """The rows below the headings that begin with these words, as cells by heading."""
    rows = list(sheet.iter_rows())
    found = [i for i, row in enumerate(rows) if tuple(c.value for c in row[: len(heads)]) == heads]
    names = [cell.value for cell in rows[found[0]]]
    body = []
    for row in rows[found[0] + 1 :]:
        if row[0].value is None:
            break
        body.append({n: c for n, c in zip(names, row, strict=True) if n is not None})
    return body


def figures(sheet, first: str) -> dict[tuple[str, str, str], dict]:
    keys = (first, "Figure", "Field")
    return {tuple(row[k].value for k in keys): row for row in table(sheet, *keys)}


def names_of(result) -> dict[str, str]:
    return {f.id: " ".join(f.name.split()) for f in result.fields}


def told_names(result) -> dict[str, str]:
    """Names of the fields where steepness is told behind them."""
    names = names_of(result)
    return {f.id: names[f.id] + (" (steep)" if f.is_steep else "") for f in result.fields}


def down(value: float) -> int:
    return math.floor(value + 1e-6)


def up(value: float) -> int:
    return math.ceil(value - 1e-6)


def whole_days(share: float):
    """A share of good days in whole per cent: only all of them are all."""
    return pytest.approx(1.0 if share == 1.0 else min(99, down(share * 100)) / 100)


def fill(cell) -> str:
    return cell.fill.fgColor.rgb[2:].lower() if cell.fill.patternType == "solid" else ""


# Workbook


def test_weights_are_those_of_the_frames_rounded_down_and_words_where_none_holds(book, result):
    rows, names = figures(book["Weights"], "Aircraft"), names_of(result)
    seen = dict.fromkeys(("mass", "maximum mass", NOT_MET, ""), 0)
    for frame, key in ((result.weights_monthly, "month"), (result.weights_seasonal, "season")):
        for row in frame.to_dict("records"):
            when = MONTHS[row["month"] - 1] if key == "month" else row["season"]
            at = PLANES[row["aircraft"]], names[row["field"]]

            def cell(figure, at=at, when=when):
                return rows[at[0], figure, at[1]][when]

            mass, load = cell("Mass, kg"), cell("Useful load, kg")
            low, high = (cell(f"Mass, 90 % interval, {end}").value for end in ("low", "high"))
            seen[row["outcome"]] += 1
            if row["outcome"] == "":
                assert {mass.value, load.value, low, high} == {"no data"}
                assert mass.fill.patternType not in (None, "solid")
                continue
            if row["outcome"] == NOT_MET:
                assert {mass.value, load.value} == {NOT_MET} and fill(mass) == "993404"
            else:
                assert (mass.value, load.value) == (
                    down(row["mass_kg"]),
                    down(row["useful_load_kg"]),
                )
            never = cell("Hours in which no mass holds").value
            assert never == pytest.approx(row["never_met"], rel=1e-12)
            for shown, end, rounded in ((low, "ci_low_kg", down), (high, "ci_high_kg", up)):
                if row["n_years"] < 5:
                    assert shown == "too few years"
                else:
                    assert shown == (NOT_MET if math.isnan(row[end]) else rounded(row[end]))
    assert min(seen.values()) > 0


def test_colour_of_a_load_is_that_of_its_share_of_the_full_load(book, result):
    # ColorBrewer 2.0, YlOrBr in six classes; the sample's full load is 760 - 520 = 240 kg.
    classes = ["ffffd4", "fee391", "fec44f", "fe9929", "d95f0e", "993404"]
    rows, names = figures(book["Weights"], "Aircraft"), names_of(result)
    seen = set()
    for row in result.weights_monthly.to_dict("records"):
        if not row["outcome"]:
            continue
        share = row["useful_load_kg"] / 240.0
        place = (
            5 if row["outcome"] == NOT_MET else 1 + (share < 0.75) + (share < 0.5) + (share < 0.25)
        )
        place = 0 if row["outcome"] == "maximum mass" else place
        at = rows[PLANES[row["aircraft"]], "Useful load, kg", names[row["field"]]]
        assert fill(at[MONTHS[row["month"] - 1]]) == classes[place]
        seen.add(place)
    assert seen == set(range(6))
    legend = next(
        r for r in book["Weights"].iter_rows() if r[0].value == "Share of the useful load"
    )
    assert [(c.value, fill(c)) for c in legend[3:9]] == list(zip(LOAD_LABELS, classes, strict=True))
    assert load_class(math.nan, "") == -1


def test_windows_are_those_of_the_frame_in_both_clocks(book, result):
    rows, names = figures(book["Windows"], "Aircraft"), names_of(result)
    for row in result.windows_monthly.to_dict("records"):
        plane, field = PLANES[row["aircraft"]], names[row["field"]]
        told = {
            figure: rows[plane, figure, field][MONTHS[row["month"] - 1]].value
            for figure in (
                *("Hours of the day, LST", "The same, civil clock", "Usable daylight hours"),
                *("90 % interval, low", "90 % interval, high", "Days with 4 h in a row"),
            )
        }
        if math.isnan(row["n_clock_hours"]):
            assert set(told.values()) == {"no data"}
            continue
        hours, clock, usable, low, high, days = told.values()
        assert hours == (row["hours"].replace(" ", ", ") or "none")
        sides = (text.replace(" ", ", ") for text in row["clock_hours"].split(" / "))
        assert clock == (" / ".join(sides) if row["hours"] else "none")
        assert usable == down(row["usable_hours"])
        few = math.isnan(row["usable_low"])
        assert low == ("too few years" if few else down(row["usable_low"]))
        assert high == ("too few years" if few else up(row["usable_high"]))
        assert days == whole_days(row["days_with_run"])


def test_hours_without_figures_are_told_beside_the_hours(result, tmp_path):
    base = sample_result(1, 1)
    windows = base.windows_monthly.assign(hours_without_figures=3)
    book = written(replace(base, windows_monthly=windows), tmp_path)
    [row] = [
        r for k, r in figures(book["Windows"], "Aircraft").items() if k[1].startswith("Hours of")
    ]
    assert row["Jan"].value == "06-19 (3 h no data)"


def test_every_stretch_of_the_civil_clock_is_told_on_both_sides_of_a_change(tmp_path):
    base = sample_result(1, 1)
    both = base.windows_monthly.assign(
        hours="04-12 17-20",
        clock_hours="05:00-13:00 18:00-21:00 / 06:30-14:30 19:30",
    )
    changed = replace(base, windows_monthly=both)
    book = written(changed, tmp_path)
    [row] = [
        r for k, r in figures(book["Windows"], "Aircraft").items() if k[1].startswith("The same")
    ]
    assert row["Mar"].value == "05:00-13:00, 18:00-21:00 / 06:30-14:30, 19:30"
    assert row["Mar"].value.count("-") == 3
    part = render_report(changed)
    cell = re.search(r"04-12.*?<small>(.*?)</small>", part)[1]
    assert re.sub("<[^>]+>", "", cell) == "05-13, 18-21\xa0/ 06:30-14:30, 19:30"
    # No range breaks: each stands in an element of its own that does not wrap.
    spans = re.findall(r'<span class="unbroken">([^<]*)</span>', cell)
    assert spans == ["05-13", "18-21", "06:30-14:30", "19:30"]


def test_icing_bands_stand_beside_whether_the_chart_was_verified(book, result):
    rows, names = figures(book["Carburettor icing"], "Basis"), names_of(result)
    assert {basis for basis, _, _ in rows} == {"chart not verified"}
    # The bands in the order of the rows; the second figure adds up all that are serious.
    assert list(dict.fromkeys(figure for _, figure, _ in rows))[:3] == [
        *("Serious even in cruise", "Serious at least in descent"),
        "Moderate in cruise, serious in descent",
    ]
    labels = {
        "serious_any_power": "Serious even in cruise",
        "moderate_cruise_serious_descent": "Moderate in cruise, serious in descent",
        "serious_descent": "Serious in descent",
        "light_cruise_or_descent": "Light in cruise or descent",
    }
    for row in result.icing_monthly.to_dict("records"):
        at = "chart not verified", labels[row["band"]], names[row["field"]]
        value = rows[at][MONTHS[row["month"] - 1]].value
        known = not math.isnan(row["share"])
        assert value == (pytest.approx(row["share"], rel=1e-12) if known else "no data")


def test_power_is_rounded_down_and_losses_up(book, result):
    rows, names = figures(book["Engine power"], "Engine"), names_of(result)
    own = result.power_monthly[result.power_monthly["aircraft"] == "aircraft-0"]
    steps = {
        "Power, P50: the median": ("power_p50", 100.0, down),
        "Power, P50, optimistic": ("optimistic_p50", 100.0, down),
        "Humidity, % of power, P90": ("humidity_power_pct_p90", 10.0, up),
        "Humidity, ft, P90": ("humidity_ft_p90", 0.1, up),
    }
    for row in own.to_dict("records"):
        for figure, (column, parts, rounded) in steps.items():
            value = rows["Naturally aspirated", figure, names[row["field"]]][
                MONTHS[row["month"] - 1]
            ]
            if math.isnan(row[column]):
                assert value.value == "no data"
            else:
                assert value.value * parts == pytest.approx(rounded(row[column] * parts), abs=1e-6)


def test_an_engine_without_a_method_is_not_called_no_data(tmp_path):
    book = written(sample_result(1, 3), tmp_path)
    rows = {k[:2]: r["Jul"].value for k, r in figures(book["Engine power"], "Engine").items()}
    assert rows["Diesel", "Power, P50: the median"] == "not computed"
    assert rows["Diesel", "Humidity, ft, P50"] == 230
    assert rows["Naturally aspirated", "Power, P50: the median"] == 0.88


def test_bases_and_differences_are_those_of_the_frames(book, result):
    names, planes = told_names(result), PLANES | {"": "fleet"}
    for told, row in zip(
        table(book["Bases"], "Rank", "Field"), result.bases.to_dict("records"), strict=True
    ):
        assert told["Field"].value == names[row["field"]]
        assert told["Aircraft"].value == planes[row["aircraft"]]
        shown = [
            told[k].value for k in ("Rank", "Usable hours a month", "90 % interval, low", "high")
        ]
        if row["field"] == EMPTY_FIELD:
            assert shown == ["no rank", *["no data"] * 3]
            continue
        hours = down(row["usable_hours_month"])
        assert shown == [row["rank"], hours, down(row["ci_low"]), up(row["ci_high"])]
        days = told["Days with 4 h in a row"].value
        assert days == whole_days(row["days_with_run"])
        steep = row["field"] in ("field-0", "field-3")
        assert ("\u2021" in told["Usable hours a month"].number_format) == steep
    pairs = table(book["Bases"], "Told apart", "First")
    for told, row in zip(pairs, result.base_differences.to_dict("records"), strict=True):
        assert told["First"].value == names[row["first"]]
        assert told["Second"].value == names[row["second"]]
        hours = row["difference_hours_month"]
        step = 10 if hours < 10 else 1
        assert told["Hours a month"].value == pytest.approx(math.floor(hours * step + 0.5) / step)
        for head, end, rounded in (("90 % interval, low", "ci_low", down), ("high", "ci_high", up)):
            step = 10 if abs(row[end]) < 10 else 1
            assert told[head].value == pytest.approx(rounded(row[end] * step) / step)
        held = row["ci_low"] <= 0 <= row["ci_high"]
        assert told["Told apart"].value == ("no" if held else "yes")


def test_schedule_holds_every_flight_the_worst_first(book, result):
    names, told = told_names(result), table(book["Schedule"], "Flight", "Field")
    rows = {row["flight"]: row for row in result.schedule_flights.to_dict("records")}
    assert {row["Flight"].value for row in told} == set(rows)
    shares = [r["Shortfall share"].value for r in told]
    known = [s for s in shares if s != "no data"]
    assert known == sorted(known, reverse=True) and shares[len(known) :] == ["no data"] * 2
    for cells in told:
        row = rows[cells["Flight"].value]
        assert cells["Field"].value == names[row["field"]]
        if math.isnan(row["shortfall"]):
            assert cells["Never met"].value == cells["Mass that holds, kg"].value == "no data"
            continue
        assert cells["Shortfall share"].value == pytest.approx(row["shortfall"], rel=1e-12)
        assert cells["Never met"].value == row["never_met"]
        holds = row["mass_that_holds_kg"]
        expected = NOT_MET if row["outcome"] == NOT_MET else down(holds)
        assert cells["Mass that holds, kg"].value == expected
        assert cells["Nearest time"].value == (row["nearest_time"] or "none within 12 h")
        assert cells["Note"].value == (row["note"] or "\N{EN DASH}")
        words = {"takeoff": "take-off", "landing": "landing", "both": "take-off and landing"}
        assert cells["Operation"].value == words[row["operation"]]
    seasons = table(book["Schedule"], "Season", "Flights")
    assert [s["Season"].value for s in seasons] == ["whole schedule", *SEASONS]
    days = table(book["Schedule"], "Day", "Weekday")
    best = result.schedule_days.sort_values("affected", ascending=False)["date"].head(5)
    assert [d["Day"].value for d in days[:5]] == list(best)


def test_no_cell_of_the_new_sheets_is_blank_and_texts_stay_texts(book):
    for name, heads in (
        ("Weights", ("Aircraft", "Figure")),
        ("Windows", ("Aircraft", "Figure")),
        ("Carburettor icing", ("Basis", "Figure")),
        ("Engine power", ("Engine", "Figure")),
        ("Bases", ("Rank", "Field")),
        ("Schedule", ("Flight", "Field")),
    ):
        for row in table(book[name], *heads):
            assert [key for key, cell in row.items() if cell.value in (None, "")] == []
            assert {cell.data_type for cell in row.values()} <= {"s", "n"}


def test_sheets_of_absent_answers_are_absent(tmp_path):
    base = sample_result(2, 1)
    plain = replace(
        base,
        aircraft=tuple(replace(a, carburettor=False) for a in base.aircraft),
        icing_monthly=base.icing_monthly.iloc[:0],
        bases=base.bases.assign(icing_serious=np.nan),
        schedule_flights=None,
        schedule_seasons=None,
        schedule_days=None,
    )
    book = written(plain, tmp_path)
    assert not {"Schedule", "Carburettor icing"} & set(book.sheetnames)
    rows = table(book["Bases"], "Rank", "Field")
    assert {r["Icing serious even in cruise"].value for r in rows} == {"no carburettor"}
    # Of two aircraft one without: it has no figure, and that is not missing data.
    other = replace(base.aircraft[0], id="aircraft-1", name="Other", carburettor=False)
    none = base.bases.assign(aircraft="aircraft-1", icing_serious=np.nan)
    half = replace(base, aircraft=(base.aircraft[0], other), bases=pd.concat([base.bases, none]))
    rows = table(written(half, tmp_path)["Bases"], "Rank", "Field")
    head = "Icing serious even in cruise (chart not verified)"
    told = {(r["Aircraft"].value, isinstance(r[head].value, float)) for r in rows}
    assert told == {("fleet", True), (half.aircraft[0].name, True), ("Other", False)}
    assert {r[head].value for r in rows if r["Aircraft"].value == "Other"} == {"no carburettor"}
    page = render_report(plain)
    assert 'id="schedule"' not in page and "Carburettor icing" not in page
    assert not any(line.startswith("Schedule") for line in summary_lines(plain, tmp_path, []))


def hostile_result(text: str):
    base = sample_result(2, 2)
    names = {"season": text}
    flights = base.schedule_flights.assign(flight=text, when=text, limiting=text)
    return replace(
        base,
        fields=tuple(replace(f, name=text) for f in base.fields),
        aircraft=tuple(replace(a, name=text) for a in base.aircraft),
        weights_seasonal=base.weights_seasonal.assign(**names),
        bases=base.bases.assign(worst_season=text),
        schedule_flights=flights,
        schedule_seasons=base.schedule_seasons.assign(**names),
    )


@pytest.mark.parametrize("text", ["=1+1", "@SUM(A1)", HOSTILE[1], HOSTILE[2]])
def test_hostile_texts_stay_texts_in_the_new_places(tmp_path, text):
    result = hostile_result(text)
    book = written(result, tmp_path)
    cells = [c for s in ("Weights", "Bases", "Schedule") for r in book[s].iter_rows() for c in r]
    assert not [c for c in cells if c.data_type == "f" or c.hyperlink]
    told = [c for c in cells if c.value == text]
    assert len(told) > 10
    assert all(c.quotePrefix for c in told if text[0] in "=@")
    page = render_report(result)
    part = page[page.index('id="bases"') : page.index('id="air"')]
    assert html.escape(text) in part
    tags = set(re.findall(r"</?([a-z0-9]+)", part))
    assert not tags & {"script", "img"}


# Report


def cells_of(page: str, section: str, caption: str) -> list[str]:
    """The texts of the cells of the table whose caption begins so, row after row."""
    part = page[page.index(f'id="{section}"') :]
    part = part[part.index(f"<caption>{caption}") :]
    body = part[part.index("<tbody>") : part.index("</tbody>")]
    cells = re.findall(r"<td[^>]*>(.*?)</td>", body)
    return [html.unescape(re.sub(r"<small[^>]*>.*|<[^>]+>", "", cell)).strip() for cell in cells]


def ordered(result, values) -> list[str]:
    """Fields by their worst monthly share, the order of the tables of an aircraft."""
    worst = values.groupby("field")["shortfall"].max().sort_values(ascending=False)
    return list(worst.index)


def test_report_tells_the_useful_load_of_every_month(report, result):
    told = cells_of(report, "works-2", "Weight that holds")
    risk = result.risk_monthly[result.risk_monthly["aircraft"] == "aircraft-1"]
    own = result.weights_monthly[result.weights_monthly["aircraft"] == "aircraft-1"]
    width = 12 + len(SEASONS) + 1
    for n, field in enumerate(ordered(result, risk)):
        rows = own[own["field"] == field].sort_values("month")
        expected = [
            {NOT_MET: NOT_MET, "": "no data"}.get(o, "" if math.isnan(kg) else str(down(kg)))
            for o, kg in zip(rows["outcome"], rows["useful_load_kg"], strict=True)
        ]
        assert told[n * width : n * width + 12] == expected
    assert NOT_MET in told and "no data" in told


def test_report_tells_the_working_hours_of_every_month(report, result):
    told = cells_of(report, "works-1", "Hours of the day")
    risk = result.risk_monthly[result.risk_monthly["aircraft"] == "aircraft-0"]
    own = result.windows_monthly[result.windows_monthly["aircraft"] == "aircraft-0"]
    for n, field in enumerate(ordered(result, risk)):
        rows = own[own["field"] == field].sort_values("month")
        expected = [
            "no data" if math.isnan(count) else hours.replace(" ", ", ") or "none"
            for count, hours in zip(rows["n_clock_hours"], rows["hours"], strict=True)
        ]
        assert told[n * 12 : n * 12 + 12] == expected


def test_report_shows_thirty_flights_and_says_how_many_more(result):
    flights = result.schedule_flights
    many = flights.loc[flights.index.repeat(5)].reset_index(drop=True)
    many["flight"] = [f"F{n}" for n in range(len(many))]
    page = render_report(replace(result, schedule_flights=many))
    part = page[page.index('id="schedule"') : page.index('id="air"')]
    assert len(re.findall(r">F\d+</bdi>", part)) == 30
    assert "Further rows of flights: 40;" in part
    # Never met stand first: each of the two of the sample five times.
    assert part.count("<small>never met</small>") == 5 * (flights["never_met"] == "yes").sum()


def test_report_tells_icing_with_its_basis_and_power(report):
    air = report[report.index('id="air"') : report.index('id="sources"')]
    assert "Carburettor icing, % of daylight hours (chart not verified)" in air
    assert "Engine power, naturally aspirated (" in air


# Summary and layers


def test_summary_tells_base_weight_and_schedule_in_seven_lines(result):
    lines = summary_lines(result, Path("maps"), [])
    start = next(n for n, line in enumerate(lines) if line.startswith("Best base"))
    end = next(n for n, line in enumerate(lines) if line.startswith("Data: "))
    assert end - start <= 7
    fleet = result.bases[result.bases["aircraft"] == ""].iloc[0]
    assert fleet["field"] == "field-0"  # which slopes 3.5 %
    hours = down(fleet["usable_hours_month"])
    assert lines[start] == f"Best base for the fleet: Quiet Plateau (steep): {hours} h a month,"
    assert f"90 %: {down(fleet['ci_low'])}-{up(fleet['ci_high'])} h; next " in lines[start + 1]
    assert lines[start + 2] == "Least weight in 90 % of hours: cannot be met, July,"
    whole = result.schedule_seasons.iloc[0]
    text = " ".join(line.strip() for line in lines[start + 4 : end])
    ends = f"{math.floor(whole['ci_low'])}-{math.ceil(whole['ci_high'])}"
    hit, gone = math.floor(whole["affected"] + 0.5), whole["unknown_flights"]
    assert text.startswith(
        f"Schedule: {hit} of the {whole['flights'] - gone} flights with figures are expected to "
        f"fall short (90 %: {ends})."
    )
    assert f"{gone} flights have no figures: that does not mean no risk." in text
    assert text.endswith("can never be met at the mass planned.")
    assert all(columns(line) <= 80 for line in lines)


def test_summary_names_the_least_part_of_a_full_load(result):
    weights = result.weights_monthly.assign(outcome="mass", useful_load_kg=200.0)
    heavy = replace(result.aircraft[0], maximum_kg=1520.0)  # full load 1,000 kg, the other 240 kg
    own = weights["aircraft"] == heavy.id
    weights.loc[own, "useful_load_kg"] = 600.0
    weights.loc[
        own & (weights["field"] == "field-2") & (weights["month"] == 8), "useful_load_kg"
    ] = 599.9
    changed = replace(result, weights_monthly=weights, aircraft=(heavy, result.aircraft[1]))
    lines = summary_lines(changed, Path("maps"), [])
    at = lines.index("Least weight in 90 % of hours: load 599 of 1,000 kg, August,")
    assert lines[at + 1].endswith(f": {heavy.name}.")


def test_summary_without_a_figure_never_sounds_safe(result):
    none = replace(
        result,
        weights_monthly=result.weights_monthly.assign(
            mass_kg=math.nan, useful_load_kg=math.nan, outcome="", never_met=math.nan
        ),
        bases=result.bases.assign(rank=math.nan, usable_hours_month=math.nan),
    )
    lines = summary_lines(none, Path("maps"), [])
    assert "Least weight in 90 % of hours: no data. That does not mean no risk." in lines
    assert "Best base for the fleet: none, no field has figures in every month." in lines


def test_layers_tell_the_hours_and_the_rank_of_a_base(result):
    fleet = result.bases[result.bases["aircraft"] == ""].set_index("field")
    for row in headline(result):
        base = fleet.loc[row["id"]]
        if row["id"] == EMPTY_FIELD:
            assert row["fleet_hours"] is None and row["base_rank"] is None
            continue
        assert row["fleet_hours"] == round(base["usable_hours_month"], 1)
        assert row["base_rank"] == base["rank"]


def test_rounding_never_flatters():
    assert mass_text(719.99) == "719 kg"
    assert mass_text(0.29 * 100 * 10) == "290 kg"  # a float below 290
    assert mass_text(math.nan) == "no data"
    assert hours_text(359.99) == "359\N{NARROW NO-BREAK SPACE}h" and hours_text(math.nan) == ""
    assert hours_interval(12.9, 20.1) == "12-21" and hours_interval(-1e-13, 0.0) == "0"
    # Of good things only all of them are all; rare ones are not none.
    for share, text in ((0.999, "99 %"), (1.0, "100 %"), (0.29, "29 %"), (0.296, "29 %"),
                        (0.004, "< 1 %"), (0.0, "0 %"), (math.nan, "no data")):  # fmt: skip
        assert good_share_text(share) == text


@pytest.mark.parametrize(
    ("value", "text"),
    [(4.04, "4.0"), (4.05, "4.1"), (12.51, "13"), (9.94, "9.9"), (9.95, "10"), (0.0, "0"),
     (0.04, "< 0.1"), (0.05, "0.1"), (1234.4, "1,234")],
)  # fmt: skip
def test_expected_numbers_have_a_decimal_below_ten_and_are_the_nearest(value, text):
    assert flights_text(value) == text
    assert gap_text(value) == f"{text} h"


@pytest.mark.parametrize(
    ("ends", "text"),
    [((3.91, 7.11), "3.9-7.2"), ((8.2, 17.1), "8.2-18"), ((9.99, 10.01), "9.9-11"),
     ((0.0, 0.0), "0"), ((0.01, 0.02), "0-0.1"), ((math.nan, 7.1), "none")],
)  # fmt: skip
def test_interval_of_flights_is_rounded_outwards(ends, text):
    assert flights_interval(*ends) == text


def test_interval_of_a_difference_is_rounded_outwards_and_judged_unrounded():
    minus = "\N{MINUS SIGN}"
    assert gap_interval(-4.21, 9.13) == f"{minus}4.3 to 9.2"
    assert gap_interval(-10.2, -0.01) == f"{minus}11 to 0"
    assert told_apart(-10.2, -0.01) and told_apart(0.01, 3.0)
    assert not told_apart(0.0, 3.0) and not told_apart(-3.0, 0.0)
    assert flights_text(math.nan) == "no data"


def test_seasons_without_a_flight_are_left_out(result, tmp_path):
    seasons = result.schedule_seasons.copy()
    seasons.loc[seasons["season"] == SEASONS[0], "flights"] = 0
    changed = replace(result, schedule_seasons=seasons)
    told = table(written(changed, tmp_path)["Schedule"], "Season", "Flights")
    assert [s["Season"].value for s in told] == ["whole schedule", *SEASONS[1:]]
    page = render_report(changed)
    part = page[page.index('id="schedule"') :]
    part = part[part.index("<caption>By season") : part.index("</table>")]
    assert SEASONS[0] not in part and html.escape(SEASONS[1]) in part


def test_report_marks_steep_fields_and_notes_of_the_schedule(report, result):
    part = report[report.index('id="schedule"') : report.index('id="air"')]
    flights = result.schedule_flights
    assert part.count('class="mark">steep<') == (flights["steep"] == "yes").sum()
    for note, rows in flights[flights["note"] != ""].groupby("note"):
        assert part.count(f"<small>{html.escape(str(note))}</small>") == len(rows)
    assert (flights["note"] != "").any()
    bases = report[report.index('id="bases"') : report.index('id="schedule"')]
    assert bases.count('<small class="mark">steep<') == 2
    assert "</bdi> (steep)</b> comes first" in bases
