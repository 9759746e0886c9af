"""A schedule against plain loops over a small made record, and the clock's awkward hours.

Rules of daylight saving: IANA Time Zone Database, through `zoneinfo`; the instants in the tests
are worked out by hand from its published changes, named beside them.
"""

from __future__ import annotations

import calendar
import datetime as dt
import pickle
from collections import Counter
from dataclasses import replace
from pathlib import Path
from typing import NamedTuple
from zoneinfo import ZoneInfo

import numpy as np
import pandas as pd
import pytest

from climarisk import risk
from climarisk.aircraft import AircraftProfile, PerformanceTable
from climarisk.clock import hour_grid, in_window, local_clock
from climarisk.fields import Field, RunwayDirection
from climarisk.flights import Flight
from climarisk.occasions import (
    Record,
    StandardHours,
    hours_text,
    instants_s,
    is_skipped,
    odd_readings,
    skipped_s,
    standard_hours,
    windows,
)
from climarisk.performance import CHECKS, margins
from climarisk.results import (
    SCHEDULE_DAYS_COLUMNS,
    SCHEDULE_FLIGHTS_COLUMNS,
    SCHEDULE_SEASONS_COLUMNS,
)
from climarisk.scene import Scene
from climarisk.schedule import NEAREST_NOT_TOLD, lighter_holds, schedule_frames, score_flights
from climarisk.seasons import read_seasons
from climarisk.study import Planning, Study
from climarisk.transfer import FieldAir
from climarisk.transfer_error import planning_error

FIRST, LAST = 2015, 2021
N_YEARS = LAST - FIRST + 1
GRID = hour_grid(FIRST, LAST)
RUNWAY = RunwayDirection("09", 90, 450, 610, 610, 660, 0.0, "paved", True, True)
FIELD = Field("F", "Field (invented)", 46.5, 11.0, 900.0, "Europe/Rome", (), (RUNWAY,))
TEMPERATURES = np.array([-20.0, 0.0, 20.0, 45.0])
ALTITUDES = np.array([0.0, 4000.0, 8000.0])


def made_table(mass, **first):
    """Return a table whose quantities rise with altitude, temperature and mass."""
    rise = 1 + ALTITUDES[:, None] / 12000 + (TEMPERATURES[None, :] + 20) / 130
    values = {n: v * (rise if "rate" not in n else 2 - rise / 1.6) for n, v in first.items()}
    return PerformanceTable(mass, ALTITUDES, TEMPERATURES, values, speed_kt=65.0)


PLANE = AircraftProfile(
    "plane", "Plane (invented)", "invented", "natural", True, 800.0, 760.0, 500.0,
    takeoff=(
        made_table(650.0, ground_roll_m=170.0, distance_50ft_m=290.0),
        made_table(800.0, ground_roll_m=240.0, distance_50ft_m=400.0),
    ),
    landing=(made_table(800.0, distance_50ft_m=285.0),),
    climb=(made_table(650.0, rate_ft_min=900.0), made_table(800.0, rate_ft_min=640.0)),
    takeoff_factor=1.0, landing_factor=1.4, climb_rate_ft_min=420.0, limit_temperature_c=36.0,
)  # fmt: skip
YEAR_COLUMNS = ["year_low", "year_high", "worst_year"]
SEASONS = tuple(
    read_seasons({"summer": ["06-15", "09-15"], "winter": ["12-20", "01-20"]}, Path("x"), [])
)
STUDY = Study(
    Path("x"), "Made", (FIELD,), (PLANE,), (), "files", FIRST, LAST, 100.0, (6, 20), SEASONS,
    (0.05, 0.2), 0.9, True, planning=Planning(holds_in=0.9, target=0.05),
)  # fmt: skip


def made_scene(field=FIELD, error=True, study=STUDY, missing=True, seed=1):
    """Return a scene of warm and cold years, with gaps, half of it carried from elsewhere."""
    rng = np.random.default_rng(seed)
    clock = local_clock(field, GRID, FIRST, LAST)
    year = np.clip(clock.year, 0, N_YEARS - 1)
    t = 18 + 3 * np.cos((clock.month - 6) / 12 * 2 * np.pi)
    t = t + 6 * np.cos((clock.hour - 14) / 24 * 2 * np.pi) + rng.normal(0, 4, len(GRID))
    t = t + np.linspace(-2, 2, N_YEARS)[rng.permutation(N_YEARS)][year]
    if missing:
        t[rng.random(len(GRID)) < 0.04] = np.nan
        t[(clock.year == 2) & (clock.month == 6) & (clock.hour == 13)] = np.nan
        t[(clock.hour == 3) | ((clock.hour == 4) & (clock.month < 9))] = np.nan
    far = np.where(rng.random(len(GRID)) < 0.5, np.nan, 400.0)
    whole = np.ones(len(GRID))
    air = FieldAir(
        t, 8 * whole, 910 + rng.normal(0, 5, len(GRID)), whole[None], far, far / 40,
        whole.astype(np.uint8), 0 * whole,
    )  # fmt: skip
    planned = planning_error()
    return Scene(
        study, field, (), 0, air, clock,
        in_window(study.window, field, GRID, clock), in_window("daylight", field, GRID, clock),
        planned if error else replace(planned, scale=np.zeros((12, 2))),
    )  # fmt: skip


def flight(name, dates, time, operation="both", mass=None, repeats=1, field="F"):
    found = tuple(sorted(dt.date.fromisoformat(d) for d in dates.split()))
    at = dt.time.fromisoformat(time)
    return Flight(name, field, "plane", operation, found, at, mass, repeats, dates)


