"""The report as a text: the numbers of the frames in their cells, texts only as text."""

from __future__ import annotations

import math
import re
from dataclasses import replace
from fractions import Fraction
from html.parser import HTMLParser

import numpy as np
import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st
from sample_result import EMPTY_FIELD, HOSTILE, LONG_NAME, SEASONS, sample_result

from climarisk.outputs.colours import YLORBR, ink_on
from climarisk.outputs.report.charts import feet_scale, share_top
from climarisk.outputs.report.data import ranked
from climarisk.outputs.report.document import render_report
from climarisk.outputs.report.sketch import fields_sketch
from climarisk.outputs.report.tables import sure_text
from climarisk.outputs.report.words import css_text, distance_text, el, error_text
from climarisk.outputs.texts import CAUTIONS, METHOD, field_labels

VOID = {"meta", "link", "col", "path", "rect"}
#: Elements that the report is made of; anything else came from a text.
KNOWN = {
    *("html", "head", "meta", "title", "link", "style", "body", "main"),
    *("section", "nav", "p", "h1", "h2", "h3", "b", "bdi"),
    *("small", "span", "div", "ul", "ol", "li", "dl", "dt"),
    *("dd", "figure", "figcaption", "a", "table", "caption", "colgroup", "col"),
    *("thead", "tbody", "tr", "th", "td", "svg", "path", "rect"),
    *("text",),
}


class Element:
    """An element with its attributes, children and text."""

    def __init__(self, tag: str, attributes: dict[str, str | None]) -> None:
        self.tag, self.attributes = tag, attributes
        self.children: list[Element | str] = []

    @property
    def classes(self) -> list[str]:
        return (self.attributes.get("class") or "").split()

    @property
    def text(self) -> str:
        return "".join(c if isinstance(c, str) else c.text for c in self.children)

    def all(self, tag: str, kind: str | None = None) -> list[Element]:
        found = []
        for child in self.children:
            if isinstance(child, Element):
                if child.tag == tag and (kind is None or kind in child.classes):
                    found.append(child)
                found += child.all(tag, kind)
        return found


class Page(HTMLParser):
    """The page as a tree; every end tag must fit its start tag."""

    def __init__(self, text: str) -> None:
        super().__init__(convert_charrefs=True)
        self.root = Element("", {})
        self.elements: list[Element] = []
        self._open = [self.root]
        self.feed(text)
        self.close()
        assert [e.tag for e in self._open] == [""], "an element is not closed"

    def handle_starttag(self, tag, attrs):
        assert len({name for name, _ in attrs}) == len(attrs), (tag, attrs)
        element = Element(tag, dict(attrs))
        self._open[-1].children.append(element)
        self.elements.append(element)
        if tag not in VOID:
            self._open.append(element)

    def handle_startendtag(self, tag, attrs):
        self.handle_starttag(tag, attrs)
        if tag not in VOID:
            self._open.pop()

    def handle_endtag(self, tag):
        assert self._open.pop().tag == tag

    def handle_data(self, data):
        self._open[-1].children.append(data)


@pytest.fixture(scope="module")
def result():
    return sample_result()


@pytest.fixture(scope="module")
def text(result) -> str:
    return render_report(result)


@pytest.fixture(scope="module")
def page(text) -> Page:
    return Page(text)


def section(page: Page, name: str) -> Element:
    return next(e for e in page.root.all("section") if e.attributes["id"] == name)


def number(share: float) -> str:
    """METHODS 12: whole per cent, "< 1" for anything between zero and one."""
    if math.isnan(share):
        return "no data"
    if 0.0 < share < 0.01:
        return "< 1"
    return str(math.floor(Fraction(share) * 100 + Fraction(1, 2)))


def feet(value: float) -> str:
    """METHODS 12: density altitude to the nearest 100 ft."""
    return f"{math.floor(Fraction(value) / 100 + Fraction(1, 2)) * 100:,}".replace("-", "\u2212")


