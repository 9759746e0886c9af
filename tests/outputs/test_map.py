"""The map page as a text: nothing to load, nothing to run but its own scripts, same bytes."""

from __future__ import annotations

import base64
import hashlib
import json
import re
from dataclasses import replace
from fractions import Fraction
from html.parser import HTMLParser
from importlib.resources import files

import numpy as np
import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st
from sample_result import HOSTILE, SEASONS, sample_result

from climarisk.outputs import map as map_module
from climarisk.outputs import map_data
from climarisk.outputs.map import render_map
from climarisk.outputs.map_data import CAUTIONS, NO_BYTE, NO_FEET

# Subresource integrity value published for leaflet.js 1.9.3 (npm package leaflet 1.9.3,
# dist/leaflet.js); the value in base64 is sha256-WBkoXOwTeyKclOHuWtc+i2uENFpDZ9YPdf5Hf+D7ewM=.
LEAFLET_SHA256 = "5819285cec137b229c94e1ee5ad73e8b6b84345a4367d60f75fe477fe0fb7b03"


class _Parsed(HTMLParser):
    """Start tags with their attributes, and the text of each script, title and style."""

    def __init__(self, text: str) -> None:
        super().__init__(convert_charrefs=True)
        self.tags: list[tuple[str, dict[str, str | None]]] = []
        self.texts: list[tuple[str, str]] = []
        self._open = ""
        self.feed(text)
        self.close()

    def handle_starttag(self, tag, attrs):
        self.tags.append((tag, dict(attrs)))
        if tag in ("script", "title", "style"):
            self._open = tag
            self.texts.append((tag, ""))

    def handle_endtag(self, tag):
        if tag == self._open:
            self._open = ""

    def handle_data(self, data):
        if self._open:
            tag, text = self.texts[-1]
            self.texts[-1] = (tag, text + data)

    def all(self, tag: str) -> list[str]:
        return [text for name, text in self.texts if name == tag]


@pytest.fixture(scope="module")
def result():
    return sample_result()


@pytest.fixture(scope="module")
def page(result) -> str:
    return render_map(result)


@pytest.fixture(scope="module")
def parsed(page) -> _Parsed:
    return _Parsed(page)


def _study(parsed: _Parsed) -> dict:
    return json.loads(parsed.all("script")[0])


def _array(parsed: _Parsed, name: str, dtype: str) -> np.ndarray:
    return np.frombuffer(base64.b64decode(_study(parsed)["arrays"][name]), dtype)


def test_render_map_same_result_gives_same_bytes(page):
    assert render_map(sample_result()).encode() == page.encode()


def test_leaflet_script_is_the_published_one():
    data = (files("xstatic.pkg.leaflet") / "data" / "leaflet.js").read_bytes()
    assert hashlib.sha256(data).hexdigest() == LEAFLET_SHA256


def test_render_map_loads_nothing(page, parsed):
    for tag, attributes in parsed.tags:
        assert tag not in ("iframe", "object", "embed", "img", "base", "form action"), tag
        assert "src" not in attributes, (tag, attributes)
        if (target := attributes.get("href")) is not None:
            assert target in ("#fields-heading", "data:,")
    style = "".join(parsed.all("style"))
    addresses = re.findall(r"url\(([^)]*)\)", style)
    # The old vector language of Leaflet's style names a behaviour of the browser, not a file.
    assert all(a.startswith("data:image/png;base64,") or a == "#default#VML" for a in addresses)
    assert "@import" not in style
    assert "sourceMappingURL" not in page


def test_render_map_has_no_handler_in_an_attribute_and_no_ban_on_zoom(parsed):
    names = {name for _, attributes in parsed.tags for name in attributes}
    assert not {name for name in names if name.startswith("on")}
    viewport = next(a["content"] for t, a in parsed.tags if a.get("name") == "viewport")
    assert "maximum-scale" not in viewport
    assert "user-scalable" not in viewport


def test_policy_allows_exactly_the_scripts_of_the_page(page):
    # W3C Content Security Policy Level 3: the hash is over the text between the script's tags.
    scripts = re.findall(r"<script>(.*?)</script>", page, flags=re.S)
    policy = re.search(r'http-equiv="Content-Security-Policy" content="([^"]*)"', page)[1]
    expected = [base64.b64encode(hashlib.sha256(s.encode()).digest()).decode() for s in scripts]
    assert len(scripts) == 3
    assert re.findall(r"'sha256-([^']+)'", policy) == expected
    assert policy.startswith("default-src 'none'; ")
    assert "unsafe-eval" not in policy
    assert "script-src 'unsafe-inline'" not in policy