FLIGHTS = (
    flight("noon", "2027-07-01 2027-07-20 2027-08-03", "14:10", repeats=2),
    flight("light", "2027-07-05", "16:30", "takeoff", 700.0),
    flight("land", "2027-06-10 2027-06-16 2027-12-31", "13:00", "landing", 800.0),
    flight("new year", "2027-01-02 2027-12-25", "12:40", "takeoff", 799.0),
    flight("leap", "2028-02-29", "15:00", "both", 790.0),
    flight("closed", "2027-07-01", "04:00"),
    flight("peak", "2027-08-10", "15:10", "takeoff", 755.0),
    flight("partly", "2027-08-28 2027-09-20 2027-10-20", "05:10", "both", 800.0, 3),
)


@pytest.fixture(scope="module")
def scene():
    return made_scene()


@pytest.fixture(scope="module")
def frames(scene):
    study = replace(STUDY, flights=FLIGHTS)
    return schedule_frames(study, [score_flights(scene, FLIGHTS)])


# Plain loops


def standard_reading(date, time):
    """Date and hour of local standard time in Rome by the rule of the European Union.

    Directive 2000/84/EC: clocks are an hour ahead from the last Sunday of March to the last
    Sunday of October.
    """

    def last_sunday(month):
        day = dt.date(date.year, month, 31)
        return day - dt.timedelta(days=(day.weekday() + 1) % 7)

    reading = dt.datetime.combine(date, time)
    if last_sunday(3) <= date < last_sunday(10):
        reading -= dt.timedelta(hours=1)
    rounded = reading + dt.timedelta(minutes=30)
    return rounded.date(), rounded.hour


class Entering(NamedTuple):
    """Hours that enter: places in the known hours by date and hour, and the counting cells."""

    places: dict
    cells: set


def entering(scene):
    """Hours of cells with 80 % of their days, in standard time one hour ahead of UTC."""
    found, days = {}, Counter()
    for n, place in enumerate(scene.known.tolist()):
        local = dt.datetime(1970, 1, 1) + dt.timedelta(hours=int(GRID[place]) + 1)
        found[local.date(), local.hour] = n
        days[local.year, local.month, local.hour] += 1
    cells = {
        (year, month, hour)
        for (year, month, hour), n in days.items()
        if n >= 0.8 * calendar.monthrange(year, month)[1]
    }
    places = {(d, h): n for (d, h), n in found.items() if (d.year, d.month, h) in cells}
    return Entering(places, cells)


@pytest.fixture(scope="module")
def hours_of(scene):
    return entering(scene)


@pytest.fixture(scope="module")
def checks_at(scene):
    """Checks of every known hour at every level, by mass; shape (n_levels, 7, n_known)."""
    made = {}

    def at(mass):
        if mass not in made:
            loaded = PLANE if mass is None else replace(PLANE, planning_kg=mass)
            airs = [scene.table_air(scene.known, s[scene.known]) for s in scene.shifts]
            made[mass] = np.array([margins(loaded, FIELD, air).checks for air in airs])
        return made[mass]

    return at


ROWS = {"takeoff": [0, 1, 3, 4, 5, 6], "landing": [2, 5, 6], "both": [0, 1, 2, 3, 4, 5, 6]}


def days_of(date, year):
    """The 31 days around a date in a year."""
    day = min(date.day, 28) if date.month == 2 else date.day
    if date.month == 2 and date.day == 29 and year in (2016, 2020):
        day = 29
    middle = dt.date(year, date.month, day)
    return [middle + dt.timedelta(days=k) for k in range(-15, 16)]


def is_known(date, hour, hours_of):
    """Whether the month and hour of a date have figures in some year."""
    return any((y, date.month, hour) in hours_of.cells for y in range(FIRST, LAST + 1))


def window_of(date, hour, year, hours_of):
    """Hours of one window that enter; none where the date has no figures."""
    if not is_known(date, hour, hours_of):
        return []
    days = days_of(date, year)
    return [hours_of.places[d, hour] for d in days if (d, hour) in hours_of.places]


def covered(date, time, hours_of):
    """Share of the days of a date's window in each year whose cell counts."""
    day, hour = standard_reading(date, time)
    shares = []
    for year in range(FIRST, LAST + 1):
        days = [d for d in days_of(day, year) if FIRST <= d.year <= LAST]
        shares.append(np.mean([(d.year, d.month, hour) in hours_of.cells for d in days]))
    return np.array(shares) * is_known(day, hour, hours_of)


def years_of(dates):
    """Years that take part in the figures of a date, on average, rounded down."""
    years = [(n > 0).sum() for _, n, _ in dates if n.sum()]
    return int(np.floor(np.mean(years))) if years else 0


def counted(entry, hours_of, checks_at):
    """Return, for each date, its hours by year and its shortfalls by year and level."""
    checks = checks_at(entry.mass_kg)
    dates = []
    for date in entry.dates:
        day, hour = standard_reading(date, entry.time)
        n, fallen = np.zeros(N_YEARS), np.zeros((N_YEARS, len(checks)))
        for y in range(N_YEARS):
            for place in window_of(day, hour, FIRST + y, hours_of):
                n[y] += 1
                for level in range(len(checks)):
                    fallen[y, level] += min(checks[level, ROWS[entry.operation], place]) < 0
        dates.append((date, n, fallen))
    return dates


def share_of(dates):
    """The share of a flight: the mean of its dates with figures."""
    shares = [f.sum() / n.sum() / f.shape[1] for _, n, f in dates if n.sum()]
    return np.mean(shares) if shares else np.nan


