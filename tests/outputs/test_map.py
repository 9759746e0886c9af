"""The map page as a text: nothing to load, nothing to run but its own scripts, same bytes."""

from __future__ import annotations

import base64
import hashlib
import json
import math
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

from climarisk.outputs import background, coding, packing
from climarisk.outputs import map as map_module
from climarisk.outputs.map import render_map
from climarisk.outputs.packing import NO_BYTE, NO_FEET, NO_WORD
from climarisk.outputs.texts import CAUTIONS

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


def _array(parsed: _Parsed, name: str) -> np.ndarray:
    kind, text = _study(parsed)["arrays"][name]
    raw = base64.b64decode(text)
    coding, width = kind[:-2], int(kind[-1])
    if coding in ("h", "d"):
        raw = _uncoded(raw)
    values = _unrolled(raw) if coding else np.frombuffer(raw, "u1")
    if coding == "d":
        values = np.cumsum(values, dtype="u1")
    if width == 1:
        return values
    # All lower bytes, then all upper ones.
    return np.frombuffer(values.reshape(2, -1).T.tobytes(), {"u2": "<u2", "i2": "<i2"}[kind[-2:]])


def _uncoded(coded: bytes) -> bytes:
    """Prefix codes bit by bit, from the lengths of the codes in their head."""
    count = int.from_bytes(coded[:4], "little")
    lengths = [half for byte in coded[4:132] for half in (byte >> 4, byte & 15)]
    codes, code, last = {}, 0, 0
    for length, value in sorted((n, v) for v, n in enumerate(lengths) if n):
        code <<= length - last
        codes[f"{code:0{length}b}"] = value
        code, last = code + 1, length
    values, held = bytearray(), ""
    for bit in "".join(f"{byte:08b}" for byte in coded[132:]):
        held += bit
        if held in codes and len(values) < count:
            values.append(codes[held])
            held = ""
    assert len(values) == count
    return bytes(values)


def _unrolled(marks: bytes) -> np.ndarray:
    """A byte that comes twice is followed by a third that says how often more."""
    values, i = [], 0
    while i < len(marks):
        twice = i + 1 < len(marks) and marks[i] == marks[i + 1]
        values += [marks[i]] * (2 + marks[i + 2] if twice else 1)
        i += 3 if twice else 1
    return np.array(values, "u1")


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
    packed = _array(parsed, "hour_shortfall").reshape(6, 2, 12, 24)
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
    packed = _array(parsed, "altitude_hour_p90").reshape(6, 12, 24)
    base = _study(parsed)["altitudeBase"]
    for row in frame.itertuples():
        cell = packed[int(row.field[-1]), row.month - 1, row.hour]
        hundreds = NO_BYTE if np.isnan(row.p90) else int(np.floor(row.p90 / 100 + 0.5)) - base
        assert cell == hundreds


def test_altitudes_further_apart_than_bytes_can_say_are_sent_whole(result):
    frames = {}
    for name in ("distributions_monthly", "distributions_hourly", "distributions_seasonal"):
        frame = getattr(result, name).copy()
        far = (frame["variable"] == "density_altitude") & (frame["field"] == "field-4")
        frame.loc[far, ["p10", "p25", "p50", "p75", "p90", "p95"]] += 30_000.0
        frames[name] = frame
    parsed = _Parsed(render_map(replace(result, **frames)))
    packed = _array(parsed, "altitude_month_p90").reshape(6, 12)
    rows = frames["distributions_monthly"].query("variable == 'density_altitude'")
    for row in rows.itertuples():
        cell = packed[int(row.field[-1]), row.month - 1]
        if np.isnan(row.p90):
            assert cell == NO_WORD
        else:
            told = (_study(parsed)["altitudeBase"] + int(cell)) * 100
            assert told == np.floor(row.p90 / 100 + 0.5) * 100


def test_every_class_edge_is_a_level_of_the_shares(result, parsed):
    study = _study(parsed)
    edges = [*study["bands"], *study["edges"]["humidity"], *study["edges"]["nearSaturation"]]
    assert {*edges, study["planning"]["target"]} <= set(study["levels"])


