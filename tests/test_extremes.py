"""Annual maxima, the extreme-value fit and its return levels."""

from __future__ import annotations

import csv
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats

from climarisk.clock import hour_grid, local_clock
from climarisk.extremes import (
    EXTREME_COLUMNS,
    annual_maxima,
    extreme_rows,
    extremes,
    gev_parameters,
    return_level,
)
from climarisk.fields import Field

REFERENCE = Path(__file__).parent / "reference" / "trend_check_values.csv"
with REFERENCE.open(encoding="utf-8", newline="") as file:
    CHECKS = {row["id"]: row for row in csv.DictReader(file)}
FIELD = Field("F", "Field", 40.0, 0.0, 0.0, "Etc/GMT")


def maxima_of(n, xi=-0.15, seed=1, shape=()):
    draw = np.random.default_rng(seed)
    return stats.genextreme.rvs(-xi, 9000.0, 250.0, size=(*shape, n), random_state=draw)


@pytest.mark.parametrize("period", [5, 20, 50])
def test_return_level_equals_the_check_values(period):
    row = CHECKS[f"GEV-{period}"]
    level = return_level(period, 9000.0, 250.0, -0.15)
    assert level == pytest.approx(float(row["expected"]), abs=float(row["tolerance"]))


@pytest.mark.parametrize("xi", [-0.4, -0.15, 0.2])
def test_return_level_equals_the_textbook_formula(xi):
    """z_T = mu - (sigma / xi) (1 - (-ln(1 - 1 / T))**(-xi)): Coles (2001), section 3.3.3."""
    for period in (2, 10, 100):
        y = -np.log(1 - 1 / period)
        expected = 9000.0 - 250.0 / xi * (1 - y ** (-xi))
        assert return_level(period, 9000.0, 250.0, xi) == pytest.approx(expected)


def test_parameters_equal_the_published_approximation():
    """k = 7.8590 c + 2.9554 c^2, c = 2 / (3 + t3) - ln 2 / ln 3, within 9e-4 for |t3| <= 0.5:

    Hosking, Wallis and Wood (1985), equation 14; coefficients from memory, confirmed by the
    agreement to the stated error.
    """
    for xi in (-0.35, -0.15, 0.0, 0.2):
        maxima = maxima_of(60, xi, seed=3)
        t3 = stats.lmoment(maxima, order=3, standardize=True)
        c = 2 / (3 + t3) - np.log(2) / np.log(3)
        assert -gev_parameters(maxima)[2] == pytest.approx(7.8590 * c + 2.9554 * c**2, abs=9e-4)


@pytest.mark.parametrize("xi", [-0.3, -0.1, 0.1])
def test_parameters_give_back_the_l_moments_of_the_sample(xi):
    """L-moments of the fitted distribution by integrating its quantile function (Hosking 1990)."""
    maxima = maxima_of(40, xi, seed=8)
    location, scale, shape = gev_parameters(maxima)
    u = (np.arange(400_000) + 0.5) / 400_000
    x = stats.genextreme.ppf(u, -shape, location, scale)
    expected = [x.mean(), (x * (2 * u - 1)).mean(), (x * (6 * u**2 - 6 * u + 1)).mean()]
    found = stats.lmoment(maxima, order=[1, 2, 3], standardize=False)
    assert expected == pytest.approx(found, abs=0.05)


@pytest.mark.parametrize("xi", [-0.3, -0.15, 0.0])
def test_fit_to_many_maxima_recovers_the_parameters(xi):
    location, scale, shape = gev_parameters(maxima_of(20_000, xi, seed=2))
    assert location == pytest.approx(9000.0, abs=8.0)
    assert scale == pytest.approx(250.0, rel=0.03)
    assert shape == pytest.approx(xi, abs=0.02)


def test_fit_agrees_with_maximum_likelihood_of_the_library():
    """Both estimate the same distribution: 15 ft is half a standard error of the 20-year level."""
    maxima = maxima_of(500, seed=6)
    c, location, scale = stats.genextreme.fit(maxima, 0.15, loc=9000, scale=250)
    ours = gev_parameters(maxima)
    for period in (2, 10, 20):
        theirs = stats.genextreme.isf(1 / period, c, location, scale)
        assert return_level(period, *ours) == pytest.approx(theirs, abs=15.0)


def test_estimates_from_twenty_maxima_are_unbiased_within_their_spread():
    location, scale, shape = gev_parameters(maxima_of(20, shape=(2000,), seed=4))
    levels = return_level(20, location, scale, shape)
    truth = stats.genextreme.isf(1 / 20, 0.15, 9000.0, 250.0)
    assert levels.mean() == pytest.approx(truth, abs=0.1 * levels.std())


def test_interval_covers_the_true_level_about_as_often_as_stated():
    """Nominal 90 %; a simulated interval from 20 maxima is known to fall short of it."""
    truth = stats.genextreme.isf(1 / np.array([2, 10, 20]), 0.15, 9000.0, 250.0)
    hits = []
    for maxima in maxima_of(20, shape=(250,), seed=11):
        levels = {r.return_period_years: r for r in extremes(maxima, 0.9).levels}
        if levels:
            hits.append(
                [
                    levels[t].low <= z <= levels[t].high
                    for t, z in zip((2, 10, 20), truth, strict=True)
                ]
            )
    assert len(hits) > 240
    assert (np.mean(hits, axis=0) >= 0.80).all()


def test_levels_stop_at_twice_the_record():
    assert [r.return_period_years for r in extremes(maxima_of(20), 0.9).levels] == [
        2, 5, 10, 20, 30, 40,
    ]  # fmt: skip
    assert extremes(maxima_of(33), 0.9).levels[-1].return_period_years == 60