def drawn_shares(scene, dates):
    """The share of a flight in each resample, each date's hours scaled to the same number."""
    n = sum(n / n.sum() for _, n, _ in dates if n.sum())
    fallen = sum(f / n.sum() for _, n, f in dates if n.sum())
    years = risk.year_weights(N_YEARS)
    levels = risk.level_weights(fallen.shape[1], scene.error.place_share)
    drawn = []
    for w, v in zip(years, levels, strict=True):
        drawn.append((w[:, None] * v * fallen).sum() / (w * n).sum())
    return np.array(drawn)


@pytest.fixture(scope="module")
def brute(scene, hours_of, checks_at):
    return {entry.id: counted(entry, hours_of, checks_at) for entry in FLIGHTS}


def test_columns_and_order_are_those_of_the_contract(frames):
    assert list(frames["schedule_flights"]) == SCHEDULE_FLIGHTS_COLUMNS
    assert list(frames["schedule_seasons"]) == SCHEDULE_SEASONS_COLUMNS
    assert list(frames["schedule_days"]) == SCHEDULE_DAYS_COLUMNS
    assert frames["schedule_flights"]["flight"].tolist() == [f.id for f in FLIGHTS]


def test_shares_counts_and_coverage_are_those_of_plain_loops(frames, brute, hours_of):
    table = frames["schedule_flights"].set_index("flight")
    for entry in FLIGHTS:
        row, dates = table.loc[entry.id], brute[entry.id]
        assert row["shortfall"] == pytest.approx(share_of(dates), rel=1e-12, nan_ok=True)
        cover = [covered(date, entry.time, hours_of) for date in entry.dates]
        assert row["coverage"] == pytest.approx(np.mean(cover))
        assert row["n_years"] == years_of(dates)
        known = sum(n.sum() > 0 for _, n, _ in dates)
        if known:
            assert row["affected"] == pytest.approx(share_of(dates) * known * entry.repeats)
        assert row["flights"] == len(entry.dates) * entry.repeats
        assert row["unknown_flights"] == (len(dates) - known) * entry.repeats
    some = table["shortfall"]
    assert some["noon"] > some["light"] and (some.dropna().between(0.001, 0.999)).sum() >= 4


def test_every_hour_is_counted_once(frames, hours_of):
    for entry in FLIGHTS:
        places = {
            p
            for date in entry.dates
            for y in range(FIRST, LAST + 1)
            for p in window_of(*standard_reading(date, entry.time), y, hours_of)
        }
        table = frames["schedule_flights"].set_index("flight")
        assert table.loc[entry.id, "n_hours"] == len(places)


def test_flight_without_figures_is_unknown_and_never_fine(frames):
    row = frames["schedule_flights"].set_index("flight").loc["closed"]
    assert row[["shortfall", "affected", "mass_that_holds_kg", "nearest_shift_h"]].isna().all()
    assert row[["limiting", "outcome", "nearest_time", "never_met", "interval_note"]].tolist() == (
        [""] * 5
    )
    assert (row["n_hours"], row["n_years"], row["coverage"]) == (0, 0, 0.0)
    assert row["unknown_flights"] == row["flights"] == 1


def test_dates_without_figures_are_unknown_one_by_one(frames, brute):
    # Hour 4 of the record is closed until September: of the three dates one or two are known.
    known = [n.sum() > 0 for _, n, _ in brute["partly"]]
    assert 0 < sum(known) < 3
    whole = frames["schedule_seasons"].iloc[0]
    assert whole["unknown_flights"] == 1 + 3 * (3 - sum(known))
    assert whole["flights"] == sum(len(f.dates) * f.repeats for f in FLIGHTS)
    row = frames["schedule_flights"].set_index("flight").loc["partly"]
    assert row["unknown_flights"] == 3 * (3 - sum(known))
    assert row["affected"] == pytest.approx(
        row["shortfall"] * (row["flights"] - row["unknown_flights"])
    )


def test_limiting_check_is_the_most_frequent_of_plain_loops(frames, hours_of, checks_at):
    table = frames["schedule_flights"].set_index("flight")
    for entry in FLIGHTS:
        rows, checks, votes = ROWS[entry.operation], checks_at(entry.mass_kg), [0.0] * 7
        for date in entry.dates:
            day, hour = standard_reading(date, entry.time)
            found = [window_of(day, hour, y, hours_of) for y in range(FIRST, LAST + 1)]
            every = [p for places in found for p in places]
            for p in every:
                for level in checks:
                    values = level[rows, p].tolist()
                    if min(values) < 0:
                        votes[rows[values.index(min(values))]] += 1 / len(every)
        limiting = CHECKS[int(np.argmax(votes))] if max(votes) > 0 else ""
        assert table.loc[entry.id, "limiting"] == limiting


def test_intervals_are_those_of_resampled_years(frames, scene, brute):
    table = frames["schedule_flights"].set_index("flight")
    for name in ("noon", "light", "land", "leap"):
        n = int(table.loc[name, "n_years"])
        tail = risk.expanded_tail(n, 0.9)
        bounds = np.quantile(
            drawn_shares(scene, brute[name]), [tail, 1 - tail], method="median_unbiased"
        )
        np.testing.assert_allclose(table.loc[name, ["ci_low", "ci_high"]].tolist(), bounds)
    # One date: the construction of the monthly shares, to the last digit that rounding leaves.
    _, n, fallen = brute["leap"][0]
    low, high = risk._intervals(
        fallen[None], n[None], np.array([years_of(brute["leap"])]), 0.9, scene.error.place_share
    )
    got = table.loc["leap", ["ci_low", "ci_high"]].tolist()
    np.testing.assert_allclose(got, [low[0], high[0]], rtol=1e-9)


