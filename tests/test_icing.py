"""Carburettor-icing bands: published readings, another geometry, other vapour, plain loops."""

from __future__ import annotations

import csv
import json
import math
import re
from calendar import monthrange
from importlib.resources import files
from itertools import pairwise
from pathlib import Path

import metpy.calc as mpcalc
import numpy as np
import pytest
import shapely
from hypothesis import given, settings
from hypothesis import strategies as st
from metpy.units import units

from climarisk import icing
from climarisk.atmosphere import P0_HPA, dew_point_from_rh_c
from climarisk.clock import hour_grid, in_window, local_clock
from climarisk.fields import Field
from climarisk.units import fahrenheit_to_celsius

REFERENCE = Path(__file__).parent / "reference" / "icing_check_values.csv"
with REFERENCE.open(encoding="utf-8", newline="") as stream:
    ROWS = list(csv.DictReader(stream))
DATA = json.loads((files("climarisk") / "icing_zones.json").read_text(encoding="utf-8"))
METHODS = ("chart", "physical")
NUMBER = r"(-?[\d.]+)"


def rows(*quantities):
    return [pytest.param(r, id=r["id"]) for r in ROWS if r["quantity"] in quantities]


def names(method, band):
    """Return the names of an array of bands, "" for none."""
    return {"" if i == icing.NONE else icing.bands(method)[i] for i in np.unique(band).tolist()}


# ---- published readings ----------------------------------------------------------------------


@pytest.mark.parametrize("row", rows("chart_band"))
def test_the_chart_gives_the_published_reading(row):
    values = re.fullmatch(rf"T={NUMBER} degC; Td={NUMBER} degC", row["inputs"]).groups()
    band = icing.zones(*map(float, values))
    assert icing.bands("chart")[int(band)] == row["expected"]


@pytest.mark.parametrize("row", rows("excess_cruise", "excess_descent"))
def test_the_excess_of_vapour_is_the_worked_figure(row):
    # The drops of METHODS 7: 27 K in cruise, 38 K in descent.
    drop = {"excess_cruise": 27.0, "excess_descent": 38.0}[row["quantity"]]
    values = re.fullmatch(rf"T={NUMBER} degC; Td={NUMBER} degC", row["inputs"]).groups()
    excess = icing.throat_excess(*map(float, values), P0_HPA, drop)
    assert excess * 1000 == pytest.approx(float(row["expected"]), abs=float(row["tolerance"]))


@pytest.mark.parametrize("row", rows("advisory"))
def test_the_chart_agrees_with_the_advisory(row):
    pattern = rf"T={NUMBER}\.\.{NUMBER} degF; RH={NUMBER}\.\.{NUMBER} %"
    warm = list(map(float, re.fullmatch(pattern, row["inputs"]).groups()))
    temperature, humidity = np.meshgrid(
        fahrenheit_to_celsius(np.linspace(*warm[:2], 31)), np.linspace(*warm[2:], 31)
    )
    band = icing.zones(temperature, dew_point_from_rh_c(temperature, humidity))
    found = names("chart", band)
    if row["expected"] == "possible":
        assert "" not in found
    elif row["expected"] == "serious":
        assert found <= set(icing.serious("chart"))
    else:
        assert not found & set(icing.serious("chart"))


def test_the_screening_agrees_with_the_advisory_where_it_is_meant_to():
    # US DOI SA 11-01 (stored copy): possible at 100 degF from 50 % relative humidity, severe at
    # 50-70 degF with more than 60 %, rare well below freezing.
    hot, humid = np.full(51, fahrenheit_to_celsius(100.0)), np.linspace(50, 100, 51)
    assert "" not in names(
        "physical", icing.screening(hot, dew_point_from_rh_c(hot, humid), P0_HPA)
    )
    mild, humid = np.meshgrid(fahrenheit_to_celsius(np.linspace(50, 70, 21)), np.arange(61, 101))
    band = icing.screening(mild, dew_point_from_rh_c(mild, humid), P0_HPA)
    assert names("physical", band) <= set(icing.serious("physical"))
    cold = np.linspace(-40, -18, 23)
    assert names("physical", icing.screening(cold, cold, P0_HPA)) == {""}


