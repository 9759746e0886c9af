"""Shortfall shares, their intervals, the limiting check and the days affected."""

from calendar import monthrange

import numpy as np
import pandas as pd
import pytest
from scipy import stats

from climarisk import risk
from climarisk.clock import hour_grid, in_window, local_clock
from climarisk.fields import Field
from climarisk.performance import CHECKS, Margins
from climarisk.seasons import Season
from climarisk.transfer_error import planning_error

FIELD = Field("F", "Field", -33.0, 0.0, 0.0, "Etc/GMT")
ALL_YEAR = Season(
    "year", frozenset((m, d) for m in range(1, 13) for d in range(1, monthrange(2020, m)[1] + 1))
)


def clock_of(first_year, last_year):
    return local_clock(FIELD, hour_grid(first_year, last_year), first_year, last_year)


def margins_of(margin, outside=None, limiting=None):
    """Return margins whose shortfall is a negative one."""
    n = len(margin)
    outside = np.zeros(n, bool) if outside is None else outside
    limiting = np.zeros(n, np.int8) if limiting is None else limiting
    checks = np.full((len(CHECKS), n), np.inf, np.float32)
    checks[0] = margin
    return Margins(margin, (margin < 0) | outside, outside, limiting, checks)


def hours_of(clock, margin_on_grid, window="all", confidence=0.9, **parts):
    """Return the hours of a margin series on the grid; NaN is an unknown hour."""
    known = np.flatnonzero(np.isfinite(margin_on_grid) & clock.in_period)
    grid = hour_grid(clock.first_year, clock.first_year + clock.n_years - 1)
    parts = {name: values[known] for name, values in parts.items()}
    return risk.Hours(
        clock,
        known,
        margins_of(margin_on_grid[known], **parts),
        in_window(window, FIELD, grid, clock),
        confidence,
    )


def random_case(first_year=2018, last_year=2020, seed=1, gaps=0.15):
    clock = clock_of(first_year, last_year)
    draw = np.random.default_rng(seed)
    n = len(clock.hour)
    margin = draw.normal(0.1, 0.2, n)
    margin[draw.random(n) < gaps] = np.nan
    outside = draw.random(n) < 0.05
    limiting = draw.integers(0, len(CHECKS), n).astype(np.int8)
    return clock, margin, outside, limiting


def plain_tables(clock, margin, outside, limiting, key, inside):
    """Return {key: (hours, years, share, outside share, limiting, days share)} by plain loops."""
    days = {}
    for i in range(len(margin)):
        if clock.in_period[i] and not np.isnan(margin[i]):
            cell = int(clock.year[i]), int(clock.month[i]), int(clock.hour[i])
            days[cell] = days.get(cell, 0) + 1
    groups = {}
    for i in range(len(margin)):
        if not clock.in_period[i] or np.isnan(margin[i]) or not inside[i]:
            continue
        y, m, h = int(clock.year[i]), int(clock.month[i]), int(clock.hour[i])
        if 5 * days[y, m, h] >= 4 * monthrange(clock.first_year + y, m + 1)[1]:
            groups.setdefault(key(i), []).append(i)
    table = {}
    for name, places in groups.items():
        short = [i for i in places if margin[i] < 0 or outside[i]]
        votes = [sum(limiting[i] == c for i in short) for c in range(len(CHECKS))]
        table[name] = (
            len(places),
            len({int(clock.year[i]) for i in places}),
            len(short) / len(places),
            sum(bool(outside[i]) for i in places) / len(places),
            CHECKS[votes.index(max(votes))] if short else "",
            len({int(clock.day[i]) for i in short}) / len({int(clock.day[i]) for i in places}),
        )
    return table


COLUMNS = ["n_hours", "n_years", "shortfall", "outside_table", "limiting", "days_affected"]


def rows_of(table, *keys):
    """Return {key: figures} of the rows that have hours."""
    some = table[table["n_hours"] > 0]
    return {
        tuple(row[k] for k in keys): tuple(row[c] for c in COLUMNS) for _, row in some.iterrows()
    }


