"""Percentiles, completeness and coverage of the month and month x hour cells."""

import csv
import re
from calendar import monthrange
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from climarisk.climatology import (
    completeness,
    hourly_distribution,
    monthly_distribution,
    segment_quantiles,
    window_cells,
    window_coverage,
)
from climarisk.clock import hour_grid, in_window, local_clock
from climarisk.fields import Field

with (Path(__file__).parent / "reference" / "statistics_check_values.csv").open(
    encoding="utf-8", newline=""
) as stream:
    ROWS = list(csv.DictReader(stream))

STATISTICS = ["mean", "p01", "p05", "p10", "p25", "p50", "p75", "p90", "p95", "p99"]


def clock_of(first_year, last_year, zone="Etc/GMT", **where):
    field = Field("F", "Field", where.get("latitude", 0.0), 0.0, 0.0, zone)
    grid = hour_grid(first_year, last_year)
    return field, grid, local_clock(field, grid, first_year, last_year)


def at(clock, year=None, month=None, hour=None, days=None):
    """Return which hours belong to a year, month, hour and the first so many days of the month."""
    chosen = clock.in_period.copy()
    if year is not None:
        chosen &= clock.year == year - clock.first_year
    if month is not None:
        chosen &= clock.month == month - 1
    if hour is not None:
        chosen &= clock.hour == hour
    if days is not None:
        chosen &= clock.day_of_month <= days
    return chosen


def series(clock, *parts):
    """Return a series with the values of the (mask, value) parts and no others."""
    values = np.full(len(clock.hour), np.nan)
    for mask, value in parts:
        values[mask] = value
    return values


def cell(table, month, hour):
    return table[(table["month"] == month) & (table["hour"] == hour)].iloc[0]


@pytest.mark.parametrize("row", ROWS, ids=lambda row: row["id"])
def test_published_value(row):
    numbers = np.array(re.search(r"x=([\d.,]+)", row["inputs"]).group(1).split(","), float)
    p = float(re.search(r"p=([\d.]+)", row["inputs"]).group(1))
    got = segment_quantiles(numbers, np.zeros(len(numbers), int), 1, np.array([p]))[0, 0]
    assert got == pytest.approx(float(row["expected"]), rel=0, abs=float(row["tolerance"]))


@settings(deadline=None)
@given(
    st.lists(st.tuples(st.integers(0, 4), st.floats(-1e5, 1e5)), min_size=1, max_size=120),
    st.lists(st.floats(0.0, 1.0), min_size=1, max_size=9),
)
def test_quantiles_of_each_cell_equal_the_library(pairs, probabilities):
    # numpy's median_unbiased is Hyndman and Fan's definition 8 (numpy documentation).
    cells, values = np.array([c for c, _ in pairs]), np.array([v for _, v in pairs])
    got = segment_quantiles(values, cells, 6, np.array(probabilities))
    for c in range(6):
        own = values[cells == c]
        if len(own):
            expected = np.quantile(own, probabilities, method="median_unbiased")
            np.testing.assert_allclose(got[c], expected, rtol=1e-12, atol=1e-9)
        else:
            assert np.isnan(got[c]).all()


def test_quantiles_of_nothing_are_nothing():
    got = segment_quantiles(np.empty(0), np.empty(0, int), 3, np.array([0.1, 0.9]))
    assert got.shape == (3, 2) and np.isnan(got).all()


def test_quantiles_of_one_value_are_that_value():
    got = segment_quantiles(np.array([7.5]), np.array([0]), 1, np.array([0.01, 0.5, 0.99]))
    assert got.tolist() == [[7.5, 7.5, 7.5]]


@pytest.mark.parametrize(
    ("year", "month", "too_few", "enough"),
    [
        (2019, 1, 24, 25),  # 0.8 x 31 = 24.8
        (2019, 2, 22, 23),  # 0.8 x 28 = 22.4
        (2020, 2, 23, 24),  # 0.8 x 29 = 23.2, leap February
        (2019, 4, 23, 24),  # 0.8 x 30 = 24 exactly
    ],
)
def test_completeness_edge_of_a_month(year, month, too_few, enough):
    _, _, clock = clock_of(year, year)
    short = hourly_distribution(
        series(clock, (at(clock, month=month, hour=14, days=too_few), 1.0)), clock
    )
    assert cell(short, month, 14)[["n_hours", "n_years", "coverage"]].tolist() == [0, 0, 0.0]
    assert cell(short, month, 14)[STATISTICS].isna().all()
    full = hourly_distribution(
        series(clock, (at(clock, month=month, hour=14, days=enough), 1.0)), clock
    )
    assert cell(full, month, 14)[["n_hours", "n_years", "coverage"]].tolist() == [enough, 1, 1.0]
    assert (cell(full, month, 14)[STATISTICS] == 1.0).all()