def test_the_screening_alone_calls_dry_heat_serious():
    # The advisory says "rare" below 25 % relative humidity at any temperature; a screening by
    # vapour alone does not know that, which its docstring states.
    warm, humid = np.meshgrid(np.arange(-40.0, 48.1, 0.25), np.arange(1.0, 25.0))
    dew = dew_point_from_rh_c(warm, humid)
    assert not names("chart", icing.zones(warm, dew)) & set(icing.serious("chart"))
    band = icing.screening(warm, dew, P0_HPA)
    against = np.isin(band, [icing.bands("physical").index(b) for b in icing.serious("physical")])
    assert warm[against].min() > 27.0
    assert against.mean() < 0.05


def test_every_reference_row_is_exercised():
    used = {"chart_band", "excess_cruise", "excess_descent", "advisory"}
    assert {row["quantity"] for row in ROWS} == used
    assert len({row["id"] for row in ROWS}) == len(ROWS)


# ---- the data file ---------------------------------------------------------------------------


def test_the_file_says_that_its_vertices_are_not_verified():
    assert DATA["verified"] is False
    assert icing.verified("chart") == "no"
    assert icing.verified("physical") == "not a published chart"
    assert icing.chart_source() == DATA["source"]
    for word in ("memory", "2 to 3 K", "digitised from the official chart"):
        assert word in DATA["source"]


def test_a_verified_file_is_shown_as_such(monkeypatch):
    chart = icing._chart()
    monkeypatch.setattr(icing, "_chart", lambda: icing._Chart(True, "", chart.zones))
    assert icing.verified("chart") == "yes"
    assert icing.verified("physical") == "not a published chart"


def test_zones_are_valid_and_each_lies_within_the_next():
    polygons = [shapely.Polygon(DATA["zones"][name]) for name in DATA["order"]]
    assert set(DATA["order"]) == set(DATA["zones"])
    assert all(p.is_valid and p.area > 0 for p in polygons)
    assert all(outer.covers(inner) for inner, outer in pairwise(polygons))
    # No dew point above the temperature.
    assert all(t >= dew for zone in DATA["zones"].values() for t, dew in zone)


@pytest.mark.parametrize("method", METHODS)
def test_every_band_has_words_and_the_serious_ones_say_so(method):
    bands = icing.bands(method)
    assert len(set(bands)) == len(bands)
    assert {b for b in bands if "serious" in icing.LABELS[b]} == set(icing.serious(method))
    assert set(icing.serious(method)) < set(bands)
    in_cruise = {b for b in bands if icing.LABELS[b] == "serious even in cruise"}
    assert set(icing.serious_in_cruise(method)) == in_cruise
    both = {*icing.bands("chart"), *icing.bands("physical")}
    assert both == set(icing.LABELS)
    assert len({icing.LABELS[b] for b in bands}) == len(bands)


@pytest.mark.parametrize("ask", [icing.bands, icing.serious])
def test_an_unknown_method_is_refused(ask):
    with pytest.raises(ValueError, match="'tarot' is unknown; allowed are chart, physical"):
        ask("tarot")


# ---- the chart against plain geometry --------------------------------------------------------


def holds(polygon, x, y):
    """Return whether a polygon holds a point, its boundary included, by counting crossings."""
    inside = False
    for (x1, y1), (x2, y2) in zip(polygon, polygon[1:] + polygon[:1], strict=True):
        turn = (x2 - x1) * (y - y1) - (y2 - y1) * (x - x1)
        if turn == 0 and min(x1, x2) <= x <= max(x1, x2) and min(y1, y2) <= y <= max(y1, y2):
            return True
        if (y1 > y) != (y2 > y) and (turn > 0) == (y2 > y1):
            inside = not inside
    return inside


def plain_band(t, dew):
    """Return the band of one point, -1 for none."""
    dew = min(dew, t)
    for index, name in enumerate(DATA["order"]):
        if holds(DATA["zones"][name], t, dew):
            return index
    return -1


