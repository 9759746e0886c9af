"""The workbook: every figure read back with another library, and nothing in it that runs."""

from __future__ import annotations

import calendar
import csv
import html
import math
import os
import re
import shutil
import subprocess
import sys
import unicodedata
import zipfile
from dataclasses import replace
from functools import cache
from pathlib import Path

import numpy as np
import openpyxl
import pytest
from hypothesis import given
from hypothesis import strategies as st
from sample_result import EMPTY_FIELD, SEASONS, sample_result

from climarisk.errors import OutputError
from climarisk.findings import Finding
from climarisk.outputs.texts import (
    CAUTIONS,
    METHOD,
    MONTHS,
    altitude_text,
    band_labels,
    band_of,
    interval_text,
    share_text,
)
from climarisk.outputs.workbook import cells
from climarisk.outputs.workbook.book import sheet_names, write_workbook
from climarisk.outputs.workbook.cells import clean

FIXED = [
    *("Weights", "Windows", "Bases", "Schedule", "Carburettor icing", "Engine power"),
    *("Density altitude", "Humidity", "Margins", "Method and sources", "Cautions"),
]
PLAIN = ("Two-seat trainer (invented)", "Tourer <b onclick=pwned>")
#: Beginnings that a spreadsheet takes as a formula: OWASP, "CSV Injection", from memory.
LEADS = ("=1+1", "+1+1", "-1+1", "@SUM(A1)", "\t=1+1", "\r=1+1")
#: Markup of the file format, its escapes, characters that XML 1.0 forbids, codes of a footer.
MARKUP = (
    "<r><t>bold</t></r>",
    "<r></si></sst>&</r>",
    "_x0041_",
    "a\x00b\x08c\x0bd\x1fe",
    "f\ufffeg\uffff",
    "&C&D &&A",
    "https://example.org",
    "mailto:a@example.org",
    "{=1+1}",
)
# More than one cell holds: 32 767 characters (ECMA-376 leaves it to the program; the limit of
# the common spreadsheet program, from its list of limits, from memory).
MOST_CHARACTERS = 32767


@pytest.fixture(scope="module")
def result():
    return sample_result()


@pytest.fixture(scope="module")
def path(result, tmp_path_factory) -> Path:
    target = tmp_path_factory.mktemp("workbook") / "tables.xlsx"
    write_workbook(result, target)
    return target


@pytest.fixture(scope="module")
def book(path):
    return openpyxl.load_workbook(path)


def written(result, tmp_path: Path):
    target = tmp_path / "tables.xlsx"
    write_workbook(result, target)
    return openpyxl.load_workbook(target)


def table(sheet, first: str = "Figure") -> list[dict]:
    """The rows below the headings that begin with a word, as cells by heading."""
    rows = list(sheet.iter_rows())
    head = next(i for i, row in enumerate(rows) if row[0].value == first)
    names = [cell.value for cell in rows[head] if cell.value is not None]
    body = []
    for row in rows[head + 1 :]:
        if row[0].value is None:
            break
        body.append(dict(zip(names, row, strict=False)))
    return body


def figure(sheet, name: str) -> dict[str, dict]:
    """The rows of one figure by field."""
    return {r["Field"].value: r for r in table(sheet) if r["Figure"].value == name}


def shown(name: str) -> str:
    """How a name of the sample stands in a cell: one line, single spaces."""
    return " ".join(name.split())


def names_of(result) -> dict[str, str]:
    # Names in the sample are different, so that no id stands behind them.
    return {f.id: shown(f.name) for f in result.fields}


def all_cells(book):
    return [cell for sheet in book for row in sheet.iter_rows() for cell in row]


def texts(book) -> list[str]:
    return [c.value for c in all_cells(book) if isinstance(c.value, str)]


def parts(path: Path) -> dict[str, str]:
    with zipfile.ZipFile(path) as file:
        return {n: file.read(n).decode("utf-8") for n in file.namelist()}


# Figures


def test_sheets_stand_in_the_order_of_the_contract(book):
    assert book.sheetnames == ["Summary", *PLAIN, *FIXED]


def periods(result, name: str):
    """Rows of a risk frame of months and of seasons, with the heading of their column."""
    for frame, column in ((result.risk_monthly, "month"), (result.risk_seasonal, "season")):
        for row in frame.itertuples():
            when = getattr(row, column)
            yield row, MONTHS[when - 1] if column == "month" else when


def colour(cell) -> str:
    assert cell.fill.patternType == "solid"
    return "#" + cell.fill.fgColor.rgb[2:].lower()


def legend(sheet) -> dict[str, str]:
    row = next(r for r in sheet.iter_rows() if str(r[0].value).startswith("Bands"))
    labels = [*band_labels([0.01, 0.05, 0.20])]
    return {c.value: colour(c) for c in row if c.value in labels}


