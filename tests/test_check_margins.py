"""Margins and shortfall shares of each check: worked by hand, plain loops, whole studies."""

from __future__ import annotations

from calendar import monthrange
from dataclasses import replace

import numpy as np
import pytest
from study_maker import TABLE_AIRCRAFT, make_study, study_toml

from climarisk.aircraft import AircraftProfile, PerformanceTable, ScaledFigures
from climarisk.clock import hour_grid, in_window, local_clock
from climarisk.fields import Field, RunwayDirection
from climarisk.performance import CHECKS, Margins, TableAir, checks_of, margins
from climarisk.pipeline import field_tables, run_study
from climarisk.progress import quiet
from climarisk.region import Region
from climarisk.risk import Hours, margins_by_check, risk_tables
from climarisk.seasons import Season
from climarisk.study import read_study
from climarisk.transfer import on_grid
from climarisk.transfer_error import planning_error
from climarisk.weather import load_weather

ALWAYS = CHECKS[:3]
LIMITS = CHECKS[5:]
PERFORMANCE = CHECKS[:5]


# ---- one hour by hand ------------------------------------------------------------------------


def table(quantities, **more):
    """Return a table of rows at 0 and 4000 ft and columns at 0 and 40 degC."""
    values = {name: np.array(grid, float) for name, grid in quantities.items()}
    return PerformanceTable(750.0, np.array([0.0, 4000.0]), np.array([0.0, 40.0]), values, **more)


TAKEOFF = table(
    {"ground_roll_m": [[200, 300], [300, 400]], "distance_50ft_m": [[400, 500], [600, 700]]}
)
LANDING = table({"distance_50ft_m": [[350, 400], [400, 450]]})
CLIMB = table({"rate_ft_min": [[800, 600], [500, 300]]}, speed_kt=60.0)
PLANE = AircraftProfile(
    "plane", "Plane (invented)", "invented", "natural", True, 750.0, 750.0, 500.0,
    takeoff=(TAKEOFF,), landing=(LANDING,), climb=(CLIMB,), takeoff_factor=1.25,
    landing_factor=1.4, climb_rate_ft_min=400.0, limit_temperature_c=38.0,
    limit_density_altitude_ft=5000.0,
)  # fmt: skip
EAST = RunwayDirection("09", 90, 500, 560, 500, 480, 0.0, "paved", True, True)
UPHILL = RunwayDirection("30", 300, 300, 310, 310, 600, 4.0, "grass", True, False)


def strip(*runways):
    return Field("F", "Field", 46.5, 11.0, 500.0, "Europe/Rome", (), runways)


def air(pressure_altitude_ft, temperature_c, density_altitude_ft=None, sigma=1.0):
    pa, t = np.atleast_1d(pressure_altitude_ft).astype(float), np.atleast_1d(temperature_c)
    da = pa if density_altitude_ft is None else np.atleast_1d(density_altitude_ft)
    return TableAir(pa, t.astype(float), t.astype(float), da.astype(float), np.full(len(pa), sigma))


def test_margin_of_every_check_by_hand():
    # In the middle of the tables: roll 300, to 50 ft 550, landing 400 m, climb 550 ft/min.
    got = margins(PLANE, strip(EAST), air(2000, 20))
    by_hand = [500 / 375 - 1, 560 / 687.5 - 1, 480 / 560 - 1, 550 / 400 - 1]
    assert got.checks.shape == (7, 1) and got.checks.dtype == np.float32
    np.testing.assert_allclose(got.checks[:4, 0], by_hand, rtol=1e-6)
    # No gradient asked for, both limits kept: nothing to show.
    assert np.isposinf(got.checks[4:, 0]).all()
    assert got.margin[0] == pytest.approx(by_hand[1]) and CHECKS[got.limiting[0]] == CHECKS[1]