def test_shares_equal_a_plain_loop():
    clock, margin, outside, limiting = random_case()
    hours = hours_of(clock, margin, (8, 11), outside=outside, limiting=limiting)
    summer = Season("wet", frozenset({(12, d) for d in range(15, 32)} | {(1, 1), (1, 2)}))
    monthly, hourly, seasonal = risk.risk_tables(hours, [summer])
    everything = np.ones(len(margin), bool)
    case = clock, margin, outside, limiting
    assert rows_of(hourly, "month", "hour") == plain_tables(
        *case, lambda i: (int(clock.month[i]) + 1, int(clock.hour[i])), everything
    )
    assert rows_of(monthly, "month") == plain_tables(
        *case, lambda i: (int(clock.month[i]) + 1,), hours.inside
    )
    days = set(summer.days)
    inside = hours.inside & np.array(
        [
            (m + 1, d) in days
            for m, d in zip(clock.month.tolist(), clock.day_of_month.tolist(), strict=True)
        ]
    )
    assert rows_of(seasonal, "season") == plain_tables(*case, lambda i: ("wet",), inside)


def test_hourly_days_affected_is_the_share_itself():
    # One hour a day: a day is affected exactly when its hour falls short.
    clock, margin, outside, _ = random_case()
    _, hourly, _ = risk.risk_tables(hours_of(clock, margin, outside=outside), [ALL_YEAR])
    known = hourly["n_hours"] > 0
    np.testing.assert_allclose(hourly["days_affected"][known], hourly["shortfall"][known])


def test_tables_have_a_row_for_every_cell():
    clock, margin, *_ = random_case(2020, 2020)
    monthly, hourly, seasonal = risk.risk_tables(hours_of(clock, margin), [ALL_YEAR])
    assert monthly["month"].tolist() == list(range(1, 13))
    assert hourly[["month", "hour"]].to_numpy().tolist() == [
        [m, h] for m in range(1, 13) for h in range(24)
    ]
    assert seasonal["season"].tolist() == ["year"]


def test_empty_cells_are_empty_and_never_zero():
    clock = clock_of(2015, 2020)
    nothing = np.full(len(clock.hour), np.nan)
    for table in risk.risk_tables(hours_of(clock, nothing), [ALL_YEAR]):
        assert (table["n_hours"] == 0).all() and (table["n_years"] == 0).all()
        shares = ["shortfall", "ci_low", "ci_high", "outside_table", "days_affected"]
        assert table[shares].isna().all().all()
        assert table[["margin_p10", "margin_p50"]].isna().all().all()
        assert (table["limiting"] == "").all()


def test_limiting_is_the_most_frequent_check_among_shortfall_hours_only():
    clock = clock_of(2020, 2020)
    noon = (clock.hour == 12) & (clock.month == 6) & clock.in_period
    margin = np.where(clock.day_of_month <= 9, -0.1, 0.5)
    limiting = np.where(margin > 0, 2, np.where(clock.day_of_month <= 5, 0, 3)).astype(np.int8)
    margin = np.where(noon, margin, np.nan)
    _, hourly, _ = risk.risk_tables(hours_of(clock, margin, limiting=limiting), [ALL_YEAR])
    july_noon = hourly[(hourly["month"] == 7) & (hourly["hour"] == 12)].iloc[0]
    # 22 fair days name check 2, five shortfall days check 0 and four check 3.
    assert july_noon["limiting"] == CHECKS[0]
    assert july_noon["shortfall"] == 9 / 31


def test_margin_percentiles_are_of_definition_8():
    clock, margin, *_ = random_case(2020, 2020, gaps=0.0)
    _, hourly, _ = risk.risk_tables(hours_of(clock, margin), [ALL_YEAR])
    chosen = margin[(clock.month == 2) & (clock.hour == 7) & clock.in_period]
    row = hourly[(hourly["month"] == 3) & (hourly["hour"] == 7)].iloc[0]
    # numpy's median_unbiased is Hyndman and Fan's definition 8 (numpy documentation).
    expected = np.quantile(chosen, [0.1, 0.5], method="median_unbiased")
    np.testing.assert_allclose([row["margin_p10"], row["margin_p50"]], expected, rtol=1e-12)