def in_season(date, i):
    return i == 0 or (date.month, date.day) in SEASONS[i - 1].days


def test_seasons_add_up_with_the_weather_shared(frames, scene, brute, hours_of):
    for i, row in frames["schedule_seasons"].iterrows():
        affected, drawn = 0.0, np.zeros(risk.RESAMPLES)
        (by_year, hours, with_year), known = np.zeros((3, N_YEARS)), 0
        for entry in FLIGHTS:
            dates = [d for d in brute[entry.id] if in_season(d[0], i) and d[1].sum()]
            if not dates:
                continue
            flights = len(dates) * entry.repeats
            known += flights
            affected += flights * share_of(dates)
            drawn += flights * drawn_shares(scene, dates)
            for date, n, f in dates:
                with_year += entry.repeats * covered(date, entry.time, hours_of)
                for y in range(N_YEARS):
                    by_year[y] += entry.repeats * f[y].mean() / n.sum()
                    hours[y] += entry.repeats * n[y] / n.sum()
        assert row["affected"] == pytest.approx(affected)
        counts = with_year >= 0.8 * known
        assert row["n_years"] == counts.sum() >= 5
        tail = risk.expanded_tail(int(counts.sum()), 0.9)
        bounds = np.quantile(drawn, [tail, 1 - tail], method="median_unbiased")
        np.testing.assert_allclose([row["ci_low"], row["ci_high"]], bounds)
        values = (by_year * known)[counts] / hours[counts]
        assert row["year_low"] == pytest.approx(values.min())
        assert row["year_high"] == pytest.approx(values.max())
        assert row["worst_year"] == np.arange(FIRST, LAST + 1)[counts][values.argmax()]


def test_days_are_those_of_plain_loops_the_worst_first(frames, brute):
    days = {}
    for entry in FLIGHTS:
        for date, n, fallen in brute[entry.id]:
            day = days.setdefault(date, [0, 0, 0.0])
            day[0] += entry.repeats
            day[1] += 0 if n.sum() else entry.repeats
            day[2] += entry.repeats * fallen.sum() / max(n.sum(), 1) / fallen.shape[1]
    table = frames["schedule_days"]
    assert sorted(table["date"]) == sorted(d.isoformat() for d in days)
    for row in table.to_dict("records"):
        date = dt.date.fromisoformat(row["date"])
        flights, unknown, affected = days[date]
        assert (row["flights"], row["unknown_flights"]) == (flights, unknown)
        assert row["weekday"] == f"{date:%A}"
        if flights > unknown:
            assert row["affected"] == pytest.approx(affected)
            assert row["share"] == pytest.approx(affected / (flights - unknown))
        else:
            assert np.isnan(row["affected"]) and np.isnan(row["share"])
    known = table["affected"].dropna().tolist()
    assert known == sorted(known, reverse=True)
    assert table["affected"].sum() == pytest.approx(frames["schedule_flights"]["affected"].sum())


def test_mass_that_holds_does_and_a_little_more_does_not(scene, frames, hours_of, checks_at):
    table = frames["schedule_flights"].set_index("flight")
    for entry in FLIGHTS:
        row = table.loc[entry.id]
        if row["outcome"] != "mass":
            continue
        for mass, holds in (
            (row["mass_that_holds_kg"], True),
            (row["useful_load_kg"] + 500.000001, False),
        ):
            dates = counted(replace(entry, mass_kg=mass), hours_of, checks_at)
            assert bool(share_of(dates) <= 0.1 + 1e-9) is holds
    assert (table["outcome"] == "mass").sum() >= 3


def test_nearest_time_is_that_of_plain_loops(frames, hours_of, checks_at):
    table = frames["schedule_flights"].set_index("flight")
    moved = 0
    for entry in FLIGHTS:
        row = table.loc[entry.id]
        if np.isnan(row["shortfall"]):
            continue
        best, told = None, 0
        own = [d for d, n, _ in counted(entry, hours_of, checks_at) if n.sum()]
        for shift in sorted(range(-12, 13), key=lambda s: (abs(s), s)):
            start = dt.datetime(2027, 1, 1, entry.time.hour, entry.time.minute)
            there = start + dt.timedelta(hours=shift)
            dates = tuple(d + (there.date() - start.date()) for d in own)
            hours = [standard_reading(d, there.time())[1] for d in dates]
            found = counted(replace(entry, dates=dates, time=there.time()), hours_of, checks_at)
            known = all(n.sum() > 0 for _, n, _ in found)
            inside = all(6 <= h <= 20 for h in hours)
            told += shift != 0 and known and inside
            if share_of(found) < 0.05 and (shift == 0 or (known and inside)):
                best = shift, f"{there:%H:%M}", share_of(found)
                break
        if best is None:
            assert row["nearest_time"] == "" and pd.isna(row["nearest_shift_h"])
            assert told and NEAREST_NOT_TOLD not in row["note"]
            continue
        moved += best[0] != 0
        assert (row["nearest_shift_h"], row["nearest_time"]) == best[:2]
        assert row["nearest_shortfall"] == pytest.approx(best[2])
    assert moved >= 1


def test_time_outside_the_hours_window_is_noted(frames):
    table = frames["schedule_flights"].set_index("flight")
    for entry in FLIGHTS:
        hours = [standard_reading(date, entry.time)[1] for date in entry.dates]
        outside = sum(not 6 <= hour <= 20 for hour in hours)
        assert outside in (0, len(hours))
        notes = ["outside the hours window"] if outside else []
        notes += [NEAREST_NOT_TOLD] if entry.id == "closed" else []
        assert table.loc[entry.id, "note"] == "; ".join(notes)
    assert (table["note"] != "").sum() == 2