@pytest.mark.parametrize("number", [0, 1])
def test_shares_of_an_aircraft_are_those_of_the_frames_in_the_colour_of_their_band(
    book, result, number
):
    sheet, edges = book[PLAIN[number]], result.settings["bands"]
    rows, key, names = figure(sheet, "Shortfall share"), legend(sheet), names_of(result)
    # ColorBrewer 2.0, YlOrBr in four classes.
    assert list(key.values()) == ["#ffffd4", "#fed98e", "#fe9929", "#cc4c02"]
    seen = 0
    for row, when in periods(result, "shortfall"):
        if row.aircraft != f"aircraft-{number}":
            continue
        cell = rows[names[row.field]][when]
        seen += 1
        if math.isnan(row.shortfall):
            assert cell.value == "no data" and cell.fill.patternType not in (None, "solid")
            continue
        assert cell.data_type == "n" and cell.value == pytest.approx(row.shortfall, rel=1e-14)
        assert colour(cell) == key[band_labels(edges)[band_of(row.shortfall, edges)]]
    assert seen == len(result.fields) * (12 + len(SEASONS))


def test_what_stands_behind_a_share_is_that_of_the_frames(book, result):
    names = names_of(result)
    for number, aircraft in enumerate(PLAIN):
        sheet = book[aircraft]
        usable, offered = figure(sheet, "Usable hours"), figure(sheet, "Hours in the window")
        limit, years = figure(sheet, "Limiting check"), figure(sheet, "Years that count")
        coverage = figure(sheet, "Coverage")
        low, high = (figure(sheet, f"90 % interval, {end}") for end in ("low", "high"))
        for row, when in periods(result, "shortfall"):
            if row.aircraft != f"aircraft-{number}":
                continue
            at = names[row.field]
            assert years[at][when].value == row.n_years
            assert ("\u2020" in years[at][when].number_format) == (0 < row.n_years < 10)
            assert offered[at][when].value == math.floor(row.hours_offered)
            assert coverage[at][when].value == pytest.approx(row.coverage, rel=1e-14)
            if math.isnan(row.shortfall):
                for part in (usable, limit, low, high):
                    assert part[at][when].value == "no data"
                continue
            # Rounded down; the product that gives the hours may lie one ulp below a whole.
            assert usable[at][when].value == math.floor(row.usable_hours + 1e-6)
            assert limit[at][when].value == (row.limiting or "none")
            for part, value in ((low, row.ci_low), (high, row.ci_high)):
                none = "too few years"
                expected = none if math.isnan(value) else pytest.approx(value, rel=1e-14)
                assert part[at][when].value == expected


def test_density_altitudes_are_those_of_the_frames_to_the_nearest_100_ft(book, result):
    names, sheet = names_of(result), book["Density altitude"]
    for p, name in (("p90", "P90, ft: 1 hour in 10 is above"), ("p50", "P50, ft: the median")):
        rows = figure(sheet, name)
        for frame, column in (
            (result.distributions_monthly, "month"),
            (result.distributions_seasonal, "season"),
        ):
            for row in frame[frame["variable"] == "density_altitude"].to_dict("records"):
                when = MONTHS[row["month"] - 1] if column == "month" else row["season"]
                value = rows[names[row["field"]]][when].value
                told = value if isinstance(value, str) else altitude_text(value)
                assert told == altitude_text(row[p])
    assert len(figure(sheet, "P10, ft: 1 hour in 10 is below")) == len(result.fields)


def test_humidities_are_those_of_the_frames(book, result):
    names, sheet = names_of(result), book["Humidity"]
    median = figure(sheet, "Relative humidity, P50")
    humid = result.distributions_monthly
    for row in humid[humid["variable"] == "relative_humidity"].itertuples():
        cell = median[names[row.field]][MONTHS[row.month - 1]]
        expected = "no data" if math.isnan(row.p50) else pytest.approx(row.p50 / 100.0, rel=1e-14)
        assert cell.value == expected
    near = result.near_saturation_monthly
    for column, name in (("share_2_5k", "2.5 K"), ("share_1k", "1 K")):
        rows = figure(sheet, f"Within {name} of saturation")
        for row in near.to_dict("records"):
            cell, value = rows[names[row["field"]]][MONTHS[row["month"] - 1]], row[column]
            expected = "no data" if math.isnan(value) else pytest.approx(value, rel=1e-14)
            assert cell.value == expected


def test_margins_are_those_of_the_frames_and_never_better(book, result):
    names, rows = names_of(result), table(book["Margins"], "Field")
    aircraft = dict(zip((a.id for a in result.aircraft), PLAIN, strict=True))
    found = {tuple(r[k].value for k in ("Field", "Aircraft", "Check", "Figure")): r for r in rows}
    assert len(found) == len(rows) == 2 * len(result.margins_monthly) / 12
    for row in result.margins_monthly.itertuples():
        key = (names[row.field], aircraft[row.aircraft], row.check)
        share = found[(*key, "Share failing")][MONTHS[row.month - 1]]
        margin = found[(*key, "Margin, P10")][MONTHS[row.month - 1]]
        if math.isnan(row.shortfall):
            assert share.value == margin.value == "no data"
            continue
        assert share.value == pytest.approx(row.shortfall, rel=1e-14)
        if math.isnan(row.margin_p10):
            assert margin.value == "a limit"
            continue
        assert 0 <= row.margin_p10 - margin.value + 1e-9 < 0.01 + 1e-9
        assert margin.value * 100 == pytest.approx(round(margin.value * 100), abs=1e-9)
        assert bool(margin.font.bold) == (margin.value < 0)