def test_season_of_the_southern_summer_reaches_across_new_year():
    clock = clock_of(2018, 2020)
    days = {(12, d) for d in range(1, 32)} | {(m, d) for m in (1, 2) for d in range(1, 30)}
    days |= {(1, 30), (1, 31)}
    in_season = np.isin(clock.month, [11, 0, 1])
    margin = np.where(in_season, -0.1, 0.1)
    _, _, seasonal = risk.risk_tables(hours_of(clock, margin), [Season("DJF", frozenset(days))])
    row = seasonal.iloc[0]
    assert row["shortfall"] == 1.0 and row["days_affected"] == 1.0
    assert row["n_hours"] == 24 * (3 * 90 + 1)  # 2020 has a 29 February
    assert row["n_years"] == 3


# ---- intervals -------------------------------------------------------------------------------


def yearly_case(shares, confidence=0.9, first_year=2001):
    """Return the row of July noon where each year has its own share of short days (of 31)."""
    clock = clock_of(first_year, first_year + len(shares) - 1)
    short_days = np.array([round(31 * s) for s in shares])
    year = np.clip(clock.year, 0, len(shares) - 1)
    margin = np.where(clock.day_of_month <= short_days[year], -0.1, 0.1)
    margin[~((clock.month == 6) & (clock.hour == 12))] = np.nan
    _, hourly, _ = risk.risk_tables(hours_of(clock, margin, confidence=confidence), [ALL_YEAR])
    return hourly[(hourly["month"] == 7) & (hourly["hour"] == 12)].iloc[0]


def test_interval_is_empty_below_five_years():
    four = yearly_case([0.1, 0.2, 0.3, 0.4])
    assert np.isnan(four["ci_low"]) and np.isnan(four["ci_high"])
    five = yearly_case([0.1, 0.2, 0.3, 0.4, 0.5])
    assert 0 < five["ci_low"] < five["shortfall"] < five["ci_high"] < 1


def test_interval_counts_years_that_count_and_not_those_of_the_period():
    clock = clock_of(2001, 2010)
    margin = np.where((clock.day % 3 == 0), -0.1, 0.1)
    margin[(clock.year >= 4) | (clock.hour != 12)] = np.nan
    _, hourly, _ = risk.risk_tables(hours_of(clock, margin), [ALL_YEAR])
    noon = hourly[hourly["hour"] == 12]
    assert (noon["n_years"] == 4).all()
    assert noon["ci_low"].isna().all()


def test_interval_is_the_same_every_time():
    shares = np.random.default_rng(3).random(12)
    first, second = yearly_case(shares), yearly_case(shares)
    assert first["ci_low"] == second["ci_low"] and first["ci_high"] == second["ci_high"]


def test_interval_of_years_that_are_all_alike_has_no_width():
    for share in (0.0, 1.0, 10 / 31):
        row = yearly_case([share] * 8)
        assert row["ci_low"] == row["ci_high"] == row["shortfall"]


def test_interval_contains_the_share_and_grows_with_the_spread_between_years():
    widths = []
    for spread in (0.05, 0.15, 0.35):
        row = yearly_case(0.5 + spread * np.linspace(-1, 1, 12))
        assert row["ci_low"] <= row["shortfall"] <= row["ci_high"]
        widths.append(row["ci_high"] - row["ci_low"])
    assert widths == sorted(widths) and widths[0] < widths[2] / 3


def test_interval_grows_with_the_confidence():
    shares = np.random.default_rng(4).random(15)
    half, nine, most = (yearly_case(shares, c) for c in (0.5, 0.9, 0.99))
    assert most["ci_low"] < nine["ci_low"] < half["ci_low"]
    assert half["ci_high"] < nine["ci_high"] < most["ci_high"]