def test_packed_usable_hours_are_those_of_the_frames_rounded_down(result, parsed):
    months = _array(parsed, "month_usable").reshape(6, 2, 12)
    offered = _array(parsed, "month_offered").reshape(6, 12)
    for row in result.risk_monthly.itertuples():
        cell = int(row.field[-1]), int(row.aircraft[-1]), row.month - 1
        known = not np.isnan(row.usable_hours)
        assert months[cell] == (int(row.usable_hours) if known else NO_WORD)
        assert offered[cell[0], cell[2]] == int(row.hours_offered)


def test_window_bits_are_the_hours_of_the_window(result, parsed):
    bits = np.unpackbits(_array(parsed, "window_bits").reshape(6, 36), axis=1)
    for row in result.risk_hourly.itertuples():
        place = (row.month - 1) * 24 + row.hour
        assert bits[int(row.field[-1]), place] == (row.in_window > 0)


def test_packed_margins_are_those_of_the_frame_rounded_down(result, parsed):
    checks = _study(parsed)["checks"]
    margins = _array(parsed, "check_margin_p10").reshape(6, 2, len(checks), 12)
    shares = _array(parsed, "check_shortfall").reshape(6, 2, len(checks), 12)
    levels = _study(parsed)["levels"]
    seen = np.zeros(margins.shape, bool)
    for row in result.margins_monthly.itertuples():
        who = int(row.field[-1]), int(row.aircraft[-1])
        cell = (*who, checks.index(row.check), row.month - 1)
        seen[cell] = True
        if np.isnan(row.margin_p10):
            assert margins[cell] == NO_BYTE
        else:
            assert margins[cell] == np.floor(row.margin_p10 * 100.0) + 100
        if np.isnan(row.shortfall):
            assert shares[cell] == NO_BYTE
        else:
            assert 0.0 <= row.shortfall - levels[shares[cell]] < 0.01
    # A check that a profile does not have is no data, not a pass.
    assert not seen.all()
    assert (margins[~seen] == NO_BYTE).all()
    assert (shares[~seen] == NO_BYTE).all()


def test_rows_in_another_order_give_the_same_page(result, page):
    shuffled = replace(
        result,
        risk_hourly=result.risk_hourly.sample(frac=1.0, random_state=3),
        distributions_monthly=result.distributions_monthly.iloc[::-1],
    )
    assert render_map(shuffled) == page


def test_missing_rows_are_no_data(result):
    fewer = replace(result, risk_hourly=result.risk_hourly.iloc[:0])
    packed = _array(_Parsed(render_map(fewer)), "hour_shortfall")
    assert len(packed) == 6 * 2 * 12 * 24
    assert (packed == NO_BYTE).all()


@given(hours=st.integers(1, 200_000), edge=st.integers(1, 999), data=st.data())
def test_share_codes_keep_the_band_and_the_whole_per_cent(hours, edge, data):
    exact = Fraction(data.draw(st.integers(0, hours)), hours)
    band = Fraction(edge, 1000)
    levels = packing.share_levels([float(band)])
    code = int(packing.share_codes(pd.Series([float(exact)]), levels)[0])
    level = Fraction(str(levels[code])) if code != 1 else Fraction(1, 10**9)

    def shown(share):
        return (share == 0, share < Fraction(1, 100), (share * 100 + Fraction(1, 2)).__floor__())

    assert (level >= band) == (exact >= band)
    assert shown(level)[:2] == shown(exact)[:2]
    if exact >= Fraction(1, 100):
        assert shown(level) == shown(exact)


@given(
    hours=st.integers(1, 700), days=st.sampled_from([28.25, 28.2667, 30.0, 31.0]), data=st.data()
)
def test_share_codes_keep_the_whole_days_that_are_usable(hours, days, data):
    share = data.draw(st.integers(0, hours)) / hours
    levels = packing.share_levels([0.01, 0.05, 0.2], [days])
    level = float(levels[int(packing.share_codes(pd.Series([share]), levels)[0])])
    shown = math.floor(days * (1.0 - level) - (1e-9 if level > 0 else 0.0))
    exact = Fraction(days) * (1 - Fraction(share))
    # A share whose days are whole to within rounding may fall on either side.
    assert shown == math.floor(exact) or abs(exact - round(exact)) < Fraction(1, 10**8)
    assert shown <= exact + Fraction(1, 10**8)


