"""The page of a schedule: what it says, and that no text of a file becomes markup."""

from __future__ import annotations

import base64
import hashlib
import re
from html.parser import HTMLParser

import numpy as np
import pandas as pd
import pytest
from sample_result import HOSTILE, sample_result

from climarisk.outputs.schedule_page import MOST_FLIGHTS, render_schedule
from climarisk.outputs.texts import CAUTIONS
from climarisk.results import (
    SCHEDULE_DAYS_COLUMNS,
    SCHEDULE_FLIGHTS_COLUMNS,
    SCHEDULE_SEASONS_COLUMNS,
)

RESULT = sample_result(3, 2)
FIELDS, AIRCRAFT = [f.id for f in RESULT.fields], [a.id for a in RESULT.aircraft]
USUAL = {
    "operation": "takeoff", "when": "summer 2027, Mon-Fri", "clock_time": "14:00", "hours": "13",
    "mass_kg": 760.0, "flights": 20, "n_hours": 900, "n_years": 15, "coverage": 1.0,
    "shortfall": 0.25, "ci_low": 0.18, "ci_high": 0.31, "affected": 5.0,
    "limiting": "take-off to 50 ft", "holds_in": 0.9, "mass_that_holds_kg": 701.9,
    "useful_load_kg": 181.9, "outcome": "mass", "nearest_time": "11:00", "nearest_shift_h": -3.0,
    "nearest_shortfall": 0.04, "never_met": "no", "interval_note": "",
    "steep": "", "note": "", "unknown_flights": 0,
}  # fmt: skip
NOTHING = dict.fromkeys(
    ["shortfall", "ci_low", "ci_high", "affected", "mass_that_holds_kg", "useful_load_kg",
     "nearest_shift_h", "nearest_shortfall"], np.nan,
) | {"n_years": 0, "limiting": "", "outcome": "", "nearest_time": "", "never_met": ""}  # fmt: skip


def row(name, **more):
    return {"flight": name, "field": FIELDS[0], "aircraft": AIRCRAFT[0], **USUAL, **more}


def page(*rows, seasons=None, days=None):
    whole = ["", 60, 4, 12.34, 8.2, 17.1, 4.0, 21.0, 2019, 15, ""]
    days = days or [
        ["2027-07-18", "Sunday", 9, 1, 2.4, 0.3],
        ["2027-07-19", "Monday", 9, 0, 0.0, 0.0],
    ]
    frames = {
        "schedule_flights": pd.DataFrame(rows, columns=SCHEDULE_FLIGHTS_COLUMNS),
        "schedule_seasons": pd.DataFrame(seasons or [whole], columns=SCHEDULE_SEASONS_COLUMNS),
        "schedule_days": pd.DataFrame(days, columns=SCHEDULE_DAYS_COLUMNS),
    }
    settings = RESULT.settings
    return render_schedule(RESULT.title, RESULT.fields, RESULT.aircraft, settings, frames)


class Reader(HTMLParser):
    """Elements, attributes and text as a browser takes them."""

    def __init__(self, text):
        super().__init__()
        self.tags, self.attributes, self.parts = [], [], []
        self.feed(text)
        self.close()

    def handle_starttag(self, tag, attrs):
        self.tags.append(tag)
        self.attributes += attrs

    def handle_data(self, data):
        self.parts.append(data)

    @property
    def text(self):
        return " ".join(" ".join(self.parts).split())


def words(html):
    return Reader(html[html.index("<body>") :]).text.replace("\N{NO-BREAK SPACE}", " ")


def test_headline_says_how_many_of_how_many_with_interval_and_worst_year():
    text = words(page(row("A")))
    assert "Of 56 flights with figures about 12 would fall short." in text
    assert "90 % interval 8.2-18, with all flights sharing" in text
    assert "In the best year of the record 4.0, in the worst, 2019, 21." in text
    assert "4 flights without figures" in text and CAUTIONS[0] in text


def test_row_shows_share_interval_check_mass_and_nearest_time():
    text = words(page(row("A")))
    assert "25 % 18-31 % about 5.0 of 20 take-off to 50 ft 701 kg useful load 181 kg" in text
    assert "useful load 181 kg 11:00 3 h earlier, 4 %" in text
    assert "701 kg holds in 90 % of the hours; at 11:00 4 % fall short." in text


def test_flights_without_figures_are_never_counted_as_fine():
    text = words(page(row("A", affected=2.0, unknown_flights=12)))
    assert text.count("about 2.0 of 8 with figures, 12 without") == 2
    note = "the nearest time cannot be told"
    there = row("A", nearest_time="", nearest_shift_h=np.nan, nearest_shortfall=np.nan)
    assert "701 kg useful load 181 kg none within 12 h" in words(page(there))
    assert "181 kg cannot be told" in words(page(there | {"note": note}))


def test_steep_fields_and_notes_are_told_with_the_flight():
    name = RESULT.fields[0].name
    text = words(page(row("A", steep="yes", note="outside the hours window")))
    assert f"{name} (steep) 14:00: about 5.0 of 20" in text
    assert f"A {name} steep " in text and "needs a site-specific procedure" in text
    assert "20 flights outside the hours window" in text
    plain = words(page(row("A")))
    assert "(steep)" not in plain and "outside the hours" not in plain.split("Behind the")[0]