def rows_by_number(table: Element) -> dict[int, list[Element]]:
    """The cells of each row by the number that its field carries in the report."""
    rows = {}
    for row in table.all("tbody")[0].all("tr"):
        rows[int(row.all("span", "no")[0].text)] = row.all("td")
    return rows


def numbers_of_fields(page: Page, result) -> dict[str, int]:
    """The number of each field, by the order of the first table and the name in it."""
    table = section(page, "overview").all("table")[0]
    found = {}
    for row in table.all("tbody")[0].all("tr"):
        name = row.all("bdi")[0].text
        place = int(row.all("span", "no")[0].text)
        labels = zip(result.fields, field_labels(result), strict=True)
        found |= {f.id: place for f, label in labels if label == name}
    return found


def main_text(cell: Element) -> str:
    """The text of a cell without its small print."""
    return "".join(c for c in cell.children if isinstance(c, str)).strip()


# Numbers


def test_every_month_and_season_share_stands_in_its_cell_in_the_colour_of_its_band(page, result):
    places = numbers_of_fields(page, result)
    assert sorted(places.values()) == list(range(1, len(result.fields) + 1))
    edges = result.settings["bands"]
    for a, profile in enumerate(result.aircraft):
        table = section(page, f"aircraft-{a + 1}").all("table")[0]
        rows = rows_by_number(table)
        risk = result.risk_monthly[result.risk_monthly["aircraft"] == profile.id]
        seasons = result.risk_seasonal[result.risk_seasonal["aircraft"] == profile.id]
        for field in result.fields:
            months = risk[risk["field"] == field.id].sort_values("month")
            season = seasons[seasons["field"] == field.id].set_index("season").loc[list(SEASONS)]
            shares = [*months["shortfall"], *season["shortfall"]]
            cells = rows[places[field.id]][: 12 + len(SEASONS)]
            assert [main_text(c) for c in cells] == [number(s) for s in shares]
            for cell, share in zip(cells, shares, strict=True):
                band = "none" if math.isnan(share) else f"b{sum(share >= e for e in edges)}"
                assert band in cell.classes
            hours = [c.all("small")[0].text for c in cells[:12] if c.all("small")]
            known = months["usable_hours"].dropna()
            assert hours == [f"{math.floor(h + 1e-9):,}\u202fh" for h in known]


def test_intervals_of_seasons_and_worst_month_are_those_of_the_frames(page, result):
    places = numbers_of_fields(page, result)
    profile = result.aircraft[0]
    rows = rows_by_number(section(page, "aircraft-1").all("table")[0])
    for field in result.fields:
        if field.id == EMPTY_FIELD:
            continue
        own = result.risk_monthly[
            (result.risk_monthly["field"] == field.id)
            & (result.risk_monthly["aircraft"] == profile.id)
        ]
        worst = own.loc[own["shortfall"].idxmax()]
        cell = rows[places[field.id]][-1]
        month = pd.Timestamp(2000, int(worst["month"]), 1).strftime("%b")
        assert main_text(cell) == f"{month} {number(worst['shortfall'])} %"
        interval = cell.all("small")[0].text
        if worst["n_years"] < 5:
            assert interval == "too few years"
        else:
            low, high = (number(worst[c]).replace("< ", "<") for c in ("ci_low", "ci_high"))
            assert interval == f"{low}-{high} %" + ("*" if worst["n_years"] < 10 else "")
        assert worst["limiting"] in cell.all("small")[-1].text
        # Told below 80 %; 0.8 itself is not below.
        low = [s.text for s in cell.all("small") if s.text.startswith("coverage")]
        share = number(worst["coverage"])
        assert low == ([f"coverage\xa0{share}\xa0%"] if worst["coverage"] < 0.8 else [])
        season = result.risk_seasonal[
            (result.risk_seasonal["field"] == field.id)
            & (result.risk_seasonal["aircraft"] == profile.id)
        ]
        for shown, (_, row) in zip(rows[places[field.id]][12:16], season.iterrows(), strict=True):
            low, high = (number(row[c]).replace("< ", "<") for c in ("ci_low", "ci_high"))
            assert shown.all("small")[0].text == f"{low}-{high}"