@settings(deadline=None, max_examples=40)
@given(st.integers(0, 2**32 - 1), st.floats(0.6, 1.0))
def test_completeness_agrees_with_a_plain_count(seed, share):
    _, _, clock = clock_of(2019, 2020)
    known = np.random.default_rng(seed).random(len(clock.hour)) < share
    got = completeness(known, clock)
    days = {}
    for i in np.flatnonzero(known & clock.in_period):
        key = int(clock.year[i]), int(clock.month[i]), int(clock.hour[i])
        days[key] = days.get(key, 0) + 1
    counting = {
        (y, m, h) for (y, m, h), n in days.items() if 5 * n >= 4 * monthrange(2019 + y, m + 1)[1]
    }
    assert {tuple(int(x) for x in key) for key in np.argwhere(got.counts)} == counting
    used = [
        bool(known[i] and clock.in_period[i])
        and (clock.year[i], clock.month[i], clock.hour[i]) in counting
        for i in range(len(known))
    ]
    np.testing.assert_array_equal(got.used, used)


def test_only_counting_years_are_pooled():
    _, _, clock = clock_of(2018, 2020)
    values = series(
        clock,
        (at(clock, 2018, 7, 12), 10.0),
        (at(clock, 2019, 7, 12, days=10), 1000.0),
        (at(clock, 2020, 7, 12), 20.0),
    )
    row = cell(hourly_distribution(values, clock), 7, 12)
    assert (row["n_hours"], row["n_years"], row["coverage"]) == (62, 2, pytest.approx(2 / 3))
    assert row["mean"] == 15.0
    assert row["p99"] == 20.0


def test_empty_cell_has_no_figure_and_is_never_zero():
    _, _, clock = clock_of(2019, 2020)
    nothing = np.full(len(clock.hour), np.nan)
    inside = np.ones(len(clock.hour), bool)
    for table in (
        hourly_distribution(nothing, clock),
        monthly_distribution(nothing, clock, inside),
    ):
        assert table[STATISTICS].isna().all().all()
        assert (table[["n_hours", "n_years", "coverage"]] == 0).all().all()


def test_hours_outside_the_period_do_not_enter():
    _, _, clock = clock_of(2019, 2019)
    values = np.where(clock.in_period, 1.0, 999.0)
    table = hourly_distribution(values, clock)
    assert (table["mean"] == 1.0).all()
    assert table["n_hours"].sum() == 8760


def test_half_hour_zone_counts_each_local_day_once():
    # India, UTC+5:30 (IANA): the hours of a local year are 8760 there as elsewhere.
    _, _, clock = clock_of(2019, 2019, "Asia/Kolkata")
    table = hourly_distribution(np.ones(len(clock.hour)), clock)
    assert table["n_hours"].sum() == 8760
    assert (table["coverage"] == 1.0).all()
    assert cell(table, 2, 0)["n_hours"] == 28


def test_monthly_figures_pool_the_cells_of_the_window_alone():
    field, grid, clock = clock_of(2019, 2019)
    values = series(
        clock,
        (at(clock, hour=10), 10.0),
        (at(clock, hour=11), 20.0),
        (at(clock, hour=3), 999.0),
    )
    table = monthly_distribution(values, clock, in_window((10, 11), field, grid, clock))
    assert (table["mean"] == 15.0).all()
    assert table["n_hours"].tolist() == [2 * monthrange(2019, m)[1] for m in range(1, 13)]
    assert (table["coverage"] == 1.0).all()


def test_monthly_coverage_is_the_share_of_the_windows_cells_that_count():
    field, grid, clock = clock_of(2018, 2019)
    # Of the four (year, hour) cells of July: one full, one too short, two without a value.
    values = series(clock, (at(clock, 2018, 7, 10), 1.0), (at(clock, 2019, 7, 10, days=20), 1.0))
    table = monthly_distribution(values, clock, in_window((10, 11), field, grid, clock))
    july = table[table["month"] == 7].iloc[0]
    assert (july["n_hours"], july["n_years"], july["coverage"]) == (31, 1, 0.25)


