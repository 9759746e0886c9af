"""Bases side by side: usable hours a month, ranks, spreads, shares and paired differences."""

from __future__ import annotations

from calendar import isleap, monthrange
from dataclasses import replace
from itertools import pairwise
from types import SimpleNamespace

import numpy as np
import pandas as pd
import pytest

from climarisk import risk
from climarisk.bases import ALL_PAIRS, UsableYears, base_tables, fleet_weights, usable_years
from climarisk.clock import hour_grid, in_window, local_clock
from climarisk.fields import Field
from climarisk.icing import bands, serious_in_cruise
from climarisk.performance import CHECKS, Margins
from climarisk.results import BASE_DIFFERENCES_COLUMNS, BASES_COLUMNS
from climarisk.seasons import Season
from climarisk.study import Planning

DAYS = frozenset((m, d) for m in range(1, 13) for d in range(1, monthrange(2020, m)[1] + 1))
SEASONS = (
    Season("winter", frozenset(d for d in DAYS if d[0] in (12, 1, 2))),
    Season("short summer", frozenset(d for d in DAYS if (6, 15) <= d <= (7, 14))),
)
FIRST, LAST = 2012, 2018
YEARS = LAST - FIRST + 1
AIRCRAFT = ("carb", "jet")
OFFERED = np.array([300.0, 310, 380, 410, 470, 480, 485, 450, 390, 350, 300, 280])