def test_interval_agrees_with_resampling_whole_years_by_hand():
    # An independent resampling with other random numbers: 20 000 draws of 10 years.
    shares = np.round(31 * np.random.default_rng(5).random(10)) / 31
    row = yearly_case(shares)
    draws = np.random.default_rng(99).choice(shares, size=(20_000, 10)).mean(axis=1)
    # Expanded percentiles (Hesterberg 2014, arXiv 1411.5279): z(tail) sqrt(9 / 10) = t(9).
    tail = stats.norm.sf(np.sqrt(10 / 9) * stats.t.isf(0.05, 9))
    expected = np.quantile(draws, [tail, 1 - tail])
    # Standard error of a 5 % quantile from 2000 resamples: sqrt(0.05 0.95 / 2000) / density,
    # where the density of a normal at its 5 % quantile is 0.103 / sd: about 0.047 sd; four of it.
    allowed = 4 * 0.047 * draws.std()
    np.testing.assert_allclose([row["ci_low"], row["ci_high"]], expected, atol=allowed)


def test_interval_covers_the_true_share_about_as_often_as_whole_years_do():
    # 600 independent cells of 20 years x 30 hours whose years differ.  In the method's test
    # 95 % intervals from whole years covered 93 % at 20 years; at 90 % nominal, 86-91 % with the
    # sampling error of 600 cells (sd 1.3 %).
    draw = np.random.default_rng(7)
    n_cells, n_years, n_days = 600, 20, 30
    yearly = draw.beta(3.0, 7.0, size=(n_cells, n_years))
    fallen = draw.binomial(n_days, yearly)
    low, high = risk._intervals(
        fallen, np.full((n_cells, n_years), n_days), np.full(n_cells, n_years), 0.90
    )
    covered = ((low <= 0.3) & (high >= 0.3)).mean()
    assert 0.82 <= covered <= 0.94


def test_interval_hardly_depends_on_years_without_data():
    # The same ten years of data, in a period of ten and of thirty years.  Drawing among thirty
    # gives N ~ Binomial(30, 1/3) years with data, so the width grows by sqrt(10 E[1/N]), 4 %.
    draw = np.random.default_rng(8)
    fallen = draw.binomial(30, draw.beta(3.0, 7.0, size=(50, 10)))
    total, years = np.full((50, 10), 30), np.full(50, 10)
    own = risk._intervals(fallen, total, years, 0.90)
    empty = np.zeros((50, 20), int)
    longer = risk._intervals(np.hstack([fallen, empty]), np.hstack([total, empty]), years, 0.90)
    assert (longer[1] - longer[0]).mean() == pytest.approx((own[1] - own[0]).mean(), rel=0.05)


def test_interval_of_a_month_whose_window_holds_no_known_hour_is_empty():
    # The window touches one hour of each January, which is missing although the cell counts.
    clock = clock_of(2001, 2006)
    noon = (clock.month == 0) & (clock.hour == 12) & clock.in_period
    margin = np.where(noon & (clock.day_of_month > 1), 0.1, np.nan)
    hours = hours_of(clock, margin)
    one = risk.Hours(
        clock, hours.known, hours.central, noon & (clock.day_of_month == 1), confidence=0.9
    )
    monthly, _, _ = risk.risk_tables(one, [ALL_YEAR])
    assert monthly["n_hours"][0] == 0
    assert np.isnan(monthly["shortfall"][0]) and np.isnan(monthly["ci_low"][0])


def test_year_weights_draw_as_many_years_as_there_are():
    weights = risk.year_weights(7)
    assert weights.shape == (risk.RESAMPLES, 7)
    assert (weights.sum(axis=1) == 7).all()
    # Each year is drawn once on average: sd of a mean of 2000 counts of variance 6/7 is 0.021.
    np.testing.assert_allclose(weights.mean(axis=0), 1.0, atol=5 * 0.021)


# ---- the transfer error ----------------------------------------------------------------------


def with_levels(clock, margin, moves, persistence=0.5):
    """Return the hours of a margin series that every level of an error moves by so much."""
    known = np.flatnonzero(np.isfinite(margin) & clock.in_period)
    levels = [margins_of(margin[known] + move) for move in moves]
    return risk.Hours(
        clock,
        known,
        margins_of(margin[known]),
        np.ones(len(clock.hour), bool),
        0.9,
        levels,
        persistence,
        120.0,
    )


