"""What the page's scripts get of the planning answers: rounded so that nothing looks better."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from sample_planning import EMPTY_KG, ICING_BANDS
from sample_result import EMPTY_FIELD, sample_result
from test_map import _array, _Parsed, _study

from climarisk.outputs.map import render_map
from climarisk.outputs.map_arrays import BELOW_ONE, good_share_codes
from climarisk.outputs.map_overviews import MOST_FLIGHTS, difference_pairs, told_difference
from climarisk.outputs.map_planning import (
    CANNOT_BE_MET,
    MAXIMUM_MASS,
    load_codes,
    load_steps_kg,
)
from climarisk.outputs.packing import NO_BYTE, NO_FEET, NO_WORD

AIRCRAFT = sample_result(1, 1).aircraft[0]


@pytest.fixture(scope="module")
def result():
    return sample_result()


@pytest.fixture(scope="module")
def parsed(result) -> _Parsed:
    return _Parsed(render_map(result))


def test_every_load_is_sent_as_the_whole_steps_below_it(result, parsed):
    codes = _array(parsed, "load_hour").reshape(6, 2, 12, 24)
    seen = set()
    for row in result.weights_hourly.itertuples():
        code = codes[int(row.field[-1]), int(row.aircraft[-1]), row.month - 1, row.hour]
        seen.add(row.outcome)
        if row.outcome == "mass":
            assert code <= row.useful_load_kg < code + 1  # 240 kg at most: steps of 1 kg
        else:
            special = {"": NO_BYTE, "maximum mass": MAXIMUM_MASS, "cannot be met": CANNOT_BE_MET}
            assert code == special[row.outcome]
    assert seen == {"", "mass", "maximum mass", "cannot be met"}


def test_ends_of_the_intervals_are_useful_loads(result, parsed):
    low, high = (_array(parsed, f"load_month_{end}").reshape(6, 2, 12) for end in ("low", "high"))
    for row in result.weights_monthly.itertuples():
        cell = int(row.field[-1]), int(row.aircraft[-1]), row.month - 1
        for codes, end in ((low, row.ci_low_kg), (high, row.ci_high_kg)):
            expected = NO_BYTE if math.isnan(end) else math.floor(end - EMPTY_KG)
            assert codes[cell] == expected


@settings(deadline=None)  # the first example waits for imports
@given(st.floats(0.0, 5000.0), st.floats(1.0, 5000.0), st.booleans())
def test_steps_are_never_above_the_load_and_fit_into_their_codes(load, span, large):
    profile = replace(AIRCRAFT, empty_kg=100.0, maximum_kg=100.0 + span)
    load = min(load, span)
    for step in load_steps_kg(profile, large=large):
        code = int(load_codes(pd.Series([load]), pd.Series(["mass"]), np.array([step]))[0])
        assert code < CANNOT_BE_MET
        assert code * step <= load < (code + 1) * step


def test_hours_that_work_are_those_of_the_frame_by_both_clocks(result, parsed):
    planning = _study(parsed)["planning"]
    hours, clocks = (_array(parsed, f"window_{name}") for name in ("hours", "clock_hours"))
    for n, row in enumerate(result.windows_monthly.itertuples()):
        if row.n_years == 0:
            assert hours[n] == clocks[n] == NO_WORD
            continue
        assert planning["windowHours"][hours[n]] == row.hours
        assert planning["windowClocks"][clocks[n]] == row.clock_hours
    for name in ("windowHours", "windowClocks"):
        assert len(set(planning[name])) == len(planning[name])  # told once


def test_civil_clock_may_have_more_readings_than_a_byte_can_count(result):
    windows = result.windows_monthly.copy()
    windows["clock_hours"] = [f"{n % 24:02d}:{n // 24:02d}-23:59" for n in range(len(windows))]
    page = _Parsed(render_map(replace(result, windows_monthly=windows)))
    words, places = _study(page)["planning"]["windowClocks"], _array(page, "window_clock_hours")
    for n, row in enumerate(windows.itertuples()):
        if row.n_years:
            assert words[places[n]] == row.clock_hours


def test_usable_hours_are_rounded_down_and_their_interval_outwards(result, parsed):
    names = ("usable_hours", "usable_low", "usable_high", "daylight_hours")
    arrays = {name: _array(parsed, f"daylight_{name}") for name in names}
    for n, row in enumerate(result.windows_monthly.itertuples()):
        for name in names:
            value = getattr(row, name)
            toward = math.ceil if name == "usable_high" else math.floor
            assert arrays[name][n] == (NO_WORD if math.isnan(value) else toward(value))


def test_ice_serious_even_in_cruise_is_told_by_the_hour(result, parsed):
    levels = _study(parsed)["levels"]
    codes = _array(parsed, "icing_hour").reshape(6, 12, 24)
    frame = result.icing_hourly[result.icing_hourly["band"] == "serious_any_power"]
    assert "serious_any_power" in ICING_BANDS
    for key, rows in frame.groupby(["field", "month", "hour"]):
        code = codes[int(key[0][-1]), key[1] - 1, key[2]]
        if rows["share"].isna().any():
            assert code == NO_BYTE
            continue
        share = rows["share"].sum()
        assert levels[code] <= share + 1e-12
        assert code + 1 == len(levels) or share < levels[code + 1] + 1e-12


def test_icing_and_power_say_how_they_were_judged(result, parsed):
    planning = _study(parsed)["planning"]
    assert planning["icing"]["verified"] == "no"
    assert len(planning["icing"]["bands"]) == len(ICING_BANDS)
    assert planning["engines"] == list(result.power_monthly["method"].unique())
    none = replace(
        result,
        icing_monthly=result.icing_monthly.iloc[:0],
        icing_hourly=result.icing_hourly.iloc[:0],
    )
    assert _study(_Parsed(render_map(none)))["planning"]["icing"] is None


# Rule of the outputs: a tenth below 10 h, whole hours from there on, the ends outwards; told apart
# where the unrounded interval leaves zero out.
@pytest.mark.parametrize(
    ("exact", "told"),
    [
        ((3.824, 1.21, 6.48), (38, 12, 65, 1)),
        ((0.3, -0.04, 0.61), (3, -1, 7, 0)),
        ((0.2, 0.004, 0.39), (2, 0, 4, 1)),  # the lower end rounds to 0 and is not
        ((0.2, 0.0, 0.4), (2, 0, 4, 0)),
        ((0.01, -0.2, 0.21), (0, -2, 3, 2)),  # not nothing, though it rounds to it
        ((0.0, -0.2, 0.2), (0, -2, 2, 0)),
        ((9.96, 9.96, 10.04), (100, 99, 110, 1)),
        ((10.46, -10.2, 31.1), (100, -110, 320, 0)),
        ((21.5, 12.9, 30.1), (220, 120, 310, 1)),
    ],
)
def test_differences_are_rounded_by_the_rule_of_the_outputs(exact, told):
    assert tuple(round(value) for value in told_difference(*exact)) == told


def test_difference_without_an_interval_is_not_told_apart():
    mean, low, high, kind = told_difference(4.0, math.nan, math.nan)
    assert (mean, kind) == (40, 0)
    assert math.isnan(low) and math.isnan(high)


@pytest.mark.parametrize("swapped", [False, True])
def test_a_difference_is_turned_with_its_pair(result, swapped):
    frame = result.base_differences
    if swapped:
        frame = frame.rename(columns={"first": "second", "second": "first"})
    page = _Parsed(render_map(replace(result, base_differences=frame)))
    pairs = difference_pairs(result)
    assert len(pairs) == 10  # of five fields with figures
    names = ("difference", "difference_low", "difference_high", "difference_kind")
    arrays = [_array(page, name).reshape(len(pairs), 3) for name in names]
    for row in frame.itertuples():
        one, other = int(row.first[-1]), int(row.second[-1])
        assert (one > other) == swapped
        cell = pairs.index((min(one, other), max(one, other)))
        who = ["", "aircraft-0", "aircraft-1"].index(row.aircraft)
        figures = told_difference(row.difference_hours_month, row.ci_low, row.ci_high)
        mean, low, high, kind = (round(value) for value in figures)
        expected = (-mean, -high, -low, kind + 4) if swapped else (mean, low, high, kind)
        assert tuple(array[cell, who] for array in arrays) == expected
    assert (arrays[0] != NO_FEET).all()


@pytest.mark.parametrize(
    ("share", "code"),
    [
        (0.0, 0),
        (1e-6, BELOW_ONE),
        (0.00999, BELOW_ONE),
        (0.01, 1),
        (0.29, 29),  # 0.29 * 100 is below 29 as a float
        (0.939, 93),
        (0.995, 99),
        (1.0 - 1e-12, 99),
        (1.0, 100),
        (math.nan, NO_BYTE),
    ],
)
def test_shares_of_good_things_are_rounded_down_and_only_all_is_all(share, code):
    assert good_share_codes(pd.Series([share], dtype=float))[0] == code


def test_days_with_a_run_are_rounded_down(result, parsed):
    codes = _array(parsed, "run_days")
    assert list(codes) == list(good_share_codes(result.windows_monthly["days_with_run"]))
    assert 99 in codes and 100 in codes


def test_field_without_data_has_no_rank_and_no_hours(result, parsed):
    place = int(EMPTY_FIELD[-1]) * 3
    assert _array(parsed, "base_rank")[place] == NO_WORD
    assert _array(parsed, "base_usable_hours_month")[place] == NO_WORD


def test_the_worst_flights_are_sent(result):
    flights = pd.concat([result.schedule_flights] * 50, ignore_index=True)
    study = _study(_Parsed(render_map(replace(result, schedule_flights=flights))))
    schedule = study["planning"]["schedule"]
    assert schedule["total"] == len(flights)
    assert len(schedule["flights"]) == MOST_FLIGHTS
    column = schedule["columns"]["flights"].index("shortfall")
    sent = [row[column] for row in schedule["flights"]]
    assert sent == sorted(sent, reverse=True)
    worst = np.sort(flights["shortfall"].dropna())[::-1][:MOST_FLIGHTS]
    assert sent == pytest.approx(worst, rel=1e-7)
    assert schedule["never"] == (flights["never_met"] == "yes").sum()


def test_band_serious_in_cruise_has_one_name_in_either_method(result, parsed):
    assert _study(parsed)["planning"]["icing"]["bands"][0] == "serious even in cruise"
    names = {"serious_any_power": "serious_cruise"}
    other = {
        name: getattr(result, name).replace({"band": names}).assign(method="physical")
        for name in ("icing_monthly", "icing_hourly")
    }
    page = _Parsed(render_map(replace(result, **other)))
    assert _study(page)["planning"]["icing"]["bands"][0] == "serious even in cruise"


def test_study_without_planning_answers_is_a_page_all_the_same(result):
    names = [
        *("weights_monthly", "weights_hourly", "weights_seasonal", "windows_monthly"),
        *("icing_monthly", "icing_hourly", "power_monthly", "bases", "base_differences"),
    ]
    none = {name: getattr(result, name).iloc[:0] for name in names}
    schedule = dict.fromkeys(["schedule_flights", "schedule_seasons", "schedule_days"])
    study = _study(_Parsed(render_map(replace(result, **none, **schedule))))
    assert study["planning"]["hasWeights"] is False
    assert study["planning"]["hasBases"] is False
    assert study["planning"]["schedule"] is None