def test_levels_rise_inside_their_intervals_and_repeat():
    found = extremes(maxima_of(25), 0.9)
    levels = [r.level for r in found.levels]
    assert levels == sorted(levels)
    assert all(r.low < r.level < r.high for r in found.levels)
    assert found == extremes(maxima_of(25), 0.9)
    wider = extremes(maxima_of(25), 0.99)
    assert all(
        w.low < r.low and r.high < w.high for w, r in zip(wider.levels, found.levels, strict=True)
    )


@pytest.mark.parametrize(
    ("maxima", "reason"),
    [
        (maxima_of(19), "19 annual maxima, 20 are needed"),
        (np.full(20, 8000.0), "all annual maxima are equal"),
        (np.append(np.linspace(8000, 8100, 24), 30_000.0), "the fitted shape"),
    ],
)
def test_no_fit_has_a_reason_and_no_levels(maxima, reason):
    found = extremes(maxima, 0.9)
    assert found.levels == ()
    assert found.reason.startswith(reason)
    assert np.isnan(found.shape)


@given(
    seed=st.integers(0, 10_000),
    shift=st.floats(-1e4, 1e4),
    scale=st.floats(0.01, 100.0),
)
@settings(max_examples=40, deadline=None)
def test_levels_follow_shift_and_scale(seed, shift, scale):
    maxima = maxima_of(25, seed=seed)
    parameters, moved = gev_parameters(maxima), gev_parameters(shift + scale * maxima)
    assert moved[2] == pytest.approx(parameters[2], abs=1e-6)
    expected = shift + scale * return_level(10, *parameters)
    assert return_level(10, *moved) == pytest.approx(expected, rel=1e-6, abs=1e-4)


# --- annual maxima ---------------------------------------------------------------------------


def hourly(first=2001, last=2003, hottest_month=7):
    clock = local_clock(FIELD, hour_grid(first, last), first, last)
    values = (
        5000.0
        + 2000 * np.cos(2 * np.pi * (clock.month + 1 - hottest_month) / 12)
        + 1000 * np.cos(2 * np.pi * (clock.hour - 15) / 24)
        + 10.0 * clock.day_of_month
    )
    return clock, np.where(clock.in_period, values, np.nan)


def test_annual_maxima_of_complete_years_are_the_years_highest_values():
    clock, values = hourly()
    values[
        (clock.year == 1) & (clock.month == 6) & (clock.day_of_month == 9) & (clock.hour == 4)
    ] = 9999.0
    years, maxima = annual_maxima(values, clock)
    assert years.tolist() == [2001, 2002, 2003]
    # July 31, 15 h: 5000 + 2000 + 1000 + 310.
    assert maxima.tolist() == [8310.0, 9999.0, 8310.0]


@pytest.mark.parametrize(
    ("hottest_month", "gap_month", "kept"),
    [(7, 6, False), (7, 1, True), (1, 0, False), (1, 6, True)],
)
def test_a_missing_month_counts_only_among_the_hottest(hottest_month, gap_month, kept):
    clock, values = hourly(hottest_month=hottest_month)
    values[(clock.year == 1) & (clock.month == gap_month)] = np.nan
    assert (2002 in annual_maxima(values, clock)[0]) is kept


@pytest.mark.parametrize(("missing_days", "kept"), [(18, True), (19, False)])
def test_year_counts_with_four_fifths_of_the_hottest_days(missing_days, kept):
    """June to August has 92 days, of which 73.6 are needed."""
    clock, values = hourly()
    first = (clock.day[(clock.year == 1) & (clock.month == 5)]).min()
    gone = (clock.day >= first) & (clock.day < first + missing_days)
    values[gone & (clock.hour >= 10) & (clock.hour <= 20)] = np.nan
    assert (2002 in annual_maxima(values, clock)[0]) is kept


def test_night_hours_alone_do_not_make_a_day():
    clock, values = hourly()
    values[(clock.year == 1) & (clock.hour >= 8) & (clock.hour <= 20)] = np.nan
    assert annual_maxima(values, clock)[0].tolist() == [2001, 2003]


def test_three_hourly_years_count():
    clock, values = hourly()
    values[clock.hour % 3 != 1] = np.nan
    assert annual_maxima(values, clock)[0].tolist() == [2001, 2002, 2003]


def test_no_values_give_no_maxima():
    clock, values = hourly()
    years, maxima = annual_maxima(np.full(len(values), np.nan), clock)
    assert len(years) == len(maxima) == 0


def test_extreme_rows_have_the_columns_of_the_file():
    clock, values = hourly(1995, 2019)
    yearly = np.random.default_rng(3).normal(0, 150, clock.n_years)
    values = np.where(clock.in_period, values + yearly[clock.year % clock.n_years], np.nan)
    rows, reason = extreme_rows("F", values, clock, 0.9)
    assert reason == ""
    assert list(rows.columns) == EXTREME_COLUMNS
    assert rows["field"].eq("F").all() and rows["n_years"].eq(25).all()
    assert rows["return_period_years"].tolist() == [2, 5, 10, 20, 30, 40, 50]
    level = rows["density_altitude_ft"]
    assert ((rows["ci_low"] < level) & (level < rows["ci_high"])).all()


def test_extreme_rows_of_a_short_record_are_empty_with_a_reason():
    clock, values = hourly()
    rows, reason = extreme_rows("F", values, clock, 0.9)
    assert len(rows) == 0 and list(rows.columns) == EXTREME_COLUMNS
    assert reason == "3 annual maxima, 20 are needed"
