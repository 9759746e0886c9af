"""Trend, break and the yearly figures of a season."""

from __future__ import annotations

import csv
from calendar import monthrange
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats

from climarisk.climatology import completeness
from climarisk.clock import hour_grid, local_clock
from climarisk.fields import Field
from climarisk.seasons import Season
from climarisk.trend import (
    TREND_COLUMNS,
    TrendInput,
    break_test,
    mann_kendall,
    pair_slopes,
    rank_autocorrelation,
    score_p_value,
    season_years,
    trend,
    trend_rows,
    variance_factor,
)

REFERENCE = Path(__file__).parent / "reference" / "trend_check_values.csv"
with REFERENCE.open(encoding="utf-8", newline="") as file:
    CHECKS = {row["id"]: row for row in csv.DictReader(file)}
#: The series of the check values, repeated there as "same series".
SERIES = np.array([9.1, 9.0, 9.3, 9.2, 9.6, 9.4, 9.5, 9.9, 9.7, 9.8, 10.1, 9.9])
FIELD = Field("F", "Field", 40.0, 0.0, 0.0, "Etc/GMT")


def expect(name, value):
    row = CHECKS[name]
    tolerance = {row["tolerance_kind"]: float(row["tolerance"])}
    assert value == pytest.approx(float(row["expected"]), **({"rel": 0, "abs": 0} | tolerance))


def ar1(n_series, n, r, seed):
    """Return stationary first-order autoregressive series of unit variance."""
    noise = np.random.default_rng(seed).normal(size=(n_series, n))
    series = noise.copy()
    for t in range(1, n):
        series[:, t] = r * series[:, t - 1] + np.sqrt(1 - r * r) * noise[:, t]
    return series


def days_of(*months):
    return frozenset((m, d) for m in months for d in range(1, monthrange(2000, m)[1] + 1))


# --- against published numbers and other people's code ---------------------------------------


def test_score_and_slope_equal_the_check_values():
    score, variance = mann_kendall(SERIES)
    expect("TREND-MK-S", score)
    expect("TREND-MK-Z", (score - 1) / np.sqrt(variance))
    expect("TREND-MK-P", score_p_value(score, variance))
    expect("TREND-TS", np.median(pair_slopes(np.arange(12), SERIES)))


@pytest.mark.parametrize("seed", range(6))
@pytest.mark.parametrize("rounded", [False, True])
def test_trend_slope_equals_scipy_with_gaps_and_ties(seed, rounded):
    draw = np.random.default_rng(seed)
    years = np.sort(draw.choice(np.arange(1990, 2025), 22, replace=False))
    values = 0.05 * (years - 1990) + draw.normal(size=22)
    values = np.round(values) if rounded else values
    ours = trend(years, values, 0.9)
    assert ours.slope_per_decade == pytest.approx(10 * stats.theilslopes(values, years).slope)


def test_interval_equals_scipy_where_nothing_is_autocorrelated():
    """Alternating residuals have negative lag 1, which the correction sets to zero."""
    years = np.arange(2000, 2020)
    values = 0.05 * (years - 2000) + np.where(years % 2, 1.0, -1.0) * (1 + 0.01 * years % 0.07)
    ours = trend(years, values, 0.9)
    theirs = stats.theilslopes(values, years, alpha=0.9)
    assert (ours.low, ours.high) == pytest.approx((10 * theirs.low_slope, 10 * theirs.high_slope))


@pytest.mark.parametrize("seed", range(8))
@pytest.mark.parametrize("decimals", [0, 3])
def test_mann_kendall_equals_the_library(seed, decimals):
    library = pytest.importorskip("pymannkendall", reason="pymannkendall is not installed")
    values = np.round(np.random.default_rng(seed).normal(size=25), decimals)
    theirs = library.original_test(values)
    assert mann_kendall(values) == pytest.approx((theirs.s, theirs.var_s))
    assert score_p_value(*mann_kendall(values)) == pytest.approx(theirs.p)


@pytest.mark.parametrize("seed", range(12))
def test_variance_factor_equals_the_library_given_its_lags(seed):
    """Hamed and Rao's factor from the lags they keep, recomputed here."""
    library = pytest.importorskip("pymannkendall", reason="pymannkendall is not installed")
    n = 24
    values = ar1(1, n, 0.6, seed)[0] + 0.03 * np.arange(n)
    theirs = library.hamed_rao_modification_test(values, alpha=0.1)
    residual = values - theirs.slope * np.arange(n)
    ranks = stats.rankdata(residual) - (n + 1) / 2
    lags = np.array([(ranks[k:] * ranks[:-k]).sum() for k in range(1, n)]) / (ranks**2).sum()
    assert rank_autocorrelation(np.arange(n), residual) == pytest.approx(lags[0])
    lags[np.abs(lags) <= stats.norm.isf(0.05) / np.sqrt(n)] = 0.0
    assert mann_kendall(values)[1] * variance_factor(lags, n) == pytest.approx(theirs.var_s)