def test_climb_gradient_by_hand():
    # 550 ft/min at 60 kt: 100 x 550 / (60 x 6076.12 / 60) = 9.052 %.
    gradient = replace(PLANE, climb_rate_ft_min=None, climb_gradient_pct=5.0)
    got = margins(gradient, strip(EAST), air(2000, 20))
    assert got.checks[4, 0] == pytest.approx(100 * 550 / 6076.12 / 5.0 - 1, rel=1e-5)
    assert np.isposinf(got.checks[3, 0])


@pytest.mark.parametrize(
    ("temperature", "density_altitude", "failing"),
    [
        (38.0, 5000.0, []),  # a limit may be reached
        (38.1, 5000.0, [CHECKS[5]]),
        (38.0, 5001.0, [CHECKS[6]]),
        (39.0, 6000.0, [CHECKS[5], CHECKS[6]]),
    ],
)
def test_limit_fails_where_it_is_passed_and_never_touches_the_margin(
    temperature, density_altitude, failing
):
    long = replace(EAST, tora_m=3000, toda_m=3000, lda_m=3000)
    got = margins(PLANE, strip(long), air(100, temperature, density_altitude))
    assert [c for c, v in zip(CHECKS, got.checks[:, 0], strict=True) if v < 0] == failing
    assert got.shortfall[0] == bool(failing)
    assert got.margin[0] > 0 and not got.outside_table[0]


@pytest.mark.parametrize(
    ("name", "failing"),
    [("takeoff", CHECKS[:2]), ("landing", CHECKS[2:3]), ("climb", CHECKS[3:4])],
)
def test_hour_beyond_a_table_fails_the_checks_of_that_table_alone(name, failing):
    # One table ends at 20 degC, the others go on to 40.
    part = getattr(PLANE, name)[0]
    short = replace(part, temperature_c=np.array([0.0, 20.0]))
    long = replace(EAST, tora_m=3000, toda_m=3000, lda_m=3000)
    plane = replace(PLANE, climb_rate_ft_min=100.0, **{name: (short,)})
    got = margins(plane, strip(long), air(1000, 21))
    assert got.outside_table[0] and got.shortfall[0] and got.margin[0] == -1.0
    for check, value in zip(CHECKS, got.checks[:, 0], strict=True):
        assert (value == -1.0) if check in failing else (value > 0), check


def test_blank_cell_fails_its_own_check_whatever_the_order_of_the_directions():
    # To 50 ft is blank at the hot end, the ground roll is not: 350 m there.  Of the two
    # directions one has the runway for the roll, so the roll holds in the most favourable one.
    blank = table(
        {"ground_roll_m": [[200, 300], [300, 400]], "distance_50ft_m": [[400, np.nan]] * 2}
    )
    plane = replace(PLANE, takeoff=(blank,))
    both = [
        margins(plane, strip(*order), air(2000, 40)) for order in ((EAST, UPHILL), (UPHILL, EAST))
    ]
    for got in both:
        assert got.outside_table[0] and got.checks[1, 0] == -1.0
        assert got.checks[0, 0] == pytest.approx(500 / (350 * 1.25) - 1, rel=1e-6)
    np.testing.assert_array_equal(both[0].checks, both[1].checks)


def test_checks_of_a_profile_are_those_it_states():
    bare = replace(
        PLANE, climb_rate_ft_min=None, limit_temperature_c=None, limit_density_altitude_ft=None
    )
    assert checks_of(bare) == ALWAYS
    assert checks_of(PLANE) == (*ALWAYS, "rate of climb", *LIMITS)
    assert checks_of(replace(bare, climb_gradient_pct=3.0)) == (*ALWAYS, "climb gradient")
    everything = replace(PLANE, climb_gradient_pct=3.0)
    assert checks_of(everything) == CHECKS
    scaled = ScaledFigures(750.0, 200.0, 400.0, 350.0)
    assert checks_of(replace(bare, takeoff=(), landing=(), scaled=scaled)) == ALWAYS


def many_hours(n=4000, seed=2):
    draw = np.random.default_rng(seed)
    return air(
        draw.uniform(-500, 4500, n), draw.uniform(-10, 43, n), draw.uniform(-1000, 7000, n), 0.9
    )


