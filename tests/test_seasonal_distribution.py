"""Distributions by season against plain loops and the library's quantiles."""

from __future__ import annotations

from calendar import monthrange

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from climarisk.climatology import (
    completeness,
    monthly_distribution,
    season_coverage,
    season_hours,
    seasonal_distribution,
)
from climarisk.clock import hour_grid, in_window, local_clock
from climarisk.fields import Field
from climarisk.results import PERCENTILES
from climarisk.seasons import Season

FIELD = Field("F", "Field", 46.5, 11.0, 500.0, "Europe/Rome")
YEAR = frozenset((m, d) for m in range(1, 13) for d in range(1, monthrange(2020, m)[1] + 1))
SUMMER = Season("summer", frozenset(d for d in YEAR if (6, 15) <= d <= (9, 15)))
ACROSS = Season("across", frozenset(d for d in YEAR if d >= (12, 15) or d <= (2, 10)))
STATISTICS = ["mean", *(f"p{p:02d}" for p in PERCENTILES), "transfer_error"]


def scene(first_year, last_year, window="all"):
    grid = hour_grid(first_year, last_year)
    clock = local_clock(FIELD, grid, first_year, last_year)
    return clock, in_window(window, FIELD, grid, clock)


def gappy(clock, n_levels=1, seed=5):
    """Return invented feet with single gaps, a month cut short and an hour never reported."""
    draw = np.random.default_rng(seed)
    feet = draw.normal(3000.0, 700.0, len(clock.hour))
    feet[draw.random(len(feet)) < 0.1] = np.nan
    feet[(clock.year == 1) & (clock.month == 6) & (clock.day_of_month > 20)] = np.nan
    feet[(clock.month == 1) & (clock.hour == 5)] = np.nan
    moves = {1: [0.0], 3: [-180.0, 20.0, 160.0]}[n_levels]
    return feet + np.array(moves)[:, None]


def pooled_places(values, clock, inside, days):
    """Return the hours of a season that enter, by plain loops over dates."""
    year, month, hour = clock.year.tolist(), clock.month.tolist(), clock.hour.tolist()
    day = clock.day_of_month.tolist()
    known = (np.isfinite(values[0]) & clock.in_period).tolist()
    count: dict[tuple[int, int, int], int] = {}
    for i, yes in enumerate(known):
        if yes:
            cell = year[i], month[i], hour[i]
            count[cell] = count.get(cell, 0) + 1
    enough = {
        (y, m, h)
        for (y, m, h), n in count.items()
        if 5 * n >= 4 * monthrange(clock.first_year + y, m + 1)[1]
    }
    offered = [
        i
        for i in range(len(hour))
        if clock.in_period[i] and inside[i] and (month[i] + 1, day[i]) in days
    ]
    counting = [i for i in offered if (year[i], month[i], hour[i]) in enough]
    return [i for i in counting if known[i]], len(counting) / len(offered)


@pytest.mark.parametrize("n_levels", [1, 3])
@pytest.mark.parametrize("window", ["all", (6, 20), (21, 3), "daylight"])
def test_statistics_equal_a_plain_loop(window, n_levels):
    clock, inside = scene(2018, 2020, window)
    values = gappy(clock, n_levels)
    error = np.where(clock.month == 6, 300.0, 100.0)
    table = seasonal_distribution(values, clock, inside, [SUMMER, ACROSS], error)
    assert table["season"].tolist() == ["summer", "across"]
    for row, season in zip(table.to_dict("records"), (SUMMER, ACROSS), strict=True):
        places, coverage = pooled_places(values, clock, inside, season.days)
        assert row["n_hours"] == len(places) > 0
        assert row["n_years"] == len({int(clock.year[i]) for i in places}) == 3
        assert row["coverage"] == coverage < 1
        pool = [float(level[i]) for level in values for i in places]
        assert row["mean"] == pytest.approx(sum(pool) / len(pool), rel=1e-12)
        # numpy's median_unbiased is Hyndman and Fan's definition 8 (numpy documentation).
        expected = np.quantile(pool, np.array(PERCENTILES) / 100, method="median_unbiased")
        np.testing.assert_allclose([row[f"p{p:02d}"] for p in PERCENTILES], expected, rtol=1e-12)
        squares = [(300.0 if clock.month[i] == 6 else 100.0) ** 2 for i in places]
        assert row["transfer_error"] == pytest.approx((sum(squares) / len(places)) ** 0.5)


def test_without_an_error_there_is_none():
    clock, inside = scene(2019, 2020)
    table = seasonal_distribution(gappy(clock), clock, inside, [SUMMER, ACROSS])
    assert (table["transfer_error"] == 0.0).all()
    one_row = seasonal_distribution(gappy(clock)[0], clock, inside, [SUMMER, ACROSS])
    assert one_row.equals(table)


