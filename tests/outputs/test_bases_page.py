"""The page of bases as a text: the frames' figures in its cells, texts only as text."""

from __future__ import annotations

import base64
import hashlib
import math
import re
from html.parser import HTMLParser
from types import SimpleNamespace

import numpy as np
import pytest
from sample_result import HOSTILE, LONG_NAME
from test_bases import AIRCRAFT, OFFERED, Made

from climarisk.outputs.bases_page import difference_sentence, render_bases
from climarisk.outputs.texts import CAUTIONS, MONTHS

#: Elements that the page is made of; anything else came from a text.
KNOWN = {
    *("html", "head", "meta", "title", "link", "style", "body", "main", "section"),
    *("p", "h1", "h2", "h3", "b", "bdi", "small", "span", "div", "ul", "ol", "li"),
    *("table", "caption", "colgroup", "col", "thead", "tbody", "tr", "th", "td"),
    *("svg", "path", "rect"),
}
VOID = {"meta", "link", "col", "path", "rect"}


class Page(HTMLParser):
    """What a page holds: tags, attributes and tables as rows of cell texts."""

    def __init__(self, text):
        super().__init__(convert_charrefs=True)
        self.tags, self.names, self.tables, self.words = set(), set(), [], []
        self.opened, self.cell = [], None
        self.feed(text)
        self.close()
        assert not self.opened

    def handle_starttag(self, tag, attrs):
        self.tags.add(tag)
        self.names |= {name for name, _ in attrs}
        if tag not in VOID:
            self.opened.append(tag)
        if tag == "table":
            self.tables.append([])
        if tag == "tr":
            self.tables[-1].append([])
        if tag in ("td", "th"):
            self.cell = []

    def handle_startendtag(self, tag, attrs):
        self.tags.add(tag)
        self.names |= {name for name, _ in attrs}

    def handle_endtag(self, tag):
        assert self.opened.pop() == tag
        if tag in ("td", "th"):
            self.tables[-1][-1].append("".join(self.cell))
            self.cell = None

    def handle_data(self, data):
        if self.opened and self.opened[-1] not in ("style", "title"):
            self.words.append(data)
            if self.cell is not None:
                self.cell.append(data)

    @property
    def text(self):
        return "".join(self.words)


NAMES = ["Quiet Plateau", *HOSTILE, LONG_NAME]


def result_of(made, names=None, window="daylight", **planning):
    """Return what the page reads of a result, with these names of the fields."""
    names = names or [f"Field {i}" for i in range(len(made.fields))]
    bases, differences = made.tables()
    frames = made.frames()
    monthly = frames["risk_monthly"]
    icing = frames["icing_monthly"].assign(method="chart", verified="no")
    return SimpleNamespace(
        title="Bases </title><script>window.pwned=1</script> {{7*7}}",
        fields=[SimpleNamespace(id=f, name=n) for f, n in zip(made.fields, names, strict=True)],
        aircraft=[
            SimpleNamespace(id=a, name=f"{a} <b onclick=pwned>", carburettor=a == "carb")
            for a in AIRCRAFT
        ],
        settings={
            "first_year": 2012,
            "last_year": 2018,
            "window": window,
            "bands": [0.01, 0.05, 0.20],
            "confidence": made.confidence,
            "planning": {"fleet": made.fleet, "consecutive_hours": 4} | planning,
        },
        bases=bases,
        base_differences=differences,
        risk_monthly=monthly.assign(
            usable_hours=monthly["hours_offered"] * (1.0 - monthly["shortfall"])
        ),
        icing_monthly=icing,
        attributions=("Invented weather", HOSTILE[1]),
    )


@pytest.fixture(scope="module")
def hostile():
    made = Made(7, fleet={"carb": 3.0, "jet": 1.0}, levels=(1, 3))
    made.silence("f2", 2, 4)
    made.silence("f5", *range(1, 13))
    return made, render_bases(result_of(made, NAMES))


def test_names_are_shown_as_text_and_nothing_runs(hostile):
    _, text = hostile
    page = Page(text)
    assert page.tags <= KNOWN
    assert not {n for n in page.names if n.startswith("on") or n in ("src", "style", "action")}
    assert "<script" not in text
    for name in NAMES:
        assert " ".join(name.split()) in page.text or name[:40] in page.text
    assert "{{7*7}}" in page.text
    assert "@@" not in text