def test_overview_tells_the_year_of_every_field_and_aircraft(page, result):
    table = section(page, "overview").all("table")[0]
    places = numbers_of_fields(page, result)
    rows = rows_by_number(table)
    risk = result.risk_monthly.dropna(subset="shortfall")
    for field in result.fields:
        years = risk[risk["field"] == field.id]["n_years"]
        cover = risk[risk["field"] == field.id]["coverage"]
        small = [s.text.replace("\xa0", " ") for s in rows[places[field.id]][-1].all("small")]
        if len(years):
            low, high = number(cover.min()), number(cover.max())
            assert small == [f"{years.min()}-{years.max()} years, coverage {low}-{high} %"]
        else:
            assert small == []
        for a, profile in enumerate(result.aircraft):
            cell = rows[places[field.id]][a]
            own = result.risk_monthly[
                (result.risk_monthly["field"] == field.id)
                & (result.risk_monthly["aircraft"] == profile.id)
            ].sort_values("month")
            if own["shortfall"].isna().all():
                assert cell.text == "no data"
                continue
            months = [pd.Timestamp(2000, m, 1).strftime("%b") for m in own["month"]]
            told = [
                f"{m} {number(s)}" + ("" if math.isnan(s) else " %")
                for m, s in zip(months, own["shortfall"], strict=True)
            ]
            assert cell.all("title")[0].text == ", ".join(told)
            assert f"{number(own['shortfall'].max())} %" in cell.all("span", "worst")[0].text


def test_air_tables_hold_percentiles_and_near_saturation(page, result):
    places = numbers_of_fields(page, result)
    altitude, humidity, near = section(page, "air").all("table")[:3]
    monthly = result.distributions_monthly
    for field in result.fields:
        own = monthly[monthly["field"] == field.id].sort_values("month")
        air = own[own["variable"] == "density_altitude"]
        damp = own[own["variable"] == "relative_humidity"]
        share = result.near_saturation_monthly
        share = share[share["field"] == field.id].sort_values("month")
        for table, main, small in (
            (
                altitude,
                air["p90"].map(feet, na_action="ignore"),
                air["p50"].map(feet, na_action="ignore"),
            ),
            (humidity, (damp["p50"] / 100).map(number), None),
            (near, share["share_2_5k"].map(number), share["share_1k"].map(number)),
        ):
            cells = rows_by_number(table)[places[field.id]][:12]
            assert [main_text(c) for c in cells] == ["no data" if m != m else m for m in main]
            if small is not None:
                below = [c.all("small")[0].text for c in cells if c.all("small")]
                assert below == [s for s in small if s == s and s != "no data"]


def test_fields_are_ranked_by_their_worst_month_those_without_data_last(page, result):
    worst = result.risk_monthly.groupby("field")["shortfall"].max().sort_values(ascending=False)
    places = numbers_of_fields(page, result)
    assert sorted(places, key=places.get) == list(worst.index)
    values = np.array([[0.1, np.nan], [np.nan, np.nan], [0.3, 0.0], [0.3, 0.2]])
    assert ranked(values).tolist() == [3, 2, 0, 1]


def test_method_cautions_findings_stations_and_attributions_are_whole(page, result):
    sources = section(page, "sources")
    for line in (*CAUTIONS, *METHOD, *result.attributions):
        assert line in sources.text
    for finding in result.findings:
        assert finding.message in sources.text
    assert CAUTIONS[0] in section(page, "overview").text
    stations = sources.all("table")[1]
    assert len(stations.all("tbody")[0].all("tr")) == len(result.station_use) + 1  # the empty field
    assert "8.5 km" in stations.text  # 8.42 km rounded up
    for value in ("2010", "2024", "daylight", "0.01, 0.05, 0.2", "100", "06-01 to 08-31"):
        assert value in sources.all("dl")[0].text