def test_notes_of_a_time_are_joined(scene):
    entries = (
        flight("some", "2027-07-01 2027-08-01 2027-12-01", "06:20"),  # 05 standard in summer
        flight("skipped", "2027-03-28 2028-03-26 2027-04-01", "02:30"),
        flight("twice", "2027-10-31", "02:30"),
    )
    notes = score_flights(scene, entries).flights["note"].tolist()
    # Clocks change on the last Sundays of March and October, Directive 2000/84/EC.
    assert notes == [
        "outside the hours window on 2 of 3 dates",
        "outside the hours window; 02:30 does not exist on 2027-03-28, 2028-03-26; "
        "the reading an hour later is taken",
        "outside the hours window; 02:30 comes twice on 2027-10-31; the first is taken",
    ]
    all_day = replace(scene, study=replace(STUDY, window="all"))
    notes = score_flights(all_day, entries).flights["note"].tolist()
    assert notes[0] == "" and notes[2].startswith("02:30 comes twice")


def test_steep_field_is_marked(scene):
    assert score_flights(scene, FLIGHTS[:1]).flights["steep"].tolist() == [""]
    steep = replace(scene, field=replace(FIELD, runways=(replace(RUNWAY, slope_pct=-2.1),)))
    assert score_flights(steep, FLIGHTS[5:7]).flights["steep"].tolist() == ["yes", "yes"]


@pytest.mark.parametrize("chosen", [(), (5,), (1,), (1, 5)])
def test_whole_numbers_stay_whole_whatever_the_other_rows_hold(scene, chosen):
    entries = tuple(FLIGHTS[i] for i in chosen)
    study = replace(STUDY, flights=entries)
    table = schedule_frames(study, [score_flights(scene, entries)])["schedule_flights"]
    kinds = table[["flights", "n_hours", "n_years", "nearest_shift_h"]].dtypes.astype(str)
    assert kinds.tolist() == ["int64", "int64", "int64", "Int64"]
    text = table.set_index("flight")["nearest_shift_h"].to_csv(header=False).split()
    wanted = {"light": "light,0", "closed": "closed,"}
    assert text == [wanted[entry.id] for entry in entries]


def test_two_like_flights_are_twice_the_count_with_twice_the_interval(scene):
    first = flight("a", "2027-07-01 2027-07-20", "14:10")
    once, twice = (
        schedule_frames(replace(STUDY, flights=flights), [score_flights(scene, flights)])
        for flights in ((first,), (first, replace(first, id="b")))
    )
    counts = ["flights", "affected", "ci_low", "ci_high", "year_low", "year_high"]
    got, wanted = (f["schedule_seasons"].loc[0, counts].to_numpy(float) for f in (twice, once))
    # A product of matrices may sum in another order: the last digit or two are its own.
    np.testing.assert_allclose(got, 2 * wanted, rtol=1e-14)
    assert wanted[3] > wanted[2] > 0
    a, b = (twice["schedule_flights"].drop(columns="flight").loc[[i]] for i in (0, 1))
    pd.testing.assert_frame_equal(a, b.set_index(a.index), rtol=1e-14)


def test_fields_share_the_years_that_are_drawn(scene):
    # The same air at two fields: the sum is as uncertain as one field twice.
    other = replace(FIELD, id="G")
    here, there = flight("a", "2027-07-01", "14:10"), flight("b", "2027-07-01", "14:10", field="G")
    study = replace(STUDY, fields=(FIELD, other), flights=(here, there))
    scores = [
        score_flights(replace(scene, study=study, field=f), (here, there)) for f in (FIELD, other)
    ]
    both = schedule_frames(study, scores)["schedule_seasons"].loc[0]
    one = schedule_frames(study, scores[:1])["schedule_seasons"].loc[0]
    for column in ("affected", "ci_low", "ci_high", "year_high"):
        assert both[column] == pytest.approx(2 * one[column], rel=1e-14)
    pd.testing.assert_frame_equal(pickle.loads(pickle.dumps(scores[0])).flights, scores[0].flights)


def test_field_without_flights_adds_nothing(scene, frames):
    idle = replace(scene, field=replace(FIELD, id="IDLE"))
    study = replace(STUDY, flights=FLIGHTS)
    both = [score_flights(idle, FLIGHTS), score_flights(scene, FLIGHTS)]
    assert len(both[0].flights) == 0 == both[0].planned.sum()
    for name, table in schedule_frames(study, both).items():
        pd.testing.assert_frame_equal(table, frames[name])
    none = schedule_frames(STUDY, both[:1])
    assert len(none["schedule_flights"]) == len(none["schedule_days"]) == 0
    assert list(none["schedule_flights"]) == SCHEDULE_FLIGHTS_COLUMNS
    assert none["schedule_seasons"]["flights"].tolist() == [0, 0, 0]


def test_flight_that_falls_short_in_every_hour_can_never_be_met():
    heavy = replace(PLANE, maximum_kg=900.0)
    study = replace(STUDY, aircraft=(heavy,))
    entry = flight("heavy", "2027-07-01", "12:00", "takeoff", 850.0)  # no table goes there
    row = score_flights(made_scene(study=study), (entry,)).flights.iloc[0]
    assert (row["shortfall"], row["never_met"], row["affected"]) == (1.0, "yes", 1.0)
    assert row["nearest_time"] == "" and row["outcome"] == "mass"
    short = replace(FIELD, runways=(replace(RUNWAY, tora_m=100.0),))
    row = score_flights(made_scene(short), (flight("x", "2027-07-01", "12:00"),)).flights.iloc[0]
    assert (row["outcome"], row["never_met"]) == ("cannot be met", "yes")
    assert np.isnan(row["mass_that_holds_kg"]) and np.isnan(row["useful_load_kg"])