@pytest.mark.parametrize("month", [1, 4, 7, 12])
def test_season_that_is_a_month_has_the_months_figures(month):
    clock, inside = scene(2018, 2020, (6, 20))
    values, error = gappy(clock, 3), np.full(len(inside), 150.0)
    own = Season("own", frozenset(d for d in YEAR if d[0] == month))
    seasonal = seasonal_distribution(values, clock, inside, [own], error)
    monthly = monthly_distribution(values, clock, inside, error)
    columns = [c for c in monthly if c != "month"]
    assert list(seasonal) == ["season", *columns]
    assert seasonal[columns].iloc[0].tolist() == monthly[columns].iloc[month - 1].tolist()


def test_seasons_that_part_the_year_hold_every_hour_once():
    clock, inside = scene(2018, 2020, "daylight")
    values = gappy(clock)
    rest = Season("rest", YEAR - SUMMER.days - ACROSS.days)
    table = seasonal_distribution(
        values, clock, inside, [SUMMER, ACROSS, rest, Season("year", YEAR)]
    )
    monthly = monthly_distribution(values, clock, inside)
    parts, year = table[:3], table.iloc[3]
    assert parts["n_hours"].sum() == year["n_hours"] == monthly["n_hours"].sum()
    pooled = (parts["mean"] * parts["n_hours"]).sum() / year["n_hours"]
    assert pooled == pytest.approx(year["mean"], rel=1e-12)
    # Each hundredth of the pool lies between those of its parts.
    for p in PERCENTILES:
        assert parts[f"p{p:02d}"].min() <= year[f"p{p:02d}"] <= parts[f"p{p:02d}"].max()


def test_season_across_new_year_takes_both_ends_of_every_calendar_year():
    clock, inside = scene(2018, 2020)
    values = np.where(clock.month == 11, 10.0, 20.0) * np.where(clock.in_period, 1.0, 9.0)
    row = seasonal_distribution(values, clock, inside, [ACROSS]).iloc[0]
    # 17 days of December, 31 of January, 10 of February, three times.
    assert row["n_hours"] == 3 * 24 * (17 + 31 + 10)
    assert row["mean"] == pytest.approx((17 * 10 + 41 * 20) / 58)
    assert (row["n_years"], row["coverage"]) == (3, 1.0)


def test_leap_day_belongs_to_a_season_that_holds_its_neighbours():
    clock, _ = scene(2019, 2020)
    hours = season_hours(clock, ACROSS)
    assert not hours[(clock.month == 1) & (clock.day_of_month == 29)].any()
    late = Season("late", frozenset(d for d in YEAR if (2, 20) <= d <= (3, 5)))
    leap = (clock.month == 1) & (clock.day_of_month == 29) & clock.in_period
    assert season_hours(clock, late)[leap].all() and leap.sum() == 24
    # 9 + 5 days in 2019, one more in 2020.
    assert (season_hours(clock, late) & clock.in_period).sum() == 24 * (14 + 15)


def test_season_without_data_has_no_figure_and_is_never_zero():
    clock, inside = scene(2019, 2020)
    values = np.where(np.isin(clock.month, [5, 6, 7, 8]), np.nan, 1000.0)
    table = seasonal_distribution(values, clock, inside, [SUMMER, ACROSS])
    empty, full = table.iloc[0], table.iloc[1]
    assert (empty[["n_hours", "n_years", "coverage"]] == 0).all()
    assert empty[STATISTICS].isna().all()
    assert full["mean"] == 1000.0 and full["coverage"] == 1.0


def test_season_outside_the_window_has_no_figure():
    clock, inside = scene(2019, 2020)
    table = seasonal_distribution(gappy(clock), clock, inside & (clock.month != 6), [
        Season("July", frozenset(d for d in YEAR if d[0] == 7))
    ])  # fmt: skip
    assert table["n_hours"][0] == 0 and table["coverage"][0] == 0.0
    assert table[STATISTICS].isna().all().all()


@settings(deadline=None, max_examples=15)
@given(st.integers(0, 2**32 - 1), st.floats(0.7, 1.0))
def test_hours_of_counting_cells_are_all_of_them_with_a_value_or_without(seed, share):
    clock, inside = scene(2019, 2020)
    known = np.random.default_rng(seed).random(len(inside)) < share
    complete = completeness(known, clock)
    counting = complete.counting(clock)
    np.testing.assert_array_equal(counting & known, complete.used)
    assert not counting[~clock.in_period].any()
    for year, month, hour in ((0, 1, 3), (1, 6, 12), (1, 11, 23)):
        cell = clock.in_period & (clock.year == year) & (clock.month == month)
        cell &= clock.hour == hour
        days = monthrange(2019 + year, month + 1)[1]
        assert cell.sum() == days
        assert set(counting[cell]) == {bool(5 * (cell & known).sum() >= 4 * days)}


def test_coverage_is_the_share_of_the_hours_offered():
    clock, inside = scene(2019, 2020)
    first_half = clock.in_period & (clock.month < 6)
    june = clock.month == 5
    assert season_coverage(first_half, inside, clock) == (181 + 182) / (365 + 366)
    assert season_coverage(first_half, june, clock) == 1.0
    assert season_coverage(inside, np.zeros(len(inside), bool), clock) == 0.0