def test_aircraft_page_tells_its_figures(page, result):
    facts = section(page, "aircraft-1").all("dl")[0].text.replace("\xa0", " ")
    for words in (
        "720 kg",
        "maximum 760 kg",
        "empty 520 kg",
        "factor 1",
        "density altitude 7,000 ft",
    ):
        assert words in facts
    assert section(page, "aircraft-1").all("h2")[0].text == result.aircraft[0].name
    assert "scaled, no table" not in section(page, "aircraft-1").text
    assert "scaled, no table" in section(page, "aircraft-2").all("h2")[0].text
    facts = {
        div.all("dt")[0].text: div.all("dd")[0].text
        for div in section(page, "aircraft-2").all("dl")[0].all("div")
    }
    assert facts["Climb"] == "nothing asked; no figures, not checked"
    assert facts["Take-off"] == "factor 1; table at 760 kg, up to 8,000 ft and 40\u00a0°C"


# Words


def with_months(result, field: str, shares: dict[int, float], others: float = 0.0):
    """The result with the monthly shares of one field replaced for every aircraft."""
    risk = result.risk_monthly.copy()
    own = risk["field"] == field
    risk.loc[own, "shortfall"] = risk.loc[own, "month"].map(shares).fillna(others)
    return replace(result, risk_monthly=risk)


@pytest.mark.parametrize(
    ("months", "long", "short"),
    [
        (range(1, 13), "every month", "every month"),
        ((6, 7, 8, 9), "June and 3 months more", "Jun and 3 more"),
        ((1, 4), "January, April", "Jan, Apr"),
        ((10,), "October", "Oct"),
    ],
)
def test_months_that_tie_are_told_as_such(result, months, long, short):
    made = Page(render_report(with_months(result, "field-0", dict.fromkeys(months, 1.0))))
    lead = section(made, "aircraft-1").all("p", "lead")[0].text
    assert f"Worst: Quiet Plateau in {long}, 100 % of the hours" in lead
    table = section(made, "aircraft-1").all("table")[0]
    assert main_text(rows_by_number(table)[1][-1]) == f"{short} 100 %"
    overview = section(made, "overview").all("table")[0]
    assert rows_by_number(overview)[1][0].all("span", "worst")[0].text == f"{short} 100 %"
    titles = [e.text for e in section(made, "aircraft-1").all("title")]
    assert any(text.endswith(f"highest 100 % in {long}") for text in titles)


def test_tied_months_tell_the_widest_interval_and_every_check(result):
    risk = result.risk_monthly.copy()
    own = (risk["field"] == "field-0") & risk["month"].isin([6, 7])
    risk.loc[own, ["shortfall", "n_years", "coverage"]] = [1.0, 14, 0.93]
    risk.loc[own & (risk["month"] == 6), ["ci_low", "ci_high"]] = [0.8, 1.0]
    risk.loc[own & (risk["month"] == 7), ["ci_low", "ci_high"]] = [0.6, 1.0]
    made = Page(render_report(replace(result, risk_monthly=risk)))
    cell = rows_by_number(section(made, "aircraft-1").all("table")[0])[1][-1]
    limits = risk[own & (risk["aircraft"] == "aircraft-0")]["limiting"]
    small = [s.text for s in cell.all("small")]
    assert small[0] == "60-100 %"
    assert small[1].startswith(" or ".join(limits))


def test_steep_fields_are_not_counted_as_usable_all_year(result):
    # The sample's fields 0 and 3 slope 3.5 %.
    risk = result.risk_monthly.assign(shortfall=0.0)
    calm = replace(result, risk_monthly=risk)
    lead = section(Page(render_report(calm)), "aircraft-1").all("p", "lead")[0].text
    assert lead.endswith(
        "4 of 6 fields stay at < 1 % in every month; 2 steep ones need a procedure of their own."
    )
    level = tuple(replace(f, runways=()) for f in calm.fields[1:])
    one = replace(calm, fields=(calm.fields[0], *level))
    lead = section(Page(render_report(one)), "aircraft-1").all("p", "lead")[0].text
    assert lead.endswith("; 1 steep one needs a procedure of its own.")
    none = replace(calm, fields=tuple(replace(f, runways=()) for f in calm.fields))
    assert "steep" not in section(Page(render_report(none)), "aircraft-1").text