def test_hostile_text_stands_only_in_the_data_block_and_the_title(result, page, parsed):
    block, *scripts = parsed.all("script")
    assert len(scripts) == 3
    outside = page.replace(block, "")
    assert outside.count("pwned") == 1  # the title, escaped
    assert parsed.all("title") == [result.title]
    for sign in "<>&\u2028\u2029":
        assert sign not in block
    names = [field["name"] for field in _study(parsed)["fields"]]
    assert names == [field.name for field in result.fields]
    assert set(HOSTILE[:2]) <= set(names)


@pytest.mark.parametrize("text", HOSTILE)
def test_no_text_of_a_file_reaches_folium(monkeypatch, result, text):
    seen = []
    real = map_module._FieldMap.__init__

    def spy(self, *args, **kwargs):
        seen.append(repr((args, kwargs)))
        real(self, *args, **kwargs)

    monkeypatch.setattr(map_module._FieldMap, "__init__", spy)
    fields = tuple(replace(field, id=text, name=text, timezone=text) for field in result.fields)
    script = map_module._map_script(fields)
    assert len(seen) == 1
    assert not re.search(r"pwned|\{\{7|for %|quotes|alert", seen[0] + script)


def test_page_scripts_never_parse_text_as_html():
    for name in map_module._SCRIPTS:
        script = map_module._page_text(name)
        for word in (
            "innerHTML",
            "outerHTML",
            "insertAdjacentHTML",
            "document.write",
            "eval(",
            "new Function",
            "</script",
            "fetch(",
            "XMLHttpRequest",
            "import(",
        ):
            assert word not in script, (name, word)


def test_every_script_of_the_folder_is_in_the_page():
    folder = files("climarisk.outputs") / "page"
    assert {p.name for p in folder.iterdir() if p.name.endswith(".js")} == set(map_module._SCRIPTS)


def test_licence_of_leaflet_is_in_the_page(page):
    # BSD-2-Clause: redistributions keep the notice, the conditions and the disclaimer.
    assert "(c) 2010-2022, Vladimir Agafonkin" in page
    assert "Redistributions in binary form must reproduce the above copyright notice" in page
    assert 'THIS SOFTWARE IS PROVIDED BY THE COPYRIGHT HOLDERS AND CONTRIBUTORS "AS IS"' in page


def test_cautions_are_in_the_page(parsed):
    assert _study(parsed)["cautions"] == list(CAUTIONS)
    assert "flight manual" in CAUTIONS[0]


def test_packed_shares_are_those_of_the_frame(result, parsed):
    packed = _array(parsed, "hour_shortfall", "u1").reshape(6, 2, 12, 24)
    levels = _study(parsed)["levels"]
    for row in result.risk_hourly.itertuples():
        cell = packed[int(row.field[-1]), int(row.aircraft[-1]), row.month - 1, row.hour]
        if np.isnan(row.shortfall):
            assert cell == NO_BYTE
        else:
            assert 0.0 <= row.shortfall - levels[cell] < 0.01
            assert (cell == 0) == (row.shortfall == 0.0)


def test_packed_density_altitude_is_that_of_the_frame(result, parsed):
    frame = result.distributions_hourly
    frame = frame[frame["variable"] == "density_altitude"]
    packed = _array(parsed, "altitude_hour_p90", "<i2").reshape(6, 12, 24)
    for row in frame.itertuples():
        cell = packed[int(row.field[-1]), row.month - 1, row.hour]
        assert cell == (NO_FEET if np.isnan(row.p90) else np.floor(row.p90))


def test_rows_in_another_order_give_the_same_page(result, page):
    shuffled = replace(
        result,
        risk_hourly=result.risk_hourly.sample(frac=1.0, random_state=3),
        distributions_monthly=result.distributions_monthly.iloc[::-1],
    )
    assert render_map(shuffled) == page


def test_missing_rows_are_no_data(result):
    fewer = replace(result, risk_hourly=result.risk_hourly.iloc[:0])
    packed = _array(_Parsed(render_map(fewer)), "hour_shortfall", "u1")
    assert len(packed) == 6 * 2 * 12 * 24
    assert (packed == NO_BYTE).all()