def test_measured_air_has_one_level_and_few_years_have_no_interval():
    scene = made_scene(error=False)
    assert len(scene.shifts) == 0
    row = score_flights(scene, FLIGHTS[:1]).flights.iloc[0]
    assert 0 < row["ci_low"] < row["shortfall"] < row["ci_high"]
    scene.air.temperature_c[scene.clock.year > 3] = np.nan
    few = score_flights(replace(scene), FLIGHTS[:1])
    assert few.flights.loc[0, "interval_note"] == "no interval below 5 years"
    assert np.isnan(few.flights.loc[0, "ci_low"])
    seasons = schedule_frames(replace(STUDY, flights=FLIGHTS[:1]), [few])["schedule_seasons"]
    assert seasons.loc[0, "affected"] > 0 and seasons.loc[0, "n_years"] == 3
    assert seasons.loc[0, ["ci_low", "ci_high", *YEAR_COLUMNS]].isna().all()
    assert seasons.loc[0, "interval_note"] == "no interval below 5 years"
    assert seasons.loc[2, "flights"] == 0 and np.isnan(seasons.loc[2, "affected"])


def test_field_without_a_known_hour_has_unknown_flights_only():
    scene = made_scene()
    scene.air.temperature_c[:] = np.nan
    frames = schedule_frames(replace(STUDY, flights=FLIGHTS), [score_flights(scene, FLIGHTS)])
    assert frames["schedule_flights"]["shortfall"].isna().all()
    whole = frames["schedule_seasons"].iloc[0]
    assert whole["unknown_flights"] == whole["flights"] == 24 and np.isnan(whole["affected"])


def test_schedule_of_unknown_flights_only_has_no_figure_anywhere(scene):
    entry = flight("closed", "2027-07-01 2027-07-02", "04:00", repeats=3)
    study = replace(STUDY, flights=(entry,))
    frames = schedule_frames(study, [score_flights(scene, (entry,))])
    row = frames["schedule_flights"].iloc[0]
    assert (row["flights"], row["unknown_flights"], row["interval_note"]) == (6, 6, "")
    assert NEAREST_NOT_TOLD in row["note"] and row["nearest_time"] == ""
    assert row[["shortfall", "affected", "ci_low", "mass_that_holds_kg"]].isna().all()
    assert frames["schedule_seasons"]["unknown_flights"].tolist() == [6, 6, 0]
    figures = ["affected", "ci_low", "ci_high", *YEAR_COLUMNS]
    assert frames["schedule_seasons"][figures].isna().all(axis=None)
    assert frames["schedule_seasons"]["interval_note"].tolist() == [""] * 3
    assert frames["schedule_days"][["affected", "share"]].isna().all(axis=None)
    assert frames["schedule_days"]["unknown_flights"].tolist() == [3, 3]


def test_dates_have_figures_where_the_hourly_tables_have(scene, hours_of):
    record = Record(scene.clock, scene.known)
    dates = np.arange("2028-01-01", "2029-01-01", dtype="datetime64[D]")
    for hour in (4, 13):
        found = windows(record, StandardHours(dates, np.full(len(dates), hour), 0 * hour))
        known = [is_known(date, hour, hours_of) for date in dates.tolist()]
        assert (found.of_date > 0).tolist() == known
        assert all(known) is (hour == 13) and any(known)


def test_archive_with_each_month_from_another_year_has_every_date():
    scene, year_of_month = made_scene(error=False, missing=False), (np.arange(12) * 5) % 7
    kept = scene.clock.year == year_of_month[scene.clock.month]
    scene.air.temperature_c[~kept] = np.nan
    days = " ".join(str(dt.date(2027, 6, 15) + dt.timedelta(days=n)) for n in range(93))
    entry = flight("a", days, "14:10")
    study = replace(STUDY, flights=(entry,))
    scores = score_flights(scene, (entry,))
    row, hours = scores.flights.iloc[0], entering(scene)
    dates = counted(entry, hours, lambda _: margins(PLANE, FIELD, scene.central_air).checks[None])
    assert row["unknown_flights"] == 0 and row["shortfall"] == pytest.approx(share_of(dates))
    # Around every date, the ends of the months too, as many days as its months are long.
    assert min(n.sum() for _, n, _ in dates) >= 16
    assert row["n_years"] == 1 and row["coverage"] == pytest.approx(1 / 7)
    assert row["interval_note"] == "no interval below 5 years" and np.isnan(row["ci_low"])
    whole = schedule_frames(study, [scores])["schedule_seasons"].iloc[0]
    assert whole["affected"] == pytest.approx(93 * row["shortfall"]) and whole["n_years"] == 0
    assert whole["interval_note"] == "no interval below 5 years"
    assert whole[["ci_low", "ci_high", *YEAR_COLUMNS]].isna().all()


def test_expected_number_lies_between_the_best_and_the_worst_year(scene):
    whole = made_scene(missing=False)
    frames = schedule_frames(STUDY, [score_flights(whole, FLIGHTS)])
    for row in frames["schedule_seasons"].to_dict("records"):
        assert row["n_years"] == N_YEARS and row["year_low"] < row["affected"] < row["year_high"]
    # However unevenly the flights' hours lie over the years, when all years know all flights.
    rng, none = np.random.default_rng(3), score_flights(scene, ())
    for _ in range(50):
        hours = rng.dirichlet(np.full(N_YEARS, 0.5), size=4)  # of four flights in each year
        short = hours * rng.integers(0, 2, hours.shape)
        sums = {
            "planned": 4.0,
            "affected": short.sum(),
            "drawn": np.full(risk.RESAMPLES, short.sum()),
            "of_year": short.sum(axis=0),
            "hours_of_year": hours.sum(axis=0),
            "with_year": np.full(N_YEARS, 4.0),
        }
        score = replace(none, **{name: np.array([value] * 3) for name, value in sums.items()})
        row = schedule_frames(STUDY, [score])["schedule_seasons"].iloc[0]
        assert row["year_low"] - 1e-12 <= row["affected"] <= row["year_high"] + 1e-12