@pytest.mark.parametrize(
    "changes",
    [
        {},
        {"climb_gradient_pct": 6.0},
        {"climb_rate_ft_min": None, "limit_temperature_c": None},
        {"planning_kg": 751.0},  # heavier than any table
        {
            "takeoff": (),
            "landing": (),
            "climb": (),
            "scaled": ScaledFigures(750.0, 200.0, 400.0, 350.0, 700.0, 14000.0, 60.0),
        },
    ],
)
@pytest.mark.parametrize("runways", [(EAST,), (UPHILL, EAST)])
def test_an_hour_falls_short_exactly_when_one_of_its_checks_fails(changes, runways):
    plane = replace(PLANE, **changes)
    got = margins(plane, strip(*runways), many_hours())
    np.testing.assert_array_equal(got.shortfall, (got.checks < 0).any(axis=0))
    assert 0 < got.shortfall.mean() <= 1
    np.testing.assert_allclose(got.margin, got.checks[:5].min(axis=0), rtol=1e-6)
    np.testing.assert_array_equal(got.limiting, got.checks.argmin(axis=0))
    # What is not asked for has no margin; no hour is without the others.
    for number, check in enumerate(CHECKS):
        finite = np.isfinite(got.checks[number])
        if check in PERFORMANCE:
            assert finite.all() if check in checks_of(plane) else not finite.any()
        else:
            assert (got.checks[number][finite] < 0).all()
            assert check in checks_of(plane) or not finite.any()
    assert not np.isnan(got.checks).any()


# ---- plain loops -----------------------------------------------------------------------------

FIELD = strip(EAST)
YEAR = frozenset((m, d) for m in range(1, 13) for d in range(1, monthrange(2020, m)[1] + 1))
ALL_YEAR = Season("year", YEAR)
MOVES = (-0.15, 0.02, 0.11)


def consistent(checks):
    """Return the margins that go with some checks, an hour at -1 being beyond its table."""
    margin, outside = checks[:5].min(axis=0), (checks[:5] == -1.0).any(axis=0)
    return Margins(
        margin.astype(float),
        (checks < 0).any(axis=0),
        outside,
        checks.argmin(axis=0).astype(np.int8),
        checks.astype(np.float32),
    )