class Made:
    """Invented counts of fields, and the frames that belong to them."""

    def __init__(self, n_fields, seed=1, fleet=None, levels=(1,), confidence=0.9):
        draw = np.random.default_rng(seed)
        self.fields = [f"f{i}" for i in range(n_fields)]
        self.fleet = fleet or {}
        self.confidence = confidence
        self.counts, self.offered = {}, {}
        for i, field in enumerate(self.fields):
            self.offered[field] = OFFERED.copy()
            total = draw.integers(200, 300, (12, YEARS))
            for a, aircraft in enumerate(AIRCRAFT):
                share = np.clip(draw.normal(0.1 + 0.03 * i + 0.05 * a, 0.05, (12, YEARS)), 0, 1)
                n = levels[i % len(levels)]
                spread = np.linspace(0.7, 1.3, n) if n > 1 else np.ones(1)
                fallen = np.floor(total[..., None] * np.clip(share[..., None] * spread, 0, 1))
                self.counts[field, aircraft] = UsableYears(total, fallen, 0.5)
        shape = (n_fields, 12)
        self.runs = draw.random((n_fields, len(AIRCRAFT), 12))
        self.near = {c: draw.random(shape) for c in ("share_1k", "share_2_5k")}
        self.ice = draw.random((n_fields, 12, len(bands("chart")))) / 10
        self.light = draw.uniform(200, 500, shape)
        self.season = draw.random((n_fields, len(AIRCRAFT), 2))
        self.season_offered = draw.uniform(300, 900, (n_fields, 2))

    def silence(self, field, *months):
        """Take every hour of some months (1-12) away."""
        for aircraft in AIRCRAFT:
            counts = self.counts[field, aircraft]
            total, fallen = counts.total.copy(), counts.fallen.copy()
            for month in months:
                total[month - 1] = fallen[month - 1] = 0
            self.counts[field, aircraft] = replace(counts, total=total, fallen=fallen)

    def share(self, field, aircraft, month):
        counts = self.counts[field, aircraft]
        total = counts.total[month - 1].sum()
        levels = counts.fallen.shape[2]
        return counts.fallen[month - 1].sum() / levels / total if total else np.nan

    def frames(self):
        monthly, seasonal, windows, near, ice = [], [], [], [], []
        for i, field in enumerate(self.fields):
            for a, aircraft in enumerate(AIRCRAFT):
                for m in range(1, 13):
                    offered = self.offered[field][m - 1]
                    monthly.append((field, aircraft, m, self.share(field, aircraft, m), offered))
                    run, light = self.runs[i, a, m - 1], self.light[i, m - 1]
                    windows.append((field, aircraft, m, run, light))
                for s, season in enumerate(SEASONS):
                    offered = self.season_offered[i, s]
                    usable = offered * (1 - self.season[i, a, s])
                    seasonal.append((field, aircraft, season.name, offered, usable))
            for m in range(1, 13):
                near.append((field, m, *(self.near[c][i, m - 1] for c in self.near)))
                ice += [(field, m, b, self.ice[i, m - 1, n]) for n, b in enumerate(bands("chart"))]
        keys = ["field", "aircraft", "month"]
        return {
            "risk_monthly": pd.DataFrame(monthly, columns=[*keys, "shortfall", "hours_offered"]),
            "windows_monthly": pd.DataFrame(
                windows, columns=[*keys, "days_with_run", "daylight_hours"]
            ),
            "risk_seasonal": pd.DataFrame(
                seasonal, columns=["field", "aircraft", "season", "hours_offered", "usable_hours"]
            ),
            "near_saturation_monthly": pd.DataFrame(near, columns=["field", "month", *self.near]),
            "icing_monthly": pd.DataFrame(ice, columns=["field", "month", "band", "share"]),
        }

    def tables(self, **changes):
        study = SimpleNamespace(
            fields=[SimpleNamespace(id=f, is_steep=f == self.fields[0]) for f in self.fields],
            aircraft=[SimpleNamespace(id=a, carburettor=a == "carb") for a in AIRCRAFT],
            seasons=SEASONS,
            first_year=FIRST,
            last_year=LAST,
            confidence=self.confidence,
            planning=Planning(fleet=self.fleet),
        )
        return base_tables(study, self.frames() | changes, self.counts)

    # Brute force

    def parts(self):
        numbers = {a: self.fleet.get(a, 0 if self.fleet else 1) for a in AIRCRAFT}
        return {a: n / sum(numbers.values()) for a, n in numbers.items()}

    def usable(self, field, aircraft):
        """Usable hours a month by plain loops; the fleet's where there is no aircraft."""
        if not aircraft:
            return sum(p * self.usable(field, a) for a, p in self.parts().items() if p)
        offered = self.offered[field]
        return (
            sum(
                offered[m - 1] * (1 - self.share(field, aircraft, m)) if offered[m - 1] else 0.0
                for m in range(1, 13)
            )
            / 12
        )

    def resampled(self, field, aircraft, with_error):
        """Usable hours a month of every resample, counted year by year."""
        if not aircraft:
            parts = [
                p * np.array(self.resampled(field, a, with_error))
                for a, p in self.parts().items()
                if p
            ]
            return sum(parts)
        counts, offered = self.counts[field, aircraft], self.offered[field]
        n_levels = counts.fallen.shape[2]
        years = risk.year_weights(YEARS).tolist()
        levels = risk.level_weights(n_levels, counts.persistence).tolist()
        even = [1 / n_levels] * n_levels
        total, fallen = counts.total.tolist(), counts.fallen.tolist()
        values = []
        for r, drawn in enumerate(years):
            weights = levels[r] if with_error else even
            usable = 0.0
            for m in range(12):
                if not offered[m]:
                    continue
                n = k = 0.0
                for y in range(YEARS):
                    if drawn[y]:
                        n += drawn[y] * total[m][y]
                        k += drawn[y] * sum(
                            w * f for w, f in zip(weights, fallen[m][y], strict=True)
                        )
                usable += offered[m] * (1 - k / n) if n else np.nan
            values.append(usable / 12)
        return np.array(values)


def interval(values, n_years, confidence=0.9):
    tail = risk.expanded_tail(n_years, confidence)
    known = values[~np.isnan(values)]
    return np.quantile(known, [tail, 1 - tail], method="median_unbiased")


def row_of(bases, field, aircraft=""):
    (row,) = bases[(bases["field"] == field) & (bases["aircraft"] == aircraft)].to_dict("records")
    return row


def pair_of(differences, one, other, aircraft=""):
    chosen = differences[differences["aircraft"] == aircraft]
    sides = zip(chosen["first"], chosen["second"], strict=True)
    chosen = chosen[[{*pair} == {one, other} for pair in sides]]
    (row,) = chosen.to_dict("records")
    return row


# ---- usable hours ----------------------------------------------------------------------------


def test_usable_hours_equal_plain_sums_for_every_aircraft_and_the_fleet():
    made = Made(4, fleet={"carb": 3.0, "jet": 1.0})
    bases, _ = made.tables()
    assert list(bases.columns) == BASES_COLUMNS
    assert len(bases) == 4 * 3
    for field in made.fields:
        for aircraft in ("", *AIRCRAFT):
            row = row_of(bases, field, aircraft)
            assert row["usable_hours_month"] == pytest.approx(made.usable(field, aircraft))
    one, two = (row_of(bases, "f0", a)["usable_hours_month"] for a in AIRCRAFT)
    assert row_of(bases, "f0")["usable_hours_month"] == pytest.approx((3 * one + two) / 4)