@given(hours=st.integers(1, 200_000), edge=st.integers(1, 999), data=st.data())
def test_share_codes_keep_the_band_and_the_whole_per_cent(hours, edge, data):
    exact = Fraction(data.draw(st.integers(0, hours)), hours)
    band = Fraction(edge, 1000)
    levels = map_data._share_levels([float(band)])
    code = int(map_data._share_codes(pd.Series([float(exact)]), levels)[0])
    level = Fraction(str(levels[code])) if code != 1 else Fraction(1, 10**9)

    def shown(share):
        return (share == 0, share < Fraction(1, 100), (share * 100 + Fraction(1, 2)).__floor__())

    assert (level >= band) == (exact >= band)
    assert shown(level)[:2] == shown(exact)[:2]
    if exact >= Fraction(1, 100):
        assert shown(level) == shown(exact)


def test_codes_keep_no_data_apart():
    levels = map_data._share_levels([0.01, 0.05, 0.2])
    codes = map_data._share_codes(pd.Series([np.nan, 0.0, 1e-9, 1.0]), levels)
    assert codes.tolist() == [NO_BYTE, 0, 1, len(levels) - 1]
    assert len(levels) + map_data.MOST_EDGES < NO_BYTE
    feet = map_data._feet(pd.Series([np.nan, 0.0, -0.5, 8449.9]))
    assert feet.tolist() == [NO_FEET, 0, -1, 8449]


def test_size_of_a_large_study_stays_small():
    large = sample_result(50, 5)
    assert len(render_map(replace(large, scenarios=None)).encode()) < 560_000
    assert len(render_map(large).encode()) < 620_000


def test_packed_trends_are_those_of_the_frame(result, parsed):
    slopes = _array(parsed, "trend_slope_per_decade", "<i2").reshape(6, 3, 4)
    breaks = _array(parsed, "trend_break", "u1").reshape(6, 3, 4)
    order = ["", "aircraft-0", "aircraft-1"]
    for row in result.trends.itertuples():
        cell = int(row.field[-1]), order.index(row.aircraft), SEASONS.index(row.season)
        scale = 100 if row.aircraft else 1
        missing = np.isnan(row.slope_per_decade)
        assert slopes[cell] == (NO_FEET if missing else np.floor(row.slope_per_decade * scale))
        # 0.1 itself is not below the level of the test at a confidence of 0.90.
        broken = row.break_p_value < 0.1
        assert breaks[cell] == (2017 - 2010 if broken else NO_BYTE)


def test_central_share_is_sent_where_it_differs_by_a_whole_per_cent(result, parsed):
    central = _array(parsed, "month_central", "u1").reshape(6, 2, 12)
    levels = _study(parsed)["levels"]
    sent = 0
    for row in result.risk_monthly.itertuples():
        cell = central[int(row.field[-1]), int(row.aircraft[-1]), row.month - 1]
        if abs(row.shortfall - row.shortfall_central) >= 0.01:
            assert 0.0 <= row.shortfall_central - levels[cell] < 0.01
            sent += 1
        else:
            assert cell == NO_BYTE
    assert 0 < sent < len(result.risk_monthly)


@pytest.mark.parametrize(
    ("longitudes", "drawn"),
    [
        ([179.2, -179.5, 178.0], [179.2, 180.5, 178.0]),
        ([-179.5], [-179.5]),
        ([-170.0, 10.0], [-170.0, 10.0]),  # as far apart either way
        ([-5.0, 8.0], [-5.0, 8.0]),
        ([], []),
    ],
)
def test_fields_on_both_sides_of_180_degrees_are_drawn_together(result, longitudes, drawn):
    fields = [replace(result.fields[0], longitude=longitude) for longitude in longitudes]
    assert map_data.drawn_longitudes(fields) == drawn
    if longitudes:
        middle = (min(drawn) + max(drawn)) / 2
        assert f", {round(middle, 4)}]" in map_module._map_script(fields)


def test_study_without_stations_or_shares_still_renders(result):
    bare = replace(
        result,
        risk_monthly=result.risk_monthly.iloc[:0],
        risk_hourly=result.risk_hourly.iloc[:0],
        risk_seasonal=result.risk_seasonal.iloc[:0],
        station_use=result.station_use.iloc[:0],
        pressure_sources=result.pressure_sources.iloc[:0],
        estimates=result.estimates.iloc[:0],
        trends=result.trends.iloc[:0],
        extremes=result.extremes.iloc[:0],
        scenarios=None,
        attributions=(),
        findings=(),
    )
    study = _study(_Parsed(render_map(bare)))
    assert study["seasons"] == []
    assert study["fields"][0]["stations"] == []
    assert study["fields"][0]["estimate"] == []
    assert study["fields"][0]["extremes"]["levels"] == []
    assert study["scenarios"] == []
    assert study["arrays"]["trend_n_years"] == ""
