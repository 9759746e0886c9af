"""The workbook: every figure read back with another library, and nothing in it that runs."""

from __future__ import annotations

import csv
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

FIXED = ["Density altitude", "Humidity", "Margins", "Method and sources", "Cautions"]
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
        low, high = (figure(sheet, f"90 % interval, {end}") for end in ("low", "high"))
        for row, when in periods(result, "shortfall"):
            if row.aircraft != f"aircraft-{number}":
                continue
            at = names[row.field]
            assert years[at][when].value == row.n_years
            assert ("\u2020" in years[at][when].number_format) == (0 < row.n_years < 10)
            assert offered[at][when].value == math.floor(row.hours_offered)
            if math.isnan(row.shortfall):
                for part in (usable, limit, low, high):
                    assert part[at][when].value == "no data"
                continue
            # Rounded down; the product that gives the hours may lie one ulp below a whole.
            assert usable[at][when].value == math.floor(row.usable_hours + 1e-6)
            assert limit[at][when].value == (row.limiting or "none")
            for part, value in ((low, row.ci_low), (high, row.ci_high)):
                expected = "none" if math.isnan(value) else pytest.approx(value, rel=1e-14)
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


def test_summary_names_the_worst_month_of_each_aircraft_and_the_highest_air(book, result):
    sheet, names = book["Summary"], names_of(result)
    rows = list(sheet.iter_rows())
    head = next(i for i, row in enumerate(rows) if row[1].value == "Id")
    for field, row in zip(result.fields, rows[head + 1 :], strict=True):
        values = [cell.value for cell in row]
        assert values[:2] == [names[field.id], field.id]
        assert values[2] == pytest.approx(field.elevation_m / 0.3048, abs=0.51)
        assert values[3] == pytest.approx(field.elevation_m, abs=0.51)
        air = result.distributions_monthly
        air = air[(air["field"] == field.id) & (air["variable"] == "density_altitude")]
        air = air.dropna(subset="p90").sort_values("p90", kind="stable", ascending=False)
        if air.empty:
            assert field.id == EMPTY_FIELD and values[4:6] == ["no data"] * 2
        else:
            top = air.iloc[0]
            assert altitude_text(values[4]) == altitude_text(top["p90"])
            assert values[5] == MONTHS[top["month"] - 1]
        for number, aircraft in enumerate(result.aircraft):
            check_worst(result, field, aircraft, values[6 + 3 * number : 9 + 3 * number])


def check_worst(result, field, aircraft, values):
    risk = result.risk_monthly
    risk = risk[(risk["field"] == field.id) & (risk["aircraft"] == aircraft.id)]
    risk = risk.dropna(subset="shortfall").sort_values("shortfall", ascending=False, kind="stable")
    if risk.empty:
        assert values == ["no data"] * 3
        return
    worst = risk.iloc[0]
    interval = interval_text(worst["ci_low"], worst["ci_high"])
    if interval != "none" and worst["n_years"] < 10:
        interval += " \u2020"
    month = MONTHS[worst["month"] - 1] if worst["shortfall"] > 0 else "none"
    assert values == [month, pytest.approx(worst["shortfall"], rel=1e-14), interval]


def test_summary_tells_slope_air_cautions_and_months_with_data(book, result):
    rows = list(book["Summary"].iter_rows(values_only=True))
    told = {row[1]: row[-5:] for row in rows[-len(result.fields) :]}
    assert told == {
        "field-0": ("over 2 %", "own station", "measured", 1, 12),
        "field-1": ("no", "own station 40 %, else 2 stations", 120, 0, 10),
        "field-2": ("no runway", "estimated from 3 stations", 170, 0, 12),
        "field-3": ("over 2 %", "estimated from 4 stations", 99, 0, 12),
        "field-4": ("no", "estimated from 1 station", 130, 0, 12),
        EMPTY_FIELD: ("no", "no data", "no data", 1, 0),
    }


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
    if unicodedata.is_normalized("NFC", text) and text.isprintable():
        assert cleaned == text