def summary(book) -> dict[str, dict[str, list]]:
    """Cells of the summary by the id of the field and the heading, those of the same in order."""
    rows = list(book["Summary"].iter_rows())
    head = next(i for i, row in enumerate(rows) if row[1].value == "Id")
    told: dict[str, dict[str, list]] = {}
    for row in rows[head + 1 :]:
        for name, cell in zip(rows[head], row, strict=True):
            told.setdefault(row[1].value, {}).setdefault(name.value, []).append(cell)
    return told


def test_summary_names_the_worst_month_of_each_aircraft_and_the_highest_air(book, result):
    names, told = names_of(result), summary(book)
    assert [*told] == [f.id for f in result.fields]
    for field in result.fields:
        row = {name: [cell.value for cell in cells] for name, cells in told[field.id].items()}
        assert row["Field"] == [names[field.id]]
        assert row["Elevation, ft"][0] == pytest.approx(field.elevation_m / 0.3048, abs=0.51)
        assert row["Elevation, m"][0] == pytest.approx(field.elevation_m, abs=0.51)
        air = result.distributions_monthly
        air = air[(air["field"] == field.id) & (air["variable"] == "density_altitude")]
        air = air.dropna(subset="p90").sort_values("p90", kind="stable", ascending=False)
        if air.empty:
            assert field.id == EMPTY_FIELD and row["ft"] + row["Month"] == ["no data"] * 2
        else:
            top = air.iloc[0]
            assert altitude_text(row["ft"][0]) == altitude_text(top["p90"])
            assert row["Month"] == [calendar.month_name[top["month"]] + known(air)]
        for number, aircraft in enumerate(result.aircraft):
            heads = ("Worst month", "Shortfall share", "90 % interval")
            check_worst(result, field, aircraft, [row[head][number] for head in heads])


def known(months) -> str:
    return "" if len(months) == 12 else f" (of {len(months)} months)"


def check_worst(result, field, aircraft, values):
    risk = result.risk_monthly
    risk = risk[(risk["field"] == field.id) & (risk["aircraft"] == aircraft.id)]
    risk = risk.dropna(subset="shortfall").sort_values("shortfall", ascending=False, kind="stable")
    if risk.empty:
        assert values == ["no data"] * 3
        return
    worst = risk.iloc[0]
    interval = interval_text(worst["ci_low"], worst["ci_high"])
    if interval == "none":
        interval = "too few years"
    elif worst["n_years"] < 10:
        interval += " \u2020"
    month = calendar.month_name[worst["month"]] if worst["shortfall"] > 0 else "no month"
    month += known(risk)
    assert values == [month, pytest.approx(worst["shortfall"], rel=1e-14), interval]


def test_summary_tells_slope_air_cautions_and_months_with_data(book, result):
    heads = ("Steep runway", "Air", "Error, ft (1 sd)", "Cautions")
    heads += ("Months with data", "Years, fewest")
    told = {i: tuple(row[h][0].value for h in heads) for i, row in summary(book).items()}
    assert told == {
        "field-0": ("over 2 % \u2021", "own station", "measured", 1, 12, 4),
        "field-1": ("no", "own station 40 %, else 2 stations", 120, 0, 10, 4),
        # The squares of 172.0 ft and 66.4 ft add up to that of 184.4 ft.
        "field-2": ("no runway", "estimated from 3 stations, pressure \xb166 ft", 180, 0, 12, 4),
        "field-3": ("over 2 % \u2021", "estimated from 4 stations", 99, 0, 12, 4),
        "field-4": ("no", "estimated from 1 station", 130, 0, 12, 4),
        EMPTY_FIELD: ("no", "no data", "no data", 1, 0, "no data"),
    }


@pytest.mark.parametrize(
    ("pressure_ft", "air", "error"),
    [
        (0.3, "own station", "measured"),
        (19.9, "own station", "measured"),
        (20.0, "air measured, pressure \xb120 ft", 20),
        (210.4, "air measured, pressure \xb1210 ft", 210),
        (1234.0, "air measured, pressure \xb11,200 ft", 1200),
    ],
)
def test_air_of_an_own_station_is_not_called_measured_where_its_pressure_is_not(
    tmp_path, pressure_ft, air, error
):
    base = sample_result(1, 1)
    book = written(
        replace(base, estimates=base.estimates.assign(pressure_error_ft=pressure_ft)), tmp_path
    )
    row = summary(book)["field-0"]
    assert (row["Air"][0].value, row["Error, ft (1 sd)"][0].value) == (air, error)
    rows = list(book["Method and sources"].iter_rows(values_only=True))
    head = next(i for i, row in enumerate(rows) if "Pressure error, ft" in row)
    [told] = [dict(zip(rows[head], rows[head + 1], strict=True))]
    assert told["Error, ft (1 sd)"] == error and told["Transfer error, ft"] == "measured"


def risk_set(result, **columns):
    """The result with columns of its shares by month replaced."""
    return replace(result, risk_monthly=result.risk_monthly.assign(**columns))