def test_policy_lets_in_this_style_and_nothing_else(hostile):
    _, text = hostile
    look = re.search(r"<style>(.*?)</style>", text, re.S)[1]
    digest = base64.b64encode(hashlib.sha256(look.encode()).digest()).decode()
    policy = re.search(r'http-equiv="Content-Security-Policy" content="([^"]*)"', text)[1]
    assert "default-src &#x27;none&#x27;" in policy or "default-src 'none'" in policy
    assert f"sha256-{digest}" in policy
    assert "unsafe" not in policy
    assert "script-src" not in policy
    assert not re.search(r"(?:src|href)=\"(?!data:,|#)", text)


def test_page_is_the_same_every_time():
    one, two = (render_bases(result_of(Made(3, seed=5))) for _ in range(2))
    assert one == two


def test_ranking_shows_the_figures_of_the_frame(hostile):
    made, text = hostile
    bases, _ = made.tables()
    ranking = Page(text).tables[0]
    assert len(ranking) == 1 + len(made.fields)
    fleet = bases[bases["aircraft"] == ""]
    for cells, row in zip(ranking[1:], fleet.to_dict("records"), strict=True):
        if math.isnan(row["usable_hours_month"]):
            assert cells[0].startswith("–")
            assert cells[1].startswith("no data")
            continue
        assert cells[0].startswith(f"{row['rank']} ")
        assert cells[0].endswith(" steep") == (row["field"] == made.fields[0])
        low, high = math.floor(row["ci_low"]), math.ceil(row["ci_high"])
        hours = f"{math.floor(row['usable_hours_month'])}\N{NARROW NO-BREAK SPACE}h"
        assert cells[1] == f"{hours} {low}-{high}*"  # seven years
        assert cells[2] == f"{math.floor(row['year_p10'])}-{math.ceil(row['year_p90'])}"
        worst = f"{math.floor(row['worst_season_hours_month'])}\N{NARROW NO-BREAK SPACE}h"
        assert cells[3] == f"{row['worst_season']} {worst}"
        assert cells[4] == f"{math.floor(row['days_with_run'] * 100 + 1e-9)} %"
    assert [c[0][:1] for c in ranking[1:]] == ["1", "2", "3", "4", "5", "–", "–"]


def test_picture_of_a_row_lies_on_one_scale(hostile):
    made, text = hostile
    bases, _ = made.tables()
    fleet = bases[(bases["aircraft"] == "") & bases["rank"].notna()]
    ends = fleet[["usable_hours_month", "ci_low", "ci_high", "year_p10", "year_p90"]].to_numpy()
    low, high = math.floor(ends.min()), math.ceil(ends.max())
    assert f"Scale: {low} to {high} h" in text
    style = text[text.index("<style>") : text.index("</style>")]
    pictures = re.findall(r'<svg viewBox="0 0 120 14" class="range".*?</svg>', text)
    assert len(pictures) == len(fleet)
    for picture, row in zip(pictures, fleet.to_dict("records"), strict=True):
        for kind, names in (
            ("in-years", ("year_p10", "year_p90")),
            ("in-interval", ("ci_low", "ci_high")),
        ):
            # A rule about the width of this class in another table would bend the picture.
            assert style.count(f".{kind}") == 1
            x, width = map(
                float,
                re.search(
                    rf'x="([\d.]+)" y="[\d.]+" width="([\d.]+)"[^>]*class="{kind}"', picture
                ).groups(),
            )
            expected = [3.0 + 114.0 * (row[n] - low) / (high - low) for n in names]
            assert [x, x + width] == pytest.approx(expected, abs=0.11)


def test_missing_months_are_named_and_never_look_like_hours(hostile):
    _, text = hostile
    page = Page(text)
    ranking, months = page.tables[0], page.tables[1]
    assert ranking[-2][1] == "no data in Feb, Apr"
    assert ranking[-1][1] == "no data"
    partial, empty = months[-2][1:], months[-1][1:]
    assert [i for i, cell in enumerate(partial) if cell == "no data"] == [1, 3, 12]
    assert empty == ["no data"] * 13
    assert "no data is not the same as no risk" in page.text


def test_month_table_shows_hours_coloured_by_the_share_that_falls_short():
    made = Made(1, fleet={"carb": 3.0, "jet": 1.0})
    text = render_bases(result_of(made))
    table = Page(text).tables[1]
    assert table[0][1:] == [*MONTHS, "Mean"]
    body = text[text.index("periods heat") :]
    classes = re.findall(r'<td class="b(\d)">', body)[:12]
    for m in range(12):
        share = 0.75 * made.share("f0", "carb", m + 1) + 0.25 * made.share("f0", "jet", m + 1)
        usable = math.floor(OFFERED[m] * (1 - share))
        assert table[1][1 + m] == f"{usable} of {math.floor(OFFERED[m])}"
        assert int(classes[m]) == sum(share >= edge for edge in (0.01, 0.05, 0.20))