def test_fleet_without_numbers_has_one_of_each_and_a_zero_flies_not():
    assert fleet_weights({}, AIRCRAFT).tolist() == [0.5, 0.5]
    assert fleet_weights({"carb": 2.0}, AIRCRAFT).tolist() == [1.0, 0.0]
    bases, _ = Made(2, fleet={"jet": 4.0}).tables()
    for column in ("usable_hours_month", "ci_low", "year_p90", "days_with_run"):
        assert row_of(bases, "f1")[column] == row_of(bases, "f1", "jet")[column]
    assert np.isnan(row_of(bases, "f1")["icing_serious"])  # nothing that flies has a carburettor


def test_interval_equals_resampling_whole_years_and_the_persistent_error_by_hand():
    made = Made(2, levels=(1, 4), fleet={"carb": 2.0, "jet": 1.0})
    bases, _ = made.tables()
    for field, aircraft in (("f0", "carb"), ("f1", "jet"), ("f1", "")):
        row = row_of(bases, field, aircraft)
        low, high = interval(made.resampled(field, aircraft, with_error=True), YEARS)
        assert (row["ci_low"], row["ci_high"]) == pytest.approx((low, high), rel=1e-9)
        assert row["ci_low"] < row["usable_hours_month"] < row["ci_high"]
        assert row["interval_note"] == "fewer than 10 years"
        assert row["n_years"] == YEARS
    # The error makes the interval wider than the years alone do.
    low, high = interval(made.resampled("f1", "jet", with_error=False), YEARS)
    row = row_of(bases, "f1", "jet")
    assert row["ci_high"] - row["ci_low"] > high - low


def test_interval_goes_by_the_month_with_the_fewest_years():
    made = Made(2)
    for aircraft in AIRCRAFT:
        counts = made.counts["f1", aircraft]
        total = counts.total.copy()
        fallen = counts.fallen.copy()
        total[6, :3] = fallen[6, :3] = 0  # July has four years
        made.counts["f1", aircraft] = replace(counts, total=total, fallen=fallen)
    bases, differences = made.tables()
    row = row_of(bases, "f1")
    assert row["n_years"] == YEARS - 3
    assert row["usable_hours_month"] == pytest.approx(made.usable("f1", ""))
    assert np.isnan([row["ci_low"], row["ci_high"]]).all()
    assert np.isnan([row["year_p10"], row["year_p90"]]).all()
    assert row["interval_note"] == "no interval below 5 years"
    pair = pair_of(differences, "f0", "f1")
    assert np.isnan(pair["ci_low"])
    assert pair["interval_note"] == "no interval below 5 years"
    assert row_of(bases, "f0")["n_years"] == YEARS


def test_resamples_that_miss_a_month_are_left_out():
    made = Made(1)
    for aircraft in AIRCRAFT:
        counts = made.counts["f0", aircraft]
        total, fallen = counts.total.copy(), counts.fallen.copy()
        total[1, :2] = fallen[1, :2] = 0
        made.counts["f0", aircraft] = replace(counts, total=total, fallen=fallen)
    drawn = made.resampled("f0", "carb", with_error=False)
    assert 0 < np.isnan(drawn).sum() < 20  # five years of seven missed in every draw: (2/7)^7
    row = row_of(made.tables()[0], "f0", "carb")
    assert (row["ci_low"], row["ci_high"]) == pytest.approx(tuple(interval(drawn, YEARS - 2)))


def test_single_years_spread_as_plain_percentiles_of_them():
    made = Made(2, levels=(3,))
    made.silence("f1")
    bases, _ = made.tables()
    counts = made.counts["f0", "jet"]
    usable = []
    for y in range(YEARS):
        share = [counts.fallen[m, y].mean() / counts.total[m, y] for m in range(12)]
        usable.append(sum(OFFERED[m] * (1 - share[m]) for m in range(12)) / 12)
    row = row_of(bases, "f0", "jet")
    expected = np.quantile(usable, [0.1, 0.9], method="median_unbiased")
    assert (row["year_p10"], row["year_p90"]) == pytest.approx(tuple(expected))


# ---- no data ---------------------------------------------------------------------------------