def test_months_that_tie_for_the_worst_are_told_as_such(tmp_path):
    base = sample_result(2, 1)
    month = base.risk_monthly["month"]
    tied = np.where(base.risk_monthly["field"] == "field-0", 1.0, month.isin([6, 7, 9]) * 0.5)
    low = tied - 0.01 * month
    told = summary(written(risk_set(base, shortfall=tied, ci_low=low, ci_high=tied), tmp_path))
    assert told["field-0"]["Worst month"][0].value == "every month"
    # An interval that holds those of all twelve: 1 - 0.12 to 1.
    assert told["field-0"]["90 % interval"][0].value.removesuffix(" \u2020") == "88-100 %"
    assert told["field-1"]["Worst month"][0].value == "June and 2 months more"
    told = summary(written(risk_set(base, shortfall=0.0), tmp_path))
    assert told["field-0"]["Worst month"][0].value == "no month"


@pytest.mark.parametrize(
    ("share", "months", "text"),
    [
        (0.3, [5], "May (of 1 month)"),
        (0.0, [5], "no month (of 1 month)"),
        (1.0, range(1, 12), "January and 10 months more (of 11 months)"),
    ],
)
def test_a_worst_share_of_fewer_than_twelve_months_says_so(tmp_path, share, months, text):
    base = sample_result(1, 1)
    known = base.risk_monthly["month"].isin(list(months))
    row = summary(written(risk_set(base, shortfall=np.where(known, share, math.nan)), tmp_path))[
        "field-0"
    ]
    assert row["Worst month"][0].value == text
    cell = row["Months with data"][0]
    assert cell.value == len(months)
    # Hatched, as cells without data are.
    none = summary(written(risk_set(base, shortfall=math.nan), tmp_path))["field-0"]
    assert cell.fill.patternType == none["Worst month"][0].fill.patternType != "solid"


def test_few_years_mark_a_share_with_and_without_an_interval(tmp_path):
    base = sample_result(2, 1)
    for years, marked in ((1, True), (4, True), (9, True), (10, False)):
        ends = math.nan if years < 5 else 0.0
        result = risk_set(base, n_years=years, ci_low=ends, ci_high=ends, shortfall=0.0)
        book = written(result, tmp_path)
        row = summary(book)["field-1"]
        assert row["Years, fewest"][0].value == years
        shares = figure(book[PLAIN[0]], "Shortfall share")[names_of(base)["field-1"]]
        failing = table(book["Margins"], "Field")[-1]
        cells = [row["Shortfall share"][0], row["Years, fewest"][0], shares["Jul"], failing["Jul"]]
        assert ["\u2020" in c.number_format for c in cells] == [marked] * 4
        interval = row["90 % interval"][0].value
        assert (
            interval == {1: "too few years", 4: "too few years", 9: "0 % \u2020", 10: "0 %"}[years]
        )


def test_figures_of_a_field_with_a_steep_runway_are_marked_as_no_pass(book, result):
    names, told = names_of(result), summary(book)
    # 2 % itself is not steep; field-0 and field-3 of the sample slope by 3.5 %.
    steep = {names[f.id]: f.id in ("field-0", "field-3") for f in result.fields}

    def marked(cell) -> bool:
        return "\u2021" in cell.number_format

    for f in result.fields:
        cells = told[f.id]["Shortfall share"]
        assert [marked(c) for c in cells if c.data_type == "n"] in ([], [steep[names[f.id]]] * 2)
    for aircraft in PLAIN:
        for name in ("Shortfall share", "Usable hours"):
            for field, row in figure(book[aircraft], name).items():
                cells = [row[when] for when in (*MONTHS, *SEASONS) if row[when].data_type == "n"]
                assert {marked(c) for c in cells} <= {steep[field]}
    for row in table(book["Margins"], "Field"):
        cells = [row[when] for when in MONTHS if row[when].data_type == "n"]
        assert {marked(c) for c in cells} <= {steep[row["Field"].value]}
    for name in ("Summary", *PLAIN, "Margins"):
        assert any("no figure is a pass" in str(r[0].value) for r in book[name].iter_rows())


def test_a_season_with_a_month_without_data_is_marked(tmp_path):
    base = sample_result(2, 1)
    # The months of field-1 without data are February and April.
    seasons = {"DJF": ["12-01", "02-29"], "MAM": ["03-01", "05-31"], "JJA": ["06-01", "08-31"]}
    wide = {SEASONS[3]: ["06-15", "06-10"]}  # nearly the whole year, from June to June
    book = written(replace(base, settings={**base.settings, "seasons": seasons | wide}), tmp_path)
    names = names_of(base)
    expected = {"DJF": True, "MAM": True, "JJA": False, SEASONS[3]: True}
    for sheet, name in (
        (PLAIN[0], "Shortfall share"),
        ("Density altitude", "P50, ft: the median"),
        ("Humidity", "Relative humidity, P50"),
    ):
        rows = figure(book[sheet], name)
        for field, gap in (("field-0", False), ("field-1", True)):
            cells = {season: rows[names[field]][season] for season in SEASONS}
            assert {
                s: "\xa7" in c.number_format for s, c in cells.items() if c.value != "no data"
            } == {s: gap and expected[s] for s, c in cells.items() if c.value != "no data"}
            assert len([c for c in cells.values() if c.value != "no data"]) >= 2