def test_variance_factor_of_independent_values_is_one():
    assert variance_factor(np.zeros(19), 20) == 1.0


def test_break_statistic_equals_a_plain_regression():
    """The step of least residual squares of y = a + b t + step, by ordinary least squares."""
    draw = np.random.default_rng(4)
    years = np.delete(np.arange(1995, 2020), [3, 11])
    values = 0.04 * years + 2.5 * (years >= 2009) + draw.normal(size=len(years))
    rests, sizes = {}, {}
    for i in range(3, len(years) - 2):
        columns = np.column_stack(
            [np.ones(len(years)), years - 1995.0, np.arange(len(years)) >= i]
        ).astype(float)
        fitted, rest, _, _ = np.linalg.lstsq(columns, values, rcond=None)
        rests[int(years[i])], sizes[int(years[i])] = float(rest[0]), float(fitted[2])
    best = min(rests, key=rests.get)
    found = break_test(years, values)
    assert found.year == best
    assert found.step == pytest.approx(sizes[best])


# --- behaviour -------------------------------------------------------------------------------


@pytest.mark.parametrize(("r", "n"), [(0.0, 15), (0.0, 25), (0.2, 15), (0.2, 25), (0.4, 25)])
def test_trend_in_trendless_noise_is_found_about_as_often_as_stated(r, n):
    """Nominal 10 %; 5-14 % is what 800 series and the short-record estimate of r leave."""
    years = np.arange(2000, 2000 + n)
    found = np.mean([trend(years, x, 0.9).significant for x in ar1(800, n, r, seed=n)])
    assert 0.05 <= found <= 0.14


def test_interval_covers_the_true_slope_about_as_often_as_stated():
    years = np.arange(2000, 2020)
    tries = [trend(years, x + 0.1 * np.arange(20), 0.9) for x in ar1(500, 20, 0.2, seed=3)]
    assert np.mean([t.low <= 1.0 <= t.high for t in tries]) >= 0.87


def test_clear_trend_is_found_nearly_always():
    years = np.arange(2000, 2020)
    tries = [trend(years, x + 0.2 * np.arange(20), 0.9) for x in ar1(300, 20, 0.0, seed=5)]
    assert np.mean([t.significant and t.slope_per_decade > 0 for t in tries]) > 0.98


def test_trend_below_fifteen_years_with_values_is_none():
    years, values = np.arange(2000, 2016), np.arange(16.0)
    values[[3, 7]] = np.nan
    assert trend(years, values, 0.9) is None
    assert break_test(years, values) is None


def test_trend_leaves_out_nan_years():
    years = np.arange(2000, 2020)
    values = ar1(1, 20, 0.0, seed=1)[0]
    gaps = values.copy()
    gaps[[0, 5, 19]] = np.nan
    kept = np.isfinite(gaps)
    with_gaps = trend(years, gaps, 0.9)
    assert with_gaps == trend(years[kept], values[kept], 0.9)
    assert (with_gaps.n_years, with_gaps.first, with_gaps.last) == (17, 2001, 2018)


def test_constant_series_has_neither_trend_nor_break():
    years = np.arange(2000, 2020)
    flat = trend(years, np.zeros(20), 0.9)
    assert (flat.slope_per_decade, flat.low, flat.high, flat.p_value) == (0.0, 0.0, 0.0, 1.0)
    assert not flat.significant
    assert break_test(years, np.full(20, 7.3)) is None
    assert break_test(years, 5000.0 + 0.1 * (years - 2000)) is None


@given(
    seed=st.integers(0, 10_000),
    shift=st.floats(-1e4, 1e4),
    scale=st.floats(0.01, 100.0),
    start=st.integers(1900, 2020),
)
@settings(max_examples=40, deadline=None)
def test_trend_and_break_follow_shift_and_scale(seed, shift, scale, start):
    years = np.arange(2000, 2020)
    values = np.random.default_rng(seed).normal(size=20)
    one, other = trend(years, values, 0.9), trend(years - 2000 + start, shift + scale * values, 0.9)
    scaled = np.array([one.slope_per_decade, one.low, one.high]) * scale
    assert [other.slope_per_decade, other.low, other.high] == pytest.approx(scaled, abs=1e-8)
    assert other.p_value == pytest.approx(one.p_value)
    step, moved = break_test(years, values), break_test(years, shift + scale * values)
    assert moved.year == step.year
    assert moved.step == pytest.approx(scale * step.step, rel=1e-6, abs=1e-8)
    assert moved.p_value == pytest.approx(step.p_value, abs=2e-4)