def made_steady(hot_c=45.0, cool_c=-5.0, cool_hours=(), study=STUDY):
    """A scene of one temperature but for some hours of the day."""
    scene = made_scene(study=study, error=False, missing=False)
    scene.air.temperature_c[:] = np.where(np.isin(scene.clock.hour, cool_hours), cool_c, hot_c)
    return scene


def test_nearest_time_asks_only_the_dates_with_figures():
    # July is unknown at the flight's own hour, 13, and at the cool one, 10.
    scene = made_steady(cool_hours=(10,))
    july = (scene.clock.month == 6) & np.isin(scene.clock.hour, (10, 13))
    scene.air.temperature_c[july] = np.nan
    entry = flight("a", "2027-07-10 2027-08-20", "14:00")
    row = score_flights(scene, (entry,)).flights.iloc[0]
    assert (row["flights"], row["unknown_flights"], row["shortfall"]) == (2, 1, 1.0)
    assert (row["nearest_time"], row["nearest_shift_h"], row["note"]) == ("11:00", -3, "")
    # At an own time with figures on both dates the cool hour does not do.
    row = score_flights(scene, (replace(entry, time=dt.time(15)),)).flights.iloc[0]
    assert (row["unknown_flights"], row["nearest_time"], row["note"]) == (0, "", "")


def test_nearest_time_that_cannot_be_told_is_not_none_within_reach():
    scene, entry = made_steady(), flight("a", "2027-07-10", "14:00")
    row = score_flights(scene, (entry,)).flights.iloc[0]
    assert (row["nearest_time"], row["note"]) == ("", "")  # every hour falls short
    # Only the own hour lies inside the window: there is no other time, which can be told.
    alone = replace(scene, study=replace(STUDY, window=(13, 13)))
    assert score_flights(alone, (entry,)).flights["note"].tolist() == [""]
    scene.air.temperature_c[scene.clock.hour != 13] = np.nan
    row = score_flights(replace(scene), (entry,)).flights.iloc[0]
    assert row["shortfall"] == 1.0
    assert (row["nearest_time"], row["note"]) == ("", NEAREST_NOT_TOLD)


def test_nearest_time_is_none_that_clocks_skip():
    # Clocks in Rome go from 02:00 to 03:00 on 28 March 2027, Directive 2000/84/EC: the cool
    # hour 3 of standard time is 03:30 on the clock, and 02:30 does not exist.
    scene = made_steady(cool_hours=(3,), study=replace(STUDY, window="all"))
    row = score_flights(scene, (flight("a", "2027-03-28", "01:30"),)).flights.iloc[0]
    assert (row["shortfall"], row["nearest_time"], row["nearest_shift_h"]) == (1.0, "03:30", 2)
    dates = np.array(["2027-03-28"], "datetime64[D]")
    assert is_skipped("Europe/Rome", dates, dt.time(1, 30), 1)
    assert not is_skipped("Europe/Rome", dates, dt.time(1, 30), 2)


def test_tables_that_may_hold_heavy_and_not_light_are_checked_hour_by_hour():
    assert lighter_holds(PLANE)
    blank = replace(
        PLANE.takeoff[0], values={k: v.copy() for k, v in PLANE.takeoff[0].values.items()}
    )
    blank.values["distance_50ft_m"][0, -1] = np.nan
    holed = replace(PLANE, takeoff=(blank, PLANE.takeoff[1]))
    other = replace(PLANE.takeoff[0], temperature_c=TEMPERATURES + 1.0)
    assert not lighter_holds(holed) and not lighter_holds(
        replace(PLANE, takeoff=(other, PLANE.takeoff[1]))
    )
    # At 650 kg the blank corner of the light table decides, whatever holds at more.
    # No landing would do here, and a take-off does not ask for one.
    study = replace(STUDY, aircraft=(holed,))
    place = replace(FIELD, runways=(replace(RUNWAY, lda_m=100.0),))
    scene = made_scene(place, study=study, error=False)
    entry = flight("a", "2027-07-20", "15:00", "takeoff", 650.0)
    got = score_flights(scene, (entry,)).flights.loc[0, "shortfall"]
    checks = margins(replace(holed, planning_kg=650.0), place, scene.central_air).checks
    record = Record(scene.clock, scene.known)
    dates = np.array(entry.dates, "datetime64[D]")
    places = windows(record, standard_hours(FIELD.timezone, dates, entry.time)).places
    assert got == pytest.approx((checks[ROWS["takeoff"]][:, places] < 0).any(axis=0).mean())
    assert 0.0 < got < 1.0


# The clock


def reading(zone, text):
    seconds = np.array([text], "datetime64[s]").astype("int64")
    return str(instants_s(zone, seconds).astype("datetime64[s]")[0])