def test_the_sheets_say_what_their_figures_are(book):
    def told(name: str) -> str:
        return " ".join(str(c.value) for row in book[name].iter_rows() for c in row)

    # Other checks may fail in the same hours: every check is counted by itself.
    assert "this check fails, whatever the others do" in told("Margins")
    assert " alone" not in told("Margins")
    for name in ("Summary", *PLAIN, "Margins"):
        assert "Colours follow the unrounded share" in told(name)
    method = told("Method and sources")
    assert "Years with any hour that enters" in method and "cells that count" in method
    assert "root of the sum of the squares of the transfer error" in method


def test_coverage_is_never_shown_as_all_where_it_is_not(tmp_path):
    base = sample_result(1, 1)
    book = written(risk_set(base, coverage=0.997), tmp_path)
    row = figure(book[PLAIN[0]], "Coverage")[names_of(base)["field-0"]]
    assert '[>0.99]"> 99 %"' in row["Jul"].number_format


def test_summary_begins_with_title_scope_and_the_first_caution(book, result):
    first = [row[0] for row in book["Summary"].iter_rows(max_row=3, values_only=True)]
    assert first[0] == result.title
    assert "2010-2024" in first[1] and "daylight" in first[1]
    assert first[2] == CAUTIONS[0]


def test_method_sheet_holds_method_settings_sources_stations_and_version(book, result):
    sheet = book["Method and sources"]
    found = {c for row in sheet.iter_rows(values_only=True) for c in row if isinstance(c, str)}
    assert {*METHOD, *result.attributions} <= found
    assert any("version 0.1.0" in text for text in found)
    assert {key.replace("_", " ") for key in result.settings} <= found
    rows = [list(row) for row in sheet.iter_rows(values_only=True)]
    head = next(i for i, row in enumerate(rows) if row[1] == "Station")
    expected = result.station_use.assign(field=result.station_use["field"].map(names_of(result)))
    assert [row[:11] for row in rows[head + 1 :]] == [
        [*row[:4], pytest.approx(row[4]), *row[5:]] for row in expected.to_numpy().tolist()
    ]


def test_every_caution_and_every_finding_is_there(book, result):
    sheet = book["Cautions"]
    rows = [list(row) for row in sheet.iter_rows(values_only=True)]
    assert [row[1] for row in rows if str(row[0]).rstrip(".").isdigit()] == list(CAUTIONS)
    head = next(i for i, row in enumerate(rows) if row[0] == "Severity")
    told = [[row[0], row[1], row[2], row[4], row[5]] for row in rows[head + 1 :]]
    assert told == [[f.severity, f.subject, f.id, f.check, f.message] for f in result.findings]


def test_no_cell_of_a_table_is_blank(book):
    for name in (*PLAIN, "Density altitude", "Humidity"):
        for row in table(book[name]):
            assert [key for key, cell in row.items() if cell.value in (None, "")] == []
    for row in table(book["Margins"], "Field"):
        assert [key for key, cell in row.items() if cell.value in (None, "")] == []


# Texts


@cache
def small_sample():
    return sample_result(2, 2)


def hostile_result(text: str):
    """The sample with one text in every column that a person can fill."""
    base = small_sample()

    def spoilt(frame, *columns):
        return frame.assign(**{name: text for name in columns})

    return replace(
        base,
        title=text,
        fields=tuple(replace(f, name=text) for f in base.fields),
        aircraft=tuple(replace(a, name=text, source=text) for a in base.aircraft),
        settings={**base.settings, text: text, "window": "all", "seasons": {text: [text]}},
        risk_monthly=spoilt(base.risk_monthly, "limiting"),
        risk_seasonal=spoilt(base.risk_seasonal, "season", "limiting"),
        distributions_seasonal=spoilt(base.distributions_seasonal, "season"),
        near_saturation_seasonal=spoilt(base.near_saturation_seasonal, "season"),
        margins_monthly=base.margins_monthly.assign(check=text),
        station_use=spoilt(base.station_use, "station", "name", "archive", "pressure_kind"),
        pressure_sources=spoilt(base.pressure_sources, "source"),
        attributions=(text,),
        findings=(Finding("caution", "field", text, text, text),),
        provenance={"version": text},
    )


@pytest.mark.parametrize("text", [*LEADS, *MARKUP], ids=ascii)
def test_a_hostile_text_stays_a_text_wherever_it_stands(tmp_path, text):
    # Newlines of any kind become line feeds, forbidden characters the replacement character.
    forbidden = "[\x00-\x08\x0b\x0c\x0e-\x1f\ufffe\uffff]"
    expected = re.sub(forbidden, "\ufffd", text.replace("\r", "\n"))
    book = written(hostile_result(text), tmp_path)
    # openpyxl leaves the escapes of the file format as they are: _x005F_ is an underscore.
    found = [
        (cell, cell.value.replace("_x005F_", "_"))
        for cell in all_cells(book)
        if isinstance(cell.value, str)
    ]
    assert {cell.data_type for cell, _ in found} == {"s"}
    # Title, sources, settings, check, station, archive, kind, finding ...
    assert sum(value == expected for _, value in found) > 20
    assert [cell.hyperlink for cell, _ in found if cell.hyperlink] == []
    for cell, value in found:
        if value[:1] in ("=", "+", "-", "@", "\t", "\n"):
            assert cell.quotePrefix, value
    assert not re.search(r"<f[ >/]|<hyperlink", "".join(parts(tmp_path / "tables.xlsx").values()))