@pytest.mark.parametrize(
    ("figures", "words"),
    [
        ((1.0, 0, 0.0, 6.2), "own station"),
        ((1.0, 0, 0.0, 19.9), "own station"),
        ((1.0, 0, 0.0, 20.0), "air measured, pressure \u00b120 ft"),
        ((1.0, 0, 0.0, 210.04), "air measured, pressure \u00b1210 ft"),
        ((0.0, 3, 0.0, 0.0), "estimated < 1 ft"),
        ((0.0, 3, 300.0, 400.0), "estimated \u00b1500 ft"),  # 3, 4, 5: a right triangle
        (
            (0.4, 2, 30.0, 40.0),
            "air measured 40 % of hours, else estimated \u00b150 ft, pressure \u00b140 ft",
        ),
        ((0.4, 2, 90.0, 6.0), "own station 40 % of hours, else estimated \u00b190 ft"),
        ((0.0, 0, 0.0, 0.0), "no station"),
    ],
)
def test_air_is_only_as_sure_as_its_pressure(figures, words):
    assert sure_text(*figures) == words


def test_report_says_that_both_errors_are_in_the_estimate(page, result):
    assert "root sum of squares" in section(page, "overview").text
    places = numbers_of_fields(page, result)
    row = rows_by_number(section(page, "overview").all("table")[0])[places["field-2"]]
    # hypot(172.0, 66.4) = 184.4
    assert "estimated \u00b1180 ft" in row[-1].text


def test_missing_interval_of_a_season_is_a_mark_that_the_legend_explains(result):
    few = result.risk_seasonal.assign(ci_low=np.nan, ci_high=np.nan, n_years=3)
    made = section(Page(render_report(replace(result, risk_seasonal=few))), "aircraft-1")
    rows = rows_by_number(made.all("table")[0])
    shown = {s.text for cells in rows.values() for c in cells[12:16] for s in c.all("small")}
    assert shown == {"\u2013"}
    assert (
        "\u2013 below a season: no interval, from fewer than 5 years"
        in made.all("ul", "key")[0].text
    )
    full = section(Page(render_report(result)), "aircraft-1").all("ul", "key")[0]
    assert "no interval" not in full.text


def test_season_that_lacks_a_month_is_marked(result):
    # In the sample field 1 has no February and no April; its other seasons have no days told.
    for days, marked in (
        (["12-15", "02-10"], True),
        (["03-01", "05-31"], True),
        (["05-01", "01-31"], False),
        (["03-20", "03-10"], True),
    ):
        told = replace(result, settings=result.settings | {"seasons": {"JJA": days}})
        made = Page(render_report(told))
        places = numbers_of_fields(made, result)
        for name, tables in (("aircraft-1", 1), ("air", 3)):
            for table in section(made, name).all("table")[:tables]:
                for field, row in rows_by_number(table).items():
                    signs = [len(cell.all("span", "gap")) for cell in row[12:16]]
                    here = marked and field == places["field-1"]
                    assert signs == [0, 0, int(here), 0], (days, name, field)
            text = section(made, name).text
            assert ("\u2020 a month of this season has no data" in text) == marked


def test_few_seasons_have_a_short_heading_and_a_wide_column(result):
    for count, head, wide in ((1, "Season", True), (2, "Season", True), (4, "Season: ", False)):
        seasonal = result.risk_seasonal
        seasonal = seasonal[seasonal["season"].isin(SEASONS[:count])]
        air = result.distributions_seasonal
        air = air[air["season"].isin(SEASONS[:count])]
        changed = replace(result, risk_seasonal=seasonal, distributions_seasonal=air)
        table = section(Page(render_report(changed)), "aircraft-1").all("table")[0]
        top = table.all("thead")[0].all("tr")[0].all("th", "first")[0].text
        assert top == head if wide else top.startswith(head)
        assert bool(table.all("col", "wide")) == wide
        assert "90 % interval" in table.all("caption")[0].text