@given(seed=st.integers(0, 10_000))
@settings(max_examples=30, deadline=None)
def test_trend_of_the_mirrored_series_is_mirrored(seed):
    years = np.arange(2000, 2018)
    values = np.random.default_rng(seed).normal(size=18)
    one, other = trend(years, values, 0.9), trend(years, -values, 0.9)
    assert (other.slope_per_decade, other.low, other.high) == pytest.approx(
        (-one.slope_per_decade, -one.high, -one.low)
    )
    assert other.p_value == pytest.approx(one.p_value)


@pytest.mark.parametrize("year", [2006, 2010, 2014])
@pytest.mark.parametrize("slope", [0.0, 0.1])
def test_break_is_found_in_its_year_beside_a_trend(year, slope):
    years = np.arange(2000, 2020)
    shifted = 5.0 * (years >= year) + slope * (years - 2000)
    found = [break_test(years, shifted + x) for x in ar1(200, 20, 0.0, seed=year)]
    assert np.mean([b.significant(0.9) for b in found]) > 0.95
    assert np.mean([b.year == year for b in found]) > 0.9
    assert np.mean([b.step for b in found]) == pytest.approx(5.0, abs=0.3)


@pytest.mark.parametrize("slope", [0.0, 0.2])
def test_break_in_noise_or_a_steady_trend_is_found_as_rarely_as_stated(slope):
    """Binomial bounds of 1000 series at 10 %, three standard errors."""
    years = np.arange(2000, 2020)
    series = ar1(1000, 20, 0.0, seed=9) + slope * (years - 2000)
    found = np.mean([break_test(years, x).significant(0.9) for x in series])
    assert found == pytest.approx(0.10, abs=3 * np.sqrt(0.1 * 0.9 / 1000))


# --- seasons ---------------------------------------------------------------------------------


def clock_of(first, last):
    return local_clock(FIELD, hour_grid(first, last), first, last)


def seasons_of(clock, values, season, inside=None):
    inside = np.ones(len(clock.hour), bool) if inside is None else inside
    return season_years(completeness(np.isfinite(values), clock), clock, inside, season)


def test_season_across_new_year_belongs_to_the_year_of_its_end():
    clock = clock_of(2001, 2004)
    values = np.where(clock.in_period, clock.first_year + clock.year, np.nan).astype(float)
    winter = seasons_of(clock, values, Season("DJF", days_of(12, 1, 2)))
    assert winter.years.tolist() == [2002, 2003, 2004]
    assert winter.counts.all()
    # 2004: December 2003 (31 days) and January, February 2004 (31 + 29).
    of_2004 = winter.place == 2
    assert of_2004.sum() == 24 * 91
    assert (values[of_2004] == 2003).sum() == 24 * 31
    assert np.isin(clock.month[of_2004], [11, 0, 1]).all()


def test_season_from_mid_december_splits_at_its_own_first_day():
    clock = clock_of(2001, 2004)
    values = np.where(clock.in_period, 1.0, np.nan)
    days = frozenset({(12, d) for d in range(15, 32)} | {(1, d) for d in range(1, 11)})
    parts = seasons_of(clock, values, Season("turn", days))
    assert np.bincount(parts.place[parts.place >= 0]).tolist() == [24 * 27] * 3


def test_season_within_the_year_and_the_whole_year_keep_every_year():
    clock = clock_of(2001, 2004)
    values = np.where(clock.in_period, 1.0, np.nan)
    for days, hours in ((days_of(6, 7, 8), 24 * 92), (days_of(*range(1, 13)), 24 * 365)):
        parts = seasons_of(clock, values, Season("s", days))
        assert parts.years.tolist() == [2001, 2002, 2003, 2004]
        lengths = np.bincount(parts.place[parts.place >= 0])
        assert lengths[:3].tolist() == [hours] * 3


def test_year_with_too_few_hours_is_left_out():
    clock = clock_of(2001, 2006)
    values = np.where(clock.in_period, 1.0, np.nan)
    june_2003 = (clock.year == 2) & (clock.month == 5) & (clock.day_of_month > 10)
    values[june_2003] = np.nan
    parts = seasons_of(clock, values, Season("JJA", days_of(6, 7, 8)))
    # 30 June days of 92 do not count: 62 / 92 is below 80 %.
    assert parts.counts.tolist() == [True, True, False, True, True, True]
    assert not (parts.place[clock.year == 2] >= 0).any()
    assert np.isnan(parts.percentile(values, 0.9)[2])