def test_monthly_coverage_of_a_month_outside_the_window_is_nothing():
    # Polar night: no hour of December is daylight at 85 N, so nothing counts and nothing is told.
    field, grid, clock = clock_of(2019, 2019, latitude=85.0)
    inside = in_window("daylight", field, grid, clock)
    table = monthly_distribution(np.ones(len(grid)), clock, inside)
    december, june = table.iloc[11], table.iloc[5]
    assert (december["n_hours"], december["n_years"], december["coverage"]) == (0, 0, 0.0)
    assert np.isnan(december["mean"])
    assert (june["n_hours"], june["coverage"]) == (720, 1.0)


def test_completeness_looks_at_all_days_of_a_cell_also_where_the_window_cuts_them():
    # Hour 10 in the window on the first five days only: the cell counts by its 31 days.
    _, _, clock = clock_of(2019, 2019)
    inside = at(clock, hour=10, days=5)
    complete = monthly_distribution(np.ones(len(inside)), clock, inside).iloc[0]
    assert (complete["n_hours"], complete["n_years"], complete["coverage"]) == (5, 1, 1.0)
    five_days = monthly_distribution(series(clock, (inside, 1.0)), clock, inside).iloc[0]
    assert (five_days["n_hours"], five_days["n_years"], five_days["coverage"]) == (0, 0, 0.0)


def test_window_coverage_is_the_share_of_counting_cells():
    counts = np.zeros((3, 12, 24), bool)
    window = np.zeros((3, 12, 24), bool)
    window[:, 0, [8, 9]] = True
    counts[0, 0, [8, 9]] = True
    counts[1, 0, 9] = True
    counts[2, 0, 3] = True  # outside the window
    coverage = window_coverage(counts, window)
    assert coverage[0] == 0.5
    assert (coverage[1:] == 0).all()


def test_window_cells_marks_what_the_window_touches():
    _, _, clock = clock_of(2019, 2020)
    one = np.flatnonzero(at(clock, 2020, 2, 17, days=1))[:1]
    inside = np.zeros(len(clock.hour), bool)
    inside[one] = True
    cells = window_cells(inside, clock)
    assert np.argwhere(cells).tolist() == [[1, 1, 17]]


# ---- levels of the transfer error ------------------------------------------------------------


def test_distribution_with_levels_is_that_of_all_levels_together():
    field, grid, clock = clock_of(2019, 2020)
    draw = np.random.default_rng(8)
    central = draw.normal(3000, 800, len(clock.hour))
    central[draw.random(len(central)) < 0.05] = np.nan
    levels = central + np.array([-300.0, -50.0, 50.0, 300.0])[:, None]
    error = np.full(len(central), 215.0)
    inside = in_window((6, 20), field, grid, clock)
    plain = monthly_distribution(central, clock, inside)
    got = monthly_distribution(levels, clock, inside, error)
    for column in ("month", "n_hours", "n_years", "coverage", "years_note"):
        assert list(got[column]) == list(plain[column])
    np.testing.assert_allclose(got["mean"], plain["mean"], rtol=1e-12)
    np.testing.assert_allclose(got["transfer_error"], 215.0, rtol=1e-12)
    assert (plain["transfer_error"] == 0.0).all()
    used = completeness(np.isfinite(central), clock).used & inside
    for month in (1, 7):
        pool = levels[:, used & (clock.month == month - 1)].ravel()
        expected = np.quantile(pool, [0.01, 0.5, 0.9, 0.99], method="median_unbiased")
        row = got[got["month"] == month].iloc[0]
        np.testing.assert_allclose(row[["p01", "p50", "p90", "p99"]].astype(float), expected)
    wider = got["p90"] - got["p10"] > plain["p90"] - plain["p10"]
    assert wider.all()


def test_hourly_distribution_takes_levels_and_their_error_too():
    _, _, clock = clock_of(2019, 2020)
    draw = np.random.default_rng(9)
    central = draw.normal(20, 5, len(clock.hour))
    levels = central + np.array([-2.0, 0.0, 2.0])[:, None]
    own = clock.hour < 6  # hours of the field's own station: no error
    levels[:, own] = central[own]
    got = hourly_distribution(levels, clock, np.where(own, 0.0, 1.6))
    plain = hourly_distribution(central, clock)
    assert list(got["n_hours"]) == list(plain["n_hours"])
    at_night = got["hour"] < 6
    np.testing.assert_allclose(got.loc[at_night, "mean"], plain.loc[at_night, "mean"])
    assert (got.loc[at_night, "transfer_error"] == 0.0).all()
    np.testing.assert_allclose(got.loc[~at_night, "transfer_error"], 1.6)
    spread = (got["p90"] - got["p10"]) - (plain["p90"] - plain["p10"])
    assert spread[~at_night].mean() > 0.5