@pytest.mark.parametrize(
    ("zone", "clock", "utc"),
    [
        # Rome: 28 March 2027 at 01:00 UTC from +1 to +2, 31 October 2027 at 01:00 UTC back.
        ("Europe/Rome", "2027-03-28T01:59", "2027-03-28T00:59:00"),
        ("Europe/Rome", "2027-03-28T02:30", "2027-03-28T01:30:00"),  # skipped: clocks say 03:30
        ("Europe/Rome", "2027-03-28T03:00", "2027-03-28T01:00:00"),
        ("Europe/Rome", "2027-10-31T02:30", "2027-10-31T00:30:00"),  # comes twice: the first
        ("Europe/Rome", "2027-10-31T03:00", "2027-10-31T02:00:00"),
        ("Europe/Rome", "2027-07-01T12:00", "2027-07-01T10:00:00"),
        # Lord Howe: +11 in summer, +10:30 else; 4 April and 3 October 2027 at 02:00.
        ("Australia/Lord_Howe", "2027-04-04T01:45", "2027-04-03T14:45:00"),
        ("Australia/Lord_Howe", "2027-10-03T02:15", "2027-10-02T15:45:00"),
        ("Australia/Lord_Howe", "2027-07-01T12:00", "2027-07-01T01:30:00"),
        # Kathmandu: +5:45 all year.
        ("Asia/Kathmandu", "2027-07-01T12:00", "2027-07-01T06:15:00"),
        # Samoa left out 30 December 2011, from -10 (summer) to +14.
        ("Pacific/Apia", "2011-12-31T12:00", "2011-12-30T22:00:00"),
    ],
)
def test_clock_reading_is_the_instant_of_the_zone_database(zone, clock, utc):
    assert reading(zone, clock) == utc


@pytest.mark.parametrize(
    "zone", ["Europe/Rome", "Australia/Lord_Howe", "Europe/Dublin", "Asia/Kathmandu"]
)
def test_skipped_and_repeated_readings_are_those_no_or_two_instants_show(zone):
    # Every quarter of an hour of 2027 as an instant, and what clocks show then.
    start, quarter = dt.datetime(2027, 1, 1, tzinfo=dt.UTC), dt.timedelta(minutes=15)
    instants = (start + n * quarter for n in range(-100, 365 * 96 + 100))
    shown = Counter(i.astimezone(ZoneInfo(zone)).replace(tzinfo=None) for i in instants)
    readings = [dt.datetime(2027, 1, 1) + n * quarter for n in range(365 * 96)]
    seconds = np.array(readings, "datetime64[s]").astype("int64")
    jumps = skipped_s(zone, seconds)
    times = np.array([shown[reading] for reading in readings])
    np.testing.assert_array_equal(np.sign(jumps), 1 - times)
    changes = 0 if zone == "Asia/Kathmandu" else 2 if zone == "Australia/Lord_Howe" else 4
    assert (jumps > 0).sum() == (jumps < 0).sum() == changes
    # The reading taken in place of a skipped one.
    for i in np.flatnonzero(jumps > 0):
        taken = dt.datetime.fromtimestamp(int(instants_s(zone, seconds[[i]])[0]), ZoneInfo(zone))
        assert (taken.replace(tzinfo=None) - readings[i]).total_seconds() == jumps[i]


def test_half_an_hour_skipped_is_told_as_such():
    dates = np.array(["2027-10-02", "2027-10-03"], "datetime64[D]")
    assert odd_readings("Australia/Lord_Howe", dates, dt.time(2, 15)) == [
        "02:15 does not exist on 2027-10-03; the reading 30 minutes later is taken"
    ]


@pytest.mark.parametrize(
    ("zone", "date", "time", "standard", "hour", "grid"),
    [
        ("Europe/Rome", "2027-01-10", "23:50", "2027-01-11", 0, "2027-01-10T23"),
        ("Europe/Rome", "2027-07-10", "23:50", "2027-07-10", 23, "2027-07-10T22"),
        ("Europe/Rome", "2027-07-10", "00:20", "2027-07-09", 23, "2027-07-09T22"),
        ("Europe/Rome", "2027-07-10", "12:30", "2027-07-10", 12, "2027-07-10T11"),
        ("Europe/Rome", "2027-07-10", "12:29", "2027-07-10", 11, "2027-07-10T10"),
        # Daylight saving of half an hour: 12:00 is 11:30 standard, and half past goes up.
        ("Australia/Lord_Howe", "2027-01-10", "12:00", "2027-01-10", 12, "2027-01-10T01"),
        ("Australia/Lord_Howe", "2027-01-10", "11:59", "2027-01-10", 11, "2027-01-10T00"),
        ("Asia/Kathmandu", "2027-01-10", "12:00", "2027-01-10", 12, "2027-01-10T06"),
        ("Asia/Kathmandu", "2027-01-10", "12:29", "2027-01-10", 12, "2027-01-10T06"),
    ],
)
def test_clock_time_falls_into_the_nearest_standard_hour(zone, date, time, standard, hour, grid):
    dates = np.array([date], "datetime64[D]")
    when = standard_hours(zone, dates, dt.time.fromisoformat(time))
    assert (str(when.date[0]), int(when.hour[0])) == (standard, hour)
    assert str(when.grid.astype("datetime64[h]")[0]) == grid
    clock = local_clock(replace(FIELD, timezone=zone), when.grid, 2027, 2027)
    assert int(clock.hour[0]) == hour  # the hour that the study's own clock puts there


def test_shifted_reading_crosses_midnight():
    when = standard_hours(
        "Asia/Kathmandu", np.array(["2027-01-10"], "datetime64[D]"), dt.time(20), 6
    )
    assert (str(when.date[0]), int(when.hour[0])) == ("2027-01-11", 2)


def test_hours_are_told_as_ranges():
    assert hours_text([8, 6, 7, 18, 10, 9]) == "06-10 18"
    assert hours_text([0, 23]) == "00 23"