def test_a_text_too_long_for_a_cell_is_cut_with_an_ellipsis(tmp_path):
    # A character beyond the basic plane counts twice.
    for text in ("x" * 40000, "\U0001f6e9" * 20000):
        book = written(hostile_result(text), tmp_path)
        long = [t for t in texts(book) if t.endswith("\u2026")]
        assert max(len(t.encode("utf-16-le")) // 2 for t in long) in (
            MOST_CHARACTERS,
            MOST_CHARACTERS - 1,
        )


@given(st.text(st.characters(exclude_categories=[])))
def test_clean_gives_what_xml_allows_and_changes_nothing_else(text):
    cleaned = clean(text)
    assert len(cleaned) <= len(text)
    for character in cleaned:
        # XML 1.0, fifth edition, section 2.2: Char.
        assert re.match("[\t\n\r\x20-\ud7ff\ue000-\ufffd\U00010000-\U0010ffff]", character), ascii(
            character
        )
        assert unicodedata.category(character) != "Cf"
    if unicodedata.is_normalized("NFC", text) and text.isprintable():
        assert cleaned == text


def test_no_invisible_character_is_written_anywhere(tmp_path):
    # Unicode Standard, general category Cf: marks of direction, characters without width.
    text = "a\u202eb\u200bc\u2066d\ufeffe\u2060"
    book = written(hostile_result(text), tmp_path)
    assert sum(value == "abcde" for value in texts(book)) > 20
    for name, content in parts(tmp_path / "tables.xlsx").items():
        assert {ascii(c) for c in content if unicodedata.category(c) == "Cf"} == set(), name


def test_nothing_in_the_file_runs_or_loads(path, result):
    content = parts(path)
    assert not [n for n in content if re.search("vba|external|macro|embed|drawing|\\.bin", n)]
    assert {n for n in content if "sheet" in n and n.startswith("xl/worksheets")} == {
        f"xl/worksheets/sheet{n}.xml" for n in range(1, len(result.aircraft) + len(FIXED) + 2)
    }
    for name, text in content.items():
        assert not re.search(r"<f[ >/]|<formula|<hyperlink|TargetMode|<ddeLink", text), name


def test_a_footer_holds_the_title_with_its_ampersands_doubled(tmp_path):
    result = replace(sample_result(1, 1), title="Hills & dales &D " + "y" * 400)
    write_workbook(result, tmp_path / "tables.xlsx")
    footers = [
        re.search("<oddFooter>(.*?)</oddFooter>", text)[1].replace("&amp;", "&")
        for name, text in parts(tmp_path / "tables.xlsx").items()
        if name.startswith("xl/worksheets/")
    ]
    assert len(footers) == len(FIXED) + 2  # the summary and one aircraft
    for footer in footers:
        assert footer.startswith("&L&8 Hills && dales &&D yyy") and "&P" in footer
        assert len(footer) <= 255  # what the format's readers take


def test_digits_that_begin_a_title_do_not_become_the_size_of_the_footer(tmp_path):
    write_workbook(replace(sample_result(1, 1), title="2024 summer"), tmp_path / "tables.xlsx")
    for name, text in parts(tmp_path / "tables.xlsx").items():
        if name.startswith("xl/worksheets/"):
            footer = re.search("<oddFooter>(.*?)</oddFooter>", text)[1].replace("&amp;", "&")
            # Every number behind an ampersand is a size: ECMA-376 part 1, 18.3.1.46.
            assert re.findall(r"&(\d+)", footer) == ["8"] * 3
            assert "&8 2024 summer&C" in footer


def test_minus_signs_of_number_formats_are_quoted(path):
    # A literal that is none of the few free ones stands in quotes: ECMA-376 part 1, 18.8.31.
    formats = re.findall('formatCode="(.*?)"', parts(path)["xl/styles.xml"])
    for code in (html.unescape(f) for f in formats):
        assert code.isascii() or re.sub('"[^"]*"', "", code).isascii(), code
    assert any('"\u2212"0 %' in html.unescape(f) for f in formats)


def test_rows_are_as_high_as_their_wrapped_texts(tmp_path):
    base = sample_result(1, 1)
    message = "Every one of these many words tells of a thing. " * 12
    source = "climatological QNH with the anomalies of neighbours "
    result = replace(
        base,
        findings=(Finding("caution", "field", "field-0", "a-check-of-a-long-name", message),),
        pressure_sources=base.pressure_sources.assign(source=source * 3),
        settings={**base.settings, "bands": [0.01, 0.05, 0.20]},
    )
    book = written(result, tmp_path)

    def height(sheet: str, begins: str) -> tuple[float, float]:
        """Height of the row of a text, and what its letters need in its column at 13 pt a line."""
        cell = next(
            c for row in book[sheet].iter_rows() for c in row if str(c.value).startswith(begins)
        )
        width = book[sheet].column_dimensions[cell.column_letter].width
        return book[sheet].row_dimensions[cell.row].height or 15.0, 13.0 * len(cell.value) / (
            1.2 * width
        )

    for sheet, begins in (
        ("Cautions", message[:20]),
        ("Method and sources", source[:20]),
        ("Summary", "Bands of the shortfall share"),
    ):
        high, needed = height(sheet, begins)
        assert high >= needed > 15.0, (sheet, high, needed)