def test_low_coverage_and_years_are_explained(page, result):
    words = section(page, "overview").text
    assert "Years: those with any hour that enters" in words
    assert "told below 80 %" in words
    whole = result.risk_monthly.assign(coverage=0.8)
    made = Page(render_report(replace(result, risk_monthly=whole)))
    assert "overage" not in section(made, "overview").text
    assert "coverage" not in section(made, "aircraft-1").text


def test_field_with_few_months_is_not_told_as_one_that_never_falls_short(result):
    shares = dict.fromkeys(range(2, 13), math.nan) | {1: 0.0}
    risk = result.risk_monthly.copy()
    own = risk["field"] == "field-0"
    risk.loc[own, "shortfall"] = risk.loc[own, "month"].map(shares)
    made = Page(render_report(replace(result, risk_monthly=risk)))
    places = numbers_of_fields(made, result)
    cell = rows_by_number(section(made, "aircraft-1").all("table")[0])[places["field-0"]][-1]
    assert main_text(cell) == "none falls short in 1 known month"


def test_equal_names_are_told_apart_by_their_ids(result):
    alike = ("Same", "Same ", "same", "Same\u200b", "Other", "Meadow 5")
    fields = tuple(replace(f, name=n) for f, n in zip(result.fields, alike, strict=True))
    aircraft = tuple(replace(profile, name="Alike") for profile in result.aircraft)
    made = Page(render_report(replace(result, fields=fields, aircraft=aircraft)))
    for table in made.root.all("table", "periods") + made.root.all("table", "overview"):
        heads = [row.all("th")[0].all("bdi")[0].text for row in table.all("tbody")[0].all("tr")]
        assert len({" ".join(h.split()).casefold() for h in heads}) == 6
        assert sum("Same (field-" in head for head in heads) == 3
    heads = [section(made, f"aircraft-{n}").all("h2")[0].all("bdi")[0].text for n in (1, 2)]
    assert heads == ["Alike (aircraft-0)", "Alike (aircraft-1)"]


# Safety


def test_no_text_of_the_data_becomes_markup(page, text):
    assert {e.tag for e in page.elements} <= KNOWN
    for element in page.elements:
        for name, value in element.attributes.items():
            assert not name.startswith("on"), (element.tag, name)
            assert name not in ("src", "style", "srcdoc", "action"), (element.tag, name)
            if name == "href":
                assert value == "data:," or value.startswith("#"), value
    assert "@import" not in text and "url(" not in text


def test_hostile_texts_are_shown_as_they_are(page, result):
    shown = {b.text for b in page.root.all("bdi")}
    assert set(field_labels(result)) <= shown
    assert LONG_NAME in shown
    assert result.title in shown
    assert HOSTILE[1] in shown  # an attribution
    assert HOSTILE[2] in shown  # a station
    assert SEASONS[-1] in shown
    assert page.root.all("title")[0].text == result.title


@given(st.text(st.characters(exclude_categories=("Cs", "Cc")), min_size=1, max_size=40))
def test_any_text_stays_one_text(name):
    made = Page(str(el("p", el("bdi", name), title=name)))
    (p,) = made.root.all("p")
    assert (p.text, p.attributes["title"], len(made.elements)) == (name, name, 2)
    # CSS Syntax Level 3, 4.3.5 and 4.3.7: only a quote or a line end ends a string, a backslash
    # begins an escape of hexadecimal digits that one space ends.
    quoted = css_text(name)
    assert re.fullmatch(r'"(?:[A-Za-z0-9 ]|\\[0-9a-f]{1,6} )*"', quoted)
    plain = re.sub(r"\\([0-9a-f]{1,6}) ", lambda m: chr(int(m[1], 16)), quoted[1:-1])
    assert plain == name


def test_el_refuses_what_is_no_text():
    with pytest.raises(TypeError, match="format numbers first"):
        el("td", 0.123)