def test_flight_that_can_never_be_met_is_told_as_such():
    never = row(
        "N", shortfall=1.0, ci_low=1.0, ci_high=1.0, affected=20.0, never_met="yes",
        outcome="cannot be met", mass_that_holds_kg=np.nan, useful_load_kg=np.nan,
        nearest_time="", nearest_shift_h=np.nan, nearest_shortfall=np.nan,
    )  # fmt: skip
    text = words(page(never, row("A")))
    assert (
        "short in every hour of the record, take-off to 50 ft. No tabulated mass would do." in text
    )
    assert "Flights that can never be met at the mass planned" in text
    assert "cannot be met at any tabulated mass none within 12 h" in text
    assert "None: every flight with figures was possible" not in text
    assert "None: every flight with figures was possible" in words(page(row("A")))


def test_flight_without_figures_is_no_data_and_not_zero():
    html = page(row("U", **NOTHING))
    cell = re.search(r'<td class="none">([^<]*)</td>', html)
    assert cell and cell[1] == "no data"
    assert "No flight with figures falls short." in words(html)
    whole = ["", 20, 20, *[np.nan] * 5, pd.NA, 0, ""]
    text = words(
        page(
            row("U", **NOTHING),
            seasons=[whole],
            days=[["2027-07-18", "Sunday", 20, 20, np.nan, np.nan]],
        )
    )
    assert "None of the 20 flights has figures." in text and "about 0" not in text
    assert "20 flights without figures" in text


@pytest.mark.parametrize(
    ("affected", "told"),
    [(0.0, "about 0 of"), (0.04, "about < 0.1 of"), (0.25, "about 0.3 of"), (9.96, "about 10 of")],
)
def test_expected_numbers_are_rounded_and_small_ones_are_not_zero(affected, told):
    assert told in words(page(row("A", affected=affected)))


def test_interval_of_a_count_is_never_narrower_than_it_is():
    seasons = [["", 60, 0, 3.0, 1.26, 4.21, 0.0, 6.0, pd.NA, 7, "fewer than 10 years"]]
    text = words(page(row("A"), seasons=seasons))
    assert "90 % interval 1.2-4.3, with" in text and "1.2-4.3*" in text
    assert "in the worst, 6.0." in text


def test_days_and_seasons_stand_in_their_tables():
    seasons = [
        ["", 60, 4, 12.34, 8.2, 17.1, 4.0, 21.0, 2019, 15, ""],
        ["JJA", 40, 0, 11.0, 8.0, 16.0, 4.0, 19.0, 2019, 15, ""],
        ["DJF", 0, 0, *[np.nan] * 5, pd.NA, 0, ""],
    ]
    text = words(page(row("A"), seasons=seasons))
    assert (
        "2027-07-18 Sun 9 (1 unknown) 2.4 30 %" in text
        and "2027-07-19" not in text.split("By season")[0].split("Worst days")[1]
    )
    assert "JJA 40 11 8.0-16 4.0 19 (2019)" in text and "DJF" not in text


def test_many_rows_are_cut_and_the_cut_is_told():
    html = page(*[row(f"F{i}") for i in range(MOST_FLIGHTS + 5)])
    assert "The first 1,000 of 1,005 rows; the CSV files hold all." in words(html)
    assert "F999" in html and "F1004" not in html


def test_many_single_dates_are_counted():
    text = words(page(row("A", when="2027-07-01 2027-07-02 2027-07-03 2027-07-04")))
    assert "2027-07-01 and 3 dates more" in text


def test_no_text_of_a_file_becomes_markup():
    rows = [row(text, when=text, limiting=text) for text in HOSTILE]
    plain = [row("plain") for _ in HOSTILE]
    seasons = [["", 60, 4, 12.34, 8.2, 17.1, 4.0, 21.0, 2019, 15, ""]]
    seasons += [[text, 40, 0, 11.0, 8.0, 16.0, 4.0, 19.0, 2019, 15, ""] for text in HOSTILE]
    html = page(*rows, seasons=seasons)
    read = Reader(html)
    assert (
        read.tags
        == Reader(
            page(*plain, seasons=[s if i == 0 else ["x", *s[1:]] for i, s in enumerate(seasons)])
        ).tags
    )
    assert "script" not in read.tags and "img" not in read.tags
    assert not [name for name, _ in read.attributes if name.startswith("on") or name == "src"]
    for text in HOSTILE:
        assert " ".join(text.split()) in read.text


def test_page_is_whole_alone_and_lets_only_its_own_style_in():
    html = page(row("A"))
    look = re.search(r"<style>(.*?)</style>", html, re.DOTALL)[1]
    digest = base64.b64encode(hashlib.sha256(look.encode()).digest()).decode()
    policy = re.search(r'Content-Security-Policy" content="([^"]*)"', html)[1]
    assert "default-src 'none'" in policy.replace("&#x27;", "'") and digest in policy
    assert "script-src" not in policy and "@@" not in html
    assert not re.search(r"https?://|url\(|@import", html)
    assert html == page(row("A"))


def test_sample_result_of_a_run_renders():
    frames = {
        n: getattr(RESULT, n) for n in ("schedule_flights", "schedule_seasons", "schedule_days")
    }
    html = render_schedule(RESULT.title, RESULT.fields, RESULT.aircraft, RESULT.settings, frames)
    assert html.startswith("<!DOCTYPE html>") and "script" not in Reader(html).tags