def test_share_with_an_error_is_the_mean_of_the_shares_at_its_levels():
    clock, margin, _, _ = random_case(2015, 2020)
    moves = np.array([-0.3, -0.1, 0.0, 0.1, 0.3])
    hours = with_levels(clock, margin, moves)
    spread = risk.risk_tables(hours, [ALL_YEAR])
    single = [
        risk.risk_tables(
            hours_of(clock, np.where(np.isnan(margin), np.nan, margin + m)), [ALL_YEAR]
        )
        for m in moves
    ]
    for i in range(3):
        shares = np.mean([tables[i]["shortfall"] for tables in single], axis=0)
        np.testing.assert_allclose(spread[i]["shortfall"], shares, rtol=1e-12)
        np.testing.assert_array_equal(spread[i]["shortfall_central"], single[2][i]["shortfall"])
        days = np.mean([tables[i]["days_affected"] for tables in single], axis=0)
        np.testing.assert_allclose(spread[i]["days_affected"], days, rtol=1e-12)
        for column in ("n_hours", "n_years"):
            np.testing.assert_array_equal(spread[i][column], single[2][i][column])
        known = spread[i]["n_hours"] > 0
        np.testing.assert_allclose(spread[i].loc[known, "transfer_error_ft"], 120.0)


def test_share_with_an_error_is_that_of_a_brute_force_draw():
    # Margins 0.1 +- 0.2 and an error of 0.15: every hour's own draw, many times over.
    clock, margin, _, _ = random_case(2018, 2020, gaps=0.0)
    levels = planning_error().levels * 0.15
    monthly, _, _ = risk.risk_tables(with_levels(clock, margin, levels), [ALL_YEAR])
    draw = np.random.default_rng(12)
    for month in range(12):
        inside = margin[(clock.month == month) & clock.in_period]
        drawn = inside + 0.15 * draw.normal(0, 1, (40, len(inside)))
        share = (drawn < 0).mean()
        # Two kinds of sampling: of the draws, and of nine levels in place of all (each hour's
        # share is off by a uniform 1/18 at most, independent between hours).
        error = np.hypot((0.25 / drawn.size) ** 0.5, 1 / 9 / 12**0.5 / len(inside) ** 0.5)
        assert monthly["shortfall"][month] == pytest.approx(share, abs=4 * error)
        # And by the closed form: normal margins and normal errors.
        exact = stats.norm.cdf(-inside / 0.15).mean()
        assert monthly["shortfall"][month] == pytest.approx(exact, abs=4 * error)


def test_error_that_moves_nothing_changes_nothing():
    clock, margin, _, _ = random_case(2012, 2018)
    plain = risk.risk_tables(hours_of(clock, margin), [ALL_YEAR])
    still = risk.risk_tables(with_levels(clock, margin, np.zeros(9)), [ALL_YEAR])
    for a, b in zip(plain, still, strict=True):
        for column in (*COLUMNS, "ci_low", "ci_high"):
            if column != "limiting":
                np.testing.assert_allclose(a[column], b[column], rtol=1e-12)
        assert list(a["limiting"]) == list(b["limiting"])


def test_interval_is_wider_with_an_error_and_with_a_persistent_one():
    clock, margin, _, _ = random_case(2012, 2018)
    levels = planning_error().levels * 0.15

    def width(moves, persistence):
        monthly, _, _ = risk.risk_tables(with_levels(clock, margin, moves, persistence), [ALL_YEAR])
        assert (monthly["ci_low"] <= monthly["shortfall"] + 1e-12).all()
        assert (monthly["ci_high"] >= monthly["shortfall"] - 1e-12).all()
        return (monthly["ci_high"] - monthly["ci_low"]).mean()

    plain = width(np.zeros(9), 0.5)
    widths = [width(levels, p) for p in (0.1, 0.5, 0.9)]
    assert plain < widths[0] < widths[1] < widths[2]