def test_zones_equal_a_count_of_crossings():
    # Halves of a degree are exact in binary, so that a point on a slanted side is on it.
    t, dew = np.meshgrid(np.arange(-24.0, 46.0, 0.5), np.arange(-24.0, 46.0, 0.5))
    expected = [plain_band(x, y) for x, y in zip(t.ravel(), dew.ravel(), strict=True)]
    assert icing.zones(t, dew).ravel().tolist() == expected
    assert set(expected) == {-1, 0, 1, 2, 3}


def test_a_boundary_belongs_to_the_zone_that_comes_first():
    for index, name in enumerate(DATA["order"]):
        vertices = np.array(DATA["zones"][name], float)
        middles = (vertices + np.roll(vertices, -1, axis=0)) / 2
        band = icing.zones(*np.vstack([vertices, middles]).T)
        assert (band >= 0).all()
        assert (band <= index).all()


def test_saturated_air_counts_though_the_dew_point_reads_higher():
    t = np.array([-3.0, 10.0, 25.0])
    assert icing.zones(t, t + 0.5).tolist() == icing.zones(t, t).tolist() == [1, 0, 2]
    assert icing.screening(t, t + 0.5, 1000.0).tolist() == icing.screening(t, t, 1000.0).tolist()


def test_the_unknown_is_not_called_free_of_ice():
    t, dew, p = np.array([[10.0, np.nan, 10.0], [9.0, 5.0, np.nan], [990.0] * 3])
    assert icing.zones(t, dew).tolist() == [0, icing.UNKNOWN, icing.UNKNOWN]
    assert icing.screening(t, dew, p).tolist()[1:] == [icing.UNKNOWN, icing.UNKNOWN]
    assert icing.screening(10.0, 8.0, np.nan) == icing.UNKNOWN
    # Even where the throat cannot freeze, which needs no other value.
    assert icing.screening(45.0, np.nan, 990.0) == icing.UNKNOWN
    assert icing.zones(45.0, 10.0) == icing.NONE


# ---- the screening ---------------------------------------------------------------------------


def plain_screening(t, dew, p):
    """Return the band of one point by the sentence of METHODS 7 with MetPy's vapour."""

    def excess(drop):
        if t - drop > 0:
            return -99.0
        water = mpcalc.saturation_mixing_ratio(p * units.hPa, dew * units.degC, phase="liquid")
        ice = mpcalc.saturation_mixing_ratio(p * units.hPa, (t - drop) * units.degC, phase="solid")
        return 1000 * float(water - ice)

    cruise, descent = excess(27), excess(38)
    near = any(abs(x - limit) < 0.1 for x in (cruise, descent) for limit in (1.5, 4.0))
    degree = [0 if x < 1.5 else 1 if x < 4 else 2 for x in (cruise, descent)]
    name = {
        (2, 2): "serious_cruise",
        (1, 2): "possible_cruise_serious_descent",
        (0, 2): "serious_descent_only",
        (1, 1): "possible_cruise",
        (0, 1): "possible_descent_only",
        (0, 0): "",
    }[tuple(degree)]
    return name, near


def test_the_screening_equals_a_plain_one_with_another_librarys_vapour():
    # MetPy's saturation differs by up to 0.6 % (METHODS 3.1), so points within 0.1 g/kg of a
    # limit are left out; few are.
    draw, seen, left_out = np.random.default_rng(5), set(), 0
    for _ in range(250):
        t = draw.uniform(-15, 42)
        dew, p = t - draw.gamma(2.0, 4.0), draw.uniform(700, 1030)
        expected, near = plain_screening(t, dew, p)
        left_out += near
        if not near:
            band = int(icing.screening(t, dew, p))
            assert ("" if band < 0 else icing.bands("physical")[band]) == expected, (t, dew, p)
            seen.add(expected)
    assert seen == {"", *icing.bands("physical")}
    assert left_out < 60


@pytest.mark.parametrize("t", [-40.0, -20.0, -5.0, 0.0])
def test_the_excess_over_ice_is_that_of_another_library(t):
    # MetPy 1.7 (Ambaum 2020); 0.6 % is the spread of the formulas in METHODS 3.1.
    excess = icing.throat_excess(t + 60.0, 12.0, 900.0, 60.0)
    water = mpcalc.saturation_mixing_ratio(900 * units.hPa, 12 * units.degC, phase="liquid")
    ice = mpcalc.saturation_mixing_ratio(900 * units.hPa, t * units.degC, phase="solid")
    assert excess == pytest.approx(float(water - ice), abs=0.006 * float(water))