def test_nothing_in_the_file_runs_or_loads(path, result):
    content = parts(path)
    assert not [n for n in content if re.search("vba|external|macro|embed|drawing|\\.bin", n)]
    assert {n for n in content if "sheet" in n and n.startswith("xl/worksheets")} == {
        f"xl/worksheets/sheet{n}.xml" for n in range(1, len(result.aircraft) + 7)
    }
    for name, text in content.items():
        assert not re.search(r"<f[ >/]|<formula|<hyperlink|TargetMode|<ddeLink", text), name


def test_a_footer_holds_the_title_with_its_ampersands_doubled(tmp_path):
    result = replace(sample_result(1, 1), title="Hills & dales &D " + "x" * 400)
    write_workbook(result, tmp_path / "tables.xlsx")
    footers = [
        re.search("<oddFooter>(.*?)</oddFooter>", text)[1].replace("&amp;", "&")
        for name, text in parts(tmp_path / "tables.xlsx").items()
        if name.startswith("xl/worksheets/")
    ]
    assert len(footers) == 7
    for footer in footers:
        assert footer.startswith("&L&8Hills && dales &&D xxx") and "&P" in footer
        assert len(footer) <= 255  # what the format's readers take


# Names of sheets

LONG = "A" * 40
NAMES = [
    (["Trainer", "Trainer", "TRAINER"], ["Trainer", "Trainer (2)", "TRAINER (3)"]),
    (["a[b]:c*d?e/f\\g"], ["a b c d e f g"]),
    (["'quoted'", "it's"], ["quoted", "it's"]),
    (["History", "history", "Summary", "MARGINS"], None),
    (["[]:*?/\\", "''", "", "=+-@", "\x00\u200b"], [f"Aircraft {n}" for n in range(1, 6)]),
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
    assert len({n.casefold() for n in [*made, "Summary", *FIXED, "History"]}) == len(made) + 7
    for name in made:
        assert 1 <= len(name.encode("utf-16-le")) // 2 <= 31
        assert not re.search(r"[\[\]:*?/\\\x00-\x1f]", name)
        assert name[0] not in "' =+-@" and name[-1] not in "' "


# Shapes, bands and bytes


@pytest.mark.parametrize("counts", [(1, 1), (1, 0), (0, 0), (0, 1), (3, 1)])
def test_a_study_of_any_size_is_written(tmp_path, counts):
    base = sample_result(max(1, counts[0]), max(1, counts[1]))
    fields, aircraft = base.fields[: counts[0]], base.aircraft[: counts[1]]
    frames = {
        name: frame[frame["field"].isin([f.id for f in fields])]
        for name, frame in vars(base).items()
        if hasattr(frame, "columns")
    }
    for name in [n for n, frame in frames.items() if "aircraft" in frame]:
        kept = [a.id for a in aircraft]
        frames[name] = frames[name][frames[name]["aircraft"].isin(kept)]
    book = written(replace(base, fields=fields, aircraft=aircraft, **frames), tmp_path)
    assert len(book.sheetnames) == 6 + counts[1]
    assert book["Summary"].max_row == 6 + counts[0]


def test_empty_frames_give_no_data_everywhere(tmp_path):
    base = sample_result(2, 1)
    empty = {n: f.iloc[:0] for n, f in vars(base).items() if hasattr(f, "columns")}
    book = written(replace(base, findings=(), attributions=(), **empty), tmp_path)
    for row in table(book[PLAIN[0]]):
        assert {row[month].value for month in MONTHS} == {"no data"}
    assert [row[4] for row in book["Summary"].iter_rows(min_row=7, values_only=True)] == [
        "no data",
        "no data",
    ]
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
    assert [one for one, _ in told] == [other for _, other in told]
    assert {"< 1 %", "0 %", "no data"} < {one for one, _ in told}