@pytest.mark.parametrize("persistence", [0.0, 0.1, 0.5, 0.9])
def test_level_weights_are_the_levels_of_a_place_whose_error_persists(persistence):
    weights = risk.level_weights(9, persistence)
    assert weights.shape == (risk.RESAMPLES, 9)
    assert (weights >= 0).all()
    np.testing.assert_allclose(weights.sum(axis=1), 1.0, rtol=1e-12)
    # On average each level is as likely: sd of a weight at most 1/3, of 2000 of them 0.0075.
    np.testing.assert_allclose(weights.mean(axis=0), 1 / 9, atol=4 * 0.0075)
    # Brute force with other random numbers: 4000 places with an error of their own, 200 hours.
    draw = np.random.default_rng(31)
    place, own = draw.normal(0, 1, (4000, 1)), draw.normal(0, 1, (4000, 200))
    error = np.sqrt(persistence) * place + np.sqrt(1 - persistence) * own
    level = np.minimum((9 * stats.norm.cdf(error)).astype(int), 8)
    by_hand = planning_error().levels[level].mean(axis=1)
    of_place = weights @ planning_error().levels
    # Standard error of a standard deviation from 2000 draws: 1 / sqrt(4000), and that of a mean of
    # 200 hours, which widens the second: sqrt(1 / 200).
    widened = np.sqrt(max(by_hand.var() - (1 - persistence) / 200, 0.0))
    assert of_place.std() == pytest.approx(widened, abs=4 * np.sqrt(1 / 4000 + 1 / 8000))
    # Nine levels keep 95 % of the variance of the error, and no more comes out than went in.
    assert 0.85 * persistence - 1e-9 <= of_place.var() <= persistence + 1e-9


def test_level_weights_of_an_error_that_persists_altogether():
    weights = risk.level_weights(9, 1.0)
    np.testing.assert_allclose(weights.sum(axis=1), 1.0)
    assert (weights.max(axis=1) > 0.99).all()


def counts(table):
    rows = [(m, y, n, k) for (m, y), (n, k) in table.items()]
    return pd.DataFrame(rows, columns=["month", "year", "n_hours", "shortfall_hours"])


def test_yearly_counts_add_up_to_the_monthly_share():
    clock = clock_of(2015, 2021)
    margin = np.random.default_rng(8).normal(0.05, 0.2, len(clock.hour))
    hours = hours_of(clock, margin)
    monthly, _, _ = risk.risk_tables(hours, [ALL_YEAR])
    yearly = risk.yearly_counts(hours).groupby("month")[["n_hours", "shortfall_hours"]].sum()
    assert (yearly["n_hours"].to_numpy() == monthly["n_hours"].to_numpy()).all()
    np.testing.assert_allclose(
        yearly["shortfall_hours"] / yearly["n_hours"], monthly["shortfall"], rtol=1e-12
    )


def test_paired_difference_with_itself_is_nothing_for_sure():
    one = counts({(7, 2010 + i): (100, 10 + 5 * i) for i in range(8)})
    july = risk.paired_difference(one, one, range(2010, 2018), 0.9).iloc[6]
    assert (july["difference"], july["ci_low"], july["ci_high"]) == (0.0, 0.0, 0.0)


def test_paired_difference_of_a_constant_gap_is_sure_of_it_however_the_years_vary():
    # The years differ by 80 points between them, the two fields by 5 points in every year.
    first = counts({(7, 2010 + i): (100, 10 + 10 * i) for i in range(8)})
    second = counts({(7, 2010 + i): (100, 5 + 10 * i) for i in range(8)})
    july = risk.paired_difference(first, second, range(2010, 2018), 0.9).iloc[6]
    np.testing.assert_allclose([july["difference"], july["ci_low"], july["ci_high"]], 0.05)


def test_paired_difference_is_empty_without_hours_and_without_enough_years():
    four = counts({(7, 2010 + i): (100, 10 + 5 * i) for i in range(4)})
    table = risk.paired_difference(four, four, range(2010, 2018), 0.9)
    assert np.isnan(table.loc[6, "ci_low"])
    assert table.loc[6, "difference"] == 0.0
    assert np.isnan(table.loc[0, "difference"])