def test_month_without_an_hour_in_the_window_says_so():
    made = Made(2)
    made.silence("f0", 12)
    made.offered["f0"][11] = 0.0
    page = Page(render_bases(result_of(made)))
    (row,) = [r for r in page.tables[1] if "Field 0" in r[0]]
    assert row[12] == "0 no hours"
    assert row[13] != "no data"


def test_aircraft_stand_beside_each_other_with_their_own_figures(hostile):
    made, text = hostile
    bases, _ = made.tables()
    table = Page(text).tables[2]
    assert table[0][1:] == [f"{a} <b onclick=pwned>" for a in AIRCRAFT]
    for n, aircraft in enumerate(AIRCRAFT):
        rows = bases[bases["aircraft"] == aircraft].to_dict("records")
        for cells, row in zip(table[1:6], rows, strict=False):
            assert cells[1 + n].startswith(f"{math.floor(row['usable_hours_month'])}")
            assert row["worst_season"] in cells[1 + n]


def test_icing_is_shown_with_its_verification():
    made = Made(2)
    result = result_of(made)
    page = Page(render_bases(result))
    assert page.tables[0][0][6] == "Icing serious even in cruise (chart not verified)"
    assert "it is serious even in cruise; chart not verified." in page.text
    result.icing_monthly["verified"] = "yes"
    shown = Page(render_bases(result)).text
    assert "not verified" not in shown
    assert "verified" in shown
    result.icing_monthly["method"] = "physical"
    page = Page(render_bases(result))
    assert page.tables[0][0][6].endswith("(screening, no published chart)")


def test_differences_are_signed_from_the_first_field_and_say_when_they_tell_nothing():
    made = Made(3)
    better = made.counts["f0", "jet"]
    changed = better.fallen * 0.5
    made.counts["f1", "jet"] = type(better)(better.total, changed, 0.5)
    for aircraft in AIRCRAFT:  # the third is as good as the second
        made.counts["f2", aircraft] = made.counts["f1", aircraft]
    page = Page(render_bases(result_of(made)))
    table = page.tables[3]
    _, differences = made.tables()
    assert len(table) == 1 + 3
    for cells in table[1:]:
        assert ("Field 0 (steep)" in cells[0]) == ("Field 0" in cells[0])
        one, other = cells[0].replace(" (steep)", "").split(" against ")
        for n, aircraft in enumerate(("", *AIRCRAFT)):
            pair = {one.replace("Field ", "f"), other.replace("Field ", "f")}
            chosen = differences[differences["aircraft"] == aircraft]
            (row,) = [r for r in chosen.to_dict("records") if {r["first"], r["second"]} == pair]
            hours = row["difference_hours_month"]
            sign = "+" if row["first"] == one.replace("Field ", "f") else "\N{MINUS SIGN}"
            sized = f"{hours:.1f}" if hours < 9.95 else f"{hours:.0f}"
            if hours == 0.0:
                assert cells[1 + n] == "0 h no spread, not told apart"
            elif hours < 0.05:
                assert cells[1 + n].startswith(f"up to {sign}0.1 h ")
            else:
                assert cells[1 + n].startswith(f"{sign}{sized} h ")
            told = row["ci_low"] <= 0.0 <= row["ci_high"]
            assert ("not told apart" in cells[1 + n]) == told


@pytest.mark.parametrize(("low", "apart"), [(0.02, True), (0.0, False), (-0.02, False)])
def test_bases_are_told_apart_by_the_unrounded_interval(low, apart):
    made = Made(2)
    result = result_of(made)
    result.base_differences = result.base_differences.assign(
        difference_hours_month=0.5, ci_low=low, ci_high=1.04
    )
    page = Page(render_bases(result))
    cells = page.tables[3][1][1:]
    assert ["not told apart" in cell for cell in cells] == [not apart] * len(cells)
    assert ("beats" in page.text) == apart
    assert ("are not told apart" in page.text) != apart