def test_month_without_figures_leaves_the_field_without_a_figure_and_last():
    made = Made(3)
    made.silence("f0", 2, 4)
    made.silence("f1", *range(1, 13))
    bases, differences = made.tables()
    assert bases["field"].tolist() == ["f2"] * 3 + ["f0"] * 3 + ["f1"] * 3
    assert bases["rank"].isna().tolist() == [False] * 3 + [True] * 6
    for field, note in (("f0", "no figures in months 2, 4"), ("f1", "no figures in any month")):
        for aircraft in ("", *AIRCRAFT):
            row = row_of(bases, field, aircraft)
            empty = ["usable_hours_month", "ci_low", "ci_high", "year_p10", "year_p90"]
            assert np.isnan([row[c] for c in [*empty, "worst_season_hours_month"]]).all()
            assert (row["worst_season"], row["n_years"], row["interval_note"]) == ("", 0, note)
    assert differences.empty
    assert list(differences.columns) == BASE_DIFFERENCES_COLUMNS


def test_month_in_which_the_window_offers_no_hour_has_no_usable_one():
    made = Made(2)
    made.silence("f0", 12)
    made.offered["f0"][11] = 0.0  # polar night in daylight
    row = row_of(made.tables()[0], "f0", "carb")
    usable = [OFFERED[m] * (1 - made.share("f0", "carb", m + 1)) for m in range(11)]
    assert row["usable_hours_month"] == pytest.approx(sum(usable) / 12)
    assert row["n_years"] == YEARS
    low, high = interval(made.resampled("f0", "carb", with_error=True), YEARS)
    assert (row["ci_low"], row["ci_high"]) == pytest.approx((low, high))


def test_window_that_never_opens_has_no_usable_hour_and_says_so():
    made = Made(2)
    made.silence("f0", *range(1, 13))
    made.offered["f0"][:] = 0.0
    row = row_of(made.tables()[0], "f0")
    assert row["usable_hours_month"] == 0.0
    assert row["interval_note"] == "the hours window offers no hour"


def test_field_without_rows_has_no_figure():
    made = Made(2)
    frames = made.frames()
    cut = {name: frame[frame["field"] != "f1"] for name, frame in frames.items()}
    made.silence("f1", *range(1, 13))
    row = row_of(made.tables(**cut)[0], "f1")
    assert np.isnan([row["usable_hours_month"], row["days_with_run"], row["share_1k"]]).all()
    assert pd.isna(row["rank"])


# ---- ranks -----------------------------------------------------------------------------------


def test_ranks_go_by_the_fleet_and_fields_alike_share_one():
    made = Made(4)
    for aircraft in AIRCRAFT:
        made.counts["f2", aircraft] = made.counts["f1", aircraft]
    bases, differences = made.tables()
    ranks = bases.drop_duplicates("field").set_index("field")["rank"].to_dict()
    assert ranks == {"f0": 1, "f1": 2, "f2": 2, "f3": 4}
    assert bases["field"].drop_duplicates().tolist() == ["f0", "f1", "f2", "f3"]
    assert bases["aircraft"].tolist() == ["", *AIRCRAFT] * 4
    fleet = bases[bases["aircraft"] == ""]["usable_hours_month"].tolist()
    assert fleet == sorted(fleet, reverse=True)
    alike = pair_of(differences, "f1", "f2")
    assert (alike["difference_hours_month"], alike["ci_low"], alike["ci_high"]) == (0.0, 0.0, 0.0)
    assert (alike["first"], alike["second"]) == ("f1", "f2")


# ---- differences -----------------------------------------------------------------------------


def test_differences_equal_resampling_the_same_years_in_both():
    made = Made(3, levels=(1, 4), fleet={"carb": 2.0, "jet": 1.0})
    _, differences = made.tables()
    assert len(differences) == 3 * 3
    for one, other, aircraft in (("f0", "f1", "carb"), ("f1", "f2", "")):
        row = pair_of(differences, one, other, aircraft)
        first, second = row["first"], row["second"]
        gap = made.usable(first, aircraft) - made.usable(second, aircraft)
        assert gap > 0
        assert row["difference_hours_month"] == pytest.approx(gap)
        drawn = [made.resampled(f, aircraft, with_error=False) for f in (first, second)]
        low, high = interval(drawn[0] - drawn[1], YEARS)
        assert (row["ci_low"], row["ci_high"]) == pytest.approx((low, high), rel=1e-9)
        assert row["interval_note"] == "fewer than 10 years"