def invented_hours(n_levels=1, window=(6, 20), seed=11):
    """Return three years of invented margins of every check with gaps, and their grid."""
    grid = hour_grid(2018, 2020)
    clock = local_clock(FIELD, grid, 2018, 2020)
    draw = np.random.default_rng(seed)
    present = draw.random(len(grid)) > 0.1
    present &= ~((clock.year == 1) & (clock.month == 6) & (clock.day_of_month > 20))
    present &= clock.month != 3  # no April at all
    known = np.flatnonzero(present & clock.in_period)
    base = draw.normal([[0.3], [0.15], [0.25], [0.4], [0.5]], 0.2, (5, len(known)))
    passed = np.where(draw.random((2, len(known))) < 0.03, -0.01, np.inf)
    beyond = draw.random((5, len(known))) < 0.01
    levels = []
    for move in MOVES if n_levels == 3 else (0.0,):
        moved = np.where(beyond, -1.0, base + move).astype(np.float32)
        levels.append(consistent(np.concatenate([moved, passed])))
    inside = in_window(window, FIELD, grid, clock)
    central = levels[len(levels) // 2]
    more = levels if n_levels == 3 else ()
    return Hours(clock, known, central, inside, 0.9, more), levels


def plain_checks(hours, levels, checks):
    """Return {(month, check): (hours, share, margins)} by plain loops over the known hours."""
    clock = hours.clock
    cells = [
        (int(clock.year[i]), int(clock.month[i]), int(clock.hour[i])) for i in hours.known.tolist()
    ]
    days: dict[tuple[int, int, int], int] = {}
    for cell in cells:
        days[cell] = days.get(cell, 0) + 1
    by_month: dict[int, list[int]] = {m: [] for m in range(12)}
    for k, (y, m, h) in enumerate(cells):
        if hours.inside[hours.known[k]] and 5 * days[y, m, h] >= 4 * monthrange(2018 + y, m + 1)[1]:
            by_month[m].append(k)
    table = {}
    for m, places in by_month.items():
        for check in checks:
            row = CHECKS.index(check)
            values = [float(level.checks[row, k]) for level in levels for k in places]
            share = sum(v < 0 for v in values) / len(values) if values else None
            table[m + 1, check] = (len(places), share, values)
    return table


@pytest.mark.parametrize("n_levels", [1, 3])
@pytest.mark.parametrize("window", ["all", (6, 20), (21, 3), "daylight"])
def test_shares_and_margins_equal_a_plain_loop(window, n_levels):
    hours, levels = invented_hours(n_levels, window)
    got = margins_by_check(hours, CHECKS)
    expected = plain_checks(hours, levels, CHECKS)
    assert [(r.month, r.check) for r in got.itertuples()] == [
        (m, c) for m in range(1, 13) for c in CHECKS
    ]
    for row in got.itertuples():
        n_hours, share, values = expected[row.month, row.check]
        assert row.n_hours == n_hours
        if row.month == 4:
            assert n_hours == 0
            assert np.isnan([row.shortfall, row.margin_p10, row.margin_p50]).all()
            continue
        assert row.shortfall == pytest.approx(share, rel=1e-14)
        if row.check in LIMITS:
            # A limit has no margin: it is passed or it is not.
            assert np.isnan([row.margin_p10, row.margin_p50]).all()
            continue
        # numpy's median_unbiased is Hyndman and Fan's definition 8 (numpy documentation).
        points = np.quantile(values, [0.1, 0.5], method="median_unbiased")
        np.testing.assert_allclose([row.margin_p10, row.margin_p50], points, rtol=1e-6, atol=1e-7)


@pytest.mark.parametrize("checks", [ALWAYS, (*ALWAYS, "rate of climb", "temperature limit")])
def test_only_the_named_checks_have_rows_and_the_others_change_nothing(checks):
    hours, _ = invented_hours(3)
    every = margins_by_check(hours, CHECKS)
    some = margins_by_check(hours, checks)
    assert some["check"].tolist() == list(checks) * 12
    same = every[every["check"].isin(checks)].reset_index(drop=True)
    assert some.equals(same)


@pytest.mark.parametrize("n_levels", [1, 3])
def test_shortfall_lies_between_the_largest_and_the_sum_of_its_checks(n_levels):
    hours, _ = invented_hours(n_levels)
    checks = margins_by_check(hours, CHECKS)
    monthly, _, _ = risk_tables(hours, [ALL_YEAR])
    for row in monthly.itertuples():
        own = checks[checks["month"] == row.month]
        assert (own["n_hours"] == row.n_hours).all()
        if row.n_hours:
            assert own["shortfall"].max() - 1e-12 <= row.shortfall
            assert row.shortfall <= own["shortfall"].sum() + 1e-12
            # The smallest margin of an hour is at most that of each check, so its quantiles are.
            assert row.margin_p10 <= own["margin_p10"].min() + 1e-6
            assert row.margin_p50 <= own["margin_p50"].min() + 1e-6


def test_check_that_alone_fails_has_the_shortfall_and_the_margins_of_the_whole():
    hours, levels = invented_hours(3)
    alone = [consistent(np.where(np.arange(7)[:, None] == 2, m.checks, np.inf)) for m in levels]
    hours = replace(hours, central=alone[1], levels=alone)
    got = margins_by_check(hours, ["landing from 50 ft"])
    monthly, _, _ = risk_tables(hours, [ALL_YEAR])
    for column in ("month", "n_hours", "shortfall", "margin_p10", "margin_p50"):
        np.testing.assert_array_equal(got[column], monthly[column])


def test_hours_without_a_value_or_beyond_the_window_do_not_enter():
    hours, _ = invented_hours(1, "all")
    nothing = replace(hours, inside=np.zeros(len(hours.inside), bool))
    got = margins_by_check(nothing, CHECKS)
    assert (got["n_hours"] == 0).all()
    assert got[["shortfall", "margin_p10", "margin_p50"]].isna().all().all()


# ---- whole studies ---------------------------------------------------------------------------


@pytest.fixture(scope="module")
def result(tmp_path_factory):
    return run_study(make_study(tmp_path_factory.mktemp("checks") / "study").file)


def test_every_aircraft_has_a_row_for_each_of_its_checks_and_months(result):
    got = result.margins_monthly
    assert got.groupby(["field", "aircraft"], sort=False)["check"].agg(tuple).to_dict() == {
        (f, a): checks * 12
        for f in ("LOW", "MID", "TOP")
        for a, checks in (
            ("tourer", ALWAYS),
            ("trainer", (*ALWAYS, "rate of climb", "temperature limit")),
        )
    }


def test_limit_that_is_never_passed_fails_never_and_has_no_margin(result):
    got = result.margins_monthly
    limit = got[got["check"] == "temperature limit"]
    assert len(limit) == 36 and (limit["shortfall"] == 0.0).all()
    assert limit[["margin_p10", "margin_p50"]].isna().all().all()


def test_mass_beyond_the_tables_fails_every_check_of_a_table_in_every_hour(study_folder):
    study = study_folder().change("aircraft/trainer.toml", "maximum_kg = 760", "maximum_kg = 790")
    study.change("aircraft/trainer.toml", "planning_kg = 740", "planning_kg = 780")
    got = run_study(study.file).margins_monthly
    got = got[got["aircraft"] == "trainer"]
    limits = got["check"].isin(LIMITS)
    assert (got.loc[~limits, ["shortfall"]] == 1.0).all().all()
    assert (got.loc[~limits, ["margin_p10", "margin_p50"]] == -1.0).all().all()
    assert (got.loc[limits, "shortfall"] == 0.0).all()


def test_order_of_the_directions_changes_no_check(study_folder, result):
    study = study_folder()
    head, *rows = (study.folder / "runways.csv").read_text().splitlines(keepends=True)
    study.write("runways.csv", head + "".join(reversed(rows)))
    assert run_study(study.file).margins_monthly.equals(result.margins_monthly)


@pytest.mark.parametrize("with_error", [True, False])
def test_shortfall_lies_between_its_checks_at_a_field_of_carried_air(tmp_path, with_error):
    made = make_study(tmp_path / "study").write("study.toml", study_toml("synthetic", 2018, 2020))
    made.write("aircraft/trainer.toml", TABLE_AIRCRAFT.replace("= 45", "= 24"))
    study = read_study(made.file)
    grid = hour_grid(study.first_year, study.last_year)
    weather = load_weather(study, None, quiet)
    airs = [on_grid(s.station, s.hours, grid, s.elevation_trusted) for s in weather.stations]
    error = planning_error()
    if not with_error:
        error = replace(error, scale=np.zeros((12, 2)))
    failing = 0
    for field in study.fields:
        frames = field_tables(study, field, Region(grid, tuple(airs), error)).frames
        keys = ["field", "aircraft", "month"]
        whole = frames["risk_monthly"].set_index(keys)
        checks = frames["margins_monthly"].groupby(keys)
        assert (checks["n_hours"].nunique() == 1).all()
        assert (checks["n_hours"].first().reindex(whole.index) == whole["n_hours"]).all()
        largest = checks["shortfall"].max().reindex(whole.index)
        total = checks["shortfall"].sum().reindex(whole.index)
        assert (largest <= whole["shortfall"] + 1e-12).all()
        assert (whole["shortfall"] <= total + 1e-12).all()
        failing += int((largest > 0).sum())
        smallest = checks["margin_p10"].min().reindex(whole.index)
        assert (whole["margin_p10"] <= smallest + 1e-6).all()
    assert failing > 12