# Names of sheets

LONG = "A" * 40
NAMES = [
    (["Trainer", "Trainer", "TRAINER"], ["Trainer", "Trainer (2)", "TRAINER (3)"]),
    (["a[b]:c*d?e/f\\g"], ["a b c d e f g"]),
    (["'quoted'", "it's"], ["quoted", "it's"]),
    (["History", "history", "Summary", "MARGINS"], None),
    (["[]:*?/\\", "''", "", "=+-@", "\x00\u200b"], [f"Aircraft {n}" for n in range(1, 6)]),
    (["Tou\u200brer", "\u202eretsaM"], ["Tourer", "retsaM"]),
    ([LONG, LONG], ["A" * 31, "A" * 27 + " (2)"]),
    (["\U0001f6e9" * 20], ["\U0001f6e9" * 15]),
    (["=1+1", "-x", "a\nb\tc"], ["1+1", "x", "a b c"]),
    (["B" * 30 + "'" + "C"], ["B" * 30]),
]


@pytest.mark.parametrize(("names", "expected"), NAMES)
def test_sheet_names_are_valid_and_unique(tmp_path, names, expected):
    made = sheet_names(names)
    if expected is not None:
        assert made == expected
    base = sample_result(1, 1)
    aircraft = tuple(
        replace(base.aircraft[0], id=f"a{i}", name=name) for i, name in enumerate(names)
    )
    book = written(replace(base, aircraft=aircraft), tmp_path)
    assert book.sheetnames == ["Summary", *made, *FIXED]


@given(st.lists(st.text(max_size=50), max_size=8))
def test_any_aircraft_names_give_valid_unique_sheet_names(names):
    # The rules of the common spreadsheet program for the name of a sheet, from memory.
    made = sheet_names(names)
    assert len(made) == len(names)
    assert (
        len({n.casefold() for n in [*made, "Summary", *FIXED, "History"]})
        == len(made) + len(FIXED) + 2
    )
    for name in made:
        assert 1 <= len(name.encode("utf-16-le")) // 2 <= 31
        assert not re.search(r"[\[\]:*?/\\\x00-\x1f]", name)
        assert name[0] not in "' =+-@" and name[-1] not in "' "


# Shapes, bands and bytes


@pytest.mark.parametrize("counts", [(1, 1), (1, 0), (0, 0), (0, 1), (3, 1)])
def test_a_study_of_any_size_is_written(tmp_path, counts):
    base = sample_result(max(1, counts[0]), max(1, counts[1]))
    fields, aircraft = base.fields[: counts[0]], base.aircraft[: counts[1]]
    keys = {
        "field": [f.id for f in fields],
        "aircraft": ["", *(a.id for a in aircraft)],
        "first": [f.id for f in fields],
        "second": [f.id for f in fields],
    }
    frames = {name: frame for name, frame in vars(base).items() if hasattr(frame, "columns")}
    for name, frame in frames.items():
        for key in set(keys) & set(frame):
            frame = frame[frame[key].isin(keys[key])]
        frames[name] = frame
    book = written(replace(base, fields=fields, aircraft=aircraft, **frames), tmp_path)
    # Without an aircraft there is no carburettor either.
    assert len(book.sheetnames) == 1 + len(FIXED) - (not aircraft) + counts[1]
    assert book["Summary"].max_row == 7 + counts[0]


def test_empty_frames_give_no_data_everywhere(tmp_path):
    base = sample_result(2, 1)
    empty = {n: f.iloc[:0] for n, f in vars(base).items() if hasattr(f, "columns")}
    book = written(replace(base, findings=(), attributions=(), **empty), tmp_path)
    for row in table(book[PLAIN[0]]):
        assert {row[month].value for month in MONTHS} == {"no data"}
    for row in summary(book).values():
        heads = ("ft", "Worst month", "Shortfall share", "90 % interval", "Air", "Years, fewest")
        assert {row[head][0].value for head in heads} == {"no data"}
    assert len(table(book["Margins"], "Field")) == 0


def test_fields_and_aircraft_of_the_same_name_are_told_apart_by_their_id(tmp_path):
    base = sample_result(2, 2)
    fields = tuple(replace(f, name="Same strip") for f in base.fields)
    aircraft = tuple(replace(a, name="Same type") for a in base.aircraft)
    book = written(replace(base, fields=fields, aircraft=aircraft), tmp_path)
    assert set(figure(book["Same type"], "Shortfall share")) == {
        "Same strip (field-0)",
        "Same strip (field-1)",
    }
    assert {row["Aircraft"].value for row in table(book["Margins"], "Field")} == {
        "Same type (aircraft-0)",
        "Same type (aircraft-1)",
    }