def test_policy_lets_only_the_style_of_the_page_in(page):
    import base64
    import hashlib

    (style,) = page.root.all("style")
    digest = base64.b64encode(hashlib.sha256(style.text.encode()).digest()).decode()
    metas = {
        m.attributes.get("http-equiv"): m.attributes["content"]
        for m in page.root.all("meta")
        if "content" in m.attributes
    }
    policy = metas["Content-Security-Policy"]
    assert policy.startswith("default-src 'none'; ")
    assert f"style-src 'sha256-{digest}'" in policy
    assert "script" not in policy and "unsafe" not in policy


# Structure


def test_headings_tables_and_pictures_have_their_names(page):
    assert page.root.all("html")[0].attributes["lang"] == "en"
    levels = [int(e.tag[1]) for e in page.elements if re.fullmatch("h[1-6]", e.tag)]
    assert levels[0] == 1 and levels.count(1) == 1
    assert all(b - a <= 1 for a, b in zip(levels, levels[1:], strict=False))
    for table in page.root.all("table"):
        assert table.all("caption")[0].text
        assert all("scope" in th.attributes for th in table.all("th"))
    for picture in page.root.all("svg"):
        if picture.attributes.get("aria-hidden") != "true":
            assert picture.attributes["role"] == "img"
            assert picture.all("title")[0].text
    ids = [e.attributes["id"] for e in page.elements if "id" in e.attributes]
    assert len(ids) == len(set(ids))
    for link in page.root.all("a"):
        assert link.attributes["href"][1:] in ids


def test_same_result_gives_same_bytes(text):
    assert render_report(sample_result()).encode() == text.encode()


def without_rows(result):
    frames = {
        name: value.iloc[:0]
        for name, value in vars(result).items()
        if isinstance(value, pd.DataFrame)
    }
    return replace(result, **frames, findings=(), attributions=())


def without_seasons(result):
    names = (
        "risk_seasonal",
        "distributions_seasonal",
        "near_saturation_seasonal",
    )
    return replace(result, **{name: getattr(result, name).iloc[:0] for name in names})


def without_intervals(result):
    risk = result.risk_monthly.assign(ci_low=np.nan, ci_high=np.nan)
    seasonal = result.risk_seasonal.assign(ci_low=np.nan, ci_high=np.nan)
    return replace(result, risk_monthly=risk, risk_seasonal=seasonal)


def with_many_seasons(result):
    risk = pd.concat(
        [
            result.risk_seasonal.assign(season=result.risk_seasonal["season"] + f" {n}")
            for n in range(5)
        ]
    )
    return replace(result, risk_seasonal=risk)


def shortfall_tables(aircraft):
    """The tables before the heading of the next answer; later seasons have tables of their own."""
    captions = ((t, t.all("caption")[0].text) for t in aircraft.all("table"))
    return [t for t, caption in captions if caption.startswith("Share of hours")]


@pytest.mark.parametrize(
    "change", [without_rows, without_seasons, without_intervals, with_many_seasons]
)
def test_frames_with_less_or_more_make_a_page(result, change):
    changed = change(result)
    made = Page(render_report(changed))
    sections = [s.attributes["id"] for s in made.root.all("section")]
    further = [] if change is without_rows else ["works-1", "works-2", "bases", "schedule"]
    assert sections == ["overview", "aircraft-1", "aircraft-2", *further, "air", "sources"]
    tables = shortfall_tables(section(made, "aircraft-1"))
    cells = sum(len(t.all("tbody")[0].all("td")) for t in tables)
    frames = (changed.risk_seasonal, changed.distributions_seasonal)
    seasons = set().union(*(frame["season"] for frame in frames))
    assert cells == len(result.fields) * (12 + len(seasons) + 1)
    if change is without_rows:
        assert "no data" in section(made, "aircraft-1").text
        assert "does not mean no risk" in section(made, "overview").text
    if change is without_intervals:
        assert "no interval" in section(made, "overview").text


@pytest.mark.parametrize(("n_fields", "n_aircraft"), [(1, 1), (6, 7)])
def test_one_field_and_many_aircraft_make_a_page(n_fields, n_aircraft):
    made = Page(render_report(sample_result(n_fields, n_aircraft)))
    assert len(made.root.all("section")) == 2 * n_aircraft + 5
    heads = [th.text for t in section(made, "overview").all("table") for th in t.all("th", "plane")]
    assert len(heads) == n_aircraft