@given(st.lists(st.tuples(st.integers(0, 255), st.integers(1, 700)), max_size=30))
def test_runs_unroll_to_what_was_rolled(runs):
    values = np.concatenate([np.full(n, v, "u1") for v, n in runs] or [np.zeros(0, "u1")])
    assert _unrolled(packing.run_lengths(values).tobytes()).tolist() == values.tolist()


@given(
    st.lists(st.tuples(st.integers(0, 255), st.integers(1, 3000)), min_size=1, max_size=40),
    st.sampled_from(["uint8", "uint16", "int16"]),
)
def test_packed_numbers_come_back(runs, kind):
    flat = np.concatenate([np.full(n, v * 131, "i8") for v, n in runs])
    values = flat.astype(kind)
    page = _Parsed(_PACKED_PAGE.format(json.dumps({"arrays": {"some": packing.packed(values)}})))
    assert _array(page, "some").tolist() == values.tolist()


#: A page with packed arrays alone.
_PACKED_PAGE = "<script>{}</script>"


def test_codes_are_as_short_as_their_frequencies_allow():
    # Cover, T. M. and Thomas, J. A., Elements of Information Theory, 5.6, first example: weights
    # .25 .25 .2 .15 .15 take 2 2 2 3 3 bits (from memory).
    counts = np.zeros(256, int)
    counts[[7, 9, 30, 31, 255]] = [25, 25, 20, 15, 15]
    assert coding.code_lengths(counts)[[7, 9, 30, 31, 255]].tolist() == [2, 2, 2, 3, 3]
    # Fibonacci numbers give the longest codes of all: 39 bits without the limit.
    steep = np.zeros(256, int)
    steep[:40] = [round(((1 + 5**0.5) / 2) ** n / 5**0.5) for n in range(1, 41)]
    lengths = coding.code_lengths(steep)[:40].tolist()
    assert max(lengths) <= coding.LONGEST_CODE
    assert sum(Fraction(1, 2**n) for n in lengths) <= 1  # Kraft's inequality


def test_codes_keep_no_data_apart():
    levels = packing.share_levels([0.01, 0.05, 0.2])
    codes = packing.share_codes(pd.Series([np.nan, 0.0, 1e-9, 1.0]), levels)
    assert codes.tolist() == [NO_BYTE, 0, 1, len(levels) - 1]
    every_step = packing.share_levels([0.001 * n for n in range(11, 19)], [28.25, 30.0, 31.0])
    assert len(every_step) < NO_BYTE
    feet = packing.feet(pd.Series([np.nan, 0.0, -0.5, 8449.9]))
    assert feet.tolist() == [NO_FEET, 0, -1, 8449]


def _copied(result, times: int):
    """The fields of a result so many times, each copy under ids of its own."""
    copies = [
        {
            name: frame.assign(
                **{c: frame[c] + f"-{n}" for c in ("field", "first", "second") if c in frame}
            )
            for name, frame in vars(result).items()
            if isinstance(frame, pd.DataFrame) and {"field", "second"} & set(frame)
        }
        for n in range(times)
    ]
    frames = {
        name: pd.concat([copy[name] for copy in copies], ignore_index=True) for name in copies[0]
    }
    fields = tuple(replace(f, id=f"{f.id}-{n}") for n in range(times) for f in result.fields)
    return replace(result, fields=fields, **frames)


def test_size_of_a_large_study_stays_small():
    large = _copied(replace(sample_result(100, 5), scenarios=None), 5)
    assert len(large.fields) == 500
    assert len(render_map(large).encode()) < 3_000_000


def test_packed_trends_are_those_of_the_frame(result, parsed):
    slopes = _array(parsed, "trend_slope_per_decade").reshape(6, 3, 4)
    breaks = _array(parsed, "trend_break").reshape(6, 3, 4)
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
    central = _array(parsed, "month_central").reshape(6, 2, 12)
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
    assert background.drawn_longitudes(fields) == drawn
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
    assert study["arrays"]["trend_n_years"] == ["u1", ""]