@pytest.mark.parametrize(
    "edges", [[0.1], [0.01, 0.5], list(np.linspace(0.05, 0.4, 8)), list(np.linspace(0.01, 0.9, 12))]
)
def test_any_number_of_bands_has_a_colour_each(tmp_path, edges):
    base = sample_result(5, 1)
    book = written(replace(base, settings={**base.settings, "bands": edges}), tmp_path)
    row = next(r for r in book["Summary"].iter_rows() if str(r[0].value).startswith("Bands"))
    keys = [cell for cell in row[1:] if cell.value and cell.fill.patternType == "solid"]
    # The scheme has nine classes at most: ColorBrewer 2.0, YlOrBr.
    assert [cell.value for cell in keys] == band_labels(edges[:8])
    assert len({colour(cell) for cell in keys}) == min(len(edges), 8) + 1


def test_panes_filters_and_print_setup(book):
    for sheet in book:
        assert sheet.page_setup.orientation == "landscape"
        assert int(sheet.page_setup.paperSize) == 9  # A4: ECMA-376 part 1, ST_PaperSize
        assert sheet.page_setup.fitToHeight == 0 and sheet.sheet_properties.pageSetUpPr.fitToPage
        assert sheet.freeze_panes is not None
    for name in ("Summary", *PLAIN, "Density altitude", "Humidity", "Margins"):
        sheet = book[name]
        head = int(re.match(r"[A-Z]+(\d+)", sheet.freeze_panes)[1]) - 1
        assert sheet.auto_filter.ref == f"A{head}:{sheet.dimensions.split(':')[1]}"
        assert sheet.print_title_rows == f"${head}:${head}"


def test_equal_results_give_equal_bytes_in_another_process(path, tmp_path):
    code = (
        "import sys; from pathlib import Path; from sample_result import sample_result; "
        "from climarisk.outputs.workbook.book import write_workbook; "
        "write_workbook(sample_result(), Path(sys.argv[1]))"
    )
    other = tmp_path / "other.xlsx"
    here = Path(__file__).parent
    environment = {
        **os.environ,
        "PYTHONHASHSEED": "77",
        "TZ": "Asia/Kathmandu",
        "PYTHONPATH": os.pathsep.join([str(here), str(here.parents[1])]),
    }
    subprocess.run([sys.executable, "-c", code, str(other)], check=True, env=environment)
    assert other.read_bytes() == path.read_bytes()
    with zipfile.ZipFile(path) as file:
        assert {info.date_time for info in file.infolist()} == {(1980, 1, 1, 0, 0, 0)}
        dates = re.findall(r">(\d{4}[^<]*Z)<", file.read("docProps/core.xml").decode())
    assert dates == ["2000-01-01T00:00:00Z"] * 2


def test_a_workbook_that_cannot_be_written_is_an_os_error(tmp_path):
    with pytest.raises(FileNotFoundError):
        write_workbook(sample_result(1, 1), tmp_path / "absent" / "tables.xlsx")


def test_more_rows_than_a_sheet_holds_are_refused_not_dropped(tmp_path, monkeypatch):
    monkeypatch.setattr(cells, "_MOST_ROWS", 20)
    with pytest.raises(OutputError, match=r"more than the 20 rows that a sheet .* fewer fields"):
        write_workbook(sample_result(6, 1), tmp_path / "tables.xlsx")
    assert not (tmp_path / "tables.xlsx").exists()


# Another program


def test_another_program_shows_each_share_as_the_other_outputs_do(path, result, tmp_path):
    office = shutil.which("soffice")
    if office is None:
        pytest.skip("LibreOffice is not installed")
    # Separator, quote, UTF-8, from the first row, cells as shown, every sheet: LibreOffice help,
    # "Filter Options for CSV".
    filters = "csv:Text - txt - csv (StarCalc):44,34,76,1,,0,false,false,true,false,false,-1"
    subprocess.run(
        [
            *(office, "--headless", f"-env:UserInstallation={(tmp_path / 'profile').as_uri()}"),
            *("--convert-to", filters, "--outdir", str(tmp_path), str(path)),
        ],
        check=True,
        capture_output=True,
        timeout=120,
    )
    [sheet] = tmp_path.glob("tables-Two-seat*.csv")
    lines = list(csv.reader(sheet.read_text(encoding="utf-8").splitlines()))
    head = next(line for line in lines if line[0] == "Figure")
    names = names_of(result)
    shares = {line[1]: line for line in lines if line[0] == "Shortfall share"}
    told = [
        (shares[names[row.field]][head.index(when)], share_text(row.shortfall))
        for row, when in periods(result, "shortfall")
        if row.aircraft == "aircraft-0"
    ]
    # Marks of few years and of a steep runway stand behind some.
    bare = [re.sub(" [\u2020\u2021\xa7]+$", "", one) for one, _ in told]
    assert bare == [other for _, other in told]
    assert {"< 1 %", "0 %", "no data"} < set(bare)
    assert {"0 % \u2020\u2021", "0 % \u2020", "0 % \u2021"} < {one for one, _ in told}