def test_field_that_is_never_usable_has_a_scale_from_zero_and_no_empty_interval():
    made = Made(2)
    for aircraft in AIRCRAFT:
        counts = made.counts["f1", aircraft]
        fallen = np.broadcast_to(counts.total[..., None], counts.fallen.shape)
        made.counts["f1", aircraft] = type(counts)(counts.total, fallen.copy(), 0.5)
    result = result_of(made)
    # What resampling leaves of nothing: a hair below it.
    own = result.bases["field"] == "f1"
    result.bases.loc[own, ["ci_low", "year_p10"]] = -1e-13
    page = Page(render_bases(result))
    assert "Scale: 0 to " in page.text
    (row,) = [r for r in page.tables[0] if "Field 1" in r[0]]
    assert row[1].replace("\N{NARROW NO-BREAK SPACE}", " ") == "0 h no spread*"
    assert row[2] == "0"


def test_many_fields_show_the_best_and_the_next_against_each_other():
    made = Made(9)
    page = Page(render_bases(result_of(made)))
    assert len(page.tables[3]) == 1 + 8 + 7
    assert "base_differences.csv" in page.text
    assert "base_differences.csv" not in Page(render_bases(result_of(Made(4)))).text


@pytest.mark.parametrize(
    ("figures", "sentence"),
    [
        # The sentence of the work order, then its borders.
        ((21.6, 12.3, 29.2), "A beats B by 22 h a month (90 %: 12 to 30)."),
        ((0.44, 0.19, 0.81), "A beats B by 0.4 h a month (90 %: 0.1 to 0.9)."),
        (
            (3.0, -4.2, 9.1),
            "A and B are not told apart: 3.0 h a month (90 %: \N{MINUS SIGN}4.2 to 9.1).",
        ),
        ((0.0, 0.0, 0.0), "A and B are not told apart: 0 h a month (90 %: 0)."),
        (
            (1234.0, math.nan, math.nan),
            "A has 1,234 h a month more than B; too few years for an interval.",
        ),
    ],
)
def test_difference_in_a_sentence_is_rounded_to_the_nearest_and_its_interval_outwards(
    figures, sentence
):
    names = ("difference_hours_month", "ci_low", "ci_high")
    assert difference_sentence("A", "B", dict(zip(names, figures, strict=True)), 0.9) == sentence


def test_glance_names_the_best_for_the_fleet_and_each_aircraft():
    made = Made(3, fleet={"carb": 1.0, "jet": 2.0})
    text = Page(render_bases(result_of(made))).text
    assert "fleet: 1 × carb <b onclick=pwned>, 2 × jet <b onclick=pwned>" in text
    best = math.floor(made.usable("f0", ""))
    assert f"Field 0 (steep) has the most: {best}\N{NARROW NO-BREAK SPACE}h a month" in text
    assert "beats" in text
    for caution in CAUTIONS:
        assert caution in text


def test_figure_without_an_interval_tells_its_years():
    made = Made(2)
    for aircraft in AIRCRAFT:
        counts = made.counts["f0", aircraft]
        total, fallen = counts.total.copy(), counts.fallen.copy()
        total[:, 1:] = fallen[:, 1:] = 0
        made.counts["f0", aircraft] = type(counts)(total, fallen, 0.5)
    page = Page(render_bases(result_of(made)))
    (row,) = [r for r in page.tables[0] if "Field 0" in r[0]]
    assert " no interval, 1 year" in row[1]
    assert row[2] == "too few years"
    assert "too few years for an interval" in page.text
    assert page.tables[3][1][1].endswith("h no interval")


def test_study_without_any_figure_has_a_page_without_a_ranking():
    made = Made(2)
    for field in made.fields:
        made.silence(field, *range(1, 13))
    page = Page(render_bases(result_of(made)))
    assert "there is no ranking" in page.text
    assert [row[1] for row in page.tables[0][1:]] == ["no data", "no data"]
    assert "How much better" not in page.text


def test_more_than_five_aircraft_take_further_tables(monkeypatch):
    import test_bases

    planes = tuple(f"plane-{i}" for i in range(7))
    monkeypatch.setattr(test_bases, "AIRCRAFT", planes)
    made = Made(2)
    result = result_of(made)
    result.aircraft = [SimpleNamespace(id=a, name=a, carburettor=False) for a in planes]
    page = Page(render_bases(result))
    widths = [len(table[0]) - 1 for table in page.tables]
    assert widths == [6, 13, 5, 2, 6, 2]
    assert "no carburettor" in page.text
    assert np.isnan(result.bases["icing_serious"]).all()