def test_first_is_the_better_one_for_each_aircraft_by_itself():
    made = Made(2)
    # The jet finds f1 the better one, the other aircraft and the fleet f0.
    better = made.counts["f0", "jet"]
    made.counts["f1", "jet"] = replace(better, fallen=better.fallen * 0.9)
    _, differences = made.tables()
    assert pair_of(differences, "f0", "f1", "jet")["first"] == "f1"
    assert pair_of(differences, "f0", "f1", "carb")["first"] == "f0"
    assert (differences["difference_hours_month"] >= 0).all()


def test_constant_gap_is_sure_however_much_the_years_vary():
    made = Made(2)
    for aircraft in AIRCRAFT:
        worse = np.full((12, YEARS), 200)
        fallen = np.tile(np.arange(YEARS) * 20.0, (12, 1))[..., None]
        made.counts["f0", aircraft] = UsableYears(worse, fallen, 0.0)
        made.counts["f1", aircraft] = UsableYears(worse, fallen + 10.0, 0.0)
    bases, differences = made.tables()
    row = pair_of(differences, "f0", "f1")
    sure = OFFERED.mean() * 0.05
    got = [row[c] for c in ("difference_hours_month", "ci_low", "ci_high")]
    assert got == pytest.approx([sure] * 3)
    one = row_of(bases, "f0")
    assert one["ci_high"] - one["ci_low"] > 5 * sure


@pytest.mark.parametrize(("n_fields", "pairs"), [(1, 0), (2, 1), (ALL_PAIRS, 190), (22, 41)])
def test_many_fields_are_compared_with_the_best_and_the_next_only(n_fields, pairs):
    made = Made(n_fields)
    bases, differences = made.tables()
    assert len(differences) == 3 * pairs
    ranked = bases["field"].drop_duplicates().tolist()
    fleet = differences[differences["aircraft"] == ""]
    told = list(zip(fleet["first"], fleet["second"], strict=True))
    assert len(set(told)) == pairs
    assert {(ranked[0], f) for f in ranked[1:]} | set(pairwise(ranked)) <= set(told)
    if n_fields <= ALL_PAIRS:
        assert len(set(told)) == n_fields * (n_fields - 1) // 2


def test_confidence_widens_the_intervals():
    narrow, wide = (Made(2, confidence=c).tables() for c in (0.6, 0.95))
    for n, w in zip(narrow, wide, strict=True):
        assert (w["ci_low"] < n["ci_low"]).all()
        assert (w["ci_high"] > n["ci_high"]).all()


# ---- the other columns -----------------------------------------------------------------------


def test_yearly_shares_equal_plain_weighted_means():
    made = Made(2, fleet={"carb": 1.0, "jet": 3.0})
    bases, _ = made.tables()
    years = range(FIRST, LAST + 1)
    days = [sum(monthrange(y, m)[1] for y in years) / YEARS for m in range(1, 13)]
    wanted = [n for n, band in enumerate(bands("chart")) if band in serious_in_cruise("chart")]
    assert 0 < len(wanted) < len(bands("chart"))
    for i, field in enumerate(made.fields):
        runs = [sum(days[m] * made.runs[i, a, m] for m in range(12)) / sum(days) for a in (0, 1)]
        expected = {"carb": runs[0], "jet": runs[1], "": (runs[0] + 3 * runs[1]) / 4}
        near = {
            c: sum(OFFERED[m] * made.near[c][i, m] for m in range(12)) / OFFERED.sum()
            for c in made.near
        }
        light = made.light[i]
        ice = sum(light[m] * sum(made.ice[i, m, n] for n in wanted) for m in range(12)) / sum(light)
        for aircraft, run in expected.items():
            row = row_of(bases, field, aircraft)
            assert row["days_with_run"] == pytest.approx(run)
            assert (row["share_1k"], row["share_2_5k"]) == pytest.approx(tuple(near.values()))
            if aircraft == "jet":
                assert np.isnan(row["icing_serious"])
            else:
                assert row["icing_serious"] == pytest.approx(ice)