def test_no_ice_above_freezing_and_ice_at_it():
    # METHODS 7: possible if the throat is at or below 0 degC.
    assert icing.throat_excess(27.0, 20.0, 1000.0, 27.0) > 0
    assert icing.throat_excess(27.001, 20.0, 1000.0, 27.0) == -np.inf
    assert icing.screening(38.0, 30.0, 1000.0) >= 0
    assert icing.screening(38.001, 30.0, 1000.0) == icing.NONE


@settings(deadline=None, max_examples=60)
@given(st.floats(-30, 45), st.floats(0, 40), st.floats(600, 1050))
def test_the_throat_of_a_descent_is_never_safer(t, spread, p):
    cruise = icing.throat_excess(t, t - spread, p, 27.0)
    assert icing.throat_excess(t, t - spread, p, 38.0) >= cruise


# ---- the tables ------------------------------------------------------------------------------

FIELD = Field("F", "Field", 68.0, 20.0, 500.0, "Europe/Stockholm")  # polar night and day
COLUMNS = ["n_hours", "n_years", "coverage", "method", "verified", "band", "share"]


@pytest.fixture(scope="module")
def case():
    """Return three gappy years at three levels: temperature, dew point, pressure, clock, light."""
    grid = hour_grid(2019, 2021)
    clock = local_clock(FIELD, grid, 2019, 2021)
    daylight = in_window("daylight", FIELD, grid, clock)
    draw, n = np.random.default_rng(8), len(grid)
    t = 8 - 14 * np.cos(2 * np.pi * np.arange(n) / 8766) + draw.normal(0, 4, n)
    dew = np.round(t - draw.gamma(2.0, 2.5, n), 1)
    t[draw.random(n) < 0.05] = np.nan
    dew[draw.random(n) < 0.05] = np.nan
    dew[(clock.year == 1) & (clock.month == 6) & (clock.day_of_month > 20)] = np.nan
    t[(clock.month == 4) & (clock.hour == 12)] = np.nan
    p = np.round(draw.normal(950, 5, n), 1)
    p[(clock.year == 2) & (clock.month == 8)] = np.nan
    levels = t + np.array([[-1.7], [0.1], [1.6]])
    return levels, dew[None, :], p, clock, daylight


def plain_physical(t, dew, p):
    """Return the band of one point by METHODS 3.1 (Buck 1981, WMO-8 over ice) and 7."""

    def ratio(e):
        return 621.98 * e / (p - e)

    dew = min(dew, t)
    vapour = ratio(6.1121 * math.exp(17.502 * dew / (240.97 + dew)))
    degrees = []
    for drop in (27, 38):
        throat = t - drop
        frozen = throat <= 0 and vapour - ratio(
            6.112 * math.exp(22.46 * throat / (272.62 + throat))
        )
        degrees.append(2 if frozen and frozen >= 4 else 1 if frozen and frozen >= 1.5 else 0)
    order = [[2, 2], [1, 2], [0, 2], [1, 1], [0, 1]]
    return order.index(degrees) if degrees in order else -1


def plain_tables(case, method):
    """Return the daylight hours used and the coverage, each by (month, hour).

    The hours as [(year, [band of each level]), ...], the coverage as (counting, lit) years.
    """
    t, dew, p, clock, daylight = case
    known = np.isfinite(t[0]) & np.isfinite(dew[0]) & clock.in_period
    if method == "physical":
        known &= np.isfinite(p)
    cells = list(zip(clock.year.tolist(), clock.month.tolist(), clock.hour.tolist(), strict=True))
    days: dict = {}
    for cell, ok in zip(cells, known.tolist(), strict=True):
        days[cell] = days.get(cell, 0) + ok
    counting = {c for c, n in days.items() if 5 * n >= 4 * monthrange(2019 + c[0], c[1] + 1)[1]}
    table: dict = {}
    for i in np.flatnonzero(known & daylight).tolist():
        y, m, h = cells[i]
        if cells[i] not in counting:
            continue
        air = float(dew[0, i]), float(p[i])
        if method == "chart":
            found = [plain_band(x, air[0]) for x in t[:, i].tolist()]
        else:
            found = [plain_physical(x, *air) for x in t[:, i].tolist()]
        table.setdefault((m + 1, h), []).append((y, found))
    lit = {cells[i] for i in np.flatnonzero(daylight & clock.in_period).tolist()}
    coverage: dict = {}
    for y, m, h in lit:
        counted, offered = coverage.get((m + 1, h), (0, 0))
        coverage[m + 1, h] = counted + ((y, m, h) in counting), offered + 1
    return table, coverage