def test_hours_that_a_station_began_to_report_late_are_left_out_of_every_year():
    clock = clock_of(2001, 2010)
    values = np.where(clock.in_period, 1.0, np.nan)
    values[(clock.year < 5) & ((clock.hour < 6) | (clock.hour > 20))] = np.nan
    parts = seasons_of(clock, values, Season("JJA", days_of(6, 7, 8)))
    assert parts.counts.all()
    used = clock.hour[parts.place >= 0]
    assert (used.min(), used.max()) == (6, 20)


def test_three_hourly_station_counts():
    clock = clock_of(2001, 2003)
    values = np.where(clock.in_period & (clock.hour % 3 == 0), 1.0, np.nan)
    parts = seasons_of(clock, values, Season("JJA", days_of(6, 7, 8)))
    assert parts.counts.all()


def test_yearly_figures_equal_a_plain_loop():
    clock = clock_of(2001, 2003)
    draw = np.random.default_rng(2)
    values = np.where(clock.in_period, draw.normal(5000, 800, len(clock.hour)), np.nan)
    values[draw.random(len(values)) < 0.03] = np.nan
    inside = (clock.hour >= 6) & (clock.hour <= 20)
    parts = seasons_of(clock, values, Season("JJA", days_of(6, 7, 8)), inside)
    known = np.flatnonzero(np.isfinite(values))
    share = parts.share(known, values[known] > 5500)
    p90 = parts.percentile(values, 0.9)
    for i in range(3):
        chosen = values[
            (clock.year == i) & np.isin(clock.month, [5, 6, 7]) & inside & np.isfinite(values)
        ]
        assert p90[i] == pytest.approx(np.quantile(chosen, 0.9, method="median_unbiased"))
        assert share[i] == pytest.approx((chosen > 5500).mean())


# --- table -----------------------------------------------------------------------------------


def table_of(first, last, ft_per_decade, move_ft=0.0, move_year=0):
    clock = clock_of(first, last)
    draw = np.random.default_rng(7)
    year = clock.first_year + clock.year
    yearly = draw.normal(0, 40, 60)[clock.year]
    hot = 5000 - 2000 * np.cos(2 * np.pi * clock.month / 12)
    values = hot + yearly + draw.normal(0, 300, len(year)) + ft_per_decade / 10 * clock.year
    values = np.where(clock.in_period, values + move_ft * (year >= move_year), np.nan)
    known = np.flatnonzero(clock.in_period)
    return trend_rows(
        TrendInput(
            "F",
            values,
            clock,
            np.ones(len(values), bool),
            known,
            {"A": values[known] > 7000.0},
            [Season("JJA", days_of(6, 7, 8)), Season("DJF", days_of(12, 1, 2))],
            0.9,
        )
    )


def test_trend_rows_give_feet_and_percentage_points_per_decade():
    table = table_of(2000, 2019, 200.0)
    assert list(table.columns) == TREND_COLUMNS
    assert list(zip(table["season"], table["aircraft"], table["statistic"], strict=True)) == [
        ("JJA", "", "density_altitude_p90"),
        ("JJA", "A", "shortfall"),
        ("DJF", "", "density_altitude_p90"),
        ("DJF", "A", "shortfall"),
    ]
    assert table["n_years"].tolist() == [20, 20, 19, 19]
    summer, share = table.iloc[0], table.iloc[1]
    assert summer["ci_low"] <= 200.0 <= summer["ci_high"]
    assert summer["slope_per_decade"] == pytest.approx(200.0, abs=60.0)
    assert summer["significant"] and summer["unit"] == "ft per decade"
    # 7000 ft is near the summer median, where a normal spread of 300 ft (and of the months)
    # gives at most 0.4 / 300 per ft: 27 points per decade for 200 ft.
    assert 5.0 < share["slope_per_decade"] < 27.0
    assert share["unit"] == "percentage points per decade"
    # No winter hour reaches the limit: a share of zero in every year, no trend, no break.
    winter = table.iloc[3]
    assert (winter["slope_per_decade"], winter["p_value"]) == (0.0, 1.0)
    assert np.isnan(winter["break_p_value"])


def test_trend_rows_point_at_a_station_move():
    table = table_of(2000, 2019, 0.0, move_ft=400.0, move_year=2008)
    summer = table.iloc[0]
    assert summer["break_year"] == 2008
    assert summer["break_p_value"] < 0.01


def test_trend_rows_below_fifteen_years_are_empty_not_zero():
    table = table_of(2010, 2019, 200.0)
    assert table["n_years"].tolist() == [10, 10, 9, 9]
    assert table[["slope_per_decade", "ci_low", "ci_high", "p_value"]].isna().all(axis=None)
    assert table[["significant", "break_year", "break_p_value"]].isna().all(axis=None)
    assert "0" not in table["slope_per_decade"].to_csv(index=False)