def test_yearly_share_is_empty_where_a_month_that_weighs_lacks():
    made = Made(2)
    made.runs[0, 0, 5] = np.nan
    made.near["share_1k"][0, 3] = np.nan
    made.ice[0, 2] = np.nan
    made.ice[1, 2], made.light[1, 2] = np.nan, 0.0  # no daylight, nothing to weigh
    bases, _ = made.tables()
    assert np.isnan(row_of(bases, "f0", "carb")["days_with_run"])
    assert np.isnan(row_of(bases, "f0")["days_with_run"])
    assert row_of(bases, "f0", "jet")["days_with_run"] > 0
    assert np.isnan(row_of(bases, "f0")["share_1k"])
    assert row_of(bases, "f0")["share_2_5k"] > 0
    assert np.isnan(row_of(bases, "f0", "carb")["icing_serious"])
    assert row_of(bases, "f1", "carb")["icing_serious"] > 0


def test_study_without_a_carburettor_has_no_icing_rows():
    made = Made(2)
    bases, _ = made.tables(icing_monthly=made.frames()["icing_monthly"].iloc[:0])
    assert bases["icing_serious"].isna().all()


def test_worst_season_has_the_fewest_hours_for_its_length():
    made = Made(2)
    made.season_offered[:] = (900.0, 300.0)
    made.season[:] = 0.2
    made.season[1, :, 0] = 0.9
    bases, _ = made.tables()
    year = sum(366 if isleap(y) else 365 for y in range(FIRST, LAST + 1)) / YEARS
    # December to February: 90 days and a quarter or so; 15 June to 14 July: 30 days.
    winter = 90 + sum(map(isleap, range(FIRST, LAST + 1))) / YEARS
    in_winter = 900 * 0.8 / winter * year / 12
    in_summer = 300 * 0.8 / 30 * year / 12
    assert in_winter < in_summer  # although the winter has the most hours
    for aircraft in ("", *AIRCRAFT):
        row = row_of(bases, "f0", aircraft)
        assert row["worst_season"] == "winter"
        assert row["worst_season_hours_month"] == pytest.approx(in_winter)
        row = row_of(bases, "f1", aircraft)
        assert row["worst_season_hours_month"] == pytest.approx(900 * 0.1 / winter * year / 12)


def test_worst_season_is_unknown_where_any_season_is():
    made = Made(2)
    made.season[0, 0, 1] = np.nan
    bases, _ = made.tables()
    for aircraft, known in (("carb", False), ("", False), ("jet", True)):
        row = row_of(bases, "f0", aircraft)
        assert bool(row["worst_season"]) is known
        assert np.isfinite(row["worst_season_hours_month"]) == known


# ---- from hours ------------------------------------------------------------------------------


def test_counts_of_an_aircraft_are_those_behind_its_monthly_shares():
    field = Field("F", "Field", 46.5, 7.5, 500.0, "Etc/GMT-1")
    grid = hour_grid(2018, 2019)
    clock = local_clock(field, grid, 2018, 2019)
    draw = np.random.default_rng(2)
    known = np.flatnonzero(clock.in_period & (draw.random(len(grid)) < 0.9))

    def margins(move):
        margin = 0.2 - 0.3 * np.cos((clock.hour[known] - 14) / 12 * np.pi) + move
        checks = np.full((len(CHECKS), len(margin)), np.inf, np.float32)
        none = np.zeros(len(margin), np.int8)
        return Margins(margin, margin < 0, margin < -9, none, checks)

    inside = in_window("daylight", field, grid, clock)
    levels = [margins(move) for move in (-0.1, 0.0, 0.1)]
    hours = risk.Hours(clock, known, margins(0.0), inside, 0.9, levels, 0.3)
    counts = usable_years(hours)
    monthly, _, _ = risk.risk_tables(hours, [Season("year", DAYS)])
    assert counts.total.shape == (12, 2)
    assert counts.fallen.shape == (12, 2, 3)
    assert counts.persistence == 0.3
    assert (counts.total.sum(axis=1) == monthly["n_hours"]).all()
    share = counts.fallen.mean(axis=2).sum(axis=1) / counts.total.sum(axis=1)
    np.testing.assert_allclose(share, monthly["shortfall"], rtol=1e-12)
    assert (counts.fallen[..., 0] > counts.fallen[..., 2]).all()


def test_steep_fields_are_marked_in_every_row_of_theirs():
    bases, _ = Made(3).tables()
    first = Made(3).fields[0]
    assert set(bases.loc[bases["field"] == first, "steep"]) == {"yes"}
    assert set(bases.loc[bases["field"] != first, "steep"]) == {""}