def plain_rows(hours, method):
    """Return (band, hours, years, share) of each band of one cell."""
    years = {y for y, _ in hours}
    total = 3 * len(hours)
    return [
        (name, len(hours), len(years), sum(f.count(i) for _, f in hours) / total)
        for i, name in enumerate(icing.bands(method))
    ]


@pytest.mark.parametrize("method", METHODS)
def test_tables_equal_a_plain_loop(case, method):
    monthly, hourly = icing.icing_tables(*case, method)
    by_cell, of_cell = plain_tables(case, method)
    by_month: dict = {}
    for (m, _), hours in by_cell.items():
        by_month.setdefault((m,), []).extend(hours)
    of_month: dict = {}
    for (m, _), (counting, lit) in of_cell.items():
        before = of_month.get((m,), (0, 0))
        of_month[m,] = before[0] + counting, before[1] + lit
    for table, keys, expected, coverage in (
        (monthly, ["month"], by_month, of_month),
        (hourly, ["month", "hour"], by_cell, of_cell),
    ):
        assert list(table.columns) == [*keys, *COLUMNS]
        got: dict = {}
        for row in table.to_dict("records"):
            if row["n_hours"]:
                figures = row["band"], row["n_hours"], row["n_years"], row["share"]
                got.setdefault(tuple(row[k] for k in keys), []).append(figures)
        assert got == {cell: plain_rows(hours, method) for cell, hours in expected.items()}
        covered = table.dropna(subset="coverage").set_index(keys)["coverage"]
        assert {k if isinstance(k, tuple) else (k,): v for k, v in covered.items()} == {
            k: counting / lit for k, (counting, lit) in coverage.items()
        }
        assert set(table["method"]) == {method}
        assert set(table["verified"]) == {icing.verified(method)}
        assert table.groupby(keys, sort=False).size().eq(len(icing.bands(method))).all()
    assert len(monthly) == 12 * len(icing.bands(method))
    assert len(hourly) == 288 * len(icing.bands(method))
    assert monthly.groupby("month")["share"].sum().max() <= 1 + 1e-12
    assert {len({y for y, _ in hours}) for hours in by_cell.values()} >= {1, 2, 3}


@pytest.mark.parametrize("method", METHODS)
def test_hours_that_do_not_count_leave_no_share(case, method):
    monthly, hourly = icing.icing_tables(*case, method)
    for table in (monthly, hourly):
        empty = table["n_hours"] == 0
        assert table.loc[empty, "share"].isna().all()
        assert table.loc[~empty, "share"].between(0, 1).all()
    # May at noon was never measured: lit, but no coverage.
    noon = hourly[(hourly["month"] == 5) & (hourly["hour"] == 12)]
    assert (noon["coverage"] == 0).all() and (noon["n_hours"] == 0).all()
    # December at midnight is never lit: there is nothing to cover.
    night = hourly[(hourly["month"] == 12) & (hourly["hour"] == 0)]
    assert night["coverage"].isna().all() and (night["n_hours"] == 0).all()


def test_the_chart_needs_no_pressure_and_the_screening_does(case):
    t, dew, p, clock, daylight = case
    without = np.full_like(p, np.nan)
    charts = [icing.icing_tables(t, dew, x, clock, daylight, "chart")[0] for x in (p, without)]
    assert charts[0].equals(charts[1])
    physical, hourly = icing.icing_tables(t, dew, without, clock, daylight, "physical")
    assert (physical["n_hours"] == 0).all() and physical["share"].isna().all()
    assert hourly["share"].isna().all()