def test_only_the_worst_dozen_have_charts_and_the_page_says_so():
    made = Page(render_report(sample_result(40, 1)))
    aircraft = section(made, "aircraft-1")
    assert len(aircraft.all("figure")) == 12
    assert "Shown are the 12 worst of 40 fields; the table holds all." in aircraft.text
    assert len(aircraft.all("tbody")[0].all("tr")) == 40


# Figures


def contrast(one: str, other: str) -> float:
    """WCAG 2.2, contrast ratio, from its definition of relative luminance."""

    def light(colour):
        parts = [int(colour[at : at + 2], 16) / 255 for at in (1, 3, 5)]
        linear = [c / 12.92 if c <= 0.04045 else ((c + 0.055) / 1.055) ** 2.4 for c in parts]
        return sum(k * c for k, c in zip((0.2126, 0.7152, 0.0722), linear, strict=True))

    high, low = sorted((light(one), light(other)), reverse=True)
    return (high + 0.05) / (low + 0.05)


@pytest.mark.parametrize("count", range(1, 10))
def test_ink_on_every_band_is_readable(count):
    colours = YLORBR[count]
    assert len(colours) == count
    assert all(contrast(c, ink_on(c)) >= 4.5 for c in colours)


def test_rounding_never_flatters():
    assert distance_text(8.42) == "8.5 km"
    assert distance_text(8.4) == "8.4 km"
    assert distance_text(math.nan) == "no data"
    assert error_text(0.4) == error_text(0.5) == error_text(0.99) == "< 1 ft"
    assert error_text(118.4) == "\u00b1120 ft"


def test_scales_hold_their_values():
    assert share_top(np.array([0.21, np.nan])) == 0.3
    assert share_top(np.array([np.nan])) > 0
    steps = feet_scale(np.array([-520.0, np.nan]), np.array([9030.0]))
    assert steps[0] <= -520 and steps[-1] >= 9030
    assert len(set(np.diff(steps))) == 1


def test_sketch_is_as_wide_as_the_cosine_of_its_latitude(result):
    # Equidistant cylindrical projection, Snyder 1987, USGS Professional Paper 1395, chapter 12,
    # from memory: x = R (lon - lon0) cos(lat1), y = R lat.
    corner = replace(result.fields[0], latitude=59.0, longitude=10.0)
    across = replace(corner, id="b", latitude=61.0, longitude=12.0)
    made = Page(str(fields_sketch((corner, across), (1, 2), (0, 3), "sketch")))
    marks = [p.attributes["transform"] for p in made.root.all("path", "shape")]
    points = [tuple(map(float, re.findall(r"-?[\d.]+", m)[:2])) for m in marks]
    (x2, y2), (x1, y1) = points  # the first field is drawn last
    assert (x2 - x1) / (y1 - y2) == pytest.approx(math.cos(math.radians(60.0)), rel=0.01)


def test_scale_bar_of_the_sketch_has_its_length(result):
    # A minute of latitude is a nautical mile (1852 m), at most 0.6 % off on WGS 84 (from memory).
    low = replace(result.fields[0], latitude=46.0, longitude=10.0)
    high = replace(low, id="b", latitude=47.0)
    made = Page(str(fields_sketch((low, high), (1, 2), (0, 3), "sketch")))
    marks = [p.attributes["transform"] for p in made.root.all("path", "shape")]
    ys = [float(re.findall(r"-?[\d.]+", m)[1]) for m in marks]
    (bar,) = made.root.all("path", "scale")
    length = float(re.search(r"h([\d.]+)", bar.attributes["d"])[1])
    km = next(float(t.text.split()[0]) for t in made.root.all("text") if t.text.endswith(" km"))
    assert length / km == pytest.approx(abs(ys[0] - ys[1]) / (60 * 1.852), rel=0.01)
